/* SPDX-License-Identifier: MIT */
/*
 * What the files of engine/network share. Not for callers.
 */
#ifndef FOREWATER_ENGINE_NETWORK_INTERNAL_H
#define FOREWATER_ENGINE_NETWORK_INTERNAL_H

#include <stdbool.h>

#include "engine/method.h"
#include "engine/network.h"
#include "engine/routed_reach.h"
#include "engine/routed_tree.h"

struct placed_point {
    size_t stop;
    double share_of_next;
};

struct delayed_share { /* of a gauge: (1 - part) of the flow `whole` steps ago and part of the one before */
    size_t whole;
    double part;
};

/* Where things lie in a group's block of doubles. Every array has the group's members innermost. */
struct block_layout {
    size_t head_m3; /* [reach] passing volumes now */
    size_t foot_m3; /* [reach] */
    size_t
        lent_m3; /* [reach] kept back from its head: what ran back out of it and must come again first, never above 0 */
    size_t lent_before_m3; /* [reach] a step ago */
    size_t above_survey;   /* [reach] steps so far with the level at its head or foot above its survey */
    size_t gauge; /* [gauge][slot] flows, the newest in slot ring_at, older ones in the slots before it, cyclically */
    size_t given; /* [gauge] flows as given for this step, not a number where nothing was measured */
    size_t brought_m3s; /* [gauge] measured less routed, now */
    size_t brought_m3;  /* [gauge] summed */
    size_t level;       /* [level] now, above the bed */
    size_t side;        /* [side inflow] flows now */
    size_t point;       /* [point] flows now */
    size_t depth;       /* [point] depths now, not a number where only normal stage is known */
    size_t count;
};

struct network {
    struct network_river river; /* with reaches of our own, no method of which is NETWORK_AUTO */
    struct network_reach *river_reaches;
    struct method_choice *choices; /* per reach */
    double time_step_s;
    size_t group_count;
    size_t members_per_group;
    double *roughness_factors; /* per group */

    struct routed_reach *reaches;
    size_t *order;
    size_t *gauge_of_head;     /* per reach, or NETWORK_NONE */
    size_t *first_above_gauge; /* per gauge, the first that ends there; NETWORK_NONE: it is not in mid-river */
    size_t inner_share_count;  /* side inflows that follow a gauge in mid-river */
    size_t *first_above;       /* per reach, the first that ends at its head, or NETWORK_NONE */
    size_t *next_above;        /* per reach, the next that ends where it does */
    size_t *first_point;       /* per reach, the first on it */
    size_t *next_point;        /* per point, the next on the same reach */
    size_t *state_offset;      /* per reach, within a group's block; a tree's at its outlet */
    size_t *tree_of_reach;     /* NETWORK_NONE where the full equations do not rule */
    size_t tree_count;
    struct routed_tree *trees;
    struct placed_point *points;
    struct network_stage_rating *structure_ratings; /* [point][group], without rows where no structure stands */
    double *structure_rows;                         /* theirs */
    struct delayed_share *delays;
    size_t ring_count;
    size_t ring_at;

    struct block_layout layout;
    double *blocks; /* [group][layout.count] */

    double *side_m3; /* scratch of one group, [side inflow][member] */
    double *stop_m3;
    double *implicit_m3;
    double *passing_m3;
    double *lateral_m3;
    double *stop_depth_m;

    size_t steps_above_tables;
    size_t steps_below_zero;
};

/* Puts a method into every reach that asks for one. Order and curves must be there. FW_NO_MEMORY. */
FW_MUST_CHECK enum fw_status network_choose_methods(struct network *network, const struct network_options *options);

static inline bool network_has_inner_gauge(const struct network *network, size_t gauge)
{
    return network->first_above_gauge[gauge] != NETWORK_NONE;
}

static inline double *network_block_of(const struct network *network, size_t group)
{
    return network->blocks + group * network->layout.count;
}

static inline double *network_gauge_slot(const struct network *network, double *block, size_t gauge, size_t slot)
{
    return block + network->layout.gauge + (gauge * network->ring_count + slot) * network->members_per_group;
}

static inline struct routed_tree *network_tree_of(const struct network *network, size_t reach_index)
{
    size_t tree = network->tree_of_reach[reach_index];
    return tree == NETWORK_NONE ? NULL : &network->trees[tree];
}

static inline bool network_is_outlet_of(const struct routed_tree *tree, size_t reach_index)
{
    return tree->reach_index[tree->branch_count - 1] == reach_index;
}

/* The ratings of structures at points. FW_BAD_INPUT: one that cannot be; fault_out says which. FW_NO_MEMORY. */
FW_MUST_CHECK enum fw_status network_make_levels(struct network *network, struct network_fault *fault_out);

#endif
