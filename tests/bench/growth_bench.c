/* SPDX-License-Identifier: MIT */
/* What the cost of a step grows with: members, cells, nodes, reaches. Straight lines, and how far off them it is. */
#include <stdio.h>

#include "tests/bench/engine_bench.h"
#include "tests/bench/line.h"
#include "tests/bench/network_run.h"

enum growing { MEMBERS, CELLS, REACHES };
enum { MOST_SIZES = 6 };

struct growth {
    const char *what, *unit;
    enum network_method method;
    enum growing growing;
    size_t members, cells, reaches;
    size_t sizes[MOST_SIZES]; /* 0 ends */
};

static const struct growth growths[] = {
    {"storage form, members", "member", NETWORK_MUSKINGUM_CUNGE, MEMBERS, 0, 50, 1, {32, 64, 128, 256, 512, 1024}},
    {"storage form, cells", "cell", NETWORK_MUSKINGUM_CUNGE, CELLS, 32, 0, 1, {25, 50, 100, 200, 400}},
    {"storage form, reaches", "reach", NETWORK_MUSKINGUM_CUNGE, REACHES, 32, 10, 0, {1, 10, 25, 50, 100, 200}},
    {"full equations, members", "member", NETWORK_DYNAMIC, MEMBERS, 0, 50, 1, {32, 64, 128, 256, 512, 1024}},
    {"full equations, nodes", "node", NETWORK_DYNAMIC, CELLS, 32, 0, 1, {25, 50, 100, 200, 400}},
    {"full equations, reaches", "reach", NETWORK_DYNAMIC, REACHES, 32, 10, 0, {1, 10, 25, 50, 100, 200}},
};
enum { GROWTHS = sizeof growths / sizeof *growths };

/* Microseconds of a step while a flood comes in at the head; negative: refused. */
static double step_us(const struct growth *growth, size_t size, bool is_smoke)
{
    bool is_full = growth->method == NETWORK_DYNAMIC;
    const struct network_run_setup setup = {.section = &bench_channel,
                                            .slope_m_per_m = 0.0012,
                                            .reach_m =
                                                130.0 * (double)(growth->growing == CELLS ? size : growth->cells),
                                            .reach_count = growth->growing == REACHES ? size : growth->reaches,
                                            .reaches_to_a_tributary = 10,
                                            .method = growth->method,
                                            .cells_per_reach = growth->growing == CELLS ? size : growth->cells,
                                            .group_count = 1,
                                            .members_per_group = growth->growing == MEMBERS ? size : growth->members,
                                            .time_step_s = 60.0,
                                            .step_count = is_smoke ? 4 : 24,
                                            .flood = {20.0, 80.0, 3.0 * 3600.0, 4.0}};
    struct network_run run;
    if (!network_run_init(&run, &setup))
        return -1.0;
    double seconds = network_run_best_s(&run, is_smoke ? 1 : is_full ? 25 : 100);
    network_run_clear(&run);
    return 1e6 * seconds / (double)setup.step_count;
}

static bool print_growth(const struct growth *growth, double triad_ns, bool is_smoke)
{
    double sizes[MOST_SIZES], us[MOST_SIZES];
    size_t count = 0, most = is_smoke ? 3 : MOST_SIZES;
    for (; count < most && growth->sizes[count] > 0; count++) {
        sizes[count] = (double)growth->sizes[count];
        us[count] = step_us(growth, growth->sizes[count], is_smoke);
        if (us[count] < 0.0)
            return false;
    }
    struct line line = line_through(count, sizes, us);
    printf("  %-24s %5zu to %-5zu %9.2f us + %8.4f us (%.0f triads) a %s; off the line by at most %.1f %%\n",
           growth->what, growth->sizes[0], growth->sizes[count - 1], line.at_0, line.slope,
           1e3 * line.slope / triad_ns, growth->unit, 100.0 * line.largest_miss);
    return true;
}

bool bench_growth(struct engine_bench *bench)
{
    bool is_well = true;
    printf("\nA step of the network against its size: straight lines by least squares\n"
           "  (members through 50 cells; cells, nodes and reaches of 10 cells with 32 members; every tenth reach a "
           "tributary)\n");
    bench_measure_triads(bench);
    for (size_t i = 0; i < GROWTHS && is_well; i++)
        is_well =
            print_growth(&growths[i],
                         bench_widest_triad_ns(bench, growths[i].method == NETWORK_DYNAMIC ? BENCH_FULL_WIDEST
                                                                                           : BENCH_STORAGE_WIDEST),
                         bench->is_smoke);
    return is_well;
}
