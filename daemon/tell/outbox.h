/* SPDX-License-Identifier: MIT */
/*
 * Sends what the picture's outbox holds: at least once, with a stable id. A command channel is a child process
 * (daemon/tell/hook.h): argv without a shell, an environment of PATH and FOREWATER_* only, the message as one JSON
 * object on stdin, own process group, TERM after 30 s and KILL 5 s later, 64 KiB of output to the journal, at most 4
 * at once. The journal channel writes the message into the journal and is done. Exit 0 is "sent"; anything else is
 * tried again after 15 s doubling to 15 min, with half jitter, in world time; after 5 days it is given up, loudly.
 *
 * No channel can hold up another for long: of several command channels one has at most 3 of the 4 places, and one
 * whose last try failed has 1. A try that fails in one picture counts in the next: how messages ended is kept here by
 * entry, so a picture that was copied before and taken after learns it when it is shown to outbox_send_due or
 * outbox_use_picture.
 */
#ifndef FOREWATER_DAEMON_TELL_OUTBOX_H
#define FOREWATER_DAEMON_TELL_OUTBOX_H

#include <systemd/sd-event.h>

#include "daemon/clock.h"
#include "daemon/journal.h"
#include "daemon/picture.h"
#include "daemon/tell/hook.h"

struct outbox;

/*
 * Called when a try has ended (SENT, WAITING again, GIVEN_UP), not when it starts: the caller saves it. The bulletin
 * may be NULL here. It may call outbox_send_due.
 */
typedef void outbox_settled(void *context, const struct message *message);

FW_MUST_CHECK enum fw_status outbox_open(const struct settings *settings, sd_event *event, struct journal *journal,
                                         outbox_settled *settled, void *context, struct outbox **outbox_out,
                                         struct fw_error *error);

/*
 * The world's clock, for back-off and for when a message was settled. Without one the last world time of
 * outbox_send_due stands.
 */
void outbox_use_clock(struct outbox *outbox, const struct clock *clock);
/* Other limits than hook_limits_usual(), for hooks that start from now on. */
void outbox_set_limits(struct outbox *outbox, const struct hook_limits *limits);

/*
 * Asks running hooks to end (TERM, then KILL after grace_ms of machine time) and reaps them; their messages wait for
 * the next life. NULL is fine.
 */
void outbox_close(struct outbox *outbox, int64_t grace_ms);

/*
 * Starts every message of the picture that is due at this world time and finds a place. The picture may be replaced
 * between calls: messages are known by entry. A message left UNDER_WAY by an earlier life is due at once.
 */
void outbox_send_due(struct outbox *outbox, struct picture *picture, int64_t now_utc_s);
/*
 * The picture whose messages get their new state when a hook ends, and whose next due ones take the free place (NULL:
 * none).
 */
void outbox_use_picture(struct outbox *outbox, struct picture *picture);
/* INT64_MAX: none waits but for a place, which is given on when a hook ends. */
int64_t outbox_next_try_utc_s(const struct outbox *outbox, const struct picture *picture);
size_t outbox_under_way(const struct outbox *outbox);

#endif
