/* SPDX-License-Identifier: MIT */
/*
 * A river cross-section: area, width, wetted perimeter, conveyance and the stages that follow from them.
 *
 * Depths are measured above the lowest point of the section (its invert). Conveyance is Manning's, in SI units,
 * with the divided-channel rule: K = sum over panels of A_i R_i^(2/3) / n_i, where the vertical interface between
 * two panels is not counted in the wetted perimeter of either.
 * What rubs: bed and banks; the outer wall at each end of a plain or a survey; nothing but the width for
 * SECTION_WIDE, its plain included. A wall that stands where two panels meet belongs to the one on its low side.
 * Water stands at one level across the section: a hollow behind a ridge fills from its own bed up.
 * Widths and slopes are limits from below: exactly at bank full the plain does not count yet.
 * Source: Chow, Open-Channel Hydraulics (1959), sections 5-6, 6-5; Cunge, Holly, Verwey (1980).
 */
#ifndef FOREWATER_ENGINE_SECTION_H
#define FOREWATER_ENGINE_SECTION_H

#include <stdbool.h>
#include <stddef.h>

#include "engine/status.h"

#define SECTION_GRAVITY_M_S2 9.80665

enum section_shape {
    SECTION_WIDE,      /* bottom_m wide; the wetted perimeter is the width, the banks rub nothing */
    SECTION_RECTANGLE, /* bottom_m wide, vertical banks */
    SECTION_TRAPEZOID, /* bottom_m wide, banks of side_h_per_v horizontal to 1 vertical */
    SECTION_POINTS     /* surveyed points, joined by straight lines, roughness by panel */
};

/* The caller owns every array; they must outlive the section's use. */
struct section {
    enum section_shape shape;
    double bottom_m;
    double side_h_per_v;
    double roughness_n; /* the channel's; for SECTION_POINTS, where no panel says otherwise */

    /*
     * Flood plain beside a wide, rectangle or trapezoid shape: one flat panel with an outer wall at each end. Above
     * it the channel keeps its bank-full width and perimeter.
     */
    bool has_plain;
    double plain_above_m; /* depth at which the water leaves the channel */
    double plain_width_m; /* added width, both banks together */
    double plain_roughness_n;

    size_t point_count; /* SECTION_POINTS: offsets never decrease */
    const double *point_offset_m;
    const double *point_elevation_m;
    size_t panel_count; /* panels from left to right; the last one reaches the right end */
    const double *panel_to_offset_m;
    const double *panel_roughness_n;
};

struct section_properties {
    double area_m2;
    double top_width_m;
    double wetted_perimeter_m;
    double conveyance_m3s;
    double conveyance_slope_m2s; /* dK/dh */
    bool is_above_survey;        /* the end walls had to be extended upwards */
};

/*
 * FW_BAD_INPUT  something is missing, not finite or impossible; *fault_out (may be NULL) names the member and says
 *               why, a string that lives for ever.
 */
FW_MUST_CHECK enum fw_status section_check(const struct section *section, const char **fault_out);

/* All properties at one depth; all zero at or below depth 0. The section must have passed section_check. */
void section_properties_at(const struct section *section, double depth_m, struct section_properties *properties_out);

/*
 * One panel's share of them, the same rules holding; zero where it is dry. A channel is panel 0 and the plain beside it 1;
 * surveyed panels count from the left.
 */
size_t section_panel_count(const struct section *section);
void section_panel_at(const struct section *section, size_t panel, double depth_m,
                      struct section_properties *properties_out);

/* The depth at the lower end of a survey, above which walls are assumed; INFINITY for the other shapes. */
double section_survey_top_m(const struct section *section);

/*
 * Whether conveyance falls somewhere as the water rises, and from which depth on: water that spreads over a berm
 * within one panel adds perimeter before area, and the divided-channel rule then takes flow away. The cure is a panel
 * boundary at the edge of the berm.
 */
bool section_conveyance_falls(const struct section *section, double *from_depth_out_m);

/* Steady uniform flow, K sqrt(S0); zero unless slope and depth are above zero. */
double section_normal_discharge_m3s(const struct section *section, double slope_m_per_m, double depth_m);

/*
 * The lowest depth that carries a discharge as steady uniform flow, to 1e-12 of itself; 0 for 0.
 * FW_BAD_INPUT     slope not positive or not finite, discharge negative or not finite
 * FW_OUT_OF_RANGE  no depth below 1e30 m carries it
 */
FW_MUST_CHECK enum fw_status section_normal_depth_m(const struct section *section, double slope_m_per_m,
                                                    double discharge_m3s, double *depth_out_m);

/*
 * The depth of least specific energy, Q^2 B = g A^3 with the energy coefficient taken as 1; where a section has
 * several, the lowest. Accuracy and statuses as above. Source: Chow (1959), section 4-1.
 */
FW_MUST_CHECK enum fw_status section_critical_depth_m(const struct section *section, double discharge_m3s,
                                                      double *depth_out_m);

/* Celerity of a kinematic wave, dQ/dA = sqrt(S0) (dK/dh) / B; zero unless slope and depth are above zero. */
double section_celerity_m_s(const struct section *section, double slope_m_per_m, double depth_m);

#endif
