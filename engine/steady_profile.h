/* SPDX-License-Identifier: MIT */
/*
 * Steady, gradually varied flow over one interval of a channel, as the box scheme of engine/dynamic_tree.h sees it:
 *     s [beta Q^2/A] from L to R + g Am { hR - hL - S0 dx + dx (SfL + SfR) / 2 } = 0
 * Solved from below upwards, as levels are set from below in slow water. Source: Chow (1959), chapter 10.
 */
#ifndef FOREWATER_ENGINE_STEADY_PROFILE_H
#define FOREWATER_ENGINE_STEADY_PROFILE_H

#include <stdbool.h>

#include "engine/area_table.h"

struct steady_interval {
    const struct area_table *table;
    double length_m;
    double slope_m_per_m;
    double momentum_factor;
    bool has_inertia;
};

/*
 * The area at the upper end, from the area and flow at the lower; the flows may differ by a side inflow. Never less
 * than the table's smallest area: a bed above the reach of the water below keeps a film.
 */
double steady_profile_area_above_m2(const struct steady_interval *interval, double discharge_above_m3s,
                                    double area_below_m2, double discharge_below_m3s);

#endif
