/* SPDX-License-Identifier: MIT */
#include "daemon/cycle_steps.h"

#include <math.h>

enum { LATE_READINGS_S = 3600 }; /* the coming track stays behind what the next readings may change */

static size_t steps_between(const struct cycle *cycle, int64_t from_utc_s, int64_t to_utc_s)
{
    return (size_t)((to_utc_s - from_utc_s) / cycle->settings->time_step_s);
}

/* The track that starts where this pass must; at a change of start it is the coming one. */
static void choose_track(struct cycle *cycle, int64_t start_utc_s)
{
    if (cycle->coming->start_utc_s == start_utc_s) {
        struct track *coming = cycle->coming;
        cycle->coming = cycle->present;
        cycle->present = coming;
        cycle->readied_utc_s = 0;
    }
    track_begin(cycle->present, start_utc_s);
}

/*
 * So that a change of start costs no more than any other pass, the coming track is routed from its start beside the present one, at an even pace
 * that brings it to the moment of change when that moment comes. What it gives does not depend on the pace. Left out where its steps would
 * not fall on the present one's.
 */
static enum fw_status ready_the_coming_track(struct cycle *cycle, int64_t now_utc_s)
{
    int64_t ahead_s = CYCLE_ALIGN_S;
    int64_t start_utc_s = cycle->present->start_utc_s + ahead_s;
    int64_t change_utc_s = start_utc_s + cycle->settings->warm_up_s;
    int64_t until_utc_s = now_utc_s - LATE_READINGS_S;
    if (ahead_s % cycle->settings->time_step_s != 0 || until_utc_s <= start_utc_s)
        return FW_OK;
    if (cycle->coming->start_utc_s != start_utc_s)
        cycle->readied_utc_s = 0;
    track_begin(cycle->coming, start_utc_s);
    if (cycle->readied_utc_s == 0 || cycle->readied_utc_s > now_utc_s)
        cycle->readied_utc_s = now_utc_s - cycle->settings->forecast_every_s;
    size_t done = cycle->coming->step_count;
    size_t all = steps_between(cycle, start_utc_s, until_utc_s);
    int64_t left_s =
        change_utc_s - cycle->settings->forecast_every_s - cycle->readied_utc_s; /* to the last cycle before it */
    double share = left_s > 0 ? fmin(1.0, (double)(now_utc_s - cycle->readied_utc_s) / (double)left_s) : 1.0;
    size_t wanted = done + (size_t)ceil(share * (double)(all > done ? all - done : 0));
    cycle->readied_utc_s = now_utc_s;
    return track_follow(cycle->coming, cycle->inflow_m3s + ahead_s / cycle->settings->time_step_s,
                        cycle->step_capacity + 1, wanted < all ? wanted : all, now_utc_s);
}

/* From where levels are looked at, for this pass's assessment. */
static void look_back(struct cycle *cycle, int64_t now_utc_s, size_t step_count)
{
    int64_t from_utc_s = cycle_aligned_utc_s(now_utc_s - CYCLE_LOOK_BACK_S);
    const struct track *track = cycle->present;
    cycle->first_step = from_utc_s > track->start_utc_s ? steps_between(cycle, track->start_utc_s, from_utc_s) : 0;
    cycle->start_utc_s = track->start_utc_s + (int64_t)cycle->first_step * cycle->settings->time_step_s;
    cycle->step_count = step_count - cycle->first_step;
    cycle->replaced_share =
        step_count > 0 ? (double)track->replaced_steps / (double)(step_count * cycle->member_count) : 0.0;
}

enum fw_status cycle_route(struct cycle *cycle, int64_t now_utc_s, const struct picture *picture,
                           struct fw_error *error)
{
    const struct settings *settings = cycle->settings;
    choose_track(cycle, cycle_aligned_utc_s(now_utc_s - settings->warm_up_s));
    size_t step_count = steps_between(cycle, cycle->present->start_utc_s, now_utc_s + settings->horizon_s);
    enum fw_status status = cycle_fill_inflow(cycle, picture, step_count);
    if (status != FW_OK)
        return status;
    status = track_follow(cycle->present, cycle->inflow_m3s, cycle->step_capacity + 1, step_count, now_utc_s);
    if (status == FW_OK)
        status = ready_the_coming_track(cycle, now_utc_s);
    if (status != FW_OK)
        return fw_error_set(error, status, "the flow could not be routed: an inflow is not finite or is negative");
    look_back(cycle, now_utc_s, step_count);
    return FW_OK;
}
