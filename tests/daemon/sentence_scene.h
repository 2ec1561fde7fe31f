/* SPDX-License-Identifier: MIT */
/* What the tests of messages and bulletins share: the night they speak of, and how their texts are looked at. */
#ifndef FOREWATER_TESTS_SENTENCE_SCENE_H
#define FOREWATER_TESTS_SENTENCE_SCENE_H

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

static inline int64_t at(int hour, int minute)
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

static inline void make_point(struct night *night, size_t index, const char *id, const char *name,
                              const double depths_m[3])
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

static inline void make_settings(struct night *night)
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

static inline void make_picture(struct night *night)
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
static inline void make_decision(struct night *night)
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

static inline struct night *make_night(void)
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

static inline bool has_word(const char *text, const char *word)
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

static inline void expect_no_banned_word(const char *text)
{
    for (size_t i = 0; i < sizeof banned / sizeof banned[0]; i++)
        if (has_word(text, banned[i]))
            fail_msg("'%s' in: %s", banned[i], text);
}

/* The basic alphabet of GSM 03.38 that is also ASCII; what it writes as two characters is not in it. */
static inline void expect_basic_alphabet(const char *text)
{
    static const char basic[] =
        "@$_ !\"#%&'()*+,-./0123456789:;<=>?ABCDEFGHIJKLMNOPQRSTUVWXYZabcdefghijklmnopqrstuvwxyz";
    if (text[strspn(text, basic)] != '\0')
        fail_msg("'%c' is not of the basic alphabet: %s", text[strspn(text, basic)], text);
}

static inline void expect_words(const char *text, const char *words)
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

static inline char *bulletin_of(struct night *night, const struct decision *decision)
{
    struct text text = {0};
    assert_int_equal(sentence_bulletin(&night->settings, &night->picture, decision, &text), FW_OK);
    return text.bytes;
}

/* The bulletin with its lines joined again, to look for sentences whatever line they break on. */
static inline char *joined(const char *bulletin)
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

static inline size_t characters_of_line(const char *line)
{
    size_t count = 0;
    for (; *line != '\0' && *line != '\n'; line++)
        count += ((unsigned char)*line & 0xc0) != 0x80;
    return count;
}

static inline void expect_page(const char *bulletin)
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

struct change { /* what a row of the table below changes in the night before it asks for the text */
    enum advice_level before, after;
    bool was_blind, is_blind, was_near, is_near;
    unsigned reasons;
    int act_by_h, act_by_min; /* hour 0: none */
    int told_h, told_min;
};

static inline void apply(struct night *night, const struct change *change)
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

static const char *const place_names[] = {
    "Tallowick Ford",
    "X",
    "",
    "The Long Causeway over the Lower Marren Marshes between Saint Orlin's Chapel and the Old Customs House Bridge "
    "Road",
    "V\xc3\xa4sterg\xc3\xb6tlands \xc3\x85sele\xc3\xa5n \xc3\xb6vre vadst\xc3\xa4lle {nr} [3] ~ "
    "\xe6\xb5\x85\xe7\x80\xac",
};

#endif
