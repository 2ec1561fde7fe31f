/* SPDX-License-Identifier: MIT */
/*
 * A folder that others put files into: what the folder feed and the inbox have in common.
 *
 * A file is handed out once, whole, when it was renamed in (inotify saw it), when its name ends in ".ready", or when
 * it has been unchanged for the settling time; it stays where it is until its receipt is settled, and then moves to
 * done/ or bad/. Names that start with '.' or end in ".tmp" or ".part" are somebody's work in progress and are passed
 * over, and so are folders. Only regular files are opened, without following links and without blocking. The work of
 * one scan is bounded (500 files, 250 ms), and so is what is remembered, however many files lie there: the listing is
 * read on from scan to scan.
 */
#ifndef FOREWATER_DAEMON_FEED_DROP_FOLDER_H
#define FOREWATER_DAEMON_FEED_DROP_FOLDER_H

#include <limits.h>
#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>
#include <sys/stat.h>

#include "daemon/error.h"
#include "daemon/feed/news.h"

enum { DROP_FILES_A_SCAN = 500, DROP_SCAN_MS = 250, DROP_REMEMBERED = 8192 };

struct drop_rules {
    const char *suffix;  /* only names that end so; NULL: any */
    const char *apart;   /* a name that is not dropped (a logger's append file); NULL: none */
    int64_t settle_ms;   /* unchanged this long before it is taken; 0: at once */
    size_t length_limit; /* bytes a file */
    bool keeps_done;     /* a settled file moves to done/; else it is removed */
};

struct drop_file {
    char name[NAME_MAX + 1];
    char *bytes; /* heap, the caller frees it; closed by a zero; NULL when refused */
    size_t length;
    bool goes_to_bad;  /* when refused: move it; else it stays where it is, and is not handed out again until it
                          changes */
    char refusal[256]; /* why, or "" */
};

struct drop_folder;

/* Creates the folder (and its parents), done/ where kept, and bad/. `rules` is copied, its texts must outlive the
 * folder. FW_IO names the path. */
FW_MUST_CHECK enum fw_status drop_folder_open(const char *path, const struct drop_rules *rules,
                                              struct drop_folder **folder_out, struct fw_error *error);
void drop_folder_close(struct drop_folder *folder);
int drop_folder_watch_fd(const struct drop_folder *folder); /* -1: no inotify here */
int drop_folder_fd(const struct drop_folder *folder);

/* Begins a scan. FW_IO: the folder is gone and cannot be made again, or cannot be read. */
FW_MUST_CHECK enum fw_status drop_folder_begin(struct drop_folder *folder, int64_t machine_now_ms,
                                               struct fw_error *error);
/* FW_NOTHING_NEW: the scan is over. */
FW_MUST_CHECK enum fw_status drop_folder_next(struct drop_folder *folder, struct drop_file *file_out,
                                              struct fw_error *error);
/* After the scan: machine milliseconds until a look may find more; 0: there is more now; -1: nothing is settling. */
int64_t drop_folder_next_look_ms(const struct drop_folder *folder);
/* As many files as can be remembered lie there and cannot be taken: the listing is read no further. */
bool drop_folder_is_full(const struct drop_folder *folder);
/* A file that was handed out but could not be kept (no memory): the next scan hands it out again. */
void drop_folder_put_back(struct drop_folder *folder, const char *name);

/* Other bytes for a file that was handed out, written whole or not at all; it is not handed out again for that. */
FW_MUST_CHECK enum fw_status drop_folder_rewrite(struct drop_folder *folder, const char *name, const char *bytes,
                                                 size_t length, struct fw_error *error);

/* The receipt by which a file handed out goes to done/ (or away), or with is_bad to bad/; with its reason or NULL. */
FW_MUST_CHECK enum fw_status drop_folder_add_receipt(const struct drop_folder *folder, const char *name, bool is_bad,
                                                     const char *reason, void *owner, struct news *news);
/*
 * Settles one receipt. A name that is taken in done/ or bad/ gets a number. If another file has come under the name
 * meanwhile, that one stays and will be handed out. was_stored false: the file stays and is not handed out again by
 * this process.
 */
FW_MUST_CHECK enum fw_status drop_folder_settle(struct drop_folder *folder, const struct news_receipt *receipt,
                                                bool was_stored, struct fw_error *error);

#endif
