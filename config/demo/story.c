/* SPDX-License-Identifier: MIT */
#include "config/demo/story.h"

#include <assert.h>
#include <math.h>
#include <stdio.h>
#include <string.h>

#include "config/demo/night_time.h"

enum {
    MINUTE_S = 60,
    EARLY_INTERVAL_S = 15 * MINUTE_S,
    FLOOD_INTERVAL_S = 5 * MINUTE_S,
    SPIKE_CM = 691,
    SLIP_CM = 5
};

const char *story_way_name(enum story_way way)
{
    static const char *const names[] = {
        [STORY_BY_BOTH] = "both", [STORY_BY_FOLDER] = "folder", [STORY_BY_HTTP] = "http"};
    return names[way];
}

int64_t story_router_out_utc_s(void)
{
    return night_time_at("00:20");
}

int64_t story_router_back_utc_s(void)
{
    return night_time_at("00:47");
}

static int is_within(int64_t utc_s, const char *from_clock, const char *to_clock)
{
    return utc_s >= night_time_at(from_clock) && utc_s <= night_time_at(to_clock);
}

static int true_stage_cm(const struct recipe *recipe, int64_t utc_s)
{
    return (int)lround(100.0 * recipe_gauge_stage_m(recipe, utc_s));
}

static int read_stage_cm(const struct recipe *recipe, int64_t observed_utc_s)
{
    if (observed_utc_s == night_time_at("22:35"))
        return SPIKE_CM;
    if (is_within(observed_utc_s, "00:50", "01:25"))
        return true_stage_cm(recipe, night_time_at("00:50"));
    int slip_cm = observed_utc_s >= night_time_at("03:20") ? SLIP_CM : 0;
    return true_stage_cm(recipe, observed_utc_s) + slip_cm;
}

static int64_t received_utc_s(int64_t observed_utc_s)
{
    if (is_within(observed_utc_s, "21:20", "22:15"))
        return night_time_at("22:18");
    if (observed_utc_s >= story_router_out_utc_s() && observed_utc_s < story_router_back_utc_s())
        return story_router_back_utc_s();
    if (is_within(observed_utc_s, "02:55", "04:50"))
        return night_time_at("04:52");
    return observed_utc_s + MINUTE_S;
}

static void deliver(const struct recipe *recipe, struct story *story, int64_t observed_utc_s)
{
    assert(story->delivery_count < STORY_DELIVERIES_MAX);
    enum story_way way = STORY_BY_BOTH;
    if (observed_utc_s <= night_time_at("19:00"))
        way = STORY_BY_HTTP;
    else if (is_within(observed_utc_s, "21:20", "22:15"))
        way = STORY_BY_FOLDER;
    story->deliveries[story->delivery_count++] =
        (struct story_delivery){.observed_utc_s = observed_utc_s,
                                .received_utc_s = received_utc_s(observed_utc_s),
                                .stage_cm = read_stage_cm(recipe, observed_utc_s),
                                .way = way};
}

/* Twelve readings and two of them again, shuffled: places in 21:20, 21:25 .. 22:15. */
static void deliver_held_batch(const struct recipe *recipe, struct story *story)
{
    static const int order[] = {3, 0, 7, 11, 5, 1, 9, 2, 11, 10, 4, 8, 3, 6};
    for (size_t i = 0; i < sizeof order / sizeof order[0]; i++)
        deliver(recipe, story, night_time_at("21:20") + order[i] * FLOOD_INTERVAL_S);
}

void story_tell_feed(const struct recipe *recipe, struct story *story)
{
    story->delivery_count = 0;
    int64_t observed_utc_s = recipe->start_utc_s;
    while (observed_utc_s <= recipe->end_utc_s) {
        if (observed_utc_s == night_time_at("21:20")) {
            deliver_held_batch(recipe, story);
            observed_utc_s = night_time_at("22:20");
            continue;
        }
        deliver(recipe, story, observed_utc_s);
        observed_utc_s += observed_utc_s < night_time_at("20:45") ? EARLY_INTERVAL_S : FLOOD_INTERVAL_S;
    }
}

/* --- what people say ------------------------------------------------------------------------------------------- */

/* Adds one word; `line` has its parts between bars. */
static void say(struct story *story, const char *clock, const char *by, const char *line)
{
    assert(story->word_count < STORY_WORDS_MAX);
    struct story_word *word = &story->words[story->word_count++];
    *word = (struct story_word){.at_utc_s = night_time_at(clock)};
    while (*line != '\0') {
        size_t length = strcspn(line, "|");
        assert(word->part_count + 2 < STORY_WORD_PARTS_MAX && length < STORY_PART_SIZE);
        memcpy(word->parts[word->part_count++], line, length);
        line += length + (line[length] == '|');
    }
    snprintf(word->parts[word->part_count++], STORY_PART_SIZE, "--by");
    snprintf(word->parts[word->part_count++], STORY_PART_SIZE, "%s", by);
}

static void say_hand_reading(const struct recipe *recipe, struct story *story, const char *clock)
{
    char line[STORY_PART_SIZE];
    snprintf(line, sizeof line, "reading|orlin-scar|%.2f|--unit|m",
             0.01 * true_stage_cm(recipe, night_time_at(clock)));
    say(story, clock, "catchment technician", line);
}

static void say_water_seen(const struct recipe *recipe, const struct truth *truth, struct story *story,
                           const char *clock, size_t point)
{
    char line[STORY_PART_SIZE];
    const struct recipe_point *where = &recipe->points[point];
    double over_deck_cm = 100.0 * (truth_level_m(truth, point, night_time_at(clock)) - where->deck_m);
    if (over_deck_cm < 0.0)
        snprintf(line, sizeof line, "seen|%s|dry", where->id);
    else
        snprintf(line, sizeof line, "seen|%s|wet|%.0f", where->id, fmax(1.0, over_deck_cm));
    say(story, clock, "crew lead", line);
}

void story_tell_words(const struct recipe *recipe, const struct truth *truth, struct story *story)
{
    story->word_count = 0;
    say(story, "22:02", "duty officer A", "accept");
    say(story, "22:05", "roads foreman", "road|tallowick-ford|CREW CALLED");
    say(story, "22:27", "crew lead", "road|tallowick-ford|CREW OUT");
    say_water_seen(recipe, truth, story, "22:57", RECIPE_FORD);
    say(story, "22:57", "roads foreman", "road|tallowick-ford|SHUT|--both-sides");
    say(story, "22:58", "roads foreman", "road|marren-causeway|CREW OUT");
    say_water_seen(recipe, truth, story, "23:27", RECIPE_CAUSEWAY);
    say(story, "23:27", "roads foreman", "road|marren-causeway|SHUT|--both-sides");
    say(story, "00:48", "duty officer A", "note|office router was out from 00:20; text messages went on");
    say_water_seen(recipe, truth, story, "00:53", RECIPE_FORD);
    say_water_seen(recipe, truth, story, "02:43", RECIPE_BRIDGE);
    say_water_seen(recipe, truth, story, "03:12", RECIPE_FORD);
    say(story, "03:12", "duty officer A", "note|a resident asks for the ford back; it stays shut");
    say_hand_reading(recipe, story, "03:35");
    say_hand_reading(recipe, story, "04:05");
    say_water_seen(recipe, truth, story, "04:27", RECIPE_FORD);
    say(story, "05:04", "duty officer A", "accept");
    say(story, "05:06", "roads foreman", "road|low-pintle-bridge|CREW CALLED");
    say(story, "05:50", "roads foreman", "road|low-pintle-bridge|SHUT|--both-sides");
    say(story, "05:51", "duty officer A", "note|school bus diverted; 11 homes cut off; police control desk told");
    say(story, "06:00", "duty officer B", "note|shift change; handover sheet signed by both");
    if (recipe->is_as_told)
        say(story, "06:55", "crew lead", "seen|low-pintle-bridge|wet|4");
    else
        say_water_seen(recipe, truth, story, "06:55", RECIPE_BRIDGE);
    say_water_seen(recipe, truth, story, "07:48", RECIPE_BRIDGE);
    say(story, "09:30", "crew lead", "road|tallowick-ford|WALK-OVER");
    say_water_seen(recipe, truth, story, "09:30", RECIPE_FORD);
    say(story, "09:31", "crew lead", "note|ford: scour at the downstream edge; not handed back");
    say(story, "10:40", "crew lead", "road|marren-causeway|WALK-OVER");
    say_water_seen(recipe, truth, story, "10:40", RECIPE_CAUSEWAY);
    say(story, "11:10", "roads foreman", "road|marren-causeway|HANDED BACK");
}
