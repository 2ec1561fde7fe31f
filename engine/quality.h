/* SPDX-License-Identifier: MIT */
/*
 * Judges one gauge's recent readings: what each is worth and why. Works in time, never in samples.
 *
 * The judge is a pure function of the readings up to `now`: asked again with the same readings and the same now it
 * gives the same answer, and it may change its mind about the past when a later reading confirms or denies it.
 * docs/decisions.md tells it by example.
 */
#ifndef FOREWATER_ENGINE_QUALITY_H
#define FOREWATER_ENGINE_QUALITY_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include "engine/status.h"

/* Reasons are bits; a reading may have several. Stored, so never renumbered. */
enum quality_reason {
    QUALITY_OUT_OF_RANGE = 1 << 0,       /* outside lowest .. highest */
    QUALITY_RISE_TOO_FAST = 1 << 1,      /* faster than fastest_rise since the reading before it that counts */
    QUALITY_FALL_TOO_FAST = 1 << 2,      /* likewise downwards */
    QUALITY_UNCONFIRMED = 1 << 3,        /* a suspect rise, held for confirm_within */
    QUALITY_COUNTS_UNCONFIRMED = 1 << 4, /* the limit passed with no second reading: it counts, at lower confidence */
    QUALITY_DENIED = 1 << 5,             /* a later reading returned to the old course: a spike */
    QUALITY_CONFIRMED = 1 << 6,          /* a later reading bore it out */
    QUALITY_FROZEN = 1 << 7,             /* unmoved while the river was moving, or for longer than frozen_after */
    QUALITY_IN_FUTURE = 1 << 8,          /* observed later than now by more than the tolerance: waits for its time */
    QUALITY_OUTRANKED = 1 << 9,          /* another source of higher trust speaks for this time */
    QUALITY_HAND = 1 << 10               /* a person's reading */
};

enum quality_flag { /* the published flag values of real-time water-level quality control (QARTOD manual 2.1) */
                    QUALITY_PASS = 1,
                    QUALITY_NOT_EVALUATED = 2,
                    QUALITY_SUSPECT = 3,
                    QUALITY_FAIL = 4,
                    QUALITY_MISSING = 9
};

enum quality_use {
    QUALITY_USE = 0, /* drives the forecast, and its observed time counts as news of the river */
    QUALITY_HOLD,    /* not yet */
    QUALITY_KEEP_OUT /* recorded, never used unless judged anew */
};

struct quality_rules {         /* a limit that is not set is INFINITY (or -INFINITY for lowest) */
    double lowest, highest;    /* of the measured quantity */
    double fastest_rise_per_s; /* over the true time between two readings, less one resolution */
    double fastest_fall_per_s;
    double confirm_within_s;  /* a suspect rise waits this long for a second reading, then counts */
    double frozen_after_s;    /* unmoved this long: frozen, whatever went before */
    double frozen_moving_s;   /* unmoved this long after moving */
    double moving_rate_per_s; /* the rate above which the river counts as moving before the freeze */
    double resolution;        /* the gauge's own step: readings less than half of it apart are the same reading */
    double future_tolerance_s;
};

struct quality_sample {
    int64_t observed_utc_s;
    double value;
    bool is_hand; /* a person's reading: ranges are checked, nothing else */
};

struct quality_verdict {
    enum quality_flag flag;
    enum quality_use use;
    unsigned reasons;
};

/*
 * samples: one per observed time (the source of highest trust already chosen), times strictly rising.
 *
 * Rates are measured against the last reading that counts, over the true time between them; a change of one
 * resolution more than the limit allows is rounding. After a hand reading the sensor's own last reading serves too,
 * when it is no further from the hand reading than confirm_within: board and sensor may differ by a few centimetres.
 *
 * A suspect rise is held (UNCONFIRMED) and decided by the readings after it, up to confirm_within and the first one
 * beyond. One that keeps at least half of the rise, and does not fall from it too fast, bears it out (CONFIRMED:
 * both count at once); one that fits the old course denies it (DENIED: a spike). Undecided when confirm_within has
 * passed, it counts at lower confidence (COUNTS_UNCONFIRMED): the filter fails towards warning. A suspect fall is
 * decided likewise, but kept out until borne out. Hand readings are held against the range alone, never held back,
 * and bear out or deny like any other.
 *
 * A freeze is a stretch of the same sensor reading. It is FROZEN once it has lasted frozen_moving_s while the river
 * was moving: it came into the stretch faster than moving_rate, and by now three resolutions of movement had to
 * show, both at that rate (rounding taken off) and on the parabola through the readings of the last 3
 * frozen_moving_s before it, so that a flood that rounds its top is not taken for a dead gauge; or a hand reading
 * stands off by three resolutions more than the moving rate explains (over frozen_moving_s at least, since board and
 * sensor may differ a little), or so far that the sensor could not have come back at the fastest rates. It is also
 * FROZEN after frozen_after_s whatever went before. Then all of it but its first reading is suspect and kept out:
 * those times are no news of the river. Until then it counts. Readings further apart than the limit make no stretch.
 * The step that ends a freeze after movement is measured from its first reading, since the river went on meanwhile,
 * and is so no spike.
 *
 * FW_BAD_INPUT: times not rising, a value not finite, a rule that is not a number. Nothing is written then.
 * Allocates nothing.
 */
FW_MUST_CHECK enum fw_status quality_judge(const struct quality_rules *rules, size_t sample_count,
                                           const struct quality_sample samples[], int64_t now_utc_s,
                                           struct quality_verdict verdicts_out[]);

/*
 * One reason in words ("rise faster than 4.0 m/h allowed" is composed by the caller; this is the bare word); "?" for
 * anything but one bit of the list.
 */
const char *quality_reason_word(enum quality_reason reason);

#endif
