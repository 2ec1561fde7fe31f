/* SPDX-License-Identifier: MIT */
#include "daemon/when.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stdlib.h>
#include <string.h>
#include <time.h>

#include <cmocka.h>

static int64_t parsed(const char *text, const struct when_zone *zone)
{
    struct fw_error error = {0};
    int64_t utc_s = INT64_MIN;
    if (when_parse(text, zone, &utc_s, &error) != FW_OK)
        fail_msg("'%s': %s", text, error.text);
    return utc_s;
}

static struct when_zone zone_of(const char *text)
{
    struct fw_error error = {0};
    struct when_zone zone = {0};
    if (when_zone_parse(text, &zone, &error) != FW_OK)
        fail_msg("'%s': %s", text, error.text);
    return zone;
}

/* The five examples of RFC 3339 section 5.8; seconds since 1970 by `date -u -d ... +%s` (GNU coreutils). */
static void the_examples_of_rfc_3339_are_read(void **state)
{
    (void)state;
    assert_int_equal(parsed("1985-04-12T23:20:50.52Z", NULL), 482196050);
    assert_int_equal(parsed("1996-12-19T16:39:57-08:00", NULL), 851042397);
    assert_int_equal(parsed("1990-12-31T23:59:60Z", NULL), 662688000);
    assert_int_equal(parsed("1990-12-31T15:59:60-08:00", NULL), 662688000);
    assert_int_equal(parsed("1937-01-01T12:00:27.87+00:20", NULL), -1041337173);
}

static void a_blank_a_small_t_and_missing_seconds_are_accepted(void **state)
{
    (void)state;
    int64_t moment = parsed("2031-02-14T21:15:00Z", NULL);
    assert_int_equal(parsed("2031-02-14 21:15:00Z", NULL), moment);
    assert_int_equal(parsed("2031-02-14t21:15:00z", NULL), moment);
    assert_int_equal(parsed("2031-02-14T21:15Z", NULL), moment);
    assert_int_equal(parsed("2031-02-14T21:15:00.999999Z", NULL), moment);
    assert_int_equal(parsed("2031-02-14T22:15+01:00", NULL), moment);
    assert_int_equal(parsed("2031-02-14T21:15:00-00:00", NULL), moment);
}

static void whatever_is_no_time_is_refused_with_what_was_expected(void **state)
{
    (void)state;
    static const char *const cases[] = {
        "",
        "yesterday",
        "2031",
        "2031-02-14",
        "2031-02-14T",
        "2031-02-14T21",
        "2031-02-14T21:1",
        "2031-2-14T21:15:00Z",
        "31-02-14T21:15:00Z",
        "2031-02-14_21:15:00Z",
        "2031-00-14T21:15:00Z",
        "2031-13-14T21:15:00Z",
        "2031-02-00T21:15:00Z",
        "2031-02-29T21:15:00Z", /* no leap year */
        "2100-02-29T21:15:00Z", /* nor is the full century */
        "2031-04-31T21:15:00Z",
        "2031-02-14T24:00:00Z",
        "2031-02-14T21:60:00Z",
        "2031-02-14T21:15:61Z",
        "2031-02-14T21:15:60Z", /* second 60 away from midnight UTC */
        "2031-02-14T21:15:Z",
        "2031-02-14T21:15:00.Z",
        "2031-02-14T21:15:00,5Z",
        "2031-02-14T21:15:00+1:00",
        "2031-02-14T21:15:00+0100",
        "2031-02-14T21:15:00+24:00",
        "2031-02-14T21:15:00+01:60",
        "2031-02-14T21:15:00Zulu",
        " 2031-02-14T21:15:00Z",
        "2031-02-14T21:15:00Z ",
        "-2031-02-14T21:15:00Z",
    };
    for (size_t i = 0; i < sizeof cases / sizeof cases[0]; i++) {
        struct fw_error error = {0};
        int64_t utc_s = 77;
        if (when_parse(cases[i], NULL, &utc_s, &error) != FW_BAD_INPUT)
            fail_msg("'%s' was taken as %lld", cases[i], (long long)utc_s);
        assert_int_equal(utc_s, 77); /* unchanged on failure */
        assert_non_null(strstr(error.text, cases[i]));
    }
}

static void a_time_without_offset_needs_a_zone(void **state)
{
    (void)state;
    struct fw_error error = {0};
    int64_t utc_s;
    assert_int_equal(when_parse("2031-02-14T22:15:00", NULL, &utc_s, &error), FW_BAD_INPUT);
    assert_non_null(strstr(error.text, "has no offset from UTC"));
    struct when_zone vennmark = zone_of("+01:00");
    assert_int_equal(parsed("2031-02-14T22:15:00", &vennmark), parsed("2031-02-14T21:15:00Z", NULL));
    /* an offset that is written wins over the zone */
    assert_int_equal(parsed("2031-02-14T22:15:00-03:30", &vennmark), parsed("2031-02-15T01:45:00Z", NULL));
    struct when_zone born_empty = {0};
    assert_int_equal(parsed("2031-02-14T21:15", &born_empty), parsed("2031-02-14T21:15Z", NULL));
}

/* Every day of 130 years, at an awkward second, against the C library's own calendar. */
static void the_calendar_is_that_of_the_c_library(void **state)
{
    (void)state;
    char text[WHEN_TEXT_SIZE];
    for (int64_t day = -18000; day < 30000; day++) {
        int64_t utc_s = day * 86400 + 47893 + day % 7;
        time_t moment = (time_t)utc_s;
        struct tm tm;
        assert_non_null(gmtime_r(&moment, &tm));
        char expected[WHEN_TEXT_SIZE];
        strftime(expected, sizeof expected, "%Y-%m-%dT%H:%M:%SZ", &tm);
        assert_string_equal(when_rfc3339_utc(utc_s, text), expected);
        assert_int_equal(parsed(text, NULL), utc_s);
    }
}

static void a_named_zone_follows_its_changes_of_offset(void **state)
{
    (void)state;
    struct when_zone zone = zone_of("Europe/Berlin");
    assert_false(zone.is_fixed);
    char text[WHEN_TEXT_SIZE];
    int64_t winter = parsed("2026-01-15T11:30:00Z", NULL);
    int64_t summer = parsed("2026-07-15T11:30:00Z", NULL);
    assert_int_equal(when_offset_s(&zone, winter), 3600);
    assert_int_equal(when_offset_s(&zone, summer), 7200);
    assert_string_equal(when_rfc3339_local(&zone, summer, text), "2026-07-15T13:30:00+02:00");
    assert_string_equal(when_clock(&zone, winter, text), "12:30");
    assert_int_equal(parsed("2026-07-15T13:30", &zone), summer);
}

/*
 * Changes of 2026 (IANA time zone database): Berlin on 2026-10-25 at 01:00 UTC, Lord Howe by half an hour on
 * 2026-04-04 at 15:00 UTC, St John's on 2026-11-01 at 04:30 UTC.
 */
static void of_a_repeated_hour_the_first_is_taken(void **state)
{
    (void)state;
    struct when_zone zone = zone_of("Europe/Berlin");
    assert_int_equal(parsed("2026-10-25T02:30:00", &zone), parsed("2026-10-25T00:30:00Z", NULL));
    assert_int_equal(parsed("2026-10-25T01:59:59", &zone), parsed("2026-10-24T23:59:59Z", NULL));
    assert_int_equal(parsed("2026-10-25T03:00:00", &zone), parsed("2026-10-25T02:00:00Z", NULL));
    zone = zone_of("Australia/Lord_Howe");
    assert_int_equal(parsed("2026-04-05T01:45:00", &zone), parsed("2026-04-04T14:45:00Z", NULL));
    assert_int_equal(parsed("2026-04-05T02:00:00", &zone), parsed("2026-04-04T15:30:00Z", NULL));
    zone = zone_of("America/St_Johns");
    assert_int_equal(parsed("2026-11-01T01:15:00", &zone), parsed("2026-11-01T03:45:00Z", NULL));
}

static void the_missing_hour_is_refused(void **state)
{
    (void)state;
    struct when_zone zone = zone_of("Europe/Berlin");
    struct fw_error error = {0};
    int64_t utc_s;
    assert_int_equal(when_parse("2026-03-29T02:30:00", &zone, &utc_s, &error), FW_BAD_INPUT);
    assert_non_null(strstr(error.text, "does not exist in Europe/Berlin"));
    assert_int_equal(parsed("2026-03-29T01:59:59", &zone), parsed("2026-03-29T00:59:59Z", NULL));
    assert_int_equal(parsed("2026-03-29T03:00:00", &zone), parsed("2026-03-29T01:00:00Z", NULL));
}

/* Five-minute steps over changes of offset: local text must come back to the same moment, whatever the hour. */
static void local_text_carries_its_offset_and_comes_back(void **state)
{
    (void)state;
    static const char *const zones[] = {"+01:00",        "-03:30",           "Z",
                                        "Europe/Berlin", "America/St_Johns", "Australia/Lord_Howe"};
    static const char *const starts[] = {"2026-03-28T00:00Z", "2026-04-04T00:00Z", "2026-10-24T00:00Z"};
    char text[WHEN_TEXT_SIZE];
    for (size_t z = 0; z < sizeof zones / sizeof zones[0]; z++) {
        struct when_zone zone = zone_of(zones[z]);
        for (size_t s = 0; s < sizeof starts / sizeof starts[0]; s++) {
            int64_t start = parsed(starts[s], NULL);
            for (int64_t moment = start; moment < start + INT64_C(3) * 86400; moment += 300)
                assert_int_equal(parsed(when_rfc3339_local(&zone, moment, text), NULL), moment);
        }
    }
}

static void the_zone_of_the_struct_holds_whatever_the_process_was_set_to(void **state)
{
    (void)state;
    struct when_zone berlin = zone_of("Europe/Berlin");
    struct when_zone lord_howe = zone_of("Australia/Lord_Howe");
    int64_t moment = parsed("2026-07-15T11:30:00Z", NULL);
    assert_int_equal(when_offset_s(&berlin, moment), 7200);
    assert_int_equal(when_offset_s(&lord_howe, moment), 37800);
    setenv("TZ", "UTC", 1);
    assert_int_equal(when_offset_s(&berlin, moment), 7200);
}

static void fixed_offsets_are_read(void **state)
{
    (void)state;
    assert_int_equal(zone_of("+01:00").offset_s, 3600);
    assert_int_equal(zone_of("-03:30").offset_s, -12600);
    assert_int_equal(zone_of("Z").offset_s, 0);
    assert_true(zone_of("Z").is_fixed);
    char text[WHEN_TEXT_SIZE];
    struct when_zone zone = zone_of("-03:30");
    assert_string_equal(when_rfc3339_local(&zone, 0, text), "1969-12-31T20:30:00-03:30");
    assert_int_equal(when_minute_of_day(&zone, 0), 20 * 60 + 30);
}

static void a_zone_that_this_machine_does_not_know_is_refused(void **state)
{
    (void)state;
    static const char *const cases[] = {
        "",
        "+1",
        "+01",
        "+01:00h",
        "+25:00",
        "Vennmark/Tallowick",
        "../../etc/passwd",
        "/etc/localtime",
        "Europe",
        "tzdata.zi",
        "Europe/Berlin\n",
        "A/Very/Long/Name/That/Cannot/Be/A/Zone/Of/Any/Place/Known/To/Anyone/At/All",
    };
    for (size_t i = 0; i < sizeof cases / sizeof cases[0]; i++) {
        struct fw_error error = {0};
        struct when_zone zone = {.offset_s = 77};
        if (when_zone_parse(cases[i], &zone, &error) != FW_BAD_INPUT)
            fail_msg("'%s' was taken for a zone", cases[i]);
        assert_int_equal(zone.offset_s, 77);
        assert_non_null(strstr(error.text, "expected a fixed offset as +01:00"));
    }
}

static void never_is_printed_as_a_dash(void **state)
{
    (void)state;
    struct when_zone zone = zone_of("+01:00");
    char text[WHEN_TEXT_SIZE];
    assert_string_equal(when_clock(&zone, INT64_MAX, text), "-");
    assert_string_equal(when_rfc3339_utc(INT64_MAX, text), "-");
    assert_string_equal(when_rfc3339_local(&zone, INT64_MIN, text), "-");
    assert_int_equal(when_minute_of_day(&zone, INT64_MAX), 0);
}

static void a_night_may_run_over_midnight(void **state)
{
    (void)state;
    static const struct {
        int minute, from, to;
        bool is_within;
    } cases[] = {
        {1199, 1200, 360, false}, /* 19:59 of a night from 20:00 to 06:00 */
        {1200, 1200, 360, true},  {1439, 1200, 360, true}, {0, 1200, 360, true},
        {359, 1200, 360, true},   {360, 1200, 360, false}, {480, 480, 481, true},  /* within one day */
        {481, 480, 481, false},   {479, 480, 481, false},  {700, 700, 700, false}, /* an empty night */
    };
    for (size_t i = 0; i < sizeof cases / sizeof cases[0]; i++)
        assert_int_equal(when_is_between(cases[i].minute, cases[i].from, cases[i].to), cases[i].is_within);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(the_examples_of_rfc_3339_are_read),
        cmocka_unit_test(a_blank_a_small_t_and_missing_seconds_are_accepted),
        cmocka_unit_test(whatever_is_no_time_is_refused_with_what_was_expected),
        cmocka_unit_test(a_time_without_offset_needs_a_zone),
        cmocka_unit_test(the_calendar_is_that_of_the_c_library),
        cmocka_unit_test(a_named_zone_follows_its_changes_of_offset),
        cmocka_unit_test(of_a_repeated_hour_the_first_is_taken),
        cmocka_unit_test(the_missing_hour_is_refused),
        cmocka_unit_test(local_text_carries_its_offset_and_comes_back),
        cmocka_unit_test(the_zone_of_the_struct_holds_whatever_the_process_was_set_to),
        cmocka_unit_test(fixed_offsets_are_read),
        cmocka_unit_test(a_zone_that_this_machine_does_not_know_is_refused),
        cmocka_unit_test(never_is_printed_as_a_dash),
        cmocka_unit_test(a_night_may_run_over_midnight),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
