/* SPDX-License-Identifier: MIT */
/*
 * Steady profiles against published ones, and against stepping: what the profile solves is what the scheme keeps.
 */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <math.h>

#include "engine/steady_profile.h"
#include "tests/engine/dynamic_channel.h"
#include "tests/engine/reference_table.h"

static const double foot_m = 0.3048;

static double even_flow(double t_s, const void *parameters)
{
    (void)t_s;
    return *(const double *)parameters;
}

/* --- MacDonald, Baines, Nichols and Samuels (1997) --------------------------------------------------------------- */

struct profile {
    const char *file;
    double n;
    double (*depth_m)(double x_m);
};

static double subcritical_m(double x_m)
{
    double u = x_m / 1000.0 - 0.5;
    return cbrt(4.0 / SECTION_GRAVITY_M_S2) * (1.0 + 0.5 * exp(-16.0 * u * u));
}

static double sub_to_super_m(double x_m)
{
    double u = x_m / 1000.0 - 0.5;
    return cbrt(4.0 / SECTION_GRAVITY_M_S2) * (u <= 0.0 ? 1.0 - tanh(3.0 * u) / 3.0 : 1.0 - tanh(6.0 * u) / 6.0);
}

static double jump_m(double x_m)
{
    static const double a[] = {-0.348427, 0.552264, -0.555580};
    double unit = cbrt(4.0 / SECTION_GRAVITY_M_S2);
    if (x_m <= 500.0)
        return unit * (0.9 - exp(-x_m / 250.0) / 6.0);
    double sum = 1.0;
    for (int k = 1; k <= 3; k++)
        sum += a[k - 1] * exp(-20.0 * k * (x_m / 1000.0 - 0.5));
    return unit * (sum + 0.8 * exp(x_m / 1000.0 - 1.0));
}

static const double profile_flow_m3s = 20.0;
static const double profile_width_m = 10.0;

/* The bed whose steady flow the depth is, as the file's header says. */
static double bed_slope(const struct profile *profile, double x_m)
{
    const double step = 0.01;
    double depth = profile->depth_m(x_m);
    double rise = (profile->depth_m(x_m + step) - profile->depth_m(x_m - step)) / (2.0 * step);
    double area = profile_width_m * depth;
    double square = profile_flow_m3s * profile_flow_m3s;
    return (1.0 - square * profile_width_m / (SECTION_GRAVITY_M_S2 * pow(area, 3.0))) * rise +
           square * profile->n * profile->n * pow(profile_width_m + 2.0 * depth, 4.0 / 3.0) / pow(area, 10.0 / 3.0);
}

static void profile_init(struct channel *channel, const struct profile *profile, double cell_m, double step_s)
{
    const struct channel_case from = {
        .section = {.shape = SECTION_RECTANGLE, .bottom_m = profile_width_m, .roughness_n = profile->n},
        .slope_m_per_m = 0.005, /* until the true bed is put in below */
        .length_m = 1000.0,
        .cell_m = cell_m,
        .held_depth_m = profile->depth_m(1000.0),
        .time_step_s = step_s,
        .flood = even_flow,
        .flood_parameters = &profile_flow_m3s,
        .largest_m3s = profile_flow_m3s};
    channel_init(channel, &from);
    for (size_t k = 0; k < channel->branch.interval_count; k++) {
        enum { PARTS = 64 };
        double sum = 0.0;
        for (int part = 0; part < PARTS; part++)
            sum += bed_slope(profile, cell_m * ((double)k + (part + 0.5) / PARTS));
        channel->slope_m_per_m[k] = sum / PARTS;
    }
    dynamic_tree_start_steady(&channel->tree, 1, NULL, &channel->held_depth_m, &channel->state);
}

struct profile_error {
    double depth, flow; /* the worst, relative */
    double mean_depth;
};

static struct profile_error compare_profile(const struct channel *channel, const struct profile *profile,
                                            double cell_m)
{
    struct reference_table table = reference_table_load(profile->file);
    struct profile_error error = {0};
    for (size_t row = 0; row < table.row_count; row++) {
        double x = reference_table_number(&table, row, "x_m");
        size_t node = (size_t)lround(x / cell_m);
        double expected = reference_table_number(&table, row, "depth_m");
        double depth = area_table_depth_m(&channel->table, channel->state.area_m2[node]);
        assert_true(fabs(profile->depth_m(x) / expected - 1.0) < 2e-6); /* our formula is the file's */
        error.depth = fmax(error.depth, fabs(depth / expected - 1.0));
        error.mean_depth += fabs(depth / expected - 1.0) / (double)table.row_count;
        error.flow = fmax(error.flow, fabs(channel->state.discharge_m3s[node] / profile_flow_m3s - 1.0));
    }
    reference_table_clear(&table);
    return error;
}

static void advance_even(struct channel *channel, size_t step_count, double step_s)
{
    for (size_t step = 0; step < step_count; step++)
        dynamic_tree_step(&channel->tree, step_s, 1, &profile_flow_m3s, &channel->held_depth_m, NULL, &channel->state,
                          channel->work, &channel->counts);
}

static void the_published_subcritical_profile_comes_out_and_stays(void **state)
{
    (void)state;
    const struct profile profile = {"macdonald_rect_subcritical.csv", 0.03, subcritical_m};
    static const double cells[] = {5.0, 2.5};
    for (size_t i = 0; i < 2; i++) {
        struct channel channel;
        profile_init(&channel, &profile, cells[i], 10.0);
        struct profile_error start = compare_profile(&channel, &profile, cells[i]);
        advance_even(&channel, 720, 10.0);
        struct profile_error end = compare_profile(&channel, &profile, cells[i]);
        print_message("subcritical, dx %g m: depth within %.2f %% at the start, %.2f %% after two hours, flow %.1e\n",
                      cells[i], 100.0 * start.depth, 100.0 * end.depth, end.flow);
        assert_true(start.depth <= 0.01);
        assert_true(end.depth <= 0.01);
        assert_true(end.flow <= 1e-12);
        channel_clear(&channel);
    }
}

/* From a level pool the flow must find the same profile: not only keep it. */
static void the_published_subcritical_profile_is_found_from_elsewhere(void **state)
{
    (void)state;
    const struct profile profile = {"macdonald_rect_subcritical.csv", 0.03, subcritical_m};
    struct channel channel;
    profile_init(&channel, &profile, 5.0, 10.0);
    for (size_t node = 0; node < channel.branch.interval_count; node++)
        channel.state.area_m2[node] *= 1.35;
    advance_even(&channel, 720, 10.0);
    struct profile_error error = compare_profile(&channel, &profile, 5.0);
    print_message("subcritical, from 35 %% too deep: depth within %.2f %%, flow %.1e\n", 100.0 * error.depth,
                  error.flow);
    assert_true(error.depth <= 0.01);
    assert_true(error.flow <= 0.001);
    channel_clear(&channel);
}

/*
 * Flow that passes through the critical depth is a stated limit, not a claim: partial inertia smears it. What is
 * asserted is only that nothing breaks.
 */
static void transcritical_profiles_are_computed_and_reported(void **state)
{
    (void)state;
    static const struct profile profiles[] = {{"macdonald_rect_sub_to_super.csv", 0.02, sub_to_super_m},
                                              {"macdonald_rect_jump.csv", 0.02, jump_m}};
    for (size_t i = 0; i < 2; i++) {
        struct channel channel;
        profile_init(&channel, &profiles[i], 2.5, 2.0);
        advance_even(&channel, 1800, 2.0);
        struct profile_error error = compare_profile(&channel, &profiles[i], 2.5);
        print_message("%s: depth off by %.1f %% in the mean, %.1f %% at worst; flow %.1e; %zu steps halved, %zu "
                      "replaced of %zu\n",
                      profiles[i].file, 100.0 * error.mean_depth, 100.0 * error.depth, error.flow,
                      channel.counts.halved, channel.counts.replaced, channel.counts.steps);
        for (size_t node = 0; node <= channel.branch.interval_count; node++)
            assert_true(channel.state.area_m2[node] > 0.0 && isfinite(channel.state.discharge_m3s[node]));
        channel_clear(&channel);
    }
}

/* --- Chow (1959), example 10-1 ------------------------------------------------------------------------------------ */

struct backwater {
    struct flow_curve curve;
    struct area_table table;
    double discharge_m3s;
};

/* Manning's constant is 1.49 ft^(1/3)/s there and 1 m^(1/3)/s here, gravity 32.2 ft/s2; its energy coefficient is 1.10. */
static void backwater_init(struct backwater *backwater)
{
    static struct section section = {.shape = SECTION_TRAPEZOID, .side_h_per_v = 2.0};
    section.bottom_m = 20.0 * foot_m;
    section.roughness_n = 0.025 / (1.49 * cbrt(foot_m));
    assert_int_equal(flow_curve_init(&backwater->curve, &section, 0.02, 60000.0), FW_OK);
    assert_int_equal(area_table_init(&backwater->table, &backwater->curve, 1.0), FW_OK);
    backwater->discharge_m3s = 400.0 * foot_m * foot_m * foot_m;
}

static void backwater_clear(struct backwater *backwater)
{
    area_table_clear(&backwater->table);
    flow_curve_clear(&backwater->curve);
}

static double area_one_interval_up(const struct backwater *backwater, double length_m, double area_m2)
{
    const struct steady_interval interval = {.table = &backwater->table,
                                             .length_m = length_m,
                                             .slope_m_per_m = 0.0016,
                                             .momentum_factor = 1.10 * 32.2 * foot_m / SECTION_GRAVITY_M_S2,
                                             .has_inertia = true};
    return steady_profile_area_above_m2(&interval, backwater->discharge_m3s, area_m2, backwater->discharge_m3s);
}

static void the_published_backwater_comes_out_with_fine_steps(void **state)
{
    (void)state;
    struct reference_table table = reference_table_load("chow1959_10_1_direct_step.csv");
    struct backwater backwater;
    backwater_init(&backwater);
    const double step_ft = 1.0;
    double area = area_table_area_at_depth_m2(&backwater.table, 5.0 * foot_m), depth_ft = 5.0, worst = 0.0;
    size_t row = 1;
    for (double x_ft = 0.0; row < table.row_count && x_ft < 3000.0; x_ft += step_ft) {
        area = area_one_interval_up(&backwater, step_ft * foot_m, area);
        double before_ft = depth_ft;
        depth_ft = area_table_depth_m(&backwater.table, area) / foot_m;
        for (; row < table.row_count && reference_table_number(&table, row, "depth_ft") >= depth_ft; row++) {
            double share = (before_ft - reference_table_number(&table, row, "depth_ft")) / (before_ft - depth_ft);
            double reached_ft = x_ft + share * step_ft;
            double expected_ft = reference_table_number(&table, row, "x_exact_ft");
            worst = fmax(worst, fabs(reached_ft / expected_ft - 1.0));
        }
    }
    print_message("backwater, steps of 1 ft: distances within %.3f %% of the exact ones\n", 100.0 * worst);
    assert_int_equal(row, table.row_count);
    assert_true(worst <= 0.005);
    backwater_clear(&backwater);
    reference_table_clear(&table);
}

/* The published steps, 115 to 254 ft: the length that leads from one published depth to the next, by halving. */
static void the_published_backwater_comes_out_with_the_published_steps(void **state)
{
    (void)state;
    struct reference_table table = reference_table_load("chow1959_10_1_direct_step.csv");
    struct backwater backwater;
    backwater_init(&backwater);
    double x_ft = 0.0, worst_ft = 0.0;
    for (size_t row = 1; row < table.row_count; row++) {
        double below = area_table_area_at_depth_m2(&backwater.table,
                                                   reference_table_number(&table, row - 1, "depth_ft") * foot_m);
        double above =
            area_table_area_at_depth_m2(&backwater.table, reference_table_number(&table, row, "depth_ft") * foot_m);
        double low_ft = 0.0, high_ft = 1000.0;
        for (int i = 0; i < 60; i++) {
            double middle_ft = 0.5 * (low_ft + high_ft);
            if (area_one_interval_up(&backwater, middle_ft * foot_m, below) > above)
                low_ft = middle_ft;
            else
                high_ft = middle_ft;
        }
        x_ft += low_ft;
        worst_ft = fmax(worst_ft, fabs(x_ft - reference_table_number(&table, row, "x_direct_step_ft")));
    }
    print_message("backwater, published steps: within %.2f ft of %.0f\n", worst_ft, x_ft);
    /* the published steps balance energy, ours momentum: they part by the square of a step's change of area */
    assert_true(worst_ft <= 1.0);
    backwater_clear(&backwater);
    reference_table_clear(&table);
}

/* --- its own rules ------------------------------------------------------------------------------------------------ */

static void a_bed_above_the_water_below_keeps_a_film(void **state)
{
    (void)state;
    struct backwater backwater;
    backwater_init(&backwater);
    const struct steady_interval interval = {.table = &backwater.table,
                                             .length_m = 300.0,
                                             .slope_m_per_m = 0.02,
                                             .momentum_factor = 1.0,
                                             .has_inertia = true};
    double area = steady_profile_area_above_m2(&interval, 0.0, 3.7, 0.0);
    assert_true(area == backwater.table.smallest_area_m2);
    /* and still water over a bed within its reach lies level */
    const struct steady_interval pool = {.table = &backwater.table,
                                         .length_m = 30.0,
                                         .slope_m_per_m = 0.02,
                                         .momentum_factor = 1.0,
                                         .has_inertia = true};
    double depth = area_table_depth_m(&backwater.table, 13.7);
    area = steady_profile_area_above_m2(&pool, 0.0, 13.7, 0.0);
    assert_true(fabs(area_table_depth_m(&backwater.table, area) - (depth - 0.6)) <= 1e-12);
    backwater_clear(&backwater);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(the_published_subcritical_profile_comes_out_and_stays),
        cmocka_unit_test(the_published_subcritical_profile_is_found_from_elsewhere),
        cmocka_unit_test(transcritical_profiles_are_computed_and_reported),
        cmocka_unit_test(the_published_backwater_comes_out_with_fine_steps),
        cmocka_unit_test(the_published_backwater_comes_out_with_the_published_steps),
        cmocka_unit_test(a_bed_above_the_water_below_keeps_a_film),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
