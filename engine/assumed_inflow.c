/* SPDX-License-Identifier: MIT */
#include "engine/assumed_inflow.h"

#include <math.h>

static double discharge_of(const struct rating *rating, double value)
{
    double discharge_m3s = rating ? rating_discharge_m3s(rating, value, NULL) : value;
    return discharge_m3s < 0.0 ? 0.0 : discharge_m3s; /* not fmax, which would hide a NaN */
}

/* Where the upper edge is held: the reach of the rating's meaning, INFINITY when it states none. */
static double edge_limit_m3s(const struct rating *rating, double newest_m3s)
{
    if (!rating)
        return HUGE_VAL;
    double known_to_m = rating->highest_gauged_m;
    if (rating->segment_count == 0 && rating->table_count > 0)
        known_to_m = fmin(known_to_m, rating->table_stage_m[rating->table_count - 1]);
    if (!isfinite(known_to_m))
        return HUGE_VAL;
    return ASSUMED_EDGE_FACTOR * fmax(newest_m3s, discharge_of(rating, known_to_m));
}

double assumed_value_carried(const struct assumed_rules *rules, double newest_value, double newest_rate_per_s,
                             double elapsed_s)
{
    double carried_s = fmin(fmax(elapsed_s, 0.0), rules->carry_rise_s);
    return newest_value + fmax(newest_rate_per_s, 0.0) * carried_s;
}

static int rules_are_fit(const struct assumed_rules *rules)
{
    return isfinite(rules->carry_rise_s) && rules->carry_rise_s >= 0.0 &&
           isfinite(rules->recession_time_constant_s) && rules->recession_time_constant_s > 0.0 &&
           isfinite(rules->fastest_rise_per_s) && rules->fastest_rise_per_s >= 0.0 &&
           isfinite(rules->fastest_fall_per_s) && rules->fastest_fall_per_s >= 0.0;
}

enum fw_status assumed_inflow(const struct assumed_rules *rules, enum assumed_future future,
                              const struct rating *rating, double newest_value, double newest_rate_per_s,
                              double step_s, size_t step_count, double discharge_out_m3s[])
{
    if (!rules_are_fit(rules) || !isfinite(newest_value) || !isfinite(newest_rate_per_s) || !isfinite(step_s) ||
        step_s <= 0.0 || (unsigned)future >= ASSUMED_FUTURE_COUNT)
        return FW_BAD_INPUT;

    const double newest_m3s = discharge_of(rating, newest_value);
    const double limit_m3s = edge_limit_m3s(rating, newest_m3s);
    const double rise_per_s = fmax(rules->fastest_rise_per_s, newest_rate_per_s);
    const double fall_per_s = fmax(rules->fastest_fall_per_s, -newest_rate_per_s);
    for (size_t step = 0; step <= step_count; step++) {
        const double elapsed_s = (double)step * step_s;
        const double recession_m3s = newest_m3s * exp(-elapsed_s / rules->recession_time_constant_s);
        double discharge_m3s = newest_m3s;
        switch (future) {
        case ASSUMED_RISE_CARRIED:
            discharge_m3s =
                discharge_of(rating, assumed_value_carried(rules, newest_value, newest_rate_per_s, elapsed_s));
            break;
        case ASSUMED_RECESSION:
            discharge_m3s = recession_m3s;
            break;
        case ASSUMED_FASTEST_FALL:
            discharge_m3s = fmin(recession_m3s, discharge_of(rating, newest_value - fall_per_s * elapsed_s));
            break;
        case ASSUMED_FASTEST_RISE: {
            double limited_m3s = fmin(limit_m3s, discharge_of(rating, newest_value + rise_per_s * elapsed_s));
            /* a rise carried beyond the limit stays inside the envelope */
            double carried = assumed_value_carried(rules, newest_value, newest_rate_per_s, elapsed_s);
            discharge_m3s = fmax(limited_m3s, discharge_of(rating, carried));
            break;
        }
        case ASSUMED_HELD:
        case ASSUMED_FUTURE_COUNT:
            break;
        }
        if (!isfinite(discharge_m3s))
            return FW_BAD_INPUT;
        discharge_out_m3s[step] = discharge_m3s;
    }
    return FW_OK;
}
