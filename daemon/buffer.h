/* SPDX-License-Identifier: MIT */
/* Growing arrays and growing text. Running out of memory is a status, never an abort. */
#ifndef FOREWATER_DAEMON_BUFFER_H
#define FOREWATER_DAEMON_BUFFER_H

#include <stdbool.h>
#include <stddef.h>

#include "engine/status.h"

/*
 * Makes room for one more item in a heap array. *items is the array (NULL at first), *capacity its size in items.
 *     if (buffer_grow((void **)&list, &capacity, count, sizeof *list) != FW_OK) ...
 * FW_NO_MEMORY: nothing changed.
 */
FW_MUST_CHECK enum fw_status buffer_grow(void *items, size_t *capacity, size_t count, size_t item_size);

/* Text that grows. Born empty as {0}; always a C string once something was added. The owner clears it. */
struct text {
    char *bytes;
    size_t length;
    size_t capacity;
    bool is_short; /* memory ran out at some point: what is there is not whole */
};

/* Never fails loudly: a writer checks `is_short` (or text_status) once at the end. */
__attribute__((format(printf, 2, 3))) void text_add(struct text *text, const char *format, ...);
void text_add_bytes(struct text *text, const char *bytes, size_t length);
enum fw_status text_status(const struct text *text); /* FW_OK or FW_NO_MEMORY */
const char *text_string(const struct text *text);    /* "" when empty */
void text_clear(struct text *text);

#endif
