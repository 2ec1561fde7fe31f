/* SPDX-License-Identifier: MIT */
#include "engine/structure_rating.h"

#include <math.h>

enum { FIRST_ROWS = 64, SPLITS_MAX = 12 };
static const double smallest_head_m = 0.001, head_ratio = 1.04; /* 0.001 x 1.04^254 = 21 m */
static const double top_head_m = 10.0;
static const double decades_of_flow = 6.0; /* below the top flow, of the first rows */

void structure_rating_weir(double crest_m, double length_m, double coefficient, double depth_m[],
                           double discharge_m3s[])
{
    depth_m[0] = crest_m;
    discharge_m3s[0] = 0.0;
    for (size_t row = 1; row < STRUCTURE_RATING_WEIR_ROWS; row++) {
        double head_m = smallest_head_m * pow(head_ratio, (double)row - 1.0);
        depth_m[row] = crest_m + head_m;
        discharge_m3s[row] = coefficient * length_m * head_m * sqrt(head_m);
    }
}

struct maker {
    const struct stage_structure *structure;
    const struct section *section;
    double slope_m_per_m, roughness_factor;
    double *discharge_m3s, *stage_m;
    size_t count;
    enum fw_status status;
};

static double level_m(struct maker *maker, double flow_m3s)
{
    double below_m = 0.0;
    enum fw_status status =
        section_normal_depth_m(maker->section, maker->slope_m_per_m, flow_m3s * maker->roughness_factor, &below_m);
    if (status != FW_OK)
        maker->status = status;
    return stage_structure_depth_above_m(maker->structure, flow_m3s, below_m);
}

static void add_row(struct maker *maker, double flow_m3s, double stage_m)
{
    if (maker->count == STRUCTURE_RATING_ROWS_MAX)
        return;
    double before_m = maker->count > 0 ? maker->stage_m[maker->count - 1] : stage_m;
    maker->discharge_m3s[maker->count] = flow_m3s;
    maker->stage_m[maker->count++] = fmax(stage_m, before_m); /* by a rounding, no more */
}

/* All rows after the one at from_m3s, up to and with the one at to_m3s. */
static void add_between(struct maker *maker, double from_m3s, double from_m, double to_m3s, double to_m, int splits)
{
    double middle_m3s = 0.5 * (from_m3s + to_m3s);
    double middle_m = level_m(maker, middle_m3s);
    if (splits > 0 && fabs(middle_m - 0.5 * (from_m + to_m)) > STRUCTURE_RATING_CLOSE_M) {
        add_between(maker, from_m3s, from_m, middle_m3s, middle_m, splits - 1);
        add_between(maker, middle_m3s, middle_m, to_m3s, to_m, splits - 1);
    } else {
        add_row(maker, to_m3s, to_m);
    }
}

enum fw_status structure_rating_build(const struct stage_structure *structure, const struct section *section,
                                      double slope_m_per_m, double roughness_factor, double discharge_m3s[],
                                      double stage_m[], size_t *row_count_out)
{
    if (stage_structure_check(structure) != FW_OK || !(slope_m_per_m > 0.0) || !(roughness_factor > 0.0) ||
        !isfinite(slope_m_per_m) || !isfinite(roughness_factor))
        return FW_BAD_INPUT;
    struct maker maker = {.structure = structure,
                          .section = section,
                          .slope_m_per_m = slope_m_per_m,
                          .roughness_factor = roughness_factor,
                          .discharge_m3s = discharge_m3s,
                          .stage_m = stage_m};
    double low_m = structure->openings[0].depth_m[0], high_m = low_m;
    for (size_t i = 1; i < structure->opening_count; i++) {
        low_m = fmin(low_m, structure->openings[i].depth_m[0]);
        high_m = fmax(high_m, structure->openings[i].depth_m[0]);
    }
    double top_m3s = stage_structure_flow(structure, high_m + top_head_m, low_m).discharge_m3s;
    if (!(top_m3s > 0.0))
        return FW_OUT_OF_RANGE;
    double from_m3s = 0.0, from_m = low_m;
    add_row(&maker, from_m3s, from_m);
    for (size_t row = 1; row <= FIRST_ROWS && maker.status == FW_OK; row++) {
        double to_m3s = top_m3s * pow(10.0, decades_of_flow * ((double)row / FIRST_ROWS - 1.0));
        double to_m = level_m(&maker, to_m3s);
        add_between(&maker, from_m3s, from_m, to_m3s, to_m, SPLITS_MAX);
        from_m3s = to_m3s;
        from_m = to_m;
    }
    if (maker.status == FW_OK)
        *row_count_out = maker.count;
    return maker.status;
}
