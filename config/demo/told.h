/* SPDX-License-Identifier: MIT */
/*
 * What was told: the messages that the hook received, read from its file as they come, shown, and kept for the
 * closing table.
 */
#ifndef FOREWATER_CONFIG_DEMO_TOLD_H
#define FOREWATER_CONFIG_DEMO_TOLD_H

#include "config/demo/crossings.h"

#define TOLD_FILE "messages.jsonl"

struct told_crossing { /* what its own messages said until people shut it; NIGHT_TIME_NEVER where nothing was said */
    int64_t first_send_utc_s; /* the first that says SEND or LATE */
    int64_t act_by_utc_s;     /* these: as last said */
    int64_t deck_earliest_utc_s, deck_likely_utc_s, deck_latest_utc_s;
    int64_t shut_utc_s; /* both sides, people's word */
};

struct told {
    bool shows_bulletins;
    long position; /* read so far */
    size_t message_count;
    size_t unreadable_count;
    struct told_crossing crossings[CROSSINGS_MAX];
};

/* Nothing told yet. */
void told_begin(struct told *told, bool shows_bulletins);

/* People have shut it. */
void told_shut(struct told *told, const struct crossings *crossings, const char *point_id, int64_t at_utc_s);

/* Reads and shows what is new in the hook's file; none yet is fine. false: said on stderr. */
bool told_take_new(struct told *told, const struct crossings *crossings, int64_t world_utc_s);

/*
 * crossing, first SEND, act-by and deck wet as last said (earliest / likely / latest), deck wet in truth, margin: true
 * deck wet less first SEND less the crew's stated need; when people shut it, and how long before the water.
 */
bool told_print_table(const struct told *told, const struct crossings *crossings, const char *night_folder);

#endif
