/* SPDX-License-Identifier: MIT */
#include "config/demo/night_time.h"

#include <assert.h>
#include <stdio.h>
#include <string.h>
#include <time.h>

enum {
    OFFSET_S = 3600,
    EVENING_MINUTE = 18 * 60 /* clock times before this belong to the morning after */
};

static const int64_t midnight_before_utc_s = 1928790000; /* 2031-02-14T00:00:00+01:00 */

int64_t night_time_at(const char *clock)
{
    int hour = -1, minute = -1;
    int count = sscanf(clock, "%2d:%2d", &hour, &minute);
    assert(count == 2 && hour >= 0 && hour < 24 && minute >= 0 && minute < 60);
    (void)count;
    int of_day = hour * 60 + minute;
    if (of_day < EVENING_MINUTE)
        of_day += 24 * 60;
    return midnight_before_utc_s + of_day * 60;
}

static struct tm broken_down(int64_t utc_s, int64_t offset_s)
{
    time_t moment = (time_t)(utc_s + offset_s);
    struct tm parts = {0};
    (void)gmtime_r(&moment, &parts); /* fails only for years beyond an int */
    return parts;
}

const char *night_time_rfc3339(int64_t utc_s, char text[NIGHT_TIME_SIZE])
{
    struct tm parts = broken_down(utc_s, OFFSET_S);
    strftime(text, NIGHT_TIME_SIZE, "%Y-%m-%dT%H:%M:%S+01:00", &parts);
    return text;
}

const char *night_time_rfc3339_utc(int64_t utc_s, char text[NIGHT_TIME_SIZE])
{
    struct tm parts = broken_down(utc_s, 0);
    strftime(text, NIGHT_TIME_SIZE, "%Y-%m-%dT%H:%M:%SZ", &parts);
    return text;
}

const char *night_time_clock(int64_t utc_s, char text[NIGHT_TIME_SIZE])
{
    if (utc_s == NIGHT_TIME_NEVER)
        return strcpy(text, "-");
    struct tm parts = broken_down(utc_s, OFFSET_S);
    strftime(text, NIGHT_TIME_SIZE, "%H:%M", &parts);
    return text;
}

bool night_time_parse(const char *text, int64_t *utc_s_out)
{
    struct tm parts = {0};
    const char *rest = strptime(text, "%Y-%m-%dT%H:%M:%S", &parts);
    if (rest == NULL)
        return false;
    int64_t offset_s = 0;
    if (strcmp(rest, "Z") != 0) {
        char sign;
        int hours, minutes, length = 0;
        if (sscanf(rest, "%c%2d:%2d%n", &sign, &hours, &minutes, &length) != 3 || rest[length] != '\0' ||
            (sign != '+' && sign != '-'))
            return false;
        offset_s = (sign == '-' ? -60 : 60) * (int64_t)(hours * 60 + minutes);
    }
    *utc_s_out = (int64_t)timegm(&parts) - offset_s;
    return true;
}
