/* SPDX-License-Identifier: MIT */
/* The demonstration's river with clean readings made by hand: what the tests of picture and cycle share. */
#ifndef FOREWATER_TESTS_DAEMON_CYCLE_SCENE_H
#define FOREWATER_TESTS_DAEMON_CYCLE_SCENE_H

#include "daemon/cycle.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
/* after the four above, which it needs */
#include <cmocka.h>

enum { SCENE_START = 1928854800, SCENE_MINUTE = 60, SCENE_HOUR = 3600 }; /* 2031-02-14 18:00 +01:00 */

struct scene {
    struct settings *settings;
    struct cycle *cycle;
    struct picture *picture;
};

static inline char *scene_read_file(const char *path)
{
    FILE *stream = fopen(path, "re");
    assert_non_null(stream);
    char *text = calloc(1, 65536);
    assert_non_null(text);
    assert_true(fread(text, 1, 65535, stream) > 0);
    fclose(stream);
    return text;
}

/* The demonstration's configuration with one piece of text put in place of another. */
static inline struct settings *scene_settings(const char *instead_of, const char *text)
{
    static const char file[] = FW_SOURCE_DIR "/config/demo/vennmark.json";
    char *original = scene_read_file(file);
    char *changed = calloc(1, 70000);
    assert_non_null(changed);
    char *place = instead_of != NULL ? strstr(original, instead_of) : NULL;
    if (place != NULL)
        snprintf(changed, 70000, "%.*s%s%s", (int)(place - original), original, text, place + strlen(instead_of));
    else
        snprintf(changed, 70000, "%s", original);
    assert_true(instead_of == NULL || place != NULL);
    struct settings *settings = NULL;
    struct settings_faults faults = {0};
    struct fw_error error = {.status = FW_OK};
    enum fw_status status =
        settings_read_text(file, changed, strlen(changed), SETTINGS_FOR_RUN, &settings, &faults, &error);
    for (size_t index = 0; index < faults.count; index++)
        print_error("%s\n", faults.faults[index].text);
    assert_int_equal(status, FW_OK);
    settings_faults_clear(&faults);
    free(original);
    free(changed);
    return settings;
}

static inline struct scene scene_open(const char *instead_of, const char *text)
{
    struct scene scene = {.settings = scene_settings(instead_of, text)};
    struct fw_error error = {.status = FW_OK};
    assert_int_equal(cycle_create(scene.settings, &scene.cycle, &error), FW_OK);
    assert_int_equal(picture_create(scene.settings, &scene.picture), FW_OK);
    return scene;
}

static inline void scene_close(struct scene *scene)
{
    cycle_destroy(scene->cycle);
    picture_destroy(scene->picture);
    settings_destroy(scene->settings);
}

static inline struct reading scene_reading(int64_t observed_utc_s, double stage_m)
{
    struct reading reading = {.gauge = 0,
                              .source = 0,
                              .observed_utc_s = observed_utc_s,
                              .value = stage_m,
                              .value_si = stage_m,
                              .unit = "m",
                              .received_utc_s = observed_utc_s + SCENE_MINUTE};
    return reading;
}

/* One cycle; the delta is given back, the picture taken. */
static inline struct delta scene_run(struct scene *scene, const struct news *news, int64_t now_utc_s)
{
    static const struct news nothing = {0};
    struct delta delta = {0};
    struct fw_error error = {.status = FW_OK};
    assert_int_equal(
        cycle_run(scene->cycle, scene->picture, news != NULL ? news : &nothing, now_utc_s, &delta, &error), FW_OK);
    picture_destroy(scene->picture);
    scene->picture = delta_take_picture(&delta);
    return delta;
}

#endif
