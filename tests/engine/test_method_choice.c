/* SPDX-License-Identifier: MIT */
#include "engine/method.h"

#include <math.h>
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
/* after the four above, which it needs */
#include <cmocka.h>

#include "tests/engine/reference_table.h"

/* --- published numbers -------------------------------------------------------------------------------------------- */

/* The row that has this text in its first column, the text itself. */
static const char *criterion(const struct reference_table *table, const char *part, const char **limit_out)
{
    for (size_t row = 1; row <= table->row_count; row++) {
        const char *text = table->cell[row * table->column_count];
        *limit_out = table->cell[row * table->column_count + 1];
        if (strstr(text, part) != NULL)
            return text;
    }
    fail_msg("tests/reference/%s: no row with '%s'", table->name, part);
    return NULL;
}

/* tests/reference/wave_model_applicability.csv: Ponce, Li and Simons (1978), with the worked numbers N 162 and M 195. */
static void the_published_numbers_are_met_by_the_worked_reaches(void **state)
{
    (void)state;
    struct reference_table table = reference_table_load("wave_model_applicability.csv");
    const char *limit = NULL;
    double hours, slope, velocity, depth, published, below;
    const char *text = criterion(&table, "V=1.5", &limit);
    assert_int_equal(sscanf(text, "worked: tr=%lf h, S0=%lf, V=%lf m/s, d=%lf m", &hours, &slope, &velocity, &depth),
                     4);
    assert_int_equal(sscanf(limit, "N = %lf > %lf", &published, &below), 2);
    double kinematic = method_kinematic_number(hours * 3600.0, slope, velocity, depth);
    assert_true(fabs(kinematic - published) < 1e-9); /* 162 exactly */
    assert_true(below == METHOD_KINEMATIC_LIMIT);

    text = criterion(&table, "g=9.81", &limit);
    assert_int_equal(sscanf(text, "worked: tr=%lf h, S0=%lf, d=%lf m", &hours, &slope, &depth), 3);
    assert_int_equal(sscanf(limit, "M = %lf > %lf", &published, &below), 2);
    double diffusion = method_diffusion_number(hours * 3600.0, slope, depth);
    assert_true(fabs(diffusion - published) < 0.5);                                    /* printed in whole numbers */
    assert_true(fabs(diffusion * sqrt(9.81 / SECTION_GRAVITY_M_S2) - 195.30) < 0.005); /* recomputed, its g is 9.81 */
    assert_true(below == METHOD_DIFFUSION_LIMIT);
    reference_table_clear(&table);
}

/* --- steps -------------------------------------------------------------------------------------------------------- */

static void the_time_step_divides_the_data_interval_and_is_a_fortieth_of_the_rise_at_most(void **state)
{
    (void)state;
    static const struct {
        double rise_s, data_interval_s, step_s;
    } rows[] = {
        {36000.0, 900.0, 60.0},                                /* slow: a minute */
        {36000.0, 420.0, 60.0}, {36000.0, 130.0, 130.0 / 3.0}, /* no whole divisor from 31 to 60 */
        {36000.0, 61.0, 30.5},                                 /* nor here */
        {36000.0, 37.0, 37.0},                                 /* itself */
        {36000.0, 7.25, 7.25},                                 /* likewise */
        {1400.0, 900.0, 30.0},                                 /* at most 35 s */
        {1000.0, 300.0, 25.0},                                 /* exactly a fortieth */
        {37.0, 900.0, 1.0},                                    /* less than a second: the shortest there is */
    };
    for (size_t i = 0; i < sizeof rows / sizeof *rows; i++) {
        struct method_flood flood = {3.0, 41.0, rows[i].rise_s};
        assert_true(method_time_step_s(&flood, rows[i].data_interval_s) == rows[i].step_s);
    }
    assert_true(method_time_step_s(NULL, 900.0) == 60.0);
    assert_true(method_time_step_s(&(struct method_flood){0.0, 0.0, 0.0}, 300.0) == 60.0);
}

/* --- the choice --------------------------------------------------------------------------------------------------- */

/* A wide river: c = 5/3 V and D = Q / (2 B S0) nearly, so that normal stages come D/c^2 early, by hand. */
static void levels_that_would_come_early_call_for_the_full_equations(void **state)
{
    (void)state;
    static const struct section wide = {.shape = SECTION_WIDE, .bottom_m = 47.0, .roughness_n = 0.034};
    static const struct {
        double slope, length_m;
        enum method_reason reason;
    } rows[] = {
        {0.004, 31e3, METHOD_WITHIN_LIMIT},   /* early by less than a minute */
        {0.0011, 180e3, METHOD_WITHIN_LIMIT}, /* early by more, but by less than a hundredth of the travel time */
        {0.0011, 31e3, METHOD_EARLY_LEVELS},
        {0.0002, 180e3, METHOD_BEYOND_LIMIT},
    };
    const struct method_flood flood = {61.0, 420.0, 40000.0};
    for (size_t i = 0; i < sizeof rows / sizeof *rows; i++) {
        struct flow_curve curve;
        double root_slope = sqrt(rows[i].slope), depth_m = 0.0;
        assert_int_equal(flow_curve_init(&curve, &wide, 1e-3 / root_slope, 1e4 / root_slope), FW_OK);
        const struct method_reach reach = {
            .curve = &curve, .length_m = rows[i].length_m, .slope_m_per_m = rows[i].slope};
        struct method_choice choice;
        method_choose(&reach, &flood, &choice);
        assert_int_equal(section_normal_depth_m(&wide, rows[i].slope, flood.peak_m3s, &depth_m), FW_OK);
        double celerity = 5.0 / 3.0 * flood.peak_m3s / (wide.bottom_m * depth_m);
        double early_s = flood.peak_m3s / (2.0 * wide.bottom_m * rows[i].slope * celerity * celerity);
        print_message("S0 %g, %.0f km: %s; levels %.0f s early, %.2f of what is allowed, storage number %.5f\n",
                      rows[i].slope, rows[i].length_m / 1000.0, method_reason_text(choice.reason), choice.early_s,
                      choice.early_number, choice.storage_number);
        assert_int_equal(choice.reason, rows[i].reason);
        assert_true((choice.early_number > 1.0) == (rows[i].reason >= METHOD_BEYOND_LIMIT));
        /* D has an inertia term, 1 - (4/9) Fr^2; the flow where it is most may lie below the peak */
        assert_true(choice.early_s > 0.7 * early_s && choice.early_s < 1.01 * early_s);
        flow_curve_clear(&curve);
    }
}

/* Wide, 47 m, so that depth and speed follow by hand; flat reaches with little flow are slow. */
struct choice_case {
    const char *shows;
    double roughness_n, slope, length_m;
    struct method_flood flood;
    bool is_level_held, has_control;
    double raise_share;
    enum method_reason reason;
    enum network_method method;
};

#define STORAGE NETWORK_MUSKINGUM_CUNGE
#define FULL NETWORK_DYNAMIC
#define SLOW_FLOOD                                                                                                   \
    {                                                                                                                \
        61.0, 420.0, 40000.0                                                                                         \
    }
#define SMALL_FLOOD                                                                                                  \
    {                                                                                                                \
        5.0, 78.0, 9000.0                                                                                            \
    }

static const struct choice_case cases[] = {
    {"nothing known", 0.034, 0.004, 31e3, {0.0, 0.0, 0.0}, false, false, 0.0, METHOD_NO_FLOOD, STORAGE},
    {"steady", 0.034, 0.0004, 31e3, {61.0, 61.0, INFINITY}, false, false, 0.0, METHOD_WITHIN_LIMIT, STORAGE},
    {"dry", 0.034, 0.0004, 31e3, {0.0, 0.0, INFINITY}, false, false, 0.0, METHOD_WITHIN_LIMIT, STORAGE},
    {"enough", 0.034, 0.004, 31e3, SLOW_FLOOD, false, false, 0.0, METHOD_WITHIN_LIMIT, STORAGE},
    {"flat", 0.034, 0.0002, 180e3, SLOW_FLOOD, false, false, 0.0, METHOD_BEYOND_LIMIT, FULL},
    {"held, no flood", 0.034, 0.004, 31e3, {0.0, 0.0, 0.0}, true, false, 0.0, METHOD_HELD_LEVEL, FULL},
    {"held, enough otherwise", 0.034, 0.004, 31e3, SLOW_FLOOD, true, false, 0.0, METHOD_HELD_LEVEL, FULL},
    {"held, fast: not forgotten", 0.034, 0.03, 31e3, SMALL_FLOOD, true, false, 0.0, METHOD_HELD_LEVEL, FULL},
    {"raised by 11 %", 0.034, 0.004, 31e3, SLOW_FLOOD, false, true, 0.11, METHOD_BACKWATER, FULL},
    {"raised by 9 %", 0.034, 0.004, 31e3, SLOW_FLOOD, false, true, 0.09, METHOD_WITHIN_LIMIT, STORAGE},
    {"raised by what is not computed", 0.034, 0.004, 31e3, SLOW_FLOOD, false, false, 0.5, METHOD_WITHIN_LIMIT,
     STORAGE},
    {"l 26 m, 800 l 21 km", 0.06, 0.01, 31e3, SMALL_FLOOD, false, true, 0.5, METHOD_TOO_STEEP, STORAGE},
    {"the same, shorter", 0.06, 0.01, 19e3, SMALL_FLOOD, false, true, 0.5, METHOD_BACKWATER, FULL},
    {"Fr 1.2", 0.034, 0.02, 11e3, SMALL_FLOOD, false, true, 0.5, METHOD_TOO_FAST, STORAGE},
};

static void every_reason_is_given_where_it_holds(void **state)
{
    (void)state;
    bool is_given[METHOD_REASON_COUNT] = {[METHOD_STATED] = true /* by the network */,
                                          [METHOD_EARLY_LEVELS] = true /* below */,
                                          [METHOD_STRUCTURE] = true /* by the network */};
    for (size_t i = 0; i < sizeof cases / sizeof *cases; i++) {
        const struct choice_case *row = &cases[i];
        const struct section wide = {.shape = SECTION_WIDE, .bottom_m = 47.0, .roughness_n = row->roughness_n};
        struct flow_curve curve;
        struct method_choice choice;
        double root_slope = sqrt(row->slope);
        assert_int_equal(flow_curve_init(&curve, &wide, 1e-3 / root_slope, 1e4 / root_slope), FW_OK);
        const struct method_reach reach = {.curve = &curve,
                                           .length_m = row->length_m,
                                           .slope_m_per_m = row->slope,
                                           .is_level_held = row->is_level_held,
                                           .has_control = row->has_control,
                                           .raise_share = row->raise_share};
        method_choose(&reach, &row->flood, &choice);
        print_message("%s: %s, %s; Fr %.2f, l %.0f m\n", row->shows, method_name(choice.method),
                      method_reason_text(choice.reason), choice.froude, choice.diffusion_length_m);
        assert_int_equal(choice.reason, row->reason);
        assert_int_equal(choice.method, row->method);
        assert_int_equal(choice.advised, row->method);
        assert_true(choice.path_length_m == row->length_m);
        assert_true(isnan(choice.storage_number) == !(row->flood.peak_m3s > 0.0));
        is_given[choice.reason] = true;
        flow_curve_clear(&curve);
    }
    for (size_t reason = 0; reason < METHOD_REASON_COUNT; reason++) {
        assert_true(is_given[reason]);
        assert_string_not_equal(method_reason_text((enum method_reason)reason), "?");
    }
    assert_string_equal(method_reason_text(METHOD_REASON_COUNT), "?");
}

/*
 * A plain of eight times the channel's width, its bank full at 22.8 m3/s: a wave just above it is several times slower, and its
 * number several times as large, than at the banks. The mean over the flood feels it, by how much of the flood is there.
 */
static void the_whole_range_of_flows_counts_and_the_worst_is_told(void **state)
{
    (void)state;
    static const struct section section = {.shape = SECTION_RECTANGLE,
                                           .bottom_m = 8.0,
                                           .roughness_n = 0.04,
                                           .has_plain = true,
                                           .plain_above_m = 1.8,
                                           .plain_width_m = 60.0,
                                           .plain_roughness_n = 0.07};
    const double slope = 0.003, bank_full_m3s = section_normal_discharge_m3s(&section, slope, 1.8);
    const double peaks_m3s[] = {bank_full_m3s, 1.06 * bank_full_m3s, 1.5 * bank_full_m3s};
    struct flow_curve curve;
    struct method_choice choices[3];
    assert_int_equal(flow_curve_init(&curve, &section, 1e-3 / sqrt(slope), 1e4 / sqrt(slope)), FW_OK);
    const struct method_reach reach = {.curve = &curve, .length_m = 12e3, .slope_m_per_m = slope};
    for (size_t i = 0; i < 3; i++) {
        method_choose(&reach, &(struct method_flood){3.0, peaks_m3s[i], 5400.0}, &choices[i]);
        print_message("3 to %.1f m3/s: number %.4f, worst %.4f at %.1f m3/s\n", peaks_m3s[i],
                      choices[i].storage_number, choices[i].worst_number, choices[i].at_discharge_m3s);
        assert_true(choices[i].worst_number >= choices[i].storage_number);
        double by_hand = choices[i].spread_number * sqrt(choices[i].spread_number) * choices[i].length_number;
        assert_true(fabs(choices[i].worst_number / by_hand - 1.0) < 1e-12);
    }
    assert_true(choices[0].worst_number < 1.5 * choices[0].storage_number); /* within banks it hardly varies */
    for (size_t i = 1; i < 3; i++) {
        assert_true(choices[i].at_discharge_m3s > bank_full_m3s &&
                    choices[i].at_discharge_m3s < 1.15 * bank_full_m3s);
        assert_true(choices[i].worst_number > 5.0 * choices[0].worst_number);
        assert_true(choices[i].storage_number > 1.5 * choices[i - 1].storage_number);
    }
    flow_curve_clear(&curve);
}

/* --- floods ------------------------------------------------------------------------------------------------------- */

static void the_flood_of_a_series_is_its_height_over_its_steepest_rise(void **state)
{
    (void)state;
    static const double time_s[] = {0.0, 600.0, 900.0, 1900.0, 3000.0, 9000.0};
    static const double rising[] = {7.0, 5.0, 6.5, 31.0, 29.0, 3.0}; /* steepest: 24.5 in 1,000 s */
    struct method_flood flood = method_flood_of(6, time_s, rising);
    assert_true(flood.base_m3s == 5.0 && flood.peak_m3s == 31.0); /* the 3 comes later */
    assert_true(fabs(flood.rise_s - 26.0 / 0.0245) < 1e-9);
    static const double falling[] = {9.0, 7.0, 6.0, 5.0, 4.0, 2.0};
    flood = method_flood_of(6, time_s, falling);
    assert_true(flood.base_m3s == 9.0 && flood.peak_m3s == 9.0 && isinf(flood.rise_s));
    flood = method_flood_of(1, time_s, falling);
    assert_true(flood.peak_m3s == 9.0 && isinf(flood.rise_s));
}

/* --- backwater ---------------------------------------------------------------------------------------------------- */

/*
 * Chow (1959), example 10-1, in feet. The energy coefficient is 1.10 there and 1 here, which moves a depth by up to 0.1 of the
 * velocity head, 0.02 ft.
 */
static void a_published_backwater_curve_is_followed_upstream(void **state)
{
    (void)state;
    static const double ft = 0.3048;
    struct reference_table table = reference_table_load("chow1959_10_1_direct_step.csv");
    static const struct section section = {
        .shape = SECTION_TRAPEZOID, .bottom_m = 20.0 * 0.3048, .side_h_per_v = 2.0, .roughness_n = 0.025};
    double discharge_m3s = 400.0 * ft * ft * ft, normal_m = 0.0;
    assert_int_equal(section_normal_depth_m(&section, 0.0016, discharge_m3s, &normal_m), FW_OK);
    assert_true(fabs(normal_m / ft - 3.36) < 0.01); /* printed */
    for (size_t row = 1; row < table.row_count; row++) {
        double depth_ft = reference_table_number(&table, row, "depth_ft");
        double at_ft = reference_table_number(&table, row, "x_exact_ft");
        double found = method_backwater_depth_m(&section, 0.0016, at_ft * ft, discharge_m3s, normal_m, 5.0 * ft) / ft;
        assert_true(fabs(found - depth_ft) < 0.02);
    }
    assert_true(method_backwater_depth_m(&section, 0.0016, 1e6, discharge_m3s, normal_m, 5.0 * ft) == normal_m);
    assert_true(method_backwater_depth_m(&section, 0.0016, 100.0, discharge_m3s, normal_m, 0.9 * normal_m) ==
                normal_m);
    /* a torrent: the raised level ends in a jump, normal flow comes up to it */
    assert_int_equal(section_normal_depth_m(&section, 0.09, discharge_m3s, &normal_m), FW_OK);
    assert_true(method_backwater_depth_m(&section, 0.09, 300.0, discharge_m3s, normal_m, 5.0 * ft) == normal_m);
    reference_table_clear(&table);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(the_published_numbers_are_met_by_the_worked_reaches),
        cmocka_unit_test(the_time_step_divides_the_data_interval_and_is_a_fortieth_of_the_rise_at_most),
        cmocka_unit_test(every_reason_is_given_where_it_holds),
        cmocka_unit_test(the_whole_range_of_flows_counts_and_the_worst_is_told),
        cmocka_unit_test(the_flood_of_a_series_is_its_height_over_its_steepest_rise),
        cmocka_unit_test(a_published_backwater_curve_is_followed_upstream),
        cmocka_unit_test(levels_that_would_come_early_call_for_the_full_equations),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
