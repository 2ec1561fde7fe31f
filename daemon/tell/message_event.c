/* SPDX-License-Identifier: MIT */
#include "daemon/tell/message_event.h"

#include <string.h>

#include <cjson/cJSON.h>

#include "daemon/tell/sentence.h"
#include "daemon/when.h"

const char *message_kind_name(enum message_kind kind)
{
    return kind == MESSAGE_DECISION ? "decision" : "notice";
}

static bool add_point(cJSON *event, const struct settings *settings, int32_t point)
{
    if (point < 0 || (size_t)point >= settings->point_count)
        return cJSON_AddNullToObject(event, "point") != NULL;
    cJSON *place = cJSON_AddObjectToObject(event, "point");
    return place != NULL && cJSON_AddStringToObject(place, "id", settings->points[point].id) != NULL &&
           cJSON_AddStringToObject(place, "name", settings->points[point].name) != NULL;
}

static bool add_moment(cJSON *object, const struct settings *settings, const char *name, int64_t utc_s)
{
    char text[WHEN_TEXT_SIZE];
    if (utc_s == PASSAGE_NEVER)
        return cJSON_AddNullToObject(object, name) != NULL;
    return cJSON_AddStringToObject(object, name, when_rfc3339_local(&settings->zone, utc_s, text)) != NULL;
}

/* The decision in numbers, for a hook that chooses how to deliver by it. */
static bool add_decision(cJSON *event, const struct settings *settings, const struct message *message)
{
    if (cJSON_AddBoolToObject(event, "wakes", message->wakes) == NULL ||
        cJSON_AddStringToObject(event, "level", advice_level_name(message->level)) == NULL ||
        !add_moment(event, settings, "act_by", message->act_by_utc_s))
        return false;
    cJSON *deck_wet = cJSON_AddObjectToObject(event, "deck_wet");
    return deck_wet != NULL && add_moment(deck_wet, settings, "earliest", message->deck_earliest_utc_s) &&
           add_moment(deck_wet, settings, "likely", message->deck_likely_utc_s) &&
           add_moment(deck_wet, settings, "latest", message->deck_latest_utc_s);
}

enum fw_status message_event_write(const struct settings *settings, const struct message *message, int64_t now_utc_s,
                                   struct text *json_out)
{
    char made[WHEN_TEXT_SIZE];
    when_rfc3339_local(&settings->zone, message->made_utc_s, made);
    int64_t delayed_s = now_utc_s > message->made_utc_s ? now_utc_s - message->made_utc_s : 0;
    const char *bulletin = message->bulletin != NULL ? message->bulletin : "";
    cJSON *event = cJSON_CreateObject();
    bool is_whole = event != NULL && cJSON_AddStringToObject(event, "schema", MESSAGE_EVENT_SCHEMA) != NULL &&
                    cJSON_AddStringToObject(event, "id", message->id) != NULL &&
                    cJSON_AddNumberToObject(event, "number", (double)message->number) != NULL &&
                    cJSON_AddStringToObject(event, "kind", message_kind_name(message->kind)) != NULL &&
                    cJSON_AddStringToObject(event, "district", settings->district_name) != NULL &&
                    add_point(event, settings, message->point) &&
                    cJSON_AddStringToObject(event, "made", made) != NULL && add_decision(event, settings, message) &&
                    cJSON_AddStringToObject(event, "text", message->short_text) != NULL &&
                    cJSON_AddStringToObject(event, "bulletin", bulletin) != NULL &&
                    cJSON_AddStringToObject(event, "caution", SENTENCE_CAUTION) != NULL &&
                    cJSON_AddFalseToObject(event, "exercise") != NULL &&
                    cJSON_AddNumberToObject(event, "try", message->tries) != NULL &&
                    cJSON_AddNumberToObject(event, "delayed_s", (double)delayed_s) != NULL;
    char *printed = is_whole ? cJSON_PrintUnformatted(event) : NULL;
    struct text json = {0};
    if (printed != NULL) {
        text_add_bytes(&json, printed, strlen(printed));
        text_add_bytes(&json, "\n", 1);
    }
    cJSON_free(printed);
    cJSON_Delete(event);
    if (json.length == 0 || text_status(&json) != FW_OK) {
        text_clear(&json);
        return FW_NO_MEMORY;
    }
    *json_out = json;
    return FW_OK;
}
