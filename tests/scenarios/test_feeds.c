/* SPDX-License-Identifier: MIT */
/* What comes in through the folder, from the file to the record and to who is told. */
#include "tests/scenarios/river_scene.h"

static const char *judgement_at(struct work *work, int minute)
{
    return scene_ask(work, "history.db",
                     work_print(work,
                                "SELECT j.use FROM reading r JOIN judgement j ON j.reading = r.entry "
                                "WHERE r.observed = %lld ORDER BY j.entry",
                                (long long)scene_time(minute)));
}

static void expect_log(struct work *work, const char *text)
{
    if (strstr(daemon_log(work), text) == NULL)
        fail_msg("'%s' is not in: %s", text, daemon_log(work));
}

/* In the world's own time, as it runs at a district office: no step of a driver, the watch alone. */
static void a_renamed_file_is_recorded_at_once(void **state)
{
    struct work *work = *state;
    char at[WHEN_TEXT_SIZE];
    daemon_start(work, NULL);
    daemon_await_log(work, "Tallowick Ford");
    int64_t from_ms = work_clock_ms();
    scene_drop(work, "now.csv",
               work_print(work, "time,stage_m\n%s,1.37\n", when_rfc3339_utc((int64_t)time(NULL) - 30, at)));
    while (!work_has(work, "drop/done/now.csv") && patience_left(from_ms + WORK_DEADLINE_MS))
        ;
    print_message("from the rename to done/: %lld ms\n", (long long)(work_clock_ms() - from_ms));
    assert_string_equal(scene_ask(work, "history.db", "SELECT value, unit, source FROM reading"), "1.37|m|0\n");
    assert_true(work_has(work, "drop/done/now.csv"));
    assert_int_equal(daemon_end(work, SIGTERM, NULL), 0);
}

static void a_file_of_which_nothing_can_be_read_goes_to_bad_with_its_reason(void **state)
{
    struct work *work = *state;
    static const struct {
        const char *name, *text, *reason;
    } files[] = {
        {"wrong-columns.csv", "when,level\n2031-02-14T17:05:00Z,1.2\n", "time"},
        {"comma.csv", "time;stage_m\n2031-02-14T17:05:00Z;1,23\n", "1,23"},
        {"no-offset.csv", "time,stage_m\n2031-02-14 17:05,1.20\n", "2031-02-14 17:05"},
        {"empty.csv", "", "empty"},
        {"page.csv", "<!doctype html><html><body>The logger is away.</body></html>\n", "time"},
    };
    scene_start(work);
    long before = scene_ask_number(work, "SELECT count(*) FROM reading");
    for (size_t index = 0; index < sizeof files / sizeof *files; index++)
        scene_drop(work, files[index].name, files[index].text);
    daemon_advance(work, scene_time(6));
    for (size_t index = 0; index < sizeof files / sizeof *files; index++) {
        assert_string_equal(work_read(work, work_print(work, "drop/bad/%s", files[index].name)), files[index].text);
        const char *reason = work_read(work, work_print(work, "drop/bad/%s.reason", files[index].name));
        if (strstr(reason, files[index].reason) == NULL)
            fail_msg("%s: the reason '%s' does not say '%s'", files[index].name, reason, files[index].reason);
        expect_log(work, files[index].name);
    }
    assert_int_equal(scene_ask_number(work, "SELECT count(*) FROM reading"), before);
    scene_live(work, 10, 30); /* and it goes on */
    assert_int_equal(scene_ask_number(work, "SELECT count(*) FROM reading"), before + 2);
    assert_int_equal(daemon_end(work, SIGTERM, NULL), 0);
}

static void bad_lines_among_good_ones_cost_only_themselves(void **state)
{
    struct work *work = *state;
    scene_start(work);
    long before = scene_ask_number(work, "SELECT count(*) FROM reading");
    scene_drop(work, "mixed.csv",
               "time,battery,stage_m\n"
               "2031-02-14T17:02:00Z,12.6,1.06\n"
               "2031-02-14T17:03:00Z,12.6,n/a\n"
               "2031-02-30T17:04:00Z,12.6,1.06\n"
               "2031-02-14T17:05:00Z,12.6,1.05\n"
               "2031-02-14T18:06:00+01:00,\"12,6\",1.05\n"
               "2031-02-14T17:07:00Z\n"
               "2031-02-14T17:08:00Z,12.6,1.04\n");
    daemon_advance(work, scene_time(9));
    assert_int_equal(scene_ask_number(work, "SELECT count(*) FROM reading"), before + 4);
    assert_true(work_has(work, "drop/done/mixed.csv"));
    const char *reason = work_read(work, "drop/done/mixed.csv.reason");
    static const char *const named[] = {"3", "n/a", "4", "2031-02-30", "7"};
    for (size_t index = 0; index < sizeof named / sizeof *named; index++)
        if (strstr(reason, named[index]) == NULL)
            fail_msg("'%s' is not in: %s", named[index], reason);
    assert_int_equal(daemon_end(work, SIGTERM, NULL), 0);
}

static void the_same_file_twice_is_nothing_new(void **state)
{
    struct work *work = *state;
    scene_start(work);
    scene_live(work, 5, 30);
    long before = scene_ask_number(work, "SELECT count(*) FROM reading");
    const char *text = work_read(work, "drop/done/at-30.csv");
    scene_drop(work, "at-30.csv", text);
    daemon_advance(work, scene_time(31));
    assert_int_equal(scene_ask_number(work, "SELECT count(*) FROM reading"), before);
    assert_false(work_has(work, "drop/at-30.csv"));
    assert_string_equal(work_read(work, "drop/done/at-30.csv"), text);
    assert_int_equal(daemon_end(work, SIGTERM, NULL), 0);
}

static void a_corrected_value_is_a_revision_and_both_are_kept(void **state)
{
    struct work *work = *state;
    scene_start(work);
    scene_live(work, 5, 30);
    scene_drop(work, "corrected.csv", "time,stage_m\n2031-02-14T17:30:00Z,1.09\n");
    daemon_advance(work, scene_time(31));
    assert_string_equal(
        scene_ask(work, "history.db", "SELECT value FROM reading WHERE observed = 1928854800 + 1800 ORDER BY entry"),
        "1.04\n1.09\n");
    assert_int_equal(daemon_end(work, SIGTERM, NULL), 0);
}

/* --- a logger's own file ---------------------------------------------------------------------------------------- */

static void a_file_that_a_logger_appends_to_is_read_on_from_where_it_was_left(void **state)
{
    struct work *work = *state;
    scene_change_config(work, "\"path\": \"drop\",", "\"path\": \"drop\", \"append\": \"logger.csv\",");
    work_make_folder(work, "drop");
    work_write(work, "drop/logger.csv", "time,stage_m\n2031-02-14T16:45:00Z,1.08\n2031-02-14T17:00:00Z,1.06\n");
    daemon_start_driven(work, scene_time(1));
    daemon_advance(work, scene_time(1));
    assert_int_equal(scene_ask_number(work, "SELECT count(*) FROM reading"), 2);
    work_append(work, "drop/logger.csv", "2031-02-14T17:15:00Z,1.0"); /* half a line is no line yet */
    daemon_advance(work, scene_time(16));
    assert_int_equal(scene_ask_number(work, "SELECT count(*) FROM reading"), 2);
    work_append(work, "drop/logger.csv", "5\n2031-02-14T17:30:00Z,1.04\n");
    daemon_advance(work, scene_time(31));
    assert_string_equal(scene_ask(work, "history.db", "SELECT value FROM reading ORDER BY entry"),
                        "1.08\n1.06\n1.05\n1.04\n");
    assert_int_equal(daemon_end(work, SIGKILL, NULL), -SIGKILL);

    work_append(work, "drop/logger.csv", "2031-02-14T17:45:00Z,1.03\n");
    daemon_start_driven(work, scene_time(46));
    daemon_advance(work, scene_time(46));
    assert_string_equal(scene_ask(work, "history.db", "SELECT value FROM reading ORDER BY entry"),
                        "1.08\n1.06\n1.05\n1.04\n1.03\n");
    assert_true(work_has(work, "drop/logger.csv"));

    /* rotated: the new one begins with a line that only it has */
    work_rename(work, "drop/logger.csv", "drop/logger.csv.1");
    work_write(work, "drop/logger.csv", "time,stage_m\n2031-02-14T18:00:00Z,1.02\n");
    daemon_advance(work, scene_time(61));
    assert_int_equal(scene_ask_number(work, "SELECT count(DISTINCT observed) FROM reading"), 6);
    assert_int_equal(scene_ask_number(work, "SELECT count(*) FROM reading"), 6);
    assert_int_equal(daemon_end(work, SIGTERM, NULL), 0);
}

/* --- what a reading is worth ------------------------------------------------------------------------------------ */

static void a_spike_wakes_nobody(void **state)
{
    struct work *work = *state;
    scene_start(work);
    scene_live(work, 5, 30);
    scene_drop_reading(work, 35, 6.91);
    daemon_advance(work, scene_time(35));
    assert_string_equal(judgement_at(work, 35), "hold\n");
    scene_drop_reading(work, 40, 1.03);
    daemon_advance(work, scene_time(40));
    assert_string_equal(judgement_at(work, 35), "hold\nkeep out\n");
    assert_string_equal(judgement_at(work, 40), "use\n");
    scene_live(work, 45, 60);
    assert_int_equal(scene_count_messages(work, "tried.jsonl"), 0);
    assert_string_equal(scene_level(work, "tallowick-ford"), "QUIET");
    assert_string_equal(scene_ask(work, "history.db", "SELECT value FROM reading WHERE value > 3"), "6.91\n");
    assert_int_equal(daemon_end(work, SIGTERM, NULL), 0);
}

/* Two readings that agree on the jump: the river has risen, and it is told at the second. */
static void a_rise_that_a_second_reading_confirms_is_told(void **state)
{
    struct work *work = *state;
    scene_start(work);
    scene_live(work, 5, 30);
    scene_drop_reading(work, 35, 2.95);
    daemon_advance(work, scene_time(35));
    assert_int_equal(scene_count_messages(work, "tried.jsonl"), 0);
    scene_drop_reading(work, 40, 2.97);
    daemon_advance(work, scene_time(40));
    assert_string_equal(judgement_at(work, 35), "hold\nuse\n");
    assert_true(scene_count_messages(work, "told.jsonl") > 0);
    assert_int_equal(daemon_end(work, SIGTERM, NULL), 0);
}

/* And one reading alone is not held for ever: the filter fails towards warning. */
static void a_rise_that_nobody_denies_counts_in_the_end(void **state)
{
    struct work *work = *state;
    scene_start(work);
    scene_live(work, 5, 30);
    scene_drop_reading(work, 35, 2.95);
    daemon_advance(work, scene_time(35));
    daemon_advance(work, scene_time(45));
    assert_int_equal(scene_count_messages(work, "tried.jsonl"), 0);
    daemon_advance(work, scene_time(50));
    assert_string_equal(judgement_at(work, 35), "hold\nuse\n");
    assert_true(scene_count_messages(work, "told.jsonl") > 0);
    assert_int_equal(daemon_end(work, SIGTERM, NULL), 0);
}

static void a_reading_by_hand_ends_blindness_while_the_gauge_is_silent(void **state)
{
    struct work *work = *state;
    struct scene_message messages[SCENE_MESSAGES_MAX];
    scene_start(work);
    scene_live(work, 5, 105);
    daemon_advance(work, scene_time(125));
    assert_string_equal(scene_point(work, "tallowick-ford", "blind"), "0");
    daemon_advance(work, scene_time(130)); /* 25 minutes of silence on a rise */
    assert_string_equal(scene_point(work, "tallowick-ford", "blind"), "1");
    size_t count = scene_messages(work, "told.jsonl", messages);
    assert_non_null(strstr(messages[count - 1].bulletin, "BLIND"));
    daemon_advance(work, scene_time(134));
    assert_int_equal(work_run(work, "say", "reading", "orlin-scar", "2.01", "--by", "technician", NULL).code, 0);
    assert_string_equal(scene_point(work, "tallowick-ford", "blind"), "0");
    assert_string_equal(
        scene_ask(work, "history.db", "SELECT source, value, \"by\", observed FROM reading WHERE \"by\" != ''"),
        work_print(work, "hand|2.01|technician|%lld\n", (long long)scene_time(134)));
    daemon_advance(work, scene_time(135));
    assert_true(scene_count_messages(work, "told.jsonl") > count);
    assert_int_equal(daemon_end(work, SIGTERM, NULL), 0);
}

/* --- out of order ----------------------------------------------------------------------------------------------- */

static const char *forecast_now(struct work *work)
{
    static const char *const members[] = {"advice", "act_by", "measured_until", "marks", "peak_m", "level_now_m"};
    const char *all = "";
    for (size_t index = 0; index < sizeof members / sizeof *members; index++)
        all = work_print(work, "%s%s\n", all, scene_point(work, "tallowick-ford", members[index]));
    return all;
}

static void a_late_batch_out_of_order_leads_to_the_same_forecast_as_readings_on_time(void **state)
{
    struct work *work = *state;
    scene_start(work);
    scene_live(work, 5, 165);
    char *on_time = strdup(forecast_now(work)); /* outlives the work folder */
    assert_int_equal(daemon_end(work, SIGTERM, NULL), 0);
    work_close(state);
    assert_int_equal(scene_open(state), 0);

    work = *state;
    static const int late[] = {105, 75, 135, 90, 120, 105, 60, 135};
    struct scene_reading batch[sizeof late / sizeof *late];
    scene_start(work);
    scene_live(work, 5, 45);
    for (int minute = 50; minute <= 145; minute += 5)
        daemon_advance(work, scene_time(minute));
    assert_string_equal(scene_point(work, "tallowick-ford", "blind"), "1");
    for (size_t index = 0; index < sizeof late / sizeof *late; index++)
        batch[index] = (struct scene_reading){late[index], scene_stage_m(late[index])};
    scene_drop_readings(work, "late.csv", sizeof late / sizeof *late, batch);
    scene_live(work, 150, 165);
    const char *late_now = forecast_now(work);
    if (strcmp(late_now, on_time) != 0)
        fail_msg("late:\n%son time:\n%s", late_now, on_time);
    free(on_time);
    assert_int_equal(scene_ask_number(work, "SELECT count(*) - count(DISTINCT observed) FROM reading"), 0);
    assert_int_equal(daemon_end(work, SIGTERM, NULL), 0);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        SCENE_TEST(a_renamed_file_is_recorded_at_once),
        SCENE_TEST(a_file_of_which_nothing_can_be_read_goes_to_bad_with_its_reason),
        SCENE_TEST(bad_lines_among_good_ones_cost_only_themselves),
        SCENE_TEST(the_same_file_twice_is_nothing_new),
        SCENE_TEST(a_corrected_value_is_a_revision_and_both_are_kept),
        SCENE_TEST(a_file_that_a_logger_appends_to_is_read_on_from_where_it_was_left),
        SCENE_TEST(a_spike_wakes_nobody),
        SCENE_TEST(a_rise_that_a_second_reading_confirms_is_told),
        SCENE_TEST(a_rise_that_nobody_denies_counts_in_the_end),
        SCENE_TEST(a_reading_by_hand_ends_blindness_while_the_gauge_is_silent),
        SCENE_TEST(a_late_batch_out_of_order_leads_to_the_same_forecast_as_readings_on_time),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
