/* SPDX-License-Identifier: MIT */
/*
 * Stage to discharge at a gauge, and back.
 *
 * Power-law segments Q = c (h - h0)^b (ISO 18320:2020, ISO 1100-2), the coefficient of every segment after the first
 * chosen so that the curve is continuous at the joint; or a table of (stage, discharge), straight lines between.
 * Above the last table row the last two rows are carried on in straight line, below the first row the first two, down
 * to no flow; either is flagged. Nothing is clamped silently.
 */
#ifndef FOREWATER_ENGINE_RATING_H
#define FOREWATER_ENGINE_RATING_H

#include <stdbool.h>
#include <stddef.h>

#include "engine/status.h"

enum { RATING_SEGMENTS_MAX = 8, RATING_TABLE_MAX = 256 };

struct rating_segment {
    double to_stage_m;  /* upper end, itself included; INFINITY for the last */
    double coefficient; /* c; given for the first, derived for the later ones */
    double zero_flow_stage_m;
    double exponent;
};

struct rating {
    size_t segment_count;
    struct rating_segment segments[RATING_SEGMENTS_MAX];
    size_t table_count; /* used when segment_count is 0 */
    double table_stage_m[RATING_TABLE_MAX];
    double table_discharge_m3s[RATING_TABLE_MAX];
    double highest_gauged_m; /* INFINITY when not stated */
    double spread;           /* standard deviation of ln Q about the curve, a share */
};

struct rating_flags {
    bool is_beyond_highest_gauging;
    bool is_outside_table; /* carried on beyond the last row, or below the first */
};

/*
 * Fills in the derived coefficients and checks the whole: rising stages, positive coefficients, exponents within
 * 0.2 .. 6, discharge rising with stage, either segments or a table.
 * FW_BAD_INPUT  *fault_out (may be NULL) names the member and says what, a string that lives for ever; *index_out
 *               (may be NULL) which segment or row, 0 where it is neither. The rating is unchanged.
 */
FW_MUST_CHECK enum fw_status rating_complete(struct rating *rating, const char **fault_out, size_t *index_out);

/* The stage at and below which nothing flows. The rating here and below must be one that rating_complete passed. */
double rating_cease_to_flow_stage_m(const struct rating *rating);

/* Zero at and below the cease-to-flow stage; NAN for NAN. flags_out may be NULL. */
double rating_discharge_m3s(const struct rating *rating, double stage_m, struct rating_flags *flags_out);

/* The inverse; the cease-to-flow stage for a discharge of zero or less; NAN for NAN. flags_out may be NULL. */
double rating_stage_m(const struct rating *rating, double discharge_m3s, struct rating_flags *flags_out);

#endif
