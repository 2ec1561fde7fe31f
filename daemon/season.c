/* SPDX-License-Identifier: MIT */
#include "daemon/season.h"

#include <stdio.h>
#include <stdlib.h>
#include <string.h>

int season_day(const struct settings *settings, int64_t utc_s)
{
    char text[WHEN_TEXT_SIZE]; /* "2031-02-14T22:15:00+01:00" */
    int month = 1, day = 1;
    when_rfc3339_local(&settings->zone, utc_s, text);
    if (sscanf(text, "%*4d-%2d-%2d", &month, &day) != 2)
        return 101;
    return month * 100 + day;
}

double season_factor(const struct settings_seasons *seasons, int day)
{
    if (seasons->count == 0)
        return 1.0;
    size_t newest = seasons->count - 1; /* before the first of the year the last of the year before holds */
    for (size_t i = 0; i < seasons->count && seasons->items[i].from_day <= day; i++)
        newest = i;
    return seasons->items[newest].n_factor;
}

/* --- all of them --- */

static size_t add_starts(const struct settings_seasons *seasons, size_t most, size_t count, int days[])
{
    for (size_t i = 0; i < seasons->count; i++) {
        size_t place = 0;
        while (place < count && days[place] < seasons->items[i].from_day)
            place++;
        if ((place < count && days[place] == seasons->items[i].from_day) || count == most)
            continue;
        memmove(&days[place + 1], &days[place], (count - place) * sizeof *days);
        days[place] = seasons->items[i].from_day;
        count++;
    }
    return count;
}

size_t season_starts(const struct settings *settings, size_t most, int days_out[])
{
    size_t count = 0;
    for (size_t index = 0; index < settings->section_count && settings->section_seasons != NULL; index++) {
        const struct settings_section_seasons *seasons = &settings->section_seasons[index];
        count = add_starts(&seasons->own, most, count, days_out);
        count = add_starts(&seasons->plain, most, count, days_out);
        for (size_t panel = 0; panel < settings->sections[index].panel_count && seasons->panels != NULL; panel++)
            count = add_starts(&seasons->panels[panel], most, count, days_out);
    }
    return count;
}

size_t season_index(const struct settings *settings, int64_t utc_s)
{
    int days[SETTINGS_SEASON_STARTS_MAX];
    size_t count = season_starts(settings, SETTINGS_SEASON_STARTS_MAX, days);
    int day = season_day(settings, utc_s);
    size_t newest = count > 0 ? count - 1 : 0;
    for (size_t i = 0; i < count && days[i] <= day; i++)
        newest = i;
    return newest;
}

/* --- the river --- */

static void change_section(const struct settings *settings, size_t index, int day, struct section *section,
                           double *panel_n)
{
    const struct settings_section_seasons *seasons = &settings->section_seasons[index];
    double own = season_factor(&seasons->own, day);
    section->roughness_n *= own;
    section->plain_roughness_n *= seasons->plain.count > 0 ? season_factor(&seasons->plain, day) : own;
    for (size_t panel = 0; panel < section->panel_count; panel++) {
        bool has_own = seasons->panels != NULL && seasons->panels[panel].count > 0;
        panel_n[panel] =
            section->panel_roughness_n[panel] * (has_own ? season_factor(&seasons->panels[panel], day) : own);
    }
    if (section->panel_count > 0)
        section->panel_roughness_n = panel_n;
}

enum fw_status season_river_make(const struct settings *settings, int day, struct season_river *season_out)
{
    struct season_river season = {.river = settings->river};
    size_t panel_count = 0;
    for (size_t index = 0; index < settings->section_count; index++)
        panel_count += settings->sections[index].panel_count;
    season.sections = calloc(settings->section_count + 1, sizeof *season.sections);
    season.reaches = calloc(settings->river.reach_count + 1, sizeof *season.reaches);
    season.panel_n = calloc(panel_count + 1, sizeof *season.panel_n);
    if (season.sections == NULL || season.reaches == NULL || season.panel_n == NULL) {
        season_river_clear(&season);
        return FW_NO_MEMORY;
    }
    double *panel_n = season.panel_n;
    for (size_t index = 0; index < settings->section_count; index++) {
        season.sections[index] = settings->sections[index];
        if (settings->section_seasons != NULL)
            change_section(settings, index, day, &season.sections[index], panel_n);
        panel_n += settings->sections[index].panel_count;
    }
    for (size_t index = 0; index < settings->river.reach_count; index++) {
        season.reaches[index] = settings->river.reaches[index];
        season.reaches[index].section = &season.sections[settings->river.reaches[index].section - settings->sections];
    }
    season.river.reaches = season.reaches;
    *season_out = season;
    return FW_OK;
}

void season_river_clear(struct season_river *season)
{
    free(season->sections);
    free(season->reaches);
    free(season->panel_n);
    *season = (struct season_river){.reaches = NULL};
}
