/* SPDX-License-Identifier: MIT */
#include "daemon/error.h"

#include <stdarg.h>
#include <stdio.h>
#include <string.h>

enum fw_status fw_error_set(struct fw_error *error, enum fw_status status, const char *format, ...)
{
    if (error != NULL) {
        va_list arguments;
        va_start(arguments, format);
        vsnprintf(error->text, sizeof error->text, format, arguments);
        va_end(arguments);
        error->status = status;
    }
    return status;
}

enum fw_status fw_error_prefix(struct fw_error *error, enum fw_status status, const char *format, ...)
{
    if (error != NULL) {
        char before[sizeof error->text];
        char whole[2 * sizeof error->text + 2];
        va_list arguments;
        va_start(arguments, format);
        vsnprintf(before, sizeof before, format, arguments);
        va_end(arguments);
        snprintf(whole, sizeof whole, "%s: %s", before, error->text);
        memcpy(error->text, whole, sizeof error->text - 1);
        error->text[sizeof error->text - 1] = '\0';
        error->status = status;
    }
    return status;
}
