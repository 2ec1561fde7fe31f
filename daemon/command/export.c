/* SPDX-License-Identifier: MIT */
/* The readings of the store as CSV: now, or as they were known at a moment. Reads the store without writing to it. */
#include "daemon/command/command.h"

#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "daemon/command/known_at.h"
#include "daemon/command/options.h"
#include "daemon/store/store.h"

struct export_options {
    struct option_values config, store, gauges, from, to, known_at, revisions;
};

/* The fewest digits that read back as the same number. */
static void print_number(double value)
{
    char text[40];
    for (int digits = 15; digits <= 17; digits++) {
        snprintf(text, sizeof text, "%.*g", digits, value);
        if (strtod(text, NULL) == value)
            break;
    }
    fputs(text, stdout);
}

/* As RFC 4180 wants it. */
static void print_text(const char *text)
{
    if (text == NULL)
        return;
    if (strpbrk(text, ",\"\r\n") == NULL) {
        fputs(text, stdout);
        return;
    }
    putchar('"');
    for (; *text != '\0'; text++) {
        if (*text == '"')
            putchar('"');
        putchar(*text);
    }
    putchar('"');
}

static enum fw_status print_reading(void *context, const struct stored_reading *reading, struct fw_error *error)
{
    char observed[WHEN_TEXT_SIZE], received[WHEN_TEXT_SIZE];
    (void)context;
    print_text(reading->gauge);
    printf(",%s,", when_rfc3339_utc(reading->observed_utc_s, observed));
    print_number(reading->value);
    putchar(',');
    print_text(reading->unit);
    putchar(',');
    print_text(reading->source);
    printf(",%s,", when_rfc3339_utc(reading->received_utc_s, received));
    print_text(reading->by);
    if (reading->is_judged)
        printf(",%d,%s,%lld\n", reading->flag, reading->use, (long long)reading->reasons);
    else
        printf(",,,\n");
    return ferror(stdout) ? fw_error_set(error, FW_IO, "the output could not be written") : FW_OK;
}

static enum fw_status read_bound(const char *name, const struct option_values *given, const struct when_zone *zone,
                                 int64_t *utc_s, struct fw_error *error)
{
    struct fw_error reason;
    const char *text = option_text(given, NULL);
    if (text == NULL || when_parse(text, zone, utc_s, &reason) == FW_OK)
        return FW_OK;
    return fw_error_set(error, FW_USAGE, "--%s: %s", name, reason.text);
}

static enum fw_status export_from(const struct export_options *given, const char *file, const struct when_zone *zone,
                                  struct fw_error *error)
{
    struct store *store = NULL;
    struct store_reading_query query = {
        .from_utc_s = INT64_MIN, .to_utc_s = INT64_MAX, .every_revision = given->revisions.count > 0};
    enum fw_status status = read_bound("from", &given->from, zone, &query.from_utc_s, error);
    if (status == FW_OK)
        status = read_bound("to", &given->to, zone, &query.to_utc_s, error);
    if (status == FW_OK)
        status = store_open(file, STORE_READ, &store, error);
    if (status == FW_OK)
        status = known_at_read(&given->known_at, zone, store, &query.known_at_entry, error);
    if (status == FW_OK) {
        printf("gauge,observed,value,unit,source,received,by,flag,use,reasons\n");
        for (size_t index = 0; status == FW_OK && index < given->gauges.count; index++) {
            query.gauge = given->gauges.values[index];
            status = store_each_reading(store, &query, print_reading, NULL, error);
        }
        if (given->gauges.count == 0)
            status = store_each_reading(store, &query, print_reading, NULL, error);
    }
    if (status == FW_OK && (fflush(stdout) != 0 || ferror(stdout)))
        status = fw_error_set(error, FW_IO, "the output could not be written");
    store_close(store);
    return status;
}

static enum fw_status check_gauges(const struct settings *settings, const struct option_values *gauges,
                                   struct fw_error *error)
{
    for (size_t index = 0; index < gauges->count; index++)
        if (settings_gauge_index(settings, gauges->values[index]) == SETTINGS_NONE)
            return fw_error_set(error, FW_USAGE, "--gauge: '%s' is not a gauge of %s", gauges->values[index],
                                settings->file);
    return FW_OK;
}

enum fw_status command_export(int argument_count, char *arguments[], struct fw_error *error)
{
    struct export_options given = {0};
    const struct option_spec options[] = {
        {"config", "FILE", "the configuration (default " COMMAND_DEFAULT_CONFIG ")", &given.config},
        {"store", "FILE",
         "read this store instead, without a configuration; times without an offset are refused then", &given.store},
        {"gauge", "ID", "only this gauge; may be given again", &given.gauges},
        {"from", "TIME", "observed at or after", &given.from},
        {"to", "TIME", "observed before", &given.to},
        {"known-at", KNOWN_AT_ARGUMENT, "as it was known at a moment, or at an entry of the record", &given.known_at},
        {"revisions", NULL, "every value a source ever gave, not only the one that counts", &given.revisions},
        {NULL, NULL, NULL, NULL}};
    const struct command_line line = {"export", "",
                                      "Writes the readings as CSV: what each source said, when it was received, and "
                                      "what it was judged to be worth.",
                                      options};
    struct settings *settings = NULL;
    int rest = 0;
    enum fw_status status = options_read(&line, argument_count, arguments, &rest, error);
    if (status == FW_OK && rest < argument_count)
        status = fw_error_set(error, FW_USAGE, "export: '%s' is not expected here", arguments[rest]);
    if (status == FW_OK && given.store.count > 0 && given.config.count > 0)
        status = fw_error_set(error, FW_USAGE, "export: --config or --store, not both");
    if (status != FW_OK)
        return status;
    if (given.store.count > 0)
        return export_from(&given, option_text(&given.store, ""), NULL, error);
    status =
        command_read_settings_in_force(option_text(&given.config, COMMAND_DEFAULT_CONFIG), NULL, &settings, error);
    if (status == FW_OK)
        status = check_gauges(settings, &given.gauges, error);
    if (status == FW_OK)
        status = export_from(&given, settings->store_file, &settings->zone, error);
    settings_destroy(settings);
    return status;
}
