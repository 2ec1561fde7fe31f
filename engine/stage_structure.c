/* SPDX-License-Identifier: MIT */
#include "engine/stage_structure.h"

#include <math.h>

static const double highest_depth_m = 1e6;
static const double drowned_ratio = 0.98; /* from here to level water the rule's curve is replaced by its chord: its
                                             slope has no bound there */

enum fw_status stage_structure_check(const struct stage_structure *structure)
{
    if (structure == NULL || structure->opening_count == 0)
        return FW_BAD_INPUT;
    for (size_t i = 0; i < structure->opening_count; i++) {
        const struct stage_opening *opening = &structure->openings[i];
        if (opening->row_count < 2 || !(opening->open_share >= 0.0 && opening->open_share <= 1.0) ||
            opening->discharge_m3s[0] != 0.0 || !isfinite(opening->depth_m[0]))
            return FW_BAD_INPUT;
        for (size_t row = 1; row < opening->row_count; row++)
            if (!(opening->depth_m[row] > opening->depth_m[row - 1]) || !isfinite(opening->depth_m[row]) ||
                !(opening->discharge_m3s[row] > opening->discharge_m3s[row - 1]) ||
                !isfinite(opening->discharge_m3s[row]))
                return FW_BAD_INPUT;
        for (size_t row = 0; opening->most_m3s != NULL && row < opening->row_count; row++)
            if (!isfinite(opening->most_m3s[row]) ||
                !(row == 0 ? opening->most_m3s[row] == 0.0 : opening->most_m3s[row] > opening->most_m3s[row - 1]))
                return FW_BAD_INPUT;
    }
    return FW_OK;
}

/* A column of an opening's table at a depth above its sill: the value and its slope. */
static struct stage_flow line_at(const struct stage_opening *opening, const double discharge_m3s[], double depth_m)
{
    size_t row = 0, last = opening->row_count - 2;
    while (row < last) { /* the first row whose next is not below the depth */
        size_t middle = row + (last - row) / 2;
        if (opening->depth_m[middle + 1] < depth_m)
            row = middle + 1;
        else
            last = middle;
    }
    double slope =
        (discharge_m3s[row + 1] - discharge_m3s[row]) / (opening->depth_m[row + 1] - opening->depth_m[row]);
    return (struct stage_flow){.discharge_m3s = opening->open_share *
                                                (discharge_m3s[row] + slope * (depth_m - opening->depth_m[row])),
                               .by_depth_above_m2s = opening->open_share * slope};
}

/* Villemonte's factor and its slope against the ratio of the heads, 0 to 1. */
static double drowned_factor(double ratio, double *slope_out)
{
    if (ratio >= drowned_ratio) {
        double at_knee = pow(1.0 - pow(drowned_ratio, 1.5), 0.385);
        *slope_out = -at_knee / (1.0 - drowned_ratio);
        return at_knee * (1.0 - ratio) / (1.0 - drowned_ratio);
    }
    double factor = pow(1.0 - pow(ratio, 1.5), 0.385);
    *slope_out = -0.385 * 1.5 * sqrt(ratio) * factor / (1.0 - pow(ratio, 1.5));
    return factor;
}

struct stage_flow stage_structure_flow(const struct stage_structure *structure, double depth_above_m,
                                       double depth_below_m)
{
    struct stage_flow sum = {0};
    for (size_t i = 0; i < structure->opening_count; i++) {
        const struct stage_opening *opening = &structure->openings[i];
        double head_above = depth_above_m - opening->depth_m[0];
        double head_below = depth_below_m - opening->depth_m[0];
        if (!(head_above > 0.0) || head_below >= head_above)
            continue;
        struct stage_flow flow = line_at(opening, opening->discharge_m3s, depth_above_m);
        if (head_below > 0.0) {
            double ratio = head_below / head_above;
            double factor_slope;
            double factor = drowned_factor(ratio, &factor_slope);
            flow.by_depth_below_m2s = flow.discharge_m3s * factor_slope / head_above;
            flow.by_depth_above_m2s =
                flow.by_depth_above_m2s * factor - flow.discharge_m3s * factor_slope * ratio / head_above;
            flow.discharge_m3s *= factor;
        }
        if (opening->most_m3s != NULL) {
            struct stage_flow most = line_at(opening, opening->most_m3s, depth_above_m);
            flow = flow.discharge_m3s > most.discharge_m3s ? most : flow;
        }
        sum.discharge_m3s += flow.discharge_m3s;
        sum.by_depth_above_m2s += flow.by_depth_above_m2s;
        sum.by_depth_below_m2s += flow.by_depth_below_m2s;
    }
    return sum;
}

double stage_structure_depth_above_m(const struct stage_structure *structure, double discharge_m3s,
                                     double depth_below_m)
{
    double low = structure->openings[0].depth_m[0];
    for (size_t i = 1; i < structure->opening_count; i++)
        low = fmin(low, structure->openings[i].depth_m[0]);
    double reach = 1.0;
    double high = low + reach;
    while (stage_structure_flow(structure, high, depth_below_m).discharge_m3s < discharge_m3s) {
        if (high > highest_depth_m)
            return highest_depth_m;
        low = high;
        reach *= 2.0;
        high = low + reach;
    }
    for (int i = 0; i < 100 && high - low > 1e-13 * high; i++) {
        double middle = 0.5 * (low + high);
        if (stage_structure_flow(structure, middle, depth_below_m).discharge_m3s < discharge_m3s)
            low = middle;
        else
            high = middle;
    }
    return 0.5 * (low + high);
}

double stage_structure_drowned_share(double ratio)
{
    double slope;
    return ratio > 0.0 ? drowned_factor(fmin(ratio, 1.0), &slope) : 1.0;
}
