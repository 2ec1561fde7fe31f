/* SPDX-License-Identifier: MIT */
/*
 * The flood at each gauge that the choice of method must be right for, and the time step that follows.
 *
 * Where none is stated one is assumed, rather too quick than too slow: the storage form's arrivals come late beyond its
 * limit, the full equations' do not. Its peak lies a quarter further above the stage of no flow than anyone ever
 * measured a discharge, its base is a twentieth of that, and its rise takes what the fastest rise ever recorded or thought
 * possible, kept up all the way, needs from the one to the other.
 */
#include "daemon/settings/settings_work.h"

#include <math.h>

static const double beyond_highest_gauging = 1.25; /* of its height above the stage of no flow */
static const double base_share = 0.05;             /* of the peak */
static const double HOUR_S = 3600;

static void take_stated(struct settings_work *work, struct settings_gauge *gauge, const struct json_value *flood)
{
    struct json_value *base = settings_work_member(flood, "gauges[].flood.base_m3s");
    gauge->flood = (struct method_flood){.base_m3s = settings_work_number(flood, "gauges[].flood.base_m3s"),
                                         .peak_m3s = settings_work_number(flood, "gauges[].flood.peak_m3s"),
                                         .rise_s = settings_work_number(flood, "gauges[].flood.rise_h") * HOUR_S};
    gauge->flood_from = SETTINGS_FLOOD_STATED;
    if (base != NULL && gauge->flood.base_m3s >= gauge->flood.peak_m3s)
        json_tree_fault(work->report, base, "is not below the flood's peak: expected less than %.10g",
                        gauge->flood.peak_m3s);
}

static void assume_by_stage(struct settings_gauge *gauge)
{
    const struct rating *rating = &gauge->rating;
    double ceased_m = rating_cease_to_flow_stage_m(rating);
    bool is_gauged = isfinite(rating->highest_gauged_m) && rating->highest_gauged_m > ceased_m;
    double peak_m = is_gauged ? ceased_m + beyond_highest_gauging * (rating->highest_gauged_m - ceased_m)
                              : gauge->quality.highest;
    double peak_m3s = isfinite(peak_m) ? rating_discharge_m3s(rating, peak_m, NULL) : 0.0;
    double base_m = rating_stage_m(rating, base_share * peak_m3s, NULL);
    if (!(peak_m3s > 0.0))
        return;
    gauge->flood = (struct method_flood){.base_m3s = base_share * peak_m3s,
                                         .peak_m3s = peak_m3s,
                                         .rise_s = (peak_m - base_m) / gauge->quality.fastest_rise_per_s};
    gauge->flood_from = is_gauged ? SETTINGS_FLOOD_FROM_GAUGING : SETTINGS_FLOOD_FROM_BELIEF;
}

static void assume_by_discharge(struct settings_gauge *gauge)
{
    double peak_m3s = gauge->quality.highest;
    if (!isfinite(peak_m3s) || !(peak_m3s > 0.0))
        return;
    gauge->flood = (struct method_flood){.base_m3s = base_share * peak_m3s,
                                         .peak_m3s = peak_m3s,
                                         .rise_s = (1.0 - base_share) * peak_m3s / gauge->quality.fastest_rise_per_s};
    gauge->flood_from = SETTINGS_FLOOD_FROM_BELIEF;
}

static void build_flood(struct settings_work *work, struct settings_gauge *gauge, const struct json_value *object)
{
    const struct json_value *flood = settings_work_member(object, "gauges[].flood");
    if (flood != NULL)
        take_stated(work, gauge, flood);
    else if (!isfinite(gauge->quality.fastest_rise_per_s) || !(gauge->quality.fastest_rise_per_s > 0.0))
        return;
    else if (gauge->measures == SETTINGS_DISCHARGE)
        assume_by_discharge(gauge);
    else if (gauge->has_rating)
        assume_by_stage(gauge);
}

void settings_build_floods(struct settings_work *work)
{
    struct settings *settings = work->settings;
    const struct json_value *gauges = settings_work_member(work->root, "gauges");
    const struct json_value *object;
    double step_s = method_time_step_s(NULL, (double)settings->forecast_every_s);
    size_t gauge = 0;
    for (size_t i = 0; (object = settings_work_next(gauges, &i)) != NULL; gauge++) {
        build_flood(work, &settings->gauges[gauge], object);
        step_s = fmin(step_s, method_time_step_s(&settings->gauges[gauge].flood, (double)settings->forecast_every_s));
    }
    if (!settings->is_time_step_stated)
        settings->time_step_s = (int64_t)step_s;
}
