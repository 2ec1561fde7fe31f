/* SPDX-License-Identifier: MIT */
/* A tree held against the table of keys: names, types, ranges, what is missing, ids and references. */
#ifndef FOREWATER_DAEMON_SETTINGS_SETTINGS_CHECK_H
#define FOREWATER_DAEMON_SETTINGS_SETTINGS_CHECK_H

#include "daemon/settings/json_tree.h"
#include "daemon/settings/settings_keys.h"

/*
 * Reports every fault and marks the values that have one; looks up the key of every value. Values that are not marked
 * afterwards have the type and range of their key, and references among them lead somewhere. FW_NO_MEMORY; faults are
 * FW_OK.
 */
FW_MUST_CHECK enum fw_status settings_check(struct json_value *root, enum settings_need need,
                                            struct settings_report *report);

#endif
