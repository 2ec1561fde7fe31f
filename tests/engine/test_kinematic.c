/* SPDX-License-Identifier: MIT */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <math.h>
#include <stdlib.h>
#include <string.h>

#include "engine/kinematic.h"
#include "engine/network.h"
#include "tests/engine/reference_table.h"

#define NOT_A_NUMBER ((double)NAN)
#define ENDLESS ((double)INFINITY)

/* --- the published example: a channel 200 ft wide, in feet and seconds ---------------------------------------------
 * Chow, Maidment and Mays (1988), Examples 9.3.1 and 9.6.1. Manning with 1.49, wetted perimeter = width.
 */

static const double width_ft = 200.0, bed_slope = 0.01, beta = 0.6;
static const double alpha = 3.49; /* rounded as printed; Manning's n is then 0.03498 for 0.035 */

static double inflow_cfs(double t_min)
{
    if (t_min <= 12.0 || t_min >= 108.0)
        return 2000.0;
    return t_min <= 60.0 ? 2000.0 + (t_min - 12.0) * (4000.0 / 48.0) : 6000.0 - (t_min - 60.0) * (4000.0 / 48.0);
}

static void the_published_example_comes_out_cell_by_cell(void **state)
{
    (void)state;
    enum { NODES = 9 };
    const struct kinematic_channel channel = {
        .alpha = alpha, .beta = beta, .cell_length = 3000.0, .time_step = 180.0};
    struct reference_table table = reference_table_load("chow1988_9_6_1_linear_kinematic.csv");
    double discharge[NODES];
    double worst = 0.0;
    assert_int_equal(table.row_count, 61);
    for (size_t i = 0; i < NODES; i++)
        discharge[i] = 2000.0;
    for (size_t row = 0; row < table.row_count; row++) {
        double t_min = reference_table_number(&table, row, "t_min");
        if (row > 0)
            assert_int_equal(kinematic_linear_step(&channel, NODES, inflow_cfs(t_min), NULL, discharge), FW_OK);
        for (size_t i = 0; i < NODES; i++) {
            char column[32];
            snprintf(column, sizeof column, "Q_cfs_at_%zu_ft", i * 3000);
            double expected = reference_table_number(&table, row, column);
            worst = fmax(worst, fabs(discharge[i] - expected));
            if (!(fabs(discharge[i] - expected) <= 0.01))
                fail_msg("%g min, %s: %.4f, expected %.3f", t_min, column, discharge[i], expected);
        }
    }
    print_message("Chow 1988, Example 9.6.1: 549 cells, largest difference %.4f cfs\n", worst);
    reference_table_clear(&table);
}

/* --- convergence to the exact solution by characteristics
 * --------------------------------------------------------- */

enum { PLACES = 2, GRIDS = 4 };
static const double place_ft[PLACES] = {15000.0, 24000.0};
static const double duration_min = 180.0;
static const double length_ft = 24000.0;

struct hydrographs { /* at the two places */
    size_t step_count;
    double time_step_s;
    double *discharge_cfs[PLACES];
};

static struct hydrographs make_hydrographs(double time_step_s)
{
    struct hydrographs made = {.step_count = (size_t)lround(duration_min * 60.0 / time_step_s),
                               .time_step_s = time_step_s};
    for (size_t place = 0; place < PLACES; place++) {
        made.discharge_cfs[place] = calloc(made.step_count + 1, sizeof(double));
        assert_non_null(made.discharge_cfs[place]);
    }
    return made;
}

static void clear_hydrographs(struct hydrographs *hydrographs)
{
    for (size_t place = 0; place < PLACES; place++)
        free(hydrographs->discharge_cfs[place]);
}

static struct hydrographs route_by_linear_scheme(double cell_ft, double time_step_s)
{
    const struct kinematic_channel channel = {
        .alpha = alpha, .beta = beta, .cell_length = cell_ft, .time_step = time_step_s};
    struct hydrographs made = make_hydrographs(time_step_s);
    size_t node_count = (size_t)lround(length_ft / cell_ft) + 1;
    double *discharge = calloc(node_count, sizeof *discharge);
    assert_non_null(discharge);
    for (size_t i = 0; i < node_count; i++)
        discharge[i] = 2000.0;
    for (size_t step = 0; step <= made.step_count; step++) {
        double t_min = (double)step * time_step_s / 60.0;
        if (step > 0)
            assert_int_equal(kinematic_linear_step(&channel, node_count, inflow_cfs(t_min), NULL, discharge), FW_OK);
        for (size_t place = 0; place < PLACES; place++)
            made.discharge_cfs[place][step] = discharge[lround(place_ft[place] / cell_ft)];
    }
    free(discharge);
    return made;
}

/* The same channel in metres: A = alpha Q^beta is kept, which gives n. */
static struct hydrographs route_by_network(enum network_method method, double cell_ft, double time_step_s)
{
    const double foot_m = 0.3048;
    const double cfs_m3s = foot_m * foot_m * foot_m;
    const struct section wide = {.shape = SECTION_WIDE,
                                 .bottom_m = width_ft * foot_m,
                                 .roughness_n = pow(alpha, 1.0 / beta) * sqrt(bed_slope) /
                                                (pow(width_ft, 2.0 / 3.0) * cbrt(foot_m))};
    const struct network_reach reach = {.id = "published channel",
                                        .from_node = 0,
                                        .to_node = 1,
                                        .length_m = length_ft * foot_m,
                                        .slope_m_per_m = bed_slope,
                                        .section = &wide,
                                        .cell_m = cell_ft * foot_m,
                                        .method = method};
    const struct network_point points[PLACES] = {{.id = "15000 ft", .at_m = place_ft[0] * foot_m},
                                                 {.id = "24000 ft", .at_m = place_ft[1] * foot_m}};
    const size_t gauge_node = 0;
    const double factor = 1.0;
    const struct network_river river = {.node_count = 2,
                                        .gauge_count = 1,
                                        .gauge_node = &gauge_node,
                                        .reach_count = 1,
                                        .reaches = &reach,
                                        .point_count = PLACES,
                                        .points = points};
    const struct network_options options = {.time_step_s = time_step_s,
                                            .group_count = 1,
                                            .roughness_factors = &factor,
                                            .members_per_group = 1,
                                            .largest_discharge_m3s = 6000.0 * cfs_m3s};
    struct hydrographs made = make_hydrographs(time_step_s);
    struct network *network = NULL;
    struct network_fault fault = {""};
    double *inflow = calloc(made.step_count + 1, sizeof *inflow);
    double *outflow = calloc(PLACES * (made.step_count + 1), sizeof *outflow);
    assert_non_null(inflow);
    assert_non_null(outflow);
    if (network_create(&river, &options, &network, &fault) != FW_OK)
        fail_msg("%s", fault.text);
    for (size_t step = 0; step <= made.step_count; step++)
        inflow[step] = cfs_m3s * inflow_cfs((double)step * time_step_s / 60.0);
    assert_int_equal(network_start_steady(network, inflow), FW_OK);
    assert_int_equal(network_advance(network, made.step_count, inflow, outflow), FW_OK);
    for (size_t place = 0; place < PLACES; place++)
        for (size_t step = 0; step <= made.step_count; step++)
            made.discharge_cfs[place][step] = outflow[place * (made.step_count + 1) + step] / cfs_m3s;
    network_destroy(network);
    free(inflow);
    free(outflow);
    return made;
}

/* When a hydrograph passes a flow on its first rise, or on its last fall; straight line between steps. */
static double crossing_min(const struct hydrographs *hydrographs, size_t place, double discharge_cfs, bool is_rise)
{
    const double *flow = hydrographs->discharge_cfs[place];
    size_t count = hydrographs->step_count;
    for (size_t i = 0; i < count; i++) {
        size_t step = is_rise ? i : count - 1 - i;
        double before = flow[step] - discharge_cfs;
        double after = flow[step + 1] - discharge_cfs;
        if (is_rise ? before < 0.0 && after >= 0.0 : before >= 0.0 && after < 0.0)
            return ((double)step + before / (before - after)) * hydrographs->time_step_s / 60.0;
    }
    return NOT_A_NUMBER;
}

struct accuracy {
    double worst_arrival_min, sum_arrival_min, peak_shortfall_cfs;
};

/* Against every row whose flow is passed (the base flow is never crossed, the peak only approached). */
static struct accuracy measure(const struct hydrographs *hydrographs, const struct reference_table *table)
{
    static const char *const arrival_column[PLACES] = {"arrival_min_15000ft", "arrival_min_24000ft"};
    struct accuracy accuracy = {0};
    size_t compared = 0;
    for (size_t row = 0; row < table->row_count; row++) {
        double t_inflow_min = reference_table_number(table, row, "t_inflow_min");
        double discharge = reference_table_number(table, row, "Q_cfs");
        if (discharge <= 2000.0 || discharge >= 6000.0)
            continue;
        for (size_t place = 0; place < PLACES; place++) {
            /* the table is rounded to 0.01 min; its own closed form, checked against it here, is not */
            double celerity = pow(discharge, 1.0 - beta) / (alpha * beta);
            double exact = t_inflow_min + place_ft[place] / celerity / 60.0;
            assert_true(fabs(exact - reference_table_number(table, row, arrival_column[place])) <= 0.0051);
            double error = fabs(crossing_min(hydrographs, place, discharge, t_inflow_min < 60.0) - exact);
            accuracy.worst_arrival_min = fmax(accuracy.worst_arrival_min, error);
            accuracy.sum_arrival_min += error;
            compared++;
        }
    }
    assert_int_equal(compared, 12);
    double peak = 0.0;
    for (size_t step = 0; step <= hydrographs->step_count; step++)
        peak = fmax(peak, hydrographs->discharge_cfs[1][step]);
    accuracy.peak_shortfall_cfs = 6000.0 - peak;
    return accuracy;
}

enum scheme { LINEAR_STEP, LINEAR_NETWORK, NONLINEAR_NETWORK };
static const char *const scheme_name[] = {"published linear scheme", "kinematic-linear in the network",
                                          "kinematic (storage form)"};

static struct hydrographs route(enum scheme scheme, double cell_ft, double time_step_s)
{
    if (scheme == LINEAR_STEP)
        return route_by_linear_scheme(cell_ft, time_step_s);
    return route_by_network(scheme == LINEAR_NETWORK ? NETWORK_KINEMATIC_LINEAR : NETWORK_KINEMATIC, cell_ft,
                            time_step_s);
}

static void arrivals_converge_to_the_characteristics_at_first_order(void **state)
{
    (void)state;
    static const double cell_ft[GRIDS] = {200.0, 100.0, 50.0, 25.0};
    struct reference_table table = reference_table_load("kinematic_characteristics_exact.csv");
    for (enum scheme scheme = LINEAR_STEP; scheme <= NONLINEAR_NETWORK; scheme++) {
        struct accuracy accuracy[GRIDS];
        for (size_t grid = 0; grid < GRIDS; grid++) {
            struct hydrographs routed = route(scheme, cell_ft[grid], cell_ft[grid] / 20.0);
            accuracy[grid] = measure(&routed, &table);
            clear_hydrographs(&routed);
            double order =
                grid == 0 ? 0.0 : log2(accuracy[grid - 1].sum_arrival_min / accuracy[grid].sum_arrival_min);
            print_message(
                "%s, dx %3.0f ft, dt %4.1f s: worst arrival error %.3f min, order %.2f, peak %.1f cfs low\n",
                scheme_name[scheme], cell_ft[grid], cell_ft[grid] / 20.0, accuracy[grid].worst_arrival_min, order,
                accuracy[grid].peak_shortfall_cfs);
            if (cell_ft[grid] <= 100.0)
                assert_true(accuracy[grid].worst_arrival_min <= 0.5);
            /* first order, as an upwind scheme must be; at the finest cells of the storage form the tables' own
             * error, a ten-thousandth of the flow, shows through */
            if (grid > 0 && (scheme != NONLINEAR_NETWORK || grid + 1 < GRIDS))
                assert_true(order > 0.85 && order < 1.3);
            /* a corner is cut by the scheme's diffusion, which goes as the cell: the peak fills up as its root or
             * better */
            if (grid > 0)
                assert_true(accuracy[grid].peak_shortfall_cfs < 0.75 * accuracy[grid - 1].peak_shortfall_cfs);
        }
        assert_true(accuracy[GRIDS - 1].peak_shortfall_cfs >= -1e-6);
        assert_true(accuracy[GRIDS - 1].peak_shortfall_cfs <= 0.02 * 6000.0);
    }
    reference_table_clear(&table);
}

static void the_network_runs_the_published_scheme_itself(void **state)
{
    (void)state;
    struct hydrographs alone = route_by_linear_scheme(3000.0, 180.0);
    struct hydrographs network = route_by_network(NETWORK_KINEMATIC_LINEAR, 3000.0, 180.0);
    for (size_t place = 0; place < PLACES; place++)
        for (size_t step = 0; step <= alone.step_count; step++)
            assert_true(fabs(network.discharge_cfs[place][step] - alone.discharge_cfs[place][step]) <= 1e-8);
    clear_hydrographs(&alone);
    clear_hydrographs(&network);
}

/* --- side inflow, dry beds, refusals
 * ------------------------------------------------------------------------------ */

static void steady_side_inflow_adds_up_along_the_channel(void **state)
{
    (void)state;
    const struct kinematic_channel channel = {.alpha = 1.7, .beta = 0.63, .cell_length = 31.0, .time_step = 17.0};
    const double lateral[4] = {0.003, 0.0, 0.011, 0.0007};
    double discharge[5] = {0.0};
    for (int step = 0; step < 4000; step++)
        assert_int_equal(kinematic_linear_step(&channel, 5, 0.21, lateral, discharge), FW_OK);
    double expected = 0.21;
    for (size_t i = 0; i < 4; i++) {
        expected += 31.0 * lateral[i];
        assert_true(fabs(discharge[i + 1] - expected) <= 1e-12);
    }
}

static void a_dry_bed_stays_dry_until_water_enters(void **state)
{
    (void)state;
    const struct kinematic_channel channel = {.alpha = 1.7, .beta = 0.6, .cell_length = 31.0, .time_step = 17.0};
    const double lateral[3] = {0.0, 0.002, 0.0};
    double discharge[4] = {0.0};
    assert_int_equal(kinematic_linear_step(&channel, 4, 0.0, NULL, discharge), FW_OK);
    for (size_t i = 0; i < 4; i++)
        assert_true(discharge[i] == 0.0);
    assert_int_equal(kinematic_linear_step(&channel, 4, 0.0, lateral, discharge), FW_OK);
    assert_true(discharge[0] == 0.0 && discharge[1] == 0.0);
    assert_true(discharge[2] > 0.0 && discharge[2] < 31.0 * 0.002);
    assert_true(discharge[3] > 0.0 && discharge[3] < discharge[2]);
}

static void bad_input_is_refused_and_changes_nothing(void **state)
{
    (void)state;
    static const struct kinematic_channel good = {3.49, 0.6, 3000.0, 180.0};
    static const struct {
        struct kinematic_channel channel;
        size_t node_count;
        double inflow, lateral, discharge;
        const char *shows;
    } rows[] = {
        {{3.49, 0.6, 3000.0, 180.0}, 1, 5.0, 0.0, 7.0, "one node"},
        {{0.0, 0.6, 3000.0, 180.0}, 3, 5.0, 0.0, 7.0, "alpha 0"},
        {{-3.0, 0.6, 3000.0, 180.0}, 3, 5.0, 0.0, 7.0, "alpha negative"},
        {{NOT_A_NUMBER, 0.6, 3000.0, 180.0}, 3, 5.0, 0.0, 7.0, "alpha not a number"},
        {{3.49, 0.0, 3000.0, 180.0}, 3, 5.0, 0.0, 7.0, "beta 0"},
        {{3.49, ENDLESS, 3000.0, 180.0}, 3, 5.0, 0.0, 7.0, "beta infinite"},
        {{3.49, 0.6, 0.0, 180.0}, 3, 5.0, 0.0, 7.0, "cell 0"},
        {{3.49, 0.6, 3000.0, 0.0}, 3, 5.0, 0.0, 7.0, "step 0"},
        {{3.49, 0.6, 3000.0, 180.0}, 3, -5.0, 0.0, 7.0, "inflow negative"},
        {{3.49, 0.6, 3000.0, 180.0}, 3, NOT_A_NUMBER, 0.0, 7.0, "inflow not a number"},
        {{3.49, 0.6, 3000.0, 180.0}, 3, 5.0, -0.1, 7.0, "side inflow negative"},
        {{3.49, 0.6, 3000.0, 180.0}, 3, 5.0, ENDLESS, 7.0, "side inflow infinite"},
        {{3.49, 0.6, 3000.0, 180.0}, 3, 5.0, 0.0, -7.0, "discharge negative"},
        {{3.49, 0.6, 3000.0, 180.0}, 3, 5.0, 0.0, NOT_A_NUMBER, "discharge not a number"},
    };
    for (size_t i = 0; i < sizeof rows / sizeof *rows; i++) {
        double discharge[3] = {6.0, 6.5, rows[i].discharge};
        const double before[3] = {6.0, 6.5, rows[i].discharge};
        const double lateral[2] = {0.0, rows[i].lateral};
        if (kinematic_linear_step(&rows[i].channel, rows[i].node_count, rows[i].inflow, lateral, discharge) !=
            FW_BAD_INPUT)
            fail_msg("accepted: %s", rows[i].shows);
        assert_memory_equal(discharge, before, sizeof before);
    }
    double discharge[3] = {6.0, 6.5, 7.0};
    const double lateral[2] = {0.0, 0.1};
    assert_int_equal(kinematic_linear_step(&good, 3, 5.0, lateral, discharge), FW_OK); /* the rows' near miss */
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(the_published_example_comes_out_cell_by_cell),
        cmocka_unit_test(arrivals_converge_to_the_characteristics_at_first_order),
        cmocka_unit_test(the_network_runs_the_published_scheme_itself),
        cmocka_unit_test(steady_side_inflow_adds_up_along_the_channel),
        cmocka_unit_test(a_dry_bed_stays_dry_until_water_enters),
        cmocka_unit_test(bad_input_is_refused_and_changes_nothing),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
