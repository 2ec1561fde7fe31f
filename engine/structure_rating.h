/* SPDX-License-Identifier: MIT */
/*
 * The level above a structure that stands in a river, for a flow: rows of a rating, straight lines between.
 *
 * The water below the structure stands at the normal depth of the flow in the section there; the level above is what
 * passes the flow against it (engine/stage_structure). Rows are put in until a line between two of them is within
 * STRUCTURE_RATING_CLOSE_M of the level in their middle.
 *
 * A weir over a road: Q = Cd L H^(3/2), FHWA HDS-5, equation 8, Cd in SI units.
 */
#ifndef FOREWATER_ENGINE_STRUCTURE_RATING_H
#define FOREWATER_ENGINE_STRUCTURE_RATING_H

#include <stddef.h>

#include "engine/section.h"
#include "engine/stage_structure.h"
#include "engine/status.h"

#define STRUCTURE_RATING_CLOSE_M 0.0005
enum { STRUCTURE_RATING_ROWS_MAX = 2048, STRUCTURE_RATING_WEIR_ROWS = 256 };

/*
 * A weir's table for a stage_opening, heads of a millimetre to more than 20 m: its lines lie above the formula's flow by
 * at most 0.02 % of it.
 *   depth_m, discharge_m3s  STRUCTURE_RATING_WEIR_ROWS each; the first is the crest
 */
void structure_rating_weir(double crest_m, double length_m, double coefficient, double depth_m[],
                           double discharge_m3s[]);

/*
 * Rows from no flow, at the lowest sill, up to what flows freely 10 m over the highest.
 *   roughness_factor        on the section's roughness
 *   discharge_m3s, stage_m  STRUCTURE_RATING_ROWS_MAX each: rising flows, levels above the invert that never fall
 * FW_BAD_INPUT     a slope or factor not positive, a structure that stage_structure_check refuses
 * FW_OUT_OF_RANGE  all openings are blocked, or the section cannot carry such a flow
 * Nothing is written to row_count_out then.
 */
FW_MUST_CHECK enum fw_status structure_rating_build(const struct stage_structure *structure,
                                                    const struct section *section, double slope_m_per_m,
                                                    double roughness_factor, double discharge_m3s[], double stage_m[],
                                                    size_t *row_count_out);

#endif
