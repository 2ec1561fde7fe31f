/* SPDX-License-Identifier: MIT */
/* Every key of the configuration wrong in turn, and what else is made from the table of keys. */
#include "daemon/settings/settings_keys.h"

#include <math.h>

#include <cjson/cJSON.h>

#include "daemon/settings/settings_check.h"
#include "tests/daemon/settings_text.h"

static const struct {
    const char *path;
    enum settings_need need;
} bases[] = {
    {SETTINGS_EXAMPLE, SETTINGS_FOR_RUN},
    {SETTINGS_EVERY_OTHER_KEY, SETTINGS_FOR_RUN},
    {SETTINGS_OUTLET, SETTINGS_FOR_ROUTE},
    {SETTINGS_BOUNDARIES, SETTINGS_FOR_ROUTE},
};
enum { BASE_COUNT = sizeof bases / sizeof bases[0] };

struct base {
    struct text text;
    struct arena arena;
    struct settings_faults faults;
    struct json_value *root;
};

static struct base base_load(size_t index)
{
    struct base base = {.text = settings_text_load(bases[index].path)};
    struct settings_report report = {.file = "base", .faults = &base.faults};
    assert_int_equal(json_tree_read(base.text.bytes, base.text.length, &base.arena, &report, &base.root), FW_OK);
    assert_int_equal(settings_check(base.root, bases[index].need, &report), FW_OK);
    return base;
}

static void base_clear(struct base *base)
{
    settings_faults_clear(&base->faults);
    arena_clear(&base->arena);
    text_clear(&base->text);
}

/* The first value of that key. */
static const struct json_value *value_of_key(const struct json_value *value, const struct settings_key *key)
{
    if (value->key == key)
        return value;
    for (size_t i = 0; i < value->child_count; i++) {
        const struct json_value *found = value_of_key(&value->children[i], key);
        if (found != NULL)
            return found;
    }
    return NULL;
}

/* Reads a base with one value replaced and demands the fault at that path and line, with the new value in it. */
static void demand_fault(size_t base_index, const struct base *base, const struct json_value *value,
                         const char *replacement, const char *what)
{
    struct settings *settings;
    struct settings_faults faults = {0};
    char begin[300];
    struct text changed = settings_text_with(&base->text, value->raw_offset, value->raw_length, replacement);
    enum fw_status status = settings_text_read(&changed, bases[base_index].need, &settings, &faults);
    snprintf(begin, sizeof begin, "x.json:%zu: %s: ", value->line, value->path);
    const struct settings_fault *fault = settings_text_fault(&faults, begin);
    if (status != FW_BAD_INPUT || fault == NULL) {
        settings_text_print_faults(&faults);
        fail_msg("%s = %.60s (%s): no fault '%s'", value->key->path, replacement, what, begin);
    }
    assert_non_null(strstr(fault->text, "expected "));
    assert_int_equal(fault->line, value->line);
    bool is_bracket = replacement[0] == '[' || replacement[0] == '{';
    if (!is_bracket && strlen(replacement) < 40 && strchr(replacement, '\\') == NULL)
        assert_non_null(strstr(fault->text, replacement));
    settings_faults_clear(&faults);
    text_clear(&changed);
}

static void is_wrong_in_type(size_t base_index, const struct base *base, const struct json_value *value)
{
    static const char *const wrong[] = {
        [SETTINGS_TYPE_OBJECT] = "[]",
        [SETTINGS_TYPE_ARRAY] = "{}",
        [SETTINGS_TYPE_TEXT] = "17",
        [SETTINGS_TYPE_WORD] = "true",
        [SETTINGS_TYPE_ID] = "1.5",
        [SETTINGS_TYPE_NUMBER] = "\"seventeen\"",
        [SETTINGS_TYPE_INTEGER] = "\"17\"",
        [SETTINGS_TYPE_TRUTH] = "\"true\"",
        [SETTINGS_TYPE_TIME_OF_DAY] = "20",
        [SETTINGS_TYPE_ZONE] = "1",
        [SETTINGS_TYPE_PATH] = "false",
        [SETTINGS_TYPE_FILE_NAME] = "[]",
        [SETTINGS_TYPE_POINTER] = "0",
        [SETTINGS_TYPE_URL] = "{}",
        [SETTINGS_TYPE_DAY_OF_YEAR] = "501",
        [SETTINGS_TYPE_HOST_PORT] = "8460",
        [SETTINGS_TYPE_MOMENT_OR_NUMBER] = "true",
    };
    demand_fault(base_index, base, value, wrong[value->key->type], "wrong type");
    demand_fault(base_index, base, value, "null", "nothing");
    demand_fault(base_index, base, value, "01", "a number in bad form");
}

static void is_out_of_range(size_t base_index, const struct base *base, const struct json_value *value)
{
    const struct settings_key *key = value->key;
    static const char *const wrong[] = {
        [SETTINGS_TYPE_WORD] = "\"nonesuch\"",
        [SETTINGS_TYPE_ID] = "\"Not An Id\"",
        [SETTINGS_TYPE_TIME_OF_DAY] = "\"24:00\"",
        [SETTINGS_TYPE_DAY_OF_YEAR] = "\"02-29\"",
        [SETTINGS_TYPE_ZONE] = "\"+1\"",
        [SETTINGS_TYPE_PATH] = "\"\"",
        [SETTINGS_TYPE_FILE_NAME] = "\"a/b\"",
        [SETTINGS_TYPE_POINTER] = "\"no-slash\"",
        [SETTINGS_TYPE_URL] = "\"ftp://x\"",
        [SETTINGS_TYPE_HOST_PORT] = "\"localhost\"",
        [SETTINGS_TYPE_TEXT] = "\"\"",
        [SETTINGS_TYPE_TRUTH] = "yes",
        [SETTINGS_TYPE_OBJECT] = "[{}]",
        [SETTINGS_TYPE_MOMENT_OR_NUMBER] = "\"half past nine\"",
    };
    struct text text = {0};
    if (key->type == SETTINGS_TYPE_NUMBER || key->type == SETTINGS_TYPE_INTEGER) {
        char number[40];
        snprintf(number, sizeof number, "%.10g", key->lowest - fmax(1e-4, fabs(key->lowest) * 0.01));
        demand_fault(base_index, base, value, number, "below the range");
        snprintf(number, sizeof number, "%.10g", key->highest + fmax(1e-4, fabs(key->highest) * 0.01));
        demand_fault(base_index, base, value, number, "above the range");
    } else if (key->type == SETTINGS_TYPE_ARRAY) {
        text_add(&text, "[");
        for (int i = 0; i <= (int)key->highest; i++)
            text_add(&text, "%s0", i > 0 ? "," : "");
        text_add(&text, "]");
        demand_fault(base_index, base, value, text_string(&text), "too many");
        if (key->lowest > 0)
            demand_fault(base_index, base, value, "[]", "too few");
    } else {
        demand_fault(base_index, base, value, wrong[key->type], "out of range");
    }
    if (key->type == SETTINGS_TYPE_TEXT) {
        text_add(&text, "\"%0*d\"", (int)key->highest + 1, 0);
        demand_fault(base_index, base, value, text_string(&text), "too long");
        demand_fault(base_index, base, value, "\"two\\nlines\"", "a control character");
    }
    if (key->type == SETTINGS_TYPE_INTEGER)
        demand_fault(base_index, base, value, "1.5", "a fraction");
    if (key->refers != SETTINGS_REFER_NONE)
        demand_fault(base_index, base, value, "\"vast-nowhere-at-all\"", "leads nowhere");
    text_clear(&text);
}

/* Where the name before a value begins: the opening quote. */
static size_t offset_of_name(const struct base *base, const struct json_value *value)
{
    size_t at = value->raw_offset;
    while (base->text.bytes[at] != ':')
        at--;
    while (base->text.bytes[at] != '"')
        at--;
    return at - strlen(value->name) - 1;
}

static void is_misspelt(size_t base_index, const struct base *base, const struct json_value *value)
{
    struct settings *settings;
    struct settings_faults faults = {0};
    char misspelt[120], begin[300], meant[120];
    snprintf(misspelt, sizeof misspelt, "\"%sx\"", value->name);
    struct text changed =
        settings_text_with(&base->text, offset_of_name(base, value), strlen(value->name) + 2, misspelt);
    assert_int_equal(settings_text_read(&changed, bases[base_index].need, &settings, &faults), FW_BAD_INPUT);
    snprintf(begin, sizeof begin, "x.json:%zu: %sx: unknown key", value->key_line, value->path);
    snprintf(meant, sizeof meant, "expected '%s'?", value->name);
    const struct settings_fault *fault = settings_text_fault(&faults, begin);
    if (fault == NULL || strstr(fault->text, meant) == NULL) {
        settings_text_print_faults(&faults);
        fail_msg("%s misspelt: no fault '%s' with \"%s\"", value->key->path, begin, meant);
    }
    settings_faults_clear(&faults);
    text_clear(&changed);
}

/* Under a name that is like no other: a wanted key is then missing, in so many words. */
static void is_missing(size_t base_index, const struct base *base, const struct json_value *value)
{
    struct settings *settings;
    struct settings_faults faults = {0};
    char begin[300], ending[200];
    struct text changed = settings_text_with(&base->text, offset_of_name(base, value), strlen(value->name) + 2,
                                             "\"zzzzzzzzzzzzzzzzzzzz\"");
    assert_int_equal(settings_text_read(&changed, bases[base_index].need, &settings, &faults), FW_BAD_INPUT);
    bool is_wanted = value->key->want == SETTINGS_WANTED ||
                     (value->key->want == SETTINGS_WANTED_FOR_RUN && bases[base_index].need == SETTINGS_FOR_RUN);
    snprintf(ending, sizeof ending, ": %s: missing: expected ", value->path);
    bool is_found = !is_wanted;
    for (size_t i = 0; i < faults.count; i++)
        is_found = is_found || strstr(faults.faults[i].text, ending) != NULL;
    snprintf(begin, sizeof begin, "x.json:%zu: %.*szzzzzzzzzzzzzzzzzzzz: unknown key", value->key_line,
             (int)(strlen(value->path) - strlen(value->name)), value->path);
    if (!is_found || settings_text_fault(&faults, begin) == NULL) {
        settings_text_print_faults(&faults);
        fail_msg("%s missing: no fault '%s' and '%s'", value->key->path, ending, begin);
    }
    settings_faults_clear(&faults);
    text_clear(&changed);
}

static void the_bases_of_these_tests_are_sound(void **state)
{
    (void)state;
    for (size_t b = 0; b < BASE_COUNT; b++) {
        struct text text = settings_text_load(bases[b].path);
        struct settings *settings;
        struct settings_faults faults = {0};
        enum fw_status status = settings_text_read(&text, bases[b].need, &settings, &faults);
        settings_text_print_faults(&faults);
        assert_int_equal(faults.count, 0);
        assert_int_equal(status, FW_OK);
        settings_destroy(settings);
        settings_faults_clear(&faults);
        text_clear(&text);
    }
}

static void every_key_wrong_in_turn_is_a_fault_at_its_path_and_line(void **state)
{
    (void)state;
    size_t tried = 0;
    for (size_t k = 0; k < settings_keys_count(); k++) {
        const struct settings_key *key = settings_keys_at(k);
        bool is_found = key->path[0] == '\0';
        for (size_t b = 0; b < BASE_COUNT && !is_found; b++) {
            struct base base = base_load(b);
            const struct json_value *value = value_of_key(base.root, key);
            is_found = value != NULL;
            if (is_found) {
                is_wrong_in_type(b, &base, value);
                is_out_of_range(b, &base, value);
                if (value->name != NULL) {
                    is_misspelt(b, &base, value);
                    is_missing(b, &base, value);
                }
                tried++;
            }
            base_clear(&base);
        }
        if (!is_found)
            fail_msg("no base has the key %s", key->path);
    }
    assert_int_equal(tried + 1, settings_keys_count()); /* all but the whole file */
}

static void the_table_holds_together(void **state)
{
    (void)state;
    for (size_t k = 0; k < settings_keys_count(); k++) {
        const struct settings_key *key = settings_keys_at(k);
        assert_ptr_equal(settings_keys_find(key->path), key); /* no path twice */
        assert_true(key->meaning != NULL && strlen(key->meaning) > 4);
        assert_non_null(key->unit);
        assert_true(key->lowest <= key->highest);
        assert_false(key->fallback != NULL && key->otherwise != NULL);
        if (key->type == SETTINGS_TYPE_ARRAY)
            assert_non_null(settings_keys_below(key, NULL));
        if (key->type == SETTINGS_TYPE_WORD)
            assert_non_null(key->words);
        if (key->fallback != NULL) { /* a default is JSON, and within its own range */
            cJSON *parsed = cJSON_Parse(key->fallback);
            assert_non_null(parsed);
            if (cJSON_IsNumber(parsed))
                assert_true(parsed->valuedouble >= key->lowest && parsed->valuedouble <= key->highest);
            cJSON_Delete(parsed);
        }
    }
}

/* --- schema and manual --- */

/* Written anew with FW_WRITE_GENERATED=1 in the environment; compared otherwise. */
static void compare_with_file(const struct text *made, const char *path)
{
    if (getenv("FW_WRITE_GENERATED") != NULL) {
        FILE *file = fopen(path, "wb");
        assert_non_null(file);
        assert_int_equal(fwrite(made->bytes, 1, made->length, file), made->length);
        assert_int_equal(fclose(file), 0);
    }
    struct text kept = settings_text_load(path);
    assert_string_equal(made->bytes, kept.bytes);
    text_clear(&kept);
}

static void the_schema_in_the_tree_is_the_one_of_the_table(void **state)
{
    (void)state;
    struct text schema = {0};
    assert_int_equal(settings_schema(&schema), FW_OK);
    compare_with_file(&schema, FW_SOURCE_DIR "/config/forewater.schema.json");
    text_clear(&schema);
}

static void the_manual_in_the_tree_is_the_one_of_the_table(void **state)
{
    (void)state;
    struct text manual = {0};
    assert_int_equal(settings_manual(&manual), FW_OK);
    compare_with_file(&manual, FW_SOURCE_DIR "/docs/configuration.md");
    for (size_t k = 1; k < settings_keys_count(); k++)
        assert_non_null(strstr(manual.bytes, settings_keys_at(k)->meaning));
    text_clear(&manual);
}

/* The keywords of JSON Schema 2020-12 that the schema uses; "pattern" is left to the parser. NULL: valid. */
static const char *schema_fault(const cJSON *schema, const cJSON *value)
{
    const cJSON *type = cJSON_GetObjectItemCaseSensitive(schema, "type");
    const cJSON *words = cJSON_GetObjectItemCaseSensitive(schema, "enum");
    const cJSON *properties = cJSON_GetObjectItemCaseSensitive(schema, "properties");
    const cJSON *item;
    if (words != NULL) {
        cJSON_ArrayForEach(item, words) if (cJSON_Compare(item, value, true)) return NULL;
        return "enum";
    }
    const char *name = type->valuestring;
    bool is_of_type = (strcmp(name, "object") == 0 && cJSON_IsObject(value)) ||
                      (strcmp(name, "array") == 0 && cJSON_IsArray(value)) ||
                      (strcmp(name, "string") == 0 && cJSON_IsString(value)) ||
                      (strcmp(name, "number") == 0 && cJSON_IsNumber(value)) ||
                      (strcmp(name, "integer") == 0 && cJSON_IsNumber(value)) ||
                      (strcmp(name, "boolean") == 0 && cJSON_IsBool(value));
    if (!is_of_type)
        return name;
    if (cJSON_IsNumber(value) &&
        (value->valuedouble < cJSON_GetObjectItemCaseSensitive(schema, "minimum")->valuedouble ||
         value->valuedouble > cJSON_GetObjectItemCaseSensitive(schema, "maximum")->valuedouble))
        return "minimum or maximum";
    if (cJSON_IsArray(value)) {
        if (cJSON_GetArraySize(value) < cJSON_GetObjectItemCaseSensitive(schema, "minItems")->valueint ||
            cJSON_GetArraySize(value) > cJSON_GetObjectItemCaseSensitive(schema, "maxItems")->valueint)
            return "minItems or maxItems";
        cJSON_ArrayForEach(item, value)
        {
            const char *fault = schema_fault(cJSON_GetObjectItemCaseSensitive(schema, "items"), item);
            if (fault != NULL)
                return fault;
        }
    }
    if (cJSON_IsObject(value)) {
        cJSON_ArrayForEach(item,
                           cJSON_GetObjectItemCaseSensitive(
                               schema, "required")) if (cJSON_GetObjectItemCaseSensitive(value, item->valuestring) ==
                                                        NULL) return "required";
        cJSON_ArrayForEach(item, value)
        {
            const cJSON *of_item = cJSON_GetObjectItemCaseSensitive(properties, item->string);
            const char *fault = of_item != NULL ? schema_fault(of_item, item) : "additionalProperties";
            if (fault != NULL)
                return fault;
        }
    }
    return NULL;
}

static void the_schema_takes_the_samples_and_refuses_what_is_wrong(void **state)
{
    (void)state;
    struct text schema_text = {0};
    assert_int_equal(settings_schema(&schema_text), FW_OK);
    cJSON *schema = cJSON_Parse(schema_text.bytes);
    assert_non_null(schema);
    assert_string_equal(cJSON_GetObjectItemCaseSensitive(schema, "$schema")->valuestring,
                        "https://json-schema.org/draft/2020-12/schema");
    for (size_t b = 0; b < BASE_COUNT; b++) {
        struct text text = settings_text_load(bases[b].path);
        struct settings_faults faults = {0};
        struct settings_report report = {.file = "base", .faults = &faults};
        struct json_scan scan = {0};
        assert_int_equal(json_scan(text.bytes, text.length, &report, &scan), FW_OK);
        cJSON *parsed = cJSON_Parse(scan.clean);
        const char *fault = schema_fault(schema, parsed);
        if (bases[b].need == SETTINGS_FOR_RUN && fault != NULL)
            fail_msg("%s: %s", bases[b].path, fault);
        if (bases[b].need == SETTINGS_FOR_ROUTE) /* the schema is that of the daemon */
            assert_string_equal(fault, "required");
        if (b == 0) {
            cJSON *point = cJSON_GetArrayItem(cJSON_GetObjectItemCaseSensitive(parsed, "points"), 0);
            cJSON_SetNumberValue(cJSON_GetObjectItemCaseSensitive(point, "muster_chance"), 0.11);
            assert_string_equal(schema_fault(schema, parsed), "minimum or maximum");
            cJSON_ReplaceItemInObjectCaseSensitive(point, "muster_chance", cJSON_CreateString("0.1"));
            assert_string_equal(schema_fault(schema, parsed), "number");
            cJSON_DeleteItemFromObjectCaseSensitive(point, "muster_chance");
            assert_null(schema_fault(schema, parsed));
            cJSON_AddTrueToObject(point, "mustard_chance");
            assert_string_equal(schema_fault(schema, parsed), "additionalProperties");
        }
        cJSON_Delete(parsed);
        json_scan_clear(&scan);
        text_clear(&text);
    }
    cJSON_Delete(schema);
    text_clear(&schema_text);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(the_table_holds_together),
        cmocka_unit_test(the_bases_of_these_tests_are_sound),
        cmocka_unit_test(every_key_wrong_in_turn_is_a_fault_at_its_path_and_line),
        cmocka_unit_test(the_schema_in_the_tree_is_the_one_of_the_table),
        cmocka_unit_test(the_schema_takes_the_samples_and_refuses_what_is_wrong),
        cmocka_unit_test(the_manual_in_the_tree_is_the_one_of_the_table),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
