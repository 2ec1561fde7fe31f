/* SPDX-License-Identifier: MIT */
#include "engine/method.h"

#include <math.h>
#include <stddef.h>
#include <string.h>

enum { RANGE_PARTS = 20, PROFILE_STEPS = 80 };

static const double smallest_share = 0.02; /* of the peak: smaller flows are of no account in the choice */
static const double longest_step_s = 60.0;
static const double steps_in_a_rise = 40.0;

static const char *const names[] = {[NETWORK_MUSKINGUM_CUNGE] = "muskingum-cunge",
                                    [NETWORK_KINEMATIC] = "kinematic",
                                    [NETWORK_KINEMATIC_LINEAR] = "kinematic-linear",
                                    [NETWORK_DYNAMIC] = "dynamic",
                                    [NETWORK_DIFFUSIVE] = "diffusive",
                                    [NETWORK_AUTO] = "auto"};
enum { NAME_COUNT = sizeof names / sizeof *names };

static const char *const reasons[METHOD_REASON_COUNT] = {
    [METHOD_STATED] = "stated, not chosen",
    [METHOD_NO_FLOOD] = "no flood is known to choose by",
    [METHOD_WITHIN_LIMIT] = "storage and celerity tell enough of the wave",
    [METHOD_BEYOND_LIMIT] = "the wave spreads too much for the storage form",
    [METHOD_EARLY_LEVELS] = "levels would be reached too early by the storage form",
    [METHOD_HELD_LEVEL] = "a level is held at the foot",
    [METHOD_STRUCTURE] = "a structure or a drop of the bed stands at the foot",
    [METHOD_BACKWATER] = "a control below raises the level",
    [METHOD_TOO_STEEP] = "the full equations would be wanted, but so steep a reach needs too many cells",
    [METHOD_TOO_FAST] = "the full equations would be wanted, but the flow is too near critical",
};

const char *method_name(enum network_method method)
{
    return (size_t)method < NAME_COUNT ? names[method] : "?";
}

bool method_from_name(const char *name, enum network_method *method_out)
{
    for (size_t method = 0; method < NAME_COUNT; method++)
        if (strcmp(name, names[method]) == 0) {
            *method_out = (enum network_method)method;
            return true;
        }
    return false;
}

const char *method_reason_text(enum method_reason reason)
{
    return (size_t)reason < METHOD_REASON_COUNT ? reasons[reason] : "?";
}

/* --- numbers ------------------------------------------------------------------------------------------------------ */

double method_storage_number(double length_m, double celerity_m_s, double diffusivity_m2_s, double rise_s)
{
    double spreading = diffusivity_m2_s / (celerity_m_s * celerity_m_s * rise_s);
    return spreading * sqrt(spreading) * length_m / (celerity_m_s * rise_s);
}

double method_storage_least_rise_s(double length_m, double celerity_m_s, double diffusivity_m2_s)
{
    return pow(method_storage_number(length_m, celerity_m_s, diffusivity_m2_s, 1.0) / METHOD_STORAGE_LIMIT, 0.4);
}

double method_kinematic_number(double rise_s, double slope_m_per_m, double velocity_m_s, double depth_m)
{
    return rise_s * slope_m_per_m * velocity_m_s / depth_m;
}

double method_diffusion_number(double rise_s, double slope_m_per_m, double depth_m)
{
    return rise_s * slope_m_per_m * sqrt(SECTION_GRAVITY_M_S2 / depth_m);
}

struct method_flood method_flood_of(size_t count, const double time_s[], const double discharge_m3s[])
{
    struct method_flood flood = {discharge_m3s[0], discharge_m3s[0], INFINITY};
    double lowest_m3s = discharge_m3s[0], steepest_m3s2 = 0.0;
    for (size_t i = 1; i < count; i++) {
        double rise_m3s = discharge_m3s[i] - discharge_m3s[i - 1];
        steepest_m3s2 = fmax(steepest_m3s2, rise_m3s / (time_s[i] - time_s[i - 1]));
        lowest_m3s = fmin(lowest_m3s, discharge_m3s[i]);
        if (discharge_m3s[i] > flood.peak_m3s) {
            flood.peak_m3s = discharge_m3s[i];
            flood.base_m3s = lowest_m3s;
        }
    }
    if (flood.peak_m3s > flood.base_m3s)
        flood.rise_s = (flood.peak_m3s - flood.base_m3s) / steepest_m3s2;
    return flood;
}

double method_time_step_s(const struct method_flood *flood, double data_interval_s)
{
    double longest = longest_step_s;
    if (flood != NULL && flood->rise_s > 0.0)
        longest = fmin(longest, flood->rise_s / steps_in_a_rise);
    double whole_s = fmax(1.0, floor(longest));
    while (whole_s > 0.5 * longest && fmod(data_interval_s, whole_s) != 0.0)
        whole_s -= 1.0;
    return whole_s > 0.5 * longest ? whole_s : data_interval_s / ceil(data_interval_s / fmax(1.0, longest));
}

/* --- the choice --------------------------------------------------------------------------------------------------- */

/*
 * The storage number of one part of the range of flows, by the chords of its curve: celerity jumps at bank full. The parts
 * have equal weight, as a flood spends its rise in all of them; a wave that just touches its plain is hardly slowed by it.
 */
static void number_of_part(const struct method_reach *reach, const struct method_flood *flood, double low_m3s,
                           double high_m3s, struct method_choice *choice)
{
    double root_slope = sqrt(reach->slope_m_per_m);
    double middle_m3s = 0.5 * (low_m3s + high_m3s);
    struct flow_curve_place low, middle, high;
    flow_curve_at(reach->curve, low_m3s / root_slope, &low);
    flow_curve_at(reach->curve, middle_m3s / root_slope, &middle);
    flow_curve_at(reach->curve, high_m3s / root_slope, &high);
    double celerity = (high_m3s - low_m3s) / (high.area_m2 - low.area_m2);
    double width_m = (high.area_m2 - low.area_m2) / (high.depth_m - low.depth_m);
    double diffusivity =
        flow_curve_diffusivity_m2_s(middle_m3s, middle.area_m2, width_m, celerity, reach->slope_m_per_m);
    double early_s = diffusivity / (celerity * celerity);
    double early_number = early_s / fmax(METHOD_EARLY_LEAST_S, METHOD_EARLY_SHARE * reach->length_m / celerity);
    if (early_number > choice->early_number) {
        choice->early_number = early_number;
        choice->early_s = early_s;
    }
    double number = method_storage_number(choice->path_length_m, celerity, diffusivity, flood->rise_s);
    choice->storage_number += number / RANGE_PARTS;
    if (!(number > choice->worst_number))
        return;
    choice->worst_number = number;
    choice->spread_number = diffusivity / (celerity * celerity * flood->rise_s);
    choice->length_number = choice->path_length_m / (celerity * flood->rise_s);
    choice->at_discharge_m3s = middle_m3s;
}

static void numbers_of_range(const struct method_reach *reach, const struct method_flood *flood,
                             struct method_choice *choice)
{
    double from_m3s = fmax(flood->base_m3s, smallest_share * flood->peak_m3s);
    double part_m3s = (flood->peak_m3s - from_m3s) / RANGE_PARTS;
    choice->storage_number = choice->worst_number = choice->spread_number = choice->length_number = 0.0;
    choice->early_s = choice->early_number = 0.0;
    choice->at_discharge_m3s = flood->peak_m3s;
    for (int part = 0; part < RANGE_PARTS && part_m3s > 0.0; part++)
        number_of_part(reach, flood, from_m3s + part * part_m3s, from_m3s + (part + 1) * part_m3s, choice);
}

static void numbers_at_peak(const struct method_reach *reach, const struct method_flood *flood,
                            struct method_choice *choice)
{
    double slope = reach->slope_m_per_m;
    double peak_m3s = flood->peak_m3s;
    struct flow_curve_place place;
    flow_curve_at(reach->curve, peak_m3s / sqrt(slope), &place);
    double celerity = place.conveyance_slope_m_s * sqrt(slope);
    double velocity = peak_m3s / place.area_m2;
    choice->froude = velocity / sqrt(SECTION_GRAVITY_M_S2 * place.area_m2 / place.top_width_m);
    choice->diffusion_length_m =
        flow_curve_diffusivity_m2_s(peak_m3s, place.area_m2, place.top_width_m, celerity, slope) / celerity;
    choice->kinematic_number = method_kinematic_number(flood->rise_s, slope, velocity, place.depth_m);
    choice->diffusion_number = method_diffusion_number(flood->rise_s, slope, place.depth_m);
}

/*
 * The rule. A held level outranks the guards of steep and fast water: by the storage form it would be forgotten; elsewhere
 * the storage form is the better answer on such a reach.
 */
static enum method_reason reason_for(const struct method_reach *reach, const struct method_choice *choice)
{
    bool is_raised = reach->has_control && reach->raise_share > METHOD_RAISE_LIMIT;
    if (reach->is_level_held)
        return METHOD_HELD_LEVEL;
    if (reach->has_structure)
        return METHOD_STRUCTURE;
    if (!(choice->flood.rise_s > 0.0))
        return METHOD_NO_FLOOD;
    bool is_peak_right = !(choice->storage_number >= METHOD_STORAGE_LIMIT);
    if (is_peak_right && !(choice->early_number > 1.0) && !is_raised)
        return METHOD_WITHIN_LIMIT;
    if (choice->froude > METHOD_FROUDE_LIMIT)
        return METHOD_TOO_FAST;
    if (reach->length_m > 2.0 * choice->diffusion_length_m * METHOD_MOST_FULL_CELLS)
        return METHOD_TOO_STEEP;
    return is_raised ? METHOD_BACKWATER : is_peak_right ? METHOD_EARLY_LEVELS : METHOD_BEYOND_LIMIT;
}

void method_choose(const struct method_reach *reach, const struct method_flood *flood,
                   struct method_choice *choice_out)
{
    *choice_out = (struct method_choice){.flood = *flood,
                                         .storage_number = NAN,
                                         .worst_number = NAN,
                                         .spread_number = NAN,
                                         .length_number = NAN,
                                         .at_discharge_m3s = NAN,
                                         .early_s = NAN,
                                         .early_number = NAN,
                                         .froude = NAN,
                                         .diffusion_length_m = NAN,
                                         .kinematic_number = NAN,
                                         .diffusion_number = NAN,
                                         .path_length_m = fmax(reach->path_length_m, reach->length_m),
                                         .raise_share = reach->raise_share};
    if (flood->rise_s > 0.0 && flood->peak_m3s > 0.0) {
        numbers_of_range(reach, flood, choice_out);
        numbers_at_peak(reach, flood, choice_out);
    }
    choice_out->reason = reason_for(reach, choice_out);
    bool is_full = choice_out->reason == METHOD_BEYOND_LIMIT || choice_out->reason == METHOD_EARLY_LEVELS ||
                   choice_out->reason == METHOD_HELD_LEVEL || choice_out->reason == METHOD_STRUCTURE ||
                   choice_out->reason == METHOD_BACKWATER;
    choice_out->method = choice_out->advised = is_full ? NETWORK_DYNAMIC : NETWORK_MUSKINGUM_CUNGE;
}

/* --- backwater ---------------------------------------------------------------------------------------------------- */

double method_backwater_depth_m(const struct section *section, double slope_m_per_m, double length_m,
                                double discharge_m3s, double normal_depth_m, double foot_depth_m)
{
    static const double shrink = 0.9; /* of what is left above normal, from step to step */
    double depth_m = foot_depth_m, at_m = 0.0, energy_m = 0.0, friction = 0.0;
    for (int step = 0; step <= PROFILE_STEPS && depth_m > normal_depth_m; step++) {
        struct section_properties at;
        double next_m = step == 0 ? depth_m : normal_depth_m + shrink * (depth_m - normal_depth_m);
        section_properties_at(section, next_m, &at);
        double velocity = discharge_m3s / at.area_m2;
        double next_energy_m = next_m + velocity * velocity / (2.0 * SECTION_GRAVITY_M_S2);
        double next_friction = discharge_m3s * discharge_m3s / (at.conveyance_m3s * at.conveyance_m3s);
        if (step > 0) {
            double stretch_m = (energy_m - next_energy_m) / (slope_m_per_m - 0.5 * (friction + next_friction));
            if (!(stretch_m > 0.0)) /* through the critical depth: the flow jumps down to normal there */
                return normal_depth_m;
            if (at_m + stretch_m >= length_m)
                return depth_m + (next_m - depth_m) * (length_m - at_m) / stretch_m;
            at_m += stretch_m;
        }
        depth_m = next_m;
        energy_m = next_energy_m;
        friction = next_friction;
    }
    return normal_depth_m;
}
