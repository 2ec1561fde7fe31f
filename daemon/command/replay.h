/* SPDX-License-Identifier: MIT */
/*
 * What a replay is fed: readings and words on the world's own clock, each at the moment the box had it, and the truth where someone has it.
 */
#ifndef FOREWATER_DAEMON_COMMAND_REPLAY_H
#define FOREWATER_DAEMON_COMMAND_REPLAY_H

#include "daemon/command/options.h"
#include "daemon/cycle.h"

struct replay_truth { /* observed level above the point's invert, by someone else's hand */
    size_t count;     /* 0: nobody knows */
    int64_t *utc_s;
    double *stage_m;
};

struct replay_input {
    struct reading *readings; /* by time received, then as they came */
    size_t reading_count, reading_capacity;
    struct word *words; /* by time received */
    size_t word_count, word_capacity;
    struct replay_truth *truth; /* [point] */
};

/* GAUGE=FILE.csv: columns observed (or time), stage_m / discharge_m3s / value, and where known received, source. FW_BAD_INPUT names file and line. */
FW_MUST_CHECK enum fw_status replay_read_readings(const struct settings *settings, const struct option_values *files,
                                                  struct replay_input *input, struct fw_error *error);
/* time, then the words of `say`, one a column. */
FW_MUST_CHECK enum fw_status replay_read_words(const struct settings *settings, const struct option_values *files,
                                               struct replay_input *input, struct fw_error *error);
/* POINT=FILE.csv: columns time, stage_m. */
FW_MUST_CHECK enum fw_status replay_read_truth(const struct settings *settings, const struct option_values *files,
                                               struct replay_input *input, struct fw_error *error);
/* Readings and words of a store, received in [from, to). */
FW_MUST_CHECK enum fw_status replay_read_store(const struct settings *settings, const char *store_file,
                                               int64_t from_utc_s, int64_t to_utc_s, struct replay_input *input,
                                               struct fw_error *error);
void replay_input_sort(struct replay_input *input);
void replay_input_clear(const struct settings *settings, struct replay_input *input);

/* First time the truth is at or above a mark, at or after a moment; PASSAGE_NEVER. */
int64_t replay_truth_passage(const struct replay_truth *truth, double mark_m, int64_t from_utc_s);

#endif
