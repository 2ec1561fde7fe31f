/* SPDX-License-Identifier: MIT */
#include "tests/bench/contest.h"

#include <math.h>
#include <stdlib.h>

enum { FINALISTS = 8, FINAL_REPEATS = 5 };

bool contest_prepare(struct contest *contest)
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

void contest_clear(struct contest *contest)
{
    area_table_clear(&contest->table);
    flow_curve_clear(&contest->curve);
    free(contest->flow_m3s);
    contest->flow_m3s = NULL;
}

/* --- one trial ------------------------------------------------------------------------------------------------ */

struct rival_reach contest_reach(const struct contest *contest)
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

struct rival_trial contest_try_rival(struct contest *contest, const struct rival_setup *setup, int repeats)
{
    static struct laps laps;
    const struct rival_reach reach = contest_reach(contest);
    struct rival_trial trial = {.setup = *setup};
    struct rival_counts counts;
    struct rival *rival = NULL;
    bool has_run = rival_create(&rival, &reach, setup);
    laps.count = 0;
    for (int repeat = 0; repeat < repeats && has_run; repeat++)
        has_run = rival_run(rival, flood_m3s, &contest->river->flood, contest->flow_m3s, &laps, &counts);
    rival_destroy(rival);
    if (!has_run)
        return trial;
    trial.seconds = laps_total_s(&laps);
    trial.work = (double)(setup->cell_count * (setup->is_diffusive ? 1 : 2)) *
                 (double)(counts.evaluations + counts.steps + 2 * counts.factorings);
    trial.accuracy = accuracy_of(contest->count, contest->river->time_step_s, contest->truth_m3s, contest->flow_m3s);
    return trial;
}

struct network_run_setup contest_engine_setup(const struct contest *contest, const struct engine_trial *trial,
                                              size_t members)
{
    const struct river_case *river = contest->river;
    return (struct network_run_setup){.section = &river->section,
                                      .slope_m_per_m = river->slope_m_per_m,
                                      .reach_m = river->length_m,
                                      .reach_count = 1,
                                      .method = contest->is_full ? NETWORK_DYNAMIC : NETWORK_MUSKINGUM_CUNGE,
                                      .cells_per_reach = trial->cells,
                                      .group_count = 1,
                                      .members_per_group = members,
                                      .time_step_s = trial->time_step_s,
                                      .step_count = (size_t)(river->duration_s / trial->time_step_s + 0.5),
                                      .flood = river->flood};
}

/* Member 0 at the case's outputs, in straight lines between steps. */
static struct accuracy engine_accuracy(struct contest *contest, const struct network_run *run)
{
    size_t members = run->setup.members_per_group, last = run->setup.step_count;
    for (size_t i = 0; i < contest->count; i++) {
        double at = contest->river->time_step_s * (double)i / run->setup.time_step_s;
        size_t step = (size_t)(at + 1e-9), next = step < last ? step + 1 : step;
        double share = fmax(0.0, at - (double)step);
        contest->flow_m3s[i] =
            (1.0 - share) * run->outflow_m3s[step * members] + share * run->outflow_m3s[next * members];
    }
    return accuracy_of(contest->count, contest->river->time_step_s, contest->truth_m3s, contest->flow_m3s);
}

struct engine_trial contest_try_engine(struct contest *contest, size_t cells, double time_step_s, int repeats)
{
    struct engine_trial trial = {.cells = cells, .time_step_s = time_step_s};
    const struct network_run_setup setup = contest_engine_setup(contest, &trial, CONTEST_MEMBERS);
    struct network_run run;
    if (!network_run_init(&run, &setup))
        return trial;
    double seconds = network_run_best_s(&run, repeats);
    trial.cells = network_cell_count(run.network, 0);
    trial.accuracy = engine_accuracy(contest, &run);
    trial.seconds = seconds > 0.0 ? seconds / CONTEST_MEMBERS : 0.0;
    network_run_clear(&run);
    return trial;
}

/* --- all of them ---------------------------------------------------------------------------------------------- */

static void run_rival_trials(struct contest *contest)
{
    const size_t named = contest->river->cell_count;
    const size_t cells[] = {named, 12, 16, 20, 25, 30, 40, 50, 65, 80, 100, 130};
    static const double tolerances[] = {1e-2, 5e-3, 2e-3, 1e-3, 5e-4, 2e-4, 1e-4, 5e-5, 2e-5};
    static const int orders[] = {2, 3, 5};
    for (size_t i = 0; i < sizeof cells / sizeof *cells; i++)
        for (size_t t = 0; t < sizeof tolerances / sizeof *tolerances; t++)
            for (size_t o = 0; o < sizeof orders / sizeof *orders; o++) {
                const struct rival_setup setup = {.is_diffusive = !contest->is_full,
                                                  .cell_count = cells[i],
                                                  .relative_tolerance = tolerances[t],
                                                  .most_order = orders[o],
                                                  .beyond_m = 5.0 * contest->diffusion_length_m};
                bool is_double = i > 0 && cells[i] == named;
                bool is_left_out = contest->is_smoke && (i > 0 || tolerances[t] > 1.5e-3 || tolerances[t] < 1.5e-4);
                if (!is_double && !is_left_out && contest->rival_trial_count < MOST_RIVAL_TRIALS)
                    contest->rival_trials[contest->rival_trial_count++] = contest_try_rival(contest, &setup, 1);
            }
}

static void run_engine_trials(struct contest *contest)
{
    static const size_t cells[] = {10, 12, 15, 20, 25, 30, 40, 50, 60, 80, 100};
    static const double steps[] = {30.0, 60.0, 120.0, 300.0, 600.0, 900.0, 1200.0, 1800.0};
    for (size_t i = 0; i < sizeof cells / sizeof *cells; i++)
        for (size_t s = 0; s < sizeof steps / sizeof *steps; s++) {
            bool is_left_out = steps[s] < 0.5 * contest->river->time_step_s ||
                               (contest->is_smoke && (cells[i] != 40 || steps[s] < 60.0));
            if (!is_left_out && contest->engine_trial_count < MOST_ENGINE_TRIALS)
                contest->engine_trials[contest->engine_trial_count++] =
                    contest_try_engine(contest, cells[i], steps[s], 1);
        }
}

void contest_run_trials(struct contest *contest)
{
    run_rival_trials(contest);
    run_engine_trials(contest);
}

/* One run's time wavers: the few with the least work are run again, several times, and the cheapest of them taken. */
struct rival_trial contest_cheapest_rival(struct contest *contest, const struct accuracy *goal, size_t cells)
{
    bool is_out[MOST_RIVAL_TRIALS] = {false};
    struct rival_trial best = {.seconds = 0.0};
    for (int finalist = 0; finalist < (contest->is_smoke ? 1 : FINALISTS); finalist++) {
        size_t next = MOST_RIVAL_TRIALS;
        for (size_t i = 0; i < contest->rival_trial_count; i++) {
            const struct rival_trial *trial = &contest->rival_trials[i];
            if (!is_out[i] && trial->seconds > 0.0 && (cells == 0 || trial->setup.cell_count == cells) &&
                accuracy_reaches(&trial->accuracy, goal) &&
                (next == MOST_RIVAL_TRIALS || trial->work < contest->rival_trials[next].work))
                next = i;
        }
        if (next == MOST_RIVAL_TRIALS)
            break;
        is_out[next] = true;
        struct rival_trial again = contest_try_rival(contest, &contest->rival_trials[next].setup, FINAL_REPEATS);
        if (best.seconds == 0.0 || again.seconds < best.seconds)
            best = again;
    }
    return best;
}

struct engine_trial contest_cheapest_engine(struct contest *contest, const struct accuracy *goal)
{
    bool is_out[MOST_ENGINE_TRIALS] = {false};
    struct engine_trial best = {.seconds = 0.0};
    for (int finalist = 0; finalist < (contest->is_smoke ? 1 : FINALISTS); finalist++) {
        size_t next = MOST_ENGINE_TRIALS;
        for (size_t i = 0; i < contest->engine_trial_count; i++) {
            const struct engine_trial *trial = &contest->engine_trials[i];
            if (!is_out[i] && trial->seconds > 0.0 && accuracy_reaches(&trial->accuracy, goal) &&
                (next == MOST_ENGINE_TRIALS || trial->seconds < contest->engine_trials[next].seconds))
                next = i;
        }
        if (next == MOST_ENGINE_TRIALS)
            break;
        is_out[next] = true;
        const struct engine_trial *trial = &contest->engine_trials[next];
        struct engine_trial again = contest_try_engine(contest, trial->cells, trial->time_step_s, FINAL_REPEATS);
        if (best.seconds == 0.0 || again.seconds < best.seconds)
            best = again;
    }
    return best;
}
