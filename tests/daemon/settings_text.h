/* SPDX-License-Identifier: MIT */
/* A configuration as text in a test: loaded, changed in one place, read, and its faults looked at. */
#ifndef FOREWATER_TESTS_DAEMON_SETTINGS_TEXT_H
#define FOREWATER_TESTS_DAEMON_SETTINGS_TEXT_H

#include <setjmp.h>
#include <stdarg.h>
#include <stdbool.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include <cmocka.h>

#include "daemon/settings/settings.h"

#define SETTINGS_EXAMPLE FW_SOURCE_DIR "/config/forewater.json"
#define SETTINGS_EVERY_OTHER_KEY FW_SOURCE_DIR "/tests/data/settings/every_other_key.json"
#define SETTINGS_OUTLET FW_SOURCE_DIR "/tests/data/settings/outlet.json"
#define SETTINGS_BOUNDARIES FW_SOURCE_DIR "/tests/data/settings/boundaries.json"

static inline struct text settings_text_load(const char *path)
{
    struct text text = {0};
    char bytes[4096];
    size_t taken;
    FILE *file = fopen(path, "rb");
    if (file == NULL)
        fail_msg("%s cannot be opened", path);
    while ((taken = fread(bytes, 1, sizeof bytes, file)) > 0)
        text_add_bytes(&text, bytes, taken);
    fclose(file);
    assert_int_equal(text_status(&text), FW_OK);
    return text;
}

/* A new text with length bytes at offset replaced. */
static inline struct text settings_text_with(const struct text *text, size_t offset, size_t length,
                                             const char *replacement)
{
    struct text changed = {0};
    text_add_bytes(&changed, text->bytes, offset);
    text_add_bytes(&changed, replacement, strlen(replacement));
    text_add_bytes(&changed, text->bytes + offset + length, text->length - offset - length);
    assert_int_equal(text_status(&changed), FW_OK);
    return changed;
}

static inline size_t settings_text_line(const struct text *text, size_t offset)
{
    size_t line = 1;
    for (size_t i = 0; i < offset; i++)
        line += text->bytes[i] == '\n';
    return line;
}

/* Reads it as x.json; the caller clears the faults. */
static inline enum fw_status settings_text_read(const struct text *text, enum settings_need need,
                                                struct settings **settings_out, struct settings_faults *faults_out)
{
    struct fw_error error = {0};
    *settings_out = NULL;
    enum fw_status status =
        settings_read_text("x.json", text_string(text), text->length, need, settings_out, faults_out, &error);
    assert_int_equal(status == FW_OK, *settings_out != NULL);
    if (status != FW_OK)
        assert_int_equal(error.status, status);
    if (status == FW_BAD_INPUT) {
        assert_true(faults_out->count > 0);
        assert_non_null(strstr(error.text, "x.json has "));
    }
    return status;
}

/* The fault whose text begins so, or NULL. */
static inline const struct settings_fault *settings_text_fault(const struct settings_faults *faults,
                                                               const char *begin)
{
    for (size_t i = 0; i < faults->count; i++)
        if (strncmp(faults->faults[i].text, begin, strlen(begin)) == 0)
            return &faults->faults[i];
    return NULL;
}

static inline void settings_text_print_faults(const struct settings_faults *faults)
{
    for (size_t i = 0; i < faults->count; i++)
        print_error("  %s\n", faults->faults[i].text);
}

#endif
