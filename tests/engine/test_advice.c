/* SPDX-License-Identifier: MIT */
#include "engine/advice.h"

#include "tests/engine/advice_scenes.h"

/* ---- every transition ---- */

#define Q ADVICE_QUIET
#define M ADVICE_MUSTER
#define S ADVICE_SEND
#define L ADVICE_LATE
/* rows: the level before; columns: nothing to come, possible, act-by in reach, wet. A road not shut on both sides. */
static const enum advice_level LADDER_AT_ONCE[LEVELS][SCENES] = {
    /* QUIET     */ {Q, M, S, L},
    /* MUSTER    */ {M, M, S, L},
    /* SEND      */ {S, S, S, L},
    /* LATE      */ {L, L, L, L},
    /* KEEP SHUT */ {Q, M, S, L},
    /* WALK-OVER */ {Q, M, S, L},
};
static const enum advice_level LADDER_AFTER_DWELL[LEVELS][SCENES] = {
    {Q, M, S, L}, {Q, M, S, L}, {Q, M, S, L}, {Q, M, S, L}, {Q, M, S, L}, {Q, M, S, L},
};
#undef Q
#undef M
#undef S
#undef L

static void assert_level(enum advice_level got, enum advice_level want, enum advice_level before,
                         enum road_state road, int scene, const char *when)
{
    if (got != want)
        fail_msg("from %s, road %s, scene %d, %s: %s, expected %s", advice_level_name(before), road_state_name(road),
                 scene, when, advice_level_name(got), advice_level_name(want));
}

static void a_road_not_shut_stands_where_the_ladder_says_from_every_level(void **state)
{
    (void)state;
    for (int before = 0; before < LEVELS; before++)
        for (int road = 0; road < ROADS; road++)
            for (int scene = 0; scene < SCENES; scene++) {
                if (is_shut((enum road_state)road))
                    continue;
                struct advice advice = standing_at((enum advice_level)before);
                for (int64_t after_s = 0; after_s <= DWELL; after_s += DWELL) {
                    struct advice_facts facts = scene_at(NOW + after_s, (enum scene)scene);
                    facts.road = (enum road_state)road;
                    advice = step(&facts, &advice);
                    assert_level(advice.level,
                                 after_s == 0 ? LADDER_AT_ONCE[before][scene] : LADDER_AFTER_DWELL[before][scene],
                                 (enum advice_level)before, facts.road, scene,
                                 after_s == 0 ? "at once" : "after the dwell");
                    assert_false(advice.is_blind);
                }
            }
}

static void while_blind_a_road_not_shut_never_stands_lower_from_any_level(void **state)
{
    (void)state;
    for (int before = 0; before < LEVELS; before++)
        for (int road = 0; road < ROADS; road++)
            for (int scene = 0; scene < SCENES; scene++) {
                if (is_shut((enum road_state)road))
                    continue;
                struct advice advice = standing_at((enum advice_level)before);
                for (int64_t after_s = 0; after_s <= 20 * HOUR; after_s += 20 * MINUTE) {
                    struct advice_facts facts = scene_at(NOW + after_s, (enum scene)scene);
                    facts.road = (enum road_state)road;
                    facts.is_blind = true;
                    advice = step(&facts, &advice);
                    assert_level(advice.level, LADDER_AT_ONCE[before][scene], (enum advice_level)before, facts.road,
                                 scene, "blind");
                    assert_true(advice.is_blind);
                }
            }
}

static void a_road_shut_is_kept_shut_or_may_be_walked_over_from_every_level(void **state)
{
    (void)state;
    for (int before = 0; before < LEVELS; before++)
        for (int scene = 0; scene < SCENES; scene++)
            for (int blind = 0; blind < 2; blind++)
                for (int good = 0; good < 2; good++)
                    for (int road = ROAD_SHUT; road <= ROAD_WALK_OVER; road++) {
                        struct advice advice = standing_at((enum advice_level)before);
                        for (int64_t after_s = 0; after_s <= DWELL; after_s += DWELL) {
                            struct advice_facts facts = scene_at(NOW + after_s, (enum scene)scene);
                            facts.road = (enum road_state)road;
                            facts.is_blind = blind;
                            facts.is_rising = blind;
                            facts.below_deck_for_s = good ? 2.0 * HOUR : 0.0;
                            facts.chance_of_return = good ? 0.09 : 0.11;
                            advice = step(&facts, &advice);
                            bool may = good && !blind && (before == ADVICE_WALK_OVER || after_s == DWELL);
                            assert_level(advice.level, may ? ADVICE_WALK_OVER : ADVICE_KEEP_SHUT,
                                         (enum advice_level)before, facts.road, scene, blind ? "blind" : "seeing");
                            assert_int_equal(advice.act_by_utc_s, PASSAGE_NEVER);
                            assert_false(advice.near_sides_only);
                        }
                    }
}

/* ---- act by ---- */

static void act_by_is_the_earliest_arrival_less_crew_time_and_margin_exactly(void **state)
{
    (void)state;
    struct advice start = advice_start();
    for (int64_t earliest = NOW - 3 * HOUR; earliest < NOW + 9 * HOUR; earliest += 997) {
        struct advice_facts facts = arriving_at(NOW, 0.5, earliest, earliest + 900);
        assert_int_equal(step(&facts, &start).act_by_utc_s, earliest - 70 * MINUTE);
        facts.is_night = false;
        assert_int_equal(step(&facts, &start).act_by_utc_s, earliest - 55 * MINUTE);
        /* the age of data changes nothing */
        facts.silent_s = 3.0 * HOUR;
        assert_int_equal(step(&facts, &start).act_by_utc_s, earliest - 55 * MINUTE);
    }
}

static void ten_minutes_of_crew_time_move_act_by_by_exactly_ten_minutes(void **state)
{
    (void)state;
    struct advice start = advice_start();
    struct advice_policy slower = POLICY;
    slower.crew_night_s += 600.0;
    for (int64_t earliest = NOW - HOUR; earliest < NOW + 9 * HOUR; earliest += 613) {
        struct advice_facts facts = arriving_at(NOW, 0.5, earliest, earliest + 900);
        int64_t act_by = advice_step(&POLICY, &facts, &start, NULL).act_by_utc_s;
        assert_int_equal(act_by - advice_step(&slower, &facts, &start, NULL).act_by_utc_s, 600);
    }
}

static void part_of_a_second_of_need_brings_act_by_forward(void **state)
{
    (void)state;
    struct advice start = advice_start();
    struct advice_policy policy = POLICY;
    policy.margin_s += 0.3;
    struct advice_facts facts = arriving_at(NOW, 0.5, NOW + 5 * HOUR, NOW + 6 * HOUR);
    assert_int_equal(advice_step(&policy, &facts, &start, NULL).act_by_utc_s, NOW + 5 * HOUR - 70 * MINUTE - 1);
}

static void there_is_no_act_by_without_an_arrival(void **state)
{
    (void)state;
    struct advice advice = advice_start();
    struct advice_facts facts = quiet_at(NOW);
    advice = step(&facts, &advice);
    assert_int_equal(advice.act_by_utc_s, PASSAGE_NEVER);
    facts.trigger_holds = true;
    assert_int_equal(step(&facts, &advice).act_by_utc_s, PASSAGE_NEVER);
}

static void while_blind_an_act_by_is_not_lost(void **state)
{
    (void)state;
    struct advice advice = advice_start();
    struct advice_facts facts = arriving_at(NOW, 0.67, NOW + 2 * HOUR, NOW + 3 * HOUR);
    advice = step(&facts, &advice);
    const int64_t act_by = advice.act_by_utc_s;
    facts = quiet_at(NOW + 300);
    facts.is_blind = true;
    advice = step(&facts, &advice);
    assert_int_equal(advice.act_by_utc_s, act_by);
    assert_int_equal(advice.level, ADVICE_MUSTER);
    /* and is acted on when it comes into reach */
    facts.now_utc_s = act_by - 600;
    advice = step(&facts, &advice);
    assert_int_equal(advice.level, ADVICE_SEND);
    facts.is_blind = false;
    assert_int_equal(step(&facts, &advice).act_by_utc_s, PASSAGE_NEVER);
}

/* ---- limits ---- */

static const struct limit_row {
    const char *shows;
    double chance;
    int64_t earliest_s, likely_s; /* from NOW; 0: never */
    enum advice_level level;
    bool near_sides_only;
    unsigned reasons;
} LIMITS[] = {
    {"a chance under the muster chance", 0.0999, 6 * HOUR, 0, ADVICE_QUIET, false, 0},
    {"a chance at it", 0.10, 6 * HOUR, 0, ADVICE_MUSTER, false, ADVICE_BY_CHANCE},
    {"a chance that is no number", NOT_A_NUMBER, 0, 0, ADVICE_MUSTER, false, ADVICE_BY_CHANCE},
    {"act-by a second beyond the slack", 0.5, 80 * MINUTE + 1, 0, ADVICE_MUSTER, false, ADVICE_BY_CHANCE},
    {"act-by at the slack", 0.5, 80 * MINUTE, 0, ADVICE_SEND, false, ADVICE_BY_CHANCE | ADVICE_BY_ACT_BY},
    {"act-by past", 0.5, 60 * MINUTE, 0, ADVICE_SEND, false, ADVICE_BY_CHANCE | ADVICE_BY_ACT_BY},
    {"a crew arrives with the earliest water", 0.5, 55 * MINUTE, 0, ADVICE_SEND, false,
     ADVICE_BY_CHANCE | ADVICE_BY_ACT_BY},
    {"a crew arrives a second after the earliest water", 0.5, 55 * MINUTE - 1, 0, ADVICE_SEND, true,
     ADVICE_BY_CHANCE | ADVICE_BY_ACT_BY},
    {"a crew arrives with the likely water", 0.9, 40 * MINUTE, 55 * MINUTE, ADVICE_SEND, true,
     ADVICE_BY_CHANCE | ADVICE_BY_ACT_BY},
    {"a crew arrives a second after the likely water", 0.9, 40 * MINUTE, 55 * MINUTE - 1, ADVICE_LATE, true,
     ADVICE_BY_CHANCE | ADVICE_BY_ACT_BY},
    {"water is at the mark now", 1.0, -HOUR, -MINUTE, ADVICE_LATE, true, ADVICE_BY_CHANCE | ADVICE_BY_ACT_BY},
};

static void levels_change_exactly_at_their_limits(void **state)
{
    (void)state;
    struct advice start = advice_start();
    for (size_t i = 0; i < COUNT(LIMITS); i++) {
        const struct limit_row *row = &LIMITS[i];
        struct advice_facts facts =
            arriving_at(NOW, row->chance, row->earliest_s ? NOW + row->earliest_s : PASSAGE_NEVER,
                        row->likely_s ? NOW + row->likely_s : PASSAGE_NEVER);
        struct advice advice = step(&facts, &start);
        if (advice.level != row->level || advice.near_sides_only != row->near_sides_only ||
            advice.reasons != row->reasons)
            fail_msg("%s: %s, near sides %d, reasons %x", row->shows, advice_level_name(advice.level),
                     advice.near_sides_only, advice.reasons);
    }
}

static void a_signed_trigger_a_carried_one_and_the_crew_plan_each_send(void **state)
{
    (void)state;
    struct advice start = advice_start();
    struct advice_facts facts = quiet_at(NOW);
    facts.trigger_holds = true;
    struct advice advice = step(&facts, &start);
    assert_int_equal(advice.level, ADVICE_SEND);
    assert_int_equal(advice.reasons, ADVICE_BY_TRIGGER);

    facts = quiet_at(NOW);
    facts.assumed_trigger_holds = true;
    facts.is_blind = true; /* on assumed water, while the gauge is silent */
    advice = step(&facts, &start);
    assert_int_equal(advice.level, ADVICE_SEND);
    assert_int_equal(advice.reasons, ADVICE_BY_ASSUMED_TRIGGER);

    facts = quiet_at(NOW);
    facts.joined_by_crew_plan = true;
    advice = step(&facts, &start);
    assert_int_equal(advice.level, ADVICE_SEND);
    assert_int_equal(advice.reasons, ADVICE_BY_CREW_PLAN);
}

static void a_wet_approach_alone_makes_no_crossing_late(void **state)
{
    (void)state;
    struct advice start = advice_start();
    struct advice_facts facts = quiet_at(NOW);
    facts.lowest_wet = arriving(1.0, NOW - HOUR, NOW - HOUR);
    assert_int_equal(step(&facts, &start).level, ADVICE_QUIET);
    /* with a chance of the closing mark a crew would have to cross it */
    facts.closing = arriving(0.22, NOW + 5 * HOUR, PASSAGE_NEVER);
    assert_int_equal(step(&facts, &start).level, ADVICE_LATE);
}

static const struct crew_row {
    const char *shows;
    enum road_state road;
    int64_t called_s; /* from NOW; 1: not known */
    int64_t likely_s;
    enum advice_level level;
} CREWS[] = {
    {"no crew yet: a crew time from now", ROAD_OPEN, 1, 30 * MINUTE, ADVICE_LATE},
    {"handed back: a new crew", ROAD_HANDED_BACK, -50 * MINUTE, 30 * MINUTE, ADVICE_LATE},
    {"called in time", ROAD_CREW_CALLED, -30 * MINUTE, 30 * MINUTE, ADVICE_SEND},
    {"called, there with the water", ROAD_CREW_CALLED, -25 * MINUTE, 30 * MINUTE, ADVICE_SEND},
    {"called a second too late", ROAD_CREW_CALLED, -25 * MINUTE + 1, 30 * MINUTE, ADVICE_LATE},
    {"called at an unknown hour: as from now", ROAD_CREW_CALLED, 1, 30 * MINUTE, ADVICE_LATE},
    {"called by a clock ahead of ours: as from now", ROAD_CREW_CALLED, 5 * MINUTE, 30 * MINUTE, ADVICE_LATE},
    {"called long ago, should be there: the water is not", ROAD_CREW_CALLED, -2 * HOUR, 5 * MINUTE, ADVICE_SEND},
    {"called long ago, and the water is there", ROAD_CREW_CALLED, -2 * HOUR, -1, ADVICE_LATE},
    {"out, hour known", ROAD_CREW_OUT, -25 * MINUTE, 30 * MINUTE, ADVICE_SEND},
    {"out too late", ROAD_CREW_OUT, -20 * MINUTE, 30 * MINUTE, ADVICE_LATE},
    {"out, hour not known: the word stands until the water does", ROAD_CREW_OUT, 1, 1, ADVICE_SEND},
    {"out, hour not known, water there", ROAD_CREW_OUT, 1, -1, ADVICE_LATE},
    {"one side shut: the crew is there", ROAD_ONE_SIDE_SHUT, -MINUTE, 2 * MINUTE, ADVICE_SEND},
    {"one side shut, water there", ROAD_ONE_SIDE_SHUT, -MINUTE, -1, ADVICE_LATE},
};

static void a_crew_on_its_way_keeps_its_word_until_it_would_meet_water(void **state)
{
    (void)state;
    for (size_t i = 0; i < COUNT(CREWS); i++) {
        struct advice advice = standing_at(ADVICE_SEND);
        struct advice_facts facts = arriving_at(NOW, 0.9, NOW + CREWS[i].likely_s, NOW + CREWS[i].likely_s);
        facts.road = CREWS[i].road;
        facts.crew_called_utc_s = CREWS[i].called_s == 1 ? 0 : NOW + CREWS[i].called_s;
        advice = step(&facts, &advice);
        if (advice.level != CREWS[i].level)
            fail_msg("%s: %s", CREWS[i].shows, advice_level_name(advice.level));
    }
}

static void water_seen_at_a_road_not_shut_is_late_whatever_the_forecast(void **state)
{
    (void)state;
    for (int road = 0; road < ROADS; road++) {
        struct advice advice = advice_start();
        struct advice_facts facts = quiet_at(NOW);
        facts.road = (enum road_state)road;
        facts.water_seen_wet = true;
        advice = step(&facts, &advice);
        assert_int_equal(advice.level, is_shut(facts.road) ? ADVICE_KEEP_SHUT : ADVICE_LATE);
        assert_true((advice.reasons & ADVICE_BY_WATER_SEEN) != 0);
        assert_int_equal(advice.near_sides_only, !is_shut(facts.road));
    }
}

/* ---- blind ---- */

static void blind_and_rising_musters_at_once_and_blind_alone_does_not(void **state)
{
    (void)state;
    struct advice advice = advice_start();
    struct advice_facts facts = quiet_at(NOW);
    facts.is_blind = true;
    assert_true(changes(&facts, &advice)); /* the overlay alone is news */
    assert_int_equal(advice.level, ADVICE_QUIET);
    assert_true(advice.is_blind);
    facts.is_rising = true;
    assert_true(changes(&facts, &advice));
    assert_int_equal(advice.level, ADVICE_MUSTER);
    assert_int_equal(advice.reasons, ADVICE_BY_BLIND);
    /* rising without being blind is no reason */
    struct advice seeing = advice_start();
    facts.is_blind = false;
    assert_int_equal(step(&facts, &seeing).level, ADVICE_QUIET);
}

static void a_gauge_dead_for_days_never_rests_at_quiet(void **state)
{
    (void)state;
    struct advice advice = advice_start();
    struct advice_facts facts = quiet_at(NOW);
    facts.is_blind = true;
    facts.silent_s = 48 * HOUR - 1;
    assert_int_equal(step(&facts, &advice).level, ADVICE_QUIET);
    facts.silent_s = 48 * HOUR;
    advice = step(&facts, &advice);
    assert_int_equal(advice.level, ADVICE_MUSTER);
    assert_int_equal(advice.reasons, ADVICE_BY_BLIND);
    facts.silent_s = NOT_A_NUMBER;
    struct advice start = advice_start();
    assert_int_equal(step(&facts, &start).level, ADVICE_MUSTER);
}

static void entering_and_leaving_blind_are_changes_at_every_level_and_staying_is_none(void **state)
{
    (void)state;
    for (int level = 0; level < LEVELS; level++) {
        struct advice advice = standing_at((enum advice_level)level);
        struct advice_facts facts = quiet_at(NOW);
        facts.road = level > ADVICE_LATE ? ROAD_SHUT : ROAD_OPEN;
        facts.is_blind = true;
        assert_true(changes(&facts, &advice));
        facts.now_utc_s += 300;
        assert_false(changes(&facts, &advice));
        facts.is_blind = false;
        facts.now_utc_s += 300;
        assert_true(changes(&facts, &advice));
        facts.now_utc_s += 300;
        assert_false(changes(&facts, &advice));
    }
}

static void time_without_data_does_not_count_towards_stepping_down(void **state)
{
    (void)state;
    struct advice advice = standing_at(ADVICE_SEND);
    struct advice_facts facts = quiet_at(NOW);
    advice = step(&facts, &advice);
    assert_int_equal(advice.reasons, ADVICE_HELD_DWELL);
    facts.now_utc_s = NOW + DWELL - 60;
    facts.is_blind = true;
    advice = step(&facts, &advice);
    assert_int_equal(advice.level, ADVICE_SEND);
    assert_int_equal(advice.reasons, ADVICE_HELD_NO_DATA);
    facts.now_utc_s = NOW + 10 * HOUR;
    advice = step(&facts, &advice);
    assert_int_equal(advice.level, ADVICE_SEND);
    /* data are back: the dwell starts from here */
    facts.is_blind = false;
    advice = step(&facts, &advice);
    assert_int_equal(advice.level, ADVICE_SEND);
    facts.now_utc_s += DWELL - 1;
    advice = step(&facts, &advice);
    assert_int_equal(advice.level, ADVICE_SEND);
    facts.now_utc_s += 1;
    assert_int_equal(step(&facts, &advice).level, ADVICE_QUIET);
}

/* ---- names ---- */

static void names_are_the_words_of_the_trade(void **state)
{
    (void)state;
    static const char *const levels[] = {"QUIET", "MUSTER", "SEND", "LATE", "KEEP SHUT", "WALK-OVER"};
    for (int level = 0; level < LEVELS; level++)
        assert_string_equal(advice_level_name((enum advice_level)level), levels[level]);
    assert_string_equal(advice_level_name((enum advice_level)LEVELS), "?");
    assert_string_equal(road_state_name((enum road_state)ROADS), "?");
    for (int road = 0; road < ROADS; road++) {
        enum road_state back = ROAD_OPEN;
        assert_true(road_state_from_name(road_state_name((enum road_state)road), &back));
        assert_int_equal(back, road);
    }
}

static void road_words_are_read_in_any_case_with_any_joint(void **state)
{
    (void)state;
    static const struct {
        const char *name;
        int road; /* -1: refused */
    } rows[] = {
        {"open", ROAD_OPEN},
        {"Crew Called", ROAD_CREW_CALLED},
        {"crew_out", ROAD_CREW_OUT},
        {"ONE-SIDE_shut", ROAD_ONE_SIDE_SHUT},
        {"walk over", ROAD_WALK_OVER},
        {"walk-over", ROAD_WALK_OVER},
        {"handed-back", ROAD_HANDED_BACK},
        {"", -1},
        {"SHU", -1},
        {"SHUT ", -1},
        {" SHUT", -1},
        {"SHUTTERED", -1},
        {"crewout", -1},
        {"crew  out", -1},
        {"closed", -1},
    };
    for (size_t i = 0; i < COUNT(rows); i++) {
        enum road_state road = (enum road_state)77;
        bool is_known = road_state_from_name(rows[i].name, &road);
        if (is_known != (rows[i].road >= 0) || (int)road != (is_known ? rows[i].road : 77))
            fail_msg("'%s'", rows[i].name);
    }
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(a_road_not_shut_stands_where_the_ladder_says_from_every_level),
        cmocka_unit_test(while_blind_a_road_not_shut_never_stands_lower_from_any_level),
        cmocka_unit_test(a_road_shut_is_kept_shut_or_may_be_walked_over_from_every_level),
        cmocka_unit_test(act_by_is_the_earliest_arrival_less_crew_time_and_margin_exactly),
        cmocka_unit_test(ten_minutes_of_crew_time_move_act_by_by_exactly_ten_minutes),
        cmocka_unit_test(part_of_a_second_of_need_brings_act_by_forward),
        cmocka_unit_test(there_is_no_act_by_without_an_arrival),
        cmocka_unit_test(while_blind_an_act_by_is_not_lost),
        cmocka_unit_test(levels_change_exactly_at_their_limits),
        cmocka_unit_test(a_signed_trigger_a_carried_one_and_the_crew_plan_each_send),
        cmocka_unit_test(a_wet_approach_alone_makes_no_crossing_late),
        cmocka_unit_test(a_crew_on_its_way_keeps_its_word_until_it_would_meet_water),
        cmocka_unit_test(water_seen_at_a_road_not_shut_is_late_whatever_the_forecast),
        cmocka_unit_test(blind_and_rising_musters_at_once_and_blind_alone_does_not),
        cmocka_unit_test(a_gauge_dead_for_days_never_rests_at_quiet),
        cmocka_unit_test(entering_and_leaving_blind_are_changes_at_every_level_and_staying_is_none),
        cmocka_unit_test(time_without_data_does_not_count_towards_stepping_down),
        cmocka_unit_test(names_are_the_words_of_the_trade),
        cmocka_unit_test(road_words_are_read_in_any_case_with_any_joint),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
