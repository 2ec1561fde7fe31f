/* SPDX-License-Identifier: MIT */
/*
 * Readings at uneven times made into an even series that knows which of its values were measured.
 */
#ifndef FOREWATER_ENGINE_SERIES_H
#define FOREWATER_ENGINE_SERIES_H

#include <stddef.h>
#include <stdint.h>

#include "engine/status.h"

enum series_origin {
    SERIES_MEASURED = 0, /* at a reading, or between two readings no further apart than the gap limit */
    SERIES_FILLED,       /* straight line across a longer gap */
    SERIES_ASSUMED       /* before the first reading (held back) or after the newest (held on) */
};

/*
 * Straight lines between readings, at start + i step.
 *
 *   observed_utc_s, value   sample_count readings, times strictly rising, values finite
 *   value_out, origin_out   value_count each, not overlapping the input; origin_out may be NULL
 * FW_BAD_INPUT  no sample, step_s <= 0, gap_limit_s < 0, times not rising, a value not finite, or the last time
 *               wanted is beyond what 64 bits hold; nothing is written
 */
FW_MUST_CHECK enum fw_status series_resample(size_t sample_count, const int64_t observed_utc_s[],
                                             const double value[], int64_t start_utc_s, int64_t step_s,
                                             int64_t gap_limit_s, size_t value_count, double value_out[],
                                             enum series_origin origin_out[]);

/*
 * Rate of change at the newest sample: slope of the least-squares line through the samples of the last window_s
 * (at least the newest two, however old the second is). In value units per second; 0 with a single sample or none.
 * Each sample weighs as much as the time it stands for, half way to its neighbours, so that a logger that begins to
 * read more often does not by itself change the rate. Times must rise strictly.
 */
double series_newest_rate_per_s(size_t sample_count, const int64_t observed_utc_s[], const double value[],
                                int64_t window_s);

#endif
