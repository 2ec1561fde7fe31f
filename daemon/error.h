/* SPDX-License-Identifier: MIT */
/* The text of a failure, composed where the facts are known, printed once at the top. */
#ifndef FOREWATER_DAEMON_ERROR_H
#define FOREWATER_DAEMON_ERROR_H

#include "engine/status.h"

struct fw_error {
    enum fw_status status;
    char text[1024];
};

/* Returns the status it was given, so that raising a fault is one line. `error` may be NULL. */
__attribute__((format(printf, 3, 4))) enum fw_status fw_error_set(struct fw_error *error, enum fw_status status,
                                                                  const char *format, ...);

/* Puts "where: " before the text that is there, as a fault travels up. Returns the status it was given. */
__attribute__((format(printf, 3, 4))) enum fw_status fw_error_prefix(struct fw_error *error, enum fw_status status,
                                                                     const char *format, ...);

#endif
