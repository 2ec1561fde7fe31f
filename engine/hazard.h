/* SPDX-License-Identifier: MIT */
/*
 * Water on a deck: how deep, how fast, and which published limits that passes.
 *
 * Estimates that err towards the greater: a deck is crossed where it is worst.
 *
 * A deck that is part of the section. Depth is the level over the deck. The speed is the greater of two: the mean speed
 * of the panel that the deck lies in (a thin sheet beside a deep channel is dragged along by it), and that of a sheet as
 * deep as the water over the deck, at the friction slope of the whole section and the deck's own roughness,
 *     v = (Q / K) d^(2/3) / n,      Q / K = sqrt(Sf), the square root of S0 in uniform flow.
 *
 * A weir over a road. With the head H over the crown the flow per metre of road is q = Cd H^(3/2) (FHWA HDS-5, equation
 * 8), less where the water below stands over the crown (Villemonte's rule, as in engine/stage_structure). The depth on the
 * crown lies between the critical depth 2/3 H, or the water below where that is higher, and H: the deepest is H, the
 * fastest q over the shallowest, and depth times speed is q wherever on the crown one stands.
 *
 * The limits are inclusive: one is passed by the first value above it.
 */
#ifndef FOREWATER_ENGINE_HAZARD_H
#define FOREWATER_ENGINE_HAZARD_H

#include "engine/section.h"

#define HAZARD_ANY_PANEL ((size_t)-1)
#define HAZARD_NOTHING_BELOW (-1.0 / 0.0)

enum hazard_deck_kind { HAZARD_DECK_IN_SECTION, HAZARD_DECK_IS_WEIR };

struct hazard_deck {
    enum hazard_deck_kind kind;
    double level_m; /* above the section's invert */
    /* in a section */
    const struct section *section;
    size_t panel;       /* as section_panel_at counts; HAZARD_ANY_PANEL: the fastest */
    double roughness_n; /* of the deck */
    /* a weir */
    double weir_coefficient; /* Cd in m^(1/2)/s: HDS-5 has 1.38 to 1.71 */
};

struct hazard_water { /* all 0 on a dry deck */
    double depth_m;
    double speed_m_s;
    double
        product_m2_s; /* depth times speed; of a weir not the product of the other two, which are at different places */
};

/*
 * The water on a deck.
 *   stage_m        level above the invert, upstream of a weir
 *   discharge_m3s  of the whole river there; its sign does not matter. A weir needs none
 *   below_m        level below a weir, above the same invert; HAZARD_NOTHING_BELOW where it is not known: too fast
 *                  rather than too slow. Nothing to a section
 */
struct hazard_water hazard_water_on_deck(const struct hazard_deck *deck, double stage_m, double discharge_m3s,
                                         double below_m);

/*
 * Whom the published limits are for, from the tightest product up. The two cars are "draft interim criteria" for vehicles
 * that stand, of which their source says that they are no depths to drive in: say so wherever they are shown.
 */
enum hazard_whom {
    HAZARD_SMALL_CAR,   /* Shand, Cox, Blacka, Smith (2011), ARR Revision Project 10, P10/S2/020, table 3 */
    HAZARD_LARGE_CAR,   /* the same */
    HAZARD_ANY_VEHICLE, /* and children and the elderly: AIDR Guideline 7-3 (2017), after Smith et al. WRL TR2014/07 */
    HAZARD_ANY_PERSON,  /* and any vehicle: the same */
    HAZARD_WHOM_COUNT
};

struct hazard_limit { /* all three hold together */
    double depth_m;
    double speed_m_s;
    double product_m2_s;
    bool is_draft; /* and for a vehicle that stands */
};

const struct hazard_limit *hazard_limit_for(enum hazard_whom whom);

/*
 * The greatest of depth, speed and product, each as a share of its limit: the limit is passed above 1. 0 on a dry
 * deck.
 */
double hazard_share_of_limit(const struct hazard_limit *limit, const struct hazard_water *water);

enum hazard_measure { HAZARD_NONE, HAZARD_PRODUCT, HAZARD_DEPTH, HAZARD_SPEED };

/* By which the limit is passed; of several the first in that order. */
enum hazard_measure hazard_measure_passed(const struct hazard_limit *limit, const struct hazard_water *water);

#endif
