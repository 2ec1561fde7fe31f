/* SPDX-License-Identifier: MIT */
/*
 * The network of the forecast, made in one place, so that `check` shows what the cycle computes with: the same methods,
 * cells and steps.
 */
#ifndef FOREWATER_DAEMON_FORECAST_NETWORK_H
#define FOREWATER_DAEMON_FORECAST_NETWORK_H

#include "daemon/settings/settings.h"

/*
 * Groups by the settings' roughness factors. The river is the settings', or that in the roughness of a season; it must outlive the
 * network too.
 * FW_BAD_INPUT: the engine refuses the river; FW_NO_MEMORY. The caller destroys; the settings must outlive it.
 */
FW_MUST_CHECK enum fw_status forecast_network_create(const struct settings *settings,
                                                     const struct network_river *river, size_t members_per_group,
                                                     struct network **network_out, struct fw_error *error);
/* The same river with one member, the roughness as given. */
FW_MUST_CHECK enum fw_status forecast_network_create_as_given(const struct settings *settings,
                                                              struct network **network_out, struct fw_error *error);

/*
 * The least inflow to route from a gauge: nothing, but a thousandth of its flood's peak where the full equations rule below it, as
 * they do not solve a bed gone dry.
 */
double forecast_network_least_inflow_m3s(const struct settings *settings, const struct network *network,
                                         size_t gauge);

/* The sum of the gauges' floods: what the whole river must carry in them, side water left out. */
double forecast_network_peak_m3s(const struct settings *settings);

#endif
