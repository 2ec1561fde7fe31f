/* SPDX-License-Identifier: MIT */
/* District, store, forecast, channels and roster. */
#include "daemon/settings/settings_work.h"

#include <math.h>
#include <string.h>

static const double MINUTE_S = 60;
static const double HOUR_S = 3600;

static int minute_of(const struct json_value *time_of_day)
{
    const char *s = time_of_day->string;
    return ((s[0] - '0') * 10 + s[1] - '0') * 60 + (s[3] - '0') * 10 + s[4] - '0';
}

static void build_night(struct settings_work *work, const struct json_value *district)
{
    struct settings *settings = work->settings;
    settings->night_from_minute = 20 * 60;
    settings->night_to_minute = 6 * 60;
    struct json_value *night = settings_work_member(district, "district.night");
    if (night == NULL || settings_work_count(night) != 2)
        return;
    settings->night_from_minute = minute_of(&night->children[0]);
    settings->night_to_minute = minute_of(&night->children[1]);
    if (settings->night_from_minute == settings->night_to_minute)
        json_tree_fault(work->report, &night->children[1], "is where the night begins: expected another time of day");
}

static void build_district(struct settings_work *work)
{
    const struct json_value *district = settings_work_member(work->root, "district");
    struct settings *settings = work->settings;
    settings->district_name = settings_work_string(district, "district.name");
    settings->datum = settings_work_string(district, "district.datum");
    const char *zone = settings_work_string(district, "district.zone");
    /* it was checked; {0} is UTC */
    if (zone == NULL || when_zone_parse(zone, &settings->zone, NULL) != FW_OK)
        settings->zone = (struct when_zone){0};
    build_night(work, district);
}

static bool build_store(struct settings_work *work)
{
    const struct json_value *store = settings_work_member(work->root, "store");
    struct settings *settings = work->settings;
    const char *file = settings_work_string(store, "store.file");
    const char *inbox = settings_work_string(store, "store.inbox");
    if (file == NULL)
        return true;
    settings->store_file = settings_work_path(work, file);
    if (settings->store_file == NULL)
        return false;
    const char *base = strrchr(settings->store_file, '/') + 1; /* it is absolute */
    if (*base == '\0')
        json_tree_fault(work->report, json_tree_member(store, "file"), "is a folder: expected a file in it");
    settings->inbox_path = inbox != NULL ? settings_work_path(work, inbox)
                                         : arena_print(work->arena, "%.*sinbox", (int)(base - settings->store_file),
                                                       settings->store_file);
    return settings->inbox_path != NULL;
}

static void build_roughness(struct settings_work *work, const struct json_value *forecast)
{
    struct settings *settings = work->settings;
    static const double usual[] = {0.8, 1.0, 1.2};
    settings->roughness_factor_count = sizeof usual / sizeof usual[0];
    memcpy(settings->roughness_factors, usual, sizeof usual);
    const struct json_value *factors = settings_work_member(forecast, "forecast.roughness_factors");
    if (factors == NULL)
        return;
    settings->roughness_factor_count = 0;
    struct json_value *last = NULL;
    struct json_value *factor;
    for (size_t i = 0; (factor = settings_work_next(factors, &i)) != NULL; last = factor) {
        if (last != NULL && factor->number <= last->number)
            json_tree_fault(work->report, factor,
                            "is not above the factor before it, %.10g (line %zu): expected rising", last->number,
                            last->line);
        settings->roughness_factors[settings->roughness_factor_count++] = factor->number;
    }
}

static void build_forecast(struct settings_work *work)
{
    const struct json_value *forecast = settings_work_member(work->root, "forecast");
    struct settings *settings = work->settings;
    settings->forecast_every_s = settings_work_seconds(forecast, "forecast.every_min", MINUTE_S);
    settings->horizon_s = settings_work_seconds(forecast, "forecast.horizon_h", HOUR_S);
    settings->warm_up_s = settings_work_seconds(forecast, "forecast.warm_up_h", HOUR_S);
    settings->is_time_step_stated = settings_work_has(forecast, "forecast.time_step_s");
    settings->time_step_s = settings_work_seconds(forecast, "forecast.time_step_s", 1);
    settings->member_count = (size_t)settings_work_seconds(forecast, "forecast.members", 1);
    build_roughness(work, forecast);
    struct json_value *step = settings_work_member(forecast, "forecast.time_step_s");
    if (step != NULL && settings->time_step_s > 0 && settings->forecast_every_s % settings->time_step_s != 0)
        json_tree_fault(work->report, step, "does not fit: expected a cycle (%lld s) of whole time steps (%lld s)",
                        (long long)settings->forecast_every_s, (long long)settings->time_step_s);
}

bool settings_build_base(struct settings_work *work)
{
    build_district(work);
    build_forecast(work);
    return build_store(work);
}

/* --- channels and roster --- */

static bool build_command(struct settings_work *work, struct settings_channel *channel,
                          const struct json_value *object)
{
    const struct json_value *run = settings_work_member(object, "channels[].run");
    channel->run = arena_take(work->arena, settings_work_count(run) + 1, sizeof *channel->run);
    if (channel->run == NULL)
        return false;
    const struct json_value *argument;
    for (size_t i = 0; (argument = settings_work_next(run, &i)) != NULL;) {
        bool is_program = channel->argument_count == 0;
        const char *word = is_program ? settings_work_path(work, argument->string) : argument->string;
        if (word == NULL)
            return false;
        channel->run[channel->argument_count++] = word;
    }
    return true;
}

static bool build_channel(struct settings_work *work, struct settings_channel *channel, struct json_value *object)
{
    channel->id = settings_work_string(object, "channels[].id");
    struct json_value *kind = settings_work_member(object, "channels[].kind");
    if (kind == NULL)
        return build_command(work, channel, object);
    channel->is_journal = strcmp(kind->string, "journal") == 0;
    if (strcmp(kind->string, "command") == 0)
        settings_work_need(work, object, "channels[].run", "the channel is a command");
    else if (channel->is_journal)
        settings_work_refuse(work, object, "channels[].run", "the channel is the journal");
    else
        json_tree_fault(work->report, kind, "is not in this version: expected \"command\" or \"journal\"");
    return build_command(work, channel, object);
}

static bool build_role(struct settings_work *work, struct settings_role *role, const struct json_value *object)
{
    role->role = settings_work_string(object, "roster[].role");
    role->accept_within_s = settings_work_seconds(object, "roster[].accept_within_min", MINUTE_S);
    const struct json_value *to = settings_work_member(object, "roster[].to");
    role->to = arena_take(work->arena, settings_work_count(to), sizeof *role->to);
    if (role->to == NULL)
        return false;
    const struct json_value *name;
    for (size_t i = 0; (name = settings_work_next(to, &i)) != NULL;)
        for (size_t c = 0; c < work->settings->channel_count; c++)
            if (work->settings->channels[c].id != NULL && strcmp(work->settings->channels[c].id, name->string) == 0) {
                role->to[role->to_count++] = c;
                break;
            }
    return true;
}

bool settings_build_channels(struct settings_work *work)
{
    struct settings *settings = work->settings;
    const struct json_value *channels = settings_work_member(work->root, "channels");
    const struct json_value *roster = settings_work_member(work->root, "roster");
    settings->channels = arena_take(work->arena, settings_work_count(channels), sizeof *settings->channels);
    settings->roster = arena_take(work->arena, settings_work_count(roster), sizeof *settings->roster);
    if (settings->channels == NULL || settings->roster == NULL)
        return false;
    struct json_value *object;
    for (size_t i = 0; (object = settings_work_next(channels, &i)) != NULL;)
        if (!build_channel(work, &settings->channels[settings->channel_count++], object))
            return false;
    for (size_t i = 0; (object = settings_work_next(roster, &i)) != NULL;)
        if (!build_role(work, &settings->roster[settings->role_count++], object))
            return false;
    return true;
}
