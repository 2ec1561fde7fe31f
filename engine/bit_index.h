/* SPDX-License-Identifier: MIT */
/*
 * Rows of a table found from the bits of a double: 64 equal segments to the octave, with no logarithm, search or
 * division.
 *
 * The exponent and the first six fraction bits of a positive double, read as an integer, count those segments in
 * order. Row 0 takes everything below the first segment (a line through the origin belongs there); the last row
 * takes everything above. Whatever the argument - negative, infinite, not a number - the row lies inside the table.
 */
#ifndef FOREWATER_ENGINE_BIT_INDEX_H
#define FOREWATER_ENGINE_BIT_INDEX_H

#include <stddef.h>
#include <stdint.h>
#include <string.h>

enum { BIT_INDEX_ROWS_PER_OCTAVE = 64, BIT_INDEX_SHIFT = 52 - 6 };

struct bit_index {
    double lowest; /* the argument is held between these two before its bits are read */
    double highest;
    uint64_t base;
    size_t row_count;
};

/* Rows from the segment that holds `first` to the one that holds `last`, and row 0 below. 0 < first < last, both
 * finite. */
void bit_index_init(struct bit_index *index, double first, double last);

/* Where a row begins; row 0 begins at 0. Row row_count begins where the table ends. */
double bit_index_row_start(const struct bit_index *index, size_t row);

static inline size_t bit_index_row(const struct bit_index *index, double argument)
{
    /* written so that not-a-number takes the first branch's other side, and so that each is one min or max
     * instruction */
    double held = argument > index->lowest ? argument : index->lowest;
    uint64_t bits;
    held = held < index->highest ? held : index->highest;
    memcpy(&bits, &held, sizeof bits);
    return (size_t)((bits >> BIT_INDEX_SHIFT) - index->base);
}

#endif
