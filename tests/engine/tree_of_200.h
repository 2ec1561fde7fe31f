/* SPDX-License-Identifier: MIT */
/*
 * A tree of 20 junctions and 41 branches, whole or cut into 200 reaches of two or three cells, listed in any order.
 * Include <cmocka.h> with its companions first.
 */
#ifndef FOREWATER_TESTS_ENGINE_TREE_OF_200_H
#define FOREWATER_TESTS_ENGINE_TREE_OF_200_H

#include <math.h>
#include <string.h>

#include "engine/network.h"
#include "tests/engine/route_one_reach.h"

enum { HEADS = 21, JUNCTIONS = 20, BRANCHES = HEADS + JUNCTIONS, CUT_REACHES = 200, MOST_PIECES = 5, SIDES = 4 };
enum { TREE_STEPS = 300, WEIR_BRANCH = 9 };

struct tree_of_200 {              /* points into itself */
    size_t below[BRANCHES];       /* the branch it flows into, NETWORK_NONE for the last */
    size_t heads_above[BRANCHES]; /* how many */
    size_t piece_count[BRANCHES], piece_cells[BRANCHES][MOST_PIECES];
    double cell_m[BRANCHES];
    struct section sections[BRANCHES];
    struct network_reach whole[BRANCHES], cut[CUT_REACHES];
    size_t reach_of_piece[BRANCHES][MOST_PIECES]; /* in cut */
    struct network_side_inflow whole_sides[SIDES], cut_sides[SIDES];
    struct network_point whole_points[BRANCHES + 1], cut_points[BRANCHES + 1]; /* feet, and the last branch's head */
    size_t gauge_node[HEADS];
    double weir_depth_m[40], weir_m3s[40];
    struct stage_opening opening;
    struct stage_structure weir;
    double factor;
    struct network_river whole_river, cut_river;
    struct network_options options;
    double inflow[HEADS * (TREE_STEPS + 1)];
};

static inline size_t tree_random(uint64_t *state, size_t below)
{
    *state = *state * 6364136223846793005u + 1442695040888963407u;
    return (size_t)((*state >> 33) % below);
}

/* Any two branches that still end nowhere meet in a new one, which comes after both. */
static inline void tree_join(struct tree_of_200 *tree, uint64_t *random)
{
    size_t open[BRANCHES], open_count = HEADS;
    for (size_t i = 0; i < HEADS; i++) {
        open[i] = i;
        tree->heads_above[i] = 1;
    }
    for (size_t branch = HEADS; branch < BRANCHES; branch++) {
        for (int k = 0; k < 2; k++) {
            size_t at = tree_random(random, open_count);
            tree->below[open[at]] = branch;
            tree->heads_above[branch] += tree->heads_above[open[at]];
            open[at] = open[--open_count];
        }
        open[open_count++] = branch;
    }
    tree->below[BRANCHES - 1] = NETWORK_NONE;
}

static inline struct section tree_section(size_t branch, size_t heads)
{
    double bottom = 4.0 + 2.7 * (double)heads;
    if (branch % 3 == 1)
        return (struct section){.shape = SECTION_RECTANGLE, .bottom_m = bottom, .roughness_n = 0.035};
    return (struct section){.shape = SECTION_TRAPEZOID,
                            .bottom_m = bottom,
                            .side_h_per_v = 1.6,
                            .roughness_n = 0.037,
                            .has_plain = branch % 3 == 2,
                            .plain_above_m = 1.3,
                            .plain_width_m = 31.0,
                            .plain_roughness_n = 0.07};
}

static inline struct network_reach tree_reach(const struct tree_of_200 *tree, size_t branch, const char *id)
{
    return (struct network_reach){.id = id,
                                  .slope_m_per_m = 0.0008 + 0.0001 * (double)(branch % 7),
                                  .section = &tree->sections[branch],
                                  .cell_m = tree->cell_m[branch]};
}

/* Of a branch that begins in node `branch`; the last one ends in node BRANCHES. Cut, inner nodes come after these. */
static inline void tree_lay_reaches(struct tree_of_200 *tree, uint64_t *random)
{
    size_t order[CUT_REACHES], next = 0, next_node = BRANCHES + 1;
    for (size_t i = 0; i < CUT_REACHES; i++)
        order[i] = i;
    for (size_t i = CUT_REACHES; i-- > 1;) { /* listed in any order */
        size_t other = tree_random(random, i + 1), kept = order[i];
        order[i] = order[other];
        order[other] = kept;
    }
    for (size_t branch = 0; branch < BRANCHES; branch++) {
        size_t node = branch, cells = 0;
        size_t end = tree->below[branch] == NETWORK_NONE ? BRANCHES : tree->below[branch];
        for (size_t piece = 0; piece < tree->piece_count[branch]; piece++) {
            bool is_last = piece + 1 == tree->piece_count[branch];
            struct network_reach *reach = &tree->cut[order[next]];
            tree->reach_of_piece[branch][piece] = order[next++];
            *reach = tree_reach(tree, branch, "a piece");
            reach->length_m = tree->cell_m[branch] * (double)tree->piece_cells[branch][piece];
            reach->from_node = node;
            reach->to_node = node = is_last ? end : next_node++;
            cells += tree->piece_cells[branch][piece];
        }
        tree->whole[branch] = tree_reach(tree, branch, "a branch");
        tree->whole[branch].length_m = tree->cell_m[branch] * (double)cells;
        tree->whole[branch].from_node = branch;
        tree->whole[branch].to_node = end;
    }
    assert_int_equal(next, CUT_REACHES);
    tree->whole_river.node_count = BRANCHES + 1;
    tree->cut_river.node_count = next_node;
}

/* A place on a branch, whole and cut; at a boundary it lies in the upper piece. */
static inline size_t tree_piece_at(const struct tree_of_200 *tree, size_t branch, double at_m, double *at_in_piece_m)
{
    size_t piece = 0;
    double begins_m = 0.0;
    for (;; piece++) {
        double length_m = tree->cut[tree->reach_of_piece[branch][piece]].length_m;
        if (at_m <= begins_m + length_m || piece + 1 == tree->piece_count[branch]) {
            *at_in_piece_m = fmin(at_m - begins_m, length_m);
            return tree->reach_of_piece[branch][piece];
        }
        begins_m += length_m;
    }
}

static inline void tree_lay_places(struct tree_of_200 *tree)
{
    static const struct {
        size_t branch, gauge;
        double cells, share, delay_s, constant;
    } sides[SIDES] = {{3, 3, 1.4, 0.21, 430.0, 0.0},
                      {HEADS + 2, 11, 4.6, 0.08, 1200.0, 0.0},
                      {BRANCHES - 1, NETWORK_NONE, 6.3, 0.0, 0.0, 1.7},
                      {HEADS + 11, 0, 0.0, 0.4, 37.0, 0.0}};
    for (size_t i = 0; i < SIDES; i++) {
        double at_m = sides[i].cells * tree->cell_m[sides[i].branch];
        tree->whole_sides[i] = (struct network_side_inflow){.reach_index = sides[i].branch,
                                                            .at_m = at_m,
                                                            .share_of_gauge = sides[i].gauge,
                                                            .share = sides[i].share,
                                                            .delay_s = sides[i].delay_s,
                                                            .constant_m3s = sides[i].constant};
        tree->cut_sides[i] = tree->whole_sides[i];
        tree->cut_sides[i].reach_index = tree_piece_at(tree, sides[i].branch, at_m, &tree->cut_sides[i].at_m);
    }
    for (size_t i = 0; i <= BRANCHES; i++) {
        size_t branch = i < BRANCHES ? i : BRANCHES - 1;
        double at_m = i < BRANCHES ? tree->whole[branch].length_m : 0.0;
        tree->whole_points[i] = (struct network_point){.id = "foot", .reach_index = branch, .at_m = at_m};
        tree->cut_points[i] = tree->whole_points[i];
        tree->cut_points[i].reach_index = tree_piece_at(tree, branch, at_m, &tree->cut_points[i].at_m);
    }
}

static inline void tree_put_weir(struct tree_of_200 *tree)
{
    tree->weir_depth_m[0] = 0.6;
    tree->weir_m3s[0] = 0.0;
    for (size_t row = 1; row < 40; row++) {
        double head = 0.004 * pow(1.22, (double)row);
        tree->weir_depth_m[row] = 0.6 + head;
        tree->weir_m3s[row] = 1.7 * 8.0 * pow(head, 1.5);
    }
    tree->opening = (struct stage_opening){
        .row_count = 40, .depth_m = tree->weir_depth_m, .discharge_m3s = tree->weir_m3s, .open_share = 0.85};
    tree->weir = (struct stage_structure){.opening_count = 1, .openings = &tree->opening};
    size_t last = tree->piece_count[WEIR_BRANCH] - 1;
    struct network_reach *reaches[] = {&tree->whole[WEIR_BRANCH],
                                       &tree->cut[tree->reach_of_piece[WEIR_BRANCH][last]]};
    for (size_t i = 0; i < 2; i++) {
        reaches[i]->foot_structure = &tree->weir;
        reaches[i]->foot_drop_m = 0.3;
    }
}

/* By the full equations one branch ends in a weir. */
static inline void tree_init(struct tree_of_200 *tree, uint64_t seed, enum network_method method)
{
    uint64_t random = seed;
    memset(tree, 0, sizeof *tree);
    tree_join(tree, &random);
    for (size_t branch = 0; branch < BRANCHES; branch++) {
        tree->piece_count[branch] = branch < 5 ? 4 : 5; /* 5 x 4 + 36 x 5 = 200 */
        for (size_t piece = 0; piece < MOST_PIECES; piece++)
            tree->piece_cells[branch][piece] = 2 + tree_random(&random, 2);
        tree->cell_m[branch] = 170.0 + 10.0 * (double)(branch % 5);
        tree->sections[branch] = tree_section(branch, tree->heads_above[branch]);
    }
    tree_lay_reaches(tree, &random);
    for (size_t i = 0; i < BRANCHES; i++)
        tree->whole[i].method = method;
    for (size_t i = 0; i < CUT_REACHES; i++)
        tree->cut[i].method = method;
    tree_lay_places(tree);
    if (network_method_is_full(method))
        tree_put_weir(tree);
    for (size_t gauge = 0; gauge < HEADS; gauge++) {
        const struct gamma_flood flood = {1.6 + 0.1 * (double)gauge, 9.0 + 0.7 * (double)(gauge % 8),
                                          (1.4 + 0.05 * (double)gauge) * 3600.0, 5.0};
        tree->gauge_node[gauge] = gauge;
        for (size_t step = 0; step <= TREE_STEPS; step++)
            tree->inflow[gauge * (TREE_STEPS + 1) + step] = gamma_flood_m3s(60.0 * (double)step, &flood);
    }
    tree->factor = 1.0;
    tree->options = (struct network_options){.time_step_s = 60.0,
                                             .group_count = 1,
                                             .roughness_factors = &tree->factor,
                                             .members_per_group = 1,
                                             .largest_discharge_m3s = 300.0};
    struct network_river *const rivers[] = {&tree->whole_river, &tree->cut_river};
    for (size_t i = 0; i < 2; i++) {
        rivers[i]->gauge_count = HEADS;
        rivers[i]->gauge_node = tree->gauge_node;
        rivers[i]->reach_count = i == 0 ? BRANCHES : CUT_REACHES;
        rivers[i]->reaches = i == 0 ? tree->whole : tree->cut;
        rivers[i]->side_inflow_count = SIDES;
        rivers[i]->side_inflows = i == 0 ? tree->whole_sides : tree->cut_sides;
        rivers[i]->point_count = BRANCHES + 1;
        rivers[i]->points = i == 0 ? tree->whole_points : tree->cut_points;
    }
}

/* Steady at the floods' first values. */
static inline struct network *tree_start(const struct tree_of_200 *tree, const struct network_river *river)
{
    struct network *network = NULL;
    struct network_fault fault = {""};
    double first[HEADS];
    if (network_create(river, &tree->options, &network, &fault) != FW_OK)
        fail_msg("network_create: %s", fault.text);
    for (size_t gauge = 0; gauge < HEADS; gauge++)
        first[gauge] = tree->inflow[gauge * (TREE_STEPS + 1)];
    assert_int_equal(network_start_steady(network, first), FW_OK);
    return network;
}

#endif
