/* SPDX-License-Identifier: MIT */
/* Cross-sections drawn from bytes: as a surveyor would write them, or hostile. */
#ifndef FOREWATER_TESTS_FUZZ_DRAW_SECTION_H
#define FOREWATER_TESTS_FUZZ_DRAW_SECTION_H

#include "engine/section.h"
#include "tests/fuzz/fuzz.h"

enum { DRAWN_POINTS = 24, DRAWN_PANELS = 4 };

struct drawn_section { /* the section points into itself: it must stay where it is */
    struct section section;
    double offset_m[DRAWN_POINTS], elevation_m[DRAWN_POINTS];
    double panel_to_m[DRAWN_PANELS], panel_n[DRAWN_PANELS];
};

static inline double draw_roughness(struct fuzz_bytes *bytes, bool is_hostile)
{
    return fuzz_value(bytes, is_hostile, 0.015, 0.15);
}

/* Offsets go on by up to 50 m, or stand (a wall), or, hostile, fold back; heights wander. */
static inline void draw_points(struct fuzz_bytes *bytes, bool is_hostile, struct drawn_section *drawn)
{
    struct section *section = &drawn->section;
    section->point_count = 3 + fuzz_pick(bytes, DRAWN_POINTS - 2);
    double offset = fuzz_number(bytes, -20.0, 20.0), height = fuzz_number(bytes, -5.0, 900.0);
    bool was_wall = true; /* the first step across must have width */
    for (size_t i = 0; i < section->point_count; i++) {
        drawn->offset_m[i] = is_hostile && fuzz_chance(bytes, 32) ? fuzz_odd(bytes) : offset;
        drawn->elevation_m[i] = is_hostile && fuzz_chance(bytes, 32) ? fuzz_odd(bytes) : height;
        bool is_wall = !was_wall && i + 2 < section->point_count && fuzz_chance(bytes, 5);
        if (is_hostile && fuzz_chance(bytes, 12))
            offset -= fuzz_number(bytes, 0.0, 10.0);
        else if (!is_wall)
            offset += fuzz_log(bytes, 0.01, 50.0);
        height += fuzz_number(bytes, -3.0, 3.0);
        was_wall = is_wall;
    }
    section->point_offset_m = drawn->offset_m;
    section->point_elevation_m = drawn->elevation_m;
    section->panel_count = fuzz_pick(bytes, DRAWN_PANELS + 1);
    double left = drawn->offset_m[0], right = drawn->offset_m[section->point_count - 1];
    for (size_t i = 0; i < section->panel_count; i++) {
        double share = ((double)i + 1.0) / (double)section->panel_count;
        drawn->panel_to_m[i] = i + 1 == section->panel_count ? right : left + share * (right - left);
        if (is_hostile && fuzz_chance(bytes, 8))
            drawn->panel_to_m[i] = fuzz_odd(bytes);
        drawn->panel_n[i] = draw_roughness(bytes, is_hostile);
    }
    section->panel_to_offset_m = drawn->panel_to_m;
    section->panel_roughness_n = drawn->panel_n;
}

static inline void draw_section(struct fuzz_bytes *bytes, bool is_hostile, struct drawn_section *drawn)
{
    memset(drawn, 0, sizeof *drawn);
    struct section *section = &drawn->section;
    section->shape = (enum section_shape)fuzz_pick(bytes, 4);
    if (is_hostile && fuzz_chance(bytes, 32))
        section->shape = (enum section_shape)7;
    section->roughness_n = draw_roughness(bytes, is_hostile);
    if (section->shape == SECTION_POINTS) {
        draw_points(bytes, is_hostile, drawn);
        return;
    }
    section->bottom_m = fuzz_value(bytes, is_hostile, 0.3, 300.0);
    section->side_h_per_v = fuzz_value(bytes, is_hostile, 0.1, 8.0);
    section->has_plain = fuzz_chance(bytes, 2);
    if (section->has_plain) {
        section->plain_above_m = fuzz_value(bytes, is_hostile, 0.2, 8.0);
        section->plain_width_m = fuzz_value(bytes, is_hostile, 1.0, 3000.0);
        section->plain_roughness_n = draw_roughness(bytes, is_hostile);
    }
}

#endif
