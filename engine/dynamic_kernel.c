/* SPDX-License-Identifier: MIT */
/*
 * One interval between nodes L and R, new values primed, theta the weight of the new time:
 *     continuity  dA_L + dA_R + 2 dt/dx [theta (Q'R - Q'L) + (1 - theta) (QR - QL)] - side volume 2/dx = 0
 *     momentum    i { [Q^2/A] from L to R + dx/(2 beta dt) (dQ_L + dQ_R) } + (A_L + A_R) { rise of h/dx - S0 + Sf } = 0
 * i = 2 beta s/(g dx); brackets, areas and slopes are means over the two times weighted by theta, Sf over the two nodes
 * too. (The momentum equation is the usual one over g dx/2.) Newton's corrections obey dQ = E dA + F at every node: given
 * at the head, carried from L to R by elimination of L, closed at the foot, and followed back up.
 *
 * In the first iteration old and new are one, and the formulas shorter; most steps need no other.
 *
 * A block is one or two vectors of members: it iterates no longer than its members need. It goes down a few nodes at a
 * time, which are first read and measured, then made into equations, then eliminated: the first two wait for nothing, and
 * the elimination, where each interval waits for the pivot of the one above, is short. Compiled once per level of vectors;
 * a member's arithmetic is the same at every level and in any company.
 */
#include "engine/dynamic_kernel.h"

#include <math.h>

#include "engine/vector_rows.h"

#if defined(FW_KERNEL_AVX512)
#define KERNEL dynamic_kernel_avx512
#elif defined(FW_KERNEL_AVX2)
#define KERNEL dynamic_kernel_avx2
#else
#define KERNEL dynamic_kernel_baseline
#endif

#define ALWAYS_INLINE inline __attribute__((always_inline)) /* vectors and is_first are constants */

enum { MOST_ITERATIONS = 8, MOST_VECTORS = 2, TILE = 8 };

static const double theta = DYNAMIC_TIME_WEIGHT;
static const double small_correction = 0.02; /* of the area: Newton's next would be its square */

_Static_assert(sizeof(struct area_table_row) == 32, "rows of four doubles");

struct node { /* of as many members as a vector has lanes */
    vector_double area, discharge;
    vector_double depth, depth_by_area;
    vector_double twice_speed, speed_squared, flux;             /* 2 Q/A, (Q/A)^2, Q^2/A */
    vector_double friction;                                     /* Q|Q|/K^2 */
    vector_double half_friction_by_flow, half_friction_by_area; /* half its derivatives, the second's sign turned */
    vector_double froude_squared;                               /* times g */
};

static ALWAYS_INLINE struct node read_node(const struct vector_lookup *lookup, const double *area_m2,
                                           const double *discharge_m3s)
{
    struct node node = {.area = vector_load(area_m2), .discharge = vector_load(discharge_m3s)};
    uint64_t offset[VECTOR_LANES] __attribute__((aligned(sizeof(vector_bits))));
    vector_find_rows(lookup, node.area, offset);
    struct vector_row row = vector_read_rows(lookup, offset);
    vector_double conveyance = row.second_0 + row.second_1 * node.area;
    vector_double mean_depth = node.area * row.first_1; /* A/B */
    vector_double shared = 1.0 / (mean_depth * conveyance);
    vector_double per_conveyance = shared * mean_depth;
    vector_double per_depth = shared * conveyance;
    vector_double speed = node.discharge * (per_depth * row.first_1);
    vector_double root = node.discharge * per_conveyance; /* of the friction slope */
    node.depth = row.first_0 + row.first_1 * node.area;
    node.depth_by_area = row.first_1;
    node.twice_speed = speed + speed;
    node.speed_squared = speed * speed;
    node.flux = speed * node.discharge;
    node.half_friction_by_flow = vector_absolute(root) * per_conveyance;
    node.friction = node.half_friction_by_flow * node.discharge;
    node.half_friction_by_area = node.half_friction_by_flow * (root * row.second_1);
    node.froude_squared = node.speed_squared * per_depth;
    return node;
}

/* Fread, Jin and Lewis (1996), at the faster of the two nodes: 1 - Fr^10, not below 0; times the interval's factor. */
static ALWAYS_INLINE vector_double inertia_of(const struct node *left, const struct node *right,
                                              const struct dynamic_interval *interval)
{
    vector_double square = vector_larger(left->froude_squared, right->froude_squared);
    vector_double fourth = square * square;
    vector_double share = interval->inertia - fourth * fourth * square * interval->inertia_by_froude;
    return vector_larger(share, vector_of(0.0));
}

/* What the next block will want of a node: rows of many members are too far apart for the processor to guess. */
static ALWAYS_INLINE void prefetch(const double *area_m2, const double *discharge_m3s, const double *passed_m3)
{
    __builtin_prefetch(area_m2 + MOST_VECTORS * VECTOR_LANES);
    __builtin_prefetch(discharge_m3s + MOST_VECTORS * VECTOR_LANES);
    __builtin_prefetch(passed_m3 + MOST_VECTORS * VECTOR_LANES, 1);
}

/* An interval's two equations, over theta, in the corrections at both its ends. */
struct equations {
    vector_double by_area_l, by_area_r, by_flow_l, by_flow_r,
        momentum;         /* of momentum, and its rest with sign turned */
    vector_double volume; /* that continuity lacks */
};

/* The values of one part at a node, of the vector that `parts` stands at; `lanes` are a block's. */
static ALWAYS_INLINE double *part_of(double *parts, enum dynamic_part part, size_t lanes)
{
    return parts + (size_t)part * lanes;
}

static ALWAYS_INLINE struct equations form_equations(const struct dynamic_interval *interval, const struct node *left,
                                                     const struct node *right, vector_double lateral, double *parts,
                                                     size_t lanes, const bool is_first)
{
    vector_double areas = left->area + right->area;
    vector_double head = ((right->depth - left->depth) * interval->per_length - interval->slope) +
                         0.5 * (left->friction + right->friction);
    vector_double flux = right->flux - left->flux;
    vector_double volume = (right->discharge - left->discharge) * interval->by_flow;
    vector_double inertia;
    if (is_first) {
        inertia = inertia_of(left, right, interval);
        vector_store(part_of(parts, DYNAMIC_INERTIA, lanes), inertia);
        vector_store(part_of(parts, DYNAMIC_OLD_HEAD, lanes), head);
        vector_store(part_of(parts, DYNAMIC_OLD_FLUX, lanes), flux);
    } else {
        double *below = parts + DYNAMIC_PART_COUNT * lanes;
        vector_double old_area_l = vector_load(part_of(parts, DYNAMIC_OLD_AREA, lanes));
        vector_double old_area_r = vector_load(part_of(below, DYNAMIC_OLD_AREA, lanes));
        vector_double old_flow_l = vector_load(part_of(parts, DYNAMIC_OLD_DISCHARGE, lanes));
        vector_double old_flow_r = vector_load(part_of(below, DYNAMIC_OLD_DISCHARGE, lanes));
        inertia = vector_load(part_of(parts, DYNAMIC_INERTIA, lanes));
        volume = ((left->area - old_area_l) + (right->area - old_area_r)) +
                 (theta * volume + (1.0 - theta) * ((old_flow_r - old_flow_l) * interval->by_flow));
        areas = theta * areas + (1.0 - theta) * (old_area_l + old_area_r);
        head = theta * head + (1.0 - theta) * vector_load(part_of(parts, DYNAMIC_OLD_HEAD, lanes));
        flux = (theta * flux + (1.0 - theta) * vector_load(part_of(parts, DYNAMIC_OLD_FLUX, lanes))) +
               ((left->discharge - old_flow_l) + (right->discharge - old_flow_r)) * interval->inertia_by_flow;
    }
    return (struct equations){
        .by_area_l = (head + inertia * left->speed_squared) -
                     areas * (left->depth_by_area * interval->per_length + left->half_friction_by_area),
        .by_area_r = (head - inertia * right->speed_squared) +
                     areas * (right->depth_by_area * interval->per_length - right->half_friction_by_area),
        .by_flow_l =
            inertia * (interval->inertia_by_new_flow - left->twice_speed) + areas * left->half_friction_by_flow,
        .by_flow_r =
            inertia * (interval->inertia_by_new_flow + right->twice_speed) + areas * right->half_friction_by_flow,
        .momentum = (inertia * flux + areas * head) * (-1.0 / theta),
        .volume = lateral - volume,
    };
}

struct sweep { /* dQ = e dA + f, at the node that the sweep has come to */
    vector_double e, f;
};

/*
 *     room dA_L + dA_R + by_new_flow dQ_R = continuity,    along dA_L + by_area_r dA_R + by_flow_r dQ_R = momentum
 * solved for dA_L and dQ_R by Cramer's rule. The next interval waits for e: pivot and e are written so that they need
 * the e before as late as can be.
 */
static ALWAYS_INLINE void eliminate(const struct equations *of, double by_new_flow, double *parts, size_t lanes,
                                    struct sweep *sweep)
{
    double *below = parts + DYNAMIC_PART_COUNT * lanes;
    vector_double continuity = sweep->f * by_new_flow + of->volume;
    vector_double momentum = of->momentum - of->by_flow_l * sweep->f;
    vector_double room = 1.0 - by_new_flow * sweep->e;
    vector_double along = of->by_area_l + of->by_flow_l * sweep->e;
    vector_double per_pivot = 1.0 / ((of->by_flow_r - of->by_area_l * by_new_flow) -
                                     ((of->by_flow_r + of->by_flow_l) * by_new_flow) * sweep->e);
    vector_store(part_of(parts, DYNAMIC_FIXED, lanes),
                 (continuity * of->by_flow_r - momentum * by_new_flow) * per_pivot);
    vector_store(part_of(parts, DYNAMIC_BY_BELOW, lanes), (of->by_flow_r - of->by_area_r * by_new_flow) * per_pivot);
    sweep->e =
        ((of->by_area_l - of->by_area_r) + (of->by_flow_l + of->by_area_r * by_new_flow) * sweep->e) * per_pivot;
    sweep->f = (momentum * room - along * continuity) * per_pivot;
    vector_store(part_of(below, DYNAMIC_SWEEP_E, lanes), sweep->e);
    vector_store(part_of(below, DYNAMIC_SWEEP_F, lanes), sweep->f);
}

/* Where in the tree a sweep down stands. */
struct place {
    size_t node;
    size_t side; /* the first at or below it */
    double *parts;
};

/* A few intervals from a place on; `nodes[0]` has been read. Leaves the last node read there. */
static ALWAYS_INLINE void go_down(const struct dynamic_tree *tree, const struct dynamic_step_data *data,
                                  const struct vector_lookup *lookup, struct dynamic_block *block, size_t count,
                                  struct place *place, struct node nodes[TILE + 1][MOST_VECTORS],
                                  struct sweep sweep[MOST_VECTORS], const size_t vectors, const bool is_first)
{
    const size_t lanes = vectors * VECTOR_LANES, stride = block->stride, step = DYNAMIC_PART_COUNT * lanes;
    const struct dynamic_interval *intervals = data->intervals + place->node;
    const double *area = block->area_m2 + place->node * stride;
    const double *discharge = block->discharge_m3s + place->node * stride;
    struct equations equations[TILE][MOST_VECTORS];
    for (size_t i = 1; i <= count; i++) {
        area += stride;
        discharge += stride;
        prefetch(area, discharge, block->passed_m3 + (place->node + i) * stride);
        for (size_t v = 0; v < vectors; v++)
            nodes[i][v] = read_node(lookup, area + v * VECTOR_LANES, discharge + v * VECTOR_LANES);
    }
    for (size_t i = 0; i < count; i++) {
        vector_double lateral[MOST_VECTORS] = {0};
        if (place->side < tree->side_count && tree->side_node[place->side] == place->node + i) {
            place->side = dynamic_gather_lateral(tree, place->node + i, place->side, data, block);
            for (size_t v = 0; v < vectors; v++)
                lateral[v] = vector_load(block->lateral_m3 + v * VECTOR_LANES) * (2.0 * intervals[i].per_length);
        }
        for (size_t v = 0; v < vectors; v++)
            equations[i][v] = form_equations(&intervals[i], &nodes[i][v], &nodes[i + 1][v], lateral[v],
                                             place->parts + i * step + v * VECTOR_LANES, lanes, is_first);
    }
    for (size_t i = 0; i < count; i++)
        for (size_t v = 0; v < vectors; v++)
            eliminate(&equations[i][v], intervals[i].by_new_flow, place->parts + i * step + v * VECTOR_LANES, lanes,
                      &sweep[v]);
    for (size_t v = 0; v < vectors; v++)
        nodes[0][v] = nodes[count][v];
    place->node += count;
    place->parts += count * step;
}

static ALWAYS_INLINE void sweep_down(const struct dynamic_tree *tree, const struct dynamic_step_data *data,
                                     struct dynamic_block *block, const size_t vectors, const bool is_first)
{
    const size_t lanes = vectors * VECTOR_LANES;
    struct place place = {0};
    dynamic_enter_heads(tree, data, block);
    for (size_t i = 0; i < tree->branch_count; i++, place.node++) {
        const struct dynamic_branch *branch = &tree->branches[i];
        const struct vector_lookup lookup = vector_lookup_of(&branch->table->by_area, branch->table->rows);
        struct node nodes[TILE + 1][MOST_VECTORS];
        struct sweep sweep[MOST_VECTORS];
        place.parts = block->parts + place.node * DYNAMIC_PART_COUNT * lanes;
        for (size_t v = 0; v < vectors; v++) {
            size_t at = place.node * block->stride + v * VECTOR_LANES;
            nodes[0][v] = read_node(&lookup, block->area_m2 + at, block->discharge_m3s + at);
            sweep[v].e = vector_load(part_of(place.parts, DYNAMIC_SWEEP_E, lanes) + v * VECTOR_LANES);
            sweep[v].f = vector_load(part_of(place.parts, DYNAMIC_SWEEP_F, lanes) + v * VECTOR_LANES);
        }
        for (size_t left = branch->interval_count; left > 0;) {
            size_t count = left < TILE ? left : TILE;
            go_down(tree, data, &lookup, block, count, &place, nodes, sweep, vectors, is_first);
            left -= count;
        }
        if (branch->below != DYNAMIC_NOWHERE)
            dynamic_join_head(tree, i, data, block);
    }
}

/* --- and back up ------------------------------------------------------------------------------------------------- */

/* The value where all bits are set, 0 where none is. */
static ALWAYS_INLINE vector_double where(vector_bits is_so, vector_double value)
{
    return (vector_double)((vector_bits)value & is_so);
}

struct correction { /* dA and dQ, at the node that the sweep has come to */
    vector_double area, discharge;
};

struct state_at { /* a node */
    double *area_m2, *discharge_m3s, *passed_m3;
};

/* Takes the corrections to a node. The area never loses more than half. Returns by how much the correction of the area
 * is over a small one. */
static ALWAYS_INLINE vector_double correct_node(const struct state_at *state, double *parts, size_t lanes,
                                                double time_step_s, const struct correction *by, vector_bits is_open,
                                                const bool is_first)
{
    vector_double area = vector_load(state->area_m2), discharge = vector_load(state->discharge_m3s);
    vector_double least = area * 0.5;
    if (is_first) {
        vector_store(part_of(parts, DYNAMIC_OLD_AREA, lanes), area);
        vector_store(part_of(parts, DYNAMIC_OLD_DISCHARGE, lanes), discharge);
        vector_store(state->area_m2, vector_larger(area + by->area, least));
        vector_store(state->discharge_m3s, discharge + by->discharge);
        vector_store(state->passed_m3, (discharge + theta * by->discharge) * time_step_s);
    } else {
        vector_double discharge_by = where(is_open, by->discharge);
        vector_store(state->area_m2, area + where(is_open, vector_larger(by->area, -least)));
        vector_store(state->discharge_m3s, discharge + discharge_by);
        vector_store(state->passed_m3, vector_load(state->passed_m3) + discharge_by * (theta * time_step_s));
    }
    return vector_absolute(by->area) - small_correction * area;
}

/* From foot to head. What is not a number stays so up to the head. Returns which members were corrected by much. */
static ALWAYS_INLINE void go_up(const struct dynamic_step_data *data, struct dynamic_block *block, size_t foot,
                                size_t interval_count, const vector_bits is_open[],
                                struct correction by[MOST_VECTORS], vector_bits is_large[], const size_t vectors,
                                const bool is_first)
{
    const size_t lanes = vectors * VECTOR_LANES;
    vector_double excess[MOST_VECTORS];
    for (size_t v = 0; v < vectors; v++)
        excess[v] = vector_of(-(double)INFINITY);
    for (size_t k = interval_count;; k--, foot--) {
        double *parts = block->parts + foot * DYNAMIC_PART_COUNT * lanes;
        for (size_t v = 0; v < vectors; v++) {
            size_t at = foot * block->stride + v * VECTOR_LANES;
            const struct state_at state = {block->area_m2 + at, block->discharge_m3s + at, block->passed_m3 + at};
            double *own = parts + v * VECTOR_LANES;
            by[v].discharge = vector_load(part_of(own, DYNAMIC_SWEEP_E, lanes)) * by[v].area +
                              vector_load(part_of(own, DYNAMIC_SWEEP_F, lanes));
            excess[v] = vector_larger(
                excess[v], correct_node(&state, own, lanes, data->time_step_s, &by[v], is_open[v], is_first));
        }
        if (k == 0)
            break;
        for (size_t v = 0; v < vectors; v++) {
            double *above = parts - DYNAMIC_PART_COUNT * lanes + v * VECTOR_LANES;
            by[v].area = vector_load(part_of(above, DYNAMIC_FIXED, lanes)) -
                         vector_load(part_of(above, DYNAMIC_BY_BELOW, lanes)) * by[v].area;
        }
    }
    for (size_t v = 0; v < vectors; v++)
        is_large[v] |=
            ~((vector_bits)(excess[v] < 0.0) & (vector_bits)(vector_absolute(by[v].discharge) < (double)INFINITY));
}

/* Narrows is_open to the members that are not solved by this iteration. */
static ALWAYS_INLINE void sweep_up(const struct dynamic_tree *tree, const struct dynamic_step_data *data,
                                   struct dynamic_block *block, vector_bits is_open[], const size_t vectors,
                                   const bool is_first)
{
    vector_bits is_large[MOST_VECTORS] = {0};
    for (size_t i = tree->branch_count; i-- > 0;) {
        const size_t intervals = tree->branches[i].interval_count;
        struct correction by[MOST_VECTORS];
        dynamic_close_branch(tree, i, data, block);
        for (size_t v = 0; v < vectors; v++)
            by[v].area = vector_load(block->foot_correction + v * VECTOR_LANES);
        go_up(data, block, data->first_node[i] + intervals, intervals, is_open, by, is_large, vectors, is_first);
        for (size_t v = 0; v < vectors; v++)
            vector_store(block->head_correction + (i * vectors + v) * VECTOR_LANES, by[v].area);
    }
    for (size_t v = 0; v < vectors; v++)
        is_open[v] &= is_large[v];
}

/* --- a block ----------------------------------------------------------------------------------------------------- */

static ALWAYS_INLINE size_t solve(const struct dynamic_tree *tree, const struct dynamic_step_data *data,
                                  struct dynamic_block *block, struct dynamic_counts *counts, const size_t vectors)
{
    vector_bits is_open[MOST_VECTORS];
    size_t open_count = block->member_count;
    for (size_t v = 0; v < vectors; v++)
        is_open[v] = ~(vector_bits){0};
    for (int iteration = 0; iteration < MOST_ITERATIONS && open_count > 0; iteration++) {
        counts->iterations += open_count;
        if (iteration == 0) {
            sweep_down(tree, data, block, vectors, true);
            sweep_up(tree, data, block, is_open, vectors, true);
        } else {
            sweep_down(tree, data, block, vectors, false);
            sweep_up(tree, data, block, is_open, vectors, false);
        }
        open_count = 0;
        for (size_t lane = 0; lane < block->lanes; lane++) {
            block->is_open[lane] = is_open[lane / VECTOR_LANES][lane % VECTOR_LANES] != 0;
            open_count += lane < block->member_count && block->is_open[lane];
        }
    }
    return open_count;
}

static size_t solve_one_vector(const struct dynamic_tree *tree, const struct dynamic_step_data *data,
                               struct dynamic_block *block, struct dynamic_counts *counts)
{
    return solve(tree, data, block, counts, 1);
}

static size_t solve_two_vectors(const struct dynamic_tree *tree, const struct dynamic_step_data *data,
                                struct dynamic_block *block, struct dynamic_counts *counts)
{
    return solve(tree, data, block, counts, 2);
}

size_t KERNEL(const struct dynamic_tree *tree, const struct dynamic_step_data *data, struct dynamic_block *block,
              struct dynamic_counts *counts)
{
    return block->lanes == VECTOR_LANES ? solve_one_vector(tree, data, block, counts)
                                        : solve_two_vectors(tree, data, block, counts);
}
