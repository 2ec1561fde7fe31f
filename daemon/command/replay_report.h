/* SPDX-License-Identifier: MIT */
/* What a replay prints: a line per change of decision, then a table that holds what was said against what came. */
#ifndef FOREWATER_DAEMON_COMMAND_REPLAY_REPORT_H
#define FOREWATER_DAEMON_COMMAND_REPLAY_REPORT_H

#include "daemon/command/replay.h"

struct replay_row {           /* what was said of one crossing until both its sides were shut */
    int64_t first_send_utc_s; /* PASSAGE_NEVER: never */
    int64_t need_s;           /* crew time and margin as stated at that moment */
    int64_t act_by_utc_s;     /* as last said */
    int64_t earliest_utc_s, likely_utc_s, latest_utc_s; /* of the deck mark, as last said */
    int64_t shut_utc_s;                                 /* people's word */
};

struct replay_report {
    bool is_json;
    size_t decision_count, message_count, wake_count;
    struct replay_row *rows; /* [point] */
};

FW_MUST_CHECK enum fw_status replay_report_open(struct replay_report *report, const struct settings *settings,
                                                bool is_json);
void replay_report_decisions(struct replay_report *report, const struct settings *settings,
                             const struct picture *picture, const struct delta *delta);
void replay_report_close(struct replay_report *report, const struct settings *settings, const struct picture *picture,
                         const struct replay_truth truth[]);
void replay_report_clear(struct replay_report *report);

#endif
