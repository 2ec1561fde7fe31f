/* SPDX-License-Identifier: MIT */
/* The flood by which methods are chosen: stated, assumed from what the gauge says of itself, or not known. */
#include <math.h>

#include "tests/daemon/settings_text.h"

/* The example (or another file) with one place changed; fails where it is not sound. */
static struct settings *changed(const char *path, const char *find, const char *replace, enum settings_need need)
{
    struct text base = settings_text_load(path);
    const char *found = strstr(base.bytes, find);
    if (found == NULL)
        fail_msg("'%s' is not in %s", find, path);
    struct text text = settings_text_with(&base, (size_t)(found - base.bytes), strlen(find), replace);
    struct settings *settings;
    struct settings_faults faults = {0};
    if (settings_text_read(&text, need, &settings, &faults) != FW_OK) {
        settings_text_print_faults(&faults);
        fail_msg("'%s' instead of '%s' is not sound", replace, find);
    }
    settings_faults_clear(&faults);
    text_clear(&text);
    text_clear(&base);
    return settings;
}

#define ONE_CROSSING FW_SOURCE_DIR "/config/one-crossing.json"

static void assert_close(double found, double expected)
{
    if (!(fabs(found - expected) <= 1e-9 * fabs(expected)))
        fail_msg("%.12g, expected %.12g", found, expected);
}

static void a_stated_flood_is_taken_as_it_is(void **state)
{
    (void)state;
    struct settings *settings = changed(SETTINGS_EXAMPLE, "\"rise_h\": 1.48", "\"rise_h\": 3.7", SETTINGS_FOR_ROUTE);
    const struct settings_gauge *gauge = &settings->gauges[0];
    assert_int_equal(gauge->flood_from, SETTINGS_FLOOD_STATED);
    assert_close(gauge->flood.base_m3s, 4.9);
    assert_close(gauge->flood.peak_m3s, 89);
    assert_close(gauge->flood.rise_s, 3.7 * 3600);
    settings_destroy(settings);
}

/* Q = 11.8 (h - 0.42)^1.72; highest gauging 2.38 m, so 1.25 x 1.96 m above no flow; from a twentieth; 4 m/h. */
static void without_one_it_is_assumed_from_the_highest_gauging_and_the_fastest_rise(void **state)
{
    (void)state;
    struct settings *settings = changed(ONE_CROSSING, "2.38", "2.38", SETTINGS_FOR_RUN);
    const struct settings_gauge *gauge = &settings->gauges[0];
    double peak_m3s = 11.8 * pow(1.25 * 1.96, 1.72), base_m = 0.42 + pow(0.05 * peak_m3s / 11.8, 1 / 1.72);
    assert_int_equal(gauge->flood_from, SETTINGS_FLOOD_FROM_GAUGING);
    assert_close(gauge->flood.peak_m3s, peak_m3s);
    assert_close(gauge->flood.base_m3s, 0.05 * peak_m3s);
    assert_close(gauge->flood.rise_s, (0.42 + 1.25 * 1.96 - base_m) / 4.0 * 3600);
    settings_destroy(settings);
}

static void without_a_gauging_the_highest_value_believed_takes_its_place(void **state)
{
    (void)state;
    struct settings *settings =
        changed(ONE_CROSSING, "\"highest_gauged_m\": 2.38", "\"spread\": 0.1", SETTINGS_FOR_RUN);
    const struct settings_gauge *gauge = &settings->gauges[0];
    assert_int_equal(gauge->flood_from, SETTINGS_FLOOD_FROM_BELIEF);
    assert_close(gauge->flood.peak_m3s, 11.8 * pow(9.0 - 0.42, 1.72));
    settings_destroy(settings);
}

/* Up to 85 m3/s, 37 m3/s an hour at most: 0.95 x 85 / 37 h. The other gauge states neither a gauging nor a highest value. */
static void a_gauge_of_discharge_needs_no_rating_for_it_and_without_limits_nothing_is_known(void **state)
{
    (void)state;
    struct settings *settings = changed(SETTINGS_EVERY_OTHER_KEY, "3.7", "3.7", SETTINGS_FOR_RUN);
    assert_int_equal(settings->gauges[0].flood_from, SETTINGS_FLOOD_FROM_BELIEF);
    assert_close(settings->gauges[0].flood.peak_m3s, 85);
    assert_close(settings->gauges[0].flood.base_m3s, 4.25);
    assert_close(settings->gauges[0].flood.rise_s, 0.95 * 85 / 37 * 3600);
    assert_int_equal(settings->gauges[1].flood_from, SETTINGS_FLOOD_UNKNOWN);
    assert_true(settings->gauges[1].flood.rise_s == 0.0);
    assert_int_equal(settings->time_step_s, 60);
    assert_false(settings->is_time_step_stated);
    settings_destroy(settings);
}

/* Cycles of five minutes: whole parts of 300 s. */
static void the_time_step_follows_the_quickest_flood_unless_it_is_stated(void **state)
{
    (void)state;
    static const struct {
        const char *rise;
        int64_t step_s;
    } rows[] = {{"\"rise_h\": 1.48", 60}, {"\"rise_h\": 0.6", 50}, {"\"rise_h\": 0.3", 25}, {"\"rise_h\": 0.05", 4}};
    for (size_t i = 0; i < sizeof rows / sizeof *rows; i++) {
        char flood[100];
        snprintf(flood, sizeof flood, "\"flood\": { \"base_m3s\": 4, \"peak_m3s\": 61, %s }, \"feeds\"",
                 rows[i].rise);
        struct settings *settings = changed(ONE_CROSSING, "\"feeds\"", flood, SETTINGS_FOR_RUN);
        assert_int_equal(settings->time_step_s, rows[i].step_s);
        assert_false(settings->is_time_step_stated);
        settings_destroy(settings);
    }
    struct settings *settings = changed(SETTINGS_EXAMPLE, "\"rise_h\": 1.48", "\"rise_h\": 0.05", SETTINGS_FOR_RUN);
    assert_int_equal(settings->time_step_s, 60);
    assert_true(settings->is_time_step_stated);
    settings_destroy(settings);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(a_stated_flood_is_taken_as_it_is),
        cmocka_unit_test(without_one_it_is_assumed_from_the_highest_gauging_and_the_fastest_rise),
        cmocka_unit_test(without_a_gauging_the_highest_value_believed_takes_its_place),
        cmocka_unit_test(a_gauge_of_discharge_needs_no_rating_for_it_and_without_limits_nothing_is_known),
        cmocka_unit_test(the_time_step_follows_the_quickest_flood_unless_it_is_stated),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
