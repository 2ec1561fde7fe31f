/* SPDX-License-Identifier: MIT */
#include "daemon/store/store_internal.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

const char *const store_use_names[STORE_USE_COUNT] = {"use", "hold", "keep out"};
const char *const store_word_names[STORE_WORD_COUNT] = {"accept", "reading", "seen", "road", "note"};
const char *const store_message_names[STORE_MESSAGE_COUNT] = {"decision", "notice"};
const char *const store_delivery_names[STORE_DELIVERY_COUNT] = {"waiting", "under way", "sent", "given up"};

const char *store_source_text(int32_t source, char text[16])
{
    if (source == FACT_SOURCE_HAND)
        return "hand";
    snprintf(text, 16, "%d", (int)source);
    return text;
}

const char *store_gauge_id(const struct settings *settings, int32_t gauge)
{
    return gauge >= 0 && (size_t)gauge < settings->gauge_count ? settings->gauges[gauge].id : NULL;
}

const char *store_point_id(const struct settings *settings, int32_t point)
{
    return point >= 0 && (size_t)point < settings->point_count ? settings->points[point].id : NULL;
}

const char *store_channel_id(const struct settings *settings, int32_t channel)
{
    return channel >= 0 && (size_t)channel < settings->channel_count ? settings->channels[channel].id : NULL;
}

enum fw_status store_add_ledger(struct store *store, const struct ledger_entry *entry, const char *settings_digest,
                                struct fw_error *error)
{
    struct store_row row;
    enum fw_status status = store_prepare(store, STORE_ADD_LEDGER, &row, error);
    if (status != FW_OK)
        return status;
    store_put_integer(&row, entry->entry);
    store_put_integer(&row, entry->utc_s);
    store_put_text(&row, entry->kind);
    store_put_text(&row, entry->payload_digest);
    store_put_text(&row, entry->link);
    store_put_text(&row, settings_digest);
    status = store_run(&row, "add a ledger entry", error);
    if (status == FW_OK)
        status = store_prepare(store, STORE_ADD_LEDGER_PAYLOAD, &row, error);
    if (status != FW_OK)
        return status;
    store_put_integer(&row, entry->entry);
    store_put_bytes(&row, text_string(&entry->payload), entry->payload.length, true);
    return store_run(&row, "add a ledger payload", error);
}

enum fw_status store_add_reading(struct store *store, const struct settings *settings, const struct reading *reading,
                                 struct fw_error *error)
{
    char source[16];
    struct store_row row;
    enum fw_status status = store_prepare(store, STORE_ADD_READING, &row, error);
    if (status != FW_OK)
        return status;
    store_put_integer(&row, reading->entry);
    store_put_text(&row, store_gauge_id(settings, reading->gauge));
    store_put_text(&row, store_source_text(reading->source, source));
    store_put_integer(&row, reading->observed_utc_s);
    store_put_real(&row, reading->value);
    store_put_text(&row, reading->unit);
    store_put_integer(&row, reading->received_utc_s);
    store_put_text(&row, reading->by[0] != '\0' ? reading->by : NULL);
    return store_run(&row, "add a reading", error);
}

enum fw_status store_add_judgement(struct store *store, const struct judgement *judgement, struct fw_error *error)
{
    struct store_row row;
    enum fw_status status = store_prepare(store, STORE_ADD_JUDGEMENT, &row, error);
    if (status != FW_OK)
        return status;
    store_put_integer(&row, judgement->entry);
    store_put_integer(&row, judgement->reading);
    store_put_integer(&row, judgement->verdict.flag);
    store_put_text(&row, store_use_names[judgement->verdict.use]);
    store_put_integer(&row, judgement->verdict.reasons);
    return store_run(&row, "add a judgement", error);
}

/* What a kind of word does not say has no value. */
enum fw_status store_add_word(struct store *store, const struct word *word, struct fw_error *error)
{
    bool has_value = word->kind == WORD_READING || word->kind == WORD_SEEN;
    struct store_row row;
    enum fw_status status = store_prepare(store, STORE_ADD_WORD, &row, error);
    if (status != FW_OK)
        return status;
    store_put_integer(&row, word->entry);
    store_put_text(&row, word->id);
    store_put_text(&row, store_word_names[word->kind]);
    store_put_text(&row, word->subject);
    store_put_real(&row, has_value ? word->value : (double)NAN);
    store_put_text(&row, word->unit[0] != '\0' ? word->unit : NULL);
    store_put_integer_unless(&row, word->kind == WORD_SEEN ? word->is_wet : -1, -1);
    store_put_text(&row, word->kind == WORD_ROAD ? road_state_name(word->road) : NULL);
    store_put_text(&row, word->text);
    store_put_text(&row, word->by);
    store_put_integer(&row, word->at_utc_s);
    store_put_integer(&row, word->received_utc_s);
    return store_run(&row, "add a word", error);
}

enum fw_status store_add_advice(struct store *store, const char *point_id, int64_t entry, const struct advice *advice,
                                struct fw_error *error)
{
    struct store_row row;
    enum fw_status status = store_prepare(store, STORE_ADD_ADVICE, &row, error);
    if (status != FW_OK)
        return status;
    store_put_text(&row, point_id);
    store_put_integer(&row, entry);
    store_put_text(&row, advice_level_name(advice->level));
    store_put_integer(&row, advice->is_blind);
    store_put_integer(&row, advice->near_sides_only);
    store_put_integer(&row, advice->reasons);
    store_put_integer_unless(&row, advice->act_by_utc_s, PASSAGE_NEVER);
    store_put_integer(&row, advice->since_utc_s);
    store_put_integer_unless(&row, advice->onset_utc_s, 0);
    store_put_integer_unless(&row, advice->step_down_from_utc_s, 0);
    store_put_integer_unless(&row, advice->told_act_by_utc_s, PASSAGE_NEVER);
    return store_run(&row, "add advice", error);
}

enum fw_status store_add_message(struct store *store, const struct settings *settings, const struct message *message,
                                 struct fw_error *error)
{
    struct store_row row;
    enum fw_status status = store_prepare(store, STORE_ADD_MESSAGE, &row, error);
    if (status != FW_OK)
        return status;
    store_put_integer(&row, message->entry);
    store_put_text(&row, message->id);
    store_put_integer(&row, message->number);
    store_put_text(&row, store_message_names[message->kind]);
    store_put_text(&row, store_point_id(settings, message->point));
    store_put_text(&row, store_channel_id(settings, message->channel));
    store_put_integer(&row, message->made_utc_s);
    store_put_integer(&row, message->wakes);
    store_put_text(&row, advice_level_name(message->level));
    store_put_integer_unless(&row, message->act_by_utc_s, PASSAGE_NEVER);
    store_put_integer_unless(&row, message->deck_earliest_utc_s, PASSAGE_NEVER);
    store_put_integer_unless(&row, message->deck_likely_utc_s, PASSAGE_NEVER);
    store_put_integer_unless(&row, message->deck_latest_utc_s, PASSAGE_NEVER);
    store_put_text(&row, message->short_text);
    store_put_text(&row, message->bulletin);
    store_put_text(&row, store_delivery_names[message->state]);
    store_put_integer(&row, message->tries);
    store_put_integer(&row, message->next_try_utc_s);
    store_put_integer_unless(&row, message->settled_utc_s, 0);
    store_put_text(&row, message->note);
    return store_run(&row, "add a message", error);
}

/* A text taken into use again after another gets a new turn; the same one again is no news. */
enum fw_status store_add_settings(struct store *store, const struct settings *settings, int64_t now_utc_s,
                                  struct fw_error *error)
{
    char newest[SETTINGS_DIGEST_SIZE] = "";
    struct store_row row;
    bool has_row = false;
    enum fw_status status = store_prepare(store, STORE_SETTINGS_TURN, &row, error);
    if (status == FW_OK)
        status = store_next(&row, &has_row, "read the kept settings", error);
    if (status == FW_OK && has_row) {
        store_take_into(&row, newest, sizeof newest);
        store_done(&row);
    }
    if (status != FW_OK || strcmp(newest, settings->digest) == 0)
        return status;
    status = store_prepare(store, STORE_ADD_SETTINGS, &row, error);
    if (status != FW_OK)
        return status;
    store_put_text(&row, settings->digest);
    store_put_bytes(&row, settings->text, settings->text_length, true);
    store_put_integer(&row, now_utc_s);
    return store_run(&row, "keep the settings", error);
}

bool store_same_advice(const struct advice *left, const struct advice *right)
{
    return left->level == right->level && left->is_blind == right->is_blind &&
           left->near_sides_only == right->near_sides_only && left->reasons == right->reasons &&
           left->act_by_utc_s == right->act_by_utc_s && left->since_utc_s == right->since_utc_s &&
           left->onset_utc_s == right->onset_utc_s && left->step_down_from_utc_s == right->step_down_from_utc_s &&
           left->told_act_by_utc_s == right->told_act_by_utc_s;
}
