/* SPDX-License-Identifier: MIT */
/*
 * One command hook: a child process that is given a message on stdin and says by its exit status whether it passed it
 * on.
 *
 * argv without a shell, the environment exactly as ordered, own process group, every signal at its default and none
 * blocked, no descriptor but 0, 1 and 2. stdin is a file of memory, so that a hook that never reads cannot hold us
 * up. What it writes goes to the journal, line by line, up to a limit; the rest is read and dropped, so that a chatty
 * hook cannot hang on us either. A hook that does not end gets TERM, later KILL, to its whole process group; what a
 * hook leaves running in its group ends with it.
 *
 * The process must not ignore SIGCHLD (its status would be lost); blocked or not makes no difference here: ends are
 * seen by pidfd.
 */
#ifndef FOREWATER_DAEMON_TELL_HOOK_H
#define FOREWATER_DAEMON_TELL_HOOK_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include <systemd/sd-event.h>

#include "daemon/error.h"
#include "daemon/facts.h"
#include "daemon/journal.h"

struct hook;

struct hook_limits {
    int64_t run_ms;     /* then TERM; machine time */
    int64_t grace_ms;   /* then KILL */
    size_t output_size; /* bytes of output that reach the journal */
};

struct hook_order {          /* copied where it is needed after hook_start */
    const char *name;        /* what the journal calls it */
    const char *const *argv; /* NULL-terminated; argv[0] is a path, never searched for */
    const char *const *environment;
    const char *input; /* bytes for stdin */
    size_t input_length;
};

struct hook_end {
    bool is_passed_on;         /* exit 0 */
    bool was_told_to_end;      /* hook_tell_to_end or hook_wait came before its end */
    char note[FACT_NOTE_SIZE]; /* "exit 1: connection refused" */
};

/* On the loop, once; the hook is gone when it returns. */
typedef void hook_ended(void *context, const struct hook_end *end);

struct hook_limits hook_limits_usual(void); /* 30 s, 5 s, 64 KiB */

/*
 * FW_UNAVAILABLE  the program is missing or may not be run, with its path
 * FW_IO           no process, descriptor or event source to be had
 * FW_NO_MEMORY
 * On failure nothing runs and ended is not called.
 */
FW_MUST_CHECK enum fw_status hook_start(sd_event *event, struct journal *journal, const struct hook_order *order,
                                        const struct hook_limits *limits, hook_ended *ended, void *context,
                                        struct hook **hook_out, struct fw_error *error);

/* TERM to its group now; KILL follows after the grace, on the loop. */
void hook_tell_to_end(struct hook *hook);

/* Waits outside the loop until machine time deadline_ms (clock_machine_ms), then KILL; reaps it and calls ended. */
void hook_wait(struct hook *hook, int64_t deadline_ms);

#endif
