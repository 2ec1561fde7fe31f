/* SPDX-License-Identifier: MIT */
#include "engine/series.h"

#include <math.h>
#include <stdbool.h>

/* Right for any two times in order, also where the signed difference would not fit. */
static uint64_t seconds_between(int64_t earlier_utc_s, int64_t later_utc_s)
{
    return (uint64_t)later_utc_s - (uint64_t)earlier_utc_s;
}

static bool are_samples_usable(size_t sample_count, const int64_t observed_utc_s[], const double value[])
{
    for (size_t sample = 0; sample < sample_count; sample++)
        if (!isfinite(value[sample]) || (sample > 0 && observed_utc_s[sample] <= observed_utc_s[sample - 1]))
            return false;
    return sample_count > 0;
}

static bool is_grid_usable(int64_t start_utc_s, int64_t step_s, size_t value_count)
{
    if (step_s <= 0)
        return false;
    return value_count == 0 ||
           (uint64_t)(value_count - 1) <= seconds_between(start_utc_s, INT64_MAX) / (uint64_t)step_s;
}

enum fw_status series_resample(size_t sample_count, const int64_t observed_utc_s[], const double value[],
                               int64_t start_utc_s, int64_t step_s, int64_t gap_limit_s, size_t value_count,
                               double value_out[], enum series_origin origin_out[])
{
    if (!are_samples_usable(sample_count, observed_utc_s, value) || gap_limit_s < 0 ||
        !is_grid_usable(start_utc_s, step_s, value_count))
        return FW_BAD_INPUT;
    size_t next = 0; /* the first sample at or after the time wanted */
    for (size_t index = 0; index < value_count; index++) {
        const int64_t time_utc_s = (int64_t)((uint64_t)start_utc_s + (uint64_t)index * (uint64_t)step_s);
        while (next < sample_count && observed_utc_s[next] < time_utc_s)
            next++;
        enum series_origin origin = SERIES_ASSUMED;
        if (next == sample_count) {
            value_out[index] = value[sample_count - 1];
        } else if (observed_utc_s[next] == time_utc_s) {
            value_out[index] = value[next];
            origin = SERIES_MEASURED;
        } else if (next == 0) {
            value_out[index] = value[0];
        } else {
            const uint64_t gap_s = seconds_between(observed_utc_s[next - 1], observed_utc_s[next]);
            const double share = (double)seconds_between(observed_utc_s[next - 1], time_utc_s) / (double)gap_s;
            value_out[index] = value[next - 1] + (value[next] - value[next - 1]) * share;
            origin = gap_s <= (uint64_t)gap_limit_s ? SERIES_MEASURED : SERIES_FILLED;
        }
        if (origin_out != NULL)
            origin_out[index] = origin;
    }
    return FW_OK;
}

static size_t first_in_window(size_t sample_count, const int64_t observed_utc_s[], int64_t window_s)
{
    const int64_t newest_utc_s = observed_utc_s[sample_count - 1];
    size_t first = sample_count - 2;
    while (first > 0 && window_s > 0 &&
           seconds_between(observed_utc_s[first - 1], newest_utc_s) <= (uint64_t)window_s)
        first--;
    return first;
}

/* Twice the time a sample stands for: from the sample before it to the one after, inside the window. */
static double weight_s(size_t first, size_t newest, size_t sample, const int64_t observed_utc_s[])
{
    const size_t before = sample > first ? sample - 1 : first, after = sample < newest ? sample + 1 : newest;
    return (double)seconds_between(observed_utc_s[before], observed_utc_s[after]);
}

/* Means first, then moments about them, which keeps all digits whatever the datum and the date. */
double series_newest_rate_per_s(size_t sample_count, const int64_t observed_utc_s[], const double value[],
                                int64_t window_s)
{
    if (sample_count < 2)
        return 0;
    const size_t first = first_in_window(sample_count, observed_utc_s, window_s), newest = sample_count - 1;
    double weights_s = 0, ages = 0, rises = 0;
    for (size_t sample = first; sample <= newest; sample++) {
        const double weight = weight_s(first, newest, sample, observed_utc_s);
        weights_s += weight;
        ages += weight * (double)seconds_between(observed_utc_s[sample], observed_utc_s[newest]);
        rises += weight * (value[sample] - value[newest]);
    }
    const double mean_age_s = ages / weights_s, mean_rise = rises / weights_s;
    double spread = 0, product = 0;
    for (size_t sample = first; sample <= newest; sample++) {
        const double weight = weight_s(first, newest, sample, observed_utc_s);
        const double time_s = mean_age_s - (double)seconds_between(observed_utc_s[sample], observed_utc_s[newest]);
        spread += weight * time_s * time_s;
        product += weight * time_s * (value[sample] - value[newest] - mean_rise);
    }
    return product / spread;
}
