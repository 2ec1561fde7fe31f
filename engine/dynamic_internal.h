/* SPDX-License-Identifier: MIT */
/*
 * What the files of engine/dynamic_* share. Not for callers.
 */
#ifndef FOREWATER_ENGINE_DYNAMIC_INTERNAL_H
#define FOREWATER_ENGINE_DYNAMIC_INTERNAL_H

#include <math.h>

#include "engine/dynamic_tree.h"
#include "engine/vector.h"

static const double dynamic_gravity_m_s2 = 9.80665;

struct dynamic_step_data {
    double time_step_s;
    size_t member_count;                               /* of the three arrays below */
    const double *inflow_m3s, *foot_depth_m, *side_m3; /* [branch], [branch], [side][member] */
    const double *gauged_m3s;                          /* [branch][member], or NULL */
    const size_t *first_node;                          /* [branch] */
    const struct dynamic_interval *intervals;          /* [node above], made for this time step */
};

static inline double dynamic_gauged_m3s(const struct dynamic_step_data *data, size_t at)
{
    return data->gauged_m3s == NULL ? (double)NAN : data->gauged_m3s[at];
}

struct dynamic_interval {              /* as the equations want it */
    double per_length;                 /* 1/dx */
    double slope;                      /* the bed's, downstream */
    double by_flow, by_new_flow;       /* 2 dt/dx, and theta times it: area by flow in continuity */
    double inertia, inertia_by_froude; /* 2 beta/(g dx), and over g^5 */
    double inertia_by_flow;            /* dx/(2 beta dt): flux by flow in momentum */
    double inertia_by_new_flow;        /* the last by theta */
};

/* What is kept at a node while a step is solved. */
enum dynamic_part {
    DYNAMIC_SWEEP_E, /* dQ = E dA + F */
    DYNAMIC_SWEEP_F,
    DYNAMIC_FIXED, /* dA = fixed - by_below dA_below, over the interval below */
    DYNAMIC_BY_BELOW,
    DYNAMIC_INERTIA,  /* of that interval, times s */
    DYNAMIC_OLD_HEAD, /* its old imbalance of slopes, rise of h/dx - S0 + Sf */
    DYNAMIC_OLD_FLUX, /* and of Q^2/A */
    DYNAMIC_OLD_AREA,
    DYNAMIC_OLD_DISCHARGE,
    DYNAMIC_PART_COUNT
};

enum { DYNAMIC_MOST_LANES = 16 };

/*
 * A vector of members on its way through the tree. Lanes beyond the last member repeat it; the state is then a copy,
 * since the step's arrays do not reach so far.
 */
struct dynamic_block {
    size_t first_member, member_count; /* of the step's */
    size_t lanes;
    double *area_m2, *discharge_m3s, *passed_m3; /* [node][stride] */
    size_t stride;
    double *copy;            /* [3][node][lane] */
    double *parts;           /* [node][part][lane] */
    double *head_correction; /* [branch][lane]: dA at the heads */
    double *meeting_by_below,
        *meeting_fixed;                   /* [branch][lane]: dA at the foot = by_below dA at the head below + fixed */
    double *foot_correction, *lateral_m3; /* [lane] */
    bool is_open[DYNAMIC_MOST_LANES];     /* not solved */
};

static inline double *dynamic_part_at(const struct dynamic_block *block, size_t node, enum dynamic_part part)
{
    return block->parts + (node * DYNAMIC_PART_COUNT + (size_t)part) * block->lanes;
}

/* Which of the step's members a lane holds. */
static inline size_t dynamic_member_of_lane(const struct dynamic_block *block, size_t lane)
{
    return block->first_member + (lane < block->member_count ? lane : block->member_count - 1);
}

struct dynamic_lone {                                        /* one member's own step, when the common one failed */
    struct dynamic_state state;                              /* inflow_m3s: before the step */
    double *inflow_m3s, *inflow_now_m3s;                     /* [branch], after the step, and after a part of it */
    double *depth_m, *depth_before_m, *depth_now_m;          /* [branch], at the feet */
    double *side_m3, *side_now_m3;                           /* [side], of the step and of a part */
    double *gauged_m3s, *gauged_before_m3s, *gauged_now_m3s; /* [branch], at the heads; not a number: not gauged */
    double *passed_m3;                                       /* [node] */
    double *old_area_m2;                                     /* [node] */
};

struct dynamic_work {
    enum vector_level vectors; /* the widest that may be used */
    double *room;
    size_t *first_node;                                  /* [branch] */
    struct dynamic_interval *intervals, *lone_intervals; /* [node above] */
    struct dynamic_block block, lone_block;
    struct dynamic_lone lone;
};

void dynamic_make_intervals(const struct dynamic_tree *tree, double time_step_s, bool has_inertia,
                            struct dynamic_interval intervals[]);

/*
 * Solves a step of as many members, from first_member on, as the widest vectors take. Returns how many those are. Who
 * was not solved is in block->is_open, [lane]; what was before, in the block's parts.
 */
size_t dynamic_solve(const struct dynamic_tree *tree, const struct dynamic_step_data *data, enum vector_level widest,
                     size_t first_member, struct dynamic_state *state, struct dynamic_block *block,
                     struct dynamic_counts *counts);

/*
 * One step of one member of a block, from its old state in the block's parts, by other means: the step in parts; those
 * without inertia; the kinematic step.
 */
void dynamic_rescue(const struct dynamic_tree *tree, const struct dynamic_step_data *data, size_t lane,
                    struct dynamic_state *state, struct dynamic_work *work, struct dynamic_counts *counts);

/*
 * The kinematic step that takes the place of one that cannot be solved, for one member. Every node owns half of the
 * intervals beside it, and gives what flows at its normal depth; implicit, upwind, monotone.
 */
void dynamic_replace_step(const struct dynamic_tree *tree, const struct dynamic_step_data *data,
                          const double old_area_m2[], const double old_head_m3s[], struct dynamic_state *state);

/* The ends of branches, in the block's arrays (engine/dynamic_ends.c). */

/* Before an iteration: what comes from outside into every head. */
void dynamic_enter_heads(const struct dynamic_tree *tree, const struct dynamic_step_data *data,
                         struct dynamic_block *block);
/* After a branch: what it brings to the head below. */
void dynamic_join_head(const struct dynamic_tree *tree, size_t branch_index, const struct dynamic_step_data *data,
                       struct dynamic_block *block);
/* On the way back: the correction of the area at a foot. */
void dynamic_close_branch(const struct dynamic_tree *tree, size_t branch_index, const struct dynamic_step_data *data,
                          struct dynamic_block *block);
/* The side inflow of the interval below a node, from the given side on. Returns the first side of another. */
size_t dynamic_gather_lateral(const struct dynamic_tree *tree, size_t node, size_t side,
                              const struct dynamic_step_data *data, struct dynamic_block *block);

#endif
