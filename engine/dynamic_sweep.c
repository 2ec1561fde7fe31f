/* SPDX-License-Identifier: MIT */
/*
 * One interval between nodes L and R, new values primed, theta the weight of the new time:
 *     continuity  dx/2 (A'L - AL + A'R - AR) + dt [theta (Q'R - Q'L) + (1 - theta) (QR - QL)] - side volume = 0
 *     momentum    s { dx/(2 dt) (Q'L - QL + Q'R - QR) + [Q^2/A] from L to R } + g Am { rise of h - S0 dx + dx Sf } = 0
 * where brackets, Am, the rise and Sf are weighted means over the four points. Newton's corrections obey a dQ = E dA + F
 * at every node: given at the head, carried from L to R by elimination of L, closed at the foot, and followed back up.
 *
 * In the first iteration old and new are one, and the formulas shorter; most steps need no other.
 */
#include "engine/dynamic_internal.h"

#include <math.h>
#include <string.h>

enum { MOST_ITERATIONS = 8 };

/* No array of a loop over members overlaps another, nor does one member's work reach another's: the compiler may take
 * several at once. It cannot see that by itself for so many. */
#if defined(__clang__)
#define ACROSS_MEMBERS _Pragma("clang loop vectorize(assume_safety)")
#else
#define ACROSS_MEMBERS _Pragma("GCC ivdep")
#endif

static const double theta = DYNAMIC_TIME_WEIGHT;
static const double small_correction = 0.02; /* of the area: Newton's next would be its square */

/* --- a node ------------------------------------------------------------------------------------------------------ */

static void look_up(const struct area_table *table, size_t member_count, const double area[restrict],
                    const struct dynamic_node_flow *flow)
{
    double *restrict depth = flow->depth, *restrict depth_by_area = flow->depth_by_area;
    double *restrict conveyance = flow->conveyance, *restrict conveyance_by_area = flow->conveyance_by_area;
    const struct bit_index index = table->by_area;
    const struct area_table_row *rows = table->rows;
    for (size_t m = 0; m < member_count; m++) {
        const struct area_table_row *row = rows + bit_index_row(&index, area[m]);
        depth[m] = row->depth_0 + row->depth_1 * area[m];
        depth_by_area[m] = row->depth_1;
        conveyance[m] = row->conveyance_0 + row->conveyance_1 * area[m];
        conveyance_by_area[m] = row->conveyance_1;
    }
}

static void measure(double momentum_factor, size_t member_count, const double area[restrict],
                    const double discharge[restrict], const struct dynamic_node_flow *flow)
{
    const double *restrict depth_by_area = flow->depth_by_area;
    const double *restrict conveyance = flow->conveyance;
    const double *restrict conveyance_by_area = flow->conveyance_by_area;
    double *restrict speed = flow->speed, *restrict flux = flow->flux;
    double *restrict friction = flow->friction, *restrict friction_by_area = flow->friction_by_area;
    double *restrict friction_by_flow = flow->friction_by_flow, *restrict froude_squared = flow->froude_squared;
    ACROSS_MEMBERS
    for (size_t m = 0; m < member_count; m++) {
        double mean_depth = area[m] * depth_by_area[m]; /* A/B */
        double shared = 1.0 / (mean_depth * conveyance[m]);
        double per_conveyance = shared * mean_depth;
        double per_depth = shared * conveyance[m];
        double per_area = per_depth * depth_by_area[m];
        double friction_per_flow = fabs(discharge[m]) * per_conveyance * per_conveyance;
        speed[m] = discharge[m] * per_area;
        flux[m] = momentum_factor * discharge[m] * speed[m];
        friction[m] = discharge[m] * friction_per_flow;
        friction_by_flow[m] = 2.0 * friction_per_flow;
        friction_by_area[m] = -2.0 * friction[m] * conveyance_by_area[m] * per_conveyance;
        froude_squared[m] = speed[m] * speed[m] * per_depth * (1.0 / dynamic_gravity_m_s2);
    }
}

static void read_node(const struct dynamic_tree *tree, const struct area_table *table, size_t member_count,
                      const double area[], const double discharge[], const struct dynamic_node_flow *flow)
{
    look_up(table, member_count, area, flow);
    measure(tree->momentum_factor, member_count, area, discharge, flow);
}

/* --- an interval ------------------------------------------------------------------------------------------------- */

struct interval {
    double length_m, fall_m; /* the bed's, downstream */
    double time_step_s;
    double momentum_factor;
    double inertia; /* 1 or 0 */
    size_t at;      /* where its arrays, and those of the node above, begin */
    size_t member_count;
};

/* Fread, Jin and Lewis (1996), at the faster of the two nodes. */
static void find_inertia(const struct interval *interval, const struct dynamic_node_flow *left,
                         const struct dynamic_node_flow *right, struct dynamic_work *work)
{
    const double *restrict left_froude = left->froude_squared, *restrict right_froude = right->froude_squared;
    double *restrict inertia = work->inertia + interval->at;
    ACROSS_MEMBERS
    for (size_t m = 0; m < interval->member_count; m++) {
        double square = left_froude[m] > right_froude[m] ? left_froude[m] : right_froude[m];
        double fourth = square * square;
        double share = 1.0 - fourth * fourth * square; /* Fr^10 */
        inertia[m] = share > 0.0 ? interval->inertia * share : 0.0;
    }
}

__attribute__((always_inline)) static inline void eliminate(const struct interval *interval,
                                                            const struct dynamic_node_flow *left,
                                                            const struct dynamic_node_flow *right,
                                                            const struct dynamic_state *state,
                                                            struct dynamic_work *work, const bool is_first)
{
    const size_t count = interval->member_count, at = interval->at;
    const double *restrict area_l = state->area_m2 + at, *restrict area_r = area_l + count;
    const double *restrict flow_l = state->discharge_m3s + at, *restrict flow_r = flow_l + count;
    const double *restrict old_area_l = work->old_area + at, *restrict old_area_r = old_area_l + count;
    const double *restrict old_flow_l = work->old_discharge + at, *restrict old_flow_r = old_flow_l + count;
    const double *restrict old_half_area = work->old_half_area + at, *restrict old_rise = work->old_rise + at;
    const double *restrict old_friction = work->old_friction + at, *restrict old_flux = work->old_flux + at;
    const double *restrict inertia = work->inertia + at, *restrict lateral = work->lateral;
    const double *restrict e_l = work->sweep_e + at, *restrict f_l = work->sweep_f + at;
    double *restrict e_r = work->sweep_e + at + count, *restrict f_r = work->sweep_f + at + count;
    double *restrict lead = work->lead + at, *restrict gain = work->gain + at;
    const double *restrict depth_l = left->depth, *restrict depth_r = right->depth;
    const double *restrict depth_by_l = left->depth_by_area, *restrict depth_by_r = right->depth_by_area;
    const double *restrict speed_l = left->speed, *restrict speed_r = right->speed;
    const double *restrict flux_l = left->flux, *restrict flux_r = right->flux;
    const double *restrict friction_l = left->friction, *restrict friction_r = right->friction;
    const double *restrict by_area_l = left->friction_by_area, *restrict by_area_r = right->friction_by_area;
    const double *restrict by_flow_l = left->friction_by_flow, *restrict by_flow_r = right->friction_by_flow;
    const double dx = interval->length_m, dt = interval->time_step_s, fall = interval->fall_m;
    const double half_dx = 0.5 * dx, dt_new = theta * dt, per_dt = half_dx / dt, half_friction = 0.5 * theta * dx;
    const double beta = interval->momentum_factor, gravity = dynamic_gravity_m_s2;
    ACROSS_MEMBERS
    for (size_t m = 0; m < count; m++) {
        double half_area = 0.5 * (area_l[m] + area_r[m]);
        double rise = depth_r[m] - depth_l[m];
        double friction = 0.5 * (friction_l[m] + friction_r[m]);
        double flux = flux_r[m] - flux_l[m];
        double volume = dt * (flow_r[m] - flow_l[m]);
        if (!is_first) {
            half_area = theta * half_area + (1.0 - theta) * old_half_area[m];
            rise = theta * rise + (1.0 - theta) * old_rise[m];
            friction = theta * friction + (1.0 - theta) * old_friction[m];
            flux = theta * flux + (1.0 - theta) * old_flux[m] +
                   per_dt * ((flow_l[m] - old_flow_l[m]) + (flow_r[m] - old_flow_r[m]));
            volume = half_dx * ((area_l[m] - old_area_l[m]) + (area_r[m] - old_area_r[m])) + theta * volume +
                     (1.0 - theta) * dt * (old_flow_r[m] - old_flow_l[m]);
        }
        volume -= lateral[m];
        double weight = gravity * half_area;
        double head = (rise - fall) + dx * friction;
        double momentum = inertia[m] * flux + weight * head;
        double by_mean_area = 0.5 * theta * gravity * head;
        double push_l = inertia[m] * theta * beta * speed_l[m];
        double push_r = inertia[m] * theta * beta * speed_r[m];
        double by_area_left =
            push_l * speed_l[m] + by_mean_area + weight * (half_friction * by_area_l[m] - theta * depth_by_l[m]);
        double by_area_right =
            by_mean_area - push_r * speed_r[m] + weight * (half_friction * by_area_r[m] + theta * depth_by_r[m]);
        double slow = inertia[m] * per_dt;
        double by_flow_left = slow - 2.0 * push_l + weight * half_friction * by_flow_l[m];
        double by_flow_right = slow + 2.0 * push_r + weight * half_friction * by_flow_r[m];

        double along = by_area_left + by_flow_left * e_l[m]; /* of dA at L, with its dQ */
        double room = half_dx - dt_new * e_l[m];
        double pivot = by_flow_right * room - along * dt_new;
        double shared = 1.0 / (room * pivot);
        double per_room = shared * pivot;
        double per_pivot = shared * room * room; /* of the equation divided by room */
        double first = (dt_new * f_l[m] - volume) * per_room;
        lead[m] = first;
        gain[m] = per_room;
        e_r[m] = (along * half_dx * per_room - by_area_right) * per_pivot;
        f_r[m] = -(momentum + by_flow_left * f_l[m] + along * first) * per_pivot;
    }
}

static void eliminate_first(const struct interval *interval, const struct dynamic_node_flow *left,
                            const struct dynamic_node_flow *right, const struct dynamic_state *state,
                            struct dynamic_work *work)
{
    find_inertia(interval, left, right, work);
    eliminate(interval, left, right, state, work, true);
}

static void eliminate_again(const struct interval *interval, const struct dynamic_node_flow *left,
                            const struct dynamic_node_flow *right, const struct dynamic_state *state,
                            struct dynamic_work *work)
{
    eliminate(interval, left, right, state, work, false);
}

static void keep_old_terms(size_t at, size_t member_count, const struct dynamic_node_flow *left,
                           const struct dynamic_node_flow *right, struct dynamic_work *work)
{
    ACROSS_MEMBERS
    for (size_t m = 0; m < member_count; m++) {
        work->old_half_area[at + m] = 0.5 * (work->old_area[at + m] + work->old_area[at + member_count + m]);
        work->old_rise[at + m] = right->depth[m] - left->depth[m];
        work->old_friction[at + m] = 0.5 * (left->friction[m] + right->friction[m]);
        work->old_flux[at + m] = right->flux[m] - left->flux[m];
    }
}

/* --- down the tree ------------------------------------------------------------------------------------------------ */

/* A branch's end against what meets it there: one lookup each, and the linear rule between the two corrections. */
struct meeting {
    double above_by_below; /* dA above = this dA below + */
    double above_fixed;    /* this */
};

static struct meeting meet(const struct dynamic_branch *branch, double area_above, double flow_above, double e,
                           double f, const struct area_table *table_below, double area_below)
{
    const struct area_table_row *above = area_table_row_at(branch->table, area_above);
    const struct area_table_row *below = area_table_row_at(table_below, area_below);
    double depth_above = above->depth_0 + above->depth_1 * area_above;
    double depth_below = below->depth_0 + below->depth_1 * area_below - branch->bed_drop_m;
    if (branch->foot == DYNAMIC_FOOT_JOINS)
        return (struct meeting){below->depth_1 / above->depth_1, (depth_below - depth_above) / above->depth_1};
    struct stage_flow flow = stage_structure_flow(branch->structure, depth_above, depth_below);
    double pivot = e - flow.by_depth_above_m2s * above->depth_1;
    return (struct meeting){flow.by_depth_below_m2s * below->depth_1 / pivot,
                            (flow.discharge_m3s - flow_above - f) / pivot};
}

static void enter_branch(const struct dynamic_tree *tree, size_t branch_index, size_t first_node,
                         const struct dynamic_step_data *data, const struct dynamic_state *state,
                         struct dynamic_work *work)
{
    size_t count = work->member_count;
    size_t at = first_node * count;
    for (size_t m = 0; m < count; m++) {
        work->sweep_e[at + m] = 0.0;
        double gauged = dynamic_gauged_m3s(data, branch_index * count + m);
        double inflow = isnan(gauged) ? data->inflow_m3s[branch_index * count + m] : gauged;
        work->sweep_f[at + m] = inflow - state->discharge_m3s[at + m];
    }
    size_t node = 0;
    for (size_t i = 0; i < branch_index; i++) {
        const struct dynamic_branch *above = &tree->branches[i];
        node += above->interval_count + 1;
        if (above->below != branch_index)
            continue;
        size_t foot = (node - 1) * count;
        for (size_t m = 0; m < count; m++) {
            double e = work->sweep_e[foot + m], f = work->sweep_f[foot + m];
            struct meeting meeting = meet(above, state->area_m2[foot + m], state->discharge_m3s[foot + m], e, f,
                                          tree->branches[branch_index].table, state->area_m2[at + m]);
            work->meeting_by_below[i * count + m] = meeting.above_by_below;
            work->meeting_fixed[i * count + m] = meeting.above_fixed;
            if (!isnan(dynamic_gauged_m3s(data, branch_index * count + m)))
                continue;
            work->sweep_e[at + m] += e * meeting.above_by_below;
            work->sweep_f[at + m] += state->discharge_m3s[foot + m] + (f + e * meeting.above_fixed);
        }
    }
}

/* Adds the side inflow of the interval below a node; moves *side on. */
static void gather_lateral(const struct dynamic_tree *tree, size_t node, const double side_m3[], size_t *side,
                           struct dynamic_work *work)
{
    memset(work->lateral, 0, work->member_count * sizeof *work->lateral);
    for (; *side < tree->side_count && tree->side_node[*side] == node; ++*side)
        for (size_t m = 0; m < work->member_count; m++)
            work->lateral[m] += side_m3[*side * work->member_count + m];
}

static void sweep_down(const struct dynamic_tree *tree, const struct dynamic_step_data *data,
                       const struct dynamic_state *state, struct dynamic_work *work, bool is_first)
{
    size_t count = work->member_count, node = 0, side = 0;
    struct dynamic_node_flow *left = &work->flow[0], *right = &work->flow[1];
    for (size_t i = 0; i < tree->branch_count; i++, node++) {
        const struct dynamic_branch *branch = &tree->branches[i];
        enter_branch(tree, i, node, data, state, work);
        read_node(tree, branch->table, count, state->area_m2 + node * count, state->discharge_m3s + node * count,
                  left);
        for (size_t k = 0; k < branch->interval_count; k++, node++) {
            const struct interval interval = {.length_m = branch->interval_m[k],
                                              .fall_m = branch->slope_m_per_m[k] * branch->interval_m[k],
                                              .time_step_s = data->time_step_s,
                                              .momentum_factor = tree->momentum_factor,
                                              .inertia = data->has_inertia ? 1.0 : 0.0,
                                              .at = node * count,
                                              .member_count = count};
            size_t next = (node + 1) * count;
            gather_lateral(tree, node, data->side_m3, &side, work);
            read_node(tree, branch->table, count, state->area_m2 + next, state->discharge_m3s + next, right);
            if (is_first)
                eliminate_first(&interval, left, right, state, work);
            else
                eliminate_again(&interval, left, right, state, work);
            struct dynamic_node_flow *swap = left;
            left = right;
            right = swap;
        }
    }
}

static void read_old_terms(const struct dynamic_tree *tree, struct dynamic_work *work)
{
    size_t count = work->member_count, node = 0;
    struct dynamic_node_flow *left = &work->flow[0], *right = &work->flow[1];
    for (size_t i = 0; i < tree->branch_count; i++, node++) {
        const struct area_table *table = tree->branches[i].table;
        read_node(tree, table, count, work->old_area + node * count, work->old_discharge + node * count, left);
        for (size_t k = 0; k < tree->branches[i].interval_count; k++, node++) {
            size_t next = (node + 1) * count;
            read_node(tree, table, count, work->old_area + next, work->old_discharge + next, right);
            keep_old_terms(node * count, count, left, right, work);
            struct dynamic_node_flow *swap = left;
            left = right;
            right = swap;
        }
    }
}

/* --- and back up -------------------------------------------------------------------------------------------------- */

static double outlet_correction(const struct dynamic_branch *branch, double area, double flow, double e, double f,
                                double given_depth_m)
{
    const struct area_table_row *row = area_table_row_at(branch->table, area);
    if (branch->foot == DYNAMIC_FOOT_STAGE)
        return area_table_area_at_depth_m2(branch->table, given_depth_m) - area;
    double rated, by_area;
    if (branch->foot == DYNAMIC_FOOT_NORMAL) {
        double root_slope = sqrt(branch->slope_m_per_m[branch->interval_count - 1]);
        rated = root_slope * (row->conveyance_0 + row->conveyance_1 * area);
        by_area = root_slope * row->conveyance_1;
    } else {
        struct stage_flow structure =
            stage_structure_flow(branch->structure, row->depth_0 + row->depth_1 * area, -(double)INFINITY);
        rated = structure.discharge_m3s;
        by_area = structure.by_depth_above_m2s * row->depth_1;
    }
    return (rated - flow - f) / (e - by_area);
}

/* The corrections at a branch's foot, into the work's [member] arrays. */
static void close_branch(const struct dynamic_tree *tree, size_t branch_index, size_t foot_node,
                         const struct dynamic_step_data *data, const struct dynamic_state *state,
                         struct dynamic_work *work)
{
    const struct dynamic_branch *branch = &tree->branches[branch_index];
    size_t count = work->member_count;
    size_t at = foot_node * count;
    for (size_t m = 0; m < count; m++) {
        double area = state->area_m2[at + m], flow = state->discharge_m3s[at + m];
        double e = work->sweep_e[at + m], f = work->sweep_f[at + m];
        double correction;
        if (branch->below == DYNAMIC_NOWHERE) {
            double depth = branch->foot == DYNAMIC_FOOT_STAGE ? data->foot_depth_m[branch_index * count + m] : 0.0;
            correction = outlet_correction(branch, area, flow, e, f, depth);
        } else {
            correction =
                work->meeting_by_below[branch_index * count + m] * work->head_correction[branch->below * count + m] +
                work->meeting_fixed[branch_index * count + m];
        }
        work->area_correction[m] = correction;
        work->discharge_correction[m] = e * correction + f;
    }
}

/* Takes the corrections to a node. The area never loses more than half; then, or where it moved much, is_large. */
static void correct_node(size_t at, double time_step_s, struct dynamic_state *state, struct dynamic_work *work)
{
    const size_t count = work->member_count;
    double *restrict area = state->area_m2 + at, *restrict discharge = state->discharge_m3s + at;
    double *restrict passed = state->passed_m3 + at, *restrict is_large = work->is_large;
    const double *restrict old_discharge = work->old_discharge + at, *restrict is_open = work->is_open;
    const double *restrict area_by = work->area_correction, *restrict discharge_by = work->discharge_correction;
    ACROSS_MEMBERS
    for (size_t m = 0; m < count; m++) {
        double least = -0.5 * area[m];
        double by = area_by[m] > least ? area_by[m] : least;
        double large = fabs(area_by[m]) < small_correction * area[m] ? is_large[m] : 1.0; /* not-a-number is */
        is_large[m] = fabs(discharge_by[m]) < (double)INFINITY ? large : 1.0;
        area[m] = is_open[m] > 0.0 ? area[m] + by : area[m];
        discharge[m] = is_open[m] > 0.0 ? discharge[m] + discharge_by[m] : discharge[m];
        passed[m] = time_step_s * (theta * discharge[m] + (1.0 - theta) * old_discharge[m]);
    }
}

/* The corrections at the node above, from those at the node below. */
static void follow_up(const struct interval *interval, struct dynamic_work *work)
{
    const double *restrict lead = work->lead + interval->at, *restrict gain = work->gain + interval->at;
    const double *restrict e = work->sweep_e + interval->at, *restrict f = work->sweep_f + interval->at;
    double *restrict area_by = work->area_correction, *restrict discharge_by = work->discharge_correction;
    const double half_dx = 0.5 * interval->length_m, dt_new = theta * interval->time_step_s;
    ACROSS_MEMBERS
    for (size_t m = 0; m < interval->member_count; m++) {
        double by = lead[m] - (half_dx * area_by[m] + dt_new * discharge_by[m]) * gain[m];
        discharge_by[m] = e[m] * by + f[m];
        area_by[m] = by;
    }
}

static void sweep_up(const struct dynamic_tree *tree, const struct dynamic_step_data *data,
                     struct dynamic_state *state, struct dynamic_work *work)
{
    size_t count = work->member_count;
    size_t node = dynamic_tree_node_count(tree);
    for (size_t i = tree->branch_count; i-- > 0;) {
        const struct dynamic_branch *branch = &tree->branches[i];
        node--;
        close_branch(tree, i, node, data, state, work);
        for (size_t k = branch->interval_count; k-- > 0; node--) {
            const struct interval interval = {.length_m = branch->interval_m[k],
                                              .time_step_s = data->time_step_s,
                                              .at = (node - 1) * count,
                                              .member_count = count};
            correct_node(node * count, data->time_step_s, state, work);
            follow_up(&interval, work);
        }
        memcpy(work->head_correction + i * count, work->area_correction, count * sizeof *work->head_correction);
        correct_node(node * count, data->time_step_s, state, work);
    }
}

size_t dynamic_solve(const struct dynamic_tree *tree, const struct dynamic_step_data *data,
                     struct dynamic_state *state, struct dynamic_work *work, struct dynamic_counts *counts)
{
    size_t open_count = work->member_count;
    for (size_t m = 0; m < work->member_count; m++)
        work->is_open[m] = 1.0;
    for (int iteration = 0; iteration < MOST_ITERATIONS && open_count > 0; iteration++) {
        if (iteration == 1)
            read_old_terms(tree, work);
        for (size_t m = 0; m < work->member_count; m++)
            work->is_large[m] = 0.0;
        sweep_down(tree, data, state, work, iteration == 0);
        sweep_up(tree, data, state, work);
        counts->iterations += open_count;
        open_count = 0;
        for (size_t m = 0; m < work->member_count; m++) {
            work->is_open[m] = work->is_open[m] > 0.0 ? work->is_large[m] : 0.0;
            open_count += work->is_open[m] > 0.0;
        }
    }
    return open_count;
}
