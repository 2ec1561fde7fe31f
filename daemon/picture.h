/* SPDX-License-Identifier: MIT */
/*
 * The present, in memory: what was read, what it is worth, where the water will be, what someone should do, what people said, what is still to be told.
 * Status, bulletins and messages show this and nothing else.
 *
 * A cycle never changes a picture: it makes the next one. Arrays are as long as the settings they were made for.
 */
#ifndef FOREWATER_DAEMON_PICTURE_H
#define FOREWATER_DAEMON_PICTURE_H

#include "daemon/facts.h"
#include "daemon/settings/settings.h"
#include "engine/passage.h"

struct known_reading { /* the newest value of one source for one observed time */
    struct reading reading;
    struct quality_verdict verdict;
    bool is_judged; /* the verdict has been recorded */
};

struct gauge_picture {
    struct known_reading *readings; /* by observed time, then by trust (hand first, then feeds in order) */
    size_t reading_count, reading_capacity;

    /* from the newest accepted observation; observed 0: there is none in the window */
    int64_t newest_utc_s;
    double newest_value; /* m or m3/s */
    double newest_discharge_m3s;
    double rate_per_s; /* of the measured quantity */
    bool is_rising;
    bool is_hand;           /* the newest is a person's reading */
    bool is_unconfirmed;    /* it counts at lower confidence */
    bool is_beyond_gauging; /* above the highest gauging */
    bool is_frozen;         /* newer readings came but stand still */
    int64_t heard_utc_s;    /* newest observed time of any reading, believed or not */
    int64_t held_utc_s;     /* observed time of a reading held unconfirmed now; 0: none */
    double held_value;
    int64_t silent_s;      /* now - newest */
    bool is_blind;         /* silent for longer than the limit */
    int64_t blind_limit_s; /* the limit in force (tighter while rising) */
};

struct mark_picture {
    struct passage passage;
};

struct road_fact {
    enum road_state state;
    int64_t at_utc_s; /* 0: nobody said */
    char by[FACT_ROLE_SIZE];
};

struct water_fact {
    bool is_known, is_wet;
    double depth_cm; /* NAN: not stated */
    int64_t at_utc_s;
    char by[FACT_ROLE_SIZE];
};

struct deck_picture { /* estimates of the water on the deck, of a point whose settings have one; NAN: not known */
    /* from now on the peak of depth times speed: of the lowest, middle and highest of the runs' peaks */
    struct hazard_water low, likely, high;
    int64_t likely_utc_s;                      /* PASSAGE_NEVER: the middle run stays dry */
    struct passage over[HAZARD_WHOM_COUNT];    /* from when on a published limit is passed, */
    enum hazard_measure by[HAZARD_WHOM_COUNT]; /* and by what, at the earliest */
};

struct point_picture {
    struct advice advice;
    struct mark_picture *marks; /* as many as the point has */
    struct passage_peak peak;   /* level above invert, over all runs */
    struct {
        double low_m, likely_m, high_m;
    } level_now;
    struct deck_picture deck;
    bool is_unknown; /* a gauge above it has given no reading that counts: there is no forecast, the rest is void */
    int64_t measured_until_utc_s; /* PASSAGE_NEVER: beyond the horizon */
    double unmeasured_share;      /* of the flow now, that no gauge on the path measures */
    bool is_blind;                /* a gauge above it is blind */
    bool is_rising;               /* a gauge above it rises, or was rising when last heard */
    int64_t silent_s;             /* of the gauge on the path that has been silent longest */
    int64_t newest_utc_s;         /* its newest accepted observation */
    bool trigger_holds, assumed_trigger_holds;
    size_t trigger;              /* which one, when one holds */
    int64_t trigger_since_utc_s; /* since when (assumed: the moment the carried rise passes it) */
    bool is_peak_beyond_gauging; /* the flow behind the peak is above a gauge's highest gauging */
    bool
        is_peak_above_survey; /* the water before or at the peak stands above a section's survey, there or upstream */
    double chance_of_return;  /* see advice_facts */
    int64_t below_since_utc_s; /* computed level below closing mark - reopen margin since; 0: it is not */
    struct road_fact road;
    int64_t crew_called_utc_s; /* when a person said CREW CALLED (or OUT) in this thread; 0: nobody did */
    struct water_fact water;
    int64_t accepted_utc_s; /* newest acceptance of this thread; 0: none */
    char accepted_by[FACT_ROLE_SIZE];
    bool is_outage_told; /* this outage of telemetry has been told: hand readings do not end it */
    int64_t told_number; /* number of the newest message of this thread; 0: none */
};

struct forecast {         /* whole curves, thinned to curve_step */
    int64_t issued_utc_s; /* 0: none yet */
    int64_t start_utc_s;
    int64_t step_s;
    size_t step_count;                     /* values per curve */
    int32_t *low_mm, *likely_mm, *high_mm; /* [point][step], stage above invert; -1: no value */
};

struct picture {
    int64_t as_of_utc_s; /* world time of the cycle that made it; 0: before the first */
    int64_t next_entry;  /* the next free entry number, from 1 */
    int64_t next_message_number;
    char newest_link[FACT_DIGEST_SIZE]; /* of the ledger; "" before the first */
    bool is_store_failing;
    char store_trouble[FACT_NOTE_SIZE];
    int64_t away_from_utc_s; /* after a restart: when the run before ended; 0: not */

    double replaced_share; /* of the routing steps, that had to do without backwater; 0 with the storage form */
    size_t gauge_count;
    struct gauge_picture *gauges;
    size_t point_count;
    struct point_picture *points;
    struct forecast forecast;
    int64_t forecast_kept_utc_s; /* when a whole forecast was last stored */

    struct message *outbox; /* not yet settled, oldest first; plus those settled in the last hours */
    size_t outbox_count, outbox_capacity;
};

/* FW_NO_MEMORY */
FW_MUST_CHECK enum fw_status picture_create(const struct settings *settings, struct picture **picture_out);
FW_MUST_CHECK enum fw_status picture_copy(const struct settings *settings, const struct picture *picture,
                                          struct picture **copy_out);
void picture_destroy(struct picture *picture); /* NULL is fine */
struct deck_picture deck_picture_empty(void);  /* nothing is known */

/*
 * Puts a reading in its place. *was_new_out: false when the same source had the same value for that time.
 * A different value replaces the older one of the same source here (the store keeps both).
 */
FW_MUST_CHECK enum fw_status picture_add_reading(struct picture *picture, const struct reading *reading,
                                                 bool *was_new_out);

/* The same source has the same value for that time already. */
bool picture_knows_reading(const struct picture *picture, const struct reading *reading);

/* Takes one word's facts (road, water seen, accept) into the points. Readings are added apart. */
void picture_take_word(const struct settings *settings, struct picture *picture, const struct word *word);

/*
 * The picture as canonical JSON: fixed order of members, fixed number formats, so that equal pictures are equal bytes.
 * This is the ledger's payload, and what `status` reads. `settings` gives the names.
 */
FW_MUST_CHECK enum fw_status picture_write_json(const struct settings *settings, const struct picture *picture,
                                                struct text *json_out);

#endif
