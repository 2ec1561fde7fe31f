/* SPDX-License-Identifier: MIT */
/*
 * Sends what the picture's outbox holds: at least once, with a stable id. A command channel is a child process: argv without a shell, an
 * environment of FOREWATER_* only, the message as one JSON object on stdin, own process group, TERM after 30 s and KILL 5 s later, 64 KiB of output to the journal, at most 4 at once.
 * Exit 0 is "sent"; anything else is tried again after 15 s doubling to 15 min, with half jitter, in world time; after 5 days it is given up, loudly.
 */
#ifndef FOREWATER_DAEMON_TELL_OUTBOX_H
#define FOREWATER_DAEMON_TELL_OUTBOX_H

#include <systemd/sd-event.h>

#include "daemon/journal.h"
#include "daemon/picture.h"

struct outbox;

/* Called on the loop when a message's state changed: the caller saves it. */
typedef void outbox_settled(void *context, const struct message *message);

FW_MUST_CHECK enum fw_status outbox_open(const struct settings *settings, sd_event *event, struct journal *journal,
                                         outbox_settled *settled, void *context, struct outbox **outbox_out,
                                         struct fw_error *error);
/* Asks running hooks to end (TERM, then KILL after grace_ms of machine time) and reaps them; their messages wait for the next life. */
void outbox_close(struct outbox *outbox, int64_t grace_ms);

/* Starts every message of the picture that is due at this world time. The picture may be replaced between calls: messages are known by entry. */
void outbox_send_due(struct outbox *outbox, struct picture *picture, int64_t now_utc_s);
/* The picture whose messages get their new state when a hook ends (NULL: none). */
void outbox_use_picture(struct outbox *outbox, struct picture *picture);
int64_t outbox_next_try_utc_s(const struct outbox *outbox, const struct picture *picture); /* INT64_MAX: none waits */
size_t outbox_under_way(const struct outbox *outbox);

#endif
