/* SPDX-License-Identifier: MIT */
#include <stdio.h>
#include <string.h>
#include <sysexits.h>

#include "daemon/command/command.h"
#include "daemon/exit_code.h"

static const struct {
    const char *name;
    command_function *function;
    const char *purpose;
} commands[] = {
    {"run", command_run, "the daemon, in the foreground; --once for one cycle"},
    {"check", command_check, "reads the configuration and says what it means in minutes"},
    {"route", command_route, "routes hydrographs from files, no store: the engine alone"},
    {"replay", command_replay, "the daemon's own cycle over past readings, as known at each minute"},
    {"status", command_status, "the present picture, in the terminal"},
    {"export", command_export, "readings as CSV, now or as they were known at a moment"},
    {"say", command_say, "a person's word: accept, reading, seen, road, note"},
};

enum { COMMAND_COUNT = sizeof commands / sizeof *commands };

static void print_help(FILE *stream)
{
    fprintf(stream,
            "usage: forewater COMMAND [OPTION ...]\n\n"
            "Says by what minute someone must act at a low road crossing, how sure that is, and how much of it\n"
            "rests on water already measured.\n\n");
    for (size_t index = 0; index < COMMAND_COUNT; index++)
        fprintf(stream, "  %-8s %s\n", commands[index].name, commands[index].purpose);
    fprintf(stream, "\n'forewater COMMAND --help' tells its options; 'forewater --version' the version.\n");
}

int main(int argument_count, char *arguments[])
{
    const char *name = argument_count > 1 ? arguments[1] : "";
    if (strcmp(name, "--help") == 0 || strcmp(name, "help") == 0) {
        print_help(stdout);
        return EX_OK;
    }
    if (strcmp(name, "--version") == 0) {
        printf("forewater %s\n", FW_VERSION);
        return EX_OK;
    }
    for (size_t index = 0; index < COMMAND_COUNT; index++) {
        if (strcmp(name, commands[index].name) != 0)
            continue;
        struct fw_error error = {.status = FW_OK};
        enum fw_status status = commands[index].function(argument_count - 1, arguments + 1, &error);
        if (status != FW_OK && status != FW_NOTHING_NEW && error.text[0] != '\0')
            fprintf(stderr, "forewater: %s\n", error.text);
        return exit_code_of(status);
    }
    if (name[0] != '\0')
        fprintf(stderr, "forewater: '%s' is not a command\n", name);
    print_help(stderr);
    return EX_USAGE;
}
