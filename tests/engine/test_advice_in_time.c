/* SPDX-License-Identifier: MIT */
#include "engine/advice.h"

#include "tests/engine/advice_scenes.h"

/* ---- stepping down ---- */

static void a_send_ends_when_act_by_has_been_out_of_reach_for_the_dwell(void **state)
{
    (void)state;
    struct advice advice = standing_at(ADVICE_SEND);
    for (int64_t now = NOW; now < NOW + DWELL; now += 300) {
        struct advice_facts facts = arriving_at(now, 0.3, now + 5 * HOUR, PASSAGE_NEVER);
        advice = step(&facts, &advice);
        assert_int_equal(advice.level, ADVICE_SEND);
        assert_true((advice.reasons & ADVICE_HELD_DWELL) != 0);
    }
    struct advice_facts facts = arriving_at(NOW + DWELL, 0.3, NOW + DWELL + 5 * HOUR, PASSAGE_NEVER);
    advice = step(&facts, &advice);
    assert_int_equal(advice.level, ADVICE_MUSTER);
    assert_int_equal(advice.since_utc_s, NOW + DWELL);
    assert_true((advice.reasons & ADVICE_HELD_DWELL) == 0);
}

static void act_by_back_in_reach_within_the_dwell_starts_it_anew(void **state)
{
    (void)state;
    struct advice advice = standing_at(ADVICE_SEND);
    struct advice_facts out = quiet_at(NOW), in = scene_at(NOW + DWELL - 300, IN_REACH);
    advice = step(&out, &advice);
    advice = step(&in, &advice);
    out.now_utc_s = NOW + DWELL;
    advice = step(&out, &advice);
    assert_int_equal(advice.level, ADVICE_SEND);
    out.now_utc_s = NOW + 2 * DWELL - 1;
    advice = step(&out, &advice);
    assert_int_equal(advice.level, ADVICE_SEND);
    out.now_utc_s = NOW + 2 * DWELL;
    assert_int_equal(step(&out, &advice).level, ADVICE_QUIET);
}

static void a_step_down_goes_to_the_highest_level_wanted_during_the_dwell(void **state)
{
    (void)state;
    struct advice advice = standing_at(ADVICE_LATE);
    for (int64_t now = NOW; now < NOW + DWELL; now += 300) {
        struct advice_facts facts = scene_at(now, now == NOW + 600 ? POSSIBLE : NOTHING);
        advice = step(&facts, &advice);
    }
    struct advice_facts facts = quiet_at(NOW + DWELL);
    advice = step(&facts, &advice);
    assert_int_equal(advice.level, ADVICE_MUSTER);
    /* and QUIET after a dwell of its own */
    facts.now_utc_s += 300;
    advice = step(&facts, &advice);
    facts.now_utc_s += DWELL - 1;
    advice = step(&facts, &advice);
    assert_int_equal(advice.level, ADVICE_MUSTER);
    facts.now_utc_s += 1;
    assert_int_equal(step(&facts, &advice).level, ADVICE_QUIET);
}

static void muster_stays_while_the_chance_is_between_the_two_limits(void **state)
{
    (void)state;
    struct advice muster = standing_at(ADVICE_MUSTER), quiet = advice_start();
    for (int64_t now = NOW; now < NOW + 10 * HOUR; now += 300) {
        struct advice_facts facts = arriving_at(now, 0.05, now + 9 * HOUR, PASSAGE_NEVER);
        muster = step(&facts, &muster);
        quiet = step(&facts, &quiet);
        assert_int_equal(muster.level, ADVICE_MUSTER);
        assert_int_equal(quiet.level, ADVICE_QUIET);
    }
    struct advice_facts facts = arriving_at(NOW + 10 * HOUR, 0.0499, NOW + 19 * HOUR, PASSAGE_NEVER);
    muster = step(&facts, &muster);
    facts.now_utc_s += DWELL;
    assert_int_equal(step(&facts, &muster).level, ADVICE_QUIET);
    /* a limit of zero is met by no chance at all */
    struct advice_policy strict = POLICY;
    strict.step_down_chance = 0.0;
    muster = standing_at(ADVICE_MUSTER);
    facts = quiet_at(NOW);
    muster = advice_step(&strict, &facts, &muster, NULL);
    facts.now_utc_s += DWELL;
    assert_int_equal(advice_step(&strict, &facts, &muster, NULL).level, ADVICE_QUIET);
}

static void a_chance_that_swings_about_its_limit_is_one_change(void **state)
{
    (void)state;
    struct advice advice = advice_start();
    int change_count = 0;
    for (int i = 0; i < 200; i++) {
        int64_t now = NOW + i * 300;
        double chance = i % 2 ? 0.02 : 0.13;
        struct advice_facts facts = arriving_at(now, chance, now + 9 * HOUR, PASSAGE_NEVER);
        /* the arrival keeps its clock time, so that act-by does not shift */
        facts.closing.earliest_utc_s = facts.lowest_wet.earliest_utc_s = NOW + 40 * HOUR;
        change_count += changes(&facts, &advice);
    }
    assert_int_equal(change_count, 1);
    assert_int_equal(advice.level, ADVICE_MUSTER);
}

static void the_first_rise_is_never_delayed_not_even_within_a_dwell(void **state)
{
    (void)state;
    struct advice advice = standing_at(ADVICE_MUSTER);
    struct advice_facts facts = quiet_at(NOW);
    advice = step(&facts, &advice);
    facts.now_utc_s = NOW + DWELL;
    advice = step(&facts, &advice);
    assert_int_equal(advice.level, ADVICE_QUIET);
    facts = scene_at(NOW + DWELL + 1, IN_REACH);
    advice = step(&facts, &advice);
    assert_int_equal(advice.level, ADVICE_SEND);
    assert_int_equal(advice.since_utc_s, NOW + DWELL + 1);
}

static void a_clock_that_steps_back_does_not_shorten_the_dwell(void **state)
{
    (void)state;
    struct advice advice = standing_at(ADVICE_SEND);
    struct advice_facts facts = quiet_at(NOW);
    advice = step(&facts, &advice);
    facts.now_utc_s = NOW - 2 * HOUR;
    advice = step(&facts, &advice);
    assert_int_equal(advice.step_down_from_utc_s, NOW - 2 * HOUR);
    facts.now_utc_s = NOW - 2 * HOUR + DWELL - 1;
    advice = step(&facts, &advice);
    assert_int_equal(advice.level, ADVICE_SEND);
}

static void a_level_that_swings_two_centimetres_about_the_mark_wakes_once(void **state)
{
    (void)state;
    /* three runs, 1 mm apart, that hold the present level; it swings 2 cm about the closing mark every 5 minutes */
    static const size_t columns[] = {0, 1, 2};
    struct advice advice = advice_start();
    int change_count = 0;
    for (int i = 0; i < 300; i++) {
        int64_t now = NOW + i * 300;
        double level_m = 1.45 + (i % 2 ? 0.02 : -0.02);
        double stage_m[3 * 3];
        for (size_t step_index = 0; step_index < 3; step_index++) {
            stage_m[3 * step_index] = level_m - 0.001;
            stage_m[3 * step_index + 1] = level_m;
            stage_m[3 * step_index + 2] = level_m + 0.001;
        }
        struct passage_curves curves = {.step_count = 3,
                                        .member_count = 3,
                                        .member_column = columns,
                                        .row_stride = 3,
                                        .stage_m = stage_m,
                                        .start_utc_s = now,
                                        .step_s = 300};
        struct advice_facts facts = quiet_at(now);
        assert_int_equal(passage_of_mark(&curves, now, 1.45, &facts.closing), FW_OK);
        facts.lowest_wet = facts.closing;
        change_count += changes(&facts, &advice);
        assert_int_equal(advice.level, i == 0 ? ADVICE_QUIET : ADVICE_LATE);
    }
    assert_int_equal(change_count, 1);
}

static void near_sides_only_is_taken_back_with_the_shift_in_hand_and_never_while_blind_or_held(void **state)
{
    (void)state;
    struct advice advice = standing_at(ADVICE_SEND);
    struct advice_facts facts = arriving_at(NOW, 0.5, NOW + 54 * MINUTE, PASSAGE_NEVER);
    advice = step(&facts, &advice);
    assert_true(advice.near_sides_only);
    facts = arriving_at(NOW, 0.5, NOW + 70 * MINUTE - 1, PASSAGE_NEVER);
    advice = step(&facts, &advice);
    assert_true(advice.near_sides_only);
    facts = arriving_at(NOW, 0.5, NOW + 70 * MINUTE, PASSAGE_NEVER);
    facts.is_blind = true;
    advice = step(&facts, &advice);
    assert_true(advice.near_sides_only);
    struct advice seeing = advice;
    facts.is_blind = false;
    assert_false(step(&facts, &seeing).near_sides_only);
    /* no arrival any more: the SEND is held for the dwell, and so is what it says */
    facts = quiet_at(NOW);
    advice = step(&facts, &advice);
    assert_int_equal(advice.level, ADVICE_SEND);
    assert_true(advice.near_sides_only);
}

/* ---- shut ---- */

static void keep_shut_names_each_thing_that_holds_it(void **state)
{
    (void)state;
    static const struct {
        const char *shows;
        double below_s, chance;
        bool is_blind, is_wet;
        unsigned reasons;
    } rows[] = {
        {"not below the deck for the hold time", HOUR - 1, 0.0, false, false, ADVICE_HELD_LEVEL},
        {"chance of return at the limit", HOUR, 0.10, false, false, ADVICE_HELD_RETURN},
        {"chance of return over it", HOUR, 0.9, false, false, ADVICE_HELD_RETURN},
        {"chance of return no number", HOUR, NOT_A_NUMBER, false, false, ADVICE_HELD_RETURN},
        {"time below no number", NOT_A_NUMBER, 0.0, false, false, ADVICE_HELD_LEVEL},
        {"blind", HOUR, 0.0, true, false, ADVICE_HELD_NO_DATA},
        {"water seen", HOUR, 0.0, false, true, ADVICE_BY_WATER_SEEN},
        {"all of them", 0.0, 0.5, true, true,
         ADVICE_HELD_LEVEL | ADVICE_HELD_RETURN | ADVICE_HELD_NO_DATA | ADVICE_BY_WATER_SEEN},
        {"none of them", HOUR, 0.0999, false, false, 0},
    };
    for (size_t i = 0; i < COUNT(rows); i++) {
        /* from WALK-OVER, so that no dwell is in the way: any one of them takes it back at once */
        struct advice advice = standing_at(ADVICE_WALK_OVER);
        struct advice_facts facts = quiet_at(NOW);
        facts.road = ROAD_SHUT;
        facts.below_deck_for_s = rows[i].below_s;
        facts.chance_of_return = rows[i].chance;
        facts.is_blind = rows[i].is_blind;
        facts.water_seen_wet = rows[i].is_wet;
        advice = step(&facts, &advice);
        if (advice.reasons != rows[i].reasons ||
            advice.level != (rows[i].reasons ? ADVICE_KEEP_SHUT : ADVICE_WALK_OVER))
            fail_msg("%s: %s, reasons %x", rows[i].shows, advice_level_name(advice.level), advice.reasons);
    }
}

static void the_dwell_of_a_chance_of_return_runs_beside_the_hold_time(void **state)
{
    (void)state;
    struct advice advice = standing_at(ADVICE_KEEP_SHUT);
    struct advice_facts facts = quiet_at(NOW);
    facts.road = ROAD_SHUT;
    for (int64_t now = NOW; now <= NOW + HOUR; now += 300) {
        facts.now_utc_s = now;
        facts.below_deck_for_s = (double)(now - NOW);
        advice = step(&facts, &advice);
        assert_int_equal(advice.level, now < NOW + HOUR ? ADVICE_KEEP_SHUT : ADVICE_WALK_OVER);
    }
}

static void a_chance_of_return_that_swings_about_its_limit_calls_nobody_out_and_back(void **state)
{
    (void)state;
    struct advice advice = standing_at(ADVICE_KEEP_SHUT);
    struct advice_facts facts = quiet_at(NOW);
    facts.road = ROAD_SHUT;
    facts.below_deck_for_s = 3.0 * HOUR;
    for (int i = 0; i < 100; i++) {
        facts.now_utc_s = NOW + i * 300;
        facts.chance_of_return = i % 3 ? 0.09 : 0.11;
        assert_false(changes(&facts, &advice));
    }
}

static void no_walk_over_between_two_peaks_while_the_second_may_come(void **state)
{
    (void)state;
    struct advice advice = standing_at(ADVICE_KEEP_SHUT);
    for (int64_t now = NOW; now < NOW + 3 * HOUR; now += 300) {
        struct advice_facts facts = quiet_at(now);
        facts.road = ROAD_SHUT;
        facts.below_deck_for_s = (double)(now - NOW);
        facts.chance_of_return = 0.33; /* one run in three: the rise carried forward */
        advice = step(&facts, &advice);
        assert_int_equal(advice.level, ADVICE_KEEP_SHUT);
        assert_true((advice.reasons & ADVICE_HELD_RETURN) != 0);
    }
}

static void a_road_handed_back_stands_on_the_ladder_again(void **state)
{
    (void)state;
    struct advice advice = standing_at(ADVICE_WALK_OVER);
    struct advice_facts facts = quiet_at(NOW);
    facts.road = ROAD_HANDED_BACK;
    assert_true(changes(&facts, &advice));
    assert_int_equal(advice.level, ADVICE_QUIET);
    assert_int_equal(advice.onset_utc_s, 0);
    /* too early, with water to come: it says so at once */
    struct advice early = standing_at(ADVICE_KEEP_SHUT);
    facts = scene_at(NOW, IN_REACH);
    facts.road = ROAD_HANDED_BACK;
    early = step(&facts, &early);
    assert_int_equal(early.level, ADVICE_SEND);
    assert_int_equal(early.onset_utc_s, NOW - 5 * HOUR);
}

/* ---- what is news ---- */

static const struct shift_row {
    const char *shows;
    enum road_state road;
    int64_t told_s; /* act-by told, from NOW; 1: none */
    int64_t act_by_s;
    bool is_news;
} SHIFTS[] = {
    {"later by the shift", ROAD_OPEN, HOUR, HOUR + 15 * MINUTE, false},
    {"later by more", ROAD_OPEN, HOUR, HOUR + 15 * MINUTE + 1, true},
    {"later by more, but not by a quarter of what is left", ROAD_OPEN, 2 * HOUR, 2 * HOUR + 30 * MINUTE, false},
    {"later by more than a quarter of what is left", ROAD_OPEN, 2 * HOUR, 2 * HOUR + 30 * MINUTE + 1, true},
    {"earlier by the shift", ROAD_OPEN, 2 * HOUR, 2 * HOUR - 15 * MINUTE, false},
    {"earlier by more", ROAD_OPEN, 2 * HOUR, 2 * HOUR - 15 * MINUTE - 1, true},
    {"later, crew called", ROAD_CREW_CALLED, 2 * HOUR, 3 * HOUR, false},
    {"later, one side shut", ROAD_ONE_SIDE_SHUT, 2 * HOUR, 3 * HOUR, false},
    {"earlier, crew called", ROAD_CREW_CALLED, 2 * HOUR, HOUR, true},
    {"earlier, crew out", ROAD_CREW_OUT, 2 * HOUR, HOUR, true},
    {"earlier, and past before it was told", ROAD_OPEN, 30 * MINUTE, -20 * MINUTE, true},
    {"the one told is this second", ROAD_OPEN, 0, -HOUR, true},
    {"the one told is past: later", ROAD_OPEN, -1, 2 * HOUR, false},
    {"the one told is past: earlier", ROAD_OPEN, -1, -HOUR, false},
    {"none before, one now", ROAD_OPEN, 1, 2 * HOUR, true},
    {"handed back is a road like another", ROAD_HANDED_BACK, 2 * HOUR, HOUR, true},
};

static void a_shift_of_act_by_is_news_only_when_someone_still_waits_on_it(void **state)
{
    (void)state;
    for (size_t i = 0; i < COUNT(SHIFTS); i++) {
        const struct shift_row *row = &SHIFTS[i];
        struct advice advice = standing_at(ADVICE_SEND);
        advice.told_act_by_utc_s = row->told_s == 1 ? PASSAGE_NEVER : NOW + row->told_s;
        /* far enough from any arrival that neither level nor near sides change: the dwell holds SEND */
        struct advice_facts facts = arriving_at(NOW, 0.5, NOW + row->act_by_s + 70 * MINUTE, PASSAGE_NEVER);
        facts.lowest_wet = NEVER;
        facts.road = row->road;
        if (changes(&facts, &advice) != row->is_news)
            fail_msg("%s", row->shows);
        assert_int_equal(advice.level, ADVICE_SEND);
        int64_t told = row->is_news ? advice.act_by_utc_s : row->told_s == 1 ? PASSAGE_NEVER : NOW + row->told_s;
        assert_int_equal(advice.told_act_by_utc_s, told);
    }
}

static void late_is_not_followed_by_send_while_a_run_still_has_the_water_there(void **state)
{
    (void)state;
    struct advice advice = standing_at(ADVICE_LATE);
    /* 3 of 9 runs are still in a spell that began two hours ago; the middle one has none any more */
    struct advice_facts facts = arriving_at(NOW, 3.0 / 9.0, NOW - 2 * HOUR, PASSAGE_NEVER);
    for (int minute = 0; minute <= 3 * DWELL / MINUTE; minute += 5) {
        facts.now_utc_s = NOW + minute * MINUTE;
        advice = step(&facts, &advice);
        assert_int_equal(advice.level, ADVICE_LATE);
    }
    /* the water is gone and comes again in three hours: that is a new reason to send */
    facts = arriving_at(facts.now_utc_s, 3.0 / 9.0, facts.now_utc_s + 75 * MINUTE, PASSAGE_NEVER);
    for (int minute = 0; minute <= DWELL / MINUTE; minute += 5) {
        advice = step(&facts, &advice);
        facts.now_utc_s += 5 * MINUTE;
    }
    assert_int_equal(advice.level, ADVICE_SEND);
}

static void a_shift_of_act_by_is_no_news_at_quiet_or_late(void **state)
{
    (void)state;
    struct advice quiet = standing_at(ADVICE_QUIET), late = standing_at(ADVICE_LATE);
    quiet.told_act_by_utc_s = late.told_act_by_utc_s = NOW + 9 * HOUR;
    struct advice_facts facts = arriving_at(NOW, 0.02, NOW + 5 * HOUR, PASSAGE_NEVER);
    assert_false(changes(&facts, &quiet));
    late.near_sides_only = true; /* as it always is at LATE */
    facts.lowest_wet.earliest_utc_s = NOW + HOUR;
    assert_false(changes(&facts, &late));
    assert_int_equal(late.level, ADVICE_LATE);
}

static void small_shifts_add_up_to_news_against_what_was_told(void **state)
{
    (void)state;
    struct advice advice = advice_start();
    int change_count = 0;
    for (int i = 0; i <= 12; i++) { /* 4 minutes earlier each time: 48 in all, news at 0, 16, 32 and 48 */
        struct advice_facts facts = arriving_at(NOW, 0.5, NOW + 9 * HOUR - i * 4 * MINUTE, PASSAGE_NEVER);
        change_count += changes(&facts, &advice);
    }
    assert_int_equal(change_count, 4);
}

static void every_change_of_level_is_news_and_nothing_else_repeats_it(void **state)
{
    (void)state;
    struct advice advice = advice_start();
    for (int scene = 0; scene < SCENES; scene++) {
        struct advice_facts facts = scene_at(NOW + scene * 600, (enum scene)scene);
        assert_int_equal(changes(&facts, &advice), scene != NOTHING);
        assert_false(changes(&facts, &advice));
    }
    struct advice_facts facts = scene_at(NOW + HOUR, WET);
    facts.road = ROAD_SHUT;
    assert_true(changes(&facts, &advice));
    assert_false(changes(&facts, &advice));
}

static void a_thread_opens_on_leaving_quiet_and_closes_with_quiet_and_the_road_with_traffic(void **state)
{
    (void)state;
    struct advice advice = advice_start();
    struct advice_facts facts = quiet_at(NOW);
    advice = step(&facts, &advice);
    assert_int_equal(advice.onset_utc_s, 0);
    assert_int_equal(advice.since_utc_s, NOW);
    facts = scene_at(NOW + 300, POSSIBLE);
    advice = step(&facts, &advice);
    assert_int_equal(advice.onset_utc_s, NOW + 300);
    facts = scene_at(NOW + 600, IN_REACH);
    facts.road = ROAD_CREW_OUT;
    advice = step(&facts, &advice);
    assert_int_equal(advice.onset_utc_s, NOW + 300);
    /* quiet again, but the crew is still out: the thread stays */
    for (int64_t after_s = 900; after_s <= 900 + DWELL; after_s += DWELL) {
        facts = quiet_at(NOW + after_s);
        facts.road = ROAD_CREW_OUT;
        advice = step(&facts, &advice);
    }
    assert_int_equal(advice.level, ADVICE_QUIET);
    assert_int_equal(advice.onset_utc_s, NOW + 300);
    facts.road = ROAD_OPEN;
    advice = step(&facts, &advice);
    assert_int_equal(advice.onset_utc_s, 0);
    /* a road shut by people alone has a thread too */
    facts.road = ROAD_SHUT;
    facts.now_utc_s += 300;
    advice = step(&facts, &advice);
    assert_int_equal(advice.onset_utc_s, facts.now_utc_s);
}

/* ---- any sequence at all ---- */

static uint64_t random_next(uint64_t *seed)
{
    *seed = *seed * 6364136223846793005u + 1442695040888963407u;
    return *seed >> 33;
}

static bool random_chance(uint64_t *seed, unsigned percent)
{
    return random_next(seed) % 100 < percent;
}

static struct passage random_passage(uint64_t *seed, int64_t now)
{
    if (random_chance(seed, 40))
        return NEVER;
    int64_t earliest = now - 2 * HOUR + (int64_t)(random_next(seed) % (8 * HOUR));
    int64_t likely = random_chance(seed, 40) ? PASSAGE_NEVER : earliest + (int64_t)(random_next(seed) % (2 * HOUR));
    return arriving((double)(random_next(seed) % 101) / 100.0, earliest, likely);
}

static void random_facts(uint64_t *seed, struct advice_facts *facts)
{
    facts->now_utc_s += 60 + (int64_t)(random_next(seed) % 900);
    facts->is_night = random_chance(seed, 50);
    if (random_chance(seed, 40)) {
        facts->closing = random_passage(seed, facts->now_utc_s);
        facts->lowest_wet = random_chance(seed, 50) ? facts->closing : random_passage(seed, facts->now_utc_s);
    }
    facts->trigger_holds = random_chance(seed, 5);
    facts->assumed_trigger_holds = random_chance(seed, 5);
    facts->joined_by_crew_plan = random_chance(seed, 5);
    if (random_chance(seed, 15))
        facts->is_blind = !facts->is_blind;
    facts->is_rising = random_chance(seed, 50);
    facts->silent_s = facts->is_blind ? (double)(random_next(seed) % (60 * HOUR)) : 300.0;
    facts->water_seen_wet = random_chance(seed, 5);
    if (random_chance(seed, 10))
        facts->road = (enum road_state)(random_next(seed) % ROADS);
    facts->crew_called_utc_s =
        random_chance(seed, 50) ? 0 : facts->now_utc_s - HOUR + (int64_t)(random_next(seed) % HOUR);
    facts->below_deck_for_s = random_chance(seed, 50) ? 2.0 * HOUR : 0.0;
    facts->chance_of_return = random_chance(seed, 60) ? 0.0 : (double)(random_next(seed) % 100) / 100.0;
}

static void assert_invariants(const struct advice_facts *facts, const struct advice *last, const struct advice *next,
                              bool has_changed)
{
    bool was_shut = last->level > ADVICE_LATE;
    if (is_shut(facts->road)) {
        assert_true(next->level == ADVICE_KEEP_SHUT || next->level == ADVICE_WALK_OVER);
        assert_false(next->near_sides_only);
        assert_int_equal(next->act_by_utc_s, PASSAGE_NEVER);
        if (next->level == ADVICE_WALK_OVER)
            assert_true(!facts->is_blind && !facts->water_seen_wet &&
                        facts->chance_of_return < POLICY.reopen_return_chance &&
                        facts->below_deck_for_s >= POLICY.reopen_hold_s && next->reasons == 0);
        else
            assert_true(next->reasons != 0);
    } else {
        assert_true(next->level <= ADVICE_LATE);
        if (facts->is_blind && !was_shut)
            assert_true(next->level >= last->level);
        if (facts->closing.earliest_utc_s != PASSAGE_NEVER)
            assert_int_equal(facts->closing.earliest_utc_s - next->act_by_utc_s,
                             (facts->is_night ? 55 : 40) * MINUTE + 15 * MINUTE);
        if (!was_shut && next->level < last->level)
            assert_true(last->step_down_from_utc_s != 0 && facts->now_utc_s - last->step_down_from_utc_s >= DWELL);
        if (facts->trigger_holds || facts->assumed_trigger_holds || facts->joined_by_crew_plan)
            assert_true(next->level >= ADVICE_SEND);
        if (facts->water_seen_wet)
            assert_int_equal(next->level, ADVICE_LATE);
        if (facts->closing.chance >= POLICY.muster_chance || (facts->is_blind && facts->is_rising))
            assert_true(next->level >= ADVICE_MUSTER);
        assert_true(next->level == ADVICE_QUIET || next->reasons != 0);
    }
    assert_true(next->is_blind == facts->is_blind);
    if (next->level != last->level || next->is_blind != last->is_blind)
        assert_true(has_changed);
    if (!has_changed)
        assert_int_equal(next->told_act_by_utc_s, last->told_act_by_utc_s);
    assert_true((next->level != last->level) == (next->since_utc_s == facts->now_utc_s) || last->since_utc_s == 0);
    assert_true(next->onset_utc_s != 0 || next->level == ADVICE_QUIET);
}

static void no_sequence_of_facts_breaks_a_rule(void **state)
{
    (void)state;
    uint64_t seed = 0x20260412u;
    print_message("seed %llx\n", (unsigned long long)seed);
    int seen[LEVELS] = {0}, held_blind = 0, stepped_down = 0;
    for (int sequence = 0; sequence < 300; sequence++) {
        struct advice advice = advice_start();
        struct advice_facts facts = quiet_at(NOW);
        for (int i = 0; i < 400; i++) {
            random_facts(&seed, &facts);
            bool has_changed = false;
            struct advice next = advice_step(&POLICY, &facts, &advice, &has_changed);
            assert_invariants(&facts, &advice, &next, has_changed);
            seen[next.level]++;
            held_blind += (next.reasons & ADVICE_HELD_NO_DATA) != 0;
            stepped_down += next.level < advice.level && advice.level <= ADVICE_LATE;
            advice = next;
        }
    }
    /* the sequences went everywhere, so that the rules were put to the test */
    for (int level = 0; level < LEVELS; level++)
        assert_true(seen[level] > 100);
    assert_true(held_blind > 100 && stepped_down > 100);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(a_send_ends_when_act_by_has_been_out_of_reach_for_the_dwell),
        cmocka_unit_test(act_by_back_in_reach_within_the_dwell_starts_it_anew),
        cmocka_unit_test(a_step_down_goes_to_the_highest_level_wanted_during_the_dwell),
        cmocka_unit_test(muster_stays_while_the_chance_is_between_the_two_limits),
        cmocka_unit_test(a_chance_that_swings_about_its_limit_is_one_change),
        cmocka_unit_test(the_first_rise_is_never_delayed_not_even_within_a_dwell),
        cmocka_unit_test(a_clock_that_steps_back_does_not_shorten_the_dwell),
        cmocka_unit_test(a_level_that_swings_two_centimetres_about_the_mark_wakes_once),
        cmocka_unit_test(near_sides_only_is_taken_back_with_the_shift_in_hand_and_never_while_blind_or_held),
        cmocka_unit_test(keep_shut_names_each_thing_that_holds_it),
        cmocka_unit_test(the_dwell_of_a_chance_of_return_runs_beside_the_hold_time),
        cmocka_unit_test(a_chance_of_return_that_swings_about_its_limit_calls_nobody_out_and_back),
        cmocka_unit_test(no_walk_over_between_two_peaks_while_the_second_may_come),
        cmocka_unit_test(a_road_handed_back_stands_on_the_ladder_again),
        cmocka_unit_test(a_shift_of_act_by_is_news_only_when_someone_still_waits_on_it),
        cmocka_unit_test(late_is_not_followed_by_send_while_a_run_still_has_the_water_there),
        cmocka_unit_test(a_shift_of_act_by_is_no_news_at_quiet_or_late),
        cmocka_unit_test(small_shifts_add_up_to_news_against_what_was_told),
        cmocka_unit_test(every_change_of_level_is_news_and_nothing_else_repeats_it),
        cmocka_unit_test(a_thread_opens_on_leaving_quiet_and_closes_with_quiet_and_the_road_with_traffic),
        cmocka_unit_test(no_sequence_of_facts_breaks_a_rule),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
