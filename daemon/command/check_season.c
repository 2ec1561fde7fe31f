/* SPDX-License-Identifier: MIT */
#include "daemon/command/check_season.h"

#include <stdio.h>

#include "daemon/season.h"

enum { PEAK_FLOW = CHECK_FLOW_COUNT - 2 };

typedef void taker(void *with, int from_day, size_t reach, double travel_s, double discharge_m3s);

static enum fw_status measure_season(const struct check_facts *stated, int from_day, taker *take, void *with,
                                     struct fw_error *error)
{
    struct season_river season = {.reaches = NULL};
    struct settings settings = *stated->settings;
    struct check_facts facts = {.network = NULL};
    if (season_river_make(stated->settings, from_day, &season) != FW_OK)
        return fw_error_set(error, FW_NO_MEMORY, "no memory");
    settings.river = season.river;
    enum fw_status status = check_facts_open(&facts, &settings, error);
    for (size_t reach = 0; reach < settings.river.reach_count && status == FW_OK; reach++) {
        struct network_reach_steps steps;
        struct network_reach_flow flow;
        double flow_m3s = stated->flows_m3s[PEAK_FLOW];
        status = network_reach_summary(facts.network, reach, 1.0, 1, &flow_m3s, &steps, &flow);
        if (status == FW_OK)
            take(with, from_day, reach, flow.travel_time_s, flow_m3s);
        else
            fw_error_set(error, status, "reach '%s': its flows cannot be computed", settings.river.reaches[reach].id);
    }
    check_facts_clear(&facts);
    season_river_clear(&season);
    return status;
}

enum fw_status check_season_each(const struct check_facts *facts, taker *take, void *with, struct fw_error *error)
{
    int days[SETTINGS_SEASON_STARTS_MAX];
    size_t count = season_starts(facts->settings, SETTINGS_SEASON_STARTS_MAX, days);
    enum fw_status status = FW_OK;
    for (size_t season = 0; season < count && status == FW_OK; season++)
        status = measure_season(facts, days[season], take, with, error);
    return status;
}

struct line {
    const struct settings *settings;
    int day;
};

static void print_reach(void *with, int from_day, size_t reach, double travel_s, double discharge_m3s)
{
    struct line *line = with;
    if (from_day != line->day)
        printf("%s    from %02d-%02d: %.0f m3/s travel", line->day != 0 ? "\n" : "", from_day / 100, from_day % 100,
               discharge_m3s);
    printf("%s %s %.0f min", from_day != line->day ? "" : ",", line->settings->river.reaches[reach].id,
           travel_s / 60.0);
    line->day = from_day;
}

enum fw_status check_season_print(const struct check_facts *facts, struct fw_error *error)
{
    int day;
    struct line line = {.settings = facts->settings};
    if (season_starts(facts->settings, 1, &day) == 0)
        return FW_OK;
    printf("roughness by season (local dates; all else on this page is in the roughness as stated)\n");
    enum fw_status status = check_season_each(facts, print_reach, &line, error);
    printf("\n");
    return status;
}
