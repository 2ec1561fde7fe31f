/* SPDX-License-Identifier: MIT */
/* The steps of a cycle, for cycle.c alone. Each works on the next picture (delta->next) and the work space. */
#ifndef FOREWATER_DAEMON_CYCLE_STEPS_H
#define FOREWATER_DAEMON_CYCLE_STEPS_H

#include "daemon/cycle.h"
#include "daemon/season.h"
#include "daemon/track.h"
#include "engine/series.h"

enum {
    CYCLE_FUTURES = TRACK_FUTURES, /* members of a roughness group: three forecasts, two envelope edges */
    CYCLE_FORECASTS_MAX =
        8 * ASSUMED_FORECAST_COUNT, /* as many roughness factors as the settings take, times the futures */
    CYCLE_LOOK_BACK_S = 24 * 3600   /* how far before now levels are looked at, to such an instant */
};

struct cycle {
    const struct settings *settings;
    struct season_river season; /* the river in the roughness of the newest pass's date */
    size_t season_index;
    struct network *network;
    size_t member_count;          /* groups x CYCLE_FUTURES */
    size_t forecast_column_count; /* groups x ASSUMED_FORECAST_COUNT */
    size_t *forecast_columns;
    size_t step_capacity; /* steps the arrays can hold */

    /* kept from pass to pass */
    struct track *present; /* whose levels are this pass's */
    struct track *coming;  /* the one that starts CYCLE_ALIGN_S later, made ready little by little */
    int64_t readied_utc_s; /* when that was last gone on with; 0: not yet */

    /* of the present pass */
    int64_t start_utc_s;   /* of the levels that are looked at: step 0 below */
    size_t step_count;     /* from there to now + horizon */
    size_t first_step;     /* step 0 on the present track */
    double replaced_share; /* of the steps of all members, that the full equations could not take */
    double *inflow_m3s;    /* [gauge, then level][future][step_capacity + 1], from the start of the present track */

    /* scratch */
    struct hazard_water *deck_water; /* [step + 1][member] of one point; of columns that are no forecast, dry */
    double *deck_share;
    int64_t *sample_utc_s;
    double *sample_value;
    struct quality_sample *samples;
    struct quality_verdict *verdicts;
    size_t *sample_index;
    size_t sample_capacity;
    double *future_m3s;         /* [step + 1] */
    enum series_origin *origin; /* [step + 1] */
    bool *is_above;             /* [gauge] */
};

/* Levels at a point at a step of the present pass, [member]; the next step's follow. */
static inline const double *cycle_stage_m(const struct cycle *cycle, size_t point, size_t step)
{
    return track_stage_m(cycle->present, point, cycle->first_step + step);
}

/* Flows there, in the same order. */
static inline const double *cycle_discharge_m3s(const struct cycle *cycle, size_t point, size_t step)
{
    return track_discharge_m3s(cycle->present, point, cycle->first_step + step);
}

/* Flow at a gauge by one of the assumed futures, at a step of the present pass. */
static inline double cycle_inflow_m3s(const struct cycle *cycle, size_t gauge, size_t future, size_t step)
{
    return cycle
        ->inflow_m3s[(gauge * CYCLE_FUTURES + future) * (cycle->step_capacity + 1) + cycle->first_step + step];
}

static inline double cycle_quantity_discharge(const struct settings_gauge *gauge, double value)
{
    if (gauge->gives_level_only)
        return 0.0;
    return gauge->measures == SETTINGS_STAGE ? rating_discharge_m3s(&gauge->rating, value, NULL) : value;
}

/*
 * Network and tracks in the roughness of the season in force at a moment; where it is not that of the pass before, all is routed anew.
 * FW_NO_MEMORY, or the engine refuses the river: what was there stays.
 */
FW_MUST_CHECK enum fw_status cycle_take_season(struct cycle *cycle, int64_t now_utc_s, struct fw_error *error);

/* Room in the scratch arrays for count samples. */
FW_MUST_CHECK enum fw_status cycle_reserve_samples(struct cycle *cycle, size_t count);

/* Lowest, middle and highest stage of the forecast runs at one step of the present pass. */
void cycle_spread_at(const struct cycle *cycle, size_t point, size_t step, double spread_out_m[3]);

/* 1 Collect: new readings and words get their entries and enter the next picture. */
FW_MUST_CHECK enum fw_status cycle_collect(struct cycle *cycle, const struct news *news, int64_t now_utc_s,
                                           struct delta *delta);
/* 2 Judge: every gauge's readings; verdicts that changed are appended; what each gauge now says. */
FW_MUST_CHECK enum fw_status cycle_judge(struct cycle *cycle, int64_t now_utc_s, struct delta *delta);
/*
 * The inflow of every gauge and the level of every outlet from the present track's start on, [gauge, then level][future][step_capacity + 1], into
 * cycle->inflow_m3s. FW_NO_MEMORY.
 */
FW_MUST_CHECK enum fw_status cycle_fill_inflow(struct cycle *cycle, const struct picture *picture, size_t step_count);
/* 3 Route: measured inflow, then the assumed futures, down the tree. */
FW_MUST_CHECK enum fw_status cycle_route(struct cycle *cycle, int64_t now_utc_s, const struct picture *picture,
                                         struct fw_error *error);
/* 4 Assess: passages, horizon, advice; decisions that changed. */
FW_MUST_CHECK enum fw_status cycle_assess(struct cycle *cycle, int64_t now_utc_s, struct delta *delta);
/* Of 4: one point's deck. */
FW_MUST_CHECK enum fw_status cycle_assess_deck(struct cycle *cycle, size_t point, size_t now_step, int64_t now_utc_s,
                                               struct deck_picture *deck_out);
/* Of 4: whether a forecast run stands above the survey of a section at the point or above it, from a step on. Needs is_above. */
bool cycle_is_above_survey(const struct cycle *cycle, size_t point, size_t from_step);
/* 5 Record: messages, thinned forecast, ledger entry. */
FW_MUST_CHECK enum fw_status cycle_record(struct cycle *cycle, int64_t now_utc_s, struct delta *delta);

#endif
