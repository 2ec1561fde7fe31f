/* SPDX-License-Identifier: MIT */
/* Routes hydrographs from files: the engine alone, no store, no clock. */
#include "daemon/command/command.h"

#include <errno.h>
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "daemon/command/options.h"
#include "daemon/command/table.h"
#include "daemon/facts.h"
#include "daemon/season.h"
#include "engine/method.h"

enum {
    STEPS_MOST = 4000000,
    HIGHEST_STAGE_M = 1000,
    SHORTEST_INTERVAL_S = 10, /* rows nearer than that do not set the pace */
    LARGEST_M3S = 100000      /* the whole flow of all gauges must stay under the 1e6 that a network takes */
};

struct hydrograph { /* at a gauge, at uneven times */
    size_t count;
    double *time_s;
    double *discharge_m3s;
    double *stage_m; /* NULL: the file has no such column */
};

struct route_plan {
    const struct settings *settings;
    struct network_reach *reaches; /* a copy, with the method asked for */
    struct network_point *points;  /* likewise, with one more for every gauge in mid-river */
    struct network_river river;
    struct hydrograph *inflow;   /* [gauge] */
    struct method_flood *floods; /* [gauge] */
    size_t *gauge_point;   /* [gauge]: where the flow that goes on from it is read; NETWORK_NONE: it is the inflow */
    bool is_in_seconds;    /* times came as plain numbers */
    struct when_zone zone; /* else: the offset they came with */
    struct season_river season; /* the sections in the roughness of the first row's date */
    double start_s, until_s, every_s, step_s;
    size_t fixed_cell_count;
};

/* --- input -------------------------------------------------------------------------------------------------------- */

static bool is_plain_number(const char *text)
{
    return text[0] != '\0' && strspn(text, "+-0123456789.eE") == strlen(text) && strchr(text + 1, '-') == NULL;
}

/* The offset of the first time ("+01:00", "Z"), so that times go out as they came in. */
static void take_zone(struct route_plan *plan, const char *text)
{
    struct fw_error ignored;
    size_t length = strlen(text);
    const char *offset = length > 6 && (text[length - 6] == '+' || text[length - 6] == '-') ? text + length - 6 : "Z";
    if (when_zone_parse(offset, &plan->zone, &ignored) != FW_OK)
        plan->zone = (struct when_zone){.is_fixed = true};
}

static enum fw_status read_time(const struct route_plan *plan, const struct table *table, size_t row, size_t column,
                                double *time_s_out, struct fw_error *error)
{
    const char *text = table_cell(table, row, column);
    if (is_plain_number(text) != plan->is_in_seconds && text[0] != '\0')
        return fw_error_set(error, FW_BAD_INPUT,
                            "%s:%zu: time: '%s' is not written as the first time of the input is: expected %s",
                            table->file, table->line[row + 1], text,
                            plan->is_in_seconds ? "seconds, as a plain number"
                                                : "RFC 3339, as 2031-02-14T21:15:00Z or 2031-02-14T22:15:00+01:00");
    if (plan->is_in_seconds)
        return table_number(table, row, column, time_s_out, error);
    int64_t utc_s = 0;
    enum fw_status status = table_time(table, row, column, &utc_s, error);
    *time_s_out = (double)utc_s;
    return status;
}

static enum fw_status read_value(const struct settings_gauge *gauge, const struct table *table, size_t row,
                                 size_t discharge_column, size_t stage_column, double *discharge_out_m3s,
                                 struct fw_error *error)
{
    double value = 0.0;
    bool is_discharge = discharge_column != TABLE_NO_COLUMN;
    size_t column = is_discharge ? discharge_column : stage_column;
    enum fw_status status = table_number(table, row, column, &value, error);
    if (status != FW_OK)
        return status;
    if (gauge->gives_level_only) {
        *discharge_out_m3s = 0.0;
        return FW_OK;
    }
    double discharge_m3s = is_discharge ? value : rating_discharge_m3s(&gauge->rating, value, NULL);
    if (!(discharge_m3s >= 0.0 && discharge_m3s <= LARGEST_M3S))
        return fw_error_set(error, FW_BAD_INPUT, "%s:%zu: %s: '%s' is a flow of %g m3/s: expected 0 to %d",
                            table->file, table->line[row + 1], is_discharge ? "discharge_m3s" : "stage_m",
                            table_cell(table, row, column), discharge_m3s, LARGEST_M3S);
    *discharge_out_m3s = discharge_m3s;
    return FW_OK;
}

static enum fw_status read_stage(const struct table *table, size_t row, size_t column, double *stage_out_m,
                                 struct fw_error *error)
{
    enum fw_status status = table_number(table, row, column, stage_out_m, error);
    if (status == FW_OK && !(fabs(*stage_out_m) <= HIGHEST_STAGE_M))
        status = fw_error_set(error, FW_BAD_INPUT, "%s:%zu: stage_m: '%s': expected -%d to %d m", table->file,
                              table->line[row + 1], table_cell(table, row, column), HIGHEST_STAGE_M, HIGHEST_STAGE_M);
    return status;
}

static enum fw_status read_rows(struct route_plan *plan, const struct settings_gauge *gauge,
                                const struct table *table, bool is_first, struct hydrograph *inflow,
                                struct fw_error *error)
{
    size_t time_column = table_column(table, "time");
    size_t discharge_column = table_column(table, "discharge_m3s");
    size_t stage_column = table_column(table, "stage_m");
    if (time_column == TABLE_NO_COLUMN || (discharge_column == TABLE_NO_COLUMN && stage_column == TABLE_NO_COLUMN))
        return fw_error_set(
            error, FW_BAD_INPUT,
            "%s:%zu: the header has no column '%s': expected time, and discharge_m3s or stage_m, with "
            "commas between",
            table->file, table->line[0], time_column == TABLE_NO_COLUMN ? "time" : "discharge_m3s' or 'stage_m");
    if (gauge->gives_level_only && stage_column == TABLE_NO_COLUMN)
        return fw_error_set(error, FW_BAD_INPUT,
                            "%s:%zu: the header has no column 'stage_m', but gauge '%s' gives the level of an outlet",
                            table->file, table->line[0], gauge->id);
    if (discharge_column == TABLE_NO_COLUMN && !gauge->has_rating && !gauge->gives_level_only)
        return fw_error_set(error, FW_BAD_INPUT,
                            "%s:%zu: stage_m: gauge '%s' has no rating: expected discharge_m3s, or a rating in the "
                            "configuration",
                            table->file, table->line[0], gauge->id);
    if (table->row_count == 0)
        return fw_error_set(error, FW_BAD_INPUT, "%s:%zu: no rows below the header: expected one or more",
                            table->file, table->line[0]);
    if (is_first) {
        const char *first = table_cell(table, 0, time_column);
        plan->is_in_seconds = is_plain_number(first);
        take_zone(plan, first);
    }
    inflow->time_s = calloc(table->row_count, sizeof(double));
    inflow->discharge_m3s = calloc(table->row_count, sizeof(double));
    inflow->stage_m = stage_column != TABLE_NO_COLUMN ? calloc(table->row_count, sizeof(double)) : NULL;
    if (inflow->time_s == NULL || inflow->discharge_m3s == NULL ||
        (stage_column != TABLE_NO_COLUMN && inflow->stage_m == NULL))
        return fw_error_set(error, FW_NO_MEMORY, "%s: no memory", table->file);
    enum fw_status status = FW_OK;
    for (size_t row = 0; row < table->row_count && status == FW_OK; row++) {
        status = read_time(plan, table, row, time_column, &inflow->time_s[row], error);
        if (status == FW_OK)
            status =
                read_value(gauge, table, row, discharge_column, stage_column, &inflow->discharge_m3s[row], error);
        if (status == FW_OK && inflow->stage_m != NULL)
            status = read_stage(table, row, stage_column, &inflow->stage_m[row], error);
        if (status == FW_OK && row > 0 && inflow->time_s[row] <= inflow->time_s[row - 1])
            status = fw_error_set(
                error, FW_BAD_INPUT,
                "%s:%zu: time: '%s' is not after the time of the row before it, '%s': expected times that rise",
                table->file, table->line[row + 1], table_cell(table, row, time_column),
                table_cell(table, row - 1, time_column));
        inflow->count = row + 1;
    }
    return status;
}

static bool is_inner(const struct route_plan *plan, size_t gauge)
{
    return network_gauge_is_inner(&plan->settings->river, gauge);
}

/* A gauge that gives a level must have told one; a series must tell time as the input does. */
static enum fw_status check_levels(const struct route_plan *plan, struct fw_error *error)
{
    for (size_t i = 0; i < plan->settings->level_count; i++) {
        const struct settings_level *level = &plan->settings->levels[i];
        const char *reach = plan->settings->river.reaches[level->reach].id;
        if (level->gauge != SETTINGS_NONE && plan->inflow[level->gauge].stage_m == NULL)
            return fw_error_set(error, FW_BAD_INPUT,
                                "--inflow: gauge '%s' gives the level at the foot of reach '%s': expected a column "
                                "stage_m in its file",
                                plan->settings->gauges[level->gauge].id, reach);
        if (level->gauge == SETTINGS_NONE && level->is_in_seconds != plan->is_in_seconds)
            return fw_error_set(error, FW_BAD_INPUT,
                                "%s: reach '%s': outlet.stage_series: its times are %s, those of the inflow are not",
                                plan->settings->file, reach, level->is_in_seconds ? "seconds" : "RFC 3339");
    }
    return FW_OK;
}

static enum fw_status read_inflows(struct route_plan *plan, const struct option_values *given, struct fw_error *error)
{
    enum fw_status status = FW_OK;
    for (size_t index = 0; index < given->count && status == FW_OK; index++) {
        char id[FACT_ID_SIZE];
        const char *file = NULL;
        struct table table = {0};
        status = table_split_argument("inflow", given->values[index], id, sizeof id, &file, error);
        if (status != FW_OK)
            return status;
        size_t gauge = settings_gauge_index(plan->settings, id);
        if (gauge == SETTINGS_NONE)
            return fw_error_set(error, FW_USAGE, "--inflow: '%s' is not a gauge of %s", id, plan->settings->file);
        if (plan->inflow[gauge].count > 0)
            return fw_error_set(error, FW_USAGE, "--inflow: gauge '%s' is given twice", id);
        status = table_read(file, &table, error);
        if (status == FW_OK)
            status = read_rows(plan, &plan->settings->gauges[gauge], &table, index == 0, &plan->inflow[gauge], error);
        table_clear(&table);
    }
    for (size_t gauge = 0; gauge < plan->settings->gauge_count && status == FW_OK; gauge++)
        if (plan->inflow[gauge].count == 0 && !is_inner(plan, gauge)) /* what is routed there goes on */
            status = fw_error_set(error, FW_USAGE, "--inflow: gauge '%s' has no file: expected --inflow %s=FILE.csv",
                                  plan->settings->gauges[gauge].id, plan->settings->gauges[gauge].id);
    return status == FW_OK ? check_levels(plan, error) : status;
}

/* --- plan --------------------------------------------------------------------------------------------------------- */

static enum fw_status choose_method(struct route_plan *plan, const char *name, struct fw_error *error)
{
    enum network_method method = NETWORK_AUTO;
    plan->river = plan->settings->river;
    plan->reaches = calloc(plan->river.reach_count + 1, sizeof *plan->reaches);
    if (plan->reaches == NULL)
        return fw_error_set(error, FW_NO_MEMORY, "no memory");
    memcpy(plan->reaches, plan->river.reaches, plan->river.reach_count * sizeof *plan->reaches);
    plan->river.reaches = plan->reaches;
    if (name == NULL)
        return FW_OK;
    if (!method_from_name(name, &method))
        return fw_error_set(error, FW_USAGE,
                            "--method: '%s' is not one of kinematic-linear, kinematic, muskingum-cunge, "
                            "diffusive, dynamic, auto",
                            name);
    for (size_t reach = 0; reach < plan->river.reach_count; reach++)
        plan->reaches[reach].method = method;
    return FW_OK;
}

/* What goes on from a gauge in mid-river is read at the head of the reach below it; at the end of the river nothing goes on. */
static enum fw_status place_gauge_points(struct route_plan *plan, struct fw_error *error)
{
    size_t gauges = plan->settings->gauge_count;
    plan->points = calloc(plan->river.point_count + gauges + 1, sizeof *plan->points);
    plan->gauge_point = calloc(gauges + 1, sizeof *plan->gauge_point);
    if (plan->points == NULL || plan->gauge_point == NULL)
        return fw_error_set(error, FW_NO_MEMORY, "no memory");
    if (plan->river.point_count > 0)
        memcpy(plan->points, plan->river.points, plan->river.point_count * sizeof *plan->points);
    plan->river.points = plan->points;
    for (size_t gauge = 0; gauge < gauges; gauge++) {
        size_t node = plan->settings->gauges[gauge].node;
        plan->gauge_point[gauge] = NETWORK_NONE;
        size_t below = network_reach_from(&plan->river, node);
        if (!is_inner(plan, gauge) || below == NETWORK_NONE)
            continue;
        plan->gauge_point[gauge] = plan->river.point_count;
        plan->points[plan->river.point_count++] =
            (struct network_point){.id = plan->settings->gauges[gauge].id, .reach_index = below, .at_m = 0.0};
    }
    return FW_OK;
}

/* Plain seconds have no date: then the roughness is as it is stated. */
static enum fw_status take_season(struct route_plan *plan, struct fw_error *error)
{
    if (plan->is_in_seconds)
        return FW_OK;
    int day = season_day(plan->settings, (int64_t)plan->start_s);
    if (season_river_make(plan->settings, day, &plan->season) != FW_OK)
        return fw_error_set(error, FW_NO_MEMORY, "no memory");
    for (size_t reach = 0; reach < plan->river.reach_count; reach++)
        plan->reaches[reach].section = plan->season.reaches[reach].section;
    return FW_OK;
}

/* By which methods and steps are chosen: the configuration's where it states one, else what the files bring. */
static enum fw_status plan_floods(struct route_plan *plan, struct fw_error *error)
{
    plan->floods = calloc(plan->settings->gauge_count + 1, sizeof *plan->floods);
    if (plan->floods == NULL)
        return fw_error_set(error, FW_NO_MEMORY, "no memory");
    for (size_t gauge = 0; gauge < plan->settings->gauge_count; gauge++) {
        const struct settings_gauge *known = &plan->settings->gauges[gauge];
        const struct hydrograph *inflow = &plan->inflow[gauge];
        if (known->flood_from == SETTINGS_FLOOD_STATED)
            plan->floods[gauge] = known->flood;
        else if (!known->gives_level_only && inflow->count > 0 && inflow->discharge_m3s != NULL)
            plan->floods[gauge] = method_flood_of(inflow->count, inflow->time_s, inflow->discharge_m3s);
    }
    return FW_OK;
}

/* As stated; else short enough for the quickest flood, and a whole part of the shortest interval of the input. */
static double chosen_step_s(const struct route_plan *plan, double shortest_s)
{
    double step_s = (double)plan->settings->time_step_s;
    bool has_interval = shortest_s >= SHORTEST_INTERVAL_S && isfinite(shortest_s);
    for (size_t gauge = 0; gauge < plan->settings->gauge_count && !plan->settings->is_time_step_stated; gauge++)
        step_s = fmin(step_s, method_time_step_s(&plan->floods[gauge], has_interval ? shortest_s : step_s));
    return step_s;
}

static enum fw_status plan_times(struct route_plan *plan, const char *until, long every_s, long step_s,
                                 struct fw_error *error)
{
    double shortest_s = INFINITY;
    plan->start_s = INFINITY;
    plan->until_s = -INFINITY;
    for (size_t gauge = 0; gauge < plan->settings->gauge_count; gauge++) {
        const struct hydrograph *inflow = &plan->inflow[gauge];
        if (inflow->count == 0)
            continue;
        plan->start_s = fmin(plan->start_s, inflow->time_s[0]);
        plan->until_s = fmax(plan->until_s, inflow->time_s[inflow->count - 1]);
        for (size_t row = 1; row < inflow->count; row++)
            shortest_s = fmin(shortest_s, inflow->time_s[row] - inflow->time_s[row - 1]);
    }
    if (until != NULL && plan->is_in_seconds) {
        char *end = NULL;
        plan->until_s = strtod(until, &end);
        if (end == until || *end != '\0' || !isfinite(plan->until_s))
            return fw_error_set(error, FW_USAGE, "--until: '%s' is not a number of seconds, as the input has", until);
    } else if (until != NULL) {
        int64_t utc_s = 0;
        enum fw_status status = when_parse(until, NULL, &utc_s, error);
        if (status != FW_OK)
            return fw_error_prefix(error, FW_USAGE, "--until");
        plan->until_s = (double)utc_s;
    }
    if (until != NULL && plan->until_s < plan->start_s)
        return fw_error_set(error, FW_USAGE, "--until: '%s' is before the first inflow", until);
    plan->step_s = step_s > 0 ? (double)step_s : chosen_step_s(plan, shortest_s);
    plan->every_s = every_s > 0 ? (double)every_s : (isfinite(shortest_s) ? shortest_s : plan->step_s);
    if ((plan->until_s - plan->start_s) / plan->step_s > STEPS_MOST)
        return fw_error_set(error, FW_USAGE, "--step: more than %d steps of %g s: expected a longer one", STEPS_MOST,
                            plan->step_s);
    if ((plan->until_s - plan->start_s) / plan->every_s > STEPS_MOST)
        return fw_error_set(error, FW_USAGE, "--every: more than %d rows %g s apart: expected a longer interval",
                            STEPS_MOST, plan->every_s);
    if (plan->step_s > shortest_s)
        fprintf(stderr,
                "forewater: note: steps of %g s pass over inflow given every %g s; what falls between is lost\n",
                plan->step_s, shortest_s);
    return FW_OK;
}

/* --- routing and output ------------------------------------------------------------------------------------------- */

/* Straight lines between; held before the first and after the last. */
static double value_at(size_t count, const double times_s[], const double values[], double time_s, size_t *hint)
{
    if (time_s <= times_s[0])
        return values[0];
    if (time_s >= times_s[count - 1])
        return values[count - 1];
    while (times_s[*hint + 1] < time_s)
        (*hint)++;
    double share = (time_s - times_s[*hint]) / (times_s[*hint + 1] - times_s[*hint]);
    return values[*hint] + share * (values[*hint + 1] - values[*hint]);
}

/* In mid-river not a number where the file says nothing. */
static double inflow_at(const struct route_plan *plan, size_t gauge, double time_s, size_t *hint)
{
    const struct hydrograph *inflow = &plan->inflow[gauge];
    bool is_told = inflow->count > 0 && time_s >= inflow->time_s[0] && time_s <= inflow->time_s[inflow->count - 1];
    if (!is_told && is_inner(plan, gauge))
        return (double)NAN;
    return value_at(inflow->count, inflow->time_s, inflow->discharge_m3s, time_s, hint);
}

static double level_at(const struct route_plan *plan, size_t level_index, double time_s, size_t *hint)
{
    const struct settings_level *level = &plan->settings->levels[level_index];
    if (level->gauge == SETTINGS_NONE)
        return value_at(level->row_count, level->time_s, level->stage_m, time_s, hint);
    const struct hydrograph *measured = &plan->inflow[level->gauge];
    return value_at(measured->count, measured->time_s, measured->stage_m, time_s, hint) - level->bed_at_m;
}

static double gauge_stage_m(const struct route_plan *plan, size_t gauge, double discharge_m3s)
{
    const struct settings_gauge *known = &plan->settings->gauges[gauge];
    if (known->has_rating)
        return rating_stage_m(&known->rating, discharge_m3s, NULL);
    double depth_m = NAN;
    for (size_t reach = 0; reach < plan->river.reach_count; reach++)
        if (plan->reaches[reach].from_node == known->node &&
            section_normal_depth_m(plan->reaches[reach].section, plan->reaches[reach].slope_m_per_m, discharge_m3s,
                                   &depth_m) != FW_OK)
            depth_m = NAN;
    return depth_m;
}

static void print_header(const struct route_plan *plan)
{
    printf("time");
    for (size_t gauge = 0; gauge < plan->settings->gauge_count; gauge++)
        printf(",%s.discharge_m3s,%s.stage_m", plan->settings->gauges[gauge].id, plan->settings->gauges[gauge].id);
    for (size_t point = 0; point < plan->settings->point_count; point++)
        printf(",%s.discharge_m3s,%s.stage_m", plan->settings->points[point].id, plan->settings->points[point].id);
    printf("\n");
}

static void print_time(const struct route_plan *plan, double time_s)
{
    char text[WHEN_TEXT_SIZE];
    if (plan->is_in_seconds)
        printf("%.15g", time_s);
    else
        printf("%s", plan->zone.offset_s == 0 ? when_rfc3339_utc((int64_t)time_s, text)
                                              : when_rfc3339_local(&plan->zone, (int64_t)time_s, text));
}

static double between(const double values[], double steps)
{
    size_t index = (size_t)steps;
    double share = steps - (double)index;
    return share > 0.0 ? values[index] + share * (values[index + 1] - values[index]) : values[index];
}

/* The depth computed, where there is one; elsewhere the level of the flow. */
static double point_stage_at(const struct route_plan *plan, const struct network *network, size_t point,
                             double flow_m3s, const double stage_m[], double steps)
{
    struct method_choice choice;
    network_reach_choice(network, plan->river.points[point].reach_index, &choice);
    return network_method_is_full(choice.method) ? between(stage_m, steps)
                                                 : network_point_stage_m(network, point, 0, flow_m3s);
}

static void print_above_survey(const struct route_plan *plan, const struct network *network, size_t step_count)
{
    for (size_t reach = 0; reach < plan->river.reach_count; reach++) {
        size_t above = network_steps_above_survey(network, reach);
        if (above > 0)
            fprintf(stderr,
                    "forewater: note: reach '%s': in %zu of %zu steps the water stands above the survey of its "
                    "section, more than %.2f m deep; upright walls are assumed there, and its levels and flows are "
                    "a guess\n",
                    plan->river.reaches[reach].id, above, step_count + 1,
                    section_survey_top_m(plan->river.reaches[reach].section));
    }
}

static void print_rows(const struct route_plan *plan, const struct network *network, size_t step_count,
                       const double inflow_m3s[], const double point_m3s[], const double stage_m[])
{
    print_header(plan);
    for (size_t row = 0; (double)row * plan->every_s <= plan->until_s - plan->start_s + 1e-6; row++) {
        double steps = (double)row * plan->every_s / plan->step_s;
        double time_s = plan->start_s + (double)row * plan->every_s;
        print_time(plan, time_s);
        for (size_t gauge = 0; gauge < plan->settings->gauge_count; gauge++) {
            size_t point = plan->gauge_point[gauge], hint = 0;
            double flow = between(point == NETWORK_NONE ? inflow_m3s + gauge * (step_count + 1)
                                                        : point_m3s + point * (step_count + 1),
                                  steps);
            const struct hydrograph *inflow = &plan->inflow[gauge];
            if (plan->settings->gauges[gauge].gives_level_only)
                printf(",nan,%.4f", value_at(inflow->count, inflow->time_s, inflow->stage_m, time_s, &hint));
            else
                printf(",%.6f,%.4f", flow,
                       point == NETWORK_NONE || plan->settings->gauges[gauge].has_rating
                           ? gauge_stage_m(plan, gauge, flow)
                           : point_stage_at(plan, network, point, flow, stage_m + point * (step_count + 1), steps));
        }
        for (size_t point = 0; point < plan->settings->point_count; point++) {
            double flow = between(point_m3s + point * (step_count + 1), steps);
            printf(",%.6f,%.4f", flow,
                   point_stage_at(plan, network, point, flow, stage_m + point * (step_count + 1), steps));
        }
        printf("\n");
    }
}

static enum fw_status build_network(const struct route_plan *plan, double largest_m3s, struct network **network_out,
                                    struct fw_error *error)
{
    static const double one = 1.0;
    struct network_options options = {.time_step_s = plan->step_s,
                                      .fixed_cell_count = plan->fixed_cell_count,
                                      .group_count = 1,
                                      .roughness_factors = &one,
                                      .members_per_group = 1,
                                      .largest_discharge_m3s = largest_m3s,
                                      .typical_peak_m3s = largest_m3s,
                                      .gauge_floods = plan->floods};
    struct network_fault fault = {{0}};
    enum fw_status status = network_create(&plan->river, &options, network_out, &fault);
    if (status != FW_OK)
        return fw_error_set(error, status, "%s: %s", plan->settings->file, fault.text);
    return FW_OK;
}

/* Where the storage form stands in for the full equations, the reader must know. */
static void tell_stand_ins(const struct route_plan *plan, const struct network *network)
{
    for (size_t reach = 0; reach < plan->river.reach_count; reach++) {
        struct method_choice choice;
        network_reach_choice(network, reach, &choice);
        if (choice.reason == METHOD_TOO_STEEP || choice.reason == METHOD_TOO_FAST)
            fprintf(stderr, "forewater: note: reach '%s': method %s: %s\n", plan->river.reaches[reach].id,
                    method_name(choice.method), method_reason_text(choice.reason));
    }
}

static enum fw_status route(const struct route_plan *plan, struct fw_error *error)
{
    size_t gauges = plan->settings->gauge_count;
    size_t points = plan->river.point_count, levels = plan->river.level_count;
    size_t step_count = (size_t)ceil((plan->until_s - plan->start_s) / plan->step_s) + 1;
    struct network *network = NULL;
    double *inflow_m3s = calloc(gauges * (step_count + 1) + 1, sizeof(double));
    double *point_m3s = calloc(points * (step_count + 1) + 1, sizeof(double));
    double *stage_m = calloc(points * (step_count + 1) + 1, sizeof(double));
    double *start_m3s = calloc(gauges + 1, sizeof(double));
    double *level_m = calloc(levels * (step_count + 1) + 1, sizeof(double));
    double *start_level_m = calloc(levels + 1, sizeof(double));
    double largest_m3s = 0.0, largest_inner_m3s = 0.0;
    enum fw_status status = FW_OK;
    if (inflow_m3s == NULL || point_m3s == NULL || stage_m == NULL || start_m3s == NULL || level_m == NULL ||
        start_level_m == NULL) {
        status = fw_error_set(error, FW_NO_MEMORY, "no memory for %zu steps", step_count);
        goto cleanup;
    }
    for (size_t gauge = 0; gauge < gauges; gauge++) {
        size_t hint = 0;
        double peak_m3s = 0.0;
        for (size_t step = 0; step <= step_count; step++) {
            double flow = inflow_at(plan, gauge, plan->start_s + (double)step * plan->step_s, &hint);
            inflow_m3s[gauge * (step_count + 1) + step] = flow;
            peak_m3s = fmax(peak_m3s, flow); /* a number, where the other is none */
        }
        peak_m3s = fmax(peak_m3s, plan->floods[gauge].peak_m3s);
        start_m3s[gauge] = inflow_m3s[gauge * (step_count + 1)];
        largest_m3s += is_inner(plan, gauge) ? 0.0 : peak_m3s;
        largest_inner_m3s = fmax(largest_inner_m3s, is_inner(plan, gauge) ? peak_m3s : 0.0);
    }
    largest_m3s = fmax(largest_m3s, largest_inner_m3s);
    for (size_t level = 0; level < levels; level++) {
        size_t hint = 0;
        for (size_t step = 0; step <= step_count; step++)
            level_m[level * (step_count + 1) + step] =
                level_at(plan, level, plan->start_s + (double)step * plan->step_s, &hint);
        start_level_m[level] = level_m[level * (step_count + 1)];
    }
    for (size_t side = 0; side < plan->river.side_inflow_count; side++)
        largest_m3s += plan->river.side_inflows[side].share_of_gauge == NETWORK_NONE
                           ? plan->river.side_inflows[side].constant_m3s
                           : plan->river.side_inflows[side].share * largest_m3s;
    status = build_network(plan, fmax(largest_m3s, 0.001), &network, error);
    if (status == FW_OK)
        tell_stand_ins(plan, network);
    if (status == FW_OK)
        status = network_start_steady_at(network, start_m3s, start_level_m);
    if (status == FW_OK)
        status = network_advance_at(network, step_count, inflow_m3s, level_m, point_m3s, stage_m);
    if (status == FW_OK)
        print_rows(plan, network, step_count, inflow_m3s, point_m3s, stage_m);
    else if (error->text[0] == '\0')
        fw_error_set(error, status, "the flow could not be routed");
    if (status == FW_OK && network_steps_replaced(network) > 0)
        fprintf(stderr,
                "forewater: note: in %zu of %zu steps the full equations could not be solved; simpler ones without "
                "backwater took their place (fronts into a nearly dry bed do that)\n",
                network_steps_replaced(network), step_count);
    if (status == FW_OK)
        print_above_survey(plan, network, step_count);
    if (status == FW_OK && (fflush(stdout) != 0 || ferror(stdout)))
        status = fw_error_set(error, FW_IO, "standard output: %s", strerror(errno));
cleanup:
    network_destroy(network);
    free(inflow_m3s);
    free(point_m3s);
    free(stage_m);
    free(start_m3s);
    free(level_m);
    free(start_level_m);
    return status;
}

enum fw_status command_route(int argument_count, char *arguments[], struct fw_error *error)
{
    struct option_values config = {0}, inflow = {0}, method = {0}, step = {0}, cells = {0}, every = {0}, until = {0};
    const struct option_spec options[] = {
        {"config", "FILE", "the configuration; gauges, sections, reaches and points are enough", &config},
        {"inflow", "GAUGE=FILE.csv",
         "columns time (RFC 3339, or seconds) and discharge_m3s or stage_m; one per gauge, optional in mid-river",
         &inflow},
        {"method", "NAME", "kinematic-linear, kinematic, muskingum-cunge, diffusive, dynamic, auto", &method},
        {"step", "SECONDS", "fixes the time step", &step},
        {"cells", "N", "fixes the number of cells of every reach", &cells},
        {"every", "SECONDS", "interval of the output (default: the shortest of the input)", &every},
        {"until", "TIME", "end of the output, the last inflow held (default: the last inflow)", &until},
        {NULL, NULL, NULL, NULL}};
    const struct command_line line = {"route", "", "Routes hydrographs from files to every gauge and point, as CSV.",
                                      options};
    struct settings *settings = NULL;
    struct route_plan plan = {0};
    int rest = 0;
    long step_s = 0, cell_count = 0, every_s = 0;
    enum fw_status status = options_read(&line, argument_count, arguments, &rest, error);
    if (status == FW_OK && rest < argument_count)
        status = fw_error_set(error, FW_USAGE, "route: '%s' is not expected here", arguments[rest]);
    if (status == FW_OK)
        status = option_whole("step", &step, 1, 86400, 0, &step_s, error);
    if (status == FW_OK)
        status = option_whole("cells", &cells, 1, 100000, 0, &cell_count, error);
    if (status == FW_OK)
        status = option_whole("every", &every, 1, 31536000, 0, &every_s, error);
    if (status != FW_OK)
        return status;
    status =
        command_read_settings(option_text(&config, COMMAND_DEFAULT_CONFIG), SETTINGS_FOR_ROUTE, &settings, error);
    if (status != FW_OK)
        return status;
    plan.settings = settings;
    plan.fixed_cell_count = (size_t)cell_count;
    plan.inflow = calloc(settings->gauge_count + 1, sizeof *plan.inflow);
    status = plan.inflow != NULL ? choose_method(&plan, option_text(&method, NULL), error)
                                 : fw_error_set(error, FW_NO_MEMORY, "no memory");
    if (status == FW_OK)
        status = place_gauge_points(&plan, error);
    if (status == FW_OK)
        status = read_inflows(&plan, &inflow, error);
    if (status == FW_OK)
        status = plan_floods(&plan, error);
    if (status == FW_OK)
        status = plan_times(&plan, option_text(&until, NULL), every_s, step_s, error);
    if (status == FW_OK)
        status = take_season(&plan, error);
    if (status == FW_OK)
        status = route(&plan, error);
    for (size_t gauge = 0; gauge < settings->gauge_count && plan.inflow != NULL; gauge++) {
        free(plan.inflow[gauge].time_s);
        free(plan.inflow[gauge].discharge_m3s);
        free(plan.inflow[gauge].stage_m);
    }
    free(plan.inflow);
    free(plan.floods);
    free(plan.reaches);
    season_river_clear(&plan.season);
    free(plan.points);
    free(plan.gauge_point);
    settings_destroy(settings);
    return status;
}
