/* SPDX-License-Identifier: MIT */
/*
 * Neighbouring reaches of a network that are routed by the full equations, solved as one tree.
 *
 * Branches are the reaches, upstream ones first; the last is the outlet. Where the river goes on below it by another
 * method, or unmodelled, the outlet is carried on by five times D/c at the peak and ends there at normal depth.
 * State is the network's memory, routed_tree_state_count doubles to a member, members innermost.
 */
#ifndef FOREWATER_ENGINE_ROUTED_TREE_H
#define FOREWATER_ENGINE_ROUTED_TREE_H

#include "engine/dynamic_tree.h"
#include "engine/routed_reach.h"

enum { ROUTED_OVERFALL_ROWS = 96 };

struct routed_overfall { /* a drop of the bed alone: critical flow at its edge */
    double depth_m[ROUTED_OVERFALL_ROWS], discharge_m3s[ROUTED_OVERFALL_ROWS], most_m3s[ROUTED_OVERFALL_ROWS];
    struct stage_opening opening;
    struct stage_structure structure;
};

struct routed_tree {
    size_t branch_count;
    size_t *reach_index; /* per branch */
    size_t member_count;
    double time_step_s;
    size_t group_count;
    size_t interval_count;
    size_t node_count;
    size_t outlet_cell_count; /* of the outlet's intervals, those above its foot */
    double *interval_m, *slope_m_per_m;
    size_t *side_node;                 /* as in struct dynamic_tree */
    size_t *side_index;                /* into the river's side inflows; NETWORK_NONE: what the tree owes itself */
    struct area_table *tables;         /* [group][branch] */
    struct dynamic_branch *branches;   /* [group][branch] */
    struct routed_overfall *overfalls; /* [branch] */
    struct dynamic_tree *trees;        /* [group] */
    struct dynamic_work *work;
    struct dynamic_counts counts;
    double *inflow_m3s;    /* [branch][member] */
    double *given_depth_m; /* [member]: held at the outlet, where it ends so */
    double *foot_depth_m;  /* [branch][member]: the same, or the critical depth where that is higher */
    double *gauged_m3s;    /* [branch][member]: measured at the heads, not a number where nothing was */
    bool has_gauges;       /* at a head, with a reach of the network above */
    double *side_m3;       /* [side][member] */
};

/*
 * reach_index  branch_count, each after all that flow into it; copied
 * reaches      all of the network's, made already
 * FW_NO_MEMORY. The values must have passed river_check_values. The caller clears.
 */
FW_MUST_CHECK enum fw_status routed_tree_init(struct routed_tree *tree, const struct network_river *river,
                                              const struct routed_reach reaches[], size_t branch_count,
                                              const size_t reach_index[], const struct network_options *options);
void routed_tree_clear(struct routed_tree *tree); /* an all-zero one is fine */

size_t routed_tree_state_count(const struct routed_tree *tree); /* doubles per member */

/*
 * Before both: tree->inflow_m3s holds what comes into each branch's head from outside the tree, gauged_m3s what was measured
 * there, given_depth_m the level at the outlet.
 *   side_m3  [side inflow of the river][member], volume of the step (steady: of every step)
 */
void routed_tree_start_steady(struct routed_tree *tree, size_t group, const double side_m3[], double state[]);
void routed_tree_step(struct routed_tree *tree, size_t group, const double side_m3[], double state[]);

/* Passing volumes and depths at the stops of a branch's reach, [stop][member]. */
void routed_tree_read_stops(const struct routed_tree *tree, size_t group, size_t branch_index,
                            const struct routed_reach *reach, double state[], double stop_m3[],
                            double stop_depth_m[]);

/* Water held by one member, without the extension; balances with flows summed by the trapezoidal rule, what gauges
 * brought among them. */
double routed_tree_volume_m3(const struct routed_tree *tree, size_t group, size_t member, double state[]);

#endif
