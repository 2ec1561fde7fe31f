/* SPDX-License-Identifier: MIT */
/*
 * From passages to what someone should do next, per crossing: a pure state machine.
 *
 * Advice is computed. Road state is only ever a person's word. Advice never says that a road is fit to use, and
 * never steps down for want of data. The first rise is never delayed; stepping down waits.
 *
 * A road not shut on both sides stands on a ladder: QUIET, MUSTER, SEND, LATE. A road shut on both sides, or under a
 * walk-over, is KEEP SHUT or WALK-OVER. A person's word about the road moves the crossing between the two at once;
 * nothing else does. docs/decisions.md says in full what each word means and lists the transitions.
 */
#ifndef FOREWATER_ENGINE_ADVICE_H
#define FOREWATER_ENGINE_ADVICE_H

#include <stdbool.h>
#include <stdint.h>

#include "engine/passage.h"

enum advice_level { /* stored by name, ordered by urgency up to LATE */
                    ADVICE_QUIET = 0,
                    ADVICE_MUSTER,
                    ADVICE_SEND,
                    ADVICE_LATE,      /* too late to close dry */
                    ADVICE_KEEP_SHUT, /* not yet time even to send a walk-over */
                    ADVICE_WALK_OVER  /* a walk-over may be sent; the rest is people's */
};

enum road_state {
    ROAD_OPEN = 0,
    ROAD_CREW_CALLED,
    ROAD_CREW_OUT,
    ROAD_ONE_SIDE_SHUT,
    ROAD_SHUT, /* both sides */
    ROAD_WALK_OVER,
    ROAD_HANDED_BACK
};

enum advice_reason {                             /* bits: why the level is what it is */
                     ADVICE_BY_CHANCE = 1 << 0,  /* chance of the closing mark >= the muster chance */
                     ADVICE_BY_ACT_BY = 1 << 1,  /* act-by within the slack, or past */
                     ADVICE_BY_TRIGGER = 1 << 2, /* a signed trigger holds on a reading */
                     ADVICE_BY_ASSUMED_TRIGGER =
                         1 << 3, /* a signed trigger holds on a rise carried forward while the gauge is silent */
                     ADVICE_BY_CREW_PLAN = 1 << 4,
                     ADVICE_BY_BLIND = 1 << 5,      /* blind and rising, or silent for days: not QUIET */
                     ADVICE_BY_WATER_SEEN = 1 << 6, /* a person saw water at the crossing */
                     ADVICE_HELD_NO_DATA = 1 << 7,  /* would step down, but the gauge is silent */
                     ADVICE_HELD_DWELL =
                         1 << 8, /* would step down, waits out the dwell (or is between the two chances) */
                     ADVICE_HELD_LEVEL = 1 << 9, /* shut: not below the deck by the margin for the hold time */
                     ADVICE_HELD_RETURN =
                         1 << 10 /* shut: water may be back before reopening and re-closing could be done */
};

struct advice_policy { /* signed by the engineer */
    double crew_day_s, crew_night_s, margin_s;
    double muster_chance;        /* at most 0.10 */
    double slack_s;              /* one cycle + 5 min */
    double step_down_chance;     /* MUSTER stays while the chance is not below this (or 0); at most muster_chance */
    double step_down_dwell_s;    /* a lower level must have been wanted this long without a break */
    double blind_dead_s;         /* silent this long: never QUIET */
    double reopen_hold_s;        /* below the deck by the margin for this long, measured */
    double reopen_return_chance; /* the signed limit */
    double act_by_shift_s;       /* a shift of act-by larger than this is a new decision */
};

struct advice_facts {
    int64_t now_utc_s;
    bool is_night;              /* picks the crew time */
    struct passage closing;     /* of the closing mark (over all runs) */
    struct passage lowest_wet;  /* of the lowest wet mark: may be the same */
    bool trigger_holds;         /* a signed SEND trigger, on readings */
    bool assumed_trigger_holds; /* the same on a carried rise */
    bool joined_by_crew_plan;
    bool is_blind;       /* the newest accepted observation on the path is older than its limit */
    bool is_rising;      /* the last known movement was upwards */
    double silent_s;     /* age of the newest accepted observation */
    bool water_seen_wet; /* newest fact about water seen says wet */
    enum road_state road;
    int64_t crew_called_utc_s; /* when a person said CREW CALLED (or OUT) in this thread; 0: not known */
    /* how long the computed level (highest run) has been below deck - margin, on measured water; 0: it is not */
    double below_deck_for_s;
    double chance_of_return; /* of water at the closing mark before reopening + re-closing could be done */
};

struct advice {
    enum advice_level level;
    bool is_blind;        /* overlay */
    bool near_sides_only; /* SEND and LATE text: do not cross */
    unsigned reasons;
    int64_t act_by_utc_s;           /* PASSAGE_NEVER: none (no arrival, or the road is shut) */
    int64_t since_utc_s;            /* of this level */
    int64_t onset_utc_s;            /* when the thread opened (left QUIET); 0: no thread */
    int64_t step_down_from_utc_s;   /* since when a step down has been wanted without a break; 0: not */
    enum advice_level step_down_to; /* the highest level wanted since then */
    int64_t told_act_by_utc_s;      /* act-by at the last change of decision */
};

/* The state before anything is known: QUIET, no act-by. */
struct advice advice_start(void);

/*
 * One step. `changed_out` (may be NULL): the *decision* changed - level, blind overlay, near-sides-only, or act-by
 * by more than the shift.
 *
 * act_by = earliest arrival at the closing mark - (crew time of the hour + margin), exactly; data age is not
 * subtracted, since readings carry their observed times. While blind, an act-by that the forecast no longer gives is
 * kept.
 *
 * A shift of act-by counts while the level is MUSTER or SEND, the road is not shut and the act-by last told is not
 * past: any earlier act-by by more than act_by_shift_s; a later one only while no crew has been called, and then by
 * more than act_by_shift_s and a quarter of the time that was left (hours ahead, a quarter of an hour is no news). None
 * before and one now is the largest shift.
 *
 * A crew sent now arrives a crew time from now; one that was called arrives a crew time after its call (or now, if
 * that is past, or if it is out and the hour of its call is not known; where one side is shut it is there). LATE:
 * that is past the likely arrival at the lowest wet mark, or a person has seen water. near_sides_only: it is past
 * the earliest; always at LATE; taken back only with act_by_shift_s in hand, and never while blind or while the SEND
 * is only held.
 */
struct advice advice_step(const struct advice_policy *policy, const struct advice_facts *facts,
                          const struct advice *last, bool *changed_out);

const char *advice_level_name(enum advice_level level); /* "KEEP SHUT"; "?" outside the list */
const char *road_state_name(enum road_state road);      /* "CREW CALLED"; "?" outside the list */
/* Any case; blank, '-' or '_' between words. False, and nothing written, for any other word. */
bool road_state_from_name(const char *name, enum road_state *road_out);

#endif
