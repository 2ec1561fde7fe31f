/* SPDX-License-Identifier: MIT */
/* `forewater replay`: the same twice, whatever the order in which things came, and the same as it was live. */
#include "tests/scenarios/river_scene.h"

struct row { /* of a readings file; minutes after SCENE_START */
    int observed, received;
};

static const char *readings_csv(struct work *work, size_t count, const struct row rows[])
{
    char observed[WHEN_TEXT_SIZE], received[WHEN_TEXT_SIZE];
    size_t size = 64 * (count + 1);
    char *csv = calloc(1, size);
    work_keep(work, csv);
    size_t length = (size_t)snprintf(csv, size, "observed,stage_m,received\n");
    for (size_t index = 0; index < count; index++)
        length += (size_t)snprintf(
            csv + length, size - length, "%s,%.2f,%s\n", when_rfc3339_utc(scene_time(rows[index].observed), observed),
            scene_stage_m(rows[index].observed), when_rfc3339_utc(scene_time(rows[index].received), received));
    assert_true(length < size);
    return csv;
}

enum { FIRST_MINUTE = -360, EVERY_MIN = 15, ROWS_MAX = 200 };

static size_t rows_on_time(int to_minute, struct row rows[ROWS_MAX])
{
    size_t count = 0;
    for (int minute = FIRST_MINUTE; minute <= to_minute; minute += EVERY_MIN)
        rows[count++] = (struct row){minute, minute};
    return count;
}

/* For questions that a coarse routing answers as well, a fifteenth of the work. */
static void route_coarsely(struct work *work)
{
    scene_change_config(work, "\"warm_up_h\": 6,",
                        "\"warm_up_h\": 6, \"time_step_s\": 300, \"roughness_factors\": [1.0],");
}

static void write_on_time(struct work *work, int to_minute)
{
    struct row rows[ROWS_MAX];
    size_t count = rows_on_time(to_minute, rows);
    work_write(work, "readings.csv", readings_csv(work, count, rows));
}

/* --- the same twice --------------------------------------------------------------------------------------------- */

static void write_words(struct work *work)
{
    work_write(work, "words.csv",
               "time,words\n"
               "2031-02-14T20:32:00+01:00,road,tallowick-ford,CREW OUT,--by,roads foreman\n"
               "2031-02-14T20:50:00+01:00,reading,orlin-scar,2.44,--by,technician\n"
               "2031-02-14T21:10:00+01:00,road,tallowick-ford,SHUT,--both-sides,--by,roads foreman\n"
               "2031-02-14T21:12:00+01:00,seen,marren-causeway,dry,--by,driver\n");
}

static struct ending replay_night(struct work *work, const char *store, const char *option)
{
    struct ending ending = work_run(work, "replay", "--readings", "orlin-scar=readings.csv", "--words", "words.csv",
                                    "--store", store, option, NULL);
    if (ending.code != 0)
        fail_msg("exit %d: %s", ending.code, ending.err);
    return ending;
}

/* Every row of every table. */
static const char *dump(struct work *work, const char *store)
{
    const char *all = "";
    char *tables = work_print(work, "%s",
                              scene_ask(work, store,
                                        "SELECT name FROM sqlite_master WHERE type = 'table' "
                                        "ORDER BY name"));
    for (char *table; (table = strsep(&tables, "\n")) != NULL && table[0] != '\0';)
        all = work_print(work, "%s[%s]\n%s", all, table,
                         scene_ask(work, store, work_print(work, "SELECT * FROM %s", table)));
    return all;
}

static void the_same_input_gives_the_same_words_and_the_same_record(void **state)
{
    struct work *work = *state;
    write_on_time(work, 210);
    write_words(work);
    struct ending first = replay_night(work, "first.db", NULL);
    struct ending second = replay_night(work, "second.db", NULL);
    assert_non_null(strstr(first.out, "MUSTER -> SEND"));
    assert_non_null(strstr(first.out, "KEEP SHUT"));
    assert_string_equal(first.out, second.out);
    const char *record = dump(work, "first.db");
    assert_true(strlen(record) > 50000);
    if (strcmp(record, dump(work, "second.db")) != 0)
        fail_msg("the records of two replays of the same input differ");
    assert_int_equal(scene_check_chain(work, "first.db"), scene_check_chain(work, "second.db"));
    scene_expect_caution(first.out);
}

/* --- whatever the order ----------------------------------------------------------------------------------------- */

enum {
    PERMUTATION_COUNT = 20,
    LATEST_MIN = 120,         /* the longest delay */
    ALL_THERE_AFTER_MIN = 10, /* after the last disturbed reading was observed */
    SETTLED_AFTER_MIN = 60,   /* the dwell of 30 minutes has run since, on readings that came on time */
    LOOK_MIN = 10
};

static unsigned draw(unsigned *seed, unsigned below)
{
    return (unsigned)rand_r(seed) % below;
}

/* What both sides have in common: from an hour before the start on, and on time after to_minute. */
static size_t rows_settling(int to_minute, size_t count, struct row rows[ROWS_MAX])
{
    for (int minute = to_minute + EVERY_MIN; minute <= to_minute + SETTLED_AFTER_MIN; minute += EVERY_MIN)
        rows[count++] = (struct row){minute, minute};
    return count;
}

/* Delayed by up to two hours, but all there ten minutes after the last was observed; a third twice; in any order. */
static size_t rows_disturbed(unsigned *seed, int to_minute, struct row rows[ROWS_MAX])
{
    size_t count = 0;
    for (int minute = -60; minute <= to_minute; minute += EVERY_MIN) {
        for (unsigned copies = draw(seed, 3) == 0 ? 2 : 1; copies > 0; copies--) {
            int received = minute + (int)draw(seed, LATEST_MIN);
            if (received > to_minute + ALL_THERE_AFTER_MIN)
                received = to_minute + ALL_THERE_AFTER_MIN;
            rows[count++] = (struct row){minute, received};
        }
    }
    count = rows_settling(to_minute, count, rows);
    for (size_t index = count - 1; index > 0; index--) {
        size_t other = draw(seed, (unsigned)index + 1);
        struct row row = rows[index];
        rows[index] = rows[other];
        rows[other] = row;
    }
    return count;
}

/* The query "the current view" of docs/store.md. */
static const char *current_view(struct work *work, const char *store)
{
    return scene_ask(
        work, store,
        "SELECT r.observed, r.source, r.value, r.unit, j.flag, j.use, j.reasons FROM reading r "
        "LEFT JOIN judgement j ON j.entry = (SELECT max(entry) FROM judgement WHERE reading = r.entry) "
        "WHERE r.gauge = 'orlin-scar' AND r.entry = (SELECT max(entry) FROM reading WHERE gauge = r.gauge "
        "AND source = r.source AND observed = r.observed) ORDER BY r.observed, r.source");
}

/* Members of every point in every cycle from a moment on. */
static const char *points_from(struct work *work, const char *store, int minute, const char *members)
{
    return scene_ask(work, store,
                     work_print(work,
                                "SELECT l.utc, json_extract(p.value, '$.id', %s) FROM ledger l "
                                "JOIN ledger_payload USING (entry), json_each(payload, '$.points') p "
                                "WHERE l.utc >= %lld ORDER BY l.entry, p.key",
                                members, (long long)scene_time(minute)));
}

struct outcome {
    const char *view, *forecast, *advice;
};

static struct outcome replay_rows(struct work *work, const char *name, int to_minute, size_t count,
                                  const struct row rows[])
{
    char until[WHEN_TEXT_SIZE];
    const char *store = work_print(work, "%s.db", name);
    const char *file = work_print(work, "%s.csv", name);
    work_write(work, file, readings_csv(work, count, rows));
    struct ending ending =
        work_run(work, "replay", "--readings", work_print(work, "orlin-scar=%s", file), "--store", store, "--until",
                 when_rfc3339_utc(scene_time(to_minute + SETTLED_AFTER_MIN + LOOK_MIN), until), NULL);
    if (ending.code != 0)
        fail_msg("exit %d: %s", ending.code, ending.err);
    return (struct outcome){
        current_view(work, store),
        points_from(work, store, to_minute + ALL_THERE_AFTER_MIN, "'$.marks', '$.peak_m', '$.measured_until'"),
        points_from(work, store, to_minute + SETTLED_AFTER_MIN, "'$.advice', '$.act_by', '$.blind'")};
}

static void expect_same(const char *what, unsigned permutation, const char *wanted, const char *found)
{
    if (strcmp(wanted, found) != 0)
        fail_msg("permutation %u, %s:\n%sinstead of\n%s", permutation, what, found, wanted);
}

/*
 * Readings without conflicting values, shuffled, doubled and delayed: once all of them are there, what is known and
 * what is forecast is the same in every cycle; the advice is, once its memory of what it had to say meanwhile, the
 * dwell of docs/decisions.md, has run out. The two moments: on the rise, the ford at SEND; on the fall, at LATE.
 */
static void once_all_has_arrived_the_order_of_arrival_does_not_matter(void **state)
{
    static const int to_minutes[] = {90, 240};
    struct work *work = *state;
    struct row rows[ROWS_MAX];
    struct outcome on_time[2];
    unsigned seed = (unsigned)time(NULL);
    print_message("seed %u\n", seed);
    scene_change_config(work, "\"every_min\": 5", "\"every_min\": 10");
    route_coarsely(work);
    for (size_t moment = 0; moment < 2; moment++) {
        size_t count = 0;
        for (int minute = -60; minute <= to_minutes[moment]; minute += EVERY_MIN)
            rows[count++] = (struct row){minute, minute};
        count = rows_settling(to_minutes[moment], count, rows);
        on_time[moment] = replay_rows(work, work_print(work, "on-time-%zu", moment), to_minutes[moment], count, rows);
    }
    assert_non_null(strstr(on_time[0].advice, "[\"tallowick-ford\",\"SEND\",\"2031-"));
    assert_non_null(strstr(on_time[1].advice, "[\"tallowick-ford\",\"LATE\""));
    for (unsigned permutation = 0; permutation < PERMUTATION_COUNT; permutation++) {
        size_t moment = permutation % 2;
        size_t count = rows_disturbed(&seed, to_minutes[moment], rows);
        struct outcome outcome =
            replay_rows(work, work_print(work, "disturbed-%u", permutation), to_minutes[moment], count, rows);
        expect_same("the current view", permutation, on_time[moment].view, outcome.view);
        expect_same("the forecast", permutation, on_time[moment].forecast, outcome.forecast);
        expect_same("the advice", permutation, on_time[moment].advice, outcome.advice);
    }
}

/* --- as it was live --------------------------------------------------------------------------------------------- */

/* Decisions as the store has them: when, where, what, by when. */
static const char *decisions(struct work *work, const char *store)
{
    return scene_ask(
        work, store,
        "SELECT l.utc, a.point, a.level, a.is_blind, a.near_sides_only, a.act_by, a.told_act_by, a.reasons "
        "FROM advice a JOIN ledger l USING (entry) ORDER BY l.utc, a.point");
}

static const char *texts(struct work *work, const char *store)
{
    return scene_ask(work, store, "SELECT made, number, point, short_text FROM outbox ORDER BY entry");
}

static void say_at(struct work *work, int minute, const char *kind, const char *subject, const char *what)
{
    daemon_advance(work, scene_time(minute)); /* a minute of its own: live, a reading and a word are two cycles */
    const char *both = strcmp(what, "SHUT") == 0 ? "--both-sides" : NULL;
    assert_int_equal(work_run(work, "say", "--by", "roads foreman", kind, subject, what, both, NULL).code, 0);
}

/* A rise with a silence, a reading by hand, a late batch, and people's words. */
static void play_live(struct work *work)
{
    scene_start(work);
    scene_live(work, 5, 105);
    for (int minute = 110; minute <= 130; minute += 5)
        daemon_advance(work, scene_time(minute));
    say_at(work, 133, "reading", "orlin-scar", "1.99");
    say_at(work, 134, "road", "tallowick-ford", "CREW CALLED");
    scene_drop_past(work, 120, 135);
    scene_live(work, 140, 165);
    say_at(work, 168, "road", "tallowick-ford", "SHUT");
    scene_live(work, 170, 240);
    assert_int_equal(daemon_end(work, SIGTERM, NULL), 0);
}

static void from_a_store_it_decides_as_the_daemon_did(void **state)
{
    struct work *work = *state;
    play_live(work);
    struct ending ending = work_run(work, "replay", "--from", "history.db", "--between", "2031-02-14T17:00:00Z",
                                    "2031-02-14T21:00:01Z", "--store", "replayed.db", NULL);
    if (ending.code != 0)
        fail_msg("exit %d: %s", ending.code, ending.err);
    const char *live = decisions(work, "history.db");
    const char *replayed = decisions(work, "replayed.db");
    assert_non_null(strstr(live, "tallowick-ford|KEEP SHUT"));
    assert_non_null(strstr(live, "tallowick-ford|MUSTER|1"));
    if (strcmp(live, replayed) != 0)
        fail_msg("live:\n%sreplayed:\n%s", live, replayed);
    assert_string_equal(texts(work, "history.db"), texts(work, "replayed.db"));
    assert_string_equal(current_view(work, "history.db"), current_view(work, "replayed.db"));
    scene_check_chain(work, "replayed.db");
}

/* Until minute 100 the replay knows what the daemon knew then, not what came later. */
static void between_two_times_it_takes_what_was_received_between_them(void **state)
{
    struct work *work = *state;
    route_coarsely(work);
    play_live(work);
    struct ending ending = work_run(work, "replay", "--from", "history.db", "--between", "2031-02-14T17:00:00Z",
                                    "2031-02-14T18:40:00Z", "--store", "replayed.db", NULL);
    assert_int_equal(ending.code, 0);
    assert_string_equal(scene_ask(work, "replayed.db", "SELECT max(observed) FROM reading"),
                        work_print(work, "%lld\n", (long long)scene_time(90)));
    assert_string_equal(scene_ask(work, "replayed.db", "SELECT count(*) FROM word"), "0\n");
}

/* --- what it prints, and what it refuses ------------------------------------------------------------------------ */

static void as_json_every_change_of_decision_is_one_object_a_line(void **state)
{
    struct work *work = *state;
    size_t count = 0;
    route_coarsely(work);
    write_on_time(work, 300);
    write_words(work);
    struct ending ending = replay_night(work, "out.db", "--json");
    char *rest = work_print(work, "%s", ending.out);
    const char *last_send = "";
    for (char *line; (line = strsep(&rest, "\n")) != NULL;) {
        if (line[0] == '\0')
            continue;
        cJSON *decision = cJSON_Parse(line);
        if (decision == NULL)
            fail_msg("no JSON: %s", line);
        assert_string_equal(scene_member(work, decision, "schema"), "forewater.decision.1");
        const char *at = scene_member(work, decision, "at");
        assert_int_equal(strlen(at), strlen("2031-02-14T19:30:00Z"));
        if (strcmp(scene_member(work, decision, "advice"), "SEND") == 0 && last_send[0] == '\0')
            last_send = work_print(work, "%s %s", at, scene_member(work, decision, "point"));
        cJSON_Delete(decision);
        count++;
    }
    assert_string_equal(last_send, "2031-02-14T19:30:00Z tallowick-ford");
    assert_true(count >= 8);
    assert_string_equal(ending.err, "");
}

static void a_store_that_exists_is_never_written_over(void **state)
{
    struct work *work = *state;
    size_t before_length = 0, after_length = 0;
    route_coarsely(work);
    write_on_time(work, 60);
    write_words(work);
    replay_night(work, "out.db", NULL);
    const char *before = work_read_bytes(work, "out.db", &before_length);
    struct ending ending =
        work_run(work, "replay", "--readings", "orlin-scar=readings.csv", "--store", "out.db", NULL);
    assert_int_equal(ending.code, 64);
    assert_non_null(strstr(ending.err, "out.db exists already; a replay makes a new file of its own"));
    const char *after = work_read_bytes(work, "out.db", &after_length);
    assert_int_equal(before_length, after_length);
    assert_memory_equal(before, after, before_length);
}

static void a_file_that_cannot_be_read_is_named_with_its_line(void **state)
{
    struct work *work = *state;
    static const struct {
        const char *option, *file, *text, *says;
        int code;
    } rows[] = {
        {"--readings", "orlin-scar=r.csv", "observed,stage_m\n2031-02-14T17:00:00Z,1.02\n2031-02-14T17:15:00Z,high\n",
         "r.csv:3", 65},
        {"--readings", "orlin-scar=r.csv", "observed,stage_m\n2031-02-14T17:00:00Z,1.02\nnoon,1.05\n", "r.csv:3", 65},
        {"--readings", "orlin-scar=r.csv", "at,level\n2031-02-14T17:00:00Z,1.02\n", "r.csv:1", 65},
        {"--readings", "orlin-scar=r.csv", "observed,stage_m,source\n2031-02-14T17:00:00Z,1.02,7\n", "r.csv:2", 65},
        {"--readings", "upper-scar=r.csv", "observed,stage_m\n", "'upper-scar' is not a gauge", 64},
        {"--readings", "r.csv", "observed,stage_m\n", "r.csv", 64},
        {"--words", "r.csv", "time,words\n2031-02-14T17:00:00Z,road,tallowick-ford,CLOSED,--by,x\n", "r.csv:2", 65},
        {"--words", "r.csv", "time,words\n2031-02-14T17:00:00Z,road,tallowick-ford,OPEN\n", "--by is missing", 65},
        {"--truth", "tallowick-ford=r.csv", "time,stage_m\n2031-02-14T17:10:00Z,1.1\n2031-02-14T17:00:00Z,1.0\n",
         "r.csv:3", 65},
        {"--truth", "low-bridge=r.csv", "time,stage_m\n", "'low-bridge' is not a point", 64},
    };
    route_coarsely(work);
    write_on_time(work, 0);
    for (size_t index = 0; index < sizeof rows / sizeof *rows; index++) {
        work_write(work, "r.csv", rows[index].text);
        struct ending ending = work_run(work, "replay", "--readings", "orlin-scar=readings.csv", rows[index].option,
                                        rows[index].file, "--store", "out.db", NULL);
        if (ending.code != rows[index].code || strstr(ending.err, rows[index].says) == NULL)
            fail_msg("row %zu: exit %d: '%s' does not say '%s'", index, ending.code, ending.err, rows[index].says);
        assert_false(work_has(work, "out.db"));
    }
    struct ending missing =
        work_run(work, "replay", "--readings", "orlin-scar=nowhere.csv", "--store", "out.db", NULL);
    assert_true(missing.code != 0);
    assert_non_null(strstr(missing.err, "nowhere.csv"));
    struct ending nothing = work_run(work, "replay", "--store", "out.db", NULL);
    assert_int_equal(nothing.code, 64);
    assert_non_null(strstr(nothing.err, "nothing to replay"));
}

/* The margin of docs/demo.md: true deck wet, less the first SEND, less the crew's time and margin (55 and 15 min). */
static void against_the_truth_it_says_how_much_was_in_hand(void **state)
{
    struct work *work = *state;
    write_on_time(work, 300);
    work_write(work, "truth.csv",
               "time,stage_m\n2031-02-14T20:00:00Z,1.00\n2031-02-14T21:00:00Z,1.50\n2031-02-14T21:10:00Z,1.60\n");
    struct ending ending = work_run(work, "replay", "--readings", "orlin-scar=readings.csv", "--truth",
                                    "tallowick-ford=truth.csv", "--store", "out.db", NULL);
    assert_int_equal(ending.code, 0);
    /* SEND at 20:30; the deck at 1.55 m is wet at 22:05: 95 minutes, of which 70 are needed */
    assert_non_null(strstr(ending.out, "Tallowick Ford       20:30"));
    assert_non_null(strstr(ending.out, " 22:05     +25 min"));
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        SCENE_TEST(the_same_input_gives_the_same_words_and_the_same_record),
        SCENE_TEST(once_all_has_arrived_the_order_of_arrival_does_not_matter),
        SCENE_TEST(from_a_store_it_decides_as_the_daemon_did),
        SCENE_TEST(between_two_times_it_takes_what_was_received_between_them),
        SCENE_TEST(as_json_every_change_of_decision_is_one_object_a_line),
        SCENE_TEST(a_store_that_exists_is_never_written_over),
        SCENE_TEST(a_file_that_cannot_be_read_is_named_with_its_line),
        SCENE_TEST(against_the_truth_it_says_how_much_was_in_hand),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
