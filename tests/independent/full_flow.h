/* SPDX-License-Identifier: MIT */
/*
 * The full Saint-Venant equations on a fine grid, for tests to judge the engine by. It shares nothing with the engine
 * but struct section as a description (full_shape reads it in its own way).
 *
 *     dA/dt + dQ/dx = 0,    dQ/dt + d(Q^2/A + g I1)/dx = g A (S0 - Q|Q|/K^2)
 * in one prismatic reach: finite volumes, HLL flux (Harten, Lax and van Leer 1983), straight lines in each cell whose
 * slopes are central in smooth flow and limited at fronts (van Albada, van Leer and Roberts 1982), Heun steps. Second
 * order in smooth flow; water is conserved to rounding.
 *
 * Ends: the discharge at the head is given (and normal depth too, where flow there is supercritical); the area there
 * follows along the characteristic that comes from below. At the foot a level is held, or the river goes on: beyond
 * the reach the channel is the same for beyond_m, in cells that lengthen by 4 % each, and leaves freely.
 */
#ifndef FOREWATER_TESTS_INDEPENDENT_FULL_FLOW_H
#define FOREWATER_TESTS_INDEPENDENT_FULL_FLOW_H

#include <stdbool.h>
#include <stddef.h>

#include "engine/section.h"

typedef double (*full_inflow_fn)(double t_s, const void *parameters); /* m3/s, above 0 */

struct full_flow_case {
    const struct section *section;
    double slope_m_per_m, length_m;
    double (*slope_at)(double at_m, const void *parameters); /* NULL: slope_m_per_m everywhere */
    const void *slope_parameters;
    size_t cell_count;   /* of the reach, evenly long */
    double beyond_m;     /* 0: ten times D/c of the largest flow; of no meaning with a held level */
    double held_depth_m; /* at the foot; 0: the river goes on */
    double largest_m3s;  /* no flow is above twice this */
    double gravity_m_s2; /* 0: 9.80665 */
    double duration_s, output_step_s;
    full_inflow_fn inflow;
    const void *inflow_parameters;
    size_t place_count; /* 0: the foot alone */
    const double *place_m;
};

struct full_flow_result {
    size_t count, place_count; /* outputs from 0 on; at least one place */
    double *discharge_m3s;     /* [place][output] */
    double *depth_m;           /* [place][output] */
    double imbalance;          /* in - out - stored, relative to what came in, of all that was computed */
    size_t step_count, cell_count;
};

/*
 * From the steady state of the first inflow: uniform flow, or the profile below a held level. False: no memory, a
 * section too big for full_shape, or the water left the range of numbers (a front into a bed too dry for this grid).
 */
bool full_flow_run(const struct full_flow_case *full, struct full_flow_result *result_out);
void full_flow_result_clear(struct full_flow_result *result);

static inline const double *full_flow_discharge_at(const struct full_flow_result *result, size_t place)
{
    return result->discharge_m3s + place * result->count;
}

static inline const double *full_flow_depth_at(const struct full_flow_result *result, size_t place)
{
    return result->depth_m + place * result->count;
}

/* An inflow that is another from a moment on: times factor, and with rise added. For sensitivity to what is to come. */
struct full_flow_change {
    full_inflow_fn before;
    const void *before_parameters;
    double from_s, factor, rise_m3s;
};
double full_flow_changed_m3s(double t_s, const void *change);

#endif
