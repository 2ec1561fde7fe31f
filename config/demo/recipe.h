/* SPDX-License-Identifier: MIT */
/*
 * The recipe of the Vennmark night: a wholly invented river, its gauge and its crossings. With the feed and the words
 * of story.h, everything that the demonstration plays is generated from what stands here; docs/demo.md tells the
 * night.
 */
#ifndef FOREWATER_CONFIG_DEMO_RECIPE_H
#define FOREWATER_CONFIG_DEMO_RECIPE_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include "config/demo/smooth_curve.h"
#include "engine/rating.h"
#include "engine/section.h"

enum { RECIPE_FORD, RECIPE_CAUSEWAY, RECIPE_BRIDGE, RECIPE_POINT_COUNT };
enum { RECIPE_CURVE_POINTS_MAX = 32 };

struct recipe_point {
    const char *id;
    double reach_length_m; /* from the gauge, or from the crossing before it */
    double closing_m;      /* the closing mark; depths above the section's invert */
    double deck_m;
};

struct recipe {
    int64_t start_utc_s, end_utc_s;
    double flow_factor; /* variant C multiplies the gauge's flow */
    bool is_as_told;    /* variant A: the factor is 1, and what the story says outright holds */
    struct section section;
    double slope_m_per_m;
    struct rating rating;
    struct recipe_point points[RECIPE_POINT_COUNT];
    double beck_share, beck_delay_s; /* Sethick Beck: a share of the gauge's flow, some time later */
    double beck_at_m;                /* along the reach from ford to causeway */
    size_t curve_point_count;
    struct smooth_curve_point
        curve[RECIPE_CURVE_POINTS_MAX]; /* the gauge's true stage, as listed, before the factor */
};

/* Aborts when the recipe itself is not sound: a fault of this program, never of its input. */
enum recipe_variant { RECIPE_VARIANT_A, RECIPE_VARIANT_C };
struct recipe recipe_vennmark(enum recipe_variant variant);

/* The true stage and flow at the gauge. */
double recipe_gauge_stage_m(const struct recipe *recipe, int64_t utc_s);
double recipe_gauge_discharge_m3s(const struct recipe *recipe, int64_t utc_s);

/*
 * The level at the low bridge for a normal stage of the section there: the same up to the soffit (2.20 m), above it
 * 0.04 m more per 0.10 m. Part-blocked by drift: further lift that grows from nothing 0.30 m below the soffit to 0.15
 * m at it, and stays.
 */
double recipe_bridge_level_m(double normal_stage_m);
double recipe_bridge_part_blocked_level_m(double normal_stage_m);

#endif
