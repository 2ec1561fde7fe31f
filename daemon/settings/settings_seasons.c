/* SPDX-License-Identifier: MIT */
/* Dated roughness of sections, their plains and panels. */
#include "daemon/settings/settings_work.h"

#include <math.h>
#include <string.h>

/* "MM-DD", which has been checked. */
static int day_of(const char *text)
{
    return ((text[0] - '0') * 10 + (text[1] - '0')) * 100 + (text[3] - '0') * 10 + (text[4] - '0');
}

static size_t starts_so_far(const struct settings *settings)
{
    size_t count = 0;
    for (size_t i = 0; i < settings->section_count; i++) {
        const struct settings_section_seasons *seasons = &settings->section_seasons[i];
        count += seasons->own.count + seasons->plain.count;
        for (size_t panel = 0; seasons->panels != NULL && panel < settings->sections[i].panel_count; panel++)
            count += seasons->panels[panel].count;
    }
    return count;
}

/* One list; from_key and factor_key are those of its elements. False: no memory. */
static bool build_list(struct settings_work *work, const struct json_value *list, const char *from_key,
                       const char *factor_key, struct settings_seasons *seasons)
{
    struct settings_season *items = arena_take(work->arena, settings_work_count(list), sizeof *items);
    const struct json_value *last = NULL;
    const struct json_value *object;
    if (items == NULL)
        return false;
    seasons->items = items;
    for (size_t i = 0; (object = settings_work_next(list, &i)) != NULL;) {
        struct json_value *from = settings_work_member(object, from_key);
        if (from == NULL)
            continue;
        if (last != NULL && day_of(from->string) <= day_of(last->string))
            json_tree_fault(
                work->report, from,
                "is not after the date before it, \"%s\" (line %zu): expected dates that rise within the year",
                last->string, last->line);
        last = from;
        items[seasons->count++] = (struct settings_season){.from_day = day_of(from->string),
                                                           .n_factor = settings_work_number(object, factor_key)};
    }
    return true;
}

bool settings_build_seasons(struct settings_work *work, size_t section, const struct json_value *object)
{
    struct settings_section_seasons *seasons = &work->settings->section_seasons[section];
    const struct json_value *plain = settings_work_member(object, "sections[].plain");
    const struct json_value *panels = settings_work_member(object, "sections[].panels");
    size_t before = starts_so_far(work->settings);
    seasons->panels = arena_take(work->arena, settings_work_count(panels), sizeof *seasons->panels);
    if (seasons->panels == NULL ||
        !build_list(work, settings_work_member(object, "sections[].seasons"), "sections[].seasons[].from",
                    "sections[].seasons[].n_factor", &seasons->own) ||
        !build_list(work, settings_work_member(plain, "sections[].plain.seasons"), "sections[].plain.seasons[].from",
                    "sections[].plain.seasons[].n_factor", &seasons->plain))
        return false;
    size_t index = 0, added = seasons->own.count + seasons->plain.count;
    const struct json_value *panel;
    for (size_t i = 0; (panel = settings_work_next(panels, &i)) != NULL; index++) {
        if (!build_list(work, settings_work_member(panel, "sections[].panels[].seasons"),
                        "sections[].panels[].seasons[].from", "sections[].panels[].seasons[].n_factor",
                        &seasons->panels[index]))
            return false;
        added += seasons->panels[index].count;
    }
    if (before + added > SETTINGS_SEASON_STARTS_MAX)
        settings_report_add(work->report, object->line,
                            "%s: %zu dates of roughness so far: expected at most %d in all", object->path,
                            before + added, SETTINGS_SEASON_STARTS_MAX);
    return true;
}
