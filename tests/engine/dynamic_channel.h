/* SPDX-License-Identifier: MIT */
/*
 * One uniform channel by the full equations: what the tests of engine/dynamic_tree and the bench begin with. Any fault
 * fails the test. Include <cmocka.h> with its companions first.
 */
#ifndef FOREWATER_TESTS_ENGINE_DYNAMIC_CHANNEL_H
#define FOREWATER_TESTS_ENGINE_DYNAMIC_CHANNEL_H

#include <math.h>
#include <stdbool.h>
#include <stdlib.h>
#include <string.h>

#include "engine/dynamic_tree.h"

struct channel_case {
    struct section section;
    double slope_m_per_m;
    double length_m, cell_m; /* to the place of interest */
    double extension_m;      /* beyond it, in cells of the same length */
    double held_depth_m;     /* at the very end; 0: normal depth */
    double time_step_s, duration_s;
    double (*flood)(double t_s, const void *parameters);
    const void *flood_parameters;
    double side_m3s; /* constant, enters at 0.41 of the length */
    bool is_diffusive;
    double momentum_factor; /* 0: 1 */
    double largest_m3s;
};

struct channel {
    struct flow_curve curve;
    struct area_table table;
    double *interval_m, *slope_m_per_m;
    struct dynamic_branch branch;
    struct dynamic_tree tree;
    size_t place; /* node of the place of interest */
    size_t side_node;
    double held_depth_m;
    struct dynamic_state state;
    struct dynamic_work *work;
    struct dynamic_counts counts;
};

static inline double *channel_room(size_t count)
{
    double *room = calloc(count, sizeof *room);
    if (room == NULL)
        fail_msg("no memory");
    return room;
}

static inline struct dynamic_state dynamic_state_create(const struct dynamic_tree *tree, size_t member_count)
{
    size_t nodes = dynamic_tree_node_count(tree) * member_count;
    return (struct dynamic_state){.area_m2 = channel_room(nodes),
                                  .discharge_m3s = channel_room(nodes),
                                  .inflow_m3s = channel_room(tree->branch_count * member_count),
                                  .passed_m3 = channel_room(nodes)};
}

static inline void dynamic_state_clear(struct dynamic_state *state)
{
    free(state->area_m2);
    free(state->discharge_m3s);
    free(state->inflow_m3s);
    free(state->passed_m3);
}

/* Steady at the flood's first value. The channel points into itself: it must stay where it is. */
static inline void channel_init(struct channel *channel, const struct channel_case *from)
{
    memset(channel, 0, sizeof *channel);
    double root_slope = sqrt(from->slope_m_per_m > 1e-6 ? from->slope_m_per_m : 1e-6);
    assert_int_equal(
        flow_curve_init(&channel->curve, &from->section, 1e-3 / root_slope, 32.0 * from->largest_m3s / root_slope),
        FW_OK);
    assert_int_equal(area_table_init(&channel->table, &channel->curve, 1.0), FW_OK);
    channel->place = (size_t)lround(from->length_m / from->cell_m);
    size_t intervals = channel->place + (size_t)lround(from->extension_m / from->cell_m);
    channel->interval_m = channel_room(intervals);
    channel->slope_m_per_m = channel_room(intervals);
    for (size_t i = 0; i < intervals; i++) {
        channel->interval_m[i] = from->cell_m;
        channel->slope_m_per_m[i] = from->slope_m_per_m;
    }
    channel->side_node = (size_t)(0.41 * (double)channel->place);
    channel->held_depth_m = from->held_depth_m;
    channel->branch =
        (struct dynamic_branch){.table = &channel->table,
                                .interval_count = intervals,
                                .interval_m = channel->interval_m,
                                .slope_m_per_m = channel->slope_m_per_m,
                                .foot = from->held_depth_m > 0.0 ? DYNAMIC_FOOT_STAGE : DYNAMIC_FOOT_NORMAL,
                                .below = DYNAMIC_NOWHERE};
    channel->tree =
        (struct dynamic_tree){.branch_count = 1,
                              .branches = &channel->branch,
                              .momentum_factor = from->momentum_factor > 0.0 ? from->momentum_factor : 1.0,
                              .is_diffusive = from->is_diffusive,
                              .side_count = from->side_m3s > 0.0 ? 1 : 0,
                              .side_node = &channel->side_node};
    assert_int_equal(dynamic_tree_check(&channel->tree), FW_OK);
    channel->state = dynamic_state_create(&channel->tree, 1);
    assert_int_equal(dynamic_work_create(&channel->work, &channel->tree), FW_OK);
    channel->state.inflow_m3s[0] = from->flood(0.0, from->flood_parameters);
    dynamic_tree_start_steady(&channel->tree, 1, &from->side_m3s, &channel->held_depth_m, &channel->state);
}

static inline void channel_clear(struct channel *channel)
{
    dynamic_work_destroy(channel->work);
    dynamic_state_clear(&channel->state);
    area_table_clear(&channel->table);
    flow_curve_clear(&channel->curve);
    free(channel->interval_m);
    free(channel->slope_m_per_m);
}

struct channel_result { /* the caller frees the arrays */
    size_t count;       /* steps + 1 */
    double *inflow_m3s;
    double *discharge_m3s; /* at the place of interest */
    double *depth_m;
    double in_m3, out_m3, side_m3; /* what passed the head and the place, and came from the side */
    double held_before_m3, held_after_m3;
    double imbalance; /* relative to what came in */
    double smallest_area_m2, smallest_discharge_m3s;
    struct dynamic_counts counts;
};

static inline void channel_result_clear(struct channel_result *result)
{
    free(result->inflow_m3s);
    free(result->discharge_m3s);
    free(result->depth_m);
}

static inline double channel_volume_m3(const struct channel *channel)
{
    return dynamic_tree_volume_m3(&channel->tree, &channel->state, 1, 0, 0, 0, channel->place);
}

static inline void channel_note(const struct channel *channel, size_t step, struct channel_result *result)
{
    result->inflow_m3s[step] = channel->state.inflow_m3s[0];
    result->discharge_m3s[step] = channel->state.discharge_m3s[channel->place];
    result->depth_m[step] = area_table_depth_m(&channel->table, channel->state.area_m2[channel->place]);
    for (size_t node = 0; node <= channel->branch.interval_count; node++) {
        result->smallest_area_m2 = fmin(result->smallest_area_m2, channel->state.area_m2[node]);
        result->smallest_discharge_m3s = fmin(result->smallest_discharge_m3s, channel->state.discharge_m3s[node]);
    }
}

static inline struct channel_result channel_run(const struct channel_case *from)
{
    struct channel channel;
    channel_init(&channel, from);
    struct channel_result result = {.count = (size_t)lround(from->duration_s / from->time_step_s) + 1,
                                    .smallest_area_m2 = (double)INFINITY,
                                    .smallest_discharge_m3s = (double)INFINITY};
    result.inflow_m3s = channel_room(result.count);
    result.discharge_m3s = channel_room(result.count);
    result.depth_m = channel_room(result.count);
    result.held_before_m3 = channel_volume_m3(&channel);
    channel_note(&channel, 0, &result);
    double side_m3 = from->side_m3s * from->time_step_s;
    for (size_t step = 1; step < result.count; step++) {
        double inflow = from->flood((double)step * from->time_step_s, from->flood_parameters);
        dynamic_tree_step(&channel.tree, from->time_step_s, 1, &inflow, &channel.held_depth_m, &side_m3,
                          &channel.state, channel.work, &result.counts);
        result.in_m3 += channel.state.passed_m3[0];
        result.out_m3 += channel.state.passed_m3[channel.place];
        result.side_m3 += side_m3;
        channel_note(&channel, step, &result);
    }
    result.held_after_m3 = channel_volume_m3(&channel);
    result.imbalance =
        (result.in_m3 + result.side_m3 - result.out_m3 - (result.held_after_m3 - result.held_before_m3)) /
        (result.in_m3 + result.side_m3);
    channel_clear(&channel);
    return result;
}

#endif
