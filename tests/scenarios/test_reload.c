/* SPDX-License-Identifier: MIT */
/* SIGHUP: a good configuration is taken, a bad one leaves the old in force and says so. */
#include "tests/scenarios/river_scene.h"

static const char *newest_settings(struct work *work)
{
    return scene_ask(work, "history.db",
                     "SELECT json_extract(payload, '$.settings') FROM ledger_payload ORDER BY entry DESC LIMIT 1");
}

static void reload(struct work *work, const char *answer)
{
    assert_int_equal(kill(work->daemon, SIGHUP), 0);
    daemon_await_log(work, answer);
}

static int64_t act_by(struct work *work, const char *point)
{
    int64_t utc_s = 0;
    assert_int_equal(when_parse(scene_point(work, point, "act_by"), NULL, &utc_s, NULL), FW_OK);
    return utc_s;
}

/* Ten minutes more for the crew is an act-by ten minutes earlier, to the second. */
static void a_good_change_is_taken_and_nothing_known_is_lost(void **state)
{
    struct work *work = *state;
    scene_start(work);
    scene_live(work, 5, 120);
    const char *before = newest_settings(work);
    int64_t act_by_before = act_by(work, "tallowick-ford");
    long reading_count = scene_ask_number(work, "SELECT count(*) FROM reading");
    assert_int_equal(
        work_run(work, "say", "road", "tallowick-ford", "CREW CALLED", "--by", "roads foreman", NULL).code, 0);
    scene_change_config(work, "\"night_min\": 55", "\"night_min\": 65");
    reload(work, "is in force");
    daemon_advance(work, scene_time(121));
    assert_string_not_equal(newest_settings(work), before);
    assert_int_equal(act_by(work, "tallowick-ford"), act_by_before - 10 * SCENE_MINUTE);
    assert_string_equal(scene_point(work, "tallowick-ford", "road.state"), "CREW CALLED");
    assert_string_equal(scene_point(work, "tallowick-ford", "onset"), "2031-02-14T18:30:00Z");
    assert_int_equal(scene_ask_number(work, "SELECT count(*) FROM reading"), reading_count);
    assert_int_equal(scene_ask_number(work, "SELECT count(*) FROM settings"), 2);
    scene_check_chain(work, "history.db");
    assert_int_equal(daemon_end(work, SIGTERM, NULL), 0);
}

static void a_bad_change_leaves_the_old_in_force_and_names_every_fault(void **state)
{
    struct work *work = *state;
    scene_start(work);
    const char *before = newest_settings(work);
    scene_change_config(work, "\"night_min\": 55", "\"night_min\": -55");
    scene_change_config(work, "\"invert_m\": 84.04", "\"inwert_m\": 84.04");
    reload(work, "configuration not taken, the old one stays in force");
    assert_non_null(strstr(daemon_log(work), "points[0].crew.night_min: -55"));
    assert_non_null(strstr(daemon_log(work), "points[1].inwert_m: unknown key"));
    scene_live(work, 5, 90);
    assert_string_equal(newest_settings(work), before);
    assert_string_equal(scene_level(work, "tallowick-ford"), "MUSTER");

    work_remove(work, "forewater.json"); /* and a file that is gone is no change at all */
    reload(work, "forewater.json: cannot be read");
    scene_live(work, 95, 95);
    assert_string_equal(newest_settings(work), before);
    assert_int_equal(daemon_end(work, SIGTERM, NULL), 0);
}

static void remove_point(struct work *work, const char *id)
{
    const char *config = work_read(work, "forewater.json");
    char *from = strstr(config, work_print(work, "{ \"id\": \"%s\"", id));
    assert_non_null(from);
    char *to = strstr(from, "\"margin_min\": 15 } }");
    assert_non_null(to);
    to += strlen("\"margin_min\": 15 } }");
    if (*to == ',')
        to++;
    else
        while (*--from != ',') /* the last one takes the comma before it along */
            ;
    work_write(work, "forewater.json", work_print(work, "%.*s%s", (int)(from - config), config, to));
}

static void a_crossing_with_an_open_thread_cannot_be_removed(void **state)
{
    struct work *work = *state;
    scene_start(work);
    scene_live(work, 5, 90);
    const char *before = newest_settings(work);
    assert_string_equal(scene_level(work, "tallowick-ford"), "MUSTER");
    remove_point(work, "tallowick-ford");
    reload(work, "crossing 'tallowick-ford' has an open thread and cannot be removed");
    scene_live(work, 95, 150);
    assert_string_equal(newest_settings(work), before);
    assert_string_equal(scene_level(work, "tallowick-ford"), "SEND");
    assert_int_equal(daemon_end(work, SIGTERM, NULL), 0);
}

static void a_crossing_whose_road_is_shut_cannot_be_removed(void **state)
{
    struct work *work = *state;
    scene_start(work);
    assert_int_equal(
        work_run(work, "say", "road", "marren-causeway", "SHUT", "--both-sides", "--by", "roads foreman", NULL).code,
        0);
    remove_point(work, "marren-causeway");
    reload(work, "crossing 'marren-causeway' has an open thread and cannot be removed");
    assert_int_equal(daemon_end(work, SIGTERM, NULL), 0);
}

static void a_quiet_crossing_may_be_removed_and_brought_back(void **state)
{
    struct work *work = *state;
    scene_start(work);
    const char *before = newest_settings(work);
    remove_point(work, "marren-causeway");
    reload(work, "is in force");
    scene_live(work, 5, 5);
    assert_string_equal(scene_point(work, "marren-causeway", "advice"), "");
    assert_string_equal(scene_point(work, "tallowick-ford", "advice"), "QUIET");
    work_write(work, "forewater.json", scene_config);
    reload(work, work_print(work, "configuration %.8s is in force", before));
    scene_live(work, 10, 10);
    assert_string_equal(scene_point(work, "marren-causeway", "advice"), "QUIET");
    assert_int_equal(daemon_end(work, SIGTERM, NULL), 0);
}

static void the_store_cannot_be_moved_under_a_running_daemon(void **state)
{
    struct work *work = *state;
    scene_start(work);
    const char *before = newest_settings(work);
    scene_change_config(work, "\"file\": \"history.db\"", "\"file\": \"other.db\"");
    reload(work, "store.file cannot change while the daemon runs");
    scene_live(work, 5, 5);
    assert_string_equal(newest_settings(work), before);
    assert_false(work_has(work, "other.db"));
    assert_int_equal(daemon_end(work, SIGTERM, NULL), 0);
}

static void a_changed_drop_folder_is_watched_from_then_on(void **state)
{
    struct work *work = *state;
    scene_start(work);
    scene_change_config(work, "\"path\": \"drop\"", "\"path\": \"other-drop\"");
    reload(work, "is in force");
    work_write(work, "other-drop/.late.csv", "time,stage_m\n2031-02-14T17:15:00Z,1.05\n");
    work_rename(work, "other-drop/.late.csv", "other-drop/late.csv");
    daemon_advance(work, scene_time(16));
    assert_int_equal(scene_ask_number(work, "SELECT max(observed) FROM reading"), scene_time(15));
    assert_true(work_has(work, "other-drop/done/late.csv"));
    assert_int_equal(daemon_end(work, SIGTERM, NULL), 0);
}

static void a_message_under_way_at_that_moment_is_told_in_the_end_under_its_id(void **state)
{
    struct work *work = *state;
    struct scene_message messages[SCENE_MESSAGES_MAX];
    scene_start(work);
    scene_live(work, 5, 85);
    work_write(work, "hook-sleeps", "");
    scene_drop_reading(work, 90, scene_stage_m(90));
    daemon_push(work, scene_time(90));
    int64_t until_ms = work_clock_ms() + WORK_DEADLINE_MS;
    while (!work_has(work, "hook.pid") && patience_left(until_ms))
        ;
    work_remove(work, "hook-sleeps");
    scene_change_config(work, "\"night_min\": 30", "\"night_min\": 35");
    reload(work, "is in force");
    assert_string_equal(daemon_receive(work), "at 2031-02-14T18:30:00Z");
    assert_int_equal(scene_count_messages(work, "told.jsonl"), 1);
    assert_int_equal(scene_messages(work, "tried.jsonl", messages), 2);
    assert_string_equal(messages[0].id, messages[1].id);
    assert_int_equal(daemon_end(work, SIGTERM, NULL), 0);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        SCENE_TEST(a_good_change_is_taken_and_nothing_known_is_lost),
        SCENE_TEST(a_bad_change_leaves_the_old_in_force_and_names_every_fault),
        SCENE_TEST(a_crossing_with_an_open_thread_cannot_be_removed),
        SCENE_TEST(a_crossing_whose_road_is_shut_cannot_be_removed),
        SCENE_TEST(a_quiet_crossing_may_be_removed_and_brought_back),
        SCENE_TEST(the_store_cannot_be_moved_under_a_running_daemon),
        SCENE_TEST(a_changed_drop_folder_is_watched_from_then_on),
        SCENE_TEST(a_message_under_way_at_that_moment_is_told_in_the_end_under_its_id),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
