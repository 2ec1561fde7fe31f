/* SPDX-License-Identifier: MIT */
/* `forewater export`, and `--known-at`: the record as it stands, and as it stood. */
#include "tests/scenarios/river_scene.h"

static void expect_in(const char *text, const char *wanted)
{
    if (strstr(text, wanted) == NULL)
        fail_msg("'%s' is not in: %s", wanted, text);
}

static size_t line_count(const char *text)
{
    size_t count = 0;
    for (; *text != '\0'; text++)
        count += *text == '\n';
    return count;
}

static const char *exported(struct work *work, const char *known_at)
{
    struct ending ending =
        known_at == NULL ? work_run(work, "export", NULL) : work_run(work, "export", "--known-at", known_at, NULL);
    if (ending.code != 0)
        fail_msg("export: %d: %s", ending.code, ending.err);
    assert_string_equal(ending.err, "");
    return ending.out;
}

static void every_reading_is_there_with_its_worth(void **state)
{
    struct work *work = *state;
    scene_start(work);
    scene_live(work, 5, 30);
    assert_int_equal(work_run(work, "say", "reading", "orlin-scar", "104.5", "--unit", "cm", "--by",
                              "technician, \"upper\" hut", NULL)
                         .code,
                     0);
    const char *text = exported(work, NULL);
    expect_in(text, "gauge,observed,value,unit,source,received,by,flag,use,reasons\n");
    /* the two newest, whole: read and received at once */
    expect_in(text, "\norlin-scar,2031-02-14T17:15:00Z,1.05,m,0,2031-02-14T17:15:00Z,,1,use,0\n");
    expect_in(text, "\norlin-scar,2031-02-14T17:30:00Z,104.5,cm,hand,2031-02-14T17:30:00Z,"
                    "\"technician, \"\"upper\"\" hut\",1,use,1024\n");
    /* quarters from -6 h to +30 min, the hand reading, and the header */
    assert_int_equal(line_count(text), 24 + 1 + 2 + 1 + 1);
    assert_int_equal(daemon_end(work, SIGTERM, NULL), 0);
    assert_string_equal(exported(work, NULL), text); /* without a daemon the same */
}

static void what_is_asked_for_is_what_comes(void **state)
{
    struct work *work = *state;
    scene_start(work);
    struct ending some = work_run(work, "export", "--gauge", "orlin-scar", "--from", "2031-02-14T17:00", "--to",
                                  "2031-02-14T16:45Z", NULL);
    assert_int_equal(some.code, 0);
    assert_int_equal(line_count(some.out), 1 + 3); /* 16:00 16:15 16:30 UTC: the first named, the last not */
    expect_in(some.out, "\norlin-scar,2031-02-14T16:00:00Z,");
    struct ending none = work_run(work, "export", "--from", "2032-01-01T00:00:00Z", NULL);
    assert_int_equal(none.code, 0);
    assert_int_equal(line_count(none.out), 1);
    struct ending by_file =
        work_run_bare(work, "export", "--store", work_print(work, "%s/history.db", work->folder), NULL);
    assert_int_equal(by_file.code, 0);
    assert_string_equal(by_file.out, exported(work, NULL));
    assert_int_equal(daemon_end(work, SIGTERM, NULL), 0);
}

static void ten_thousand_corrections_later_the_past_is_the_same_byte_for_byte(void **state)
{
    struct work *work = *state;
    char time[WHEN_TEXT_SIZE];
    scene_start(work);
    scene_live(work, 5, 90);
    const char *then = when_rfc3339_utc(scene_time(90), time);
    const char *archived = work_print(work, "%s", exported(work, NULL));
    const char *picture = work_run(work, "status", "--json", NULL).out;
    assert_string_equal(exported(work, then), archived);

    char *rows = NULL;
    size_t length = 0;
    FILE *file = open_memstream(&rows, &length);
    assert_non_null(file);
    fprintf(file, "time,stage_m\n");
    for (int row = 0; row < 10000; row++)
        fprintf(file, "%s,%.3f\n", when_rfc3339_utc(scene_time(-360 + 15 * (row % 31)), time),
                1.0 + 0.001 * (row % 67));
    assert_int_equal(fclose(file), 0);
    scene_drop(work, "corrections.csv", rows);
    free(rows);
    daemon_advance(work, scene_time(95));

    assert_true(scene_ask_number(work, "SELECT count(*) FROM reading") > 10000);
    assert_string_not_equal(exported(work, NULL), archived);
    then = when_rfc3339_utc(scene_time(90), time);
    assert_string_equal(exported(work, then), archived);
    long entry = scene_ask_number(
        work, work_print(work, "SELECT max(entry) FROM ledger WHERE utc <= %lld", (long long)scene_time(90)));
    assert_string_equal(exported(work, work_print(work, "%ld", entry)), archived);
    assert_string_equal(work_run(work, "status", "--json", "--known-at", then, NULL).out, picture);

    struct ending every = work_run(work, "export", "--revisions", NULL);
    assert_int_equal(every.code, 0);
    assert_int_equal(scene_ask_number(work, "SELECT count(*) + 1 FROM reading"), line_count(every.out));
    assert_int_equal(daemon_end(work, SIGTERM, NULL), 0);
}

static void a_picture_of_the_past_says_that_it_is_one(void **state)
{
    struct work *work = *state;
    scene_start(work);
    scene_live(work, 5, 30);
    struct ending past = work_run(work, "status", "--known-at", "2031-02-14T18:11", NULL);
    assert_int_equal(past.code, 0);
    expect_in(past.out, "picture of 2031-02-14T18:10:00+01:00  AS KNOWN THEN, not the newest");
    scene_expect_caution(past.out);
    assert_int_equal(daemon_end(work, SIGTERM, NULL), 0);
}

static void what_cannot_be_answered_says_why(void **state)
{
    struct work *work = *state;
    static const struct {
        const char *arguments[4];
        int code;
        const char *says;
    } cases[] = {
        {{"export", "--known-at", "yesterday"}, 64, "--known-at: 'yesterday'"},
        {{"export", "--known-at", "99999999999999999999"}, 64, "entry 99999999999999999999 is too large"},
        {{"export", "--known-at", "2031-02-14T10:00"}, 69, "nothing had been recorded by then"},
        {{"status", "--known-at", "2031-02-14T10:00"}, 69, "nothing had been recorded by then"},
        {{"status", "--known-at", "1"}, 69, "holds no picture of that time"},
        {{"export", "--gauge", "orlin-scarr"}, 64, "'orlin-scarr' is not a gauge of"},
        {{"export", "--from", "noon"}, 64, "--from: 'noon'"},
        {{"export", "--to", "2031-02-30T00:00Z"}, 64, "--to: '2031-02-30T00:00Z'"},
        {{"export", "now"}, 64, "export: 'now' is not expected here"},
    };
    scene_start(work);
    for (size_t index = 0; index < sizeof cases / sizeof *cases; index++) {
        const char *const *argument = cases[index].arguments;
        struct ending ending = work_run(work, argument[0], argument[1], argument[2], NULL);
        if (ending.code != cases[index].code)
            fail_msg("%s %s: %d: %s", argument[0], argument[1], ending.code, ending.err);
        expect_in(ending.err, cases[index].says);
        assert_string_equal(ending.out, "");
    }
    struct ending nowhere = work_run_bare(work, "export", "--store", "nowhere.db", NULL);
    assert_int_equal(nowhere.code, 69);
    expect_in(nowhere.err, "nowhere.db: there is no store");
    struct ending both = work_run(work, "export", "--store", "history.db", NULL);
    assert_int_equal(both.code, 64);
    expect_in(both.err, "--config or --store, not both");
    assert_int_equal(daemon_end(work, SIGTERM, NULL), 0);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        SCENE_TEST(every_reading_is_there_with_its_worth),
        SCENE_TEST(what_is_asked_for_is_what_comes),
        SCENE_TEST(ten_thousand_corrections_later_the_past_is_the_same_byte_for_byte),
        SCENE_TEST(a_picture_of_the_past_says_that_it_is_one),
        SCENE_TEST(what_cannot_be_answered_says_why),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
