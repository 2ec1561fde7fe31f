/* SPDX-License-Identifier: MIT */
#include "engine/hazard.h"

#include <math.h>

#include "engine/stage_structure.h"

static const struct hazard_limit limits[HAZARD_WHOM_COUNT] = {
    [HAZARD_SMALL_CAR] = {.depth_m = 0.3, .speed_m_s = 3.0, .product_m2_s = 0.3, .is_draft = true},
    [HAZARD_LARGE_CAR] = {.depth_m = 0.4, .speed_m_s = 3.0, .product_m2_s = 0.45, .is_draft = true},
    [HAZARD_ANY_VEHICLE] = {.depth_m = 0.5, .speed_m_s = 2.0, .product_m2_s = 0.6},
    [HAZARD_ANY_PERSON] = {.depth_m = 1.2, .speed_m_s = 2.0, .product_m2_s = 0.6},
};

const struct hazard_limit *hazard_limit_for(enum hazard_whom whom)
{
    return &limits[whom];
}

static struct hazard_water water_in_section(const struct hazard_deck *deck, double stage_m, double discharge_m3s)
{
    struct hazard_water water = {.depth_m = stage_m - deck->level_m};
    struct section_properties whole, panel;
    section_properties_at(deck->section, stage_m, &whole);
    if (!(whole.conveyance_m3s > 0.0))
        return water;
    double root_of_slope = fabs(discharge_m3s) / whole.conveyance_m3s;
    double of_sheet_m_s = root_of_slope * cbrt(water.depth_m * water.depth_m) / deck->roughness_n;
    double of_panel_m_s = 0.0;
    for (size_t index = 0; index < section_panel_count(deck->section); index++) {
        if (deck->panel != HAZARD_ANY_PANEL && deck->panel != index)
            continue;
        section_panel_at(deck->section, index, stage_m, &panel);
        if (panel.area_m2 > 0.0)
            of_panel_m_s = fmax(of_panel_m_s, root_of_slope * panel.conveyance_m3s / panel.area_m2);
    }
    water.speed_m_s = fmax(of_sheet_m_s, of_panel_m_s);
    water.product_m2_s = water.depth_m * water.speed_m_s;
    return water;
}

static struct hazard_water water_on_weir(const struct hazard_deck *deck, double stage_m, double below_m)
{
    double head_m = stage_m - deck->level_m;
    double below_head_m = below_m > deck->level_m ? fmin(below_m - deck->level_m, head_m) : 0.0;
    struct hazard_water water = {.depth_m = head_m};
    water.product_m2_s = deck->weir_coefficient * head_m * sqrt(head_m);
    water.product_m2_s *= stage_structure_drowned_share(below_head_m / head_m);
    water.speed_m_s = water.product_m2_s / fmax(2.0 / 3.0 * head_m, below_head_m);
    return water;
}

struct hazard_water hazard_water_on_deck(const struct hazard_deck *deck, double stage_m, double discharge_m3s,
                                         double below_m)
{
    if (!(stage_m > deck->level_m))
        return (struct hazard_water){0};
    return deck->kind == HAZARD_DECK_IS_WEIR ? water_on_weir(deck, stage_m, below_m)
                                             : water_in_section(deck, stage_m, discharge_m3s);
}

double hazard_share_of_limit(const struct hazard_limit *limit, const struct hazard_water *water)
{
    return fmax(water->product_m2_s / limit->product_m2_s,
                fmax(water->depth_m / limit->depth_m, water->speed_m_s / limit->speed_m_s));
}

enum hazard_measure hazard_measure_passed(const struct hazard_limit *limit, const struct hazard_water *water)
{
    if (water->product_m2_s > limit->product_m2_s)
        return HAZARD_PRODUCT;
    if (water->depth_m > limit->depth_m)
        return HAZARD_DEPTH;
    return water->speed_m_s > limit->speed_m_s ? HAZARD_SPEED : HAZARD_NONE;
}
