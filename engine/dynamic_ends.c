/* SPDX-License-Identifier: MIT */
/* The ends of branches: what enters a head, what closes a foot. For the kernels, once per branch and iteration. */
#include "engine/dynamic_internal.h"

#include <math.h>
#include <string.h>

/* A branch's end against what meets it there: the linear rule between the two corrections. */
struct meeting {
    double above_by_below; /* dA above = this dA below + */
    double above_fixed;    /* this */
};

static struct meeting meet(const struct dynamic_branch *branch, double area_above, double flow_above, double e,
                           double f, const struct area_table *table_below, double area_below)
{
    const struct area_table_row *above = area_table_row_at(branch->table, area_above);
    const struct area_table_row *below = area_table_row_at(table_below, area_below);
    double depth_above = above->depth_0 + above->depth_1 * area_above;
    double depth_below = below->depth_0 + below->depth_1 * area_below - branch->bed_drop_m;
    if (branch->foot == DYNAMIC_FOOT_JOINS)
        return (struct meeting){below->depth_1 / above->depth_1, (depth_below - depth_above) / above->depth_1};
    struct stage_flow flow = stage_structure_flow(branch->structure, depth_above, depth_below);
    double pivot = e - flow.by_depth_above_m2s * above->depth_1;
    return (struct meeting){flow.by_depth_below_m2s * below->depth_1 / pivot,
                            (flow.discharge_m3s - flow_above - f) / pivot};
}

/* What comes from outside, into every head. */
void dynamic_enter_heads(const struct dynamic_tree *tree, const struct dynamic_step_data *data,
                         struct dynamic_block *block)
{
    for (size_t i = 0; i < tree->branch_count; i++) {
        double *e = dynamic_part_at(block, data->first_node[i], DYNAMIC_SWEEP_E);
        double *f = dynamic_part_at(block, data->first_node[i], DYNAMIC_SWEEP_F);
        const double *discharge = block->discharge_m3s + data->first_node[i] * block->stride;
        for (size_t lane = 0; lane < block->lanes; lane++) {
            size_t at = i * data->member_count + dynamic_member_of_lane(block, lane);
            double gauged = dynamic_gauged_m3s(data, at);
            e[lane] = 0.0;
            f[lane] = (isnan(gauged) ? data->inflow_m3s[at] : gauged) - discharge[lane];
        }
    }
}

void dynamic_join_head(const struct dynamic_tree *tree, size_t branch_index, const struct dynamic_step_data *data,
                       struct dynamic_block *block)
{
    const struct dynamic_branch *branch = &tree->branches[branch_index];
    const struct area_table *table_below = tree->branches[branch->below].table;
    size_t foot = data->first_node[branch_index] + branch->interval_count, head = data->first_node[branch->below];
    const double *foot_e = dynamic_part_at(block, foot, DYNAMIC_SWEEP_E);
    const double *foot_f = dynamic_part_at(block, foot, DYNAMIC_SWEEP_F);
    double *head_e = dynamic_part_at(block, head, DYNAMIC_SWEEP_E);
    double *head_f = dynamic_part_at(block, head, DYNAMIC_SWEEP_F);
    const double *foot_area = block->area_m2 + foot * block->stride;
    const double *foot_flow = block->discharge_m3s + foot * block->stride;
    const double *head_area = block->area_m2 + head * block->stride;
    for (size_t lane = 0; lane < block->lanes; lane++) {
        struct meeting meeting =
            meet(branch, foot_area[lane], foot_flow[lane], foot_e[lane], foot_f[lane], table_below, head_area[lane]);
        block->meeting_by_below[branch_index * block->lanes + lane] = meeting.above_by_below;
        block->meeting_fixed[branch_index * block->lanes + lane] = meeting.above_fixed;
        if (!isnan(
                dynamic_gauged_m3s(data, branch->below * data->member_count + dynamic_member_of_lane(block, lane))))
            continue; /* the head's flow is known */
        head_e[lane] += foot_e[lane] * meeting.above_by_below;
        head_f[lane] += foot_flow[lane] + (foot_f[lane] + foot_e[lane] * meeting.above_fixed);
    }
}

static double outlet_correction(const struct dynamic_branch *branch, double area, double flow, double e, double f,
                                double given_depth_m, double root_slope)
{
    const struct area_table_row *row = area_table_row_at(branch->table, area);
    if (branch->foot == DYNAMIC_FOOT_STAGE)
        return area_table_area_at_depth_m2(branch->table, given_depth_m) - area;
    double rated, by_area;
    if (branch->foot == DYNAMIC_FOOT_NORMAL) {
        rated = root_slope * (row->conveyance_0 + row->conveyance_1 * area);
        by_area = root_slope * row->conveyance_1;
    } else {
        struct stage_flow structure =
            stage_structure_flow(branch->structure, row->depth_0 + row->depth_1 * area, -(double)INFINITY);
        rated = structure.discharge_m3s;
        by_area = structure.by_depth_above_m2s * row->depth_1;
    }
    return (rated - flow - f) / (e - by_area);
}

static void close_outlet(const struct dynamic_branch *branch, const double given_depth_m[], size_t foot_node,
                         struct dynamic_block *block)
{
    const double *e = dynamic_part_at(block, foot_node, DYNAMIC_SWEEP_E);
    const double *f = dynamic_part_at(block, foot_node, DYNAMIC_SWEEP_F);
    const double *area = block->area_m2 + foot_node * block->stride;
    const double *discharge = block->discharge_m3s + foot_node * block->stride;
    bool is_given = branch->foot == DYNAMIC_FOOT_STAGE;
    double root_slope =
        branch->foot == DYNAMIC_FOOT_NORMAL ? sqrt(branch->slope_m_per_m[branch->interval_count - 1]) : 0.0;
    for (size_t lane = 0; lane < block->lanes; lane++) {
        double depth = is_given ? given_depth_m[dynamic_member_of_lane(block, lane)] : 0.0;
        block->foot_correction[lane] =
            outlet_correction(branch, area[lane], discharge[lane], e[lane], f[lane], depth, root_slope);
    }
}

/* The correction of the area at a branch's foot. */
void dynamic_close_branch(const struct dynamic_tree *tree, size_t branch_index, const struct dynamic_step_data *data,
                          struct dynamic_block *block)
{
    const struct dynamic_branch *branch = &tree->branches[branch_index];
    size_t foot_node = data->first_node[branch_index] + branch->interval_count;
    if (branch->below == DYNAMIC_NOWHERE) {
        bool is_given = branch->foot == DYNAMIC_FOOT_STAGE;
        close_outlet(branch, is_given ? data->foot_depth_m + branch_index * data->member_count : NULL, foot_node,
                     block);
        return;
    }
    const double *by_below = block->meeting_by_below + branch_index * block->lanes;
    const double *fixed = block->meeting_fixed + branch_index * block->lanes;
    const double *below = block->head_correction + branch->below * block->lanes;
    for (size_t lane = 0; lane < block->lanes; lane++)
        block->foot_correction[lane] = by_below[lane] * below[lane] + fixed[lane];
}

/* The side inflow of the interval below a node, from the given side on; returns the first side of another. */
size_t dynamic_gather_lateral(const struct dynamic_tree *tree, size_t node, size_t side,
                              const struct dynamic_step_data *data, struct dynamic_block *block)
{
    memset(block->lateral_m3, 0, block->lanes * sizeof *block->lateral_m3);
    for (; side < tree->side_count && tree->side_node[side] == node; side++)
        for (size_t lane = 0; lane < block->lanes; lane++)
            block->lateral_m3[lane] += data->side_m3[side * data->member_count + dynamic_member_of_lane(block, lane)];
    return side;
}
