/* SPDX-License-Identifier: MIT */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <float.h>
#include <math.h>

#include "engine/bit_index.h"

static void rows_are_a_sixty_fourth_of_an_octave(void **state)
{
    (void)state;
    struct bit_index index;
    bit_index_init(&index, 0.37, 913.0);
    /* 0.37 = 1.48 x 2^-2 lies in segment 30 of its octave, 913 = 1.783 x 2^9 in segment 50 of the eleventh after
     * it */
    assert_int_equal(index.row_count, 1 + 11 * 64 + 50 - 30 + 1);
    assert_true(bit_index_row_start(&index, 0) == 0.0);
    assert_true(bit_index_row_start(&index, 1) == 0.25 * (1.0 + 30.0 / 64.0));
    assert_true(bit_index_row_start(&index, index.row_count) == 512.0 * (1.0 + 51.0 / 64.0));
    for (size_t row = 1; row < index.row_count; row++) {
        double start = bit_index_row_start(&index, row);
        double end = bit_index_row_start(&index, row + 1);
        assert_true(end > start && end <= start * (1.0 + 1.0 / 64.0));
        assert_int_equal(bit_index_row(&index, start), row);
        assert_int_equal(bit_index_row(&index, nextafter(end, 0.0)), row);
        assert_int_equal(bit_index_row(&index, nextafter(start, 0.0)), row - 1);
    }
}

static void whatever_the_argument_the_row_is_in_the_table(void **state)
{
    (void)state;
    static const struct {
        double argument;
        size_t row;
    } rows[] = {{0.0, 0},    {-0.0, 0},   {-1.0, 0},      {-DBL_MAX, 0}, {DBL_MIN, 0}, {5e-324, 0}, {1.0, 1},
                {64.0, 385}, {1e30, 385}, {DBL_MAX, 385}, {0.999, 0},    {63.99, 384}, {-5e-324, 0}};
    struct bit_index index;
    bit_index_init(&index, 1.0, 64.0);
    assert_int_equal(index.row_count, 386);
    for (size_t i = 0; i < sizeof rows / sizeof *rows; i++)
        assert_int_equal(bit_index_row(&index, rows[i].argument), rows[i].row);
    assert_int_equal(bit_index_row(&index, (double)INFINITY), 385);
    assert_int_equal(bit_index_row(&index, -(double)INFINITY), 0);
    assert_int_equal(bit_index_row(&index, (double)NAN), 0);
    uint64_t bits = 0x9e3779b97f4a7c15u; /* a fixed seed: every bit pattern is fair */
    for (int i = 0; i < 1000000; i++) {
        double argument;
        bits ^= bits << 13;
        bits ^= bits >> 7;
        bits ^= bits << 17;
        memcpy(&argument, &bits, sizeof argument);
        assert_true(bit_index_row(&index, argument) < index.row_count);
    }
}

static void a_subnormal_beginning_is_taken_as_the_least_normal(void **state)
{
    (void)state;
    struct bit_index index;
    bit_index_init(&index, 5e-324, 1e-300);
    assert_int_equal(bit_index_row(&index, 0.0), 0);
    assert_true(bit_index_row(&index, 1e-301) < index.row_count);
    assert_int_equal(bit_index_row(&index, 1.0), index.row_count - 1);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(rows_are_a_sixty_fourth_of_an_octave),
        cmocka_unit_test(whatever_the_argument_the_row_is_in_the_table),
        cmocka_unit_test(a_subnormal_beginning_is_taken_as_the_least_normal),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
