/* SPDX-License-Identifier: MIT */
/*
 * Members side by side in vectors, a block of them walked down all cells of a step. Compiled once per level of
 * vectors.
 *
 * A member's arithmetic is the same in a full block, in any other and alone, and the same at every level. A member's
 * next cell waits some 40 cycles for the one above, so a block holds enough members to fill that time, and
 *   - its look-ups run ahead: the potential and the row of a vector are found a quarter of the block before their
 *     turn, so that few instructions queue for their operands;
 *   - rows are loaded whole and transposed (engine/vector_rows.h).
 * S' is taken as (S - dt O') + dt I', without d: however large d is, its rounding stays out of the balance.
 * The potential is held inside the table before its bits are read (engine/bit_index.h): no row outside is read,
 * whatever the input.
 */
#include "engine/muskingum_cunge_kernel.h"

#include "engine/vector_rows.h"

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

_Static_assert(sizeof(struct muskingum_cunge_row) == VECTOR_ROW_SIZE, "outflow and implicit are the two lines");

/* The potential of a vector of members in their next cell, and where their rows are. */
static ALWAYS_INLINE void find(const struct vector_lookup *lookup, const double *state_m3, vector_double implicit,
                               vector_double *potential_out, uint64_t offset_out[])
{
    *potential_out = vector_load(state_m3) + implicit;
    vector_find_rows(lookup, *potential_out, offset_out);
}

static ALWAYS_INLINE void pass(const struct vector_lookup *lookup, vector_double potential, const uint64_t offset[],
                               double *state_m3, vector_double *passing, vector_double *implicit)
{
    struct vector_row row = vector_read_rows(lookup, offset);
    vector_double out = row.first_0 + row.first_1 * potential;
    vector_store(state_m3, (vector_load(state_m3) - out) + *passing);
    *passing = out;
    *implicit = row.second_0 + row.second_1 * potential;
}

/*
 * A block walked down its cells, with the look-ups of each vector made `ahead` of its turn. In a block of constant
 * size the compiler keeps what it can of these arrays in registers.
 */
#define BLOCK_ARRAYS(most)                                                                                           \
    vector_double passing[most], implicit[most], potential[most];                                                    \
    uint64_t offset[most][VECTOR_LANES] __attribute__((aligned(64)))
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

static void step_full_block(const struct vector_lookup *lookup, size_t cell_count, size_t member_count,
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
static void step_block(const struct muskingum_cunge_table *table, const struct vector_lookup *lookup,
                       size_t cell_count, size_t member_count, size_t block_count, double *restrict state_m3,
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
    const struct vector_lookup lookup = vector_lookup_of(&table->by_potential, table->rows);
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
