/* SPDX-License-Identifier: MIT */
/* The night's moments as text. All of the demonstration is told in UTC+1, the district's fixed offset. */
#ifndef FOREWATER_CONFIG_DEMO_NIGHT_TIME_H
#define FOREWATER_CONFIG_DEMO_NIGHT_TIME_H

#include <stdbool.h>
#include <stdint.h>

enum { NIGHT_TIME_SIZE = 40 };
#define NIGHT_TIME_NEVER INT64_MAX

/* "22:15" on the night that begins on 14 February 2031: before 18:00 it is the morning after. */
int64_t night_time_at(const char *clock);

const char *night_time_rfc3339(int64_t utc_s, char text[NIGHT_TIME_SIZE]);     /* "2031-02-14T22:15:00+01:00" */
const char *night_time_rfc3339_utc(int64_t utc_s, char text[NIGHT_TIME_SIZE]); /* "2031-02-14T21:15:00Z" */
const char *night_time_clock(int64_t utc_s, char text[NIGHT_TIME_SIZE]);       /* "22:15"; "-" for never */

/* RFC 3339 with seconds and an offset; false: it is not. */
bool night_time_parse(const char *text, int64_t *utc_s_out);

#endif
