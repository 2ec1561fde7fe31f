/* SPDX-License-Identifier: MIT */
/* A configuration as a tree in which every value knows its key path, its line and the text as written. */
#ifndef FOREWATER_DAEMON_SETTINGS_JSON_TREE_H
#define FOREWATER_DAEMON_SETTINGS_JSON_TREE_H

#include <stdbool.h>
#include <stddef.h>

#include "daemon/settings/arena.h"
#include "daemon/settings/json_scan.h"

enum { JSON_TREE_RAW_SIZE = 64, JSON_TREE_MEMBERS_MAX = 1000 };

struct settings_key;

struct json_value {
    enum json_kind kind;
    const char *name; /* NULL for an element of an array and for the whole */
    const char *path; /* "points[0].marks[1].depth_m"; "" for the whole */
    size_t line;
    size_t key_line; /* of the name; the value's own line where there is none */
    const char *raw; /* as written, raw_length bytes of the text given */
    size_t raw_length;
    size_t raw_offset;
    const char *string; /* strings only */
    double number;      /* numbers only */
    size_t child_count;
    struct json_value *children;
    const struct settings_key *key; /* its row in the table of keys, once looked up */
    bool is_faulty;                 /* a fault of it has been reported: nothing more is to be said about it */
};

/*
 * Scans, parses and joins both. Faults of single values are reported and the values marked faulty, so that the rest
 * can be checked. Everything is in the arena; text must outlive the tree.
 * FW_BAD_INPUT: it cannot be parsed, reported. FW_NO_MEMORY.
 */
FW_MUST_CHECK enum fw_status json_tree_read(const char *text, size_t length, struct arena *arena,
                                            struct settings_report *report, struct json_value **root_out);

/* The member of that name, NULL if there is none or object is NULL or no object. */
struct json_value *json_tree_member(const struct json_value *object, const char *name);

/* Reports "path: value text" at the value's line and marks it faulty; does nothing when it is already. */
__attribute__((format(printf, 3, 4))) void json_tree_fault(struct settings_report *report, struct json_value *value,
                                                           const char *format, ...);

/* The value as written, cut to what fits a message; brackets by name; a password in an address by stars. */
const char *json_tree_raw(const struct json_value *value, char text[JSON_TREE_RAW_SIZE]);

#endif
