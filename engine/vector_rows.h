/* SPDX-License-Identifier: MIT */
/*
 * Rows of four doubles, two straight lines of one argument, read for a vector of arguments by their bits
 * (engine/bit_index.h). For the sources of kernels alone, as engine/vector_lanes.h.
 *
 * Row offsets reach scalars through memory, and rows are loaded whole and transposed as integers: on common x86
 * processors one port alone moves doubles across a register, two move integers. The argument is held inside the table
 * before its bits are read: no row outside is read, whatever the input.
 */
#ifndef FOREWATER_ENGINE_VECTOR_ROWS_H
#define FOREWATER_ENGINE_VECTOR_ROWS_H

#include "engine/bit_index.h"
#include "engine/vector_lanes.h"

enum { VECTOR_ROW_SIZE = 32, VECTOR_ROW_SIZE_BITS = 5 };

struct vector_lookup {
    vector_double lowest, highest;
    vector_bits whole_rows; /* clears what lies below a row's number */
    uintptr_t row_zero;     /* where the row of bits 0 would be: offsets are counted from there */
};

static inline struct vector_lookup vector_lookup_of(const struct bit_index *index, const void *rows)
{
    return (struct vector_lookup){.lowest = vector_of(index->lowest),
                                  .highest = vector_of(index->highest),
                                  .whole_rows = ~(vector_bits){0} << VECTOR_ROW_SIZE_BITS,
                                  .row_zero = (uintptr_t)rows - (uintptr_t)(index->base << VECTOR_ROW_SIZE_BITS)};
}

#if defined(FW_KERNEL_AVX512)
typedef uint64_t vector_row_part __attribute__((vector_size(32)));
#else
typedef vector_bits vector_row_part;
#endif

static inline void vector_find_rows(const struct vector_lookup *lookup, vector_double argument, uint64_t offset_out[])
{
    vector_double held = vector_smaller(vector_larger(argument, lookup->lowest), lookup->highest);
    vector_bits offset = ((vector_bits)held >> (BIT_INDEX_SHIFT - VECTOR_ROW_SIZE_BITS)) & lookup->whole_rows;
    memcpy(offset_out, &offset, sizeof offset);
#if !defined(__AVX2__)
    /* the empty assembly keeps offsets in memory: in narrow vectors reading them back is cheaper than taking them out */
    __asm__("" : "+m"(*(uint64_t(*)[VECTOR_LANES])offset_out));
#endif
}

struct vector_row { /* of as many arguments as a vector has lanes */
    vector_double first_0, first_1, second_0, second_1;
};

static inline vector_row_part vector_row_part_at(uintptr_t row_zero, uint64_t offset, size_t from)
{
    vector_row_part part;
    /* row_zero is no address of the table: a sum of numbers, then, that points into it only when complete */
    const char *row = (const char *)(row_zero + (uintptr_t)offset); /* NOLINT(performance-no-int-to-ptr) */
    memcpy(&part, row + from, sizeof part);
    return part;
}

static inline struct vector_row vector_read_rows(const struct vector_lookup *lookup, const uint64_t offset[])
{
#define ROW(i) vector_row_part_at(lookup->row_zero, offset[i], 0)
#if defined(FW_KERNEL_AVX512)
    vector_bits row_ac = __builtin_shufflevector(ROW(0), ROW(2), 0, 1, 2, 3, 4, 5, 6, 7);
    vector_bits row_bd = __builtin_shufflevector(ROW(1), ROW(3), 0, 1, 2, 3, 4, 5, 6, 7);
    vector_bits row_eg = __builtin_shufflevector(ROW(4), ROW(6), 0, 1, 2, 3, 4, 5, 6, 7);
    vector_bits row_fh = __builtin_shufflevector(ROW(5), ROW(7), 0, 1, 2, 3, 4, 5, 6, 7);
    vector_bits first_aceg = __builtin_shufflevector(row_ac, row_eg, 0, 1, 4, 5, 8, 9, 12, 13);
    vector_bits first_bdfh = __builtin_shufflevector(row_bd, row_fh, 0, 1, 4, 5, 8, 9, 12, 13);
    vector_bits second_aceg = __builtin_shufflevector(row_ac, row_eg, 2, 3, 6, 7, 10, 11, 14, 15);
    vector_bits second_bdfh = __builtin_shufflevector(row_bd, row_fh, 2, 3, 6, 7, 10, 11, 14, 15);
    return (struct vector_row){
        (vector_double)__builtin_shufflevector(first_aceg, first_bdfh, 0, 8, 2, 10, 4, 12, 6, 14),
        (vector_double)__builtin_shufflevector(first_aceg, first_bdfh, 1, 9, 3, 11, 5, 13, 7, 15),
        (vector_double)__builtin_shufflevector(second_aceg, second_bdfh, 0, 8, 2, 10, 4, 12, 6, 14),
        (vector_double)__builtin_shufflevector(second_aceg, second_bdfh, 1, 9, 3, 11, 5, 13, 7, 15)};
#elif defined(__AVX2__)
    vector_bits row_a = ROW(0), row_b = ROW(1), row_c = ROW(2), row_d = ROW(3);
    vector_bits first_ac = __builtin_shufflevector(row_a, row_c, 0, 1, 4, 5);
    vector_bits first_bd = __builtin_shufflevector(row_b, row_d, 0, 1, 4, 5);
    vector_bits second_ac = __builtin_shufflevector(row_a, row_c, 2, 3, 6, 7);
    vector_bits second_bd = __builtin_shufflevector(row_b, row_d, 2, 3, 6, 7);
    return (struct vector_row){(vector_double)__builtin_shufflevector(first_ac, first_bd, 0, 4, 2, 6),
                               (vector_double)__builtin_shufflevector(first_ac, first_bd, 1, 5, 3, 7),
                               (vector_double)__builtin_shufflevector(second_ac, second_bd, 0, 4, 2, 6),
                               (vector_double)__builtin_shufflevector(second_ac, second_bd, 1, 5, 3, 7)};
#else
    vector_bits first_a = ROW(0), first_b = ROW(1);
    vector_bits second_a = vector_row_part_at(lookup->row_zero, offset[0], 16);
    vector_bits second_b = vector_row_part_at(lookup->row_zero, offset[1], 16);
    return (struct vector_row){(vector_double)__builtin_shufflevector(first_a, first_b, 0, 2),
                               (vector_double)__builtin_shufflevector(first_a, first_b, 1, 3),
                               (vector_double)__builtin_shufflevector(second_a, second_b, 0, 2),
                               (vector_double)__builtin_shufflevector(second_a, second_b, 1, 3)};
#endif
#undef ROW
}

#endif
