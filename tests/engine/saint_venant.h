/* SPDX-License-Identifier: MIT */
/*
 * The full Saint-Venant equations on a fine grid, for tests to judge the routing by. It shares nothing with the
 * engine.
 *
 *     dA/dt + dQ/dx = 0,    dQ/dt + d(Q^2/A + g I1)/dx = g A (S0 - Q|Q|/K^2)
 * in a prismatic channel: finite volumes, HLL flux (Harten, Lax and van Leer 1983), linear reconstruction with van
 * Leer's limiter, Heun steps. Second order in smooth flow. Uniform flow is kept exactly: its flux is even, its
 * source nothing. Upper end: discharge given (subcritical). Lower end: flow leaves freely, so the channel goes on
 * beyond the place of interest. Include <cmocka.h> with its companions first.
 *
 * Section: a rectangle, with or without a flood plain at its sides; conveyances of channel and plain add, each with
 * its own perimeter, the line between them not counted (divided channel).
 */
#ifndef FOREWATER_TESTS_ENGINE_SAINT_VENANT_H
#define FOREWATER_TESTS_ENGINE_SAINT_VENANT_H

#include <math.h>
#include <stdlib.h>
#include <string.h>

struct sv_section {
    double width_m, n;
    double plain_above_m, plain_width_m, plain_n; /* plain_width_m 0: none */
};

struct sv_case {
    struct sv_section section;
    double slope_m_per_m;
    double length_m;    /* to the place of interest */
    double extension_m; /* beyond it */
    double cell_m;
    double duration_s;
    double output_step_s;
    double (*flood)(double t_s, const void *parameters);
    const void *flood_parameters;
};

struct sv_result { /* the caller frees the arrays */
    size_t count;
    double *discharge_m3s; /* at the place of interest, each output step from 0 */
    double *depth_m;
    double imbalance; /* of the whole grid, relative to the volume that came in */
};

static const double sv_gravity_m_s2 = 9.81; /* as the published flood wave says */

static inline double sv_depth_m(const struct sv_section *section, double area_m2)
{
    double bank_area = section->width_m * section->plain_above_m;
    if (section->plain_width_m <= 0.0 || area_m2 <= bank_area)
        return area_m2 / section->width_m;
    return section->plain_above_m + (area_m2 - bank_area) / (section->width_m + section->plain_width_m);
}

static inline double sv_area_m2(const struct sv_section *section, double depth_m)
{
    double over = section->plain_width_m > 0.0 ? fmax(0.0, depth_m - section->plain_above_m) : 0.0;
    return section->width_m * depth_m + section->plain_width_m * over;
}

struct sv_flow {
    double area, discharge, velocity, pressure, wave_speed, conveyance;
};

static inline struct sv_flow sv_flow_at(const struct sv_section *section, double area, double discharge,
                                        int wants_friction)
{
    double depth = sv_depth_m(section, area);
    double over = section->plain_width_m > 0.0 ? fmax(0.0, depth - section->plain_above_m) : 0.0;
    double top = section->width_m + (over > 0.0 ? section->plain_width_m : 0.0);
    struct sv_flow flow = {.area = area, .discharge = discharge, .velocity = discharge / area};
    flow.pressure = 0.5 * sv_gravity_m_s2 * (section->width_m * depth * depth + section->plain_width_m * over * over);
    flow.wave_speed = sqrt(sv_gravity_m_s2 * area / top);
    if (wants_friction) {
        double channel_area = section->width_m * depth;
        double channel_wall = section->plain_width_m > 0.0 ? fmin(depth, section->plain_above_m) : depth;
        double radius = channel_area / (section->width_m + 2.0 * channel_wall);
        flow.conveyance = channel_area * cbrt(radius * radius) / section->n;
        if (over > 0.0) {
            double plain_area = section->plain_width_m * over;
            double plain_radius = plain_area / (section->plain_width_m + 2.0 * over);
            flow.conveyance += plain_area * cbrt(plain_radius * plain_radius) / section->plain_n;
        }
    }
    return flow;
}

static inline double sv_normal_area_m2(const struct sv_section *section, double slope, double discharge)
{
    double low = 0.0, high = 100.0;
    for (int i = 0; i < 200; i++) {
        double depth = 0.5 * (low + high);
        double normal = sqrt(slope) * sv_flow_at(section, sv_area_m2(section, depth), 0.0, 1).conveyance;
        if (normal < discharge)
            low = depth;
        else
            high = depth;
    }
    return sv_area_m2(section, 0.5 * (low + high));
}

/* Half the limited rise across a cell. */
static inline double sv_half_slope(double before, double here, double after)
{
    double left = here - before, right = after - here;
    return left * right > 0.0 ? left * right / (left + right) : 0.0;
}

static inline void sv_hll(const struct sv_flow *left, const struct sv_flow *right, double *mass, double *momentum)
{
    double slowest = fmin(left->velocity - left->wave_speed, right->velocity - right->wave_speed);
    double fastest = fmax(left->velocity + left->wave_speed, right->velocity + right->wave_speed);
    double left_momentum = left->discharge * left->velocity + left->pressure;
    double right_momentum = right->discharge * right->velocity + right->pressure;
    if (slowest >= 0.0) {
        *mass = left->discharge;
        *momentum = left_momentum;
    } else if (fastest <= 0.0) {
        *mass = right->discharge;
        *momentum = right_momentum;
    } else {
        double spread = fastest - slowest;
        *mass = (fastest * left->discharge - slowest * right->discharge +
                 slowest * fastest * (right->area - left->area)) /
                spread;
        *momentum = (fastest * left_momentum - slowest * right_momentum +
                     slowest * fastest * (right->discharge - left->discharge)) /
                    spread;
    }
}

struct sv_grid {
    size_t cell_count;
    double *area, *discharge;                 /* cells */
    double *area_stage, *discharge_stage;     /* cells, Heun's second state */
    double *mass, *momentum;                  /* faces, cell_count + 1 */
    struct sv_flow *left, *right;             /* faces: states on both sides */
    double *area_rate[2], *discharge_rate[2]; /* cells, per stage */
};

static inline double *sv_room(size_t count)
{
    double *room = calloc(count, sizeof *room);
    if (room == NULL)
        fail_msg("no memory");
    return room;
}

static inline void sv_rates(const struct sv_case *sv, struct sv_grid *grid, const double area[],
                            const double discharge[], double inflow, double area_rate[], double discharge_rate[])
{
    size_t count = grid->cell_count;
    for (size_t i = 0; i < count; i++) {
        size_t before = i == 0 ? 0 : i - 1;
        size_t after = i + 1 == count ? i : i + 1;
        double half_area = sv_half_slope(area[before], area[i], area[after]);
        double half_discharge = sv_half_slope(discharge[before], discharge[i], discharge[after]);
        grid->right[i] = sv_flow_at(&sv->section, area[i] - half_area, discharge[i] - half_discharge, 0);
        grid->left[i + 1] = sv_flow_at(&sv->section, area[i] + half_area, discharge[i] + half_discharge, 0);
    }
    for (size_t face = 1; face < count; face++)
        sv_hll(&grid->left[face], &grid->right[face], &grid->mass[face], &grid->momentum[face]);
    grid->mass[0] = inflow;
    grid->momentum[0] = inflow * inflow / grid->right[0].area + grid->right[0].pressure;
    grid->mass[count] = grid->left[count].discharge;
    grid->momentum[count] = grid->left[count].discharge * grid->left[count].velocity + grid->left[count].pressure;
    for (size_t i = 0; i < count; i++) {
        struct sv_flow flow = sv_flow_at(&sv->section, area[i], discharge[i], 1);
        double friction = discharge[i] * fabs(discharge[i]) / (flow.conveyance * flow.conveyance);
        area_rate[i] = (grid->mass[i] - grid->mass[i + 1]) / sv->cell_m;
        discharge_rate[i] = (grid->momentum[i] - grid->momentum[i + 1]) / sv->cell_m +
                            sv_gravity_m_s2 * area[i] * (sv->slope_m_per_m - friction);
    }
}

static inline double sv_longest_step_s(const struct sv_case *sv, const struct sv_grid *grid)
{
    double fastest = 0.0;
    double friction_rate = 0.0; /* the source is explicit: its own decay, 2 g Sf / V, limits the step too */
    for (size_t i = 0; i < grid->cell_count; i++) {
        struct sv_flow flow = sv_flow_at(&sv->section, grid->area[i], grid->discharge[i], 1);
        fastest = fmax(fastest, fabs(flow.velocity) + flow.wave_speed);
        friction_rate = fmax(friction_rate, 2.0 * sv_gravity_m_s2 * flow.area * fabs(flow.discharge) /
                                                (flow.conveyance * flow.conveyance));
    }
    return fmin(0.7 * sv->cell_m / fastest, 0.7 / friction_rate);
}

static inline void sv_step(const struct sv_case *sv, struct sv_grid *grid, double t_s, double step_s, double *in_m3,
                           double *out_m3)
{
    size_t count = grid->cell_count;
    double inflow = sv->flood(t_s, sv->flood_parameters);
    double inflow_next = sv->flood(t_s + step_s, sv->flood_parameters);
    sv_rates(sv, grid, grid->area, grid->discharge, inflow, grid->area_rate[0], grid->discharge_rate[0]);
    *out_m3 += 0.5 * step_s * grid->mass[count];
    for (size_t i = 0; i < count; i++) {
        grid->area_stage[i] = grid->area[i] + step_s * grid->area_rate[0][i];
        grid->discharge_stage[i] = grid->discharge[i] + step_s * grid->discharge_rate[0][i];
    }
    sv_rates(sv, grid, grid->area_stage, grid->discharge_stage, inflow_next, grid->area_rate[1],
             grid->discharge_rate[1]);
    *out_m3 += 0.5 * step_s * grid->mass[count];
    *in_m3 += 0.5 * step_s * (inflow + inflow_next);
    for (size_t i = 0; i < count; i++) {
        grid->area[i] += 0.5 * step_s * (grid->area_rate[0][i] + grid->area_rate[1][i]);
        grid->discharge[i] += 0.5 * step_s * (grid->discharge_rate[0][i] + grid->discharge_rate[1][i]);
    }
}

static inline struct sv_grid sv_grid_create(size_t count)
{
    struct sv_grid grid = {.cell_count = count};
    grid.area = sv_room(count);
    grid.discharge = sv_room(count);
    grid.area_stage = sv_room(count);
    grid.discharge_stage = sv_room(count);
    grid.mass = sv_room(count + 1);
    grid.momentum = sv_room(count + 1);
    grid.left = calloc(count + 1, sizeof *grid.left);
    grid.right = calloc(count + 1, sizeof *grid.right);
    for (int stage = 0; stage < 2; stage++) {
        grid.area_rate[stage] = sv_room(count);
        grid.discharge_rate[stage] = sv_room(count);
    }
    if (grid.left == NULL || grid.right == NULL)
        fail_msg("no memory");
    return grid;
}

static inline void sv_grid_clear(struct sv_grid *grid)
{
    free(grid->area);
    free(grid->discharge);
    free(grid->area_stage);
    free(grid->discharge_stage);
    free(grid->mass);
    free(grid->momentum);
    free(grid->left);
    free(grid->right);
    for (int stage = 0; stage < 2; stage++) {
        free(grid->area_rate[stage]);
        free(grid->discharge_rate[stage]);
    }
}

static inline double sv_volume_m3(const struct sv_case *sv, const struct sv_grid *grid)
{
    double volume = 0.0;
    for (size_t i = 0; i < grid->cell_count; i++)
        volume += sv->cell_m * grid->area[i];
    return volume;
}

/* From uniform flow at the flood's first value. length_m and extension_m must be whole numbers of cells. */
static inline struct sv_result sv_run(const struct sv_case *sv)
{
    size_t place = (size_t)lround(sv->length_m / sv->cell_m); /* the face below it */
    struct sv_grid grid = sv_grid_create(place + (size_t)lround(sv->extension_m / sv->cell_m));
    struct sv_result result = {.count = (size_t)lround(sv->duration_s / sv->output_step_s) + 1};
    double start = sv->flood(0.0, sv->flood_parameters);
    double start_area = sv_normal_area_m2(&sv->section, sv->slope_m_per_m, start);
    double in_m3 = 0.0, out_m3 = 0.0;
    result.discharge_m3s = sv_room(result.count);
    result.depth_m = sv_room(result.count);
    for (size_t i = 0; i < grid.cell_count; i++) {
        grid.area[i] = start_area;
        grid.discharge[i] = start;
    }
    double volume = sv_volume_m3(sv, &grid);
    for (size_t output = 0; output < result.count; output++) {
        double t_s = (double)output * sv->output_step_s;
        result.discharge_m3s[output] = 0.5 * (grid.discharge[place - 1] + grid.discharge[place]);
        result.depth_m[output] =
            0.5 * (sv_depth_m(&sv->section, grid.area[place - 1]) + sv_depth_m(&sv->section, grid.area[place]));
        if (output + 1 == result.count)
            break;
        size_t step_count = (size_t)ceil(sv->output_step_s / sv_longest_step_s(sv, &grid));
        double step_s = sv->output_step_s / (double)step_count;
        for (size_t step = 0; step < step_count; step++)
            sv_step(sv, &grid, t_s + (double)step * step_s, step_s, &in_m3, &out_m3);
    }
    result.imbalance = (in_m3 - out_m3 - (sv_volume_m3(sv, &grid) - volume)) / in_m3;
    sv_grid_clear(&grid);
    return result;
}

static inline void sv_result_clear(struct sv_result *result)
{
    free(result->discharge_m3s);
    free(result->depth_m);
}

#endif
