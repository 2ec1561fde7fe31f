/* SPDX-License-Identifier: MIT */
/*
 * Reads one of the published tables in tests/reference/: lines that begin with '#', then a line of column names, then
 * rows (RFC 4180 quoting). Any fault (no such file, column or row, a ragged row, a cell that is not a number) fails
 * the test that asked, naming file, row and column. Include <cmocka.h> with its companions first.
 *
 *     struct reference_table table = reference_table_load("flood_wye1960.csv");
 *     double *inflow_m3s = reference_table_column(&table, "inflow");   table.row_count values, to be freed
 *     double first = reference_table_number(&table, 0, "inflow");
 *     reference_table_clear(&table);
 */
#ifndef FOREWATER_TESTS_ENGINE_REFERENCE_TABLE_H
#define FOREWATER_TESTS_ENGINE_REFERENCE_TABLE_H

#include <errno.h>
#include <math.h>
#include <stdbool.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

struct reference_table {
    const char *name; /* the file's, as given */
    size_t column_count;
    size_t row_count; /* the line of names is not one */
    size_t cell_count;
    char *text;  /* the whole file; the cells point into it */
    char **cell; /* names first, then row by row */
};

__attribute__((noreturn)) static inline void reference_table_fault(const struct reference_table *table, size_t row,
                                                                   const char *column, const char *what)
{
    fail_msg("tests/reference/%s: row %zu, column '%s': %s", table->name, row, column, what);
    abort();
}

static inline char *reference_table_read_file(const struct reference_table *table)
{
    char path[4096];
    int length = snprintf(path, sizeof path, "%s/tests/reference/%s", FW_SOURCE_DIR, table->name);
    if (length < 0 || (size_t)length >= sizeof path)
        reference_table_fault(table, 0, "", "the path is too long");
    FILE *file = fopen(path, "rb");
    if (file == NULL)
        reference_table_fault(table, 0, "", strerror(errno));
    size_t size = 0, room = 1 << 16;
    char *text = malloc(room);
    while (text != NULL) {
        size += fread(text + size, 1, room - 1 - size, file);
        if (size < room - 1)
            break;
        room *= 2;
        char *grown = realloc(text, room);
        if (grown == NULL)
            free(text);
        text = grown;
    }
    bool is_whole = text != NULL && !ferror(file) && memchr(text, 0, size) == NULL;
    fclose(file);
    if (!is_whole) {
        free(text);
        reference_table_fault(table, 0, "", "cannot be read whole, or is not text");
    }
    text[size] = '\0';
    return text;
}

/* Ends the cell that begins at *at, undoes its quoting in place, moves *at to what follows; gives the separator. */
static inline char reference_table_end_cell(char **at)
{
    char *from = *at, *to = *at;
    bool is_quoted = *from == '"';
    if (is_quoted)
        for (from++; *from != '\0' && !(from[0] == '"' && from[1] != '"'); from++) {
            from += from[0] == '"';
            *to++ = *from;
        }
    from += is_quoted && *from == '"';
    for (; *from != '\0' && *from != ',' && *from != '\n'; from++)
        if (*from != '\r')
            *to++ = *from;
    char separator = *from;
    *at = separator == '\0' ? from : from + 1;
    *to = '\0';
    return separator;
}

static inline void reference_table_add_cell(struct reference_table *table, char *cell)
{
    if ((table->cell_count & (table->cell_count + 1)) == 0) {
        char **grown = realloc(table->cell, (2 * table->cell_count + 2) * sizeof *grown);
        if (grown == NULL)
            reference_table_fault(table, 0, "", "no memory");
        table->cell = grown;
    }
    table->cell[table->cell_count++] = cell;
}

static inline void reference_table_clear(struct reference_table *table)
{
    free(table->cell);
    free(table->text);
    *table = (struct reference_table){0};
}

static inline struct reference_table reference_table_load(const char *name)
{
    struct reference_table table = {.name = name};
    table.text = reference_table_read_file(&table);
    for (char *at = table.text; *at != '\0';) {
        if (*at == '#' || *at == '\n' || *at == '\r') {
            char *end = strchr(at, '\n');
            at = end == NULL ? at + strlen(at) : end + 1;
            continue;
        }
        size_t row_start = table.cell_count;
        char separator = ',';
        while (separator == ',') {
            char *cell = at;
            separator = reference_table_end_cell(&at);
            reference_table_add_cell(&table, cell);
        }
        if (row_start == 0)
            table.column_count = table.cell_count;
        else if (table.cell_count - row_start != table.column_count)
            reference_table_fault(&table, table.row_count, "", "has another number of cells than the line of names");
        else
            table.row_count++;
    }
    if (table.row_count == 0)
        reference_table_fault(&table, 0, "", "there are no rows");
    return table;
}

static inline const char *reference_table_text(const struct reference_table *table, size_t row, const char *column)
{
    if (row >= table->row_count)
        reference_table_fault(table, row, column, "there is no such row");
    for (size_t index = 0; index < table->column_count; index++)
        if (strcmp(table->cell[index], column) == 0)
            return table->cell[(row + 1) * table->column_count + index];
    reference_table_fault(table, row, column, "there is no such column");
}

/* NAN for an empty cell. */
static inline double reference_table_number(const struct reference_table *table, size_t row, const char *column)
{
    const char *text = reference_table_text(table, row, column);
    char *end = NULL;
    double number = strtod(text, &end);
    if (*text == '\0')
        return (double)NAN;
    if (*end != '\0' || !isfinite(number))
        reference_table_fault(table, row, column, "is not a number");
    return number;
}

/* All of a column, table->row_count numbers, NAN for an empty cell; the caller frees them. */
static inline double *reference_table_column(const struct reference_table *table, const char *column)
{
    double *numbers = malloc(table->row_count * sizeof *numbers);
    if (numbers == NULL)
        reference_table_fault(table, 0, column, "no memory");
    for (size_t row = 0; row < table->row_count; row++)
        numbers[row] = reference_table_number(table, row, column);
    return numbers;
}

/* The first row whose cell in a column is this text. */
static inline size_t reference_table_find(const struct reference_table *table, const char *column, const char *text)
{
    for (size_t row = 0; row < table->row_count; row++)
        if (strcmp(reference_table_text(table, row, column), text) == 0)
            return row;
    reference_table_fault(table, 0, column, text);
}

#endif
