/* SPDX-License-Identifier: MIT */
/* Reads the configuration and says what it means in minutes. */
#include "daemon/command/command.h"

#include <math.h>
#include <stdio.h>
#include <stdlib.h>

#include "daemon/command/options.h"
#include "daemon/tell/sentence.h"
#include "engine/method.h"

enum { FLOW_COUNT = 6, SEARCH_COUNT = 256 };

struct check {
    const struct settings *settings;
    struct network *network;
    double flows_m3s[FLOW_COUNT]; /* from low to twice what the gauges have at 1.25 times their highest gauging */
    double slowest_roughness, fastest_roughness;
};

/* --- reaches ------------------------------------------------------------------------------------------------------ */

/* A hair below it, where the wave is still the channel's; NAN: not known. */
static double bank_full_m3s(const struct network_reach *reach)
{
    static const double hair = 1e-3;
    return reach->section->has_plain ? section_normal_discharge_m3s(reach->section, reach->slope_m_per_m,
                                                                    reach->section->plain_above_m * (1.0 - hair))
                                     : NAN;
}

/* The flows of the table, and bank full among them where it is known; how many. */
static size_t reach_flows(const struct check *check, double bank_full, double flows_out[FLOW_COUNT + 1])
{
    size_t count = 0;
    bool has_bank_full = bank_full > check->flows_m3s[0] && bank_full < check->flows_m3s[FLOW_COUNT - 1];
    for (size_t flow = 0; flow < FLOW_COUNT; flow++) {
        if (has_bank_full && bank_full <= check->flows_m3s[flow]) {
            flows_out[count++] = bank_full;
            has_bank_full = false;
        }
        if (count == 0 || check->flows_m3s[flow] > flows_out[count - 1])
            flows_out[count++] = check->flows_m3s[flow];
    }
    return count;
}

static void print_flows(size_t count, const struct network_reach_flow flows[], double bank_full)
{
    for (size_t flow = 0; flow < count; flow++)
        printf("    %8.1f m3/s  depth %5.2f m  wave %4.2f m/s  travel %5.0f min  Courant %4.2f%s\n",
               flows[flow].discharge_m3s, flows[flow].depth_m, flows[flow].celerity_m_s,
               flows[flow].travel_time_s / 60.0, flows[flow].courant_number,
               flows[flow].discharge_m3s == bank_full ? "  bank full" : "");
    for (size_t flow = 1; flow < count; flow++)
        if (flows[flow].travel_time_s > 1.05 * flows[flow - 1].travel_time_s) {
            printf(
                "    note: above %.0f m3/s the wave is SLOWER (water spreads): the peak of a bigger flood can arrive "
                "later; its front does not\n",
                flows[flow - 1].discharge_m3s);
            break;
        }
}

/* How quick a flood may rise before the method is no longer fit, taken at the flow of its peak (engine/method.h). */
static void print_fit(const struct check *check, size_t index, const struct network_reach *reach)
{
    struct network_reach_steps steps;
    struct network_reach_flow peak;
    double peak_m3s = check->flows_m3s[FLOW_COUNT - 2];
    if (network_reach_summary(check->network, index, 1.0, 1, &peak_m3s, &steps, &peak) != FW_OK)
        return;
    double least_rise_s = method_storage_least_rise_s(reach->length_m, peak.celerity_m_s, peak.diffusivity_m2_s);
    printf(
        "    fit for floods that rise to %.0f m3/s in %.0f min or more; in quicker ones this method's peak comes out "
        "LATE and low\n",
        peak_m3s, ceil(least_rise_s / 60.0));
}

static enum fw_status print_reach(const struct check *check, size_t index, struct fw_error *error)
{
    static const char *const method_names[] = {[NETWORK_MUSKINGUM_CUNGE] = "muskingum-cunge",
                                               [NETWORK_KINEMATIC] = "kinematic",
                                               [NETWORK_KINEMATIC_LINEAR] = "kinematic-linear"};
    const struct network_reach *reach = &check->settings->river.reaches[index];
    double bank_full = bank_full_m3s(reach), flows_m3s[FLOW_COUNT + 1];
    size_t count = reach_flows(check, bank_full, flows_m3s);
    struct network_reach_steps steps = {0};
    struct network_reach_flow flows[FLOW_COUNT + 1];
    enum fw_status status = network_reach_summary(check->network, index, 1.0, count, flows_m3s, &steps, flows);
    if (status != FW_OK)
        return fw_error_set(error, status, "reach '%s': its flows cannot be computed", reach->id);
    printf("reach %s: %.0f m, slope %g, method %s, %zu cells of %.0f m, steps of %g s\n", reach->id, reach->length_m,
           reach->slope_m_per_m, method_names[reach->method], steps.cell_count, steps.cell_m, steps.time_step_s);
    print_flows(count, flows, bank_full);
    print_fit(check, index, reach);
    return FW_OK;
}

/* --- points ------------------------------------------------------------------------------------------------------- */

/* Down the path from a gauge to a point at one flow; NAN: it cannot be computed. */
static double path_travel_time_s(const struct check *check, size_t gauge, size_t point, double roughness_factor,
                                 double flow_m3s)
{
    const struct network_river *river = &check->settings->river;
    const struct network_point *place = &river->points[point];
    size_t node = check->settings->gauges[gauge].node;
    double total_s = 0.0;
    for (size_t reach; (reach = network_reach_from(river, node)) != NETWORK_NONE;
         node = river->reaches[reach].to_node) {
        struct network_reach_steps steps;
        struct network_reach_flow flow;
        if (network_reach_summary(check->network, reach, roughness_factor, 1, &flow_m3s, &steps, &flow) != FW_OK)
            return NAN;
        if (reach == place->reach_index)
            return total_s + flow.travel_time_s * place->at_m / river->reaches[reach].length_m;
        total_s += flow.travel_time_s;
    }
    return NAN;
}

struct wave {
    double flow_m3s, travel_s;
};

/*
 * Of all flows of the table's range the one that travels fastest: a later part of a flood overtakes the earlier ones,
 * and in a fast rise what wets the road comes with it. Sought finely, as it stands just below bank full.
 */
static struct wave fastest_wave(const struct check *check, size_t gauge, size_t point, double roughness_factor)
{
    double octaves = log2(check->flows_m3s[FLOW_COUNT - 1] / check->flows_m3s[0]);
    struct wave fastest = {NAN, INFINITY};
    for (size_t index = 0; index <= SEARCH_COUNT; index++) {
        double flow_m3s = check->flows_m3s[0] * exp2(octaves * (double)index / SEARCH_COUNT);
        double travel_s = path_travel_time_s(check, gauge, point, roughness_factor, flow_m3s);
        if (travel_s < fastest.travel_s)
            fastest = (struct wave){flow_m3s, travel_s};
    }
    return fastest;
}

/* The flow that brings the point's level to its closing mark, not above the table's range. */
static double closing_flow_m3s(const struct check *check, size_t point)
{
    const struct settings_point *known = &check->settings->points[point];
    double depth_m = known->marks[known->closing_mark].depth_m;
    double low_m3s = 0.0, high_m3s = check->flows_m3s[FLOW_COUNT - 1];
    for (int halving = 0; halving < 60; halving++) {
        double middle_m3s = 0.5 * (low_m3s + high_m3s);
        if (network_point_stage_m(check->network, point, 0, middle_m3s) < depth_m)
            low_m3s = middle_m3s;
        else
            high_m3s = middle_m3s;
    }
    return high_m3s;
}

struct lead {
    double best_s;  /* of a slow rise: the closing mark's own wave */
    double least_s; /* of a fast one: the fastest wave over the smoothest bed */
};

static void print_margin(double margin_s)
{
    if (margin_s >= 0.0)
        printf("enough by %.0f min", margin_s / 60.0);
    else
        printf("SHORT by %.0f min", -margin_s / 60.0);
}

static bool print_need(const struct settings_point *point, const char *when, double crew_s, struct lead lead)
{
    double need_s = crew_s + point->policy.margin_s;
    printf("    %-5s need %3.0f min (crew %.0f + margin %.0f): in a slow rise ", when, need_s / 60.0, crew_s / 60.0,
           point->policy.margin_s / 60.0);
    print_margin(lead.best_s - need_s);
    printf(", in the fastest ");
    print_margin(lead.least_s - need_s);
    printf("\n");
    return lead.best_s >= need_s;
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
static bool print_gauge(const struct check *check, size_t index, size_t gauge)
{
    const struct settings_point *point = &check->settings->points[index];
    const struct settings_gauge *known = &check->settings->gauges[gauge];
    double lag_s = (double)(known->expect_every_s + known->delivery_s);
    double closing_m3s = closing_flow_m3s(check, index);
    double own_s = path_travel_time_s(check, gauge, index, 1.0, closing_m3s);
    struct wave fastest = fastest_wave(check, gauge, index, check->fastest_roughness);
    struct lead lead = {own_s - lag_s, fastest.travel_s - lag_s};
    printf("    from %s: the closing mark's own flow, %.0f m3/s, travels %.0f min; the fastest wave, %.0f m3/s with "
           "roughness x%.1f, %.0f min\n",
           known->name, closing_m3s, own_s / 60.0, fastest.flow_m3s, check->fastest_roughness,
           fastest.travel_s / 60.0);
    printf(
        "    lead on measured water, less %.0f min (a reading every %.0f, delivery %.0f): %.0f min in a slow rise, "
        "%.0f in the fastest\n",
        lag_s / 60.0, (double)known->expect_every_s / 60.0, (double)known->delivery_s / 60.0, lead.best_s / 60.0,
        lead.least_s / 60.0);
    if (!point->has_crew)
        return true;
    bool is_day = print_need(point, "day", point->policy.crew_day_s, lead);
    bool is_night = print_need(point, "night", point->policy.crew_night_s, lead);
    double longest_need_s = fmax(point->policy.crew_day_s, point->policy.crew_night_s) + point->policy.margin_s;
    if (is_day && is_night && lead.least_s < longest_need_s && point->trigger_count == 0)
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

static bool print_point(const struct check *check, size_t index, bool is_above[])
{
    const struct settings *settings = check->settings;
    const struct settings_point *point = &settings->points[index];
    bool is_protected = true;
    printf("%s (%s): closing mark '%s' at %.2f m above invert, %.2f m %s\n", point->name, point->id,
           point->marks[point->closing_mark].name, point->marks[point->closing_mark].depth_m,
           point->invert_m + point->marks[point->closing_mark].depth_m, settings->datum);
    settings_gauges_above(settings, index, is_above);
    for (size_t gauge = 0; gauge < settings->gauge_count; gauge++)
        if (is_above[gauge])
            is_protected &= print_gauge(check, index, gauge);
    if (!point->has_crew)
        printf("    watched only: no crew is stated, no one is sent\n");
    print_triggers(settings, point);
    return is_protected;
}

/* --- the whole ---------------------------------------------------------------------------------------------------- */

static double largest_flow_m3s(const struct settings *settings)
{
    double total_m3s = 0.0;
    for (size_t gauge = 0; gauge < settings->gauge_count; gauge++) {
        const struct settings_gauge *known = &settings->gauges[gauge];
        double value = isfinite(known->quality.highest) ? known->quality.highest : 10.0;
        if (known->measures == SETTINGS_STAGE && isfinite(known->rating.highest_gauged_m))
            value = 1.25 * known->rating.highest_gauged_m;
        total_m3s += known->measures == SETTINGS_STAGE ? rating_discharge_m3s(&known->rating, value, NULL) : value;
    }
    return total_m3s;
}

static enum fw_status open_network(struct check *check, struct fw_error *error)
{
    const struct settings *settings = check->settings;
    static const double one = 1.0;
    double largest_m3s = largest_flow_m3s(settings);
    struct network_fault fault = {{0}};
    struct network_options options = {.time_step_s = (double)settings->time_step_s,
                                      .group_count = 1,
                                      .roughness_factors = &one,
                                      .members_per_group = 1,
                                      .largest_discharge_m3s = 4.0 * largest_m3s,
                                      .typical_peak_m3s = largest_m3s};
    for (size_t flow = 0; flow < FLOW_COUNT; flow++)
        check->flows_m3s[flow] = largest_m3s * pow(2.0, (double)flow - (FLOW_COUNT - 2.0));
    check->fastest_roughness = check->slowest_roughness = 1.0;
    for (size_t index = 0; index < settings->roughness_factor_count; index++) {
        check->fastest_roughness = fmin(check->fastest_roughness, settings->roughness_factors[index]);
        check->slowest_roughness = fmax(check->slowest_roughness, settings->roughness_factors[index]);
    }
    enum fw_status status = network_create(&settings->river, &options, &check->network, &fault);
    return status == FW_OK ? FW_OK : fw_error_set(error, status, "%s: %s", settings->file, fault.text);
}

static enum fw_status print_all(struct check *check, bool *is_protected_out, struct fw_error *error)
{
    const struct settings *settings = check->settings;
    bool *is_above = calloc(settings->gauge_count + 1, sizeof *is_above);
    if (is_above == NULL)
        return fw_error_set(error, FW_NO_MEMORY, "no memory");
    printf("%s: no faults. District %s, datum %s, settings %.8s\n\n", settings->file, settings->district_name,
           settings->datum, settings->digest);
    enum fw_status status = FW_OK;
    for (size_t reach = 0; reach < settings->river.reach_count && status == FW_OK; reach++)
        status = print_reach(check, reach, error);
    printf("\n");
    *is_protected_out = true;
    for (size_t point = 0; point < settings->point_count && status == FW_OK; point++)
        *is_protected_out &= print_point(check, point, is_above);
    printf("\nThe future inflow is a stated set of runs (held, last rise carried forward, recession; roughness");
    for (size_t index = 0; index < settings->roughness_factor_count; index++)
        printf(" x%.2g", settings->roughness_factors[index]);
    printf("), uncalibrated. 'forecast.members' is kept for later.\n");
    command_print_caution();
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
    struct option_values config = {0}, schema = {0}, manual = {0};
    const struct option_spec options[] = {
        {"config", "FILE", "the configuration (default " COMMAND_DEFAULT_CONFIG ")", &config},
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
    struct check check = {0};
    bool is_protected = true;
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
    check.settings = settings;
    status = open_network(&check, error);
    if (status == FW_OK)
        status = print_all(&check, &is_protected, error);
    if (status == FW_OK && !is_protected)
        printf("** at least one crossing is protected in time neither by a gauge alone nor by a trigger; see ** "
               "above\n");
    network_destroy(check.network);
    settings_destroy(settings);
    return status;
}
