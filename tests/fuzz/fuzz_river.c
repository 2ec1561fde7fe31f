/* SPDX-License-Identifier: MIT */
/*
 * Any river is refused with a text that says why, or is computed: flows and stages finite, nothing below zero in the
 * storage forms, every drop accounted for. Rivers here are mostly hostile: sections that fold back, slopes of any
 * sign, reaches of 10 m and 300 km, rings, orphans, flows far above the survey.
 */
#include "tests/fuzz/draw_river.h"

/* A flood in few bytes: it stands, and now and then jumps; one time in 16 it is no flow at all. */
static void draw_inflows(struct fuzz_bytes *bytes, const struct drawn_river *drawn, struct river_run *run,
                         bool *is_faulty)
{
    for (size_t gauge = 0; gauge < drawn->river.gauge_count; gauge++) {
        double flow = fuzz_chance(bytes, 4) ? 0.0 : fuzz_log(bytes, 1e-6, drawn->options.largest_discharge_m3s);
        for (size_t step = 0; step <= run->step_count; step++) {
            if (step > 0 && fuzz_chance(bytes, 6))
                flow =
                    fuzz_chance(bytes, 4) ? 0.0 : fuzz_log(bytes, 1e-3, 100.0 * drawn->options.largest_discharge_m3s);
            double given = fuzz_chance(bytes, 251) ? fuzz_odd(bytes) : flow;
            *is_faulty = *is_faulty || !(given >= 0.0 && given <= NETWORK_LARGEST_INFLOW_M3S);
            for (size_t member = 0; member < run->member_count; member++)
                run->inflow_m3s[(gauge * (run->step_count + 1) + step) * run->member_count + member] = given;
        }
    }
}

static void run_river(struct fuzz_bytes *bytes, const struct drawn_river *drawn, struct network *network)
{
    struct river_run run = {.step_count = affordable_steps(drawn, network, 48),
                            .member_count = network_member_count(network)};
    size_t count = (run.step_count + 1) * run.member_count;
    bool is_faulty = false;
    run.inflow_m3s = fuzz_room(drawn->river.gauge_count * count, sizeof(double));
    run.point_m3s = fuzz_room(drawn->river.point_count * count, sizeof(double));
    run.stage_m = fuzz_room(drawn->river.point_count * count, sizeof(double));
    run.volume_before_m3 = fuzz_room(run.member_count, sizeof(double));
    draw_inflows(bytes, drawn, &run, &is_faulty);
    double *start = fuzz_room(drawn->river.gauge_count * run.member_count, sizeof(double));
    for (size_t gauge = 0; gauge < drawn->river.gauge_count; gauge++)
        for (size_t member = 0; member < run.member_count; member++)
            start[gauge * run.member_count + member] = run.inflow_m3s[gauge * count + member];
    enum fw_status status = network_start_steady(network, start);
    free(start);
    for (size_t member = 0; member < run.member_count; member++)
        run.volume_before_m3[member] = network_volume_m3(network, member);
    if (status == FW_OK)
        status = network_advance_with_stage(network, run.step_count, run.inflow_m3s, run.point_m3s, run.stage_m);
    if (is_faulty != (status == FW_BAD_INPUT))
        fuzz_fail("inflows %s, and yet status %d", is_faulty ? "faulty" : "fine", (int)status);
    if (status == FW_OK)
        check_run(drawn, network, &run, false);
    river_run_clear(&run);
}

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size)
{
    struct fuzz_bytes bytes = {data, size};
    struct drawn_river drawn;
    struct network *network = NULL;
    struct network_fault fault = {""};
    draw_river(&bytes, true, &drawn);
    enum fw_status status = network_create(&drawn.river, &drawn.options, &network, &fault);
    if (status == FW_BAD_INPUT && fault.text[0] == '\0')
        fuzz_fail("refused without a reason");
    if (status == FW_OK && affordable_steps(&drawn, network, 1) > 0)
        run_river(&bytes, &drawn, network);
    network_destroy(network);
    return 0;
}
