/* SPDX-License-Identifier: MIT */
/* What a cycle gives depends on readings, settings and now alone: never on what was routed before, nor on how. */
#include "tests/daemon/warm_scene.h"

#include <unistd.h>

#include "daemon/cycle_steps.h"
#include "daemon/store/store.h"

enum { NIGHT_MINUTES = 20 * 60, EVERY = 5 };

static struct scene open_scene(const struct warm_change *first, const struct warm_change *second)
{
    struct scene scene = {.settings = warm_settings(first, second)};
    struct fw_error error = {.status = FW_OK};
    assert_int_equal(cycle_create(scene.settings, &scene.cycle, &error), FW_OK);
    assert_int_equal(picture_create(scene.settings, &scene.picture), FW_OK);
    return scene;
}

/* Two floods, the second on the first one's fall. */
static double stage_m(int minute)
{
    double hours = (double)minute / 60.0;
    return 1.02 + 1.7 * exp(-pow((hours - 7.0) / 2.3, 2.0)) + 1.1 * exp(-pow((hours - 17.0) / 3.1, 2.0));
}

static void add(struct news *news, int minute, double value_m)
{
    struct reading reading =
        scene_reading(SCENE_START + (int64_t)minute * SCENE_MINUTE, round(100.0 * value_m) / 100.0);
    assert_int_equal(news_add_reading(news, &reading), FW_OK);
}

/* A night's feed at its worst: some readings fail, come hours late, are corrected, or are spikes; a person reads the board. */
static void add_random_news(struct news *news, int minute, uint64_t *seed)
{
    if (warm_random(seed) < 0.7)
        add(news, minute, stage_m(minute));
    if (warm_random(seed) < 0.15) {
        int late = (int)warm_random_below(seed, (size_t)minute / EVERY) * EVERY;
        add(news, late, stage_m(late) + (warm_random(seed) < 0.3 ? 0.05 : 0.0));
    }
    if (warm_random(seed) < 0.05)
        add(news, minute - 2, stage_m(minute) + 2.0);
    if (warm_random(seed) < 0.05) {
        struct word word = {.kind = WORD_READING,
                            .subject = "orlin-scar",
                            .value = stage_m(minute) + 0.02,
                            .unit = "m",
                            .by = "catchment technician",
                            .at_utc_s = SCENE_START + (int64_t)(minute - 3) * SCENE_MINUTE,
                            .received_utc_s = SCENE_START + (int64_t)minute * SCENE_MINUTE};
        snprintf(word.id, sizeof word.id, "hand-%d", minute);
        assert_int_equal(news_add_word(news, &word), FW_OK);
    }
}

/* As if it had never come: no feed takes a reading back, but what is routed must not depend on that. */
static void delete_a_reading(struct picture *picture, uint64_t *seed)
{
    struct gauge_picture *gauge = &picture->gauges[0];
    if (gauge->reading_count < 2)
        return;
    size_t index = warm_random_below(seed, gauge->reading_count);
    gauge->reading_count--;
    memmove(gauge->readings + index, gauge->readings + index + 1,
            (gauge->reading_count - index) * sizeof *gauge->readings);
}

/* The same picture and news through a cycle that has seen nothing: every level of every run, and the picture, to the last bit. */
static void assert_same_when_cold(const struct scene *scene, const struct news *news, int64_t now_utc_s)
{
    struct cycle *cold = NULL;
    struct delta warm_delta = {0}, cold_delta = {0};
    struct fw_error error = {.status = FW_OK};
    assert_int_equal(cycle_create(scene->settings, &cold, &error), FW_OK);
    assert_int_equal(cycle_run(scene->cycle, scene->picture, news, now_utc_s, &warm_delta, &error), FW_OK);
    assert_int_equal(cycle_run(cold, scene->picture, news, now_utc_s, &cold_delta, &error), FW_OK);
    assert_string_equal(text_string(&warm_delta.ledger.payload), text_string(&cold_delta.ledger.payload));
    assert_string_equal(warm_delta.ledger.link, cold_delta.ledger.link);
    assert_int_equal(scene->cycle->start_utc_s, cold->start_utc_s);
    assert_int_equal(scene->cycle->step_count, cold->step_count);
    for (size_t point = 0; point < scene->settings->point_count; point++)
        assert_memory_equal(cycle_stage_m(scene->cycle, point, 0), cycle_stage_m(cold, point, 0),
                            (cold->step_count + 1) * cold->member_count * sizeof(double));
    assert_true(memcmp(&scene->cycle->replaced_share, &cold->replaced_share, sizeof(double)) == 0);
    delta_clear(&warm_delta);
    delta_clear(&cold_delta);
    cycle_destroy(cold);
}

static void a_warm_cycle_gives_the_bytes_of_a_cold_one_whatever_comes_late(void **state)
{
    (void)state;
    /* the full equations are dear where the envelope's lower edge runs dry: fewer and shorter cycles */
    static const struct warm_change shorter = {
        WARM_FORECAST, "\"every_min\": 5, \"horizon_h\": 1, \"warm_up_h\": 4, \"time_step_s\": 60"};
    for (int full = 0; full < 2; full++) {
        uint64_t seed = UINT64_C(1928854800) + (uint64_t)full;
        print_message("seed %llu\n", (unsigned long long)seed);
        struct scene scene = open_scene(full ? &warm_full_equations : NULL, full ? &shorter : NULL);
        size_t compared = 0, cycles = 0;
        for (int minute = EVERY; minute <= (full ? 9 * 60 : NIGHT_MINUTES);
             minute += 1 + (int)warm_random_below(&seed, full ? 59 : 13), cycles++) {
            struct news news = {0};
            int64_t now_utc_s = SCENE_START + (int64_t)minute * SCENE_MINUTE + (int64_t)warm_random_below(&seed, 60);
            add_random_news(&news, minute, &seed);
            if (warm_random(&seed) < 0.1)
                delete_a_reading(scene.picture, &seed);
            if (cycles % (full ? 3 : 5) == 0) {
                assert_same_when_cold(&scene, &news, now_utc_s);
                compared++;
            }
            struct delta delta = scene_run(&scene, &news, now_utc_s);
            delta_clear(&delta);
            news_clear(&news);
        }
        print_message("%zu of %zu cycles compared\n", compared, cycles);
        assert_true(compared >= (full ? 5 : 30));
        scene_close(&scene);
    }
}

/* Steps are counted, not timed. Also in the pass at which the start of the routing moves on by six hours. */
static void the_steps_of_a_cycle_follow_the_horizon_and_not_the_warm_up(void **state)
{
    (void)state;
    static const struct {
        struct warm_change forecast;
        int warm_up_h, horizon_h;
    } rows[] = {
        {{WARM_FORECAST, "\"every_min\": 5, \"horizon_h\": 6, \"warm_up_h\": 24, \"time_step_s\": 60"}, 24, 6},
        {{WARM_FORECAST, "\"every_min\": 5, \"horizon_h\": 6, \"warm_up_h\": 96, \"time_step_s\": 60"}, 96, 6},
        {{WARM_FORECAST, "\"every_min\": 5, \"horizon_h\": 12, \"warm_up_h\": 96, \"time_step_s\": 60"}, 96, 12}};
    for (size_t i = 0; i < sizeof rows / sizeof *rows; i++) {
        struct scene scene = open_scene(&rows[i].forecast, NULL);
        size_t most = 0, starts = 0, steps = 0;
        int64_t start_utc_s = 0;
        for (int minute = 0; minute <= 12 * 60 + 30; minute += EVERY) {
            struct news news = {0};
            add(&news, minute, stage_m(minute));
            struct delta delta = scene_run(&scene, &news, SCENE_START + (int64_t)minute * SCENE_MINUTE);
            steps = scene.cycle->present->steps_taken + scene.cycle->coming->steps_taken;
            starts += minute > 0 && scene.cycle->present->start_utc_s != start_utc_s;
            most = starts > 0 && steps > most ? steps : most;
            start_utc_s = scene.cycle->present->start_utc_s;
            delta_clear(&delta);
            news_clear(&news);
        }
        print_message("warm-up %d h, horizon %d h: at most %zu steps a cycle\n", rows[i].warm_up_h, rows[i].horizon_h,
                      most);
        assert_int_equal(starts, 2);
        /* the horizon; back to the last whole hour before the reading before; of the coming track a 72nd part of what it lacks, and what
         * has flowed since the cycle before */
        assert_true(most <= (size_t)(rows[i].horizon_h * 60 + 60 + 2 * EVERY + rows[i].warm_up_h * 60 / 72 + EVERY));
        scene_close(&scene);
    }
}

static enum fw_status add_unrouted(struct scene *scene, const struct news *news)
{
    enum fw_status status = FW_OK;
    bool was_new = false;
    for (size_t index = 0; index < news->reading_count && status == FW_OK; index++)
        status = picture_add_reading(scene->picture, &news->readings[index], &was_new);
    return status;
}

/* Of all levels from now on, at all points, of all runs. */
static double furthest_apart_m(const struct scene *left, const struct scene *right, int64_t now_utc_s)
{
    size_t left_step = (size_t)((now_utc_s - left->cycle->start_utc_s) / SCENE_MINUTE);
    size_t right_step = (size_t)((now_utc_s - right->cycle->start_utc_s) / SCENE_MINUTE);
    size_t ahead = left->cycle->step_count - left_step;
    double most_m = 0.0;
    assert_int_equal(right->cycle->step_count - right_step, ahead);
    for (size_t point = 0; point < left->settings->point_count; point++) {
        const double *left_m = cycle_stage_m(left->cycle, point, left_step);
        const double *right_m = cycle_stage_m(right->cycle, point, right_step);
        for (size_t value = 0; value < (ahead + 1) * left->cycle->member_count; value++)
            most_m = fmax(most_m, fabs(left_m[value] - right_m[value]));
    }
    return most_m;
}

/* A river that stood still for days before it rose: its readings are frozen ones, and the oldest of them speaks for all. */
static void a_still_river_is_warm_too(void **state)
{
    (void)state;
    struct scene scene = open_scene(NULL, NULL);
    struct news news = {0};
    for (int minute = -30 * 60; minute < 0; minute += EVERY)
        add(&news, minute, 1.02);
    struct delta delta = scene_run(&scene, &news, SCENE_START);
    size_t cold = scene.cycle->present->steps_taken, colds = 0;
    assert_true(cold >= 24 * 60);
    delta_clear(&delta);
    news_clear(&news);
    for (int minute = EVERY; minute <= 5 * 60; minute += EVERY) {
        add(&news, minute, 1.02 + 0.2 * (double)minute / 60.0);
        delta = scene_run(&scene, &news, SCENE_START + (int64_t)minute * SCENE_MINUTE);
        colds += scene.cycle->present->steps_taken > 14 * 60;
        delta_clear(&delta);
        news_clear(&news);
    }
    print_message("%zu of 60 cycles from the start\n", colds);
    assert_true(colds <= 3);
    scene_close(&scene);
}

/* A routing that begins twice as far back remembers another start; how much of it is left where levels are looked at. */
static void twice_the_warm_up_changes_no_level_by_more_than_a_micrometre(void **state)
{
    (void)state;
    static const struct warm_change lengths[] = {
        {WARM_FORECAST, "\"every_min\": 5, \"horizon_h\": 3, \"warm_up_h\": 12, \"time_step_s\": 60"},
        {WARM_FORECAST, "\"every_min\": 5, \"horizon_h\": 3, \"warm_up_h\": 24, \"time_step_s\": 60"}};
    for (int full = 0; full < 2; full++) {
        struct scene scenes[2];
        double most_m = 0.0;
        for (int length = 0; length < 2; length++)
            scenes[length] = open_scene(&lengths[length], full ? &warm_full_equations : NULL);
        /* on and between floods that came 18 hours later than stage_m says */
        for (int minute = 0; minute <= 44 * 60; minute += 4 * 60) {
            struct news news = {0};
            int64_t now_utc_s = SCENE_START + (int64_t)minute * SCENE_MINUTE;
            for (int read = minute - 4 * 60 + EVERY; read <= minute; read += EVERY)
                add(&news, read, stage_m(read - 18 * 60));
            for (int length = 0; length < 2; length++) {
                if (minute < 24 * 60) /* only the feed, until there are readings for all of the longer warm-up */
                    assert_int_equal(add_unrouted(&scenes[length], &news), FW_OK);
                else {
                    struct delta delta = scene_run(&scenes[length], &news, now_utc_s);
                    delta_clear(&delta);
                }
            }
            news_clear(&news);
            if (minute >= 24 * 60)
                most_m = fmax(most_m, furthest_apart_m(&scenes[0], &scenes[1], now_utc_s));
        }
        print_message("%s: 12 h against 24 h of warm-up, at most %.3g m\n", full ? "full equations" : "storage form",
                      most_m);
        assert_true(most_m <= 1e-6);
        for (int length = 0; length < 2; length++)
            scene_close(&scenes[length]);
    }
}

static void commit(struct store *store, struct scene *scene, const struct news *news, int64_t now_utc_s,
                   struct text *payload_out)
{
    struct delta delta = {0};
    struct fw_error error = {.status = FW_OK};
    assert_int_equal(cycle_run(scene->cycle, scene->picture, news, now_utc_s, &delta, &error), FW_OK);
    assert_int_equal(store_commit(store, scene->settings, &delta, &error), FW_OK);
    text_clear(payload_out);
    text_add(payload_out, "%s", text_string(&delta.ledger.payload));
    picture_destroy(scene->picture);
    scene->picture = delta_take_picture(&delta);
    delta_clear(&delta);
}

/*
 * A member's value, wherever it stands. The link before digests what came before it; since when a trigger has held, and the number of a thread
 * whose changes all rode with another's message, no store remembers over a restart.
 */
static void blank(struct text *payload, const char *member)
{
    for (char *place = strstr(payload->bytes, member); place != NULL; place = strstr(place, member)) {
        place += strlen(member);
        size_t length = strcspn(place, ",}");
        memmove(place, place + length, strlen(place + length) + 1);
    }
}

static struct store *open_store(const char *file, const struct settings *settings)
{
    struct store *store = NULL;
    struct fw_error error = {.status = FW_OK};
    assert_int_equal(store_open(file, STORE_WRITE, &store, &error), FW_OK);
    assert_int_equal(store_keep_settings(store, settings, SCENE_START, &error), FW_OK);
    return store;
}

/* The box is switched off and on in the middle of the second rise: what the store remembers must be enough. */
static void a_box_switched_off_and_on_in_mid_night_gives_the_same_bytes(void **state)
{
    (void)state;
    char folder[] = "/tmp/forewater-warm-XXXXXX";
    char files[2][64];
    assert_non_null(mkdtemp(folder));
    struct scene scenes[2];
    struct store *stores[2];
    struct text payloads[2] = {{0}};
    struct fw_error error = {.status = FW_OK};
    uint64_t seed = UINT64_C(14022031);
    print_message("seed %llu\n", (unsigned long long)seed);
    for (size_t box = 0; box < 2; box++) {
        snprintf(files[box], sizeof files[box], "%s/%zu.db", folder, box);
        scenes[box] = open_scene(NULL, NULL);
        stores[box] = open_store(files[box], scenes[box].settings);
    }
    for (int minute = EVERY; minute <= NIGHT_MINUTES; minute += 2 * EVERY) {
        struct news news = {0};
        add_random_news(&news, minute, &seed);
        int64_t now_utc_s = SCENE_START + (int64_t)minute * SCENE_MINUTE;
        if (minute == 6 * 60 + 45 || minute == 15 * 60 + 5) {
            store_close(stores[1]);
            picture_destroy(scenes[1].picture);
            cycle_destroy(scenes[1].cycle);
            stores[1] = open_store(files[1], scenes[1].settings);
            assert_int_equal(cycle_create(scenes[1].settings, &scenes[1].cycle, &error), FW_OK);
            assert_int_equal(picture_create(scenes[1].settings, &scenes[1].picture), FW_OK);
            assert_int_equal(store_load_picture(stores[1], scenes[1].settings,
                                                cycle_readings_from_utc_s(scenes[1].settings, now_utc_s),
                                                scenes[1].picture, &error),
                             FW_OK);
        }
        for (size_t box = 0; box < 2; box++) {
            commit(stores[box], &scenes[box], &news, now_utc_s, &payloads[box]);
            blank(&payloads[box], "\"previous_link\":");
            blank(&payloads[box], "\"trigger_since\":");
            blank(&payloads[box], "\"number\":");
        }
        assert_string_equal(text_string(&payloads[0]), text_string(&payloads[1]));
        news_clear(&news);
    }
    for (size_t box = 0; box < 2; box++) {
        store_close(stores[box]);
        scene_close(&scenes[box]);
        text_clear(&payloads[box]);
        static const char *const ends[] = {"", "-wal", "-shm", ".lock"};
        for (size_t end = 0; end < 4; end++) {
            char file[160];
            snprintf(file, sizeof file, "%s%s", files[box], ends[end]);
            unlink(file);
        }
    }
    assert_int_equal(rmdir(folder), 0);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(a_warm_cycle_gives_the_bytes_of_a_cold_one_whatever_comes_late),
        cmocka_unit_test(the_steps_of_a_cycle_follow_the_horizon_and_not_the_warm_up),
        cmocka_unit_test(a_still_river_is_warm_too),
        cmocka_unit_test(twice_the_warm_up_changes_no_level_by_more_than_a_micrometre),
        cmocka_unit_test(a_box_switched_off_and_on_in_mid_night_gives_the_same_bytes),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
