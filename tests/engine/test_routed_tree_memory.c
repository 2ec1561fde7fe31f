/* SPDX-License-Identifier: MIT */
/*
 * Every allocation of engine/routed_tree is made to fail in turn while a network is created. Its source is taken into
 * this program, with calloc and free replaced.
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
#include "engine/routed_tree.c"
#undef calloc
#undef free

#include "tests/engine/try_river.h"

static void every_failed_allocation_is_told_and_nothing_leaks(void **state)
{
    (void)state;
    enum fw_status status = FW_NO_MEMORY;
    size_t allowed = 0;
    for (; status != FW_OK; allowed++) {
        struct try_river try;
        struct network *network = NULL;
        struct network_fault fault = {"untouched"};
        make_river(&try);
        for (size_t i = 0; i < REACH_COUNT; i++)
            try.reaches[i].method = i == MIDDLE ? NETWORK_MUSKINGUM_CUNGE : NETWORK_DYNAMIC; /* two trees */
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
        assert_true(allowed < 100);
    }
    print_message("%zu allocations, each made to fail\n", allowed - 1);
    assert_int_equal(allowed - 1, 28); /* fourteen to a tree */
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(every_failed_allocation_is_told_and_nothing_leaks),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
