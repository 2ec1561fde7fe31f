/* SPDX-License-Identifier: MIT */
/*
 * The daemon's rooms put together: feeds in front, the cycle in the middle, store and outbox behind. The loop turns it; replay has its own, without feeds.
 */
#ifndef FOREWATER_DAEMON_STATION_H
#define FOREWATER_DAEMON_STATION_H

#include <systemd/sd-event.h>

#include "daemon/clock.h"
#include "daemon/cycle.h"
#include "daemon/feed/folder_feed.h"
#include "daemon/feed/http_feed.h"
#include "daemon/feed/inbox.h"
#include "daemon/journal.h"
#include "daemon/store/store.h"
#include "daemon/tell/outbox.h"

struct station {
    struct journal journal;
    struct clock clock;
    sd_event *event;
    struct settings *settings;
    struct store *store; /* NULL while the store is failing */
    struct picture *picture;
    struct cycle *cycle;
    struct folder_feed **folders;
    size_t folder_count;
    struct inbox *inbox;
    struct http_feeds *http;
    struct outbox *outbox;
    struct news news; /* come in, not yet taken */
    int64_t next_cycle_utc_s;
    int64_t next_look_ms;      /* machine time at which a settling file may be ready; -1: none */
    int64_t next_rescan_ms;    /* machine time of the next look at every folder, watched or not */
    int64_t first_cycle_by_ms; /* machine time: until then the first cycle waits for what is still coming in */
    size_t cycle_count;
    int64_t last_cycle_ms; /* machine time of the newest forecast that could be made */
    bool
        is_paused; /* a driven world between two steps: only people's words are taken, at the moment the world stands at */
};

/*
 * Opens everything for settings that have been read (taken: the station's from now on, whatever is returned).
 * FW_LOCKED: another instance. The caller closes in every case.
 */
FW_MUST_CHECK enum fw_status station_open(struct station *station, struct settings *settings, struct clock clock,
                                          struct fw_error *error);
void station_close(struct station *station);

/* Looks at folders and inbox, runs a cycle when one is due or news is there, sends what is due. Never fails: trouble is told and survived. */
void station_turn(struct station *station);

/* Nothing is under way and nothing is due at this world time. */
bool station_is_idle(const struct station *station);

/* Machine milliseconds until the station must be turned again, at most `most_ms`. */
int64_t station_wait_ms(const struct station *station, int64_t most_ms);

/* Takes a changed configuration; a bad one, or one that removes a crossing with an open thread, leaves the old in force and says so. */
void station_reload(struct station *station);

#endif
