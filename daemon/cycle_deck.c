/* SPDX-License-Identifier: MIT */
/* Depth and speed on a crossing's deck in every run, and when the published limits are passed. */
#include "daemon/cycle_steps.h"

#include <math.h>

#include "daemon/deck.h"

static struct passage_curves share_curves(const struct cycle *cycle)
{
    return (struct passage_curves){.step_count = cycle->step_count + 1,
                                   .member_count = cycle->forecast_column_count,
                                   .member_column = cycle->forecast_columns,
                                   .row_stride = cycle->member_count,
                                   .stage_m = cycle->deck_share,
                                   .start_utc_s = cycle->start_utc_s,
                                   .step_s = cycle->settings->time_step_s};
}

/* False: no run wets the deck, at no step. */
static bool fill_water(struct cycle *cycle, size_t point)
{
    const struct settings *settings = cycle->settings;
    const double *stage_m = cycle_stage_m(cycle, point, 0);
    const double *discharge_m3s = cycle_discharge_m3s(cycle, point, 0);
    double level_m = settings->points[point].deck.level_m;
    bool is_wet = false;
    for (size_t step = 0; step <= cycle->step_count; step++)
        for (size_t index = 0; index < cycle->forecast_column_count; index++) {
            size_t column = cycle->forecast_columns[index];
            size_t place = step * cycle->member_count + column;
            cycle->deck_water[place] = (struct hazard_water){0};
            if (!(stage_m[place] > level_m))
                continue;
            is_wet = true;
            cycle->deck_water[place] =
                deck_water(settings, &cycle->season.river, point, stage_m[place], discharge_m3s[place],
                           settings->roughness_factors[column / CYCLE_FUTURES]);
        }
    return is_wet;
}

struct run_peak {
    struct hazard_water water;
    size_t step;
};

static bool is_more(const struct hazard_water *one, const struct hazard_water *other)
{
    if (one->product_m2_s != other->product_m2_s)
        return one->product_m2_s > other->product_m2_s;
    return one->depth_m > other->depth_m; /* still water is deep all the same */
}

static struct run_peak peak_of_run(const struct cycle *cycle, size_t column, size_t from_step)
{
    struct run_peak peak = {.step = from_step};
    for (size_t step = from_step; step <= cycle->step_count; step++) {
        const struct hazard_water *water = &cycle->deck_water[step * cycle->member_count + column];
        if (is_more(water, &peak.water))
            peak = (struct run_peak){*water, step};
    }
    return peak;
}

/* The runs' peaks, rising; the middle of an even number is the higher, as with levels. */
static void find_peaks(const struct cycle *cycle, size_t from_step, struct deck_picture *deck)
{
    struct run_peak peaks[CYCLE_FORECASTS_MAX] = {0};
    size_t count = cycle->forecast_column_count;
    for (size_t index = 0; index < count; index++) {
        struct run_peak peak = peak_of_run(cycle, cycle->forecast_columns[index], from_step);
        size_t place = index;
        for (; place > 0 && is_more(&peaks[place - 1].water, &peak.water); place--)
            peaks[place] = peaks[place - 1];
        peaks[place] = peak;
    }
    const struct run_peak *middle = &peaks[count / 2];
    deck->low = peaks[0].water;
    deck->likely = middle->water;
    deck->high = peaks[count - 1].water;
    if (middle->water.depth_m > 0.0)
        deck->likely_utc_s = cycle->start_utc_s + (int64_t)middle->step * cycle->settings->time_step_s;
}

/* By what the run that is over a limit first is over it: in the first step that shows it. */
static enum hazard_measure first_measure(const struct cycle *cycle, const struct hazard_limit *limit,
                                         int64_t earliest_utc_s)
{
    if (earliest_utc_s == PASSAGE_NEVER)
        return HAZARD_NONE;
    size_t from = (size_t)((earliest_utc_s - cycle->start_utc_s) / cycle->settings->time_step_s);
    for (size_t step = from; step <= cycle->step_count; step++)
        for (size_t index = 0; index < cycle->forecast_column_count; index++) {
            size_t place = step * cycle->member_count + cycle->forecast_columns[index];
            enum hazard_measure by = hazard_measure_passed(limit, &cycle->deck_water[place]);
            if (by != HAZARD_NONE)
                return by;
        }
    return HAZARD_PRODUCT;
}

/* A run is over a limit as long as the greatest of its three shares of it is 1 or more. */
static enum fw_status find_passage(struct cycle *cycle, enum hazard_whom whom, int64_t now_utc_s,
                                   struct deck_picture *deck)
{
    const struct hazard_limit *limit = hazard_limit_for(whom);
    for (size_t step = 0; step <= cycle->step_count; step++)
        for (size_t index = 0; index < cycle->forecast_column_count; index++) {
            size_t place = step * cycle->member_count + cycle->forecast_columns[index];
            const struct hazard_water *water = &cycle->deck_water[place];
            cycle->deck_share[place] = water->depth_m > 0.0 ? hazard_share_of_limit(limit, water) : 0.0;
        }
    struct passage_curves curves = share_curves(cycle);
    enum fw_status status = passage_of_mark(&curves, now_utc_s, 1.0, &deck->over[whom]);
    if (status == FW_OK)
        deck->by[whom] = first_measure(cycle, limit, deck->over[whom].earliest_utc_s);
    return status;
}

enum fw_status cycle_assess_deck(struct cycle *cycle, size_t point, size_t now_step, int64_t now_utc_s,
                                 struct deck_picture *deck_out)
{
    struct deck_picture deck = deck_picture_empty();
    enum fw_status status = FW_OK;
    if (!fill_water(cycle, point)) {
        deck.low = deck.likely = deck.high = (struct hazard_water){0};
        *deck_out = deck;
        return FW_OK;
    }
    find_peaks(cycle, now_step, &deck);
    for (size_t whom = 0; whom < HAZARD_WHOM_COUNT && status == FW_OK; whom++)
        status = find_passage(cycle, (enum hazard_whom)whom, now_utc_s, &deck);
    if (status == FW_OK)
        *deck_out = deck;
    return status;
}
