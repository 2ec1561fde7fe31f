/* SPDX-License-Identifier: MIT */
/*
 * A state is the groups' blocks as they lie in memory, then where the ring of gauge flows stands, then the counters.
 * Whole numbers are exact in a double up to 2^53.
 */
#include <string.h>

#include "engine/network_internal.h"

enum { OWN_NUMBERS = 3, NUMBERS_OF_A_TREE = 5 };

static size_t block_count(const struct network *network)
{
    return network->group_count * network->layout.count;
}

size_t network_state_count(const struct network *network)
{
    return block_count(network) + OWN_NUMBERS + NUMBERS_OF_A_TREE * network->tree_count;
}

void network_state_save(const struct network *network, double to[])
{
    memcpy(to, network->blocks, block_count(network) * sizeof *to);
    double *number = to + block_count(network);
    *number++ = (double)network->ring_at;
    *number++ = (double)network->steps_above_tables;
    *number++ = (double)network->steps_below_zero;
    for (size_t i = 0; i < network->tree_count; i++) {
        const struct dynamic_counts *counts = &network->trees[i].counts;
        *number++ = (double)counts->steps;
        *number++ = (double)counts->iterations;
        *number++ = (double)counts->halved;
        *number++ = (double)counts->without_inertia;
        *number++ = (double)counts->replaced;
    }
}

void network_state_restore(struct network *network, const double from[])
{
    memcpy(network->blocks, from, block_count(network) * sizeof *from);
    const double *number = from + block_count(network);
    network->ring_at = (size_t)*number++;
    network->steps_above_tables = (size_t)*number++;
    network->steps_below_zero = (size_t)*number++;
    for (size_t i = 0; i < network->tree_count; i++) {
        struct dynamic_counts *counts = &network->trees[i].counts;
        counts->steps = (size_t)*number++;
        counts->iterations = (size_t)*number++;
        counts->halved = (size_t)*number++;
        counts->without_inertia = (size_t)*number++;
        counts->replaced = (size_t)*number++;
    }
}
