/* SPDX-License-Identifier: MIT */
/* A forecast that stands above what was surveyed of the river says so. */
#include "tests/daemon/cycle_scene.h"

static struct scene open_valley(const char *instead_of, const char *text)
{
    static const char file[] = FW_SOURCE_DIR "/tests/data/settings/valley.json";
    struct scene scene = {0};
    struct settings_faults faults = {0};
    struct fw_error error = {.status = FW_OK};
    struct text changed = {0};
    char *original = scene_read_file(file);
    const char *place = strstr(original, instead_of);
    assert_non_null(place);
    text_add_bytes(&changed, original, (size_t)(place - original));
    text_add(&changed, "%s%s", text, place + strlen(instead_of));
    assert_int_equal(settings_read_text(file, text_string(&changed), changed.length, SETTINGS_FOR_RUN,
                                        &scene.settings, &faults, &error),
                     FW_OK);
    assert_int_equal(cycle_create(scene.settings, &scene.cycle, &error), FW_OK);
    assert_int_equal(picture_create(scene.settings, &scene.picture), FW_OK);
    text_clear(&changed);
    free(original);
    return scene;
}

/* A still weir at a stage and a still beck, one cycle. */
static void stand_at(struct scene *scene, double stage_m)
{
    struct news news = {0};
    for (int minute = 0; minute <= 360; minute += 15)
        for (size_t gauge = 0; gauge < scene->settings->gauge_count; gauge++) {
            double still = gauge == 0 ? stage_m : 0.7,
                   moved = still + (minute / 15 % 2) * 0.01; /* else it is frozen */
            struct reading reading = scene_reading(SCENE_START + minute * SCENE_MINUTE, moved);
            reading.gauge = (int32_t)gauge;
            snprintf(reading.unit, sizeof reading.unit, "%s", gauge == 0 ? "m" : "m3/s");
            assert_int_equal(news_add_reading(&news, &reading), FW_OK);
        }
    struct delta delta = scene_run(scene, &news, SCENE_START + 361 * SCENE_MINUTE);
    delta_clear(&delta);
    news_clear(&news);
}

static void water_above_the_survey_is_flagged(void **state)
{
    (void)state;
    static const char ends[] = "[31, 4.1]", point[] = "\"id\": \"mill-ford\", \"name\"", same_slope[] = "0.0016";
    static const char rated[] =
        "\"id\": \"mill-ford\", \"stage_rating\": { \"clean\": [[0, 0], [900, 3]] }, \"name\"";
    static const struct {
        const char *shows, *find, *replace;
        double stage_m;
        bool is_above;
    } rows[] = {{"low water", ends, ends, 1.10, false},
                {"high water", ends, ends, 5.60, true},
                {"a lower end", ends, "[31, 1.85]", 2.30, true},
                {"and low water there", ends, "[31, 1.85]", 1.10, false},
                {"below the point's own survey, above that at the gauge", same_slope, "0.29", 4.90, true},
                {"a point with a rating of its own", point, rated, 5.60, true},
                {"and low water there too", point, rated, 1.10, false}};
    for (size_t i = 0; i < sizeof rows / sizeof *rows; i++) {
        struct scene scene = open_valley(rows[i].find, rows[i].replace);
        stand_at(&scene, rows[i].stage_m);
        const struct point_picture *ford = &scene.picture->points[0];
        print_message("%s: weir at %.2f m, ford at %.2f m\n", rows[i].shows, rows[i].stage_m,
                      ford->level_now.likely_m);
        assert_false(ford->is_unknown);
        if (ford->is_peak_above_survey != rows[i].is_above)
            fail_msg("%s: flagged %d", rows[i].shows, ford->is_peak_above_survey);
        scene_close(&scene);
    }
}

static void a_shape_without_an_upper_end_is_never_flagged(void **state)
{
    (void)state;
    struct scene scene = scene_open(NULL, NULL);
    stand_at(&scene, 4.9);
    for (size_t point = 0; point < scene.settings->point_count; point++)
        assert_false(scene.picture->points[point].is_peak_above_survey);
    scene_close(&scene);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(water_above_the_survey_is_flagged),
        cmocka_unit_test(a_shape_without_an_upper_end_is_never_flagged),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
