/* SPDX-License-Identifier: MIT */
/* The cycle with a gauge in mid-river, and with an outlet whose level a gauge measures or a table gives. */
#include "tests/daemon/warm_scene.h"

#include "daemon/cycle_steps.h"

enum { HEAD, OTHER, FORD = 0, CAUSEWAY, SHORE = 0, NIGHT_MINUTES = 9 * 60 };

#define SECTIONS "\"sections\": ["

static const char first_reach[] = "\"to\": \"tallowick-ford\", \"length_m\": 9400,";
/* The last reach, and a point at its very end, before the others: at the bridge a rating of its own outranks the level. */
static const char last_reach[] = "\"to\": \"low-pintle-bridge\", \"length_m\": 8300,\n"
                                 "          \"slope\": 0.0024, \"section\": \"ildra\", \"method\": "
                                 "\"muskingum-cunge\" }\n    ],\n\n    \"points\": [";
#define LAST_REACH_WITH(outlet)                                                                                      \
    "\"to\": \"low-pintle-bridge\", \"length_m\": 8300, \"slope\": 0.0024, \"section\": \"ildra\"," outlet           \
    "} ], \"points\": [ { \"id\": \"shore\", \"reach\": \"causeway-bridge\", \"at_m\": 8300, \"invert_m\": 64.0,"    \
    "\"marks\": [ { \"name\": \"deck awash\", \"depth_m\": 8.0 } ] },"

/* Another gauge, named before the sections, where the list of gauges ends. */
#define ANOTHER_GAUGE(id, more)                                                                                      \
    ", { \"id\": \"" id "\", \"measures\": \"stage\"," more                                                          \
    "\"expect_every_min\": 15, \"delivery_min\": 1, \"blind_after_min\": 45, \"blind_after_rising_min\": 25,"        \
    "\"rising_m_h\": 0.05, \"quality\": { \"lowest_m\": 0.0, \"highest_m\": 9.0, \"fastest_rise_m_h\": 1.5,"         \
    "\"confirm_within_min\": 15, \"frozen_after_h\": 6, \"frozen_moving_min\": 20 } } ],\n\n    " SECTIONS

static const struct warm_change narrows_gauge = {
    "\n    ],\n\n    " SECTIONS,
    ANOTHER_GAUGE("narrows", "\"rating\": { \"segments\": [ { \"c\": 11.8, \"h0_m\": 0.42, \"b\": 1.8 } ] },")};
static const struct warm_change narrows_node = {
    first_reach,
    "\"to\": \"narrows\", \"length_m\": 4400, \"slope\": 0.0024, \"section\": \"ildra\" },"
    "{ \"id\": \"narrows-ford\", \"from\": \"narrows\", \"to\": \"tallowick-ford\", \"length_m\": 5000,"};
static const struct warm_change pool_gauge = {"\n    ],\n\n    " SECTIONS, ANOTHER_GAUGE("pool", "")};
static const struct warm_change pool_outlet = {
    last_reach, LAST_REACH_WITH("\"outlet\": { \"stage_of\": \"pool\", \"bed_at_m\": 0.3 }")};

static struct scene open_scene(const struct warm_change *first, const struct warm_change *second)
{
    struct scene scene = {.settings = warm_settings(first, second)};
    struct fw_error error = {.status = FW_OK};
    assert_int_equal(cycle_create(scene.settings, &scene.cycle, &error), FW_OK);
    assert_int_equal(picture_create(scene.settings, &scene.picture), FW_OK);
    return scene;
}

static double head_m(int minute)
{
    return 1.02 + 1.2 * exp(-pow(((double)minute / 60.0 - 6.0) / 2.3, 2.0));
}

static void add(struct news *news, size_t gauge, int minute, double value_m)
{
    struct reading reading =
        scene_reading(SCENE_START + (int64_t)minute * SCENE_MINUTE, round(1000.0 * value_m) / 1000.0);
    reading.gauge = (int32_t)gauge;
    assert_int_equal(news_add_reading(news, &reading), FW_OK);
}

static void run_at(struct scene *scene, struct news *news, int minute)
{
    struct delta delta = scene_run(scene, news, SCENE_START + (int64_t)minute * SCENE_MINUTE);
    delta_clear(&delta);
    news_clear(news);
    *news = (struct news){0};
}

static size_t step_of(const struct scene *scene, int minute)
{
    return (size_t)((SCENE_START + (int64_t)minute * SCENE_MINUTE - scene->cycle->start_utc_s) /
                    scene->settings->time_step_s);
}

/* As a cycle that has seen nothing. */
static void assert_same_when_cold(const struct scene *scene, const struct news *news, int minute)
{
    struct cycle *cold = NULL;
    struct delta warm_delta = {0}, cold_delta = {0};
    struct fw_error error = {.status = FW_OK};
    int64_t now_utc_s = SCENE_START + (int64_t)minute * SCENE_MINUTE;
    assert_int_equal(cycle_create(scene->settings, &cold, &error), FW_OK);
    assert_int_equal(cycle_run(scene->cycle, scene->picture, news, now_utc_s, &warm_delta, &error), FW_OK);
    assert_int_equal(cycle_run(cold, scene->picture, news, now_utc_s, &cold_delta, &error), FW_OK);
    assert_string_equal(text_string(&warm_delta.ledger.payload), text_string(&cold_delta.ledger.payload));
    for (size_t point = 0; point < scene->settings->point_count; point++)
        assert_memory_equal(cycle_stage_m(scene->cycle, point, 0), cycle_stage_m(cold, point, 0),
                            (cold->step_count + 1) * cold->member_count * sizeof(double));
    delta_clear(&warm_delta);
    delta_clear(&cold_delta);
    cycle_destroy(cold);
}

/* Measured up to the newest reading, nothing after and nothing across a gap: there what is routed goes on. */
static void a_gauge_in_mid_river_counts_while_it_measures(void **state)
{
    (void)state;
    struct scene with = open_scene(&narrows_gauge, &narrows_node);
    struct news news = {0};
    assert_int_equal(with.settings->river.gauge_count, 2);
    for (int minute = 0; minute <= NIGHT_MINUTES; minute += 15) {
        add(&news, HEAD, minute, head_m(minute));
        if (minute <= 180 || (minute >= 300 && minute <= NIGHT_MINUTES - 15)) /* out for two hours */
            add(&news, OTHER, minute, 1.9 + 0.0005 * minute);
        if (minute % 60 == 0 && minute > 0)
            run_at(&with, &news, minute);
    }
    const struct cycle *cycle = with.cycle;
    double rating_at_0 = rating_discharge_m3s(&with.settings->gauges[OTHER].rating, 1.9, NULL);
    assert_true(fabs(cycle_inflow_m3s(cycle, OTHER, 0, step_of(&with, 0)) / rating_at_0 - 1.0) <= 1e-12);
    for (size_t future = 0; future < CYCLE_FUTURES; future++) {
        assert_true(isfinite(cycle_inflow_m3s(cycle, OTHER, future, step_of(&with, 170))));
        assert_true(isnan(cycle_inflow_m3s(cycle, OTHER, future, step_of(&with, 240))));
        assert_true(isfinite(cycle_inflow_m3s(cycle, OTHER, future, step_of(&with, 330))));
        assert_true(isfinite(cycle_inflow_m3s(cycle, OTHER, future, step_of(&with, NIGHT_MINUTES - 15))));
        for (int minute = NIGHT_MINUTES - 14; minute <= NIGHT_MINUTES + 180; minute += 7)
            assert_true(isnan(cycle_inflow_m3s(cycle, OTHER, future, step_of(&with, minute))));
        for (int minute = 0; minute <= NIGHT_MINUTES + 180; minute += 7)
            assert_true(isfinite(cycle_inflow_m3s(cycle, HEAD, future, step_of(&with, minute))));
    }
    assert_true(network_brought_m3(with.cycle->network, OTHER, 0) != 0.0);
    /* the side water below it is not measured by it; what passes the gauge is counted once */
    double passing = with.picture->gauges[OTHER].newest_discharge_m3s;
    double beck = 0.16 * with.picture->gauges[HEAD].newest_discharge_m3s;
    assert_true(fabs(with.picture->points[CAUSEWAY].unmeasured_share - beck / (beck + passing)) <= 1e-12);
    scene_close(&with);
}

/* Rest of the night: a late reading in mid-river rewinds, and a warm cycle is the cold one to the last bit. */
static void a_late_reading_in_mid_river_rewinds(void **state)
{
    (void)state;
    struct scene scene = open_scene(&narrows_gauge, &narrows_node);
    struct news news = {0};
    for (int minute = 0; minute <= 300; minute += 15) {
        add(&news, HEAD, minute, head_m(minute));
        if (minute % 45 != 0)
            add(&news, OTHER, minute, 1.2 + 0.002 * minute);
        if (minute % 60 == 0 && minute > 0)
            run_at(&scene, &news, minute);
    }
    double before_m = cycle_stage_m(scene.cycle, FORD, step_of(&scene, 320))[0];
    add(&news, OTHER, 270, 1.9);
    assert_same_when_cold(&scene, &news, 305);
    run_at(&scene, &news, 305);
    assert_true(fabs(cycle_stage_m(scene.cycle, FORD, step_of(&scene, 320))[0] - before_m) > 1e-3);
    scene_close(&scene);
}

static const double *level_rows(const struct scene *scene)
{
    return scene->cycle->inflow_m3s + 2 * CYCLE_FUTURES * (scene->cycle->step_capacity + 1);
}

static double level_m(const struct scene *scene, size_t future, int minute)
{
    return level_rows(
        scene)[future * (scene->cycle->step_capacity + 1) + scene->cycle->first_step + step_of(scene, minute)];
}

/* Measured, then held by the forecasts and moved by the envelope's edges: so that the horizon knows it as assumed. */
static void an_outlet_follows_a_gauge_and_is_held_after_it(void **state)
{
    (void)state;
    struct scene scene = open_scene(&pool_gauge, &pool_outlet);
    struct news news = {0};
    const struct settings_gauge *pool = &scene.settings->gauges[OTHER];
    assert_true(pool->gives_level_only && !pool->has_rating);
    for (int minute = 0; minute <= 240; minute += 15) {
        add(&news, HEAD, minute, head_m(minute));
        add(&news, OTHER, minute, 3.3 + 0.001 * minute);
        if (minute % 120 == 0 && minute > 0)
            run_at(&scene, &news, minute);
    }
    size_t members = scene.cycle->member_count;
    for (size_t future = 0; future < CYCLE_FUTURES; future++)
        for (int minute = 0; minute <= 240; minute += 24)
            assert_true(fabs(level_m(&scene, future, minute) - (3.0 + 0.001 * minute)) <= 1e-9);
    for (int minute = 241; minute <= 420; minute += 30) {
        double since_h = (double)(minute - 240) / 60.0;
        for (size_t future = 0; future < ASSUMED_FORECAST_COUNT; future++)
            assert_true(fabs(level_m(&scene, future, minute) - 3.24) <= 1e-9);
        assert_true(fabs(level_m(&scene, ASSUMED_FASTEST_RISE, minute) - fmin(8.7, 3.24 + 1.5 * since_h)) <= 1e-9);
        assert_true(fabs(level_m(&scene, ASSUMED_FASTEST_FALL, minute) - fmax(-0.3, 3.24 - 1.5 * since_h)) <= 1e-9);
    }
    /* the river's end stands at the pool's level, and is measured until the newest reading of it */
    const double *stage = cycle_stage_m(scene.cycle, SHORE, step_of(&scene, 120));
    for (size_t member = 0; member < members; member++)
        assert_true(fabs(stage[member] - 3.12) <= 1e-6);
    int64_t until = scene.picture->points[SHORE].measured_until_utc_s;
    assert_true(until >= SCENE_START + 240 * SCENE_MINUTE && until <= SCENE_START + 243 * SCENE_MINUTE);
    assert_true(isnan(scene.picture->gauges[OTHER].newest_discharge_m3s));
    assert_false(scene.picture->points[SHORE].is_unknown);
    scene_close(&scene);
}

/* Before any reading the highest that is believed; it may dam up, but it must not let the water seem lower than it is. */
static void without_a_reading_the_highest_level_stands(void **state)
{
    (void)state;
    struct scene scene = open_scene(&pool_gauge, &pool_outlet);
    struct news news = {0};
    for (int minute = 0; minute <= 60; minute += 15)
        add(&news, HEAD, minute, head_m(minute));
    run_at(&scene, &news, 60);
    for (size_t future = 0; future < CYCLE_FUTURES; future++)
        assert_true(fabs(level_m(&scene, future, 30) - 8.7) <= 1e-9 &&
                    fabs(level_m(&scene, future, 200) - 8.7) <= 1e-9);
    scene_close(&scene);
}

/* A tide table, 19:00 to 21:00 in local time; the scene begins at 18:00. */
static void an_outlet_follows_a_table_of_the_tide(void **state)
{
    (void)state;
    static const struct warm_change tide = {
        last_reach, LAST_REACH_WITH("\"outlet\": { \"stage_series\": [ [\"2031-02-14T19:00:00+01:00\", 3.0],"
                                    "[\"2031-02-14T19:00:00Z\", 4.0], [\"2031-02-14T20:00:00Z\", 3.4]] }")};
    struct scene scene = open_scene(&tide, NULL);
    struct news news = {0};
    for (int minute = 0; minute <= 240; minute += 15)
        add(&news, HEAD, minute, head_m(minute));
    run_at(&scene, &news, 240);
    static const struct {
        int minute;
        double level_m;
    } rows[] = {{10, 3.0}, {60, 3.0}, {90, 3.5}, {120, 4.0}, {150, 3.7}, {180, 3.4}, {400, 3.4}};
    for (size_t i = 0; i < sizeof rows / sizeof *rows; i++) {
        const double *stage = cycle_stage_m(scene.cycle, SHORE, step_of(&scene, rows[i].minute));
        for (size_t member = 0; member < scene.cycle->member_count; member++)
            assert_true(fabs(stage[member] - rows[i].level_m) <= 1e-6);
    }
    scene_close(&scene);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(a_gauge_in_mid_river_counts_while_it_measures),
        cmocka_unit_test(a_late_reading_in_mid_river_rewinds),
        cmocka_unit_test(an_outlet_follows_a_gauge_and_is_held_after_it),
        cmocka_unit_test(without_a_reading_the_highest_level_stands),
        cmocka_unit_test(an_outlet_follows_a_table_of_the_tide),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
