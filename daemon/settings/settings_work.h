/* SPDX-License-Identifier: MIT */
/* Building struct settings from a checked tree. Internal to this room. */
#ifndef FOREWATER_DAEMON_SETTINGS_SETTINGS_WORK_H
#define FOREWATER_DAEMON_SETTINGS_SETTINGS_WORK_H

#include "daemon/settings/json_tree.h"
#include "daemon/settings/settings_keys.h"

struct settings_work {
    struct arena *arena;
    struct settings *settings;
    struct settings_report *report;
    struct json_value *root;
    enum settings_need need;
    const char *folder; /* of the file */
};

/*
 * All of these take the full path of a key as the table has it ("points[].crew.night_min") and the object of which it
 * is a member; object may be NULL. A faulty value gives NAN, NULL, false: it has been reported, and no check that
 * compares it may report again.
 */
struct json_value *settings_work_member(const struct json_value *object, const char *key_path); /* only if sound */
bool settings_work_has(const struct json_value *object, const char *key_path);      /* there, in whatever state */
double settings_work_number(const struct json_value *object, const char *key_path); /* or its default; else NAN */
int64_t settings_work_seconds(const struct json_value *object, const char *key_path, double unit_s);
const char *settings_work_string(const struct json_value *object, const char *key_path); /* NULL: not there */
bool settings_work_truth(const struct json_value *object, const char *key_path);

/* Number of elements of an array that are sound, and the next sound one at or after *index; NULL: no more. */
size_t settings_work_count(const struct json_value *array);
struct json_value *settings_work_next(const struct json_value *array, size_t *index);

/* No fault in it or below it. */
bool settings_work_is_whole(const struct json_value *value);

/* Reports a member that is needed, and why, unless it is there. */
void settings_work_need(struct settings_work *work, const struct json_value *object, const char *key_path,
                        const char *why);
/* Reports a member that does nothing there, if it is there. `expected` says what was expected. */
void settings_work_refuse(struct settings_work *work, const struct json_value *object, const char *key_path,
                          const char *why);

/*
 * Reports a fault that a check of the engine found. Its text begins with the member of the engine's struct and ": ";
 * names leads from there to the key. The value of the key is named if it is there, else the object.
 */
struct settings_work_name {
    const char *member, *key_path;
};
void settings_work_engine_fault(struct settings_work *work, struct json_value *object, const char *fault,
                                size_t name_count, const struct settings_work_name names[]);

/* Absolute, in the arena; NULL: no memory. */
const char *settings_work_path(struct settings_work *work, const char *path);

/* Does the gauge of that id give an outlet its level and feed no reach? */
bool settings_work_gives_level_only(const struct settings_work *work, const char *gauge_id);

/* The outlet of a reach that is built already, or nothing; false: no memory. */
bool settings_build_outlet(struct settings_work *work, size_t reach_index, struct network_reach *reach,
                           const struct json_value *object);
/* The same for what rates the flow at its foot. */
bool settings_build_foot(struct settings_work *work, struct network_reach *reach, const struct json_value *object);
/* Once all reaches are known: a level stands where none leaves. */
void settings_check_outlets(struct settings_work *work, const struct json_value *reaches);

/* The parts; false: no memory. Faults are in the report. In this order. */
bool settings_build_base(struct settings_work *work);
bool settings_build_channels(struct settings_work *work);
bool settings_build_gauges(struct settings_work *work);
void settings_build_floods(struct settings_work *work); /* and the time step */
bool settings_build_river(struct settings_work *work);
bool settings_build_points(struct settings_work *work);
/* Of one section, once it is built; false: no memory. */
bool settings_build_seasons(struct settings_work *work, size_t section, const struct json_value *object);
/* Of one point, once its place and marks are built. */
void settings_build_deck(struct settings_work *work, struct settings_point *point, const struct json_value *object);
/* The weir of a stage rating, and what it makes of the point's rows; false: no memory. */
bool settings_build_weir(struct settings_work *work, struct settings_point *point, struct json_value *weir);
/* What the engine itself would refuse and nothing above has found. Only when there is no fault so far. */
bool settings_check_river(struct settings_work *work);

#endif
