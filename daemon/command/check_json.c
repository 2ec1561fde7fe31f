/* SPDX-License-Identifier: MIT */
#include "daemon/command/check_json.h"

#include <cjson/cJSON.h>
#include <math.h>
#include <stdio.h>
#include <stdlib.h>

#include "daemon/command/check_deck.h"
#include "daemon/command/check_reach.h"
#include "daemon/command/check_season.h"
#include "daemon/command/check_survey.h"
#include "daemon/tell/sentence.h"

/* null for what is not known */
static void add(cJSON *object, const char *name, double value)
{
    if (isfinite(value))
        cJSON_AddNumberToObject(object, name, value);
    else
        cJSON_AddNullToObject(object, name);
}

static cJSON *add_object(cJSON *array)
{
    cJSON *object = cJSON_CreateObject();
    cJSON_AddItemToArray(array, object);
    return object;
}

static void add_flood(cJSON *object, const struct method_flood *flood)
{
    bool is_known = flood->rise_s > 0.0;
    add(object, "base_m3s", is_known ? flood->base_m3s : NAN);
    add(object, "peak_m3s", is_known ? flood->peak_m3s : NAN);
    add(object, "rise_s", is_known ? flood->rise_s : NAN);
}

static void add_gauge(cJSON *array, const struct settings_gauge *gauge)
{
    cJSON *object = add_object(array);
    cJSON_AddStringToObject(object, "id", gauge->id);
    cJSON *flood = cJSON_AddObjectToObject(object, "flood");
    cJSON_AddStringToObject(flood, "from", check_reach_flood_word(gauge->flood_from));
    add_flood(flood, &gauge->flood);
}

static void add_choice(cJSON *object, const struct method_choice *choice)
{
    cJSON_AddStringToObject(object, "why", method_reason_text(choice->reason));
    cJSON_AddStringToObject(object, "auto_would_take", method_name(choice->advised));
    add_flood(cJSON_AddObjectToObject(object, "flood"), &choice->flood);
    add(object, "way_m", choice->path_length_m);
    add(object, "eps", choice->spread_number);
    add(object, "lam", choice->length_number);
    add(object, "number", choice->storage_number);
    add(object, "number_limit", METHOD_STORAGE_LIMIT);
    add(object, "worst_number", choice->worst_number);
    add(object, "worst_at_m3s", choice->at_discharge_m3s);
    add(object, "froude_at_peak", choice->froude);
    add(object, "raised_at_foot_share", choice->raise_share);
    cJSON *published = cJSON_AddObjectToObject(object, "ponce_li_simons_1978");
    add(published, "kinematic_number", choice->kinematic_number);
    add(published, "kinematic_from", METHOD_KINEMATIC_LIMIT);
    add(published, "diffusion_number", choice->diffusion_number);
    add(published, "diffusion_from", METHOD_DIFFUSION_LIMIT);
}

static void add_roughness(cJSON *flow, const char *name, const struct network_reach_flow *changed,
                          const struct network_reach_flow *as_given)
{
    cJSON *object = cJSON_AddObjectToObject(flow, name);
    add(object, "travel_time_s", changed->travel_time_s - as_given->travel_time_s);
    add(object, "depth_m", changed->depth_m - as_given->depth_m);
}

static void add_reach(cJSON *array, const struct check_reach *found)
{
    cJSON *object = add_object(array);
    cJSON_AddStringToObject(object, "id", found->reach->id);
    cJSON_AddStringToObject(object, "method", method_name(found->choice.method));
    add_choice(object, &found->choice);
    add(object, "length_m", found->reach->length_m);
    add(object, "slope_m_per_m", found->reach->slope_m_per_m);
    add(object, "cells", (double)found->steps.cell_count);
    add(object, "cell_m", found->steps.cell_m);
    add(object, "time_step_s", found->steps.time_step_s);
    add(object, "bank_full_m3s", found->bank_full_m3s);
    add(object, "peak_m3s", found->peak_m3s);
    add(object, "fit_for_rises_longer_than_s", found->least_rise_s);
    struct check_survey survey = check_survey_of(found->reach);
    add(object, "surveyed_to_m", survey.top_m);
    add(object, "surveyed_to_m3s", survey.top_m3s);
    cJSON *flows = cJSON_AddArrayToObject(object, "flows");
    for (size_t index = 0; index < found->flow_count; index++) {
        const struct network_reach_flow *as_given = &found->flows[index].as_given;
        cJSON *flow = add_object(flows);
        add(flow, "discharge_m3s", as_given->discharge_m3s);
        add(flow, "depth_m", as_given->depth_m);
        add(flow, "celerity_m_s", as_given->celerity_m_s);
        add(flow, "travel_time_s", as_given->travel_time_s);
        add(flow, "courant_number", as_given->courant_number);
        add_roughness(flow, "with_roughness_x0.8", &found->flows[index].smoother, as_given);
        add_roughness(flow, "with_roughness_x1.2", &found->flows[index].rougher, as_given);
    }
}

static void add_lead(cJSON *array, const char *gauge_id, const struct check_lead *lead)
{
    cJSON *object = add_object(array);
    cJSON_AddStringToObject(object, "gauge", gauge_id);
    add(object, "closing_mark_m3s", lead->closing_m3s);
    add(object, "closing_mark_travel_s", lead->closing_travel_s);
    add(object, "fastest_wave_m3s", lead->fastest_m3s);
    add(object, "fastest_wave_travel_s", lead->fastest_travel_s);
    add(object, "not_felt_before_s", lead->not_felt_before_s);
    add(object, "reading_and_delivery_s", lead->lag_s);
    add(object, "lead_slow_rise_s", lead->slow_rise_s);
    add(object, "lead_fastest_rise_s", lead->fastest_rise_s);
}

static void add_deck(cJSON *object, const struct check_facts *facts, size_t index, bool is_above[])
{
    const struct settings_point *point = &facts->settings->points[index];
    struct check_deck found;
    if (!point->has_deck) {
        cJSON_AddNullToObject(object, "deck");
        return;
    }
    check_deck_find(facts, index, is_above, &found);
    cJSON *deck = cJSON_AddObjectToObject(object, "deck");
    cJSON_AddStringToObject(deck, "kind", point->deck.kind == HAZARD_DECK_IS_WEIR ? "weir" : "section");
    cJSON_AddStringToObject(deck, "note", DECK_CAUTION);
    add(deck, "level_m", point->deck.level_m);
    add(deck, "awash_m3s", found.awash_m3s);
    cJSON *limits = cJSON_AddArrayToObject(deck, "limits_passed");
    for (size_t i = 0; i < found.limit_count; i++) {
        const struct check_deck_limit *passed = &found.limits[i];
        const struct hazard_limit *limit = hazard_limit_for(passed->whom);
        cJSON *item = add_object(limits);
        cJSON_AddStringToObject(item, "for", deck_whom_name(passed->whom));
        cJSON_AddBoolToObject(item, "draft", limit->is_draft);
        cJSON_AddBoolToObject(item, "stationary", limit->is_draft);
        add(item, "limit", deck_measure_limit(limit, passed->by));
        cJSON_AddStringToObject(item, "unit", deck_measure_unit(passed->by));
        add(item, "stage_m", passed->stage_m);
        add(item, "discharge_m3s", passed->discharge_m3s);
        add(item, "after_awash_in_fastest_rise_s", passed->after_awash_s);
    }
}

static void add_point(cJSON *array, const struct check_facts *facts, size_t index, bool is_above[])
{
    const struct settings *settings = facts->settings;
    const struct settings_point *point = &settings->points[index];
    cJSON *object = add_object(array);
    cJSON_AddStringToObject(object, "id", point->id);
    cJSON_AddStringToObject(object, "closing_mark", point->marks[point->closing_mark].name);
    add(object, "closing_mark_m", point->marks[point->closing_mark].depth_m);
    add(object, "need_day_s", point->has_crew ? point->policy.crew_day_s + point->policy.margin_s : NAN);
    add(object, "need_night_s", point->has_crew ? point->policy.crew_night_s + point->policy.margin_s : NAN);
    add(object, "triggers", (double)point->trigger_count);
    cJSON *leads = cJSON_AddArrayToObject(object, "gauges");
    settings_gauges_above(settings, index, is_above);
    for (size_t gauge = 0; gauge < settings->gauge_count; gauge++) {
        struct check_lead lead;
        if (!is_above[gauge])
            continue;
        check_facts_lead(facts, gauge, index, &lead);
        add_lead(leads, settings->gauges[gauge].id, &lead);
    }
    add(object, "deck_by_own_rating_m3s", check_deck_rated_m3s(point, false));
    add(object, "deck_by_own_rating_part_blocked_m3s", check_deck_rated_m3s(point, true));
    add_deck(object, facts, index, is_above);
}

struct season_list {
    const struct settings *settings;
    cJSON *array;
};

static void add_season(void *with, int from_day, size_t reach, double travel_s, double discharge_m3s)
{
    struct season_list *list = with;
    cJSON *object = add_object(list->array);
    char from[8];
    snprintf(from, sizeof from, "%02d-%02d", from_day / 100 % 100, from_day % 100);
    cJSON_AddStringToObject(object, "from", from);
    cJSON_AddStringToObject(object, "reach", list->settings->river.reaches[reach].id);
    add(object, "discharge_m3s", discharge_m3s);
    add(object, "travel_time_s", travel_s);
}

enum fw_status check_json_print(const struct check_facts *facts, struct fw_error *error)
{
    const struct settings *settings = facts->settings;
    enum fw_status status = FW_OK;
    cJSON *object = cJSON_CreateObject();
    bool *is_above = calloc(settings->gauge_count + 1, sizeof *is_above);
    cJSON_AddStringToObject(object, "schema", "forewater.check.1");
    cJSON_AddStringToObject(object, "settings", settings->digest);
    cJSON_AddStringToObject(object, "caution", SENTENCE_CAUTION);
    cJSON *gauges = cJSON_AddArrayToObject(object, "gauges");
    for (size_t index = 0; index < settings->gauge_count; index++)
        add_gauge(gauges, &settings->gauges[index]);
    cJSON *reaches = cJSON_AddArrayToObject(object, "reaches");
    cJSON *points = cJSON_AddArrayToObject(object, "points");
    for (size_t index = 0; index < settings->river.reach_count && status == FW_OK; index++) {
        struct check_reach found;
        status = check_facts_reach(facts, index, &found, error);
        if (status == FW_OK)
            add_reach(reaches, &found);
    }
    struct season_list seasons = {settings, cJSON_AddArrayToObject(object, "seasons")};
    if (status == FW_OK)
        status = check_season_each(facts, add_season, &seasons, error);
    for (size_t index = 0; index < settings->point_count && is_above != NULL; index++)
        add_point(points, facts, index, is_above);
    char *text = status == FW_OK && is_above != NULL ? cJSON_Print(object) : NULL;
    if (text != NULL)
        printf("%s\n", text);
    else if (status == FW_OK)
        status = fw_error_set(error, FW_NO_MEMORY, "no memory");
    cJSON_free(text);
    cJSON_Delete(object);
    free(is_above);
    return status;
}
