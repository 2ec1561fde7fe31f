/* SPDX-License-Identifier: MIT */
/* What a value must be, in words: the other half of settings_keys.h. */
#include "daemon/settings/settings_keys.h"

#include <stdbool.h>
#include <stdio.h>
#include <string.h>

static void print_words(const char *words, char *text, size_t size)
{
    size_t used = (size_t)snprintf(text, size, "one of ");
    for (const char *word = words; *word != '\0' && used < size;) {
        size_t length = strcspn(word, "|");
        bool is_last = word[length] == '\0';
        used += (size_t)snprintf(text + used, size - used, "\"%.*s\"%s", (int)length, word, is_last ? "" : ", ");
        word += length + (is_last ? 0 : 1);
    }
}

static void print_range(const struct settings_key *key, const char *noun, char *text, size_t size)
{
    snprintf(text, size, "%s%s%s, %.10g to %.10g", noun, key->unit[0] != '\0' ? " in " : "", key->unit, key->lowest,
             key->highest);
}

const char *settings_keys_expected(const struct settings_key *key, char *text, size_t size)
{
    switch (key->type) {
    case SETTINGS_TYPE_OBJECT:
        snprintf(text, size, "an object in { }");
        break;
    case SETTINGS_TYPE_ARRAY:
        if (key->lowest == key->highest)
            snprintf(text, size, "an array in [ ] of %.0f elements", key->lowest);
        else
            snprintf(text, size, "an array in [ ] of %.0f to %.0f elements", key->lowest, key->highest);
        break;
    case SETTINGS_TYPE_TEXT:
        snprintf(text, size, "a text of 1 to %.0f bytes on one line", key->highest);
        break;
    case SETTINGS_TYPE_WORD:
        print_words(key->words, text, size);
        break;
    case SETTINGS_TYPE_ID:
        snprintf(text, size, "an id of small letters, digits and '-', at most 63");
        break;
    case SETTINGS_TYPE_NUMBER:
        print_range(key, "a number", text, size);
        break;
    case SETTINGS_TYPE_INTEGER:
        print_range(key, "a whole number", text, size);
        break;
    case SETTINGS_TYPE_TRUTH:
        snprintf(text, size, "true or false");
        break;
    case SETTINGS_TYPE_TIME_OF_DAY:
        snprintf(text, size, "a time of day from \"00:00\" to \"23:59\"");
        break;
    case SETTINGS_TYPE_DAY_OF_YEAR:
        snprintf(text, size, "a day that every year has, month and day as \"05-01\"");
        break;
    case SETTINGS_TYPE_ZONE:
        snprintf(text, size, "a zone: \"+01:00\", \"Z\" or an IANA name as \"Area/City\"");
        break;
    case SETTINGS_TYPE_PATH:
        snprintf(text, size, "a path");
        break;
    case SETTINGS_TYPE_FILE_NAME:
        snprintf(text, size, "the name of a file, without folders");
        break;
    case SETTINGS_TYPE_POINTER:
        snprintf(text, size, "a JSON Pointer: \"\" or \"/\" and a name, as \"/data/0\"");
        break;
    case SETTINGS_TYPE_URL:
        snprintf(text, size, "an address that begins with http:// or https:// and has no user name in it");
        break;
    case SETTINGS_TYPE_HOST_PORT:
        snprintf(text, size, "host:port, as \"127.0.0.1:8460\"");
        break;
    case SETTINGS_TYPE_MOMENT_OR_NUMBER:
        snprintf(text, size, "a number, or a time as \"2031-02-14T21:15:00Z\"");
        break;
    }
    return text;
}
