/* SPDX-License-Identifier: MIT */
/* What flows into the river, and stands at its outlets, in every future: the measured past, and what is assumed after it. */
#include "daemon/cycle_steps.h"

#include <math.h>
#include <string.h>

#include "daemon/forecast_network.h"
#include "engine/series.h"

enum {
    GAP_LIMIT_FACTOR = 4,  /* a gap longer than this many expected intervals is called filled */
    HIGHEST_LEVEL_M = 1000 /* above the bed, or below it */
};

static size_t used_samples(struct cycle *cycle, const struct settings_gauge *known, const struct gauge_picture *gauge,
                           bool is_as_measured)
{
    size_t used = 0;
    for (size_t index = 0; index < gauge->reading_count; index++) {
        const struct known_reading *reading = &gauge->readings[index];
        if (reading->verdict.use != QUALITY_USE)
            continue;
        cycle->sample_utc_s[used] = reading->reading.observed_utc_s;
        double value = reading->reading.value_si;
        cycle->sample_value[used++] = is_as_measured ? value : cycle_quantity_discharge(known, value);
    }
    return used;
}

/* The assumed future is known at newest + i step; the grid runs from start + i step: straight lines between. */
static double future_at(const double future_m3s[], size_t count, double steps)
{
    double whole = floor(steps);
    size_t index = (size_t)whole;
    if (index + 1 >= count)
        return future_m3s[count - 1];
    return future_m3s[index] + (steps - whole) * (future_m3s[index + 1] - future_m3s[index]);
}

/* One of the futures after the newest reading. It goes as far as the arrays may ever reach, so that its length changes no value. */
static enum fw_status append_future(struct cycle *cycle, const struct settings_gauge *known,
                                    const struct gauge_picture *gauge, enum assumed_future future, size_t from,
                                    size_t step_count, double row_m3s[])
{
    int64_t step_s = cycle->settings->time_step_s;
    int64_t start_s = cycle->present->start_utc_s - gauge->newest_utc_s;
    size_t count = (size_t)((start_s + (int64_t)step_count * step_s) / step_s) + 2;
    count = count < cycle->step_capacity ? count : cycle->step_capacity;
    enum fw_status status =
        assumed_inflow(&known->assumed, future, known->measures == SETTINGS_STAGE ? &known->rating : NULL,
                       gauge->newest_value, gauge->rate_per_s, (double)step_s, count, cycle->future_m3s);
    for (size_t step = from; step <= step_count && status == FW_OK; step++)
        row_m3s[step] = fmax(0.0, future_at(cycle->future_m3s, count + 1,
                                            (double)(start_s + (int64_t)step * step_s) / (double)step_s));
    return status;
}

/* How many steps there are up to and with the newest reading. */
static size_t measured_steps(const struct cycle *cycle, const struct gauge_picture *gauge, size_t step_count)
{
    int64_t start_utc_s = cycle->present->start_utc_s;
    if (gauge->newest_utc_s < start_utc_s)
        return 0;
    size_t measured = (size_t)((gauge->newest_utc_s - start_utc_s) / cycle->settings->time_step_s) + 1;
    return measured <= step_count ? measured : step_count + 1;
}

/* In mid-river nothing is assumed: before, between and after the readings what is routed there goes on. */
static enum fw_status fill_inner_inflow(struct cycle *cycle, size_t index, const struct gauge_picture *gauge,
                                        size_t step_count)
{
    const struct settings_gauge *known = &cycle->settings->gauges[index];
    size_t row = cycle->step_capacity + 1;
    double *inflow = cycle->inflow_m3s + index * CYCLE_FUTURES * row;
    size_t used = used_samples(cycle, known, gauge, false);
    size_t measured = used > 0 ? measured_steps(cycle, gauge, step_count) : 0;
    enum fw_status status = FW_OK;
    if (measured > 0)
        status = series_resample(used, cycle->sample_utc_s, cycle->sample_value, cycle->present->start_utc_s,
                                 cycle->settings->time_step_s, GAP_LIMIT_FACTOR * known->expect_every_s, measured,
                                 inflow, cycle->origin);
    for (size_t step = 0; step <= step_count && status == FW_OK; step++)
        inflow[step] = step < measured && cycle->origin[step] == SERIES_MEASURED ? fmax(inflow[step], 0.0) : NAN;
    for (size_t future = 1; future < CYCLE_FUTURES; future++)
        memcpy(inflow + future * row, inflow, (step_count + 1) * sizeof *inflow);
    return status;
}

static double clamp_m(double value_m, double low_m, double high_m)
{
    return fmin(fmax(value_m, low_m), high_m);
}

/*
 * A level that a gauge measures: held after its newest reading, but by the two edges of the envelope, which move it as fast as
 * it was ever seen to; before any reading at all the highest that is believed, which dams up most.
 */
static enum fw_status fill_measured_level(struct cycle *cycle, const struct settings_level *level,
                                          const struct gauge_picture *gauge, size_t step_count, double depth_m[])
{
    const struct settings_gauge *known = &cycle->settings->gauges[level->gauge];
    size_t row = cycle->step_capacity + 1;
    enum fw_status status = cycle_reserve_samples(cycle, gauge->reading_count + 1);
    if (status != FW_OK)
        return status;
    size_t used = used_samples(cycle, known, gauge, true);
    size_t measured = used > 0 ? measured_steps(cycle, gauge, step_count) : 0;
    double newest_m = used > 0                           ? gauge->newest_value
                      : isfinite(known->quality.highest) ? known->quality.highest
                                                         : level->bed_at_m;
    if (measured > 0)
        status = series_resample(used, cycle->sample_utc_s, cycle->sample_value, cycle->present->start_utc_s,
                                 cycle->settings->time_step_s, GAP_LIMIT_FACTOR * known->expect_every_s, measured,
                                 depth_m, NULL);
    /* the first row last: it holds what was measured */
    for (size_t future = CYCLE_FUTURES; future-- > 0 && status == FW_OK;) {
        double rate_per_s =
            future == ASSUMED_FASTEST_RISE   ? fmax(known->assumed.fastest_rise_per_s, gauge->rate_per_s)
            : future == ASSUMED_FASTEST_FALL ? fmin(-known->assumed.fastest_fall_per_s, gauge->rate_per_s)
                                             : 0.0;
        for (size_t step = 0; step <= step_count; step++) {
            double since_s = (double)(cycle->present->start_utc_s - gauge->newest_utc_s) +
                             (double)step * (double)cycle->settings->time_step_s;
            double moved_m = used > 0 ? newest_m + rate_per_s * since_s : newest_m;
            double value_m = step < measured ? depth_m[step]
                                             : clamp_m(moved_m, fmin(known->quality.lowest, newest_m),
                                                       fmax(known->quality.highest, newest_m));
            depth_m[future * row + step] = clamp_m(value_m - level->bed_at_m, -HIGHEST_LEVEL_M, HIGHEST_LEVEL_M);
        }
    }
    return status;
}

static void fill_series_level(const struct cycle *cycle, const struct settings_level *level, size_t step_count,
                              double depth_m[])
{
    size_t at = 0;
    for (size_t step = 0; step <= step_count; step++) {
        double utc_s = (double)(cycle->present->start_utc_s + (int64_t)step * cycle->settings->time_step_s);
        while (at + 1 < level->row_count && level->time_s[at + 1] <= utc_s)
            at++;
        bool is_outside = utc_s <= level->time_s[0] || at + 1 == level->row_count;
        double share = is_outside ? 0.0 : (utc_s - level->time_s[at]) / (level->time_s[at + 1] - level->time_s[at]);
        depth_m[step] =
            is_outside ? level->stage_m[at] : (1.0 - share) * level->stage_m[at] + share * level->stage_m[at + 1];
    }
    for (size_t future = 1; future < CYCLE_FUTURES; future++)
        memcpy(depth_m + future * (cycle->step_capacity + 1), depth_m, (step_count + 1) * sizeof *depth_m);
}

static enum fw_status fill_levels(struct cycle *cycle, const struct picture *picture, size_t step_count)
{
    const struct settings *settings = cycle->settings;
    enum fw_status status = FW_OK;
    for (size_t index = 0; index < settings->level_count && status == FW_OK; index++) {
        const struct settings_level *level = &settings->levels[index];
        double *depth_m =
            cycle->inflow_m3s + (settings->gauge_count + index) * CYCLE_FUTURES * (cycle->step_capacity + 1);
        if (level->gauge == SETTINGS_NONE)
            fill_series_level(cycle, level, step_count, depth_m);
        else
            status = fill_measured_level(cycle, level, &picture->gauges[level->gauge], step_count, depth_m);
    }
    return status;
}

/* The measured past is one for all futures, up to and with the newest reading. */
static enum fw_status fill_inflow(struct cycle *cycle, size_t index, const struct gauge_picture *gauge,
                                  size_t step_count)
{
    const struct settings_gauge *known = &cycle->settings->gauges[index];
    int64_t step_s = cycle->settings->time_step_s, start_utc_s = cycle->present->start_utc_s;
    size_t row = cycle->step_capacity + 1;
    double *inflow = cycle->inflow_m3s + index * CYCLE_FUTURES * row;
    enum fw_status status = cycle_reserve_samples(cycle, gauge->reading_count + 1);
    if (status != FW_OK)
        return status;
    if (network_gauge_is_inner(&cycle->settings->river, index))
        return fill_inner_inflow(cycle, index, gauge, step_count);
    size_t used = known->gives_level_only ? 0 : used_samples(cycle, known, gauge, false);
    double least_m3s = forecast_network_least_inflow_m3s(cycle->settings, cycle->network, index);
    size_t measured = 0;
    if (used == 0) {
        measured = step_count + 1;
        memset(inflow, 0, measured * sizeof *inflow);
    } else {
        measured = measured_steps(cycle, gauge, step_count);
        status = series_resample(used, cycle->sample_utc_s, cycle->sample_value, start_utc_s, step_s,
                                 GAP_LIMIT_FACTOR * known->expect_every_s, measured, inflow, NULL);
        for (size_t step = 0; step < measured && status == FW_OK; step++)
            inflow[step] = fmax(inflow[step], 0.0);
    }
    for (size_t future = 0; future < CYCLE_FUTURES && status == FW_OK; future++) {
        if (future > 0)
            memcpy(inflow + future * row, inflow, measured * sizeof *inflow);
        if (measured <= step_count)
            status = append_future(cycle, known, gauge, (enum assumed_future)future, measured, step_count,
                                   inflow + future * row);
        for (size_t step = 0; step <= step_count; step++)
            inflow[future * row + step] = fmax(inflow[future * row + step], least_m3s);
    }
    return status;
}

enum fw_status cycle_fill_inflow(struct cycle *cycle, const struct picture *picture, size_t step_count)
{
    enum fw_status status = FW_OK;
    for (size_t gauge = 0; gauge < cycle->settings->gauge_count && status == FW_OK; gauge++)
        status = fill_inflow(cycle, gauge, &picture->gauges[gauge], step_count);
    return status == FW_OK ? fill_levels(cycle, picture, step_count) : status;
}
