/* SPDX-License-Identifier: MIT */
/* A commit or a seed that fails is not stored at all, and the store catches up afterwards. */
#include "store_scene.h"

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
        scene_assert_says(scene, "refused by the test");
        scene_assert_says(scene, scene->file);
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

static void an_empty_delta_is_one_ledger_entry_and_no_more(void **state)
{
    struct scene *scene = *state;
    struct store *store = scene_open(scene, STORE_WRITE);
    struct picture *picture = scene_picture(scene);
    struct step step;
    step_begin(&step, scene, picture);
    step_seal(&step, SCENE_NOW_S, "{}");
    assert_int_equal(step_commit(&step, store, &scene->error), FW_OK);
    assert_int_equal(rows_in_all(scene), 2); /* the entry and its payload */
    picture_destroy(step_end(&step));
    picture_destroy(picture);
    store_close(store);
}

/* Everything that may be asked of a store. How many of the answers were failures that name what is missing. */
static size_t ask_everything(struct scene *scene, struct store *store, const char *missing)
{
    struct picture *picture = scene_picture(scene);
    struct picture *loaded = scene_picture(scene);
    struct reading *readings = NULL;
    struct word *words = NULL;
    struct text text = {0};
    struct message message = {.entry = 1};
    char link[FACT_DIGEST_SIZE];
    int64_t utc_s = 0;
    size_t count = 0;
    size_t failures = 0;
    bool has = false;
    struct step step;
    memcpy(picture->newest_link, store->newest_link, sizeof picture->newest_link);
    picture->next_entry = 1000;
    fill_step(&step, scene, picture);
    struct fw_error errors[10] = {0};
    const enum fw_status statuses[] = {
        step_commit(&step, store, &errors[0]),
        store_load_picture(store, &scene->settings, 0, loaded, &errors[1]),
        store_list_readings(store, &scene->settings, 0, INT64_MAX, &readings, &count, &errors[2]),
        store_list_words(store, 0, INT64_MAX, &words, &count, &errors[3]),
        store_has_word(store, "w-1", &has, &errors[4]),
        store_payload_at(store, STORE_NOW, &text, &utc_s, link, &errors[5]),
        store_check_ledger(store, &count, &errors[6]),
        store_save_delivery(store, &message, &errors[7]),
        store_keep_settings(store, &scene->settings, SCENE_NOW_S, &errors[8]),
        store_seed(store, &scene->settings, step.delta.next, SCENE_NOW_S, "test", &errors[9]),
    };
    text_clear(&text);
    for (size_t index = 0; index < 10; index++) {
        if (strstr(errors[index].text, missing) == NULL)
            continue;
        assert_int_equal(statuses[index], FW_IO);
        failures++;
    }
    free(readings);
    free(words);
    picture_destroy(step_end(&step));
    picture_destroy(loaded);
    picture_destroy(picture);
    return failures;
}

static void a_table_that_is_missing_is_named_by_whoever_needs_it(void **state)
{
    struct scene *scene = *state;
    static const struct {
        const char *table;
        size_t failures;
    } cases[] = {
        /* in the order of ask_everything, of the ten: */
        {"ledger", 5},         /* commit, load, payload, check, seed */
        {"ledger_payload", 4}, /* commit, payload, check, seed */
        {"reading", 4},        /* commit, load, list, seed */
        {"judgement", 3},      /* commit, load, seed */
        {"word", 5},           /* commit, load, list, has, seed */
        {"advice", 3},         /* commit, load, seed */
        {"forecast", 2},       /* commit, load */
        {"forecast_curve", 1}, /* commit */
        {"outbox", 4},         /* commit, load, delivery, seed */
        {"raw_payload", 1},    /* commit */
        {"settings", 2},       /* keep, seed */
        {"counter", 2},        /* load, seed */
    };
    for (size_t index = 0; index < sizeof cases / sizeof cases[0]; index++) {
        char sql[128];
        char missing[64];
        struct store *store = scene_open(scene, STORE_WRITE);
        snprintf(sql, sizeof sql, "DROP TABLE %s", cases[index].table);
        snprintf(missing, sizeof missing, "no such table: %s", cases[index].table);
        scene_meddle(scene, sql);
        size_t failures = ask_everything(scene, store, missing);
        if (failures != cases[index].failures)
            fail_msg("%s: %zu failures that name it", cases[index].table, failures);
        store_close(store);
        assert_int_equal(unlink(scene->file), 0);
    }
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
        scene_assert_says(scene, cases[index].says);
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
    scene_assert_says(scene, "must be seeded");
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
    picture_destroy(scene_fill(scene, 10));
    struct store *store = scene_open(scene, STORE_WRITE);
    struct picture *first = scene_picture(scene);
    struct step step;
    size_t count = 0;
    fill_step(&step, scene, first);
    struct reading late = {.gauge = SCENE_MILL, .observed_utc_s = SCENE_NOW_S, .value = 8.25, .unit = "m3/s"};
    step.delta.readings[0] = late;
    struct picture *picture = step_end(&step);
    bool was_new = false;
    scene_meddle(scene, "INSERT INTO counter VALUES ('next message number', 900)");
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
    assert_int_equal(picture->next_message_number, 900);
    struct picture *loaded = scene_picture(scene);
    assert_int_equal(store_load_picture(store, &scene->settings, 0, loaded, &scene->error), FW_OK);
    assert_true(loaded->gauges[SCENE_SCAR].readings[0].reading.value == 1.37);
    assert_int_equal(loaded->next_entry, picture->next_entry);
    picture_destroy(loaded);
    picture_destroy(picture);
    picture_destroy(first);
    store_close(store);
}

#define WITH_SCENE(test) cmocka_unit_test_setup_teardown(test, scene_set_up, scene_tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        WITH_SCENE(a_commit_that_fails_at_any_table_stores_nothing),
        WITH_SCENE(an_empty_delta_is_one_ledger_entry_and_no_more),
        WITH_SCENE(a_table_that_is_missing_is_named_by_whoever_needs_it),
        WITH_SCENE(a_seed_that_fails_changes_neither_store_nor_picture),
        WITH_SCENE(values_that_are_none_are_refused_whole),
        WITH_SCENE(what_is_too_big_or_does_not_fit_memory_is_refused_whole),
        WITH_SCENE(an_entry_behind_one_that_was_not_stored_is_refused_until_the_store_is_seeded),
        WITH_SCENE(a_seeded_store_loads_as_the_picture_it_was_seeded_with),
        WITH_SCENE(seeding_a_store_with_other_rows_takes_new_numbers),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
