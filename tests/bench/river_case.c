/* SPDX-License-Identifier: MIT */
#include "tests/bench/river_case.h"

#include <math.h>

const struct river_case river_cases[RIVER_CASE_COUNT] = {
    {.name = "published",
     .description = "50 m rectangle, n 0.035, S0 0.001, 100 km, 100 to 900 m3/s in 24 h (Todini 2007)",
     .section = {.shape = SECTION_RECTANGLE, .bottom_m = 50.0, .roughness_n = 0.035},
     .slope_m_per_m = 1e-3,
     .length_m = 100e3,
     .flood = {100.0, 800.0, 24.0 * 3600.0, 16.0},
     .duration_s = 96.0 * 3600.0,
     .time_step_s = 300.0,
     .cell_count = 100,
     .is_for_storage_form = true,
     .truth_cell_count = 800},
    {.name = "flashy",
     .description =
         "8 m channel 1.8 m deep, plains of 20 m, n 0.04 and 0.07, S0 0.003, 12 km, 3 to 60 m3/s in 90 min",
     .section = {.shape = SECTION_RECTANGLE,
                 .bottom_m = 8.0,
                 .roughness_n = 0.04,
                 .has_plain = true,
                 .plain_above_m = 1.8,
                 .plain_width_m = 20.0,
                 .plain_roughness_n = 0.07},
     .slope_m_per_m = 0.003,
     .length_m = 12e3,
     .flood = {3.0, 57.0, 1.5 * 3600.0, 4.0},
     .duration_s = 14.0 * 3600.0,
     .time_step_s = 60.0,
     .cell_count = 80,
     .is_for_storage_form = true,
     .truth_cell_count = 480},
    {.name = "flat",
     .description = "30 m rectangle, n 0.035, S0 0.0003, 20 km, 30 to 200 m3/s in 10 h",
     .section = {.shape = SECTION_RECTANGLE, .bottom_m = 30.0, .roughness_n = 0.035},
     .slope_m_per_m = 3e-4,
     .length_m = 20e3,
     .flood = {30.0, 170.0, 10.0 * 3600.0, 4.0},
     .duration_s = 48.0 * 3600.0,
     .time_step_s = 300.0,
     .cell_count = 40,
     .is_for_storage_form = false,
     .truth_cell_count = 400},
};

double flood_m3s(double t_s, const void *parameters)
{
    const struct flood *flood = parameters;
    double x = t_s / flood->peak_s;
    return x > 0.0 ? flood->base_m3s + flood->rise_m3s * exp(flood->power * (log(x) + 1.0 - x)) : flood->base_m3s;
}

double flood_rise_s(const struct flood *flood)
{
    double steepest = 0.0, step_s = 1e-3 * flood->peak_s;
    for (double t_s = 0.0; t_s < flood->peak_s; t_s += step_s)
        steepest = fmax(steepest, (flood_m3s(t_s + step_s, flood) - flood_m3s(t_s, flood)) / step_s);
    return flood->rise_m3s / steepest;
}

struct flood flood_of_member(const struct flood *flood, size_t member)
{
    struct flood own = *flood;
    own.rise_m3s *= 0.8 + 0.4 * (double)((member * 7 + 16) % 32) / 32.0;
    return own;
}

struct peak {
    double value, time_s;
};

/* A parabola through the highest value and its neighbours. */
static struct peak peak_of(size_t count, double step_s, const double values[])
{
    size_t top = 0;
    for (size_t i = 1; i < count; i++)
        if (values[i] > values[top])
            top = i;
    if (top == 0 || top + 1 == count)
        return (struct peak){values[top], step_s * (double)top};
    double slope = 0.5 * (values[top + 1] - values[top - 1]);
    double bend = values[top + 1] - 2.0 * values[top] + values[top - 1];
    double at = bend < 0.0 ? -slope / bend : 0.0;
    return (struct peak){values[top] + 0.5 * slope * at, step_s * ((double)top + at)};
}

struct accuracy accuracy_of(size_t count, double step_s, const double truth[], const double values[])
{
    struct peak expected = peak_of(count, step_s, truth), got = peak_of(count, step_s, values);
    double mean = 0.0, missed = 0.0, spread = 0.0;
    for (size_t i = 0; i < count; i++)
        mean += truth[i] / (double)count;
    for (size_t i = 0; i < count; i++) {
        missed += (values[i] - truth[i]) * (values[i] - truth[i]);
        spread += (truth[i] - mean) * (truth[i] - mean);
    }
    return (struct accuracy){got.value / expected.value - 1.0, got.time_s - expected.time_s, missed / spread};
}

struct accuracy accuracy_goal_as(const struct accuracy *accuracy)
{
    return (struct accuracy){.peak_error = fmax(fabs(accuracy->peak_error) + 0.0005, 0.001),
                             .time_error_s = fmax(fabs(accuracy->time_error_s) + 6.0, 15.0),
                             .missed = 1.05 * accuracy->missed};
}

struct accuracy accuracy_goal_asked(double step_s)
{
    return (struct accuracy){.peak_error = 0.003, .time_error_s = fmax(60.0, 0.5 * step_s), .missed = 2e-4};
}

bool accuracy_reaches(const struct accuracy *accuracy, const struct accuracy *goal)
{
    return accuracy->missed <= goal->missed && fabs(accuracy->peak_error) <= goal->peak_error &&
           fabs(accuracy->time_error_s) <= goal->time_error_s;
}
