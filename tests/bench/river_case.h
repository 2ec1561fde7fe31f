/* SPDX-License-Identifier: MIT */
/* Rivers and floods that the benches route, and how near one hydrograph comes to another. */
#ifndef FOREWATER_TESTS_BENCH_RIVER_CASE_H
#define FOREWATER_TESTS_BENCH_RIVER_CASE_H

#include <stdbool.h>
#include <stddef.h>

#include "engine/section.h"

/* Q(t) = base + rise [(t / peak_s) exp(1 - t / peak_s)]^power, the shape of Todini (2007). */
struct flood {
    double base_m3s, rise_m3s, peak_s, power;
};

double flood_m3s(double t_s, const void *flood);

/* (peak - base) / steepest rise */
double flood_rise_s(const struct flood *flood);

/* What a member routes in place of the given flood: its rise by 0.8 to 1.2, 1 for member 0. */
struct flood flood_of_member(const struct flood *flood, size_t member);

struct river_case {
    const char *name, *description;
    struct section section;
    double slope_m_per_m, length_m;
    struct flood flood;
    double duration_s, time_step_s;
    size_t cell_count;
    bool is_for_storage_form; /* too; else the full equations alone */
    size_t truth_cell_count;  /* of the fine grid that judges */
};

enum { RIVER_CASE_COUNT = 3 };
extern const struct river_case river_cases[RIVER_CASE_COUNT];

static inline size_t river_case_output_count(const struct river_case *river)
{
    return (size_t)(river->duration_s / river->time_step_s + 0.5) + 1;
}

struct accuracy {
    double peak_error; /* relative */
    double time_error_s;
    double missed; /* 1 - Nash-Sutcliffe efficiency */
};

struct accuracy accuracy_of(size_t count, double step_s, const double truth[], const double values[]);

/* What to reach: as near as another came, with a little room (a peak nobody can tell apart is not a worse one). */
struct accuracy accuracy_goal_as(const struct accuracy *accuracy);

/* What is asked of the engine on named rivers: peak 0.3 %, its time 1 min or half a step, efficiency 0.9998. */
struct accuracy accuracy_goal_asked(double step_s);

bool accuracy_reaches(const struct accuracy *accuracy, const struct accuracy *goal);

#endif
