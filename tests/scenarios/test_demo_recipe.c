/* SPDX-License-Identifier: MIT */
/* The generated night is the one that docs/demo.md tells, and the configuration describes the river of the recipe. */
#include "config/demo/recipe.h"

#include <math.h>
#include <setjmp.h>
#include <stdarg.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include <cmocka.h>

#include <cjson/cJSON.h>

#include "config/demo/night_time.h"
#include "config/demo/smooth_curve.h"
#include "config/demo/story.h"
#include "daemon/settings/settings.h"

#define COUNT_OF(array) (sizeof(array) / sizeof((array)[0]))

/* --- the curve -------------------------------------------------------------------------------------------------- */

static void the_curve_passes_through_its_points_and_never_swings_beyond_their_values(void **state)
{
    (void)state;
    static const struct smooth_curve_point points[] = {
        {0, 1.37}, {410, 1.41}, {530, 4.93}, {1700, 5.02}, {1810, 2.17}};
    for (size_t i = 0; i < COUNT_OF(points); i++)
        assert_true(fabs(smooth_curve_at(COUNT_OF(points), points, points[i].utc_s) - points[i].value) < 1e-12);
    for (size_t i = 0; i + 1 < COUNT_OF(points); i++) {
        double last = points[i].value, direction = points[i + 1].value - points[i].value;
        for (int64_t utc_s = points[i].utc_s + 1; utc_s <= points[i + 1].utc_s; utc_s++) {
            double value = smooth_curve_at(COUNT_OF(points), points, utc_s);
            assert_true((value - last) * direction >= -1e-12);
            last = value;
        }
    }
}

static void the_curve_of_points_on_a_line_is_that_line(void **state)
{
    (void)state;
    static const struct smooth_curve_point points[] = {{0, 2.5}, {300, 3.1}, {1000, 4.5}, {1003, 4.506}};
    for (int64_t utc_s = 0; utc_s <= 1000; utc_s += 37) /* the last chord flattens: a recession */
        assert_true(fabs(smooth_curve_at(4, points, utc_s) - (2.5 + 0.002 * (double)utc_s)) < 1e-12);
}

static void the_curve_holds_its_ends(void **state)
{
    (void)state;
    static const struct smooth_curve_point points[] = {{100, 2.5}, {300, 3.1}};
    assert_true(fabs(smooth_curve_at(2, points, -5) - 2.5) < 1e-12);
    assert_true(fabs(smooth_curve_at(2, points, 301) - 3.1) < 1e-12);
}

/* --- what the story says outright of the gauge's true stage ----------------------------------------------------- */

static void the_true_stage_is_what_the_story_says_at_its_turns(void **state)
{
    (void)state;
    static const struct {
        const char *clock;
        double stage_m; /* as told, to the centimetre */
        const char *why;
    } told[] = {
        {"21:15", 1.60, "the last value before the telemetry was held"},
        {"21:53", 2.00, "when the signed trigger was truly passed"},
        {"22:15", 2.26, "the newest of the batch"},
        {"22:26", 2.38, "from here on beyond the highest gauging"},
        {"22:40", 2.53, "the reading that denies the spike"},
        {"00:50", 2.75, "the value at which it froze"},
        {"01:25", 2.59, "the true stage at the end of the freeze"},
        {"01:30", 2.57, "the first value after it"},
        {"02:50", 2.34, "the last before the hut lost power: the fall had stopped"},
        {"03:35", 2.90, "first hand reading"},
        {"04:05", 3.33, "second hand reading"},
    };
    struct recipe recipe = recipe_vennmark(RECIPE_VARIANT_A);
    for (size_t i = 0; i < COUNT_OF(told); i++) {
        double stage_m = recipe_gauge_stage_m(&recipe, night_time_at(told[i].clock));
        if (fabs(stage_m - told[i].stage_m) > 0.005) /* told to the centimetre */
            fail_msg("%s: %.4f m, told %.2f (%s)", told[i].clock, stage_m, told[i].stage_m, told[i].why);
    }
}

static void variant_c_carries_the_stated_share_more_water(void **state)
{
    (void)state;
    struct recipe a = recipe_vennmark(RECIPE_VARIANT_A), c = recipe_vennmark(RECIPE_VARIANT_C);
    int64_t peak_utc_s = night_time_at("04:20");
    double share = recipe_gauge_discharge_m3s(&c, peak_utc_s) / recipe_gauge_discharge_m3s(&a, peak_utc_s);
    assert_true(fabs(share - 1.35) < 1e-12);
    assert_true(recipe_gauge_stage_m(&c, peak_utc_s) > recipe_gauge_stage_m(&a, peak_utc_s));
}

/* --- the feed --------------------------------------------------------------------------------------------------- */

static struct story *tell_feed(void)
{
    struct recipe recipe = recipe_vennmark(RECIPE_VARIANT_A);
    struct story *story = calloc(1, sizeof *story);
    assert_non_null(story);
    story_tell_feed(&recipe, story);
    return story;
}

static const struct story_delivery *delivery_of(const struct story *story, const char *clock)
{
    for (size_t i = 0; i < story->delivery_count; i++)
        if (story->deliveries[i].observed_utc_s == night_time_at(clock))
            return &story->deliveries[i];
    fail_msg("no reading of %s", clock);
    abort(); /* not reached: fail_msg does not return */
}

static void readings_stand_in_order_of_arrival(void **state)
{
    (void)state;
    struct story *story = tell_feed();
    for (size_t i = 1; i < story->delivery_count; i++)
        assert_true(story->deliveries[i].received_utc_s >= story->deliveries[i - 1].received_utc_s);
    free(story);
}

static void the_batch_is_twelve_readings_two_of_them_twice_and_shuffled(void **state)
{
    (void)state;
    struct story *story = tell_feed();
    size_t batch_count = 0, backward_count = 0;
    int times_seen[12] = {0};
    int64_t last_utc_s = 0;
    for (size_t i = 0; i < story->delivery_count; i++) {
        const struct story_delivery *delivery = &story->deliveries[i];
        if (delivery->received_utc_s != night_time_at("22:18"))
            continue;
        int64_t place = (delivery->observed_utc_s - night_time_at("21:20")) / 300;
        assert_true(place >= 0 && place < 12);
        times_seen[place]++;
        backward_count += delivery->observed_utc_s < last_utc_s;
        last_utc_s = delivery->observed_utc_s;
        assert_int_equal(delivery->way, STORY_BY_FOLDER);
        batch_count++;
    }
    assert_int_equal(batch_count, 14);
    assert_true(backward_count >= 4);
    for (size_t i = 0; i < COUNT_OF(times_seen); i++)
        assert_in_range(times_seen[i], 1, 2);
    free(story);
}

static void the_faults_of_the_feed_are_at_their_minutes(void **state)
{
    (void)state;
    static const struct {
        const char *observed;
        int stage_cm;
        const char *received;
        enum story_way way;
        const char *why;
    } told[] = {
        {"18:45", 103, "18:46", STORY_BY_HTTP, "the folder is quiet in the first hour"},
        {"20:45", 131, "20:46", STORY_BY_BOTH, "the last of the quarter hours"},
        {"20:50", 135, "20:51", STORY_BY_BOTH, "five minutes later"},
        {"21:15", 160, "21:16", STORY_BY_BOTH, "the last before the telemetry is held"},
        {"22:15", 226, "22:18", STORY_BY_FOLDER, "held"},
        {"22:35", 691, "22:36", STORY_BY_BOTH, "the spike"},
        {"22:40", 253, "22:41", STORY_BY_BOTH, "what denies it"},
        {"00:20", 288, "00:47", STORY_BY_BOTH, "the router is out"},
        {"00:45", 278, "00:47", STORY_BY_BOTH, "the router is out"},
        {"01:25", 275, "01:26", STORY_BY_BOTH, "frozen"},
        {"01:30", 257, "01:31", STORY_BY_BOTH, "freed"},
        {"02:50", 234, "02:51", STORY_BY_BOTH, "the last before the hut loses power"},
        {"02:55", 236, "04:52", STORY_BY_BOTH, "filled in"},
        {"03:15", 254, "04:52", STORY_BY_BOTH, "the bracket still holds"},
        {"03:20", 267, "04:52", STORY_BY_BOTH, "the bracket has slipped"},
        {"03:35", 295, "04:52", STORY_BY_BOTH, "0.05 over the hand reading"},
        {"04:20", 346, "04:52", STORY_BY_BOTH, "the peak as read"},
        {"14:00", 145, "14:01", STORY_BY_BOTH, "still slipped"},
    };
    struct story *story = tell_feed();
    for (size_t i = 0; i < COUNT_OF(told); i++) {
        const struct story_delivery *delivery = delivery_of(story, told[i].observed);
        if (delivery->stage_cm != told[i].stage_cm || delivery->way != told[i].way ||
            delivery->received_utc_s != night_time_at(told[i].received))
            fail_msg("%s (%s): reads %d cm, told %d", told[i].observed, told[i].why, delivery->stage_cm,
                     told[i].stage_cm);
    }
    free(story);
}

/* --- the configuration ------------------------------------------------------------------------------------------ */

static cJSON *read_configuration(void)
{
    char *text = NULL;
    size_t size = 0;
    FILE *stream = fopen(FW_SOURCE_DIR "/config/demo/vennmark.json", "r");
    assert_non_null(stream);
    assert_true(getdelim(&text, &size, '\0', stream) > 0);
    fclose(stream);
    cJSON_Minify(text);
    cJSON *tree = cJSON_Parse(text);
    free(text);
    assert_non_null(tree);
    return tree;
}

static const cJSON *item_in(const cJSON *object, const char *name)
{
    const cJSON *item = cJSON_GetObjectItemCaseSensitive(object, name);
    if (item == NULL)
        fail_msg("the configuration has no %s", name);
    return item;
}

static const cJSON *nth_in(const cJSON *object, const char *name, int index)
{
    const cJSON *item = cJSON_GetArrayItem(item_in(object, name), index);
    if (item == NULL)
        fail_msg("the configuration has no %s[%d]", name, index);
    return item;
}

static void assert_number(const cJSON *object, const char *name, double expected)
{
    double found = item_in(object, name)->valuedouble;
    if (fabs(found - expected) > 1e-9)
        fail_msg("%s: %g, the recipe has %g", name, found, expected);
}

static void the_daemon_takes_the_configuration_without_a_fault(void **state)
{
    (void)state;
    struct settings *settings = NULL;
    struct settings_faults faults = {0};
    struct fw_error error = {0};
    enum fw_status status =
        settings_read_file(FW_SOURCE_DIR "/config/demo/vennmark.json", SETTINGS_FOR_RUN, &settings, &faults, &error);
    for (size_t i = 0; i < faults.count; i++)
        print_error("%s\n", faults.faults[i].text);
    if (status != FW_OK)
        fail_msg("%s", error.text);
    assert_int_equal(faults.count, 0);
    settings_destroy(settings);
    settings_faults_clear(&faults);
}

static void the_configuration_has_the_section_and_rating_of_the_recipe(void **state)
{
    (void)state;
    struct recipe recipe = recipe_vennmark(RECIPE_VARIANT_A);
    cJSON *tree = read_configuration();
    const cJSON *section = nth_in(tree, "sections", 0);
    assert_number(section, "bottom_m", recipe.section.bottom_m);
    assert_number(section, "side", recipe.section.side_h_per_v);
    assert_number(section, "n", recipe.section.roughness_n);
    assert_number(item_in(section, "plain"), "above_m", recipe.section.plain_above_m);
    assert_number(item_in(section, "plain"), "width_m", recipe.section.plain_width_m);
    assert_number(item_in(section, "plain"), "n", recipe.section.plain_roughness_n);

    const cJSON *rating = item_in(nth_in(tree, "gauges", 0), "rating");
    const cJSON *low = nth_in(rating, "segments", 0), *high = nth_in(rating, "segments", 1);
    assert_number(low, "to_m", recipe.rating.segments[0].to_stage_m);
    assert_number(low, "c", recipe.rating.segments[0].coefficient);
    assert_number(low, "h0_m", recipe.rating.segments[0].zero_flow_stage_m);
    assert_number(low, "b", recipe.rating.segments[0].exponent);
    assert_number(high, "h0_m", recipe.rating.segments[1].zero_flow_stage_m);
    assert_number(high, "b", recipe.rating.segments[1].exponent);
    assert_number(rating, "highest_gauged_m", recipe.rating.highest_gauged_m);
    cJSON_Delete(tree);
}

static double deck_of(const cJSON *point)
{
    const cJSON *mark = NULL;
    cJSON_ArrayForEach(mark, item_in(point, "marks"))
    {
        if (cJSON_IsTrue(cJSON_GetObjectItemCaseSensitive(mark, "deck")))
            return item_in(mark, "depth_m")->valuedouble;
    }
    fail_msg("%s has no deck", item_in(point, "id")->valuestring);
    return 0.0;
}

static void the_configuration_has_the_reaches_crossings_and_beck_of_the_recipe(void **state)
{
    (void)state;
    struct recipe recipe = recipe_vennmark(RECIPE_VARIANT_A);
    cJSON *tree = read_configuration();
    for (int i = 0; i < RECIPE_POINT_COUNT; i++) {
        const cJSON *reach = nth_in(tree, "reaches", i), *point = nth_in(tree, "points", i);
        assert_string_equal(item_in(point, "id")->valuestring, recipe.points[i].id);
        assert_string_equal(item_in(reach, "to")->valuestring, recipe.points[i].id);
        assert_number(reach, "length_m", recipe.points[i].reach_length_m);
        assert_number(reach, "slope", recipe.slope_m_per_m);
        assert_true(fabs(deck_of(point) - recipe.points[i].deck_m) < 1e-9);
    }
    const cJSON *beck = nth_in(nth_in(tree, "reaches", RECIPE_CAUSEWAY), "side_inflow", 0);
    assert_number(beck, "at_m", recipe.beck_at_m);
    assert_number(beck, "share", recipe.beck_share);
    assert_number(beck, "delay_min", recipe.beck_delay_s / 60.0);
    cJSON_Delete(tree);
}

static double cell(const cJSON *rows, int row, int column)
{
    return cJSON_GetArrayItem(cJSON_GetArrayItem(rows, row), column)->valuedouble;
}

static double level_in(const cJSON *rows, double discharge_m3s)
{
    int row = 0;
    while (row + 2 < cJSON_GetArraySize(rows) && cell(rows, row + 1, 0) < discharge_m3s)
        row++;
    double slope = (cell(rows, row + 1, 1) - cell(rows, row, 1)) / (cell(rows, row + 1, 0) - cell(rows, row, 0));
    return cell(rows, row, 1) + slope * (discharge_m3s - cell(rows, row, 0));
}

static void the_bridges_rows_are_within_two_millimetres_of_its_curve(void **state)
{
    (void)state;
    struct recipe recipe = recipe_vennmark(RECIPE_VARIANT_A);
    cJSON *tree = read_configuration();
    const cJSON *rating = item_in(nth_in(tree, "points", RECIPE_BRIDGE), "stage_rating");
    const cJSON *clean = item_in(rating, "clean"), *blocked = item_in(rating, "part_blocked");
    for (int step = 0; step <= 1080; step++) { /* up to 3.996 m: the rows end at 4 m */
        double stage_m = 0.0037 * step;
        double discharge_m3s = section_normal_discharge_m3s(&recipe.section, recipe.slope_m_per_m, stage_m);
        assert_true(fabs(level_in(clean, discharge_m3s) - recipe_bridge_level_m(stage_m)) <= 0.002);
        assert_true(fabs(level_in(blocked, discharge_m3s) - recipe_bridge_part_blocked_level_m(stage_m)) <= 0.002);
    }
    cJSON_Delete(tree);
}

static void the_bridges_deck_is_wet_when_the_normal_stage_passes_two_metres_fifty(void **state)
{
    (void)state;
    static const struct {
        double normal_stage_m, clean_m, blocked_m;
        const char *why;
    } told[] = {
        {1.90, 1.90, 1.90, "0.30 m below the soffit: no lift yet"},
        {2.05, 2.05, 2.125, "half way to the soffit: half the lift of the drift"},
        {2.20, 2.20, 2.35, "the soffit"},
        {2.50, 2.62, 2.77, "0.30 m above it: 0.12 m of lift, the deck"},
    };
    for (size_t i = 0; i < COUNT_OF(told); i++) {
        assert_true(fabs(recipe_bridge_level_m(told[i].normal_stage_m) - told[i].clean_m) < 1e-12);
        assert_true(fabs(recipe_bridge_part_blocked_level_m(told[i].normal_stage_m) - told[i].blocked_m) < 1e-12);
    }
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(the_curve_passes_through_its_points_and_never_swings_beyond_their_values),
        cmocka_unit_test(the_curve_of_points_on_a_line_is_that_line),
        cmocka_unit_test(the_curve_holds_its_ends),
        cmocka_unit_test(the_true_stage_is_what_the_story_says_at_its_turns),
        cmocka_unit_test(variant_c_carries_the_stated_share_more_water),
        cmocka_unit_test(readings_stand_in_order_of_arrival),
        cmocka_unit_test(the_batch_is_twelve_readings_two_of_them_twice_and_shuffled),
        cmocka_unit_test(the_faults_of_the_feed_are_at_their_minutes),
        cmocka_unit_test(the_daemon_takes_the_configuration_without_a_fault),
        cmocka_unit_test(the_configuration_has_the_section_and_rating_of_the_recipe),
        cmocka_unit_test(the_configuration_has_the_reaches_crossings_and_beck_of_the_recipe),
        cmocka_unit_test(the_bridges_rows_are_within_two_millimetres_of_its_curve),
        cmocka_unit_test(the_bridges_deck_is_wet_when_the_normal_stage_passes_two_metres_fifty),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
