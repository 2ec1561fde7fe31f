/* SPDX-License-Identifier: MIT */
/* JSON that came from outside (RFC 8259), and places in it (RFC 6901). */
#ifndef FOREWATER_DAEMON_FEED_JSON_TEXT_H
#define FOREWATER_DAEMON_FEED_JSON_TEXT_H

#include <stdbool.h>
#include <stddef.h>

#include <cjson/cJSON.h>

#include "daemon/error.h"

enum { JSON_TEXT_DEPTH = 32 };

/*
 * Strict: the grammar is checked before cJSON, which lets "01" and "1." pass, reads the text; nothing may follow the
 * value but blanks. A byte order mark is passed over. The caller deletes *root_out. FW_BAD_INPUT: not JSON (the error
 * says at which byte), or nested deeper than JSON_TEXT_DEPTH. FW_NO_MEMORY.
 */
FW_MUST_CHECK enum fw_status json_text_parse(const char *bytes, size_t length, cJSON **root_out,
                                             struct fw_error *error);

bool json_text_is_blank(char byte); /* between the values of JSON */

/* What a JSON Pointer leads to ("" is `from` itself); NULL: nothing is there, or it is no pointer. */
const cJSON *json_text_at(const cJSON *from, const char *pointer);

#endif
