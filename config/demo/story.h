/* SPDX-License-Identifier: MIT */
/*
 * What reached the office that night, and what people said: the feed with its faults, and the words.
 */
#ifndef FOREWATER_CONFIG_DEMO_STORY_H
#define FOREWATER_CONFIG_DEMO_STORY_H

#include "config/demo/truth.h"

enum { STORY_DELIVERIES_MAX = 320, STORY_WORDS_MAX = 48, STORY_WORD_PARTS_MAX = 10, STORY_PART_SIZE = 160 };

enum story_way { /* how a reading reaches the office in the live demonstration */
                 STORY_BY_BOTH,
                 STORY_BY_FOLDER,
                 STORY_BY_HTTP
};

struct story_delivery {
    int64_t observed_utc_s;
    int64_t received_utc_s;
    int stage_cm; /* as the logger writes it: whole centimetres */
    enum story_way way;
};

struct story_word {
    int64_t at_utc_s;
    size_t part_count;
    char parts[STORY_WORD_PARTS_MAX][STORY_PART_SIZE]; /* the words of `forewater say`, without --at */
};

struct story {
    size_t delivery_count; /* in the order in which they arrive */
    struct story_delivery deliveries[STORY_DELIVERIES_MAX];
    size_t word_count; /* in order of time */
    struct story_word words[STORY_WORDS_MAX];
};

/*
 * The gauge's feed:
 *   every 15 min until 20:45, then every 5, each reading one minute on its way
 *   21:20 .. 22:15  held by the telemetry; twelve in one batch at 22:18, shuffled, two of them twice, by folder alone
 *   22:35           reads 6.91
 *   00:20 .. 00:45  the office's router is out: they arrive at 00:47
 *   00:50 .. 01:25  frozen at the value of 00:50
 *   02:55 .. 04:50  the hut has no power: they arrive at 04:52 in one go
 *   from 03:20      the bracket has slipped: 0.05 m too high, to the end of the night
 *   18:00 .. 19:00  by HTTP alone, the folder is quiet
 */
void story_tell_feed(const struct recipe *recipe, struct story *story);

/* The two hand readings and the water seen follow the truth; 06:55 is as the story says it. */
void story_tell_words(const struct recipe *recipe, const struct truth *truth, struct story *story);

/* Between these the office reaches no web page. */
int64_t story_router_out_utc_s(void);
int64_t story_router_back_utc_s(void);

const char *story_way_name(enum story_way way);

#endif
