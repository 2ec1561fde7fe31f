/* SPDX-License-Identifier: MIT */
#include "daemon/feed/csv_readings.h"

#include <csv.h>
#include <stdio.h>
#include <string.h>

#include "daemon/feed/quantity.h"
#include "daemon/when.h"

enum { FIELD_SIZE = 128 };

struct field { /* a copy of one field that is needed */
    bool is_there, is_whole;
    char text[FIELD_SIZE];
};

/* --- lines --- */

struct line {
    const char *bytes;
    size_t length; /* without its end */
};

/* The next line at *at, ended by LF, CRLF, CR, or the end of the text; false: there is none. */
static bool line_next(const char *bytes, size_t length, size_t *at, struct line *line_out)
{
    if (*at >= length)
        return false;
    size_t end = *at;
    while (end < length && bytes[end] != '\n' && bytes[end] != '\r')
        end++;
    *line_out = (struct line){.bytes = bytes + *at, .length = end - *at};
    if (end + 1 < length && bytes[end] == '\r' && bytes[end + 1] == '\n')
        end++;
    *at = end < length ? end + 1 : length;
    return true;
}

static bool is_blank(const struct line *line)
{
    for (size_t i = 0; i < line->length; i++)
        if (strchr(" \t\x1a", line->bytes[i]) == NULL || line->bytes[i] == '\0') /* 0x1a: the old end-of-file mark */
            return false;
    return true;
}

/* --- the header --- */

struct header_search {
    const struct settings_feed *feed;
    size_t column, time_count, value_count;
    struct csv_columns found;
};

static bool is_named(const void *field, size_t length, const char *name)
{
    return strlen(name) == length && memcmp(field, name, length) == 0;
}

static void header_field(void *field, size_t length, void *context)
{
    struct header_search *search = context;
    if (is_named(field, length, search->feed->time_column)) {
        search->found.time = search->column;
        search->time_count++;
    }
    if (is_named(field, length, search->feed->value_column)) {
        search->found.value = search->column;
        search->value_count++;
    }
    search->column++;
}

static enum fw_status search_header(const struct line *line, unsigned char delimiter, struct header_search *search)
{
    struct csv_parser parser;
    if (csv_init(&parser, CSV_APPEND_NULL) != 0)
        return FW_NO_MEMORY;
    csv_set_delim(&parser, delimiter);
    search->found.delimiter = delimiter;
    bool is_read = csv_parse(&parser, line->bytes, line->length, header_field, NULL, search) == line->length &&
                   csv_fini(&parser, header_field, NULL, search) == 0;
    csv_free(&parser);
    return is_read ? FW_OK : FW_NO_MEMORY;
}

enum fw_status csv_columns_find(const struct settings_feed *feed, const char *line, size_t length,
                                struct csv_columns *columns_out, struct fw_error *error)
{
    static const unsigned char delimiters[] = {',', ';', '\t'};
    struct line header = {.bytes = line, .length = length};
    size_t time_most = 0, value_most = 0;
    for (size_t i = 0; i < sizeof delimiters; i++) {
        struct header_search search = {.feed = feed};
        if (search_header(&header, delimiters[i], &search) != FW_OK)
            return fw_error_set(error, FW_NO_MEMORY, "out of memory");
        if (search.time_count == 1 && search.value_count == 1) {
            *columns_out = search.found;
            return FW_OK;
        }
        time_most = search.time_count > time_most ? search.time_count : time_most;
        value_most = search.value_count > value_most ? search.value_count : value_most;
    }
    const char *missing = time_most != 1 ? feed->time_column : feed->value_column;
    size_t count = time_most != 1 ? time_most : value_most;
    return fw_error_set(error, FW_BAD_INPUT,
                        "%s column '%s' in the header line '%.*s'; expected columns '%s' and '%s', divided by comma, "
                        "semicolon or tab",
                        count == 0 ? "no" : "more than one", missing, (int)(length < 200 ? length : 200), line,
                        feed->time_column, feed->value_column);
}

/* --- rows --- */

struct reader {
    const struct csv_source *source;
    const struct csv_columns *columns;
    const struct settings_feed *feed;
    const struct when_zone *zone;
    const char *unit;
    enum settings_measure measures;
    struct csv_parser parser;
    struct news *news;
    struct csv_tally *tally;
    /* one row */
    size_t column;
    struct field time, value;
};

static void field_keep(struct field *field, const void *bytes, size_t length)
{
    field->is_there = true;
    field->is_whole = length < FIELD_SIZE;
    size_t kept = field->is_whole ? length : FIELD_SIZE - 1;
    memcpy(field->text, bytes, kept);
    field->text[kept] = '\0';
}

static void row_field(void *bytes, size_t length, void *context)
{
    struct reader *reader = context;
    if (reader->column == reader->columns->time)
        field_keep(&reader->time, bytes, length);
    if (reader->column == reader->columns->value)
        field_keep(&reader->value, bytes, length);
    reader->column++;
}

static void note_bad_line(struct reader *reader, const char *why)
{
    struct csv_tally *tally = reader->tally;
    const struct csv_source *source = reader->source;
    if (++tally->bad_line_count > CSV_NOTED_LINES)
        return;
    char text[400];
    snprintf(text, sizeof text, "%s", why);
    news_make_printable(text);
    size_t line = source->lines_before + tally->physical_line_count;
    text_add(&tally->reasons, "%s:%zu: %s\n", source->origin, line, text);
    news_add_note(reader->news, (int32_t)source->gauge, (int32_t)source->feed, true, "%.200s:%zu: %s", source->origin,
                  line, text);
}

/* Splits one line and keeps the two fields that are needed. FW_NO_MEMORY. */
static enum fw_status split_line(struct reader *reader, const struct line *line)
{
    reader->column = 0;
    reader->time.is_there = reader->value.is_there = false;
    bool is_read = csv_parse(&reader->parser, line->bytes, line->length, row_field, NULL, reader) == line->length &&
                   csv_fini(&reader->parser, row_field, NULL, reader) == 0;
    return is_read ? FW_OK : FW_NO_MEMORY;
}

/* What is wrong with the row, in words; NULL: nothing, and *reading is filled. */
static const char *read_row(struct reader *reader, struct reading *reading, char *why, size_t why_size)
{
    const struct settings_feed *feed = reader->feed;
    if (!reader->time.is_there || !reader->value.is_there) {
        bool lacks_time = !reader->time.is_there;
        snprintf(why, why_size, "has %zu columns; expected '%s' in column %zu", reader->column,
                 lacks_time ? feed->time_column : feed->value_column,
                 (lacks_time ? reader->columns->time : reader->columns->value) + 1);
        return why;
    }
    struct fw_error error = {0};
    if (!reader->time.is_whole ||
        when_parse(reader->time.text, reader->zone, &reading->observed_utc_s, &error) != FW_OK) {
        snprintf(why, why_size, "%s: %.300s", feed->time_column,
                 reader->time.is_whole ? error.text : "is too long for a time");
        return why;
    }
    if (!reader->value.is_whole || !quantity_read_number(reader->value.text, &reading->value)) {
        snprintf(why, why_size, "%s: '%.60s' is not a number with a decimal point", feed->value_column,
                 reader->value.text);
        return why;
    }
    return NULL;
}

static bool is_header_again(const struct reader *reader)
{
    return reader->time.is_there && reader->value.is_there &&
           strcmp(reader->time.text, reader->feed->time_column) == 0 &&
           strcmp(reader->value.text, reader->feed->value_column) == 0;
}

static enum fw_status take_line(struct reader *reader, const struct line *line)
{
    reader->tally->physical_line_count++;
    if (is_blank(line))
        return FW_OK;
    char why[400] = "";
    struct reading reading = {.gauge = (int32_t)reader->source->gauge,
                              .source = (int32_t)reader->source->feed,
                              .received_utc_s = reader->source->received_utc_s};
    if (line->length > CSV_LINE_LIMIT) {
        snprintf(why, sizeof why, "has %zu bytes; expected at most %d", line->length, CSV_LINE_LIMIT);
    } else if (memchr(line->bytes, '\0', line->length) != NULL) {
        snprintf(why, sizeof why, "has a zero byte; expected text");
    } else {
        enum fw_status status = split_line(reader, line);
        if (status != FW_OK || is_header_again(reader))
            return status;
        read_row(reader, &reading, why, sizeof why);
    }
    reader->tally->line_count++;
    if (why[0] != '\0') {
        note_bad_line(reader, why);
        return FW_OK;
    }
    snprintf(reading.unit, sizeof reading.unit, "%s", reader->unit);
    enum fw_status status = quantity_to_si(reading.value, reader->unit, reader->measures, &reading.value_si);
    if (status == FW_OK)
        status = news_add_reading(reader->news, &reading);
    reader->tally->reading_count += status == FW_OK;
    return status;
}

/* What is said of the bad lines as a whole, after the first of them. */
static void sum_up_bad_lines(const struct reader *reader)
{
    struct csv_tally *tally = reader->tally;
    const struct csv_source *source = reader->source;
    if (tally->bad_line_count > CSV_NOTED_LINES) {
        size_t others = tally->bad_line_count - CSV_NOTED_LINES;
        text_add(&tally->reasons, "%s: %zu more lines could not be read\n", source->origin, others);
        news_add_note(reader->news, (int32_t)source->gauge, (int32_t)source->feed, true,
                      "%.200s: %zu more lines could not be read", source->origin, others);
    }
    if (tally->reading_count > 0 && tally->bad_line_count * 5 > tally->line_count)
        news_add_note(
            reader->news, (int32_t)source->gauge, (int32_t)source->feed, true,
            "%.200s: %zu of %zu lines could not be read; the others are kept. Has the logger's format changed?",
            source->origin, tally->bad_line_count, tally->line_count);
}

enum fw_status csv_readings_add(const struct csv_source *source, const struct csv_columns *columns, const char *bytes,
                                size_t length, struct news *news, struct csv_tally *tally, struct fw_error *error)
{
    const struct settings_gauge *gauge = &source->settings->gauges[source->gauge];
    const struct settings_feed *feed = &gauge->feeds[source->feed];
    struct reader reader = {.source = source,
                            .columns = columns,
                            .feed = feed,
                            .zone = feed->has_zone ? &feed->zone : NULL,
                            .unit = feed->unit != NULL ? feed->unit : quantity_default_unit(gauge->measures),
                            .measures = gauge->measures,
                            .news = news,
                            .tally = tally};
    double unused;
    if (quantity_to_si(0.0, reader.unit, gauge->measures, &unused) != FW_OK)
        return fw_error_set(error, FW_BAD_INPUT, "%.200s: unit '%s' does not fit gauge '%s'; expected %s",
                            source->origin, reader.unit, gauge->id, quantity_known_units(gauge->measures));
    if (csv_init(&reader.parser, CSV_APPEND_NULL) != 0)
        return fw_error_set(error, FW_NO_MEMORY, "%.200s: out of memory", source->origin);
    csv_set_delim(&reader.parser, columns->delimiter);
    enum fw_status status = FW_OK;
    size_t at = 0;
    struct line line;
    while (status == FW_OK && line_next(bytes, length, &at, &line))
        status = take_line(&reader, &line);
    csv_free(&reader.parser);
    sum_up_bad_lines(&reader);
    if (status == FW_OK)
        status = text_status(&tally->reasons);
    return status == FW_OK ? FW_OK : fw_error_set(error, status, "%.200s: out of memory", source->origin);
}

/* --- whole texts --- */

static size_t mark_length(const char *bytes, size_t length)
{
    return length >= 3 && memcmp(bytes, "\xEF\xBB\xBF", 3) == 0 ? 3 : 0;
}

static enum fw_status check_text(const struct csv_source *source, const char *bytes, size_t length,
                                 struct fw_error *error)
{
    if (length >= 2 && (memcmp(bytes, "\xFF\xFE", 2) == 0 || memcmp(bytes, "\xFE\xFF", 2) == 0))
        return fw_error_set(error, FW_BAD_INPUT, "%.200s: is UTF-16 text; expected UTF-8", source->origin);
    if (length > 0 && memchr(bytes, '\0', length) != NULL)
        return fw_error_set(error, FW_BAD_INPUT, "%.200s: has a zero byte: binary; expected text", source->origin);
    size_t at = 0, count = 0;
    struct line line;
    while (line_next(bytes, length, &at, &line))
        count++;
    if (count > CSV_LINE_COUNT_LIMIT)
        return fw_error_set(error, FW_BAD_INPUT, "%.200s: has %zu lines; expected at most %d", source->origin, count,
                            CSV_LINE_COUNT_LIMIT);
    return FW_OK;
}

/* The first line that is not blank; *at is moved past it, *count_out is its number. */
static bool find_header(const char *bytes, size_t length, size_t *at, struct line *line_out, size_t *count_out)
{
    size_t count = 0;
    while (line_next(bytes, length, at, line_out)) {
        count++;
        if (!is_blank(line_out)) {
            *count_out = count;
            return true;
        }
    }
    return false;
}

enum fw_status csv_readings_read(const struct csv_source *source, const char *bytes, size_t length, struct news *news,
                                 struct csv_tally *tally, struct fw_error *error)
{
    const struct settings_feed *feed = &source->settings->gauges[source->gauge].feeds[source->feed];
    struct csv_columns columns;
    struct line header;
    size_t at = mark_length(bytes, length);
    enum fw_status status = check_text(source, bytes, length, error);
    if (status != FW_OK)
        return status;
    if (!find_header(bytes, length, &at, &header, &tally->physical_line_count))
        return fw_error_set(error, FW_BAD_INPUT, "%.200s: is empty; expected a header line", source->origin);
    if (header.length > CSV_LINE_LIMIT)
        return fw_error_set(error, FW_BAD_INPUT, "%.200s:%zu: the header line has %zu bytes; expected at most %d",
                            source->origin, tally->physical_line_count, header.length, CSV_LINE_LIMIT);
    status = csv_columns_find(feed, header.bytes, header.length, &columns, error);
    if (status != FW_OK)
        return fw_error_prefix(error, status, "%.200s:%zu", source->origin, tally->physical_line_count);
    status = csv_readings_add(source, &columns, bytes + at, length - at, news, tally, error);
    if (status != FW_OK || tally->reading_count > 0)
        return status;
    if (tally->line_count == 0)
        return fw_error_set(error, FW_BAD_INPUT, "%.200s: has a header and no readings", source->origin);
    const char *first = text_string(&tally->reasons);
    return fw_error_set(error, FW_BAD_INPUT, "%.200s: none of %zu lines could be read; the first: %.*s",
                        source->origin, tally->line_count, (int)strcspn(first, "\n"), first);
}

void csv_tally_clear(struct csv_tally *tally)
{
    text_clear(&tally->reasons);
    *tally = (struct csv_tally){0};
}
