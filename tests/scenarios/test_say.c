/* SPDX-License-Identifier: MIT */
/* People's words: handed in, recorded, refused; and what they change and what they never change. */
#include "tests/scenarios/river_scene.h"

#include <dirent.h>

/* Files in a folder, those of bad/ and done/ apart. */
static size_t count_files(struct work *work, const char *name)
{
    size_t count = 0;
    DIR *folder = opendir(work_path(work, name));
    for (struct dirent *entry; folder != NULL && (entry = readdir(folder)) != NULL;)
        count += entry->d_type == DT_REG;
    if (folder != NULL)
        closedir(folder);
    return count;
}

/* Everything said by the roads foreman; a missing word is NULL. */
static struct ending say(struct work *work, const char *kind, const char *subject, const char *what, const char *more)
{
    return work_run(work, "say", "--by", "roads foreman", kind, subject, what, more, NULL);
}

static void expect_said(struct ending ending, const char *line)
{
    if (ending.code != 0 || strcmp(ending.out, line) != 0)
        fail_msg("exit %d, '%s%s' instead of '%s'", ending.code, ending.out, ending.err, line);
}

/* --- handing in ------------------------------------------------------------------------------------------------- */

static void a_word_is_recorded_and_shown_as_it_was_understood(void **state)
{
    struct work *work = *state;
    static const struct {
        const char *kind, *subject, *what, *more, *record;
    } rows[] = {
        {"road", "tallowick-ford", "crew called", NULL, "road|tallowick-ford||||CREW CALLED|"},
        {"road", "tallowick-ford", "SHUT", "--both-sides", "road|tallowick-ford||||SHUT|"},
        {"seen", "marren-causeway", "dry", NULL, "seen|marren-causeway|||0||"},
        {"seen", "marren-causeway", "wet", "4", "seen|marren-causeway|4.0|cm|1||"},
        {"reading", "orlin-scar", "2.90", NULL, "reading|orlin-scar|2.9|m|||"},
        {"accept", NULL, NULL, NULL, "accept||||||"},
        {"note", "the staff board leans", NULL, NULL, "note||||||the staff board leans"},
    };
    scene_start(work);
    for (size_t index = 0; index < sizeof rows / sizeof *rows; index++) {
        struct ending ending = say(work, rows[index].kind, rows[index].subject, rows[index].what, rows[index].more);
        if (ending.code != 0 || strncmp(ending.out, "recorded: ", 10) != 0 ||
            strstr(ending.out, "(roads foreman, ") == NULL)
            fail_msg("row %zu: exit %d: %s%s", index, ending.code, ending.out, ending.err);
        assert_string_equal(ending.err, "");
        assert_string_equal(scene_ask(work, "history.db",
                                      "SELECT kind, subject, value, unit, is_wet, road, text FROM word "
                                      "ORDER BY entry DESC LIMIT 1"),
                            work_print(work, "%s\n", rows[index].record));
    }
    assert_int_equal(scene_ask_number(work, "SELECT count(DISTINCT id) FROM word"), sizeof rows / sizeof *rows);
    assert_int_equal(scene_ask_number(work, "SELECT count(*) FROM word WHERE \"by\" != 'roads foreman'"), 0);
    assert_int_equal(count_files(work, "inbox"), 0);
    assert_int_equal(daemon_end(work, SIGTERM, NULL), 0);
}

/* In the world's own time; zone +01:00. */
static void a_word_speaks_of_the_time_that_was_stated(void **state)
{
    struct work *work = *state;
    char at[WHEN_TEXT_SIZE], clock[WHEN_TEXT_SIZE];
    int64_t at_utc_s = (int64_t)time(NULL) - 3 * SCENE_MINUTE;
    const struct when_zone zone = {.is_fixed = true, .offset_s = SCENE_HOUR};
    daemon_start(work, NULL);
    struct ending ending = work_run(work, "say", "road", "tallowick-ford", "CREW OUT", "--by", "roads foreman",
                                    "--at", when_rfc3339_utc(at_utc_s, at), NULL);
    const char *line =
        work_print(work, "road tallowick-ford CREW OUT (roads foreman, %s)", when_clock(&zone, at_utc_s, clock));
    expect_said(ending, work_print(work, "recorded: %s\n", line));
    daemon_await_log(work, work_print(work, "said: %s\n", line));
    assert_int_equal(scene_ask_number(work, "SELECT at FROM word"), at_utc_s);
    ending = work_run(work, "say", "road", "tallowick-ford", "CREW OUT", "--by", "roads foreman", "--at",
                      when_rfc3339_utc(at_utc_s + SCENE_HOUR, at), NULL);
    assert_int_equal(ending.code, 64);
    assert_non_null(strstr(ending.err, "has not been yet"));
    assert_int_equal(daemon_end(work, SIGTERM, NULL), 0);
}

static void without_a_daemon_the_word_waits_and_the_next_one_takes_it(void **state)
{
    struct work *work = *state;
    struct ending ending = say(work, "road", "marren-causeway", "CREW OUT", NULL);
    assert_int_equal(ending.code, 69);
    assert_string_equal(ending.out, "");
    assert_non_null(strstr(ending.err, "no daemon is running; the word waits in"));
    assert_int_equal(count_files(work, "inbox"), 1);
    scene_start(work);
    assert_int_equal(count_files(work, "inbox"), 0);
    assert_string_equal(scene_point(work, "marren-causeway", "road.state"), "CREW OUT");
    assert_string_equal(scene_point(work, "marren-causeway", "road.by"), "roads foreman");
    assert_int_equal(daemon_end(work, SIGTERM, NULL), 0);
}

static void a_word_of_another_program_is_taken_and_its_twin_is_dropped(void **state)
{
    struct work *work = *state;
    static const char word[] =
        "{ \"id\": \"sms-42\", \"kind\": \"road\", \"subject\": \"tallowick-ford\", "
        "\"road\": \"CREW CALLED\", \"by\": \"roads foreman\", \"at\": \"2031-02-14T16:55:00Z\" }";
    static const char broken[] = "{ \"id\": \"sms-43\", \"kind\": \"road\", \"subject\": \"tallowick-ford\", "
                                 "\"road\": \"CLOSED\", \"by\": \"roads foreman\" }";
    scene_start(work);
    for (int time = 0; time < 2; time++) {
        work_write(work, "inbox/.sms-42", word);
        work_rename(work, "inbox/.sms-42", "inbox/sms-42.word");
        daemon_advance(work, scene_time(time + 1));
    }
    work_write(work, "inbox/.sms-43", broken);
    work_rename(work, "inbox/.sms-43", "inbox/sms-43.word");
    daemon_advance(work, scene_time(3));
    assert_string_equal(scene_ask(work, "history.db", "SELECT id, at FROM word"),
                        work_print(work, "sms-42|%lld\n", (long long)scene_time(-5)));
    assert_string_equal(scene_point(work, "tallowick-ford", "road.state"), "CREW CALLED");
    assert_int_equal(count_files(work, "inbox"), 0);
    assert_non_null(strstr(work_read(work, "inbox/bad/sms-43.word.reason"), "road: expected a state"));
    assert_int_equal(daemon_end(work, SIGTERM, NULL), 0);
}

/* --- refusals --------------------------------------------------------------------------------------------------- */

static void a_word_that_cannot_be_understood_is_64_and_lists_what_was_expected(void **state)
{
    struct work *work = *state;
    static const struct {
        const char *words[8];
        const char *says[4];
    } rows[] = {
        {{"--by", "x", "road", "low-bridge", "OPEN"}, {"low-bridge", "tallowick-ford", "marren-causeway"}},
        {{"--by", "x", "seen", "low-bridge", "dry"}, {"low-bridge", "tallowick-ford", "marren-causeway"}},
        {{"--by", "x", "reading", "upper-scar", "1.2"}, {"upper-scar", "orlin-scar"}},
        {{"--by", "x", "reading", "orlin-scar", "high"}, {"high"}},
        {{"--by", "x", "reading", "orlin-scar", "2,90"}, {"2,90"}},
        {{"--by", "x", "reading", "orlin-scar", "2.9", "--unit", "yd"}, {"yd", "cm"}},
        {{"--by", "x", "road", "tallowick-ford", "SHUT"}, {"--both-sides", "ONE SIDE SHUT"}},
        {{"--by", "x", "road", "tallowick-ford", "OPEN", "--both-sides"}, {"--both-sides goes with SHUT"}},
        {{"--by", "x", "road", "tallowick-ford", "CLOSED"}, {"CLOSED", "OPEN", "ONE SIDE SHUT", "HANDED BACK"}},
        {{"--by", "x", "seen", "tallowick-ford", "damp"}, {"say seen POINT dry, or: say seen POINT wet [CM]"}},
        {{"--by", "x", "sing", "tallowick-ford"}, {"sing", "accept, reading, seen, road or note"}},
        {{"road", "tallowick-ford", "OPEN"}, {"--by is missing", "role"}},
        {{"--by", "x", "road", "tallowick-ford", "OPEN", "--at", "tomorrow"}, {"--at", "tomorrow", "22:05"}},
        {{"--by", "x", "--wait", "soon", "note", "a"}, {"--wait", "soon", "0 to 3600"}},
    };
    scene_start(work);
    for (size_t index = 0; index < sizeof rows / sizeof *rows; index++) {
        const char *const *words = rows[index].words;
        struct ending ending =
            work_run(work, "say", words[0], words[1], words[2], words[3], words[4], words[5], words[6], NULL);
        if (ending.code != 64)
            fail_msg("row %zu: exit %d: %s%s", index, ending.code, ending.out, ending.err);
        for (size_t text = 0; text < 4 && rows[index].says[text] != NULL; text++)
            if (strstr(ending.err, rows[index].says[text]) == NULL)
                fail_msg("row %zu: '%s' is not in: %s", index, rows[index].says[text], ending.err);
    }
    assert_int_equal(count_files(work, "inbox"), 0);
    assert_int_equal(count_files(work, "inbox/bad"), 0);
    assert_int_equal(scene_ask_number(work, "SELECT count(*) FROM word"), 0);
    assert_int_equal(daemon_end(work, SIGTERM, NULL), 0);
}

/* --- three kinds of fact ---------------------------------------------------------------------------------------- */

/*
 * docs/decisions.md, "The ladder of a road that is not shut on both sides" and "A road shut on both sides": of all
 * states only SHUT and WALK-OVER change what the advice can be, and water that somebody saw does. At minute 150 the
 * computed advice of the ford is SEND.
 */
static void words_change_advice_only_as_the_page_says(void **state)
{
    static const struct {
        const char *kind, *what, *more, *level, *road;
    } rows[] = {
        {"road", "CREW CALLED", NULL, "SEND", "CREW CALLED"},
        {"road", "CREW OUT", NULL, "SEND", "CREW OUT"},
        {"road", "ONE SIDE SHUT", NULL, "SEND", "ONE SIDE SHUT"},
        {"seen", "dry", NULL, "SEND", "ONE SIDE SHUT"},
        {"accept", NULL, NULL, "SEND", "ONE SIDE SHUT"},
        {"note", "all quiet here", NULL, "SEND", "ONE SIDE SHUT"},
        {"road", "SHUT", "--both-sides", "KEEP SHUT", "SHUT"},
        {"road", "WALK-OVER", NULL, "KEEP SHUT", "WALK-OVER"},
        {"road", "HANDED BACK", NULL, "SEND", "HANDED BACK"},
        {"road", "OPEN", NULL, "SEND", "OPEN"},
        {"seen", "wet", "3", "LATE", "OPEN"},
    };
    struct work *work = *state;
    scene_start(work);
    scene_live(work, 5, 150);
    assert_string_equal(scene_level(work, "tallowick-ford"), "SEND");
    for (size_t index = 0; index < sizeof rows / sizeof *rows; index++) {
        bool has_subject = strcmp(rows[index].kind, "accept") != 0 && strcmp(rows[index].kind, "note") != 0;
        struct ending ending = has_subject
                                   ? say(work, rows[index].kind, "tallowick-ford", rows[index].what, rows[index].more)
                                   : say(work, rows[index].kind, rows[index].what, NULL, NULL);
        assert_int_equal(ending.code, 0);
        if (strcmp(scene_level(work, "tallowick-ford"), rows[index].level) != 0 ||
            strcmp(scene_point(work, "tallowick-ford", "road.state"), rows[index].road) != 0)
            fail_msg("after %s %s the advice is %s and the road %s", rows[index].kind,
                     rows[index].what != NULL ? rows[index].what : "", scene_level(work, "tallowick-ford"),
                     scene_point(work, "tallowick-ford", "road.state"));
        assert_string_equal(scene_point(work, "marren-causeway", "road.state"), "OPEN");
        assert_string_equal(scene_level(work, "marren-causeway"), "MUSTER");
    }
    assert_int_equal(daemon_end(work, SIGTERM, NULL), 0);
}

/* Rise and fall without a word: the advice runs up and down, and no road state was ever written. */
static void advice_never_changes_a_road_state(void **state)
{
    struct work *work = *state;
    scene_start(work);
    scene_live(work, 5, 330);
    assert_int_equal(scene_ask_number(work, "SELECT count(DISTINCT level) >= 4 FROM advice "
                                            "WHERE point = 'tallowick-ford'"),
                     1);
    assert_int_equal(scene_ask_number(work, "SELECT count(*) FROM word"), 0);
    assert_string_equal(scene_ask(work, "history.db",
                                  "SELECT DISTINCT json_extract(p.value, '$.road.state'), "
                                  "json_extract(p.value, '$.road.at') FROM ledger_payload, "
                                  "json_each(payload, '$.points') p"),
                        "OPEN|\n");
    assert_int_equal(daemon_end(work, SIGTERM, NULL), 0);
}

/* No word on an output reads as leave to drive. */
static void no_message_ever_says_that_a_road_is_safe(void **state)
{
    struct work *work = *state;
    struct scene_message messages[SCENE_MESSAGES_MAX];
    static const char *const forbidden[] = {"safe", "all clear", "passable", "may be used"};
    scene_start(work);
    scene_live(work, 5, 150);
    assert_int_equal(say(work, "road", "tallowick-ford", "SHUT", "--both-sides").code, 0);
    scene_live(work, 155, 420);
    assert_int_equal(say(work, "road", "tallowick-ford", "HANDED BACK", NULL).code, 0);
    scene_live(work, 425, 450);
    size_t count = scene_messages(work, "told.jsonl", messages);
    assert_true(count > 5);
    for (size_t index = 0; index < count; index++) {
        scene_expect_caution(messages[index].bulletin);
        for (size_t word = 0; word < sizeof forbidden / sizeof *forbidden; word++)
            if (strcasestr(messages[index].text, forbidden[word]) != NULL ||
                strcasestr(messages[index].bulletin, forbidden[word]) != NULL)
                fail_msg("'%s' in: %s", forbidden[word], messages[index].bulletin);
    }
    assert_int_equal(daemon_end(work, SIGTERM, NULL), 0);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        SCENE_TEST(a_word_is_recorded_and_shown_as_it_was_understood),
        SCENE_TEST(a_word_speaks_of_the_time_that_was_stated),
        SCENE_TEST(without_a_daemon_the_word_waits_and_the_next_one_takes_it),
        SCENE_TEST(a_word_of_another_program_is_taken_and_its_twin_is_dropped),
        SCENE_TEST(a_word_that_cannot_be_understood_is_64_and_lists_what_was_expected),
        SCENE_TEST(words_change_advice_only_as_the_page_says),
        SCENE_TEST(advice_never_changes_a_road_state),
        SCENE_TEST(no_message_ever_says_that_a_road_is_safe),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
