/* SPDX-License-Identifier: MIT */
/*
 * The kernel of engine/muskingum_cunge_kernel.c at every level of vectors that this processor has: the same bits
 * everywhere, and no read outside a table.
 */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <math.h>
#include <stdbool.h>
#include <stdlib.h>
#include <string.h>

#include "engine/muskingum_cunge.h"
#include "tests/engine/try_sections.h"

enum { MOST_CELLS = 7, MOST_MEMBERS = 131 };

/* around the width of a vector, of a block, and of what joins a block */
static const size_t member_counts[] = {1,  2,  3,  4,  5,  6,  7,  8,  9,  11, 15, 16, 17, 23, 30, 31,
                                       32, 33, 34, 35, 36, 40, 47, 48, 49, 50, 63, 64, 65, 79, 80, 131};
enum { COUNT_COUNT = sizeof member_counts / sizeof *member_counts };

static struct muskingum_cunge_table table_of(const struct section *section, struct flow_curve *curve)
{
    const double slope = 0.0023;
    struct muskingum_cunge_table table;
    assert_int_equal(flow_curve_init(curve, section, 1e-3 / sqrt(slope), 6400.0 / sqrt(slope)), FW_OK);
    const struct muskingum_cunge_reach reach = {.curve = curve,
                                                .slope_m_per_m = slope,
                                                .roughness_factor = 1.07,
                                                .cell_m = 130.0,
                                                .time_step_s = 60.0,
                                                .smallest_discharge_m3s = 1e-3};
    assert_int_equal(muskingum_cunge_table_init(&table, &reach), FW_OK);
    return table;
}

/* The rows in memory of exactly their own size: the sanitized build then tells of any read beside them. */
static struct muskingum_cunge_table fenced(const struct muskingum_cunge_table *table)
{
    struct muskingum_cunge_table copy = *table;
    size_t size = table->by_potential.row_count * sizeof *table->rows;
    copy.rows = aligned_alloc(sizeof *table->rows, size);
    assert_non_null(copy.rows);
    memcpy(copy.rows, table->rows, size);
    return copy;
}

struct arrays { /* each in memory of exactly its own size */
    double *state, *passing, *implicit;
};

static struct arrays arrays_of(size_t cell_count, size_t member_count)
{
    struct arrays arrays = {malloc(cell_count * member_count * sizeof(double)), malloc(member_count * sizeof(double)),
                            malloc(member_count * sizeof(double))};
    assert_true(arrays.state != NULL && arrays.passing != NULL && arrays.implicit != NULL);
    return arrays;
}

static void arrays_clear(struct arrays *arrays)
{
    free(arrays->state);
    free(arrays->passing);
    free(arrays->implicit);
}

static uint64_t next_bits(uint64_t *seed)
{
    *seed ^= *seed << 13;
    *seed ^= *seed >> 7;
    *seed ^= *seed << 17;
    return *seed;
}

/* Bit for bit; which not-a-number comes out of two is the compiler's choice of operand order. */
static bool is_same(double a, double b)
{
    return memcmp(&a, &b, sizeof a) == 0 || (isnan(a) && isnan(b));
}

/* Many members at once must give each what it gets alone, in plain scalar code. */
static void assert_as_alone(struct muskingum_cunge_table *table, size_t cell_count, size_t member_count,
                            const struct arrays *before)
{
    struct arrays after = arrays_of(cell_count, member_count);
    for (int level = 0; level < VECTOR_LEVEL_COUNT; level++) {
        if (!vector_level_is_present((enum vector_level)level))
            continue;
        memcpy(after.state, before->state, cell_count * member_count * sizeof(double));
        memcpy(after.passing, before->passing, member_count * sizeof(double));
        memcpy(after.implicit, before->implicit, member_count * sizeof(double));
        table->vectors = (enum vector_level)level;
        muskingum_cunge_step(table, cell_count, member_count, after.state, after.passing, after.implicit);
        table->vectors = VECTOR_BASELINE;
        for (size_t member = 0; member < member_count; member++) {
            double cells[MOST_CELLS], passing = before->passing[member], implicit = before->implicit[member];
            bool is_equal = true;
            for (size_t cell = 0; cell < cell_count; cell++)
                cells[cell] = before->state[cell * member_count + member];
            muskingum_cunge_step(table, cell_count, 1, cells, &passing, &implicit);
            for (size_t cell = 0; cell < cell_count; cell++)
                is_equal = is_equal && is_same(cells[cell], after.state[cell * member_count + member]);
            if (!is_equal || !is_same(passing, after.passing[member]) || !is_same(implicit, after.implicit[member]))
                fail_msg("%s, member %zu of %zu, %zu cells: not what it gets alone",
                         vector_level_name((enum vector_level)level), member, member_count, cell_count);
        }
    }
    arrays_clear(&after);
}

static void a_flood_gives_the_same_bits_in_any_company_at_every_level(void **state)
{
    (void)state;
    uint64_t seed = 0x5deece66d1ce4e5bu;
    for (size_t s = 0; s < TRY_SECTION_COUNT; s++) {
        struct flow_curve curve;
        struct muskingum_cunge_table table = table_of(try_sections[s].section, &curve);
        for (size_t i = 0; i < COUNT_COUNT; i++)
            for (size_t cell_count = 1; cell_count <= MOST_CELLS; cell_count += 2) {
                size_t members = member_counts[i];
                struct arrays now = arrays_of(cell_count, members);
                for (size_t k = 0; k < cell_count * members; k++)
                    now.state[k] = 0.0; /* dry */
                for (int step = 0; step < 20; step++) {
                    for (size_t m = 0; m < members; m++) {
                        double rise = (double)(next_bits(&seed) >> 11) * 0x1p-53;
                        now.passing[m] = rise < 0.3 ? 0.0 : 60.0 * 170.0 * rise * (double)step / 20.0;
                        now.implicit[m] = muskingum_cunge_implicit_m3(&table, now.passing[m]);
                    }
                    assert_as_alone(&table, cell_count, members, &now);
                    muskingum_cunge_step(&table, cell_count, members, now.state, now.passing, now.implicit);
                }
                arrays_clear(&now);
            }
        muskingum_cunge_table_clear(&table);
        flow_curve_clear(&curve);
    }
}

static void any_bits_are_survived_in_any_company_at_every_level(void **state)
{
    (void)state;
    static const double nasty[] = {0.0, -0.0, 5e-324, -1.0, 1e308, -1e308, 1e-308, 1.0};
    uint64_t seed = 0x2545f4914f6cdd1du;
    struct flow_curve curve;
    struct muskingum_cunge_table whole = table_of(&try_survey, &curve), table = fenced(&whole);
    for (int round = 0; round < 60; round++)
        for (size_t i = 0; i < COUNT_COUNT; i++) {
            size_t members = member_counts[i], cells = 1 + (size_t)round % MOST_CELLS;
            struct arrays hostile = arrays_of(cells, members);
            double *const values[] = {hostile.state, hostile.passing, hostile.implicit};
            for (size_t v = 0; v < 3; v++)
                for (size_t k = 0; k < (v == 0 ? cells * members : members); k++) {
                    uint64_t bits = next_bits(&seed);
                    memcpy(&values[v][k], &bits, sizeof bits);
                    if (bits % 5 == 0)
                        values[v][k] = nasty[bits / 5 % 8];
                    if (bits % 31 == 0)
                        values[v][k] = (double)NAN;
                }
            assert_as_alone(&table, cells, members, &hostile);
            arrays_clear(&hostile);
        }
    free(table.rows);
    muskingum_cunge_table_clear(&whole);
    flow_curve_clear(&curve);
}

/*
 * A row is chosen by the highest 18 bits of the potential. All 2^18 patterns, each with the rest all clear and all
 * set, against tables whose rows give their own number as flow: every potential there is reads a row of the table, and
 * the one that engine/bit_index.h says.
 */
static void every_potential_reads_its_own_row_of_the_table(void **state)
{
    (void)state;
    enum { AT_ONCE = 64 };
    struct flow_curve curve;
    struct muskingum_cunge_table whole = table_of(&try_plain, &curve), table = fenced(&whole);
    for (size_t row = 0; row < table.by_potential.row_count; row++)
        table.rows[row] = (struct muskingum_cunge_row){.outflow_0 = (double)row, .implicit_0 = -(double)row};
    for (int level = 0; level < VECTOR_LEVEL_COUNT; level++) {
        size_t above = 0, below = 0;
        if (!vector_level_is_present((enum vector_level)level))
            continue;
        table.vectors = (enum vector_level)level;
        for (uint64_t pattern = 0; pattern < (uint64_t)1 << 18; pattern += AT_ONCE / 2) {
            double potential[AT_ONCE], cells[AT_ONCE], passing[AT_ONCE], implicit[AT_ONCE];
            for (size_t m = 0; m < AT_ONCE; m++) {
                uint64_t rest = m % 2 == 0 ? 0 : ((uint64_t)1 << BIT_INDEX_SHIFT) - 1;
                uint64_t bits = (pattern + m / 2) << BIT_INDEX_SHIFT | rest;
                memcpy(&potential[m], &bits, sizeof bits);
                cells[m] = potential[m];
                passing[m] = implicit[m] = 0.0;
            }
            muskingum_cunge_step(&table, 1, AT_ONCE, cells, passing, implicit);
            for (size_t m = 0; m < AT_ONCE; m++) {
                size_t row = bit_index_row(&table.by_potential, potential[m]);
                bool is_finite = isfinite(potential[m]);
                above += potential[m] > table.by_potential.highest;
                below += potential[m] < 0.0;
                /* 0 times a potential that is not finite is not a number, and no mark is left of the row */
                if (is_finite && (passing[m] != (double)row || implicit[m] != -(double)row))
                    fail_msg("%s: potential %a read row %g, not %zu", vector_level_name((enum vector_level)level),
                             potential[m], passing[m], row);
                assert_true(is_finite || isnan(passing[m]));
            }
        }
        assert_true(above > 1000 && below > 1000);
    }
    free(table.rows);
    muskingum_cunge_table_clear(&whole);
    flow_curve_clear(&curve);
}

static void no_cell_changes_nothing(void **state)
{
    (void)state;
    struct flow_curve curve;
    struct muskingum_cunge_table table = table_of(&try_wide, &curve);
    for (int level = 0; level < VECTOR_LEVEL_COUNT; level++) {
        double cell = 31.0, passing[MOST_MEMBERS], implicit[MOST_MEMBERS];
        if (!vector_level_is_present((enum vector_level)level))
            continue;
        for (size_t m = 0; m < MOST_MEMBERS; m++)
            implicit[m] = -(passing[m] = 3.7 + (double)m);
        table.vectors = (enum vector_level)level;
        muskingum_cunge_step(&table, 0, MOST_MEMBERS, &cell, passing, implicit);
        assert_true(cell == 31.0);
        for (size_t m = 0; m < MOST_MEMBERS; m++)
            assert_true(passing[m] == 3.7 + (double)m && implicit[m] == -passing[m]);
    }
    muskingum_cunge_table_clear(&table);
    flow_curve_clear(&curve);
}

static void a_table_is_made_for_the_widest_level_present(void **state)
{
    (void)state;
    struct flow_curve curve;
    struct muskingum_cunge_table table = table_of(&try_wide, &curve);
    assert_true(vector_level_is_present(VECTOR_BASELINE));
    assert_true(vector_level_is_present(vector_level_widest()));
    for (int level = (int)vector_level_widest() + 1; level <= VECTOR_LEVEL_COUNT; level++)
        assert_false(vector_level_is_present((enum vector_level)level));
    assert_int_equal(table.vectors, vector_level_widest());
    assert_string_not_equal(vector_level_name(VECTOR_BASELINE), vector_level_name(VECTOR_AVX2));
    print_message("widest vectors here: %s\n", vector_level_name(vector_level_widest()));
    muskingum_cunge_table_clear(&table);
    flow_curve_clear(&curve);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(a_flood_gives_the_same_bits_in_any_company_at_every_level),
        cmocka_unit_test(any_bits_are_survived_in_any_company_at_every_level),
        cmocka_unit_test(every_potential_reads_its_own_row_of_the_table),
        cmocka_unit_test(no_cell_changes_nothing),
        cmocka_unit_test(a_table_is_made_for_the_widest_level_present),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
