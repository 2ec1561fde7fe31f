/* SPDX-License-Identifier: MIT */
#include "daemon/feed/json_readings.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

#include "daemon/feed/json_text.h"
#include "daemon/feed/quantity.h"
#include "daemon/when.h"

#define MILLISECONDS_ABOVE 1e11      /* as seconds this is the year 5138 */
#define LAST_MOMENT_S 253402300799.0 /* the end of the year 9999 */
enum { SHOWN_BYTES = 60 };

struct reader {
    const struct settings_feed *feed;
    const struct when_zone *zone;
    const char *unit;
    enum settings_measure measures;
    const char *origin;
    struct news *news;
    struct reading made; /* what all readings of the reply share */
    struct json_tally tally;
};

static void describe(const cJSON *item, char text[SHOWN_BYTES + 16])
{
    if (item == NULL)
        snprintf(text, SHOWN_BYTES + 16, "nothing");
    else if (cJSON_IsString(item))
        snprintf(text, SHOWN_BYTES + 16, "'%.*s'", SHOWN_BYTES, item->valuestring);
    else if (cJSON_IsNumber(item))
        snprintf(text, SHOWN_BYTES + 16, "%.17g", item->valuedouble);
    else
        snprintf(text, SHOWN_BYTES + 16, "%s",
                 cJSON_IsNull(item)     ? "null"
                 : cJSON_IsBool(item)   ? "true or false"
                 : cJSON_IsObject(item) ? "an object"
                                        : "an array");
}

static bool read_time(const struct reader *reader, const cJSON *item, int64_t *utc_s_out, char *why, size_t why_size)
{
    if (item != NULL && cJSON_IsString(item)) {
        struct fw_error error = {0};
        if (when_parse(item->valuestring, reader->zone, utc_s_out, &error) == FW_OK)
            return true;
        snprintf(why, why_size, "%.300s", error.text);
        return false;
    }
    if (item != NULL && cJSON_IsNumber(item)) {
        double seconds = item->valuedouble > MILLISECONDS_ABOVE ? item->valuedouble / 1000.0 : item->valuedouble;
        if (seconds >= 0.0 && seconds <= LAST_MOMENT_S) { /* false for what is not a number, too */
            *utc_s_out = (int64_t)floor(seconds);
            return true;
        }
    }
    char shown[SHOWN_BYTES + 16];
    describe(item, shown);
    snprintf(why, why_size, "%s is not a time; expected RFC 3339 text, or seconds or milliseconds since 1970", shown);
    return false;
}

static bool read_value(const cJSON *item, double *value_out, char *why, size_t why_size)
{
    if (item != NULL && cJSON_IsNumber(item) && isfinite(item->valuedouble)) {
        *value_out = item->valuedouble;
        return true;
    }
    if (item != NULL && cJSON_IsString(item) && quantity_read_number(item->valuestring, value_out))
        return true;
    char shown[SHOWN_BYTES + 16];
    describe(item, shown);
    snprintf(why, why_size, "%s is not a number with a decimal point", shown);
    return false;
}

static void note_bad_element(struct reader *reader, const char *place, const char *pointer, const char *why)
{
    if (++reader->tally.bad_count <= JSON_NOTED_ELEMENTS)
        news_add_note(reader->news, reader->made.gauge, reader->made.source, true, "%.160s: %.80s%.60s: %s",
                      reader->origin, place, pointer, why);
}

/* `place` is the pointer to the element. */
static enum fw_status take_element(struct reader *reader, const cJSON *element, const char *place)
{
    const cJSON *value = json_text_at(element, reader->feed->value_column);
    struct reading reading = reader->made;
    char why[400];
    reader->tally.element_count++;
    if (value != NULL && cJSON_IsNull(value)) {
        reader->tally.null_count++;
        return FW_OK;
    }
    if (!read_time(reader, json_text_at(element, reader->feed->time_column), &reading.observed_utc_s, why,
                   sizeof why)) {
        note_bad_element(reader, place, reader->feed->time_column, why);
        return FW_OK;
    }
    if (!read_value(value, &reading.value, why, sizeof why)) {
        note_bad_element(reader, place, reader->feed->value_column, why);
        return FW_OK;
    }
    snprintf(reading.unit, sizeof reading.unit, "%s", reader->unit);
    enum fw_status status = quantity_to_si(reading.value, reader->unit, reader->measures, &reading.value_si);
    if (status == FW_OK)
        status = news_add_reading(reader->news, &reading);
    if (status == FW_OK) {
        if (reader->tally.reading_count++ == 0 || reading.observed_utc_s > reader->tally.newest_utc_s)
            reader->tally.newest_utc_s = reading.observed_utc_s;
    }
    return status;
}

static enum fw_status take_elements(struct reader *reader, const cJSON *container, struct fw_error *error)
{
    const char *pointer = reader->feed->readings_pointer != NULL ? reader->feed->readings_pointer : "";
    enum fw_status status = FW_OK;
    size_t index = 0;
    if (cJSON_IsObject(container) && json_text_at(container, reader->feed->time_column) != NULL) {
        status = take_element(reader, container, pointer); /* one reading by itself */
    } else if (cJSON_IsObject(container) || cJSON_IsArray(container)) {
        for (const cJSON *element = container->child; status == FW_OK && element != NULL; element = element->next) {
            char place[80];
            if (element->string != NULL)
                snprintf(place, sizeof place, "%.40s/%.30s", pointer, element->string);
            else
                snprintf(place, sizeof place, "%.40s/%zu", pointer, index);
            status = take_element(reader, element, place);
            index++;
        }
    } else {
        char shown[SHOWN_BYTES + 16];
        describe(container, shown);
        return fw_error_set(error, FW_BAD_INPUT, "%s at '%.80s'; expected an array or an object of readings", shown,
                            pointer);
    }
    return status == FW_OK ? FW_OK : fw_error_set(error, status, "out of memory");
}

static enum fw_status parse_reply(const char *bytes, size_t length, cJSON **root_out, struct fw_error *error)
{
    size_t at = length >= 3 && memcmp(bytes, "\xEF\xBB\xBF", 3) == 0 ? 3 : 0;
    while (at < length && json_text_is_blank(bytes[at]))
        at++;
    if (at == length)
        return fw_error_set(error, FW_BAD_INPUT, "an empty reply where JSON was expected");
    size_t shown = length - at < SHOWN_BYTES ? length - at : SHOWN_BYTES;
    if (bytes[at] == '<')
        return fw_error_set(error, FW_BAD_INPUT, "a web page where JSON was expected: '%.*s'", (int)shown,
                            bytes + at);
    enum fw_status status = json_text_parse(bytes, length, root_out, error);
    if (status == FW_BAD_INPUT && error != NULL) {
        struct fw_error why = *error;
        fw_error_set(error, status, "%s: '%.*s'", why.text, (int)shown, bytes + at);
    }
    return status;
}

static enum fw_status sum_up(const struct reader *reader, struct fw_error *error)
{
    const struct json_tally *tally = &reader->tally;
    if (tally->bad_count > JSON_NOTED_ELEMENTS)
        news_add_note(reader->news, reader->made.gauge, reader->made.source, true,
                      "%.160s: %zu more readings could not be read", reader->origin,
                      tally->bad_count - JSON_NOTED_ELEMENTS);
    if (tally->reading_count > 0)
        return FW_OK;
    if (tally->bad_count > 0)
        return fw_error_set(error, FW_BAD_INPUT, "none of %zu readings could be read", tally->element_count);
    return fw_error_set(error, FW_NOTHING_NEW, "no readings in the reply");
}

enum fw_status json_readings_add(const struct settings *settings, size_t gauge, size_t feed, const char *origin,
                                 const char *bytes, size_t length, int64_t received_utc_s, struct news *news,
                                 struct json_tally *tally_out, struct fw_error *error)
{
    const struct settings_gauge *known = &settings->gauges[gauge];
    struct reader reader = {
        .feed = &known->feeds[feed],
        .measures = known->measures,
        .origin = origin,
        .news = news,
        .made = {.gauge = (int32_t)gauge, .source = (int32_t)feed, .received_utc_s = received_utc_s}};
    double unused;
    reader.zone = reader.feed->has_zone ? &reader.feed->zone : NULL;
    reader.unit = reader.feed->unit != NULL ? reader.feed->unit : quantity_default_unit(known->measures);
    if (quantity_to_si(0.0, reader.unit, known->measures, &unused) != FW_OK)
        return fw_error_set(error, FW_BAD_INPUT, "unit '%s' does not fit gauge '%s'; expected %s", reader.unit,
                            known->id, quantity_known_units(known->measures));
    cJSON *root = NULL;
    enum fw_status status = parse_reply(bytes, length, &root, error);
    if (status == FW_OK)
        status = take_elements(
            &reader, json_text_at(root, reader.feed->readings_pointer != NULL ? reader.feed->readings_pointer : ""),
            error);
    if (status == FW_OK)
        status = sum_up(&reader, error);
    if (status == FW_OK || status == FW_NOTHING_NEW)
        *tally_out = reader.tally;
    cJSON_Delete(root);
    return status;
}
