/* SPDX-License-Identifier: MIT */
#include "tests/independent/random_reach.h"

#include <math.h>
#include <stdbool.h>
#include <stdint.h>
#include <string.h>

#include "tests/independent/full_shape.h"

/* --- numbers ------------------------------------------------------------------------------------------------------ */

static const uint64_t seed = 0x464F5245574154ull;

struct dice {
    uint64_t state;
};

/* Steele, Lea and Flood (2014), Fast splittable pseudorandom number generators: the finaliser of SplitMix64. */
static double roll(struct dice *dice) /* 0 .. 1 */
{
    dice->state += 0x9E3779B97F4A7C15ull;
    uint64_t z = dice->state;
    z = (z ^ (z >> 30)) * 0xBF58476D1CE4E5B9ull;
    z = (z ^ (z >> 27)) * 0x94D049BB133111EBull;
    return (double)((z ^ (z >> 31)) >> 11) * 0x1p-53;
}

static double even(struct dice *dice, double low, double high)
{
    return low + (high - low) * roll(dice);
}

static double even_in_log(struct dice *dice, double low, double high)
{
    return low * exp(log(high / low) * roll(dice));
}

/* --- sections ----------------------------------------------------------------------------------------------------- */

static void add_point(struct random_reach *reach, double offset, double elevation)
{
    size_t i = reach->section.point_count++;
    reach->offset_m[i] = offset;
    reach->elevation_m[i] = elevation;
}

/*
 * A valley from left to right: its side, a plain that falls towards the river with a knee, a sloping bank, an uneven
 * bed of 4 to 8 points, and the same on the right. The two banks and plains are of different heights and widths.
 */
static void draw_survey(struct dice *dice, struct random_reach *reach, double n, double plain_n)
{
    struct section *section = &reach->section;
    double width = reach->width_m, bank = reach->bank_m;
    double plain[2], fall[2], batter[2], knee[2], knee_height[2], side[2];
    for (size_t i = 0; i < 2; i++) { /* one by one: the order of rolls is part of the distribution */
        plain[i] = width * even_in_log(dice, 0.5, 5.0);
        fall[i] = plain[i] * even_in_log(dice, 0.002, 0.03);
        batter[i] = fmin(bank * even(dice, 0.5, 2.5), 0.2 * width);
        knee[i] = plain[i] * even(dice, 0.3, 0.7);
        knee_height[i] = fall[i] * even(dice, 0.3, 0.7);
        side[i] = even(dice, 1.0, 4.0);
    }
    double other_bank = bank * even(dice, 1.0, 1.25);
    size_t bed_points = 4 + (size_t)(4.999 * roll(dice));
    size_t deepest = (size_t)((double)bed_points * roll(dice));

    section->shape = SECTION_POINTS;
    add_point(reach, 0.0, bank + fall[0] + side[0]);
    add_point(reach, 0.08 * plain[0], bank + fall[0]);
    add_point(reach, plain[0] - knee[0], bank + knee_height[0]);
    add_point(reach, plain[0], bank);
    double bed_from = plain[0] + batter[0], bed_to = plain[0] + width - batter[1];
    for (size_t i = 0; i < bed_points; i++) {
        double shift = even(dice, -0.3, 0.3), height = bank * even(dice, 0.0, 0.3);
        double at = ((double)i + (i == 0 || i + 1 == bed_points ? 0.0 : shift)) / (double)(bed_points - 1);
        add_point(reach, bed_from + at * (bed_to - bed_from), i == deepest ? 0.0 : height);
    }
    double right = plain[0] + width;
    add_point(reach, right, other_bank);
    add_point(reach, right + knee[1], other_bank + knee_height[1]);
    add_point(reach, right + 0.92 * plain[1], other_bank + fall[1]);
    add_point(reach, right + plain[1], other_bank + fall[1] + side[1]);
    section->point_offset_m = reach->offset_m;
    section->point_elevation_m = reach->elevation_m;
    reach->panel_to_m[0] = plain[0];
    reach->panel_to_m[1] = right;
    reach->panel_to_m[2] = right + plain[1];
    reach->panel_n[0] = plain_n;
    reach->panel_n[1] = n;
    reach->panel_n[2] = plain_n * even(dice, 0.8, 1.25);
    section->panel_count = 3;
    section->panel_to_offset_m = reach->panel_to_m;
    section->panel_roughness_n = reach->panel_n;
}

static void draw_section(struct dice *dice, struct random_reach *reach)
{
    struct section *section = &reach->section;
    reach->width_m = even_in_log(dice, 5.0, 200.0);
    reach->bank_m = sqrt(reach->width_m) * even(dice, 0.3, 0.9); /* 0.7 to 2 m, and 4 to 13 m: as rivers widen */
    double n = even(dice, 0.025, 0.06);
    double plain_n = fmax(n, even(dice, 0.04, 0.1));
    if (reach->class == RANDOM_SURVEYED) {
        draw_survey(dice, reach, n, plain_n);
        reach->peak_depth_m = reach->bank_m * even(dice, 0.75, 1.6);
        return;
    }
    section->shape = roll(dice) < 0.5 ? SECTION_RECTANGLE : SECTION_TRAPEZOID;
    section->bottom_m = reach->width_m;
    section->side_h_per_v = section->shape == SECTION_TRAPEZOID ? even(dice, 0.5, 3.0) : 0.0;
    section->roughness_n = n;
    reach->peak_depth_m = reach->bank_m;
    if (reach->class == RANDOM_WITH_PLAINS) {
        section->has_plain = true;
        section->plain_above_m = reach->bank_m;
        section->plain_width_m = reach->width_m * even_in_log(dice, 1.0, 10.0);
        section->plain_roughness_n = plain_n;
        reach->peak_depth_m = reach->bank_m * even(dice, 0.75, 1.6);
    }
}

/* --- floods ------------------------------------------------------------------------------------------------------- */

double random_flood_m3s(double t_s, const void *flood)
{
    const struct random_flood *of = flood;
    double x = t_s / of->top_s;
    return t_s <= 0.0 ? of->base_m3s : of->base_m3s + of->rise_m3s * pow(x * exp(1.0 - x), of->sharpness);
}

/* The steepest rise is where the second derivative is nothing: x = 1 - 1 / sqrt(sharpness). */
static double top_s_of(double rise_s, double sharpness)
{
    double x = 1.0 - 1.0 / sqrt(sharpness);
    return rise_s * sharpness * pow(x * exp(1.0 - x), sharpness) * (1.0 / x - 1.0);
}

/*
 * Within bounds: uniform flow is calm, Froude number at most 0.9, from base to peak (natural channels are seldom
 * otherwise; Jarrett 1984), or, of the fast ones, above that at the peak and nowhere above 1.3; and conveyance never falls as the water rises (such a section is told by `check`).
 */
static bool is_within_bounds(struct random_reach *reach, const struct full_shape *shape, double base_depth)
{
    double slope = reach->slope_m_per_m, before = 0.0;
    bool is_fast = reach->number >= RANDOM_FAST_FROM;
    double most_froude = is_fast ? 1.3 : 0.9;
    if (reach->froude > most_froude || (is_fast && !(reach->froude > 0.9)))
        return false;
    reach->slowest_m_s = (double)INFINITY;
    for (size_t i = 1; i <= 200; i++) {
        double depth = 1.15 * reach->peak_depth_m * (double)i / 200.0;
        struct full_water water = full_shape_water_at(shape, depth);
        double flow = sqrt(slope) * water.conveyance_m3s;
        double froude = flow * sqrt(water.top_width_m / (9.80665 * pow(water.area_m2, 3.0)));
        if (!(water.conveyance_m3s > before) ||
            (depth >= base_depth && depth <= reach->peak_depth_m && froude > most_froude))
            return false;
        before = water.conveyance_m3s;
        if (flow >= 0.5 * (reach->flood.base_m3s + reach->flood.rise_m3s) && depth <= reach->peak_depth_m)
            reach->slowest_m_s = fmin(reach->slowest_m_s, full_shape_celerity_m_s(shape, slope, depth));
    }
    return true;
}

static bool draw(struct dice *dice, struct random_reach *reach)
{
    struct full_shape shape;
    draw_section(dice, reach);
    reach->slope_m_per_m = even_in_log(dice, 1e-4, 1e-2);
    reach->length_m = even_in_log(dice, 2e3, 60e3);
    reach->rise_s = even_in_log(dice, 3600.0, 36.0 * 3600.0);
    double ratio = even_in_log(dice, 3.0, 20.0);
    if (!full_shape_of(&reach->section, &shape))
        return false;
    struct full_water water = full_shape_water_at(&shape, reach->peak_depth_m);
    double peak = sqrt(reach->slope_m_per_m) * water.conveyance_m3s;
    reach->flood.sharpness = even(dice, 3.0, 12.0);
    reach->flood.base_m3s = peak / ratio;
    reach->flood.rise_m3s = peak - reach->flood.base_m3s;
    reach->flood.top_s = top_s_of(reach->rise_s, reach->flood.sharpness);
    reach->celerity_m_s = full_shape_celerity_m_s(&shape, reach->slope_m_per_m, reach->peak_depth_m);
    reach->diffusivity_m2_s = peak / (2.0 * water.top_width_m * reach->slope_m_per_m);
    reach->froude = peak * sqrt(water.top_width_m / (9.80665 * pow(water.area_m2, 3.0)));
    return is_within_bounds(reach, &shape,
                            full_shape_normal_depth_m(&shape, reach->slope_m_per_m, reach->flood.base_m3s));
}

void random_reach_draw(size_t number, struct random_reach *reach_out)
{
    struct dice dice = {seed + 0x632BE59BD9B4E019ull * (number + 1)};
    size_t drawn = 0;
    do {
        memset(reach_out, 0, sizeof *reach_out);
        reach_out->number = number;
        reach_out->drawn = ++drawn;
        reach_out->class = (enum random_reach_class)(number % RANDOM_CLASSES);
    } while (!draw(&dice, reach_out));
}

const char *random_reach_class_name(enum random_reach_class class)
{
    static const char *const names[RANDOM_CLASSES] = {"simple", "plains", "surveyed"};
    return (unsigned)class < RANDOM_CLASSES ? names[class] : "?";
}
