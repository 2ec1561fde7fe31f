/* SPDX-License-Identifier: MIT */
/* A store of an earlier version is brought to this one, or left as it was. */
#include "store_scene.h"

#include <sys/resource.h>
#include <sys/stat.h>
#include <sys/statvfs.h>
#include <sys/wait.h>

/* Takes the place of the C library's, to pretend a full disk. */
static uint64_t pretended_free_bytes = UINT64_C(1) << 40;
int statvfs(const char *path, struct statvfs *found)
{
    (void)path;
    *found = (struct statvfs){.f_frsize = 1, .f_bavail = (fsblkcnt_t)pretended_free_bytes};
    return 0;
}

static char *first_version_schema(void)
{
    size_t size = 0;
    return scene_read_file(FW_SOURCE_DIR "/tests/data/store/version-1.sql", &size);
}

/* The store of the scene, filled by this program, becomes what version 1 would have left. */
static void make_first_version(struct scene *scene)
{
    char newer[160], *schema = first_version_schema();
    struct store *store = NULL;
    picture_destroy(scene_fill(scene, 4));
    assert_int_equal(store_open(scene->file, STORE_WRITE, &store, &scene->error), FW_OK);
    plain_run(store->db, "INSERT INTO word (entry, id, kind, subject, road, text, \"by\", at, received) VALUES "
                         "(9001, 'w-1', 'road', 'tallowick-ford', 'SHUT', '', 'roads foreman', 5, 6)");
    store_close(store);
    snprintf(newer, sizeof newer, "%s.newer", scene->file);
    assert_int_equal(rename(scene->file, newer), 0);
    sqlite3 *db = scene_plain(scene);
    char *sql = sqlite3_mprintf("PRAGMA auto_vacuum = INCREMENTAL; PRAGMA application_id = %d; "
                                "PRAGMA user_version = 1; %s ATTACH %Q AS newer;",
                                STORE_APPLICATION_ID, schema, newer);
    plain_run(db, sql);
    static const char *const whole[] = {"ledger",         "ledger_payload", "reading",     "advice",   "forecast",
                                        "forecast_curve", "outbox",         "raw_payload", "settings", "counter"};
    for (size_t index = 0; index < sizeof whole / sizeof *whole; index++) {
        char copy[128];
        snprintf(copy, sizeof copy, "INSERT INTO main.%s SELECT * FROM newer.%s", whole[index], whole[index]);
        plain_run(db, copy);
    }
    plain_run(db,
              "INSERT INTO main.judgement SELECT entry, reading, flag, use, reasons FROM newer.judgement;"
              "INSERT INTO main.word SELECT entry, id, kind, subject, value, unit, is_wet, road, text, \"by\", at, "
              "received FROM newer.word; DETACH newer");
    sqlite3_close(db);
    sqlite3_free(sql);
    free(schema);
    assert_int_equal(unlink(newer), 0);
}

/* Every table and index as SQL, blanks and quotes put one way: renamed tables come back quoted. */
static char *laid_out(const char *file)
{
    sqlite3 *db = NULL;
    sqlite3_stmt *query = NULL;
    char *all = calloc(1, 1 << 16);
    size_t used = 0;
    assert_non_null(all);
    assert_int_equal(sqlite3_open_v2(file, &db, SQLITE_OPEN_READONLY, NULL), SQLITE_OK);
    assert_int_equal(
        sqlite3_prepare_v2(db, "SELECT sql FROM sqlite_schema WHERE sql IS NOT NULL ORDER BY name", -1, &query, NULL),
        SQLITE_OK);
    while (sqlite3_step(query) == SQLITE_ROW)
        for (const char *next = (const char *)sqlite3_column_text(query, 0); *next != '\0'; next++)
            if (strchr(" \n\"", *next) == NULL && used + 2 < 1 << 16)
                all[used++] = *next;
    sqlite3_finalize(query);
    sqlite3_close(db);
    return all;
}

static void what_it_becomes_is_what_a_new_one_is(void **state)
{
    struct scene *scene = *state;
    char fresh[160], copy[160];
    struct store *store = NULL;
    make_first_version(scene);
    char *before = laid_out(scene->file);
    assert_int_equal(store_open(scene->file, STORE_WRITE, &store, &scene->error), FW_OK);
    assert_int_equal(store_upgraded_from(store), 1);
    store_close(store);

    snprintf(fresh, sizeof fresh, "%s/fresh.db", scene->directory);
    assert_int_equal(store_open(fresh, STORE_WRITE, &store, &scene->error), FW_OK);
    assert_int_equal(store_upgraded_from(store), 0);
    store_close(store);
    char *brought_on = laid_out(scene->file), *new = laid_out(fresh);
    assert_string_equal(brought_on, new);

    /* and what it was is kept beside, whole */
    snprintf(copy, sizeof copy, "%s.version-1", scene->file);
    char *kept = laid_out(copy);
    assert_string_equal(kept, before);
    free(before);
    free(brought_on);
    free(new);
    free(kept);
}

static void nothing_it_held_is_lost_and_the_daemon_goes_on(void **state)
{
    struct scene *scene = *state;
    struct store *store = NULL;
    size_t entries = 0;
    make_first_version(scene);
    int64_t readings = scene_integer(scene, "SELECT count(*) FROM reading");
    int64_t judgements = scene_integer(scene, "SELECT sum(entry * 31 + reading * 7 + flag + reasons) FROM judgement");
    assert_true(readings > 0 && judgements > 0);
    assert_int_equal(store_open(scene->file, STORE_WRITE, &store, &scene->error), FW_OK);
    assert_int_equal(plain_integer(store->db, "SELECT count(*) FROM reading"), readings);
    assert_int_equal(plain_integer(store->db, "SELECT sum(entry * 31 + reading * 7 + flag + reasons) FROM judgement"),
                     judgements);
    assert_int_equal(plain_integer(store->db, "SELECT count(*) FROM word WHERE road = 'SHUT' AND at = 5 AND "
                                              "received = 6 AND rating IS NULL AND entry = 9001"),
                     1);
    assert_int_equal(store_check_ledger(store, &entries, &scene->error), FW_OK);
    assert_int_equal(entries, 4);
    struct picture *picture = scene_picture(scene);
    assert_int_equal(store_load_picture(store, &scene->settings, 0, picture, &scene->error), FW_OK);
    assert_int_equal(scene_cycle(scene, store, &picture, SCENE_NOW_S + 9000, 1.7), FW_OK);
    store_close(store);
    picture_destroy(picture);

    assert_int_equal(store_open(scene->file, STORE_WRITE, &store, &scene->error), FW_OK);
    assert_int_equal(store_upgraded_from(store), 0); /* once is enough */
    store_close(store);
}

static void who_only_reads_is_told_to_wait_and_changes_nothing(void **state)
{
    struct scene *scene = *state;
    size_t size_before = 0, size_after = 0;
    make_first_version(scene);
    char *before = scene_read_file(scene->file, &size_before);
    assert_int_equal(scene_try_open(scene, STORE_READ), FW_FOREIGN);
    scene_assert_says(scene, "of version 1, this program works on version 2; the daemon brings it on");
    char *after = scene_read_file(scene->file, &size_after);
    assert_int_equal(size_after, size_before);
    assert_memory_equal(after, before, size_before);
    free(before);
    free(after);
}

static void without_room_for_a_copy_it_is_left_as_it_is(void **state)
{
    struct scene *scene = *state;
    make_first_version(scene);
    pretended_free_bytes = 1000;
    enum fw_status status = scene_try_open(scene, STORE_WRITE);
    pretended_free_bytes = UINT64_C(1) << 40;
    assert_int_equal(status, FW_IO);
    scene_assert_says(scene, "0 MiB free");
    assert_int_equal(scene_integer(scene, "PRAGMA user_version"), 1);
    assert_int_equal(scene_try_open(scene, STORE_WRITE), FW_OK);
}

static void a_step_that_fails_leaves_the_version_it_was(void **state)
{
    struct scene *scene = *state;
    make_first_version(scene);
    scene_meddle(scene, "CREATE TABLE word_1 (x)"); /* in the way of the step */
    assert_int_equal(scene_try_open(scene, STORE_WRITE), FW_IO);
    scene_assert_says(scene, "bring the store on");
    assert_int_equal(scene_integer(scene, "PRAGMA user_version"), 1);
    assert_int_equal(scene_integer(scene, "SELECT count(*) FROM pragma_table_info('judgement')"),
                     5); /* all or nothing */
    scene_meddle(scene, "DROP TABLE word_1");
    assert_int_equal(scene_try_open(scene, STORE_WRITE), FW_OK);
    assert_int_equal(scene_integer(scene, "PRAGMA user_version"), STORE_VERSION);
}

/* A child that may write only so many bytes to a file dies of it, early and late; the next opening always succeeds. */
static void cut_off_anywhere_it_goes_on_at_the_next_start(void **state)
{
    struct scene *scene = *state;
    size_t deaths = 0;
    for (rlim_t most = 0; most < 260 * 1024; most += 4096 * 9) {
        char command[512];
        snprintf(command, sizeof command, "rm -f %s*", scene->file);
        assert_int_equal(system(command), 0);
        make_first_version(scene);
        int64_t readings = scene_integer(scene, "SELECT count(*) FROM reading");
        pid_t child = fork();
        if (child == 0) {
            struct store *store = NULL;
            const struct rlimit limit = {most, most};
            if (setrlimit(RLIMIT_FSIZE, &limit) != 0) /* SIGXFSZ kills in the middle of a write */
                _exit(9);
            enum fw_status status = store_open(scene->file, STORE_WRITE, &store, &scene->error);
            _exit(status == FW_OK ? 0 : 1);
        }
        int how = 0;
        assert_int_equal(waitpid(child, &how, 0), child);
        deaths += WIFSIGNALED(how);
        assert_int_equal(scene_try_open(scene, STORE_WRITE), FW_OK);
        assert_int_equal(scene_integer(scene, "PRAGMA user_version"), STORE_VERSION);
        assert_int_equal(scene_integer(scene, "SELECT count(*) FROM reading"), readings);
        assert_int_equal(scene_integer(scene, "SELECT count(*) FROM word WHERE id = 'w-1'"), 1);
    }
    assert_true(deaths >= 3);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test_setup_teardown(what_it_becomes_is_what_a_new_one_is, scene_set_up, scene_tear_down),
        cmocka_unit_test_setup_teardown(nothing_it_held_is_lost_and_the_daemon_goes_on, scene_set_up,
                                        scene_tear_down),
        cmocka_unit_test_setup_teardown(who_only_reads_is_told_to_wait_and_changes_nothing, scene_set_up,
                                        scene_tear_down),
        cmocka_unit_test_setup_teardown(without_room_for_a_copy_it_is_left_as_it_is, scene_set_up, scene_tear_down),
        cmocka_unit_test_setup_teardown(a_step_that_fails_leaves_the_version_it_was, scene_set_up, scene_tear_down),
        cmocka_unit_test_setup_teardown(cut_off_anywhere_it_goes_on_at_the_next_start, scene_set_up, scene_tear_down),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
