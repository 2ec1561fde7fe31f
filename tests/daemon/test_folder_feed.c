/* SPDX-License-Identifier: MIT */
#include "daemon/feed/folder_feed.h"

#include <poll.h>
#include <sys/socket.h>
#include <sys/un.h>

#include "daemon/feed/drop_folder.h"
#include "tests/daemon/feed_bench.h"

#define DROP "drop/orlin-scar/"

struct folder_bench { /* steps through a folder as the daemon does */
    struct bench *bench;
    struct folder_feed *folder;
    int64_t machine_ms, next_look_ms;
};

static struct folder_bench folder_begin(struct bench *bench)
{
    struct folder_bench steps = {.bench = bench, .machine_ms = 1000};
    if (folder_feed_open(&bench->settings, 0, 0, &steps.folder, &bench->error) != FW_OK)
        fail_msg("%s", bench->error.text);
    return steps;
}

static void folder_scan(struct folder_bench *steps)
{
    struct bench *bench = steps->bench;
    if (folder_feed_scan(steps->folder, steps->machine_ms, BENCH_RECEIVED_UTC_S, &bench->news, &steps->next_look_ms,
                         &bench->error) != FW_OK)
        fail_msg("%s", bench->error.text);
}

static void folder_settle(struct folder_bench *steps, bool was_stored)
{
    struct bench *bench = steps->bench;
    if (folder_feed_settle(steps->folder, &bench->news, was_stored, &bench->error) != FW_OK)
        fail_msg("%s", bench->error.text);
    news_clear(&bench->news);
}

/* Scans now and, so that what lies there has settled, 2 s later. */
static void folder_scan_twice(struct folder_bench *steps)
{
    folder_scan(steps);
    steps->machine_ms += 2000;
    folder_scan(steps);
}

static const char ONE_READING[] = "time,stage_m\n2031-02-14T21:15Z,1.60\n";

static void rename_in(struct bench *bench, const char *name, const char *text)
{
    char to[128];
    bench_write(bench, "beside.csv", text);
    snprintf(to, sizeof to, DROP "%s", name);
    assert_int_equal(rename(bench_path(bench, "beside.csv"), bench_path(bench, to)), 0);
}

static void opening_makes_the_folder_with_done_and_bad(void **state)
{
    struct bench *bench = *state;
    struct folder_bench steps = folder_begin(bench);
    assert_true(bench_exists(bench, DROP "done") && bench_exists(bench, DROP "bad"));
    folder_scan(&steps);
    assert_int_equal(steps.next_look_ms, -1);
    assert_true(news_is_empty(&bench->news));
    folder_feed_close(steps.folder);
    folder_feed_close(NULL);
}

static void a_folder_that_cannot_be_made_is_named(void **state)
{
    struct bench *bench = *state;
    struct folder_feed *folder = NULL;
    bench_write(bench, "drop", "a file where the folder should be");
    assert_int_equal(folder_feed_open(&bench->settings, 0, 0, &folder, &bench->error), FW_IO);
    assert_null(folder);
    assert_non_null(strstr(bench->error.text, "/drop/orlin-scar: cannot make the folder"));
    assert_int_equal(unlink(bench_path(bench, "drop")), 0);
    assert_int_equal(mkdir(bench_path(bench, "drop"), 0777), 0);
    bench_write(bench, "drop/orlin-scar", "");
    assert_int_equal(folder_feed_open(&bench->settings, 0, 0, &folder, &bench->error), FW_IO);
    assert_non_null(strstr(bench->error.text, "/drop/orlin-scar: is not a folder"));
}

static void a_file_renamed_in_is_taken_at_once(void **state)
{
    struct bench *bench = *state;
    struct folder_bench steps = folder_begin(bench);
    struct pollfd watch = {.fd = folder_feed_watch_fd(steps.folder), .events = POLLIN};
    if (watch.fd < 0)
        skip(); /* no inotify here: found by rescans, as the next test shows */
    assert_int_equal(poll(&watch, 1, 0), 0);
    rename_in(bench, "x.csv", ONE_READING);
    assert_int_equal(poll(&watch, 1, 1000), 1);
    folder_scan(&steps);
    assert_int_equal(poll(&watch, 1, 0), 0);
    assert_int_equal(bench->news.reading_count, 1);
    assert_int_equal(bench->news.payload_count, 1);
    assert_string_equal(bench->news.payloads[0].bytes, ONE_READING);
    assert_string_equal(bench->news.payloads[0].origin, "drop/orlin-scar/x.csv");
    assert_int_equal(bench->news.note_count, 0);
    assert_int_equal(steps.next_look_ms, -1);
    folder_settle(&steps, true);
    assert_true(bench_exists(bench, DROP "done/x.csv"));
    assert_false(bench_exists(bench, DROP "x.csv") || bench_exists(bench, DROP "done/x.csv.reason"));
    folder_feed_close(steps.folder);
}

static void a_file_written_in_place_is_taken_once_unchanged_for_two_seconds(void **state)
{
    struct bench *bench = *state;
    struct folder_bench steps = folder_begin(bench);
    bench_write(bench, DROP "x.csv", ONE_READING);
    folder_scan(&steps);
    assert_true(news_is_empty(&bench->news));
    assert_int_equal(steps.next_look_ms, 2000);
    steps.machine_ms += 1500;
    folder_scan(&steps);
    assert_int_equal(steps.next_look_ms, 500);
    bench_append(bench, DROP "x.csv", "2031-02-14T21:20Z,1.65\n");
    steps.machine_ms += 500;
    folder_scan(&steps); /* it grew: the two seconds begin again */
    assert_true(news_is_empty(&bench->news));
    assert_int_equal(steps.next_look_ms, 2000);
    steps.machine_ms += 1999;
    folder_scan(&steps);
    assert_true(news_is_empty(&bench->news));
    assert_int_equal(steps.next_look_ms, 1);
    steps.machine_ms += 1;
    folder_scan(&steps);
    assert_int_equal(bench->news.reading_count, 2);
    assert_int_equal(steps.next_look_ms, -1);
    folder_feed_close(steps.folder);
}

static void a_name_ending_in_ready_is_taken_at_once_and_work_in_progress_never(void **state)
{
    struct bench *bench = *state;
    struct folder_bench steps = folder_begin(bench);
    bench_write(bench, DROP "x.csv.ready", ONE_READING);
    bench_write(bench, DROP ".hidden.csv", ONE_READING);
    bench_write(bench, DROP "y.csv.tmp", ONE_READING);
    bench_write(bench, DROP "y.csv.part", ONE_READING);
    assert_int_equal(mkdir(bench_path(bench, DROP "old"), 0777), 0);
    folder_scan(&steps);
    assert_int_equal(bench->news.reading_count, 1);
    folder_settle(&steps, true);
    steps.machine_ms += 100000;
    folder_scan(&steps);
    steps.machine_ms += 100000;
    folder_scan(&steps);
    assert_true(news_is_empty(&bench->news));
    assert_int_equal(bench->news.note_count, 0);
    assert_true(bench_exists(bench, DROP "y.csv.part") && bench_exists(bench, DROP ".hidden.csv"));
    folder_feed_close(steps.folder);
}

static void a_file_is_taken_once_until_it_is_settled(void **state)
{
    struct bench *bench = *state;
    struct folder_bench steps = folder_begin(bench);
    bench_write(bench, DROP "x.csv", ONE_READING);
    folder_scan_twice(&steps);
    assert_int_equal(bench->news.reading_count, 1);
    for (int i = 0; i < 3; i++) {
        steps.machine_ms += 5000;
        folder_scan(&steps);
    }
    assert_int_equal(bench->news.reading_count, 1);
    folder_settle(&steps, true);
    assert_true(bench_exists(bench, DROP "done/x.csv"));
    folder_feed_close(steps.folder);
}

static void a_file_not_stored_stays_and_is_read_again_after_a_restart_not_before(void **state)
{
    struct bench *bench = *state;
    struct folder_bench steps = folder_begin(bench);
    bench_write(bench, DROP "x.csv", ONE_READING);
    folder_scan_twice(&steps);
    folder_settle(&steps, false);
    assert_true(bench_exists(bench, DROP "x.csv"));
    for (int i = 0; i < 3; i++) {
        steps.machine_ms += 5000;
        folder_scan(&steps);
        assert_true(news_is_empty(&bench->news));
    }
    folder_feed_close(steps.folder);
    steps = folder_begin(bench);
    folder_scan_twice(&steps);
    assert_int_equal(bench->news.reading_count, 1);
    folder_settle(&steps, true);
    assert_true(bench_exists(bench, DROP "done/x.csv"));
    folder_feed_close(steps.folder);
}

static void a_file_not_stored_that_is_written_anew_is_read_again(void **state)
{
    struct bench *bench = *state;
    struct folder_bench steps = folder_begin(bench);
    bench_write(bench, DROP "x.csv", ONE_READING);
    folder_scan_twice(&steps);
    folder_settle(&steps, false);
    rename_in(bench, "x.csv", "time,stage_m\n2031-02-14T21:30Z,1.77\n");
    folder_scan_twice(&steps);
    assert_int_equal(bench->news.reading_count, 1);
    assert_true(bench->news.readings[0].value == 1.77);
    folder_feed_close(steps.folder);
}

/* A logger that always writes the same name may write the next file between our reading and our settling. */
static void a_file_that_came_after_the_reading_is_never_moved_away_unread(void **state)
{
    struct bench *bench = *state;
    struct folder_bench steps = folder_begin(bench);
    rename_in(bench, "x.csv", ONE_READING);
    folder_scan_twice(&steps);
    assert_int_equal(bench->news.reading_count, 1);
    rename_in(bench, "x.csv", "time,stage_m\n2031-02-14T21:30Z,1.77\n");
    folder_settle(&steps, true);
    assert_true(bench_exists(bench, DROP "x.csv"));
    folder_scan_twice(&steps);
    assert_int_equal(bench->news.reading_count, 1);
    assert_true(bench->news.readings[0].value == 1.77);
    folder_settle(&steps, true);
    assert_true(bench_exists(bench, DROP "done/x.csv"));
    assert_false(bench_exists(bench, DROP "x.csv"));
    folder_feed_close(steps.folder);
}

static void equal_names_in_done_get_a_number(void **state)
{
    struct bench *bench = *state;
    struct folder_bench steps = folder_begin(bench);
    for (int i = 0; i < 12; i++) {
        rename_in(bench, "latest.csv", ONE_READING);
        folder_scan_twice(&steps);
        assert_int_equal(bench->news.reading_count, 1);
        folder_settle(&steps, true);
    }
    assert_int_equal(bench_count_files(bench, DROP "done"), 12);
    assert_true(bench_exists(bench, DROP "done/latest.csv") && bench_exists(bench, DROP "done/latest.csv.11"));
    folder_feed_close(steps.folder);
}

static void a_file_with_a_good_line_goes_to_done_and_one_without_to_bad_each_with_its_reason(void **state)
{
    struct bench *bench = *state;
    struct folder_bench steps = folder_begin(bench);
    bench_write(bench, DROP "mixed.csv", "time,stage_m\n2031-02-14T21:15Z,1.60\n2031-02-14T21:20Z,\"1,23\"\n");
    bench_write(bench, DROP "none.csv", "time,stage_m\n2031-02-14T21:20Z,\"1,24\"\n");
    bench_write(bench, DROP "empty.csv", "");
    folder_scan_twice(&steps);
    assert_int_equal(bench->news.reading_count, 1);
    bench_expect_note(&bench->news,
                      "drop/orlin-scar/mixed.csv:3: stage_m: '1,23' is not a number with a decimal point");
    bench_expect_note(&bench->news, "drop/orlin-scar/none.csv: none of 1 lines could be read");
    bench_expect_note(&bench->news, "drop/orlin-scar/empty.csv: is empty; expected a header line; moved to bad");
    folder_settle(&steps, true);
    assert_true(bench_exists(bench, DROP "done/mixed.csv") && bench_exists(bench, DROP "bad/none.csv"));
    assert_non_null(strstr(bench_text(bench, DROP "done/mixed.csv.reason", NULL), "mixed.csv:3: stage_m: '1,23'"));
    assert_non_null(strstr(bench_text(bench, DROP "bad/none.csv.reason", NULL), "none.csv:2: stage_m: '1,24'"));
    assert_non_null(strstr(bench_text(bench, DROP "bad/empty.csv.reason", NULL), "is empty"));
    folder_feed_close(steps.folder);
}

static void make_socket(const char *path)
{
    struct sockaddr_un address = {.sun_family = AF_UNIX};
    int fd = socket(AF_UNIX, SOCK_STREAM, 0);
    snprintf(address.sun_path, sizeof address.sun_path, "%s", path);
    assert_int_equal(bind(fd, (const struct sockaddr *)&address, sizeof address), 0);
    close(fd);
}

static void only_regular_files_are_opened(void **state)
{
    struct bench *bench = *state;
    struct folder_bench steps = folder_begin(bench);
    bench_write(bench, "secret", ONE_READING);
    assert_int_equal(symlink(bench_path(bench, "secret"), bench_path(bench, DROP "link.csv")), 0);
    assert_int_equal(symlink("/etc/shadow", bench_path(bench, DROP "shadow.csv.ready")), 0);
    assert_int_equal(mkfifo(bench_path(bench, DROP "pipe.csv"), 0666), 0);
    make_socket(bench_path(bench, DROP "socket.csv"));
    bool has_device =
        mknod(bench_path(bench, DROP "device.csv"), S_IFCHR | 0666, (dev_t)(5 << 8)) == 0; /* /dev/tty */
    assert_int_equal(mkdir(bench_path(bench, DROP "folder.csv"), 0777), 0);
    folder_scan_twice(&steps);
    assert_int_equal(bench->news.reading_count, 0);
    bench_expect_note(&bench->news,
                      "drop/orlin-scar/link.csv: is a symbolic link; expected a regular file; moved to bad");
    bench_expect_note(&bench->news, "shadow.csv.ready: is a symbolic link");
    bench_expect_note(&bench->news, "pipe.csv: is a pipe");
    bench_expect_note(&bench->news, "socket.csv: is a socket");
    bench_expect_note(&bench->news, "folder.csv: is a folder; expected a regular file; left where it is");
    if (has_device)
        bench_expect_note(&bench->news, "device.csv: is a device");
    folder_settle(&steps, true);
    assert_true(bench_exists(bench, DROP "bad/link.csv") && bench_exists(bench, DROP "bad/pipe.csv"));
    assert_true(bench_exists(bench, DROP "bad/link.csv.reason") && bench_exists(bench, DROP "folder.csv"));
    bench_write(bench, DROP "folder.csv/x.csv", ONE_READING); /* changes the folder: still said only once */
    folder_scan_twice(&steps);
    assert_int_equal(bench->news.note_count, 0);
    folder_feed_close(steps.folder);
}

static void a_file_that_may_not_be_read_is_said_once_and_read_once_it_may(void **state)
{
    struct bench *bench = *state;
    bool was_root = geteuid() == 0; /* root reads everything: as nobody, then */
    if (was_root)
        assert_true(chown(bench->folder, 65534, 65534) == 0 && seteuid(65534) == 0);
    struct folder_bench steps = folder_begin(bench);
    bench_write(bench, DROP "x.csv", ONE_READING);
    assert_int_equal(chmod(bench_path(bench, DROP "x.csv"), 0), 0);
    folder_scan_twice(&steps);
    bench_expect_note(&bench->news, "x.csv: cannot be opened: Permission denied; left where it is");
    folder_settle(&steps, true);
    folder_scan_twice(&steps);
    assert_int_equal(bench->news.note_count, 0);
    assert_int_equal(chmod(bench_path(bench, DROP "x.csv"), 0644), 0);
    folder_scan_twice(&steps);
    folder_feed_close(steps.folder);
    assert_int_equal(was_root ? seteuid(0) : 0, 0);
    assert_int_equal(bench->news.reading_count, 1);
}

static void a_file_beyond_eight_mebibytes_is_refused_unread(void **state)
{
    struct bench *bench = *state;
    struct folder_bench steps = folder_begin(bench);
    bench_write(bench, DROP "huge.csv", ONE_READING);
    assert_int_equal(truncate(bench_path(bench, DROP "huge.csv"), (off_t)1 << 30), 0); /* 1 GiB, sparse */
    bench_write(bench, DROP "over.csv", "");
    assert_int_equal(truncate(bench_path(bench, DROP "over.csv"), 8 * 1024 * 1024 + 1), 0);
    bench_write(bench, DROP "just.csv", "");
    assert_int_equal(truncate(bench_path(bench, DROP "just.csv"), 8 * 1024 * 1024), 0);
    folder_scan_twice(&steps);
    bench_expect_note(&bench->news, "huge.csv: has 1073741824 bytes; expected at most 8388608; moved to bad");
    bench_expect_note(&bench->news, "over.csv: has 8388609 bytes; expected at most 8388608");
    bench_expect_note(&bench->news, "just.csv: has a zero byte: binary");
    folder_settle(&steps, true);
    assert_true(bench_exists(bench, DROP "bad/huge.csv"));
    folder_feed_close(steps.folder);
}

static void raw_bytes_beyond_their_limit_are_not_kept_and_that_is_said(void **state)
{
    struct bench *bench = *state;
    struct folder_bench steps = folder_begin(bench);
    struct text text = {0};
    text_add(&text, "%s", ONE_READING);
    while (text.length <= 256 * 1024)
        text_add(&text, "2031-02-14T21:15Z,1.60\n");
    bench_write(bench, DROP "long.csv", text.bytes);
    text_clear(&text);
    folder_scan_twice(&steps);
    assert_true(bench->news.reading_count > 1000);
    assert_int_equal(bench->news.payload_count, 0);
    bench_expect_note(&bench->news, "the store keeps the raw bytes of files up to 262144");
    assert_false(bench->news.notes[0].is_fault);
    folder_feed_close(steps.folder);
}

static void names_are_made_fit_to_print(void **state)
{
    struct bench *bench = *state;
    struct folder_bench steps = folder_begin(bench);
    bench_write(bench, DROP "a\nb\x1b\xff.csv", "");
    folder_scan_twice(&steps);
    bench_expect_note(&bench->news, "drop/orlin-scar/a?b??.csv: is empty");
    folder_settle(&steps, true);
    assert_true(bench_exists(bench, DROP "bad/a\nb\x1b\xff.csv"));
    folder_feed_close(steps.folder);
}

static void a_scan_is_bounded_and_the_backlog_is_worked_off(void **state)
{
    struct bench *bench = *state;
    struct folder_bench steps = folder_begin(bench);
    enum { FILE_COUNT = 1203 };
    for (int i = 0; i < FILE_COUNT; i++) {
        char name[64];
        snprintf(name, sizeof name, DROP "%04d.csv.ready", i);
        bench_write(bench, name, ONE_READING);
    }
    size_t taken = 0;
    for (int scan = 0; scan < 40 && taken < FILE_COUNT; scan++) {
        folder_scan(&steps);
        assert_in_range(bench->news.receipt_count, 1, DROP_FILES_A_SCAN);
        taken += bench->news.receipt_count;
        if (taken < FILE_COUNT)
            assert_int_equal(steps.next_look_ms, 0);
        folder_settle(&steps, true);
    }
    assert_int_equal(taken, FILE_COUNT);
    assert_int_equal(bench_count_files(bench, DROP "done"), FILE_COUNT);
    folder_feed_close(steps.folder);
}

static void a_folder_full_of_unsettled_files_is_told_and_still_takes_what_is_renamed_in(void **state)
{
    struct bench *bench = *state;
    struct folder_bench steps = folder_begin(bench);
    bench_write(bench, "beside", "");
    for (int i = 0; i < DROP_REMEMBERED + 10; i++) { /* many names of one empty file: cheap to make */
        char name[64];
        snprintf(name, sizeof name, DROP "%05d.ready", i);
        assert_int_equal(link(bench_path(bench, "beside"), bench_path(bench, name)), 0);
    }
    size_t told = 0;
    for (int scan = 0; scan < 1000 && !bench_has_note(&bench->news, "files lie there"); scan++) {
        news_clear(&bench->news);
        folder_scan(&steps);
        told += bench->news.note_count;
    }
    assert_int_equal(told, DROP_REMEMBERED + 1);
    bench_expect_note(&bench->news,
                      "drop/orlin-scar: 8192 files lie there that cannot be taken; others are taken only "
                      "when renamed in");
    news_clear(&bench->news);
    rename_in(bench, "x.csv", ONE_READING);
    folder_scan(&steps);
    assert_int_equal(bench->news.note_count, 0);
    if (folder_feed_watch_fd(steps.folder) >= 0)
        assert_int_equal(bench->news.reading_count, 1);
    folder_settle(&steps, true);
    folder_feed_close(steps.folder);
}

static void a_folder_that_was_removed_is_made_again(void **state)
{
    struct bench *bench = *state;
    struct folder_bench steps = folder_begin(bench);
    folder_scan(&steps);
    assert_int_equal(rename(bench_path(bench, "drop"), bench_path(bench, "away")), 0);
    folder_scan(&steps);
    assert_true(bench_exists(bench, DROP "done"));
    rename_in(bench, "x.csv", ONE_READING);
    folder_scan(&steps);
    if (folder_feed_watch_fd(steps.folder) >= 0)
        assert_int_equal(bench->news.reading_count, 1);
    folder_feed_close(steps.folder);
}

static void a_folder_that_cannot_be_read_any_more_is_a_fault_until_it_can(void **state)
{
    struct bench *bench = *state;
    struct folder_bench steps = folder_begin(bench);
    assert_int_equal(rename(bench_path(bench, "drop"), bench_path(bench, "away")), 0);
    bench_write(bench, "drop", "a file in its place");
    for (int i = 0; i < 2; i++) {
        assert_int_equal(
            folder_feed_scan(steps.folder, steps.machine_ms, 0, &bench->news, &steps.next_look_ms, &bench->error),
            FW_IO);
        assert_non_null(strstr(bench->error.text, "/drop/orlin-scar"));
    }
    assert_int_equal(unlink(bench_path(bench, "drop")), 0);
    assert_int_equal(rename(bench_path(bench, "away"), bench_path(bench, "drop")), 0);
    bench_write(bench, DROP "x.csv", ONE_READING);
    folder_scan_twice(&steps);
    assert_int_equal(bench->news.reading_count, 1);
    folder_feed_close(steps.folder);
}

static void a_file_that_cannot_be_moved_is_reported_and_not_read_again(void **state)
{
    struct bench *bench = *state;
    struct folder_bench steps = folder_begin(bench);
    bench_write(bench, DROP "x.csv", ONE_READING);
    bench_write(bench, DROP "y.csv", "");
    folder_scan_twice(&steps);
    /* done/ vanishes: nothing can be moved into it; y.csv still reaches bad/ */
    assert_int_equal(rmdir(bench_path(bench, DROP "done")), 0);
    assert_int_equal(folder_feed_settle(steps.folder, &bench->news, true, &bench->error), FW_IO);
    assert_non_null(strstr(bench->error.text, "x.csv: cannot be moved to"));
    news_clear(&bench->news);
    assert_true(bench_exists(bench, DROP "x.csv") && bench_exists(bench, DROP "bad/y.csv"));
    folder_scan_twice(&steps);
    assert_true(news_is_empty(&bench->news));
    assert_true(bench_exists(bench, DROP "done"));
    folder_feed_close(steps.folder);
}

static void a_file_that_somebody_took_away_is_settled_without_a_word(void **state)
{
    struct bench *bench = *state;
    struct folder_bench steps = folder_begin(bench);
    bench_write(bench, DROP "x.csv", ONE_READING);
    folder_scan_twice(&steps);
    assert_int_equal(unlink(bench_path(bench, DROP "x.csv")), 0);
    folder_settle(&steps, true);
    bench_write(bench, DROP "x.csv", ONE_READING);
    folder_scan_twice(&steps);
    assert_int_equal(bench->news.reading_count, 1);
    folder_feed_close(steps.folder);
}

static void receipts_of_others_are_left_alone(void **state)
{
    struct bench *bench = *state;
    struct folder_bench steps = folder_begin(bench);
    bench_write(bench, DROP "x.csv", ONE_READING);
    assert_int_equal(news_add_receipt(&bench->news, bench_path(bench, DROP "x.csv"),
                                      bench_path(bench, DROP "done/x.csv"), NULL, bench, 0),
                     FW_OK);
    folder_settle(&steps, true);
    assert_true(bench_exists(bench, DROP "x.csv"));
    folder_feed_close(steps.folder);
}

/* Each allocation of a scan fails in turn: FW_NO_MEMORY, and once there is memory again every file is taken. */
static void without_memory_no_file_is_lost(void **state)
{
    struct bench *bench = *state;
    long fail_at = 1;
    bool has_failed = true;
    if (!bench_fail_allocation_at(-1))
        skip();
    for (; has_failed; fail_at++) {
        struct folder_bench steps = folder_begin(bench);
        bench_write(bench, DROP "x.csv.ready", "time,stage_m\n2031-02-14T21:15Z,1.60\n2031-02-14T21:15Z,bad\n");
        bench_write(bench, DROP "y.csv.ready", "");
        bench_fail_allocation_at(fail_at);
        enum fw_status status = folder_feed_scan(steps.folder, steps.machine_ms, BENCH_RECEIVED_UTC_S, &bench->news,
                                                 &steps.next_look_ms, &bench->error);
        has_failed = bench_allocations_succeed();
        assert_true(status == FW_OK || (has_failed && status == FW_NO_MEMORY));
        if (status == FW_NO_MEMORY)
            folder_scan(&steps);
        if (bench->news.reading_count < 1 || bench->news.receipt_count != 2)
            fail_msg("allocation %ld: status %d, %zu readings, %zu receipts", fail_at, (int)status,
                     bench->news.reading_count, bench->news.receipt_count);
        folder_settle(&steps, true);
        assert_false(bench_exists(bench, DROP "x.csv.ready") || bench_exists(bench, DROP "y.csv.ready"));
        folder_feed_close(steps.folder);
    }
    assert_true(fail_at > 10);
}

static void without_memory_a_folder_is_not_opened(void **state)
{
    struct bench *bench = *state;
    struct folder_feed *folder = NULL;
    long fail_at = 1;
    bench->feeds[0].append_file = "log.csv";
    if (!bench_fail_allocation_at(-1))
        skip();
    for (enum fw_status status = FW_NO_MEMORY; status != FW_OK; fail_at++) {
        bench_fail_allocation_at(fail_at);
        status = folder_feed_open(&bench->settings, 0, 0, &folder, &bench->error);
        bench_allocations_succeed();
        assert_true(status == FW_OK || (status == FW_NO_MEMORY && folder == NULL));
    }
    assert_true(fail_at > 5);
    folder_feed_close(folder);
}

#define WITH_BENCH(test) cmocka_unit_test_setup_teardown(test, bench_set_up, bench_tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        WITH_BENCH(opening_makes_the_folder_with_done_and_bad),
        WITH_BENCH(a_folder_that_cannot_be_made_is_named),
        WITH_BENCH(a_file_renamed_in_is_taken_at_once),
        WITH_BENCH(a_file_written_in_place_is_taken_once_unchanged_for_two_seconds),
        WITH_BENCH(a_name_ending_in_ready_is_taken_at_once_and_work_in_progress_never),
        WITH_BENCH(a_file_is_taken_once_until_it_is_settled),
        WITH_BENCH(a_file_not_stored_stays_and_is_read_again_after_a_restart_not_before),
        WITH_BENCH(a_file_not_stored_that_is_written_anew_is_read_again),
        WITH_BENCH(a_file_that_came_after_the_reading_is_never_moved_away_unread),
        WITH_BENCH(equal_names_in_done_get_a_number),
        WITH_BENCH(a_file_with_a_good_line_goes_to_done_and_one_without_to_bad_each_with_its_reason),
        WITH_BENCH(only_regular_files_are_opened),
        WITH_BENCH(a_file_that_may_not_be_read_is_said_once_and_read_once_it_may),
        WITH_BENCH(a_file_beyond_eight_mebibytes_is_refused_unread),
        WITH_BENCH(raw_bytes_beyond_their_limit_are_not_kept_and_that_is_said),
        WITH_BENCH(names_are_made_fit_to_print),
        WITH_BENCH(a_scan_is_bounded_and_the_backlog_is_worked_off),
        WITH_BENCH(a_folder_full_of_unsettled_files_is_told_and_still_takes_what_is_renamed_in),
        WITH_BENCH(a_folder_that_was_removed_is_made_again),
        WITH_BENCH(a_folder_that_cannot_be_read_any_more_is_a_fault_until_it_can),
        WITH_BENCH(a_file_that_cannot_be_moved_is_reported_and_not_read_again),
        WITH_BENCH(a_file_that_somebody_took_away_is_settled_without_a_word),
        WITH_BENCH(receipts_of_others_are_left_alone),
        WITH_BENCH(without_memory_no_file_is_lost),
        WITH_BENCH(without_memory_a_folder_is_not_opened),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
