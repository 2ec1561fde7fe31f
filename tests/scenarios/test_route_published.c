/* SPDX-License-Identifier: MIT */
/* `forewater route` against published examples (tests/reference/), through files. */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>

#include <sysexits.h>

#include "tests/engine/reference_table.h"
#include "tests/scenarios/run_forewater.h"

#define DATA FW_SOURCE_DIR "/tests/data/route/"

static const double cubic_foot_m3 = 0.3048 * 0.3048 * 0.3048; /* exact */

static int open_scratch(void **state)
{
    struct scratch *scratch = calloc(1, sizeof *scratch);
    assert_non_null(scratch);
    *scratch = scratch_open();
    *state = scratch;
    return 0;
}

static int close_scratch(void **state)
{
    scratch_close(*state);
    free(*state);
    return 0;
}

/* --- Chow, Maidment and Mays (1988), Examples 9.6.1 and 9.3.1 --------------------------------------------------- */

/* 2000 cfs to 12 min, to 6000 at 60 min, to 2000 at 108 min, then 2000, in straight lines. */
static const char *chow_inflow(struct scratch *scratch)
{
    static const double minutes[] = {0, 12, 60, 108, 240}, cfs[] = {2000, 2000, 6000, 2000, 2000};
    char text[512] = "time,discharge_m3s\n";
    for (size_t i = 0; i < 5; i++)
        snprintf(text + strlen(text), sizeof text - strlen(text), "%.0f,%.10f\n", 60 * minutes[i],
                 cfs[i] * cubic_foot_m3);
    return scratch_inflow(scratch, "n0", text);
}

/*
 * All cells, 9 nodes at 61 times. The table is for alpha 3.49, and the configuration's n gives alpha 3.49 exactly: the
 * table's own tolerance of 0.01 cfs holds. The table prints 0.001 cfs, route 1e-6 m3/s = 0.00004 cfs.
 */
static void the_linear_scheme_gives_every_cell_of_the_published_table(void **state)
{
    struct run run =
        RUN(NULL, "route", "--config", DATA "chow1988_9_6_1.json", "--inflow", chow_inflow(*state), "--method",
            "kinematic-linear", "--cells", "8", "--step", "180", "--every", "180", "--until", "10800");
    assert_run(&run, EX_OK);
    struct routed routed = routed_read(&run);
    struct reference_table table = reference_table_load("chow1988_9_6_1_linear_kinematic.csv");
    assert_int_equal(table.row_count, 61);
    assert_int_equal(routed.row_count, table.row_count);
    double worst_cfs = 0.0;
    for (size_t row = 0; row < table.row_count; row++) {
        assert_near(strtod(routed_time(&routed, row), NULL), 60 * reference_table_number(&table, row, "t_min"), 0);
        for (int node = 0; node <= 8; node++) {
            char ours[32], theirs[32];
            snprintf(ours, sizeof ours, "n%d.discharge_m3s", node);
            snprintf(theirs, sizeof theirs, "Q_cfs_at_%d_ft", 3000 * node);
            double cfs = routed_value(&routed, row, ours) / cubic_foot_m3;
            assert_near(cfs, reference_table_number(&table, row, theirs), 0.01);
            worst_cfs = fmax(worst_cfs, fabs(cfs - reference_table_number(&table, row, theirs)));
        }
    }
    print_message("linear scheme, 549 cells: worst %.5f cfs\n", worst_cfs);
    reference_table_clear(&table);
    routed_clear(&routed);
    run_clear(&run);
}

/* --- FHWA HDS-5, equation 8 ------------------------------------------------------------------------------------- */

static double steady_stage_m(struct scratch *scratch, double flow_m3s, const char *column)
{
    char text[200];
    snprintf(text, sizeof text, "time,discharge_m3s\n0,%.9f\n3600,%.9f\n", flow_m3s, flow_m3s);
    struct run run = RUN(NULL, "route", "--config", DATA "weir_over_the_road.json", "--inflow",
                         scratch_inflow(scratch, "head", text));
    assert_run(&run, EX_OK);
    struct routed routed = routed_read(&run);
    double stage_m = routed_value(&routed, routed.row_count - 1, column);
    routed_clear(&routed);
    run_clear(&run);
    return stage_m;
}

/*
 * 300 cfs over 100 ft of road with 3.0 in US units is 1 ft of head. The part-blocked causeway at 30 m3/s as worked by hand
 * in tests/engine/test_structure_rating.c, water below drowning its pipe. Printed to 0.1 mm; rows within 0.5 mm.
 */
static void the_level_over_a_road_is_that_of_the_published_weir(void **state)
{
    struct reference_table table = reference_table_load("roadway_overtopping_weir.csv");
    size_t row = reference_table_find(&table, "item", "check: 3.0 US, L=100 ft, H=1 ft");
    double cfs = strtod(reference_table_text(&table, row, "value_US"), NULL);
    assert_near(steady_stage_m(*state, cfs * cubic_foot_m3, "ford.stage_m"), 1.2 + 0.3048, 0.0008);
    assert_near(steady_stage_m(*state, 30.0, "end.stage_m"), 2.2841, 0.0020);
    reference_table_clear(&table);
}

/* The first time at or after `from_s` at which a column passes a flow, upwards or downwards, between rows. */
static double passing_time_s(const struct routed *routed, const char *name, double flow_m3s, bool upwards)
{
    size_t first = upwards ? 1 : routed_peak_row(routed, name) + 1;
    for (size_t row = first; row < routed->row_count; row++) {
        double before = routed_value(routed, row - 1, name), after = routed_value(routed, row, name);
        if (upwards ? after >= flow_m3s : after <= flow_m3s) {
            double start_s = strtod(routed_time(routed, row - 1), NULL),
                   end_s = strtod(routed_time(routed, row), NULL);
            return start_s + (flow_m3s - before) / (after - before) * (end_s - start_s);
        }
    }
    return (double)INFINITY;
}

struct arrivals {
    double worst_min; /* of the published arrivals between base and peak */
    double peak_cfs;  /* at 24,000 ft */
    size_t count;
};

static struct arrivals route_arrivals(struct scratch *scratch, const char *cells, const char *step)
{
    struct run run = RUN(NULL, "route", "--config", DATA "chow1988_9_6_1.json", "--inflow", chow_inflow(scratch),
                         "--method", "kinematic", "--cells", cells, "--step", step, "--every", "15");
    assert_run(&run, EX_OK);
    struct routed routed = routed_read(&run);
    struct reference_table table = reference_table_load("kinematic_characteristics_exact.csv");
    struct arrivals arrivals = {0};
    for (size_t row = 0; row < table.row_count; row++) {
        double cfs = reference_table_number(&table, row, "Q_cfs");
        bool upwards = reference_table_number(&table, row, "t_inflow_min") < 60;
        if (cfs < 2500 || cfs > 5500)
            continue; /* base and peak: corners, which no moment marks */
        static const struct {
            const char *ours, *theirs;
        } places[] = {{"n5.discharge_m3s", "arrival_min_15000ft"}, {"n8.discharge_m3s", "arrival_min_24000ft"}};
        for (size_t place = 0; place < 2; place++) {
            double at_min = passing_time_s(&routed, places[place].ours, cfs * cubic_foot_m3, upwards) / 60;
            arrivals.worst_min =
                fmax(arrivals.worst_min, fabs(at_min - reference_table_number(&table, row, places[place].theirs)));
            arrivals.count++;
        }
    }
    arrivals.peak_cfs =
        routed_value(&routed, routed_peak_row(&routed, "n8.discharge_m3s"), "n8.discharge_m3s") / cubic_foot_m3;
    reference_table_clear(&table);
    routed_clear(&routed);
    run_clear(&run);
    return arrivals;
}

static void kinematic_arrivals_are_the_characteristics(void **state)
{
    /* cells of 100, 50 and 25 ft */
    struct arrivals coarse = route_arrivals(*state, "240", "8");
    struct arrivals middle = route_arrivals(*state, "480", "4");
    struct arrivals fine = route_arrivals(*state, "960", "2");
    assert_int_equal(coarse.count, 12);
    print_message("kinematic, cells of 100, 50, 25 ft: arrivals within %.2f, %.2f, %.2f min; peak at 24,000 ft %.0f, "
                  "%.0f, %.0f of 6000 cfs\n",
                  coarse.worst_min, middle.worst_min, fine.worst_min, coarse.peak_cfs, middle.peak_cfs,
                  fine.peak_cfs);
    assert_true(coarse.worst_min < 0.5); /* the table's own tolerance, at its own cell length */
    /* of the first order: halved with the cell (the table prints 0.01 min) */
    assert_true(middle.worst_min < 0.6 * coarse.worst_min + 0.01);
    assert_true(fine.worst_min < 0.6 * middle.worst_min + 0.01);
    /* the peak is a corner: what it lacks goes with the root of the cell, and it is never passed */
    double root = (6000 - middle.peak_cfs) / (6000 - fine.peak_cfs);
    assert_true(fine.peak_cfs < 6000 && fine.peak_cfs > 0.97 * 6000);
    assert_true(root > 1.2 && root < 1.7);
}

/* --- the Wye, December 1960 (NERC 1975) ------------------------------------------------------------------------- */

static struct routed route_wye(struct scratch *scratch, const char *config, const char *after, const char *until)
{
    struct reference_table table = reference_table_load("flood_wye1960.csv");
    char text[2048] = "time,discharge_m3s\n";
    for (size_t row = 0; row < table.row_count; row++)
        snprintf(text + strlen(text), sizeof text - strlen(text), "%.0f,%.0f\n",
                 3600 * reference_table_number(&table, row, "t_h"), reference_table_number(&table, row, "inflow"));
    snprintf(text + strlen(text), sizeof text - strlen(text), "%s", after);
    reference_table_clear(&table);
    struct run run = RUN(NULL, "route", "--config", config, "--inflow", scratch_inflow(scratch, "erwood", text),
                         "--step", "300", "--every", "300", "--until", until);
    assert_run(&run, EX_OK);
    struct routed routed = routed_read(&run);
    run_clear(&run);
    return routed;
}

/* Back to the flow it began with and on until that has come out: nothing is left in the reach that was not before. */
static void what_came_in_at_erwood_and_the_side_comes_out_at_belmont(void **state)
{
    struct routed routed = route_wye(*state, DATA "wye1960.json", "734400,154\n", "2000000");
    double in_m3 = 1.077 * routed_volume_m3(&routed, "erwood.discharge_m3s");
    double ratio = routed_volume_m3(&routed, "belmont.discharge_m3s") / in_m3;
    print_message("1960 flood: out by in and side %.9f\n", ratio);
    assert_near(ratio, 1.0, 1e-6);
    routed_clear(&routed);
}

/* Only what must hold is demanded; how near the record it comes is printed, and by tests/bench/wye_1960.sh. */
static void the_1960_flood_comes_later_and_flatter(void **state)
{
    struct reference_table table = reference_table_load("flood_wye1960.csv");
    struct routed routed = route_wye(*state, DATA "wye1960.json", "", "712800");
    double mean = 0.0, missed = 0.0, spread = 0.0, routed_sum = 0.0;
    for (size_t row = 0; row < table.row_count; row++)
        mean += reference_table_number(&table, row, "outflow") / (double)table.row_count;
    for (size_t row = 0; row < table.row_count; row++) {
        double observed = reference_table_number(&table, row, "outflow");
        double computed = routed_value(&routed, 72 * row, "belmont.discharge_m3s");
        missed += (computed - observed) * (computed - observed);
        spread += (observed - mean) * (observed - mean);
        routed_sum += computed;
    }
    for (size_t row = 0; row < routed.row_count; row++)
        assert_true(routed_value(&routed, row, "belmont.discharge_m3s") >= 0.0);
    size_t in = routed_peak_row(&routed, "erwood.discharge_m3s"),
           out = routed_peak_row(&routed, "belmont.discharge_m3s");
    double peak_m3s = routed_value(&routed, out, "belmont.discharge_m3s");
    print_message(
        "1960 flood: peak %.0f m3/s at %.1f h (observed 969 at 102), Nash-Sutcliffe %.3f, volume by observed "
        "volume %.3f\n",
        peak_m3s, 300.0 / 3600.0 * (double)out, 1.0 - missed / spread, routed_sum / mean / (double)table.row_count);
    assert_near(routed_value(&routed, in, "erwood.discharge_m3s"), 1145.0, 1e-6);
    assert_true(out > in);
    assert_true(peak_m3s < 1.077 * 1145.0); /* of all that flows in: the side inflow adds to the peak */
    reference_table_clear(&table);
    routed_clear(&routed);
}

/* Erwood's water alone, over the same reach: the peak cannot grow. */
static void without_side_inflow_the_peak_is_lower_than_erwood_s(void **state)
{
    static const char key[] = "\"share\": 0.077";
    char config[4096] = "";
    FILE *file = fopen(DATA "wye1960.json", "r");
    assert_non_null(file);
    size_t length = fread(config, 1, sizeof config - 1, file);
    assert_true(length > 0 && length < sizeof config - 1);
    fclose(file);
    char *share = strstr(config, key);
    assert_non_null(share);
    memcpy(share, "\"share\": 0.000", sizeof key - 1);
    struct routed routed = route_wye(*state, scratch_file(*state, "x.json", config), "", "712800");
    size_t in = routed_peak_row(&routed, "erwood.discharge_m3s"),
           out = routed_peak_row(&routed, "belmont.discharge_m3s");
    double peak_m3s = routed_value(&routed, out, "belmont.discharge_m3s");
    print_message("1960 flood without side inflow: peak %.0f m3/s at %.1f h\n", peak_m3s,
                  300.0 / 3600.0 * (double)out);
    assert_true(out > in);
    assert_true(peak_m3s < 1145.0);
    routed_clear(&routed);
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, open_scratch, close_scratch)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(the_linear_scheme_gives_every_cell_of_the_published_table),
        TEST(the_level_over_a_road_is_that_of_the_published_weir),
        TEST(kinematic_arrivals_are_the_characteristics),
        TEST(what_came_in_at_erwood_and_the_side_comes_out_at_belmont),
        TEST(the_1960_flood_comes_later_and_flatter),
        TEST(without_side_inflow_the_peak_is_lower_than_erwood_s),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
