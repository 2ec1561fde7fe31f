/* SPDX-License-Identifier: MIT */
/* A point's level from a weir over the road: the structure, clean and part-blocked, and its rows. */
#include "daemon/settings/settings_work.h"

#include <math.h>

#include "engine/structure_rating.h"

/* The opening's rows turned round, as stage_opening has them; false: no memory. Faults are reported. */
static bool build_opening(struct settings_work *work, const struct json_value *rows, struct stage_opening *opening)
{
    size_t count = settings_work_count(rows);
    double *depth_m = arena_take(work->arena, count, sizeof *depth_m);
    double *discharge_m3s = arena_take(work->arena, count, sizeof *discharge_m3s);
    if (depth_m == NULL || discharge_m3s == NULL)
        return false;
    const struct json_value *last = NULL;
    const struct json_value *row;
    size_t built = 0;
    for (size_t i = 0; (row = settings_work_next(rows, &i)) != NULL; last = row, built++) {
        discharge_m3s[built] = row->children[0].number;
        depth_m[built] = row->children[1].number;
        if (last == NULL && discharge_m3s[0] > 0.0)
            json_tree_fault(work->report, &row->children[0], "flows at the sill: expected 0 m3/s in the first row");
        for (size_t side = 0; last != NULL && side < 2; side++)
            if (row->children[side].number <= last->children[side].number)
                json_tree_fault(work->report, &row->children[side],
                                "is not above that of the row before, %.10g (line %zu): expected rising rows",
                                last->children[side].number, last->line);
    }
    *opening = (struct stage_opening){
        .row_count = built, .depth_m = depth_m, .discharge_m3s = discharge_m3s, .open_share = 1.0};
    return true;
}

/* The same tables with other shares open; NULL: no memory. */
static struct stage_structure *make_structure(struct settings_work *work, size_t count,
                                              const struct stage_opening openings[], double weir_share,
                                              double opening_share)
{
    struct stage_opening *own = arena_take(work->arena, count, sizeof *own);
    struct stage_structure *structure = arena_take(work->arena, 1, sizeof *structure);
    if (own == NULL || structure == NULL)
        return NULL;
    for (size_t i = 0; i < count; i++) {
        own[i] = openings[i];
        own[i].open_share = i == 0 ? weir_share : opening_share;
    }
    *structure = (struct stage_structure){count, own};
    return structure;
}

/* Rows in the section as its roughness is given: what flow a level stands for. */
static bool build_rows(struct settings_work *work, const struct settings_point *point,
                       const struct stage_structure *structure, struct json_value *weir, size_t *count_out,
                       double **discharge_out_m3s, double **stage_out_m)
{
    const struct network_reach *reach = &work->settings->river.reaches[point->reach];
    *discharge_out_m3s = arena_take(work->arena, STRUCTURE_RATING_ROWS_MAX, sizeof **discharge_out_m3s);
    *stage_out_m = arena_take(work->arena, STRUCTURE_RATING_ROWS_MAX, sizeof **stage_out_m);
    if (*discharge_out_m3s == NULL || *stage_out_m == NULL)
        return false;
    if (structure_rating_build(structure, reach->section, reach->slope_m_per_m, 1.0, *discharge_out_m3s, *stage_out_m,
                               count_out) != FW_OK)
        json_tree_fault(work->report, weir, "cannot be rated: expected flows that the section below can carry");
    return true;
}

/* Before the structure is reached the river stands at its lowest sill: a mark below it would always be passed. */
static void check_sill(struct settings_work *work, const struct settings_point *point,
                       const struct stage_structure *structure, struct json_value *weir)
{
    double sill_m = structure->openings[0].depth_m[0];
    for (size_t i = 1; i < structure->opening_count; i++)
        sill_m = fmin(sill_m, structure->openings[i].depth_m[0]);
    if (point->closing_mark < point->mark_count && !(sill_m < point->marks[point->closing_mark].depth_m))
        json_tree_fault(work->report, weir,
                        "holds the water at %.10g m or above, where the closing mark is always passed: expected an "
                        "'opening' with a sill below %.10g m",
                        sill_m, point->marks[point->closing_mark].depth_m);
}

/* The crown: stated, or the deck mark's; NAN: neither, which is reported. */
static double crest_of(struct settings_work *work, const struct settings_point *point, const struct json_value *weir)
{
    static const char key[] = "points[].stage_rating.weir.crest_m";
    if (settings_work_has(weir, key))
        return settings_work_number(weir, key);
    if (point->deck_mark < point->mark_count)
        return point->marks[point->deck_mark].depth_m;
    settings_work_need(work, weir, key, "there is no mark that gives it");
    return NAN;
}

/* The road first, then what passes under it; 0: a fault, which is reported. False: no memory. */
static bool build_openings(struct settings_work *work, const struct settings_point *point, struct json_value *weir,
                           struct stage_opening openings[2], size_t *count_out)
{
    const struct json_value *under = settings_work_member(weir, "points[].stage_rating.weir.opening");
    double *depth_m = arena_take(work->arena, STRUCTURE_RATING_WEIR_ROWS, sizeof *depth_m);
    double *discharge_m3s = arena_take(work->arena, STRUCTURE_RATING_WEIR_ROWS, sizeof *discharge_m3s);
    double crest_m = crest_of(work, point, weir);
    if (depth_m == NULL || discharge_m3s == NULL)
        return false;
    *count_out = 0;
    if (!settings_work_is_whole(weir) || !isfinite(crest_m))
        return true;
    structure_rating_weir(crest_m, settings_work_number(weir, "points[].stage_rating.weir.length_m"),
                          settings_work_number(weir, "points[].stage_rating.weir.coefficient"), depth_m,
                          discharge_m3s);
    openings[0] = (struct stage_opening){.row_count = STRUCTURE_RATING_WEIR_ROWS,
                                         .depth_m = depth_m,
                                         .discharge_m3s = discharge_m3s,
                                         .open_share = 1.0};
    if (under != NULL && !build_opening(work, under, &openings[1]))
        return false;
    *count_out = !settings_work_is_whole(weir) ? 0 : under != NULL ? 2 : 1;
    return true;
}

bool settings_build_weir(struct settings_work *work, struct settings_point *point, struct json_value *weir)
{
    const struct json_value *blocked = settings_work_member(weir, "points[].stage_rating.weir.part_blocked");
    struct stage_opening openings[2];
    size_t count = 0;
    if (!build_openings(work, point, weir, openings, &count))
        return false;
    const struct section *section =
        point->reach != SETTINGS_NONE ? work->settings->river.reaches[point->reach].section : NULL;
    if (count == 0 || section == NULL || section_check(section, NULL) != FW_OK)
        return true; /* a fault of its own */
    struct stage_structure *clean = make_structure(work, count, openings, 1.0, 1.0);
    if (clean == NULL)
        return false;
    point->structure = clean;
    check_sill(work, point, clean, weir);
    if (!build_rows(work, point, clean, weir, &point->stage_row_count, &point->stage_row_discharge_m3s,
                    &point->stage_row_stage_m))
        return false;
    if (blocked == NULL)
        return true;
    struct stage_structure *part = make_structure(
        work, count, openings, settings_work_number(blocked, "points[].stage_rating.weir.part_blocked.length_share"),
        settings_work_number(blocked, "points[].stage_rating.weir.part_blocked.opening_share"));
    return part != NULL && build_rows(work, point, part, weir, &point->blocked_row_count,
                                      &point->blocked_row_discharge_m3s, &point->blocked_row_stage_m);
}
