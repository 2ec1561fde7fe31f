/* SPDX-License-Identifier: MIT */
/* Facts and policy that the tests of advice share. */
#ifndef FOREWATER_TESTS_ENGINE_ADVICE_SCENES_H
#define FOREWATER_TESTS_ENGINE_ADVICE_SCENES_H

#include "engine/advice.h"

#include <math.h>
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <string.h>
/* after the four above, which it needs */
#include <cmocka.h>

#define COUNT(array) (sizeof(array) / sizeof((array)[0]))
#define NOT_A_NUMBER ((double)NAN)

enum { NOW = 1700000000, MINUTE = 60, HOUR = 3600, DWELL = 30 * MINUTE, LEVELS = 6, ROADS = 7 };

static const struct advice_policy POLICY = {
    .crew_day_s = 40 * MINUTE,
    .crew_night_s = 55 * MINUTE,
    .margin_s = 15 * MINUTE,
    .muster_chance = 0.10,
    .slack_s = 10 * MINUTE,
    .step_down_chance = 0.05,
    .step_down_dwell_s = DWELL,
    .blind_dead_s = 48 * HOUR,
    .reopen_hold_s = HOUR,
    .reopen_return_chance = 0.10,
    .act_by_shift_s = 15 * MINUTE,
};

static const struct passage NEVER = {.chance = 0.0,
                                     .earliest_utc_s = PASSAGE_NEVER,
                                     .likely_utc_s = PASSAGE_NEVER,
                                     .latest_utc_s = PASSAGE_NEVER,
                                     .below_again_earliest_utc_s = PASSAGE_NEVER,
                                     .below_again_latest_utc_s = PASSAGE_NEVER};

static inline struct passage arriving(double chance, int64_t earliest, int64_t likely)
{
    struct passage passage = NEVER;
    passage.chance = chance;
    passage.earliest_utc_s = earliest;
    passage.likely_utc_s = likely;
    return passage;
}

/* A quiet night on an open road; the crew needs 55 + 15 = 70 min. */
static inline struct advice_facts quiet_at(int64_t now)
{
    return (struct advice_facts){.now_utc_s = now,
                                 .is_night = true,
                                 .closing = NEVER,
                                 .lowest_wet = NEVER,
                                 .silent_s = 5 * MINUTE,
                                 .chance_of_return = 0.0};
}

static inline struct advice_facts arriving_at(int64_t now, double chance, int64_t earliest, int64_t likely)
{
    struct advice_facts facts = quiet_at(now);
    facts.closing = arriving(chance, earliest, likely);
    facts.lowest_wet = facts.closing;
    return facts;
}

static inline struct advice standing_at(enum advice_level level)
{
    struct advice advice = advice_start();
    advice.level = level;
    advice.since_utc_s = NOW - 5 * HOUR;
    advice.onset_utc_s = level == ADVICE_QUIET ? 0 : NOW - 5 * HOUR;
    return advice;
}

static inline struct advice step(const struct advice_facts *facts, const struct advice *last)
{
    return advice_step(&POLICY, facts, last, NULL);
}

static inline bool changes(const struct advice_facts *facts, struct advice *advice)
{
    bool has_changed = false;
    *advice = advice_step(&POLICY, facts, advice, &has_changed);
    return has_changed;
}

static inline bool is_shut(enum road_state road)
{
    return road == ROAD_SHUT || road == ROAD_WALK_OVER;
}

enum scene { NOTHING, POSSIBLE, IN_REACH, WET, SCENES };

static inline struct advice_facts scene_at(int64_t now, enum scene scene)
{
    switch (scene) {
    case POSSIBLE:
        return arriving_at(now, 0.22, now + 6 * HOUR, PASSAGE_NEVER);
    case IN_REACH:
        return arriving_at(now, 0.67, now + 75 * MINUTE, now + 100 * MINUTE);
    case WET:
        return arriving_at(now, 1.0, now - 20 * MINUTE, now - 10 * MINUTE);
    case NOTHING:
    case SCENES:
        break;
    }
    return quiet_at(now);
}

#endif
