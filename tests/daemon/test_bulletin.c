/* SPDX-License-Identifier: MIT */
/* The bulletin: a page that fits, is complete, and says nothing it must not. */
#include "tests/daemon/sentence_scene.h"

/* --- the bulletin --- */

static void the_bulletin_of_the_demonstration_has_all_seven_sections(void **state)
{
    (void)state;
    struct night *night = make_night();
    struct settings_trigger trigger = {
        .gauge = 0, .value = 2.00, .needs_rising = true, .signed_by = "district engineer"};
    night->points[FORD].triggers = &trigger;
    night->points[FORD].trigger_count = 1;
    night->point_pictures[FORD].trigger_since_utc_s = at(21, 55);
    night->point_pictures[FORD].unmeasured_share = 0.14;
    night->point_pictures[FORD].road = (struct road_fact){ROAD_CREW_CALLED, at(21, 59), "roads foreman"};
    night->point_pictures[FORD].water = (struct water_fact){true, false, (double)NAN, at(21, 40), "crew lead"};
    night->point_pictures[FORD].accepted_utc_s = at(21, 58);
    snprintf(night->point_pictures[FORD].accepted_by, FACT_ROLE_SIZE, "duty officer");
    char *bulletin = bulletin_of(night, &night->decision);
    char *text = joined(bulletin);
    static const char *const words[] = {
        "VENNMARK ROADS, bulletin #0412, 2031-02-14 22:00. All times local, UTC+01:00.",
        "(1) WHAT TO DO: [>>] SEND [//] BLIND, Tallowick Ford. ACT BY 22:18. Send the crew now, shut both sides.",
        "a signed trigger holds on the last rise carried forward while the gauge is silent (Orlin Scar 2.00 m, "
        "signed district "
        "engineer, since 21:55)",
        "Its diversion runs over Low Pintle Bridge: [..] QUIET, road OPEN.",
        "(2) CROSSINGS by act-by.",
        "22:18   Tallowick Ford     [>>] SEND [//] BLIND  23:35 / 23:43 / 23:58  7 of 9  1.43, 0.12 below",
        "-       Low Pintle Bridge  [..] QUIET            not reached            0 of 9  0.93, 1.69 below",
        "(3) RESTS ON: Orlin Scar 1.60 m, rising 0.60 m/h, seen 21:15, 45 min old, [//] BLIND (limit 25 min).",
        "Tallowick Ford now 1.43 m above invert (1.33 to 1.47), 0.12 m below deck. Peak likely 1.95 m at 00:53 (1.52 "
        "to 2.21), "
        "0.40 m over deck.",
        "Approach wet (closing mark) 1.45 m: earliest 23:28, likely 23:36, latest 23:49; all 9 runs reach it.",
        "Measured until 23:08; after that assumed: last rise carried forward / held / recession, each at roughness "
        "0.8 1.0 1.2; "
        "uncalibrated. No gauge measures 14 % of the flow there.",
        "(4) WHAT WOULD CHANGE THIS: a reading from Orlin Scar, also by hand; act-by moving by more than 10 min;",
        "Next look 22:05.",
        "(5) CANNOT SEE: ungauged side water; rain on the crossing's own catchment (not protected from local rain); "
        "debris; ice; "
        "announced releases not entered; rain on the 9.4 km below the gauge; drift on the ford.",
        "(6) TOLD: duty officer by page-duty, log.",
        "People: road CREW CALLED, roads foreman 21:59; water seen: dry, crew lead 21:40; accepted by duty officer "
        "21:58.",
        "(7) " SENTENCE_CAUTION " Settings 5f0c1d2e, record 89abcdef.",
    };
    for (size_t i = 0; i < sizeof words / sizeof words[0]; i++)
        expect_words(text, words[i]);
    expect_page(bulletin);
    expect_no_banned_word(text);
    free(text);
    free(bulletin);
    free(night);
}

struct bulletin_row {
    const char *shows, *words;
    void (*change)(struct night *night);
};

static void with_store_failing(struct night *night)
{
    night->picture.is_store_failing = true;
    snprintf(night->picture.store_trouble, FACT_NOTE_SIZE, "disk full");
}

static void with_gap(struct night *night)
{
    night->picture.away_from_utc_s = at(20, 31);
}

static void with_beyond(struct night *night)
{
    night->gauge_pictures[0].is_beyond_gauging = true;
    night->point_pictures[FORD].is_peak_beyond_gauging = true;
}

static void with_water_above_survey(struct night *night)
{
    night->point_pictures[FORD].is_peak_above_survey = true;
}

static void with_hand(struct night *night)
{
    night->gauge_pictures[0].is_blind = false;
    night->gauge_pictures[0].is_hand = true;
}

static void with_held(struct night *night)
{
    night->gauge_pictures[0].held_utc_s = at(22, 35) - 7200;
    night->gauge_pictures[0].held_value = 6.91;
}

static void with_frozen(struct night *night)
{
    night->gauge_pictures[0].is_frozen = true;
    night->gauge_pictures[0].rate_per_s = -0.5 / 3600.0;
}

static void with_no_reading(struct night *night)
{
    night->gauge_pictures[0].newest_utc_s = 0;
}

static void with_replaced(struct night *night)
{
    night->picture.replaced_share = 0.025;
}

static void with_no_forecast(struct night *night)
{
    with_no_reading(night);
    night->point_pictures[0].is_unknown = true;
}

static void with_long_silence(struct night *night)
{
    night->gauge_pictures[0].silent_s = 3 * 86400;
    night->gauge_pictures[0].newest_utc_s = at(22, 0) - 3 * 86400;
}

static void with_live_gauge(struct night *night)
{
    night->gauge_pictures[0].is_blind = false;
    night->gauge_pictures[0].newest_utc_s = at(21, 55);
}

static void with_wet(struct night *night)
{
    night->point_pictures[FORD].water = (struct water_fact){true, true, 4.0, at(21, 50), "crew lead"};
}

static void with_late(struct night *night)
{
    apply(night, &(struct change){ADVICE_SEND, ADVICE_LATE, .act_by_h = 21, .act_by_min = 40});
}

static void with_near_sides(struct night *night)
{
    apply(night, &(struct change){ADVICE_SEND, ADVICE_SEND, .is_near = true, .act_by_h = 21, .act_by_min = 40});
}

static void with_walk_over(struct night *night)
{
    apply(night, &(struct change){ADVICE_KEEP_SHUT, ADVICE_WALK_OVER, .act_by_h = 0});
}

static void with_keep_shut(struct night *night)
{
    apply(night, &(struct change){ADVICE_SEND, ADVICE_KEEP_SHUT, .reasons = ADVICE_HELD_RETURN});
}

static void with_even_chance(struct night *night)
{
    night->mark_pictures[FORD][0].passage.chance = 5.0 / 9.0;
    night->mark_pictures[FORD][0].passage.latest_utc_s = PASSAGE_NEVER;
}

static void with_small_chance(struct night *night)
{
    night->mark_pictures[FORD][0].passage.chance = 3.0 / 9.0;
}

static void with_no_chance(struct night *night)
{
    night->mark_pictures[FORD][0].passage = (struct passage){0.0, PASSAGE_NEVER, PASSAGE_NEVER, PASSAGE_NEVER, 0, 0};
}

static void with_all_measured(struct night *night)
{
    night->point_pictures[FORD].measured_until_utc_s = PASSAGE_NEVER;
}

static double clean_m3s[] = {0.0, 50.0, 100.0};
static double clean_m[] = {0.0, 1.6, 2.8};
static double blocked_m[] = {0.0, 1.8, 3.2};

static void with_stage_rating(struct night *night)
{
    struct settings_point *ford = &night->points[FORD];
    ford->stage_row_count = 3;
    ford->stage_row_discharge_m3s = clean_m3s;
    ford->stage_row_stage_m = clean_m;
}

/* A peak of 2.20 m is 75 m3/s on the clean rows, and there 2.50 m on the part-blocked ones. */
static void with_blocked_rating(struct night *night)
{
    with_stage_rating(night);
    night->point_pictures[FORD].peak.likely_m = 2.20;
    night->points[FORD].blocked_row_count = 3;
    night->points[FORD].blocked_row_discharge_m3s = clean_m3s;
    night->points[FORD].blocked_row_stage_m = blocked_m;
}

static const struct section channel = {
    .shape = SECTION_TRAPEZOID, .bottom_m = 14.0, .side_h_per_v = 2.0, .roughness_n = 0.038};

/* Likely 0.40 m deep; a small car's limit is passed by most runs, the last by a few. */
static void with_water_on_deck(struct night *night)
{
    struct deck_picture *deck = &night->point_pictures[FORD].deck;
    night->points[FORD].has_deck = true;
    night->points[FORD].deck =
        (struct hazard_deck){.level_m = 1.55, .panel = HAZARD_ANY_PANEL, .roughness_n = 0.016, .section = &channel};
    night->reaches[FORD].section = &channel;
    deck->low = (struct hazard_water){0.0, 0.0, 0.0};
    deck->likely = (struct hazard_water){0.4, 1.7219, 0.68876};
    deck->high = (struct hazard_water){0.66, 2.07, 1.3662};
    deck->likely_utc_s = at(24, 53);
    for (size_t whom = 0; whom < HAZARD_WHOM_COUNT; whom++)
        deck->over[whom] = night->mark_pictures[CAUSEWAY][0].passage; /* never */
    deck->over[HAZARD_SMALL_CAR].chance = 7.0 / 9.0;
    deck->over[HAZARD_SMALL_CAR].earliest_utc_s = at(23, 41);
    deck->over[HAZARD_SMALL_CAR].likely_utc_s = at(23, 52);
    deck->by[HAZARD_SMALL_CAR] = HAZARD_PRODUCT;
    deck->over[HAZARD_ANY_PERSON].chance = 3.0 / 9.0;
    deck->over[HAZARD_ANY_PERSON].earliest_utc_s = at(24, 20);
    deck->by[HAZARD_ANY_PERSON] = HAZARD_SPEED;
}

/*
 * 75 m3/s at 2.50 m: A 47.5 m2, R 1.886 m, K 1908 m3/s, and the sheet of 0.95 m on a deck of n 0.016 runs at
 * 75 / 1908 x 0.95^(2/3) / 0.016 = 2.374 m/s, faster than the channel's mean of 1.58.
 */
static void with_water_on_a_blocked_deck(struct night *night)
{
    with_blocked_rating(night);
    with_water_on_deck(night);
    night->points[FORD].cannot_see_count = 0; /* room on the page */
    night->points[FORD].detour_over = NULL;
    night->decision.after.reasons = ADVICE_BY_CHANCE;
    night->gauge_pictures[0].is_blind = false;
}

static void with_water_in_the_highest_run(struct night *night)
{
    with_water_on_deck(night);
    night->point_pictures[FORD].deck.likely = night->point_pictures[FORD].deck.low;
    night->point_pictures[FORD].deck.over[HAZARD_SMALL_CAR].likely_utc_s = PASSAGE_NEVER;
    night->point_pictures[FORD].deck.over[HAZARD_SMALL_CAR].chance = 2.0 / 9.0;
    night->point_pictures[FORD].deck.over[HAZARD_ANY_PERSON] = night->mark_pictures[CAUSEWAY][0].passage;
}

static const char *access_over[] = {"marren-causeway"};

static void with_access(struct night *night)
{
    night->points[FORD].access_over = access_over;
    night->points[FORD].access_over_count = 1;
    night->point_pictures[CAUSEWAY].road.state = ROAD_SHUT;
}

static void with_deliveries(struct night *night)
{
    for (int i = 0; i < 3; i++)
        night->outbox[i] = (struct message){.number = 412, .point = FORD, .channel = i, .tries = 7};
    night->outbox[0].state = DELIVERY_SENT;
    night->outbox[0].settled_utc_s = at(21, 58);
    night->outbox[1].state = DELIVERY_WAITING;
    night->outbox[2].state = DELIVERY_GIVEN_UP;
    night->outbox[2].settled_utc_s = at(21, 59);
    night->outbox[3] = (struct message){.number = 411, .point = FORD, .channel = 0, .state = DELIVERY_UNDER_WAY};
    night->picture.outbox_count = 4;
}

static void with_no_roster(struct night *night)
{
    night->settings.role_count = 0;
}

static void with_no_crew(struct night *night)
{
    night->points[FORD].has_crew = false;
}

static void with_no_number(struct night *night)
{
    night->decision.message_number = 0;
    night->picture.newest_link[0] = '\0';
}

static void what_is_special_tonight_is_said(void **state)
{
    (void)state;
    static const struct bulletin_row rows[] = {
        {"the record fails", "NOT STORED: the record cannot be written (disk full). Keep a hand log.",
         with_store_failing},
        {"it was away", "Forewater was away from 20:31;", with_gap},
        {"gauge beyond gauging", "[//] BLIND (limit 25 min), beyond highest gauging 2.38 m.", with_beyond},
        {"peak beyond gauging", "The peak is beyond the highest gauging and may be well off.", with_beyond},
        {"above the survey", "The water stands above the survey and may be well off.", with_water_above_survey},
        {"by hand", "seen 21:15, 45 min old, hand reading.", with_hand},
        {"held", "held unconfirmed: 6.91 m at 20:35.", with_held},
        {"frozen and falling",
         "falling 0.50 m/h, seen 21:15, 45 min old, [//] BLIND (limit 25 min), newer readings stand still.",
         with_frozen},
        {"nothing read yet", "Orlin Scar: no reading yet", with_no_reading},
        {"routed without backwater", "In 2.5 % of its steps the routing had to do without backwater", with_replaced},
        {"no forecast", "There is NO FORECAST for Tallowick Ford", with_no_forecast},
        {"silent for days", "seen Tue 22:00, 3 days old", with_long_silence},
        {"live gauge", "no reading from Orlin Scar by 22:20;", with_live_gauge},
        {"wet", "water seen: wet 4 cm, crew lead 21:50; not accepted yet.", with_wet},
        {"late",
         "[X] LATE, Tallowick Ford. ACT BY 21:40, which has PASSED. Too late to close dry. Do not send into water. "
         "Block "
         "where the road is dry, on each side, and call the control room.",
         with_late},
        {"near sides", "ACT BY 21:40, which has PASSED. ACT NOW. Send the crew now, near sides only: do not cross,",
         with_near_sides},
        {"walk-over",
         "[~] WALK-OVER MAY BE SENT, Tallowick Ford. The road stays shut until people have looked at it and hand it "
         "back.",
         with_walk_over},
        {"keep shut", "[~] KEEP SHUT, Tallowick Ford. Do not hand back;", with_keep_shut},
        {"why shut", "Why: water may be back before the road could be opened and shut again.", with_keep_shut},
        {"even", "latest later or not at all; may or may not reach it, about even: 5 of 9 runs do.",
         with_even_chance},
        {"few", "may reach it, 3 of 9 runs do.", with_small_chance},
        {"none", "Approach wet (closing mark) 1.45 m: no run of 9 reaches it.", with_no_chance},
        {"all measured", "Measured beyond the hours looked ahead; roughness 0.8 1.0 1.2, uncalibrated.",
         with_all_measured},
        {"own rating", "Level there is from a stage rating of its own.", with_stage_rating},
        {"part-blocked", "part-blocked by debris the peak would be 2.50 m, 0.95 m over deck.", with_blocked_rating},
        {"water on the deck",
         "On the deck, estimated, likely peak 0.40 m deep, 1.73 m/s, 0.69 m2/s (0.00 to 1.37), from 23:52 (earliest "
         "23:41) over the draft limit of 0.3 m2/s for a small stationary car, in some runs from 00:20 over the "
         "guideline limit of 2 m/s for any vehicle or person. No limit is a depth to drive in.",
         with_water_on_deck},
        {"water on a blocked deck",
         "part-blocked by debris the peak would be 2.50 m, 0.95 m over deck. On the deck then 0.95 m, 2.38 m/s, 2.26 "
         "m2/s, over the guideline limit of 0.6 m2/s for any vehicle or person. No limit is a depth to drive in.",
         with_water_on_a_blocked_deck},
        {"water on the deck in few runs",
         "On the deck, estimated, in the highest run 0.66 m deep, 2.07 m/s, 1.37 m2/s, in some runs from 23:41 over "
         "the "
         "draft limit of 0.3 m2/s for a small stationary car. No limit is a depth to drive in.",
         with_water_in_the_highest_run},
        {"access", "The crew's way runs over Marren Causeway: [..] QUIET, road SHUT.", with_access},
        {"deliveries", "GIVEN UP 21:59; log waits, 7 tries; page-duty sent 21:58. People:", with_deliveries},
        {"no roster", "(6) TOLD: no roster; every channel.", with_no_roster},
        {"no crew", "Nobody is set to close it: call the control room.", with_no_crew},
        {"no number", "VENNMARK ROADS, bulletin, 2031-02-14 22:00.", with_no_number},
        {"no record", "Settings 5f0c1d2e, record -.", with_no_number},
    };
    for (size_t row = 0; row < sizeof rows / sizeof rows[0]; row++) {
        struct night *night = make_night();
        rows[row].change(night);
        char *bulletin = bulletin_of(night, &night->decision);
        char *text = joined(bulletin);
        if (strstr(text, rows[row].words) == NULL)
            fail_msg("%s: '%s' is missing in:\n%s", rows[row].shows, rows[row].words, bulletin);
        expect_page(bulletin);
        expect_no_banned_word(text);
        free(text);
        free(bulletin);
        free(night);
    }
}

/* What is not passed must never read as if it were fit to drive through. */
static void of_a_limit_that_is_not_passed_there_is_no_word(void **state)
{
    (void)state;
    for (int is_dry = 0; is_dry < 2; is_dry++) {
        struct night *night = make_night();
        with_water_on_deck(night);
        struct deck_picture *deck = &night->point_pictures[FORD].deck;
        deck->likely = deck->high = (struct hazard_water){0.04, 1.31, 0.0524};
        for (size_t whom = 0; whom < HAZARD_WHOM_COUNT; whom++)
            deck->over[whom] = night->mark_pictures[CAUSEWAY][0].passage;
        if (is_dry)
            deck->likely = deck->high = (struct hazard_water){0.0, 0.0, 0.0};
        char *bulletin = bulletin_of(night, &night->decision);
        char *text = joined(bulletin);
        static const char *const never[] = {"limit of", "below the limit", "under the limit",
                                            "within",   "small",           "car"};
        for (size_t i = 0; i < sizeof never / sizeof *never; i++)
            if (has_word(text, never[i]))
                fail_msg("'%s' in:\n%s", never[i], bulletin);
        if (is_dry)
            assert_null(strstr(text, "On the deck"));
        else
            expect_words(text, "likely peak 0.04 m deep, 1.31 m/s, 0.06 m2/s (0.00 to 0.06). No limit is a depth to "
                               "drive in.");
        free(text);
        free(bulletin);
        free(night);
    }
}

/* Everything that can be said at once, long names everywhere, thirty crossings, five gauges. */
static void make_worst(struct night *night)
{
    static const char *unseen[] = {
        "a very long standing sentence about what this forecast is not able to see at this place",
        "another one, about drift wood and reed", "a third"};
    with_store_failing(night);
    snprintf(night->picture.store_trouble, FACT_NOTE_SIZE, "%s", place_names[3]);
    with_gap(night);
    with_beyond(night);
    with_water_above_survey(night);
    with_held(night);
    with_frozen(night);
    with_wet(night);
    with_blocked_rating(night);
    with_water_on_deck(night);
    struct deck_picture *deck = &night->point_pictures[FORD].deck;
    deck->over[HAZARD_ANY_VEHICLE] = deck->over[HAZARD_SMALL_CAR]; /* in the longest words */
    deck->over[HAZARD_ANY_PERSON] = night->mark_pictures[CAUSEWAY][0].passage;
    deck->by[HAZARD_ANY_VEHICLE] = HAZARD_PRODUCT;
    with_access(night);
    with_deliveries(night);
    with_even_chance(night);
    night->gauge_pictures[0].is_hand = true;
    night->gauge_pictures[0].is_unconfirmed = true;
    for (size_t i = 0; i < GAUGE_MOST; i++) {
        night->gauge_pictures[i] = night->gauge_pictures[0];
        night->gauges[i].name = place_names[3];
    }
    night->settings.gauge_count = night->picture.gauge_count = night->settings.river.gauge_count = GAUGE_MOST;
    for (size_t i = 0; i < POINT_MOST; i++) {
        night->points[i].name = place_names[3];
        night->point_pictures[i].advice.is_blind = true;
        night->mark_pictures[i][1].passage = night->mark_pictures[FORD][1].passage;
    }
    night->settings.point_count = night->picture.point_count = night->settings.river.point_count = POINT_MOST;
    night->settings.district_name = place_names[3];
    night->points[FORD].cannot_see = (const char **)(uintptr_t)unseen;
    night->points[FORD].cannot_see_count = 3;
    night->roster[0].role = place_names[3];
    night->roster[0].to_count = 4;
    for (size_t i = 0; i < 4; i++)
        night->channels[i].id = "a-channel-whose-name-goes-on-and-on-and-on-and-on-for-ever";
    struct point_picture *ford = &night->point_pictures[FORD];
    snprintf(ford->road.by, FACT_ROLE_SIZE, "roads foreman of the lower district, second shift of the night");
    snprintf(ford->water.by, FACT_ROLE_SIZE, "%s", ford->road.by);
    snprintf(ford->accepted_by, FACT_ROLE_SIZE, "%s", ford->road.by);
    ford->road.at_utc_s = ford->water.at_utc_s = ford->accepted_utc_s = at(20, 0) - 2 * 86400;
    ford->unmeasured_share = 0.42;
    for (size_t i = 3; i < 8; i++)
        night->settings.roughness_factors[i] = 1.25;
    night->settings.roughness_factor_count = 8;
}

static void the_worst_bulletin_still_fits_on_its_page(void **state)
{
    (void)state;
    for (int level = 0; level < SENTENCE_LEVEL_COUNT; level++)
        for (int bits = 0; bits < 8; bits++) {
            struct night *night = make_night();
            make_worst(night);
            apply(night,
                  &(struct change){ADVICE_QUIET, (enum advice_level)level, .is_blind = bits & 1, .is_near = bits & 2,
                                   .reasons = 0x7ff, .act_by_h = bits & 4 ? 21 : -40, .act_by_min = 17});
            char *bulletin = bulletin_of(night, &night->decision);
            char *text = joined(bulletin);
            expect_page(bulletin);
            expect_no_banned_word(text);
            static const char *const kept[] = {
                "(1) WHAT TO DO: ",
                "(2) CROSSINGS",
                "more, the highest of them [..] QUIET [//] BLIND",
                "(3) RESTS ON: ",
                "0.12 m below deck",
                "of 24 runs do",
                "Measured until ",
                "uncalibrated",
                "No gauge measures 42 % of the flow there.",
                "beyond highest gauging 2.38 m",
                "part-blocked",
                "over the guideline limit of 0.6 m2/s for any vehicle, child or old person. No limit is a depth to "
                "drive",
                "(4) ",
                "not protected from local rain); debris; ice; announced releases not entered",
                "(6) TOLD: ",
                "water seen: wet 4 cm",
                "NOT STORED",
                "(7) " SENTENCE_CAUTION " Settings 5f0c1d2e, record 89abcdef."};
            for (size_t i = 0; i < sizeof kept / sizeof kept[0]; i++)
                if (strstr(text, kept[i]) == NULL)
                    fail_msg("'%s' is missing in:\n%s", kept[i], bulletin);
            free(text);
            free(bulletin);
            free(night);
        }
}

static void every_number_of_crossings_fits_and_shows_the_one_it_is_about(void **state)
{
    (void)state;
    for (size_t count = 1; count <= POINT_MOST; count++) {
        struct night *night = make_night();
        night->settings.point_count = night->picture.point_count = count;
        for (size_t i = 0; i < count; i++) /* the point it is about comes last by act-by */
            night->point_pictures[i].advice.act_by_utc_s = at(23, 0) - (int64_t)i * 60;
        night->decision.point = 0;
        char *bulletin = bulletin_of(night, &night->decision);
        expect_page(bulletin);
        expect_words(bulletin, "\n23:00  ");
        if (count > 12)
            expect_words(bulletin, " more, the highest of them [..] QUIET");
        free(bulletin);
        free(night);
    }
}

static void crossings_stand_in_order_of_act_by(void **state)
{
    (void)state;
    struct night *night = make_night();
    night->point_pictures[BRIDGE].advice.act_by_utc_s = at(22, 10);
    night->point_pictures[BRIDGE].advice.level = ADVICE_MUSTER;
    char *bulletin = bulletin_of(night, &night->decision);
    const char *bridge = strstr(bulletin, "\n22:10   Low Pintle Bridge");
    const char *ford = strstr(bulletin, "\n22:18   Tallowick Ford");
    const char *causeway = strstr(bulletin, "\n-       Marren Causeway");
    assert_true(bridge != NULL && ford != NULL && causeway != NULL && bridge < ford && ford < causeway);
    free(bulletin);
    free(night);
}

static void without_a_decision_the_most_urgent_crossing_is_told(void **state)
{
    (void)state;
    struct night *night = make_night();
    night->point_pictures[FORD].told_number = 407;
    char *bulletin = bulletin_of(night, NULL);
    expect_words(bulletin, "bulletin #0407");
    expect_words(bulletin, "(1) WHAT TO DO: [>>] SEND [//] BLIND, Tallowick Ford.");
    free(bulletin);
    night->point_pictures[BRIDGE].advice.level = ADVICE_LATE;
    bulletin = bulletin_of(night, NULL);
    expect_words(bulletin, "(1) WHAT TO DO: [X] LATE, Low Pintle Bridge.");
    free(bulletin);
    night->point_pictures[BRIDGE].advice.level = ADVICE_SEND;
    night->point_pictures[BRIDGE].advice.act_by_utc_s = at(22, 17);
    bulletin = bulletin_of(night, NULL);
    expect_words(bulletin, "(1) WHAT TO DO: [>>] SEND, Low Pintle Bridge. ACT BY 22:17.");
    free(bulletin);
    free(night);
}

static void a_picture_before_the_first_forecast_makes_no_nonsense(void **state)
{
    (void)state;
    struct night *night = make_night();
    night->point_pictures[FORD].level_now.likely_m = (double)NAN;
    night->point_pictures[FORD].peak.likely_m = (double)INFINITY;
    night->point_pictures[FORD].marks = NULL;
    char *bulletin = bulletin_of(night, &night->decision);
    expect_page(bulletin);
    assert_null(strstr(bulletin, "nan"));
    assert_null(strstr(bulletin, "inf ("));
    free(bulletin);
    free(night);
}

static void without_any_point_there_is_no_bulletin(void **state)
{
    (void)state;
    struct night *night = make_night();
    struct text text = {0};
    char short_text[FACT_SHORT_SIZE];
    night->settings.point_count = 0;
    assert_int_equal(sentence_bulletin(&night->settings, &night->picture, NULL, &text), FW_BAD_INPUT);
    assert_null(text.bytes);
    assert_string_equal(short_of(night, short_text), "");
    sentence_change(&night->settings, &night->picture, &night->decision, &text);
    assert_int_equal(text.length, 0);
    free(night);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(the_bulletin_of_the_demonstration_has_all_seven_sections),
        cmocka_unit_test(what_is_special_tonight_is_said),
        cmocka_unit_test(of_a_limit_that_is_not_passed_there_is_no_word),
        cmocka_unit_test(the_worst_bulletin_still_fits_on_its_page),
        cmocka_unit_test(every_number_of_crossings_fits_and_shows_the_one_it_is_about),
        cmocka_unit_test(crossings_stand_in_order_of_act_by),
        cmocka_unit_test(without_a_decision_the_most_urgent_crossing_is_told),
        cmocka_unit_test(a_picture_before_the_first_forecast_makes_no_nonsense),
        cmocka_unit_test(without_any_point_there_is_no_bulletin),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
