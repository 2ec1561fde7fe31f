/* SPDX-License-Identifier: MIT */
/* Files that others write, or will read: opened without being led astray, written whole or not at all. */
#ifndef FOREWATER_DAEMON_FEED_SAFE_FILE_H
#define FOREWATER_DAEMON_FEED_SAFE_FILE_H

#include <stddef.h>
#include <sys/stat.h>

#include "daemon/error.h"

/*
 * Opens a regular file in folder_fd for reading, without following a link and without blocking. FW_UNAVAILABLE: no
 * such file; FW_BAD_INPUT: a link, pipe, device or folder; FW_IO: anything else. The error says why, without the
 * name.
 */
FW_MUST_CHECK enum fw_status safe_file_open(int folder_fd, const char *name, int *fd_out, struct stat *about_out,
                                            struct fw_error *error);
/* Writes a whole file: beside it (".NAME.tmp"), to the disk, renamed over, and the folder to the disk. */
FW_MUST_CHECK enum fw_status safe_file_write(int folder_fd, const char *name, const char *bytes, size_t length,
                                             struct fw_error *error);

/* mkdir -p. FW_IO. */
FW_MUST_CHECK enum fw_status safe_file_make_path(const char *path, struct fw_error *error);

/* "a pipe", for messages */
const char *safe_file_kind(mode_t mode);

#endif
