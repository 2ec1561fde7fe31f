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

/* Readings are kept (and loaded) for longer than the warm-up by what its alignment may take, and as much again. */
enum { CYCLE_READINGS_BEYOND_WARM_UP_S = 12 * 3600 };

FW_MUST_CHECK enum fw_status cycle_create(const struct settings *settings, struct cycle **cycle_out,
                                          struct fw_error *error);
void cycle_destroy(struct cycle *cycle);

/* FW_NO_MEMORY and engine faults; nothing is changed then. The caller clears the delta. */
FW_MUST_CHECK enum fw_status cycle_run(struct cycle *cycle, const struct picture *before, const struct news *news,
                                       int64_t now_utc_s, struct delta *delta_out, struct fw_error *error);

#endif
