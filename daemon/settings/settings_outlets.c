/* SPDX-License-Identifier: MIT */
/* What stands at the feet of last reaches: levels, held, measured or given as a series. */
#include "daemon/settings/settings_work.h"

#include <math.h>
#include <string.h>

static const double DEEPEST_M = 1000.0;

bool settings_work_gives_level_only(const struct settings_work *work, const char *gauge_id)
{
    const struct json_value *reaches = settings_work_member(work->root, "reaches");
    const struct json_value *reach;
    bool is_named = false;
    for (size_t i = 0; gauge_id != NULL && (reach = settings_work_next(reaches, &i)) != NULL;) {
        const struct json_value *outlet = settings_work_member(reach, "reaches[].outlet");
        const char *stage_of = settings_work_string(outlet, "reaches[].outlet.stage_of");
        const char *from = settings_work_string(reach, "reaches[].from");
        if (from != NULL && strcmp(from, gauge_id) == 0)
            return false;
        is_named = is_named || (stage_of != NULL && strcmp(stage_of, gauge_id) == 0);
    }
    return is_named;
}

static double moment_of(const struct json_value *value)
{
    int64_t utc_s = 0;
    if (value->kind == JSON_STRING && when_parse(value->string, NULL, &utc_s, NULL) == FW_OK)
        return (double)utc_s;
    return value->number;
}

static void check_row(struct settings_work *work, const struct settings_level *level, struct json_value *row)
{
    struct json_value *time = &row->children[0], *stage = &row->children[1];
    size_t last = level->row_count;
    if (stage->kind != JSON_NUMBER || !(fabs(stage->number) <= DEEPEST_M))
        json_tree_fault(work->report, stage, "is not a level: expected a number of metres, -%g to %g", DEEPEST_M,
                        DEEPEST_M);
    if ((time->kind == JSON_NUMBER) != level->is_in_seconds)
        json_tree_fault(work->report, time, "is not written as the first time of the series is: expected %s",
                        level->is_in_seconds ? "seconds" : "RFC 3339");
    else if (last > 0 && level->time_s[last] <= level->time_s[last - 1])
        json_tree_fault(work->report, time, "is not after the time of the row before it: expected times that rise");
    if (level->is_in_seconds && last == 0 && work->need == SETTINGS_FOR_RUN)
        json_tree_fault(work->report, time, "are seconds of `route`: expected times as RFC 3339");
}

static bool build_series(struct settings_work *work, struct settings_level *level, const struct json_value *rows)
{
    size_t count = settings_work_count(rows);
    level->time_s = arena_take(work->arena, count, sizeof *level->time_s);
    level->stage_m = arena_take(work->arena, count, sizeof *level->stage_m);
    if (level->time_s == NULL || level->stage_m == NULL)
        return false;
    struct json_value *row;
    for (size_t i = 0; (row = settings_work_next(rows, &i)) != NULL;) {
        if (!settings_work_is_whole(row))
            continue; /* reported above */
        level->is_in_seconds = level->row_count == 0 ? row->children[0].kind == JSON_NUMBER : level->is_in_seconds;
        level->time_s[level->row_count] = moment_of(&row->children[0]);
        level->stage_m[level->row_count] = row->children[1].number;
        check_row(work, level, row);
        level->row_count++;
    }
    return true;
}

static void check_kind(struct settings_work *work, struct json_value *outlet)
{
    static const char *const kinds[] = {"reaches[].outlet.stage_m", "reaches[].outlet.stage_of",
                                        "reaches[].outlet.stage_series"};
    size_t count = 0;
    for (size_t i = 0; i < sizeof kinds / sizeof *kinds; i++)
        count += settings_work_has(outlet, kinds[i]);
    if (count != 1)
        settings_report_add(work->report, outlet->line,
                            "%s: has %zu of 'stage_m', 'stage_of' and 'stage_series': expected one of them",
                            outlet->path, count);
    if (!settings_work_has(outlet, "reaches[].outlet.stage_of"))
        settings_work_refuse(work, outlet, "reaches[].outlet.bed_at_m", "there is no stage_of");
}

bool settings_build_outlet(struct settings_work *work, size_t reach_index, struct network_reach *reach,
                           const struct json_value *object)
{
    struct settings *settings = work->settings;
    struct json_value *outlet = settings_work_member(object, "reaches[].outlet");
    if (outlet == NULL)
        return true;
    if (reach->method != NETWORK_AUTO && !network_method_is_full(reach->method)) {
        json_tree_fault(work->report, outlet,
                        "holds a level: expected \"method\" \"auto\", \"dynamic\" or \"diffusive\" with it");
        return true;
    }
    check_kind(work, outlet);
    const char *stage_of = settings_work_string(outlet, "reaches[].outlet.stage_of");
    const struct json_value *series = settings_work_member(outlet, "reaches[].outlet.stage_series");
    const struct json_value *held = settings_work_member(outlet, "reaches[].outlet.stage_m");
    if (held != NULL) {
        reach->outlet_depth_m = held->number;
        return true;
    }
    if (stage_of == NULL && series == NULL)
        return true;
    struct settings_level *level = &settings->levels[settings->level_count];
    *level = (struct settings_level){.reach = reach_index, .gauge = SETTINGS_NONE};
    if (stage_of != NULL)
        level->gauge = settings_gauge_index(settings, stage_of);
    double bed_at_m = settings_work_number(outlet, "reaches[].outlet.bed_at_m");
    level->bed_at_m = isnan(bed_at_m) ? 0.0 : bed_at_m;
    reach->has_outlet_level = true;
    reach->outlet_level = settings->level_count++;
    if (level->gauge != SETTINGS_NONE && settings->gauges[level->gauge].measures != SETTINGS_STAGE)
        json_tree_fault(work->report, settings_work_member(outlet, "reaches[].outlet.stage_of"),
                        "measures no stage: expected a gauge that does");
    return series == NULL || build_series(work, level, series);
}

void settings_check_outlets(struct settings_work *work, const struct json_value *reaches)
{
    const struct network_river *river = &work->settings->river;
    const struct json_value *object;
    size_t reach = 0;
    for (size_t i = 0; (object = settings_work_next(reaches, &i)) != NULL; reach++)
        if (network_reach_has_held_foot(&river->reaches[reach]) &&
            network_reach_from(river, river->reaches[reach].to_node) != NETWORK_NONE)
            json_tree_fault(work->report, settings_work_member(object, "reaches[].outlet"),
                            "holds a level in mid-river: expected it where the last reach ends");
}
