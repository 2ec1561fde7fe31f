/* SPDX-License-Identifier: MIT */
/*
 * What was told: the messages that the hook received, read from its file as they come, shown, and kept for the
 * closing table.
 */
#ifndef FOREWATER_CONFIG_DEMO_TOLD_H
#define FOREWATER_CONFIG_DEMO_TOLD_H

#include "config/demo/crossings.h"

#define TOLD_FILE "messages.jsonl"

struct told_send { /* the first message of a crossing that says SEND or LATE */
    bool is_told;
    char level[16];
    int64_t made_utc_s;
    int64_t act_by_utc_s; /* these: NIGHT_TIME_NEVER when not stated */
    int64_t deck_earliest_utc_s, deck_likely_utc_s, deck_latest_utc_s;
};

struct told {
    bool shows_bulletins;
    long position; /* read so far */
    size_t message_count;
    size_t unreadable_count;
    struct told_send sends[CROSSINGS_MAX];
};

/* Reads and shows what is new in the hook's file; none yet is fine. false: said on stderr. */
bool told_take_new(struct told *told, const struct crossings *crossings, int64_t world_utc_s);

/*
 * crossing, first SEND, act-by, deck wet as forecast then (earliest / likely / latest), deck wet in truth, margin:
 * true deck wet less first SEND less the crew's stated need.
 */
bool told_print_table(const struct told *told, const struct crossings *crossings, const char *night_folder);

#endif
