/* SPDX-License-Identifier: MIT */
/*
 * What the store does when something is wrong with it, with its file or with the disk: it says so, and loses nothing
 * that it had acknowledged.
 */
#include "store_scene.h"

#include <fcntl.h>
#include <linux/magic.h>
#include <signal.h>
#include <sys/mount.h>
#include <sys/resource.h>
#include <sys/stat.h>
#include <sys/vfs.h>
#include <sys/wait.h>
#include <time.h>

/* Takes the place of the C library's: there is no network file system on the machine that tests. */
static unsigned long pretended_file_system = EXT4_SUPER_MAGIC;
int statfs(const char *path, struct statfs *found)
{
    (void)path;
    memset(found, 0, sizeof *found);
    found->f_type = (__typeof__(found->f_type))pretended_file_system;
    return 0;
}

static enum fw_status try_open(struct scene *scene, enum store_access access)
{
    struct store *store = NULL;
    enum fw_status status = store_open(scene->file, access, &store, &scene->error);
    store_close(store);
    return status;
}

static void assert_says(const struct scene *scene, const char *text)
{
    if (strstr(scene->error.text, text) == NULL)
        fail_msg("'%s' is not in: %s", text, scene->error.text);
}

static void path_beside(const struct scene *scene, const char *suffix, char path[STORE_PATH_SIZE])
{
    snprintf(path, STORE_PATH_SIZE, "%s%s", scene->file, suffix);
}

static bool is_there(const struct scene *scene, const char *suffix)
{
    char path[STORE_PATH_SIZE];
    path_beside(scene, suffix, path);
    return access(path, F_OK) == 0;
}

/* A closed store with some cycles in it; the picture that belongs to it. */
static struct picture *fill(struct scene *scene, size_t cycles)
{
    struct store *store = scene_open(scene, STORE_WRITE);
    struct picture *picture = scene_picture(scene);
    for (size_t index = 0; index < cycles; index++)
        assert_int_equal(
            scene_cycle(scene, store, &picture, SCENE_NOW_S + 300 * (int64_t)index, 1.0 + 0.01 * (double)index),
            FW_OK);
    store_close(store);
    return picture;
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
    assert_int_equal(try_open(scene, STORE_WRITE), FW_OK);
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
        if (try_open(scene, STORE_WRITE) != FW_FOREIGN || try_open(scene, STORE_READ) != FW_FOREIGN)
            fail_msg("%s was not refused", cases[index].shows);
        assert_says(scene, "not a Forewater store");
        assert_false(is_there(scene, ".lock"));
        assert_int_equal(store_rescue(scene->file, SCENE_NOW_S, moved_to, &scene->error), FW_FOREIGN);
        assert_string_equal(moved_to, "");
        char *after = scene_read_file(scene->file, &size_after);
        assert_int_equal(size_after, size_before);
        assert_memory_equal(after, before, size_before);
        assert_false(is_there(scene, "-wal") || is_there(scene, "-shm") || is_there(scene, ".new"));
        free(before);
        free(after);
        assert_int_equal(unlink(scene->file), 0);
        char lock[STORE_PATH_SIZE];
        path_beside(scene, ".lock", lock);
        unlink(lock);
    }
    assert_int_equal(mkdir(scene->file, 0700), 0);
    assert_int_equal(try_open(scene, STORE_WRITE), FW_FOREIGN);
    assert_says(scene, "not a regular file");
}

static void a_whole_database_of_another_program_in_our_place_is_still_not_ours(void **state)
{
    struct scene *scene = *state;
    char moved_to[STORE_PATH_SIZE];
    picture_destroy(fill(scene, 1)); /* the lock file stays, with our mark */
    assert_int_equal(unlink(scene->file), 0);
    scene_meddle(scene, "CREATE TABLE theirs (x); INSERT INTO theirs VALUES (1)");
    assert_int_equal(try_open(scene, STORE_WRITE), FW_FOREIGN);
    assert_int_equal(store_rescue(scene->file, SCENE_NOW_S, moved_to, &scene->error), FW_FOREIGN);
    assert_int_equal(scene_integer(scene, "SELECT x FROM theirs"), 1);
}

static void a_store_of_another_version_is_refused_naming_both(void **state)
{
    struct scene *scene = *state;
    static const int versions[] = {2, 17, 0};
    picture_destroy(fill(scene, 1));
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
        assert_int_equal(try_open(scene, STORE_WRITE), FW_FOREIGN);
        assert_says(scene, named);
        assert_says(scene, "knows version 1");
        assert_int_equal(try_open(scene, STORE_READ), FW_FOREIGN);
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
    picture_destroy(fill(scene, 1));
    pid_t child = fork();
    if (child == 0) { /* a newer program that was cut off */
        sqlite3 *db = NULL;
        bool is_done = sqlite3_open(scene->file, &db) == SQLITE_OK &&
                       sqlite3_exec(db, "PRAGMA user_version = 2", NULL, NULL, NULL) == SQLITE_OK;
        _exit(is_done ? 0 : 1);
    }
    int how = 0;
    size_t size_before = 0;
    size_t size_after = 0;
    assert_int_equal(waitpid(child, &how, 0), child);
    assert_int_equal(how, 0);
    char *before = scene_read_file(scene->file, &size_before);
    assert_int_equal(try_open(scene, STORE_WRITE), FW_FOREIGN);
    assert_says(scene, "of version 2");
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
        enum fw_status status = try_open(scene, STORE_WRITE);
        pretended_file_system = EXT4_SUPER_MAGIC;
        assert_int_equal(status, FW_IO);
        assert_says(scene, "network file system");
        assert_false(is_there(scene, "") || is_there(scene, ".lock"));
    }
    pretended_file_system = FUSE_SUPER_MAGIC;
    enum fw_status status = try_open(scene, STORE_WRITE);
    pretended_file_system = EXT4_SUPER_MAGIC;
    assert_int_equal(status, FW_OK);
}

static void a_store_that_everyone_may_write_is_refused(void **state)
{
    struct scene *scene = *state;
    struct stat found;
    picture_destroy(fill(scene, 1));
    assert_int_equal(stat(scene->file, &found), 0);
    assert_int_equal(found.st_mode & 07777, 0640);
    assert_int_equal(chmod(scene->file, 0666), 0);
    assert_int_equal(try_open(scene, STORE_WRITE), FW_IO);
    assert_says(scene, "0666");
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
    assert_int_equal(try_open(scene, STORE_READ), FW_UNAVAILABLE);
    assert_says(scene, scene->file);
    assert_false(is_there(scene, "") || is_there(scene, ".lock"));
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
        path_beside(scene, suffixes[index], path);
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
    assert_says(scene, "for reading only");
    picture_destroy(step_end(&step));
    assert_int_equal(store_keep_settings(reader, &scene->settings, SCENE_NOW_S, &scene->error), FW_IO);
    assert_int_equal(store_seed(reader, &scene->settings, loaded, SCENE_NOW_S, "test", &scene->error), FW_IO);
    assert_int_equal(store_reopen(reader, SCENE_NOW_S, moved_to, &scene->error), FW_IO);
    store_close(reader);
    picture_destroy(loaded);
    for (size_t index = 0; index < 2; index++) {
        char path[STORE_PATH_SIZE];
        size_t size_after = 0;
        path_beside(scene, suffixes[index], path);
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
    picture_destroy(fill(scene, 3)); /* closed: no log beside it */
    assert_int_equal(chmod(scene->directory, 0755), 0);
    assert_int_equal(chmod(scene->file, 0644), 0);
    assert_int_equal(seteuid(nobody), 0);
    enum fw_status writing = try_open(scene, STORE_WRITE);
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
    assert_false(is_there(scene, "-wal") || is_there(scene, "-shm"));
    assert_int_equal(try_open(scene, STORE_WRITE), FW_OK);
}

static void a_store_that_may_not_be_read_is_said(void **state)
{
    struct scene *scene = *state;
    if (geteuid() != 0)
        skip();
    picture_destroy(fill(scene, 1));
    assert_int_equal(chmod(scene->directory, 0755), 0);
    assert_int_equal(chmod(scene->file, 0600), 0);
    assert_int_equal(seteuid(nobody), 0);
    enum fw_status status = try_open(scene, STORE_READ);
    assert_int_equal(seteuid(0), 0);
    assert_int_equal(status, FW_IO);
    assert_says(scene, "history.db");
}

/* --- damage --- */

enum { PAGE = 4096 };

static void every_page_that_is_garbled_is_found_moved_aside_and_replaced(void **state)
{
    struct scene *scene = *state;
    unsigned seed = (unsigned)time(NULL);
    size_t size = 0;
    print_message("random bytes from seed %u\n", seed);
    picture_destroy(fill(scene, 40));
    char *whole = scene_read_file(scene->file, &size);
    char *garbled = malloc(size);
    assert_non_null(garbled);
    for (size_t page = 0; page < size / PAGE; page++) {
        char moved_to[STORE_PATH_SIZE];
        size_t kept = 0;
        memcpy(garbled, whole, size);
        for (size_t byte = 0; byte < PAGE; byte++)
            garbled[page * PAGE + byte] = (char)rand_r(&seed);
        scene_write_file(scene->file, garbled, size);
        if (try_open(scene, STORE_WRITE) != FW_DAMAGED)
            fail_msg("page %zu: damage was not found", page + 1);
        assert_says(scene, scene->file);
        assert_int_equal(store_rescue(scene->file, SCENE_NOW_S, moved_to, &scene->error), FW_OK);
        char *aside = scene_read_file(moved_to, &kept);
        assert_int_equal(kept, size);
        assert_memory_equal(aside, garbled, size);
        free(aside);
        assert_int_equal(try_open(scene, STORE_WRITE), FW_OK);
        assert_int_equal(scene_integer(scene, "SELECT count(*) FROM reading"), 0);
    }
    free(garbled);
    free(whole);
}

static void a_store_cut_short_is_found_and_moved_aside(void **state)
{
    struct scene *scene = *state;
    size_t size = 0;
    picture_destroy(fill(scene, 40));
    char *whole = scene_read_file(scene->file, &size);
    const off_t lengths[] = {50, 100, 600, PAGE, 3 * PAGE, (off_t)size - PAGE, (off_t)size - PAGE / 2};
    for (size_t index = 0; index < sizeof lengths / sizeof lengths[0]; index++) {
        char moved_to[STORE_PATH_SIZE];
        struct stat found;
        scene_write_file(scene->file, whole, size);
        assert_int_equal(truncate(scene->file, lengths[index]), 0);
        if (try_open(scene, STORE_WRITE) != FW_DAMAGED)
            fail_msg("cut to %lld bytes: not found: %s", (long long)lengths[index], scene->error.text);
        assert_int_equal(store_rescue(scene->file, SCENE_NOW_S + (int64_t)index, moved_to, &scene->error), FW_OK);
        assert_int_equal(stat(moved_to, &found), 0);
        assert_int_equal(found.st_size, lengths[index]);
        assert_false(is_there(scene, ""));
    }
    free(whole);
}

static void what_is_moved_aside_says_when_and_never_covers_what_is_there(void **state)
{
    struct scene *scene = *state;
    char moved_to[STORE_PATH_SIZE];
    char expected[STORE_PATH_SIZE];
    static const char *const stamps[] = {".damaged-20310214T160000Z", ".damaged-20310214T160000Z-2",
                                         ".damaged-20310214T160000Z-3"};
    for (size_t index = 0; index < 3; index++) {
        picture_destroy(fill(scene, 5));
        assert_int_equal(truncate(scene->file, PAGE), 0);
        assert_int_equal(store_rescue(scene->file, SCENE_NOW_S, moved_to, &scene->error), FW_OK);
        path_beside(scene, stamps[index], expected);
        assert_string_equal(moved_to, expected);
        for (size_t before = 0; before <= index; before++)
            assert_true(is_there(scene, stamps[before]));
    }
}

static void a_whole_store_is_never_moved(void **state)
{
    struct scene *scene = *state;
    char moved_to[STORE_PATH_SIZE] = "something";
    assert_int_equal(store_rescue(scene->file, SCENE_NOW_S, moved_to, &scene->error), FW_OK); /* none there */
    assert_string_equal(moved_to, "");
    struct picture *picture = fill(scene, 5);
    assert_int_equal(store_rescue(scene->file, SCENE_NOW_S, moved_to, &scene->error), FW_OK);
    assert_string_equal(moved_to, "");
    struct store *store = scene_open(scene, STORE_WRITE);
    assert_int_equal(scene_cycle(scene, store, &picture, SCENE_NOW_S + 9000, 2.0), FW_OK);
    assert_int_equal(store_rescue(scene->file, SCENE_NOW_S, moved_to, &scene->error), FW_LOCKED);
    assert_int_equal(store_reopen(store, SCENE_NOW_S, moved_to, &scene->error), FW_OK);
    assert_string_equal(moved_to, "");
    assert_int_equal(scene_cycle(scene, store, &picture, SCENE_NOW_S + 9300, 2.1), FW_OK);
    assert_int_equal(plain_integer(store->db, "SELECT count(*) FROM reading"), 7);
    store_close(store);
    picture_destroy(picture);
}

static void a_log_without_its_store_is_moved_aside(void **state)
{
    struct scene *scene = *state;
    char log[STORE_PATH_SIZE];
    char moved_to[STORE_PATH_SIZE];
    picture_destroy(fill(scene, 1));
    assert_int_equal(unlink(scene->file), 0);
    path_beside(scene, "-wal", log);
    scene_write_file(log, "left over", 9);
    assert_int_equal(try_open(scene, STORE_WRITE), FW_DAMAGED);
    assert_says(scene, "write-ahead log");
    assert_int_equal(store_rescue(scene->file, SCENE_NOW_S, moved_to, &scene->error), FW_OK);
    assert_true(is_there(scene, ".damaged-20310214T160000Z-wal"));
    assert_int_equal(try_open(scene, STORE_WRITE), FW_OK);
}

static void words_that_are_none_are_damage(void **state)
{
    struct scene *scene = *state;
    static const struct {
        const char *sql, *says;
    } cases[] = {
        {"INSERT INTO word VALUES (99, 'x', 'road', 'tallowick-ford', NULL, NULL, NULL, 'AJAR', '', 'crew', 1, 1)",
         "word 'x'"},
        {"DELETE FROM word; INSERT INTO advice VALUES ('tallowick-ford', (SELECT max(entry) FROM ledger), 'PANIC', "
         "0, 0, 0, NULL, 1, NULL, NULL, NULL)",
         "unknown level"},
    };
    picture_destroy(fill(scene, 1));
    for (size_t index = 0; index < 2; index++) {
        scene_meddle(scene, cases[index].sql);
        struct store *store = scene_open(scene, STORE_READ);
        struct picture *picture = scene_picture(scene);
        assert_int_equal(store_load_picture(store, &scene->settings, 0, picture, &scene->error), FW_DAMAGED);
        assert_says(scene, cases[index].says);
        struct word *words = NULL;
        size_t count = 0;
        if (index == 0)
            assert_int_equal(store_list_words(store, 0, INT64_MAX, &words, &count, &scene->error), FW_DAMAGED);
        picture_destroy(picture);
        store_close(store);
    }
}

/* --- the file goes away under the daemon --- */

static void destroy_file(const struct scene *scene)
{
    assert_int_equal(unlink(scene->file), 0);
}

static void destroy_log(const struct scene *scene)
{
    char path[STORE_PATH_SIZE];
    path_beside(scene, "-wal", path);
    assert_int_equal(unlink(path), 0);
}

static void destroy_folder(const struct scene *scene)
{
    char command[128];
    snprintf(command, sizeof command, "rm -rf '%s'", scene->directory);
    assert_int_equal(system(command), 0);
}

static void replace_file(const struct scene *scene)
{
    struct scene other = *scene;
    snprintf(other.file, sizeof other.file, "%s/other.db", scene->directory);
    picture_destroy(fill(&other, 2));
    assert_int_equal(rename(other.file, scene->file), 0);
}

static void garble_file(const struct scene *scene)
{
    int file = open(scene->file, O_WRONLY);
    static const char rubbish[64] = "rubbish rubbish rubbish rubbish rubbish rubbish rubbish rubbish";
    for (off_t at = 0; at < 8 * PAGE; at += 64)
        assert_int_equal(pwrite(file, rubbish, sizeof rubbish, at), sizeof rubbish);
    close(file);
}

/* A commit that fails, then a store opened anew and seeded, then a commit that works: what was known is known. */
static void a_store_destroyed_under_the_daemon_is_replaced_and_seeded(void **state)
{
    struct scene *scene = *state;
    static const struct {
        void (*destroy)(const struct scene *scene);
        enum fw_status commit;
        const char *shows;
    } cases[] = {
        {destroy_file, FW_IO, "the file is removed"},     {destroy_log, FW_IO, "the log is removed"},
        {destroy_folder, FW_IO, "the folder is removed"}, {replace_file, FW_IO, "the file is replaced"},
        {garble_file, FW_DAMAGED, "the file is garbled"},
    };
    for (size_t index = 0; index < sizeof cases / sizeof cases[0]; index++) {
        char moved_to[STORE_PATH_SIZE];
        size_t count = 0;
        destroy_folder(scene);
        assert_int_equal(mkdir(scene->directory, 0700), 0);
        struct picture *picture = fill(scene, 3);
        struct store *store = scene_open(scene, STORE_WRITE);
        assert_int_equal(scene_cycle(scene, store, &picture, SCENE_NOW_S + 6000, 2.0), FW_OK);
        plain_run(store->db,
                  "PRAGMA wal_checkpoint(TRUNCATE)"); /* so that nothing of the file is in memory or the log */
        sqlite3_db_release_memory(store->db);
        cases[index].destroy(scene);
        enum fw_status status = scene_cycle(scene, store, &picture, SCENE_NOW_S + 6300, 2.1);
        if (status != cases[index].commit)
            fail_msg("%s: %d: %s", cases[index].shows, status, scene->error.text);
        if (status == FW_IO)
            assert_says(scene, "was removed or replaced under the running daemon");
        assert_int_equal(scene_cycle(scene, store, &picture, SCENE_NOW_S + 6600, 2.2), FW_IO);

        if (store_reopen(store, SCENE_NOW_S + 6700, moved_to, &scene->error) != FW_OK)
            fail_msg("%s: %s", cases[index].shows, scene->error.text);
        assert_true(store_is_held(scene->file, NULL));
        assert_int_equal(
            store_seed(store, &scene->settings, picture, SCENE_NOW_S + 6700, cases[index].shows, &scene->error),
            FW_OK);
        status = scene_cycle(scene, store, &picture, SCENE_NOW_S + 6900, 2.3);
        if (status != FW_OK)
            fail_msg("%s: %s", cases[index].shows, scene->error.text);
        store_close(store);

        store = scene_open(scene, STORE_WRITE);
        struct picture *loaded = scene_picture(scene);
        assert_int_equal(store_load_picture(store, &scene->settings, 0, loaded, &scene->error), FW_OK);
        assert_int_equal(loaded->gauges[SCENE_SCAR].reading_count, 7);
        for (size_t reading = 0; reading < 7; reading++)
            assert_true(loaded->gauges[SCENE_SCAR].readings[reading].reading.value ==
                        picture->gauges[SCENE_SCAR].readings[reading].reading.value);
        assert_string_equal(loaded->newest_link, picture->newest_link);
        assert_int_equal(loaded->next_entry, picture->next_entry);
        assert_int_equal(store_check_ledger(store, &count, &scene->error), FW_OK);
        store_close(store);
        picture_destroy(loaded);
        picture_destroy(picture);
    }
}

/* --- statements that fail --- */

/* One of everything, so that every table is written. */
static void fill_step(struct step *step, const struct scene *scene, const struct picture *before)
{
    step_begin(step, scene, before);
    struct reading reading = {.gauge = SCENE_SCAR, .observed_utc_s = SCENE_NOW_S, .value = 1.37, .unit = "m"};
    int64_t entry = step_add_reading(step, reading);
    step_add_judgement(step, entry, (struct quality_verdict){.flag = QUALITY_PASS});
    struct word word = {.id = "w-1",
                        .kind = WORD_ROAD,
                        .subject = "tallowick-ford",
                        .road = ROAD_SHUT,
                        .by = "crew",
                        .at_utc_s = SCENE_NOW_S};
    step_add_word(step, word);
    struct message message = {.id = "an id", .number = 1, .point = SCENE_FORD, .made_utc_s = SCENE_NOW_S};
    step_add_message(step, message, "bulletin");
    step->delta.next->points[SCENE_FORD].advice.level = ADVICE_MUSTER;
    step->delta.next->points[SCENE_FORD].advice.since_utc_s = SCENE_NOW_S;
    step->news.payloads = calloc(1, sizeof *step->news.payloads);
    assert_non_null(step->news.payloads);
    step->news.payload_count = 1;
    step->news.payloads[0] = (struct news_payload){.gauge = SCENE_SCAR, .origin = "file"};
    struct forecast *forecast = &step->delta.next->forecast;
    forecast->step_count = 1;
    forecast->low_mm = calloc(SCENE_POINTS, sizeof(int32_t));
    forecast->likely_mm = calloc(SCENE_POINTS, sizeof(int32_t));
    forecast->high_mm = calloc(SCENE_POINTS, sizeof(int32_t));
    step->delta.keeps_forecast = true;
    step_seal(step, SCENE_NOW_S + 300, "{}");
}

static const char *const written_tables[] = {"ledger", "ledger_payload", "reading",  "judgement",      "word",
                                             "outbox", "raw_payload",    "forecast", "forecast_curve", "advice"};
enum { WRITTEN_TABLES = sizeof written_tables / sizeof written_tables[0] };

static int64_t rows_in_all(const struct scene *scene)
{
    int64_t rows = 0;
    for (size_t table = 0; table < WRITTEN_TABLES; table++) {
        char sql[128];
        snprintf(sql, sizeof sql, "SELECT count(*) FROM %s", written_tables[table]);
        rows += scene_integer(scene, sql);
    }
    return rows;
}

static void a_commit_that_fails_at_any_table_stores_nothing(void **state)
{
    struct scene *scene = *state;
    struct store *store = scene_open(scene, STORE_WRITE);
    struct picture *picture = scene_picture(scene);
    struct step step;
    fill_step(&step, scene, picture);
    for (size_t table = 0; table < WRITTEN_TABLES; table++) {
        char sql[256];
        snprintf(sql, sizeof sql,
                 "CREATE TRIGGER refuse BEFORE INSERT ON %s BEGIN SELECT RAISE(ABORT, 'refused by the test'); END",
                 written_tables[table]);
        scene_meddle(scene, sql);
        if (step_commit(&step, store, &scene->error) != FW_IO)
            fail_msg("%s: did not fail", written_tables[table]);
        assert_says(scene, "refused by the test");
        assert_says(scene, scene->file);
        scene_meddle(scene, "DROP TRIGGER refuse");
        if (rows_in_all(scene) != 0)
            fail_msg("%s: left rows behind", written_tables[table]);
    }
    assert_int_equal(step_commit(&step, store, &scene->error), FW_OK); /* and the same delta still goes in */
    assert_int_equal(rows_in_all(scene), WRITTEN_TABLES + 1);          /* two curves */
    picture_destroy(step_end(&step));
    picture_destroy(picture);
    store_close(store);
}

static void a_seed_that_fails_changes_neither_store_nor_picture(void **state)
{
    struct scene *scene = *state;
    static const char *const tables[] = {"ledger", "ledger_payload", "reading",  "judgement", "word",
                                         "outbox", "advice",         "settings", "counter"};
    struct store *store = scene_open(scene, STORE_WRITE);
    struct picture *picture = scene_picture(scene);
    struct step step;
    fill_step(&step, scene, picture);
    struct picture *next = step_end(&step); /* never stored */
    char link[FACT_DIGEST_SIZE];
    memcpy(link, next->newest_link, sizeof link);
    int64_t next_entry = next->next_entry;
    for (size_t table = 0; table < sizeof tables / sizeof tables[0]; table++) {
        char sql[256];
        snprintf(sql, sizeof sql,
                 "CREATE TRIGGER refuse BEFORE INSERT ON %s BEGIN SELECT RAISE(ABORT, 'refused by the test'); END",
                 tables[table]);
        scene_meddle(scene, sql);
        if (store_seed(store, &scene->settings, next, SCENE_NOW_S + 400, "test", &scene->error) != FW_IO)
            fail_msg("%s: did not fail", tables[table]);
        scene_meddle(scene, "DROP TRIGGER refuse");
        assert_int_equal(rows_in_all(scene), 0);
        assert_string_equal(next->newest_link, link);
        assert_int_equal(next->next_entry, next_entry);
    }
    assert_int_equal(store_seed(store, &scene->settings, next, SCENE_NOW_S + 400, "test", &scene->error), FW_OK);
    assert_string_not_equal(next->newest_link, link);
    picture_destroy(next);
    picture_destroy(picture);
    store_close(store);
}

static void values_that_are_none_are_refused_whole(void **state)
{
    struct scene *scene = *state;
    static const struct {
        struct reading reading;
        const char *says;
    } cases[] = {
        {{.gauge = SCENE_SCAR, .value = NAN, .unit = "m"}, "reading.value"},
        {{.gauge = SCENE_GAUGES, .value = 1.0, .unit = "m"}, "reading.gauge"},
        {{.gauge = -1, .value = 1.0, .unit = "m"}, "reading.gauge"},
    };
    struct store *store = scene_open(scene, STORE_WRITE);
    struct picture *picture = scene_picture(scene);
    for (size_t index = 0; index < 3; index++) {
        struct step step;
        struct reading reading = cases[index].reading;
        step_begin(&step, scene, picture);
        reading.entry = step.delta.next->next_entry++;
        step.delta.readings = calloc(1, sizeof reading);
        assert_non_null(step.delta.readings);
        step.delta.readings[0] = reading;
        step.delta.reading_count = 1;
        step_seal(&step, SCENE_NOW_S, "{}");
        assert_int_equal(step_commit(&step, store, &scene->error), FW_IO);
        assert_says(scene, cases[index].says);
        picture_destroy(step_end(&step));
        assert_int_equal(rows_in_all(scene), 0);
    }
    picture_destroy(picture);
    store_close(store);
}

static void what_is_too_big_or_does_not_fit_memory_is_refused_whole(void **state)
{
    struct scene *scene = *state;
    struct store *store = scene_open(scene, STORE_WRITE);
    struct picture *picture = scene_picture(scene);
    struct step step;
    fill_step(&step, scene, picture);
    int limit = sqlite3_limit(store->db, SQLITE_LIMIT_LENGTH, 20); /* a digest has 64 */
    assert_int_equal(step_commit(&step, store, &scene->error), FW_IO);
    sqlite3_limit(store->db, SQLITE_LIMIT_LENGTH, limit);
    assert_int_equal(rows_in_all(scene), 0);

    static char big[512 * 1024];
    step.news.payloads[0].bytes = big;
    step.news.payloads[0].length = sizeof big;
    sqlite3_hard_heap_limit64(sqlite3_memory_used() + 100 * 1024);
    enum fw_status status = step_commit(&step, store, &scene->error);
    sqlite3_hard_heap_limit64(0);
    assert_int_equal(status, FW_NO_MEMORY);
    assert_int_equal(rows_in_all(scene), 0);
    assert_int_equal(step_commit(&step, store, &scene->error), FW_OK);
    picture_destroy(step_end(&step));
    picture_destroy(picture);
    store_close(store);
}

static void an_entry_behind_one_that_was_not_stored_is_refused_until_the_store_is_seeded(void **state)
{
    struct scene *scene = *state;
    struct store *store = scene_open(scene, STORE_WRITE);
    struct picture *picture = scene_picture(scene);
    size_t count = 0;
    assert_int_equal(scene_cycle(scene, store, &picture, SCENE_NOW_S, 1.0), FW_OK);
    scene_meddle(scene, "CREATE TRIGGER refuse BEFORE INSERT ON judgement BEGIN SELECT RAISE(ABORT, 'no'); END");
    assert_int_equal(scene_cycle(scene, store, &picture, SCENE_NOW_S + 300, 1.1), FW_IO);
    scene_meddle(scene, "DROP TRIGGER refuse");
    assert_int_equal(scene_cycle(scene, store, &picture, SCENE_NOW_S + 600, 1.2), FW_UNAVAILABLE);
    assert_says(scene, "must be seeded");
    assert_int_equal(store_seed(store, &scene->settings, picture, SCENE_NOW_S + 700, "two \"cycles\" were not stored",
                                &scene->error),
                     FW_OK);
    assert_int_equal(scene_cycle(scene, store, &picture, SCENE_NOW_S + 900, 1.3), FW_OK);
    assert_int_equal(store_check_ledger(store, &count, &scene->error), FW_OK);
    assert_int_equal(count, 3);
    assert_int_equal(plain_integer(store->db, "SELECT count(*) FROM reading"), 4);
    assert_int_equal(plain_integer(store->db, "SELECT count(*) FROM judgement"), 4);
    for (size_t index = 0; index < 4;
         index++) { /* readings of the gap have the numbers under which they were known */
        const struct reading *reading = &picture->gauges[SCENE_SCAR].readings[index].reading;
        char sql[128];
        snprintf(sql, sizeof sql, "SELECT observed FROM reading WHERE entry = %lld", (long long)reading->entry);
        assert_int_equal(plain_integer(store->db, sql), reading->observed_utc_s);
    }
    assert_int_equal(plain_integer(store->db,
                                   "SELECT count(*) FROM ledger_payload WHERE payload LIKE "
                                   "'{\"kind\":\"reseed\",\"why\":\"two \\\"cycles\\\" were not stored\",%'"),
                     1);
    store_close(store);
    picture_destroy(picture);
}

/* A fresh store that is seeded carries on as if nothing had been lost but the past. */
static void a_seeded_store_loads_as_the_picture_it_was_seeded_with(void **state)
{
    struct scene *scene = *state;
    struct store *store = scene_open(scene, STORE_WRITE);
    struct picture *first = scene_picture(scene);
    struct step step;
    fill_step(&step, scene, first);
    struct picture *picture = step.delta.next;
    picture->next_message_number = 413; /* earlier ones were settled and forgotten */
    struct point_picture *ford = &picture->points[SCENE_FORD];
    ford->advice.onset_utc_s = SCENE_NOW_S - 60;
    ford->water = (struct water_fact){
        .is_known = true, .is_wet = true, .depth_cm = 12.0, .at_utc_s = SCENE_NOW_S + 1, .by = "crew"};
    ford->accepted_utc_s = SCENE_NOW_S + 2;
    snprintf(ford->accepted_by, sizeof ford->accepted_by, "duty officer");
    picture->points[SCENE_CAUSEWAY].water =
        (struct water_fact){.is_known = true, .depth_cm = NAN, .at_utc_s = SCENE_NOW_S + 3, .by = "ranger"};
    (void)step_end(&step);
    assert_int_equal(store_seed(store, &scene->settings, picture, SCENE_NOW_S + 400, "test", &scene->error), FW_OK);

    struct picture *loaded = scene_picture(scene);
    struct text text = {0};
    assert_int_equal(store_load_picture(store, &scene->settings, 0, loaded, &scene->error), FW_OK);
    assert_int_equal(loaded->next_entry, picture->next_entry);
    assert_int_equal(loaded->next_message_number, 413);
    assert_string_equal(loaded->newest_link, picture->newest_link);
    assert_int_equal(loaded->gauges[SCENE_SCAR].reading_count, 1);
    assert_int_equal(loaded->gauges[SCENE_SCAR].readings[0].reading.entry,
                     picture->gauges[SCENE_SCAR].readings[0].reading.entry);
    assert_true(loaded->gauges[SCENE_SCAR].readings[0].is_judged);
    assert_int_equal(loaded->outbox_count, 1);
    assert_int_equal(loaded->outbox[0].entry, picture->outbox[0].entry);
    for (size_t index = 0; index < SCENE_POINTS; index++) {
        const struct point_picture *now = &picture->points[index];
        const struct point_picture *back = &loaded->points[index];
        assert_true(store_same_advice(&back->advice, &now->advice));
        assert_int_equal(back->road.state, now->road.state);
        assert_int_equal(back->road.at_utc_s, now->road.at_utc_s);
        assert_string_equal(back->road.by, now->road.by);
        assert_int_equal(back->water.is_known, now->water.is_known);
        assert_int_equal(back->water.is_wet, now->water.is_wet);
        assert_true(back->water.depth_cm == now->water.depth_cm || isnan(now->water.depth_cm));
        assert_string_equal(back->water.by, now->water.by);
        assert_int_equal(back->accepted_utc_s, now->accepted_utc_s);
        assert_string_equal(back->accepted_by, now->accepted_by);
        assert_int_equal(back->told_number, now->told_number);
    }
    assert_int_equal(store_last_settings(store, &text, &scene->error), FW_OK);
    assert_string_equal(text_string(&text), scene->settings.text);
    text_clear(&text);

    /* again: everything is recognised, only the ledger grows */
    int64_t rows = rows_in_all(scene);
    assert_int_equal(store_seed(store, &scene->settings, picture, SCENE_NOW_S + 500, "test", &scene->error), FW_OK);
    assert_int_equal(rows_in_all(scene), rows + 2);
    assert_int_equal(store_save_delivery(store, &picture->outbox[0], &scene->error), FW_OK);
    picture_destroy(loaded);
    picture_destroy(picture);
    picture_destroy(first);
    store_close(store);
}

/* A store of somebody's backup in the place of ours: its numbers are taken, ours move. */
static void seeding_a_store_with_other_rows_takes_new_numbers(void **state)
{
    struct scene *scene = *state;
    picture_destroy(fill(scene, 10));
    struct store *store = scene_open(scene, STORE_WRITE);
    struct picture *first = scene_picture(scene);
    struct step step;
    size_t count = 0;
    fill_step(&step, scene, first);
    struct reading late = {.gauge = SCENE_MILL, .observed_utc_s = SCENE_NOW_S, .value = 8.25, .unit = "m3/s"};
    step.delta.readings[0] = late;
    struct picture *picture = step_end(&step);
    bool was_new = false;
    late.entry = 2;
    assert_int_equal(picture_add_reading(picture, &late, &was_new), FW_OK);
    assert_int_equal(store_seed(store, &scene->settings, picture, SCENE_NOW_S + 400, "test", &scene->error), FW_OK);
    assert_int_equal(store_check_ledger(store, &count, &scene->error), FW_OK);
    assert_int_equal(count, 11);
    /* our reading of the same gauge and time says something else, and is the newest */
    assert_int_equal(plain_integer(store->db, "SELECT count(*) FROM reading WHERE gauge = 'orlin-scar'"), 11);
    const struct reading *mine = &picture->gauges[SCENE_SCAR].readings[0].reading;
    assert_true(mine->entry > 30);
    assert_true(picture->gauges[SCENE_MILL].readings[0].reading.entry > 30);
    assert_true(picture->next_entry > mine->entry);
    struct picture *loaded = scene_picture(scene);
    assert_int_equal(store_load_picture(store, &scene->settings, 0, loaded, &scene->error), FW_OK);
    assert_true(loaded->gauges[SCENE_SCAR].readings[0].reading.value == 1.37);
    assert_int_equal(loaded->next_entry, picture->next_entry);
    picture_destroy(loaded);
    picture_destroy(picture);
    picture_destroy(first);
    store_close(store);
}

/* --- the disk --- */

/* Commits until one fails; the number that were acknowledged. */
static int64_t commit_until_it_fails(struct scene *scene, struct store *store, struct picture **picture, int64_t from)
{
    int64_t acknowledged = from;
    while (acknowledged < from + 5000 &&
           scene_cycle(scene, store, picture, SCENE_NOW_S + 300 * acknowledged, 1.0) == FW_OK)
        acknowledged++;
    return acknowledged;
}

/* The store goes on where it was once the trouble is over. */
static void assert_heals(struct scene *scene, struct store *store, struct picture **picture, int64_t acknowledged)
{
    char moved_to[STORE_PATH_SIZE];
    size_t count = 0;
    if (store_reopen(store, SCENE_NOW_S, moved_to, &scene->error) != FW_OK)
        fail_msg("%s", scene->error.text);
    assert_string_equal(moved_to, "");
    assert_int_equal(plain_integer(store->db, "SELECT count(*) FROM reading"), acknowledged);
    assert_int_equal(plain_integer(store->db, "SELECT count(*) FROM judgement"), acknowledged);
    assert_int_equal(store_check_ledger(store, &count, &scene->error), FW_OK);
    assert_int_equal(count, acknowledged);
    assert_int_equal(store_seed(store, &scene->settings, *picture, SCENE_NOW_S, "the disk was full", &scene->error),
                     FW_OK);
    assert_int_equal(plain_integer(store->db, "SELECT count(*) FROM reading"), acknowledged + 1);
    assert_int_equal(scene_cycle(scene, store, picture, SCENE_NOW_S + 300 * (acknowledged + 9), 1.0), FW_OK);
}

static void a_file_that_may_not_grow_loses_nothing_acknowledged_and_heals(void **state)
{
    struct scene *scene = *state;
    struct store *store = scene_open(scene, STORE_WRITE);
    struct picture *picture = scene_picture(scene);
    struct rlimit before;
    assert_int_equal(getrlimit(RLIMIT_FSIZE, &before), 0);
    struct rlimit small = {.rlim_cur = 200 * 1024, .rlim_max = before.rlim_max};
    signal(SIGXFSZ, SIG_IGN);
    assert_int_equal(setrlimit(RLIMIT_FSIZE, &small), 0);
    int64_t acknowledged = commit_until_it_fails(scene, store, &picture, 0);
    enum fw_status status = scene->error.status;
    enum fw_status again = store_keep_settings(store, &scene->settings, SCENE_NOW_S, &scene->error);
    assert_int_equal(setrlimit(RLIMIT_FSIZE, &before), 0);
    assert_in_range(acknowledged, 1, 4999);
    assert_int_equal(status, FW_IO);
    assert_int_equal(again, FW_IO); /* not before it is opened anew: a failed write is not retried and trusted */
    assert_says(scene, "has not been opened anew");
    assert_heals(scene, store, &picture, acknowledged);
    store_close(store);
    picture_destroy(picture);
}

static void a_full_disk_loses_nothing_acknowledged_and_heals(void **state)
{
    struct scene *scene = *state;
    if (mount("tmpfs", scene->directory, "tmpfs", 0, "size=1m") != 0)
        skip(); /* not allowed here */
    struct store *store = scene_open(scene, STORE_WRITE);
    struct picture *picture = scene_picture(scene);
    int64_t acknowledged = commit_until_it_fails(scene, store, &picture, 0);
    assert_in_range(acknowledged, 1, 4999);
    assert_int_equal(scene->error.status, FW_IO);
    assert_says(scene, "full");
    assert_int_equal(mount("tmpfs", scene->directory, "tmpfs", MS_REMOUNT, "size=16m"), 0);
    assert_heals(scene, store, &picture, acknowledged);
    store_close(store);
    assert_int_equal(mount("tmpfs", scene->directory, "tmpfs", MS_REMOUNT | MS_RDONLY, "size=16m"), 0);
    assert_int_equal(try_open(scene, STORE_WRITE), FW_IO); /* a file system that may only be read */
    assert_says(scene, "Read-only file system");
    picture_destroy(picture);
    assert_int_equal(umount(scene->directory), 0);
}

/* --- kill -9 --- */

/* Opens, loads and commits for ever, and tells the parent of each commit that was acknowledged. */
static void commit_for_ever(struct scene *scene, int tell)
{
    struct store *store = NULL;
    struct picture *picture = NULL;
    if (store_open(scene->file, STORE_WRITE, &store, &scene->error) != FW_OK ||
        picture_create(&scene->settings, &picture) != FW_OK ||
        store_load_picture(store, &scene->settings, 0, picture, &scene->error) != FW_OK)
        _exit(1);
    for (int64_t count = (int64_t)picture->gauges[SCENE_SCAR].reading_count;; count++) {
        if (scene_cycle(scene, store, &picture, SCENE_NOW_S + 300 * count, 1.0) != FW_OK)
            _exit(2);
        int64_t acknowledged = count + 1;
        if (write(tell, &acknowledged, sizeof acknowledged) != (ssize_t)sizeof acknowledged)
            _exit(3);
    }
}

/* The newest number the child told before it was killed, or `before`. */
static int64_t kill_one(struct scene *scene, unsigned *seed, int64_t before)
{
    int ends[2];
    int64_t told = before;
    int how = 0;
    assert_int_equal(pipe(ends), 0);
    pid_t child = fork();
    assert_true(child >= 0);
    if (child == 0) {
        close(ends[0]);
        commit_for_ever(scene, ends[1]);
    }
    close(ends[1]);
    struct timespec wait = {.tv_nsec = 1000000L * (5 + (long)(rand_r(seed) % 56))};
    nanosleep(&wait, NULL);
    assert_int_equal(kill(child, SIGKILL), 0);
    assert_int_equal(waitpid(child, &how, 0), child);
    assert_true(WIFSIGNALED(how));
    while (read(ends[0], &told, sizeof told) == (ssize_t)sizeof told)
        continue;
    close(ends[0]);
    return told;
}

static void a_killed_daemon_loses_no_acknowledged_commit(void **state)
{
    struct scene *scene = *state;
    enum { KILLS = 30 };
    unsigned seed = (unsigned)time(NULL);
    int64_t told = 0;
    print_message("random waits from seed %u\n", seed);
    for (size_t index = 0; index < KILLS; index++) {
        told = kill_one(scene, &seed, told);
        struct store *store = scene_open(scene, STORE_WRITE); /* with its quick check */
        size_t count = 0;
        int64_t readings = plain_integer(store->db, "SELECT count(*) FROM reading");
        assert_int_equal(store_check_ledger(store, &count, &scene->error), FW_OK);
        assert_true(readings >= told);
        assert_int_equal(count, readings);
        assert_int_equal(plain_integer(store->db, "SELECT count(*) FROM judgement"), readings);
        assert_int_equal(
            plain_integer(store->db, "SELECT count(*) FROM pragma_integrity_check WHERE integrity_check = 'ok'"), 1);
        store_close(store);
    }
    print_message("%d kills, %lld acknowledged commits, none lost\n", KILLS, (long long)told);
    assert_true(told > 0);
}

static void a_store_that_was_half_made_is_made_anew(void **state)
{
    struct scene *scene = *state;
    char path[STORE_PATH_SIZE];
    path_beside(scene, ".new", path);
    scene_write_file(path, "half", 4);
    path_beside(scene, ".new-journal", path);
    scene_write_file(path, "half", 4);
    scene_write_file(scene->file, "", 0);
    assert_int_equal(try_open(scene, STORE_WRITE), FW_OK);
    assert_false(is_there(scene, ".new") || is_there(scene, ".new-journal"));
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
        WITH_SCENE(every_page_that_is_garbled_is_found_moved_aside_and_replaced),
        WITH_SCENE(a_store_cut_short_is_found_and_moved_aside),
        WITH_SCENE(what_is_moved_aside_says_when_and_never_covers_what_is_there),
        WITH_SCENE(a_whole_store_is_never_moved),
        WITH_SCENE(a_log_without_its_store_is_moved_aside),
        WITH_SCENE(words_that_are_none_are_damage),
        WITH_SCENE(a_store_destroyed_under_the_daemon_is_replaced_and_seeded),
        WITH_SCENE(a_commit_that_fails_at_any_table_stores_nothing),
        WITH_SCENE(a_seed_that_fails_changes_neither_store_nor_picture),
        WITH_SCENE(values_that_are_none_are_refused_whole),
        WITH_SCENE(what_is_too_big_or_does_not_fit_memory_is_refused_whole),
        WITH_SCENE(an_entry_behind_one_that_was_not_stored_is_refused_until_the_store_is_seeded),
        WITH_SCENE(a_seeded_store_loads_as_the_picture_it_was_seeded_with),
        WITH_SCENE(seeding_a_store_with_other_rows_takes_new_numbers),
        WITH_SCENE(a_file_that_may_not_grow_loses_nothing_acknowledged_and_heals),
        WITH_SCENE(a_full_disk_loses_nothing_acknowledged_and_heals),
        WITH_SCENE(a_killed_daemon_loses_no_acknowledged_commit),
        WITH_SCENE(a_store_that_was_half_made_is_made_anew),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
