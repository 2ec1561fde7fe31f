/* SPDX-License-Identifier: MIT */
#include "engine/routed_reach.h"

#include <math.h>
#include <stdlib.h>

#include "engine/method.h"

enum { FEWEST_CELLS = 3, FEWEST_CELLS_FULL = 10, MOST_CELLS = 400, FIT_POINTS = 64 };

static const double table_headroom = 32.0; /* tables end this many times above the largest flow: five octaves */
static const double fit_from_share =
    0.05;                             /* of the peak: where the linear scheme's A = alpha Q^beta is fitted from */
static const double on_a_node = 1e-9; /* of a cell: nearer than that is the node itself */

static const double cells_in_a_rise = 60.0; /* of the full equations */

static double smallest_discharge_m3s(const struct network_options *options)
{
    return fmin(1e-3, 1e-4 * options->largest_discharge_m3s);
}

static enum fw_status make_curve(struct routed_reach *reach, const struct network_options *options)
{
    double least = options->roughness_factors[0];
    double most = least;
    double root_slope = sqrt(reach->source->slope_m_per_m);
    for (size_t i = 1; i < options->group_count; i++) {
        least = fmin(least, options->roughness_factors[i]);
        most = fmax(most, options->roughness_factors[i]);
    }
    least = fmin(least, 1.0); /* as given: what summaries and step sizes are for */
    most = fmax(most, 1.0);
    return flow_curve_init(&reach->curve, reach->source->section,
                           smallest_discharge_m3s(options) * least / root_slope,
                           table_headroom * options->largest_discharge_m3s * most / root_slope);
}

static void find_survey_top(struct routed_reach *reach)
{
    struct section_properties at_top;
    reach->survey_top_m = section_survey_top_m(reach->source->section);
    reach->survey_conveyance_m3s = (double)INFINITY;
    if (!isfinite(reach->survey_top_m))
        return;
    section_properties_at(reach->source->section, reach->survey_top_m, &at_top);
    reach->survey_conveyance_m3s = at_top.conveyance_m3s;
}

/* Of all flows of a flood; 0 where it is not known or steady. */
static double mean_celerity_m_s(const struct routed_reach *reach, const struct method_flood *flood)
{
    double root_slope = sqrt(reach->source->slope_m_per_m);
    struct flow_curve_place base, peak;
    if (!(flood->rise_s > 0.0 && flood->base_m3s < flood->peak_m3s))
        return 0.0;
    flow_curve_at(&reach->curve, flood->base_m3s / root_slope, &base);
    flow_curve_at(&reach->curve, flood->peak_m3s / root_slope, &peak);
    return (flood->peak_m3s - flood->base_m3s) / (peak.area_m2 - base.area_m2);
}

static size_t choose_cell_count(struct routed_reach *reach, const struct method_flood *flood,
                                const struct network_options *options)
{
    double peak = flood->peak_m3s;
    const struct network_reach *source = reach->source;
    double root_slope = sqrt(source->slope_m_per_m);
    bool is_full = network_method_is_full(source->method);
    struct flow_curve_place place;
    flow_curve_at(&reach->curve, peak / root_slope, &place);
    double celerity = place.conveyance_slope_m_s * root_slope;
    reach->diffusion_length_m =
        flow_curve_diffusivity_m2_s(peak, place.area_m2, place.top_width_m, celerity, source->slope_m_per_m) /
        celerity;
    if (options->fixed_cell_count > 0)
        return options->fixed_cell_count;
    if (source->cell_m > 0.0)
        return (size_t)fmax(1.0, round(source->length_m / source->cell_m));
    double wanted_m = fmax(celerity, mean_celerity_m_s(reach, flood)) * options->time_step_s;
    if (!is_full)
        return (size_t)fmin(MOST_CELLS, fmax(FEWEST_CELLS, round(source->length_m / wanted_m)));
    /* a slow flood needs no short ones; at its low flows D/c is short, and levels set from below want it resolved */
    wanted_m = fmax(wanted_m, fmin(celerity * flood->rise_s / cells_in_a_rise, 0.5 * reach->diffusion_length_m));
    wanted_m = fmin(wanted_m, 2.0 * reach->diffusion_length_m); /* longer ones make a front's areas negative */
    return (size_t)fmin(METHOD_MOST_FULL_CELLS, fmax(FEWEST_CELLS_FULL, ceil(source->length_m / wanted_m)));
}

static enum fw_status make_tables(struct routed_reach *reach, const struct network_options *options)
{
    reach->tables = calloc(options->group_count, sizeof *reach->tables);
    if (reach->tables == NULL)
        return FW_NO_MEMORY;
    for (size_t group = 0; group < options->group_count; group++) {
        const struct muskingum_cunge_reach from = {
            .curve = &reach->curve,
            .slope_m_per_m = reach->source->slope_m_per_m,
            .roughness_factor = options->roughness_factors[group],
            .cell_m = reach->cell_m,
            .time_step_s = reach->time_step_s,
            .smallest_discharge_m3s = smallest_discharge_m3s(options),
            .diffusion =
                reach->source->method == NETWORK_KINEMATIC ? MUSKINGUM_CUNGE_UPWIND : MUSKINGUM_CUNGE_MATCHED,
        };
        enum fw_status status = muskingum_cunge_table_init(&reach->tables[group], &from);
        if (status != FW_OK)
            return status;
    }
    return FW_OK;
}

/* A = alpha Q^beta: Manning's own for a wide section, else by least squares of the logarithms below the peak. */
static void fit_power_law(const struct routed_reach *reach, double roughness_factor, double peak_m3s,
                          struct kinematic_channel *channel)
{
    const struct section *section = reach->source->section;
    double root_slope = sqrt(reach->source->slope_m_per_m);
    if (section->shape == SECTION_WIDE && !section->has_plain) {
        double roughness = section->roughness_n * roughness_factor;
        channel->beta = 0.6;
        channel->alpha = pow(roughness * pow(section->bottom_m, 2.0 / 3.0) / root_slope, 0.6);
        return;
    }
    double sum_q = 0.0, sum_a = 0.0, sum_qq = 0.0, sum_qa = 0.0;
    for (int i = 0; i < FIT_POINTS; i++) {
        double discharge = peak_m3s * pow(fit_from_share, (double)i / (FIT_POINTS - 1));
        struct flow_curve_place place;
        flow_curve_at(&reach->curve, discharge * roughness_factor / root_slope, &place);
        double q = log(discharge);
        double a = log(place.area_m2);
        sum_q += q;
        sum_a += a;
        sum_qq += q * q;
        sum_qa += q * a;
    }
    channel->beta = (FIT_POINTS * sum_qa - sum_q * sum_a) / (FIT_POINTS * sum_qq - sum_q * sum_q);
    channel->alpha = exp((sum_a - channel->beta * sum_q) / FIT_POINTS);
}

static enum fw_status make_channels(struct routed_reach *reach, double peak_m3s,
                                    const struct network_options *options)
{
    reach->channels = calloc(options->group_count, sizeof *reach->channels);
    if (reach->channels == NULL)
        return FW_NO_MEMORY;
    for (size_t group = 0; group < options->group_count; group++) {
        struct kinematic_channel *channel = &reach->channels[group];
        fit_power_law(reach, options->roughness_factors[group], peak_m3s, channel);
        channel->cell_length = reach->cell_m;
        channel->time_step = reach->time_step_s;
    }
    return FW_OK;
}

/* A distance in cells from the head; a distance very near a node is that node. */
static double place_in_cells(const struct routed_reach *reach, double at_m)
{
    double place = fmin(at_m / reach->cell_m, (double)reach->cell_count);
    return fabs(place - round(place)) < on_a_node ? round(place) : place;
}

static enum fw_status place_sides(struct routed_reach *reach, const struct network_river *river, size_t reach_index)
{
    size_t count = 0;
    for (size_t i = 0; i < river->side_inflow_count; i++)
        count += river->side_inflows[i].reach_index == reach_index;
    if (count == 0)
        return FW_OK;
    reach->sides = calloc(count, sizeof *reach->sides);
    if (reach->sides == NULL)
        return FW_NO_MEMORY;
    for (size_t i = 0; i < river->side_inflow_count; i++) {
        if (river->side_inflows[i].reach_index != reach_index)
            continue;
        size_t cell = (size_t)place_in_cells(reach, river->side_inflows[i].at_m);
        reach->sides[reach->side_count++] =
            (struct routed_side){cell < reach->cell_count ? cell : reach->cell_count - 1, i};
    }
    return FW_OK;
}

static int compare_sizes(const void *left, const void *right)
{
    size_t a = *(const size_t *)left;
    size_t b = *(const size_t *)right;
    return (a > b) - (a < b);
}

static enum fw_status place_stops(struct routed_reach *reach, const struct network_river *river, size_t reach_index)
{
    size_t count = 0;
    reach->stop_node = calloc(2 + 2 * river->point_count, sizeof *reach->stop_node);
    if (reach->stop_node == NULL)
        return FW_NO_MEMORY;
    reach->stop_node[count++] = 0;
    reach->stop_node[count++] = reach->cell_count;
    for (size_t i = 0; i < river->point_count; i++) {
        if (river->points[i].reach_index != reach_index)
            continue;
        double place = place_in_cells(reach, river->points[i].at_m);
        reach->stop_node[count++] = (size_t)floor(place);
        reach->stop_node[count++] = (size_t)ceil(place);
    }
    qsort(reach->stop_node, count, sizeof *reach->stop_node, compare_sizes);
    reach->stop_count = 1;
    for (size_t i = 1; i < count; i++)
        if (reach->stop_node[i] != reach->stop_node[reach->stop_count - 1])
            reach->stop_node[reach->stop_count++] = reach->stop_node[i];
    return FW_OK;
}

enum fw_status routed_reach_init_curve(struct routed_reach *reach, const struct network_reach *source,
                                       const struct network_options *options)
{
    memset(reach, 0, sizeof *reach);
    reach->source = source;
    reach->group_count = options->group_count;
    reach->time_step_s = options->time_step_s;
    find_survey_top(reach);
    return make_curve(reach, options);
}

enum fw_status routed_reach_init_cells(struct routed_reach *reach, const struct network_river *river,
                                       size_t reach_index, const struct method_flood *flood,
                                       const struct network_options *options)
{
    reach->cell_count = choose_cell_count(reach, flood, options);
    reach->cell_m = reach->source->length_m / (double)reach->cell_count;
    enum fw_status status = place_sides(reach, river, reach_index);
    if (status == FW_OK)
        status = place_stops(reach, river, reach_index);
    if (status == FW_OK && reach->source->method == NETWORK_KINEMATIC_LINEAR)
        status = make_channels(reach, flood->peak_m3s, options);
    else if (status == FW_OK && !network_method_is_full(reach->source->method))
        status = make_tables(reach, options);
    return status;
}

void routed_reach_clear(struct routed_reach *reach)
{
    if (reach->tables != NULL)
        for (size_t group = 0; group < reach->group_count; group++)
            muskingum_cunge_table_clear(&reach->tables[group]);
    free(reach->tables);
    free(reach->channels);
    free(reach->sides);
    free(reach->stop_node);
    flow_curve_clear(&reach->curve);
    memset(reach, 0, sizeof *reach);
}

size_t routed_reach_state_count(const struct routed_reach *reach)
{
    return reach->tables != NULL ? reach->cell_count : reach->cell_count + 1;
}

size_t routed_reach_stop_at(const struct routed_reach *reach, double at_m, double *share_of_next_out)
{
    double place = place_in_cells(reach, at_m);
    size_t stop = 0;
    while (reach->stop_node[stop] < (size_t)place)
        stop++;
    *share_of_next_out = place - floor(place);
    return stop;
}

double routed_reach_largest_discharge_m3s(const struct routed_reach *reach, size_t group)
{
    return reach->tables != NULL ? reach->tables[group].largest_discharge_m3s : NETWORK_LARGEST_INFLOW_M3S;
}

/* One member's side inflow by cell. */
static void gather_lateral(const struct routed_reach *reach, const struct routed_flows *flows, size_t member)
{
    for (size_t cell = 0; cell < reach->cell_count; cell++)
        flows->lateral_m3[cell] = 0.0;
    for (size_t i = 0; i < reach->side_count; i++)
        flows->lateral_m3[reach->sides[i].cell] +=
            flows->side_m3[reach->sides[i].side_index * flows->member_count + member];
}

static void start_member(const struct routed_reach *reach, size_t group, const struct routed_flows *flows,
                         size_t member, double state[])
{
    size_t members = flows->member_count;
    size_t stop = 1;
    double passing = flows->stop_m3[member];
    double implicit = reach->tables != NULL ? muskingum_cunge_implicit_m3(&reach->tables[group], passing) : 0.0;
    gather_lateral(reach, flows, member);
    if (reach->tables == NULL)
        state[member * (reach->cell_count + 1)] = passing / reach->time_step_s;
    for (size_t cell = 0; cell < reach->cell_count; cell++) {
        double lateral = flows->lateral_m3[cell];
        if (reach->tables != NULL) {
            state[cell * members + member] =
                muskingum_cunge_steady_state_m3(&reach->tables[group], lateral, &passing, &implicit);
        } else {
            passing += lateral;
            state[member * (reach->cell_count + 1) + cell + 1] = passing / reach->time_step_s;
        }
        if (reach->stop_node[stop] == cell + 1)
            flows->stop_m3[stop++ * members + member] = passing;
    }
}

void routed_reach_start_steady(const struct routed_reach *reach, size_t group, const struct routed_flows *flows,
                               double state[])
{
    for (size_t member = 0; member < flows->member_count; member++)
        start_member(reach, group, flows, member, state);
}

static void step_storage(const struct routed_reach *reach, size_t group, const struct routed_flows *flows,
                         double state[])
{
    const struct muskingum_cunge_table *table = &reach->tables[group];
    size_t members = flows->member_count;
    for (size_t member = 0; member < members; member++) {
        flows->passing_m3[member] = flows->stop_m3[member];
        flows->implicit_m3[member] = muskingum_cunge_implicit_m3(table, flows->stop_m3[member]);
    }
    for (size_t i = 0; i < reach->side_count; i++) {
        double *cell = state + reach->sides[i].cell * members;
        const double *side = flows->side_m3 + reach->sides[i].side_index * members;
        for (size_t member = 0; member < members; member++)
            cell[member] += side[member];
    }
    for (size_t stop = 1; stop < reach->stop_count; stop++) {
        size_t from = reach->stop_node[stop - 1];
        muskingum_cunge_step(table, reach->stop_node[stop] - from, members, state + from * members, flows->passing_m3,
                             flows->implicit_m3);
        memcpy(flows->stop_m3 + stop * members, flows->passing_m3, members * sizeof *flows->passing_m3);
    }
}

static enum fw_status step_linear(const struct routed_reach *reach, size_t group, const struct routed_flows *flows,
                                  double state[])
{
    size_t node_count = reach->cell_count + 1;
    for (size_t member = 0; member < flows->member_count; member++) {
        double *discharge = state + member * node_count;
        gather_lateral(reach, flows, member);
        for (size_t cell = 0; cell < reach->cell_count; cell++)
            flows->lateral_m3[cell] /= reach->cell_m * reach->time_step_s; /* now flow per length */
        enum fw_status status =
            kinematic_linear_step(&reach->channels[group], node_count, flows->stop_m3[member] / reach->time_step_s,
                                  flows->lateral_m3, discharge);
        if (status != FW_OK)
            return status;
        for (size_t stop = 1; stop < reach->stop_count; stop++)
            flows->stop_m3[stop * flows->member_count + member] =
                reach->time_step_s * discharge[reach->stop_node[stop]];
    }
    return FW_OK;
}

enum fw_status routed_reach_step(const struct routed_reach *reach, size_t group, const struct routed_flows *flows,
                                 double state[])
{
    if (reach->tables == NULL)
        return step_linear(reach, group, flows, state);
    step_storage(reach, group, flows, state);
    return FW_OK;
}

double routed_reach_volume_m3(const struct routed_reach *reach, size_t group, size_t member_count, size_t member,
                              const double state[], double head_m3, double foot_m3)
{
    double volume = 0.0;
    if (reach->tables != NULL) {
        for (size_t cell = 0; cell < reach->cell_count; cell++)
            volume += state[cell * member_count + member];
        return volume - 0.5 * (head_m3 - foot_m3);
    }
    const struct kinematic_channel *channel = &reach->channels[group];
    const double *discharge = state + member * (reach->cell_count + 1);
    for (size_t node = 0; node <= reach->cell_count; node++) {
        double weight = node == 0 || node == reach->cell_count ? 0.5 : 1.0;
        volume += weight * reach->cell_m * channel->alpha * pow(discharge[node], channel->beta);
    }
    return volume;
}
