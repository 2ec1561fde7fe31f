/* SPDX-License-Identifier: MIT */
/* Of section (3) of the bulletin: how deep and fast the water on the deck may be, and which published limits it passes. */
#ifndef FOREWATER_DAEMON_TELL_BULLETIN_DECK_H
#define FOREWATER_DAEMON_TELL_BULLETIN_DECK_H

#include "daemon/tell/sentence_view.h"

/*
 * One paragraph, or nothing where no run wets the deck or its settings say nothing of it. Limits are told when they are
 * passed and not otherwise. Brief: the highest limit alone, else also the one that is passed first.
 */
void bulletin_deck_add(const struct sentence_view *view, bool is_brief, struct text *out);

/* Where the level is from, when it has a stage rating of its own, and the peak with it part-blocked; with room, the deck then. */
void bulletin_deck_add_rating(const struct sentence_view *view, bool is_brief, bool has_room, struct text *out);

#endif
