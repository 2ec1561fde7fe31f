/* SPDX-License-Identifier: MIT */
/* How far a reach's section is surveyed, against the flows that `check` looks at. */
#ifndef FOREWATER_DAEMON_COMMAND_CHECK_SURVEY_H
#define FOREWATER_DAEMON_COMMAND_CHECK_SURVEY_H

#include "daemon/command/check_facts.h"

struct check_survey {
    double top_m;   /* depth at the lower end of the survey; NAN: the shape has no upper end */
    double top_m3s; /* what flows at that depth */
};

struct check_survey check_survey_of(const struct network_reach *reach);

/* One line for every reach whose survey ends below the highest flow looked at; none: nothing. */
void check_survey_print(const struct check_facts *facts);

#endif
