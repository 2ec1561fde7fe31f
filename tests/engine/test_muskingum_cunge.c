/* SPDX-License-Identifier: MIT */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <float.h>
#include <math.h>
#include <stdbool.h>
#include <stdlib.h>
#include <string.h>

#include "engine/muskingum_cunge.h"
#include "tests/engine/route_one_reach.h"
#include "tests/engine/try_sections.h"

static const double slope = 0.0023;

struct try_table {
    struct flow_curve curve;
    struct muskingum_cunge_table table;
};

static struct try_table make_table(const struct section *section, double cell_m, double time_step_s,
                                   enum muskingum_cunge_diffusion diffusion)
{
    struct try_table made;
    assert_int_equal(flow_curve_init(&made.curve, section, 1e-3 / sqrt(slope), 6400.0 / sqrt(slope)), FW_OK);
    const struct muskingum_cunge_reach reach = {.curve = &made.curve,
                                                .slope_m_per_m = slope,
                                                .roughness_factor = 1.0,
                                                .cell_m = cell_m,
                                                .time_step_s = time_step_s,
                                                .smallest_discharge_m3s = 1e-3,
                                                .diffusion = diffusion};
    assert_int_equal(muskingum_cunge_table_init(&made.table, &reach), FW_OK);
    return made;
}

static void clear_table(struct try_table *table)
{
    muskingum_cunge_table_clear(&table->table);
    flow_curve_clear(&table->curve);
}

/* --- the tables
 * ------------------------------------------------------------------------------------------------------ */

/* The tables must give the flow whose area and passing volume make up H + b = dx A + dt Q, at any flow. */
static double flow_error(const struct section *section, const struct muskingum_cunge_table *table, double depth_m)
{
    struct section_properties exact;
    section_properties_at(section, depth_m, &exact);
    double discharge = sqrt(slope) * exact.conveyance_m3s;
    double sum = table->cell_m * exact.area_m2 + table->time_step_s * discharge;
    double low = 0.0, high = 2.0 * table->time_step_s * discharge;
    for (int i = 0; i < 100; i++) { /* H + b rises with the flow */
        double middle = 0.5 * (low + high);
        if (muskingum_cunge_potential_m3(table, middle) + middle - muskingum_cunge_implicit_m3(table, middle) < sum)
            low = middle;
        else
            high = middle;
    }
    return low / (table->time_step_s * discharge) - 1.0;
}

/* Bank full or a surveyed point nearby: within a row of the table the straight line cuts the corner there. */
static bool is_near_a_bend(const struct section *section, double depth_m)
{
    if (section->has_plain && fabs(depth_m / section->plain_above_m - 1.0) < 0.05)
        return true;
    for (size_t i = 0; section->shape == SECTION_POINTS && i < section->point_count; i++)
        if (fabs(depth_m / (section->point_elevation_m[i] - 101.17) - 1.0) < 0.05)
            return true;
    return false;
}

static void tables_give_the_flow_of_an_area_to_a_thousandth(void **state)
{
    (void)state;
    static const struct {
        double cell_m, time_step_s;
    } grids[] = {{130.0, 60.0}, {37.0, 60.0}, {900.0, 60.0}};
    for (size_t s = 0; s + 1 < TRY_SECTION_COUNT; s++) { /* but for the berm, whose dip the curve bridges */
        const struct section *section = try_sections[s].section;
        double worst = 0.0, worst_at_bend = 0.0;
        size_t most_rows = 0;
        for (size_t g = 0; g < 3; g++)
            for (int diffusion = MUSKINGUM_CUNGE_MATCHED; diffusion <= MUSKINGUM_CUNGE_UPWIND; diffusion++) {
                struct try_table made = make_table(section, grids[g].cell_m, grids[g].time_step_s,
                                                   (enum muskingum_cunge_diffusion)diffusion);
                for (double depth = 0.02; depth < 6.0; depth *= 1.00713) {
                    if (section_normal_discharge_m3s(section, slope, depth) < 1e-3)
                        continue; /* below it the tables run straight to the origin */
                    double error = fabs(flow_error(section, &made.table, depth));
                    if (is_near_a_bend(section, depth))
                        worst_at_bend = fmax(worst_at_bend, error);
                    else
                        worst = fmax(worst, error);
                }
                if (made.table.by_potential.row_count > most_rows)
                    most_rows = made.table.by_potential.row_count;
                clear_table(&made);
            }
        print_message("%s: flow by the tables within %.4f %% (at a bend of the outline %.3f %%), %zu rows\n",
                      try_sections[s].name, 100.0 * worst, 100.0 * worst_at_bend, most_rows);
        assert_true(worst <= 1e-3);
        assert_true(worst_at_bend <= 2.5e-3);
    }
}

/* Wide channel: c = 5/3 V, D = q/(2 S0) (1 - 4/9 Fr^2); the slope of d is then known at every flow. */
static void diffusion_in_the_tables_is_the_rivers_own_or_the_least_allowed(void **state)
{
    (void)state;
    enum limit { OWN, LEAST_OF_LONG_CELLS, LEAST_OF_SHORT_CELLS };
    static const struct {
        double cell_m, time_step_s;
        enum limit limit;
    } rows[] = {{130.0, 60.0, OWN}, {4000.0, 60.0, LEAST_OF_LONG_CELLS}, {1.0, 900.0, LEAST_OF_SHORT_CELLS}};
    for (size_t i = 0; i < sizeof rows / sizeof *rows; i++) {
        double time_step_s = rows[i].time_step_s;
        struct try_table made = make_table(&try_wide, rows[i].cell_m, time_step_s, MUSKINGUM_CUNGE_MATCHED);
        for (double discharge = 17.0; discharge < 200.0; discharge *= 1.31) {
            double depth = pow(try_wide.roughness_n * discharge / try_wide.bottom_m / sqrt(slope), 0.6);
            double velocity = discharge / try_wide.bottom_m / depth;
            double celerity = 5.0 / 3.0 * velocity;
            double diffusivity =
                velocity * depth / (2.0 * slope) * (1.0 - 4.0 / 9.0 * velocity * velocity / (9.80665 * depth));
            double own = diffusivity / (celerity * celerity) - 0.5 * (rows[i].cell_m / celerity - time_step_s);
            const double expected[] = {[OWN] = own,
                                       [LEAST_OF_LONG_CELLS] = 0.0,
                                       [LEAST_OF_SHORT_CELLS] = time_step_s - rows[i].cell_m / celerity};
            double rise = muskingum_cunge_implicit_m3(&made.table, 1.03 * discharge * time_step_s) -
                          muskingum_cunge_implicit_m3(&made.table, 0.97 * discharge * time_step_s);
            /* the difference spans 6 % of flow, and the tables are straight over 3 % of H */
            assert_true(fabs(rise / (0.06 * discharge) - expected[rows[i].limit]) <= 0.02 * expected[rows[i].limit]);
        }
        clear_table(&made);
    }
}

static void bad_reaches_make_no_table(void **state)
{
    (void)state;
    struct flow_curve curve;
    assert_int_equal(flow_curve_init(&curve, &try_wide, 0.02, 60000.0), FW_OK);
    const struct muskingum_cunge_reach good = {.curve = &curve,
                                               .slope_m_per_m = slope,
                                               .roughness_factor = 1.0,
                                               .cell_m = 100.0,
                                               .time_step_s = 60.0,
                                               .smallest_discharge_m3s = 1e-3};
    const double bad[] = {0.0, -1.0, (double)NAN, (double)INFINITY};
    for (size_t i = 0; i < sizeof bad / sizeof *bad; i++)
        for (int member = 0; member < 5; member++) {
            struct muskingum_cunge_reach reach = good;
            struct muskingum_cunge_table table;
            double *const spoilt[] = {&reach.slope_m_per_m, &reach.roughness_factor, &reach.cell_m,
                                      &reach.time_step_s, &reach.smallest_discharge_m3s};
            *spoilt[member] = bad[i];
            assert_int_equal(muskingum_cunge_table_init(&table, &reach), FW_BAD_INPUT);
            muskingum_cunge_table_clear(&table);
        }
    struct muskingum_cunge_reach reach = good;
    struct muskingum_cunge_table table;
    reach.smallest_discharge_m3s = 1e9; /* no part of the curve is above it */
    assert_int_equal(muskingum_cunge_table_init(&table, &reach), FW_BAD_INPUT);
    assert_int_equal(muskingum_cunge_table_init(&table, &good), FW_OK);
    muskingum_cunge_table_clear(&table);
    flow_curve_clear(&curve);
}

/* --- the kernel
 * ------------------------------------------------------------------------------------------------------ */

static void a_step_keeps_every_drop(void **state)
{
    (void)state;
    enum { CELLS = 7, MEMBERS = 3 };
    struct try_table made = make_table(&try_plain, 130.0, 60.0, MUSKINGUM_CUNGE_MATCHED);
    double cells[CELLS][MEMBERS] = {{0.0}};
    double in_m3[MEMBERS] = {0.0}, out_m3[MEMBERS] = {0.0};
    for (int step = 0; step < 2000; step++) {
        double passing[MEMBERS], implicit[MEMBERS];
        for (size_t m = 0; m < MEMBERS; m++) {
            passing[m] = 60.0 * (1.0 + (double)m) * 23.0 * (1.0 + sin(0.01 * step + (double)m));
            implicit[m] = muskingum_cunge_implicit_m3(&made.table, passing[m]);
            in_m3[m] += passing[m];
        }
        muskingum_cunge_step(&made.table, CELLS, MEMBERS, &cells[0][0], passing, implicit);
        for (size_t m = 0; m < MEMBERS; m++)
            out_m3[m] += passing[m];
    }
    for (size_t m = 0; m < MEMBERS; m++) {
        double held = 0.0;
        for (size_t c = 0; c < CELLS; c++)
            held += cells[c][m];
        assert_true(fabs(in_m3[m] - out_m3[m] - held) <= 1e-12 * in_m3[m]);
    }
    clear_table(&made);
}

static void a_steady_state_is_steady_with_side_inflow_and_without(void **state)
{
    (void)state;
    static const double flows_m3s[] = {0.0, 1e-6, 7e-4, 0.013, 1.9, 48.0, 170.0, 6000.0, 1e6};
    for (size_t s = 0; s < TRY_SECTION_COUNT; s++) {
        struct try_table made = make_table(try_sections[s].section, 130.0, 60.0, MUSKINGUM_CUNGE_MATCHED);
        for (size_t i = 0; i < sizeof flows_m3s / sizeof *flows_m3s; i++)
            for (int has_side = 0; has_side < 2; has_side++) {
                double side = has_side ? 91.0 : 0.0;
                double start = 60.0 * flows_m3s[i], passing = start;
                double implicit = muskingum_cunge_implicit_m3(&made.table, passing);
                double cell = muskingum_cunge_steady_state_m3(&made.table, side, &passing, &implicit);
                assert_true(passing == start + side);
                for (int step = 0; step < 500; step++) {
                    double through = start, through_implicit = muskingum_cunge_implicit_m3(&made.table, start);
                    cell += side;
                    muskingum_cunge_step(&made.table, 1, 1, &cell, &through, &through_implicit);
                    assert_true(fabs(through - passing) <= 1e-12 * passing);
                }
            }
        clear_table(&made);
    }
}

/* Any bits at all in state, passing and implicit volume: nothing outside the tables is read (the sanitized build
 * sees to that). */
static void any_bits_are_survived(void **state)
{
    (void)state;
    enum { CELLS = 3, MEMBERS = 8 };
    static const double nasty[] = {0.0, -0.0, 5e-324, -1.0, 1e308, -1e308, 1e-308, 1.0};
    struct try_table made = make_table(&try_survey, 130.0, 60.0, MUSKINGUM_CUNGE_MATCHED);
    double cells[CELLS * MEMBERS], passing[MEMBERS], implicit[MEMBERS];
    uint64_t bits = 0x2545f4914f6cdd1du; /* fixed seed */
    for (int round = 0; round < 20000; round++) {
        double *const values[] = {cells, passing, implicit};
        for (size_t v = 0; v < 3; v++)
            for (size_t i = 0; i < (v == 0 ? CELLS * MEMBERS : MEMBERS); i++) {
                bits ^= bits << 13;
                bits ^= bits >> 7;
                bits ^= bits << 17;
                memcpy(&values[v][i], &bits, sizeof bits);
                if (bits % 5 == 0)
                    values[v][i] = nasty[bits / 5 % 8];
                if (bits % 31 == 0)
                    values[v][i] = (double)NAN;
            }
        muskingum_cunge_step(&made.table, CELLS, MEMBERS, cells, passing, implicit);
        double head = muskingum_cunge_implicit_m3(&made.table, passing[0]);
        double potential = muskingum_cunge_potential_m3(&made.table, implicit[0]);
        assert_true(isnan(head) || !isnan(head) || potential > 0.0); /* both were computed */
    }
    clear_table(&made);
}

/* --- whole floods in every shape
 * -------------------------------------------------------------------------------------- */

static const struct gamma_flood smooth_flood = {4.3, 131.0, 3.1 * 3600.0, 6.0};

static struct one_reach flood_in(const struct section *section, double bed_slope)
{
    return (struct one_reach){.section = section,
                              .slope_m_per_m = bed_slope,
                              .length_m = 14300.0,
                              .time_step_s = 120.0,
                              .largest_m3s = 160.0,
                              .flood = gamma_flood_m3s,
                              .flood_parameters = &smooth_flood,
                              .duration_s = 20.0 * 3600.0};
}

static const double slopes[] = {0.012, 0.0023, 0.0006};

static double imbalance_of(const struct one_reach *one, const struct one_reach_result *result)
{
    double in = trapezoidal_volume_m3(result->step_count, result->inflow_m3s, result->time_step_s);
    double out = trapezoidal_volume_m3(result->step_count, result->outflow_m3s, result->time_step_s);
    double side = one->side_m3s * (double)result->step_count * result->time_step_s;
    if (one->starts_dry) /* the side inflow begins within the first step */
        side -= 0.5 * one->side_m3s * result->time_step_s;
    return fabs(in + side - out - (result->volume_end_m3 - result->volume_start_m3)) / (in + side);
}

static void volume_balances_over_a_flood_in_every_shape(void **state)
{
    (void)state;
    double worst = 0.0;
    for (size_t s = 0; s < TRY_SECTION_COUNT; s++)
        for (size_t k = 0; k < sizeof slopes / sizeof *slopes; k++)
            for (int method = NETWORK_MUSKINGUM_CUNGE; method <= NETWORK_KINEMATIC; method++)
                for (int variant = 0; variant < 4; variant++) {
                    struct one_reach one = flood_in(try_sections[s].section, slopes[k]);
                    one.method = (enum network_method)method;
                    one.starts_dry = variant & 1;
                    one.side_m3s = variant & 2 ? 7.9 : 0.0;
                    struct one_reach_result result = route_one_reach(&one);
                    double imbalance = imbalance_of(&one, &result);
                    worst = fmax(worst, imbalance);
                    if (!(imbalance <= 1e-12))
                        fail_msg("%s, slope %g, method %d, variant %d: imbalance %.2e", try_sections[s].name,
                                 slopes[k], method, variant, imbalance);
                    assert_int_equal(result.steps_below_zero, 0);
                    one_reach_result_clear(&result);
                }
    print_message(
        "volume over a flood, %d shapes, 3 slopes, steady and dry start, side inflow: worst imbalance %.1e\n",
        (int)TRY_SECTION_COUNT, worst);
}

static double square_pulse_m3s(double t_s, const void *parameters)
{
    (void)parameters;
    return t_s > 0.0 && t_s <= 5400.0 ? 150.0 : 0.0;
}

static void a_pulse_into_a_dry_river_never_runs_backwards(void **state)
{
    (void)state;
    static const size_t cell_counts[] = {0, 12, 150};
    static const double steps_s[] = {60.0, 300.0};
    for (size_t s = 0; s < TRY_SECTION_COUNT; s++)
        for (size_t k = 0; k < sizeof slopes / sizeof *slopes; k++)
            for (size_t c = 0; c < sizeof cell_counts / sizeof *cell_counts; c++)
                for (size_t d = 0; d < sizeof steps_s / sizeof *steps_s; d++) {
                    struct one_reach one = flood_in(try_sections[s].section, slopes[k]);
                    one.flood = square_pulse_m3s;
                    one.starts_dry = true;
                    one.cell_count = cell_counts[c];
                    one.time_step_s = steps_s[d];
                    struct one_reach_result result = route_one_reach(&one);
                    double peak = 0.0;
                    for (size_t i = 0; i <= result.step_count; i++) {
                        if (!(result.outflow_m3s[i] >= 0.0))
                            fail_msg("%s, slope %g, %zu cells, %g s: %g m3/s at step %zu", try_sections[s].name,
                                     slopes[k], result.cell_count, steps_s[d], result.outflow_m3s[i], i);
                        peak = fmax(peak, result.outflow_m3s[i]);
                    }
                    assert_true(peak > 10.0 && peak <= 150.0 * (1.0 + 1e-9)); /* it came, and did not grow */
                    assert_int_equal(result.steps_below_zero, 0);
                    assert_true(imbalance_of(&one, &result) <= 1e-12);
                    one_reach_result_clear(&result);
                }
}

/* --- rivers drawn at random
 * ------------------------------------------------------------------------------------------- */

static double draw(uint64_t *seed, double low, double high)
{
    *seed ^= *seed << 13;
    *seed ^= *seed >> 7;
    *seed ^= *seed << 17;
    return low + (high - low) * ((double)(*seed >> 11) * 0x1p-53);
}

static double draw_log(uint64_t *seed, double low, double high)
{
    return low * pow(high / low, draw(seed, 0.0, 1.0));
}

/* Dry, or a square pulse, changing every so often: far rougher than any river. */
struct pulses {
    uint64_t seed;
    double period_s, largest_m3s;
};

static double pulses_m3s(double t_s, const void *parameters)
{
    const struct pulses *pulses = parameters;
    uint64_t seed = pulses->seed + (uint64_t)(t_s / pulses->period_s) * 0x9e3779b97f4a7c15u;
    double share = 0.0;
    for (int i = 0; i < 3; i++)
        share = draw(&seed, -0.6, 1.0);
    return fmax(0.0, share) * pulses->largest_m3s;
}

static void no_random_river_runs_backwards_or_loses_water(void **state)
{
    (void)state;
    const uint64_t first_seed = 20240611;
    double worst = 0.0;
    print_message("random rivers, seed %llu\n", (unsigned long long)first_seed);
    for (uint64_t i = 0; i < 400; i++) {
        uint64_t seed = first_seed + i * 0x9e3779b97f4a7c15u;
        struct section section = *try_sections[(size_t)(i % TRY_SECTION_COUNT)].section;
        struct pulses pulses = {seed, draw_log(&seed, 60.0, 36000.0), draw_log(&seed, 0.01, 900.0)};
        if (section.shape != SECTION_POINTS) {
            /* width goes as the root of the flow, about 4 of them; in a slot hundreds of metres deep the diffusion
             * terms are so large that their rounding shows in the balance at some 1e-12 */
            section.bottom_m = draw_log(&seed, 1.0, 16.0) * sqrt(pulses.largest_m3s);
            section.roughness_n = draw(&seed, 0.02, 0.09);
        }
        struct one_reach one = {.section = &section,
                                .slope_m_per_m = draw_log(&seed, 5e-5, 0.04),
                                .length_m = draw_log(&seed, 10.0, 60000.0),
                                .method = i % 5 == 0 ? NETWORK_KINEMATIC : NETWORK_MUSKINGUM_CUNGE,
                                .time_step_s = draw_log(&seed, 5.0, 1800.0),
                                .cell_count = i % 3 == 0 ? 0 : (size_t)draw_log(&seed, 1.0, 80.0),
                                .largest_m3s = pulses.largest_m3s,
                                .flood = pulses_m3s,
                                .flood_parameters = &pulses,
                                .side_m3s = i % 4 == 0 ? draw_log(&seed, 1e-4, 30.0) : 0.0,
                                .starts_dry = i % 2 == 0};
        one.duration_s = 400.0 * one.time_step_s;
        struct one_reach_result result = route_one_reach(&one);
        for (size_t step = 0; step <= result.step_count; step++)
            if (!(result.outflow_m3s[step] >= 0.0))
                fail_msg("river %llu: %g m3/s at step %zu", (unsigned long long)i, result.outflow_m3s[step], step);
        assert_int_equal(result.steps_below_zero, 0);
        double in = trapezoidal_volume_m3(result.step_count, result.inflow_m3s, result.time_step_s);
        if (in + one.side_m3s > 0.0) {
            double imbalance = imbalance_of(&one, &result);
            worst = fmax(worst, imbalance);
            if (!(imbalance <= 1e-12))
                fail_msg("river %llu: imbalance %.2e", (unsigned long long)i, imbalance);
        }
        one_reach_result_clear(&result);
    }
    print_message("400 random rivers: no negative flow, worst imbalance %.1e\n", worst);
}

/* --- grids
 * ---------------------------------------------------------------------------------------------------------- */

static void peaks_stay_when_cells_and_steps_are_halved(void **state)
{
    (void)state;
    double worst = 0.0;
    for (size_t s = 0; s < TRY_SECTION_COUNT; s++)
        for (size_t k = 0; k < sizeof slopes / sizeof *slopes; k++) {
            struct one_reach one = flood_in(try_sections[s].section, slopes[k]);
            struct one_reach_result coarse = route_one_reach(&one);
            one.cell_count = 2 * coarse.cell_count;
            one.time_step_s *= 0.5;
            struct one_reach_result fine = route_one_reach(&one);
            struct flood_peak before = flood_peak_of(coarse.step_count + 1, coarse.outflow_m3s, coarse.time_step_s);
            struct flood_peak after = flood_peak_of(fine.step_count + 1, fine.outflow_m3s, fine.time_step_s);
            double change = fabs(after.discharge_m3s / before.discharge_m3s - 1.0);
            print_message(
                "%-20s S0 %-6g %3zu cells, 120 s: peak %.2f m3/s at %.1f min; halved: %+.3f %%, %+.2f min\n",
                try_sections[s].name, slopes[k], coarse.cell_count, before.discharge_m3s, before.time_s / 60.0,
                100.0 * (after.discharge_m3s / before.discharge_m3s - 1.0), (after.time_s - before.time_s) / 60.0);
            worst = fmax(worst, change);
            one_reach_result_clear(&coarse);
            one_reach_result_clear(&fine);
            assert_true(change <= 0.005);
            assert_true(fabs(after.time_s - before.time_s) <= 120.0);
        }
    print_message("peaks, cells and steps halved: largest change %.3f %%\n", 100.0 * worst);
}

/* Root mean square difference of two outflows at the coarser one's times. */
static double difference(const struct one_reach_result *coarse, const struct one_reach_result *fine, size_t ratio)
{
    double sum = 0.0;
    for (size_t i = 0; i <= coarse->step_count; i++)
        sum += pow(coarse->outflow_m3s[i] - fine->outflow_m3s[ratio * i], 2.0);
    return sqrt(sum / (double)(coarse->step_count + 1));
}

static void a_smooth_wave_converges_at_second_order(void **state)
{
    (void)state;
    enum { GRIDS = 5 };
    const struct gamma_flood wave = {31.0, 67.0, 5.0 * 3600.0, 5.0};
    struct one_reach_result results[GRIDS];
    double differences[GRIDS - 1];
    for (size_t g = 0; g < GRIDS; g++) {
        struct one_reach one = flood_in(&try_wide, 0.0011);
        one.length_m = 30000.0;
        one.flood_parameters = &wave;
        one.duration_s = 40.0 * 3600.0;
        one.largest_m3s = 100.0;
        one.time_step_s = 1200.0 / (double)(1 << g);
        one.cell_count = (size_t)24 << g;
        results[g] = route_one_reach(&one);
    }
    for (size_t g = 0; g + 1 < GRIDS; g++) {
        differences[g] = difference(&results[g], &results[g + 1], 2);
        double order = g == 0 ? 0.0 : log2(differences[g - 1] / differences[g]);
        print_message("smooth wave, %2d cells and %4.0f s to twice as fine: rms change %.2e m3/s, order %.2f\n",
                      24 << g, 1200.0 / (double)(1 << g), differences[g], order);
        /* centred in space and time, diffusion matched: second order (finer, the tables' own 0.003 % shows) */
        if (g > 0)
            assert_true(fabs(order - 2.0) <= 0.2);
    }
    for (size_t g = 0; g < GRIDS; g++)
        one_reach_result_clear(&results[g]);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(tables_give_the_flow_of_an_area_to_a_thousandth),
        cmocka_unit_test(diffusion_in_the_tables_is_the_rivers_own_or_the_least_allowed),
        cmocka_unit_test(bad_reaches_make_no_table),
        cmocka_unit_test(a_step_keeps_every_drop),
        cmocka_unit_test(a_steady_state_is_steady_with_side_inflow_and_without),
        cmocka_unit_test(any_bits_are_survived),
        cmocka_unit_test(volume_balances_over_a_flood_in_every_shape),
        cmocka_unit_test(a_pulse_into_a_dry_river_never_runs_backwards),
        cmocka_unit_test(no_random_river_runs_backwards_or_loses_water),
        cmocka_unit_test(peaks_stay_when_cells_and_steps_are_halved),
        cmocka_unit_test(a_smooth_wave_converges_at_second_order),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
