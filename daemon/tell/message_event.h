/* SPDX-License-Identifier: MIT */
/*
 * A message as a hook gets it: one JSON object (RFC 8259) of schema "forewater.message.1". docs/messages.md tells
 * every member.
 */
#ifndef FOREWATER_DAEMON_TELL_MESSAGE_EVENT_H
#define FOREWATER_DAEMON_TELL_MESSAGE_EVENT_H

#include "daemon/buffer.h"
#include "daemon/facts.h"
#include "daemon/settings/settings.h"

#define MESSAGE_EVENT_SCHEMA "forewater.message.1"

const char *message_kind_name(enum message_kind kind); /* "decision", "notice" */

/*
 * message->tries counts this try already; now_utc_s says how late it is. FW_NO_MEMORY: nothing is left in *json_out.
 * The caller clears it.
 */
FW_MUST_CHECK enum fw_status message_event_write(const struct settings *settings, const struct message *message,
                                                 int64_t now_utc_s, struct text *json_out);

#endif
