/* SPDX-License-Identifier: MIT */
#include "tests/daemon/cycle_scene.h"

#include <math.h>

#include "daemon/ledger.h"

/* A steady night, then a rise: stage by minute, smooth enough that nothing is suspect. */
static double rising_stage_m(int minute)
{
    double since = minute - 180.0;
    return since <= 0.0 ? 1.02 : 1.02 + 1.9 * (1.0 - exp(-since * since / (2.0 * 75.0 * 75.0)));
}

static void add_readings(struct news *news, int from_minute, int to_minute, int every)
{
    for (int minute = from_minute; minute <= to_minute; minute += every) {
        struct reading reading =
            scene_reading(SCENE_START + minute * SCENE_MINUTE, round(100.0 * rising_stage_m(minute)) / 100.0);
        assert_int_equal(news_add_reading(news, &reading), FW_OK);
    }
}

static struct delta run_with_rise(struct scene *scene, int until_minute)
{
    struct news news = {0};
    add_readings(&news, 0, until_minute, 5);
    struct delta delta = scene_run(scene, &news, SCENE_START + until_minute * SCENE_MINUTE);
    news_clear(&news);
    return delta;
}

static void a_cycle_leaves_the_picture_before_it_as_it_was(void **state)
{
    (void)state;
    struct scene scene = scene_open(NULL, NULL);
    struct news news = {0};
    struct delta delta = {0};
    struct fw_error error = {.status = FW_OK};
    struct text before = {0};
    struct text after = {0};
    add_readings(&news, 0, 240, 5);
    assert_int_equal(picture_write_json(scene.settings, scene.picture, &before), FW_OK);
    assert_int_equal(cycle_run(scene.cycle, scene.picture, &news, SCENE_START + 240 * SCENE_MINUTE, &delta, &error),
                     FW_OK);
    assert_int_equal(picture_write_json(scene.settings, scene.picture, &after), FW_OK);
    assert_string_equal(text_string(&before), text_string(&after));
    assert_int_equal(delta.reading_count, 49);
    assert_int_equal(delta.judgement_count, 49);
    assert_true(delta.next->next_entry > scene.picture->next_entry + 98);
    delta_clear(&delta);
    news_clear(&news);
    text_clear(&before);
    text_clear(&after);
    scene_close(&scene);
}

static void the_same_input_gives_the_same_bytes(void **state)
{
    (void)state;
    char links[2][FACT_DIGEST_SIZE];
    for (size_t run = 0; run < 2; run++) {
        struct scene scene = scene_open(NULL, NULL);
        struct delta first = run_with_rise(&scene, 250);
        struct delta second = scene_run(&scene, NULL, SCENE_START + 255 * SCENE_MINUTE);
        memcpy(links[run], second.ledger.link, FACT_DIGEST_SIZE);
        delta_clear(&first);
        delta_clear(&second);
        scene_close(&scene);
    }
    assert_string_equal(links[0], links[1]);
    assert_int_equal(strlen(links[0]), 64);
}

static void readings_shuffled_and_doubled_give_the_same_picture(void **state)
{
    (void)state;
    unsigned seed = 20310214;
    print_message("seed %u\n", seed);
    struct text payloads[2] = {{0}};
    for (size_t run = 0; run < 2; run++) {
        struct scene scene = scene_open(NULL, NULL);
        struct news news = {0};
        add_readings(&news, 0, 260, 5);
        if (run == 1) {
            add_readings(&news, 100, 200, 5);
            for (size_t index = news.reading_count - 1; index > 0; index--) {
                seed = seed * 1664525u + 1013904223u;
                size_t other = seed / 7u % (index + 1);
                struct reading moving = news.readings[index];
                news.readings[index] = news.readings[other];
                news.readings[other] = moving;
            }
        }
        struct delta delta = scene_run(&scene, &news, SCENE_START + 262 * SCENE_MINUTE);
        text_add(&payloads[run], "%s", text_string(&delta.ledger.payload));
        delta_clear(&delta);
        news_clear(&news);
        scene_close(&scene);
    }
    assert_string_equal(text_string(&payloads[0]), text_string(&payloads[1]));
    text_clear(&payloads[0]);
    text_clear(&payloads[1]);
}

static void ten_more_minutes_of_crew_time_move_act_by_by_ten(void **state)
{
    (void)state;
    int64_t act_by[2];
    for (size_t run = 0; run < 2; run++) {
        struct scene scene = run == 0 ? scene_open(NULL, NULL) : scene_open("\"night_min\": 55", "\"night_min\": 65");
        struct delta delta = run_with_rise(&scene, 255);
        act_by[run] = scene.picture->points[0].advice.act_by_utc_s;
        assert_true(act_by[run] != PASSAGE_NEVER);
        delta_clear(&delta);
        scene_close(&scene);
    }
    assert_int_equal(act_by[0] - act_by[1], 10 * SCENE_MINUTE);
}

static void a_gauge_that_falls_silent_is_blind_at_its_limit_and_not_before(void **state)
{
    (void)state;
    static const struct {
        int until_minute;
        int limit_minutes; /* 25 while the river moves, 45 else */
    } cases[] = {{250, 25}, {150, 45}};
    for (size_t index = 0; index < sizeof cases / sizeof *cases; index++) {
        struct scene scene = scene_open(NULL, NULL);
        int64_t newest = SCENE_START + cases[index].until_minute * SCENE_MINUTE;
        struct delta delta = run_with_rise(&scene, cases[index].until_minute);
        delta_clear(&delta);
        delta = scene_run(&scene, NULL, newest + cases[index].limit_minutes * SCENE_MINUTE - 1);
        assert_false(scene.picture->points[0].advice.is_blind);
        delta_clear(&delta);
        delta = scene_run(&scene, NULL, newest + cases[index].limit_minutes * SCENE_MINUTE);
        assert_true(scene.picture->points[0].advice.is_blind);
        assert_true(scene.picture->points[2].advice.is_blind);
        delta_clear(&delta);
        scene_close(&scene);
    }
}

static void a_district_without_any_reading_is_blind_and_not_quiet(void **state)
{
    (void)state;
    struct scene scene = scene_open(NULL, NULL);
    struct delta delta = scene_run(&scene, NULL, SCENE_START);
    for (size_t point = 0; point < 3; point++) {
        assert_true(scene.picture->points[point].advice.is_blind);
        assert_int_equal(scene.picture->points[point].advice.level, ADVICE_MUSTER);
        assert_true(scene.picture->points[point].is_unknown);
        assert_true(isnan(scene.picture->points[point].level_now.likely_m));
        assert_int_equal(scene.picture->points[point].measured_until_utc_s, 0);
        assert_true(scene.picture->forecast.likely_mm[point * scene.picture->forecast.step_count] == -1);
    }
    assert_int_equal(delta.decision_count, 3);
    assert_int_equal(scene.picture->outbox_count, scene.settings->roster[0].to_count); /* one message, not three */
    assert_non_null(strstr(scene.picture->outbox[0].short_text, "NO FORECAST"));
    assert_non_null(strstr(scene.picture->outbox[0].bulletin, "There is NO FORECAST for Tallowick Ford"));
    assert_non_null(strstr(scene.picture->outbox[0].bulletin, " no forecast ")); /* in the table */
    assert_null(strstr(scene.picture->outbox[0].bulletin, "not reached"));
    delta_clear(&delta);
    scene_close(&scene);
}

/*
 * Practice: nothing before the horizon moves by more than the stated 2 cm for any future inside the stated envelope. The envelope's edges are
 * played for real: the gauge goes up or down at the limits until the horizon, and the level then is held against what was said.
 */
static void what_rests_on_measured_water_stands_whatever_comes(void **state)
{
    (void)state;
    for (int sign = -1; sign <= 1; sign += 2) {
        struct scene scene = scene_open(NULL, NULL);
        struct delta delta = run_with_rise(&scene, 250);
        delta_clear(&delta);
        int64_t now = SCENE_START + 250 * SCENE_MINUTE;
        const struct settings_gauge *gauge = &scene.settings->gauges[0];
        double rate_per_s = sign > 0 ? gauge->assumed.fastest_rise_per_s : -gauge->assumed.fastest_fall_per_s;
        for (size_t point = 0; point < 3; point++) {
            int64_t until = scene.picture->points[point].measured_until_utc_s;
            assert_true(until > now && until < now + 6 * SCENE_HOUR);
            size_t step = (size_t)((until - scene.picture->forecast.start_utc_s) / scene.picture->forecast.step_s);
            int64_t at = scene.picture->forecast.start_utc_s + (int64_t)step * scene.picture->forecast.step_s;
            double said_m =
                scene.picture->forecast.likely_mm[point * scene.picture->forecast.step_count + step] / 1000.0;

            struct scene later = scene_open(NULL, NULL);
            struct news news = {0};
            add_readings(&news, 0, 250, 5);
            for (int64_t utc_s = now + 300; utc_s <= at; utc_s += 300) {
                /* as the edge is computed: from the newest value, never below dry */
                double stage_m = fmax(0.0, rising_stage_m(250) + rate_per_s * (double)(utc_s - now));
                struct reading reading = scene_reading(utc_s, fmin(stage_m, gauge->quality.highest));
                assert_int_equal(news_add_reading(&news, &reading), FW_OK);
            }
            delta = scene_run(&later, &news, at);
            assert_true(fabs(later.picture->points[point].level_now.likely_m - said_m) <= 0.02 + 0.001);
            delta_clear(&delta);
            news_clear(&news);
            scene_close(&later);
        }
        scene_close(&scene);
    }
}

/*
 * The same night through the full equations: a river of this slope and length is one the storage form is fit for (engine/method.h), so the two must
 * give the same arrival within a few minutes.
 */
static void a_reach_by_the_full_equations_brings_the_water_at_the_same_time(void **state)
{
    (void)state;
    int64_t likely[2];
    for (size_t run = 0; run < 2; run++) {
        struct scene scene = run == 0 ? scene_open(NULL, NULL)
                                      : scene_open("\"method\": \"muskingum-cunge\" },\n        // Sethick",
                                                   "\"method\": \"dynamic\" },\n        // Sethick");
        struct delta delta = run_with_rise(&scene, 330);
        likely[run] = scene.picture->points[0].marks[1].passage.likely_utc_s;
        assert_true(likely[run] != PASSAGE_NEVER);
        print_message("steps without backwater: %.4f\n", scene.picture->replaced_share);
        /* the envelope's falling edge runs nearly dry, which the full equations do not take */
        assert_true(scene.picture->replaced_share >= 0.0 && scene.picture->replaced_share < 0.15);
        delta_clear(&delta);
        scene_close(&scene);
    }
    print_message("deck awash, likely: %lld s apart\n", (long long)(likely[1] - likely[0]));
    assert_true(llabs((long long)(likely[1] - likely[0])) <= 180);
}

static void a_hand_reading_in_centimetres_is_the_metres_a_feed_would_have_made_of_it(void **state)
{
    (void)state;
    struct scene scene = scene_open(NULL, NULL);
    struct news news = {0};
    struct word word = {.id = "hand",
                        .kind = WORD_READING,
                        .subject = "orlin-scar",
                        .value = 139.0,
                        .unit = "cm",
                        .by = "catchment technician",
                        .at_utc_s = SCENE_START,
                        .received_utc_s = SCENE_START};
    assert_int_equal(news_add_word(&news, &word), FW_OK);
    struct delta delta = scene_run(&scene, &news, SCENE_START);
    assert_int_equal(delta.reading_count, 1);
    assert_true(delta.readings[0].value_si == 1.39); /* to the last bit: 139 x 0.01 is another number */
    assert_true(delta.readings[0].value == 139.0);
    delta_clear(&delta);
    news_clear(&news);
    scene_close(&scene);
}

static void the_links_of_two_cycles_make_a_chain(void **state)
{
    (void)state;
    struct scene scene = scene_open(NULL, NULL);
    struct delta first = run_with_rise(&scene, 200);
    struct delta second = scene_run(&scene, NULL, SCENE_START + 205 * SCENE_MINUTE);
    struct ledger_entry again = {.entry = second.ledger.entry, .utc_s = second.ledger.utc_s};
    memcpy(again.kind, second.ledger.kind, sizeof again.kind);
    text_add(&again.payload, "%s", text_string(&second.ledger.payload));
    assert_int_equal(ledger_seal(first.ledger.link, &again), FW_OK);
    assert_string_equal(again.link, second.ledger.link);
    assert_string_equal(scene.picture->newest_link, second.ledger.link);
    text_clear(&again.payload);
    delta_clear(&first);
    delta_clear(&second);
    scene_close(&scene);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(a_cycle_leaves_the_picture_before_it_as_it_was),
        cmocka_unit_test(the_same_input_gives_the_same_bytes),
        cmocka_unit_test(readings_shuffled_and_doubled_give_the_same_picture),
        cmocka_unit_test(ten_more_minutes_of_crew_time_move_act_by_by_ten),
        cmocka_unit_test(a_gauge_that_falls_silent_is_blind_at_its_limit_and_not_before),
        cmocka_unit_test(a_district_without_any_reading_is_blind_and_not_quiet),
        cmocka_unit_test(what_rests_on_measured_water_stands_whatever_comes),
        cmocka_unit_test(a_reach_by_the_full_equations_brings_the_water_at_the_same_time),
        cmocka_unit_test(a_hand_reading_in_centimetres_is_the_metres_a_feed_would_have_made_of_it),
        cmocka_unit_test(the_links_of_two_cycles_make_a_chain),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
