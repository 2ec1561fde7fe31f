/* SPDX-License-Identifier: MIT */
/*
 * Any section is refused with a reason, or has finite properties that rise with depth, depths for its flows, and a
 * curve and tables that read nothing outside themselves.
 */
#include "engine/area_table.h"
#include "engine/flow_curve.h"
#include "tests/fuzz/draw_section.h"

static void check_properties(const struct section *section, double depth_m, double *area_before)
{
    struct section_properties at;
    section_properties_at(section, depth_m, &at);
    if (!(at.area_m2 >= *area_before) || !(at.top_width_m >= 0.0) || !(at.wetted_perimeter_m >= 0.0) ||
        !(at.conveyance_m3s >= 0.0) || !isfinite(at.area_m2) || isnan(at.conveyance_slope_m2s))
        fuzz_fail("depth %g: area %g after %g, width %g, perimeter %g, conveyance %g, slope %g", depth_m, at.area_m2,
                  *area_before, at.top_width_m, at.wetted_perimeter_m, at.conveyance_m3s, at.conveyance_slope_m2s);
    *area_before = at.area_m2;
}

static void check_depths(const struct section *section, double slope, double discharge)
{
    double normal = -1.0, critical = -1.0, conveyance_falls_from;
    enum fw_status status = section_normal_depth_m(section, slope, discharge, &normal);
    if (status == FW_OK) {
        double carried = section_normal_discharge_m3s(section, slope, normal);
        if (!(normal >= 0.0) || !isfinite(normal))
            fuzz_fail("normal depth %g of %g m3/s", normal, discharge);
        if (!section_conveyance_falls(section, &conveyance_falls_from) &&
            !(fabs(carried - discharge) <= 1e-9 * discharge))
            fuzz_fail("normal depth %g carries %g of %g m3/s", normal, carried, discharge);
    }
    status = section_critical_depth_m(section, discharge, &critical);
    if (status == FW_OK && (!(critical >= 0.0) || !isfinite(critical)))
        fuzz_fail("critical depth %g of %g m3/s", critical, discharge);
}

static void check_tables(const struct section *section, double slope, double largest, double probe)
{
    struct flow_curve curve;
    struct area_table table;
    if (flow_curve_init(&curve, section, 1e-4 * largest / sqrt(slope), 32.0 * largest / sqrt(slope)) != FW_OK)
        return;
    for (size_t i = 1; i < curve.count; i++)
        if (!(curve.area_m2[i] > curve.area_m2[i - 1]) || !(curve.conveyance_m3s[i] > curve.conveyance_m3s[i - 1]) ||
            !(curve.depth_m[i] > curve.depth_m[i - 1]))
            fuzz_fail("the curve does not rise at %zu of %zu, depth %g", i, curve.count, curve.depth_m[i]);
    double depth = flow_curve_depth_m(&curve, probe);
    if (area_table_init(&table, &curve, 1.0) == FW_OK) {
        double area = area_table_area_at_depth_m2(&table, depth);
        double back = area_table_depth_m(&table, area);
        if (depth > 1e-300 && depth < 1e6 && !(fabs(back - depth) <= 1e-9 * depth))
            fuzz_fail("depth %g reads back as %g", depth, back);
        area_table_clear(&table);
    }
    flow_curve_clear(&curve);
}

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size)
{
    struct fuzz_bytes bytes = {data, size};
    struct drawn_section drawn;
    const char *fault = NULL;
    bool is_hostile = fuzz_chance(&bytes, 2);
    double slope = fuzz_log(&bytes, 1e-5, 0.3), discharge = fuzz_log(&bytes, 1e-6, 1e5);
    double probe = fuzz_odd(&bytes);
    draw_section(&bytes, is_hostile, &drawn);
    if (section_check(&drawn.section, &fault) != FW_OK) {
        if (fault == NULL || fault[0] == '\0')
            fuzz_fail("refused without a reason");
        return 0;
    }
    double area = 0.0;
    for (double depth = 1e-4; depth < 2000.0; depth *= 1.37)
        check_properties(&drawn.section, depth, &area);
    check_depths(&drawn.section, slope, discharge);
    check_tables(&drawn.section, slope, discharge, probe);
    return 0;
}
