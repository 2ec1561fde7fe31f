/* SPDX-License-Identifier: MIT */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <math.h>

#include "engine/area_table.h"
#include "tests/engine/try_sections.h"

struct try_table {
    struct flow_curve curve;
    struct area_table table;
};

static void make_table(struct try_table *made, const struct section *section, double roughness_factor)
{
    assert_int_equal(flow_curve_init(&made->curve, section, 0.02, 60000.0), FW_OK);
    assert_int_equal(area_table_init(&made->table, &made->curve, roughness_factor), FW_OK);
}

static void clear_table(struct try_table *made)
{
    area_table_clear(&made->table);
    flow_curve_clear(&made->curve);
}

static void depth_and_conveyance_are_the_sections(void **state)
{
    (void)state;
    for (size_t s = 0; s < TRY_SECTION_COUNT; s++) {
        struct try_table made;
        double worst_depth = 0.0, worst_conveyance = 0.0, falls_from = 0.0;
        make_table(&made, try_sections[s].section, 1.37);
        for (double depth = 0.0217; depth < 7.0; depth *= 1.0137) {
            struct section_properties exact;
            section_properties_at(try_sections[s].section, depth, &exact);
            worst_depth = fmax(worst_depth, fabs(area_table_depth_m(&made.table, exact.area_m2) / depth - 1.0));
            if (!section_conveyance_falls(try_sections[s].section, &falls_from))
                worst_conveyance = fmax(
                    worst_conveyance,
                    fabs(area_table_conveyance_m3s(&made.table, exact.area_m2) * 1.37 / exact.conveyance_m3s - 1.0));
        }
        print_message("%s: depth within %.4f %%, conveyance within %.4f %%\n", try_sections[s].name,
                      100.0 * worst_depth, 100.0 * worst_conveyance);
        assert_true(worst_depth <=
                    0.002); /* a row of the table, 1/64 octave, straight across a bend of the outline */
        assert_true(worst_conveyance <= 0.001);
        clear_table(&made);
    }
}

static void both_rise_without_a_step_and_read_backwards(void **state)
{
    (void)state;
    for (size_t s = 0; s < TRY_SECTION_COUNT; s++) {
        struct try_table made;
        make_table(&made, try_sections[s].section, 0.83);
        double depth_before = 0.0, conveyance_before = 0.0;
        for (double area = 1e-7; area < 3e5; area *= 1.0031) {
            double depth = area_table_depth_m(&made.table, area);
            double conveyance = area_table_conveyance_m3s(&made.table, area);
            assert_true(depth > depth_before && conveyance > conveyance_before);
            /* lines meet where rows do: to the rounding of numbers of the size of the lines' feet */
            assert_true(fabs(area_table_area_at_depth_m2(&made.table, depth) / area - 1.0) <= 1e-10);
            assert_true(fabs(area_table_area_of_conveyance_m2(&made.table, conveyance) / area - 1.0) <= 1e-10);
            depth_before = depth;
            conveyance_before = conveyance;
        }
        for (size_t row = 1; row < made.table.by_area.row_count; row++) {
            const struct area_table_row *left = made.table.rows + row - 1, *right = left + 1;
            double at = bit_index_row_start(&made.table.by_area, row);
            double depth = right->depth_0 + right->depth_1 * at;
            double conveyance = right->conveyance_0 + right->conveyance_1 * at;
            assert_true(fabs(left->depth_0 + left->depth_1 * at - depth) <= 1e-11 * depth);
            assert_true(fabs(left->conveyance_0 + left->conveyance_1 * at - conveyance) <= 1e-11 * conveyance);
        }
        clear_table(&made);
    }
}

static void nothing_is_read_outside_whatever_is_asked(void **state)
{
    (void)state;
    struct try_table made;
    make_table(&made, &try_survey, 1.0);
    static const double odd[] = {0.0, -0.0, -3.7, 1e-320, 1e300, (double)INFINITY, -(double)INFINITY, (double)NAN};
    for (size_t i = 0; i < sizeof odd / sizeof *odd; i++) {
        size_t row = (size_t)(area_table_row_at(&made.table, odd[i]) - made.table.rows);
        assert_true(row < made.table.by_area.row_count);
        if (!(odd[i] > 0.0)) {
            assert_true(area_table_area_at_depth_m2(&made.table, odd[i]) == 0.0);
            assert_true(area_table_area_of_conveyance_m2(&made.table, odd[i]) == 0.0);
        }
    }
    assert_true(area_table_depth_m(&made.table, 2.0 * made.table.largest_area_m2) >
                area_table_depth_m(&made.table, made.table.largest_area_m2));
    clear_table(&made);
}

static void a_faulty_roughness_factor_is_refused(void **state)
{
    (void)state;
    struct flow_curve curve;
    assert_int_equal(flow_curve_init(&curve, &try_wide, 0.02, 60000.0), FW_OK);
    static const double faulty[] = {0.0, -1.3, (double)NAN, (double)INFINITY};
    for (size_t i = 0; i < sizeof faulty / sizeof *faulty; i++) {
        struct area_table table;
        assert_int_equal(area_table_init(&table, &curve, faulty[i]), FW_BAD_INPUT);
    }
    flow_curve_clear(&curve);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(depth_and_conveyance_are_the_sections),
        cmocka_unit_test(both_rise_without_a_step_and_read_backwards),
        cmocka_unit_test(nothing_is_read_outside_whatever_is_asked),
        cmocka_unit_test(a_faulty_roughness_factor_is_refused),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
