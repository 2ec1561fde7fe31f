/* SPDX-License-Identifier: MIT */
#include "engine/quality.h"

#include "tests/engine/quality_record.h"

/* ---- range ---- */

static void readings_outside_the_range_fail_and_drive_nothing(void **state)
{
    (void)state;
    struct record record = {0};
    add(&record, AT(1, 0), 0.0);
    add(&record, AT(1, 15), -0.01);
    add(&record, AT(1, 30), 9.0);
    add(&record, AT(1, 45), 9.01);
    add_hand(&record, AT(1, 50), 19.0);
    struct quality_rules rules = RULES;
    rules.fastest_rise_per_s = HUGE_VAL;
    judge_at(&record, &rules, AT(2, 0));
    assert_verdict(&record, AT(1, 0), QUALITY_PASS, QUALITY_USE, 0);
    assert_verdict(&record, AT(1, 15), QUALITY_FAIL, QUALITY_KEEP_OUT, QUALITY_OUT_OF_RANGE);
    assert_verdict(&record, AT(1, 30), QUALITY_PASS, QUALITY_USE, 0);
    assert_verdict(&record, AT(1, 45), QUALITY_FAIL, QUALITY_KEEP_OUT, QUALITY_OUT_OF_RANGE);
    assert_verdict(&record, AT(1, 50), QUALITY_FAIL, QUALITY_KEEP_OUT, QUALITY_OUT_OF_RANGE | QUALITY_HAND);
}

static void with_no_limit_set_everything_passes(void **state)
{
    (void)state;
    static const struct quality_rules none = {-HUGE_VAL, HUGE_VAL, HUGE_VAL, HUGE_VAL, HUGE_VAL,
                                              HUGE_VAL,  HUGE_VAL, HUGE_VAL, 0.0,      HUGE_VAL};
    struct record record = {0};
    for (int i = 0; i < 200; i++)
        add(&record, AT(0, i), i % 7 == 3 ? 1e6 : i < 100 ? 1.0 : -5.0 * i);
    judge_at(&record, &none, AT(0, 0));
    assert_all_pass(&record);
}

/* ---- rates: time, never samples ---- */

static void a_logger_that_switches_interval_on_a_rise_raises_nothing(void **state)
{
    (void)state;
    struct record record = {0};
    add_line(&record, AT(20, 0), AT(20, 30), 900, 1.13, 1.22);
    add_line(&record, AT(20, 30), AT(20, 45), 900, 1.22, 1.3525);
    add_line(&record, AT(20, 45), AT(21, 30), 300, 1.3525, 1.75);
    add_line(&record, AT(21, 30), AT(22, 0), 300, 1.75, 2.085);
    add_line(&record, AT(22, 0), AT(22, 30), 60, 2.085, 2.42);
    for (int64_t now = AT(20, 0); now < AT(23, 0); now += 60) {
        judge_at(&record, &RULES, now);
        for (size_t i = 0; i < record.count && record.samples[i].observed_utc_s <= now; i++)
            assert_verdict(&record, record.samples[i].observed_utc_s, QUALITY_PASS, QUALITY_USE, 0);
    }
}

static void rounding_to_the_resolution_is_never_a_rate(void **state)
{
    (void)state;
    /* 0.69 m/h against limits of 0.70: at 1 min the rounded steps are 1 and 2 cm, 0.6 and 1.2 m/h */
    struct quality_rules tight = RULES;
    tight.fastest_rise_per_s = tight.fastest_fall_per_s = 0.70 / 3600.0;
    struct record record = {0};
    add_line(&record, AT(1, 0), AT(3, 0), 60, 1.0, 1.0 + 0.69 * 2.0);
    add_line(&record, AT(3, 0), AT(5, 0), 60, 1.0 + 0.69 * 2.0, 1.0);
    judge_at(&record, &tight, AT(5, 0));
    assert_all_pass(&record);
}

static void a_rate_is_held_against_its_limit_over_the_true_time(void **state)
{
    (void)state;
    static const struct {
        const char *shows;
        int64_t after_s;
        double step;
        unsigned reasons;
    } rows[] = {
        /* 4 m/h: 0.333 m in 5 min, 1 m in 15 min, each and one resolution */
        {"just within in 5 min", 300, 0.343, 0},
        {"just beyond in 5 min", 300, 0.344, QUALITY_RISE_TOO_FAST | QUALITY_UNCONFIRMED},
        {"the same rise in 15 min is none", 900, 0.344, 0},
        {"just within in 15 min", 900, 1.009, 0},
        {"just beyond in 15 min", 900, 1.011, QUALITY_RISE_TOO_FAST | QUALITY_UNCONFIRMED},
        {"after an outage of 100 min", 6000, 6.6, 0},
        /* 2 m/h down */
        {"fall just within", 300, -0.176, 0},
        {"fall just beyond", 300, -0.177, QUALITY_FALL_TOO_FAST},
        {"fall after an outage", 3600, -1.9, 0},
    };
    for (size_t i = 0; i < COUNT(rows); i++) {
        struct record record = {0};
        add(&record, AT(1, 0), 2.113);
        add(&record, AT(1, 0) + rows[i].after_s, 2.113 + rows[i].step);
        judge_at(&record, &RULES, AT(1, 0) + rows[i].after_s);
        if (record.verdicts[1].reasons != rows[i].reasons)
            fail_msg("%s: %x", rows[i].shows, record.verdicts[1].reasons);
    }
}

/* ---- spikes and walls of water ---- */

static void before_the_spike(struct record *record)
{
    add_line(record, AT(22, 15), AT(22, 35), 300, 2.26, 2.50);
}

static void a_single_spike_is_held_and_denied_by_the_next_reading(void **state)
{
    (void)state;
    struct record record = {0};
    before_the_spike(&record);
    add(&record, AT(22, 35), 6.91);
    judge_at(&record, &RULES, AT(22, 36));
    assert_verdict(&record, AT(22, 35), QUALITY_SUSPECT, QUALITY_HOLD, QUALITY_RISE_TOO_FAST | QUALITY_UNCONFIRMED);
    assert_int_equal(newest_news(&record), AT(22, 30));

    add(&record, AT(22, 40), 2.53);
    judge_at(&record, &RULES, AT(22, 40));
    assert_verdict(&record, AT(22, 35), QUALITY_FAIL, QUALITY_KEEP_OUT, QUALITY_RISE_TOO_FAST | QUALITY_DENIED);
    assert_verdict(&record, AT(22, 40), QUALITY_PASS, QUALITY_USE, 0);
    /* whatever comes later */
    add_line(&record, AT(22, 45), AT(23, 40), 300, 2.57, 2.93);
    judge_at(&record, &RULES, AT(23, 40));
    assert_verdict(&record, AT(22, 35), QUALITY_FAIL, QUALITY_KEEP_OUT, QUALITY_RISE_TOO_FAST | QUALITY_DENIED);
}

static void a_spike_is_denied_without_any_limit_on_falls(void **state)
{
    (void)state;
    struct quality_rules rules = RULES;
    rules.fastest_fall_per_s = HUGE_VAL;
    struct record record = {0};
    before_the_spike(&record);
    add(&record, AT(22, 35), 6.91);
    add(&record, AT(22, 40), 2.53);
    judge_at(&record, &rules, AT(22, 40));
    assert_verdict(&record, AT(22, 35), QUALITY_FAIL, QUALITY_KEEP_OUT, QUALITY_RISE_TOO_FAST | QUALITY_DENIED);
}

static void a_jump_of_two_readings_counts_at_once_with_its_second(void **state)
{
    (void)state;
    struct record record = {0};
    before_the_spike(&record);
    add(&record, AT(22, 35), 4.10);
    judge_at(&record, &RULES, AT(22, 36));
    assert_verdict(&record, AT(22, 35), QUALITY_SUSPECT, QUALITY_HOLD, QUALITY_RISE_TOO_FAST | QUALITY_UNCONFIRMED);
    add(&record, AT(22, 40), 4.22);
    judge_at(&record, &RULES, AT(22, 40));
    assert_verdict(&record, AT(22, 35), QUALITY_PASS, QUALITY_USE, QUALITY_RISE_TOO_FAST | QUALITY_CONFIRMED);
    assert_verdict(&record, AT(22, 40), QUALITY_PASS, QUALITY_USE, 0);
}

static void a_wall_of_water_that_goes_on_too_fast_is_borne_out_step_by_step(void **state)
{
    (void)state;
    struct record record = {0};
    before_the_spike(&record);
    add(&record, AT(22, 35), 4.10);
    add(&record, AT(22, 40), 6.00);
    judge_at(&record, &RULES, AT(22, 40));
    assert_verdict(&record, AT(22, 35), QUALITY_PASS, QUALITY_USE, QUALITY_RISE_TOO_FAST | QUALITY_CONFIRMED);
    assert_verdict(&record, AT(22, 40), QUALITY_SUSPECT, QUALITY_HOLD, QUALITY_RISE_TOO_FAST | QUALITY_UNCONFIRMED);
    add(&record, AT(22, 45), 6.10);
    judge_at(&record, &RULES, AT(22, 45));
    assert_verdict(&record, AT(22, 40), QUALITY_PASS, QUALITY_USE, QUALITY_RISE_TOO_FAST | QUALITY_CONFIRMED);
}

static void a_rise_that_keeps_half_is_borne_out_and_one_that_keeps_less_is_not(void **state)
{
    (void)state;
    for (int keeps_half = 0; keeps_half < 2; keeps_half++) {
        struct record record = {0};
        add(&record, AT(22, 30), 2.00);
        add(&record, AT(22, 35), 2.40);
        add(&record, AT(22, 40), keeps_half ? 2.26 : 2.19);
        judge_at(&record, &RULES, AT(22, 40));
        assert_int_equal(verdict_of(&record, AT(22, 35))->reasons,
                         QUALITY_RISE_TOO_FAST | (keeps_half ? QUALITY_CONFIRMED : QUALITY_DENIED));
        assert_verdict(&record, AT(22, 40), QUALITY_PASS, QUALITY_USE, 0);
    }
}

static void a_lone_jump_counts_unconfirmed_when_the_limit_has_passed(void **state)
{
    (void)state;
    struct record record = {0};
    before_the_spike(&record);
    add(&record, AT(22, 35), 4.10);
    judge_at(&record, &RULES, AT(22, 50) - 1);
    assert_verdict(&record, AT(22, 35), QUALITY_SUSPECT, QUALITY_HOLD, QUALITY_RISE_TOO_FAST | QUALITY_UNCONFIRMED);
    judge_at(&record, &RULES, AT(22, 50));
    assert_verdict(&record, AT(22, 35), QUALITY_SUSPECT, QUALITY_USE,
                   QUALITY_RISE_TOO_FAST | QUALITY_COUNTS_UNCONFIRMED);
    assert_int_equal(newest_news(&record), AT(22, 35));
}

static void a_later_reading_changes_the_mind_about_a_jump_that_counted(void **state)
{
    (void)state;
    struct record record = {0};
    before_the_spike(&record);
    add(&record, AT(22, 35), 4.10);
    add(&record, AT(23, 15), 2.70); /* the first beyond the limit is back on the old course */
    judge_at(&record, &RULES, AT(23, 15));
    assert_verdict(&record, AT(22, 35), QUALITY_FAIL, QUALITY_KEEP_OUT, QUALITY_RISE_TOO_FAST | QUALITY_DENIED);
    assert_verdict(&record, AT(23, 15), QUALITY_PASS, QUALITY_USE, 0);
    record.samples[record.count - 1].value = 4.30;
    judge_at(&record, &RULES, AT(23, 15));
    assert_verdict(&record, AT(22, 35), QUALITY_PASS, QUALITY_USE, QUALITY_RISE_TOO_FAST | QUALITY_CONFIRMED);
    /* a delayed reading from within the limit decides too */
    record.samples[record.count - 1] = (struct quality_sample){.observed_utc_s = AT(22, 45), .value = 2.61};
    judge_at(&record, &RULES, AT(23, 20));
    assert_verdict(&record, AT(22, 35), QUALITY_FAIL, QUALITY_KEEP_OUT, QUALITY_RISE_TOO_FAST | QUALITY_DENIED);
}

static void two_high_readings_that_disagree_stay_held_and_are_denied_together(void **state)
{
    (void)state;
    struct record record = {0};
    before_the_spike(&record);
    add(&record, AT(22, 35), 8.91);
    add(&record, AT(22, 40), 4.40); /* less than half of the rise, and not the old course either */
    judge_at(&record, &RULES, AT(22, 40));
    assert_int_equal(verdict_of(&record, AT(22, 35))->use, QUALITY_HOLD);
    assert_int_equal(verdict_of(&record, AT(22, 40))->use, QUALITY_HOLD);
    add(&record, AT(22, 45), 2.56);
    judge_at(&record, &RULES, AT(22, 45));
    assert_int_equal(verdict_of(&record, AT(22, 35))->reasons, QUALITY_RISE_TOO_FAST | QUALITY_DENIED);
    assert_int_equal(verdict_of(&record, AT(22, 40))->reasons, QUALITY_RISE_TOO_FAST | QUALITY_DENIED);
    assert_verdict(&record, AT(22, 45), QUALITY_PASS, QUALITY_USE, 0);
}

static void a_step_that_is_left_too_fast_is_not_borne_out(void **state)
{
    (void)state;
    /* more than half of the step is kept, but the way back from it is too fast for any river */
    struct record record = {0};
    before_the_spike(&record);
    add(&record, AT(22, 35), 8.90);
    add(&record, AT(22, 40), 6.00);
    judge_at(&record, &RULES, AT(22, 40));
    assert_verdict(&record, AT(22, 35), QUALITY_SUSPECT, QUALITY_HOLD, QUALITY_RISE_TOO_FAST | QUALITY_UNCONFIRMED);
    struct record fall = {0};
    add(&fall, AT(1, 0), 2.80);
    add(&fall, AT(1, 5), 0.80);
    add(&fall, AT(1, 10), 1.75);
    judge_at(&fall, &RULES, AT(1, 10));
    assert_verdict(&fall, AT(1, 5), QUALITY_SUSPECT, QUALITY_KEEP_OUT, QUALITY_FALL_TOO_FAST);
}

static void a_reading_out_of_range_neither_bears_out_nor_denies(void **state)
{
    (void)state;
    struct record record = {0};
    before_the_spike(&record);
    add(&record, AT(22, 35), 4.10);
    add(&record, AT(22, 40), 9.90);
    judge_at(&record, &RULES, AT(22, 40));
    assert_int_equal(verdict_of(&record, AT(22, 35))->use, QUALITY_HOLD);
    add(&record, AT(22, 45), -1.0);
    judge_at(&record, &RULES, AT(22, 45));
    assert_int_equal(verdict_of(&record, AT(22, 35))->use, QUALITY_HOLD);
}

static void a_suspect_fall_is_kept_out_until_borne_out(void **state)
{
    (void)state;
    struct record record = {0};
    add(&record, AT(1, 0), 2.80);
    add(&record, AT(1, 5), 1.90);
    judge_at(&record, &RULES, AT(1, 5));
    assert_verdict(&record, AT(1, 5), QUALITY_SUSPECT, QUALITY_KEEP_OUT, QUALITY_FALL_TOO_FAST);
    /* however long it waits: time alone never lowers the water */
    judge_at(&record, &RULES, AT(23, 0));
    assert_verdict(&record, AT(1, 5), QUALITY_SUSPECT, QUALITY_KEEP_OUT, QUALITY_FALL_TOO_FAST);
    assert_int_equal(newest_news(&record), AT(1, 0));

    add(&record, AT(1, 10), 1.88);
    judge_at(&record, &RULES, AT(1, 10));
    assert_verdict(&record, AT(1, 5), QUALITY_PASS, QUALITY_USE, QUALITY_FALL_TOO_FAST | QUALITY_CONFIRMED);
    assert_verdict(&record, AT(1, 10), QUALITY_PASS, QUALITY_USE, 0);

    record.samples[2].value = 2.78;
    judge_at(&record, &RULES, AT(1, 10));
    assert_verdict(&record, AT(1, 5), QUALITY_FAIL, QUALITY_KEEP_OUT, QUALITY_FALL_TOO_FAST | QUALITY_DENIED);
    assert_verdict(&record, AT(1, 10), QUALITY_PASS, QUALITY_USE, 0);
}

static void a_spike_beside_the_rise_does_not_spoil_the_rise(void **state)
{
    (void)state;
    /* one reading in five is a spike; the others pass, and no spike drives anything once its successor is in */
    struct record record = {0};
    add_line(&record, AT(20, 30), AT(22, 30), 300, 1.22, 2.42);
    for (size_t i = 3; i < record.count; i += 5)
        record.samples[i].value = i % 2 ? 7.3 : 0.2;
    judge_at(&record, &RULES, AT(22, 30));
    for (size_t i = 0; i < record.count; i++) {
        bool is_spike = i % 5 == 3;
        if (i + 1 < record.count || !is_spike)
            assert_int_equal(record.verdicts[i].use, is_spike ? QUALITY_KEEP_OUT : QUALITY_USE);
    }
}

/* ---- hand readings ---- */

static void a_hand_reading_is_never_held(void **state)
{
    (void)state;
    struct record record = {0};
    add(&record, AT(2, 50), 2.34);
    add_hand(&record, AT(2, 55), 6.80);
    add_hand(&record, AT(2, 56), 0.90);
    judge_at(&record, &RULES, AT(2, 56));
    assert_all_pass(&record);
}

static void a_hand_reading_bears_out_or_denies(void **state)
{
    (void)state;
    for (int bears_out = 0; bears_out < 2; bears_out++) {
        struct record record = {0};
        before_the_spike(&record);
        add(&record, AT(22, 35), 4.10);
        add_hand(&record, AT(22, 38), bears_out ? 4.05 : 2.52);
        judge_at(&record, &RULES, AT(22, 38));
        assert_int_equal(verdict_of(&record, AT(22, 35))->reasons,
                         QUALITY_RISE_TOO_FAST | (bears_out ? QUALITY_CONFIRMED : QUALITY_DENIED));
    }
}

static void a_staff_board_a_little_off_the_sensor_makes_no_rate(void **state)
{
    (void)state;
    /* the sensor stands 0.15 m above the board: at 1 min that would be 9 m/h */
    struct record record = {0};
    add_line(&record, AT(3, 20), AT(3, 35), 60, 2.80, 2.95);
    add_hand(&record, AT(3, 35), 2.80);
    add_line(&record, AT(3, 36), AT(3, 50), 60, 2.96, 3.10);
    judge_at(&record, &RULES, AT(3, 50));
    assert_all_pass(&record);
    /* on a still river too */
    struct record still = {0};
    add_line(&still, AT(3, 20), AT(3, 35), 60, 2.95, 2.95);
    add_hand(&still, AT(3, 35), 2.80);
    add(&still, AT(3, 36), 2.96);
    judge_at(&still, &RULES, AT(3, 36));
    assert_all_pass(&still);
    /* but a spike beside a hand reading is a spike */
    add(&still, AT(3, 37), 4.20);
    judge_at(&still, &RULES, AT(3, 37));
    assert_int_equal(verdict_of(&still, AT(3, 37))->use, QUALITY_HOLD);
}

static void a_record_may_begin_with_a_hand_reading(void **state)
{
    (void)state;
    struct record record = {0};
    add_hand(&record, AT(3, 35), 2.90);
    add(&record, AT(3, 40), 2.99);
    add(&record, AT(3, 45), 5.99);
    judge_at(&record, &RULES, AT(3, 45));
    assert_verdict(&record, AT(3, 35), QUALITY_PASS, QUALITY_USE, QUALITY_HAND);
    assert_verdict(&record, AT(3, 40), QUALITY_PASS, QUALITY_USE, 0);
    assert_int_equal(verdict_of(&record, AT(3, 45))->use, QUALITY_HOLD);
}

static void hand_readings_alone_carry_an_outage(void **state)
{
    (void)state;
    struct record record = {0};
    add_line(&record, AT(2, 20), AT(2, 55), 300, 2.37, 2.33);
    add_hand(&record, AT(3, 35), 2.90);
    add_hand(&record, AT(4, 5), 3.33);
    judge_at(&record, &RULES, AT(4, 10));
    assert_all_pass(&record);
    assert_int_equal(newest_news(&record), AT(4, 5));
    /* then the late batch, five centimetres high from 03:20 on */
    struct record late = {0};
    add_line(&late, AT(2, 20), AT(2, 55), 300, 2.37, 2.33);
    add_line(&late, AT(2, 55), AT(3, 20), 300, 2.38, 2.64);
    add_line(&late, AT(3, 20), AT(3, 35), 300, 2.69, 2.95);
    add_hand(&late, AT(3, 35), 2.90);
    add_line(&late, AT(3, 40), AT(4, 5), 300, 3.03, 3.39);
    add_hand(&late, AT(4, 5), 3.33);
    add_line(&late, AT(4, 10), AT(4, 25), 300, 3.40, 3.46);
    add_line(&late, AT(4, 25), AT(4, 55), 300, 3.45, 3.34);
    judge_at(&late, &RULES, AT(4, 55));
    assert_all_pass(&late);
}

/* ---- time ---- */

static void a_reading_from_the_future_waits_for_its_time(void **state)
{
    (void)state;
    struct record record = {0};
    add(&record, AT(1, 0), 2.00);
    add(&record, AT(1, 15), 2.01);
    add_hand(&record, AT(1, 16), 2.02);
    judge_at(&record, &RULES, AT(1, 1) - 1);
    assert_verdict(&record, AT(1, 15), QUALITY_PASS, QUALITY_USE, 0);
    assert_verdict(&record, AT(1, 16), QUALITY_NOT_EVALUATED, QUALITY_HOLD, QUALITY_IN_FUTURE | QUALITY_HAND);
    judge_at(&record, &RULES, AT(0, 59));
    assert_verdict(&record, AT(1, 15), QUALITY_NOT_EVALUATED, QUALITY_HOLD, QUALITY_IN_FUTURE);
    judge_at(&record, &RULES, AT(1, 1));
    assert_all_pass(&record);
}

static void a_reading_from_the_future_decides_nothing(void **state)
{
    (void)state;
    struct record record = {0};
    before_the_spike(&record);
    add(&record, AT(22, 35), 4.10);
    add(&record, AT(22, 52), 4.15);
    judge_at(&record, &RULES, AT(22, 36));
    assert_int_equal(verdict_of(&record, AT(22, 35))->use, QUALITY_HOLD);
    judge_at(&record, &RULES, AT(22, 37));
    assert_int_equal(verdict_of(&record, AT(22, 35))->reasons, QUALITY_RISE_TOO_FAST | QUALITY_CONFIRMED);
}

/* ---- the judge as a function ---- */

static uint64_t random_next(uint64_t *seed)
{
    *seed = *seed * 6364136223846793005u + 1442695040888963407u;
    return *seed >> 33;
}

static void no_rise_vanishes_and_no_verdict_contradicts_itself(void **state)
{
    (void)state;
    uint64_t seed = 0x9a06e5u;
    print_message("seed %llx\n", (unsigned long long)seed);
    static struct record record, again;
    int held = 0, counted = 0, frozen = 0;
    for (int round = 0; round < 400; round++) {
        record.count = 0;
        int64_t utc_s = AT(0, 0);
        double value = 2.0;
        for (int i = 0; i < 120; i++) {
            utc_s += 60 * (int64_t)(1 + random_next(&seed) % 15);
            unsigned kind = (unsigned)(random_next(&seed) % 20);
            if (kind > 7) /* 0 .. 7: unmoved */
                value = fabs(to_centimetre(value + 0.02 * ((double)(random_next(&seed) % 21) - 10.0)));
            double shown = kind == 19 ? 5.0 + (double)(random_next(&seed) % 500) / 100.0 : value;
            if (kind == 18)
                add_hand(&record, utc_s, to_centimetre(shown + 0.03));
            else
                add(&record, utc_s, shown);
        }
        int64_t now = utc_s + (int64_t)(random_next(&seed) % 1800);
        judge_at(&record, &RULES, now);
        again = record;
        memset(again.verdicts, 0x5a, sizeof again.verdicts);
        judge_at(&again, &RULES, now);
        for (size_t i = 0; i < record.count; i++) {
            const struct quality_verdict *verdict = &record.verdicts[i];
            assert_memory_equal(verdict, &again.verdicts[i],
                                sizeof *verdict); /* the same question, the same answer */
            unsigned reasons = verdict->reasons;
            if (verdict->use == QUALITY_HOLD) {
                assert_int_equal(reasons, QUALITY_RISE_TOO_FAST | QUALITY_UNCONFIRMED);
                assert_true((double)(now - record.samples[i].observed_utc_s) < RULES.confirm_within_s);
                held++;
            }
            if (verdict->use == QUALITY_KEEP_OUT && (reasons & QUALITY_RISE_TOO_FAST))
                assert_true((reasons & QUALITY_DENIED) != 0); /* a rise is dropped on a later reading's word alone */
            if (record.samples[i].is_hand && !(reasons & QUALITY_OUT_OF_RANGE))
                assert_true(verdict->use == QUALITY_USE && reasons == QUALITY_HAND);
            assert_true((verdict->flag == QUALITY_PASS) <= (verdict->use == QUALITY_USE));
            assert_true((verdict->flag == QUALITY_FAIL) <= (verdict->use == QUALITY_KEEP_OUT));
            counted += (reasons & QUALITY_COUNTS_UNCONFIRMED) != 0;
            frozen += (reasons & QUALITY_FROZEN) != 0;
        }
    }
    assert_true(held > 5 && counted > 5 && frozen > 5); /* the sequences went there */
}

static void what_cannot_be_judged_is_refused_and_nothing_is_written(void **state)
{
    (void)state;
    static const struct {
        const char *shows;
        int64_t second_s;
        double second;
    } rows[] = {
        {"the same time twice", 0, 2.0},
        {"times that fall", -1, 2.0},
        {"not a number", 300, NOT_A_NUMBER},
        {"infinite", 300, HUGE_VAL},
    };
    for (size_t i = 0; i < COUNT(rows); i++) {
        struct quality_sample samples[] = {{.observed_utc_s = AT(1, 0), .value = 2.0},
                                           {.observed_utc_s = AT(1, 0) + rows[i].second_s, .value = rows[i].second}};
        struct quality_verdict verdicts[2] = {{.reasons = 77}, {.reasons = 77}};
        if (quality_judge(&RULES, 2, samples, AT(2, 0), verdicts) != FW_BAD_INPUT || verdicts[0].reasons != 77)
            fail_msg("%s", rows[i].shows);
    }
    struct quality_rules rules = RULES;
    double *const numbers[] = {
        &rules.lowest,           &rules.highest,           &rules.fastest_rise_per_s, &rules.fastest_fall_per_s,
        &rules.confirm_within_s, &rules.frozen_after_s,    &rules.frozen_moving_s,    &rules.moving_rate_per_s,
        &rules.resolution,       &rules.future_tolerance_s};
    struct quality_sample sample = {.observed_utc_s = AT(1, 0), .value = 2.0};
    struct quality_verdict verdict;
    for (size_t i = 0; i < COUNT(numbers); i++) {
        rules = RULES;
        *numbers[i] = NOT_A_NUMBER;
        assert_int_equal(quality_judge(&rules, 1, &sample, AT(2, 0), &verdict), FW_BAD_INPUT);
    }
    assert_int_equal(quality_judge(&RULES, 0, &sample, AT(2, 0), &verdict), FW_OK);
}

static void flags_are_the_published_values(void **state)
{
    (void)state;
    /* QARTOD water level manual 2.1, table of flags; tests/reference/qartod_water_level.csv */
    assert_int_equal(QUALITY_PASS, 1);
    assert_int_equal(QUALITY_NOT_EVALUATED, 2);
    assert_int_equal(QUALITY_SUSPECT, 3);
    assert_int_equal(QUALITY_FAIL, 4);
    assert_int_equal(QUALITY_MISSING, 9);
}

static void every_reason_has_a_word_of_its_own(void **state)
{
    (void)state;
    for (int bit = 0; bit <= 10; bit++) {
        const char *word = quality_reason_word((enum quality_reason)(1 << bit));
        assert_string_not_equal(word, "?");
        for (int other = 0; other < bit; other++)
            assert_string_not_equal(word, quality_reason_word((enum quality_reason)(1 << other)));
    }
    assert_string_equal(quality_reason_word((enum quality_reason)(1 << 11)), "?");
    assert_string_equal(quality_reason_word((enum quality_reason)3), "?");
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(readings_outside_the_range_fail_and_drive_nothing),
        cmocka_unit_test(with_no_limit_set_everything_passes),
        cmocka_unit_test(a_logger_that_switches_interval_on_a_rise_raises_nothing),
        cmocka_unit_test(rounding_to_the_resolution_is_never_a_rate),
        cmocka_unit_test(a_rate_is_held_against_its_limit_over_the_true_time),
        cmocka_unit_test(a_single_spike_is_held_and_denied_by_the_next_reading),
        cmocka_unit_test(a_spike_is_denied_without_any_limit_on_falls),
        cmocka_unit_test(a_jump_of_two_readings_counts_at_once_with_its_second),
        cmocka_unit_test(a_wall_of_water_that_goes_on_too_fast_is_borne_out_step_by_step),
        cmocka_unit_test(a_rise_that_keeps_half_is_borne_out_and_one_that_keeps_less_is_not),
        cmocka_unit_test(a_lone_jump_counts_unconfirmed_when_the_limit_has_passed),
        cmocka_unit_test(a_later_reading_changes_the_mind_about_a_jump_that_counted),
        cmocka_unit_test(two_high_readings_that_disagree_stay_held_and_are_denied_together),
        cmocka_unit_test(a_step_that_is_left_too_fast_is_not_borne_out),
        cmocka_unit_test(a_record_may_begin_with_a_hand_reading),
        cmocka_unit_test(a_reading_out_of_range_neither_bears_out_nor_denies),
        cmocka_unit_test(a_suspect_fall_is_kept_out_until_borne_out),
        cmocka_unit_test(a_spike_beside_the_rise_does_not_spoil_the_rise),
        cmocka_unit_test(a_hand_reading_is_never_held),
        cmocka_unit_test(a_hand_reading_bears_out_or_denies),
        cmocka_unit_test(a_staff_board_a_little_off_the_sensor_makes_no_rate),
        cmocka_unit_test(hand_readings_alone_carry_an_outage),
        cmocka_unit_test(a_reading_from_the_future_waits_for_its_time),
        cmocka_unit_test(a_reading_from_the_future_decides_nothing),
        cmocka_unit_test(no_rise_vanishes_and_no_verdict_contradicts_itself),
        cmocka_unit_test(what_cannot_be_judged_is_refused_and_nothing_is_written),
        cmocka_unit_test(flags_are_the_published_values),
        cmocka_unit_test(every_reason_has_a_word_of_its_own),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
