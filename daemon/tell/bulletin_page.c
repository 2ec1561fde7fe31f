/* SPDX-License-Identifier: MIT */
#include "daemon/tell/bulletin_page.h"

#include <string.h>

static bool is_character_start(char byte)
{
    return ((unsigned char)byte & 0xc0) != 0x80;
}

/* Bytes of the longest piece of `text` that fits into `width` characters, broken at a blank where there is one. */
static size_t piece_length(const char *text, size_t width)
{
    size_t characters = 0;
    size_t length = 0;
    size_t last_blank = 0;
    for (; text[length] != '\0'; length++) {
        if (is_character_start(text[length]) && ++characters > width)
            return last_blank > 0 ? last_blank : length;
        if (text[length] == ' ')
            last_blank = length;
    }
    return length;
}

void page_add(struct page *page, const char *paragraph)
{
    static const char indent[] = "  ";
    bool is_first = true;
    paragraph += strspn(paragraph, " ");
    while (*paragraph != '\0') {
        size_t length = piece_length(paragraph, is_first ? PAGE_WIDTH : PAGE_WIDTH - (sizeof indent - 1));
        size_t printed = length;
        while (printed > 0 && paragraph[printed - 1] == ' ')
            printed--;
        if (!is_first)
            text_add(&page->text, "%s", indent);
        text_add_bytes(&page->text, paragraph, printed);
        text_add_bytes(&page->text, "\n", 1);
        page->line_count++;
        paragraph += length;
        paragraph += strspn(paragraph, " ");
        is_first = false;
    }
}
