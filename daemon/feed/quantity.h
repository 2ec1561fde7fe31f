/* SPDX-License-Identifier: MIT */
/* Numbers and units as people and loggers write them. Values change unit once, here. */
#ifndef FOREWATER_DAEMON_FEED_QUANTITY_H
#define FOREWATER_DAEMON_FEED_QUANTITY_H

#include <stdbool.h>

#include "daemon/settings/settings.h"

/* A finite number with a decimal point, whatever the locale: "2.31", "-0.4", "1.2e-3". No comma, no blanks, no
 * hexadecimal, no nan. */
bool quantity_read_number(const char *text, double *value_out);

/* To m above gauge zero (m, cm, mm, ft) or to m3/s (m3/s, l/s). FW_BAD_INPUT: the unit does not measure this. */
FW_MUST_CHECK enum fw_status quantity_to_si(double value, const char *unit, enum settings_measure measures,
                                            double *value_si_out);

const char *quantity_default_unit(enum settings_measure measures); /* "m", "m3/s" */
const char *quantity_known_units(enum settings_measure measures);  /* "m, cm, mm or ft", for messages */

#endif
