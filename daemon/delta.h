/* SPDX-License-Identifier: MIT */
/* What one cycle found: the next picture and everything that leads to it from the one before. Store and tell read it; only the cycle makes it. */
#ifndef FOREWATER_DAEMON_DELTA_H
#define FOREWATER_DAEMON_DELTA_H

#include "daemon/feed/news.h"
#include "daemon/picture.h"

struct decision { /* one change of decision at one point */
    int32_t point;
    struct advice before, after;
    int64_t message_number;
    bool wakes;        /* see facts.h, message */
    bool is_headline;  /* it has a message of its own; the others of a cycle ride in the headline's */
    size_t also_count; /* how many ride with this headline */
};

struct ledger_entry {
    int64_t entry;
    int64_t utc_s;
    char kind[16];                         /* "cycle" */
    struct text payload;                   /* canonical bytes */
    char payload_digest[FACT_DIGEST_SIZE]; /* SHA-256, hex */
    char link[FACT_DIGEST_SIZE];           /* SHA-256 over previous link, entry, utc, kind, payload digest */
};

struct delta {
    const struct picture *before;
    struct picture *next;     /* the delta's until taken */
    const struct news *news;  /* the raw payloads to keep */
    struct reading *readings; /* new ones, numbered */
    size_t reading_count, reading_capacity;
    struct judgement *judgements;
    size_t judgement_count, judgement_capacity;
    struct word *words; /* numbered */
    size_t word_count, word_capacity;
    bool keeps_forecast;  /* next->forecast is to be stored whole */
    size_t first_message; /* next->outbox from here on is new */
    struct decision *decisions;
    size_t decision_count, decision_capacity;
    struct ledger_entry ledger;
    char settings_digest[FACT_DIGEST_SIZE];
};

struct picture *delta_take_picture(struct delta *delta); /* the caller owns it now */
void delta_clear(struct delta *delta);

#endif
