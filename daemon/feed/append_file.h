/* SPDX-License-Identifier: MIT */
/*
 * One CSV file that a logger appends to: only what is new is read, whole lines only.
 *
 * The place reached is kept beside the file as ".NAME.position", and written only once what was read is stored. A
 * file that is another one (its number changed), is shorter than the place reached, or does not hold what was read
 * last before that place, is read from its start: reading a line twice is harmless, missing one is not.
 */
#ifndef FOREWATER_DAEMON_FEED_APPEND_FILE_H
#define FOREWATER_DAEMON_FEED_APPEND_FILE_H

#include "daemon/error.h"
#include "daemon/feed/news.h"
#include "daemon/settings/settings.h"

struct append_file;

/* FW_NO_MEMORY. `origin` names the file in notes and is copied; the settings must outlive it. */
FW_MUST_CHECK enum fw_status append_file_create(const struct settings *settings, size_t gauge, size_t feed,
                                                const char *origin, struct append_file **file_out,
                                                struct fw_error *error);
void append_file_destroy(struct append_file *file);

/*
 * Takes the whole lines that are new, 256 KiB at most; *has_more_out: there is more. `owner` is who settles the
 * receipt. No such file is no fault. What cannot be read is noted once. FW_NO_MEMORY.
 */
FW_MUST_CHECK enum fw_status append_file_scan(struct append_file *file, int folder_fd, int64_t received_utc_s,
                                              void *owner, struct news *news, bool *has_more_out,
                                              struct fw_error *error);

/*
 * Settles the last of this file's receipts in the news (to == NULL). Not stored: the place is not written any more
 * until a restart, so that all that was read since is read again then. FW_IO.
 */
FW_MUST_CHECK enum fw_status append_file_settle(struct append_file *file, int folder_fd,
                                                const struct news_receipt *receipt, bool was_stored,
                                                struct fw_error *error);

#endif
