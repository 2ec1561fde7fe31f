/* SPDX-License-Identifier: MIT */
#include "daemon/tell/sentence.h"

#include <ctype.h>
#include <math.h>
#include <setjmp.h>
#include <stdarg.h>
#include <stdint.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <strings.h>

#include <cmocka.h>

#include "daemon/tell/sentence_catalogue.h"
#include "daemon/tell/sentence_view.h"

/*
 * The night of the demonstration district at 22:18 local, built by hand: one gauge, silent since 21:15; three
 * crossings. Times in comments and texts are local (UTC+1), 2031-02-14.
 */
enum { FORD, CAUSEWAY, BRIDGE, POINT_COUNT, MARK_COUNT = 3, SECOND_GAUGE = 1, GAUGE_MOST = 5, POINT_MOST = 30 };

#define MIDNIGHT_UTC_S INT64_C(1928790000) /* 2031-02-14T00:00:00+01:00, a Friday */

static int64_t at(int hour, int minute)
{
    return MIDNIGHT_UTC_S + hour * 3600 + minute * 60;
}

struct night {
    struct settings settings;
    struct settings_gauge gauges[GAUGE_MOST];
    struct settings_point points[POINT_MOST];
    struct settings_mark marks[POINT_MOST][MARK_COUNT];
    struct settings_channel channels[4];
    struct settings_role roster[1];
    size_t to[4];
    struct network_reach reaches[POINT_MOST];
    struct network_point places[POINT_MOST];
    size_t gauge_nodes[GAUGE_MOST];
    struct picture picture;
    struct gauge_picture gauge_pictures[GAUGE_MOST];
    struct point_picture point_pictures[POINT_MOST];
    struct mark_picture mark_pictures[POINT_MOST][MARK_COUNT];
    struct message outbox[4];
    struct decision decision;
};

static const char *const ford_unseen[] = {"rain on the 9.4 km below the gauge", "drift on the ford"};

static void make_point(struct night *night, size_t index, const char *id, const char *name, const double depths_m[3])
{
    static const char *const names[MARK_COUNT] = {"approach wet", "deck awash", "over limit"};
    for (size_t mark = 0; mark < MARK_COUNT; mark++) {
        night->marks[index][mark] =
            (struct settings_mark){.name = names[mark], .depth_m = depths_m[mark], .is_trafficked = true};
        night->mark_pictures[index][mark].passage = (struct passage){.chance = 0.0,
                                                                     .earliest_utc_s = PASSAGE_NEVER,
                                                                     .likely_utc_s = PASSAGE_NEVER,
                                                                     .latest_utc_s = PASSAGE_NEVER,
                                                                     .below_again_earliest_utc_s = PASSAGE_NEVER,
                                                                     .below_again_latest_utc_s = PASSAGE_NEVER};
    }
    night->points[index] = (struct settings_point){.id = id,
                                                   .name = name,
                                                   .reach = index,
                                                   .mark_count = MARK_COUNT,
                                                   .marks = night->marks[index],
                                                   .closing_mark = 0,
                                                   .deck_mark = 1,
                                                   .has_crew = true,
                                                   .policy = {.act_by_shift_s = 600}};
    night->reaches[index] = (struct network_reach){.id = id, .from_node = index, .to_node = index + 1};
    night->places[index] = (struct network_point){.id = id, .reach_index = index};
    night->point_pictures[index] = (struct point_picture){.advice = advice_start(),
                                                          .marks = night->mark_pictures[index],
                                                          .peak = {1.31, 1.37, 1.42, at(23, 50)},
                                                          .level_now = {0.91, 0.93, 0.97},
                                                          .measured_until_utc_s = at(23, 8),
                                                          .water = {.depth_cm = (double)NAN},
                                                          .newest_utc_s = at(21, 15)};
}

static void make_settings(struct night *night)
{
    night->gauges[0] = (struct settings_gauge){.id = "orlin-scar",
                                               .name = "Orlin Scar",
                                               .measures = SETTINGS_STAGE,
                                               .has_rating = true,
                                               .rating = {.highest_gauged_m = 2.38}};
    for (size_t i = SECOND_GAUGE; i < GAUGE_MOST; i++)
        night->gauges[i] = (struct settings_gauge){
            .id = "upper", .name = "Upper Ildra Weir at the Old Customs House", .measures = SETTINGS_DISCHARGE};
    night->channels[0] = (struct settings_channel){.id = "page-duty"};
    night->channels[1] = (struct settings_channel){.id = "log", .is_journal = true};
    night->channels[2] =
        (struct settings_channel){.id = "a-channel-whose-name-goes-on-and-on-and-on-and-on-for-ever"};
    night->channels[3] = night->channels[2];
    night->to[0] = 0;
    night->to[1] = 1;
    night->to[2] = 2;
    night->to[3] = 3;
    night->roster[0] = (struct settings_role){.role = "duty officer", .to_count = 2, .to = night->to};
    night->settings = (struct settings){.digest = "5f0c1d2ea9b8c7d6",
                                        .district_name = "Vennmark",
                                        .zone = {.is_fixed = true, .offset_s = 3600},
                                        .forecast_every_s = 300,
                                        .horizon_s = 43200,
                                        .roughness_factor_count = 3,
                                        .roughness_factors = {0.8, 1.0, 1.2},
                                        .gauge_count = 1,
                                        .gauges = night->gauges,
                                        .point_count = POINT_COUNT,
                                        .points = night->points,
                                        .channel_count = 4,
                                        .channels = night->channels,
                                        .role_count = 1,
                                        .roster = night->roster};
    night->settings.river = (struct network_river){.node_count = POINT_MOST + 1,
                                                   .gauge_count = 1,
                                                   .gauge_node = night->gauge_nodes,
                                                   .reach_count = POINT_MOST,
                                                   .reaches = night->reaches,
                                                   .point_count = POINT_COUNT,
                                                   .points = night->places};
}

static void make_picture(struct night *night)
{
    night->gauge_pictures[0] = (struct gauge_picture){.newest_utc_s = at(21, 15),
                                                      .newest_value = 1.60,
                                                      .rate_per_s = 0.6 / 3600.0,
                                                      .is_rising = true,
                                                      .silent_s = 45 * 60,
                                                      .is_blind = true,
                                                      .blind_limit_s = 25 * 60};
    for (size_t i = SECOND_GAUGE; i < GAUGE_MOST; i++)
        night->gauge_pictures[i] = night->gauge_pictures[0];
    night->picture = (struct picture){.as_of_utc_s = at(22, 0),
                                      .newest_link = "89abcdef0123456789",
                                      .gauge_count = 1,
                                      .gauges = night->gauge_pictures,
                                      .point_count = POINT_COUNT,
                                      .points = night->point_pictures,
                                      .outbox = night->outbox};
}

/* The ford asks for a crew: the decision that the demonstration turns on. */
static void make_decision(struct night *night)
{
    struct point_picture *ford = &night->point_pictures[FORD];
    night->mark_pictures[FORD][0].passage.chance = 1.0;
    night->mark_pictures[FORD][0].passage.earliest_utc_s = at(23, 28);
    night->mark_pictures[FORD][0].passage.likely_utc_s = at(23, 36);
    night->mark_pictures[FORD][0].passage.latest_utc_s = at(23, 49);
    night->mark_pictures[FORD][1].passage.chance = 7.0 / 9.0;
    night->mark_pictures[FORD][1].passage.earliest_utc_s = at(23, 35);
    night->mark_pictures[FORD][1].passage.likely_utc_s = at(23, 43);
    night->mark_pictures[FORD][1].passage.latest_utc_s = at(23, 58);
    ford->level_now.low_m = 1.33;
    ford->level_now.likely_m = 1.43;
    ford->level_now.high_m = 1.47;
    ford->peak = (struct passage_peak){1.52, 1.95, 2.21, at(24, 53)};
    ford->is_blind = true;
    ford->is_rising = true;
    ford->assumed_trigger_holds = true;
    ford->advice.level = ADVICE_SEND;
    ford->advice.is_blind = true;
    ford->advice.act_by_utc_s = at(22, 18);
    ford->advice.reasons = ADVICE_BY_CHANCE | ADVICE_BY_ASSUMED_TRIGGER;
    night->points[FORD].detour_over = "low-pintle-bridge";
    night->points[FORD].cannot_see = (const char **)(uintptr_t)ford_unseen;
    night->points[FORD].cannot_see_count = 2;
    night->decision =
        (struct decision){.point = FORD, .before = advice_start(), .after = ford->advice, .message_number = 412};
    night->decision.before.is_blind = true;
}

static struct night *make_night(void)
{
    struct night *night = calloc(1, sizeof *night);
    assert_non_null(night);
    for (size_t i = 0; i < POINT_MOST; i++)
        make_point(night, i, "another", "Another Crossing", (const double[]){1.10, 1.20, 1.30});
    make_point(night, FORD, "tallowick-ford", "Tallowick Ford", (const double[]){1.45, 1.55, 1.70});
    make_point(night, CAUSEWAY, "marren-causeway", "Marren Causeway", (const double[]){1.80, 1.95, 2.10});
    make_point(night, BRIDGE, "low-pintle-bridge", "Low Pintle Bridge", (const double[]){2.20, 2.62, 2.80});
    make_settings(night);
    make_picture(night);
    make_decision(night);
    return night;
}

/* --- looking at texts --- */

/*
 * Words that must never be said (whole words, any case): ladders, colours, promises. Common practice and our own
 * list, no published source.
 */
static const char *const banned[] = {
    "safe",
    "safely",
    "all clear",
    "all-clear",
    "certain",
    "certainly",
    "predicted to be passable",
    "passable",
    "warning",
    "watch",
    "advisory",
    "alert",
    "minor",
    "moderate",
    "major",
    "severe",
    "normal",
    "alarm",
    "danger",
    "dangerous",
    "amber",
    "red",
    "orange",
    "yellow",
    "green",
    "code",
    "class",
    "category",
    "be aware",
    "be prepared",
    "take action",
    "ready-set-go",
    "100-year",
    "100 year",
    "flood level",
    "drown",
    "emergency level",
    "guaranteed",
    "no risk",
    "clear to cross",
    "can cross",
    "may cross",
    "open to traffic",
};

static bool has_word(const char *text, const char *word)
{
    size_t length = strlen(word);
    for (const char *place = text; *place != '\0'; place++) {
        bool starts = tolower((unsigned char)*place) == tolower((unsigned char)*word) &&
                      (place == text || !isalpha((unsigned char)place[-1]));
        if (starts && strncasecmp(place, word, length) == 0 && !isalpha((unsigned char)place[length]))
            return true;
    }
    return false;
}

static void expect_no_banned_word(const char *text)
{
    for (size_t i = 0; i < sizeof banned / sizeof banned[0]; i++)
        if (has_word(text, banned[i]))
            fail_msg("'%s' in: %s", banned[i], text);
}

/* The basic alphabet of GSM 03.38 that is also ASCII; what it writes as two characters is not in it. */
static void expect_basic_alphabet(const char *text)
{
    static const char basic[] =
        "@$_ !\"#%&'()*+,-./0123456789:;<=>?ABCDEFGHIJKLMNOPQRSTUVWXYZabcdefghijklmnopqrstuvwxyz";
    if (text[strspn(text, basic)] != '\0')
        fail_msg("'%c' is not of the basic alphabet: %s", text[strspn(text, basic)], text);
}

static void expect_words(const char *text, const char *words)
{
    if (strstr(text, words) == NULL)
        fail_msg("'%s' is missing in: %s", words, text);
}

static const char *short_of(struct night *night, char text[FACT_SHORT_SIZE])
{
    memset(text, 'x', FACT_SHORT_SIZE); /* nothing of what was there before may show */
    sentence_short(&night->settings, &night->picture, &night->decision, text);
    return text;
}

static char *bulletin_of(struct night *night, const struct decision *decision)
{
    struct text text = {0};
    assert_int_equal(sentence_bulletin(&night->settings, &night->picture, decision, &text), FW_OK);
    return text.bytes;
}

/* The bulletin with its lines joined again, to look for sentences whatever line they break on. */
static char *joined(const char *bulletin)
{
    char *text = strdup(bulletin);
    assert_non_null(text);
    char *to = text;
    for (const char *from = bulletin; *from != '\0'; from++) {
        if (*from == '\n' && from[1] == ' ')
            from += strspn(from + 1, " "), *to++ = ' ';
        else
            *to++ = *from;
    }
    *to = '\0';
    return text;
}

static size_t characters_of_line(const char *line)
{
    size_t count = 0;
    for (; *line != '\0' && *line != '\n'; line++)
        count += ((unsigned char)*line & 0xc0) != 0x80;
    return count;
}

static void expect_page(const char *bulletin)
{
    size_t lines = 0;
    for (const char *line = bulletin; *line != '\0'; line = strchr(line, '\n') + 1, lines++) {
        if (characters_of_line(line) > 100)
            fail_msg("a line of %zu characters in:\n%s", characters_of_line(line), bulletin);
        assert_true(line[0] != '\n' && strchr(line, '\n') != NULL);
        assert_true(strchr(line, '\n')[-1] != ' ');
    }
    if (lines >= 30) {
        puts(bulletin);
        fail_msg("%zu lines", lines);
    }
    for (const char *byte = bulletin; *byte != '\0'; byte++)
        assert_true(*byte == '\n' || ((unsigned char)*byte >= ' ' && *byte != 0x7f && *byte != '{' && *byte != '}'));
}

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

struct change { /* what a row of the table below changes in the night before it asks for the text */
    enum advice_level before, after;
    bool was_blind, is_blind, was_near, is_near;
    unsigned reasons;
    int act_by_h, act_by_min; /* hour 0: none */
    int told_h, told_min;
};

static void apply(struct night *night, const struct change *change)
{
    struct decision *decision = &night->decision;
    decision->before.level = change->before;
    decision->after.level = change->after;
    decision->before.is_blind = change->was_blind;
    decision->after.is_blind = change->is_blind;
    decision->before.near_sides_only = change->was_near;
    decision->after.near_sides_only = change->is_near;
    decision->after.reasons = change->reasons;
    decision->after.act_by_utc_s = change->act_by_h ? at(change->act_by_h, change->act_by_min) : PASSAGE_NEVER;
    decision->before.told_act_by_utc_s = change->told_h ? at(change->told_h, change->told_min) : PASSAGE_NEVER;
    night->point_pictures[FORD].advice = decision->after;
    night->point_pictures[FORD].is_blind = change->is_blind;
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

static const char *const place_names[] = {
    "Tallowick Ford",
    "X",
    "",
    "The Long Causeway over the Lower Marren Marshes between Saint Orlin's Chapel and the Old Customs House Bridge "
    "Road",
    "V\xc3\xa4sterg\xc3\xb6tlands \xc3\x85sele\xc3\xa5n \xc3\xb6vre vadst\xc3\xa4lle {nr} [3] ~ "
    "\xe6\xb5\x85\xe7\x80\xac",
};

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
        cmocka_unit_test(the_bulletin_of_the_demonstration_has_all_seven_sections),
        cmocka_unit_test(what_is_special_tonight_is_said),
        cmocka_unit_test(of_a_limit_that_is_not_passed_there_is_no_word),
        cmocka_unit_test(the_worst_bulletin_still_fits_on_its_page),
        cmocka_unit_test(every_number_of_crossings_fits_and_shows_the_one_it_is_about),
        cmocka_unit_test(crossings_stand_in_order_of_act_by),
        cmocka_unit_test(without_a_decision_the_most_urgent_crossing_is_told),
        cmocka_unit_test(a_picture_before_the_first_forecast_makes_no_nonsense),
        cmocka_unit_test(without_any_point_there_is_no_bulletin),
        cmocka_unit_test(a_change_is_one_line),
        cmocka_unit_test(the_catalogue_is_whole_and_has_no_banned_word),
        cmocka_unit_test(the_search_for_banned_words_finds_them),
        cmocka_unit_test(its_words_are_the_engines_words),
        cmocka_unit_test(places_are_filled_and_unknown_ones_stay),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
