/* SPDX-License-Identifier: MIT */
#include "daemon/clock.h"

#include <assert.h>
#include <time.h>

struct clock clock_real(void)
{
    return (struct clock){.is_driven = false};
}

struct clock clock_driven(int64_t start_utc_s)
{
    return (struct clock){.is_driven = true, .driven_utc_s = start_utc_s};
}

int64_t clock_world_utc_s(const struct clock *clock)
{
    if (clock->is_driven)
        return clock->driven_utc_s;
    struct timespec now;
    clock_gettime(CLOCK_REALTIME, &now);
    return (int64_t)now.tv_sec;
}

void clock_advance(struct clock *clock, int64_t utc_s)
{
    assert(clock->is_driven);
    if (utc_s > clock->driven_utc_s)
        clock->driven_utc_s = utc_s;
}

int64_t clock_machine_ms(void)
{
    struct timespec now;
    clock_gettime(CLOCK_BOOTTIME, &now);
    return (int64_t)now.tv_sec * 1000 + now.tv_nsec / 1000000;
}
