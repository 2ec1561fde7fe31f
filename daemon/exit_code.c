/* SPDX-License-Identifier: MIT */
#include "daemon/exit_code.h"

#include <sysexits.h>

int exit_code_of(enum fw_status status)
{
    switch (status) {
    case FW_OK:
    case FW_NOTHING_NEW:
        return EX_OK;
    case FW_USAGE:
        return EX_USAGE;
    case FW_BAD_INPUT:
    case FW_OUT_OF_RANGE:
    case FW_FOREIGN:
        return EX_DATAERR;
    case FW_UNSTABLE:
        return EX_SOFTWARE;
    case FW_NO_MEMORY:
        return EX_OSERR;
    case FW_IO:
    case FW_DAMAGED:
        return EX_IOERR;
    case FW_LOCKED:
        return EX_TEMPFAIL;
    case FW_UNAVAILABLE:
        return EX_UNAVAILABLE;
    case FW_BAD_SETTINGS:
        return EX_CONFIG;
    }
    return EX_SOFTWARE;
}
