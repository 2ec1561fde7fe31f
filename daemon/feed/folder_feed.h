/* SPDX-License-Identifier: MIT */
/*
 * CSV files dropped into a folder, and one file that a logger appends to.
 *
 * A dropped file is taken when it was renamed in, or has been unchanged for 2 s of machine time. Its rows enter the
 * news; after the commit it moves to done/ or, where nothing could be read of it, to bad/ with a .reason file;
 * reading it twice is harmless. Good lines are kept whatever their neighbours. Only regular files are opened, without
 * following links and without blocking. Bounds: 8 MiB and 200,000 lines a file, 4 KiB a line, 500 files a scan.
 */
#ifndef FOREWATER_DAEMON_FEED_FOLDER_FEED_H
#define FOREWATER_DAEMON_FEED_FOLDER_FEED_H

#include "daemon/feed/news.h"
#include "daemon/settings/settings.h"

struct folder_feed;

/* Creates the folder, done/ and bad/ where missing. FW_IO names the path. `settings` must outlive the feed. */
FW_MUST_CHECK enum fw_status folder_feed_open(const struct settings *settings, size_t gauge, size_t feed,
                                              struct folder_feed **folder_out, struct fw_error *error);
void folder_feed_close(struct folder_feed *folder);

/* A descriptor that turns readable when something was renamed in or written (inotify); -1 where there is none (then
 * rescans alone find it). */
int folder_feed_watch_fd(const struct folder_feed *folder);

/*
 * Takes every file that is ready. received_utc_s stamps the readings. *next_look_ms_out: machine milliseconds after
 * which a file now settling may be ready; -1: none. A file taken but not yet settled is not taken again. FW_IO: the
 * folder itself cannot be read; faults of single files are notes.
 */
FW_MUST_CHECK enum fw_status folder_feed_scan(struct folder_feed *folder, int64_t machine_now_ms,
                                              int64_t received_utc_s, struct news *news, int64_t *next_look_ms_out,
                                              struct fw_error *error);

/* Settles the receipts of this feed (owner == folder) after the news was committed (or kept in memory, when the store
 * failed): moves files, writes reasons, remembers positions. was_stored false: files stay where they are and will be
 * read again after a restart, not before. */
FW_MUST_CHECK enum fw_status folder_feed_settle(struct folder_feed *folder, const struct news *news, bool was_stored,
                                                struct fw_error *error);

/*
 * The reader by itself: CSV text to readings; for replay, load and tests. Column names from `feed`. Lines that cannot
 * be read are counted in *bad_line_count_out and noted with their number, the value and what was expected (the first
 * 20). FW_BAD_INPUT: no line could be read: no header, missing column, binary, empty.
 */
FW_MUST_CHECK enum fw_status folder_feed_read_csv(const struct settings *settings, size_t gauge, size_t feed,
                                                  const char *origin, const char *bytes, size_t length,
                                                  int64_t received_utc_s, struct news *news,
                                                  size_t *bad_line_count_out, struct fw_error *error);

#endif
