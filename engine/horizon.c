/* SPDX-License-Identifier: MIT */
#include "engine/horizon.h"

#include <math.h>

double horizon_measured_until_s(size_t count, size_t stride, const double low_stage_m[], const double high_stage_m[],
                                double step_s, double tolerance_m)
{
    double before_m = 0.0;
    for (size_t step = 0; step < count; step++) {
        double apart_m = high_stage_m[step * stride] - low_stage_m[step * stride];
        if (fabs(apart_m) <= tolerance_m) {
            before_m = apart_m;
            continue;
        }
        if (step == 0)
            return 0.0;
        double from_s = (double)(step - 1) * step_s;
        if (!isfinite(apart_m))
            return from_s;
        double limit_m = copysign(tolerance_m, apart_m);
        return from_s + step_s * ((limit_m - before_m) / (apart_m - before_m));
    }
    return count == 0 ? 0.0 : HUGE_VAL;
}

double horizon_not_felt_before_s(double length_m, size_t flow_count, const struct network_reach_flow flows[])
{
    double fastest_m_s = 0.0;
    for (size_t i = 0; i < flow_count; i++) {
        if (!(flows[i].velocity_m_s > 0.0) || !(flows[i].top_width_m > 0.0))
            return 0.0;
        double area_m2 = flows[i].discharge_m3s / flows[i].velocity_m_s;
        fastest_m_s =
            fmax(fastest_m_s, flows[i].velocity_m_s + sqrt(SECTION_GRAVITY_M_S2 * area_m2 / flows[i].top_width_m));
    }
    return fastest_m_s > 0.0 ? length_m / fastest_m_s : 0.0;
}
