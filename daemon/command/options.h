/* SPDX-License-Identifier: MIT */
/* One table of options per command: it feeds getopt_long, --help and the synopsis. */
#ifndef FOREWATER_DAEMON_COMMAND_OPTIONS_H
#define FOREWATER_DAEMON_COMMAND_OPTIONS_H

#include <stdbool.h>
#include <stddef.h>

#include "daemon/error.h"

enum { OPTION_VALUES_MAX = 32 };

struct option_values { /* what was given, in order; texts belong to argv */
    size_t count;
    const char *values[OPTION_VALUES_MAX];
};

struct option_spec {
    const char *name;     /* without the dashes; NULL ends the table */
    const char *argument; /* what stands after it, in capitals; NULL: a switch */
    const char *meaning;
    struct option_values *given;
};

struct command_line {
    const char *command;  /* "route" */
    const char *synopsis; /* what stands after the options: "POINT STATE" */
    const char *purpose;  /* one sentence */
    const struct option_spec *options;
};

/*
 * Reads argv[1..]. What is no option is left, in order, in argv from *first_rest_out on.
 * FW_NOTHING_NEW: --help was given and printed. FW_USAGE: unknown option, missing argument, one given too often.
 */
FW_MUST_CHECK enum fw_status options_read(const struct command_line *line, int argument_count, char *arguments[],
                                          int *first_rest_out, struct fw_error *error);

/* The newest value given, or `otherwise`. */
const char *option_text(const struct option_values *values, const char *otherwise);
/* A whole number within [least, most]; `otherwise` when not given. FW_USAGE names the option and what was expected. */
FW_MUST_CHECK enum fw_status option_whole(const char *name, const struct option_values *values, long least, long most,
                                          long otherwise, long *value_out, struct fw_error *error);

#endif
