/* SPDX-License-Identifier: MIT */
#include "config/demo/bridge_table.h"

#include <math.h>
#include <stdio.h>

static const double allowed_error_m = 0.002;
static const double rounding_reserve_m = 0.0003; /* rows are printed to 0.001 m3/s and 0.1 mm */

enum { FINE_STEPS = 4000 }; /* 1 mm steps of the normal stage, up to 4 m: well above variant C's peak */

struct fine_curve {
    double discharge_m3s[FINE_STEPS + 1];
    double level_m[FINE_STEPS + 1];
};

static double rounded(double value, double unit)
{
    return round(value / unit) * unit;
}

static void trace(const struct recipe *recipe, double (*level_of)(double), struct fine_curve *curve_out)
{
    for (size_t i = 0; i <= FINE_STEPS; i++) {
        double normal_stage_m = 0.001 * (double)i;
        curve_out->discharge_m3s[i] =
            section_normal_discharge_m3s(&recipe->section, recipe->slope_m_per_m, normal_stage_m);
        curve_out->level_m[i] = level_of(normal_stage_m);
    }
}

static double chord_error_m(const struct fine_curve *curve, size_t from, size_t to)
{
    double worst_m = 0.0;
    double rise_m = curve->level_m[to] - curve->level_m[from];
    double run_m3s = curve->discharge_m3s[to] - curve->discharge_m3s[from];
    for (size_t i = from + 1; i < to; i++) {
        double line_m =
            curve->level_m[from] + rise_m * (curve->discharge_m3s[i] - curve->discharge_m3s[from]) / run_m3s;
        worst_m = fmax(worst_m, fabs(line_m - curve->level_m[i]));
    }
    return worst_m;
}

static double worst_error_m(const struct fine_curve *curve, const struct bridge_table *table)
{
    double worst_m = 0.0;
    size_t row = 0;
    for (size_t i = 0; i <= FINE_STEPS; i++) {
        double discharge_m3s = curve->discharge_m3s[i];
        while (row + 2 < table->row_count && table->discharge_m3s[row + 1] < discharge_m3s)
            row++;
        double slope = (table->stage_m[row + 1] - table->stage_m[row]) /
                       (table->discharge_m3s[row + 1] - table->discharge_m3s[row]);
        double line_m = table->stage_m[row] + slope * (discharge_m3s - table->discharge_m3s[row]);
        worst_m = fmax(worst_m, fabs(line_m - curve->level_m[i]));
    }
    return worst_m;
}

static size_t farthest_within(const struct fine_curve *curve, size_t from)
{
    size_t to = from + 1;
    while (to < FINE_STEPS && chord_error_m(curve, from, to + 1) <= allowed_error_m - rounding_reserve_m)
        to++;
    return to;
}

enum fw_status bridge_table_make(const struct recipe *recipe, double (*level_of)(double normal_stage_m),
                                 struct bridge_table *table_out)
{
    struct fine_curve curve;
    struct bridge_table table = {.row_count = 0};
    trace(recipe, level_of, &curve);
    for (size_t i = 0;; i = farthest_within(&curve, i)) {
        if (table.row_count == BRIDGE_TABLE_ROWS_MAX)
            return FW_OUT_OF_RANGE;
        table.discharge_m3s[table.row_count] = rounded(curve.discharge_m3s[i], 0.001);
        table.stage_m[table.row_count++] = rounded(curve.level_m[i], 0.0001);
        if (i == FINE_STEPS)
            break;
    }
    table.worst_error_m = worst_error_m(&curve, &table);
    *table_out = table;
    return FW_OK;
}

void bridge_table_print(const struct bridge_table *table, const char *name, const char *after)
{
    enum { ROWS_A_LINE = 4 };
    printf("                // straight lines within %.1f mm of the curve\n", 1000.0 * table->worst_error_m);
    printf("                \"%s\": [", name);
    for (size_t i = 0; i < table->row_count; i++)
        printf("%s[%.3f, %.4f]%s", i % ROWS_A_LINE == 0 ? "\n                    " : " ", table->discharge_m3s[i],
               table->stage_m[i], i + 1 < table->row_count ? "," : "");
    printf("\n                ]%s\n", after);
}
