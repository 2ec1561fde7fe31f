/* SPDX-License-Identifier: MIT */
#include "daemon/command/command.h"

#include <stdio.h>

#include "daemon/command/options.h"
#include "daemon/loop.h"

enum fw_status command_run(int argument_count, char *arguments[], struct fw_error *error)
{
    struct option_values config = {0}, once = {0}, store = {0}, drive = {0}, world_start = {0};
    const struct option_spec options[] = {
        {"config", "FILE", "the configuration (default " COMMAND_DEFAULT_CONFIG ")", &config},
        {"once", NULL, "one cycle, then end when every message is away", &once},
        {"store", "FILE", "where the last good settings are, should the configuration be unreadable", &store},
        {"drive", "SOCKET", "let a driver on this Unix socket set world time (demo, tests)", &drive},
        {"world-start", "TIME", "where driven world time starts, RFC 3339", &world_start},
        {NULL, NULL, NULL, NULL}};
    const struct command_line line = {"run", "",
                                      "Watches the gauges and says by when someone must act. In the foreground; "
                                      "SIGHUP takes a changed configuration, SIGTERM ends it.",
                                      options};
    int rest = 0;
    enum fw_status status = options_read(&line, argument_count, arguments, &rest, error);
    if (status == FW_OK && rest < argument_count)
        status = fw_error_set(error, FW_USAGE, "run: '%s' is not expected here", arguments[rest]);
    if (status != FW_OK)
        return status;
    struct clock clock = clock_real();
    if (drive.count > 0) {
        int64_t start_utc_s = 0;
        status = when_parse(option_text(&world_start, ""), NULL, &start_utc_s, error);
        if (status != FW_OK)
            return fw_error_prefix(error, FW_USAGE, "--drive needs --world-start");
        clock = clock_driven(start_utc_s);
    }
    struct settings *settings = NULL;
    struct station station = {.next_look_ms = -1};
    status = command_read_settings_in_force(option_text(&config, COMMAND_DEFAULT_CONFIG), option_text(&store, NULL),
                                            &settings, error);
    if (status != FW_OK)
        return status == FW_UNAVAILABLE ? FW_BAD_SETTINGS : status; /* missing or wrong: there is nothing to run on */
    status = station_open(&station, settings, clock, error);
    if (status == FW_OK)
        status = loop_run(
            &station, &(struct loop_options){.is_once = once.count > 0, .drive_socket = option_text(&drive, NULL)},
            error);
    station_close(&station);
    return status;
}
