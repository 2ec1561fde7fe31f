/* SPDX-License-Identifier: MIT */
/* The members of a step put into blocks, for the kernel of the fitting width. */
#include "engine/dynamic_internal.h"

#include <string.h>

#include "engine/dynamic_kernel.h"

enum { MOST_VECTORS = 2 };

struct width {
    enum vector_level level;
    size_t lanes;
};

/* The narrowest vector that holds what is left, or as much as the widest level takes. All give the same bits. */
static struct width fitting_width(enum vector_level widest, size_t members_left)
{
    static const size_t lanes_of[VECTOR_LEVEL_COUNT] = {
        [VECTOR_BASELINE] = 2,
        [VECTOR_AVX2] = 4,
        [VECTOR_AVX512] = 8,
    };
    for (int level = VECTOR_BASELINE; level <= (int)widest; level++)
        if (members_left <= lanes_of[level])
            return (struct width){(enum vector_level)level, lanes_of[level]};
    return (struct width){widest, MOST_VECTORS * lanes_of[widest]};
}

static size_t run_kernel(enum vector_level level, const struct dynamic_tree *tree,
                         const struct dynamic_step_data *data, struct dynamic_block *block,
                         struct dynamic_counts *counts)
{
#if defined(FW_VECTOR_AVX512)
    if (level == VECTOR_AVX512)
        return dynamic_kernel_avx512(tree, data, block, counts);
#endif
#if defined(FW_VECTOR_AVX2)
    if (level == VECTOR_AVX2)
        return dynamic_kernel_avx2(tree, data, block, counts);
#endif
    (void)level;
    return dynamic_kernel_baseline(tree, data, block, counts);
}

void dynamic_make_intervals(const struct dynamic_tree *tree, double time_step_s, bool has_inertia,
                            struct dynamic_interval intervals[])
{
    const double beta = tree->momentum_factor, theta = DYNAMIC_TIME_WEIGHT, g = dynamic_gravity_m_s2;
    for (size_t i = 0; i < tree->branch_count; i++, intervals++) /* none below a foot */
        for (size_t k = 0; k < tree->branches[i].interval_count; k++, intervals++) {
            double length_m = tree->branches[i].interval_m[k], per_length = 1.0 / length_m;
            double by_flow = 2.0 * time_step_s * per_length, inertia_by_flow = length_m / (2.0 * beta * time_step_s);
            double inertia = has_inertia ? 2.0 * beta / g * per_length : 0.0;
            *intervals = (struct dynamic_interval){.per_length = per_length,
                                                   .slope = tree->branches[i].slope_m_per_m[k],
                                                   .by_flow = by_flow,
                                                   .by_new_flow = theta * by_flow,
                                                   .inertia = inertia,
                                                   .inertia_by_froude = inertia / (g * g * g * g * g),
                                                   .inertia_by_flow = inertia_by_flow,
                                                   .inertia_by_new_flow = inertia_by_flow / theta};
        }
}

static void copy_in(const double from[], size_t node_count, size_t member_count, const struct dynamic_block *block,
                    double to[])
{
    for (size_t node = 0; node < node_count; node++)
        for (size_t lane = 0; lane < block->lanes; lane++)
            to[node * block->lanes + lane] = from[node * member_count + dynamic_member_of_lane(block, lane)];
}

static void copy_out(const double from[], size_t node_count, size_t member_count, const struct dynamic_block *block,
                     double to[])
{
    for (size_t node = 0; node < node_count; node++)
        memcpy(to + node * member_count + block->first_member, from + node * block->lanes,
               block->member_count * sizeof *to);
}

size_t dynamic_solve(const struct dynamic_tree *tree, const struct dynamic_step_data *data, enum vector_level widest,
                     size_t first_member, struct dynamic_state *state, struct dynamic_block *block,
                     struct dynamic_counts *counts)
{
    size_t members_left = data->member_count - first_member, nodes = dynamic_tree_node_count(tree);
    struct width width = fitting_width(widest, members_left);
    block->lanes = width.lanes;
    block->first_member = first_member;
    block->member_count = members_left < block->lanes ? members_left : block->lanes;
    if (block->member_count == block->lanes) {
        block->area_m2 = state->area_m2 + first_member;
        block->discharge_m3s = state->discharge_m3s + first_member;
        block->passed_m3 = state->passed_m3 + first_member;
        block->stride = data->member_count;
        run_kernel(width.level, tree, data, block, counts);
        return block->member_count;
    }
    block->area_m2 = block->copy;
    block->discharge_m3s = block->area_m2 + nodes * block->lanes;
    block->passed_m3 = block->discharge_m3s + nodes * block->lanes;
    block->stride = block->lanes;
    copy_in(state->area_m2, nodes, data->member_count, block, block->area_m2);
    copy_in(state->discharge_m3s, nodes, data->member_count, block, block->discharge_m3s);
    run_kernel(width.level, tree, data, block, counts);
    copy_out(block->area_m2, nodes, data->member_count, block, state->area_m2);
    copy_out(block->discharge_m3s, nodes, data->member_count, block, state->discharge_m3s);
    copy_out(block->passed_m3, nodes, data->member_count, block, state->passed_m3);
    return block->member_count;
}
