/* SPDX-License-Identifier: MIT */
/* The one table of configuration keys: parser, faults, defaults, JSON Schema and manual all come from it. */
#ifndef FOREWATER_DAEMON_SETTINGS_SETTINGS_KEYS_H
#define FOREWATER_DAEMON_SETTINGS_SETTINGS_KEYS_H

#include <stddef.h>

enum settings_type {
    SETTINGS_TYPE_OBJECT,
    SETTINGS_TYPE_ARRAY,  /* lowest .. highest elements */
    SETTINGS_TYPE_TEXT,   /* 1 .. highest bytes, no control characters */
    SETTINGS_TYPE_WORD,   /* one of `words` */
    SETTINGS_TYPE_ID,     /* small letters, digits, '-' */
    SETTINGS_TYPE_NUMBER, /* lowest .. highest */
    SETTINGS_TYPE_INTEGER,
    SETTINGS_TYPE_TRUTH,       /* true or false */
    SETTINGS_TYPE_TIME_OF_DAY, /* "20:00" */
    SETTINGS_TYPE_DAY_OF_YEAR, /* "05-01", a day that every year has */
    SETTINGS_TYPE_ZONE,        /* "+01:00", "Z", "Area/City" */
    SETTINGS_TYPE_PATH,        /* relative ones start at the folder of the configuration */
    SETTINGS_TYPE_FILE_NAME,   /* without folders */
    SETTINGS_TYPE_POINTER,     /* JSON Pointer, RFC 6901 */
    SETTINGS_TYPE_URL,
    SETTINGS_TYPE_HOST_PORT,
    SETTINGS_TYPE_MOMENT_OR_NUMBER /* an element of a series: RFC 3339, or lowest .. highest */
};

enum settings_want { SETTINGS_OPTIONAL, SETTINGS_WANTED, SETTINGS_WANTED_FOR_RUN };

enum settings_refer {
    SETTINGS_REFER_NONE,
    SETTINGS_REFER_GAUGE,
    SETTINGS_REFER_SECTION,
    SETTINGS_REFER_REACH,
    SETTINGS_REFER_POINT,
    SETTINGS_REFER_CHANNEL,
    SETTINGS_REFER_COUNT
};

struct settings_key {
    const char *path; /* "points[].crew.night_min"; "" for the whole file */
    enum settings_type type;
    enum settings_want want;    /* when the object it belongs to is there */
    enum settings_refer refers; /* an ID that must be one of these */
    enum settings_refer names;  /* an ID that is given to one of these */
    const char *unit;           /* "" for a pure number or no number */
    double lowest, highest;
    const char *words;     /* WORD: "stage|discharge" */
    const char *fallback;  /* the default as JSON; NULL: none */
    const char *otherwise; /* what holds without it, in words, where the default is not a fixed value; NULL */
    const char *meaning;
};

size_t settings_keys_count(void);
const struct settings_key *settings_keys_at(size_t index);
/* NULL: no such key. */
const struct settings_key *settings_keys_find(const char *path);
/* The member `name` of an object with that key, or (name NULL) the elements of an array with that key. */
const struct settings_key *settings_keys_below(const struct settings_key *key, const char *name);
/* Is `key` a member of `parent`? Then its name, else NULL. */
const char *settings_keys_name_in(const struct settings_key *key, const struct settings_key *parent);
/* "expected a number of minutes, 1 to 1440": what the value must be, without the word expected. */
const char *settings_keys_expected(const struct settings_key *key, char *text, size_t size);

#endif
