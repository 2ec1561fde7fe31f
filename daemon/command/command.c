/* SPDX-License-Identifier: MIT */
#include "daemon/command/command.h"

#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "daemon/journal.h"
#include "daemon/store/store.h"
#include "daemon/tell/sentence.h"

void command_print_caution(void)
{
    enum { LINE = 110 };
    const char *text = SENTENCE_CAUTION;
    while (strlen(text) > LINE) {
        size_t length = LINE;
        while (text[length] != ' ')
            length--;
        printf("%.*s\n", (int)length, text);
        text += length + 1;
    }
    printf("%s\n", text);
}

enum fw_status command_read_settings(const char *file, enum settings_need need, struct settings **settings_out,
                                     struct fw_error *error)
{
    struct settings_faults faults = {0};
    struct journal journal = journal_open(stderr, JOURNAL_INFO);
    enum fw_status status = settings_read_file(file, need, settings_out, &faults, error);
    for (size_t index = 0; index < faults.count; index++)
        journal_say(&journal, JOURNAL_ERROR, "%s", faults.faults[index].text);
    journal_flush(&journal);
    settings_faults_clear(&faults);
    return status == FW_BAD_INPUT ? FW_BAD_SETTINGS : status;
}

/* Where the last good settings are when the file itself cannot say. */
static const char *fallback_store(const char *file, const char *stated, char path[STORE_PATH_SIZE])
{
    const char *state_directory = getenv("STATE_DIRECTORY");
    if (stated != NULL)
        return stated;
    if (state_directory == NULL)
        return strcmp(file, COMMAND_DEFAULT_CONFIG) == 0 ? COMMAND_DEFAULT_STORE : NULL;
    snprintf(path, STORE_PATH_SIZE, "%s/history.db", state_directory);
    return path;
}

static enum fw_status read_last_good(const char *file, const char *store_file, struct settings **settings_out,
                                     struct fw_error *error)
{
    struct store *store = NULL;
    struct text text = {0};
    struct settings_faults faults = {0};
    enum fw_status status = store_open(store_file, STORE_READ, &store, error);
    if (status == FW_OK)
        status = store_last_settings(store, &text, error);
    if (status == FW_OK)
        status =
            settings_read_text(file, text_string(&text), text.length, SETTINGS_FOR_RUN, settings_out, &faults, error);
    settings_faults_clear(&faults);
    text_clear(&text);
    store_close(store);
    return status;
}

enum fw_status command_read_settings_in_force(const char *file, const char *store_file,
                                              struct settings **settings_out, struct fw_error *error)
{
    char path[STORE_PATH_SIZE];
    struct fw_error second = {.status = FW_OK};
    enum fw_status status = command_read_settings(file, SETTINGS_FOR_RUN, settings_out, error);
    const char *fallback = status == FW_OK ? NULL : fallback_store(file, store_file, path);
    if (fallback == NULL || read_last_good(file, fallback, settings_out, &second) != FW_OK)
        return status;
    struct journal journal = journal_open(stderr, JOURNAL_INFO);
    journal_say(
        &journal, JOURNAL_ERROR,
        "forewater: THE CONFIGURATION %s CANNOT BE USED: %s. Running on the last good settings %.8s, kept in %s. "
        "Mend the file and send SIGHUP.",
        file, error->text, (*settings_out)->digest, fallback);
    journal_flush(&journal);
    error->text[0] = '\0';
    return FW_OK;
}
