/* SPDX-License-Identifier: MIT */
/*
 * What is to be played: the files that vennmark_night wrote, read back.
 */
#ifndef FOREWATER_CONFIG_DEMO_NIGHT_SCRIPT_H
#define FOREWATER_CONFIG_DEMO_NIGHT_SCRIPT_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

enum { SCRIPT_DELIVERIES_MAX = 1024, SCRIPT_WORDS_MAX = 128, SCRIPT_OUTAGES_MAX = 8, SCRIPT_PARTS_MAX = 16 };

struct script_delivery {
    int64_t observed_utc_s, received_utc_s;
    char observed[40], stage_m[16]; /* as written */
    bool is_by_folder, is_by_http;
};

struct script_word {
    int64_t at_utc_s;
    char at[40];
    size_t part_count;
    char *parts[SCRIPT_PARTS_MAX]; /* heap */
};

struct script_outage { /* the office reaches no web page */
    int64_t from_utc_s, to_utc_s;
};

struct night_script {
    size_t delivery_count, word_count, outage_count;
    struct script_delivery deliveries[SCRIPT_DELIVERIES_MAX];
    struct script_word words[SCRIPT_WORDS_MAX];
    struct script_outage outages[SCRIPT_OUTAGES_MAX];
};

/*
 * feed.csv, words.csv and outages.csv of a folder. false: said on stderr, with file and line. The caller clears
 * either way.
 */
bool night_script_read(const char *folder, struct night_script *script);
void night_script_clear(struct night_script *script);

/* The first time in truth_<point>.csv at or above a level; NIGHT_TIME_NEVER: it never is. false: said on stderr. */
bool night_script_true_first(const char *folder, const char *point, double level_m, int64_t *utc_s_out);

/* The next moment after `after_utc_s` at which something of the script happens; NIGHT_TIME_NEVER: nothing more. */
int64_t night_script_next(const struct night_script *script, int64_t after_utc_s);
int64_t night_script_start(const struct night_script *script); /* the first observed time */

#endif
