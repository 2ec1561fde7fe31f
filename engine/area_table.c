/* SPDX-License-Identifier: MIT */
#include "engine/area_table.h"

#include <math.h>
#include <stdbool.h>
#include <stdlib.h>

struct values {
    double depth, conveyance;
};

/* On the curve, at an area not less than the one asked for before; *node remembers the place. */
static struct values read_curve(const struct flow_curve *curve, double area_m2, size_t *node)
{
    const double *area = curve->area_m2;
    if (area_m2 <= area[0])
        return (struct values){curve->depth_m[0] * (area_m2 / area[0]),
                               curve->conveyance_m3s[0] * (area_m2 / area[0])};
    while (*node + 2 < curve->count && area[*node + 1] <= area_m2)
        ++*node;
    size_t i = *node;
    double share = (area_m2 - area[i]) / (area[i + 1] - area[i]);
    return (struct values){curve->depth_m[i] + share * (curve->depth_m[i + 1] - curve->depth_m[i]),
                           curve->conveyance_m3s[i] +
                               share * (curve->conveyance_m3s[i + 1] - curve->conveyance_m3s[i])};
}

enum fw_status area_table_init(struct area_table *table, const struct flow_curve *curve, double roughness_factor)
{
    memset(table, 0, sizeof *table);
    if (!(roughness_factor > 0.0) || !isfinite(roughness_factor))
        return FW_BAD_INPUT;
    table->smallest_area_m2 = curve->area_m2[0];
    table->largest_area_m2 = curve->area_m2[curve->count - 1];
    bit_index_init(&table->by_area, table->smallest_area_m2, table->largest_area_m2);
    table->rows = calloc(table->by_area.row_count, sizeof *table->rows);
    if (table->rows == NULL)
        return FW_NO_MEMORY;

    size_t node = 0;
    double start = bit_index_row_start(&table->by_area, 1);
    struct values at_start = read_curve(curve, start, &node);
    table->rows[0] =
        (struct area_table_row){0.0, at_start.depth / start, 0.0, at_start.conveyance / roughness_factor / start};
    for (size_t row = 1; row < table->by_area.row_count; row++) {
        double end = bit_index_row_start(&table->by_area, row + 1);
        struct values at_end = read_curve(curve, end, &node);
        double depth_1 = (at_end.depth - at_start.depth) / (end - start);
        double conveyance_1 = (at_end.conveyance - at_start.conveyance) / roughness_factor / (end - start);
        table->rows[row] =
            (struct area_table_row){at_start.depth - depth_1 * start, depth_1,
                                    at_start.conveyance / roughness_factor - conveyance_1 * start, conveyance_1};
        start = end;
        at_start = at_end;
    }
    return FW_OK;
}

void area_table_clear(struct area_table *table)
{
    free(table->rows);
    memset(table, 0, sizeof *table);
}

/* The last row that begins at or below a value of one of the two functions, by halving. */
static const struct area_table_row *row_of_value(const struct area_table *table, bool is_depth, double value)
{
    size_t low = 0, high = table->by_area.row_count;
    while (high - low > 1) {
        size_t middle = low + (high - low) / 2;
        const struct area_table_row *row = table->rows + middle;
        double start = bit_index_row_start(&table->by_area, middle);
        double here = is_depth ? row->depth_0 + row->depth_1 * start : row->conveyance_0 + row->conveyance_1 * start;
        if (here <= value)
            low = middle;
        else
            high = middle;
    }
    return table->rows + low;
}

double area_table_area_at_depth_m2(const struct area_table *table, double depth_m)
{
    const struct area_table_row *row = row_of_value(table, true, depth_m);
    return depth_m > 0.0 ? (depth_m - row->depth_0) / row->depth_1 : 0.0;
}

double area_table_area_of_conveyance_m2(const struct area_table *table, double conveyance_m3s)
{
    const struct area_table_row *row = row_of_value(table, false, conveyance_m3s);
    return conveyance_m3s > 0.0 ? (conveyance_m3s - row->conveyance_0) / row->conveyance_1 : 0.0;
}
