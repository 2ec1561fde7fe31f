/* SPDX-License-Identifier: MIT */
/*
 * The engine against a general library for differential equations (tests/bench/rival.h) at equal accuracy, judged by
 * the fine grid of tests/independent.
 *
 * The engine at the grid and step its rules give sets the accuracy. Then, each the cheapest that is as accurate:
 *   same cells    the rival on as many cells, tolerance and order free
 *   free cells    the rival's cells free too
 *   both free     and the engine's cells and step free as well
 * "As accurate" leaves the rival the benefit: river_case.h.
 */
#include <math.h>
#include <stdio.h>
#include <stdlib.h>

#include "tests/bench/engine_bench.h"
#include "tests/bench/network_run.h"
#include "tests/bench/river_case.h"

#if defined(FW_BENCH_RIVAL)

#include "tests/bench/rival.h"
#include "tests/independent/full_flow.h"

enum { MEMBERS = 32, MANY_MEMBERS = 1000 };

struct contest {
    const struct river_case *river;
    bool is_full;
    bool is_smoke;
    size_t count; /* outputs */
    const double *truth_m3s;
    double *flow_m3s; /* room for one run's outputs */
    struct flow_curve curve;
    struct area_table table;
    double largest_m3s, diffusion_length_m;
    struct accuracy goal;
};

struct rival_choice {
    struct rival_setup setup;
    struct accuracy accuracy;
    struct rival_counts counts;
    double lone_s;
    bool is_found;
};

struct engine_choice {
    size_t cells;
    double time_step_s;
    struct accuracy accuracy;
    double block_s; /* of 32 members, per member */
    bool is_found;
};

/* --- the rival ------------------------------------------------------------------------------------------------------ */

static struct rival_reach reach_of(const struct contest *contest)
{
    const struct river_case *river = contest->river;
    return (struct rival_reach){.table = &contest->table,
                                .slope_m_per_m = river->slope_m_per_m,
                                .length_m = river->length_m,
                                .duration_s = river->duration_s,
                                .output_step_s = river->time_step_s,
                                .longest_step_s = river->flood.peak_s,
                                .largest_m3s = contest->largest_m3s};
}

/* One setup on the given flood; taken if it is as accurate and cheaper than the choice so far. */
static void try_rival(struct contest *contest, const struct rival_setup *setup, struct rival_choice *choice)
{
    static struct laps laps;
    const struct rival_reach reach = reach_of(contest);
    struct rival_choice tried = {.setup = *setup};
    struct rival *rival = NULL;
    laps.count = 0;
    if (!rival_create(&rival, &reach, setup))
        return;
    bool has_run = true;
    for (int repeat = 0; repeat < (contest->is_smoke ? 1 : 3) && has_run; repeat++) {
        has_run = rival_run(rival, flood_m3s, &contest->river->flood, contest->flow_m3s, &laps, &tried.counts);
        if (has_run && repeat == 0) {
            tried.accuracy =
                accuracy_of(contest->count, contest->river->time_step_s, contest->truth_m3s, contest->flow_m3s);
            has_run = accuracy_is_as_good(&tried.accuracy, &contest->goal);
        }
    }
    rival_destroy(rival);
    tried.lone_s = laps_total_s(&laps);
    tried.is_found = has_run;
    if (has_run && (!choice->is_found || tried.lone_s < choice->lone_s))
        *choice = tried;
}

static struct rival_choice choose_rival(struct contest *contest, bool are_cells_free)
{
    static const size_t free_cells[] = {12, 16, 20, 25, 30, 35, 40, 50, 65, 80, 100};
    static const double tolerances[] = {2e-2, 1e-2, 5e-3, 2e-3, 1e-3, 5e-4, 2e-4, 1e-4, 5e-5, 2e-5, 1e-5};
    static const int orders[] = {2, 3, 5};
    struct rival_choice choice = {.is_found = false};
    const size_t *cells = are_cells_free ? free_cells : &contest->river->cell_count;
    size_t cell_choices = are_cells_free ? sizeof free_cells / sizeof *free_cells : 1;
    for (size_t i = 0; i < cell_choices; i++)
        for (size_t t = 0; t < sizeof tolerances / sizeof *tolerances; t++)
            for (size_t o = 0; o < sizeof orders / sizeof *orders; o++) {
                const struct rival_setup setup = {.is_diffusive = !contest->is_full,
                                                  .cell_count = cells[i],
                                                  .relative_tolerance = tolerances[t],
                                                  .most_order = orders[o],
                                                  .beyond_m = 5.0 * contest->diffusion_length_m};
                if (!contest->is_smoke || (cells[i] == 40 && tolerances[t] < 1.5e-3 && tolerances[t] > 8e-5))
                    try_rival(contest, &setup, &choice);
            }
    return choice;
}

/* --- the engine ----------------------------------------------------------------------------------------------------- */

static struct network_run_setup engine_setup(const struct contest *contest, size_t cells, double time_step_s,
                                             size_t members)
{
    const struct river_case *river = contest->river;
    return (struct network_run_setup){.section = &river->section,
                                      .slope_m_per_m = river->slope_m_per_m,
                                      .reach_m = river->length_m,
                                      .reach_count = 1,
                                      .method = contest->is_full ? NETWORK_DYNAMIC : NETWORK_MUSKINGUM_CUNGE,
                                      .cells_per_reach = cells,
                                      .group_count = 1,
                                      .members_per_group = members,
                                      .time_step_s = time_step_s,
                                      .step_count = (size_t)(river->duration_s / time_step_s + 0.5),
                                      .flood = river->flood};
}

/* Member 0 at the case's outputs, in straight lines between steps. */
static struct accuracy engine_accuracy(struct contest *contest, const struct network_run *run)
{
    size_t members = run->setup.members_per_group;
    for (size_t i = 0; i < contest->count; i++) {
        double at = contest->river->time_step_s * (double)i / run->setup.time_step_s;
        size_t step = (size_t)(at + 1e-9);
        size_t next = step < run->setup.step_count ? step + 1 : step;
        double share = fmax(0.0, at - (double)step);
        contest->flow_m3s[i] =
            (1.0 - share) * run->outflow_m3s[step * members] + share * run->outflow_m3s[next * members];
    }
    return accuracy_of(contest->count, contest->river->time_step_s, contest->truth_m3s, contest->flow_m3s);
}

static struct engine_choice try_engine(struct contest *contest, size_t cells, double time_step_s, int repeats)
{
    struct engine_choice tried = {.cells = cells, .time_step_s = time_step_s};
    const struct network_run_setup setup = engine_setup(contest, cells, time_step_s, MEMBERS);
    struct network_run run;
    if (!network_run_init(&run, &setup))
        return tried;
    tried.block_s = network_run_best_s(&run, repeats) / MEMBERS;
    tried.accuracy = engine_accuracy(contest, &run);
    tried.is_found = tried.block_s > 0.0;
    network_run_clear(&run);
    return tried;
}

static struct engine_choice choose_engine(struct contest *contest)
{
    static const size_t cells[] = {10, 12, 15, 20, 25, 30, 40, 50, 60, 80};
    static const double steps[] = {30.0, 60.0, 120.0, 300.0, 600.0, 900.0, 1200.0, 1800.0};
    struct engine_choice choice = {.is_found = false};
    for (size_t i = 0; i < sizeof cells / sizeof *cells; i++)
        for (size_t s = 0; s < sizeof steps / sizeof *steps; s++) {
            if (steps[s] < 0.5 * contest->river->time_step_s ||
                (contest->is_smoke && (cells[i] > 40 || steps[s] < 60.0)))
                continue;
            struct engine_choice tried = try_engine(contest, cells[i], steps[s], contest->is_smoke ? 1 : 2);
            if (tried.is_found && accuracy_is_as_good(&tried.accuracy, &contest->goal) &&
                (!choice.is_found || tried.block_s < choice.block_s))
                choice = tried;
        }
    return choice;
}

/* --- one beside the other ------------------------------------------------------------------------------------------- */

enum { MOST_SIDES = 3 };

struct sides { /* all measured in turns */
    struct network_run lone, block, many, free_block;
    struct laps lone_laps, block_laps, many_laps, free_laps;
    struct rival *rival[MOST_SIDES - 1];
    struct laps rival_laps[MOST_SIDES - 1][MEMBERS];
};

struct costs { /* seconds per member */
    double lone, block, many, free_block;
    double rival[MOST_SIDES - 1], rival_lone[MOST_SIDES - 1];
};

static bool run_rivals(struct contest *contest, struct sides *sides)
{
    struct rival_counts counts;
    for (size_t which = 0; which + 1 < MOST_SIDES; which++)
        for (size_t member = 0; member < (contest->is_smoke ? 2 : MEMBERS) && sides->rival[which] != NULL; member++) {
            struct flood flood = flood_of_member(&contest->river->flood, member);
            if (!rival_run(sides->rival[which], flood_m3s, &flood, contest->flow_m3s,
                           &sides->rival_laps[which][member], &counts))
                return false;
        }
    return true;
}

static bool make_sides(struct contest *contest, const struct rival_choice rivals[],
                       const struct engine_choice *free_one, struct sides *sides)
{
    const struct river_case *river = contest->river;
    const struct rival_reach reach = reach_of(contest);
    const struct network_run_setup lone = engine_setup(contest, river->cell_count, river->time_step_s, 1);
    const struct network_run_setup block = engine_setup(contest, river->cell_count, river->time_step_s, MEMBERS);
    const struct network_run_setup many =
        engine_setup(contest, river->cell_count, river->time_step_s, contest->is_smoke ? 2 * MEMBERS : MANY_MEMBERS);
    const struct network_run_setup free_block =
        engine_setup(contest, free_one->cells, free_one->time_step_s, MEMBERS);
    if (!network_run_init(&sides->lone, &lone) || !network_run_init(&sides->block, &block) ||
        !network_run_init(&sides->many, &many) ||
        (free_one->is_found && !network_run_init(&sides->free_block, &free_block)))
        return false;
    for (size_t which = 0; which + 1 < MOST_SIDES; which++)
        if (rivals[which].is_found && !rival_create(&sides->rival[which], &reach, &rivals[which].setup))
            return false;
    return true;
}

static bool measure_costs(struct contest *contest, const struct rival_choice rivals[],
                          const struct engine_choice *free_one, struct costs *costs_out)
{
    static struct sides sides;
    sides = (struct sides){.rival = {NULL}};
    bool is_well = make_sides(contest, rivals, free_one, &sides);
    for (int repeat = 0; repeat < (contest->is_smoke ? 1 : 5) && is_well; repeat++) {
        for (int often = 0; often < 4 && is_well; often++)
            is_well = network_run_advance(&sides.lone, &sides.lone_laps) &&
                      network_run_advance(&sides.block, &sides.block_laps) &&
                      (sides.free_block.network == NULL || network_run_advance(&sides.free_block, &sides.free_laps));
        is_well = is_well && run_rivals(contest, &sides) && network_run_advance(&sides.many, &sides.many_laps);
    }
    struct costs costs = {.lone = laps_total_s(&sides.lone_laps),
                          .block = laps_total_s(&sides.block_laps) / MEMBERS,
                          .many = laps_total_s(&sides.many_laps) /
                                  (double)(contest->is_smoke ? 2 * MEMBERS : MANY_MEMBERS),
                          .free_block = laps_total_s(&sides.free_laps) / MEMBERS};
    size_t members = contest->is_smoke ? 2 : MEMBERS;
    for (size_t which = 0; which + 1 < MOST_SIDES; which++) {
        for (size_t member = 0; member < members; member++)
            costs.rival[which] += laps_total_s(&sides.rival_laps[which][member]) / (double)members;
        costs.rival_lone[which] = laps_total_s(&sides.rival_laps[which][0]);
        rival_destroy(sides.rival[which]);
    }
    network_run_clear(&sides.lone);
    network_run_clear(&sides.block);
    network_run_clear(&sides.many);
    network_run_clear(&sides.free_block);
    *costs_out = costs;
    return is_well;
}

/* --- what is printed ------------------------------------------------------------------------------------------------- */

static void print_accuracy(const struct accuracy *accuracy)
{
    printf("peak %+7.3f %%, %+6.2f min, 1-NSE %.1e", 100.0 * accuracy->peak_error, accuracy->time_error_s / 60.0,
           accuracy->missed);
}

static void print_rival(const char *what, const struct rival_choice *choice, double rival_s, double engine_s,
                        double floor, double aim)
{
    printf("    rival, %-11s ", what);
    if (!choice->is_found) {
        printf("none of its setups is as accurate\n");
        return;
    }
    printf("%3zu cells, rtol %.0e, order %d  ", choice->setup.cell_count, choice->setup.relative_tolerance,
           choice->setup.most_order);
    print_accuracy(&choice->accuracy);
    printf("  %8.3f ms = %6.1f x  %s\n", 1e3 * rival_s, rival_s / engine_s,
           bench_verdict_above(rival_s / engine_s, floor, aim));
}

static void print_contest(const struct contest *contest, const struct rival_choice rivals[],
                          const struct engine_choice *free_one, const struct costs *costs)
{
    const struct river_case *river = contest->river;
    double floor = contest->is_full ? 8.0 : 30.0, aim = contest->is_full ? 15.0 : 60.0;
    double worse = fmax(costs->block, costs->many);
    printf("  %s, %s: %s\n", river->name,
           contest->is_full ? "full equations against Saint-Venant" : "storage form against diffusive",
           river->description);
    printf("    engine by its rules     %3zu cells, %4.0f s             ", river->cell_count, river->time_step_s);
    print_accuracy(&contest->goal);
    printf("  lone %.3f ms; per member of %d %.4f, of %d %.4f ms\n", 1e3 * costs->lone, MEMBERS, 1e3 * costs->block,
           contest->is_smoke ? 2 * MEMBERS : MANY_MEMBERS, 1e3 * costs->many);
    print_rival("same cells", &rivals[0], costs->rival[0], worse, floor, aim);
    print_rival("free cells", &rivals[1], costs->rival[1], worse, floor, aim);
    if (rivals[0].is_found && rivals[1].is_found)
        printf("    a lone run of each: %.3f, %.3f ms = %.2f x, %.2f x\n", 1e3 * costs->rival_lone[0],
               1e3 * costs->rival_lone[1], costs->rival_lone[0] / costs->lone, costs->rival_lone[1] / costs->lone);
    if (free_one->is_found) {
        printf("    engine, free            %3zu cells, %4.0f s             ", free_one->cells,
               free_one->time_step_s);
        print_accuracy(&free_one->accuracy);
        printf("  per member of %d %.4f ms\n", MEMBERS, 1e3 * costs->free_block);
        print_rival("both free", &rivals[1], costs->rival[1], costs->free_block, floor, aim);
    }
}

/* --- a case ---------------------------------------------------------------------------------------------------------- */

static bool contest_prepare(struct contest *contest)
{
    const struct river_case *river = contest->river;
    double root_slope = sqrt(river->slope_m_per_m);
    struct flow_curve_place peak;
    contest->largest_m3s = river->flood.base_m3s + river->flood.rise_m3s;
    contest->count = river_case_output_count(river);
    contest->flow_m3s = calloc(contest->count, sizeof *contest->flow_m3s);
    if (contest->flow_m3s == NULL ||
        flow_curve_init(&contest->curve, &river->section, 1e-3 / root_slope,
                        32.0 * contest->largest_m3s / root_slope) != FW_OK ||
        area_table_init(&contest->table, &contest->curve, 1.0) != FW_OK)
        return false;
    flow_curve_at(&contest->curve, contest->largest_m3s / root_slope, &peak);
    double celerity = peak.conveyance_slope_m_s * root_slope;
    contest->diffusion_length_m = flow_curve_diffusivity_m2_s(contest->largest_m3s, peak.area_m2, peak.top_width_m,
                                                              celerity, river->slope_m_per_m) /
                                  celerity;
    return true;
}

static bool run_contest(struct contest *contest)
{
    struct costs costs;
    const struct river_case *river = contest->river;
    struct engine_choice own = try_engine(contest, river->cell_count, river->time_step_s, 1);
    contest->goal = contest->is_smoke ? (struct accuracy){0.02, 60.0, 2e-3} : own.accuracy;
    struct rival_choice rivals[] = {choose_rival(contest, false), choose_rival(contest, true)};
    struct engine_choice free_one = choose_engine(contest);
    if (!own.is_found || !measure_costs(contest, rivals, &free_one, &costs))
        return false;
    print_contest(contest, rivals, &free_one, &costs);
    /* wide: a wrong build or a wrong rival is far outside */
    return isfinite(own.accuracy.missed) && own.accuracy.missed < 5e-3 && fabs(own.accuracy.peak_error) < 0.02 &&
           fabs(own.accuracy.time_error_s) < 120.0 && rivals[1].is_found && rivals[1].accuracy.missed < 5e-3;
}

static bool run_case(const struct river_case *river, bool is_smoke)
{
    struct full_flow_result truth = {0};
    const struct full_flow_case fine = {.section = &river->section,
                                        .slope_m_per_m = river->slope_m_per_m,
                                        .length_m = river->length_m,
                                        .cell_count =
                                            is_smoke ? river->truth_cell_count / 4 : river->truth_cell_count,
                                        .largest_m3s = river->flood.base_m3s + river->flood.rise_m3s,
                                        .duration_s = river->duration_s,
                                        .output_step_s = river->time_step_s,
                                        .inflow = flood_m3s,
                                        .inflow_parameters = &river->flood};
    bool is_well = full_flow_run(&fine, &truth);
    for (int is_full = river->is_for_storage_form ? 0 : 1; is_full < 2 && is_well; is_full++) {
        struct contest contest = {.river = river,
                                  .is_full = is_full == 1,
                                  .is_smoke = is_smoke,
                                  .truth_m3s = full_flow_discharge_at(&truth, 0)};
        is_well = contest_prepare(&contest) && run_contest(&contest);
        area_table_clear(&contest.table);
        flow_curve_clear(&contest.curve);
        free(contest.flow_m3s);
    }
    full_flow_result_clear(&truth);
    return is_well;
}

bool bench_rival(struct engine_bench *bench)
{
    bool is_well = true;
    printf("\nAgainst SUNDIALS CVODE (BDF, banded, method of lines, same tables), equal accuracy; the rival runs "
           "once per "
           "member.\n  Ratios are to the dearer of 32 and 1,000 members; floor 30, aim 60 (storage form), 8 and 15 "
           "(full)\n");
    for (size_t i = 0; i < RIVER_CASE_COUNT; i++) {
        struct river_case river = river_cases[i];
        if (bench->is_smoke && i != 1)
            continue;
        if (bench->is_smoke)
            river.cell_count = 40;
        is_well = run_case(&river, bench->is_smoke) && is_well;
    }
    return is_well;
}

#else

bool bench_rival(struct engine_bench *bench)
{
    (void)bench;
    printf("\nAgainst SUNDIALS CVODE: NOT MEASURED, the library was not found when this program was built "
           "(libsundials-dev)\n");
    return true;
}

#endif
