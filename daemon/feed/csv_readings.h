/* SPDX-License-Identifier: MIT */
/*
 * CSV text to readings (RFC 4180, by libcsv), for dropped files, for a logger's append file, for replay and load.
 *
 * A line is a row: a quoted text may hold delimiters and doubled quotes, but no line break, so that a stray quote
 * costs one line and not the rest of the file. Every line that can be read is kept, whatever its neighbours. UTF-8
 * with or without a byte order mark; other encodings do no harm in columns that are not read. The delimiter (comma,
 * semicolon or tab) is the one with which the header line has both columns. Blank lines, and the header line come
 * again, are passed over.
 */
#ifndef FOREWATER_DAEMON_FEED_CSV_READINGS_H
#define FOREWATER_DAEMON_FEED_CSV_READINGS_H

#include "daemon/buffer.h"
#include "daemon/error.h"
#include "daemon/feed/news.h"
#include "daemon/settings/settings.h"

enum { CSV_LINE_LIMIT = 4096, CSV_NOTED_LINES = 20, CSV_LINE_COUNT_LIMIT = 200000 };

struct csv_columns { /* where the two columns are, counted from 0 */
    unsigned char delimiter;
    size_t time, value;
};

/* Finds the columns of a feed in a header line. FW_BAD_INPUT: one is missing, or there twice. FW_NO_MEMORY. */
FW_MUST_CHECK enum fw_status csv_columns_find(const struct settings_feed *feed, const char *line, size_t length,
                                              struct csv_columns *columns_out, struct fw_error *error);

struct csv_source { /* whose text it is, and how to name it */
    const struct settings *settings;
    size_t gauge, feed;
    const char *origin;  /* names it in notes */
    size_t lines_before; /* of the origin, before these bytes */
    int64_t received_utc_s;
};

struct csv_tally {     /* born empty as {0}; the caller clears the text */
    size_t line_count; /* that should hold a reading */
    size_t reading_count;
    size_t bad_line_count;
    size_t physical_line_count;
    struct text reasons; /* one line for each of the first CSV_NOTED_LINES bad lines, and a count of the others */
};
void csv_tally_clear(struct csv_tally *tally);

/*
 * Reads lines without a header. Bad ones are counted, and the first are noted; more than a fifth is a fault of its
 * own. FW_BAD_INPUT: the feed's unit does not measure what the gauge does. FW_NO_MEMORY: what was added to the news
 * so far stays.
 */
FW_MUST_CHECK enum fw_status csv_readings_add(const struct csv_source *source, const struct csv_columns *columns,
                                              const char *bytes, size_t length, struct news *news,
                                              struct csv_tally *tally, struct fw_error *error);

/*
 * Reads a whole text with its header line.
 * FW_BAD_INPUT: binary, empty, more than CSV_LINE_COUNT_LIMIT lines, no header, a column missing, or no line that can
 * be read.
 */
FW_MUST_CHECK enum fw_status csv_readings_read(const struct csv_source *source, const char *bytes, size_t length,
                                               struct news *news, struct csv_tally *tally, struct fw_error *error);

#endif
