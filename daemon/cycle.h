/* SPDX-License-Identifier: MIT */
/*
 * One pass: collect, judge, route, assess, record, tell.
 *
 * A pure step: it reads no clock, no file and no store. What it found is a delta; the caller commits the delta, then takes its
 * picture. If the commit fails the picture is taken all the same and the messages still go.
 */
#ifndef FOREWATER_DAEMON_CYCLE_H
#define FOREWATER_DAEMON_CYCLE_H

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

struct cycle; /* what is kept between cycles for speed: networks and work space; no state of the river */

FW_MUST_CHECK enum fw_status cycle_create(const struct settings *settings, struct cycle **cycle_out,
                                          struct fw_error *error);
void cycle_destroy(struct cycle *cycle);

/* FW_NO_MEMORY and engine faults; nothing is changed then. The caller clears the delta. */
FW_MUST_CHECK enum fw_status cycle_run(struct cycle *cycle, const struct picture *before, const struct news *news,
                                       int64_t now_utc_s, struct delta *delta_out, struct fw_error *error);
struct picture *delta_take_picture(struct delta *delta); /* the caller owns it now */
void delta_clear(struct delta *delta);

#endif
