/* SPDX-License-Identifier: MIT */
#include "daemon/season.h"

#include <math.h>

#include "tests/daemon/settings_text.h"

static struct settings *read_sound(const char *path, const char *instead_of, const char *replacement)
{
    struct text text = settings_text_load(path);
    struct settings *settings = NULL;
    struct settings_faults faults = {0};
    if (instead_of != NULL) {
        const char *at = strstr(text.bytes, instead_of);
        assert_non_null(at);
        struct text changed = settings_text_with(&text, (size_t)(at - text.bytes), strlen(instead_of), replacement);
        text_clear(&text);
        text = changed;
    }
    enum fw_status status = settings_text_read(&text, SETTINGS_FOR_RUN, &settings, &faults);
    settings_text_print_faults(&faults);
    assert_int_equal(status, FW_OK);
    settings_faults_clear(&faults);
    text_clear(&text);
    return settings;
}

static int64_t utc_of(const char *text)
{
    int64_t utc_s = 0;
    struct fw_error error = {.status = FW_OK};
    assert_int_equal(when_parse(text, NULL, &utc_s, &error), FW_OK);
    return utc_s;
}

/* The example: the channel x1.2 from 15 May and as stated from 1 October, the plain x1.3 from 1 May and 1 from 15 September. */
static void the_roughness_follows_the_date(void **state)
{
    (void)state;
    static const struct {
        int day;
        double channel, plain;
        const char *shows;
    } rows[] = {
        {101, 1.0, 1.0, "the year begins in the last season of the one before"},
        {430, 1.0, 1.0, "the day before"},
        {501, 1.0, 1.3, "the plain's first day"},
        {514, 1.0, 1.3, "the channel's eve"},
        {515, 1.2, 1.3, "the channel's first day"},
        {914, 1.2, 1.3, "both"},
        {915, 1.2, 1.0, "the plain is mown"},
        {1001, 1.0, 1.0, "both bare"},
        {1231, 1.0, 1.0, "the year ends"},
    };
    struct settings *settings = read_sound(SETTINGS_EXAMPLE, NULL, NULL);
    for (size_t i = 0; i < sizeof rows / sizeof *rows; i++) {
        struct season_river season;
        assert_int_equal(season_river_make(settings, rows[i].day, &season), FW_OK);
        const struct section *section = season.river.reaches[1].section;
        if (fabs(section->roughness_n - 0.038 * rows[i].channel) > 1e-15 ||
            fabs(section->plain_roughness_n - 0.075 * rows[i].plain) > 1e-15)
            fail_msg("%s: %g, %g", rows[i].shows, section->roughness_n, section->plain_roughness_n);
        assert_true(section->bottom_m == 14.0 && section->plain_width_m == 80.0);
        season_river_clear(&season);
    }
    assert_true(settings->sections[0].roughness_n == 0.038); /* the settings stay as they are */
    settings_destroy(settings);
}

static void a_plain_without_seasons_has_those_of_its_section(void **state)
{
    (void)state;
    struct settings *settings = read_sound(
        SETTINGS_EXAMPLE,
        ",              // added width, both banks together\n"
        "        // standing crops from May on, stubble from September; the year's last holds into the next\n"
        "        \"seasons\": [ { \"from\": \"05-01\", \"n_factor\": 1.3 }, { \"from\": \"09-15\", \"n_factor\": 1.0 "
        "} ]",
        "");
    struct season_river season;
    assert_int_equal(season_river_make(settings, 620, &season), FW_OK);
    assert_true(fabs(season.sections[0].plain_roughness_n - 0.075 * 1.2) < 1e-15);
    season_river_clear(&season);
    settings_destroy(settings);
}

/* Panels of the survey: the first has none of its own and the section none, so it stays; the second has. */
static void a_panel_has_seasons_of_its_own(void **state)
{
    (void)state;
    struct settings *settings = read_sound(SETTINGS_EVERY_OTHER_KEY, NULL, NULL);
    struct season_river season;
    assert_int_equal(season_river_make(settings, 620, &season), FW_OK);
    assert_true(season.sections[0].panel_roughness_n[0] == 0.037);
    assert_true(fabs(season.sections[0].panel_roughness_n[1] - 0.061 * 1.4) < 1e-15);
    assert_true(season.sections[1].roughness_n == 0.033);
    season_river_clear(&season);
    assert_int_equal(season_river_make(settings, 419, &season), FW_OK);
    assert_true(fabs(season.sections[0].panel_roughness_n[1] - 0.061 * 0.9) < 1e-15); /* of the November before */
    season_river_clear(&season);
    settings_destroy(settings);

    settings = read_sound(
        SETTINGS_EVERY_OTHER_KEY, "\"points\": [ [0, 3.1]",
        "\"seasons\": [ { \"from\": \"06-01\", \"n_factor\": 1.5 }, { \"from\": \"08-01\", \"n_factor\": 2 } ],"
        "\"points\": [ [0, 3.1]");
    assert_int_equal(season_river_make(settings, 620, &season), FW_OK);
    assert_true(fabs(season.sections[0].panel_roughness_n[0] - 0.037 * 1.5) < 1e-15); /* the section's */
    assert_true(fabs(season.sections[0].panel_roughness_n[1] - 0.061 * 1.4) < 1e-15); /* still its own */
    season_river_clear(&season);
    settings_destroy(settings);
}

/* The date is the district's: at UTC+1 a season begins an hour before UTC's day does. */
static void the_date_is_that_of_the_districts_clock(void **state)
{
    (void)state;
    struct settings *settings = read_sound(SETTINGS_EXAMPLE, NULL, NULL);
    assert_int_equal(season_day(settings, utc_of("2031-05-14T22:59:59Z")), 514);
    assert_int_equal(season_day(settings, utc_of("2031-05-14T23:00:00Z")), 515);
    assert_int_equal(season_day(settings, utc_of("2032-02-29T12:00:00Z")), 229);
    int days[8];
    assert_int_equal(season_starts(settings, 8, days), 4);
    static const int expected[] = {501, 515, 915, 1001};
    assert_memory_equal(days, expected, sizeof expected);
    assert_int_equal(season_starts(settings, 2, days), 2);
    static const struct {
        const char *moment;
        size_t index;
    } rows[] = {{"2031-01-01T12:00:00Z", 3},
                {"2031-05-14T22:59:59Z", 0},
                {"2031-05-14T23:00:00Z", 1},
                {"2031-09-20T00:00:00Z", 2},
                {"2031-12-31T00:00:00Z", 3}};
    for (size_t i = 0; i < sizeof rows / sizeof *rows; i++)
        assert_int_equal(season_index(settings, utc_of(rows[i].moment)), rows[i].index);
    settings_destroy(settings);
}

static void without_seasons_there_is_one_and_it_is_as_stated(void **state)
{
    (void)state;
    struct settings *settings = read_sound(FW_SOURCE_DIR "/config/demo/vennmark.json", NULL, NULL);
    int days[1];
    assert_int_equal(season_starts(settings, 1, days), 0);
    assert_int_equal(season_index(settings, utc_of("2031-07-01T12:00:00Z")), 0);
    struct season_river season;
    assert_int_equal(season_river_make(settings, 701, &season), FW_OK);
    assert_true(season.sections[0].roughness_n == 0.038 && season.sections[0].plain_roughness_n == 0.075);
    season_river_clear(&season);
    settings_destroy(settings);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(the_roughness_follows_the_date),
        cmocka_unit_test(a_plain_without_seasons_has_those_of_its_section),
        cmocka_unit_test(a_panel_has_seasons_of_its_own),
        cmocka_unit_test(the_date_is_that_of_the_districts_clock),
        cmocka_unit_test(without_seasons_there_is_one_and_it_is_as_stated),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
