/* SPDX-License-Identifier: MIT */
/* What rates the flow at the foot of a reach: weirs, roads, culverts, clean or part-blocked, and drops of the bed. */
#include "daemon/settings/settings_work.h"

#include <math.h>

#include "engine/structure_rating.h"

#define OPENINGS "reaches[].foot.openings[]"

/* Both must rise, from no flow at the sill. */
static void check_rows(struct settings_work *work, const struct json_value *rows)
{
    struct json_value *row;
    const struct json_value *before = NULL;
    for (size_t i = 0; (row = settings_work_next(rows, &i)) != NULL; before = row) {
        struct json_value *discharge = &row->children[0], *depth = &row->children[1];
        if (before == NULL && discharge->number > 0.0)
            json_tree_fault(work->report, discharge, "flows at the sill: expected a first row of discharge 0");
        if (before != NULL && discharge->number <= before->children[0].number)
            json_tree_fault(work->report, discharge, "does not rise: expected more than %.10g of the row before it",
                            before->children[0].number);
        if (before != NULL && depth->number <= before->children[1].number)
            json_tree_fault(work->report, depth, "does not rise: expected more than %.10g of the row before it",
                            before->children[1].number);
    }
}

static bool fill_rows(struct settings_work *work, const struct json_value *rows, struct stage_opening *opening)
{
    size_t count = settings_work_count(rows);
    double *depth_m = arena_take(work->arena, count, sizeof *depth_m);
    double *discharge_m3s = arena_take(work->arena, count, sizeof *discharge_m3s);
    if (depth_m == NULL || discharge_m3s == NULL)
        return false;
    const struct json_value *row;
    for (size_t i = 0; (row = settings_work_next(rows, &i)) != NULL; opening->row_count++) {
        discharge_m3s[opening->row_count] = row->children[0].number;
        depth_m[opening->row_count] = row->children[1].number;
    }
    check_rows(work, rows);
    opening->depth_m = depth_m;
    opening->discharge_m3s = discharge_m3s;
    return true;
}

static bool fill_weir(struct settings_work *work, const struct json_value *object, struct stage_opening *opening)
{
    double *depth_m = arena_take(work->arena, STRUCTURE_RATING_WEIR_ROWS, sizeof *depth_m);
    double *discharge_m3s = arena_take(work->arena, STRUCTURE_RATING_WEIR_ROWS, sizeof *discharge_m3s);
    if (depth_m == NULL || discharge_m3s == NULL)
        return false;
    structure_rating_weir(settings_work_number(object, OPENINGS ".crest_m"),
                          settings_work_number(object, OPENINGS ".length_m"),
                          settings_work_number(object, OPENINGS ".coefficient"), depth_m, discharge_m3s);
    opening->row_count = STRUCTURE_RATING_WEIR_ROWS;
    opening->depth_m = depth_m;
    opening->discharge_m3s = discharge_m3s;
    return true;
}

static bool build_opening(struct settings_work *work, const struct json_value *object, struct stage_opening *opening)
{
    static const char no_rows[] = "there are no rows", has_rows[] = "there are rows";
    const struct json_value *rows = settings_work_member(object, OPENINGS ".rows");
    *opening = (struct stage_opening){.open_share = settings_work_number(object, OPENINGS ".open_share")};
    if (settings_work_has(object, OPENINGS ".rows")) {
        settings_work_refuse(work, object, OPENINGS ".crest_m", has_rows);
        settings_work_refuse(work, object, OPENINGS ".length_m", has_rows);
        settings_work_refuse(work, object, OPENINGS ".coefficient", has_rows);
        return !settings_work_is_whole(rows) || fill_rows(work, rows, opening);
    }
    settings_work_need(work, object, OPENINGS ".crest_m", no_rows);
    settings_work_need(work, object, OPENINGS ".length_m", no_rows);
    return fill_weir(work, object, opening);
}

static bool build_structure(struct settings_work *work, const struct json_value *openings,
                            struct network_reach *reach)
{
    size_t faults_before = work->report->faults->count + work->report->not_kept;
    size_t count = settings_work_count(openings);
    struct stage_opening *built = arena_take(work->arena, count, sizeof *built);
    struct stage_structure *structure = arena_take(work->arena, 1, sizeof *structure);
    if (built == NULL || structure == NULL)
        return false;
    const struct json_value *object;
    for (size_t i = 0; (object = settings_work_next(openings, &i)) != NULL; structure->opening_count++)
        if (!build_opening(work, object, &built[structure->opening_count]))
            return false;
    structure->openings = built;
    if (settings_work_is_whole(openings) && faults_before == work->report->faults->count + work->report->not_kept)
        reach->foot_structure = structure;
    return true;
}

bool settings_build_foot(struct settings_work *work, struct network_reach *reach, const struct json_value *object)
{
    struct json_value *foot = settings_work_member(object, "reaches[].foot");
    if (foot == NULL)
        return true;
    struct json_value *openings = settings_work_member(foot, "reaches[].foot.openings");
    double drop_m = settings_work_number(foot, "reaches[].foot.drop_m");
    if (reach->method != NETWORK_AUTO && !network_method_is_full(reach->method))
        json_tree_fault(work->report, foot,
                        "rates the flow: expected \"method\" \"auto\", \"dynamic\" or \"diffusive\" with it");
    else if (settings_work_has(object, "reaches[].outlet"))
        json_tree_fault(work->report, foot,
                        "stands where a level is held too: expected one of them, or a short reach between");
    else if (!settings_work_has(foot, "reaches[].foot.openings") && !(drop_m > 0.0) && !isnan(drop_m))
        json_tree_fault(work->report, foot,
                        "has neither openings nor a drop: expected 'openings', or a 'drop_m' over 0");
    if (foot->is_faulty)
        return true;
    reach->foot_drop_m = isnan(drop_m) ? 0.0 : drop_m;
    return openings == NULL || build_structure(work, openings, reach);
}
