/* SPDX-License-Identifier: MIT */
/*
 * What is made of the replies of one HTTP feed, apart from how they were fetched: readings and notes into the news,
 * when to ask next, and whether the feed is failing or stale. Works in world time, which is handed in.
 */
#ifndef FOREWATER_DAEMON_FEED_HTTP_SOURCE_H
#define FOREWATER_DAEMON_FEED_HTTP_SOURCE_H

#include "daemon/buffer.h"
#include "daemon/feed/news.h"
#include "daemon/settings/settings.h"

enum { HTTP_VALIDATOR_SIZE = 256, HTTP_SHOWN_URL_SIZE = 160 };

struct http_validators { /* what a server wants to hear again: If-None-Match, If-Modified-Since */
    char etag[HTTP_VALIDATOR_SIZE];
    char last_modified[HTTP_VALIDATOR_SIZE];
};

struct http_source {
    const struct settings *settings;
    struct news *news;
    size_t gauge, feed;
    char shown[HTTP_SHOWN_URL_SIZE];   /* the address without what may be secret in it */
    int64_t due_utc_s;                 /* next poll; 0: at once */
    struct http_validators validators; /* of the last reply that was read */
    bool has_digest;
    uint64_t body_digest;         /* of that reply */
    int failure_count;            /* in a row */
    int64_t failure_noted_utc_s;  /* when last told, while failing */
    int64_t elements_noted_utc_s; /* when readings that cannot be read were last told; 0: never */
    bool was_long_said;
    bool was_asked, has_newest, is_stale;
    int64_t newest_utc_s; /* observed */
    int64_t moved_utc_s;  /* world time at which the newest last moved on */
};

struct http_source http_source_make(const struct settings *settings, size_t gauge, size_t feed, struct news *news);
const struct settings_feed *http_source_feed(const struct http_source *source);

/* Due, or due so far ahead that the clock must have stepped back. */
bool http_source_is_due(const struct http_source *source, int64_t now_utc_s);
/* It is asked now: the next time is the next whole multiple of its interval, unless it fails. */
void http_source_begin(struct http_source *source, int64_t now_utc_s);

/* A reply with status 200 and this body. The reply's validators are kept if it can be read. */
void http_source_read(struct http_source *source, int64_t now_utc_s, const struct text *body,
                      const struct http_validators *validators);
/* Status 304, after validators were sent. */
void http_source_unchanged(struct http_source *source, int64_t now_utc_s);
/*
 * Anything else. `reason` goes on from the address: "answers with status 404". Told at first and then hourly, then
 * with the body (NULL: none) as evidence. The next time is after 1, 2, 4 ... 32 min, a fifth shorter or longer by
 * address.
 */
void http_source_fail(struct http_source *source, int64_t now_utc_s, const char *reason, const struct text *body);

/* Scheme, host and path: a user, a query or a fragment may hold a key. */
void http_source_show_url(const char *url, char shown[HTTP_SHOWN_URL_SIZE]);

#endif
