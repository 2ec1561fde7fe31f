/* SPDX-License-Identifier: MIT */
/* A record of readings and what the tests of the judge ask of it. */
#ifndef FOREWATER_TESTS_ENGINE_QUALITY_RECORD_H
#define FOREWATER_TESTS_ENGINE_QUALITY_RECORD_H

#include "engine/quality.h"

#include <math.h>
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <string.h>
/* after the four above, which it needs */
#include <cmocka.h>

#define COUNT(array) (sizeof(array) / sizeof((array)[0]))
#define NOT_A_NUMBER ((double)NAN)
#define AT(hour, minute) (DAY + (hour)*3600 + (minute)*60)

enum { DAY = 1700006400, MINUTE = 60, SAMPLES_MAX = 4096 };

static const struct quality_rules RULES = {
    .lowest = 0.0,
    .highest = 9.0,
    .fastest_rise_per_s = 4.0 / 3600.0,
    .fastest_fall_per_s = 2.0 / 3600.0,
    .confirm_within_s = 15 * MINUTE,
    .frozen_after_s = 6 * 3600,
    .frozen_moving_s = 20 * MINUTE,
    .moving_rate_per_s = 0.10 / 3600.0,
    .resolution = 0.01,
    .future_tolerance_s = 15 * MINUTE,
};

struct record {
    size_t count;
    struct quality_sample samples[SAMPLES_MAX];
    struct quality_verdict verdicts[SAMPLES_MAX];
};

static inline void add(struct record *record, int64_t utc_s, double value)
{
    record->samples[record->count++] = (struct quality_sample){.observed_utc_s = utc_s, .value = value};
}

static inline void add_hand(struct record *record, int64_t utc_s, double value)
{
    record->samples[record->count++] =
        (struct quality_sample){.observed_utc_s = utc_s, .value = value, .is_hand = true};
}

static inline double to_centimetre(double value)
{
    return round(value * 100.0) / 100.0;
}

/* A straight line from one moment to before another, read every step and rounded to the centimetre. */
static inline void add_line(struct record *record, int64_t from, int64_t to, int64_t step_s, double from_m,
                            double to_m)
{
    for (int64_t utc_s = from; utc_s < to; utc_s += step_s)
        add(record, utc_s, to_centimetre(from_m + (to_m - from_m) * (double)(utc_s - from) / (double)(to - from)));
}

static inline void judge_at(struct record *record, const struct quality_rules *rules, int64_t now)
{
    assert_int_equal(quality_judge(rules, record->count, record->samples, now, record->verdicts), FW_OK);
}

/* The verdict on the reading of a moment. */
static const struct quality_verdict *verdict_of(const struct record *record, int64_t utc_s)
{
    size_t i = 0;
    while (i + 1 < record->count && record->samples[i].observed_utc_s != utc_s)
        i++;
    assert_int_equal(record->samples[i].observed_utc_s, utc_s);
    return &record->verdicts[i];
}

static inline void assert_verdict(const struct record *record, int64_t utc_s, enum quality_flag flag,
                                  enum quality_use use, unsigned reasons)
{
    const struct quality_verdict *verdict = verdict_of(record, utc_s);
    if (verdict->flag != flag || verdict->use != use || verdict->reasons != reasons)
        fail_msg("%02d:%02d: flag %d, use %d, reasons %x; expected %d, %d, %x", (int)((utc_s - DAY) / 3600),
                 (int)((utc_s - DAY) / 60 % 60), verdict->flag, verdict->use, verdict->reasons, flag, use, reasons);
}

static inline void assert_all_pass(const struct record *record)
{
    for (size_t i = 0; i < record->count; i++)
        assert_verdict(record, record->samples[i].observed_utc_s, QUALITY_PASS, QUALITY_USE,
                       record->samples[i].is_hand ? QUALITY_HAND : 0);
}

static inline int64_t newest_news(const struct record *record)
{
    for (size_t i = record->count; i-- > 0;)
        if (record->verdicts[i].use == QUALITY_USE)
            return record->samples[i].observed_utc_s;
    return 0;
}

#endif
