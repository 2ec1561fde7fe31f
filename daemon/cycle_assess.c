/* SPDX-License-Identifier: MIT */
#include "daemon/cycle_steps.h"

#include <math.h>

#include "engine/horizon.h"

#define HORIZON_TOLERANCE_M 0.02
enum {
    PEAK_LOOK_BACK_S = 3 * 3600,
    ACT_BY_NEAR_S = 3600 /* an earlier act-by wakes nobody while it is further off than this */
};

static struct passage_curves curves_of(const struct cycle *cycle, size_t point)
{
    return (struct passage_curves){.step_count = cycle->step_count + 1,
                                   .member_count = cycle->forecast_column_count,
                                   .member_column = cycle->forecast_columns,
                                   .row_stride = cycle->member_count,
                                   .stage_m = cycle_stage_m(cycle, point, 0),
                                   .start_utc_s = cycle->start_utc_s,
                                   .step_s = cycle->settings->time_step_s};
}

static size_t step_at(const struct cycle *cycle, int64_t utc_s)
{
    int64_t step = (utc_s - cycle->start_utc_s) / cycle->settings->time_step_s;
    if (step < 0)
        return 0;
    return (size_t)step > cycle->step_count ? cycle->step_count : (size_t)step;
}

/* Earliest over the roughness groups: the envelope's two edges part first in the fastest of them. */
static int64_t measured_until(const struct cycle *cycle, size_t point)
{
    const double *stage = cycle_stage_m(cycle, point, 0);
    double earliest_s = INFINITY;
    for (size_t group = 0; group < cycle->settings->roughness_factor_count; group++) {
        const double *low = stage + group * CYCLE_FUTURES + ASSUMED_FASTEST_FALL;
        const double *high = stage + group * CYCLE_FUTURES + ASSUMED_FASTEST_RISE;
        earliest_s =
            fmin(earliest_s, horizon_measured_until_s(cycle->step_count + 1, cycle->member_count, low, high,
                                                      (double)cycle->settings->time_step_s, HORIZON_TOLERANCE_M));
    }
    return isfinite(earliest_s) ? cycle->start_utc_s + (int64_t)floor(earliest_s) : PASSAGE_NEVER;
}

/* Does a gauge in mid-river measure, above the point, what passes this node? */
static bool is_measured_below(const struct cycle *cycle, const struct picture *picture, size_t node)
{
    const struct network_river *river = &cycle->settings->river;
    for (size_t gauge = 0; gauge < picture->gauge_count; gauge++)
        if (cycle->is_above[gauge] && picture->gauges[gauge].newest_utc_s != 0 &&
            network_gauge_is_inner(river, gauge) && network_leads_to(river, node, river->gauge_node[gauge]))
            return true;
    return false;
}

/* The same of a gauge: by another further down. */
static bool is_gauged_again(const struct cycle *cycle, const struct picture *picture, size_t gauge)
{
    const struct network_river *river = &cycle->settings->river;
    size_t below = network_reach_from(river, river->gauge_node[gauge]);
    return below != NETWORK_NONE && is_measured_below(cycle, picture, river->reaches[below].to_node);
}

/*
 * Side water that enters above the point and no gauge measures, as a share of all water on its way there. Both are taken at the gauges' newest
 * flow, so that the share does not swing with where on the river a flood's front is.
 */
static double unmeasured_share(const struct cycle *cycle, const struct picture *picture, size_t point)
{
    const struct network_river *river = &cycle->settings->river;
    const struct network_point *place = &river->points[point];
    double measured_m3s = 0.0;
    double unmeasured_m3s = 0.0;
    for (size_t gauge = 0; gauge < picture->gauge_count; gauge++)
        if (cycle->is_above[gauge] && !is_gauged_again(cycle, picture, gauge))
            measured_m3s += picture->gauges[gauge].newest_discharge_m3s;
    for (size_t side = 0; side < river->side_inflow_count; side++) {
        const struct network_side_inflow *inflow = &river->side_inflows[side];
        if (network_side_is_above(river, inflow, place) &&
            !is_measured_below(cycle, picture, river->reaches[inflow->reach_index].to_node))
            unmeasured_m3s += inflow->share_of_gauge == NETWORK_NONE
                                  ? inflow->constant_m3s
                                  : inflow->share * picture->gauges[inflow->share_of_gauge].newest_discharge_m3s;
    }
    return unmeasured_m3s > 0.0 ? unmeasured_m3s / (measured_m3s + unmeasured_m3s) : 0.0;
}

static bool is_peak_beyond_gauging(const struct cycle *cycle, int64_t now_utc_s)
{
    size_t count = cycle->step_count + 1;
    size_t from = step_at(cycle, now_utc_s - PEAK_LOOK_BACK_S);
    for (size_t index = 0; index < cycle->settings->gauge_count; index++) {
        const struct settings_gauge *gauge = &cycle->settings->gauges[index];
        if (!cycle->is_above[index] || gauge->measures != SETTINGS_STAGE || !isfinite(gauge->rating.highest_gauged_m))
            continue;
        double gauged_m3s = rating_discharge_m3s(&gauge->rating, gauge->rating.highest_gauged_m, NULL);
        for (size_t step = from; step < count; step++)
            for (size_t future = 0; future < ASSUMED_FORECAST_COUNT; future++)
                if (cycle_inflow_m3s(cycle, index, future, step) > gauged_m3s)
                    return true;
    }
    return false;
}

/* Since when the highest run has been below the deck by the margin; 0: it is not. */
static int64_t below_since(const struct cycle *cycle, size_t point, int64_t now_utc_s, double limit_m)
{
    int64_t since = 0;
    for (size_t step = step_at(cycle, now_utc_s) + 1; step-- > 0;) {
        double spread[3];
        cycle_spread_at(cycle, point, step, spread);
        if (spread[2] >= limit_m)
            break;
        since = cycle->start_utc_s + (int64_t)step * cycle->settings->time_step_s;
    }
    return since;
}

/* How the gauges on the path stand: the one that has been silent longest speaks for the path. */
static void assess_path(struct cycle *cycle, const struct picture *picture, size_t index, struct point_picture *point)
{
    settings_gauges_above(cycle->settings, index, cycle->is_above);
    point->is_unknown = false;
    point->is_blind = false;
    point->is_rising = false;
    point->silent_s = 0;
    point->newest_utc_s = 0;
    bool has_hand = false;
    for (size_t gauge = 0; gauge < picture->gauge_count; gauge++) {
        if (!cycle->is_above[gauge])
            continue;
        const struct gauge_picture *above = &picture->gauges[gauge];
        point->is_unknown |= above->newest_utc_s == 0;
        point->is_blind |= above->is_blind;
        point->is_rising |= above->is_rising;
        has_hand |= above->is_hand;
        if (above->silent_s >= point->silent_s) {
            point->silent_s = above->silent_s;
            point->newest_utc_s = above->newest_utc_s;
        }
    }
    point->is_outage_told &= point->is_blind || has_hand;
}

/* A signed trigger holds on a reading, or on a rise carried forward while the gauge is silent. */
static void assess_triggers(const struct cycle *cycle, const struct picture *picture,
                            const struct settings_point *known, int64_t now_utc_s, struct point_picture *point)
{
    bool was_holding = point->trigger_holds || point->assumed_trigger_holds;
    point->trigger_holds = false;
    point->assumed_trigger_holds = false;
    for (size_t index = 0; index < known->trigger_count && !point->trigger_holds; index++) {
        const struct settings_trigger *trigger = &known->triggers[index];
        const struct settings_gauge *settings_gauge = &cycle->settings->gauges[trigger->gauge];
        const struct gauge_picture *gauge = &picture->gauges[trigger->gauge];
        if (gauge->newest_utc_s == 0 || (trigger->needs_rising && !gauge->is_rising))
            continue;
        if (gauge->newest_value >= trigger->value) {
            point->trigger_holds = true;
            point->trigger = index;
            if (!was_holding)
                point->trigger_since_utc_s = gauge->newest_utc_s;
        } else if (gauge->is_rising &&
                   gauge->silent_s > settings_gauge->expect_every_s + settings_gauge->delivery_s &&
                   assumed_value_carried(&settings_gauge->assumed, gauge->newest_value, gauge->rate_per_s,
                                         (double)(now_utc_s - gauge->newest_utc_s)) >= trigger->value) {
            point->assumed_trigger_holds = true;
            point->trigger = index;
            if (!was_holding)
                point->trigger_since_utc_s =
                    gauge->newest_utc_s + (int64_t)ceil((trigger->value - gauge->newest_value) / gauge->rate_per_s);
        }
    }
    if (!point->trigger_holds && !point->assumed_trigger_holds)
        point->trigger_since_utc_s = 0;
}

/* No reading has ever counted at some gauge above: the dry bed that was routed in its place says nothing. */
static void void_water(const struct settings_point *known, struct point_picture *point)
{
    static const struct passage unknown = {.earliest_utc_s = PASSAGE_NEVER,
                                           .likely_utc_s = PASSAGE_NEVER,
                                           .latest_utc_s = PASSAGE_NEVER,
                                           .below_again_earliest_utc_s = PASSAGE_NEVER,
                                           .below_again_latest_utc_s = PASSAGE_NEVER};
    for (size_t mark = 0; mark < known->mark_count; mark++)
        point->marks[mark].passage = unknown;
    point->level_now.low_m = point->level_now.likely_m = point->level_now.high_m = NAN;
    point->peak = (struct passage_peak){NAN, NAN, NAN, PASSAGE_NEVER};
    point->deck = deck_picture_empty();
    point->chance_of_return = 1.0;
    point->measured_until_utc_s = 0;
    point->unmeasured_share = 0.0;
    point->is_peak_beyond_gauging = false;
    point->is_peak_above_survey = false;
    point->below_since_utc_s = 0;
}

static enum fw_status assess_water(struct cycle *cycle, const struct picture *picture, size_t index,
                                   int64_t now_utc_s, struct point_picture *point)
{
    const struct settings_point *known = &cycle->settings->points[index];
    struct passage_curves curves = curves_of(cycle, index);
    size_t now_step = step_at(cycle, now_utc_s);
    double spread[3];
    cycle_spread_at(cycle, index, now_step, spread);
    point->level_now.low_m = spread[0];
    point->level_now.likely_m = spread[1];
    point->level_now.high_m = spread[2];
    enum fw_status status = passage_peak_after(&curves, now_utc_s, &point->peak);
    for (size_t mark = 0; mark < known->mark_count && status == FW_OK; mark++)
        status = passage_of_mark(&curves, now_utc_s, known->marks[mark].depth_m, &point->marks[mark].passage);
    if (status == FW_OK && known->has_deck)
        status = cycle_assess_deck(cycle, index, now_step, now_utc_s, &point->deck);
    int64_t back_by_utc_s = now_utc_s + known->reopen_and_reclose_s;
    int64_t end_utc_s = cycle->start_utc_s + (int64_t)cycle->step_count * cycle->settings->time_step_s;
    if (status == FW_OK)
        status =
            passage_chance_between(&curves, known->marks[known->closing_mark].depth_m, now_utc_s,
                                   back_by_utc_s < end_utc_s ? back_by_utc_s : end_utc_s, &point->chance_of_return);
    point->measured_until_utc_s = measured_until(cycle, index);
    point->unmeasured_share = unmeasured_share(cycle, picture, index);
    point->is_peak_beyond_gauging = is_peak_beyond_gauging(cycle, now_utc_s);
    point->is_peak_above_survey = cycle_is_above_survey(cycle, index, step_at(cycle, now_utc_s - PEAK_LOOK_BACK_S));
    point->below_since_utc_s =
        below_since(cycle, index, now_utc_s, known->marks[known->deck_mark].depth_m - known->reopen_below_m);
    return status;
}

/* The lowest mark that water on the way would reach: trafficked or not, never above the closing mark. */
static size_t lowest_wet_mark(const struct settings_point *known)
{
    for (size_t mark = 0; mark < known->mark_count; mark++)
        if (known->marks[mark].is_trafficked)
            return mark;
    return known->closing_mark;
}

/*
 * Must this change wake someone? A step up, an act-by that came nearer while nobody is on the way, or silence that asks for an act. What comes
 * down, comes back or concerns a shut road is an update; and one outage wakes once, however often hand readings interrupt it.
 */
static bool change_wakes(const struct settings_point *known, const struct point_picture *point,
                         const struct advice *before, const struct advice *after, int64_t now_utc_s)
{
    bool is_open = point->road.state == ROAD_OPEN || point->road.state == ROAD_HANDED_BACK;
    bool is_on_ladder = after->level <= ADVICE_LATE;
    bool turned_blind = after->is_blind && !before->is_blind;
    if (is_on_ladder && before->level <= ADVICE_LATE && after->level > before->level)
        return true;
    if (is_on_ladder && before->level > ADVICE_LATE && after->level >= ADVICE_SEND)
        return true;
    if (after->near_sides_only && !before->near_sides_only)
        return true;
    if (turned_blind && is_on_ladder && !point->is_outage_told)
        return point->is_rising || after->level >= ADVICE_MUSTER;
    bool is_near = after->level >= ADVICE_SEND || after->act_by_utc_s < now_utc_s + ACT_BY_NEAR_S;
    return is_open && is_on_ladder && after->level >= ADVICE_MUSTER && is_near &&
           before->told_act_by_utc_s != PASSAGE_NEVER &&
           after->act_by_utc_s < before->told_act_by_utc_s - (int64_t)known->policy.act_by_shift_s;
}

static enum fw_status assess_advice(struct cycle *cycle, size_t index, int64_t now_utc_s, struct point_picture *point,
                                    struct delta *delta)
{
    const struct settings *settings = cycle->settings;
    const struct settings_point *known = &settings->points[index];
    bool is_on_measured_water = !point->is_blind && point->measured_until_utc_s >= now_utc_s;
    struct advice_facts facts = {
        .now_utc_s = now_utc_s,
        .is_night = when_is_between(when_minute_of_day(&settings->zone, now_utc_s), settings->night_from_minute,
                                    settings->night_to_minute),
        .closing = point->marks[known->closing_mark].passage,
        .lowest_wet = point->marks[lowest_wet_mark(known)].passage,
        .trigger_holds = point->trigger_holds,
        .assumed_trigger_holds = point->assumed_trigger_holds,
        .is_blind = point->is_blind,
        .is_rising = point->is_rising,
        .silent_s = (double)point->silent_s,
        .water_seen_wet = point->water.is_known && point->water.is_wet,
        .road = point->road.state,
        .crew_called_utc_s = point->crew_called_utc_s,
        .below_deck_for_s = is_on_measured_water && point->below_since_utc_s > 0
                                ? (double)(now_utc_s - point->below_since_utc_s)
                                : 0.0,
        .chance_of_return = point->chance_of_return,
    };
    bool has_changed = false;
    struct advice before = point->advice;
    point->advice = advice_step(&known->policy, &facts, &before, &has_changed);
    if (point->advice.onset_utc_s != before.onset_utc_s)
        point->told_number = 0; /* a new thread has a new number */
    if (!has_changed)
        return FW_OK;
    bool wakes = change_wakes(known, point, &before, &point->advice, now_utc_s);
    point->is_outage_told |= point->advice.is_blind;
    enum fw_status status =
        buffer_grow(&delta->decisions, &delta->decision_capacity, delta->decision_count, sizeof *delta->decisions);
    if (status == FW_OK)
        delta->decisions[delta->decision_count++] =
            (struct decision){.point = (int32_t)index, .before = before, .after = point->advice, .wakes = wakes};
    return status;
}

enum fw_status cycle_assess(struct cycle *cycle, int64_t now_utc_s, struct delta *delta)
{
    struct picture *next = delta->next;
    enum fw_status status = FW_OK;
    for (size_t index = 0; index < next->point_count && status == FW_OK; index++) {
        const struct settings_point *known = &cycle->settings->points[index];
        struct point_picture *point = &next->points[index];
        if (known->mark_count == 0)
            continue;
        assess_path(cycle, next, index, point);
        assess_triggers(cycle, next, known, now_utc_s, point);
        if (point->is_unknown)
            void_water(known, point);
        else
            status = assess_water(cycle, next, index, now_utc_s, point);
        if (status == FW_OK && known->has_crew)
            status = assess_advice(cycle, index, now_utc_s, point, delta);
    }
    return status;
}
