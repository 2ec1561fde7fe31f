/* SPDX-License-Identifier: MIT */
#include "engine/rating.h"

#include <math.h>

static const double EXPONENT_LOWEST = 0.2;
static const double EXPONENT_HIGHEST = 6;

static double segment_discharge_m3s(const struct rating_segment *segment, double stage_m)
{
    return segment->coefficient * pow(stage_m - segment->zero_flow_stage_m, segment->exponent);
}

/* --- completing and checking ------------------------------------------------------------------------------------ */

static const char *fault_in_segment(const struct rating_segment *segment, bool is_first, bool is_last, double from_m)
{
    if (is_first && !(isfinite(segment->coefficient) && segment->coefficient > 0))
        return "coefficient: must be above 0 in the first segment";
    if (!isfinite(segment->zero_flow_stage_m))
        return "zero_flow_stage_m: is not finite";
    if (!(segment->exponent >= EXPONENT_LOWEST && segment->exponent <= EXPONENT_HIGHEST))
        return "exponent: must lie within 0.2 and 6";
    if (!is_first && segment->zero_flow_stage_m >= from_m)
        return "zero_flow_stage_m: must lie below the joint where the segment begins";
    if (is_last)
        return segment->to_stage_m > 0 && isinf(segment->to_stage_m)
                   ? NULL
                   : "to_stage_m: the last segment has no upper end";
    if (!isfinite(segment->to_stage_m))
        return "to_stage_m: every segment but the last needs an upper end";
    if (is_first && segment->to_stage_m <= segment->zero_flow_stage_m)
        return "to_stage_m: must lie above the stage of zero flow";
    if (!is_first && segment->to_stage_m <= from_m)
        return "to_stage_m: must lie above that of the segment before";
    return NULL;
}

static const char *complete_segments(struct rating_segment segments[], size_t segment_count, size_t *index)
{
    for (*index = 0; *index < segment_count; ++*index) {
        struct rating_segment *segment = &segments[*index];
        const bool is_first = *index == 0;
        const double from_m = is_first ? 0 : segment[-1].to_stage_m;
        const char *fault = fault_in_segment(segment, is_first, *index + 1 == segment_count, from_m);
        if (fault != NULL)
            return fault;
        if (is_first)
            continue;
        segment->coefficient =
            segment_discharge_m3s(&segment[-1], from_m) / pow(from_m - segment->zero_flow_stage_m, segment->exponent);
        if (!(isfinite(segment->coefficient) && segment->coefficient > 0))
            return "coefficient: the one that makes the curve continuous is not a usable number";
    }
    return NULL;
}

static const char *fault_in_table(const struct rating *rating, size_t *index)
{
    const double *stage_m = rating->table_stage_m, *discharge_m3s = rating->table_discharge_m3s;
    *index = 0;
    if (rating->table_count < 2)
        return "table: at least 2 rows are needed";
    for (; *index < rating->table_count; ++*index) {
        if (!isfinite(stage_m[*index]))
            return "table_stage_m: is not finite";
        if (!isfinite(discharge_m3s[*index]) || discharge_m3s[*index] < 0)
            return "table_discharge_m3s: must be 0 or more";
        if (*index > 0 && stage_m[*index] <= stage_m[*index - 1])
            return "table_stage_m: must lie above that of the row before";
        if (*index > 0 && discharge_m3s[*index] <= discharge_m3s[*index - 1])
            return "table_discharge_m3s: must lie above that of the row before";
    }
    return NULL;
}

static const char *complete(struct rating *rating, size_t *index)
{
    *index = 0;
    if (rating->segment_count == 0 && rating->table_count == 0)
        return "segments: there are none, and no table";
    if (rating->segment_count > 0 && rating->table_count > 0)
        return "table: there are segments too, only one of the two can hold";
    if (rating->segment_count > RATING_SEGMENTS_MAX)
        return "segments: more than 8";
    if (rating->table_count > RATING_TABLE_MAX)
        return "table: more than 256 rows";
    const char *fault = rating->segment_count > 0 ? complete_segments(rating->segments, rating->segment_count, index)
                                                  : fault_in_table(rating, index);
    if (fault != NULL)
        return fault;
    *index = 0;
    if (!(rating->highest_gauged_m > rating_cease_to_flow_stage_m(rating)))
        return "highest_gauged_m: must lie above the stage of zero flow";
    if (!(isfinite(rating->spread) && rating->spread >= 0))
        return "spread: must be 0 or more, a share";
    return NULL;
}

enum fw_status rating_complete(struct rating *rating, const char **fault_out, size_t *index_out)
{
    struct rating completed = *rating;
    size_t index;
    const char *fault = complete(&completed, &index);
    if (fault == NULL) {
        *rating = completed;
        return FW_OK;
    }
    if (fault_out != NULL)
        *fault_out = fault;
    if (index_out != NULL)
        *index_out = index;
    return FW_BAD_INPUT;
}

/* --- reading ---------------------------------------------------------------------------------------------------- */

/* On the straight line between the two rows about x, or through the two nearest ones. */
static double along_table(size_t count, const double x[], const double y[], double at)
{
    size_t low = 0, high = count - 1;
    while (high - low > 1) {
        size_t middle = low + (high - low) / 2;
        if (x[middle] <= at)
            low = middle;
        else
            high = middle;
    }
    return y[low] + (y[high] - y[low]) * ((at - x[low]) / (x[high] - x[low]));
}

double rating_cease_to_flow_stage_m(const struct rating *rating)
{
    if (rating->segment_count > 0)
        return rating->segments[0].zero_flow_stage_m;
    return along_table(rating->table_count, rating->table_discharge_m3s, rating->table_stage_m, 0);
}

static void set_flags(const struct rating *rating, double stage_m, bool is_outside_table,
                      struct rating_flags *flags_out)
{
    if (flags_out == NULL)
        return;
    flags_out->is_beyond_highest_gauging = stage_m > rating->highest_gauged_m;
    flags_out->is_outside_table = is_outside_table;
}

double rating_discharge_m3s(const struct rating *rating, double stage_m, struct rating_flags *flags_out)
{
    const size_t count = rating->table_count;
    const bool is_outside_table = rating->segment_count == 0 &&
                                  (stage_m < rating->table_stage_m[0] || stage_m > rating->table_stage_m[count - 1]);
    set_flags(rating, stage_m, is_outside_table, flags_out);
    if (stage_m <= rating_cease_to_flow_stage_m(rating))
        return 0;
    if (rating->segment_count == 0)
        return along_table(count, rating->table_stage_m, rating->table_discharge_m3s, stage_m);
    const struct rating_segment *segment = rating->segments;
    while (stage_m > segment->to_stage_m)
        segment++;
    return segment_discharge_m3s(segment, stage_m);
}

static double segments_stage_m(const struct rating *rating, double discharge_m3s)
{
    const struct rating_segment *segment = rating->segments;
    while (isfinite(segment->to_stage_m) && discharge_m3s > segment_discharge_m3s(segment, segment->to_stage_m))
        segment++;
    return segment->zero_flow_stage_m + pow(discharge_m3s / segment->coefficient, 1 / segment->exponent);
}

double rating_stage_m(const struct rating *rating, double discharge_m3s, struct rating_flags *flags_out)
{
    const size_t count = rating->table_count;
    const double *table_m3s = rating->table_discharge_m3s;
    double stage_m;
    if (discharge_m3s <= 0)
        stage_m = rating_cease_to_flow_stage_m(rating);
    else if (rating->segment_count > 0)
        stage_m = segments_stage_m(rating, discharge_m3s);
    else
        stage_m = along_table(count, table_m3s, rating->table_stage_m, discharge_m3s);
    const bool is_outside_table =
        rating->segment_count == 0 && (discharge_m3s > table_m3s[count - 1] ||
                                       (discharge_m3s < table_m3s[0] && stage_m < rating->table_stage_m[0]));
    set_flags(rating, stage_m, is_outside_table, flags_out);
    return stage_m;
}
