/* SPDX-License-Identifier: MIT */
#include "daemon/command/replay_report.h"

#include <stdio.h>
#include <stdlib.h>

#include "daemon/command/command.h"
#include "daemon/tell/sentence.h"

enum fw_status replay_report_open(struct replay_report *report, const struct settings *settings, bool is_json)
{
    *report = (struct replay_report){.is_json = is_json};
    report->rows = calloc(settings->point_count + 1, sizeof *report->rows);
    if (report->rows == NULL)
        return FW_NO_MEMORY;
    for (size_t point = 0; point < settings->point_count; point++)
        report->rows[point] = (struct replay_row){
            PASSAGE_NEVER, 0, PASSAGE_NEVER, PASSAGE_NEVER, PASSAGE_NEVER, PASSAGE_NEVER, PASSAGE_NEVER};
    if (!is_json) {
        printf("REPLAY of past readings, %s, settings %.8s. Nothing is being sent.\n", settings->district_name,
               settings->digest);
        command_print_caution();
        printf("\n");
    }
    return FW_OK;
}

static const char *json_time(int64_t utc_s, char text[WHEN_TEXT_SIZE + 2])
{
    char bare[WHEN_TEXT_SIZE];
    if (utc_s == PASSAGE_NEVER || utc_s == 0)
        snprintf(text, WHEN_TEXT_SIZE + 2, "null");
    else
        snprintf(text, WHEN_TEXT_SIZE + 2, "\"%s\"", when_rfc3339_utc(utc_s, bare));
    return text;
}

static void print_json(const struct settings *settings, const struct picture *picture,
                       const struct decision *decision)
{
    char times[5][WHEN_TEXT_SIZE + 2];
    const struct settings_point *known = &settings->points[decision->point];
    const struct passage *deck = &picture->points[decision->point].marks[known->deck_mark].passage;
    printf("{\"schema\":\"forewater.decision.1\",\"at\":%s,\"point\":\"%s\",\"number\":%lld,\"before\":\"%s\","
           "\"advice\":\"%s\",\"wakes\":%s,\"blind\":%s,\"near_sides_only\":%s,\"act_by\":%s,\"deck_earliest\":%s,"
           "\"deck_likely\":%s,\"deck_latest\":%s,\"chance\":%.4f}\n",
           json_time(picture->as_of_utc_s, times[0]), known->id, (long long)decision->message_number,
           advice_level_name(decision->before.level), advice_level_name(decision->after.level),
           decision->wakes ? "true" : "false", decision->after.is_blind ? "true" : "false",
           decision->after.near_sides_only ? "true" : "false", json_time(decision->after.act_by_utc_s, times[1]),
           json_time(deck->earliest_utc_s, times[2]), json_time(deck->likely_utc_s, times[3]),
           json_time(deck->latest_utc_s, times[4]), deck->chance);
}

/* Until people have shut it, and while the ladder speaks of it. */
static void note_decision(struct replay_report *report, const struct settings *settings,
                          const struct picture *picture, const struct decision *decision)
{
    struct replay_row *row = &report->rows[decision->point];
    enum advice_level level = decision->after.level;
    if (row->shut_utc_s != PASSAGE_NEVER || level == ADVICE_QUIET || level > ADVICE_LATE)
        return;
    const struct settings_point *known = &settings->points[decision->point];
    const struct passage *deck = &picture->points[decision->point].marks[known->deck_mark].passage;
    row->act_by_utc_s = decision->after.act_by_utc_s;
    row->earliest_utc_s = deck->earliest_utc_s;
    row->likely_utc_s = deck->likely_utc_s;
    row->latest_utc_s = deck->latest_utc_s;
    if (level >= ADVICE_SEND && row->first_send_utc_s == PASSAGE_NEVER) {
        bool is_night = when_is_between(when_minute_of_day(&settings->zone, picture->as_of_utc_s),
                                        settings->night_from_minute, settings->night_to_minute);
        row->first_send_utc_s = picture->as_of_utc_s;
        row->need_s =
            (int64_t)((is_night ? known->policy.crew_night_s : known->policy.crew_day_s) + known->policy.margin_s);
    }
}

static void note_words(struct replay_report *report, const struct settings *settings, const struct delta *delta)
{
    for (size_t index = 0; index < delta->word_count; index++) {
        const struct word *word = &delta->words[index];
        size_t point = settings_point_index(settings, word->subject);
        if (word->kind == WORD_ROAD && word->road == ROAD_SHUT && point != SETTINGS_NONE &&
            report->rows[point].shut_utc_s == PASSAGE_NEVER)
            report->rows[point].shut_utc_s = word->at_utc_s;
    }
}

void replay_report_decisions(struct replay_report *report, const struct settings *settings,
                             const struct picture *picture, const struct delta *delta)
{
    note_words(report, settings, delta);
    for (size_t index = 0; index < delta->decision_count; index++) {
        const struct decision *decision = &delta->decisions[index];
        if (report->is_json) {
            print_json(settings, picture, decision);
        } else {
            struct text line = {0};
            sentence_change(settings, picture, decision, &line);
            printf("%s\n", text_string(&line));
            text_clear(&line);
        }
        note_decision(report, settings, picture, decision);
        report->message_count += decision->is_headline;
        report->wake_count += decision->is_headline && decision->wakes;
    }
    report->decision_count += delta->decision_count;
}

static const char *minutes(int64_t from_utc_s, int64_t to_utc_s, char text[32])
{
    if (from_utc_s == PASSAGE_NEVER || to_utc_s == PASSAGE_NEVER)
        snprintf(text, 32, "-");
    else
        snprintf(text, 32, "%+lld min", (long long)((to_utc_s - from_utc_s) / 60));
    return text;
}

static void print_row(const struct settings *settings, const struct settings_point *known,
                      const struct replay_row *row, const struct replay_truth *truth)
{
    char times[7][WHEN_TEXT_SIZE];
    char margin[32];
    char dry[32];
    const struct when_zone *zone = &settings->zone;
    bool is_known = truth != NULL && truth->count > 0;
    int64_t wet_utc_s =
        is_known ? replay_truth_passage(truth, known->marks[known->deck_mark].depth_m, 0) : PASSAGE_NEVER;
    int64_t closed_by_utc_s =
        row->first_send_utc_s == PASSAGE_NEVER ? PASSAGE_NEVER : row->first_send_utc_s + row->need_s;
    printf("%-20s %-11s %-7s %5s / %5s / %-9s %-9s %-9s %-7s %s\n", known->name,
           when_clock(zone, row->first_send_utc_s, times[0]), when_clock(zone, row->act_by_utc_s, times[1]),
           when_clock(zone, row->earliest_utc_s, times[2]), when_clock(zone, row->likely_utc_s, times[3]),
           when_clock(zone, row->latest_utc_s, times[4]),
           is_known ? when_clock(zone, wet_utc_s, times[5]) : "unknown", minutes(closed_by_utc_s, wet_utc_s, margin),
           when_clock(zone, row->shut_utc_s, times[6]), minutes(row->shut_utc_s, wet_utc_s, dry));
}

void replay_report_close(struct replay_report *report, const struct settings *settings, const struct picture *picture,
                         const struct replay_truth truth[])
{
    if (report->is_json)
        return;
    printf("\n%-20s %-11s %-7s %-25s %-9s %-9s %-7s %s\n", "crossing", "first SEND", "act by",
           "deck wet, as last said", "deck wet", "margin", "shut", "before water");
    for (size_t point = 0; point < settings->point_count; point++)
        if (settings->points[point].has_crew)
            print_row(settings, &settings->points[point], &report->rows[point], truth != NULL ? &truth[point] : NULL);
    printf(
        "As last said before both sides were shut: earliest / likely / latest over all runs; '-' is never within the "
        "horizon.\n"
        "margin = true deck wet - first SEND - (crew time + margin as stated then); shut = both sides, people's "
        "word.\n"
        "%zu changes of decision, %zu messages, %zu of them to wake someone; record %.16s\n",
        report->decision_count, report->message_count, report->wake_count, picture->newest_link);
}

void replay_report_clear(struct replay_report *report)
{
    free(report->rows);
}
