/* SPDX-License-Identifier: MIT */
/*
 * Turns a station: signals, folder watches, child processes, transfers, the watchdog, and - in a driven world - the driver's socket.
 *
 * A driver connects to the socket and writes lines:
 *     advance 2031-02-14T20:45:00Z    sets world time (never back); answered "at 2031-02-14T20:45:00Z" once nothing is pending
 *     quit                            ends the daemon
 * A line that cannot be read is answered "error: ..." and changes nothing.
 */
#ifndef FOREWATER_DAEMON_LOOP_H
#define FOREWATER_DAEMON_LOOP_H

#include "daemon/station.h"

struct loop_options {
    bool is_once;             /* one cycle, then end when nothing is pending */
    const char *drive_socket; /* NULL: the world's own time */
};

FW_MUST_CHECK enum fw_status loop_run(struct station *station, const struct loop_options *options,
                                      struct fw_error *error);

#endif
