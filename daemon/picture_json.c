/* SPDX-License-Identifier: MIT */
/* The canonical form of a picture. Members stand in one order and numbers in one format; changing either changes the schema number. */
#include "daemon/picture.h"

#include <math.h>
#include <stdarg.h>
#include <stdio.h>
#include <string.h>

#include "daemon/deck.h"
#include "daemon/season.h"

static void add_string(struct text *json, const char *bytes)
{
    text_add_bytes(json, "\"", 1);
    for (; *bytes != '\0'; bytes++) {
        unsigned char byte = (unsigned char)*bytes;
        if (byte == '"' || byte == '\\')
            text_add(json, "\\%c", byte);
        else if (byte < 0x20)
            text_add(json, "\\u%04x", byte);
        else
            text_add_bytes(json, bytes, 1);
    }
    text_add_bytes(json, "\"", 1);
}

static void add_key(struct text *json, const char *key)
{
    char last = json->length > 0 ? json->bytes[json->length - 1] : '{';
    if (last != '{' && last != '[')
        text_add_bytes(json, ",", 1);
    text_add(json, "\"%s\":", key);
}

static void add_text(struct text *json, const char *key, const char *value)
{
    add_key(json, key);
    add_string(json, value);
}

static void add_bool(struct text *json, const char *key, bool value)
{
    add_key(json, key);
    text_add(json, "%s", value ? "true" : "false");
}

static void add_whole(struct text *json, const char *key, int64_t value)
{
    add_key(json, key);
    text_add(json, "%lld", (long long)value);
}

/* null for what is not known */
static void add_number(struct text *json, const char *key, int decimals, double value)
{
    add_key(json, key);
    if (isfinite(value))
        text_add(json, "%.*f", decimals, value == 0.0 ? 0.0 : value);
    else
        text_add(json, "null");
}

/* null for never, and for not yet */
static void add_time(struct text *json, const char *key, int64_t utc_s)
{
    char text[WHEN_TEXT_SIZE];
    add_key(json, key);
    if (utc_s == PASSAGE_NEVER || utc_s == 0)
        text_add(json, "null");
    else
        text_add(json, "\"%s\"", when_rfc3339_utc(utc_s, text));
}

static void add_open(struct text *json, const char *bracket)
{
    char last = json->length > 0 ? json->bytes[json->length - 1] : '[';
    if (last == '}' || last == ']')
        text_add_bytes(json, ",", 1);
    text_add(json, "%s", bracket);
}

static void add_gauge(struct text *json, const struct settings_gauge *known, const struct gauge_picture *gauge)
{
    bool is_stage = known->measures == SETTINGS_STAGE;
    add_open(json, "{");
    add_text(json, "id", known->id);
    add_text(json, "name", known->name);
    add_text(json, "measures", is_stage ? "stage" : "discharge");
    add_time(json, "newest", gauge->newest_utc_s);
    add_number(json, is_stage ? "stage_m" : "value_m3s", 3, gauge->newest_utc_s ? gauge->newest_value : NAN);
    add_number(json, "discharge_m3s", 3, gauge->newest_utc_s ? gauge->newest_discharge_m3s : NAN);
    add_number(json, is_stage ? "rate_m_per_h" : "rate_m3s_per_h", 3, gauge->rate_per_s * 3600.0);
    add_bool(json, "rising", gauge->is_rising);
    add_bool(json, "hand_reading", gauge->is_hand);
    add_bool(json, "unconfirmed", gauge->is_unconfirmed);
    add_bool(json, "beyond_highest_gauging", gauge->is_beyond_gauging);
    add_bool(json, "frozen", gauge->is_frozen);
    add_time(json, "heard", gauge->heard_utc_s);
    add_time(json, "held", gauge->held_utc_s);
    add_number(json, "held_value", 3, gauge->held_utc_s ? gauge->held_value : NAN);
    add_whole(json, "silent_s", gauge->newest_utc_s ? gauge->silent_s : -1);
    add_whole(json, "blind_limit_s", gauge->blind_limit_s);
    add_bool(json, "blind", gauge->is_blind);
    text_add(json, "}");
}

static void add_mark(struct text *json, const struct settings_mark *known, const struct passage *passage)
{
    add_open(json, "{");
    add_text(json, "name", known->name);
    add_number(json, "depth_m", 3, known->depth_m);
    add_number(json, "chance", 4, passage->chance);
    add_time(json, "earliest", passage->earliest_utc_s);
    add_time(json, "likely", passage->likely_utc_s);
    add_time(json, "latest", passage->latest_utc_s);
    add_time(json, "below_again_earliest", passage->below_again_earliest_utc_s);
    add_time(json, "below_again_latest", passage->below_again_latest_utc_s);
    text_add(json, "}");
}

static void add_advice(struct text *json, const struct advice *advice)
{
    add_text(json, "advice", advice_level_name(advice->level));
    add_bool(json, "blind", advice->is_blind);
    add_bool(json, "near_sides_only", advice->near_sides_only);
    add_whole(json, "reasons", advice->reasons);
    add_time(json, "act_by", advice->act_by_utc_s);
    add_time(json, "since", advice->since_utc_s);
    add_time(json, "onset", advice->onset_utc_s);
}

static void add_people(struct text *json, const struct point_picture *point)
{
    add_key(json, "road");
    text_add(json, "{");
    add_text(json, "state", road_state_name(point->road.state));
    add_time(json, "at", point->road.at_utc_s);
    add_text(json, "by", point->road.by);
    text_add(json, "}");
    add_key(json, "water_seen");
    if (point->water.is_known) {
        text_add(json, "{");
        add_bool(json, "wet", point->water.is_wet);
        add_number(json, "depth_cm", 1, point->water.depth_cm);
        add_time(json, "at", point->water.at_utc_s);
        add_text(json, "by", point->water.by);
        text_add(json, "}");
    } else {
        text_add(json, "null");
    }
    add_time(json, "accepted", point->accepted_utc_s);
    add_text(json, "accepted_by", point->accepted_by);
}

static void add_deck_run(struct text *json, const char *key, const struct hazard_water *water)
{
    add_key(json, key);
    text_add(json, "{");
    add_number(json, "depth_m", 3, water->depth_m);
    add_number(json, "speed_m_s", 3, water->speed_m_s);
    add_number(json, "depth_x_speed_m2_s", 3, water->product_m2_s);
    text_add(json, "}");
}

/* Only limits that some run passes: what is not passed says nothing of the road. */
static void add_deck(struct text *json, const struct deck_picture *deck)
{
    text_add(json, "{");
    add_text(json, "note", DECK_CAUTION);
    add_deck_run(json, "low", &deck->low);
    add_deck_run(json, "likely", &deck->likely);
    add_deck_run(json, "high", &deck->high);
    add_time(json, "at", deck->likely_utc_s);
    add_key(json, "limits_passed");
    text_add(json, "[");
    for (size_t whom = 0; whom < HAZARD_WHOM_COUNT; whom++) {
        const struct hazard_limit *limit = hazard_limit_for((enum hazard_whom)whom);
        const struct passage *passage = &deck->over[whom];
        if (!(passage->chance > 0.0))
            continue;
        add_open(json, "{");
        add_text(json, "for", deck_whom_name((enum hazard_whom)whom));
        add_bool(json, "draft", limit->is_draft);
        add_bool(json, "stationary", limit->is_draft);
        add_number(json, "limit", 2, deck_measure_limit(limit, deck->by[whom]));
        add_text(json, "unit", deck_measure_unit(deck->by[whom]));
        add_number(json, "chance", 4, passage->chance);
        add_time(json, "earliest", passage->earliest_utc_s);
        add_time(json, "likely", passage->likely_utc_s);
        add_time(json, "latest", passage->latest_utc_s);
        text_add(json, "}");
    }
    text_add(json, "]}");
}

static void add_point(struct text *json, const struct settings_point *known, const struct point_picture *point)
{
    add_open(json, "{");
    add_text(json, "id", known->id);
    add_text(json, "name", known->name);
    add_bool(json, "has_crew", known->has_crew);
    add_advice(json, &point->advice);
    add_whole(json, "number", point->told_number);
    add_bool(json, "unknown", point->is_unknown);
    add_time(json, "measured_until", point->measured_until_utc_s);
    add_number(json, "unmeasured_share", 4, point->unmeasured_share);
    add_bool(json, "rising", point->is_rising);
    add_bool(json, "trigger", point->trigger_holds);
    add_bool(json, "assumed_trigger", point->assumed_trigger_holds);
    add_time(json, "trigger_since", point->trigger_since_utc_s);
    add_key(json, "level_now_m");
    text_add(json, "{");
    add_number(json, "low", 3, point->level_now.low_m);
    add_number(json, "likely", 3, point->level_now.likely_m);
    add_number(json, "high", 3, point->level_now.high_m);
    text_add(json, "}");
    add_key(json, "peak_m");
    text_add(json, "{");
    add_number(json, "low", 3, point->peak.lowest_m);
    add_number(json, "likely", 3, point->peak.likely_m);
    add_number(json, "high", 3, point->peak.highest_m);
    add_time(json, "at", point->peak.likely_utc_s);
    text_add(json, "}");
    add_key(json, "deck_water");
    if (known->has_deck)
        add_deck(json, &point->deck);
    else
        text_add(json, "null");
    add_bool(json, "peak_beyond_highest_gauging", point->is_peak_beyond_gauging);
    add_bool(json, "peak_above_survey", point->is_peak_above_survey);
    add_number(json, "chance_of_return", 4, point->chance_of_return);
    add_whole(json, "closing_mark", (int64_t)known->closing_mark);
    add_whole(json, "deck_mark", (int64_t)known->deck_mark);
    add_key(json, "marks");
    text_add(json, "[");
    for (size_t mark = 0; mark < known->mark_count; mark++)
        add_mark(json, &known->marks[mark], &point->marks[mark].passage);
    text_add(json, "]");
    add_people(json, point);
    text_add(json, "}");
}

/* From which of the stated dates on the roughness holds; null where none is stated. */
static void add_season(struct text *json, const struct settings *settings, int64_t as_of_utc_s)
{
    int days[SETTINGS_SEASON_STARTS_MAX];
    add_key(json, "roughness_from");
    if (season_starts(settings, SETTINGS_SEASON_STARTS_MAX, days) == 0)
        text_add(json, "null");
    else
        text_add(json, "\"%02d-%02d\"", days[season_index(settings, as_of_utc_s)] / 100,
                 days[season_index(settings, as_of_utc_s)] % 100);
}

enum fw_status picture_write_json(const struct settings *settings, const struct picture *picture,
                                  struct text *json_out)
{
    struct text *json = json_out;
    text_add(json, "{");
    add_text(json, "schema", "forewater.picture.1");
    add_text(json, "district", settings->district_name != NULL ? settings->district_name : "");
    add_time(json, "as_of", picture->as_of_utc_s);
    add_text(json, "settings", settings->digest);
    add_text(json, "previous_link", picture->newest_link);
    add_bool(json, "store_failing", picture->is_store_failing);
    add_number(json, "replaced_share", 4, picture->replaced_share);
    add_season(json, settings, picture->as_of_utc_s);
    add_key(json, "assumed");
    add_string(json, "held, last rise carried forward, recession; uncalibrated");
    add_key(json, "gauges");
    text_add(json, "[");
    for (size_t gauge = 0; gauge < picture->gauge_count; gauge++)
        add_gauge(json, &settings->gauges[gauge], &picture->gauges[gauge]);
    text_add(json, "]");
    add_key(json, "points");
    text_add(json, "[");
    for (size_t point = 0; point < picture->point_count; point++)
        add_point(json, &settings->points[point], &picture->points[point]);
    text_add(json, "]");
    text_add(json, "}");
    return text_status(json);
}
