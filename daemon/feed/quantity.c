/* SPDX-License-Identifier: MIT */
#include "daemon/feed/quantity.h"

#include <locale.h>
#include <math.h>
#include <stdlib.h>
#include <string.h>

static const char *skip_digits(const char *text)
{
    return text + strspn(text, "0123456789");
}

/* [+-] digits [. digits] [e [+-] digits], with a digit on at least one side of the point */
static bool is_plain_number(const char *text)
{
    text += *text == '+' || *text == '-';
    const char *fraction = skip_digits(text);
    bool has_digit = fraction > text;
    const char *end = fraction;
    if (*fraction == '.') {
        end = skip_digits(fraction + 1);
        has_digit |= end > fraction + 1;
    }
    if (has_digit && (*end == 'e' || *end == 'E')) {
        const char *exponent = end + 1;
        exponent += *exponent == '+' || *exponent == '-';
        end = skip_digits(exponent);
        has_digit = end > exponent;
    }
    return has_digit && *end == '\0';
}

bool quantity_read_number(const char *text, double *value_out)
{
    if (!is_plain_number(text))
        return false;
    locale_t plain = newlocale(LC_ALL_MASK, "C", (locale_t)0); /* a static object in the C library: costs nothing */
    if (plain == (locale_t)0)
        return false;
    double value = strtod_l(text, NULL, plain);
    freelocale(plain);
    if (!isfinite(value))
        return false;
    *value_out = value;
    return true;
}

enum fw_status quantity_to_si(double value, const char *unit, enum settings_measure measures, double *value_si_out)
{
    static const struct {
        const char *name;
        enum settings_measure measures;
        double times, by; /* a division by 100 is exact to the last bit where a product with 0.01 is not */
    } units[] = {{"m", SETTINGS_STAGE, 1.0, 1.0},        {"cm", SETTINGS_STAGE, 1.0, 100.0},
                 {"mm", SETTINGS_STAGE, 1.0, 1000.0},    {"ft", SETTINGS_STAGE, 0.3048, 1.0},
                 {"m3/s", SETTINGS_DISCHARGE, 1.0, 1.0}, {"l/s", SETTINGS_DISCHARGE, 1.0, 1000.0}};
    for (size_t i = 0; i < sizeof units / sizeof units[0]; i++) {
        if (units[i].measures == measures && strcmp(units[i].name, unit) == 0) {
            *value_si_out = value * units[i].times / units[i].by;
            return FW_OK;
        }
    }
    return FW_BAD_INPUT;
}

const char *quantity_default_unit(enum settings_measure measures)
{
    return measures == SETTINGS_STAGE ? "m" : "m3/s";
}

const char *quantity_known_units(enum settings_measure measures)
{
    return measures == SETTINGS_STAGE ? "m, cm, mm or ft" : "m3/s or l/s";
}
