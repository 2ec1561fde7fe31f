/* SPDX-License-Identifier: MIT */
/* What the tests of the feeds share: settings built by hand, a scratch folder, files in it, and allocations that
 * fail. */
#ifndef FOREWATER_TESTS_FEED_BENCH_H
#define FOREWATER_TESTS_FEED_BENCH_H

#include <dirent.h>
#include <errno.h>
#include <fcntl.h>
#include <ftw.h>
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>
#include <unistd.h>

#include <cmocka.h>

#include "daemon/feed/news.h"
#include "daemon/settings/settings.h"

#define BENCH_RECEIVED_UTC_S INT64_C(1929042000) /* 2031-02-16T21:00:00Z */
#define BENCH_FIRST_UTC_S INT64_C(1928870100)    /* 2031-02-14T21:15:00Z, by `date -u -d ... +%s` */

/* One gauge with two feeds (stage in m, by folder and by HTTP) and a second one with a feed in l/s; two points. */
struct bench {
    char folder[64]; /* scratch, removed at the end */
    char drop[96], inbox[96];
    struct settings settings;
    struct settings_gauge gauges[2];
    struct settings_feed feeds[3];
    struct settings_point points[2];
    struct news news;
    struct fw_error error;
};

static inline int bench_set_up(void **state)
{
    struct bench *bench = calloc(1, sizeof *bench);
    if (bench == NULL)
        return -1;
    snprintf(bench->folder, sizeof bench->folder, "/tmp/forewater-feed-XXXXXX");
    if (mkdtemp(bench->folder) == NULL)
        return -1;
    snprintf(bench->drop, sizeof bench->drop, "%s/drop/orlin-scar", bench->folder);
    snprintf(bench->inbox, sizeof bench->inbox, "%s/inbox", bench->folder);
    bench->feeds[0] = (struct settings_feed){
        .kind = SETTINGS_FOLDER, .path = bench->drop, .time_column = "time", .value_column = "stage_m", .unit = "m"};
    bench->feeds[1] = (struct settings_feed){.kind = SETTINGS_HTTP,
                                             .url = "http://127.0.0.1:1/",
                                             .readings_pointer = "/data",
                                             .time_column = "/t",
                                             .value_column = "/v",
                                             .unit = "m",
                                             .every_s = 300};
    bench->feeds[2] = (struct settings_feed){
        .kind = SETTINGS_FOLDER, .path = bench->drop, .time_column = "time", .value_column = "flow", .unit = "l/s"};
    bench->gauges[0] = (struct settings_gauge){.id = "orlin-scar",
                                               .name = "Orlin Scar",
                                               .measures = SETTINGS_STAGE,
                                               .feed_count = 2,
                                               .feeds = bench->feeds,
                                               .expect_every_s = 900,
                                               .delivery_s = 300};
    bench->gauges[1] = (struct settings_gauge){.id = "sethick-beck",
                                               .name = "Sethick Beck",
                                               .measures = SETTINGS_DISCHARGE,
                                               .feed_count = 1,
                                               .feeds = &bench->feeds[2],
                                               .expect_every_s = 900};
    bench->points[0] = (struct settings_point){.id = "tallowick-ford", .name = "Tallowick Ford"};
    bench->points[1] = (struct settings_point){.id = "marren-causeway", .name = "Marren Causeway"};
    bench->settings = (struct settings){.district_name = "Vennmark",
                                        .zone = {.is_fixed = true, .offset_s = 3600},
                                        .inbox_path = bench->inbox,
                                        .gauge_count = 2,
                                        .gauges = bench->gauges,
                                        .point_count = 2,
                                        .points = bench->points};
    *state = bench;
    return 0;
}

static inline int bench_remove_one(const char *path, const struct stat *about, int kind, struct FTW *place)
{
    (void)about, (void)kind, (void)place;
    return remove(path);
}

static inline int bench_tear_down(void **state)
{
    struct bench *bench = *state;
    news_clear(&bench->news);
    nftw(bench->folder, bench_remove_one, 16, FTW_DEPTH | FTW_PHYS);
    free(bench);
    return 0;
}

static inline char *bench_path(const struct bench *bench, const char *name)
{
    static char paths[4][512];
    static unsigned next;
    char *path = paths[next++ % 4];
    snprintf(path, sizeof paths[0], "%s/%s", bench->folder, name);
    return path;
}

static inline void bench_write_bytes(const struct bench *bench, const char *name, const char *bytes, size_t length)
{
    FILE *file = fopen(bench_path(bench, name), "w");
    assert_non_null(file);
    assert_int_equal(fwrite(bytes, 1, length, file), length);
    assert_int_equal(fclose(file), 0);
}

static inline void bench_write(const struct bench *bench, const char *name, const char *text)
{
    bench_write_bytes(bench, name, text, strlen(text));
}

static inline void bench_append(const struct bench *bench, const char *name, const char *text)
{
    FILE *file = fopen(bench_path(bench, name), "a");
    assert_non_null(file);
    assert_true(fputs(text, file) >= 0);
    assert_int_equal(fclose(file), 0);
}

static inline bool bench_exists(const struct bench *bench, const char *name)
{
    struct stat about;
    return lstat(bench_path(bench, name), &about) == 0;
}

/* The text of a file, of the scratch folder or (with a leading '/') of anywhere; in a buffer that the next call
 * reuses. */
static inline const char *bench_text(const struct bench *bench, const char *name, size_t *length_out)
{
    static char bytes[1 << 16];
    FILE *file = fopen(name[0] == '/' ? name : bench_path(bench, name), "r");
    if (file == NULL)
        fail_msg("%s: %s", name, strerror(errno));
    size_t length = fread(bytes, 1, sizeof bytes - 1, file);
    fclose(file);
    bytes[length] = '\0';
    if (length_out != NULL)
        *length_out = length;
    return bytes;
}

static inline size_t bench_count_files(const struct bench *bench, const char *name)
{
    size_t count = 0;
    DIR *listing = opendir(bench_path(bench, name));
    assert_non_null(listing);
    for (const struct dirent *entry; (entry = readdir(listing)) != NULL;)
        count += entry->d_type == DT_REG && entry->d_name[0] != '.';
    closedir(listing);
    return count;
}

/* Does a note hold this text? */
static inline bool bench_has_note(const struct news *news, const char *part)
{
    for (size_t i = 0; i < news->note_count; i++)
        if (strstr(news->notes[i].text, part) != NULL)
            return true;
    return false;
}

static inline void bench_expect_note(const struct news *news, const char *part)
{
    if (bench_has_note(news, part))
        return;
    for (size_t i = 0; i < news->note_count; i++)
        print_error("note: %s\n", news->notes[i].text);
    fail_msg("no note says '%s'", part);
}

/*
 * The n-th allocation from now on fails, and all after it; -1: none. Not where another allocator has been put in the place
 * of this one (a sanitizer's, valgrind's): then bench_fail_allocation_at changes nothing and returns false.
 */
#if defined(__SANITIZE_ADDRESS__) || defined(__SANITIZE_THREAD__)
#define BENCH_CAN_FAIL_ALLOCATIONS 0
#elif defined(__has_feature)
#if __has_feature(address_sanitizer) || __has_feature(thread_sanitizer)
#define BENCH_CAN_FAIL_ALLOCATIONS 0
#else
#define BENCH_CAN_FAIL_ALLOCATIONS 1
#endif
#else
#define BENCH_CAN_FAIL_ALLOCATIONS 1
#endif

static long bench_allocations_left = -1; /* -1: all succeed */

static inline bool bench_fail_allocation_at(long number)
{
    char *(*volatile copy)(const char *text) = strdup; /* from within the C library, as the tested code mostly does */
    bench_allocations_left = 1;
    char *tried = copy("a try: does this one fail?");
    bool can_fail = tried == NULL;
    free(tried);
    bench_allocations_left = can_fail ? number : -1;
    return can_fail;
}

/* Ends the failing; true: an allocation did fail. */
static inline bool bench_allocations_succeed(void)
{
    bool has_failed = bench_allocations_left == 0;
    bench_allocations_left = -1;
    return has_failed;
}

#if BENCH_CAN_FAIL_ALLOCATIONS
extern void *__libc_malloc(size_t size);
extern void *__libc_calloc(size_t count, size_t size);
extern void *__libc_realloc(void *old, size_t size);

static inline bool bench_may_allocate(void)
{
    if (bench_allocations_left > 0)
        bench_allocations_left--;
    if (bench_allocations_left != 0)
        return true;
    errno = ENOMEM;
    return false;
}

void *malloc(size_t size)
{
    return bench_may_allocate() ? __libc_malloc(size) : NULL;
}

void *calloc(size_t count, size_t size)
{
    return bench_may_allocate() ? __libc_calloc(count, size) : NULL;
}

void *realloc(void *old, size_t size)
{
    return bench_may_allocate() ? __libc_realloc(old, size) : NULL;
}
#endif

#endif
