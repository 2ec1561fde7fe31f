/* SPDX-License-Identifier: MIT */
#include "tests/independent/judged_flood.h"

#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

#include "tests/independent/full_flow.h"

const double judged_mark_parts[JUDGED_MARKS] = {0.3, 0.5, 0.7};

static const double output_step_s = 60.0;
enum { MOST_CELLS = 2400 };

double judged_passage_s(size_t count, const double values[], double step_s, double mark)
{
    for (size_t i = 0; i + 1 < count; i++)
        if (values[i] < mark && values[i + 1] >= mark)
            return ((double)i + (mark - values[i]) / (values[i + 1] - values[i])) * step_s;
    return (double)INFINITY;
}

struct judged_peak judged_peak_of(size_t count, const double values[], double step_s)
{
    size_t top = 0;
    for (size_t i = 1; i < count; i++)
        if (values[i] > values[top])
            top = i;
    struct judged_peak peak = {values[top], (double)top * step_s};
    if (top == 0 || top + 1 == count)
        return peak;
    double before = values[top - 1], after = values[top + 1], bend = before - 2.0 * values[top] + after;
    if (bend < 0.0) {
        double shift = 0.5 * (before - after) / bend;
        peak.time_s += shift * step_s;
        peak.value -= 0.25 * (before - after) * shift;
    }
    return peak;
}

static void measure(const struct random_reach *reach, struct judged_flood *flood)
{
    flood->flow = judged_peak_of(flood->count, flood->discharge_m3s, flood->step_s);
    flood->level = judged_peak_of(flood->count, flood->depth_m, flood->step_s);
    for (size_t i = 0; i < JUDGED_MARKS; i++) {
        double part = judged_mark_parts[i];
        flood->level_mark_m[i] = flood->depth_m[0] + part * (flood->level.value - flood->depth_m[0]);
        flood->flow_mark_m3s[i] = flood->discharge_m3s[0] + part * (flood->flow.value - flood->discharge_m3s[0]);
        flood->level_passage_s[i] =
            judged_passage_s(flood->count, flood->depth_m, flood->step_s, flood->level_mark_m[i]);
        flood->flow_passage_s[i] =
            judged_passage_s(flood->count, flood->discharge_m3s, flood->step_s, flood->flow_mark_m3s[i]);
    }
    double half = reach->flood.base_m3s + 0.5 * reach->flood.rise_m3s, low_s = 0.0, high_s = reach->flood.top_s;
    for (int i = 0; i < 60; i++) {
        double middle_s = 0.5 * (low_s + high_s);
        if (random_flood_m3s(middle_s, &reach->flood) < half)
            low_s = middle_s;
        else
            high_s = middle_s;
    }
    flood->travel_s = flood->flow_passage_s[1] - low_s;
}

static bool run(const struct random_reach *reach, size_t cell_count, double duration_s,
                struct judged_flood *flood_out)
{
    const struct full_flow_case full = {.section = &reach->section,
                                        .slope_m_per_m = reach->slope_m_per_m,
                                        .length_m = reach->length_m,
                                        .cell_count = cell_count,
                                        .largest_m3s = reach->flood.base_m3s + reach->flood.rise_m3s,
                                        .duration_s = duration_s,
                                        .output_step_s = output_step_s,
                                        .inflow = random_flood_m3s,
                                        .inflow_parameters = &reach->flood};
    struct full_flow_result result;
    if (!full_flow_run(&full, &result))
        return false;
    *flood_out = (struct judged_flood){.count = result.count,
                                       .step_s = output_step_s,
                                       .discharge_m3s = result.discharge_m3s,
                                       .depth_m = result.depth_m,
                                       .cell_count = cell_count,
                                       .imbalance = result.imbalance};
    measure(reach, flood_out);
    return true;
}

static void compare(const struct judged_flood *coarse, struct judged_flood *fine)
{
    fine->peak_doubt = fabs(coarse->flow.value / fine->flow.value - 1.0) / 3.0;
    fine->passage_doubt_s = 0.0;
    for (size_t i = 0; i < JUDGED_MARKS; i++) {
        double coarse_s = judged_passage_s(coarse->count, coarse->depth_m, coarse->step_s, fine->level_mark_m[i]);
        double other_s =
            judged_passage_s(coarse->count, coarse->discharge_m3s, coarse->step_s, fine->flow_mark_m3s[i]);
        fine->passage_doubt_s = fmax(fine->passage_doubt_s, fabs(coarse_s - fine->level_passage_s[i]) / 3.0);
        fine->passage_doubt_s = fmax(fine->passage_doubt_s, fabs(other_s - fine->flow_passage_s[i]) / 3.0);
    }
}

/* Sure to a thirtieth of what the engine is asked: 1 % of the peak, the larger of 1 min and 1 % of the travel time. */
static bool is_sure(const struct judged_flood *flood)
{
    return flood->peak_doubt <= 3e-4 && flood->passage_doubt_s <= fmax(2.0, 3e-4 * flood->travel_s);
}

static bool solve(const struct random_reach *reach, struct judged_flood *flood_out)
{
    double duration_s = 1.3 * reach->flood.top_s + 1.3 * reach->length_m / reach->slowest_m_s + reach->rise_s;
    duration_s = output_step_s * ceil(duration_s / output_step_s);
    double cell_m = fmin(reach->length_m / 32.0, reach->celerity_m_s * reach->rise_s / 30.0);
    size_t cells = (size_t)ceil(reach->length_m / cell_m);
    if (cells > MOST_CELLS / 8)
        cells = MOST_CELLS / 8;
    struct judged_flood coarse = {0}, fine = {0};
    bool is_fine = run(reach, cells, duration_s, &coarse);
    while (is_fine) {
        cells *= 2;
        is_fine = run(reach, cells, duration_s, &fine);
        if (!is_fine)
            break;
        compare(&coarse, &fine);
        judged_flood_clear(&coarse);
        if (fmax(fine.flow.time_s, fine.level.time_s) > 0.9 * duration_s) /* cut off before its peak was past */
            duration_s = output_step_s * ceil(1.5 * duration_s / output_step_s);
        else if (is_sure(&fine) || 2 * cells > MOST_CELLS)
            break;
        coarse = fine;
    }
    judged_flood_clear(&coarse);
    if (is_fine)
        *flood_out = fine;
    return is_fine;
}

/* --- kept in files: the struct as it stands, the reach it is of, and both series; for the machine that wrote them --- */

struct kept {
    double key[8]; /* what the reach is, so that another distribution's files are not taken */
    struct judged_flood flood;
};

static void key_of(const struct random_reach *reach, double key[8])
{
    const double values[8] = {reach->slope_m_per_m, reach->length_m,       reach->width_m,
                              reach->rise_s,        reach->flood.base_m3s, reach->flood.rise_m3s,
                              reach->peak_depth_m,  reach->flood.sharpness};
    memcpy(key, values, sizeof values);
}

static bool read_kept(const struct random_reach *reach, const char *path, struct judged_flood *flood_out)
{
    FILE *file = fopen(path, "rb");
    struct kept kept;
    double key[8];
    if (file == NULL)
        return false;
    key_of(reach, key);
    bool is_fine = fread(&kept, sizeof kept, 1, file) == 1 && memcmp(kept.key, key, sizeof key) == 0 &&
                   kept.flood.count > 0 && kept.flood.count < 1000000;
    struct judged_flood flood = {0};
    if (is_fine) {
        flood = kept.flood;
        flood.discharge_m3s = calloc(flood.count, sizeof(double));
        flood.depth_m = calloc(flood.count, sizeof(double));
        is_fine = flood.discharge_m3s != NULL && flood.depth_m != NULL &&
                  fread(flood.discharge_m3s, sizeof(double), flood.count, file) == flood.count &&
                  fread(flood.depth_m, sizeof(double), flood.count, file) == flood.count;
    }
    fclose(file);
    if (is_fine)
        *flood_out = flood;
    else
        judged_flood_clear(&flood);
    return is_fine;
}

static void keep(const struct random_reach *reach, const char *path, const struct judged_flood *flood)
{
    char partial[1024];
    struct kept kept;
    memset(&kept, 0, sizeof kept);
    key_of(reach, kept.key);
    kept.flood = *flood;
    kept.flood.discharge_m3s = kept.flood.depth_m = NULL;
    snprintf(partial, sizeof partial, "%s.%ld", path, (long)getpid());
    FILE *file = fopen(partial, "wb");
    if (file == NULL)
        return;
    bool is_fine = fwrite(&kept, sizeof kept, 1, file) == 1 &&
                   fwrite(flood->discharge_m3s, sizeof(double), flood->count, file) == flood->count &&
                   fwrite(flood->depth_m, sizeof(double), flood->count, file) == flood->count;
    is_fine = fclose(file) == 0 && is_fine;
    if (!is_fine || rename(partial, path) != 0)
        remove(partial);
}

bool judged_flood_of(const struct random_reach *reach, const char *folder, struct judged_flood *flood_out)
{
    char path[900];
    if (folder != NULL) {
        snprintf(path, sizeof path, "%s/%04zu.flood", folder, reach->number);
        if (read_kept(reach, path, flood_out))
            return true;
    }
    if (!solve(reach, flood_out))
        return false;
    if (folder != NULL)
        keep(reach, path, flood_out);
    return true;
}

void judged_flood_clear(struct judged_flood *flood)
{
    free(flood->discharge_m3s);
    free(flood->depth_m);
    *flood = (struct judged_flood){0};
}
