/* SPDX-License-Identifier: MIT */
#include "engine/dynamic_internal.h"

#include <math.h>

static const double theta = DYNAMIC_TIME_WEIGHT;
static const double flattest_slope = 1e-5; /* the water's, where the bed falls less */

/* The area left when what flows out at its level is taken from what is there: width A + dt Q(A) = volume. */
struct outflow {
    const struct dynamic_branch *branch;
    double root_slope;
    bool is_structure;
};

static double outflow_m3s(const struct outflow *outflow, double area)
{
    if (outflow->is_structure)
        return stage_structure_flow(outflow->branch->structure, area_table_depth_m(outflow->branch->table, area),
                                    -(double)INFINITY)
            .discharge_m3s;
    return outflow->root_slope * area_table_conveyance_m3s(outflow->branch->table, area);
}

static double area_left(const struct outflow *outflow, double time_step_s, double length_m, double volume_m3)
{
    double low = 0.0, high = fmax(volume_m3 / length_m, 0.0);
    for (int i = 0; i < 200 && high - low > 1e-15 * high; i++) {
        double middle = 0.5 * (low + high);
        if (length_m * middle + time_step_s * outflow_m3s(outflow, middle) < volume_m3)
            low = middle;
        else
            high = middle;
    }
    return high;
}

static double side_volume(const struct dynamic_tree *tree, const struct dynamic_step_data *data, size_t node)
{
    double volume = 0.0;
    for (size_t i = 0; i < tree->side_count; i++)
        volume += tree->side_node[i] == node ? data->side_m3[i] : 0.0;
    return volume;
}

/* What enters a head in the step. */
static double head_volume(const struct dynamic_tree *tree, const struct dynamic_step_data *data,
                          const struct dynamic_state *state, size_t branch_index, double old_flow_m3s)
{
    double gauged = dynamic_gauged_m3s(data, branch_index);
    if (!isnan(gauged))
        return data->time_step_s * (theta * gauged + (1.0 - theta) * old_flow_m3s);
    double volume = data->time_step_s *
                    (theta * data->inflow_m3s[branch_index] + (1.0 - theta) * state->inflow_m3s[branch_index]);
    size_t node = 0;
    for (size_t i = 0; i < branch_index; i++) {
        node += tree->branches[i].interval_count + 1;
        if (tree->branches[i].below == branch_index)
            volume += state->passed_m3[node - 1];
    }
    return volume;
}

static double head_flow(const struct dynamic_tree *tree, const struct dynamic_step_data *data,
                        const struct dynamic_state *state, size_t branch_index)
{
    double gauged = dynamic_gauged_m3s(data, branch_index);
    if (!isnan(gauged))
        return gauged;
    double flow = data->inflow_m3s[branch_index];
    size_t node = 0;
    for (size_t i = 0; i < branch_index; i++) {
        node += tree->branches[i].interval_count + 1;
        if (tree->branches[i].below == branch_index)
            flow += state->discharge_m3s[node - 1];
    }
    return flow;
}

void dynamic_replace_step(const struct dynamic_tree *tree, const struct dynamic_step_data *data,
                          const double old_area_m2[], const double old_head_m3s[], struct dynamic_state *state)
{
    size_t node = 0;
    double dt = data->time_step_s;
    for (size_t i = 0; i < tree->branch_count; i++) {
        const struct dynamic_branch *branch = &tree->branches[i];
        double coming = head_volume(tree, data, state, i, old_head_m3s[i]);
        double above_m = 0.0; /* half the interval above */
        for (size_t k = 0; k <= branch->interval_count; k++, node++) {
            bool is_foot = k == branch->interval_count;
            double below_m = is_foot ? 0.0 : 0.5 * branch->interval_m[k];
            double slope = branch->slope_m_per_m[is_foot ? k - 1 : k];
            double old_area = old_area_m2[node];
            const struct outflow outflow = {.branch = branch,
                                            .root_slope = sqrt(fmax(slope, flattest_slope)),
                                            .is_structure = is_foot && branch->foot == DYNAMIC_FOOT_STRUCTURE};
            double volume = (above_m + below_m) * old_area + coming + side_volume(tree, data, node);
            double area = is_foot && branch->foot == DYNAMIC_FOOT_STAGE
                              ? area_table_area_at_depth_m2(branch->table, data->foot_depth_m[i])
                              : area_left(&outflow, dt, above_m + below_m, volume);
            double leaving = volume - (above_m + below_m) * area;
            state->passed_m3[node] = coming - above_m * (area - old_area);
            state->area_m2[node] = area;
            state->discharge_m3s[node] = k == 0 ? head_flow(tree, data, state, i) : outflow_m3s(&outflow, area);
            coming = leaving;
            above_m = below_m;
        }
        if (branch->foot == DYNAMIC_FOOT_STAGE)
            state->discharge_m3s[node - 1] = coming / dt;
    }
}
