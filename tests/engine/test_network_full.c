/* SPDX-License-Identifier: MIT */
/*
 * Reaches by the full equations within a network: beside other methods, joined to each other, at held levels.
 */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <math.h>
#include <stdlib.h>
#include <string.h>

#include "tests/engine/route_one_reach.h"
#include "tests/engine/try_river.h"
#include "tests/engine/try_sections.h"

enum { STEPS = 600 }; /* 10 h at 60 s */

static struct network *create(const struct try_river *try)
{
    struct network *network = NULL;
    struct network_fault fault = {""};
    if (network_create(&try->river, &try->options, &network, &fault) != FW_OK)
        fail_msg("network_create: %s", fault.text);
    return network;
}

static void set_methods(struct try_river *try, enum network_method upper, enum network_method beck,
                        enum network_method middle, enum network_method lower)
{
    try->reaches[UPPER].method = upper;
    try->reaches[BECK].method = beck;
    try->reaches[MIDDLE].method = middle;
    try->reaches[LOWER].method = lower;
}

static double *room_of(size_t count)
{
    double *room = calloc(count, sizeof *room);
    assert_non_null(room);
    return room;
}

static double flood_m3s(size_t gauge, size_t member, double t_s)
{
    double scale = (gauge == 0 ? 1.0 : 0.23) * (1.0 + 0.07 * (double)member);
    double h = t_s / 3600.0;
    return scale *
           (7.3 + 61.0 * exp(-pow((h - 1.9) / 0.71, 2.0)) + 83.0 * exp(-pow((h - 4.3 - 0.2 * (double)gauge), 2.0)));
}

static double *make_inflow(size_t members)
{
    double *inflow = room_of(GAUGE_COUNT * (STEPS + 1) * members);
    for (size_t gauge = 0; gauge < GAUGE_COUNT; gauge++)
        for (size_t step = 0; step <= STEPS; step++)
            for (size_t member = 0; member < members; member++)
                inflow[(gauge * (STEPS + 1) + step) * members + member] =
                    flood_m3s(gauge, member, 60.0 * (double)step);
    return inflow;
}

static void start(struct network *network, const double inflow[], size_t members)
{
    double first[GAUGE_COUNT * ALL_MEMBERS];
    for (size_t gauge = 0; gauge < GAUGE_COUNT; gauge++)
        memcpy(first + gauge * members, inflow + gauge * (STEPS + 1) * members, members * sizeof *first);
    assert_int_equal(network_start_steady(network, first), FW_OK);
}

/* --- volume, whatever lies beside whatever ------------------------------------------------------------------------ */

static double imbalance(const struct try_river *try, bool is_dry_start, size_t *replaced_out)
{
    struct network *network = create(try);
    double *inflow = make_inflow(ALL_MEMBERS);
    double *outflow = room_of(POINT_COUNT * (STEPS + 1) * ALL_MEMBERS);
    double worst = 0.0, before[ALL_MEMBERS];
    if (is_dry_start)
        for (size_t gauge = 0; gauge < GAUGE_COUNT; gauge++)
            memset(inflow + gauge * (STEPS + 1) * ALL_MEMBERS, 0, ALL_MEMBERS * sizeof *inflow);
    else
        start(network, inflow, ALL_MEMBERS);
    for (size_t member = 0; member < ALL_MEMBERS; member++)
        before[member] = network_volume_m3(network, member);
    assert_int_equal(network_advance(network, STEPS, inflow, outflow), FW_OK);
    for (size_t member = 0; member < ALL_MEMBERS; member++) {
        double in = 0.0, out = 0.0;
        for (size_t step = 0; step <= STEPS; step++) {
            double weight = step == 0 || step == STEPS ? 30.0 : 60.0;
            in += weight * (inflow[step * ALL_MEMBERS + member] + inflow[(STEPS + 1 + step) * ALL_MEMBERS + member]);
            out += weight * outflow[(MOUTH * (STEPS + 1) + step) * ALL_MEMBERS + member];
        }
        double held = network_volume_m3(network, member) - before[member];
        worst = fmax(worst, fabs(in - out - held) / in);
        for (size_t i = member; i < POINT_COUNT * (STEPS + 1) * ALL_MEMBERS; i += ALL_MEMBERS)
            assert_true(isfinite(outflow[i]));
    }
    *replaced_out = network_steps_replaced(network);
    network_destroy(network);
    free(inflow);
    free(outflow);
    return worst;
}

#define M NETWORK_MUSKINGUM_CUNGE
#define K NETWORK_KINEMATIC
#define D NETWORK_DYNAMIC
#define F NETWORK_DIFFUSIVE

static void every_mixture_of_methods_conserves_volume(void **state)
{
    (void)state;
    static const struct {
        const char *shows;
        enum network_method upper, beck, middle, lower;
    } rows[] = {
        {"one tree", D, D, D, D},
        {"one tree without inertia", F, F, F, F},
        {"full above storage", D, M, M, M},
        {"full below storage", M, M, M, D},
        {"full between storage", M, M, D, M},
        {"two trees apart", D, K, M, D},
        {"two trees that touch", D, F, D, F},
        {"a beck by storage into a tree", D, M, D, D},
    };
    for (size_t i = 0; i < sizeof rows / sizeof *rows; i++)
        for (int is_dry = 0; is_dry < 2; is_dry++) {
            struct try_river try;
            size_t replaced = 0;
            make_river(&try);
            try.river.side_inflow_count = 0; /* their volumes are tested below */
            set_methods(&try, rows[i].upper, rows[i].beck, rows[i].middle, rows[i].lower);
            double worst = imbalance(&try, is_dry, &replaced);
            print_message("%s, %s: volume error %.1e, %zu steps replaced\n", rows[i].shows,
                          is_dry ? "dry start" : "steady start", worst, replaced);
            assert_true(worst <= 1e-12);
            assert_true(is_dry || replaced == 0);
        }
}

static const struct gamma_flood flood = {7.3, 143.0, 3.1 * 3600.0, 5.0};

static void side_inflow_is_in_the_balance_in_every_section(void **state)
{
    (void)state;
    for (size_t s = 0; s < TRY_SECTION_COUNT; s++)
        for (int is_diffusive = 0; is_diffusive < 2; is_diffusive++) {
            const struct one_reach one = {.section = try_sections[s].section,
                                          .slope_m_per_m = 0.0011,
                                          .length_m = 9300.0,
                                          .method = is_diffusive ? NETWORK_DIFFUSIVE : NETWORK_DYNAMIC,
                                          .time_step_s = 60.0,
                                          .largest_m3s = 160.0,
                                          .flood = gamma_flood_m3s,
                                          .flood_parameters = &flood,
                                          .duration_s = 12.0 * 3600.0,
                                          .side_m3s = 4.7};
            struct one_reach_result routed = route_one_reach(&one);
            double in = trapezoidal_volume_m3(routed.step_count, routed.inflow_m3s, 60.0) +
                        4.7 * 60.0 * (double)routed.step_count;
            double out = trapezoidal_volume_m3(routed.step_count, routed.outflow_m3s, 60.0);
            double error = (in - out - (routed.volume_end_m3 - routed.volume_start_m3)) / in;
            if (!(fabs(error) <= 1e-12))
                fail_msg("%s: volume error %g", try_sections[s].name, error);
            assert_true(fabs(routed.outflow_m3s[0] - 12.0) <= 1e-9);
            one_reach_result_clear(&routed);
        }
}

/* --- what the tree knows ------------------------------------------------------------------------------------------ */

/* The published wave on the flattest bed, cells and extension chosen by the network: where storage fails by 4 %. */
static void the_published_flat_wave_comes_out_with_chosen_cells(void **state)
{
    (void)state;
    static const struct section rectangle_50 = {.shape = SECTION_RECTANGLE, .bottom_m = 50.0, .roughness_n = 0.035};
    static const struct gamma_flood published = {100.0, 800.0, 24.0 * 3600.0, 16.0};
    const struct one_reach one = {.section = &rectangle_50,
                                  .slope_m_per_m = 0.00025,
                                  .length_m = 100e3,
                                  .method = NETWORK_DYNAMIC,
                                  .time_step_s = 300.0,
                                  .largest_m3s = 900.0,
                                  .flood = gamma_flood_m3s,
                                  .flood_parameters = &published,
                                  .duration_s = 72.0 * 3600.0};
    struct one_reach_result routed = route_one_reach(&one);
    struct flood_peak peak = flood_peak_of(routed.step_count + 1, routed.outflow_m3s, 300.0);
    /* saint_venant_flood_wave_summary.csv */
    print_message("published wave, S0 0.00025, %zu cells: peak %+.2f %%, %+.1f min\n", routed.cell_count,
                  100.0 * (peak.discharge_m3s / 700.04 - 1.0), (peak.time_s / 3600.0 - 35.101) * 60.0);
    assert_true(fabs(peak.discharge_m3s / 700.04 - 1.0) <= 0.005);
    assert_true(fabs(peak.time_s / 3600.0 - 35.101) <= 0.1);
    one_reach_result_clear(&routed);
}

static struct network *route_cut(const struct network_reach reaches[], size_t reach_count, double outflow[],
                                 double stage[])
{
    static const size_t gauge_node = 0;
    static const double factor = 1.0;
    const struct network_point foot = {
        .id = "foot", .reach_index = reach_count - 1, .at_m = reaches[reach_count - 1].length_m};
    const struct network_point upper = {.id = "upper", .reach_index = 0, .at_m = 3000.0};
    const struct network_point points[] = {foot, upper};
    const struct network_river river = {.node_count = reach_count + 1,
                                        .gauge_count = 1,
                                        .gauge_node = &gauge_node,
                                        .reach_count = reach_count,
                                        .reaches = reaches,
                                        .point_count = 2,
                                        .points = points};
    const struct network_options options = {.time_step_s = 60.0,
                                            .group_count = 1,
                                            .roughness_factors = &factor,
                                            .members_per_group = 1,
                                            .largest_discharge_m3s = 160.0};
    struct network *network = NULL;
    struct network_fault fault = {""};
    double inflow[STEPS + 1];
    if (network_create(&river, &options, &network, &fault) != FW_OK)
        fail_msg("network_create: %s", fault.text);
    for (size_t step = 0; step <= STEPS; step++)
        inflow[step] = gamma_flood_m3s(60.0 * (double)step, &flood);
    assert_int_equal(network_start_steady(network, inflow), FW_OK);
    assert_int_equal(network_advance_with_stage(network, STEPS, inflow, outflow, stage), FW_OK);
    return network;
}

static struct network_reach flat_reach(const char *id, size_t from, double length_m)
{
    return (struct network_reach){.id = id,
                                  .from_node = from,
                                  .to_node = from + 1,
                                  .length_m = length_m,
                                  .slope_m_per_m = 0.0007,
                                  .section = &try_trapezoid,
                                  .cell_m = 200.0,
                                  .method = NETWORK_DYNAMIC};
}

static void a_reach_cut_in_two_routes_as_one(void **state)
{
    (void)state;
    static double whole[2 * (STEPS + 1)], cut[2 * (STEPS + 1)], whole_m[2 * (STEPS + 1)], cut_m[2 * (STEPS + 1)];
    const struct network_reach one[] = {flat_reach("whole", 0, 10000.0)};
    const struct network_reach two[] = {flat_reach("a", 0, 6200.0), flat_reach("b", 1, 3800.0)};
    network_destroy(route_cut(one, 1, whole, whole_m));
    network_destroy(route_cut(two, 2, cut, cut_m));
    for (size_t i = 0; i < 2 * (STEPS + 1); i++) {
        assert_true(fabs(cut[i] / whole[i] - 1.0) <= 1e-10);
        assert_true(fabs(cut_m[i] / whole_m[i] - 1.0) <= 1e-10);
    }
}

/* A lake at the foot: its level is kept there, and drowns the upper point's normal stage. */
static void a_held_level_is_told_where_it_acts(void **state)
{
    (void)state;
    static double flow[2 * (STEPS + 1)], stage[2 * (STEPS + 1)];
    struct network_reach held = flat_reach("held", 0, 10000.0);
    held.outlet_depth_m = 9.7;
    struct network *network = route_cut(&held, 1, flow, stage);
    for (size_t step = 0; step <= STEPS; step++) {
        assert_true(fabs(stage[step] - 9.7) <= 1e-9);
        double backed_up = stage[STEPS + 1 + step];
        assert_true(backed_up >= 9.7 - 7000.0 * 0.0007 - 1e-3); /* not below the lake's level */
        if (step == 0)
            assert_true(backed_up > network_point_stage_m(network, 1, 0, flow[STEPS + 1]) + 2.0);
    }
    network_destroy(network);
}

/* By storage the level is the normal stage, and a point's own rating outranks all. */
static void stages_are_of_the_kind_that_the_header_names(void **state)
{
    (void)state;
    struct try_river try;
    make_river(&try);
    set_methods(&try, NETWORK_MUSKINGUM_CUNGE, NETWORK_DYNAMIC, NETWORK_MUSKINGUM_CUNGE, NETWORK_DYNAMIC);
    try.points[MOUTH].stage_rating = (struct network_stage_rating){4, try.rated_discharge_m3s, try.rated_stage_m};
    struct network *network = create(&try);
    double *inflow = make_inflow(ALL_MEMBERS);
    double *flow = room_of(POINT_COUNT * (STEPS + 1) * ALL_MEMBERS);
    double *stage = room_of(POINT_COUNT * (STEPS + 1) * ALL_MEMBERS);
    start(network, inflow, ALL_MEMBERS);
    assert_int_equal(network_advance_with_stage(network, STEPS, inflow, flow, stage), FW_OK);
    double parted = 0.0, backed_up = 0.0;
    for (size_t point = 0; point < POINT_COUNT; point++)
        for (size_t i = 0; i < (STEPS + 1) * ALL_MEMBERS; i++) {
            size_t at = point * (STEPS + 1) * ALL_MEMBERS + i;
            double above_normal = stage[at] - network_point_stage_m(network, point, i % ALL_MEMBERS, flow[at]);
            if (point == LOWER_INNER)
                parted = fmax(parted, fabs(above_normal));
            else if (point == BECK_FOOT)
                backed_up = fmax(backed_up, above_normal);
            else
                assert_true(above_normal == 0.0);
        }
    print_message("computed depths: within %.3f m of the normal stage in the river; up to %.2f m above it at the "
                  "beck's mouth\n",
                  parted, backed_up);
    assert_true(parted > 1e-3 && parted < 0.1);
    assert_true(backed_up > 1.0); /* the beck is in flood an hour after the river */
    network_destroy(network);
    free(inflow);
    free(flow);
    free(stage);
}

/* --- order of work ------------------------------------------------------------------------------------------------ */

static void several_calls_and_lone_members_give_the_same_bits(void **state)
{
    (void)state;
    struct try_river try;
    make_river(&try);
    set_methods(&try, NETWORK_DYNAMIC, NETWORK_MUSKINGUM_CUNGE, NETWORK_DYNAMIC, NETWORK_DYNAMIC);
    struct network *network = create(&try);
    double *inflow = make_inflow(ALL_MEMBERS);
    double *expected = room_of(POINT_COUNT * (STEPS + 1) * ALL_MEMBERS);
    start(network, inflow, ALL_MEMBERS);
    assert_int_equal(network_advance(network, STEPS, inflow, expected), FW_OK);
    network_destroy(network);

    enum { PLACE = 1 }; /* of each group; the tables span all groups' roughness, so the groups stay */
    try.options.members_per_group = 1;
    struct network *alone = create(&try);
    double part_in[GAUGE_COUNT * 2 * GROUP_COUNT], part_out[POINT_COUNT * 2 * GROUP_COUNT];
    for (size_t step = 0; step <= STEPS; step++) {
        for (size_t gauge = 0; gauge < GAUGE_COUNT; gauge++)
            for (size_t k = 0; k < 2; k++)
                for (size_t group = 0; group < GROUP_COUNT; group++)
                    part_in[(step == 0 ? gauge : gauge * 2 + k) * GROUP_COUNT + group] =
                        inflow[(gauge * (STEPS + 1) + (step == 0 ? 0 : step - 1 + k)) * ALL_MEMBERS +
                               group * MEMBERS + PLACE];
        if (step == 0) {
            assert_int_equal(network_start_steady(alone, part_in), FW_OK);
            continue;
        }
        assert_int_equal(network_advance(alone, 1, part_in, part_out), FW_OK);
        for (size_t point = 0; point < POINT_COUNT; point++)
            for (size_t group = 0; group < GROUP_COUNT; group++)
                assert_true(part_out[(point * 2 + 1) * GROUP_COUNT + group] ==
                            expected[(point * (STEPS + 1) + step) * ALL_MEMBERS + group * MEMBERS + PLACE]);
    }
    network_destroy(alone);
    free(inflow);
    free(expected);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(every_mixture_of_methods_conserves_volume),
        cmocka_unit_test(side_inflow_is_in_the_balance_in_every_section),
        cmocka_unit_test(the_published_flat_wave_comes_out_with_chosen_cells),
        cmocka_unit_test(a_reach_cut_in_two_routes_as_one),
        cmocka_unit_test(a_held_level_is_told_where_it_acts),
        cmocka_unit_test(stages_are_of_the_kind_that_the_header_names),
        cmocka_unit_test(several_calls_and_lone_members_give_the_same_bits),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
