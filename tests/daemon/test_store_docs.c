/* SPDX-License-Identifier: MIT */
/* docs/store.md says what is there, and its questions give the answers it promises. */
#include "store_scene.h"

static char *read_page(void)
{
    size_t size = 0;
    return scene_read_file(FW_SOURCE_DIR "/docs/store.md", &size);
}

/* The statement that stands under "-- name" in the page, prepared. */
static sqlite3_stmt *documented(sqlite3 *db, const char *name)
{
    char mark[128];
    char *page = read_page();
    sqlite3_stmt *statement = NULL;
    snprintf(mark, sizeof mark, "\n```sql\n-- %s\n", name);
    const char *start = strstr(page, mark);
    const char *end = start != NULL ? strstr(start + strlen(mark), "```") : NULL;
    if (start == NULL || end == NULL)
        fail_msg("docs/store.md has no statement '%s'", name);
    else if (sqlite3_prepare_v2(db, start + 8, (int)(end - start - 8), &statement, NULL) != SQLITE_OK)
        fail_msg("%s: %s", name, sqlite3_errmsg(db));
    free(page);
    return statement;
}

static void give_integer(sqlite3_stmt *statement, const char *name, int64_t value)
{
    assert_int_equal(sqlite3_bind_int64(statement, sqlite3_bind_parameter_index(statement, name), value), SQLITE_OK);
}

static void give_text(sqlite3_stmt *statement, const char *name, const char *value)
{
    int index = sqlite3_bind_parameter_index(statement, name);
    assert_int_equal(sqlite3_bind_text(statement, index, value, -1, SQLITE_STATIC), SQLITE_OK);
}

/* All rows, as "a|b|c\n" with "-" for no value; the statement is finalised. */
static void expect(sqlite3_stmt *statement, const char *expected)
{
    struct text rows = {0};
    int result;
    while ((result = sqlite3_step(statement)) == SQLITE_ROW)
        for (int column = 0; column < sqlite3_column_count(statement); column++) {
            const char *value = (const char *)sqlite3_column_text(statement, column);
            text_add(&rows, "%s%s", value != NULL ? value : "-",
                     column + 1 == sqlite3_column_count(statement) ? "\n" : "|");
        }
    assert_int_equal(result, SQLITE_DONE);
    assert_string_equal(text_string(&rows), expected);
    text_clear(&rows);
    sqlite3_finalize(statement);
}

/* Each column stands in the part of its table, in a row of its own; and no column is told that is not there. */
static void every_table_and_column_is_told(void **state)
{
    struct scene *scene = *state;
    char *page = read_page();
    size_t columns = 0;
    size_t told = 0;
    sqlite3_stmt *query = NULL;
    store_close(scene_open(scene, STORE_WRITE));
    sqlite3 *db = scene_plain(scene);
    assert_int_equal(sqlite3_prepare_v2(db,
                                        "SELECT m.name, c.name FROM sqlite_master m, pragma_table_info(m.name) c "
                                        "WHERE m.type = 'table' AND m.name NOT LIKE 'sqlite_%'",
                                        -1, &query, NULL),
                     SQLITE_OK);
    while (sqlite3_step(query) == SQLITE_ROW) {
        const char *table = (const char *)sqlite3_column_text(query, 0);
        const char *column = (const char *)sqlite3_column_text(query, 1);
        char heading[80];
        char row[80];
        snprintf(heading, sizeof heading, "`%s`", table);
        const char *part = strstr(page, "\n### ");
        while (part != NULL && memmem(part, strcspn(part + 1, "\n") + 1, heading, strlen(heading)) == NULL)
            part = strstr(part + 1, "\n### ");
        if (part == NULL)
            fail_msg("docs/store.md has no part about %s", table);
        const char *end = strstr(part + 1, "\n##");
        snprintf(row, sizeof row, strcmp(column, "by") == 0 ? "\n| `\"%s\"` | " : "\n| `%s` | ", column);
        if (memmem(part, (size_t)(end - part), row, strlen(row)) == NULL)
            fail_msg("docs/store.md does not tell %s.%s", table, column);
        columns++;
    }
    sqlite3_finalize(query);
    sqlite3_close(db);
    /* rows of the tables' part, without heads ("| `forecast` | meaning |") */
    const char *until = strstr(page, "\n## Questions");
    for (const char *row = strstr(page, "\n| `"); row != NULL && row < until; row = strstr(row + 1, "\n| `"))
        told += memmem(row, strcspn(row + 1, "\n") + 1, "| meaning |", 11) == NULL;
    assert_int_equal(told, columns);
    free(page);
}

static void every_reason_and_mark_is_told(void **state)
{
    (void)state;
    char mark[64];
    char *page = read_page();
    static const struct {
        unsigned bit;
        const char *words;
    } reasons[] = {
        {QUALITY_OUT_OF_RANGE, "outside lowest to highest"},
        {QUALITY_RISE_TOO_FAST, "rise faster than allowed"},
        {QUALITY_FALL_TOO_FAST, "fall faster than allowed"},
        {QUALITY_UNCONFIRMED, "unconfirmed, held"},
        {QUALITY_COUNTS_UNCONFIRMED, "counts although unconfirmed"},
        {QUALITY_DENIED, "a later reading denied it"},
        {QUALITY_CONFIRMED, "a later reading confirmed it"},
        {QUALITY_FROZEN, "frozen"},
        {QUALITY_IN_FUTURE, "observed in the future"},
        {QUALITY_OUTRANKED, "a more trusted source speaks for this time"},
        {QUALITY_HAND, "a person's reading"},
        {ADVICE_BY_CHANCE, "chance of the closing mark"},
        {ADVICE_BY_ACT_BY, "act-by near or past"},
        {ADVICE_BY_TRIGGER, "a signed trigger holds"},
        {ADVICE_BY_ASSUMED_TRIGGER, "a signed trigger holds on a rise carried forward"},
        {ADVICE_BY_CREW_PLAN, "joined by the crew plan"},
        {ADVICE_BY_BLIND, "blind and rising, or silent for days"},
        {ADVICE_BY_WATER_SEEN, "water was seen at the crossing"},
        {ADVICE_HELD_NO_DATA, "would step down, but the gauge is silent"},
        {ADVICE_HELD_DWELL, "would step down, waits"},
        {ADVICE_HELD_LEVEL, "shut: level not low for long enough"},
        {ADVICE_HELD_RETURN, "shut: water may be back too soon"},
    };
    for (size_t index = 0; index < sizeof reasons / sizeof reasons[0]; index++) {
        snprintf(mark, sizeof mark, "| %u | %s |", reasons[index].bit, reasons[index].words);
        if (strstr(page, mark) == NULL)
            fail_msg("docs/store.md lacks: %s", mark);
    }
    for (int level = ADVICE_QUIET; level <= ADVICE_WALK_OVER; level++)
        assert_non_null(strstr(page, advice_level_name((enum advice_level)level)));
    for (int road = ROAD_OPEN; road <= ROAD_HANDED_BACK; road++)
        assert_non_null(strstr(page, road_state_name((enum road_state)road)));
    snprintf(mark, sizeof mark, "%d (`Fwtr`)", (int)STORE_APPLICATION_ID);
    assert_non_null(strstr(page, mark));
    snprintf(mark, sizeof mark, "`user_version`, now %d", (int)STORE_VERSION);
    assert_non_null(strstr(page, mark));
    free(page);
}

/* A reading, held; then borne out; then corrected by its source. Entry numbers of the three cycles go to entries. */
static void fill_three_views(struct scene *scene, struct store *store, int64_t entries[3])
{
    struct picture *picture = scene_picture(scene);
    struct step step;
    int64_t first = 0;
    struct reading reading = {
        .gauge = SCENE_SCAR, .observed_utc_s = 1000, .value = 1.34, .unit = "m", .received_utc_s = 1100};
    for (size_t cycle = 0; cycle < 3; cycle++) {
        step_begin(&step, scene, picture);
        if (cycle == 0) {
            first = step_add_reading(&step, reading);
            step_add_judgement(&step, first,
                               (struct quality_verdict){QUALITY_SUSPECT, QUALITY_HOLD, QUALITY_UNCONFIRMED});
            step.delta.next->points[SCENE_FORD].advice.level = ADVICE_SEND;
            step.delta.next->points[SCENE_FORD].advice.act_by_utc_s = 5000;
            step.delta.next->points[SCENE_FORD].advice.since_utc_s = 1200;
            struct message message = {
                .id = "id", .number = 1, .point = SCENE_FORD, .made_utc_s = 1200, .short_text = "ACT BY"};
            step_add_message(&step, message, "b");
        } else if (cycle == 1) {
            step_add_judgement(&step, first, (struct quality_verdict){QUALITY_PASS, QUALITY_USE, QUALITY_CONFIRMED});
            struct word word = {.id = "w",
                                .kind = WORD_SEEN,
                                .subject = "tallowick-ford",
                                .value = 12.0,
                                .is_wet = true,
                                .by = "crew",
                                .at_utc_s = 1400};
            step_add_word(&step, word);
        } else {
            reading.value = 1.43;
            int64_t revised = step_add_reading(&step, reading);
            step_add_judgement(&step, revised,
                               (struct quality_verdict){QUALITY_FAIL, QUALITY_KEEP_OUT, QUALITY_DENIED});
            step.delta.next->points[SCENE_FORD].advice.level = ADVICE_QUIET;
            step.delta.next->points[SCENE_FORD].advice.act_by_utc_s = PASSAGE_NEVER;
        }
        char payload[32];
        snprintf(payload, sizeof payload, "{\"cycle\":%zu}", cycle);
        step_seal(&step, 1200 + 300 * (int64_t)cycle, payload);
        entries[cycle] = step.delta.ledger.entry;
        assert_int_equal(step_commit(&step, store, &scene->error), FW_OK);
        picture_destroy(picture);
        picture = step_end(&step);
    }
    picture_destroy(picture);
}

static void the_old_view_comes_back_after_later_corrections(void **state)
{
    struct scene *scene = *state;
    int64_t entries[3];
    struct store *store = scene_open(scene, STORE_WRITE);
    fill_three_views(scene, store, entries);
    static const char *const readings[] = {"1000|0|1.34|m|3|hold|8\n", "1000|0|1.34|m|1|use|64\n",
                                           "1000|0|1.43|m|4|keep out|32\n"};
    static const char *const advice[] = {"tallowick-ford|SEND|0|0|5000|1200\n", "tallowick-ford|SEND|0|0|5000|1200\n",
                                         "tallowick-ford|QUIET|0|0|-|1200\n"};
    for (size_t cycle = 0; cycle < 3; cycle++) {
        char expected[64];
        sqlite3_stmt *query = documented(store->db, "as known at an entry");
        give_text(query, ":gauge", "orlin-scar");
        give_integer(query, ":entry", entries[cycle]);
        expect(query, readings[cycle]);
        query = documented(store->db, "advice as known at an entry");
        give_integer(query, ":entry", entries[cycle]);
        expect(query, advice[cycle]);
        query = documented(store->db, "the picture as known at an entry");
        give_integer(query, ":entry", entries[cycle]);
        snprintf(expected, sizeof expected, "%lld|%zu|{\"cycle\":%zu}\n", (long long)entries[cycle],
                 1200 + 300 * cycle, cycle);
        expect(query, expected);
        query = documented(store->db, "the entry of a moment");
        give_integer(query, ":utc", 1200 + 300 * (int64_t)cycle + 299);
        snprintf(expected, sizeof expected, "%lld\n", (long long)entries[cycle]);
        expect(query, expected);
    }
    sqlite3_stmt *query = documented(store->db, "the current view");
    give_text(query, ":gauge", "orlin-scar");
    expect(query, readings[2]);
    query = documented(store->db, "as known at an entry");
    give_text(query, ":gauge", "orlin-scar");
    give_integer(query, ":entry", 0);
    expect(query, "");
    expect(documented(store->db, "what was said"),
           "3|1200|to page-duty|ACT BY\n6|1400|crew|seen tallowick-ford wet 12.0 cm\n");
    store_close(store);
}

#define WITH_SCENE(test) cmocka_unit_test_setup_teardown(test, scene_set_up, scene_tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        WITH_SCENE(every_table_and_column_is_told),
        cmocka_unit_test(every_reason_and_mark_is_told),
        WITH_SCENE(the_old_view_comes_back_after_later_corrections),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
