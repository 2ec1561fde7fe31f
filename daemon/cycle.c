/* SPDX-License-Identifier: MIT */
#include "daemon/cycle.h"

#include <string.h>

#include "daemon/cycle_steps.h"

enum fw_status cycle_run(struct cycle *cycle, const struct picture *before, const struct news *news,
                         int64_t now_utc_s, struct delta *delta_out, struct fw_error *error)
{
    struct delta delta = {.before = before, .news = news};
    memcpy(delta.settings_digest, cycle->settings->digest, sizeof delta.settings_digest);

    enum fw_status status = picture_copy(cycle->settings, before, &delta.next);
    if (status == FW_OK) {
        delta.next->as_of_utc_s = now_utc_s;
        status = cycle_collect(cycle, news, now_utc_s, &delta);
    }
    if (status == FW_OK)
        status = cycle_judge(cycle, now_utc_s, &delta);
    if (status == FW_OK)
        status = cycle_take_season(cycle, now_utc_s, error);
    if (status == FW_OK)
        status = cycle_route(cycle, now_utc_s, delta.next, error);
    if (status == FW_OK)
        delta.next->replaced_share = cycle->replaced_share;
    if (status == FW_OK)
        status = cycle_assess(cycle, now_utc_s, &delta);
    if (status == FW_OK)
        status = cycle_record(cycle, now_utc_s, &delta);
    if (status != FW_OK) {
        delta_clear(&delta);
        return status == FW_NO_MEMORY ? fw_error_set(error, status, "no memory for this forecast") : status;
    }
    *delta_out = delta;
    return FW_OK;
}
