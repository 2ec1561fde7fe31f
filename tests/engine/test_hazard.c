/* SPDX-License-Identifier: MIT */
#include "engine/hazard.h"

#include <math.h>
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>

#include "tests/engine/reference_table.h"
#include "tests/engine/try_sections.h"

static const double rounding = 1e-12; /* a dozen operations of doubles */

static void expect_near(double found, double expected, double relative, const char *what)
{
    if (!(fabs(found - expected) <= relative * fabs(expected)))
        fail_msg("%s: %.17g, expected %.17g", what, found, expected);
}

/* --- the limits --- */

/* Shand, Cox, Blacka, Smith (2011), ARR Revision Project 10, P10/S2/020, table 3. */
static void vehicle_limits_are_those_published(void **state)
{
    (void)state;
    static const struct {
        enum hazard_whom whom;
        const char *published_as;
    } rows[] = {{HAZARD_SMALL_CAR, "small passenger"}, {HAZARD_LARGE_CAR, "large passenger"}};
    struct reference_table table = reference_table_load("vehicle_stability.csv");
    assert_int_equal(table.row_count, sizeof rows / sizeof *rows);
    for (size_t i = 0; i < table.row_count; i++) {
        const struct hazard_limit *limit = hazard_limit_for(rows[i].whom);
        size_t row = reference_table_find(&table, "class", rows[i].published_as);
        assert_true(limit->depth_m == reference_table_number(&table, row, "still_water_depth_m"));
        assert_true(limit->speed_m_s == reference_table_number(&table, row, "velocity_m_s"));
        assert_true(limit->product_m2_s == reference_table_number(&table, row, "DV_m2_s"));
        assert_true(limit->is_draft);
        double fast_depth_m = reference_table_number(&table, row, "high_velocity_depth_m");
        expect_near(limit->product_m2_s / limit->speed_m_s, fast_depth_m, rounding, "depth at the highest speed");
    }
    reference_table_clear(&table);
}

/* AIDR Guideline 7-3 (2017): past the second row all vehicles, children and the elderly, past the third everyone. */
static void general_limits_are_those_published(void **state)
{
    (void)state;
    static const struct {
        enum hazard_whom whom;
        const char *row, *next_row, *next_meaning;
    } rows[] = {{HAZARD_ANY_VEHICLE, "H2", "H3", "unsafe for vehicles, children, elderly"},
                {HAZARD_ANY_PERSON, "H3", "H4", "unsafe for vehicles and people"}};
    struct reference_table table = reference_table_load("flood_hazard_classes.csv");
    for (size_t i = 0; i < sizeof rows / sizeof *rows; i++) {
        const struct hazard_limit *limit = hazard_limit_for(rows[i].whom);
        size_t row = reference_table_find(&table, "class", rows[i].row);
        size_t next = reference_table_find(&table, "class", rows[i].next_row);
        assert_true(limit->product_m2_s == reference_table_number(&table, row, "DV_max"));
        assert_true(limit->depth_m == reference_table_number(&table, row, "depth_max"));
        assert_true(limit->speed_m_s == reference_table_number(&table, row, "velocity_max"));
        assert_false(limit->is_draft);
        assert_string_equal(reference_table_text(&table, next, "meaning"), rows[i].next_meaning);
    }
    /* the first row, for small vehicles, adds nothing but a speed to the limit for a small car */
    size_t first = reference_table_find(&table, "class", "H1");
    assert_true(reference_table_number(&table, first, "DV_max") == hazard_limit_for(HAZARD_SMALL_CAR)->product_m2_s);
    assert_true(reference_table_number(&table, first, "depth_max") == hazard_limit_for(HAZARD_SMALL_CAR)->depth_m);
    reference_table_clear(&table);
}

static void a_limit_is_passed_by_any_of_the_three_and_only_from_above(void **state)
{
    (void)state;
    static const struct {
        struct hazard_water water;
        enum hazard_measure by;
        const char *shows;
    } rows[] = {
        {{0.0, 0.0, 0.0}, HAZARD_NONE, "dry"},
        {{0.3, 0.0, 0.0}, HAZARD_NONE, "still and just as deep as the limit"},
        {{0.300001, 0.0, 0.0}, HAZARD_DEPTH, "still and deeper"},
        {{0.1, 3.0, 0.3}, HAZARD_NONE, "at two limits at once"},
        {{0.09, 3.01, 0.2709}, HAZARD_SPEED, "shallow and too fast"},
        {{0.15, 2.1, 0.315}, HAZARD_PRODUCT, "neither too deep nor too fast, but both together"},
        {{0.5, 3.5, 1.75}, HAZARD_PRODUCT, "all three: the product is named"},
        {{0.35, 3.2, 0.2}, HAZARD_DEPTH, "two of a weir: the depth is named"},
    };
    const struct hazard_limit *limit = hazard_limit_for(HAZARD_SMALL_CAR);
    for (size_t i = 0; i < sizeof rows / sizeof *rows; i++) {
        if (hazard_measure_passed(limit, &rows[i].water) != rows[i].by)
            fail_msg("%s", rows[i].shows);
        if ((hazard_share_of_limit(limit, &rows[i].water) > 1.0 + 1e-15) != (rows[i].by != HAZARD_NONE))
            fail_msg("%s: share %.17g", rows[i].shows, hazard_share_of_limit(limit, &rows[i].water));
    }
}

/* --- a deck in the section --- */

static const struct hazard_deck ford = {.kind = HAZARD_DECK_IN_SECTION,
                                        .level_m = 1.55,
                                        .section = &try_plain,
                                        .panel = HAZARD_ANY_PANEL,
                                        .roughness_n = 0.013};

static void a_deck_is_dry_up_to_its_level(void **state)
{
    (void)state;
    struct hazard_deck weir = {.kind = HAZARD_DECK_IS_WEIR, .level_m = 1.55, .weir_coefficient = 1.6};
    for (double stage_m = -1.0; stage_m <= 1.55; stage_m += 0.05) {
        struct hazard_water water = hazard_water_on_deck(&ford, stage_m, 31.0, HAZARD_NOTHING_BELOW);
        assert_true(water.depth_m == 0.0 && water.speed_m_s == 0.0 && water.product_m2_s == 0.0);
        water = hazard_water_on_deck(&weir, stage_m, 31.0, 9.0);
        assert_true(water.depth_m == 0.0 && water.speed_m_s == 0.0 && water.product_m2_s == 0.0);
    }
}

/*
 * By hand, the demonstration's ford (bottom 14 m, sides 2 to 1, n 0.038, slope 0.0024) at 1.75 m, 0.20 m over the deck:
 * A = 30.625, P = 14 + 3.5 sqrt(5) = 21.826238, R = 1.403128; V = R^(2/3) sqrt(0.0024) / 0.038 = 1.615797 m/s.
 * The sheet: 0.2^(2/3) sqrt(0.0024) / 0.013 = 1.288790 m/s.
 */
static void a_thin_sheet_is_as_fast_as_the_channel_beside_it(void **state)
{
    (void)state;
    double flow_m3s = section_normal_discharge_m3s(&try_plain, 0.0024, 1.75);
    struct hazard_water water = hazard_water_on_deck(&ford, 1.75, flow_m3s, HAZARD_NOTHING_BELOW);
    expect_near(water.depth_m, 0.20, rounding, "depth");
    expect_near(water.speed_m_s, 1.615797, 1e-6, "speed");
    expect_near(water.product_m2_s, 0.3231594, 1e-6, "product");
    struct hazard_water turned = hazard_water_on_deck(&ford, 1.75, -flow_m3s, HAZARD_NOTHING_BELOW);
    assert_true(turned.speed_m_s == water.speed_m_s);
}

/* In a still channel 0.9 m deep beside a deck as smooth as concrete the sheet would be the faster one. */
static void a_smooth_deck_in_a_rough_channel_has_the_speed_of_its_sheet(void **state)
{
    (void)state;
    struct section rough = try_rectangle;
    struct hazard_deck deck = ford;
    rough.roughness_n = 0.12;
    deck.section = &rough;
    deck.level_m = 0.47;
    double flow_m3s = section_normal_discharge_m3s(&rough, 0.0031, 0.9);
    struct hazard_water water = hazard_water_on_deck(&deck, 0.9, flow_m3s, HAZARD_NOTHING_BELOW);
    expect_near(water.speed_m_s, sqrt(0.0031) * cbrt(0.43 * 0.43) / 0.013, rounding, "speed");
    assert_true(water.speed_m_s > flow_m3s / (17.3 * 0.9));
}

/* Under backwater the friction slope is less than that of the bed: half the flow at a level is half the speed. */
static void ponded_water_is_slower_in_the_share_of_its_flow(void **state)
{
    (void)state;
    double flow_m3s = section_normal_discharge_m3s(&try_plain, 0.0024, 2.31);
    struct hazard_water free = hazard_water_on_deck(&ford, 2.31, flow_m3s, HAZARD_NOTHING_BELOW);
    struct hazard_water ponded = hazard_water_on_deck(&ford, 2.31, 0.5 * flow_m3s, HAZARD_NOTHING_BELOW);
    assert_true(ponded.depth_m == free.depth_m);
    expect_near(ponded.speed_m_s, 0.5 * free.speed_m_s, rounding, "speed");
    expect_near(ponded.product_m2_s, 0.5 * free.product_m2_s, rounding, "product");
}

static double mean_speed_of_panel(const struct section *section, size_t panel, double stage_m, double root_of_slope)
{
    struct section_properties properties;
    section_panel_at(section, panel, stage_m, &properties);
    return root_of_slope * properties.conveyance_m3s / properties.area_m2;
}

static void a_deck_on_the_plain_is_slower_than_one_across_the_channel(void **state)
{
    (void)state;
    static const double stage_m = 3.4, slope = 0.0024;
    double flow_m3s = section_normal_discharge_m3s(&try_plain, slope, stage_m);
    struct hazard_deck deck = {
        .kind = HAZARD_DECK_IN_SECTION, .level_m = 2.6, .section = &try_plain, .panel = 1, .roughness_n = 0.3};
    struct hazard_water plain = hazard_water_on_deck(&deck, stage_m, flow_m3s, HAZARD_NOTHING_BELOW);
    expect_near(plain.speed_m_s, mean_speed_of_panel(&try_plain, 1, stage_m, sqrt(slope)), rounding, "plain");
    deck.panel = HAZARD_ANY_PANEL;
    struct hazard_water any = hazard_water_on_deck(&deck, stage_m, flow_m3s, HAZARD_NOTHING_BELOW);
    expect_near(any.speed_m_s, mean_speed_of_panel(&try_plain, 0, stage_m, sqrt(slope)), rounding, "channel");
    assert_true(any.speed_m_s > 2.0 * plain.speed_m_s);
}

static void of_surveyed_panels_the_fastest_counts_unless_one_is_named(void **state)
{
    (void)state;
    static const double stage_m = 3.9, slope = 0.0013;
    double flow_m3s = section_normal_discharge_m3s(&try_survey, slope, stage_m);
    double fastest = 0.0;
    struct hazard_deck deck = {
        .kind = HAZARD_DECK_IN_SECTION, .level_m = 3.3, .section = &try_survey, .roughness_n = 0.9};
    assert_int_equal(section_panel_count(&try_survey), 3);
    for (deck.panel = 0; deck.panel < 3; deck.panel++) {
        struct hazard_water water = hazard_water_on_deck(&deck, stage_m, flow_m3s, HAZARD_NOTHING_BELOW);
        double expected = mean_speed_of_panel(&try_survey, deck.panel, stage_m, sqrt(slope));
        expect_near(water.speed_m_s, expected, rounding, "panel");
        fastest = fmax(fastest, water.speed_m_s);
    }
    deck.panel = HAZARD_ANY_PANEL;
    assert_true(hazard_water_on_deck(&deck, stage_m, flow_m3s, HAZARD_NOTHING_BELOW).speed_m_s == fastest);
}

/* --- a weir over a road --- */

/* HDS-5, equation 8, its check in US units: 3.0, 100 ft of road, 1 ft of head give 300 cfs. */
static void a_weir_gives_the_published_flow_per_metre_of_road(void **state)
{
    (void)state;
    static const double foot_m = 0.3048;
    struct reference_table table = reference_table_load("roadway_overtopping_weir.csv");
    size_t check = reference_table_find(&table, "item", "check: 3.0 US, L=100 ft, H=1 ft");
    assert_string_equal(reference_table_text(&table, check, "value_US"), "300 cfs");
    struct hazard_deck deck = {.kind = HAZARD_DECK_IS_WEIR, .level_m = 2.0, .weir_coefficient = 3.0 * sqrt(foot_m)};
    struct hazard_water water = hazard_water_on_deck(&deck, 2.0 + foot_m, 0.0, HAZARD_NOTHING_BELOW);
    expect_near(100.0 * foot_m * water.product_m2_s, 300.0 * foot_m * foot_m * foot_m, rounding, "300 cfs");
    /* the ideal broad crest: critical depth and the speed of a wave on it */
    size_t ideal = reference_table_find(&table, "item", "critical-flow broad-crested (2/3)^1.5*sqrt(g)");
    deck.weir_coefficient = reference_table_number(&table, ideal, "value_SI");
    water = hazard_water_on_deck(&deck, 2.6, 0.0, HAZARD_NOTHING_BELOW);
    expect_near(water.speed_m_s, sqrt(SECTION_GRAVITY_M_S2 * 0.4), 1e-4,
                "critical speed: the printed coefficient has five digits");
    expect_near(water.depth_m, 0.6, rounding, "no shallower than the head");
    reference_table_clear(&table);
}

/* By hand: H 0.5, Cd 1.6: q = 0.5656854; below 0.4 over the crown: x (1 - 0.8^1.5)^0.385 = 0.6121706. */
static void water_below_drowns_a_weir_and_deepens_its_shallowest_place(void **state)
{
    (void)state;
    struct hazard_deck deck = {.kind = HAZARD_DECK_IS_WEIR, .level_m = 1.95, .weir_coefficient = 1.6};
    struct hazard_water free = hazard_water_on_deck(&deck, 2.45, 0.0, 1.95);
    expect_near(free.product_m2_s, 0.5656854, 1e-6, "free");
    expect_near(free.speed_m_s, 0.5656854 / (1.0 / 3.0), 1e-6, "over the critical depth");
    struct hazard_water drowned = hazard_water_on_deck(&deck, 2.45, 0.0, 2.35);
    double share = pow(1.0 - pow(0.8, 1.5), 0.385);
    expect_near(drowned.product_m2_s, 0.5656854 * share, 1e-6, "drowned");
    expect_near(drowned.speed_m_s, 0.5656854 * share / 0.4, 1e-6, "over the water below");
    assert_true(drowned.depth_m == free.depth_m);
    struct hazard_water still = hazard_water_on_deck(&deck, 2.45, 0.0, 2.9);
    assert_true(still.product_m2_s == 0.0 && still.speed_m_s == 0.0 && still.depth_m == free.depth_m);
    struct hazard_water unknown = hazard_water_on_deck(&deck, 2.45, 0.0, (double)NAN);
    assert_true(unknown.product_m2_s == free.product_m2_s); /* not known is free: too fast rather than too slow */
}

/* A higher level is never less: on a ford, depth, speed and product rise with the normal flow; on a weir likewise. */
static void a_higher_level_is_never_told_as_less(void **state)
{
    (void)state;
    struct hazard_deck weir = {.kind = HAZARD_DECK_IS_WEIR, .level_m = 1.55, .weir_coefficient = 1.66};
    struct hazard_water before[2] = {{0.0, 0.0, 0.0}, {0.0, 0.0, 0.0}};
    for (double stage_m = 1.55; stage_m < 2.6; stage_m += 0.01) {
        double flow_m3s = section_normal_discharge_m3s(&try_plain, 0.0024, stage_m);
        struct hazard_water now[2] = {hazard_water_on_deck(&ford, stage_m, flow_m3s, HAZARD_NOTHING_BELOW),
                                      hazard_water_on_deck(&weir, stage_m, flow_m3s, HAZARD_NOTHING_BELOW)};
        for (size_t i = 0; i < 2; i++) {
            assert_true(now[i].depth_m >= before[i].depth_m && now[i].speed_m_s >= before[i].speed_m_s &&
                        now[i].product_m2_s >= before[i].product_m2_s);
            for (size_t whom = 0; whom < HAZARD_WHOM_COUNT; whom++)
                assert_true(hazard_share_of_limit(hazard_limit_for((enum hazard_whom)whom), &now[i]) >=
                            hazard_share_of_limit(hazard_limit_for((enum hazard_whom)whom), &before[i]));
            before[i] = now[i];
        }
    }
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(vehicle_limits_are_those_published),
        cmocka_unit_test(general_limits_are_those_published),
        cmocka_unit_test(a_limit_is_passed_by_any_of_the_three_and_only_from_above),
        cmocka_unit_test(a_deck_is_dry_up_to_its_level),
        cmocka_unit_test(a_thin_sheet_is_as_fast_as_the_channel_beside_it),
        cmocka_unit_test(a_smooth_deck_in_a_rough_channel_has_the_speed_of_its_sheet),
        cmocka_unit_test(ponded_water_is_slower_in_the_share_of_its_flow),
        cmocka_unit_test(a_deck_on_the_plain_is_slower_than_one_across_the_channel),
        cmocka_unit_test(of_surveyed_panels_the_fastest_counts_unless_one_is_named),
        cmocka_unit_test(a_weir_gives_the_published_flow_per_metre_of_road),
        cmocka_unit_test(water_below_drowns_a_weir_and_deepens_its_shallowest_place),
        cmocka_unit_test(a_higher_level_is_never_told_as_less),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
