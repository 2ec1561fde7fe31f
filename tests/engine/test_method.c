/* SPDX-License-Identifier: MIT */
#include "engine/method.h"

#include <math.h>
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
/* after the four above, which it needs */
#include <cmocka.h>

#include "engine/flow_curve.h"
#include "engine/section.h"

static void the_least_rise_is_where_the_number_is_the_limit(void **state)
{
    (void)state;
    static const struct {
        double length_m, celerity_m_s, diffusivity_m2_s;
    } reaches[] = {{9400.0, 2.54, 597.0}, {100000.0, 1.87, 36000.0}, {310.0, 0.7, 41.0}};
    for (size_t index = 0; index < sizeof reaches / sizeof *reaches; index++) {
        double rise_s = method_storage_least_rise_s(reaches[index].length_m, reaches[index].celerity_m_s,
                                                    reaches[index].diffusivity_m2_s);
        double number = method_storage_number(reaches[index].length_m, reaches[index].celerity_m_s,
                                              reaches[index].diffusivity_m2_s, rise_s);
        assert_true(fabs(number / METHOD_STORAGE_LIMIT - 1.0) < 1e-12);
        assert_true(method_storage_number(reaches[index].length_m, reaches[index].celerity_m_s,
                                          reaches[index].diffusivity_m2_s, 1.01 * rise_s) < METHOD_STORAGE_LIMIT);
    }
}

static void every_method_is_found_by_its_name_and_no_other_word_is(void **state)
{
    (void)state;
    static const char *const others[] = {"", "Auto", "Dynamic", "kinematic-", "muskingum"};
    for (int method = NETWORK_MUSKINGUM_CUNGE; method <= NETWORK_AUTO; method++) {
        enum network_method found = NETWORK_MUSKINGUM_CUNGE;
        assert_true(method_from_name(method_name((enum network_method)method), &found));
        assert_int_equal(found, method);
    }
    for (size_t index = 0; index < sizeof others / sizeof *others; index++) {
        enum network_method found = NETWORK_DIFFUSIVE;
        assert_false(method_from_name(others[index], &found));
        assert_int_equal(found, NETWORK_DIFFUSIVE);
    }
}

/* Q = 100 + 800 [(t/Tp) e^(1 - t/Tp)]^16, Tp = 24 h; the rise is 800 over its steepest slope, found by small steps. */
static double published_rise_s(void)
{
    double steepest_m3s2 = 0.0;
    double before_m3s = 0.0;
    for (int step = 1; step <= 1440; step++) {
        double share = (double)step / 1440.0;
        double flow_m3s = 800.0 * pow(share * exp(1.0 - share), 16.0);
        steepest_m3s2 = fmax(steepest_m3s2, (flow_m3s - before_m3s) / 60.0);
        before_m3s = flow_m3s;
    }
    return 800.0 / steepest_m3s2;
}

/*
 * tests/reference/saint_venant_flood_wave_summary.csv (set-up after Todini 2007): the storage form meets the full equations' peak at slopes 0.002 and
 * 0.001 to 0.03 % (test_route_reference) and misses it by 4.2 % at 0.00025: the rule must part them.
 */
static void the_rule_parts_the_published_waves_that_the_storage_form_meets_from_those_it_misses(void **state)
{
    (void)state;
    static const struct {
        double slope;
        int is_fit;
    } waves[] = {{0.002, 1}, {0.001, 1}, {0.00025, 0}};
    const struct section section = {.shape = SECTION_RECTANGLE, .bottom_m = 50.0, .roughness_n = 0.035};
    double rise_s = published_rise_s();
    assert_true(rise_s > 6.0 * 3600.0 && rise_s < 10.0 * 3600.0);
    for (size_t index = 0; index < sizeof waves / sizeof *waves; index++) {
        double depth_m = 0.0;
        struct section_properties properties;
        assert_int_equal(section_normal_depth_m(&section, waves[index].slope, 900.0, &depth_m), 0);
        section_properties_at(&section, depth_m, &properties);
        double celerity_m_s = section_celerity_m_s(&section, waves[index].slope, depth_m);
        double diffusivity_m2_s = flow_curve_diffusivity_m2_s(900.0, properties.area_m2, properties.top_width_m,
                                                              celerity_m_s, waves[index].slope);
        double number = method_storage_number(100000.0, celerity_m_s, diffusivity_m2_s, rise_s);
        print_message("slope %g: number %.5f, limit %g\n", waves[index].slope, number, METHOD_STORAGE_LIMIT);
        assert_int_equal(number < METHOD_STORAGE_LIMIT, waves[index].is_fit);
        assert_int_equal(rise_s > method_storage_least_rise_s(100000.0, celerity_m_s, diffusivity_m2_s),
                         waves[index].is_fit);
    }
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(the_least_rise_is_where_the_number_is_the_limit),
        cmocka_unit_test(every_method_is_found_by_its_name_and_no_other_word_is),
        cmocka_unit_test(the_rule_parts_the_published_waves_that_the_storage_form_meets_from_those_it_misses),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
