/* SPDX-License-Identifier: MIT */
#include "config/demo/truth.h"

#include <math.h>
#include <stdio.h>
#include <stdlib.h>

#include "config/demo/night_time.h"
#include "engine/network.h"

static const double cell_m = 100.0;

struct river { /* arrays that a network_river points into */
    size_t gauge_node;
    struct network_reach reaches[RECIPE_POINT_COUNT];
    struct network_side_inflow beck;
    struct network_point points[RECIPE_POINT_COUNT];
};

static struct network_river describe_river(const struct recipe *recipe, struct river *river)
{
    river->gauge_node = 0;
    for (size_t i = 0; i < RECIPE_POINT_COUNT; i++) {
        river->reaches[i] = (struct network_reach){.id = recipe->points[i].id,
                                                   .from_node = i,
                                                   .to_node = i + 1,
                                                   .length_m = recipe->points[i].reach_length_m,
                                                   .slope_m_per_m = recipe->slope_m_per_m,
                                                   .section = &recipe->section,
                                                   .cell_m = cell_m};
        river->points[i] = (struct network_point){
            .id = recipe->points[i].id, .reach_index = i, .at_m = recipe->points[i].reach_length_m};
    }
    river->beck = (struct network_side_inflow){.reach_index = RECIPE_CAUSEWAY,
                                               .at_m = recipe->beck_at_m,
                                               .share_of_gauge = 0,
                                               .share = recipe->beck_share,
                                               .delay_s = recipe->beck_delay_s};
    return (struct network_river){.node_count = RECIPE_POINT_COUNT + 1,
                                  .gauge_count = 1,
                                  .gauge_node = &river->gauge_node,
                                  .reach_count = RECIPE_POINT_COUNT,
                                  .reaches = river->reaches,
                                  .side_inflow_count = 1,
                                  .side_inflows = &river->beck,
                                  .point_count = RECIPE_POINT_COUNT,
                                  .points = river->points};
}

static enum fw_status create_network(const struct network_river *river, const double inflow_m3s[], size_t count,
                                     struct network **network_out)
{
    static const double roughness_as_stated = 1.0;
    struct network_options options = {.time_step_s = TRUTH_STEP_S,
                                      .group_count = 1,
                                      .roughness_factors = &roughness_as_stated,
                                      .members_per_group = 1};
    for (size_t i = 0; i < count; i++)
        options.largest_discharge_m3s = fmax(options.largest_discharge_m3s, inflow_m3s[i]);
    options.largest_discharge_m3s *= 2.0; /* room for the beck */
    struct network_fault fault = {{0}};
    enum fw_status status = network_create(river, &options, network_out, &fault);
    if (status != FW_OK)
        fprintf(stderr, "vennmark: %s\n", fault.text);
    return status;
}

static enum fw_status levels_from_flows(const struct recipe *recipe, const double discharge_m3s[],
                                        struct truth *truth)
{
    enum fw_status status = FW_OK;
    for (size_t point = 0; point < RECIPE_POINT_COUNT && status == FW_OK; point++)
        for (size_t i = 0; i < truth->count && status == FW_OK; i++) {
            double stage_m = 0.0;
            status = section_normal_depth_m(&recipe->section, recipe->slope_m_per_m,
                                            discharge_m3s[point * truth->count + i], &stage_m);
            truth->level_m[point][i] = point == RECIPE_BRIDGE ? recipe_bridge_level_m(stage_m) : stage_m;
        }
    return status;
}

enum fw_status truth_route(const struct recipe *recipe, struct truth *truth_out)
{
    struct truth truth = {.start_utc_s = recipe->start_utc_s,
                          .count = (size_t)((recipe->end_utc_s - recipe->start_utc_s) / TRUTH_STEP_S) + 1};
    struct river parts;
    struct network_river river = describe_river(recipe, &parts);
    struct network *network = NULL;
    enum fw_status status = FW_NO_MEMORY;
    double *inflow_m3s = calloc(truth.count, sizeof *inflow_m3s);
    double *discharge_m3s = calloc(truth.count * RECIPE_POINT_COUNT, sizeof *discharge_m3s);
    bool is_short = inflow_m3s == NULL || discharge_m3s == NULL;
    for (size_t point = 0; point < RECIPE_POINT_COUNT; point++) {
        truth.level_m[point] = calloc(truth.count, sizeof *truth.level_m[point]);
        is_short |= truth.level_m[point] == NULL;
    }
    if (is_short)
        goto cleanup;
    for (size_t i = 0; i < truth.count; i++)
        inflow_m3s[i] = recipe_gauge_discharge_m3s(recipe, truth.start_utc_s + (int64_t)i * TRUTH_STEP_S);

    status = create_network(&river, inflow_m3s, truth.count, &network);
    if (status == FW_OK)
        status = network_start_steady(network, inflow_m3s);
    if (status == FW_OK)
        status = network_advance(network, truth.count - 1, inflow_m3s, discharge_m3s);
    if (status == FW_OK)
        status = levels_from_flows(recipe, discharge_m3s, &truth);
cleanup:
    network_destroy(network);
    free(discharge_m3s);
    free(inflow_m3s);
    if (status == FW_OK) {
        *truth_out = truth;
    } else {
        fprintf(stderr, "vennmark: the night could not be routed (status %d)\n", (int)status);
        truth_clear(&truth);
    }
    return status;
}

void truth_clear(struct truth *truth)
{
    for (size_t point = 0; point < RECIPE_POINT_COUNT; point++)
        free(truth->level_m[point]);
    *truth = (struct truth){0};
}

double truth_level_m(const struct truth *truth, size_t point, int64_t utc_s)
{
    const double *level_m = truth->level_m[point];
    int64_t since_s = utc_s - truth->start_utc_s;
    if (since_s <= 0)
        return level_m[0];
    size_t step = (size_t)(since_s / TRUTH_STEP_S);
    if (step >= truth->count - 1)
        return level_m[truth->count - 1];
    double along = (double)(since_s % TRUTH_STEP_S) / TRUTH_STEP_S;
    return level_m[step] + along * (level_m[step + 1] - level_m[step]);
}

static int64_t end_utc_s(const struct truth *truth)
{
    return truth->start_utc_s + (int64_t)(truth->count - 1) * TRUTH_STEP_S;
}

int64_t truth_first(const struct truth *truth, size_t point, double level_m, bool is_above, int64_t from_utc_s)
{
    for (int64_t utc_s = from_utc_s; utc_s <= end_utc_s(truth); utc_s++)
        if ((truth_level_m(truth, point, utc_s) >= level_m) == is_above)
            return utc_s;
    return NIGHT_TIME_NEVER;
}

double truth_peak_m(const struct truth *truth, size_t point, int64_t from_utc_s, int64_t to_utc_s,
                    int64_t *at_utc_s_out)
{
    double peak_m = -(double)INFINITY;
    for (int64_t utc_s = from_utc_s; utc_s <= to_utc_s; utc_s += TRUTH_STEP_S)
        if (truth_level_m(truth, point, utc_s) > peak_m) {
            peak_m = truth_level_m(truth, point, utc_s);
            *at_utc_s_out = utc_s;
        }
    return peak_m;
}
