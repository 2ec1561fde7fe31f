/* SPDX-License-Identifier: MIT */
/* `forewater status`: the newest recorded picture, from a running daemon's store and from a stopped one's. */
#include "tests/scenarios/river_scene.h"

#include "daemon/deck.h"

static void expect_in(const char *text, const char *wanted)
{
    if (strstr(text, wanted) == NULL)
        fail_msg("'%s' is not in: %s", wanted, text);
}

static void without_a_store_it_is_69_and_says_where_it_looked(void **state)
{
    struct work *work = *state;
    static const char *const options[] = {NULL, "--json"};
    for (size_t index = 0; index < 2; index++) {
        struct ending ending = work_run(work, "status", options[index], NULL);
        assert_int_equal(ending.code, 69);
        assert_string_equal(ending.out, "");
        expect_in(ending.err, work_print(work, "%s/history.db: there is no store", work->folder));
    }
    assert_false(work_has(work, "history.db")); /* to look is not to make */
    assert_false(work_has(work, "history.db.lock"));
}

static void another_programs_file_is_65(void **state)
{
    struct work *work = *state;
    work_write(work, "history.db", "These are the minutes of the road committee.\n");
    struct ending ending = work_run(work, "status", NULL);
    assert_int_equal(ending.code, 65);
    expect_in(ending.err, "is not a Forewater store");
}

static void a_store_without_a_picture_is_69(void **state)
{
    struct work *work = *state;
    daemon_start_driven(work, SCENE_START); /* the world has not begun: no cycle yet */
    struct ending ending = work_run(work, "status", NULL);
    assert_int_equal(ending.code, 69);
    expect_in(ending.err, "holds no picture yet");
    assert_int_equal(daemon_end(work, SIGTERM, NULL), 0);
}

/* At minute 150: SEND at the ford, act by 20:39; MUSTER at the causeway; a crew is out. */
static void start_at_send(struct work *work)
{
    scene_start(work);
    scene_live(work, 5, 150);
    assert_int_equal(work_run(work, "say", "road", "tallowick-ford", "CREW OUT", "--by", "roads foreman", NULL).code,
                     0);
}

static void the_picture_is_shown_with_what_a_person_needs(void **state)
{
    struct work *work = *state;
    start_at_send(work);
    struct ending ending = work_run(work, "status", NULL);
    assert_int_equal(ending.code, 0);
    assert_string_equal(ending.err, "");
    expect_in(ending.out, "Vennmark  picture of 2031-02-14T20:30:00+01:00");
    expect_in(ending.out, work_print(work, "daemon: process %d", (int)work->daemon));
    expect_in(ending.out, "2.22 m +0.80 m/h  seen 20:30, 0 min old");
    expect_in(ending.out, "20:39   Tallowick Ford      SEND ");
    expect_in(ending.out, "CREW OUT 20:30");
    expect_in(ending.out, "the inflow is assumed");
    expect_in(ending.out, "\nTallowick Ford, water on the deck, in the highest run ");
    expect_in(ending.out,
              "\n    over the draft limit of 0.3 m2/s for a small car, stationary: in some runs, earliest 22:");
    expect_in(ending.out, "\n" DECK_CAUTION "\n");
    assert_null(strstr(ending.out, "Marren Causeway, water on the deck")); /* its settings say nothing of it */
    scene_expect_caution(ending.out);
    /* by act-by: the ford before the causeway */
    assert_true(strstr(ending.out, "Tallowick Ford") < strstr(ending.out, "Marren Causeway"));

    assert_int_equal(daemon_end(work, SIGTERM, NULL), 0);
    struct ending stopped = work_run(work, "status", NULL);
    assert_int_equal(stopped.code, 0);
    expect_in(stopped.out, "NO DAEMON IS RUNNING: this is the last picture it recorded");
    expect_in(stopped.out, "20:39   Tallowick Ford      SEND ");
    scene_expect_caution(stopped.out);
}

static void as_json_it_is_the_recorded_payload_byte_for_byte(void **state)
{
    struct work *work = *state;
    start_at_send(work);
    const char *recorded =
        scene_ask(work, "history.db", "SELECT payload FROM ledger_payload ORDER BY entry DESC LIMIT 1");
    for (int is_stopped = 0; is_stopped < 2; is_stopped++) {
        struct ending ending = work_run(work, "status", "--json", NULL);
        assert_int_equal(ending.code, 0);
        assert_string_equal(ending.out, recorded);
        cJSON *picture = cJSON_Parse(ending.out);
        assert_non_null(picture);
        assert_string_equal(scene_member(work, picture, "schema"), "forewater.picture.1");
        assert_string_equal(scene_member(work, picture, "as_of"), "2031-02-14T19:30:00Z");
        cJSON_Delete(picture);
        if (!is_stopped)
            assert_int_equal(daemon_end(work, SIGTERM, NULL), 0);
    }
}

static void a_daemon_that_was_killed_leaves_a_picture_that_can_be_read(void **state)
{
    struct work *work = *state;
    start_at_send(work);
    assert_int_equal(daemon_end(work, SIGKILL, NULL), -SIGKILL);
    struct ending ending = work_run(work, "status", NULL);
    assert_int_equal(ending.code, 0);
    expect_in(ending.out, "NO DAEMON IS RUNNING");
    expect_in(ending.out, "CREW OUT 20:30");
}

/* In the world's own time, with a picture of yesterday in the store. */
static void while_the_file_has_faults_the_last_good_settings_serve(void **state)
{
    struct work *work = *state;
    start_at_send(work);
    work_write(work, "forewater.json", "{ \"district\": ");
    struct ending refused = work_run(work, "status", NULL);
    assert_int_equal(refused.code, 78); /* nothing says where the store is */
    struct ending ending = work_run(work, "status", "--store", work_print(work, "%s/history.db", work->folder), NULL);
    assert_int_equal(ending.code, 0);
    expect_in(ending.err, "CANNOT BE USED");
    expect_in(ending.out, "20:39   Tallowick Ford      SEND ");
    struct ending said = work_run(work, "say", "road", "tallowick-ford", "SHUT", "--both-sides", "--by",
                                  "roads foreman", "--store", work_print(work, "%s/history.db", work->folder), NULL);
    assert_int_equal(said.code, 0);
    expect_in(said.out, "recorded: road tallowick-ford SHUT");
    assert_int_equal(daemon_end(work, SIGTERM, NULL), 0);
}

static void an_old_picture_is_marked_as_old(void **state)
{
    struct work *work = *state;
    daemon_start_driven(work, (int64_t)time(NULL) - 90 * SCENE_MINUTE);
    daemon_advance(work, (int64_t)time(NULL) - 90 * SCENE_MINUTE);
    struct ending ending = work_run(work, "status", NULL);
    assert_int_equal(ending.code, 0);
    expect_in(ending.out, "(90 min OLD)");
    assert_int_equal(daemon_end(work, SIGTERM, NULL), 0);
}

static void to_look_changes_nothing_and_disturbs_nobody(void **state)
{
    struct work *work = *state;
    start_at_send(work);
    long entries = scene_ask_number(work, "SELECT count(*) FROM ledger");
    for (int look = 0; look < 3; look++)
        assert_int_equal(work_run(work, "status", NULL).code, 0);
    scene_live(work, 155, 165);
    assert_int_equal(scene_ask_number(work, "SELECT count(*) FROM ledger"), entries + 3);
    assert_null(strstr(daemon_log(work), "nothing is being recorded"));
    assert_int_equal(daemon_end(work, SIGTERM, NULL), 0);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        SCENE_TEST(without_a_store_it_is_69_and_says_where_it_looked),
        SCENE_TEST(another_programs_file_is_65),
        SCENE_TEST(a_store_without_a_picture_is_69),
        SCENE_TEST(the_picture_is_shown_with_what_a_person_needs),
        SCENE_TEST(as_json_it_is_the_recorded_payload_byte_for_byte),
        SCENE_TEST(a_daemon_that_was_killed_leaves_a_picture_that_can_be_read),
        SCENE_TEST(while_the_file_has_faults_the_last_good_settings_serve),
        SCENE_TEST(an_old_picture_is_marked_as_old),
        SCENE_TEST(to_look_changes_nothing_and_disturbs_nobody),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
