/* SPDX-License-Identifier: MIT */
/*
 * Random rivers and floods, each known by its number: the same number is the same reach on every machine with IEEE
 * arithmetic. Numbers 3k are rectangles and trapezoids, 3k + 1 the same with flood plains, 3k + 2 surveyed points with
 * three panels. From RANDOM_FAST_FROM on uniform flow is faster than Froude number 0.9 at the peak. The distribution is written down in docs/hydraulics-reference.md and in random_reach.c, nowhere else.
 */
#ifndef FOREWATER_TESTS_INDEPENDENT_RANDOM_REACH_H
#define FOREWATER_TESTS_INDEPENDENT_RANDOM_REACH_H

#include <stddef.h>

#include "engine/section.h"

enum { RANDOM_REACH_POINTS = 24, RANDOM_FAST_FROM = 100000 };

enum random_reach_class { RANDOM_SIMPLE, RANDOM_WITH_PLAINS, RANDOM_SURVEYED, RANDOM_CLASSES };

struct random_flood { /* base + rise [(t / top) e^(1 - t / top)]^sharpness */
    double base_m3s, rise_m3s, top_s, sharpness;
};

struct random_reach {
    size_t number;
    size_t drawn; /* times, until it was within bounds */
    enum random_reach_class class;
    struct section section; /* points into this struct: it must stay where it is */
    double slope_m_per_m, length_m;
    double width_m, bank_m, peak_depth_m; /* of the channel; depth of bank full; normal depth of the peak */
    double rise_s;                        /* (peak - base) / steepest rise */
    struct random_flood flood;
    double celerity_m_s, diffusivity_m2_s, froude; /* of the peak as uniform flow; the diffusivity without inertia */
    double slowest_m_s;                            /* least celerity from 0.5 of the peak to the peak */
    double offset_m[RANDOM_REACH_POINTS], elevation_m[RANDOM_REACH_POINTS];
    double panel_to_m[3], panel_n[3];
};

void random_reach_draw(size_t number, struct random_reach *reach_out);
double random_flood_m3s(double t_s, const void *flood);
const char *random_reach_class_name(enum random_reach_class class);

#endif
