/* SPDX-License-Identifier: MIT */
#include "engine/steady_profile.h"

#include <math.h>

static const double gravity_m_s2 = 9.80665;

struct place {
    double depth, area, flux, friction, froude_squared;
};

static struct place place_at(const struct steady_interval *interval, double area, double discharge)
{
    const struct area_table_row *row = area_table_row_at(interval->table, area);
    double speed = discharge / area;
    double steepness = discharge / (row->conveyance_0 + row->conveyance_1 * area);
    return (struct place){.depth = row->depth_0 + row->depth_1 * area,
                          .area = area,
                          .flux = interval->momentum_factor * discharge * speed,
                          .friction = steepness * fabs(steepness),
                          .froude_squared = speed * speed / (gravity_m_s2 * area * row->depth_1)};
}

/* Falls as the area above grows. */
static double imbalance(const struct steady_interval *interval, const struct place *above, const struct place *below)
{
    double square = fmax(above->froude_squared, below->froude_squared);
    double fourth = square * square;
    double inertia = interval->has_inertia ? fmax(0.0, 1.0 - fourth * fourth * square) : 0.0; /* 1 - Fr^10 */
    return inertia * (below->flux - above->flux) +
           gravity_m_s2 * 0.5 * (above->area + below->area) *
               (below->depth - above->depth - interval->slope_m_per_m * interval->length_m +
                0.5 * interval->length_m * (above->friction + below->friction));
}

static double imbalance_at(const struct steady_interval *interval, double area, double discharge,
                           const struct place *below)
{
    struct place above = place_at(interval, area, discharge);
    return imbalance(interval, &above, below);
}

double steady_profile_area_above_m2(const struct steady_interval *interval, double discharge_above_m3s,
                                    double area_below_m2, double discharge_below_m3s)
{
    const struct place below = place_at(interval, area_below_m2, discharge_below_m3s);
    const double film = interval->table->smallest_area_m2;
    double low = fmax(area_below_m2, film), high = low;
    double at_low = imbalance_at(interval, low, discharge_above_m3s, &below), at_high = at_low;
    while (at_low < 0.0 && low > film) { /* the answer lies below */
        high = low;
        at_high = at_low;
        low = fmax(0.7 * low, film);
        at_low = imbalance_at(interval, low, discharge_above_m3s, &below);
    }
    if (at_low <= 0.0)
        return low;
    while (at_high > 0.0) {
        low = high;
        at_low = at_high;
        high *= 1.4;
        at_high = imbalance_at(interval, high, discharge_above_m3s, &below);
    }
    /* the false position, with the half-weights of the Illinois rule */
    int last_side = 0;
    for (int i = 0; i < 200 && high - low > 4e-16 * high; i++) {
        double middle = (low * at_high - high * at_low) / (at_high - at_low);
        if (!(middle > low && middle < high))
            middle = 0.5 * (low + high);
        if (middle <= low || middle >= high)
            break;
        double at_middle = imbalance_at(interval, middle, discharge_above_m3s, &below);
        if (at_middle == 0.0)
            return middle;
        if (at_middle > 0.0) {
            low = middle;
            at_low = at_middle;
            at_high *= last_side == 1 ? 0.5 : 1.0;
            last_side = 1;
        } else {
            high = middle;
            at_high = at_middle;
            at_low *= last_side == -1 ? 0.5 : 1.0;
            last_side = -1;
        }
    }
    return 0.5 * (low + high);
}
