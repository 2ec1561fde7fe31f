/* SPDX-License-Identifier: MIT */
/*
 * A small HTTP server on 127.0.0.1 that behaves as badly as its path asks for: raw sockets, one thread a connection.
 */
#ifndef FOREWATER_TESTS_HOSTILE_SERVER_H
#define FOREWATER_TESTS_HOSTILE_SERVER_H

#include <arpa/inet.h>
#include <netinet/in.h>
#include <poll.h>
#include <pthread.h>
#include <stdatomic.h>
#include <sys/socket.h>
#include <time.h>

#include "tests/daemon/feed_bench.h"

struct hostile_server {
    int listener;
    int port;
    pthread_t thread;
    atomic_bool is_stopping;
    atomic_int connections; /* under way */
    atomic_int requests;    /* ever */
    pthread_mutex_t lock;
    char last_request[4096];
    char answer[4096]; /* what /answer gives, whole: status line, headers, body */
};

struct hostile_connection {
    struct hostile_server *server;
    int fd;
    char request[4096];
};

static inline bool hostile_send(struct hostile_connection *connection, const char *bytes, size_t length)
{
    while (length > 0) {
        ssize_t count = send(connection->fd, bytes, length, MSG_NOSIGNAL);
        if (count <= 0 || atomic_load(&connection->server->is_stopping))
            return false;
        bytes += count;
        length -= (size_t)count;
    }
    return true;
}

static inline bool hostile_say(struct hostile_connection *connection, const char *text)
{
    return hostile_send(connection, text, strlen(text));
}

static inline bool hostile_wait(struct hostile_connection *connection,
                                int ms) /* false: stop, or the client is gone */
{
    struct pollfd client = {.fd = connection->fd, .events = POLLRDHUP};
    for (int waited = 0; waited < ms && !atomic_load(&connection->server->is_stopping); waited += 20)
        if (poll(&client, 1, 20) != 0)
            return false;
    return !atomic_load(&connection->server->is_stopping);
}

static inline void hostile_reset(struct hostile_connection *connection)
{
    struct linger at_once = {.l_onoff = 1, .l_linger = 0};
    setsockopt(connection->fd, SOL_SOCKET, SO_LINGER, &at_once, sizeof at_once);
}

#define HOSTILE_OK "HTTP/1.1 200 OK\r\nContent-Type: application/json\r\nConnection: close\r\n"
#define HOSTILE_CHUNKED HOSTILE_OK "Transfer-Encoding: chunked\r\n\r\n"

static inline void hostile_body(struct hostile_connection *connection, const char *body)
{
    char head[256];
    snprintf(head, sizeof head, HOSTILE_OK "Content-Length: %zu\r\n\r\n", strlen(body));
    if (hostile_say(connection, head))
        hostile_say(connection, body);
}

static inline void hostile_redirect(struct hostile_connection *connection, const char *to)
{
    char head[512];
    snprintf(head, sizeof head,
             "HTTP/1.1 302 Found\r\nLocation: %s\r\nContent-Length: 0\r\nConnection: close\r\n\r\n", to);
    hostile_say(connection, head);
}

/* The endless ones end when the client has had enough. */
static inline void hostile_endless(struct hostile_connection *connection, const char *head, const char *piece,
                                   int pause_ms)
{
    bool goes_on = hostile_say(connection, head);
    while (goes_on)
        goes_on = hostile_say(connection, piece) && (pause_ms == 0 || hostile_wait(connection, pause_ms));
}

static inline void hostile_behave(struct hostile_connection *connection, const char *path)
{
    static const char piece[] = "400\r\n"
                                "0123456789abcdef0123456789abcdef0123456789abcdef0123456789abcdef"
                                "0123456789abcdef0123456789abcdef0123456789abcdef0123456789abcdef"
                                "0123456789abcdef0123456789abcdef0123456789abcdef0123456789abcdef"
                                "0123456789abcdef0123456789abcdef0123456789abcdef0123456789abcdef"
                                "0123456789abcdef0123456789abcdef0123456789abcdef0123456789abcdef"
                                "0123456789abcdef0123456789abcdef0123456789abcdef0123456789abcdef"
                                "0123456789abcdef0123456789abcdef0123456789abcdef0123456789abcdef"
                                "0123456789abcdef0123456789abcdef0123456789abcdef0123456789abcdef"
                                "0123456789abcdef0123456789abcdef0123456789abcdef0123456789abcdef"
                                "0123456789abcdef0123456789abcdef0123456789abcdef0123456789abcdef"
                                "0123456789abcdef0123456789abcdef0123456789abcdef0123456789abcdef"
                                "0123456789abcdef0123456789abcdef0123456789abcdef0123456789abcdef"
                                "0123456789abcdef0123456789abcdef0123456789abcdef0123456789abcdef"
                                "0123456789abcdef0123456789abcdef0123456789abcdef0123456789abcdef"
                                "0123456789abcdef0123456789abcdef0123456789abcdef0123456789abcdef"
                                "0123456789abcdef0123456789abcdef0123456789abcdef0123456789abcdef\r\n";
    static const char good[] = "{\"data\":[{\"t\":\"2031-02-14T21:15:00Z\",\"v\":1.60}]}";
    if (strcmp(path, "/good") == 0)
        hostile_body(connection, good);
    else if (strcmp(path, "/answer") == 0) {
        pthread_mutex_lock(&connection->server->lock);
        hostile_say(connection, connection->server->answer);
        pthread_mutex_unlock(&connection->server->lock);
    } else if (strcmp(path, "/hang") == 0)
        hostile_wait(connection, 60000);
    else if (strcmp(path, "/drip") == 0)
        hostile_endless(connection, HOSTILE_CHUNKED, "1\r\n \r\n", 100);
    else if (strcmp(path, "/patter") == 0) /* fast enough, but without an end */
        hostile_endless(connection, HOSTILE_CHUNKED, "20\r\n                                \r\n", 40);
    else if (strcmp(path, "/slow-header") == 0)
        hostile_endless(connection, "HTTP/1.1 200 OK\r\nX-Slow: ", "x", 100);
    else if (strcmp(path, "/endless-chunked") == 0)
        hostile_endless(connection, HOSTILE_CHUNKED, piece, 0);
    else if (strcmp(path, "/endless-headers") == 0)
        hostile_endless(connection, "HTTP/1.1 200 OK\r\n", "X-More: and more and more and more\r\n", 0);
    else if (strcmp(path, "/long") == 0)
        hostile_say(connection, HOSTILE_OK "Content-Length: 10737418240\r\n\r\n{");
    else if (strncmp(path, "/redirect-loop", 14) == 0)
        hostile_redirect(connection, "/redirect-loop");
    else if (strcmp(path, "/redirect-file") == 0)
        hostile_redirect(connection, "file:///etc/passwd");
    else if (strcmp(path, "/redirect-nowhere") == 0)
        hostile_say(connection, "HTTP/1.1 302 Found\r\nContent-Length: 0\r\nConnection: close\r\n\r\n");
    else if (strcmp(path, "/redirect-4") == 0)
        hostile_redirect(connection, "/redirect-3");
    else if (strncmp(path, "/redirect-3", 11) == 0)
        hostile_redirect(connection, "/redirect-2?key=hidden");
    else if (strncmp(path, "/redirect-2", 11) == 0)
        hostile_redirect(connection, "/redirect-1");
    else if (strcmp(path, "/redirect-1") == 0)
        hostile_redirect(connection, "/good");
    else if (strcmp(path, "/redirect-hang") == 0) {
        if (hostile_wait(connection, 300))
            hostile_redirect(connection, "/hang");
    } else if (strcmp(path, "/garbage") == 0)
        hostile_say(connection, "\x16\x03\x01\x02\xfa\x07 no such thing \xff\xfe\r\n\r\n");
    else if (strcmp(path, "/bare") == 0)
        hostile_say(connection, good);
    else if (strcmp(path, "/truncated") == 0)
        hostile_say(connection, HOSTILE_OK "Content-Length: 1000\r\n\r\n{\"data\":[");
    else if (strcmp(path, "/truncated-chunk") == 0)
        hostile_say(connection, HOSTILE_CHUNKED "400\r\n{\"data\":[");
    else if (strcmp(path, "/short-length") == 0)
        hostile_say(connection, HOSTILE_OK "Content-Length: 8\r\n\r\n{\"data\":[]}");
    else if (strcmp(path, "/reset") == 0) {
        hostile_say(connection, HOSTILE_OK "Content-Length: 1000\r\n\r\n{\"data\":[");
        hostile_wait(connection, 100);
        hostile_reset(connection);
    } else if (strcmp(path, "/reset-at-once") == 0)
        hostile_reset(connection);
    else if (strcmp(path, "/close") == 0)
        return;
    else if (strcmp(path, "/web-page") == 0)
        hostile_body(connection, "\r\n<!DOCTYPE html><title>Maintenance</title><p>Back soon");
    else if (strcmp(path, "/empty") == 0)
        hostile_body(connection, "");
    else if (strcmp(path, "/text") == 0)
        hostile_body(connection, "Service is down \x1b[2J");
    else if (strcmp(path, "/wrong-shape") == 0)
        hostile_body(connection, "{\"data\":5}");
    else if (strcmp(path, "/elsewhere") == 0)
        hostile_body(connection, "{\"items\":[]}");
    else if (strcmp(path, "/none-good") == 0)
        hostile_body(connection, "{\"data\":[{\"t\":\"noon\",\"v\":1.6},{\"t\":1928870100,\"v\":\"1,6\"}]}");
    else if (strcmp(path, "/deep") == 0)
        hostile_body(connection, "[[[[[[[[[[[[[[[[[[[[[[[[[[[[[[[[[[[[[[[[1]]]]]]]]]]]]]]]]]]]]]]]]]]]]]]]]]]]]]]]]");
    else if (strcmp(path, "/gzip") == 0)
        hostile_say(connection, HOSTILE_OK "Content-Encoding: gzip\r\n\r\n\x1f\x8b\x08\x02\x03\x04 not asked for");
    else if (strcmp(path, "/503") == 0)
        hostile_say(connection, "HTTP/1.1 503 Busy\r\nContent-Length: 0\r\nConnection: close\r\n\r\n");
    else if (strcmp(path, "/304") == 0)
        hostile_say(connection, "HTTP/1.1 304 Not Modified\r\nConnection: close\r\n\r\n");
    else
        hostile_say(connection, "HTTP/1.1 404 Not Found\r\nContent-Length: 3\r\nConnection: close\r\n\r\nno\n");
}

static inline void *hostile_serve(void *context)
{
    struct hostile_connection *connection = context;
    struct hostile_server *server = connection->server;
    size_t length = 0;
    while (length < sizeof connection->request - 1) {
        ssize_t count =
            recv(connection->fd, connection->request + length, sizeof connection->request - 1 - length, 0);
        if (count <= 0)
            break;
        length += (size_t)count;
        connection->request[length] = '\0';
        if (strstr(connection->request, "\r\n\r\n") != NULL || connection->request[0] == 0x16) /* TLS hello */
            break;
    }
    char path[256] = "";
    pthread_mutex_lock(&server->lock);
    memcpy(server->last_request, connection->request, sizeof server->last_request);
    pthread_mutex_unlock(&server->lock);
    atomic_fetch_add(&server->requests, 1);
    if (sscanf(connection->request, "GET %255s", path) == 1)
        hostile_behave(connection, path);
    close(connection->fd);
    free(connection);
    atomic_fetch_sub(&server->connections, 1);
    return NULL;
}

static inline void *hostile_accept(void *context)
{
    struct hostile_server *server = context;
    while (!atomic_load(&server->is_stopping)) {
        struct pollfd listener = {.fd = server->listener, .events = POLLIN};
        if (poll(&listener, 1, 20) <= 0)
            continue;
        struct hostile_connection *connection = calloc(1, sizeof *connection);
        if (connection == NULL)
            continue;
        *connection = (struct hostile_connection){.server = server, .fd = accept(server->listener, NULL, NULL)};
        struct timeval patience = {.tv_sec = 30};
        setsockopt(connection->fd, SOL_SOCKET, SO_RCVTIMEO, &patience, sizeof patience);
        pthread_t thread;
        atomic_fetch_add(&server->connections, 1);
        if (pthread_create(&thread, NULL, hostile_serve, connection) == 0)
            pthread_detach(thread);
        else
            atomic_fetch_sub(&server->connections, 1);
    }
    return NULL;
}

static inline struct hostile_server *hostile_start(void)
{
    struct hostile_server *server = calloc(1, sizeof *server);
    if (server == NULL)
        abort();
    struct sockaddr_in address = {.sin_family = AF_INET, .sin_addr.s_addr = htonl(INADDR_LOOPBACK)};
    socklen_t size = sizeof address;
    pthread_mutex_init(&server->lock, NULL);
    server->listener = socket(AF_INET, SOCK_STREAM | SOCK_CLOEXEC, 0);
    assert_int_equal(bind(server->listener, (const struct sockaddr *)&address, size), 0);
    assert_int_equal(listen(server->listener, 64), 0);
    assert_int_equal(getsockname(server->listener, (struct sockaddr *)&address, &size), 0);
    server->port = ntohs(address.sin_port);
    assert_int_equal(pthread_create(&server->thread, NULL, hostile_accept, server), 0);
    return server;
}

static inline void hostile_stop(struct hostile_server *server)
{
    struct timespec pause = {.tv_nsec = 5000000};
    atomic_store(&server->is_stopping, true);
    pthread_join(server->thread, NULL);
    while (atomic_load(&server->connections) > 0)
        nanosleep(&pause, NULL);
    close(server->listener);
    pthread_mutex_destroy(&server->lock);
    free(server);
}

static inline void hostile_set_answer(struct hostile_server *server, const char *answer)
{
    pthread_mutex_lock(&server->lock);
    snprintf(server->answer, sizeof server->answer, "%s", answer);
    pthread_mutex_unlock(&server->lock);
}

static inline void hostile_get_request(struct hostile_server *server, char request[4096])
{
    pthread_mutex_lock(&server->lock);
    memcpy(request, server->last_request, sizeof server->last_request);
    pthread_mutex_unlock(&server->lock);
}

#endif
