/* SPDX-License-Identifier: MIT */
#include "engine/dynamic_internal.h"

#include <stdint.h>
#include <stdlib.h>

struct sizes {
    size_t nodes, branches, sides;
};

/* Lays out the arrays of a block of so many lanes in the room. Returns how many values they hold. */
static size_t lay_out_block(struct dynamic_block *block, double *room, const struct sizes *sizes, size_t lanes)
{
    struct {
        double **array;
        size_t count;
    } const arrays[] = {{&block->parts, DYNAMIC_PART_COUNT * sizes->nodes},
                        {&block->copy, 3 * sizes->nodes},
                        {&block->head_correction, sizes->branches},
                        {&block->meeting_by_below, sizes->branches},
                        {&block->meeting_fixed, sizes->branches},
                        {&block->foot_correction, 1},
                        {&block->lateral_m3, 1}};
    size_t count = 0;
    for (size_t i = 0; i < sizeof arrays / sizeof *arrays; i++) {
        *arrays[i].array = room == NULL ? NULL : room + count;
        count += arrays[i].count * lanes;
    }
    return count;
}

static size_t lay_out_lone(struct dynamic_lone *lone, double *room, const struct sizes *sizes)
{
    struct {
        double **array;
        size_t count;
    } const arrays[] = {{&lone->state.area_m2, sizes->nodes},     {&lone->state.discharge_m3s, sizes->nodes},
                        {&lone->state.passed_m3, sizes->nodes},   {&lone->passed_m3, sizes->nodes},
                        {&lone->old_area_m2, sizes->nodes},       {&lone->state.inflow_m3s, sizes->branches},
                        {&lone->inflow_m3s, sizes->branches},     {&lone->inflow_now_m3s, sizes->branches},
                        {&lone->gauged_m3s, sizes->branches},     {&lone->gauged_before_m3s, sizes->branches},
                        {&lone->gauged_now_m3s, sizes->branches}, {&lone->depth_m, sizes->branches},
                        {&lone->depth_before_m, sizes->branches}, {&lone->depth_now_m, sizes->branches},
                        {&lone->side_m3, sizes->sides},           {&lone->side_now_m3, sizes->sides}};
    size_t count = 0;
    for (size_t i = 0; i < sizeof arrays / sizeof *arrays; i++) {
        *arrays[i].array = room == NULL ? NULL : room + count;
        count += arrays[i].count;
    }
    return count;
}

/* At the next multiple of the widest vector: there, and in whole vectors from there on, loads touch one line of the
 * cache each. */
static double *aligned(double *room)
{
    uintptr_t past = (uintptr_t)room % (DYNAMIC_MOST_LANES * sizeof *room);
    return past == 0 ? room : room + (DYNAMIC_MOST_LANES - past / sizeof *room);
}

static size_t lay_out(struct dynamic_work *work, double *room, const struct sizes *sizes)
{
    size_t count = lay_out_block(&work->block, room, sizes, DYNAMIC_MOST_LANES);
    count += lay_out_block(&work->lone_block, room == NULL ? NULL : room + count, sizes, DYNAMIC_MOST_LANES);
    count += lay_out_lone(&work->lone, room == NULL ? NULL : room + count, sizes);
    return count;
}

enum fw_status dynamic_work_create(struct dynamic_work **work_out, const struct dynamic_tree *tree)
{
    const struct sizes sizes = {dynamic_tree_node_count(tree), tree->branch_count, tree->side_count};
    struct dynamic_work *work = calloc(1, sizeof *work);
    if (work == NULL)
        return FW_NO_MEMORY;
    work->vectors = vector_level_widest();
    work->room = calloc(lay_out(work, NULL, &sizes) + DYNAMIC_MOST_LANES, sizeof *work->room);
    work->first_node = calloc(sizes.branches, sizeof *work->first_node);
    work->intervals = calloc(sizes.nodes, sizeof *work->intervals);
    work->lone_intervals = calloc(sizes.nodes, sizeof *work->lone_intervals);
    if (work->room == NULL || work->first_node == NULL || work->intervals == NULL || work->lone_intervals == NULL) {
        dynamic_work_destroy(work);
        return FW_NO_MEMORY;
    }
    lay_out(work, aligned(work->room), &sizes);
    *work_out = work;
    return FW_OK;
}

void dynamic_work_destroy(struct dynamic_work *work)
{
    if (work == NULL)
        return;
    free(work->room);
    free(work->first_node);
    free(work->intervals);
    free(work->lone_intervals);
    free(work);
}

enum vector_level dynamic_work_set_vectors(struct dynamic_work *work, enum vector_level widest)
{
    work->vectors = vector_level_is_present(widest) ? widest : vector_level_widest();
    return work->vectors;
}
