/* SPDX-License-Identifier: MIT */
#include "config/demo/gauge_page.h"

#include <arpa/inet.h>
#include <microhttpd.h>
#include <netinet/in.h>
#include <pthread.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "config/demo/night_time.h"

enum {
    STAGE_SIZE = 16,
    TAG_SIZE = 32,
    READING_JSON_SIZE = 64,
    BODY_SIZE = 256 + GAUGE_PAGE_WINDOW * READING_JSON_SIZE
};

struct shown_reading {
    int64_t observed_utc_s;
    char stage_m[STAGE_SIZE];
};

struct gauge_page {
    struct MHD_Daemon *server;
    pthread_mutex_t lock; /* over all that follows */
    bool is_in_reach;
    struct gauge_page_count count;
    size_t shown_count; /* readings ever shown; the newest GAUGE_PAGE_WINDOW are kept, in a ring */
    struct shown_reading ring[GAUGE_PAGE_WINDOW];
};

static void write_body(const struct gauge_page *page, char body[BODY_SIZE])
{
    size_t kept = page->shown_count < GAUGE_PAGE_WINDOW ? page->shown_count : GAUGE_PAGE_WINDOW;
    char time[NIGHT_TIME_SIZE];
    size_t length = (size_t)snprintf(body, BODY_SIZE, "{\"gauge\": \"Orlin Scar\", \"data\": [");
    for (size_t i = page->shown_count - kept; i < page->shown_count; i++) {
        const struct shown_reading *reading = &page->ring[i % GAUGE_PAGE_WINDOW];
        length += (size_t)snprintf(body + length, BODY_SIZE - length, "%s{\"t\": \"%s\", \"v\": %s}",
                                   i + kept == page->shown_count ? "" : ", ",
                                   night_time_rfc3339_utc(reading->observed_utc_s, time), reading->stage_m);
    }
    snprintf(body + length, BODY_SIZE - length, "]}\n");
}

static enum MHD_Result reply(struct MHD_Connection *connection, unsigned status, const char *type, const char *tag,
                             const char *body)
{
    struct MHD_Response *response =
        MHD_create_response_from_buffer(strlen(body), (void *)(uintptr_t)body, MHD_RESPMEM_MUST_COPY);
    if (response == NULL)
        return MHD_NO;
    enum MHD_Result result = MHD_YES;
    if (type != NULL)
        result = MHD_add_response_header(response, MHD_HTTP_HEADER_CONTENT_TYPE, type);
    if (result == MHD_YES && tag != NULL)
        result = MHD_add_response_header(response, MHD_HTTP_HEADER_ETAG, tag);
    if (result == MHD_YES)
        result = MHD_queue_response(connection, status, response);
    MHD_destroy_response(response);
    return result;
}

/* Called with the lock held. */
static enum MHD_Result reply_with_readings(struct gauge_page *page, struct MHD_Connection *connection)
{
    char tag[TAG_SIZE], body[BODY_SIZE];
    snprintf(tag, sizeof tag, "\"%zu\"", page->shown_count);
    const char *known = MHD_lookup_connection_value(connection, MHD_HEADER_KIND, MHD_HTTP_HEADER_IF_NONE_MATCH);
    if (known != NULL && strstr(known, tag) != NULL) {
        page->count.unchanged++;
        return reply(connection, MHD_HTTP_NOT_MODIFIED, NULL, tag, "");
    }
    page->count.whole++;
    write_body(page, body);
    return reply(connection, MHD_HTTP_OK, "application/json", tag, body);
}

static enum MHD_Result on_request(void *context, struct MHD_Connection *connection, const char *url,
                                  const char *method, const char *version, const char *upload, size_t *upload_size,
                                  void **request)
{
    struct gauge_page *page = context;
    (void)version;
    (void)upload;
    (void)upload_size;
    (void)request;
    if (strcmp(url, "/orlin-scar") != 0)
        return reply(connection, MHD_HTTP_NOT_FOUND, "text/plain", NULL, "no such gauge\n");
    if (strcmp(method, MHD_HTTP_METHOD_GET) != 0)
        return reply(connection, MHD_HTTP_METHOD_NOT_ALLOWED, "text/plain", NULL, "GET alone\n");
    pthread_mutex_lock(&page->lock);
    enum MHD_Result result = MHD_NO; /* closes the connection */
    if (page->is_in_reach)
        result = reply_with_readings(page, connection);
    else
        page->count.cut_off++;
    pthread_mutex_unlock(&page->lock);
    return result;
}

struct gauge_page *gauge_page_open(void)
{
    struct sockaddr_in address = {.sin_family = AF_INET, .sin_addr.s_addr = htonl(INADDR_LOOPBACK)};
    struct gauge_page *page = calloc(1, sizeof *page);
    if (page == NULL) {
        fputs("play: no memory for the gauge's page\n", stderr);
        return NULL;
    }
    pthread_mutex_init(&page->lock, NULL);
    page->is_in_reach = true;
    page->server = MHD_start_daemon(MHD_USE_INTERNAL_POLLING_THREAD, 0, NULL, NULL, on_request, page,
                                    MHD_OPTION_SOCK_ADDR, (struct sockaddr *)&address, MHD_OPTION_END);
    if (page->server == NULL) {
        fputs("play: the gauge's page cannot be opened on 127.0.0.1\n", stderr);
        gauge_page_close(page);
        return NULL;
    }
    return page;
}

void gauge_page_close(struct gauge_page *page)
{
    if (page == NULL)
        return;
    if (page->server != NULL)
        MHD_stop_daemon(page->server);
    pthread_mutex_destroy(&page->lock);
    free(page);
}

unsigned gauge_page_port(const struct gauge_page *page)
{
    const union MHD_DaemonInfo *info = MHD_get_daemon_info(page->server, MHD_DAEMON_INFO_BIND_PORT);
    return info == NULL ? 0 : info->port;
}

void gauge_page_add(struct gauge_page *page, int64_t observed_utc_s, const char *stage_m)
{
    pthread_mutex_lock(&page->lock);
    struct shown_reading *reading = &page->ring[page->shown_count++ % GAUGE_PAGE_WINDOW];
    reading->observed_utc_s = observed_utc_s;
    snprintf(reading->stage_m, sizeof reading->stage_m, "%s", stage_m);
    pthread_mutex_unlock(&page->lock);
}

void gauge_page_set_in_reach(struct gauge_page *page, bool is_in_reach)
{
    pthread_mutex_lock(&page->lock);
    page->is_in_reach = is_in_reach;
    pthread_mutex_unlock(&page->lock);
}

struct gauge_page_count gauge_page_counted(struct gauge_page *page)
{
    pthread_mutex_lock(&page->lock);
    struct gauge_page_count count = page->count;
    pthread_mutex_unlock(&page->lock);
    return count;
}
