/* SPDX-License-Identifier: MIT */
/*
 * What came in since the last cycle: readings, people's words, raw payloads, and the notes of what could not be read.
 * Feeds fill it, the cycle takes it, and once the store has committed it the receipts are settled (a drop file moves
 * to done/ or bad/).
 */
#ifndef FOREWATER_DAEMON_FEED_NEWS_H
#define FOREWATER_DAEMON_FEED_NEWS_H

#include "daemon/facts.h"
#include "engine/status.h"

struct news_payload { /* raw bytes as they came */
    int32_t gauge, source;
    char origin[256]; /* file name or URL */
    char *bytes;      /* heap */
    size_t length;
};

struct news_note { /* something a person may need to know about a feed; composed where the facts are known */
    int32_t gauge, source;
    bool is_fault; /* else a turning point, as "answering again" */
    char text[512];
};

/*
 * A file to move once the news is stored. `to` NULL: a word file is removed; for an append file the position is
 * remembered. `reason`, where there is one, is written to <to>.reason; for an append file it is what is kept.
 */
struct news_receipt {
    char *from;       /* heap, absolute */
    char *to;         /* heap, absolute, or NULL */
    char *reason;     /* heap, or NULL */
    void *owner;      /* the feed */
    int64_t position; /* append files: bytes taken when settled */
};

struct news {
    struct reading *readings;
    size_t reading_count, reading_capacity;
    struct word *words;
    size_t word_count, word_capacity;
    struct news_payload *payloads;
    size_t payload_count, payload_capacity;
    struct news_note *notes;
    size_t note_count, note_capacity;
    struct news_receipt *receipts;
    size_t receipt_count, receipt_capacity;
};

/* Each copies what it is given. FW_NO_MEMORY: nothing added. */
FW_MUST_CHECK enum fw_status news_add_reading(struct news *news, const struct reading *reading);
FW_MUST_CHECK enum fw_status news_add_word(struct news *news, const struct word *word);
FW_MUST_CHECK enum fw_status news_add_payload(struct news *news, int32_t gauge, int32_t source, const char *origin,
                                              const char *bytes, size_t length);
__attribute__((format(printf, 5, 6))) void news_add_note(struct news *news, int32_t gauge, int32_t source,
                                                         bool is_fault, const char *format, ...); /* best effort */
FW_MUST_CHECK enum fw_status news_add_receipt(struct news *news, const char *from, const char *to, const char *reason,
                                              void *owner, int64_t position);
/* What came from outside, made fit to print: control bytes and what is not UTF-8 become '?'. Notes are put through
 * it. */
void news_make_printable(char *text);
bool news_is_empty(const struct news *news); /* nothing that a cycle must act on: notes and receipts do not count */
void news_clear(struct news *news);

#endif
