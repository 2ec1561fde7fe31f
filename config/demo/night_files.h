/* SPDX-License-Identifier: MIT */
/*
 * The night on disk.
 *
 *   readings.csv        observed,stage_m,received      every reading that came, in the order in which it came
 *   feed.csv            observed,stage_m,received,way  the same, with the way it comes in the live demonstration
 *   outages.csv         from,to                        when the office reaches no web page
 *   words.csv           time,words...                  the words of `forewater say`, one per column
 *   truth_<point>.csv   time,stage_m                   every minute, depth above the section's invert
 *   expected.csv        see expected.h; variant A alone
 */
#ifndef FOREWATER_CONFIG_DEMO_NIGHT_FILES_H
#define FOREWATER_CONFIG_DEMO_NIGHT_FILES_H

#include <stdbool.h>

#include "config/demo/story.h"

/* Makes the folder where missing (its parent must be there). false: said on stderr what could not be written. */
bool night_files_write(const struct recipe *recipe, const struct truth *truth, const struct story *story,
                       const char *into);

#endif
