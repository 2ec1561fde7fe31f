/* SPDX-License-Identifier: MIT */
/*
 * Unsteady flow in a tree of channels by the full Saint-Venant equations, many members at once.
 *
 *     dA/dt + dQ/dx = q,     s [dQ/dt + d(Q^2/A)/dx] + g A (dh/dx - S0 + Q|Q|/K^2) = 0
 * The four-point implicit (box) scheme in (A, Q) (Preissmann 1961; Cunge, Holly and Verwey 1980), weighted 0.55 to the
 * new time, solved by Newton's method with a double sweep over the whole tree. With A as unknown the equation of
 * continuity is linear, so that volume is exact after any number of iterations. s = max(0, 1 - Fr^10) from the old
 * state is the local partial inertia of Fread, Jin and Lewis (1996), which keeps the scheme stable where the flow is
 * fast; with s = 0 everywhere the equations are those of the diffusive wave.
 *
 * A branch is a channel of one section, divided into intervals of any length and bed slope. Its head takes what comes
 * from outside (a gauge, a reach routed otherwise) and from the branches that end there; branches are listed so that
 * each comes after all that flow into it. Nodes are numbered through all branches, head to foot: a branch of n intervals
 * has n + 1. Members are innermost in every array.
 *
 * A step that does not converge is halved, up to 16-fold; then taken so without inertia; then replaced by a monotone
 * kinematic step that keeps volume and knows no backwater. Each is counted, per step and member. What one member
 * computes does not depend on the others beside it.
 */
#ifndef FOREWATER_ENGINE_DYNAMIC_TREE_H
#define FOREWATER_ENGINE_DYNAMIC_TREE_H

#include <stdbool.h>
#include <stddef.h>

#include "engine/area_table.h"
#include "engine/stage_structure.h"
#include "engine/status.h"
#include "engine/vector.h"

#define DYNAMIC_NOWHERE ((size_t)-1)
#define DYNAMIC_TIME_WEIGHT 0.55

enum dynamic_foot {
    DYNAMIC_FOOT_JOINS,  /* one level with the head of the branch below */
    DYNAMIC_FOOT_NORMAL, /* an outlet: flow at normal depth (extend the channel well beyond the place of interest) */
    DYNAMIC_FOOT_STAGE,  /* an outlet: depth given, step by step (lake, tide, gauge) */
    DYNAMIC_FOOT_STRUCTURE, /* flow by a rating of the levels; an outlet, or an inner boundary with a branch below */
};

struct dynamic_branch { /* the caller's arrays; they must outlive the tree */
    const struct area_table *table;
    size_t interval_count;       /* at least 1 */
    const double *interval_m;    /* interval_count */
    const double *slope_m_per_m; /* interval_count; level and adverse beds are fine */
    enum dynamic_foot foot;
    size_t below;      /* the branch whose head is here, or DYNAMIC_NOWHERE */
    double bed_drop_m; /* from this foot's bed down to that head's */
    const struct stage_structure *structure;
};

struct dynamic_tree {
    size_t branch_count;
    const struct dynamic_branch *branches;
    double momentum_factor; /* on Q^2/A, for uneven velocities; 1 as a rule */
    bool is_diffusive;      /* no inertia */
    size_t side_count;
    const size_t *side_node; /* side inflow enters the interval below this node; rising */
    /* [branch][member], the caller's, read at a steady start and at every step: the measured flow into each head now, in
     * place of all that comes there; its level stays joined to the feet above. Not a number, or NULL: what comes
     * goes on. */
    const double *gauged_m3s;
};

/* FW_BAD_INPUT  a branch without intervals, a length not positive, a number not finite, a foot without what it needs,
 *               a branch below that does not come later, sides out of order or at a foot. */
FW_MUST_CHECK enum fw_status dynamic_tree_check(const struct dynamic_tree *tree);

size_t dynamic_tree_node_count(const struct dynamic_tree *tree);
size_t dynamic_tree_first_node(const struct dynamic_tree *tree, size_t branch_index);

struct dynamic_state {     /* the caller's arrays */
    double *area_m2;       /* [node][member] */
    double *discharge_m3s; /* [node][member] */
    double *inflow_m3s;    /* [branch][member]: from outside into each head, now */
    double *passed_m3;     /* [node][member]: what passed each node in the last step; out of steps only */
};

struct dynamic_counts { /* over steps and members since the caller last set them to zero */
    size_t steps;
    size_t iterations;
    size_t halved;          /* did not converge whole */
    size_t without_inertia; /* nor halved */
    size_t replaced;        /* nor without inertia: a kinematic step took its place */
};

/*
 * Room for dynamic_tree_step on this tree and on any other of the same branches and sides, for any number of members. FW_NO_MEMORY. The caller
 * destroys. Members are solved in blocks, a vector of the processor's widest at a time.
 */
struct dynamic_work;
FW_MUST_CHECK enum fw_status dynamic_work_create(struct dynamic_work **work_out, const struct dynamic_tree *tree);
void dynamic_work_destroy(struct dynamic_work *work); /* NULL is fine */

/* No wider vectors than these from now on, to be compared or timed; returns what is used. The results are the same. */
enum vector_level dynamic_work_set_vectors(struct dynamic_work *work, enum vector_level widest);

/*
 * The steady, gradually varied flow of each member: flows add up downstream from state->inflow_m3s, levels are solved
 * from the outlets up by the scheme's own equations, so that stepping keeps them. Beds are never drier than a film.
 *
 *   side_m3s      [side][member]
 *   foot_depth_m  [branch][member], read where the foot is DYNAMIC_FOOT_STAGE; may be NULL if none is
 * Writes area_m2 and discharge_m3s.
 */
void dynamic_tree_start_steady(const struct dynamic_tree *tree, size_t member_count, const double side_m3s[],
                               const double foot_depth_m[], struct dynamic_state *state);

/*
 * One step.
 *
 *   inflow_m3s    [branch][member]: from outside into each head at the new time
 *   foot_depth_m  [branch][member], as above, at the new time
 *   side_m3       [side][member]: volume of the step
 * The arrays are the caller's and do not overlap. Allocates nothing. Volume between two nodes of a branch, or of the tree, changes by exactly
 * what passed_m3 and side_m3 say. Inflows and depths must be finite; inflows should not be negative.
 */
void dynamic_tree_step(const struct dynamic_tree *tree, double time_step_s, size_t member_count,
                       const double inflow_m3s[], const double foot_depth_m[], const double side_m3[],
                       struct dynamic_state *state, struct dynamic_work *work, struct dynamic_counts *counts);

/* Water between two nodes of one branch, one member. */
double dynamic_tree_volume_m3(const struct dynamic_tree *tree, const struct dynamic_state *state, size_t member_count,
                              size_t member, size_t branch_index, size_t from_interval, size_t to_interval);

#endif
