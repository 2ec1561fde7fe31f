/* SPDX-License-Identifier: MIT */
#include "daemon/forecast_network.h"

#include <math.h>
#include <stdlib.h>

/* Where nothing is stated. */
static const double unknown_stage_m = 10.0;
static const double unknown_discharge_m3s = 1000.0;

static const double trickle_share = 1e-3; /* of the flood's peak: a centimetre or two of depth */

static double highest_believed_m3s(const struct settings_gauge *gauge)
{
    if (gauge->gives_level_only)
        return 0.0;
    bool is_stage = gauge->measures == SETTINGS_STAGE;
    double value = gauge->quality.highest;
    if (!isfinite(value))
        value = is_stage ? unknown_stage_m : unknown_discharge_m3s;
    return is_stage ? rating_discharge_m3s(&gauge->rating, value, NULL) : value;
}

static double peak_m3s(const struct settings_gauge *gauge)
{
    return gauge->flood_from == SETTINGS_FLOOD_UNKNOWN ? highest_believed_m3s(gauge) : gauge->flood.peak_m3s;
}

double forecast_network_least_inflow_m3s(const struct settings *settings, const struct network *network, size_t gauge)
{
    const struct network_river *river = &settings->river;
    size_t node = settings->gauges[gauge].node;
    for (size_t reach = 0; reach < river->reach_count; reach++) {
        struct method_choice choice;
        network_reach_choice(network, reach, &choice);
        if (network_method_is_full(choice.method) && node != SETTINGS_NONE &&
            network_leads_to(river, node, river->reaches[reach].to_node))
            return trickle_share * peak_m3s(&settings->gauges[gauge]);
    }
    return 0.0;
}

double forecast_network_peak_m3s(const struct settings *settings)
{
    double total_m3s = 0.0;
    for (size_t gauge = 0; gauge < settings->gauge_count; gauge++)
        if (!network_gauge_is_inner(&settings->river, gauge)) /* no more water comes there */
            total_m3s += peak_m3s(&settings->gauges[gauge]);
    return total_m3s;
}

/* The largest flow the tables are built for: every gauge at the top of what is believed or stated, side water added. */
static double largest_m3s(const struct settings *settings)
{
    double total_m3s = 0.0, inner_m3s = 0.0;
    for (size_t gauge = 0; gauge < settings->gauge_count; gauge++) {
        double most_m3s = fmax(highest_believed_m3s(&settings->gauges[gauge]), peak_m3s(&settings->gauges[gauge]));
        if (network_gauge_is_inner(&settings->river, gauge)) /* no more water comes there */
            inner_m3s = fmax(inner_m3s, peak_m3s(&settings->gauges[gauge]));
        else
            total_m3s += most_m3s;
    }
    total_m3s = fmax(total_m3s, inner_m3s);
    double with_sides_m3s = total_m3s;
    for (size_t side = 0; side < settings->river.side_inflow_count; side++) {
        const struct network_side_inflow *inflow = &settings->river.side_inflows[side];
        with_sides_m3s += inflow->share_of_gauge == NETWORK_NONE ? inflow->constant_m3s : inflow->share * total_m3s;
    }
    return with_sides_m3s;
}

static enum fw_status create(const struct settings *settings, const struct network_river *river,
                             struct network_options options, struct network **network_out, struct fw_error *error)
{
    struct method_flood *floods = calloc(settings->gauge_count + 1, sizeof *floods);
    struct network_fault fault = {{0}};
    if (floods == NULL)
        return fw_error_set(error, FW_NO_MEMORY, "no memory for the forecast");
    for (size_t gauge = 0; gauge < settings->gauge_count; gauge++)
        floods[gauge] = settings->gauges[gauge].flood;
    options.time_step_s = (double)settings->time_step_s;
    options.largest_discharge_m3s = largest_m3s(settings);
    options.typical_peak_m3s = forecast_network_peak_m3s(settings);
    options.gauge_floods = floods;
    enum fw_status status = network_create(river, &options, network_out, &fault);
    free(floods);
    if (status != FW_OK)
        return fw_error_set(error, status, "%s: %s", settings->file, fault.text[0] ? fault.text : "no memory");
    return FW_OK;
}

enum fw_status forecast_network_create(const struct settings *settings, const struct network_river *river,
                                       size_t members_per_group, struct network **network_out, struct fw_error *error)
{
    const struct network_options options = {.group_count = settings->roughness_factor_count,
                                            .roughness_factors = settings->roughness_factors,
                                            .members_per_group = members_per_group};
    return create(settings, river, options, network_out, error);
}

enum fw_status forecast_network_create_as_given(const struct settings *settings, struct network **network_out,
                                                struct fw_error *error)
{
    static const double as_given = 1.0;
    const struct network_options options = {.group_count = 1, .roughness_factors = &as_given, .members_per_group = 1};
    return create(settings, &settings->river, options, network_out, error);
}
