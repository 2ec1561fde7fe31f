/* SPDX-License-Identifier: MIT */
#include "engine/kinematic.h"

#include <math.h>
#include <stdbool.h>

static bool is_positive(double value)
{
    return value > 0.0 && isfinite(value);
}

static bool is_flow(double value)
{
    return value >= 0.0 && isfinite(value);
}

static bool are_flows(size_t count, const double value[])
{
    for (size_t i = 0; i < count; i++)
        if (!is_flow(value[i]))
            return false;
    return true;
}

enum fw_status kinematic_linear_step(const struct kinematic_channel *channel, size_t node_count, double inflow_new,
                                     const double lateral_per_length[], double discharge[])
{
    if (node_count < 2 || !is_positive(channel->alpha) || !is_positive(channel->beta) ||
        !is_positive(channel->cell_length) || !is_positive(channel->time_step) || !is_flow(inflow_new) ||
        !are_flows(node_count, discharge) ||
        (lateral_per_length != NULL && !are_flows(node_count - 1, lateral_per_length)))
        return FW_BAD_INPUT;

    const double dt_per_dx = channel->time_step / channel->cell_length;
    const double alpha_beta = channel->alpha * channel->beta;
    discharge[0] = inflow_new;
    for (size_t i = 1; i < node_count; i++) {
        double lateral = lateral_per_length == NULL ? 0.0 : lateral_per_length[i - 1];
        double mean = 0.5 * (discharge[i] + discharge[i - 1]);
        if (mean <= 0.0)
            mean = 0.5 * lateral * channel->cell_length; /* a dry cell that only side water enters */
        if (mean <= 0.0)
            continue; /* dry, and stays so */
        double held = alpha_beta * pow(mean, channel->beta - 1.0);
        discharge[i] =
            (dt_per_dx * discharge[i - 1] + held * discharge[i] + channel->time_step * lateral) / (dt_per_dx + held);
    }
    return FW_OK;
}
