/* SPDX-License-Identifier: MIT */
#include "config/demo/crossings.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

#include <cjson/cJSON.h>

#include "config/demo/night_time.h"

static double number_in(const cJSON *object, const char *name)
{
    const cJSON *item = cJSON_GetObjectItemCaseSensitive(object, name);
    return cJSON_IsNumber(item) ? item->valuedouble : (double)NAN;
}

static bool copy_text(const cJSON *object, const char *name, char *text_out, size_t size)
{
    const char *text = cJSON_GetStringValue(cJSON_GetObjectItemCaseSensitive(object, name));
    return text != NULL && snprintf(text_out, size, "%s", text) < (int)size;
}

static double deck_of(const cJSON *marks)
{
    const cJSON *mark = NULL;
    cJSON_ArrayForEach(mark, marks)
    {
        if (cJSON_IsTrue(cJSON_GetObjectItemCaseSensitive(mark, "deck")))
            return number_in(mark, "depth_m");
    }
    return (double)NAN;
}

static bool read_crossing(const cJSON *point, struct crossing *crossing_out)
{
    const cJSON *crew = cJSON_GetObjectItemCaseSensitive(point, "crew");
    crossing_out->deck_m = deck_of(cJSON_GetObjectItemCaseSensitive(point, "marks"));
    crossing_out->day_min = number_in(crew, "day_min");
    crossing_out->night_min = number_in(crew, "night_min");
    crossing_out->margin_min = number_in(crew, "margin_min");
    return copy_text(point, "id", crossing_out->id, sizeof crossing_out->id) &&
           copy_text(point, "name", crossing_out->name, sizeof crossing_out->name) &&
           isfinite(crossing_out->deck_m + crossing_out->day_min + crossing_out->night_min +
                    crossing_out->margin_min);
}

static bool read_clock(const cJSON *item, int *minute_out)
{
    int hour, minute;
    const char *text = cJSON_GetStringValue(item);
    if (text == NULL || sscanf(text, "%2d:%2d", &hour, &minute) != 2)
        return false;
    *minute_out = hour * 60 + minute;
    return true;
}

static bool read_tree(const cJSON *tree, struct crossings *crossings_out)
{
    const cJSON *night =
        cJSON_GetObjectItemCaseSensitive(cJSON_GetObjectItemCaseSensitive(tree, "district"), "night");
    double every_min = number_in(cJSON_GetObjectItemCaseSensitive(tree, "forecast"), "every_min");
    if (!(every_min >= 1.0) || !read_clock(cJSON_GetArrayItem(night, 0), &crossings_out->night_from_minute) ||
        !read_clock(cJSON_GetArrayItem(night, 1), &crossings_out->night_to_minute))
        return false;
    crossings_out->cycle_s = (int64_t)(every_min * 60.0);
    const cJSON *point = NULL;
    cJSON_ArrayForEach(point, cJSON_GetObjectItemCaseSensitive(tree, "points"))
    {
        if (crossings_out->count == CROSSINGS_MAX ||
            !read_crossing(point, &crossings_out->list[crossings_out->count++]))
            return false;
    }
    return crossings_out->count > 0;
}

bool crossings_read(char *text, struct crossings *crossings_out)
{
    struct crossings crossings = {.count = 0};
    cJSON_Minify(text); /* takes the comments out */
    cJSON *tree = cJSON_Parse(text);
    bool is_read = tree != NULL && read_tree(tree, &crossings);
    cJSON_Delete(tree);
    if (!is_read) {
        fputs(
            "play: the configuration lacks what the player needs: district.night, forecast.every_min and, of every\n"
            "point, id, name, a mark with \"deck\": true, and crew\n",
            stderr);
        return false;
    }
    *crossings_out = crossings;
    return true;
}

int64_t crossings_need_s(const struct crossings *crossings, const struct crossing *crossing, int64_t sent_utc_s)
{
    int minute = 0, hour = 0;
    char clock[NIGHT_TIME_SIZE];
    sscanf(night_time_clock(sent_utc_s, clock), "%2d:%2d", &hour, &minute);
    minute += 60 * hour;
    int from = crossings->night_from_minute, to = crossings->night_to_minute;
    bool is_night = from <= to ? minute >= from && minute < to : minute >= from || minute < to;
    return (int64_t)(60.0 * ((is_night ? crossing->night_min : crossing->day_min) + crossing->margin_min));
}
