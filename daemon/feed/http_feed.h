/* SPDX-License-Identifier: MIT */
/*
 * A gauge read from an HTTP JSON endpoint, on the daemon's event loop. The reply is judged by its content and the
 * observed times in it, never by its status alone: a web page with status 200 is a fault, a cached page is stale.
 *
 * Limits: connect 10 s, whole transfer 30 s, under 100 B/s for 15 s ends it, body 4 MiB counted as it arrives, 3
 * redirects, http and https only and never from https to http, TLS 1.2 verified. Conditional GET (ETag,
 * Last-Modified). After failures it waits 1, 2, 4 ... 32 min with jitter, in world time.
 */
#ifndef FOREWATER_DAEMON_FEED_HTTP_FEED_H
#define FOREWATER_DAEMON_FEED_HTTP_FEED_H

#include <systemd/sd-event.h>

#include "daemon/feed/news.h"
#include "daemon/settings/settings.h"

struct http_feeds; /* all HTTP feeds of the settings, on one curl multi handle */

struct http_limits {
    long connect_ms, total_ms;     /* total_ms with all redirects */
    long slow_bytes_per_s, slow_s; /* slower than this for so long ends it */
    size_t body_bytes, header_bytes;
    int redirects;
};
struct http_limits http_limits_usual(void);

/* Called on the loop whenever a transfer ended and put something (readings or notes) in the news. */
typedef void http_feeds_arrived(void *context);

/* `news` is where arrivals are put. FW_NO_MEMORY, FW_IO. settings, news and context must outlive it. */
FW_MUST_CHECK enum fw_status http_feeds_open(const struct settings *settings, sd_event *event, struct news *news,
                                             http_feeds_arrived *arrived, void *context,
                                             struct http_feeds **feeds_out, struct fw_error *error);
/* For the transfers that start from now on; tests shorten them. */
void http_feeds_set_limits(struct http_feeds *feeds, const struct http_limits *limits);
void http_feeds_close(struct http_feeds *feeds); /* ends what is under way; NULL is fine */

/* Starts every fetch that is due at this world time. */
void http_feeds_poll(struct http_feeds *feeds, int64_t now_utc_s);
/* World time of the next due poll; INT64_MAX without feeds. */
int64_t http_feeds_next_poll_utc_s(const struct http_feeds *feeds);
size_t http_feeds_under_way(const struct http_feeds *feeds);

/*
 * The reader by itself: a reply body to readings. Elements that cannot be read are noted and skipped. FW_NOTHING_NEW:
 * no element, or none with a value. FW_BAD_INPUT: not JSON, nothing at the pointer, or no element could be read.
 * FW_NO_MEMORY.
 */
FW_MUST_CHECK enum fw_status http_feed_read_json(const struct settings *settings, size_t gauge, size_t feed,
                                                 const char *bytes, size_t length, int64_t received_utc_s,
                                                 struct news *news, struct fw_error *error);

#endif
