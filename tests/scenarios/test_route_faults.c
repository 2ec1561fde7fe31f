/* SPDX-License-Identifier: MIT */
/* What `forewater route` says of a command line, file or configuration that it cannot use, and its exit codes. */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>

#include <sysexits.h>

#include "tests/scenarios/run_forewater.h"

#define DATA FW_SOURCE_DIR "/tests/data/route/"

static const char flood[] = "time,discharge_m3s\n0,6.7\n600,6.7\n4200,38.3\n9000,11.9\n14400,6.7\n";

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

/* Said once on stderr, nothing on stdout: a half answer could be taken for a whole one. */
static void demand(const struct run *run, const char *shows, int exit_code, const char *says)
{
    if (run->exit_code != exit_code || strstr(run->errors, says) == NULL || run->output[0] != '\0')
        fail_msg("%s: exit code %d (expected %d), '%s' expected in:\n%.2000s\nand nothing in:\n%.500s", shows,
                 run->exit_code, exit_code, says, run->errors, run->output);
}

struct bad_file {
    const char *shows, *text;
    const char *says; /* after the path of the file: ":line: column: ..." */
};

static void demand_bad_files(struct scratch *scratch, const char *config, const char *gauge, const char *other,
                             size_t count, const struct bad_file files[])
{
    for (size_t i = 0; i < count; i++) {
        char says[512];
        const char *path = scratch_file(scratch, "x.csv", files[i].text);
        char inflow[300];
        snprintf(says, sizeof says, "forewater: %s%s", path, files[i].says);
        snprintf(inflow, sizeof inflow, "%s=%s", gauge, path);
        struct run run = other == NULL
                             ? RUN(NULL, "route", "--config", config, "--inflow", inflow)
                             : RUN(NULL, "route", "--config", config, "--inflow", other, "--inflow", inflow);
        demand(&run, files[i].shows, EX_DATAERR, says);
        run_clear(&run);
    }
}

static void a_bad_file_is_named_with_line_column_value_and_what_was_expected(void **state)
{
    static const struct bad_file files[] = {
        {"no bytes", "", ":1: the file is empty: expected a header line"},
        {"comments only", "# nothing\n\n", ":1: the file is empty: expected a header line"},
        {"a header and no row", "time,discharge_m3s\n", ":1: no rows below the header: expected one or more"},
        {"no column of times", "when,discharge_m3s\n0,6.7\n",
         ":1: the header has no column 'time': expected time, and "},
        {"no column of values", "# a note\ntime,flow\n0,6.7\n",
         ":2: the header has no column 'discharge_m3s' or 'stage_m': expected time, and discharge_m3s or stage_m"},
        {"semicolons", "time;discharge_m3s\n0;6,7\n", ":1: the header has no column 'time': expected "},
        {"a text for a number", "time,discharge_m3s\n0,6.7\n\n600,high\n",
         ":4: discharge_m3s: 'high' is not a number with a decimal point"},
        {"no value", "time,discharge_m3s\n0,6.7\n600,\n",
         ":3: discharge_m3s: '' is not a number with a decimal point"},
        {"a row cut short", "time,discharge_m3s\n0,6.7\n600\n",
         ":3: discharge_m3s: '' is not a number with a decimal point"},
        {"a unit behind the number", "time,discharge_m3s\n0,6.7 m3/s\n",
         ":2: discharge_m3s: '6.7 m3/s' is not a number with a decimal point"},
        {"a decimal comma in quotes", "time,discharge_m3s\n0,\"6,7\"\n",
         ":2: discharge_m3s: '6,7' is not a number with a decimal point"},
        {"a decimal comma without quotes: 6,7 must not pass for 6", "time,discharge_m3s\n0,6,7\n",
         ":2: time: '0' stands in a row of 3 cells, but the header names 2 columns: expected a decimal point, not a "
         "comma"},
        {"hexadecimal", "time,discharge_m3s\n0,0x11\n",
         ":2: discharge_m3s: '0x11' is not a number with a decimal point"},
        {"not a number, by name", "time,discharge_m3s\n0,NaN\n",
         ":2: discharge_m3s: 'NaN' is not a number with a decimal point"},
        {"infinite, by name", "time,discharge_m3s\n0,inf\n",
         ":2: discharge_m3s: 'inf' is not a number with a decimal point"},
        {"infinite, by size", "time,discharge_m3s\n0,1e999\n",
         ":2: discharge_m3s: '1e999' is not a number with a decimal point"},
        {"a flow below zero", "time,discharge_m3s\n0,6.7\n600,-0.3\n",
         ":3: discharge_m3s: '-0.3' is a flow of -0.3 m3/s: expected 0 to 100000"},
        {"litres for cubic metres", "time,discharge_m3s\n0,6.7\n600,387000\n",
         ":3: discharge_m3s: '387000' is a flow of 387000 m3/s: expected 0 to 100000"},
        {"a time twice", "time,discharge_m3s\n0,6.7\n600,7.1\n600,7.3\n",
         ":4: time: '600' is not after the time of the row before it, '600': expected times that rise"},
        {"time going back", "time,discharge_m3s\n0,6.7\n600,7.1\n300,7.3\n",
         ":4: time: '300' is not after the time of the row before it, '600': expected times that rise"},
        {"a clock time that goes back over the change of offset",
         "time,discharge_m3s\n2031-02-14T21:00:00+01:00,6.7\n2031-02-14T21:30:00+02:00,7.1\n",
         ":3: time: '2031-02-14T21:30:00+02:00' is not after the time of the row before it, "},
        {"a time without offset", "time,discharge_m3s\n2031-02-14T21:00:00,6.7\n",
         ":2: time: '2031-02-14T21:00:00' has no offset from UTC: expected RFC 3339, as "},
        {"a day that is not", "time,discharge_m3s\n2031-02-30T21:00:00Z,6.7\n", ":2: time: '2031-02-30T21:00:00Z' "},
        {"seconds after clock times", "time,discharge_m3s\n2031-02-14T21:00:00Z,6.7\n600,6.7\n",
         ":3: time: '600' is not written as the first time of the input is: expected RFC 3339, as "},
        {"clock times after seconds", "time,discharge_m3s\n0,6.7\n2031-02-14T21:00:00Z,6.7\n",
         ":3: time: '2031-02-14T21:00:00Z' is not written as the first time of the input is: expected seconds, as a "
         "plain number"},
        {"a quotation left open: the rows after it must not vanish in a note",
         "time,discharge_m3s,note\n0,6.7,\"a\n600,7.1,b\n1200,7.3,c\n",
         ":4: an open quotation at the end of the file"},
        {"stage at a gauge without rating", "time,stage_m\n0,1.02\n",
         ":1: stage_m: gauge 'head' has no rating: expected discharge_m3s, or a rating in the configuration"},
    };
    demand_bad_files(*state, DATA "one_reach.json", "head", NULL, sizeof files / sizeof files[0], files);
}

static void a_stage_is_judged_as_a_flow_is(void **state)
{
    static const struct bad_file files[] = {
        {"a text for a stage", "time,stage_m\n0,1.02\n600,1.o7\n",
         ":3: stage_m: '1.o7' is not a number with a decimal "},
        {"millimetres for metres", "time,stage_m\n0,1.02\n600,1070\n", ":3: stage_m: '1070' is a flow of "},
        {"the other gauge's times are seconds", "time,stage_m\n2031-02-14T21:00:00Z,1.02\n",
         ":2: time: '2031-02-14T21:00:00Z' is not written as the first time of the input is: expected seconds"},
    };
    demand_bad_files(*state, DATA "tree.json", "orlin-scar", scratch_inflow(*state, "upper-sethick", flood),
                     sizeof files / sizeof files[0], files);
}

static void a_file_that_cannot_be_read_is_unavailable(void **state)
{
    (void)state;
    struct run none = RUN(NULL, "route", "--config", DATA "one_reach.json", "--inflow", "head=/nowhere/x.csv");
    demand(&none, "no such file", EX_UNAVAILABLE,
           "forewater: /nowhere/x.csv: cannot be read: No such file or directory");
    struct run folder = RUN(NULL, "route", "--config", DATA "one_reach.json", "--inflow", "head=/tmp");
    demand(&folder, "a folder", EX_UNAVAILABLE, "forewater: /tmp: cannot be read: Is a directory");
    struct run config = RUN(NULL, "route", "--config", "/nowhere/x.json", "--inflow", "head=/nowhere/x.csv");
    demand(&config, "no such configuration", EX_UNAVAILABLE, "/nowhere/x.json: cannot be read: No such file");
    run_clear(&none);
    run_clear(&folder);
    run_clear(&config);
}

static void a_zero_byte_is_named_with_its_line(void **state)
{
    static const char bytes[] = "time,discharge_m3s\n0,6.7\n6\0000,7.1\n";
    char inflow[300];
    const char *path = scratch_file(*state, "x.csv", "");
    FILE *file = fopen(path, "w");
    assert_non_null(file);
    assert_int_equal(fwrite(bytes, 1, sizeof bytes - 1, file), sizeof bytes - 1);
    assert_int_equal(fclose(file), 0);
    snprintf(inflow, sizeof inflow, "head=%s", path);
    struct run run = RUN(NULL, "route", "--config", DATA "one_reach.json", "--inflow", inflow);
    demand(&run, "a zero byte", EX_DATAERR, "x.csv:3: a zero byte where CSV text was expected");
    run_clear(&run);
}

static void a_bad_command_line_says_what_was_expected(void **state)
{
    const char *good = scratch_inflow(*state, "head", flood);
    const char *clock = scratch_inflow(*state, "head", "time,discharge_m3s\n2031-02-14T21:00:00Z,6.7\n");
    const struct {
        const char *inflow, *option, *value;
        int exit_code;
        const char *says;
    } cases[] = {
        {good, "--method", "euler", EX_USAGE,
         "--method: 'euler' is not one of kinematic-linear, kinematic, muskingum-cunge, diffusive, dynamic, auto"},
        {good, "--step", "0", EX_USAGE, "--step: '0' is not a whole number from 1 to 86400"},
        {good, "--step", "-60", EX_USAGE, "--step: '-60' is not a whole number from 1 to 86400"},
        {good, "--step", "1,5", EX_USAGE, "--step: '1,5' is not a whole number from 1 to 86400"},
        {good, "--cells", "0", EX_USAGE, "--cells: '0' is not a whole number from 1 to 100000"},
        {good, "--cells", "many", EX_USAGE, "--cells: 'many' is not a whole number from 1 to 100000"},
        {good, "--every", "0", EX_USAGE, "--every: '0' is not a whole number from 1 to 31536000"},
        {good, "--until", "-600", EX_USAGE, "--until: '-600' is before the first inflow"},
        {good, "--until", "soon", EX_USAGE, "--until: 'soon' is not a number of seconds, as the input has"},
        {good, "--until", "2031-02-14T21:00:00Z", EX_USAGE, "is not a number of seconds, as the input has"},
        {good, "--until", "nan", EX_USAGE, "--until: 'nan' is not a number of seconds"},
        {good, "--until", "1e12", EX_USAGE, "--step: more than 4000000 steps of 60 s: expected a longer one"},
        {clock, "--until", "2031-02-14T20:59:00Z", EX_USAGE,
         "--until: '2031-02-14T20:59:00Z' is before the first inflow"},
        {clock, "--until", "600", EX_USAGE, "--until: '600' is not a time: expected RFC 3339"},
        {good, "--inflow", good, EX_USAGE, "--inflow: gauge 'head' is given twice"},
        {good, "--inflow", "foot=x.csv", EX_USAGE, "--inflow: 'foot' is not a gauge of "},
        {good, "--inflow", "head", EX_USAGE, "--inflow: 'head' is not of the form ID=FILE.csv"},
        {good, "--inflow", "head=", EX_USAGE, "--inflow: 'head=' is not of the form ID=FILE.csv"},
        {good, "--inflow", NULL, EX_USAGE, "option '--inflow' needs a value"},
        {good, "--stpe", "60", EX_USAGE, "option '--stpe' is not known; 'forewater route --help' lists them"},
        {good, "now", NULL, EX_USAGE, "route: 'now' is not expected here"},
    };
    for (size_t i = 0; i < sizeof cases / sizeof cases[0]; i++) {
        struct run run = RUN(NULL, "route", "--config", DATA "one_reach.json", "--inflow", cases[i].inflow,
                             cases[i].option, cases[i].value);
        demand(&run, cases[i].option, cases[i].exit_code, cases[i].says);
        run_clear(&run);
    }
}

static void every_gauge_needs_its_inflow(void **state)
{
    struct run run =
        RUN(NULL, "route", "--config", DATA "tree.json", "--inflow", scratch_inflow(*state, "upper-sethick", flood));
    demand(&run, "one of two", EX_USAGE,
           "forewater: --inflow: gauge 'orlin-scar' has no file: expected --inflow orlin-scar=FILE.csv");
    run_clear(&run);
}

static void every_fault_of_the_configuration_is_told_with_line_and_key(void **state)
{
    static const char config[] =
        "{ \"gauges\": [ { \"id\": \"head\" } ],\n"
        "  \"sections\": [ { \"id\": \"s\", \"shape\": \"wide\", \"bottom_m\": 30, \"n\": 3.0 } ],\n"
        "  \"reaches\": [\n"
        "    { \"id\": \"r\", \"from\": \"head\", \"to\": \"end\", \"length_m\": 9000,\n"
        "      \"slpoe\": 0.001, \"section\": \"s\", \"method\": \"kinetic\",\n"
        "      \"outlet\": { \"stage_m\": -5.0 } } ],\n"
        "  \"points\": [ { \"id\": \"end\" } ]\n}\n";
    struct run run = RUN(NULL, "route", "--config", scratch_file(*state, "x.json", config), "--inflow",
                         scratch_inflow(*state, "head", flood));
    demand(&run, "four faults", EX_CONFIG, "x.json:2: sections[0].n: 3.0 ");
    assert_says(run.errors, "x.json:5: reaches[0].slpoe: unknown key: expected 'slope'?");
    assert_says(run.errors, "x.json:5: reaches[0].method: ");
    assert_says(run.errors, "x.json:6: reaches[0].outlet.stage_m: -5.0 is too small");
    run_clear(&run);
}

static void a_step_that_passes_over_the_input_is_told(void **state)
{
    struct run run = RUN(NULL, "route", "--config", DATA "one_reach.json", "--inflow",
                         scratch_inflow(*state, "head", flood), "--step", "3600");
    assert_run(&run, EX_OK);
    assert_string_equal(run.errors, "forewater: note: steps of 3600 s pass over inflow given every 600 s; what falls "
                                    "between is lost\n");
    run_clear(&run);
}

static void a_full_disk_is_not_passed_over(void **state)
{
    char command[1024];
    snprintf(command, sizeof command, "%s route --config %s --inflow %s > /dev/full 2> /dev/null", FW_EXECUTABLE,
             DATA "one_reach.json", scratch_inflow(*state, "head", flood));
    int status = system(command);
    assert_true(WIFEXITED(status));
    assert_int_equal(WEXITSTATUS(status), EX_IOERR);
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, open_scratch, close_scratch)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(a_bad_file_is_named_with_line_column_value_and_what_was_expected),
        TEST(a_stage_is_judged_as_a_flow_is),
        TEST(a_file_that_cannot_be_read_is_unavailable),
        TEST(a_zero_byte_is_named_with_its_line),
        TEST(a_bad_command_line_says_what_was_expected),
        TEST(every_gauge_needs_its_inflow),
        TEST(every_fault_of_the_configuration_is_told_with_line_and_key),
        TEST(a_step_that_passes_over_the_input_is_told),
        TEST(a_full_disk_is_not_passed_over),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
