/* SPDX-License-Identifier: MIT */
#include "engine/quality.h"

#include "tests/engine/quality_record.h"

/* ---- frozen ---- */

static void before_the_freeze(struct record *record)
{
    add_line(record, AT(0, 10), AT(0, 55), 300, 2.90, 2.735); /* 0.22 m/h down; 00:50 reads 2.75 */
}

static void a_freeze_on_a_moving_river_is_flagged_from_its_limit_on(void **state)
{
    (void)state;
    struct record record = {0};
    before_the_freeze(&record);
    assert_true(record.samples[record.count - 1].value == 2.75);
    for (int64_t now = AT(0, 55); now < AT(1, 30); now += 300) {
        add(&record, now, 2.75);
        judge_at(&record, &RULES, now);
        bool is_frozen = now >= AT(1, 10); /* 20 min after 00:50 */
        assert_int_equal(newest_news(&record), is_frozen ? AT(0, 50) : now);
        for (int64_t utc_s = AT(0, 55); utc_s <= now; utc_s += 300) {
            if (is_frozen)
                assert_verdict(&record, utc_s, QUALITY_SUSPECT, QUALITY_KEEP_OUT, QUALITY_FROZEN);
            else
                assert_verdict(&record, utc_s, QUALITY_PASS, QUALITY_USE, 0);
        }
        assert_verdict(&record, AT(0, 50), QUALITY_PASS, QUALITY_USE, 0);
    }
}

static void the_step_that_ends_a_freeze_is_neither_spike_nor_too_fast(void **state)
{
    (void)state;
    struct quality_rules tight = RULES;
    tight.fastest_fall_per_s =
        0.5 / 3600.0; /* 2.75 to 2.57 is 2.2 m/h in 5 min, 0.27 m/h in the 40 min of the freeze */
    struct record record = {0};
    before_the_freeze(&record);
    for (int64_t utc_s = AT(0, 55); utc_s < AT(1, 30); utc_s += 300)
        add(&record, utc_s, 2.75);
    add(&record, AT(1, 30), 2.57);
    judge_at(&record, &tight, AT(1, 30));
    assert_verdict(&record, AT(1, 30), QUALITY_PASS, QUALITY_USE, 0);
    assert_verdict(&record, AT(1, 25), QUALITY_SUSPECT, QUALITY_KEEP_OUT, QUALITY_FROZEN);
    /* upwards too: frozen for 40 min on a rise of 3 m/h, then 1.9 m at once */
    struct record rise = {0};
    add_line(&rise, AT(0, 10), AT(0, 55), 300, 1.00, 3.25);
    double frozen_m = rise.samples[rise.count - 1].value;
    for (int64_t utc_s = AT(0, 55); utc_s < AT(1, 30); utc_s += 300)
        add(&rise, utc_s, frozen_m);
    add(&rise, AT(1, 30), frozen_m + 1.9);
    judge_at(&rise, &RULES, AT(1, 30));
    assert_verdict(&rise, AT(1, 30), QUALITY_PASS, QUALITY_USE, 0);
}

static void a_freeze_too_short_to_be_flagged_ends_without_a_spike_too(void **state)
{
    (void)state;
    struct record rise = {0};
    add_line(&rise, AT(0, 10), AT(0, 55), 300, 1.00, 3.25);
    double frozen_m = rise.samples[rise.count - 1].value;
    add(&rise, AT(0, 55), frozen_m);
    add(&rise, AT(1, 0), frozen_m);
    add(&rise, AT(1, 5), frozen_m + 0.75); /* 9 m/h in 5 min, 3 m/h since 00:50 */
    judge_at(&rise, &RULES, AT(1, 5));
    assert_all_pass(&rise);
}

static void a_spike_that_ends_a_freeze_is_a_spike_all_the_same(void **state)
{
    (void)state;
    struct record record = {0};
    before_the_freeze(&record);
    for (int64_t utc_s = AT(0, 55); utc_s < AT(1, 30); utc_s += 300)
        add(&record, utc_s, 2.75);
    add(&record, AT(1, 30), 8.5);
    judge_at(&record, &RULES, AT(1, 30));
    assert_verdict(&record, AT(1, 30), QUALITY_SUSPECT, QUALITY_HOLD, QUALITY_RISE_TOO_FAST | QUALITY_UNCONFIRMED);
    add(&record, AT(1, 35), 2.55);
    judge_at(&record, &RULES, AT(1, 35));
    assert_verdict(&record, AT(1, 30), QUALITY_FAIL, QUALITY_KEEP_OUT, QUALITY_RISE_TOO_FAST | QUALITY_DENIED);
    assert_verdict(&record, AT(1, 35), QUALITY_PASS, QUALITY_USE, 0);
}

static void the_interval_of_a_logger_does_not_change_when_a_freeze_is_flagged(void **state)
{
    (void)state;
    static const int64_t intervals_s[] = {60, 120, 300, 600};
    for (size_t k = 0; k < COUNT(intervals_s); k++) {
        struct record record = {0};
        add_line(&record, AT(0, 0), AT(1, 0), intervals_s[k], 3.00, 2.70); /* 0.3 m/h */
        int64_t first = record.samples[record.count - 1].observed_utc_s;
        double value = record.samples[record.count - 1].value;
        /* on a fine logger the reading may have stood before the hour: the stretch begins with its first */
        for (size_t i = record.count; i-- > 0 && record.samples[i].value == value;)
            first = record.samples[i].observed_utc_s;
        for (int64_t utc_s = AT(1, 0); utc_s < AT(1, 40); utc_s += intervals_s[k])
            add(&record, utc_s, value);
        for (size_t i = 0; i < record.count; i++) {
            struct record upto = record;
            upto.count = i + 1;
            int64_t now = record.samples[i].observed_utc_s;
            judge_at(&upto, &RULES, now);
            assert_int_equal((upto.verdicts[i].reasons & QUALITY_FROZEN) != 0, now - first >= 20 * MINUTE);
        }
    }
}

static void a_slow_river_is_given_longer_before_it_is_called_frozen(void **state)
{
    (void)state;
    /* 0.12 m/h is one centimetre in 5 min: of two in 10 min one may be rounding, and the other alone shows three
     * resolutions of movement only after more than 30 min */
    struct record record = {0};
    add_line(&record, AT(0, 0), AT(1, 0), 300, 2.00, 1.88);
    const int64_t first = record.samples[record.count - 1].observed_utc_s;
    const double value = record.samples[record.count - 1].value;
    for (int64_t utc_s = AT(1, 0); utc_s < AT(1, 45); utc_s += 300) {
        add(&record, utc_s, value);
        judge_at(&record, &RULES, utc_s);
        assert_int_equal(newest_news(&record), utc_s - first > 30 * MINUTE ? first : utc_s);
    }
}

static void a_low_flat_recession_is_not_frozen_until_the_long_limit(void **state)
{
    (void)state;
    struct record record = {0};
    add_line(&record, AT(0, 0), AT(2, 0), 900, 1.06, 1.02); /* 0.02 m/h: not moving */
    int64_t first = record.samples[record.count - 1].observed_utc_s;
    for (int64_t utc_s = AT(2, 0); utc_s < AT(12, 0); utc_s += 900)
        add(&record, utc_s, record.samples[record.count - 1].value);
    while (record.samples[record.count - 1].value == record.samples[record.count - 2].value &&
           record.samples[record.count - 1].observed_utc_s - first > 6 * 3600 - 900)
        record.count--;
    judge_at(&record, &RULES, record.samples[record.count - 1].observed_utc_s);
    assert_all_pass(&record);
    add(&record, first + 6 * 3600, record.samples[record.count - 1].value);
    judge_at(&record, &RULES, first + 6 * 3600);
    assert_int_equal(newest_news(&record), first);
    assert_verdict(&record, first + 6 * 3600, QUALITY_SUSPECT, QUALITY_KEEP_OUT, QUALITY_FROZEN);
    /* from a still river a spike is a spike, however long it stood: rates go by the last reading, not the first */
    add(&record, first + 6 * 3600 + 900, 6.91);
    judge_at(&record, &RULES, first + 6 * 3600 + 900);
    assert_int_equal(verdict_of(&record, first + 6 * 3600 + 900)->use, QUALITY_HOLD);
}

static void rounded_peaks_are_not_frozen(void **state)
{
    (void)state;
    /* parabolas through 2.93 m that stand on one reading for 10 to 40 min, read at 1, 5 and 15 min to the centimetre;
     * in none is a reading called frozen while it stands there */
    static const int64_t intervals_s[] = {60, 300, 900};
    int peaks_with_long_tops = 0;
    for (size_t k = 0; k < COUNT(intervals_s); k++)
        for (int width_min = 10; width_min <= 40; width_min += 3)
            for (int offset_s = 0; offset_s < 900; offset_s += 120) {
                struct record record = {0};
                const int64_t top = AT(12, 0) + offset_s;
                const double half_s = 30.0 * width_min;
                int64_t same_since = 0, longest_s = 0;
                for (int64_t utc_s = AT(10, 0); utc_s < AT(14, 0); utc_s += intervals_s[k]) {
                    double away = (double)(utc_s - top) / half_s;
                    add(&record, utc_s, to_centimetre(2.9349 - 0.0099 * away * away));
                    size_t last = record.count - 1;
                    if (last == 0 || record.samples[last].value != record.samples[last - 1].value)
                        same_since = utc_s;
                    longest_s = utc_s - same_since > longest_s ? utc_s - same_since : longest_s;
                }
                peaks_with_long_tops += longest_s >= 20 * MINUTE;
                struct quality_rules rules = RULES;
                rules.lowest = -HUGE_VAL;
                judge_at(&record, &rules, AT(14, 0));
                for (size_t i = 0; i < record.count; i++)
                    if (record.verdicts[i].reasons & QUALITY_FROZEN)
                        fail_msg("width %d min, every %lld s, offset %d s: frozen at reading %zu", width_min,
                                 (long long)intervals_s[k], offset_s, i);
            }
    assert_true(peaks_with_long_tops > 100); /* the question was put */
}

static void the_same_reading_on_both_sides_of_an_outage_is_no_freeze(void **state)
{
    (void)state;
    struct record record = {0};
    add_line(&record, AT(0, 0), AT(1, 0), 300, 2.00, 2.60);
    double value = record.samples[record.count - 1].value;
    add(&record, AT(1, 55), value); /* risen and fallen again, unseen */
    add(&record, AT(2, 0), value - 0.02);
    judge_at(&record, &RULES, AT(2, 0));
    assert_all_pass(&record);
}

static void a_hand_reading_beside_an_unmoved_sensor_shows_it_frozen(void **state)
{
    (void)state;
    struct record record = {0};
    for (int64_t utc_s = AT(2, 0); utc_s < AT(3, 35); utc_s += 300)
        add(&record, utc_s, 2.34); /* a still river, as far as the sensor knows */
    judge_at(&record, &RULES, AT(3, 30));
    assert_all_pass(&record);
    add_hand(&record, AT(3, 35), 2.90);
    add(&record, AT(3, 40), 2.34);
    judge_at(&record, &RULES, AT(3, 40));
    assert_verdict(&record, AT(3, 40), QUALITY_SUSPECT, QUALITY_KEEP_OUT, QUALITY_FROZEN);
    assert_int_equal(newest_news(&record), AT(3, 35));
    /* alive again, it is measured from the hand reading */
    add(&record, AT(3, 45), 3.05);
    judge_at(&record, &RULES, AT(3, 45));
    assert_verdict(&record, AT(3, 45), QUALITY_PASS, QUALITY_USE, 0);

    /* five centimetres between board and sensor are no movement */
    struct record offset = {0};
    for (int64_t utc_s = AT(2, 0); utc_s < AT(3, 35); utc_s += 300)
        add(&offset, utc_s, 2.34);
    add_hand(&offset, AT(3, 35), 2.29);
    add(&offset, AT(3, 40), 2.34);
    judge_at(&offset, &RULES, AT(3, 40));
    assert_all_pass(&offset);
    /* nor soon after the stretch began, when the moving rate alone explains less */
    struct record early = {0};
    add(&early, AT(3, 0), 2.34);
    add(&early, AT(3, 5), 2.34);
    add_hand(&early, AT(3, 7), 2.29);
    add_line(&early, AT(3, 10), AT(3, 40), 300, 2.34, 2.34);
    judge_at(&early, &RULES, AT(3, 35));
    assert_all_pass(&early);
    /* a hand reading far enough off shows it without any limit on rates */
    struct quality_rules no_rates = RULES;
    no_rates.fastest_rise_per_s = no_rates.fastest_fall_per_s = HUGE_VAL;
    early.samples[2].value = 2.25;
    judge_at(&early, &no_rates, AT(3, 35));
    assert_int_equal(newest_news(&early), AT(3, 7));
    assert_verdict(&early, AT(3, 35), QUALITY_SUSPECT, QUALITY_KEEP_OUT, QUALITY_FROZEN);
}

static void a_sensor_back_at_its_old_reading_after_a_hand_reading_far_away_is_frozen(void **state)
{
    (void)state;
    struct record record = {0};
    add_line(&record, AT(2, 20), AT(2, 55), 300, 2.37, 2.33);
    double value = record.samples[record.count - 1].value;
    add_hand(&record, AT(4, 5), 3.33);
    for (int64_t utc_s = AT(4, 10); utc_s < AT(4, 40); utc_s += 300)
        add(&record, utc_s, value);
    judge_at(&record, &RULES, AT(4, 35));
    for (int64_t utc_s = AT(4, 10); utc_s < AT(4, 40); utc_s += 300)
        assert_verdict(&record, utc_s, QUALITY_SUSPECT, QUALITY_KEEP_OUT, QUALITY_FROZEN);
    assert_int_equal(newest_news(&record), AT(4, 5));
}

/* ---- the whole invented night ---- */

/* Stage of the scenario's gauge, straight lines between its knots; hours run on past midnight. */
static double night_stage_m(int64_t utc_s)
{
    static const struct {
        int hour, minute;
        double stage_m;
    } knots[] = {{18, 0, 1.02},  {19, 30, 1.05}, {20, 30, 1.22}, {21, 30, 1.75}, {22, 30, 2.42},
                 {23, 10, 2.80}, {23, 40, 2.93}, {24, 10, 2.90}, {25, 10, 2.66}, {26, 10, 2.40},
                 {26, 45, 2.33}, {27, 10, 2.48}, {27, 35, 2.90}, {28, 0, 3.28},  {28, 20, 3.41},
                 {28, 40, 3.38}, {29, 40, 3.02}, {31, 0, 2.55},  {33, 0, 2.02},  {38, 0, 1.40}};
    for (size_t i = 1; i < COUNT(knots); i++) {
        int64_t from = AT(knots[i - 1].hour, knots[i - 1].minute), to = AT(knots[i].hour, knots[i].minute);
        if (utc_s <= to)
            return knots[i - 1].stage_m +
                   (knots[i].stage_m - knots[i - 1].stage_m) * (double)(utc_s - from) / (double)(to - from);
    }
    return knots[COUNT(knots) - 1].stage_m;
}

static bool is_in_outage(int64_t utc_s)
{
    return utc_s >= AT(26, 55) && utc_s <= AT(28, 50);
}

static void fill_night(struct record *record)
{
    for (int64_t utc_s = AT(18, 0); utc_s < AT(38, 0); utc_s += utc_s < AT(20, 45) ? 900 : 300) {
        double stage_m = to_centimetre(night_stage_m(utc_s));
        if (utc_s >= AT(24, 50) && utc_s <= AT(25, 25))
            stage_m = 2.75;
        if (utc_s == AT(22, 35))
            stage_m = 6.91;
        if (utc_s == AT(27, 35))
            add_hand(record, utc_s, 2.90);
        else if (utc_s == AT(28, 5))
            add_hand(record, utc_s, 3.33);
        else if (!is_in_outage(utc_s))
            add(record, utc_s, stage_m);
    }
}

static void the_night_as_written_raises_the_spike_and_the_freeze_and_nothing_else(void **state)
{
    (void)state;
    static struct record record, upto;
    record.count = 0;
    fill_night(&record);
    for (size_t i = 0; i < record.count; i++) {
        upto = record;
        upto.count = i + 1;
        const int64_t now = record.samples[i].observed_utc_s;
        judge_at(&upto, &RULES, now);
        for (size_t k = 0; k <= i; k++) {
            const int64_t utc_s = record.samples[k].observed_utc_s;
            if (utc_s == AT(22, 35))
                assert_verdict(&upto, utc_s, now > utc_s ? QUALITY_FAIL : QUALITY_SUSPECT,
                               now > utc_s ? QUALITY_KEEP_OUT : QUALITY_HOLD,
                               QUALITY_RISE_TOO_FAST | (now > utc_s ? QUALITY_DENIED : QUALITY_UNCONFIRMED));
            else if (utc_s > AT(24, 50) && utc_s <= AT(25, 25) && now >= AT(25, 10))
                assert_verdict(&upto, utc_s, QUALITY_SUSPECT, QUALITY_KEEP_OUT, QUALITY_FROZEN);
            else
                assert_verdict(&upto, utc_s, QUALITY_PASS, QUALITY_USE, record.samples[k].is_hand ? QUALITY_HAND : 0);
        }
    }
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(a_slow_river_is_given_longer_before_it_is_called_frozen),
        cmocka_unit_test(a_freeze_on_a_moving_river_is_flagged_from_its_limit_on),
        cmocka_unit_test(the_step_that_ends_a_freeze_is_neither_spike_nor_too_fast),
        cmocka_unit_test(a_freeze_too_short_to_be_flagged_ends_without_a_spike_too),
        cmocka_unit_test(a_spike_that_ends_a_freeze_is_a_spike_all_the_same),
        cmocka_unit_test(the_interval_of_a_logger_does_not_change_when_a_freeze_is_flagged),
        cmocka_unit_test(a_low_flat_recession_is_not_frozen_until_the_long_limit),
        cmocka_unit_test(rounded_peaks_are_not_frozen),
        cmocka_unit_test(the_same_reading_on_both_sides_of_an_outage_is_no_freeze),
        cmocka_unit_test(a_hand_reading_beside_an_unmoved_sensor_shows_it_frozen),
        cmocka_unit_test(a_sensor_back_at_its_old_reading_after_a_hand_reading_far_away_is_frozen),
        cmocka_unit_test(the_night_as_written_raises_the_spike_and_the_freeze_and_nothing_else),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
