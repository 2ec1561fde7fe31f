/* SPDX-License-Identifier: MIT */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <string.h>

#include "tests/engine/try_river.h"

static const struct section impossible = {.shape = SECTION_RECTANGLE, .bottom_m = -3.0, .roughness_n = 0.03};
static const double falling_discharge_m3s[] = {2.0, 17.0, 16.0, 90.0};
static const double falling_stage_m[] = {0.31, 0.94, 0.93, 2.97};
static const double negative_discharge_m3s[] = {-2.0, 17.0, 40.0, 90.0};

static void loop(struct try_river *try)
{
    try->reaches[LOWER].to_node = 1;
    try->river.node_count = 4;
}

static void own_loop(struct try_river *try)
{
    try->reaches[LOWER].to_node = 3;
    try->river.node_count = 4;
}

static void orphan_node(struct try_river *try)
{
    try->river.node_count = 6;
}

static void orphan_gauge(struct try_river *try)
{
    try->reaches[BECK].from_node = 0;
}

static void dry_head(struct try_river *try)
{
    try->river.gauge_count = 1;
    try->river.side_inflow_count = 2; /* the third is a share of gauge 1 */
}

static void fork(struct try_river *try)
{
    try->reaches[LOWER].from_node = 1;
}

static void gauge_in_mid_river_alone(struct try_river *try)
{
    try->gauge_node[1] = 3;
    try->river.side_inflow_count = 2; /* the third is a share of gauge 1 */
}

static void two_gauges_at_one_node(struct try_river *try)
{
    try->gauge_node[1] = 0;
}

static void no_reach(struct try_river *try)
{
    try->river.reach_count = 0;
}

#define SPOIL(name, statement)                                                                                       \
    static void name(struct try_river *try)                                                                          \
    {                                                                                                                \
        statement;                                                                                                   \
    }

SPOIL(no_id, try->reaches[MIDDLE].id = NULL)
SPOIL(from_outside, try->reaches[MIDDLE].from_node = 5)
SPOIL(to_outside, try->reaches[MIDDLE].to_node = NETWORK_NONE)
SPOIL(zero_length, try->reaches[MIDDLE].length_m = 0.0)
SPOIL(negative_length, try->reaches[MIDDLE].length_m = -5.0)
SPOIL(nan_length, try->reaches[MIDDLE].length_m = NOT_A_NUMBER)
SPOIL(hair_long, try->reaches[MIDDLE].length_m = 5e-324)
SPOIL(hair_steep, try->reaches[MIDDLE].slope_m_per_m = 1e-300)
SPOIL(endless, try->reaches[MIDDLE].length_m = ENDLESS)
SPOIL(level_bed, try->reaches[MIDDLE].slope_m_per_m = 0.0)
SPOIL(adverse_slope, try->reaches[MIDDLE].slope_m_per_m = -0.0024)
SPOIL(nan_slope, try->reaches[MIDDLE].slope_m_per_m = NOT_A_NUMBER)
SPOIL(percent_slope, try->reaches[MIDDLE].slope_m_per_m = 2.4)
SPOIL(negative_cell, try->reaches[MIDDLE].cell_m = -1.0)
SPOIL(tiny_cell, try->reaches[MIDDLE].cell_m = 1e-3)
SPOIL(no_method, try->reaches[MIDDLE].method = (enum network_method)9)
SPOIL(held_level_by_storage, try->reaches[LOWER].outlet_depth_m = 2.3)
SPOIL(negative_held_level, try->reaches[LOWER].outlet_depth_m = -0.1)
SPOIL(nan_held_level, try->reaches[LOWER].outlet_depth_m = NOT_A_NUMBER)

static void held_level_in_mid_river(struct try_river *try)
{
    try->reaches[MIDDLE].method = NETWORK_DYNAMIC;
    try->reaches[MIDDLE].outlet_depth_m = 2.3;
}

SPOIL(share_of_a_gauge_below, try->gauge_node[1] = 3)

static void give_level(struct try_river *try, size_t reach, size_t level)
{
    try->river.level_count = 2;
    try->reaches[reach].method = NETWORK_DYNAMIC;
    try->reaches[reach].has_outlet_level = true;
    try->reaches[reach].outlet_level = level;
}

SPOIL(level_outside, give_level(try, LOWER, 2))
SPOIL(level_in_mid_river, give_level(try, MIDDLE, 1))

static void level_by_storage(struct try_river *try)
{
    give_level(try, LOWER, 1);
    try->reaches[LOWER].method = NETWORK_MUSKINGUM_CUNGE;
}

static void level_twice(struct try_river *try)
{
    give_level(try, LOWER, 1);
    try->reaches[LOWER].outlet_depth_m = 2.3;
}

static const double fallen_m3s[] = {0.0, 3.0, 2.0};
static const double rising_m[] = {0.2, 0.7, 1.1};
static const struct stage_opening fallen = {
    .row_count = 3, .depth_m = rising_m, .discharge_m3s = fallen_m3s, .open_share = 1.0};
static const struct stage_structure unsound_structure = {1, &fallen};
static const double risen_m3s[] = {0.0, 3.0, 7.0};
static const struct stage_opening risen = {
    .row_count = 3, .depth_m = rising_m, .discharge_m3s = risen_m3s, .open_share = 1.0};
static const struct stage_structure sound_structure = {1, &risen};

SPOIL(structure_that_falls, try->reaches[MIDDLE].foot_structure = &unsound_structure)
SPOIL(structure_by_storage, try->reaches[MIDDLE].foot_structure = &sound_structure)
SPOIL(drop_by_storage, try->reaches[MIDDLE].foot_drop_m = 0.4)
SPOIL(drop_upwards, try->reaches[MIDDLE].foot_drop_m = -0.4)
SPOIL(nan_drop, try->reaches[MIDDLE].foot_drop_m = NOT_A_NUMBER)

static void structure_in_a_lake(struct try_river *try)
{
    give_level(try, LOWER, 1);
    try->reaches[LOWER].foot_structure = &sound_structure;
}

SPOIL(no_section, try->reaches[MIDDLE].section = NULL)
SPOIL(bad_section, try->reaches[MIDDLE].section = &impossible)
SPOIL(gauge_outside, try->gauge_node[1] = 5)
SPOIL(side_reach_outside, try->sides[1].reach_index = REACH_COUNT)
SPOIL(side_beyond_foot, try->sides[1].at_m = 8131.0)
SPOIL(side_before_head, try->sides[1].at_m = -1.0)
SPOIL(side_nowhere, try->sides[1].at_m = NOT_A_NUMBER)
SPOIL(side_constant_negative, try->sides[1].constant_m3s = -0.1)
SPOIL(side_constant_nan, try->sides[1].constant_m3s = NOT_A_NUMBER)
SPOIL(side_gauge_outside, try->sides[0].share_of_gauge = 2)
SPOIL(side_share_negative, try->sides[0].share = -0.1)
SPOIL(side_share_infinite, try->sides[0].share = ENDLESS)
SPOIL(side_delay_negative, try->sides[0].delay_s = -60.0)
SPOIL(side_delay_nan, try->sides[0].delay_s = NOT_A_NUMBER)
SPOIL(side_delay_of_weeks, try->sides[0].delay_s = 1e7)
SPOIL(point_without_id, try->points[INNER_POINT].id = NULL)
SPOIL(point_reach_outside, try->points[INNER_POINT].reach_index = REACH_COUNT)
SPOIL(point_beyond_foot, try->points[INNER_POINT].at_m = 9411.0)
SPOIL(point_before_head, try->points[INNER_POINT].at_m = -0.1)
SPOIL(point_nowhere, try->points[INNER_POINT].at_m = NOT_A_NUMBER)
SPOIL(rating_of_one_row, try->points[MOUTH].stage_rating = ((struct network_stage_rating){1, try->rated_discharge_m3s,
                                                                                          try->rated_stage_m}))
SPOIL(rating_without_rows,
      try->points[MOUTH].stage_rating = ((struct network_stage_rating){4, NULL, try->rated_stage_m}))
SPOIL(rating_discharge_falls,
      try->points[MOUTH].stage_rating = ((struct network_stage_rating){4, falling_discharge_m3s, try->rated_stage_m}))
SPOIL(rating_discharge_negative, try->points[MOUTH].stage_rating = ((struct network_stage_rating){
                                     4, negative_discharge_m3s, try->rated_stage_m}))
SPOIL(rating_stage_falls,
      try->points[MOUTH].stage_rating = ((struct network_stage_rating){4, try->rated_discharge_m3s, falling_stage_m}))
SPOIL(no_step, try->options.time_step_s = 0.0)
SPOIL(hair_step, try->options.time_step_s = 1e-300)
SPOIL(hair_largest, try->options.largest_discharge_m3s = 1e-300)
SPOIL(hair_peak, try->options.typical_peak_m3s = 1e-300)
SPOIL(nan_step, try->options.time_step_s = NOT_A_NUMBER)
SPOIL(too_many_cells, try->options.fixed_cell_count = 10001)
SPOIL(no_group, try->options.group_count = 0)
SPOIL(no_factors, try->options.roughness_factors = NULL)
SPOIL(zero_factor, try->roughness_factors[2] = 0.0)
SPOIL(nan_factor, try->roughness_factors[2] = NOT_A_NUMBER)
SPOIL(no_member, try->options.members_per_group = 0)
SPOIL(too_many_members, try->options.members_per_group = 400000)
SPOIL(no_largest, try->options.largest_discharge_m3s = 0.0)
SPOIL(infinite_largest, try->options.largest_discharge_m3s = ENDLESS)
SPOIL(peak_above_largest, try->options.typical_peak_m3s = 161.0)

static const struct {
    void (*spoil)(struct try_river *);
    const char *names; /* what the fault must name */
    const char *says;
} faults[] = {
    {loop, "reach 'middle'", "part of a loop"},
    {own_loop, "reach 'lower'", "part of a loop"},
    {orphan_node, "node 5", "no reach begins or ends there"},
    {orphan_gauge, "gauge_node[1]", "no reach begins or ends at node 2"},
    {dry_head, "reach 'beck'", "nothing flows into its head, node 2"},
    {fork, "reach 'lower'", "as reach 'middle' does"},
    {gauge_in_mid_river_alone, "reach 'beck'", "nothing flows into its head, node 2"},
    {share_of_a_gauge_below, "reach 'beck': side_inflows[2]", "share_of_gauge 1 stands downstream"},
    {level_outside, "reach 'lower'", "outlet_level 2, but there are 2 levels"},
    {level_by_storage, "reach 'lower'", "outlet_level: a held level needs method"},
    {level_in_mid_river, "reach 'middle'", "outlet_level: a level is held at the foot of a last reach only"},
    {level_twice, "reach 'lower'", "outlet_depth_m 2.3: is held, but outlet_level 1 is given too"},
    {two_gauges_at_one_node, "gauge_node[1]", "has gauge 0 already"},
    {no_reach, "river", "no reach"},
    {no_id, "reaches[2]", "no id"},
    {from_outside, "reach 'middle'", "from_node 5"},
    {to_outside, "reach 'middle'", "to_node"},
    {zero_length, "reach 'middle'", "length_m 0"},
    {negative_length, "reach 'middle'", "length_m -5"},
    {nan_length, "reach 'middle'", "length_m nan"},
    {hair_long, "reach 'middle'", "length_m 4.9"},
    {hair_steep, "reach 'middle'", "slope_m_per_m 1e-300"},
    {endless, "reach 'middle'", "length_m inf"},
    {level_bed, "reach 'middle'", "slope_m_per_m 0"},
    {adverse_slope, "reach 'middle'", "slope_m_per_m -0.0024"},
    {nan_slope, "reach 'middle'", "slope_m_per_m nan"},
    {percent_slope, "reach 'middle'", "slope_m_per_m 2.4"},
    {negative_cell, "reach 'middle'", "cell_m -1"},
    {tiny_cell, "reach 'middle'", "cell_m 0.001"},
    {no_method, "reach 'middle'", "method 9"},
    {held_level_by_storage, "reach 'lower'", "needs method auto, dynamic or diffusive"},
    {negative_held_level, "reach 'lower'", "outlet_depth_m -0.1"},
    {nan_held_level, "reach 'lower'", "outlet_depth_m nan"},
    {held_level_in_mid_river, "reach 'middle'", "a last reach only"},
    {structure_that_falls, "reach 'middle'", "foot_structure: tables must rise"},
    {structure_by_storage, "reach 'middle'", "foot_structure: needs method auto, dynamic or diffusive"},
    {drop_by_storage, "reach 'middle'", "foot_drop_m: needs method auto, dynamic or diffusive"},
    {drop_upwards, "reach 'middle'", "foot_drop_m -0.4"},
    {nan_drop, "reach 'middle'", "foot_drop_m nan"},
    {structure_in_a_lake, "reach 'lower'", "foot_structure: stands where a level is held too"},
    {no_section, "reach 'middle'", "no section"},
    {bad_section, "reach 'middle'", "section: "},
    {gauge_outside, "gauge_node[1]", "node 5"},
    {side_reach_outside, "side_inflows[1]", "reach_index 4"},
    {side_beyond_foot, "reach 'lower': side_inflows[1]", "at_m 8131"},
    {side_before_head, "reach 'lower': side_inflows[1]", "at_m -1"},
    {side_nowhere, "reach 'lower': side_inflows[1]", "at_m nan"},
    {side_constant_negative, "reach 'lower': side_inflows[1]", "constant_m3s -0.1"},
    {side_constant_nan, "reach 'lower': side_inflows[1]", "constant_m3s nan"},
    {side_gauge_outside, "reach 'upper': side_inflows[0]", "share_of_gauge 2"},
    {side_share_negative, "reach 'upper': side_inflows[0]", "share -0.1"},
    {side_share_infinite, "reach 'upper': side_inflows[0]", "share inf"},
    {side_delay_negative, "reach 'upper': side_inflows[0]", "delay_s -60"},
    {side_delay_nan, "reach 'upper': side_inflows[0]", "delay_s nan"},
    {side_delay_of_weeks, "reach 'upper': side_inflows[0]", "delay_s 1e+07"},
    {point_without_id, "points[1]", "no id"},
    {point_reach_outside, "point 'inner'", "reach_index 4"},
    {point_beyond_foot, "point 'inner'", "at_m 9411"},
    {point_before_head, "point 'inner'", "at_m -0.1"},
    {point_nowhere, "point 'inner'", "at_m nan"},
    {rating_of_one_row, "point 'mouth'", "at least two rows"},
    {rating_without_rows, "point 'mouth'", "at least two rows"},
    {rating_discharge_falls, "point 'mouth'", "row 2: discharge_m3s 16"},
    {rating_discharge_negative, "point 'mouth'", "row 0: discharge_m3s -2"},
    {rating_stage_falls, "point 'mouth'", "row 2: stage_m 0.93"},
    {no_step, "options", "time_step_s 0"},
    {hair_step, "options", "time_step_s 1e-300"},
    {hair_largest, "options", "largest_discharge_m3s 1e-300"},
    {hair_peak, "options", "typical_peak_m3s 1e-300"},
    {nan_step, "options", "time_step_s nan"},
    {too_many_cells, "options", "fixed_cell_count 10001"},
    {no_group, "options", "group_count 0"},
    {no_factors, "options", "roughness factors"},
    {zero_factor, "options", "roughness_factors[2] 0"},
    {nan_factor, "options", "roughness_factors[2] nan"},
    {no_member, "options", "members_per_group 0"},
    {too_many_members, "options", "members_per_group 400000"},
    {no_largest, "options", "largest_discharge_m3s 0"},
    {infinite_largest, "options", "largest_discharge_m3s inf"},
    {peak_above_largest, "options", "typical_peak_m3s 161"},
};

static void every_fault_is_named(void **state)
{
    (void)state;
    for (size_t i = 0; i < sizeof faults / sizeof *faults; i++) {
        struct try_river try;
        struct network *network = NULL;
        struct network_fault fault = {""};
        make_river(&try);
        faults[i].spoil(&try);
        enum fw_status status = network_create(&try.river, &try.options, &network, &fault);
        if (status != FW_BAD_INPUT || network != NULL || strstr(fault.text, faults[i].names) == NULL ||
            strstr(fault.text, faults[i].says) == NULL)
            fail_msg("row %zu: status %d, text '%s', expected '%s' and '%s'", i, (int)status, fault.text,
                     faults[i].names, faults[i].says);
    }
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(every_fault_is_named),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
