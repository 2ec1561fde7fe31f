/* SPDX-License-Identifier: MIT */
/*
 * Until when a point rests on measured water: the first time at which two futures along the edges of a stated
 * envelope differ there by more than a stated level.
 *
 * Never the distance over a wave speed: on a channel with plains a later, bigger rise overtakes the water before it.
 */
#ifndef FOREWATER_ENGINE_HORIZON_H
#define FOREWATER_ENGINE_HORIZON_H

#include <stddef.h>

#include "engine/network.h"

/*
 *   low_stage_m, high_stage_m  stages at step 0 .. count-1, stride doubles apart (members innermost): the first
 *                              value of each is its member's; which of the two lies above does not matter
 * Returns the time from step 0, straight line between steps; INFINITY when they never part by more than tolerance_m.
 * What cannot be judged counts as parted: 0 without a step, and the last good step before a stage that is not finite.
 */
double horizon_measured_until_s(size_t count, size_t stride, const double low_stage_m[], const double high_stage_m[],
                                double step_s, double tolerance_m);

/*
 * The hard lower bound: before this nothing that begins at a reach's head can be felt at all length_m further down, since nothing runs faster
 * than the characteristic u + sqrt(g A / B) of the full equations (Chow, Open-Channel Hydraulics (1959), sections 18-1, 20-4).
 * It is far earlier than a level moves, and says nothing of when one does: a check on the estimate above, not in place of it.
 *
 *   flows  flow_count uniform flows, over all from the least in the reach now to the largest of the upper edge: where water leaves
 *          the channel the fastest is within the range and not at its end
 * 0 without a flow, or where one does not move.
 */
double horizon_not_felt_before_s(double length_m, size_t flow_count, const struct network_reach_flow flows[]);

#endif
