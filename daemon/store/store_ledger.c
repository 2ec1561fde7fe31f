/* SPDX-License-Identifier: MIT */
#include "daemon/store/store_internal.h"

#include <string.h>

#include "daemon/ledger.h"

/* The columns of STORE_LEDGER_WALK against the link before. */
static enum fw_status check_ledger_row(struct store_row *row, char previous_link[FACT_DIGEST_SIZE],
                                       struct fw_error *error)
{
    struct ledger_entry entry = {.entry = store_take_integer(row, 0)};
    char payload_digest[FACT_DIGEST_SIZE];
    entry.utc_s = store_take_integer(row, 0);
    store_take_into(row, entry.kind, sizeof entry.kind);
    store_take_into(row, entry.payload_digest, sizeof entry.payload_digest);
    store_take_into(row, entry.link, sizeof entry.link);
    size_t length = 0;
    const char *payload = store_take_text(row, &length);
    struct ledger_entry sealed = entry;
    enum fw_status status = ledger_link(previous_link, &sealed);
    if (status == FW_OK && payload != NULL)
        status = digest_sha256(payload, length, payload_digest);
    if (status != FW_OK)
        return fw_error_set(error, status, "%s: cannot digest ledger entry %lld", row->store->file,
                            (long long)entry.entry);
    if (strcmp(sealed.link, entry.link) != 0)
        return fw_error_set(error, FW_DAMAGED,
                            "%s: ledger entry %lld: its link does not follow from the entry before it",
                            row->store->file, (long long)entry.entry);
    if (payload != NULL && strcmp(payload_digest, entry.payload_digest) != 0)
        return fw_error_set(error, FW_DAMAGED, "%s: ledger entry %lld: its payload is not the one that was recorded",
                            row->store->file, (long long)entry.entry);
    memcpy(previous_link, entry.link, FACT_DIGEST_SIZE);
    return FW_OK;
}

enum fw_status store_check_ledger(struct store *store, size_t *entry_count_out, struct fw_error *error)
{
    char previous_link[FACT_DIGEST_SIZE] = "";
    size_t count = 0;
    bool has_row = true;
    struct store_row row;
    enum fw_status status = store_prepare(store, STORE_LEDGER_WALK, &row, error);
    if (status != FW_OK)
        return status;
    while (status == FW_OK && has_row) {
        status = store_next(&row, &has_row, "walk the ledger", error);
        if (status == FW_OK && has_row)
            status = check_ledger_row(&row, previous_link, error);
        count += status == FW_OK && has_row;
    }
    store_done(&row);
    if (status == FW_OK)
        *entry_count_out = count;
    return status;
}
