/* SPDX-License-Identifier: MIT */
#include "daemon/feed/csv_readings.h"

#include <locale.h>
#include <math.h>

#include "daemon/feed/folder_feed.h"
#include "tests/daemon/feed_bench.h"

static enum fw_status read_text(struct bench *bench, size_t gauge, const char *text, size_t length, size_t *bad_count)
{
    *bad_count = 0;
    return folder_feed_read_csv(&bench->settings, gauge, 0, "drop/orlin-scar/x.csv", text, length,
                                BENCH_RECEIVED_UTC_S, &bench->news, bad_count, &bench->error);
}

static void a_reading_has_its_time_its_value_as_written_and_in_metres(void **state)
{
    struct bench *bench = *state;
    static const char text[] = "time,stage_m\n2031-02-14T22:15:00+01:00,2.310\n";
    size_t bad_count;
    assert_int_equal(read_text(bench, 0, text, strlen(text), &bad_count), FW_OK);
    assert_int_equal(bench->news.reading_count, 1);
    const struct reading *reading = &bench->news.readings[0];
    assert_int_equal(reading->observed_utc_s, BENCH_FIRST_UTC_S);
    assert_true(reading->value == 2.31 && reading->value_si == 2.31);
    assert_string_equal(reading->unit, "m");
    assert_int_equal(reading->gauge, 0);
    assert_int_equal(reading->source, 0);
    assert_int_equal(reading->received_utc_s, BENCH_RECEIVED_UTC_S);
    assert_int_equal(reading->entry, 0);
    assert_string_equal(reading->by, "");
}

static void files_as_loggers_write_them_are_read(void **state)
{
    struct bench *bench = *state;
    static const struct {
        const char *file, *shows;
        enum fw_status status;
        size_t readings, bad_lines;
        double last;
        const char *said; /* in a note, or in the error when refused */
    } cases[] = {
        {"plain.csv", "as simple as can be", FW_OK, 6, 0, 1.71, NULL},
        {"half_line.csv", "the last line has no end", FW_OK, 7, 0, 1.7, NULL},
        {"semicolon.csv", "semicolons, CRLF, a decimal comma in a column not read", FW_OK, 6, 0, 1.71, NULL},
        {"tab.csv", "tabs, commas in a column not read", FW_OK, 6, 0, 1.71, NULL},
        {"bom_crlf.csv", "byte order mark and CRLF", FW_OK, 6, 0, 1.71, NULL},
        {"cr_only.csv", "CR alone", FW_OK, 6, 0, 1.71, NULL},
        {"latin1.csv", "Latin-1 in a column not read", FW_OK, 6, 0, 1.71, NULL},
        {"quoted.csv", "quotes, a quote never closed, blanks, the header again", FW_OK, 3, 1, 1.60,
         "x.csv:3: has 2 columns; expected 'stage_m' in column 3"},
        {"bad_among_good.csv", "bad lines among good ones", FW_OK, 4, 10, 1.71,
         "drop/orlin-scar/x.csv:7: stage_m: '1,23' is not a number with a decimal point"},
        {"decimal_comma.csv", "decimal comma where a point is expected", FW_BAD_INPUT, 0, 0, 0.0,
         "x.csv: none of 6 lines could be read; the first: drop/orlin-scar/x.csv:2: stage_m: '1,22' is not a number"},
        {"all_bad.csv", "no line can be read", FW_BAD_INPUT, 0, 0, 0.0, "none of 2 lines could be read"},
        {"no_header.csv", "no header line", FW_BAD_INPUT, 0, 0, 0.0,
         "x.csv:1: no column 'time' in the header line '2031-02-14T20:30:00Z,1.22'; expected columns 'time' and "
         "'stage_m'"},
        {"wrong_columns.csv", "another name for the value", FW_BAD_INPUT, 0, 0, 0.0, "no column 'stage_m'"},
        {"column_twice.csv", "two columns of one name", FW_BAD_INPUT, 0, 0, 0.0, "more than one column 'stage_m'"},
        {"header_only.csv", "no readings", FW_BAD_INPUT, 0, 0, 0.0, "has a header and no readings"},
        {"empty.csv", "no bytes", FW_BAD_INPUT, 0, 0, 0.0, "is empty; expected a header line"},
        {"blank.csv", "blanks and an old end-of-file mark", FW_BAD_INPUT, 0, 0, 0.0, "is empty"},
        {"binary.csv", "a zero byte", FW_BAD_INPUT, 0, 0, 0.0, "has a zero byte: binary"},
        {"utf16.csv", "UTF-16", FW_BAD_INPUT, 0, 0, 0.0, "is UTF-16 text; expected UTF-8"},
    };
    for (size_t i = 0; i < sizeof cases / sizeof cases[0]; i++) {
        char path[256];
        size_t length, bad_count;
        snprintf(path, sizeof path, "%s/tests/data/feed/%s", FW_SOURCE_DIR, cases[i].file);
        const char *text = bench_text(bench, path, &length);
        news_clear(&bench->news);
        enum fw_status status = read_text(bench, 0, text, length, &bad_count);
        if (status != cases[i].status || bench->news.reading_count != cases[i].readings ||
            bad_count != cases[i].bad_lines)
            fail_msg("%s (%s): status %d, %zu readings, %zu bad lines; %s", cases[i].file, cases[i].shows,
                     (int)status, bench->news.reading_count, bad_count, bench->error.text);
        if (cases[i].readings > 0)
            assert_true(bench->news.readings[cases[i].readings - 1].value == cases[i].last);
        if (cases[i].said != NULL && status == FW_OK)
            bench_expect_note(&bench->news, cases[i].said);
        else if (cases[i].said != NULL && strstr(bench->error.text, cases[i].said) == NULL)
            fail_msg("%s: '%s' does not say '%s'", cases[i].file, bench->error.text, cases[i].said);
    }
}

static void every_bad_line_is_told_by_its_place_its_value_and_what_was_expected(void **state)
{
    struct bench *bench = *state;
    static const char *const said[] = {
        "x.csv:3: stage_m: '' is not a number with a decimal point",
        "x.csv:6: time: 'yesterday evening' is not a time: expected RFC 3339",
        "x.csv:7: stage_m: '1,23' is not a number with a decimal point",
        "x.csv:9: time: '2031-02-30T21:15:00Z' is not on the calendar",
        "x.csv:10: time: '2031-02-14T21:17:00' has no offset from UTC",
        "x.csv:11: has 1 columns; expected 'stage_m' in column 2",
        "x.csv:12: stage_m: 'nan' is not a number",
        "x.csv:13: stage_m: '0x1p3' is not a number",
        "x.csv:14: stage_m: '1e999' is not a number",
        "x.csv:15: has 1 columns; expected 'stage_m' in column 2", /* a quote never closed */
    };
    size_t length, bad_count;
    char path[256];
    snprintf(path, sizeof path, "%s/tests/data/feed/bad_among_good.csv", FW_SOURCE_DIR);
    const char *text = bench_text(bench, path, &length);
    assert_int_equal(read_text(bench, 0, text, length, &bad_count), FW_OK);
    for (size_t i = 0; i < sizeof said / sizeof said[0]; i++)
        bench_expect_note(&bench->news, said[i]);
    /* 10 of 14 lines is more than a fifth: a fault of its own */
    bench_expect_note(&bench->news, "10 of 14 lines could not be read; the others are kept");
}

static void a_fifth_of_bad_lines_is_not_yet_a_fault_of_its_own(void **state)
{
    struct bench *bench = *state;
    static const char four_good_one_bad[] = "time,stage_m\n2031-02-14T21:15Z,1.60\n2031-02-14T21:16Z,1.61\n"
                                            "2031-02-14T21:17Z,1.62\n2031-02-14T21:18Z,1.63\n2031-02-14T21:19Z,-\n";
    static const char one_more_bad[] = "2031-02-14T21:20Z,-\n";
    char text[512];
    size_t bad_count;
    assert_int_equal(read_text(bench, 0, four_good_one_bad, strlen(four_good_one_bad), &bad_count), FW_OK);
    assert_int_equal(bad_count, 1);
    assert_int_equal(bench->news.note_count, 1);
    snprintf(text, sizeof text, "%s%s", four_good_one_bad, one_more_bad);
    assert_int_equal(read_text(bench, 0, text, strlen(text), &bad_count), FW_OK);
    bench_expect_note(&bench->news, "2 of 6 lines could not be read");
}

static void the_first_twenty_bad_lines_are_noted_and_the_others_counted(void **state)
{
    struct bench *bench = *state;
    struct text text = {0};
    size_t bad_count;
    text_add(&text, "time,stage_m\n2031-02-14T21:15:00Z,1.60\n");
    for (int i = 0; i < 57; i++)
        text_add(&text, "2031-02-14T21:15:00Z,none%d\n", i);
    assert_int_equal(read_text(bench, 0, text.bytes, text.length, &bad_count), FW_OK);
    assert_int_equal(bad_count, 57);
    bench_expect_note(&bench->news, "x.csv:22: stage_m: 'none19'");
    assert_false(bench_has_note(&bench->news, "none20"));
    bench_expect_note(&bench->news, "x.csv: 37 more lines could not be read");
    assert_int_equal(bench->news.note_count, 22);
    text_clear(&text);
}

static void units_are_changed_once_where_they_enter(void **state)
{
    struct bench *bench = *state;
    static const struct {
        size_t gauge;
        const char *unit, *written;
        double value, value_si;
    } cases[] = {
        {0, "m", "2.31", 2.31, 2.31},     {0, "cm", "231.5", 231.5, 2.315}, {0, "mm", "2310", 2310.0, 2.31},
        {0, "ft", "7.6", 7.6, 2.31648}, /* international foot: 0.3048 m exactly (since 1959) */
        {0, NULL, "-0.04", -0.04, -0.04}, {1, "m3/s", "24.7", 24.7, 24.7},  {1, "l/s", "850", 850.0, 0.85},
        {1, NULL, "+3.5e1", 35.0, 35.0},
    };
    for (size_t i = 0; i < sizeof cases / sizeof cases[0]; i++) {
        char text[128];
        size_t bad_count;
        bench->gauges[cases[i].gauge].feeds[0].unit = cases[i].unit;
        news_clear(&bench->news);
        snprintf(text, sizeof text, "time,%s\n2031-02-14T21:15Z,%s\n", cases[i].gauge == 0 ? "stage_m" : "flow",
                 cases[i].written);
        assert_int_equal(read_text(bench, cases[i].gauge, text, strlen(text), &bad_count), FW_OK);
        assert_true(bench->news.readings[0].value == cases[i].value);
        /* one rounding of the product or quotient */
        assert_true(fabs(bench->news.readings[0].value_si - cases[i].value_si) <= 1e-15 * fabs(cases[i].value_si));
        assert_string_equal(bench->news.readings[0].unit, cases[i].unit != NULL ? cases[i].unit
                                                          : cases[i].gauge == 0 ? "m"
                                                                                : "m3/s");
    }
}

static void a_unit_of_another_quantity_is_refused(void **state)
{
    struct bench *bench = *state;
    static const char text[] = "time,stage_m\n2031-02-14T21:15Z,2.31\n";
    size_t bad_count;
    bench->feeds[0].unit = "l/s";
    assert_int_equal(read_text(bench, 0, text, strlen(text), &bad_count), FW_BAD_INPUT);
    assert_non_null(
        strstr(bench->error.text, "unit 'l/s' does not fit gauge 'orlin-scar'; expected m, cm, mm or ft"));
}

static void times_without_an_offset_are_read_in_the_zone_of_the_feed(void **state)
{
    struct bench *bench = *state;
    static const char text[] = "time,stage_m\n2031-02-14 22:15,2.31\n";
    size_t bad_count;
    assert_int_equal(read_text(bench, 0, text, strlen(text), &bad_count), FW_BAD_INPUT);
    bench->feeds[0].has_zone = true;
    bench->feeds[0].zone = (struct when_zone){.is_fixed = true, .offset_s = 3600};
    assert_int_equal(read_text(bench, 0, text, strlen(text), &bad_count), FW_OK);
    assert_int_equal(bench->news.readings[0].observed_utc_s, BENCH_FIRST_UTC_S);
}

static void a_decimal_point_is_a_point_whatever_the_locale(void **state)
{
    struct bench *bench = *state;
    static const char *const locales[] = {"de_DE.UTF-8", "fr_FR.UTF-8", "de_DE", "C.UTF-8", "C"};
    static const char text[] =
        "time,stage_m\n2031-02-14T21:15Z,2.31\n2031-02-14T21:20Z,2,31\n2031-02-14T21:25Z,\"2,31\"\n";
    size_t bad_count;
    for (size_t i = 0; i < sizeof locales / sizeof locales[0]; i++) {
        if (setlocale(LC_ALL, locales[i]) == NULL)
            continue;
        news_clear(&bench->news);
        assert_int_equal(read_text(bench, 0, text, strlen(text), &bad_count), FW_OK);
        assert_true(bench->news.readings[0].value == 2.31);
        assert_true(bench->news.readings[1].value == 2.0); /* "2" and a third column */
        assert_int_equal(bad_count, 1);
    }
    setlocale(LC_ALL, "C");
}

static void a_line_of_five_thousand_bytes_costs_only_itself(void **state)
{
    struct bench *bench = *state;
    char long_line[5001];
    struct text text = {0};
    size_t bad_count;
    memset(long_line, '1', sizeof long_line);
    long_line[5000] = '\0';
    text_add(&text, "time,stage_m\n2031-02-14T21:15Z,1.60\n%s\n2031-02-14T21:20Z,1.65\n", long_line);
    assert_int_equal(read_text(bench, 0, text.bytes, text.length, &bad_count), FW_OK);
    assert_int_equal(bad_count, 1);
    assert_int_equal(bench->news.reading_count, 2);
    bench_expect_note(&bench->news, "x.csv:3: has 5000 bytes; expected at most 4096");
    text_clear(&text);
}

static void a_header_of_five_thousand_bytes_is_refused(void **state)
{
    struct bench *bench = *state;
    struct text text = {0};
    size_t bad_count;
    text_add(&text, "time,stage_m,%05000d\n2031-02-14T21:15Z,1.60,0\n", 0);
    assert_int_equal(read_text(bench, 0, text.bytes, text.length, &bad_count), FW_BAD_INPUT);
    assert_non_null(strstr(bench->error.text, "x.csv:1: the header line has 5013 bytes"));
    text_clear(&text);
}

static void more_than_two_hundred_thousand_lines_are_refused(void **state)
{
    struct bench *bench = *state;
    struct text text = {0};
    size_t bad_count;
    text_add(&text, "time,stage_m\n2031-02-14T21:15Z,1.60\n");
    for (int i = 0; i < 199998; i++)
        text_add_bytes(&text, "\n", 1);
    assert_int_equal(read_text(bench, 0, text.bytes, text.length, &bad_count), FW_OK);
    text_add_bytes(&text, "\n", 1);
    assert_int_equal(read_text(bench, 0, text.bytes, text.length, &bad_count), FW_BAD_INPUT);
    assert_non_null(strstr(bench->error.text, "has 200001 lines; expected at most 200000"));
    text_clear(&text);
}

/* Whatever is cut off, no reading is made up: what is read is a beginning of what was written, but for the last
 * value, cut short. */
static void a_file_cut_at_any_byte_gives_the_readings_before_the_cut(void **state)
{
    struct bench *bench = *state;
    char path[256], text[1024];
    size_t length, bad_count;
    snprintf(path, sizeof path, "%s/tests/data/feed/semicolon.csv", FW_SOURCE_DIR);
    const char *whole = bench_text(bench, path, &length);
    assert_true(length < sizeof text);
    memcpy(text, whole, length);
    assert_int_equal(read_text(bench, 0, text, length, &bad_count), FW_OK);
    struct news all = bench->news;
    bench->news = (struct news){0};
    for (size_t cut = 0; cut < length; cut++) {
        enum fw_status status = read_text(bench, 0, text, cut, &bad_count);
        size_t count = bench->news.reading_count;
        size_t line_count = 0;
        for (size_t i = 0; i < cut; i++)
            line_count += text[i] == '\n';
        assert_true(status == (count > 0 ? FW_OK : FW_BAD_INPUT));
        assert_true(line_count == 0 || count == line_count - 1 || count == line_count);
        for (size_t i = 0; i < count; i++) {
            assert_int_equal(bench->news.readings[i].observed_utc_s, all.readings[i].observed_utc_s);
            if (i + 1 < line_count)
                assert_true(bench->news.readings[i].value == all.readings[i].value);
        }
        news_clear(&bench->news);
    }
    news_clear(&all);
}

#define WITH_BENCH(test) cmocka_unit_test_setup_teardown(test, bench_set_up, bench_tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        WITH_BENCH(a_reading_has_its_time_its_value_as_written_and_in_metres),
        WITH_BENCH(files_as_loggers_write_them_are_read),
        WITH_BENCH(every_bad_line_is_told_by_its_place_its_value_and_what_was_expected),
        WITH_BENCH(a_fifth_of_bad_lines_is_not_yet_a_fault_of_its_own),
        WITH_BENCH(the_first_twenty_bad_lines_are_noted_and_the_others_counted),
        WITH_BENCH(units_are_changed_once_where_they_enter),
        WITH_BENCH(a_unit_of_another_quantity_is_refused),
        WITH_BENCH(times_without_an_offset_are_read_in_the_zone_of_the_feed),
        WITH_BENCH(a_decimal_point_is_a_point_whatever_the_locale),
        WITH_BENCH(a_line_of_five_thousand_bytes_costs_only_itself),
        WITH_BENCH(a_header_of_five_thousand_bytes_is_refused),
        WITH_BENCH(more_than_two_hundred_thousand_lines_are_refused),
        WITH_BENCH(a_file_cut_at_any_byte_gives_the_readings_before_the_cut),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
