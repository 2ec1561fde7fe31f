/* SPDX-License-Identifier: MIT */
/*
 * Any flood in any sound river, by every method: pulses, steps, silence, flows above the tables; from a steady or a dry
 * start; in one call or two. Flows and stages stay finite, the storage forms never fall below zero, and volume closes to
 * 1e-12.
 */
#include "tests/fuzz/draw_river.h"

static double draw_flow(struct fuzz_bytes *bytes, double largest_m3s)
{
    unsigned byte = fuzz_byte(bytes); /* one byte a flow: a fuzzer can shape a hydrograph by it */
    return byte == 0 ? 0.0 : 1e-5 * largest_m3s * pow(10.0, 7.0 * (double)(byte - 1) / 254.0);
}

static void draw_flood(struct fuzz_bytes *bytes, const struct drawn_river *drawn, bool starts_dry,
                       struct river_run *run)
{
    for (size_t gauge = 0; gauge < drawn->river.gauge_count; gauge++)
        for (size_t member = 0; member < run->member_count; member++) {
            double *series = run->inflow_m3s + gauge * (run->step_count + 1) * run->member_count + member;
            size_t every = 1 + fuzz_pick(bytes, 8); /* steps that a value stands, or the line to the next takes */
            bool is_line = fuzz_chance(bytes, 2);
            double from = starts_dry ? 0.0 : draw_flow(bytes, drawn->options.largest_discharge_m3s), to = from;
            for (size_t step = 0; step <= run->step_count; step++) {
                if (step % every == 0) {
                    from = to;
                    to = draw_flow(bytes, drawn->options.largest_discharge_m3s);
                }
                double share = is_line ? (double)(step % every) / (double)every : 0.0;
                series[step * run->member_count] = from + share * (to - from);
            }
        }
}

static enum fw_status advance_in_two(struct network *network, const struct drawn_river *drawn, struct river_run *run,
                                     size_t first_count)
{
    size_t members = run->member_count, all = run->step_count + 1, second_count = run->step_count - first_count;
    enum fw_status status = FW_OK;
    for (int part = 0; part < 2 && status == FW_OK; part++) {
        size_t from = part == 0 ? 0 : first_count, steps = (part == 0 ? first_count : second_count) + 1;
        double *in = fuzz_room(drawn->river.gauge_count * steps * members, sizeof *in);
        double *flow = fuzz_room(drawn->river.point_count * steps * members, sizeof *flow);
        double *stage = fuzz_room(drawn->river.point_count * steps * members, sizeof *stage);
        for (size_t gauge = 0; gauge < drawn->river.gauge_count; gauge++)
            memcpy(in + gauge * steps * members, run->inflow_m3s + (gauge * all + from) * members,
                   steps * members * sizeof *in);
        status = network_advance_with_stage(network, steps - 1, in, flow, stage);
        for (size_t point = 0; point < drawn->river.point_count; point++) {
            memcpy(run->point_m3s + (point * all + from) * members, flow + point * steps * members,
                   steps * members * sizeof *flow);
            memcpy(run->stage_m + (point * all + from) * members, stage + point * steps * members,
                   steps * members * sizeof *stage);
        }
        free(in);
        free(flow);
        free(stage);
    }
    return status;
}

static void run_flood(struct fuzz_bytes *bytes, const struct drawn_river *drawn, struct network *network)
{
    struct river_run run = {.step_count = affordable_steps(drawn, network, 1 + fuzz_byte(bytes)),
                            .member_count = network_member_count(network)};
    if (run.step_count == 0)
        return;
    size_t count = (run.step_count + 1) * run.member_count;
    bool starts_dry = fuzz_chance(bytes, 2);
    size_t first_count = fuzz_byte(bytes) % (run.step_count + 1);
    run.inflow_m3s = fuzz_room(drawn->river.gauge_count * count, sizeof(double));
    run.point_m3s = fuzz_room(drawn->river.point_count * count, sizeof(double));
    run.stage_m = fuzz_room(drawn->river.point_count * count, sizeof(double));
    run.volume_before_m3 = fuzz_room(run.member_count, sizeof(double));
    draw_flood(bytes, drawn, starts_dry, &run);
    enum fw_status status = FW_OK;
    if (!starts_dry) {
        double *start = fuzz_room(drawn->river.gauge_count * run.member_count, sizeof(double));
        for (size_t gauge = 0; gauge < drawn->river.gauge_count; gauge++)
            memcpy(start + gauge * run.member_count, run.inflow_m3s + gauge * count,
                   run.member_count * sizeof(double));
        status = network_start_steady(network, start);
        free(start);
    }
    for (size_t member = 0; member < run.member_count; member++)
        run.volume_before_m3[member] = network_volume_m3(network, member);
    if (status == FW_OK)
        status = advance_in_two(network, drawn, &run, first_count);
    if (status != FW_OK)
        fuzz_fail("a sound flood was refused: status %d", (int)status);
    check_run(drawn, network, &run, starts_dry);
    river_run_clear(&run);
}

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size)
{
    struct fuzz_bytes bytes = {data, size};
    struct drawn_river drawn;
    struct network *network = NULL;
    struct network_fault fault = {""};
    draw_river(&bytes, false, &drawn);
    enum fw_status status = network_create(&drawn.river, &drawn.options, &network, &fault);
    if (status == FW_BAD_INPUT && fault.text[0] == '\0')
        fuzz_fail("refused without a reason");
    if (status == FW_OK)
        run_flood(&bytes, &drawn, network);
    network_destroy(network);
    return 0;
}
