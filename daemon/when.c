/* SPDX-License-Identifier: MIT */
#include "daemon/when.h"

#include <fcntl.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <time.h>
#include <unistd.h>

enum { MINUTE_S = 60, HOUR_S = 3600, DAY_S = 86400, DAY_MIN = 1440 };

#define WHEN_EXPECTED "expected RFC 3339, as 2031-02-14T21:15:00Z or 2031-02-14T22:15:00+01:00"

/* --- the calendar --- */

struct civil {
    int64_t year;
    int month, day, hour, minute, second;
};

/* Days since 1970-01-01, proleptic Gregorian; the year is taken to begin in March, so that a leap day ends it. */
static int64_t days_from_date(int64_t year, int month, int day)
{
    int64_t shifted = month <= 2 ? year - 1 : year;
    int64_t era = (shifted >= 0 ? shifted : shifted - 399) / 400;
    int64_t year_of_era = shifted - era * 400;
    int64_t day_of_year = (153 * (month > 2 ? month - 3 : month + 9) + 2) / 5 + day - 1;
    int64_t day_of_era = year_of_era * 365 + year_of_era / 4 - year_of_era / 100 + day_of_year;
    return era * 146097 + day_of_era - 719468;
}

static int64_t floor_divide(int64_t value, int64_t by)
{
    int64_t whole = value / by;
    return value % by < 0 ? whole - 1 : whole;
}

static struct civil civil_from_seconds(int64_t seconds)
{
    int64_t days = floor_divide(seconds, DAY_S);
    int second_of_day = (int)(seconds - days * DAY_S);
    int64_t shifted = days + 719468;
    int64_t era = floor_divide(shifted, 146097);
    int64_t day_of_era = shifted - era * 146097;
    int64_t year_of_era = (day_of_era - day_of_era / 1460 + day_of_era / 36524 - day_of_era / 146096) / 365;
    int64_t day_of_year = day_of_era - (365 * year_of_era + year_of_era / 4 - year_of_era / 100);
    int month_from_march = (int)((5 * day_of_year + 2) / 153);
    struct civil civil = {.day = (int)(day_of_year - (153 * month_from_march + 2) / 5 + 1),
                          .month = month_from_march < 10 ? month_from_march + 3 : month_from_march - 9,
                          .hour = second_of_day / HOUR_S,
                          .minute = second_of_day / MINUTE_S % 60,
                          .second = second_of_day % 60};
    civil.year = year_of_era + era * 400 + (civil.month <= 2 ? 1 : 0);
    return civil;
}

static int days_in_month(int64_t year, int month)
{
    static const int days[] = {31, 28, 31, 30, 31, 30, 31, 31, 30, 31, 30, 31};
    bool is_leap = (year % 4 == 0 && year % 100 != 0) || year % 400 == 0;
    return month == 2 && is_leap ? 29 : days[month - 1];
}

/* --- zones --- */

/* Two digits at text[0..1], or -1. */
static int two_digits(const char *text)
{
    if (text[0] < '0' || text[0] > '9' || text[1] < '0' || text[1] > '9')
        return -1;
    return (text[0] - '0') * 10 + (text[1] - '0');
}

/* "Z" or "+hh:mm" at *cursor, which is moved past it. */
static bool take_offset(const char **cursor, int32_t *offset_s_out)
{
    const char *text = *cursor;
    if (*text == 'Z' || *text == 'z') {
        *offset_s_out = 0;
        *cursor = text + 1;
        return true;
    }
    if ((*text != '+' && *text != '-') || strlen(text) < 6 || text[3] != ':')
        return false;
    int hours = two_digits(text + 1);
    int minutes = two_digits(text + 4);
    if (hours < 0 || hours > 23 || minutes < 0 || minutes > 59)
        return false;
    int32_t offset_s = hours * HOUR_S + minutes * MINUTE_S;
    *offset_s_out = *text == '-' ? -offset_s : offset_s;
    *cursor = text + 6;
    return true;
}

static bool is_zone_name(const char *text)
{
    size_t length = strlen(text);
    if (length == 0 || length >= WHEN_ZONE_SIZE || text[0] == '/' || strstr(text, "..") != NULL)
        return false;
    return strspn(text, "ABCDEFGHIJKLMNOPQRSTUVWXYZabcdefghijklmnopqrstuvwxyz0123456789_+-/") == length;
}

/* The C library takes any name without a word and works in UTC then: its file is looked for first (RFC 8536). */
static bool is_zone_on_this_machine(const char *name)
{
    const char *folder = getenv("TZDIR");
    char path[512];
    int length = snprintf(path, sizeof path, "%s/%s", folder != NULL ? folder : "/usr/share/zoneinfo", name);
    if (length < 0 || (size_t)length >= sizeof path)
        return false;
    int file = open(path, O_RDONLY | O_CLOEXEC | O_NONBLOCK);
    if (file < 0)
        return false;
    char magic[4] = {0};
    bool is_zone = read(file, magic, sizeof magic) == (ssize_t)sizeof magic && memcmp(magic, "TZif", 4) == 0;
    close(file);
    return is_zone;
}

/* The C library knows one zone at a time. Settings that were read and then refused may have left another behind. */
static bool make_process_zone(const struct when_zone *zone)
{
    char wanted[WHEN_ZONE_SIZE + 1];
    snprintf(wanted, sizeof wanted, ":%s", zone->name);
    const char *present = getenv("TZ");
    if ((present == NULL || strcmp(present, wanted) != 0) && setenv("TZ", wanted, 1) != 0)
        return false;
    tzset();
    return true;
}

enum fw_status when_zone_parse(const char *text, struct when_zone *zone_out, struct fw_error *error)
{
    struct when_zone zone = {.is_fixed = true};
    const char *cursor = text;
    if (take_offset(&cursor, &zone.offset_s) && *cursor == '\0') {
        *zone_out = zone;
        return FW_OK;
    }
    if (!is_zone_name(text) || !is_zone_on_this_machine(text))
        return fw_error_set(error, FW_BAD_INPUT,
                            "'%.80s' is not a zone: expected a fixed offset as +01:00, Z, or an IANA name that this "
                            "machine knows, as Area/City",
                            text);
    zone = (struct when_zone){.is_fixed = false};
    snprintf(zone.name, sizeof zone.name, "%s", text);
    if (!make_process_zone(&zone))
        return fw_error_set(error, FW_NO_MEMORY, "zone %s: out of memory", text);
    *zone_out = zone;
    return FW_OK;
}

int32_t when_offset_s(const struct when_zone *zone, int64_t utc_s)
{
    if (zone->is_fixed)
        return zone->offset_s;
    if (zone->name[0] == '\0')
        return 0;
    time_t moment = (time_t)utc_s;
    struct tm local;
    if (!make_process_zone(zone))
        return 0; /* out of memory, for a zone that was not in force before */
    return localtime_r(&moment, &local) != NULL ? (int32_t)local.tm_gmtoff : 0;
}

/*
 * A local clock time to UTC. Around a change of offset there may be two such moments (the first is taken) or none.
 * The offsets a day before and a day after are the only two that can hold: changes lie weeks apart.
 */
static bool utc_from_local(const struct when_zone *zone, int64_t local_s, int64_t *utc_s_out)
{
    int64_t before = local_s - when_offset_s(zone, local_s - DAY_S);
    int64_t after = local_s - when_offset_s(zone, local_s + DAY_S);
    int64_t first = before < after ? before : after;
    int64_t second = before < after ? after : before;
    if (first + when_offset_s(zone, first) == local_s)
        *utc_s_out = first;
    else if (second + when_offset_s(zone, second) == local_s)
        *utc_s_out = second;
    else
        return false;
    return true;
}

/* --- text in --- */

/* Digits of a fixed width at *cursor, which is moved past them and past the sign that must follow ('\0': none). */
static bool take_number(const char **cursor, int width, char follows, int *value_out)
{
    int value = 0;
    for (int i = 0; i < width; i++) {
        char digit = (*cursor)[i];
        if (digit < '0' || digit > '9')
            return false;
        value = value * 10 + (digit - '0');
    }
    *cursor += width;
    if (follows != '\0' && **cursor != follows)
        return false;
    *cursor += follows != '\0';
    *value_out = value;
    return true;
}

/* ":ss" and ".fff", both of which may be missing. A fraction is cut off: nothing is dated later than written. */
static bool take_seconds(const char **cursor, int *second_out)
{
    *second_out = 0;
    if (**cursor != ':')
        return true;
    *cursor += 1;
    if (!take_number(cursor, 2, '\0', second_out) || *second_out > 60)
        return false;
    if (**cursor == '.') {
        size_t digits = strspn(*cursor + 1, "0123456789");
        if (digits == 0)
            return false;
        *cursor += 1 + digits;
    }
    return true;
}

static bool take_civil(const char **cursor, struct civil *civil_out)
{
    struct civil civil = {0};
    int year;
    if (!take_number(cursor, 4, '-', &year) || !take_number(cursor, 2, '-', &civil.month) ||
        !take_number(cursor, 2, '\0', &civil.day))
        return false;
    if (**cursor != 'T' && **cursor != 't' && **cursor != ' ')
        return false;
    *cursor += 1;
    if (!take_number(cursor, 2, ':', &civil.hour) || !take_number(cursor, 2, '\0', &civil.minute) ||
        !take_seconds(cursor, &civil.second))
        return false;
    civil.year = year;
    *civil_out = civil;
    return true;
}

static bool is_on_the_calendar(const struct civil *civil)
{
    return civil->month >= 1 && civil->month <= 12 && civil->day >= 1 &&
           civil->day <= days_in_month(civil->year, civil->month) && civil->hour <= 23 && civil->minute <= 59;
}

enum fw_status when_parse(const char *text, const struct when_zone *zone, int64_t *utc_s_out, struct fw_error *error)
{
    const char *cursor = text;
    struct civil civil;
    int32_t offset_s = 0;
    if (!take_civil(&cursor, &civil))
        return fw_error_set(error, FW_BAD_INPUT, "'%.80s' is not a time: " WHEN_EXPECTED, text);
    if (!is_on_the_calendar(&civil))
        return fw_error_set(error, FW_BAD_INPUT, "'%.80s' is not on the calendar or the clock: " WHEN_EXPECTED, text);
    int second_of_day = civil.hour * HOUR_S + civil.minute * MINUTE_S + civil.second;
    int64_t local_s = days_from_date(civil.year, civil.month, civil.day) * DAY_S + second_of_day;
    int64_t utc_s;
    if (*cursor == '\0') {
        if (zone == NULL)
            return fw_error_set(error, FW_BAD_INPUT, "'%.80s' has no offset from UTC: " WHEN_EXPECTED, text);
        if (!utc_from_local(zone, local_s, &utc_s))
            return fw_error_set(
                error, FW_BAD_INPUT,
                "'%.80s' does not exist in %s, where the clock was put forward over it: expected a time "
                "with its offset, as +01:00",
                text, zone->name);
    } else {
        if (!take_offset(&cursor, &offset_s) || *cursor != '\0')
            return fw_error_set(error, FW_BAD_INPUT, "'%.80s' goes on with '%.20s': " WHEN_EXPECTED, text, cursor);
        utc_s = local_s - offset_s;
    }
    /* a leap second is the last of a UTC day; it counts as the first second of the next, as in POSIX */
    if (civil.second == 60 && floor_divide(utc_s, DAY_S) * DAY_S != utc_s)
        return fw_error_set(error, FW_BAD_INPUT,
                            "'%.80s' has second 60, which only the last minute of a UTC day can have", text);
    *utc_s_out = utc_s;
    return FW_OK;
}

/* --- text out --- */

static bool is_printable(int64_t utc_s)
{
    return utc_s > -INT64_C(1000000000000) && utc_s < INT64_C(1000000000000);
}

static const char *print_dash(char text[WHEN_TEXT_SIZE])
{
    snprintf(text, WHEN_TEXT_SIZE, "-");
    return text;
}

static int print_civil(const struct civil *civil, char text[WHEN_TEXT_SIZE])
{
    return snprintf(text, WHEN_TEXT_SIZE, "%04lld-%02d-%02dT%02d:%02d:%02d", (long long)civil->year, civil->month,
                    civil->day, civil->hour, civil->minute, civil->second);
}

/* Offsets of the nineteenth century have seconds, which RFC 3339 cannot write: both are cut to the minute. */
static int32_t whole_minutes(int32_t offset_s)
{
    return offset_s / MINUTE_S * MINUTE_S;
}

const char *when_rfc3339_utc(int64_t utc_s, char text[WHEN_TEXT_SIZE])
{
    if (!is_printable(utc_s))
        return print_dash(text);
    struct civil civil = civil_from_seconds(utc_s);
    int length = print_civil(&civil, text);
    snprintf(text + length, (size_t)(WHEN_TEXT_SIZE - length), "Z");
    return text;
}

const char *when_rfc3339_local(const struct when_zone *zone, int64_t utc_s, char text[WHEN_TEXT_SIZE])
{
    if (!is_printable(utc_s))
        return print_dash(text);
    int32_t offset_s = whole_minutes(when_offset_s(zone, utc_s));
    struct civil civil = civil_from_seconds(utc_s + offset_s);
    int length = print_civil(&civil, text);
    int size_s = abs(offset_s);
    snprintf(text + length, (size_t)(WHEN_TEXT_SIZE - length), "%c%02d:%02d", offset_s < 0 ? '-' : '+',
             size_s / HOUR_S, size_s / MINUTE_S % 60);
    return text;
}

const char *when_clock(const struct when_zone *zone, int64_t utc_s, char text[WHEN_TEXT_SIZE])
{
    if (!is_printable(utc_s))
        return print_dash(text);
    int minute = when_minute_of_day(zone, utc_s);
    snprintf(text, WHEN_TEXT_SIZE, "%02d:%02d", minute / 60, minute % 60);
    return text;
}

int when_minute_of_day(const struct when_zone *zone, int64_t utc_s)
{
    if (!is_printable(utc_s))
        return 0;
    int64_t local_min = floor_divide(utc_s + when_offset_s(zone, utc_s), MINUTE_S);
    return (int)(local_min - floor_divide(local_min, DAY_MIN) * DAY_MIN);
}

bool when_is_between(int minute_of_day, int from_minute, int to_minute)
{
    if (from_minute <= to_minute)
        return minute_of_day >= from_minute && minute_of_day < to_minute;
    return minute_of_day >= from_minute || minute_of_day < to_minute;
}
