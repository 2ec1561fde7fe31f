/* SPDX-License-Identifier: MIT */
#include "daemon/store/store_internal.h"

#include <fcntl.h>
#include <math.h>
#include <stdio.h>
#include <string.h>
#include <sys/stat.h>
#include <unistd.h>

#define READING_COLUMNS "r.entry, r.gauge, r.source, r.observed, r.value, r.unit, r.received, r.\"by\""
#define WORD_COLUMNS "entry, id, kind, subject, value, unit, is_wet, road, text, \"by\", at, received"

static const char *const statement_text[STORE_STATEMENT_COUNT] = {
    [STORE_BEGIN] = "BEGIN IMMEDIATE",
    [STORE_COMMIT] = "COMMIT",
    [STORE_ROLLBACK] = "ROLLBACK",
    [STORE_ADD_LEDGER] = "INSERT INTO ledger VALUES (?, ?, ?, ?, ?, ?)",
    [STORE_ADD_LEDGER_PAYLOAD] = "INSERT INTO ledger_payload VALUES (?, ?)",
    [STORE_ADD_READING] = "INSERT INTO reading VALUES (?, ?, ?, ?, ?, ?, ?, ?)",
    [STORE_ADD_JUDGEMENT] = "INSERT INTO judgement (entry, reading, flag, use, reasons) VALUES (?, ?, ?, ?, ?)",
    [STORE_ADD_WORD] = "INSERT INTO word (" WORD_COLUMNS ") VALUES (?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?)",
    [STORE_ADD_RAW] = "INSERT INTO raw_payload VALUES (NULL, ?, ?, ?, ?, ?, ?)",
    [STORE_PRUNE_RAW_ROWS] = "DELETE FROM raw_payload WHERE number <= "
                             "(SELECT number FROM raw_payload ORDER BY number DESC LIMIT 1 OFFSET ?)",
    [STORE_PRUNE_RAW_BYTES] =
        "DELETE FROM raw_payload WHERE number IN (SELECT number FROM (SELECT number, "
        "sum(length(bytes)) OVER (ORDER BY number DESC) AS total FROM raw_payload) WHERE total > ?)",
    [STORE_ADD_FORECAST] = "INSERT INTO forecast VALUES (?, ?, ?, ?, ?)",
    [STORE_ADD_CURVE] = "INSERT INTO forecast_curve VALUES (?, ?, ?, ?, ?, ?)",
    [STORE_ADD_ADVICE] = "INSERT INTO advice VALUES (?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?)",
    [STORE_ADD_MESSAGE] = "INSERT INTO outbox VALUES (?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?)",
    [STORE_SAVE_DELIVERY] =
        "UPDATE outbox SET state = ?, tries = ?, next_try = ?, settled = ?, note = ? WHERE entry = ? AND id = ?",
    [STORE_ADD_SETTINGS] =
        "INSERT INTO settings VALUES (?1, ?2, ?3, (SELECT coalesce(max(turn), 0) + 1 FROM settings)) "
        "ON CONFLICT (digest) DO UPDATE SET turn = excluded.turn",
    [STORE_SETTINGS_TURN] = "SELECT digest FROM settings ORDER BY turn DESC LIMIT 1",
    [STORE_NEWEST_SETTINGS] = "SELECT text FROM settings ORDER BY turn DESC LIMIT 1",
    [STORE_SAVE_COUNTER] = "INSERT OR REPLACE INTO counter VALUES (?, ?)",
    [STORE_NEWEST_LEDGER] = "SELECT utc, link FROM ledger ORDER BY entry DESC LIMIT 1",
    [STORE_NEWEST_ENTRY] =
        "SELECT max(coalesce((SELECT max(entry) FROM reading), 0), "
        "coalesce((SELECT max(entry) FROM judgement), 0), coalesce((SELECT max(entry) FROM word), 0), "
        "coalesce((SELECT max(entry) FROM outbox), 0), coalesce((SELECT max(entry) FROM ledger), 0))",
    [STORE_NEXT_MESSAGE_NUMBER] = "SELECT max(coalesce((SELECT max(number) FROM outbox), 0) + 1, "
                                  "coalesce((SELECT value FROM counter WHERE name = 'next message number'), 1))",
    [STORE_NEWEST_OBSERVED] = "SELECT max(observed) FROM reading WHERE gauge = ?",
    [STORE_READINGS_OF_GAUGE] =
        "SELECT " READING_COLUMNS ", j.flag, j.use, j.reasons FROM reading r LEFT JOIN judgement j "
        "ON j.entry = (SELECT max(entry) FROM judgement WHERE reading = r.entry) "
        "WHERE r.gauge = ? AND r.observed >= ? ORDER BY r.entry",
    [STORE_READINGS_RECEIVED] =
        "SELECT " READING_COLUMNS " FROM reading r WHERE r.received >= ? AND r.received < ? ORDER BY r.entry",
    [STORE_NEWEST_READING_AT] = "SELECT " READING_COLUMNS " FROM reading r WHERE r.gauge = ? AND r.source = ? "
                                "AND r.observed = ? ORDER BY r.entry DESC LIMIT 1",
    [STORE_HAS_ENTRY] =
        "SELECT 1 WHERE EXISTS (SELECT 1 FROM reading WHERE entry = ?1) OR EXISTS (SELECT 1 FROM "
        "judgement WHERE entry = ?1) OR EXISTS (SELECT 1 FROM word WHERE entry = ?1) OR EXISTS (SELECT "
        "1 FROM outbox WHERE entry = ?1) OR EXISTS (SELECT 1 FROM ledger WHERE entry = ?1)",
    [STORE_NEWEST_JUDGEMENT] =
        "SELECT flag, use, reasons FROM judgement WHERE reading = ? ORDER BY entry DESC LIMIT 1",
    [STORE_NEWEST_ADVICE] = "SELECT level, is_blind, near_sides_only, reasons, act_by, since, onset, step_down_from, "
                            "told_act_by FROM advice WHERE point = ? ORDER BY entry DESC LIMIT 1",
    [STORE_NEWEST_FORECAST] = "SELECT issued FROM forecast ORDER BY entry DESC LIMIT 1",
    [STORE_MESSAGES] = "SELECT entry, id, number, kind, point, channel, made, wakes, level, act_by, deck_earliest, "
                       "deck_likely, deck_latest, short_text, bulletin, state, tries, next_try, settled, note FROM "
                       "outbox WHERE settled IS NULL OR settled >= ? OR made >= ? "
                       "ORDER BY entry",
    [STORE_FIND_MESSAGE] = "SELECT entry FROM outbox WHERE id = ? AND channel = ?",
    [STORE_FACT_WORDS] = "SELECT " WORD_COLUMNS " FROM word WHERE kind IN ('accept', 'seen', 'road') ORDER BY entry",
    [STORE_WORDS_RECEIVED] = "SELECT " WORD_COLUMNS " FROM word WHERE received >= ? AND received < ? ORDER BY entry",
    [STORE_HAS_WORD] = "SELECT 1 FROM word WHERE id = ?",
    [STORE_HAS_FACT] = "SELECT 1 FROM word WHERE kind = ? AND subject = ? AND at = ? AND value IS ? AND is_wet IS ? "
                       "AND road IS ? AND \"by\" = ?",
    [STORE_PAYLOAD_AT] = "SELECT payload, utc, link FROM ledger JOIN ledger_payload USING (entry) "
                         "WHERE kind <> 'reseed' AND entry <= ? ORDER BY entry DESC LIMIT 1",
    [STORE_ENTRY_AT] = "SELECT max(entry) FROM ledger WHERE utc <= ?",
    [STORE_EACH_READING] =
        "SELECT " READING_COLUMNS ", j.flag, j.use, j.reasons FROM reading r LEFT JOIN judgement j "
        "ON j.entry = (SELECT max(entry) FROM judgement WHERE reading = r.entry AND entry <= ?1) "
        "WHERE r.gauge = ?2 AND r.observed >= ?3 AND r.observed < ?4 AND r.entry <= ?1 "
        "AND (?5 OR NOT EXISTS (SELECT 1 FROM reading n WHERE n.gauge = r.gauge AND n.observed = r.observed "
        "AND n.source = r.source AND n.entry > r.entry AND n.entry <= ?1)) "
        "ORDER BY r.observed, r.source, r.entry",
    [STORE_NEXT_GAUGE] = "SELECT min(gauge) FROM reading WHERE gauge > ?",
    [STORE_LEDGER_WALK] = "SELECT entry, utc, kind, payload_digest, link, payload FROM ledger "
                          "LEFT JOIN ledger_payload USING (entry) ORDER BY entry",
};

enum fw_status store_fault(struct store *store, const char *what, struct fw_error *error)
{
    int code = sqlite3_extended_errcode(store->db);
    int family = code & 0xff;
    enum fw_status status = FW_IO;
    if (family == SQLITE_CORRUPT || family == SQLITE_NOTADB)
        status = FW_DAMAGED;
    else if (family == SQLITE_NOMEM)
        status = FW_NO_MEMORY;
    if (family == SQLITE_IOERR || status == FW_DAMAGED)
        store->must_reopen = true;
    return fw_error_set(error, status, "%s: %s: %s (SQLite code %d)", store->file, what, sqlite3_errmsg(store->db),
                        code);
}

enum fw_status store_prepare(struct store *store, enum store_statement which, struct store_row *row_out,
                             struct fw_error *error)
{
    *row_out = (struct store_row){.store = store, .result = SQLITE_MISUSE};
    if (store->db == NULL)
        return fw_error_set(error, FW_IO, "%s: is closed after a failure", store->file);
    sqlite3_stmt **statement = &store->statements[which];
    if (*statement == NULL && sqlite3_prepare_v3(store->db, statement_text[which], -1, SQLITE_PREPARE_PERSISTENT,
                                                 statement, NULL) != SQLITE_OK)
        return store_fault(store, "prepare a statement", error);
    sqlite3_reset(*statement);
    sqlite3_clear_bindings(*statement);
    *row_out = (struct store_row){.store = store, .statement = *statement, .result = SQLITE_OK};
    return FW_OK;
}

static void remember(struct store_row *row, int result)
{
    if (row->result == SQLITE_OK)
        row->result = result;
}

void store_put_bytes(struct store_row *row, const char *bytes, size_t length, bool is_text)
{
    row->next++;
    if (is_text)
        remember(row, sqlite3_bind_text64(row->statement, row->next, bytes, length, SQLITE_TRANSIENT, SQLITE_UTF8));
    else
        remember(row, sqlite3_bind_blob64(row->statement, row->next, bytes, length, SQLITE_TRANSIENT));
}

void store_put_text(struct store_row *row, const char *text)
{
    if (text == NULL)
        row->next++; /* bindings are cleared: no value */
    else
        store_put_bytes(row, text, strlen(text), true);
}

void store_put_integer(struct store_row *row, int64_t value)
{
    remember(row, sqlite3_bind_int64(row->statement, ++row->next, value));
}

void store_put_integer_unless(struct store_row *row, int64_t value, int64_t none)
{
    if (value == none)
        row->next++;
    else
        store_put_integer(row, value);
}

void store_put_real(struct store_row *row, double value)
{
    remember(row, sqlite3_bind_double(row->statement, ++row->next, value)); /* SQLite keeps a NaN as no value */
}

enum fw_status store_next(struct store_row *row, bool *has_row_out, const char *what, struct fw_error *error)
{
    int result = row->result == SQLITE_OK ? sqlite3_step(row->statement) : row->result;
    row->next = 0;
    if (result == SQLITE_ROW) {
        *has_row_out = true;
        return FW_OK;
    }
    enum fw_status status = result == SQLITE_DONE ? FW_OK : store_fault(row->store, what, error);
    *has_row_out = false;
    store_done(row);
    return status;
}

enum fw_status store_run(struct store_row *row, const char *what, struct fw_error *error)
{
    bool has_row = false;
    enum fw_status status = store_next(row, &has_row, what, error);
    store_done(row);
    return status;
}

void store_done(struct store_row *row)
{
    sqlite3_reset(row->statement);
    sqlite3_clear_bindings(row->statement);
}

int64_t store_take_integer(struct store_row *row, int64_t none)
{
    int column = row->next++;
    return sqlite3_column_type(row->statement, column) == SQLITE_NULL ? none
                                                                      : sqlite3_column_int64(row->statement, column);
}

double store_take_real(struct store_row *row)
{
    int column = row->next++;
    return sqlite3_column_type(row->statement, column) == SQLITE_NULL ? (double)NAN
                                                                      : sqlite3_column_double(row->statement, column);
}

const char *store_take_text(struct store_row *row, size_t *length_out)
{
    int column = row->next++;
    const char *text = (const char *)sqlite3_column_text(row->statement, column);
    if (length_out != NULL)
        *length_out = (size_t)sqlite3_column_bytes(row->statement, column);
    return text;
}

void store_take_into(struct store_row *row, char *text_out, size_t size)
{
    size_t length = 0;
    const char *text = store_take_text(row, &length);
    size_t kept = text == NULL ? 0 : length < size ? length : size - 1;
    if (kept > 0)
        memcpy(text_out, text, kept);
    memset(text_out + kept, 0, size - kept);
}

size_t store_take_name(struct store_row *row, const char *const names[], size_t count)
{
    const char *text = store_take_text(row, NULL);
    size_t index = 0;
    while (index < count && (text == NULL || strcmp(names[index], text) != 0))
        index++;
    return index;
}

static enum fw_status run_plain(struct store *store, enum store_statement which, const char *what,
                                struct fw_error *error)
{
    struct store_row row;
    enum fw_status status = store_prepare(store, which, &row, error);
    return status == FW_OK ? store_run(&row, what, error) : status;
}

enum fw_status store_begin(struct store *store, struct fw_error *error)
{
    return run_plain(store, STORE_BEGIN, "begin", error);
}

enum fw_status store_end(struct store *store, enum fw_status status, struct fw_error *error)
{
    if (status == FW_OK)
        status = run_plain(store, STORE_COMMIT, "commit", error);
    if (status != FW_OK && !sqlite3_get_autocommit(store->db)) {
        enum fw_status undone = run_plain(store, STORE_ROLLBACK, "roll back", NULL);
        store->must_reopen |= undone != FW_OK; /* closing the connection rolls back too */
    }
    return status;
}

/* Of the same device and number as when it was opened? */
static bool still_there(const struct store *store, const char *suffix, ino_t inode)
{
    char path[STORE_PATH_SIZE];
    struct stat there;
    snprintf(path, sizeof path, "%s%s", store->file, suffix);
    return stat(path, &there) == 0 && there.st_dev == store->device && there.st_ino == inode;
}

/*
 * Overwritten in place a file is still the same file, and SQLite would go on from its cache without a look at it.
 * Read through SQLite's own descriptor: to open and close another would drop this process's locks on the file.
 */
static bool has_our_header(const struct store *store)
{
    unsigned char header[STORE_HEADER_SIZE];
    sqlite3_file *file = NULL;
    return sqlite3_file_control(store->db, "main", SQLITE_FCNTL_FILE_POINTER, (void *)&file) == SQLITE_OK &&
           file != NULL && file->pMethods != NULL &&
           file->pMethods->xRead(file, header, sizeof header, 0) == SQLITE_OK && store_file_is_our_header(header);
}

/* Empty, or it begins as the file format says (section 4.1). SQLite has no locks on it. */
static bool has_log_header(const struct store *store)
{
    char path[STORE_PATH_SIZE];
    unsigned char magic[4];
    snprintf(path, sizeof path, "%s-wal", store->file);
    int log = open(path, O_RDONLY | O_CLOEXEC | O_NONBLOCK);
    ssize_t length = log >= 0 ? pread(log, magic, sizeof magic, 0) : -1;
    if (log >= 0)
        close(log);
    return length == 0 || (length == (ssize_t)sizeof magic && magic[0] == 0x37 && magic[1] == 0x7f &&
                           magic[2] == 0x06 && (magic[3] & 0xfe) == 0x82);
}

enum fw_status store_check_writable(struct store *store, struct fw_error *error)
{
    if (store->access != STORE_WRITE)
        return fw_error_set(error, FW_IO, "%s: is open for reading only", store->file);
    if (store->db == NULL || store->must_reopen)
        return fw_error_set(error, FW_IO, "%s: not written: it failed before and has not been opened anew",
                            store->file);
    bool is_there = still_there(store, "", store->inode) && still_there(store, "-wal", store->log_inode);
    if (is_there && has_our_header(store) && has_log_header(store))
        return FW_OK;
    store->must_reopen = true;
    if (is_there)
        return fw_error_set(error, FW_DAMAGED,
                            "%s: the store file or its log was overwritten under the running daemon", store->file);
    return fw_error_set(
        error, FW_IO, "%s: the store file or its log was removed or replaced under the running daemon", store->file);
}
