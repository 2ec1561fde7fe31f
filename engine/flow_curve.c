/* SPDX-License-Identifier: MIT */
#include "engine/flow_curve.h"

#include <math.h>
#include <stdlib.h>

static const double gravity_m_s2 = 9.80665;

enum { NODES_PER_OCTAVE = 256 };

static double conveyance_at(const struct section *section, double depth_m)
{
    struct section_properties properties;
    section_properties_at(section, depth_m, &properties);
    return properties.conveyance_m3s;
}

static double lowest_point_m(const struct section *section)
{
    double lowest = section->point_elevation_m[0];
    for (size_t i = 1; i < section->point_count; i++)
        lowest = fmin(lowest, section->point_elevation_m[i]);
    return lowest;
}

/* Depths at which the outline bends. bend_m may be NULL, to count only. */
static size_t list_bends(const struct section *section, double bend_m[])
{
    size_t count = 0;
    if (section->shape == SECTION_POINTS) {
        double lowest = lowest_point_m(section);
        for (; count < section->point_count; count++)
            if (bend_m != NULL)
                bend_m[count] = section->point_elevation_m[count] - lowest;
    } else if (section->has_plain) {
        if (bend_m != NULL)
            bend_m[0] = section->plain_above_m;
        count = 1;
    }
    return count;
}

static int compare_doubles(const void *left, const void *right)
{
    double a = *(const double *)left;
    double b = *(const double *)right;
    return (a > b) - (a < b);
}

/* Sorted depths from bottom to top: the even ones, and the bends instead of even ones too near to them. Returns how
 * many. */
static size_t merge_depths(size_t even_count, double bottom_m, double ratio, size_t bend_count, const double bend_m[],
                           double depth_m[])
{
    const double too_near = 0.05 * (ratio - 1.0);
    size_t count = 0;
    size_t bend = 0;
    for (size_t i = 0; i < even_count; i++) {
        double even = bottom_m * pow(ratio, (double)i);
        for (; bend < bend_count && bend_m[bend] <= even * (1.0 + too_near); bend++)
            if (count > 0 && bend_m[bend] > depth_m[count - 1] * (1.0 + 1e-6)) {
                if (count > 1 && bend_m[bend] < depth_m[count - 1] * (1.0 + too_near))
                    count--;
                depth_m[count++] = bend_m[bend];
            }
        if (count == 0 || even > depth_m[count - 1] * (1.0 + too_near))
            depth_m[count++] = even;
    }
    return count;
}

static enum fw_status bracket_depths(const struct section *section, double smallest_conveyance_m3s,
                                     double largest_conveyance_m3s, double *bottom_out_m, double *top_out_m)
{
    double bottom = 1e-3;
    double top = 2e-3;
    while (conveyance_at(section, bottom) > smallest_conveyance_m3s && bottom > 1e-9)
        bottom *= 0.5;
    while (!(conveyance_at(section, top) >= largest_conveyance_m3s)) {
        top *= 1.25;
        if (!(top < 1e7))
            return FW_BAD_INPUT;
    }
    *bottom_out_m = bottom;
    *top_out_m = top;
    return FW_OK;
}

static enum fw_status fill_properties(struct flow_curve *curve, const struct section *section)
{
    for (size_t i = 0; i < curve->count; i++) {
        struct section_properties properties;
        section_properties_at(section, curve->depth_m[i], &properties);
        curve->area_m2[i] = properties.area_m2;
        curve->conveyance_m3s[i] = properties.conveyance_m3s;
        if (i == 0) {
            if (!(properties.area_m2 > 0.0 && properties.conveyance_m3s > 0.0))
                return FW_BAD_INPUT;
            continue;
        }
        double least = curve->conveyance_m3s[i - 1] * sqrt(curve->depth_m[i] / curve->depth_m[i - 1]);
        curve->conveyance_m3s[i] = fmax(properties.conveyance_m3s, least);
        if (!(curve->area_m2[i] > curve->area_m2[i - 1]))
            return FW_BAD_INPUT;
    }
    return FW_OK;
}

static void fill_index(struct flow_curve *curve)
{
    size_t interval = 0;
    curve->row_interval[0] = 0;
    for (size_t row = 1; row < curve->by_conveyance.row_count; row++) {
        double start = bit_index_row_start(&curve->by_conveyance, row);
        while (interval + 2 < curve->count && curve->conveyance_m3s[interval + 1] <= start)
            interval++;
        curve->row_interval[row] = (uint32_t)interval;
    }
}

static enum fw_status allocate_nodes(struct flow_curve *curve, size_t node_count)
{
    curve->depth_m = calloc(node_count, sizeof *curve->depth_m);
    curve->area_m2 = calloc(node_count, sizeof *curve->area_m2);
    curve->conveyance_m3s = calloc(node_count, sizeof *curve->conveyance_m3s);
    return curve->depth_m == NULL || curve->area_m2 == NULL || curve->conveyance_m3s == NULL ? FW_NO_MEMORY : FW_OK;
}

enum fw_status flow_curve_init(struct flow_curve *curve, const struct section *section,
                               double smallest_conveyance_m3s, double largest_conveyance_m3s)
{
    double *bend_m = NULL;
    double bottom, top;
    memset(curve, 0, sizeof *curve);
    enum fw_status status = bracket_depths(section, smallest_conveyance_m3s, largest_conveyance_m3s, &bottom, &top);
    if (status != FW_OK)
        return status;

    size_t even_count = (size_t)ceil(log2(top / bottom) * NODES_PER_OCTAVE) + 1;
    double ratio = exp(log(top / bottom) / (double)(even_count - 1));
    size_t bend_count = list_bends(section, NULL);
    status = allocate_nodes(curve, even_count + bend_count);
    if (status != FW_OK)
        goto cleanup;
    if (bend_count > 0) {
        bend_m = calloc(bend_count, sizeof *bend_m);
        if (bend_m == NULL) {
            status = FW_NO_MEMORY;
            goto cleanup;
        }
        list_bends(section, bend_m);
        qsort(bend_m, bend_count, sizeof *bend_m, compare_doubles);
    }
    curve->count = merge_depths(even_count, bottom, ratio, bend_count, bend_m, curve->depth_m);
    status = fill_properties(curve, section);
    if (status != FW_OK)
        goto cleanup;
    bit_index_init(&curve->by_conveyance, curve->conveyance_m3s[0], curve->conveyance_m3s[curve->count - 1]);
    curve->row_interval = calloc(curve->by_conveyance.row_count, sizeof *curve->row_interval);
    if (curve->row_interval == NULL)
        status = FW_NO_MEMORY;
    else
        fill_index(curve);
cleanup:
    free(bend_m);
    if (status != FW_OK)
        flow_curve_clear(curve);
    return status;
}

void flow_curve_clear(struct flow_curve *curve)
{
    free(curve->depth_m);
    free(curve->area_m2);
    free(curve->conveyance_m3s);
    free(curve->row_interval);
    memset(curve, 0, sizeof *curve);
}

static size_t find_interval(const struct flow_curve *curve, double conveyance_m3s)
{
    size_t interval = curve->row_interval[bit_index_row(&curve->by_conveyance, conveyance_m3s)];
    while (interval + 2 < curve->count && curve->conveyance_m3s[interval + 1] <= conveyance_m3s)
        interval++;
    return interval;
}

void flow_curve_at(const struct flow_curve *curve, double conveyance_m3s, struct flow_curve_place *place_out)
{
    size_t i = find_interval(curve, conveyance_m3s);
    const double *depth = curve->depth_m + i;
    const double *area = curve->area_m2 + i;
    const double *conveyance = curve->conveyance_m3s + i;
    double share = (conveyance_m3s - conveyance[0]) / (conveyance[1] - conveyance[0]);
    place_out->depth_m = depth[0] + share * (depth[1] - depth[0]);
    place_out->area_m2 = area[0] + share * (area[1] - area[0]);
    place_out->top_width_m = (area[1] - area[0]) / (depth[1] - depth[0]);
    place_out->conveyance_slope_m_s = (conveyance[1] - conveyance[0]) / (area[1] - area[0]);
    if (conveyance_m3s < conveyance[0]) { /* only below the first node */
        place_out->depth_m = depth[0] * (conveyance_m3s / conveyance[0]);
        place_out->area_m2 = area[0] * (conveyance_m3s / conveyance[0]);
    }
}

double flow_curve_depth_m(const struct flow_curve *curve, double conveyance_m3s)
{
    struct flow_curve_place place;
    flow_curve_at(curve, conveyance_m3s, &place);
    return place.depth_m;
}

double flow_curve_diffusivity_m2_s(double discharge_m3s, double area_m2, double top_width_m, double celerity_m_s,
                                   double slope_m_per_m)
{
    double m = celerity_m_s * area_m2 / discharge_m3s;
    double froude_squared =
        discharge_m3s * discharge_m3s * top_width_m / (gravity_m_s2 * area_m2 * area_m2 * area_m2);
    double inertia = 1.0 - (m - 1.0) * (m - 1.0) * froude_squared;
    return discharge_m3s / (2.0 * top_width_m * slope_m_per_m) * fmax(0.05, inertia);
}
