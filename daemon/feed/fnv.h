/* SPDX-License-Identifier: MIT */
/* A quick digest for telling things apart that nobody forges: FNV-1a, 64 bits (Fowler, Noll and Vo; public domain).
 */
#ifndef FOREWATER_DAEMON_FEED_FNV_H
#define FOREWATER_DAEMON_FEED_FNV_H

#include <stddef.h>
#include <stdint.h>

#define FNV_START UINT64_C(14695981039346656037)

static inline uint64_t fnv_add(uint64_t digest, const void *bytes, size_t length)
{
    for (const unsigned char *at = bytes, *end = at + length; at < end; at++)
        digest = (digest ^ *at) * UINT64_C(1099511628211);
    return digest;
}

#endif
