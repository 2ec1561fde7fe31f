/* SPDX-License-Identifier: MIT */
#include "daemon/tell/sentence_view.h"

#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "daemon/when.h"
#include "engine/assumed_inflow.h"

enum { DAY_S = 86400, NEAR_S = 20 * 3600, WEEK_S = 6 * DAY_S };

int sentence_urgency(enum advice_level level)
{
    static const int urgency[SENTENCE_LEVEL_COUNT] = {0, 3, 4, 5, 2, 1};
    return urgency[level];
}

static size_t most_urgent(const struct settings *settings, const struct picture *picture)
{
    size_t found = 0;
    for (size_t i = 1; i < settings->point_count; i++) {
        const struct advice *advice = &picture->points[i].advice;
        const struct advice *best = &picture->points[found].advice;
        int more = sentence_urgency(advice->level) - sentence_urgency(best->level);
        if (more > 0 || (more == 0 && advice->act_by_utc_s < best->act_by_utc_s))
            found = i;
    }
    return found;
}

bool sentence_view_open(const struct settings *settings, const struct picture *picture,
                        const struct decision *decision, struct sentence_view *view_out)
{
    if (settings->point_count == 0)
        return false;
    size_t point = decision != NULL ? (size_t)decision->point : most_urgent(settings, picture);
    const struct point_picture *state = &picture->points[point];
    size_t runs = settings->roughness_factor_count * ASSUMED_FORECAST_COUNT;
    *view_out = (struct sentence_view){.words = sentence_catalogue_english(),
                                       .settings = settings,
                                       .picture = picture,
                                       .point = point,
                                       .known = &settings->points[point],
                                       .state = state,
                                       .before = decision != NULL ? decision->before : state->advice,
                                       .after = decision != NULL ? decision->after : state->advice,
                                       .number = decision != NULL ? decision->message_number : state->told_number,
                                       .also_count = decision != NULL ? decision->also_count : 0,
                                       .run_count = runs > 0 ? runs : ASSUMED_FORECAST_COUNT,
                                       .is_above = calloc(settings->gauge_count + 1, sizeof(bool))};
    if (view_out->is_above != NULL)
        settings_gauges_above(settings, point, view_out->is_above);
    return true;
}

void sentence_view_clear(struct sentence_view *view)
{
    free(view->is_above);
    *view = (struct sentence_view){0};
}

/* --- times --- */

static int64_t floor_divide(int64_t value, int64_t by)
{
    return value / by - (value % by < 0);
}

static void add_offset(int32_t offset_s, char text[SENTENCE_MOMENT_SIZE])
{
    size_t length = strlen(text);
    int minutes = abs(offset_s) / 60;
    int more =
        snprintf(text + length, SENTENCE_MOMENT_SIZE - length, "%c%02d", offset_s < 0 ? '-' : '+', minutes / 60);
    if (minutes % 60 != 0 && more > 0)
        snprintf(text + length + more, SENTENCE_MOMENT_SIZE - length - (size_t)more, ":%02d", minutes % 60);
}

const char *sentence_moment(const struct sentence_view *view, int64_t utc_s, char text[SENTENCE_MOMENT_SIZE])
{
    const struct when_zone *zone = &view->settings->zone;
    int64_t now_utc_s = view->picture->as_of_utc_s;
    int64_t off_s;
    char clock[WHEN_TEXT_SIZE];
    if (utc_s == PASSAGE_NEVER || __builtin_sub_overflow(utc_s, now_utc_s, &off_s) ||
        strcmp(when_clock(zone, utc_s, clock), "-") == 0) {
        snprintf(text, SENTENCE_MOMENT_SIZE, "-");
        return text;
    }
    if (off_s > WEEK_S || off_s < -WEEK_S) {
        when_rfc3339_local(zone, utc_s, clock);
        clock[strcspn(clock, "T")] = '\0';
        snprintf(text, SENTENCE_MOMENT_SIZE, "%.20s", clock);
        return text;
    }
    int32_t offset_s = when_offset_s(zone, utc_s);
    int64_t day = floor_divide(utc_s + offset_s, DAY_S) + 3; /* 1970-01-01 was a Thursday */
    if (off_s > NEAR_S || off_s < -NEAR_S)
        snprintf(text, SENTENCE_MOMENT_SIZE, "%s %.5s", view->words->weekday[day - floor_divide(day, 7) * 7], clock);
    else
        snprintf(text, SENTENCE_MOMENT_SIZE, "%.5s", clock);
    if (offset_s != when_offset_s(zone, now_utc_s))
        add_offset(offset_s, text);
    return text;
}

int64_t sentence_next_look_utc_s(const struct sentence_view *view)
{
    int64_t every_s = view->settings->forecast_every_s > 0 ? view->settings->forecast_every_s : 300;
    return (floor_divide(view->picture->as_of_utc_s, every_s) + 1) * every_s;
}

/* --- words --- */

size_t sentence_characters(const char *text)
{
    size_t count = 0;
    for (; *text != '\0'; text++)
        count += ((unsigned char)*text & 0xc0) != 0x80;
    return count;
}

const char *sentence_words(const struct sentence_view *view, enum sentence_id id, const struct sentence_field *fields,
                           char *text_out, size_t size)
{
    static const struct sentence_field none = {NULL, NULL};
    struct text filled = {0};
    sentence_fill(&filled, view->words->text[id], fields != NULL ? fields : &none);
    const char *bytes = text_string(&filled);
    size_t length = strlen(bytes);
    if (length >= size) {
        length = size - 1;
        while (length > 0 && ((unsigned char)bytes[length] & 0xc0) == 0x80)
            length--;
    }
    memcpy(text_out, bytes, length);
    text_out[length] = '\0';
    text_clear(&filled);
    return text_out;
}

const char *sentence_advice(const struct sentence_view *view, const struct advice *advice,
                            char text[SENTENCE_WORDS_SIZE])
{
    const struct sentence_catalogue *words = view->words;
    int length = snprintf(text, SENTENCE_WORDS_SIZE, "%s %s", words->level_glyph[advice->level],
                          words->level_word[advice->level]);
    if (advice->is_blind)
        snprintf(text + length, SENTENCE_WORDS_SIZE - (size_t)length, " %s %s", words->blind_glyph,
                 words->text[WORD_BLIND]);
    return text;
}

const char *sentence_age(const struct sentence_view *view, int64_t seconds, char *text_out, size_t size)
{
    enum sentence_id id = seconds < 3 * 3600 ? WORD_MINUTES : seconds < 2 * DAY_S ? WORD_HOURS : WORD_DAYS;
    int64_t unit_s = id == WORD_MINUTES ? 60 : id == WORD_HOURS ? 3600 : DAY_S;
    char count[24];
    snprintf(count, sizeof count, "%lld", (long long)(seconds / unit_s));
    return sentence_words(view, id, (struct sentence_field[]){{"count", count}, {0}}, text_out, size);
}

size_t sentence_reached(const struct sentence_view *view, double chance)
{
    if (!(chance > 0.0))
        return 0;
    return chance >= 1.0 ? view->run_count : (size_t)lround(chance * (double)view->run_count);
}

const char *sentence_runs(const struct sentence_view *view, double chance, char text[SENTENCE_WORDS_SIZE])
{
    size_t reached = sentence_reached(view, chance);
    double share = (double)reached / (double)view->run_count;
    enum sentence_id id = reached == 0                 ? RUNS_NONE
                          : reached == view->run_count ? RUNS_ALL
                          : share < 0.4                ? RUNS_FEW
                          : share <= 0.6               ? RUNS_EVEN
                                                       : RUNS_MOST;
    char reached_text[24];
    char runs_text[24];
    snprintf(reached_text, sizeof reached_text, "%zu", reached);
    snprintf(runs_text, sizeof runs_text, "%zu", view->run_count);
    return sentence_words(view, id, (struct sentence_field[]){{"reached", reached_text}, {"runs", runs_text}, {0}},
                          text, SENTENCE_WORDS_SIZE);
}

/* --- facts --- */

const struct passage *sentence_closing(const struct sentence_view *view)
{
    bool has_marks = view->known->closing_mark < view->known->mark_count && view->state->marks != NULL;
    return has_marks ? &view->state->marks[view->known->closing_mark].passage : NULL;
}

const struct passage *sentence_deck(const struct sentence_view *view)
{
    bool has_marks = view->known->deck_mark < view->known->mark_count && view->state->marks != NULL;
    return has_marks ? &view->state->marks[view->known->deck_mark].passage : NULL;
}

double sentence_deck_m(const struct sentence_view *view, size_t point)
{
    const struct settings_point *known = &view->settings->points[point];
    return known->deck_mark < known->mark_count ? known->marks[known->deck_mark].depth_m : (double)NAN;
}

const struct gauge_picture *sentence_gauge(const struct sentence_view *view, size_t *gauge_out)
{
    const struct gauge_picture *found = NULL;
    for (size_t i = 0; view->is_above != NULL && i < view->settings->gauge_count; i++) {
        const struct gauge_picture *gauge = &view->picture->gauges[i];
        if (!view->is_above[i])
            continue;
        bool speaks = found == NULL || gauge->is_blind > found->is_blind ||
                      (gauge->is_blind == found->is_blind && gauge->silent_s > found->silent_s);
        if (speaks) {
            found = gauge;
            *gauge_out = i;
        }
    }
    return found;
}

bool sentence_any_above(const struct sentence_view *view, bool (*has)(const struct gauge_picture *gauge))
{
    for (size_t i = 0; view->is_above != NULL && i < view->settings->gauge_count; i++)
        if (view->is_above[i] && has(&view->picture->gauges[i]))
            return true;
    return false;
}

bool sentence_is_measured(const struct sentence_view *view)
{
    const struct passage *closing = sentence_closing(view);
    int64_t until_utc_s = view->state->measured_until_utc_s;
    if (view->after.is_blind || view->state->is_blind || (view->after.reasons & ADVICE_BY_ASSUMED_TRIGGER))
        return false;
    if (closing == NULL || closing->earliest_utc_s == PASSAGE_NEVER)
        return until_utc_s == PASSAGE_NEVER;
    return closing->earliest_utc_s <= until_utc_s;
}

const char *sentence_metres(double value, char text[SENTENCE_NUMBER_SIZE])
{
    if (isfinite(value) && fabs(value) < 1e6)
        snprintf(text, SENTENCE_NUMBER_SIZE, "%.2f", value);
    else
        snprintf(text, SENTENCE_NUMBER_SIZE, "-");
    return text;
}

const char *sentence_to_deck(const struct sentence_view *view, double level_m, char text[SENTENCE_WORDS_SIZE])
{
    char difference[SENTENCE_NUMBER_SIZE];
    double over_m = level_m - sentence_deck_m(view, view->point);
    if (!isfinite(over_m)) {
        snprintf(text, SENTENCE_WORDS_SIZE, "-");
        return text;
    }
    enum sentence_id id = over_m >= 0.005 ? WORD_OVER_DECK : over_m <= -0.005 ? WORD_BELOW_DECK : WORD_AT_DECK;
    return sentence_words(view, id,
                          (struct sentence_field[]){{"difference", sentence_metres(fabs(over_m), difference)}, {0}},
                          text, SENTENCE_WORDS_SIZE);
}

/* --- names --- */

/* One good character at *from, which is moved past it; 0 for what is no character that can be printed. */
static uint32_t take_character(const char **from)
{
    const unsigned char *bytes = (const unsigned char *)*from;
    uint32_t first = bytes[0];
    size_t length = first < 0x80 ? 1 : first >= 0xf0 ? 4 : first >= 0xe0 ? 3 : 2;
    static const uint32_t lowest[] = {0, 0, 0x80, 0x800, 0x10000};
    *from += 1;
    if (length == 1)
        return first >= 0x20 && first != 0x7f ? first : 0;
    if (first < 0xc2 || first > 0xf4)
        return 0;
    uint32_t value = first & (0x7fu >> length);
    for (size_t i = 1; i < length; i++) {
        if ((bytes[i] & 0xc0) != 0x80)
            return 0;
        value = value << 6 | (bytes[i] & 0x3f);
    }
    if (value < lowest[length] || value > 0x10ffff || (value >= 0xd800 && value <= 0xdfff) || value < 0xa0)
        return 0;
    *from += length - 1;
    return value;
}

void sentence_name(const char *name, size_t most, char *text_out, size_t size)
{
    size_t length = 0;
    for (size_t count = 0; *name != '\0' && count < most; count++) {
        const char *start = name;
        uint32_t character = take_character(&name);
        size_t bytes = character != 0 ? (size_t)(name - start) : 1;
        if (length + bytes >= size)
            break;
        memcpy(text_out + length, character != 0 ? start : "?", bytes);
        length += bytes;
    }
    while (*name != '\0' && length > 0 && text_out[length - 1] == ' ')
        length--; /* cut between words */
    text_out[length] = '\0';
}

/*
 * U+00C0 .. U+017F without their accents (Unicode's decompositions, and the usual likeness of letters that have
 * none).
 */
static const char *plain_likeness(uint32_t character)
{
    static const char *const latin_1[] = {"A", "A", "A",  "A", "Ae", "Aa", "Ae", "C", "E",  "E",  "E",  "E",  "I",
                                          "I", "I", "I",  "D", "N",  "O",  "O",  "O", "O",  "Oe", "x",  "Oe", "U",
                                          "U", "U", "Ue", "Y", "Th", "ss", "a",  "a", "a",  "a",  "ae", "aa", "ae",
                                          "c", "e", "e",  "e", "e",  "i",  "i",  "i", "i",  "d",  "n",  "o",  "o",
                                          "o", "o", "oe", "/", "oe", "u",  "u",  "u", "ue", "y",  "th", "y"};
    static const char extended_a[] =
        "AaAaAaCcCcCcCcDdDdEeEeEeEeEeGgGgGgGgHhHhIiIiIiIiIiIiJjKkkLlLlLlLlLlNnNnNnnNnOoOoOoOoRr"
        "RrRrSsSsSsSsTtTtTtUuUuUuUuUuUuWwYyYZzZzZzs";
    static const char letters[][2] = {"A", "B", "C", "D", "E", "F", "G", "H", "I", "J", "K", "L", "M",
                                      "N", "O", "P", "Q", "R", "S", "T", "U", "V", "W", "X", "Y", "Z",
                                      "a", "b", "c", "d", "e", "f", "g", "h", "i", "j", "k", "l", "m",
                                      "n", "o", "p", "q", "r", "s", "t", "u", "v", "w", "x", "y", "z"};
    if (character == 0xa0)
        return " ";
    if (character >= 0xc0 && character <= 0xff)
        return latin_1[character - 0xc0];
    if (character >= 0x100 && character < 0x100 + sizeof extended_a - 1) {
        char letter = extended_a[character - 0x100];
        return letters[letter >= 'a' ? 26 + letter - 'a' : letter - 'A'];
    }
    if (character == 0x2018 || character == 0x2019)
        return "'";
    if (character == 0x2010 || character == 0x2011 || character == 0x2013 || character == 0x2014)
        return "-";
    return "?";
}

void sentence_plain_name(const char *name, char *text_out, size_t size)
{
    /* printable ASCII that the basic alphabet of GSM 03.38 lacks, or can only write as two characters */
    static const char lacking[] = "[]{}\\^~|`";
    static const char instead[] = "()()/'-/'";
    size_t length = 0;
    while (*name != '\0') {
        uint32_t character = take_character(&name);
        char one[2] = {(char)character, '\0'};
        const char *place = character > 0 && character < 0x80 ? strchr(lacking, (int)character) : NULL;
        if (place != NULL)
            one[0] = instead[place - lacking];
        const char *plain = character > 0 && character < 0x80 ? one : plain_likeness(character);
        size_t bytes = strlen(plain);
        if (length + bytes >= size)
            break;
        memcpy(text_out + length, plain, bytes);
        length += bytes;
    }
    text_out[length] = '\0';
}
