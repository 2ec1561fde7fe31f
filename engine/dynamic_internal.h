/* SPDX-License-Identifier: MIT */
/*
 * What the files of engine/dynamic_* share. Not for callers.
 */
#ifndef FOREWATER_ENGINE_DYNAMIC_INTERNAL_H
#define FOREWATER_ENGINE_DYNAMIC_INTERNAL_H

#include <math.h>

#include "engine/dynamic_tree.h"

static const double dynamic_gravity_m_s2 = 9.80665;

struct dynamic_node_flow { /* at one node, each [member] */
    double *depth, *depth_by_area;
    double *conveyance, *conveyance_by_area;
    double *speed, *flux; /* Q/A, momentum_factor Q^2/A */
    double *friction, *friction_by_area, *friction_by_flow;
    double *froude_squared;
};

struct dynamic_work {
    size_t member_count;
    double *block;

    /* [node][member] */
    double *old_area, *old_discharge;
    double *sweep_e, *sweep_f; /* dQ = E dA + F */

    /* [node][member], the interval below the node */
    double *lead, *gain; /* dA = lead - (dx/2 dA_below + dt theta dQ_below) gain */
    double *inertia;
    double *old_half_area, *old_rise, *old_friction, *old_flux;

    /* [branch][member] */
    double *head_correction;                  /* dA at the heads */
    double *meeting_by_below, *meeting_fixed; /* dA at the foot = by_below dA at the head below + fixed */

    /* [member] */
    struct dynamic_node_flow flow[2];
    double *lateral;
    double *area_correction, *discharge_correction;
    double *is_open;  /* 1: still iterating, 0: done */
    double *is_large; /* 1: the last correction was too large to stop at */

    /* one member's own step, when the common one failed; all NULL in the lone work itself */
    struct dynamic_work *lone;
    struct dynamic_state lone_state;                         /* inflow_m3s: before the step */
    double *lone_inflow, *lone_inflow_now;                   /* [branch], after the step, and after a part of it */
    double *lone_depth, *lone_depth_before, *lone_depth_now; /* [branch], at the feet */
    double *lone_side, *lone_side_now;                       /* [side], of the step and of a part */
    double *lone_passed;                                     /* [node] */

    /* [branch], as lone_depth, at the heads; not a number: not gauged */
    double *lone_gauged, *lone_gauged_before, *lone_gauged_now;
};

struct dynamic_step_data {
    double time_step_s;
    bool has_inertia;
    const double *inflow_m3s, *foot_depth_m, *side_m3;
    const double *gauged_m3s; /* [branch][member], or NULL */
};

static inline double dynamic_gauged_m3s(const struct dynamic_step_data *data, size_t at)
{
    return data->gauged_m3s == NULL ? (double)NAN : data->gauged_m3s[at];
}

/*
 * Newton's method over the tree for all members of a work, from state to state. work->old_area and old_discharge hold
 * the state at the call. Leaves work->is_open: 1 for members that did not converge (their state is then
 * meaningless). Returns how many.
 */
size_t dynamic_solve(const struct dynamic_tree *tree, const struct dynamic_step_data *data,
                     struct dynamic_state *state, struct dynamic_work *work, struct dynamic_counts *counts);

/*
 * The kinematic step that takes the place of one that cannot be solved, for one member (member_count 1). Every node
 * owns half of the intervals beside it, and gives what flows at its normal depth; implicit, upwind, monotone.
 */
void dynamic_replace_step(const struct dynamic_tree *tree, const struct dynamic_step_data *data,
                          struct dynamic_state *state, struct dynamic_work *work);

#endif
