/* SPDX-License-Identifier: MIT */
#include "daemon/feed/http_source.h"

#include <inttypes.h>
#include <stdarg.h>
#include <stdio.h>
#include <string.h>

#include "daemon/feed/fnv.h"
#include "daemon/feed/json_readings.h"

enum { MINUTE_S = 60, NOTE_AGAIN_S = 3600, LONGEST_WAIT_S = 32 * MINUTE_S, PAYLOAD_LIMIT = 256 * 1024 };

void http_source_show_url(const char *url, char shown[HTTP_SHOWN_URL_SIZE])
{
    const char *host = strstr(url, "://");
    host = host != NULL ? host + 3 : url;
    const char *user_end = memchr(host, '@', strcspn(host, "/?#"));
    const char *from = user_end != NULL ? user_end + 1 : host;
    snprintf(shown, HTTP_SHOWN_URL_SIZE, "%.*s%.*s", (int)(host - url), url, (int)strcspn(from, "?#"), from);
}

struct http_source http_source_make(const struct settings *settings, size_t gauge, size_t feed, struct news *news)
{
    struct http_source source = {.settings = settings, .news = news, .gauge = gauge, .feed = feed};
    http_source_show_url(settings->gauges[gauge].feeds[feed].url, source.shown);
    return source;
}

const struct settings_feed *http_source_feed(const struct http_source *source)
{
    return &source->settings->gauges[source->gauge].feeds[source->feed];
}

static int64_t interval_s(const struct http_source *source)
{
    int64_t every_s = http_source_feed(source)->every_s;
    return every_s > 0 ? every_s : MINUTE_S;
}

bool http_source_is_due(const struct http_source *source, int64_t now_utc_s)
{
    int64_t longest_s = (int64_t)2 * LONGEST_WAIT_S;
    longest_s = interval_s(source) > longest_s ? interval_s(source) : longest_s;
    return source->due_utc_s <= now_utc_s || source->due_utc_s - now_utc_s > longest_s;
}

void http_source_begin(struct http_source *source, int64_t now_utc_s)
{
    if (!source->was_asked)
        source->moved_utc_s = now_utc_s;
    source->was_asked = true;
    source->due_utc_s = (now_utc_s / interval_s(source) + 1) * interval_s(source);
}

__attribute__((format(printf, 3, 4))) static void say(struct http_source *source, bool is_fault, const char *format,
                                                      ...)
{
    char text[400];
    va_list arguments;
    va_start(arguments, format);
    vsnprintf(text, sizeof text, format, arguments);
    va_end(arguments);
    news_add_note(source->news, (int32_t)source->gauge, (int32_t)source->feed, is_fault, "gauge '%.60s': %s %s",
                  source->settings->gauges[source->gauge].name, source->shown, text);
}

/* Is it less than an hour since something was told? A clock that stepped back tells it again. */
static bool was_just_told(int64_t told_utc_s, int64_t now_utc_s)
{
    return now_utc_s >= told_utc_s && now_utc_s - told_utc_s < NOTE_AGAIN_S;
}

static void keep_payload(struct http_source *source, const struct text *body)
{
    if (body->length <= PAYLOAD_LIMIT) {
        if (news_add_payload(source->news, (int32_t)source->gauge, (int32_t)source->feed, source->shown,
                             text_string(body), body->length) != FW_OK)
            say(source, true, "answered what could not be kept: out of memory");
    } else if (!source->was_long_said) {
        source->was_long_said = true;
        say(source, false, "answers with %zu bytes; the store keeps the raw bytes of replies up to %d", body->length,
            PAYLOAD_LIMIT);
    }
}

/* --- failing --- */

static int64_t wait_after_failure_s(const struct http_source *source)
{
    const char *url = http_source_feed(source)->url;
    int64_t wait_s = LONGEST_WAIT_S;
    if (source->failure_count <= 5)
        wait_s = (int64_t)MINUTE_S << (source->failure_count - 1);
    uint64_t digest = fnv_add(FNV_START, url, strlen(url));
    digest = fnv_add(digest, &source->failure_count, sizeof source->failure_count);
    double share = (double)(digest >> 11) / 9007199254740992.0; /* 53 bits: from 0 to below 1 */
    return (int64_t)((double)wait_s * (0.8 + 0.4 * share));
}

void http_source_fail(struct http_source *source, int64_t now_utc_s, const char *reason, const struct text *body)
{
    source->failure_count++;
    int64_t wait_s = wait_after_failure_s(source);
    source->due_utc_s = now_utc_s + wait_s;
    source->validators = (struct http_validators){0}; /* what comes next is looked at whole */
    source->has_digest = false;
    if (source->failure_count > 1 && was_just_told(source->failure_noted_utc_s, now_utc_s))
        return;
    source->failure_noted_utc_s = now_utc_s;
    char times[48] = "";
    if (source->failure_count > 1)
        snprintf(times, sizeof times, ", %d times in a row", source->failure_count);
    say(source, true, "%.280s%s; asked again in %" PRId64 " s", reason, times, wait_s);
    if (body != NULL && body->length > 0)
        keep_payload(source, body);
}

static void succeed(struct http_source *source)
{
    if (source->failure_count > 0)
        say(source, false, "is answering again after %d failure%s", source->failure_count,
            source->failure_count > 1 ? "s" : "");
    source->failure_count = 0;
}

/* --- stale --- */

/* It answers, but is there anything new in it? Told once, until there is. */
static void watch_for_staleness(struct http_source *source, int64_t now_utc_s)
{
    const struct settings_gauge *gauge = &source->settings->gauges[source->gauge];
    if (source->is_stale || now_utc_s - source->moved_utc_s <= 2 * gauge->expect_every_s)
        return;
    source->is_stale = true;
    char observed[WHEN_TEXT_SIZE] = "";
    if (source->has_newest)
        when_rfc3339_local(&source->settings->zone, source->newest_utc_s, observed);
    say(source, true, "answers, but %s%s (expected every %" PRId64 " min)",
        source->has_newest ? "its newest reading is from " : "has no readings", observed,
        gauge->expect_every_s / MINUTE_S);
}

static void take_newest(struct http_source *source, int64_t newest_utc_s, int64_t now_utc_s)
{
    if (source->has_newest && newest_utc_s <= source->newest_utc_s)
        return;
    /* at first nothing is known of how long it has stood: its age, less what delivery takes, is the best guess */
    int64_t arrived_utc_s = newest_utc_s + source->settings->gauges[source->gauge].delivery_s;
    source->moved_utc_s = source->has_newest || arrived_utc_s > now_utc_s ? now_utc_s : arrived_utc_s;
    if (source->is_stale)
        say(source, false, "has newer readings again");
    source->is_stale = false;
    source->has_newest = true;
    source->newest_utc_s = newest_utc_s;
}

void http_source_unchanged(struct http_source *source, int64_t now_utc_s)
{
    succeed(source);
    watch_for_staleness(source, now_utc_s);
}

/* --- a reply --- */

/* What cannot be read stays in a reply for days: it is told once an hour. */
static void thin_out_notes(struct http_source *source, size_t first, int64_t now_utc_s)
{
    struct news *news = source->news;
    if (news->note_count == first)
        return;
    if (source->elements_noted_utc_s != 0 && was_just_told(source->elements_noted_utc_s, now_utc_s))
        news->note_count = first;
    else
        source->elements_noted_utc_s = now_utc_s;
}

void http_source_read(struct http_source *source, int64_t now_utc_s, const struct text *body,
                      const struct http_validators *validators)
{
    struct news *news = source->news;
    uint64_t digest = fnv_add(FNV_START, text_string(body), body->length);
    if (source->has_digest && digest == source->body_digest) { /* a server without validators: the same once more */
        source->validators = *validators;
        http_source_unchanged(source, now_utc_s);
        return;
    }
    struct fw_error error = {0};
    struct json_tally tally = {0};
    size_t reading_count = news->reading_count, note_count = news->note_count;
    enum fw_status status = json_readings_add(source->settings, source->gauge, source->feed, source->shown,
                                              text_string(body), body->length, now_utc_s, news, &tally, &error);
    thin_out_notes(source, note_count, now_utc_s);
    if (status != FW_OK && status != FW_NOTHING_NEW) {
        news->reading_count = reading_count; /* a part of a reply is read again with the whole */
        char reason[300];
        snprintf(reason, sizeof reason, "answers with what cannot be used: %.250s", error.text);
        http_source_fail(source, now_utc_s, reason, body);
        return;
    }
    succeed(source);
    source->validators = *validators;
    source->has_digest = true;
    source->body_digest = digest;
    if (status == FW_OK) {
        keep_payload(source, body);
        take_newest(source, tally.newest_utc_s, now_utc_s);
    }
    watch_for_staleness(source, now_utc_s);
}
