/* SPDX-License-Identifier: MIT */
/*
 * Every allocation of the full equations' rooms is made to fail in turn, and none is made in stepping. Their sources
 * are taken into this program, with calloc and free replaced, so that nothing of the kind is needed in the engine
 * itself.
 */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <stdlib.h>
#include <string.h>

#include "tests/engine/failing_memory.h"

#define calloc calloc_or_fail
#define free free_and_count
#include "engine/area_table.c"
#include "engine/dynamic_work.c"
#undef calloc
#undef free

#include "tests/engine/try_sections.h"

static const double interval_m[] = {170.0, 230.0, 190.0, 210.0};
static const double slope_m_per_m[] = {0.0013, 0.0017, 0.0011, 0.0015};

static void every_failed_allocation_is_told_and_nothing_leaks(void **state)
{
    (void)state;
    struct flow_curve curve;
    enum fw_status status = FW_NO_MEMORY;
    size_t allowed = 0;
    assert_int_equal(flow_curve_init(&curve, &try_plain, 0.02, 60000.0), FW_OK);
    for (; status != FW_OK; allowed++) {
        struct area_table table = {0};
        struct dynamic_work *work = NULL;
        const struct dynamic_branch branch = {.table = &table,
                                              .interval_count = 4,
                                              .interval_m = interval_m,
                                              .slope_m_per_m = slope_m_per_m,
                                              .foot = DYNAMIC_FOOT_NORMAL,
                                              .below = DYNAMIC_NOWHERE};
        const struct dynamic_tree tree = {.branch_count = 1, .branches = &branch, .momentum_factor = 1.0};
        allocations_until_failure = allowed;
        status = area_table_init(&table, &curve, 1.0);
        if (status == FW_OK)
            status = dynamic_work_create(&work, &tree);
        if (status == FW_OK) {
            double area[15], discharge[15], passed[15], inflow[3] = {3.7, 0.0, 41.0}, flood[3] = {4.1, 150.0, 39.0};
            struct dynamic_state now = {area, discharge, inflow, passed};
            struct dynamic_counts counts = {0};
            allocations_until_failure = 0; /* a step, with a rescue in it, must not want any */
            dynamic_tree_start_steady(&tree, 3, NULL, NULL, &now);
            dynamic_tree_step(&tree, 60.0, 3, flood, NULL, NULL, &now, work, &counts);
            assert_true(counts.halved > 0);
        } else {
            assert_int_equal(status, FW_NO_MEMORY);
            assert_null(work);
        }
        dynamic_work_destroy(work);
        area_table_clear(&table);
        assert_int_equal(blocks_held, 0);
        assert_true(allowed < 100);
    }
    print_message("%zu allocations, each made to fail\n", allowed - 1);
    assert_int_equal(allowed - 1, 6);
    dynamic_work_destroy(NULL);
    flow_curve_clear(&curve);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(every_failed_allocation_is_told_and_nothing_leaks),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
