/* SPDX-License-Identifier: MIT */
/*
 * Is a river whole? Every fault is named with the reach or point it is in, before anything is computed.
 */
#ifndef FOREWATER_ENGINE_RIVER_H
#define FOREWATER_ENGINE_RIVER_H

#include "engine/network.h"

/* Numbers, indices, shapes. FW_BAD_INPUT: *fault_out says the first. */
FW_MUST_CHECK enum fw_status river_check_values(const struct network_river *river,
                                                const struct network_options *options,
                                                struct network_fault *fault_out);

/*
 * The tree itself: every head fed, no loop, no fork, nothing apart but gauges. The values must have been
 * checked.
 *
 *   order_out  reach_count; indices such that every reach comes after all that flow into it
 *   waiting    node_count, scratch
 * FW_BAD_INPUT: *fault_out says the first.
 */
FW_MUST_CHECK enum fw_status river_order(const struct network_river *river, size_t order_out[], size_t waiting[],
                                         struct network_fault *fault_out);

#endif
