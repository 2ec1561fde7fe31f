/* SPDX-License-Identifier: MIT */
#include "tests/independent/full_shape.h"

#include <math.h>
#include <stdlib.h>

static const double no_top_m = 1e9;

/* --- shapes to lines --------------------------------------------------------------------------------------------- */

static bool add_line(struct full_shape *shape, struct full_line line)
{
    if (shape->line_count == FULL_SHAPE_LINES)
        return false;
    shape->lines[shape->line_count++] = line;
    return true;
}

static bool of_simple(const struct section *section, struct full_shape *shape)
{
    double top = section->has_plain ? section->plain_above_m : no_top_m;
    double width = section->bottom_m;
    double batter = section->shape == SECTION_TRAPEZOID ? section->side_h_per_v : 0.0;
    bool fits = add_line(shape, (struct full_line){0.0, 0.0, width, 0.0, 0, true});
    if (section->shape != SECTION_WIDE)
        fits = fits && add_line(shape, (struct full_line){-batter * top, top, 0.0, 0.0, 0, true}) &&
               add_line(shape, (struct full_line){width, 0.0, width + batter * top, top, 0, true});
    shape->roughness_n[0] = section->roughness_n;
    shape->panel_count = 1;
    if (section->has_plain) {
        double bed = section->plain_above_m, far = section->plain_width_m;
        fits = fits && add_line(shape, (struct full_line){0.0, bed, far, bed, 1, true});
        if (section->shape != SECTION_WIDE)
            fits = fits && add_line(shape, (struct full_line){0.0, no_top_m, 0.0, bed, 1, true}) &&
                   add_line(shape, (struct full_line){far, bed, far, no_top_m, 1, true});
        shape->roughness_n[1] = section->plain_roughness_n;
        shape->panel_count = 2;
    }
    return fits;
}

/* The panel about an offset; where two meet, the one on the wanted side. */
static size_t panel_at(const struct section *section, double offset, bool wants_right)
{
    size_t panel = 0;
    while (panel + 1 < section->panel_count && (section->panel_to_offset_m[panel] < offset ||
                                                (wants_right && section->panel_to_offset_m[panel] <= offset)))
        panel++;
    return panel;
}

static bool of_points(const struct section *section, struct full_shape *shape)
{
    const double *y = section->point_offset_m, *z = section->point_elevation_m;
    size_t last = section->point_count - 1;
    double lowest = z[0];
    for (size_t i = 1; i <= last; i++)
        lowest = fmin(lowest, z[i]);
    shape->panel_count = section->panel_count > 0 ? section->panel_count : 1;
    if (shape->panel_count > FULL_SHAPE_PANELS)
        return false;
    shape->roughness_n[0] = section->roughness_n;
    for (size_t panel = 0; panel < section->panel_count; panel++)
        shape->roughness_n[panel] = section->panel_roughness_n[panel];

    bool fits = add_line(shape, (struct full_line){y[0], no_top_m, y[0], z[0] - lowest, 0, true});
    for (size_t i = 0; i < last && fits; i++) {
        if (!(y[i + 1] > y[i])) { /* upright: of the panel that the water is in */
            size_t panel = panel_at(section, y[i], z[i + 1] < z[i]);
            fits = add_line(shape, (struct full_line){y[i], z[i] - lowest, y[i + 1], z[i + 1] - lowest, panel, true});
            continue;
        }
        double from_y = y[i], from_z = z[i];
        while (fits && from_y < y[i + 1]) {
            size_t panel = panel_at(section, from_y, true);
            double to_y = panel < section->panel_count ? fmin(y[i + 1], section->panel_to_offset_m[panel]) : y[i + 1];
            if (!(to_y > from_y)) /* the last panel may end a rounding short of the survey */
                to_y = y[i + 1];
            double to_z = to_y < y[i + 1] ? z[i] + (z[i + 1] - z[i]) * (to_y - y[i]) / (y[i + 1] - y[i]) : z[i + 1];
            fits = add_line(shape, (struct full_line){from_y, from_z - lowest, to_y, to_z - lowest, panel, true});
            from_y = to_y;
            from_z = to_z;
        }
    }
    return fits && add_line(shape, (struct full_line){y[last], z[last] - lowest, y[last], no_top_m,
                                                      shape->panel_count - 1, true});
}

bool full_shape_of(const struct section *section, struct full_shape *shape_out)
{
    *shape_out = (struct full_shape){0};
    return section->shape == SECTION_POINTS ? of_points(section, shape_out) : of_simple(section, shape_out);
}

/* --- water in them ----------------------------------------------------------------------------------------------- */

struct full_water full_shape_water_at(const struct full_shape *shape, double depth_m)
{
    double area[FULL_SHAPE_PANELS] = {0.0}, rubbed[FULL_SHAPE_PANELS] = {0.0};
    struct full_water water = {0};
    for (size_t i = 0; i < shape->line_count; i++) {
        const struct full_line *line = &shape->lines[i];
        double low = fmin(line->from_z_m, line->to_z_m), high = fmax(line->from_z_m, line->to_z_m);
        if (low >= depth_m)
            continue;
        double share = high > depth_m ? (depth_m - low) / (high - low) : 1.0; /* of the line, under water */
        double width = fabs(line->to_y_m - line->from_y_m) * share;
        double rise = (high - low) * share;
        double deep = depth_m - low, shallow = depth_m - (low + rise);
        area[line->panel] += 0.5 * width * (deep + shallow);
        water.moment_m3 += width * (deep * deep + deep * shallow + shallow * shallow) / 6.0;
        water.top_width_m += width;
        if (line->rubs)
            rubbed[line->panel] += sqrt(width * width + rise * rise);
    }
    for (size_t panel = 0; panel < shape->panel_count; panel++) {
        if (!(area[panel] > 0.0))
            continue;
        double radius = cbrt(area[panel] / rubbed[panel]);
        water.area_m2 += area[panel];
        water.conveyance_m3s += area[panel] * radius * radius / shape->roughness_n[panel];
    }
    return water;
}

double full_shape_depth_of_area_m(const struct full_shape *shape, double area_m2)
{
    double low = 0.0, high = 1.0;
    while (full_shape_water_at(shape, high).area_m2 < area_m2)
        high *= 2.0;
    double depth = high;
    for (int i = 0; i < 200 && high - low > 1e-15 * high; i++) {
        struct full_water water = full_shape_water_at(shape, depth);
        if (water.area_m2 < area_m2)
            low = depth;
        else
            high = depth;
        double newton = depth - (water.area_m2 - area_m2) / water.top_width_m;
        if (fabs(newton - depth) <= 4e-16 * depth)
            break;
        depth = newton > low && newton < high ? newton : 0.5 * (low + high);
    }
    return depth;
}

double full_shape_normal_depth_m(const struct full_shape *shape, double slope_m_per_m, double discharge_m3s)
{
    double conveyance = discharge_m3s / sqrt(slope_m_per_m), low = 0.0, high = 1e-3;
    while (full_shape_water_at(shape, high).conveyance_m3s < conveyance) {
        low = high;
        high *= 1.01;
    }
    for (int i = 0; i < 100 && high - low > 1e-15 * high; i++) {
        double depth = 0.5 * (low + high);
        if (full_shape_water_at(shape, depth).conveyance_m3s < conveyance)
            low = depth;
        else
            high = depth;
    }
    return 0.5 * (low + high);
}

double full_shape_celerity_m_s(const struct full_shape *shape, double slope_m_per_m, double depth_m)
{
    struct full_water above = full_shape_water_at(shape, depth_m * 1.00005);
    struct full_water below = full_shape_water_at(shape, depth_m * 0.99995);
    return sqrt(slope_m_per_m) * (above.conveyance_m3s - below.conveyance_m3s) / (above.area_m2 - below.area_m2);
}

/* --- the table --------------------------------------------------------------------------------------------------- */

static struct full_row row_values(const struct full_shape *shape, double area, double gravity)
{
    struct full_row row = {.depth_m[0] = full_shape_depth_of_area_m(shape, area)};
    struct full_water water = full_shape_water_at(shape, row.depth_m[0]);
    row.moment_m3[0] = water.moment_m3;
    row.wave_m_s[0] = sqrt(gravity * area / water.top_width_m);
    row.friction[0] = gravity * area / (water.conveyance_m3s * water.conveyance_m3s);
    return row;
}

bool full_table_make(const struct full_shape *shape, double largest_area_m2, double gravity_m_s2,
                     struct full_table *table_out)
{
    struct full_row *rows = calloc(FULL_TABLE_ROWS, sizeof *rows);
    if (rows == NULL)
        return false;
    double root_step = sqrt(largest_area_m2) / (FULL_TABLE_ROWS - 1);
    for (size_t i = 0; i < FULL_TABLE_ROWS; i++) {
        double root =
            root_step * (i == 0 ? 0.5 : (double)i); /* no water has no wave: the first row begins a little up */
        rows[i] = row_values(shape, root * root, gravity_m_s2);
    }
    for (size_t i = 0; i + 1 < FULL_TABLE_ROWS; i++) {
        rows[i].depth_m[1] = rows[i + 1].depth_m[0] - rows[i].depth_m[0];
        rows[i].moment_m3[1] = rows[i + 1].moment_m3[0] - rows[i].moment_m3[0];
        rows[i].wave_m_s[1] = rows[i + 1].wave_m_s[0] - rows[i].wave_m_s[0];
        rows[i].friction[1] = rows[i + 1].friction[0] - rows[i].friction[0];
    }
    *table_out = (struct full_table){rows, FULL_TABLE_ROWS - 1, 1.0 / root_step};
    return true;
}

void full_table_clear(struct full_table *table)
{
    free(table->rows);
    *table = (struct full_table){0};
}
