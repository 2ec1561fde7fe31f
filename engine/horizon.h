/* SPDX-License-Identifier: MIT */
/*
 * Until when a point rests on measured water: the first time at which two futures along the edges of a stated
 * envelope differ there by more than a stated level.
 */
#ifndef FOREWATER_ENGINE_HORIZON_H
#define FOREWATER_ENGINE_HORIZON_H

#include <stddef.h>

/*
 *   low_stage_m, high_stage_m  stages at step 0 .. count-1, stride doubles apart (members innermost)
 * Returns the time from step 0, straight line between steps; INFINITY when they never part by more than tolerance_m.
 */
double horizon_measured_until_s(size_t count, size_t stride, const double low_stage_m[], const double high_stage_m[],
                                double step_s, double tolerance_m);

#endif
