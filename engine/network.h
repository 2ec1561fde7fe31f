/* SPDX-License-Identifier: MIT */
/*
 * The tree of gauges, reaches and points, routed as one, many members at once.
 *
 * A river is a set of nodes joined by reaches that run downstream. A node where no reach ends must be a gauge: its
 * inflow is given. Where several reaches end, their outflows add (a confluence). At most one reach leaves a node.
 * A gauge may also stand in mid-river, where reaches end: what it measured goes on downstream in place of what was
 * routed there, step by step and member by member; where it measured nothing (not a number) the routed flow goes on.
 * What that brings or takes away is accounted (network_brought_m3).
 * Side inflow enters a reach at a stated place, as a constant or as a share of a gauge's flow some time later. A
 * point lies on a reach, anywhere from its head (at_m 0) to its foot (at_m = length).
 *
 * Members are innermost in every array. They come in roughness groups: all members of a group share tables built
 * with the roughness of every section times the group's factor. Member index = group * members_per_group + place
 * within the group.
 */
#ifndef FOREWATER_ENGINE_NETWORK_H
#define FOREWATER_ENGINE_NETWORK_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include "engine/section.h"
#include "engine/stage_structure.h"
#include "engine/status.h"

enum network_method {
    NETWORK_MUSKINGUM_CUNGE = 0, /* storage form, volume-conserving: the default */
    NETWORK_KINEMATIC,           /* the same with no diffusion of its own */
    NETWORK_KINEMATIC_LINEAR,    /* the published linear scheme: rival and check */
    NETWORK_DYNAMIC,             /* the full equations; neighbouring reaches are solved as one */
    NETWORK_DIFFUSIVE,           /* the same without inertia */
    NETWORK_AUTO                 /* chosen reach by reach (engine/method.h): storage form or full equations */
};

static inline bool network_method_is_full(enum network_method method)
{
    return method == NETWORK_DYNAMIC || method == NETWORK_DIFFUSIVE;
}

#define NETWORK_NONE ((size_t)-1)
#define NETWORK_LARGEST_INFLOW_M3S 1e9 /* more than that at one place is a mistake of units, not a flood */

struct network_reach {
    const char *id;
    size_t from_node, to_node;
    double length_m;
    double slope_m_per_m;
    const struct section *section;
    double cell_m; /* wanted cell length; 0: chosen from celerity and time step */
    enum network_method method;
    /* A level at the foot of a last reach, by the full equations: held for good (0: none), or given step by step. */
    double outlet_depth_m;
    bool has_outlet_level;
    size_t outlet_level; /* which of the river's levels */
    /*
     * What rates the flow at the foot by its levels, by the full equations: a weir, a road embankment, a culvert's table,
     * with or without a reach below; NULL: nothing. And how far the bed falls from this foot to the head below: alone, an
     * overfall (the flow is critical at the edge until the water below drowns it). Where the river goes on by
     * another method, or unmodelled, neither is drowned.
     */
    const struct stage_structure *foot_structure;
    double foot_drop_m;
};

static inline bool network_reach_has_held_foot(const struct network_reach *reach)
{
    return reach->outlet_depth_m > 0.0 || reach->has_outlet_level;
}

static inline bool network_reach_has_control(const struct network_reach *reach)
{
    return reach->foot_structure != NULL || reach->foot_drop_m > 0.0;
}

struct network_side_inflow { /* enters the cell that holds at_m, at the mean of its flows at both ends of a step */
    size_t reach_index;
    double at_m;
    size_t share_of_gauge; /* index into gauge_node, or NETWORK_NONE for a constant */
    double share;          /* of the gauge's flow */
    double delay_s;
    double constant_m3s;
};

struct network_stage_rating {    /* a point's own level for a flow: straight lines between rows */
    size_t row_count;            /* 0: the section's normal stage instead */
    const double *discharge_m3s; /* rising; below the first row its stage stands */
    const double
        *stage_m; /* above the point's invert, never falling; beyond the last row the last line is carried on */
};

struct network_point {
    const char *id;
    size_t reach_index;
    double at_m;
    struct network_stage_rating stage_rating;
    /*
     * Instead of such a rating: what the river passes there, a weir over the road; NULL: nothing. The level is that above
     * it, with the normal depth of the flow below, in the member's roughness (engine/structure_rating).
     */
    const struct stage_structure *structure;
};

struct network_river { /* the caller's; must outlive the network */
    size_t node_count;
    size_t gauge_count;
    const size_t *gauge_node; /* NETWORK_NONE: apart from the river; only shares know its flow */
    size_t level_count;       /* given step by step: lakes, tides, weir pools; several outlets may share one */
    size_t reach_count;
    const struct network_reach *reaches;
    size_t side_inflow_count;
    const struct network_side_inflow *side_inflows;
    size_t point_count;
    const struct network_point *points;
};

/* The reach that leaves a node; NETWORK_NONE: the river goes on unmodelled. */
static inline size_t network_reach_from(const struct network_river *river, size_t node)
{
    for (size_t reach = 0; reach < river->reach_count; reach++)
        if (river->reaches[reach].from_node == node)
            return reach;
    return NETWORK_NONE;
}

/* The first reach that ends in a node; NETWORK_NONE: it is a head. */
static inline size_t network_reach_into(const struct network_river *river, size_t node)
{
    for (size_t reach = 0; reach < river->reach_count; reach++)
        if (river->reaches[reach].to_node == node)
            return reach;
    return NETWORK_NONE;
}

/* The gauge at a node, or NETWORK_NONE. */
static inline size_t network_gauge_at(const struct network_river *river, size_t node)
{
    for (size_t gauge = 0; gauge < river->gauge_count; gauge++)
        if (river->gauge_node[gauge] == node)
            return gauge;
    return NETWORK_NONE;
}

/* In mid-river: reaches end there. */
static inline bool network_gauge_is_inner(const struct network_river *river, size_t gauge)
{
    size_t node = river->gauge_node[gauge];
    return node != NETWORK_NONE && network_reach_into(river, node) != NETWORK_NONE;
}

/* Does the water at one node come past the other? Steps are counted, so that a river not yet checked for rings can be asked. */
static inline bool network_leads_to(const struct network_river *river, size_t from_node, size_t to_node)
{
    size_t node = from_node;
    for (size_t steps = 0; steps <= river->reach_count && node != to_node; steps++) {
        size_t reach = network_reach_from(river, node);
        if (reach == NETWORK_NONE)
            return false;
        node = river->reaches[reach].to_node;
    }
    return node == to_node;
}

struct method_flood; /* engine/method.h */
struct method_choice;

/* Does a side inflow join above a point? */
static inline bool network_side_is_above(const struct network_river *river, const struct network_side_inflow *side,
                                         const struct network_point *point)
{
    return side->reach_index == point->reach_index
               ? side->at_m < point->at_m
               : network_leads_to(river, river->reaches[side->reach_index].to_node,
                                  river->reaches[point->reach_index].from_node);
}

struct network_options {
    double time_step_s;
    size_t fixed_cell_count; /* per reach; 0: chosen */
    size_t group_count;
    const double *roughness_factors; /* group_count */
    size_t members_per_group;
    double largest_discharge_m3s; /* the tables reach several octaves above it */
    double typical_peak_m3s; /* where no flood is known cells are sized by the celerity at this flow; 0: largest */
    /*
     * Per gauge, the flood that NETWORK_AUTO must be right for; NULL, or one with a rise of 0: none is known, AUTO is
     * then the storage form (the full equations where a level is held). A reach's flood is the sum of those above it, side
     * inflow shares included, with the shortest of their rises.
     */
    const struct method_flood *gauge_floods;
};

struct network_fault {
    char text[256]; /* what and where: "reach 'x': ..." */
};

struct network;

/*
 * A new network is dry (by the full equations: but for a film of a millimetre, and a held level). NETWORK_AUTO is
 * resolved for good. Cells: the celerity at the peak of the reach's flood (typical_peak_m3s where none is known) times
 * the time step, 3 to 400 of them to a reach; by the full equations that or a sixtieth of the flood's rise (up to
 * 0.5 D/c), whichever is longer, at least 10, and no longer than 2 D/c at that flow if 400 are enough.
 *
 * FW_BAD_INPUT  a loop, an orphan, a node without inflow, a fork, an index outside, a shape or number refused, a
 *               share of a gauge that its own water reaches; fault_out (written only then) says which, by the reach's or point's id.
 * FW_NO_MEMORY.
 * The only allocations of this room are here. The caller destroys.
 */
FW_MUST_CHECK enum fw_status network_create(const struct network_river *river, const struct network_options *options,
                                            struct network **network_out, struct network_fault *fault_out);
void network_destroy(struct network *network); /* NULL is fine */

size_t network_member_count(const struct network *network);
size_t network_cell_count(const struct network *network, size_t reach_index);

/* How a reach is computed, and why. */
void network_reach_choice(const struct network *network, size_t reach_index, struct method_choice *choice_out);

/*
 * Steady flow everywhere, from one inflow per gauge and member: inflow_m3s[gauge][member]; at a gauge in mid-river not
 * a number where nothing was measured. Delay lines are filled with it.
 *
 *   level_m  [level][member], depths above the bed at the foot; NULL: as they are (0 in a new network). A level under the
 *            critical depth of the flow cannot act upstream: the critical depth stands there then.
 * FW_BAD_INPUT: an inflow negative, not finite (but see above) or above NETWORK_LARGEST_INFLOW_M3S, a level not
 * finite or 1e4 m from the bed; the state is unchanged then.
 */
FW_MUST_CHECK enum fw_status network_start_steady_at(struct network *network, const double inflow_m3s[],
                                                     const double level_m[]);
FW_MUST_CHECK enum fw_status network_start_steady(struct network *network, const double inflow_m3s[]);

/*
 * Routes step_count steps on from the present state.
 *
 *   inflow_m3s           [gauge][step_count + 1][member]; step 0 is the present and must equal the last inflow given,
 *                        but in mid-river, where it is not looked at; there a value that is not a number leaves the
 *                        routed flow as it is
 *   point_discharge_m3s  [point][step_count + 1][member]; step 0 is the present
 * Several calls one after another give what one call gives, bit for bit. Allocates nothing.
 * FW_BAD_INPUT: an inflow negative, not finite (but see above) or above NETWORK_LARGEST_INFLOW_M3S, or step 0 is not
 * the present; the state is unchanged then.
 */
FW_MUST_CHECK enum fw_status network_advance(struct network *network, size_t step_count, const double inflow_m3s[],
                                             double point_discharge_m3s[]);

/*
 * The same, and the level above each point's invert: by its own stage rating if it has one; else the depth computed,
 * where the full equations rule; else the normal stage of its flow.
 *
 *   point_stage_m  as point_discharge_m3s
 *   level_m        [level][step_count + 1][member], depths above the bed at the foot of the reaches that end there; NULL: held as
 *                  they are
 * Beside the causes above, FW_BAD_INPUT: a level not finite or 1e4 m from the bed.
 */
FW_MUST_CHECK enum fw_status network_advance_at(struct network *network, size_t step_count, const double inflow_m3s[],
                                                const double level_m[], double point_discharge_m3s[],
                                                double point_stage_m[]);
FW_MUST_CHECK enum fw_status network_advance_with_stage(struct network *network, size_t step_count,
                                                        const double inflow_m3s[], double point_discharge_m3s[],
                                                        double point_stage_m[]);

/*
 * Level above the point's invert for a flow there, in the tables of the member's group: by rating or normal stage, with
 * no knowledge of backwater (network_advance_with_stage has it).
 */
double network_point_stage_m(const struct network *network, size_t point_index, size_t member_index,
                             double discharge_m3s);

/*
 * Water held between the gauges and the last nodes (all reaches), one member, m3. It balances to rounding with
 * inflows, side inflows, what gauges in mid-river brought, and outflows, all summed by the trapezoidal rule (but not with NETWORK_KINEMATIC_LINEAR, which
 * conserves nothing).
 */
double network_volume_m3(const struct network *network, size_t member_index);

/*
 * What a gauge in mid-river brought since the steady start (or creation), measured less routed, m3, one member: negative where it
 * took away. 0 at a head.
 */
double network_brought_m3(const struct network *network, size_t gauge_index, size_t member_index);

/*
 * Steps so far in which a member's flow at some reach's head or foot lay above the tables (32 times
 * largest_discharge_m3s; their last line is carried on there), and in which it was negative (which must not be).
 * Over all members.
 */
size_t network_steps_above_tables(const struct network *network);
size_t network_steps_below_zero(const struct network *network);

/*
 * Steps since the steady start, over all members, in which the level at a reach's head or foot stood above the lower end of its
 * surveyed section (section_survey_top_m): walls are assumed there, and what was computed is a guess. The start counts as one.
 */
size_t network_steps_above_survey(const struct network *network, size_t reach_index);

/*
 * Steps so far that the full equations could not take and a kinematic step without backwater replaced, over all
 * members and trees of such reaches. Water may run upstream there, which is not counted as below zero.
 */
size_t network_steps_replaced(const struct network *network);

/*
 * All that stepping depends on, and the counters above, as network_state_count doubles. Restored into the same network, or another made
 * from the same river and options, the next steps are the same bit for bit as if the network had never stopped. The caller must
 * not change them; from another network they mean nothing. Neither fails nor allocates.
 */
size_t network_state_count(const struct network *network);
void network_state_save(const struct network *network, double to[]);
void network_state_restore(struct network *network, const double from[]);

struct network_reach_steps {
    size_t cell_count;
    double cell_m;
    double time_step_s;
};

struct network_reach_flow { /* of steady uniform flow in a reach */
    double discharge_m3s;
    double depth_m;
    double top_width_m;
    double velocity_m_s;
    double celerity_m_s;  /* of a flood wave, dQ/dA */
    double travel_time_s; /* length / celerity */
    double diffusivity_m2_s;
    double courant_number; /* celerity times time step by cell length */
};

/*
 * What a reach is computed with, and what each of some flows does in it.
 *   roughness_factor  on the section's roughness, 1 for as given
 *   flow_out          flow_count
 * FW_BAD_INPUT: an index outside, a flow or factor not positive or not finite; nothing is written then.
 */
FW_MUST_CHECK enum fw_status network_reach_summary(const struct network *network, size_t reach_index,
                                                   double roughness_factor, size_t flow_count,
                                                   const double discharge_m3s[],
                                                   struct network_reach_steps *steps_out,
                                                   struct network_reach_flow flow_out[]);

#endif
