/* SPDX-License-Identifier: MIT */
#include "daemon/command/check_deck.h"

#include <math.h>
#include <stdio.h>

enum { SEARCH_COUNT = 512, HALVINGS = 60 };

static double stage_of(const struct check_facts *facts, size_t point, double flow_m3s)
{
    return network_point_stage_m(facts->network, point, 0, flow_m3s);
}

/* Steady flow as given, roughness as given. */
static struct hazard_water water_of(const struct check_facts *facts, size_t point, double flow_m3s)
{
    return deck_water(facts->settings, &facts->settings->river, point, stage_of(facts, point, flow_m3s), flow_m3s,
                      1.0);
}

static bool is_over(const struct check_facts *facts, size_t point, const struct hazard_limit *limit, double flow_m3s)
{
    if (limit == NULL)
        return stage_of(facts, point, flow_m3s) >= facts->settings->points[point].deck.level_m;
    struct hazard_water water = water_of(facts, point, flow_m3s);
    return hazard_measure_passed(limit, &water) != HAZARD_NONE;
}

/* The lowest flow that passes a limit, or (NULL) wets the deck; NAN: none that is looked at does. */
static double lowest_flow_m3s(const struct check_facts *facts, size_t point, const struct hazard_limit *limit)
{
    double highest_m3s = 2.0 * facts->flows_m3s[CHECK_FLOW_COUNT - 1];
    double octaves = log2(highest_m3s / facts->flows_m3s[0]) + 6.0;
    double low_m3s = 0.0;
    for (size_t index = 0; index <= SEARCH_COUNT; index++) {
        double high_m3s = highest_m3s * exp2(octaves * ((double)index / SEARCH_COUNT - 1.0));
        if (!is_over(facts, point, limit, high_m3s)) {
            low_m3s = high_m3s;
            continue;
        }
        for (int halving = 0; halving < HALVINGS; halving++) {
            double middle_m3s = 0.5 * (low_m3s + high_m3s);
            if (is_over(facts, point, limit, middle_m3s))
                high_m3s = middle_m3s;
            else
                low_m3s = middle_m3s;
        }
        return high_m3s;
    }
    return NAN;
}

/* Side water above the point that follows the gauge, as a share of the gauge's flow. */
static double side_share(const struct settings *settings, size_t gauge, size_t point)
{
    const struct network_river *river = &settings->river;
    const struct network_point *place = &river->points[point];
    double share = 0.0;
    for (size_t side = 0; side < river->side_inflow_count; side++) {
        const struct network_side_inflow *inflow = &river->side_inflows[side];
        if (network_side_is_above(river, inflow, place) && inflow->share_of_gauge == gauge)
            share += inflow->share;
    }
    return share;
}

static double quantity_at(const struct settings_gauge *gauge, double flow_m3s)
{
    return gauge->measures == SETTINGS_STAGE ? rating_stage_m(&gauge->rating, flow_m3s, NULL) : flow_m3s;
}

/*
 * How long the fastest stated rise takes from one flow to another. Each gauge above by itself, its side water with it;
 * where several rise at once their rates add. The wave's change on the way is left out.
 */
static double fastest_rise_s(const struct settings *settings, size_t point, const bool is_above[], double from_m3s,
                             double to_m3s)
{
    double rate_per_s = 0.0;
    for (size_t index = 0; index < settings->gauge_count; index++) {
        const struct settings_gauge *gauge = &settings->gauges[index];
        if (!is_above[index])
            continue;
        double share = 1.0 + side_share(settings, index, point);
        double rise = quantity_at(gauge, to_m3s / share) - quantity_at(gauge, from_m3s / share);
        if (isfinite(gauge->quality.fastest_rise_per_s) && rise > 0.0)
            rate_per_s += gauge->quality.fastest_rise_per_s / rise;
    }
    return rate_per_s > 0.0 ? 1.0 / rate_per_s : to_m3s > from_m3s ? NAN : 0.0;
}

void check_deck_find(const struct check_facts *facts, size_t point, bool is_above[], struct check_deck *deck_out)
{
    struct check_deck deck = {.awash_m3s = lowest_flow_m3s(facts, point, NULL)};
    settings_gauges_above(facts->settings, point, is_above);
    for (size_t whom = 0; whom < HAZARD_WHOM_COUNT && isfinite(deck.awash_m3s); whom++) {
        const struct hazard_limit *limit = hazard_limit_for((enum hazard_whom)whom);
        struct check_deck_limit found = {.whom = (enum hazard_whom)whom,
                                         .discharge_m3s = lowest_flow_m3s(facts, point, limit)};
        if (!isfinite(found.discharge_m3s))
            continue;
        struct hazard_water water = water_of(facts, point, found.discharge_m3s);
        found.by = hazard_measure_passed(limit, &water);
        found.stage_m = stage_of(facts, point, found.discharge_m3s);
        found.after_awash_s = fastest_rise_s(facts->settings, point, is_above, deck.awash_m3s, found.discharge_m3s);
        deck.limits[deck.limit_count++] = found;
    }
    *deck_out = deck;
}

double check_deck_rated_m3s(const struct settings_point *point, bool is_part_blocked)
{
    size_t count = is_part_blocked ? point->blocked_row_count : point->stage_row_count;
    const double *flow = is_part_blocked ? point->blocked_row_discharge_m3s : point->stage_row_discharge_m3s;
    const double *stage = is_part_blocked ? point->blocked_row_stage_m : point->stage_row_stage_m;
    double deck_m = point->marks[point->deck_mark].depth_m;
    for (size_t row = 1; row < count; row++)
        if (stage[row] >= deck_m)
            return stage[row] > stage[row - 1]
                       ? flow[row - 1] + (flow[row] - flow[row - 1]) * fmax(0.0, deck_m - stage[row - 1]) /
                                             (stage[row] - stage[row - 1])
                       : flow[row - 1];
    return NAN;
}

static void print_rating(const struct settings_point *point)
{
    double clean_m3s = check_deck_rated_m3s(point, false);
    double blocked_m3s = check_deck_rated_m3s(point, true);
    if (point->stage_row_count == 0)
        return;
    printf("    level from %s", point->structure != NULL ? "a weir over the road" : "a stage rating of its own");
    if (isfinite(clean_m3s))
        printf(": '%s' at %.1f m3/s", point->marks[point->deck_mark].name, clean_m3s);
    if (isfinite(clean_m3s) && isfinite(blocked_m3s))
        printf(", part-blocked at %.1f", blocked_m3s);
    printf("\n");
}

void check_deck_print(const struct check_facts *facts, size_t point, bool is_above[])
{
    const struct settings_point *known = &facts->settings->points[point];
    struct check_deck deck;
    print_rating(known);
    if (!known->has_deck)
        return;
    check_deck_find(facts, point, is_above, &deck);
    printf("    deck at %.2f m, %s; depth and speed there are estimates, no limit is a depth to drive in\n",
           known->deck.level_m,
           known->deck.kind == HAZARD_DECK_IS_WEIR ? "a weir over the road" : "part of the section");
    for (size_t index = 0; index < deck.limit_count; index++) {
        const struct check_deck_limit *found = &deck.limits[index];
        const struct hazard_limit *limit = hazard_limit_for(found->whom);
        printf("      from %.2f m, %.1f m3/s: over the %s limit of %g %s for %s%s", found->stage_m,
               found->discharge_m3s, limit->is_draft ? "draft" : "guideline", deck_measure_limit(limit, found->by),
               deck_measure_unit(found->by), deck_whom_name(found->whom), limit->is_draft ? ", stationary" : "");
        if (isfinite(found->after_awash_s))
            printf("; in the fastest stated rise %.0f min after the deck is awash",
                   floor(found->after_awash_s / 60.0));
        printf("\n");
    }
}
