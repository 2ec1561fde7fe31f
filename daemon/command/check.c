/* SPDX-License-Identifier: MIT */
/* Reads the configuration and says what it means in minutes. */
#include "daemon/command/command.h"

#include <math.h>
#include <stdio.h>
#include <stdlib.h>

#include "daemon/command/check_deck.h"
#include "daemon/command/check_facts.h"
#include "daemon/command/check_json.h"
#include "daemon/command/check_reach.h"
#include "daemon/command/check_season.h"
#include "daemon/command/check_survey.h"
#include "daemon/command/options.h"

/* --- points ------------------------------------------------------------------------------------------------------- */

static void print_margin(double margin_s)
{
    if (margin_s >= 0.0)
        printf("enough by %.0f min", margin_s / 60.0);
    else
        printf("SHORT by %.0f min", -margin_s / 60.0);
}

static bool print_need(const struct settings_point *point, const char *when, double crew_s,
                       const struct check_lead *lead)
{
    double need_s = crew_s + point->policy.margin_s;
    printf("    %-5s need %3.0f min (crew %.0f + margin %.0f): in a slow rise ", when, need_s / 60.0, crew_s / 60.0,
           point->policy.margin_s / 60.0);
    print_margin(lead->slow_rise_s - need_s);
    printf(", in the fastest ");
    print_margin(lead->fastest_rise_s - need_s);
    printf("\n");
    return lead->slow_rise_s >= need_s;
}

static void print_triggers(const struct settings *settings, const struct settings_point *point)
{
    for (size_t index = 0; index < point->trigger_count; index++) {
        const struct settings_gauge *gauge = &settings->gauges[point->triggers[index].gauge];
        printf(
            "    trigger: %s at %.2f %s%s gives SEND, signed by %s; a rise carried forward counts while the gauge is "
            "silent\n",
            gauge->name, point->triggers[index].value, gauge->measures == SETTINGS_STAGE ? "m" : "m3/s",
            point->triggers[index].needs_rising ? " and rising" : "", point->triggers[index].signed_by);
    }
}

/* What one gauge upstream is worth for a point; false: nothing makes up for a lead that is too short. */
static bool print_gauge(const struct check_facts *facts, size_t index, size_t gauge)
{
    const struct settings_point *point = &facts->settings->points[index];
    const struct settings_gauge *known = &facts->settings->gauges[gauge];
    struct check_lead lead;
    check_facts_lead(facts, gauge, index, &lead);
    printf("    from %s: the closing mark's own flow, %.0f m3/s, travels %.0f min; the fastest wave, %.0f m3/s with "
           "roughness x%.1f, %.0f min; no change there is felt in less than %.0f min\n",
           known->name, lead.closing_m3s, lead.closing_travel_s / 60.0, lead.fastest_m3s, facts->fastest_roughness,
           lead.fastest_travel_s / 60.0, floor(lead.not_felt_before_s / 60.0));
    printf(
        "    lead on measured water, less %.0f min (a reading every %.0f, delivery %.0f): %.0f min in a slow rise, "
        "%.0f in the fastest\n",
        lead.lag_s / 60.0, (double)known->expect_every_s / 60.0, (double)known->delivery_s / 60.0,
        lead.slow_rise_s / 60.0, lead.fastest_rise_s / 60.0);
    if (!point->has_crew)
        return true;
    bool is_day = print_need(point, "day", point->policy.crew_day_s, &lead);
    bool is_night = print_need(point, "night", point->policy.crew_night_s, &lead);
    double longest_need_s = fmax(point->policy.crew_day_s, point->policy.crew_night_s) + point->policy.margin_s;
    if (is_day && is_night && lead.fastest_rise_s < longest_need_s && point->trigger_count == 0)
        printf(
            "    note: in the fastest rise %s alone is too late here; MUSTER on assumed water, or a signed trigger, "
            "has to gain the time\n",
            known->name);
    if (is_day && is_night)
        return true;
    printf("    ** %s alone cannot protect this crossing %s: %s\n", known->name,
           is_day     ? "at night"
           : is_night ? "by day"
                      : "at night, nor by day",
           point->trigger_count > 0 ? "the signed trigger below has to gain the time"
                                    : "an engineer must sign a trigger, or a gauge further up is needed");
    return point->trigger_count > 0;
}

static bool print_point(const struct check_facts *facts, size_t index, bool is_above[])
{
    const struct settings *settings = facts->settings;
    const struct settings_point *point = &settings->points[index];
    bool is_protected = true;
    printf("%s (%s): closing mark '%s' at %.2f m above invert, %.2f m %s\n", point->name, point->id,
           point->marks[point->closing_mark].name, point->marks[point->closing_mark].depth_m,
           point->invert_m + point->marks[point->closing_mark].depth_m, settings->datum);
    settings_gauges_above(settings, index, is_above);
    for (size_t gauge = 0; gauge < settings->gauge_count; gauge++)
        if (is_above[gauge])
            is_protected &= print_gauge(facts, index, gauge);
    if (!point->has_crew)
        printf("    watched only: no crew is stated, no one is sent\n");
    print_triggers(settings, point);
    check_deck_print(facts, index, is_above);
    return is_protected;
}

/* --- the whole ---------------------------------------------------------------------------------------------------- */

static enum fw_status print_all(const struct check_facts *facts, struct fw_error *error)
{
    const struct settings *settings = facts->settings;
    bool *is_above = calloc(settings->gauge_count + 1, sizeof *is_above);
    if (is_above == NULL)
        return fw_error_set(error, FW_NO_MEMORY, "no memory");
    printf("%s: no faults. District %s, datum %s, settings %.8s\n\n", settings->file, settings->district_name,
           settings->datum, settings->digest);
    enum fw_status status = FW_OK;
    check_reach_print_floods(settings);
    for (size_t reach = 0; reach < settings->river.reach_count && status == FW_OK; reach++)
        status = check_reach_print(facts, reach, error);
    if (status == FW_OK)
        status = check_season_print(facts, error);
    check_reach_print_legend();
    printf("\n");
    check_survey_print(facts);
    bool is_protected = true;
    for (size_t point = 0; point < settings->point_count && status == FW_OK; point++)
        is_protected &= print_point(facts, point, is_above);
    printf("\nThe future inflow is a stated set of runs (held, last rise carried forward, recession; roughness");
    for (size_t index = 0; index < settings->roughness_factor_count; index++)
        printf(" x%.2g", settings->roughness_factors[index]);
    printf("), uncalibrated. 'forecast.members' is kept for later.\n");
    command_print_caution();
    if (status == FW_OK && !is_protected)
        printf("** at least one crossing is protected in time neither by a gauge alone nor by a trigger; see ** "
               "above\n");
    free(is_above);
    return status;
}

static enum fw_status print_reference(bool is_schema, struct fw_error *error)
{
    struct text text = {0};
    enum fw_status status = is_schema ? settings_schema(&text) : settings_manual(&text);
    if (status == FW_OK)
        printf("%s", text_string(&text));
    else
        fw_error_set(error, status, "no memory");
    text_clear(&text);
    return status;
}

enum fw_status command_check(int argument_count, char *arguments[], struct fw_error *error)
{
    struct option_values config = {0}, json = {0}, schema = {0}, manual = {0};
    const struct option_spec options[] = {
        {"config", "FILE", "the configuration (default " COMMAND_DEFAULT_CONFIG ")", &config},
        {"json", NULL, "the same facts as one JSON object", &json},
        {"schema", NULL, "print the JSON Schema of the configuration instead", &schema},
        {"manual", NULL, "print every key of the configuration instead", &manual},
        {NULL, NULL, NULL, NULL}};
    const struct command_line line = {
        "check", "",
        "Reads the configuration, tells every fault with its place, and says what it means in minutes.\n"
        "Exit 0: no faults; 78: faults; 1 is not used. A crossing that no gauge can protect in time is told, not "
        "refused.",
        options};
    struct settings *settings = NULL;
    struct check_facts facts = {0};
    int rest = 0;
    enum fw_status status = options_read(&line, argument_count, arguments, &rest, error);
    if (status == FW_OK && rest < argument_count)
        status = fw_error_set(error, FW_USAGE, "check: '%s' is not expected here", arguments[rest]);
    if (status != FW_OK)
        return status;
    if (schema.count > 0 || manual.count > 0)
        return print_reference(schema.count > 0, error);
    status = command_read_settings(option_text(&config, COMMAND_DEFAULT_CONFIG), SETTINGS_FOR_RUN, &settings, error);
    if (status != FW_OK)
        return status;
    status = check_facts_open(&facts, settings, error);
    if (status == FW_OK)
        status = json.count > 0 ? check_json_print(&facts, error) : print_all(&facts, error);
    check_facts_clear(&facts);
    settings_destroy(settings);
    return status;
}
