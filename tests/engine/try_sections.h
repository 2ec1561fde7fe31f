/* SPDX-License-Identifier: MIT */
/*
 * One section of every shape, with awkward numbers, for the routing's tests.
 */
#ifndef FOREWATER_TESTS_ENGINE_TRY_SECTIONS_H
#define FOREWATER_TESTS_ENGINE_TRY_SECTIONS_H

#include "engine/section.h"

static const struct section try_wide = {.shape = SECTION_WIDE, .bottom_m = 31.7, .roughness_n = 0.043};
static const struct section try_rectangle = {.shape = SECTION_RECTANGLE, .bottom_m = 17.3, .roughness_n = 0.033};
static const struct section try_trapezoid = {
    .shape = SECTION_TRAPEZOID, .bottom_m = 9.1, .side_h_per_v = 1.7, .roughness_n = 0.037};
static const struct section try_triangle = {.shape = SECTION_TRAPEZOID, .side_h_per_v = 4.3, .roughness_n = 0.031};
static const struct section try_plain = {.shape = SECTION_TRAPEZOID,
                                         .bottom_m = 14.0,
                                         .side_h_per_v = 2.0,
                                         .roughness_n = 0.038,
                                         .has_plain = true,
                                         .plain_above_m = 2.6,
                                         .plain_width_m = 80.0,
                                         .plain_roughness_n = 0.075};

/* A surveyed valley: a terrace, the channel, a bar, a second channel, a plain; ends at unequal heights. */
static const double try_survey_offset_m[] = {0.0,  4.7,  22.9, 24.3, 26.8, 31.1, 34.6,
                                             36.2, 39.9, 43.0, 71.3, 98.4, 103.9};
static const double try_survey_elevation_m[] = {109.1, 104.9, 104.4, 102.3, 101.17, 101.3, 102.0,
                                                101.7, 102.4, 104.2, 104.6, 104.7,  108.8};
static const double try_survey_panel_to_m[] = {22.9, 43.0, 103.9};
static const double try_survey_panel_n[] = {0.081, 0.036, 0.067};
static const struct section try_survey = {.shape = SECTION_POINTS,
                                          .point_count = 13,
                                          .point_offset_m = try_survey_offset_m,
                                          .point_elevation_m = try_survey_elevation_m,
                                          .panel_count = 3,
                                          .panel_to_offset_m = try_survey_panel_to_m,
                                          .panel_roughness_n = try_survey_panel_n};

/* One panel with a flat berm: where the berm floods, the formula takes conveyance away. */
static const double try_berm_offset_m[] = {0.0, 0.0, 30.0, 30.0, 36.0, 36.0};
static const double try_berm_elevation_m[] = {4.0, 1.5, 1.5, 0.0, 0.0, 4.0};
static const struct section try_berm = {.shape = SECTION_POINTS,
                                        .roughness_n = 0.035,
                                        .point_count = 6,
                                        .point_offset_m = try_berm_offset_m,
                                        .point_elevation_m = try_berm_elevation_m};

static const struct {
    const char *name;
    const struct section *section;
} try_sections[] = {
    {"wide", &try_wide},           {"rectangle", &try_rectangle},        {"trapezoid", &try_trapezoid},
    {"triangle", &try_triangle},   {"trapezoid with plain", &try_plain}, {"surveyed points", &try_survey},
    {"one-panel berm", &try_berm},
};

enum { TRY_SECTION_COUNT = sizeof try_sections / sizeof *try_sections };

#endif
