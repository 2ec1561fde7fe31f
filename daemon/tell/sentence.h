/* SPDX-License-Identifier: MIT */
/*
 * What is said, in words: the text message of 160 characters, and the bulletin. The same words on every outlet. All
 * sentences stand in one catalogue (sentence_catalogue.c), so that another language is another table.
 */
#ifndef FOREWATER_DAEMON_TELL_SENTENCE_H
#define FOREWATER_DAEMON_TELL_SENTENCE_H

#include "daemon/buffer.h"
#include "daemon/delta.h"

#define SENTENCE_CAUTION                                                                                             \
    "Decision aid for trained staff. Local codes, the road authority, police and emergency services come first. "    \
    "Levels and limits must be set and signed by a licensed engineer. No message from this system means a road is "  \
    "fit "                                                                                                           \
    "to use. Crews do not enter moving water."
#define SENTENCE_CAUTION_SHORT "Aid only. Road authority decides."

/* At most 160 characters of the basic alphabet: who, crossing, what, when, what it rests on, what to answer. */
void sentence_short(const struct settings *settings, const struct picture *picture, const struct decision *decision,
                    char text_out[FACT_SHORT_SIZE]);

/*
 * The bulletin of a picture, plain text, under 30 lines, readable aloud: (1) what to do and by when, for the decision
 * (NULL: the most urgent); (2) the crossings table, by act-by; (3) what it rests on, measured until; (4) what would
 * change our mind, next look; (5) what it cannot see; (6) who has been told and what people said; (7) caution,
 * settings digest and record number. Lines of at most 100 characters. When it would be too long, the least needed is
 * said shorter or left out, never (1), what it rests on, the standing list of what it cannot see, or the caution.
 * FW_BAD_INPUT: the settings have no point. FW_NO_MEMORY. Nothing is written then; else the caller clears the text.
 */
FW_MUST_CHECK enum fw_status sentence_bulletin(const struct settings *settings, const struct picture *picture,
                                               const struct decision *decision, struct text *text_out);

/*
 * One line per change of decision, for the journal and for replay: "22:00 Tallowick Ford: QUIET -> SEND, act by
 * 22:18, ...".
 */
void sentence_change(const struct settings *settings, const struct picture *picture, const struct decision *decision,
                     struct text *line_out);

#endif
