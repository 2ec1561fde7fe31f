/* SPDX-License-Identifier: MIT */
#include "daemon/feed/safe_file.h"

#include <errno.h>
#include <fcntl.h>
#include <limits.h>
#include <stdbool.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

enum fw_status safe_file_make_path(const char *path, struct fw_error *error)
{
    char *part = strdup(path);
    if (part == NULL)
        return fw_error_set(error, FW_NO_MEMORY, "%s: out of memory", path);
    enum fw_status status = FW_OK;
    for (char *slash = strchr(part + 1, '/'); slash != NULL; slash = strchr(slash + 1, '/')) {
        *slash = '\0';
        mkdir(part, 0777); /* if it fails, the last one fails too, and that one is reported */
        *slash = '/';
    }
    struct stat about;
    if (mkdir(part, 0777) != 0 && errno != EEXIST)
        status = fw_error_set(error, FW_IO, "%s: cannot make the folder: %s", path, strerror(errno));
    else if (stat(part, &about) != 0 || !S_ISDIR(about.st_mode))
        status = fw_error_set(error, FW_IO, "%s: is not a folder", path);
    free(part);
    return status;
}

const char *safe_file_kind(mode_t mode)
{
    return S_ISLNK(mode)    ? "a symbolic link"
           : S_ISFIFO(mode) ? "a pipe"
           : S_ISSOCK(mode) ? "a socket"
           : S_ISDIR(mode)  ? "a folder"
                            : "a device";
}

enum fw_status safe_file_open(int folder_fd, const char *name, int *fd_out, struct stat *about_out,
                              struct fw_error *error)
{
    struct stat about;
    if (fstatat(folder_fd, name, &about, AT_SYMLINK_NOFOLLOW) != 0)
        return fw_error_set(error, errno == ENOENT ? FW_UNAVAILABLE : FW_IO, "%s", strerror(errno));
    if (!S_ISREG(about.st_mode))
        return fw_error_set(error, FW_BAD_INPUT, "is %s; expected a regular file", safe_file_kind(about.st_mode));
    /* it may have been exchanged since: the flags and the second look hold whatever it is now */
    int fd = openat(folder_fd, name, O_RDONLY | O_NOFOLLOW | O_NONBLOCK | O_CLOEXEC | O_NOCTTY);
    if (fd < 0)
        return fw_error_set(error, errno == ENOENT ? FW_UNAVAILABLE : FW_IO, "cannot be opened: %s", strerror(errno));
    enum fw_status status = FW_OK;
    if (fstat(fd, &about) != 0)
        status = fw_error_set(error, FW_IO, "%s", strerror(errno));
    else if (!S_ISREG(about.st_mode))
        status = fw_error_set(error, FW_BAD_INPUT, "is %s; expected a regular file", safe_file_kind(about.st_mode));
    if (status != FW_OK) {
        close(fd);
        return status;
    }
    *fd_out = fd;
    *about_out = about;
    return FW_OK;
}

static bool write_whole(int fd, const char *bytes, size_t length)
{
    while (length > 0) {
        ssize_t count = write(fd, bytes, length);
        if (count < 0 && errno == EINTR)
            continue;
        if (count <= 0)
            return false;
        bytes += count;
        length -= (size_t)count;
    }
    return true;
}

enum fw_status safe_file_write(int folder_fd, const char *name, const char *bytes, size_t length,
                               struct fw_error *error)
{
    char beside[NAME_MAX + 1];
    snprintf(beside, sizeof beside, ".%.240s.tmp", name);
    int fd = openat(folder_fd, beside, O_WRONLY | O_CREAT | O_TRUNC | O_NOFOLLOW | O_CLOEXEC, 0666);
    if (fd < 0)
        return fw_error_set(error, FW_IO, "%s: cannot be made: %s", beside, strerror(errno));
    enum fw_status status = FW_OK;
    if (!write_whole(fd, bytes, length) || fsync(fd) != 0)
        status = fw_error_set(error, FW_IO, "%s: cannot be written: %s", beside, strerror(errno));
    if (close(fd) != 0 && status == FW_OK)
        status = fw_error_set(error, FW_IO, "%s: cannot be written: %s", beside, strerror(errno));
    if (status == FW_OK && renameat(folder_fd, beside, folder_fd, name) != 0)
        status = fw_error_set(error, FW_IO, "%s: cannot be renamed to %s: %s", beside, name, strerror(errno));
    if (status != FW_OK)
        unlinkat(folder_fd, beside, 0);
    else if (fsync(folder_fd) != 0)
        status = fw_error_set(error, FW_IO, "%s: its folder cannot be synced: %s", name, strerror(errno));
    return status;
}
