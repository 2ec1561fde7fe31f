/* SPDX-License-Identifier: MIT */
#include "engine/advice.h"

#include <math.h>
#include <stddef.h>

static const char *const LEVEL_NAMES[] = {"QUIET", "MUSTER", "SEND", "LATE", "KEEP SHUT", "WALK-OVER"};
static const char *const ROAD_NAMES[] = {"OPEN", "CREW CALLED", "CREW OUT",   "ONE SIDE SHUT",
                                         "SHUT", "WALK-OVER",   "HANDED BACK"};
enum {
    LEVEL_COUNT = sizeof LEVEL_NAMES / sizeof LEVEL_NAMES[0],
    ROAD_COUNT = sizeof ROAD_NAMES / sizeof ROAD_NAMES[0]
};

/* Reasons that ask for a closing of their own, as against being blind or water already there. */
static const unsigned ASKS_FOR_CREW =
    ADVICE_BY_ACT_BY | ADVICE_BY_TRIGGER | ADVICE_BY_ASSUMED_TRIGGER | ADVICE_BY_CREW_PLAN;

struct wanted {
    enum advice_level level;
    unsigned reasons;
};

struct advice advice_start(void)
{
    return (struct advice){.level = ADVICE_QUIET, .act_by_utc_s = PASSAGE_NEVER, .told_act_by_utc_s = PASSAGE_NEVER};
}

static bool road_is_shut(enum road_state road)
{
    return road == ROAD_SHUT || road == ROAD_WALK_OVER;
}

static bool crew_is_on_its_way(enum road_state road)
{
    return road == ROAD_CREW_CALLED || road == ROAD_CREW_OUT || road == ROAD_ONE_SIDE_SHUT;
}

static bool is_on_ladder(enum advice_level level)
{
    return level <= ADVICE_LATE;
}

static double crew_time_s(const struct advice_policy *policy, const struct advice_facts *facts)
{
    return facts->is_night ? policy->crew_night_s : policy->crew_day_s;
}

/* Parts of a second err towards acting sooner. */
static int64_t act_by(const struct advice_policy *policy, const struct advice_facts *facts)
{
    if (facts->closing.earliest_utc_s == PASSAGE_NEVER)
        return PASSAGE_NEVER;
    return facts->closing.earliest_utc_s - (int64_t)ceil(crew_time_s(policy, facts) + policy->margin_s);
}

/* When a crew can be at the crossing. */
static int64_t crew_arrival(const struct advice_policy *policy, const struct advice_facts *facts)
{
    const int64_t now = facts->now_utc_s;
    const int64_t crew_s = (int64_t)ceil(crew_time_s(policy, facts));
    const int64_t called = facts->crew_called_utc_s;
    if (facts->road == ROAD_ONE_SIDE_SHUT || (facts->road == ROAD_CREW_OUT && called == 0))
        return now;
    if (!crew_is_on_its_way(facts->road) || called == 0 || called > now)
        return now + crew_s;
    return called + crew_s > now ? called + crew_s : now;
}

/* What the facts ask for on a road that is not shut, whatever was said before. */
static struct wanted wanted_on_ladder(const struct advice_policy *policy, const struct advice_facts *facts,
                                      int64_t act_by_utc_s)
{
    struct wanted wanted = {ADVICE_QUIET, 0};
    /* said so that a chance or an age that is no number never rests at QUIET */
    if (!(facts->closing.chance < policy->muster_chance))
        wanted.reasons |= ADVICE_BY_CHANCE;
    if ((facts->is_blind && facts->is_rising) || !(facts->silent_s < policy->blind_dead_s))
        wanted.reasons |= ADVICE_BY_BLIND;
    if (act_by_utc_s != PASSAGE_NEVER && (double)(act_by_utc_s - facts->now_utc_s) <= policy->slack_s)
        wanted.reasons |= ADVICE_BY_ACT_BY;
    if (facts->trigger_holds)
        wanted.reasons |= ADVICE_BY_TRIGGER;
    if (facts->assumed_trigger_holds)
        wanted.reasons |= ADVICE_BY_ASSUMED_TRIGGER;
    if (facts->joined_by_crew_plan)
        wanted.reasons |= ADVICE_BY_CREW_PLAN;
    if (wanted.reasons != 0)
        wanted.level = ADVICE_MUSTER;
    if (wanted.reasons & ASKS_FOR_CREW)
        wanted.level = ADVICE_SEND;

    /* a crossing that nothing asks to close is not LATE because its approach gets wet */
    bool meets_water = (wanted.reasons & (ASKS_FOR_CREW | ADVICE_BY_CHANCE)) != 0 &&
                       crew_arrival(policy, facts) > facts->lowest_wet.likely_utc_s;
    if (meets_water)
        wanted.reasons |= ADVICE_BY_ACT_BY;
    if (facts->water_seen_wet)
        wanted.reasons |= ADVICE_BY_WATER_SEEN;
    if (meets_water || facts->water_seen_wet)
        wanted.level = ADVICE_LATE;
    return wanted;
}

/* The highest level wanted while a lower one than held has been wanted without a break. */
static void remember_step_down(const struct advice *last, int64_t now_utc_s, enum advice_level wanted,
                               struct advice *next)
{
    bool goes_on = last->step_down_from_utc_s != 0 && last->step_down_from_utc_s <= now_utc_s;
    next->step_down_from_utc_s = goes_on ? last->step_down_from_utc_s : now_utc_s;
    next->step_down_to = goes_on && last->step_down_to > wanted ? last->step_down_to : wanted;
}

static void forget_step_down(struct advice *next)
{
    next->step_down_from_utc_s = 0;
    next->step_down_to = ADVICE_QUIET;
}

static bool has_dwelt(const struct advice_policy *policy, const struct advice *next, int64_t now_utc_s)
{
    return (double)(now_utc_s - next->step_down_from_utc_s) >= policy->step_down_dwell_s;
}

/* Of a SEND. Once said: taken back only with the shift in hand, never while blind or while the SEND is only held. */
static bool is_near_sides_only(const struct advice_policy *policy, const struct advice_facts *facts, bool was,
                               bool is_held)
{
    const int64_t in_hand_s = was ? (int64_t)policy->act_by_shift_s : 0;
    return (was && (facts->is_blind || is_held)) ||
           crew_arrival(policy, facts) > facts->lowest_wet.earliest_utc_s - in_hand_s;
}

static void step_ladder(const struct advice_policy *policy, const struct advice_facts *facts,
                        const struct advice *last, struct advice *next)
{
    const int64_t now = facts->now_utc_s;
    struct wanted wanted = wanted_on_ladder(policy, facts, next->act_by_utc_s);
    const enum advice_level held = is_on_ladder(last->level) ? last->level : ADVICE_QUIET;

    /* as long as one run still has the water of this spell there, SEND would send a crew into it */
    if (held == ADVICE_LATE && wanted.level == ADVICE_SEND && facts->closing.earliest_utc_s <= now)
        wanted.level = ADVICE_LATE;

    next->reasons = wanted.reasons;
    const bool is_low_enough = facts->closing.chance < policy->step_down_chance || facts->closing.chance <= 0.0;
    if (held != ADVICE_QUIET && wanted.level == ADVICE_QUIET && !is_low_enough) {
        wanted.level = ADVICE_MUSTER;
        next->reasons |= ADVICE_HELD_DWELL;
    }
    next->level = wanted.level;
    if (wanted.level >= held) {
        forget_step_down(next);
    } else if (facts->is_blind) {
        next->level = held;
        next->reasons |= ADVICE_HELD_NO_DATA;
        forget_step_down(next); /* time without data is no time of lower water */
    } else {
        remember_step_down(last, now, wanted.level, next);
        if (has_dwelt(policy, next, now)) {
            next->level = next->step_down_to;
            forget_step_down(next);
        } else {
            next->level = held;
        }
        if (next->level > wanted.level)
            next->reasons |= ADVICE_HELD_DWELL;
    }
    next->near_sides_only = next->level == ADVICE_LATE ||
                            (next->level == ADVICE_SEND &&
                             is_near_sides_only(policy, facts, last->near_sides_only, next->level > wanted.level));
}

/*
 * A walk-over may be sent once everything holds at the same time, and the chance of return, the gauge and the water
 * seen have given no cause against it for the dwell, so that a chance near its limit does not call people out and
 * back.
 */
static void step_shut(const struct advice_policy *policy, const struct advice_facts *facts, const struct advice *last,
                      struct advice *next)
{
    const int64_t now = facts->now_utc_s;
    if (!(facts->below_deck_for_s >= policy->reopen_hold_s))
        next->reasons |= ADVICE_HELD_LEVEL;
    if (!(facts->chance_of_return < policy->reopen_return_chance))
        next->reasons |= ADVICE_HELD_RETURN;
    if (facts->is_blind)
        next->reasons |= ADVICE_HELD_NO_DATA;
    if (facts->water_seen_wet)
        next->reasons |= ADVICE_BY_WATER_SEEN;

    if (next->reasons & ~(unsigned)ADVICE_HELD_LEVEL) {
        forget_step_down(next);
    } else {
        remember_step_down(last, now, ADVICE_QUIET, next);
        if (last->level != ADVICE_WALK_OVER && !has_dwelt(policy, next, now))
            next->reasons |= ADVICE_HELD_DWELL;
    }
    next->level = next->reasons == 0 ? ADVICE_WALK_OVER : ADVICE_KEEP_SHUT;
}

static bool act_by_has_shifted(const struct advice_policy *policy, const struct advice_facts *facts,
                               const struct advice *next)
{
    const int64_t told = next->told_act_by_utc_s, act_by_utc_s = next->act_by_utc_s;
    if ((next->level != ADVICE_MUSTER && next->level != ADVICE_SEND) || act_by_utc_s == PASSAGE_NEVER ||
        told < facts->now_utc_s)
        return false;
    if (told == PASSAGE_NEVER)
        return true;
    const double later_s = (double)(act_by_utc_s - told);
    /* More time in hand is news only when it is much against what was left: hours ahead, a quarter of an hour is not. */
    const double later_limit_s = fmax(policy->act_by_shift_s, 0.25 * (double)(told - facts->now_utc_s));
    return -later_s > policy->act_by_shift_s || (later_s > later_limit_s && !crew_is_on_its_way(facts->road));
}

struct advice advice_step(const struct advice_policy *policy, const struct advice_facts *facts,
                          const struct advice *last, bool *changed_out)
{
    const int64_t now = facts->now_utc_s;
    const bool is_shut = road_is_shut(facts->road);
    struct advice before = *last;
    if (is_shut == is_on_ladder(last->level))
        forget_step_down(&before); /* a person's word moved the crossing: the old wish is void */
    struct advice next = before;
    next.is_blind = facts->is_blind;
    next.near_sides_only = false;
    next.reasons = 0;
    if (is_shut) {
        next.act_by_utc_s = PASSAGE_NEVER;
        step_shut(policy, facts, &before, &next);
    } else {
        int64_t act_by_utc_s = act_by(policy, facts);
        if (act_by_utc_s != PASSAGE_NEVER || !facts->is_blind)
            next.act_by_utc_s = act_by_utc_s;
        step_ladder(policy, facts, &before, &next);
    }

    if (next.level != last->level || last->since_utc_s == 0)
        next.since_utc_s = now;
    if (next.level != ADVICE_QUIET && last->onset_utc_s == 0)
        next.onset_utc_s = now;
    if (next.level == ADVICE_QUIET && (facts->road == ROAD_OPEN || facts->road == ROAD_HANDED_BACK))
        next.onset_utc_s = 0;

    bool has_changed = next.level != last->level || next.is_blind != last->is_blind ||
                       next.near_sides_only != last->near_sides_only || act_by_has_shifted(policy, facts, &next);
    if (has_changed)
        next.told_act_by_utc_s = next.act_by_utc_s;
    if (changed_out)
        *changed_out = has_changed;
    return next;
}

const char *advice_level_name(enum advice_level level)
{
    return (unsigned)level < LEVEL_COUNT ? LEVEL_NAMES[level] : "?";
}

const char *road_state_name(enum road_state road)
{
    return (unsigned)road < ROAD_COUNT ? ROAD_NAMES[road] : "?";
}

/* ASCII alone, whatever the locale. */
static char plain(char c)
{
    if (c == '-' || c == '_')
        return ' ';
    return (char)(c >= 'a' && c <= 'z' ? c - 'a' + 'A' : c);
}

bool road_state_from_name(const char *name, enum road_state *road_out)
{
    for (size_t road = 0; road < ROAD_COUNT; road++) {
        size_t i = 0;
        while (name[i] != '\0' && plain(name[i]) == plain(ROAD_NAMES[road][i]))
            i++;
        if (name[i] == '\0' && ROAD_NAMES[road][i] == '\0') {
            *road_out = (enum road_state)road;
            return true;
        }
    }
    return false;
}
