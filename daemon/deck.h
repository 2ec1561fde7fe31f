/* SPDX-License-Identifier: MIT */
/* The water on a crossing's deck, as the settings describe it, and whom the published limits are for, in words. */
#ifndef FOREWATER_DAEMON_DECK_H
#define FOREWATER_DAEMON_DECK_H

#include "daemon/settings/settings.h"

/*
 * At one level and flow at a point whose settings have a deck. Below a weir stands the section's normal depth of the flow,
 * where the level above comes from a stage rating of the point's own; elsewhere what stands below is not known.
 *   river             the settings', or that of a season
 *   stage_m           above the invert
 *   roughness_factor  of the run, on Manning's n of the section
 */
struct hazard_water deck_water(const struct settings *settings, const struct network_river *river, size_t point,
                               double stage_m, double discharge_m3s, double roughness_factor);

/* "a small car"; machines read it too. The limits of cars are for vehicles that stand, and draft. */
const char *deck_whom_name(enum hazard_whom whom);

/* "m2/s" of what hazard_measure_passed gave, and its limit. */
const char *deck_measure_unit(enum hazard_measure measure);
double deck_measure_limit(const struct hazard_limit *limit, enum hazard_measure measure);

/* To two decimals, for people: what is over a limit is never printed as if it were just at it. */
double deck_rounded_up(double value);

#define DECK_CAUTION                                                                                                 \
    "Depth and speed are estimates; limits for cars are draft, for vehicles that stand. No limit is a depth to "     \
    "drive in."

#endif
