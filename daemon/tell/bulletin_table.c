/* SPDX-License-Identifier: MIT */
#include "daemon/tell/bulletin_table.h"

#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "daemon/when.h"

enum {
    COLUMN_COUNT = 6,
    PLACE_COLUMN = 1,
    ROWS_WISHED = 6,
    ROWS_MOST = 24,
    CELL_SIZE = SENTENCE_WORDS_SIZE,
    PLACE_LEAST = 6,
    ADVICE_MOST = 30
};

struct row {
    char cells[COLUMN_COUNT][CELL_SIZE];
};

struct table { /* the first row is the heads */
    struct row rows[ROWS_MOST + 1];
    size_t row_count;
};

/* --- which, in what order --- */

static bool is_before(const struct sentence_view *view, size_t one, size_t other)
{
    const struct advice *a = &view->picture->points[one].advice;
    const struct advice *b = &view->picture->points[other].advice;
    if (a->act_by_utc_s != b->act_by_utc_s)
        return a->act_by_utc_s < b->act_by_utc_s;
    if (a->level != b->level)
        return sentence_urgency(a->level) > sentence_urgency(b->level);
    return one < other;
}

/* How many crossings come before this one: its place in the table. Districts have few crossings. */
static size_t place_of(const struct sentence_view *view, size_t point)
{
    size_t place = 0;
    for (size_t i = 0; i < view->settings->point_count; i++)
        place += i != point && is_before(view, i, point);
    return place;
}

/* --- cells --- */

static void fill_act_by(const struct sentence_view *view, const struct advice *advice, char cell[CELL_SIZE])
{
    bool asks = advice->level == ADVICE_MUSTER || advice->level == ADVICE_SEND || advice->level == ADVICE_LATE;
    char moment[SENTENCE_MOMENT_SIZE];
    if (asks && advice->act_by_utc_s <= view->picture->as_of_utc_s)
        snprintf(cell, CELL_SIZE, "%s", view->words->text[TABLE_PASSED]);
    else
        snprintf(cell, CELL_SIZE, "%s", sentence_moment(view, advice->act_by_utc_s, moment));
}

static void fill_deck(const struct sentence_view *view, size_t point, char cell[CELL_SIZE])
{
    const struct settings_point *known = &view->settings->points[point];
    const struct mark_picture *marks = view->picture->points[point].marks;
    if (known->deck_mark >= known->mark_count || marks == NULL) {
        snprintf(cell, CELL_SIZE, "-");
        return;
    }
    const struct passage *deck = &marks[known->deck_mark].passage;
    if (deck->earliest_utc_s == PASSAGE_NEVER) {
        bool is_unknown = view->picture->points[point].is_unknown;
        snprintf(cell, CELL_SIZE, "%s", view->words->text[is_unknown ? TABLE_UNKNOWN : TABLE_NOT_REACHED]);
        return;
    }
    char first[SENTENCE_MOMENT_SIZE];
    char likely[WHEN_TEXT_SIZE];
    char latest[WHEN_TEXT_SIZE];
    snprintf(cell, CELL_SIZE, "%s / %s / %s", sentence_moment(view, deck->earliest_utc_s, first),
             when_clock(&view->settings->zone, deck->likely_utc_s, likely),
             when_clock(&view->settings->zone, deck->latest_utc_s, latest));
}

static void fill_runs(const struct sentence_view *view, size_t point, char cell[CELL_SIZE])
{
    const struct settings_point *known = &view->settings->points[point];
    const struct mark_picture *marks = view->picture->points[point].marks;
    if (known->deck_mark >= known->mark_count || marks == NULL || view->picture->points[point].is_unknown) {
        snprintf(cell, CELL_SIZE, "-");
        return;
    }
    char reached[24];
    char runs[24];
    snprintf(reached, sizeof reached, "%zu", sentence_reached(view, marks[known->deck_mark].passage.chance));
    snprintf(runs, sizeof runs, "%zu", view->run_count);
    sentence_words(view, TABLE_RUNS_CELL, (struct sentence_field[]){{"reached", reached}, {"runs", runs}, {0}}, cell,
                   CELL_SIZE);
}

static void fill_level(const struct sentence_view *view, size_t point, char cell[CELL_SIZE])
{
    double level_m = view->picture->points[point].level_now.likely_m;
    double over_m = level_m - sentence_deck_m(view, point);
    if (!isfinite(over_m) || fabs(over_m) >= 1e4 || fabs(level_m) >= 1e4) {
        snprintf(cell, CELL_SIZE, "-");
        return;
    }
    char level[24];
    char difference[24];
    snprintf(level, sizeof level, "%.2f", level_m);
    snprintf(difference, sizeof difference, "%.2f", fabs(over_m));
    enum sentence_id side = over_m >= 0.005 ? WORD_OVER : over_m <= -0.005 ? WORD_BELOW : WORD_AT;
    sentence_words(view, TABLE_LEVEL_CELL,
                   (struct sentence_field[]){
                       {"level", level}, {"difference", difference}, {"side", view->words->text[side]}, {0}},
                   cell, CELL_SIZE);
}

/* Where the words are too long for a column the glyph alone says that it is blind. */
static void fill_advice(const struct sentence_view *view, const struct advice *advice, char cell[CELL_SIZE])
{
    sentence_advice(view, advice, cell);
    if (advice->is_blind && sentence_characters(cell) > ADVICE_MOST) {
        struct advice seeing = *advice;
        seeing.is_blind = false;
        sentence_advice(view, &seeing, cell);
        size_t length = strlen(cell);
        snprintf(cell + length, CELL_SIZE - length, " %s", view->words->blind_glyph);
    }
}

static void fill_row(const struct sentence_view *view, size_t point, struct row *row)
{
    const struct settings_point *known = &view->settings->points[point];
    const struct advice *advice = &view->picture->points[point].advice;
    fill_act_by(view, advice, row->cells[0]);
    sentence_name(known->name, 60, row->cells[PLACE_COLUMN], CELL_SIZE);
    if (known->has_crew)
        fill_advice(view, advice, row->cells[2]);
    else
        snprintf(row->cells[2], CELL_SIZE, "%s", view->words->text[TABLE_NO_CREW]);
    fill_deck(view, point, row->cells[3]);
    fill_runs(view, point, row->cells[4]);
    fill_level(view, point, row->cells[5]);
}

/* --- layout --- */

static void cut_cell(char cell[CELL_SIZE], size_t most)
{
    char kept[CELL_SIZE];
    if (sentence_characters(cell) <= most)
        return;
    sentence_name(cell, most - 2, kept, sizeof kept - 2);
    size_t length = strlen(kept);
    while (length > 0 && kept[length - 1] == ' ')
        length--;
    memcpy(kept + length, "..", sizeof "..");
    memcpy(cell, kept, length + sizeof "..");
}

static size_t column_width(const struct table *table, size_t column)
{
    size_t width = 0;
    for (size_t row = 0; row < table->row_count; row++) {
        size_t characters = sentence_characters(table->rows[row].cells[column]);
        width = characters > width ? characters : width;
    }
    return width;
}

/* Two blanks between columns where there is room, else one; then the places' names are cut. */
static void add_rows(struct table *table, struct page *page)
{
    size_t widths[COLUMN_COUNT];
    size_t sum = 0;
    for (size_t column = 0; column < COLUMN_COUNT; column++)
        sum += widths[column] = column_width(table, column);
    size_t gap = sum + 2 * (COLUMN_COUNT - 1) <= PAGE_WIDTH ? 2 : 1;
    size_t total = sum + gap * (COLUMN_COUNT - 1);
    if (total > PAGE_WIDTH) {
        size_t excess = total - PAGE_WIDTH;
        size_t most = widths[PLACE_COLUMN] > excess + PLACE_LEAST ? widths[PLACE_COLUMN] - excess : PLACE_LEAST;
        for (size_t row = 0; row < table->row_count; row++)
            cut_cell(table->rows[row].cells[PLACE_COLUMN], most);
        widths[PLACE_COLUMN] = column_width(table, PLACE_COLUMN);
    }
    for (size_t row = 0; row < table->row_count; row++) {
        struct text line = {0};
        for (size_t column = 0; column < COLUMN_COUNT; column++) {
            const char *cell = table->rows[row].cells[column];
            size_t padding = widths[column] - sentence_characters(cell) + gap;
            text_add(&line, "%s%*s", cell, column + 1 < COLUMN_COUNT ? (int)padding : 0, "");
        }
        char cut[4 * PAGE_WIDTH + 1]; /* one row is one line, whatever stands in its cells */
        sentence_name(text_string(&line), PAGE_WIDTH, cut, sizeof cut);
        page->is_short |= line.is_short;
        page_add(page, cut);
        text_clear(&line);
    }
}

size_t bulletin_table_wish(const struct sentence_view *view)
{
    size_t count = view->settings->point_count;
    return count <= ROWS_WISHED ? 2 + count : 3 + ROWS_WISHED;
}

static void add_more(const struct sentence_view *view, size_t count, const struct advice *highest, struct page *page)
{
    char number[24];
    char advice[SENTENCE_WORDS_SIZE];
    struct text line = {0};
    snprintf(number, sizeof number, "%zu", count);
    sentence_fill(
        &line, view->words->text[TABLE_MORE],
        (struct sentence_field[]){{"count", number}, {"advice", sentence_advice(view, highest, advice)}, {0}});
    page_add(page, text_string(&line));
    page->is_short |= line.is_short;
    text_clear(&line);
}

/* Places 0 .. shown-1, the last of which goes to the view's own point when that comes later. */
static void fill_table(const struct sentence_view *view, size_t shown, struct table *table,
                       const struct advice **highest_left_out)
{
    bool own_comes_later = place_of(view, view->point) >= shown;
    for (size_t point = 0; point < view->settings->point_count; point++) {
        size_t place = place_of(view, point);
        const struct advice *advice = &view->picture->points[point].advice;
        if (own_comes_later && point == view->point)
            place = shown - 1;
        else if (own_comes_later && place == shown - 1)
            place = shown;
        if (place < shown)
            fill_row(view, point, &table->rows[1 + place]);
        else if (*highest_left_out == NULL ||
                 sentence_urgency(advice->level) > sentence_urgency((*highest_left_out)->level))
            *highest_left_out = advice;
    }
    table->row_count = 1 + shown;
}

void bulletin_table_add(const struct sentence_view *view, size_t line_count, struct page *page)
{
    static const enum sentence_id heads[COLUMN_COUNT] = {TABLE_ACT_BY, TABLE_PLACE, TABLE_ADVICE,
                                                         TABLE_DECK,   TABLE_RUNS,  TABLE_LEVEL};
    size_t count = view->settings->point_count;
    size_t shown = count <= line_count - 2 ? count : line_count - 3;
    const struct advice *highest_left_out = NULL;
    struct table *table = calloc(1, sizeof *table);
    if (table == NULL) {
        page->is_short = true;
        return;
    }
    if (shown > ROWS_MOST)
        shown = ROWS_MOST;
    for (size_t column = 0; column < COLUMN_COUNT; column++)
        snprintf(table->rows[0].cells[column], CELL_SIZE, "%s", view->words->text[heads[column]]);
    fill_table(view, shown, table, &highest_left_out);
    page_add(page, view->words->text[TABLE_TITLE]);
    add_rows(table, page);
    if (highest_left_out != NULL)
        add_more(view, count - shown, highest_left_out, page);
    free(table);
}
