/* SPDX-License-Identifier: MIT */
/* How the water moves over a crossing's deck. */
#include "daemon/settings/settings_work.h"

#include <math.h>
#include <string.h>

/* The deck's level must be a mark of its own: the closing mark that stands in for it elsewhere is lower. */
static bool has_deck_mark(const struct settings_point *point, const struct json_value *object)
{
    const struct json_value *marks = settings_work_member(object, "points[].marks");
    const struct json_value *mark;
    for (size_t i = 0; (mark = settings_work_next(marks, &i)) != NULL;) {
        const char *name = settings_work_string(mark, "points[].marks[].name");
        if (settings_work_truth(mark, "points[].marks[].deck") || (name != NULL && strcasestr(name, "deck") != NULL))
            return point->deck_mark < point->mark_count;
    }
    return false;
}

static void check_keys_of_kind(struct settings_work *work, bool is_weir, const struct json_value *deck)
{
    static const char weir[] = "the water runs over the road as over a weir";
    if (is_weir) {
        settings_work_refuse(work, deck, "points[].deck.n", weir);
        settings_work_refuse(work, deck, "points[].deck.on", weir);
        settings_work_refuse(work, deck, "points[].deck.offset_m", weir);
    } else {
        settings_work_refuse(work, deck, "points[].deck.coefficient", "the deck is no weir");
    }
}

/* Panels count from the left, each up to its right end; the last one reaches the end of the survey. */
static size_t panel_at(const struct section *section, double offset_m)
{
    size_t panel = 0;
    while (panel + 1 < section->panel_count && section->panel_to_offset_m[panel] <= offset_m)
        panel++;
    return panel;
}

static void choose_panel(struct settings_work *work, struct hazard_deck *built, const struct json_value *deck)
{
    static const char on_key[] = "points[].deck.on", offset_key[] = "points[].deck.offset_m";
    const struct section *section = built->section;
    struct json_value *on = settings_work_member(deck, on_key);
    struct json_value *offset = settings_work_member(deck, offset_key);
    built->panel = HAZARD_ANY_PANEL;
    if (section->shape != SECTION_POINTS)
        settings_work_refuse(work, deck, offset_key, "the section is not surveyed");
    if (!section->has_plain)
        settings_work_refuse(work, deck, on_key, "the section has no plain");
    if (on != NULL && section->has_plain) {
        built->panel = strcmp(on->string, "plain") == 0 ? 1 : 0;
        if (built->panel == 1 && built->level_m < section->plain_above_m)
            json_tree_fault(work->report, on,
                            "lies above the deck, which is %.10g m above the invert: expected a plain that begins no "
                            "higher than the deck (it begins at %.10g)",
                            built->level_m, section->plain_above_m);
    }
    if (offset != NULL && section->shape == SECTION_POINTS && section->point_count > 0) {
        double left_m = section->point_offset_m[0];
        double right_m = section->point_offset_m[section->point_count - 1];
        built->panel = panel_at(section, offset->number);
        if (offset->number < left_m || offset->number > right_m)
            json_tree_fault(work->report, offset, "lies outside the survey: expected %.10g to %.10g", left_m,
                            right_m);
    }
}

static double weir_coefficient(const struct json_value *object, const struct json_value *deck)
{
    static const double ideal = 1.7;
    const struct json_value *rating = settings_work_member(object, "points[].stage_rating");
    const struct json_value *weir = settings_work_member(rating, "points[].stage_rating.weir");
    double of_rating = settings_work_number(weir, "points[].stage_rating.weir.coefficient");
    double of_deck = settings_work_number(deck, "points[].deck.coefficient");
    return isfinite(of_deck) ? of_deck : isfinite(of_rating) ? of_rating : ideal;
}

void settings_build_deck(struct settings_work *work, struct settings_point *point, const struct json_value *object)
{
    struct json_value *deck = settings_work_member(object, "points[].deck");
    const char *kind = settings_work_string(deck, "points[].deck.kind");
    if (deck == NULL || kind == NULL)
        return;
    const struct json_value *marks = settings_work_member(object, "points[].marks");
    bool is_weir = strcmp(kind, "weir") == 0;
    check_keys_of_kind(work, is_weir, deck);
    if ((marks == NULL && !settings_work_has(object, "points[].marks")) ||
        (settings_work_is_whole(marks) && !has_deck_mark(point, object))) {
        json_tree_fault(work->report, deck,
                        "has no level: expected a mark with \"deck\": true, or with deck in its name");
        return;
    }
    if (marks == NULL || !settings_work_is_whole(marks) || point->reach == SETTINGS_NONE)
        return;
    const struct network_reach *reach = &work->settings->river.reaches[point->reach];
    if (reach->section == NULL || section_check(reach->section, NULL) != FW_OK)
        return; /* it has a fault of its own */
    point->has_deck = true;
    point->deck = (struct hazard_deck){
        .kind = is_weir ? HAZARD_DECK_IS_WEIR : HAZARD_DECK_IN_SECTION,
        .level_m = point->marks[point->deck_mark].depth_m,
        .section = reach->section,
        .panel = HAZARD_ANY_PANEL,
        .roughness_n = settings_work_number(deck, "points[].deck.n"),
        .weir_coefficient = weir_coefficient(object, deck),
    };
    if (!is_weir)
        choose_panel(work, &point->deck, deck);
}
