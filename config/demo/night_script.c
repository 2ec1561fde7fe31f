/* SPDX-License-Identifier: MIT */
#include "config/demo/night_script.h"

#include <errno.h>
#include <limits.h>
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "config/demo/night_time.h"

/* One line without its end, cut at the commas: these files hold no quotes. */
struct cells {
    size_t count;
    char *texts[SCRIPT_PARTS_MAX];
};

/* false: the line is not what it must be. */
typedef bool take_line(void *context, const struct cells *cells);

static void cut(char *line, struct cells *cells_out)
{
    line[strcspn(line, "\r\n")] = '\0';
    cells_out->count = 0;
    for (char *cell; (cell = strsep(&line, ",")) != NULL && cells_out->count < SCRIPT_PARTS_MAX;)
        cells_out->texts[cells_out->count++] = cell;
}

static bool read_lines(const char *folder, const char *name, take_line *take, void *context)
{
    char path[PATH_MAX];
    if (snprintf(path, sizeof path, "%s/%s", folder, name) >= (int)sizeof path) {
        fprintf(stderr, "play: %s: the name is too long\n", folder);
        return false;
    }
    FILE *stream = fopen(path, "r");
    if (stream == NULL) {
        fprintf(stderr, "play: %s: %s (vennmark_night --into writes it)\n", path, strerror(errno));
        return false;
    }
    char *line = NULL;
    size_t size = 0, number = 0;
    bool is_read = true;
    while (is_read && getline(&line, &size, stream) >= 0) {
        struct cells cells;
        cut(line, &cells);
        if (++number == 1) /* the header */
            continue;
        is_read = take(context, &cells);
        if (!is_read)
            fprintf(stderr, "play: %s:%zu: this line cannot be played\n", path, number);
    }
    if (ferror(stream) != 0) {
        fprintf(stderr, "play: %s: %s\n", path, strerror(errno));
        is_read = false;
    }
    free(line);
    fclose(stream);
    return is_read;
}

static bool take_delivery(void *context, const struct cells *cells)
{
    struct night_script *script = context;
    if (cells->count != 4 || script->delivery_count == SCRIPT_DELIVERIES_MAX)
        return false;
    struct script_delivery *delivery = &script->deliveries[script->delivery_count];
    snprintf(delivery->observed, sizeof delivery->observed, "%s", cells->texts[0]);
    snprintf(delivery->stage_m, sizeof delivery->stage_m, "%s", cells->texts[1]);
    delivery->is_by_folder = strcmp(cells->texts[3], "folder") == 0 || strcmp(cells->texts[3], "both") == 0;
    delivery->is_by_http = strcmp(cells->texts[3], "http") == 0 || strcmp(cells->texts[3], "both") == 0;
    char *end = NULL;
    (void)strtod(delivery->stage_m, &end);
    script->delivery_count++;
    return end != delivery->stage_m && *end == '\0' && (delivery->is_by_folder || delivery->is_by_http) &&
           night_time_parse(cells->texts[0], &delivery->observed_utc_s) &&
           night_time_parse(cells->texts[2], &delivery->received_utc_s);
}

static bool take_word(void *context, const struct cells *cells)
{
    struct night_script *script = context;
    if (cells->count < 2 || script->word_count == SCRIPT_WORDS_MAX)
        return false;
    struct script_word *word = &script->words[script->word_count++];
    snprintf(word->at, sizeof word->at, "%s", cells->texts[0]);
    for (size_t i = 1; i < cells->count; i++) {
        word->parts[word->part_count] = strdup(cells->texts[i]);
        if (word->parts[word->part_count++] == NULL)
            return false;
    }
    return night_time_parse(cells->texts[0], &word->at_utc_s);
}

static bool take_outage(void *context, const struct cells *cells)
{
    struct night_script *script = context;
    if (cells->count != 2 || script->outage_count == SCRIPT_OUTAGES_MAX)
        return false;
    struct script_outage *outage = &script->outages[script->outage_count++];
    return night_time_parse(cells->texts[0], &outage->from_utc_s) &&
           night_time_parse(cells->texts[1], &outage->to_utc_s);
}

bool night_script_read(const char *folder, struct night_script *script)
{
    if (!read_lines(folder, "feed.csv", take_delivery, script) ||
        !read_lines(folder, "words.csv", take_word, script) ||
        !read_lines(folder, "outages.csv", take_outage, script))
        return false;
    if (script->delivery_count == 0) {
        fprintf(stderr, "play: %s/feed.csv: it holds no reading\n", folder);
        return false;
    }
    return true;
}

void night_script_clear(struct night_script *script)
{
    for (size_t i = 0; i < script->word_count; i++)
        for (size_t part = 0; part < script->words[i].part_count; part++)
            free(script->words[i].parts[part]);
    *script = (struct night_script){0};
}

struct first_passage {
    double level_m;
    int64_t utc_s;
};

static bool take_level(void *context, const struct cells *cells)
{
    struct first_passage *first = context;
    int64_t utc_s;
    if (cells->count != 2 || !night_time_parse(cells->texts[0], &utc_s))
        return false;
    double level_m = strtod(cells->texts[1], NULL);
    if (first->utc_s == NIGHT_TIME_NEVER && level_m >= first->level_m)
        first->utc_s = utc_s;
    return isfinite(level_m);
}

bool night_script_true_first(const char *folder, const char *point, double level_m, int64_t *utc_s_out)
{
    char name[128];
    struct first_passage first = {.level_m = level_m, .utc_s = NIGHT_TIME_NEVER};
    snprintf(name, sizeof name, "truth_%s.csv", point);
    if (!read_lines(folder, name, take_level, &first))
        return false;
    *utc_s_out = first.utc_s;
    return true;
}

static void take_earlier(int64_t utc_s, int64_t after_utc_s, int64_t *next_utc_s)
{
    if (utc_s > after_utc_s && utc_s < *next_utc_s)
        *next_utc_s = utc_s;
}

int64_t night_script_next(const struct night_script *script, int64_t after_utc_s)
{
    int64_t next_utc_s = NIGHT_TIME_NEVER;
    for (size_t i = 0; i < script->delivery_count; i++)
        take_earlier(script->deliveries[i].received_utc_s, after_utc_s, &next_utc_s);
    for (size_t i = 0; i < script->word_count; i++)
        take_earlier(script->words[i].at_utc_s, after_utc_s, &next_utc_s);
    for (size_t i = 0; i < script->outage_count; i++) {
        take_earlier(script->outages[i].from_utc_s, after_utc_s, &next_utc_s);
        take_earlier(script->outages[i].to_utc_s, after_utc_s, &next_utc_s);
    }
    return next_utc_s;
}

int64_t night_script_start(const struct night_script *script)
{
    int64_t start_utc_s = script->deliveries[0].observed_utc_s;
    for (size_t i = 1; i < script->delivery_count; i++)
        if (script->deliveries[i].observed_utc_s < start_utc_s)
            start_utc_s = script->deliveries[i].observed_utc_s;
    return start_utc_s;
}
