/* SPDX-License-Identifier: MIT */
/*
 * What the fuzz targets share: numbers drawn from bytes, and a way to fail that says why. A target defines
 * LLVMFuzzerTestOneInput; libFuzzer drives it in the preset `fuzz`, tests/fuzz/replay.c runs its corpus in every other.
 * Bytes that have run out read as 0.
 */
#ifndef FOREWATER_TESTS_FUZZ_FUZZ_H
#define FOREWATER_TESTS_FUZZ_FUZZ_H

#include <math.h>
#include <stdarg.h>
#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

int LLVMFuzzerTestOneInput(const uint8_t *bytes, size_t size);

__attribute__((format(printf, 1, 2), noreturn)) static inline void fuzz_fail(const char *format, ...)
{
    va_list arguments;
    va_start(arguments, format);
    fputs("fuzz: ", stderr);
    vfprintf(stderr, format, arguments);
    fputc('\n', stderr);
    va_end(arguments);
    abort();
}

static inline void *fuzz_room(size_t count, size_t size)
{
    void *room = calloc(count > 0 ? count : 1, size);
    if (room == NULL)
        fuzz_fail("no memory for %zu x %zu", count, size);
    return room;
}

struct fuzz_bytes {
    const uint8_t *next;
    size_t left;
};

static inline unsigned fuzz_byte(struct fuzz_bytes *bytes)
{
    if (bytes->left == 0)
        return 0;
    bytes->left--;
    return *bytes->next++;
}

static inline size_t fuzz_pick(struct fuzz_bytes *bytes, size_t count)
{
    return fuzz_byte(bytes) % count;
}

/* One in `count`, and never once the bytes have run out. */
static inline bool fuzz_chance(struct fuzz_bytes *bytes, unsigned count)
{
    return fuzz_byte(bytes) % count == count - 1;
}

static inline double fuzz_share(struct fuzz_bytes *bytes)
{
    unsigned high = fuzz_byte(bytes);
    return (double)(high << 8 | fuzz_byte(bytes)) / 65535.0;
}

static inline double fuzz_number(struct fuzz_bytes *bytes, double low, double high)
{
    return low + (high - low) * fuzz_share(bytes);
}

static inline double fuzz_log(struct fuzz_bytes *bytes, double low, double high)
{
    return low * pow(high / low, fuzz_share(bytes));
}

/* What nobody would write, or anything whatever. */
static inline double fuzz_odd(struct fuzz_bytes *bytes)
{
    static const double odd[] = {
        0.0,   -0.0,   -1.0,   1.0,  (double)NAN, (double)INFINITY, -(double)INFINITY, 5e-324, 1e-9,
        1e308, -1e308, 1e-300, 1e18, -1e-3,       4294967296.0};
    size_t which = fuzz_pick(bytes, 2 * sizeof odd / sizeof *odd);
    if (which < sizeof odd / sizeof *odd)
        return odd[which];
    uint64_t bits = 0;
    for (int i = 0; i < 8; i++)
        bits = bits << 8 | fuzz_byte(bytes);
    double value;
    memcpy(&value, &bits, sizeof value);
    return value;
}

/* Within bounds, or (where that is wanted at all) one time in 16 odd. */
static inline double fuzz_value(struct fuzz_bytes *bytes, bool may_be_odd, double low, double high)
{
    return may_be_odd && fuzz_chance(bytes, 16) ? fuzz_odd(bytes) : fuzz_log(bytes, low, high);
}

#endif
