/* SPDX-License-Identifier: MIT */
#include "daemon/settings/settings_work.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

static const char *last_name(const char *key_path)
{
    const char *dot = strrchr(key_path, '.');
    return dot != NULL ? dot + 1 : key_path;
}

bool settings_work_has(const struct json_value *object, const char *key_path)
{
    return json_tree_member(object, last_name(key_path)) != NULL;
}

struct json_value *settings_work_member(const struct json_value *object, const char *key_path)
{
    struct json_value *value = json_tree_member(object, last_name(key_path));
    return value != NULL && !value->is_faulty ? value : NULL;
}

double settings_work_number(const struct json_value *object, const char *key_path)
{
    const struct json_value *value = settings_work_member(object, key_path);
    if (value != NULL)
        return value->number;
    const struct settings_key *key = settings_keys_find(key_path);
    double number;
    if (settings_work_has(object, key_path) || key == NULL || key->fallback == NULL ||
        json_scan_number(key->fallback, strlen(key->fallback), &number) != NULL)
        return NAN;
    return number;
}

int64_t settings_work_seconds(const struct json_value *object, const char *key_path, double unit_s)
{
    double seconds = settings_work_number(object, key_path) * unit_s;
    return isfinite(seconds) ? (int64_t)llround(seconds) : 0;
}

const char *settings_work_string(const struct json_value *object, const char *key_path)
{
    const struct json_value *value = settings_work_member(object, key_path);
    return value != NULL ? value->string : NULL;
}

bool settings_work_truth(const struct json_value *object, const char *key_path)
{
    const struct json_value *value = settings_work_member(object, key_path);
    if (value != NULL)
        return value->kind == JSON_TRUE;
    const struct settings_key *key = settings_keys_find(key_path);
    return key != NULL && key->fallback != NULL && strcmp(key->fallback, "true") == 0;
}

struct json_value *settings_work_next(const struct json_value *array, size_t *index)
{
    for (; array != NULL && *index < array->child_count; (*index)++)
        if (!array->children[*index].is_faulty)
            return &array->children[(*index)++];
    return NULL;
}

size_t settings_work_count(const struct json_value *array)
{
    size_t count = 0;
    size_t index = 0;
    while (settings_work_next(array, &index) != NULL)
        count++;
    return count;
}

bool settings_work_is_whole(const struct json_value *value)
{
    if (value == NULL || value->is_faulty)
        return value == NULL;
    for (size_t i = 0; i < value->child_count; i++)
        if (!settings_work_is_whole(&value->children[i]))
            return false;
    return true;
}

void settings_work_need(struct settings_work *work, const struct json_value *object, const char *key_path,
                        const char *why)
{
    char expected[200] = "a value";
    const struct settings_key *key = settings_keys_find(key_path);
    if (settings_work_has(object, key_path))
        return;
    if (key != NULL)
        settings_keys_expected(key, expected, sizeof expected);
    settings_report_add(work->report, object->line, "%s.%s: missing: expected %s, because %s", object->path,
                        last_name(key_path), expected, why);
}

void settings_work_refuse(struct settings_work *work, const struct json_value *object, const char *key_path,
                          const char *why)
{
    struct json_value *value = settings_work_member(object, key_path);
    if (value != NULL)
        json_tree_fault(work->report, value, "does nothing here: expected none, because %s", why);
}

void settings_work_engine_fault(struct settings_work *work, struct json_value *object, const char *fault,
                                size_t name_count, const struct settings_work_name names[])
{
    const char *colon = strstr(fault, ": ");
    size_t length = colon != NULL ? (size_t)(colon - fault) : 0;
    const char *sentence = colon != NULL ? colon + 2 : fault;
    for (size_t i = 0; i < name_count; i++) {
        if (strlen(names[i].member) != length || strncmp(names[i].member, fault, length) != 0)
            continue;
        struct json_value *value = settings_work_member(object, names[i].key_path);
        if (value != NULL)
            json_tree_fault(work->report, value, "cannot be used: %s", sentence);
        else
            settings_report_add(work->report, object->line, "%s.%s: missing: %s", object->path,
                                last_name(names[i].key_path), sentence);
        return;
    }
    json_tree_fault(work->report, object, "cannot be used: %s", fault);
}

const char *settings_work_path(struct settings_work *work, const char *path)
{
    return path[0] == '/' ? path : arena_print(work->arena, "%s/%s", work->folder, path);
}
