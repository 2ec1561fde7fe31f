/* SPDX-License-Identifier: MIT */
/*
 * Every sentence that Forewater says to a person about a crossing, in one table: another language is another table.
 * Code puts facts into {named places}; it holds no words of its own. docs/messages.md lists the kinds.
 *
 * The words name acts and facts, not severity. Nothing here may say or hint that a road is fit to use.
 */
#ifndef FOREWATER_DAEMON_TELL_SENTENCE_CATALOGUE_H
#define FOREWATER_DAEMON_TELL_SENTENCE_CATALOGUE_H

#include "daemon/buffer.h"

enum {
    SENTENCE_LEVEL_COUNT = 6,  /* of enum advice_level */
    SENTENCE_ROAD_COUNT = 7,   /* of enum road_state */
    SENTENCE_REASON_COUNT = 11 /* bits of enum advice_reason */
};

enum sentence_id {
    /* the text message: what; every full form is followed by its _BRIEF one, for where it does not fit */
    SHORT_SENDER,
    SHORT_SENDER_BRIEF,
    SHORT_PLACE,
    SHORT_MUSTER,
    SHORT_MUSTER_BRIEF,
    SHORT_SEND,
    SHORT_SEND_BRIEF,
    SHORT_NEAR_SIDES,
    SHORT_NEAR_SIDES_BRIEF,
    SHORT_LATE,
    SHORT_LATE_BRIEF,
    SHORT_KEEP_SHUT,
    SHORT_KEEP_SHUT_BRIEF,
    SHORT_WALK_OVER,
    SHORT_WALK_OVER_BRIEF,
    SHORT_STEP_DOWN,
    SHORT_STEP_DOWN_BRIEF,
    SHORT_QUIET,
    SHORT_QUIET_BRIEF,
    SHORT_UPDATE,
    SHORT_UPDATE_BRIEF,
    SHORT_BLIND,
    SHORT_BLIND_BRIEF,
    SHORT_BLIND_RISING,
    SHORT_BLIND_RISING_BRIEF,
    SHORT_GAUGE_BACK,
    SHORT_GAUGE_BACK_BRIEF,
    /* when the deck gets wet */
    SHORT_DECK_BETWEEN,
    SHORT_DECK_FROM,
    SHORT_DECK_SINCE,
    SHORT_DECK_NOT_REACHED,
    SHORT_DECK_UNKNOWN,
    /* act by */
    SHORT_ACT_BY,
    SHORT_ACT_BY_WAS, /* SHORT_ACT_BY is its brief form */
    SHORT_ACT_BY_PASSED,
    SHORT_ACT_BY_PASSED_NOW,
    SHORT_ACT_NOW,
    /* what it rests on */
    SHORT_MEASURED,
    SHORT_MEASURED_BRIEF,
    SHORT_MEASURED_PARTLY,
    SHORT_MEASURED_PARTLY_BRIEF,
    SHORT_ASSUMED_AFTER,
    SHORT_ASSUMED_AFTER_BRIEF,
    SHORT_ASSUMED_RISE_AFTER,
    SHORT_ASSUMED_RISE_AFTER_BRIEF,
    SHORT_ASSUMED_SILENT,
    SHORT_ASSUMED_SILENT_BRIEF,
    SHORT_ASSUMED_RISE_SILENT,
    SHORT_ASSUMED_RISE_SILENT_BRIEF,
    SHORT_ASSUMED_NO_READING,
    SHORT_ASSUMED_NO_READING_BRIEF,
    SHORT_UNCONFIRMED,
    SHORT_UNCONFIRMED_BRIEF,
    SHORT_WATER_SEEN,
    SHORT_WATER_SEEN_BRIEF,
    SHORT_NEWEST,
    /* why it stays shut */
    SHORT_BELOW_BUT_SILENT,
    SHORT_BELOW_BUT_SILENT_RISING,
    SHORT_BELOW_BUT_RETURN,
    SHORT_BELOW_BUT_HOLD,
    SHORT_BELOW_BUT_WATER_SEEN,
    SHORT_OVER_DECK,
    SHORT_OVER_DECK_SILENT,
    /* the rest */
    SHORT_TRIGGER,
    SHORT_BEYOND_GAUGING,
    SHORT_ABOVE_SURVEY,
    SHORT_HAND,
    SHORT_NEXT_LOOK,
    SHORT_ALSO,
    SHORT_ALSO_BRIEF,
    SHORT_HINT,
    SHORT_NUMBER,

    /* one line per change of decision */
    CHANGE_STEP,
    CHANGE_SAME,
    CHANGE_NOW_BLIND,
    CHANGE_STILL_BLIND,
    CHANGE_SEES_AGAIN,
    CHANGE_NEAR_SIDES,
    CHANGE_ACT_BY,
    CHANGE_ACT_BY_WAS,
    CHANGE_NO_ACT_BY,
    CHANGE_DECK,
    CHANGE_NUMBER,

    /* the bulletin */
    HEAD,
    HEAD_NO_NUMBER,
    HEAD_NOT_STORED,
    HEAD_AWAY,
    DO_LINE,
    DO_MUSTER,
    DO_SEND,
    DO_NEAR_SIDES,
    DO_LATE,
    DO_KEEP_SHUT,
    DO_WALK_OVER,
    DO_QUIET,
    DO_NO_CREW,
    DO_ACT_BY,
    DO_ACT_BY_PASSED,
    DO_ACT_NOW,
    DO_NO_ACT_BY,
    DO_WHY,
    DO_ALSO,
    DO_TRIGGER,
    DO_DETOUR,
    DO_ACCESS,
    TABLE_TITLE,
    TABLE_ACT_BY,
    TABLE_PLACE,
    TABLE_ADVICE,
    TABLE_DECK,
    TABLE_RUNS,
    TABLE_LEVEL,
    TABLE_PASSED,
    TABLE_NOT_REACHED,
    TABLE_UNKNOWN,
    TABLE_RUNS_CELL,
    TABLE_LEVEL_CELL,
    TABLE_NO_CREW,
    TABLE_MORE,
    RESTS_TITLE,
    RESTS_GAUGE,
    RESTS_GAUGE_NONE,
    RESTS_MORE_GAUGES,
    RESTS_HAND,
    RESTS_UNCONFIRMED,
    RESTS_BEYOND,
    RESTS_FROZEN,
    RESTS_HELD,
    RESTS_BLIND,
    RESTS_UNKNOWN,
    RESTS_NOW,
    RESTS_PEAK,
    RESTS_MARK,
    RESTS_MARK_NEVER,
    RESTS_MEASURED,
    RESTS_MEASURED_BRIEF,
    RESTS_ALL_MEASURED,
    RESTS_SHARE,
    RESTS_REPLACED,
    RESTS_PEAK_BEYOND,
    RESTS_PEAK_ABOVE_SURVEY,
    RESTS_STAGE_RATING,
    RESTS_PART_BLOCKED,
    RESTS_PART_BLOCKED_BRIEF,
    DECK_LIKELY,
    DECK_LIKELY_BRIEF,
    DECK_HIGHEST,
    DECK_HIGHEST_BRIEF,
    DECK_OVER,
    DECK_OVER_PERHAPS,
    DECK_BLOCKED,
    DECK_OVER_THEN,
    DECK_DRAFT_LIMIT,
    DECK_GUIDE_LIMIT,
    DECK_SMALL_CAR,
    DECK_LARGE_CAR,
    DECK_ANY_VEHICLE,
    DECK_ANY_PERSON,
    DECK_CAUTION_WORDS,
    CHANGES_TITLE,
    CHANGES_READING,
    CHANGES_NO_READING,
    CHANGES_OTHERS,
    CHANGES_END,
    CHANGES_NEXT_LOOK,
    UNSEEN,
    TOLD_TITLE,
    TOLD_TO,
    TOLD_NOBODY_SET,
    TOLD_SENT,
    TOLD_UNDER_WAY,
    TOLD_WAITS,
    TOLD_GIVEN_UP,
    PEOPLE_ROAD,
    PEOPLE_NO_ROAD,
    PEOPLE_DRY,
    PEOPLE_WET,
    PEOPLE_WET_DEPTH,
    PEOPLE_ACCEPTED,
    PEOPLE_NOT_ACCEPTED,
    RECORD,
    /* words within sentences */
    WORD_BELOW_DECK,
    WORD_OVER_DECK,
    WORD_AT_DECK,
    WORD_BELOW,
    WORD_OVER,
    WORD_AT,
    WORD_RISING,
    WORD_FALLING,
    WORD_STEADY,
    WORD_LATER,
    WORD_MINUTES,
    WORD_HOURS,
    WORD_DAYS,
    WORD_CLOSING,
    WORD_BLIND,
    RUNS_NONE,
    RUNS_FEW,
    RUNS_EVEN,
    RUNS_MOST,
    RUNS_ALL,
    SENTENCE_ID_COUNT
};

struct sentence_catalogue {
    const char *language; /* BCP 47 */
    const char *level_word[SENTENCE_LEVEL_COUNT];
    const char *level_glyph[SENTENCE_LEVEL_COUNT];
    const char *blind_glyph;
    const char *road_word[SENTENCE_ROAD_COUNT];
    const char *reason[SENTENCE_REASON_COUNT];
    const char *weekday[7]; /* from Monday */
    const char *text[SENTENCE_ID_COUNT];
};

const struct sentence_catalogue *sentence_catalogue_english(void);

struct sentence_field {
    const char *name, *value;
};

/*
 * Adds the sentence with every {name} replaced by its value. `fields` ends with a NULL name. A place without a field
 * stays as it is written.
 */
void sentence_fill(struct text *out, const char *pattern, const struct sentence_field *fields);

#endif
