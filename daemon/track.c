/* SPDX-License-Identifier: MIT */
#include "daemon/track.h"

#include <stdlib.h>
#include <string.h>

enum {
    HOUR_S = 3600,
    HOURLY_FOR_S = 6 * HOUR_S,
    SIX_HOURLY_S = 6 * HOUR_S,
    SIX_HOURLY_FOR_S = 48 * HOUR_S,
    DAILY_S = 24 * HOUR_S,
    HOURLY_MOST = HOURLY_FOR_S / HOUR_S + 1,
    SIX_HOURLY_MOST = SIX_HOURLY_FOR_S / SIX_HOURLY_S + 1
};

/* --- making ----------------------------------------------------------------------------------------------------- */

static enum fw_status allocate_states(struct track *track)
{
    size_t count = network_state_count(track->network);
    int64_t span_s = (int64_t)track->step_capacity * track->settings->time_step_s;
    track->state_count = HOURLY_MOST + SIX_HOURLY_MOST + (size_t)(span_s / DAILY_S) + 1;
    track->states = calloc(track->state_count, sizeof *track->states);
    track->end.numbers = calloc(count, sizeof(double));
    if (track->states == NULL || track->end.numbers == NULL)
        return FW_NO_MEMORY;
    for (size_t index = 0; index < track->state_count; index++) {
        track->states[index].numbers = calloc(count, sizeof(double));
        if (track->states[index].numbers == NULL)
            return FW_NO_MEMORY;
    }
    return FW_OK;
}

static enum fw_status allocate_rows(struct track *track)
{
    const struct settings *settings = track->settings;
    size_t row = track->step_capacity + 1;
    size_t part = (track->part_steps + 1) * track->member_count;
    track->inflow_m3s = calloc(track->row_count * TRACK_FUTURES * row + 1, sizeof(double));
    track->stage_m = calloc(settings->point_count * row * track->member_count + 1, sizeof(double));
    track->discharge_m3s = calloc(settings->point_count * row * track->member_count + 1, sizeof(double));
    track->part_inflow_m3s = calloc(track->row_count * part + 1, sizeof(double));
    track->part_discharge_m3s = calloc(settings->point_count * part + 1, sizeof(double));
    track->part_stage_m = calloc(settings->point_count * part + 1, sizeof(double));
    bool is_short = !track->inflow_m3s || !track->stage_m || !track->discharge_m3s || !track->part_inflow_m3s ||
                    !track->part_discharge_m3s || !track->part_stage_m;
    return is_short ? FW_NO_MEMORY : FW_OK;
}

enum fw_status track_create(const struct settings *settings, struct network *network, size_t step_capacity,
                            struct track **track_out)
{
    struct track *track = calloc(1, sizeof *track);
    if (track == NULL)
        return FW_NO_MEMORY;
    track->settings = settings;
    track->network = network;
    track->step_capacity = step_capacity;
    track->row_count = settings->gauge_count + settings->level_count;
    track->member_count = settings->roughness_factor_count * TRACK_FUTURES;
    track->part_steps = (size_t)(HOUR_S / settings->time_step_s) + 1;
    enum fw_status status = allocate_rows(track);
    if (status == FW_OK)
        status = allocate_states(track);
    if (status == FW_OK)
        *track_out = track;
    else
        track_destroy(track);
    return status;
}

void track_destroy(struct track *track)
{
    if (track == NULL)
        return;
    for (size_t index = 0; track->states != NULL && index < track->state_count; index++)
        free(track->states[index].numbers);
    free(track->states);
    free(track->end.numbers);
    free(track->inflow_m3s);
    free(track->stage_m);
    free(track->discharge_m3s);
    free(track->part_inflow_m3s);
    free(track->part_discharge_m3s);
    free(track->part_stage_m);
    free(track);
}

/* --- states ------------------------------------------------------------------------------------------------------- */

static void forget_all(struct track *track)
{
    track->is_routed = false;
    track->step_count = 0;
    track->end.is_kept = false;
    for (size_t index = 0; index < track->state_count; index++)
        track->states[index].is_kept = false;
}

static bool is_worth_keeping(int64_t at_utc_s, int64_t now_utc_s)
{
    int64_t age_s = now_utc_s - at_utc_s;
    if (age_s < 0)
        return false;
    return age_s <= HOURLY_FOR_S || (at_utc_s % SIX_HOURLY_S == 0 && age_s <= SIX_HOURLY_FOR_S) ||
           at_utc_s % DAILY_S == 0;
}

/* Those that the first different step leads to, and those that have grown old between the instants kept. */
static void forget_states(struct track *track, size_t first_different, int64_t now_utc_s)
{
    for (size_t index = 0; index < track->state_count; index++) {
        struct track_state *state = &track->states[index];
        state->is_kept =
            state->is_kept && state->step < first_different && is_worth_keeping(state->at_utc_s, now_utc_s);
    }
    track->end.is_kept = track->end.is_kept && track->end.step < first_different;
}

static void keep_state(struct track *track, int64_t at_utc_s, size_t step)
{
    struct track_state *free_one = NULL;
    for (size_t index = 0; index < track->state_count; index++) {
        struct track_state *state = &track->states[index];
        if (!state->is_kept)
            free_one = state;
    }
    if (free_one == NULL)
        return; /* there are as many as can be worth keeping at one time; without one more steps would be routed */
    network_state_save(track->network, free_one->numbers);
    free_one->at_utc_s = at_utc_s;
    free_one->step = step;
    free_one->is_kept = true;
}

static struct track_state *newest_state(struct track *track)
{
    struct track_state *newest = track->end.is_kept ? &track->end : NULL;
    for (size_t index = 0; index < track->state_count; index++) {
        struct track_state *state = &track->states[index];
        if (state->is_kept && (newest == NULL || state->step > newest->step))
            newest = state;
    }
    return newest;
}

/* --- routing ------------------------------------------------------------------------------------------------------ */

/* The first step whose inflow is not what is remembered; what was never routed is not remembered. */
static size_t first_difference(const struct track *track, const double inflow_m3s[], size_t row_stride,
                               size_t step_count)
{
    if (!track->is_routed)
        return 0;
    size_t first = (step_count < track->step_count ? step_count : track->step_count) + 1;
    for (size_t row = 0; row < track->row_count * TRACK_FUTURES; row++) {
        const double *known = track->inflow_m3s + row * (track->step_capacity + 1);
        const double *given = inflow_m3s + row * row_stride;
        if (memcmp(known, given, first * sizeof *known) == 0)
            continue;
        size_t step = 0;
        while (memcmp(&known[step], &given[step], sizeof *known) == 0)
            step++;
        first = step;
    }
    return first;
}

static void remember_inflow(struct track *track, const double inflow_m3s[], size_t row_stride, size_t from,
                            size_t step_count)
{
    for (size_t row = 0; row < track->row_count * TRACK_FUTURES; row++)
        memcpy(track->inflow_m3s + row * (track->step_capacity + 1) + from, inflow_m3s + row * row_stride + from,
               (step_count + 1 - from) * sizeof *inflow_m3s);
}

/* Members innermost, as the network takes it: [gauge, then level][step][member]. */
static void spread_inflow(const struct track *track, size_t from, size_t count, double spread_out_m3s[])
{
    for (size_t row = 0; row < track->row_count; row++)
        for (size_t step = 0; step <= count; step++, spread_out_m3s += track->member_count)
            for (size_t member = 0; member < track->member_count; member++)
                spread_out_m3s[member] =
                    track->inflow_m3s[(row * TRACK_FUTURES + member % TRACK_FUTURES) * (track->step_capacity + 1) +
                                      from + step];
}

static enum fw_status start_steady(struct track *track)
{
    spread_inflow(track, 0, 0, track->part_inflow_m3s);
    return network_start_steady_at(track->network, track->part_inflow_m3s,
                                   track->part_inflow_m3s + track->settings->gauge_count * track->member_count);
}

/* The part's levels and flows go to their rows; the first of them is what stands there already. */
static enum fw_status advance(struct track *track, size_t from, size_t to)
{
    size_t count = to - from;
    size_t part_row = (count + 1) * track->member_count;
    spread_inflow(track, from, count, track->part_inflow_m3s);
    enum fw_status status = network_advance_at(track->network, count, track->part_inflow_m3s,
                                               track->part_inflow_m3s + track->settings->gauge_count * part_row,
                                               track->part_discharge_m3s, track->part_stage_m);
    for (size_t point = 0; point < track->settings->point_count && status == FW_OK; point++) {
        size_t at = (point * (track->step_capacity + 1) + from) * track->member_count;
        memcpy(track->stage_m + at, track->part_stage_m + point * part_row, part_row * sizeof(double));
        memcpy(track->discharge_m3s + at, track->part_discharge_m3s + point * part_row, part_row * sizeof(double));
    }
    track->steps_taken += count;
    return status;
}

/* From a step to the last at or before the next whole hour after it. */
static size_t next_hour(const struct track *track, size_t step, int64_t *hour_utc_s_out)
{
    int64_t step_s = track->settings->time_step_s;
    int64_t after_s = (int64_t)step * step_s / HOUR_S * HOUR_S;
    size_t next = step;
    while (next <= step) {
        after_s += HOUR_S;
        next = (size_t)(after_s / step_s);
    }
    *hour_utc_s_out = track->start_utc_s + after_s;
    return next;
}

static enum fw_status route_on(struct track *track, size_t step, size_t step_count, int64_t now_utc_s)
{
    enum fw_status status = step == step_count ? advance(track, step, step) : FW_OK; /* the start alone */
    while (step < step_count && status == FW_OK) {
        int64_t hour_utc_s = 0;
        size_t hour = next_hour(track, step, &hour_utc_s);
        size_t to = hour < step_count ? hour : step_count;
        status = advance(track, step, to);
        step = to;
        if (status == FW_OK && step == hour && is_worth_keeping(hour_utc_s, now_utc_s))
            keep_state(track, hour_utc_s, step);
    }
    return status;
}

static void keep_end(struct track *track, size_t step_count)
{
    network_state_save(track->network, track->end.numbers);
    track->end.step = step_count;
    track->end.is_kept = true;
    track->step_count = step_count;
    track->is_routed = true;
    track->replaced_steps = network_steps_replaced(track->network);
}

void track_begin(struct track *track, int64_t start_utc_s)
{
    if (track->start_utc_s != start_utc_s)
        forget_all(track);
    track->start_utc_s = start_utc_s;
}

enum fw_status track_follow(struct track *track, const double inflow_m3s[], size_t row_stride, size_t step_count,
                            int64_t now_utc_s)
{
    size_t first = first_difference(track, inflow_m3s, row_stride, step_count);
    track->steps_taken = 0;
    forget_states(track, first, now_utc_s);
    struct track_state *state = newest_state(track);
    if (state == &track->end && track->end.step == step_count)
        return FW_OK;
    remember_inflow(track, inflow_m3s, row_stride, first, step_count);
    enum fw_status status = FW_OK;
    if (state != NULL)
        network_state_restore(track->network, state->numbers);
    else
        status = start_steady(track);
    if (status == FW_OK)
        status = route_on(track, state != NULL ? state->step : 0, step_count, now_utc_s);
    if (status == FW_OK)
        keep_end(track, step_count);
    else
        forget_all(track);
    return status;
}
