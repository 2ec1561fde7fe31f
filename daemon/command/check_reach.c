/* SPDX-License-Identifier: MIT */
#include "daemon/command/check_reach.h"

#include <math.h>
#include <stdio.h>

static const double HOUR_S = 3600.0;

/* --- floods ------------------------------------------------------------------------------------------------------- */

const char *check_reach_flood_word(enum settings_flood from)
{
    static const char *const words[] = {[SETTINGS_FLOOD_UNKNOWN] = "unknown",
                                        [SETTINGS_FLOOD_STATED] = "stated",
                                        [SETTINGS_FLOOD_FROM_GAUGING] = "assumed from the highest gauging",
                                        [SETTINGS_FLOOD_FROM_BELIEF] = "assumed from the highest value believed"};
    return words[from];
}

void check_reach_print_floods(const struct settings *settings)
{
    for (size_t i = 0; i < settings->gauge_count; i++) {
        const struct settings_gauge *gauge = &settings->gauges[i];
        if (gauge->flood_from == SETTINGS_FLOOD_UNKNOWN) {
            printf("gauge %s: no flood is known to choose methods by: state 'flood', or a rating with its highest "
                   "gauging and the fastest rise\n",
                   gauge->name);
            continue;
        }
        printf("gauge %s: methods are chosen for a flood from %.1f to %.1f m3/s that rises in %.2f h, %s%s\n",
               gauge->name, gauge->flood.base_m3s, gauge->flood.peak_m3s, gauge->flood.rise_s / HOUR_S,
               check_reach_flood_word(gauge->flood_from),
               gauge->flood_from == SETTINGS_FLOOD_STATED ? ""
                                                          : " and the fastest rise: 'flood' states a better one");
    }
    printf("\n");
}

/* --- reaches ------------------------------------------------------------------------------------------------------ */

static void print_method(const struct check_reach *found)
{
    const struct method_choice *choice = &found->choice;
    printf("    method %s, %zu cells of %.0f m, steps of %g s", method_name(choice->method), found->steps.cell_count,
           found->steps.cell_m, found->steps.time_step_s);
    if (isfinite(choice->storage_number))
        printf("; eps^1.5 lam %.2g, limit %.2g, worst %.2g at %.0f m3/s (eps %.2g, lam %.2g)", choice->storage_number,
               METHOD_STORAGE_LIMIT, choice->worst_number, choice->at_discharge_m3s, choice->spread_number,
               choice->length_number);
    printf(": %s", method_reason_text(choice->reason));
    if (choice->advised != choice->method)
        printf("; auto would take %s", method_name(choice->advised));
    printf("\n");
}

static double minutes(double change_s)
{
    return change_s / 60.0;
}

static void print_flows(const struct check_reach *found)
{
    printf("        flow m3/s  depth m  wave m/s  travel min  Courant  roughness -20 %%: min, cm  +20 %%: min, cm\n");
    for (size_t i = 0; i < found->flow_count; i++) {
        const struct network_reach_flow *flow = &found->flows[i].as_given;
        const struct network_reach_flow *smoother = &found->flows[i].smoother;
        const struct network_reach_flow *rougher = &found->flows[i].rougher;
        printf("        %9.1f  %7.2f  %8.2f  %10.0f  %7.2f  %+19.0f %+4.0f  %+11.0f %+3.0f%s\n", flow->discharge_m3s,
               flow->depth_m, flow->celerity_m_s, minutes(flow->travel_time_s), flow->courant_number,
               minutes(smoother->travel_time_s - flow->travel_time_s), 100.0 * (smoother->depth_m - flow->depth_m),
               minutes(rougher->travel_time_s - flow->travel_time_s), 100.0 * (rougher->depth_m - flow->depth_m),
               flow->discharge_m3s == found->bank_full_m3s ? "  bank full" : "");
    }
}

static void print_slower_wave(const struct check_reach *found)
{
    for (size_t i = 1; i < found->flow_count; i++)
        if (found->flows[i].as_given.travel_time_s > 1.05 * found->flows[i - 1].as_given.travel_time_s) {
            printf(
                "    note: above %.0f m3/s the wave is SLOWER (water spreads): the peak of a bigger flood can arrive "
                "later; its front does not\n",
                found->flows[i - 1].as_given.discharge_m3s);
            return;
        }
}

static void print_limit(const struct check_reach *found)
{
    if (isfinite(found->least_rise_s))
        printf(
            "    fit for floods that rise to %.0f m3/s in %.0f min or more; in quicker ones this method's peak comes "
            "out LATE and low\n",
            found->peak_m3s, ceil(found->least_rise_s / 60.0));
    else
        printf("    knows backwater; at %.0f m3/s a wave evens out over D/c = %.0f m%s\n", found->peak_m3s,
               found->diffusion_length_m,
               found->steps.cell_m > 2.0 * found->diffusion_length_m
                   ? ": cells longer than twice that give WRONG LEVELS, this reach is too steep for the method"
                   : "");
    if (isfinite(found->least_rise_s) && found->choice.raise_share > METHOD_RAISE_LIMIT)
        printf("    note: the reach below stands up to %.0f %% of the depth higher than this one's foot: levels near "
               "the "
               "foot are HIGHER than said\n",
               100.0 * found->choice.raise_share);
}

enum fw_status check_reach_print(const struct check_facts *facts, size_t index, struct fw_error *error)
{
    struct check_reach found;
    enum fw_status status = check_facts_reach(facts, index, &found, error);
    if (status != FW_OK)
        return status;
    printf("reach %s: %.0f m, slope %g", found.reach->id, found.reach->length_m, found.reach->slope_m_per_m);
    if (found.choice.flood.rise_s > 0.0)
        printf("; flood from %.1f to %.1f m3/s", found.choice.flood.base_m3s, found.choice.flood.peak_m3s);
    if (found.choice.path_length_m > 1.001 * found.reach->length_m)
        printf("; on a way of %.1f km", found.choice.path_length_m / 1000.0);
    printf("\n");
    print_method(&found);
    print_flows(&found);
    print_slower_wave(&found);
    print_limit(&found);
    return FW_OK;
}

void check_reach_print_legend(void)
{
    printf("eps is the time the wave takes to spread by itself, lam its time down the whole way from gauge to "
           "outlet, both "
           "against the flood's rise;\nthe storage form is fit while eps^1.5 lam, the mean over the flood's flows, "
           "is under "
           "the limit.\n");
}
