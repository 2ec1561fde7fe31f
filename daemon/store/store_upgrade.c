/* SPDX-License-Identifier: MIT */
#include "daemon/store/store_internal.h"

#include <stdio.h>
#include <unistd.h>

/* What makes a version out of the one before. A step once released is never changed. */
static const char *const steps[STORE_VERSION] = {
    [1] = "ALTER TABLE judgement ADD COLUMN tests TEXT CHECK (length(tests) = 11);"
          "ALTER TABLE word RENAME TO word_1;"
          "CREATE TABLE word ("
          "    entry    INTEGER PRIMARY KEY,"
          "    id       TEXT NOT NULL UNIQUE,"
          "    kind     TEXT NOT NULL CHECK (kind IN ('accept', 'reading', 'seen', 'road', 'note', 'rating')),"
          "    subject  TEXT NOT NULL,"
          "    value    REAL,"
          "    unit     TEXT,"
          "    is_wet   INTEGER CHECK (is_wet IN (0, 1)),"
          "    road     TEXT,"
          "    text     TEXT NOT NULL,"
          "    \"by\"     TEXT NOT NULL,"
          "    at       INTEGER NOT NULL,"
          "    received INTEGER NOT NULL,"
          "    rating   TEXT CHECK (rating IN ('void', 'in force')),"
          "    CHECK ((kind = 'seen') = (is_wet IS NOT NULL)),"
          "    CHECK ((kind = 'road') = (road IS NOT NULL)),"
          "    CHECK ((kind = 'rating') = (rating IS NOT NULL))"
          ") STRICT;"
          "INSERT INTO word SELECT *, NULL FROM word_1;"
          "DROP TABLE word_1;",
};

static enum fw_status run(struct store *store, const char *sql, const char *what, struct fw_error *error)
{
    return sqlite3_exec(store->db, sql, NULL, NULL, NULL) == SQLITE_OK ? FW_OK : store_fault(store, what, error);
}

static enum fw_status file_bytes(struct store *store, int64_t *bytes_out, struct fw_error *error)
{
    sqlite3_stmt *query = NULL;
    enum fw_status status = FW_OK;
    if (sqlite3_prepare_v2(store->db, "SELECT page_count * page_size FROM pragma_page_count, pragma_page_size", -1,
                           &query, NULL) != SQLITE_OK ||
        sqlite3_step(query) != SQLITE_ROW)
        status = store_fault(store, "measure the store", error);
    else
        *bytes_out = sqlite3_column_int64(query, 0);
    sqlite3_finalize(query);
    return status;
}

/* Whole, under its own name only when it is: a copy that was cut off is made anew. */
static enum fw_status keep_copy(struct store *store, int version, struct fw_error *error)
{
    char copy[STORE_PATH_SIZE + 32], part[STORE_PATH_SIZE + 40];
    int64_t bytes = 0;
    snprintf(copy, sizeof copy, "%s.version-%d", store->file, version);
    snprintf(part, sizeof part, "%s.part", copy);
    unlink(part);
    enum fw_status status = file_bytes(store, &bytes, error);
    if (status == FW_OK) /* the copy, and as much again for the log of the steps */
        status = store_file_check_room(store->file, 2 * bytes, error);
    if (status != FW_OK)
        return status;
    char *sql = sqlite3_mprintf("VACUUM INTO %Q", part);
    if (sql == NULL)
        return fw_error_set(error, FW_NO_MEMORY, "%s: out of memory", store->file);
    status = run(store, sql, "copy the store before bringing it on", error);
    sqlite3_free(sql);
    if (status == FW_OK && rename(part, copy) != 0)
        status = fw_error_set(error, FW_IO, "%s: cannot be put in place", copy);
    if (status == FW_OK)
        status = store_file_sync_directory(store->file, error);
    else
        unlink(part);
    return status;
}

static enum fw_status take_step(struct store *store, int version, struct fw_error *error)
{
    char *sql = sqlite3_mprintf("BEGIN IMMEDIATE; %s PRAGMA user_version = %d; COMMIT;", steps[version], version + 1);
    if (sql == NULL)
        return fw_error_set(error, FW_NO_MEMORY, "%s: out of memory", store->file);
    enum fw_status status = run(store, sql, "bring the store on to a newer version", error);
    sqlite3_free(sql);
    if (status != FW_OK && sqlite3_get_autocommit(store->db) == 0)
        sqlite3_exec(store->db, "ROLLBACK", NULL, NULL, NULL);
    return status;
}

enum fw_status store_upgrade(struct store *store, int from_version, struct fw_error *error)
{
    enum fw_status status = run(store, "PRAGMA synchronous = FULL", "set up the connection", error);
    if (status == FW_OK)
        status = keep_copy(store, from_version, error);
    for (int version = from_version; status == FW_OK && version < STORE_VERSION; version++)
        status = take_step(store, version, error);
    if (status == FW_OK)
        store->upgraded_from = from_version;
    return status;
}

int store_upgraded_from(const struct store *store)
{
    return store->upgraded_from;
}
