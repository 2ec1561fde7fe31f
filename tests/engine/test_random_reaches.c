/* SPDX-License-Identifier: MIT */
/*
 * Random reaches (tests/independent/random_reach) by the automatic choice, against the independent judge. Without
 * arguments a sample of 24, eight of each class. All of them, the judge's floods kept in a folder that several such
 * processes may share, a table of every reach at the end:
 *     engine_random_reaches FROM TO [FOLDER [TABLE]]
 * Pass lines: peak within 1 % on 99 of a hundred; levels at 30, 50 and 70 % of the rise first passed within the larger
 * of 1 min and 1 % of the travel time, all three, on 95 of a hundred.
 */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <math.h>
#include <stdio.h>
#include <stdlib.h>

#include "tests/engine/judged_reach.h"

static const double time_step_s = 60.0; /* the shortest rise is an hour: a fortieth of it is more */
static const double peak_line = 0.01, passage_line_s = 60.0, passage_share = 0.01;
enum { SAMPLE_EVERY = 41, SAMPLE_COUNT = 24, WORST_COUNT = 6 };

struct verdict {
    struct random_reach reach; /* its section is not to be read: it pointed elsewhere */
    struct reach_errors errors;
    double allowed_s, travel_s, peak_doubt, passage_doubt_s;
    double worst_late_s;                    /* of the three levels, the largest in size, with its sign */
    double worst_off_m, worst_above_bank_m; /* that level's error then, and where its mark is */
};

struct selection {
    size_t from, to, every;
    const char *folder, *table;
};

static struct selection selection = {0, SAMPLE_EVERY *SAMPLE_COUNT, SAMPLE_EVERY, NULL, NULL};

static struct verdict judge(size_t number)
{
    struct random_reach reach;
    struct judged_flood flood;
    random_reach_draw(number, &reach);
    if (!judged_flood_of(&reach, selection.folder, &flood))
        fail_msg("reach %zu: the judge could not follow the flood", number);
    /* the judge is sure to a tenth of the line, and its water is all there */
    if (flood.peak_doubt > 0.1 * peak_line || fabs(flood.imbalance) > 1e-10)
        fail_msg("reach %zu: the judge doubts its own peak by %g or volume by %g", number, flood.peak_doubt,
                 flood.imbalance);
    struct verdict verdict = {.reach = reach,
                              .errors = route_random_reach(&reach, &flood, NETWORK_AUTO, time_step_s),
                              .allowed_s = fmax(passage_line_s, passage_share * flood.travel_s),
                              .travel_s = flood.travel_s,
                              .peak_doubt = flood.peak_doubt,
                              .passage_doubt_s = flood.passage_doubt_s};
    for (size_t i = 0; i < JUDGED_MARKS; i++)
        if (!(fabs(verdict.errors.level_late_s[i]) <= fabs(verdict.worst_late_s))) {
            verdict.worst_late_s = verdict.errors.level_late_s[i];
            verdict.worst_off_m = verdict.errors.level_off_m[i];
            verdict.worst_above_bank_m = flood.level_mark_m[i] - reach.bank_m;
        }
    judged_flood_clear(&flood);
    return verdict;
}

/* --- telling ------------------------------------------------------------------------------------------------------- */

static void print_reach(const struct verdict *verdict)
{
    const struct random_reach *reach = &verdict->reach;
    const struct reach_errors *errors = &verdict->errors;
    print_message(
        "  %4zu %-8s S0 %.5f, %.1f km, %.0f m wide, bank %.2f m, peak %.2f m deep, rise %.1f h, %.1f to %.1f "
        "m3/s, Fr %.2f; %s: peak %+.2f %%, levels %+.0f %+.0f %+.0f s of %.0f; at the worst "
        "the level is off by %+.1f mm, the mark %+.0f mm from bank full\n",
        reach->number, random_reach_class_name(reach->class), reach->slope_m_per_m, reach->length_m / 1000.0,
        reach->width_m, reach->bank_m, reach->peak_depth_m, reach->rise_s / 3600.0, reach->flood.base_m3s,
        reach->flood.base_m3s + reach->flood.rise_m3s, reach->froude, method_name(errors->choice.method),
        100.0 * errors->peak, errors->level_late_s[0], errors->level_late_s[1], errors->level_late_s[2],
        verdict->allowed_s, 1000.0 * verdict->worst_off_m, 1000.0 * verdict->worst_above_bank_m);
}

static double peak_size(const struct verdict *verdict)
{
    return fabs(verdict->errors.peak) / peak_line;
}

static double passage_size(const struct verdict *verdict)
{
    return fabs(verdict->worst_late_s) / verdict->allowed_s;
}

static void print_worst(size_t count, const struct verdict verdicts[], const char *what,
                        double (*size)(const struct verdict *))
{
    double below = (double)INFINITY;
    print_message("worst by %s:\n", what);
    for (size_t rank = 0; rank < WORST_COUNT && rank < count; rank++) {
        const struct verdict *worst = NULL;
        for (size_t i = 0; i < count; i++)
            if (size(&verdicts[i]) < below && (worst == NULL || size(&verdicts[i]) > size(worst)))
                worst = &verdicts[i];
        if (worst == NULL)
            return;
        print_reach(worst);
        below = size(worst);
    }
}

static int compare_numbers(const void *left, const void *right)
{
    double a = *(const double *)left, b = *(const double *)right;
    return (a > b) - (a < b);
}

static void print_group(size_t count, const struct verdict verdicts[], const char *name, int class, int method)
{
    size_t chosen = 0, right_peaks = 0, right_levels = 0, late = 0, early = 0, passages = 0;
    double *parts = calloc(count * JUDGED_MARKS, sizeof *parts), *efficiencies = calloc(count, sizeof *efficiencies);
    assert_true(parts != NULL && efficiencies != NULL);
    for (size_t i = 0; i < count; i++) {
        const struct verdict *verdict = &verdicts[i];
        if ((class >= 0 && (int)verdict->reach.class != class) ||
            (method >= 0 && (int)verdict->errors.choice.method != method))
            continue;
        efficiencies[chosen++] = verdict->errors.efficiency;
        right_peaks += peak_size(verdict) <= 1.0;
        right_levels += passage_size(verdict) <= 1.0;
        late += passage_size(verdict) > 1.0 && verdict->worst_late_s > 0.0;
        early += passage_size(verdict) > 1.0 && verdict->worst_late_s < 0.0;
        for (size_t mark = 0; mark < JUDGED_MARKS; mark++) {
            parts[passages++] = verdict->errors.level_late_s[mark];
        }
    }
    qsort(parts, passages, sizeof *parts, compare_numbers);
    qsort(efficiencies, chosen, sizeof *efficiencies, compare_numbers);
    if (chosen > 0)
        print_message(
            "%-22s %4zu reaches: peak right on %5.1f %%, levels on %5.1f %% (late on %zu, early on %zu); level "
            "passages late by %+.1f s in the middle, %+.0f to %+.0f s at 5 and 95 %%; efficiency %.5f in "
            "the middle, least %.5f\n",
            name, chosen, 100.0 * (double)right_peaks / (double)chosen, 100.0 * (double)right_levels / (double)chosen,
            late, early, parts[passages / 2], parts[passages / 20], parts[passages - 1 - passages / 20],
            efficiencies[chosen / 2], efficiencies[0]);
    free(parts);
    free(efficiencies);
}

static void write_table(size_t count, const struct verdict verdicts[], const char *path)
{
    FILE *file = fopen(path, "w");
    if (file == NULL)
        fail_msg("%s: cannot be written", path);
    fprintf(file, "number,class,drawn,slope_m_per_m,length_m,width_m,bank_m,peak_depth_m,rise_s,base_m3s,peak_m3s,"
                  "sharpness,froude,travel_s,peak_doubt,passage_doubt_s,method,reason,storage_number,early_number,"
                  "cells,replaced,peak_error,peak_late_s,efficiency,level_30_late_s,level_50_late_s,level_70_late_s,"
                  "flow_30_late_s,flow_50_late_s,flow_70_late_s,highest_level_error_m\n");
    for (size_t i = 0; i < count; i++) {
        const struct random_reach *reach = &verdicts[i].reach;
        const struct reach_errors *errors = &verdicts[i].errors;
        fprintf(file,
                "%zu,%s,%zu,%.6g,%.6g,%.5g,%.5g,%.5g,%.6g,%.6g,%.6g,%.4g,%.4g,%.6g,%.3g,%.3g,%s,\"%s\",%.4g,%.4g,",
                reach->number, random_reach_class_name(reach->class), reach->drawn, reach->slope_m_per_m,
                reach->length_m, reach->width_m, reach->bank_m, reach->peak_depth_m, reach->rise_s,
                reach->flood.base_m3s, reach->flood.base_m3s + reach->flood.rise_m3s, reach->flood.sharpness,
                reach->froude, verdicts[i].travel_s, verdicts[i].peak_doubt, verdicts[i].passage_doubt_s,
                method_name(errors->choice.method), method_reason_text(errors->choice.reason),
                errors->choice.storage_number, errors->choice.early_number);
        fprintf(file, "%zu,%zu,%.5g,%.4g,%.7g,%.4g,%.4g,%.4g,%.4g,%.4g,%.4g,%.4g\n", errors->cell_count,
                errors->replaced, errors->peak, errors->peak_late_s, errors->efficiency, errors->level_late_s[0],
                errors->level_late_s[1], errors->level_late_s[2], errors->flow_late_s[0], errors->flow_late_s[1],
                errors->flow_late_s[2], errors->level_m);
    }
    assert_int_equal(fclose(file), 0);
}

/* --- the test ------------------------------------------------------------------------------------------------------ */

static void random_reaches_are_routed_as_the_full_equations_say(void **state)
{
    (void)state;
    size_t count = 0, right_peaks = 0, right_levels = 0;
    struct verdict *verdicts = calloc((selection.to - selection.from) / selection.every + 1, sizeof *verdicts);
    assert_non_null(verdicts);
    for (size_t number = selection.from; number < selection.to; number += selection.every)
        verdicts[count++] = judge(number);
    for (size_t i = 0; i < count; i++) {
        right_peaks += peak_size(&verdicts[i]) <= 1.0;
        right_levels += passage_size(&verdicts[i]) <= 1.0;
    }
    print_group(count, verdicts, "all", -1, -1);
    for (int class = 0; class < RANDOM_CLASSES; class ++)
        print_group(count, verdicts, random_reach_class_name((enum random_reach_class) class), class, -1);
    print_group(count, verdicts, method_name(NETWORK_MUSKINGUM_CUNGE), -1, NETWORK_MUSKINGUM_CUNGE);
    print_group(count, verdicts, method_name(NETWORK_DYNAMIC), -1, NETWORK_DYNAMIC);
    print_worst(count, verdicts, "peak", peak_size);
    print_worst(count, verdicts, "passage of a level", passage_size);
    if (selection.table != NULL)
        write_table(count, verdicts, selection.table);
    assert_true(100 * right_peaks >= 99 * count);
    assert_true(100 * right_levels >= 95 * count);
    free(verdicts);
}

int main(int argc, char **argv)
{
    if (argc >= 3) {
        char *from_end = NULL, *to_end = NULL;
        selection = (struct selection){strtoul(argv[1], &from_end, 10), strtoul(argv[2], &to_end, 10), 1,
                                       argc > 3 ? argv[3] : NULL, argc > 4 ? argv[4] : NULL};
        if (*from_end != '\0' || *to_end != '\0' || selection.to <= selection.from) {
            fprintf(stderr, "usage: %s [FROM TO [FOLDER [TABLE]]]\n", argv[0]);
            return 64;
        }
    }
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(random_reaches_are_routed_as_the_full_equations_say),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
