/* SPDX-License-Identifier: MIT */
#ifndef FOREWATER_TESTS_BENCH_LINE_H
#define FOREWATER_TESTS_BENCH_LINE_H

#include <math.h>
#include <stddef.h>

/* Least squares straight line; the largest distance from it as a share of the largest y, the last. */
struct line {
    double at_0, slope, largest_miss;
};

static inline struct line line_through(size_t count, const double x[], const double y[])
{
    double sx = 0.0, sy = 0.0, sxx = 0.0, sxy = 0.0, n = (double)count;
    struct line line = {0};
    for (size_t i = 0; i < count; i++) {
        sx += x[i];
        sy += y[i];
        sxx += x[i] * x[i];
        sxy += x[i] * y[i];
    }
    line.slope = (n * sxy - sx * sy) / (n * sxx - sx * sx);
    line.at_0 = (sy - line.slope * sx) / n;
    for (size_t i = 0; i < count; i++)
        line.largest_miss = fmax(line.largest_miss, fabs(y[i] - line.at_0 - line.slope * x[i]) / fabs(y[count - 1]));
    return line;
}

#endif
