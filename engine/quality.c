/* SPDX-License-Identifier: MIT */
#include "engine/quality.h"

#include <math.h>

#define NONE ((size_t)-1)

/* So much of the movement to be expected must be missing before an unmoved reading is called frozen. */
static const double MISSING_RESOLUTIONS = 3.0;
/* A rate into a stretch is taken over at least this share of frozen_moving_s: one step of a coarse gauge is none. */
static const double RATE_BASE_SHARE = 0.5;
/* The bend of the river's course is taken over this many times frozen_moving_s. */
static const double COURSE_BASE_FACTOR = 3.0;
enum { COURSE_SAMPLES_MIN = 4 };

static const struct {
    enum quality_reason reason;
    const char *word;
} REASON_WORDS[] = {
    {QUALITY_OUT_OF_RANGE, "out of range"},
    {QUALITY_RISE_TOO_FAST, "rises too fast"},
    {QUALITY_FALL_TOO_FAST, "falls too fast"},
    {QUALITY_UNCONFIRMED, "unconfirmed"},
    {QUALITY_COUNTS_UNCONFIRMED, "counts unconfirmed"},
    {QUALITY_DENIED, "denied by a later reading"},
    {QUALITY_CONFIRMED, "confirmed by a later reading"},
    {QUALITY_FROZEN, "frozen"},
    {QUALITY_IN_FUTURE, "in the future"},
    {QUALITY_OUTRANKED, "outranked by another source"},
    {QUALITY_HAND, "hand reading"},
};

/* A stretch of the same sensor reading. */
struct stretch {
    size_t first;       /* with no gap beyond frozen_moving_s after it; NONE: no stretch yet */
    size_t still_first; /* with no gap beyond frozen_after_s after it: the same or earlier */
    size_t last;
    double rate_per_s; /* the river moved at least this fast into it; 0: it was not moving, or that is not known */
    double slope_per_s, bend_per_s2; /* of the parabola through the readings before it, at its first reading */
    bool has_course;                 /* there were enough of them */
    bool is_hand_beside;             /* a hand reading within it shows that the river moved */
    bool is_frozen;
};

struct judge {
    const struct quality_rules *rules;
    size_t count; /* of samples whose time has come */
    const struct quality_sample *samples;
    int64_t now_utc_s;
    struct quality_verdict *verdicts;
    size_t reference;        /* what the next rate is measured against; NONE: nothing counts yet */
    size_t sensor_reference; /* the same among sensor readings */
    size_t newest_hand;      /* that counts; NONE: none yet */
    struct stretch stretch;
};

static double elapsed_s(const struct judge *judge, size_t from, size_t to)
{
    return (double)(judge->samples[to].observed_utc_s - judge->samples[from].observed_utc_s);
}

static double change(const struct judge *judge, size_t from, size_t to)
{
    return judge->samples[to].value - judge->samples[from].value;
}

/* Two readings rounded to the resolution may differ by one more of it than the river did. */
static double rounding(const struct judge *judge)
{
    return judge->rules->resolution * (1.0 + 1e-6);
}

static bool rises_too_fast(const struct judge *judge, size_t from, size_t to)
{
    return change(judge, from, to) - rounding(judge) > judge->rules->fastest_rise_per_s * elapsed_s(judge, from, to);
}

static bool falls_too_fast(const struct judge *judge, size_t from, size_t to)
{
    return -change(judge, from, to) - rounding(judge) > judge->rules->fastest_fall_per_s * elapsed_s(judge, from, to);
}

static bool is_plausible(const struct judge *judge, size_t from, size_t to)
{
    return !rises_too_fast(judge, from, to) && !falls_too_fast(judge, from, to);
}

static bool is_in_range(const struct judge *judge, size_t index)
{
    double value = judge->samples[index].value;
    return value >= judge->rules->lowest && value <= judge->rules->highest;
}

static bool is_same_reading(const struct judge *judge, size_t one, size_t other)
{
    return fabs(change(judge, one, other)) <= 0.5 * judge->rules->resolution;
}

/* How fast the river surely moved into this reading, rounding taken off; 0: it did not, or nothing near says so. */
static double rate_into(const struct judge *judge, size_t index)
{
    const struct quality_rules *rules = judge->rules;
    for (size_t before = index; before-- > 0;) {
        double base_s = elapsed_s(judge, before, index);
        if (!(base_s <= rules->frozen_moving_s))
            break;
        bool is_sensor_that_counts = judge->verdicts[before].use == QUALITY_USE && !judge->samples[before].is_hand;
        if (!is_sensor_that_counts || base_s < RATE_BASE_SHARE * rules->frozen_moving_s)
            continue;
        double moved = fabs(change(judge, before, index));
        return moved > rules->moving_rate_per_s * base_s ? fmax(0.0, moved - rounding(judge)) / base_s : 0.0;
    }
    return 0.0;
}

/*
 * Least-squares parabola through the readings that count before a stretch and its first, for where the river was
 * going: a flood that rounds its top stands still as a frozen gauge does, but its readings have bent towards it.
 */
static void find_course(const struct judge *judge, struct stretch *stretch)
{
    const double base_s = COURSE_BASE_FACTOR * judge->rules->frozen_moving_s;
    /* sums of x^k and of y x^k, x in units of the base so that they are of one size */
    double powers[5] = {0}, moments[3] = {0};
    size_t count = 0;
    for (size_t before = stretch->first + 1; before-- > 0;) {
        double x = -elapsed_s(judge, before, stretch->first) / base_s;
        if (!(x >= -1.0))
            break;
        if (judge->verdicts[before].use != QUALITY_USE || judge->samples[before].is_hand)
            continue;
        double y = -change(judge, before, stretch->first), power = 1.0;
        for (size_t k = 0; k < 5; k++) {
            powers[k] += power;
            if (k < 3)
                moments[k] += y * power;
            power *= x;
        }
        count++;
    }
    /* Cramer's rule on the normal equations */
    const double a = powers[0], b = powers[1], c = powers[2], d = powers[3], e = powers[4];
    const double determinant = a * (c * e - d * d) - b * (b * e - c * d) + c * (b * d - c * c);
    if (count < COURSE_SAMPLES_MIN || !(determinant > 0.0))
        return; /* too few, or too close together, for a bend */
    const double slope =
        a * (moments[1] * e - d * moments[2]) - moments[0] * (b * e - c * d) + c * (b * moments[2] - c * moments[1]);
    const double bend =
        a * (c * moments[2] - d * moments[1]) - b * (b * moments[2] - c * moments[1]) + moments[0] * (b * d - c * c);
    stretch->slope_per_s = slope / determinant / base_s;
    stretch->bend_per_s2 = bend / determinant / (base_s * base_s);
    stretch->has_course = true;
}

static void accept(struct judge *judge, size_t index, enum quality_flag flag, unsigned reasons)
{
    judge->verdicts[index] = (struct quality_verdict){flag, QUALITY_USE, reasons};
    judge->reference = index;
    judge->sensor_reference = index;
    judge->stretch =
        (struct stretch){.first = index, .still_first = index, .last = index, .rate_per_s = rate_into(judge, index)};
    if (judge->stretch.rate_per_s > 0.0)
        find_course(judge, &judge->stretch);
}

static void accept_hand(struct judge *judge, size_t index)
{
    judge->verdicts[index] = (struct quality_verdict){QUALITY_PASS, QUALITY_USE, QUALITY_HAND};
    judge->reference = index;
    judge->newest_hand = index;
    struct stretch *stretch = &judge->stretch;
    if (stretch->first == NONE)
        return;
    double away = fabs(change(judge, stretch->first, index)) - MISSING_RESOLUTIONS * judge->rules->resolution;
    double while_s = fmax(elapsed_s(judge, stretch->first, index), judge->rules->frozen_moving_s);
    if (away > judge->rules->moving_rate_per_s * while_s)
        stretch->is_hand_beside = true;
}

/* ---- frozen ---- */

static bool is_frozen_after_moving(const struct judge *judge, const struct stretch *stretch)
{
    const double unmoved_s = elapsed_s(judge, stretch->first, stretch->last);
    const double missing = MISSING_RESOLUTIONS * judge->rules->resolution;
    if (unmoved_s < judge->rules->frozen_moving_s)
        return false;
    if (stretch->is_hand_beside)
        return true;
    const double on_course = (stretch->slope_per_s + stretch->bend_per_s2 * unmoved_s) * unmoved_s;
    return stretch->rate_per_s * unmoved_s > missing && (!stretch->has_course || fabs(on_course) > missing);
}

static void mark_frozen(struct judge *judge, size_t first, size_t last)
{
    for (size_t index = first + 1; index <= last; index++) {
        /* hand readings, spikes and whatever else was no part of the stretch keep their verdicts */
        struct quality_verdict *verdict = &judge->verdicts[index];
        if (verdict->use == QUALITY_USE && !judge->samples[index].is_hand)
            *verdict = (struct quality_verdict){QUALITY_SUSPECT, QUALITY_KEEP_OUT, QUALITY_FROZEN};
    }
}

/* One more of the same reading. */
static void go_on_unmoved(struct judge *judge, size_t index)
{
    struct stretch *stretch = &judge->stretch;
    const bool was_frozen = stretch->is_frozen;
    /* back at the old reading at once, after a hand reading far from it: it never left */
    if (judge->samples[judge->reference].is_hand && !is_plausible(judge, judge->reference, index))
        stretch->is_hand_beside = true;
    else if (!was_frozen && elapsed_s(judge, stretch->last, index) > judge->rules->frozen_moving_s)
        *stretch = (struct stretch){.first = index, .still_first = stretch->still_first};
    stretch->last = index;
    judge->verdicts[index] = (struct quality_verdict){QUALITY_PASS, QUALITY_USE, 0};

    bool was_moving = is_frozen_after_moving(judge, stretch);
    /* a still river may truly be still: its last reading goes on being what a step is measured from */
    bool is_still = elapsed_s(judge, stretch->still_first, index) >= judge->rules->frozen_after_s;
    stretch->is_frozen = was_frozen || was_moving || is_still;
    if (stretch->is_frozen)
        mark_frozen(judge, was_frozen ? index - 1 : is_still ? stretch->still_first : stretch->first, index);
    judge->sensor_reference = was_moving ? stretch->first : index;
    judge->reference = judge->sensor_reference;
    if (was_moving && judge->newest_hand != NONE && judge->newest_hand > stretch->first)
        judge->reference = judge->newest_hand;
}

static bool goes_on_unmoved(const struct judge *judge, size_t index)
{
    const struct stretch *stretch = &judge->stretch;
    return stretch->first != NONE && is_same_reading(judge, stretch->first, index) &&
           elapsed_s(judge, stretch->last, index) <= judge->rules->frozen_after_s;
}

/* ---- too fast ---- */

/* Does the later reading keep half of the step from the reference to the suspect one, without leaving it too fast? */
static bool bears_out(const struct judge *judge, size_t suspect, size_t later)
{
    double step = change(judge, judge->reference, suspect), kept = change(judge, judge->reference, later);
    return step > 0.0 ? kept >= 0.5 * step && !falls_too_fast(judge, suspect, later)
                      : kept <= 0.5 * step && !rises_too_fast(judge, suspect, later);
}

/* QUALITY_CONFIRMED, QUALITY_DENIED, or 0: not decided yet. */
static unsigned decide(const struct judge *judge, size_t suspect)
{
    for (size_t later = suspect + 1; later < judge->count; later++) {
        if (!is_in_range(judge, later))
            continue;
        if (bears_out(judge, suspect, later))
            return QUALITY_CONFIRMED;
        if (is_plausible(judge, judge->reference, later))
            return QUALITY_DENIED;
        if (elapsed_s(judge, suspect, later) > judge->rules->confirm_within_s)
            break;
    }
    return 0;
}

static void judge_suspect(struct judge *judge, size_t index)
{
    const bool is_rise = change(judge, judge->reference, index) > 0.0;
    const unsigned reason = is_rise ? QUALITY_RISE_TOO_FAST : QUALITY_FALL_TOO_FAST;
    const unsigned decision = decide(judge, index);
    struct quality_verdict *verdict = &judge->verdicts[index];
    double waited_s = (double)(judge->now_utc_s - judge->samples[index].observed_utc_s);
    if (decision == QUALITY_CONFIRMED)
        accept(judge, index, QUALITY_PASS, reason | decision);
    else if (decision == QUALITY_DENIED)
        *verdict = (struct quality_verdict){QUALITY_FAIL, QUALITY_KEEP_OUT, reason | decision};
    else if (!is_rise)
        *verdict = (struct quality_verdict){QUALITY_SUSPECT, QUALITY_KEEP_OUT, reason};
    else if (waited_s >= judge->rules->confirm_within_s)
        accept(judge, index, QUALITY_SUSPECT, reason | QUALITY_COUNTS_UNCONFIRMED);
    else
        *verdict = (struct quality_verdict){QUALITY_SUSPECT, QUALITY_HOLD, reason | QUALITY_UNCONFIRMED};
}

static bool is_on_course(const struct judge *judge, size_t index)
{
    if (judge->reference == NONE || is_plausible(judge, judge->reference, index))
        return true;
    const size_t sensor = judge->sensor_reference;
    if (sensor != NONE && judge->samples[judge->reference].is_hand &&
        elapsed_s(judge, sensor, judge->reference) <= judge->rules->confirm_within_s &&
        is_plausible(judge, sensor, index))
        return true;
    /* unmoved while the river was moving, if not yet for long: the river may have gone on all the while */
    return judge->stretch.first != NONE && judge->stretch.rate_per_s > 0.0 &&
           is_plausible(judge, judge->stretch.first, index);
}

static void judge_one(struct judge *judge, size_t index)
{
    const bool is_hand = judge->samples[index].is_hand;
    if (!is_in_range(judge, index))
        judge->verdicts[index] = (struct quality_verdict){
            QUALITY_FAIL, QUALITY_KEEP_OUT, QUALITY_OUT_OF_RANGE | (is_hand ? (unsigned)QUALITY_HAND : 0u)};
    else if (is_hand)
        accept_hand(judge, index);
    else if (goes_on_unmoved(judge, index))
        go_on_unmoved(judge, index);
    else if (is_on_course(judge, index))
        accept(judge, index, QUALITY_PASS, 0);
    else
        judge_suspect(judge, index);
}

static bool is_fit(const struct quality_rules *rules, size_t sample_count, const struct quality_sample samples[])
{
    const double numbers[] = {
        rules->lowest,           rules->highest,           rules->fastest_rise_per_s, rules->fastest_fall_per_s,
        rules->confirm_within_s, rules->frozen_after_s,    rules->frozen_moving_s,    rules->moving_rate_per_s,
        rules->resolution,       rules->future_tolerance_s};
    for (size_t i = 0; i < sizeof numbers / sizeof numbers[0]; i++)
        if (isnan(numbers[i]))
            return false;
    for (size_t i = 0; i < sample_count; i++)
        if (!isfinite(samples[i].value) || (i > 0 && samples[i].observed_utc_s <= samples[i - 1].observed_utc_s))
            return false;
    return true;
}

enum fw_status quality_judge(const struct quality_rules *rules, size_t sample_count,
                             const struct quality_sample samples[], int64_t now_utc_s,
                             struct quality_verdict verdicts_out[])
{
    if (!is_fit(rules, sample_count, samples))
        return FW_BAD_INPUT;
    size_t count = sample_count;
    while (count > 0 && (double)(samples[count - 1].observed_utc_s - now_utc_s) > rules->future_tolerance_s) {
        count--;
        verdicts_out[count] =
            (struct quality_verdict){QUALITY_NOT_EVALUATED, QUALITY_HOLD,
                                     QUALITY_IN_FUTURE | (samples[count].is_hand ? (unsigned)QUALITY_HAND : 0u)};
    }
    struct judge judge = {.rules = rules,
                          .count = count,
                          .samples = samples,
                          .now_utc_s = now_utc_s,
                          .verdicts = verdicts_out,
                          .reference = NONE,
                          .sensor_reference = NONE,
                          .newest_hand = NONE,
                          .stretch = {.first = NONE}};
    for (size_t index = 0; index < count; index++)
        judge_one(&judge, index);
    return FW_OK;
}

const char *quality_reason_word(enum quality_reason reason)
{
    for (size_t i = 0; i < sizeof REASON_WORDS / sizeof REASON_WORDS[0]; i++)
        if (REASON_WORDS[i].reason == reason)
            return REASON_WORDS[i].word;
    return "?";
}
