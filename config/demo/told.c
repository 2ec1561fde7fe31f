/* SPDX-License-Identifier: MIT */
#include "config/demo/told.h"

#include <errno.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include <cjson/cJSON.h>

#include "config/demo/night_script.h"
#include "config/demo/night_time.h"

static const char *text_in(const cJSON *object, const char *name)
{
    const char *text = cJSON_GetStringValue(cJSON_GetObjectItemCaseSensitive(object, name));
    return text != NULL ? text : "";
}

static int64_t time_in(const cJSON *object, const char *name)
{
    int64_t utc_s;
    return night_time_parse(text_in(object, name), &utc_s) ? utc_s : NIGHT_TIME_NEVER;
}

static void show(const struct told *told, const cJSON *message, int64_t world_utc_s)
{
    char clock[NIGHT_TIME_SIZE];
    const cJSON *number = cJSON_GetObjectItemCaseSensitive(message, "number");
    printf("\n%s  #%04d  %s\n", night_time_clock(world_utc_s, clock), cJSON_IsNumber(number) ? number->valueint : 0,
           text_in(message, "text"));
    if (!told->shows_bulletins)
        return;
    for (const char *line = text_in(message, "bulletin"); *line != '\0';) {
        size_t length = strcspn(line, "\n");
        printf("      | %.*s\n", (int)length, line);
        line += length + (line[length] == '\n');
    }
}

static void keep_first_send(struct told *told, const struct crossings *crossings, const cJSON *message)
{
    const char *level = text_in(message, "level");
    const char *id = text_in(cJSON_GetObjectItemCaseSensitive(message, "point"), "id");
    if (strcmp(level, "SEND") != 0 && strcmp(level, "LATE") != 0)
        return;
    for (size_t i = 0; i < crossings->count; i++) {
        struct told_send *send = &told->sends[i];
        if (strcmp(crossings->list[i].id, id) != 0 || send->is_told)
            continue;
        const cJSON *deck_wet = cJSON_GetObjectItemCaseSensitive(message, "deck_wet");
        *send = (struct told_send){.is_told = true,
                                   .made_utc_s = time_in(message, "made"),
                                   .act_by_utc_s = time_in(message, "act_by"),
                                   .deck_earliest_utc_s = time_in(deck_wet, "earliest"),
                                   .deck_likely_utc_s = time_in(deck_wet, "likely"),
                                   .deck_latest_utc_s = time_in(deck_wet, "latest")};
        snprintf(send->level, sizeof send->level, "%s", level);
    }
}

static void take_line(struct told *told, const struct crossings *crossings, const char *line, int64_t world_utc_s)
{
    cJSON *message = cJSON_Parse(line);
    if (!cJSON_IsObject(message) || strcmp(text_in(message, "schema"), "forewater.message.1") != 0) {
        told->unreadable_count++;
        fprintf(stderr, "play: the hook was given something else than a message: %.200s\n", line);
    } else {
        told->message_count++;
        show(told, message, world_utc_s);
        keep_first_send(told, crossings, message);
    }
    cJSON_Delete(message);
}

bool told_take_new(struct told *told, const struct crossings *crossings, int64_t world_utc_s)
{
    FILE *stream = fopen(TOLD_FILE, "r");
    if (stream == NULL && errno == ENOENT)
        return true;
    if (stream == NULL || fseek(stream, told->position, SEEK_SET) != 0) {
        fprintf(stderr, "play: " TOLD_FILE ": %s\n", strerror(errno));
        if (stream != NULL)
            fclose(stream);
        return false;
    }
    char *line = NULL;
    size_t size = 0;
    for (ssize_t length; (length = getline(&line, &size, stream)) > 0 && line[length - 1] == '\n';) {
        told->position += length;
        take_line(told, crossings, line, world_utc_s);
    }
    free(line);
    fclose(stream);
    fflush(stdout);
    return true;
}

bool told_print_table(const struct told *told, const struct crossings *crossings, const char *night_folder)
{
    printf("\n%-18s %-10s %-6s  %-23s  %-5s  %s\n", "crossing", "first SEND", "act by", "deck wet as forecast",
           "true", "margin");
    printf("%-18s %-10s %-6s  %-23s  %-5s  %s\n", "", "", "", "early / likely / late", "", "at the deck");
    for (size_t i = 0; i < crossings->count; i++) {
        const struct crossing *crossing = &crossings->list[i];
        const struct told_send *send = &told->sends[i];
        int64_t true_utc_s;
        char made[NIGHT_TIME_SIZE], act_by[NIGHT_TIME_SIZE], earliest[NIGHT_TIME_SIZE], likely[NIGHT_TIME_SIZE],
            latest[NIGHT_TIME_SIZE], wet[NIGHT_TIME_SIZE];
        if (!night_script_true_first(night_folder, crossing->id, crossing->deck_m, &true_utc_s))
            return false;
        if (!send->is_told) {
            printf("%-18s %-10s %-6s  %-23s  %-5s\n", crossing->name, "none", "-", "-",
                   night_time_clock(true_utc_s, wet));
            continue;
        }
        printf("%-18s %-10s %-6s  %5s / %5s / %5s    %-5s  ", crossing->name,
               night_time_clock(send->made_utc_s, made), night_time_clock(send->act_by_utc_s, act_by),
               night_time_clock(send->deck_earliest_utc_s, earliest),
               night_time_clock(send->deck_likely_utc_s, likely), night_time_clock(send->deck_latest_utc_s, latest),
               night_time_clock(true_utc_s, wet));
        if (true_utc_s == NIGHT_TIME_NEVER || send->made_utc_s == NIGHT_TIME_NEVER)
            puts("-");
        else
            printf("%+.0f min\n",
                   (double)(true_utc_s - send->made_utc_s - crossings_need_s(crossings, crossing, send->made_utc_s)) /
                       60.0);
    }
    puts("margin: deck wet in truth, less the first SEND, less the crew's time and margin as configured (night or "
         "day)");
    return true;
}
