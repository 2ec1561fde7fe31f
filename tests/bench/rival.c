/* SPDX-License-Identifier: MIT */
#include "tests/bench/rival.h"

#include <cvode/cvode.h>
#include <math.h>
#include <nvector/nvector_serial.h>
#include <stdlib.h>
#include <string.h>
#include <sundials/sundials_context.h>
#include <sunlinsol/sunlinsol_band.h>
#include <sunmatrix/sunmatrix_band.h>

static const double gravity_m_s2 = 9.80665, lengthening = 1.3;
enum { STEPS_OF_A_LAP = 16, MOST_STEPS = STEPS_OF_A_LAP * (MOST_LAPS - 2) };

struct rival_cell {
    double depth, depth_by_area, conveyance, conveyance_by_area, area;
};

struct rival {
    struct rival_reach reach;
    struct rival_setup setup;
    size_t cell_count; /* those beyond the foot too */
    double *room;
    double *length_m;   /* cells */
    double *distance_m; /* ends: between the centres beside it; [0] and the last not used */
    double *per_length; /* cells */
    double *part_above; /* ends: weight of the cell above in what is there */
    struct rival_cell *cells;
    double *flow_m3s; /* ends */
    double (*inflow)(double t_s, const void *parameters);
    const void *parameters;
    SUNContext context;
    N_Vector state, rates;
    SUNMatrix matrix;
    SUNLinearSolver solver;
    void *cvode;
};

/* --- the equations -------------------------------------------------------------------------------------------- */

static inline struct rival_cell read_cell(const struct area_table *table, double area)
{
    const struct area_table_row *row = area_table_row_at(table, area);
    return (struct rival_cell){row->depth_0 + row->depth_1 * area, row->depth_1,
                               row->conveyance_0 + row->conveyance_1 * area, row->conveyance_1, area};
}

static inline double end_conveyance(const struct rival *rival, size_t end)
{
    double above = rival->part_above[end];
    return above * rival->cells[end - 1].conveyance + (1.0 - above) * rival->cells[end].conveyance;
}

static inline double surface_slope(const struct rival *rival, size_t end)
{
    return rival->reach.slope_m_per_m -
           (rival->cells[end].depth - rival->cells[end - 1].depth) / rival->distance_m[end];
}

static inline double root_of(double slope)
{
    return copysign(sqrt(fabs(slope)), slope);
}

static double normal_flow(const struct rival *rival)
{
    return rival->cells[rival->cell_count - 1].conveyance * sqrt(rival->reach.slope_m_per_m);
}

static int diffusive_rates(double t_s, N_Vector state, N_Vector rates, void *user)
{
    struct rival *rival = user;
    const double *area = N_VGetArrayPointer(state);
    double *rate = N_VGetArrayPointer(rates);
    const size_t count = rival->cell_count;
    for (size_t i = 0; i < count; i++)
        rival->cells[i] = read_cell(rival->reach.table, area[i]);
    double above = rival->inflow(t_s, rival->parameters);
    for (size_t i = 0; i + 1 < count; i++) {
        double below = end_conveyance(rival, i + 1) * root_of(surface_slope(rival, i + 1));
        rate[i] = (above - below) * rival->per_length[i];
        above = below;
    }
    rate[count - 1] = (above - normal_flow(rival)) * rival->per_length[count - 1];
    return 0;
}

static int diffusive_derivatives(double t_s, N_Vector state, N_Vector rates, SUNMatrix matrix, void *user,
                                 N_Vector scratch_1, N_Vector scratch_2, N_Vector scratch_3)
{
    struct rival *rival = user;
    const double *area = N_VGetArrayPointer(state);
    const sunindextype count = (sunindextype)rival->cell_count;
    (void)t_s, (void)rates, (void)scratch_1, (void)scratch_2, (void)scratch_3;
    for (sunindextype i = 0; i < count; i++)
        rival->cells[i] = read_cell(rival->reach.table, area[i]);
    for (sunindextype end = 1; end < count; end++) {
        const struct rival_cell *above = &rival->cells[end - 1], *below = &rival->cells[end];
        double part = rival->part_above[end], conveyance = end_conveyance(rival, (size_t)end);
        double root = root_of(surface_slope(rival, (size_t)end));
        double by_slope = conveyance / fmax(2.0 * fabs(root), 1e-9) / rival->distance_m[end];
        double by_above = part * above->conveyance_by_area * root + by_slope * above->depth_by_area;
        double by_below = (1.0 - part) * below->conveyance_by_area * root - by_slope * below->depth_by_area;
        SM_ELEMENT_B(matrix, end - 1, end - 1) -= by_above * rival->per_length[end - 1];
        SM_ELEMENT_B(matrix, end - 1, end) -= by_below * rival->per_length[end - 1];
        SM_ELEMENT_B(matrix, end, end - 1) += by_above * rival->per_length[end];
        SM_ELEMENT_B(matrix, end, end) += by_below * rival->per_length[end];
    }
    SM_ELEMENT_B(matrix, count - 1, count - 1) -=
        rival->cells[count - 1].conveyance_by_area * sqrt(rival->reach.slope_m_per_m) * rival->per_length[count - 1];
    return 0;
}

/* Unknowns of the full equations: the area of cell i at 2 i, the flow at its upper end at 2 i - 1. */
static void read_full_state(struct rival *rival, double t_s, const double state[])
{
    const size_t count = rival->cell_count;
    for (size_t i = 0; i < count; i++)
        rival->cells[i] = read_cell(rival->reach.table, state[2 * i]);
    rival->flow_m3s[0] = rival->inflow(t_s, rival->parameters);
    for (size_t end = 1; end < count; end++)
        rival->flow_m3s[end] = state[2 * end - 1];
    rival->flow_m3s[count] = normal_flow(rival);
}

static int full_rates(double t_s, N_Vector state, N_Vector rates, void *user)
{
    struct rival *rival = user;
    double *rate = N_VGetArrayPointer(rates);
    const double *flow = rival->flow_m3s;
    const size_t count = rival->cell_count;
    read_full_state(rival, t_s, N_VGetArrayPointer(state));
    double mean = 0.5 * (flow[0] + flow[1]);
    double flux_above = mean * mean / rival->cells[0].area;
    rate[0] = (flow[0] - flow[1]) * rival->per_length[0];
    for (size_t end = 1; end < count; end++) {
        double part = rival->part_above[end], conveyance = end_conveyance(rival, end);
        double area = part * rival->cells[end - 1].area + (1.0 - part) * rival->cells[end].area;
        mean = 0.5 * (flow[end] + flow[end + 1]);
        double flux_below = mean * mean / rival->cells[end].area;
        double friction = flow[end] * fabs(flow[end]) / (conveyance * conveyance);
        rate[2 * end - 1] = (flux_above - flux_below) / rival->distance_m[end] +
                            gravity_m_s2 * area * (surface_slope(rival, end) - friction);
        rate[2 * end] = (flow[end] - flow[end + 1]) * rival->per_length[end];
        flux_above = flux_below;
    }
    return 0;
}

static int full_derivatives(double t_s, N_Vector state, N_Vector rates, SUNMatrix matrix, void *user,
                            N_Vector scratch_1, N_Vector scratch_2, N_Vector scratch_3)
{
    struct rival *rival = user;
    const double *flow = rival->flow_m3s;
    const sunindextype count = (sunindextype)rival->cell_count;
    const double outlet = rival->cells == NULL ? 0.0 : sqrt(rival->reach.slope_m_per_m);
    (void)rates, (void)scratch_1, (void)scratch_2, (void)scratch_3;
    read_full_state(rival, t_s, N_VGetArrayPointer(state));
    for (sunindextype i = 0; i < count; i++) {
        if (i > 0)
            SM_ELEMENT_B(matrix, 2 * i, 2 * i - 1) = rival->per_length[i];
        if (i + 1 < count)
            SM_ELEMENT_B(matrix, 2 * i, 2 * i + 1) = -rival->per_length[i];
        else
            SM_ELEMENT_B(matrix, 2 * i, 2 * i) = -outlet * rival->cells[i].conveyance_by_area * rival->per_length[i];
    }
    for (sunindextype end = 1; end < count; end++) {
        const struct rival_cell *above = &rival->cells[end - 1], *below = &rival->cells[end];
        const sunindextype row = 2 * end - 1;
        double part = rival->part_above[end], conveyance = end_conveyance(rival, (size_t)end);
        double area = part * above->area + (1.0 - part) * below->area, distance = rival->distance_m[end];
        double friction_by_flow = fabs(flow[end]) / (conveyance * conveyance);
        double friction = flow[end] * friction_by_flow;
        double push = gravity_m_s2 * (surface_slope(rival, (size_t)end) - friction);
        double by_conveyance = 2.0 * gravity_m_s2 * area * friction / conveyance;
        double speed_above = 0.5 * (flow[end - 1] + flow[end]) / above->area;
        double speed_below = 0.5 * (flow[end] + flow[end + 1]) / below->area;
        double weight = gravity_m_s2 * area / distance;
        SM_ELEMENT_B(matrix, row, row - 1) = part * (push + by_conveyance * above->conveyance_by_area) +
                                             weight * above->depth_by_area - speed_above * speed_above / distance;
        SM_ELEMENT_B(matrix, row, row + 1) = (1.0 - part) * (push + by_conveyance * below->conveyance_by_area) -
                                             weight * below->depth_by_area + speed_below * speed_below / distance;
        SM_ELEMENT_B(matrix, row, row) =
            (speed_above - speed_below) / distance - 2.0 * gravity_m_s2 * area * friction_by_flow;
        if (end > 1)
            SM_ELEMENT_B(matrix, row, row - 2) = speed_above / distance;
        if (end + 1 < count)
            SM_ELEMENT_B(matrix, row, row + 2) = -speed_below / distance;
        else
            SM_ELEMENT_B(matrix, row, row + 1) -= speed_below / distance * outlet * below->conveyance_by_area;
    }
    return 0;
}

/* --- rooms and handles ---------------------------------------------------------------------------------------- */

static bool make_grid(struct rival *rival)
{
    double cell_m = rival->reach.length_m / (double)rival->setup.cell_count, length_m = cell_m;
    size_t beyond = 0;
    for (double covered_m = 0.0; covered_m < rival->setup.beyond_m; beyond++)
        covered_m += length_m *= lengthening;
    size_t count = rival->cell_count = rival->setup.cell_count + beyond;
    rival->room = calloc(5 * (count + 1), sizeof *rival->room);
    rival->cells = calloc(count, sizeof *rival->cells);
    if (rival->room == NULL || rival->cells == NULL)
        return false;
    rival->length_m = rival->room;
    rival->per_length = rival->length_m + count + 1;
    rival->distance_m = rival->per_length + count + 1;
    rival->part_above = rival->distance_m + count + 1;
    rival->flow_m3s = rival->part_above + count + 1;
    length_m = cell_m;
    for (size_t i = 0; i < count; i++) {
        rival->length_m[i] = i < rival->setup.cell_count ? cell_m : (length_m *= lengthening);
        rival->per_length[i] = 1.0 / rival->length_m[i];
    }
    for (size_t end = 1; end < count; end++) {
        rival->distance_m[end] = 0.5 * (rival->length_m[end - 1] + rival->length_m[end]);
        rival->part_above[end] = rival->length_m[end] / (rival->length_m[end - 1] + rival->length_m[end]);
    }
    return true;
}

static bool make_handles(struct rival *rival)
{
    bool is_diffusive = rival->setup.is_diffusive;
    sunindextype unknowns = (sunindextype)(is_diffusive ? rival->cell_count : 2 * rival->cell_count - 1);
    sunindextype band = is_diffusive ? 1 : 2;
    if (SUNContext_Create(NULL, &rival->context) != 0)
        return false;
    rival->state = N_VNew_Serial(unknowns, rival->context);
    rival->rates = N_VNew_Serial(unknowns, rival->context);
    rival->matrix = SUNBandMatrix(unknowns, band, band, rival->context);
    rival->cvode = CVodeCreate(CV_BDF, rival->context);
    if (rival->state == NULL || rival->rates == NULL || rival->matrix == NULL || rival->cvode == NULL)
        return false;
    rival->solver = SUNLinSol_Band(rival->state, rival->matrix, rival->context);
    N_VConst(1.0, rival->state);
    double smallest = rival->setup.relative_tolerance * 1e-2 * rival->reach.largest_m3s;
    return rival->solver != NULL &&
           CVodeInit(rival->cvode, is_diffusive ? diffusive_rates : full_rates, 0.0, rival->state) == CV_SUCCESS &&
           CVodeSetUserData(rival->cvode, rival) == CV_SUCCESS &&
           CVodeSStolerances(rival->cvode, rival->setup.relative_tolerance, smallest) == CV_SUCCESS &&
           CVodeSetLinearSolver(rival->cvode, rival->solver, rival->matrix) == CV_SUCCESS &&
           CVodeSetJacFn(rival->cvode, is_diffusive ? diffusive_derivatives : full_derivatives) == CV_SUCCESS &&
           CVodeSetMaxOrd(rival->cvode, rival->setup.most_order) == CV_SUCCESS &&
           CVodeSetMaxStep(rival->cvode, rival->reach.longest_step_s) == CV_SUCCESS &&
           CVodeSetErrFile(rival->cvode, NULL) == CV_SUCCESS;
}

bool rival_create(struct rival **rival_out, const struct rival_reach *reach, const struct rival_setup *setup)
{
    struct rival *rival = calloc(1, sizeof *rival);
    if (rival == NULL)
        return false;
    rival->reach = *reach;
    rival->setup = *setup;
    if (!make_grid(rival) || !make_handles(rival)) {
        rival_destroy(rival);
        return false;
    }
    *rival_out = rival;
    return true;
}

void rival_destroy(struct rival *rival)
{
    if (rival == NULL)
        return;
    if (rival->cvode != NULL)
        CVodeFree(&rival->cvode);
    if (rival->solver != NULL)
        SUNLinSolFree(rival->solver);
    if (rival->matrix != NULL)
        SUNMatDestroy(rival->matrix);
    if (rival->state != NULL)
        N_VDestroy(rival->state);
    if (rival->rates != NULL)
        N_VDestroy(rival->rates);
    if (rival->context != NULL)
        SUNContext_Free(&rival->context);
    free(rival->cells);
    free(rival->room);
    free(rival);
}

struct foot { /* at the end of a step: flow there, and its rate of change */
    double t_s, flow_m3s, rate;
};

static struct foot read_foot(struct rival *rival, double t_s)
{
    const double *state = N_VGetArrayPointer(rival->state), *rate = N_VGetArrayPointer(rival->rates);
    const size_t end = rival->setup.cell_count, stride = rival->setup.is_diffusive ? 1 : 2;
    const bool is_outlet = end == rival->cell_count;
    if (!rival->setup.is_diffusive && !is_outlet)
        return (struct foot){t_s, state[2 * end - 1], rate[2 * end - 1]};
    struct rival_cell above = rival->cells[end - 1] = read_cell(rival->reach.table, state[stride * (end - 1)]);
    if (is_outlet)
        return (struct foot){t_s, normal_flow(rival),
                             above.conveyance_by_area * sqrt(rival->reach.slope_m_per_m) * rate[stride * (end - 1)]};
    struct rival_cell below = rival->cells[end] = read_cell(rival->reach.table, state[end]);
    double part = rival->part_above[end], conveyance = end_conveyance(rival, end);
    double root = root_of(surface_slope(rival, end));
    double by_slope = conveyance / fmax(2.0 * fabs(root), 1e-9) / rival->distance_m[end];
    double by_above = part * above.conveyance_by_area * root + by_slope * above.depth_by_area;
    double by_below = (1.0 - part) * below.conveyance_by_area * root - by_slope * below.depth_by_area;
    return (struct foot){t_s, conveyance * root, by_above * rate[end - 1] + by_below * rate[end]};
}

/* Hermite's cubic between the ends of a step. */
static double flow_between(const struct foot *before, const struct foot *after, double t_s)
{
    double step = after->t_s - before->t_s, x = (t_s - before->t_s) / step;
    double rise = after->flow_m3s - before->flow_m3s;
    double bend_before = step * before->rate - rise, bend_after = rise - step * after->rate;
    return before->flow_m3s + x * (rise + (1.0 - x) * ((1.0 - x) * bend_before + x * bend_after));
}

static void start_uniform(struct rival *rival, double first_m3s)
{
    double *state = N_VGetArrayPointer(rival->state);
    double area_m2 =
        area_table_area_of_conveyance_m2(rival->reach.table, first_m3s / sqrt(rival->reach.slope_m_per_m));
    size_t stride = rival->setup.is_diffusive ? 1 : 2;
    for (size_t i = 0; i < rival->cell_count; i++) {
        state[stride * i] = area_m2;
        if (!rival->setup.is_diffusive && i > 0)
            state[2 * i - 1] = first_m3s;
    }
}

bool rival_run(struct rival *rival, double (*inflow)(double t_s, const void *parameters), const void *parameters,
               double outflow_m3s[], struct laps *laps, struct rival_counts *counts_out)
{
    size_t outputs = (size_t)(rival->reach.duration_s / rival->reach.output_step_s + 0.5), next = 1;
    double t_s = 0.0;
    size_t steps = 0;
    rival->inflow = inflow;
    rival->parameters = parameters;
    laps_start(laps);
    outflow_m3s[0] = inflow(0.0, parameters);
    start_uniform(rival, outflow_m3s[0]);
    if (CVodeReInit(rival->cvode, 0.0, rival->state) != CV_SUCCESS)
        return false;
    struct foot before = {0.0, outflow_m3s[0], 0.0};
    for (; next <= outputs; steps++) {
        if (steps % STEPS_OF_A_LAP == STEPS_OF_A_LAP - 1)
            laps_mark(laps);
        if (steps > MOST_STEPS || CVode(rival->cvode, rival->reach.duration_s, rival->state, &t_s, CV_ONE_STEP) < 0 ||
            CVodeGetDky(rival->cvode, t_s, 1, rival->rates) != CV_SUCCESS)
            return false;
        struct foot after = read_foot(rival, t_s);
        for (; next <= outputs && rival->reach.output_step_s * (double)next <= t_s; next++)
            outflow_m3s[next] = flow_between(&before, &after, rival->reach.output_step_s * (double)next);
        before = after;
    }
    laps_mark(laps);
    return CVodeGetNumSteps(rival->cvode, &counts_out->steps) == CV_SUCCESS &&
           CVodeGetNumRhsEvals(rival->cvode, &counts_out->evaluations) == CV_SUCCESS &&
           CVodeGetNumLinSolvSetups(rival->cvode, &counts_out->factorings) == CV_SUCCESS;
}
