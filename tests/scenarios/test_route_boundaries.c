/* SPDX-License-Identifier: MIT */
/* `forewater route` with what stands within a river and at its end: gauges in mid-river, levels that move. */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdbool.h>
#include <stdint.h>

#include <cmocka.h>

#include <math.h>
#include <sysexits.h>

#include "tests/scenarios/run_forewater.h"

#define DATA FW_SOURCE_DIR "/tests/data/route/"

static const double printed_m3s = 0.51e-6; /* route prints six digits of a discharge and four of a stage */
static const double printed_m = 0.51e-4;

static const char scar[] = "time,discharge_m3s\n0,20\n3600,60\n7200,30\n14400,20\n";
static const char mid[] = "time,discharge_m3s\n1800,27\n5400,41\n";
static const char mere[] = "time,stage_m\n0,103.1\n7200,104.3\n";

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

static double line_at(double t, double t0, double v0, double t1, double v1)
{
    return v0 + (v1 - v0) * (t - t0) / (t1 - t0);
}

/* Measured from 1800 to 5400 s: its flow goes on then, before and after what comes from above. */
static void a_gauge_in_mid_river_gives_what_it_measured_and_no_more(void **state)
{
    struct run run = RUN(NULL, "route", "--config", DATA "boundaries.json", "--inflow",
                         scratch_inflow(*state, "scar", scar), "--inflow", scratch_inflow(*state, "mid", mid),
                         "--inflow", scratch_inflow(*state, "mere", mere), "--every", "900");
    assert_run(&run, EX_OK);
    struct routed routed = routed_read(&run);
    double farthest = 0.0;
    for (size_t row = 0; row < routed.row_count; row++) {
        double time_s = atof(routed_time(&routed, row));
        double at_gauge = routed_value(&routed, row, "mid.discharge_m3s");
        double above = routed_value(&routed, row, "above.discharge_m3s");
        if (time_s < 1800.0 || time_s > 5400.0)
            assert_true(fabs(at_gauge - above) <= 2.0 * printed_m3s);
        else
            assert_true(fabs(at_gauge - line_at(time_s, 1800.0, 27.0, 5400.0, 41.0)) <= printed_m3s);
        farthest = fmax(farthest, fabs(at_gauge - above));
    }
    assert_true(farthest > 2.0);
    routed_clear(&routed);
    run_clear(&run);
}

/* The level at the shore is the gauge's less its reading at the bed; held after the last. */
static void an_outlet_follows_the_level_of_a_gauge(void **state)
{
    struct run run =
        RUN(NULL, "route", "--config", DATA "boundaries.json", "--inflow", scratch_inflow(*state, "scar", scar),
            "--inflow", scratch_inflow(*state, "mere", mere), "--every", "900"); /* mid has no file */
    assert_run(&run, EX_OK);
    struct routed routed = routed_read(&run);
    for (size_t row = 0; row < routed.row_count; row++) {
        double time_s = atof(routed_time(&routed, row));
        double reading = time_s < 7200.0 ? line_at(time_s, 0.0, 103.1, 7200.0, 104.3) : 104.3;
        assert_true(fabs(routed_value(&routed, row, "mere.stage_m") - reading) <= printed_m);
        assert_true(fabs(routed_value(&routed, row, "shore.stage_m") - (reading - 100.2)) <= printed_m);
        size_t unknown = (row + 1) * routed.column_count + routed_column(&routed, "mere.discharge_m3s");
        assert_string_equal(routed.cell[unknown], "nan");
        assert_true(fabs(routed_value(&routed, row, "mid.discharge_m3s") -
                         routed_value(&routed, row, "above.discharge_m3s")) <= 2.0 * printed_m3s);
    }
    routed_clear(&routed);
    run_clear(&run);
}

static void an_outlet_follows_a_series(void **state)
{
    struct run run = RUN(NULL, "route", "--config", DATA "tide.json", "--inflow",
                         scratch_inflow(*state, "scar", scar), "--every", "900");
    assert_run(&run, EX_OK);
    struct routed routed = routed_read(&run);
    for (size_t row = 0; row < routed.row_count; row++) {
        double time_s = atof(routed_time(&routed, row));
        double level = time_s <= 3600.0   ? line_at(time_s, 0.0, 3.0, 3600.0, 4.5)
                       : time_s <= 7200.0 ? line_at(time_s, 3600.0, 4.5, 7200.0, 2.5)
                                          : 2.5;
        assert_true(fabs(routed_value(&routed, row, "shore.stage_m") - level) <= printed_m);
    }
    routed_clear(&routed);
    run_clear(&run);
}

/* At the river's end a gauge changes nothing: its own column is what it measured, where it did. */
static void a_gauge_at_the_end_of_the_river_changes_nothing(void **state)
{
    static const char config[] =
        "{ \"gauges\": [ { \"id\": \"scar\" }, { \"id\": \"end\", \"measures\": \"discharge\" } ],\n"
        "  \"sections\": [ { \"id\": \"s\", \"shape\": \"wide\", \"bottom_m\": 30, \"n\": 0.03 } ],\n"
        "  \"reaches\": [ { \"id\": \"r\", \"from\": \"scar\", \"to\": \"end\", \"length_m\": 4000, \"slope\": "
        "0.002,\n"
        "    \"section\": \"s\" } ], \"points\": [ { \"id\": \"foot\", \"reach\": \"r\", \"at_m\": 4000 } ] }\n";
    const char *path = scratch_file(*state, "x.json", config);
    struct run alone = RUN(NULL, "route", "--config", path, "--inflow", scratch_inflow(*state, "scar", scar));
    struct run with = RUN(NULL, "route", "--config", path, "--inflow", scratch_inflow(*state, "scar", scar),
                          "--inflow", scratch_inflow(*state, "end", mid), "--every", "3600");
    assert_run(&alone, EX_OK);
    assert_run(&with, EX_OK);
    struct routed first = routed_read(&alone), second = routed_read(&with);
    assert_int_equal(first.row_count, second.row_count);
    for (size_t row = 0; row < first.row_count; row++) {
        double time_s = atof(routed_time(&second, row));
        size_t own = (row + 1) * second.column_count + routed_column(&second, "end.discharge_m3s");
        assert_true(routed_value(&first, row, "foot.discharge_m3s") ==
                    routed_value(&second, row, "foot.discharge_m3s"));
        assert_string_equal(first.cell[(row + 1) * first.column_count + routed_column(&first, "end.discharge_m3s")],
                            "nan");
        if (time_s >= 1800.0 && time_s <= 5400.0)
            assert_true(fabs(atof(second.cell[own]) - line_at(time_s, 1800.0, 27.0, 5400.0, 41.0)) <= printed_m3s);
        else
            assert_string_equal(second.cell[own], "nan");
    }
    routed_clear(&first);
    routed_clear(&second);
    run_clear(&alone);
    run_clear(&with);
}

/* Q = 1.7 x 12 H^1.5 over a crest of 1.1 m; auto takes the full equations there. By a method that cannot, it is refused. */
static void a_weir_at_a_foot_gives_the_level_above_it(void **state)
{
    static const char flows[] = "time,discharge_m3s\n0,25\n7200,25\n10800,42\n36000,42\n";
    struct run run = RUN(NULL, "route", "--config", DATA "weir.json", "--inflow",
                         scratch_inflow(*state, "scar", flows), "--every", "3600");
    assert_run(&run, EX_OK);
    struct routed routed = routed_read(&run);
    for (size_t i = 0; i < 2; i++) {
        size_t row = i == 0 ? 0 : routed.row_count - 1;
        double flow = i == 0 ? 25.0 : 42.0;
        assert_true(fabs(routed_value(&routed, row, "above.discharge_m3s") - flow) <= 1e-3);
        assert_true(fabs(routed_value(&routed, row, "above.stage_m") - 1.1 - pow(flow / (1.7 * 12.0), 2.0 / 3.0)) <=
                    1e-3);
    }
    routed_clear(&routed);
    run_clear(&run);
    run = RUN(NULL, "route", "--config", DATA "weir.json", "--method", "kinematic", "--inflow",
              scratch_inflow(*state, "scar", flows));
    assert_run(&run, EX_DATAERR);
    assert_says(run.errors, "reach 'upper': foot_structure: needs method auto, dynamic or diffusive");
    run_clear(&run);
}

static void what_is_missing_or_unfit_is_named(void **state)
{
    static const char utc[] = "time,discharge_m3s\n2031-02-14T20:00:00Z,6.7\n2031-02-14T20:10:00Z,6.7\n";
    static const char high[] = "time,stage_m\n0,103.1\n7200,1043\n";
    const struct {
        const char *config, *first, *second;
        int code;
        const char *says;
    } cases[] = {
        {DATA "boundaries.json", scratch_inflow(*state, "scar", scar), NULL, EX_USAGE,
         "gauge 'mere' has no file: expected --inflow mere=FILE.csv"},
        {DATA "boundaries.json", scratch_inflow(*state, "scar", scar), scratch_inflow(*state, "mere", mid),
         EX_DATAERR, ":1: the header has no column 'stage_m', but gauge 'mere' gives the level of an outlet"},
        {DATA "boundaries.json", scratch_inflow(*state, "scar", scar), scratch_inflow(*state, "mere", high),
         EX_DATAERR, ":3: stage_m: '1043': expected -1000 to 1000 m"},
        {DATA "tide.json", scratch_inflow(*state, "scar", utc), NULL, EX_DATAERR,
         "reach 'lower': outlet.stage_series: its times are seconds, those of the inflow are not"},
    };
    for (size_t i = 0; i < sizeof cases / sizeof *cases; i++) {
        struct run run = cases[i].second == NULL
                             ? RUN(NULL, "route", "--config", cases[i].config, "--inflow", cases[i].first)
                             : RUN(NULL, "route", "--config", cases[i].config, "--inflow", cases[i].first, "--inflow",
                                   cases[i].second);
        assert_run(&run, cases[i].code);
        assert_says(run.errors, cases[i].says);
        assert_string_equal(run.output, "");
        run_clear(&run);
    }
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test_setup_teardown(a_gauge_in_mid_river_gives_what_it_measured_and_no_more, open_scratch,
                                        close_scratch),
        cmocka_unit_test_setup_teardown(an_outlet_follows_the_level_of_a_gauge, open_scratch, close_scratch),
        cmocka_unit_test_setup_teardown(an_outlet_follows_a_series, open_scratch, close_scratch),
        cmocka_unit_test_setup_teardown(a_gauge_at_the_end_of_the_river_changes_nothing, open_scratch, close_scratch),
        cmocka_unit_test_setup_teardown(a_weir_at_a_foot_gives_the_level_above_it, open_scratch, close_scratch),
        cmocka_unit_test_setup_teardown(what_is_missing_or_unfit_is_named, open_scratch, close_scratch),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
