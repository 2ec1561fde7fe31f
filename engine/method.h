/* SPDX-License-Identifier: MIT */
/*
 * Which method a reach is computed with: what the methods are called, and which is fit for a reach and a flood.
 * Two numbers without units decide, taken over the flows from the flood's base to its peak:
 *     eps = D / (c^2 T)   the time a wave needs to spread by itself, against its rise
 *     lam = L / (c T)     how long the reach is, against the rise
 * with the celerity c, the hydraulic diffusivity D, the reach length L and the rise time T = (Qpeak - Qbase) / max(dQ/dt). The
 * storage form's peak stays within 1 % of the full equations' while the mean of eps^1.5 lam < METHOD_STORAGE_LIMIT; beyond, it
 * comes out late and low. The number is the project's own, found on random reaches. As errors add up on the way, L is the
 * length of the whole path through the reach: a river cut into many reaches is computed as the uncut one.
 * On a rise water stands below the normal stage of its flow (Jones 1916): the storage form's levels, which are normal stages,
 * are reached D/c^2 early. Where that is more than a minute and a hundredth of the travel time the full equations are chosen.
 * The published applicability limits of simplified waves are of the same kind and are given beside it: Ponce, Li and
 * Simons, Applicability of kinematic and diffusion models (1978).
 */
#ifndef FOREWATER_ENGINE_METHOD_H
#define FOREWATER_ENGINE_METHOD_H

#include <stdbool.h>

#include "engine/flow_curve.h"
#include "engine/network.h"

#define METHOD_STORAGE_LIMIT 0.007
#define METHOD_EARLY_LEAST_S 60.0   /* by so much a level may be early, or */
#define METHOD_EARLY_SHARE 0.01     /* by so much of the travel time, if that is more */
#define METHOD_KINEMATIC_LIMIT 85.0 /* rise S0 u / h: from here on a kinematic wave is within 5 % */
#define METHOD_DIFFUSION_LIMIT 15.0 /* rise S0 sqrt(g / h): from here on a diffusion wave is */
#define METHOD_RAISE_LIMIT 0.10     /* of normal depth: a level raised by more from below is backwater */
#define METHOD_FROUDE_LIMIT 1.15    /* at the peak: faster flow has not been tried by the full equations */
enum { METHOD_MOST_FULL_CELLS = 400 };

/* The words people write and read: "muskingum-cunge"; "auto" for NETWORK_AUTO. */
const char *method_name(enum network_method method);
/* False, and nothing written, for any other word. */
bool method_from_name(const char *name, enum network_method *method_out);

struct method_flood { /* the severest flood that the choice must be right for */
    double base_m3s, peak_m3s;
    double rise_s; /* (peak - base) / steepest rise; INFINITY: the flow is steady; 0: no flood is known */
};

struct method_reach {
    const struct flow_curve *curve;
    double length_m, slope_m_per_m;
    double path_length_m; /* of the longest way through it from a head to the outlet; length_m if it is less */
    bool is_level_held;   /* at its foot: an outlet's level */
    bool has_structure;   /* at its foot, or a drop of the bed */
    bool has_control;     /* what raises the level at its foot is computed by the full equations */
    double raise_share;   /* of the depth at its foot above normal, by normal depth, at the flow where it is most */
};

enum method_reason {
    METHOD_STATED,       /* not chosen: the configuration names it */
    METHOD_NO_FLOOD,     /* storage form, as no flood is known to choose by */
    METHOD_WITHIN_LIMIT, /* storage form */
    METHOD_BEYOND_LIMIT, /* full equations: the storage form's peak would come late and low */
    METHOD_EARLY_LEVELS, /* full equations: the storage form's levels would come early */
    METHOD_HELD_LEVEL,   /* full equations: a level is held at the foot */
    METHOD_STRUCTURE,    /* full equations: a structure or a drop stands at the foot */
    METHOD_BACKWATER,    /* full equations: a control below raises the level */
    METHOD_TOO_STEEP,    /* full equations wanted; their cells would be too many: storage form */
    METHOD_TOO_FAST,     /* full equations wanted; too near critical flow: storage form */
    METHOD_REASON_COUNT
};

struct method_choice {
    enum network_method method;
    enum method_reason reason;
    enum network_method advised; /* by the rule; another than method only where that is stated */
    struct method_flood flood;   /* at this reach */
    /* all NAN where no flood is known */
    double storage_number; /* eps^1.5 lam, mean over the flood's flows, against METHOD_STORAGE_LIMIT */
    double worst_number;   /* the worst of its range */
    double spread_number;  /* eps there */
    double length_number;  /* lam there, of the path */
    double at_discharge_m3s;
    double early_s;       /* D/c^2, where it is most against what is allowed: normal stages come so much early */
    double early_number;  /* against 1 */
    double path_length_m; /* as given, or the reach's */
    /* at the peak */
    double froude;
    double diffusion_length_m; /* D/c; cells of the full equations are at most twice as long */
    double kinematic_number;   /* rise S0 u / h */
    double diffusion_number;   /* rise S0 sqrt(g / h) */
    double raise_share;        /* as given */
};

void method_choose(const struct method_reach *reach, const struct method_flood *flood,
                   struct method_choice *choice_out);

/* "the wave spreads too much for the storage form": one line, no closing stop. */
const char *method_reason_text(enum method_reason reason);

/* eps^1.5 lam. All arguments positive, SI. */
double method_storage_number(double length_m, double celerity_m_s, double diffusivity_m2_s, double rise_s);

/* The quickest rise for which the storage form is fit: where the number is the limit. */
double method_storage_least_rise_s(double length_m, double celerity_m_s, double diffusivity_m2_s);

/*
 * The published numbers, with the time of rise; in terms of the wave's period, twice the rise, their limits are twice as
 * high (171 and 30). Source: Ponce, Li and Simons (1978).
 */
double method_kinematic_number(double rise_s, double slope_m_per_m, double velocity_m_s, double depth_m);
double method_diffusion_number(double rise_s, double slope_m_per_m, double depth_m);

/*
 * The flood in a series of at least one flow: from its lowest flow before the peak, with its steepest rise from one to the
 * next. Times rise.
 */
struct method_flood method_flood_of(size_t count, const double time_s[], const double discharge_m3s[]);

/*
 * The longest time step of which data_interval_s is a multiple and which is neither above a minute nor a fortieth of the
 * flood's rise, but at least 1 s: in whole seconds, unless that would halve it. No flood known: as for a slow one.
 */
double method_time_step_s(const struct method_flood *flood, double data_interval_s);

/*
 * Depth at the head of a reach of steady flow whose depth at the foot is foot_depth_m; the normal depth where that is not
 * raised, or no longer felt. Direct step method, Chow (1959), section 10-3.
 */
double method_backwater_depth_m(const struct section *section, double slope_m_per_m, double length_m,
                                double discharge_m3s, double normal_depth_m, double foot_depth_m);

#endif
