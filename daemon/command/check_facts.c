/* SPDX-License-Identifier: MIT */
#include "daemon/command/check_facts.h"

#include <math.h>

#include "daemon/forecast_network.h"
#include "engine/horizon.h"
#include "engine//method.h"

enum { FLOW_COUNT = CHECK_FLOW_COUNT, SEARCH_COUNT = 256 };

static void spread_flows(double peak_m3s, double flows_out[FLOW_COUNT])
{
    for (size_t flow = 0; flow < FLOW_COUNT; flow++)
        flows_out[flow] = peak_m3s * pow(2.0, (double)flow - (FLOW_COUNT - 2.0));
}

enum fw_status check_facts_open(struct check_facts *facts, const struct settings *settings, struct fw_error *error)
{
    *facts = (struct check_facts){.settings = settings};
    spread_flows(forecast_network_peak_m3s(settings), facts->flows_m3s);
    facts->fastest_roughness = facts->slowest_roughness = 1.0;
    for (size_t index = 0; index < settings->roughness_factor_count; index++) {
        facts->fastest_roughness = fmin(facts->fastest_roughness, settings->roughness_factors[index]);
        facts->slowest_roughness = fmax(facts->slowest_roughness, settings->roughness_factors[index]);
    }
    return forecast_network_create_as_given(settings, &facts->network, error);
}

void check_facts_clear(struct check_facts *facts)
{
    network_destroy(facts->network);
    *facts = (struct check_facts){0};
}

/* --- reaches --- */

/* A hair below it, where the wave is still the channel's; NAN: not known. */
static double bank_full_m3s(const struct network_reach *reach)
{
    static const double hair = 1e-3;
    return reach->section->has_plain ? section_normal_discharge_m3s(reach->section, reach->slope_m_per_m,
                                                                    reach->section->plain_above_m * (1.0 - hair))
                                     : NAN;
}

/* The flows of the table, and bank full among them where it is known; how many. */
static size_t reach_flows(double peak_m3s, double bank_full, double flows_out[FLOW_COUNT + 1])
{
    double even_m3s[FLOW_COUNT];
    size_t count = 0;
    spread_flows(peak_m3s, even_m3s);
    bool has_bank_full = bank_full > even_m3s[0] && bank_full < even_m3s[FLOW_COUNT - 1];
    for (size_t flow = 0; flow < FLOW_COUNT; flow++) {
        if (has_bank_full && bank_full <= even_m3s[flow]) {
            flows_out[count++] = bank_full;
            has_bank_full = false;
        }
        if (count == 0 || even_m3s[flow] > flows_out[count - 1])
            flows_out[count++] = even_m3s[flow];
    }
    return count;
}

/* What the flows do with the roughness times a factor. */
static enum fw_status flows_at(const struct check_facts *facts, size_t index, double roughness_factor, size_t count,
                               const double flows_m3s[], struct network_reach_flow found[FLOW_COUNT + 1])
{
    struct network_reach_steps steps;
    return network_reach_summary(facts->network, index, roughness_factor, count, flows_m3s, &steps, found);
}

static enum fw_status fill_flows(const struct check_facts *facts, size_t index, struct check_reach *found)
{
    static const double factors[] = {1.0, 0.8, 1.2};
    double flows_m3s[FLOW_COUNT + 1];
    struct network_reach_flow at[3][FLOW_COUNT + 1];
    enum fw_status status = FW_OK;
    found->flow_count = reach_flows(found->peak_m3s, found->bank_full_m3s, flows_m3s);
    for (size_t i = 0; i < 3 && status == FW_OK; i++)
        status = flows_at(facts, index, factors[i], found->flow_count, flows_m3s, at[i]);
    for (size_t flow = 0; flow < found->flow_count && status == FW_OK; flow++)
        found->flows[flow] = (struct check_flow){at[0][flow], at[1][flow], at[2][flow]};
    return status;
}

/* The number falls with the rise to the power of 5/2. */
static double least_rise_s(const struct method_choice *choice, double length_m, const struct network_reach_flow *peak)
{
    if (choice->flood.rise_s > 0.0 && choice->storage_number > 0.0)
        return choice->flood.rise_s * pow(choice->storage_number / METHOD_STORAGE_LIMIT, 0.4);
    return method_storage_least_rise_s(length_m, peak->celerity_m_s, peak->diffusivity_m2_s);
}

enum fw_status check_facts_reach(const struct check_facts *facts, size_t index, struct check_reach *reach_out,
                                 struct fw_error *error)
{
    const struct network_reach *reach = &facts->settings->river.reaches[index];
    struct check_reach found = {.reach = reach, .bank_full_m3s = bank_full_m3s(reach)};
    struct network_reach_flow peak;
    network_reach_choice(facts->network, index, &found.choice);
    found.peak_m3s =
        found.choice.flood.peak_m3s > 0.0 ? found.choice.flood.peak_m3s : facts->flows_m3s[FLOW_COUNT - 2];
    enum fw_status status =
        network_reach_summary(facts->network, index, 1.0, 1, &found.peak_m3s, &found.steps, &peak);
    if (status == FW_OK)
        status = fill_flows(facts, index, &found);
    if (status != FW_OK)
        return fw_error_set(error, status, "reach '%s': its flows cannot be computed", reach->id);
    found.least_rise_s = network_method_is_full(found.choice.method)
                             ? NAN
                             : least_rise_s(&found.choice, found.choice.path_length_m, &peak);
    found.diffusion_length_m = peak.diffusivity_m2_s / peak.celerity_m_s;
    *reach_out = found;
    return FW_OK;
}

/* --- points --- */

/* Down the path from a gauge to a point at one flow; NAN: it cannot be computed. */
static double path_travel_time_s(const struct check_facts *facts, size_t gauge, size_t point, double roughness_factor,
                                 double flow_m3s)
{
    const struct network_river *river = &facts->settings->river;
    const struct network_point *place = &river->points[point];
    size_t node = facts->settings->gauges[gauge].node;
    double total_s = 0.0;
    for (size_t reach; (reach = network_reach_from(river, node)) != NETWORK_NONE;
         node = river->reaches[reach].to_node) {
        struct network_reach_steps steps;
        struct network_reach_flow flow;
        if (network_reach_summary(facts->network, reach, roughness_factor, 1, &flow_m3s, &steps, &flow) != FW_OK)
            return NAN;
        if (reach == place->reach_index)
            return total_s + flow.travel_time_s * place->at_m / river->reaches[reach].length_m;
        total_s += flow.travel_time_s;
    }
    return NAN;
}

struct wave {
    double flow_m3s, travel_s;
};

/*
 * Of all flows of the table's range the one that travels fastest: a later part of a flood overtakes the earlier ones,
 * and in a fast rise what wets the road comes with it. Sought finely, as it stands just below bank full.
 */
static struct wave fastest_wave(const struct check_facts *facts, size_t gauge, size_t point, double roughness_factor)
{
    double octaves = log2(facts->flows_m3s[FLOW_COUNT - 1] / facts->flows_m3s[0]);
    struct wave fastest = {NAN, INFINITY};
    for (size_t index = 0; index <= SEARCH_COUNT; index++) {
        double flow_m3s = facts->flows_m3s[0] * exp2(octaves * (double)index / SEARCH_COUNT);
        double travel_s = path_travel_time_s(facts, gauge, point, roughness_factor, flow_m3s);
        if (travel_s < fastest.travel_s)
            fastest = (struct wave){flow_m3s, travel_s};
    }
    return fastest;
}

/* Down the path, reach by reach; 0 where it cannot be computed. */
static double not_felt_before_s(const struct check_facts *facts, size_t gauge, size_t point, double roughness_factor)
{
    const struct network_river *river = &facts->settings->river;
    const struct network_point *place = &river->points[point];
    size_t node = facts->settings->gauges[gauge].node;
    double octaves = log2(facts->flows_m3s[FLOW_COUNT - 1] / facts->flows_m3s[0]);
    double flow_m3s[SEARCH_COUNT + 1], total_s = 0.0;
    for (size_t index = 0; index <= SEARCH_COUNT; index++)
        flow_m3s[index] = facts->flows_m3s[0] * exp2(octaves * (double)index / SEARCH_COUNT);
    for (size_t reach; (reach = network_reach_from(river, node)) != NETWORK_NONE;
         node = river->reaches[reach].to_node) {
        struct network_reach_steps steps;
        struct network_reach_flow flows[SEARCH_COUNT + 1];
        double length_m = reach == place->reach_index ? place->at_m : river->reaches[reach].length_m;
        if (network_reach_summary(facts->network, reach, roughness_factor, SEARCH_COUNT + 1, flow_m3s, &steps,
                                  flows) != FW_OK)
            return 0.0;
        total_s += horizon_not_felt_before_s(length_m, SEARCH_COUNT + 1, flows);
        if (reach == place->reach_index)
            return total_s;
    }
    return 0.0;
}

/* The flow that brings the point's level to its closing mark, not above the table's range. */
static double closing_flow_m3s(const struct check_facts *facts, size_t point)
{
    const struct settings_point *known = &facts->settings->points[point];
    double depth_m = known->marks[known->closing_mark].depth_m;
    double low_m3s = 0.0, high_m3s = facts->flows_m3s[FLOW_COUNT - 1];
    for (int halving = 0; halving < 60; halving++) {
        double middle_m3s = 0.5 * (low_m3s + high_m3s);
        if (network_point_stage_m(facts->network, point, 0, middle_m3s) < depth_m)
            low_m3s = middle_m3s;
        else
            high_m3s = middle_m3s;
    }
    return high_m3s;
}

void check_facts_lead(const struct check_facts *facts, size_t gauge, size_t point, struct check_lead *lead_out)
{
    const struct settings_gauge *known = &facts->settings->gauges[gauge];
    struct check_lead lead = {.lag_s = (double)(known->expect_every_s + known->delivery_s),
                              .closing_m3s = closing_flow_m3s(facts, point)};
    lead.closing_travel_s = path_travel_time_s(facts, gauge, point, 1.0, lead.closing_m3s);
    struct wave fastest = fastest_wave(facts, gauge, point, facts->fastest_roughness);
    lead.fastest_m3s = fastest.flow_m3s;
    lead.fastest_travel_s = fastest.travel_s;
    lead.not_felt_before_s = not_felt_before_s(facts, gauge, point, facts->fastest_roughness);
    lead.slow_rise_s = lead.closing_travel_s - lead.lag_s;
    lead.fastest_rise_s = lead.fastest_travel_s - lead.lag_s;
    *lead_out = lead;
}
