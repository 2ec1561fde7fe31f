/* SPDX-License-Identifier: MIT */
#include "daemon/settings/settings.h"

#include <errno.h>
#include <fcntl.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>
#include <unistd.h>

#include <openssl/evp.h>

#include "daemon/settings/settings_check.h"
#include "daemon/settings/settings_work.h"

enum { SETTINGS_FILE_SIZE_MAX = 1 << 20 };

struct settings_whole { /* what settings_destroy finds around the settings */
    struct settings settings;
    struct arena arena;
};

void settings_destroy(struct settings *settings)
{
    if (settings == NULL)
        return;
    struct settings_whole *whole = (struct settings_whole *)settings; /* its first member */
    struct arena arena = whole->arena;
    free(whole);
    arena_clear(&arena);
}

/* --- the parts of reading --- */

static bool digest_text(const char *text, size_t length, char digest[SETTINGS_DIGEST_SIZE])
{
    unsigned char bytes[EVP_MAX_MD_SIZE];
    unsigned int size = 0;
    if (EVP_Digest(text, length, bytes, &size, EVP_sha256(), NULL) != 1 || size * 2 >= SETTINGS_DIGEST_SIZE)
        return false;
    for (size_t i = 0; i < size; i++)
        snprintf(&digest[2 * i], 3, "%02x", (unsigned)bytes[i]);
    return true;
}

/* Absolute, but with symbolic links left as they are: relative paths start where the operator sees the file. */
static const char *absolute_path(struct arena *arena, const char *file)
{
    char *folder = file[0] == '/' ? NULL : getcwd(NULL, 0);
    const char *path = file[0] == '/'   ? arena_copy_text(arena, file, strlen(file))
                       : folder != NULL ? arena_print(arena, "%s/%s", folder, file)
                                        : NULL;
    free(folder);
    return path;
}

static bool build(struct settings_work *work)
{
    if (!settings_build_base(work) || !settings_build_channels(work) || !settings_build_gauges(work))
        return false;
    settings_build_floods(work);
    return settings_build_river(work) && settings_build_points(work) &&
           (settings_report_has_faults(work->report) || settings_check_river(work));
}

static enum fw_status read_into(struct settings_whole *whole, const char *text, size_t length,
                                enum settings_need need, struct settings_report *report)
{
    struct settings *settings = &whole->settings;
    struct settings_work work = {.arena = &whole->arena, .settings = settings, .report = report, .need = need};
    settings->file = absolute_path(&whole->arena, report->file);
    settings->text = arena_copy_text(&whole->arena, text, length);
    settings->text_length = length;
    if (settings->file == NULL || settings->text == NULL || !digest_text(text, length, settings->digest))
        return FW_NO_MEMORY;
    const char *base = strrchr(settings->file, '/');
    work.folder = arena_copy_text(&whole->arena, settings->file, (size_t)(base - settings->file));
    if (work.folder == NULL)
        return FW_NO_MEMORY;
    enum fw_status status = json_tree_read(settings->text, length, &whole->arena, report, &work.root);
    if (status == FW_OK)
        status = settings_check(work.root, need, report);
    if (status == FW_OK && !build(&work))
        status = FW_NO_MEMORY;
    return status;
}

static enum fw_status sum_up(const struct settings_report *report, struct fw_error *error)
{
    const struct settings_faults *faults = report->faults;
    size_t count = faults->count + report->not_kept;
    return fw_error_set(error, FW_BAD_INPUT, "%s has %zu fault%s; the first: %s", report->file, count,
                        count == 1 ? "" : "s", faults->faults[0].text);
}

enum fw_status settings_read_text(const char *file, const char *text, size_t length, enum settings_need need,
                                  struct settings **settings_out, struct settings_faults *faults_out,
                                  struct fw_error *error)
{
    *faults_out = (struct settings_faults){0};
    struct settings_report report = {.file = file, .faults = faults_out};
    struct settings_whole *whole = calloc(1, sizeof *whole);
    if (whole == NULL)
        return fw_error_set(error, FW_NO_MEMORY, "%s: out of memory", file);
    enum fw_status status = FW_BAD_INPUT;
    if (length > SETTINGS_FILE_SIZE_MAX)
        settings_report_add(&report, 1, "the file has %zu bytes: expected at most %d", length,
                            SETTINGS_FILE_SIZE_MAX);
    else
        status = read_into(whole, text, length, need, &report);
    if (report.is_short || whole->arena.is_short)
        status = FW_NO_MEMORY;
    if (status == FW_OK && settings_report_has_faults(&report))
        status = FW_BAD_INPUT;
    if (status == FW_OK) {
        *settings_out = &whole->settings;
        return FW_OK;
    }
    settings_destroy(&whole->settings);
    if (status == FW_NO_MEMORY)
        return fw_error_set(error, FW_NO_MEMORY, "%s: out of memory", file);
    settings_report_sort(&report);
    return sum_up(&report, error);
}

/* --- the file --- */

static enum fw_status read_whole_file(const char *file, struct text *text_out, struct fw_error *error)
{
    enum fw_status status = FW_OK;
    struct text text = {0};
    struct stat about;
    int from = open(file, O_RDONLY | O_CLOEXEC | O_NONBLOCK | O_NOCTTY);
    if (from < 0 || fstat(from, &about) != 0) {
        status = fw_error_set(error, FW_UNAVAILABLE, "%s: cannot be read: %s", file, strerror(errno));
        goto cleanup;
    }
    if (!S_ISREG(about.st_mode)) {
        status = fw_error_set(error, FW_UNAVAILABLE, "%s: is not a plain file", file);
        goto cleanup;
    }
    ssize_t taken = 1;
    while (taken > 0 && text.length <= SETTINGS_FILE_SIZE_MAX && !text.is_short) {
        char bytes[8192];
        taken = read(from, bytes, sizeof bytes);
        if (taken > 0)
            text_add_bytes(&text, bytes, (size_t)taken);
    }
    if (taken < 0)
        status = fw_error_set(error, FW_UNAVAILABLE, "%s: cannot be read: %s", file, strerror(errno));
    else if (text_status(&text) != FW_OK)
        status = fw_error_set(error, FW_NO_MEMORY, "%s: out of memory", file);
cleanup:
    if (from >= 0)
        close(from);
    if (status == FW_OK)
        *text_out = text;
    else
        text_clear(&text);
    return status;
}

enum fw_status settings_read_file(const char *file, enum settings_need need, struct settings **settings_out,
                                  struct settings_faults *faults_out, struct fw_error *error)
{
    struct text text = {0};
    *faults_out = (struct settings_faults){0};
    enum fw_status status = read_whole_file(file, &text, error);
    if (status == FW_OK)
        status = settings_read_text(file, text_string(&text), text.length, need, settings_out, faults_out, error);
    text_clear(&text);
    return status;
}

/* --- questions --- */

size_t settings_gauge_index(const struct settings *settings, const char *id)
{
    for (size_t i = 0; i < settings->gauge_count; i++)
        if (settings->gauges[i].id != NULL && strcmp(settings->gauges[i].id, id) == 0)
            return i;
    return SETTINGS_NONE;
}

size_t settings_point_index(const struct settings *settings, const char *id)
{
    for (size_t i = 0; i < settings->point_count; i++)
        if (settings->points[i].id != NULL && strcmp(settings->points[i].id, id) == 0)
            return i;
    return SETTINGS_NONE;
}

void settings_gauges_above(const struct settings *settings, size_t point, bool is_upstream_out[])
{
    const struct network_river *river = &settings->river;
    size_t head = river->reaches[settings->points[point].reach].from_node;
    for (size_t i = 0; i < settings->gauge_count; i++)
        is_upstream_out[i] = network_leads_to(river, settings->gauges[i].node, head);
}
