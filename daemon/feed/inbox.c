/* SPDX-License-Identifier: MIT */
#include "daemon/feed/inbox.h"

#include <errno.h>
#include <fcntl.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/random.h>
#include <unistd.h>

#include "daemon/feed/drop_folder.h"
#include "daemon/feed/safe_file.h"

enum { WORD_FILE_LIMIT = 16 * 1024, ID_BYTES = 16 };

struct inbox {
    const struct settings *settings;
    struct drop_folder *drop;
};

enum fw_status inbox_open(const struct settings *settings, struct inbox **inbox_out, struct fw_error *error)
{
    struct inbox *inbox = calloc(1, sizeof *inbox);
    if (inbox == NULL)
        return fw_error_set(error, FW_NO_MEMORY, "%s: out of memory", settings->inbox_path);
    inbox->settings = settings;
    /* word files are renamed in whole: nothing to wait for. The store keeps what is in them: a settled one is
     * removed. */
    struct drop_rules rules = {
        .suffix = ".word", .settle_ms = 0, .length_limit = WORD_FILE_LIMIT, .keeps_done = false};
    enum fw_status status = drop_folder_open(settings->inbox_path, &rules, &inbox->drop, error);
    if (status == FW_OK)
        *inbox_out = inbox;
    else
        inbox_close(inbox);
    return status;
}

void inbox_close(struct inbox *inbox)
{
    if (inbox == NULL)
        return;
    drop_folder_close(inbox->drop);
    free(inbox);
}

int inbox_watch_fd(const struct inbox *inbox)
{
    return drop_folder_watch_fd(inbox->drop);
}

/* --- taking --- */

static enum fw_status read_word(const struct inbox *inbox, const struct drop_file *file, int64_t received_utc_s,
                                struct word *word, struct fw_error *error)
{
    if (file->bytes == NULL)
        return fw_error_set(error, FW_BAD_INPUT, "%s", file->refusal);
    enum fw_status status = word_read_json(inbox->settings, file->bytes, file->length, received_utc_s, word, error);
    if (status != FW_OK)
        return status;
    size_t length = strlen(word->id);
    if (strncmp(file->name, word->id, length) != 0 || strcmp(file->name + length, ".word") != 0)
        return fw_error_set(error, FW_BAD_INPUT, "id '%s' is not the name of its file; expected %s.word", word->id,
                            word->id);
    return FW_OK;
}

static enum fw_status take_file(struct inbox *inbox, const struct drop_file *file, int64_t received_utc_s,
                                struct news *news, struct fw_error *error)
{
    struct fw_error why = {0};
    struct word word;
    enum fw_status status = read_word(inbox, file, received_utc_s, &word, &why);
    if (status == FW_OK) {
        status = news_add_word(news, &word);
        if (status == FW_OK)
            status = drop_folder_add_receipt(inbox->drop, file->name, false, NULL, inbox, news);
    } else if (status == FW_BAD_INPUT) {
        bool moves = file->bytes != NULL || file->goes_to_bad;
        news_make_printable(why.text);
        news_add_note(news, -1, -1, true, "inbox: %.200s: %.200s; %s", file->name, why.text,
                      moves ? "moved to bad" : "left where it is");
        status = moves ? drop_folder_add_receipt(inbox->drop, file->name, true, why.text, inbox, news) : FW_OK;
    }
    return status == FW_OK ? FW_OK : fw_error_set(error, status, "inbox: %.200s: out of memory", file->name);
}

enum fw_status inbox_scan(struct inbox *inbox, int64_t received_utc_s, struct news *news, struct fw_error *error)
{
    struct drop_file file;
    enum fw_status status = drop_folder_begin(inbox->drop, 0, error);
    while (status == FW_OK && (status = drop_folder_next(inbox->drop, &file, error)) == FW_OK) {
        status = take_file(inbox, &file, received_utc_s, news, error);
        free(file.bytes);
        if (status != FW_OK)
            drop_folder_put_back(inbox->drop, file.name);
    }
    return status == FW_NOTHING_NEW ? FW_OK : status;
}

static const struct word *word_of_receipt(const struct news *news, const struct news_receipt *receipt)
{
    const char *slash = strrchr(receipt->from, '/');
    const char *name = slash != NULL ? slash + 1 : receipt->from;
    for (size_t i = 0; i < news->word_count; i++) {
        size_t length = strlen(news->words[i].id);
        if (strncmp(name, news->words[i].id, length) == 0 && strcmp(name + length, ".word") == 0)
            return &news->words[i];
    }
    return NULL;
}

/*
 * A word that could not be stored is taken again by the next life. It was said now: with its time in the file, it is
 * not taken for a newer one than those that come between.
 */
static enum fw_status stamp(struct inbox *inbox, const struct word *word, struct fw_error *error)
{
    struct text json = {0};
    char name[FACT_ID_SIZE + 8];
    snprintf(name, sizeof name, "%s.word", word->id);
    enum fw_status status = word_write_json(word, true, &json);
    if (status != FW_OK)
        status = fw_error_set(error, status, "inbox: %s: out of memory", name);
    if (status == FW_OK)
        status = drop_folder_rewrite(inbox->drop, name, json.bytes, json.length, error);
    text_clear(&json);
    return status;
}

enum fw_status inbox_settle(struct inbox *inbox, const struct news *news, bool was_stored, struct fw_error *error)
{
    enum fw_status status = FW_OK;
    for (size_t i = 0; i < news->receipt_count; i++) {
        if (news->receipts[i].owner != inbox)
            continue;
        const struct word *word = was_stored ? NULL : word_of_receipt(news, &news->receipts[i]);
        enum fw_status stamped = word != NULL ? stamp(inbox, word, error) : FW_OK;
        status = stamped != FW_OK ? stamped : status;
        enum fw_status settled = drop_folder_settle(inbox->drop, &news->receipts[i], was_stored, error);
        status = settled != FW_OK ? settled : status;
    }
    return status;
}

/* --- handing in --- */

static enum fw_status make_id(char id[FACT_ID_SIZE], struct fw_error *error)
{
    unsigned char bytes[ID_BYTES];
    if (getrandom(bytes, sizeof bytes, 0) != (ssize_t)sizeof bytes)
        return fw_error_set(error, FW_IO, "no random numbers: %s", strerror(errno));
    for (size_t i = 0; i < ID_BYTES; i++)
        snprintf(id + 2 * i, 3, "%02x", bytes[i]);
    return FW_OK;
}

static enum fw_status write_word_file(const char *path, const struct word *word, const struct text *json,
                                      struct fw_error *error)
{
    char name[FACT_ID_SIZE + 8];
    snprintf(name, sizeof name, "%s.word", word->id);
    enum fw_status status = safe_file_make_path(path, error);
    if (status != FW_OK)
        return status;
    int folder_fd = open(path, O_RDONLY | O_DIRECTORY | O_CLOEXEC);
    if (folder_fd < 0)
        return fw_error_set(error, FW_IO, "%s: cannot be opened: %s", path, strerror(errno));
    status = safe_file_write(folder_fd, name, json->bytes, json->length, error);
    close(folder_fd);
    return status == FW_OK ? FW_OK : fw_error_prefix(error, status, "%s", path);
}

enum fw_status inbox_hand_in(const struct settings *settings, struct word *word, bool has_time,
                             struct fw_error *error)
{
    struct text json = {0};
    struct word named = *word;
    enum fw_status status = named.id[0] == '\0' ? make_id(named.id, error) : FW_OK;
    if (status == FW_OK)
        status = word_check(settings, &named, error);
    if (status == FW_OK && word_write_json(&named, has_time, &json) != FW_OK)
        status = fw_error_set(error, FW_NO_MEMORY, "out of memory");
    if (status == FW_OK)
        status = write_word_file(settings->inbox_path, &named, &json, error);
    if (status == FW_OK)
        memcpy(word->id, named.id, sizeof word->id);
    text_clear(&json);
    return status;
}
