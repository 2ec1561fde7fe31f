/* SPDX-License-Identifier: MIT */
/* sysexits.h for a status: what the shell sees. */
#ifndef FOREWATER_DAEMON_EXIT_CODE_H
#define FOREWATER_DAEMON_EXIT_CODE_H

#include "engine/status.h"

int exit_code_of(enum fw_status status);

#endif
