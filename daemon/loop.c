/* SPDX-License-Identifier: MIT */
#include "daemon/loop.h"

#include <errno.h>
#include <signal.h>
#include <stdarg.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/epoll.h>
#include <sys/inotify.h>
#include <sys/socket.h>
#include <sys/un.h>
#include <systemd/sd-daemon.h>
#include <unistd.h>

enum { DRIVE_LINE_SIZE = 256, MOST_WAIT_MS = 60000, SHORT_WAIT_MS = 1000 };

struct loop {
    struct station *station;
    const struct loop_options *options;
    bool is_ending;
    uint64_t watchdog_us; /* 0: nobody watches */
    size_t told_cycle_count;
    int listener; /* -1: the world's own time */
    int driver;   /* -1: nobody drives */
    char line[DRIVE_LINE_SIZE];
    size_t line_length;
    bool is_answer_owed;
};

/* --- what wakes the loop ---------------------------------------------------------------------------------------- */

static int on_end_signal(sd_event_source *source, const struct signalfd_siginfo *info, void *context)
{
    (void)source;
    struct loop *loop = context;
    journal_say(&loop->station->journal, JOURNAL_NOTICE, "signal %u: ending", info->ssi_signo);
    loop->is_ending = true;
    return 0;
}

static int on_reload_signal(sd_event_source *source, const struct signalfd_siginfo *info, void *context)
{
    (void)source;
    (void)info;
    struct loop *loop = context;
    sd_notify(0, "RELOADING=1");
    station_reload(loop->station);
    sd_notify(0, "READY=1");
    return 0;
}

/* The watch is a hint: it is emptied here, and the turn that follows every event looks at the folder itself.
 * Feeds read their own descriptors where they keep account of what was renamed in. */
static int on_watch(sd_event_source *source, int descriptor, uint32_t events, void *context)
{
    (void)source;
    (void)descriptor;
    (void)events;
    (void)context;
    return 0;
}

static const struct {
    int number;
    sd_event_signal_handler_t handler;
} signals[] = {{SIGINT, on_end_signal}, {SIGTERM, on_end_signal}, {SIGHUP, on_reload_signal}};

static enum fw_status add_signals(struct loop *loop, struct fw_error *error)
{
    sigset_t blocked;
    sigemptyset(&blocked);
    sigaddset(&blocked, SIGCHLD); /* children are reaped through the loop */
    sigaddset(&blocked, SIGPIPE);
    for (size_t index = 0; index < sizeof signals / sizeof *signals; index++)
        sigaddset(&blocked, signals[index].number);
    if (sigprocmask(SIG_BLOCK, &blocked, NULL) < 0)
        return fw_error_set(error, FW_IO, "signals cannot be blocked: %s", strerror(errno));
    for (size_t index = 0; index < sizeof signals / sizeof *signals; index++) {
        int result =
            sd_event_add_signal(loop->station->event, NULL, signals[index].number, signals[index].handler, loop);
        if (result < 0)
            return fw_error_set(error, FW_IO, "signal %d cannot be watched: %s", signals[index].number,
                                strerror(-result));
    }
    return FW_OK;
}

/* Once for every station: after a reload the feeds have other descriptors, so they hang on floating sources of their own. */
static void add_watch(struct loop *loop, int descriptor, sd_event_source **source_out)
{
    if (descriptor >= 0)
        sd_event_add_io(loop->station->event, source_out, descriptor, EPOLLIN, on_watch, loop);
}

/* --- a driven world ---------------------------------------------------------------------------------------------- */

__attribute__((format(printf, 2, 3))) static void answer(struct loop *loop, const char *format, ...)
{
    char text[DRIVE_LINE_SIZE + 64];
    va_list arguments;
    va_start(arguments, format);
    int length = vsnprintf(text, sizeof text, format, arguments);
    va_end(arguments);
    if (loop->driver >= 0 && length > 0 && send(loop->driver, text, (size_t)length, MSG_NOSIGNAL) < 0)
        journal_say(&loop->station->journal, JOURNAL_WARNING, "the driver cannot be answered: %s", strerror(errno));
}

static void obey(struct loop *loop, const char *line)
{
    static const char advance[] = "advance ";
    struct fw_error error = {.status = FW_OK};
    int64_t utc_s = 0;
    if (strcmp(line, "quit") == 0) {
        loop->is_ending = true;
        return;
    }
    if (strncmp(line, advance, sizeof advance - 1) != 0) {
        answer(loop, "error: '%s' is not known; expected 'advance TIME' or 'quit'\n", line);
        return;
    }
    if (when_parse(line + sizeof advance - 1, NULL, &utc_s, &error) != FW_OK) {
        answer(loop, "error: %.200s\n", error.text);
        return;
    }
    clock_advance(&loop->station->clock, utc_s);
    loop->is_answer_owed = true;
}

static int on_driver(sd_event_source *source, int descriptor, uint32_t events, void *context)
{
    (void)events;
    struct loop *loop = context;
    char byte;
    ssize_t got;
    while ((got = read(descriptor, &byte, 1)) == 1) {
        if (byte != '\n') {
            if (loop->line_length + 1 < sizeof loop->line)
                loop->line[loop->line_length++] = byte;
            continue;
        }
        loop->line[loop->line_length] = '\0';
        loop->line_length = 0;
        obey(loop, loop->line);
    }
    if (got == 0) {
        sd_event_source_disable_unref(source);
        close(loop->driver);
        loop->driver = -1;
        loop->line_length = 0;
    }
    return 0;
}

static int on_connect(sd_event_source *source, int descriptor, uint32_t events, void *context)
{
    (void)source;
    (void)events;
    struct loop *loop = context;
    int driver = accept4(descriptor, NULL, NULL, SOCK_CLOEXEC | SOCK_NONBLOCK);
    if (driver < 0)
        return 0;
    if (loop->driver >= 0) {
        close(driver); /* one world has one driver */
        return 0;
    }
    loop->driver = driver;
    sd_event_source *reader = NULL;
    if (sd_event_add_io(loop->station->event, &reader, driver, EPOLLIN, on_driver, loop) < 0) {
        close(driver);
        loop->driver = -1;
    }
    return 0;
}

static enum fw_status open_driver_socket(struct loop *loop, struct fw_error *error)
{
    const char *path = loop->options->drive_socket;
    if (path == NULL)
        return FW_OK;
    struct sockaddr_un address = {.sun_family = AF_UNIX};
    if (strlen(path) >= sizeof address.sun_path)
        return fw_error_set(error, FW_USAGE, "--drive: '%s' is longer than the %zu bytes a socket's path may have",
                            path, sizeof address.sun_path - 1);
    memcpy(address.sun_path, path, strlen(path) + 1);
    loop->listener = socket(AF_UNIX, SOCK_STREAM | SOCK_CLOEXEC | SOCK_NONBLOCK, 0);
    unlink(path);
    if (loop->listener < 0 || bind(loop->listener, (struct sockaddr *)&address, sizeof address) < 0 ||
        listen(loop->listener, 1) < 0)
        return fw_error_set(error, FW_IO, "--drive: %s: %s", path, strerror(errno));
    if (sd_event_add_io(loop->station->event, NULL, loop->listener, EPOLLIN, on_connect, loop) < 0)
        return fw_error_set(error, FW_IO, "--drive: %s cannot be watched", path);
    return FW_OK;
}

/* --- the loop ---------------------------------------------------------------------------------------------------- */

static void answer_when_idle(struct loop *loop)
{
    char text[WHEN_TEXT_SIZE];
    if (!loop->is_answer_owed || !station_is_idle(loop->station))
        return;
    loop->is_answer_owed = false;
    answer(loop, "at %s\n", when_rfc3339_utc(clock_world_utc_s(&loop->station->clock), text));
}

/*
 * Progress is the proof of life. A turn that was done is not enough: when no forecast could be made for three intervals the manager is
 * told nothing, and restarts us. Transfers and hooks have limits of their own.
 */
static void tell_manager(struct loop *loop)
{
    const struct station *station = loop->station;
    int64_t patience_ms = 3000 * station->settings->forecast_every_s + MOST_WAIT_MS;
    bool is_alive = station->clock.is_driven || clock_machine_ms() - station->last_cycle_ms < patience_ms;
    if (loop->watchdog_us > 0 && is_alive)
        sd_notify(0, "WATCHDOG=1");
    if (loop->told_cycle_count == station->cycle_count)
        return;
    loop->told_cycle_count = station->cycle_count;
    journal_flush(&loop->station->journal);
    size_t open_count = 0;
    char text[WHEN_TEXT_SIZE];
    for (size_t point = 0; point < station->picture->point_count; point++)
        open_count += station->picture->points[point].advice.level != ADVICE_QUIET;
    sd_notifyf(0, "STATUS=forecast of %s; %zu of %zu crossings not QUIET%s",
               when_clock(&station->settings->zone, station->picture->as_of_utc_s, text), open_count,
               station->picture->point_count, station->picture->is_store_failing ? "; THE STORE IS FAILING" : "");
}

static int64_t wait_ms(const struct loop *loop)
{
    int64_t most_ms = MOST_WAIT_MS;
    if (loop->watchdog_us > 0 && (int64_t)(loop->watchdog_us / 3000) < most_ms)
        most_ms = (int64_t)(loop->watchdog_us / 3000);
    return station_wait_ms(loop->station, most_ms);
}

enum { WATCHES_MAX = 64 };

static size_t watch_feeds(struct loop *loop, sd_event_source *watches[WATCHES_MAX])
{
    size_t count = 0;
    for (size_t folder = 0; folder < loop->station->folder_count && count + 1 < WATCHES_MAX; folder++)
        add_watch(loop, folder_feed_watch_fd(loop->station->folders[folder]), &watches[count++]);
    add_watch(loop, inbox_watch_fd(loop->station->inbox), &watches[count++]);
    return count;
}

static void unwatch_feeds(sd_event_source *watches[WATCHES_MAX], size_t count)
{
    for (size_t index = 0; index < count; index++)
        watches[index] = sd_event_source_disable_unref(watches[index]);
}

enum fw_status loop_run(struct station *station, const struct loop_options *options, struct fw_error *error)
{
    struct loop loop = {.station = station, .options = options, .listener = -1, .driver = -1};
    sd_event_source *watches[WATCHES_MAX] = {NULL};
    enum fw_status status = add_signals(&loop, error);
    if (status == FW_OK)
        status = open_driver_socket(&loop, error);
    if (status != FW_OK)
        goto cleanup;
    if (sd_watchdog_enabled(0, &loop.watchdog_us) <= 0)
        loop.watchdog_us = 0;
    sd_notifyf(0, "READY=1\nSTATUS=watching %zu gauges for %zu crossings", station->settings->gauge_count,
               station->settings->point_count);
    journal_say(&station->journal, JOURNAL_NOTICE,
                "forewater %s watches %zu gauge(s) for %zu crossing(s), settings %.8s", FW_VERSION,
                station->settings->gauge_count, station->settings->point_count, station->settings->digest);

    const struct settings *watched = NULL;
    size_t watch_count = 0;
    while (!loop.is_ending) {
        if (watched != station->settings) { /* at first, and after a reload */
            unwatch_feeds(watches, watch_count);
            watch_count = watch_feeds(&loop, watches);
            watched = station->settings;
        }
        station->is_paused = station->clock.is_driven && !loop.is_answer_owed;
        station_turn(station);
        answer_when_idle(&loop);
        tell_manager(&loop);
        if (options->is_once && station->cycle_count > 0 && station_is_idle(station))
            break;
        int result = sd_event_run(station->event, (uint64_t)wait_ms(&loop) * 1000);
        if (result < 0) {
            status = fw_error_set(error, FW_IO, "the event loop failed: %s", strerror(-result));
            break;
        }
    }
    sd_notify(0, "STOPPING=1");
    unwatch_feeds(watches, watch_count);
cleanup:
    if (loop.driver >= 0)
        close(loop.driver);
    if (loop.listener >= 0) {
        close(loop.listener);
        unlink(options->drive_socket);
    }
    return status;
}
