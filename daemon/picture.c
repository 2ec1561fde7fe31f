/* SPDX-License-Identifier: MIT */
#include "daemon/picture.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

static void gauge_picture_clear(struct gauge_picture *gauge)
{
    free(gauge->readings);
}

static void forecast_clear(struct forecast *forecast)
{
    free(forecast->low_mm);
    free(forecast->likely_mm);
    free(forecast->high_mm);
}

void picture_destroy(struct picture *picture)
{
    if (picture == NULL)
        return;
    for (size_t gauge = 0; gauge < picture->gauge_count && picture->gauges != NULL; gauge++)
        gauge_picture_clear(&picture->gauges[gauge]);
    for (size_t point = 0; point < picture->point_count && picture->points != NULL; point++)
        free(picture->points[point].marks);
    for (size_t message = 0; message < picture->outbox_count; message++)
        free(picture->outbox[message].bulletin);
    forecast_clear(&picture->forecast);
    free(picture->gauges);
    free(picture->points);
    free(picture->outbox);
    free(picture);
}

static const struct passage never_passes = {.earliest_utc_s = PASSAGE_NEVER,
                                            .likely_utc_s = PASSAGE_NEVER,
                                            .latest_utc_s = PASSAGE_NEVER,
                                            .below_again_earliest_utc_s = PASSAGE_NEVER,
                                            .below_again_latest_utc_s = PASSAGE_NEVER};

struct deck_picture deck_picture_empty(void)
{
    static const struct hazard_water none = {NAN, NAN, NAN};
    struct deck_picture deck = {.low = none, .likely = none, .high = none, .likely_utc_s = PASSAGE_NEVER};
    for (size_t whom = 0; whom < HAZARD_WHOM_COUNT; whom++)
        deck.over[whom] = never_passes;
    return deck;
}

static enum fw_status point_picture_init(struct point_picture *point, size_t mark_count)
{
    *point = (struct point_picture){
        .advice = advice_start(),
        .is_unknown = true,
        .measured_until_utc_s = 0,
        .water.depth_cm = NAN,
        .peak = {NAN, NAN, NAN, PASSAGE_NEVER},
        .level_now = {NAN, NAN, NAN},
        .deck = deck_picture_empty(),
        .road.state = ROAD_OPEN,
    };
    point->marks = calloc(mark_count + 1, sizeof *point->marks);
    if (point->marks == NULL)
        return FW_NO_MEMORY;
    for (size_t mark = 0; mark < mark_count; mark++)
        point->marks[mark].passage = never_passes;
    return FW_OK;
}

enum fw_status picture_create(const struct settings *settings, struct picture **picture_out)
{
    struct picture *picture = calloc(1, sizeof *picture);
    if (picture == NULL)
        return FW_NO_MEMORY;
    picture->next_entry = 1;
    picture->next_message_number = 1;
    picture->gauges = calloc(settings->gauge_count + 1, sizeof *picture->gauges);
    picture->points = calloc(settings->point_count + 1, sizeof *picture->points);
    if (picture->gauges == NULL || picture->points == NULL)
        goto no_memory;
    picture->gauge_count = settings->gauge_count;
    picture->point_count = settings->point_count;
    for (size_t point = 0; point < settings->point_count; point++)
        if (point_picture_init(&picture->points[point], settings->points[point].mark_count) != FW_OK)
            goto no_memory;
    *picture_out = picture;
    return FW_OK;
no_memory:
    picture_destroy(picture);
    return FW_NO_MEMORY;
}

/* A heap copy of count items; NULL for none, and *failed set when memory ran out. */
static void *copy_items(const void *items, size_t count, size_t size, bool *failed)
{
    if (count == 0 || items == NULL)
        return NULL;
    void *copy = malloc(count * size);
    if (copy == NULL)
        *failed = true;
    else
        memcpy(copy, items, count * size);
    return copy;
}

static void copy_outbox(const struct picture *picture, struct picture *copy, bool *failed)
{
    copy->outbox = copy_items(picture->outbox, picture->outbox_count, sizeof *picture->outbox, failed);
    copy->outbox_capacity = copy->outbox != NULL ? picture->outbox_count : 0;
    copy->outbox_count = copy->outbox_capacity;
    for (size_t message = 0; message < copy->outbox_count; message++) {
        const char *bulletin = picture->outbox[message].bulletin;
        copy->outbox[message].bulletin = bulletin != NULL ? strdup(bulletin) : NULL;
        *failed |= bulletin != NULL && copy->outbox[message].bulletin == NULL;
    }
}

enum fw_status picture_copy(const struct settings *settings, const struct picture *picture, struct picture **copy_out)
{
    bool failed = false;
    struct picture *copy = malloc(sizeof *copy);
    if (copy == NULL)
        return FW_NO_MEMORY;
    *copy = *picture;

    copy->gauges = copy_items(picture->gauges, picture->gauge_count, sizeof *picture->gauges, &failed);
    copy->gauge_count = copy->gauges != NULL ? picture->gauge_count : 0;
    for (size_t gauge = 0; gauge < copy->gauge_count; gauge++) {
        struct gauge_picture *one = &copy->gauges[gauge];
        one->readings = copy_items(one->readings, one->reading_count, sizeof *one->readings, &failed);
        one->reading_capacity = one->readings != NULL ? one->reading_count : 0;
        one->reading_count = one->reading_capacity;
    }
    copy->points = copy_items(picture->points, picture->point_count, sizeof *picture->points, &failed);
    copy->point_count = copy->points != NULL ? picture->point_count : 0;
    for (size_t point = 0; point < copy->point_count; point++)
        copy->points[point].marks = copy_items(copy->points[point].marks, settings->points[point].mark_count,
                                               sizeof *copy->points[point].marks, &failed);
    size_t values = picture->forecast.step_count * picture->point_count;
    copy->forecast.low_mm = copy_items(picture->forecast.low_mm, values, sizeof(int32_t), &failed);
    copy->forecast.likely_mm = copy_items(picture->forecast.likely_mm, values, sizeof(int32_t), &failed);
    copy->forecast.high_mm = copy_items(picture->forecast.high_mm, values, sizeof(int32_t), &failed);
    copy_outbox(picture, copy, &failed);
    if (failed) {
        picture_destroy(copy);
        return FW_NO_MEMORY;
    }
    *copy_out = copy;
    return FW_OK;
}

/* Hand first, then feeds in order of trust. */
static int compare_place(const struct reading *left, const struct reading *right)
{
    if (left->observed_utc_s != right->observed_utc_s)
        return left->observed_utc_s < right->observed_utc_s ? -1 : 1;
    return (left->source > right->source) - (left->source < right->source);
}

bool picture_knows_reading(const struct picture *picture, const struct reading *reading)
{
    const struct gauge_picture *gauge = &picture->gauges[reading->gauge];
    size_t low = 0;
    size_t high = gauge->reading_count;
    while (low < high) {
        size_t middle = low + (high - low) / 2;
        int order = compare_place(reading, &gauge->readings[middle].reading);
        if (order == 0)
            return gauge->readings[middle].reading.value_si == reading->value_si;
        if (order < 0)
            high = middle;
        else
            low = middle + 1;
    }
    return false;
}

enum fw_status picture_add_reading(struct picture *picture, const struct reading *reading, bool *was_new_out)
{
    struct gauge_picture *gauge = &picture->gauges[reading->gauge];
    size_t place = gauge->reading_count;
    while (place > 0 && compare_place(reading, &gauge->readings[place - 1].reading) < 0)
        place--;
    if (place > 0 && compare_place(reading, &gauge->readings[place - 1].reading) == 0) {
        struct known_reading *known = &gauge->readings[place - 1];
        *was_new_out = known->reading.value_si != reading->value_si;
        if (*was_new_out)
            *known = (struct known_reading){.reading = *reading};
        return FW_OK;
    }
    enum fw_status status =
        buffer_grow(&gauge->readings, &gauge->reading_capacity, gauge->reading_count, sizeof *gauge->readings);
    if (status != FW_OK)
        return status;
    memmove(&gauge->readings[place + 1], &gauge->readings[place],
            (gauge->reading_count - place) * sizeof *gauge->readings);
    gauge->readings[place] = (struct known_reading){.reading = *reading};
    gauge->reading_count++;
    *was_new_out = true;
    return FW_OK;
}

static void take_acceptance(struct point_picture *point, const struct word *word)
{
    if (word->at_utc_s < point->accepted_utc_s)
        return;
    point->accepted_utc_s = word->at_utc_s;
    memcpy(point->accepted_by, word->by, sizeof point->accepted_by);
}

/* A message number accepts the thread of the point it spoke of; without a number, every thread that was told. */
static void take_accept(struct picture *picture, const struct word *word)
{
    char *end;
    long number = strtol(word->subject, &end, 10);
    bool is_all = end == word->subject;
    for (size_t message = 0; message < picture->outbox_count; message++) {
        const struct message *told = &picture->outbox[message];
        if (told->point >= 0 && (size_t)told->point < picture->point_count && (is_all || told->number == number))
            take_acceptance(&picture->points[told->point], word);
    }
}

static void take_road(struct point_picture *point, const struct word *word)
{
    point->road = (struct road_fact){.state = word->road, .at_utc_s = word->at_utc_s};
    memcpy(point->road.by, word->by, sizeof point->road.by);
    bool is_crew = word->road == ROAD_CREW_CALLED || word->road == ROAD_CREW_OUT;
    if (is_crew && point->crew_called_utc_s == 0)
        point->crew_called_utc_s = word->at_utc_s;
    if (word->road == ROAD_OPEN || word->road == ROAD_HANDED_BACK)
        point->crew_called_utc_s = 0;
}

void picture_take_word(const struct settings *settings, struct picture *picture, const struct word *word)
{
    if (word->kind == WORD_ACCEPT) {
        take_accept(picture, word);
        return;
    }
    size_t index = settings_point_index(settings, word->subject);
    if (index == SETTINGS_NONE)
        return;
    struct point_picture *point = &picture->points[index];
    if (word->kind == WORD_ROAD && word->at_utc_s >= point->road.at_utc_s) {
        take_road(point, word);
    } else if (word->kind == WORD_SEEN && word->at_utc_s >= point->water.at_utc_s) {
        point->water = (struct water_fact){
            .is_known = true, .is_wet = word->is_wet, .depth_cm = word->value, .at_utc_s = word->at_utc_s};
        memcpy(point->water.by, word->by, sizeof point->water.by);
    }
}
