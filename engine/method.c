/* SPDX-License-Identifier: MIT */
#include "engine/method.h"

#include <math.h>
#include <stddef.h>
#include <string.h>

static const char *const names[] = {[NETWORK_MUSKINGUM_CUNGE] = "muskingum-cunge",
                                    [NETWORK_KINEMATIC] = "kinematic",
                                    [NETWORK_KINEMATIC_LINEAR] = "kinematic-linear",
                                    [NETWORK_DYNAMIC] = "dynamic",
                                    [NETWORK_DIFFUSIVE] = "diffusive"};
enum { NAME_COUNT = sizeof names / sizeof *names };

const char *method_name(enum network_method method)
{
    return (size_t)method < NAME_COUNT ? names[method] : "?";
}

bool method_from_name(const char *name, enum network_method *method_out)
{
    for (size_t method = 0; method < NAME_COUNT; method++)
        if (strcmp(name, names[method]) == 0) {
            *method_out = (enum network_method)method;
            return true;
        }
    return false;
}

double method_storage_number(double length_m, double celerity_m_s, double diffusivity_m2_s, double rise_s)
{
    double spreading = diffusivity_m2_s / (celerity_m_s * celerity_m_s * rise_s);
    return spreading * sqrt(spreading) * length_m / (celerity_m_s * rise_s);
}

double method_storage_least_rise_s(double length_m, double celerity_m_s, double diffusivity_m2_s)
{
    return pow(method_storage_number(length_m, celerity_m_s, diffusivity_m2_s, 1.0) / METHOD_STORAGE_LIMIT, 0.4);
}
