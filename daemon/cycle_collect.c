/* SPDX-License-Identifier: MIT */
#include "daemon/cycle_steps.h"

#include <stdlib.h>
#include <string.h>

#include "daemon/feed/quantity.h"

enum { MESSAGES_KEPT_S = 48 * 3600 };

static enum fw_status take_reading(struct delta *delta, const struct reading *reading)
{
    struct reading numbered = *reading;
    bool was_new = false;
    numbered.entry = delta->next->next_entry;
    enum fw_status status = picture_add_reading(delta->next, &numbered, &was_new);
    if (status != FW_OK || !was_new)
        return status;
    status = buffer_grow(&delta->readings, &delta->reading_capacity, delta->reading_count, sizeof *delta->readings);
    if (status != FW_OK)
        return status;
    delta->readings[delta->reading_count++] = numbered;
    delta->next->next_entry++;
    return FW_OK;
}

/* A reading spoken by a person is a reading like any other, of the hand source. */
static enum fw_status take_hand_reading(struct cycle *cycle, struct delta *delta, const struct word *word)
{
    size_t gauge = settings_gauge_index(cycle->settings, word->subject);
    if (gauge == SETTINGS_NONE)
        return FW_OK;
    struct reading reading = {.gauge = (int32_t)gauge,
                              .source = FACT_SOURCE_HAND,
                              .observed_utc_s = word->at_utc_s,
                              .value = word->value,
                              .value_si = word->value,
                              .received_utc_s = word->received_utc_s};
    memcpy(reading.unit, word->unit, sizeof reading.unit);
    memcpy(reading.by, word->by, sizeof reading.by);
    if (quantity_to_si(word->value, word->unit, cycle->settings->gauges[gauge].measures, &reading.value_si) != FW_OK)
        reading.value_si = word->value; /* no unit of this gauge: the inbox refuses such a word */
    return take_reading(delta, &reading);
}

static enum fw_status take_word(struct cycle *cycle, struct delta *delta, const struct word *word)
{
    enum fw_status status =
        buffer_grow(&delta->words, &delta->word_capacity, delta->word_count, sizeof *delta->words);
    if (status != FW_OK)
        return status;
    struct word *numbered = &delta->words[delta->word_count++];
    *numbered = *word;
    numbered->entry = delta->next->next_entry++;
    picture_take_word(cycle->settings, delta->next, numbered);
    return numbered->kind == WORD_READING ? take_hand_reading(cycle, delta, numbered) : FW_OK;
}

static void forget_old_readings(struct gauge_picture *gauge, int64_t before_utc_s)
{
    size_t old = 0;
    while (old < gauge->reading_count && gauge->readings[old].reading.observed_utc_s < before_utc_s)
        old++;
    if (old == gauge->reading_count && old > 0)
        old--; /* the newest is always kept: it says since when there has been silence */
    if (old == 0)
        return; /* there may be no array yet */
    gauge->reading_count -= old;
    memmove(gauge->readings, gauge->readings + old, gauge->reading_count * sizeof *gauge->readings);
}

static void forget_settled_messages(struct picture *picture, int64_t before_utc_s)
{
    size_t kept = 0;
    for (size_t index = 0; index < picture->outbox_count; index++) {
        struct message *message = &picture->outbox[index];
        bool is_settled = message->state == DELIVERY_SENT || message->state == DELIVERY_GIVEN_UP;
        if (is_settled && message->settled_utc_s < before_utc_s)
            free(message->bulletin);
        else
            picture->outbox[kept++] = *message;
    }
    picture->outbox_count = kept;
}

enum fw_status cycle_collect(struct cycle *cycle, const struct news *news, int64_t now_utc_s, struct delta *delta)
{
    struct picture *next = delta->next;
    for (size_t gauge = 0; gauge < next->gauge_count; gauge++)
        forget_old_readings(&next->gauges[gauge], cycle_readings_from_utc_s(cycle->settings, now_utc_s));
    forget_settled_messages(next, now_utc_s - MESSAGES_KEPT_S);

    enum fw_status status = FW_OK;
    for (size_t index = 0; index < news->reading_count && status == FW_OK; index++)
        status = take_reading(delta, &news->readings[index]);
    for (size_t index = 0; index < news->word_count && status == FW_OK; index++)
        status = take_word(cycle, delta, &news->words[index]);
    return status;
}
