/* SPDX-License-Identifier: MIT */
/*
 * Gauges in mid-river, whose measured flow replaces the routed one, and levels given step by step at outlets.
 */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <math.h>
#include <stdlib.h>
#include <string.h>

#include "tests/engine/try_river.h"
#include "tests/engine/try_sections.h"

enum { STEPS = 480, FROM = 90, TO = 260 }; /* steps of a minute; measured in mid-river from FROM up to TO */
enum { GAUGES = 4, WEIR = 2, BRIDGE = 3 }; /* beside the two heads: node 1, and node 3 where two reaches meet */
enum { UPPER_FOOT, MIDDLE_HEAD, MIDDLE_FOOT, BECK_END, LOWER_HEAD, RIVER_END, PLACES };

struct gauged_river { /* points into itself */
    struct try_river try;
    size_t gauge_node[GAUGES];
    struct network_point points[PLACES];
    double *inflow, *flow, *stage;
};

static double *room_of(size_t count)
{
    double *room = calloc(count, sizeof *room);
    assert_non_null(room);
    return room;
}

static double hump(double t_h, double at_h, double width_h)
{
    return exp(-pow((t_h - at_h) / width_h, 2.0));
}

static double given_m3s(size_t gauge, size_t member, size_t step)
{
    double h = (double)step / 60.0;
    double of_member = 1.0 + 0.09 * (double)member;
    if (gauge == 0)
        return of_member * (9.3 + 71.0 * hump(h, 2.2, 0.8));
    if (gauge == 1)
        return of_member * (2.1 + 17.0 * hump(h, 2.6, 0.7));
    /* in mid-river every second member has measured values, for a while */
    if (member % 2 == 0 || step < FROM || step >= TO)
        return NOT_A_NUMBER;
    return gauge == WEIR ? 11.7 + 49.0 * hump(h, 2.9, 0.9) : 17.3 + 83.0 * hump(h, 3.3, 1.0);
}

static void gauged_river_init(struct gauged_river *gauged, enum network_method upper, enum network_method beck,
                              enum network_method middle, enum network_method lower)
{
    struct try_river *try = &gauged->try;
    make_river(try);
    try->reaches[UPPER].method = upper;
    try->reaches[BECK].method = beck;
    try->reaches[MIDDLE].method = middle;
    try->reaches[LOWER].method = lower;
    memcpy(gauged->gauge_node, (size_t[]){0, 2, 1, 3}, sizeof gauged->gauge_node);
    memcpy(gauged->points,
           (struct network_point[]){
               [UPPER_FOOT] = {.id = "upper foot", .reach_index = UPPER, .at_m = 9410.0},
               [MIDDLE_HEAD] = {.id = "middle head", .reach_index = MIDDLE, .at_m = 0.0},
               [MIDDLE_FOOT] = {.id = "middle foot", .reach_index = MIDDLE, .at_m = 5270.0},
               [BECK_END] = {.id = "beck foot", .reach_index = BECK, .at_m = 3370.0},
               [LOWER_HEAD] = {.id = "lower head", .reach_index = LOWER, .at_m = 0.0},
               [RIVER_END] = {.id = "river's end", .reach_index = LOWER, .at_m = 8130.0},
           },
           sizeof gauged->points);
    try->river.gauge_count = GAUGES;
    try->river.gauge_node = gauged->gauge_node;
    try->river.point_count = PLACES;
    try->river.points = gauged->points;
    gauged->inflow = room_of(GAUGES * (STEPS + 1) * ALL_MEMBERS);
    gauged->flow = room_of(PLACES * (STEPS + 1) * ALL_MEMBERS);
    gauged->stage = room_of(PLACES * (STEPS + 1) * ALL_MEMBERS);
    for (size_t gauge = 0; gauge < GAUGES; gauge++)
        for (size_t step = 0; step <= STEPS; step++)
            for (size_t member = 0; member < ALL_MEMBERS; member++)
                gauged->inflow[(gauge * (STEPS + 1) + step) * ALL_MEMBERS + member] = given_m3s(gauge, member, step);
}

static void gauged_river_clear(struct gauged_river *gauged)
{
    free(gauged->inflow);
    free(gauged->flow);
    free(gauged->stage);
}

static struct network *create(const struct try_river *try)
{
    struct network *network = NULL;
    struct network_fault fault = {""};
    if (network_create(&try->river, &try->options, &network, &fault) != FW_OK)
        fail_msg("network_create: %s", fault.text);
    return network;
}

static void start(struct network *network, const double inflow[], size_t gauge_count)
{
    double first[GAUGES * ALL_MEMBERS];
    for (size_t gauge = 0; gauge < gauge_count; gauge++)
        memcpy(first + gauge * ALL_MEMBERS, inflow + gauge * (STEPS + 1) * ALL_MEMBERS, ALL_MEMBERS * sizeof *first);
    assert_int_equal(network_start_steady(network, first), FW_OK);
}

static struct network *route(struct gauged_river *gauged)
{
    struct network *network = create(&gauged->try);
    start(network, gauged->inflow, gauged->try.river.gauge_count);
    assert_int_equal(network_advance_with_stage(network, STEPS, gauged->inflow, gauged->flow, gauged->stage), FW_OK);
    return network;
}

static double at(const double values[], size_t place, size_t step, size_t member)
{
    return values[(place * (STEPS + 1) + step) * ALL_MEMBERS + member];
}

#define M NETWORK_MUSKINGUM_CUNGE
#define K NETWORK_KINEMATIC
#define L NETWORK_KINEMATIC_LINEAR
#define D NETWORK_DYNAMIC
#define F NETWORK_DIFFUSIVE

static const struct {
    const char *shows;
    enum network_method upper, beck, middle, lower;
} mixtures[] = {
    {"storage form", M, M, M, M},
    {"kinematic", K, K, K, K},
    {"linear", L, L, L, L},
    {"full equations, all one tree", D, D, D, D},
    {"without inertia", F, F, F, F},
    {"storage above, full below the junction", M, M, M, D},
    {"full above, storage below", D, D, D, M},
    {"full between storage", M, M, D, M},
    {"two trees that touch at the gauge", D, F, F, D},
};
enum { MIXTURES = sizeof mixtures / sizeof *mixtures };

/* --- what replaces what ------------------------------------------------------------------------------------------- */

static void what_was_measured_goes_on_downstream(void **state)
{
    (void)state;
    for (size_t i = 0; i < MIXTURES; i++) {
        struct gauged_river gauged, untouched;
        gauged_river_init(&gauged, mixtures[i].upper, mixtures[i].beck, mixtures[i].middle, mixtures[i].lower);
        gauged_river_init(&untouched, mixtures[i].upper, mixtures[i].beck, mixtures[i].middle, mixtures[i].lower);
        untouched.try.river.gauge_count = 2;
        network_destroy(route(&gauged));
        network_destroy(route(&untouched));
        double worst_given = 0.0, worst_routed = 0.0, farthest = 0.0;
        for (size_t member = 0; member < ALL_MEMBERS; member++)
            for (size_t step = 0; step <= STEPS; step++) {
                double measured = given_m3s(BRIDGE, member, step);
                double head = at(gauged.flow, LOWER_HEAD, step, member);
                double came = at(gauged.flow, MIDDLE_FOOT, step, member) + at(gauged.flow, BECK_END, step, member);
                if (isnan(measured))
                    worst_routed = fmax(worst_routed, fabs(head / came - 1.0));
                else
                    worst_given = fmax(worst_given, fabs(head / measured - 1.0));
                measured = given_m3s(WEIR, member, step);
                head = at(gauged.flow, MIDDLE_HEAD, step, member);
                came = at(gauged.flow, UPPER_FOOT, step, member);
                worst_given = fmax(worst_given, isnan(measured) ? 0.0 : fabs(head / measured - 1.0));
                worst_routed = fmax(worst_routed, isnan(measured) ? fabs(head / came - 1.0) : 0.0);
                for (size_t place = 0; place < PLACES; place++) {
                    double apart =
                        fabs(at(gauged.flow, place, step, member) - at(untouched.flow, place, step, member));
                    if (member % 2 == 0 && !(apart == 0.0))
                        fail_msg("%s: a member without measured values differs", mixtures[i].shows);
                    farthest = place == RIVER_END ? fmax(farthest, apart) : farthest;
                }
            }
        if (!(worst_given <= 1e-13) || !(worst_routed <= 1e-12))
            fail_msg("%s: %g from the measured, %g from the routed", mixtures[i].shows, worst_given, worst_routed);
        assert_true(farthest > 10.0);
        gauged_river_clear(&gauged);
        gauged_river_clear(&untouched);
    }
}

static void what_a_gauge_brings_is_in_the_balance(void **state)
{
    (void)state;
    for (size_t i = 0; i < MIXTURES; i++) {
        struct gauged_river gauged;
        double before[ALL_MEMBERS], worst = 0.0, brought_most = 0.0;
        if (mixtures[i].upper == L) /* conserves nothing */
            continue;
        gauged_river_init(&gauged, mixtures[i].upper, mixtures[i].beck, mixtures[i].middle, mixtures[i].lower);
        gauged.try.river.side_inflow_count = 0;
        struct network *network = create(&gauged.try);
        start(network, gauged.inflow, GAUGES);
        for (size_t member = 0; member < ALL_MEMBERS; member++)
            before[member] = network_volume_m3(network, member);
        assert_int_equal(network_advance(network, STEPS, gauged.inflow, gauged.flow), FW_OK);
        for (size_t member = 0; member < ALL_MEMBERS; member++) {
            double in = 0.0, out = 0.0;
            for (size_t step = 0; step <= STEPS; step++) {
                double weight = step == 0 || step == STEPS ? 30.0 : 60.0;
                in += weight * (at(gauged.inflow, 0, step, member) + at(gauged.inflow, 1, step, member));
                out += weight * at(gauged.flow, RIVER_END, step, member);
            }
            double brought = network_brought_m3(network, WEIR, member) + network_brought_m3(network, BRIDGE, member);
            assert_true(network_brought_m3(network, 0, member) == 0.0);
            assert_true(member % 2 == 1 || brought == 0.0);
            brought_most = fmax(brought_most, fabs(brought) / in);
            worst =
                fmax(worst, fabs(in + brought - out - (network_volume_m3(network, member) - before[member])) / in);
        }
        print_message("%s: volume error %.1e, brought up to %.0f %% of the inflow, %zu steps replaced\n",
                      mixtures[i].shows, worst, 100.0 * brought_most, network_steps_replaced(network));
        assert_true(worst <= 1e-12);
        assert_true(brought_most > 0.1);
        network_destroy(network);
        gauged_river_clear(&gauged);
    }
}

/*
 * By the full equations Newton's path to a new state is another one, and so is its remainder: below the gauge it is nothing,
 * at a foot above it may be some per cent of the flow in the one step in which a plain floods.
 */
static void measuring_what_is_routed_changes_nothing(void **state)
{
    (void)state;
    for (size_t i = 0; i < MIXTURES; i++) {
        struct gauged_river gauged, untouched;
        gauged_river_init(&gauged, mixtures[i].upper, mixtures[i].beck, mixtures[i].middle, mixtures[i].lower);
        gauged_river_init(&untouched, mixtures[i].upper, mixtures[i].beck, mixtures[i].middle, mixtures[i].lower);
        untouched.try.river.gauge_count = 2;
        network_destroy(route(&untouched));
        size_t row = (STEPS + 1) * ALL_MEMBERS;
        memcpy(gauged.inflow + WEIR * row, untouched.flow + MIDDLE_HEAD * row, row * sizeof(double));
        memcpy(gauged.inflow + BRIDGE * row, untouched.flow + LOWER_HEAD * row, row * sizeof(double));
        struct network *network = route(&gauged);
        double below = 0.0, at_feet = 0.0, sum = 0.0, volume = 0.0;
        for (size_t place = 0; place < PLACES; place++)
            for (size_t k = place * row; k < (place + 1) * row; k++) {
                double apart = fabs(gauged.flow[k] - untouched.flow[k]);
                bool is_foot = place == UPPER_FOOT || place == MIDDLE_FOOT || place == BECK_END;
                at_feet = fmax(at_feet, is_foot ? apart / untouched.flow[k] : 0.0);
                below = fmax(below, is_foot ? 0.0 : apart / untouched.flow[k]);
                sum += apart;
                volume += untouched.flow[k];
            }
        print_message("%s: the same to %.1e below the gauges, %.1e at the feet above them, %.1e in the mean\n",
                      mixtures[i].shows, below, at_feet, sum / volume);
        bool is_storage = mixtures[i].upper == mixtures[i].lower && !network_method_is_full(mixtures[i].upper);
        assert_true(below <= 1e-6);
        assert_true(at_feet <= (is_storage ? 1e-12 : 0.1));
        assert_true(sum <= (is_storage ? 1e-12 : 1e-4) * volume);
        assert_true(fabs(network_brought_m3(network, BRIDGE, 1)) <= (is_storage ? 1e-6 : 500.0)); /* of 1e6 m3 */
        network_destroy(network);
        gauged_river_clear(&gauged);
        gauged_river_clear(&untouched);
    }
}

/* By the full equations the level stays one across the gauge, so that the river's flood is felt above it. */
static void the_level_passes_a_gauge(void **state)
{
    (void)state;
    struct gauged_river gauged;
    gauged_river_init(&gauged, D, D, D, D);
    struct network *network = route(&gauged);
    double backed_up = 0.0;
    for (size_t step = FROM; step < TO; step++) {
        double lower = at(gauged.stage, LOWER_HEAD, step, 1);
        assert_true(fabs(at(gauged.stage, BECK_END, step, 1) - lower) <= 0.03); /* one iteration's remainder */
        assert_true(fabs(at(gauged.stage, MIDDLE_FOOT, step, 1) - lower) <= 0.03);
        backed_up =
            fmax(backed_up, at(gauged.stage, BECK_END, step, 1) -
                                network_point_stage_m(network, BECK_END, 1, at(gauged.flow, BECK_END, step, 1)));
    }
    assert_true(backed_up > 0.5);
    network_destroy(network);
    gauged_river_clear(&gauged);
}

/* --- who follows a gauge in mid-river ------------------------------------------------------------------------------ */

static void a_share_of_it_follows_the_measured_flow_and_else_the_routed(void **state)
{
    (void)state;
    for (size_t i = 0; i < MIXTURES; i++) {
        struct gauged_river gauged;
        gauged_river_init(&gauged, mixtures[i].upper, mixtures[i].beck, mixtures[i].middle, mixtures[i].lower);
        enum { DELAY = 7 };
        gauged.try.sides[1] = (struct network_side_inflow){
            .reach_index = LOWER, .at_m = 0.0, .share_of_gauge = WEIR, .share = 0.31, .delay_s = 60.0 * DELAY};
        struct network *with = route(&gauged);
        double *flow = room_of(PLACES * (STEPS + 1) * ALL_MEMBERS);
        memcpy(flow, gauged.flow, PLACES * (STEPS + 1) * ALL_MEMBERS * sizeof *flow);
        double before[ALL_MEMBERS], worst = 0.0;
        start(with, gauged.inflow, GAUGES);
        for (size_t member = 0; member < ALL_MEMBERS; member++)
            before[member] = network_volume_m3(with, member);
        assert_int_equal(network_advance(with, STEPS, gauged.inflow, gauged.flow), FW_OK);
        gauged.try.river.side_inflow_count = 3;
        for (size_t member = 0; member < ALL_MEMBERS && mixtures[i].upper != L; member++) {
            double balance = network_brought_m3(with, WEIR, member) + network_brought_m3(with, BRIDGE, member),
                   in = 0.0;
            for (size_t step = 0; step <= STEPS; step++) {
                double weight = step == 0 || step == STEPS ? 30.0 : 60.0;
                const struct network_side_inflow *side = gauged.try.sides;
                double weir = at(flow, MIDDLE_HEAD, step > DELAY ? step - DELAY : 0, member);
                double first = (double)step - side[0].delay_s / 60.0;
                double earlier = floor(fmax(first, 0.0)), part = fmax(first, 0.0) - earlier;
                double head = (1.0 - part) * at(gauged.inflow, 0, (size_t)earlier, member) +
                              part * at(gauged.inflow, 0, (size_t)earlier + 1, member);
                double beck = at(gauged.inflow, 1, step > 2 ? step - 2 : 0, member);
                in += weight * (at(gauged.inflow, 0, step, member) + at(gauged.inflow, 1, step, member) +
                                0.31 * weir + side[0].share * head + side[2].share * beck);
                balance -= weight * at(gauged.flow, RIVER_END, step, member);
            }
            balance += in - (network_volume_m3(with, member) - before[member]);
            worst = fmax(worst, fabs(balance) / in);
        }
        if (!(worst <= 1e-12))
            fail_msg("%s: volume error %g", mixtures[i].shows, worst);
        for (size_t k = 0; k < PLACES * (STEPS + 1) * ALL_MEMBERS; k++)
            assert_true(flow[k] == gauged.flow[k]); /* a second start forgets the first run */
        network_destroy(with);
        free(flow);
        gauged_river_clear(&gauged);
    }
}

/* Nothing measured in mid-river at the start, and a share that follows it: steady all the same. */
static void a_steady_start_knows_what_is_routed_at_a_gauge(void **state)
{
    (void)state;
    for (size_t i = 0; i < MIXTURES; i++) {
        struct gauged_river gauged;
        gauged_river_init(&gauged, mixtures[i].upper, mixtures[i].beck, mixtures[i].middle, mixtures[i].lower);
        gauged.try.sides[1] = (struct network_side_inflow){
            .reach_index = LOWER, .at_m = 3000.0, .share_of_gauge = WEIR, .share = 0.31, .delay_s = 410.0};
        for (size_t gauge = 0; gauge < GAUGES; gauge++)
            for (size_t k = 0; k < (STEPS + 1) * ALL_MEMBERS; k++)
                gauged.inflow[gauge * (STEPS + 1) * ALL_MEMBERS + k] =
                    gauge < 2 ? given_m3s(gauge, 0, 0) : NOT_A_NUMBER;
        network_destroy(route(&gauged));
        double upper = given_m3s(0, 0, 0), beck = given_m3s(1, 0, 0);
        double expected = (1.0 + 0.31) * 1.16 * upper + 1.07 * beck;
        for (size_t step = 0; step <= STEPS; step++)
            if (!(fabs(at(gauged.flow, RIVER_END, step, 2) / expected - 1.0) <= 1e-9))
                fail_msg("%s, step %zu: %.12g, expected %.12g", mixtures[i].shows, step,
                         at(gauged.flow, RIVER_END, step, 2), expected);
        gauged_river_clear(&gauged);
    }
}

/* A gauge apart from the river feeds only those who follow it. */
static void a_gauge_apart_is_known_to_shares_alone(void **state)
{
    (void)state;
    struct gauged_river gauged;
    gauged_river_init(&gauged, M, M, M, M);
    gauged.gauge_node[WEIR] = NETWORK_NONE;
    gauged.try.river.gauge_count = 3;
    gauged.try.sides[1] = (struct network_side_inflow){
        .reach_index = LOWER, .at_m = 8130.0, .share_of_gauge = WEIR, .share = 0.5, .delay_s = 0.0};
    for (size_t k = 0; k < 3 * (STEPS + 1) * ALL_MEMBERS; k++)
        gauged.inflow[k] = k < 2 * (STEPS + 1) * ALL_MEMBERS ? 0.0 : 7.3;
    struct network *network = route(&gauged);
    for (size_t step = 0; step <= STEPS; step++) {
        assert_true(at(gauged.flow, LOWER_HEAD, step, 3) == 0.0);
        assert_true(fabs(at(gauged.flow, RIVER_END, step, 3) - 3.65) <= 1e-12);
    }
    gauged.inflow[2 * (STEPS + 1) * ALL_MEMBERS + 5] = NOT_A_NUMBER;
    assert_int_equal(network_advance(network, STEPS, gauged.inflow, gauged.flow), FW_BAD_INPUT);
    network_destroy(network);
    gauged_river_clear(&gauged);
}

/* Where the last reach ends a gauge replaces nothing. */
static void a_gauge_at_the_very_end_changes_nothing(void **state)
{
    (void)state;
    struct gauged_river gauged, untouched;
    gauged_river_init(&gauged, M, D, M, D);
    gauged_river_init(&untouched, M, D, M, D);
    gauged.gauge_node[WEIR] = 4;
    gauged.try.river.gauge_count = 3;
    untouched.try.river.gauge_count = 2;
    struct network *network = route(&gauged);
    network_destroy(route(&untouched));
    for (size_t k = 0; k < PLACES * (STEPS + 1) * ALL_MEMBERS; k++)
        assert_true(gauged.flow[k] == untouched.flow[k]);
    for (size_t member = 0; member < ALL_MEMBERS; member++)
        assert_true(network_brought_m3(network, WEIR, member) == 0.0);
    network_destroy(network);
    gauged_river_clear(&gauged);
    gauged_river_clear(&untouched);
}

/* --- order of work, and what is refused --------------------------------------------------------------------------- */

static void several_calls_and_a_state_laid_aside_give_the_same_bits(void **state)
{
    (void)state;
    for (size_t i = 0; i < MIXTURES; i++) {
        struct gauged_river gauged;
        gauged_river_init(&gauged, mixtures[i].upper, mixtures[i].beck, mixtures[i].middle, mixtures[i].lower);
        gauged.try.sides[1].share_of_gauge = WEIR;
        gauged.try.sides[1].share = 0.2;
        network_destroy(route(&gauged));
        struct network *network = create(&gauged.try);
        double *laid_aside = room_of(network_state_count(network));
        double part_in[GAUGES * 2 * ALL_MEMBERS], part_out[PLACES * 2 * ALL_MEMBERS];
        start(network, gauged.inflow, GAUGES);
        for (size_t step = 1; step <= STEPS; step++) {
            for (size_t gauge = 0; gauge < GAUGES; gauge++)
                memcpy(part_in + gauge * 2 * ALL_MEMBERS,
                       gauged.inflow + (gauge * (STEPS + 1) + step - 1) * ALL_MEMBERS,
                       2 * ALL_MEMBERS * sizeof *part_in);
            if (step == FROM + 20) { /* what is routed in between is forgotten */
                double lost[PLACES * 2 * ALL_MEMBERS];
                network_state_save(network, laid_aside);
                assert_int_equal(network_advance(network, 1, part_in, lost), FW_OK);
                network_state_restore(network, laid_aside);
            }
            assert_int_equal(network_advance(network, 1, part_in, part_out), FW_OK);
            for (size_t place = 0; place < PLACES; place++)
                for (size_t member = 0; member < ALL_MEMBERS; member++)
                    if (part_out[(place * 2 + 1) * ALL_MEMBERS + member] != at(gauged.flow, place, step, member))
                        fail_msg("%s, step %zu", mixtures[i].shows, step);
        }
        network_destroy(network);
        free(laid_aside);
        gauged_river_clear(&gauged);
    }
}

static void inflows_that_cannot_be_are_refused_and_change_nothing(void **state)
{
    (void)state;
    static const struct {
        const char *shows;
        size_t gauge;
        double value;
    } rows[] = {
        {"nothing measured at a head", 0, NOT_A_NUMBER},
        {"negative in mid-river", BRIDGE, -0.1},
        {"endless in mid-river", WEIR, ENDLESS},
        {"too much in mid-river", WEIR, 2e9},
    };
    struct gauged_river gauged;
    gauged_river_init(&gauged, M, D, M, D);
    struct network *network = create(&gauged.try);
    double first[GAUGES * ALL_MEMBERS];
    start(network, gauged.inflow, GAUGES);
    double volume = network_volume_m3(network, 2);
    for (size_t i = 0; i < sizeof rows / sizeof *rows; i++) {
        double *spoilt = &gauged.inflow[(rows[i].gauge * (STEPS + 1) + 3) * ALL_MEMBERS + 2];
        double kept = *spoilt;
        for (size_t k = 0; k < GAUGES * ALL_MEMBERS; k++)
            first[k] = k == rows[i].gauge * ALL_MEMBERS + 2 ? rows[i].value : 3.0;
        *spoilt = rows[i].value;
        assert_int_equal(network_advance(network, STEPS, gauged.inflow, gauged.flow), FW_BAD_INPUT);
        assert_int_equal(network_start_steady(network, first), FW_BAD_INPUT);
        assert_true(network_volume_m3(network, 2) == volume);
        *spoilt = kept;
    }
    network_destroy(network);
    gauged_river_clear(&gauged);
}

/* --- levels given step by step ------------------------------------------------------------------------------------ */

enum { LAKES = 2, SHORE = 0 };

static void end_in_a_lake(struct gauged_river *gauged)
{
    gauged->try.river.gauge_count = 2;
    gauged->try.river.level_count = LAKES;
    gauged->try.reaches[LOWER].has_outlet_level = true;
    gauged->try.reaches[LOWER].outlet_level = SHORE;
}

static double *lake_levels(double (*level_m)(size_t step, size_t member))
{
    double *levels = room_of(LAKES * (STEPS + 1) * ALL_MEMBERS);
    for (size_t step = 0; step <= STEPS; step++)
        for (size_t member = 0; member < ALL_MEMBERS; member++)
            levels[step * ALL_MEMBERS + member] = level_m(step, member);
    return levels;
}

static void route_at(struct gauged_river *gauged, const double levels[], struct network **network_out)
{
    double first[2 * ALL_MEMBERS], first_level[LAKES * ALL_MEMBERS];
    *network_out = create(&gauged->try);
    for (size_t gauge = 0; gauge < 2; gauge++)
        memcpy(first + gauge * ALL_MEMBERS, gauged->inflow + gauge * (STEPS + 1) * ALL_MEMBERS,
               ALL_MEMBERS * sizeof *first);
    for (size_t lake = 0; lake < LAKES; lake++)
        memcpy(first_level + lake * ALL_MEMBERS, levels + lake * (STEPS + 1) * ALL_MEMBERS,
               ALL_MEMBERS * sizeof *first);
    assert_int_equal(network_start_steady_at(*network_out, first, first_level), FW_OK);
    assert_int_equal(network_advance_at(*network_out, STEPS, gauged->inflow, levels, gauged->flow, gauged->stage),
                     FW_OK);
}

static double quiet_lake_m(size_t step, size_t member)
{
    (void)step;
    (void)member;
    return 4.3;
}

static double tide_m(size_t step, size_t member)
{
    return 3.7 + 0.13 * (double)member + 1.9 * sin(2.0 * 3.141592653589793 * (double)step / 745.0);
}

static double far_below_m(size_t step, size_t member)
{
    return -3.0 - 0.001 * (double)step - (double)member;
}

static void a_level_that_never_moves_is_a_held_one(void **state)
{
    (void)state;
    for (int is_diffusive = 0; is_diffusive < 2; is_diffusive++) {
        struct gauged_river lake, held;
        enum network_method full = is_diffusive ? F : D;
        double *levels = lake_levels(quiet_lake_m);
        struct network *network = NULL;
        gauged_river_init(&lake, M, full, full, full);
        gauged_river_init(&held, M, full, full, full);
        end_in_a_lake(&lake);
        held.try.river.gauge_count = 2;
        held.try.reaches[LOWER].outlet_depth_m = 4.3;
        route_at(&lake, levels, &network);
        network_destroy(network);
        network_destroy(route(&held));
        for (size_t k = 0; k < PLACES * (STEPS + 1) * ALL_MEMBERS; k++) {
            assert_true(lake.flow[k] == held.flow[k]);
            assert_true(lake.stage[k] == held.stage[k]);
        }
        free(levels);
        gauged_river_clear(&lake);
        gauged_river_clear(&held);
    }
}

static void a_tide_is_followed_and_volume_closes(void **state)
{
    (void)state;
    for (int is_diffusive = 0; is_diffusive < 2; is_diffusive++) {
        struct gauged_river gauged;
        enum network_method full = is_diffusive ? F : D;
        double *levels = lake_levels(tide_m);
        double worst = 0.0;
        struct network *network = NULL;
        gauged_river_init(&gauged, M, full, full, full);
        end_in_a_lake(&gauged);
        gauged.try.river.side_inflow_count = 0;
        route_at(&gauged, levels, &network);
        for (size_t step = 0; step <= STEPS; step++)
            for (size_t member = 0; member < ALL_MEMBERS; member++)
                assert_true(fabs(at(gauged.stage, RIVER_END, step, member) - tide_m(step, member)) <= 1e-9);
        struct network *start_only = create(&gauged.try);
        double first[2 * ALL_MEMBERS];
        for (size_t k = 0; k < 2 * ALL_MEMBERS; k++)
            first[k] = gauged.inflow[(k / ALL_MEMBERS) * (STEPS + 1) * ALL_MEMBERS + k % ALL_MEMBERS];
        assert_int_equal(network_start_steady_at(start_only, first, levels), FW_OK);
        for (size_t member = 0; member < ALL_MEMBERS; member++) {
            double in = 0.0, out = 0.0;
            for (size_t step = 0; step <= STEPS; step++) {
                double weight = step == 0 || step == STEPS ? 30.0 : 60.0;
                in += weight * (at(gauged.inflow, 0, step, member) + at(gauged.inflow, 1, step, member));
                out += weight * at(gauged.flow, RIVER_END, step, member);
            }
            double held = network_volume_m3(network, member) - network_volume_m3(start_only, member);
            worst = fmax(worst, fabs(in - out - held) / in);
        }
        print_message("tide, %s inertia: volume error %.1e, %zu steps replaced\n", is_diffusive ? "without" : "with",
                      worst, network_steps_replaced(network));
        assert_true(worst <= 1e-12);
        network_destroy(network);
        network_destroy(start_only);
        free(levels);
        gauged_river_clear(&gauged);
    }
}

/* `wide`: critical depth (q^2 / g)^(1/3) per width. */
static void a_level_far_below_leaves_the_critical_depth(void **state)
{
    (void)state;
    struct gauged_river gauged;
    double *levels = lake_levels(far_below_m);
    double worst = 0.0;
    struct network *network = NULL;
    gauged_river_init(&gauged, M, M, M, D);
    end_in_a_lake(&gauged);
    route_at(&gauged, levels, &network);
    for (size_t step = 0; step <= STEPS; step++)
        for (size_t member = 0; member < ALL_MEMBERS; member++) {
            /* at the flow of the step before */
            double flow = at(gauged.flow, RIVER_END, step > 0 ? step - 1 : 0, member);
            double critical = cbrt(pow(flow / 31.0, 2.0) / 9.80665);
            worst = fmax(worst, fabs(at(gauged.stage, RIVER_END, step, member) / critical - 1.0));
        }
    print_message("level far below: depth within %.1e of critical, %zu steps replaced\n", worst,
                  network_steps_replaced(network));
    assert_true(worst <= 1e-3); /* tables of the depth: straight lines */
    assert_int_equal(network_steps_replaced(network), 0);
    network_destroy(network);
    free(levels);
    gauged_river_clear(&gauged);
}

static void levels_are_held_when_none_are_given_and_refused_when_absurd(void **state)
{
    (void)state;
    struct gauged_river gauged;
    double *levels = lake_levels(tide_m);
    struct network *network = NULL;
    gauged_river_init(&gauged, M, D, M, D);
    end_in_a_lake(&gauged);
    route_at(&gauged, levels, &network);
    double last[ALL_MEMBERS];
    for (size_t member = 0; member < ALL_MEMBERS; member++)
        last[member] = at(gauged.stage, RIVER_END, STEPS, member);
    for (size_t gauge = 0; gauge < 2; gauge++) /* go on at the present flow */
        for (size_t step = 0; step <= STEPS; step++)
            memcpy(gauged.inflow + (gauge * (STEPS + 1) + step) * ALL_MEMBERS,
                   gauged.inflow + (gauge * (STEPS + 1) + STEPS) * ALL_MEMBERS, ALL_MEMBERS * sizeof *last);
    static const double absurd[] = {NOT_A_NUMBER, ENDLESS, -1e4, 1e4};
    for (size_t i = 0; i < sizeof absurd / sizeof *absurd; i++) {
        double first[2 * ALL_MEMBERS] = {0.0};
        double kept = levels[5];
        levels[5] = absurd[i];
        assert_int_equal(network_advance_at(network, 4, gauged.inflow, levels, gauged.flow, NULL), FW_BAD_INPUT);
        assert_int_equal(network_start_steady_at(network, first, levels), FW_BAD_INPUT);
        levels[5] = kept;
    }
    assert_int_equal(network_advance_with_stage(network, STEPS, gauged.inflow, gauged.flow, gauged.stage), FW_OK);
    for (size_t step = 0; step <= STEPS; step++)
        for (size_t member = 0; member < ALL_MEMBERS; member++)
            assert_true(fabs(at(gauged.stage, RIVER_END, step, member) - last[member]) <= 1e-9);
    network_destroy(network);
    free(levels);
    gauged_river_clear(&gauged);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(what_was_measured_goes_on_downstream),
        cmocka_unit_test(what_a_gauge_brings_is_in_the_balance),
        cmocka_unit_test(measuring_what_is_routed_changes_nothing),
        cmocka_unit_test(the_level_passes_a_gauge),
        cmocka_unit_test(a_share_of_it_follows_the_measured_flow_and_else_the_routed),
        cmocka_unit_test(a_steady_start_knows_what_is_routed_at_a_gauge),
        cmocka_unit_test(a_gauge_apart_is_known_to_shares_alone),
        cmocka_unit_test(a_gauge_at_the_very_end_changes_nothing),
        cmocka_unit_test(several_calls_and_a_state_laid_aside_give_the_same_bits),
        cmocka_unit_test(inflows_that_cannot_be_are_refused_and_change_nothing),
        cmocka_unit_test(a_level_that_never_moves_is_a_held_one),
        cmocka_unit_test(a_tide_is_followed_and_volume_closes),
        cmocka_unit_test(a_level_far_below_leaves_the_critical_depth),
        cmocka_unit_test(levels_are_held_when_none_are_given_and_refused_when_absurd),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
