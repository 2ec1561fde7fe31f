/* SPDX-License-Identifier: MIT */
/* A forecast is made in the roughness of its moment's season. */
#include "tests/daemon/cycle_scene.h"

#include <math.h>

#include "daemon/ledger.h"

enum { FORD, RISE_MINUTES = 280 };

static const char plain_n[] = "\"n\": 0.075 } }"; /* of the demonstration's one section */

static struct scene open_with(const char *seasons)
{
    char text[300];
    snprintf(text, sizeof text, "\"n\": 0.075 }%s }", seasons);
    return scene_open(plain_n, text);
}

static struct delta run_rise_at(struct scene *scene, int64_t start_utc_s)
{
    struct news news = {0};
    for (int minute = 0; minute <= RISE_MINUTES; minute += 5) {
        double since = minute < 120 ? 0.0 : minute - 120.0;
        double stage_m = 1.02 + 2.2 * (1.0 - exp(-since * since / (2.0 * 75.0 * 75.0)));
        struct reading reading = scene_reading(start_utc_s + minute * SCENE_MINUTE, round(100.0 * stage_m) / 100.0);
        assert_int_equal(news_add_reading(&news, &reading), FW_OK);
    }
    struct delta delta = scene_run(scene, &news, start_utc_s + RISE_MINUTES * SCENE_MINUTE);
    news_clear(&news);
    return delta;
}

static struct passage_peak peak_of(const char *seasons, int64_t start_utc_s)
{
    struct scene scene = open_with(seasons);
    struct delta delta = run_rise_at(&scene, start_utc_s);
    struct passage_peak peak = scene.picture->points[FORD].peak;
    delta_clear(&delta);
    scene_close(&scene);
    return peak;
}

/* 2031-02-14 is in the season that began in November: what is made is what x1.3 on n itself makes. */
static void the_season_of_the_date_rules(void **state)
{
    (void)state;
    struct passage_peak winter = peak_of(
        ", \"seasons\": [ { \"from\": \"05-01\", \"n_factor\": 0.7 }, { \"from\": \"11-01\", \"n_factor\": 1.3 } ]",
        SCENE_START);
    struct passage_peak always = peak_of(
        ", \"seasons\": [ { \"from\": \"01-01\", \"n_factor\": 1.3 }, { \"from\": \"07-01\", \"n_factor\": 1.3 } ]",
        SCENE_START);
    struct passage_peak stated = peak_of("", SCENE_START);
    assert_memory_equal(&winter, &always, sizeof winter);
    assert_true(winter.highest_m > stated.highest_m + 0.1 && winter.likely_m > stated.likely_m + 0.1);
}

/* Over midnight of the district's clock into another season: as if the cycle had never seen the one before. */
static void a_cycle_over_a_change_of_season_is_a_new_one(void **state)
{
    (void)state;
    static const char seasons[] =
        ", \"seasons\": [ { \"from\": \"02-15\", \"n_factor\": 1.25 }, { \"from\": \"12-01\", \"n_factor\": 0.9 } ]";
    const int64_t midnight_utc_s = SCENE_START + 6 * SCENE_HOUR; /* 2031-02-15 00:00 +01:00 */
    struct scene scene = open_with(seasons);
    struct delta before = run_rise_at(&scene, SCENE_START);
    delta_clear(&before);
    struct delta eve = scene_run(&scene, NULL, midnight_utc_s - 1);
    struct passage_peak on_the_eve = scene.picture->points[FORD].peak;
    delta_clear(&eve);
    struct picture *kept = NULL;
    assert_int_equal(picture_copy(scene.settings, scene.picture, &kept), FW_OK);
    struct delta after = scene_run(&scene, NULL, midnight_utc_s);
    struct passage_peak after_it = scene.picture->points[FORD].peak;
    assert_true(after_it.highest_m > on_the_eve.highest_m + 0.1);

    struct fw_error error = {.status = FW_OK};
    static const struct news nothing = {0};
    struct cycle *fresh = NULL;
    struct delta cold = {0};
    assert_int_equal(cycle_create(scene.settings, &fresh, &error), FW_OK);
    assert_int_equal(cycle_run(fresh, kept, &nothing, midnight_utc_s, &cold, &error), FW_OK);
    assert_string_equal(cold.ledger.payload_digest, after.ledger.payload_digest);
    assert_non_null(strstr(text_string(&after.ledger.payload), "\"roughness_from\":\"02-15\""));
    cycle_destroy(fresh);
    picture_destroy(kept);
    delta_clear(&cold);
    delta_clear(&after);
    scene_close(&scene);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(the_season_of_the_date_rules),
        cmocka_unit_test(a_cycle_over_a_change_of_season_is_a_new_one),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
