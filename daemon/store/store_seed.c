/* SPDX-License-Identifier: MIT */
/*
 * Makes the store catch up with the picture in memory: what the store has is recognised by what it says, what it
 * lacks is written. Numbers are kept where they are free. The picture takes new numbers only when all of it is
 * stored.
 */
#include "daemon/store/store_internal.h"

#include <cjson/cJSON.h>
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "daemon/ledger.h"

struct renumbering {
    int64_t *entry; /* in the picture */
    int64_t number;
};

struct seed {
    struct store *store;
    const struct settings *settings;
    struct picture *picture;
    int64_t now_utc_s;
    int64_t next_entry, next_message_number;
    struct renumbering *changes;
    size_t change_count, change_capacity;
    size_t reading_count, message_count, word_count; /* written: told in the ledger entry */
};

static enum fw_status renumber(struct seed *seed, int64_t *entry, int64_t number, struct fw_error *error)
{
    if (*entry == number)
        return FW_OK;
    if (buffer_grow(&seed->changes, &seed->change_capacity, seed->change_count, sizeof *seed->changes) != FW_OK)
        return fw_error_set(error, FW_NO_MEMORY, "%s: out of memory", seed->store->file);
    seed->changes[seed->change_count++] = (struct renumbering){entry, number};
    return FW_OK;
}

static enum fw_status is_taken(struct store *store, int64_t entry, bool *taken_out, struct fw_error *error)
{
    struct store_row row;
    enum fw_status status = store_prepare(store, STORE_HAS_ENTRY, &row, error);
    if (status != FW_OK)
        return status;
    store_put_integer(&row, entry);
    status = store_next(&row, taken_out, "look for an entry", error);
    store_done(&row);
    return status;
}

/* --- readings --- */

/* The newest row of the same gauge, source and time; entry 0: there is none. */
static enum fw_status find_reading(struct seed *seed, const struct reading *reading, struct reading *found_out,
                                   struct fw_error *error)
{
    char source[16];
    bool is_known = false;
    bool has_row = false;
    struct store_row row;
    enum fw_status status = store_prepare(seed->store, STORE_NEWEST_READING_AT, &row, error);
    if (status != FW_OK)
        return status;
    store_put_text(&row, store_gauge_id(seed->settings, reading->gauge));
    store_put_text(&row, store_source_text(reading->source, source));
    store_put_integer(&row, reading->observed_utc_s);
    status = store_next(&row, &has_row, "look for a reading", error);
    *found_out = (struct reading){0};
    if (status == FW_OK && has_row)
        store_take_reading(&row, seed->settings, found_out, &is_known);
    store_done(&row);
    return status;
}

/* The reading's number in the store: that of the row which says the same, or of a new one. */
static enum fw_status seed_reading(struct seed *seed, struct reading *reading, int64_t *entry_out,
                                   struct fw_error *error)
{
    struct reading found;
    struct reading added = *reading;
    bool taken = false;
    enum fw_status status = find_reading(seed, reading, &found, error);
    if (status != FW_OK)
        return status;
    if (found.entry != 0 && found.value == reading->value && strcmp(found.unit, reading->unit) == 0) {
        *entry_out = found.entry;
        return renumber(seed, &reading->entry, found.entry, error);
    }
    status = is_taken(seed->store, reading->entry, &taken, error);
    if (taken || reading->entry <= found.entry)
        added.entry = seed->next_entry++;
    if (status == FW_OK)
        status = store_add_reading(seed->store, seed->settings, &added, error);
    if (status == FW_OK)
        status = renumber(seed, &reading->entry, added.entry, error);
    *entry_out = added.entry;
    seed->reading_count++;
    return status;
}

static enum fw_status seed_judgement(struct seed *seed, const struct known_reading *known, int64_t reading,
                                     struct fw_error *error)
{
    struct quality_verdict stored = {0};
    bool has_stored = false;
    enum fw_status status = store_newest_verdict(seed->store, reading, &has_stored, &stored, error);
    if (status != FW_OK || (has_stored && stored.flag == known->verdict.flag && stored.use == known->verdict.use &&
                            stored.reasons == known->verdict.reasons))
        return status;
    struct judgement judgement = {.entry = seed->next_entry++, .reading = reading, .verdict = known->verdict};
    return store_add_judgement(seed->store, &judgement, error);
}

static enum fw_status seed_gauge(struct seed *seed, struct gauge_picture *gauge, struct fw_error *error)
{
    enum fw_status status = FW_OK;
    for (size_t index = 0; index < gauge->reading_count && status == FW_OK; index++) {
        struct known_reading *known = &gauge->readings[index];
        int64_t entry = 0;
        status = seed_reading(seed, &known->reading, &entry, error);
        if (status == FW_OK && known->is_judged)
            status = seed_judgement(seed, known, entry, error);
    }
    return status;
}

/* --- messages --- */

static enum fw_status find_message(struct seed *seed, const struct message *message, int64_t *entry_out,
                                   struct fw_error *error)
{
    bool has_row = false;
    struct store_row row;
    enum fw_status status = store_prepare(seed->store, STORE_FIND_MESSAGE, &row, error);
    if (status != FW_OK)
        return status;
    store_put_text(&row, message->id);
    store_put_text(&row, store_channel_id(seed->settings, message->channel));
    status = store_next(&row, &has_row, "look for a message", error);
    if (status == FW_OK)
        *entry_out = has_row ? store_take_integer(&row, 0) : 0;
    store_done(&row);
    return status;
}

static enum fw_status seed_message(struct seed *seed, struct message *message, struct fw_error *error)
{
    struct message added = *message; /* borrows the bulletin */
    int64_t entry = 0;
    bool taken = false;
    enum fw_status status = find_message(seed, message, &entry, error);
    if (status == FW_OK && entry == 0)
        status = is_taken(seed->store, message->entry, &taken, error);
    if (status != FW_OK)
        return status;
    if (entry != 0)
        added.entry = entry;
    else if (taken)
        added.entry = seed->next_entry++;
    if (entry != 0)
        status = store_save_delivery(seed->store, &added, error);
    else
        status = store_add_message(seed->store, seed->settings, &added, error);
    seed->message_count += entry == 0;
    return status == FW_OK ? renumber(seed, &message->entry, added.entry, error) : status;
}

/* --- what people said: the facts in force, restated as words --- */

static enum fw_status has_fact(struct seed *seed, const struct word *word, bool *has_out, struct fw_error *error)
{
    struct store_row row;
    enum fw_status status = store_prepare(seed->store, STORE_HAS_FACT, &row, error);
    if (status != FW_OK)
        return status;
    store_put_text(&row, store_word_names[word->kind]);
    store_put_text(&row, word->subject);
    store_put_integer(&row, word->at_utc_s);
    store_put_real(&row, word->kind == WORD_SEEN ? word->value : (double)NAN);
    store_put_integer_unless(&row, word->kind == WORD_SEEN ? word->is_wet : -1, -1);
    store_put_text(&row, word->kind == WORD_ROAD ? road_state_name(word->road) : NULL);
    store_put_text(&row, word->by);
    status = store_next(&row, has_out, "look for a word", error);
    store_done(&row);
    return status;
}

static enum fw_status seed_fact(struct seed *seed, struct word *word, const char *by, struct fw_error *error)
{
    bool has = false;
    snprintf(word->by, sizeof word->by, "%s", by);
    enum fw_status status = has_fact(seed, word, &has, error);
    if (status != FW_OK || has)
        return status;
    word->entry = seed->next_entry++;
    word->received_utc_s = seed->now_utc_s;
    snprintf(word->id, sizeof word->id, "reseed-%lld-%lld", (long long)seed->now_utc_s, (long long)word->entry);
    snprintf(word->text, sizeof word->text, "restated from memory after the store had failed");
    seed->word_count++;
    return store_add_word(seed->store, word, error);
}

static enum fw_status seed_point_facts(struct seed *seed, size_t index, struct fw_error *error)
{
    const struct point_picture *point = &seed->picture->points[index];
    const char *id = store_point_id(seed->settings, (int32_t)index);
    enum fw_status status = FW_OK;
    if (point->road.at_utc_s > 0) {
        struct word word = {.kind = WORD_ROAD, .road = point->road.state, .at_utc_s = point->road.at_utc_s};
        snprintf(word.subject, sizeof word.subject, "%s", id);
        status = seed_fact(seed, &word, point->road.by, error);
    }
    if (status == FW_OK && point->water.is_known) {
        struct word word = {.kind = WORD_SEEN,
                            .is_wet = point->water.is_wet,
                            .value = point->water.depth_cm,
                            .at_utc_s = point->water.at_utc_s};
        snprintf(word.subject, sizeof word.subject, "%s", id);
        status = seed_fact(seed, &word, point->water.by, error);
    }
    return status;
}

/* An acceptance speaks of a message, by its number. */
static enum fw_status seed_acceptance(struct seed *seed, const struct point_picture *point, struct fw_error *error)
{
    struct word word = {.kind = WORD_ACCEPT, .at_utc_s = point->accepted_utc_s};
    if (point->accepted_utc_s == 0 || point->told_number == 0)
        return FW_OK;
    snprintf(word.subject, sizeof word.subject, "%lld", (long long)point->told_number);
    return seed_fact(seed, &word, point->accepted_by, error);
}

/* --- advice, counters, the ledger entry --- */

static enum fw_status seed_advice(struct seed *seed, size_t index, int64_t entry, struct fw_error *error)
{
    const char *id = store_point_id(seed->settings, (int32_t)index);
    const struct advice *advice = &seed->picture->points[index].advice;
    struct advice stored = advice_start();
    enum fw_status status = store_newest_advice(seed->store, id, &stored, error);
    if (status != FW_OK || store_same_advice(&stored, advice))
        return status;
    return store_add_advice(seed->store, id, entry, advice, error);
}

static enum fw_status save_counter(struct seed *seed, struct fw_error *error)
{
    int64_t stored = 0;
    struct store_row row;
    enum fw_status status = store_next_message_number(seed->store, &stored, error);
    if (status == FW_OK)
        status = store_prepare(seed->store, STORE_SAVE_COUNTER, &row, error);
    if (status != FW_OK)
        return status;
    int64_t mine = seed->picture->next_message_number;
    seed->next_message_number = mine > stored ? mine : stored;
    store_put_text(&row, "next message number");
    store_put_integer(&row, seed->next_message_number);
    return store_run(&row, "save a counter", error);
}

/* {"kind":"reseed","why":...,"link_in_memory":...,"readings":1,"messages":2,"words":3} */
static enum fw_status write_payload(const struct seed *seed, const char *why, struct text *payload_out)
{
    cJSON *json = cJSON_CreateObject();
    char *text = NULL;
    bool is_whole = json != NULL && cJSON_AddStringToObject(json, "kind", "reseed") != NULL &&
                    cJSON_AddStringToObject(json, "why", why) != NULL &&
                    cJSON_AddStringToObject(json, "link_in_memory", seed->picture->newest_link) != NULL &&
                    cJSON_AddNumberToObject(json, "readings", (double)seed->reading_count) != NULL &&
                    cJSON_AddNumberToObject(json, "messages", (double)seed->message_count) != NULL &&
                    cJSON_AddNumberToObject(json, "words", (double)seed->word_count) != NULL;
    if (is_whole)
        text = cJSON_PrintUnformatted(json);
    cJSON_Delete(json);
    if (text == NULL)
        return FW_NO_MEMORY;
    text_add(payload_out, "%s", text);
    cJSON_free(text);
    return text_status(payload_out);
}

static enum fw_status seed_ledger(struct seed *seed, const char *why, struct ledger_entry *ledger,
                                  struct fw_error *error)
{
    ledger->entry = seed->next_entry++;
    ledger->utc_s = seed->now_utc_s;
    snprintf(ledger->kind, sizeof ledger->kind, "reseed");
    enum fw_status status = write_payload(seed, why, &ledger->payload);
    if (status == FW_OK)
        status = ledger_seal(seed->store->newest_link, ledger);
    if (status != FW_OK)
        return fw_error_set(error, status, "%s: cannot make the ledger entry", seed->store->file);
    status = store_add_ledger(seed->store, ledger, seed->settings->digest, error);
    for (size_t point = 0; point < seed->picture->point_count && status == FW_OK; point++)
        status = seed_advice(seed, point, ledger->entry, error);
    return status;
}

static enum fw_status seed_all(struct seed *seed, const char *why, struct ledger_entry *ledger,
                               struct fw_error *error)
{
    struct picture *picture = seed->picture;
    int64_t newest_entry = 0;
    enum fw_status status = store_newest_entry(seed->store, &newest_entry, error);
    seed->next_entry = picture->next_entry > newest_entry ? picture->next_entry : newest_entry + 1;
    if (status == FW_OK)
        status = store_add_settings(seed->store, seed->settings, seed->now_utc_s, error);
    for (size_t gauge = 0; gauge < picture->gauge_count && status == FW_OK; gauge++)
        status = seed_gauge(seed, &picture->gauges[gauge], error);
    for (size_t message = 0; message < picture->outbox_count && status == FW_OK; message++)
        status = seed_message(seed, &picture->outbox[message], error);
    for (size_t point = 0; point < picture->point_count && status == FW_OK; point++) {
        status = seed_point_facts(seed, point, error);
        if (status == FW_OK)
            status = seed_acceptance(seed, &picture->points[point], error);
    }
    if (status == FW_OK)
        status = save_counter(seed, error);
    return status == FW_OK ? seed_ledger(seed, why, ledger, error) : status;
}

static void take_numbers(struct seed *seed, const struct ledger_entry *ledger)
{
    for (size_t index = 0; index < seed->change_count; index++)
        *seed->changes[index].entry = seed->changes[index].number;
    seed->picture->next_entry = seed->next_entry;
    seed->picture->next_message_number = seed->next_message_number;
    snprintf(seed->picture->newest_link, sizeof seed->picture->newest_link, "%s", ledger->link);
    snprintf(seed->store->newest_link, sizeof seed->store->newest_link, "%s", ledger->link);
}

enum fw_status store_seed(struct store *store, const struct settings *settings, struct picture *picture,
                          int64_t now_utc_s, const char *why, struct fw_error *error)
{
    struct seed seed = {.store = store, .settings = settings, .picture = picture, .now_utc_s = now_utc_s};
    struct ledger_entry ledger = {0};
    enum fw_status status = store_check_writable(store, error);
    if (status == FW_OK)
        status = store_begin(store, error);
    if (status == FW_OK)
        status = store_end(store, seed_all(&seed, why, &ledger, error), error);
    if (status == FW_OK)
        take_numbers(&seed, &ledger);
    text_clear(&ledger.payload);
    free(seed.changes);
    return status;
}
