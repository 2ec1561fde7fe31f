/* SPDX-License-Identifier: MIT */
/*
 * The published linear kinematic-wave scheme, kept as worked example, rival and check.
 *
 *     Q[i+1][j+1] = (dt/dx Q[i][j+1] + alpha beta Qm^(beta-1) Q[i+1][j] + dt qm) / (dt/dx + alpha beta Qm^(beta-1)),
 *     Qm = (Q[i+1][j] + Q[i][j+1]) / 2,   A = alpha Q^beta
 * Source: Chow, Maidment and Mays, Applied Hydrology (1988), section 9.6, Example 9.6.1.
 * It does not conserve volume: never use it for a balance. In a dry cell (Qm = 0) half the cell's side inflow stands
 * for Qm, and without side inflow the cell stays dry.
 */
#ifndef FOREWATER_ENGINE_KINEMATIC_H
#define FOREWATER_ENGINE_KINEMATIC_H

#include <stddef.h>

#include "engine/status.h"

struct kinematic_channel { /* any consistent units */
    double alpha, beta;
    double cell_length;
    double time_step;
};

/*
 * One time step down all cells.
 *   discharge        node_count values at the old time, in place to the new; [0] is set to inflow_new
 *   lateral_per_length  per cell (node_count - 1), at the mean of both times; NULL for none
 * FW_BAD_INPUT: node_count < 2, a parameter not positive, a value negative or not finite; nothing is changed then.
 */
FW_MUST_CHECK enum fw_status kinematic_linear_step(const struct kinematic_channel *channel, size_t node_count,
                                                   double inflow_new, const double lateral_per_length[],
                                                   double discharge[]);

#endif
