/* SPDX-License-Identifier: MIT */
/*
 * What the player must know of the configuration to judge a night: the crossings, their decks, their crews.
 */
#ifndef FOREWATER_CONFIG_DEMO_CROSSINGS_H
#define FOREWATER_CONFIG_DEMO_CROSSINGS_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

enum { CROSSINGS_MAX = 8 };

struct crossing {
    char id[64], name[64];
    double deck_m;
    double day_min, night_min, margin_min;
};

struct crossings {
    int64_t cycle_s;                        /* forecast.every_min */
    int night_from_minute, night_to_minute; /* local */
    size_t count;
    struct crossing list[CROSSINGS_MAX];
};

/* `text` is the configuration; it is changed. false: said on stderr. */
bool crossings_read(char *text, struct crossings *crossings_out);

/* Crew time and margin, for someone sent at that moment. */
int64_t crossings_need_s(const struct crossings *crossings, const struct crossing *crossing, int64_t sent_utc_s);

#endif
