/* SPDX-License-Identifier: MIT */
/* The water on a crossing's deck: through a cycle, into the picture and its canonical form. */
#include "tests/daemon/cycle_scene.h"

#include <cjson/cJSON.h>
#include <math.h>

#include "daemon/deck.h"
#include "daemon/tell/sentence.h"

enum { FORD, CAUSEWAY, BRIDGE, RISE_MINUTES = 320 };

/* A steady night, then a rise that wets the ford and the causeway in some runs at least. */
static struct delta run_with_rise(struct scene *scene)
{
    struct news news = {0};
    for (int minute = 0; minute <= RISE_MINUTES; minute += 5) {
        double since = minute < 180 ? 0.0 : minute - 180.0;
        double stage_m = 1.02 + 2.4 * (1.0 - exp(-since * since / (2.0 * 75.0 * 75.0)));
        struct reading reading = scene_reading(SCENE_START + minute * SCENE_MINUTE, round(100.0 * stage_m) / 100.0);
        assert_int_equal(news_add_reading(&news, &reading), FW_OK);
    }
    struct delta delta = scene_run(scene, &news, SCENE_START + RISE_MINUTES * SCENE_MINUTE);
    news_clear(&news);
    return delta;
}

/*
 * On the causeway's weir the depth alone passes the first limit, 0.3 m of still water: so it is passed in the second in
 * which the water reaches a mark that much over the deck.
 */
static void a_limit_of_depth_is_passed_when_a_mark_at_that_depth_is(void **state)
{
    (void)state;
    struct scene scene = scene_open("\"depth_m\": 2.10", "\"depth_m\": 2.25");
    struct delta delta = run_with_rise(&scene);
    const struct point_picture *causeway = &scene.picture->points[CAUSEWAY];
    const struct passage *mark = &causeway->marks[2].passage;
    const struct passage *over = &causeway->deck.over[HAZARD_SMALL_CAR];
    assert_true(mark->earliest_utc_s != PASSAGE_NEVER && mark->likely_utc_s != PASSAGE_NEVER);
    assert_int_equal(over->earliest_utc_s, mark->earliest_utc_s);
    assert_int_equal(over->likely_utc_s, mark->likely_utc_s);
    assert_int_equal(over->latest_utc_s, mark->latest_utc_s);
    assert_true(over->chance == mark->chance);
    assert_int_equal(causeway->deck.by[HAZARD_SMALL_CAR], HAZARD_DEPTH);
    delta_clear(&delta);
    scene_close(&scene);
}

static void the_peaks_are_those_of_single_runs_and_rise(void **state)
{
    (void)state;
    struct scene scene = scene_open(NULL, NULL);
    struct delta delta = run_with_rise(&scene);
    const struct point_picture *ford = &scene.picture->points[FORD];
    const struct deck_picture *deck = &ford->deck;
    assert_true(deck->low.product_m2_s <= deck->likely.product_m2_s &&
                deck->likely.product_m2_s <= deck->high.product_m2_s && deck->high.product_m2_s > 0.3);
    const struct hazard_water *runs[] = {&deck->low, &deck->likely, &deck->high};
    for (size_t i = 0; i < 3; i++)
        assert_true(fabs(runs[i]->product_m2_s - runs[i]->depth_m * runs[i]->speed_m_s) <=
                    1e-12 * runs[i]->product_m2_s);
    /* no run is deeper than the highest level's, which is known between the steps and this at them: 2 mm */
    assert_true(deck->high.depth_m <= ford->peak.highest_m - 1.55 + 0.002);
    assert_true(deck->likely_utc_s >= SCENE_START + RISE_MINUTES * SCENE_MINUTE);
    /* what is passed is passed in the order of the products, and by some run that peaks over it */
    for (size_t whom = 0; whom < HAZARD_WHOM_COUNT; whom++) {
        const struct hazard_limit *limit = hazard_limit_for((enum hazard_whom)whom);
        assert_int_equal(deck->over[whom].chance > 0.0, deck->by[whom] != HAZARD_NONE);
        if (deck->high.product_m2_s > limit->product_m2_s)
            assert_true(deck->over[whom].chance > 0.0);
    }
    assert_true(deck->over[HAZARD_SMALL_CAR].earliest_utc_s >= ford->marks[1].passage.earliest_utc_s);
    /* the bridge's settings say nothing of its deck */
    assert_true(isnan(scene.picture->points[BRIDGE].deck.likely.depth_m));
    delta_clear(&delta);
    scene_close(&scene);
}

/* The causeway's level is the section's: what stands below the weir is not known, and q = Cd H^1.5. */
static void on_a_weir_the_product_is_the_flow_per_metre(void **state)
{
    (void)state;
    struct scene scene = scene_open(NULL, NULL);
    struct delta delta = run_with_rise(&scene);
    const struct hazard_water *high = &scene.picture->points[CAUSEWAY].deck.high;
    assert_true(high->depth_m > 0.1);
    assert_true(fabs(high->product_m2_s - 1.6 * pow(high->depth_m, 1.5)) <= 1e-12 * high->product_m2_s);
    assert_true(fabs(high->speed_m_s - 1.5 * high->product_m2_s / high->depth_m) <= 1e-12 * high->speed_m_s);
    delta_clear(&delta);
    scene_close(&scene);
}

/* With a level of its own the point has the section's normal depth below it. */
static void a_weir_with_a_level_of_its_own_is_drowned_by_the_normal_depth_below(void **state)
{
    (void)state;
    struct settings *settings = scene_settings(
        "\"crew\": { \"day_min\": 40, \"night_min\": 40, \"margin_min\": 15 }",
        "\"crew\": { \"day_min\": 40, \"night_min\": 40, \"margin_min\": 15 }, \"deck\": { \"kind\": \"weir\" }");
    double below_m = 0.0;
    const struct network_reach *reach = &settings->river.reaches[2];
    assert_int_equal(section_normal_depth_m(reach->section, reach->slope_m_per_m, 112.0, &below_m), FW_OK);
    double head_m = 2.9 - 2.62;
    assert_true(below_m > 2.62 && below_m < 2.9);
    struct hazard_water water = deck_water(settings, &settings->river, BRIDGE, 2.9, 112.0, 1.0);
    double drowned = pow(1.0 - pow((below_m - 2.62) / head_m, 1.5), 0.385);
    assert_true(fabs(water.product_m2_s - 1.7 * pow(head_m, 1.5) * drowned) <= 1e-9);
    /* a rougher bed below drowns it more; a smoother one lets it fall free */
    assert_true(deck_water(settings, &settings->river, BRIDGE, 2.9, 112.0, 1.02).product_m2_s < water.product_m2_s);
    assert_true(fabs(deck_water(settings, &settings->river, BRIDGE, 2.9, 112.0, 0.8).product_m2_s -
                     1.7 * pow(head_m, 1.5)) <= 1e-12);
    settings_destroy(settings);
}

/* With the causeway a weir over a pipe, levels and deck follow from its flow. */
static void a_level_from_a_weir_over_the_road_goes_through_the_cycle(void **state)
{
    (void)state;
    struct scene scene = scene_open(
        "\"deck\": { \"kind\": \"weir\", \"coefficient\": 1.6 },",
        "\"deck\": { \"kind\": \"weir\" },\n\"stage_rating\": { \"weir\": { \"length_m\": 41, \"coefficient\": 1.6,"
        "\"opening\": [[0, 0.3], [9.7, 0.9], [37, 1.95], [51.5, 3.1]], \"part_blocked\": { \"opening_share\": 0.5 } "
        "} },");
    struct delta delta = run_with_rise(&scene);
    const struct settings_point *known = &scene.settings->points[CAUSEWAY];
    const struct point_picture *causeway = &scene.picture->points[CAUSEWAY];
    assert_true(known->deck.weir_coefficient == 1.6 && known->deck.level_m == 1.95);
    assert_true(causeway->peak.highest_m > 1.95);
    const struct hazard_water *high = &causeway->deck.high;
    assert_true(high->depth_m > 0.0 && high->depth_m <= causeway->peak.highest_m - 1.95 + 0.002);
    /* no more per metre than falls freely, and the pipe takes the rest */
    assert_true(high->product_m2_s <= 1.6 * pow(high->depth_m, 1.5) * (1.0 + 1e-12));
    assert_true(causeway->level_now.high_m > 0.3); /* the sill */
    struct text bulletin = {0};
    struct decision decision = {.point = CAUSEWAY, .before = advice_start(), .after = causeway->advice};
    assert_int_equal(sentence_bulletin(scene.settings, scene.picture, &decision, &bulletin), FW_OK);
    assert_non_null(strstr(text_string(&bulletin), "On the deck, estimated"));
    assert_non_null(strstr(text_string(&bulletin), "part-blocked"));
    text_clear(&bulletin);
    delta_clear(&delta);
    scene_close(&scene);
}

static cJSON *deck_in_json(const struct scene *scene, int point, struct text *json)
{
    assert_int_equal(picture_write_json(scene->settings, scene->picture, json), FW_OK);
    cJSON *picture = cJSON_Parse(text_string(json));
    assert_non_null(picture);
    cJSON *points = cJSON_GetObjectItemCaseSensitive(picture, "points");
    cJSON *deck = cJSON_DetachItemFromObjectCaseSensitive(cJSON_GetArrayItem(points, point), "deck_water");
    assert_non_null(deck);
    cJSON_Delete(picture);
    return deck;
}

/* Of a limit that is not passed there is no word. */
static void the_canonical_form_tells_passed_limits_alone_and_always_the_caution(void **state)
{
    (void)state;
    struct scene scene = scene_open(NULL, NULL);
    struct text json = {0};
    struct delta delta = scene_run(&scene, NULL, SCENE_START);
    cJSON *deck = deck_in_json(&scene, FORD, &json);
    assert_string_equal(cJSON_GetObjectItemCaseSensitive(deck, "note")->valuestring, DECK_CAUTION);
    cJSON *high = cJSON_GetObjectItemCaseSensitive(deck, "high");
    assert_true(cJSON_IsNull(cJSON_GetObjectItemCaseSensitive(high, "depth_m"))); /* no reading: not known */
    assert_int_equal(cJSON_GetArraySize(cJSON_GetObjectItemCaseSensitive(deck, "limits_passed")), 0);
    cJSON_Delete(deck);
    text_clear(&json);
    delta_clear(&delta);

    delta = run_with_rise(&scene);
    deck = deck_in_json(&scene, FORD, &json);
    size_t passed = 0;
    for (size_t whom = 0; whom < HAZARD_WHOM_COUNT; whom++)
        passed += scene.picture->points[FORD].deck.over[whom].chance > 0.0;
    cJSON *limits = cJSON_GetObjectItemCaseSensitive(deck, "limits_passed");
    assert_true(passed >= 2);
    assert_int_equal(cJSON_GetArraySize(limits), passed);
    const cJSON *first = cJSON_GetArrayItem(limits, 0);
    assert_string_equal(cJSON_GetObjectItemCaseSensitive(first, "for")->valuestring, "a small car");
    assert_true(cJSON_IsTrue(cJSON_GetObjectItemCaseSensitive(first, "draft")));
    assert_true(cJSON_IsTrue(cJSON_GetObjectItemCaseSensitive(first, "stationary")));
    assert_true(cJSON_GetObjectItemCaseSensitive(first, "limit")->valuedouble == 0.3);
    assert_string_equal(cJSON_GetObjectItemCaseSensitive(first, "unit")->valuestring, "m2/s");
    cJSON_Delete(deck);
    text_clear(&json);
    deck = deck_in_json(&scene, BRIDGE, &json);
    assert_true(cJSON_IsNull(deck)); /* nothing is stated of it */
    assert_true(strstr(text_string(&json), "\"H1\"") == NULL && strstr(text_string(&json), "class") == NULL);
    cJSON_Delete(deck);
    text_clear(&json);
    delta_clear(&delta);
    scene_close(&scene);
}

static void numbers_for_people_are_rounded_up(void **state)
{
    (void)state;
    static const struct {
        double value, shown;
    } rows[] = {{0.0, 0.0}, {-1e-9, 0.0}, {0.3, 0.3}, {0.3001, 0.31}, {0.309999, 0.31}, {2.13, 2.13}};
    for (size_t i = 0; i < sizeof rows / sizeof *rows; i++)
        assert_true(fabs(deck_rounded_up(rows[i].value) - rows[i].shown) < 1e-12);
    assert_false(signbit(deck_rounded_up(-0.0)));
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(a_limit_of_depth_is_passed_when_a_mark_at_that_depth_is),
        cmocka_unit_test(the_peaks_are_those_of_single_runs_and_rise),
        cmocka_unit_test(on_a_weir_the_product_is_the_flow_per_metre),
        cmocka_unit_test(a_weir_with_a_level_of_its_own_is_drowned_by_the_normal_depth_below),
        cmocka_unit_test(a_level_from_a_weir_over_the_road_goes_through_the_cycle),
        cmocka_unit_test(the_canonical_form_tells_passed_limits_alone_and_always_the_caution),
        cmocka_unit_test(numbers_for_people_are_rounded_up),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
