/* SPDX-License-Identifier: MIT */
/* A store that is damaged, removed, full or cut off: it is said, and nothing that was acknowledged is lost. */
#include "store_scene.h"

#include <fcntl.h>
#include <signal.h>
#include <sys/mount.h>
#include <sys/resource.h>
#include <sys/stat.h>
#include <sys/wait.h>
#include <time.h>

/* --- damage --- */

enum { PAGE = 4096 };

static void every_page_that_is_garbled_is_found_moved_aside_and_replaced(void **state)
{
    struct scene *scene = *state;
    unsigned seed = (unsigned)time(NULL);
    size_t size = 0;
    print_message("random bytes from seed %u\n", seed);
    picture_destroy(scene_fill(scene, 40));
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
        if (scene_try_open(scene, STORE_WRITE) != FW_DAMAGED)
            fail_msg("page %zu: damage was not found", page + 1);
        scene_assert_says(scene, scene->file);
        assert_int_equal(store_rescue(scene->file, SCENE_NOW_S, moved_to, &scene->error), FW_OK);
        char *aside = scene_read_file(moved_to, &kept);
        assert_int_equal(kept, size);
        assert_memory_equal(aside, garbled, size);
        free(aside);
        assert_int_equal(scene_try_open(scene, STORE_WRITE), FW_OK);
        assert_int_equal(scene_integer(scene, "SELECT count(*) FROM reading"), 0);
    }
    free(garbled);
    free(whole);
}

static void a_store_cut_short_is_found_and_moved_aside(void **state)
{
    struct scene *scene = *state;
    size_t size = 0;
    picture_destroy(scene_fill(scene, 40));
    char *whole = scene_read_file(scene->file, &size);
    const off_t lengths[] = {50, 100, 600, PAGE, 3 * PAGE, (off_t)size - PAGE, (off_t)size - PAGE / 2};
    for (size_t index = 0; index < sizeof lengths / sizeof lengths[0]; index++) {
        char moved_to[STORE_PATH_SIZE];
        struct stat found;
        scene_write_file(scene->file, whole, size);
        assert_int_equal(truncate(scene->file, lengths[index]), 0);
        if (scene_try_open(scene, STORE_WRITE) != FW_DAMAGED)
            fail_msg("cut to %lld bytes: not found: %s", (long long)lengths[index], scene->error.text);
        assert_int_equal(store_rescue(scene->file, SCENE_NOW_S + (int64_t)index, moved_to, &scene->error), FW_OK);
        assert_int_equal(stat(moved_to, &found), 0);
        assert_int_equal(found.st_size, lengths[index]);
        assert_false(scene_has_file(scene, ""));
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
        picture_destroy(scene_fill(scene, 5));
        assert_int_equal(truncate(scene->file, PAGE), 0);
        assert_int_equal(store_rescue(scene->file, SCENE_NOW_S, moved_to, &scene->error), FW_OK);
        scene_path(scene, stamps[index], expected);
        assert_string_equal(moved_to, expected);
        for (size_t before = 0; before <= index; before++)
            assert_true(scene_has_file(scene, stamps[before]));
    }
}

static void a_whole_store_is_never_moved(void **state)
{
    struct scene *scene = *state;
    char moved_to[STORE_PATH_SIZE] = "something";
    assert_int_equal(store_rescue(scene->file, SCENE_NOW_S, moved_to, &scene->error), FW_OK); /* none there */
    assert_string_equal(moved_to, "");
    struct picture *picture = scene_fill(scene, 5);
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
    picture_destroy(scene_fill(scene, 1));
    assert_int_equal(unlink(scene->file), 0);
    scene_path(scene, "-wal", log);
    scene_write_file(log, "left over", 9);
    assert_int_equal(scene_try_open(scene, STORE_WRITE), FW_DAMAGED);
    scene_assert_says(scene, "write-ahead log");
    assert_int_equal(store_rescue(scene->file, SCENE_NOW_S, moved_to, &scene->error), FW_OK);
    assert_true(scene_has_file(scene, ".damaged-20310214T160000Z-wal"));
    assert_int_equal(scene_try_open(scene, STORE_WRITE), FW_OK);
}

static void words_that_are_none_are_damage(void **state)
{
    struct scene *scene = *state;
    static const struct {
        const char *sql, *says;
    } cases[] = {
        {"INSERT INTO word VALUES (99, 'x', 'road', 'tallowick-ford', NULL, NULL, NULL, 'AJAR', '', 'crew', 1, 1, "
         "NULL)",
         "word 'x'"},
        {"DELETE FROM word; INSERT INTO advice VALUES ('tallowick-ford', (SELECT max(entry) FROM ledger), 'PANIC', "
         "0, 0, 0, NULL, 1, NULL, NULL, NULL)",
         "unknown level"},
    };
    picture_destroy(scene_fill(scene, 1));
    for (size_t index = 0; index < 2; index++) {
        scene_meddle(scene, cases[index].sql);
        struct store *store = scene_open(scene, STORE_READ);
        struct picture *picture = scene_picture(scene);
        assert_int_equal(store_load_picture(store, &scene->settings, 0, picture, &scene->error), FW_DAMAGED);
        scene_assert_says(scene, cases[index].says);
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
    scene_path(scene, "-wal", path);
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
    picture_destroy(scene_fill(&other, 2));
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
        struct picture *picture = scene_fill(scene, 3);
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
            scene_assert_says(scene, "was removed or replaced under the running daemon");
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
    scene_assert_says(scene, "has not been opened anew");
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
    scene_assert_says(scene, "full");
    assert_int_equal(mount("tmpfs", scene->directory, "tmpfs", MS_REMOUNT, "size=16m"), 0);
    assert_heals(scene, store, &picture, acknowledged);
    store_close(store);
    assert_int_equal(mount("tmpfs", scene->directory, "tmpfs", MS_REMOUNT | MS_RDONLY, "size=16m"), 0);
    assert_int_equal(scene_try_open(scene, STORE_WRITE), FW_IO); /* a file system that may only be read */
    scene_assert_says(scene, "Read-only file system");
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
    scene_path(scene, ".new", path);
    scene_write_file(path, "half", 4);
    scene_path(scene, ".new-journal", path);
    scene_write_file(path, "half", 4);
    scene_write_file(scene->file, "", 0);
    assert_int_equal(scene_try_open(scene, STORE_WRITE), FW_OK);
    assert_false(scene_has_file(scene, ".new") || scene_has_file(scene, ".new-journal"));
}

#define WITH_SCENE(test) cmocka_unit_test_setup_teardown(test, scene_set_up, scene_tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        WITH_SCENE(every_page_that_is_garbled_is_found_moved_aside_and_replaced),
        WITH_SCENE(a_store_cut_short_is_found_and_moved_aside),
        WITH_SCENE(what_is_moved_aside_says_when_and_never_covers_what_is_there),
        WITH_SCENE(a_whole_store_is_never_moved),
        WITH_SCENE(a_log_without_its_store_is_moved_aside),
        WITH_SCENE(words_that_are_none_are_damage),
        WITH_SCENE(a_store_destroyed_under_the_daemon_is_replaced_and_seeded),
        WITH_SCENE(a_file_that_may_not_grow_loses_nothing_acknowledged_and_heals),
        WITH_SCENE(a_full_disk_loses_nothing_acknowledged_and_heals),
        WITH_SCENE(a_killed_daemon_loses_no_acknowledged_commit),
        WITH_SCENE(a_store_that_was_half_made_is_made_anew),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
