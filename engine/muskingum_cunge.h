/* SPDX-License-Identifier: MIT */
/*
 * One reach routed by a nonlinear box scheme with matched diffusion: Muskingum-Cunge in storage form.
 *
 * With I the flow into a cell of length dx, O the flow out of it, c = dQ/dA, D the hydraulic diffusivity, and
 *     d(Q) = integral from 0 to Q of max( D/c^2 - (dx/c - dt)/2, 0, dt - dx/c ) dQ
 *     H(Q) = dx A(Q) + d(Q),      b(Q) = dt Q - d(Q)
 * one step from old to new (primed) values is
 *     H(O') = H(O) - dt O + b(I) + d(I') + lateral volume.
 * It is the box scheme whose numerical diffusion equals D at every flow, written with potentials, so that volume
 * telescopes. The max() keeps it monotone: the least diffusion a two-point scheme may have (Godunov 1959). Source of
 * the matching: Cunge (1969), Ponce and Yevjevich (1978); of conservative forms: Todini (2007), Price (2009);
 * derived in docs/hydraulics-routing.md. d is the implicit part of the passing volume: what acts at the new time
 * already.
 *
 * A cell's whole memory is one double, S = H(O) - dt O + b(I), and S' = S + dt I' - dt O' + lateral volume, exactly:
 * volume is conserved to rounding however coarse the tables are. What a cell stores is S - (dt I - dt O) / 2, which
 * balances with volumes taken by the trapezoidal rule.
 *
 * The kinematic wave is the same kernel with d = dt Q, so H = dx A + dt Q, b = 0 (first-order upwind).
 *
 * "Passing volume" is dt Q: what passes a place in one step at flow Q, m3.
 */
#ifndef FOREWATER_ENGINE_MUSKINGUM_CUNGE_H
#define FOREWATER_ENGINE_MUSKINGUM_CUNGE_H

#include "engine/bit_index.h"
#include "engine/flow_curve.h"
#include "engine/status.h"
#include "engine/vector.h"

enum muskingum_cunge_diffusion {
    MUSKINGUM_CUNGE_MATCHED, /* the river's own */
    MUSKINGUM_CUNGE_UPWIND   /* none of its own, only the grid's: the kinematic wave */
};

struct muskingum_cunge_row { /* straight lines in H: dt O = outflow_0 + outflow_1 H, d likewise */
    double outflow_0, outflow_1;
    double implicit_0, implicit_1;
};

/* Of one reach and roughness: time step and cell length are baked in. */
struct muskingum_cunge_table {
    double time_step_s;
    double cell_m;
    struct bit_index by_potential; /* H to row */
    struct muskingum_cunge_row *rows;
    void *row_memory;
    enum vector_level
        vectors; /* the widest present; another that is present may be set, with the same results. AVX-512 is served by AVX2. */
    struct bit_index by_outflow; /* dt O to the row it begins in */
    uint32_t *first_row;
    double *row_outflow;          /* dt O at which a row begins; one more than rows, the last infinite */
    double largest_discharge_m3s; /* where the tables end and the last row is carried on */
};

struct muskingum_cunge_reach { /* what a table is built from */
    const struct flow_curve *curve;
    double slope_m_per_m;
    double roughness_factor;
    double cell_m;
    double time_step_s;
    double smallest_discharge_m3s; /* below it: straight to the origin */
    enum muskingum_cunge_diffusion diffusion;
};

/* FW_BAD_INPUT  a number not positive or not finite, or fewer than two points of the curve above the smallest
 * discharge; FW_NO_MEMORY. The caller clears. */
FW_MUST_CHECK enum fw_status muskingum_cunge_table_init(struct muskingum_cunge_table *table,
                                                        const struct muskingum_cunge_reach *reach);
void muskingum_cunge_table_clear(struct muskingum_cunge_table *table); /* an all-zero one is fine */

/*
 * d at the head of a reach, and H of a steady flow, for a passing volume: the tables of the cells read backwards, so
 * that a reach cut in two at a cell boundary routes as one.
 */
double muskingum_cunge_implicit_m3(const struct muskingum_cunge_table *table, double passing_m3);
double muskingum_cunge_potential_m3(const struct muskingum_cunge_table *table, double passing_m3);

/*
 * One step down consecutive cells, all members at once.
 *
 *   state_m3     [cell][member]; lateral volume of the step is added to a cell's state before the call
 *   passing_m3   [member]; in: dt I' at the first cell's upper end; out: dt O' of the last cell
 *   implicit_m3  [member]; in: d(I'); out: d(O')
 * The arrays do not overlap. Safe for any bits whatever in them: no read outside the tables. A member gets the same
 * bits whatever the number of members beside it and whatever table->vectors. Cheapest per member from 32 members on.
 */
void muskingum_cunge_step(const struct muskingum_cunge_table *table, size_t cell_count, size_t member_count,
                          double state_m3[restrict], double passing_m3[restrict], double implicit_m3[restrict]);

/*
 * The state that a steady flow holds.
 *   lateral_m3  into the cell each step; passing_m3 and implicit_m3 as in a step, for one member
 */
double muskingum_cunge_steady_state_m3(const struct muskingum_cunge_table *table, double lateral_m3,
                                       double *passing_m3, double *implicit_m3);

#endif
