/* SPDX-License-Identifier: MIT */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <math.h>

#include "engine/flow_curve.h"
#include "tests/engine/try_sections.h"

static struct flow_curve make_curve(const struct section *section)
{
    struct flow_curve curve;
    const char *fault = "";
    if (section_check(section, &fault) != FW_OK)
        fail_msg("%s", fault);
    assert_int_equal(flow_curve_init(&curve, section, 0.02, 60000.0), FW_OK);
    return curve;
}

static void the_curve_rises_and_covers_what_was_asked(void **state)
{
    (void)state;
    for (size_t s = 0; s < TRY_SECTION_COUNT; s++) {
        struct flow_curve curve = make_curve(try_sections[s].section);
        assert_true(curve.conveyance_m3s[0] <= 0.02);
        assert_true(curve.conveyance_m3s[curve.count - 1] >= 60000.0);
        assert_true(curve.depth_m[0] <= 1e-3);
        for (size_t i = 1; i < curve.count; i++) {
            assert_true(curve.depth_m[i] > curve.depth_m[i - 1]);
            assert_true(curve.area_m2[i] > curve.area_m2[i - 1]);
            assert_true(curve.conveyance_m3s[i] > curve.conveyance_m3s[i - 1]);
        }
        flow_curve_clear(&curve);
    }
}

static void the_curve_is_the_section(void **state)
{
    (void)state;
    for (size_t s = 0; s + 1 < TRY_SECTION_COUNT; s++) { /* but for the berm, which is bridged */
        struct flow_curve curve = make_curve(try_sections[s].section);
        double worst_depth = 0.0, worst_area = 0.0;
        for (double depth = 1.1e-3; depth < 9.0; depth *= 1.00717) {
            struct section_properties exact;
            struct flow_curve_place place;
            section_properties_at(try_sections[s].section, depth, &exact);
            flow_curve_at(&curve, exact.conveyance_m3s, &place);
            worst_depth = fmax(worst_depth, fabs(place.depth_m / depth - 1.0));
            worst_area = fmax(worst_area, fabs(place.area_m2 / exact.area_m2 - 1.0));
        }
        print_message("%s: depth for a conveyance within %.1e, area within %.1e\n", try_sections[s].name, worst_depth,
                      worst_area);
        /* straight pieces 0.27 % of depth long: (0.0027)^2/8 times the bend of h^(5/3) and the like; a flooding bar
         * or plain bends more sharply */
        assert_true(worst_depth <= 1e-4);
        assert_true(worst_area <= 1e-4);
        flow_curve_clear(&curve);
    }
}

static void bends_of_the_outline_are_in_it_exactly(void **state)
{
    (void)state;
    struct flow_curve plain = make_curve(&try_plain);
    struct flow_curve survey = make_curve(&try_survey);
    size_t found = 0;
    for (size_t i = 0; i < plain.count; i++)
        found += plain.depth_m[i] == 2.6;
    assert_int_equal(found, 1);
    found = 0;
    for (size_t k = 0; k < try_survey.point_count; k++)
        for (size_t i = 0; i < survey.count; i++)
            found += survey.depth_m[i] == try_survey_elevation_m[k] - 101.17;
    assert_int_equal(found, 12); /* every point but the lowest */
    flow_curve_clear(&plain);
    flow_curve_clear(&survey);
}

static void celerity_is_the_slope_of_flow_on_area(void **state)
{
    (void)state;
    for (size_t s = 0; s + 1 < TRY_SECTION_COUNT; s++) {
        struct flow_curve curve = make_curve(try_sections[s].section);
        const double depths[] = {0.013, 0.19, 0.7, 1.9, 4.1};
        for (size_t i = 0; i < sizeof depths / sizeof *depths; i++) {
            struct section_properties exact;
            struct flow_curve_place place;
            section_properties_at(try_sections[s].section, depths[i], &exact);
            flow_curve_at(&curve, exact.conveyance_m3s, &place);
            double slope = section_celerity_m_s(try_sections[s].section, 0.0023, depths[i]);
            /* the mean over 0.27 % of depth; within a freshly flooded strip it changes by several per cent over
             * that */
            if (!(fabs(place.conveyance_slope_m_s * sqrt(0.0023) / slope - 1.0) <= 0.02))
                fail_msg("%s, depth %g: celerity %g, by the section %g", try_sections[s].name, depths[i],
                         place.conveyance_slope_m_s * sqrt(0.0023), slope);
        }
        flow_curve_clear(&curve);
    }
}

static void beyond_its_ends_the_curve_goes_straight_on(void **state)
{
    (void)state;
    struct flow_curve curve = make_curve(&try_rectangle);
    double lowest = curve.conveyance_m3s[0];
    double highest = curve.conveyance_m3s[curve.count - 1];
    struct flow_curve_place place;
    flow_curve_at(&curve, 0.5 * lowest, &place);
    assert_true(fabs(place.depth_m / curve.depth_m[0] - 0.5) <= 1e-12);
    assert_true(fabs(place.area_m2 / curve.area_m2[0] - 0.5) <= 1e-12);
    assert_true(flow_curve_depth_m(&curve, 0.0) == 0.0);
    flow_curve_at(&curve, 2.0 * highest, &place);
    assert_true(place.depth_m > curve.depth_m[curve.count - 1] && isfinite(place.depth_m));
    assert_true(fabs(place.area_m2 / place.depth_m - 17.3) <= 1e-6);
    flow_curve_clear(&curve);
}

static void a_dip_of_conveyance_is_bridged(void **state)
{
    (void)state;
    struct section_properties before, after;
    section_properties_at(&try_berm, 1.49, &before);
    section_properties_at(&try_berm, 1.55, &after);
    assert_true(after.conveyance_m3s < before.conveyance_m3s); /* the dip is there */
    struct flow_curve curve = make_curve(&try_berm);
    for (size_t i = 1; i < curve.count; i++) {
        double rise = log(curve.conveyance_m3s[i] / curve.conveyance_m3s[i - 1]);
        assert_true(rise >= (0.5 - 1e-9) * log(curve.depth_m[i] / curve.depth_m[i - 1]));
    }
    struct section_properties above;
    section_properties_at(&try_berm, 4.7, &above); /* far above, it is the section again */
    assert_true(fabs(flow_curve_depth_m(&curve, above.conveyance_m3s) / 4.7 - 1.0) <= 1e-4);
    flow_curve_clear(&curve);
}

static void diffusivity_is_that_of_the_linear_full_equations(void **state)
{
    (void)state;
    /* a wide channel by Manning, m = 5/3: q/(2 S0) (1 - 4/9 Fr^2); q = 1.7 m2/s, h = 1.3 m, S0 = 0.0023 */
    double velocity = 1.7 / 1.3;
    double froude_squared = velocity * velocity / (9.80665 * 1.3);
    double expected = 1.7 / (2.0 * 0.0023) * (1.0 - 4.0 / 9.0 * froude_squared);
    double found = flow_curve_diffusivity_m2_s(1.7 * 31.0, 1.3 * 31.0, 31.0, 5.0 / 3.0 * velocity, 0.0023);
    assert_true(fabs(found / expected - 1.0) <= 1e-12);
    /* where the inertia term would take it all, a twentieth is left: Fr = 2 */
    velocity = 2.0 * sqrt(9.80665 * 1.3);
    found = flow_curve_diffusivity_m2_s(velocity * 1.3 * 31.0, 1.3 * 31.0, 31.0, 5.0 / 3.0 * velocity, 0.0023);
    assert_true(fabs(found / (0.05 * velocity * 1.3 / (2.0 * 0.0023)) - 1.0) <= 1e-12);
}

static void a_section_that_cannot_carry_it_is_refused(void **state)
{
    (void)state;
    struct flow_curve curve = {.count = 3};
    assert_int_equal(flow_curve_init(&curve, &try_rectangle, 0.02, 1e30), FW_BAD_INPUT);
    assert_int_equal(curve.count, 0); /* empty, so that clearing it is harmless */
    assert_int_equal(flow_curve_init(&curve, &try_rectangle, 0.02, (double)NAN), FW_BAD_INPUT);
    flow_curve_clear(&curve);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(the_curve_rises_and_covers_what_was_asked),
        cmocka_unit_test(the_curve_is_the_section),
        cmocka_unit_test(bends_of_the_outline_are_in_it_exactly),
        cmocka_unit_test(celerity_is_the_slope_of_flow_on_area),
        cmocka_unit_test(beyond_its_ends_the_curve_goes_straight_on),
        cmocka_unit_test(a_dip_of_conveyance_is_bridged),
        cmocka_unit_test(diffusivity_is_that_of_the_linear_full_equations),
        cmocka_unit_test(a_section_that_cannot_carry_it_is_refused),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
