/* SPDX-License-Identifier: MIT */
/*
 * What the sentences look at: one decision at one point, and its facts as words. Shared by the text message and the
 * bulletin.
 */
#ifndef FOREWATER_DAEMON_TELL_SENTENCE_VIEW_H
#define FOREWATER_DAEMON_TELL_SENTENCE_VIEW_H

#include "daemon/delta.h"
#include "daemon/tell/sentence_catalogue.h"

enum { SENTENCE_MOMENT_SIZE = 40, SENTENCE_NUMBER_SIZE = 40, SENTENCE_WORDS_SIZE = 160, SENTENCE_DISTRICT_MOST = 24 };

struct sentence_view {
    const struct sentence_catalogue *words;
    const struct settings *settings;
    const struct picture *picture;
    size_t point;
    const struct settings_point *known;
    const struct point_picture *state;
    struct advice before, after;
    int64_t number; /* 0: none */
    size_t run_count;
    size_t also_count; /* other crossings whose change rides with this one */
    bool *is_above;    /* per gauge: lies above the point; NULL when memory ran out: then no gauge is named */
};

/* decision NULL: the most urgent point as it stands. The caller clears it. False: there is no point. */
bool sentence_view_open(const struct settings *settings, const struct picture *picture,
                        const struct decision *decision, struct sentence_view *view_out);
void sentence_view_clear(struct sentence_view *view);

/* LATE, SEND, MUSTER, KEEP SHUT, WALK-OVER, QUIET: 5 .. 0 */
int sentence_urgency(enum advice_level level);

/*
 * "22:18"; "Sat 22:18" when it is more than 20 hours off; a date when more than six days; "02:43+01" when the
 * district's clock has another offset then than now; "-" for PASSAGE_NEVER.
 */
const char *sentence_moment(const struct sentence_view *view, int64_t utc_s, char text[SENTENCE_MOMENT_SIZE]);
/* "[>>] SEND [//] BLIND" */
const char *sentence_advice(const struct sentence_view *view, const struct advice *advice,
                            char text[SENTENCE_WORDS_SIZE]);
/* "45 min", "7 h", "3 days" */
const char *sentence_age(const struct sentence_view *view, int64_t seconds, char *text_out, size_t size);
/* "3 of 9 runs" in words and numbers */
const char *sentence_runs(const struct sentence_view *view, double chance, char text[SENTENCE_WORDS_SIZE]);
size_t sentence_reached(const struct sentence_view *view, double chance);

/* "1.95"; "-" for what is not known. Of anything, not of metres alone. */
const char *sentence_metres(double value, char text[SENTENCE_NUMBER_SIZE]);
/* "0.12 m below deck" */
const char *sentence_to_deck(const struct sentence_view *view, double level_m, char text[SENTENCE_WORDS_SIZE]);

/* NULL: the point has no marks. */
const struct passage *sentence_closing(const struct sentence_view *view);
const struct passage *sentence_deck(const struct sentence_view *view);
double sentence_deck_m(const struct sentence_view *view, size_t point); /* NAN: no marks */
/* The gauge above the point that speaks for it: blind before seeing, then silent longest. NULL: none. */
const struct gauge_picture *sentence_gauge(const struct sentence_view *view, size_t *gauge_out);
bool sentence_any_above(const struct sentence_view *view, bool (*has)(const struct gauge_picture *gauge));
bool sentence_is_measured(
    const struct sentence_view *view); /* the arrival at the closing mark rests on measured water */
int64_t sentence_next_look_utc_s(const struct sentence_view *view);

/* Fills a pattern into a fixed text; cut at a character's edge when it does not fit. */
const char *sentence_words(const struct sentence_view *view, enum sentence_id id, const struct sentence_field *fields,
                           char *text_out, size_t size);
/* At most `most` characters of good UTF-8 without control bytes; "?" for what is not. */
void sentence_name(const char *name, size_t most, char *text_out, size_t size);
/* The same in the basic alphabet of text messages: accents are dropped, what has no likeness becomes "?". */
void sentence_plain_name(const char *name, char *text_out, size_t size);
size_t sentence_characters(const char *text); /* code points */

#endif
