/* SPDX-License-Identifier: MIT */
#include "daemon/buffer.h"

#include <stdarg.h>
#include <stdint.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

enum fw_status buffer_grow(void *items, size_t *capacity, size_t count, size_t item_size)
{
    if (count < *capacity)
        return FW_OK;
    size_t wanted = *capacity < 8 ? 8 : *capacity * 2;
    if (wanted > SIZE_MAX / item_size)
        return FW_NO_MEMORY;
    void *old;
    memcpy(&old, items, sizeof old);
    void *grown = realloc(old, wanted * item_size);
    if (grown == NULL)
        return FW_NO_MEMORY;
    memcpy(items, &grown, sizeof grown);
    *capacity = wanted;
    return FW_OK; /* cppcheck-suppress memleak ; the caller's array holds it now */
}

static bool text_reserve(struct text *text, size_t more)
{
    size_t needed = text->length + more + 1;
    if (text->is_short)
        return false;
    if (needed > text->capacity) {
        size_t wanted = needed < 256 ? 256 : needed + needed / 2;
        char *grown = realloc(text->bytes, wanted);
        if (grown == NULL) {
            text->is_short = true;
            return false;
        }
        text->bytes = grown;
        text->capacity = wanted;
    }
    return true;
}

void text_add_bytes(struct text *text, const char *bytes, size_t length)
{
    if (!text_reserve(text, length))
        return;
    memcpy(text->bytes + text->length, bytes, length);
    text->length += length;
    text->bytes[text->length] = '\0';
}

void text_add(struct text *text, const char *format, ...)
{
    va_list arguments;
    va_list again;
    va_start(arguments, format);
    va_copy(again, arguments);
    int length = vsnprintf(NULL, 0, format, arguments);
    va_end(arguments);
    if (length >= 0 && text_reserve(text, (size_t)length)) {
        vsnprintf(text->bytes + text->length, (size_t)length + 1, format, again);
        text->length += (size_t)length;
    }
    va_end(again);
}

enum fw_status text_status(const struct text *text)
{
    return text->is_short ? FW_NO_MEMORY : FW_OK;
}

const char *text_string(const struct text *text)
{
    return text->bytes != NULL ? text->bytes : "";
}

void text_clear(struct text *text)
{
    free(text->bytes);
    *text = (struct text){0};
}
