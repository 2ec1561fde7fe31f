/* SPDX-License-Identifier: MIT */
#include "daemon/command/command.h"

#include <stdio.h>
#include <string.h>

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
    enum fw_status status = settings_read_file(file, need, settings_out, &faults, error);
    for (size_t index = 0; index < faults.count; index++)
        fprintf(stderr, "%s\n", faults.faults[index].text);
    settings_faults_clear(&faults);
    return status == FW_BAD_INPUT ? FW_BAD_SETTINGS : status;
}
