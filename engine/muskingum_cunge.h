/* SPDX-License-Identifier: MIT */
/*
 * One reach routed by a nonlinear box scheme with matched diffusion: Muskingum-Cunge in storage form.
 * The owner of this room completes this header: property curve, tables, kernel.
 */
#ifndef FOREWATER_ENGINE_MUSKINGUM_CUNGE_H
#define FOREWATER_ENGINE_MUSKINGUM_CUNGE_H
#endif
