/* SPDX-License-Identifier: MIT */
/*
 * A river in which every flow runs with one celerity c and spreads with one diffusivity D: area rises with depth as
 * exp(c h / (2 D S0)), so that Q = c A and Q / (2 B S0) = D. The storage form is then linear, and must be the classic
 * Muskingum scheme with K = dx / c and X = 1/2 - D / (c dx) (Cunge 1969). Any fault fails the test. Include <cmocka.h>
 * with its companions first. Any consistent units will do.
 */
#ifndef FOREWATER_TESTS_ENGINE_LINEAR_RIVER_H
#define FOREWATER_TESTS_ENGINE_LINEAR_RIVER_H

#include <math.h>
#include <stdlib.h>

#include "engine/muskingum_cunge.h"

struct linear_river {
    struct flow_curve curve;
    struct muskingum_cunge_table table;
    size_t cell_count;
    double *state; /* [cell], one member */
    double inflow, outflow;
};

struct linear_reach {
    double celerity, diffusivity;
    double cell_length, time_step;
    size_t cell_count;
};

/* K and X of one cell; X may be below zero. */
static inline struct linear_reach linear_reach_of_muskingum(double k, double x, double time_step)
{
    return (struct linear_reach){.celerity = 1.0 / k,
                                 .diffusivity = (0.5 - x) / k,
                                 .cell_length = 1.0,
                                 .time_step = time_step,
                                 .cell_count = 1};
}

static inline double *linear_river_room(size_t count)
{
    double *room = calloc(count, sizeof *room);
    if (room == NULL)
        fail_msg("no memory");
    return room;
}

/* Flows of 1e-3 to 1e4. Steady at a flow. */
static inline void linear_river_init(struct linear_river *river, const struct linear_reach *from, double flow)
{
    enum { NODES_PER_OCTAVE = 512, OCTAVES = 24 };
    static const double slope = 0.01; /* the exponential takes it out again */
    double lowest_area = 1e-3 / from->celerity;
    double bend = from->celerity / (2.0 * from->diffusivity * slope);
    *river = (struct linear_river){.cell_count = from->cell_count, .inflow = flow, .outflow = flow};
    struct flow_curve *curve = &river->curve;
    curve->count = NODES_PER_OCTAVE * OCTAVES + 1;
    curve->depth_m = linear_river_room(curve->count);
    curve->area_m2 = linear_river_room(curve->count);
    curve->conveyance_m3s = linear_river_room(curve->count);
    for (size_t i = 0; i < curve->count; i++) {
        curve->area_m2[i] = lowest_area * exp2((double)i / NODES_PER_OCTAVE);
        curve->depth_m[i] = 1.0 + log(curve->area_m2[i] / lowest_area) / bend;
        curve->conveyance_m3s[i] = from->celerity * curve->area_m2[i] / sqrt(slope);
    }
    const struct muskingum_cunge_reach reach = {.curve = curve,
                                                .slope_m_per_m = slope,
                                                .roughness_factor = 1.0,
                                                .cell_m = from->cell_length,
                                                .time_step_s = from->time_step,
                                                .smallest_discharge_m3s = 1e-3,
                                                .diffusion = MUSKINGUM_CUNGE_MATCHED};
    assert_int_equal(muskingum_cunge_table_init(&river->table, &reach), FW_OK);
    river->state = linear_river_room(river->cell_count);
    double passing = flow * from->time_step;
    double implicit = muskingum_cunge_implicit_m3(&river->table, passing);
    for (size_t cell = 0; cell < river->cell_count; cell++)
        river->state[cell] = muskingum_cunge_steady_state_m3(&river->table, 0.0, &passing, &implicit);
}

static inline void linear_river_clear(struct linear_river *river)
{
    muskingum_cunge_table_clear(&river->table);
    flow_curve_clear(&river->curve);
    free(river->state);
}

/* Unsteady: what one cell holds while one flow enters it and another leaves. */
static inline void linear_river_set(struct linear_river *river, double inflow, double outflow)
{
    double step = river->table.time_step_s;
    river->inflow = inflow;
    river->outflow = outflow;
    river->state[0] = muskingum_cunge_potential_m3(&river->table, step * outflow) - step * outflow + step * inflow -
                      muskingum_cunge_implicit_m3(&river->table, step * inflow);
}

/* One step to a new inflow; the outflow at its end. */
static inline double linear_river_step(struct linear_river *river, double inflow)
{
    double passing = inflow * river->table.time_step_s;
    double implicit = muskingum_cunge_implicit_m3(&river->table, passing);
    muskingum_cunge_step(&river->table, river->cell_count, 1, river->state, &passing, &implicit);
    river->inflow = inflow;
    river->outflow = passing / river->table.time_step_s;
    return river->outflow;
}

/* What the river holds: it balances with flows summed by the trapezoidal rule. */
static inline double linear_river_volume(const struct linear_river *river)
{
    double volume = -0.5 * river->table.time_step_s * (river->inflow - river->outflow);
    for (size_t cell = 0; cell < river->cell_count; cell++)
        volume += river->state[cell];
    return volume;
}

#endif
