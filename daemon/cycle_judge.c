/* SPDX-License-Identifier: MIT */
#include "daemon/cycle_steps.h"

#include <math.h>

#include "engine/series.h"

enum {
    RATE_WINDOW_S = 1800,  /* the newest rate: what a rise carried forward goes on with */
    MOVING_WINDOW_S = 3600 /* whether the river moves at all: picks the blind limit */
};

static enum fw_status append_judgement(struct delta *delta, struct known_reading *known,
                                       const struct quality_verdict *verdict)
{
    bool is_same = known->is_judged && known->verdict.flag == verdict->flag && known->verdict.use == verdict->use &&
                   known->verdict.reasons == verdict->reasons;
    if (is_same)
        return FW_OK;
    enum fw_status status = buffer_grow(&delta->judgements, &delta->judgement_capacity, delta->judgement_count,
                                        sizeof *delta->judgements);
    if (status != FW_OK)
        return status;
    known->verdict = *verdict;
    known->is_judged = true;
    delta->judgements[delta->judgement_count++] =
        (struct judgement){.entry = delta->next->next_entry++, .reading = known->reading.entry, .verdict = *verdict};
    return FW_OK;
}

/* One sample per observed time: the source of highest trust, which stands first; the others are outranked. */
static size_t choose_samples(struct cycle *cycle, const struct gauge_picture *gauge)
{
    size_t count = 0;
    for (size_t index = 0; index < gauge->reading_count; index++) {
        const struct reading *reading = &gauge->readings[index].reading;
        if (count > 0 && cycle->samples[count - 1].observed_utc_s == reading->observed_utc_s)
            continue;
        cycle->samples[count] = (struct quality_sample){.observed_utc_s = reading->observed_utc_s,
                                                        .value = reading->value_si,
                                                        .is_hand = reading->source == FACT_SOURCE_HAND};
        cycle->sample_index[count++] = index;
    }
    return count;
}

static enum fw_status record_verdicts(struct cycle *cycle, struct gauge_picture *gauge, size_t sample_count,
                                      struct delta *delta)
{
    static const struct quality_verdict outranked = {
        .flag = QUALITY_NOT_EVALUATED, .use = QUALITY_KEEP_OUT, .reasons = QUALITY_OUTRANKED};
    enum fw_status status = FW_OK;
    size_t sample = 0;
    for (size_t index = 0; index < gauge->reading_count && status == FW_OK; index++) {
        bool is_chosen = sample < sample_count && cycle->sample_index[sample] == index;
        status = append_judgement(delta, &gauge->readings[index], is_chosen ? &cycle->verdicts[sample] : &outranked);
        sample += is_chosen;
    }
    return status;
}

/* What the gauge says now, from the readings that count. */
static void describe_gauge(struct cycle *cycle, const struct settings_gauge *known, size_t sample_count,
                           int64_t now_utc_s, struct gauge_picture *gauge)
{
    size_t used = 0;
    unsigned newest_reasons = 0;
    bool newest_is_hand = false;
    gauge->heard_utc_s = 0;
    gauge->held_utc_s = 0;
    gauge->is_frozen = false;
    for (size_t sample = 0; sample < sample_count; sample++) {
        const struct quality_verdict *verdict = &cycle->verdicts[sample];
        int64_t observed = cycle->samples[sample].observed_utc_s;
        if (verdict->reasons & QUALITY_IN_FUTURE)
            continue;
        gauge->heard_utc_s = observed;
        gauge->is_frozen = verdict->use == QUALITY_KEEP_OUT && (verdict->reasons & QUALITY_FROZEN) != 0;
        if (verdict->use == QUALITY_HOLD) {
            gauge->held_utc_s = observed;
            gauge->held_value = cycle->samples[sample].value;
        }
        if (verdict->use != QUALITY_USE)
            continue;
        cycle->sample_utc_s[used] = observed;
        cycle->sample_value[used++] = cycle->samples[sample].value;
        newest_reasons = verdict->reasons;
        newest_is_hand = cycle->samples[sample].is_hand;
    }
    gauge->newest_utc_s = used > 0 ? cycle->sample_utc_s[used - 1] : 0;
    gauge->newest_value = used > 0 ? cycle->sample_value[used - 1] : 0.0;
    gauge->rate_per_s = series_newest_rate_per_s(used, cycle->sample_utc_s, cycle->sample_value, RATE_WINDOW_S);
    gauge->is_rising = used > 1 && gauge->rate_per_s > known->rising_rate_per_s;
    gauge->is_hand = newest_is_hand;
    gauge->is_unconfirmed = (newest_reasons & QUALITY_COUNTS_UNCONFIRMED) != 0;
    struct rating_flags flags = {0};
    gauge->newest_discharge_m3s = known->gives_level_only ? (double)NAN
                                  : known->measures == SETTINGS_STAGE
                                      ? rating_discharge_m3s(&known->rating, gauge->newest_value, &flags)
                                      : gauge->newest_value;
    gauge->is_beyond_gauging = flags.is_beyond_highest_gauging;
    bool is_moving = gauge->is_rising || fabs(series_newest_rate_per_s(used, cycle->sample_utc_s, cycle->sample_value,
                                                                       MOVING_WINDOW_S)) > known->rising_rate_per_s;
    gauge->blind_limit_s = is_moving ? known->blind_after_rising_s : known->blind_after_s;
    gauge->silent_s = now_utc_s - gauge->newest_utc_s;
    gauge->is_blind = gauge->silent_s >= gauge->blind_limit_s;
}

enum fw_status cycle_judge(struct cycle *cycle, int64_t now_utc_s, struct delta *delta)
{
    for (size_t index = 0; index < cycle->settings->gauge_count; index++) {
        const struct settings_gauge *known = &cycle->settings->gauges[index];
        struct gauge_picture *gauge = &delta->next->gauges[index];
        enum fw_status status = cycle_reserve_samples(cycle, gauge->reading_count + 1);
        if (status != FW_OK)
            return status;
        size_t sample_count = choose_samples(cycle, gauge);
        status = quality_judge(&known->quality, sample_count, cycle->samples, now_utc_s, cycle->verdicts);
        if (status == FW_OK)
            status = record_verdicts(cycle, gauge, sample_count, delta);
        if (status != FW_OK)
            return status;
        describe_gauge(cycle, known, sample_count, now_utc_s, gauge);
    }
    return FW_OK;
}
