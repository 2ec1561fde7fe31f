/* SPDX-License-Identifier: MIT */
/* Gauges: rating, feeds, limits of belief. */
#include "daemon/settings/settings_work.h"

#include <math.h>
#include <string.h>

static const double MINUTE_S = 60;
static const double HOUR_S = 3600;

/* The keys that have one name for each measured quantity. */
struct quantity_keys {
    const char *rising, *lowest, *highest, *fastest_rise, *fastest_fall, *moving, *resolution;
};

static const struct quantity_keys quantity_keys[] = {
    [SETTINGS_STAGE] = {"gauges[].rising_m_h", "gauges[].quality.lowest_m", "gauges[].quality.highest_m",
                        "gauges[].quality.fastest_rise_m_h", "gauges[].quality.fastest_fall_m_h",
                        "gauges[].quality.moving_m_h", "gauges[].quality.resolution_m"},
    [SETTINGS_DISCHARGE] = {"gauges[].rising_m3s_h", "gauges[].quality.lowest_m3s", "gauges[].quality.highest_m3s",
                            "gauges[].quality.fastest_rise_m3s_h", "gauges[].quality.fastest_fall_m3s_h",
                            "gauges[].quality.moving_m3s_h", "gauges[].quality.resolution_m3s"},
};

static const char *because_of(enum settings_measure measures)
{
    return measures == SETTINGS_STAGE ? "the gauge measures stage" : "the gauge measures discharge";
}

static double number_or(const struct json_value *object, const char *key_path, double otherwise)
{
    double number = settings_work_number(object, key_path);
    return isnan(number) ? otherwise : number;
}

/* --- rating --- */

static void fill_segments(struct settings_work *work, struct rating *rating, const struct json_value *segments)
{
    struct json_value *object;
    for (size_t i = 0; (object = settings_work_next(segments, &i)) != NULL;) {
        struct rating_segment *segment = &rating->segments[rating->segment_count++];
        segment->to_stage_m = number_or(object, "gauges[].rating.segments[].to_m", INFINITY);
        segment->coefficient = settings_work_number(object, "gauges[].rating.segments[].c");
        segment->zero_flow_stage_m = settings_work_number(object, "gauges[].rating.segments[].h0_m");
        segment->exponent = settings_work_number(object, "gauges[].rating.segments[].b");
        if (rating->segment_count == 1)
            settings_work_need(work, object, "gauges[].rating.segments[].c", "it is the first segment");
        else
            settings_work_refuse(work, object, "gauges[].rating.segments[].c",
                                 "the coefficient follows from the segment before");
    }
}

static void fill_table(struct rating *rating, const struct json_value *table)
{
    const struct json_value *row;
    for (size_t i = 0; (row = settings_work_next(table, &i)) != NULL;) {
        rating->table_stage_m[rating->table_count] = row->children[0].number;
        rating->table_discharge_m3s[rating->table_count++] = row->children[1].number;
    }
}

static void report_rating(struct settings_work *work, struct json_value *object, const char *fault, size_t index)
{
    static const struct settings_work_name names[] = {
        {"coefficient", "gauges[].rating.segments[].c"},
        {"zero_flow_stage_m", "gauges[].rating.segments[].h0_m"},
        {"exponent", "gauges[].rating.segments[].b"},
        {"to_stage_m", "gauges[].rating.segments[].to_m"},
        {"highest_gauged_m", "gauges[].rating.highest_gauged_m"},
        {"spread", "gauges[].rating.spread"},
    };
    struct json_value *segments = settings_work_member(object, "gauges[].rating.segments");
    struct json_value *table = settings_work_member(object, "gauges[].rating.table");
    bool is_of_whole = strncmp(fault, "highest_gauged_m", 16) == 0 || strncmp(fault, "spread", 6) == 0;
    const char *sentence = strstr(fault, ": ") != NULL ? strstr(fault, ": ") + 2 : fault;
    if (table != NULL && strncmp(fault, "table_", 6) == 0 && index < table->child_count)
        json_tree_fault(work->report, &table->children[index].children[strncmp(fault, "table_stage", 11) != 0],
                        "cannot be used: %s", sentence);
    else if (!is_of_whole && segments != NULL && index < segments->child_count)
        settings_work_engine_fault(work, &segments->children[index], fault, sizeof names / sizeof names[0], names);
    else
        settings_work_engine_fault(work, object, fault, sizeof names / sizeof names[0], names);
}

static void build_rating(struct settings_work *work, struct settings_gauge *gauge, struct json_value *object)
{
    static const char one_of_both[] = "'segments' and 'table' are both there or both missing: expected one of them";
    const struct json_value *segments = settings_work_member(object, "gauges[].rating.segments");
    const struct json_value *table = settings_work_member(object, "gauges[].rating.table");
    if (settings_work_has(object, "gauges[].rating.segments") == settings_work_has(object, "gauges[].rating.table")) {
        settings_report_add(work->report, object->line, "%s: %s", object->path, one_of_both);
        return;
    }
    if (!settings_work_is_whole(object))
        return;
    struct rating *rating = &gauge->rating;
    fill_segments(work, rating, segments);
    fill_table(rating, table);
    rating->highest_gauged_m = number_or(object, "gauges[].rating.highest_gauged_m", INFINITY);
    rating->spread = settings_work_number(object, "gauges[].rating.spread");
    const char *fault = "";
    size_t index = 0;
    if (!settings_work_is_whole(object) || (segments != NULL && isnan(rating->segments[0].coefficient)))
        return; /* reported above */
    gauge->has_rating = rating_complete(rating, &fault, &index) == FW_OK;
    if (!gauge->has_rating)
        report_rating(work, object, fault, index);
}

/* --- feeds --- */

static void check_unit(struct settings_work *work, const struct settings_gauge *gauge, struct settings_feed *feed,
                       const struct json_value *object)
{
    struct json_value *unit = settings_work_member(object, "gauges[].feeds[].unit");
    feed->unit = unit != NULL ? unit->string : gauge->measures == SETTINGS_STAGE ? "m" : "m3/s";
    bool is_flow = strchr(feed->unit, '/') != NULL;
    if (is_flow != (gauge->measures == SETTINGS_DISCHARGE))
        json_tree_fault(work->report, unit, "is not a unit of what the gauge measures: expected %s",
                        gauge->measures == SETTINGS_STAGE ? "\"m\", \"cm\" or \"mm\"" : "\"m3/s\" or \"l/s\"");
}

/* The C library knows one named zone at a time. */
static void build_feed_zone(struct settings_work *work, struct settings_feed *feed, const struct json_value *object)
{
    struct json_value *offset = settings_work_member(object, "gauges[].feeds[].offset");
    feed->has_zone = offset != NULL && when_zone_parse(offset->string, &feed->zone, NULL) == FW_OK;
    if (feed->has_zone && !feed->zone.is_fixed && strcmp(feed->zone.name, work->settings->zone.name) != 0)
        json_tree_fault(work->report, offset,
                        "is not the district's zone: expected that one, or a fixed offset as \"+01:00\"");
}

static void check_pointers(struct settings_work *work, const struct json_value *object)
{
    static const char *const key_paths[] = {"gauges[].feeds[].time", "gauges[].feeds[].value"};
    for (size_t i = 0; i < sizeof key_paths / sizeof key_paths[0]; i++) {
        struct json_value *pointer = settings_work_member(object, key_paths[i]);
        if (pointer != NULL && pointer->string[0] != '/')
            json_tree_fault(work->report, pointer, "is not a JSON Pointer: expected \"/\" and a name, as \"/t\"");
    }
}

static bool build_feed(struct settings_work *work, const struct settings_gauge *gauge, struct settings_feed *feed,
                       struct json_value *object)
{
    const struct json_value *kind = settings_work_member(object, "gauges[].feeds[].kind");
    bool is_http = kind != NULL && strcmp(kind->string, "http") == 0;
    feed->kind = is_http ? SETTINGS_HTTP : SETTINGS_FOLDER;
    feed->time_column = settings_work_string(object, "gauges[].feeds[].time");
    feed->value_column = settings_work_string(object, "gauges[].feeds[].value");
    check_unit(work, gauge, feed, object);
    build_feed_zone(work, feed, object);
    if (kind == NULL)
        return true;
    if (is_http) {
        settings_work_need(work, object, "gauges[].feeds[].url", "the feed is of kind http");
        settings_work_refuse(work, object, "gauges[].feeds[].path", "the feed is of kind http");
        settings_work_refuse(work, object, "gauges[].feeds[].append", "the feed is of kind http");
        check_pointers(work, object);
        feed->url = settings_work_string(object, "gauges[].feeds[].url");
        const char *readings = settings_work_string(object, "gauges[].feeds[].readings");
        feed->readings_pointer = readings != NULL ? readings : "";
        feed->every_s = settings_work_seconds(object, "gauges[].feeds[].every_min", MINUTE_S);
        return true;
    }
    settings_work_need(work, object, "gauges[].feeds[].path", "the feed is of kind folder");
    settings_work_refuse(work, object, "gauges[].feeds[].url", "the feed is of kind folder");
    settings_work_refuse(work, object, "gauges[].feeds[].readings", "the feed is of kind folder");
    settings_work_refuse(work, object, "gauges[].feeds[].every_min", "a folder is watched");
    const char *path = settings_work_string(object, "gauges[].feeds[].path");
    feed->path = path != NULL ? settings_work_path(work, path) : NULL;
    feed->append_file = settings_work_string(object, "gauges[].feeds[].append");
    return path == NULL || feed->path != NULL;
}

static bool build_feeds(struct settings_work *work, struct settings_gauge *gauge, const struct json_value *object)
{
    const struct json_value *feeds = settings_work_member(object, "gauges[].feeds");
    gauge->feeds = arena_take(work->arena, settings_work_count(feeds), sizeof *gauge->feeds);
    if (gauge->feeds == NULL)
        return false;
    struct json_value *feed;
    for (size_t i = 0; (feed = settings_work_next(feeds, &i)) != NULL;)
        if (!build_feed(work, gauge, &gauge->feeds[gauge->feed_count++], feed))
            return false;
    return true;
}

/* --- limits --- */

static void refuse_other_quantity(struct settings_work *work, const struct settings_gauge *gauge,
                                  const struct json_value *object, const struct json_value *quality)
{
    enum settings_measure other = gauge->measures == SETTINGS_STAGE ? SETTINGS_DISCHARGE : SETTINGS_STAGE;
    const struct quantity_keys *keys = &quantity_keys[other];
    const char *why = because_of(gauge->measures);
    settings_work_refuse(work, object, keys->rising, why);
    settings_work_refuse(work, quality, keys->lowest, why);
    settings_work_refuse(work, quality, keys->highest, why);
    settings_work_refuse(work, quality, keys->fastest_rise, why);
    settings_work_refuse(work, quality, keys->fastest_fall, why);
    settings_work_refuse(work, quality, keys->moving, why);
    settings_work_refuse(work, quality, keys->resolution, why);
}

static void build_quality(struct settings_work *work, struct settings_gauge *gauge, const struct json_value *object)
{
    const struct json_value *quality = settings_work_member(object, "gauges[].quality");
    const struct quantity_keys *keys = &quantity_keys[gauge->measures];
    refuse_other_quantity(work, gauge, object, quality);
    if (work->need == SETTINGS_FOR_RUN && quality != NULL)
        settings_work_need(work, quality, keys->fastest_rise, because_of(gauge->measures));
    struct quality_rules *rules = &gauge->quality;
    rules->lowest = number_or(quality, keys->lowest, -INFINITY);
    rules->highest = number_or(quality, keys->highest, INFINITY);
    rules->fastest_rise_per_s = number_or(quality, keys->fastest_rise, INFINITY) / HOUR_S;
    rules->fastest_fall_per_s = number_or(quality, keys->fastest_fall, rules->fastest_rise_per_s * HOUR_S) / HOUR_S;
    gauge->rising_rate_per_s = number_or(object, keys->rising, 0) / HOUR_S;
    rules->moving_rate_per_s = number_or(quality, keys->moving, gauge->rising_rate_per_s * HOUR_S) / HOUR_S;
    rules->resolution = number_or(quality, keys->resolution, 0);
    rules->confirm_within_s = settings_work_number(quality, "gauges[].quality.confirm_within_min") * MINUTE_S;
    rules->frozen_after_s = settings_work_number(quality, "gauges[].quality.frozen_after_h") * HOUR_S;
    rules->frozen_moving_s = settings_work_number(quality, "gauges[].quality.frozen_moving_min") * MINUTE_S;
    rules->future_tolerance_s = settings_work_number(quality, "gauges[].quality.future_tolerance_min") * MINUTE_S;
    struct json_value *highest = settings_work_member(quality, keys->highest);
    if (highest != NULL && rules->highest <= rules->lowest)
        json_tree_fault(work->report, highest, "is not above the lowest value, %.10g: expected a higher one",
                        rules->lowest);
}

static void build_times(struct settings_work *work, struct settings_gauge *gauge, const struct json_value *object)
{
    gauge->expect_every_s = settings_work_seconds(object, "gauges[].expect_every_min", MINUTE_S);
    gauge->delivery_s = settings_work_seconds(object, "gauges[].delivery_min", MINUTE_S);
    gauge->blind_after_s = settings_work_seconds(object, "gauges[].blind_after_min", MINUTE_S);
    gauge->blind_after_rising_s = settings_work_seconds(object, "gauges[].blind_after_rising_min", MINUTE_S);
    double blind_min = settings_work_number(object, "gauges[].blind_after_min");
    double rising_min = settings_work_number(object, "gauges[].blind_after_rising_min");
    double usual_min = settings_work_number(object, "gauges[].expect_every_min") +
                       settings_work_number(object, "gauges[].delivery_min");
    struct json_value *expect = settings_work_member(object, "gauges[].expect_every_min");
    struct json_value *delivery = settings_work_member(object, "gauges[].delivery_min");
    struct json_value *blind = settings_work_member(object, "gauges[].blind_after_min");
    struct json_value *rising = settings_work_member(object, "gauges[].blind_after_rising_min");
    if (blind_min < usual_min) /* of the three one is stated, since the defaults fit */
        json_tree_fault(work->report,
                        blind != NULL    ? blind
                        : expect != NULL ? expect
                                         : delivery,
                        "is BLIND between two readings on time: expected blind_after_min of at least "
                        "expect_every_min + delivery_min, %.10g",
                        usual_min);
    if (rising_min > blind_min)
        json_tree_fault(work->report, rising != NULL ? rising : blind,
                        "does not tighten: expected blind_after_rising_min at most blind_after_min, %.10g",
                        blind_min);
}

/* --- the whole --- */

static bool build_gauge(struct settings_work *work, struct settings_gauge *gauge, struct json_value *object)
{
    gauge->id = settings_work_string(object, "gauges[].id");
    gauge->name = settings_work_string(object, "gauges[].name");
    if (gauge->name == NULL)
        gauge->name = gauge->id;
    const char *measures = settings_work_string(object, "gauges[].measures");
    gauge->measures = measures != NULL && strcmp(measures, "discharge") == 0 ? SETTINGS_DISCHARGE : SETTINGS_STAGE;
    gauge->zero_m = settings_work_number(object, "gauges[].zero_m");
    gauge->node = SETTINGS_NONE;
    build_times(work, gauge, object);
    if (settings_work_has(object, "gauges[].measures") && measures == NULL)
        return true; /* what follows hangs on it */
    bool is_for_run = work->need == SETTINGS_FOR_RUN;
    gauge->gives_level_only = settings_work_gives_level_only(work, gauge->id);
    if (gauge->gives_level_only && gauge->measures == SETTINGS_DISCHARGE)
        json_tree_fault(work->report, settings_work_member(object, "gauges[].measures"),
                        "is no level, but an outlet's stage_of names the gauge: expected \"stage\"");
    if (is_for_run && gauge->measures == SETTINGS_STAGE && !gauge->gives_level_only)
        settings_work_need(work, object, "gauges[].rating", because_of(gauge->measures));
    if (is_for_run && gauge->measures == SETTINGS_DISCHARGE)
        settings_work_need(work, object, "gauges[].rising_m3s_h", because_of(gauge->measures));
    if (gauge->measures == SETTINGS_DISCHARGE)
        settings_work_refuse(work, object, "gauges[].rating", because_of(gauge->measures));
    struct json_value *rating = settings_work_member(object, "gauges[].rating");
    if (rating != NULL)
        build_rating(work, gauge, rating);
    build_quality(work, gauge, object);
    const struct json_value *forecast = settings_work_member(work->root, "forecast");
    gauge->assumed = (struct assumed_rules){
        .carry_rise_s = settings_work_number(forecast, "forecast.carry_rise_min") * MINUTE_S,
        .recession_time_constant_s = settings_work_number(forecast, "forecast.recession_h") * HOUR_S,
        .fastest_rise_per_s = gauge->quality.fastest_rise_per_s,
        .fastest_fall_per_s = gauge->quality.fastest_fall_per_s};
    return build_feeds(work, gauge, object);
}

bool settings_build_gauges(struct settings_work *work)
{
    struct settings *settings = work->settings;
    const struct json_value *gauges = settings_work_member(work->root, "gauges");
    settings->gauges = arena_take(work->arena, settings_work_count(gauges), sizeof *settings->gauges);
    if (settings->gauges == NULL)
        return false;
    struct json_value *object;
    for (size_t i = 0; (object = settings_work_next(gauges, &i)) != NULL;)
        if (!build_gauge(work, &settings->gauges[settings->gauge_count++], object))
            return false;
    bool has_feed = work->need != SETTINGS_FOR_RUN || gauges == NULL;
    for (size_t i = 0; gauges != NULL && i < gauges->child_count; i++) {
        const struct json_value *feeds = json_tree_member(&gauges->children[i], "feeds");
        has_feed = has_feed || gauges->children[i].is_faulty || (feeds != NULL && feeds->child_count > 0);
    }
    if (!has_feed)
        settings_report_add(work->report, gauges->line,
                            "gauges: no gauge has a feed: expected 'feeds' with a source of readings in one of them");
    return true;
}
