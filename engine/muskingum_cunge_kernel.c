/* SPDX-License-Identifier: MIT */
/*
 * Members side by side in vectors, a block of them walked down all cells of a step. Compiled once per level of
 * vectors.
 *
 * A member's arithmetic is the same in a full block, in any other and alone, and the same at every level. A member's
 * next cell waits some 40 cycles for the one above, so a block holds enough members to fill that time, and
 *   - its look-ups run ahead: the potential and the row of a vector are found a quarter of the block before their
 *     turn, so that few instructions queue for their operands;
 *   - row offsets reach scalars through memory, and rows are loaded whole and transposed as integers: on common x86
 *     processors one port alone moves doubles across a register, two move integers.
 * S' is taken as (S - dt O') + dt I', without d: however large d is, its rounding stays out of the balance.
 * The potential is held inside the table before its bits are read (engine/bit_index.h): no row outside is read,
 * whatever the input.
 */
#include "engine/muskingum_cunge_kernel.h"

#include "engine/vector_lanes.h"

#if defined(FW_KERNEL_AVX2)
#define KERNEL muskingum_cunge_kernel_avx2
#else
#define KERNEL muskingum_cunge_kernel_baseline
#endif

#define ALWAYS_INLINE inline __attribute__((always_inline)) /* counts are constants in a full block */

enum {
    FULL_MEMBERS = 32,
    FULL_VECTORS = FULL_MEMBERS / VECTOR_LANES,
    FULL_AHEAD = FULL_VECTORS / 4,
    MOST_MEMBERS = FULL_MEMBERS + FULL_MEMBERS / 2, /* of a block that is not full: fewer than these */
    MOST_VECTORS = MOST_MEMBERS / VECTOR_LANES
};

_Static_assert(sizeof(struct muskingum_cunge_row) == 32, "a row's offset is its number shifted by five");
enum { ROW_SIZE_BITS = 5 };

struct lookup {
    vector_double lowest, highest;
    vector_bits whole_rows; /* clears what lies below a row's number */
    uintptr_t row_zero;     /* where the row of bits 0 would be: offsets are counted from there */
};

static inline struct lookup lookup_of(const struct muskingum_cunge_table *table)
{
    const struct bit_index *index = &table->by_potential;
    return (struct lookup){.lowest = vector_of(index->lowest),
                           .highest = vector_of(index->highest),
                           .whole_rows = ~(vector_bits){0} << ROW_SIZE_BITS,
                           .row_zero = (uintptr_t)table->rows - (uintptr_t)(index->base << ROW_SIZE_BITS)};
}

static inline void find_rows(const struct lookup *lookup, vector_double potential, uint64_t offset_out[])
{
    vector_double held = vector_smaller(vector_larger(potential, lookup->lowest), lookup->highest);
    vector_bits offset = ((vector_bits)held >> (BIT_INDEX_SHIFT - ROW_SIZE_BITS)) & lookup->whole_rows;
    memcpy(offset_out, &offset, sizeof offset);
}

struct coefficients { /* of as many members as a vector has lanes */
    vector_double outflow_0, outflow_1, implicit_0, implicit_1;
};

static inline vector_bits row_part(uintptr_t row_zero, uint64_t offset, size_t from)
{
    vector_bits part;
    /* row_zero is no address of the table: a sum of numbers, then, that points into it only when complete */
    const char *row = (const char *)(row_zero + (uintptr_t)offset); /* NOLINT(performance-no-int-to-ptr) */
    memcpy(&part, row + from, sizeof part);
    return part;
}

static inline struct coefficients read_rows(const struct lookup *lookup, const uint64_t offset[])
{
#if defined(__AVX2__)
    vector_bits row_a = row_part(lookup->row_zero, offset[0], 0);
    vector_bits row_b = row_part(lookup->row_zero, offset[1], 0);
    vector_bits row_c = row_part(lookup->row_zero, offset[2], 0);
    vector_bits row_d = row_part(lookup->row_zero, offset[3], 0);
    vector_bits outflow_ac = __builtin_shufflevector(row_a, row_c, 0, 1, 4, 5);
    vector_bits outflow_bd = __builtin_shufflevector(row_b, row_d, 0, 1, 4, 5);
    vector_bits implicit_ac = __builtin_shufflevector(row_a, row_c, 2, 3, 6, 7);
    vector_bits implicit_bd = __builtin_shufflevector(row_b, row_d, 2, 3, 6, 7);
    return (struct coefficients){(vector_double)__builtin_shufflevector(outflow_ac, outflow_bd, 0, 4, 2, 6),
                                 (vector_double)__builtin_shufflevector(outflow_ac, outflow_bd, 1, 5, 3, 7),
                                 (vector_double)__builtin_shufflevector(implicit_ac, implicit_bd, 0, 4, 2, 6),
                                 (vector_double)__builtin_shufflevector(implicit_ac, implicit_bd, 1, 5, 3, 7)};
#else
    vector_bits outflow_a = row_part(lookup->row_zero, offset[0], 0);
    vector_bits outflow_b = row_part(lookup->row_zero, offset[1], 0);
    vector_bits implicit_a = row_part(lookup->row_zero, offset[0], 16);
    vector_bits implicit_b = row_part(lookup->row_zero, offset[1], 16);
    return (struct coefficients){(vector_double)__builtin_shufflevector(outflow_a, outflow_b, 0, 2),
                                 (vector_double)__builtin_shufflevector(outflow_a, outflow_b, 1, 3),
                                 (vector_double)__builtin_shufflevector(implicit_a, implicit_b, 0, 2),
                                 (vector_double)__builtin_shufflevector(implicit_a, implicit_b, 1, 3)};
#endif
}

/* The potential of a vector of members in their next cell, and where their rows are. */
static ALWAYS_INLINE void find(const struct lookup *lookup, const double *state_m3, vector_double implicit,
                               vector_double *potential_out, uint64_t offset_out[])
{
    *potential_out = vector_load(state_m3) + implicit;
    find_rows(lookup, *potential_out, offset_out);
}

static ALWAYS_INLINE void pass(const struct lookup *lookup, vector_double potential, const uint64_t offset[],
                               double *state_m3, vector_double *passing, vector_double *implicit)
{
    struct coefficients row = read_rows(lookup, offset);
    vector_double out = row.outflow_0 + row.outflow_1 * potential;
    vector_store(state_m3, (vector_load(state_m3) - out) + *passing);
    *passing = out;
    *implicit = row.implicit_0 + row.implicit_1 * potential;
}

/*
 * A block walked down its cells, with the look-ups of each vector made `ahead` of its turn. In a block of constant
 * size the compiler keeps what it can of these arrays in registers.
 */
#define BLOCK_ARRAYS(most)                                                                                           \
    vector_double passing[most], implicit[most], potential[most];                                                    \
    uint64_t offset[most][VECTOR_LANES] __attribute__((aligned(32)))
/* the empty assembly keeps offsets in memory: read back from there they cost a load each, from a register more */
#define FIND(v, cell_m3)                                                                                             \
    do {                                                                                                             \
        find(lookup, (cell_m3) + (v)*VECTOR_LANES, implicit[v], &potential[v], offset[v]);                           \
        __asm__("" : "+m"(offset[v]));                                                                               \
    } while (0)
#define PASS(v) pass(lookup, potential[v], offset[v], state_m3 + (v)*VECTOR_LANES, &passing[v], &implicit[v])
#define BEGIN(vectors, ahead)                                                                                        \
    do {                                                                                                             \
        for (size_t v = 0; v < (vectors); v++) {                                                                     \
            passing[v] = vector_load(passing_m3 + v * VECTOR_LANES);                                                 \
            implicit[v] = vector_load(implicit_m3 + v * VECTOR_LANES);                                               \
        }                                                                                                            \
        for (size_t v = 0; v + (ahead) < (vectors); v++)                                                             \
            FIND(v, state_m3);                                                                                       \
    } while (0)
#define END(vectors)                                                                                                 \
    do {                                                                                                             \
        for (size_t v = 0; v < (vectors); v++) {                                                                     \
            vector_store(passing_m3 + v * VECTOR_LANES, passing[v]);                                                 \
            vector_store(implicit_m3 + v * VECTOR_LANES, implicit[v]);                                               \
        }                                                                                                            \
    } while (0)

static void step_full_block(const struct lookup *lookup, size_t cell_count, size_t member_count,
                            double *restrict state_m3, double *restrict passing_m3, double *restrict implicit_m3)
{
    BLOCK_ARRAYS(FULL_VECTORS);
    BEGIN(FULL_VECTORS, FULL_AHEAD);
    for (size_t cell = 0; cell < cell_count; cell++) {
        /* after the last cell what is found ahead is not used */
        double *next_m3 = cell + 1 < cell_count ? state_m3 + member_count : state_m3;
#pragma GCC unroll 16
        for (size_t v = 0; v < FULL_VECTORS; v++) {
            if (v < FULL_AHEAD)
                FIND(v + FULL_VECTORS - FULL_AHEAD, state_m3);
            PASS(v);
            if (v >= FULL_AHEAD)
                FIND(v - FULL_AHEAD, next_m3);
        }
        state_m3 = next_m3;
    }
    END(FULL_VECTORS);
}

static void pass_alone(const struct muskingum_cunge_table *table, double *state_m3, double *passing_m3,
                       double *implicit_m3)
{
    double potential = *state_m3 + *implicit_m3;
    const struct muskingum_cunge_row *row = table->rows + bit_index_row(&table->by_potential, potential);
    double passing = row->outflow_0 + row->outflow_1 * potential;
    *state_m3 = (*state_m3 - passing) + *passing_m3;
    *passing_m3 = passing;
    *implicit_m3 = row->implicit_0 + row->implicit_1 * potential;
}

/* Any number of members below MOST_MEMBERS: whole vectors, and those that do not fill one each alone. */
static void step_block(const struct muskingum_cunge_table *table, const struct lookup *lookup, size_t cell_count,
                       size_t member_count, size_t block_count, double *restrict state_m3,
                       double *restrict passing_m3, double *restrict implicit_m3)
{
    BLOCK_ARRAYS(MOST_VECTORS);
    size_t vectors = block_count / VECTOR_LANES, ahead = vectors / 4;
    BEGIN(vectors, ahead);
    for (size_t cell = 0; cell < cell_count; cell++) {
        double *next_m3 = cell + 1 < cell_count ? state_m3 + member_count : state_m3;
        for (size_t v = 0; v < ahead; v++) {
            FIND(v + vectors - ahead, state_m3);
            PASS(v);
        }
        for (size_t v = ahead; v < vectors; v++) {
            PASS(v);
            FIND(v - ahead, next_m3);
        }
        for (size_t member = vectors * VECTOR_LANES; member < block_count; member++)
            pass_alone(table, state_m3 + member, passing_m3 + member, implicit_m3 + member);
        state_m3 = next_m3;
    }
    END(vectors);
}

void KERNEL(const struct muskingum_cunge_table *table, size_t cell_count, size_t member_count,
            double state_m3[restrict], double passing_m3[restrict], double implicit_m3[restrict])
{
    const struct lookup lookup = lookup_of(table);
    size_t member = 0;
    if (cell_count == 0)
        return;
    /* a remainder too small to keep the processor busy joins the block before it */
    while (member_count - member >= MOST_MEMBERS || member_count - member == FULL_MEMBERS) {
        step_full_block(&lookup, cell_count, member_count, state_m3 + member, passing_m3 + member,
                        implicit_m3 + member);
        member += FULL_MEMBERS;
    }
    if (member < member_count)
        step_block(table, &lookup, cell_count, member_count, member_count - member, state_m3 + member,
                   passing_m3 + member, implicit_m3 + member);
}
