/* SPDX-License-Identifier: MIT */
#include "daemon/command/check_survey.h"

#include <math.h>
#include <stdio.h>

struct check_survey check_survey_of(const struct network_reach *reach)
{
    double top_m = section_survey_top_m(reach->section);
    if (!isfinite(top_m))
        return (struct check_survey){NAN, NAN};
    return (struct check_survey){top_m, section_normal_discharge_m3s(reach->section, reach->slope_m_per_m, top_m)};
}

void check_survey_print(const struct check_facts *facts)
{
    const struct network_river *river = &facts->settings->river;
    double highest_m3s = facts->flows_m3s[CHECK_FLOW_COUNT - 1];
    for (size_t reach = 0; reach < river->reach_count; reach++) {
        struct check_survey survey = check_survey_of(&river->reaches[reach]);
        if (survey.top_m3s < highest_m3s)
            printf(
                "** reach %s: its section is surveyed to %.2f m above the bed only, which %.1f m3/s fill; above that "
                "upright walls are assumed, and levels and times are a guess\n",
                river->reaches[reach].id, survey.top_m, survey.top_m3s);
    }
}
