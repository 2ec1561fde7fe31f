/* SPDX-License-Identifier: MIT */
/*
 * Judges one gauge's recent readings: what each is worth and why. Works in time, never in samples.
 *
 * The judge is a pure function of the readings up to `now`: asked again with the same readings and the same now it gives the same answer,
 * and it may change its mind about the past when a later reading confirms or denies it.
 */
#ifndef FOREWATER_ENGINE_QUALITY_H
#define FOREWATER_ENGINE_QUALITY_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include "engine/status.h"

/* Reasons are bits; a reading may have several. Stored, so never renumbered. */
enum quality_reason {
    QUALITY_OUT_OF_RANGE = 1 << 0,   /* outside lowest .. highest */
    QUALITY_RISE_TOO_FAST = 1 << 1,  /* faster than fastest_rise since the reading before it that counts */
    QUALITY_FALL_TOO_FAST = 1 << 2,  /* likewise downwards */
    QUALITY_UNCONFIRMED = 1 << 3,    /* a suspect rise, held for confirm_within */
    QUALITY_COUNTS_UNCONFIRMED = 1 << 4, /* the limit passed with no second reading: it counts, at lower confidence */
    QUALITY_DENIED = 1 << 5,         /* a later reading returned to the old course: a spike */
    QUALITY_CONFIRMED = 1 << 6,      /* a later reading bore it out */
    QUALITY_FROZEN = 1 << 7,         /* unmoved while the river was moving, or for longer than frozen_after */
    QUALITY_IN_FUTURE = 1 << 8,      /* observed later than now by more than the tolerance: waits for its time */
    QUALITY_OUTRANKED = 1 << 9,      /* another source of higher trust speaks for this time */
    QUALITY_HAND = 1 << 10           /* a person's reading */
};

enum quality_flag { /* the published flag values of real-time water-level quality control (QARTOD manual 2.1) */
    QUALITY_PASS = 1,
    QUALITY_NOT_EVALUATED = 2,
    QUALITY_SUSPECT = 3,
    QUALITY_FAIL = 4,
    QUALITY_MISSING = 9
};

enum quality_use {
    QUALITY_USE = 0,    /* drives the forecast, and its observed time counts as news of the river */
    QUALITY_HOLD,       /* not yet */
    QUALITY_KEEP_OUT    /* recorded, never used unless judged anew */
};

struct quality_rules { /* a limit that is not set is INFINITY (or -INFINITY for lowest) */
    double lowest, highest;        /* of the measured quantity */
    double fastest_rise_per_s;
    double fastest_fall_per_s;
    double confirm_within_s;
    double frozen_after_s;         /* unmoved this long: frozen, whatever went before */
    double frozen_moving_s;        /* unmoved this long after moving */
    double moving_rate_per_s;      /* the rate above which the river counts as moving before the freeze */
    double resolution;             /* changes no larger than this are no change */
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
 * A suspect fall is flagged and kept out until borne out; a suspect rise is held until a second reading within confirm_within agrees,
 * or the limit passes, and then it counts: the filter fails towards warning. Hand readings are never held.
 * A frozen reading is flagged suspect and kept out: its observed time is then no news of the river. The first value of a
 * freeze still counts. A step that ends a freeze is not a spike.
 * FW_BAD_INPUT: times not rising, a value not finite.
 */
FW_MUST_CHECK enum fw_status quality_judge(const struct quality_rules *rules, size_t sample_count,
                                           const struct quality_sample samples[], int64_t now_utc_s,
                                           struct quality_verdict verdicts_out[]);

/* One reason in words ("rise faster than 4.0 m/h allowed" is composed by the caller; this is the bare word). */
const char *quality_reason_word(enum quality_reason reason);

#endif
