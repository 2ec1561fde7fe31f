/* SPDX-License-Identifier: MIT */
#include "daemon/feed/http_feed.h"

#include <errno.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <strings.h>

#include <curl/curl.h>

#include "daemon/buffer.h"
#include "daemon/clock.h"
#include "daemon/feed/http_source.h"
#include "daemon/feed/json_readings.h"

enum { REASON_SIZE = 400 };

struct transfer { /* what is under way */
    CURL *easy;   /* NULL: nothing is */
    char *url;    /* heap; of this hop */
    struct curl_slist *headers;
    struct text body;
    size_t header_bytes;
    bool is_too_long, is_header_too_long, is_short_of_memory;
    int redirect_count;
    int64_t began_machine_ms;
    int64_t polled_utc_s;
    struct http_validators validators; /* of this reply */
    char curl_says[CURL_ERROR_SIZE];
};

struct fetched { /* one feed */
    struct http_feeds *feeds;
    struct http_source source;
    struct transfer transfer;
};

struct http_feeds {
    const struct settings *settings;
    sd_event *event;
    struct news *news;
    http_feeds_arrived *arrived;
    void *context;
    struct http_limits limits;
    CURLM *multi;
    bool has_curl;
    sd_event_source *timer;
    struct fetched *all;
    size_t count;
};

struct http_limits http_limits_usual(void)
{
    return (struct http_limits){.connect_ms = 10000,
                                .total_ms = 30000,
                                .slow_bytes_per_s = 100,
                                .slow_s = 15,
                                .body_bytes = (size_t)4 * 1024 * 1024,
                                .header_bytes = (size_t)64 * 1024,
                                .redirects = 3};
}

void http_feeds_set_limits(struct http_feeds *feeds, const struct http_limits *limits)
{
    feeds->limits = *limits;
}

/* --- how a transfer ended --- */

static const char *words_for(CURLcode result)
{
    switch ((int)result) {
    case CURLE_URL_MALFORMAT:
        return "is no address";
    case CURLE_UNSUPPORTED_PROTOCOL:
    case CURLE_WEIRD_SERVER_REPLY:
        return "does not answer in HTTP";
    case CURLE_LOGIN_DENIED:
        return "has a user in its address, which is not allowed";
    case CURLE_COULDNT_RESOLVE_HOST:
        return "has a host that cannot be found";
    case CURLE_COULDNT_CONNECT:
        return "cannot be reached";
    case CURLE_OPERATION_TIMEDOUT:
        return "did not answer in time";
    case CURLE_PARTIAL_FILE:
    case CURLE_RECV_ERROR:
        return "was cut short";
    case CURLE_GOT_NOTHING:
        return "closed without an answer";
    case CURLE_OUT_OF_MEMORY:
        return "could not be asked: out of memory";
    case CURLE_SSL_CONNECT_ERROR:
    case CURLE_PEER_FAILED_VERIFICATION:
    case CURLE_SSL_ISSUER_ERROR:
    case CURLE_SSL_CACERT_BADFILE:
        return "cannot be trusted (TLS)";
    default:
        return "could not be read";
    }
}

static void fail_by_curl(struct fetched *fetched, CURLcode result)
{
    struct transfer *transfer = &fetched->transfer;
    const struct http_limits *limits = &fetched->feeds->limits;
    char reason[REASON_SIZE];
    if (transfer->is_too_long || result == CURLE_FILESIZE_EXCEEDED) {
        snprintf(reason, sizeof reason, "answers with more than %zu bytes", limits->body_bytes);
        text_clear(&transfer->body);
    } else if (transfer->is_header_too_long) {
        snprintf(reason, sizeof reason, "answers with more than %zu bytes of headers", limits->header_bytes);
    } else if (transfer->is_short_of_memory) {
        snprintf(reason, sizeof reason, "could not be read: out of memory");
        text_clear(&transfer->body);
    } else {
        snprintf(reason, sizeof reason, "%s (%.200s)", words_for(result),
                 transfer->curl_says[0] != '\0' ? transfer->curl_says : curl_easy_strerror(result));
    }
    http_source_fail(&fetched->source, transfer->polled_utc_s, reason, &transfer->body);
}

/* --- curl's callbacks --- */

static size_t body_arrived(char *bytes, size_t size, size_t count, void *context)
{
    struct fetched *fetched = context;
    struct transfer *transfer = &fetched->transfer;
    size_t length = size * count;
    size_t limit = fetched->feeds->limits.body_bytes;
    if (length > limit || transfer->body.length > limit - length) {
        transfer->is_too_long = true; /* counted here: MAXFILESIZE does not see chunked replies */
        return CURL_WRITEFUNC_ERROR;
    }
    text_add_bytes(&transfer->body, bytes, length);
    transfer->is_short_of_memory = text_status(&transfer->body) != FW_OK;
    return transfer->is_short_of_memory ? CURL_WRITEFUNC_ERROR : length;
}

static void keep_header(const char *line, size_t length, const char *name, char value[HTTP_VALIDATOR_SIZE])
{
    size_t name_length = strlen(name);
    if (length <= name_length || strncasecmp(line, name, name_length) != 0 || line[name_length] != ':')
        return;
    const char *from = line + name_length + 1, *end = line + length;
    while (from < end && (*from == ' ' || *from == '\t'))
        from++;
    while (end > from && (end[-1] == '\r' || end[-1] == '\n' || end[-1] == ' '))
        end--;
    /* one that does not fit, or could break out of its header line, is not sent back */
    bool is_usable = (size_t)(end - from) < HTTP_VALIDATOR_SIZE;
    for (const char *at = from; at < end; at++)
        is_usable &= *at >= ' ' && *at <= '~';
    snprintf(value, HTTP_VALIDATOR_SIZE, "%.*s", is_usable ? (int)(end - from) : 0, from);
}

static size_t header_arrived(char *line, size_t size, size_t count, void *context)
{
    struct fetched *fetched = context;
    struct transfer *transfer = &fetched->transfer;
    size_t length = size * count;
    transfer->header_bytes += length;
    if (transfer->header_bytes > fetched->feeds->limits.header_bytes) {
        transfer->is_header_too_long = true;
        return CURL_WRITEFUNC_ERROR;
    }
    keep_header(line, length, "ETag", transfer->validators.etag);
    keep_header(line, length, "Last-Modified", transfer->validators.last_modified);
    return length;
}

/* --- transfers --- */

static void transfer_clear(struct fetched *fetched)
{
    struct transfer *transfer = &fetched->transfer;
    if (transfer->easy != NULL) {
        curl_multi_remove_handle(fetched->feeds->multi, transfer->easy);
        curl_easy_cleanup(transfer->easy);
    }
    curl_slist_free_all(transfer->headers);
    free(transfer->url);
    text_clear(&transfer->body);
    *transfer = (struct transfer){0};
}

static bool add_header(struct curl_slist **headers, const char *name, const char *value)
{
    char line[HTTP_VALIDATOR_SIZE + 32];
    if (value[0] == '\0')
        return true;
    snprintf(line, sizeof line, "%s: %s", name, value);
    struct curl_slist *longer = curl_slist_append(*headers, line);
    *headers = longer != NULL ? longer : *headers;
    return longer != NULL;
}

static bool set_options(struct fetched *fetched, long total_ms)
{
    struct transfer *transfer = &fetched->transfer;
    const struct http_limits *limits = &fetched->feeds->limits;
    CURL *easy = transfer->easy;
    bool is_set = add_header(&transfer->headers, "Accept", "application/json") &&
                  add_header(&transfer->headers, "If-None-Match", fetched->source.validators.etag) &&
                  add_header(&transfer->headers, "If-Modified-Since", fetched->source.validators.last_modified);
    const struct {
        CURLoption option;
        long value;
    } numbers[] = {{CURLOPT_NOSIGNAL, 1},
                   {CURLOPT_QUICK_EXIT, 1}, /* a resolver that hangs must not hold the loop */
                   {CURLOPT_HTTP09_ALLOWED, 0},
                   {CURLOPT_FOLLOWLOCATION, 0}, /* each hop is judged here */
                   {CURLOPT_DISALLOW_USERNAME_IN_URL, 1},
                   {CURLOPT_SSLVERSION, CURL_SSLVERSION_TLSv1_2},
                   {CURLOPT_SSL_VERIFYPEER, 1},
                   {CURLOPT_SSL_VERIFYHOST, 2},
                   {CURLOPT_CONNECTTIMEOUT_MS, limits->connect_ms},
                   {CURLOPT_TIMEOUT_MS, total_ms},
                   {CURLOPT_LOW_SPEED_LIMIT, limits->slow_bytes_per_s},
                   {CURLOPT_LOW_SPEED_TIME, limits->slow_s}};
    for (size_t i = 0; i < sizeof numbers / sizeof numbers[0]; i++)
        is_set = is_set && curl_easy_setopt(easy, numbers[i].option, numbers[i].value) == CURLE_OK;
    return is_set && curl_easy_setopt(easy, CURLOPT_URL, transfer->url) == CURLE_OK &&
           curl_easy_setopt(easy, CURLOPT_PROTOCOLS_STR, "http,https") == CURLE_OK &&
           curl_easy_setopt(easy, CURLOPT_REDIR_PROTOCOLS_STR, "http,https") == CURLE_OK &&
           curl_easy_setopt(easy, CURLOPT_USERAGENT, "forewater/" FW_VERSION) == CURLE_OK &&
           curl_easy_setopt(easy, CURLOPT_HTTPHEADER, transfer->headers) == CURLE_OK &&
           curl_easy_setopt(easy, CURLOPT_MAXFILESIZE_LARGE, (curl_off_t)limits->body_bytes) == CURLE_OK &&
           curl_easy_setopt(easy, CURLOPT_ERRORBUFFER, transfer->curl_says) == CURLE_OK &&
           curl_easy_setopt(easy, CURLOPT_PRIVATE, fetched) == CURLE_OK &&
           curl_easy_setopt(easy, CURLOPT_WRITEFUNCTION, body_arrived) == CURLE_OK &&
           curl_easy_setopt(easy, CURLOPT_WRITEDATA, fetched) == CURLE_OK &&
           curl_easy_setopt(easy, CURLOPT_HEADERFUNCTION, header_arrived) == CURLE_OK &&
           curl_easy_setopt(easy, CURLOPT_HEADERDATA, fetched) == CURLE_OK;
}

/* Starts one hop; takes `url` (heap, or NULL where memory ran out). False: it has failed, and that is told. */
static bool start_hop(struct fetched *fetched, char *url, int redirect_count, int64_t began_machine_ms,
                      int64_t polled_utc_s)
{
    struct transfer *transfer = &fetched->transfer;
    long spent_ms = (long)(clock_machine_ms() - began_machine_ms);
    long total_ms = fetched->feeds->limits.total_ms - spent_ms;
    transfer_clear(fetched);
    *transfer = (struct transfer){.easy = curl_easy_init(),
                                  .url = url,
                                  .redirect_count = redirect_count,
                                  .began_machine_ms = began_machine_ms,
                                  .polled_utc_s = polled_utc_s};
    const char *reason = NULL;
    if (total_ms <= 0)
        reason = "did not answer in time (its redirects took it all)";
    else if (url == NULL || transfer->easy == NULL || !set_options(fetched, total_ms))
        reason = "could not be asked: out of memory";
    else if (curl_multi_add_handle(fetched->feeds->multi, transfer->easy) != CURLM_OK)
        reason = "could not be asked";
    if (reason == NULL)
        return true;
    http_source_fail(&fetched->source, transfer->polled_utc_s, reason, &transfer->body);
    transfer_clear(fetched);
    return false;
}

static bool has_scheme(const char *url, const char *scheme)
{
    return strncasecmp(url, scheme, strlen(scheme)) == 0;
}

/* True: the next hop is under way. */
static bool follow_redirect(struct fetched *fetched, const char *target)
{
    const struct transfer *transfer = &fetched->transfer;
    char reason[REASON_SIZE], shown[HTTP_SHOWN_URL_SIZE];
    http_source_show_url(target != NULL ? target : "", shown);
    if (target == NULL)
        snprintf(reason, sizeof reason, "redirects to nowhere");
    else if (transfer->redirect_count >= fetched->feeds->limits.redirects)
        snprintf(reason, sizeof reason, "redirects more than %d times", fetched->feeds->limits.redirects);
    else if (!has_scheme(target, "http://") && !has_scheme(target, "https://"))
        snprintf(reason, sizeof reason, "redirects to %s; expected http or https", shown);
    else if (has_scheme(transfer->url, "https://") && !has_scheme(target, "https://"))
        snprintf(reason, sizeof reason, "redirects from https to %s; expected https", shown);
    else
        return start_hop(fetched, strdup(target), transfer->redirect_count + 1, transfer->began_machine_ms,
                         transfer->polled_utc_s);
    http_source_fail(&fetched->source, transfer->polled_utc_s, reason, &transfer->body);
    return false;
}

static bool is_redirect(long code)
{
    return code == 301 || code == 302 || code == 303 || code == 307 || code == 308;
}

/* A transfer has ended. */
static void end_transfer(struct fetched *fetched, CURLcode result)
{
    struct transfer *transfer = &fetched->transfer;
    long code = 0;
    const char *target = NULL;
    char reason[64];
    const struct http_validators *sent = &fetched->source.validators;
    bool was_conditional = sent->etag[0] != '\0' || sent->last_modified[0] != '\0';
    curl_easy_getinfo(transfer->easy, CURLINFO_RESPONSE_CODE, &code);
    curl_easy_getinfo(transfer->easy, CURLINFO_REDIRECT_URL, &target);
    if (result != CURLE_OK) {
        fail_by_curl(fetched, result);
    } else if (is_redirect(code)) {
        if (follow_redirect(fetched, target))
            return;
    } else if (code == 304 && was_conditional) {
        http_source_unchanged(&fetched->source, transfer->polled_utc_s);
    } else if (code == 200) {
        http_source_read(&fetched->source, transfer->polled_utc_s, &transfer->body, &transfer->validators);
    } else {
        snprintf(reason, sizeof reason, "answers with status %ld; expected 200", code);
        http_source_fail(&fetched->source, transfer->polled_utc_s, reason, &transfer->body);
    }
    transfer_clear(fetched);
}

/* --- the loop --- */

static size_t total_of(const struct news *news)
{
    return news->reading_count + news->note_count + news->payload_count;
}

static void collect_ended(struct http_feeds *feeds)
{
    CURLMsg *message;
    int left;
    while ((message = curl_multi_info_read(feeds->multi, &left)) != NULL) {
        struct fetched *fetched = NULL;
        if (message->msg != CURLMSG_DONE)
            continue;
        CURLcode result = message->data.result; /* the message does not outlive its handle */
        curl_easy_getinfo(message->easy_handle, CURLINFO_PRIVATE, &fetched);
        size_t before = total_of(feeds->news);
        end_transfer(fetched, result);
        if (total_of(feeds->news) != before)
            feeds->arrived(feeds->context);
    }
}

/* The loop could not watch a socket: curl drives nothing any more until every transfer is gone. */
static void give_up(struct http_feeds *feeds)
{
    size_t before = total_of(feeds->news);
    for (size_t i = 0; i < feeds->count; i++) {
        struct fetched *fetched = &feeds->all[i];
        if (fetched->transfer.easy == NULL)
            continue;
        http_source_fail(&fetched->source, fetched->transfer.polled_utc_s, "could not be asked: out of memory", NULL);
        transfer_clear(fetched);
    }
    if (total_of(feeds->news) != before)
        feeds->arrived(feeds->context);
}

static void drive(struct http_feeds *feeds, curl_socket_t socket, int events)
{
    int running;
    CURLMcode result = curl_multi_socket_action(feeds->multi, socket, events, &running);
    if (result == CURLM_ABORTED_BY_CALLBACK || result == CURLM_OUT_OF_MEMORY)
        give_up(feeds);
    collect_ended(feeds);
}

static int on_socket(sd_event_source *event_source, int fd, uint32_t events, void *context)
{
    (void)event_source;
    int flags = ((events & EPOLLIN) != 0 ? CURL_CSELECT_IN : 0) | ((events & EPOLLOUT) != 0 ? CURL_CSELECT_OUT : 0) |
                ((events & (EPOLLERR | EPOLLHUP)) != 0 ? CURL_CSELECT_ERR : 0);
    drive(context, fd, flags);
    return 0;
}

static int on_timer(sd_event_source *event_source, uint64_t usec, void *context)
{
    (void)event_source, (void)usec;
    drive(context, CURL_SOCKET_TIMEOUT, 0);
    return 0;
}

static int socket_wanted(CURL *easy, curl_socket_t socket, int what, void *context, void *assigned)
{
    (void)easy;
    struct http_feeds *feeds = context;
    sd_event_source *event_source = assigned;
    if (what == CURL_POLL_REMOVE) {
        sd_event_source_disable_unref(event_source);
        curl_multi_assign(feeds->multi, socket, NULL);
        return 0;
    }
    uint32_t events = (what & CURL_POLL_IN ? EPOLLIN : 0u) | (what & CURL_POLL_OUT ? EPOLLOUT : 0u);
    if (event_source != NULL)
        return sd_event_source_set_io_events(event_source, events) < 0 ? -1 : 0;
    if (sd_event_add_io(feeds->event, &event_source, socket, events, on_socket, feeds) < 0)
        return -1;
    curl_multi_assign(feeds->multi, socket, event_source);
    return 0;
}

static int timer_wanted(CURLM *multi, long timeout_ms, void *context)
{
    (void)multi;
    struct http_feeds *feeds = context;
    if (timeout_ms < 0)
        return sd_event_source_set_enabled(feeds->timer, SD_EVENT_OFF) < 0 ? -1 : 0;
    /* even when it is due at once: curl must not be called from within its own callback */
    if (sd_event_source_set_time_relative(feeds->timer, (uint64_t)timeout_ms * 1000) < 0)
        return -1;
    return sd_event_source_set_enabled(feeds->timer, SD_EVENT_ONESHOT) < 0 ? -1 : 0;
}

/* --- opening and polling --- */

static size_t count_http_feeds(const struct settings *settings)
{
    size_t count = 0;
    for (size_t gauge = 0; gauge < settings->gauge_count; gauge++)
        for (size_t feed = 0; feed < settings->gauges[gauge].feed_count; feed++)
            count += settings->gauges[gauge].feeds[feed].kind == SETTINGS_HTTP;
    return count;
}

static void list_sources(struct http_feeds *feeds)
{
    const struct settings *settings = feeds->settings;
    for (size_t gauge = 0; gauge < settings->gauge_count; gauge++)
        for (size_t feed = 0; feed < settings->gauges[gauge].feed_count; feed++)
            if (settings->gauges[gauge].feeds[feed].kind == SETTINGS_HTTP)
                feeds->all[feeds->count++] =
                    (struct fetched){.feeds = feeds, .source = http_source_make(settings, gauge, feed, feeds->news)};
}

static enum fw_status open_curl(struct http_feeds *feeds, struct fw_error *error)
{
    feeds->has_curl = curl_global_init(CURL_GLOBAL_DEFAULT) == CURLE_OK;
    feeds->multi = feeds->has_curl ? curl_multi_init() : NULL;
    if (feeds->multi == NULL)
        return fw_error_set(error, FW_NO_MEMORY, "HTTP feeds: out of memory");
    int result = sd_event_add_time_relative(feeds->event, &feeds->timer, CLOCK_MONOTONIC, 0, 1000, on_timer, feeds);
    if (result >= 0)
        result = sd_event_source_set_enabled(feeds->timer, SD_EVENT_OFF);
    if (result < 0)
        return fw_error_set(error, result == -ENOMEM ? FW_NO_MEMORY : FW_IO, "HTTP feeds: no timer: %s",
                            strerror(-result));
    curl_multi_setopt(feeds->multi, CURLMOPT_SOCKETFUNCTION, socket_wanted);
    curl_multi_setopt(feeds->multi, CURLMOPT_SOCKETDATA, feeds);
    curl_multi_setopt(feeds->multi, CURLMOPT_TIMERFUNCTION, timer_wanted);
    curl_multi_setopt(feeds->multi, CURLMOPT_TIMERDATA, feeds);
    return FW_OK;
}

enum fw_status http_feeds_open(const struct settings *settings, sd_event *event, struct news *news,
                               http_feeds_arrived *arrived, void *context, struct http_feeds **feeds_out,
                               struct fw_error *error)
{
    size_t count = count_http_feeds(settings);
    struct http_feeds *feeds = calloc(1, sizeof *feeds);
    struct fetched *all = calloc(count + 1, sizeof *all);
    if (feeds == NULL || all == NULL) {
        free(feeds);
        free(all);
        return fw_error_set(error, FW_NO_MEMORY, "HTTP feeds: out of memory");
    }
    *feeds = (struct http_feeds){.settings = settings,
                                 .event = event,
                                 .news = news,
                                 .arrived = arrived,
                                 .context = context,
                                 .limits = http_limits_usual(),
                                 .all = all};
    enum fw_status status = count > 0 ? open_curl(feeds, error) : FW_OK;
    if (status != FW_OK) {
        http_feeds_close(feeds);
        return status;
    }
    list_sources(feeds);
    *feeds_out = feeds;
    return FW_OK;
}

void http_feeds_close(struct http_feeds *feeds)
{
    if (feeds == NULL)
        return;
    for (size_t i = 0; i < feeds->count; i++)
        transfer_clear(&feeds->all[i]);
    if (feeds->multi != NULL)
        curl_multi_cleanup(feeds->multi);
    sd_event_source_disable_unref(feeds->timer);
    if (feeds->has_curl)
        curl_global_cleanup();
    free(feeds->all);
    free(feeds);
}

void http_feeds_poll(struct http_feeds *feeds, int64_t now_utc_s)
{
    for (size_t i = 0; i < feeds->count; i++) {
        struct fetched *fetched = &feeds->all[i];
        if (fetched->transfer.easy != NULL || !http_source_is_due(&fetched->source, now_utc_s))
            continue;
        http_source_begin(&fetched->source, now_utc_s);
        start_hop(fetched, strdup(http_source_feed(&fetched->source)->url), 0, clock_machine_ms(), now_utc_s);
    }
}

int64_t http_feeds_next_poll_utc_s(const struct http_feeds *feeds)
{
    int64_t soonest_utc_s = INT64_MAX;
    for (size_t i = 0; i < feeds->count; i++)
        if (feeds->all[i].source.due_utc_s < soonest_utc_s)
            soonest_utc_s = feeds->all[i].source.due_utc_s;
    return soonest_utc_s;
}

size_t http_feeds_under_way(const struct http_feeds *feeds)
{
    size_t count = 0;
    for (size_t i = 0; i < feeds->count; i++)
        count += feeds->all[i].transfer.easy != NULL;
    return count;
}

enum fw_status http_feed_read_json(const struct settings *settings, size_t gauge, size_t feed, const char *bytes,
                                   size_t length, int64_t received_utc_s, struct news *news, struct fw_error *error)
{
    const char *url = settings->gauges[gauge].feeds[feed].url;
    char shown[HTTP_SHOWN_URL_SIZE];
    http_source_show_url(url != NULL ? url : "", shown);
    struct json_tally tally;
    enum fw_status status =
        json_readings_add(settings, gauge, feed, shown, bytes, length, received_utc_s, news, &tally, error);
    return status == FW_OK || status == FW_NOTHING_NEW ? status : fw_error_prefix(error, status, "%s", shown);
}
