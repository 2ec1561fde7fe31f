/* SPDX-License-Identifier: MIT */
/*
 * The engine against a general library for differential equations at equal accuracy: who is how much dearer.
 *
 * Four ways of the engine, and to each the cheapest rival that is as accurate:
 *   named     the cells and step of the named case; the rival on as many cells, and on any
 *   free      any cells and step that are as accurate as `named`, against the same rival on any cells
 *   asked     both the cheapest that reach what is asked of the engine on named rivers
 *   daemon    the cells and step that the daemon's rules give for readings every 15 min
 * One rival run is one member. All are timed in turns.
 */
#include <math.h>
#include <stdio.h>
#include <string.h>

#include "tests/bench/engine_bench.h"

#if defined(FW_BENCH_RIVAL)

#include "engine/method.h"
#include "tests/bench/contest.h"
#include "tests/independent/full_flow.h"

enum way { NAMED, FREE, ASKED, DAEMON, WAYS };
enum against { NAMED_SAME_CELLS, NAMED_ANY_CELLS, ASKED_ANY, DAEMON_ANY, RIVALS };
enum { MANY_GROUPS = 25, MEMBERS_OF_A_GROUP = 40, SMOKE_GROUPS = 2, DATA_INTERVAL_S = 900 };
static const char *const way_names[] = {"named", "free", "asked", "daemon"};

struct match {
    struct contest contest;
    struct accuracy goal[WAYS]; /* FREE has that of NAMED */
    struct engine_trial engine[WAYS];
    struct rival_trial rival[RIVALS];
    /* measured in turns, seconds per member */
    double lone_s[WAYS], block_s[WAYS], many_s[WAYS];
    double rival_s[RIVALS], rival_lone_s[RIVALS];
};

/* --- who takes part ------------------------------------------------------------------------------------------- */

static void choose_sides(struct match *match)
{
    struct contest *contest = &match->contest;
    const struct river_case *river = contest->river;
    const struct method_flood flood = {
        .base_m3s = river->flood.base_m3s, .peak_m3s = contest->largest_m3s, .rise_s = flood_rise_s(&river->flood)};
    double daemon_step_s = contest->is_smoke ? 300.0 : method_time_step_s(&flood, DATA_INTERVAL_S);
    contest_run_trials(contest);
    match->engine[NAMED] = contest_try_engine(contest, river->cell_count, river->time_step_s, 1);
    match->engine[DAEMON] = contest_try_engine(contest, 0, daemon_step_s, 1);
    match->goal[NAMED] = match->goal[FREE] = accuracy_goal_as(&match->engine[NAMED].accuracy);
    match->goal[DAEMON] = accuracy_goal_as(&match->engine[DAEMON].accuracy);
    match->goal[ASKED] = accuracy_goal_asked(river->time_step_s);
    match->engine[FREE] = contest_cheapest_engine(contest, &match->goal[FREE]);
    match->engine[ASKED] = contest_cheapest_engine(contest, &match->goal[ASKED]);
    match->rival[NAMED_SAME_CELLS] = contest_cheapest_rival(contest, &match->goal[NAMED], river->cell_count);
    match->rival[NAMED_ANY_CELLS] = contest_cheapest_rival(contest, &match->goal[NAMED], 0);
    match->rival[ASKED_ANY] = contest_cheapest_rival(contest, &match->goal[ASKED], 0);
    match->rival[DAEMON_ANY] = contest_cheapest_rival(contest, &match->goal[DAEMON], 0);
}

/* --- timed in turns ------------------------------------------------------------------------------------------- */

struct sides {
    struct network_run lone[WAYS], block[WAYS], many[WAYS];
    struct laps lone_laps[WAYS], block_laps[WAYS], many_laps[WAYS];
    struct rival *rival[RIVALS];
    struct laps rival_laps[RIVALS][CONTEST_MEMBERS];
};

static bool make_run(const struct match *match, enum way way, size_t groups, size_t members, struct network_run *run)
{
    struct network_run_setup setup = contest_engine_setup(&match->contest, &match->engine[way], members);
    setup.group_count = groups;
    return match->engine[way].seconds == 0.0 || network_run_init(run, &setup);
}

static bool advance_often(struct network_run *run, int times, struct laps *laps)
{
    for (int i = 0; i < times && run->network != NULL; i++)
        if (!network_run_advance(run, laps))
            return false;
    return true;
}

static size_t rival_members(const struct match *match)
{
    return match->contest.is_smoke ? 2 : CONTEST_MEMBERS;
}

static size_t many_groups(const struct match *match)
{
    return match->contest.is_smoke ? SMOKE_GROUPS : MANY_GROUPS;
}

static size_t many_members(const struct match *match)
{
    return many_groups(match) * MEMBERS_OF_A_GROUP;
}

static bool run_rival(struct match *match, struct rival *rival, struct laps laps[])
{
    struct rival_counts counts;
    for (size_t member = 0; member < rival_members(match) && rival != NULL; member++) {
        struct flood flood = flood_of_member(&match->contest.river->flood, member);
        if (!rival_run(rival, flood_m3s, &flood, match->contest.flow_m3s, &laps[member], &counts))
            return false;
    }
    return true;
}

static bool make_sides(const struct match *match, struct sides *sides)
{
    const struct rival_reach reach = contest_reach(&match->contest);
    for (enum way way = NAMED; way < WAYS; way++)
        if (!make_run(match, way, 1, 1, &sides->lone[way]) ||
            !make_run(match, way, 1, CONTEST_MEMBERS, &sides->block[way]) ||
            /* the daemon's short steps of a thousand would only take memory and time */
            (way != DAEMON && !make_run(match, way, many_groups(match), MEMBERS_OF_A_GROUP, &sides->many[way])))
            return false;
    for (size_t i = 0; i < RIVALS; i++)
        if (match->rival[i].seconds > 0.0 && !rival_create(&sides->rival[i], &reach, &match->rival[i].setup))
            return false;
    return true;
}

static void clear_sides(struct sides *sides)
{
    for (enum way way = NAMED; way < WAYS; way++) {
        network_run_clear(&sides->lone[way]);
        network_run_clear(&sides->block[way]);
        network_run_clear(&sides->many[way]);
    }
    for (size_t i = 0; i < RIVALS; i++)
        rival_destroy(sides->rival[i]);
}

static bool measure_costs(struct match *match)
{
    static struct sides sides;
    sides = (struct sides){.rival = {NULL}};
    bool is_well = make_sides(match, &sides);
    for (int round = 0; round < (match->contest.is_smoke ? 1 : 5) && is_well; round++) {
        for (enum way way = NAMED; way < WAYS && is_well; way++)
            is_well = advance_often(&sides.lone[way], way == DAEMON ? 1 : 4, &sides.lone_laps[way]) &&
                      advance_often(&sides.block[way], way == DAEMON ? 1 : 2, &sides.block_laps[way]) &&
                      advance_often(&sides.many[way], 1, &sides.many_laps[way]);
        for (size_t i = 0; i < RIVALS && is_well; i++)
            is_well = run_rival(match, sides.rival[i], sides.rival_laps[i]);
    }
    for (enum way way = NAMED; way < WAYS; way++) {
        match->lone_s[way] = laps_total_s(&sides.lone_laps[way]);
        match->block_s[way] = laps_total_s(&sides.block_laps[way]) / CONTEST_MEMBERS;
        match->many_s[way] = laps_total_s(&sides.many_laps[way]) / (double)many_members(match);
    }
    for (size_t i = 0; i < RIVALS; i++) {
        for (size_t member = 0; member < rival_members(match); member++)
            match->rival_s[i] += laps_total_s(&sides.rival_laps[i][member]) / (double)rival_members(match);
        match->rival_lone_s[i] = laps_total_s(&sides.rival_laps[i][0]);
    }
    clear_sides(&sides);
    /* as many cells are some of any: what was chosen by a few runs, many runs may correct */
    if (match->rival[NAMED_SAME_CELLS].seconds > 0.0 &&
        match->rival_s[NAMED_SAME_CELLS] < match->rival_s[NAMED_ANY_CELLS]) {
        match->rival[NAMED_ANY_CELLS] = match->rival[NAMED_SAME_CELLS];
        match->rival_s[NAMED_ANY_CELLS] = match->rival_s[NAMED_SAME_CELLS];
        match->rival_lone_s[NAMED_ANY_CELLS] = match->rival_lone_s[NAMED_SAME_CELLS];
    }
    return is_well;
}

/* --- what is printed ------------------------------------------------------------------------------------------ */

static void print_accuracy(const struct accuracy *accuracy)
{
    printf("  peak %+7.3f %% %+6.2f min  1-NSE %.1e ", 100.0 * accuracy->peak_error, accuracy->time_error_s / 60.0,
           accuracy->missed);
}

static void print_engine(const struct match *match, enum way way)
{
    const struct engine_trial *engine = &match->engine[way];
    printf("    engine, %-9s", way_names[way]);
    if (engine->seconds == 0.0) {
        printf("   none is as accurate\n");
        return;
    }
    printf(" %3zu cells, %4.0f s             ", engine->cells, engine->time_step_s);
    print_accuracy(&engine->accuracy);
    printf("  lone %7.3f ms, of %d %7.4f ms", 1e3 * match->lone_s[way], CONTEST_MEMBERS, 1e3 * match->block_s[way]);
    if (way != DAEMON)
        printf(", of %zu %7.4f ms", many_members(match), 1e3 * match->many_s[way]);
    printf("\n");
}

/* Ratios to a lone run and per member of 32 and of 1,000; the verdict is on the least of those per member. */
static void print_rival(const struct match *match, const char *name, enum against against, enum way way)
{
    const struct rival_trial *rival = &match->rival[against];
    const double floor = match->contest.is_full ? 8.0 : 30.0, aim = match->contest.is_full ? 15.0 : 60.0;
    printf("      rival, %-8s", name);
    if (rival->seconds == 0.0 || match->engine[way].seconds == 0.0) {
        printf("   %s\n", rival->seconds == 0.0 ? "none of its setups is as accurate" : "no match");
        return;
    }
    double by_block = match->rival_s[against] / match->block_s[way];
    double by_many = way == DAEMON ? by_block : match->rival_s[against] / match->many_s[way];
    printf(" %3zu cells, rtol %.0e, order %d", rival->setup.cell_count, rival->setup.relative_tolerance,
           rival->setup.most_order);
    print_accuracy(&rival->accuracy);
    printf("  %7.3f ms: lone %5.2f x, of %d %6.1f x", 1e3 * match->rival_s[against],
           match->rival_lone_s[against] / match->lone_s[way], CONTEST_MEMBERS, by_block);
    if (way != DAEMON)
        printf(", of %zu %6.1f x", many_members(match), by_many);
    printf("  %s\n", bench_verdict_above(fmin(by_block, by_many), floor, aim));
}

/* How near each comes to the judge on its finest grids: both solve the same problem, or its diffusive form. */
static void print_most_accurate(const struct contest *contest)
{
    const struct rival_trial *rival = &contest->rival_trials[0];
    const struct engine_trial *engine = &contest->engine_trials[0];
    for (size_t i = 0; i < contest->rival_trial_count; i++)
        if (contest->rival_trials[i].seconds > 0.0 &&
            contest->rival_trials[i].accuracy.missed < rival->accuracy.missed)
            rival = &contest->rival_trials[i];
    for (size_t i = 0; i < contest->engine_trial_count; i++)
        if (contest->engine_trials[i].seconds > 0.0 &&
            contest->engine_trials[i].accuracy.missed < engine->accuracy.missed)
            engine = &contest->engine_trials[i];
    printf("    most accurate: engine   %3zu cells, %4.0f s            ", engine->cells, engine->time_step_s);
    print_accuracy(&engine->accuracy);
    printf("\n      and rival            %3zu cells, rtol %.0e, order %d", rival->setup.cell_count,
           rival->setup.relative_tolerance, rival->setup.most_order);
    print_accuracy(&rival->accuracy);
    printf("\n");
}

static void print_match(const struct match *match)
{
    printf("  %s\n",
           match->contest.is_full ? "full equations against Saint-Venant" : "storage form against diffusive");
    print_engine(match, NAMED);
    print_rival(match, "as many", NAMED_SAME_CELLS, NAMED);
    print_rival(match, "any", NAMED_ANY_CELLS, NAMED);
    print_engine(match, FREE);
    print_rival(match, "any", NAMED_ANY_CELLS, FREE);
    print_engine(match, ASKED);
    print_rival(match, "any", ASKED_ANY, ASKED);
    print_engine(match, DAEMON);
    print_rival(match, "any", DAEMON_ANY, DAEMON);
    print_most_accurate(&match->contest);
}

/* --- a case --------------------------------------------------------------------------------------------------- */

/* Wide: a wrong build, or a rival that solves another problem, is far outside. */
static bool is_within_bounds(const struct accuracy *accuracy)
{
    return accuracy->missed >= 0.0 && accuracy->missed < 5e-3 && fabs(accuracy->peak_error) < 0.02 &&
           fabs(accuracy->time_error_s) < 1500.0;
}

static bool run_match(const struct river_case *river, bool is_full, bool is_smoke, const double truth_m3s[])
{
    static struct match match;
    match =
        (struct match){.contest = {.river = river, .is_full = is_full, .is_smoke = is_smoke, .truth_m3s = truth_m3s}};
    bool is_well = contest_prepare(&match.contest);
    if (is_well) {
        choose_sides(&match);
        is_well = measure_costs(&match);
    }
    if (is_well) {
        print_match(&match);
        is_well = match.engine[NAMED].seconds > 0.0 && is_within_bounds(&match.engine[NAMED].accuracy) &&
                  match.engine[DAEMON].seconds > 0.0 && is_within_bounds(&match.engine[DAEMON].accuracy);
        struct accuracy any = {1.0, 1e9, 1.0};
        struct rival_trial rival = contest_cheapest_rival(&match.contest, &any, river->cell_count);
        is_well = is_well && rival.seconds > 0.0 && (!is_smoke || is_within_bounds(&rival.accuracy));
    }
    contest_clear(&match.contest);
    return is_well;
}

/* The river, and what the engine's rule chooses for it. */
static bool print_choice(const struct river_case *river)
{
    const struct network_run_setup setup = {.section = &river->section,
                                            .slope_m_per_m = river->slope_m_per_m,
                                            .reach_m = river->length_m,
                                            .reach_count = 1,
                                            .method = NETWORK_AUTO,
                                            .group_count = 1,
                                            .members_per_group = 1,
                                            .time_step_s = river->time_step_s,
                                            .step_count = 1,
                                            .flood = river->flood};
    struct method_choice choice;
    struct network_run run;
    if (!network_run_init(&run, &setup))
        return false;
    network_reach_choice(run.network, 0, &choice);
    printf("\n  %s: %s\n  by rule: %s (%s)\n", river->name, river->description, method_name(choice.method),
           method_reason_text(choice.reason));
    network_run_clear(&run);
    return true;
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
    bool is_well = print_choice(river) && full_flow_run(&fine, &truth);
    if (is_well && river->is_for_storage_form)
        is_well = run_match(river, false, is_smoke, full_flow_discharge_at(&truth, 0));
    if (is_well)
        is_well = run_match(river, true, is_smoke, full_flow_discharge_at(&truth, 0));
    full_flow_result_clear(&truth);
    return is_well;
}

bool bench_rival(struct engine_bench *bench)
{
    bool is_well = true;
    printf(
        "\nAgainst SUNDIALS CVODE (BDF, banded, method of lines, same tables) at equal accuracy; the rival runs once "
        "per member.\nPer member of 32 and of 1,000 (25 roughness groups): storage form floor 30 x, aim 60 x; full "
        "equations floor 8 x, "
        "aim "
        "15 x\n");
    for (size_t i = 0; i < RIVER_CASE_COUNT; i++) {
        struct river_case river = river_cases[i];
        bool is_wanted = bench->river == NULL || strcmp(bench->river, river.name) == 0;
        if (!is_wanted || (bench->is_smoke && i != 1))
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
