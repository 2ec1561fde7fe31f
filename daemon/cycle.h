/* SPDX-License-Identifier: MIT */
/*
 * One pass: collect, judge, route, assess, record, tell.
 *
 * A pure step: it reads no clock, no file and no store. What it found is a delta; the caller commits the delta, then takes its
 * picture. If the commit fails the picture is taken all the same and the messages still go.
 */
#ifndef FOREWATER_DAEMON_CYCLE_H
#define FOREWATER_DAEMON_CYCLE_H

#include "daemon/delta.h"

/*
 * What is kept between cycles for speed. What a cycle gives depends on settings, picture, news and now alone, to the last bit: the same with a
 * new one as with one that has seen a thousand cycles.
 */
struct cycle;

enum { CYCLE_ALIGN_S = 6 * 3600 }; /* routing starts at these fixed instants, whatever was routed before */

static inline int64_t cycle_aligned_utc_s(int64_t utc_s)
{
    return utc_s - utc_s % CYCLE_ALIGN_S;
}

/*
 * Readings are kept (and loaded) from twelve hours before the routing's start on, and like it from a fixed instant: what the oldest of them
 * says of those after it (a stretch that stands still, for one) then changes with the start, not from cycle to cycle.
 */
static inline int64_t cycle_readings_from_utc_s(const struct settings *settings, int64_t now_utc_s)
{
    return cycle_aligned_utc_s(now_utc_s - settings->warm_up_s) - INT64_C(12) * 3600;
}

FW_MUST_CHECK enum fw_status cycle_create(const struct settings *settings, struct cycle **cycle_out,
                                          struct fw_error *error);
void cycle_destroy(struct cycle *cycle);

/* FW_NO_MEMORY and engine faults; nothing is changed then. The caller clears the delta. */
FW_MUST_CHECK enum fw_status cycle_run(struct cycle *cycle, const struct picture *before, const struct news *news,
                                       int64_t now_utc_s, struct delta *delta_out, struct fw_error *error);

#endif
