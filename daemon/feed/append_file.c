/* SPDX-License-Identifier: MIT */
#include "daemon/feed/append_file.h"

#include <errno.h>
#include <inttypes.h>
#include <limits.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>
#include <unistd.h>

#include "daemon/feed/csv_readings.h"
#include "daemon/feed/fnv.h"
#include "daemon/feed/safe_file.h"

enum { PIECE_SIZE = 256 * 1024, TAIL_SIZE = 256 };

struct place { /* how far the file has been read */
    int64_t position;
    uint64_t number;     /* of the file on its filesystem */
    uint64_t line_count; /* lines before the position */
    uint64_t tail;       /* a digest of the last bytes before the position */
};

struct append_file {
    const struct settings *settings;
    size_t gauge, feed;
    const char *name;
    char *path, *origin;
    char position_name[NAME_MAX + 1];
    bool is_remembered; /* the kept place has been looked for */
    bool is_held;       /* something was read that is not stored: the kept place must not move */
    struct place place;
    char fault[256]; /* the fault said last, so that it is said once */
};

enum fw_status append_file_create(const struct settings *settings, size_t gauge, size_t feed, const char *origin,
                                  struct append_file **file_out, struct fw_error *error)
{
    const struct settings_feed *kept = &settings->gauges[gauge].feeds[feed];
    struct append_file *file = calloc(1, sizeof *file);
    if (file == NULL)
        return fw_error_set(error, FW_NO_MEMORY, "%s: out of memory", origin);
    *file = (struct append_file){.settings = settings, .gauge = gauge, .feed = feed, .name = kept->append_file};
    file->origin = strdup(origin);
    if (asprintf(&file->path, "%s/%s", kept->path, kept->append_file) < 0)
        file->path = NULL;
    if (file->origin == NULL || file->path == NULL) {
        append_file_destroy(file);
        return fw_error_set(error, FW_NO_MEMORY, "%s: out of memory", origin);
    }
    snprintf(file->position_name, sizeof file->position_name, ".%.200s.position", file->name);
    *file_out = file;
    return FW_OK;
}

void append_file_destroy(struct append_file *file)
{
    if (file == NULL)
        return;
    free(file->path);
    free(file->origin);
    free(file);
}

/* --- the kept place --- */

static enum fw_status place_print(const struct place *place, struct text *text)
{
    text_add(text, "%" PRId64 " %" PRIu64 " %" PRIu64 " %" PRIu64 "\n", place->position, place->number,
             place->line_count, place->tail);
    return text_status(text);
}

/* A whole number and the sign that must follow it, at *cursor, which is moved past both. */
static bool take_number(const char **cursor, char follows, uint64_t *value_out)
{
    char *end;
    errno = 0;
    if (**cursor < '0' || **cursor > '9')
        return false;
    *value_out = strtoull(*cursor, &end, 10);
    if (errno != 0 || *end != follows)
        return false;
    *cursor = end + 1;
    return true;
}

static bool place_read(const char *text, struct place *place_out)
{
    struct place place;
    uint64_t position;
    if (!take_number(&text, ' ', &position) || position > INT64_MAX || !take_number(&text, ' ', &place.number) ||
        !take_number(&text, ' ', &place.line_count) || !take_number(&text, '\n', &place.tail))
        return false;
    place.position = (int64_t)position;
    *place_out = place;
    return true;
}

static void remember_place(struct append_file *file, int folder_fd)
{
    struct stat about;
    char text[128] = "";
    int fd;
    file->is_remembered = true;
    if (safe_file_open(folder_fd, file->position_name, &fd, &about, NULL) != FW_OK)
        return; /* none yet: from the start */
    ssize_t length = read(fd, text, sizeof text - 1);
    close(fd);
    if (length > 0)
        place_read(text, &file->place);
}

/* A digest of the last bytes before a position. False: they cannot be read. */
static bool tail_before(int fd, int64_t position, uint64_t *tail_out)
{
    unsigned char bytes[TAIL_SIZE];
    size_t length = position < TAIL_SIZE ? (size_t)position : TAIL_SIZE;
    if (pread(fd, bytes, length, position - (int64_t)length) != (ssize_t)length)
        return false;
    *tail_out = fnv_add(FNV_START, bytes, length);
    return true;
}

/* --- reading --- */

static void say_once(struct append_file *file, struct news *news, const char *why)
{
    char text[sizeof file->fault];
    snprintf(text, sizeof text, "%.255s", why);
    if (strcmp(text, file->fault) != 0)
        news_add_note(news, (int32_t)file->gauge, (int32_t)file->feed, true, "%.200s: %s", file->origin, why);
    memcpy(file->fault, text, sizeof text);
}

static void follow_the_file(struct append_file *file, int fd, const struct stat *about, struct news *news)
{
    struct place *place = &file->place;
    uint64_t tail;
    bool is_same = place->number == (uint64_t)about->st_ino && place->position <= about->st_size &&
                   tail_before(fd, place->position, &tail) && tail == place->tail;
    if (is_same)
        return;
    if (place->position > 0)
        news_add_note(news, (int32_t)file->gauge, (int32_t)file->feed, false,
                      "%.200s: is another file than before, or was cut: read from its first line", file->origin);
    *place = (struct place){.number = (uint64_t)about->st_ino};
}

/* The header line, which is read anew each time. FW_NOTHING_NEW: it is not whole yet. */
static enum fw_status read_header(const struct append_file *file, int fd, struct csv_columns *columns,
                                  size_t *length_out, struct fw_error *error)
{
    char bytes[CSV_LINE_LIMIT + 1];
    ssize_t length = pread(fd, bytes, sizeof bytes, 0);
    if (length < 0)
        return fw_error_set(error, FW_IO, "cannot be read: %s", strerror(errno));
    const char *end = memchr(bytes, '\n', (size_t)length);
    if (end == NULL && (size_t)length < sizeof bytes)
        return FW_NOTHING_NEW;
    if (end == NULL)
        return fw_error_set(error, FW_BAD_INPUT, "the header line has more than %d bytes", CSV_LINE_LIMIT);
    size_t mark = length >= 3 && memcmp(bytes, "\xEF\xBB\xBF", 3) == 0 ? 3 : 0;
    size_t line_length = (size_t)(end - bytes) - mark;
    if (line_length > 0 && end[-1] == '\r')
        line_length--;
    enum fw_status status = csv_columns_find(&file->settings->gauges[file->gauge].feeds[file->feed], bytes + mark,
                                             line_length, columns, error);
    if (status == FW_OK)
        *length_out = (size_t)(end - bytes) + 1;
    return status;
}

struct piece {      /* whole lines from the place on */
    char *bytes;    /* heap */
    size_t length;  /* of whole lines; 0: none */
    size_t skipped; /* bytes at its start that belong to a line longer than a piece */
    bool begins_long_line;
    bool has_more;
};

static const char *last_line_end(const char *bytes, size_t length)
{
    return length > 0 ? memrchr(bytes, '\n', length) : NULL;
}

static enum fw_status read_piece(const struct append_file *file, int fd, struct piece *piece, struct fw_error *error)
{
    const struct place *place = &file->place;
    piece->bytes = malloc(PIECE_SIZE + 1);
    if (piece->bytes == NULL)
        return fw_error_set(error, FW_NO_MEMORY, "out of memory");
    ssize_t length = pread(fd, piece->bytes, PIECE_SIZE, place->position);
    if (length < 0)
        return fw_error_set(error, FW_IO, "cannot be read: %s", strerror(errno));
    const char *end = last_line_end(piece->bytes, (size_t)length);
    bool is_full = length == PIECE_SIZE;
    piece->has_more = is_full;
    piece->length = end != NULL ? (size_t)(end - piece->bytes) + 1 : is_full ? PIECE_SIZE : 0;
    /* within a line: a line longer than a piece, whose beginning was passed over */
    char before = '\n';
    if (place->position > 0 && pread(fd, &before, 1, place->position - 1) != 1)
        return fw_error_set(error, FW_IO, "cannot be read: %s", strerror(errno));
    const char *first = memchr(piece->bytes, '\n', piece->length);
    if (before != '\n')
        piece->skipped = first != NULL ? (size_t)(first - piece->bytes) + 1 : piece->length;
    else if (end == NULL)
        piece->skipped = piece->length;
    piece->begins_long_line = before == '\n' && piece->skipped > 0;
    return FW_OK;
}

static uint64_t count_lines(const char *bytes, size_t length)
{
    uint64_t count = 0;
    for (const char *at = bytes; (at = memchr(at, '\n', length - (size_t)(at - bytes))) != NULL; at++)
        count++;
    return count;
}

static enum fw_status hand_over(struct append_file *file, int fd, const struct piece *piece,
                                const struct csv_columns *columns, int64_t received_utc_s, void *owner,
                                struct news *news, struct fw_error *error)
{
    struct place next = file->place;
    next.position += (int64_t)piece->length;
    next.line_count += count_lines(piece->bytes, piece->length);
    if (!tail_before(fd, next.position, &next.tail))
        return FW_NOTHING_NEW; /* cut this moment: the next look starts over */
    const char *lines = piece->bytes + piece->skipped;
    size_t length = piece->length - piece->skipped;
    struct csv_source source = {.settings = file->settings,
                                .gauge = file->gauge,
                                .feed = file->feed,
                                .origin = file->origin,
                                .lines_before =
                                    (size_t)(file->place.line_count + count_lines(piece->bytes, piece->skipped)),
                                .received_utc_s = received_utc_s};
    if (piece->begins_long_line)
        news_add_note(news, (int32_t)file->gauge, (int32_t)file->feed, true,
                      "%.200s:%zu: a line longer than %d bytes is passed over", file->origin, source.lines_before + 1,
                      CSV_LINE_LIMIT);
    struct csv_tally tally = {0};
    struct text kept = {0};
    enum fw_status status = csv_readings_add(&source, columns, lines, length, news, &tally, error);
    if (status == FW_OK)
        status = news_add_payload(news, (int32_t)file->gauge, (int32_t)file->feed, file->origin, lines, length);
    if (status == FW_OK)
        status = place_print(&next, &kept);
    if (status == FW_OK)
        status = news_add_receipt(news, file->path, NULL, text_string(&kept), owner, next.position);
    if (status == FW_OK)
        file->place = next;
    csv_tally_clear(&tally);
    text_clear(&kept);
    return status;
}

static enum fw_status scan_open(struct append_file *file, int fd, const struct stat *about, int64_t received_utc_s,
                                void *owner, struct news *news, bool *has_more_out, struct fw_error *error)
{
    struct csv_columns columns;
    struct piece piece = {0};
    size_t header_length = 0;
    follow_the_file(file, fd, about, news);
    if (about->st_size == file->place.position)
        return FW_NOTHING_NEW;
    enum fw_status status = read_header(file, fd, &columns, &header_length, error);
    if (status == FW_OK && file->place.position == 0) {
        file->place.position = (int64_t)header_length;
        file->place.line_count = 1;
        if (!tail_before(fd, file->place.position, &file->place.tail))
            status = FW_NOTHING_NEW;
    }
    if (status == FW_OK)
        status = read_piece(file, fd, &piece, error);
    if (status == FW_OK && piece.length > 0)
        status = hand_over(file, fd, &piece, &columns, received_utc_s, owner, news, error);
    if (status == FW_OK) {
        file->fault[0] = '\0';
        *has_more_out = piece.has_more;
    }
    free(piece.bytes);
    return status;
}

enum fw_status append_file_scan(struct append_file *file, int folder_fd, int64_t received_utc_s, void *owner,
                                struct news *news, bool *has_more_out, struct fw_error *error)
{
    struct fw_error why = {0};
    struct stat about;
    int fd = -1;
    *has_more_out = false;
    if (!file->is_remembered)
        remember_place(file, folder_fd);
    enum fw_status status = safe_file_open(folder_fd, file->name, &fd, &about, &why);
    if (status == FW_OK) {
        status = scan_open(file, fd, &about, received_utc_s, owner, news, has_more_out, &why);
        close(fd);
    } else if (status == FW_UNAVAILABLE) {
        return FW_OK;
    }
    if (status == FW_NO_MEMORY)
        return fw_error_set(error, status, "%s: %s", file->origin, why.text);
    if (status != FW_OK && status != FW_NOTHING_NEW)
        say_once(file, news, why.text);
    return FW_OK;
}

enum fw_status append_file_settle(struct append_file *file, int folder_fd, const struct news_receipt *receipt,
                                  bool was_stored, struct fw_error *error)
{
    file->is_held |= !was_stored;
    if (file->is_held || receipt->reason == NULL)
        return FW_OK;
    enum fw_status status =
        safe_file_write(folder_fd, file->position_name, receipt->reason, strlen(receipt->reason), error);
    return status == FW_OK ? FW_OK : fw_error_prefix(error, status, "%s", file->origin);
}
