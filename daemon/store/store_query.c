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

enum fw_status store_newest_payload(struct store *store, struct text *json_out, int64_t *utc_s_out,
                                    char link_out[FACT_DIGEST_SIZE], struct fw_error *error)
{
    struct store_row row;
    bool has_row = false;
    enum fw_status status = store_prepare(store, STORE_NEWEST_PAYLOAD, &row, error);
    if (status == FW_OK)
        status = store_next(&row, &has_row, "read the newest picture", error);
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
