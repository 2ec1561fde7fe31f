/* SPDX-License-Identifier: MIT */
/* What the files of the store share. Nothing outside daemon/store includes this, save its own tests. */
#ifndef FOREWATER_DAEMON_STORE_INTERNAL_H
#define FOREWATER_DAEMON_STORE_INTERNAL_H

#include <sqlite3.h>
#include <sys/types.h>

#include "daemon/store/store.h"

enum {
    STORE_APPLICATION_ID = 0x46777472, /* "Fwtr", at byte 68 of the file */
    STORE_OLDEST_VERSION = 1,          /* from which a store can be brought on */
    STORE_VERSION = 2,                 /* user_version, at byte 60 */
    STORE_RAW_ROWS_MAX = 200,
    STORE_RAW_BYTES_MAX = 16 * 1024 * 1024
};

extern const char store_schema[]; /* schema.sql */

enum store_statement {
    STORE_BEGIN,
    STORE_COMMIT,
    STORE_ROLLBACK,
    STORE_ADD_LEDGER,
    STORE_ADD_LEDGER_PAYLOAD,
    STORE_ADD_READING,
    STORE_ADD_JUDGEMENT,
    STORE_ADD_WORD,
    STORE_ADD_RAW,
    STORE_PRUNE_RAW_ROWS,
    STORE_PRUNE_RAW_BYTES,
    STORE_ADD_FORECAST,
    STORE_ADD_CURVE,
    STORE_ADD_ADVICE,
    STORE_ADD_MESSAGE,
    STORE_SAVE_DELIVERY,
    STORE_ADD_SETTINGS,
    STORE_SETTINGS_TURN,
    STORE_NEWEST_SETTINGS,
    STORE_SAVE_COUNTER,
    STORE_NEWEST_LEDGER,
    STORE_NEWEST_ENTRY,
    STORE_NEXT_MESSAGE_NUMBER,
    STORE_NEWEST_OBSERVED,
    STORE_READINGS_OF_GAUGE,
    STORE_READINGS_RECEIVED,
    STORE_NEWEST_READING_AT,
    STORE_HAS_ENTRY,
    STORE_NEWEST_JUDGEMENT,
    STORE_NEWEST_ADVICE,
    STORE_NEWEST_FORECAST,
    STORE_MESSAGES,
    STORE_FIND_MESSAGE,
    STORE_FACT_WORDS,
    STORE_WORDS_RECEIVED,
    STORE_HAS_WORD,
    STORE_HAS_FACT,
    STORE_PAYLOAD_AT,
    STORE_ENTRY_AT,
    STORE_EACH_READING,
    STORE_NEXT_GAUGE,
    STORE_LEDGER_WALK,
    STORE_STATEMENT_COUNT
};

struct store {
    char *file;
    enum store_access access;
    sqlite3 *db;       /* NULL: closed by a failed store_reopen */
    int lock;          /* descriptor of the lock file; -1 for readers */
    int upgraded_from; /* the version it had when it was opened for writing; 0: this one */
    bool must_reopen;  /* a write, a sync or a page failed: what is in memory is no longer to be trusted */
    dev_t device;      /* of the file that is open, and of its write-ahead log */
    ino_t inode, log_inode;
    char newest_link[FACT_DIGEST_SIZE];
    sqlite3_stmt *statements[STORE_STATEMENT_COUNT]; /* prepared at first use */
};

/* --- statements (store_sql.c) --- */

/* Values are written and taken one after the other; the first refusal is remembered and told by store_run. */
struct store_row {
    struct store *store;
    sqlite3_stmt *statement;
    int next;
    int result;
};

/* The statement, reset and without values. */
FW_MUST_CHECK enum fw_status store_prepare(struct store *store, enum store_statement which, struct store_row *row_out,
                                           struct fw_error *error);
void store_put_text(struct store_row *row, const char *text); /* NULL: none */
void store_put_bytes(struct store_row *row, const char *bytes, size_t length, bool is_text);
void store_put_integer(struct store_row *row, int64_t value);
void store_put_integer_unless(struct store_row *row, int64_t value, int64_t none); /* none is stored as no value */
void store_put_real(struct store_row *row, double value);                          /* NAN: none */

/* To its end, without rows; the statement is reset. `what` is what was being done, for the error. */
FW_MUST_CHECK enum fw_status store_run(struct store_row *row, const char *what, struct fw_error *error);
/* One step; *has_row_out false at the end. The statement is reset at the end and on a fault. */
FW_MUST_CHECK enum fw_status store_next(struct store_row *row, bool *has_row_out, const char *what,
                                        struct fw_error *error);
void store_done(struct store_row *row); /* leaves a statement before its end; harmless after it */

int64_t store_take_integer(struct store_row *row, int64_t none);
double store_take_real(struct store_row *row); /* none: NAN */
const char *store_take_text(struct store_row *row,
                            size_t *length_out); /* NULL: none; valid until the next step; length_out may be NULL */
void store_take_into(struct store_row *row, char *text_out, size_t size); /* cut at size - 1 */
/* Index of the text among names; count when it is none of them. */
size_t store_take_name(struct store_row *row, const char *const names[], size_t count);

/*
 * What SQLite last said, as a status: FW_DAMAGED, FW_NO_MEMORY or FW_IO. Marks the store when it must be opened
 * anew.
 */
enum fw_status store_fault(struct store *store, const char *what, struct fw_error *error);

FW_MUST_CHECK enum fw_status store_begin(struct store *store, struct fw_error *error);
/* Commits when status is FW_OK, else rolls back; returns what came of it. */
FW_MUST_CHECK enum fw_status store_end(struct store *store, enum fw_status status, struct fw_error *error);

/* May this store be written now: writing access, open, and the files still those that were opened? */
FW_MUST_CHECK enum fw_status store_check_writable(struct store *store, struct fw_error *error);

/* --- rows that commit and seed both write (store_rows.c) --- */

extern const char *const store_use_names[];      /* by enum quality_use */
extern const char *const store_word_names[];     /* by enum word_kind */
extern const char *const store_message_names[];  /* by enum message_kind */
extern const char *const store_delivery_names[]; /* by enum delivery_state */
enum { STORE_USE_COUNT = 3, STORE_WORD_COUNT = 5, STORE_MESSAGE_COUNT = 2, STORE_DELIVERY_COUNT = 4 };

FW_MUST_CHECK enum fw_status store_add_ledger(struct store *store, const struct ledger_entry *entry,
                                              const char *settings_digest, struct fw_error *error);
FW_MUST_CHECK enum fw_status store_add_reading(struct store *store, const struct settings *settings,
                                               const struct reading *reading, struct fw_error *error);
FW_MUST_CHECK enum fw_status store_add_judgement(struct store *store, const struct judgement *judgement,
                                                 struct fw_error *error);
FW_MUST_CHECK enum fw_status store_add_word(struct store *store, const struct word *word, struct fw_error *error);
FW_MUST_CHECK enum fw_status store_add_advice(struct store *store, const char *point_id, int64_t entry,
                                              const struct advice *advice, struct fw_error *error);
FW_MUST_CHECK enum fw_status store_add_message(struct store *store, const struct settings *settings,
                                               const struct message *message, struct fw_error *error);
FW_MUST_CHECK enum fw_status store_add_settings(struct store *store, const struct settings *settings,
                                                int64_t now_utc_s, struct fw_error *error);
bool store_same_advice(const struct advice *left, const struct advice *right);
const char *store_source_text(int32_t source, char text[16]);                   /* "hand", "0", "1", ... */
const char *store_gauge_id(const struct settings *settings, int32_t gauge);     /* NULL: no such index */
const char *store_point_id(const struct settings *settings, int32_t point);     /* likewise */
const char *store_channel_id(const struct settings *settings, int32_t channel); /* likewise */

/* --- rows that load and list both take, and single facts (store_load.c) --- */

/* The columns of READING_COLUMNS. *is_known_out false: a gauge, source or unit that the settings do not know. */
void store_take_reading(struct store_row *row, const struct settings *settings, struct reading *reading_out,
                        bool *is_known_out);
/* The columns of WORD_COLUMNS. FW_DAMAGED: a kind or road state that is none. */
FW_MUST_CHECK enum fw_status store_take_word(struct store_row *row, struct word *word_out, struct fw_error *error);

FW_MUST_CHECK enum fw_status store_newest_entry(struct store *store, int64_t *entry_out, struct fw_error *error);
FW_MUST_CHECK enum fw_status store_next_message_number(struct store *store, int64_t *number_out,
                                                       struct fw_error *error);
/* advice_out is left alone when there is none. */
FW_MUST_CHECK enum fw_status store_newest_advice(struct store *store, const char *point_id, struct advice *advice_out,
                                                 struct fw_error *error);
FW_MUST_CHECK enum fw_status store_newest_verdict(struct store *store, int64_t reading, bool *has_out,
                                                  struct quality_verdict *verdict_out, struct fw_error *error);

/* --- files (store_file.c) --- */

enum store_file_kind {
    STORE_FILE_MISSING, /* or empty */
    STORE_FILE_OURS,    /* of this version, or one that can be brought to it */
    STORE_FILE_OTHER,   /* ours, of a version this program does not know */
    STORE_FILE_STRANGE  /* another program's, or its first page is damaged */
};
/* Reads the first bytes by hand: SQLite never opens a file that is not ours. version_out: of OURS and OTHER. */
enum { STORE_HEADER_SIZE = 100 };
bool store_file_is_our_header(const unsigned char header[STORE_HEADER_SIZE]);
FW_MUST_CHECK enum fw_status store_file_inspect(const char *file, enum store_file_kind *kind_out, int *version_out,
                                                struct fw_error *error);
enum fw_status store_file_refuse_strange(const char *file, struct fw_error *error); /* FW_FOREIGN, said */
enum fw_status store_file_refuse_version(const char *file, int version, struct fw_error *error); /* likewise */
/* Makes the directory (its parent must exist). */
FW_MUST_CHECK enum fw_status store_file_make_room(const char *file, struct fw_error *error);
/* Room for so many bytes more. FW_IO: there is not, or it cannot be said. */
FW_MUST_CHECK enum fw_status store_file_check_room(const char *file, int64_t bytes, struct fw_error *error);
/* On a file system of this machine, and not writable by everyone? */
FW_MUST_CHECK enum fw_status store_file_check_place(const char *file, struct fw_error *error);
/*
 * An open store of an earlier version, its pages found sound, is copied whole to "<file>.version-N", and then brought
 * on, each version in one transaction. Cut off anywhere, the next opening goes on. FW_IO: no room for the copy, or a
 * step failed; the store is of some version in between, as good as before.
 */
FW_MUST_CHECK enum fw_status store_upgrade(struct store *store, int from_version, struct fw_error *error);
/* A whole, empty store, built beside and renamed into place. The lock is held. */
FW_MUST_CHECK enum fw_status store_file_create(const char *file, struct fw_error *error);
/* FW_DAMAGED when SQLite's quick check finds anything. Writes nothing to the file. */
FW_MUST_CHECK enum fw_status store_file_check(const char *file, struct fw_error *error);
/* Runs the quick check on an open connection. */
FW_MUST_CHECK enum fw_status store_quick_check(sqlite3 *db, const char *file, struct fw_error *error);
/* "<file>-wal" is there and holds something. */
bool store_file_has_log(const char *file);
FW_MUST_CHECK enum fw_status store_file_sync_directory(const char *file, struct fw_error *error);

/* --- lock (store_lock.c) --- */

/* FW_LOCKED names the pid. The file stays when the lock is let go. */
FW_MUST_CHECK enum fw_status store_lock_take(const char *file, int *lock_out, struct fw_error *error);
void store_lock_release(int lock);
/* Is the lock file still the one we hold? */
bool store_lock_stands(const char *file, int lock);
/* A store of ours has been opened here before: the lock file says so. */
bool store_lock_has_mark(const char *file);

/* --- connection (store_open.c) --- */

/* Opens the connection of a store whose lock, for writing, is held. */
FW_MUST_CHECK enum fw_status store_connect(struct store *store, struct fw_error *error);
void store_disconnect(struct store *store);

#endif
