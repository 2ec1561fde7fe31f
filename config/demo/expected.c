/* SPDX-License-Identifier: MIT */
#include "config/demo/expected.h"

#include <math.h>
#include <stdlib.h>

#include "config/demo/night_time.h"

/*
 * The recipe's truth lines were written down from another routing run of the same river, to the whole minute and
 * centimetre; another step and other cells part from it by a minute or two, more where the level only grazes a mark.
 */
enum { TRUTH_TOLERANCE_MIN = 4 };
static const double truth_tolerance_m = 0.015;

enum what { RISES_TO, FALLS_BELOW, PEAKS };

static const struct truth_line {
    size_t point;
    enum what what;
    double level_m;             /* the mark; for a peak the peak */
    const char *after, *before; /* clocks between which to look */
    const char *clock;
    int tolerance_min;
    const char *name;
} truth_lines[] = {
    {RECIPE_FORD, RISES_TO, 1.55, "18:00", "14:00", "23:43", TRUTH_TOLERANCE_MIN, "deck wet"},
    {RECIPE_FORD, RISES_TO, 1.70, "18:00", "14:00", "23:58", TRUTH_TOLERANCE_MIN, "over limit"},
    {RECIPE_FORD, PEAKS, 1.95, "23:43", "03:00", "00:53", TRUTH_TOLERANCE_MIN, "first peak"},
    {RECIPE_FORD, FALLS_BELOW, 1.55, "00:53", "14:00", "03:07", TRUTH_TOLERANCE_MIN, "deck dry"},
    {RECIPE_FORD, RISES_TO, 1.55, "03:20", "14:00", "04:13", TRUTH_TOLERANCE_MIN, "deck wet again"},
    {RECIPE_FORD, PEAKS, 2.40, "04:13", "09:00", "05:26", TRUTH_TOLERANCE_MIN, "second peak"},
    {RECIPE_FORD, FALLS_BELOW, 1.55, "05:26", "14:00", "08:30", TRUTH_TOLERANCE_MIN, "deck dry again"},
    {RECIPE_CAUSEWAY, RISES_TO, 1.95, "18:00", "14:00", "01:04", TRUTH_TOLERANCE_MIN, "deck wet"},
    {RECIPE_CAUSEWAY, PEAKS, 2.09, "01:04", "04:00", "01:45", TRUTH_TOLERANCE_MIN, "first peak"},
    {RECIPE_CAUSEWAY, FALLS_BELOW, 1.95, "01:45", "14:00", "02:45", TRUTH_TOLERANCE_MIN, "deck dry"},
    {RECIPE_CAUSEWAY, RISES_TO, 1.95, "03:30", "14:00", "05:16", TRUTH_TOLERANCE_MIN, "deck wet again"},
    {RECIPE_CAUSEWAY, PEAKS, 2.55, "05:16", "09:00", "06:15", TRUTH_TOLERANCE_MIN, "second peak"},
    {RECIPE_CAUSEWAY, FALLS_BELOW, 1.95, "06:15", "14:00", "08:21", TRUTH_TOLERANCE_MIN, "deck dry again"},
    {RECIPE_BRIDGE, PEAKS, 2.08, "01:00", "04:00", "02:41", TRUTH_TOLERANCE_MIN, "first peak"},
    {RECIPE_BRIDGE, RISES_TO, 2.62, "03:00", "14:00", "06:53", TRUTH_TOLERANCE_MIN, "deck wet"},
    {RECIPE_BRIDGE, PEAKS, 2.66, "06:00", "09:00", "07:06", TRUTH_TOLERANCE_MIN, "second peak"},
    {RECIPE_BRIDGE, FALLS_BELOW, 2.62, "07:06", "14:00", "07:23", TRUTH_TOLERANCE_MIN, "deck dry"},
};
enum { TRUTH_LINE_COUNT = sizeof truth_lines / sizeof truth_lines[0] };

static bool compare_time(const struct truth_line *line, const struct recipe *recipe, int64_t found_utc_s)
{
    char found[NIGHT_TIME_SIZE];
    bool is_near = found_utc_s != NIGHT_TIME_NEVER &&
                   llabs(found_utc_s - night_time_at(line->clock)) <= (long long)line->tolerance_min * 60;
    double apart_min =
        found_utc_s == NIGHT_TIME_NEVER ? (double)NAN : (double)(found_utc_s - night_time_at(line->clock)) / 60.0;
    printf("%-18s %-15s %6.2f m  recipe %s  routed %s  %+5.1f min%s\n", recipe->points[line->point].id, line->name,
           line->level_m, line->clock, night_time_clock(found_utc_s, found), apart_min, is_near ? "" : "  PARTS");
    return is_near;
}

static bool compare_line(const struct truth_line *line, const struct recipe *recipe, const struct truth *truth)
{
    int64_t after_utc_s = night_time_at(line->after);
    if (line->what != PEAKS)
        return compare_time(line, recipe,
                            truth_first(truth, line->point, line->level_m, line->what == RISES_TO, after_utc_s));
    int64_t at_utc_s = NIGHT_TIME_NEVER;
    double peak_m = truth_peak_m(truth, line->point, after_utc_s, night_time_at(line->before), &at_utc_s);
    bool is_near = compare_time(line, recipe, at_utc_s);
    bool is_level = fabs(peak_m - line->level_m) <= truth_tolerance_m;
    printf("%-18s %-15s %6.3f m  recipe %.2f m %+24.3f m%s\n", "", "its level", peak_m, line->level_m,
           peak_m - line->level_m, is_level ? "" : "    PARTS");
    return is_near && is_level;
}

bool expected_compare_truth(const struct recipe *recipe, const struct truth *truth)
{
    bool agrees = true;
    for (size_t i = 0; i < TRUTH_LINE_COUNT; i++)
        agrees &= compare_line(&truth_lines[i], recipe, truth);
    printf("%s\n", agrees ? "the routed truth agrees with the recipe's" : "the routed truth PARTS from the recipe's");
    return agrees;
}

/* --- what is asked of whoever watches -------------------------------------------------------------------------- */

static const struct asked_time {
    const char *point, *what, *clock;
    int tolerance_min;
    const char *why;
} asked_times[] = {
    {"tallowick-ford", "blind from", "21:40", 1, "newest observation 21:15; 25 min while rising"},
    {"tallowick-ford", "first SEND", "21:58", 5, "signed trigger 2.00 m on a rise carried forward; 21:58 by hand"},
    {"tallowick-ford", "act by at first SEND", "22:18", 20,
     "earliest 23:28 at the deck less 70 min; the closing mark is 10 to 16 min before the deck"},
    {"tallowick-ford", "deck wet likely at first SEND", "23:43", 20, "from a carried rise"},
    {"marren-causeway", "first SEND", "22:20", 25,
     "joined to the ford's crew by hand; without a crew plan its own act-by decides"},
    {"marren-causeway", "act by at first SEND", "00:04", 25, "earliest 00:49 less 45 min"},
    {"marren-causeway", "deck wet likely at first SEND", "01:04", 30, "from a carried rise"},
    {"low-pintle-bridge", "first SEND", "05:02", 70,
     "on a carried rise it may come with the second hand reading, before the backfill"},
    {"low-pintle-bridge", "deck wet likely at first SEND", "06:53", 45, "a little better than even: 4 cm over"},
    {"tallowick-ford", "blind again from", "03:15", 20,
     "last reading 02:50; 25 min while moving, 45 when taken as still"},
};

static const struct asked_words {
    const char *point, *what, *expected, *why;
} asked_words[] = {
    {"tallowick-ford", "advice at 03:08", "KEEP SHUT", "the deck is dry, the gauge silent, a second rise is coming"},
    {"tallowick-ford", "WALK-OVER before 08:30", "never", "not in the lull between the peaks"},
    {"marren-causeway", "WALK-OVER before 08:21", "never", "not in the lull between the peaks"},
    {"low-pintle-bridge", "SEND before 23:59", "never", "the first peak stays 0.12 m under the soffit"},
    {"low-pintle-bridge", "closed and wet", "yes", "deck wet from 06:53"},
    {"", "told because of 22:35", "nothing", "6.91 m is held, then rejected at 22:40"},
    {"", "told because of 22:18", "nothing old", "old values change no decision of now"},
};

static const struct asked_margin {
    const char *point;
    int margin_min, tolerance_min;
} asked_margins[] = {{"tallowick-ford", 35, 10}, {"marren-causeway", 119, 40}, {"low-pintle-bridge", 56, 70}};

void expected_write_csv(const struct recipe *recipe, FILE *stream)
{
    char text[NIGHT_TIME_SIZE];
    fputs("point,what,expected,tolerance,unit,why\n", stream);
    for (size_t i = 0; i < TRUTH_LINE_COUNT; i++) {
        const struct truth_line *line = &truth_lines[i];
        const char *id = recipe->points[line->point].id;
        fprintf(stream, "%s,true %s,%s,%d,min,\"%.2f m\"\n", id, line->name,
                night_time_rfc3339(night_time_at(line->clock), text), line->tolerance_min, line->level_m);
        if (line->what == PEAKS)
            fprintf(stream, "%s,true %s level,%.2f,%.3f,m,\n", id, line->name, line->level_m, truth_tolerance_m);
    }
    for (size_t i = 0; i < sizeof asked_times / sizeof asked_times[0]; i++)
        fprintf(stream, "%s,%s,%s,%d,min,\"%s\"\n", asked_times[i].point, asked_times[i].what,
                night_time_rfc3339(night_time_at(asked_times[i].clock), text), asked_times[i].tolerance_min,
                asked_times[i].why);
    for (size_t i = 0; i < sizeof asked_margins / sizeof asked_margins[0]; i++)
        fprintf(stream, "%s,margin at the deck,%d,%d,min,\"true deck wet less first SEND less stated need\"\n",
                asked_margins[i].point, asked_margins[i].margin_min, asked_margins[i].tolerance_min);
    for (size_t i = 0; i < sizeof asked_words / sizeof asked_words[0]; i++)
        fprintf(stream, "%s,%s,%s,,,\"%s\"\n", asked_words[i].point, asked_words[i].what, asked_words[i].expected,
                asked_words[i].why);
}
