/* SPDX-License-Identifier: MIT */
#include "daemon/store/store_internal.h"

#include <errno.h>
#include <fcntl.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/file.h>
#include <sys/stat.h>
#include <time.h>
#include <unistd.h>

/* Asking whether a lock is held takes it for a moment, so that one refusal proves nothing. */
enum { TRIES = 5, PAUSE_NS = 10000000 };

static const char mark[] = "forewater";

static bool lock_path(const char *file, char path[STORE_PATH_SIZE])
{
    int length = snprintf(path, STORE_PATH_SIZE, "%s.lock", file);
    return length > 0 && length < STORE_PATH_SIZE;
}

/* "1234 forewater"; 0 when nothing of that form is there. */
static long read_pid(int lock, bool *has_mark_out)
{
    char text[64] = "";
    char *rest = text;
    long pid = 0;
    if (pread(lock, text, sizeof text - 1, 0) > 0)
        pid = strtol(text, &rest, 10);
    if (has_mark_out != NULL)
        *has_mark_out = *rest == ' ' && strncmp(rest + 1, mark, sizeof mark - 1) == 0;
    return pid > 0 ? pid : 0;
}

/* Best effort: the lock is the lock, the number in it is for people. */
static void write_pid(int lock, long pid)
{
    char text[64];
    int length = snprintf(text, sizeof text, "%ld %s\n", pid, mark);
    if (pwrite(lock, text, (size_t)length, 0) == length && ftruncate(lock, length) != 0)
        return;
}

bool store_lock_stands(const char *file, int lock)
{
    char path[STORE_PATH_SIZE];
    struct stat held;
    struct stat there;
    return lock_path(file, path) && fstat(lock, &held) == 0 && stat(path, &there) == 0 &&
           held.st_dev == there.st_dev && held.st_ino == there.st_ino;
}

static enum fw_status refuse(const char *path, int lock, struct fw_error *error)
{
    return fw_error_set(error, FW_LOCKED, "%s: another instance (pid %ld) holds the store", path,
                        read_pid(lock, NULL));
}

enum fw_status store_lock_take(const char *file, int *lock_out, struct fw_error *error)
{
    char path[STORE_PATH_SIZE];
    if (!lock_path(file, path))
        return fw_error_set(error, FW_BAD_INPUT, "%s: the path of the store is too long", file);
    for (int attempt = 1;; attempt++) {
        int lock = open(path, O_RDWR | O_CREAT | O_CLOEXEC | O_NOFOLLOW, 0640);
        if (lock < 0)
            return fw_error_set(error, FW_IO, "%s: cannot open the lock file: %s", path, strerror(errno));
        bool is_taken = flock(lock, LOCK_EX | LOCK_NB) == 0;
        bool is_busy = !is_taken && errno == EWOULDBLOCK;
        if (is_taken && store_lock_stands(file, lock)) {
            write_pid(lock, (long)getpid());
            *lock_out = lock;
            return FW_OK;
        }
        enum fw_status status = FW_OK;
        if (!is_taken && !is_busy)
            status = fw_error_set(error, FW_IO, "%s: cannot lock: %s", path, strerror(errno));
        else if (attempt >= TRIES)
            status = refuse(path, lock, error);
        close(lock);
        if (status != FW_OK)
            return status;
        nanosleep(&(struct timespec){.tv_nsec = PAUSE_NS}, NULL);
    }
}

void store_lock_release(int lock)
{
    if (lock < 0)
        return;
    write_pid(lock, 0);
    close(lock);
}

bool store_lock_has_mark(const char *file)
{
    char path[STORE_PATH_SIZE];
    bool has_mark = false;
    int lock = lock_path(file, path) ? open(path, O_RDONLY | O_CLOEXEC | O_NOFOLLOW | O_NONBLOCK) : -1;
    if (lock >= 0) {
        (void)read_pid(lock, &has_mark);
        close(lock);
    }
    return has_mark;
}

bool store_is_held(const char *file, long *pid_out)
{
    char path[STORE_PATH_SIZE];
    bool is_held = false;
    long pid = 0;
    int lock = lock_path(file, path) ? open(path, O_RDONLY | O_CLOEXEC | O_NOFOLLOW | O_NONBLOCK) : -1;
    if (lock >= 0) {
        is_held = flock(lock, LOCK_SH | LOCK_NB) != 0 && errno == EWOULDBLOCK;
        pid = is_held ? read_pid(lock, NULL) : 0;
        close(lock);
    }
    if (pid_out != NULL)
        *pid_out = pid;
    return is_held;
}
