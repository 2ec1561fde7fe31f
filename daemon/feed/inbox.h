/* SPDX-License-Identifier: MIT */
/*
 * People's words, handed to the daemon as small files: `say` writes one, the daemon takes it, and its id then shows in the store.
 * One JSON object a file, `<id>.word`, written beside and renamed in. A file that cannot be read moves to bad/ with its reason.
 */
#ifndef FOREWATER_DAEMON_FEED_INBOX_H
#define FOREWATER_DAEMON_FEED_INBOX_H

#include "daemon/feed/news.h"
#include "daemon/settings/settings.h"

/*
 * Reads the words of a command line after `say`:
 *     accept [NUMBER]  |  reading GAUGE VALUE [--unit U]  |  seen POINT dry  |  seen POINT wet [CM]
 *     road POINT STATE [--both-sides]  |  note TEXT...         each with  --by ROLE  [--at TIME]
 * SHUT needs --both-sides: a road is shut when both its sides are. now_utc_s is the time spoken of when --at is not given.
 * The id is left "". FW_USAGE: the error says what was expected, with the known ids.
 */
FW_MUST_CHECK enum fw_status word_parse(const struct settings *settings, int argument_count, char *const arguments[],
                                        int64_t now_utc_s, struct word *word_out, struct fw_error *error);

/* One line in words for people and logs: "road tallowick-ford CREW CALLED (roads foreman, 22:05)". */
void word_line(const struct settings *settings, const struct word *word, char line[FACT_WORD_LINE_SIZE]);

struct inbox;
FW_MUST_CHECK enum fw_status inbox_open(const struct settings *settings, struct inbox **inbox_out, struct fw_error *error);
void inbox_close(struct inbox *inbox);
int inbox_watch_fd(const struct inbox *inbox);
/* Takes every word file; a word without a time of its own is stamped received_utc_s. Same rules for receipts as the folder feed. */
FW_MUST_CHECK enum fw_status inbox_scan(struct inbox *inbox, int64_t received_utc_s, struct news *news,
                                        struct fw_error *error);
FW_MUST_CHECK enum fw_status inbox_settle(struct inbox *inbox, const struct news *news, bool was_stored,
                                          struct fw_error *error);

/* The other side, for `say`: gives the word an id (when it has none) and writes its file. has_time false: the daemon stamps it. */
FW_MUST_CHECK enum fw_status inbox_hand_in(const struct settings *settings, struct word *word, bool has_time,
                                           struct fw_error *error);

#endif
