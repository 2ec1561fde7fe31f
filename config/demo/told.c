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

void told_begin(struct told *told, bool shows_bulletins)
{
    *told = (struct told){.shows_bulletins = shows_bulletins};
    for (size_t i = 0; i < CROSSINGS_MAX; i++)
        told->crossings[i] = (struct told_crossing){NIGHT_TIME_NEVER, NIGHT_TIME_NEVER, NIGHT_TIME_NEVER,
                                                    NIGHT_TIME_NEVER, NIGHT_TIME_NEVER, NIGHT_TIME_NEVER};
}

static struct told_crossing *find(struct told *told, const struct crossings *crossings, const char *point_id)
{
    for (size_t i = 0; i < crossings->count; i++)
        if (strcmp(crossings->list[i].id, point_id) == 0)
            return &told->crossings[i];
    return NULL;
}

void told_shut(struct told *told, const struct crossings *crossings, const char *point_id, int64_t at_utc_s)
{
    struct told_crossing *crossing = find(told, crossings, point_id);
    if (crossing != NULL && crossing->shut_utc_s == NIGHT_TIME_NEVER)
        crossing->shut_utc_s = at_utc_s;
}

static void keep(struct told *told, const struct crossings *crossings, const cJSON *message)
{
    const char *level = text_in(message, "level");
    bool sends = strcmp(level, "SEND") == 0 || strcmp(level, "LATE") == 0;
    const cJSON *deck_wet = cJSON_GetObjectItemCaseSensitive(message, "deck_wet");
    struct told_crossing *crossing =
        find(told, crossings, text_in(cJSON_GetObjectItemCaseSensitive(message, "point"), "id"));
    if (crossing == NULL || crossing->shut_utc_s != NIGHT_TIME_NEVER || !(sends || strcmp(level, "MUSTER") == 0))
        return;
    crossing->act_by_utc_s = time_in(message, "act_by");
    crossing->deck_earliest_utc_s = time_in(deck_wet, "earliest");
    crossing->deck_likely_utc_s = time_in(deck_wet, "likely");
    crossing->deck_latest_utc_s = time_in(deck_wet, "latest");
    if (sends && crossing->first_send_utc_s == NIGHT_TIME_NEVER)
        crossing->first_send_utc_s = time_in(message, "made");
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
        keep(told, crossings, message);
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

static const char *minutes(int64_t from_utc_s, int64_t to_utc_s, char text[24])
{
    if (from_utc_s == NIGHT_TIME_NEVER || to_utc_s == NIGHT_TIME_NEVER)
        snprintf(text, 24, "-");
    else
        snprintf(text, 24, "%+lld min", (long long)(to_utc_s - from_utc_s) / 60);
    return text;
}

bool told_print_table(const struct told *told, const struct crossings *crossings, const char *night_folder)
{
    printf("\n%-18s %-10s %-6s  %-23s  %-5s  %-8s  %-5s  %s\n", "crossing", "first SEND", "act by",
           "deck wet, as last said", "true", "margin", "shut", "before water");
    for (size_t i = 0; i < crossings->count; i++) {
        const struct crossing *crossing = &crossings->list[i];
        const struct told_crossing *said = &told->crossings[i];
        char clocks[7][NIGHT_TIME_SIZE];
        char margin[24];
        char dry[24];
        int64_t wet_utc_s;
        if (!night_script_true_first(night_folder, crossing->id, crossing->deck_m, &wet_utc_s))
            return false;
        int64_t closed_by_utc_s =
            said->first_send_utc_s == NIGHT_TIME_NEVER
                ? NIGHT_TIME_NEVER
                : said->first_send_utc_s + crossings_need_s(crossings, crossing, said->first_send_utc_s);
        printf("%-18s %-10s %-6s  %5s / %5s / %-7s  %-5s  %-8s  %-5s  %s\n", crossing->name,
               night_time_clock(said->first_send_utc_s, clocks[0]), night_time_clock(said->act_by_utc_s, clocks[1]),
               night_time_clock(said->deck_earliest_utc_s, clocks[2]),
               night_time_clock(said->deck_likely_utc_s, clocks[3]),
               night_time_clock(said->deck_latest_utc_s, clocks[4]), night_time_clock(wet_utc_s, clocks[5]),
               minutes(closed_by_utc_s, wet_utc_s, margin), night_time_clock(said->shut_utc_s, clocks[6]),
               minutes(said->shut_utc_s, wet_utc_s, dry));
    }
    puts("as last said: in the crossing's own messages before people shut it (what rode in another's is in its "
         "bulletin); earliest / likely / latest, '-' is "
         "never "
         "within the horizon\n"
         "margin: deck wet in truth, less the first SEND, less the crew's time and margin as configured (night or "
         "day)");
    return true;
}
