/* SPDX-License-Identifier: MIT */
#include "tests/daemon/cycle_scene.h"

#include <cjson/cJSON.h>
#include <math.h>

static bool add(struct picture *picture, int64_t observed_utc_s, int32_t source, double value)
{
    struct reading reading = scene_reading(observed_utc_s, value);
    bool was_new = false;
    reading.source = source;
    assert_int_equal(picture_add_reading(picture, &reading, &was_new), FW_OK);
    return was_new;
}

static void readings_stand_by_time_and_then_by_trust_however_they_came(void **state)
{
    (void)state;
    static const struct {
        int64_t after_s;
        int32_t source;
    } came[] = {{300, 1}, {0, 0}, {300, FACT_SOURCE_HAND}, {600, 0}, {300, 0}, {0, 1}};
    struct scene scene = scene_open(NULL, NULL);
    for (size_t index = 0; index < sizeof came / sizeof *came; index++)
        assert_true(add(scene.picture, SCENE_START + came[index].after_s, came[index].source, 1.37));
    const struct gauge_picture *gauge = &scene.picture->gauges[0];
    static const struct {
        int64_t after_s;
        int32_t source;
    } stand[] = {{0, 0}, {0, 1}, {300, FACT_SOURCE_HAND}, {300, 0}, {300, 1}, {600, 0}};
    assert_int_equal(gauge->reading_count, 6);
    for (size_t index = 0; index < 6; index++) {
        assert_int_equal(gauge->readings[index].reading.observed_utc_s, SCENE_START + stand[index].after_s);
        assert_int_equal(gauge->readings[index].reading.source, stand[index].source);
    }
    scene_close(&scene);
}

static void the_same_value_is_no_news_and_another_replaces_it(void **state)
{
    (void)state;
    struct scene scene = scene_open(NULL, NULL);
    struct reading same = scene_reading(SCENE_START, 1.37);
    assert_false(picture_knows_reading(scene.picture, &same));
    assert_true(add(scene.picture, SCENE_START, 0, 1.37));
    assert_true(picture_knows_reading(scene.picture, &same));
    assert_false(add(scene.picture, SCENE_START, 0, 1.37));
    assert_true(add(scene.picture, SCENE_START, 0, 1.42));
    assert_false(picture_knows_reading(scene.picture, &same));
    assert_int_equal(scene.picture->gauges[0].reading_count, 1);
    assert_true(scene.picture->gauges[0].readings[0].reading.value_si == 1.42);
    scene_close(&scene);
}

static void a_copy_lives_on_when_the_original_is_gone(void **state)
{
    (void)state;
    struct scene scene = scene_open(NULL, NULL);
    struct picture *copy = NULL;
    struct text before = {0};
    struct text after = {0};
    for (int minute = 0; minute < 200; minute += 5)
        add(scene.picture, SCENE_START + minute * SCENE_MINUTE, 0, 1.0 + 0.003 * minute);
    struct delta delta = scene_run(&scene, NULL, SCENE_START + 200 * SCENE_MINUTE);
    assert_int_equal(picture_write_json(scene.settings, scene.picture, &before), FW_OK);
    assert_int_equal(picture_copy(scene.settings, scene.picture, &copy), FW_OK);
    picture_destroy(scene.picture);
    scene.picture = copy;
    assert_int_equal(picture_write_json(scene.settings, scene.picture, &after), FW_OK);
    assert_string_equal(text_string(&before), text_string(&after));
    delta_clear(&delta);
    text_clear(&before);
    text_clear(&after);
    scene_close(&scene);
}

static struct word road_word(enum road_state road, int64_t at_utc_s)
{
    return (struct word){
        .kind = WORD_ROAD, .subject = "tallowick-ford", .road = road, .by = "roads foreman", .at_utc_s = at_utc_s};
}

static void a_road_is_as_the_newest_word_about_it_says(void **state)
{
    (void)state;
    struct scene scene = scene_open(NULL, NULL);
    const struct point_picture *point = &scene.picture->points[0];
    struct word called = road_word(ROAD_CREW_CALLED, SCENE_START + 100);
    struct word shut = road_word(ROAD_SHUT, SCENE_START + 900);
    struct word late_word =
        road_word(ROAD_CREW_OUT, SCENE_START + 500); /* spoken of an earlier moment, handed in later */
    struct word back = road_word(ROAD_HANDED_BACK, SCENE_START + 5000);
    picture_take_word(scene.settings, scene.picture, &called);
    assert_int_equal(point->crew_called_utc_s, SCENE_START + 100);
    picture_take_word(scene.settings, scene.picture, &shut);
    picture_take_word(scene.settings, scene.picture, &late_word);
    assert_int_equal(point->road.state, ROAD_SHUT);
    assert_string_equal(point->road.by, "roads foreman");
    assert_int_equal(point->crew_called_utc_s, SCENE_START + 100);
    picture_take_word(scene.settings, scene.picture, &back);
    assert_int_equal(point->road.state, ROAD_HANDED_BACK);
    assert_int_equal(point->crew_called_utc_s, 0);
    scene_close(&scene);
}

static void water_seen_and_road_are_two_facts(void **state)
{
    (void)state;
    struct scene scene = scene_open(NULL, NULL);
    struct word seen = {
        .kind = WORD_SEEN, .subject = "tallowick-ford", .is_wet = true, .value = 17.0, .at_utc_s = SCENE_START};
    struct word unknown = {.kind = WORD_SEEN, .subject = "nowhere", .is_wet = true, .at_utc_s = SCENE_START};
    picture_take_word(scene.settings, scene.picture, &unknown);
    assert_false(scene.picture->points[0].water.is_known);
    picture_take_word(scene.settings, scene.picture, &seen);
    assert_true(scene.picture->points[0].water.is_wet);
    assert_true(scene.picture->points[0].water.depth_cm == 17.0);
    assert_int_equal(scene.picture->points[0].road.state, ROAD_OPEN);
    assert_int_equal(scene.picture->points[0].road.at_utc_s, 0);
    scene_close(&scene);
}

static void the_canonical_form_is_json_and_names_what_is_not_known_null(void **state)
{
    (void)state;
    struct scene scene = scene_open(NULL, NULL);
    struct text json = {0};
    assert_int_equal(picture_write_json(scene.settings, scene.picture, &json), FW_OK);
    cJSON *picture = cJSON_Parse(text_string(&json));
    assert_non_null(picture);
    const cJSON *gauge = cJSON_GetArrayItem(cJSON_GetObjectItemCaseSensitive(picture, "gauges"), 0);
    assert_string_equal(cJSON_GetObjectItemCaseSensitive(gauge, "id")->valuestring, "orlin-scar");
    assert_true(cJSON_IsNull(cJSON_GetObjectItemCaseSensitive(gauge, "newest")));
    assert_true(cJSON_IsNull(cJSON_GetObjectItemCaseSensitive(gauge, "stage_m")));
    const cJSON *point = cJSON_GetArrayItem(cJSON_GetObjectItemCaseSensitive(picture, "points"), 2);
    assert_string_equal(cJSON_GetObjectItemCaseSensitive(point, "id")->valuestring, "low-pintle-bridge");
    assert_true(cJSON_IsNull(cJSON_GetObjectItemCaseSensitive(point, "act_by")));
    assert_true(cJSON_IsNull(cJSON_GetObjectItemCaseSensitive(point, "water_seen")));
    cJSON_Delete(picture);
    text_clear(&json);
    scene_close(&scene);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(readings_stand_by_time_and_then_by_trust_however_they_came),
        cmocka_unit_test(the_same_value_is_no_news_and_another_replaces_it),
        cmocka_unit_test(a_copy_lives_on_when_the_original_is_gone),
        cmocka_unit_test(a_road_is_as_the_newest_word_about_it_says),
        cmocka_unit_test(water_seen_and_road_are_two_facts),
        cmocka_unit_test(the_canonical_form_is_json_and_names_what_is_not_known_null),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
