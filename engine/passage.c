/* SPDX-License-Identifier: MIT */
#include "engine/passage.h"

#include <math.h>
#include <stdbool.h>

/* Crossings this close to a whole second are at that second: rounding in the division must not move them by one. */
static const double SECOND_TOLERANCE_S = 1e-6;

/* One run's result, put in order by value and then by time, so that equal inputs always give equal outputs. */
struct ranked {
    double value;
    int64_t utc_s;
};

/* One run's spell at or above the mark, in seconds from the start of the curves. */
struct spell {
    bool is_above;
    bool has_passed; /* its start or its end is at or after now: this is the spell that counts */
    bool is_over;
    double start_s, end_s;
};

static bool curves_are_fit(const struct passage_curves *curves)
{
    if (curves->member_count == 0 || curves->member_count > PASSAGE_MEMBERS_MAX || curves->step_count == 0 ||
        curves->step_s <= 0)
        return false;
    for (size_t member = 0; member < curves->member_count; member++)
        if (curves->member_column[member] >= curves->row_stride)
            return false;
    int64_t span_s = 0, end_utc_s = 0;
    return curves->step_count - 1 <= (size_t)INT32_MAX &&
           !__builtin_mul_overflow((int64_t)(curves->step_count - 1), curves->step_s, &span_s) &&
           !__builtin_add_overflow(curves->start_utc_s, span_s, &end_utc_s);
}

static bool is_within(const struct passage_curves *curves, int64_t utc_s)
{
    return utc_s >= curves->start_utc_s &&
           utc_s <= curves->start_utc_s + (int64_t)(curves->step_count - 1) * curves->step_s;
}

static double stage_at_step(const struct passage_curves *curves, size_t member, size_t step)
{
    return curves->stage_m[step * curves->row_stride + curves->member_column[member]];
}

/* On the straight line between steps; utc_s is within the curves. */
static double stage_at(const struct passage_curves *curves, size_t member, int64_t utc_s)
{
    int64_t offset_s = utc_s - curves->start_utc_s;
    size_t step = (size_t)(offset_s / curves->step_s);
    int64_t rest_s = offset_s % curves->step_s;
    double before_m = stage_at_step(curves, member, step);
    if (rest_s == 0)
        return before_m;
    double after_m = stage_at_step(curves, member, step + 1);
    return before_m + (after_m - before_m) * ((double)rest_s / (double)curves->step_s);
}

/* The first step at or after utc_s. */
static size_t step_from(const struct passage_curves *curves, int64_t utc_s)
{
    int64_t offset_s = utc_s - curves->start_utc_s;
    return (size_t)(offset_s / curves->step_s + (offset_s % curves->step_s != 0));
}

/* Shell sort: small, in place, always the same. */
static void rank(struct ranked runs[], size_t count)
{
    static const size_t gaps[] = {701, 301, 132, 57, 23, 10, 4, 1};
    for (size_t g = 0; g < sizeof gaps / sizeof gaps[0]; g++) {
        size_t gap = gaps[g];
        for (size_t i = gap; i < count; i++) {
            struct ranked moved = runs[i];
            size_t j = i;
            for (; j >= gap && (runs[j - gap].value > moved.value ||
                                (runs[j - gap].value == moved.value && runs[j - gap].utc_s > moved.utc_s));
                 j -= gap)
                runs[j] = runs[j - gap];
            runs[j] = moved;
        }
    }
}

/* Takes a run from one step to the next: a straight line crosses the mark once at most. */
static void spell_advance(struct spell *spell, double mark_m, double from_s, double step_s, double before_m,
                          double after_m, double now_s)
{
    if (spell->is_over || spell->is_above == (after_m >= mark_m))
        return;
    double crossing_s = from_s + step_s * ((mark_m - before_m) / (after_m - before_m));
    if (!spell->is_above) {
        spell->is_above = true;
        spell->start_s = crossing_s;
        return;
    }
    spell->is_above = false;
    if (crossing_s >= now_s - SECOND_TOLERANCE_S) {
        spell->is_over = true;
        spell->end_s = crossing_s;
    }
}

static void passage_collect(const struct passage_curves *curves, const struct spell spells[],
                            struct passage *passage_out)
{
    struct ranked arrivals[PASSAGE_MEMBERS_MAX];
    size_t arrived = 0;
    int64_t first_end = PASSAGE_NEVER, last_end = 0;
    for (size_t member = 0; member < curves->member_count; member++) {
        const struct spell *spell = &spells[member];
        if (!spell->has_passed) {
            arrivals[member] = (struct ranked){HUGE_VAL, PASSAGE_NEVER};
            continue;
        }
        arrived++;
        double start_s = floor(spell->start_s + SECOND_TOLERANCE_S);
        arrivals[member] = (struct ranked){start_s, curves->start_utc_s + (int64_t)start_s};
        int64_t end = PASSAGE_NEVER;
        if (spell->is_over)
            end = curves->start_utc_s + (int64_t)ceil(spell->end_s - SECOND_TOLERANCE_S);
        first_end = end < first_end ? end : first_end;
        last_end = arrived == 1 || end > last_end ? end : last_end;
    }
    rank(arrivals, curves->member_count);
    *passage_out = (struct passage){
        .chance = (double)arrived / (double)curves->member_count,
        .earliest_utc_s = arrivals[0].utc_s,
        .likely_utc_s = arrivals[(curves->member_count - 1) / 2].utc_s,
        .latest_utc_s = arrivals[curves->member_count - 1].utc_s,
        .below_again_earliest_utc_s = first_end,
        .below_again_latest_utc_s = arrived > 0 ? last_end : PASSAGE_NEVER,
    };
}

enum fw_status passage_of_mark(const struct passage_curves *curves, int64_t now_utc_s, double mark_m,
                               struct passage *passage_out)
{
    if (!curves_are_fit(curves) || !is_within(curves, now_utc_s) || !isfinite(mark_m))
        return FW_BAD_INPUT;
    struct spell spells[PASSAGE_MEMBERS_MAX];
    double now_s = (double)(now_utc_s - curves->start_utc_s);
    for (size_t member = 0; member < curves->member_count; member++) {
        double stage_m = stage_at_step(curves, member, 0);
        if (!isfinite(stage_m))
            return FW_BAD_INPUT;
        spells[member] = (struct spell){.is_above = stage_m >= mark_m};
    }
    /* rows outside, members inside: the order in memory */
    for (size_t step = 1; step < curves->step_count; step++) {
        double from_s = (double)(step - 1) * (double)curves->step_s;
        for (size_t member = 0; member < curves->member_count; member++) {
            double after_m = stage_at_step(curves, member, step);
            if (!isfinite(after_m))
                return FW_BAD_INPUT;
            spell_advance(&spells[member], mark_m, from_s, (double)curves->step_s,
                          stage_at_step(curves, member, step - 1), after_m, now_s);
        }
    }
    for (size_t member = 0; member < curves->member_count; member++)
        spells[member].has_passed = spells[member].is_above || spells[member].is_over;
    passage_collect(curves, spells, passage_out);
    return FW_OK;
}

/* Time of the top, in seconds from the start, by the parabola through the highest sample and its neighbours. */
static double top_time_s(const struct passage_curves *curves, size_t member, size_t top)
{
    double time_s = (double)top * (double)curves->step_s;
    if (top == 0 || top + 1 >= curves->step_count)
        return time_s;
    double before_m = stage_at_step(curves, member, top - 1);
    double top_m = stage_at_step(curves, member, top);
    double after_m = stage_at_step(curves, member, top + 1);
    double bend_m = before_m - 2.0 * top_m + after_m;
    /* a highest sample bends the parabola downwards, unless all three are level or higher ones lie before now */
    if (bend_m >= 0.0)
        return time_s;
    return time_s + 0.5 * (before_m - after_m) / bend_m * (double)curves->step_s;
}

static enum fw_status peak_of_member(const struct passage_curves *curves, size_t member, int64_t now_utc_s,
                                     struct ranked *peak_out)
{
    double highest_m = stage_at(curves, member, now_utc_s);
    double time_s = (double)(now_utc_s - curves->start_utc_s);
    const double now_s = time_s;
    if (!isfinite(highest_m))
        return FW_BAD_INPUT;
    size_t first = step_from(curves, now_utc_s), top = SIZE_MAX;
    for (size_t step = first; step < curves->step_count; step++) {
        double stage_m = stage_at_step(curves, member, step);
        if (!isfinite(stage_m))
            return FW_BAD_INPUT;
        if (stage_m > highest_m || (step == first && stage_m == highest_m)) {
            highest_m = stage_m;
            top = step;
        }
    }
    if (top != SIZE_MAX)
        time_s = fmax(top_time_s(curves, member, top), now_s);
    *peak_out = (struct ranked){highest_m, curves->start_utc_s + (int64_t)llround(time_s)};
    return FW_OK;
}

enum fw_status passage_peak_after(const struct passage_curves *curves, int64_t now_utc_s,
                                  struct passage_peak *peak_out)
{
    if (!curves_are_fit(curves) || !is_within(curves, now_utc_s))
        return FW_BAD_INPUT;
    struct ranked peaks[PASSAGE_MEMBERS_MAX];
    for (size_t member = 0; member < curves->member_count; member++) {
        enum fw_status status = peak_of_member(curves, member, now_utc_s, &peaks[member]);
        if (status != FW_OK)
            return status;
    }
    rank(peaks, curves->member_count);
    const struct ranked *middle = &peaks[curves->member_count / 2];
    *peak_out = (struct passage_peak){
        .lowest_m = peaks[0].value,
        .likely_m = middle->value,
        .highest_m = peaks[curves->member_count - 1].value,
        .likely_utc_s = middle->utc_s,
    };
    return FW_OK;
}

enum fw_status passage_chance_between(const struct passage_curves *curves, double mark_m, int64_t from_utc_s,
                                      int64_t to_utc_s, double *chance_out)
{
    if (!curves_are_fit(curves) || !is_within(curves, from_utc_s) || !is_within(curves, to_utc_s) ||
        from_utc_s > to_utc_s || !isfinite(mark_m))
        return FW_BAD_INPUT;
    size_t reached = 0, first = step_from(curves, from_utc_s);
    for (size_t member = 0; member < curves->member_count; member++) {
        double from_m = stage_at(curves, member, from_utc_s), to_m = stage_at(curves, member, to_utc_s);
        bool is_finite = isfinite(from_m) && isfinite(to_m);
        /* straight lines are highest at their ends */
        double highest_m = fmax(from_m, to_m);
        for (size_t step = first; is_finite && step < curves->step_count &&
                                  curves->start_utc_s + (int64_t)step * curves->step_s <= to_utc_s;
             step++) {
            double stage_m = stage_at_step(curves, member, step);
            is_finite = isfinite(stage_m);
            highest_m = fmax(highest_m, stage_m);
        }
        if (!is_finite)
            return FW_BAD_INPUT;
        reached += highest_m >= mark_m;
    }
    *chance_out = (double)reached / (double)curves->member_count;
    return FW_OK;
}
