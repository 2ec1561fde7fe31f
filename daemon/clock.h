/* SPDX-License-Identifier: MIT */
/*
 * The only reader of time.
 *
 * World time stamps readings, cycles, limits, mutes and back-off; it can be driven. Machine time (monotonic) measures I/O,
 * the settling of files and the watchdog; it never is.
 */
#ifndef FOREWATER_DAEMON_CLOCK_H
#define FOREWATER_DAEMON_CLOCK_H

#include <stdbool.h>
#include <stdint.h>

struct clock {
    bool is_driven;
    int64_t driven_utc_s; /* when driven: what the world says */
};

struct clock clock_real(void);
struct clock clock_driven(int64_t start_utc_s);
int64_t clock_world_utc_s(const struct clock *clock);
void clock_advance(struct clock *clock, int64_t utc_s); /* driven only; never backwards */
int64_t clock_machine_ms(void);                         /* CLOCK_BOOTTIME */

#endif
