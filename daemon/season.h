/* SPDX-License-Identifier: MIT */
/*
 * The river in the roughness of a season: weeds stand in summer, and banks are bare in winter.
 *
 * Sections, plains and panels may state local dates from which a factor on their Manning's n holds, year after year,
 * until the next of their dates. A section's seasons hold for all of it; where its plain or a panel states its own, those
 * hold there instead. Which season is in force follows the district's clock; a forecast is made in that of its moment.
 */
#ifndef FOREWATER_DAEMON_SEASON_H
#define FOREWATER_DAEMON_SEASON_H

#include "daemon/settings/settings.h"

/* Month * 100 + day, in the district's zone. */
int season_day(const struct settings *settings, int64_t utc_s);

/* Of a day: 1 without seasons. */
double season_factor(const struct settings_seasons *seasons, int day);

/* All days on which some factor may change, rising: at most `most` are written. How many there are. */
size_t season_starts(const struct settings *settings, size_t most, int days_out[]);

/* Which of these was the newest; without seasons 0. Two moments of one index have one roughness. */
size_t season_index(const struct settings *settings, int64_t utc_s);

struct
    season_river { /* the settings' river with sections of its own; the rest is the settings', who must outlive it */
    struct network_river river;
    struct network_reach *reaches;
    struct section *sections;
    double *panel_n;
};

/* FW_NO_MEMORY. The caller clears. */
FW_MUST_CHECK enum fw_status season_river_make(const struct settings *settings, int day,
                                               struct season_river *season_out);
void season_river_clear(struct season_river *season); /* an all-zero one is fine */

#endif
