/* SPDX-License-Identifier: MIT */
#include "daemon/settings/json_tree.h"

#include <stdarg.h>
#include <stdio.h>
#include <string.h>

#include <cjson/cJSON.h>

struct joiner {
    const char *text;
    const struct json_scan *scan;
    size_t next; /* index of the next position: both are walked in the order in which values stand */
    struct arena *arena;
    struct settings_report *report;
};

/* Control characters of a name would break up a message. */
static void make_printable(char *text)
{
    for (; *text != '\0'; text++)
        if ((unsigned char)*text < 0x20 || *text == 0x7F)
            *text = '?';
}

static const char *path_of_member(struct joiner *joiner, const struct json_value *parent, const char *name)
{
    char *path = parent->path[0] == '\0' ? arena_print(joiner->arena, "%.80s", name)
                                         : arena_print(joiner->arena, "%s.%.80s", parent->path, name);
    if (path != NULL)
        make_printable(path);
    return path;
}

static bool kinds_match(const cJSON *item, enum json_kind kind)
{
    switch (kind) {
    case JSON_OBJECT:
        return cJSON_IsObject(item);
    case JSON_ARRAY:
        return cJSON_IsArray(item);
    case JSON_STRING:
        return cJSON_IsString(item);
    case JSON_NUMBER:
        return cJSON_IsNumber(item);
    case JSON_TRUE:
        return cJSON_IsTrue(item);
    case JSON_FALSE:
        return cJSON_IsFalse(item);
    case JSON_NULL:
        return cJSON_IsNull(item);
    }
    return false;
}

static enum fw_status join(struct joiner *joiner, const cJSON *item, struct json_value *value);

static enum fw_status join_children(struct joiner *joiner, const cJSON *item, struct json_value *value)
{
    const cJSON *child;
    cJSON_ArrayForEach(child, item) value->child_count++;
    value->children = arena_take(joiner->arena, value->child_count, sizeof *value->children);
    if (value->children == NULL)
        return FW_NO_MEMORY;
    size_t index = 0;
    cJSON_ArrayForEach(child, item)
    {
        struct json_value *into = &value->children[index];
        if (value->kind == JSON_OBJECT) {
            into->name = arena_copy_text(joiner->arena, child->string, strlen(child->string));
            into->path = into->name != NULL ? path_of_member(joiner, value, into->name) : NULL;
        } else {
            into->path = arena_print(joiner->arena, "%s[%zu]", value->path, index);
        }
        if (into->path == NULL)
            return FW_NO_MEMORY;
        enum fw_status status = join(joiner, child, into);
        if (status != FW_OK)
            return status;
        index++;
    }
    return FW_OK;
}

static void check_names(struct joiner *joiner, struct json_value *object)
{
    if (object->child_count > JSON_TREE_MEMBERS_MAX) {
        json_tree_fault(joiner->report, object, "has %zu members: expected at most %d", object->child_count,
                        JSON_TREE_MEMBERS_MAX);
        return;
    }
    for (size_t i = 1; i < object->child_count; i++)
        for (size_t j = 0; j < i; j++)
            if (strcmp(object->children[i].name, object->children[j].name) == 0) {
                struct json_value *second = &object->children[i];
                if (!second->is_faulty)
                    settings_report_add(joiner->report, second->key_line,
                                        "%s: the key is there twice: expected it once (first on line %zu)",
                                        second->path, object->children[j].key_line);
                second->is_faulty = true;
                break;
            }
}

static enum fw_status join(struct joiner *joiner, const cJSON *item, struct json_value *value)
{
    const struct json_position *position =
        joiner->next < joiner->scan->count ? &joiner->scan->positions[joiner->next++] : NULL;
    if (position == NULL || !kinds_match(item, position->kind)) {
        settings_report_add(joiner->report, position != NULL ? position->line : 1,
                            "the scan and the parser do not agree: expected plain JSON");
        return FW_BAD_INPUT;
    }
    value->kind = position->kind;
    value->line = position->line;
    value->key_line = position->key_line != 0 ? position->key_line : position->line;
    value->raw = joiner->text + position->offset;
    value->raw_length = position->length;
    value->raw_offset = position->offset;
    value->number = position->number;
    enum fw_status status = FW_OK;
    if (value->kind == JSON_STRING) {
        value->string = arena_copy_text(joiner->arena, item->valuestring, strlen(item->valuestring));
        status = value->string != NULL ? FW_OK : FW_NO_MEMORY;
    }
    if (position->fault != NULL)
        json_tree_fault(joiner->report, value, "%s", position->fault);
    if (value->kind == JSON_OBJECT || value->kind == JSON_ARRAY)
        status = join_children(joiner, item, value);
    if (status == FW_OK && value->kind == JSON_OBJECT)
        check_names(joiner, value);
    return status;
}

enum fw_status json_tree_read(const char *text, size_t length, struct arena *arena, struct settings_report *report,
                              struct json_value **root_out)
{
    struct json_scan scan = {0};
    cJSON *parsed = NULL;
    struct json_value *root = NULL;
    enum fw_status status = json_scan(text, length, report, &scan);
    if (status != FW_OK)
        goto cleanup;
    parsed = cJSON_ParseWithLength(scan.clean, length + 1);
    root = arena_take(arena, 1, sizeof *root);
    if (parsed == NULL || root == NULL) { /* the scan has passed it: the parser can only be short of memory */
        status = FW_NO_MEMORY;
        goto cleanup;
    }
    root->path = "";
    struct joiner joiner = {.text = text, .scan = &scan, .arena = arena, .report = report};
    status = join(&joiner, parsed, root);
    if (status == FW_OK)
        *root_out = root;
cleanup:
    cJSON_Delete(parsed);
    json_scan_clear(&scan);
    return status;
}

struct json_value *json_tree_member(const struct json_value *object, const char *name)
{
    if (object == NULL || object->kind != JSON_OBJECT)
        return NULL;
    for (size_t i = 0; i < object->child_count; i++)
        if (strcmp(object->children[i].name, name) == 0)
            return &object->children[i];
    return NULL;
}

/* A password that someone wrote into an address must not go on into a log: length of what stands before the '@'. */
static size_t secret_length(const char *raw, size_t length, size_t *begin_out)
{
    const char *scheme = memmem(raw, length, "://", 3);
    if (scheme == NULL)
        return 0;
    *begin_out = (size_t)(scheme - raw) + 3;
    size_t secret = 0;
    for (size_t i = *begin_out; i < length && strchr("/?#", raw[i]) == NULL; i++)
        if (raw[i] == '@')
            secret = i - *begin_out;
    return secret;
}

const char *json_tree_raw(const struct json_value *value, char text[JSON_TREE_RAW_SIZE])
{
    enum { SHOWN = 48 };
    if (value->kind == JSON_OBJECT || value->kind == JSON_ARRAY) {
        snprintf(text, JSON_TREE_RAW_SIZE, value->kind == JSON_OBJECT ? "an object" : "an array");
        return text;
    }
    size_t begin = 0;
    size_t secret = secret_length(value->raw, value->raw_length, &begin);
    if (secret > 0 && begin < SHOWN) {
        snprintf(text, JSON_TREE_RAW_SIZE, "%.*s***@...", (int)begin, value->raw);
        make_printable(text);
        return text;
    }
    size_t length = value->raw_length;
    if (length > SHOWN) {
        length = SHOWN;
        while (length > 0 && ((unsigned char)value->raw[length] & 0xC0) == 0x80)
            length--; /* not in the middle of a character */
    }
    snprintf(text, JSON_TREE_RAW_SIZE, "%.*s%s", (int)length, value->raw, length < value->raw_length ? "..." : "");
    make_printable(text);
    return text;
}

void json_tree_fault(struct settings_report *report, struct json_value *value, const char *format, ...)
{
    char sentence[400];
    char raw[JSON_TREE_RAW_SIZE];
    if (value->is_faulty)
        return;
    value->is_faulty = true;
    va_list arguments;
    va_start(arguments, format);
    vsnprintf(sentence, sizeof sentence, format, arguments);
    va_end(arguments);
    settings_report_add(report, value->line, "%s: %s %s", value->path[0] != '\0' ? value->path : "the file",
                        json_tree_raw(value, raw), sentence);
}
