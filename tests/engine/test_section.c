/* SPDX-License-Identifier: MIT */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <float.h>
#include <math.h>

#include "engine/section.h"
#include "tests/engine/reference_table.h"

/* Closed forms against each other, where only rounding differs: a few dozen operations. */
static const double ROUNDING = 1e-12;

static void assert_near(double value, double expected, double relative_tolerance, const char *what)
{
    if (!(fabs(value - expected) <= relative_tolerance * fabs(expected)))
        fail_msg("%s: %.17g, expected %.17g within %g of it", what, value, expected, relative_tolerance);
}

/* --- sections to try things on ---------------------------------------------------------------------------------- */

static const struct section wide = {.shape = SECTION_WIDE, .bottom_m = 31.7, .roughness_n = 0.043};
static const struct section rectangle = {.shape = SECTION_RECTANGLE, .bottom_m = 7.3, .roughness_n = 0.029};
static const struct section trapezoid = {
    .shape = SECTION_TRAPEZOID, .bottom_m = 5.9, .side_h_per_v = 1.7, .roughness_n = 0.037};
static const struct section triangle = {.shape = SECTION_TRAPEZOID, .side_h_per_v = 2.3, .roughness_n = 0.031};
static const struct section rectangle_with_plain = {.shape = SECTION_RECTANGLE,
                                                    .bottom_m = 7.3,
                                                    .roughness_n = 0.029,
                                                    .has_plain = true,
                                                    .plain_above_m = 1.9,
                                                    .plain_width_m = 46.8,
                                                    .plain_roughness_n = 0.071};
static const struct section wide_with_plain = {.shape = SECTION_WIDE,
                                               .bottom_m = 31.7,
                                               .roughness_n = 0.043,
                                               .has_plain = true,
                                               .plain_above_m = 1.3,
                                               .plain_width_m = 12.1,
                                               .plain_roughness_n = 0.083};
/* The Ildra: bottom 14 m, sides 2 to 1, 80 m of plain above 2.60 m. */
static const struct section ildra = {.shape = SECTION_TRAPEZOID,
                                     .bottom_m = 14,
                                     .side_h_per_v = 2,
                                     .roughness_n = 0.038,
                                     .has_plain = true,
                                     .plain_above_m = 2.60,
                                     .plain_width_m = 80,
                                     .plain_roughness_n = 0.075};

/* A natural section: a bar, a second channel, a thin wall, a terrace, ends at unequal heights, a datum far below. */
static const double natural_offset_m[] = {0, 0, 11.3, 14.6, 17.1, 19.9, 23.2, 25.5, 25.5, 25.5, 31.4, 44.7, 58.2};
static const double natural_elevation_m[] = {412.9, 411.2, 410.7, 408.3, 407.72, 408.1, 409.3,
                                             408.9, 409.6, 408.8, 410.6, 410.8,  413.6};
static const double natural_panel_to_m[] = {12.9, 31.4, 58.2};
static const double natural_panel_n[] = {0.069, 0.034, 0.058};
static const struct section natural = {.shape = SECTION_POINTS,
                                       .point_count = 13,
                                       .point_offset_m = natural_offset_m,
                                       .point_elevation_m = natural_elevation_m,
                                       .panel_count = 3,
                                       .panel_to_offset_m = natural_panel_to_m,
                                       .panel_roughness_n = natural_panel_n};

/* One panel with a flat berm at 1.5 m, where the divided-channel rule takes flow away as the water spreads. */
static const double berm_offset_m[] = {0, 0, 30, 30, 36, 36};
static const double berm_elevation_m[] = {4, 1.5, 1.5, 0, 0, 4};
static const struct section berm = {.shape = SECTION_POINTS,
                                    .roughness_n = 0.035,
                                    .point_count = 6,
                                    .point_offset_m = berm_offset_m,
                                    .point_elevation_m = berm_elevation_m};

struct named_section {
    const char *name;
    const struct section *section;
};
static const struct named_section every_section[] = {
    {"wide", &wide},
    {"rectangle", &rectangle},
    {"trapezoid", &trapezoid},
    {"triangle", &triangle},
    {"rectangle with plain", &rectangle_with_plain},
    {"wide with plain", &wide_with_plain},
    {"trapezoid with plain", &ildra},
    {"surveyed, natural", &natural},
    {"surveyed, berm", &berm},
};
enum { SECTION_COUNT = sizeof every_section / sizeof *every_section };

static struct section_properties properties_of(const struct section *section, double depth_m)
{
    struct section_properties properties;
    section_properties_at(section, depth_m, &properties);
    return properties;
}

static void assert_same_properties(const struct section *one, const struct section *other, double depth_m,
                                   double tolerance)
{
    struct section_properties a = properties_of(one, depth_m), b = properties_of(other, depth_m);
    assert_near(a.area_m2, b.area_m2, tolerance, "area");
    assert_near(a.top_width_m, b.top_width_m, tolerance, "top width");
    assert_near(a.wetted_perimeter_m, b.wetted_perimeter_m, tolerance, "wetted perimeter");
    assert_near(a.conveyance_m3s, b.conveyance_m3s, tolerance, "conveyance");
    assert_near(a.conveyance_slope_m2s, b.conveyance_slope_m2s, tolerance, "conveyance slope");
}

/* --- shapes ----------------------------------------------------------------------------------------------------- */

static void the_shapes_used_here_pass_the_check(void **state)
{
    (void)state;
    for (size_t index = 0; index < SECTION_COUNT; index++) {
        const char *fault = NULL;
        if (section_check(every_section[index].section, &fault) != FW_OK)
            fail_msg("%s: %s", every_section[index].name, fault);
    }
}

/* By hand: depth 2.3, bottom 5.9, side 1.7: A = 22.563, B = 13.72, P = 5.9 + 4.6 sqrt(3.89) = 14.972618144725369. */
static void a_trapezoid_has_the_properties_of_the_textbook(void **state)
{
    (void)state;
    struct section_properties properties = properties_of(&trapezoid, 2.3);
    assert_near(properties.area_m2, 22.563, ROUNDING, "area");
    assert_near(properties.top_width_m, 13.72, ROUNDING, "top width");
    assert_near(properties.wetted_perimeter_m, 14.972618144725369, ROUNDING, "wetted perimeter");
    assert_near(properties.conveyance_m3s, 22.563 * pow(22.563 / 14.972618144725369, 2.0 / 3) / 0.037, ROUNDING,
                "conveyance");
    assert_false(properties.is_above_survey);
}

/* By hand, 0.9 m over the plain of 46.8 m: channel 7.3 x 2.8 with the perimeter of bank full, 7.3 + 2 x 1.9. */
static void a_plain_adds_its_panel_and_two_outer_walls(void **state)
{
    (void)state;
    struct section_properties properties = properties_of(&rectangle_with_plain, 2.8);
    double channel_k = 20.44 * pow(20.44 / 11.1, 2.0 / 3) / 0.029;
    double plain_k = 42.12 * pow(42.12 / 48.6, 2.0 / 3) / 0.071;
    assert_near(properties.area_m2, 62.56, ROUNDING, "area");
    assert_near(properties.top_width_m, 54.1, ROUNDING, "top width");
    assert_near(properties.wetted_perimeter_m, 59.7, ROUNDING, "wetted perimeter");
    assert_near(properties.conveyance_m3s, channel_k + plain_k, ROUNDING, "conveyance");
}

static void the_panels_add_up_to_the_whole(void **state)
{
    (void)state;
    for (size_t index = 0; index < SECTION_COUNT; index++)
        for (double depth_m = -0.3; depth_m < 9.0; depth_m += 0.37) {
            const struct section *section = every_section[index].section;
            struct section_properties whole = properties_of(section, depth_m), sum = {0};
            for (size_t panel = 0; panel < section_panel_count(section); panel++) {
                struct section_properties part;
                section_panel_at(section, panel, depth_m, &part);
                sum.area_m2 += part.area_m2;
                sum.top_width_m += part.top_width_m;
                sum.wetted_perimeter_m += part.wetted_perimeter_m;
                sum.conveyance_m3s += part.conveyance_m3s;
            }
            assert_near(sum.area_m2, whole.area_m2, ROUNDING, "area");
            assert_near(sum.top_width_m, whole.top_width_m, ROUNDING, "top width");
            assert_near(sum.wetted_perimeter_m, whole.wetted_perimeter_m, ROUNDING, "wetted perimeter");
            assert_near(sum.conveyance_m3s, whole.conveyance_m3s, ROUNDING, "conveyance");
        }
    struct section_properties none;
    section_panel_at(&wide, section_panel_count(&wide), 2.0, &none);
    assert_true(none.area_m2 == 0 && none.conveyance_m3s == 0);
}

static void only_the_width_of_a_wide_section_rubs(void **state)
{
    (void)state;
    assert_near(properties_of(&wide, 3.1).wetted_perimeter_m, 31.7, ROUNDING, "channel");
    assert_near(properties_of(&wide_with_plain, 3.1).wetted_perimeter_m, 31.7 + 12.1, ROUNDING, "with plain");
}

static void a_dry_section_has_nothing(void **state)
{
    (void)state;
    static const double depths_m[] = {0, -0.0, -3.7, (double)-INFINITY, (double)NAN};
    for (size_t index = 0; index < SECTION_COUNT; index++)
        for (size_t depth = 0; depth < sizeof depths_m / sizeof *depths_m; depth++) {
            struct section_properties dry = properties_of(every_section[index].section, depths_m[depth]);
            assert_true(dry.area_m2 == 0 && dry.top_width_m == 0 && dry.wetted_perimeter_m == 0);
            assert_true(dry.conveyance_m3s == 0 && dry.conveyance_slope_m2s == 0 && !dry.is_above_survey);
            assert_true(section_celerity_m_s(every_section[index].section, 0.0017, depths_m[depth]) == 0);
            assert_true(section_normal_discharge_m3s(every_section[index].section, 0.0017, depths_m[depth]) == 0);
        }
}

static void a_slope_that_is_not_downhill_carries_nothing(void **state)
{
    (void)state;
    static const double slopes[] = {0, -0.002, (double)NAN};
    for (size_t index = 0; index < sizeof slopes / sizeof *slopes; index++) {
        assert_true(section_normal_discharge_m3s(&trapezoid, slopes[index], 1.3) == 0);
        assert_true(section_celerity_m_s(&trapezoid, slopes[index], 1.3) == 0);
    }
}

/* --- surveyed points -------------------------------------------------------------------------------------------- */

static void a_surveyed_trapezoid_is_the_closed_form(void **state)
{
    (void)state;
    /* bottom 5.9, side 1.7, banks 6 m high; more points on the way and another datum change nothing */
    static const double offset_m[] = {-20.4, -14.45, -10.2, -10.2, -7.25, -4.3, 0.8, 5.9};
    static const double height_m[] = {6, 2.5, 0, 0, 0, 0, 3, 6};
    static const double datums_m[] = {0, -3.7, 846.25}; /* binary fractions: the heights above them stay exact */
    for (size_t datum = 0; datum < sizeof datums_m / sizeof *datums_m; datum++) {
        double elevation_m[8];
        for (size_t point = 0; point < 8; point++)
            elevation_m[point] = height_m[point] + (datum == 1 ? -3.75 : datums_m[datum]);
        struct section points = {.shape = SECTION_POINTS,
                                 .roughness_n = 0.037,
                                 .point_count = 8,
                                 .point_offset_m = offset_m,
                                 .point_elevation_m = elevation_m};
        assert_int_equal(section_check(&points, NULL), FW_OK);
        for (double depth_m = 1e-6; depth_m < 5.9; depth_m = depth_m * 1.37 + 1e-3)
            assert_same_properties(&points, &trapezoid, depth_m, ROUNDING);
    }
}

/* The plain of the closed form is one panel; surveyed, half of it lies on each bank, which comes to the same flow. */
static void a_surveyed_rectangle_with_plains_is_the_closed_form(void **state)
{
    (void)state;
    static const double offset_m[] = {0, 0, 23.4, 23.4, 30.7, 30.7, 54.1, 54.1};
    static const double elevation_m[] = {6.9, 1.9, 1.9, 0, 0, 1.9, 1.9, 6.9};
    static const double panel_to_m[] = {23.4, 30.7, 54.1};
    static const double panel_n[] = {0.071, 0.029, 0.071};
    const struct section points = {.shape = SECTION_POINTS,
                                   .point_count = 8,
                                   .point_offset_m = offset_m,
                                   .point_elevation_m = elevation_m,
                                   .panel_count = 3,
                                   .panel_to_offset_m = panel_to_m,
                                   .panel_roughness_n = panel_n};
    assert_int_equal(section_check(&points, NULL), FW_OK);
    for (double depth_m = 1e-6; depth_m < 6.9; depth_m = depth_m * 1.37 + 1e-3)
        assert_same_properties(&points, &rectangle_with_plain, depth_m, ROUNDING);
    assert_same_properties(&points, &rectangle_with_plain, 1.9, ROUNDING); /* exactly bank full */
}

/* A panel boundary where the roughness does not change divides the flow, but never the area or what rubs. */
static void cutting_a_panel_in_the_middle_of_a_bank_leaves_the_geometry_alone(void **state)
{
    (void)state;
    struct section whole = natural;
    whole.panel_count = 0;
    whole.roughness_n = 0.034;
    for (double depth_m = 0.013; depth_m < 9; depth_m += 0.0871) {
        struct section_properties cut = properties_of(&natural, depth_m), one = properties_of(&whole, depth_m);
        assert_near(cut.area_m2, one.area_m2, ROUNDING, "area");
        assert_near(cut.top_width_m, one.top_width_m, ROUNDING, "top width");
        assert_near(cut.wetted_perimeter_m, one.wetted_perimeter_m, ROUNDING, "wetted perimeter");
    }
}

static void a_mirrored_survey_has_the_same_properties(void **state)
{
    (void)state;
    double offset_m[13], elevation_m[13];
    const double panel_to_m[] = {58.2 - 31.4, 58.2 - 12.9, 58.2};
    const double panel_n[] = {0.058, 0.034, 0.069};
    for (size_t point = 0; point < 13; point++) {
        offset_m[point] = 58.2 - natural_offset_m[12 - point];
        elevation_m[point] = natural_elevation_m[12 - point];
    }
    struct section mirrored = natural;
    mirrored.point_offset_m = offset_m;
    mirrored.point_elevation_m = elevation_m;
    mirrored.panel_to_offset_m = panel_to_m;
    mirrored.panel_roughness_n = panel_n;
    assert_int_equal(section_check(&mirrored, NULL), FW_OK);
    for (double depth_m = 0.013; depth_m < 9; depth_m += 0.0871)
        assert_same_properties(&mirrored, &natural, depth_m, ROUNDING);
}

static void water_above_either_end_of_the_survey_is_flagged_and_rubs_on_the_end_wall(void **state)
{
    (void)state;
    /* ends 5.18 and 5.88 m above the invert at 407.72 */
    assert_near(section_survey_top_m(&natural), 5.18, ROUNDING, "the lower end");
    assert_true(isinf(section_survey_top_m(&ildra))); /* banks of a shape have no upper end */
    assert_false(properties_of(&natural, 5.17).is_above_survey);
    assert_true(properties_of(&natural, 5.19).is_above_survey);
    struct section_properties low = properties_of(&natural, 6.3), high = properties_of(&natural, 7.3);
    assert_true(low.is_above_survey && high.is_above_survey);
    assert_near(low.top_width_m, 58.2, ROUNDING, "top width");
    assert_near(high.area_m2 - low.area_m2, 58.2, 1e-10, "area of one metre more");
    assert_near(high.wetted_perimeter_m - low.wetted_perimeter_m, 2, 1e-10, "two end walls of one metre more");
}

static void a_wall_between_two_panels_rubs_on_its_low_side(void **state)
{
    (void)state;
    static const double offset_m[] = {0, 0, 10, 10, 24, 24}; /* bed at 1.2 m on the left, 0 on the right */
    static const double elevation_m[] = {5, 1.2, 1.2, 0, 0, 5};
    static const double panel_to_m[] = {10, 24};
    static const double panel_n[] = {0.061, 0.027};
    const struct section points = {.shape = SECTION_POINTS,
                                   .point_count = 6,
                                   .point_offset_m = offset_m,
                                   .point_elevation_m = elevation_m,
                                   .panel_count = 2,
                                   .panel_to_offset_m = panel_to_m,
                                   .panel_roughness_n = panel_n};
    double left_k = 10 * 1.9 * pow(10 * 1.9 / (10 + 1.9), 2.0 / 3) / 0.061;
    double right_k = 14 * 3.1 * pow(14 * 3.1 / (1.2 + 14 + 3.1), 2.0 / 3) / 0.027;
    assert_near(properties_of(&points, 3.1).conveyance_m3s, left_k + right_k, ROUNDING, "conveyance");
}

/* --- slopes ----------------------------------------------------------------------------------------------------- */

/* Whether a corner of any section here lies within a distance: a difference taken across it says nothing. */
static bool is_near_a_corner(const struct section *section, double depth_m, double distance_m)
{
    for (size_t point = 0; point < section->point_count; point++)
        if (fabs(section->point_elevation_m[point] - (section == &natural ? 407.72 : 0) - depth_m) < distance_m)
            return true;
    if (section == &natural && fabs(410.7 - 2.4 * 1.6 / 3.3 - 407.72 - depth_m) < distance_m) /* the cut at 12.9 m */
        return true;
    return section->has_plain && fabs(section->plain_above_m - depth_m) < distance_m;
}

/*
 * Centred differences of step e are wrong by e^2 f'''/6 and by rounding / e: about 1e-8 at e = 1e-4 of the depth, as
 * long as no plain or bank has just begun, where the third derivative is without bound.
 */
static void slopes_are_those_of_centred_differences(void **state)
{
    (void)state;
    size_t compared = 0;
    for (size_t index = 0; index < SECTION_COUNT; index++)
        for (double depth_m = 0.0317; depth_m < 9; depth_m *= 1.0371) {
            const struct section *section = every_section[index].section;
            double step_m = 1e-4 * depth_m;
            if (is_near_a_corner(section, depth_m, 100 * step_m))
                continue;
            struct section_properties at = properties_of(section, depth_m);
            struct section_properties below = properties_of(section, depth_m - step_m);
            struct section_properties above = properties_of(section, depth_m + step_m);
            double conveyance_slope = (above.conveyance_m3s - below.conveyance_m3s) / (2 * step_m);
            double scale = at.conveyance_m3s / depth_m;
            if (!(fabs(at.conveyance_slope_m2s - conveyance_slope) <= 1e-6 * (scale + fabs(conveyance_slope))))
                fail_msg("%s at %g m: dK/dh %.12g, by differences %.12g", every_section[index].name, depth_m,
                         at.conveyance_slope_m2s, conveyance_slope);
            assert_near((above.area_m2 - below.area_m2) / (2 * step_m), at.top_width_m, 1e-9, "dA/dh = B");
            compared++;
        }
    assert_true(compared > 1000);
}

/* Simpson's rule is exact for the straight lines of B between corners; only strips that hold a corner miss. */
static void the_area_is_the_sum_of_the_widths(void **state)
{
    (void)state;
    enum { STRIPS = 20000 };
    for (size_t index = 0; index < SECTION_COUNT; index++) {
        const struct section *section = every_section[index].section;
        const double depth_m = 7.3, strip_m = depth_m / STRIPS;
        double sum_m2 = 0;
        for (int strip = 0; strip < STRIPS; strip++) {
            double from_m = strip * strip_m;
            sum_m2 += strip_m / 6 *
                      (properties_of(section, fmax(from_m, 1e-12)).top_width_m +
                       4 * properties_of(section, from_m + strip_m / 2).top_width_m +
                       properties_of(section, from_m + strip_m).top_width_m);
        }
        assert_near(properties_of(section, depth_m).area_m2, sum_m2, 5e-5, every_section[index].name);
    }
}

static void celerity_is_the_slope_of_discharge_against_area(void **state)
{
    (void)state;
    const double slope = 0.0024, depths_m[] = {0.31, 1.47, 2.55, 2.71, 4.9};
    for (size_t index = 0; index < SECTION_COUNT; index++)
        for (size_t depth = 0; depth < sizeof depths_m / sizeof *depths_m; depth++) {
            const struct section *section = every_section[index].section;
            double low_m = depths_m[depth] * (1 - 1e-5), high_m = depths_m[depth] * (1 + 1e-5);
            double more_m3s = section_normal_discharge_m3s(section, slope, high_m) -
                              section_normal_discharge_m3s(section, slope, low_m);
            double more_m2 = properties_of(section, high_m).area_m2 - properties_of(section, low_m).area_m2;
            assert_near(section_celerity_m_s(section, slope, depths_m[depth]), more_m3s / more_m2, 1e-5,
                        every_section[index].name);
        }
    /* Wide: 5/3 of the speed of the water. Source: Chow, Maidment and Mays (1988), section 9.3. */
    double speed_m_s = section_normal_discharge_m3s(&wide, slope, 1.47) / (31.7 * 1.47);
    assert_near(section_celerity_m_s(&wide, slope, 1.47), 5.0 / 3 * speed_m_s, ROUNDING, "wide");
}

static void conveyance_that_falls_over_a_berm_is_found(void **state)
{
    (void)state;
    double from_m = -1;
    assert_true(section_conveyance_falls(&berm, &from_m));
    assert_near(from_m, 1.5, ROUNDING, "where it begins to fall");
    static const double panel_to_m[] = {30, 36};
    static const double panel_n[] = {0.035, 0.035};
    struct section cured = berm; /* the cure the header names */
    cured.panel_count = 2;
    cured.panel_to_offset_m = panel_to_m;
    cured.panel_roughness_n = panel_n;
    assert_int_equal(section_check(&cured, NULL), FW_OK);
    assert_false(section_conveyance_falls(&cured, &from_m));
    for (size_t index = 0; index < SECTION_COUNT; index++)
        if (every_section[index].section->shape != SECTION_POINTS)
            assert_false(section_conveyance_falls(every_section[index].section, &from_m));
}

/* --- normal and critical depth ---------------------------------------------------------------------------------- */

static void normal_depth_carries_its_discharge_over_twelve_decades(void **state)
{
    (void)state;
    static const double slopes[] = {1e-6, 0.0024, 0.3};
    for (size_t index = 0; index < SECTION_COUNT; index++)
        for (size_t slope = 0; slope < sizeof slopes / sizeof *slopes; slope++)
            for (double discharge_m3s = 1e-6; discharge_m3s < 1.01e6; discharge_m3s *= 1.93) {
                const struct section *section = every_section[index].section;
                double depth_m = -1;
                assert_int_equal(section_normal_depth_m(section, slopes[slope], discharge_m3s, &depth_m), FW_OK);
                double low = section_normal_discharge_m3s(section, slopes[slope], depth_m * (1 - ROUNDING));
                double high = section_normal_discharge_m3s(section, slopes[slope], depth_m * (1 + ROUNDING));
                if (!(low < discharge_m3s && discharge_m3s < high))
                    fail_msg("%s, slope %g, %g m3/s: depth %.17g carries %.17g to %.17g", every_section[index].name,
                             slopes[slope], discharge_m3s, depth_m, low, high);
            }
}

static void critical_depth_has_a_froude_number_of_one_over_twelve_decades(void **state)
{
    (void)state;
    for (size_t index = 0; index < SECTION_COUNT; index++)
        for (double discharge_m3s = 1e-6; discharge_m3s < 1.01e6; discharge_m3s *= 1.93) {
            double depth_m = -1;
            assert_int_equal(section_critical_depth_m(every_section[index].section, discharge_m3s, &depth_m), FW_OK);
            struct section_properties at = properties_of(every_section[index].section, depth_m);
            double froude = discharge_m3s / (at.area_m2 * sqrt(SECTION_GRAVITY_M_S2 * at.area_m2 / at.top_width_m));
            assert_near(froude, 1, 1e-11, every_section[index].name);
        }
}

/* Specific energy falls below the critical depth and rises above it; of several such depths the lowest is given. */
static void critical_depth_is_the_first_valley_of_specific_energy(void **state)
{
    (void)state;
    static const double discharges_m3s[] = {0.7, 31, 57, 83, 95, 160, 700};
    for (size_t index = 0; index < SECTION_COUNT; index++)
        for (size_t flow = 0; flow < sizeof discharges_m3s / sizeof *discharges_m3s; flow++) {
            double critical_m = -1, before = (double)INFINITY;
            assert_int_equal(
                section_critical_depth_m(every_section[index].section, discharges_m3s[flow], &critical_m), FW_OK);
            for (double share = 0.05; share < 1.0001; share += 0.005) {
                double depth_m = critical_m * share;
                double speed_m_s =
                    discharges_m3s[flow] / properties_of(every_section[index].section, depth_m).area_m2;
                double energy_m = depth_m + speed_m_s * speed_m_s / (2 * SECTION_GRAVITY_M_S2);
                assert_true(energy_m < before);
                before = energy_m;
            }
            double depth_m = critical_m * 1.005;
            double speed_m_s = discharges_m3s[flow] / properties_of(every_section[index].section, depth_m).area_m2;
            assert_true(depth_m + speed_m_s * speed_m_s / (2 * SECTION_GRAVITY_M_S2) > before);
        }
}

/* Rectangle: h_c = (q^2 / g)^(1/3), the textbook's closed form. Wide: h_n = (n q / sqrt(S))^(3/5). */
static void closed_forms_of_depth_are_met(void **state)
{
    (void)state;
    double depth_m = -1;
    assert_int_equal(section_critical_depth_m(&rectangle, 23.7, &depth_m), FW_OK);
    assert_near(depth_m, cbrt(23.7 / 7.3 * 23.7 / 7.3 / SECTION_GRAVITY_M_S2), ROUNDING, "critical, rectangle");
    assert_int_equal(section_normal_depth_m(&wide, 0.0017, 57.3, &depth_m), FW_OK);
    assert_near(depth_m, pow(0.043 * 57.3 / 31.7 / sqrt(0.0017), 0.6), ROUNDING, "normal, wide");
}

static void where_conveyance_falls_the_lowest_depth_that_carries_the_flow_is_given(void **state)
{
    (void)state;
    const double slope = 0.0013;
    double bank_full_m3s = section_normal_discharge_m3s(&berm, slope, 1.5), depth_m = -1;
    assert_int_equal(section_normal_depth_m(&berm, slope, 0.999 * bank_full_m3s, &depth_m), FW_OK);
    assert_true(depth_m > 1.49 && depth_m < 1.5);
    assert_true(section_normal_discharge_m3s(&berm, slope, 1.501) < 0.5 * bank_full_m3s); /* the fall is real */
    assert_int_equal(section_normal_depth_m(&berm, slope, 1.001 * bank_full_m3s, &depth_m), FW_OK);
    assert_true(depth_m > 1.70 && depth_m < 1.71); /* by hand: 36 m wide, K is back at 257.4 there */
}

static void no_flow_has_no_depth(void **state)
{
    (void)state;
    double normal_m = -1, critical_m = -1;
    assert_int_equal(section_normal_depth_m(&natural, 0.0024, 0, &normal_m), FW_OK);
    assert_int_equal(section_critical_depth_m(&natural, 0, &critical_m), FW_OK);
    assert_true(normal_m == 0 && critical_m == 0);
}

/* Where conveyance is below the smallest number the search must still end, with a depth that means "dry". */
static void the_smallest_numbers_still_have_a_depth(void **state)
{
    (void)state;
    static const double discharges_m3s[] = {5e-324, 1e-310, 1e-300, 1e-200};
    for (size_t index = 0; index < SECTION_COUNT; index++)
        for (size_t flow = 0; flow < sizeof discharges_m3s / sizeof *discharges_m3s; flow++) {
            const struct section *section = every_section[index].section;
            double normal_m = -1, critical_m = -1;
            assert_int_equal(section_normal_depth_m(section, 0.0024, discharges_m3s[flow], &normal_m), FW_OK);
            assert_int_equal(section_normal_depth_m(section, 1e300, discharges_m3s[flow], &normal_m), FW_OK);
            assert_int_equal(section_critical_depth_m(section, discharges_m3s[flow], &critical_m), FW_OK);
            assert_true(normal_m >= 0 && normal_m < 1e-60 && critical_m >= 0 && critical_m < 1e-60);
        }
}

static void impossible_flows_and_slopes_are_refused(void **state)
{
    (void)state;
    static const struct {
        double slope, discharge_m3s;
        enum fw_status status;
    } rows[] = {
        {0, 3.1, FW_BAD_INPUT},
        {-0.001, 3.1, FW_BAD_INPUT},
        {(double)NAN, 3.1, FW_BAD_INPUT},
        {(double)INFINITY, 3.1, FW_BAD_INPUT},
        {0.001, -1e-9, FW_BAD_INPUT},
        {0.001, (double)NAN, FW_BAD_INPUT},
        {0.001, (double)INFINITY, FW_BAD_INPUT},
        {0.001, 1e300, FW_OUT_OF_RANGE},
    };
    for (size_t row = 0; row < sizeof rows / sizeof *rows; row++) {
        double depth_m = 47.11;
        assert_int_equal(section_normal_depth_m(&rectangle, rows[row].slope, rows[row].discharge_m3s, &depth_m),
                         rows[row].status);
        if (rows[row].slope == 0.001) /* the slope plays no part in the critical depth */
            assert_int_equal(section_critical_depth_m(&rectangle, rows[row].discharge_m3s, &depth_m),
                             rows[row].status);
        assert_true(depth_m == 47.11); /* untouched on failure */
    }
}

/* --- published numbers ------------------------------------------------------------------------------------------ */

/*
 * Sources: Chow, Open-Channel Hydraulics (1959), Examples 4-1, 6-1, 10-1; Chow, Maidment and Mays, Applied Hydrology
 * (1988), Example 9.3.1. In feet, with Manning's constant rounded to 1.49 and g = 32.2: both are carried into SI
 * exactly, the one as a roughness, the other and the energy coefficient as a discharge. Tolerances of the table:
 * 0.0005 to the recomputed value, 0.01 to the published one.
 */
static void published_normal_and_critical_depths_are_met(void **state)
{
    (void)state;
    const double foot_m = 0.3048, cubic_foot_m3 = foot_m * foot_m * foot_m;
    struct reference_table table = reference_table_load("normal_and_critical_depth.csv");
    for (size_t row = 0; row < table.row_count; row++) {
        const char *name = reference_table_text(&table, row, "case");
        double side = reference_table_number(&table, row, "z");
        double discharge_m3s = reference_table_number(&table, row, "Q_cfs") * cubic_foot_m3;
        struct section section = {.bottom_m = reference_table_number(&table, row, "b_ft") * foot_m,
                                  .side_h_per_v = side,
                                  .roughness_n = 0.025};
        section.shape = side > 0                                     ? SECTION_TRAPEZOID
                        : strstr(name, "wide approximation") != NULL ? SECTION_WIDE
                                                                     : SECTION_RECTANGLE;
        double value = -1;
        if (strstr(name, "critical") != NULL) {
            double energy_coefficient = strstr(name, "alpha=1.10") != NULL ? 1.10 : 1;
            double as_if_m3s = discharge_m3s * sqrt(energy_coefficient * SECTION_GRAVITY_M_S2 / (32.2 * foot_m));
            assert_int_equal(section_critical_depth_m(&section, as_if_m3s, &value), FW_OK);
            if (strstr(name, "velocity") != NULL)
                value = discharge_m3s / properties_of(&section, value).area_m2;
        } else {
            section.roughness_n = reference_table_number(&table, row, "n") /
                                  reference_table_number(&table, row, "manning_k") / cbrt(foot_m);
            assert_int_equal(
                section_normal_depth_m(&section, reference_table_number(&table, row, "S0"), discharge_m3s, &value),
                FW_OK);
        }
        double recomputed = reference_table_number(&table, row, "value_recomputed");
        double published = reference_table_number(&table, row, "value_published");
        if (!(fabs(value / foot_m - recomputed) <= 0.0005))
            fail_msg("%s: %.5f ft, recomputed %.4f", name, value / foot_m, recomputed);
        if (!isnan(published) && !(fabs(value / foot_m - published) <= 0.01))
            fail_msg("%s: %.5f ft, published %.2f", name, value / foot_m, published);
    }
    reference_table_clear(&table);
}

/*
 * Source: Chow, Maidment and Mays (1988), Example 9.3.1: A = alpha Q^0.6 with alpha = 3.49 in feet; celerities of
 * Example 9.3.2, which use that rounded alpha. Tolerances: alpha is printed to three digits, celerity and depth are
 * tabulated to 0.001.
 */
static void published_kinematic_celerities_of_a_wide_channel_are_met(void **state)
{
    (void)state;
    const double foot_m = 0.3048;
    struct section channel = {
        .shape = SECTION_WIDE, .bottom_m = 200 * foot_m, .roughness_n = 0.035 / 1.49 / cbrt(foot_m)};
    struct reference_table table = reference_table_load("kinematic_characteristics_exact.csv");
    for (size_t row = 0; row < table.row_count; row++) {
        double discharge_cfs = reference_table_number(&table, row, "Q_cfs"), depth_m = -1;
        assert_int_equal(section_normal_depth_m(&channel, 0.01, discharge_cfs * foot_m * foot_m * foot_m, &depth_m),
                         FW_OK);
        double alpha = properties_of(&channel, depth_m).area_m2 / (foot_m * foot_m) / pow(discharge_cfs, 0.6);
        assert_true(fabs(alpha - 3.49) <= 0.005);
        assert_true(fabs(depth_m / foot_m - reference_table_number(&table, row, "depth_ft")) <= 0.0006);
        double celerity_ft_s = section_celerity_m_s(&channel, 0.01, depth_m) / foot_m;
        assert_true(fabs(celerity_ft_s * alpha / 3.49 - reference_table_number(&table, row, "celerity_ft_s")) <=
                    0.0006);
    }
    reference_table_clear(&table);
}

/*
 * Source: Chow (1959), table 5-6, ranges of roughness. The Ildra of the demonstration is invented; its channel and
 * plain must at least be of a kind that the table knows.
 */
static void the_roughness_of_the_demonstration_river_is_of_a_published_kind(void **state)
{
    (void)state;
    struct reference_table table = reference_table_load("manning_n_chow1959.csv");
    size_t stream = reference_table_find(&table, "channel", "clean, winding, some pools and shoals");
    size_t plain = reference_table_find(&table, "channel", "medium to dense brush, winter");
    assert_true(ildra.roughness_n >= reference_table_number(&table, stream, "n_min") &&
                ildra.roughness_n <= reference_table_number(&table, stream, "n_max"));
    assert_true(ildra.plain_roughness_n >= reference_table_number(&table, plain, "n_min") &&
                ildra.plain_roughness_n <= reference_table_number(&table, plain, "n_max"));
    reference_table_clear(&table);
}

/* --- what the check refuses ------------------------------------------------------------------------------------- */

enum simple_member { BOTTOM, SIDE, ROUGHNESS, PLAIN_ABOVE, PLAIN_WIDTH, PLAIN_ROUGHNESS };

static void every_impossible_number_of_a_simple_shape_is_refused_by_name(void **state)
{
    (void)state;
    static const char *const names[] = {
        "bottom_m:", "side_h_per_v:", "roughness_n:", "plain_above_m:", "plain_width_m:", "plain_roughness_n:"};
    static const double values[] = {-1.3, (double)NAN, (double)INFINITY, (double)-INFINITY, 1e308, 5e-324, 0};
    for (int member = BOTTOM; member <= PLAIN_ROUGHNESS; member++)
        for (size_t value = 0; value < sizeof values / sizeof *values; value++) {
            struct section section = ildra;
            double *members[] = {&section.bottom_m,      &section.side_h_per_v,  &section.roughness_n,
                                 &section.plain_above_m, &section.plain_width_m, &section.plain_roughness_n};
            *members[member] = values[value];
            const char *fault = "";
            /* a triangle, and a rectangle (or as good as one): they are sections */
            if ((values[value] == 0 && member <= SIDE) || (values[value] == 5e-324 && member == SIDE)) {
                assert_int_equal(section_check(&section, &fault), FW_OK);
                continue;
            }
            assert_int_equal(section_check(&section, &fault), FW_BAD_INPUT);
            assert_true(strncmp(fault, names[member], strlen(names[member])) == 0);
            assert_int_equal(section_check(&section, NULL), FW_BAD_INPUT);
        }
}

static void a_simple_shape_needs_a_width(void **state)
{
    (void)state;
    static const enum section_shape shapes[] = {SECTION_WIDE, SECTION_RECTANGLE, SECTION_TRAPEZOID};
    for (size_t index = 0; index < sizeof shapes / sizeof *shapes; index++) {
        struct section section = {.shape = shapes[index], .roughness_n = 0.03};
        const char *fault = "";
        assert_int_equal(section_check(&section, &fault), FW_BAD_INPUT);
        assert_non_null(strstr(fault, "bottom_m"));
    }
    struct section unknown = trapezoid;
    memset(&unknown.shape, 0x35, sizeof unknown.shape);
    const char *fault = "";
    assert_int_equal(section_check(&unknown, &fault), FW_BAD_INPUT);
    assert_non_null(strstr(fault, "shape"));
}

static void surveys_that_cannot_be_are_refused_with_a_reason(void **state)
{
    (void)state;
    enum { POINTS = 5 };
    static const struct {
        const char *shows;
        const char *reason;
        double offset_m[POINTS], elevation_m[POINTS];
        size_t point_count;
    } rows[] = {
        {"fewer than three points", "at least 3", {0, 7, 9}, {4, 0, 4}, 2},
        {"folds back", "folds back", {0, 3, 2.9, 7, 9}, {4, 0, 0, 0, 4}, POINTS},
        {"no width", "no width", {3, 3, 3, 3, 3}, {4, 3, 2, 1, 0}, POINTS},
        {"an offset that is no number", "point_offset_m", {0, (double)NAN, 5, 7, 9}, {4, 0, 0, 0, 4}, POINTS},
        {"an offset without end", "point_offset_m", {0, 3, 5, 7, (double)INFINITY}, {4, 0, 0, 0, 4}, POINTS},
        {"an elevation that is no number", "point_elevation_m", {0, 3, 5, 7, 9}, {4, 0, (double)NAN, 0, 4}, POINTS},
        {"an elevation without end", "point_elevation_m", {0, 3, 5, 7, 9}, {4, 0, 0, 0, (double)INFINITY}, POINTS},
        {"an offset in the next country", "1e7", {0, 3, 5, 7, 3e7}, {4, 0, 0, 0, 4}, POINTS},
        {"an elevation in space", "1e6", {0, 3, 5, 7, 9}, {4, 0, 2e6, 0, 4}, POINTS},
        {"a slot without width", "slot", {0, 5, 5, 5, 9}, {4, 1, 0, 1, 4}, POINTS},
        {"a wall up at the left end", "left end", {0, 0, 5, 7, 9}, {0, 4, 1, 1, 4}, POINTS},
        {"a wall down at the right end", "right end", {0, 3, 5, 9, 9}, {4, 1, 1, 4, 0}, POINTS},
    };
    for (size_t row = 0; row < sizeof rows / sizeof *rows; row++) {
        struct section section = {.shape = SECTION_POINTS,
                                  .roughness_n = 0.03,
                                  .point_count = rows[row].point_count,
                                  .point_offset_m = rows[row].offset_m,
                                  .point_elevation_m = rows[row].elevation_m};
        const char *fault = "";
        if (section_check(&section, &fault) != FW_BAD_INPUT || strstr(fault, rows[row].reason) == NULL)
            fail_msg("%s: '%s'", rows[row].shows, fault);
    }
}

static void panels_that_cannot_be_are_refused_with_a_reason(void **state)
{
    (void)state;
    static const struct {
        const char *shows;
        const char *reason;
        double to_m[3], n[3];
        size_t count;
    } rows[] = {
        {"out of order", "left to right", {31.4, 12.9, 58.2}, {0.03, 0.03, 0.03}, 3},
        {"two ending at one offset", "left to right", {12.9, 12.9, 58.2}, {0.03, 0.03, 0.03}, 3},
        {"the first ends at the left end", "left to right", {0, 12.9, 58.2}, {0.03, 0.03, 0.03}, 3},
        {"not covering", "does not reach", {12.9, 31.4, 58.1}, {0.03, 0.03, 0.03}, 3},
        {"one beyond the survey", "beyond the right end", {12.9, 58.2, 60}, {0.03, 0.03, 0.03}, 3},
        {"an end that is no number", "not finite", {12.9, (double)NAN, 58.2}, {0.03, 0.03, 0.03}, 3},
        {"no roughness", "panel_roughness_n", {12.9, 31.4, 58.2}, {0.03, 0, 0.03}, 3},
        {"roughness below zero", "panel_roughness_n", {12.9, 31.4, 58.2}, {0.03, 0.03, -0.03}, 3},
        {"roughness that is no number", "panel_roughness_n", {12.9, 31.4, 58.2}, {(double)NAN, 0.03, 0.03}, 3},
        {"no panels and no roughness", "roughness_n", {0}, {0}, 0},
    };
    for (size_t row = 0; row < sizeof rows / sizeof *rows; row++) {
        struct section section = natural;
        section.panel_count = rows[row].count;
        section.panel_to_offset_m = rows[row].to_m;
        section.panel_roughness_n = rows[row].n;
        const char *fault = "";
        if (section_check(&section, &fault) != FW_BAD_INPUT || strstr(fault, rows[row].reason) == NULL)
            fail_msg("%s: '%s'", rows[row].shows, fault);
    }
}

static void a_survey_with_missing_arrays_or_a_second_plain_is_refused(void **state)
{
    (void)state;
    struct section rows[5];
    for (size_t row = 0; row < 5; row++)
        rows[row] = natural;
    rows[0].point_offset_m = NULL;
    rows[1].point_elevation_m = NULL;
    rows[2].panel_to_offset_m = NULL;
    rows[3].panel_roughness_n = NULL;
    rows[4].has_plain = true;
    for (size_t row = 0; row < 5; row++) {
        const char *fault = "";
        assert_int_equal(section_check(&rows[row], &fault), FW_BAD_INPUT);
        assert_non_null(strstr(fault, row < 4 ? "missing" : "has_plain"));
    }
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(the_shapes_used_here_pass_the_check),
        cmocka_unit_test(a_trapezoid_has_the_properties_of_the_textbook),
        cmocka_unit_test(a_plain_adds_its_panel_and_two_outer_walls),
        cmocka_unit_test(the_panels_add_up_to_the_whole),
        cmocka_unit_test(only_the_width_of_a_wide_section_rubs),
        cmocka_unit_test(a_dry_section_has_nothing),
        cmocka_unit_test(a_slope_that_is_not_downhill_carries_nothing),
        cmocka_unit_test(a_surveyed_trapezoid_is_the_closed_form),
        cmocka_unit_test(a_surveyed_rectangle_with_plains_is_the_closed_form),
        cmocka_unit_test(cutting_a_panel_in_the_middle_of_a_bank_leaves_the_geometry_alone),
        cmocka_unit_test(a_mirrored_survey_has_the_same_properties),
        cmocka_unit_test(water_above_either_end_of_the_survey_is_flagged_and_rubs_on_the_end_wall),
        cmocka_unit_test(a_wall_between_two_panels_rubs_on_its_low_side),
        cmocka_unit_test(slopes_are_those_of_centred_differences),
        cmocka_unit_test(the_area_is_the_sum_of_the_widths),
        cmocka_unit_test(celerity_is_the_slope_of_discharge_against_area),
        cmocka_unit_test(conveyance_that_falls_over_a_berm_is_found),
        cmocka_unit_test(normal_depth_carries_its_discharge_over_twelve_decades),
        cmocka_unit_test(critical_depth_has_a_froude_number_of_one_over_twelve_decades),
        cmocka_unit_test(critical_depth_is_the_first_valley_of_specific_energy),
        cmocka_unit_test(closed_forms_of_depth_are_met),
        cmocka_unit_test(where_conveyance_falls_the_lowest_depth_that_carries_the_flow_is_given),
        cmocka_unit_test(no_flow_has_no_depth),
        cmocka_unit_test(the_smallest_numbers_still_have_a_depth),
        cmocka_unit_test(impossible_flows_and_slopes_are_refused),
        cmocka_unit_test(published_normal_and_critical_depths_are_met),
        cmocka_unit_test(published_kinematic_celerities_of_a_wide_channel_are_met),
        cmocka_unit_test(the_roughness_of_the_demonstration_river_is_of_a_published_kind),
        cmocka_unit_test(every_impossible_number_of_a_simple_shape_is_refused_by_name),
        cmocka_unit_test(a_simple_shape_needs_a_width),
        cmocka_unit_test(surveys_that_cannot_be_are_refused_with_a_reason),
        cmocka_unit_test(panels_that_cannot_be_are_refused_with_a_reason),
        cmocka_unit_test(a_survey_with_missing_arrays_or_a_second_plain_is_refused),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
