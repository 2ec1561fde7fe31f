/* SPDX-License-Identifier: MIT */
#include "daemon/feed/append_file.h"

#include <math.h>

#include "daemon/feed/folder_feed.h"
#include "tests/daemon/feed_bench.h"

#define DROP "drop/orlin-scar/"
#define LOG DROP "logger.csv"
#define PLACE DROP ".logger.csv.position"

struct log_bench {
    struct bench *bench;
    struct folder_feed *folder;
    int64_t machine_ms, next_look_ms;
};

static void log_open(struct log_bench *steps)
{
    if (folder_feed_open(&steps->bench->settings, 0, 0, &steps->folder, &steps->bench->error) != FW_OK)
        fail_msg("%s", steps->bench->error.text);
}

static struct log_bench log_begin(struct bench *bench)
{
    struct log_bench steps = {.bench = bench, .machine_ms = 1000};
    bench->feeds[0].append_file = "logger.csv";
    log_open(&steps);
    return steps;
}

/* Scans; how many readings that gave, and the last of them. */
static size_t log_scan(struct log_bench *steps, double *last_out)
{
    struct bench *bench = steps->bench;
    size_t before = bench->news.reading_count;
    steps->machine_ms += 10;
    if (folder_feed_scan(steps->folder, steps->machine_ms, BENCH_RECEIVED_UTC_S, &bench->news, &steps->next_look_ms,
                         &bench->error) != FW_OK)
        fail_msg("%s", bench->error.text);
    if (last_out != NULL && bench->news.reading_count > before)
        *last_out = bench->news.readings[bench->news.reading_count - 1].value;
    return bench->news.reading_count - before;
}

static void log_settle(struct log_bench *steps, bool was_stored)
{
    if (folder_feed_settle(steps->folder, &steps->bench->news, was_stored, &steps->bench->error) != FW_OK)
        fail_msg("%s", steps->bench->error.text);
    news_clear(&steps->bench->news);
}

static void log_restart(struct log_bench *steps)
{
    folder_feed_close(steps->folder);
    news_clear(&steps->bench->news);
    log_open(steps);
}

static void lines_are_taken_as_they_are_appended_and_only_whole_ones(void **state)
{
    struct bench *bench = *state;
    struct log_bench steps = log_begin(bench);
    double last = 0.0;
    assert_int_equal(log_scan(&steps, NULL), 0); /* no file yet: no fault */
    bench_append(bench, LOG, "time,sta");
    assert_int_equal(log_scan(&steps, NULL), 0);
    bench_append(bench, LOG, "ge_m\n");
    assert_int_equal(log_scan(&steps, NULL), 0);
    bench_append(bench, LOG, "2031-02-14T21:15Z,1.60\n2031-02-14T21:20Z,1.6");
    assert_int_equal(log_scan(&steps, &last), 1);
    assert_true(last == 1.60);
    assert_int_equal(bench->news.payload_count, 1);
    assert_string_equal(bench->news.payloads[0].bytes, "2031-02-14T21:15Z,1.60\n");
    assert_int_equal(log_scan(&steps, NULL), 0);
    bench_append(bench, LOG, "5\n");
    assert_int_equal(log_scan(&steps, &last), 1);
    assert_true(last == 1.65);
    assert_int_equal(log_scan(&steps, NULL), 0);
    assert_int_equal(bench->news.note_count, 0);
    assert_true(bench_exists(bench, LOG));
    folder_feed_close(steps.folder);
}

static void the_place_is_kept_only_once_stored(void **state)
{
    struct bench *bench = *state;
    struct log_bench steps = log_begin(bench);
    double last = 0.0;
    bench_write(bench, LOG, "time,stage_m\r\n2031-02-14T21:15Z,1.60\r\n");
    assert_int_equal(log_scan(&steps, NULL), 1);
    assert_false(bench_exists(bench, PLACE));
    log_restart(&steps); /* died before the commit: read again */
    assert_int_equal(log_scan(&steps, NULL), 1);
    assert_int_equal(bench->news.receipts[0].position, 38);
    assert_null(bench->news.receipts[0].to);
    log_settle(&steps, true);
    assert_true(bench_exists(bench, PLACE));
    log_restart(&steps);
    assert_int_equal(log_scan(&steps, NULL), 0);
    bench_append(bench, LOG, "2031-02-14T21:20Z,1.65\r\n2031-02-14T21:25Z,x\r\n");
    assert_int_equal(log_scan(&steps, &last), 1);
    assert_true(last == 1.65);
    bench_expect_note(&bench->news,
                      "drop/orlin-scar/logger.csv:4: stage_m: 'x'"); /* lines are counted over restarts */
    folder_feed_close(steps.folder);
}

static void what_was_not_stored_is_read_again_after_a_restart_with_all_that_came_after(void **state)
{
    struct bench *bench = *state;
    struct log_bench steps = log_begin(bench);
    bench_write(bench, LOG, "time,stage_m\n2031-02-14T21:15Z,1.60\n");
    assert_int_equal(log_scan(&steps, NULL), 1);
    log_settle(&steps, true);
    bench_append(bench, LOG, "2031-02-14T21:20Z,1.65\n");
    assert_int_equal(log_scan(&steps, NULL), 1);
    log_settle(&steps, false);
    assert_int_equal(log_scan(&steps, NULL), 0); /* not before a restart */
    bench_append(bench, LOG, "2031-02-14T21:25Z,1.71\n");
    assert_int_equal(log_scan(&steps, NULL), 1);
    log_settle(&steps, true); /* the store heals; the place must not jump over the lost line */
    log_restart(&steps);
    assert_int_equal(log_scan(&steps, NULL), 2);
    folder_feed_close(steps.folder);
}

static void another_file_or_a_shorter_one_is_read_from_its_start(void **state)
{
    struct bench *bench = *state;
    static const struct {
        const char *shows, *text;
        bool renames;
    } cases[] = {
        {"rotated: renamed over", "time,stage_m\n2031-02-14T21:30Z,1.77\n", true},
        {"rotated by a longer file",
         "time,stage_m\n2031-02-14T21:30Z,1.77\n2031-02-14T21:35Z,1.84\n2031-02-14T21:40Z,1.9\n", true},
        {"cut to nothing and begun anew", "time,stage_m\n2031-02-14T21:30Z,1.77\n", false},
        {"cut, and grown past the old place",
         "time,stage_m\n2031-02-14T21:30Z,1.77\n2031-02-14T21:35Z,1.84\n2031-02-14T21:40Z,1.9\n", false},
        {"with other columns", "station;stage_m;time\nscar;1.77;2031-02-14T21:30Z\nscar;1.84;2031-02-14T21:35Z\n",
         false},
    };
    for (size_t i = 0; i < sizeof cases / sizeof cases[0]; i++) {
        struct log_bench steps = log_begin(bench);
        bench_write(bench, LOG, "time,stage_m\n2031-02-14T21:15Z,1.60\n2031-02-14T21:20Z,1.65\n");
        assert_int_equal(log_scan(&steps, NULL), 2);
        log_settle(&steps, true);
        if (cases[i].renames) {
            bench_write(bench, "beside", cases[i].text);
            assert_int_equal(rename(bench_path(bench, "beside"), bench_path(bench, LOG)), 0);
        } else {
            bench_write(bench, LOG, cases[i].text); /* the same file, cut by opening it */
        }
        size_t expected = 0;
        for (const char *at = cases[i].text; (at = strchr(at, '\n')) != NULL; at++)
            expected++;
        if (log_scan(&steps, NULL) != expected - 1)
            fail_msg("%s: not %zu readings", cases[i].shows, expected - 1);
        bench_expect_note(&bench->news,
                          "logger.csv: is another file than before, or was cut: read from its first line");
        assert_false(bench->news.notes[0].is_fault);
        log_settle(&steps, true);
        assert_int_equal(log_scan(&steps, NULL), 0);
        assert_int_equal(bench->news.note_count, 0);
        folder_feed_close(steps.folder);
        unlink(bench_path(bench, LOG));
        unlink(bench_path(bench, PLACE));
    }
}

static void a_rotated_file_that_stays_in_the_folder_is_taken_whole(void **state)
{
    struct bench *bench = *state;
    struct log_bench steps = log_begin(bench);
    bench_write(bench, LOG, "time,stage_m\n2031-02-14T21:15Z,1.60\n");
    assert_int_equal(log_scan(&steps, NULL), 1);
    log_settle(&steps, true);
    bench_append(bench, LOG, "2031-02-14T21:20Z,1.65\n"); /* not read yet when the logger rotates */
    assert_int_equal(rename(bench_path(bench, LOG), bench_path(bench, DROP "logger.csv.1")), 0);
    bench_write(bench, LOG, "time,stage_m\n2031-02-14T21:25Z,1.71\n");
    size_t count = log_scan(&steps, NULL);
    steps.machine_ms += 2000;
    count += log_scan(&steps, NULL);
    assert_int_equal(count, 3); /* 1.60 twice: harmless; 1.65 not lost */
    log_settle(&steps, true);
    assert_true(bench_exists(bench, DROP "done/logger.csv.1") && bench_exists(bench, LOG));
    folder_feed_close(steps.folder);
}

static void a_kept_place_that_cannot_be_read_means_from_the_start(void **state)
{
    struct bench *bench = *state;
    static const char *const places[] = {
        "", "rubbish\n", "12\n", "-5 1 1 1\n", "99999999999999999999999 1 1 1\n", "35 1 2 3\n", "35 1 2 3 4\n"};
    for (size_t i = 0; i < sizeof places / sizeof places[0]; i++) {
        struct log_bench steps = log_begin(bench);
        bench_write(bench, LOG, "time,stage_m\n2031-02-14T21:15Z,1.60\n");
        bench_write(bench, PLACE, places[i]);
        assert_int_equal(log_scan(&steps, NULL), 1);
        folder_feed_close(steps.folder);
        news_clear(&bench->news);
    }
}

static void a_header_that_cannot_be_read_is_said_once_and_nothing_is_passed_over(void **state)
{
    struct bench *bench = *state;
    struct log_bench steps = log_begin(bench);
    bench_write(bench, LOG, "time,level\n2031-02-14T21:15Z,1.60\n");
    assert_int_equal(log_scan(&steps, NULL), 0);
    assert_int_equal(log_scan(&steps, NULL), 0);
    assert_int_equal(bench->news.note_count, 1);
    bench_expect_note(&bench->news,
                      "drop/orlin-scar/logger.csv: no column 'stage_m' in the header line 'time,level'");
    bench_write(bench, LOG, "time,stage_m\n2031-02-14T21:15Z,1.60\n");
    assert_int_equal(log_scan(&steps, NULL), 1);
    folder_feed_close(steps.folder);
}

static void a_header_without_an_end_is_waited_for_up_to_a_limit(void **state)
{
    struct bench *bench = *state;
    struct log_bench steps = log_begin(bench);
    char header[4098];
    memset(header, 'x', sizeof header);
    header[4096] = '\0';
    bench_write(bench, LOG, header);
    assert_int_equal(log_scan(&steps, NULL), 0);
    assert_int_equal(bench->news.note_count, 0);
    bench_append(bench, LOG, "xx");
    assert_int_equal(log_scan(&steps, NULL), 0);
    bench_expect_note(&bench->news, "the header line has more than 4096 bytes");
    folder_feed_close(steps.folder);
}

static void a_link_in_its_place_is_refused_once(void **state)
{
    struct bench *bench = *state;
    struct log_bench steps = log_begin(bench);
    bench_write(bench, "elsewhere.csv", "time,stage_m\n2031-02-14T21:15Z,1.60\n");
    assert_int_equal(symlink(bench_path(bench, "elsewhere.csv"), bench_path(bench, LOG)), 0);
    assert_int_equal(log_scan(&steps, NULL), 0);
    assert_int_equal(log_scan(&steps, NULL), 0);
    assert_int_equal(bench->news.note_count, 1);
    bench_expect_note(&bench->news, "logger.csv: is a symbolic link; expected a regular file");
    assert_true(bench_exists(bench, LOG));
    folder_feed_close(steps.folder);
}

/* After a power cut a logger's file may hold a run of zero bytes. */
static void zero_bytes_cost_only_their_line(void **state)
{
    struct bench *bench = *state;
    struct log_bench steps = log_begin(bench);
    static const char torn[] = "time,stage_m\n2031-02-14T21:15Z,1.60\n\0\0\0\0\0\0\n2031-02-14T21:20Z,1.65\n";
    bench_write_bytes(bench, LOG, torn, sizeof torn - 1);
    assert_int_equal(log_scan(&steps, NULL), 2);
    bench_expect_note(&bench->news, "logger.csv:3: has a zero byte; expected text");
    folder_feed_close(steps.folder);
}

static void a_long_log_is_read_piece_by_piece_without_losing_or_doubling_a_line(void **state)
{
    struct bench *bench = *state;
    struct log_bench steps = log_begin(bench);
    struct text text = {0};
    enum { LINE_COUNT = 40000 };
    text_add(&text, "time,stage_m\n");
    for (int i = 0; i < LINE_COUNT; i++) /* one a minute, whole minutes from the first on */
        text_add(&text, "%04d-02-%02dT%02d:%02dZ,%d.%03d\n", 2031 + i / 1440 / 28, i / 1440 % 28 + 1, i / 60 % 24,
                 i % 60, i / 1000, i % 1000);
    bench_write_bytes(bench, LOG, text.bytes, text.length);
    int scans = 0;
    do {
        log_scan(&steps, NULL);
        scans++;
    } while (steps.next_look_ms == 0 && scans < 100);
    assert_true(scans > 2);
    assert_int_equal(bench->news.reading_count, LINE_COUNT);
    for (int i = 0; i < LINE_COUNT; i++)
        assert_int_equal(lround(bench->news.readings[i].value * 1000), i);
    assert_int_equal(bench->news.note_count, 0);
    text_clear(&text);
    folder_feed_close(steps.folder);
}

static void a_line_longer_than_a_piece_is_passed_over_and_never_read_from_its_middle(void **state)
{
    struct bench *bench = *state;
    struct log_bench steps = log_begin(bench);
    struct text text = {0};
    double last = 0.0;
    text_add(&text, "time,stage_m\n2031-02-14T21:15Z,1.60\n");
    while (text.length < 600 * 1024)
        text_add(&text, "junk without an end ");
    text_add(&text, "2031-02-14T21:20Z,9.99"); /* looks like a reading where a piece may begin */
    bench_write_bytes(bench, LOG, text.bytes, text.length);
    size_t count = 0;
    for (int i = 0; i < 6; i++)
        count += log_scan(&steps, &last);
    assert_int_equal(count, 1);
    assert_int_equal(bench->news.note_count, 1);
    bench_expect_note(&bench->news, "logger.csv:3: a line longer than 4096 bytes is passed over");
    log_settle(&steps, true);
    log_restart(&steps); /* within the line */
    bench_append(bench, LOG, "\n2031-02-14T21:25Z,1.71\n");
    count = 0;
    for (int i = 0; i < 6; i++)
        count += log_scan(&steps, &last);
    assert_int_equal(count, 1);
    assert_true(last == 1.71);
    assert_int_equal(bench->news.note_count, 0);
    text_clear(&text);
    folder_feed_close(steps.folder);
}

static void a_place_that_cannot_be_written_is_a_fault(void **state)
{
    struct bench *bench = *state;
    struct log_bench steps = log_begin(bench);
    bench_write(bench, LOG, "time,stage_m\n2031-02-14T21:15Z,1.60\n");
    assert_int_equal(log_scan(&steps, NULL), 1);
    assert_int_equal(mkdir(bench_path(bench, PLACE), 0777), 0);
    assert_int_equal(folder_feed_settle(steps.folder, &bench->news, true, &bench->error), FW_IO);
    assert_non_null(strstr(bench->error.text, "logger.csv: ..logger.csv.position.tmp: cannot be renamed"));
    assert_false(bench_exists(bench, DROP "..logger.csv.position.tmp"));
    folder_feed_close(steps.folder);
}

static void without_memory_the_place_does_not_move(void **state)
{
    struct bench *bench = *state;
    bool has_failed = true;
    long fail_at = 1;
    if (!bench_fail_allocation_at(-1))
        skip();
    for (; has_failed; fail_at++) {
        struct log_bench steps = log_begin(bench);
        bench_write(bench, LOG, "time,stage_m\n2031-02-14T21:15Z,1.60\n2031-02-14T21:20Z,1.65\n");
        bench_fail_allocation_at(fail_at);
        enum fw_status status =
            folder_feed_scan(steps.folder, 0, 0, &bench->news, &steps.next_look_ms, &bench->error);
        has_failed = bench_allocations_succeed();
        assert_true(status == FW_OK || (has_failed && status == FW_NO_MEMORY));
        if (status == FW_NO_MEMORY)
            log_scan(&steps, NULL);
        assert_in_range(bench->news.reading_count, 2, 4); /* a line twice is harmless, a line missing is not */
        assert_true(bench->news.readings[bench->news.reading_count - 1].value == 1.65);
        assert_int_equal(bench->news.receipt_count, 1);
        news_clear(&bench->news);
        folder_feed_close(steps.folder);
    }
    assert_true(fail_at > 5);
}

#define WITH_BENCH(test) cmocka_unit_test_setup_teardown(test, bench_set_up, bench_tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        WITH_BENCH(lines_are_taken_as_they_are_appended_and_only_whole_ones),
        WITH_BENCH(the_place_is_kept_only_once_stored),
        WITH_BENCH(what_was_not_stored_is_read_again_after_a_restart_with_all_that_came_after),
        WITH_BENCH(another_file_or_a_shorter_one_is_read_from_its_start),
        WITH_BENCH(a_rotated_file_that_stays_in_the_folder_is_taken_whole),
        WITH_BENCH(a_kept_place_that_cannot_be_read_means_from_the_start),
        WITH_BENCH(a_header_that_cannot_be_read_is_said_once_and_nothing_is_passed_over),
        WITH_BENCH(a_header_without_an_end_is_waited_for_up_to_a_limit),
        WITH_BENCH(a_link_in_its_place_is_refused_once),
        WITH_BENCH(zero_bytes_cost_only_their_line),
        WITH_BENCH(a_long_log_is_read_piece_by_piece_without_losing_or_doubling_a_line),
        WITH_BENCH(a_line_longer_than_a_piece_is_passed_over_and_never_read_from_its_middle),
        WITH_BENCH(a_place_that_cannot_be_written_is_a_fault),
        WITH_BENCH(without_memory_the_place_does_not_move),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
