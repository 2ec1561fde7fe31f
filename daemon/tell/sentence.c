/* SPDX-License-Identifier: MIT */
#include "daemon/tell/sentence.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

#include "daemon/tell/sentence_view.h"
#include "daemon/when.h"

/*
 * A text message is put together from parts in the order of need. Parts without which it would mislead (place, what
 * to do, act-by, what it rests on, number) stand in any case, in their brief form at least; the others and the long
 * forms come in, most needed first, while there is room. The crossing's name is shortened only when the brief parts
 * alone leave no room for it.
 */
enum part {
    PART_SENDER,
    PART_PLACE,
    PART_WHAT,
    PART_ALSO,
    PART_DECK,
    PART_ACT_BY,
    PART_RESTS,
    PART_TRIGGER,
    PART_BEYOND,
    PART_HAND,
    PART_NEXT_LOOK,
    PART_HINT,
    PART_NUMBER,
    PART_CAUTION,
    PART_COUNT
};

enum { ROOM = FACT_SHORT_SIZE - 1, PART_SIZE = 200, BY_MOST = 20 };

struct parts {
    const struct sentence_view *view;
    char full[PART_COUNT][PART_SIZE];
    char brief[PART_COUNT][PART_SIZE]; /* "" where the part may be left out */
    bool asks_more;                    /* the full form of PART_WHAT asks for an act that the brief one does not */
};

static void put(struct parts *parts, enum part part, enum sentence_id id, const struct sentence_field *fields)
{
    sentence_words(parts->view, id, fields, parts->full[part], PART_SIZE);
}

static void put_both(struct parts *parts, enum part part, enum sentence_id full, enum sentence_id brief,
                     const struct sentence_field *fields)
{
    put(parts, part, full, fields);
    sentence_words(parts->view, brief, fields, parts->brief[part], PART_SIZE);
}

/* --- what to do --- */

static bool is_on_ladder(enum advice_level level)
{
    return level <= ADVICE_LATE;
}

/* The act comes before the news: what changed is told only where it does not push out what must be done. */
static enum sentence_id choose_what(const struct sentence_view *view)
{
    const struct advice *before = &view->before;
    const struct advice *after = &view->after;
    bool is_same = before->level == after->level;
    bool comes_down = is_on_ladder(before->level) && after->level < before->level;
    if (after->level == ADVICE_LATE)
        return SHORT_LATE;
    if (after->level == ADVICE_KEEP_SHUT)
        return SHORT_KEEP_SHUT;
    if (after->level == ADVICE_WALK_OVER)
        return SHORT_WALK_OVER;
    if (after->near_sides_only && after->level == ADVICE_SEND)
        return SHORT_NEAR_SIDES;
    if (is_same && after->is_blind && !before->is_blind)
        return view->state->is_rising ? SHORT_BLIND_RISING : SHORT_BLIND;
    if (is_same && !after->is_blind && before->is_blind)
        return SHORT_GAUGE_BACK;
    if (is_same && !before->near_sides_only)
        return SHORT_UPDATE;
    if (after->level == ADVICE_QUIET)
        return SHORT_QUIET;
    if (after->level == ADVICE_MUSTER)
        return comes_down ? SHORT_STEP_DOWN : SHORT_MUSTER;
    return SHORT_SEND;
}

static void put_what(struct parts *parts)
{
    const struct sentence_view *view = parts->view;
    char newest[SENTENCE_MOMENT_SIZE];
    const struct sentence_field fields[] = {{"level", view->words->level_word[view->after.level]},
                                            {"before", view->words->level_word[view->before.level]},
                                            {"newest", sentence_moment(view, view->state->newest_utc_s, newest)},
                                            {0}};
    enum sentence_id id = choose_what(view);
    put_both(parts, PART_WHAT, id, id + 1, fields);
    parts->asks_more = id == SHORT_LATE || id == SHORT_BLIND || id == SHORT_BLIND_RISING || id == SHORT_WALK_OVER;
}

/* --- what else --- */

static void put_also(struct parts *parts)
{
    char count[24];
    if (parts->view->also_count == 0)
        return;
    snprintf(count, sizeof count, "%zu", parts->view->also_count);
    put_both(parts, PART_ALSO, SHORT_ALSO, SHORT_ALSO_BRIEF, (struct sentence_field[]){{"count", count}, {0}});
}

/* --- when --- */

static void put_deck(struct parts *parts)
{
    const struct sentence_view *view = parts->view;
    const struct passage *deck = sentence_deck(view);
    if (deck == NULL)
        return;
    char earliest[SENTENCE_MOMENT_SIZE];
    char latest[SENTENCE_MOMENT_SIZE];
    char runs[24];
    snprintf(runs, sizeof runs, "%zu", view->run_count);
    const struct sentence_field fields[] = {{"earliest", sentence_moment(view, deck->earliest_utc_s, earliest)},
                                            {"latest", sentence_moment(view, deck->latest_utc_s, latest)},
                                            {"runs", runs},
                                            {0}};
    enum sentence_id id = SHORT_DECK_BETWEEN;
    if (view->state->is_unknown)
        id = SHORT_DECK_UNKNOWN;
    else if (deck->earliest_utc_s == PASSAGE_NEVER)
        id = SHORT_DECK_NOT_REACHED;
    else if (deck->latest_utc_s == PASSAGE_NEVER)
        id = SHORT_DECK_FROM;
    else if (deck->latest_utc_s <= view->picture->as_of_utc_s)
        id = SHORT_DECK_SINCE;
    put(parts, PART_DECK, id, fields);
}

static bool act_by_moved(const struct sentence_view *view)
{
    int64_t was_utc_s = view->before.told_act_by_utc_s;
    int64_t moved_s;
    bool was_told = view->before.level == ADVICE_MUSTER || view->before.level == ADVICE_SEND;
    return was_told && was_utc_s != PASSAGE_NEVER && was_utc_s > 0 &&
           !__builtin_sub_overflow(view->after.act_by_utc_s, was_utc_s, &moved_s) &&
           (moved_s >= 60 || moved_s <= -60);
}

static void put_act_by(struct parts *parts)
{
    const struct sentence_view *view = parts->view;
    enum advice_level level = view->after.level;
    int64_t act_by_utc_s = view->after.act_by_utc_s;
    if (level != ADVICE_MUSTER && level != ADVICE_SEND && level != ADVICE_LATE)
        return;
    if (act_by_utc_s == PASSAGE_NEVER) {
        if (level == ADVICE_SEND)
            put_both(parts, PART_ACT_BY, SHORT_ACT_NOW, SHORT_ACT_NOW, NULL);
        return;
    }
    char act_by[SENTENCE_MOMENT_SIZE];
    char was[SENTENCE_MOMENT_SIZE];
    const struct sentence_field fields[] = {{"act_by", sentence_moment(view, act_by_utc_s, act_by)},
                                            {"was", sentence_moment(view, view->before.told_act_by_utc_s, was)},
                                            {0}};
    enum sentence_id id = SHORT_ACT_BY;
    if (act_by_utc_s <= view->picture->as_of_utc_s)
        id = level == ADVICE_SEND ? SHORT_ACT_BY_PASSED_NOW : SHORT_ACT_BY_PASSED;
    put_both(parts, PART_ACT_BY, id == SHORT_ACT_BY && act_by_moved(view) ? SHORT_ACT_BY_WAS : id, id, fields);
}

/* --- what it rests on --- */

static bool is_unconfirmed(const struct gauge_picture *gauge)
{
    return gauge->is_unconfirmed;
}

static bool is_beyond_gauging(const struct gauge_picture *gauge)
{
    return gauge->is_beyond_gauging;
}

static bool is_by_hand(const struct gauge_picture *gauge)
{
    return gauge->is_hand;
}

static enum sentence_id choose_rests(const struct sentence_view *view)
{
    const struct point_picture *state = view->state;
    bool is_silent = view->after.is_blind || (view->after.reasons & ADVICE_BY_ASSUMED_TRIGGER) != 0;
    if ((view->after.reasons & ADVICE_BY_WATER_SEEN) && state->water.is_known)
        return SHORT_WATER_SEEN;
    if (state->newest_utc_s == 0)
        return SHORT_ASSUMED_NO_READING;
    if (is_silent)
        return state->is_rising ? SHORT_ASSUMED_RISE_SILENT : SHORT_ASSUMED_SILENT;
    if (sentence_any_above(view, is_unconfirmed))
        return SHORT_UNCONFIRMED;
    if (sentence_is_measured(view))
        return state->unmeasured_share >= 0.005 ? SHORT_MEASURED_PARTLY : SHORT_MEASURED;
    return state->is_rising ? SHORT_ASSUMED_RISE_AFTER : SHORT_ASSUMED_AFTER;
}

static void put_rests(struct parts *parts)
{
    const struct sentence_view *view = parts->view;
    const struct point_picture *state = view->state;
    char until[SENTENCE_MOMENT_SIZE];
    char newest[SENTENCE_MOMENT_SIZE];
    char seen[SENTENCE_MOMENT_SIZE];
    char by[FACT_ROLE_SIZE];
    char share[24];
    sentence_moment(view, state->newest_utc_s, newest);
    sentence_plain_name(state->water.by, by, BY_MOST + 1);
    snprintf(share, sizeof share, "%.0f", 100.0 * state->unmeasured_share);
    const struct sentence_field fields[] = {{"until", sentence_moment(view, state->measured_until_utc_s, until)},
                                            {"newest", newest},
                                            {"since", newest},
                                            {"seen", sentence_moment(view, state->water.at_utc_s, seen)},
                                            {"by", by},
                                            {"share", share},
                                            {0}};
    enum sentence_id id = choose_rests(view);
    put_both(parts, PART_RESTS, id, id + 1, fields);
    if (sentence_any_above(view, is_by_hand))
        put(parts, PART_HAND, SHORT_HAND, fields);
    if (state->is_peak_beyond_gauging || sentence_any_above(view, is_beyond_gauging))
        put(parts, PART_BEYOND, SHORT_BEYOND_GAUGING, fields);
    else if (state->is_peak_above_survey)
        put(parts, PART_BEYOND, SHORT_ABOVE_SURVEY, fields);
    if (view->after.reasons & (ADVICE_BY_TRIGGER | ADVICE_BY_ASSUMED_TRIGGER))
        put(parts, PART_TRIGGER, SHORT_TRIGGER, fields);
}

/* --- while it is shut --- */

static enum sentence_id choose_shut(const struct sentence_view *view)
{
    unsigned reasons = view->after.reasons;
    bool is_silent = view->after.is_blind || (reasons & ADVICE_HELD_NO_DATA) != 0;
    if (!(view->state->level_now.high_m < sentence_deck_m(view, view->point))) /* nor when it is not known */
        return is_silent ? SHORT_OVER_DECK_SILENT : SHORT_OVER_DECK;
    if (reasons & ADVICE_BY_WATER_SEEN)
        return SHORT_BELOW_BUT_WATER_SEEN;
    if (is_silent)
        return view->state->is_rising ? SHORT_BELOW_BUT_SILENT_RISING : SHORT_BELOW_BUT_SILENT;
    return reasons & ADVICE_HELD_RETURN ? SHORT_BELOW_BUT_RETURN : SHORT_BELOW_BUT_HOLD;
}

static void put_shut(struct parts *parts)
{
    const struct sentence_view *view = parts->view;
    char newest[SENTENCE_MOMENT_SIZE];
    char seen[SENTENCE_MOMENT_SIZE];
    char next[SENTENCE_MOMENT_SIZE];
    const struct sentence_field fields[] = {{"newest", sentence_moment(view, view->state->newest_utc_s, newest)},
                                            {"since", newest},
                                            {"seen", sentence_moment(view, view->state->water.at_utc_s, seen)},
                                            {"next", sentence_moment(view, sentence_next_look_utc_s(view), next)},
                                            {0}};
    enum sentence_id id = view->after.level == ADVICE_KEEP_SHUT ? choose_shut(view) : SHORT_NEWEST;
    put_both(parts, PART_RESTS, id, id, fields);
    put(parts, PART_NEXT_LOOK, SHORT_NEXT_LOOK, fields);
}

/* --- all together --- */

static void put_names_and_number(struct parts *parts)
{
    const struct sentence_view *view = parts->view;
    char district[FACT_ID_SIZE];
    char name[PART_SIZE];
    char number[24];
    char number4[24];
    sentence_plain_name(view->settings->district_name, district, SENTENCE_DISTRICT_MOST + 1);
    for (char *letter = district; *letter != '\0'; letter++)
        if (*letter >= 'a' && *letter <= 'z')
            *letter = (char)(*letter - 'a' + 'A');
    sentence_plain_name(view->known->name, name, sizeof name - 8);
    snprintf(number, sizeof number, "%lld", (long long)view->number);
    snprintf(number4, sizeof number4, "%04lld", (long long)view->number);
    const struct sentence_field fields[] = {
        {"district", district}, {"place", name}, {"number", number}, {"number4", number4}, {0}};
    put_both(parts, PART_SENDER, SHORT_SENDER, SHORT_SENDER_BRIEF, fields);
    put_both(parts, PART_PLACE, SHORT_PLACE, SHORT_PLACE, fields);
    if (view->number > 0) {
        put_both(parts, PART_NUMBER, SHORT_NUMBER, SHORT_NUMBER, fields);
        if (view->after.level != ADVICE_QUIET)
            put(parts, PART_HINT, SHORT_HINT, fields);
    }
    snprintf(parts->full[PART_CAUTION], PART_SIZE, "%s%s", view->number > 0 ? " " : "", SENTENCE_CAUTION_SHORT);
}

static size_t length_of(const char *const chosen[PART_COUNT])
{
    size_t length = 0;
    for (size_t part = 0; part < PART_COUNT; part++)
        length += strlen(chosen[part]);
    return length;
}

/* The name gives way last: cut by as much as the rest leaves no room for, the full stop kept. */
static void cut_place(char *place, size_t excess)
{
    size_t length = strlen(place);
    size_t name = length > 2 ? length - 2 : 0;
    size_t kept = name > excess ? name - excess : 0;
    while (kept > 0 && place[kept - 1] == ' ')
        kept--;
    memcpy(place + kept, ". ", sizeof ". ");
}

static void join(struct parts *parts, char text_out[FACT_SHORT_SIZE])
{
    const enum part by_need[] = {
        PART_DECK,   PART_SENDER, PART_HINT,    PART_RESTS, PART_ACT_BY, parts->asks_more ? PART_WHAT : PART_HAND,
        PART_HAND,   PART_BEYOND, PART_CAUTION, PART_ALSO,  PART_WHAT,   PART_NEXT_LOOK,
        PART_TRIGGER};
    const char *chosen[PART_COUNT];
    for (size_t part = 0; part < PART_COUNT; part++)
        chosen[part] = parts->brief[part];
    size_t length = length_of(chosen);
    if (length > ROOM)
        cut_place(parts->brief[PART_PLACE], length - ROOM);
    length = length_of(chosen);
    for (size_t i = 0; i < sizeof by_need / sizeof by_need[0]; i++) {
        enum part part = by_need[i];
        size_t with = length - strlen(chosen[part]) + strlen(parts->full[part]);
        if (parts->full[part][0] != '\0' && with <= ROOM) {
            chosen[part] = parts->full[part];
            length = with;
        }
    }
    size_t written = 0;
    for (size_t part = 0; part < PART_COUNT; part++)
        for (const char *byte = chosen[part]; *byte != '\0' && written < ROOM; byte++)
            text_out[written++] = *byte;
    while (written > 0 && text_out[written - 1] == ' ')
        written--;
    text_out[written] = '\0';
}

void sentence_short(const struct settings *settings, const struct picture *picture, const struct decision *decision,
                    char text_out[FACT_SHORT_SIZE])
{
    struct sentence_view view = {0};
    text_out[0] = '\0';
    if (!sentence_view_open(settings, picture, decision, &view))
        return;
    struct parts parts = {.view = &view};
    put_names_and_number(&parts);
    put_what(&parts);
    put_also(&parts);
    if (is_on_ladder(view.after.level)) {
        put_deck(&parts);
        put_act_by(&parts);
        put_rests(&parts);
    } else {
        put_shut(&parts);
    }
    join(&parts, text_out);
    sentence_view_clear(&view);
}

/* --- one line per change --- */

static void add(struct text *line, const struct sentence_view *view, enum sentence_id id,
                const struct sentence_field *fields)
{
    sentence_fill(line, view->words->text[id], fields);
}

static void add_act_by(struct text *line, const struct sentence_view *view, const struct sentence_field *fields)
{
    if (!is_on_ladder(view->after.level) || view->after.level == ADVICE_QUIET)
        return;
    if (view->after.act_by_utc_s == PASSAGE_NEVER)
        add(line, view, CHANGE_NO_ACT_BY, fields);
    else
        add(line, view, act_by_moved(view) ? CHANGE_ACT_BY_WAS : CHANGE_ACT_BY, fields);
}

/* In the words of the text message, without its closing full stop. */
static void add_rests(struct text *line, struct sentence_view *view)
{
    struct parts parts = {.view = view};
    if (is_on_ladder(view->after.level))
        put_rests(&parts);
    else
        put_shut(&parts);
    char *rests = parts.full[PART_RESTS];
    size_t length = strlen(rests);
    while (length > 0 && (rests[length - 1] == ' ' || rests[length - 1] == '.'))
        rests[--length] = '\0';
    if (length > 0)
        text_add(line, ". %s", rests);
}

void sentence_change(const struct settings *settings, const struct picture *picture, const struct decision *decision,
                     struct text *line_out)
{
    struct sentence_view view = {0};
    if (!sentence_view_open(settings, picture, decision, &view))
        return;
    char time[SENTENCE_MOMENT_SIZE];
    char place[SENTENCE_WORDS_SIZE];
    char act_by[SENTENCE_MOMENT_SIZE];
    char was[SENTENCE_MOMENT_SIZE];
    char deck_times[3][SENTENCE_MOMENT_SIZE] = {"-", "-", "-"};
    char number4[24];
    const struct passage *deck = sentence_deck(&view);
    if (deck != NULL) {
        sentence_moment(&view, deck->earliest_utc_s, deck_times[0]);
        sentence_moment(&view, deck->likely_utc_s, deck_times[1]);
        sentence_moment(&view, deck->latest_utc_s, deck_times[2]);
    }
    sentence_name(view.known->name, 60, place, sizeof place);
    snprintf(number4, sizeof number4, "%04lld", (long long)view.number);
    const struct sentence_field fields[] = {{"time", sentence_moment(&view, picture->as_of_utc_s, time)},
                                            {"place", place},
                                            {"before", view.words->level_word[view.before.level]},
                                            {"level", view.words->level_word[view.after.level]},
                                            {"act_by", sentence_moment(&view, view.after.act_by_utc_s, act_by)},
                                            {"was", sentence_moment(&view, view.before.told_act_by_utc_s, was)},
                                            {"earliest", deck_times[0]},
                                            {"likely", deck_times[1]},
                                            {"latest", deck_times[2]},
                                            {"number4", number4},
                                            {0}};
    add(line_out, &view, view.before.level == view.after.level ? CHANGE_SAME : CHANGE_STEP, fields);
    if (view.after.is_blind)
        add(line_out, &view, view.before.is_blind ? CHANGE_STILL_BLIND : CHANGE_NOW_BLIND, fields);
    else if (view.before.is_blind)
        add(line_out, &view, CHANGE_SEES_AGAIN, fields);
    if (view.after.near_sides_only)
        add(line_out, &view, CHANGE_NEAR_SIDES, fields);
    add_act_by(line_out, &view, fields);
    if (deck != NULL && deck->earliest_utc_s != PASSAGE_NEVER)
        add(line_out, &view, CHANGE_DECK, fields);
    add_rests(line_out, &view);
    if (view.number > 0)
        add(line_out, &view, CHANGE_NUMBER, fields);
    sentence_view_clear(&view);
}
