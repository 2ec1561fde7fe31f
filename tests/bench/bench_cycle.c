/* SPDX-License-Identifier: MIT */
/*
 * What a cycle costs against the length of the warm-up and of the horizon, on the demonstration's river: a reading every five
 * minutes, a cycle for each. All of a cycle is measured: collect, judge, route, assess, record; the store is not. Ratios to
 * a warm cycle with 24 h of warm-up and 12 h of horizon. The cycles walk over a change of the routing's start.
 */
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <time.h>

#include "daemon/cycle_steps.h"

enum { START = 1928854800, MINUTE = 60, EVERY = 5, CYCLES = 24, TEXT_SIZE = 70000 };

static const char forecast[] = "\"every_min\": 5, \"horizon_h\": 12, \"warm_up_h\": 12, \"time_step_s\": 60";

struct cost { /* ms */
    double first, middle, worst;
    size_t steps_most;
};

static void require(bool holds, const char *what)
{
    if (holds)
        return;
    fprintf(stderr, "bench_cycle: %s\n", what);
    exit(EXIT_FAILURE);
}

static struct settings *read_settings(int warm_up_h, int horizon_h)
{
    static char original[TEXT_SIZE], changed[TEXT_SIZE];
    static const char file[] = FW_SOURCE_DIR "/config/demo/vennmark.json";
    FILE *stream = fopen(file, "re");
    require(stream != NULL, file);
    original[fread(original, 1, sizeof original - 1, stream)] = '\0';
    fclose(stream);
    char *place = strstr(original, forecast);
    require(place != NULL, "the demonstration's forecast is written otherwise");
    int length = snprintf(changed, sizeof changed,
                          "%.*s\"every_min\": %d, \"horizon_h\": %d, \"warm_up_h\": %d, \"time_step_s\": 60%s",
                          (int)(place - original), original, EVERY, horizon_h, warm_up_h, place + strlen(forecast));
    struct settings *settings = NULL;
    struct settings_faults faults = {0};
    struct fw_error error;
    require(settings_read_text(file, changed, (size_t)length, SETTINGS_FOR_RUN, &settings, &faults, &error) == FW_OK,
            "the configuration has faults");
    settings_faults_clear(&faults);
    return settings;
}

static void add_reading(struct news *news, int minute)
{
    double hours = (double)minute / 60.0;
    double stage_m = 1.02 + 0.04 * sin(hours) + 1.6 * exp(-pow((hours - 3.0) / 2.0, 2.0)); /* never still for long */
    struct reading reading = {.observed_utc_s = START + (int64_t)minute * MINUTE,
                              .value = round(100.0 * stage_m) / 100.0,
                              .unit = "m",
                              .received_utc_s = START + (int64_t)(minute + 1) * MINUTE};
    reading.value_si = reading.value;
    require(news_add_reading(news, &reading) == FW_OK, "no memory");
}

static double run_ms(struct cycle *cycle, struct picture **picture, const struct news *news, int64_t now_utc_s)
{
    struct timespec begin, end;
    struct delta delta = {0};
    struct fw_error error;
    clock_gettime(CLOCK_PROCESS_CPUTIME_ID, &begin);
    require(cycle_run(cycle, *picture, news, now_utc_s, &delta, &error) == FW_OK, "a cycle failed");
    clock_gettime(CLOCK_PROCESS_CPUTIME_ID, &end);
    picture_destroy(*picture);
    *picture = delta_take_picture(&delta);
    delta_clear(&delta);
    return 1e3 * (double)(end.tv_sec - begin.tv_sec) + 1e-6 * (double)(end.tv_nsec - begin.tv_nsec);
}

static int compare(const void *left, const void *right)
{
    double a = *(const double *)left, b = *(const double *)right;
    return (a > b) - (a < b);
}

static struct cost measure(int warm_up_h, int horizon_h)
{
    struct settings *settings = read_settings(warm_up_h, horizon_h);
    struct cycle *cycle = NULL;
    struct picture *picture = NULL;
    struct fw_error error;
    struct news news = {0};
    struct cost cost = {0};
    double costs[CYCLES];
    require(cycle_create(settings, &cycle, &error) == FW_OK && picture_create(settings, &picture) == FW_OK,
            "no memory");
    for (int minute = -60 * (warm_up_h + 12); minute <= 0; minute += EVERY)
        add_reading(&news, minute);
    cost.first = run_ms(cycle, &picture, &news, START);
    news_clear(&news);
    for (int index = 0; index < CYCLES; index++) {
        int minute = (index + 1) * EVERY;
        add_reading(&news, minute);
        costs[index] = run_ms(cycle, &picture, &news, START + (int64_t)minute * MINUTE);
        news_clear(&news);
        size_t steps = cycle->present->steps_taken + cycle->coming->steps_taken;
        cost.steps_most = index * EVERY >= 60 && steps > cost.steps_most ? steps : cost.steps_most;
    }
    qsort(costs, CYCLES, sizeof *costs, compare);
    cost.middle = costs[CYCLES / 2];
    cost.worst = costs[CYCLES - 2]; /* the worst of all is the machine's */
    cycle_destroy(cycle);
    picture_destroy(picture);
    settings_destroy(settings);
    return cost;
}

int main(void)
{
    static const struct {
        int warm_up_h, horizon_h;
    } rows[] = {{24, 12}, {48, 12}, {72, 12}, {96, 12}, {24, 3}, {24, 6}, {24, 24}, {24, 48}};
    double unit_ms = 0.0;
    printf("%-9s %-9s %12s %12s %12s %12s %12s\n", "warm-up", "horizon", "cycle", "23 of 24", "cold", "ms",
           "steps most");
    for (size_t row = 0; row < sizeof rows / sizeof *rows; row++) {
        struct cost best = measure(rows[row].warm_up_h, rows[row].horizon_h);
        for (int again = 0; again < 1; again++) {
            struct cost next = measure(rows[row].warm_up_h, rows[row].horizon_h);
            best.first = fmin(best.first, next.first);
            best.middle = fmin(best.middle, next.middle);
            best.worst = fmin(best.worst, next.worst);
        }
        unit_ms = row == 0 ? best.middle : unit_ms;
        printf("%6d h %6d h %12.2f %12.2f %12.2f %12.2f %12zu\n", rows[row].warm_up_h, rows[row].horizon_h,
               best.middle / unit_ms, best.worst / unit_ms, best.first / unit_ms, best.middle, best.steps_most);
        fflush(stdout);
    }
    return EXIT_SUCCESS;
}
