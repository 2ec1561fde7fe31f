/* SPDX-License-Identifier: MIT */
#include "daemon/command/known_at.h"

#include <errno.h>
#include <stdlib.h>
#include <string.h>

enum fw_status known_at_read(const struct option_values *given, const struct when_zone *zone, struct store *store,
                             int64_t *entry_out, struct fw_error *error)
{
    const char *text = option_text(given, NULL);
    struct fw_error reason;
    int64_t utc_s = 0, entry = 0;
    if (text == NULL) {
        *entry_out = STORE_NOW;
        return FW_OK;
    }
    if (text[0] != '\0' && text[strspn(text, "0123456789")] == '\0') {
        errno = 0;
        entry = strtoll(text, NULL, 10);
        if (errno != 0)
            return fw_error_set(error, FW_USAGE, "--known-at: entry %s is too large", text);
    } else {
        if (when_parse(text, zone, &utc_s, &reason) != FW_OK)
            return fw_error_set(error, FW_USAGE, "--known-at: %s; or the number of an entry", reason.text);
        enum fw_status status = store_entry_at(store, utc_s, &entry, error);
        if (status != FW_OK)
            return status;
    }
    if (entry == 0)
        return fw_error_set(error, FW_UNAVAILABLE, "--known-at %s: nothing had been recorded by then", text);
    *entry_out = entry;
    return FW_OK;
}
