/* SPDX-License-Identifier: MIT */
/* A new life carries on where the old one ended, whether it was told to end or was killed. */
#include "tests/scenarios/river_scene.h"

static const struct {
    int signal;
    int code;
    const char *shows;
} ends[] = {{SIGTERM, 0, "told to end"}, {SIGKILL, -SIGKILL, "killed"}};

/* Everything of a point that people and advice have said. */
static const char *what_stands(struct work *work)
{
    static const char *const members[] = {"advice",      "near_sides_only", "act_by",       "since",   "onset",
                                          "number",      "road.state",      "road.at",      "road.by", "accepted",
                                          "accepted_by", "water_seen.wet",  "water_seen.at"};
    const char *points[] = {"tallowick-ford", "marren-causeway"};
    const char *all = "";
    for (size_t point = 0; point < 2; point++)
        for (size_t member = 0; member < sizeof members / sizeof *members; member++)
            all = work_print(work, "%s%s %s: %s\n", all, points[point], members[member],
                             scene_point(work, points[point], members[member]));
    return all;
}

static void say(struct work *work, const char *what, const char *subject, const char *state)
{
    struct ending ending = work_run(work, "say", "--by", "roads foreman", what, subject, state, NULL);
    if (ending.code != 0)
        fail_msg("%s", ending.err);
}

static bool is_among(const struct scene_message *message, const struct scene_message messages[], size_t count)
{
    for (size_t index = 0; index < count; index++)
        if (strcmp(messages[index].id, message->id) == 0)
            return true;
    return false;
}

static void expect_each_once(const struct scene_message messages[], size_t count)
{
    for (size_t index = 0; index < count; index++)
        if (is_among(&messages[index], messages, index))
            fail_msg("message %s was told twice: %s", messages[index].id, messages[index].text);
}

/* At minute 150 the ford's advice becomes SEND, and both crossings are told of. */
static void facts_readings_and_unsent_messages_survive(void **state)
{
    for (size_t row = 0; row < sizeof ends / sizeof *ends; row++) {
        struct work *work = *state;
        struct scene_message told[SCENE_MESSAGES_MAX], tried[SCENE_MESSAGES_MAX], later[SCENE_MESSAGES_MAX];
        print_message("%s\n", ends[row].shows);
        scene_start(work);
        scene_live(work, 5, 145);
        say(work, "road", "tallowick-ford", "CREW OUT");
        say(work, "seen", "tallowick-ford", "dry");
        say(work, "accept", "1", NULL);
        work_write(work, "hook-fails", "");
        scene_live(work, 150, 150);
        assert_string_equal(scene_level(work, "tallowick-ford"), "SEND");
        size_t told_count = scene_messages(work, "told.jsonl", told);
        size_t tried_count = scene_messages(work, "tried.jsonl", tried);
        assert_int_equal(told_count, 3);
        assert_int_equal(tried_count, told_count + 2);
        const char *stood = what_stands(work);
        assert_non_null(strstr(stood, "road.state: CREW OUT"));
        long reading_count = scene_ask_number(work, "SELECT count(*) FROM reading");
        assert_int_equal(daemon_end(work, ends[row].signal, NULL), ends[row].code);
        work_remove(work, "hook-fails");

        daemon_start_driven(work, scene_time(152));
        assert_non_null(strstr(daemon_log(work), "was away since 2031-02-14T20:30:00+01:00; carrying on"));
        daemon_advance(work, scene_time(152));
        assert_string_equal(what_stands(work), stood);
        assert_int_equal(scene_ask_number(work, "SELECT count(*) FROM reading"), reading_count);
        assert_int_equal(scene_messages(work, "told.jsonl", later), tried_count);
        expect_each_once(later, tried_count);
        for (size_t index = 0; index < tried_count; index++)
            assert_true(is_among(&tried[index], later, tried_count));
        assert_int_equal(scene_ask_number(work, "SELECT count(*) FROM outbox WHERE state != 'sent'"), 0);

        scene_live(work, 155, 180);
        assert_string_equal(scene_point(work, "tallowick-ford", "onset"), "2031-02-14T18:30:00Z");
        assert_int_equal(scene_ask_number(work, "SELECT count(DISTINCT observed) FROM reading"), reading_count + 2);
        assert_int_equal(scene_ask_number(work, "SELECT count(*) - count(DISTINCT number) FROM "
                                                "(SELECT DISTINCT number, point FROM outbox)"),
                         0);
        scene_check_chain(work, "history.db");
        assert_int_equal(daemon_end(work, SIGTERM, NULL), 0);
        work_close(state);
        assert_int_equal(scene_open(state), 0);
    }
}

static void a_message_whose_hook_had_not_ended_is_sent_again_under_its_id(void **state)
{
    for (size_t row = 0; row < sizeof ends / sizeof *ends; row++) {
        struct work *work = *state;
        struct scene_message messages[SCENE_MESSAGES_MAX];
        print_message("%s\n", ends[row].shows);
        scene_start(work);
        scene_live(work, 5, 85);
        work_write(work, "hook-sleeps", "");
        scene_drop_reading(work, 90, scene_stage_m(90));
        daemon_push(work, scene_time(90));
        int64_t until_ms = work_clock_ms() + WORK_DEADLINE_MS;
        while (strchr(work_read(work, "hook.pid"), '\n') == NULL && patience_left(until_ms))
            ;
        pid_t hook = (pid_t)strtol(work_read(work, "hook.pid"), NULL, 10);
        assert_true(hook > 1);
        assert_int_equal(daemon_end(work, ends[row].signal, NULL), ends[row].code);
        kill(-hook, SIGKILL); /* a hook outlives a daemon that was killed; here it shall not speak late */
        assert_int_equal(scene_count_messages(work, "told.jsonl"), 0);
        work_remove(work, "hook-sleeps");

        daemon_start_driven(work, scene_time(92));
        daemon_advance(work, scene_time(92));
        assert_int_equal(scene_messages(work, "tried.jsonl", messages), 2);
        assert_string_equal(messages[0].id, messages[1].id);
        assert_int_equal(messages[0].number, messages[1].number);
        assert_string_equal(messages[0].text, messages[1].text);
        assert_string_equal(messages[0].bulletin, messages[1].bulletin);
        assert_int_equal(scene_count_messages(work, "told.jsonl"), 1);
        daemon_advance(work, scene_time(95));
        assert_int_equal(scene_count_messages(work, "tried.jsonl"), 2);
        assert_int_equal(daemon_end(work, SIGTERM, NULL), 0);
        work_close(state);
        assert_int_equal(scene_open(state), 0);
    }
}

/* It was away for an hour of the rise: what lay in the folder by then is the first thing it reads. */
static void what_came_while_it_was_away_is_read_before_anyone_is_told_of_a_silence(void **state)
{
    struct work *work = *state;
    scene_start(work);
    scene_live(work, 5, 60);
    assert_int_equal(daemon_end(work, SIGKILL, NULL), -SIGKILL);
    for (int minute = 75; minute <= 120; minute += 15)
        scene_drop_reading(work, minute, scene_stage_m(minute));
    daemon_start_driven(work, scene_time(121));
    daemon_advance(work, scene_time(121));
    assert_int_equal(scene_ask_number(work, "SELECT count(*) FROM advice WHERE is_blind = 1"), 0);
    assert_int_equal(scene_ask_number(work, "SELECT max(observed) FROM reading"), scene_time(120));
    assert_string_equal(scene_level(work, "tallowick-ford"), "MUSTER");
    assert_int_equal(daemon_end(work, SIGTERM, NULL), 0);
}

/* Three hours away with no reading: the new life says that it is blind, and nobody's word is lost. */
static void a_gauge_that_fell_silent_meanwhile_is_told_as_blind(void **state)
{
    struct work *work = *state;
    scene_start(work);
    scene_live(work, 5, 90);
    say(work, "road", "tallowick-ford", "CREW CALLED");
    assert_int_equal(daemon_end(work, SIGKILL, NULL), -SIGKILL);
    daemon_start_driven(work, scene_time(270));
    daemon_advance(work, scene_time(270));
    assert_string_equal(scene_point(work, "tallowick-ford", "blind"), "1");
    assert_string_equal(scene_point(work, "tallowick-ford", "road.state"), "CREW CALLED");
    assert_string_equal(scene_point(work, "tallowick-ford", "onset"), "2031-02-14T18:30:00Z");
    assert_int_equal(daemon_end(work, SIGTERM, NULL), 0);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        SCENE_TEST(facts_readings_and_unsent_messages_survive),
        SCENE_TEST(a_message_whose_hook_had_not_ended_is_sent_again_under_its_id),
        SCENE_TEST(what_came_while_it_was_away_is_read_before_anyone_is_told_of_a_silence),
        SCENE_TEST(a_gauge_that_fell_silent_meanwhile_is_told_as_blind),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
