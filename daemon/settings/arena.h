/* SPDX-License-Identifier: MIT */
/* Memory that is taken piece by piece and given back all at once. */
#ifndef FOREWATER_DAEMON_SETTINGS_ARENA_H
#define FOREWATER_DAEMON_SETTINGS_ARENA_H

#include <stdbool.h>
#include <stddef.h>

struct arena { /* born empty as {0}; the owner clears it */
    struct arena_block *newest;
    bool is_short; /* memory ran out at some point */
};

/* count items of item_size, all zero bytes; never NULL for a count of 0. NULL: no memory, is_short is set. */
void *arena_take(struct arena *arena, size_t count, size_t item_size);
/* A copy of length bytes with a closing zero. NULL: no memory. */
char *arena_copy_text(struct arena *arena, const char *bytes, size_t length);
/* NULL: no memory. */
__attribute__((format(printf, 2, 3))) char *arena_print(struct arena *arena, const char *format, ...);
void arena_clear(struct arena *arena);

#endif
