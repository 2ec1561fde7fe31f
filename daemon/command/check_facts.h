/* SPDX-License-Identifier: MIT */
/* What a configuration means in minutes, as numbers: `check` prints them as text or as JSON. */
#ifndef FOREWATER_DAEMON_COMMAND_CHECK_FACTS_H
#define FOREWATER_DAEMON_COMMAND_CHECK_FACTS_H

#include "daemon/settings/settings.h"

enum { CHECK_FLOW_COUNT = 6 };

struct check_facts {
    const struct settings *settings;
    struct network *network;            /* one member, the roughness as given */
    double flows_m3s[CHECK_FLOW_COUNT]; /* from low to twice the peak of the gauges' floods together */
    double slowest_roughness, fastest_roughness;
};

struct check_flow {
    struct network_reach_flow as_given;
    struct network_reach_flow smoother, rougher; /* roughness -20 %, +20 % */
};

struct check_reach {
    const struct network_reach *reach;
    struct method_choice choice;
    struct network_reach_steps steps;
    size_t
        flow_count; /* from low to twice the peak of the reach's flood, and bank full among them where it is known */
    struct check_flow flows[CHECK_FLOW_COUNT + 1];
    double bank_full_m3s; /* NAN: not known */
    double peak_m3s;      /* the flow whose rise the next lines speak of */
    double least_rise_s;  /* quicker floods than this are not for this method (engine/method.h); NAN: no such limit */
    double diffusion_length_m; /* D/c at the peak */
};

/* What a gauge upstream is worth for a point. */
struct check_lead {
    double lag_s;                         /* reading interval + delivery */
    double closing_m3s, closing_travel_s; /* the flow of the closing mark, and its wave */
    double fastest_m3s, fastest_travel_s; /* the fastest wave over the smoothest bed */
    double not_felt_before_s;             /* engine/horizon.h, over the table's range and the smoothest bed */
    double slow_rise_s, fastest_rise_s;   /* lead on measured water: travel less lag */
};

/* FW_BAD_INPUT: the engine refuses the river. The caller clears; the settings must outlive it. */
FW_MUST_CHECK enum fw_status check_facts_open(struct check_facts *facts, const struct settings *settings,
                                              struct fw_error *error);
void check_facts_clear(struct check_facts *facts);

FW_MUST_CHECK enum fw_status check_facts_reach(const struct check_facts *facts, size_t reach,
                                               struct check_reach *reach_out, struct fw_error *error);
void check_facts_lead(const struct check_facts *facts, size_t gauge, size_t point, struct check_lead *lead_out);

#endif
