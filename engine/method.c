/* SPDX-License-Identifier: MIT */
#include "engine/method.h"

#include <math.h>

double method_storage_number(double length_m, double celerity_m_s, double diffusivity_m2_s, double rise_s)
{
    double spreading = diffusivity_m2_s / (celerity_m_s * celerity_m_s * rise_s);
    return spreading * sqrt(spreading) * length_m / (celerity_m_s * rise_s);
}

double method_storage_least_rise_s(double length_m, double celerity_m_s, double diffusivity_m2_s)
{
    return pow(method_storage_number(length_m, celerity_m_s, diffusivity_m2_s, 1.0) / METHOD_STORAGE_LIMIT, 0.4);
}
