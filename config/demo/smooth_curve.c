/* SPDX-License-Identifier: MIT */
#include "config/demo/smooth_curve.h"

#include <assert.h>

static double seconds_between(const struct smooth_curve_point points[], size_t chord)
{
    return (double)(points[chord + 1].utc_s - points[chord].utc_s);
}

static double chord_slope(const struct smooth_curve_point points[], size_t chord)
{
    return (points[chord + 1].value - points[chord].value) / seconds_between(points, chord);
}

static double slope_at(size_t point_count, const struct smooth_curve_point points[], size_t point)
{
    if (point == 0)
        return chord_slope(points, 0);
    if (point == point_count - 1)
        return 0.5 * chord_slope(points, point - 1);
    double before = chord_slope(points, point - 1), after = chord_slope(points, point);
    if (before * after <= 0.0)
        return 0.0;
    double length_before = seconds_between(points, point - 1), length_after = seconds_between(points, point);
    double weight_before = 2.0 * length_after + length_before;
    double weight_after = length_after + 2.0 * length_before;
    return (weight_before + weight_after) / (weight_before / before + weight_after / after);
}

double smooth_curve_at(size_t point_count, const struct smooth_curve_point points[], int64_t utc_s)
{
    assert(point_count >= 2);
    if (utc_s <= points[0].utc_s)
        return points[0].value;
    if (utc_s >= points[point_count - 1].utc_s)
        return points[point_count - 1].value;
    size_t chord = 0;
    while (points[chord + 1].utc_s <= utc_s)
        chord++;
    double length = seconds_between(points, chord);
    double along = (double)(utc_s - points[chord].utc_s) / length;
    double left = 1.0 - along;
    return points[chord].value * (1.0 + 2.0 * along) * left * left +
           slope_at(point_count, points, chord) * length * along * left * left +
           points[chord + 1].value * along * along * (3.0 - 2.0 * along) -
           slope_at(point_count, points, chord + 1) * length * along * along * left;
}
