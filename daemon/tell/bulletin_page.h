/* SPDX-License-Identifier: MIT */
/* Lines of at most 100 characters: what a radio operator reads and a small printer prints. */
#ifndef FOREWATER_DAEMON_TELL_BULLETIN_PAGE_H
#define FOREWATER_DAEMON_TELL_BULLETIN_PAGE_H

#include "daemon/buffer.h"

enum { PAGE_WIDTH = 100 };

struct page { /* born empty as {0}; the owner clears the text */
    struct text text;
    size_t line_count;
    bool is_short; /* memory ran out for a part of it */
};

/*
 * Adds a paragraph: broken at blanks, lines after the first set in; a word too long for a line is broken too. Nothing
 * for an empty text.
 */
void page_add(struct page *page, const char *paragraph);

#endif
