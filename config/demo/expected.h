/* SPDX-License-Identifier: MIT */
/*
 * What the recipe says came of the night, and what it asks of whoever watches it: the table that the demonstration is
 * held against.
 */
#ifndef FOREWATER_CONFIG_DEMO_EXPECTED_H
#define FOREWATER_CONFIG_DEMO_EXPECTED_H

#include <stdbool.h>
#include <stdio.h>

#include "config/demo/truth.h"

/*
 * Prints the routed truth beside the recipe's, row by row; false: a row parts by more than its tolerance. For variant
 * A.
 */
bool expected_compare_truth(const struct recipe *recipe, const struct truth *truth);

/*
 * CSV: point,what,expected,tolerance,unit,why. Times are RFC 3339 with their tolerance in minutes (unit "min");
 * levels in m; margins in minutes; words of advice stand alone.
 */
void expected_write_csv(const struct recipe *recipe, FILE *stream);

#endif
