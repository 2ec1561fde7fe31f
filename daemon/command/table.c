/* SPDX-License-Identifier: MIT */
#include "daemon/command/table.h"

#include <csv.h>
#include <errno.h>
#include <stdbool.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "daemon/buffer.h"
#include "daemon/feed/quantity.h"

struct reader {
    struct table *table;
    size_t cell_capacity, row_capacity, line_capacity;
    size_t row_count; /* the header counted */
    size_t line;
    bool is_row_open;
    bool is_short; /* memory ran out */
};

static void on_cell(void *bytes, size_t length, void *context)
{
    struct reader *reader = context;
    struct table *table = reader->table;
    if (!reader->is_row_open) {
        if (buffer_grow(&table->first_cell, &reader->row_capacity, reader->row_count + 1, sizeof(size_t)) != FW_OK ||
            buffer_grow(&table->line, &reader->line_capacity, reader->row_count, sizeof(size_t)) != FW_OK) {
            reader->is_short = true;
            return;
        }
        table->first_cell[reader->row_count] = table->cell_count;
        table->line[reader->row_count] = reader->line;
        reader->is_row_open = true;
    }
    char *cell = strndup(bytes != NULL ? bytes : "", length);
    if (cell == NULL ||
        buffer_grow(&table->cells, &reader->cell_capacity, table->cell_count, sizeof *table->cells) != FW_OK) {
        free(cell);
        reader->is_short = true;
        return;
    }
    table->cells[table->cell_count++] = cell;
}

static void on_row(int character, void *context)
{
    (void)character;
    struct reader *reader = context;
    if (!reader->is_row_open)
        return;
    reader->row_count++;
    reader->table->first_cell[reader->row_count] = reader->table->cell_count;
    reader->is_row_open = false;
}

/* One line at a time, so that a row knows its line; comment lines ('#') and blank ones are passed over. */
static enum fw_status parse_lines(FILE *stream, struct csv_parser *parser, struct reader *reader,
                                  struct fw_error *error)
{
    char *text = NULL;
    size_t capacity = 0;
    enum fw_status status = FW_OK;
    for (ssize_t length; status == FW_OK && (length = getline(&text, &capacity, stream)) >= 0;) {
        reader->line++;
        const char *from = text;
        if (reader->line == 1 && length >= 3 && memcmp(text, "\xEF\xBB\xBF", 3) == 0)
            from += 3;
        if (*from == '#' && !reader->is_row_open)
            continue;
        if (memchr(text, '\0', (size_t)length) != NULL)
            status = fw_error_set(error, FW_BAD_INPUT, "%s:%zu: a zero byte where CSV text was expected",
                                  reader->table->file, reader->line);
        else if (csv_parse(parser, from, (size_t)length - (size_t)(from - text), on_cell, on_row, reader) !=
                 (size_t)length - (size_t)(from - text))
            status = fw_error_set(error, FW_BAD_INPUT, "%s:%zu: %s", reader->table->file, reader->line,
                                  csv_strerror(csv_error(parser)));
    }
    if (status == FW_OK && ferror(stream))
        status = fw_error_set(error, FW_UNAVAILABLE, "%s: cannot be read: %s", reader->table->file, strerror(errno));
    free(text);
    if (status == FW_OK && csv_fini(parser, on_cell, on_row, reader) != 0)
        status = fw_error_set(error, FW_BAD_INPUT, "%s:%zu: an open quotation at the end of the file",
                              reader->table->file, reader->line);
    return status;
}

enum fw_status table_read(const char *file, struct table *table_out, struct fw_error *error)
{
    struct table table = {.file = strdup(file)};
    struct reader reader = {.table = &table};
    struct csv_parser parser;
    FILE *stream = fopen(file, "re");
    enum fw_status status = FW_OK;
    if (stream == NULL) {
        status = fw_error_set(error, FW_UNAVAILABLE, "%s: cannot be read: %s", file, strerror(errno));
        goto cleanup;
    }
    if (table.file == NULL || csv_init(&parser, CSV_STRICT | CSV_STRICT_FINI) != 0) {
        status = fw_error_set(error, FW_NO_MEMORY, "%s: no memory", file);
        goto cleanup;
    }
    status = parse_lines(stream, &parser, &reader, error);
    csv_free(&parser);
    if (status == FW_OK && reader.is_short)
        status = fw_error_set(error, FW_NO_MEMORY, "%s: no memory", file);
    if (status == FW_OK && reader.row_count == 0)
        status = fw_error_set(error, FW_BAD_INPUT, "%s:1: the file is empty: expected a header line", file);
    table.row_count = reader.row_count > 0 ? reader.row_count - 1 : 0;
cleanup:
    if (stream != NULL)
        fclose(stream);
    if (status == FW_OK)
        *table_out = table;
    else
        table_clear(&table);
    return status;
}

void table_clear(struct table *table)
{
    for (size_t cell = 0; cell < table->cell_count; cell++)
        free(table->cells[cell]);
    free(table->cells);
    free(table->first_cell);
    free(table->line);
    free(table->file);
    *table = (struct table){0};
}

size_t table_column(const struct table *table, const char *name)
{
    for (size_t column = 0; column < table->first_cell[1]; column++)
        if (strcmp(table->cells[column], name) == 0)
            return column;
    return TABLE_NO_COLUMN;
}

size_t table_cell_count(const struct table *table, size_t row)
{
    return table->first_cell[row + 2] - table->first_cell[row + 1];
}

const char *table_cell(const struct table *table, size_t row, size_t column)
{
    return column < table_cell_count(table, row) ? table->cells[table->first_cell[row + 1] + column] : "";
}

static const char *column_name(const struct table *table, size_t column)
{
    return column < table->first_cell[1] ? table->cells[column] : "?";
}

enum fw_status table_number(const struct table *table, size_t row, size_t column, double *value_out,
                            struct fw_error *error)
{
    const char *text = table_cell(table, row, column);
    size_t cell_count = table_cell_count(table, row);
    if (cell_count > table->first_cell[1]) /* 12,5 would be read as 12 */
        return fw_error_set(
            error, FW_BAD_INPUT,
            "%s:%zu: %s: '%s' stands in a row of %zu cells, but the header names %zu columns: expected "
            "a decimal point, not a comma",
            table->file, table->line[row + 1], column_name(table, column), text, cell_count, table->first_cell[1]);
    if (!quantity_read_number(text, value_out))
        return fw_error_set(error, FW_BAD_INPUT, "%s:%zu: %s: '%s' is not a number with a decimal point", table->file,
                            table->line[row + 1], column_name(table, column), text);
    return FW_OK;
}

enum fw_status table_time(const struct table *table, size_t row, size_t column, int64_t *utc_s_out,
                          struct fw_error *error)
{
    enum fw_status status = when_parse(table_cell(table, row, column), NULL, utc_s_out, error);
    if (status != FW_OK)
        return fw_error_prefix(error, status, "%s:%zu: %s", table->file, table->line[row + 1],
                               column_name(table, column));
    return FW_OK;
}

enum fw_status table_split_argument(const char *option, const char *argument, char *name_out, size_t size,
                                    const char **file_out, struct fw_error *error)
{
    const char *equals = strchr(argument, '=');
    if (equals == NULL || equals == argument || equals[1] == '\0' || (size_t)(equals - argument) >= size)
        return fw_error_set(error, FW_USAGE, "--%s: '%s' is not of the form ID=FILE.csv", option, argument);
    memcpy(name_out, argument, (size_t)(equals - argument));
    name_out[equals - argument] = '\0';
    *file_out = equals + 1;
    return FW_OK;
}
