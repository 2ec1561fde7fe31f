/* SPDX-License-Identifier: MIT */
#include "tests/independent/full_flow.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

#include "tests/independent/full_shape.h"

static const double lengthening = 1.04, courant_number = 0.7, most_damping = 1.0;
static const double smooth_part =
    0.02; /* differences from cell to cell below this part of the value are smooth flow */

struct grid {
    size_t count;                    /* cells, those beyond the foot too */
    double *room;                    /* all that follows */
    double *length, *centre, *slope; /* cells */
    double *to_left, *to_right;      /* cell length over the distance to the neighbour's centre */
    double *area, *discharge;        /* cells */
    double *area_next, *discharge_next;
    double *mass, *momentum;                                           /* faces, count + 1 */
    double *area_left, *area_right, *discharge_left, *discharge_right; /* at faces */
    double *area_rate[2], *discharge_rate[2];
};

struct judge {
    const struct full_flow_case *full;
    struct full_shape shape;
    struct full_table table;
    struct grid grid;
    double gravity;
    double held_area;
    double head_area; /* at the upper end, as last computed */
};

/* --- the table at an area ----------------------------------------------------------------------------------------- */

struct place_in_table {
    const struct full_row *row;
    double part;
};

static inline struct place_in_table look(const struct full_table *table, double area)
{
    double at = table->rows_per_root * sqrt(area > 0.0 ? area : 0.0);
    size_t row = (size_t)at;
    if (row >= table->row_count)
        row = table->row_count - 1;
    return (struct place_in_table){&table->rows[row], at - (double)row};
}

static inline double value_of(struct place_in_table place, const double pair[2])
{
    return pair[0] + place.part * pair[1];
}

static double table_depth_m(const struct judge *judge, double area)
{
    struct place_in_table place = look(&judge->table, area);
    return value_of(place, place.row->depth_m);
}

/* --- rates -------------------------------------------------------------------------------------------------------- */

/* Half the rise across a cell from the rises towards both neighbours: their mean, if both are small against scale. */
static inline double half_rise(double left, double right, double scale)
{
    double small = smooth_part * scale * smooth_part * scale;
    double left2 = left * left, right2 = right * right;
    return 0.5 * (left * (right2 + small) + right * (left2 + small)) / (left2 + right2 + 2.0 * small);
}

static void reconstruct(struct grid *grid, const double area[], const double discharge[], double inflow)
{
    size_t last = grid->count - 1;
    double flow_scale = fabs(inflow);
    for (size_t i = 0; i <= last; i++) {
        double half_area, half_discharge;
        if (i == 0 || i == last) { /* one-sided */
            size_t left = i == 0 ? 0 : last - 1;
            double part = i == 0 ? grid->to_right[0] : grid->to_left[last];
            half_area = 0.5 * part * (area[left + 1] - area[left]);
            half_discharge = 0.5 * part * (discharge[left + 1] - discharge[left]);
        } else {
            double left = grid->to_left[i], right = grid->to_right[i];
            half_area = half_rise(left * (area[i] - area[i - 1]), right * (area[i + 1] - area[i]), area[i]);
            half_discharge =
                half_rise(left * (discharge[i] - discharge[i - 1]), right * (discharge[i + 1] - discharge[i]),
                          fmax(fabs(discharge[i]), 0.01 * flow_scale));
        }
        if (fabs(half_area) > 0.9 * area[i]) /* a face keeps water */
            half_area = copysign(0.9 * area[i], half_area);
        grid->area_right[i] = area[i] - half_area;
        grid->discharge_right[i] = discharge[i] - half_discharge;
        grid->area_left[i + 1] = area[i] + half_area;
        grid->discharge_left[i + 1] = discharge[i] + half_discharge;
    }
}

static void face_fluxes(const struct judge *judge, struct grid *grid)
{
    for (size_t face = 1; face < grid->count; face++) {
        double left_area = grid->area_left[face], right_area = grid->area_right[face];
        double left_flow = grid->discharge_left[face], right_flow = grid->discharge_right[face];
        struct place_in_table left = look(&judge->table, left_area), right = look(&judge->table, right_area);
        double left_speed = left_flow / left_area, right_speed = right_flow / right_area;
        double left_wave = value_of(left, left.row->wave_m_s), right_wave = value_of(right, right.row->wave_m_s);
        double left_push = left_flow * left_speed + judge->gravity * value_of(left, left.row->moment_m3);
        double right_push = right_flow * right_speed + judge->gravity * value_of(right, right.row->moment_m3);
        double slowest = fmin(left_speed - left_wave, right_speed - right_wave);
        double fastest = fmax(left_speed + left_wave, right_speed + right_wave);
        slowest = fmin(slowest, 0.0);
        fastest = fmax(fastest, 0.0);
        double share = 1.0 / (fastest - slowest);
        grid->mass[face] =
            share * (fastest * left_flow - slowest * right_flow + slowest * fastest * (right_area - left_area));
        grid->momentum[face] =
            share * (fastest * left_push - slowest * right_push + slowest * fastest * (right_flow - left_flow));
    }
}

static double push_of(const struct judge *judge, double area, double discharge)
{
    struct place_in_table place = look(&judge->table, area);
    return discharge * discharge / area + judge->gravity * value_of(place, place.row->moment_m3);
}

static void head_flux(struct judge *judge, struct grid *grid, double inflow)
{
    double area = grid->area_right[0], discharge = grid->discharge_right[0];
    struct place_in_table place = look(&judge->table, area);
    double up_speed = discharge / area - value_of(place, place.row->wave_m_s);
    if (up_speed < 0.0) { /* dQ = (u + c) dA along the characteristic dx/dt = u - c */
        double other = discharge / area + value_of(place, place.row->wave_m_s);
        judge->head_area = fmax(0.1 * area, area + (inflow - discharge) / other);
    } else {
        double depth = full_shape_normal_depth_m(&judge->shape, grid->slope[0], inflow);
        judge->head_area = full_shape_water_at(&judge->shape, depth).area_m2;
    }
    grid->mass[0] = inflow;
    grid->momentum[0] = push_of(judge, judge->head_area, inflow);
}

static void foot_flux(struct judge *judge, struct grid *grid)
{
    size_t foot = grid->count;
    double area = grid->area_left[foot], discharge = grid->discharge_left[foot];
    if (judge->held_area > 0.0) { /* dQ = (u - c) dA along dx/dt = u + c */
        struct place_in_table place = look(&judge->table, area);
        double other = discharge / area - value_of(place, place.row->wave_m_s);
        discharge += other * (judge->held_area - area);
        area = judge->held_area;
    }
    grid->mass[foot] = discharge;
    grid->momentum[foot] = push_of(judge, area, discharge);
}

static void rates(struct judge *judge, const double area[], const double discharge[], double inflow,
                  double area_rate[], double discharge_rate[])
{
    struct grid *grid = &judge->grid;
    reconstruct(grid, area, discharge, inflow);
    face_fluxes(judge, grid);
    head_flux(judge, grid, inflow);
    foot_flux(judge, grid);
    for (size_t i = 0; i < grid->count; i++) {
        struct place_in_table place = look(&judge->table, area[i]);
        double friction = value_of(place, place.row->friction) * discharge[i] * fabs(discharge[i]);
        area_rate[i] = (grid->mass[i] - grid->mass[i + 1]) / grid->length[i];
        discharge_rate[i] = (grid->momentum[i] - grid->momentum[i + 1]) / grid->length[i] +
                            judge->gravity * area[i] * grid->slope[i] - friction;
    }
}

/* --- steps --------------------------------------------------------------------------------------------------------- */

/* Courant's limit, and that of the friction, an explicit source that decays at 2 g A |Q| / K^2. 0: out of range. */
static double longest_step_s(const struct judge *judge)
{
    const struct grid *grid = &judge->grid;
    double longest = (double)INFINITY;
    for (size_t i = 0; i < grid->count; i++) {
        if (!(grid->area[i] > 0.0) || !isfinite(grid->discharge[i]))
            return 0.0;
        struct place_in_table place = look(&judge->table, grid->area[i]);
        double speed = fabs(grid->discharge[i]) / grid->area[i] + value_of(place, place.row->wave_m_s);
        double decay = 2.0 * value_of(place, place.row->friction) * fabs(grid->discharge[i]);
        longest = fmin(longest, fmin(courant_number * grid->length[i] / speed, most_damping / decay));
    }
    return longest;
}

static void step(struct judge *judge, double t_s, double step_s, double *in_m3, double *out_m3)
{
    struct grid *grid = &judge->grid;
    size_t count = grid->count;
    const void *parameters = judge->full->inflow_parameters;
    double inflow = judge->full->inflow(t_s, parameters), inflow_next = judge->full->inflow(t_s + step_s, parameters);
    rates(judge, grid->area, grid->discharge, inflow, grid->area_rate[0], grid->discharge_rate[0]);
    *out_m3 += 0.5 * step_s * grid->mass[count];
    for (size_t i = 0; i < count; i++) {
        grid->area_next[i] = grid->area[i] + step_s * grid->area_rate[0][i];
        grid->discharge_next[i] = grid->discharge[i] + step_s * grid->discharge_rate[0][i];
    }
    rates(judge, grid->area_next, grid->discharge_next, inflow_next, grid->area_rate[1], grid->discharge_rate[1]);
    *out_m3 += 0.5 * step_s * grid->mass[count];
    *in_m3 += 0.5 * step_s * (inflow + inflow_next);
    for (size_t i = 0; i < count; i++) {
        grid->area[i] += 0.5 * step_s * (grid->area_rate[0][i] + grid->area_rate[1][i]);
        grid->discharge[i] += 0.5 * step_s * (grid->discharge_rate[0][i] + grid->discharge_rate[1][i]);
    }
}

static double volume_m3(const struct grid *grid)
{
    double volume = 0.0;
    for (size_t i = 0; i < grid->count; i++)
        volume += grid->length[i] * grid->area[i];
    return volume;
}

/* --- making and starting ------------------------------------------------------------------------------------------ */

static bool grid_make(struct grid *grid, const struct full_flow_case *full, double beyond_m)
{
    double cell = full->length_m / (double)full->cell_count, beyond = 0.0;
    size_t extra = 0;
    for (double length = cell; beyond < beyond_m; extra++) {
        length *= lengthening;
        beyond += length;
    }
    size_t count = full->cell_count + extra, stride = count + 1;
    double **arrays[] = {&grid->length,
                         &grid->centre,
                         &grid->slope,
                         &grid->to_left,
                         &grid->to_right,
                         &grid->area,
                         &grid->discharge,
                         &grid->area_next,
                         &grid->discharge_next,
                         &grid->mass,
                         &grid->momentum,
                         &grid->area_left,
                         &grid->area_right,
                         &grid->discharge_left,
                         &grid->discharge_right,
                         &grid->area_rate[0],
                         &grid->area_rate[1],
                         &grid->discharge_rate[0],
                         &grid->discharge_rate[1]};
    size_t array_count = sizeof arrays / sizeof *arrays;
    grid->room = calloc(array_count * stride, sizeof *grid->room);
    if (grid->room == NULL)
        return false;
    for (size_t i = 0; i < array_count; i++)
        *arrays[i] = grid->room + i * stride;
    grid->count = count;
    double at = 0.0;
    for (size_t i = 0; i < count; i++) {
        grid->length[i] = i < full->cell_count ? cell : grid->length[i - 1] * lengthening;
        grid->centre[i] = at + 0.5 * grid->length[i];
        at += grid->length[i];
        grid->slope[i] =
            full->slope_at == NULL ? full->slope_m_per_m : full->slope_at(grid->centre[i], full->slope_parameters);
    }
    for (size_t i = 0; i < count; i++) {
        grid->to_left[i] = i == 0 ? 1.0 : grid->length[i] / (grid->centre[i] - grid->centre[i - 1]);
        grid->to_right[i] = i + 1 == count ? 1.0 : grid->length[i] / (grid->centre[i + 1] - grid->centre[i]);
    }
    return true;
}

static double profile_slope(const struct judge *judge, double slope, double depth, double discharge)
{
    struct full_water water = full_shape_water_at(&judge->shape, depth);
    double friction = discharge * discharge / (water.conveyance_m3s * water.conveyance_m3s);
    double froude2 = discharge * discharge * water.top_width_m / (judge->gravity * pow(water.area_m2, 3.0));
    return (slope - friction) / (1.0 - froude2);
}

/* dh/dx = (S0 - Sf) / (1 - Fr^2) over up_m (negative), by steps of the fourth order, short against depth by slope. */
static double depth_above(const struct judge *judge, double slope, double depth, double up_m, double discharge)
{
    size_t parts = (size_t)ceil(fabs(up_m) * slope / (0.05 * depth));
    double up = up_m / (double)(parts > 0 ? parts : 1);
    for (size_t part = 0; part < (parts > 0 ? parts : 1); part++) {
        double first = profile_slope(judge, slope, depth, discharge);
        double second = profile_slope(judge, slope, depth + 0.5 * up * first, discharge);
        double third = profile_slope(judge, slope, depth + 0.5 * up * second, discharge);
        double fourth = profile_slope(judge, slope, depth + up * third, discharge);
        depth += up * (first + 2.0 * second + 2.0 * third + fourth) / 6.0;
    }
    return depth;
}

/* Uniform flow, or the profile above a held level. */
static void start_steady(struct judge *judge)
{
    struct grid *grid = &judge->grid;
    const struct full_flow_case *full = judge->full;
    double discharge = full->inflow(0.0, full->inflow_parameters);
    bool is_held = full->held_depth_m > 0.0;
    double depth = is_held ? full->held_depth_m
                           : full_shape_normal_depth_m(&judge->shape, grid->slope[grid->count - 1], discharge);
    double below = grid->centre[grid->count - 1] + 0.5 * grid->length[grid->count - 1];
    for (size_t i = grid->count; i-- > 0;) {
        if (is_held)
            depth = depth_above(judge, grid->slope[i], depth, grid->centre[i] - below, discharge);
        below = grid->centre[i];
        grid->area[i] = full_shape_water_at(&judge->shape, depth).area_m2;
        grid->discharge[i] = discharge;
    }
    judge->head_area = grid->area[0];
}

/* Straight lines between cell centres; the head's own flow and area above the first, the outlet's below the last. */
static void write_place(const struct judge *judge, double at_m, double inflow, double *discharge_out,
                        double *depth_out)
{
    const struct grid *grid = &judge->grid;
    size_t count = grid->count, after = 0;
    while (after < count && grid->centre[after] < at_m)
        after++;
    double end = grid->centre[count - 1] + 0.5 * grid->length[count - 1];
    double from = after == 0 ? 0.0 : grid->centre[after - 1], to = after == count ? end : grid->centre[after];
    double part = (at_m - from) / (to - from);
    double from_flow = after == 0 ? inflow : grid->discharge[after - 1];
    double to_flow = after == count ? grid->mass[count] : grid->discharge[after];
    double from_depth = table_depth_m(judge, after == 0 ? judge->head_area : grid->area[after - 1]);
    double to_depth = after < count            ? table_depth_m(judge, grid->area[after])
                      : judge->held_area > 0.0 ? judge->full->held_depth_m
                                               : table_depth_m(judge, grid->area_left[count]);
    *discharge_out = from_flow + part * (to_flow - from_flow);
    *depth_out = from_depth + part * (to_depth - from_depth);
}

static void write_output(const struct judge *judge, struct full_flow_result *result, size_t output, double t_s)
{
    const struct full_flow_case *full = judge->full;
    double inflow = full->inflow(t_s, full->inflow_parameters);
    for (size_t place = 0; place < result->place_count; place++) {
        double at_m = full->place_count > 0 ? full->place_m[place] : full->length_m;
        size_t slot = place * result->count + output;
        write_place(judge, at_m, inflow, &result->discharge_m3s[slot], &result->depth_m[slot]);
    }
}

static bool judge_make(struct judge *judge, const struct full_flow_case *full)
{
    *judge = (struct judge){.full = full, .gravity = full->gravity_m_s2 > 0.0 ? full->gravity_m_s2 : 9.80665};
    if (!full_shape_of(full->section, &judge->shape))
        return false;
    double slope =
        full->slope_at == NULL ? full->slope_m_per_m : full->slope_at(full->length_m, full->slope_parameters);
    double depth = full_shape_normal_depth_m(&judge->shape, slope, 2.0 * full->largest_m3s);
    double largest = full_shape_water_at(&judge->shape, fmax(depth, 1.5 * full->held_depth_m)).area_m2;
    if (full->held_depth_m > 0.0)
        judge->held_area = full_shape_water_at(&judge->shape, full->held_depth_m).area_m2;
    double beyond = full->held_depth_m > 0.0 ? 0.0 : full->beyond_m;
    if (!(full->held_depth_m > 0.0) && !(full->beyond_m > 0.0)) {
        double peak_depth = full_shape_normal_depth_m(&judge->shape, slope, full->largest_m3s);
        double width = full_shape_water_at(&judge->shape, peak_depth).top_width_m;
        beyond = 10.0 * full->largest_m3s /
                 (2.0 * width * slope * full_shape_celerity_m_s(&judge->shape, slope, peak_depth));
    }
    return full_table_make(&judge->shape, largest, judge->gravity, &judge->table) &&
           grid_make(&judge->grid, full, beyond);
}

bool full_flow_run(const struct full_flow_case *full, struct full_flow_result *result_out)
{
    struct judge judge;
    struct full_flow_result result = {.count = (size_t)floor(full->duration_s / full->output_step_s + 1.5),
                                      .place_count = full->place_count > 0 ? full->place_count : 1};
    result.discharge_m3s = calloc(result.count * result.place_count, sizeof(double));
    result.depth_m = calloc(result.count * result.place_count, sizeof(double));
    bool is_fine = judge_make(&judge, full) && result.discharge_m3s != NULL && result.depth_m != NULL;
    if (!is_fine)
        goto cleanup;
    start_steady(&judge);
    /* fills the faces, so that the first output has its outlet */
    rates(&judge, judge.grid.area, judge.grid.discharge, full->inflow(0.0, full->inflow_parameters),
          judge.grid.area_rate[0], judge.grid.discharge_rate[0]);
    result.cell_count = judge.grid.count;
    double in_m3 = 0.0, out_m3 = 0.0, start_m3 = volume_m3(&judge.grid);
    for (size_t output = 0; output < result.count && is_fine; output++) {
        double t_s = (double)output * full->output_step_s;
        write_output(&judge, &result, output, t_s);
        if (output + 1 == result.count)
            break;
        double longest = longest_step_s(&judge);
        is_fine = longest > 0.0;
        size_t steps = is_fine ? (size_t)ceil(full->output_step_s / longest) : 0;
        double step_s = full->output_step_s / (double)(steps > 0 ? steps : 1);
        for (size_t i = 0; i < steps; i++)
            step(&judge, t_s + (double)i * step_s, step_s, &in_m3, &out_m3);
        result.step_count += steps;
    }
    result.imbalance = (in_m3 - out_m3 - (volume_m3(&judge.grid) - start_m3)) / in_m3;
cleanup:
    full_table_clear(&judge.table);
    free(judge.grid.room);
    if (is_fine)
        *result_out = result;
    else
        full_flow_result_clear(&result);
    return is_fine;
}

void full_flow_result_clear(struct full_flow_result *result)
{
    free(result->discharge_m3s);
    free(result->depth_m);
    *result = (struct full_flow_result){0};
}

double full_flow_changed_m3s(double t_s, const void *change)
{
    const struct full_flow_change *with = change;
    double flow = with->before(t_s, with->before_parameters);
    return t_s < with->from_s ? flow : flow * with->factor + with->rise_m3s;
}
