/* SPDX-License-Identifier: MIT */
/*
 * An allocator that fails when told to, and counts what is held. Rooms are tested with it by taking their sources into the test program between
 * `#define calloc calloc_or_fail`, `#define free free_and_count` and the two #undef: so nothing of the kind is needed
 * in the engine itself.
 */
#ifndef FOREWATER_TESTS_ENGINE_FAILING_MEMORY_H
#define FOREWATER_TESTS_ENGINE_FAILING_MEMORY_H

#include <stdlib.h>

static size_t allocations_until_failure;
static size_t blocks_held;

static void *calloc_or_fail(size_t count, size_t size)
{
    if (allocations_until_failure == 0)
        return NULL;
    allocations_until_failure--;
    void *block = calloc(count, size);
    blocks_held += block != NULL;
    return block;
}

static void free_and_count(void *block)
{
    blocks_held -= block != NULL;
    free(block);
}

#endif
