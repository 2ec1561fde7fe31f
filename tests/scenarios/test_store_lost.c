/* SPDX-License-Identifier: MIT */
/*
 * The store goes away under the running daemon. The river does not wait for a disk: the next decision is told all the
 * same and says that it could not be recorded, and the record goes on as soon as it can.
 */
#include "tests/scenarios/river_scene.h"

static void delete_it(struct work *work)
{
    work_remove(work, "history.db");
}

static void delete_it_with_its_log(struct work *work)
{
    work_remove(work, "history.db");
    work_remove(work, "history.db-wal");
    work_remove(work, "history.db-shm");
}

static void overwrite_in_place(struct work *work, const char *name)
{
    unsigned char noise[4096];
    struct stat about;
    uint32_t state = 2463534242u; /* xorshift, Marsaglia 2003: the same noise on every run */
    assert_int_equal(stat(work_path(work, name), &about), 0);
    int file = open(work_path(work, name), O_WRONLY | O_CLOEXEC);
    assert_true(file >= 0);
    for (off_t done = 0; done < about.st_size; done += (off_t)sizeof noise) {
        for (size_t index = 0; index < sizeof noise; index++) {
            state ^= state << 13, state ^= state >> 17, state ^= state << 5;
            noise[index] = (unsigned char)state;
        }
        assert_int_equal(write(file, noise, sizeof noise), sizeof noise);
    }
    close(file);
}

static void overwrite_it(struct work *work)
{
    overwrite_in_place(work, "history.db");
}

static void overwrite_it_and_its_log(struct work *work)
{
    overwrite_in_place(work, "history.db");
    overwrite_in_place(work, "history.db-wal");
}

static void truncate_it(struct work *work)
{
    assert_int_equal(truncate(work_path(work, "history.db"), 0), 0);
}

static void put_another_in_its_place(struct work *work)
{
    work_write(work, "other.db", "This is a shopping list.\n");
    work_rename(work, "other.db", "history.db");
}

/* Nothing is ever deleted: the store, or what was left of it in the log, is kept under the name that was said. */
static void expect_damaged_kept(struct work *work)
{
    static const char said[] = "the damaged file is kept as ";
    const char *place = strstr(daemon_log(work), said);
    assert_non_null(place);
    char *kept = work_print(work, "%s", place + sizeof said - 1);
    kept[strcspn(kept, "\n")] = '\0';
    if (access(kept, F_OK) != 0 && access(work_print(work, "%s-wal", kept), F_OK) != 0)
        fail_msg("neither %s nor its log is there", kept);
}

/* Minute 150: the advice becomes SEND. The store is lost after minute 145. */
static void lose(struct work *work, void (*how)(struct work *work))
{
    scene_start(work);
    scene_live(work, 5, 145);
    assert_int_equal(
        work_run(work, "say", "road", "tallowick-ford", "CREW CALLED", "--by", "roads foreman", NULL).code, 0);
    how(work);
}

static void expect_told_as_not_recorded(struct work *work, size_t told_before)
{
    struct scene_message messages[SCENE_MESSAGES_MAX];
    size_t count = scene_messages(work, "told.jsonl", messages);
    size_t about_ford = 0;
    assert_true(count > told_before);
    for (size_t index = told_before; index < count; index++) {
        if (strstr(messages[index].bulletin, "NOT STORED") == NULL)
            fail_msg("told without a word on the store: %s", messages[index].bulletin);
        scene_expect_caution(messages[index].bulletin);
        about_ford += strcmp(messages[index].point, "tallowick-ford") == 0;
    }
    assert_int_equal(about_ford, 1);
    assert_non_null(strstr(daemon_log(work), "nothing is being recorded"));
}

/* What memory held is in the fresh store, the chain begins with why, and what came after follows. */
static void expect_recorded_again(struct work *work)
{
    struct scene_message messages[SCENE_MESSAGES_MAX];
    scene_live(work, 155, 165);
    assert_non_null(strstr(daemon_log(work), "recording again"));
    assert_int_equal(scene_ask_number(work, "SELECT count(*) FROM ledger WHERE kind = 'reseed'"), 1);
    assert_int_equal(scene_ask_number(work, "SELECT count(*) FROM reading WHERE observed = 1928854800 + 165 * 60"),
                     1);
    assert_int_equal(scene_ask_number(work, "SELECT count(DISTINCT observed) FROM reading"), 25 + 11);
    assert_string_equal(scene_level(work, "tallowick-ford"), "SEND");
    assert_string_equal(scene_point(work, "tallowick-ford", "road.state"), "CREW CALLED");
    assert_string_equal(scene_point(work, "tallowick-ford", "onset"), "2031-02-14T18:30:00Z");
    scene_check_chain(work, "history.db");
    size_t count = scene_messages(work, "told.jsonl", messages);
    for (size_t one = 0; one < count; one++)
        for (size_t other = 0; other < one; other++)
            assert_string_not_equal(messages[one].id, messages[other].id);
}

static const struct {
    void (*how)(struct work *work);
    bool keeps_damaged;
    const char *shows;
} losses[] = {
    {delete_it, true, "deleted, its log left"},
    {delete_it_with_its_log, false, "deleted with its log"},
    {overwrite_it, true, "overwritten with noise"},
    {overwrite_it_and_its_log, true, "overwritten with noise, its log too"},
    {truncate_it, true, "cut to nothing"},
    {put_another_in_its_place, true, "another file in its place"},
};

/* The lock was kept all the while: nobody else writes the fresh store. */
static void expect_second_refused(struct work *work)
{
    struct ending second = work_run(work, "run", "--once", NULL);
    if (second.code != 75 || strstr(second.err, work_print(work, "pid %d", (int)work->daemon)) == NULL)
        fail_msg("a second instance ended with %d: %s", second.code, second.err);
}

static void the_next_decision_is_told_and_the_record_goes_on(void **state)
{
    for (size_t row = 0; row < sizeof losses / sizeof *losses; row++) {
        struct work *work = *state;
        print_message("%s\n", losses[row].shows);
        lose(work, losses[row].how);
        size_t told_before = scene_count_messages(work, "told.jsonl");
        scene_live(work, 150, 150);
        expect_told_as_not_recorded(work, told_before);
        expect_recorded_again(work);
        if (losses[row].keeps_damaged)
            expect_damaged_kept(work);
        expect_second_refused(work);
        assert_int_equal(work_run(work, "status", NULL).code, 0);
        assert_int_equal(daemon_end(work, SIGTERM, NULL), 0);
        work_close(state);
        assert_int_equal(scene_open(state), 0);
    }
}

static void the_folder_of_the_store_may_vanish_like_a_disk_that_is_unplugged(void **state)
{
    struct work *work = *state;
    work_make_folder(work, "state");
    scene_change_config(work, "\"file\": \"history.db\"", "\"file\": \"state/history.db\"");
    scene_start(work);
    scene_live(work, 5, 145);
    size_t told_before = scene_count_messages(work, "told.jsonl");
    work_rename(work, "state", "state-away");
    scene_live(work, 150, 150);
    expect_told_as_not_recorded(work, told_before);
    scene_live(work, 155, 165);
    assert_string_equal(scene_ask(work, "state/history.db", "SELECT count(DISTINCT observed) FROM reading"), "36\n");
    scene_check_chain(work, "state/history.db");
    scene_check_chain(work, "state-away/history.db");
    expect_second_refused(work);
    assert_int_equal(daemon_end(work, SIGTERM, NULL), 0);
}

static void a_folder_that_is_read_only_from_now_on_stops_no_decision(void **state)
{
    struct work *work = *state;
    if (geteuid() == 0)
        skip(); /* root writes wherever it likes */
    work_make_folder(work, "state");
    scene_change_config(work, "\"file\": \"history.db\"", "\"file\": \"state/history.db\"");
    scene_start(work);
    scene_live(work, 5, 145);
    size_t told_before = scene_count_messages(work, "told.jsonl");
    assert_int_equal(chmod(work_path(work, "state"), 0555), 0);
    work_write(work, "state/history.db",
               "noise"); /* the file itself may still be written, and needs to be made anew */
    scene_live(work, 150, 155);
    expect_told_as_not_recorded(work, told_before);
    assert_null(strstr(daemon_log(work), "recording again"));
    assert_int_equal(chmod(work_path(work, "state"), 0755), 0);
    scene_live(work, 160, 165);
    assert_non_null(strstr(daemon_log(work), "recording again"));
    assert_string_equal(scene_ask(work, "state/history.db", "SELECT count(DISTINCT observed) FROM reading"), "36\n");
    assert_int_equal(daemon_end(work, SIGTERM, NULL), 0);
}

/* A word that could not be recorded counts, its file waits, and a later life does not take it for a newer one. */
static void a_word_said_meanwhile_counts_from_its_own_time(void **state)
{
    struct work *work = *state;
    const char *say[] = {"say", "--by", "roads foreman", "road", "tallowick-ford"};
    lose(work, delete_it_with_its_log);
    struct ending lost = work_run(work, say[0], "--wait", "1", say[1], say[2], say[3], say[4], "CREW OUT", NULL);
    assert_int_equal(lost.code, 69);
    assert_non_null(strstr(lost.err, "waits in"));
    scene_live(work, 150, 155);
    assert_string_equal(scene_point(work, "tallowick-ford", "road.state"), "CREW OUT");
    assert_int_equal(work_run(work, say[0], say[1], say[2], say[3], say[4], "SHUT", "--both-sides", NULL).code, 0);
    scene_live(work, 160, 165);
    assert_string_equal(scene_point(work, "tallowick-ford", "road.state"), "SHUT");
    assert_int_equal(daemon_end(work, SIGTERM, NULL), 0);
    daemon_start_driven(work, scene_time(166));
    daemon_advance(work, scene_time(166));
    assert_string_equal(scene_point(work, "tallowick-ford", "road.state"), "SHUT");
    assert_string_equal(scene_level(work, "tallowick-ford"), "KEEP SHUT");
    assert_int_equal(daemon_end(work, SIGTERM, NULL), 0);
}

/* What could not be recorded stays in its folder, and the next life takes it from there. */
static void a_kill_after_the_loss_loses_nothing_that_was_in_a_file(void **state)
{
    struct work *work = *state;
    lose(work, delete_it_with_its_log);
    scene_live(work, 150, 150);
    assert_int_equal(daemon_end(work, SIGKILL, NULL), -SIGKILL);
    assert_true(work_has(work, "drop/at-150.csv")); /* not stored, so not moved */
    daemon_start_driven(work, scene_time(152));
    daemon_advance(work, scene_time(152));
    assert_int_equal(scene_ask_number(work, "SELECT count(*) FROM reading WHERE observed = 1928854800 + 150 * 60"),
                     1);
    assert_true(work_has(work, "drop/done/at-150.csv"));
    assert_int_equal(daemon_end(work, SIGTERM, NULL), 0);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        SCENE_TEST(the_next_decision_is_told_and_the_record_goes_on),
        SCENE_TEST(the_folder_of_the_store_may_vanish_like_a_disk_that_is_unplugged),
        SCENE_TEST(a_folder_that_is_read_only_from_now_on_stops_no_decision),
        SCENE_TEST(a_word_said_meanwhile_counts_from_its_own_time),
        SCENE_TEST(a_kill_after_the_loss_loses_nothing_that_was_in_a_file),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
