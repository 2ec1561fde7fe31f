/* SPDX-License-Identifier: MIT */
#include "daemon/feed/folder_feed.h"

#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "daemon/feed/append_file.h"
#include "daemon/feed/csv_readings.h"
#include "daemon/feed/drop_folder.h"

enum { SETTLE_MS = 2000, FILE_LENGTH_LIMIT = 8 * 1024 * 1024, PAYLOAD_LIMIT = 256 * 1024 };

struct folder_feed {
    const struct settings *settings;
    size_t gauge, feed;
    const char *shown; /* the last two parts of the path: names the folder in notes */
    struct drop_folder *drop;
    struct append_file *append; /* NULL: none */
    bool was_full;
};

static const char *last_two_parts(const char *path)
{
    size_t at = strlen(path);
    for (int parts = 0; at > 0; at--)
        if (path[at - 1] == '/' && ++parts == 2)
            break;
    return path + at;
}

enum fw_status folder_feed_open(const struct settings *settings, size_t gauge, size_t feed,
                                struct folder_feed **folder_out, struct fw_error *error)
{
    const struct settings_feed *kept = &settings->gauges[gauge].feeds[feed];
    struct folder_feed *folder = calloc(1, sizeof *folder);
    if (folder == NULL)
        return fw_error_set(error, FW_NO_MEMORY, "%s: out of memory", kept->path);
    *folder =
        (struct folder_feed){.settings = settings, .gauge = gauge, .feed = feed, .shown = last_two_parts(kept->path)};
    struct drop_rules rules = {
        .apart = kept->append_file, .settle_ms = SETTLE_MS, .length_limit = FILE_LENGTH_LIMIT, .keeps_done = true};
    enum fw_status status = drop_folder_open(kept->path, &rules, &folder->drop, error);
    if (status == FW_OK && kept->append_file != NULL) {
        char origin[512];
        snprintf(origin, sizeof origin, "%.200s/%.255s", folder->shown, kept->append_file);
        status = append_file_create(settings, gauge, feed, origin, &folder->append, error);
    }
    if (status == FW_OK)
        *folder_out = folder;
    else
        folder_feed_close(folder);
    return status;
}

void folder_feed_close(struct folder_feed *folder)
{
    if (folder == NULL)
        return;
    drop_folder_close(folder->drop);
    append_file_destroy(folder->append);
    free(folder);
}

int folder_feed_watch_fd(const struct folder_feed *folder)
{
    return drop_folder_watch_fd(folder->drop);
}

enum fw_status folder_feed_read_csv(const struct settings *settings, size_t gauge, size_t feed, const char *origin,
                                    const char *bytes, size_t length, int64_t received_utc_s, struct news *news,
                                    size_t *bad_line_count_out, struct fw_error *error)
{
    struct csv_source source = {
        .settings = settings, .gauge = gauge, .feed = feed, .origin = origin, .received_utc_s = received_utc_s};
    struct csv_tally tally = {0};
    enum fw_status status = csv_readings_read(&source, bytes, length, news, &tally, error);
    if (status == FW_OK)
        *bad_line_count_out = tally.bad_line_count;
    csv_tally_clear(&tally);
    return status;
}

/* --- dropped files --- */

static enum fw_status keep_payload(struct folder_feed *folder, const struct drop_file *file, const char *origin,
                                   struct news *news)
{
    if (file->length <= PAYLOAD_LIMIT)
        return news_add_payload(news, (int32_t)folder->gauge, (int32_t)folder->feed, origin, file->bytes,
                                file->length);
    news_add_note(
        news, (int32_t)folder->gauge, (int32_t)folder->feed, false,
        "%.200s: has %zu bytes; the store keeps the raw bytes of files up to %d (the file itself stays in done)",
        origin, file->length, PAYLOAD_LIMIT);
    return FW_OK;
}

static enum fw_status refuse_file(struct folder_feed *folder, const struct drop_file *file, const char *why,
                                  const char *reasons, bool moves, struct news *news)
{
    struct text reason = {0};
    news_add_note(news, (int32_t)folder->gauge, (int32_t)folder->feed, true, "%.420s; %s", why,
                  moves ? "moved to bad" : "left where it is");
    text_add(&reason, "%s\n%s", why, reasons);
    enum fw_status status = text_status(&reason);
    if (status == FW_OK && moves)
        status = drop_folder_add_receipt(folder->drop, file->name, true, text_string(&reason), folder, news);
    text_clear(&reason);
    return status;
}

static enum fw_status take_file(struct folder_feed *folder, const struct drop_file *file, int64_t received_utc_s,
                                struct news *news, struct fw_error *error)
{
    char origin[512];
    snprintf(origin, sizeof origin, "%.200s/%s", folder->shown, file->name);
    news_make_printable(origin);
    if (file->bytes == NULL) {
        char why[800];
        snprintf(why, sizeof why, "%s: %s", origin, file->refusal);
        return refuse_file(folder, file, why, "", file->goes_to_bad, news);
    }
    struct csv_source source = {.settings = folder->settings,
                                .gauge = folder->gauge,
                                .feed = folder->feed,
                                .origin = origin,
                                .received_utc_s = received_utc_s};
    struct csv_tally tally = {0};
    struct fw_error why = {0};
    enum fw_status status = csv_readings_read(&source, file->bytes, file->length, news, &tally, &why);
    bool is_read = status == FW_OK;
    news_make_printable(why.text);
    if (status == FW_OK || status == FW_BAD_INPUT)
        status = keep_payload(folder, file, origin, news);
    if (status == FW_OK && is_read)
        status = drop_folder_add_receipt(folder->drop, file->name, false,
                                         tally.bad_line_count > 0 ? text_string(&tally.reasons) : NULL, folder, news);
    else if (status == FW_OK)
        status = refuse_file(folder, file, why.text, text_string(&tally.reasons), true, news);
    csv_tally_clear(&tally);
    return status == FW_OK ? FW_OK : fw_error_set(error, status, "%s: out of memory", origin);
}

static void say_when_full(struct folder_feed *folder, struct news *news)
{
    bool is_full = drop_folder_is_full(folder->drop);
    if (is_full && !folder->was_full)
        news_add_note(news, (int32_t)folder->gauge, (int32_t)folder->feed, true,
                      "%.200s: %d files lie there that cannot be taken; others are taken only when renamed in",
                      folder->shown, DROP_REMEMBERED);
    folder->was_full = is_full;
}

static enum fw_status scan_dropped(struct folder_feed *folder, int64_t received_utc_s, struct news *news,
                                   struct fw_error *error)
{
    struct drop_file file;
    enum fw_status status;
    while ((status = drop_folder_next(folder->drop, &file, error)) == FW_OK) {
        status = take_file(folder, &file, received_utc_s, news, error);
        free(file.bytes);
        if (status != FW_OK) {
            drop_folder_put_back(folder->drop, file.name);
            return status;
        }
    }
    say_when_full(folder, news);
    return status == FW_NOTHING_NEW ? FW_OK : status;
}

enum fw_status folder_feed_scan(struct folder_feed *folder, int64_t machine_now_ms, int64_t received_utc_s,
                                struct news *news, int64_t *next_look_ms_out, struct fw_error *error)
{
    bool has_more = false;
    enum fw_status status = drop_folder_begin(folder->drop, machine_now_ms, error);
    if (status == FW_OK && folder->append != NULL)
        status = append_file_scan(folder->append, drop_folder_fd(folder->drop), received_utc_s, folder, news,
                                  &has_more, error);
    if (status == FW_OK)
        status = scan_dropped(folder, received_utc_s, news, error);
    if (status == FW_OK)
        *next_look_ms_out = has_more ? 0 : drop_folder_next_look_ms(folder->drop);
    return status;
}

enum fw_status folder_feed_settle(struct folder_feed *folder, const struct news *news, bool was_stored,
                                  struct fw_error *error)
{
    enum fw_status status = FW_OK;
    const struct news_receipt *last_place = NULL;
    for (size_t i = 0; i < news->receipt_count; i++) {
        const struct news_receipt *receipt = &news->receipts[i];
        if (receipt->owner != folder)
            continue;
        enum fw_status settled = FW_OK;
        if (receipt->to == NULL)
            last_place = receipt;
        else
            settled = drop_folder_settle(folder->drop, receipt, was_stored, error);
        status = settled != FW_OK ? settled : status;
    }
    if (last_place != NULL && folder->append != NULL) {
        enum fw_status kept =
            append_file_settle(folder->append, drop_folder_fd(folder->drop), last_place, was_stored, error);
        status = status != FW_OK ? status : kept;
    }
    return status;
}
