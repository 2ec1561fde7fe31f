/* SPDX-License-Identifier: MIT */
/* The steps of a cycle, for cycle.c alone. Each works on the next picture (delta->next) and the work space. */
#ifndef FOREWATER_DAEMON_CYCLE_STEPS_H
#define FOREWATER_DAEMON_CYCLE_STEPS_H

#include "daemon/cycle.h"
#include "engine/series.h"

enum {
    CYCLE_FUTURES = ASSUMED_FUTURE_COUNT, /* members of a roughness group: three forecasts, two envelope edges */
    CYCLE_FORECASTS_MAX =
        8 * ASSUMED_FORECAST_COUNT, /* as many roughness factors as the settings take, times the futures */
    CYCLE_ALIGN_S = 3600            /* routing starts at whole hours, so that the same input gives the same bytes */
};

struct cycle {
    const struct settings *settings;
    struct network *network;
    size_t member_count;          /* groups x CYCLE_FUTURES */
    size_t forecast_column_count; /* groups x ASSUMED_FORECAST_COUNT */
    size_t *forecast_columns;
    size_t step_capacity; /* steps the arrays can hold */

    /* of the present pass */
    int64_t start_utc_s;
    double replaced_share; /* of the steps of all members, that the full equations could not take */
    size_t step_count;     /* from start to now + horizon */
    bool *has_inflow;      /* [gauge]: there is something to route */
    double *inflow_m3s;    /* [gauge][step + 1][member] */
    double *point_m3s;     /* [point][step + 1][member] */
    double *stage_m;       /* [point][step + 1][member], above the point's invert */

    /* scratch */
    struct hazard_water *deck_water; /* [step + 1][member] of one point; of columns that are no forecast, dry */
    double *deck_share;
    int64_t *sample_utc_s;
    double *sample_value;
    struct quality_sample *samples;
    struct quality_verdict *verdicts;
    size_t *sample_index;
    size_t sample_capacity;
    double *future_m3s; /* [step + 1] */
    double *even_value;
    enum series_origin *even_origin;
    bool *is_above; /* [gauge] */
};

static inline double cycle_quantity_discharge(const struct settings_gauge *gauge, double value)
{
    return gauge->measures == SETTINGS_STAGE ? rating_discharge_m3s(&gauge->rating, value, NULL) : value;
}

/* Room in the scratch arrays for count samples. */
FW_MUST_CHECK enum fw_status cycle_reserve_samples(struct cycle *cycle, size_t count);

/* Lowest, middle and highest stage of the forecast runs at one step of the present pass. */
void cycle_spread_at(const struct cycle *cycle, size_t point, size_t step, double spread_out_m[3]);

/* 1 Collect: new readings and words get their entries and enter the next picture. */
FW_MUST_CHECK enum fw_status cycle_collect(struct cycle *cycle, const struct news *news, int64_t now_utc_s,
                                           struct delta *delta);
/* 2 Judge: every gauge's readings; verdicts that changed are appended; what each gauge now says. */
FW_MUST_CHECK enum fw_status cycle_judge(struct cycle *cycle, int64_t now_utc_s, struct delta *delta);
/* 3 Route: measured inflow, then the assumed futures, down the tree. */
FW_MUST_CHECK enum fw_status cycle_route(struct cycle *cycle, int64_t now_utc_s, const struct picture *picture,
                                         struct fw_error *error);
/* 4 Assess: passages, horizon, advice; decisions that changed. */
FW_MUST_CHECK enum fw_status cycle_assess(struct cycle *cycle, int64_t now_utc_s, struct delta *delta);
/* Of 4: one point's deck. */
FW_MUST_CHECK enum fw_status cycle_assess_deck(struct cycle *cycle, size_t point, size_t now_step, int64_t now_utc_s,
                                               struct deck_picture *deck_out);
/* 5 Record: messages, thinned forecast, ledger entry. */
FW_MUST_CHECK enum fw_status cycle_record(struct cycle *cycle, int64_t now_utc_s, struct delta *delta);

#endif
