/* SPDX-License-Identifier: MIT */
/* Sections, reaches and the tree that they make. */
#include "daemon/settings/settings_work.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

#include "engine/method.h"
#include "engine/river.h"

static const double MINUTE_S = 60;

/* --- sections --- */

static bool fill_survey(struct settings_work *work, struct section *section, const struct json_value *points)
{
    size_t count = settings_work_count(points);
    double *offset_m = arena_take(work->arena, count, sizeof *offset_m);
    double *elevation_m = arena_take(work->arena, count, sizeof *elevation_m);
    if (offset_m == NULL || elevation_m == NULL)
        return false;
    const struct json_value *point;
    for (size_t i = 0; (point = settings_work_next(points, &i)) != NULL; section->point_count++) {
        offset_m[section->point_count] = point->children[0].number;
        elevation_m[section->point_count] = point->children[1].number;
    }
    section->point_offset_m = offset_m;
    section->point_elevation_m = elevation_m;
    return true;
}

static bool fill_panels(struct settings_work *work, struct section *section, const struct json_value *panels)
{
    size_t count = settings_work_count(panels);
    double *to_offset_m = arena_take(work->arena, count, sizeof *to_offset_m);
    double *roughness_n = arena_take(work->arena, count, sizeof *roughness_n);
    if (to_offset_m == NULL || roughness_n == NULL)
        return false;
    const struct json_value *panel;
    for (size_t i = 0; (panel = settings_work_next(panels, &i)) != NULL; section->panel_count++) {
        to_offset_m[section->panel_count] = settings_work_number(panel, "sections[].panels[].to_m");
        roughness_n[section->panel_count] = settings_work_number(panel, "sections[].panels[].n");
    }
    section->panel_to_offset_m = to_offset_m;
    section->panel_roughness_n = roughness_n;
    return true;
}

static void check_keys_of_shape(struct settings_work *work, enum section_shape shape, const struct json_value *object)
{
    static const char surveyed[] = "the shape is surveyed points";
    static const char simple[] = "the shape is not points";
    if (shape == SECTION_POINTS) {
        settings_work_need(work, object, "sections[].points", surveyed);
        settings_work_refuse(work, object, "sections[].bottom_m", surveyed);
        settings_work_refuse(work, object, "sections[].plain", "a surveyed section has its plain in panels");
        if (!settings_work_has(object, "sections[].panels"))
            settings_work_need(work, object, "sections[].n", "there are no panels");
    } else {
        settings_work_need(work, object, "sections[].bottom_m", simple);
        settings_work_need(work, object, "sections[].n", simple);
        settings_work_refuse(work, object, "sections[].points", simple);
        settings_work_refuse(work, object, "sections[].panels", simple);
    }
    if (shape == SECTION_TRAPEZOID)
        settings_work_need(work, object, "sections[].side", "the shape is a trapezoid");
    else
        settings_work_refuse(work, object, "sections[].side", "the shape is no trapezoid");
}

static void check_section(struct settings_work *work, const struct section *section, struct json_value *object)
{
    static const struct settings_work_name names[] = {
        {"bottom_m", "sections[].bottom_m"},
        {"side_h_per_v", "sections[].side"},
        {"roughness_n", "sections[].n"},
        {"points", "sections[].points"},
        {"point_offset_m", "sections[].points"},
        {"point_elevation_m", "sections[].points"},
        {"panels", "sections[].panels"},
        {"panel_to_offset_m", "sections[].panels"},
        {"panel_roughness_n", "sections[].panels"},
        {"has_plain", "sections[].plain"},
    };
    const char *fault = "";
    const struct json_value *points = settings_work_member(object, "sections[].points");
    for (size_t i = 1; points != NULL && i < section->point_count; i++)
        if (section->point_offset_m[i] < section->point_offset_m[i - 1]) {
            json_tree_fault(work->report, &points->children[i].children[0],
                            "folds back, the point before it stands at %g: expected offsets that never decrease",
                            section->point_offset_m[i - 1]);
            return;
        }
    if (section_check(section, &fault) != FW_OK)
        settings_work_engine_fault(work, object, fault, sizeof names / sizeof names[0], names);
}

static enum section_shape shape_of(const char *word)
{
    static const char *const words[] = {
        [SECTION_WIDE] = "wide",
        [SECTION_RECTANGLE] = "rectangle",
        [SECTION_TRAPEZOID] = "trapezoid",
        [SECTION_POINTS] = "points",
    };
    size_t shape = 0;
    while (shape + 1 < sizeof words / sizeof words[0] && strcmp(words[shape], word) != 0)
        shape++;
    return (enum section_shape)shape;
}

static double number_or_zero(const struct json_value *object, const char *key_path)
{
    double number = settings_work_number(object, key_path);
    return isnan(number) ? 0 : number;
}

static bool build_section(struct settings_work *work, struct section *section, struct json_value *object)
{
    const char *shape = settings_work_string(object, "sections[].shape");
    if (shape == NULL)
        return true;
    size_t faults_before = work->report->faults->count + work->report->not_kept;
    section->shape = shape_of(shape);
    check_keys_of_shape(work, section->shape, object);
    if (!settings_work_is_whole(object) || faults_before != work->report->faults->count + work->report->not_kept)
        return true;
    section->bottom_m = number_or_zero(object, "sections[].bottom_m");
    section->side_h_per_v = number_or_zero(object, "sections[].side");
    section->roughness_n = number_or_zero(object, "sections[].n");
    const struct json_value *plain = settings_work_member(object, "sections[].plain");
    section->has_plain = plain != NULL;
    if (plain != NULL) {
        section->plain_above_m = settings_work_number(plain, "sections[].plain.above_m");
        section->plain_width_m = settings_work_number(plain, "sections[].plain.width_m");
        section->plain_roughness_n = settings_work_number(plain, "sections[].plain.n");
    }
    if (!fill_survey(work, section, settings_work_member(object, "sections[].points")) ||
        !fill_panels(work, section, settings_work_member(object, "sections[].panels")))
        return false;
    check_section(work, section, object);
    return true;
}

static bool build_sections(struct settings_work *work)
{
    struct settings *settings = work->settings;
    const struct json_value *sections = settings_work_member(work->root, "sections");
    size_t count = settings_work_count(sections);
    settings->sections = arena_take(work->arena, count, sizeof *settings->sections);
    settings->section_ids = arena_take(work->arena, count, sizeof *settings->section_ids);
    settings->section_seasons = arena_take(work->arena, count, sizeof *settings->section_seasons);
    if (settings->sections == NULL || settings->section_ids == NULL || settings->section_seasons == NULL)
        return false;
    struct json_value *object;
    for (size_t i = 0; (object = settings_work_next(sections, &i)) != NULL; settings->section_count++) {
        settings->section_ids[settings->section_count] = settings_work_string(object, "sections[].id");
        if (!build_section(work, &settings->sections[settings->section_count], object) ||
            !settings_build_seasons(work, settings->section_count, object))
            return false;
    }
    return true;
}

/* --- reaches --- */

/* Index of the node of that name, which is added when it is new. */
static size_t node_of(struct settings *settings, const char *name)
{
    if (name == NULL)
        return NETWORK_NONE;
    for (size_t i = 0; i < settings->river.node_count; i++)
        if (strcmp(settings->node_names[i], name) == 0)
            return i;
    settings->node_names[settings->river.node_count] = name;
    return settings->river.node_count++;
}

static enum network_method method_of(const struct json_value *object)
{
    const char *word = settings_work_string(object, "reaches[].method");
    enum network_method method = NETWORK_AUTO;
    return word != NULL && method_from_name(word, &method) ? method : NETWORK_AUTO;
}

static void build_reach(struct settings_work *work, struct network_reach *reach, const struct json_value *object)
{
    struct settings *settings = work->settings;
    *reach = (struct network_reach){
        .id = settings_work_string(object, "reaches[].id"),
        .from_node = node_of(settings, settings_work_string(object, "reaches[].from")),
        .to_node = node_of(settings, settings_work_string(object, "reaches[].to")),
        .length_m = settings_work_number(object, "reaches[].length_m"),
        .slope_m_per_m = settings_work_number(object, "reaches[].slope"),
        .cell_m = number_or_zero(object, "reaches[].cell_m"),
        .method = method_of(object),
    };
    const char *section = settings_work_string(object, "reaches[].section");
    for (size_t i = 0; section != NULL && i < settings->section_count; i++)
        if (settings->section_ids[i] != NULL && strcmp(settings->section_ids[i], section) == 0)
            reach->section = &settings->sections[i];
    struct json_value *to = settings_work_member(object, "reaches[].to");
    if (to != NULL && reach->from_node == reach->to_node)
        json_tree_fault(work->report, to, "is where the reach begins: expected another node");
}

static bool build_reaches(struct settings_work *work, const struct json_value *reaches)
{
    struct settings *settings = work->settings;
    size_t count = settings_work_count(reaches);
    struct network_reach *built = arena_take(work->arena, count, sizeof *built);
    settings->node_names = arena_take(work->arena, 2 * count, sizeof *settings->node_names);
    if (built == NULL || settings->node_names == NULL)
        return false;
    const struct json_value *object;
    settings->levels = arena_take(work->arena, count, sizeof *settings->levels);
    if (settings->levels == NULL)
        return false;
    for (size_t i = 0; (object = settings_work_next(reaches, &i)) != NULL; settings->river.reach_count++) {
        struct network_reach *reach = &built[settings->river.reach_count];
        build_reach(work, reach, object);
        if (!settings_build_outlet(work, settings->river.reach_count, reach, object) ||
            !settings_build_foot(work, reach, object))
            return false;
    }
    settings->river.reaches = built;
    settings->river.level_count = settings->level_count;
    settings_check_outlets(work, reaches);
    return true;
}

/* --- side inflows --- */

/* One object may give two: a share and a constant. Returns how many were written. */
static size_t build_side_inflow(struct settings_work *work, size_t reach, const struct json_value *object,
                                struct network_side_inflow into[2])
{
    static const char share_of[] = "reaches[].side_inflow[].share_of", share[] = "reaches[].side_inflow[].share";
    static const char constant[] = "reaches[].side_inflow[].constant_m3s", at[] = "reaches[].side_inflow[].at_m";
    double length_m = work->settings->river.reaches[reach].length_m;
    struct json_value *at_value = settings_work_member(object, at);
    double at_m = settings_work_number(object, at);
    size_t count = 0;
    if (at_m > length_m)
        json_tree_fault(work->report, at_value, "lies beyond the end of the reach: expected at most %.10g", length_m);
    if (!settings_work_has(object, share_of) && !settings_work_has(object, constant))
        settings_report_add(work->report, object->line,
                            "%s: brings no water: expected 'share_of' with 'share', or 'constant_m3s'", object->path);
    if (settings_work_has(object, share_of))
        settings_work_need(work, object, share, "there is a share_of");
    else {
        settings_work_refuse(work, object, share, "there is no share_of");
        settings_work_refuse(work, object, "reaches[].side_inflow[].delay_min", "there is no share_of");
    }
    const char *gauge = settings_work_string(object, share_of);
    if (gauge != NULL)
        into[count++] = (struct network_side_inflow){
            .reach_index = reach,
            .at_m = at_m,
            .share_of_gauge = settings_gauge_index(work->settings, gauge),
            .share = settings_work_number(object, share),
            .delay_s = settings_work_number(object, "reaches[].side_inflow[].delay_min") * MINUTE_S};
    if (settings_work_has(object, constant))
        into[count++] = (struct network_side_inflow){.reach_index = reach,
                                                     .at_m = at_m,
                                                     .share_of_gauge = NETWORK_NONE,
                                                     .constant_m3s = settings_work_number(object, constant)};
    return count;
}

static bool build_side_inflows(struct settings_work *work, const struct json_value *reaches)
{
    struct network_river *river = &work->settings->river;
    size_t most = 0;
    const struct json_value *object;
    for (size_t i = 0; (object = settings_work_next(reaches, &i)) != NULL;)
        most += 2 * settings_work_count(settings_work_member(object, "reaches[].side_inflow"));
    struct network_side_inflow *built = arena_take(work->arena, most, sizeof *built);
    if (built == NULL)
        return false;
    size_t reach = 0;
    for (size_t i = 0; (object = settings_work_next(reaches, &i)) != NULL; reach++) {
        const struct json_value *inflows = settings_work_member(object, "reaches[].side_inflow");
        const struct json_value *inflow;
        for (size_t j = 0; (inflow = settings_work_next(inflows, &j)) != NULL;)
            river->side_inflow_count += build_side_inflow(work, reach, inflow, &built[river->side_inflow_count]);
    }
    river->side_inflows = built;
    return true;
}

/* --- the tree --- */

static bool is_gauge_node(const struct settings *settings, size_t node)
{
    for (size_t i = 0; i < settings->gauge_count; i++)
        if (settings->gauges[i].node == node)
            return true;
    return false;
}

static bool place_gauges(struct settings_work *work)
{
    struct settings *settings = work->settings;
    size_t *gauge_node = arena_take(work->arena, settings->gauge_count, sizeof *gauge_node);
    if (gauge_node == NULL)
        return false;
    const struct json_value *gauges = settings_work_member(work->root, "gauges");
    const struct json_value *object;
    size_t gauge = 0;
    for (size_t i = 0; (object = settings_work_next(gauges, &i)) != NULL; gauge++) {
        struct json_value *id = settings_work_member(object, "gauges[].id");
        size_t node = NETWORK_NONE;
        bool is_apart = settings->gauges[gauge].gives_level_only;
        for (size_t n = 0; id != NULL && !is_apart && n < settings->river.node_count; n++)
            if (strcmp(settings->node_names[n], id->string) == 0)
                node = n;
        settings->gauges[gauge].node = gauge_node[gauge] = node;
        if (id != NULL && node == NETWORK_NONE && !is_apart)
            json_tree_fault(
                work->report, id,
                "stands at no reach: expected a reach with this id as its 'from', or an outlet with it as "
                "'stage_of'");
    }
    settings->river.gauge_count = settings->gauge_count;
    settings->river.gauge_node = gauge_node;
    return true;
}

/* Does the way downstream from this reach come back to it? Then *last is the reach of the ring last in the file. */
static bool is_in_ring(const struct network_river *river, size_t reach, size_t *last)
{
    size_t at = reach;
    *last = reach;
    for (size_t steps = 0; steps < river->reach_count; steps++) {
        at = network_reach_from(river, river->reaches[at].to_node);
        if (at == NETWORK_NONE)
            return false;
        *last = at > *last ? at : *last;
        if (at == reach)
            return true;
    }
    return false;
}

static void report_no_inflow(struct settings_work *work, struct json_value *from)
{
    enum { CANDIDATES_MAX = 200 };
    const struct settings *settings = work->settings;
    const char *candidates[CANDIDATES_MAX];
    size_t count = 0;
    for (size_t i = 0; i < settings->gauge_count && count < CANDIDATES_MAX; i++)
        candidates[count++] = settings->gauges[i].id;
    for (size_t i = 0; i < settings->river.node_count && count < CANDIDATES_MAX; i++)
        if (network_reach_into(&settings->river, i) != NETWORK_NONE)
            candidates[count++] = settings->node_names[i];
    const char *nearest = settings_report_nearest(from->string, count, candidates);
    json_tree_fault(work->report, from, "has no inflow: expected a gauge, or a node where another reach ends%s%s%s",
                    nearest != NULL ? ", perhaps '" : "", nearest != NULL ? nearest : "", nearest != NULL ? "'" : "");
}

/* Gauges must be placed, and every reach must have both its nodes. */
static void check_tree(struct settings_work *work, const struct json_value *reaches)
{
    const struct settings *settings = work->settings;
    const struct network_river *river = &settings->river;
    size_t reach = 0;
    struct json_value *object;
    for (size_t i = 0; (object = settings_work_next(reaches, &i)) != NULL; reach++) {
        struct json_value *from = settings_work_member(object, "reaches[].from");
        struct json_value *to = settings_work_member(object, "reaches[].to");
        size_t first_out = network_reach_from(river, river->reaches[reach].from_node);
        size_t last_in_ring = 0;
        if (first_out < reach)
            json_tree_fault(work->report, from, "has two reaches that leave it, '%s' and this one: expected one",
                            river->reaches[first_out].id != NULL ? river->reaches[first_out].id : "?");
        else if (network_reach_into(river, river->reaches[reach].from_node) == NETWORK_NONE &&
                 !is_gauge_node(settings, river->reaches[reach].from_node))
            report_no_inflow(work, from);
        if (is_in_ring(river, reach, &last_in_ring) && last_in_ring == reach && !to->is_faulty)
            json_tree_fault(work->report, to, "closes a ring of reaches: expected a river that ends");
    }
}

/* What follows a gauge must be able to: it measures a flow, and not one that it feeds itself. */
static void check_shares(struct settings_work *work, const struct json_value *reaches)
{
    const struct network_river *river = &work->settings->river;
    const struct json_value *object;
    size_t reach = 0;
    for (size_t i = 0; (object = settings_work_next(reaches, &i)) != NULL; reach++) {
        const struct json_value *inflows = settings_work_member(object, "reaches[].side_inflow");
        const struct json_value *inflow;
        for (size_t j = 0; (inflow = settings_work_next(inflows, &j)) != NULL;) {
            struct json_value *share_of = settings_work_member(inflow, "reaches[].side_inflow[].share_of");
            size_t gauge = share_of != NULL ? settings_gauge_index(work->settings, share_of->string) : SETTINGS_NONE;
            if (gauge == SETTINGS_NONE)
                continue;
            if (work->settings->gauges[gauge].gives_level_only)
                json_tree_fault(work->report, share_of,
                                "gives the level of an outlet only: expected a gauge whose flow is known");
            else if (network_gauge_is_inner(river, gauge) &&
                     network_leads_to(river, river->reaches[reach].to_node, river->gauge_node[gauge]))
                json_tree_fault(work->report, share_of,
                                "stands downstream, so that its flow would feed itself: expected another gauge");
        }
    }
}

bool settings_build_river(struct settings_work *work)
{
    const struct json_value *reaches = settings_work_member(work->root, "reaches");
    if (!build_sections(work) || !build_reaches(work, reaches) || !build_side_inflows(work, reaches))
        return false;
    /* a node that cannot be read would make orphans of its neighbours */
    bool is_whole = settings_work_member(work->root, "gauges") != NULL && reaches != NULL;
    for (size_t i = 0; reaches != NULL && i < reaches->child_count; i++)
        is_whole = is_whole && !reaches->children[i].is_faulty &&
                   settings_work_member(&reaches->children[i], "reaches[].from") != NULL &&
                   settings_work_member(&reaches->children[i], "reaches[].to") != NULL;
    const struct json_value *gauges = settings_work_member(work->root, "gauges");
    for (size_t i = 0; gauges != NULL && i < gauges->child_count; i++)
        is_whole = is_whole && settings_work_member(&gauges->children[i], "gauges[].id") != NULL;
    if (!is_whole)
        return true;
    if (!place_gauges(work))
        return false;
    check_tree(work, reaches);
    check_shares(work, reaches);
    return true;
}

/* The engine names reaches by id. */
static void report_refusal(struct settings_work *work, const struct json_value *reaches, const char *text)
{
    const struct json_value *blamed = reaches;
    for (size_t i = 0; i < reaches->child_count; i++) {
        char prefix[80];
        const char *id = settings_work_string(&reaches->children[i], "reaches[].id");
        snprintf(prefix, sizeof prefix, "reach '%s':", id);
        if (strncmp(text, prefix, strlen(prefix)) == 0)
            blamed = &reaches->children[i];
    }
    settings_report_add(work->report, blamed->line, "%s: cannot be used: %s", blamed->path, text);
}

bool settings_check_river(struct settings_work *work)
{
    const struct settings *settings = work->settings;
    const struct network_options options = {.time_step_s = (double)settings->time_step_s,
                                            .group_count = settings->roughness_factor_count,
                                            .roughness_factors = settings->roughness_factors,
                                            .members_per_group = 1,
                                            .largest_discharge_m3s = 1};
    size_t *order = arena_take(work->arena, settings->river.reach_count, sizeof *order);
    size_t *waiting = arena_take(work->arena, settings->river.node_count, sizeof *waiting);
    struct network_fault fault = {.text = ""};
    if (order == NULL || waiting == NULL)
        return false;
    enum fw_status status = river_check_values(&settings->river, &options, &fault);
    if (status == FW_OK)
        status = river_order(&settings->river, order, waiting, &fault);
    if (status != FW_OK)
        report_refusal(work, settings_work_member(work->root, "reaches"), fault.text);
    return true;
}
