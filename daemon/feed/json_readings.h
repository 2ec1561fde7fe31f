/* SPDX-License-Identifier: MIT */
/* A JSON reply to readings: pointers to the readings, and to time and value within each. */
#ifndef FOREWATER_DAEMON_FEED_JSON_READINGS_H
#define FOREWATER_DAEMON_FEED_JSON_READINGS_H

#include "daemon/error.h"
#include "daemon/feed/news.h"
#include "daemon/settings/settings.h"

enum { JSON_NOTED_ELEMENTS = 20 };

struct json_tally {
    size_t element_count;
    size_t reading_count;
    size_t null_count; /* without a value: passed over */
    size_t bad_count;
    int64_t newest_utc_s; /* observed; where reading_count > 0 */
};

/*
 * Where readings_pointer leads to is an array of readings, an object of them, or one reading. `origin` names the
 * reply in notes. A time is RFC 3339 text (without an offset: in the feed's zone), or seconds since 1970, or
 * milliseconds when above 1e11. A value is a number, or a number as text. FW_NOTHING_NEW  no element, or none with a
 * value FW_BAD_INPUT    empty, a web page, not JSON, nothing at the pointer, no element can be read, or the unit does
 * not fit FW_NO_MEMORY    what was added to the news so far stays
 */
FW_MUST_CHECK enum fw_status json_readings_add(const struct settings *settings, size_t gauge, size_t feed,
                                               const char *origin, const char *bytes, size_t length,
                                               int64_t received_utc_s, struct news *news,
                                               struct json_tally *tally_out, struct fw_error *error);

#endif
