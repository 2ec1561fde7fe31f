/* SPDX-License-Identifier: MIT */
/* Points: place, marks, crew, policy, triggers, a level of their own. */
#include "daemon/settings/settings_work.h"

#include <math.h>
#include <string.h>

static const double MINUTE_S = 60;
static const double HOUR_S = 3600;
static const double SLACK_BEYOND_CYCLE_S = 300;

/* --- place --- */

static size_t reach_of_id(const struct network_river *river, const char *id)
{
    for (size_t i = 0; i < river->reach_count; i++)
        if (river->reaches[i].id != NULL && strcmp(river->reaches[i].id, id) == 0)
            return i;
    return NETWORK_NONE;
}

static void place_on_reach(struct settings_work *work, struct settings_point *point, const struct json_value *object)
{
    const struct json_value *reach = settings_work_member(object, "points[].reach");
    struct json_value *at = settings_work_member(object, "points[].at_m");
    settings_work_need(work, object, "points[].at_m", "there is a reach");
    if (reach == NULL || at == NULL)
        return;
    point->reach = reach_of_id(&work->settings->river, reach->string);
    point->at_m = at->number;
    if (point->reach == NETWORK_NONE)
        return;
    double length_m = work->settings->river.reaches[point->reach].length_m;
    if (point->at_m > length_m)
        json_tree_fault(work->report, at, "lies beyond the end of the reach: expected at most %.10g", length_m);
}

/*
 * At the foot of the one reach that ends at the node of its name; where several end, at the head of the one that
 * leaves, which carries them all.
 */
static void place_at_node(struct settings_work *work, struct settings_point *point, struct json_value *id)
{
    const struct settings *settings = work->settings;
    const struct network_river *river = &settings->river;
    size_t ending_count = 0;
    size_t ending = NETWORK_NONE;
    size_t leaving = NETWORK_NONE;
    for (size_t i = 0; i < river->reach_count; i++) {
        const struct network_reach *reach = &river->reaches[i];
        if (reach->to_node != NETWORK_NONE && strcmp(settings->node_names[reach->to_node], point->id) == 0) {
            ending = i;
            ending_count++;
        }
        if (reach->from_node != NETWORK_NONE && strcmp(settings->node_names[reach->from_node], point->id) == 0)
            leaving = i;
    }
    if (ending_count == 1) {
        point->reach = ending;
        point->at_m = river->reaches[ending].length_m;
    } else if (leaving != NETWORK_NONE) {
        point->reach = leaving;
        point->at_m = 0;
    } else if (ending_count > 1) {
        json_tree_fault(work->report, id,
                        "is where %zu reaches end and none goes on: expected one that goes on, or 'reach' and 'at_m'",
                        ending_count);
    } else {
        json_tree_fault(work->report, id,
                        "is not where a reach ends: expected the id of such a node, or 'reach' and "
                        "'at_m'");
    }
}

static void place(struct settings_work *work, struct settings_point *point, const struct json_value *object)
{
    point->reach = SETTINGS_NONE;
    const struct json_value *reaches = settings_work_member(work->root, "reaches");
    struct json_value *id = settings_work_member(object, "points[].id");
    if (settings_work_has(object, "points[].reach")) {
        place_on_reach(work, point, object);
        return;
    }
    settings_work_refuse(work, object, "points[].at_m", "there is no reach for it");
    bool is_known = reaches != NULL && id != NULL;
    for (size_t i = 0; is_known && i < reaches->child_count; i++)
        is_known =
            !reaches->children[i].is_faulty && settings_work_member(&reaches->children[i], "reaches[].to") != NULL;
    if (is_known)
        place_at_node(work, point, id);
}

/* --- marks --- */

static bool has_word_deck(const char *name)
{
    return name != NULL && strcasestr(name, "deck") != NULL;
}

static bool build_mark_list(struct settings_work *work, struct settings_point *point, const struct json_value *marks)
{
    point->marks = arena_take(work->arena, settings_work_count(marks), sizeof *point->marks);
    if (point->marks == NULL)
        return false;
    struct json_value *last = NULL;
    struct json_value *object;
    for (size_t i = 0; (object = settings_work_next(marks, &i)) != NULL; last = object) {
        struct settings_mark *mark = &point->marks[point->mark_count++];
        mark->name = settings_work_string(object, "points[].marks[].name");
        mark->depth_m = settings_work_number(object, "points[].marks[].depth_m");
        mark->is_trafficked = settings_work_truth(object, "points[].marks[].trafficked");
        struct json_value *depth = settings_work_member(object, "points[].marks[].depth_m");
        const struct json_value *depth_before = settings_work_member(last, "points[].marks[].depth_m");
        const char *name_before = settings_work_string(last, "points[].marks[].name");
        if (depth != NULL && depth_before != NULL && depth->number <= depth_before->number)
            json_tree_fault(work->report, depth,
                            "is %s the mark before it, '%s' %.*s (line %zu): expected rising marks",
                            depth->number < depth_before->number ? "below" : "no higher than",
                            name_before != NULL ? name_before : "?", (int)depth_before->raw_length, depth_before->raw,
                            depth_before->line);
        for (size_t m = 0; mark->name != NULL && m + 1 < point->mark_count; m++)
            if (point->marks[m].name != NULL && strcmp(point->marks[m].name, mark->name) == 0) {
                json_tree_fault(work->report, settings_work_member(object, "points[].marks[].name"),
                                "is the name of another mark of this point: expected one of its own");
                break;
            }
    }
    return true;
}

static size_t mark_of_name(const struct settings_point *point, const char *name)
{
    for (size_t i = 0; i < point->mark_count; i++)
        if (point->marks[i].name != NULL && strcmp(point->marks[i].name, name) == 0)
            return i;
    return SETTINGS_NONE;
}

static void choose_closing_mark(struct settings_work *work, struct settings_point *point,
                                const struct json_value *object, struct json_value *marks)
{
    size_t lowest = SETTINGS_NONE;
    for (size_t i = point->mark_count; i-- > 0;)
        lowest = point->marks[i].is_trafficked ? i : lowest;
    struct json_value *stated = settings_work_member(object, "points[].closing_mark");
    point->closing_mark = lowest;
    if (stated == NULL) {
        settings_work_refuse(work, object, "points[].closing_mark_signed", "there is no closing_mark");
        if (lowest == SETTINGS_NONE && point->mark_count > 0 && settings_work_is_whole(marks) &&
            !settings_work_has(object, "points[].closing_mark"))
            json_tree_fault(work->report, marks,
                            "of which none is trafficked: expected one on the way of vehicles, or a "
                            "signed 'closing_mark'");
        return;
    }
    point->closing_mark = mark_of_name(point, stated->string);
    if (point->closing_mark == SETTINGS_NONE && settings_work_is_whole(marks)) {
        const char *names[20];
        size_t count = 0;
        for (; count < point->mark_count && count < 20; count++)
            names[count] = point->marks[count].name;
        const char *nearest = settings_report_nearest(stated->string, count, names);
        json_tree_fault(work->report, stated, "is not the name of a mark of this point: expected %s%s%s",
                        nearest != NULL ? "'" : "one of them", nearest != NULL ? nearest : "",
                        nearest != NULL ? "'?" : "");
    } else if (point->closing_mark != lowest && settings_work_is_whole(marks)) {
        settings_work_need(work, object, "points[].closing_mark_signed",
                           "the closing mark is not the lowest trafficked one");
    }
}

static void choose_deck_mark(struct settings_work *work, struct settings_point *point, const struct json_value *marks)
{
    size_t by_key = SETTINGS_NONE;
    size_t by_name = SETTINGS_NONE;
    size_t mark = 0;
    const struct json_value *object;
    for (size_t i = 0; (object = settings_work_next(marks, &i)) != NULL; mark++) {
        if (settings_work_truth(object, "points[].marks[].deck")) {
            if (by_key != SETTINGS_NONE)
                json_tree_fault(work->report, settings_work_member(object, "points[].marks[].deck"),
                                "is the second deck of this point: expected one");
            else
                by_key = mark;
        }
        if (by_name == SETTINGS_NONE && has_word_deck(point->marks[mark].name))
            by_name = mark;
    }
    point->deck_mark = by_key != SETTINGS_NONE ? by_key : by_name != SETTINGS_NONE ? by_name : point->closing_mark;
}

static bool build_marks(struct settings_work *work, struct settings_point *point, const struct json_value *object)
{
    struct json_value *marks = settings_work_member(object, "points[].marks");
    if (!build_mark_list(work, point, marks))
        return false;
    choose_closing_mark(work, point, object, marks);
    choose_deck_mark(work, point, marks);
    return true;
}

/* --- policy --- */

static void build_policy(struct settings_work *work, struct settings_point *point, const struct json_value *object)
{
    const struct json_value *crew = settings_work_member(object, "points[].crew");
    const struct json_value *reopen = settings_work_member(object, "points[].reopen");
    point->has_crew = crew != NULL;
    point->policy = (struct advice_policy){
        .muster_chance = settings_work_number(object, "points[].muster_chance"),
        .slack_s = (double)work->settings->forecast_every_s + SLACK_BEYOND_CYCLE_S,
        .step_down_chance = settings_work_number(object, "points[].step_down_chance"),
        .step_down_dwell_s = settings_work_number(object, "points[].step_down_dwell_min") * MINUTE_S,
        .blind_dead_s = settings_work_number(object, "points[].blind_dead_h") * HOUR_S,
        .reopen_hold_s = settings_work_number(reopen, "points[].reopen.hold_min") * MINUTE_S,
        .reopen_return_chance = settings_work_number(reopen, "points[].reopen.return_chance"),
        .act_by_shift_s = settings_work_number(object, "points[].act_by_shift_min") * MINUTE_S};
    if (crew != NULL) {
        point->policy.crew_day_s = settings_work_number(crew, "points[].crew.day_min") * MINUTE_S;
        point->policy.crew_night_s = settings_work_number(crew, "points[].crew.night_min") * MINUTE_S;
        point->policy.margin_s = settings_work_number(crew, "points[].crew.margin_min") * MINUTE_S;
    }
    point->reopen_below_m = settings_work_number(reopen, "points[].reopen.below_m");
    point->reopen_and_reclose_s = settings_work_seconds(reopen, "points[].reopen.reopen_and_reclose_min", MINUTE_S);
    struct json_value *down = settings_work_member(object, "points[].step_down_chance");
    struct json_value *muster = settings_work_member(object, "points[].muster_chance");
    if (point->policy.step_down_chance > point->policy.muster_chance)
        json_tree_fault(work->report, down != NULL ? down : muster,
                        "makes advice flap: expected step_down_chance (%.10g) at most muster_chance (%.10g)",
                        point->policy.step_down_chance, point->policy.muster_chance);
}

/* --- triggers --- */

static void build_trigger(struct settings_work *work, struct settings_trigger *trigger,
                          const struct json_value *object)
{
    static const char stage[] = "points[].triggers[].stage_m", discharge[] = "points[].triggers[].discharge_m3s";
    const char *gauge_id = settings_work_string(object, "points[].triggers[].gauge");
    trigger->gauge = gauge_id != NULL ? settings_gauge_index(work->settings, gauge_id) : SETTINGS_NONE;
    trigger->needs_rising = settings_work_truth(object, "points[].triggers[].rising");
    trigger->signed_by = settings_work_string(object, "points[].triggers[].signed");
    if (trigger->gauge == SETTINGS_NONE)
        return;
    bool is_stage = work->settings->gauges[trigger->gauge].measures == SETTINGS_STAGE;
    const char *why = is_stage ? "the gauge measures stage" : "the gauge measures discharge";
    settings_work_need(work, object, is_stage ? stage : discharge, why);
    settings_work_refuse(work, object, is_stage ? discharge : stage, why);
    trigger->value = settings_work_number(object, is_stage ? stage : discharge);
}

static bool build_triggers(struct settings_work *work, struct settings_point *point, const struct json_value *object)
{
    const struct json_value *triggers = settings_work_member(object, "points[].triggers");
    point->triggers = arena_take(work->arena, settings_work_count(triggers), sizeof *point->triggers);
    if (point->triggers == NULL)
        return false;
    const struct json_value *trigger;
    for (size_t i = 0; (trigger = settings_work_next(triggers, &i)) != NULL;)
        build_trigger(work, &point->triggers[point->trigger_count++], trigger);
    return true;
}

/* --- a level of its own --- */

static bool build_rows(struct settings_work *work, const struct json_value *rows, size_t *count_out,
                       double **discharge_out_m3s, double **stage_out_m)
{
    size_t count = settings_work_count(rows);
    *discharge_out_m3s = arena_take(work->arena, count, sizeof **discharge_out_m3s);
    *stage_out_m = arena_take(work->arena, count, sizeof **stage_out_m);
    if (*discharge_out_m3s == NULL || *stage_out_m == NULL)
        return false;
    if (!settings_work_is_whole(rows))
        return true;
    const struct json_value *last = NULL;
    const struct json_value *row;
    for (size_t i = 0; (row = settings_work_next(rows, &i)) != NULL; last = row, ++*count_out) {
        (*discharge_out_m3s)[*count_out] = row->children[0].number;
        (*stage_out_m)[*count_out] = row->children[1].number;
        if (last != NULL && row->children[0].number <= last->children[0].number)
            json_tree_fault(work->report, &row->children[0],
                            "is not above the discharge of the row before, %.10g (line %zu): expected rising rows",
                            last->children[0].number, last->line);
        if (last != NULL && row->children[1].number < last->children[1].number)
            json_tree_fault(work->report, &row->children[1],
                            "is below the stage of the row before, %.10g (line %zu): expected one that never falls",
                            last->children[1].number, last->line);
    }
    return true;
}

static bool build_stage_rating(struct settings_work *work, struct settings_point *point,
                               const struct json_value *object)
{
    struct json_value *rating = settings_work_member(object, "points[].stage_rating");
    struct json_value *weir = settings_work_member(rating, "points[].stage_rating.weir");
    bool has_rows = settings_work_has(rating, "points[].stage_rating.clean");
    if (rating != NULL && has_rows == settings_work_has(rating, "points[].stage_rating.weir"))
        json_tree_fault(work->report, rating,
                        "'clean' and 'weir' are both there or both missing: expected one of them");
    if (!has_rows)
        settings_work_refuse(work, rating, "points[].stage_rating.part_blocked",
                             "it goes with clean; a weir has its own");
    if (weir != NULL && !has_rows)
        return settings_build_weir(work, point, weir);
    return build_rows(work, settings_work_member(rating, "points[].stage_rating.clean"), &point->stage_row_count,
                      &point->stage_row_discharge_m3s, &point->stage_row_stage_m) &&
           build_rows(work, settings_work_member(rating, "points[].stage_rating.part_blocked"),
                      &point->blocked_row_count, &point->blocked_row_discharge_m3s, &point->blocked_row_stage_m);
}

/* --- what hangs on other crossings --- */

static void check_not_itself(struct settings_work *work, const struct settings_point *point, struct json_value *other)
{
    if (other != NULL && point->id != NULL && strcmp(other->string, point->id) == 0)
        json_tree_fault(work->report, other, "is this point itself: expected another");
}

static bool build_texts(struct settings_work *work, const struct json_value *array, size_t *count_out,
                        const char ***texts_out)
{
    *texts_out = arena_take(work->arena, settings_work_count(array), sizeof **texts_out);
    if (*texts_out == NULL)
        return false;
    const struct json_value *text;
    for (size_t i = 0; (text = settings_work_next(array, &i)) != NULL;)
        (*texts_out)[(*count_out)++] = text->string;
    return true;
}

static bool build_others(struct settings_work *work, struct settings_point *point, const struct json_value *object)
{
    point->detour_over = settings_work_string(object, "points[].detour_over");
    check_not_itself(work, point, settings_work_member(object, "points[].detour_over"));
    const struct json_value *access = settings_work_member(object, "points[].access_over");
    struct json_value *over;
    for (size_t i = 0; (over = settings_work_next(access, &i)) != NULL;)
        check_not_itself(work, point, over);
    return build_texts(work, access, &point->access_over_count, &point->access_over) &&
           build_texts(work, settings_work_member(object, "points[].cannot_see"), &point->cannot_see_count,
                       &point->cannot_see);
}

/* --- the whole --- */

static bool build_point(struct settings_work *work, struct settings_point *point, const struct json_value *object)
{
    point->id = settings_work_string(object, "points[].id");
    point->name = settings_work_string(object, "points[].name");
    if (point->name == NULL)
        point->name = point->id;
    point->invert_m = settings_work_number(object, "points[].invert_m");
    place(work, point, object);
    build_policy(work, point, object);
    if (!build_marks(work, point, object))
        return false;
    if (!build_triggers(work, point, object) || !build_stage_rating(work, point, object))
        return false;
    settings_build_deck(work, point, object);
    return build_others(work, point, object);
}

static bool give_points_to_river(struct settings_work *work)
{
    struct settings *settings = work->settings;
    struct network_point *built = arena_take(work->arena, settings->point_count, sizeof *built);
    if (built == NULL)
        return false;
    for (size_t i = 0; i < settings->point_count; i++) {
        const struct settings_point *point = &settings->points[i];
        built[i] = (struct network_point){
            .id = point->id, .reach_index = point->reach, .at_m = point->at_m, .structure = point->structure};
        if (point->structure == NULL)
            built[i].stage_rating = (struct network_stage_rating){.row_count = point->stage_row_count,
                                                                  .discharge_m3s = point->stage_row_discharge_m3s,
                                                                  .stage_m = point->stage_row_stage_m};
    }
    settings->river.point_count = settings->point_count;
    settings->river.points = built;
    return true;
}

bool settings_build_points(struct settings_work *work)
{
    struct settings *settings = work->settings;
    const struct json_value *points = settings_work_member(work->root, "points");
    settings->points = arena_take(work->arena, settings_work_count(points), sizeof *settings->points);
    if (settings->points == NULL)
        return false;
    const struct json_value *object;
    for (size_t i = 0; (object = settings_work_next(points, &i)) != NULL;)
        if (!build_point(work, &settings->points[settings->point_count++], object))
            return false;
    return give_points_to_river(work);
}
