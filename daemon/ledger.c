/* SPDX-License-Identifier: MIT */
#include "daemon/ledger.h"

#include <openssl/evp.h>
#include <stdio.h>

enum fw_status digest_sha256(const void *bytes, size_t length, char hex_out[FACT_DIGEST_SIZE])
{
    static const char digits[] = "0123456789abcdef";
    unsigned char digest[EVP_MAX_MD_SIZE];
    unsigned int size = 0;
    if (EVP_Digest(bytes, length, digest, &size, EVP_sha256(), NULL) != 1 || 2 * size + 1 != FACT_DIGEST_SIZE)
        return FW_IO;
    for (unsigned int index = 0; index < size; index++) {
        hex_out[2 * index] = digits[digest[index] >> 4];
        hex_out[2 * index + 1] = digits[digest[index] & 15];
    }
    hex_out[2 * size] = '\0';
    return FW_OK;
}

enum fw_status ledger_link(const char *previous_link, struct ledger_entry *entry)
{
    char sealed[512];
    int length = snprintf(sealed, sizeof sealed, "%s\n%lld\n%lld\n%s\n%s\n", previous_link, (long long)entry->entry,
                          (long long)entry->utc_s, entry->kind, entry->payload_digest);
    return digest_sha256(sealed, (size_t)length, entry->link);
}

enum fw_status ledger_seal(const char *previous_link, struct ledger_entry *entry)
{
    enum fw_status status = digest_sha256(text_string(&entry->payload), entry->payload.length, entry->payload_digest);
    return status == FW_OK ? ledger_link(previous_link, entry) : status;
}
