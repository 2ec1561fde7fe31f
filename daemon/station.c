/* SPDX-License-Identifier: MIT */
#include "daemon/station.h"

#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "daemon/station_store.h"
#include "daemon/tell/sentence.h"

enum {
    RESCAN_MS = 30000,    /* folders without a watch, and those whose watch missed something */
    FIRST_LOOK_MS = 5000, /* the most that the first cycle waits for files that settle and replies under way */
};

/* --- open and close --------------------------------------------------------------------------------------------- */

static void news_arrived(void *context)
{
    (void)context; /* the loop turns the station after every event */
}

static void delivery_settled(void *context, const struct message *message)
{
    struct station *station = context;
    struct fw_error error = {.status = FW_OK};
    if (station->picture->is_store_failing)
        return; /* the store learns of it when it is seeded */
    enum fw_status status = store_save_delivery(station->store, message, &error);
    if (status != FW_OK && status != FW_UNAVAILABLE)
        station_store_trouble(station, &error);
}

static enum fw_status open_folders(struct station *station, struct fw_error *error)
{
    const struct settings *settings = station->settings;
    size_t most = 0;
    for (size_t gauge = 0; gauge < settings->gauge_count; gauge++)
        most += settings->gauges[gauge].feed_count;
    station->folders = calloc(most + 1, sizeof(struct folder_feed *));
    if (station->folders == NULL)
        return fw_error_set(error, FW_NO_MEMORY, "no memory for the feeds");
    for (size_t gauge = 0; gauge < settings->gauge_count; gauge++)
        for (size_t feed = 0; feed < settings->gauges[gauge].feed_count; feed++) {
            if (settings->gauges[gauge].feeds[feed].kind != SETTINGS_FOLDER)
                continue;
            enum fw_status status =
                folder_feed_open(settings, gauge, feed, &station->folders[station->folder_count], error);
            if (status != FW_OK)
                return status;
            station->folder_count++;
        }
    return FW_OK;
}

static enum fw_status open_feeds(struct station *station, struct fw_error *error)
{
    enum fw_status status = open_folders(station, error);
    if (status == FW_OK)
        status = inbox_open(station->settings, &station->inbox, error);
    if (status == FW_OK)
        status = http_feeds_open(station->settings, station->event, &station->news, news_arrived, station,
                                 &station->http, error);
    if (status == FW_OK)
        status = outbox_open(station->settings, station->event, &station->journal, delivery_settled, station,
                             &station->outbox, error);
    if (status == FW_OK)
        outbox_use_clock(station->outbox, &station->clock);
    return status;
}

static void close_feeds(struct station *station)
{
    enum { HOOK_GRACE_MS = 500 };
    if (station->outbox != NULL)
        outbox_close(station->outbox, HOOK_GRACE_MS);
    http_feeds_close(station->http);
    if (station->inbox != NULL)
        inbox_close(station->inbox);
    for (size_t folder = 0; folder < station->folder_count; folder++)
        folder_feed_close(station->folders[folder]);
    free(station->folders);
    station->outbox = NULL;
    station->http = NULL;
    station->inbox = NULL;
    station->folders = NULL;
    station->folder_count = 0;
}

/* Cycles fall on whole multiples of the interval in UTC. */
static int64_t next_multiple(int64_t after_utc_s, int64_t every_s)
{
    return after_utc_s - after_utc_s % every_s + every_s;
}

enum fw_status station_open(struct station *station, struct settings *settings, struct clock clock,
                            struct fw_error *error)
{
    *station = (struct station){.journal = journal_open(stderr, JOURNAL_INFO),
                                .clock = clock,
                                .settings = settings,
                                .next_look_ms = -1,
                                .last_cycle_ms = clock_machine_ms()};
    if (sd_event_default(&station->event) < 0)
        return fw_error_set(error, FW_IO, "the event loop could not be made");
    enum fw_status status = station_store_open(station, error);
    if (status == FW_OK)
        status = cycle_create(settings, &station->cycle, error);
    if (status == FW_OK)
        status = open_feeds(station, error);
    if (status != FW_OK)
        return status;
    outbox_use_picture(station->outbox, station->picture);
    station->next_cycle_utc_s = clock_world_utc_s(&station->clock); /* one at once */
    station->first_cycle_by_ms = clock_machine_ms() + FIRST_LOOK_MS;
    char from[WHEN_TEXT_SIZE];
    if (station->picture->away_from_utc_s != 0)
        journal_say(&station->journal, JOURNAL_NOTICE, "was away since %s; carrying on from the store",
                    when_rfc3339_local(&settings->zone, station->picture->away_from_utc_s, from));
    return FW_OK;
}

void station_close(struct station *station)
{
    close_feeds(station);
    cycle_destroy(station->cycle);
    picture_destroy(station->picture);
    store_close(station->store);
    news_clear(&station->news);
    settings_destroy(station->settings);
    journal_flush(&station->journal);
    station->event = sd_event_unref(station->event);
}

/* --- one turn --------------------------------------------------------------------------------------------------- */

static void scan_folders(struct station *station, int64_t now_utc_s)
{
    int64_t machine_ms = clock_machine_ms();
    int64_t soonest_ms = -1;
    for (size_t folder = 0; folder < station->folder_count; folder++) {
        struct fw_error error = {.status = FW_OK};
        int64_t look_in_ms = -1;
        if (folder_feed_scan(station->folders[folder], machine_ms, now_utc_s, &station->news, &look_in_ms, &error) !=
            FW_OK)
            journal_say(&station->journal, JOURNAL_WARNING, "%s; looking again in %d s", error.text,
                        RESCAN_MS / 1000);
        if (look_in_ms >= 0 && (soonest_ms < 0 || look_in_ms < soonest_ms))
            soonest_ms = look_in_ms;
    }
    station->next_look_ms = soonest_ms < 0 ? -1 : machine_ms + soonest_ms;
    station->next_rescan_ms = machine_ms + RESCAN_MS;
}

static void scan_inbox(struct station *station, int64_t now_utc_s)
{
    struct fw_error error = {.status = FW_OK};
    if (inbox_scan(station->inbox, now_utc_s, &station->news, &error) != FW_OK)
        journal_say(&station->journal, JOURNAL_WARNING, "%s", error.text);
}

/* A message that was made while the store failed says so itself. */
static void mark_not_stored(struct picture *picture, size_t first_message)
{
    static const char warning[] = "NOT STORED: this message could not be recorded. Write it in the log book.\n";
    for (size_t index = first_message; index < picture->outbox_count; index++) {
        struct message *message = &picture->outbox[index];
        size_t length = strlen(message->bulletin);
        char *marked = malloc(sizeof warning + length);
        if (marked == NULL)
            continue; /* the message goes out as it is */
        memcpy(marked, warning, sizeof warning - 1);
        memcpy(marked + sizeof warning - 1, message->bulletin, length + 1);
        free(message->bulletin);
        message->bulletin = marked;
    }
}

static void settle_receipts(struct station *station, bool was_stored)
{
    struct fw_error error = {.status = FW_OK};
    for (size_t folder = 0; folder < station->folder_count; folder++)
        if (folder_feed_settle(station->folders[folder], &station->news, was_stored, &error) != FW_OK)
            journal_say(&station->journal, JOURNAL_WARNING, "%s", error.text);
    if (inbox_settle(station->inbox, &station->news, was_stored, &error) != FW_OK)
        journal_say(&station->journal, JOURNAL_WARNING, "%s", error.text);
}

static void say_changes(struct station *station, const struct delta *delta)
{
    for (size_t index = 0; index < delta->decision_count; index++) {
        struct text line = {0};
        sentence_change(station->settings, station->picture, &delta->decisions[index], &line);
        journal_say(&station->journal, JOURNAL_NOTICE, "%s", text_string(&line));
        text_clear(&line);
    }
    for (size_t index = 0; index < delta->word_count; index++) {
        char line[FACT_WORD_LINE_SIZE];
        word_line(station->settings, &delta->words[index], line);
        journal_say(&station->journal, JOURNAL_NOTICE, "said: %s", line);
    }
    for (size_t index = 0; index < station->news.note_count; index++)
        journal_say(&station->journal, station->news.notes[index].is_fault ? JOURNAL_WARNING : JOURNAL_NOTICE, "%s",
                    station->news.notes[index].text);
}

static void run_cycle(struct station *station, int64_t now_utc_s)
{
    struct delta delta = {0};
    struct fw_error error = {.status = FW_OK};
    if (station->picture->is_store_failing)
        station_store_heal(station);
    if (cycle_run(station->cycle, station->picture, &station->news, now_utc_s, &delta, &error) != FW_OK) {
        journal_say(&station->journal, JOURNAL_ERROR, "no forecast at this cycle: %s; the last one stands",
                    error.text);
        return; /* the news is kept for the next cycle */
    }
    bool was_failing = station->picture->is_store_failing;
    bool was_stored = false;
    if (!was_failing) {
        was_stored = store_commit(station->store, station->settings, &delta, &error) == FW_OK;
        if (!was_stored)
            station_store_trouble(station, &error);
    }
    bool is_failing = station->picture->is_store_failing;
    char trouble[FACT_NOTE_SIZE];
    memcpy(trouble, station->picture->store_trouble, sizeof trouble);
    picture_destroy(station->picture);
    station->picture = delta_take_picture(&delta);
    station->picture->is_store_failing = is_failing;
    memcpy(station->picture->store_trouble, trouble, sizeof trouble);
    if (!was_stored && !was_failing) /* made before the trouble was known; later ones say it themselves */
        mark_not_stored(station->picture, delta.first_message);
    outbox_use_picture(station->outbox, station->picture);
    if (station->picture->replaced_share > 0.0)
        journal_say(
            &station->journal, JOURNAL_WARNING,
            "routing: the full equations could not take some steps of this forecast; those were routed without "
            "backwater, and the bulletin says so");
    settle_receipts(station, was_stored);
    say_changes(station, &delta);
    news_clear(&station->news);
    delta_clear(&delta);
    station->cycle_count++;
    station->last_cycle_ms = clock_machine_ms();
}

static bool is_cycle_due(const struct station *station, int64_t now_utc_s)
{
    /* a clock that was set back must not silence us until it has caught up */
    return now_utc_s >= station->next_cycle_utc_s ||
           station->next_cycle_utc_s - now_utc_s > station->settings->forecast_every_s;
}

/* What every poll of a rolling window brings again is no news. */
static void drop_known_readings(struct station *station)
{
    size_t kept = 0;
    for (size_t index = 0; index < station->news.reading_count; index++)
        if (!picture_knows_reading(station->picture, &station->news.readings[index]))
            station->news.readings[kept++] = station->news.readings[index];
    station->news.reading_count = kept;
}

/* From a word file that was not removed, or is handed in twice. Its receipt stays, so that the file goes away. */
static void drop_known_words(struct station *station)
{
    size_t kept = 0;
    struct fw_error ignored = {.status = FW_OK}; /* a store that cannot say is no reason to lose a word */
    for (size_t index = 0; index < station->news.word_count; index++) {
        const struct word *word = &station->news.words[index];
        bool is_known = false;
        bool is_asked = !station->picture->is_store_failing &&
                        store_has_word(station->store, word->id, &is_known, &ignored) == FW_OK;
        if (!is_asked || !is_known)
            station->news.words[kept++] = *word;
    }
    station->news.word_count = kept;
}

/*
 * What came while nobody was here is read first: a cycle before that would find every gauge silent, and wake people
 * for a silence that ends a moment later.
 */
static bool waits_for_first_look(const struct station *station)
{
    bool is_coming = station->next_look_ms >= 0 || http_feeds_under_way(station->http) > 0;
    return station->cycle_count == 0 && is_coming && clock_machine_ms() < station->first_cycle_by_ms;
}

static bool is_cycle_wanted(const struct station *station, bool is_due)
{
    if (station->clock.is_driven && http_feeds_under_way(station->http) > 0)
        return false; /* a driven world waits for the replies of this minute: one cycle, not two */
    if (waits_for_first_look(station))
        return false;
    return is_due || !news_is_empty(&station->news) || station->news.receipt_count > 0;
}

void station_turn(struct station *station)
{
    int64_t now_utc_s = clock_world_utc_s(&station->clock);
    scan_inbox(station, now_utc_s);
    if (!station->is_paused) {
        http_feeds_poll(station->http, now_utc_s);
        scan_folders(station, now_utc_s);
    }
    drop_known_readings(station);
    drop_known_words(station);
    bool is_due = !station->is_paused && is_cycle_due(station, now_utc_s);
    if (is_cycle_wanted(station, is_due)) {
        if (is_due)
            station->next_cycle_utc_s = next_multiple(now_utc_s, station->settings->forecast_every_s);
        run_cycle(station, now_utc_s);
    }
    outbox_send_due(station->outbox, station->picture, now_utc_s);
}

bool station_is_idle(const struct station *station)
{
    int64_t now_utc_s = clock_world_utc_s(&station->clock);
    return news_is_empty(&station->news) && station->next_look_ms < 0 && http_feeds_under_way(station->http) == 0 &&
           outbox_under_way(station->outbox) == 0 && !is_cycle_due(station, now_utc_s) &&
           http_feeds_next_poll_utc_s(station->http) > now_utc_s &&
           outbox_next_try_utc_s(station->outbox, station->picture) > now_utc_s;
}

int64_t station_wait_ms(const struct station *station, int64_t most_ms)
{
    int64_t wait_ms = most_ms;
    int64_t machine_ms = clock_machine_ms();
    int64_t look_ms = station->next_look_ms >= 0 && station->next_look_ms < station->next_rescan_ms
                          ? station->next_look_ms
                          : station->next_rescan_ms;
    if (look_ms - machine_ms < wait_ms)
        wait_ms = look_ms - machine_ms;
    if (!station->clock.is_driven) {
        int64_t due_utc_s = station->next_cycle_utc_s;
        int64_t poll_utc_s = http_feeds_next_poll_utc_s(station->http);
        int64_t try_utc_s = outbox_next_try_utc_s(station->outbox, station->picture);
        due_utc_s = poll_utc_s < due_utc_s ? poll_utc_s : due_utc_s;
        due_utc_s = try_utc_s < due_utc_s ? try_utc_s : due_utc_s;
        int64_t until_ms = waits_for_first_look(station) ? station->first_cycle_by_ms - machine_ms
                                                         : (due_utc_s - clock_world_utc_s(&station->clock)) * 1000;
        wait_ms = until_ms < wait_ms ? until_ms : wait_ms;
    }
    return wait_ms < 0 ? 0 : wait_ms;
}

/* --- reload ----------------------------------------------------------------------------------------------------- */

static const char *removed_open_thread(const struct station *station, const struct settings *wanted)
{
    for (size_t point = 0; point < station->settings->point_count; point++)
        if (station->picture->points[point].advice.onset_utc_s != 0 &&
            settings_point_index(wanted, station->settings->points[point].id) == SETTINGS_NONE)
            return station->settings->points[point].id;
    return NULL;
}

static enum fw_status swap_settings(struct station *station, struct settings *wanted, struct fw_error *error)
{
    struct cycle *cycle = NULL;
    enum fw_status status = cycle_create(wanted, &cycle, error);
    if (status != FW_OK)
        return status;
    struct settings *old = station->settings;
    close_feeds(station);
    station->settings = wanted;
    status = open_feeds(station, error);
    if (status == FW_OK)
        status = store_keep_settings(station->store, wanted, clock_world_utc_s(&station->clock), error);
    if (status == FW_OK)
        status = station_store_load(station, error);
    if (status != FW_OK) {
        struct fw_error again = {.status = FW_OK};
        close_feeds(station);
        station->settings = old;
        cycle_destroy(cycle);
        if (open_feeds(station, &again) != FW_OK)
            journal_say(&station->journal, JOURNAL_ERROR, "feeds: %s", again.text);
        outbox_use_picture(station->outbox, station->picture);
        return status;
    }
    cycle_destroy(station->cycle);
    station->cycle = cycle;
    outbox_use_picture(station->outbox, station->picture);
    station->next_cycle_utc_s = clock_world_utc_s(&station->clock);
    settings_destroy(old);
    return FW_OK;
}

void station_reload(struct station *station)
{
    struct settings *wanted = NULL;
    struct settings_faults faults = {0};
    struct fw_error error = {.status = FW_OK};
    enum fw_status status = settings_read_file(station->settings->file, SETTINGS_FOR_RUN, &wanted, &faults, &error);
    for (size_t index = 0; index < faults.count; index++)
        journal_say(&station->journal, JOURNAL_ERROR, "%s", faults.faults[index].text);
    settings_faults_clear(&faults);
    if (status == FW_OK && station->picture->is_store_failing)
        status = fw_error_set(&error, FW_IO, "the store is failing, a changed configuration cannot be recorded");
    if (status == FW_OK && strcmp(wanted->store_file, station->settings->store_file) != 0)
        status = fw_error_set(&error, FW_BAD_INPUT, "store.file cannot change while the daemon runs");
    const char *open_thread = status == FW_OK ? removed_open_thread(station, wanted) : NULL;
    if (open_thread != NULL)
        status =
            fw_error_set(&error, FW_BAD_INPUT, "crossing '%s' has an open thread and cannot be removed", open_thread);
    if (status == FW_OK)
        status = swap_settings(station, wanted, &error);
    if (status != FW_OK) {
        settings_destroy(wanted);
        journal_say(&station->journal, JOURNAL_ERROR, "configuration not taken, the old one stays in force: %s",
                    error.text);
        return;
    }
    journal_say(&station->journal, JOURNAL_NOTICE, "configuration %.8s is in force", station->settings->digest);
}
