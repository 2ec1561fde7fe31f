/* SPDX-License-Identifier: MIT */
/*
 * Something in the river that rates its flow by its levels: a weir, a road embankment, a culvert's table.
 *
 * A structure is a sum of openings. The free flow of each is a table of discharge against the depth above it (above
 * the bed at the foot of the branch it ends), times the share that is not blocked. Where the water below stands above
 * an opening's sill the flow is drowned by Villemonte's rule (1947),
 *     Q = Q_free (1 - (Hd / Hu)^1.5)^0.385,
 * Hu and Hd the heads over the sill on both sides; it does not run backwards.
 */
#ifndef FOREWATER_ENGINE_STAGE_STRUCTURE_H
#define FOREWATER_ENGINE_STAGE_STRUCTURE_H

#include <stddef.h>

#include "engine/status.h"

struct stage_opening {           /* the caller owns the arrays */
    size_t row_count;            /* at least 2 */
    const double *depth_m;       /* rising; the first is the sill, below which nothing flows */
    const double *discharge_m3s; /* rising from 0; beyond the last row the last line is carried on */
    double open_share;           /* 1: clean; 0: blocked */
    const double *most_m3s;      /* NULL, or by the same depths, rising: never more than so much, free or drowned */
};

struct stage_structure {
    size_t opening_count;
    const struct stage_opening *openings;
};

struct stage_flow {
    double discharge_m3s;
    double by_depth_above_m2s; /* its derivatives */
    double by_depth_below_m2s;
};

/* FW_BAD_INPUT  no openings, a table that does not rise or is not finite, no discharge of 0 at its sill, a share
 *               outside 0 to 1, a most that does not rise from 0. */
FW_MUST_CHECK enum fw_status stage_structure_check(const struct stage_structure *structure);

/* Depths above the bed at the structure; where nothing is below, any depth_below_m at or under the sills. */
struct stage_flow stage_structure_flow(const struct stage_structure *structure, double depth_above_m,
                                       double depth_below_m);

/* The depth above that passes a discharge over 0; beyond 1e6 m, 1e6 m (all is blocked). */
double stage_structure_depth_above_m(const struct stage_structure *structure, double discharge_m3s,
                                     double depth_below_m);

/* Villemonte's rule: what is left of the free flow, 1 to 0, where the heads below and above stand in this ratio. */
double stage_structure_drowned_share(double head_below_by_head_above);

#endif
