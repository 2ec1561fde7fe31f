/* SPDX-License-Identifier: MIT */
/*
 * The history: one SQLite file, WAL, synchronous FULL, plain tables. One read-write connection, in the daemon;
 * everyone else reads. docs/store.md tells every column.
 */
#ifndef FOREWATER_DAEMON_STORE_H
#define FOREWATER_DAEMON_STORE_H

#include "daemon/delta.h"
#include "daemon/error.h"

struct store;

enum store_access { STORE_WRITE, STORE_READ };
enum { STORE_PATH_SIZE = 1024 }; /* of a store's path with everything that is put behind it */

/*
 * STORE_WRITE takes the lock file "<file>.lock" first and creates what is missing, the directory too when its
 * parent exists. A store of an earlier version is copied
 * beside and brought to this one.
 * FW_LOCKED      another instance holds it; the error names its pid
 * FW_FOREIGN     not a Forewater store, or of a version this program does not know: both named, the file untouched
 *                byte for byte
 * FW_DAMAGED     STORE_WRITE: the quick check found damage, or the file is missing and its write-ahead log is not:
 *                see store_rescue
 * FW_UNAVAILABLE STORE_READ and there is no file
 * FW_IO          anything the system refuses, with the path
 */
FW_MUST_CHECK enum fw_status store_open(const char *file, enum store_access access, struct store **store_out,
                                        struct fw_error *error);
void store_close(struct store *store); /* NULL is fine */

/* The version the store had when it was opened for writing, if that was an earlier one; else 0. */
int store_upgraded_from(const struct store *store);

/* Is a daemon holding the write lock of this store? *pid_out 0: no. Needs no store_open. */
bool store_is_held(const char *file, long *pid_out);

/*
 * One transaction: readings, judgements, words, payloads, forecast, advice that changed, new messages, ledger.
 * Whatever it returns but FW_OK, nothing of it is stored.
 * FW_IO           also when the file under the connection was removed or replaced
 * FW_DAMAGED      a page is not what it must be
 * FW_UNAVAILABLE  the ledger entry does not follow the newest one stored: an earlier delta was not stored
 *
 * After a failure the store lacks what the picture has: store_reopen, then store_seed, before the next cycle; each
 * may fail and be tried again at the cycle after.
 */
FW_MUST_CHECK enum fw_status store_commit(struct store *store, const struct settings *settings,
                                          const struct delta *delta, struct fw_error *error);
/*
 * Closes the connection, keeps the lock, does what store_rescue does, and opens again: the same store, or a fresh
 * one.
 */
FW_MUST_CHECK enum fw_status store_reopen(struct store *store, int64_t now_utc_s, char moved_to[STORE_PATH_SIZE],
                                          struct fw_error *error);
/*
 * For a store that is not open (store_open said FW_DAMAGED). Checks the file again; a damaged one is moved aside
 * with its log, nothing is deleted, and moved_to names it: "<file>.damaged-20310214T221500Z"; "" when the file
 * passes the check or is missing, and then nothing is touched. FW_LOCKED, FW_FOREIGN, FW_IO as store_open: nothing
 * is moved then.
 */
FW_MUST_CHECK enum fw_status store_rescue(const char *file, int64_t now_utc_s, char moved_to[STORE_PATH_SIZE],
                                          struct fw_error *error);
/*
 * Makes a store, fresh or with a gap, catch up with the picture, in one transaction: its readings and verdicts,
 * newest advice, messages and how they went, the facts people stated (restated as words), counters, settings, and
 * a ledger entry of kind "reseed" that says why. The picture goes on from that entry: its newest_link, next_entry
 * and next_message_number are set, and whatever the store knows by another number gets that number. On failure
 * neither is changed. It adds to a store; a picture that was never loaded from a store with a past is to be loaded
 * from it first, or its empty state would count as the newest.
 */
FW_MUST_CHECK enum fw_status store_seed(struct store *store, const struct settings *settings, struct picture *picture,
                                        int64_t now_utc_s, const char *why, struct fw_error *error);

/*
 * How a delivery went: updates the outbox row of this message. FW_UNAVAILABLE: it has none, as its commit had
 * failed.
 */
FW_MUST_CHECK enum fw_status store_save_delivery(struct store *store, const struct message *message,
                                                 struct fw_error *error);

/* Settings that worked, with the time of their first use; and the newest such text. FW_NOTHING_NEW: none kept. */
FW_MUST_CHECK enum fw_status store_keep_settings(struct store *store, const struct settings *settings,
                                                 int64_t now_utc_s, struct fw_error *error);
FW_MUST_CHECK enum fw_status store_last_settings(struct store *store, struct text *text_out, struct fw_error *error);

/*
 * Fills a fresh picture: readings observed since since_utc_s (and the newest of each gauge, however old) with
 * their newest judgement, road and water facts and acceptances from the words, the newest advice of every point,
 * unsettled messages, counters, newest link, time of the newest ledger entry (as away_from_utc_s). A message that
 * was under way waits again. On failure the picture is to be thrown away. Ids in the store that the settings do
 * not know are passed over.
 */
FW_MUST_CHECK enum fw_status store_load_picture(struct store *store, const struct settings *settings,
                                                int64_t since_utc_s, struct picture *picture, struct fw_error *error);

FW_MUST_CHECK enum fw_status store_has_word(struct store *store, const char *id, bool *has_out,
                                            struct fw_error *error);

#define STORE_NOW INT64_MAX /* as known at: the newest entry there is */

/* The entry that was newest at a moment: of the last cycle that had ended by then. 0: none had. */
FW_MUST_CHECK enum fw_status store_entry_at(struct store *store, int64_t utc_s, int64_t *entry_out,
                                            struct fw_error *error);

/* Newest ledger payload (canonical JSON of the picture) up to an entry, and its time; FW_NOTHING_NEW: none. */
FW_MUST_CHECK enum fw_status store_payload_at(struct store *store, int64_t known_at_entry, struct text *json_out,
                                              int64_t *utc_s_out, char link_out[FACT_DIGEST_SIZE],
                                              struct fw_error *error);

/*
 * Readings as they were known at an entry, gauge by gauge in order of id, then by observed time, source and entry;
 * each with its judgement as known then. Without every_revision only the newest value of a source for a time.
 */
struct store_reading_query {
    const char *gauge; /* NULL: all */
    int64_t from_utc_s, to_utc_s;
    int64_t known_at_entry;
    bool every_revision;
};
struct stored_reading { /* texts live until the function returns */
    int64_t entry;
    const char *gauge, *source;
    int64_t observed_utc_s;
    double value;
    const char *unit;
    int64_t received_utc_s;
    const char *by; /* NULL: it came by a feed */
    bool is_judged;
    int flag;
    const char *use;
    int64_t reasons;
};
typedef enum fw_status store_reading_function(void *context, const struct stored_reading *reading,
                                              struct fw_error *error);
/* Stops at the first status that is not FW_OK, and returns it. */
FW_MUST_CHECK enum fw_status store_each_reading(struct store *store, const struct store_reading_query *query,
                                                store_reading_function *function, void *context,
                                                struct fw_error *error);

/*
 * Rows for replay: readings (every source, every revision, in order of entry) and words received in [from, to).
 * The caller frees the arrays.
 */
FW_MUST_CHECK enum fw_status store_list_readings(struct store *store, const struct settings *settings,
                                                 int64_t from_utc_s, int64_t to_utc_s, struct reading **readings_out,
                                                 size_t *count_out, struct fw_error *error);
FW_MUST_CHECK enum fw_status store_list_words(struct store *store, int64_t from_utc_s, int64_t to_utc_s,
                                              struct word **words_out, size_t *count_out, struct fw_error *error);

/*
 * Walks the whole ledger and checks every link and every payload still kept. FW_DAMAGED names the first entry that
 * does not fit.
 */
FW_MUST_CHECK enum fw_status store_check_ledger(struct store *store, size_t *entry_count_out, struct fw_error *error);

#endif
