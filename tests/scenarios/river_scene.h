/* SPDX-License-Identifier: MIT */
/*
 * A small invented district for the executable: one gauge with a drop folder, two crossings, a hook that writes what
 * it was given into a file, and questions to the store. The river is that of docs/demo.md down to the causeway.
 */
#ifndef FOREWATER_TESTS_SCENARIOS_RIVER_SCENE_H
#define FOREWATER_TESTS_SCENARIOS_RIVER_SCENE_H

#include "tests/scenarios/process.h"

#include <cjson/cJSON.h>
#include <sqlite3.h>

#include "daemon/store/store.h"

enum { SCENE_START = 1928854800, SCENE_MINUTE = 60, SCENE_HOUR = 3600 }; /* 2031-02-14 18:00 +01:00 */

static const char scene_config[] =
    "{ \"district\": { \"name\": \"Vennmark\", \"zone\": \"+01:00\", \"datum\": \"VD-71\" },\n"
    "  \"store\": { \"file\": \"history.db\", \"inbox\": \"inbox\" },\n"
    "  \"forecast\": { \"every_min\": 5, \"horizon_h\": 6, \"warm_up_h\": 6, \"carry_rise_min\": 60,\n"
    "                \"recession_h\": 6 },\n"
    "  \"gauges\": [ { \"id\": \"orlin-scar\", \"name\": \"Orlin Scar\", \"measures\": \"stage\",\n"
    "    \"rating\": { \"segments\": [ { \"to_m\": 2.60, \"c\": 11.8, \"h0_m\": 0.42, \"b\": 1.72 },\n"
    "                              { \"h0_m\": 0.42, \"b\": 2.15 } ], \"highest_gauged_m\": 2.38 },\n"
    "    \"feeds\": [ { \"kind\": \"folder\", \"path\": \"drop\", \"time\": \"time\", \"value\": \"stage_m\" } ],\n"
    "    \"blind_after_min\": 45, \"blind_after_rising_min\": 25, \"rising_m_h\": 0.05,\n"
    "    \"quality\": { \"lowest_m\": 0.0, \"highest_m\": 9.0, \"fastest_rise_m_h\": 4.0 } } ],\n"
    "  \"sections\": [ { \"id\": \"ildra\", \"shape\": \"trapezoid\", \"bottom_m\": 14, \"side\": 2.0, \"n\": "
    "0.038,\n"
    "                  \"plain\": { \"above_m\": 2.60, \"width_m\": 80, \"n\": 0.075 } } ],\n"
    "  \"reaches\": [\n"
    "    { \"id\": \"scar-ford\", \"from\": \"orlin-scar\", \"to\": \"tallowick-ford\", \"length_m\": 9400,\n"
    "      \"slope\": 0.0024, \"section\": \"ildra\", \"method\": \"muskingum-cunge\" },\n"
    "    { \"id\": \"ford-causeway\", \"from\": \"tallowick-ford\", \"to\": \"marren-causeway\", \"length_m\": "
    "8400,\n"
    "      \"slope\": 0.0024, \"section\": \"ildra\", \"method\": \"muskingum-cunge\" } ],\n"
    "  \"points\": [\n"
    "    { \"id\": \"tallowick-ford\", \"name\": \"Tallowick Ford\", \"invert_m\": 104.20,\n"
    "      \"marks\": [ { \"name\": \"approach wet\", \"depth_m\": 1.45 },\n"
    "                 { \"name\": \"deck awash\", \"depth_m\": 1.55, \"deck\": true } ],\n"
    "      \"deck\": { \"kind\": \"section\" },\n"
    "      \"crew\": { \"day_min\": 40, \"night_min\": 55, \"margin_min\": 15 } },\n"
    "    { \"id\": \"marren-causeway\", \"name\": \"Marren Causeway\", \"invert_m\": 84.04,\n"
    "      \"marks\": [ { \"name\": \"approach wet\", \"depth_m\": 1.80 },\n"
    "                 { \"name\": \"deck awash\", \"depth_m\": 1.95, \"deck\": true } ],\n"
    "      \"crew\": { \"day_min\": 25, \"night_min\": 30, \"margin_min\": 15 } } ],\n"
    "  \"roster\": [ { \"role\": \"duty officer\", \"to\": [ \"page-duty\" ] } ],\n"
    "  \"channels\": [ { \"id\": \"page-duty\", \"kind\": \"command\", \"run\": [ \"./hook\" ] } ] }\n";

/* tried.jsonl: every start; told.jsonl: what it passed on. A test makes the files `hook-fails` and `hook-sleeps`. */
static const char scene_hook[] = "#!/bin/sh\n"
                                 "set -eu\n"
                                 "line=$(cat)\n"
                                 "exec 9>>hook.lock\n"
                                 "flock 9\n"
                                 "printf '%s\\n' \"$line\" >>tried.jsonl\n"
                                 "if [ -e hook-fails ]; then echo 'no line to the duty officer'; exit 1; fi\n"
                                 "flock -u 9\n"
                                 "if [ -e hook-sleeps ]; then echo $$ >hook.pid; sleep 60 9>&-; fi\n"
                                 "printf '%s\\n' \"$line\" >>told.jsonl\n";

static inline int scene_open(void **state)
{
    if (work_open(state) != 0)
        return -1;
    struct work *work = *state;
    work_write(work, "forewater.json", scene_config);
    work_write(work, "hook", scene_hook);
    return chmod(work_path(work, "hook"), 0755);
}

#define SCENE_TEST(name) cmocka_unit_test_setup_teardown(name, scene_open, work_close)

/* The configuration with one piece of text, which stands in it once, put in place of another. */
static inline void scene_change_config(struct work *work, const char *instead_of, const char *text)
{
    const char *config = work_read(work, "forewater.json");
    const char *place = strstr(config, instead_of);
    if (place == NULL || strstr(place + 1, instead_of) != NULL)
        fail_msg("'%s' does not stand in the configuration just once", instead_of);
    work_write(work, "forewater.json",
               work_print(work, "%.*s%s%s", (int)(place - config), config, text, place + strlen(instead_of)));
}

/* --- readings --------------------------------------------------------------------------------------------------- */

struct scene_reading {
    int minute; /* after SCENE_START */
    double stage_m;
};

static inline int64_t scene_time(int minute)
{
    return SCENE_START + (int64_t)minute * SCENE_MINUTE;
}

/* As a feed's file: header and rows. */
static inline const char *scene_csv(struct work *work, size_t count, const struct scene_reading readings[])
{
    char time[WHEN_TEXT_SIZE];
    char *csv = work_print(work, "time,stage_m\n");
    for (size_t index = 0; index < count; index++)
        csv = work_print(work, "%s%s,%.2f\n", csv, when_rfc3339_utc(scene_time(readings[index].minute), time),
                         readings[index].stage_m);
    return csv;
}

/* Written beside and renamed in, as docs/feeds.md asks. */
static inline void scene_drop(struct work *work, const char *name, const char *text)
{
    work_write(work, work_print(work, "drop/.%s", name), text);
    work_rename(work, work_print(work, "drop/.%s", name), work_print(work, "drop/%s", name));
}

static inline void scene_drop_readings(struct work *work, const char *name, size_t count,
                                       const struct scene_reading readings[])
{
    scene_drop(work, name, scene_csv(work, count, readings));
}

static inline void scene_drop_reading(struct work *work, int minute, double stage_m)
{
    scene_drop_readings(work, work_print(work, "at-%d.csv", minute), 1, &(struct scene_reading){minute, stage_m});
}

/*
 * The scene's river: it recedes by 0.04 m/h to 1.02 m at minute 60, rises by 0.80 m/h to 2.42 m at minute 165, rounds
 * its top to 2.46 m at minute 195, and falls by 0.30 m/h. Nothing in it stands still or jumps.
 */
static inline double scene_stage_m(int minute)
{
    if (minute <= 60)
        return 1.02 + 0.04 * (60 - minute) / 60.0;
    if (minute <= 165)
        return 1.02 + 0.80 * (minute - 60) / 60.0;
    if (minute <= 195)
        return 2.42 + 0.08 * (minute - 165) / 60.0;
    return 2.46 - 0.30 * (minute - 195) / 60.0;
}

/* What the gauge had measured every quarter of an hour in [from, to], in one file. */
static inline void scene_drop_past(struct work *work, int from_minute, int to_minute)
{
    struct scene_reading readings[200];
    size_t count = 0;
    for (int minute = from_minute; minute <= to_minute && count < 200; minute += 15)
        readings[count++] = (struct scene_reading){minute, scene_stage_m(minute)};
    scene_drop_readings(work, work_print(work, "past-%d.csv", to_minute), count, readings);
}

/* A driven daemon that knows the still river up to the start, and has made its first cycle. */
static inline void scene_start(struct work *work)
{
    daemon_start_driven(work, SCENE_START);
    scene_drop_past(work, -6 * 60, 0);
    daemon_advance(work, SCENE_START);
}

/* Every five minutes of the world up to and with `to`, a reading every quarter. */
static inline void scene_live(struct work *work, int from_minute, int to_minute)
{
    for (int minute = from_minute; minute <= to_minute; minute += 5) {
        if (minute % 15 == 0)
            scene_drop_reading(work, minute, scene_stage_m(minute));
        daemon_advance(work, scene_time(minute));
    }
}

/* --- messages --------------------------------------------------------------------------------------------------- */

struct scene_message { /* as the hook was given it; texts belong to the work folder */
    const char *id, *point, *text, *bulletin, *made;
    int number, try;
};

enum { SCENE_MESSAGES_MAX = 64 };

static inline const char *scene_member(struct work *work, const cJSON *object, const char *key)
{
    const cJSON *member = cJSON_GetObjectItemCaseSensitive(object, key);
    return work_print(work, "%s", cJSON_IsString(member) ? member->valuestring : "");
}

/* The lines of told.jsonl or tried.jsonl, in order; how many. */
static inline size_t scene_messages(struct work *work, const char *name,
                                    struct scene_message messages[SCENE_MESSAGES_MAX])
{
    size_t count = 0;
    char *rest = work_read(work, name);
    for (char *line; (line = strsep(&rest, "\n")) != NULL;) {
        if (line[0] == '\0')
            continue;
        assert_true(count < SCENE_MESSAGES_MAX);
        cJSON *event = cJSON_Parse(line);
        if (event == NULL)
            fail_msg("%s: not one JSON object a line: %s", name, line);
        const cJSON *point = cJSON_GetObjectItemCaseSensitive(event, "point");
        const cJSON *number = cJSON_GetObjectItemCaseSensitive(event, "number");
        const cJSON *try = cJSON_GetObjectItemCaseSensitive(event, "try");
        assert_true(cJSON_IsNumber(number) && cJSON_IsNumber(try));
        messages[count++] = (struct scene_message){.id = scene_member(work, event, "id"),
                                                   .point = scene_member(work, point, "id"),
                                                   .text = scene_member(work, event, "text"),
                                                   .bulletin = scene_member(work, event, "bulletin"),
                                                   .made = scene_member(work, event, "made"),
                                                   .number = number->valueint,
                                                   .try = try->valueint};
        cJSON_Delete(event);
    }
    return count;
}

static inline size_t scene_count_messages(struct work *work, const char *name)
{
    struct scene_message messages[SCENE_MESSAGES_MAX];
    return scene_messages(work, name, messages);
}

/* The caution on every output that a person acts on, wherever its lines break. */
static inline void scene_expect_caution(const char *text)
{
    static const char caution[] = "No message from this system means a road is fit to use.";
    for (const char *start = text; *start != '\0'; start++) {
        const char *word = caution;
        for (const char *next = start; *word != '\0' && *next != '\0'; word++) {
            if (*word == ' ' ? strchr(" \n", *next) == NULL : *word != *next)
                break;
            next += *word == ' ' ? strspn(next, " \n") : 1;
        }
        if (*word == '\0')
            return;
    }
    fail_msg("without the caution: %s", text);
}

/* --- the store -------------------------------------------------------------------------------------------------- */

/* The answer's rows, columns parted by '|', each row ended by a line feed. Reads only, as any tool may. */
static inline const char *scene_ask(struct work *work, const char *store, const char *sql)
{
    sqlite3 *db = NULL;
    sqlite3_stmt *query = NULL;
    char *answer = work_print(work, "%s", "");
    assert_int_equal(sqlite3_open_v2(work_path(work, store), &db, SQLITE_OPEN_READONLY, NULL), SQLITE_OK);
    sqlite3_busy_timeout(db, 5000);
    if (sqlite3_prepare_v2(db, sql, -1, &query, NULL) != SQLITE_OK)
        fail_msg("%s: %s", sql, sqlite3_errmsg(db));
    size_t capacity = 0;
    size_t length = 0;
    char *rows = NULL;
    FILE *stream = open_memstream(&rows, &capacity);
    assert_non_null(stream);
    int step;
    while ((step = sqlite3_step(query)) == SQLITE_ROW) {
        for (int column = 0; column < sqlite3_column_count(query); column++) {
            const char *text = (const char *)sqlite3_column_text(query, column);
            fprintf(stream, "%s%s", column > 0 ? "|" : "", text != NULL ? text : "");
            length++;
        }
        fputc('\n', stream);
    }
    if (step != SQLITE_DONE)
        fail_msg("%s: %s", sql, sqlite3_errmsg(db));
    fclose(stream);
    if (length > 0)
        answer = work_print(work, "%s", rows);
    free(rows);
    sqlite3_finalize(query);
    sqlite3_close(db);
    return answer;
}

static inline long scene_ask_number(struct work *work, const char *sql)
{
    const char *answer = scene_ask(work, "history.db", sql);
    char *end = NULL;
    long number = strtol(answer, &end, 10);
    if (end == answer || strcmp(end, "\n") != 0)
        fail_msg("%s: '%s' is not one number", sql, answer);
    return number;
}

/* "SEND" */
static inline const char *scene_level(struct work *work, const char *point)
{
    char *answer = work_print(work, "%s",
                              scene_ask(work, "history.db",
                                        work_print(work,
                                                   "SELECT level FROM advice WHERE point = '%s' "
                                                   "ORDER BY entry DESC LIMIT 1",
                                                   point)));
    answer[strcspn(answer, "\n")] = '\0';
    return answer;
}

/* A member of the newest recorded picture's point, as `status --json` prints it: "road.state". */
static inline const char *scene_point(struct work *work, const char *point, const char *member)
{
    char *answer = work_print(
        work, "%s",
        scene_ask(work, "history.db",
                  work_print(work,
                             "SELECT json_extract(p.value, '$.%s') FROM ledger l JOIN ledger_payload USING (entry), "
                             "json_each(payload, '$.points') p WHERE l.kind = 'cycle' AND "
                             "json_extract(p.value, '$.id') = '%s' AND "
                             "l.entry = (SELECT max(entry) FROM ledger WHERE kind = 'cycle')",
                             member, point)));
    answer[strcspn(answer, "\n")] = '\0';
    return answer;
}

/* The chain stands, link by link. */
static inline size_t scene_check_chain(struct work *work, const char *store_name)
{
    struct store *store = NULL;
    struct fw_error error = {.status = FW_OK};
    size_t count = 0;
    if (store_open(work_path(work, store_name), STORE_READ, &store, &error) != FW_OK ||
        store_check_ledger(store, &count, &error) != FW_OK)
        fail_msg("%s", error.text);
    store_close(store);
    return count;
}

#endif
