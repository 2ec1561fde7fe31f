/* SPDX-License-Identifier: MIT */
/*
 * When water reaches a mark: per member, and over all members.
 *
 * First passage per member: the first time, at or after `now`, at which the stage is at or above the mark. A member already there at
 * `now` has passed at the start of the present spell (found in the past part of its curve). Never = INFINITY.
 * Over a small stated set of runs: earliest, likely, latest = minimum, middle and maximum over all runs (never-arriving ones count
 * as INFINITY); chance = share of runs that arrive inside the horizon.
 */
#ifndef FOREWATER_ENGINE_PASSAGE_H
#define FOREWATER_ENGINE_PASSAGE_H

#include <stddef.h>
#include <stdint.h>

#include "engine/status.h"

#define PASSAGE_NEVER INT64_MAX

struct passage {
    double chance; /* 0 .. 1 */
    int64_t earliest_utc_s, likely_utc_s, latest_utc_s; /* PASSAGE_NEVER: not within the horizon */
    int64_t below_again_earliest_utc_s, below_again_latest_utc_s; /* end of that spell over the runs that arrive; PASSAGE_NEVER: not within */
};

struct passage_peak { /* the highest stage at or after now, per point */
    double lowest_m, likely_m, highest_m; /* minimum, middle, maximum over runs */
    int64_t likely_utc_s;
};

struct passage_curves { /* stage_m[step][member], members innermost, member_stride apart in the row */
    size_t step_count;
    size_t member_count;      /* columns that count */
    const size_t *member_column; /* member_count columns of the row to read */
    size_t row_stride;
    const double *stage_m;
    int64_t start_utc_s;
    int64_t step_s;
};

enum { PASSAGE_MEMBERS_MAX = 1024 };

/* FW_BAD_INPUT: no member, too many, now outside the curves, a mark not finite. Allocates nothing. */
FW_MUST_CHECK enum fw_status passage_of_mark(const struct passage_curves *curves, int64_t now_utc_s, double mark_m,
                                             struct passage *passage_out);
FW_MUST_CHECK enum fw_status passage_peak_after(const struct passage_curves *curves, int64_t now_utc_s,
                                                struct passage_peak *peak_out);

/* Share of runs that are at or above the mark at any time in [from, to]; steps are joined by straight lines. */
FW_MUST_CHECK enum fw_status passage_chance_between(const struct passage_curves *curves, double mark_m, int64_t from_utc_s,
                                                    int64_t to_utc_s, double *chance_out);

#endif
