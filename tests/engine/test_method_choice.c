/* SPDX-License-Identifier: MIT */
#include "engine/method.h"

#include <math.h>
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
/* after the four above, which it needs */
#include <cmocka.h>

#include "tests/engine/reference_table.h"

/* --- published numbers -------------------------------------------------------------------------------------------- */

/* The row that has this text in its first column, the text itself. */
static const char *criterion(const struct reference_table *table, const char *part, const char **limit_out)
{
    for (size_t row = 1; row <= table->row_count; row++) {
        const char *text = table->cell[row * table->column_count];
        *limit_out = table->cell[row * table->column_count + 1];
        if (strstr(text, part) != NULL)
            return text;
    }
    fail_msg("tests/reference/%s: no row with '%s'", table->name, part);
    return NULL;
}

/* tests/reference/wave_model_applicability.csv: Ponce, Li and Simons (1978), with the worked numbers N 162 and M 195. */
static void the_published_numbers_are_met_by_the_worked_reaches(void **state)
{
    (void)state;
    struct reference_table table = reference_table_load("wave_model_applicability.csv");
    const char *limit = NULL;
    double hours, slope, velocity, depth, published, below;
    const char *text = criterion(&table, "V=1.5", &limit);
    assert_int_equal(sscanf(text, "worked: tr=%lf h, S0=%lf, V=%lf m/s, d=%lf m", &hours, &slope, &velocity, &depth),
                     4);
    assert_int_equal(sscanf(limit, "N = %lf > %lf", &published, &below), 2);
    double kinematic = method_kinematic_number(hours * 3600.0, slope, velocity, depth);
    assert_true(fabs(kinematic - published) < 1e-9); /* 162 exactly */
    assert_true(below == METHOD_KINEMATIC_LIMIT);

    text = criterion(&table, "g=9.81", &limit);
    assert_int_equal(sscanf(text, "worked: tr=%lf h, S0=%lf, d=%lf m", &hours, &slope, &depth), 3);
    assert_int_equal(sscanf(limit, "M = %lf > %lf", &published, &below), 2);
    double diffusion = method_diffusion_number(hours * 3600.0, slope, depth);
    assert_true(fabs(diffusion - published) < 0.5);                                    /* printed in whole numbers */
    assert_true(fabs(diffusion * sqrt(9.81 / SECTION_GRAVITY_M_S2) - 195.30) < 0.005); /* recomputed, its g is 9.81 */
    assert_true(below == METHOD_DIFFUSION_LIMIT);
    reference_table_clear(&table);
}

/* --- steps -------------------------------------------------------------------------------------------------------- */

static void the_time_step_divides_the_data_interval_and_is_a_fortieth_of_the_rise_at_most(void **state)
{
    (void)state;
    static const struct {
        double rise_s, data_interval_s, step_s;
    } rows[] = {
        {36000.0, 900.0, 60.0},                         /* slow: a minute */
        {36000.0, 420.0, 60.0}, {36000.0, 130.0, 26.0}, /* no divisor between */
        {1400.0, 900.0, 30.0},                          /* at most 35 s */
        {1400.0, 300.0, 30.0},  {1000.0, 300.0, 25.0},  /* exactly a fortieth */
        {37.0, 900.0, 1.0},                             /* less than a second: the shortest there is */
        {36000.0, 61.0, 1.0},                           /* a prime */
        {36000.0, 37.0, 37.0},
    };
    for (size_t i = 0; i < sizeof rows / sizeof *rows; i++) {
        struct method_flood flood = {3.0, 41.0, rows[i].rise_s};
        assert_true(method_time_step_s(&flood, rows[i].data_interval_s) == rows[i].step_s);
    }
    assert_true(method_time_step_s(NULL, 900.0) == 60.0);
    assert_true(method_time_step_s(&(struct method_flood){0.0, 0.0, 0.0}, 300.0) == 60.0);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(the_published_numbers_are_met_by_the_worked_reaches),
        cmocka_unit_test(the_time_step_divides_the_data_interval_and_is_a_fortieth_of_the_rise_at_most),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
