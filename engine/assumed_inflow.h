/* SPDX-License-Identifier: MIT */
/*
 * Members of the future inflow at a gauge. In this version a small stated set, uncalibrated, not an ensemble:
 * the last flow held, the last rise carried forward for a stated time and then held, and recession.
 * Two more trace the edges of a stated envelope (the fastest recorded fall and rise), for the horizon only.
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

struct assumed_rules {
    double carry_rise_s;             /* how long the last rise is carried */
    double recession_time_constant_s; /* of discharge */
    double fastest_rise_per_s;       /* of the measured quantity (m or m3/s), the envelope's upper edge */
    double fastest_fall_per_s;       /* positive number */
};

/*
 * One future, at newest + i step, i = 0 .. step_count: discharge_out_m3s has step_count + 1 values, [0] the newest.
 *
 *   rating        turns stage to discharge; NULL when the gauge measures discharge
 *   newest_value  stage above gauge zero, or discharge
 *   newest_rate   its rate of change per second at that moment
 * FW_BAD_INPUT  a number not finite, step_s <= 0
 */
FW_MUST_CHECK enum fw_status assumed_inflow(const struct assumed_rules *rules, enum assumed_future future,
                                            const struct rating *rating, double newest_value, double newest_rate_per_s,
                                            double step_s, size_t step_count, double discharge_out_m3s[]);

/* The measured quantity itself, carried forward for elapsed_s: what a signed trigger is held against while a gauge is silent. */
double assumed_value_carried(const struct assumed_rules *rules, double newest_value, double newest_rate_per_s,
                             double elapsed_s);

#endif
