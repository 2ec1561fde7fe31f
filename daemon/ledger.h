/* SPDX-License-Identifier: MIT */
/* The chain: each link digests the one before, so that the record cannot be quietly rebuilt. */
#ifndef FOREWATER_DAEMON_LEDGER_H
#define FOREWATER_DAEMON_LEDGER_H

#include "daemon/delta.h"

/* SHA-256 in lower-case hex. FW_IO: the library refused. */
FW_MUST_CHECK enum fw_status digest_sha256(const void *bytes, size_t length, char hex_out[FACT_DIGEST_SIZE]);

/*
 * Fills the link of an entry whose other members, payload_digest among them, are set: the digest of the five lines
 *     previous_link, entry, utc_s, kind, payload_digest
 * each ended by a line feed, numbers in decimal. previous_link "" for the first.
 */
FW_MUST_CHECK enum fw_status ledger_link(const char *previous_link, struct ledger_entry *entry);

/* Fills payload_digest and link of an entry whose other members are set. previous_link "" for the first. */
FW_MUST_CHECK enum fw_status ledger_seal(const char *previous_link, struct ledger_entry *entry);

#endif
