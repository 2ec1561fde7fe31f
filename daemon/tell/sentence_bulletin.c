/* SPDX-License-Identifier: MIT */
#include "daemon/tell/sentence.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

#include "daemon/tell/bulletin_deck.h"
#include "daemon/tell/bulletin_page.h"
#include "daemon/tell/bulletin_table.h"
#include "daemon/tell/sentence_view.h"
#include "daemon/when.h"

enum {
    LINE_MOST = 29,
    PLACE_MOST = 40, /* characters of names, at full detail and at the least */
    PLACE_LEAST = 20,
    ROLE_MOST = 24,
    ROLE_LEAST = 14,
    MARK_MOST = 24,
    OWN_UNSEEN_MOST = 150 /* bytes of the point's own list, at full detail */
};

/*
 * How much is said: all in paragraphs first; where that does not fit on the page, run on; then less and less of it.
 */
enum detail { DETAIL_LEAST, DETAIL_LESS, DETAIL_RUN_ON, DETAIL_PARAGRAPHS, DETAIL_COUNT };

struct bulletin {
    const struct sentence_view *view;
    enum detail detail;
    struct page page;
    struct text flow; /* of the section at hand, when its paragraphs run on as one */
};

static size_t place_most(const struct bulletin *bulletin)
{
    return bulletin->detail == DETAIL_LEAST ? PLACE_LEAST : PLACE_MOST;
}

static size_t role_most(const struct bulletin *bulletin)
{
    return bulletin->detail == DETAIL_LEAST ? ROLE_LEAST : ROLE_MOST;
}

static void fill(struct text *out, const struct bulletin *bulletin, enum sentence_id id,
                 const struct sentence_field *fields)
{
    static const struct sentence_field none = {NULL, NULL};
    sentence_fill(out, bulletin->view->words->text[id], fields != NULL ? fields : &none);
}

static void end_paragraph(struct bulletin *bulletin, struct text *paragraph)
{
    if (bulletin->detail < DETAIL_PARAGRAPHS)
        text_add(&bulletin->flow, "%s ", text_string(paragraph));
    else
        page_add(&bulletin->page, text_string(paragraph));
    bulletin->page.is_short |= paragraph->is_short;
    text_clear(paragraph);
}

static void end_section(struct bulletin *bulletin)
{
    page_add(&bulletin->page, text_string(&bulletin->flow));
    bulletin->page.is_short |= bulletin->flow.is_short;
    text_clear(&bulletin->flow);
}

static void say(struct bulletin *bulletin, enum sentence_id id, const struct sentence_field *fields)
{
    struct text paragraph = {0};
    fill(&paragraph, bulletin, id, fields);
    end_paragraph(bulletin, &paragraph);
}

/* --- the head --- */

static void add_head(struct bulletin *bulletin)
{
    const struct sentence_view *view = bulletin->view;
    int64_t now_utc_s = view->picture->as_of_utc_s;
    char local[WHEN_TEXT_SIZE];
    char date[WHEN_TEXT_SIZE];
    char time[WHEN_TEXT_SIZE];
    char number4[24];
    char district[SENTENCE_WORDS_SIZE];
    char trouble[SENTENCE_WORDS_SIZE];
    char from[SENTENCE_MOMENT_SIZE];
    when_rfc3339_local(&view->settings->zone, now_utc_s, local);
    memcpy(date, local, sizeof date);
    date[strcspn(date, "T")] = '\0';
    const char *offset = strlen(local) > 19 ? local + 19 : "";
    snprintf(number4, sizeof number4, "%04lld", (long long)view->number);
    sentence_name(view->settings->district_name, SENTENCE_DISTRICT_MOST, district, sizeof district);
    for (char *letter = district; *letter != '\0'; letter++)
        if (*letter >= 'a' && *letter <= 'z')
            *letter = (char)(*letter - 'a' + 'A');
    sentence_name(view->picture->store_trouble, place_most(bulletin), trouble, sizeof trouble);
    const struct sentence_field fields[] = {{"district", district},
                                            {"number4", number4},
                                            {"date", date},
                                            {"time", when_clock(&view->settings->zone, now_utc_s, time)},
                                            {"offset", offset},
                                            {"trouble", trouble},
                                            {"from", sentence_moment(view, view->picture->away_from_utc_s, from)},
                                            {0}};
    say(bulletin, view->number > 0 ? HEAD : HEAD_NO_NUMBER, fields);
    end_section(bulletin);
    if (view->picture->is_store_failing)
        say(bulletin, HEAD_NOT_STORED, fields);
    if (view->picture->away_from_utc_s != 0 && bulletin->detail > DETAIL_LEAST)
        say(bulletin, HEAD_AWAY, fields);
}

/* --- (1) what to do --- */

static enum sentence_id action_of(const struct sentence_view *view)
{
    static const enum sentence_id actions[SENTENCE_LEVEL_COUNT] = {DO_QUIET, DO_MUSTER,    DO_SEND,
                                                                   DO_LATE,  DO_KEEP_SHUT, DO_WALK_OVER};
    if (!view->known->has_crew)
        return DO_NO_CREW;
    if (view->after.level == ADVICE_SEND && view->after.near_sides_only)
        return DO_NEAR_SIDES;
    return actions[view->after.level];
}

static void add_act_by(struct text *out, const struct bulletin *bulletin)
{
    const struct sentence_view *view = bulletin->view;
    const struct advice *advice = &view->after;
    char act_by[SENTENCE_MOMENT_SIZE];
    const struct sentence_field fields[] = {{"act_by", sentence_moment(view, advice->act_by_utc_s, act_by)}, {0}};
    bool asks = advice->level == ADVICE_MUSTER || advice->level == ADVICE_SEND || advice->level == ADVICE_LATE;
    bool has_passed = advice->act_by_utc_s <= view->picture->as_of_utc_s;
    if (!asks)
        return;
    if (advice->act_by_utc_s != PASSAGE_NEVER)
        fill(out, bulletin, has_passed ? DO_ACT_BY_PASSED : DO_ACT_BY, fields);
    else if (advice->level != ADVICE_SEND)
        fill(out, bulletin, DO_NO_ACT_BY, fields);
    if (advice->level == ADVICE_SEND && (has_passed || advice->act_by_utc_s == PASSAGE_NEVER))
        fill(out, bulletin, DO_ACT_NOW, fields);
}

/* Which signed trigger it is, in brackets. */
static void describe_trigger(struct bulletin *bulletin, struct text *out)
{
    const struct sentence_view *view = bulletin->view;
    if (view->state->trigger >= view->known->trigger_count)
        return;
    const struct settings_trigger *trigger = &view->known->triggers[view->state->trigger];
    const struct settings_gauge *gauge = &view->settings->gauges[trigger->gauge];
    char name[SENTENCE_WORDS_SIZE];
    char by[SENTENCE_WORDS_SIZE];
    char value[SENTENCE_NUMBER_SIZE];
    char since[SENTENCE_MOMENT_SIZE];
    sentence_name(gauge->name, ROLE_MOST, name, sizeof name);
    sentence_name(trigger->signed_by, ROLE_MOST, by, sizeof by);
    fill(out, bulletin, DO_TRIGGER,
         (struct sentence_field[]){{"gauge", name},
                                   {"value", sentence_metres(trigger->value, value)},
                                   {"unit", gauge->measures == SETTINGS_STAGE ? "m" : "m3/s"},
                                   {"by", by},
                                   {"since", sentence_moment(view, view->state->trigger_since_utc_s, since)},
                                   {0}});
}

static void add_reasons(struct bulletin *bulletin)
{
    const struct sentence_view *view = bulletin->view;
    struct text reasons = {0};
    for (unsigned bit = 0; bit < SENTENCE_REASON_COUNT; bit++) {
        if (!(view->after.reasons & (1u << bit)))
            continue;
        text_add(&reasons, "%s%s", reasons.length > 0 ? "; " : "", view->words->reason[bit]);
        if ((1u << bit) & (ADVICE_BY_TRIGGER | ADVICE_BY_ASSUMED_TRIGGER))
            describe_trigger(bulletin, &reasons);
    }
    if (reasons.length > 0)
        say(bulletin, DO_WHY, (struct sentence_field[]){{"reasons", reasons.bytes}, {0}});
    bulletin->page.is_short |= reasons.is_short;
    text_clear(&reasons);
}

static void add_neighbour(struct bulletin *bulletin, enum sentence_id id, const char *point_id)
{
    const struct sentence_view *view = bulletin->view;
    size_t point = point_id != NULL ? settings_point_index(view->settings, point_id) : SETTINGS_NONE;
    if (point == SETTINGS_NONE)
        return;
    char place[SENTENCE_WORDS_SIZE];
    char advice[SENTENCE_WORDS_SIZE];
    const struct point_picture *state = &view->picture->points[point];
    sentence_name(view->settings->points[point].name, place_most(bulletin), place, sizeof place);
    say(bulletin, id,
        (struct sentence_field[]){{"place", place},
                                  {"advice", sentence_advice(view, &state->advice, advice)},
                                  {"road", view->words->road_word[state->road.state]},
                                  {0}});
}

static void add_what_to_do(struct bulletin *bulletin)
{
    const struct sentence_view *view = bulletin->view;
    char place[SENTENCE_WORDS_SIZE];
    char advice[SENTENCE_WORDS_SIZE];
    struct text act_by = {0};
    struct text paragraph = {0};
    sentence_name(view->known->name, place_most(bulletin), place, sizeof place);
    add_act_by(&act_by, bulletin);
    fill(&paragraph, bulletin, DO_LINE,
         (struct sentence_field[]){{"advice", sentence_advice(view, &view->after, advice)},
                                   {"place", place},
                                   {"action", view->words->text[action_of(view)]},
                                   {"act_by", text_string(&act_by)},
                                   {0}});
    text_clear(&act_by);
    end_paragraph(bulletin, &paragraph);
    if (view->also_count > 0) {
        char count[24];
        snprintf(count, sizeof count, "%zu", view->also_count);
        say(bulletin, DO_ALSO, (struct sentence_field[]){{"count", count}, {0}});
    }
    if (bulletin->detail > DETAIL_LEAST)
        add_reasons(bulletin);
    for (size_t i = 0; i < view->known->access_over_count && (i < 1 || bulletin->detail >= DETAIL_RUN_ON) && i < 2;
         i++)
        add_neighbour(bulletin, DO_ACCESS, view->known->access_over[i]);
    add_neighbour(bulletin, DO_DETOUR, view->known->detour_over);
}

/* --- (3) what it rests on --- */

static void describe_gauge(struct bulletin *bulletin, struct text *out, size_t index)
{
    const struct sentence_view *view = bulletin->view;
    const struct settings_gauge *known = &view->settings->gauges[index];
    const struct gauge_picture *gauge = &view->picture->gauges[index];
    char name[SENTENCE_WORDS_SIZE];
    char value[SENTENCE_NUMBER_SIZE];
    char rate[SENTENCE_NUMBER_SIZE];
    char gauged[SENTENCE_NUMBER_SIZE];
    char held[SENTENCE_NUMBER_SIZE];
    char age[SENTENCE_NUMBER_SIZE];
    char limit[24];
    char movement[SENTENCE_WORDS_SIZE];
    char newest[SENTENCE_MOMENT_SIZE];
    char held_at[SENTENCE_MOMENT_SIZE];
    char blind[40];
    double rate_per_h = gauge->rate_per_s * 3600.0;
    const char *unit = known->measures == SETTINGS_STAGE ? "m" : "m3/s";
    sentence_name(known->name, place_most(bulletin), name, sizeof name);
    snprintf(limit, sizeof limit, "%lld", (long long)(gauge->blind_limit_s / 60));
    snprintf(blind, sizeof blind, "%s %s", view->words->blind_glyph, view->words->text[WORD_BLIND]);
    sentence_age(view, gauge->silent_s, age, sizeof age);
    enum sentence_id word = !(fabs(rate_per_h) >= 0.005) ? WORD_STEADY : rate_per_h > 0 ? WORD_RISING : WORD_FALLING;
    sentence_words(view, word,
                   (struct sentence_field[]){{"rate", sentence_metres(fabs(rate_per_h), rate)}, {"unit", unit}, {0}},
                   movement, sizeof movement);
    const struct sentence_field fields[] = {
        {"gauge", name},
        {"value", sentence_metres(gauge->newest_value, value)},
        {"unit", unit},
        {"movement", movement},
        {"newest", sentence_moment(view, gauge->newest_utc_s, newest)},
        {"age", age},
        {"gauged", sentence_metres(known->has_rating ? known->rating.highest_gauged_m : (double)NAN, gauged)},
        {"held", sentence_metres(gauge->held_value, held)},
        {"held_at", sentence_moment(view, gauge->held_utc_s, held_at)},
        {"blind", blind},
        {"limit", limit},
        {0}};
    fill(out, bulletin, gauge->newest_utc_s != 0 ? RESTS_GAUGE : RESTS_GAUGE_NONE, fields);
    if (gauge->is_blind)
        fill(out, bulletin, RESTS_BLIND, fields);
    if (gauge->is_hand)
        fill(out, bulletin, RESTS_HAND, fields);
    if (gauge->is_unconfirmed)
        fill(out, bulletin, RESTS_UNCONFIRMED, fields);
    if (gauge->is_beyond_gauging)
        fill(out, bulletin, RESTS_BEYOND, fields);
    if (gauge->is_frozen)
        fill(out, bulletin, RESTS_FROZEN, fields);
    if (gauge->held_utc_s != 0)
        fill(out, bulletin, RESTS_HELD, fields);
    text_add(out, ".");
}

/* The one that speaks for the point first; the others while there is room. */
static void add_gauges(struct bulletin *bulletin)
{
    const struct sentence_view *view = bulletin->view;
    size_t first = 0;
    size_t more = 0;
    size_t shown = bulletin->detail >= DETAIL_RUN_ON ? 3 : 1;
    struct text paragraph = {0};
    fill(&paragraph, bulletin, RESTS_TITLE, NULL);
    if (sentence_gauge(view, &first) != NULL)
        describe_gauge(bulletin, &paragraph, first);
    end_paragraph(bulletin, &paragraph);
    for (size_t i = 0; view->is_above != NULL && i < view->settings->gauge_count; i++) {
        if (!view->is_above[i] || i == first)
            continue;
        more++;
        if (more >= shown)
            continue;
        describe_gauge(bulletin, &paragraph, i);
        end_paragraph(bulletin, &paragraph);
    }
    char count[24];
    snprintf(count, sizeof count, "%zu", more - (shown - 1));
    if (more >= shown)
        say(bulletin, RESTS_MORE_GAUGES, (struct sentence_field[]){{"count", count}, {0}});
}

static bool is_beyond_gauging(const struct gauge_picture *gauge)
{
    return gauge->is_beyond_gauging;
}

static void add_levels(struct bulletin *bulletin)
{
    const struct sentence_view *view = bulletin->view;
    const struct point_picture *state = view->state;
    char numbers[6][SENTENCE_NUMBER_SIZE];
    char words[2][SENTENCE_WORDS_SIZE];
    char place[SENTENCE_WORDS_SIZE];
    char at[SENTENCE_MOMENT_SIZE];
    struct text paragraph = {0};
    sentence_name(view->known->name, place_most(bulletin), place, sizeof place);
    fill(&paragraph, bulletin, RESTS_NOW,
         (struct sentence_field[]){{"place", place},
                                   {"level", sentence_metres(state->level_now.likely_m, numbers[0])},
                                   {"low", sentence_metres(state->level_now.low_m, numbers[1])},
                                   {"high", sentence_metres(state->level_now.high_m, numbers[2])},
                                   {"to_deck", sentence_to_deck(view, state->level_now.likely_m, words[0])},
                                   {0}});
    fill(&paragraph, bulletin, RESTS_PEAK,
         (struct sentence_field[]){{"peak", sentence_metres(state->peak.likely_m, numbers[3])},
                                   {"low", sentence_metres(state->peak.lowest_m, numbers[4])},
                                   {"high", sentence_metres(state->peak.highest_m, numbers[5])},
                                   {"at", sentence_moment(view, state->peak.likely_utc_s, at)},
                                   {"to_deck", sentence_to_deck(view, state->peak.likely_m, words[1])},
                                   {0}});
    bool is_said = bulletin->detail == DETAIL_LEAST && sentence_any_above(view, is_beyond_gauging);
    if (state->is_peak_beyond_gauging && !is_said)
        fill(&paragraph, bulletin, RESTS_PEAK_BEYOND, NULL);
    if (state->is_peak_above_survey &&
        !(bulletin->detail == DETAIL_LEAST && (is_said || state->is_peak_beyond_gauging)))
        fill(&paragraph, bulletin, RESTS_PEAK_ABOVE_SURVEY, NULL);
    end_paragraph(bulletin, &paragraph);
}

/* A time that may lie beyond the hours looked ahead, in words. */
static const char *passage_moment(const struct sentence_view *view, int64_t utc_s, char text[SENTENCE_WORDS_SIZE])
{
    if (utc_s == PASSAGE_NEVER)
        return view->words->text[WORD_LATER];
    char moment[SENTENCE_MOMENT_SIZE];
    snprintf(text, SENTENCE_WORDS_SIZE, "%s", sentence_moment(view, utc_s, moment));
    return text;
}

static void add_closing_mark(struct bulletin *bulletin)
{
    const struct sentence_view *view = bulletin->view;
    const struct passage *passage = sentence_closing(view);
    if (passage == NULL)
        return;
    const struct settings_mark *known = &view->known->marks[view->known->closing_mark];
    char name[SENTENCE_WORDS_SIZE];
    char depth[SENTENCE_NUMBER_SIZE];
    char runs[SENTENCE_WORDS_SIZE];
    char times[3][SENTENCE_WORDS_SIZE];
    sentence_name(known->name, MARK_MOST, name, sizeof name);
    if (name[0] >= 'a' && name[0] <= 'z')
        name[0] = (char)(name[0] - 'a' + 'A');
    char mark[SENTENCE_WORDS_SIZE];
    sentence_words(view, WORD_CLOSING, (struct sentence_field[]){{"mark", name}, {0}}, mark, sizeof mark);
    say(bulletin, passage->earliest_utc_s == PASSAGE_NEVER ? RESTS_MARK_NEVER : RESTS_MARK,
        (struct sentence_field[]){{"mark", mark},
                                  {"depth", sentence_metres(known->depth_m, depth)},
                                  {"earliest", passage_moment(view, passage->earliest_utc_s, times[0])},
                                  {"likely", passage_moment(view, passage->likely_utc_s, times[1])},
                                  {"latest", passage_moment(view, passage->latest_utc_s, times[2])},
                                  {"runs", sentence_runs(view, passage->chance, runs)},
                                  {0}});
}

/* 0.8 and 1.0, but 0.85 */
static int decimals_of(double factor)
{
    return fabs(factor * 10.0 - round(factor * 10.0)) < 1e-6 ? 1 : 2;
}

/* All of the factors, which rise; at the least detail of many the ends alone. */
static void list_roughness(const struct bulletin *bulletin, struct text *out)
{
    const struct settings *settings = bulletin->view->settings;
    size_t count = settings->roughness_factor_count;
    bool is_cut = bulletin->detail == DETAIL_LEAST && count > 3;
    for (size_t i = 0; i < count; i++) {
        if (is_cut && i > 0 && i + 1 < count)
            continue;
        text_add(out, "%s%.*f",
                 i == 0   ? ""
                 : is_cut ? " .. "
                          : " ",
                 decimals_of(settings->roughness_factors[i]), settings->roughness_factors[i]);
    }
}

static void add_measured(struct bulletin *bulletin)
{
    const struct sentence_view *view = bulletin->view;
    char until[SENTENCE_MOMENT_SIZE];
    char share[24];
    struct text roughness = {0};
    list_roughness(bulletin, &roughness);
    snprintf(share, sizeof share, "%.0f", 100.0 * view->state->unmeasured_share);
    char replaced[24];
    snprintf(replaced, sizeof replaced, "%.1f", fmax(0.1, 100.0 * view->picture->replaced_share));
    const struct sentence_field fields[] = {
        {"until", sentence_moment(view, view->state->measured_until_utc_s, until)},
        {"roughness", text_string(&roughness)},
        {"share", share},
        {"replaced", replaced},
        {0}};
    struct text paragraph = {0};
    bool never_parts = view->state->measured_until_utc_s == PASSAGE_NEVER;
    enum sentence_id id = never_parts                        ? RESTS_ALL_MEASURED
                          : bulletin->detail == DETAIL_LEAST ? RESTS_MEASURED_BRIEF
                                                             : RESTS_MEASURED;
    fill(&paragraph, bulletin, id, fields);
    if (view->state->unmeasured_share >= 0.005)
        fill(&paragraph, bulletin, RESTS_SHARE, fields);
    if (view->picture->replaced_share > 0.0)
        fill(&paragraph, bulletin, RESTS_REPLACED, fields);
    text_clear(&roughness);
    end_paragraph(bulletin, &paragraph);
}

static void add_stage_rating(struct bulletin *bulletin)
{
    struct text paragraph = {0};
    bulletin_deck_add_rating(bulletin->view, bulletin->detail == DETAIL_LEAST, bulletin->detail >= DETAIL_RUN_ON,
                             &paragraph);
    if (paragraph.length > 0 || paragraph.is_short)
        end_paragraph(bulletin, &paragraph);
}

static void add_deck(struct bulletin *bulletin)
{
    struct text paragraph = {0};
    bulletin_deck_add(bulletin->view, bulletin->detail < DETAIL_RUN_ON, &paragraph);
    if (paragraph.length > 0 || paragraph.is_short)
        end_paragraph(bulletin, &paragraph);
}

static void add_rests(struct bulletin *bulletin)
{
    add_gauges(bulletin);
    if (bulletin->view->state->is_unknown) {
        char place[SENTENCE_WORDS_SIZE];
        sentence_name(bulletin->view->known->name, place_most(bulletin), place, sizeof place);
        say(bulletin, RESTS_UNKNOWN, (struct sentence_field[]){{"place", place}, {0}});
        return;
    }
    add_levels(bulletin);
    add_closing_mark(bulletin);
    add_deck(bulletin);
    add_measured(bulletin);
    add_stage_rating(bulletin);
}

/* --- (4) what would change it, (5) what it cannot see --- */

static void add_changes(struct bulletin *bulletin)
{
    const struct sentence_view *view = bulletin->view;
    char name[SENTENCE_WORDS_SIZE] = "-";
    char by[SENTENCE_MOMENT_SIZE];
    char next[SENTENCE_MOMENT_SIZE];
    char shift[24];
    size_t index = 0;
    const struct gauge_picture *gauge = sentence_gauge(view, &index);
    struct text paragraph = {0};
    fill(&paragraph, bulletin, CHANGES_TITLE, NULL);
    if (gauge != NULL)
        sentence_name(view->settings->gauges[index].name, place_most(bulletin), name, sizeof name);
    bool waits = gauge == NULL || gauge->is_blind || gauge->newest_utc_s == 0;
    int64_t limit_utc_s = waits ? PASSAGE_NEVER : gauge->newest_utc_s + gauge->blind_limit_s;
    snprintf(shift, sizeof shift, "%.0f", view->known->policy.act_by_shift_s / 60.0);
    const struct sentence_field fields[] = {{"gauge", name},
                                            {"by", sentence_moment(view, limit_utc_s, by)},
                                            {"shift", shift},
                                            {"next", sentence_moment(view, sentence_next_look_utc_s(view), next)},
                                            {0}};
    fill(&paragraph, bulletin, waits ? CHANGES_READING : CHANGES_NO_READING, fields);
    fill(&paragraph, bulletin, bulletin->detail > DETAIL_LEAST ? CHANGES_OTHERS : CHANGES_END, fields);
    fill(&paragraph, bulletin, CHANGES_NEXT_LOOK, fields);
    end_paragraph(bulletin, &paragraph);
}

static void add_unseen(struct bulletin *bulletin)
{
    const struct settings_point *known = bulletin->view->known;
    struct text own = {0};
    for (size_t i = 0; i < known->cannot_see_count && bulletin->detail > DETAIL_LEAST; i++) {
        char item[SENTENCE_WORDS_SIZE];
        sentence_name(known->cannot_see[i], 100, item, sizeof item);
        if (own.length + strlen(item) > OWN_UNSEEN_MOST) {
            text_add(&own, "; ...");
            break;
        }
        text_add(&own, "; %s", item);
    }
    say(bulletin, UNSEEN, (struct sentence_field[]){{"own", text_string(&own)}, {0}});
    bulletin->page.is_short |= own.is_short;
    text_clear(&own);
}

/* --- (6) who has been told, and what people said --- */

static void add_recipients(struct bulletin *bulletin, struct text *out)
{
    const struct settings *settings = bulletin->view->settings;
    char role[SENTENCE_WORDS_SIZE];
    struct text channels = {0};
    if (settings->role_count == 0) {
        fill(out, bulletin, TOLD_NOBODY_SET, NULL);
        return;
    }
    for (size_t i = 0; i < settings->roster[0].to_count && i < (bulletin->detail == DETAIL_LEAST ? 2u : 4u); i++) {
        char channel[SENTENCE_WORDS_SIZE];
        sentence_name(settings->channels[settings->roster[0].to[i]].id, role_most(bulletin), channel, sizeof channel);
        text_add(&channels, "%s%s", i > 0 ? ", " : "", channel);
    }
    sentence_name(settings->roster[0].role, role_most(bulletin), role, sizeof role);
    fill(out, bulletin, TOLD_TO,
         (struct sentence_field[]){{"role", role}, {"channels", text_string(&channels)}, {0}});
    text_clear(&channels);
}

/* How the newest messages of this thread went; those just being made are not in the outbox yet. */
static void add_deliveries(struct bulletin *bulletin, struct text *out)
{
    static const enum sentence_id states[] = {TOLD_WAITS, TOLD_UNDER_WAY, TOLD_SENT, TOLD_GIVEN_UP};
    const struct sentence_view *view = bulletin->view;
    size_t most = bulletin->detail >= DETAIL_RUN_ON ? 3 : bulletin->detail == DETAIL_LESS ? 2 : 0;
    for (size_t back = view->picture->outbox_count; back > 0 && most > 0; back--) {
        const struct message *message = &view->picture->outbox[back - 1];
        bool is_ours = message->point == (int32_t)view->point && message->number == view->number && view->number > 0;
        if (!is_ours || message->channel < 0 || (size_t)message->channel >= view->settings->channel_count)
            continue;
        char channel[SENTENCE_WORDS_SIZE];
        char at[SENTENCE_MOMENT_SIZE];
        char tries[24];
        sentence_name(view->settings->channels[message->channel].id, role_most(bulletin), channel, sizeof channel);
        snprintf(tries, sizeof tries, "%d", (int)message->tries);
        fill(out, bulletin, states[message->state],
             (struct sentence_field[]){{"channel", channel},
                                       {"at", sentence_moment(view, message->settled_utc_s, at)},
                                       {"tries", tries},
                                       {0}});
        most--;
    }
}

static void add_people(struct bulletin *bulletin, struct text *out)
{
    const struct sentence_view *view = bulletin->view;
    const struct point_picture *state = view->state;
    char by[3][SENTENCE_WORDS_SIZE];
    char at[3][SENTENCE_MOMENT_SIZE];
    char depth[24] = "-";
    if (isfinite(state->water.depth_cm) && fabs(state->water.depth_cm) < 1e6)
        snprintf(depth, sizeof depth, "%.0f", state->water.depth_cm);
    sentence_name(state->road.by, role_most(bulletin), by[0], sizeof by[0]);
    sentence_name(state->water.by, role_most(bulletin), by[1], sizeof by[1]);
    sentence_name(state->accepted_by, role_most(bulletin), by[2], sizeof by[2]);
    const struct sentence_field road[] = {{"road", view->words->road_word[state->road.state]},
                                          {"by", by[0]},
                                          {"at", sentence_moment(view, state->road.at_utc_s, at[0])},
                                          {0}};
    const struct sentence_field water[] = {
        {"depth", depth}, {"by", by[1]}, {"at", sentence_moment(view, state->water.at_utc_s, at[1])}, {0}};
    const struct sentence_field accepted[] = {
        {"by", by[2]}, {"at", sentence_moment(view, state->accepted_utc_s, at[2])}, {0}};
    fill(out, bulletin, state->road.at_utc_s != 0 ? PEOPLE_ROAD : PEOPLE_NO_ROAD, road);
    if (state->water.is_known)
        fill(out, bulletin,
             !state->water.is_wet              ? PEOPLE_DRY
             : isfinite(state->water.depth_cm) ? PEOPLE_WET_DEPTH
                                               : PEOPLE_WET,
             water);
    fill(out, bulletin, state->accepted_utc_s != 0 ? PEOPLE_ACCEPTED : PEOPLE_NOT_ACCEPTED, accepted);
}

static void add_told(struct bulletin *bulletin)
{
    struct text paragraph = {0};
    fill(&paragraph, bulletin, TOLD_TITLE, NULL);
    add_recipients(bulletin, &paragraph);
    add_deliveries(bulletin, &paragraph);
    add_people(bulletin, &paragraph);
    end_paragraph(bulletin, &paragraph);
}

/* --- (7) caution and record --- */

static void add_caution(struct bulletin *bulletin)
{
    const struct sentence_view *view = bulletin->view;
    char settings[16];
    char record[16];
    const char *link = view->picture->newest_link[0] != '\0' ? view->picture->newest_link : "-";
    snprintf(settings, sizeof settings, "%.8s", view->settings->digest[0] != '\0' ? view->settings->digest : "-");
    snprintf(record, sizeof record, "%.8s", link);
    struct text paragraph = {0};
    text_add(&paragraph, "(7) %s", SENTENCE_CAUTION);
    fill(&paragraph, bulletin, RECORD, (struct sentence_field[]){{"settings", settings}, {"record", record}, {0}});
    end_paragraph(bulletin, &paragraph);
}

/* --- the whole --- */

static void write_rest(struct bulletin *bulletin)
{
    add_rests(bulletin);
    end_section(bulletin);
    add_changes(bulletin);
    end_section(bulletin);
    add_unseen(bulletin);
    end_section(bulletin);
    add_told(bulletin);
    end_section(bulletin);
    add_caution(bulletin);
    end_section(bulletin);
}

/* The crossings' table takes the lines that the rest leaves. */
static bool write_bulletin(const struct sentence_view *view, enum detail detail, struct text *text_out)
{
    struct bulletin top = {.view = view, .detail = detail};
    struct bulletin rest = {.view = view, .detail = detail};
    add_head(&top);
    end_section(&top);
    add_what_to_do(&top);
    end_section(&top);
    write_rest(&rest);
    size_t taken = top.page.line_count + rest.page.line_count;
    size_t room = taken < LINE_MOST ? LINE_MOST - taken : 0;
    size_t wanted = detail == DETAIL_LEAST ? BULLETIN_TABLE_LEAST : bulletin_table_wish(view);
    bool fits = room >= wanted;
    if (fits || detail == DETAIL_LEAST)
        bulletin_table_add(view, room > BULLETIN_TABLE_LEAST ? room : BULLETIN_TABLE_LEAST, &top.page);
    text_add_bytes(&top.page.text, text_string(&rest.page.text), rest.page.text.length);
    text_out->is_short = top.page.is_short || rest.page.is_short || rest.page.text.is_short || top.page.text.is_short;
    text_clear(&rest.page.text);
    if (!fits && detail > DETAIL_LEAST && !text_out->is_short) {
        text_clear(&top.page.text);
        return false;
    }
    bool is_short = text_out->is_short;
    *text_out = top.page.text;
    text_out->is_short = is_short;
    return true;
}

enum fw_status sentence_bulletin(const struct settings *settings, const struct picture *picture,
                                 const struct decision *decision, struct text *text_out)
{
    struct sentence_view view = {0};
    if (!sentence_view_open(settings, picture, decision, &view))
        return FW_BAD_INPUT;
    struct text text = {0};
    for (size_t detail = DETAIL_COUNT; detail-- > 0;)
        if (write_bulletin(&view, (enum detail)detail, &text))
            break;
    sentence_view_clear(&view);
    if (text_status(&text) != FW_OK) {
        text_clear(&text);
        return FW_NO_MEMORY;
    }
    *text_out = text;
    return FW_OK;
}
