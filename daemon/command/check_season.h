/* SPDX-License-Identifier: MIT */
/* What the seasons of roughness that a configuration states do to travel times. */
#ifndef FOREWATER_DAEMON_COMMAND_CHECK_SEASON_H
#define FOREWATER_DAEMON_COMMAND_CHECK_SEASON_H

#include "daemon/command/check_facts.h"

/*
 * Calls take(with, from_day, index, travel_s, discharge_m3s) per season and reach, in that order: how long the flow of
 * the reach's peak line travels from that day on. FW_BAD_INPUT: the engine refuses the river of a season. FW_NO_MEMORY.
 */
FW_MUST_CHECK enum fw_status check_season_each(const struct check_facts *facts,
                                               void (*take)(void *with, int from_day, size_t reach, double travel_s,
                                                            double discharge_m3s),
                                               void *with, struct fw_error *error);

/* A line per season, nothing where none is stated. */
FW_MUST_CHECK enum fw_status check_season_print(const struct check_facts *facts, struct fw_error *error);

#endif
