/* SPDX-License-Identifier: MIT */
#include "daemon/tell/bulletin_deck.h"

#include <math.h>
#include <stdio.h>

#include "daemon/deck.h"

static const char *up(double value, char text[SENTENCE_NUMBER_SIZE])
{
    return sentence_metres(isfinite(value) ? deck_rounded_up(value) : value, text);
}

static void add_peak(const struct sentence_view *view, bool is_brief, struct text *out)
{
    const struct deck_picture *deck = &view->state->deck;
    bool is_likely = deck->likely.depth_m > 0.0;
    const struct hazard_water *water = is_likely ? &deck->likely : &deck->high;
    char numbers[5][SENTENCE_NUMBER_SIZE];
    enum sentence_id full = is_likely ? DECK_LIKELY : DECK_HIGHEST;
    sentence_fill(out, view->words->text[is_brief ? full + 1 : full],
                  (struct sentence_field[]){{"depth", up(water->depth_m, numbers[0])},
                                            {"speed", up(water->speed_m_s, numbers[1])},
                                            {"product", up(water->product_m2_s, numbers[2])},
                                            {"low", up(deck->low.product_m2_s, numbers[3])},
                                            {"high", up(deck->high.product_m2_s, numbers[4])},
                                            {0}});
}

static enum sentence_id word_of(enum hazard_whom whom)
{
    static const enum sentence_id words[HAZARD_WHOM_COUNT] = {DECK_SMALL_CAR, DECK_LARGE_CAR, DECK_ANY_VEHICLE,
                                                              DECK_ANY_PERSON};
    return words[whom];
}

static void add_limit(const struct sentence_view *view, enum hazard_whom whom, struct text *out)
{
    const struct deck_picture *deck = &view->state->deck;
    const struct passage *over = &deck->over[whom];
    const struct hazard_limit *limit = hazard_limit_for(whom);
    char number[SENTENCE_NUMBER_SIZE];
    char moments[2][SENTENCE_MOMENT_SIZE];
    snprintf(number, sizeof number, "%g", deck_measure_limit(limit, deck->by[whom]));
    bool is_likely = over->likely_utc_s != PASSAGE_NEVER;
    sentence_fill(
        out, view->words->text[is_likely ? DECK_OVER : DECK_OVER_PERHAPS],
        (struct sentence_field[]){{"limit", view->words->text[limit->is_draft ? DECK_DRAFT_LIMIT : DECK_GUIDE_LIMIT]},
                                  {"number", number},
                                  {"unit", deck_measure_unit(deck->by[whom])},
                                  {"whom", view->words->text[word_of(whom)]},
                                  {"likely", sentence_moment(view, over->likely_utc_s, moments[0])},
                                  {"earliest", sentence_moment(view, over->earliest_utc_s, moments[1])},
                                  {0}});
}

/* What the part-blocked peak would put on the deck, and the highest limit that it passes. */
static void add_blocked_deck(const struct sentence_view *view, double blocked_m, double flow_m3s, struct text *out)
{
    char numbers[4][SENTENCE_NUMBER_SIZE];
    struct hazard_water water =
        deck_water(view->settings, &view->settings->river, view->point, blocked_m, flow_m3s, 1.0);
    if (!(water.depth_m > 0.0))
        return;
    sentence_fill(out, view->words->text[DECK_BLOCKED],
                  (struct sentence_field[]){{"depth", up(water.depth_m, numbers[0])},
                                            {"speed", up(water.speed_m_s, numbers[1])},
                                            {"product", up(water.product_m2_s, numbers[2])},
                                            {0}});
    for (size_t whom = HAZARD_WHOM_COUNT; whom-- > 0;) {
        const struct hazard_limit *limit = hazard_limit_for((enum hazard_whom)whom);
        enum hazard_measure by = hazard_measure_passed(limit, &water);
        if (by == HAZARD_NONE)
            continue;
        snprintf(numbers[3], sizeof numbers[3], "%g", deck_measure_limit(limit, by));
        sentence_fill(out, view->words->text[DECK_OVER_THEN],
                      (struct sentence_field[]){
                          {"limit", view->words->text[limit->is_draft ? DECK_DRAFT_LIMIT : DECK_GUIDE_LIMIT]},
                          {"number", numbers[3]},
                          {"unit", deck_measure_unit(by)},
                          {"whom", view->words->text[word_of((enum hazard_whom)whom)]},
                          {0}});
        break;
    }
    sentence_fill(out, view->words->text[DECK_CAUTION_WORDS], (struct sentence_field[]){{0}});
}

void bulletin_deck_add(const struct sentence_view *view, bool is_brief, struct text *out)
{
    const struct deck_picture *deck = &view->state->deck;
    if (!view->known->has_deck || !(deck->high.depth_m > 0.0))
        return;
    size_t first = HAZARD_WHOM_COUNT;
    size_t highest = HAZARD_WHOM_COUNT;
    for (size_t whom = 0; whom < HAZARD_WHOM_COUNT; whom++) {
        if (!(deck->over[whom].chance > 0.0))
            continue;
        if (first == HAZARD_WHOM_COUNT || deck->over[whom].earliest_utc_s < deck->over[first].earliest_utc_s)
            first = whom;
        highest = whom;
    }
    add_peak(view, is_brief, out);
    if (first != highest && !is_brief)
        add_limit(view, (enum hazard_whom)first, out);
    if (highest != HAZARD_WHOM_COUNT)
        add_limit(view, (enum hazard_whom)highest, out);
    sentence_fill(out, view->words->text[DECK_CAUTION_WORDS], (struct sentence_field[]){{0}});
}

/* Straight lines between rows, both of them rising; the ends hold beyond the rows. */
static double between_rows(size_t count, const double *from, const double *to, double value)
{
    for (size_t i = 1; i < count; i++)
        if (value <= from[i] && from[i] > from[i - 1])
            return to[i - 1] + (to[i] - to[i - 1]) * fmax(0.0, (value - from[i - 1]) / (from[i] - from[i - 1]));
    return count > 0 ? to[count - 1] : (double)NAN;
}

void bulletin_deck_add_rating(const struct sentence_view *view, bool is_brief, bool has_room, struct text *out)
{
    const struct settings_point *known = view->known;
    if (known->stage_row_count == 0)
        return;
    char blocked[SENTENCE_NUMBER_SIZE];
    char words[SENTENCE_WORDS_SIZE];
    double flow_m3s = between_rows(known->stage_row_count, known->stage_row_stage_m, known->stage_row_discharge_m3s,
                                   view->state->peak.likely_m);
    double blocked_m = between_rows(known->blocked_row_count, known->blocked_row_discharge_m3s,
                                    known->blocked_row_stage_m, flow_m3s);
    enum sentence_id id = known->blocked_row_count == 0 ? RESTS_STAGE_RATING
                          : is_brief                    ? RESTS_PART_BLOCKED_BRIEF
                                                        : RESTS_PART_BLOCKED;
    sentence_fill(out, view->words->text[id],
                  (struct sentence_field[]){{"blocked", sentence_metres(blocked_m, blocked)},
                                            {"to_deck", sentence_to_deck(view, blocked_m, words)},
                                            {0}});
    if (has_room && known->has_deck && known->blocked_row_count > 0)
        add_blocked_deck(view, blocked_m, flow_m3s, out);
}
