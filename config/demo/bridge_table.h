/* SPDX-License-Identifier: MIT */
/*
 * The low bridge's stage rating as rows for the configuration: as few as keep the straight lines between them within
 * 2 mm of the recipe's curve.
 */
#ifndef FOREWATER_CONFIG_DEMO_BRIDGE_TABLE_H
#define FOREWATER_CONFIG_DEMO_BRIDGE_TABLE_H

#include "config/demo/recipe.h"

enum { BRIDGE_TABLE_ROWS_MAX = 64 };

struct bridge_table {
    size_t row_count;
    double discharge_m3s[BRIDGE_TABLE_ROWS_MAX];
    double stage_m[BRIDGE_TABLE_ROWS_MAX];
    double worst_error_m; /* of the rows as printed, rounded, at 1 mm steps of the normal stage */
};

/* level_of turns the normal stage into the level at the bridge. FW_OUT_OF_RANGE: more rows than there is room for. */
FW_MUST_CHECK enum fw_status bridge_table_make(const struct recipe *recipe, double (*level_of)(double normal_stage_m),
                                               struct bridge_table *table_out);

/* As the member `name` of the configuration's "stage_rating": rows of discharge (m3/s) and stage (m). */
void bridge_table_print(const struct bridge_table *table, const char *name, const char *after);

#endif
