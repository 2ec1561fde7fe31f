/* SPDX-License-Identifier: MIT */
#include "daemon/deck.h"

#include <math.h>

struct hazard_water deck_water(const struct settings *settings, const struct network_river *river, size_t point,
                               double stage_m, double discharge_m3s, double roughness_factor)
{
    const struct network_point *place = &river->points[point];
    const struct network_reach *reach = &river->reaches[place->reach_index];
    struct hazard_deck deck = settings->points[point].deck;
    deck.section = reach->section;
    double below_m = HAZARD_NOTHING_BELOW;
    bool has_level_of_its_own = place->stage_rating.row_count > 0 || place->structure != NULL;
    if (deck.kind == HAZARD_DECK_IS_WEIR && has_level_of_its_own && stage_m > deck.level_m &&
        section_normal_depth_m(reach->section, reach->slope_m_per_m, fabs(discharge_m3s) * roughness_factor,
                               &below_m) != FW_OK)
        below_m = HAZARD_NOTHING_BELOW;
    return hazard_water_on_deck(&deck, stage_m, discharge_m3s, below_m);
}

const char *deck_whom_name(enum hazard_whom whom)
{
    static const char *const names[HAZARD_WHOM_COUNT] = {
        [HAZARD_SMALL_CAR] = "a small car",
        [HAZARD_LARGE_CAR] = "a large car",
        [HAZARD_ANY_VEHICLE] = "any vehicle, child or old person",
        [HAZARD_ANY_PERSON] = "any vehicle or person",
    };
    return names[whom];
}

const char *deck_measure_unit(enum hazard_measure measure)
{
    return measure == HAZARD_DEPTH ? "m" : measure == HAZARD_SPEED ? "m/s" : "m2/s";
}

double deck_measure_limit(const struct hazard_limit *limit, enum hazard_measure measure)
{
    return measure == HAZARD_DEPTH   ? limit->depth_m
           : measure == HAZARD_SPEED ? limit->speed_m_s
                                     : limit->product_m2_s;
}

double deck_rounded_up(double value)
{
    return value > 0.0 ? ceil(100.0 * value - 1e-6) / 100.0 : 0.0;
}
