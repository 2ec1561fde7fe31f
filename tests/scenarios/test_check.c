/* SPDX-License-Identifier: MIT */
/* What `forewater check` tells of a configuration, sound or faulty, and its exit codes. */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>

#include <cjson/cJSON.h>
#include <sysexits.h>

#include "tests/scenarios/run_forewater.h"

#define DEMO FW_SOURCE_DIR "/config/demo/vennmark.json"
#define EXAMPLE FW_SOURCE_DIR "/config/forewater.json"

static const char caution[] = "Decision aid for trained staff. Local codes, the road authority, police and emergency "
                              "services come first. Levels "
                              "and limits must be set and signed by a licensed engineer. No message from this system "
                              "means a road is fit to use. "
                              "Crews do not enter moving water.";

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

static char *read_whole(const char *path)
{
    FILE *file = fopen(path, "r");
    if (file == NULL)
        fail_msg("%s cannot be read", path);
    return run_whole_text(file);
}

/* A file's text with the first place that says `find` saying something else. */
static char *changed(char *text, const char *find, const char *replace)
{
    struct text result = {0};
    const char *at = strstr(text, find);
    if (at == NULL)
        fail_msg("'%s' is not in the file", find);
    text_add_bytes(&result, text, (size_t)(at - text));
    text_add(&result, "%s%s", replace, at + strlen(find));
    assert_int_equal(text_status(&result), FW_OK);
    free(text);
    return result.bytes;
}

static size_t line_of(const char *text, const char *what)
{
    const char *at = strstr(text, what);
    size_t line = 1;
    if (at == NULL)
        fail_msg("'%s' is not in the file", what);
    for (; text < at; text++)
        line += *text == '\n';
    return line;
}

/* The lines about one crossing or reach: from the one that begins so to the next that is not indented. */
static char *block_of(const char *output, const char *begins)
{
    const char *at = strstr(output, begins);
    if (at == NULL)
        fail_msg("no line begins '%s' in:\n%.3000s", begins, output);
    const char *end = strchr(at, '\n');
    while (end != NULL && end[1] == ' ')
        end = strchr(end + 1, '\n');
    char *block = strndup(at, end == NULL ? strlen(at) : (size_t)(end - at + 1));
    assert_non_null(block);
    return block;
}

/* --- travel times --------------------------------------------------------------------------------------------- */

/* Vennmark's section below bank full: 14 m, sides 2 to 1, n 0.038, slope 0.0024, Manning. */
static double manning_m3s(double depth_m)
{
    double area = (14 + 2 * depth_m) * depth_m;
    return area * pow(area / (14 + 2 * depth_m * sqrt(5)), 2.0 / 3.0) * sqrt(0.0024) / 0.038;
}

static double celerity_m_s(double depth_m) /* dQ/dA by central differences */
{
    return (manning_m3s(depth_m + 1e-5) - manning_m3s(depth_m - 1e-5)) / (2e-5 * (14 + 4 * depth_m));
}

struct row {
    double flow_m3s, depth_m, wave_m_s, travel_min;
    double smoother_min, smoother_cm, rougher_min, rougher_cm; /* what a roughness 20 % less or more changes */
    bool is_bank_full;
};

static size_t reach_rows(const char *block, size_t most, struct row rows[])
{
    size_t count = 0;
    for (const char *line = strchr(block, '\n'); line != NULL && line[1] != '\0'; line = strchr(line + 1, '\n')) {
        struct row row = {0};
        char rest[64] = "";
        if (sscanf(line + 1, " %lf %lf %lf %lf %*f %lf %lf %lf %lf%63[^\n]", &row.flow_m3s, &row.depth_m,
                   &row.wave_m_s, &row.travel_min, &row.smoother_min, &row.smoother_cm, &row.rougher_min,
                   &row.rougher_cm, rest) < 8)
            continue;
        row.is_bank_full = strstr(rest, "bank full") != NULL;
        assert_true(count < most);
        rows[count++] = row;
    }
    return count;
}

static void travel_times_fall_with_the_flow_up_to_bank_full_and_rise_above(void **state)
{
    (void)state;
    static const char *const files[] = {DEMO, EXAMPLE};
    for (size_t file = 0; file < 2; file++) {
        struct run run = RUN(NULL, "check", "--config", files[file]);
        assert_run(&run, EX_OK);
        char *block = block_of(run.output, "reach scar-ford:");
        struct row rows[16];
        size_t count = reach_rows(block, 16, rows), bank_full = 0;
        assert_int_equal(count, 7);
        while (bank_full < count && !rows[bank_full].is_bank_full)
            bank_full++;
        assert_int_equal(bank_full, 5); /* one row above it */
        for (size_t row = 0; row < count; row++) {
            if (row > 0 && row <= bank_full)
                assert_true(rows[row].travel_min < rows[row - 1].travel_min);
            if (row > bank_full)
                assert_true(rows[row].travel_min > 1.5 * rows[bank_full].travel_min);
            if (row > bank_full)
                continue;
            /* by hand from the printed depth, rounded to 0.01 m: at most 2.5 % of the flow at 0.4 m */
            assert_near(manning_m3s(rows[row].depth_m), rows[row].flow_m3s, 0.025 * rows[row].flow_m3s);
            assert_near(rows[row].wave_m_s, celerity_m_s(rows[row].depth_m), 0.02 * rows[row].wave_m_s);
            assert_near(rows[row].travel_min, 9400 / rows[row].wave_m_s / 60, 0.5 + 0.006 * rows[row].travel_min);
            /* the same flow at another depth: by hand for the smoother bed, where it stays within banks */
            double smoother_m = rows[row].depth_m + rows[row].smoother_cm / 100;
            assert_near(manning_m3s(smoother_m) / 0.8, rows[row].flow_m3s, 0.04 * rows[row].flow_m3s);
            assert_near(rows[row].travel_min + rows[row].smoother_min, 9400 / (celerity_m_s(smoother_m) / 0.8) / 60,
                        1.0 + 0.012 * rows[row].travel_min);
            assert_true(rows[row].rougher_min > 0.0 && rows[row].rougher_cm > 0.0);
        }
        assert_near(rows[bank_full].flow_m3s, manning_m3s(2.60), 0.3); /* a hair below it */
        assert_says(block,
                    "the wave is SLOWER (water spreads): the peak of a bigger flood can arrive later; its front "
                    "does not");
        char above[64];
        snprintf(above, sizeof above, "note: above %.0f m3/s", rows[bank_full].flow_m3s);
        assert_says(block, above);
        free(block);
        run_clear(&run);
    }
}

static void method_cells_and_steps_are_told_per_reach(void **state)
{
    (void)state;
    struct run run = RUN(NULL, "check", "--config", FW_SOURCE_DIR "/tests/data/settings/every_other_key.json");
    assert_run(&run, EX_OK);
    assert_says(run.output,
                "gauge upper-sethick: methods are chosen for a flood from 4.2 to 85.0 m3/s that rises in 2.18 h, "
                "assumed from the highest value believed and the fastest rise: 'flood' states a better one\n");
    assert_says(run.output, "gauge orlin-scar: no flood is known to choose methods by: ");
    char *block = block_of(run.output, "reach beck-foot:");
    assert_says(block, "reach beck-foot: 5300 m, slope 0.0071; flood from 4.2 to 85.0 m3/s; on a way of 14.4 km\n");
    assert_says(block, "    method kinematic, 14 cells of 379 m, steps of 60 s; eps^1.5 lam ");
    assert_says(block, ": stated, not chosen; auto would take muskingum-cunge\n");
    free(block);
    block = block_of(run.output, "reach scar-meeting:");
    assert_says(block,
                "reach scar-meeting: 13000 m, slope 0.0024; on a way of 22.1 km\n    method muskingum-cunge, ");
    assert_says(block, ": no flood is known to choose by\n");
    assert_null(strstr(block, "SLOWER")); /* no plain */
    free(block);
    run_clear(&run);
}

/* The full equations have a limit of their own: cells against D/c. */
static void full_equations_are_told_with_their_own_limit(void **state)
{
    char *text = changed(read_whole(EXAMPLE), "\"method\": \"auto\"", "\"method\": \"dynamic\"");
    struct run run = RUN(NULL, "check", "--config", scratch_file(*state, "x.json", text));
    assert_run(&run, EX_OK);
    char *block = block_of(run.output, "reach scar-ford:");
    assert_says(block, "method dynamic, ");
    assert_says(block, "    knows backwater; at ");
    assert_null(strstr(block, "    fit for floods")); /* the storage form's limit */
    free(block);
    run_clear(&run);
    free(text);
    text = changed(read_whole(EXAMPLE), "\"method\": \"auto\"", "\"method\": \"dynamic\", \"cell_m\": 3000");
    run = RUN(NULL, "check", "--config", scratch_file(*state, "x.json", text));
    assert_run(&run, EX_OK);
    assert_says(run.output,
                ": cells longer than twice that give WRONG LEVELS, this reach is too steep for the method\n");
    run_clear(&run);
    free(text);
}

/* A gauge in mid-river is told like any other; one that gives a level only, and a weir, are no fault. */
static void what_stands_in_the_river_is_no_fault(void **state)
{
    char *text = changed(
        read_whole(DEMO), "\n    ],\n\n    \"sections\": [",
        ",\n{ \"id\": \"narrows\", \"rating\": { \"segments\": [ { \"c\": 11.8, \"h0_m\": 0.42, \"b\": 1.8 } ] },\n"
        "  \"quality\": { \"highest_m\": 9.0, \"fastest_rise_m_h\": 1.5 } },\n"
        "{ \"id\": \"pool\", \"quality\": { \"highest_m\": 9.0, \"fastest_rise_m_h\": 1.5 } } ],\n\"sections\": [");
    text =
        changed(text, "\"to\": \"tallowick-ford\", \"length_m\": 9400,",
                "\"to\": \"narrows\", \"length_m\": 4400, \"slope\": 0.0024, \"section\": \"ildra\",\n"
                "\"foot\": { \"drop_m\": 0.4, \"openings\": [ { \"crest_m\": 0.8, \"length_m\": 12 } ] } },\n"
                "{ \"id\": \"narrows-ford\", \"from\": \"narrows\", \"to\": \"tallowick-ford\", \"length_m\": 5000,");
    text = changed(text, "\"to\": \"low-pintle-bridge\",",
                   "\"to\": \"low-pintle-bridge\", \"outlet\": { \"stage_of\": \"pool\", \"bed_at_m\": 0.5 },");
    text = changed(text, "\"slope\": 0.0024, \"section\": \"ildra\", \"method\": \"muskingum-cunge\" }\n",
                   "\"slope\": 0.0024, \"section\": \"ildra\" }\n"); /* auto, as the first: it must know the level */
    const char *path = scratch_file(*state, "x.json", text);
    struct run run = RUN(NULL, "check", "--config", path);
    assert_run(&run, EX_OK);
    char *block = block_of(run.output, "reach scar-ford:");
    assert_says(block, "method dynamic, ");
    free(block);
    assert_says(run.output, "    from narrows: the closing mark's own flow, ");
    assert_null(strstr(run.output, "from pool"));
    run_clear(&run);
    run = RUN(NULL, "check", "--config", path, "--json");
    assert_run(&run, EX_OK);
    run_clear(&run);
    free(text);
}

/* --- need against lead ---------------------------------------------------------------------------------------- */

struct told_lead {
    double own_flow_m3s, own_min, fastest_flow_m3s, fastest_min, unfelt_min, lag_min, slow_lead_min, fast_lead_min;
};

static struct told_lead lead_of(const char *block)
{
    struct told_lead told = {0};
    const char *from = strstr(block, "the closing mark's own flow, "),
               *lead = strstr(block, "lead on measured water");
    assert_non_null(from);
    assert_non_null(lead);
    assert_int_equal(sscanf(from,
                            "the closing mark's own flow, %lf m3/s, travels %lf min; the fastest wave, %lf m3/s with "
                            "roughness x%*f, %lf min; no change there is felt in less than %lf min",
                            &told.own_flow_m3s, &told.own_min, &told.fastest_flow_m3s, &told.fastest_min,
                            &told.unfelt_min),
                     5);
    assert_int_equal(
        sscanf(lead,
               "lead on measured water, less %lf min (a reading every %*f, delivery %*f): %lf min in a slow "
               "rise, %lf in the fastest",
               &told.lag_min, &told.slow_lead_min, &told.fast_lead_min),
        3);
    return told;
}

static void the_ford_cannot_be_protected_at_night_by_its_gauge_alone(void **state)
{
    (void)state;
    struct run run = RUN(NULL, "check", "--config", DEMO);
    assert_run(&run, EX_OK);
    char *block = block_of(run.output, "Tallowick Ford (tallowick-ford):");
    struct told_lead told = lead_of(block);
    /* approach wet at 1.45 m: its flow and its wave's time over 9400 m by hand, printed in whole numbers */
    assert_near(told.own_flow_m3s, manning_m3s(1.45), 0.6);
    assert_near(told.own_min, 9400 / celerity_m_s(1.45) / 60, 0.8);
    /* the fastest: just below bank full, n a fifth smoother, so 1.25 times the flow and the speed */
    assert_near(told.fastest_flow_m3s, manning_m3s(2.60) / 0.8, 2.5);
    assert_near(told.fastest_min, 9400 / (celerity_m_s(2.60) / 0.8) / 60, 1.0);
    /* u + sqrt(g A / B) just below bank full, on the smoother bed, by hand: area 14 h + 2 h^2, width 14 + 4 h */
    double area_m2 = 14 * 2.60 + 2 * 2.60 * 2.60;
    double ripple_m_s = manning_m3s(2.60) / 0.8 / area_m2 + sqrt(9.80665 * area_m2 / (14 + 4 * 2.60));
    assert_near(told.unfelt_min, 9400 / ripple_m_s / 60, 1.0);
    assert_near(told.lag_min, 15 + 1, 0.0);
    assert_near(told.slow_lead_min, told.own_min - told.lag_min, 1.0);
    assert_near(told.fast_lead_min, told.fastest_min - told.lag_min, 1.0);
    assert_says(block,
                "day   need  55 min (crew 40 + margin 15): in a slow rise enough by 2 min, in the fastest SHORT by ");
    assert_says(block,
                "night need  70 min (crew 55 + margin 15): in a slow rise SHORT by 13 min, in the fastest SHORT by ");
    assert_says(block,
                "** Orlin Scar alone cannot protect this crossing at night: the signed trigger below has to gain "
                "the time\n");
    assert_says(block, "trigger: Orlin Scar at 2.00 m and rising gives SEND, signed by district engineer");
    free(block);
    static const char *const others[] = {"Marren Causeway (", "Low Pintle Bridge ("};
    for (size_t i = 0; i < 2; i++) {
        block = block_of(run.output, others[i]);
        assert_null(strstr(block, "cannot protect"));
        assert_null(strstr(block, "SHORT"));
        free(block);
    }
    assert_null(strstr(run.output, "** at least one crossing"));
    assert_says_in_lines(run.output, caution);
    run_clear(&run);
}

/*
 * The ford's deck at 1.55 m: V by hand from the section's mean, and the product passes 0.3 m2/s where (h - 1.55) V = 0.3.
 * The causeway's weir: the depth passes 0.3 m first, and 1.6 H^1.5 the last limit, 0.6 m2/s.
 */
static void the_limits_that_a_deck_passes_are_told_by_level_flow_and_time(void **state)
{
    (void)state;
    struct run run = RUN(NULL, "check", "--config", DEMO);
    assert_run(&run, EX_OK);
    char *block = block_of(run.output, "Tallowick Ford (tallowick-ford):");
    assert_says(block,
                "deck at 1.55 m, part of the section; depth and speed there are estimates, no limit is a depth to "
                "drive in\n");
    const char *line = strstr(block, "      from ");
    double stage_m = 0.0, flow_m3s = 0.0, after_min = 0.0;
    assert_non_null(line);
    assert_int_equal(
        sscanf(line,
               " from %lf m, %lf m3/s: over the draft limit of 0.3 m2/s for a small car, stationary; in the "
               "fastest stated rise %lf min after the deck is awash",
               &stage_m, &flow_m3s, &after_min),
        3);
    double area_m2 = (14 + 2 * stage_m) * stage_m;
    assert_near((stage_m - 1.55) * manning_m3s(stage_m) / area_m2, 0.3, 0.01); /* a centimetre of stage is 0.017 */
    assert_near(flow_m3s, manning_m3s(stage_m), 0.4);
    /* 4 m/h at the gauge, whose rating is Q = 11.8 (h - 0.42)^1.72: between the two flows, whole minutes */
    double rise_m = pow(flow_m3s / 11.8, 1 / 1.72) - pow(manning_m3s(1.55) / 11.8, 1 / 1.72);
    assert_near(after_min, rise_m / 4 * 60, 1.0);
    assert_says(block, "over the guideline limit of 0.6 m2/s for any vehicle or person;");
    free(block);
    block = block_of(run.output, "Marren Causeway (");
    assert_says(block, "deck at 1.95 m, a weir over the road;");
    assert_says(block, "      from 2.25 m, ");
    assert_says(block, ": over the draft limit of 0.3 m for a small car, stationary;");
    char last[100];
    snprintf(last, sizeof last, "      from %.2f m, ", 1.95 + pow(0.6 / 1.6, 2.0 / 3));
    assert_says(block, last);
    free(block);
    block = block_of(run.output, "Low Pintle Bridge (");
    assert_null(strstr(block, "deck at"));
    free(block);
    assert_null(strstr(run.output, "H1"));
    run_clear(&run);
}

/* By hand: the opening's rows reach 1.8 m, the deck, at 11.7 m3/s freely; 0.4 of them, part-blocked, at 4.68. */
static void a_weir_over_the_road_is_told_by_the_flow_that_wets_the_deck(void **state)
{
    (void)state;
    struct run run = RUN(NULL, "check", "--config", FW_SOURCE_DIR "/tests/data/settings/every_other_key.json");
    assert_run(&run, EX_OK);
    char *block = block_of(run.output, "low-causeway (low-causeway):");
    const char *line = strstr(block, "    level from a weir over the road: 'deck awash' at ");
    double clean_m3s = 0.0, blocked_m3s = 0.0;
    assert_non_null(line);
    assert_int_equal(sscanf(line, " level from a weir over the road: 'deck awash' at %lf m3/s, part-blocked at %lf",
                            &clean_m3s, &blocked_m3s),
                     2);
    /* less than freely, for the river below drowns it: by no more than a quarter in so steep a reach */
    assert_true(clean_m3s < 11.7 && clean_m3s > 0.75 * 11.7);
    assert_true(blocked_m3s < 4.68 && blocked_m3s > 0.75 * 4.68);
    free(block);
    block = block_of(run.output, "mill-ford (mill-ford):");
    assert_null(strstr(block, "level from"));
    free(block);
    run_clear(&run);
}

/* By hand: in bank a wave's speed goes with 1/n, at one flow with n^-0.6 or so; here computed at x1.2 and x1. */
static void every_season_is_told_with_its_travel_times(void **state)
{
    char *text = changed(read_whole(EXAMPLE), "\"peak_m3s\": 89", "\"peak_m3s\": 63");
    struct run run = RUN(NULL, "check", "--config", scratch_file(*state, "x.json", text));
    free(text);
    assert_run(&run, EX_OK);
    char *block = block_of(run.output, "roughness by season (local dates;");
    char flow[40];
    double stated_min[4];
    static const char *const begins[] = {
        "\n    from 05-01: ", "\n    from 05-15: ", "\n    from 09-15: ", "\n    from 10-01: "};
    for (size_t i = 0; i < 4; i++) {
        const char *line = strstr(block, begins[i]);
        assert_non_null(line);
        assert_int_equal(
            sscanf(line + strlen(begins[i]), "%39s m3/s travel scar-ford %lf min,", flow, &stated_min[i]), 2);
        assert_non_null(strstr(line, "causeway-bridge"));
    }
    /* 63 m3/s stay in the channel: the plain's season alone changes nothing, the channel's slows the wave */
    struct row rows[8];
    char *reach = block_of(run.output, "reach scar-ford:");
    size_t count = reach_rows(reach, 8, rows);
    assert_true(count >= 6);
    double plain_min = rows[4].travel_min;
    assert_near(stated_min[0], plain_min, 1.0);
    assert_near(stated_min[3], plain_min, 1.0);
    assert_near(stated_min[1], stated_min[2], 0.0);
    /* the depth that carries the flow at n x1.2, and the wave there, by hand */
    double depth_m = 1.0;
    while (manning_m3s(depth_m) / 1.2 < rows[4].flow_m3s)
        depth_m += 1e-4;
    assert_near(stated_min[1], 9400 / (celerity_m_s(depth_m) / 1.2) / 60, 1.0);
    free(reach);
    free(block);
    run_clear(&run);
    struct run other = RUN(NULL, "check", "--config", DEMO);
    assert_null(strstr(other.output, "roughness by season")); /* it states none */
    run_clear(&other);
}

static void a_deck_that_nothing_wets_has_no_word_of_limits(void **state)
{
    char *text = changed(read_whole(DEMO), "\"depth_m\": 1.55, \"deck\": true }", "\"depth_m\": 1.55 }");
    text = changed(text, "\"name\": \"over limit\", \"depth_m\": 1.70",
                   "\"name\": \"hill\", \"depth_m\": 45, \"deck\": true");
    struct run run = RUN(NULL, "check", "--config", scratch_file(*state, "x.json", text));
    assert_run(&run, EX_OK);
    char *block = block_of(run.output, "Tallowick Ford (tallowick-ford):");
    assert_says(block, "deck at 45.00 m, part of the section;");
    assert_null(strstr(block, "limit of"));
    free(block);
    free(text);
    run_clear(&run);
}

static void a_longer_way_to_the_station_takes_the_day_away_too(void **state)
{
    (void)state;
    struct run run = RUN(NULL, "check", "--config", EXAMPLE); /* delivery 5 min instead of 1 */
    assert_run(&run, EX_OK);
    assert_says(run.output,
                "** Orlin Scar alone cannot protect this crossing at night, nor by day: the signed trigger");
    char *block = block_of(run.output, "Marren Causeway (");
    assert_says(block, "night need  75 min (crew 60 + margin 15): in a slow rise enough by ");
    assert_says(block,
                "note: in the fastest rise Orlin Scar alone is too late here; MUSTER on assumed water, or a signed "
                "trigger, has to gain the time\n");
    free(block);
    run_clear(&run);
}

static void without_a_trigger_the_engineer_is_asked_for_one(void **state)
{
    char *text = changed(read_whole(DEMO),
                         "\"triggers\": [\n                { \"gauge\": \"orlin-scar\", \"stage_m\": 2.00, "
                         "\"rising\": true, \"gives\": \"SEND\",\n                  \"signed\": "
                         "\"district engineer\" }\n            ],",
                         "\"triggers\": [],");
    struct run run = RUN(NULL, "check", "--config", scratch_file(*state, "x.json", text));
    assert_run(&run, EX_OK); /* told, not refused */
    assert_says(run.output,
                "** Orlin Scar alone cannot protect this crossing at night: an engineer must sign a trigger, or "
                "a gauge further up is needed\n");
    assert_says(run.output,
                "** at least one crossing is protected in time neither by a gauge alone nor by a trigger; see "
                "** above\n");
    run_clear(&run);
    free(text);
}

static void a_point_without_crew_is_watched_only(void **state)
{
    (void)state;
    struct run run = RUN(NULL, "check", "--config", FW_SOURCE_DIR "/tests/data/settings/every_other_key.json");
    assert_run(&run, EX_OK);
    char *block = block_of(run.output, "meeting (meeting):");
    assert_says(block, "from upper-sethick: ");
    assert_says(block, "from orlin-scar: "); /* both lie upstream */
    assert_says(block, "watched only: no crew is stated, no one is sent\n");
    assert_null(strstr(block, "need"));
    free(block);
    assert_says(run.output, "trigger: upper-sethick at 23.70 m3/s gives SEND, signed by district engineer");
    run_clear(&run);
}

/* --- faults --------------------------------------------------------------------------------------------------- */

static void every_fault_of_a_file_comes_in_one_run_with_line_and_key(void **state)
{
    static const struct {
        const char *find, *replace;
        const char *at;    /* where it then stands in the file */
        const char *fault; /* after the line */
    } changes[] = {
        {"\"every_min\": 5, \"horizon_h\"", "\"every_min\": -5, \"horizon_h\"", "\"every_min\": -5",
         "forecast.every_min: -5 is too small: expected "},
        {"\"delivery_min\": 1,", "\"delivery_mni\": 1,", "\"delivery_mni\"",
         "gauges[0].delivery_mni: unknown key: expected 'delivery_min'?"},
        {"\"slope\": 0.0024,\n          \"section\": \"ildra\", \"method\"",
         "\"slope\": 0.0024,\n          \"section\": \"ildar\", \"method\"", "\"ildar\"",
         "reaches[0].section: \"ildar\" "},
        {"\"depth_m\": 1.55", "\"depth_m\": 1.30", "\"depth_m\": 1.30",
         "points[0].marks[1].depth_m: 1.30 is below the mark before it, 'approach wet' 1.45 (line "},
        {"\"margin_min\": 15", "\"margin_min\": \"15\"", "\"margin_min\": \"15\"",
         "points[0].crew.margin_min: \"15\" "},
    };
    enum { COUNT = sizeof changes / sizeof changes[0] };
    char *text = read_whole(DEMO);
    for (size_t i = 0; i < COUNT; i++)
        text = changed(text, changes[i].find, changes[i].replace);
    const char *path = scratch_file(*state, "x.json", text);
    struct run run = RUN(NULL, "check", "--config", path);
    assert_run(&run, EX_CONFIG);
    assert_string_equal(run.output, "");
    size_t last_line = 0;
    for (size_t i = 0; i < COUNT; i++) {
        char expected[512];
        size_t line = line_of(text, changes[i].at);
        snprintf(expected, sizeof expected, "%s:%zu: %s", path, line, changes[i].fault);
        assert_says(run.errors, expected);
        assert_true(line > last_line);
        last_line = line;
    }
    assert_says(run.errors, "x.json has 5 faults; the first: ");
    run_clear(&run);
    free(text);
}

static void what_is_enough_for_route_is_not_enough_to_run(void **state)
{
    (void)state;
    struct run run = RUN(NULL, "check", "--config", FW_SOURCE_DIR "/tests/data/settings/outlet.json");
    assert_run(&run, EX_CONFIG);
    assert_says(run.errors, "outlet.json:1: district: missing: expected an object in { }\n");
    assert_says(run.errors, "outlet.json:1: store: missing: expected an object in { }\n");
    assert_says(run.errors, "outlet.json has 6 faults; the first: ");
    run_clear(&run);
}

static void a_file_that_is_no_configuration_is_told_with_its_line(void **state)
{
    static const struct {
        const char *text, *says;
    } files[] = {
        {"", "x.json:1: "},
        {"time,discharge_m3s\n0,6.7\n", "x.json:1: "},
        {"{\n  \"district\": { \"name\": \"Vennmark\",\n", "x.json:"},
        {"{\n  \"gauges\": [],\n  \"gauges\": []\n}\n", "x.json:3: "},
        {"[]\n", "x.json:1: "},
    };
    for (size_t i = 0; i < sizeof files / sizeof files[0]; i++) {
        struct run run = RUN(NULL, "check", "--config", scratch_file(*state, "x.json", files[i].text));
        assert_run(&run, EX_CONFIG);
        assert_says(run.errors, files[i].says);
        assert_says(run.errors, "expected");
        assert_string_equal(run.output, "");
        run_clear(&run);
    }
}

static void a_bad_command_line_is_a_usage_fault_and_a_missing_file_unavailable(void **state)
{
    (void)state;
    static const struct {
        const char *option, *value;
        int exit_code;
        const char *says;
    } cases[] = {
        {"--config", "/nowhere/x.json", EX_UNAVAILABLE, "/nowhere/x.json: cannot be read: No such file or directory"},
        {"--config", "/tmp", EX_UNAVAILABLE, "/tmp: is not a plain file"},
        {"--config", NULL, EX_USAGE, "check: option '--config' needs a value"},
        {"--confgi", "x.json", EX_USAGE,
         "check: option '--confgi' is not known; 'forewater check --help' lists them"},
        {EXAMPLE, NULL, EX_USAGE, "config/forewater.json' is not expected here"},
    };
    for (size_t i = 0; i < sizeof cases / sizeof cases[0]; i++) {
        struct run run = RUN(NULL, "check", cases[i].option, cases[i].value);
        assert_run(&run, cases[i].exit_code);
        assert_says(run.errors, cases[i].says);
        assert_string_equal(run.output, "");
        run_clear(&run);
    }
}

static void the_schema_and_the_table_of_keys_are_those_of_the_tree(void **state)
{
    (void)state;
    static const struct {
        const char *option, *file;
    } cases[] = {{"--schema", FW_SOURCE_DIR "/config/forewater.schema.json"},
                 {"--manual", FW_SOURCE_DIR "/docs/configuration.md"}};
    for (size_t i = 0; i < 2; i++) {
        struct run run = RUN(NULL, "check", cases[i].option);
        char *file = read_whole(cases[i].file);
        assert_run(&run, EX_OK);
        assert_string_equal(run.output, file);
        free(file);
        run_clear(&run);
    }
}

static double number_of(const cJSON *object, const char *name)
{
    const cJSON *item = cJSON_GetObjectItemCaseSensitive(object, name);
    assert_true(cJSON_IsNumber(item));
    return item->valuedouble;
}

static void the_same_facts_come_as_json(void **state)
{
    (void)state;
    struct run run = RUN(NULL, "check", "--json", "--config", DEMO);
    assert_run(&run, EX_OK);
    cJSON *object = cJSON_Parse(run.output);
    assert_non_null(object);
    assert_string_equal(cJSON_GetObjectItemCaseSensitive(object, "schema")->valuestring, "forewater.check.1");
    assert_string_equal(cJSON_GetObjectItemCaseSensitive(object, "caution")->valuestring, caution);
    const cJSON *reach = cJSON_GetArrayItem(cJSON_GetObjectItemCaseSensitive(object, "reaches"), 0);
    const cJSON *flows = cJSON_GetObjectItemCaseSensitive(reach, "flows");
    assert_int_equal(cJSON_GetArraySize(flows), 7); /* six, and bank full among them */
    for (const cJSON *flow = flows->child; flow != NULL; flow = flow->next)
        assert_near(number_of(flow, "celerity_m_s") * number_of(flow, "travel_time_s"), 9400.0, 1e-6);
    const cJSON *ford = cJSON_GetArrayItem(cJSON_GetObjectItemCaseSensitive(object, "points"), 0);
    assert_near(number_of(ford, "need_night_s"), 4200.0, 1e-9);
    const cJSON *lead = cJSON_GetArrayItem(cJSON_GetObjectItemCaseSensitive(ford, "gauges"), 0);
    assert_near(number_of(lead, "lead_slow_rise_s"),
                number_of(lead, "closing_mark_travel_s") - number_of(lead, "reading_and_delivery_s"), 1e-6);
    assert_near(number_of(lead, "lead_slow_rise_s"), 57.0 * 60.0, 60.0); /* as the text says */
    const cJSON *deck = cJSON_GetObjectItemCaseSensitive(ford, "deck");
    assert_near(number_of(deck, "level_m"), 1.55, 1e-12);
    assert_near(number_of(deck, "awash_m3s"), manning_m3s(1.55), 0.01);
    const cJSON *limits = cJSON_GetObjectItemCaseSensitive(deck, "limits_passed");
    assert_int_equal(cJSON_GetArraySize(limits), 4);
    assert_near(number_of(cJSON_GetArrayItem(limits, 1), "limit"), 0.45, 1e-12);
    assert_string_equal(cJSON_GetObjectItemCaseSensitive(cJSON_GetArrayItem(limits, 1), "unit")->valuestring, "m2/s");
    cJSON_Delete(object);
    run_clear(&run);
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, open_scratch, close_scratch)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(travel_times_fall_with_the_flow_up_to_bank_full_and_rise_above),
        TEST(method_cells_and_steps_are_told_per_reach),
        TEST(full_equations_are_told_with_their_own_limit),
        TEST(what_stands_in_the_river_is_no_fault),
        TEST(the_ford_cannot_be_protected_at_night_by_its_gauge_alone),
        TEST(the_limits_that_a_deck_passes_are_told_by_level_flow_and_time),
        TEST(a_weir_over_the_road_is_told_by_the_flow_that_wets_the_deck),
        TEST(every_season_is_told_with_its_travel_times),
        TEST(a_deck_that_nothing_wets_has_no_word_of_limits),
        TEST(a_longer_way_to_the_station_takes_the_day_away_too),
        TEST(without_a_trigger_the_engineer_is_asked_for_one),
        TEST(a_point_without_crew_is_watched_only),
        TEST(every_fault_of_a_file_comes_in_one_run_with_line_and_key),
        TEST(what_is_enough_for_route_is_not_enough_to_run),
        TEST(a_file_that_is_no_configuration_is_told_with_its_line),
        TEST(a_bad_command_line_is_a_usage_fault_and_a_missing_file_unavailable),
        TEST(the_same_facts_come_as_json),
        TEST(the_schema_and_the_table_of_keys_are_those_of_the_tree),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
