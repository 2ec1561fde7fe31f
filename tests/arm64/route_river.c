/* SPDX-License-Identifier: MIT */
/*
 * Routes one small river by both engines and prints every flow and level at its foot, exactly: for tests/arm64/run, which
 * holds the output of one processor against that of another. Volume, and a member alone against the same among others, it
 * checks by itself.
 */
#include <math.h>
#include <stdio.h>
#include <stdlib.h>

#include "engine/network.h"

enum { STEPS = 600, MEMBERS = 33, ALONE = 20 };

static const struct section channel = {.shape = SECTION_TRAPEZOID,
                                       .bottom_m = 14.3,
                                       .side_h_per_v = 2.1,
                                       .roughness_n = 0.037,
                                       .has_plain = true,
                                       .plain_above_m = 2.57,
                                       .plain_width_m = 83.0,
                                       .plain_roughness_n = 0.071};

/* Without functions of the mathematics library, whose last bit differs between processors. */
static double flood_m3s(size_t step, size_t member)
{
    double hours = (double)step / 60.0, away = (hours - 4.3) / (1.7 + 0.02 * (double)member);
    return 7.3 + (60.0 + 3.1 * (double)member) / (1.0 + away * away * away * away);
}

static void *room_for(size_t count)
{
    double *room = calloc(count, sizeof *room);
    if (room == NULL) {
        fputs("no memory\n", stderr);
        exit(EXIT_FAILURE);
    }
    return room;
}

/* Flow and level at the foot of the last reach, [step][member]; false and a word on stderr if something is wrong. */
static bool route(enum network_method method, size_t member_count, size_t first_member, double flow_out[],
                  double stage_out[])
{
    static const size_t gauge_node[] = {0};
    const struct network_reach reaches[] = {
        {"upper", 0, 1, 9400.0, 0.0024, &channel, 0.0, method, 0.0},
        {"lower", 1, 2, 8300.0, 0.0011, &channel, 0.0, method, 0.0},
    };
    const struct network_point point = {.id = "foot", .reach_index = 1, .at_m = 8300.0};
    const struct network_river river = {.node_count = 3,
                                        .gauge_count = 1,
                                        .gauge_node = gauge_node,
                                        .reach_count = 2,
                                        .reaches = reaches,
                                        .point_count = 1,
                                        .points = &point};
    static const double factor = 1.0;
    const struct network_options options = {.time_step_s = 60.0,
                                            .group_count = 1,
                                            .roughness_factors = &factor,
                                            .members_per_group = member_count,
                                            .largest_discharge_m3s = 300.0};
    struct network *network = NULL;
    struct network_fault fault = {""};
    double *inflow = room_for((STEPS + 1) * member_count);
    for (size_t step = 0; step <= STEPS; step++)
        for (size_t member = 0; member < member_count; member++)
            inflow[step * member_count + member] = flood_m3s(step, first_member + member);
    bool is_sound =
        network_create(&river, &options, &network, &fault) == FW_OK && network_start_steady(network, inflow) == FW_OK;
    if (!is_sound)
        fprintf(stderr, "the river is refused: %s\n", fault.text);
    double before = is_sound ? network_volume_m3(network, 0) : 0.0;
    is_sound = is_sound && network_advance_with_stage(network, STEPS, inflow, flow_out, stage_out) == FW_OK;
    double balance = is_sound ? before - network_volume_m3(network, 0) : 0.0, through = 0.0;
    for (size_t step = 0; is_sound && step < STEPS; step++) {
        double in = 30.0 * (inflow[step * member_count] + inflow[(step + 1) * member_count]);
        balance += in - 30.0 * (flow_out[step * member_count] + flow_out[(step + 1) * member_count]);
        through += in;
    }
    if (is_sound && !(fabs(balance) <= 1e-12 * through)) {
        fprintf(stderr, "volume does not close: %g m3 of %g\n", balance, through);
        is_sound = false;
    }
    network_destroy(network);
    free(inflow);
    return is_sound;
}

static bool print_routed(const char *name, enum network_method method)
{
    double *flow = room_for((STEPS + 1) * MEMBERS), *stage = room_for((STEPS + 1) * MEMBERS);
    double *lone_flow = room_for(STEPS + 1), *lone_stage = room_for(STEPS + 1);
    bool is_sound = route(method, MEMBERS, 0, flow, stage) && route(method, 1, ALONE, lone_flow, lone_stage);
    for (size_t step = 0; is_sound && step <= STEPS; step++) {
        for (size_t member = 0; member < MEMBERS; member++)
            printf("%s %zu %zu %.17g %.17g\n", name, step, member, flow[step * MEMBERS + member],
                   stage[step * MEMBERS + member]);
        if (flow[step * MEMBERS + ALONE] != lone_flow[step] || stage[step * MEMBERS + ALONE] != lone_stage[step]) {
            fprintf(stderr, "%s: step %zu: a member alone differs from the same among others\n", name, step);
            is_sound = false;
        }
    }
    free(flow);
    free(stage);
    free(lone_flow);
    free(lone_stage);
    return is_sound;
}

int main(void)
{
    bool is_sound = print_routed("storage", NETWORK_MUSKINGUM_CUNGE);
    is_sound = print_routed("full", NETWORK_DYNAMIC) && is_sound;
    return is_sound ? EXIT_SUCCESS : EXIT_FAILURE;
}
