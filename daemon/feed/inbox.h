/* SPDX-License-Identifier: MIT */
/*
 * People's words, handed to the daemon as small files: `say` writes one, the daemon takes it, and its id then shows
 * in the store. One JSON object a file, `<id>.word`, written beside and renamed in. A file that cannot be read moves
 * to bad/ with its reason.
 */
#ifndef FOREWATER_DAEMON_FEED_INBOX_H
#define FOREWATER_DAEMON_FEED_INBOX_H

#include "daemon/feed/news.h"
#include "daemon/feed/word.h"
#include "daemon/settings/settings.h"

struct inbox;
FW_MUST_CHECK enum fw_status inbox_open(const struct settings *settings, struct inbox **inbox_out,
                                        struct fw_error *error);
void inbox_close(struct inbox *inbox);
int inbox_watch_fd(const struct inbox *inbox);
/* Takes every word file; a word without a time of its own is stamped received_utc_s. Same rules for receipts as the
 * folder feed. */
FW_MUST_CHECK enum fw_status inbox_scan(struct inbox *inbox, int64_t received_utc_s, struct news *news,
                                        struct fw_error *error);
FW_MUST_CHECK enum fw_status inbox_settle(struct inbox *inbox, const struct news *news, bool was_stored,
                                          struct fw_error *error);

/* The other side, for `say`: gives the word an id (when it has none) and writes its file. has_time false: the daemon
 * stamps it. */
FW_MUST_CHECK enum fw_status inbox_hand_in(const struct settings *settings, struct word *word, bool has_time,
                                           struct fw_error *error);

#endif
