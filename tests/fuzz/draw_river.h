/* SPDX-License-Identifier: MIT */
/* Rivers drawn from bytes: trees that can be computed, or hostile ones; and their water balance. */
#ifndef FOREWATER_TESTS_FUZZ_DRAW_RIVER_H
#define FOREWATER_TESTS_FUZZ_DRAW_RIVER_H

#include "engine/network.h"
#include "tests/fuzz/draw_section.h"

enum { DRAWN_REACHES = 5, DRAWN_NODES = 7, DRAWN_GAUGES = 3, DRAWN_SIDES = 3, DRAWN_INNER = 3, DRAWN_ROWS = 4 };

struct drawn_river { /* points into itself */
    struct drawn_section section[DRAWN_REACHES];
    struct network_reach reach[DRAWN_REACHES];
    size_t gauge_node[DRAWN_GAUGES];
    struct network_side_inflow side[DRAWN_SIDES];
    struct network_point point[DRAWN_INNER + DRAWN_REACHES]; /* some anywhere, then one at every reach's foot */
    double rated_discharge_m3s[DRAWN_ROWS], rated_stage_m[DRAWN_ROWS];
    double roughness_factor[2];
    size_t first_foot; /* index of the first reach's foot among the points */
    struct network_river river;
    struct network_options options;
};

static inline void draw_reach(struct fuzz_bytes *bytes, bool is_hostile, struct drawn_river *drawn, size_t i)
{
    static const char *const ids[DRAWN_REACHES] = {"a", "b", "c", "d", "e"};
    struct network_reach *reach = &drawn->reach[i];
    reach->id = ids[i];
    reach->length_m = fuzz_value(bytes, is_hostile, 10.0, 300e3);
    reach->slope_m_per_m = fuzz_value(bytes, is_hostile, 5e-5, 0.1);
    if (is_hostile && fuzz_chance(bytes, 32))
        reach->slope_m_per_m = -reach->slope_m_per_m;
    reach->method = (enum network_method)fuzz_pick(bytes, is_hostile && fuzz_chance(bytes, 32) ? 9 : 5);
    reach->cell_m = is_hostile && fuzz_chance(bytes, 8) ? fuzz_odd(bytes) : 0.0;
    draw_section(bytes, is_hostile, &drawn->section[i]);
    reach->section = is_hostile && fuzz_chance(bytes, 64) ? NULL : &drawn->section[i].section;
}

/* A tree: reach i leaves node i and ends in a later one, the last in the sea; heads are gauges. */
static inline void draw_tree(struct fuzz_bytes *bytes, struct drawn_river *drawn)
{
    struct network_river *river = &drawn->river;
    bool is_fed[DRAWN_NODES] = {false};
    river->node_count = river->reach_count + 1;
    size_t heads = 0;
    for (size_t i = 0; i < river->reach_count; i++) {
        struct network_reach *reach = &drawn->reach[i];
        size_t later = river->reach_count - i;
        reach->from_node = i;
        reach->to_node = i + 1 + (fuzz_chance(bytes, 2) ? fuzz_pick(bytes, later) : 0);
        if (!is_fed[i] && heads == DRAWN_GAUGES) /* no more gauges: the one before must lead here */
            drawn->reach[i - 1].to_node = i;
        else if (!is_fed[i])
            drawn->gauge_node[heads++] = i;
        is_fed[reach->to_node] = true;
        bool is_last = i + 1 == river->reach_count;
        if (is_last && network_method_is_full(reach->method) && fuzz_chance(bytes, 2))
            reach->outlet_depth_m = fuzz_log(bytes, 0.05, 12.0);
    }
    river->gauge_count = heads;
}

static inline void draw_any_graph(struct fuzz_bytes *bytes, struct drawn_river *drawn)
{
    struct network_river *river = &drawn->river;
    river->node_count = fuzz_pick(bytes, DRAWN_NODES);
    river->gauge_count = fuzz_pick(bytes, DRAWN_GAUGES + 1);
    for (size_t i = 0; i < river->gauge_count; i++)
        drawn->gauge_node[i] = fuzz_pick(bytes, DRAWN_NODES + 1);
    for (size_t i = 0; i < river->reach_count; i++) {
        drawn->reach[i].from_node = fuzz_pick(bytes, DRAWN_NODES + 1);
        drawn->reach[i].to_node = fuzz_pick(bytes, DRAWN_NODES + 1);
        drawn->reach[i].outlet_depth_m = fuzz_chance(bytes, 4) ? fuzz_value(bytes, true, 0.05, 12.0) : 0.0;
    }
}

static inline void draw_sides(struct fuzz_bytes *bytes, bool is_hostile, struct drawn_river *drawn)
{
    struct network_river *river = &drawn->river;
    river->side_inflow_count = fuzz_pick(bytes, DRAWN_SIDES + 1);
    for (size_t i = 0; i < river->side_inflow_count; i++) {
        struct network_side_inflow *side = &drawn->side[i];
        size_t any = is_hostile && fuzz_chance(bytes, 16) ? DRAWN_REACHES + 1 : river->reach_count;
        side->reach_index = any == 0 ? 0 : fuzz_pick(bytes, any);
        double length = side->reach_index < river->reach_count ? drawn->reach[side->reach_index].length_m : 1.0;
        side->at_m = is_hostile && fuzz_chance(bytes, 16) ? fuzz_odd(bytes) : fuzz_number(bytes, 0.0, length);
        side->share_of_gauge = NETWORK_NONE;
        side->constant_m3s = fuzz_value(bytes, is_hostile, 1e-3, 30.0);
        if (river->gauge_count > 0 && fuzz_chance(bytes, 2)) {
            side->share_of_gauge = fuzz_pick(bytes, river->gauge_count + (is_hostile && fuzz_chance(bytes, 16)));
            side->share = fuzz_value(bytes, is_hostile, 0.01, 2.0);
            side->delay_s = fuzz_value(bytes, is_hostile, 1.0, 20000.0);
        }
    }
    river->side_inflows = drawn->side;
}

static inline void draw_river_points(struct fuzz_bytes *bytes, bool is_hostile, struct drawn_river *drawn)
{
    struct network_river *river = &drawn->river;
    size_t count = river->reach_count == 0 ? 0 : fuzz_pick(bytes, DRAWN_INNER + 1);
    for (size_t i = 0; i < count; i++) {
        struct network_point *point = &drawn->point[i];
        point->id = "inner";
        point->reach_index = fuzz_pick(bytes, river->reach_count + (is_hostile && fuzz_chance(bytes, 16)));
        double length = point->reach_index < river->reach_count ? drawn->reach[point->reach_index].length_m : 1.0;
        point->at_m = is_hostile && fuzz_chance(bytes, 16) ? fuzz_odd(bytes) : fuzz_number(bytes, 0.0, length);
        if (!fuzz_chance(bytes, 4))
            continue;
        for (size_t row = 0; row < DRAWN_ROWS; row++) {
            drawn->rated_discharge_m3s[row] = 7.0 * (double)row * fuzz_value(bytes, is_hostile, 1.0, 1.4);
            drawn->rated_stage_m[row] = (double)row * fuzz_value(bytes, is_hostile, 1.0, 1.4);
        }
        point->stage_rating = (struct network_stage_rating){fuzz_pick(bytes, DRAWN_ROWS + 1),
                                                            drawn->rated_discharge_m3s, drawn->rated_stage_m};
        if (!is_hostile)
            point->stage_rating.row_count = 2;
    }
    drawn->first_foot = count;
    for (size_t i = 0; i < river->reach_count; i++)
        drawn->point[count++] =
            (struct network_point){.id = "foot", .reach_index = i, .at_m = drawn->reach[i].length_m};
    river->point_count = count;
    river->points = drawn->point;
}

static inline void draw_options(struct fuzz_bytes *bytes, bool is_hostile, struct drawn_river *drawn)
{
    struct network_options *options = &drawn->options;
    options->time_step_s = fuzz_value(bytes, is_hostile, 5.0, 3600.0);
    options->fixed_cell_count = fuzz_chance(bytes, 2) ? 1 + fuzz_pick(bytes, 40) : 0;
    options->group_count = 1 + fuzz_chance(bytes, 4);
    options->members_per_group = 1 + fuzz_pick(bytes, 3);
    if (is_hostile && fuzz_chance(bytes, 32))
        options->members_per_group = fuzz_pick(bytes, 2) == 0 ? 0 : (size_t)1 << (20 + fuzz_pick(bytes, 40));
    drawn->roughness_factor[0] = fuzz_value(bytes, is_hostile, 0.5, 2.0);
    drawn->roughness_factor[1] = fuzz_value(bytes, is_hostile, 0.5, 2.0);
    options->roughness_factors = drawn->roughness_factor;
    options->largest_discharge_m3s = fuzz_value(bytes, is_hostile, 0.1, 5000.0);
    if (fuzz_chance(bytes, 2))
        options->typical_peak_m3s = fuzz_number(bytes, 0.1, 1.0) * options->largest_discharge_m3s;
}

static inline void draw_river(struct fuzz_bytes *bytes, bool is_hostile, struct drawn_river *drawn)
{
    memset(drawn, 0, sizeof *drawn);
    struct network_river *river = &drawn->river;
    bool is_any_graph = is_hostile && fuzz_chance(bytes, 4);
    river->reach_count = is_any_graph ? fuzz_pick(bytes, DRAWN_REACHES + 1) : 1 + fuzz_pick(bytes, DRAWN_REACHES);
    river->reaches = drawn->reach;
    river->gauge_node = drawn->gauge_node;
    for (size_t i = 0; i < river->reach_count; i++)
        draw_reach(bytes, is_hostile, drawn, i);
    if (is_any_graph)
        draw_any_graph(bytes, drawn);
    else
        draw_tree(bytes, drawn);
    draw_sides(bytes, is_hostile, drawn);
    draw_river_points(bytes, is_hostile, drawn);
    draw_options(bytes, is_hostile, drawn);
}

/* --- a run and its balance ---------------------------------------------------------------------------------------- */

struct river_run { /* one member's; arrays as network_advance has them, for all */
    size_t step_count, member_count;
    double *inflow_m3s, *point_m3s, *stage_m;
    double *volume_before_m3; /* [member] */
};

static inline void river_run_clear(struct river_run *run)
{
    free(run->inflow_m3s);
    free(run->point_m3s);
    free(run->stage_m);
    free(run->volume_before_m3);
}

static inline bool river_has(const struct network_river *river, enum network_method method)
{
    for (size_t i = 0; i < river->reach_count; i++)
        if (river->reaches[i].method == method)
            return true;
    return false;
}

static inline bool river_has_full_equations(const struct network_river *river)
{
    return river_has(river, NETWORK_DYNAMIC) || river_has(river, NETWORK_DIFFUSIVE);
}

/* A gauge's flow so many steps after the beginning; before it stands as it began. */
static inline double gauge_flow_m3s(const struct river_run *run, size_t gauge, size_t member, double step)
{
    const double *series = run->inflow_m3s + gauge * (run->step_count + 1) * run->member_count + member;
    double held = fmax(0.0, step);
    size_t before = (size_t)held;
    double share = held - (double)before;
    double here = series[before * run->member_count];
    return share > 0.0 ? (1.0 - share) * here + share * series[(before + 1) * run->member_count] : here;
}

static inline double side_volume_m3(const struct drawn_river *drawn, const struct river_run *run, size_t member,
                                    bool starts_dry)
{
    double sum = 0.0, step_s = drawn->options.time_step_s;
    for (size_t i = 0; i < drawn->river.side_inflow_count; i++) {
        const struct network_side_inflow *side = &drawn->side[i];
        for (size_t step = 0; step <= run->step_count; step++) {
            double weight = step == 0 || step == run->step_count ? 0.5 : 1.0, flow = side->constant_m3s;
            if (side->share_of_gauge != NETWORK_NONE)
                flow += side->share *
                        gauge_flow_m3s(run, side->share_of_gauge, member, (double)step - side->delay_s / step_s);
            sum += step == 0 && starts_dry ? 0.0 : weight * step_s * flow; /* it begins within the first step */
        }
    }
    return sum;
}

static inline double passed_volume_m3(const struct river_run *run, const double series_m3s[], size_t member,
                                      double step_s)
{
    double sum = 0.0;
    for (size_t step = 0; step < run->step_count; step++)
        sum += 0.5 * step_s *
               (series_m3s[step * run->member_count + member] + series_m3s[(step + 1) * run->member_count + member]);
    return sum;
}

/* What came in, less what went out and what is held more than before: relative to all the water there was. */
static inline double river_imbalance(const struct drawn_river *drawn, const struct network *network,
                                     const struct river_run *run, size_t member, bool starts_dry)
{
    const struct network_river *river = &drawn->river;
    size_t stride = (run->step_count + 1) * run->member_count;
    double in = side_volume_m3(drawn, run, member, starts_dry), out = 0.0, through = 0.0;
    for (size_t gauge = 0; gauge < river->gauge_count; gauge++)
        in += passed_volume_m3(run, run->inflow_m3s + gauge * stride, member, drawn->options.time_step_s);
    for (size_t i = 0; i < river->reach_count; i++) {
        const double *foot = run->point_m3s + (drawn->first_foot + i) * stride;
        if (network_reach_from(river, river->reaches[i].to_node) == NETWORK_NONE) {
            double passed = passed_volume_m3(run, foot, member, drawn->options.time_step_s);
            out += passed;
            through += fabs(passed);
        }
    }
    double after = network_volume_m3(network, member), before = run->volume_before_m3[member];
    return (in - out - (after - before)) / (in + through + before + fabs(after) + 1e-300);
}

/* Everything that must hold of a run, whatever the river and the flood. */
static inline void check_run(const struct drawn_river *drawn, const struct network *network,
                             const struct river_run *run, bool starts_dry)
{
    const struct network_river *river = &drawn->river;
    bool may_turn = river_has_full_equations(river);
    size_t count = (run->step_count + 1) * run->member_count;
    for (size_t i = 0; i < river->point_count * count; i++) {
        const char *reach = river->reaches[river->points[i / count].reach_index].id;
        if (!isfinite(run->point_m3s[i]) || (!may_turn && !(run->point_m3s[i] >= 0.0)))
            fuzz_fail("reach %s, value %zu: flow %g", reach, i % count, run->point_m3s[i]);
        if (!isfinite(run->stage_m[i]) ||
            (river->points[i / count].stage_rating.row_count == 0 && !(run->stage_m[i] >= 0.0)))
            fuzz_fail("reach %s, value %zu: stage %g at %g m3/s", reach, i % count, run->stage_m[i],
                      run->point_m3s[i]);
    }
    if (network_steps_below_zero(network) > 0)
        fuzz_fail("%zu steps below zero", network_steps_below_zero(network));
    for (size_t member = 0; member < run->member_count; member++) {
        double volume = network_volume_m3(network, member);
        if (!isfinite(volume) || (!may_turn && !(volume >= 0.0)))
            fuzz_fail("member %zu holds %g m3", member, volume);
        if (river_has(river, NETWORK_KINEMATIC_LINEAR)) /* conserves nothing */
            continue;
        double imbalance = river_imbalance(drawn, network, run, member, starts_dry);
        if (!(fabs(imbalance) <= 1e-12))
            fuzz_fail("member %zu: volume off by %g", member, imbalance);
    }
}

/* Steps such that a run stays in bounds of time. */
static inline size_t affordable_steps(const struct drawn_river *drawn, const struct network *network, size_t wanted)
{
    size_t cells = 0;
    for (size_t i = 0; i < drawn->river.reach_count; i++)
        cells += network_cell_count(network, i) * (network_method_is_full(drawn->reach[i].method) ? 100 : 1);
    size_t most = 200000 / (cells * network_member_count(network));
    return wanted < most ? wanted : most;
}

#endif
