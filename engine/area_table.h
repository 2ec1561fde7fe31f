/* SPDX-License-Identifier: MIT */
/*
 * Depth and conveyance of a reach against area, as straight lines found from the bits of the area: 64 to the octave.
 *
 * The first row runs to the origin, the last is carried on above. Both functions rise with area and are continuous,
 * so a steady uniform flow of the tables is one of any scheme that reads them.
 */
#ifndef FOREWATER_ENGINE_AREA_TABLE_H
#define FOREWATER_ENGINE_AREA_TABLE_H

#include "engine/bit_index.h"
#include "engine/flow_curve.h"
#include "engine/status.h"

struct area_table_row { /* depth = depth_0 + depth_1 A; conveyance likewise */
    double depth_0, depth_1;
    double conveyance_0, conveyance_1;
};

struct area_table {
    struct bit_index by_area;
    struct area_table_row *rows;
    double smallest_area_m2; /* of the curve: a film of about a millimetre */
    double largest_area_m2;  /* where the curve ends */
};

/* FW_BAD_INPUT  roughness_factor not positive or not finite; FW_NO_MEMORY. The caller clears. */
FW_MUST_CHECK enum fw_status area_table_init(struct area_table *table, const struct flow_curve *curve,
                                             double roughness_factor);
void area_table_clear(struct area_table *table); /* an all-zero one is fine */

static inline const struct area_table_row *area_table_row_at(const struct area_table *table, double area_m2)
{
    return table->rows + bit_index_row(&table->by_area, area_m2);
}

static inline double area_table_depth_m(const struct area_table *table, double area_m2)
{
    const struct area_table_row *row = area_table_row_at(table, area_m2);
    return row->depth_0 + row->depth_1 * area_m2;
}

static inline double area_table_conveyance_m3s(const struct area_table *table, double area_m2)
{
    const struct area_table_row *row = area_table_row_at(table, area_m2);
    return row->conveyance_0 + row->conveyance_1 * area_m2;
}

/* The tables read backwards: the area at a depth, or of a conveyance; 0 for what is not above 0. */
double area_table_area_at_depth_m2(const struct area_table *table, double depth_m);
double area_table_area_of_conveyance_m2(const struct area_table *table, double conveyance_m3s);

#endif
