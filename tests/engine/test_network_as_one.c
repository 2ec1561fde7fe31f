/* SPDX-License-Identifier: MIT */
/*
 * A river cut into 200 reaches is the river: uncut, and, by the full equations, solved as one system of equations that knows nothing of
 * branches or sweeps.
 */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <complex.h>
#include <math.h>
#include <stdlib.h>

#include "engine/network_internal.h"
#include "tests/engine/tree_of_200.h"

static double flows[2][(BRANCHES + 1) * (TREE_STEPS + 1)], stages[2][(BRANCHES + 1) * (TREE_STEPS + 1)];

/* --- cut and uncut ------------------------------------------------------------------------------------------------ */

static double imbalance(const struct tree_of_200 *tree, const struct network *network, double before_m3,
                        const double flow[])
{
    double balance = before_m3 - network_volume_m3(network, 0), in = 0.0;
    for (size_t step = 0; step <= TREE_STEPS; step++) {
        double weight = step == 0 || step == TREE_STEPS ? 30.0 : 60.0;
        for (size_t gauge = 0; gauge < HEADS; gauge++)
            in += weight * tree->inflow[gauge * (TREE_STEPS + 1) + step];
        for (size_t i = 0; i < SIDES; i++) {
            const struct network_side_inflow *side = &tree->whole_sides[i];
            double ago = fmax((double)step - side->delay_s / 60.0, 0.0), part = ago - floor(ago);
            size_t at = side->share_of_gauge * (TREE_STEPS + 1) + (size_t)floor(ago);
            double share = side->share_of_gauge == NETWORK_NONE
                               ? 0.0
                               : side->share * ((1.0 - part) * tree->inflow[at] +
                                                (part > 0.0 ? part * tree->inflow[at + 1] : 0.0));
            in += weight * (side->constant_m3s + share);
        }
        balance -= weight * flow[(BRANCHES - 1) * (TREE_STEPS + 1) + step];
    }
    return (balance + in) / in;
}

static void cutting_a_tree_into_200_reaches_changes_nothing(void **state)
{
    (void)state;
    static const struct {
        enum network_method method;
        const char *shows;
        double allowed;
    } rows[] = {{NETWORK_MUSKINGUM_CUNGE, "storage form", 1e-12},
                {NETWORK_KINEMATIC, "kinematic", 1e-12},
                {NETWORK_DYNAMIC, "full equations", 1e-11},
                {NETWORK_DIFFUSIVE, "without inertia", 1e-11}};
    static struct tree_of_200 tree;
    for (size_t row = 0; row < sizeof rows / sizeof *rows; row++)
        for (uint64_t seed = 1; seed <= 3; seed++) {
            double error[2], worst = 0.0;
            tree_init(&tree, seed, rows[row].method);
            for (size_t i = 0; i < 2; i++) {
                struct network *network = tree_start(&tree, i == 0 ? &tree.whole_river : &tree.cut_river);
                double before_m3 = network_volume_m3(network, 0);
                assert_int_equal(network_advance_with_stage(network, TREE_STEPS, tree.inflow, flows[i], stages[i]),
                                 FW_OK);
                error[i] = fabs(imbalance(&tree, network, before_m3, flows[i]));
                assert_int_equal(network_steps_replaced(network), 0);
                network_destroy(network);
            }
            for (size_t k = 0; k < (BRANCHES + 1) * (TREE_STEPS + 1); k++) {
                worst = fmax(worst, fabs(flows[1][k] / flows[0][k] - 1.0));
                worst = fmax(worst, fabs(stages[1][k] / stages[0][k] - 1.0));
            }
            print_message("%s, seed %d: 200 reaches and 41 are the same to %.1e; volume error %.1e and %.1e\n",
                          rows[row].shows, (int)seed, worst, error[0], error[1]);
            assert_true(worst <= rows[row].allowed);
            assert_true(error[0] <= 1e-12 && error[1] <= 1e-12);
        }
}

/* --- one system ---------------------------------------------------------------------------------------------------- */

/* A sparse row: columns rising. */
enum { MOST_IN_A_ROW = 256 };
struct sparse_row {
    size_t count, columns[MOST_IN_A_ROW];
    double values[MOST_IN_A_ROW], right;
    struct sparse_row *next; /* among those that begin with the same column */
};

struct whole_system {
    const struct dynamic_tree *tree;
    size_t node_count;
    double *old_area, *old_flow, *area, *flow; /* [node] */
    struct sparse_row *rows;                   /* two to a node */
    struct sparse_row **begins;                /* [column]; node n has columns 2 n (area) and 2 n + 1 (flow) */
    double *correction;
};

static void add_entry(struct sparse_row *row, size_t column, double value)
{
    size_t at = row->count;
    assert_true(row->count < MOST_IN_A_ROW);
    for (; at > 0 && row->columns[at - 1] > column; at--) {
        row->columns[at] = row->columns[at - 1];
        row->values[at] = row->values[at - 1];
    }
    row->columns[at] = column;
    row->values[at] = value;
    row->count++;
}

/* to -= factor from, whose first columns are the same and vanish. */
static void subtract(struct sparse_row *to, const struct sparse_row *from, double factor)
{
    struct sparse_row sum = {.right = to->right - factor * from->right};
    size_t i = 1, k = 1;
    while (i < to->count || k < from->count) {
        size_t left = i < to->count ? to->columns[i] : SIZE_MAX,
               right = k < from->count ? from->columns[k] : SIZE_MAX;
        size_t column = left < right ? left : right;
        double value =
            (left == column ? to->values[i++] : 0.0) - (right == column ? factor * from->values[k++] : 0.0);
        assert_true(sum.count < MOST_IN_A_ROW);
        sum.columns[sum.count] = column;
        sum.values[sum.count++] = value;
    }
    *to = sum;
}

static void file_row(struct whole_system *system, struct sparse_row *row)
{
    assert_true(row->count > 0);
    row->next = system->begins[row->columns[0]];
    system->begins[row->columns[0]] = row;
}

/* Gauss, column by column, the largest of those that begin with it as pivot. */
static void solve(struct whole_system *system)
{
    size_t count = 2 * system->node_count;
    for (size_t i = 0; i < count; i++)
        system->begins[i] = NULL;
    for (size_t i = 0; i < count; i++) { /* each row by its largest */
        struct sparse_row *row = &system->rows[i];
        double largest = 0.0;
        for (size_t k = 0; k < row->count; k++)
            largest = fmax(largest, fabs(row->values[k]));
        for (size_t k = 0; k < row->count; k++)
            row->values[k] /= largest;
        row->right /= largest;
        file_row(system, row);
    }
    for (size_t column = 0; column < count; column++) {
        struct sparse_row *pivot = system->begins[column];
        if (pivot == NULL) {
            fail_msg("column %zu is in no equation", column);
            return;
        }
        for (struct sparse_row *row = pivot; row != NULL; row = row->next)
            pivot = fabs(row->values[0]) > fabs(pivot->values[0]) ? row : pivot;
        for (struct sparse_row *row = system->begins[column], *next; row != NULL; row = next) {
            next = row->next;
            if (row == pivot)
                continue;
            subtract(row, pivot, row->values[0] / pivot->values[0]);
            file_row(system, row);
        }
        pivot->next = NULL;
        system->begins[column] = pivot;
    }
    for (size_t column = count; column-- > 0;) {
        const struct sparse_row *row = system->begins[column];
        double sum = row->right;
        for (size_t k = 1; k < row->count; k++)
            sum -= row->values[k] * system->correction[row->columns[k]];
        system->correction[column] = sum / row->values[0];
    }
}

/* The scheme's functions of complex arguments: a derivative is the imaginary part of a step so small that its square is
 * nothing, exact to rounding. */
static const double tiny = 1e-40, theta = 0.55, gravity = 9.80665;

static double complex depth_of(const struct area_table *table, double complex area)
{
    const struct area_table_row *row = area_table_row_at(table, creal(area));
    return row->depth_0 + row->depth_1 * area;
}

static double complex friction_of(const struct area_table *table, double complex area, double complex flow)
{
    const struct area_table_row *row = area_table_row_at(table, creal(area));
    double complex conveyance = row->conveyance_0 + row->conveyance_1 * area;
    return (creal(flow) < 0.0 ? -flow : flow) * flow / (conveyance * conveyance);
}

static double froude_squared_of(const struct area_table *table, double area, double flow)
{
    double speed = flow / area;
    return speed * speed / (gravity * area * area_table_row_at(table, area)->depth_1);
}

struct box { /* an interval: old and new values at its two ends, the new ones to be varied */
    const struct area_table *table;
    double dx, dt, slope, side_m3, inertia, old[4];
};

static double complex continuity_of(const struct box *box, const double complex x[4])
{
    const double *o = box->old;
    return 0.5 * box->dx * (x[0] - o[0] + x[2] - o[2]) +
           box->dt * (theta * (x[3] - x[1]) + (1.0 - theta) * (o[3] - o[1])) - box->side_m3;
}

static double complex momentum_of(const struct box *box, const double complex x[4])
{
    const double *o = box->old;
    const struct area_table *t = box->table;
    double complex flux =
        theta * (x[3] * x[3] / x[2] - x[1] * x[1] / x[0]) + (1.0 - theta) * (o[3] * o[3] / o[2] - o[1] * o[1] / o[0]);
    double complex mean_area = theta * 0.5 * (x[0] + x[2]) + (1.0 - theta) * 0.5 * (o[0] + o[2]);
    double complex rise =
        theta * (depth_of(t, x[2]) - depth_of(t, x[0])) + (1.0 - theta) * (depth_of(t, o[2]) - depth_of(t, o[0]));
    double complex friction = theta * 0.5 * (friction_of(t, x[0], x[1]) + friction_of(t, x[2], x[3])) +
                              (1.0 - theta) * 0.5 * (friction_of(t, o[0], o[1]) + friction_of(t, o[2], o[3]));
    return box->inertia * (0.5 * box->dx / box->dt * (x[1] - o[1] + x[3] - o[3]) + flux) +
           gravity * mean_area * (rise - box->slope * box->dx + box->dx * friction);
}

static void lay_box(struct sparse_row *row, const struct box *box, size_t left_node, const double now[4],
                    double complex (*function)(const struct box *, const double complex[4]))
{
    *row = (struct sparse_row){.count = 0};
    double complex x[4] = {now[0], now[1], now[2], now[3]};
    row->right = -creal(function(box, x));
    for (size_t k = 0; k < 4; k++) {
        x[k] += tiny * I;
        double slope = cimag(function(box, x)) / tiny;
        x[k] = now[k];
        if (slope != 0.0) /* a column that is not there may not lead */
            add_entry(row, 2 * left_node + k, slope);
    }
}

/* What meets at a head, and what ends a foot. */
static void lay_head(struct whole_system *system, struct sparse_row *row, size_t branch, double inflow_m3s)
{
    size_t node = dynamic_tree_first_node(system->tree, branch);
    *row = (struct sparse_row){.right = inflow_m3s - system->flow[node]};
    add_entry(row, 2 * node + 1, 1.0);
    for (size_t above = 0; above < branch; above++)
        if (system->tree->branches[above].below == branch) {
            size_t foot = dynamic_tree_first_node(system->tree, above + 1) - 1;
            row->right += system->flow[foot];
            add_entry(row, 2 * foot + 1, -1.0);
        }
}

static void lay_foot(struct whole_system *system, struct sparse_row *row, size_t branch)
{
    const struct dynamic_branch *from = &system->tree->branches[branch];
    size_t node = dynamic_tree_first_node(system->tree, branch + 1) - 1;
    const struct area_table_row *here = area_table_row_at(from->table, system->area[node]);
    double depth = here->depth_0 + here->depth_1 * system->area[node];
    *row = (struct sparse_row){.count = 0};
    if (from->foot == DYNAMIC_FOOT_NORMAL) {
        double root_slope = sqrt(from->slope_m_per_m[from->interval_count - 1]);
        row->right = root_slope * (here->conveyance_0 + here->conveyance_1 * system->area[node]) - system->flow[node];
        add_entry(row, 2 * node, -root_slope * here->conveyance_1);
        add_entry(row, 2 * node + 1, 1.0);
        return;
    }
    size_t head = dynamic_tree_first_node(system->tree, from->below);
    const struct area_table_row *there =
        area_table_row_at(system->tree->branches[from->below].table, system->area[head]);
    double depth_below = there->depth_0 + there->depth_1 * system->area[head] - from->bed_drop_m;
    if (from->foot == DYNAMIC_FOOT_JOINS) {
        row->right = depth_below - depth;
        add_entry(row, 2 * node, here->depth_1);
        add_entry(row, 2 * head, -there->depth_1);
        return;
    }
    assert_int_equal(from->foot, DYNAMIC_FOOT_STRUCTURE);
    struct stage_flow rated = stage_structure_flow(from->structure, depth, depth_below);
    row->right = rated.discharge_m3s - system->flow[node];
    add_entry(row, 2 * node, -rated.by_depth_above_m2s * here->depth_1);
    add_entry(row, 2 * node + 1, 1.0);
    if (rated.by_depth_below_m2s != 0.0)
        add_entry(row, 2 * head, -rated.by_depth_below_m2s * there->depth_1);
}

static void lay_system(struct whole_system *system, double dt, const double inflow_m3s[], const double side_m3[])
{
    size_t node = 0, next = 0, side = 0;
    for (size_t branch = 0; branch < system->tree->branch_count; branch++, node++) {
        const struct dynamic_branch *from = &system->tree->branches[branch];
        lay_head(system, &system->rows[next++], branch, inflow_m3s[branch]);
        for (size_t k = 0; k < from->interval_count; k++, node++) {
            struct box box = {.table = from->table,
                              .dx = from->interval_m[k],
                              .dt = dt,
                              .slope = from->slope_m_per_m[k],
                              .old = {system->old_area[node], system->old_flow[node], system->old_area[node + 1],
                                      system->old_flow[node + 1]}};
            double froude_squared = fmax(froude_squared_of(from->table, box.old[0], box.old[1]),
                                         froude_squared_of(from->table, box.old[2], box.old[3]));
            box.inertia = system->tree->is_diffusive ? 0.0 : fmax(0.0, 1.0 - pow(froude_squared, 5.0));
            for (; side < system->tree->side_count && system->tree->side_node[side] == node; side++)
                box.side_m3 += side_m3[side];
            const double now[4] = {system->area[node], system->flow[node], system->area[node + 1],
                                   system->flow[node + 1]};
            lay_box(&system->rows[next++], &box, node, now, continuity_of);
            lay_box(&system->rows[next++], &box, node, now, momentum_of);
        }
        lay_foot(system, &system->rows[next++], branch);
    }
    assert_int_equal(next, 2 * system->node_count);
}

/* Newton's method as the engine's header says: another iteration where an area moved by 2 % or more. */
static size_t step_system(struct whole_system *system, double dt, const double inflow_m3s[], const double side_m3[])
{
    bool is_large = true;
    size_t iterations = 0;
    memcpy(system->old_area, system->area, system->node_count * sizeof *system->area);
    memcpy(system->old_flow, system->flow, system->node_count * sizeof *system->flow);
    for (; is_large && iterations < 8; iterations++) {
        lay_system(system, dt, inflow_m3s, side_m3);
        solve(system);
        is_large = false;
        for (size_t node = 0; node < system->node_count; node++) {
            is_large = is_large || !(fabs(system->correction[2 * node]) < 0.02 * system->area[node]);
            system->area[node] += system->correction[2 * node];
            system->flow[node] += system->correction[2 * node + 1];
        }
    }
    assert_false(is_large);
    return iterations;
}

static double *room_of(size_t count)
{
    double *room = calloc(count, sizeof *room);
    assert_non_null(room);
    return room;
}

/* From the network's own start; then its equations, tables and inflows, and nothing else of it. */
static void a_tree_of_200_reaches_is_the_river_solved_as_one_system(void **state)
{
    (void)state;
    static struct tree_of_200 tree;
    for (int is_diffusive = 0; is_diffusive < 2; is_diffusive++) {
        tree_init(&tree, 1, is_diffusive ? NETWORK_DIFFUSIVE : NETWORK_DYNAMIC);
        struct network *network = tree_start(&tree, &tree.cut_river);
        assert_int_equal(network->tree_count, 1);
        struct routed_tree *routed = &network->trees[0];
        size_t nodes = routed->node_count, count = 2 * nodes, iterations = 0;
        const double *area = network->blocks + network->state_offset[routed->reach_index[routed->branch_count - 1]];
        const double *flow = area + nodes;
        struct whole_system system = {.tree = &routed->trees[0],
                                      .node_count = nodes,
                                      .old_area = room_of(nodes),
                                      .old_flow = room_of(nodes),
                                      .area = room_of(nodes),
                                      .flow = room_of(nodes),
                                      .rows = calloc(count, sizeof *system.rows),
                                      .begins = calloc(count, sizeof(struct sparse_row *)),
                                      .correction = room_of(count)};
        assert_true(system.rows != NULL && system.begins != NULL);
        memcpy(system.area, area, nodes * sizeof *area);
        memcpy(system.flow, flow, nodes * sizeof *flow);
        double worst_area = 0.0, worst_flow = 0.0, highest = 0.0;
        double pair[HEADS * 2], points[(BRANCHES + 1) * 2];
        double *inflow = room_of(routed->branch_count), *side = room_of(routed->trees[0].side_count);
        for (size_t step = 1; step <= TREE_STEPS; step++) {
            for (size_t gauge = 0; gauge < HEADS; gauge++)
                memcpy(pair + 2 * gauge, tree.inflow + gauge * (TREE_STEPS + 1) + step - 1, 2 * sizeof *pair);
            assert_int_equal(network_advance(network, 1, pair, points), FW_OK);
            for (size_t i = 0; i < routed->branch_count; i++) {
                size_t gauge = network->gauge_of_head[routed->reach_index[i]];
                inflow[i] = gauge == NETWORK_NONE ? 0.0 : pair[2 * gauge + 1];
            }
            for (size_t i = 0; i < routed->trees[0].side_count; i++) /* what the tree owes itself is nothing here */
                side[i] = routed->side_index[i] == NETWORK_NONE ? 0.0 : network->side_m3[routed->side_index[i]];
            iterations += step_system(&system, 60.0, inflow, side);
            for (size_t node = 0; node < nodes; node++) {
                worst_area = fmax(worst_area, fabs(area[node] / system.area[node] - 1.0));
                worst_flow = fmax(worst_flow, fabs(flow[node] / system.flow[node] - 1.0));
                highest = fmax(highest, flow[node]);
            }
        }
        print_message(
            "%s: 200 reaches, %zu nodes, %d steps, %zu iterations, up to %.0f m3/s: areas the same to %.1e, "
            "flows to %.1e\n",
            is_diffusive ? "without inertia" : "full equations", nodes, TREE_STEPS, iterations, highest, worst_area,
            worst_flow);
        assert_true(worst_area <= 1e-11 && worst_flow <= 1e-11);
        assert_int_equal(iterations, routed->counts.iterations);
        assert_true(iterations > TREE_STEPS); /* some steps needed more than one */
        free(system.old_area);
        free(system.old_flow);
        free(system.area);
        free(system.flow);
        free(system.rows);
        free(system.begins);
        free(system.correction);
        free(inflow);
        free(side);
        network_destroy(network);
    }
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(cutting_a_tree_into_200_reaches_changes_nothing),
        cmocka_unit_test(a_tree_of_200_reaches_is_the_river_solved_as_one_system),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
