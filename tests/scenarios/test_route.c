/* SPDX-License-Identifier: MIT */
/* The contract of `forewater route`, through files and pipes: times, columns, options, the tree, side inflow. */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdbool.h>
#include <stdint.h>

#include <cmocka.h>

#include <sysexits.h>

#include "tests/scenarios/run_forewater.h"

#define DATA FW_SOURCE_DIR "/tests/data/route/"

/* route prints discharges with six digits and stages with four: half of the last one, and a hair */
static const double printed_m3s = 0.51e-6;
static const double printed_m = 0.51e-4;

static const char flood[] = "time,discharge_m3s\n0,6.7\n600,6.7\n4200,38.3\n9000,11.9\n14400,6.7\n";
static const char same_flood_utc[] =
    "time,discharge_m3s\n2031-02-14T20:00:00Z,6.7\n2031-02-14T20:10:00Z,6.7\n"
    "2031-02-14T21:10:00Z,38.3\n2031-02-14T22:30:00Z,11.9\n2031-02-15T00:00:00Z,6.7\n";
static const char same_flood_local[] =
    "time,discharge_m3s\n2031-02-14T21:00:00+01:00,6.7\n2031-02-14T21:10:00+01:00,6.7\n"
    "2031-02-14T22:10:00+01:00,38.3\n2031-02-14T23:30:00+01:00,11.9\n2031-02-15T01:00:00+01:00,6.7\n";
static const char beck_flood[] = "time,discharge_m3s\n0,1.9\n1800,1.9\n3600,13.7\n7200,1.9\n14400,1.9\n";

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

/* --- seasons ---------------------------------------------------------------------------------------------------- */

/*
 * The same flood on three dates: what the season's n gives is what that n stated gives, by the district's clock (18:00
 * UTC on 31 May is June there). Plain seconds have no date: as stated.
 */
static void the_roughness_is_that_of_the_first_rows_date(void **state)
{
    static const char seasonal[] =
        "{ \"district\": { \"name\": \"D\", \"zone\": \"+08:00\" }, \"gauges\": [ { \"id\": \"head\" } ],\n"
        "  \"sections\": [ { \"id\": \"s\", \"shape\": \"trapezoid\", \"bottom_m\": 14, \"side\": 2.0, \"n\": 0.04,\n"
        "    \"seasons\": [ { \"from\": \"06-01\", \"n_factor\": 1.25 }, { \"from\": \"09-01\", \"n_factor\": 1 } ] "
        "} ],\n"
        "  \"reaches\": [ { \"id\": \"r\", \"from\": \"head\", \"to\": \"end\", \"length_m\": 9000, \"slope\": "
        "0.0024,\n"
        "    \"section\": \"s\" } ], \"points\": [ { \"id\": \"end\" } ] }\n";
    static const char stated[] = "{ \"gauges\": [ { \"id\": \"head\" } ],\n"
                                 "  \"sections\": [ { \"id\": \"s\", \"shape\": \"trapezoid\", \"bottom_m\": 14, "
                                 "\"side\": 2.0, \"n\": %s } ],\n"
                                 "  \"reaches\": [ { \"id\": \"r\", \"from\": \"head\", \"to\": \"end\", "
                                 "\"length_m\": 9000, \"slope\": 0.0024,\n"
                                 "    \"section\": \"s\" } ], \"points\": [ { \"id\": \"end\" } ] }\n";
    static const struct {
        const char *from, *then, *peak, *n;
    } rows[] = {{"2031-05-31T15:59:00Z", "2031-05-31T16:59:00Z", "2031-05-31T18:29:00Z", "0.04"},
                {"2031-05-31T16:00:00Z", "2031-05-31T17:00:00Z", "2031-05-31T18:30:00Z", "0.05"},
                {"2031-09-01T00:00:00Z", "2031-09-01T01:00:00Z", "2031-09-01T02:30:00Z", "0.04"},
                {"0", "3600", "9000", "0.04"}};
    for (size_t i = 0; i < sizeof rows / sizeof *rows; i++) {
        double volume[2], last[2];
        for (int is_stated = 0; is_stated < 2; is_stated++) {
            char config[1000], flood_text[200];
            snprintf(config, sizeof config, stated, rows[i].n);
            snprintf(flood_text, sizeof flood_text, "time,discharge_m3s\n%s,6.7\n%s,38.3\n%s,11.9\n", rows[i].from,
                     rows[i].then, rows[i].peak);
            struct run run =
                RUN(NULL, "route", "--config", scratch_file(*state, "x.json", is_stated ? config : seasonal),
                    "--inflow", scratch_inflow(*state, "head", flood_text), "--every", "60");
            assert_run(&run, EX_OK);
            struct routed routed = routed_read(&run);
            last[is_stated] = routed_value(&routed, routed.row_count - 1, "end.stage_m");
            volume[is_stated] = 0.0;
            for (size_t row = 0; row < routed.row_count; row++)
                volume[is_stated] += routed_value(&routed, row, "end.discharge_m3s");
            routed_clear(&routed);
            run_clear(&run);
        }
        assert_near(volume[0], volume[1], 1e-9);
        assert_near(last[0], last[1], 1e-9);
    }
}

/* --- times and columns ------------------------------------------------------------------------------------------ */

static void times_go_out_as_they_came_in(void **state)
{
    static const struct {
        const char *text, *first, *second, *last, *until;
    } cases[] = {
        {flood, "0", "600", "14400", "14400"},
        {"time,discharge_m3s\n-300.5,6.7\n299.5,7.1\n", "-300.5", "299.5", "1499.5", "1500"},
        {same_flood_utc, "2031-02-14T20:00:00Z", "2031-02-14T20:10:00Z", "2031-02-15T00:00:00Z",
         "2031-02-15T00:00:00Z"},
        {same_flood_local, "2031-02-14T21:00:00+01:00", "2031-02-14T21:10:00+01:00", "2031-02-15T01:00:00+01:00",
         "2031-02-15T00:00:00Z"},
        {"time,discharge_m3s\n2031-02-14T15:30:00-04:30,6.7\n2031-02-14T15:40:00-04:30,7.1\n",
         "2031-02-14T15:30:00-04:30", "2031-02-14T15:40:00-04:30", "2031-02-14T16:00:00-04:30",
         "2031-02-14T21:30:00+01:00"},
    };
    for (size_t i = 0; i < sizeof cases / sizeof cases[0]; i++) {
        struct run run = RUN(NULL, "route", "--config", DATA "one_reach.json", "--inflow",
                             scratch_inflow(*state, "head", cases[i].text), "--until", cases[i].until);
        assert_run(&run, EX_OK);
        struct routed routed = routed_read(&run);
        assert_string_equal(routed_time(&routed, 0), cases[i].first);
        assert_string_equal(routed_time(&routed, 1), cases[i].second);
        assert_string_equal(routed_time(&routed, routed.row_count - 1), cases[i].last);
        routed_clear(&routed);
        run_clear(&run);
    }
}

static void the_way_time_is_written_changes_no_flow(void **state)
{
    const char *texts[] = {flood, same_flood_utc, same_flood_local};
    struct routed routed[3];
    for (size_t i = 0; i < 3; i++) {
        struct run run = RUN(NULL, "route", "--config", DATA "one_reach.json", "--inflow",
                             scratch_inflow(*state, "head", texts[i]));
        assert_run(&run, EX_OK);
        routed[i] = routed_read(&run);
        run_clear(&run);
        assert_int_equal(routed[i].row_count, routed[0].row_count);
        for (size_t row = 0; row < routed[0].row_count; row++)
            for (size_t column = 1; column < routed[0].column_count; column++)
                assert_string_equal(routed[i].cell[(row + 1) * routed[i].column_count + column],
                                    routed[0].cell[(row + 1) * routed[0].column_count + column]);
    }
    for (size_t i = 0; i < 3; i++)
        routed_clear(&routed[i]);
}

static void columns_are_gauges_then_points_in_the_order_of_the_configuration(void **state)
{
    struct run run = RUN(NULL, "route", "--config", DATA "tree.json", "--inflow",
                         scratch_inflow(*state, "upper-sethick", beck_flood), "--inflow",
                         scratch_inflow(*state, "orlin-scar", flood));
    assert_run(&run, EX_OK);
    static const char header[] =
        "time,orlin-scar.discharge_m3s,orlin-scar.stage_m,upper-sethick.discharge_m3s,upper-sethick.stage_m,"
        "above-meeting.discharge_m3s,above-meeting.stage_m,beck-foot.discharge_m3s,beck-foot.stage_m,"
        "meeting.discharge_m3s,meeting.stage_m,mill-ford.discharge_m3s,mill-ford.stage_m,"
        "end.discharge_m3s,end.stage_m\n";
    assert_int_equal(strncmp(run.output, header, strlen(header)), 0);
    assert_string_equal(run.errors, "");
    run_clear(&run);
}

static void inflow_may_come_through_a_pipe(void **state)
{
    struct run by_file =
        RUN(NULL, "route", "--config", DATA "one_reach.json", "--inflow", scratch_inflow(*state, "head", flood));
    struct run by_pipe = RUN(flood, "route", "--config", DATA "one_reach.json", "--inflow", "head=/dev/stdin");
    assert_run(&by_pipe, EX_OK);
    assert_string_equal(by_pipe.output, by_file.output);
    run_clear(&by_file);
    run_clear(&by_pipe);
}

static void comments_blank_lines_and_other_columns_are_passed_over(void **state)
{
    static const char decorated[] = "# a note\n\"discharge_m3s\",who,time\r\n6.7,a,0\r\n\r\n6.7,\"b, c\",600\n"
                                    "# another\n38.3,,4200\n11.9,d,9000\n6.7,e,14400";
    struct run plain =
        RUN(NULL, "route", "--config", DATA "one_reach.json", "--inflow", scratch_inflow(*state, "head", flood));
    struct run run =
        RUN(NULL, "route", "--config", DATA "one_reach.json", "--inflow", scratch_inflow(*state, "head", decorated));
    assert_run(&run, EX_OK);
    assert_string_equal(run.output, plain.output);
    run_clear(&plain);
    run_clear(&run);
}

/* --- stage ------------------------------------------------------------------------------------------------------ */

static void a_stage_at_the_gauge_is_its_rating_s_discharge(void **state)
{
    static const double stage_m[] = {1.02, 1.75, 2.42, 2.13, 1.07};
    char stages[256] = "time,stage_m\n", flows[256] = "time,discharge_m3s\n";
    for (size_t i = 0; i < 5; i++) {
        /* Q = c (h - h0)^b by hand, in the first segment */
        snprintf(stages + strlen(stages), sizeof stages - strlen(stages), "%zu,%.2f\n", 1800 * i, stage_m[i]);
        snprintf(flows + strlen(flows), sizeof flows - strlen(flows), "%zu,%.12f\n", 1800 * i,
                 11.8 * pow(stage_m[i] - 0.42, 1.72));
    }
    const char *beck = scratch_inflow(*state, "upper-sethick", beck_flood);
    struct run by_stage = RUN(NULL, "route", "--config", DATA "tree.json", "--inflow", beck, "--inflow",
                              scratch_inflow(*state, "orlin-scar", stages));
    struct run by_flow = RUN(NULL, "route", "--config", DATA "tree.json", "--inflow", beck, "--inflow",
                             scratch_inflow(*state, "orlin-scar", flows));
    assert_run(&by_stage, EX_OK);
    assert_string_equal(by_stage.output, by_flow.output);
    struct routed routed = routed_read(&by_stage);
    for (size_t i = 0; i < 5; i++)
        assert_near(routed_value(&routed, i, "orlin-scar.stage_m"), stage_m[i], printed_m);
    routed_clear(&routed);
    run_clear(&by_stage);
    run_clear(&by_flow);
}

static void a_point_s_own_rating_gives_its_level_by_straight_lines(void **state)
{
    struct run run =
        RUN(NULL, "route", "--config", DATA "tree.json", "--inflow", scratch_inflow(*state, "orlin-scar", flood),
            "--inflow", scratch_inflow(*state, "upper-sethick", beck_flood), "--until", "40000");
    assert_run(&run, EX_OK);
    struct routed routed = routed_read(&run);
    bool is_in_first = false, is_in_second = false;
    for (size_t row = 0; row < routed.row_count; row++) {
        double flow = routed_value(&routed, row, "end.discharge_m3s");
        double stage = flow < 30.0 ? 0.11 + flow / 30.0 * (1.31 - 0.11) : 1.31 + (flow - 30.0) / 60.0 * (2.71 - 1.31);
        is_in_first |= flow < 30.0;
        is_in_second |= flow > 30.0;
        assert_near(routed_value(&routed, row, "end.stage_m"), stage, printed_m);
    }
    assert_true(is_in_first && is_in_second);
    routed_clear(&routed);
    run_clear(&run);
}

/* Manning's formula the other way round: the printed depth, half a last digit less and more, brackets the flow. */
static double manning_m3s(const char *shape, double depth_m)
{
    double area, perimeter, n;
    if (strcmp(shape, "wide") == 0) {
        area = 31 * depth_m, perimeter = 31, n = 0.033;
    } else if (strcmp(shape, "rectangle") == 0) {
        area = 12.7 * depth_m, perimeter = 12.7 + 2 * depth_m, n = 0.027;
    } else if (strcmp(shape, "trapezoid") == 0) {
        area = (9.3 + 1.7 * depth_m) * depth_m, perimeter = 9.3 + 2 * depth_m * sqrt(1 + 1.7 * 1.7), n = 0.035;
    } else { /* a V: 3 to 1 on the left, 5 to 1 on the right */
        area = 0.5 * (3 + 5) * depth_m * depth_m, perimeter = depth_m * (sqrt(10) + sqrt(26)), n = 0.039;
    }
    return area * pow(area / perimeter, 2.0 / 3.0) * sqrt(0.0013) / n;
}

static struct routed route_shapes(struct scratch *scratch, const char *text, const char *method, const char *until)
{
    static const char *const gauges[] = {"g-wide", "g-rectangle", "g-trapezoid", "g-points"};
    const char *inflow[4];
    for (size_t i = 0; i < 4; i++)
        inflow[i] = scratch_inflow(scratch, gauges[i], text);
    struct run run =
        RUN(NULL, "route", "--config", DATA "shapes.json", "--inflow", inflow[0], "--inflow", inflow[1], "--inflow",
            inflow[2], "--inflow", inflow[3], "--method", method, "--until", until, "--step", "60", "--every", "60");
    assert_run(&run, EX_OK);
    struct routed routed = routed_read(&run);
    run_clear(&run);
    return routed;
}

static void every_shape_s_level_is_manning_s_normal_depth(void **state)
{
    static const char *const shapes[] = {"wide", "rectangle", "trapezoid", "points"};
    struct routed routed = route_shapes(*state, flood, "muskingum-cunge", "40000");
    for (size_t shape = 0; shape < 4; shape++) {
        char flow_name[64], stage_name[64];
        snprintf(flow_name, sizeof flow_name, "p-%s.discharge_m3s", shapes[shape]);
        snprintf(stage_name, sizeof stage_name, "p-%s.stage_m", shapes[shape]);
        size_t peak = routed_peak_row(&routed, flow_name);
        assert_true(peak > 0);
        for (size_t row = 0; row < routed.row_count; row += row < peak ? peak : 97) {
            double flow = routed_value(&routed, row, flow_name);
            double depth_m = routed_value(&routed, row, stage_name);
            /* the curve of flow by depth is itself a table, within 1e-5 of the flow (docs/hydraulics-sections.md) */
            assert_true(manning_m3s(shapes[shape], depth_m - printed_m) < flow * 1.00001 + printed_m3s);
            assert_true(manning_m3s(shapes[shape], depth_m + printed_m) > flow * 0.99999 - printed_m3s);
        }
    }
    routed_clear(&routed);
}

/* --- volume ----------------------------------------------------------------------------------------------------- */

/* From a base flow back to it, and long enough for the last of the wave to be gone: what stays behind is nothing. */
static void muskingum_cunge_lets_out_what_came_in_for_every_shape(void **state)
{
    static const char *const shapes[] = {"wide", "rectangle", "trapezoid", "points"};
    struct routed routed = route_shapes(*state, flood, "muskingum-cunge", "360000");
    for (size_t shape = 0; shape < 4; shape++) {
        char in_name[64], out_name[64];
        snprintf(in_name, sizeof in_name, "g-%s.discharge_m3s", shapes[shape]);
        snprintf(out_name, sizeof out_name, "p-%s.discharge_m3s", shapes[shape]);
        double in_m3 = routed_volume_m3(&routed, in_name);
        assert_near(routed_value(&routed, routed.row_count - 1, out_name), 6.7, 2 * printed_m3s);
        assert_near(routed_volume_m3(&routed, out_name) / in_m3, 1.0, 1e-6);
    }
    routed_clear(&routed);
}

static void the_whole_tree_lets_out_what_all_gauges_and_side_inflows_brought(void **state)
{
    struct run run =
        RUN(NULL, "route", "--config", DATA "tree.json", "--inflow", scratch_inflow(*state, "orlin-scar", flood),
            "--inflow", scratch_inflow(*state, "upper-sethick", beck_flood), "--until", "360000", "--step", "60",
            "--every", "60", "--method", "muskingum-cunge");
    assert_run(&run, EX_OK);
    struct routed routed = routed_read(&run);
    double in_m3 = routed_volume_m3(&routed, "orlin-scar.discharge_m3s") +
                   1.17 * routed_volume_m3(&routed, "upper-sethick.discharge_m3s") + 1.3 * 360000;
    assert_near(routed_volume_m3(&routed, "end.discharge_m3s") / in_m3, 1.0, 1e-6);
    routed_clear(&routed);
    run_clear(&run);
}

/* --- the tree and side inflow ----------------------------------------------------------------------------------- */

static void below_a_confluence_flows_what_its_reaches_bring(void **state)
{
    struct run run =
        RUN(NULL, "route", "--config", DATA "tree.json", "--inflow", scratch_inflow(*state, "orlin-scar", flood),
            "--inflow", scratch_inflow(*state, "upper-sethick", beck_flood));
    assert_run(&run, EX_OK);
    struct routed routed = routed_read(&run);
    for (size_t row = 0; row < routed.row_count; row++)
        assert_near(routed_value(&routed, row, "meeting.discharge_m3s"),
                    routed_value(&routed, row, "above-meeting.discharge_m3s") +
                        routed_value(&routed, row, "beck-foot.discharge_m3s"),
                    3 * printed_m3s);
    assert_true(routed_value(&routed, routed_peak_row(&routed, "meeting.discharge_m3s"), "meeting.discharge_m3s") >
                25.0); /* it was a flood */
    routed_clear(&routed);
    run_clear(&run);
}

static void a_steady_tree_is_the_sum_of_gauges_constant_and_share(void **state)
{
    struct run run =
        RUN(NULL, "route", "--config", DATA "tree.json", "--inflow",
            scratch_inflow(*state, "orlin-scar", "time,discharge_m3s\n0,17.3\n7200,17.3\n"), "--inflow",
            scratch_inflow(*state, "upper-sethick", "time,discharge_m3s\n0,3.1\n7200,3.1\n"), "--every", "600");
    assert_run(&run, EX_OK);
    struct routed routed = routed_read(&run);
    assert_int_equal(routed.row_count, 13);
    for (size_t row = 0; row < routed.row_count; row++) {
        assert_near(routed_value(&routed, row, "meeting.discharge_m3s"), 20.4, printed_m3s);
        assert_near(routed_value(&routed, row, "mill-ford.discharge_m3s"), 20.4, printed_m3s);
        assert_near(routed_value(&routed, row, "end.discharge_m3s"), 20.4 + 1.3 + 0.17 * 3.1, printed_m3s);
    }
    routed_clear(&routed);
    run_clear(&run);
}

/* Shifting the gauge's flow in time shifts what its share brings, exactly: the other gauge stands still. */
static void a_delayed_share_comes_that_much_later_and_is_that_share(void **state)
{
    static const char later[] = "time,discharge_m3s\n0,6.7\n2400,6.7\n6000,38.3\n10800,11.9\n16200,6.7\n";
    const char *still = scratch_inflow(*state, "still", "time,discharge_m3s\n0,2.3\n600,2.3\n");
    struct routed routed[2];
    for (size_t i = 0; i < 2; i++) {
        struct run run =
            RUN(NULL, "route", "--config", DATA "side_delay.json", "--inflow", still, "--inflow",
                scratch_inflow(*state, "wet", i == 0 ? flood : later), "--until", "360000", "--every", "600");
        assert_run(&run, EX_OK);
        routed[i] = routed_read(&run);
        run_clear(&run);
    }
    for (size_t row = 0; row + 3 < routed[0].row_count; row++)
        assert_near(routed_value(&routed[1], row + 3, "end.discharge_m3s"),
                    routed_value(&routed[0], row, "end.discharge_m3s"), 2 * printed_m3s);
    /* nothing moves at the end before the delay is over */
    for (size_t row = 0; row <= 4; row++) /* the gauge rises after 600 s, the share after 2400 s */
        assert_near(routed_value(&routed[0], row, "end.discharge_m3s"), 2.3 + 0.37 * 6.7, printed_m3s);
    assert_true(routed_value(&routed[0], 20, "end.discharge_m3s") > 2.3 + 0.37 * 6.7 + 0.01);
    assert_near(routed_volume_m3(&routed[0], "end.discharge_m3s") - 2.3 * 360000,
                0.37 * routed_volume_m3(&routed[0], "wet.discharge_m3s"),
                1e-4 * routed_volume_m3(&routed[0], "wet.discharge_m3s")); /* sampled every ten minutes */
    routed_clear(&routed[0]);
    routed_clear(&routed[1]);
}

/* --- points part-way -------------------------------------------------------------------------------------------- */

static void a_point_part_way_sees_what_the_foot_of_a_shorter_reach_sees(void **state)
{
    const char *inflow = scratch_inflow(*state, "head", flood);
    struct run whole = RUN(NULL, "route", "--config", DATA "one_reach.json", "--inflow", inflow, "--cells", "60",
                           "--until", "30000");
    struct run halves = RUN(NULL, "route", "--config", DATA "two_halves.json", "--inflow", inflow, "--cells", "30",
                            "--until", "30000");
    assert_run(&whole, EX_OK);
    assert_run(&halves, EX_OK);
    struct routed one = routed_read(&whole), two = routed_read(&halves);
    assert_int_equal(one.row_count, two.row_count);
    static const char *const names[] = {"p-4500.discharge_m3s", "end.discharge_m3s"};
    for (size_t row = 0; row < one.row_count; row++)
        for (size_t name = 0; name < 2; name++)
            assert_near(routed_value(&one, row, names[name]), routed_value(&two, row, names[name]), 2 * printed_m3s);
    assert_true(routed_peak_row(&one, names[0]) < routed_peak_row(&one, names[1]));
    routed_clear(&one);
    routed_clear(&two);
    run_clear(&whole);
    run_clear(&halves);
}

static void between_two_cell_boundaries_lies_their_mean(void **state)
{
    struct run run = RUN(NULL, "route", "--config", DATA "one_reach.json", "--inflow",
                         scratch_inflow(*state, "head", flood), "--cells", "10");
    assert_run(&run, EX_OK);
    struct routed routed = routed_read(&run);
    for (size_t row = 0; row < routed.row_count; row++) /* 4050 m is four and a half cells of 900 m */
        assert_near(routed_value(&routed, row, "p-4050.discharge_m3s"),
                    0.5 * (routed_value(&routed, row, "p-3600.discharge_m3s") +
                           routed_value(&routed, row, "p-4500.discharge_m3s")),
                    2 * printed_m3s);
    routed_clear(&routed);
    run_clear(&run);
}

/* --- options ---------------------------------------------------------------------------------------------------- */

static void a_reach_s_own_cell_length_is_the_same_as_that_number_of_cells(void **state)
{
    const char *inflow = scratch_inflow(*state, "head", flood);
    struct run by_length = RUN(NULL, "route", "--config", DATA "one_reach_cells.json", "--inflow", inflow);
    struct run by_count = RUN(NULL, "route", "--config", DATA "one_reach.json", "--inflow", inflow, "--cells", "10");
    struct run overruled =
        RUN(NULL, "route", "--config", DATA "one_reach_cells.json", "--inflow", inflow, "--cells", "23");
    struct run finer = RUN(NULL, "route", "--config", DATA "one_reach.json", "--inflow", inflow, "--cells", "23");
    assert_run(&by_length, EX_OK);
    assert_string_equal(by_length.output, by_count.output);
    assert_string_equal(overruled.output, finer.output);
    assert_string_not_equal(by_count.output, finer.output);
    run_clear(&by_length);
    run_clear(&by_count);
    run_clear(&overruled);
    run_clear(&finer);
}

static void every_method_delays_and_none_raises_the_peak(void **state)
{
    static const char *const methods[] = {"kinematic-linear", "kinematic", "muskingum-cunge", "auto",
                                          "dynamic",          "diffusive"};
    const char *inflow = scratch_inflow(*state, "head", flood);
    struct run runs[6];
    for (size_t i = 0; i < 6; i++) {
        runs[i] = RUN(NULL, "route", "--config", DATA "one_reach.json", "--inflow", inflow, "--method", methods[i],
                      "--until", "30000", "--every", "60");
        assert_run(&runs[i], EX_OK);
        struct routed routed = routed_read(&runs[i]);
        size_t in = routed_peak_row(&routed, "head.discharge_m3s"),
               out = routed_peak_row(&routed, "end.discharge_m3s");
        double in_m3s = routed_value(&routed, in, "head.discharge_m3s");
        double out_m3s = routed_value(&routed, out, "end.discharge_m3s");
        assert_near(in_m3s, 38.3, printed_m3s);
        /* 9000 m at the celerities of 38 and 12 m3/s, 2.2 and 1.55 m/s by hand */
        assert_in_range((out - in) * 60, 9000 / 2.6, 9000 / 1.5);
        assert_true(out_m3s < in_m3s && out_m3s > 0.8 * in_m3s);
        routed_clear(&routed);
    }
    assert_string_not_equal(runs[0].output, runs[1].output);
    assert_string_not_equal(runs[1].output, runs[2].output);
    assert_string_equal(runs[3].output,
                        runs[4].output); /* a quick flood: the storage form's levels would come early */
    assert_string_not_equal(runs[2].output, runs[4].output);
    assert_string_not_equal(runs[4].output, runs[5].output);
    for (size_t i = 0; i < 6; i++)
        run_clear(&runs[i]);
}

/* A lake held 4 m deep at the foot: its level stands there whatever flows, and further up nothing is lower than it. */
static void a_held_level_stands_at_the_foot_and_backs_the_water_up(void **state)
{
    struct run run = RUN(NULL, "route", "--config", DATA "held_level.json", "--inflow",
                         scratch_inflow(*state, "head", flood), "--until", "30000", "--every", "600");
    assert_run(&run, EX_OK);
    struct routed routed = routed_read(&run);
    for (size_t row = 0; row < routed.row_count; row++) {
        assert_near(routed_value(&routed, row, "end.stage_m"), 4.0, printed_m);
        double above = routed_value(&routed, row, "p-4500.stage_m"); /* its bed is 1.8 m above the foot's */
        assert_true(above >= 2.2 - 0.001 && above < 3.2);
    }
    routed_clear(&routed);
    run_clear(&run);
}

/* A flood into a bed that is all but dry is more than the full equations can take here: it is said. */
static void steps_that_were_replaced_are_told(void **state)
{
    struct run run = RUN(NULL, "route", "--config", DATA "one_reach.json", "--inflow",
                         scratch_inflow(*state, "head", "time,discharge_m3s\n0,0\n60,0\n120,150\n3600,150\n"),
                         "--method", "dynamic", "--step", "60");
    assert_run(&run, EX_OK);
    assert_says(run.errors, "forewater: note: in ");
    assert_says(run.errors,
                " of 61 steps the full equations could not be solved; simpler ones without backwater took "
                "their place");
    run_clear(&run);
}

/* The scheme is of the second order in space and time where the flow is smooth: a step of half the length changes
 * the answer less than a step of double the length does. */
static void the_time_step_is_the_one_asked_for(void **state)
{
    static const char *const steps[] = {"240", "120", "60", "15"};
    const char *inflow = scratch_inflow(*state, "head", flood);
    double at_peak_m3s[4];
    for (size_t i = 0; i < 4; i++) {
        struct run run = RUN(NULL, "route", "--config", DATA "one_reach.json", "--inflow", inflow, "--step", steps[i],
                             "--until", "30000", "--every", "600");
        assert_run(&run, EX_OK);
        struct routed routed = routed_read(&run);
        assert_int_equal(routed.row_count, 51);
        at_peak_m3s[i] = routed_value(&routed, routed_peak_row(&routed, "end.discharge_m3s"), "end.discharge_m3s");
        routed_clear(&routed);
        run_clear(&run);
    }
    assert_true(fabs(at_peak_m3s[0] - at_peak_m3s[3]) > fabs(at_peak_m3s[1] - at_peak_m3s[3]));
    assert_true(fabs(at_peak_m3s[1] - at_peak_m3s[3]) > fabs(at_peak_m3s[2] - at_peak_m3s[3]));
    assert_near(at_peak_m3s[0], at_peak_m3s[3], 0.01 * at_peak_m3s[3]);
}

static void output_comes_at_the_interval_asked_for_until_the_time_asked_for(void **state)
{
    const char *inflow = scratch_inflow(*state, "head", flood);
    struct run fine_run = RUN(NULL, "route", "--config", DATA "one_reach.json", "--inflow", inflow, "--every", "30",
                              "--until", "20000");
    struct run coarse_run = RUN(NULL, "route", "--config", DATA "one_reach.json", "--inflow", inflow, "--every",
                                "1200", "--until", "20000");
    struct run default_run = RUN(NULL, "route", "--config", DATA "one_reach.json", "--inflow", inflow);
    assert_run(&fine_run, EX_OK);
    assert_run(&coarse_run, EX_OK);
    assert_run(&default_run, EX_OK);
    struct routed fine = routed_read(&fine_run), coarse = routed_read(&coarse_run), plain = routed_read(&default_run);
    assert_int_equal(fine.row_count, 667);  /* 0, 30 .. 19980 */
    assert_int_equal(coarse.row_count, 17); /* 0, 1200 .. 19200 */
    assert_int_equal(plain.row_count, 25);  /* the shortest interval of the input, to its end */
    for (size_t row = 0; row < coarse.row_count; row++)
        for (size_t column = 0; column < coarse.column_count; column++)
            assert_string_equal(coarse.cell[(row + 1) * coarse.column_count + column],
                                fine.cell[(40 * row + 1) * fine.column_count + column]);
    /* steps are of 60 s: halfway between lies their mean */
    for (size_t row = 1; row + 1 < fine.row_count; row += 2)
        assert_near(routed_value(&fine, row, "end.discharge_m3s"),
                    0.5 * (routed_value(&fine, row - 1, "end.discharge_m3s") +
                           routed_value(&fine, row + 1, "end.discharge_m3s")),
                    2 * printed_m3s);
    /* the last inflow is held */
    for (size_t row = 480; row < fine.row_count; row++)
        assert_near(routed_value(&fine, row, "head.discharge_m3s"), 6.7, printed_m3s);
    routed_clear(&fine);
    routed_clear(&coarse);
    routed_clear(&plain);
    run_clear(&fine_run);
    run_clear(&coarse_run);
    run_clear(&default_run);
}

static void the_same_command_prints_the_same_bytes(void **state)
{
    const char *inflow = scratch_inflow(*state, "head", flood);
    struct run first = RUN(NULL, "route", "--config", DATA "one_reach.json", "--inflow", inflow);
    struct run second = RUN(NULL, "route", "--config", DATA "one_reach.json", "--inflow", inflow);
    assert_run(&first, EX_OK);
    assert_string_equal(first.output, second.output);
    run_clear(&first);
    run_clear(&second);
}

static void help_names_every_option(void **state)
{
    (void)state;
    struct run run = RUN(NULL, "route", "--help");
    assert_run(&run, EX_OK);
    static const char *const options[] = {"--config", "--inflow", "--method", "--step",
                                          "--cells",  "--every",  "--until"};
    for (size_t i = 0; i < sizeof options / sizeof options[0]; i++)
        assert_says(run.output, options[i]);
    run_clear(&run);
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, open_scratch, close_scratch)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(the_roughness_is_that_of_the_first_rows_date),
        TEST(times_go_out_as_they_came_in),
        TEST(the_way_time_is_written_changes_no_flow),
        TEST(columns_are_gauges_then_points_in_the_order_of_the_configuration),
        TEST(inflow_may_come_through_a_pipe),
        TEST(comments_blank_lines_and_other_columns_are_passed_over),
        TEST(a_stage_at_the_gauge_is_its_rating_s_discharge),
        TEST(a_point_s_own_rating_gives_its_level_by_straight_lines),
        TEST(every_shape_s_level_is_manning_s_normal_depth),
        TEST(muskingum_cunge_lets_out_what_came_in_for_every_shape),
        TEST(the_whole_tree_lets_out_what_all_gauges_and_side_inflows_brought),
        TEST(below_a_confluence_flows_what_its_reaches_bring),
        TEST(a_steady_tree_is_the_sum_of_gauges_constant_and_share),
        TEST(a_delayed_share_comes_that_much_later_and_is_that_share),
        TEST(a_point_part_way_sees_what_the_foot_of_a_shorter_reach_sees),
        TEST(between_two_cell_boundaries_lies_their_mean),
        TEST(a_reach_s_own_cell_length_is_the_same_as_that_number_of_cells),
        TEST(every_method_delays_and_none_raises_the_peak),
        TEST(a_held_level_stands_at_the_foot_and_backs_the_water_up),
        TEST(steps_that_were_replaced_are_told),
        TEST(the_time_step_is_the_one_asked_for),
        TEST(output_comes_at_the_interval_asked_for_until_the_time_asked_for),
        TEST(the_same_command_prints_the_same_bytes),
        TEST(help_names_every_option),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
