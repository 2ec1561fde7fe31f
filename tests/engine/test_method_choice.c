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

/* --- the choice --------------------------------------------------------------------------------------------------- */

/* A wide river: c = 5/3 V and D = Q / (2 B S0) nearly, so that normal stages come D/c^2 early, by hand. */
static void levels_that_would_come_early_call_for_the_full_equations(void **state)
{
    (void)state;
    static const struct section wide = {.shape = SECTION_WIDE, .bottom_m = 47.0, .roughness_n = 0.034};
    static const struct {
        double slope, length_m;
        enum method_reason reason;
    } rows[] = {
        {0.004, 31e3, METHOD_WITHIN_LIMIT},   /* early by less than a minute */
        {0.0011, 180e3, METHOD_WITHIN_LIMIT}, /* early by more, but by less than a hundredth of the travel time */
        {0.0011, 31e3, METHOD_EARLY_LEVELS},
        {0.0002, 180e3, METHOD_BEYOND_LIMIT},
    };
    const struct method_flood flood = {61.0, 420.0, 40000.0};
    for (size_t i = 0; i < sizeof rows / sizeof *rows; i++) {
        struct flow_curve curve;
        double root_slope = sqrt(rows[i].slope), depth_m = 0.0;
        assert_int_equal(flow_curve_init(&curve, &wide, 1e-3 / root_slope, 1e4 / root_slope), FW_OK);
        const struct method_reach reach = {
            .curve = &curve, .length_m = rows[i].length_m, .slope_m_per_m = rows[i].slope};
        struct method_choice choice;
        method_choose(&reach, &flood, &choice);
        assert_int_equal(section_normal_depth_m(&wide, rows[i].slope, flood.peak_m3s, &depth_m), FW_OK);
        double celerity = 5.0 / 3.0 * flood.peak_m3s / (wide.bottom_m * depth_m);
        double early_s = flood.peak_m3s / (2.0 * wide.bottom_m * rows[i].slope * celerity * celerity);
        print_message("S0 %g, %.0f km: %s; levels %.0f s early, %.2f of what is allowed, storage number %.5f\n",
                      rows[i].slope, rows[i].length_m / 1000.0, method_reason_text(choice.reason), choice.early_s,
                      choice.early_number, choice.storage_number);
        assert_int_equal(choice.reason, rows[i].reason);
        assert_true((choice.early_number > 1.0) == (rows[i].reason >= METHOD_BEYOND_LIMIT));
        /* D has an inertia term, 1 - (4/9) Fr^2; the flow where it is most may lie below the peak */
        assert_true(choice.early_s > 0.7 * early_s && choice.early_s < 1.01 * early_s);
        flow_curve_clear(&curve);
    }
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(the_published_numbers_are_met_by_the_worked_reaches),
        cmocka_unit_test(the_time_step_divides_the_data_interval_and_is_a_fortieth_of_the_rise_at_most),
        cmocka_unit_test(levels_that_would_come_early_call_for_the_full_equations),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
