/* SPDX-License-Identifier: MIT */
#include "daemon/feed/word.h"

#include <limits.h>
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "daemon/feed/json_text.h"
#include "daemon/feed/news.h"
#include "daemon/feed/quantity.h"

#define LAST_MOMENT_UTC_S INT64_C(253402300799) /* the end of the year 9999 */
enum { AHEAD_LIMIT_S = 300, DEEPEST_CM = 2000 };

static const char *const kind_names[] = {"accept", "reading", "seen", "road", "note"};
enum { KIND_COUNT = sizeof kind_names / sizeof kind_names[0] };

static bool kind_from_name(const char *name, enum word_kind *kind_out)
{
    for (int i = 0; i < KIND_COUNT; i++) {
        if (strcmp(kind_names[i], name) == 0) {
            *kind_out = (enum word_kind)i;
            return true;
        }
    }
    return false;
}

/* --- what must be true --- */

static bool is_printable(const char *text)
{
    char copy[FACT_NOTE_SIZE];
    snprintf(copy, sizeof copy, "%s", text);
    news_make_printable(copy);
    return strcmp(copy, text) == 0;
}

static void list_gauges(const struct settings *settings, struct text *list)
{
    for (size_t i = 0; i < settings->gauge_count; i++)
        text_add(list, "%s%s", i > 0 ? ", " : "", settings->gauges[i].id);
}

static void list_points(const struct settings *settings, struct text *list)
{
    for (size_t i = 0; i < settings->point_count; i++)
        text_add(list, "%s%s", i > 0 ? ", " : "", settings->points[i].id);
}

static enum fw_status check_gauge_word(const struct settings *settings, const struct word *word,
                                       struct fw_error *error)
{
    double value_si;
    size_t index = settings_gauge_index(settings, word->subject);
    if (index == SETTINGS_NONE) {
        struct text known = {0};
        list_gauges(settings, &known);
        fw_error_set(error, FW_BAD_INPUT, "'%s' is not a gauge; expected one of: %.600s", word->subject,
                     text_string(&known));
        text_clear(&known);
        return FW_BAD_INPUT;
    }
    if (!isfinite(word->value))
        return fw_error_set(error, FW_BAD_INPUT, "a reading of '%s' needs a number", word->subject);
    if (quantity_to_si(word->value, word->unit, settings->gauges[index].measures, &value_si) != FW_OK)
        return fw_error_set(error, FW_BAD_INPUT, "'%s' is not a unit of gauge '%s'; expected %s", word->unit,
                            word->subject, quantity_known_units(settings->gauges[index].measures));
    return FW_OK;
}

static enum fw_status check_point_word(const struct settings *settings, const struct word *word,
                                       struct fw_error *error)
{
    if (settings_point_index(settings, word->subject) == SETTINGS_NONE) {
        struct text known = {0};
        list_points(settings, &known);
        fw_error_set(error, FW_BAD_INPUT, "'%s' is not a point; expected one of: %.600s", word->subject,
                     text_string(&known));
        text_clear(&known);
        return FW_BAD_INPUT;
    }
    bool has_depth = word->kind == WORD_SEEN && word->is_wet && !isnan(word->value);
    if (has_depth && !(word->value >= 0.0 && word->value <= DEEPEST_CM))
        return fw_error_set(error, FW_BAD_INPUT, "%.10g cm of water; expected 0 to %d", word->value, DEEPEST_CM);
    return FW_OK;
}

static enum fw_status check_accept_word(const struct word *word, struct fw_error *error)
{
    size_t length = strlen(word->subject);
    if (length > 12 || strspn(word->subject, "0123456789") != length)
        return fw_error_set(error, FW_BAD_INPUT, "'%s' is not the number of a message; expected one as #0412",
                            word->subject);
    return FW_OK;
}

static bool is_id(const char *id)
{
    static const char allowed[] = "ABCDEFGHIJKLMNOPQRSTUVWXYZabcdefghijklmnopqrstuvwxyz0123456789_-";
    return strspn(id, allowed) == strlen(id);
}

enum fw_status word_check(const struct settings *settings, const struct word *word, struct fw_error *error)
{
    if (!is_id(word->id))
        return fw_error_set(error, FW_BAD_INPUT, "id '%s'; expected letters, digits, '-' and '_'", word->id);
    if (word->by[0] == '\0' || !is_printable(word->by))
        return fw_error_set(error, FW_BAD_INPUT, "who says so is missing; expected a role, as 'roads foreman'");
    if (word->at_utc_s < 0 || word->at_utc_s > LAST_MOMENT_UTC_S)
        return fw_error_set(error, FW_BAD_INPUT, "its time is outside the years 1970 to 9999");
    switch (word->kind) {
    case WORD_ACCEPT:
        return check_accept_word(word, error);
    case WORD_READING:
        return check_gauge_word(settings, word, error);
    case WORD_SEEN:
    case WORD_ROAD:
        return check_point_word(settings, word, error);
    case WORD_NOTE:
        if (word->text[0] == '\0' || !is_printable(word->text))
            return fw_error_set(error, FW_BAD_INPUT, "a note needs a text without control characters");
        return FW_OK;
    }
    return fw_error_set(error, FW_BAD_INPUT, "unknown kind of word");
}

/* --- a command line --- */

struct command_line {
    int count;
    char *const *all;
    const char *by, *at, *unit;
    bool both_sides;
};

/* Is this one an option (then *value is its value behind '=', or NULL)? A lone "--" ends them; "-0.4" is a number. */
static bool is_option(const char *argument, const char *name, const char **value)
{
    size_t length = strlen(name);
    if (strncmp(argument, name, length) != 0 || (argument[length] != '\0' && argument[length] != '='))
        return false;
    *value = argument[length] == '=' ? argument + length + 1 : NULL;
    return true;
}

/*
 * The next argument that is no option, from *cursor on, or NULL; options on the way are taken into the line. What
 * follows a lone "--" is no option.
 */
static enum fw_status next_argument(struct command_line *line, int *cursor, bool *is_over, const char **argument_out,
                                    struct fw_error *error)
{
    *argument_out = NULL;
    while (*cursor < line->count) {
        const char *argument = line->all[(*cursor)++];
        if (*is_over || strncmp(argument, "--", 2) != 0) {
            *argument_out = argument;
            return FW_OK;
        }
        const char *value = NULL;
        const char **kept = is_option(argument, "--by", &value)     ? &line->by
                            : is_option(argument, "--at", &value)   ? &line->at
                            : is_option(argument, "--unit", &value) ? &line->unit
                                                                    : NULL;
        if (kept != NULL) {
            if (value == NULL && *cursor < line->count)
                value = line->all[(*cursor)++];
            if (value == NULL || value[0] == '\0')
                return fw_error_set(error, FW_USAGE, "%s needs a value", argument);
            *kept = value;
        } else if (strcmp(argument, "--both-sides") == 0) {
            line->both_sides = true;
        } else if (argument[2] == '\0') {
            *is_over = true;
        } else {
            return fw_error_set(error, FW_USAGE, "unknown option %s; expected --by, --at, --unit or --both-sides",
                                argument);
        }
    }
    return FW_OK;
}

enum { ARGUMENT_LIMIT = 4 }; /* of a word other than a note; the state of a road may be three */

struct arguments {
    const char *first[ARGUMENT_LIMIT];
    int count;               /* of all */
    struct text from_second; /* from the second on, with blanks between */
    struct text from_third;
};

static enum fw_status split_command_line(struct command_line *line, struct arguments *arguments,
                                         struct fw_error *error)
{
    int cursor = 0;
    bool is_over = false;
    for (;;) {
        const char *argument;
        enum fw_status status = next_argument(line, &cursor, &is_over, &argument, error);
        if (status != FW_OK)
            return status;
        if (argument == NULL)
            break;
        if (arguments->count < ARGUMENT_LIMIT)
            arguments->first[arguments->count] = argument;
        if (arguments->count >= 1)
            text_add(&arguments->from_second, "%s%s", arguments->count > 1 ? " " : "", argument);
        if (arguments->count >= 2)
            text_add(&arguments->from_third, "%s%s", arguments->count > 2 ? " " : "", argument);
        arguments->count++;
    }
    if (text_status(&arguments->from_second) != FW_OK || text_status(&arguments->from_third) != FW_OK)
        return fw_error_set(error, FW_NO_MEMORY, "out of memory");
    return FW_OK;
}

static enum fw_status keep_text(char *to, size_t size, const char *text, const char *what, struct fw_error *error)
{
    if (strlen(text) >= size)
        return fw_error_set(error, FW_USAGE, "%s has %zu bytes; expected at most %zu", what, strlen(text), size - 1);
    memcpy(to, text, strlen(text) + 1);
    return FW_OK;
}

static enum fw_status expected(struct fw_error *error, const char *form)
{
    return fw_error_set(error, FW_USAGE, "expected: say %s --by ROLE [--at TIME]", form);
}

static enum fw_status parse_accept(const struct arguments *given, struct word *word, struct fw_error *error)
{
    if (given->count > 2)
        return expected(error, "accept [NUMBER]");
    const char *number = given->count == 2 ? given->first[1] : "";
    number += *number == '#';
    while (number[0] == '0' && number[1] != '\0')
        number++;
    return keep_text(word->subject, sizeof word->subject, number, "the number", error);
}

static enum fw_status parse_reading(const struct settings *settings, const struct arguments *given, const char *unit,
                                    struct word *word, struct fw_error *error)
{
    if (given->count != 3)
        return expected(error, "reading GAUGE VALUE [--unit U]");
    if (!quantity_read_number(given->first[2], &word->value))
        return fw_error_set(error, FW_USAGE, "'%s' is not a number with a decimal point, as 2.31", given->first[2]);
    enum fw_status status = keep_text(word->subject, sizeof word->subject, given->first[1], "the gauge", error);
    if (status != FW_OK)
        return status;
    size_t index = settings_gauge_index(settings, word->subject);
    if (index != SETTINGS_NONE && unit == NULL)
        unit = quantity_default_unit(settings->gauges[index].measures);
    return unit != NULL ? keep_text(word->unit, sizeof word->unit, unit, "the unit", error) : status;
}

static enum fw_status parse_seen(const struct arguments *given, struct word *word, struct fw_error *error)
{
    static const char form[] = "seen POINT dry, or: say seen POINT wet [CM]";
    if (given->count < 3 || given->count > 4)
        return expected(error, form);
    word->is_wet = strcmp(given->first[2], "wet") == 0;
    if ((!word->is_wet && strcmp(given->first[2], "dry") != 0) || (!word->is_wet && given->count == 4))
        return expected(error, form);
    if (given->count == 4) {
        if (!quantity_read_number(given->first[3], &word->value))
            return fw_error_set(error, FW_USAGE, "'%s' is not a depth in cm, as 4", given->first[3]);
        snprintf(word->unit, sizeof word->unit, "cm");
    }
    return keep_text(word->subject, sizeof word->subject, given->first[1], "the point", error);
}

static enum fw_status parse_road(const struct arguments *given, bool both_sides, struct word *word,
                                 struct fw_error *error)
{
    if (given->count < 3)
        return expected(error, "road POINT STATE [--both-sides]");
    if (!road_state_from_name(text_string(&given->from_third), &word->road)) {
        struct text known = {0};
        for (enum road_state road = ROAD_OPEN; road <= ROAD_HANDED_BACK; road++)
            text_add(&known, "%s%s", road > ROAD_OPEN ? ", " : "", road_state_name(road));
        fw_error_set(error, FW_USAGE, "'%.80s' is not a state of a road; expected one of: %s",
                     text_string(&given->from_third), text_string(&known));
        text_clear(&known);
        return FW_USAGE;
    }
    if (word->road == ROAD_SHUT && !both_sides)
        return fw_error_set(error, FW_USAGE,
                            "SHUT means that both sides are shut: add --both-sides, or say ONE SIDE SHUT");
    if (word->road != ROAD_SHUT && both_sides)
        return fw_error_set(error, FW_USAGE, "--both-sides goes with SHUT, not with %s", road_state_name(word->road));
    return keep_text(word->subject, sizeof word->subject, given->first[1], "the point", error);
}

static enum fw_status parse_kind(const struct settings *settings, const struct command_line *line,
                                 const struct arguments *given, struct word *word, struct fw_error *error)
{
    if (given->count == 0 || !kind_from_name(given->first[0], &word->kind))
        return fw_error_set(error, FW_USAGE, "'%.80s' cannot be said; expected accept, reading, seen, road or note",
                            given->count > 0 ? given->first[0] : "");
    if (line->unit != NULL && word->kind != WORD_READING)
        return fw_error_set(error, FW_USAGE, "--unit goes with a reading");
    if (line->both_sides && word->kind != WORD_ROAD)
        return fw_error_set(error, FW_USAGE, "--both-sides goes with a road that is SHUT");
    switch (word->kind) {
    case WORD_ACCEPT:
        return parse_accept(given, word, error);
    case WORD_READING:
        return parse_reading(settings, given, line->unit, word, error);
    case WORD_SEEN:
        return parse_seen(given, word, error);
    case WORD_ROAD:
        return parse_road(given, line->both_sides, word, error);
    case WORD_NOTE:
        break;
    }
    return keep_text(word->text, sizeof word->text, text_string(&given->from_second), "the note", error);
}

/* "22:05": the last such clock time that has been, in the district's zone. */
static bool last_clock_time(const struct settings *settings, const char *clock, int64_t now_utc_s, int64_t *utc_s_out)
{
    if (strlen(clock) != 5 || clock[2] != ':')
        return false;
    for (int days_back = 0; days_back <= 1; days_back++) {
        char local[WHEN_TEXT_SIZE], text[WHEN_TEXT_SIZE];
        int64_t utc_s;
        when_rfc3339_local(&settings->zone, now_utc_s - (int64_t)days_back * 86400, local);
        snprintf(text, sizeof text, "%.10sT%s", local, clock);
        if (when_parse(text, &settings->zone, &utc_s, NULL) == FW_OK && utc_s <= now_utc_s) {
            *utc_s_out = utc_s;
            return true;
        }
    }
    return false;
}

static enum fw_status parse_time(const struct settings *settings, const char *at, int64_t now_utc_s,
                                 int64_t *utc_s_out, struct fw_error *error)
{
    int64_t utc_s = now_utc_s;
    if (at != NULL && !last_clock_time(settings, at, now_utc_s, &utc_s)) {
        struct fw_error why = {0};
        if (when_parse(at, &settings->zone, &utc_s, &why) != FW_OK)
            return fw_error_set(error, FW_USAGE, "--at: %.400s, or a clock time as 22:05", why.text);
        if (utc_s > now_utc_s + AHEAD_LIMIT_S)
            return fw_error_set(error, FW_USAGE, "--at: '%.80s' has not been yet", at);
    }
    *utc_s_out = utc_s;
    return FW_OK;
}

enum fw_status word_parse(const struct settings *settings, int argument_count, char *const arguments[],
                          int64_t now_utc_s, struct word *word_out, struct fw_error *error)
{
    struct command_line line = {.count = argument_count, .all = arguments};
    struct arguments given = {0};
    struct word word = {.value = NAN, .received_utc_s = now_utc_s};
    enum fw_status status = split_command_line(&line, &given, error);
    if (status == FW_OK)
        status = parse_kind(settings, &line, &given, &word, error);
    if (status == FW_OK && line.by == NULL)
        status = fw_error_set(error, FW_USAGE, "--by is missing; expected a role, as --by 'roads foreman'");
    else if (status == FW_OK)
        status = keep_text(word.by, sizeof word.by, line.by, "the role", error);
    if (status == FW_OK)
        status = parse_time(settings, line.at, now_utc_s, &word.at_utc_s, error);
    if (status == FW_OK && word_check(settings, &word, error) != FW_OK) {
        status = FW_USAGE;
        if (error != NULL)
            error->status = FW_USAGE;
    }
    if (status == FW_OK)
        *word_out = word;
    text_clear(&given.from_second);
    text_clear(&given.from_third);
    return status;
}

/* --- a line --- */

/* "2.90", "0.035": at least two digits behind the point for metres, as a staff is read */
static void print_value(double value, const char *unit, char text[40])
{
    bool is_whole_cm =
        strcmp(unit, "m") == 0 && fabs(value) < 1e6 && fabs(value * 100.0 - round(value * 100.0)) < 1e-6;
    snprintf(text, 40, is_whole_cm ? "%.2f" : "%.10g", value);
}

void word_line(const struct settings *settings, const struct word *word, char line[FACT_WORD_LINE_SIZE])
{
    char clock[WHEN_TEXT_SIZE], value[40] = "", said[FACT_NOTE_SIZE + FACT_ID_SIZE] = "";
    when_clock(&settings->zone, word->at_utc_s, clock);
    print_value(word->value, word->unit, value);
    switch (word->kind) {
    case WORD_ACCEPT:
        snprintf(said, sizeof said, "%s%04ld", word->subject[0] != '\0' ? " #" : "", strtol(word->subject, NULL, 10));
        if (word->subject[0] == '\0')
            said[0] = '\0';
        break;
    case WORD_READING:
        snprintf(said, sizeof said, " %s %s %s", word->subject, value, word->unit);
        break;
    case WORD_SEEN:
        if (word->is_wet && !isnan(word->value))
            snprintf(said, sizeof said, " %s wet %s cm", word->subject, value);
        else
            snprintf(said, sizeof said, " %s %s", word->subject, word->is_wet ? "wet" : "dry");
        break;
    case WORD_ROAD:
        snprintf(said, sizeof said, " %s %s", word->subject, road_state_name(word->road));
        break;
    case WORD_NOTE:
        snprintf(said, sizeof said, " '%s'", word->text);
        break;
    }
    snprintf(line, FACT_WORD_LINE_SIZE, "%s%s (%s, %s)", kind_names[word->kind], said, word->by, clock);
}

/* --- a file --- */

static bool add_text(cJSON *object, const char *key, const char *text)
{
    return text[0] == '\0' || cJSON_AddStringToObject(object, key, text) != NULL;
}

enum fw_status word_write_json(const struct word *word, bool has_time, struct text *json_out)
{
    char at[WHEN_TEXT_SIZE];
    cJSON *object = cJSON_CreateObject();
    bool is_whole = object != NULL && add_text(object, "id", word->id) &&
                    add_text(object, "kind", kind_names[word->kind]) && add_text(object, "subject", word->subject) &&
                    add_text(object, "unit", word->unit) && add_text(object, "text", word->text) &&
                    add_text(object, "by", word->by);
    if (is_whole && !isnan(word->value))
        is_whole = cJSON_AddNumberToObject(object, "value", word->value) != NULL;
    if (is_whole && word->kind == WORD_SEEN)
        is_whole = cJSON_AddBoolToObject(object, "wet", word->is_wet) != NULL;
    if (is_whole && word->kind == WORD_ROAD)
        is_whole = add_text(object, "road", road_state_name(word->road));
    if (is_whole && has_time)
        is_whole = add_text(object, "at", when_rfc3339_utc(word->at_utc_s, at));
    char *printed = is_whole ? cJSON_PrintUnformatted(object) : NULL;
    if (printed != NULL)
        text_add(json_out, "%s\n", printed);
    enum fw_status status = printed != NULL ? text_status(json_out) : FW_NO_MEMORY;
    cJSON_free(printed);
    cJSON_Delete(object);
    return status;
}

static enum fw_status keep_member(const cJSON *member, char *to, size_t size, struct fw_error *error)
{
    if (!cJSON_IsString(member) || strlen(member->valuestring) >= size)
        return fw_error_set(error, FW_BAD_INPUT, "%s: expected a text of at most %zu bytes", member->string,
                            size - 1);
    memcpy(to, member->valuestring, strlen(member->valuestring) + 1);
    return FW_OK;
}

static enum fw_status read_kind(const cJSON *member, struct word *word, struct fw_error *error)
{
    if (!cJSON_IsString(member) || !kind_from_name(member->valuestring, &word->kind))
        return fw_error_set(error, FW_BAD_INPUT, "kind: expected accept, reading, seen, road or note");
    return FW_OK;
}

static enum fw_status read_member(const struct settings *settings, const cJSON *member, struct word *word,
                                  struct fw_error *error)
{
    const char *key = member->string;
    if (strcmp(key, "kind") == 0)
        return read_kind(member, word, error);
    if (strcmp(key, "id") == 0)
        return keep_member(member, word->id, sizeof word->id, error);
    if (strcmp(key, "subject") == 0)
        return keep_member(member, word->subject, sizeof word->subject, error);
    if (strcmp(key, "unit") == 0)
        return keep_member(member, word->unit, sizeof word->unit, error);
    if (strcmp(key, "text") == 0)
        return keep_member(member, word->text, sizeof word->text, error);
    if (strcmp(key, "by") == 0)
        return keep_member(member, word->by, sizeof word->by, error);
    if (strcmp(key, "value") == 0) {
        word->value = member->valuedouble;
        return cJSON_IsNumber(member) ? FW_OK : fw_error_set(error, FW_BAD_INPUT, "value: expected a number");
    }
    if (strcmp(key, "wet") == 0) {
        word->is_wet = cJSON_IsTrue(member);
        return cJSON_IsBool(member) ? FW_OK : fw_error_set(error, FW_BAD_INPUT, "wet: expected true or false");
    }
    if (strcmp(key, "road") == 0) {
        bool is_known = cJSON_IsString(member) && road_state_from_name(member->valuestring, &word->road);
        return is_known ? FW_OK : fw_error_set(error, FW_BAD_INPUT, "road: expected a state, as CREW CALLED");
    }
    if (strcmp(key, "at") == 0) {
        if (!cJSON_IsString(member))
            return fw_error_set(error, FW_BAD_INPUT, "at: expected a time as text");
        enum fw_status status = when_parse(member->valuestring, &settings->zone, &word->at_utc_s, error);
        return status == FW_OK ? FW_OK : fw_error_prefix(error, status, "at");
    }
    return fw_error_set(error, FW_BAD_INPUT,
                        "unknown key '%.60s'; expected id, kind, subject, value, unit, wet, road, text, by or at",
                        key);
}

/* A word without the key that its kind lives by would be taken for its opposite. */
static enum fw_status check_members(const cJSON *object, const struct word *word, struct fw_error *error)
{
    static const char *const needed[KIND_COUNT] = {NULL, "value", "wet", "road", "text"};
    static const char *const all[] = {"id", "kind", "by"};
    for (size_t i = 0; i < sizeof all / sizeof all[0]; i++)
        if (!cJSON_HasObjectItem(object, all[i]))
            return fw_error_set(error, FW_BAD_INPUT, "%s is missing", all[i]);
    if (needed[word->kind] != NULL && !cJSON_HasObjectItem(object, needed[word->kind]))
        return fw_error_set(error, FW_BAD_INPUT, "%s is missing, which '%s' needs", needed[word->kind],
                            kind_names[word->kind]);
    if (word->id[0] == '\0')
        return fw_error_set(error, FW_BAD_INPUT, "id: is empty");
    return FW_OK;
}

enum fw_status word_read_json(const struct settings *settings, const char *bytes, size_t length,
                              int64_t received_utc_s, struct word *word_out, struct fw_error *error)
{
    struct word word = {.value = NAN, .at_utc_s = received_utc_s, .received_utc_s = received_utc_s};
    cJSON *object = NULL;
    enum fw_status status = json_text_parse(bytes, length, &object, error);
    if (status == FW_OK && !cJSON_IsObject(object))
        status = fw_error_set(error, FW_BAD_INPUT, "expected one JSON object");
    for (const cJSON *member = object != NULL ? object->child : NULL; status == FW_OK && member != NULL;
         member = member->next)
        status = read_member(settings, member, &word, error);
    if (status == FW_OK)
        status = check_members(object, &word, error);
    if (status == FW_OK)
        status = word_check(settings, &word, error);
    if (status == FW_OK)
        *word_out = word;
    cJSON_Delete(object);
    return status;
}
