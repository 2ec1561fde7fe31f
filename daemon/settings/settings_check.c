/* SPDX-License-Identifier: MIT */
#include "daemon/settings/settings_check.h"

#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

enum { EXPECTED_SIZE = 200, SIBLINGS_MAX = 64 };

struct checker {
    struct settings_report *report;
    enum settings_need need;
};

/* --- single values --- */

static bool is_one_line(const char *string, double longest)
{
    size_t length = strlen(string);
    for (size_t i = 0; i < length; i++)
        if ((unsigned char)string[i] < 0x20 || string[i] == 0x7F)
            return false;
    return length >= 1 && (double)length <= longest;
}

static bool is_one_of(const char *string, const char *words)
{
    size_t length = strlen(string);
    for (const char *word = words; word != NULL; word = strchr(word, '|') != NULL ? strchr(word, '|') + 1 : NULL)
        if (strcspn(word, "|") == length && strncmp(word, string, length) == 0)
            return true;
    return false;
}

static bool is_id(const char *string)
{
    size_t length = strlen(string);
    return length >= 1 && length <= 63 && strspn(string, "abcdefghijklmnopqrstuvwxyz0123456789-") == length;
}

static bool is_time_of_day(const char *s)
{
    if (strlen(s) != 5 || strspn(s, "0123456789:") != 5 || s[2] != ':' || strchr(s, ':') != strrchr(s, ':'))
        return false;
    return (s[0] - '0') * 10 + (s[1] - '0') <= 23 && s[3] <= '5';
}

static bool is_day_of_year(const char *s)
{
    static const int days[] = {31, 28, 31, 30, 31, 30, 31, 31, 30, 31, 30, 31};
    if (strlen(s) != 5 || strspn(s, "0123456789-") != 5 || s[2] != '-' || strchr(s, '-') != strrchr(s, '-'))
        return false;
    int month = (s[0] - '0') * 10 + (s[1] - '0'), day = (s[3] - '0') * 10 + (s[4] - '0');
    return month >= 1 && month <= 12 && day >= 1 && day <= days[month - 1];
}

static bool is_pointer(const char *string)
{
    if (string[0] != '\0' && string[0] != '/')
        return false;
    for (const char *tilde = strchr(string, '~'); tilde != NULL; tilde = strchr(tilde + 1, '~'))
        if (tilde[1] != '0' && tilde[1] != '1')
            return false;
    return string[0] == '\0' || is_one_line(string, 1000);
}

static bool is_url(const char *string)
{
    size_t scheme = strncmp(string, "http://", 7) == 0 ? 7 : strncmp(string, "https://", 8) == 0 ? 8 : 0;
    size_t host = scheme > 0 ? strcspn(string + scheme, "/?#") : 0;
    return host > 0 && memchr(string + scheme, '@', host) == NULL && strchr(string, ' ') == NULL &&
           is_one_line(string, 1000);
}

static bool is_host_port(const char *string)
{
    const char *colon = strrchr(string, ':');
    if (colon == NULL || colon == string || !is_one_line(string, 300) || strchr(string, ' ') != NULL)
        return false;
    size_t digits = strspn(colon + 1, "0123456789");
    if (digits < 1 || digits > 5 || colon[1 + digits] != '\0')
        return false;
    long port = strtol(colon + 1, NULL, 10);
    return port >= 1 && port <= 65535;
}

static bool is_string_right(const struct settings_key *key, const char *string)
{
    struct when_zone zone;
    int64_t utc_s = 0;
    switch (key->type) {
    case SETTINGS_TYPE_TEXT:
        return is_one_line(string, key->highest);
    case SETTINGS_TYPE_WORD:
        return is_one_of(string, key->words);
    case SETTINGS_TYPE_ID:
        return is_id(string);
    case SETTINGS_TYPE_TIME_OF_DAY:
        return is_time_of_day(string);
    case SETTINGS_TYPE_DAY_OF_YEAR:
        return is_day_of_year(string);
    case SETTINGS_TYPE_ZONE:
        return when_zone_parse(string, &zone, NULL) == FW_OK;
    case SETTINGS_TYPE_PATH:
        return is_one_line(string, 1000);
    case SETTINGS_TYPE_FILE_NAME:
        return is_one_line(string, 200) && strchr(string, '/') == NULL && strcmp(string, ".") != 0 &&
               strcmp(string, "..") != 0;
    case SETTINGS_TYPE_POINTER:
        return is_pointer(string);
    case SETTINGS_TYPE_URL:
        return is_url(string);
    case SETTINGS_TYPE_HOST_PORT:
        return is_host_port(string);
    case SETTINGS_TYPE_MOMENT_OR_NUMBER:
        return when_parse(string, NULL, &utc_s, NULL) == FW_OK;
    case SETTINGS_TYPE_OBJECT:
    case SETTINGS_TYPE_ARRAY:
    case SETTINGS_TYPE_NUMBER:
    case SETTINGS_TYPE_INTEGER:
    case SETTINGS_TYPE_TRUTH:
        break;
    }
    return false;
}

/* NULL, or what is wrong. */
static const char *fault_of_value(const struct json_value *value, const struct settings_key *key)
{
    switch (key->type) {
    case SETTINGS_TYPE_OBJECT:
        return value->kind == JSON_OBJECT ? NULL : "is not an object";
    case SETTINGS_TYPE_ARRAY:
        if (value->kind != JSON_ARRAY)
            return "is not an array";
        if ((double)value->child_count < key->lowest)
            return "has too few elements";
        return (double)value->child_count > key->highest ? "has too many elements" : NULL;
    case SETTINGS_TYPE_MOMENT_OR_NUMBER:
        if (value->kind == JSON_STRING)
            break;
        if (value->kind != JSON_NUMBER)
            return "is neither a number nor a text in double quotes";
        if (value->number < key->lowest)
            return "is too small";
        return value->number > key->highest ? "is too large" : NULL;
    case SETTINGS_TYPE_NUMBER:
    case SETTINGS_TYPE_INTEGER:
        if (value->kind != JSON_NUMBER)
            return "is not a number";
        if (key->type == SETTINGS_TYPE_INTEGER && floor(value->number) < value->number)
            return "is not a whole number";
        if (value->number < key->lowest)
            return "is too small";
        return value->number > key->highest ? "is too large" : NULL;
    case SETTINGS_TYPE_TRUTH:
        return value->kind == JSON_TRUE || value->kind == JSON_FALSE ? NULL : "is neither true nor false";
    case SETTINGS_TYPE_TEXT:
    case SETTINGS_TYPE_WORD:
    case SETTINGS_TYPE_ID:
    case SETTINGS_TYPE_TIME_OF_DAY:
    case SETTINGS_TYPE_DAY_OF_YEAR:
    case SETTINGS_TYPE_ZONE:
    case SETTINGS_TYPE_PATH:
    case SETTINGS_TYPE_FILE_NAME:
    case SETTINGS_TYPE_POINTER:
    case SETTINGS_TYPE_URL:
    case SETTINGS_TYPE_HOST_PORT:
        break;
    }
    if (value->kind != JSON_STRING)
        return "is not a text in double quotes";
    return is_string_right(key, value->string) ? NULL : "cannot be used";
}

/* --- objects --- */

/* A key of that name anywhere else in the table, when there is exactly one. */
static const struct settings_key *only_home_of(const char *name)
{
    const struct settings_key *home = NULL;
    for (size_t i = 0; i < settings_keys_count(); i++) {
        const struct settings_key *key = settings_keys_at(i);
        const char *dot = strrchr(key->path, '.');
        if (strcmp(dot != NULL ? dot + 1 : key->path, name) != 0)
            continue;
        if (home != NULL)
            return NULL;
        home = key;
    }
    return home;
}

static size_t names_in(const struct settings_key *parent, const char *names[SIBLINGS_MAX])
{
    size_t count = 0;
    for (size_t i = 0; i < settings_keys_count() && count < SIBLINGS_MAX; i++) {
        const char *name = settings_keys_name_in(settings_keys_at(i), parent);
        if (name != NULL && name[0] != '\0')
            names[count++] = name;
    }
    return count;
}

/* Returns the known name that was probably meant, or NULL. */
static const char *report_unknown(struct checker *checker, const struct json_value *object, struct json_value *member)
{
    const char *names[SIBLINGS_MAX];
    size_t count = names_in(object->key, names);
    const char *nearest = settings_report_nearest(member->name, count, names);
    const struct settings_key *home = only_home_of(member->name);
    if (nearest != NULL) {
        settings_report_add(checker->report, member->key_line, "%s: unknown key: expected '%s'?", member->path,
                            nearest);
    } else if (home != NULL) {
        settings_report_add(checker->report, member->key_line, "%s: unknown key here: expected at '%s'", member->path,
                            home->path);
    } else {
        char list[300] = "";
        size_t used = 0;
        for (size_t i = 0; i < count && used < sizeof list; i++)
            used += (size_t)snprintf(list + used, sizeof list - used, "%s%s", i > 0 ? ", " : "", names[i]);
        settings_report_add(checker->report, member->key_line, "%s: unknown key: expected one of %s", member->path,
                            list);
    }
    member->is_faulty = true;
    return nearest;
}

static void check_value(struct checker *checker, struct json_value *value, const struct settings_key *key);

/* A mark per row of the table would be larger than the few names that an object has. */
struct meant {
    const char *names[SIBLINGS_MAX];
    size_t count;
};

static bool is_meant(const struct meant *meant, const char *name)
{
    for (size_t i = 0; i < meant->count; i++)
        if (strcmp(meant->names[i], name) == 0)
            return true;
    return false;
}

static void report_missing(struct checker *checker, const struct json_value *object, const struct meant *meant)
{
    char expected[EXPECTED_SIZE];
    for (size_t i = 0; i < settings_keys_count(); i++) {
        const struct settings_key *key = settings_keys_at(i);
        const char *name = settings_keys_name_in(key, object->key);
        bool is_wanted = key->want == SETTINGS_WANTED ||
                         (key->want == SETTINGS_WANTED_FOR_RUN && checker->need == SETTINGS_FOR_RUN);
        if (name == NULL || !is_wanted || json_tree_member(object, name) != NULL || is_meant(meant, name))
            continue;
        settings_report_add(checker->report, object->line, "%s%s%s: missing: expected %s", object->path,
                            object->path[0] != '\0' ? "." : "", name,
                            settings_keys_expected(key, expected, sizeof expected));
    }
}

static void check_object(struct checker *checker, struct json_value *object)
{
    struct meant meant = {.count = 0};
    for (size_t i = 0; i < object->child_count; i++) {
        struct json_value *member = &object->children[i];
        const struct settings_key *key = settings_keys_below(object->key, member->name);
        if (key != NULL) {
            check_value(checker, member, key);
        } else if (!member->is_faulty) {
            const char *name = report_unknown(checker, object, member);
            if (name != NULL && meant.count < SIBLINGS_MAX)
                meant.names[meant.count++] = name;
        }
    }
    report_missing(checker, object, &meant);
}

static void check_value(struct checker *checker, struct json_value *value, const struct settings_key *key)
{
    char expected[EXPECTED_SIZE];
    value->key = key;
    if (value->is_faulty)
        return;
    const char *fault = fault_of_value(value, key);
    if (fault != NULL) {
        json_tree_fault(checker->report, value, "%s: expected %s", fault,
                        settings_keys_expected(key, expected, sizeof expected));
        return;
    }
    if (value->kind == JSON_OBJECT)
        check_object(checker, value);
    for (size_t i = 0; value->kind == JSON_ARRAY && i < value->child_count; i++)
        check_value(checker, &value->children[i], settings_keys_below(key, NULL));
}

/* --- ids and references --- */

static const char *const refer_nouns[SETTINGS_REFER_COUNT] = {"", "gauge", "section", "reach", "point", "channel"};

struct id_list { /* ids of one kind of thing, as they stand in the file */
    const char **ids;
    struct json_value **values;
    size_t count, capacity, value_capacity;
    bool has_faulty; /* some id cannot be read: what refers to it cannot be judged */
};

static enum fw_status collect_ids(struct json_value *value, struct id_list lists[SETTINGS_REFER_COUNT])
{
    enum fw_status status = FW_OK;
    enum settings_refer names = value->key != NULL ? value->key->names : SETTINGS_REFER_NONE;
    struct id_list *list = &lists[names];
    if (names != SETTINGS_REFER_NONE && value->is_faulty) {
        list->has_faulty = true;
    } else if (names != SETTINGS_REFER_NONE) {
        status = buffer_grow(&list->ids, &list->capacity, list->count, sizeof *list->ids);
        if (status == FW_OK)
            status = buffer_grow(&list->values, &list->value_capacity, list->count, sizeof(struct json_value *));
        if (status != FW_OK)
            return status;
        list->ids[list->count] = value->string;
        list->values[list->count++] = value;
    }
    if (value->kind == JSON_OBJECT) /* an object without a readable id, or an array that is not looked into */
        for (size_t i = 0; i < settings_keys_count() && value->key != NULL; i++) {
            const struct settings_key *key = settings_keys_at(i);
            const char *name = settings_keys_name_in(key, value->key);
            if (name != NULL && key->names != SETTINGS_REFER_NONE && json_tree_member(value, name) == NULL)
                lists[key->names].has_faulty = true;
        }
    for (size_t i = 0; status == FW_OK && i < value->child_count; i++)
        status = collect_ids(&value->children[i], lists);
    return status;
}

/* Places whose ids were never seen because what holds them is faulty. */
static void mark_unread_lists(const struct json_value *root, struct id_list lists[SETTINGS_REFER_COUNT])
{
    static const char *const homes[SETTINGS_REFER_COUNT] = {"",        "gauges", "sections",
                                                            "reaches", "points", "channels"};
    for (size_t r = SETTINGS_REFER_NONE + 1; r < SETTINGS_REFER_COUNT; r++) {
        const struct json_value *home = json_tree_member(root, homes[r]);
        if (home == NULL || home->is_faulty) {
            lists[r].has_faulty = lists[r].has_faulty || home != NULL;
            continue;
        }
        for (size_t i = 0; i < home->child_count; i++)
            lists[r].has_faulty = lists[r].has_faulty || home->children[i].is_faulty;
    }
}

static void report_doubles(struct checker *checker, struct id_list *list, struct id_list *others, const char *noun)
{
    for (size_t i = 0; i < list->count; i++) {
        size_t limit = others == list ? i : others->count;
        for (size_t j = 0; j < limit; j++)
            if (strcmp(list->ids[i], others->ids[j]) == 0) {
                json_tree_fault(checker->report, list->values[i],
                                "is the id of another %s (line %zu): expected one of its own", noun,
                                others->values[j]->line);
                break;
            }
    }
}

static void check_references(struct checker *checker, struct json_value *value,
                             struct id_list lists[SETTINGS_REFER_COUNT])
{
    enum settings_refer refers = value->key != NULL ? value->key->refers : SETTINGS_REFER_NONE;
    if (refers != SETTINGS_REFER_NONE && !value->is_faulty) {
        const struct id_list *list = &lists[refers];
        bool is_known = false;
        for (size_t i = 0; i < list->count && !is_known; i++)
            is_known = strcmp(list->ids[i], value->string) == 0;
        const char *nearest = settings_report_nearest(value->string, list->count, list->ids);
        if (!is_known && list->has_faulty)
            value->is_faulty = true; /* it may be the one that cannot be read */
        else if (!is_known && nearest != NULL)
            json_tree_fault(checker->report, value, "is not the id of a %s: expected '%s'?", refer_nouns[refers],
                            nearest);
        else if (!is_known)
            json_tree_fault(checker->report, value, "is not the id of a %s: expected one of the %zu there are",
                            refer_nouns[refers], list->count);
    }
    for (size_t i = 0; i < value->child_count; i++)
        check_references(checker, &value->children[i], lists);
}

static enum fw_status check_ids(struct checker *checker, struct json_value *root)
{
    struct id_list lists[SETTINGS_REFER_COUNT] = {{.ids = NULL}};
    enum fw_status status = collect_ids(root, lists);
    if (status == FW_OK) {
        mark_unread_lists(root, lists);
        for (size_t r = SETTINGS_REFER_NONE + 1; r < SETTINGS_REFER_COUNT; r++)
            report_doubles(checker, &lists[r], &lists[r], refer_nouns[r]);
        /* both name columns of one table of results */
        report_doubles(checker, &lists[SETTINGS_REFER_POINT], &lists[SETTINGS_REFER_GAUGE], "thing, a gauge");
        check_references(checker, root, lists);
    }
    for (size_t r = 0; r < SETTINGS_REFER_COUNT; r++) {
        free(lists[r].ids);
        free(lists[r].values);
    }
    return status;
}

enum fw_status settings_check(struct json_value *root, enum settings_need need, struct settings_report *report)
{
    struct checker checker = {.report = report, .need = need};
    check_value(&checker, root, settings_keys_find(""));
    return check_ids(&checker, root);
}
