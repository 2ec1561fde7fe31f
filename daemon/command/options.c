/* SPDX-License-Identifier: MIT */
#include "daemon/command/options.h"

#include <errno.h>
#include <getopt.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

enum { OPTIONS_MAX = 32, FIRST_OPTION_CODE = 1000, HELP_CODE = 999 };

static void print_help(const struct command_line *line)
{
    printf("usage: forewater %s", line->command);
    for (const struct option_spec *option = line->options; option->name != NULL; option++)
        printf(" [--%s%s%s]", option->name, option->argument ? " " : "", option->argument ? option->argument : "");
    printf("%s%s\n\n%s\n\n", line->synopsis[0] ? " " : "", line->synopsis, line->purpose);
    for (const struct option_spec *option = line->options; option->name != NULL; option++) {
        char left[64];
        snprintf(left, sizeof left, "--%s%s%s", option->name, option->argument ? " " : "",
                 option->argument ? option->argument : "");
        printf("  %-26s %s\n", left, option->meaning);
    }
    printf("  %-26s %s\n", "--help", "this text");
}

enum fw_status options_read(const struct command_line *line, int argument_count, char *arguments[],
                            int *first_rest_out, struct fw_error *error)
{
    struct option known[OPTIONS_MAX + 2] = {{0}};
    size_t count = 0;
    for (; count < OPTIONS_MAX && line->options[count].name != NULL; count++)
        known[count] = (struct option){line->options[count].name,
                                       line->options[count].argument ? required_argument : no_argument, NULL,
                                       FIRST_OPTION_CODE + (int)count};
    known[count] = (struct option){"help", no_argument, NULL, HELP_CODE};

    optind = 0;
    opterr = 0;
    for (int code; (code = getopt_long(argument_count, arguments, ":", known, NULL)) != -1;) {
        if (code == HELP_CODE) {
            print_help(line);
            return FW_NOTHING_NEW;
        }
        const char *word = arguments[optind - 1];
        if (code == '?')
            return fw_error_set(error, FW_USAGE, "%s: option '%s' is not known; 'forewater %s --help' lists them",
                                line->command, word, line->command);
        if (code == ':')
            return fw_error_set(error, FW_USAGE, "%s: option '%s' needs a value", line->command, word);
        const struct option_spec *option = &line->options[code - FIRST_OPTION_CODE];
        if (option->given->count == OPTION_VALUES_MAX)
            return fw_error_set(error, FW_USAGE, "%s: --%s is given more than %d times", line->command, option->name,
                                OPTION_VALUES_MAX);
        option->given->values[option->given->count++] = option->argument ? optarg : "";
    }
    *first_rest_out = optind;
    return FW_OK;
}

const char *option_text(const struct option_values *values, const char *otherwise)
{
    return values->count > 0 ? values->values[values->count - 1] : otherwise;
}

enum fw_status option_whole(const char *name, const struct option_values *values, long least, long most,
                            long otherwise, long *value_out, struct fw_error *error)
{
    const char *text = option_text(values, NULL);
    if (text == NULL) {
        *value_out = otherwise;
        return FW_OK;
    }
    char *end;
    errno = 0;
    long value = strtol(text, &end, 10);
    if (errno != 0 || end == text || *end != '\0' || value < least || value > most)
        return fw_error_set(error, FW_USAGE, "--%s: '%s' is not a whole number from %ld to %ld", name, text, least,
                            most);
    *value_out = value;
    return FW_OK;
}
