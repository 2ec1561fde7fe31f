/* SPDX-License-Identifier: MIT */
/*
 * The things that are passed from room to room and kept in the store. Plain structs; fixed-size text, so that they can be
 * copied. `entry` numbers rise for ever over all kinds: they are the "known at" axis (wall clocks step back).
 */
#ifndef FOREWATER_DAEMON_FACTS_H
#define FOREWATER_DAEMON_FACTS_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include "engine/advice.h"
#include "engine/quality.h"

enum {
    FACT_ID_SIZE = 64,
    FACT_UNIT_SIZE = 12,
    FACT_ROLE_SIZE = 64,
    FACT_NOTE_SIZE = 400,
    FACT_DIGEST_SIZE = 65,
    FACT_SHORT_SIZE = 161, /* a text message: 160 characters and the closing zero */
    FACT_WORD_LINE_SIZE = 600
};

enum { FACT_SOURCE_HAND = -1 }; /* source of a person's reading; feeds are 0, 1, ... in order of trust */

struct reading {
    int64_t entry;  /* 0 until the cycle numbers it */
    int32_t gauge;  /* index in the settings */
    int32_t source; /* feed index of the gauge, or FACT_SOURCE_HAND */
    int64_t observed_utc_s;
    double value;    /* as written, in `unit` */
    double value_si; /* m above gauge zero, or m3/s */
    char unit[FACT_UNIT_SIZE];
    int64_t received_utc_s;  /* world time at which the box had it */
    char by[FACT_ROLE_SIZE]; /* hand readings: the role */
};

struct judgement {
    int64_t entry;
    int64_t reading; /* entry of the reading judged */
    struct quality_verdict verdict;
};

enum word_kind { WORD_ACCEPT, WORD_READING, WORD_SEEN, WORD_ROAD, WORD_NOTE };

struct word { /* what a person said; never edited, corrected by a later one */
    int64_t entry;
    char id[FACT_ID_SIZE]; /* given by who hands it in; a second one with the same id is dropped */
    enum word_kind kind;
    char subject[FACT_ID_SIZE]; /* gauge id, point id or message number; "" for a note */
    double value;               /* reading: the value; seen wet: centimetres (NAN: not stated) */
    char unit[FACT_UNIT_SIZE];
    bool is_wet;               /* seen */
    enum road_state road;      /* road */
    char text[FACT_NOTE_SIZE]; /* note */
    char by[FACT_ROLE_SIZE];   /* role, never a name */
    int64_t at_utc_s;          /* what it speaks of */
    int64_t received_utc_s;
};

enum message_kind { MESSAGE_DECISION, MESSAGE_NOTICE };
enum delivery_state { DELIVERY_WAITING, DELIVERY_UNDER_WAY, DELIVERY_SENT, DELIVERY_GIVEN_UP };

struct message { /* one message on one channel: a row of the outbox */
    int64_t entry;
    char id[FACT_DIGEST_SIZE]; /* stable over retries: a receiver drops duplicates by it */
    int64_t number;            /* short number people say: "#0412" */
    enum message_kind kind;
    int32_t point;   /* index, or -1 */
    int32_t channel; /* index */
    int64_t made_utc_s;
    bool wakes;              /* a person must act or know now; false: an update, to be read when they look */
    enum advice_level level; /* of that point when it was made */
    int64_t act_by_utc_s, deck_earliest_utc_s, deck_likely_utc_s, deck_latest_utc_s; /* PASSAGE_NEVER: none */
    char short_text[FACT_SHORT_SIZE];
    char *bulletin; /* heap; the owner of the message frees it */
    enum delivery_state state;
    int32_t tries;
    int64_t next_try_utc_s;    /* world time */
    int64_t settled_utc_s;     /* when sent or given up */
    char note[FACT_NOTE_SIZE]; /* how the last try ended */
};

#endif
