/* SPDX-License-Identifier: MIT */
#include "daemon/cycle_steps.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

#include "engine/series.h"

enum { GAP_LIMIT_FACTOR = 4 }; /* a gap longer than this many expected intervals is called filled */

static size_t used_samples(struct cycle *cycle, const struct settings_gauge *known, const struct gauge_picture *gauge)
{
    size_t used = 0;
    for (size_t index = 0; index < gauge->reading_count; index++) {
        const struct known_reading *reading = &gauge->readings[index];
        if (reading->verdict.use != QUALITY_USE)
            continue;
        cycle->sample_utc_s[used] = reading->reading.observed_utc_s;
        cycle->sample_value[used++] = cycle_quantity_discharge(known, reading->reading.value_si);
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

static enum fw_status fill_inflow(struct cycle *cycle, size_t index, const struct gauge_picture *gauge)
{
    const struct settings *settings = cycle->settings;
    const struct settings_gauge *known = &settings->gauges[index];
    size_t count = cycle->step_count + 1;
    size_t members = cycle->member_count;
    double *inflow = cycle->inflow_m3s + index * count * members;
    enum fw_status status = cycle_reserve_samples(cycle, gauge->reading_count + 1);
    if (status != FW_OK)
        return status;
    size_t used = used_samples(cycle, known, gauge);
    cycle->has_inflow[index] = used > 0;
    if (used == 0) {
        memset(inflow, 0, count * members * sizeof *inflow);
        return FW_OK;
    }
    status =
        series_resample(used, cycle->sample_utc_s, cycle->sample_value, cycle->start_utc_s, settings->time_step_s,
                        GAP_LIMIT_FACTOR * known->expect_every_s, count, cycle->even_value, cycle->even_origin);
    for (size_t future = 0; future < CYCLE_FUTURES && status == FW_OK; future++) {
        status =
            assumed_inflow(&known->assumed, (enum assumed_future)future,
                           known->measures == SETTINGS_STAGE ? &known->rating : NULL, gauge->newest_value,
                           gauge->rate_per_s, (double)settings->time_step_s, cycle->step_count, cycle->future_m3s);
        for (size_t step = 0; step < count && status == FW_OK; step++) {
            double since_newest =
                (double)(cycle->start_utc_s - gauge->newest_utc_s) + (double)step * (double)settings->time_step_s;
            double flow = since_newest <= 0.0
                              ? cycle->even_value[step]
                              : future_at(cycle->future_m3s, count, since_newest / (double)settings->time_step_s);
            for (size_t group = 0; group < settings->roughness_factor_count; group++)
                inflow[step * members + group * CYCLE_FUTURES + future] = fmax(flow, 0.0);
        }
    }
    return status;
}

enum fw_status cycle_route(struct cycle *cycle, int64_t now_utc_s, const struct picture *picture,
                           struct fw_error *error)
{
    const struct settings *settings = cycle->settings;
    int64_t earliest = now_utc_s - settings->warm_up_s;
    cycle->start_utc_s = earliest - earliest % CYCLE_ALIGN_S;
    cycle->step_count = (size_t)((now_utc_s + settings->horizon_s - cycle->start_utc_s) / settings->time_step_s);
    enum fw_status status = FW_OK;
    for (size_t gauge = 0; gauge < settings->gauge_count && status == FW_OK; gauge++)
        status = fill_inflow(cycle, gauge, &picture->gauges[gauge]);
    if (status != FW_OK)
        return status;
    double *start = calloc(settings->gauge_count * cycle->member_count + 1, sizeof *start);
    if (start == NULL)
        return FW_NO_MEMORY;
    for (size_t gauge = 0; gauge < settings->gauge_count; gauge++)
        memcpy(start + gauge * cycle->member_count,
               cycle->inflow_m3s + gauge * (cycle->step_count + 1) * cycle->member_count,
               cycle->member_count * sizeof *start);
    size_t replaced_before = network_steps_replaced(cycle->network);
    status = network_start_steady(cycle->network, start);
    free(start);
    if (status == FW_OK)
        status = network_advance_with_stage(cycle->network, cycle->step_count, cycle->inflow_m3s, cycle->point_m3s,
                                            cycle->stage_m);
    if (status != FW_OK)
        return fw_error_set(error, status, "the flow could not be routed: an inflow is not finite or is negative");
    cycle->replaced_share = fmin(1.0, (double)(network_steps_replaced(cycle->network) - replaced_before) /
                                          (double)(cycle->step_count * cycle->member_count));
    return FW_OK;
}
