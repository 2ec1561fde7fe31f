/* SPDX-License-Identifier: MIT */
#include "config/demo/recipe.h"

#include <math.h>
#include <stdio.h>
#include <stdlib.h>

#include "config/demo/night_time.h"

static const struct {
    const char *clock;
    double stage_m;
} listed_stage[] = {
    {"18:00", 1.02}, {"19:30", 1.05}, {"20:30", 1.22}, {"21:30", 1.75}, {"22:30", 2.42},
    {"23:10", 2.80}, {"23:40", 2.93}, {"00:10", 2.90}, {"01:10", 2.66}, {"02:10", 2.40},
    {"02:45", 2.33}, {"03:10", 2.48}, {"03:35", 2.90}, {"04:00", 3.28}, {"04:20", 3.41},
    {"04:40", 3.38}, {"05:40", 3.02}, {"07:00", 2.55}, {"09:00", 2.02}, {"14:00", 1.40},
};
enum { LISTED_COUNT = sizeof listed_stage / sizeof listed_stage[0] };
_Static_assert((int)LISTED_COUNT <= (int)RECIPE_CURVE_POINTS_MAX, "the curve has room for the list");

static const double variant_c_factor = 1.35;
static const double soffit_m = 2.20;
static const double lift_per_m = 0.40; /* 0.04 m per 0.10 m */
static const double blocked_lift_m = 0.15;
static const double blocked_from_m = 1.90; /* 0.30 m below the soffit */

static void require(int is_sound, const char *what)
{
    if (!is_sound) {
        fprintf(stderr, "vennmark: the recipe is not sound: %s\n", what);
        abort();
    }
}

struct recipe recipe_vennmark(enum recipe_variant variant)
{
    struct recipe recipe = {
        .start_utc_s = night_time_at("18:00"),
        .end_utc_s = night_time_at("14:00"),
        .flow_factor = variant == RECIPE_VARIANT_C ? variant_c_factor : 1.0,
        .is_as_told = variant == RECIPE_VARIANT_A,
        .section = {.shape = SECTION_TRAPEZOID,
                    .bottom_m = 14.0,
                    .side_h_per_v = 2.0,
                    .roughness_n = 0.038,
                    .has_plain = true,
                    .plain_above_m = 2.60,
                    .plain_width_m = 80.0,
                    .plain_roughness_n = 0.075},
        .slope_m_per_m = 0.0024,
        .rating =
            {.segment_count = 2,
             .segments = {{.to_stage_m = 2.60, .coefficient = 11.8, .zero_flow_stage_m = 0.42, .exponent = 1.72},
                          {.to_stage_m = (double)INFINITY, .zero_flow_stage_m = 0.42, .exponent = 2.15}},
             .highest_gauged_m = 2.38},
        .points = {{"tallowick-ford", 9400.0, 1.45, 1.55},
                   {"marren-causeway", 8400.0, 1.80, 1.95},
                   {"low-pintle-bridge", 8300.0, 2.62, 2.62}},
        .beck_share = 0.16,
        .beck_delay_s = 25.0 * 60.0,
        .beck_at_m = 3600.0,
        .curve_point_count = LISTED_COUNT,
    };
    for (size_t i = 0; i < LISTED_COUNT; i++) {
        recipe.curve[i].utc_s = night_time_at(listed_stage[i].clock);
        recipe.curve[i].value = listed_stage[i].stage_m;
    }
    const char *fault = "unknown";
    require(section_check(&recipe.section, &fault) == FW_OK, fault);
    require(rating_complete(&recipe.rating, &fault, NULL) == FW_OK, fault);
    return recipe;
}

double recipe_gauge_discharge_m3s(const struct recipe *recipe, int64_t utc_s)
{
    double stage_m = smooth_curve_at(recipe->curve_point_count, recipe->curve, utc_s);
    return recipe->flow_factor * rating_discharge_m3s(&recipe->rating, stage_m, NULL);
}

double recipe_gauge_stage_m(const struct recipe *recipe, int64_t utc_s)
{
    return rating_stage_m(&recipe->rating, recipe_gauge_discharge_m3s(recipe, utc_s), NULL);
}

double recipe_bridge_level_m(double normal_stage_m)
{
    return normal_stage_m + lift_per_m * fmax(0.0, normal_stage_m - soffit_m);
}

double recipe_bridge_part_blocked_level_m(double normal_stage_m)
{
    double grown = fmin(1.0, fmax(0.0, (normal_stage_m - blocked_from_m) / (soffit_m - blocked_from_m)));
    return recipe_bridge_level_m(normal_stage_m) + blocked_lift_m * grown;
}
