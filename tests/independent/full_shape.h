/* SPDX-License-Identifier: MIT */
/*
 * The judge's own reading of a cross-section. It takes struct section as a description and nothing else from the
 * engine: every shape becomes a bag of straight lines, each of one panel, and water at a level is summed over them.
 * Walls that have no top are lines of great height.
 *     K = sum over panels of A_p (A_p / P_p)^(2/3) / n_p   (divided channel; lines of water between panels do not rub)
 * A fine table by the root of the area serves the time stepping; it is straight between rows.
 */
#ifndef FOREWATER_TESTS_INDEPENDENT_FULL_SHAPE_H
#define FOREWATER_TESTS_INDEPENDENT_FULL_SHAPE_H

#include <stdbool.h>
#include <stddef.h>

#include "engine/section.h"

enum { FULL_SHAPE_LINES = 160, FULL_SHAPE_PANELS = 8 };

struct full_line {
    double from_y_m, from_z_m, to_y_m, to_z_m; /* z above the lowest point */
    size_t panel;
    bool rubs;
};

struct full_shape {
    size_t line_count, panel_count;
    struct full_line lines[FULL_SHAPE_LINES];
    double roughness_n[FULL_SHAPE_PANELS];
};

struct full_water { /* at one depth */
    double area_m2, top_width_m, conveyance_m3s;
    double moment_m3; /* of the area about the water level: pressure by g and density */
};

/* False: more lines or panels than there is room for. */
bool full_shape_of(const struct section *section, struct full_shape *shape_out);

struct full_water full_shape_water_at(const struct full_shape *shape, double depth_m);
double full_shape_depth_of_area_m(const struct full_shape *shape, double area_m2);
/* The lowest depth at which uniform flow carries a discharge. */
double full_shape_normal_depth_m(const struct full_shape *shape, double slope_m_per_m, double discharge_m3s);
/* Of the wave of uniform flow, dQ/dA, by a difference over a ten thousandth of the depth. */
double full_shape_celerity_m_s(const struct full_shape *shape, double slope_m_per_m, double depth_m);

struct full_row { /* value at the row's beginning and rise to the next */
    double depth_m[2], moment_m3[2], wave_m_s[2] /* sqrt(g A / B) */, friction[2] /* g A / K^2 */;
};

struct full_table {
    struct full_row *rows;
    size_t row_count;
    double rows_per_root; /* row = rows_per_root * sqrt(area) */
};

enum { FULL_TABLE_ROWS = 12000 };

/* Up to an area; beyond it the last row is carried on. False: no memory. */
bool full_table_make(const struct full_shape *shape, double largest_area_m2, double gravity_m_s2,
                     struct full_table *table_out);
void full_table_clear(struct full_table *table);

#endif
