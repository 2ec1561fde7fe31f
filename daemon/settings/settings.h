/* SPDX-License-Identifier: MIT */
/*
 * The configuration, read and checked: what the rest of the daemon works from. Immutable once read.
 *
 * The file is JSON with // comments. A fault names file, line, key path, value and what was expected; all faults of a
 * file come in one run. Unknown keys are faults, with the nearest known key suggested. One table of keys
 * (settings_keys.c) feeds the parser, the JSON Schema and the manual.
 */
#ifndef FOREWATER_DAEMON_SETTINGS_H
#define FOREWATER_DAEMON_SETTINGS_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include "daemon/buffer.h"
#include "daemon/error.h"
#include "daemon/when.h"
#include "engine/advice.h"
#include "engine/assumed_inflow.h"
#include "engine/hazard.h"
#include "engine/method.h"
#include "engine/network.h"
#include "engine/quality.h"
#include "engine/rating.h"
#include "engine/section.h"

#define SETTINGS_NONE ((size_t)-1)
enum { SETTINGS_DIGEST_SIZE = 65 }; /* SHA-256 in hex, and the closing zero */

enum settings_measure { SETTINGS_STAGE, SETTINGS_DISCHARGE };
enum settings_feed_kind { SETTINGS_FOLDER, SETTINGS_HTTP };

struct settings_feed {
    enum settings_feed_kind kind;
    /* folder */
    const char *path;                       /* the drop folder, absolute after reading */
    const char *append_file;                /* a file in it that a logger appends to; NULL: files are dropped whole */
    const char *time_column, *value_column; /* names in the header line; for http JSON Pointers within one reading */
    /* http */
    const char *url;
    const char *readings_pointer; /* JSON Pointer to the array (or object of objects) of readings */
    int64_t every_s;              /* how often to ask */
    /* both */
    const char *unit; /* "m", "cm", "mm" or "m3/s", "l/s": what the value is written in */
    bool has_zone;    /* zone of times written without an offset */
    struct when_zone zone;
};

enum settings_flood { /* where a gauge's flood comes from */
                      SETTINGS_FLOOD_UNKNOWN,
                      SETTINGS_FLOOD_STATED,
                      SETTINGS_FLOOD_FROM_GAUGING, /* assumed from the highest gauging and the fastest rise */
                      SETTINGS_FLOOD_FROM_BELIEF   /* assumed from the highest value believed and the fastest rise */
};

struct settings_gauge {
    const char *id, *name;
    enum settings_measure measures;
    double zero_m; /* gauge zero above datum; NAN: not stated */
    bool has_rating;
    struct rating rating; /* needed when it measures stage */
    size_t feed_count;
    struct settings_feed *feeds; /* in order of trust, the first most */
    int64_t expect_every_s, delivery_s, blind_after_s, blind_after_rising_s;
    struct quality_rules quality; /* in the measured quantity, SI */
    double rising_rate_per_s;     /* above this it counts as rising */
    struct assumed_rules assumed;
    struct method_flood flood; /* that the choice of method must be right for */
    enum settings_flood flood_from;
    size_t node;           /* index of its node in the river; SETTINGS_NONE: it gives a level only */
    bool gives_level_only; /* of an outlet; it has no rating, and its flow is not known */
};

struct settings_level { /* at the foot of a last reach, step by step */
    size_t reach;
    size_t gauge;    /* whose level it is; SETTINGS_NONE: the series below */
    double bed_at_m; /* the gauge's reading at the invert */
    size_t row_count;
    bool is_in_seconds; /* times as plain seconds, not UTC */
    double *time_s, *stage_m;
};

struct settings_mark {
    const char *name;
    double depth_m;     /* above the point's invert */
    bool is_trafficked; /* on the way that vehicles use (default true; a soffit is not) */
};

struct settings_trigger { /* gives SEND while it holds */
    size_t gauge;
    double value; /* stage or discharge, as the gauge measures */
    bool needs_rising;
    const char *signed_by;
};

struct settings_point {
    const char *id, *name;
    size_t reach;
    double at_m;
    double invert_m; /* above datum */
    size_t mark_count;
    struct settings_mark *marks; /* rising depths */
    size_t closing_mark;         /* index; lowest trafficked unless signed otherwise */
    size_t deck_mark;            /* index: the first mark named as the deck ("deck": true), else the closing mark */
    bool has_deck;               /* how the water moves over the deck is stated */
    struct hazard_deck deck;
    bool has_crew; /* false: the point is watched, nobody closes it */
    struct advice_policy policy;
    double reopen_below_m;        /* below the deck mark by this much */
    int64_t reopen_and_reclose_s; /* how long reopening and closing again takes */
    const char *detour_over;      /* point id or NULL */
    size_t access_over_count;
    const char **access_over;
    size_t trigger_count;
    struct settings_trigger *triggers;
    /* own stage rating, of a structure as the section's roughness is given; 0: the section's normal stage */
    size_t stage_row_count;
    double *stage_row_discharge_m3s, *stage_row_stage_m;
    size_t blocked_row_count; /* part-blocked curve, beside it */
    double *blocked_row_discharge_m3s, *blocked_row_stage_m;
    const struct stage_structure *structure; /* a weir over an opening gives the level; NULL: none */
    size_t cannot_see_count;                 /* standing sentences: what this forecast cannot see here */
    const char **cannot_see;
};

enum { SETTINGS_SEASON_STARTS_MAX = 400 }; /* dates in all sections together */

struct settings_season {
    int from_day;    /* month * 100 + day, in the district's zone */
    double n_factor; /* on Manning's n from then on */
};

struct settings_seasons { /* none, or two and more, rising; the last holds over the turn of the year */
    size_t count;
    const struct settings_season *items;
};

struct settings_section_seasons {
    struct settings_seasons own;     /* of all the section, where the next two say nothing */
    struct settings_seasons plain;   /* of its plain */
    struct settings_seasons *panels; /* [panel] */
};

struct settings_channel {
    const char *id;
    bool is_journal; /* else a command */
    size_t argument_count;
    const char **run; /* argv, NULL-terminated */
};

struct settings_role { /* one step of the roster */
    const char *role;
    size_t to_count;
    size_t *to; /* channel indices */
    int64_t accept_within_s;
};

struct settings {
    const char *file;                  /* absolute path it came from */
    char digest[SETTINGS_DIGEST_SIZE]; /* of the text, byte for byte */
    const char *text;
    size_t text_length;

    const char *district_name;
    struct when_zone zone;
    const char *datum;
    int night_from_minute, night_to_minute; /* local minutes of day */

    const char *store_file; /* absolute; NULL: none stated (enough for `route`) */
    const char *inbox_path; /* absolute; default: "inbox" beside the store */

    int64_t forecast_every_s;
    int64_t horizon_s;
    int64_t warm_up_s;   /* how far before now the routing starts */
    size_t member_count; /* stated for the ensemble to come; not used by the stated set of runs */
    int64_t time_step_s;
    bool is_time_step_stated; /* else it was chosen by the gauges' floods */
    size_t roughness_factor_count;
    double roughness_factors[8]; /* 0.8 1.0 1.2 */

    size_t gauge_count;
    struct settings_gauge *gauges;
    size_t level_count; /* as many as the river's */
    struct settings_level *levels;
    size_t section_count;
    const char **section_ids;
    struct section *sections; /* in the roughness that is stated; a season's are of daemon/season */
    struct settings_section_seasons *section_seasons; /* [section] */
    size_t point_count;
    struct settings_point *points;
    size_t channel_count;
    struct settings_channel *channels;
    size_t role_count;
    struct settings_role *roster;

    struct network_river river; /* ready for network_create; its arrays belong to the settings */
    const char **node_names;
};

/* Faults of one file, in the order of its lines. */
struct settings_faults {
    size_t count;
    struct settings_fault {
        size_t line;
        char text[512]; /* "forewater.json:41: points[0].marks[1].depth_m: 1.30 is below ..." */
    } * faults;
    size_t capacity;
};
void settings_faults_clear(struct settings_faults *faults);

enum settings_need {
    SETTINGS_FOR_ROUTE, /* gauges, sections, reaches, points are enough */
    SETTINGS_FOR_RUN    /* what the daemon, check and replay need as well: district, store */
};

/*
 * FW_UNAVAILABLE  the file cannot be read
 * FW_BAD_INPUT    faults_out (the caller clears it) lists every fault, up to 200; error sums up
 * FW_NO_MEMORY
 * The caller destroys *settings_out.
 */
FW_MUST_CHECK enum fw_status settings_read_file(const char *file, enum settings_need need,
                                                struct settings **settings_out, struct settings_faults *faults_out,
                                                struct fw_error *error);
/* The same from text in memory; `file` names it in messages, and relative paths are taken from its folder. */
FW_MUST_CHECK enum fw_status settings_read_text(const char *file, const char *text, size_t length,
                                                enum settings_need need, struct settings **settings_out,
                                                struct settings_faults *faults_out, struct fw_error *error);
void settings_destroy(struct settings *settings);

/* Index by id, or SETTINGS_NONE. */
size_t settings_gauge_index(const struct settings *settings, const char *id);
size_t settings_point_index(const struct settings *settings, const char *id);

/* Which gauges lie upstream of a point: true in is_upstream_out[gauge]. */
void settings_gauges_above(const struct settings *settings, size_t point, bool is_upstream_out[]);

/* The JSON Schema (2020-12) and the key table for the manual, from the same table as the parser. */
FW_MUST_CHECK enum fw_status settings_schema(struct text *json_out);
FW_MUST_CHECK enum fw_status settings_manual(struct text *markdown_out);

#endif
