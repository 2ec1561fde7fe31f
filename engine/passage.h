/* SPDX-License-Identifier: MIT */
/*
 * When water reaches a mark: per member, and over all members.
 *
 * Stages are joined by straight lines between steps, so a crossing is exact within a step. First passage per member:
 * the first time, at or after `now`, at which the stage is at or above the mark. A member already there at `now` has
 * passed at the start of the present spell, found by looking back in the past part of its curve (at the curve's
 * first moment when the spell is older than the curve). A spell that is over before `now` counts for nothing.
 *
 * Over a small stated set of runs, uncalibrated: earliest, likely, latest = minimum, middle and maximum over all
 * runs, those that never arrive counting as later than any that does; the middle of an even number is the earlier of
 * the two middle ones. chance = share of runs that arrive inside the horizon.
 *
 * Whole seconds err towards acting sooner and reopening later: arrivals are rounded down, the end of a spell is
 * rounded up.
 */
#ifndef FOREWATER_ENGINE_PASSAGE_H
#define FOREWATER_ENGINE_PASSAGE_H

#include <stddef.h>
#include <stdint.h>

#include "engine/status.h"

#define PASSAGE_NEVER INT64_MAX

struct passage {
    double chance;                                      /* 0 .. 1 */
    int64_t earliest_utc_s, likely_utc_s, latest_utc_s; /* PASSAGE_NEVER: not within the horizon */
    /* end of that spell, over the runs that arrive; PASSAGE_NEVER: not within the horizon, or no run arrives */
    int64_t below_again_earliest_utc_s, below_again_latest_utc_s;
};

struct passage_peak {                     /* the highest stage at or after now, per point */
    double lowest_m, likely_m, highest_m; /* minimum, middle (of an even number the higher), maximum over runs */
    int64_t likely_utc_s;                 /* of the run that gives likely_m; the last step: still rising there */
};

struct passage_curves { /* stage_m[step][column], members innermost, row_stride apart from step to step */
    size_t step_count;
    size_t member_count;         /* columns that count */
    const size_t *member_column; /* member_count columns of the row to read */
    size_t row_stride;
    const double *stage_m;
    int64_t start_utc_s; /* of step 0 */
    int64_t step_s;
};

enum { PASSAGE_MEMBERS_MAX = 1024 };

/*
 * FW_BAD_INPUT: no member, too many, a column outside the row, no step, step_s <= 0, times beyond what fits, now
 * outside the curves, a mark or a stage that was read not finite. Allocates nothing.
 */
FW_MUST_CHECK enum fw_status passage_of_mark(const struct passage_curves *curves, int64_t now_utc_s, double mark_m,
                                             struct passage *passage_out);

/*
 * Per run the highest stage from now on, on the straight lines; its time from the parabola through that sample and
 * its neighbours (the three highest around the top), to the nearest second and never before now. Ties go to the
 * earlier time. Errors as above.
 */
FW_MUST_CHECK enum fw_status passage_peak_after(const struct passage_curves *curves, int64_t now_utc_s,
                                                struct passage_peak *peak_out);

/*
 * Share of runs that are at or above the mark at any time in [from, to]. Also FW_BAD_INPUT: from after to, or either
 * outside the curves; a window that outruns the horizon is the caller's to decide, never silently cut.
 */
FW_MUST_CHECK enum fw_status passage_chance_between(const struct passage_curves *curves, double mark_m,
                                                    int64_t from_utc_s, int64_t to_utc_s, double *chance_out);

#endif
