/* SPDX-License-Identifier: MIT */
/*
 * The subcommands. Each takes argv with its own name at [0] and writes to stdout; a failure comes back as a status with its text, which main
 * prints. A command that found something amiss (check) returns FW_BAD_INPUT after having printed it, with an empty text.
 */
#ifndef FOREWATER_DAEMON_COMMAND_COMMAND_H
#define FOREWATER_DAEMON_COMMAND_COMMAND_H

#include "daemon/error.h"
#include "daemon/settings/settings.h"

typedef enum fw_status command_function(int argument_count, char *arguments[], struct fw_error *error);

command_function command_run;
command_function command_check;
command_function command_route;
command_function command_replay;
command_function command_status;
command_function command_say;
command_function command_export;

/*
 * For what goes on while the file has faults: run, say, status. When the file cannot be used, the last settings that worked, which the store keeps, loudly.
 *   store_file  where that store is; NULL: $STATE_DIRECTORY/history.db, and for the installed configuration COMMAND_DEFAULT_STORE
 */
FW_MUST_CHECK enum fw_status command_read_settings_in_force(const char *file, const char *store_file,
                                                            struct settings **settings_out, struct fw_error *error);

/* The caution that stands under everything a person acts on, in lines of a terminal. */
void command_print_caution(void);

#define COMMAND_DEFAULT_CONFIG "/etc/forewater/forewater.json"
#define COMMAND_DEFAULT_STORE "/var/lib/forewater/history.db"

/* Reads the settings; every fault goes to stderr, one a line. */
FW_MUST_CHECK enum fw_status command_read_settings(const char *file, enum settings_need need,
                                                   struct settings **settings_out, struct fw_error *error);

#endif
