/* SPDX-License-Identifier: MIT */
/* Whether the published tables are read as they stand, so that the checks that lean on them mean something. */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>

#include "tests/engine/reference_table.h"

static void columns_are_found_by_name_and_empty_cells_are_not_numbers(void **state)
{
    (void)state;
    struct reference_table table = reference_table_load("normal_and_critical_depth.csv");
    assert_int_equal(table.row_count, 12);
    assert_int_equal(table.column_count, 10);
    assert_true(reference_table_number(&table, 0, "value_published") == 3.36);
    assert_true(isnan(reference_table_number(&table, 1, "S0")));
    size_t row = reference_table_find(&table, "case", "same, full perimeter"); /* a quoted cell with a comma */
    assert_true(reference_table_number(&table, row, "value_recomputed") == 1.1062);
    reference_table_clear(&table);
}

static void a_whole_column_comes_as_numbers(void **state)
{
    (void)state;
    struct reference_table table = reference_table_load("flood_wye1960.csv");
    double *inflow_m3s = reference_table_column(&table, "inflow");
    double peak_m3s = 0;
    for (size_t row = 0; row < table.row_count; row++)
        peak_m3s = fmax(peak_m3s, inflow_m3s[row]);
    assert_int_equal(table.row_count, 34);
    assert_true(peak_m3s == 1145); /* flood_facts_and_linear_fits.csv says the same */
    free(inflow_m3s);
    reference_table_clear(&table);
}

static void every_published_table_loads(void **state)
{
    (void)state;
    static const char *const names[] = {
        "cap12_elements.csv",
        "chow1988_8_4_1_muskingum.csv",
        "chow1988_9_6_1_linear_kinematic.csv",
        "manning_n_chow1959.csv",
        "muskingum_cunge_coefficients.csv",
        "rating_formulas.csv",
        "vehicle_stability.csv",
        "kinematic_characteristics_exact.csv",
        "rating_subramanya_gaugings.csv",
        "qartod_water_level.csv",
        "thomas_problem_500mi.csv",
        "wave_model_applicability.csv",
    };
    for (size_t index = 0; index < sizeof names / sizeof *names; index++) {
        struct reference_table table = reference_table_load(names[index]);
        assert_true(table.row_count >= 2);
        reference_table_clear(&table);
    }
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(columns_are_found_by_name_and_empty_cells_are_not_numbers),
        cmocka_unit_test(a_whole_column_comes_as_numbers),
        cmocka_unit_test(every_published_table_loads),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
