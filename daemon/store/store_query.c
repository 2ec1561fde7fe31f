/* SPDX-License-Identifier: MIT */
/* Questions about single facts, and the rows for replay. */
#include "daemon/store/store_internal.h"

#include <stdlib.h>

enum fw_status store_has_word(struct store *store, const char *id, bool *has_out, struct fw_error *error)
{
    struct store_row row;
    enum fw_status status = store_prepare(store, STORE_HAS_WORD, &row, error);
    if (status != FW_OK)
        return status;
    store_put_text(&row, id);
    bool has_row = false;
    status = store_next(&row, &has_row, "look for a word", error);
    if (status == FW_OK) {
        *has_out = has_row;
        store_done(&row);
    }
    return status;
}

/* Takes a text column that is to be the whole answer. */
static enum fw_status take_whole_text(struct store_row *row, struct text *text_out, struct fw_error *error)
{
    struct text text = {0};
    size_t length = 0;
    const char *bytes = store_take_text(row, &length);
    text_add_bytes(&text, bytes != NULL ? bytes : "", length);
    if (text_status(&text) != FW_OK)
        return fw_error_set(error, FW_NO_MEMORY, "%s: out of memory", row->store->file);
    *text_out = text;
    return FW_OK;
}

enum fw_status store_last_settings(struct store *store, struct text *text_out, struct fw_error *error)
{
    struct store_row row;
    bool has_row = false;
    enum fw_status status = store_prepare(store, STORE_NEWEST_SETTINGS, &row, error);
    if (status == FW_OK)
        status = store_next(&row, &has_row, "read the kept settings", error);
    if (status == FW_OK && !has_row)
        return fw_error_set(error, FW_NOTHING_NEW, "%s: no settings are kept", store->file);
    if (status == FW_OK) {
        status = take_whole_text(&row, text_out, error);
        store_done(&row);
    }
    return status;
}

enum fw_status store_entry_at(struct store *store, int64_t utc_s, int64_t *entry_out, struct fw_error *error)
{
    struct store_row row;
    bool has_row = false;
    enum fw_status status = store_prepare(store, STORE_ENTRY_AT, &row, error);
    if (status != FW_OK)
        return status;
    store_put_integer(&row, utc_s);
    status = store_next(&row, &has_row, "find the entry of a moment", error);
    if (status == FW_OK) {
        *entry_out = store_take_integer(&row, 0);
        store_done(&row);
    }
    return status;
}

enum fw_status store_payload_at(struct store *store, int64_t known_at_entry, struct text *json_out,
                                int64_t *utc_s_out, char link_out[FACT_DIGEST_SIZE], struct fw_error *error)
{
    struct store_row row;
    bool has_row = false;
    enum fw_status status = store_prepare(store, STORE_PAYLOAD_AT, &row, error);
    if (status != FW_OK)
        return status;
    store_put_integer(&row, known_at_entry);
    status = store_next(&row, &has_row, "read a picture", error);
    if (status == FW_OK && !has_row)
        return fw_error_set(error, FW_NOTHING_NEW, "%s: no picture is kept", store->file);
    if (status != FW_OK)
        return status;
    status = take_whole_text(&row, json_out, error);
    if (status == FW_OK) {
        *utc_s_out = store_take_integer(&row, 0);
        store_take_into(&row, link_out, FACT_DIGEST_SIZE);
    }
    store_done(&row);
    return status;
}

static struct stored_reading take_stored_reading(struct store_row *row)
{
    struct stored_reading reading = {.entry = store_take_integer(row, 0)};
    reading.gauge = store_take_text(row, NULL);
    reading.source = store_take_text(row, NULL);
    reading.observed_utc_s = store_take_integer(row, 0);
    reading.value = store_take_real(row);
    reading.unit = store_take_text(row, NULL);
    reading.received_utc_s = store_take_integer(row, 0);
    reading.by = store_take_text(row, NULL);
    reading.flag = (int)store_take_integer(row, -1);
    reading.is_judged = reading.flag >= 0;
    reading.use = store_take_text(row, NULL);
    reading.reasons = store_take_integer(row, 0);
    return reading;
}

static enum fw_status each_reading_of_gauge(struct store *store, const char *gauge,
                                            const struct store_reading_query *query, store_reading_function *function,
                                            void *context, struct fw_error *error)
{
    struct store_row row;
    bool has_row = true;
    enum fw_status status = store_prepare(store, STORE_EACH_READING, &row, error);
    if (status != FW_OK)
        return status;
    store_put_integer(&row, query->known_at_entry);
    store_put_text(&row, gauge);
    store_put_integer(&row, query->from_utc_s);
    store_put_integer(&row, query->to_utc_s);
    store_put_integer(&row, query->every_revision);
    while (status == FW_OK && has_row) {
        status = store_next(&row, &has_row, "read the readings", error);
        if (status == FW_OK && has_row) {
            struct stored_reading reading = take_stored_reading(&row);
            status = function(context, &reading, error);
        }
    }
    store_done(&row);
    return status;
}

/* The id that follows a gauge's in the store, "" to begin with; FW_NOTHING_NEW: there is none. */
static enum fw_status next_gauge(struct store *store, char id[FACT_ID_SIZE], struct fw_error *error)
{
    struct store_row row;
    bool has_row = false;
    enum fw_status status = store_prepare(store, STORE_NEXT_GAUGE, &row, error);
    if (status != FW_OK)
        return status;
    store_put_text(&row, id);
    status = store_next(&row, &has_row, "find the gauges", error);
    if (status != FW_OK)
        return status;
    store_take_into(&row, id, FACT_ID_SIZE);
    store_done(&row);
    return id[0] != '\0' ? FW_OK : FW_NOTHING_NEW;
}

enum fw_status store_each_reading(struct store *store, const struct store_reading_query *query,
                                  store_reading_function *function, void *context, struct fw_error *error)
{
    char id[FACT_ID_SIZE] = "";
    if (query->gauge != NULL)
        return each_reading_of_gauge(store, query->gauge, query, function, context, error);
    enum fw_status status = next_gauge(store, id, error);
    while (status == FW_OK) {
        status = each_reading_of_gauge(store, id, query, function, context, error);
        if (status == FW_OK)
            status = next_gauge(store, id, error);
    }
    return status == FW_NOTHING_NEW ? FW_OK : status;
}

enum fw_status store_list_readings(struct store *store, const struct settings *settings, int64_t from_utc_s,
                                   int64_t to_utc_s, struct reading **readings_out, size_t *count_out,
                                   struct fw_error *error)
{
    struct reading *readings = NULL;
    size_t count = 0;
    size_t capacity = 0;
    bool has_row = true;
    struct store_row row;
    enum fw_status status = store_prepare(store, STORE_READINGS_RECEIVED, &row, error);
    if (status != FW_OK)
        return status;
    store_put_integer(&row, from_utc_s);
    store_put_integer(&row, to_utc_s);
    while (status == FW_OK && has_row) {
        bool is_known = false;
        status = store_next(&row, &has_row, "list readings", error);
        if (status == FW_OK && has_row &&
            (status = buffer_grow(&readings, &capacity, count, sizeof *readings)) == FW_OK) {
            store_take_reading(&row, settings, &readings[count], &is_known);
            count += is_known;
        }
    }
    store_done(&row);
    if (status != FW_OK) {
        free(readings);
        return status == FW_NO_MEMORY ? fw_error_set(error, status, "%s: out of memory", store->file) : status;
    }
    *readings_out = readings;
    *count_out = count;
    return FW_OK;
}

enum fw_status store_list_words(struct store *store, int64_t from_utc_s, int64_t to_utc_s, struct word **words_out,
                                size_t *count_out, struct fw_error *error)
{
    struct word *words = NULL;
    size_t count = 0;
    size_t capacity = 0;
    bool has_row = true;
    struct store_row row;
    enum fw_status status = store_prepare(store, STORE_WORDS_RECEIVED, &row, error);
    if (status != FW_OK)
        return status;
    store_put_integer(&row, from_utc_s);
    store_put_integer(&row, to_utc_s);
    while (status == FW_OK && has_row) {
        status = store_next(&row, &has_row, "list words", error);
        if (status == FW_OK && has_row)
            status = buffer_grow(&words, &capacity, count, sizeof *words) == FW_OK
                         ? store_take_word(&row, &words[count], error)
                         : fw_error_set(error, FW_NO_MEMORY, "%s: out of memory", store->file);
        count += status == FW_OK && has_row;
    }
    store_done(&row);
    if (status != FW_OK) {
        free(words);
        return status;
    }
    *words_out = words;
    *count_out = count;
    return FW_OK;
}
