/* SPDX-License-Identifier: MIT */
/*
 * Every kind of bad input to the hydraulics, one number of a sound valley spoiled at a time: refused by `check` at its
 * file, line, key and value with what was expected, or computed and flagged; never silently wrong.
 */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>

#include <stdbool.h>
#include <sysexits.h>

#include "tests/scenarios/run_forewater.h"

#define VALLEY FW_SOURCE_DIR "/tests/data/settings/valley.json"

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

/* The valley with one piece of its text, which stands in it just once, put in place of another; and the line of that. */
static char *spoiled(const char *find, const char *replace, size_t *line_out)
{
    struct text result = {0};
    FILE *file = fopen(VALLEY, "rb");
    assert_non_null(file);
    char *text = run_whole_text(file);
    const char *at = strstr(text, find);
    if (at == NULL || strstr(at + 1, find) != NULL)
        fail_msg("'%s' does not stand in the valley just once", find);
    *line_out = 1;
    for (const char *byte = text; byte < at; byte++)
        *line_out += *byte == '\n';
    text_add_bytes(&result, text, (size_t)(at - text));
    text_add(&result, "%s%s", replace, at + strlen(find));
    assert_int_equal(text_status(&result), FW_OK);
    free(text);
    return result.bytes;
}

static const char upper_slope[] = "\"length_m\": 7300, \"slope\": 0.0021";

static void what_cannot_be_is_refused_at_its_place(void **state)
{
    struct scratch *scratch = *state;
    static const struct {
        const char *shows, *find, *replace;
        const char *says; /* after the file and line: key path, value, what was expected */
    } rows[] = {
        {"a level bed", "0.0021", "0", "reaches[0].slope: 0 is too small: expected a number, 1e-06 to 0.3"},
        {"an adverse bed", "0.0021", "-0.0021", "reaches[0].slope: -0.0021 is too small: expected a number, 1e-06"},
        {"a slope of nothing", "0.0021", "1e-300", "reaches[0].slope: 1e-300 is too small: expected a number, 1e-06"},
        {"a slope in per cent", "0.0021", "2.1",
         "reaches[0].slope: 2.1 is too large: expected a number, 1e-06 to 0.3"},
        {"a slope without end", "0.0021", "1e400", "reaches[0].slope: 1e400 is too large: expected a number below"},
        {"a slope that is no number", "0.0021", "NaN", "reaches[0].slope: NaN is not a value: expected a number"},
        {"a slope in words", "0.0021", "\"steep\"", "reaches[0].slope: \"steep\" is not a number: expected a number"},
        {"a survey that folds back", "[9, 0.3]", "[5.9, 0.3]",
         "sections[0].points[2][0]: 5.9 folds back, the point before it stands at 6: expected offsets that never"},
        {"a survey of two points", "[9, 0.3], [14, 0.0], [19, 0.2], [23, 1.8], [31, 4.1]", "",
         "sections[0].points: "},
        {"a survey without width", "[0, 4.4], [6, 1.9], [9, 0.3], [14, 0.0], [19, 0.2], [23, 1.8], [31, 4.1]",
         "[4, 4.4], [4, 1.9], [4, 0.3]",
         "sections[0].points: an array cannot be used: all points stand at one offset"},
        {"a point in space", "[9, 0.3]", "[9, 3e9]",
         "sections[0].points[2][1]: 3e9 is too large: expected a number in m"},
        {"a bed as smooth as nothing", "0.041", "0", "sections[0].n: 0 is too small: expected a number, 0.005 to 1"},
        {"a bed smoother than nothing", "0.041", "-0.041", "sections[0].n: -0.041 is too small: expected a number"},
        {"a bed as wide as the world", "5.2", "1e308",
         "sections[1].bottom_m: 1e308 is too large: expected a number in m"},
        {"a reach of no length", "7300", "0", "reaches[0].length_m: 0 is too small: expected a number in m, 1 to"},
        {"a reach of negative length", "7300", "-7300", "reaches[0].length_m: -7300 is too small: expected a number"},
        {"a reach round the world", "7300", "4e7",
         "reaches[0].length_m: 4e7 is too large: expected a number in m, 1 to"},
        {"a ring through the gauge", "\"to\": \"mill-ford\"", "\"to\": \"harrow-weir\"",
         "reaches[2].to: \"harrow-weir\" closes a ring of reaches: expected a river that ends"},
        {"a reach back into itself", "\"to\": \"mill-ford\"", "\"to\": \"meeting\"",
         "reaches[2].to: \"meeting\" is where the reach begins: expected another node"},
        {"a head without water", "\"from\": \"sallow-beck\"", "\"from\": \"sallow-bek\"",
         "reaches[1].from: \"sallow-bek\" has no inflow: expected a gauge, or a node where another reach ends, "
         "perhaps"},
        {"a fork", "\"from\": \"sallow-beck\"", "\"from\": \"harrow-weir\"", "reaches[1].from: \"harrow-weir\" "},
        {"a rating dry above its gaugings", "\"h0_m\": 0.35", "\"h0_m\": 2.5",
         "gauges[0].rating.highest_gauged_m: 2.10 cannot be used: must lie above the stage of zero flow"},
        {"flow below nothing believed", "\"lowest_m3s\": 0.0", "\"lowest_m3s\": -3",
         "gauges[1].quality.lowest_m3s: -3 is too small: expected a number in m3/s, 0 to"},
    };
    for (size_t i = 0; i < sizeof rows / sizeof *rows; i++) {
        size_t line;
        char says[512];
        char *text = spoiled(rows[i].find, rows[i].replace, &line);
        const char *path = scratch_file(scratch, "x.json", text);
        struct run run = RUN(NULL, "check", "--config", path);
        snprintf(says, sizeof says, "%s:%zu: %s", path, line, rows[i].says);
        if (run.exit_code != EX_CONFIG || strstr(run.errors, says) == NULL || run.output[0] != '\0')
            fail_msg("%s: exit code %d, expected '%s' in:\n%.2000s\nand nothing in:\n%.300s", rows[i].shows,
                     run.exit_code, says, run.errors, run.output);
        run_clear(&run);
        free(text);
    }
}

/* --- computed and flagged ----------------------------------------------------------------------------------------- */

static const char quiet_beck[] = "time,discharge_m3s\n0,0.7\n36000,0.7\n";

/* Routes a flood of stage at the weir through the valley as spoiled. */
static struct run route_valley(struct scratch *scratch, const char *find, const char *replace, const char *stages,
                               const char *method)
{
    size_t line;
    char harrow[300], sallow[300];
    char *text = spoiled(find, replace, &line);
    const char *path = scratch_file(scratch, "x.json", text);
    snprintf(harrow, sizeof harrow, "harrow-weir=%s", scratch_file(scratch, "harrow.csv", stages));
    snprintf(sallow, sizeof sallow, "sallow-beck=%s", scratch_file(scratch, "sallow.csv", quiet_beck));
    struct run run = RUN(NULL, "route", "--config", path, "--inflow", harrow, "--inflow", sallow, "--method", method,
                         "--every", "600");
    free(text);
    return run;
}

static void demand_sound_rows(const struct run *run, const char *shows, bool may_turn)
{
    struct routed routed = routed_read(run);
    if (routed.row_count < 10)
        fail_msg("%s: %zu rows", shows, routed.row_count);
    for (size_t row = 0; row < routed.row_count; row++) {
        double flow = routed_value(&routed, row, "mill-ford.discharge_m3s");
        double stage = routed_value(&routed, row, "mill-ford.stage_m");
        if (!isfinite(flow) || !isfinite(stage) || (!may_turn && !(flow >= 0.0)) || !(stage >= 0.0))
            fail_msg("%s: row %zu: %g m3/s, %g m", shows, row, flow, stage);
    }
    routed_clear(&routed);
}

static const char flood[] = "time,stage_m\n0,0.9\n3600,0.9\n9000,2.0\n36000,1.0\n";

static void what_is_odd_is_computed(void **state)
{
    struct scratch *scratch = *state;
    static const struct {
        const char *shows, *find, *replace, *stages;
    } rows[] = {
        {"a reach of 10 m", upper_slope, "\"length_m\": 10, \"slope\": 0.0021", flood},
        {"a reach of 300 km", upper_slope, "\"length_m\": 300000, \"slope\": 0.0021", flood},
        {"the steepest bed", upper_slope, "\"length_m\": 7300, \"slope\": 0.3", flood},
        {"the flattest bed", upper_slope, "\"length_m\": 7300, \"slope\": 1e-06", flood},
        {"a dry gauge", upper_slope, upper_slope, "time,stage_m\n0,0.2\n3600,0.35\n7200,-0.1\n36000,0.1\n"},
        {"a gauge that falls dry", upper_slope, upper_slope, "time,stage_m\n0,1.4\n3600,0.2\n36000,0.1\n"},
        {"a flood on a dry gauge", upper_slope, upper_slope, "time,stage_m\n0,0.1\n3600,0.1\n4200,2.9\n36000,0.1\n"},
    };
    static const char *const methods[] = {"muskingum-cunge", "kinematic", "kinematic-linear", "dynamic", "diffusive"};
    for (size_t i = 0; i < sizeof rows / sizeof *rows; i++) {
        size_t line;
        char *text = spoiled(rows[i].find, rows[i].replace, &line);
        struct run check = RUN(NULL, "check", "--config", scratch_file(scratch, "x.json", text));
        free(text);
        if (check.exit_code != EX_OK || strstr(check.output, "nan") != NULL || strstr(check.output, "inf m") != NULL)
            fail_msg("%s: check: exit code %d\n%.2000s%.3000s", rows[i].shows, check.exit_code, check.errors,
                     check.output);
        run_clear(&check);
        for (size_t method = 0; method < 5; method++) {
            char shows[100];
            struct run run = route_valley(scratch, rows[i].find, rows[i].replace, rows[i].stages, methods[method]);
            snprintf(shows, sizeof shows, "%s, %s", rows[i].shows, methods[method]);
            if (run.exit_code != EX_OK)
                fail_msg("%s: exit code %d: %.2000s", shows, run.exit_code, run.errors);
            demand_sound_rows(&run, shows, method >= 3);
            run_clear(&run);
        }
    }
}

static void flow_above_the_survey_is_flagged_by_check_and_route(void **state)
{
    struct scratch *scratch = *state;
    struct run check = RUN(NULL, "check", "--config", VALLEY);
    assert_run(&check, EX_OK);
    assert_says(check.output, "** reach upper: its section is surveyed to 4.10 m above the bed only, which ");
    assert_says(check.output, "** reach lower: its section is surveyed to 4.10 m above the bed only, which ");
    assert_null(strstr(check.output, "** reach side"));
    run_clear(&check);
    static const char *const methods[] = {"muskingum-cunge", "dynamic"};
    for (size_t method = 0; method < 2; method++) {
        struct run run = route_valley(scratch, upper_slope, upper_slope,
                                      "time,stage_m\n0,1.1\n3600,1.1\n12000,5.9\n36000,1.1\n", methods[method]);
        assert_run(&run, EX_OK);
        demand_sound_rows(&run, methods[method], method == 1);
        assert_says(run.errors, "note: reach 'upper': in ");
        assert_says(run.errors, "note: reach 'lower': in ");
        assert_says(run.errors, "the water stands above the survey of its section, more than 4.10 m deep");
        assert_null(strstr(run.errors, "reach 'side'"));
        run_clear(&run);
        struct run within = route_valley(scratch, upper_slope, upper_slope, flood, methods[method]);
        assert_run(&within, EX_OK);
        assert_null(strstr(within.errors, "survey"));
        run_clear(&within);
    }
    /* a wall on the lower side counts: a higher one keeps the water in */
    size_t line;
    char *text = spoiled("[31, 4.1]", "[31, 94.1]", &line);
    struct run check_higher = RUN(NULL, "check", "--config", scratch_file(scratch, "x.json", text));
    assert_run(&check_higher, EX_OK);
    assert_says(check_higher.output, "surveyed to 4.40 m");
    run_clear(&check_higher);
    free(text);
}

static void the_json_of_check_says_how_far_a_section_is_surveyed(void **state)
{
    (void)state;
    struct run check = RUN(NULL, "check", "--config", VALLEY, "--json");
    assert_run(&check, EX_OK);
    assert_says(check.output, "\"surveyed_to_m\":\t4.1");
    assert_says(check.output, "\"surveyed_to_m\":\tnull");
    run_clear(&check);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test_setup_teardown(what_cannot_be_is_refused_at_its_place, open_scratch, close_scratch),
        cmocka_unit_test_setup_teardown(what_is_odd_is_computed, open_scratch, close_scratch),
        cmocka_unit_test_setup_teardown(flow_above_the_survey_is_flagged_by_check_and_route, open_scratch,
                                        close_scratch),
        cmocka_unit_test(the_json_of_check_says_how_far_a_section_is_surveyed),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
