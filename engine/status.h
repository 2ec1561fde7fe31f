/* SPDX-License-Identifier: MIT */
/*
 * What a function that can fail returns. Results leave through `_out` arguments, written only on FW_OK.
 */
#ifndef FOREWATER_ENGINE_STATUS_H
#define FOREWATER_ENGINE_STATUS_H

#define FW_MUST_CHECK __attribute__((warn_unused_result))

enum fw_status {
    FW_OK = 0,
    FW_NOTHING_NEW,  /* not an error: there was nothing to take */
    FW_BAD_INPUT,    /* a value, file, reply or argument is not what it must be */
    FW_OUT_OF_RANGE, /* beyond what a table or a shape covers */
    FW_UNSTABLE,     /* a step outside the limits of a scheme */
    FW_NO_MEMORY,
    FW_IO,          /* the operating system said no */
    FW_LOCKED,      /* another instance holds it */
    FW_DAMAGED,     /* the store is not whole */
    FW_FOREIGN,     /* the store is of another program, or newer than this one */
    FW_UNAVAILABLE, /* not there now: no daemon, no network, no such file */
    FW_USAGE,       /* a command line that cannot be read */
    FW_BAD_SETTINGS /* the configuration has faults, each told apart */
};

#endif
