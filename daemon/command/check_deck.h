/* SPDX-License-Identifier: MIT */
/* What `check` tells of a crossing's deck: at which level and flow the published limits are passed. */
#ifndef FOREWATER_DAEMON_COMMAND_CHECK_DECK_H
#define FOREWATER_DAEMON_COMMAND_CHECK_DECK_H

#include "daemon/command/check_facts.h"
#include "daemon/deck.h"

struct check_deck_limit {
    enum hazard_whom whom;
    enum hazard_measure by;
    double stage_m, discharge_m3s; /* from here on */
    double after_awash_s; /* in the fastest stated rise, all gauges above rising at once; NAN: none is stated */
};

struct check_deck {
    double awash_m3s;
    size_t limit_count; /* those that are passed within the flows looked at, from low to high */
    struct check_deck_limit limits[HAZARD_WHOM_COUNT];
};

/* Of a point whose settings have a deck. Nothing in it where no flow looked at wets the deck. is_above: scratch per gauge. */
void check_deck_find(const struct check_facts *facts, size_t point, bool is_above[], struct check_deck *deck_out);

/* The flow at which a point's own rating brings the water to its deck mark, NAN where it has none. */
double check_deck_rated_m3s(const struct settings_point *point, bool is_part_blocked);

/* Also where the level comes from, when it has a rating of its own. */
void check_deck_print(const struct check_facts *facts, size_t point, bool is_above[]);

#endif
