/* SPDX-License-Identifier: MIT */
#include "engine/muskingum_cunge.h"

#include <math.h>
#include <stdlib.h>

/* The reach's potentials at the curve's nodes, all rising with the flow but b, which may fall. */
struct potentials {
    size_t count;
    double *passing_m3;
    double *potential_m3;
    double *b_m3;
};

static void potentials_clear(struct potentials *potentials)
{
    free(potentials->passing_m3);
    free(potentials->potential_m3);
    free(potentials->b_m3);
}

/* The share of E that one interval of the curve adds. Differences, not point values of c, which jumps at bank
 * full. */
static double matched_increment_m3(const struct muskingum_cunge_reach *reach, size_t node,
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
    double celerity = discharge_rise / area_rise;
    double diffusivity =
        flow_curve_diffusivity_m2_s(discharge, area, area_rise / depth_rise, celerity, reach->slope_m_per_m);
    double matched = diffusivity / celerity * area_rise;
    double least = 0.5 * fabs(reach->cell_m * area_rise - reach->time_step_s * discharge_rise);
    return fmax(matched, least);
}

/* E at the lowest node, below which H and b run straight to the origin. */
static double matched_start_m3(const struct muskingum_cunge_reach *reach, size_t node,
                               double discharge_per_conveyance)
{
    const struct flow_curve *curve = reach->curve;
    double area = curve->area_m2[node];
    double discharge = discharge_per_conveyance * curve->conveyance_m3s[node];
    double area_rise = curve->area_m2[node + 1] - area;
    double depth_rise = curve->depth_m[node + 1] - curve->depth_m[node];
    double celerity = (discharge_per_conveyance * curve->conveyance_m3s[node + 1] - discharge) / area_rise;
    double diffusivity =
        flow_curve_diffusivity_m2_s(discharge, area, area_rise / depth_rise, celerity, reach->slope_m_per_m);
    double matched = discharge * diffusivity / (celerity * celerity);
    double least = 0.5 * fabs(reach->cell_m * area - reach->time_step_s * discharge);
    return fmax(matched, least);
}

static void fill_potentials(const struct muskingum_cunge_reach *reach, size_t first_node,
                            double discharge_per_conveyance, struct potentials *potentials)
{
    bool is_matched = reach->diffusion == MUSKINGUM_CUNGE_MATCHED;
    double e = is_matched ? matched_start_m3(reach, first_node, discharge_per_conveyance) : 0.0;
    for (size_t i = 0; i < potentials->count; i++) {
        size_t node = first_node + i;
        double passing = reach->time_step_s * discharge_per_conveyance * reach->curve->conveyance_m3s[node];
        double held = reach->cell_m * reach->curve->area_m2[node];
        if (is_matched && i > 0)
            e += matched_increment_m3(reach, node - 1, discharge_per_conveyance);
        potentials->passing_m3[i] = passing;
        potentials->potential_m3[i] = is_matched ? 0.5 * (held + passing) + e : held + passing;
        potentials->b_m3[i] = is_matched ? 0.5 * (held + passing) - e : 0.0;
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
    potentials->b_m3 = calloc(potentials->count, sizeof *potentials->b_m3);
    if (potentials->passing_m3 == NULL || potentials->potential_m3 == NULL || potentials->b_m3 == NULL)
        return FW_NO_MEMORY;
    fill_potentials(reach, first, discharge_per_conveyance, potentials);
    return FW_OK;
}

/* Passing volume and b at a potential that is not less than the one asked for before; *node remembers the place. */
static void read_potentials(const struct potentials *potentials, double potential_m3, size_t *node,
                            double *passing_out_m3, double *b_out_m3)
{
    const double *h = potentials->potential_m3;
    while (*node + 2 < potentials->count && h[*node + 1] <= potential_m3)
        ++*node;
    if (potential_m3 <= h[0]) {
        *passing_out_m3 = potentials->passing_m3[0] * (potential_m3 / h[0]);
        *b_out_m3 = potentials->b_m3[0] * (potential_m3 / h[0]);
        return;
    }
    double share = (potential_m3 - h[*node]) / (h[*node + 1] - h[*node]);
    const double *passing = potentials->passing_m3 + *node;
    const double *b = potentials->b_m3 + *node;
    *passing_out_m3 = passing[0] + share * (passing[1] - passing[0]);
    *b_out_m3 = b[0] + share * (b[1] - b[0]);
}

static void fill_rows(const struct potentials *potentials, struct muskingum_cunge_table *table)
{
    size_t row_count = table->by_potential.row_count;
    size_t node = 0;
    double start = bit_index_row_start(&table->by_potential, 1);
    double passing, b;
    read_potentials(potentials, start, &node, &passing, &b);
    table->rows[0] = (struct muskingum_cunge_row){0.0, passing / start, 0.0, b / start};
    table->row_outflow[0] = 0.0;
    for (size_t row = 1; row < row_count; row++) {
        double end = bit_index_row_start(&table->by_potential, row + 1);
        double end_passing, end_b;
        read_potentials(potentials, end, &node, &end_passing, &end_b);
        double outflow_1 = (end_passing - passing) / (end - start);
        double b_1 = (end_b - b) / (end - start);
        table->rows[row] = (struct muskingum_cunge_row){passing - outflow_1 * start, outflow_1, b - b_1 * start, b_1};
        table->row_outflow[row] = passing;
        start = end;
        passing = end_passing;
        b = end_b;
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
    table->rows = calloc(table->by_potential.row_count, sizeof *table->rows);
    table->row_outflow = calloc(table->by_potential.row_count + 1, sizeof *table->row_outflow);
    table->first_row = calloc(table->by_outflow.row_count, sizeof *table->first_row);
    if (table->rows == NULL || table->row_outflow == NULL || table->first_row == NULL) {
        status = FW_NO_MEMORY;
        goto cleanup;
    }
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
    free(table->rows);
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

double muskingum_cunge_head_b(const struct muskingum_cunge_table *table, double passing_m3)
{
    const struct muskingum_cunge_row *row = row_of_passing(table, passing_m3);
    return row->b_0 + row->b_1 * ((passing_m3 - row->outflow_0) / row->outflow_1);
}

void muskingum_cunge_step(const struct muskingum_cunge_table *table, size_t cell_count, size_t member_count,
                          double state_m3[restrict], double passing_m3[restrict], double b_m3[restrict])
{
    const struct bit_index index = table->by_potential;
    const struct muskingum_cunge_row *const rows = table->rows;
    for (size_t cell = 0; cell < cell_count; cell++, state_m3 += member_count) {
        for (size_t member = 0; member < member_count; member++) {
            double potential = state_m3[member] + (passing_m3[member] - b_m3[member]);
            const struct muskingum_cunge_row *row = rows + bit_index_row(&index, potential);
            double passing = row->outflow_0 + row->outflow_1 * potential;
            double b = row->b_0 + row->b_1 * potential;
            state_m3[member] = (potential - passing) + b_m3[member]; /* in this order, or volume does not close */
            passing_m3[member] = passing;
            b_m3[member] = b;
        }
    }
}

double muskingum_cunge_steady_state_m3(const struct muskingum_cunge_table *table, double lateral_m3,
                                       double *passing_m3, double *b_m3)
{
    double out_m3 = *passing_m3 + lateral_m3;
    double potential = muskingum_cunge_potential_m3(table, out_m3);
    double state = potential - lateral_m3 - (*passing_m3 - *b_m3);
    *passing_m3 = out_m3;
    *b_m3 = muskingum_cunge_head_b(table, out_m3);
    return state;
}
