/* SPDX-License-Identifier: MIT */
#include "config/demo/night_files.h"

#include <errno.h>
#include <limits.h>
#include <stdio.h>
#include <string.h>
#include <sys/stat.h>

#include "config/demo/expected.h"
#include "config/demo/night_time.h"

struct night {
    const struct recipe *recipe;
    const struct truth *truth;
    const struct story *story;
    size_t point; /* the one whose truth is written */
};

static void write_readings(const struct night *night, FILE *stream)
{
    char observed[NIGHT_TIME_SIZE], received[NIGHT_TIME_SIZE];
    fputs("observed,stage_m,received\n", stream);
    for (size_t i = 0; i < night->story->delivery_count; i++) {
        const struct story_delivery *delivery = &night->story->deliveries[i];
        fprintf(stream, "%s,%.2f,%s\n", night_time_rfc3339(delivery->observed_utc_s, observed),
                0.01 * delivery->stage_cm, night_time_rfc3339(delivery->received_utc_s, received));
    }
}

static void write_feed(const struct night *night, FILE *stream)
{
    char observed[NIGHT_TIME_SIZE], received[NIGHT_TIME_SIZE];
    fputs("observed,stage_m,received,way\n", stream);
    for (size_t i = 0; i < night->story->delivery_count; i++) {
        const struct story_delivery *delivery = &night->story->deliveries[i];
        fprintf(stream, "%s,%.2f,%s,%s\n", night_time_rfc3339(delivery->observed_utc_s, observed),
                0.01 * delivery->stage_cm, night_time_rfc3339(delivery->received_utc_s, received),
                story_way_name(delivery->way));
    }
}

static void write_outages(const struct night *night, FILE *stream)
{
    char from[NIGHT_TIME_SIZE], to[NIGHT_TIME_SIZE];
    (void)night;
    fputs("from,to\n", stream);
    fprintf(stream, "%s,%s\n", night_time_rfc3339(story_router_out_utc_s(), from),
            night_time_rfc3339(story_router_back_utc_s(), to));
}

static void write_words(const struct night *night, FILE *stream)
{
    char at[NIGHT_TIME_SIZE];
    fputs("time,words\n", stream);
    for (size_t i = 0; i < night->story->word_count; i++) {
        const struct story_word *word = &night->story->words[i];
        fputs(night_time_rfc3339(word->at_utc_s, at), stream);
        for (size_t part = 0; part < word->part_count; part++) /* no part holds a quote or a comma */
            fprintf(stream, ",%s", word->parts[part]);
        fputc('\n', stream);
    }
}

static void write_truth(const struct night *night, FILE *stream)
{
    char time[NIGHT_TIME_SIZE];
    fputs("time,stage_m\n", stream);
    for (int64_t utc_s = night->recipe->start_utc_s; utc_s <= night->recipe->end_utc_s; utc_s += 60)
        fprintf(stream, "%s,%.4f\n", night_time_rfc3339(utc_s, time),
                truth_level_m(night->truth, night->point, utc_s));
}

static void write_expected(const struct night *night, FILE *stream)
{
    expected_write_csv(night->recipe, stream);
}

static bool write_file(const char *folder, const char *name, const struct night *night,
                       void (*write)(const struct night *night, FILE *stream))
{
    char path[PATH_MAX];
    if (snprintf(path, sizeof path, "%s/%s", folder, name) >= (int)sizeof path) {
        fprintf(stderr, "vennmark_night: %s: the name is too long\n", folder);
        return false;
    }
    FILE *stream = fopen(path, "w");
    if (stream == NULL) {
        fprintf(stderr, "vennmark_night: %s: %s\n", path, strerror(errno));
        return false;
    }
    write(night, stream);
    bool is_whole = ferror(stream) == 0;
    is_whole &= fclose(stream) == 0;
    if (!is_whole)
        fprintf(stderr, "vennmark_night: %s: %s\n", path, strerror(errno));
    return is_whole;
}

bool night_files_write(const struct recipe *recipe, const struct truth *truth, const struct story *story,
                       const char *into)
{
    struct night night = {.recipe = recipe, .truth = truth, .story = story};
    if (mkdir(into, 0777) != 0 && errno != EEXIST) {
        fprintf(stderr, "vennmark_night: %s: %s\n", into, strerror(errno));
        return false;
    }
    bool is_whole = write_file(into, "readings.csv", &night, write_readings) &&
                    write_file(into, "feed.csv", &night, write_feed) &&
                    write_file(into, "outages.csv", &night, write_outages) &&
                    write_file(into, "words.csv", &night, write_words);
    if (recipe->is_as_told)
        is_whole = is_whole && write_file(into, "expected.csv", &night, write_expected);
    for (night.point = 0; night.point < RECIPE_POINT_COUNT && is_whole; night.point++) {
        char name[64];
        snprintf(name, sizeof name, "truth_%s.csv", recipe->points[night.point].id);
        is_whole = write_file(into, name, &night, write_truth);
    }
    return is_whole;
}
