/* SPDX-License-Identifier: MIT */
/*
 * One reach by the full equations: what must hold whatever the wave. How near the waves themselves come to others'
 * solutions is in test_dynamic_waves.c.
 */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <math.h>
#include <stdio.h>

#include "tests/engine/dynamic_channel.h"
#include "tests/engine/reference_table.h"
#include "tests/engine/route_one_reach.h"
#include "tests/engine/try_sections.h"

static double even_flow(double t_s, const void *parameters)
{
    (void)t_s;
    return *(const double *)parameters;
}

struct pulse {
    double base_m3s, rise_m3s, from_s, to_s;
};

static double pulse_m3s(double t_s, const void *parameters)
{
    const struct pulse *pulse = parameters;
    return pulse->base_m3s + (t_s >= pulse->from_s && t_s < pulse->to_s ? pulse->rise_m3s : 0.0);
}

/* --- steady flow -------------------------------------------------------------------------------------------------- */

static void steady_uniform_flow_stays_exactly(void **state)
{
    (void)state;
    static const double slopes[] = {0.00013, 0.0023, 0.017};
    for (size_t s = 0; s < TRY_SECTION_COUNT; s++)
        for (size_t i = 0; i < 3; i++)
            for (double flow = 0.037; flow < 700.0; flow *= 7.3) {
                const struct channel_case even = {.section = *try_sections[s].section,
                                                  .slope_m_per_m = slopes[i],
                                                  .length_m = 7300.0,
                                                  .cell_m = 365.0,
                                                  .time_step_s = 60.0,
                                                  .duration_s = 6000.0,
                                                  .flood = even_flow,
                                                  .flood_parameters = &flow,
                                                  .largest_m3s = 700.0};
                struct channel_result routed = channel_run(&even);
                for (size_t step = 0; step < routed.count; step++)
                    if (!(fabs(routed.discharge_m3s[step] - flow) <= 1e-11 * flow) ||
                        !(fabs(routed.depth_m[step] - routed.depth_m[0]) <= 1e-11 * routed.depth_m[0]))
                        fail_msg("%s, S0 %g, %g m3/s: step %zu: flow off by %g, depth by %g", try_sections[s].name,
                                 slopes[i], flow, step, routed.discharge_m3s[step] / flow - 1.0,
                                 routed.depth_m[step] / routed.depth_m[0] - 1.0);
                double normal = 0.0;
                assert_int_equal(section_normal_depth_m(&even.section, slopes[i], flow, &normal), FW_OK);
                double falls_from;
                if (!section_conveyance_falls(&even.section, &falls_from))
                    assert_true(fabs(routed.depth_m[0] / normal - 1.0) <= 0.001);
                assert_int_equal(routed.counts.halved, 0);
                channel_result_clear(&routed);
            }
}

/* Backwater from a raised stage, side inflow on the way: steady from the first step on. */
static void a_raised_stage_starts_from_its_backwater_and_stays(void **state)
{
    (void)state;
    for (size_t s = 0; s < TRY_SECTION_COUNT; s++)
        for (int is_diffusive = 0; is_diffusive < 2; is_diffusive++) {
            static const double flow = 23.7;
            const struct channel_case raised = {.section = *try_sections[s].section,
                                                .slope_m_per_m = 0.0011,
                                                .length_m = 9000.0,
                                                .cell_m = 150.0,
                                                .held_depth_m = 5.3,
                                                .time_step_s = 60.0,
                                                .duration_s = 12000.0,
                                                .flood = even_flow,
                                                .flood_parameters = &flow,
                                                .side_m3s = 4.1,
                                                .is_diffusive = is_diffusive,
                                                .largest_m3s = 100.0};
            struct channel_result routed = channel_run(&raised);
            for (size_t step = 0; step < routed.count; step++) {
                assert_true(fabs(routed.discharge_m3s[step] - 27.8) <= 1e-9);
                assert_true(fabs(routed.depth_m[step] - 5.3) <= 1e-9);
            }
            assert_true(fabs(routed.held_after_m3 / routed.held_before_m3 - 1.0) <= 1e-12);
            assert_int_equal(routed.counts.halved, 0);
            channel_result_clear(&routed);
        }
}

/* --- volume ------------------------------------------------------------------------------------------------------- */

static void check_volume(const char *name, const struct channel_case *from, struct dynamic_counts *sum,
                         double *worst_imbalance)
{
    struct channel_result routed = channel_run(from);
    if (!(fabs(routed.imbalance) <= 1e-12))
        fail_msg("%s, S0 %g: volume off by %g", name, from->slope_m_per_m, routed.imbalance);
    if (!(routed.smallest_area_m2 > 0.0))
        fail_msg("%s, S0 %g: area %g", name, from->slope_m_per_m, routed.smallest_area_m2);
    for (size_t i = 0; i < routed.count; i++)
        assert_true(isfinite(routed.discharge_m3s[i]));
    *worst_imbalance = fmax(*worst_imbalance, fabs(routed.imbalance));
    sum->steps += routed.counts.steps;
    sum->halved += routed.counts.halved;
    sum->without_inertia += routed.counts.without_inertia;
    sum->replaced += routed.counts.replaced;
    channel_result_clear(&routed);
}

static void a_flood_conserves_its_volume_in_every_section(void **state)
{
    (void)state;
    static const struct gamma_flood flood = {7.3, 143.0, 3.1 * 3600.0, 5.0};
    static const double slopes[] = {0.0002, 0.0019, 0.011};
    struct dynamic_counts sum = {0};
    double worst = 0.0;
    for (size_t s = 0; s < TRY_SECTION_COUNT; s++)
        for (size_t i = 0; i < 3; i++)
            for (int variant = 0; variant < 4; variant++) {
                const struct channel_case wave = {.section = *try_sections[s].section,
                                                  .slope_m_per_m = slopes[i],
                                                  .length_m = 11000.0,
                                                  .cell_m = 220.0,
                                                  .extension_m = 2200.0,
                                                  .held_depth_m = variant == 2 ? 3.9 : 0.0,
                                                  .time_step_s = 120.0,
                                                  .duration_s = 12.0 * 3600.0,
                                                  .flood = gamma_flood_m3s,
                                                  .flood_parameters = &flood,
                                                  .side_m3s = variant == 1 ? 5.7 : 0.0,
                                                  .is_diffusive = variant == 3,
                                                  .largest_m3s = 150.0};
                check_volume(try_sections[s].name, &wave, &sum, &worst);
            }
    print_message("floods: worst volume error %.1e of inflow; of %zu steps %zu halved, %zu without inertia, %zu "
                  "replaced\n",
                  worst, sum.steps, sum.halved, sum.without_inertia, sum.replaced);
}

/* 150 m3/s at once into a dry bed, and off again: no scheme's wave, so every means of rescue is called upon. */
static void a_square_pulse_into_a_dry_bed_conserves_its_volume(void **state)
{
    (void)state;
    static const struct pulse pulse = {0.0, 150.0, 1800.0, 9000.0};
    static const double slopes[] = {0.0002, 0.0019, 0.011};
    struct dynamic_counts sum = {0};
    double worst = 0.0;
    for (size_t s = 0; s < TRY_SECTION_COUNT; s++)
        for (size_t i = 0; i < 3; i++)
            for (int is_diffusive = 0; is_diffusive < 2; is_diffusive++) {
                const struct channel_case wave = {.section = *try_sections[s].section,
                                                  .slope_m_per_m = slopes[i],
                                                  .length_m = 6000.0,
                                                  .cell_m = 150.0,
                                                  .extension_m = 1500.0,
                                                  .time_step_s = 60.0,
                                                  .duration_s = 5.0 * 3600.0,
                                                  .flood = pulse_m3s,
                                                  .flood_parameters = &pulse,
                                                  .is_diffusive = is_diffusive,
                                                  .largest_m3s = 150.0};
                check_volume(try_sections[s].name, &wave, &sum, &worst);
            }
    print_message("pulses: worst volume error %.1e of inflow; of %zu steps %zu halved, %zu without inertia, %zu "
                  "replaced\n",
                  worst, sum.steps, sum.halved, sum.without_inertia, sum.replaced);
    assert_true(sum.halved > 0 && sum.without_inertia > 0 && sum.replaced > 0); /* each was put to the test */
}

/* --- random rivers ------------------------------------------------------------------------------------------------ */

static uint64_t next_random(uint64_t *seed)
{
    *seed ^= *seed << 13;
    *seed ^= *seed >> 7;
    *seed ^= *seed << 17;
    return *seed;
}

static double draw(uint64_t *seed, double low, double high)
{
    return low + (high - low) * ((double)(next_random(seed) >> 11) / 9007199254740992.0);
}

static void random_rivers_under_random_pulses_stay_wet_and_conserve_volume(void **state)
{
    (void)state;
    uint64_t seed = 20261201;
    struct dynamic_counts sum = {0};
    double worst = 0.0;
    for (int run = 0; run < 150; run++) {
        size_t s = next_random(&seed) % TRY_SECTION_COUNT;
        const struct pulse pulse = {draw(&seed, 0.0, 1.0) < 0.3 ? 0.0 : draw(&seed, 0.1, 40.0),
                                    draw(&seed, 1.0, 300.0), draw(&seed, 0.0, 3000.0), draw(&seed, 3000.0, 9000.0)};
        double cell = pow(10.0, draw(&seed, 1.3, 2.9));
        const struct channel_case wave = {.section = *try_sections[s].section,
                                          .slope_m_per_m = pow(10.0, draw(&seed, -4.0, -1.7)),
                                          .length_m = 20.0 * cell,
                                          .cell_m = cell,
                                          .extension_m = 3.0 * cell,
                                          .held_depth_m = draw(&seed, 0.0, 1.0) < 0.3 ? draw(&seed, 0.3, 6.0) : 0.0,
                                          .time_step_s = draw(&seed, 10.0, 600.0),
                                          .duration_s = 12000.0,
                                          .flood = pulse_m3s,
                                          .flood_parameters = &pulse,
                                          .side_m3s = draw(&seed, 0.0, 1.0) < 0.3 ? draw(&seed, 0.0, 9.0) : 0.0,
                                          .is_diffusive = draw(&seed, 0.0, 1.0) < 0.3,
                                          .largest_m3s = 300.0};
        char name[64];
        snprintf(name, sizeof name, "run %d (seed 20261201), %s", run, try_sections[s].name);
        check_volume(name, &wave, &sum, &worst);
    }
    print_message("random rivers: worst volume error %.1e of inflow; of %zu steps %zu halved, %zu without inertia, "
                  "%zu replaced\n",
                  worst, sum.steps, sum.halved, sum.without_inertia, sum.replaced);
}

/* --- outlets ------------------------------------------------------------------------------------------------------ */

static const struct gamma_flood backwater_flood = {30.0, 170.0, 10.0 * 3600.0, 5.0};

static struct channel_case flat_case(void)
{
    return (struct channel_case){.section = {.shape = SECTION_RECTANGLE, .bottom_m = 30.0, .roughness_n = 0.033},
                                 .slope_m_per_m = 0.0003,
                                 .length_m = 20e3,
                                 .cell_m = 200.0,
                                 .extension_m = 40e3,
                                 .time_step_s = 60.0,
                                 .duration_s = 40.0 * 3600.0,
                                 .flood = gamma_flood_m3s,
                                 .flood_parameters = &backwater_flood,
                                 .largest_m3s = 200.0};
}

/* A long channel cut off at 20 km, the level there given as it was: the flow there must be as it was. */
static void a_given_stage_series_stands_for_the_river_below(void **state)
{
    (void)state;
    struct channel_case from = flat_case();
    struct channel_result whole = channel_run(&from);
    struct channel cut;
    from.extension_m = 0.0;
    from.held_depth_m = whole.depth_m[0];
    channel_init(&cut, &from);
    double worst = 0.0;
    for (size_t step = 1; step < whole.count; step++) {
        dynamic_tree_step(&cut.tree, from.time_step_s, 1, &whole.inflow_m3s[step], &whole.depth_m[step], NULL,
                          &cut.state, cut.work, &cut.counts);
        worst = fmax(worst, fabs(cut.state.discharge_m3s[cut.place] - whole.discharge_m3s[step]));
    }
    print_message("cut at 20 km: worst flow %.1e m3/s\n", worst);
    assert_true(worst <= 0.005); /* one iteration leaves the square of 2 % */
    channel_clear(&cut);
    channel_result_clear(&whole);
}

/* How far the end must lie from the place of interest, against l = D / c at the peak, about 5.5 km here. */
static void a_short_extension_costs_accuracy_and_a_long_one_none(void **state)
{
    (void)state;
    struct channel_case from = flat_case();
    struct channel_result whole = channel_run(&from);
    struct flood_peak expected = flood_peak_of(whole.count, whole.discharge_m3s, from.time_step_s);
    static const double extensions_m[] = {0.0, 7e3, 14e3, 30e3};
    double peak_error[4], time_error[4];
    for (size_t i = 0; i < 4; i++) {
        from.extension_m = extensions_m[i];
        struct channel_result routed = channel_run(&from);
        struct flood_peak peak = flood_peak_of(routed.count, routed.discharge_m3s, from.time_step_s);
        peak_error[i] = peak.discharge_m3s / expected.discharge_m3s - 1.0;
        time_error[i] = peak.time_s - expected.time_s;
        print_message("normal depth %.0f km beyond: peak %+.2f %%, %+.1f min\n", extensions_m[i] / 1000.0,
                      100.0 * peak_error[i], time_error[i] / 60.0);
        channel_result_clear(&routed);
    }
    assert_true(fabs(peak_error[0]) > 0.002); /* it is needed */
    assert_true(fabs(peak_error[3]) <= 0.0005 && fabs(time_error[3]) <= 60.0);
    channel_result_clear(&whole);
}

/* A structure rated as the channel's own normal depth is that outlet. */
static void a_rating_of_normal_depth_is_normal_depth(void **state)
{
    (void)state;
    enum { ROWS = 600 };
    static double depth_m[ROWS], discharge_m3s[ROWS];
    struct channel_case from = flat_case();
    from.extension_m = 0.0;
    struct channel_result normal = channel_run(&from);
    struct channel rated;
    channel_init(&rated, &from);
    for (size_t i = 0; i < ROWS; i++) {
        depth_m[i] = 0.02 * (double)i;
        discharge_m3s[i] = section_normal_discharge_m3s(&from.section, from.slope_m_per_m, depth_m[i]);
    }
    const struct stage_opening opening = {
        .row_count = ROWS, .depth_m = depth_m, .discharge_m3s = discharge_m3s, .open_share = 1.0};
    const struct stage_structure structure = {1, &opening};
    rated.branch.foot = DYNAMIC_FOOT_STRUCTURE;
    rated.branch.structure = &structure;
    assert_int_equal(dynamic_tree_check(&rated.tree), FW_OK);
    dynamic_tree_start_steady(&rated.tree, 1, NULL, NULL, &rated.state);
    double worst = 0.0;
    for (size_t step = 1; step < normal.count; step++) {
        dynamic_tree_step(&rated.tree, from.time_step_s, 1, &normal.inflow_m3s[step], NULL, NULL, &rated.state,
                          rated.work, &rated.counts);
        worst = fmax(worst, fabs(rated.state.discharge_m3s[rated.place] / normal.discharge_m3s[step] - 1.0));
    }
    print_message("rated as normal depth: within %.4f %%\n", 100.0 * worst);
    assert_true(worst <= 0.0005); /* the table's straight lines */
    channel_clear(&rated);
    channel_result_clear(&normal);
}

/* A tide that rises by 2.6 m in six hours, faster than the river fills: water runs upstream, and none is lost. */
static void a_tide_turns_the_flow_around_and_no_water_is_lost(void **state)
{
    (void)state;
    struct channel_case from = flat_case();
    static const double river = 9.3;
    from.slope_m_per_m = 0.00008;
    from.extension_m = 0.0;
    from.held_depth_m = 2.4;
    from.flood = even_flow;
    from.flood_parameters = &river;
    struct channel channel;
    channel_init(&channel, &from);
    double held = channel_volume_m3(&channel), in = 0.0, out = 0.0, lowest = 0.0;
    for (size_t step = 1; step <= 2880; step++) {
        double depth = 3.7 - 1.3 * cos(6.283185307179586 * (double)step / 745.0);
        dynamic_tree_step(&channel.tree, 60.0, 1, &river, &depth, NULL, &channel.state, channel.work,
                          &channel.counts);
        in += channel.state.passed_m3[0];
        out += channel.state.passed_m3[channel.place];
        lowest = fmin(lowest, channel.state.discharge_m3s[channel.place]);
        assert_true(fabs(area_table_depth_m(&channel.table, channel.state.area_m2[channel.place]) - depth) <= 1e-9);
    }
    print_message("tide: flow at the mouth down to %.1f m3/s; volume error %.1e\n", lowest,
                  (in - out - (channel_volume_m3(&channel) - held)) / in);
    assert_true(lowest < -20.0);
    assert_true(fabs(in - out - (channel_volume_m3(&channel) - held)) <= 1e-12 * in);
    assert_int_equal(channel.counts.halved, 0);
    channel_clear(&channel);
}

/* --- dam breaks: a stated limit ----------------------------------------------------------------------------------- */

/* Mean error of depth over the published places, as a share of the depth above the dam. */
static double dam_break_error(const struct channel *channel, double above_m, double below_m, double *t_out_s)
{
    struct reference_table table = reference_table_load("dam_break_ritter_stoker.csv");
    double sum = 0.0;
    size_t compared = 0;
    for (size_t row = 0; row < table.row_count; row++) {
        if (reference_table_number(&table, row, "hl_m") != above_m ||
            reference_table_number(&table, row, "hr_m") != below_m)
            continue;
        *t_out_s = reference_table_number(&table, row, "t_s");
        if (channel == NULL)
            break;
        size_t node = (size_t)lround(200.0 + reference_table_number(&table, row, "x_m"));
        assert_true(node <= channel->place);
        sum += fabs(channel->state.area_m2[node] - reference_table_number(&table, row, "depth_m"));
        compared++;
    }
    reference_table_clear(&table);
    assert_true(channel == NULL || compared > 10);
    return channel == NULL ? 0.0 : sum / (double)compared / above_m;
}

/* Partial inertia is no dam-break solver; what is asserted is that nothing breaks and no water is lost. */
static void dam_breaks_are_computed_and_reported(void **state)
{
    (void)state;
    static const double below_m[] = {0.0, 1.0, 2.0};
    static const double above_m[] = {10.0, 10.0, 5.0};
    static const double nothing = 0.0, step_s = 0.05;
    for (size_t i = 0; i < 3; i++) {
        const struct channel_case from = {.section = {.shape = SECTION_WIDE, .bottom_m = 1.0, .roughness_n = 1e-4},
                                          .length_m = 400.0,
                                          .cell_m = 1.0,
                                          .held_depth_m = fmax(below_m[i], 0.01),
                                          .flood = even_flow,
                                          .flood_parameters = &nothing,
                                          .largest_m3s = 100.0};
        struct channel channel;
        double duration_s = 0.0;
        channel_init(&channel, &from);
        dam_break_error(NULL, above_m[i], below_m[i], &duration_s);
        for (size_t node = 0; node <= channel.place; node++)
            channel.state.area_m2[node] = node < 200 ? above_m[i] : from.held_depth_m;
        double held = channel_volume_m3(&channel), in = 0.0, out = 0.0;
        for (long step = 0; step < lround(duration_s / step_s); step++) {
            dynamic_tree_step(&channel.tree, step_s, 1, &nothing, &channel.held_depth_m, NULL, &channel.state,
                              channel.work, &channel.counts);
            in += channel.state.passed_m3[0];
            out += channel.state.passed_m3[channel.place];
        }
        print_message("dam break %g to %g m: depth off by %.1f %% of the dam's in the mean; %zu of %zu steps halved, "
                      "%zu replaced\n",
                      above_m[i], below_m[i], 100.0 * dam_break_error(&channel, above_m[i], below_m[i], &duration_s),
                      channel.counts.halved, channel.counts.steps, channel.counts.replaced);
        assert_true(fabs(in - out - (channel_volume_m3(&channel) - held)) <= 1e-12 * held);
        for (size_t node = 0; node <= channel.place; node++)
            assert_true(channel.state.area_m2[node] > 0.0 && isfinite(channel.state.discharge_m3s[node]));
        channel_clear(&channel);
    }
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(steady_uniform_flow_stays_exactly),
        cmocka_unit_test(a_raised_stage_starts_from_its_backwater_and_stays),
        cmocka_unit_test(a_flood_conserves_its_volume_in_every_section),
        cmocka_unit_test(a_square_pulse_into_a_dry_bed_conserves_its_volume),
        cmocka_unit_test(random_rivers_under_random_pulses_stay_wet_and_conserve_volume),
        cmocka_unit_test(a_given_stage_series_stands_for_the_river_below),
        cmocka_unit_test(a_short_extension_costs_accuracy_and_a_long_one_none),
        cmocka_unit_test(a_rating_of_normal_depth_is_normal_depth),
        cmocka_unit_test(a_tide_turns_the_flow_around_and_no_water_is_lost),
        cmocka_unit_test(dam_breaks_are_computed_and_reported),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
