/* SPDX-License-Identifier: MIT */
/*
 * Every slope (dK/dh, dB/dh, dP/dh) and every width is the limit from below, so that all of them agree with each
 * other where a plain, a berm or a bank begins. Surveyed heights are taken above the invert before anything else, so
 * that a film of water is measured as exactly under a datum 900 m away as under one at the bed.
 */
#include "engine/section.h"

#include <math.h>

#define ALL_PANELS ((size_t)-1)
enum { NEWTON_ONLY = 12, ITERATIONS_MAX = 240 };

static const double DEEPEST_M = 1e30;
/* Beyond these no number is a river's, and sums of them may overflow. */
static const double SHORTEST_M = 1e-6, LONGEST_M = 1e6, FARTHEST_M = 1e7;
static const double SMOOTHEST_N = 1e-6, ROUGHEST_N = 1e3;
static const double CLOSE_ENOUGH = 1e-15; /* of the depth; the promise is 1e-12 */

/* One panel, or the whole section, at one depth; the rates are per metre of depth. */
struct wetted {
    double area_m2;
    double width_m;
    double width_rate;
    double perimeter_m;
    double perimeter_rate;
};

/* A straight piece of surveyed bed within one panel; heights above the invert. */
struct bed_piece {
    double width_m;
    double from_height_m;
    double to_height_m;
    size_t panel;
};

struct bed_walk {
    double invert_m;
    size_t point;
    size_t panel;
    double offset_m;
    double height_m;
};

/* --- the check -------------------------------------------------------------------------------------------------- */

static bool is_length(double value_m)
{
    return value_m >= SHORTEST_M && value_m <= LONGEST_M;
}

static bool is_roughness(double value)
{
    return value >= SMOOTHEST_N && value <= ROUGHEST_N;
}

static const char *fault_in_simple_shape(const struct section *section)
{
    const bool may_be_a_point = section->shape == SECTION_TRAPEZOID && section->bottom_m == 0;
    if (!is_length(section->bottom_m) && !may_be_a_point)
        return "bottom_m: must be above 0, 1e-6 to 1e6 m (a trapezoid with sloping banks may have 0)";
    if (section->shape == SECTION_TRAPEZOID) {
        if (!(section->side_h_per_v >= 0 && section->side_h_per_v <= LONGEST_M))
            return "side_h_per_v: must be 0 or more, horizontal to 1 vertical, at most 1e6";
        if (may_be_a_point && section->side_h_per_v < SHORTEST_M)
            return "bottom_m: must be above 0 where the banks are vertical";
    }
    if (!is_roughness(section->roughness_n))
        return "roughness_n: must be above 0, 1e-6 to 1e3";
    if (section->has_plain) {
        if (!is_length(section->plain_above_m))
            return "plain_above_m: must be above 0, a depth over the channel's bed, 1e-6 to 1e6 m";
        if (!is_length(section->plain_width_m))
            return "plain_width_m: must be above 0, 1e-6 to 1e6 m";
        if (!is_roughness(section->plain_roughness_n))
            return "plain_roughness_n: must be above 0, 1e-6 to 1e3";
    }
    return NULL;
}

/* At one offset a bed may go up and then down (a thin wall), never down and then up: such a slot holds no water. */
static const char *fault_in_walls(const struct section *section)
{
    const double *offset_m = section->point_offset_m, *elevation_m = section->point_elevation_m;
    const double left_m = offset_m[0], right_m = offset_m[section->point_count - 1];
    bool has_gone_down = false;
    for (size_t point = 1; point < section->point_count; point++) {
        if (offset_m[point] > offset_m[point - 1]) {
            has_gone_down = false;
            continue;
        }
        bool goes_up = elevation_m[point] > elevation_m[point - 1];
        bool goes_down = elevation_m[point] < elevation_m[point - 1];
        if (goes_up && offset_m[point] <= left_m)
            return "point_elevation_m: the wall at the left end goes up, it can only go down into the section";
        if (goes_down && offset_m[point] >= right_m)
            return "point_elevation_m: the wall at the right end goes down, it can only go up out of the section";
        if (goes_up && has_gone_down)
            return "point_elevation_m: goes down and up again at one offset, a slot without width";
        has_gone_down = has_gone_down || goes_down;
    }
    return NULL;
}

static const char *fault_in_panels(const struct section *section)
{
    const double left_m = section->point_offset_m[0];
    const double right_m = section->point_offset_m[section->point_count - 1];
    if (section->panel_count == 0)
        return is_roughness(section->roughness_n) ? NULL : "roughness_n: must be above 0 where there are no panels";
    if (section->panel_to_offset_m == NULL || section->panel_roughness_n == NULL)
        return "panels: offsets or roughness are missing";
    for (size_t panel = 0; panel < section->panel_count; panel++) {
        if (!isfinite(section->panel_to_offset_m[panel]))
            return "panel_to_offset_m: a value is not finite";
        if (!is_roughness(section->panel_roughness_n[panel]))
            return "panel_roughness_n: must be above 0 in every panel, 1e-6 to 1e3";
        double from_m = panel == 0 ? left_m : section->panel_to_offset_m[panel - 1];
        if (section->panel_to_offset_m[panel] <= from_m)
            return "panel_to_offset_m: panels must go from left to right, each ending beyond its beginning";
        if (from_m >= right_m)
            return "panel_to_offset_m: a panel begins beyond the right end of the survey";
    }
    if (section->panel_to_offset_m[section->panel_count - 1] < right_m)
        return "panel_to_offset_m: the last panel does not reach the right end of the survey";
    return NULL;
}

static const char *fault_in_points(const struct section *section)
{
    if (section->point_count < 3)
        return "points: at least 3 are needed";
    if (section->point_offset_m == NULL || section->point_elevation_m == NULL)
        return "points: offsets or elevations are missing";
    for (size_t point = 0; point < section->point_count; point++) {
        if (!isfinite(section->point_offset_m[point]))
            return "point_offset_m: a value is not finite";
        if (!isfinite(section->point_elevation_m[point]))
            return "point_elevation_m: a value is not finite";
        if (fabs(section->point_offset_m[point]) > FARTHEST_M)
            return "point_offset_m: lies beyond 1e7 m";
        if (fabs(section->point_elevation_m[point]) > LONGEST_M)
            return "point_elevation_m: lies beyond 1e6 m";
        if (point > 0 && section->point_offset_m[point] < section->point_offset_m[point - 1])
            return "point_offset_m: folds back, offsets must never decrease";
    }
    if (section->point_offset_m[section->point_count - 1] <= section->point_offset_m[0])
        return "point_offset_m: all points stand at one offset, the section has no width";
    if (section->has_plain)
        return "has_plain: a surveyed section carries its plain as panels";
    const char *fault = fault_in_walls(section);
    return fault != NULL ? fault : fault_in_panels(section);
}

enum fw_status section_check(const struct section *section, const char **fault_out)
{
    const char *fault = "shape: is none of the known ones";
    switch (section->shape) {
    case SECTION_WIDE:
    case SECTION_RECTANGLE:
    case SECTION_TRAPEZOID:
        fault = fault_in_simple_shape(section);
        break;
    case SECTION_POINTS:
        fault = fault_in_points(section);
        break;
    }
    if (fault == NULL)
        return FW_OK;
    if (fault_out != NULL)
        *fault_out = fault;
    return FW_BAD_INPUT;
}

/* --- geometry --------------------------------------------------------------------------------------------------- */

/* What is asked for: the sums over all panels, or those of one. */
struct panel_sums {
    size_t only; /* or ALL_PANELS */
    struct section_properties *properties;
    double width_rate;
};

static void add_panel(const struct wetted *panel, size_t index, double roughness_n, struct panel_sums *sums)
{
    struct section_properties *sum = sums->properties;
    if (panel->area_m2 <= 0 || (sums->only != ALL_PANELS && sums->only != index))
        return;
    double root = cbrt(panel->area_m2 / panel->perimeter_m);
    double conveyance_m3s = panel->area_m2 * root * root / roughness_n;
    sum->area_m2 += panel->area_m2;
    sum->top_width_m += panel->width_m;
    sum->wetted_perimeter_m += panel->perimeter_m;
    sum->conveyance_m3s += conveyance_m3s;
    sum->conveyance_slope_m2s +=
        conveyance_m3s * (5 * panel->width_m / panel->area_m2 - 2 * panel->perimeter_rate / panel->perimeter_m) / 3;
    sums->width_rate += panel->width_rate;
}

static void measure_simple_shape(const struct section *section, double depth_m, struct panel_sums *sums)
{
    const bool is_over_bank = section->has_plain && depth_m > section->plain_above_m;
    const bool do_banks_rub = section->shape != SECTION_WIDE;
    const double side = section->shape == SECTION_TRAPEZOID ? section->side_h_per_v : 0;
    const double in_bank_m = is_over_bank ? section->plain_above_m : depth_m;
    const double over_bank_m = depth_m - in_bank_m;
    const double bank_length = do_banks_rub ? 2 * sqrt(1 + side * side) : 0;
    const double width_m = section->bottom_m + 2 * side * in_bank_m;
    const struct wetted channel = {
        .area_m2 = in_bank_m * (section->bottom_m + side * in_bank_m) + width_m * over_bank_m,
        .width_m = width_m,
        .width_rate = is_over_bank ? 0 : 2 * side,
        .perimeter_m = section->bottom_m + bank_length * in_bank_m,
        .perimeter_rate = is_over_bank ? 0 : bank_length,
    };
    add_panel(&channel, 0, section->roughness_n, sums);
    if (!is_over_bank)
        return;
    const double end_walls = do_banks_rub ? 2 : 0;
    const struct wetted plain = {
        .area_m2 = section->plain_width_m * over_bank_m,
        .width_m = section->plain_width_m,
        .perimeter_m = section->plain_width_m + end_walls * over_bank_m,
        .perimeter_rate = end_walls,
    };
    add_panel(&plain, 1, section->plain_roughness_n, sums);
}

static struct bed_walk start_of_bed(const struct section *section)
{
    double invert_m = section->point_elevation_m[0];
    for (size_t point = 1; point < section->point_count; point++)
        invert_m = fmin(invert_m, section->point_elevation_m[point]);
    return (struct bed_walk){.invert_m = invert_m,
                             .offset_m = section->point_offset_m[0],
                             .height_m = section->point_elevation_m[0] - invert_m};
}

/*
 * The next piece to the right, cut where panels meet. A wall that stands exactly where two panels meet belongs to the
 * panel on its low side: only there does water touch it.
 */
static bool next_bed_piece(const struct section *section, struct bed_walk *walk, struct bed_piece *piece_out)
{
    if (walk->point + 1 >= section->point_count)
        return false;
    double to_offset_m = section->point_offset_m[walk->point + 1];
    double to_height_m = section->point_elevation_m[walk->point + 1] - walk->invert_m;
    const double width_m = to_offset_m - walk->offset_m, rise_m = to_height_m - walk->height_m;
    const bool is_wall_of_left_panel = width_m <= 0 && rise_m >= 0;
    const double *panel_to_m = section->panel_to_offset_m;
    while (walk->panel + 1 < section->panel_count && panel_to_m[walk->panel] <= walk->offset_m &&
           !(is_wall_of_left_panel && panel_to_m[walk->panel] >= walk->offset_m))
        walk->panel++;
    if (walk->panel + 1 < section->panel_count && panel_to_m[walk->panel] < to_offset_m) {
        to_offset_m = panel_to_m[walk->panel];
        to_height_m = walk->height_m + rise_m * ((to_offset_m - walk->offset_m) / width_m);
    } else {
        walk->point++;
    }
    *piece_out = (struct bed_piece){.width_m = to_offset_m - walk->offset_m,
                                    .from_height_m = walk->height_m,
                                    .to_height_m = to_height_m,
                                    .panel = walk->panel};
    walk->offset_m = to_offset_m;
    walk->height_m = to_height_m;
    return true;
}

static void add_bed_piece(const struct bed_piece *piece, double depth_m, struct wetted *panel)
{
    const double low_m = fmin(piece->from_height_m, piece->to_height_m);
    const double high_m = fmax(piece->from_height_m, piece->to_height_m);
    if (depth_m <= low_m)
        return;
    const double length_m = hypot(piece->width_m, high_m - low_m);
    if (depth_m > high_m) {
        panel->area_m2 += piece->width_m * ((depth_m - high_m) + 0.5 * (high_m - low_m));
        panel->width_m += piece->width_m;
        panel->perimeter_m += length_m;
        return;
    }
    const double wet_share = (depth_m - low_m) / (high_m - low_m);
    panel->area_m2 += 0.5 * wet_share * piece->width_m * (depth_m - low_m);
    panel->width_m += wet_share * piece->width_m;
    panel->width_rate += piece->width_m / (high_m - low_m);
    panel->perimeter_m += wet_share * length_m;
    panel->perimeter_rate += length_m / (high_m - low_m);
}

static void add_end_wall(double end_height_m, double depth_m, struct wetted *panel, bool *is_above_survey)
{
    if (depth_m <= end_height_m)
        return;
    *is_above_survey = true;
    panel->perimeter_m += depth_m - end_height_m;
    panel->perimeter_rate += 1;
}

static void measure_points(const struct section *section, double depth_m, struct panel_sums *sums)
{
    const double whole_n = section->roughness_n;
    const double *panel_n = section->panel_count == 0 ? &whole_n : section->panel_roughness_n;
    struct bed_walk walk = start_of_bed(section);
    struct bed_piece piece;
    struct wetted panel = {0};
    size_t panel_index = 0;
    add_end_wall(walk.height_m, depth_m, &panel, &sums->properties->is_above_survey);
    while (next_bed_piece(section, &walk, &piece)) {
        if (piece.panel != panel_index) {
            add_panel(&panel, panel_index, panel_n[panel_index], sums);
            panel = (struct wetted){0};
            panel_index = piece.panel;
        }
        add_bed_piece(&piece, depth_m, &panel);
    }
    add_end_wall(walk.height_m, depth_m, &panel, &sums->properties->is_above_survey);
    add_panel(&panel, panel_index, panel_n[panel_index], sums);
}

static void measure_panels(const struct section *section, size_t only, double depth_m,
                           struct section_properties *properties_out, double *width_rate_out)
{
    *properties_out = (struct section_properties){0};
    struct panel_sums sums = {.only = only, .properties = properties_out};
    if (depth_m > 0 && section->shape == SECTION_POINTS)
        measure_points(section, depth_m, &sums);
    else if (depth_m > 0)
        measure_simple_shape(section, depth_m, &sums);
    *width_rate_out = sums.width_rate;
}

static void measure(const struct section *section, double depth_m, struct section_properties *properties_out,
                    double *width_rate_out)
{
    measure_panels(section, ALL_PANELS, depth_m, properties_out, width_rate_out);
}

void section_properties_at(const struct section *section, double depth_m, struct section_properties *properties_out)
{
    double width_rate;
    measure(section, depth_m, properties_out, &width_rate);
}

size_t section_panel_count(const struct section *section)
{
    if (section->shape != SECTION_POINTS)
        return section->has_plain ? 2 : 1;
    return section->panel_count > 0 ? section->panel_count : 1;
}

void section_panel_at(const struct section *section, size_t panel, double depth_m,
                      struct section_properties *properties_out)
{
    double width_rate;
    measure_panels(section, panel, depth_m, properties_out, &width_rate);
}

/* The first height above a depth at which a bank, a bed piece or a plain begins or ends; INFINITY above them all. */
static double next_corner_m(const struct section *section, double depth_m)
{
    double corner_m = (double)INFINITY;
    if (section->shape != SECTION_POINTS)
        return section->has_plain && section->plain_above_m > depth_m ? section->plain_above_m : corner_m;
    struct bed_walk walk = start_of_bed(section);
    struct bed_piece piece;
    if (walk.height_m > depth_m)
        corner_m = walk.height_m;
    while (next_bed_piece(section, &walk, &piece))
        if (piece.to_height_m > depth_m)
            corner_m = fmin(corner_m, piece.to_height_m);
    return corner_m;
}

double section_survey_top_m(const struct section *section)
{
    if (section->shape != SECTION_POINTS)
        return (double)INFINITY;
    double ends_m = fmin(section->point_elevation_m[0], section->point_elevation_m[section->point_count - 1]);
    return ends_m - start_of_bed(section).invert_m;
}

bool section_conveyance_falls(const struct section *section, double *from_depth_out_m)
{
    for (double corner_m = next_corner_m(section, 0); isfinite(corner_m);
         corner_m = next_corner_m(section, corner_m)) {
        struct section_properties at, above;
        section_properties_at(section, corner_m, &at);
        section_properties_at(section, corner_m * (1 + 1e-9), &above);
        if (above.conveyance_m3s >= at.conveyance_m3s && above.conveyance_slope_m2s >= 0)
            continue;
        *from_depth_out_m = corner_m;
        return true;
    }
    return false;
}

/* --- flow ------------------------------------------------------------------------------------------------------- */

double section_normal_discharge_m3s(const struct section *section, double slope_m_per_m, double depth_m)
{
    struct section_properties properties;
    section_properties_at(section, depth_m, &properties);
    return slope_m_per_m > 0 ? properties.conveyance_m3s * sqrt(slope_m_per_m) : 0;
}

double section_celerity_m_s(const struct section *section, double slope_m_per_m, double depth_m)
{
    struct section_properties properties;
    section_properties_at(section, depth_m, &properties);
    if (!(slope_m_per_m > 0) || !(properties.top_width_m > 0))
        return 0;
    return sqrt(slope_m_per_m) * properties.conveyance_slope_m2s / properties.top_width_m;
}

/*
 * What a depth is sought for: conveyance (normal depth), or A sqrt(A/B) (critical depth; Q / sqrt(g) is wanted).
 * Between two corners each of them may fall and then rises, in a single panel, for in both the sign of the slope is
 * that of a function that never decreases there; and neither ever jumps upwards. So the lowest depth that has the
 * wanted value lies in the first interval whose upper corner has it, and that interval brackets it.
 */
struct sought {
    const struct section *section;
    bool is_critical;
    double wanted;
};

/* ln(value / wanted) at a depth, and its slope against ln(depth). */
static double log_excess(const struct sought *sought, double depth_m, double *slope_out)
{
    struct section_properties at;
    double width_rate;
    measure(sought->section, depth_m, &at, &width_rate);
    if (sought->is_critical) {
        *slope_out = 0.5 * depth_m * (3 * at.top_width_m / at.area_m2 - width_rate / at.top_width_m);
        return log(at.area_m2 * sqrt(at.area_m2 / at.top_width_m) / sought->wanted);
    }
    *slope_out = depth_m * at.conveyance_slope_m2s / at.conveyance_m3s;
    return log(at.conveyance_m3s / sought->wanted);
}

/* Newton's step in ln(depth) as long as it stays inside the bracket, else (and now and then) the middle of it. */
static double close_in(const struct sought *sought, double low_m, double high_m)
{
    double depth_m = sqrt(low_m) * sqrt(high_m);
    for (int iteration = 0; iteration < ITERATIONS_MAX; iteration++) {
        double slope;
        double excess = log_excess(sought, depth_m, &slope);
        if (slope > 0 && fabs(excess) <= CLOSE_ENOUGH * slope)
            break;
        if (excess < 0)
            low_m = depth_m;
        else
            high_m = depth_m;
        double next_m = slope > 0 ? depth_m * exp(-excess / slope) : -1;
        bool is_turn_to_halve = iteration >= NEWTON_ONLY && iteration % 2 == 0;
        if (is_turn_to_halve || !(next_m > low_m && next_m < high_m))
            next_m = sqrt(low_m) * sqrt(high_m);
        if (!(next_m > low_m && next_m < high_m)) /* nothing lies between the two any more */
            return high_m;
        depth_m = next_m;
    }
    return depth_m;
}

static enum fw_status find_depth(const struct sought *sought, double *depth_out_m)
{
    double slope, low_m = 0, high_m = next_corner_m(sought->section, 0);
    while (isfinite(high_m) && log_excess(sought, high_m, &slope) < 0) {
        low_m = high_m;
        high_m = next_corner_m(sought->section, low_m);
    }
    if (!isfinite(high_m))
        for (high_m = fmax(1, 2 * low_m); log_excess(sought, high_m, &slope) < 0; high_m *= 2) {
            if (high_m > DEEPEST_M)
                return FW_OUT_OF_RANGE;
            low_m = high_m;
        }
    if (low_m <= 0)
        for (low_m = 0.5 * high_m; log_excess(sought, low_m, &slope) >= 0; low_m *= 0.25)
            high_m = low_m;
    *depth_out_m = close_in(sought, low_m, high_m);
    return FW_OK;
}

enum fw_status section_normal_depth_m(const struct section *section, double slope_m_per_m, double discharge_m3s,
                                      double *depth_out_m)
{
    if (!isfinite(slope_m_per_m) || !(slope_m_per_m > 0) || !isfinite(discharge_m3s) || discharge_m3s < 0)
        return FW_BAD_INPUT;
    const struct sought sought = {.section = section, .wanted = discharge_m3s / sqrt(slope_m_per_m)};
    if (discharge_m3s > 0)
        return find_depth(&sought, depth_out_m);
    *depth_out_m = 0;
    return FW_OK;
}

enum fw_status section_critical_depth_m(const struct section *section, double discharge_m3s, double *depth_out_m)
{
    if (!isfinite(discharge_m3s) || discharge_m3s < 0)
        return FW_BAD_INPUT;
    const struct sought sought = {
        .section = section, .is_critical = true, .wanted = discharge_m3s / sqrt(SECTION_GRAVITY_M_S2)};
    if (discharge_m3s > 0)
        return find_depth(&sought, depth_out_m);
    *depth_out_m = 0;
    return FW_OK;
}
