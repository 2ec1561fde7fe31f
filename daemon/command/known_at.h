/* SPDX-License-Identifier: MIT */
/* The option --known-at of the commands that read the store: the record as it was at a moment, or at an entry. */
#ifndef FOREWATER_DAEMON_COMMAND_KNOWN_AT_H
#define FOREWATER_DAEMON_COMMAND_KNOWN_AT_H

#include "daemon/command/options.h"
#include "daemon/store/store.h"

#define KNOWN_AT_ARGUMENT "TIME|ENTRY"

/*
 * STORE_NOW when it was not given. A whole number is an entry; anything else a time (RFC 3339; without an offset in
 * the zone, where there is one), of which the last cycle that had ended by then is taken.
 * FW_USAGE       neither of them
 * FW_UNAVAILABLE nothing had been recorded by then
 */
FW_MUST_CHECK enum fw_status known_at_read(const struct option_values *given, const struct when_zone *zone,
                                           struct store *store, int64_t *entry_out, struct fw_error *error);

#endif
