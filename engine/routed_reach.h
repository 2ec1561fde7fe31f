/* SPDX-License-Identifier: MIT */
/*
 * One reach of a network: its cells, its tables for every roughness group, and where side inflow enters and flow is
 * read.
 *
 * A reach by the full equations has neither tables nor channels here: struct routed_tree moves its water.
 *
 * State is the network's memory, state_count(reach) doubles to a member:
 *   storage form   [cell][member]
 *   linear scheme  [member][node], discharges
 * "Passing volume" is what passes a place in one step at the flow there, m3.
 */
#ifndef FOREWATER_ENGINE_ROUTED_REACH_H
#define FOREWATER_ENGINE_ROUTED_REACH_H

#include "engine/flow_curve.h"
#include "engine/kinematic.h"
#include "engine/muskingum_cunge.h"
#include "engine/network.h"

struct routed_side {
    size_t cell;
    size_t side_index; /* into the river's side inflows */
};

struct routed_reach {
    const struct network_reach *source;
    size_t group_count;
    size_t cell_count;
    double cell_m;
    double time_step_s;
    double survey_top_m;          /* see section_survey_top_m, */
    double survey_conveyance_m3s; /* and what the section carries there, as it is given */
    double diffusion_length_m;    /* D/c at the peak, as the section is given */
    struct flow_curve curve;
    struct muskingum_cunge_table *tables; /* per group; the storage form's */
    struct kinematic_channel *channels;   /* per group; the linear scheme's */
    size_t side_count;
    struct routed_side *sides;
    size_t stop_count; /* nodes at which flow is read: rising, the first 0, the last cell_count */
    size_t *stop_node;
};

struct routed_flows { /* arrays of one group of members, and what a step reads and leaves there */
    size_t member_count;
    const double *side_m3; /* [side inflow][member], volume of the step (steady: of every step) */
    double *stop_m3;       /* [stop][member]: [0] in, the others out */
    double *implicit_m3;   /* [member], scratch */
    double *passing_m3;    /* [member], scratch */
    double *lateral_m3;    /* cell_count, scratch */
};

/*
 * In two steps, as the method is chosen by the curve. The values must have passed river_check_values.
 * FW_BAD_INPUT  the section cannot carry the flows; FW_NO_MEMORY. The caller clears in any case.
 */
FW_MUST_CHECK enum fw_status routed_reach_init_curve(struct routed_reach *reach, const struct network_reach *source,
                                                     const struct network_options *options);
/*
 * Cells, tables, sides and stops. Cells are sized by the celerity at the flood's peak, or by the mean one of the flood (rise 0: not
 * known) if that is faster: just above bank full the wave is slow, most of the flood is not; by the full equations also by its
 * rise. The source's method must be one by now. FW_NO_MEMORY.
 */
FW_MUST_CHECK enum fw_status routed_reach_init_cells(struct routed_reach *reach, const struct network_river *river,
                                                     size_t reach_index, const struct method_flood *flood,
                                                     const struct network_options *options);
void routed_reach_clear(struct routed_reach *reach); /* an all-zero one is fine */

size_t routed_reach_state_count(const struct routed_reach *reach); /* doubles per member */

/* The stop at a distance, and the share of the next one in a straight line between them (0: this stop alone). */
size_t routed_reach_stop_at(const struct routed_reach *reach, double at_m, double *share_of_next_out);

void routed_reach_start_steady(const struct routed_reach *reach, size_t group, const struct routed_flows *flows,
                               double state[]);
FW_MUST_CHECK enum fw_status routed_reach_step(const struct routed_reach *reach, size_t group,
                                               const struct routed_flows *flows, double state[]);

/* Water held by one member; head and foot are its passing volumes now. */
double routed_reach_volume_m3(const struct routed_reach *reach, size_t group, size_t member_count, size_t member,
                              const double state[], double head_m3, double foot_m3);

double routed_reach_largest_discharge_m3s(const struct routed_reach *reach, size_t group);

#endif
