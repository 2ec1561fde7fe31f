/* SPDX-License-Identifier: MIT */
#include "daemon/station_store.h"

#include <stdio.h>
#include <string.h>

void station_store_trouble(struct station *station, const struct fw_error *error)
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
    enum fw_status status = station_store_load(station, error);
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

void station_store_heal(struct station *station)
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
        station_store_trouble(station, &error);
        return;
    }
    journal_say(&station->journal, JOURNAL_NOTICE,
                "store: recording again in %s; what memory holds was written to it", station->settings->store_file);
    station->picture->is_store_failing = false;
    station->picture->store_trouble[0] = '\0';
}

enum fw_status station_store_load(struct station *station, struct fw_error *error)
{
    const struct settings *settings = station->settings;
    int64_t now = clock_world_utc_s(&station->clock);
    struct picture *picture = NULL;
    enum fw_status status = picture_create(settings, &picture);
    if (status != FW_OK)
        return fw_error_set(error, status, "no memory for the picture");
    if (station->store != NULL)
        status =
            store_load_picture(station->store, settings, cycle_readings_from_utc_s(settings, now), picture, error);
    if (status != FW_OK) {
        picture_destroy(picture);
        return status;
    }
    picture_destroy(station->picture);
    station->picture = picture;
    return FW_OK;
}

enum fw_status station_store_open(struct station *station, struct fw_error *error)
{
    enum fw_status status = store_open(station->settings->store_file, STORE_WRITE, &station->store, error);
    if (status == FW_OK)
        status = store_keep_settings(station->store, station->settings, clock_world_utc_s(&station->clock), error);
    if (status == FW_OK && store_upgraded_from(station->store) != 0)
        journal_say(&station->journal, JOURNAL_NOTICE,
                    "store: was of version %d and has been brought on; what it was is kept as %s.version-%d",
                    store_upgraded_from(station->store), station->settings->store_file,
                    store_upgraded_from(station->store));
    if (status == FW_OK)
        return station_store_load(station, error);
    if (status == FW_LOCKED || status == FW_FOREIGN || status == FW_NO_MEMORY)
        return status;
    store_close(station->store);
    station->store = NULL;
    /* the river does not wait for a disk: start without one, say so, and try again at every cycle */
    enum fw_status picture_status = picture_create(station->settings, &station->picture);
    if (picture_status != FW_OK)
        return fw_error_set(error, picture_status, "no memory for the picture");
    station_store_trouble(station, error);
    return FW_OK;
}
