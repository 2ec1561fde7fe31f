/* SPDX-License-Identifier: MIT */
/* What `check` says of floods and reaches, on stdout. */
#ifndef FOREWATER_DAEMON_COMMAND_CHECK_REACH_H
#define FOREWATER_DAEMON_COMMAND_CHECK_REACH_H

#include "daemon/command/check_facts.h"

/* The flood of each gauge by which methods are chosen, and where it comes from. */
void check_reach_print_floods(const struct settings *settings);
FW_MUST_CHECK enum fw_status check_reach_print(const struct check_facts *facts, size_t index, struct fw_error *error);
void check_reach_print_legend(void);

/* "stated": where a gauge's flood comes from, one word. */
const char *check_reach_flood_word(enum settings_flood from);

#endif
