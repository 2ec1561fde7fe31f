/* SPDX-License-Identifier: MIT */
/* `forewater run` as a service manager and an operator see it: one cycle, its end, its refusals, a bad boot. */
#include "tests/scenarios/river_scene.h"

enum { END_LIMIT_MS = 3000 }; /* promised within 1 s; the rest is for a busy machine */

/* Readings up to this moment of the real clock, every quarter of an hour, receding by 0.04 m/h. */
static const char *readings_until_now(struct work *work, int count)
{
    char at[WHEN_TEXT_SIZE];
    int64_t now_utc_s = (int64_t)time(NULL);
    char *csv = work_print(work, "time,stage_m\n");
    for (int index = count - 1; index >= 0; index--)
        csv = work_print(work, "%s%s,%.2f\n", csv, when_rfc3339_utc(now_utc_s - index * 15 * SCENE_MINUTE, at),
                         1.02 + 0.01 * index);
    return csv;
}

/* --- once ------------------------------------------------------------------------------------------------------- */

static void one_cycle_stores_what_lay_in_the_folder_and_ends(void **state)
{
    struct work *work = *state;
    enum { READING_COUNT = 27 };
    work_make_folder(work, "drop");
    work_write(work, "drop/morning.csv", readings_until_now(work, READING_COUNT));
    struct ending ending = work_run(work, "run", "--once", NULL);
    if (ending.code != 0)
        fail_msg("exit %d: %s", ending.code, ending.err);
    assert_true(work_has(work, "drop/done/morning.csv"));
    assert_false(work_has(work, "drop/morning.csv"));
    assert_int_equal(scene_ask_number(work, "SELECT count(*) FROM reading"), READING_COUNT);
    assert_int_equal(scene_ask_number(work, "SELECT count(*) FROM judgement WHERE use = 'use'"), READING_COUNT);
    assert_int_equal(scene_ask_number(work, "SELECT count(*) FROM forecast"), 1);
    assert_int_equal(scene_ask_number(work, "SELECT count(DISTINCT point) FROM forecast_curve"), 2);
    assert_int_equal(scene_check_chain(work, "history.db"), 1);
    assert_string_equal(scene_level(work, "tallowick-ford"), "QUIET");
}

/* The file needs two seconds until it counts as whole: until then the gauge is not silent, it is not read yet. */
static void nobody_is_woken_for_a_silence_that_the_waiting_files_end(void **state)
{
    struct work *work = *state;
    work_make_folder(work, "drop");
    work_write(work, "drop/morning.csv", readings_until_now(work, 27));
    assert_int_equal(work_run(work, "run", "--once", NULL).code, 0);
    assert_int_equal(scene_count_messages(work, "tried.jsonl"), 0);
    assert_int_equal(scene_ask_number(work, "SELECT count(*) FROM advice WHERE is_blind = 1"), 0);
}

static void one_cycle_without_any_reading_tells_that_it_is_blind(void **state)
{
    struct work *work = *state;
    struct scene_message messages[SCENE_MESSAGES_MAX];
    assert_int_equal(work_run(work, "run", "--once", NULL).code, 0);
    assert_int_equal(scene_messages(work, "told.jsonl", messages), 1);
    assert_non_null(strstr(messages[0].text, "no reading yet"));
    assert_non_null(strstr(messages[0].bulletin, "BLIND"));
    scene_expect_caution(messages[0].bulletin);
}

/* --- its end ---------------------------------------------------------------------------------------------------- */

static const struct end_case {
    int signal;
    const char *hook; /* NULL: none under way */
    const char *shows;
} end_cases[] = {
    {SIGTERM, NULL, "SIGTERM, nothing under way"},
    {SIGINT, NULL, "SIGINT, nothing under way"},
    {SIGTERM, "echo $$ >hook.pid\nsleep 60\n", "SIGTERM while a hook sleeps"},
    {SIGINT, "echo $$ >hook.pid\nsleep 60\n", "SIGINT while a hook sleeps"},
    {SIGTERM, "trap '' TERM INT\necho $$ >hook.pid\nsleep 60\n", "SIGTERM while a hook sleeps and ignores TERM"},
};

static pid_t await_hook(struct work *work)
{
    int64_t until_ms = work_clock_ms() + WORK_DEADLINE_MS;
    while (strchr(work_read(work, "hook.pid"), '\n') == NULL && patience_left(until_ms))
        ;
    pid_t hook = (pid_t)strtol(work_read(work, "hook.pid"), NULL, 10);
    assert_true(hook > 0);
    return hook;
}

/* In the world's own time, as it runs at a district office: no reading at all is a change of decision, and told. */
static void expect_clean_end(struct work *work, const struct end_case *given)
{
    pid_t hook = 0;
    int64_t took_ms = 0;
    if (given->hook != NULL)
        work_write(work, "hook", work_print(work, "#!/bin/sh\n%s", given->hook));
    daemon_start(work, NULL);
    daemon_await_log(work, "Tallowick Ford: QUIET -> MUSTER, now BLIND");
    if (given->hook != NULL)
        hook = await_hook(work);
    int code = daemon_end(work, given->signal, &took_ms);
    print_message("%s: ended with %d after %lld ms\n", given->shows, code, (long long)took_ms);
    assert_int_equal(code, 0);
    assert_true(took_ms < END_LIMIT_MS);
    assert_null(strstr(daemon_log(work), "rror"));
    if (hook != 0) {
        assert_int_equal(kill(hook, 0), -1);
        assert_int_equal(errno, ESRCH);
    }
    assert_false(work_has(work, "history.db-wal")); /* everything is in the file, nobody holds it */
    assert_false(store_is_held(work_path(work, "history.db"), NULL));
    assert_int_equal(scene_check_chain(work, "history.db"), 1);
}

static void a_signal_ends_it_cleanly_whatever_a_hook_does(void **state)
{
    for (size_t index = 0; index < sizeof end_cases / sizeof *end_cases; index++) {
        struct work *work = *state;
        expect_clean_end(work, &end_cases[index]);
        work_close(state);
        assert_int_equal(scene_open(state), 0);
    }
}

static void a_driver_may_end_it(void **state)
{
    struct work *work = *state;
    scene_start(work);
    daemon_send(work, "quit\n");
    assert_int_equal(work_await(work->daemon, WORK_DEADLINE_MS), 0);
    daemon_forget(work);
    assert_false(work_has(work, "drive.sock"));
}

static void a_line_of_the_driver_that_cannot_be_read_is_answered_and_changes_nothing(void **state)
{
    struct work *work = *state;
    scene_start(work);
    daemon_send(work, "advance tomorrow\n");
    assert_non_null(strstr(daemon_receive(work), "error: 'tomorrow' is not a time"));
    daemon_send(work, "fly\n");
    assert_non_null(strstr(daemon_receive(work), "expected 'advance TIME' or 'quit'"));
    daemon_send(work, "advance 2031-02-14T16:00:00Z\n"); /* the world never goes back */
    assert_string_equal(daemon_receive(work), "at 2031-02-14T17:00:00Z");
    assert_int_equal(daemon_end(work, SIGTERM, NULL), 0);
}

/* --- refusals --------------------------------------------------------------------------------------------------- */

static void a_second_one_on_the_same_store_is_refused_with_the_number_of_the_first(void **state)
{
    struct work *work = *state;
    scene_start(work);
    struct ending second = work_run(work, "run", NULL);
    print_message("the second instance was refused after %lld ms\n", (long long)second.took_ms);
    assert_int_equal(second.code, 75);
    assert_true(second.took_ms < END_LIMIT_MS);
    if (strstr(second.err, work_print(work, "pid %d", (int)work->daemon)) == NULL)
        fail_msg("'%s' does not name process %d", second.err, (int)work->daemon);
    scene_live(work, 5, 15);
    assert_int_equal(scene_ask_number(work, "SELECT max(observed) FROM reading"), scene_time(15));
    assert_int_equal(daemon_end(work, SIGTERM, NULL), 0);
}

static void wrong_usage_is_64_and_says_what_was_expected(void **state)
{
    struct work *work = *state;
    static const struct {
        const char *words[6];
        const char *says;
    } rows[] = {
        {{NULL}, "usage: forewater COMMAND"},
        {{"fly"}, "'fly' is not a command"},
        {{"run", "--nonsense"}, "option '--nonsense' is not known"},
        {{"run", "--config"}, "option '--config' needs a value"},
        {{"run", "--config", "forewater.json", "twice"}, "'twice' is not expected here"},
        {{"run", "--drive", "drive.sock"}, "--drive needs --world-start"},
        {{"run", "--drive", "drive.sock", "--world-start", "noon"}, "'noon' is not a time"},
        {{"status", "--config", "forewater.json", "all"}, "'all' is not expected here"},
        {{"replay", "--config", "forewater.json"}, "replay needs --store"},
        {{"say", "--config", "forewater.json"}, "expected accept, reading, seen, road or note"},
    };
    for (size_t index = 0; index < sizeof rows / sizeof *rows; index++) {
        const char *const *words = rows[index].words;
        struct ending ending = work_run_bare(work, words[0], words[1], words[2], words[3], words[4], NULL);
        if (ending.code != 64 || strstr(ending.err, rows[index].says) == NULL)
            fail_msg("row %zu: exit %d, '%s' instead of '%s'", index, ending.code, ending.err, rows[index].says);
        assert_string_equal(ending.out, "");
    }
}

static void a_driven_world_needs_a_path_that_a_socket_can_have(void **state)
{
    struct work *work = *state;
    char path[200];
    memset(path, 'x', sizeof path - 1);
    path[sizeof path - 1] = '\0';
    struct ending ending = work_run(work, "run", "--drive", path, "--world-start", "2031-02-14T17:00:00Z", NULL);
    assert_int_equal(ending.code, 64);
    assert_non_null(strstr(ending.err, "is longer than"));
}

static void a_missing_configuration_is_78(void **state)
{
    struct work *work = *state;
    struct ending ending = work_run_bare(work, "run", "--config", "elsewhere.json", NULL);
    assert_int_equal(ending.code, 78);
    assert_non_null(strstr(ending.err, "elsewhere.json: cannot be read: No such file"));
}

static void make_three_faults(struct work *work)
{
    scene_change_config(work, "\"slope\": 0.0024, \"section\": \"ildra\", \"method\": \"muskingum-cunge\" } ],",
                        "\"slope\": -1, \"section\": \"x\" } ],");
    scene_change_config(work, "\"invert_m\": 84.04", "\"inwert_m\": 84.04");
}

static void a_bad_configuration_is_78_with_every_fault_and_makes_nothing(void **state)
{
    struct work *work = *state;
    make_three_faults(work);
    struct ending ending = work_run(work, "run", NULL);
    assert_int_equal(ending.code, 78);
    const char *const faults[] = {"reaches[1].slope: -1", "reaches[1].section: \"x\"",
                                  "points[1].inwert_m: unknown key"};
    for (size_t index = 0; index < sizeof faults / sizeof *faults; index++)
        if (strstr(ending.err, faults[index]) == NULL)
            fail_msg("'%s' is not in: %s", faults[index], ending.err);
    assert_false(work_has(work, "history.db"));
    assert_false(work_has(work, "drop"));
}

static void another_programs_database_is_65_and_left_byte_for_byte(void **state)
{
    struct work *work = *state;
    sqlite3 *db = NULL;
    size_t length_before = 0;
    size_t length_after = 0;
    assert_int_equal(sqlite3_open(work_path(work, "history.db"), &db), SQLITE_OK);
    assert_int_equal(
        sqlite3_exec(db, "CREATE TABLE recipe (name); INSERT INTO recipe VALUES ('dumplings')", NULL, NULL, NULL),
        SQLITE_OK);
    sqlite3_close(db);
    const char *before = work_read_bytes(work, "history.db", &length_before);
    struct ending ending = work_run(work, "run", NULL);
    assert_int_equal(ending.code, 65);
    assert_non_null(strstr(ending.err, "history.db: is not a Forewater store"));
    const char *after = work_read_bytes(work, "history.db", &length_after);
    assert_int_equal(length_before, length_after);
    assert_memory_equal(before, after, length_before);
    assert_false(work_has(work, "history.db-wal"));
    assert_false(work_has(work, "history.db.lock"));
}

/* --- trouble that it survives ----------------------------------------------------------------------------------- */

static void without_a_place_for_its_store_it_forecasts_and_records_once_there_is_one(void **state)
{
    struct work *work = *state;
    struct scene_message messages[SCENE_MESSAGES_MAX];
    scene_change_config(work, "\"file\": \"history.db\"", "\"file\": \"disk/store/history.db\"");
    scene_start(work);
    assert_non_null(strstr(daemon_log(work), "disk/store: cannot make the directory of the store"));
    scene_live(work, 5, 90);
    assert_int_equal(scene_messages(work, "told.jsonl", messages), 1);
    assert_non_null(strstr(messages[0].text, "MUSTER"));
    assert_non_null(strstr(messages[0].bulletin, "NOT STORED"));
    assert_int_equal(work_run(work, "status", NULL).code, 69);

    work_make_folder(work, "disk");
    scene_live(work, 95, 105);
    assert_int_equal(scene_count_messages(work, "told.jsonl"), 1);
    assert_non_null(strstr(scene_ask(work, "disk/store/history.db", "SELECT kind FROM ledger"), "reseed\ncycle\n"));
    assert_string_equal(scene_ask(work, "disk/store/history.db", "SELECT max(observed) FROM reading"),
                        work_print(work, "%lld\n", (long long)scene_time(105)));
    assert_int_equal(work_run(work, "status", NULL).code, 0);
    assert_int_equal(daemon_end(work, SIGTERM, NULL), 0);
}

/* The disk comes late: what the store knew before and what was learnt without it are one picture from then on. */
static void a_store_that_comes_late_is_put_under_what_was_learnt_without_it(void **state)
{
    struct work *work = *state;
    work_make_folder(work, "disk");
    scene_change_config(work, "\"file\": \"history.db\"", "\"file\": \"disk/store/history.db\"");
    scene_start(work);
    scene_live(work, 5, 90);
    const char *const said[] = {"say", "road", "tallowick-ford", "CREW CALLED", "--by", "roads foreman"};
    assert_int_equal(work_run(work, said[0], said[1], said[2], said[3], said[4], said[5], NULL).code, 0);
    assert_int_equal(daemon_end(work, SIGKILL, NULL), -SIGKILL);
    work_rename(work, "disk", "disk-away");

    daemon_start_driven(work, scene_time(95));
    assert_non_null(strstr(daemon_log(work), "cannot make the directory of the store"));
    scene_live(work, 95, 115);
    assert_int_equal(
        work_run(work, "say", "--wait", "0", "seen", "marren-causeway", "dry", "--by", "driver", NULL).code, 69);
    scene_live(work, 120, 120);
    work_rename(work, "disk-away", "disk");
    scene_live(work, 125, 150);

    const char *store = "disk/store/history.db";
    assert_string_equal(scene_ask(work, store, "SELECT count(DISTINCT observed), max(observed) FROM reading"),
                        work_print(work, "35|%lld\n", (long long)scene_time(150)));
    assert_string_equal(scene_ask(work, store,
                                  "SELECT count(*) FROM reading r WHERE NOT EXISTS (SELECT 1 FROM judgement "
                                  "WHERE reading = r.entry)"),
                        "0\n");
    const char *picture = work_run(work, "status", "--json", NULL).out;
    assert_non_null(strstr(picture, "\"state\":\"CREW CALLED\""));
    assert_non_null(strstr(picture, "\"water_seen\":{\"wet\":false"));
    assert_non_null(strstr(picture, "\"advice\":\"SEND\""));
    assert_true(scene_check_chain(work, store) > 20);
    assert_int_equal(daemon_end(work, SIGTERM, NULL), 0);
}

static const char *newest_settings(struct work *work)
{
    return scene_ask(work, "history.db",
                     "SELECT json_extract(payload, '$.settings') FROM ledger_payload ORDER BY entry DESC LIMIT 1");
}

static void with_a_bad_configuration_it_starts_on_the_last_good_one_and_says_so(void **state)
{
    struct work *work = *state;
    scene_start(work);
    assert_int_equal(daemon_end(work, SIGTERM, NULL), 0);
    const char *good = newest_settings(work);
    make_three_faults(work);
    const char *bad_text = work_read(work, "forewater.json");

    char from[WHEN_TEXT_SIZE];
    daemon_start(work, "--store", "history.db", "--drive", "drive.sock", "--world-start",
                 when_rfc3339_utc(scene_time(5), from), NULL);
    daemon_connect(work);
    assert_non_null(strstr(daemon_log(work), "THE CONFIGURATION forewater.json CANNOT BE USED"));
    assert_non_null(strstr(daemon_log(work), "Running on the last good settings"));
    assert_non_null(strstr(daemon_log(work), "points[1].inwert_m"));
    scene_live(work, 5, 90);
    assert_string_equal(newest_settings(work), good);
    assert_true(scene_count_messages(work, "told.jsonl") > 0);
    assert_string_equal(work_read(work, "forewater.json"), bad_text);

    /* mended and told so, it takes the file again */
    work_write(work, "forewater.json", scene_config);
    scene_change_config(work, "\"night_min\": 55", "\"night_min\": 65");
    assert_int_equal(kill(work->daemon, SIGHUP), 0);
    daemon_await_log(work, "is in force");
    scene_live(work, 95, 95);
    assert_string_not_equal(newest_settings(work), good);
    assert_int_equal(daemon_end(work, SIGTERM, NULL), 0);
}

static void the_state_directory_of_the_service_manager_serves_for_the_same(void **state)
{
    struct work *work = *state;
    scene_start(work);
    assert_int_equal(daemon_end(work, SIGTERM, NULL), 0);
    make_three_faults(work);
    assert_int_equal(work_run(work, "run", "--once", NULL).code, 78);
    assert_int_equal(setenv("STATE_DIRECTORY", work->folder, 1), 0);
    struct ending ending = work_run(work, "run", "--once", NULL);
    assert_int_equal(unsetenv("STATE_DIRECTORY"), 0);
    assert_int_equal(ending.code, 0);
    assert_non_null(strstr(ending.err, "THE CONFIGURATION forewater.json CANNOT BE USED"));
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        SCENE_TEST(one_cycle_stores_what_lay_in_the_folder_and_ends),
        SCENE_TEST(nobody_is_woken_for_a_silence_that_the_waiting_files_end),
        SCENE_TEST(one_cycle_without_any_reading_tells_that_it_is_blind),
        SCENE_TEST(a_signal_ends_it_cleanly_whatever_a_hook_does),
        SCENE_TEST(a_driver_may_end_it),
        SCENE_TEST(a_line_of_the_driver_that_cannot_be_read_is_answered_and_changes_nothing),
        SCENE_TEST(a_second_one_on_the_same_store_is_refused_with_the_number_of_the_first),
        SCENE_TEST(wrong_usage_is_64_and_says_what_was_expected),
        SCENE_TEST(a_driven_world_needs_a_path_that_a_socket_can_have),
        SCENE_TEST(a_missing_configuration_is_78),
        SCENE_TEST(a_bad_configuration_is_78_with_every_fault_and_makes_nothing),
        SCENE_TEST(another_programs_database_is_65_and_left_byte_for_byte),
        SCENE_TEST(without_a_place_for_its_store_it_forecasts_and_records_once_there_is_one),
        SCENE_TEST(a_store_that_comes_late_is_put_under_what_was_learnt_without_it),
        SCENE_TEST(with_a_bad_configuration_it_starts_on_the_last_good_one_and_says_so),
        SCENE_TEST(the_state_directory_of_the_service_manager_serves_for_the_same),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
