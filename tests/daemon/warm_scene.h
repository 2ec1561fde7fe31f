/* SPDX-License-Identifier: MIT */
/* The demonstration's river with some of its settings changed, and a random walk that prints its seed: for the tests of warm state. */
#ifndef FOREWATER_TESTS_DAEMON_WARM_SCENE_H
#define FOREWATER_TESTS_DAEMON_WARM_SCENE_H

#include <math.h>

#include "tests/daemon/cycle_scene.h"

struct warm_change {
    const char *instead_of, *text;
};

static const struct warm_change warm_full_equations = {"\"method\": \"muskingum-cunge\" },\n        // Sethick",
                                                       "\"method\": \"dynamic\" },\n        // Sethick"};
#define WARM_FORECAST "\"every_min\": 5, \"horizon_h\": 12, \"warm_up_h\": 12, \"time_step_s\": 60"

/* The demonstration's configuration with up to two pieces of text put in place of others. */
static inline struct settings *warm_settings(const struct warm_change *first, const struct warm_change *second)
{
    static const char file[] = FW_SOURCE_DIR "/config/demo/vennmark.json";
    const struct warm_change *const changes[] = {first, second};
    char *text = scene_read_file(file);
    for (size_t index = 0; index < 2; index++) {
        if (changes[index] == NULL)
            continue;
        char *changed = calloc(1, 70000);
        char *place = strstr(text, changes[index]->instead_of);
        assert_non_null(changed);
        assert_non_null(place);
        snprintf(changed, 70000, "%.*s%s%s", (int)(place - text), text, changes[index]->text,
                 place + strlen(changes[index]->instead_of));
        free(text);
        text = changed;
    }
    struct settings *settings = NULL;
    struct settings_faults faults = {0};
    struct fw_error error = {.status = FW_OK};
    enum fw_status status =
        settings_read_text(file, text, strlen(text), SETTINGS_FOR_RUN, &settings, &faults, &error);
    for (size_t index = 0; index < faults.count; index++)
        print_error("%s\n", faults.faults[index].text);
    assert_int_equal(status, FW_OK);
    settings_faults_clear(&faults);
    free(text);
    return settings;
}

/* Knuth's linear congruence, upper bits: 0 .. 1. */
static inline double warm_random(uint64_t *seed)
{
    *seed = *seed * UINT64_C(6364136223846793005) + UINT64_C(1442695040888963407);
    return (double)(*seed >> 11) / 9007199254740992.0;
}

static inline size_t warm_random_below(uint64_t *seed, size_t count)
{
    return (size_t)(warm_random(seed) * (double)count) % count;
}

#endif
