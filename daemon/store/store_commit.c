/* SPDX-License-Identifier: MIT */
#include "daemon/store/store_internal.h"

#include <stdio.h>
#include <string.h>

#include "daemon/ledger.h"

/*
 * An entry that was sealed behind another than the store's newest tells that something in between was never stored.
 */
static enum fw_status check_follows(struct store *store, const struct ledger_entry *entry, struct fw_error *error)
{
    struct ledger_entry sealed = *entry;
    enum fw_status status = ledger_seal(store->newest_link, &sealed);
    if (status != FW_OK)
        return fw_error_set(error, status, "%s: cannot digest ledger entry %lld", store->file,
                            (long long)entry->entry);
    if (strcmp(sealed.link, entry->link) != 0 || strcmp(sealed.payload_digest, entry->payload_digest) != 0)
        return fw_error_set(
            error, FW_UNAVAILABLE,
            "%s: ledger entry %lld does not follow the newest one stored (link %.12s): something before "
            "it was not stored; the store must be seeded first",
            store->file, (long long)entry->entry, store->newest_link[0] != '\0' ? store->newest_link : "none");
    return FW_OK;
}

static enum fw_status add_raw_payload(struct store *store, const struct settings *settings, const struct delta *delta,
                                      const struct news_payload *payload, struct fw_error *error)
{
    char source[16];
    struct store_row row;
    enum fw_status status = store_prepare(store, STORE_ADD_RAW, &row, error);
    if (status != FW_OK)
        return status;
    store_put_integer(&row, delta->ledger.entry);
    store_put_text(&row, store_gauge_id(settings, payload->gauge));
    store_put_text(&row, store_source_text(payload->source, source));
    store_put_text(&row, payload->origin);
    store_put_integer(&row, delta->ledger.utc_s);
    store_put_bytes(&row, payload->bytes != NULL ? payload->bytes : "", payload->length, false);
    return store_run(&row, "add a raw payload", error);
}

static enum fw_status prune_raw(struct store *store, enum store_statement which, int64_t limit,
                                struct fw_error *error)
{
    struct store_row row;
    enum fw_status status = store_prepare(store, which, &row, error);
    if (status != FW_OK)
        return status;
    store_put_integer(&row, limit);
    return store_run(&row, "prune raw payloads", error);
}

static enum fw_status add_raw_payloads(struct store *store, const struct settings *settings,
                                       const struct delta *delta, struct fw_error *error)
{
    size_t count = delta->news != NULL ? delta->news->payload_count : 0;
    enum fw_status status = FW_OK;
    for (size_t index = 0; index < count && status == FW_OK; index++)
        status = add_raw_payload(store, settings, delta, &delta->news->payloads[index], error);
    if (count > 0 && status == FW_OK)
        status = prune_raw(store, STORE_PRUNE_RAW_ROWS, STORE_RAW_ROWS_MAX, error);
    if (count > 0 && status == FW_OK)
        status = prune_raw(store, STORE_PRUNE_RAW_BYTES, STORE_RAW_BYTES_MAX, error);
    return status;
}

static enum fw_status add_curve(struct store *store, const char *point_id, const struct forecast *forecast,
                                size_t offset, int64_t entry, struct fw_error *error)
{
    enum fw_status status = FW_OK;
    for (size_t step = 0; step < forecast->step_count && status == FW_OK; step++) {
        struct store_row row;
        status = store_prepare(store, STORE_ADD_CURVE, &row, error);
        if (status != FW_OK)
            return status;
        store_put_integer(&row, entry);
        store_put_text(&row, point_id);
        store_put_integer(&row, (int64_t)step);
        store_put_integer_unless(&row, forecast->low_mm[offset + step], -1);
        store_put_integer_unless(&row, forecast->likely_mm[offset + step], -1);
        store_put_integer_unless(&row, forecast->high_mm[offset + step], -1);
        status = store_run(&row, "add a forecast curve", error);
    }
    return status;
}

static enum fw_status add_forecast(struct store *store, const struct settings *settings,
                                   const struct picture *picture, int64_t entry, struct fw_error *error)
{
    const struct forecast *forecast = &picture->forecast;
    struct store_row row;
    enum fw_status status = store_prepare(store, STORE_ADD_FORECAST, &row, error);
    if (status != FW_OK)
        return status;
    store_put_integer(&row, entry);
    store_put_integer(&row, forecast->issued_utc_s);
    store_put_integer(&row, forecast->start_utc_s);
    store_put_integer(&row, forecast->step_s);
    store_put_integer(&row, (int64_t)forecast->step_count);
    status = store_run(&row, "add a forecast", error);
    for (size_t point = 0; point < picture->point_count && status == FW_OK; point++)
        status = add_curve(store, store_point_id(settings, (int32_t)point), forecast, point * forecast->step_count,
                           entry, error);
    return status;
}

static enum fw_status add_changed_advice(struct store *store, const struct settings *settings,
                                         const struct delta *delta, struct fw_error *error)
{
    const struct picture *before = delta->before;
    enum fw_status status = FW_OK;
    for (size_t point = 0; point < delta->next->point_count && status == FW_OK; point++) {
        const struct advice *advice = &delta->next->points[point].advice;
        bool is_known = before != NULL && point < before->point_count;
        if (!is_known || !store_same_advice(&before->points[point].advice, advice))
            status =
                store_add_advice(store, store_point_id(settings, (int32_t)point), delta->ledger.entry, advice, error);
    }
    return status;
}

static enum fw_status add_messages(struct store *store, const struct settings *settings, const struct delta *delta,
                                   struct fw_error *error)
{
    enum fw_status status = FW_OK;
    for (size_t index = delta->first_message; index < delta->next->outbox_count && status == FW_OK; index++)
        status = store_add_message(store, settings, &delta->next->outbox[index], error);
    return status;
}

static enum fw_status add_delta(struct store *store, const struct settings *settings, const struct delta *delta,
                                struct fw_error *error)
{
    enum fw_status status = store_add_ledger(store, &delta->ledger, delta->settings_digest, error);
    for (size_t index = 0; index < delta->reading_count && status == FW_OK; index++)
        status = store_add_reading(store, settings, &delta->readings[index], error);
    for (size_t index = 0; index < delta->judgement_count && status == FW_OK; index++)
        status = store_add_judgement(store, &delta->judgements[index], error);
    for (size_t index = 0; index < delta->word_count && status == FW_OK; index++)
        status = store_add_word(store, &delta->words[index], error);
    if (status == FW_OK)
        status = add_raw_payloads(store, settings, delta, error);
    if (status == FW_OK && delta->keeps_forecast)
        status = add_forecast(store, settings, delta->next, delta->ledger.entry, error);
    if (status == FW_OK)
        status = add_changed_advice(store, settings, delta, error);
    if (status == FW_OK)
        status = add_messages(store, settings, delta, error);
    return status;
}

enum fw_status store_commit(struct store *store, const struct settings *settings, const struct delta *delta,
                            struct fw_error *error)
{
    enum fw_status status = store_check_writable(store, error);
    if (status == FW_OK)
        status = check_follows(store, &delta->ledger, error);
    if (status == FW_OK)
        status = store_begin(store, error);
    if (status == FW_OK)
        status = store_end(store, add_delta(store, settings, delta, error), error);
    if (status == FW_OK)
        snprintf(store->newest_link, sizeof store->newest_link, "%s", delta->ledger.link);
    return status;
}

enum fw_status store_save_delivery(struct store *store, const struct message *message, struct fw_error *error)
{
    struct store_row row;
    enum fw_status status = store_check_writable(store, error);
    if (status == FW_OK)
        status = store_prepare(store, STORE_SAVE_DELIVERY, &row, error);
    if (status != FW_OK)
        return status;
    store_put_text(&row, store_delivery_names[message->state]);
    store_put_integer(&row, message->tries);
    store_put_integer(&row, message->next_try_utc_s);
    store_put_integer_unless(&row, message->settled_utc_s, 0);
    store_put_text(&row, message->note);
    store_put_integer(&row, message->entry);
    store_put_text(&row, message->id);
    status = store_run(&row, "save how a delivery went", error);
    if (status == FW_OK && sqlite3_changes(store->db) != 1)
        status = fw_error_set(error, FW_UNAVAILABLE, "%s: message #%04lld (entry %lld) was never stored", store->file,
                              (long long)message->number, (long long)message->entry);
    return status;
}

enum fw_status store_keep_settings(struct store *store, const struct settings *settings, int64_t now_utc_s,
                                   struct fw_error *error)
{
    enum fw_status status = store_check_writable(store, error);
    if (status == FW_OK)
        status = store_begin(store, error);
    if (status == FW_OK)
        status = store_end(store, store_add_settings(store, settings, now_utc_s, error), error);
    return status;
}
