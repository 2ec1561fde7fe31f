/* SPDX-License-Identifier: MIT */
/* The table of keys as JSON Schema and as a page of the manual. */
#include "daemon/settings/settings.h"

#include <string.h>

#include "daemon/settings/settings_keys.h"

/* --- JSON Schema, draft 2020-12 --- */

static void add_indent(struct text *json, size_t depth)
{
    text_add(json, "\n%*s", (int)(2 * depth), "");
}

static void add_json_string(struct text *json, const char *string)
{
    text_add_bytes(json, "\"", 1);
    for (const char *c = string; *c != '\0'; c++) {
        if (*c == '"' || *c == '\\')
            text_add_bytes(json, "\\", 1);
        text_add_bytes(json, c, 1);
    }
    text_add_bytes(json, "\"", 1);
}

static void add_member(struct text *json, size_t depth, const char *name, const char *value)
{
    text_add_bytes(json, ",", 1);
    add_indent(json, depth);
    text_add(json, "\"%s\": %s", name, value);
}

static void add_pattern(struct text *json, size_t depth, const char *pattern, size_t longest)
{
    add_member(json, depth, "type", "\"string\"");
    text_add_bytes(json, ",", 1);
    add_indent(json, depth);
    text_add(json, "\"pattern\": ");
    add_json_string(json, pattern);
    text_add(json, ", \"maxLength\": %zu", longest);
}

static void add_words(struct text *json, size_t depth, const char *words)
{
    text_add_bytes(json, ",", 1);
    add_indent(json, depth);
    text_add(json, "\"enum\": [");
    for (const char *word = words; *word != '\0';) {
        size_t length = strcspn(word, "|");
        text_add(json, "%s\"%.*s\"", word == words ? "" : ", ", (int)length, word);
        word += length + (word[length] == '|');
    }
    text_add(json, "]");
}

static void add_schema(struct text *json, size_t depth, const struct settings_key *key);

static bool is_wanted(const struct settings_key *key)
{
    return key->want == SETTINGS_WANTED || key->want == SETTINGS_WANTED_FOR_RUN;
}

static void add_object(struct text *json, size_t depth, const struct settings_key *object)
{
    const char *separator = "";
    add_member(json, depth, "type", "\"object\"");
    add_member(json, depth, "additionalProperties", "false");
    add_member(json, depth, "required", "[");
    for (size_t i = 0; i < settings_keys_count(); i++) {
        const char *name = settings_keys_name_in(settings_keys_at(i), object);
        if (name == NULL || !is_wanted(settings_keys_at(i)))
            continue;
        text_add(json, "%s\"%s\"", separator, name);
        separator = ", ";
    }
    text_add(json, "]");
    add_member(json, depth, "properties", "{");
    separator = "";
    for (size_t i = 0; i < settings_keys_count(); i++) {
        const char *name = settings_keys_name_in(settings_keys_at(i), object);
        if (name == NULL)
            continue;
        text_add(json, "%s", separator);
        add_indent(json, depth + 1);
        text_add(json, "\"%s\": ", name);
        add_schema(json, depth + 1, settings_keys_at(i));
        separator = ",";
    }
    add_indent(json, depth);
    text_add(json, "}");
}

static void add_type(struct text *json, size_t depth, const struct settings_key *key)
{
    switch (key->type) {
    case SETTINGS_TYPE_OBJECT:
        add_object(json, depth, key);
        break;
    case SETTINGS_TYPE_ARRAY:
        add_member(json, depth, "type", "\"array\"");
        text_add(json, ", \"minItems\": %.0f, \"maxItems\": %.0f", key->lowest, key->highest);
        add_member(json, depth, "items", "");
        add_schema(json, depth, settings_keys_below(key, NULL));
        break;
    case SETTINGS_TYPE_NUMBER:
    case SETTINGS_TYPE_INTEGER:
        add_member(json, depth, "type", key->type == SETTINGS_TYPE_NUMBER ? "\"number\"" : "\"integer\"");
        text_add(json, ", \"minimum\": %.10g, \"maximum\": %.10g", key->lowest, key->highest);
        break;
    case SETTINGS_TYPE_TRUTH:
        add_member(json, depth, "type", "\"boolean\"");
        break;
    case SETTINGS_TYPE_WORD:
        add_words(json, depth, key->words);
        break;
    case SETTINGS_TYPE_TEXT:
        add_member(json, depth, "type", "\"string\"");
        text_add(json, ", \"minLength\": 1, \"maxLength\": %.0f", key->highest);
        break;
    case SETTINGS_TYPE_ID:
        add_pattern(json, depth, "^[a-z0-9-]+$", 63);
        break;
    case SETTINGS_TYPE_TIME_OF_DAY:
        add_pattern(json, depth, "^([01][0-9]|2[0-3]):[0-5][0-9]$", 5);
        break;
    case SETTINGS_TYPE_DAY_OF_YEAR:
        add_pattern(json, depth,
                    "^(0[1-9]|1[0-2])-(0[1-9]|1[0-9]|2[0-8])$|^(0[13-9]|1[0-2])-(29|30)$|^(0[13578]|1[02])-31$", 5);
        break;
    case SETTINGS_TYPE_ZONE:
        add_pattern(json, depth, "^(Z|z|[+-][0-9]{2}:[0-9]{2}|[A-Za-z][A-Za-z0-9_+/-]*)$", 63);
        break;
    case SETTINGS_TYPE_PATH:
        add_pattern(json, depth, "^.+$", 1000);
        break;
    case SETTINGS_TYPE_FILE_NAME:
        add_pattern(json, depth, "^[^/]+$", 200);
        break;
    case SETTINGS_TYPE_POINTER:
        add_pattern(json, depth, "^(/([^~]|~[01])*)?$", 1000);
        break;
    case SETTINGS_TYPE_URL:
        add_pattern(json, depth, "^https?://[^/?#@ ]+([/?#].*)?$", 1000);
        break;
    case SETTINGS_TYPE_HOST_PORT:
        add_pattern(json, depth, "^[^ ]+:[0-9]{1,5}$", 300);
        break;
    case SETTINGS_TYPE_MOMENT_OR_NUMBER:
        add_member(json, depth, "type", "[\"number\", \"string\"]");
        text_add(json, ", \"minimum\": %.10g, \"maximum\": %.10g", key->lowest, key->highest);
        break;
    }
}

static void add_schema(struct text *json, size_t depth, const struct settings_key *key)
{
    text_add(json, "{");
    add_indent(json, depth + 1);
    if (key->path[0] == '\0') {
        text_add(json, "\"$schema\": \"https://json-schema.org/draft/2020-12/schema\",");
        add_indent(json, depth + 1);
        text_add(json, "\"title\": \"Forewater configuration, as the daemon needs it\",");
        add_indent(json, depth + 1);
    }
    text_add(json, "\"description\": ");
    add_json_string(json, key->meaning);
    if (key->fallback != NULL)
        add_member(json, depth + 1, "default", key->fallback);
    add_type(json, depth + 1, key);
    add_indent(json, depth);
    text_add(json, "}");
}

enum fw_status settings_schema(struct text *json_out)
{
    struct text json = {0};
    add_schema(&json, 0, settings_keys_find(""));
    text_add(&json, "\n");
    enum fw_status status = text_status(&json);
    if (status == FW_OK)
        *json_out = json;
    else
        text_clear(&json);
    return status;
}

/* --- the manual --- */

static const char manual_head[] =
    "# Configuration\n"
    "\n"
    "One file, JSON (RFC 8259) with comments from `//` to the end of the line, in UTF-8. `config/forewater.json` is\n"
    "an annotated example. `forewater check` reads a file and names every fault in it with its line; the daemon "
    "takes\n"
    "a changed file on SIGHUP and keeps the old one when the new one has a fault.\n"
    "\n"
    "- Unknown keys are faults, so that a misspelt limit is never silently the default.\n"
    "- Units are in the names: `_m` metres, `_min` minutes, `_h` hours, `_m3s` cubic metres a second.\n"
    "- Relative paths start at the folder of the configuration file.\n"
    "- Secrets are never in it.\n"
    "- `route` needs gauges, sections, reaches and points only; what is marked *daemon* is needed by the daemon,\n"
    "  `check` and `replay`.\n"
    "\n"
    "*Decision aid for trained staff. Local codes, the road authority, police and emergency services come first.\n"
    "Levels and limits must be set and signed by a licensed engineer. No message from this system means a road is\n"
    "fit to use. Crews do not enter moving water.*\n"
    "\n"
    "This page is printed from the table of keys that the parser works from; do not edit it by hand.\n";

static void add_cell(struct text *markdown, const char *cell)
{
    for (const char *c = cell; *c != '\0'; c++)
        text_add(markdown, *c == '|' ? "\\|" : "%c", *c);
}

static void add_row(struct text *markdown, const struct settings_key *key, const char *name)
{
    char expected[200];
    text_add(markdown, "| `%s` | ", name);
    add_cell(markdown, settings_keys_expected(key, expected, sizeof expected));
    text_add(markdown, " | ");
    bool is_element = name[strlen(name) - 1] == ']';
    if (key->want != SETTINGS_OPTIONAL && !is_element)
        text_add(markdown, key->want == SETTINGS_WANTED ? "*needed*" : "*needed, daemon*");
    if (key->fallback != NULL)
        text_add(markdown, "`%s`", key->fallback);
    if (key->otherwise != NULL) {
        text_add(markdown, "%s", key->want != SETTINGS_OPTIONAL ? "; else " : "");
        add_cell(markdown, key->otherwise);
    }
    text_add(markdown, " | ");
    add_cell(markdown, key->meaning);
    text_add(markdown, " |\n");
}

/* The name of a key in the section of `object`: that of a member, or of elements below one that are no objects. */
static const char *shown_name(const struct settings_key *key, const struct settings_key *object)
{
    size_t length = strlen(object->path);
    const char *name = settings_keys_name_in(key, object);
    if (name != NULL || strncmp(key->path, object->path, length) != 0 || key->type == SETTINGS_TYPE_OBJECT)
        return name;
    name = key->path + length;
    if (length > 0 && *name++ != '.')
        return NULL;
    return strchr(name, '.') == NULL && strstr(name, "[]") != NULL ? name : NULL;
}

static void add_object_section(struct text *markdown, const struct settings_key *object)
{
    bool is_whole = object->path[0] == '\0';
    text_add(markdown, "\n## %s%s%s\n\n%s\n\n", is_whole ? "The whole file" : "`", object->path, is_whole ? "" : "`",
             object->meaning);
    text_add(markdown, "| key | value | without it | meaning |\n|---|---|---|---|\n");
    for (size_t i = 0; i < settings_keys_count(); i++) {
        const char *name = shown_name(settings_keys_at(i), object);
        if (name != NULL)
            add_row(markdown, settings_keys_at(i), name);
    }
}

enum fw_status settings_manual(struct text *markdown_out)
{
    struct text markdown = {0};
    text_add(&markdown, "%s", manual_head);
    for (size_t i = 0; i < settings_keys_count(); i++)
        if (settings_keys_at(i)->type == SETTINGS_TYPE_OBJECT)
            add_object_section(&markdown, settings_keys_at(i));
    enum fw_status status = text_status(&markdown);
    if (status == FW_OK)
        *markdown_out = markdown;
    else
        text_clear(&markdown);
    return status;
}
