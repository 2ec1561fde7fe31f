/* SPDX-License-Identifier: MIT */
/*
 * The kernel of engine/dynamic_kernel.c at every level of vectors that this processor has, and in blocks of every size:
 * each member gets, bit for bit, what it gets alone in baseline vectors, and neighbours' memory is left alone.
 */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <math.h>
#include <stdbool.h>
#include <stdlib.h>
#include <string.h>

#include "engine/dynamic_tree.h"
#include "tests/engine/dynamic_channel.h"
#include "tests/engine/try_sections.h"

/* around the width of each level's vectors, of two of them, and of what is left after those */
static const size_t member_counts[] = {1, 2, 3, 4, 5, 7, 8, 9, 11, 15, 16, 17, 19, 21, 25, 31, 32, 33, 47, 48, 49};
enum { COUNT_COUNT = sizeof member_counts / sizeof *member_counts, MOST_MEMBERS = 49, BRANCHES = 4, STEPS = 40 };

/*
 * Two becks into a river, the second over a weir; below, a reach with a given level. Intervals are fewer, as many and
 * more than the kernel takes at a time, one alone, and uneven; side inflow in three.
 */
static const double interval_m[] = {120.0, 150.0, 90.0,  110.0, 130.0, 170.0, 140.0, 160.0, 95.0,
                                    105.0, 125.0, 135.0, 145.0, 155.0, 165.0, 115.0, 100.0, 180.0};
static const double slope_m_per_m[] = {0.0031, 0.0024, 0.0018, 0.0027, 0.0012, 0.0016, 0.0011, 0.0009, 0.0014,
                                       0.0008, 0.0013, 0.0017, 0.0010, 0.0007, 0.0,    0.0015, 0.0006, 0.0011};
static const double sill_depth_m[] = {0.4, 1.4, 3.4}, sill_flow_m3s[] = {0.0, 17.0, 95.0};
static const struct stage_opening opening = {
    .row_count = 3, .depth_m = sill_depth_m, .discharge_m3s = sill_flow_m3s, .open_share = 0.8};
static const struct stage_structure weir = {.opening_count = 1, .openings = &opening};
static const size_t side_node[] = {2, 11, 11, 25};

struct river {
    struct flow_curve curve[2];
    struct area_table table[2];
    struct dynamic_branch branches[BRANCHES];
    struct dynamic_tree tree;
};

static void river_init(struct river *river, bool is_diffusive)
{
    static const struct section *const sections[] = {&try_plain, &try_survey};
    for (size_t i = 0; i < 2; i++) {
        assert_int_equal(flow_curve_init(&river->curve[i], sections[i], 0.02, 200e3), FW_OK);
        assert_int_equal(area_table_init(&river->table[i], &river->curve[i], 1.1), FW_OK);
    }
    static const size_t counts[] = {8, 1, 17, 9};
    static const enum dynamic_foot feet[] = {DYNAMIC_FOOT_JOINS, DYNAMIC_FOOT_STRUCTURE, DYNAMIC_FOOT_JOINS,
                                             DYNAMIC_FOOT_STAGE};
    static const size_t below[] = {2, 2, 3, DYNAMIC_NOWHERE};
    for (size_t i = 0; i < BRANCHES; i++)
        river->branches[i] = (struct dynamic_branch){.table = &river->table[i % 2],
                                                     .interval_count = counts[i],
                                                     .interval_m = interval_m + i % 2,
                                                     .slope_m_per_m = slope_m_per_m + i % 2,
                                                     .foot = feet[i],
                                                     .below = below[i],
                                                     .bed_drop_m = i == 1 ? 0.3 : 0.0,
                                                     .structure = i == 1 ? &weir : NULL};
    river->tree = (struct dynamic_tree){.branch_count = BRANCHES,
                                        .branches = river->branches,
                                        .momentum_factor = 1.04,
                                        .is_diffusive = is_diffusive,
                                        .side_count = sizeof side_node / sizeof *side_node,
                                        .side_node = side_node};
    assert_int_equal(dynamic_tree_check(&river->tree), FW_OK);
}

static void river_clear(struct river *river)
{
    for (size_t i = 0; i < 2; i++) {
        area_table_clear(&river->table[i]);
        flow_curve_clear(&river->curve[i]);
    }
}

/* What comes to each member: quiet water, floods, and pulses that no common step survives. */
static double inflow_m3s(size_t branch, size_t member, int step)
{
    double base = 2.0 + 0.7 * (double)((member + branch) % 5);
    if (member % 7 == 3)
        base = step > 6 ? 60.0 + (double)member : 0.0;
    return base * (1.0 + 0.04 * step * (double)(member % 3)) + (step % 9 == 4 ? 0.3 * (double)branch : 0.0);
}

static double foot_depth_m(size_t member, int step)
{
    return 2.1 + 0.02 * (double)(member % 11) + 0.013 * step;
}

static double gauged_m3s(size_t branch, size_t member, int step)
{
    return branch == 2 && member % 6 == 5 && step > 10 && step < 30 ? 9.0 + 0.3 * step : (double)NAN;
}

struct runner { /* so many members in one state, each array in memory of exactly its own size */
    size_t members;
    struct dynamic_tree tree;
    struct dynamic_state state;
    struct dynamic_work *work;
    struct dynamic_counts counts;
    double *inflow_m3s, *foot_depth_m, *side_m3, *gauged_m3s;
};

static void runner_set(const struct runner *runner, size_t first_member, int step, double side_factor)
{
    for (size_t m = 0; m < runner->members; m++)
        for (size_t i = 0; i < BRANCHES; i++) {
            runner->inflow_m3s[i * runner->members + m] = inflow_m3s(i, first_member + m, step);
            runner->gauged_m3s[i * runner->members + m] = gauged_m3s(i, first_member + m, step);
            runner->foot_depth_m[i * runner->members + m] = foot_depth_m(first_member + m, step);
            runner->side_m3[i * runner->members + m] = side_factor * 0.05 * (double)((first_member + m + i) % 4);
        }
}

static void runner_init(struct runner *runner, const struct river *river, size_t members, size_t first_member)
{
    *runner = (struct runner){.members = members,
                              .tree = river->tree,
                              .gauged_m3s = channel_room(BRANCHES * members),
                              .state = dynamic_state_create(&river->tree, members),
                              .inflow_m3s = channel_room(BRANCHES * members),
                              .foot_depth_m = channel_room(BRANCHES * members),
                              .side_m3 = channel_room(BRANCHES * members)};
    runner->tree.gauged_m3s = runner->gauged_m3s;
    assert_int_equal(dynamic_work_create(&runner->work, &runner->tree), FW_OK);
    runner_set(runner, first_member, 0, 1.0);
    memcpy(runner->state.inflow_m3s, runner->inflow_m3s, BRANCHES * members * sizeof(double));
    dynamic_tree_start_steady(&runner->tree, members, runner->side_m3, runner->foot_depth_m, &runner->state);
}

static void runner_step(struct runner *runner, size_t first_member, int step)
{
    runner_set(runner, first_member, step, 60.0);
    dynamic_tree_step(&runner->tree, 60.0, runner->members, runner->inflow_m3s, runner->foot_depth_m, runner->side_m3,
                      &runner->state, runner->work, &runner->counts);
}

static void runner_clear(struct runner *runner)
{
    dynamic_state_clear(&runner->state);
    dynamic_work_destroy(runner->work);
    free(runner->inflow_m3s);
    free(runner->foot_depth_m);
    free(runner->side_m3);
    free(runner->gauged_m3s);
}

static void assert_as_alone(const struct runner *all, const struct runner alone[], size_t nodes, const char *level,
                            int step)
{
    for (size_t m = 0; m < all->members; m++)
        for (size_t node = 0; node < nodes; node++) {
            size_t at = node * all->members + m;
            if (memcmp(&all->state.area_m2[at], &alone[m].state.area_m2[node], sizeof(double)) != 0 ||
                memcmp(&all->state.discharge_m3s[at], &alone[m].state.discharge_m3s[node], sizeof(double)) != 0 ||
                memcmp(&all->state.passed_m3[at], &alone[m].state.passed_m3[node], sizeof(double)) != 0)
                fail_msg("%s, member %zu of %zu, node %zu, step %d: not what it gets alone", level, m, all->members,
                         node, step);
        }
}

static void any_company_at_every_level_gives_the_same_bits(void **state)
{
    (void)state;
    struct dynamic_counts sum = {0};
    for (int is_diffusive = 0; is_diffusive < 2; is_diffusive++) {
        struct river river;
        river_init(&river, is_diffusive);
        size_t nodes = dynamic_tree_node_count(&river.tree);
        for (int level = 0; level < VECTOR_LEVEL_COUNT; level++) {
            struct runner all[COUNT_COUNT], alone[MOST_MEMBERS];
            if (!vector_level_is_present((enum vector_level)level))
                continue;
            for (size_t m = 0; m < MOST_MEMBERS; m++) {
                runner_init(&alone[m], &river, 1, m);
                dynamic_work_set_vectors(alone[m].work, VECTOR_BASELINE);
            }
            for (size_t i = 0; i < COUNT_COUNT; i++) {
                runner_init(&all[i], &river, member_counts[i], 0);
                assert_int_equal(dynamic_work_set_vectors(all[i].work, (enum vector_level)level), level);
            }
            for (int step = 1; step <= STEPS; step++) {
                for (size_t m = 0; m < MOST_MEMBERS; m++)
                    runner_step(&alone[m], m, step);
                for (size_t i = 0; i < COUNT_COUNT; i++) {
                    runner_step(&all[i], 0, step);
                    assert_as_alone(&all[i], alone, nodes, vector_level_name((enum vector_level)level), step);
                }
            }
            size_t iterations = 0;
            for (size_t m = 0; m < MOST_MEMBERS; m++) {
                sum.steps += alone[m].counts.steps;
                sum.iterations += alone[m].counts.iterations;
                sum.halved += alone[m].counts.halved;
                sum.replaced += alone[m].counts.replaced;
                iterations += alone[m].counts.iterations;
                runner_clear(&alone[m]);
            }
            assert_int_equal(all[COUNT_COUNT - 1].counts.iterations, iterations);
            for (size_t i = 0; i < COUNT_COUNT; i++)
                runner_clear(&all[i]);
        }
        river_clear(&river);
    }
    print_message("%zu lone steps, %zu iterations, %zu halved, %zu replaced\n", sum.steps, sum.iterations, sum.halved,
                  sum.replaced);
    assert_true(sum.halved > 0 && sum.iterations > sum.steps); /* both are among what was compared */
}

static void two_runs_give_the_same_bits(void **state)
{
    (void)state;
    struct river river;
    struct runner first, second;
    river_init(&river, false);
    runner_init(&first, &river, 37, 0);
    runner_init(&second, &river, 37, 0);
    for (int step = 1; step <= STEPS; step++) {
        runner_step(&first, 0, step);
        runner_step(&second, 0, step);
    }
    size_t size = dynamic_tree_node_count(&river.tree) * 37 * sizeof(double);
    assert_memory_equal(first.state.area_m2, second.state.area_m2, size);
    assert_memory_equal(first.state.discharge_m3s, second.state.discharge_m3s, size);
    assert_memory_equal(first.state.passed_m3, second.state.passed_m3, size);
    assert_memory_equal(&first.counts, &second.counts, sizeof first.counts);
    runner_clear(&first);
    runner_clear(&second);
    river_clear(&river);
}

static void no_level_but_one_that_is_present_is_used(void **state)
{
    (void)state;
    struct river river;
    struct runner runner;
    river_init(&river, false);
    runner_init(&runner, &river, 3, 0);
    assert_int_equal(dynamic_work_set_vectors(runner.work, VECTOR_BASELINE), VECTOR_BASELINE);
    assert_int_equal(dynamic_work_set_vectors(runner.work, VECTOR_LEVEL_COUNT), vector_level_widest());
    runner_clear(&runner);
    river_clear(&river);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(any_company_at_every_level_gives_the_same_bits),
        cmocka_unit_test(two_runs_give_the_same_bits),
        cmocka_unit_test(no_level_but_one_that_is_present_is_used),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
