/* SPDX-License-Identifier: MIT */
/*
 * A smooth curve through given points that never swings beyond them: piecewise cubic, monotone between any two
 * neighbours, level at every highest and lowest point.
 *
 * The slope at an inner point is the weighted harmonic mean of the slopes of the two chords beside it, zero where
 * they differ in sign; at the first point it is that of the first chord, at the last point half that of the last
 * chord (a recession flattens).
 * Source: Fritsch and Butland, A method for constructing local monotone piecewise cubic interpolants, SIAM J. Sci.
 * Stat. Comput. 5 (1984) 300-304.
 */
#ifndef FOREWATER_CONFIG_DEMO_SMOOTH_CURVE_H
#define FOREWATER_CONFIG_DEMO_SMOOTH_CURVE_H

#include <stddef.h>
#include <stdint.h>

struct smooth_curve_point {
    int64_t utc_s;
    double value;
};

/* points: at least two, times strictly rising. Before the first and after the last point the end value holds. */
double smooth_curve_at(size_t point_count, const struct smooth_curve_point points[], int64_t utc_s);

#endif
