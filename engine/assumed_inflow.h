/* SPDX-License-Identifier: MIT */
/*
 * Members of the future inflow at a gauge. In this version a small stated set, uncalibrated, not an ensemble:
 * the last flow held, the last rise carried forward for a stated time and then held, and recession.
 * Two more trace the edges of a stated envelope (the fastest recorded fall and rise), for the horizon only.
 *
 *   held          the measured quantity stays at its newest value
 *   rise carried  the quantity (stage, or discharge) goes on at its newest rate for carry_rise_s and is then held; a
 *                 falling gauge is carried as held
 *   recession     discharge falls as Q = Q0 exp(-t / recession_time_constant_s)
 *   fastest fall  the quantity falls at fastest_fall_per_s, or at its newest rate where that is faster, and is
 *                 nowhere above recession; flow ends at zero
 *   fastest rise  the quantity rises at fastest_rise_per_s, or at its newest rate where that is faster, to the end.
 *                 With a rating it is held once discharge has reached ASSUMED_EDGE_FACTOR times the larger of the
 *                 newest and that at the highest gauging (or last table row): farther out the curve means nothing
 *                 and the horizon has long been passed
 * So the two edges enclose the other three at every step.
 */
#ifndef FOREWATER_ENGINE_ASSUMED_INFLOW_H
#define FOREWATER_ENGINE_ASSUMED_INFLOW_H

#include <stddef.h>

#include "engine/rating.h"
#include "engine/status.h"

enum assumed_future {
    ASSUMED_HELD = 0,
    ASSUMED_RISE_CARRIED, /* a falling gauge is carried as held */
    ASSUMED_RECESSION,
    ASSUMED_FASTEST_FALL,
    ASSUMED_FASTEST_RISE,
    ASSUMED_FUTURE_COUNT
};

enum { ASSUMED_FORECAST_COUNT = 3 }; /* the first three make the forecast, the other two the horizon */

enum { ASSUMED_EDGE_FACTOR = 8 };

struct assumed_rules {
    double carry_rise_s;              /* how long the last rise is carried; >= 0 */
    double recession_time_constant_s; /* of discharge; > 0 */
    double fastest_rise_per_s;        /* of the measured quantity (m or m3/s), the envelope's upper edge; >= 0 */
    double fastest_fall_per_s;        /* positive number; >= 0 */
};

/*
 * One future, at newest + i step, i = 0 .. step_count: discharge_out_m3s has step_count + 1 values, [0] the newest.
 * None is negative.
 *
 *   rating             turns stage to discharge; NULL when the gauge measures discharge
 *   newest_value       stage above gauge zero, or discharge (a negative one counts as zero)
 *   newest_rate_per_s  its rate of change per second at that moment
 * FW_BAD_INPUT  a number not finite or outside its range above, step_s <= 0, no such future, a discharge that comes
 *               out not finite.
 * On failure discharge_out_m3s may be part written. Allocates nothing.
 */
FW_MUST_CHECK enum fw_status assumed_inflow(const struct assumed_rules *rules, enum assumed_future future,
                                            const struct rating *rating, double newest_value,
                                            double newest_rate_per_s, double step_s, size_t step_count,
                                            double discharge_out_m3s[]);

/*
 * The measured quantity itself as its last rise carries it, elapsed_s after the newest reading (a negative elapsed_s
 * counts as zero): what a signed trigger is held against while a gauge is silent. The same line as
 * ASSUMED_RISE_CARRIED.
 */
double assumed_value_carried(const struct assumed_rules *rules, double newest_value, double newest_rate_per_s,
                             double elapsed_s);

#endif
