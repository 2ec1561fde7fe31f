/* SPDX-License-Identifier: MIT */
#include "daemon/tell/sentence_catalogue.h"

#include <string.h>

/* Text messages use the basic alphabet alone: no brackets, braces, carets, tildes, backslashes or bars. */
static const struct sentence_catalogue english = {
    .language = "en",
    .level_word = {"QUIET", "MUSTER", "SEND", "LATE", "KEEP SHUT", "WALK-OVER MAY BE SENT"},
    .level_glyph = {"[..]", "[^]", "[>>]", "[X]", "[~]", "[~]"},
    .blind_glyph = "[//]",
    .road_word = {"OPEN", "CREW CALLED", "CREW OUT", "ONE SIDE SHUT", "SHUT", "WALK-OVER", "HANDED BACK"},
    .reason = {"the chance of water at the closing mark", "act-by is near or past",
               "a signed trigger holds on a reading",
               "a signed trigger holds on the last rise carried forward while the gauge is silent",
               "the crew is out for a crossing near by", "a gauge above is blind", "a person saw water there",
               "kept up for want of readings", "a step down waits out its time", "not below the deck for long enough",
               "water may be back before the road could be opened and shut again"},
    .weekday = {"Mon", "Tue", "Wed", "Thu", "Fri", "Sat", "Sun"},
    .text =
        {
            [SHORT_SENDER] = "{district} ROADS: ",
            [SHORT_SENDER_BRIEF] = "ROADS: ",
            [SHORT_PLACE] = "{place}. ",
            [SHORT_MUSTER] = "MUSTER: call crew together. ",
            [SHORT_MUSTER_BRIEF] = "MUSTER crew. ",
            [SHORT_SEND] = "SEND crew, shut both sides. ",
            [SHORT_SEND_BRIEF] = "SEND crew. ",
            [SHORT_NEAR_SIDES] = "SEND near sides only, do not cross. ",
            [SHORT_NEAR_SIDES_BRIEF] = "SEND near sides only, do not cross. ",
            [SHORT_LATE] = "LATE: do not send into water. Block where road is dry. Call control room. ",
            [SHORT_LATE_BRIEF] = "LATE: not into water, block where dry, call control. ",
            [SHORT_KEEP_SHUT] = "KEEP SHUT, do not hand back. ",
            [SHORT_KEEP_SHUT_BRIEF] = "KEEP SHUT, do not hand back. ",
            [SHORT_WALK_OVER] = "WALK-OVER MAY BE SENT. Road stays shut until people hand it back. ",
            [SHORT_WALK_OVER_BRIEF] = "WALK-OVER MAY BE SENT, road stays shut. ",
            [SHORT_STEP_DOWN] = "{level} (was {before}), crew stays ready. ",
            [SHORT_STEP_DOWN_BRIEF] = "{level} (was {before}). ",
            [SHORT_QUIET] = "QUIET (was {before}). The road stays as people set it. ",
            [SHORT_QUIET_BRIEF] = "QUIET (was {before}). ",
            [SHORT_UPDATE] = "UPDATE, still {level}. ",
            [SHORT_UPDATE_BRIEF] = "UPDATE, {level}. ",
            [SHORT_BLIND] = "BLIND, advice {level}. Get a hand reading. ",
            [SHORT_BLIND_BRIEF] = "BLIND, {level}. ",
            [SHORT_BLIND_RISING] = "BLIND and rising, advice {level}. Get a hand reading. ",
            [SHORT_BLIND_RISING_BRIEF] = "BLIND and rising, {level}. ",
            [SHORT_GAUGE_BACK] = "Gauge back, newest {newest}. Advice {level}. ",
            [SHORT_GAUGE_BACK_BRIEF] = "Gauge back, {level}. ",
            [SHORT_DECK_BETWEEN] = "Deck wet {earliest}-{latest}. ",
            [SHORT_DECK_FROM] = "Deck wet from {earliest}, or not at all. ",
            [SHORT_DECK_SINCE] = "Deck wet since {earliest}. ",
            [SHORT_DECK_UNKNOWN] = "NO FORECAST. ",
            [SHORT_DECK_NOT_REACHED] = "Deck not reached in {runs} runs. ",
            [SHORT_ACT_BY] = "ACT BY {act_by}. ",
            [SHORT_ACT_BY_WAS] = "ACT BY {act_by}, was {was}. ",
            [SHORT_ACT_BY_PASSED] = "ACT BY {act_by} PASSED. ",
            [SHORT_ACT_BY_PASSED_NOW] = "ACT BY {act_by} PASSED, ACT NOW. ",
            [SHORT_ACT_NOW] = "ACT NOW. ",
            [SHORT_MEASURED] = "Rests on MEASURED water. ",
            [SHORT_MEASURED_BRIEF] = "MEASURED. ",
            [SHORT_MEASURED_PARTLY] = "Rests on MEASURED water, {share} % ungauged. ",
            [SHORT_MEASURED_PARTLY_BRIEF] = "MEASURED, {share} % not. ",
            [SHORT_ASSUMED_AFTER] = "Rests on ASSUMED water after {until}. ",
            [SHORT_ASSUMED_AFTER_BRIEF] = "ASSUMED after {until}. ",
            [SHORT_ASSUMED_RISE_AFTER] = "Rests on ASSUMED rise after {until}. ",
            [SHORT_ASSUMED_RISE_AFTER_BRIEF] = "ASSUMED after {until}. ",
            [SHORT_ASSUMED_SILENT] = "Rests on ASSUMED water, gauge silent since {since}. ",
            [SHORT_ASSUMED_SILENT_BRIEF] = "ASSUMED, gauge silent since {since}. ",
            [SHORT_ASSUMED_RISE_SILENT] = "Rests on ASSUMED rise, gauge silent since {since}. ",
            [SHORT_ASSUMED_RISE_SILENT_BRIEF] = "ASSUMED, gauge silent since {since}. ",
            [SHORT_ASSUMED_NO_READING] = "Rests on ASSUMED water, no reading yet. ",
            [SHORT_ASSUMED_NO_READING_BRIEF] = "ASSUMED, no reading yet. ",
            [SHORT_UNCONFIRMED] = "Rests on UNCONFIRMED reading {newest}. ",
            [SHORT_UNCONFIRMED_BRIEF] = "UNCONFIRMED {newest}. ",
            [SHORT_WATER_SEEN] = "Water SEEN {seen} by {by}. ",
            [SHORT_WATER_SEEN_BRIEF] = "Water SEEN {seen}. ",
            [SHORT_NEWEST] = "Newest reading {newest}. ",
            [SHORT_BELOW_BUT_SILENT] = "Computed below deck, but no reading since {since}. ",
            [SHORT_BELOW_BUT_SILENT_RISING] =
                "Computed below deck, but no reading since {since} and river was rising. ",
            [SHORT_BELOW_BUT_RETURN] = "Computed below deck, but water may come back. ",
            [SHORT_BELOW_BUT_HOLD] = "Computed below deck, but not for long enough. ",
            [SHORT_BELOW_BUT_WATER_SEEN] = "Computed below deck, but water seen {seen}. ",
            [SHORT_OVER_DECK] = "Computed at or over deck. ",
            [SHORT_OVER_DECK_SILENT] = "Computed at or over deck, no reading since {since}. ",
            [SHORT_TRIGGER] = "Signed trigger. ",
            [SHORT_BEYOND_GAUGING] = "Beyond highest gauging. ",
            [SHORT_ABOVE_SURVEY] = "Above the survey. ",
            [SHORT_HAND] = "Hand reading {newest}. ",
            [SHORT_NEXT_LOOK] = "Next look {next}. ",
            [SHORT_ALSO] = "{count} more crossings changed. ",
            [SHORT_ALSO_BRIEF] = "+{count} more. ",
            [SHORT_HINT] = "Say: accept {number}. ",
            [SHORT_NUMBER] = "#{number4}",

            [CHANGE_STEP] = "{time} {place}: {before} -> {level}",
            [CHANGE_SAME] = "{time} {place}: still {level}",
            [CHANGE_NOW_BLIND] = ", now BLIND",
            [CHANGE_STILL_BLIND] = ", BLIND",
            [CHANGE_SEES_AGAIN] = ", gauge back",
            [CHANGE_NEAR_SIDES] = ", near sides only",
            [CHANGE_ACT_BY] = ", act by {act_by}",
            [CHANGE_ACT_BY_WAS] = ", act by {act_by} (was {was})",
            [CHANGE_NO_ACT_BY] = ", no act-by",
            [CHANGE_DECK] = ", deck wet {earliest} / {likely} / {latest}",
            [CHANGE_NUMBER] = ". #{number4}",

            [HEAD] = "{district} ROADS, bulletin #{number4}, {date} {time}. All times local, UTC{offset}.",
            [HEAD_NO_NUMBER] = "{district} ROADS, bulletin, {date} {time}. All times local, UTC{offset}.",
            [HEAD_NOT_STORED] = "NOT STORED: the record cannot be written ({trouble}). Keep a hand log.",
            [HEAD_AWAY] = "Forewater was away from {from}; readings of that time are taken now.",
            [DO_LINE] = "(1) WHAT TO DO: {advice}, {place}. {act_by}{action}",
            [DO_MUSTER] = "Call the crew together, barriers ready.",
            [DO_SEND] = "Send the crew now, shut both sides.",
            [DO_NEAR_SIDES] = "Send the crew now, near sides only: do not cross, water may be there first.",
            [DO_LATE] =
                "Too late to close dry. Do not send into water. Block where the road is dry, on each side, and call "
                "the control room.",
            [DO_KEEP_SHUT] = "Do not hand back; it is not yet time for a walk-over.",
            [DO_WALK_OVER] = "The road stays shut until people have looked at it and hand it back.",
            [DO_QUIET] = "This forecast asks for no act now. The road is as people set it.",
            [DO_NO_CREW] = "Nobody is set to close it: call the control room.",
            [DO_ACT_BY] = "ACT BY {act_by}. ",
            [DO_ACT_BY_PASSED] = "ACT BY {act_by}, which has PASSED. ",
            [DO_ACT_NOW] = "ACT NOW. ",
            [DO_NO_ACT_BY] = "No act-by yet. ",
            [DO_WHY] = "Why: {reasons}.",
            [DO_ALSO] = "The advice of {count} more crossings changed at the same time: see the table.",
            [DO_TRIGGER] = " ({gauge} {value} {unit}, signed {by}, since {since})",
            [DO_DETOUR] = "Its diversion runs over {place}: {advice}, road {road}.",
            [DO_ACCESS] = "The crew's way runs over {place}: {advice}, road {road}.",
            [TABLE_TITLE] =
                "(2) CROSSINGS by act-by. Deck wet: earliest / likely / latest. Level: m above invert, m to deck.",
            [TABLE_ACT_BY] = "ACT BY",
            [TABLE_PLACE] = "CROSSING",
            [TABLE_ADVICE] = "WATER ADVICE",
            [TABLE_DECK] = "DECK WET",
            [TABLE_RUNS] = "RUNS",
            [TABLE_LEVEL] = "LEVEL NOW",
            [TABLE_PASSED] = "passed",
            [TABLE_UNKNOWN] = "no forecast",
            [TABLE_NOT_REACHED] = "not reached",
            [TABLE_RUNS_CELL] = "{reached} of {runs}",
            [TABLE_LEVEL_CELL] = "{level}, {difference} {side}",
            [TABLE_NO_CREW] = "no crew set",
            [TABLE_MORE] = "and {count} more, the highest of them {advice}; see forewater status.",
            [RESTS_TITLE] = "(3) RESTS ON: ",
            [RESTS_GAUGE] = "{gauge} {value} {unit}, {movement}, seen {newest}, {age} old",
            [RESTS_GAUGE_NONE] = "{gauge}: no reading yet",
            [RESTS_MORE_GAUGES] = "{count} more gauges.",
            [RESTS_HAND] = ", hand reading",
            [RESTS_UNCONFIRMED] = ", UNCONFIRMED",
            [RESTS_BEYOND] = ", beyond highest gauging {gauged} {unit}",
            [RESTS_FROZEN] = ", newer readings stand still",
            [RESTS_HELD] = ", held unconfirmed: {held} {unit} at {held_at}",
            [RESTS_BLIND] = ", {blind} (limit {limit} min)",
            [RESTS_UNKNOWN] =
                "There is NO FORECAST for {place}: a gauge above it has given no reading that counts. Ask for a "
                "hand reading, or for a look at the crossing from its dry side.",
            [RESTS_NOW] = "{place} now {level} m above invert ({low} to {high}), {to_deck}. ",
            [RESTS_PEAK] = "Peak likely {peak} m at {at} ({low} to {high}), {to_deck}.",
            [RESTS_MARK] = "{mark} {depth} m: earliest {earliest}, likely {likely}, latest {latest}; {runs}.",
            [RESTS_MARK_NEVER] = "{mark} {depth} m: {runs}.",
            [RESTS_MEASURED] =
                "Measured until {until}; after that assumed: last rise carried forward / held / recession, each at "
                "roughness {roughness}; uncalibrated.",
            [RESTS_MEASURED_BRIEF] =
                "Measured until {until}; then assumed (rise carried on / held / recession; roughness {roughness}; "
                "uncalibrated).",
            [RESTS_ALL_MEASURED] = "Measured beyond the hours looked ahead; roughness {roughness}, uncalibrated.",
            [RESTS_SHARE] = " No gauge measures {share} % of the flow there.",
            [RESTS_REPLACED] =
                " In {replaced} % of its steps the routing had to do without backwater: levels are less sure.",
            [RESTS_PEAK_BEYOND] = " The peak is beyond the highest gauging and may be well off.",
            [RESTS_PEAK_ABOVE_SURVEY] = " The water stands above the survey and may be well off.",
            [RESTS_STAGE_RATING] = "Level there is from a stage rating of its own.",
            [RESTS_PART_BLOCKED] =
                "Level there is from a stage rating of its own; part-blocked by debris the peak would be "
                "{blocked} m, {to_deck}.",
            [DECK_LIKELY] =
                "On the deck, estimated, likely peak {depth} m deep, {speed} m/s, {product} m2/s ({low} to {high})",
            [DECK_LIKELY_BRIEF] = "On the deck, estimated, likely {depth} m, {speed} m/s, {product} m2/s",
            [DECK_HIGHEST_BRIEF] = "On the deck, estimated, at most {depth} m, {speed} m/s, {product} m2/s",
            [DECK_HIGHEST] = "On the deck, estimated, in the highest run {depth} m deep, {speed} m/s, {product} m2/s",
            [DECK_OVER] = ", from {likely} (earliest {earliest}) over the {limit} of {number} {unit} for {whom}",
            [DECK_OVER_PERHAPS] = ", in some runs from {earliest} over the {limit} of {number} {unit} for {whom}",
            [DECK_BLOCKED] = " On the deck then {depth} m, {speed} m/s, {product} m2/s",
            [DECK_OVER_THEN] = ", over the {limit} of {number} {unit} for {whom}",
            [DECK_DRAFT_LIMIT] = "draft limit",
            [DECK_GUIDE_LIMIT] = "guideline limit",
            [DECK_SMALL_CAR] = "a small stationary car",
            [DECK_LARGE_CAR] = "a large stationary car",
            [DECK_ANY_VEHICLE] = "any vehicle, child or old person",
            [DECK_ANY_PERSON] = "any vehicle or person",
            [DECK_CAUTION_WORDS] = ". No limit is a depth to drive in.",
            [RESTS_PART_BLOCKED_BRIEF] = "Own stage rating; part-blocked, peak {blocked} m, {to_deck}.",
            [CHANGES_TITLE] = "(4) WHAT WOULD CHANGE THIS: ",
            [CHANGES_READING] = "a reading from {gauge}, also by hand",
            [CHANGES_NO_READING] = "no reading from {gauge} by {by}",
            [CHANGES_OTHERS] = "; act-by moving by more than {shift} min; a step of advice; water seen.",
            [CHANGES_END] = ".",
            [CHANGES_NEXT_LOOK] = " Next look {next}.",
            [UNSEEN] =
                "(5) CANNOT SEE: ungauged side water; rain on the crossing's own catchment (not protected from local "
                "rain); debris; ice; announced releases not entered{own}.",
            [TOLD_TITLE] = "(6) TOLD: ",
            [TOLD_TO] = "{role} by {channels}",
            [TOLD_NOBODY_SET] = "no roster; every channel",
            [TOLD_SENT] = "; {channel} sent {at}",
            [TOLD_UNDER_WAY] = "; {channel} under way",
            [TOLD_WAITS] = "; {channel} waits, {tries} tries",
            [TOLD_GIVEN_UP] = "; {channel} GIVEN UP {at}",
            [PEOPLE_ROAD] = ". People: road {road}, {by} {at}",
            [PEOPLE_NO_ROAD] = ". People: no word on the road",
            [PEOPLE_DRY] = "; water seen: dry, {by} {at}",
            [PEOPLE_WET] = "; water seen: wet, {by} {at}",
            [PEOPLE_WET_DEPTH] = "; water seen: wet {depth} cm, {by} {at}",
            [PEOPLE_ACCEPTED] = "; accepted by {by} {at}.",
            [PEOPLE_NOT_ACCEPTED] = "; not accepted yet.",
            [RECORD] = " Settings {settings}, record {record}.",
            [WORD_BELOW_DECK] = "{difference} m below deck",
            [WORD_OVER_DECK] = "{difference} m over deck",
            [WORD_AT_DECK] = "at deck level",
            [WORD_BELOW] = "below",
            [WORD_OVER] = "over",
            [WORD_AT] = "at deck",
            [WORD_RISING] = "rising {rate} {unit}/h",
            [WORD_FALLING] = "falling {rate} {unit}/h",
            [WORD_STEADY] = "steady",
            [WORD_LATER] = "later or not at all",
            [WORD_MINUTES] = "{count} min",
            [WORD_HOURS] = "{count} h",
            [WORD_DAYS] = "{count} days",
            [WORD_CLOSING] = "{mark} (closing mark)",
            [WORD_BLIND] = "BLIND",
            [RUNS_NONE] = "no run of {runs} reaches it",
            [RUNS_FEW] = "may reach it, {reached} of {runs} runs do",
            [RUNS_EVEN] = "may or may not reach it, about even: {reached} of {runs} runs do",
            [RUNS_MOST] = "most runs reach it, {reached} of {runs}",
            [RUNS_ALL] = "all {runs} runs reach it",
        },
};

const struct sentence_catalogue *sentence_catalogue_english(void)
{
    return &english;
}

static const char *value_of(const char *name, size_t length, const struct sentence_field *fields)
{
    for (; fields->name != NULL; fields++)
        if (strlen(fields->name) == length && strncmp(fields->name, name, length) == 0)
            return fields->value;
    return NULL;
}

void sentence_fill(struct text *out, const char *pattern, const struct sentence_field *fields)
{
    while (*pattern != '\0') {
        size_t plain = strcspn(pattern, "{");
        text_add_bytes(out, pattern, plain);
        pattern += plain;
        if (*pattern == '\0')
            break;
        size_t length = strcspn(pattern + 1, "}");
        if (pattern[length + 1] == '\0') { /* no place after all */
            text_add_bytes(out, pattern, length + 1);
            return;
        }
        const char *value = value_of(pattern + 1, length, fields);
        if (value != NULL)
            text_add_bytes(out, value, strlen(value));
        else
            text_add_bytes(out, pattern, length + 2);
        pattern += length + 2;
    }
}
