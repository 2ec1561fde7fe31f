/* SPDX-License-Identifier: MIT */
/*
 * What the methods are called, and whether the storage form is fit for a reach and a flood.
 * Two numbers without units decide, taken at the flood's peak:
 *     eps = D / (c^2 T)   the time a wave needs to spread by itself, against its rise
 *     lam = L / (c T)     how long the reach is, against the rise
 * with the celerity c, the hydraulic diffusivity D, the reach length L and the rise time T = (Qpeak - Qbase) / max(dQ/dt). The
 * storage form's peak stays within 1 % of the full equations' while eps^1.5 lam < METHOD_STORAGE_LIMIT; beyond, it
 * comes out late and low.
 * The published applicability limits of simplified waves are of the same kind: Ponce, Li and Simons, Applicability of
 * kinematic and diffusion models (1978). The number is the project's own, found on random reaches.
 */
#ifndef FOREWATER_ENGINE_METHOD_H
#define FOREWATER_ENGINE_METHOD_H

#include <stdbool.h>

#include "engine/network.h"

#define METHOD_STORAGE_LIMIT 0.007

/* The words people write and read: "muskingum-cunge". */
const char *method_name(enum network_method method);
/* False, and nothing written, for any other word; "auto" is a choice, not a method. */
bool method_from_name(const char *name, enum network_method *method_out);

/* eps^1.5 lam. All arguments positive, SI. */
double method_storage_number(double length_m, double celerity_m_s, double diffusivity_m2_s, double rise_s);

/* The quickest rise for which the storage form is fit: where the number is the limit. */
double method_storage_least_rise_s(double length_m, double celerity_m_s, double diffusivity_m2_s);

#endif
