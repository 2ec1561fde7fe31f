/* SPDX-License-Identifier: MIT */
#include "daemon/store/store_internal.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

#include "daemon/feed/quantity.h"

/*
 * Messages settled longer ago than this, before the newest ledger entry, come back only when their thread is still
 * open.
 */
enum { SETTLED_KEPT_S = 6 * 3600 };

/* --- one number --- */

static enum fw_status ask_integer(struct store *store, enum store_statement which, int64_t none, int64_t *value_out,
                                  struct fw_error *error)
{
    struct store_row row;
    bool has_row = false;
    enum fw_status status = store_prepare(store, which, &row, error);
    if (status == FW_OK)
        status = store_next(&row, &has_row, "read a number", error);
    if (status != FW_OK)
        return status;
    *value_out = has_row ? store_take_integer(&row, none) : none;
    store_done(&row);
    return FW_OK;
}

enum fw_status store_newest_entry(struct store *store, int64_t *entry_out, struct fw_error *error)
{
    return ask_integer(store, STORE_NEWEST_ENTRY, 0, entry_out, error);
}

enum fw_status store_next_message_number(struct store *store, int64_t *number_out, struct fw_error *error)
{
    return ask_integer(store, STORE_NEXT_MESSAGE_NUMBER, 1, number_out, error);
}

/* --- readings --- */

void store_take_reading(struct store_row *row, const struct settings *settings, struct reading *reading,
                        bool *is_known_out)
{
    *reading = (struct reading){.entry = store_take_integer(row, 0)};
    const char *gauge_id = store_take_text(row, NULL);
    size_t gauge = gauge_id != NULL ? settings_gauge_index(settings, gauge_id) : SETTINGS_NONE;
    const char *source = store_take_text(row, NULL);
    bool is_hand = source != NULL && strcmp(source, "hand") == 0;
    long feed = is_hand ? FACT_SOURCE_HAND : source != NULL ? strtol(source, NULL, 10) : 0;
    reading->observed_utc_s = store_take_integer(row, 0);
    reading->value = store_take_real(row);
    store_take_into(row, reading->unit, sizeof reading->unit);
    reading->received_utc_s = store_take_integer(row, 0);
    store_take_into(row, reading->by, sizeof reading->by);
    *is_known_out =
        gauge != SETTINGS_NONE && (is_hand || (size_t)feed < settings->gauges[gauge].feed_count) &&
        quantity_to_si(reading->value, reading->unit, settings->gauges[gauge].measures, &reading->value_si) == FW_OK;
    reading->gauge = *is_known_out ? (int32_t)gauge : -1;
    reading->source = (int32_t)feed;
}

/* The columns flag, use, reasons; false: there is no judgement. */
static bool take_verdict(struct store_row *row, struct quality_verdict *verdict_out)
{
    int64_t flag = store_take_integer(row, -1);
    size_t use = store_take_name(row, store_use_names, STORE_USE_COUNT);
    int64_t reasons = store_take_integer(row, 0);
    if (flag < 0 || use == STORE_USE_COUNT)
        return false;
    *verdict_out = (struct quality_verdict){
        .flag = (enum quality_flag)flag, .use = (enum quality_use)use, .reasons = (unsigned)reasons};
    return true;
}

enum fw_status store_newest_verdict(struct store *store, int64_t reading, bool *has_out,
                                    struct quality_verdict *verdict_out, struct fw_error *error)
{
    struct store_row row;
    enum fw_status status = store_prepare(store, STORE_NEWEST_JUDGEMENT, &row, error);
    if (status != FW_OK)
        return status;
    store_put_integer(&row, reading);
    bool has_row = false;
    status = store_next(&row, &has_row, "read a judgement", error);
    if (status == FW_OK) {
        *has_out = has_row && take_verdict(&row, verdict_out);
        store_done(&row);
    }
    return status;
}

static void set_verdict(struct gauge_picture *gauge, int64_t entry, const struct quality_verdict *verdict)
{
    size_t index = gauge->reading_count;
    while (index > 0 && gauge->readings[index - 1].reading.entry != entry)
        index--;
    if (index > 0) {
        gauge->readings[index - 1].verdict = *verdict;
        gauge->readings[index - 1].is_judged = true;
    }
}

static enum fw_status load_one_reading(struct store_row *row, const struct settings *settings,
                                       struct picture *picture, struct fw_error *error)
{
    struct reading reading;
    struct quality_verdict verdict;
    bool is_known = false;
    bool was_new = false;
    store_take_reading(row, settings, &reading, &is_known);
    bool is_judged = take_verdict(row, &verdict);
    if (!is_known)
        return FW_OK;
    if (picture_add_reading(picture, &reading, &was_new) != FW_OK)
        return fw_error_set(error, FW_NO_MEMORY, "%s: out of memory", row->store->file);
    if (was_new && is_judged)
        set_verdict(&picture->gauges[reading.gauge], reading.entry, &verdict);
    return FW_OK;
}

/* The newest observation comes even when it is older: it says since when there has been silence. */
static enum fw_status reading_window(struct store *store, const char *gauge_id, int64_t *since_utc_s,
                                     struct fw_error *error)
{
    struct store_row row;
    enum fw_status status = store_prepare(store, STORE_NEWEST_OBSERVED, &row, error);
    if (status != FW_OK)
        return status;
    store_put_text(&row, gauge_id);
    bool has_row = false;
    status = store_next(&row, &has_row, "look for the newest reading", error);
    if (status == FW_OK && has_row) {
        int64_t newest = store_take_integer(&row, INT64_MAX);
        if (newest < *since_utc_s)
            *since_utc_s = newest;
        store_done(&row);
    }
    return status;
}

static enum fw_status load_readings_of(struct store *store, const struct settings *settings, size_t gauge,
                                       int64_t since_utc_s, struct picture *picture, struct fw_error *error)
{
    struct store_row row;
    bool has_row = true;
    enum fw_status status = reading_window(store, settings->gauges[gauge].id, &since_utc_s, error);
    if (status == FW_OK)
        status = store_prepare(store, STORE_READINGS_OF_GAUGE, &row, error);
    if (status != FW_OK)
        return status;
    store_put_text(&row, settings->gauges[gauge].id);
    store_put_integer(&row, since_utc_s);
    while (status == FW_OK && has_row) {
        status = store_next(&row, &has_row, "read readings", error);
        if (status == FW_OK && has_row)
            status = load_one_reading(&row, settings, picture, error);
    }
    store_done(&row);
    return status;
}

/* --- advice --- */

static size_t level_index(struct store_row *row)
{
    static const enum advice_level levels[] = {ADVICE_QUIET, ADVICE_MUSTER,    ADVICE_SEND,
                                               ADVICE_LATE,  ADVICE_KEEP_SHUT, ADVICE_WALK_OVER};
    enum { COUNT = sizeof levels / sizeof levels[0] };
    const char *names[COUNT];
    for (size_t index = 0; index < COUNT; index++)
        names[index] = advice_level_name(levels[index]);
    size_t index = store_take_name(row, names, COUNT);
    return index < COUNT ? (size_t)levels[index] : SETTINGS_NONE;
}

enum fw_status store_newest_advice(struct store *store, const char *point_id, struct advice *advice_out,
                                   struct fw_error *error)
{
    struct store_row row;
    bool has_row = false;
    enum fw_status status = store_prepare(store, STORE_NEWEST_ADVICE, &row, error);
    if (status != FW_OK)
        return status;
    store_put_text(&row, point_id);
    status = store_next(&row, &has_row, "read advice", error);
    if (status != FW_OK || !has_row)
        return status;
    struct advice advice = {0};
    size_t level = level_index(&row);
    advice.is_blind = store_take_integer(&row, 0) != 0;
    advice.near_sides_only = store_take_integer(&row, 0) != 0;
    advice.reasons = (unsigned)store_take_integer(&row, 0);
    advice.act_by_utc_s = store_take_integer(&row, PASSAGE_NEVER);
    advice.since_utc_s = store_take_integer(&row, 0);
    advice.onset_utc_s = store_take_integer(&row, 0);
    advice.step_down_from_utc_s = store_take_integer(&row, 0);
    advice.told_act_by_utc_s = store_take_integer(&row, PASSAGE_NEVER);
    store_done(&row);
    if (level == SETTINGS_NONE)
        return fw_error_set(error, FW_DAMAGED, "%s: advice of point '%s' has an unknown level", store->file,
                            point_id);
    advice.level = (enum advice_level)level;
    *advice_out = advice;
    return FW_OK;
}

/* --- messages --- */

static size_t channel_index(const struct settings *settings, const char *id)
{
    for (size_t index = 0; id != NULL && index < settings->channel_count; index++)
        if (strcmp(settings->channels[index].id, id) == 0)
            return index;
    return SETTINGS_NONE;
}

/* The columns of STORE_MESSAGES. A hook that was under way died with its daemon: the message waits again. */
static enum fw_status take_message(struct store_row *row, const struct settings *settings, struct message *message,
                                   bool *is_known_out, struct fw_error *error)
{
    *message = (struct message){.entry = store_take_integer(row, 0)};
    store_take_into(row, message->id, sizeof message->id);
    message->number = store_take_integer(row, 0);
    size_t kind = store_take_name(row, store_message_names, STORE_MESSAGE_COUNT);
    const char *point_id = store_take_text(row, NULL);
    size_t point = point_id != NULL ? settings_point_index(settings, point_id) : SETTINGS_NONE;
    size_t channel = channel_index(settings, store_take_text(row, NULL));
    message->made_utc_s = store_take_integer(row, 0);
    message->wakes = store_take_integer(row, 0) != 0;
    size_t level = level_index(row);
    message->act_by_utc_s = store_take_integer(row, PASSAGE_NEVER);
    message->deck_earliest_utc_s = store_take_integer(row, PASSAGE_NEVER);
    message->deck_likely_utc_s = store_take_integer(row, PASSAGE_NEVER);
    message->deck_latest_utc_s = store_take_integer(row, PASSAGE_NEVER);
    store_take_into(row, message->short_text, sizeof message->short_text);
    if (level == SETTINGS_NONE)
        return fw_error_set(error, FW_DAMAGED, "%s: message %lld has an unknown level", row->store->file,
                            (long long)message->entry);
    const char *bulletin = store_take_text(row, NULL);
    *is_known_out = channel != SETTINGS_NONE && (point_id == NULL || point != SETTINGS_NONE);
    if (*is_known_out && bulletin != NULL && (message->bulletin = strdup(bulletin)) == NULL)
        return fw_error_set(error, FW_NO_MEMORY, "%s: out of memory", row->store->file);
    size_t state = store_take_name(row, store_delivery_names, STORE_DELIVERY_COUNT);
    message->tries = (int32_t)store_take_integer(row, 0);
    message->next_try_utc_s = store_take_integer(row, 0);
    message->settled_utc_s = store_take_integer(row, 0);
    store_take_into(row, message->note, sizeof message->note);
    message->level = (enum advice_level)level;
    message->kind = kind == MESSAGE_NOTICE ? MESSAGE_NOTICE : MESSAGE_DECISION;
    message->point = point_id != NULL ? (int32_t)point : -1;
    message->channel = (int32_t)channel;
    message->state =
        state == DELIVERY_SENT || state == DELIVERY_GIVEN_UP ? (enum delivery_state)state : DELIVERY_WAITING;
    return FW_OK;
}

static enum fw_status load_one_message(struct store_row *row, const struct settings *settings,
                                       struct picture *picture, struct fw_error *error)
{
    struct message message;
    bool is_known = false;
    enum fw_status status = take_message(row, settings, &message, &is_known, error);
    if (status != FW_OK || !is_known)
        return status;
    if (buffer_grow(&picture->outbox, &picture->outbox_capacity, picture->outbox_count, sizeof *picture->outbox) !=
        FW_OK) {
        free(message.bulletin);
        return fw_error_set(error, FW_NO_MEMORY, "%s: out of memory", row->store->file);
    }
    picture->outbox[picture->outbox_count++] = message;
    return FW_OK;
}

static int64_t oldest_open_onset(const struct picture *picture)
{
    int64_t oldest = INT64_MAX;
    for (size_t point = 0; point < picture->point_count; point++) {
        int64_t onset = picture->points[point].advice.onset_utc_s;
        if (onset > 0 && onset < oldest)
            oldest = onset;
    }
    return oldest;
}

static enum fw_status load_messages(struct store *store, const struct settings *settings, struct picture *picture,
                                    struct fw_error *error)
{
    struct store_row row;
    bool has_row = true;
    enum fw_status status = store_prepare(store, STORE_MESSAGES, &row, error);
    if (status != FW_OK)
        return status;
    store_put_integer(&row, picture->away_from_utc_s - SETTLED_KEPT_S);
    store_put_integer(&row, oldest_open_onset(picture));
    while (status == FW_OK && has_row) {
        status = store_next(&row, &has_row, "read messages", error);
        if (status == FW_OK && has_row)
            status = load_one_message(&row, settings, picture, error);
    }
    store_done(&row);
    for (size_t index = 0; index < picture->outbox_count && status == FW_OK; index++) {
        const struct message *message = &picture->outbox[index];
        struct point_picture *point = message->point >= 0 ? &picture->points[message->point] : NULL;
        if (point != NULL && point->advice.onset_utc_s > 0 && message->made_utc_s >= point->advice.onset_utc_s &&
            message->number > point->told_number)
            point->told_number = message->number;
    }
    return status;
}

/* --- words --- */

enum fw_status store_take_word(struct store_row *row, struct word *word, struct fw_error *error)
{
    *word = (struct word){.entry = store_take_integer(row, 0)};
    store_take_into(row, word->id, sizeof word->id);
    size_t kind = store_take_name(row, store_word_names, STORE_WORD_COUNT);
    store_take_into(row, word->subject, sizeof word->subject);
    word->value = store_take_real(row);
    store_take_into(row, word->unit, sizeof word->unit);
    word->is_wet = store_take_integer(row, 0) != 0;
    const char *road = store_take_text(row, NULL);
    bool is_understood = kind < STORE_WORD_COUNT && (road == NULL || road_state_from_name(road, &word->road));
    store_take_into(row, word->text, sizeof word->text);
    store_take_into(row, word->by, sizeof word->by);
    word->at_utc_s = store_take_integer(row, 0);
    word->received_utc_s = store_take_integer(row, 0);
    if (!is_understood)
        return fw_error_set(error, FW_DAMAGED, "%s: word '%s' (entry %lld) has an unknown kind or road state",
                            row->store->file, word->id, (long long)word->entry);
    word->kind = (enum word_kind)kind;
    return FW_OK;
}

/* A word meets the messages that had been told when it was said, as it did then. */
static void replay_word(const struct settings *settings, struct picture *picture, const struct word *word)
{
    size_t count = picture->outbox_count;
    size_t told = 0;
    while (told < count && picture->outbox[told].entry < word->entry)
        told++;
    picture->outbox_count = told;
    picture_take_word(settings, picture, word);
    picture->outbox_count = count;
}

static void forget_old_acceptances(struct picture *picture)
{
    for (size_t index = 0; index < picture->point_count; index++) {
        struct point_picture *point = &picture->points[index];
        if (point->advice.onset_utc_s == 0 || point->accepted_utc_s < point->advice.onset_utc_s) {
            point->accepted_utc_s = 0;
            memset(point->accepted_by, 0, sizeof point->accepted_by);
        }
    }
}

static enum fw_status load_words(struct store *store, const struct settings *settings, struct picture *picture,
                                 struct fw_error *error)
{
    struct store_row row;
    bool has_row = true;
    enum fw_status status = store_prepare(store, STORE_FACT_WORDS, &row, error);
    if (status != FW_OK)
        return status;
    while (status == FW_OK && has_row) {
        struct word word;
        status = store_next(&row, &has_row, "read words", error);
        if (status == FW_OK && has_row)
            status = store_take_word(&row, &word, error);
        if (status == FW_OK && has_row)
            replay_word(settings, picture, &word);
    }
    store_done(&row);
    forget_old_acceptances(picture);
    return status;
}

/* --- the whole --- */

static enum fw_status load_counters(struct store *store, struct picture *picture, struct fw_error *error)
{
    struct store_row row;
    bool has_row = false;
    int64_t newest_entry = 0;
    enum fw_status status = store_newest_entry(store, &newest_entry, error);
    if (status == FW_OK)
        status = store_next_message_number(store, &picture->next_message_number, error);
    if (status == FW_OK)
        status = ask_integer(store, STORE_NEWEST_FORECAST, 0, &picture->forecast_kept_utc_s, error);
    if (status == FW_OK)
        status = store_prepare(store, STORE_NEWEST_LEDGER, &row, error);
    if (status == FW_OK)
        status = store_next(&row, &has_row, "read the newest ledger entry", error);
    if (status == FW_OK && has_row) {
        picture->away_from_utc_s = store_take_integer(&row, 0);
        store_take_into(&row, picture->newest_link, sizeof picture->newest_link);
        store_done(&row);
    }
    if (status == FW_OK)
        picture->next_entry = newest_entry + 1;
    return status;
}

enum fw_status store_load_picture(struct store *store, const struct settings *settings, int64_t since_utc_s,
                                  struct picture *picture, struct fw_error *error)
{
    enum fw_status status = load_counters(store, picture, error);
    for (size_t gauge = 0; gauge < settings->gauge_count && status == FW_OK; gauge++)
        status = load_readings_of(store, settings, gauge, since_utc_s, picture, error);
    for (size_t point = 0; point < settings->point_count && status == FW_OK; point++)
        status = store_newest_advice(store, settings->points[point].id, &picture->points[point].advice, error);
    if (status == FW_OK)
        status = load_messages(store, settings, picture, error);
    if (status == FW_OK)
        status = load_words(store, settings, picture, error);
    return status;
}
