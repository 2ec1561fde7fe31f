/* SPDX-License-Identifier: MIT */
#include "engine/muskingum_cunge.h"

#include <math.h>
#include <stdlib.h>

#include "engine/muskingum_cunge_kernel.h"

static const double hair = 1e-12;

/* The reach's potentials at the curve's nodes; none falls as the flow rises. */
struct potentials {
    size_t count;
    double *passing_m3;
    double *potential_m3;
    double *implicit_m3;
};

static void potentials_clear(struct potentials *potentials)
{
    free(potentials->passing_m3);
    free(potentials->potential_m3);
    free(potentials->implicit_m3);
}

/* A piece of the curve: from one node to the next, or from nothing to the lowest node. */
struct piece {
    double held_m3, passing_m3; /* rise of dx A and of dt Q */
    double diffusive_m3;        /* of the integral of D/c^2 */
};

static struct piece piece_above(const struct muskingum_cunge_reach *reach, size_t node,
                                double discharge_per_conveyance)
{
    const struct flow_curve *curve = reach->curve;
    double depth_rise = curve->depth_m[node + 1] - curve->depth_m[node];
    double area_rise = curve->area_m2[node + 1] - curve->area_m2[node];
    double discharge_rise =
        discharge_per_conveyance * (curve->conveyance_m3s[node + 1] - curve->conveyance_m3s[node]);
    double area = 0.5 * (curve->area_m2[node + 1] + curve->area_m2[node]);
    double discharge =
        0.5 * discharge_per_conveyance * (curve->conveyance_m3s[node + 1] + curve->conveyance_m3s[node]);
    double celerity = discharge_rise / area_rise; /* by differences: its point values jump at bank full */
    double diffusivity =
        flow_curve_diffusivity_m2_s(discharge, area, area_rise / depth_rise, celerity, reach->slope_m_per_m);
    return (struct piece){.held_m3 = reach->cell_m * area_rise,
                          .passing_m3 = reach->time_step_s * discharge_rise,
                          .diffusive_m3 = diffusivity / celerity * area_rise};
}

/* Below the lowest node D/c^2 is taken as it is just above it. */
static struct piece lowest_piece(const struct muskingum_cunge_reach *reach, size_t node,
                                 double discharge_per_conveyance)
{
    struct piece above = piece_above(reach, node, discharge_per_conveyance);
    double passing = reach->time_step_s * discharge_per_conveyance * reach->curve->conveyance_m3s[node];
    return (struct piece){.held_m3 = reach->cell_m * reach->curve->area_m2[node],
                          .passing_m3 = passing,
                          .diffusive_m3 = above.diffusive_m3 * (passing / above.passing_m3)};
}

/* The rise of d over a piece: never less than nothing, so that d never runs backwards, not even by rounding. */
static double implicit_rise_m3(const struct muskingum_cunge_reach *reach, const struct piece *piece)
{
    if (reach->diffusion == MUSKINGUM_CUNGE_UPWIND)
        return piece->passing_m3;
    double matched = piece->diffusive_m3 - 0.5 * (piece->held_m3 - piece->passing_m3);
    return fmax(matched, fmax(0.0, piece->passing_m3 - piece->held_m3));
}

static void fill_potentials(const struct muskingum_cunge_reach *reach, size_t first_node,
                            double discharge_per_conveyance, struct potentials *potentials)
{
    double implicit = 0.0;
    for (size_t i = 0; i < potentials->count; i++) {
        size_t node = first_node + i;
        struct piece piece = i == 0 ? lowest_piece(reach, node, discharge_per_conveyance)
                                    : piece_above(reach, node - 1, discharge_per_conveyance);
        double passing = reach->time_step_s * discharge_per_conveyance * reach->curve->conveyance_m3s[node];
        double held = reach->cell_m * reach->curve->area_m2[node];
        implicit += implicit_rise_m3(reach, &piece);
        potentials->passing_m3[i] = passing;
        potentials->implicit_m3[i] = reach->diffusion == MUSKINGUM_CUNGE_UPWIND ? passing : implicit;
        /* more than passes, if only by a hair: no rounding may let more out of a cell than is in it */
        potentials->potential_m3[i] = fmax(held + potentials->implicit_m3[i], passing * (1.0 + hair));
    }
}

static enum fw_status potentials_init(const struct muskingum_cunge_reach *reach, struct potentials *potentials)
{
    const struct flow_curve *curve = reach->curve;
    double discharge_per_conveyance = sqrt(reach->slope_m_per_m) / reach->roughness_factor;
    size_t first = 0;
    while (first < curve->count &&
           curve->conveyance_m3s[first] * discharge_per_conveyance < reach->smallest_discharge_m3s)
        first++;
    if (first + 2 > curve->count)
        return FW_BAD_INPUT;
    potentials->count = curve->count - first;
    potentials->passing_m3 = calloc(potentials->count, sizeof *potentials->passing_m3);
    potentials->potential_m3 = calloc(potentials->count, sizeof *potentials->potential_m3);
    potentials->implicit_m3 = calloc(potentials->count, sizeof *potentials->implicit_m3);
    if (potentials->passing_m3 == NULL || potentials->potential_m3 == NULL || potentials->implicit_m3 == NULL)
        return FW_NO_MEMORY;
    fill_potentials(reach, first, discharge_per_conveyance, potentials);
    return FW_OK;
}

struct volumes {
    double passing_m3, implicit_m3;
};

/* At a potential that is not less than the one asked for before; *node remembers the place. */
static struct volumes read_potentials(const struct potentials *potentials, double potential_m3, size_t *node)
{
    const double *h = potentials->potential_m3;
    const double *passing = potentials->passing_m3;
    const double *implicit = potentials->implicit_m3;
    if (potential_m3 <= h[0])
        return (struct volumes){passing[0] * (potential_m3 / h[0]), implicit[0] * (potential_m3 / h[0])};
    while (*node + 2 < potentials->count && h[*node + 1] <= potential_m3)
        ++*node;
    size_t i = *node;
    double share = (potential_m3 - h[i]) / (h[i + 1] - h[i]);
    return (struct volumes){passing[i] + share * (passing[i + 1] - passing[i]),
                            implicit[i] + share * (implicit[i + 1] - implicit[i])};
}

static void fill_rows(const struct potentials *potentials, struct muskingum_cunge_table *table)
{
    size_t row_count = table->by_potential.row_count;
    size_t node = 0;
    double start = bit_index_row_start(&table->by_potential, 1);
    struct volumes at_start = read_potentials(potentials, start, &node);
    table->rows[0] =
        (struct muskingum_cunge_row){0.0, at_start.passing_m3 / start, 0.0, at_start.implicit_m3 / start};
    table->row_outflow[0] = 0.0;
    for (size_t row = 1; row < row_count; row++) {
        double end = bit_index_row_start(&table->by_potential, row + 1);
        struct volumes at_end = read_potentials(potentials, end, &node);
        double outflow_1 = (at_end.passing_m3 - at_start.passing_m3) / (end - start);
        double implicit_1 = (at_end.implicit_m3 - at_start.implicit_m3) / (end - start);
        table->rows[row] = (struct muskingum_cunge_row){at_start.passing_m3 - outflow_1 * start, outflow_1,
                                                        at_start.implicit_m3 - implicit_1 * start, implicit_1};
        table->row_outflow[row] = at_start.passing_m3;
        start = end;
        at_start = at_end;
    }
    table->row_outflow[row_count] = (double)INFINITY;
}

static void fill_outflow_index(struct muskingum_cunge_table *table)
{
    uint32_t row = 0;
    table->first_row[0] = 0;
    for (size_t i = 1; i < table->by_outflow.row_count; i++) {
        double start = bit_index_row_start(&table->by_outflow, i);
        while (table->row_outflow[row + 1] <= start)
            row++;
        table->first_row[i] = row;
    }
}

/* No row across two cache lines: there is room for one row more. */
static struct muskingum_cunge_row *aligned_rows(void *memory)
{
    size_t past = (uintptr_t)memory % sizeof(struct muskingum_cunge_row);
    return (void *)((char *)memory + (past == 0 ? 0 : sizeof(struct muskingum_cunge_row) - past));
}

static bool is_positive(double value)
{
    return value > 0.0 && isfinite(value);
}

enum fw_status muskingum_cunge_table_init(struct muskingum_cunge_table *table,
                                          const struct muskingum_cunge_reach *reach)
{
    struct potentials potentials = {0};
    memset(table, 0, sizeof *table);
    if (!is_positive(reach->slope_m_per_m) || !is_positive(reach->roughness_factor) || !is_positive(reach->cell_m) ||
        !is_positive(reach->time_step_s) || !is_positive(reach->smallest_discharge_m3s))
        return FW_BAD_INPUT;
    enum fw_status status = potentials_init(reach, &potentials);
    if (status != FW_OK)
        goto cleanup;

    size_t last = potentials.count - 1;
    table->time_step_s = reach->time_step_s;
    table->cell_m = reach->cell_m;
    table->largest_discharge_m3s = potentials.passing_m3[last] / reach->time_step_s;
    bit_index_init(&table->by_potential, potentials.potential_m3[0], potentials.potential_m3[last]);
    bit_index_init(&table->by_outflow, potentials.passing_m3[0], potentials.passing_m3[last]);
    table->vectors = vector_level_widest();
    table->row_memory = calloc(table->by_potential.row_count + 1, sizeof *table->rows);
    table->row_outflow = calloc(table->by_potential.row_count + 1, sizeof *table->row_outflow);
    table->first_row = calloc(table->by_outflow.row_count, sizeof *table->first_row);
    if (table->row_memory == NULL || table->row_outflow == NULL || table->first_row == NULL) {
        status = FW_NO_MEMORY;
        goto cleanup;
    }
    table->rows = aligned_rows(table->row_memory);
    fill_rows(&potentials, table);
    fill_outflow_index(table);
cleanup:
    potentials_clear(&potentials);
    if (status != FW_OK)
        muskingum_cunge_table_clear(table);
    return status;
}

void muskingum_cunge_table_clear(struct muskingum_cunge_table *table)
{
    free(table->row_memory);
    free(table->row_outflow);
    free(table->first_row);
    memset(table, 0, sizeof *table);
}

static const struct muskingum_cunge_row *row_of_passing(const struct muskingum_cunge_table *table, double passing_m3)
{
    size_t row = table->first_row[bit_index_row(&table->by_outflow, passing_m3)];
    while (table->row_outflow[row + 1] <= passing_m3 && row + 1 < table->by_potential.row_count)
        row++;
    return table->rows + row;
}

double muskingum_cunge_potential_m3(const struct muskingum_cunge_table *table, double passing_m3)
{
    const struct muskingum_cunge_row *row = row_of_passing(table, passing_m3);
    return (passing_m3 - row->outflow_0) / row->outflow_1;
}

double muskingum_cunge_implicit_m3(const struct muskingum_cunge_table *table, double passing_m3)
{
    const struct muskingum_cunge_row *row = row_of_passing(table, passing_m3);
    return row->implicit_0 + row->implicit_1 * ((passing_m3 - row->outflow_0) / row->outflow_1);
}

void muskingum_cunge_step(const struct muskingum_cunge_table *table, size_t cell_count, size_t member_count,
                          double state_m3[restrict], double passing_m3[restrict], double implicit_m3[restrict])
{
#if defined(FW_VECTOR_AVX2)
    if (table->vectors >= VECTOR_AVX2) {
        muskingum_cunge_kernel_avx2(table, cell_count, member_count, state_m3, passing_m3, implicit_m3);
        return;
    }
#endif
    muskingum_cunge_kernel_baseline(table, cell_count, member_count, state_m3, passing_m3, implicit_m3);
}

double muskingum_cunge_steady_state_m3(const struct muskingum_cunge_table *table, double lateral_m3,
                                       double *passing_m3, double *implicit_m3)
{
    double out_m3 = *passing_m3 + lateral_m3;
    double state = muskingum_cunge_potential_m3(table, out_m3) - lateral_m3 - *implicit_m3;
    *passing_m3 = out_m3;
    *implicit_m3 = muskingum_cunge_implicit_m3(table, out_m3);
    return state;
}
