/* SPDX-License-Identifier: MIT */
/* Whose store it is, where it may be, and who may look at it. */
#include "store_scene.h"

#include <linux/magic.h>
#include <sys/stat.h>
#include <sys/vfs.h>
#include <sys/wait.h>

/* Takes the place of the C library's: there is no network file system on the machine that tests. */
static unsigned long pretended_file_system = EXT4_SUPER_MAGIC;
int statfs(const char *path, struct statfs *found)
{
    (void)path;
    memset(found, 0, sizeof *found);
    found->f_type = (__typeof__(found->f_type))pretended_file_system;
    return 0;
}

/* --- whose store it is --- */

static void a_second_instance_is_refused_with_the_pid_and_the_first_goes_on(void **state)
{
    struct scene *scene = *state;
    struct picture *picture = scene_picture(scene);
    long pid = -1;
    char named[32];
    snprintf(named, sizeof named, "(pid %ld)", (long)getpid());
    assert_false(store_is_held(scene->file, &pid));
    assert_int_equal(pid, 0);
    struct store *store = scene_open(scene, STORE_WRITE);
    assert_int_equal(scene_cycle(scene, store, &picture, SCENE_NOW_S, 1.0), FW_OK);

    pid_t child = fork();
    if (child == 0) {
        struct store *second = NULL;
        enum fw_status status = store_open(scene->file, STORE_WRITE, &second, &scene->error);
        bool is_named = strstr(scene->error.text, named) != NULL;
        long holder = 0;
        bool is_held = store_is_held(scene->file, &holder);
        _exit(status == FW_LOCKED && is_named && is_held && holder == (long)getppid() ? 0 : 1);
    }
    int how = 0;
    assert_int_equal(waitpid(child, &how, 0), child);
    assert_true(WIFEXITED(how) && WEXITSTATUS(how) == 0);

    assert_int_equal(scene_cycle(scene, store, &picture, SCENE_NOW_S + 300, 1.1), FW_OK);
    store_close(store);
    assert_false(store_is_held(scene->file, &pid));
    assert_int_equal(scene_try_open(scene, STORE_WRITE), FW_OK);
    picture_destroy(picture);
}

static void another_programs_file_is_left_byte_for_byte(void **state)
{
    struct scene *scene = *state;
    static const struct {
        const char *sql, *text, *shows;
    } cases[] = {
        {"PRAGMA application_id = 7; CREATE TABLE theirs (x); INSERT INTO theirs VALUES (1)", NULL, "a database"},
        {"PRAGMA journal_mode = WAL; CREATE TABLE theirs (x); INSERT INTO theirs VALUES (1)", NULL,
         "a database with a log"},
        {NULL,
         "not a database at all, but longer than the one hundred bytes that the header of a database takes, "
         "so that all of it can be looked at\n",
         "a text"},
        {NULL, "short", "a short text"},
    };
    for (size_t index = 0; index < sizeof cases / sizeof cases[0]; index++) {
        if (cases[index].sql != NULL)
            scene_meddle(scene, cases[index].sql);
        else
            scene_write_file(scene->file, cases[index].text, strlen(cases[index].text));
        size_t size_before = 0;
        size_t size_after = 0;
        char moved_to[STORE_PATH_SIZE];
        char *before = scene_read_file(scene->file, &size_before);
        if (scene_try_open(scene, STORE_WRITE) != FW_FOREIGN || scene_try_open(scene, STORE_READ) != FW_FOREIGN)
            fail_msg("%s was not refused", cases[index].shows);
        scene_assert_says(scene, "not a Forewater store");
        assert_false(scene_has_file(scene, ".lock"));
        assert_int_equal(store_rescue(scene->file, SCENE_NOW_S, moved_to, &scene->error), FW_FOREIGN);
        assert_string_equal(moved_to, "");
        char *after = scene_read_file(scene->file, &size_after);
        assert_int_equal(size_after, size_before);
        assert_memory_equal(after, before, size_before);
        assert_false(scene_has_file(scene, "-wal") || scene_has_file(scene, "-shm") || scene_has_file(scene, ".new"));
        free(before);
        free(after);
        assert_int_equal(unlink(scene->file), 0);
        char lock[STORE_PATH_SIZE];
        scene_path(scene, ".lock", lock);
        unlink(lock);
    }
    assert_int_equal(mkdir(scene->file, 0700), 0);
    assert_int_equal(scene_try_open(scene, STORE_WRITE), FW_FOREIGN);
    scene_assert_says(scene, "not a regular file");
}

static void a_whole_database_of_another_program_in_our_place_is_still_not_ours(void **state)
{
    struct scene *scene = *state;
    char moved_to[STORE_PATH_SIZE];
    picture_destroy(scene_fill(scene, 1)); /* the lock file stays, with our mark */
    assert_int_equal(unlink(scene->file), 0);
    scene_meddle(scene, "CREATE TABLE theirs (x); INSERT INTO theirs VALUES (1)");
    assert_int_equal(scene_try_open(scene, STORE_WRITE), FW_FOREIGN);
    assert_int_equal(store_rescue(scene->file, SCENE_NOW_S, moved_to, &scene->error), FW_FOREIGN);
    assert_int_equal(scene_integer(scene, "SELECT x FROM theirs"), 1);
}

static void a_store_of_another_version_is_refused_naming_both(void **state)
{
    struct scene *scene = *state;
    static const int versions[] = {STORE_VERSION + 1, 17, 0};
    picture_destroy(scene_fill(scene, 1));
    for (size_t index = 0; index < sizeof versions / sizeof versions[0]; index++) {
        char sql[128];
        char named[32];
        char moved_to[STORE_PATH_SIZE];
        size_t size_before = 0;
        size_t size_after = 0;
        snprintf(sql, sizeof sql, "PRAGMA user_version = %d", versions[index]);
        snprintf(named, sizeof named, "of version %d", versions[index]);
        scene_meddle(scene, sql);
        char *before = scene_read_file(scene->file, &size_before);
        assert_int_equal(scene_try_open(scene, STORE_WRITE), FW_FOREIGN);
        scene_assert_says(scene, named);
        scene_assert_says(scene, "knows version 2");
        assert_int_equal(scene_try_open(scene, STORE_READ), FW_FOREIGN);
        assert_int_equal(store_rescue(scene->file, SCENE_NOW_S, moved_to, &scene->error), FW_FOREIGN);
        char *after = scene_read_file(scene->file, &size_after);
        assert_int_equal(size_after, size_before);
        assert_memory_equal(after, before, size_before);
        free(before);
        free(after);
    }
}

static void a_newer_version_that_is_only_in_the_log_is_seen_too(void **state)
{
    struct scene *scene = *state;
    picture_destroy(scene_fill(scene, 1));
    pid_t child = fork();
    if (child == 0) { /* a newer program that was cut off */
        sqlite3 *db = NULL;
        bool is_done = sqlite3_open(scene->file, &db) == SQLITE_OK &&
                       sqlite3_exec(db, "PRAGMA user_version = 3", NULL, NULL, NULL) == SQLITE_OK;
        _exit(is_done ? 0 : 1);
    }
    int how = 0;
    size_t size_before = 0;
    size_t size_after = 0;
    assert_int_equal(waitpid(child, &how, 0), child);
    assert_int_equal(how, 0);
    char *before = scene_read_file(scene->file, &size_before);
    assert_int_equal(scene_try_open(scene, STORE_WRITE), FW_FOREIGN);
    scene_assert_says(scene, "of version 3");
    char *after = scene_read_file(scene->file, &size_after);
    assert_int_equal(size_after, size_before);
    assert_memory_equal(after, before, size_before);
    free(before);
    free(after);
}

static void places_a_store_must_not_be_in_are_refused(void **state)
{
    struct scene *scene = *state;
    static const unsigned long network[] = {NFS_SUPER_MAGIC, SMB_SUPER_MAGIC, 0xFF534D42, 0xFE534D42};
    for (size_t index = 0; index < sizeof network / sizeof network[0]; index++) {
        pretended_file_system = network[index];
        enum fw_status status = scene_try_open(scene, STORE_WRITE);
        pretended_file_system = EXT4_SUPER_MAGIC;
        assert_int_equal(status, FW_IO);
        scene_assert_says(scene, "network file system");
        assert_false(scene_has_file(scene, "") || scene_has_file(scene, ".lock"));
    }
    pretended_file_system = FUSE_SUPER_MAGIC;
    enum fw_status status = scene_try_open(scene, STORE_WRITE);
    pretended_file_system = EXT4_SUPER_MAGIC;
    assert_int_equal(status, FW_OK);
}

static void a_store_that_everyone_may_write_is_refused(void **state)
{
    struct scene *scene = *state;
    struct stat found;
    picture_destroy(scene_fill(scene, 1));
    assert_int_equal(stat(scene->file, &found), 0);
    assert_int_equal(found.st_mode & 07777, 0640);
    assert_int_equal(chmod(scene->file, 0666), 0);
    assert_int_equal(scene_try_open(scene, STORE_WRITE), FW_IO);
    scene_assert_says(scene, "0666");
}

static void a_path_that_is_too_long_is_refused(void **state)
{
    struct scene *scene = *state;
    char file[STORE_PATH_SIZE + 32];
    char moved_to[STORE_PATH_SIZE];
    struct store *store = NULL;
    memset(file, 'a', sizeof file - 1);
    file[0] = '/';
    file[sizeof file - 1] = '\0';
    assert_int_equal(store_open(file, STORE_WRITE, &store, &scene->error), FW_BAD_INPUT);
    assert_int_equal(store_rescue(file, SCENE_NOW_S, moved_to, &scene->error), FW_BAD_INPUT);
    assert_false(store_is_held(file, NULL));
}

/* --- reading beside the writer --- */

static void a_reader_without_a_store_is_told_so(void **state)
{
    struct scene *scene = *state;
    assert_int_equal(scene_try_open(scene, STORE_READ), FW_UNAVAILABLE);
    scene_assert_says(scene, scene->file);
    assert_false(scene_has_file(scene, "") || scene_has_file(scene, ".lock"));
}

static void a_reader_works_beside_the_writer_and_writes_nothing(void **state)
{
    struct scene *scene = *state;
    static const char *const suffixes[] = {"", "-wal"};
    char *before[2];
    size_t size_before[2];
    struct picture *picture = scene_picture(scene);
    struct store *writer = scene_open(scene, STORE_WRITE);
    for (int64_t index = 0; index < 20; index++)
        assert_int_equal(scene_cycle(scene, writer, &picture, SCENE_NOW_S + 300 * index, 1.5), FW_OK);
    for (size_t index = 0; index < 2; index++) {
        char path[STORE_PATH_SIZE];
        scene_path(scene, suffixes[index], path);
        before[index] = scene_read_file(path, &size_before[index]);
    }
    size_t count = 0;
    struct store *reader = scene_open(scene, STORE_READ);
    struct picture *loaded = scene_picture(scene);
    assert_int_equal(store_load_picture(reader, &scene->settings, 0, loaded, &scene->error), FW_OK);
    assert_int_equal(loaded->gauges[SCENE_SCAR].reading_count, 20);
    assert_int_equal(store_check_ledger(reader, &count, &scene->error), FW_OK);
    assert_int_equal(count, 20);
    assert_int_equal(sqlite3_exec(reader->db, "DELETE FROM reading", NULL, NULL, NULL), SQLITE_READONLY);

    /* what only a writer may do is refused */
    struct step step;
    char moved_to[STORE_PATH_SIZE];
    step_begin(&step, scene, loaded);
    step_seal(&step, SCENE_NOW_S, "{}");
    assert_int_equal(step_commit(&step, reader, &scene->error), FW_IO);
    scene_assert_says(scene, "for reading only");
    picture_destroy(step_end(&step));
    assert_int_equal(store_keep_settings(reader, &scene->settings, SCENE_NOW_S, &scene->error), FW_IO);
    assert_int_equal(store_seed(reader, &scene->settings, loaded, SCENE_NOW_S, "test", &scene->error), FW_IO);
    assert_int_equal(store_reopen(reader, SCENE_NOW_S, moved_to, &scene->error), FW_IO);
    store_close(reader);
    picture_destroy(loaded);
    for (size_t index = 0; index < 2; index++) {
        char path[STORE_PATH_SIZE];
        size_t size_after = 0;
        scene_path(scene, suffixes[index], path);
        char *after = scene_read_file(path, &size_after);
        assert_int_equal(size_after, size_before[index]);
        assert_memory_equal(after, before[index], size_after);
        free(after);
        free(before[index]);
    }
    assert_int_equal(scene_cycle(scene, writer, &picture, SCENE_NOW_S + 9000, 1.5), FW_OK);
    store_close(writer);
    picture_destroy(picture);
}

/* --- places that may not be written (only root can become somebody else) --- */

static const uid_t nobody = 65534;

static void a_folder_that_may_not_be_written_is_said_and_can_be_read(void **state)
{
    struct scene *scene = *state;
    if (geteuid() != 0)
        skip();
    picture_destroy(scene_fill(scene, 3)); /* closed: no log beside it */
    assert_int_equal(chmod(scene->directory, 0755), 0);
    assert_int_equal(chmod(scene->file, 0644), 0);
    assert_int_equal(seteuid(nobody), 0);
    enum fw_status writing = scene_try_open(scene, STORE_WRITE);
    struct fw_error said = scene->error;
    struct store *reader = NULL;
    enum fw_status reading = store_open(scene->file, STORE_READ, &reader, &scene->error);
    size_t count = 0;
    enum fw_status checked = reading == FW_OK ? store_check_ledger(reader, &count, &scene->error) : reading;
    store_close(reader);
    assert_int_equal(seteuid(0), 0);
    assert_int_equal(writing, FW_IO);
    assert_non_null(strstr(said.text, "history.db.lock"));
    assert_int_equal(reading, FW_OK);
    assert_int_equal(checked, FW_OK);
    assert_int_equal(count, 3);
    assert_false(scene_has_file(scene, "-wal") || scene_has_file(scene, "-shm"));
    assert_int_equal(scene_try_open(scene, STORE_WRITE), FW_OK);
}

static void a_store_that_may_not_be_read_is_said(void **state)
{
    struct scene *scene = *state;
    if (geteuid() != 0)
        skip();
    picture_destroy(scene_fill(scene, 1));
    assert_int_equal(chmod(scene->directory, 0755), 0);
    assert_int_equal(chmod(scene->file, 0600), 0);
    assert_int_equal(seteuid(nobody), 0);
    enum fw_status status = scene_try_open(scene, STORE_READ);
    assert_int_equal(seteuid(0), 0);
    assert_int_equal(status, FW_IO);
    scene_assert_says(scene, "history.db");
}

static void a_look_by_root_at_a_stopped_store_leaves_it_to_its_owner(void **state)
{
    struct scene *scene = *state;
    char shared_memory[STORE_PATH_SIZE];
    int how = 0;
    size_t count = 0;
    if (geteuid() != 0)
        skip();
    assert_int_equal(chown(scene->directory, nobody, (gid_t)-1), 0);
    pid_t child = fork();
    if (child == 0) { /* the owner's daemon, cut off: its log stays */
        struct store *store = NULL;
        struct picture *picture = NULL;
        bool is_done = seteuid(nobody) == 0 && picture_create(&scene->settings, &picture) == FW_OK &&
                       store_open(scene->file, STORE_WRITE, &store, &scene->error) == FW_OK &&
                       scene_cycle(scene, store, &picture, SCENE_NOW_S, 1.0) == FW_OK;
        _exit(is_done ? 0 : 1);
    }
    assert_int_equal(waitpid(child, &how, 0), child);
    assert_int_equal(how, 0);
    assert_true(store_file_has_log(scene->file));
    scene_path(scene, "-shm", shared_memory);
    assert_int_equal(unlink(shared_memory), 0); /* so that root makes it */
    struct store *store = scene_open(scene, STORE_READ);
    assert_int_equal(store_check_ledger(store, &count, &scene->error), FW_OK);
    assert_int_equal(count, 1);
    store_close(store);
    assert_int_equal(seteuid(nobody), 0);
    enum fw_status status = scene_try_open(scene, STORE_WRITE);
    assert_int_equal(seteuid(0), 0);
    if (status != FW_OK)
        fail_msg("%s", scene->error.text);
    assert_int_equal(scene_integer(scene, "SELECT count(*) FROM reading"), 1);
}

#define WITH_SCENE(test) cmocka_unit_test_setup_teardown(test, scene_set_up, scene_tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        WITH_SCENE(a_second_instance_is_refused_with_the_pid_and_the_first_goes_on),
        WITH_SCENE(another_programs_file_is_left_byte_for_byte),
        WITH_SCENE(a_whole_database_of_another_program_in_our_place_is_still_not_ours),
        WITH_SCENE(a_store_of_another_version_is_refused_naming_both),
        WITH_SCENE(a_newer_version_that_is_only_in_the_log_is_seen_too),
        WITH_SCENE(places_a_store_must_not_be_in_are_refused),
        WITH_SCENE(a_store_that_everyone_may_write_is_refused),
        WITH_SCENE(a_path_that_is_too_long_is_refused),
        WITH_SCENE(a_reader_without_a_store_is_told_so),
        WITH_SCENE(a_reader_works_beside_the_writer_and_writes_nothing),
        WITH_SCENE(a_folder_that_may_not_be_written_is_said_and_can_be_read),
        WITH_SCENE(a_store_that_may_not_be_read_is_said),
        WITH_SCENE(a_look_by_root_at_a_stopped_store_leaves_it_to_its_owner),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
