/* SPDX-License-Identifier: MIT */
/*
 * bench_folder_feed [FILES [FOLDER]]: a drop folder with so many empty files (default 100000, in /dev/shm): the longest
 * scan, and memory growth; then a file of 200,000 lines read, as a ratio to libcsv alone splitting the same lines.
 */
#include "daemon/feed/folder_feed.h"

#include <csv.h>
#include <fcntl.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>
#include <time.h>
#include <unistd.h>

static double now_s(void)
{
    struct timespec now;
    clock_gettime(CLOCK_MONOTONIC, &now);
    return (double)now.tv_sec + (double)now.tv_nsec * 1e-9;
}

static long resident_kib(void)
{
    long total = 0, resident = 0;
    FILE *file = fopen("/proc/self/statm", "r");
    if (file != NULL && fscanf(file, "%ld %ld", &total, &resident) != 2)
        resident = 0;
    if (file != NULL)
        fclose(file);
    return resident * (sysconf(_SC_PAGESIZE) / 1024);
}

static void fill(const char *folder, int file_count)
{
    char path[300];
    for (int i = 0; i < file_count; i++) {
        snprintf(path, sizeof path, "%s/%07d.csv", folder, i);
        int fd = open(path, O_WRONLY | O_CREAT | O_EXCL | O_CLOEXEC, 0600);
        if (fd < 0) {
            perror(path);
            exit(1);
        }
        close(fd);
    }
}

/* Scans as the daemon would, 2 s of machine time apart while nothing is ready; every file ends in bad/, being empty. */
static int scan_folder(const struct settings *settings, const char *folder, int file_count)
{
    struct folder_feed *feed = NULL;
    struct news news = {0};
    struct fw_error error = {0};
    if (folder_feed_open(settings, 0, 0, &feed, &error) != FW_OK) {
        fprintf(stderr, "%s\n", error.text);
        return 1;
    }
    fill(folder, file_count);
    int64_t machine_ms = 0, next_ms = 0;
    double longest_s = 0.0;
    long before_kib = resident_kib(), most_kib = before_kib;
    size_t taken = 0;
    int scans = 0;
    for (; scans < 24; scans++) { /* a look at the steady state; the rest is more of the same */
        double began_s = now_s();
        if (folder_feed_scan(feed, machine_ms, 0, &news, &next_ms, &error) != FW_OK)
            return 1;
        double took_s = now_s() - began_s;
        longest_s = took_s > longest_s ? took_s : longest_s;
        taken += news.receipt_count;
        most_kib = resident_kib() > most_kib ? resident_kib() : most_kib;
        if (folder_feed_settle(feed, &news, true, &error) != FW_OK)
            return 1;
        news_clear(&news);
        machine_ms += next_ms > 0 ? next_ms : 1;
    }
    printf("%d files: longest of %d scans %.1f ms, %zu taken, memory +%ld KiB\n", file_count, scans, longest_s * 1e3,
           taken, most_kib - before_kib);
    folder_feed_close(feed);
    return 0;
}

static void count_field(void *field, size_t length, void *context)
{
    (void)field;
    *(size_t *)context += length;
}

static int read_long_file(const struct settings *settings)
{
    enum { LINE_COUNT = 199999 };
    size_t length = 0, bad_count = 0, field_bytes = 0;
    char *text = malloc((size_t)LINE_COUNT * 40 + 64);
    struct news news = {0};
    struct fw_error error = {0};
    struct csv_parser parser;
    if (text == NULL || csv_init(&parser, 0) != 0)
        return 1;
    length += (size_t)sprintf(text, "time,stage_m\n");
    for (int i = 0; i < LINE_COUNT; i++)
        length += (size_t)sprintf(text + length, "2031-%02d-%02dT%02d:%02d:00Z,%d.%03d\n", i / 40320 % 12 + 1,
                                  i / 1440 % 28 + 1, i / 60 % 24, i % 60, i % 5, i % 1000);
    double began_s = now_s();
    csv_parse(&parser, text, length, count_field, NULL, &field_bytes);
    csv_fini(&parser, count_field, NULL, &field_bytes);
    double alone_s = now_s() - began_s;
    began_s = now_s();
    enum fw_status status =
        folder_feed_read_csv(settings, 0, 0, "long.csv", text, length, 0, &news, &bad_count, &error);
    double read_s = now_s() - began_s;
    printf("%zu readings in %.0f ms (%.1f million lines a second), %.1f times libcsv alone\n", news.reading_count,
           read_s * 1e3, (double)LINE_COUNT / read_s / 1e6, read_s / alone_s);
    news_clear(&news);
    csv_free(&parser);
    free(text);
    return status == FW_OK && bad_count == 0 && news.reading_count == 0 ? 0 : 1;
}

int main(int argument_count, char *arguments[])
{
    int file_count = argument_count > 1 ? atoi(arguments[1]) : 100000;
    char folder[256];
    snprintf(folder, sizeof folder, "%s/forewater-bench-XXXXXX", argument_count > 2 ? arguments[2] : "/dev/shm");
    if (mkdtemp(folder) == NULL) {
        perror(folder);
        return 1;
    }
    struct settings_feed feed = {
        .kind = SETTINGS_FOLDER, .path = folder, .time_column = "time", .value_column = "stage_m", .unit = "m"};
    struct settings_gauge gauge = {.id = "orlin-scar", .measures = SETTINGS_STAGE, .feed_count = 1, .feeds = &feed};
    struct settings settings = {.gauge_count = 1, .gauges = &gauge};
    int result = scan_folder(&settings, folder, file_count) | read_long_file(&settings);
    char command[300];
    snprintf(command, sizeof command, "rm -rf '%s'", folder);
    return system(command) == 0 ? result : 1;
}
