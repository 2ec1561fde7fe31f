/* SPDX-License-Identifier: MIT */
#include "daemon/command/command.h"

#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "daemon/command/options.h"
#include "daemon/loop.h"

/* Where the last good settings are when the file itself cannot say: the store in the state directory systemd gives. */
static const char *fallback_store(const struct option_values *given, char path[4096])
{
    const char *stated = option_text(given, NULL);
    const char *state_directory = getenv("STATE_DIRECTORY");
    if (stated != NULL)
        return stated;
    if (state_directory == NULL)
        return NULL;
    snprintf(path, 4096, "%s/history.db", state_directory);
    return path;
}

/* A bad file at boot: the last settings that worked, from the store, loudly. */
static enum fw_status read_last_good(const char *file, const char *store_file, struct settings **settings_out,
                                     struct fw_error *error)
{
    struct store *store = NULL;
    struct text text = {0};
    struct settings_faults faults = {0};
    enum fw_status status = store_open(store_file, STORE_READ, &store, error);
    if (status == FW_OK)
        status = store_last_settings(store, &text, error);
    if (status == FW_OK)
        status =
            settings_read_text(file, text_string(&text), text.length, SETTINGS_FOR_RUN, settings_out, &faults, error);
    settings_faults_clear(&faults);
    text_clear(&text);
    store_close(store);
    return status;
}

static enum fw_status read_settings(const char *file, const char *store_file, struct settings **settings_out,
                                    struct fw_error *error)
{
    enum fw_status status = command_read_settings(file, SETTINGS_FOR_RUN, settings_out, error);
    if (status == FW_UNAVAILABLE)
        status = FW_BAD_SETTINGS; /* missing or wrong: either way there is nothing to run on */
    if (status == FW_OK || store_file == NULL)
        return status;
    struct fw_error second = {.status = FW_OK};
    if (read_last_good(file, store_file, settings_out, &second) != FW_OK)
        return status;
    fprintf(stderr,
            "forewater: THE CONFIGURATION %s CANNOT BE USED: %s. Running on the last good settings %.8s, kept in %s. "
            "Mend the file and send SIGHUP.\n",
            file, error->text, (*settings_out)->digest, store_file);
    return FW_OK;
}

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
    char path[4096];
    struct settings *settings = NULL;
    struct station station = {.next_look_ms = -1};
    status =
        read_settings(option_text(&config, COMMAND_DEFAULT_CONFIG), fallback_store(&store, path), &settings, error);
    if (status != FW_OK)
        return status;
    status = station_open(&station, settings, clock, error);
    if (status == FW_OK)
        status = loop_run(
            &station, &(struct loop_options){.is_once = once.count > 0, .drive_socket = option_text(&drive, NULL)},
            error);
    station_close(&station);
    return status;
}
