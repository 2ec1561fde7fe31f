/* SPDX-License-Identifier: MIT */
#include "daemon/command/replay.h"

#include <errno.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

#include "daemon/command/command.h"
#include "daemon/command/replay_report.h"
#include "daemon/store/store.h"
#include "daemon/tell/sentence.h"

struct replay {
    const struct settings *settings;
    struct replay_input input;
    struct store *store;
    struct cycle *cycle;
    struct picture *picture;
    struct news news;
    size_t next_reading, next_word;
    struct replay_report report;
};

/* Everything the box had by now goes into the news. */
static enum fw_status gather_news(struct replay *replay, int64_t now_utc_s)
{
    enum fw_status status = FW_OK;
    const struct replay_input *input = &replay->input;
    for (; status == FW_OK && replay->next_reading < input->reading_count &&
           input->readings[replay->next_reading].received_utc_s <= now_utc_s;
         replay->next_reading++)
        if (!picture_knows_reading(replay->picture, &input->readings[replay->next_reading]))
            status = news_add_reading(&replay->news, &input->readings[replay->next_reading]);
    for (; status == FW_OK && replay->next_word < input->word_count &&
           input->words[replay->next_word].received_utc_s <= now_utc_s;
         replay->next_word++)
        status = news_add_word(&replay->news, &input->words[replay->next_word]);
    return status;
}

/* Nobody is on the other end of a replay: what would have been sent counts as sent. */
static enum fw_status settle_messages(struct replay *replay, size_t first_message, int64_t now_utc_s,
                                      struct fw_error *error)
{
    enum fw_status status = FW_OK;
    for (size_t index = first_message; index < replay->picture->outbox_count && status == FW_OK; index++) {
        struct message *message = &replay->picture->outbox[index];
        message->state = DELIVERY_SENT;
        message->settled_utc_s = now_utc_s;
        message->tries = 1;
        snprintf(message->note, sizeof message->note, "replay: not sent");
        status = store_save_delivery(replay->store, message, error);
    }
    return status;
}

static enum fw_status run_cycle(struct replay *replay, int64_t now_utc_s, struct fw_error *error)
{
    struct delta delta = {0};
    enum fw_status status = cycle_run(replay->cycle, replay->picture, &replay->news, now_utc_s, &delta, error);
    if (status == FW_OK)
        status = store_commit(replay->store, replay->settings, &delta, error);
    if (status == FW_OK) {
        picture_destroy(replay->picture);
        replay->picture = delta_take_picture(&delta);
        status = settle_messages(replay, delta.first_message, now_utc_s, error);
    }
    if (status == FW_OK)
        replay_report_decisions(&replay->report, replay->settings, replay->picture, &delta);
    news_clear(&replay->news);
    delta_clear(&delta);
    return status;
}

static int64_t next_event(const struct replay *replay)
{
    const struct replay_input *input = &replay->input;
    int64_t next = INT64_MAX;
    if (replay->next_reading < input->reading_count)
        next = input->readings[replay->next_reading].received_utc_s;
    if (replay->next_word < input->word_count && input->words[replay->next_word].received_utc_s < next)
        next = input->words[replay->next_word].received_utc_s;
    return next;
}

static int64_t last_event(const struct replay_input *input)
{
    int64_t last = 0;
    if (input->reading_count > 0)
        last = input->readings[input->reading_count - 1].received_utc_s;
    if (input->word_count > 0 && input->words[input->word_count - 1].received_utc_s > last)
        last = input->words[input->word_count - 1].received_utc_s;
    return last;
}

/* Cycles at whole multiples of the interval, and at once when something comes in: as the loop does it. */
static enum fw_status walk(struct replay *replay, int64_t from_utc_s, int64_t until_utc_s, struct fw_error *error)
{
    int64_t every_s = replay->settings->forecast_every_s;
    int64_t due_utc_s = from_utc_s;
    enum fw_status status = FW_OK;
    while (status == FW_OK) {
        int64_t event_utc_s = next_event(replay);
        int64_t now_utc_s = event_utc_s < due_utc_s ? event_utc_s : due_utc_s;
        if (now_utc_s > until_utc_s)
            break;
        status = gather_news(replay, now_utc_s);
        if (status != FW_OK)
            return fw_error_set(error, status, "no memory for the news");
        if (now_utc_s >= due_utc_s || !news_is_empty(&replay->news))
            status = run_cycle(replay, now_utc_s, error);
        if (now_utc_s >= due_utc_s)
            due_utc_s = now_utc_s - now_utc_s % every_s + every_s;
    }
    return status;
}

static enum fw_status open_scratch_store(struct replay *replay, const char *file, int64_t from_utc_s,
                                         struct fw_error *error)
{
    if (access(file, F_OK) == 0)
        return fw_error_set(error, FW_USAGE, "--store: %s exists already; a replay makes a new file of its own",
                            file);
    enum fw_status status = store_open(file, STORE_WRITE, &replay->store, error);
    if (status == FW_OK)
        status = store_keep_settings(replay->store, replay->settings, from_utc_s, error);
    if (status == FW_OK && picture_create(replay->settings, &replay->picture) != FW_OK)
        status = fw_error_set(error, FW_NO_MEMORY, "no memory for the picture");
    if (status == FW_OK)
        status = cycle_create(replay->settings, &replay->cycle, error);
    return status;
}

struct replay_options {
    struct option_values config, readings, from, between, words, truth, store, until, json;
};

static enum fw_status read_input(struct replay *replay, const struct replay_options *given, const char *between_to,
                                 struct fw_error *error)
{
    enum fw_status status = FW_OK;
    if (given->from.count > 0) {
        int64_t from_utc_s = 0;
        int64_t to_utc_s = 0;
        status = when_parse(option_text(&given->between, ""), &replay->settings->zone, &from_utc_s, error);
        if (status == FW_OK)
            status = when_parse(between_to != NULL ? between_to : "", &replay->settings->zone, &to_utc_s, error);
        if (status != FW_OK)
            return fw_error_prefix(error, FW_USAGE, "--from needs --between FROM TO");
        status = replay_read_store(replay->settings, option_text(&given->from, NULL), from_utc_s, to_utc_s,
                                   &replay->input, error);
    }
    if (status == FW_OK)
        status = replay_read_readings(replay->settings, &given->readings, &replay->input, error);
    if (status == FW_OK)
        status = replay_read_words(replay->settings, &given->words, &replay->input, error);
    if (status == FW_OK)
        status = replay_read_truth(replay->settings, &given->truth, &replay->input, error);
    if (status == FW_OK && replay->input.reading_count == 0)
        status = fw_error_set(error, FW_USAGE, "nothing to replay: give --readings, or --from with --between");
    replay_input_sort(&replay->input);
    return status;
}

static enum fw_status replay_all(struct replay *replay, const struct replay_options *given, const char *between_to,
                                 struct fw_error *error)
{
    int64_t until_utc_s = 0;
    enum fw_status status = read_input(replay, given, between_to, error);
    if (status == FW_OK)
        until_utc_s = last_event(&replay->input);
    if (status == FW_OK && given->until.count > 0)
        status = when_parse(option_text(&given->until, ""), &replay->settings->zone, &until_utc_s, error);
    if (status != FW_OK)
        return status;
    int64_t from_utc_s = next_event(replay);
    status = open_scratch_store(replay, option_text(&given->store, NULL), from_utc_s, error);
    if (status == FW_OK)
        status = replay_report_open(&replay->report, replay->settings, given->json.count > 0);
    if (status == FW_OK)
        status = walk(replay, from_utc_s, until_utc_s, error);
    if (status == FW_OK)
        replay_report_close(&replay->report, replay->settings, replay->picture, replay->input.truth);
    if (status == FW_OK && (fflush(stdout) != 0 || ferror(stdout)))
        status = fw_error_set(error, FW_IO, "standard output: %s", strerror(errno));
    return status;
}

enum fw_status command_replay(int argument_count, char *arguments[], struct fw_error *error)
{
    struct replay_options given = {0};
    const struct option_spec options[] = {
        {"config", "FILE", "the configuration", &given.config},
        {"readings", "GAUGE=FILE.csv",
         "columns observed, stage_m (or discharge_m3s) and, where known, received, source", &given.readings},
        {"from", "STORE", "take readings and words from this store", &given.from},
        {"between", "FROM TO", "with --from: what was received in [FROM, TO)", &given.between},
        {"words", "FILE.csv", "what people said: time, then the words of 'say', one a column", &given.words},
        {"truth", "POINT=FILE.csv", "observed level at a crossing: columns time, stage_m (above invert)",
         &given.truth},
        {"store", "OUT.db", "the new store to write", &given.store},
        {"until", "TIME", "go on until then (default: the last reading or word)", &given.until},
        {"json", NULL, "one JSON object a line", &given.json},
        {NULL, NULL, NULL, NULL}};
    const struct command_line line = {
        "replay", "",
        "Runs the daemon's own cycle over past readings, on their own clock, as known at "
        "each minute; prints every change of decision.",
        options};
    struct replay replay = {0};
    struct settings *settings = NULL;
    int rest = 0;
    enum fw_status status = options_read(&line, argument_count, arguments, &rest, error);
    if (status != FW_OK)
        return status;
    const char *between_to = given.between.count > 0 && rest < argument_count ? arguments[rest++] : NULL;
    if (rest < argument_count)
        return fw_error_set(error, FW_USAGE, "replay: '%s' is not expected here", arguments[rest]);
    if (given.store.count == 0)
        return fw_error_set(error, FW_USAGE, "replay needs --store OUT.db");
    status =
        command_read_settings(option_text(&given.config, COMMAND_DEFAULT_CONFIG), SETTINGS_FOR_RUN, &settings, error);
    if (status != FW_OK)
        return status;
    replay.settings = settings;
    status = replay_all(&replay, &given, between_to, error);
    replay_report_clear(&replay.report);
    news_clear(&replay.news);
    cycle_destroy(replay.cycle);
    picture_destroy(replay.picture);
    store_close(replay.store);
    replay_input_clear(settings, &replay.input);
    settings_destroy(settings);
    return status;
}
