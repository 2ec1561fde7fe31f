/* SPDX-License-Identifier: MIT */
/*
 * A cross-section as a curve: depth, area and conveyance, each rising with the next, finely spaced.
 *
 * Steady uniform flow at bed slope S0 and with every roughness times f is Q = K sqrt(S0) / f, so one curve serves all
 * roughness groups of a reach. Depths are spaced evenly in their logarithm; depths at which the outline bends (bank
 * full, the surveyed points) are in it exactly.
 *
 * Where the outline widens suddenly within one panel the formula lets conveyance fall while the water rises. Such a
 * dip is bridged: conveyance rises at least as the square root of depth (any real channel: at least as depth itself).
 */
#ifndef FOREWATER_ENGINE_FLOW_CURVE_H
#define FOREWATER_ENGINE_FLOW_CURVE_H

#include <stdint.h>

#include "engine/bit_index.h"
#include "engine/section.h"

struct flow_curve {
    size_t count; /* at least 2 */
    double *depth_m;
    double *area_m2;
    double *conveyance_m3s;
    struct bit_index by_conveyance;
    uint32_t *row_interval; /* per row, the interval in which the row begins */
};

/* All at one conveyance. Beyond the curve's ends: straight to the origin, straight on above. */
struct flow_curve_place {
    double depth_m;
    double area_m2;
    double top_width_m;          /* dA/dh */
    double conveyance_slope_m_s; /* dK/dA; times sqrt(S0)/f it is the celerity */
};

/*
 * From a millimetre, or less where smallest_conveyance_m3s needs it, to at least largest_conveyance_m3s.
 * FW_BAD_INPUT  the section never carries that much, or its area does not rise; FW_NO_MEMORY.
 * The caller clears.
 */
FW_MUST_CHECK enum fw_status flow_curve_init(struct flow_curve *curve, const struct section *section,
                                             double smallest_conveyance_m3s, double largest_conveyance_m3s);
void flow_curve_clear(struct flow_curve *curve); /* an all-zero one is fine */

void flow_curve_at(const struct flow_curve *curve, double conveyance_m3s, struct flow_curve_place *place_out);
double flow_curve_depth_m(const struct flow_curve *curve, double conveyance_m3s);

/*
 * Hydraulic diffusivity of a flood wave, Q / (2 B S0) (1 - (m - 1)^2 Fr^2), m = c A / Q, never less than a twentieth
 * of its first factor. Source: Cunge (1969); the inertia term from the linearised full equations (Ponce and Simons
 * 1977).
 */
double flow_curve_diffusivity_m2_s(double discharge_m3s, double area_m2, double top_width_m, double celerity_m_s,
                                   double slope_m_per_m);

#endif
