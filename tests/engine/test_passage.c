/* SPDX-License-Identifier: MIT */
#include "engine/passage.h"

#include <math.h>
#include <setjmp.h>
#include <stdarg.h>
#include <stdint.h>
#include <string.h>
/* after the four above, which it needs */
#include <cmocka.h>

#define COUNT(array) (sizeof(array) / sizeof((array)[0]))
#define NOT_A_NUMBER ((double)NAN)

enum { START = 1700000000, STEP = 300 };

static const size_t COLUMNS[PASSAGE_MEMBERS_MAX] = {0, 1, 2, 3, 4, 5, 6, 7};

static struct passage_curves curves_of(size_t step_count, size_t member_count, const double stage_m[])
{
    return (struct passage_curves){.step_count = step_count,
                                   .member_count = member_count,
                                   .member_column = COLUMNS,
                                   .row_stride = member_count,
                                   .stage_m = stage_m,
                                   .start_utc_s = START,
                                   .step_s = STEP};
}

static struct passage passage_in(const struct passage_curves *curves, int64_t now_utc_s, double mark_m)
{
    struct passage passage;
    assert_int_equal(passage_of_mark(curves, now_utc_s, mark_m, &passage), FW_OK);
    return passage;
}

static struct passage_peak peak_in(const struct passage_curves *curves, int64_t now_utc_s)
{
    struct passage_peak peak;
    assert_int_equal(passage_peak_after(curves, now_utc_s, &peak), FW_OK);
    return peak;
}

static double chance_in(const struct passage_curves *curves, double mark_m, int64_t from, int64_t to)
{
    double chance = NOT_A_NUMBER;
    assert_int_equal(passage_chance_between(curves, mark_m, from, to, &chance), FW_OK);
    return chance;
}

/* One run, six steps; offsets from START. N: never. */
#define N PASSAGE_NEVER
static const struct single_run {
    const char *shows;
    double stage_m[6];
    int64_t now_s;
    double mark_m;
    double chance;
    int64_t arrival_s, end_s;
} SINGLE_RUNS[] = {
    {"the crossing lies on the straight line", {1.0, 1.2, 1.4, 1.6, 1.8, 2.0}, 0, 1.45, 1, 675, N},
    {"a crossing that divides unevenly is rounded down", {1.0, 1.1, 1.4, 1.7, 1.9, 2.0}, 0, 1.47, 1, 670, N},
    {"division by tenths does not lose a second", {1.0, 2.0, 2.0, 2.0, 2.0, 2.0}, 0, 1.45, 1, 135, N},
    {"reaching the mark at a step is passing it", {1.0, 1.2, 1.45, 1.6, 1.8, 2.0}, 0, 1.45, 1, 600, N},
    {"touching the mark passes and ends at once", {1.0, 1.2, 1.45, 1.3, 1.2, 1.1}, 0, 1.45, 1, 600, 600},
    {"a hair under the mark never passes", {1.0, 1.2, 1.4499, 1.3, 1.2, 1.1}, 0, 1.45, 0, N, N},
    {"already above at now: the start of the present spell", {1.0, 1.2, 1.6, 1.7, 1.8, 1.9}, 1000, 1.45, 1, 487, N},
    {"above since before the curve: its first moment", {1.5, 1.6, 1.6, 1.7, 1.8, 1.9}, 1000, 1.45, 1, 0, N},
    {"exactly at the mark since before the curve", {1.45, 1.45, 1.45, 1.45, 1.45, 1.45}, 900, 1.45, 1, 0, N},
    {"a spell over before now is not the answer", {1.0, 1.6, 1.6, 1.2, 1.2, 1.7}, 900, 1.45, 1, 1350, N},
    {"a spell over before now and none to come", {1.0, 1.6, 1.6, 1.2, 1.2, 1.3}, 900, 1.45, 0, N, N},
    {"a spell that ends just at now still holds", {1.0, 1.6, 1.6, 1.3, 1.2, 1.3}, 750, 1.45, 1, 225, 750},
    {"one second after its end it does not", {1.0, 1.6, 1.6, 1.3, 1.2, 1.3}, 751, 1.45, 0, N, N},
    {"only the first spell counts", {1.0, 1.6, 1.3, 1.2, 1.7, 1.8}, 0, 1.45, 1, 225, 450},
    {"the end of a spell is rounded up", {1.0, 1.7, 1.6, 1.1, 1.0, 1.0}, 0, 1.47, 1, 201, 678},
    {"a step up within one step", {1.0, 1.0, 5.0, 5.0, 5.0, 5.0}, 301, 3.0, 1, 450, N},
    {"crossing before now inside the step of now", {1.0, 1.0, 5.0, 5.0, 5.0, 5.0}, 500, 3.0, 1, 450, N},
    {"crossing after now inside the step of now", {1.0, 1.0, 5.0, 5.0, 5.0, 5.0}, 440, 3.0, 1, 450, N},
    {"now at the last step", {1.0, 1.0, 1.0, 1.0, 1.0, 1.5}, 1500, 1.45, 1, 1470, N},
    {"a mark below zero", {-2.0, -1.5, -1.0, -0.5, -0.5, -0.5}, 0, -0.75, 1, 750, N},
};
#undef N

static void a_run_passes_a_mark_where_its_straight_line_crosses(void **state)
{
    (void)state;
    for (size_t i = 0; i < COUNT(SINGLE_RUNS); i++) {
        const struct single_run *row = &SINGLE_RUNS[i];
        struct passage_curves curves = curves_of(6, 1, row->stage_m);
        struct passage passage = passage_in(&curves, START + row->now_s, row->mark_m);
        int64_t arrival = row->arrival_s == PASSAGE_NEVER ? PASSAGE_NEVER : START + row->arrival_s;
        int64_t end = row->end_s == PASSAGE_NEVER ? PASSAGE_NEVER : START + row->end_s;
        if (passage.earliest_utc_s != arrival || passage.below_again_earliest_utc_s != end ||
            passage.chance != row->chance)
            fail_msg("%s: arrival %lld for %lld, end %lld for %lld, chance %g", row->shows,
                     (long long)(passage.earliest_utc_s - START), (long long)row->arrival_s,
                     (long long)(passage.below_again_earliest_utc_s - START), (long long)row->end_s, passage.chance);
        assert_int_equal(passage.likely_utc_s, arrival);
        assert_int_equal(passage.latest_utc_s, arrival);
        assert_int_equal(passage.below_again_latest_utc_s, end);
    }
}

/* Each member steps linearly from 0 m through the mark 1 m at its own time, or never. */
static void ramps(size_t member_count, const int64_t arrival_s[], size_t step_count, double stage_m[])
{
    for (size_t step = 0; step < step_count; step++)
        for (size_t member = 0; member < member_count; member++)
            stage_m[step * member_count + member] =
                arrival_s[member] < 0 ? 0.0 : (double)step * STEP / (double)arrival_s[member];
}

static void earliest_likely_latest_are_minimum_middle_and_maximum_over_all_runs(void **state)
{
    (void)state;
    static const struct {
        size_t member_count;
        int64_t arrival_s[5];
        int64_t earliest_s, likely_s, latest_s;
        double chance;
        const char *shows;
    } rows[] = {
        {3, {1200, 600, 900}, 600, 900, 1200, 1.0, "three in any order"},
        {4, {1200, 600, 900, 1450}, 600, 900, 1450, 1.0, "the middle of four is the earlier one"},
        {3, {-1, 600, 900}, 600, 900, -1, 2.0 / 3.0, "one never: it counts as the latest"},
        {3, {-1, 600, -1}, 600, -1, -1, 1.0 / 3.0, "two never: likely is never"},
        {4, {-1, 600, -1, 700}, 600, 700, -1, 0.5, "half arrive: likely is an arrival"},
        {5, {-1, -1, -1, -1, -1}, -1, -1, -1, 0.0, "none arrives"},
        {1, {777}, 777, 777, 777, 1.0, "a lone run"},
    };
    double stage_m[6 * 5];
    for (size_t i = 0; i < COUNT(rows); i++) {
        ramps(rows[i].member_count, rows[i].arrival_s, 6, stage_m);
        struct passage_curves curves = curves_of(6, rows[i].member_count, stage_m);
        struct passage passage = passage_in(&curves, START, 1.0);
        const int64_t got[] = {passage.earliest_utc_s, passage.likely_utc_s, passage.latest_utc_s};
        const int64_t want[] = {rows[i].earliest_s, rows[i].likely_s, rows[i].latest_s};
        for (size_t k = 0; k < 3; k++)
            if (got[k] != (want[k] < 0 ? PASSAGE_NEVER : START + want[k]))
                fail_msg("%s: number %zu is %lld", rows[i].shows, k, (long long)(got[k] - START));
        assert_true(passage.chance == rows[i].chance);
    }
}

static void below_again_spans_the_runs_that_arrive(void **state)
{
    (void)state;
    /* three runs over 1.5 m: 150-750 s, 450-1350 s, never */
    static const double stage_m[] = {1.0, 1.0, 1.0, 2.0, 1.0, 1.1, 2.0, 2.0, 1.2,
                                     1.0, 2.0, 1.3, 1.0, 2.0, 1.3, 1.0, 1.0, 1.2};
    static const size_t orders[][3] = {{0, 1, 2}, {1, 0, 2}, {2, 1, 0}};
    struct passage_curves curves = curves_of(6, 3, stage_m);
    for (size_t i = 0; i < COUNT(orders); i++) {
        curves.member_column = orders[i];
        struct passage passage = passage_in(&curves, START, 1.5);
        assert_int_equal(passage.below_again_earliest_utc_s, START + 750);
        assert_int_equal(passage.below_again_latest_utc_s, START + 1350);
    }
}

static void a_spell_that_outlasts_the_horizon_never_ends(void **state)
{
    (void)state;
    static const double stage_m[] = {1.0, 1.0, 2.0, 2.0, 1.0, 2.0};
    struct passage_curves curves = curves_of(3, 2, stage_m);
    struct passage passage = passage_in(&curves, START, 1.5);
    assert_int_equal(passage.below_again_earliest_utc_s, START + 450);
    assert_int_equal(passage.below_again_latest_utc_s, PASSAGE_NEVER);
}

static void only_the_listed_columns_are_read(void **state)
{
    (void)state;
    static const double stage_m[] = {NOT_A_NUMBER, 1.0, NOT_A_NUMBER, 1.5, NOT_A_NUMBER, 2.0, NOT_A_NUMBER, 2.5};
    static const size_t columns[] = {3, 1};
    struct passage_curves curves = curves_of(2, 2, stage_m);
    curves.member_column = columns;
    curves.row_stride = 4;
    /* column 1 goes 1.0 to 2.0, column 3 from 1.5 to 2.5 */
    struct passage passage = passage_in(&curves, START, 1.75);
    assert_int_equal(passage.earliest_utc_s, START + 75);
    assert_int_equal(passage.latest_utc_s, START + 225);
}

static void the_crossing_of_a_smooth_rise_converges_with_the_square_of_the_step(void **state)
{
    (void)state;
    /* stage = 1 + (t / 7000 s)^2 passes 1.40 at 7000 sqrt(0.4) s; straight lines between steps err by O(step^2), and
     * the whole second adds less than one */
    const double exact_s = 7000.0 * sqrt(0.4);
    static double stage_m[8001];
    double error_s[3];
    static const int64_t steps_s[] = {1600, 800, 400};
    for (size_t k = 0; k < 3; k++) {
        size_t count = (size_t)(8000 / steps_s[k]) + 1;
        for (size_t i = 0; i < count; i++) {
            double t = (double)i * (double)steps_s[k] / 7000.0;
            stage_m[i] = 1.0 + t * t;
        }
        struct passage_curves curves = curves_of(count, 1, stage_m);
        curves.step_s = steps_s[k];
        error_s[k] = fabs((double)(passage_in(&curves, START, 1.40).earliest_utc_s - START) - exact_s);
    }
    assert_true(error_s[0] < 1600.0 * 1600.0 / (8.0 * exact_s) + 1.0); /* chord error f'' h^2 / 8 / f' */
    assert_true(error_s[1] < 800.0 * 800.0 / (8.0 * exact_s) + 1.0);
    assert_true(error_s[2] < 400.0 * 400.0 / (8.0 * exact_s) + 1.0);
}

static void a_thousand_runs_agree_with_counting_them(void **state)
{
    (void)state;
    enum { MEMBERS = PASSAGE_MEMBERS_MAX, STEPS = 9 };
    static double stage_m[STEPS * MEMBERS];
    static size_t columns[MEMBERS];
    for (size_t member = 0; member < MEMBERS; member++) {
        columns[member] = member;
        /* arrival at 101 + 2 (member * 37 mod 1024) seconds: every value once, in scrambled order */
        double arrival_s = 101.0 + 2.0 * (double)(member * 37 % MEMBERS);
        for (size_t step = 0; step < STEPS; step++)
            stage_m[step * MEMBERS + member] = (double)step * STEP / arrival_s;
    }
    struct passage_curves curves = curves_of(STEPS, MEMBERS, stage_m);
    curves.member_column = columns;
    struct passage passage = passage_in(&curves, START, 1.0);
    assert_int_equal(passage.earliest_utc_s, START + 101);
    assert_int_equal(passage.likely_utc_s, START + 101 + 2 * 511);
    assert_int_equal(passage.latest_utc_s, START + 101 + 2 * 1023);
    assert_true(passage.chance == 1.0);
}

static void the_peak_time_of_a_parabola_is_exact_between_samples(void **state)
{
    (void)state;
    /* 2.93 m at 1010 s, falling off by the square: the parabola through three samples is the curve itself */
    double stage_m[8];
    for (size_t i = 0; i < 8; i++)
        stage_m[i] = 2.93 - 3e-7 * pow((double)i * STEP - 1010.0, 2.0);
    struct passage_curves curves = curves_of(8, 1, stage_m);
    struct passage_peak peak = peak_in(&curves, START);
    assert_int_equal(peak.likely_utc_s, START + 1010);
    /* the level is that of the highest sample, 110 s away from the top: what the straight lines reach */
    assert_true(fabs(peak.likely_m - (2.93 - 3e-7 * 110.0 * 110.0)) < 1e-12);
}

static const struct peak_row {
    const char *shows;
    double stage_m[5];
    int64_t now_s;
    double peak_m;
    int64_t peak_s;
} PEAKS[] = {
    {"still rising at the last step: the last step", {1.0, 1.1, 1.2, 1.3, 1.4}, 0, 1.4, 1200},
    {"falling from now on: now", {1.0, 1.5, 1.4, 1.3, 1.2}, 450, 1.45, 450},
    {"falling from a step that is now", {1.0, 1.5, 1.4, 1.3, 1.2}, 600, 1.4, 600},
    {"a peak before now does not count", {1.0, 2.0, 1.2, 1.4, 1.3}, 600, 1.4, 950}, /* 900 + 300 (1.2-1.3)/2/(-0.3) */
    {"level throughout: now", {1.3, 1.3, 1.3, 1.3, 1.3}, 300, 1.3, 300},
    {"a flat top of two: half way", {1.0, 1.2, 1.5, 1.5, 1.1}, 0, 1.5, 750},
    {"of two equal tops the first", {1.0, 1.5, 1.1, 1.5, 1.0}, 0, 1.5, 317}, /* 300 + 300 (1.0-1.1)/2/(-0.9) */
    {"never before now", {1.0, 1.8, 1.9, 1.2, 1.0}, 600, 1.9, 600},          /* the parabola tops at 487 s */
};

static void the_peak_is_the_highest_from_now_on(void **state)
{
    (void)state;
    for (size_t i = 0; i < COUNT(PEAKS); i++) {
        struct passage_curves curves = curves_of(5, 1, PEAKS[i].stage_m);
        struct passage_peak peak = peak_in(&curves, START + PEAKS[i].now_s);
        if (fabs(peak.likely_m - PEAKS[i].peak_m) > 1e-12 || peak.likely_utc_s != START + PEAKS[i].peak_s)
            fail_msg("%s: %.4f m at %lld s", PEAKS[i].shows, peak.likely_m, (long long)(peak.likely_utc_s - START));
    }
}

static void peak_levels_are_minimum_middle_and_maximum_and_an_even_middle_is_the_higher(void **state)
{
    (void)state;
    /* peaks 1.9 at 300 s, 1.6 at 600 s (level before and after), 1.7, 1.2 */
    static const double stage_m[] = {1.0, 1.0, 1.0, 1.2, 1.9, 1.0, 1.1, 1.2, 1.0, 1.6, 1.7, 1.2, 1.0, 1.0, 1.1, 1.2};
    struct passage_curves curves = curves_of(4, 4, stage_m);
    struct passage_peak peak = peak_in(&curves, START);
    assert_true(peak.lowest_m == 1.2 && peak.likely_m == 1.7 && peak.highest_m == 1.9);
    assert_int_equal(peak.likely_utc_s, START + 600);
    curves.member_count = 3;
    curves.row_stride = 4;
    peak = peak_in(&curves, START);
    assert_true(peak.lowest_m == 1.6 && peak.likely_m == 1.7 && peak.highest_m == 1.9);
}

static void the_chance_in_a_window_is_the_share_at_or_above_the_mark_within_it(void **state)
{
    (void)state;
    /* run 0 above 1.5 m in 150-450 s, run 1 in 750-1050 s */
    static const double stage_m[] = {1.0, 1.0, 2.0, 1.0, 1.0, 1.0, 1.0, 2.0, 1.0, 1.0};
    struct passage_curves curves = curves_of(5, 2, stage_m);
    static const struct {
        int64_t from_s, to_s;
        double chance;
        const char *shows;
    } rows[] = {
        {0, 1200, 1.0, "both"},
        {0, 149, 0.0, "ends a second before the first"},
        {0, 150, 0.5, "ends as the first arrives"},
        {450, 460, 0.5, "begins as the first leaves"},
        {451, 749, 0.0, "the lull between"},
        {451, 750, 0.5, "the second arrives at the end"},
        {200, 210, 0.5, "inside one step"},
        {200, 200, 0.5, "one moment"},
        {1051, 1200, 0.0, "after both"},
        {300, 900, 1.0, "at the very tops"},
        {1200, 1200, 0.0, "the last moment of the curves"},
    };
    for (size_t i = 0; i < COUNT(rows); i++)
        if (chance_in(&curves, 1.5, START + rows[i].from_s, START + rows[i].to_s) != rows[i].chance)
            fail_msg("%s", rows[i].shows);
}

static void chance_of_passage_equals_the_chance_from_now_to_the_end(void **state)
{
    (void)state;
    uint64_t seed = 0x5eed1234u;
    print_message("seed %llx\n", (unsigned long long)seed);
    double stage_m[12 * 5];
    for (int round = 0; round < 500; round++) {
        for (size_t i = 0; i < COUNT(stage_m); i++) {
            seed = seed * 6364136223846793005u + 1442695040888963407u;
            stage_m[i] = 1.0 + (double)(seed >> 40) / (double)(1 << 24);
        }
        struct passage_curves curves = curves_of(12, 5, stage_m);
        int64_t now = START + (int64_t)(seed >> 33) % 3300;
        struct passage passage = passage_in(&curves, now, 1.83);
        /* within a microsecond of the end of a spell the two may differ; random stages do not hit it */
        assert_true(passage.chance == chance_in(&curves, 1.83, now, START + 11 * STEP));
        assert_true(passage.earliest_utc_s <= passage.likely_utc_s && passage.likely_utc_s <= passage.latest_utc_s);
        struct passage_peak peak = peak_in(&curves, now);
        assert_true((peak.highest_m >= 1.83) == (passage.earliest_utc_s != PASSAGE_NEVER));
        assert_true(peak.likely_utc_s >= now);
    }
}

static void what_cannot_be_answered_is_refused_and_writes_nothing(void **state)
{
    (void)state;
    static const double stage_m[] = {1.0, 1.1, 1.2, 1.3, 1.4, 1.5};
    static const double holed_m[] = {1.0, 1.1, 1.2, NOT_A_NUMBER, 1.4, 1.5};
    static const double open_m[] = {HUGE_VAL, 1.1, 1.2, 1.3, 1.4, 1.5};
    static const size_t wrong_column[] = {1};
    const struct passage_curves good = curves_of(6, 1, stage_m);
    struct {
        const char *shows;
        struct passage_curves curves;
        int64_t now;
        double mark_m;
    } rows[10];
    for (size_t i = 0; i < COUNT(rows); i++) {
        rows[i].curves = good;
        rows[i].now = START;
        rows[i].mark_m = 1.2;
    }
    rows[0].shows = "no member", rows[0].curves.member_count = 0;
    rows[1].shows = "too many", rows[1].curves.member_count = PASSAGE_MEMBERS_MAX + 1;
    rows[2].shows = "now before the curves", rows[2].now = START - 1;
    rows[3].shows = "now after the curves", rows[3].now = START + 1501;
    rows[4].shows = "mark not finite", rows[4].mark_m = NOT_A_NUMBER;
    rows[5].shows = "stage not a number", rows[5].curves.stage_m = holed_m;
    rows[6].shows = "first stage infinite", rows[6].curves.stage_m = open_m;
    rows[7].shows = "no step of time", rows[7].curves.step_s = 0;
    rows[8].shows = "column outside the row", rows[8].curves.member_column = wrong_column;
    rows[9].shows = "times beyond what fits", rows[9].curves.step_s = INT64_MAX / 2;
    for (size_t i = 0; i < COUNT(rows); i++) {
        struct passage passage = {.chance = -7.0};
        struct passage_peak peak = {.likely_m = -7.0};
        double chance = -7.0;
        const struct passage_curves *curves = &rows[i].curves;
        if (passage_of_mark(curves, rows[i].now, rows[i].mark_m, &passage) != FW_BAD_INPUT || passage.chance != -7.0)
            fail_msg("%s: passage", rows[i].shows);
        if (i != 4 && /* a peak has no mark */
            (passage_peak_after(curves, rows[i].now, &peak) != FW_BAD_INPUT || peak.likely_m != -7.0))
            fail_msg("%s: peak", rows[i].shows);
        if (passage_chance_between(curves, rows[i].mark_m, rows[i].now, START + 1500, &chance) != FW_BAD_INPUT ||
            chance != -7.0)
            fail_msg("%s: chance", rows[i].shows);
    }
    struct passage_curves no_step = good;
    no_step.step_count = 0;
    struct passage passage;
    assert_int_equal(passage_of_mark(&no_step, START, 1.2, &passage), FW_BAD_INPUT);
    double chance;
    assert_int_equal(passage_chance_between(&good, 1.2, START + 600, START + 599, &chance), FW_BAD_INPUT);
    assert_int_equal(passage_chance_between(&good, 1.2, START + 600, START + 1501, &chance), FW_BAD_INPUT);
    /* a hole that only the straight line to the window's edge touches */
    struct passage_curves holed = good;
    holed.stage_m = holed_m;
    assert_int_equal(passage_chance_between(&holed, 1.2, START + 901, START + 1300, &chance), FW_BAD_INPUT);
    assert_int_equal(passage_chance_between(&holed, 1.2, START + 300, START + 601, &chance), FW_BAD_INPUT);
    assert_int_equal(passage_chance_between(&holed, 1.2, START + 300, START + 600, &chance), FW_OK);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(a_run_passes_a_mark_where_its_straight_line_crosses),
        cmocka_unit_test(earliest_likely_latest_are_minimum_middle_and_maximum_over_all_runs),
        cmocka_unit_test(below_again_spans_the_runs_that_arrive),
        cmocka_unit_test(a_spell_that_outlasts_the_horizon_never_ends),
        cmocka_unit_test(only_the_listed_columns_are_read),
        cmocka_unit_test(the_crossing_of_a_smooth_rise_converges_with_the_square_of_the_step),
        cmocka_unit_test(a_thousand_runs_agree_with_counting_them),
        cmocka_unit_test(the_peak_time_of_a_parabola_is_exact_between_samples),
        cmocka_unit_test(the_peak_is_the_highest_from_now_on),
        cmocka_unit_test(peak_levels_are_minimum_middle_and_maximum_and_an_even_middle_is_the_higher),
        cmocka_unit_test(the_chance_in_a_window_is_the_share_at_or_above_the_mark_within_it),
        cmocka_unit_test(chance_of_passage_equals_the_chance_from_now_to_the_end),
        cmocka_unit_test(what_cannot_be_answered_is_refused_and_writes_nothing),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
