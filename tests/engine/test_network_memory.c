/* SPDX-License-Identifier: MIT */
/*
 * Every allocation of the network's rooms is made to fail in turn. Their sources are taken into this program, with
 * calloc and free replaced, so that nothing of the kind is needed in the engine itself.
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
#include "engine/flow_curve.c"
#include "engine/muskingum_cunge.c"
#include "engine/network.c"
#include "engine/network_levels.c"
#include "engine/routed_reach.c"
#undef calloc
#undef free

#include "tests/engine/try_river.h"

static const double weir_depth_m[] = {1.3, 1.4, 2.7}, weir_m3s[] = {0.0, 0.591, 30.977};
static const struct stage_opening opening = {3, weir_depth_m, weir_m3s, 1.0, NULL};
static const struct stage_structure weir = {1, &opening};

static void every_failed_allocation_is_told_and_nothing_leaks(void **state)
{
    (void)state;
    for (int method = NETWORK_MUSKINGUM_CUNGE; method <= NETWORK_AUTO; method++) {
        enum fw_status status = FW_NO_MEMORY;
        size_t allowed = 0;
        for (; status != FW_OK; allowed++) {
            struct try_river try;
            struct network *network = NULL;
            struct network_fault fault = {"untouched"};
            make_river(&try);
            for (size_t i = 0; i < REACH_COUNT; i++)
                try.reaches[i].method = (enum network_method)method;
            try.points[0].structure = &weir;
            try.points[0].stage_rating.row_count = 0;
            allocations_until_failure = allowed;
            status = network_create(&try.river, &try.options, &network, &fault);
            if (status == FW_OK) {
                network_destroy(network);
            } else {
                assert_int_equal(status, FW_NO_MEMORY);
                assert_null(network);
                assert_string_equal(fault.text, "untouched");
            }
            assert_int_equal(blocks_held, 0);
            assert_true(allowed < 1000);
        }
        assert_true(allowed > 40); /* every one of them was reached */
        print_message("method %d: %zu allocations, each made to fail\n", method, allowed - 1);
    }
}

static void a_faulty_river_leaks_nothing(void **state)
{
    (void)state;
    struct try_river try;
    struct network *network = NULL;
    struct network_fault fault = {""};
    make_river(&try);
    try.reaches[LOWER].from_node = 1; /* a fork, found after the first allocations */
    allocations_until_failure = 1000;
    assert_int_equal(network_create(&try.river, &try.options, &network, &fault), FW_BAD_INPUT);
    assert_int_equal(blocks_held, 0);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(every_failed_allocation_is_told_and_nothing_leaks),
        cmocka_unit_test(a_faulty_river_leaks_nothing),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
