/* SPDX-License-Identifier: MIT */
#include "daemon/cycle_steps.h"

#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "daemon/ledger.h"
#include "daemon/tell/sentence.h"

enum { CURVE_STEP_S = 300, FORECAST_KEPT_EVERY_S = 900 };

static void spread_mm(const struct cycle *cycle, size_t point, size_t step, int32_t mm[3])
{
    double spread_m[3];
    cycle_spread_at(cycle, point, step, spread_m);
    for (size_t index = 0; index < 3; index++)
        mm[index] = (int32_t)lround(1000.0 * spread_m[index]);
}

static enum fw_status thin_forecast(const struct cycle *cycle, int64_t now_utc_s, struct picture *next)
{
    struct forecast *forecast = &next->forecast;
    size_t count = (size_t)(cycle->settings->horizon_s / CURVE_STEP_S) + 1;
    size_t values = count * next->point_count;
    if (forecast->step_count != count || forecast->low_mm == NULL) {
        free(forecast->low_mm);
        free(forecast->likely_mm);
        free(forecast->high_mm);
        forecast->low_mm = calloc(values + 1, sizeof(int32_t));
        forecast->likely_mm = calloc(values + 1, sizeof(int32_t));
        forecast->high_mm = calloc(values + 1, sizeof(int32_t));
        forecast->step_count = forecast->low_mm && forecast->likely_mm && forecast->high_mm ? count : 0;
        if (forecast->step_count == 0)
            return FW_NO_MEMORY;
    }
    forecast->issued_utc_s = now_utc_s;
    forecast->start_utc_s = now_utc_s - now_utc_s % cycle->settings->time_step_s;
    forecast->step_s = CURVE_STEP_S;
    for (size_t point = 0; point < next->point_count; point++)
        for (size_t index = 0; index < count; index++) {
            int64_t utc_s = forecast->start_utc_s + (int64_t)index * CURVE_STEP_S;
            size_t step = (size_t)((utc_s - cycle->start_utc_s) / cycle->settings->time_step_s);
            int32_t mm[3] = {-1, -1, -1};
            if (step <= cycle->step_count && !next->points[point].is_unknown)
                spread_mm(cycle, point, step, mm);
            forecast->low_mm[point * count + index] = mm[0];
            forecast->likely_mm[point * count + index] = mm[1];
            forecast->high_mm[point * count + index] = mm[2];
        }
    return FW_OK;
}

/* Messages made before it for the same crossing and channel in the same second, as two words may ask for. */
static size_t count_twins(const struct picture *picture, const struct message *message)
{
    size_t count = 0;
    for (const struct message *other = picture->outbox; other < message; other++)
        count += other->point == message->point && other->channel == message->channel &&
                 other->made_utc_s == message->made_utc_s;
    return count;
}

/* The same message on another try, in another life or on a replay has the same id, and no other message has it. */
static enum fw_status identify_message(const struct settings *settings, const struct picture *picture,
                                       const struct decision *decision, struct message *message)
{
    char text[512];
    int length =
        snprintf(text, sizeof text, "%s|%s|%s|%lld|%lld|%lld|%s|%zu", settings->district_name,
                 settings->points[decision->point].id, advice_level_name(decision->after.level),
                 (long long)decision->after.onset_utc_s, (long long)message->made_utc_s, (long long)message->number,
                 settings->channels[message->channel].id, count_twins(picture, message));
    return digest_sha256(text, (size_t)length, message->id);
}

static enum fw_status add_message(struct cycle *cycle, struct delta *delta, const struct decision *decision,
                                  size_t channel, const char *bulletin)
{
    struct picture *next = delta->next;
    enum fw_status status =
        buffer_grow(&next->outbox, &next->outbox_capacity, next->outbox_count, sizeof *next->outbox);
    if (status != FW_OK)
        return status;
    struct message *message = &next->outbox[next->outbox_count];
    const struct passage *deck =
        &next->points[decision->point].marks[cycle->settings->points[decision->point].deck_mark].passage;
    *message = (struct message){.entry = next->next_entry,
                                .number = decision->message_number,
                                .kind = MESSAGE_DECISION,
                                .point = decision->point,
                                .channel = (int32_t)channel,
                                .made_utc_s = next->as_of_utc_s,
                                .wakes = decision->wakes,
                                .level = decision->after.level,
                                .act_by_utc_s = decision->after.act_by_utc_s,
                                .deck_earliest_utc_s = deck->earliest_utc_s,
                                .deck_likely_utc_s = deck->likely_utc_s,
                                .deck_latest_utc_s = deck->latest_utc_s,
                                .state = DELIVERY_WAITING,
                                .next_try_utc_s = next->as_of_utc_s};
    sentence_short(cycle->settings, next, decision, message->short_text);
    message->bulletin = strdup(bulletin);
    if (message->bulletin == NULL)
        return FW_NO_MEMORY;
    next->outbox_count++;
    next->next_entry++;
    return identify_message(cycle->settings, next, decision, message);
}

/* Who is told first: the first role of the roster, or every channel where there is no roster. */
static enum fw_status tell_headline(struct cycle *cycle, struct delta *delta, const struct decision *decision)
{
    const struct settings *settings = cycle->settings;
    struct text bulletin = {0};
    enum fw_status status = sentence_bulletin(settings, delta->next, decision, &bulletin);
    size_t count = settings->role_count > 0 ? settings->roster[0].to_count : settings->channel_count;
    for (size_t index = 0; index < count && status == FW_OK; index++)
        status = add_message(cycle, delta, decision, settings->role_count > 0 ? settings->roster[0].to[index] : index,
                             text_string(&bulletin));
    text_clear(&bulletin);
    return status;
}

/* More urgent first: what wakes, then the higher level, then the earlier act-by. */
static bool is_more_urgent(const struct decision *left, const struct decision *right)
{
    if (left->wakes != right->wakes)
        return left->wakes;
    bool is_left_shut = left->after.level > ADVICE_LATE;
    bool is_right_shut = right->after.level > ADVICE_LATE;
    if (is_left_shut != is_right_shut)
        return is_right_shut;
    if (left->after.level != right->after.level)
        return left->after.level > right->after.level;
    return left->after.act_by_utc_s < right->after.act_by_utc_s;
}

/*
 * One silence at one gauge changes the advice of every crossing below it: that is one message, not three. A crossing where a crew is to
 * be sent always has a message of its own; the other changes of a cycle ride with the most urgent among them.
 */
static void choose_headlines(struct delta *delta)
{
    struct decision *common = NULL;
    size_t common_count = 0;
    for (size_t index = 0; index < delta->decision_count; index++) {
        struct decision *decision = &delta->decisions[index];
        decision->is_headline =
            decision->wakes && (decision->after.level == ADVICE_SEND || decision->after.level == ADVICE_LATE);
        if (decision->is_headline)
            continue;
        common_count++;
        if (common == NULL || is_more_urgent(decision, common))
            common = decision;
    }
    if (common == NULL)
        return;
    common->is_headline = true;
    common->also_count = common_count - 1;
    for (size_t index = 0; index < delta->decision_count; index++)
        if (!delta->decisions[index].is_headline)
            common->wakes |= delta->decisions[index].wakes;
}

static enum fw_status tell_decisions(struct cycle *cycle, struct delta *delta)
{
    enum fw_status status = FW_OK;
    choose_headlines(delta);
    for (size_t index = 0; index < delta->decision_count; index++) {
        struct decision *decision = &delta->decisions[index];
        struct point_picture *point = &delta->next->points[decision->point];
        if (point->told_number == 0)
            point->told_number = delta->next->next_message_number++;
        decision->message_number = point->told_number;
    }
    for (size_t index = 0; index < delta->decision_count && status == FW_OK; index++)
        if (delta->decisions[index].is_headline)
            status = tell_headline(cycle, delta, &delta->decisions[index]);
    return status;
}

static enum fw_status write_ledger(struct cycle *cycle, int64_t now_utc_s, struct delta *delta)
{
    struct ledger_entry *ledger = &delta->ledger;
    ledger->entry = delta->next->next_entry++;
    ledger->utc_s = now_utc_s;
    memcpy(ledger->kind, "cycle", sizeof "cycle");
    enum fw_status status = picture_write_json(cycle->settings, delta->next, &ledger->payload);
    if (status == FW_OK)
        status = ledger_seal(delta->next->newest_link, ledger);
    if (status == FW_OK)
        memcpy(delta->next->newest_link, ledger->link, sizeof ledger->link);
    return status;
}

enum fw_status cycle_record(struct cycle *cycle, int64_t now_utc_s, struct delta *delta)
{
    enum fw_status status = thin_forecast(cycle, now_utc_s, delta->next);
    delta->first_message = delta->next->outbox_count;
    if (status == FW_OK)
        status = tell_decisions(cycle, delta);
    if (status != FW_OK)
        return status;
    delta->keeps_forecast =
        delta->decision_count > 0 || now_utc_s - delta->next->forecast_kept_utc_s >= FORECAST_KEPT_EVERY_S;
    if (delta->keeps_forecast)
        delta->next->forecast_kept_utc_s = now_utc_s;
    return write_ledger(cycle, now_utc_s, delta);
}
