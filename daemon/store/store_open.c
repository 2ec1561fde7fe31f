/* SPDX-License-Identifier: MIT */
#include "daemon/store/store_internal.h"

#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>

enum { HEAP_SOFT_LIMIT = 16 * 1024 * 1024 };

static const char write_pragmas[] =
    "PRAGMA journal_mode = WAL; PRAGMA synchronous = FULL; PRAGMA wal_autocheckpoint = 256; "
    "PRAGMA journal_size_limit = 1048576; PRAGMA foreign_keys = ON; "
    "PRAGMA trusted_schema = OFF; PRAGMA cell_size_check = ON;";
static const char read_pragmas[] =
    "PRAGMA query_only = ON; PRAGMA trusted_schema = OFF; PRAGMA cell_size_check = ON;";

static enum fw_status open_database(struct store *store, const char *name, int flags, struct fw_error *error)
{
    if (sqlite3_open_v2(name, &store->db, flags | SQLITE_OPEN_NOMUTEX | SQLITE_OPEN_EXRESCODE, NULL) != SQLITE_OK) {
        if (store->db == NULL)
            return fw_error_set(error, FW_NO_MEMORY, "%s: out of memory", store->file);
        return store_fault(store, "open", error);
    }
    sqlite3_busy_timeout(store->db, 5000);
    sqlite3_db_config(store->db, SQLITE_DBCONFIG_DEFENSIVE, 1, (int *)NULL);
    /* nothing is written back to a file until it is known to be a whole store of this version */
    sqlite3_db_config(store->db, SQLITE_DBCONFIG_NO_CKPT_ON_CLOSE, 1, (int *)NULL);
    return FW_OK;
}

/* The first read. The header seen by hand may be older than what the write-ahead log holds. */
static enum fw_status read_version(struct store *store, int *version_out, struct fw_error *error)
{
    sqlite3_stmt *query = NULL;
    enum fw_status status = FW_OK;
    if (sqlite3_prepare_v2(store->db, "PRAGMA user_version", -1, &query, NULL) != SQLITE_OK ||
        sqlite3_step(query) != SQLITE_ROW)
        status = store_fault(store, "read the version", error);
    else
        *version_out = sqlite3_column_int(query, 0);
    sqlite3_finalize(query);
    return status;
}

static enum fw_status check_version(struct store *store, struct fw_error *error)
{
    int version = 0;
    enum fw_status status = read_version(store, &version, error);
    if (status == FW_OK && version >= STORE_OLDEST_VERSION && version < STORE_VERSION)
        return fw_error_set(
            error, FW_FOREIGN,
            "%s: is a store of version %d, this program works on version %d; the daemon brings it on when "
            "it starts",
            store->file, version, STORE_VERSION);
    if (status == FW_OK && version != STORE_VERSION)
        return store_file_refuse_version(store->file, version, error);
    return status;
}

/* Sound pages first: nothing is written to a damaged store. */
static enum fw_status check_and_bring_on(struct store *store, struct fw_error *error)
{
    int version = 0;
    enum fw_status status = read_version(store, &version, error);
    if (status == FW_OK && (version < STORE_OLDEST_VERSION || version > STORE_VERSION))
        return store_file_refuse_version(store->file, version, error);
    if (status == FW_OK)
        status = store_quick_check(store->db, store->file, error);
    if (status == FW_OK && version < STORE_VERSION)
        status = store_upgrade(store, version, error);
    return status;
}

static enum fw_status run_pragmas(struct store *store, const char *pragmas, struct fw_error *error)
{
    if (sqlite3_exec(store->db, pragmas, NULL, NULL, NULL) != SQLITE_OK)
        return store_fault(store, "set up the connection", error);
    return FW_OK;
}

/* By these the removal or replacement of a file is seen later. The log exists since the first read. */
static enum fw_status remember_files(struct store *store, struct fw_error *error)
{
    char log[STORE_PATH_SIZE];
    struct stat main_file;
    struct stat log_file;
    snprintf(log, sizeof log, "%s-wal", store->file);
    if (stat(store->file, &main_file) != 0 || stat(log, &log_file) != 0)
        return fw_error_set(error, FW_IO, "%s: the store file or its log went away while it was opened", store->file);
    store->device = main_file.st_dev;
    store->inode = main_file.st_ino;
    store->log_inode = log_file.st_ino;
    return FW_OK;
}

static enum fw_status read_newest_link(struct store *store, struct fw_error *error)
{
    struct store_row row;
    bool has_row = false;
    enum fw_status status = store_prepare(store, STORE_NEWEST_LEDGER, &row, error);
    if (status == FW_OK)
        status = store_next(&row, &has_row, "read the newest ledger entry", error);
    store->newest_link[0] = '\0';
    if (status == FW_OK && has_row) {
        (void)store_take_integer(&row, 0);
        store_take_into(&row, store->newest_link, sizeof store->newest_link);
        store_done(&row);
    }
    return status;
}

static enum fw_status connect_writer(struct store *store, struct fw_error *error)
{
    sqlite3_soft_heap_limit64(HEAP_SOFT_LIMIT);
    enum fw_status status = open_database(store, store->file, SQLITE_OPEN_READWRITE, error);
    if (status == FW_OK)
        status = check_and_bring_on(store, error);
    if (status == FW_OK)
        status = run_pragmas(store, write_pragmas, error);
    if (status == FW_OK)
        status = read_newest_link(store, error);
    if (status == FW_OK)
        status = remember_files(store, error);
    if (status == FW_OK)
        sqlite3_db_config(store->db, SQLITE_DBCONFIG_NO_CKPT_ON_CLOSE, 0, (int *)NULL);
    return status;
}

/* "file:/path?immutable=1", with what is special in it escaped. */
static void immutable_name(const char *file, char *name, size_t size)
{
    static const char hex[] = "0123456789ABCDEF";
    size_t used = (size_t)snprintf(name, size, "file:");
    for (const char *next = file; *next != '\0' && used + 16 < size; next++) {
        bool is_special = *next == '%' || *next == '?' || *next == '#';
        if (is_special) {
            name[used++] = '%';
            name[used++] = hex[(unsigned char)*next >> 4];
            name[used++] = hex[(unsigned char)*next & 15];
        } else
            name[used++] = *next;
    }
    snprintf(name + used, size - used, "?immutable=1");
}

/*
 * A reader needs the log's shared memory, which it may not be allowed to make. When nobody writes and the log is
 * empty, the file alone is the whole store.
 */
static enum fw_status connect_reader(struct store *store, struct fw_error *error)
{
    char name[3 * STORE_PATH_SIZE + 32];
    enum fw_status status = open_database(store, store->file, SQLITE_OPEN_READONLY, error);
    if (status == FW_OK)
        status = check_version(store, error);
    if (status == FW_IO && !store_is_held(store->file, NULL) && !store_file_has_log(store->file)) {
        sqlite3_close(store->db);
        store->db = NULL;
        immutable_name(store->file, name, sizeof name);
        status = open_database(store, name, SQLITE_OPEN_READONLY | SQLITE_OPEN_URI, error);
        if (status == FW_OK)
            status = check_version(store, error);
    }
    if (status == FW_OK)
        status = run_pragmas(store, read_pragmas, error);
    return status;
}

enum fw_status store_connect(struct store *store, struct fw_error *error)
{
    enum fw_status status =
        store->access == STORE_WRITE ? connect_writer(store, error) : connect_reader(store, error);
    if (status != FW_OK)
        store_disconnect(store);
    return status;
}

void store_disconnect(struct store *store)
{
    for (size_t which = 0; which < STORE_STATEMENT_COUNT; which++) {
        sqlite3_finalize(store->statements[which]);
        store->statements[which] = NULL;
    }
    sqlite3_close(store->db);
    store->db = NULL;
}

/*
 * A first page that cannot be read, in a place where a store of ours has been, is damage; elsewhere it is another
 * program's file.
 */
static enum fw_status judge_strange(const char *file, struct fw_error *error)
{
    struct fw_error found;
    if (store_lock_has_mark(file) && store_file_check(file, &found) == FW_DAMAGED)
        return fw_error_set(error, FW_DAMAGED, "%s", found.text);
    return store_file_refuse_strange(file, error);
}

static enum fw_status judge_missing(const char *file, enum store_access access, struct fw_error *error)
{
    if (store_file_has_log(file))
        return fw_error_set(error, FW_DAMAGED, "%s: the store is missing but its write-ahead log is there", file);
    if (access == STORE_READ)
        return fw_error_set(error, FW_UNAVAILABLE, "%s: there is no store", file);
    return FW_OK;
}

/* What stands at the path now; FW_OK: a store that may be opened, or none yet. */
static enum fw_status judge_file(const char *file, enum store_access access, bool *is_missing_out,
                                 struct fw_error *error)
{
    enum store_file_kind kind = STORE_FILE_MISSING;
    int version = 0;
    enum fw_status status = store_file_inspect(file, &kind, &version, error);
    if (status != FW_OK)
        return status;
    *is_missing_out = kind == STORE_FILE_MISSING;
    switch (kind) {
    case STORE_FILE_MISSING:
        return judge_missing(file, access, error);
    case STORE_FILE_OTHER:
        return store_file_refuse_version(file, version, error);
    case STORE_FILE_STRANGE:
        return judge_strange(file, error);
    case STORE_FILE_OURS:
        break;
    }
    return FW_OK;
}

static enum fw_status open_writer(struct store *store, struct fw_error *error)
{
    bool is_missing = false;
    enum fw_status status = store_file_make_room(store->file, error);
    if (status == FW_OK)
        status = store_file_check_place(store->file, error);
    if (status == FW_OK) /* before the lock file is made beside a file that is not ours */
        status = judge_file(store->file, STORE_WRITE, &is_missing, error);
    if (status == FW_OK || status == FW_DAMAGED) {
        enum fw_status taken = store_lock_take(store->file, &store->lock, error);
        if (taken != FW_OK)
            return taken;
    }
    if (status == FW_OK) /* again: it may have been made by the one who held the lock until now */
        status = judge_file(store->file, STORE_WRITE, &is_missing, error);
    if (status == FW_OK && is_missing)
        status = store_file_create(store->file, error);
    return status == FW_OK ? store_connect(store, error) : status;
}

enum fw_status store_open(const char *file, enum store_access access, struct store **store_out,
                          struct fw_error *error)
{
    bool is_missing = false;
    struct store *store = calloc(1, sizeof *store);
    if (store == NULL || (store->file = strdup(file)) == NULL) {
        free(store);
        return fw_error_set(error, FW_NO_MEMORY, "%s: out of memory", file);
    }
    store->access = access;
    store->lock = -1;
    enum fw_status status;
    if (access == STORE_WRITE)
        status = open_writer(store, error);
    else {
        status = judge_file(file, access, &is_missing, error);
        if (status == FW_OK)
            status = store_connect(store, error);
    }
    if (status != FW_OK) {
        store_close(store);
        return status;
    }
    *store_out = store;
    return FW_OK;
}

void store_close(struct store *store)
{
    if (store == NULL)
        return;
    /* after a failure the log is left as it is, for the next opening to judge */
    if (store->db != NULL && store->must_reopen)
        sqlite3_db_config(store->db, SQLITE_DBCONFIG_NO_CKPT_ON_CLOSE, 1, (int *)NULL);
    store_disconnect(store);
    store_lock_release(store->lock);
    free(store->file);
    free(store);
}
