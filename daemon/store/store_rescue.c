/* SPDX-License-Identifier: MIT */
/* After a failure: is the store whole, and if it is not, out of the way with it. Nothing is ever deleted. */
#include "daemon/store/store_internal.h"

#include <errno.h>
#include <stdio.h>
#include <string.h>
#include <sys/stat.h>
#include <time.h>
#include <unistd.h>

enum { NAMES_TRIED = 99 };

/* "<file>.damaged-20310214T221500Z", with "-2" and so on when a name is taken. */
static enum fw_status choose_name(const char *file, int64_t now_utc_s, char name[STORE_PATH_SIZE],
                                  struct fw_error *error)
{
    static const char *const suffixes[] = {"", "-wal", "-shm"};
    char stamp[32] = "";
    time_t now = (time_t)now_utc_s;
    struct tm parts;
    if (gmtime_r(&now, &parts) != NULL)
        strftime(stamp, sizeof stamp, "%Y%m%dT%H%M%SZ", &parts);
    for (int number = 1; number <= NAMES_TRIED; number++) {
        bool is_free = true;
        snprintf(name, STORE_PATH_SIZE, number == 1 ? "%s.damaged-%s" : "%s.damaged-%s-%d", file, stamp, number);
        for (size_t index = 0; index < 3 && is_free; index++) {
            char path[STORE_PATH_SIZE + 8];
            struct stat found;
            snprintf(path, sizeof path, "%s%s", name, suffixes[index]);
            is_free = lstat(path, &found) != 0 && errno == ENOENT;
        }
        if (is_free)
            return FW_OK;
    }
    return fw_error_set(error, FW_IO, "%s: no free name to move the damaged store to", file);
}

static enum fw_status move_one(const char *file, const char *name, const char *suffix, struct fw_error *error)
{
    char from[STORE_PATH_SIZE + 8];
    char to[STORE_PATH_SIZE + 8];
    snprintf(from, sizeof from, "%s%s", file, suffix);
    snprintf(to, sizeof to, "%s%s", name, suffix);
    if (rename(from, to) != 0 && errno != ENOENT)
        return fw_error_set(error, FW_IO, "%s: cannot move it to %s: %s", from, to, strerror(errno));
    return FW_OK;
}

/*
 * The file first: were the run cut off in between, a log without a file is seen as damage, but a file without its log
 * would pass for an older state.
 */
static enum fw_status move_aside(const char *file, int64_t now_utc_s, bool has_file, char moved_to[STORE_PATH_SIZE],
                                 struct fw_error *error)
{
    char name[STORE_PATH_SIZE];
    enum fw_status status = choose_name(file, now_utc_s, name, error);
    if (status == FW_OK && has_file)
        status = move_one(file, name, "", error);
    if (status == FW_OK)
        status = move_one(file, name, "-wal", error);
    if (status == FW_OK)
        status = move_one(file, name, "-shm", error);
    if (status == FW_OK)
        status = store_file_sync_directory(file, error);
    if (status == FW_OK)
        memcpy(moved_to, name, STORE_PATH_SIZE);
    return status;
}

/* The lock is held and no connection is open. */
static enum fw_status rescue(const char *file, int64_t now_utc_s, bool has_mark, char moved_to[STORE_PATH_SIZE],
                             struct fw_error *error)
{
    enum store_file_kind kind = STORE_FILE_MISSING;
    int version = 0;
    struct fw_error found = {0};
    enum fw_status status = store_file_inspect(file, &kind, &version, error);
    if (status != FW_OK)
        return status;
    if (kind == STORE_FILE_MISSING)
        return store_file_has_log(file) ? move_aside(file, now_utc_s, false, moved_to, error) : FW_OK;
    if (kind == STORE_FILE_OTHER)
        return store_file_refuse_version(file, version, error);
    status = kind == STORE_FILE_STRANGE && !has_mark ? FW_OK : store_file_check(file, &found);
    if (status == FW_DAMAGED)
        return move_aside(file, now_utc_s, true, moved_to, error);
    if (status != FW_OK)
        return fw_error_set(error, status, "%s", found.text);
    return kind == STORE_FILE_STRANGE ? store_file_refuse_strange(file, error) : FW_OK;
}

enum fw_status store_rescue(const char *file, int64_t now_utc_s, char moved_to[STORE_PATH_SIZE],
                            struct fw_error *error)
{
    int lock = -1;
    bool has_mark = store_lock_has_mark(file); /* before taking the lock writes it */
    moved_to[0] = '\0';
    enum fw_status status = store_file_check_place(file, error);
    if (status == FW_OK)
        status = store_lock_take(file, &lock, error);
    if (status == FW_OK)
        status = rescue(file, now_utc_s, has_mark, moved_to, error);
    store_lock_release(lock);
    return status;
}

/*
 * The log of a store that was removed or replaced belongs to nobody now, and must not be taken for that of the
 * next one.
 */
static enum fw_status move_orphaned_log(struct store *store, int64_t now_utc_s, char moved_to[STORE_PATH_SIZE],
                                        struct fw_error *error)
{
    char path[STORE_PATH_SIZE];
    struct stat main_file;
    struct stat log_file;
    snprintf(path, sizeof path, "%s-wal", store->file);
    bool is_replaced =
        stat(store->file, &main_file) == 0 && (main_file.st_dev != store->device || main_file.st_ino != store->inode);
    bool is_our_log =
        stat(path, &log_file) == 0 && log_file.st_dev == store->device && log_file.st_ino == store->log_inode;
    return is_replaced && is_our_log ? move_aside(store->file, now_utc_s, false, moved_to, error) : FW_OK;
}

/* The directory may have gone with everything in it, the lock file too. */
static enum fw_status hold_lock_again(struct store *store, struct fw_error *error)
{
    if (store->lock >= 0 && store_lock_stands(store->file, store->lock))
        return FW_OK;
    store_lock_release(store->lock);
    store->lock = -1;
    enum fw_status status = store_file_make_room(store->file, error);
    return status == FW_OK ? store_lock_take(store->file, &store->lock, error) : status;
}

static enum fw_status connect_again(struct store *store, struct fw_error *error)
{
    enum store_file_kind kind = STORE_FILE_MISSING;
    int version = 0;
    enum fw_status status = store_file_inspect(store->file, &kind, &version, error);
    if (status == FW_OK && kind == STORE_FILE_MISSING)
        status = store_file_create(store->file, error);
    return status == FW_OK ? store_connect(store, error) : status;
}

enum fw_status store_reopen(struct store *store, int64_t now_utc_s, char moved_to[STORE_PATH_SIZE],
                            struct fw_error *error)
{
    bool was_open = store->db != NULL;
    moved_to[0] = '\0';
    if (store->access != STORE_WRITE)
        return fw_error_set(error, FW_IO, "%s: is open for reading only", store->file);
    if (was_open) /* the log stays as it is, for the check to judge */
        sqlite3_db_config(store->db, SQLITE_DBCONFIG_NO_CKPT_ON_CLOSE, 1, (int *)NULL);
    store_disconnect(store);
    enum fw_status status = hold_lock_again(store, error);
    if (status == FW_OK)
        status = store_file_check_place(store->file, error);
    if (status == FW_OK)
        status = move_orphaned_log(store, now_utc_s, moved_to, error);
    if (status == FW_OK)
        status = rescue(store->file, now_utc_s, true, moved_to, error);
    if (status == FW_OK)
        status = connect_again(store, error);
    store->must_reopen = status != FW_OK;
    return status;
}
