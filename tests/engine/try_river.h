/* SPDX-License-Identifier: MIT */
/*
 * A small river with everything in it, for the network's tests. Include <cmocka.h> with its companions first.
 *
 *   gauge 0 (node 0) --upper--> node 1 --middle--> node 3 --lower--> node 4
 *   gauge 1 (node 2) --beck------------------------^
 */
#ifndef FOREWATER_TESTS_ENGINE_TRY_RIVER_H
#define FOREWATER_TESTS_ENGINE_TRY_RIVER_H

#include <math.h>

#include "engine/network.h"

#define NOT_A_NUMBER ((double)NAN)
#define ENDLESS ((double)INFINITY)

static const struct section trapezoid = {.shape = SECTION_TRAPEZOID,
                                         .bottom_m = 13.7,
                                         .side_h_per_v = 1.9,
                                         .roughness_n = 0.037,
                                         .has_plain = true,
                                         .plain_above_m = 2.3,
                                         .plain_width_m = 71.0,
                                         .plain_roughness_n = 0.073};
static const struct section rectangle = {.shape = SECTION_RECTANGLE, .bottom_m = 7.3, .roughness_n = 0.041};
static const struct section wide = {.shape = SECTION_WIDE, .bottom_m = 31.0, .roughness_n = 0.033};

enum { UPPER, BECK, MIDDLE, LOWER, REACH_COUNT };
enum { HEAD_POINT, INNER_POINT, BECK_FOOT, LOWER_INNER, MOUTH, POINT_COUNT };
enum { GAUGE_COUNT = 2, SIDE_COUNT = 3, GROUP_COUNT = 3, MEMBERS = 2, ALL_MEMBERS = GROUP_COUNT * MEMBERS };

struct try_river { /* by value, so that a test can spoil its own */
    size_t gauge_node[GAUGE_COUNT];
    struct network_reach reaches[REACH_COUNT];
    struct network_side_inflow sides[SIDE_COUNT];
    struct network_point points[POINT_COUNT];
    double rated_discharge_m3s[4], rated_stage_m[4];
    double roughness_factors[GROUP_COUNT];
    struct network_river river;
    struct network_options options;
};

static inline void make_river(struct try_river *try)
{
    *try = (struct try_river){
        .gauge_node = {0, 2},
        /* given out of order: the network must find it */
        .reaches = {[LOWER] = {.id = "lower",
                               .from_node = 3,
                               .to_node = 4,
                               .length_m = 8130.0,
                               .slope_m_per_m = 0.0019,
                               .section = &wide},
                    [MIDDLE] = {.id = "middle",
                                .from_node = 1,
                                .to_node = 3,
                                .length_m = 5270.0,
                                .slope_m_per_m = 0.0023,
                                .section = &trapezoid},
                    [UPPER] = {.id = "upper",
                               .from_node = 0,
                               .to_node = 1,
                               .length_m = 9410.0,
                               .slope_m_per_m = 0.0031,
                               .section = &trapezoid},
                    [BECK] = {.id = "beck",
                              .from_node = 2,
                              .to_node = 3,
                              .length_m = 3370.0,
                              .slope_m_per_m = 0.0083,
                              .section = &rectangle}},
        .sides = {{.reach_index = UPPER, .at_m = 6100.0, .share_of_gauge = 0, .share = 0.16, .delay_s = 1510.0},
                  {.reach_index = LOWER, .at_m = 8130.0, .share_of_gauge = NETWORK_NONE, .constant_m3s = 1.37},
                  {.reach_index = BECK, .at_m = 0.0, .share_of_gauge = 1, .share = 0.07, .delay_s = 120.0}},
        .points = {[HEAD_POINT] = {.id = "head", .reach_index = UPPER, .at_m = 0.0},
                   [INNER_POINT] = {.id = "inner", .reach_index = UPPER, .at_m = 7003.0},
                   [BECK_FOOT] = {.id = "beck foot", .reach_index = BECK, .at_m = 3370.0},
                   [LOWER_INNER] = {.id = "lower inner", .reach_index = LOWER, .at_m = 4444.0},
                   [MOUTH] = {.id = "mouth", .reach_index = LOWER, .at_m = 8130.0}},
        .rated_discharge_m3s = {2.0, 17.0, 40.0, 90.0},
        .rated_stage_m = {0.31, 0.94, 1.52, 2.97},
        .roughness_factors = {0.8, 1.0, 1.2},
    };
    try->river = (struct network_river){.node_count = 5,
                                        .gauge_count = GAUGE_COUNT,
                                        .gauge_node = try->gauge_node,
                                        .reach_count = REACH_COUNT,
                                        .reaches = try->reaches,
                                        .side_inflow_count = SIDE_COUNT,
                                        .side_inflows = try->sides,
                                        .point_count = POINT_COUNT,
                                        .points = try->points};
    try->options = (struct network_options){.time_step_s = 60.0,
                                            .group_count = GROUP_COUNT,
                                            .roughness_factors = try->roughness_factors,
                                            .members_per_group = MEMBERS,
                                            .largest_discharge_m3s = 160.0,
                                            .typical_peak_m3s = 90.0};
}

#endif
