/* SPDX-License-Identifier: MIT */
/* The facts of `check` as one JSON object on stdout: "schema": "forewater.check.1". Times in seconds, flows in m3/s. */
#ifndef FOREWATER_DAEMON_COMMAND_CHECK_JSON_H
#define FOREWATER_DAEMON_COMMAND_CHECK_JSON_H

#include "daemon/command/check_facts.h"

FW_MUST_CHECK enum fw_status check_json_print(const struct check_facts *facts, struct fw_error *error);

#endif
