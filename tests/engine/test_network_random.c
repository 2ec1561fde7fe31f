/* SPDX-License-Identifier: MIT */
/*
 * Random rivers with everything in them: confluences, any mixture of methods, gauges in mid-river and apart, shares, structures, drops,
 * held and moving levels, dry starts. Nothing is refused, nothing becomes not-a-number, and volume closes.
 */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <math.h>
#include <stdlib.h>
#include <string.h>

#include "engine/network_internal.h"
#include "tests/engine/try_sections.h"

enum { RIVERS = 60, STEPS = 120, MOST_HEADS = 5, MOST_REACHES = 40, MOST_GAUGES = 12, MOST_SIDES = 6 };
enum { GROUPS = 2, MEMBERS = 2, ALL = GROUPS * MEMBERS };

struct random_river { /* points into itself */
    uint64_t state;
    size_t gauge_node[MOST_GAUGES];
    struct network_reach reaches[MOST_REACHES];
    struct network_side_inflow sides[MOST_SIDES];
    struct network_point points[MOST_REACHES];
    struct network_river river;
    struct network_options options;
    double weir_depth_m[3], weir_m3s[3];
    struct stage_opening opening;
    struct stage_structure weir;
    double base_m3s, pulse_m3s;
};

static const double factors[GROUPS] = {0.8, 1.2};

static double random_share(struct random_river *r)
{
    r->state = r->state * UINT64_C(6364136223846793005) + UINT64_C(1442695040888963407);
    return (double)(r->state >> 11) / 9007199254740992.0;
}

static size_t random_below(struct random_river *r, size_t count)
{
    return (size_t)(random_share(r) * (double)count) % count;
}

static bool happens(struct random_river *r, double chance)
{
    return random_share(r) < chance;
}

static double random_between(struct random_river *r, double low, double high)
{
    return low * pow(high / low, random_share(r));
}

static void add_reach(struct random_river *r, size_t from, size_t to)
{
    static const enum network_method methods[] = {NETWORK_MUSKINGUM_CUNGE, NETWORK_KINEMATIC, NETWORK_DYNAMIC,
                                                  NETWORK_DYNAMIC,         NETWORK_DIFFUSIVE, NETWORK_AUTO};
    size_t index = r->river.reach_count++;
    struct network_reach *reach = &r->reaches[index];
    assert_true(index < MOST_REACHES);
    *reach = (struct network_reach){.id = "random",
                                    .from_node = from,
                                    .to_node = to,
                                    .length_m = random_between(r, 250.0, 9000.0),
                                    .slope_m_per_m = random_between(r, 4e-4, 4e-3),
                                    .section = try_sections[random_below(r, TRY_SECTION_COUNT)].section,
                                    .method = methods[random_below(r, sizeof methods / sizeof *methods)]};
    bool is_full = network_method_is_full(reach->method) || reach->method == NETWORK_AUTO;
    reach->foot_drop_m = is_full && happens(r, 0.2) ? random_between(r, 0.05, 2.0) : 0.0;
    reach->foot_structure = is_full && happens(r, 0.2) ? &r->weir : NULL;
    r->points[index] = (struct network_point){.id = "foot", .reach_index = index, .at_m = reach->length_m};
}

/* A chain of one to three reaches from a node to a new one; its end. */
static size_t add_branch(struct random_river *r, size_t from)
{
    size_t node = from;
    for (size_t left = 1 + random_below(r, 3); left > 0; left--) {
        size_t next = r->river.node_count++;
        add_reach(r, node, next);
        node = next;
    }
    return node;
}

/* Branches' ends meet two by two: the later of the two ends is moved to the earlier one's node. */
static void make_tree(struct random_river *r)
{
    size_t ends[MOST_HEADS], open_count = 1 + random_below(r, MOST_HEADS);
    for (size_t head = 0; head < open_count; head++) {
        r->gauge_node[r->river.gauge_count++] = r->river.node_count;
        ends[head] = add_branch(r, r->river.node_count++);
    }
    while (open_count > 1) {
        size_t kept = random_below(r, open_count - 1);
        size_t gone = ends[--open_count];
        for (size_t i = 0; i < r->river.reach_count; i++)
            if (r->reaches[i].to_node == gone)
                r->reaches[i].to_node = ends[kept];
        /* no node is left without a reach: the last number takes the gap */
        size_t last = --r->river.node_count;
        for (size_t i = 0; i < r->river.reach_count; i++) {
            if (r->reaches[i].from_node == last)
                r->reaches[i].from_node = gone;
            if (r->reaches[i].to_node == last)
                r->reaches[i].to_node = gone;
        }
        for (size_t i = 0; i < r->river.gauge_count; i++)
            r->gauge_node[i] = r->gauge_node[i] == last ? gone : r->gauge_node[i];
        for (size_t i = 0; i < open_count; i++)
            ends[i] = ends[i] == last ? gone : ends[i];
        ends[kept] = add_branch(r, ends[kept]);
    }
}

static size_t outlet_of(const struct random_river *r)
{
    size_t reach = 0;
    while (network_reach_from(&r->river, r->reaches[reach].to_node) != NETWORK_NONE)
        reach++;
    return reach;
}

static void add_gauges_and_sides(struct random_river *r)
{
    for (size_t node = 0; node < r->river.node_count && r->river.gauge_count + 1 < MOST_GAUGES; node++)
        if (network_reach_into(&r->river, node) != NETWORK_NONE && happens(r, 0.25))
            r->gauge_node[r->river.gauge_count++] = node;
    if (happens(r, 0.3))
        r->gauge_node[r->river.gauge_count++] = NETWORK_NONE;
    for (size_t left = random_below(r, MOST_SIDES + 1); left > 0; left--) {
        size_t reach = random_below(r, r->river.reach_count);
        size_t gauge = happens(r, 0.6) ? random_below(r, r->river.gauge_count) : NETWORK_NONE;
        if (gauge != NETWORK_NONE && network_gauge_is_inner(&r->river, gauge) &&
            network_leads_to(&r->river, r->reaches[reach].to_node, r->gauge_node[gauge]))
            continue; /* would feed itself */
        r->sides[r->river.side_inflow_count++] =
            (struct network_side_inflow){.reach_index = reach,
                                         .at_m = random_share(r) * r->reaches[reach].length_m,
                                         .share_of_gauge = gauge,
                                         .share = gauge == NETWORK_NONE ? 0.0 : 0.4 * random_share(r),
                                         .delay_s = gauge == NETWORK_NONE ? 0.0 : 3000.0 * random_share(r),
                                         .constant_m3s = random_share(r)};
    }
}

static void random_river_init(struct random_river *r, uint64_t seed)
{
    memset(r, 0, sizeof *r);
    r->state = seed * UINT64_C(0x9E3779B97F4A7C15) + 1;
    r->weir_depth_m[1] = 1.0;
    r->weir_depth_m[2] = 3.0;
    r->weir_m3s[1] = 17.0;
    r->weir_m3s[2] = 90.0;
    r->weir_depth_m[0] = 0.4 * random_share(r);
    r->opening = (struct stage_opening){.row_count = 3,
                                        .depth_m = r->weir_depth_m,
                                        .discharge_m3s = r->weir_m3s,
                                        .open_share = 0.3 + 0.7 * random_share(r)};
    r->weir = (struct stage_structure){.opening_count = 1, .openings = &r->opening};
    r->river.gauge_node = r->gauge_node;
    r->river.reaches = r->reaches;
    r->river.side_inflows = r->sides;
    r->river.points = r->points;
    make_tree(r);
    add_gauges_and_sides(r);
    r->river.point_count = r->river.reach_count;
    r->base_m3s = random_between(r, 0.5, 12.0);
    r->pulse_m3s = random_between(r, 2.0, 60.0);
    struct network_reach *last = &r->reaches[outlet_of(r)];
    bool is_full = network_method_is_full(last->method) || last->method == NETWORK_AUTO;
    if (is_full && !network_reach_has_control(last) && happens(r, 0.6)) {
        last->has_outlet_level = happens(r, 0.7);
        last->outlet_depth_m = last->has_outlet_level ? 0.0 : random_between(r, 0.3, 7.0);
    }
    r->river.level_count = 1;
    r->options = (struct network_options){.time_step_s = happens(r, 0.5) ? 60.0 : 300.0,
                                          .group_count = GROUPS,
                                          .roughness_factors = factors,
                                          .members_per_group = MEMBERS,
                                          .largest_discharge_m3s = 400.0,
                                          .typical_peak_m3s = 90.0};
}

/* Pulses at heads; in mid-river spells of measured values, in no way like what is routed. */
static void draw_inflow(struct random_river *r, bool is_first, bool is_dry, double inflow[MOST_GAUGES * ALL])
{
    for (size_t gauge = 0; gauge < r->river.gauge_count; gauge++) {
        bool is_inner = network_gauge_is_inner(&r->river, gauge);
        bool changes = is_first || happens(r, 0.1);
        for (size_t member = 0; member < ALL && changes; member++) {
            double flow = r->base_m3s + (happens(r, 0.4) ? r->pulse_m3s * random_share(r) : 0.0);
            if (is_first && is_dry)
                flow = 0.0;
            inflow[gauge * ALL + member] = is_inner && happens(r, 0.5) ? (double)NAN : flow;
        }
    }
}

static double sides_m3s(const struct network *network, size_t member)
{
    const double *block = network_block_of(network, member / MEMBERS);
    double sum = 0.0;
    for (size_t side = 0; side < network->river.side_inflow_count; side++)
        sum += block[network->layout.side + side * MEMBERS + member % MEMBERS];
    return sum;
}

static double inflows_m3s(const struct random_river *r, const double inflow[], size_t member)
{
    double sum = 0.0;
    for (size_t gauge = 0; gauge < r->river.gauge_count; gauge++)
        if (r->gauge_node[gauge] != NETWORK_NONE && !network_gauge_is_inner(&r->river, gauge))
            sum += inflow[gauge * ALL + member];
    return sum;
}

struct random_result {
    double worst;
    size_t replaced, steps;
};

static struct random_result run(struct random_river *r, bool is_dry)
{
    struct network *network = NULL;
    struct network_fault fault = {""};
    struct random_result result = {0};
    double now[MOST_GAUGES * ALL] = {0.0}, pair[MOST_GAUGES * 2 * ALL], level[2 * ALL];
    double flow[MOST_REACHES * 2 * ALL], stage[MOST_REACHES * 2 * ALL];
    double balance_m3[ALL] = {0.0}, passed_m3[ALL] = {0.0};
    if (network_create(&r->river, &r->options, &network, &fault) != FW_OK)
        fail_msg("network_create: %s", fault.text);
    double dt = r->options.time_step_s;
    size_t outlet = outlet_of(r);
    draw_inflow(r, true, is_dry, now);
    for (size_t i = 0; i < 2 * ALL; i++)
        level[i] = -1.0 + 6.0 * random_share(r);
    if (!is_dry)
        assert_int_equal(network_start_steady_at(network, now, level), FW_OK);
    for (size_t member = 0; member < ALL; member++)
        balance_m3[member] = -network_volume_m3(network, member);
    for (size_t step = 1; step <= STEPS; step++) {
        for (size_t member = 0; member < ALL; member++)
            balance_m3[member] -= 0.5 * dt * (inflows_m3s(r, now, member) + sides_m3s(network, member));
        for (size_t gauge = 0; gauge < r->river.gauge_count; gauge++)
            memcpy(pair + gauge * 2 * ALL, now + gauge * ALL, ALL * sizeof *now);
        draw_inflow(r, false, is_dry, now);
        for (size_t gauge = 0; gauge < r->river.gauge_count; gauge++)
            memcpy(pair + (gauge * 2 + 1) * ALL, now + gauge * ALL, ALL * sizeof *now);
        for (size_t member = 0; member < ALL; member++)
            level[ALL + member] += 0.1 * (random_share(r) - 0.5);
        assert_int_equal(network_advance_at(network, 1, pair, level, flow, stage), FW_OK);
        for (size_t member = 0; member < ALL; member++) {
            double came = 0.5 * dt * (inflows_m3s(r, now, member) + sides_m3s(network, member));
            balance_m3[member] -= came;
            passed_m3[member] += 2.0 * came;
            balance_m3[member] +=
                0.5 * dt * (flow[outlet * 2 * ALL + member] + flow[(outlet * 2 + 1) * ALL + member]);
        }
        for (size_t i = 0; i < r->river.point_count * 2 * ALL; i++)
            assert_true(isfinite(flow[i]) && isfinite(stage[i]));
    }
    for (size_t member = 0; member < ALL; member++) {
        double held_m3 = network_volume_m3(network, member);
        double error_m3 = balance_m3[member] + held_m3;
        double scale_m3 = passed_m3[member] + fabs(held_m3) + 1.0;
        for (size_t gauge = 0; gauge < r->river.gauge_count; gauge++) {
            error_m3 -= network_brought_m3(network, gauge, member);
            scale_m3 += fabs(network_brought_m3(network, gauge, member));
        }
        result.worst = fmax(result.worst, fabs(error_m3) / scale_m3);
    }
    assert_int_equal(network_steps_below_zero(network), 0);
    result.replaced = network_steps_replaced(network);
    result.steps = STEPS * ALL * network->tree_count;
    network_destroy(network);
    return result;
}

static void whatever_a_river_holds_its_volume_closes(void **state)
{
    (void)state;
    static struct random_river r;
    double worst = 0.0;
    size_t replaced = 0, steps = 0, inner = 0, controls = 0, levels = 0, reaches = 0;
    for (uint64_t seed = 1; seed <= RIVERS; seed++) {
        random_river_init(&r, seed);
        struct random_result result = run(&r, seed % 3 == 0);
        if (!(result.worst <= 1e-12))
            fail_msg("seed %d: volume error %g", (int)seed, result.worst);
        worst = fmax(worst, result.worst);
        replaced += result.replaced;
        steps += result.steps;
        reaches += r.river.reach_count;
        for (size_t gauge = 0; gauge < r.river.gauge_count; gauge++)
            inner += network_gauge_is_inner(&r.river, gauge);
        for (size_t i = 0; i < r.river.reach_count; i++) {
            controls += network_reach_has_control(&r.reaches[i]);
            levels += network_reach_has_held_foot(&r.reaches[i]);
        }
    }
    print_message(
        "%d random rivers, %zu reaches, %zu gauges in mid-river, %zu structures and drops, %zu levels: volume "
        "error %.1e, %zu of %zu steps replaced\n",
        RIVERS, reaches, inner, controls, levels, worst, replaced, steps);
    assert_true(inner > 80 && controls > 80 && levels > 8);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(whatever_a_river_holds_its_volume_closes),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
