/* SPDX-License-Identifier: MIT */
/* Moments as text: RFC 3339 in, RFC 3339 and local clock times out. UTC seconds inside. */
#ifndef FOREWATER_DAEMON_WHEN_H
#define FOREWATER_DAEMON_WHEN_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include "daemon/error.h"

enum { WHEN_TEXT_SIZE = 40, WHEN_ZONE_SIZE = 64 };

/* The district's zone: a fixed offset, or one IANA name through the C library. */
struct when_zone {
    bool is_fixed;
    int32_t offset_s;          /* when fixed */
    char name[WHEN_ZONE_SIZE]; /* when not; "" is UTC */
};

/*
 * "+01:00", "Z" or an IANA name known to this machine. An IANA name sets the process's zone (one per box).
 * FW_BAD_INPUT; FW_NO_MEMORY.
 */
FW_MUST_CHECK enum fw_status when_zone_parse(const char *text, struct when_zone *zone_out, struct fw_error *error);

/*
 * RFC 3339 with 'Z' or an offset; fractions of a second are cut off; a blank is accepted for the 'T'; seconds may be
 * missing. A text without offset is refused when `zone` is NULL, and otherwise read in that zone: of a repeated hour
 * the first, in a missing hour not at all.
 * FW_BAD_INPUT says what was expected.
 */
FW_MUST_CHECK enum fw_status when_parse(const char *text, const struct when_zone *zone, int64_t *utc_s_out,
                                        struct fw_error *error);

int32_t when_offset_s(const struct when_zone *zone, int64_t utc_s);

/* "2031-02-14T21:15:00Z" */
const char *when_rfc3339_utc(int64_t utc_s, char text[WHEN_TEXT_SIZE]);
/* "2031-02-14T22:15:00+01:00" */
const char *when_rfc3339_local(const struct when_zone *zone, int64_t utc_s, char text[WHEN_TEXT_SIZE]);
/* "22:15"; "-" for INT64_MAX */
const char *when_clock(const struct when_zone *zone, int64_t utc_s, char text[WHEN_TEXT_SIZE]);
/* minutes after local midnight, 0 .. 1439 */
int when_minute_of_day(const struct when_zone *zone, int64_t utc_s);
/* is the minute of day within [from, to), over midnight if from > to */
bool when_is_between(int minute_of_day, int from_minute, int to_minute);

#endif
