/* SPDX-License-Identifier: MIT */
#include "daemon/settings/arena.h"

#include <stdarg.h>
#include <stdint.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

struct arena_block {
    struct arena_block *older;
    size_t size, used;
    max_align_t bytes[];
};

enum { ARENA_BLOCK_SIZE = 16384 };

static struct arena_block *block_with_room(struct arena *arena, size_t size)
{
    struct arena_block *block = arena->newest;
    if (block != NULL && block->size - block->used >= size)
        return block;
    size_t wanted = size > ARENA_BLOCK_SIZE ? size : ARENA_BLOCK_SIZE;
    if (wanted > SIZE_MAX - sizeof *block)
        return NULL;
    block = calloc(1, sizeof *block + wanted);
    if (block == NULL)
        return NULL;
    block->size = wanted;
    block->older = arena->newest;
    arena->newest = block;
    return block;
}

void *arena_take(struct arena *arena, size_t count, size_t item_size)
{
    struct arena_block *block = NULL;
    size_t size = 0;
    if (item_size == 0 || count <= (SIZE_MAX - sizeof(max_align_t)) / item_size) {
        size = count * item_size + (count * item_size == 0);
        size = (size + sizeof(max_align_t) - 1) / sizeof(max_align_t) * sizeof(max_align_t);
        block = block_with_room(arena, size);
    }
    if (block == NULL) {
        arena->is_short = true;
        return NULL;
    }
    void *taken = (char *)block->bytes + block->used;
    block->used += size;
    return taken;
}

char *arena_copy_text(struct arena *arena, const char *bytes, size_t length)
{
    char *copy = arena_take(arena, length + 1, 1);
    if (copy != NULL)
        memcpy(copy, bytes, length);
    return copy;
}

char *arena_print(struct arena *arena, const char *format, ...)
{
    va_list arguments;
    va_list again;
    va_start(arguments, format);
    va_copy(again, arguments);
    int length = vsnprintf(NULL, 0, format, arguments);
    va_end(arguments);
    char *text = length >= 0 ? arena_take(arena, (size_t)length + 1, 1) : NULL;
    if (text != NULL)
        vsnprintf(text, (size_t)length + 1, format, again);
    va_end(again);
    return text;
}

void arena_clear(struct arena *arena)
{
    while (arena->newest != NULL) {
        struct arena_block *older = arena->newest->older;
        free(arena->newest);
        arena->newest = older;
    }
    arena->is_short = false;
}
