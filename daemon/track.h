/* SPDX-License-Identifier: MIT */
/*
 * One routing of the river from a fixed instant on, taken up again from cycle to cycle.
 *
 * A track remembers what flowed in, what came of it at the points, and the network's state at fixed UTC instants: at every
 * hour of the last six, every six hours of the last two days, every midnight before. Given the inflow of the next cycle
 * it finds the first step that differs, goes back to the newest state before it and routes on from there: a late or
 * revised reading rewinds by itself. What it gives is, bit for bit, what routing from the start gives.
 */
#ifndef FOREWATER_DAEMON_TRACK_H
#define FOREWATER_DAEMON_TRACK_H

#include "daemon/error.h"
#include "daemon/settings/settings.h"
#include "engine/assumed_inflow.h"

enum { TRACK_FUTURES = ASSUMED_FUTURE_COUNT }; /* members of a roughness group, as assumed_inflow lists them */

struct track_state { /* of the network, after a step */
    bool is_kept;
    int64_t at_utc_s; /* the fixed instant; the step is the last at or before it */
    size_t step;
    double *numbers;
};

struct track {
    const struct settings *settings;
    struct network *network; /* the caller's; may be shared by several tracks */
    size_t step_capacity;
    size_t member_count; /* group * TRACK_FUTURES + future */

    int64_t start_utc_s;
    bool is_routed;        /* false: nothing stands below yet */
    size_t step_count;     /* steps routed */
    size_t row_count;      /* the gauges, then the river's levels */
    double *inflow_m3s;    /* [row][future][step_capacity + 1], what led to it; of levels, depths at their feet */
    double *stage_m;       /* [point][step_capacity + 1][member], above the point's invert */
    double *discharge_m3s; /* likewise */
    size_t replaced_steps; /* of all members, that the full equations could not take */
    size_t steps_taken;    /* by the newest track_follow: what it cost */

    struct track_state end; /* after step_count */
    size_t state_count;
    struct track_state *states;

    size_t part_steps; /* most that are routed at once */
    double *part_inflow_m3s, *part_discharge_m3s, *part_stage_m;
};

/* FW_NO_MEMORY. All that a track ever holds is allocated here. The caller destroys. */
FW_MUST_CHECK enum fw_status track_create(const struct settings *settings, struct network *network,
                                          size_t step_capacity, struct track **track_out);
void track_destroy(struct track *track); /* NULL is fine */

/* From this instant on, which is a whole hour. If it began at another, all that it remembers is forgotten. */
void track_begin(struct track *track, int64_t start_utc_s);

/*
 * Routes to step_count (at most step_capacity), with as few steps as the difference to the inflow it remembers allows.
 *
 *   inflow_m3s  [gauge, then level][future], rows of step_count + 1 values, row_stride apart; bits are compared, not
 *               numbers; in mid-river not a number where nothing was measured
 *   now_utc_s   states are kept up to here
 * FW_BAD_INPUT  the network refused an inflow; all is forgotten then.
 */
FW_MUST_CHECK enum fw_status track_follow(struct track *track, const double inflow_m3s[], size_t row_stride,
                                          size_t step_count, int64_t now_utc_s);

/* Levels and flows at a point after a step, [member]; the next step's follow. */
static inline const double *track_stage_m(const struct track *track, size_t point, size_t step)
{
    return track->stage_m + (point * (track->step_capacity + 1) + step) * track->member_count;
}

static inline const double *track_discharge_m3s(const struct track *track, size_t point, size_t step)
{
    return track->discharge_m3s + (point * (track->step_capacity + 1) + step) * track->member_count;
}

#endif
