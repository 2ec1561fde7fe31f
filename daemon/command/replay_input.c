/* SPDX-License-Identifier: MIT */
#include "daemon/command/replay.h"

#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "daemon/command/table.h"
#include "daemon/feed/inbox.h"
#include "daemon/feed/quantity.h"
#include "daemon/store/store.h"

static enum fw_status add_reading(struct replay_input *input, const struct reading *reading, struct fw_error *error)
{
    if (buffer_grow(&input->readings, &input->reading_capacity, input->reading_count, sizeof *input->readings) !=
        FW_OK)
        return fw_error_set(error, FW_NO_MEMORY, "no memory for the readings");
    input->readings[input->reading_count++] = *reading;
    return FW_OK;
}

static enum fw_status add_word(struct replay_input *input, const struct word *word, struct fw_error *error)
{
    if (buffer_grow(&input->words, &input->word_capacity, input->word_count, sizeof *input->words) != FW_OK)
        return fw_error_set(error, FW_NO_MEMORY, "no memory for the words");
    input->words[input->word_count++] = *word;
    return FW_OK;
}

struct reading_columns {
    size_t observed, value, received, source;
};

static enum fw_status find_columns(const struct table *table, enum settings_measure measures,
                                   struct reading_columns *columns_out, struct fw_error *error)
{
    const char *quantity = measures == SETTINGS_STAGE ? "stage_m" : "discharge_m3s";
    struct reading_columns columns = {.observed = table_column(table, "observed"),
                                      .value = table_column(table, quantity),
                                      .received = table_column(table, "received"),
                                      .source = table_column(table, "source")};
    if (columns.observed == TABLE_NO_COLUMN)
        columns.observed = table_column(table, "time");
    if (columns.value == TABLE_NO_COLUMN)
        columns.value = table_column(table, "value");
    if (columns.observed == TABLE_NO_COLUMN || columns.value == TABLE_NO_COLUMN)
        return fw_error_set(error, FW_BAD_INPUT, "%s:%zu: the header must name observed (or time) and %s",
                            table->file, table->line[0], quantity);
    *columns_out = columns;
    return FW_OK;
}

static enum fw_status read_reading(const struct settings *settings, size_t gauge, const struct table *table,
                                   size_t row, const struct reading_columns *columns, struct reading *reading_out,
                                   struct fw_error *error)
{
    struct reading reading = {.gauge = (int32_t)gauge};
    double source = 0.0;
    enum fw_status status = table_time(table, row, columns->observed, &reading.observed_utc_s, error);
    if (status == FW_OK)
        status = table_number(table, row, columns->value, &reading.value, error);
    reading.received_utc_s = reading.observed_utc_s;
    if (status == FW_OK && table_cell(table, row, columns->received)[0] != '\0')
        status = table_time(table, row, columns->received, &reading.received_utc_s, error);
    if (status == FW_OK && table_cell(table, row, columns->source)[0] != '\0')
        status = table_number(table, row, columns->source, &source, error);
    if (status != FW_OK)
        return status;
    if (source < 0.0 || source >= (double)settings->gauges[gauge].feed_count || source != floor(source))
        return fw_error_set(error, FW_BAD_INPUT, "%s:%zu: source: %g is not the number of a feed of '%s' (0 to %zu)",
                            table->file, table->line[row + 1], source, settings->gauges[gauge].id,
                            settings->gauges[gauge].feed_count - 1);
    reading.source = (int32_t)source;
    reading.value_si = reading.value;
    snprintf(reading.unit, sizeof reading.unit, "%s", quantity_default_unit(settings->gauges[gauge].measures));
    *reading_out = reading;
    return FW_OK;
}

enum fw_status replay_read_readings(const struct settings *settings, const struct option_values *files,
                                    struct replay_input *input, struct fw_error *error)
{
    enum fw_status status = FW_OK;
    for (size_t index = 0; index < files->count && status == FW_OK; index++) {
        char id[FACT_ID_SIZE];
        const char *file = NULL;
        struct table table = {0};
        struct reading_columns columns = {0};
        status = table_split_argument("readings", files->values[index], id, sizeof id, &file, error);
        if (status != FW_OK)
            return status;
        size_t gauge = settings_gauge_index(settings, id);
        if (gauge == SETTINGS_NONE)
            return fw_error_set(error, FW_USAGE, "--readings: '%s' is not a gauge of the configuration", id);
        status = table_read(file, &table, error);
        if (status == FW_OK)
            status = find_columns(&table, settings->gauges[gauge].measures, &columns, error);
        for (size_t row = 0; status == FW_OK && row < table.row_count; row++) {
            struct reading reading;
            status = read_reading(settings, gauge, &table, row, &columns, &reading, error);
            if (status == FW_OK)
                status = add_reading(input, &reading, error);
        }
        table_clear(&table);
    }
    return status;
}

static enum fw_status read_word(const struct settings *settings, const struct table *table, size_t row,
                                struct word *word_out, struct fw_error *error)
{
    enum { WORDS_MAX = 32 };
    char *arguments[WORDS_MAX + 1];
    int count = 0;
    int64_t at_utc_s = 0;
    enum fw_status status = table_time(table, row, 0, &at_utc_s, error);
    for (size_t column = 1; column < table_cell_count(table, row) && count < WORDS_MAX; column++)
        if (table_cell(table, row, column)[0] != '\0')
            arguments[count++] = table->cells[table->first_cell[row + 1] + column];
    arguments[count] = NULL;
    if (status == FW_OK)
        status = word_parse(settings, count, arguments, at_utc_s, word_out, error);
    if (status != FW_OK)
        return fw_error_prefix(error, FW_BAD_INPUT, "%s:%zu", table->file, table->line[row + 1]);
    word_out->received_utc_s = at_utc_s;
    snprintf(word_out->id, sizeof word_out->id, "row-%zu", row + 1);
    return FW_OK;
}

enum fw_status replay_read_words(const struct settings *settings, const struct option_values *files,
                                 struct replay_input *input, struct fw_error *error)
{
    enum fw_status status = FW_OK;
    for (size_t index = 0; index < files->count && status == FW_OK; index++) {
        struct table table = {0};
        status = table_read(files->values[index], &table, error);
        for (size_t row = 0; status == FW_OK && row < table.row_count; row++) {
            struct word word = {0};
            status = read_word(settings, &table, row, &word, error);
            if (status == FW_OK)
                status = add_word(input, &word, error);
        }
        table_clear(&table);
    }
    return status;
}

static enum fw_status read_truth_rows(const struct table *table, struct replay_truth *truth, struct fw_error *error)
{
    size_t time_column = table_column(table, "time");
    size_t stage_column = table_column(table, "stage_m");
    if (time_column == TABLE_NO_COLUMN || stage_column == TABLE_NO_COLUMN)
        return fw_error_set(error, FW_BAD_INPUT, "%s:%zu: the header must name time and stage_m", table->file,
                            table->line[0]);
    truth->utc_s = calloc(table->row_count + 1, sizeof *truth->utc_s);
    truth->stage_m = calloc(table->row_count + 1, sizeof *truth->stage_m);
    if (truth->utc_s == NULL || truth->stage_m == NULL)
        return fw_error_set(error, FW_NO_MEMORY, "%s: no memory", table->file);
    enum fw_status status = FW_OK;
    for (size_t row = 0; row < table->row_count && status == FW_OK; row++) {
        status = table_time(table, row, time_column, &truth->utc_s[row], error);
        if (status == FW_OK)
            status = table_number(table, row, stage_column, &truth->stage_m[row], error);
        if (status == FW_OK && row > 0 && truth->utc_s[row] <= truth->utc_s[row - 1])
            status = fw_error_set(error, FW_BAD_INPUT, "%s:%zu: time: '%s' is not after the row before it",
                                  table->file, table->line[row + 1], table_cell(table, row, time_column));
        truth->count = row + 1;
    }
    return status;
}

enum fw_status replay_read_truth(const struct settings *settings, const struct option_values *files,
                                 struct replay_input *input, struct fw_error *error)
{
    input->truth = calloc(settings->point_count + 1, sizeof *input->truth);
    if (input->truth == NULL)
        return fw_error_set(error, FW_NO_MEMORY, "no memory for the truth");
    enum fw_status status = FW_OK;
    for (size_t index = 0; index < files->count && status == FW_OK; index++) {
        char id[FACT_ID_SIZE];
        const char *file = NULL;
        struct table table = {0};
        status = table_split_argument("truth", files->values[index], id, sizeof id, &file, error);
        if (status != FW_OK)
            return status;
        size_t point = settings_point_index(settings, id);
        if (point == SETTINGS_NONE)
            return fw_error_set(error, FW_USAGE, "--truth: '%s' is not a point of the configuration", id);
        if (input->truth[point].count > 0)
            return fw_error_set(error, FW_USAGE, "--truth: point '%s' is given twice", id);
        status = table_read(file, &table, error);
        if (status == FW_OK)
            status = read_truth_rows(&table, &input->truth[point], error);
        table_clear(&table);
    }
    return status;
}

enum fw_status replay_read_store(const struct settings *settings, const char *store_file, int64_t from_utc_s,
                                 int64_t to_utc_s, struct replay_input *input, struct fw_error *error)
{
    struct store *store = NULL;
    struct reading *readings = NULL;
    struct word *words = NULL;
    size_t reading_count = 0;
    size_t word_count = 0;
    enum fw_status status = store_open(store_file, STORE_READ, &store, error);
    if (status == FW_OK)
        status = store_list_readings(store, settings, from_utc_s, to_utc_s, &readings, &reading_count, error);
    if (status == FW_OK)
        status = store_list_words(store, from_utc_s, to_utc_s, &words, &word_count, error);
    for (size_t index = 0; index < reading_count && status == FW_OK; index++)
        if (readings[index].source != FACT_SOURCE_HAND) /* those come again with the words that carried them */
            status = add_reading(input, &readings[index], error);
    for (size_t index = 0; index < word_count && status == FW_OK; index++)
        status = add_word(input, &words[index], error);
    free(readings);
    free(words);
    store_close(store);
    return status;
}

static int compare_received(int64_t left_utc_s, int64_t left_order, int64_t right_utc_s, int64_t right_order)
{
    if (left_utc_s != right_utc_s)
        return left_utc_s < right_utc_s ? -1 : 1;
    return (left_order > right_order) - (left_order < right_order);
}

static int compare_readings(const void *left, const void *right)
{
    const struct reading *a = left;
    const struct reading *b = right;
    return compare_received(a->received_utc_s, a->entry, b->received_utc_s, b->entry);
}

static int compare_words(const void *left, const void *right)
{
    const struct word *a = left;
    const struct word *b = right;
    return compare_received(a->received_utc_s, a->entry, b->received_utc_s, b->entry);
}

/* What came in together stays in the order it came; the cycle numbers everything anew. */
void replay_input_sort(struct replay_input *input)
{
    for (size_t index = 0; index < input->reading_count; index++)
        input->readings[index].entry = (int64_t)index;
    for (size_t index = 0; index < input->word_count; index++)
        input->words[index].entry = (int64_t)index;
    if (input->reading_count > 0)
        qsort(input->readings, input->reading_count, sizeof *input->readings, compare_readings);
    if (input->word_count > 0)
        qsort(input->words, input->word_count, sizeof *input->words, compare_words);
}

void replay_input_clear(const struct settings *settings, struct replay_input *input)
{
    for (size_t point = 0; input->truth != NULL && point < settings->point_count; point++) {
        free(input->truth[point].utc_s);
        free(input->truth[point].stage_m);
    }
    free(input->truth);
    free(input->readings);
    free(input->words);
    *input = (struct replay_input){0};
}

int64_t replay_truth_passage(const struct replay_truth *truth, double mark_m, int64_t from_utc_s)
{
    for (size_t row = 0; row < truth->count; row++) {
        if (truth->utc_s[row] < from_utc_s || truth->stage_m[row] < mark_m)
            continue;
        if (row == 0 || truth->stage_m[row - 1] >= mark_m)
            return truth->utc_s[row];
        double share = (mark_m - truth->stage_m[row - 1]) / (truth->stage_m[row] - truth->stage_m[row - 1]);
        return truth->utc_s[row - 1] + (int64_t)(share * (double)(truth->utc_s[row] - truth->utc_s[row - 1]));
    }
    return PASSAGE_NEVER;
}
