/* SPDX-License-Identifier: MIT */
#include "daemon/cycle_steps.h"

#include <assert.h>
#include <math.h>
#include <stdlib.h>
#include <string.h>

#include "daemon/forecast_network.h"

static enum fw_status allocate_work_space(struct cycle *cycle)
{
    const struct settings *settings = cycle->settings;
    size_t groups = settings->roughness_factor_count;
    cycle->member_count = groups * CYCLE_FUTURES;
    cycle->forecast_column_count = groups * ASSUMED_FORECAST_COUNT;
    cycle->step_capacity =
        (size_t)((settings->warm_up_s + settings->horizon_s + CYCLE_ALIGN_S) / settings->time_step_s) + 2;
    size_t row = cycle->step_capacity + 1;
    cycle->forecast_columns = calloc(cycle->forecast_column_count, sizeof *cycle->forecast_columns);
    cycle->is_above = calloc(settings->gauge_count + 1, sizeof *cycle->is_above);
    cycle->inflow_m3s =
        calloc((settings->gauge_count + settings->level_count) * CYCLE_FUTURES * row + 1, sizeof(double));
    cycle->origin = calloc(row, sizeof *cycle->origin);
    cycle->deck_water = calloc(row * cycle->member_count, sizeof *cycle->deck_water);
    cycle->deck_share = calloc(row * cycle->member_count, sizeof(double));
    cycle->future_m3s = calloc(row, sizeof(double));
    if (!cycle->forecast_columns || !cycle->is_above || !cycle->inflow_m3s || !cycle->deck_water ||
        !cycle->deck_share || !cycle->future_m3s || !cycle->origin)
        return FW_NO_MEMORY;
    size_t next = 0;
    for (size_t group = 0; group < groups; group++)
        for (size_t future = 0; future < ASSUMED_FORECAST_COUNT; future++)
            cycle->forecast_columns[next++] = group * CYCLE_FUTURES + future;
    return FW_OK;
}

static void clear_season(struct cycle *cycle)
{
    track_destroy(cycle->present);
    track_destroy(cycle->coming);
    network_destroy(cycle->network);
    season_river_clear(&cycle->season);
}

enum fw_status cycle_take_season(struct cycle *cycle, int64_t now_utc_s, struct fw_error *error)
{
    const struct settings *settings = cycle->settings;
    size_t index = season_index(settings, now_utc_s);
    if (cycle->network != NULL && index == cycle->season_index)
        return FW_OK;
    struct cycle fresh = {.network = NULL}; /* of which only these four are used */
    enum fw_status status = season_river_make(settings, season_day(settings, now_utc_s), &fresh.season);
    if (status == FW_OK)
        status = forecast_network_create(settings, &fresh.season.river, CYCLE_FUTURES, &fresh.network, error);
    if (status == FW_OK)
        status = track_create(settings, fresh.network, cycle->step_capacity, &fresh.present);
    if (status == FW_OK)
        status = track_create(settings, fresh.network, cycle->step_capacity, &fresh.coming);
    if (status != FW_OK) {
        clear_season(&fresh);
        return status == FW_NO_MEMORY ? fw_error_set(error, status, "no memory for the forecast") : status;
    }
    clear_season(cycle);
    cycle->season = fresh.season;
    cycle->network = fresh.network;
    cycle->present = fresh.present;
    cycle->coming = fresh.coming;
    cycle->readied_utc_s = 0;
    cycle->season_index = index;
    return FW_OK;
}

enum fw_status cycle_create(const struct settings *settings, struct cycle **cycle_out, struct fw_error *error)
{
    struct cycle *cycle = calloc(1, sizeof *cycle);
    if (cycle == NULL)
        return fw_error_set(error, FW_NO_MEMORY, "no memory for the forecast");
    cycle->settings = settings;
    enum fw_status status = allocate_work_space(cycle);
    if (status != FW_OK)
        fw_error_set(error, status, "no memory for the forecast");
    else
        status = cycle_take_season(cycle, 0, error); /* the first pass brings the date */
    if (status != FW_OK) {
        cycle_destroy(cycle);
        return status;
    }
    *cycle_out = cycle;
    return FW_OK;
}

void cycle_destroy(struct cycle *cycle)
{
    if (cycle == NULL)
        return;
    clear_season(cycle);
    free(cycle->forecast_columns);
    free(cycle->is_above);
    free(cycle->inflow_m3s);
    free(cycle->deck_water);
    free(cycle->deck_share);
    free(cycle->sample_utc_s);
    free(cycle->sample_value);
    free(cycle->samples);
    free(cycle->verdicts);
    free(cycle->sample_index);
    free(cycle->future_m3s);
    free(cycle->origin);
    free(cycle);
}

enum fw_status cycle_reserve_samples(struct cycle *cycle, size_t count)
{
    if (count <= cycle->sample_capacity)
        return FW_OK;
    size_t capacity = count * 2;
    free(cycle->sample_utc_s);
    free(cycle->sample_value);
    free(cycle->samples);
    free(cycle->verdicts);
    free(cycle->sample_index);
    cycle->sample_utc_s = calloc(capacity, sizeof *cycle->sample_utc_s);
    cycle->sample_value = calloc(capacity, sizeof *cycle->sample_value);
    cycle->samples = calloc(capacity, sizeof *cycle->samples);
    cycle->verdicts = calloc(capacity, sizeof *cycle->verdicts);
    cycle->sample_index = calloc(capacity, sizeof *cycle->sample_index);
    cycle->sample_capacity = capacity;
    if (!cycle->sample_utc_s || !cycle->sample_value || !cycle->samples || !cycle->verdicts || !cycle->sample_index) {
        cycle->sample_capacity = 0;
        return FW_NO_MEMORY;
    }
    return FW_OK;
}

void cycle_spread_at(const struct cycle *cycle, size_t point, size_t step, double spread_out_m[3])
{
    double values[CYCLE_FORECASTS_MAX] = {0};
    const double *row = cycle_stage_m(cycle, point, step);
    size_t count = cycle->forecast_column_count;
    assert(count > 0 && count <= CYCLE_FORECASTS_MAX);
    for (size_t column = 0; column < count; column++) { /* insertion sort: there are nine */
        double value = row[cycle->forecast_columns[column]];
        size_t place = column;
        for (; place > 0 && values[place - 1] > value; place--)
            values[place] = values[place - 1];
        values[place] = value;
    }
    spread_out_m[0] = values[0];
    spread_out_m[1] = values[count / 2];
    spread_out_m[2] = values[count - 1];
}
