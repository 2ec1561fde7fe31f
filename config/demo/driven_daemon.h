/* SPDX-License-Identifier: MIT */
/*
 * The daemon as a child of the player, its world's clock in the player's hand.
 *
 * It runs in the player's working folder as `forewater run --config demo.json --drive drive.sock --world-start TIME`,
 * its output in daemon.log. It gets SIGTERM when the player dies.
 */
#ifndef FOREWATER_CONFIG_DEMO_DRIVEN_DAEMON_H
#define FOREWATER_CONFIG_DEMO_DRIVEN_DAEMON_H

#include <stdbool.h>
#include <stdint.h>
#include <sys/types.h>

#define DRIVEN_DAEMON_CONFIG "demo.json"
#define DRIVEN_DAEMON_LOG "daemon.log"

struct driven_daemon {
    const char *executable;
    pid_t process;   /* 0: none runs */
    int connection;  /* -1: none */
    int exit_status; /* as waitpid gave it, once it has ended */
};

/* Starts it and connects. false: said on stderr, with the last lines of its log. */
bool driven_daemon_start(struct driven_daemon *daemon, const char *executable, int64_t world_start_utc_s);

/*
 * World time becomes utc_s; waits until the daemon has nothing pending. The same time again just waits. false: the
 * daemon died, answered something else, or not within two minutes of machine time; said on stderr.
 */
bool driven_daemon_advance(struct driven_daemon *daemon, int64_t utc_s);

/*
 * Runs `forewater ARGUMENT...` to its end, its output on ours; NULL-terminated, at most 30. Its exit code, or -1:
 * said on stderr.
 */
int driven_daemon_command(const struct driven_daemon *daemon, char *const arguments[]);

/*
 * SIGTERM, waits up to ten seconds, then SIGKILL. true: it ended by itself with exit code 0. How long it took:
 * *took_ms_out.
 */
bool driven_daemon_end(struct driven_daemon *daemon, double *took_ms_out);

#endif
