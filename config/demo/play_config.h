/* SPDX-License-Identifier: MIT */
/*
 * The configuration of one run: a copy of the demonstration's, with what is known only then filled in. The comments
 * stay.
 */
#ifndef FOREWATER_CONFIG_DEMO_PLAY_CONFIG_H
#define FOREWATER_CONFIG_DEMO_PLAY_CONFIG_H

#include <stdbool.h>

struct play_config_places {
    unsigned port;         /* of the gauge's page, for 127.0.0.1:8469 */
    const char *hook;      /* absolute, for "./page-hook" */
    const char *told_file; /* in the present folder, for "messages.jsonl" */
};

char *play_config_read(const char *path); /* heap; NULL: said on stderr */

/* Each place must be there exactly once. false: said on stderr. */
bool play_config_write(const char *text, const struct play_config_places *places, const char *path);

#endif
