/* SPDX-License-Identifier: MIT */
/* A whole CSV file (RFC 4180) as a header and rows of text, for the commands that read files given by hand. */
#ifndef FOREWATER_DAEMON_COMMAND_TABLE_H
#define FOREWATER_DAEMON_COMMAND_TABLE_H

#include <stddef.h>
#include <stdint.h>

#include "daemon/error.h"
#include "daemon/when.h"

#define TABLE_NO_COLUMN ((size_t)-1)

struct table {
    char *file;
    size_t row_count;   /* without the header */
    size_t *first_cell; /* [row_count + 2]: where a row's cells begin; row 0 is the header */
    size_t *line;       /* [row_count + 1]: line in the file */
    char **cells;
    size_t cell_count;
};

/* FW_UNAVAILABLE: no such file; FW_BAD_INPUT: empty, or not CSV; names file and line. The caller clears. */
FW_MUST_CHECK enum fw_status table_read(const char *file, struct table *table_out, struct fw_error *error);
void table_clear(struct table *table);

/* TABLE_NO_COLUMN: there is none of that name. */
size_t table_column(const struct table *table, const char *name);
size_t table_cell_count(const struct table *table, size_t row);               /* row from 0, the header left out */
const char *table_cell(const struct table *table, size_t row, size_t column); /* "" beyond the row's end */

/* Both name file, line, column and value when it is not what it must be (FW_BAD_INPUT). */
FW_MUST_CHECK enum fw_status table_number(const struct table *table, size_t row, size_t column, double *value_out,
                                          struct fw_error *error);
FW_MUST_CHECK enum fw_status table_time(const struct table *table, size_t row, size_t column, int64_t *utc_s_out,
                                        struct fw_error *error);

/* "NAME=FILE" in two; FW_USAGE. The name is copied into name_out. */
FW_MUST_CHECK enum fw_status table_split_argument(const char *option, const char *argument, char *name_out,
                                                  size_t size, const char **file_out, struct fw_error *error);

#endif
