/* SPDX-License-Identifier: MIT */
#include "daemon/station.h"

#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "daemon/tell/sentence.h"

enum {
    RESCAN_MS = 30000,    /* folders without a watch, and those whose watch missed something */
    FIRST_LOOK_MS = 5000, /* the most that the first cycle waits for files that settle and replies under way */
    LOADED_BEYOND_WARM_UP_S = 6 * 3600
};

/* --- store ------------------------------------------------------------------------------------------------------ */

/* The store stays open: it keeps the lock, and is opened anew before the next cycle. */
static void note_store_trouble(struct station *station, const struct fw_error *error)
{
    bool is_news = !station->picture->is_store_failing;
    station->picture->is_store_failing = true;
    snprintf(station->picture->store_trouble, sizeof station->picture->store_trouble, "%.*s",
             (int)sizeof station->picture->store_trouble - 1, error->text);
    journal_say(&station->journal, is_news ? JOURNAL_ERROR : JOURNAL_WARNING,
                "store: %s; forecasts and messages go on from memory, nothing is being recorded", error->text);
}

static enum fw_status open_again(struct station *station, char moved_to[STORE_PATH_SIZE], struct fw_error *error)
{
    const char *file = station->settings->store_file;
    int64_t now_utc_s = clock_world_utc_s(&station->clock);
    if (station->store != NULL)
        return store_reopen(station->store, now_utc_s, moved_to, error);
    enum fw_status status = store_open(file, STORE_WRITE, &station->store, error);
    if (status != FW_DAMAGED)
        return status;
    status = store_rescue(file, now_utc_s, moved_to, error);
    return status == FW_OK ? store_open(file, STORE_WRITE, &station->store, error) : status;
}

static enum fw_status load_picture(struct station *station, struct fw_error *error);

/* Whose word is newer counts; of two pieces of advice the one of an open thread, and of two such the more urgent. */
static void merge_point(struct point_picture *loaded, const struct point_picture *memory)
{
    if (memory->road.at_utc_s > loaded->road.at_utc_s) {
        loaded->road = memory->road;
        loaded->crew_called_utc_s = memory->crew_called_utc_s;
    }
    if (memory->water.at_utc_s > loaded->water.at_utc_s)
        loaded->water = memory->water;
    if (memory->accepted_utc_s > loaded->accepted_utc_s) {
        loaded->accepted_utc_s = memory->accepted_utc_s;
        memcpy(loaded->accepted_by, memory->accepted_by, sizeof loaded->accepted_by);
    }
    bool is_memory_open = memory->advice.onset_utc_s != 0;
    if (loaded->advice.onset_utc_s == 0 || (is_memory_open && memory->advice.level > loaded->advice.level)) {
        loaded->advice = memory->advice;
        loaded->told_number = memory->told_number;
        loaded->is_outage_told = memory->is_outage_told;
    }
}

static enum fw_status merge_readings(struct picture *loaded, const struct gauge_picture *memory)
{
    enum fw_status status = FW_OK;
    for (size_t index = 0; index < memory->reading_count && status == FW_OK; index++) {
        struct reading reading = memory->readings[index].reading;
        bool was_new = false;
        reading.entry = loaded->next_entry++;
        status = picture_add_reading(loaded, &reading, &was_new);
    }
    return status;
}

/* All that was learnt since the start goes on top of what the store knew before. Takes the messages. */
static enum fw_status merge_memory(struct picture *loaded, struct picture *memory)
{
    enum fw_status status = FW_OK;
    for (size_t gauge = 0; gauge < memory->gauge_count && status == FW_OK; gauge++)
        status = merge_readings(loaded, &memory->gauges[gauge]);
    for (size_t index = 0; index < memory->outbox_count && status == FW_OK; index++)
        status = buffer_grow(&loaded->outbox, &loaded->outbox_capacity, loaded->outbox_count + index,
                             sizeof *loaded->outbox);
    if (status != FW_OK)
        return status;
    for (size_t point = 0; point < memory->point_count; point++)
        merge_point(&loaded->points[point], &memory->points[point]);
    for (size_t index = 0; index < memory->outbox_count; index++) {
        struct message *message = &loaded->outbox[loaded->outbox_count++];
        *message = memory->outbox[index];
        message->entry = loaded->next_entry++;
        memory->outbox[index].bulletin = NULL; /* the loaded picture's now */
    }
    if (memory->next_message_number > loaded->next_message_number)
        loaded->next_message_number = memory->next_message_number;
    return FW_OK;
}

/* Started without a store, the station knows nothing of what stands in it; one without a past has nothing to say. */
static enum fw_status take_over_late(struct station *station, struct fw_error *error)
{
    struct picture *memory = station->picture;
    station->picture = NULL;
    enum fw_status status = load_picture(station, error);
    struct picture *loaded = station->picture;
    bool has_past = status == FW_OK && loaded->newest_link[0] != '\0';
    if (has_past && merge_memory(loaded, memory) != FW_OK)
        status = fw_error_set(error, FW_NO_MEMORY, "no memory for the picture");
    if (status != FW_OK || !has_past) {
        picture_destroy(loaded);
        station->picture = memory;
        return status;
    }
    picture_destroy(memory);
    outbox_use_picture(station->outbox, loaded);
    return FW_OK;
}

/* A fresh or healed store takes over what memory holds. */
static void heal_store(struct station *station)
{
    char moved_to[STORE_PATH_SIZE] = "";
    char trouble[FACT_NOTE_SIZE];
    bool was_never_open = station->store == NULL;
    struct fw_error error = {.status = FW_OK};
    memcpy(trouble, station->picture->store_trouble, sizeof trouble);
    enum fw_status status = open_again(station, moved_to, &error);
    if (status == FW_OK && was_never_open)
        status = take_over_late(station, &error);
    if (status == FW_OK)
        status = store_seed(station->store, station->settings, station->picture, clock_world_utc_s(&station->clock),
                            trouble, &error);
    if (moved_to[0] != '\0')
        journal_say(&station->journal, JOURNAL_ERROR, "store: the damaged file is kept as %s", moved_to);
    if (status != FW_OK) {
        note_store_trouble(station, &error);
        return;
    }
    journal_say(&station->journal, JOURNAL_NOTICE,
                "store: recording again in %s; what memory holds was written to it", station->settings->store_file);
    station->picture->is_store_failing = false;
    station->picture->store_trouble[0] = '\0';
}

static enum fw_status load_picture(struct station *station, struct fw_error *error)
{
    const struct settings *settings = station->settings;
    int64_t now = clock_world_utc_s(&station->clock);
    struct picture *picture = NULL;
    enum fw_status status = picture_create(settings, &picture);
    if (status != FW_OK)
        return fw_error_set(error, status, "no memory for the picture");
    if (station->store != NULL)
        status = store_load_picture(station->store, settings, now - settings->warm_up_s - LOADED_BEYOND_WARM_UP_S,
                                    picture, error);
    if (status != FW_OK) {
        picture_destroy(picture);
        return status;
    }
    picture_destroy(station->picture);
    station->picture = picture;
    return FW_OK;
}

static enum fw_status open_store(struct station *station, struct fw_error *error)
{
    enum fw_status status = store_open(station->settings->store_file, STORE_WRITE, &station->store, error);
    if (status == FW_OK)
        status = store_keep_settings(station->store, station->settings, clock_world_utc_s(&station->clock), error);
    if (status == FW_OK)
        return load_picture(station, error);
    if (status == FW_LOCKED || status == FW_FOREIGN || status == FW_NO_MEMORY)
        return status;
    store_close(station->store);
    station->store = NULL;
    /* the river does not wait for a disk: start without one, say so, and try again at every cycle */
    enum fw_status picture_status = picture_create(station->settings, &station->picture);
    if (picture_status != FW_OK)
        return fw_error_set(error, picture_status, "no memory for the picture");
    note_store_trouble(station, error);
    return FW_OK;
}

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
        note_store_trouble(station, &error);
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
    enum fw_status status = open_store(station, error);
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
        heal_store(station);
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
            note_store_trouble(station, &error);
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
        status = load_picture(station, error);
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
