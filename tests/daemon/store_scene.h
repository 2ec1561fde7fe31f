/* SPDX-License-Identifier: MIT */
/* A small district, pictures and deltas made by hand, and a folder of their own for the tests of the store. */
#ifndef FOREWATER_TESTS_STORE_SCENE_H
#define FOREWATER_TESTS_STORE_SCENE_H

#include <math.h>
#include <setjmp.h>
#include <stdarg.h>
#include <stdint.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

#include <cmocka.h>

#include "daemon/ledger.h"
#include "daemon/store/store_internal.h"

enum { SCENE_SCAR, SCENE_MILL, SCENE_GAUGES };
enum { SCENE_FORD, SCENE_CAUSEWAY, SCENE_POINTS };
enum { SCENE_PAGE, SCENE_MAIL, SCENE_CHANNELS };
#define SCENE_NOW_S INT64_C(1928851200) /* 2031-02-14T16:00:00Z */

struct scene {
    char directory[64];
    char file[128];
    struct settings_feed feeds[2];
    struct settings_gauge gauges[SCENE_GAUGES];
    struct settings_mark marks[1];
    struct settings_point points[SCENE_POINTS];
    struct settings_channel channels[SCENE_CHANNELS];
    struct settings settings;
    struct fw_error error;
};

static inline int scene_set_up(void **state)
{
    struct scene *scene = calloc(1, sizeof *scene);
    assert_non_null(scene);
    snprintf(scene->directory, sizeof scene->directory, "/tmp/forewater-store-XXXXXX");
    assert_non_null(mkdtemp(scene->directory));
    snprintf(scene->file, sizeof scene->file, "%s/history.db", scene->directory);
    scene->gauges[SCENE_SCAR] = (struct settings_gauge){
        .id = "orlin-scar", .measures = SETTINGS_STAGE, .feed_count = 2, .feeds = scene->feeds};
    scene->gauges[SCENE_MILL] = (struct settings_gauge){
        .id = "pintle-mill", .measures = SETTINGS_DISCHARGE, .feed_count = 1, .feeds = scene->feeds};
    scene->marks[0] = (struct settings_mark){.name = "deck awash", .depth_m = 1.55};
    scene->points[SCENE_FORD] =
        (struct settings_point){.id = "tallowick-ford", .mark_count = 1, .marks = scene->marks};
    scene->points[SCENE_CAUSEWAY] =
        (struct settings_point){.id = "marren-causeway", .mark_count = 1, .marks = scene->marks};
    scene->channels[SCENE_PAGE].id = "page-duty";
    scene->channels[SCENE_MAIL].id = "mail-control";
    static const char text[] = "{ \"district\": { \"name\": \"Vennmark\" } }";
    scene->settings = (struct settings){.gauge_count = SCENE_GAUGES,
                                        .gauges = scene->gauges,
                                        .point_count = SCENE_POINTS,
                                        .points = scene->points,
                                        .channel_count = SCENE_CHANNELS,
                                        .channels = scene->channels,
                                        .text = text,
                                        .text_length = sizeof text - 1};
    assert_int_equal(digest_sha256(text, sizeof text - 1, scene->settings.digest), FW_OK);
    *state = scene;
    return 0;
}

static inline int scene_tear_down(void **state)
{
    struct scene *scene = *state;
    char command[128];
    snprintf(command, sizeof command, "rm -rf '%s'", scene->directory);
    int failed = system(command);
    free(scene);
    return failed;
}

static inline struct store *scene_open(struct scene *scene, enum store_access access)
{
    struct store *store = NULL;
    enum fw_status status = store_open(scene->file, access, &store, &scene->error);
    if (status != FW_OK)
        print_error("%s\n", scene->error.text);
    assert_int_equal(status, FW_OK);
    return store;
}

static inline struct picture *scene_picture(const struct scene *scene)
{
    struct picture *picture = NULL;
    assert_int_equal(picture_create(&scene->settings, &picture), FW_OK);
    return picture;
}

/* --- a cycle's delta, made step by step --- */

struct step {
    const struct scene *scene;
    struct delta delta;
    struct news news;
};

static inline void step_begin(struct step *step, const struct scene *scene, const struct picture *before)
{
    *step = (struct step){.scene = scene};
    step->delta.before = before;
    step->delta.news = &step->news;
    assert_int_equal(picture_copy(&scene->settings, before, &step->delta.next), FW_OK);
    step->delta.first_message = before->outbox_count;
    memcpy(step->delta.settings_digest, scene->settings.digest, FACT_DIGEST_SIZE);
}

/* `reading` says all but the entry and the value in SI units. Returns the entry. */
static inline int64_t step_add_reading(struct step *step, struct reading reading)
{
    struct delta *delta = &step->delta;
    bool was_new = false;
    reading.entry = delta->next->next_entry++;
    reading.value_si = strcmp(reading.unit, "cm") == 0 ? reading.value / 100.0 : reading.value;
    assert_int_equal(
        buffer_grow(&delta->readings, &delta->reading_capacity, delta->reading_count, sizeof *delta->readings),
        FW_OK);
    delta->readings[delta->reading_count++] = reading;
    assert_int_equal(picture_add_reading(delta->next, &reading, &was_new), FW_OK);
    assert_true(was_new);
    return reading.entry;
}

static inline struct known_reading *scene_known(struct picture *picture, int64_t entry)
{
    for (size_t gauge = 0; gauge < picture->gauge_count; gauge++)
        for (size_t index = 0; index < picture->gauges[gauge].reading_count; index++)
            if (picture->gauges[gauge].readings[index].reading.entry == entry)
                return &picture->gauges[gauge].readings[index];
    fail_msg("reading %lld is not in the picture", (long long)entry);
    abort();
}

static inline void step_add_judgement(struct step *step, int64_t reading, struct quality_verdict verdict)
{
    struct delta *delta = &step->delta;
    struct known_reading *known = scene_known(delta->next, reading);
    assert_int_equal(buffer_grow(&delta->judgements, &delta->judgement_capacity, delta->judgement_count,
                                 sizeof *delta->judgements),
                     FW_OK);
    delta->judgements[delta->judgement_count++] =
        (struct judgement){.entry = delta->next->next_entry++, .reading = reading, .verdict = verdict};
    known->verdict = verdict;
    known->is_judged = true;
}

static inline void step_add_word(struct step *step, struct word word)
{
    struct delta *delta = &step->delta;
    word.entry = delta->next->next_entry++;
    assert_int_equal(buffer_grow(&delta->words, &delta->word_capacity, delta->word_count, sizeof *delta->words),
                     FW_OK);
    delta->words[delta->word_count++] = word;
    picture_take_word(&step->scene->settings, delta->next, &word);
}

static inline void step_add_message(struct step *step, struct message message, const char *bulletin)
{
    struct picture *next = step->delta.next;
    message.entry = next->next_entry++;
    message.bulletin = bulletin != NULL ? strdup(bulletin) : NULL;
    assert_int_equal(buffer_grow(&next->outbox, &next->outbox_capacity, next->outbox_count, sizeof *next->outbox),
                     FW_OK);
    next->outbox[next->outbox_count++] = message;
    if (message.number >= next->next_message_number)
        next->next_message_number = message.number + 1;
    if (message.point >= 0)
        next->points[message.point].told_number = message.number;
}

static inline void step_seal(struct step *step, int64_t utc_s, const char *payload)
{
    struct delta *delta = &step->delta;
    delta->ledger.entry = delta->next->next_entry++;
    delta->ledger.utc_s = utc_s;
    delta->next->as_of_utc_s = utc_s;
    snprintf(delta->ledger.kind, sizeof delta->ledger.kind, "cycle");
    text_add(&delta->ledger.payload, "%s", payload);
    assert_int_equal(ledger_seal(delta->next->newest_link, &delta->ledger), FW_OK);
    memcpy(delta->next->newest_link, delta->ledger.link, FACT_DIGEST_SIZE);
}

/* Frees all but the new picture, which the caller owns now. */
static inline struct picture *step_end(struct step *step)
{
    struct picture *next = step->delta.next;
    free(step->delta.readings);
    free(step->delta.judgements);
    free(step->delta.words);
    text_clear(&step->delta.ledger.payload);
    free(step->news.payloads);
    *step = (struct step){0};
    return next;
}

static inline enum fw_status step_commit(struct step *step, struct store *store, struct fw_error *error)
{
    return store_commit(store, &step->scene->settings, &step->delta, error);
}

/*
 * One small cycle: one reading of the first gauge, judged. Replaces the picture whatever came of the commit, as
 * the daemon does.
 */
static inline enum fw_status scene_cycle(struct scene *scene, struct store *store, struct picture **picture,
                                         int64_t observed_utc_s, double value_m)
{
    struct step step;
    step_begin(&step, scene, *picture);
    struct reading reading = {.gauge = SCENE_SCAR,
                              .source = 0,
                              .observed_utc_s = observed_utc_s,
                              .value = value_m,
                              .unit = "m",
                              .received_utc_s = observed_utc_s + 120};
    int64_t entry = step_add_reading(&step, reading);
    step_add_judgement(&step, entry, (struct quality_verdict){.flag = QUALITY_PASS, .use = QUALITY_USE});
    step_seal(&step, observed_utc_s + 300, "{\"picture\":1}");
    enum fw_status status = step_commit(&step, store, &scene->error);
    picture_destroy(*picture);
    *picture = step_end(&step);
    return status;
}

/* --- a second, plain connection, for looking and for meddling --- */

static inline sqlite3 *scene_plain(const struct scene *scene)
{
    sqlite3 *db = NULL;
    assert_int_equal(sqlite3_open(scene->file, &db), SQLITE_OK);
    sqlite3_busy_timeout(db, 2000);
    return db;
}

static inline void plain_run(sqlite3 *db, const char *sql)
{
    char *trouble = NULL;
    if (sqlite3_exec(db, sql, NULL, NULL, &trouble) != SQLITE_OK)
        fail_msg("%s: %s", sql, trouble);
}

static inline int64_t plain_integer(sqlite3 *db, const char *sql)
{
    sqlite3_stmt *query = NULL;
    if (sqlite3_prepare_v2(db, sql, -1, &query, NULL) != SQLITE_OK || sqlite3_step(query) != SQLITE_ROW)
        fail_msg("%s: %s", sql, sqlite3_errmsg(db));
    int64_t value = sqlite3_column_int64(query, 0);
    sqlite3_finalize(query);
    return value;
}

static inline void scene_meddle(const struct scene *scene, const char *sql)
{
    sqlite3 *db = scene_plain(scene);
    plain_run(db, sql);
    sqlite3_close(db);
}

static inline int64_t scene_integer(const struct scene *scene, const char *sql)
{
    sqlite3 *db = scene_plain(scene);
    int64_t value = plain_integer(db, sql);
    sqlite3_close(db);
    return value;
}

/* The whole file; the caller frees it. */
static inline char *scene_read_file(const char *path, size_t *size_out)
{
    FILE *file = fopen(path, "rb");
    assert_non_null(file);
    assert_int_equal(fseek(file, 0, SEEK_END), 0);
    size_t size = (size_t)ftell(file);
    rewind(file);
    char *bytes = malloc(size + 1);
    assert_non_null(bytes);
    assert_int_equal(fread(bytes, 1, size, file), size);
    bytes[size] = '\0';
    fclose(file);
    *size_out = size;
    return bytes;
}

static inline void scene_write_file(const char *path, const char *bytes, size_t size)
{
    FILE *file = fopen(path, "wb");
    assert_non_null(file);
    assert_int_equal(fwrite(bytes, 1, size, file), size);
    assert_int_equal(fclose(file), 0);
}

/* --- files --- */

static inline enum fw_status scene_try_open(struct scene *scene, enum store_access access)
{
    struct store *store = NULL;
    enum fw_status status = store_open(scene->file, access, &store, &scene->error);
    store_close(store);
    return status;
}

static inline void scene_assert_says(const struct scene *scene, const char *text)
{
    if (strstr(scene->error.text, text) == NULL)
        fail_msg("'%s' is not in: %s", text, scene->error.text);
}

static inline void scene_path(const struct scene *scene, const char *suffix, char path[STORE_PATH_SIZE])
{
    snprintf(path, STORE_PATH_SIZE, "%s%s", scene->file, suffix);
}

static inline bool scene_has_file(const struct scene *scene, const char *suffix)
{
    char path[STORE_PATH_SIZE];
    scene_path(scene, suffix, path);
    return access(path, F_OK) == 0;
}

/* A closed store with some cycles in it; the picture that belongs to it. */
static inline struct picture *scene_fill(struct scene *scene, size_t cycles)
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

#endif
