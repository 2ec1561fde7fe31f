/* SPDX-License-Identifier: MIT */
/* People's words: from a command line, to and from a file, and as a line that people read. */
#ifndef FOREWATER_DAEMON_FEED_WORD_H
#define FOREWATER_DAEMON_FEED_WORD_H

#include "daemon/buffer.h"
#include "daemon/error.h"
#include "daemon/facts.h"
#include "daemon/settings/settings.h"

/*
 * Reads the words of a command line after `say`:
 *     accept [NUMBER]  |  reading GAUGE VALUE [--unit U]  |  seen POINT dry  |  seen POINT wet [CM]
 *     road POINT STATE [--both-sides]  |  note TEXT...         each with  --by ROLE  [--at TIME]
 * SHUT needs --both-sides: a road is shut when both its sides are. now_utc_s is the time spoken of when --at is not
 * given. TIME is RFC 3339 (without an offset: in the district's zone), or a clock time as 22:05, which is the last
 * such time that has been. The id is left "". FW_USAGE: the error says what was expected, with the known ids.
 */
FW_MUST_CHECK enum fw_status word_parse(const struct settings *settings, int argument_count, char *const arguments[],
                                        int64_t now_utc_s, struct word *word_out, struct fw_error *error);

/* One line in words for people and logs: "road tallowick-ford CREW CALLED (roads foreman, 22:05)". */
void word_line(const struct settings *settings, const struct word *word, char line[FACT_WORD_LINE_SIZE]);

/*
 * What must be true of a word, however it came: its subject is known, its value is finite and in a unit that fits,
 * its role is stated, its texts are UTF-8 without control characters. FW_BAD_INPUT.
 */
FW_MUST_CHECK enum fw_status word_check(const struct settings *settings, const struct word *word,
                                        struct fw_error *error);

/* As one JSON object (the form of an inbox file). has_time false: without "at". FW_NO_MEMORY. */
FW_MUST_CHECK enum fw_status word_write_json(const struct word *word, bool has_time, struct text *json_out);
/*
 * From one JSON object; a word without "at" is stamped received_utc_s.
 * FW_BAD_INPUT: not JSON, a key unknown, missing or not what it must be, or word_check fails. FW_NO_MEMORY.
 */
FW_MUST_CHECK enum fw_status word_read_json(const struct settings *settings, const char *bytes, size_t length,
                                            int64_t received_utc_s, struct word *word_out, struct fw_error *error);

#endif
