/* SPDX-License-Identifier: MIT */
#include "tests/daemon/warm_scene.h"

#include "tests/engine/failing_memory.h"

#define calloc calloc_or_fail
#define free free_and_count
#include "daemon/track.c"
#undef calloc
#undef free

enum { HOURS = 40, STEPS = HOURS * 60, ROW = STEPS + 1 };

struct bench { /* a track, the inflow it is given, and another network that has no memory */
    struct settings *settings;
    struct network *network, *cold;
    struct track *track;
    double *inflow_m3s;                          /* [gauge][future][ROW] */
    double *cold_m3s, *point_m3s, *cold_stage_m; /* [gauge or point][step + 1][member] */
};

static struct network *make_network(const struct settings *settings)
{
    struct network_options options = {.time_step_s = (double)settings->time_step_s,
                                      .group_count = settings->roughness_factor_count,
                                      .roughness_factors = settings->roughness_factors,
                                      .members_per_group = TRACK_FUTURES,
                                      .largest_discharge_m3s = 400.0,
                                      .typical_peak_m3s = 90.0};
    struct network *network = NULL;
    struct network_fault fault = {""};
    assert_int_equal(network_create(&settings->river, &options, &network, &fault), FW_OK);
    return network;
}

static double flood_m3s(double hours, size_t future)
{
    double split = hours > 30.0 ? (double)future * 0.3 * (hours - 30.0) : 0.0;
    return 3.7 + split + 61.0 * exp(-pow((hours - 9.3) / 2.1, 2.0)) + 44.0 * exp(-pow((hours - 22.8) / 3.7, 2.0));
}

static void bench_open(struct bench *bench, const struct warm_change *change)
{
    allocations_until_failure = SIZE_MAX;
    *bench = (struct bench){.settings = warm_settings(change, NULL)};
    bench->network = make_network(bench->settings);
    bench->cold = make_network(bench->settings);
    assert_int_equal(track_create(bench->settings, bench->network, STEPS, &bench->track), FW_OK);
    track_begin(bench->track, SCENE_START - SCENE_START % (6 * SCENE_HOUR));
    size_t members = bench->track->member_count, gauges = bench->settings->gauge_count;
    bench->inflow_m3s = calloc(gauges * TRACK_FUTURES * ROW, sizeof(double));
    bench->cold_m3s = calloc(gauges * ROW * members, sizeof(double));
    bench->point_m3s = calloc(bench->settings->point_count * ROW * members, sizeof(double));
    bench->cold_stage_m = calloc(bench->settings->point_count * ROW * members, sizeof(double));
    assert_true(bench->inflow_m3s && bench->cold_m3s && bench->point_m3s && bench->cold_stage_m);
    for (size_t row = 0; row < gauges * TRACK_FUTURES; row++)
        for (size_t step = 0; step < ROW; step++)
            bench->inflow_m3s[row * ROW + step] = flood_m3s((double)step / 60.0, row % TRACK_FUTURES);
}

static void bench_close(struct bench *bench)
{
    track_destroy(bench->track);
    network_destroy(bench->network);
    network_destroy(bench->cold);
    settings_destroy(bench->settings);
    free(bench->inflow_m3s);
    free(bench->cold_m3s);
    free(bench->point_m3s);
    free(bench->cold_stage_m);
}

/* The whole from its start in one call, by a network of its own, and every level of every member held against the track's. */
static void assert_same_as_cold(struct bench *bench, size_t step_count)
{
    size_t members = bench->track->member_count, gauges = bench->settings->gauge_count;
    double start_m3s[64];
    assert_true(gauges * members <= 64);
    for (size_t gauge = 0; gauge < gauges; gauge++)
        for (size_t step = 0; step <= step_count; step++)
            for (size_t member = 0; member < members; member++) {
                double flow = bench->inflow_m3s[(gauge * TRACK_FUTURES + member % TRACK_FUTURES) * ROW + step];
                bench->cold_m3s[(gauge * (step_count + 1) + step) * members + member] = flow;
                if (step == 0)
                    start_m3s[gauge * members + member] = flow;
            }
    assert_int_equal(network_start_steady(bench->cold, start_m3s), FW_OK);
    assert_int_equal(
        network_advance_with_stage(bench->cold, step_count, bench->cold_m3s, bench->point_m3s, bench->cold_stage_m),
        FW_OK);
    assert_int_equal(bench->track->step_count, step_count);
    assert_int_equal(bench->track->replaced_steps, network_steps_replaced(bench->cold));
    for (size_t point = 0; point < bench->settings->point_count; point++)
        for (size_t step = 0; step <= step_count; step++)
            if (memcmp(track_stage_m(bench->track, point, step),
                       bench->cold_stage_m + (point * (step_count + 1) + step) * members,
                       members * sizeof(double)) != 0 ||
                memcmp(track_discharge_m3s(bench->track, point, step),
                       bench->point_m3s + (point * (step_count + 1) + step) * members, members * sizeof(double)) != 0)
                fail_msg("point %zu, step %zu of %zu: not the cold run's", point, step, step_count);
}

static void follow(struct bench *bench, size_t step_count, int64_t now_utc_s)
{
    assert_int_equal(track_follow(bench->track, bench->inflow_m3s, ROW, step_count, now_utc_s), FW_OK);
}

/* One thing happens to the inflow: a reading comes late, is revised, goes away, or all beyond now is assumed otherwise. */
static void disturb(struct bench *bench, size_t now_step, uint64_t *seed)
{
    size_t gauges = bench->settings->gauge_count;
    size_t from = warm_random_below(seed, now_step + 1), length = 1 + warm_random_below(seed, 30);
    double factor = 0.7 + 0.6 * warm_random(seed);
    switch (warm_random_below(seed, 5)) {
    case 0: /* nothing new */
        return;
    case 1: /* the newest reading changes all that is assumed */
        from = now_step;
        length = ROW - from;
        break;
    case 2: /* a single value, a bit apart */
        length = 1;
        factor = 1.0 + 1e-15;
        break;
    case 3: /* far back, now and then to the very start */
        from = warm_random_below(seed, 4) == 0 ? 0 : from / 8;
        break;
    default:
        break;
    }
    for (size_t row = 0; row < gauges * TRACK_FUTURES; row++)
        for (size_t step = from; step < ROW && step < from + length; step++)
            bench->inflow_m3s[row * ROW + step] *= factor;
}

static void a_track_gives_what_a_cold_run_gives_whatever_is_revised(void **state)
{
    (void)state;
    static const int passes[] = {150, 14}; /* by the storage form, with a reach by the full equations */
    for (int full = 0; full < 2; full++) {
        uint64_t seed = UINT64_C(20310214) + (uint64_t)full;
        print_message("seed %llu\n", (unsigned long long)seed);
        struct bench bench;
        bench_open(&bench, full == 1 ? &warm_full_equations : NULL);
        size_t now_step = 200, taken = 0, cold = 0;
        int64_t start_utc_s = bench.track->start_utc_s;
        for (int pass = 0; pass < passes[full]; pass++) {
            now_step += warm_random_below(&seed, 12);
            if (warm_random_below(&seed, 25) == 0)
                now_step -= now_step / 3; /* the clock was set back */
            if (now_step > STEPS - 800)
                now_step = STEPS - 800;
            disturb(&bench, now_step, &seed);
            size_t step_count = now_step + 600 + warm_random_below(&seed, 200);
            follow(&bench, step_count, start_utc_s + (int64_t)now_step * SCENE_MINUTE);
            taken += bench.track->steps_taken;
            cold += step_count;
            assert_same_as_cold(&bench, step_count);
        }
        print_message("%zu steps instead of %zu\n", taken, cold);
        assert_true(taken < cold);
        bench_close(&bench);
    }
}

/* Each row is what it must cost, and no more: from the newest hour before what differs, to the end. */
static void steps_are_routed_from_the_newest_state_before_the_difference_on(void **state)
{
    (void)state;
    enum { NOW = 26 * 60 + 17, END = NOW + 600 };
    static const struct {
        const char *shows;
        size_t differs; /* 0: nothing */
        size_t end, taken;
    } rows[] = {
        {"nothing new", 0, END, 0},
        {"nothing new, five minutes on", 0, END + 5, 5},
        {"the clock was set back by five minutes", 0, END, END - 26 * 60},
        {"a reading of this hour", 26 * 60 + 9, END, END - 26 * 60},
        {"the first step after an hour", 26 * 60 + 1, END, END - 26 * 60},
        {"an hour itself", 26 * 60, END, END - 25 * 60},
        {"five hours late", 21 * 60 + 30, END, END - 21 * 60},
        {"half a day late: every six hours", 13 * 60, END, END - 12 * 60},
        {"the last step of the first six hours", 6 * 60, END, END},
        {"the second step of all", 1, END, END},
    };
    struct bench bench;
    bench_open(&bench, NULL);
    int64_t now_utc_s = bench.track->start_utc_s + (int64_t)NOW * SCENE_MINUTE;
    follow(&bench, END, now_utc_s);
    assert_int_equal(bench.track->steps_taken, END);
    for (size_t i = 0; i < sizeof rows / sizeof *rows; i++) {
        if (rows[i].differs > 0)
            bench.inflow_m3s[2 * ROW + rows[i].differs] += 0.37;
        follow(&bench, rows[i].end, now_utc_s);
        if (bench.track->steps_taken != rows[i].taken)
            fail_msg("%s: %zu steps, expected %zu", rows[i].shows, bench.track->steps_taken, rows[i].taken);
    }
    assert_same_as_cold(&bench, END);
    bench_close(&bench);
}

static void another_start_forgets_all(void **state)
{
    (void)state;
    struct bench bench;
    bench_open(&bench, NULL);
    follow(&bench, 300, bench.track->start_utc_s + 300 * SCENE_MINUTE);
    track_begin(bench.track, bench.track->start_utc_s);
    follow(&bench, 300, bench.track->start_utc_s + 300 * SCENE_MINUTE);
    assert_int_equal(bench.track->steps_taken, 0);
    track_begin(bench.track, bench.track->start_utc_s + 6 * SCENE_HOUR);
    follow(&bench, 300, bench.track->start_utc_s + 300 * SCENE_MINUTE);
    assert_int_equal(bench.track->steps_taken, 300);
    assert_same_as_cold(&bench, 300);
    bench_close(&bench);
}

static void an_inflow_that_is_refused_leaves_nothing_half_true(void **state)
{
    (void)state;
    struct bench bench;
    bench_open(&bench, NULL);
    follow(&bench, 500, bench.track->start_utc_s + 300 * SCENE_MINUTE);
    double good_m3s = bench.inflow_m3s[ROW + 430];
    bench.inflow_m3s[ROW + 430] = -0.01;
    assert_int_equal(
        track_follow(bench.track, bench.inflow_m3s, ROW, 500, bench.track->start_utc_s + 300 * SCENE_MINUTE),
        FW_BAD_INPUT);
    bench.inflow_m3s[ROW + 430] = good_m3s;
    follow(&bench, 500, bench.track->start_utc_s + 300 * SCENE_MINUTE);
    assert_same_as_cold(&bench, 500);
    bench.inflow_m3s[0] = (double)NAN;
    assert_int_equal(
        track_follow(bench.track, bench.inflow_m3s, ROW, 500, bench.track->start_utc_s + 300 * SCENE_MINUTE),
        FW_BAD_INPUT);
    bench_close(&bench);
}

/* Steps that are not whole parts of an hour, on which the fixed instants fall between steps. */
static void any_time_step_will_do(void **state)
{
    (void)state;
    static const struct warm_change steps[] = {
        {WARM_FORECAST, "\"every_min\": 7, \"horizon_h\": 12, \"warm_up_h\": 12, \"time_step_s\": 420"},
        {WARM_FORECAST, "\"every_min\": 60, \"horizon_h\": 12, \"warm_up_h\": 12, \"time_step_s\": 3600"}};
    for (size_t i = 0; i < 2; i++) {
        uint64_t seed = UINT64_C(77) + i;
        struct bench bench;
        bench_open(&bench, &steps[i]);
        for (size_t pass = 0; pass < 12; pass++) {
            size_t now_step = 90 + 2 * pass;
            disturb(&bench, now_step, &seed);
            follow(&bench, now_step + 60, bench.track->start_utc_s + (int64_t)now_step * bench.settings->time_step_s);
            assert_same_as_cold(&bench, now_step + 60);
        }
        bench_close(&bench);
    }
}

static void every_failed_allocation_is_told_and_nothing_leaks(void **state)
{
    (void)state;
    struct settings *settings = warm_settings(NULL, NULL);
    struct network *network = make_network(settings);
    enum fw_status status = FW_NO_MEMORY;
    size_t allowed = 0;
    for (; status != FW_OK; allowed++) {
        struct track *track = NULL;
        allocations_until_failure = allowed;
        status = track_create(settings, network, 2000, &track);
        if (status == FW_OK)
            track_destroy(track);
        else
            assert_null(track);
        assert_int_equal(blocks_held, 0);
        assert_true(allowed < 100);
    }
    print_message("%zu allocations, each made to fail\n", allowed - 1);
    assert_true(allowed > 10);
    network_destroy(network);
    settings_destroy(settings);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(a_track_gives_what_a_cold_run_gives_whatever_is_revised),
        cmocka_unit_test(steps_are_routed_from_the_newest_state_before_the_difference_on),
        cmocka_unit_test(another_start_forgets_all),
        cmocka_unit_test(an_inflow_that_is_refused_leaves_nothing_half_true),
        cmocka_unit_test(any_time_step_will_do),
        cmocka_unit_test(every_failed_allocation_is_told_and_nothing_leaks),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
