/* SPDX-License-Identifier: MIT */
/* The text message, the line of a change, and the catalogue of words. */
#include "tests/daemon/sentence_scene.h"

/* --- the text message --- */

static void the_text_of_the_demonstration_reads_as_it_should(void **state)
{
    (void)state;
    struct night *night = make_night();
    char text[FACT_SHORT_SIZE];
    assert_string_equal(
        short_of(night, text),
        "VENNMARK ROADS: Tallowick Ford. SEND crew. Deck wet 23:35-23:58. ACT BY 22:18. Rests on ASSUMED "
        "rise, gauge silent since 21:15. Say: accept 412. #0412");
    free(night);
}

static void every_kind_of_change_has_its_text(void **state)
{
    (void)state;
    static const struct {
        struct change change;
        const char *text;
    } rows[] = {
        {{ADVICE_QUIET, ADVICE_MUSTER, .act_by_h = 22, .act_by_min = 18},
         "VENNMARK ROADS: Tallowick Ford. MUSTER: call crew together. Deck wet 23:35-23:58. ACT BY 22:18. Rests on "
         "ASSUMED "
         "rise after 23:08. Say: accept 412. #0412"},
        {{ADVICE_MUSTER, ADVICE_SEND, .act_by_h = 22, .act_by_min = 5, .told_h = 22, .told_min = 18},
         "VENNMARK ROADS: Tallowick Ford. SEND crew. Deck wet 23:35-23:58. ACT BY 22:05, was 22:18. Rests on ASSUMED "
         "rise "
         "after 23:08. Say: accept 412. #0412"},
        {{ADVICE_MUSTER, ADVICE_SEND, .act_by_h = 21, .act_by_min = 58},
         "VENNMARK ROADS: Tallowick Ford. SEND crew. Deck wet 23:35-23:58. ACT BY 21:58 PASSED, ACT NOW. Rests on "
         "ASSUMED "
         "rise after 23:08. Say: accept 412. #0412"},
        {{ADVICE_MUSTER, ADVICE_SEND, .reasons = ADVICE_BY_TRIGGER},
         "VENNMARK ROADS: Tallowick Ford. SEND crew, shut both sides. Deck wet 23:35-23:58. ACT NOW. Rests on "
         "ASSUMED rise "
         "after 23:08. Say: accept 412. #0412"},
        {{ADVICE_SEND, ADVICE_SEND, .is_near = true, .act_by_h = 21, .act_by_min = 58},
         "VENNMARK ROADS: Tallowick Ford. SEND near sides only, do not cross. Deck wet 23:35-23:58. ACT BY 21:58 "
         "PASSED, ACT NOW. "
         "Rests on ASSUMED rise after 23:08. #0412"},
        {{ADVICE_SEND, ADVICE_SEND, .was_near = true, .act_by_h = 22, .act_by_min = 18},
         "VENNMARK ROADS: Tallowick Ford. SEND crew, shut both sides. Deck wet 23:35-23:58. ACT BY 22:18. Rests on "
         "ASSUMED "
         "rise after 23:08. Say: accept 412. #0412"},
        {{ADVICE_SEND, ADVICE_SEND, .act_by_h = 22, .act_by_min = 1, .told_h = 22, .told_min = 18},
         "VENNMARK ROADS: Tallowick Ford. UPDATE, still SEND. Deck wet 23:35-23:58. ACT BY 22:01, was 22:18. Rests "
         "on "
         "ASSUMED "
         "rise after 23:08. Say: accept 412. #0412"},
        {{ADVICE_SEND, ADVICE_LATE, .act_by_h = 21, .act_by_min = 40},
         "VENNMARK ROADS: Tallowick Ford. LATE: not into water, block where dry, call control. Deck wet 23:35-23:58. "
         "ACT BY "
         "21:40 "
         "PASSED. ASSUMED after 23:08. #0412"},
        {{ADVICE_QUIET, ADVICE_QUIET, .is_blind = true},
         "VENNMARK ROADS: Tallowick Ford. BLIND and rising, advice QUIET. Get a hand reading. Deck wet 23:35-23:58. "
         "Rests "
         "on ASSUMED rise, gauge silent since 21:15. #0412"},
        {{ADVICE_MUSTER, ADVICE_MUSTER, .was_blind = true, .act_by_h = 22, .act_by_min = 18},
         "VENNMARK ROADS: Tallowick Ford. Gauge back, MUSTER. Deck wet 23:35-23:58. ACT BY 22:18. Rests on ASSUMED "
         "rise after "
         "23:08. Say: accept 412. #0412"},
        {{ADVICE_SEND, ADVICE_MUSTER, .act_by_h = 22, .act_by_min = 18},
         "VENNMARK ROADS: Tallowick Ford. MUSTER (was SEND). Deck wet 23:35-23:58. ACT BY 22:18. Rests on ASSUMED "
         "rise after "
         "23:08. Say: accept 412. #0412"},
        {{ADVICE_MUSTER, ADVICE_QUIET, .act_by_h = 0},
         "VENNMARK ROADS: Tallowick Ford. QUIET (was MUSTER). Deck wet 23:35-23:58. Rests on ASSUMED rise after "
         "23:08. #0412 Aid "
         "only. Road authority decides."},
        {{ADVICE_SEND, ADVICE_KEEP_SHUT, .is_blind = true, .reasons = ADVICE_HELD_NO_DATA | ADVICE_HELD_LEVEL},
         "VENNMARK ROADS: Tallowick Ford. KEEP SHUT, do not hand back. Computed below deck, but no reading since "
         "21:15 and "
         "river was rising. Say: accept 412. #0412"},
        {{ADVICE_LATE, ADVICE_KEEP_SHUT, .reasons = ADVICE_HELD_RETURN | ADVICE_HELD_LEVEL},
         "VENNMARK ROADS: Tallowick Ford. KEEP SHUT, do not hand back. Computed below deck, but water may come back. "
         "Next "
         "look 22:05. Say: accept 412. #0412"},
        {{ADVICE_LATE, ADVICE_KEEP_SHUT, .reasons = ADVICE_HELD_LEVEL},
         "VENNMARK ROADS: Tallowick Ford. KEEP SHUT, do not hand back. Computed below deck, but not for long enough. "
         "Next "
         "look 22:05. Say: accept 412. #0412"},
        {{ADVICE_KEEP_SHUT, ADVICE_WALK_OVER, .act_by_h = 0},
         "VENNMARK ROADS: Tallowick Ford. WALK-OVER MAY BE SENT. Road stays shut until people hand it back. Newest "
         "reading "
         "21:15. Next look 22:05. Say: accept 412. #0412"},
    };
    for (size_t row = 0; row < sizeof rows / sizeof rows[0]; row++) {
        struct night *night = make_night();
        char text[FACT_SHORT_SIZE];
        apply(night, &rows[row].change);
        assert_string_equal(short_of(night, text), rows[row].text);
        free(night);
    }
}

static void what_it_rests_on_is_said_in_the_right_word(void **state)
{
    (void)state;
    struct night *night = make_night();
    char text[FACT_SHORT_SIZE];
    struct point_picture *ford = &night->point_pictures[FORD];
    apply(night, &(struct change){ADVICE_QUIET, ADVICE_SEND, .act_by_h = 22, .act_by_min = 18});

    ford->measured_until_utc_s = at(23, 27); /* a minute before the earliest arrival */
    expect_words(short_of(night, text), "Rests on ASSUMED rise after 23:27.");
    ford->is_rising = false;
    expect_words(short_of(night, text), "Rests on ASSUMED water after 23:27.");
    ford->measured_until_utc_s = at(23, 28);
    expect_words(short_of(night, text), "Rests on MEASURED water.");
    assert_null(strstr(text, "ASSUMED"));
    ford->unmeasured_share = 0.138;
    expect_words(short_of(night, text), "Rests on MEASURED water, 14 % ungauged.");
    night->gauge_pictures[0].is_unconfirmed = true;
    expect_words(short_of(night, text), "Rests on UNCONFIRMED reading 21:15.");
    night->decision.after.is_blind = true;
    expect_words(short_of(night, text), "Rests on ASSUMED water, gauge silent since 21:15.");
    ford->newest_utc_s = 0;
    expect_words(short_of(night, text), "Rests on ASSUMED water, no reading yet.");
    ford->is_unknown = true;
    expect_words(short_of(night, text), "NO FORECAST.");
    assert_null(strstr(text, "eck")); /* nothing is said of the deck */
    ford->is_unknown = false;
    ford->water = (struct water_fact){.is_known = true, .is_wet = true, .at_utc_s = at(21, 52), .by = "crew lead"};
    night->decision.after.reasons = ADVICE_BY_WATER_SEEN;
    night->decision.after.level = ADVICE_LATE;
    expect_words(short_of(night, text), "Water SEEN 21:52");
    night->decision.after.level = ADVICE_SEND;
    expect_words(short_of(night, text), "Water SEEN 21:52 by crew lead.");
    free(night);
}

static void hand_readings_triggers_and_gauging_limits_are_said_while_there_is_room(void **state)
{
    (void)state;
    struct night *night = make_night();
    char text[FACT_SHORT_SIZE];
    apply(night, &(struct change){ADVICE_QUIET, ADVICE_SEND, .reasons = ADVICE_BY_TRIGGER});
    night->points[FORD].name = "Ford";
    night->gauge_pictures[0].is_hand = true;
    expect_words(short_of(night, text), "Hand reading 21:15.");
    night->gauge_pictures[0].is_hand = false;
    night->point_pictures[FORD].measured_until_utc_s = at(23, 28);
    night->decision.message_number = 0;
    expect_words(short_of(night, text), "Signed trigger.");
    night->decision.after.reasons = 0;
    night->point_pictures[FORD].is_peak_beyond_gauging = true;
    expect_words(short_of(night, text), "Beyond highest gauging.");
    night->point_pictures[FORD].is_peak_beyond_gauging = false;
    night->point_pictures[FORD].is_peak_above_survey = true;
    expect_words(short_of(night, text), "Above the survey.");
    free(night);
}

static void the_caution_comes_in_when_there_is_room(void **state)
{
    (void)state;
    struct night *night = make_night();
    char text[FACT_SHORT_SIZE];
    apply(night, &(struct change){ADVICE_MUSTER, ADVICE_SEND, .act_by_h = 22, .act_by_min = 18});
    night->settings.district_name = "V";
    night->points[FORD].name = "Ford";
    night->mark_pictures[FORD][1].passage.latest_utc_s = at(21, 0);
    night->mark_pictures[FORD][1].passage.earliest_utc_s = at(20, 0);
    short_of(night, text);
    assert_string_equal(text + strlen(text) - strlen(SENTENCE_CAUTION_SHORT), SENTENCE_CAUTION_SHORT);
    expect_words(text, "Deck wet since 20:00.");
    free(night);
}

static void deck_times_say_when_water_may_not_come(void **state)
{
    (void)state;
    struct night *night = make_night();
    char text[FACT_SHORT_SIZE];
    night->mark_pictures[FORD][1].passage.latest_utc_s = PASSAGE_NEVER;
    expect_words(short_of(night, text), "Deck wet from 23:35, or not at all.");
    night->mark_pictures[FORD][1].passage.earliest_utc_s = PASSAGE_NEVER;
    expect_words(short_of(night, text), "Deck not reached in 9 runs.");
    night->points[FORD].mark_count = 0;
    assert_null(strstr(short_of(night, text), "Deck"));
    free(night);
}

static void a_level_over_the_deck_or_unknown_is_not_said_to_be_below(void **state)
{
    (void)state;
    static const double levels_m[] = {1.55, 1.83, (double)NAN};
    for (size_t i = 0; i < 3; i++) {
        struct night *night = make_night();
        char text[FACT_SHORT_SIZE];
        apply(night, &(struct change){ADVICE_LATE, ADVICE_KEEP_SHUT, .reasons = ADVICE_HELD_LEVEL});
        night->point_pictures[FORD].level_now.high_m = levels_m[i]; /* the deck is at 1.55 */
        expect_words(short_of(night, text), "Computed at or over deck.");
        night->decision.after.is_blind = true;
        expect_words(short_of(night, text), "Computed at or over deck, no reading since 21:15.");
        free(night);
    }
}

static void water_seen_contradicts_a_computed_level(void **state)
{
    (void)state;
    struct night *night = make_night();
    char text[FACT_SHORT_SIZE];
    apply(night, &(struct change){ADVICE_LATE, ADVICE_KEEP_SHUT, .reasons = ADVICE_BY_WATER_SEEN});
    night->point_pictures[FORD].water = (struct water_fact){.is_known = true, .is_wet = true, .at_utc_s = at(21, 52)};
    expect_words(short_of(night, text), "Computed below deck, but water seen 21:52.");
    free(night);
}

static void without_a_number_nothing_asks_for_an_answer(void **state)
{
    (void)state;
    struct night *night = make_night();
    char text[FACT_SHORT_SIZE];
    night->decision.message_number = 0;
    short_of(night, text);
    assert_null(strchr(text, '#'));
    assert_null(strstr(text, "Say:"));
    free(night);
}

static void names_are_written_in_the_basic_alphabet(void **state)
{
    (void)state;
    static const struct {
        const char *name, *plain;
    } rows[] = {{"V\xc3\xa4ttern Vad", "Vaettern Vad"},
                {"\xc3\x85s \xc3\x98re", "Aas Oere"},
                {"Stra\xc3\x9f"
                 "e",
                 "Strasse"},
                {"\xc5\x81\xc4\x85ka \xc5\x9a\xc5\xbc", "Laka Sz"},
                {"Ford [upper] {2} ~3 | a\\b ^`", "Ford (upper) (2) -3 / a/b ''"},
                {"Weir \xe2\x80\x93 O\xe2\x80\x99"
                 "Dea",
                 "Weir - O'Dea"},
                {"\xe6\xb5\x85\xe7\x80\xac", "??"},
                {"cut \xe2\x86", "cut ??"},
                {"\x1b[2J", "?(2J"}};
    for (size_t row = 0; row < sizeof rows / sizeof rows[0]; row++) {
        char plain[80];
        sentence_plain_name(rows[row].name, plain, sizeof plain);
        assert_string_equal(plain, rows[row].plain);
    }
}

/* --- everything together --- */

static const int64_t act_bys_utc_s[] = {MIDNIGHT_UTC_S + 22 * 3600 + 1080,
                                        MIDNIGHT_UTC_S + 21 * 3600,
                                        MIDNIGHT_UTC_S + 80 * 3600,
                                        MIDNIGHT_UTC_S - INT64_C(20000000),
                                        PASSAGE_NEVER,
                                        0,
                                        INT64_MAX - 1};

struct seen { /* what the sweep met: it must not pass by looking at too little */
    size_t texts, with_caution, with_hint, with_deck, cut;
};

/* What no text may lack, whatever had to give way. */
static void expect_essentials(const struct night *night, const char *text, struct seen *seen)
{
    const struct advice *after = &night->decision.after;
    size_t length = strlen(text);
    assert_true(length > 0 && length <= 160);
    expect_basic_alphabet(text);
    expect_words(text, "ROADS: ");
    expect_words(text, "#");
    static const char *const acts[] = {"QUIET",          "MUSTER",    "SEND",
                                       "not into water", "KEEP SHUT", "WALK-OVER MAY BE SENT"};
    if (!(after->level == ADVICE_LATE && strstr(text, "do not send into water") != NULL))
        expect_words(text, acts[after->level]);
    if (after->level == ADVICE_LATE)
        expect_words(text, "control");
    if (after->near_sides_only && after->level == ADVICE_SEND)
        expect_words(text, "near sides only");
    bool asks = after->level == ADVICE_MUSTER || after->level == ADVICE_SEND || after->level == ADVICE_LATE;
    if (asks && after->act_by_utc_s != PASSAGE_NEVER)
        expect_words(text, "ACT BY ");
    else if (after->level == ADVICE_SEND)
        expect_words(text, "ACT NOW");
    if (after->level <= ADVICE_LATE && strstr(text, "ASSUMED") == NULL && strstr(text, "MEASURED") == NULL &&
        strstr(text, "UNCONFIRMED") == NULL && strstr(text, "SEEN") == NULL)
        fail_msg("what does it rest on? %s", text);
    if (after->level <= ADVICE_LATE && after->is_blind && !(after->reasons & ADVICE_BY_WATER_SEEN))
        expect_words(text, "silent since");
    seen->texts++;
    seen->with_caution += strstr(text, SENTENCE_CAUTION_SHORT) != NULL;
    seen->with_hint += strstr(text, "Say: accept") != NULL;
    seen->with_deck += strstr(text, "Deck wet") != NULL;
}

/* Every name with every time; how long the gauge has been silent goes round with them. */
static void sweep_names_and_times(struct night *night, struct seen *seen)
{
    size_t names = sizeof place_names / sizeof place_names[0];
    size_t times = sizeof act_bys_utc_s / sizeof act_bys_utc_s[0];
    for (size_t i = 0; i < names * times; i++) {
        char text[FACT_SHORT_SIZE];
        int silent_days = 4 * (int)(seen->texts % 3);
        night->points[FORD].name = place_names[i % names];
        night->decision.after.act_by_utc_s = act_bys_utc_s[i / names];
        night->point_pictures[FORD].newest_utc_s = at(21, 15) - silent_days * 86400;
        night->decision.message_number = silent_days == 4 ? 99999999 : 412;
        expect_essentials(night, short_of(night, text), seen);
        if (i % names == 0) /* the names of places are people's own words */
            expect_no_banned_word(text);
        seen->cut += i % names == 3 && strstr(text, place_names[3]) == NULL;
    }
}

static void no_text_is_too_long_or_lacks_its_essentials(void **state)
{
    (void)state;
    static const unsigned reasons[] = {0, ADVICE_BY_ASSUMED_TRIGGER, ADVICE_BY_WATER_SEEN, ADVICE_HELD_NO_DATA,
                                       ADVICE_HELD_RETURN | ADVICE_HELD_LEVEL};
    struct seen seen = {0};
    struct night *night = make_night();
    night->point_pictures[FORD].water = (struct water_fact){
        .is_known = true, .is_wet = true, .at_utc_s = at(20, 2), .by = "roads foreman of the lower district"};
    night->point_pictures[FORD].unmeasured_share = 0.42;
    for (int before = 0; before < SENTENCE_LEVEL_COUNT; before++)
        for (int after = 0; after < SENTENCE_LEVEL_COUNT; after++)
            for (int bits = 0; bits < 16; bits++)
                for (size_t reason = 0; reason < sizeof reasons / sizeof reasons[0]; reason++) {
                    apply(night,
                          &(struct change){(enum advice_level)before, (enum advice_level)after, bits & 1, bits & 2,
                                           bits & 4, bits & 4, reasons[reason], .told_h = 22, .told_min = 30});
                    night->settings.district_name =
                        bits & 8 ? "Upper Ildra and Lower Marren Joint District" : "Vennmark";
                    night->point_pictures[FORD].is_rising = bits & 8;
                    night->gauge_pictures[0].is_unconfirmed = bits & 4;
                    night->gauge_pictures[0].is_hand = bits & 1;
                    sweep_names_and_times(night, &seen);
                }
    free(night);
    assert_int_equal(seen.texts, 6 * 6 * 16 * 5 * 5 * 7);
    assert_true(seen.with_caution > 0 && seen.with_hint > 0 && seen.with_deck > 0 && seen.cut > 0);
}

/* An IANA zone on the night that the hour repeats: times after the change bear their own offset, and still fit. */
static void times_after_a_change_of_offset_bear_their_own(void **state)
{
    (void)state;
    struct night *night = make_night();
    char text[FACT_SHORT_SIZE];
    struct fw_error error = {0};
    assert_int_equal(when_zone_parse("Europe/Oslo", &night->settings.zone, &error), FW_OK);
    int64_t change_utc_s = INT64_C(1919293200); /* 2030-10-27T01:00:00Z, 03:00 summer time becomes 02:00 */
    assert_int_equal(when_offset_s(&night->settings.zone, change_utc_s - 1), 7200);
    assert_int_equal(when_offset_s(&night->settings.zone, change_utc_s), 3600);
    night->picture.as_of_utc_s = change_utc_s - 3000;
    apply(night, &(struct change){ADVICE_QUIET, ADVICE_SEND, .is_blind = true});
    night->decision.after.act_by_utc_s = change_utc_s - 600;
    night->point_pictures[FORD].newest_utc_s = change_utc_s - 5400;
    night->mark_pictures[FORD][1].passage.earliest_utc_s = change_utc_s + 1800;
    night->mark_pictures[FORD][1].passage.latest_utc_s = change_utc_s + 7200;
    short_of(night, text);
    expect_words(text, "Deck wet 02:30+01-04:00+01.");
    expect_words(text, "ACT BY 02:50.");
    expect_words(text, "silent since 01:30.");
    char *bulletin = bulletin_of(night, &night->decision);
    expect_words(bulletin, "2030-10-27 02:10. All times local, UTC+02:00.");
    expect_page(bulletin);
    free(bulletin);
    free(night);
    assert_int_equal(unsetenv("TZ"), 0);
}

static void moments_far_off_bear_their_day(void **state)
{
    (void)state;
    struct night *night = make_night();
    struct sentence_view view;
    assert_true(sentence_view_open(&night->settings, &night->picture, &night->decision, &view));
    static const struct {
        int64_t off_s;
        const char *text;
    } rows[] = {{0, "22:00"},
                {20 * 3600, "18:00"},
                {20 * 3600 + 1, "Sat 18:00"},
                {-22 * 3600, "00:00"},
                {-22 * 3600 - 60, "Thu 23:59"},
                {6 * 86400, "Thu 22:00"},
                {6 * 86400 + 1, "2031-02-20"},
                {-7 * 86400, "2031-02-07"}};
    for (size_t row = 0; row < sizeof rows / sizeof rows[0]; row++) {
        char text[SENTENCE_MOMENT_SIZE];
        const char *expected = rows[row].off_s == -22 * 3600 ? "Fri 00:00" : rows[row].text;
        assert_string_equal(sentence_moment(&view, at(22, 0) + rows[row].off_s, text), expected);
    }
    char text[SENTENCE_MOMENT_SIZE];
    assert_string_equal(sentence_moment(&view, PASSAGE_NEVER, text), "-");
    assert_string_equal(sentence_moment(&view, INT64_MIN, text), "-");
    sentence_view_clear(&view);
    free(night);
}

/* --- one line per change --- */

static void a_change_is_one_line(void **state)
{
    (void)state;
    static const struct {
        struct change change;
        const char *line;
    } rows[] = {
        {{ADVICE_QUIET, ADVICE_SEND, .was_blind = true, .is_blind = true, .act_by_h = 22, .act_by_min = 18},
         "22:00 Tallowick Ford: QUIET -> SEND, BLIND, act by 22:18, deck wet 23:35 / 23:43 / 23:58. Rests on ASSUMED "
         "rise, gauge "
         "silent since 21:15. #0412"},
        {{ADVICE_SEND, ADVICE_SEND, .act_by_h = 22, .act_by_min = 1, .told_h = 22, .told_min = 18},
         "22:00 Tallowick Ford: still SEND, act by 22:01 (was 22:18), deck wet 23:35 / 23:43 / 23:58. Rests on "
         "ASSUMED rise after "
         "23:08. #0412"},
        {{ADVICE_MUSTER, ADVICE_MUSTER, .is_blind = true},
         "22:00 Tallowick Ford: still MUSTER, now BLIND, no act-by, deck wet 23:35 / 23:43 / 23:58. Rests on ASSUMED "
         "rise, gauge "
         "silent since 21:15. #0412"},
        {{ADVICE_QUIET, ADVICE_QUIET, .was_blind = true},
         "22:00 Tallowick Ford: still QUIET, gauge back, deck wet 23:35 / 23:43 / 23:58. Rests on ASSUMED rise after "
         "23:08. "
         "#0412"},
        {{ADVICE_SEND, ADVICE_LATE, .is_near = true, .act_by_h = 21, .act_by_min = 40},
         "22:00 Tallowick Ford: SEND -> LATE, near sides only, act by 21:40, deck wet 23:35 / 23:43 / 23:58. Rests "
         "on ASSUMED "
         "rise after 23:08. #0412"},
        {{ADVICE_LATE, ADVICE_KEEP_SHUT, .reasons = ADVICE_HELD_RETURN},
         "22:00 Tallowick Ford: LATE -> KEEP SHUT, deck wet 23:35 / 23:43 / 23:58. Computed below deck, but water "
         "may come back. "
         "#0412"},
    };
    for (size_t row = 0; row < sizeof rows / sizeof rows[0]; row++) {
        struct night *night = make_night();
        struct text line = {0};
        apply(night, &rows[row].change);
        sentence_change(&night->settings, &night->picture, &night->decision, &line);
        assert_string_equal(text_string(&line), rows[row].line);
        expect_no_banned_word(text_string(&line));
        text_clear(&line);
        free(night);
    }
}

/* --- the catalogue --- */

static void the_catalogue_is_whole_and_has_no_banned_word(void **state)
{
    (void)state;
    const struct sentence_catalogue *words = sentence_catalogue_english();
    for (size_t i = 0; i < SENTENCE_ID_COUNT; i++) {
        if (words->text[i] == NULL)
            fail_msg("sentence %zu is missing", i);
        expect_no_banned_word(words->text[i]);
        if (i <= SHORT_NUMBER) {
            char plain[300];
            size_t length = 0;
            bool is_inside = false;
            for (const char *byte = words->text[i]; *byte != '\0'; byte++) {
                is_inside = *byte == '{' || (is_inside && byte[-1] != '}');
                if (!is_inside)
                    plain[length++] = *byte;
            }
            plain[length] = '\0';
            expect_basic_alphabet(plain);
        }
    }
    for (size_t i = 0; i < SENTENCE_REASON_COUNT; i++) {
        assert_non_null(words->reason[i]);
        expect_no_banned_word(words->reason[i]);
    }
    expect_no_banned_word(SENTENCE_CAUTION_SHORT);
}

/* The test above would pass on an empty list or a search that finds nothing. */
static void the_search_for_banned_words_finds_them(void **state)
{
    (void)state;
    assert_true(has_word("the road is SAFE.", "safe"));
    assert_true(has_word("a Red row", "red"));
    assert_true(has_word("flood-watch", "watch"));
    assert_false(has_word("measured", "red"));
    assert_false(has_word("uncertain", "certain"));
    assert_false(has_word("unsafe", "safe"));
    assert_true(sizeof banned / sizeof banned[0] >= 40);
}

static void its_words_are_the_engines_words(void **state)
{
    (void)state;
    const struct sentence_catalogue *words = sentence_catalogue_english();
    for (int i = 0; i < SENTENCE_LEVEL_COUNT; i++) {
        const char *name = advice_level_name((enum advice_level)i);
        assert_int_equal(strncmp(words->level_word[i], name, strlen(name)), 0);
    }
    for (int i = 0; i < SENTENCE_ROAD_COUNT; i++)
        assert_string_equal(words->road_word[i], road_state_name((enum road_state)i));
    assert_int_equal(ADVICE_WALK_OVER, SENTENCE_LEVEL_COUNT - 1);
    assert_int_equal(ROAD_HANDED_BACK, SENTENCE_ROAD_COUNT - 1);
    assert_int_equal(ADVICE_HELD_RETURN, 1 << (SENTENCE_REASON_COUNT - 1));
}

static void places_are_filled_and_unknown_ones_stay(void **state)
{
    (void)state;
    const struct sentence_field fields[] = {{"a", "1"}, {"bb", ""}, {0}};
    static const struct {
        const char *pattern, *filled;
    } rows[] = {{"", ""}, {"{a}", "1"}, {"x{a}{bb}y{a}", "x1y1"}, {"{b} {a}", "{b} 1"}, {"{a", "{a"}, {"}{", "}{"}};
    for (size_t row = 0; row < sizeof rows / sizeof rows[0]; row++) {
        struct text out = {0};
        sentence_fill(&out, rows[row].pattern, fields);
        assert_string_equal(text_string(&out), rows[row].filled);
        text_clear(&out);
    }
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(the_text_of_the_demonstration_reads_as_it_should),
        cmocka_unit_test(every_kind_of_change_has_its_text),
        cmocka_unit_test(what_it_rests_on_is_said_in_the_right_word),
        cmocka_unit_test(hand_readings_triggers_and_gauging_limits_are_said_while_there_is_room),
        cmocka_unit_test(the_caution_comes_in_when_there_is_room),
        cmocka_unit_test(deck_times_say_when_water_may_not_come),
        cmocka_unit_test(a_level_over_the_deck_or_unknown_is_not_said_to_be_below),
        cmocka_unit_test(water_seen_contradicts_a_computed_level),
        cmocka_unit_test(without_a_number_nothing_asks_for_an_answer),
        cmocka_unit_test(names_are_written_in_the_basic_alphabet),
        cmocka_unit_test(no_text_is_too_long_or_lacks_its_essentials),
        cmocka_unit_test(times_after_a_change_of_offset_bear_their_own),
        cmocka_unit_test(moments_far_off_bear_their_day),
        cmocka_unit_test(a_change_is_one_line),
        cmocka_unit_test(the_catalogue_is_whole_and_has_no_banned_word),
        cmocka_unit_test(the_search_for_banned_words_finds_them),
        cmocka_unit_test(its_words_are_the_engines_words),
        cmocka_unit_test(places_are_filled_and_unknown_ones_stay),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
