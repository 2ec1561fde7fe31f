/* SPDX-License-Identifier: MIT */
/* Levels above structures at points, per roughness group, once and for all. */
#include "engine/network_internal.h"

#include <stdio.h>
#include <stdlib.h>

#include "engine/structure_rating.h"

static enum fw_status rate_point(const struct network *network, size_t point_index, size_t group, double *rows,
                                 struct network_fault *fault_out)
{
    const struct network_point *point = &network->river.points[point_index];
    const struct network_reach *reach = &network->river.reaches[point->reach_index];
    struct network_stage_rating *rating = &network->structure_ratings[point_index * network->group_count + group];
    enum fw_status status = structure_rating_build(point->structure, reach->section, reach->slope_m_per_m,
                                                   network->roughness_factors[group], rows,
                                                   rows + STRUCTURE_RATING_ROWS_MAX, &rating->row_count);
    rating->discharge_m3s = rows;
    rating->stage_m = rows + STRUCTURE_RATING_ROWS_MAX;
    if (status == FW_OK)
        return FW_OK;
    snprintf(fault_out->text, sizeof fault_out->text, "point '%s': structure: %s", point->id,
             status == FW_OUT_OF_RANGE ? "nothing flows there, or the section cannot carry what does"
                                       : "its tables must rise from 0 flow at the sill");
    return FW_BAD_INPUT;
}

enum fw_status network_make_levels(struct network *network, struct network_fault *fault_out)
{
    const struct network_river *river = &network->river;
    size_t count = 0;
    for (size_t point = 0; point < river->point_count; point++)
        count += river->points[point].structure != NULL;
    if (count == 0)
        return FW_OK;
    size_t of_one = (size_t)2 * STRUCTURE_RATING_ROWS_MAX;
    network->structure_ratings =
        calloc(river->point_count * network->group_count, sizeof *network->structure_ratings);
    network->structure_rows = calloc(count * network->group_count * of_one, sizeof *network->structure_rows);
    if (network->structure_ratings == NULL || network->structure_rows == NULL)
        return FW_NO_MEMORY;
    double *rows = network->structure_rows;
    enum fw_status status = FW_OK;
    for (size_t point = 0; point < river->point_count; point++)
        for (size_t group = 0; group < network->group_count && status == FW_OK; group++)
            if (river->points[point].structure != NULL) {
                status = rate_point(network, point, group, rows, fault_out);
                rows += of_one;
            }
    return status;
}
