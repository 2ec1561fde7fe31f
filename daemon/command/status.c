/* SPDX-License-Identifier: MIT */
/* The newest recorded picture, or one of the past, in the terminal. Reads the store without writing to it. */
#include "daemon/command/command.h"

#include <cjson/cJSON.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "daemon/clock.h"
#include "daemon/command/known_at.h"
#include "daemon/command/options.h"
#include "daemon/deck.h"
#include "daemon/store/store.h"

static const char *text_of(const cJSON *object, const char *key)
{
    const cJSON *item = cJSON_GetObjectItemCaseSensitive(object, key);
    return cJSON_IsString(item) ? item->valuestring : "";
}

static double number_of(const cJSON *object, const char *key)
{
    const cJSON *item = cJSON_GetObjectItemCaseSensitive(object, key);
    return cJSON_IsNumber(item) ? item->valuedouble : 0.0;
}

static bool is_true(const cJSON *object, const char *key)
{
    return cJSON_IsTrue(cJSON_GetObjectItemCaseSensitive(object, key));
}

static int64_t time_of(const cJSON *object, const char *key)
{
    struct fw_error ignored;
    int64_t utc_s = PASSAGE_NEVER;
    const char *text = text_of(object, key);
    return text[0] != '\0' && when_parse(text, NULL, &utc_s, &ignored) == FW_OK ? utc_s : PASSAGE_NEVER;
}

static const char *clock_of(const struct when_zone *zone, const cJSON *object, const char *key,
                            char text[WHEN_TEXT_SIZE])
{
    return when_clock(zone, time_of(object, key), text);
}

static void print_gauge(const struct when_zone *zone, const cJSON *gauge, int64_t now_utc_s)
{
    char text[WHEN_TEXT_SIZE];
    bool is_stage = strcmp(text_of(gauge, "measures"), "stage") == 0;
    int64_t newest = time_of(gauge, "newest");
    if (newest == PASSAGE_NEVER) {
        printf("%-20s no reading that counts, ever  BLIND\n", text_of(gauge, "name"));
        return;
    }
    printf("%-20s %.2f %s %+.2f %s/h  seen %s, %lld min old%s%s%s%s%s\n", text_of(gauge, "name"),
           number_of(gauge, is_stage ? "stage_m" : "value_m3s"), is_stage ? "m" : "m3/s",
           number_of(gauge, is_stage ? "rate_m_per_h" : "rate_m3s_per_h"), is_stage ? "m" : "m3/s",
           when_clock(zone, newest, text), (long long)((now_utc_s - newest) / 60),
           is_true(gauge, "blind") ? "  BLIND" : "", is_true(gauge, "hand_reading") ? "  hand reading" : "",
           is_true(gauge, "unconfirmed") ? "  unconfirmed" : "", is_true(gauge, "frozen") ? "  frozen" : "",
           is_true(gauge, "beyond_highest_gauging") ? "  beyond highest gauging" : "");
}

static void print_point(const struct when_zone *zone, const cJSON *point)
{
    char times[6][WHEN_TEXT_SIZE];
    char advice[32];
    char wet[64];
    const cJSON *road = cJSON_GetObjectItemCaseSensitive(point, "road");
    const cJSON *marks = cJSON_GetObjectItemCaseSensitive(point, "marks");
    const cJSON *deck = cJSON_GetArrayItem(marks, (int)number_of(point, "deck_mark"));
    snprintf(advice, sizeof advice, "%s%s", text_of(point, "advice"), is_true(point, "blind") ? " [//] BLIND" : "");
    if (is_true(point, "unknown"))
        snprintf(wet, sizeof wet, "NO FORECAST");
    else if (time_of(deck, "earliest") == PASSAGE_NEVER)
        snprintf(wet, sizeof wet, "not within the horizon");
    else
        snprintf(wet, sizeof wet, "%s / %s / %s", clock_of(zone, deck, "earliest", times[0]),
                 clock_of(zone, deck, "likely", times[1]), clock_of(zone, deck, "latest", times[2]));
    printf("%-7s %-19s %-22s %-29s %-9s %s %s\n", clock_of(zone, point, "act_by", times[3]), text_of(point, "name"),
           advice, wet, clock_of(zone, point, "measured_until", times[4]), text_of(road, "state"),
           time_of(road, "at") == PASSAGE_NEVER ? "" : clock_of(zone, road, "at", times[5]));
}

static void print_limit(const struct when_zone *zone, const cJSON *limit)
{
    char times[2][WHEN_TEXT_SIZE];
    printf("    over the %s limit of %g %s for %s%s: ", is_true(limit, "draft") ? "draft" : "guideline",
           number_of(limit, "limit"), text_of(limit, "unit"), text_of(limit, "for"),
           is_true(limit, "stationary") ? ", stationary" : "");
    clock_of(zone, limit, "earliest", times[0]);
    if (time_of(limit, "likely") == PASSAGE_NEVER)
        printf("in some runs, earliest %s\n", times[0]);
    else
        printf("likely from %s, earliest %s\n", clock_of(zone, limit, "likely", times[1]), times[0]);
}

/* Only where some run wets the deck; true then. */
static bool print_deck(const struct when_zone *zone, const cJSON *point)
{
    char text[WHEN_TEXT_SIZE];
    const cJSON *deck = cJSON_GetObjectItemCaseSensitive(point, "deck_water");
    const cJSON *low = cJSON_GetObjectItemCaseSensitive(deck, "low");
    const cJSON *likely = cJSON_GetObjectItemCaseSensitive(deck, "likely");
    const cJSON *high = cJSON_GetObjectItemCaseSensitive(deck, "high");
    const cJSON *limits = cJSON_GetObjectItemCaseSensitive(deck, "limits_passed");
    bool is_likely = number_of(likely, "depth_m") > 0.0;
    const cJSON *shown = is_likely ? likely : high;
    if (!(number_of(shown, "depth_m") > 0.0))
        return false;
    printf("%s, water on the deck, %s %.2f m deep, %.2f m/s, %.2f m2/s", text_of(point, "name"),
           is_likely ? "likely peak" : "in the highest run", deck_rounded_up(number_of(shown, "depth_m")),
           deck_rounded_up(number_of(shown, "speed_m_s")), deck_rounded_up(number_of(shown, "depth_x_speed_m2_s")));
    if (is_likely)
        printf(" (%.2f to %.2f) at %s", deck_rounded_up(number_of(low, "depth_x_speed_m2_s")),
               deck_rounded_up(number_of(high, "depth_x_speed_m2_s")), clock_of(zone, deck, "at", text));
    printf("\n");
    for (const cJSON *limit = limits != NULL ? limits->child : NULL; limit != NULL; limit = limit->next)
        print_limit(zone, limit);
    return true;
}

static void print_decks(const struct when_zone *zone, const cJSON *const rows[], int count)
{
    bool has_any = false;
    printf("\n");
    for (int index = 0; index < count; index++)
        has_any |= print_deck(zone, rows[index]);
    if (has_any)
        printf("%s\n\n", DECK_CAUTION);
}

static int compare_act_by(const void *left, const void *right)
{
    int64_t a = time_of(*(const cJSON *const *)left, "act_by");
    int64_t b = time_of(*(const cJSON *const *)right, "act_by");
    return (a > b) - (a < b);
}

static enum fw_status print_picture(const struct settings *settings, const cJSON *picture, bool is_past,
                                    const char *link, struct fw_error *error)
{
    char text[WHEN_TEXT_SIZE];
    struct clock clock = clock_real();
    int64_t as_of = time_of(picture, "as_of");
    long pid = 0;
    bool is_held = store_is_held(settings->store_file, &pid);
    const cJSON *gauges = cJSON_GetObjectItemCaseSensitive(picture, "gauges");
    const cJSON *points = cJSON_GetObjectItemCaseSensitive(picture, "points");
    int count = cJSON_GetArraySize(points);
    const cJSON **rows = calloc((size_t)count + 1, sizeof(cJSON *));
    if (rows == NULL)
        return fw_error_set(error, FW_NO_MEMORY, "no memory");
    printf("%s  picture of %s", text_of(picture, "district"), when_rfc3339_local(&settings->zone, as_of, text));
    int64_t age_min = (clock_world_utc_s(&clock) - as_of) / 60;
    if (is_past)
        printf("  AS KNOWN THEN, not the newest");
    else if (is_held)
        printf("  daemon: process %ld", pid);
    else
        printf("  NO DAEMON IS RUNNING: this is the last picture it recorded");
    if (!is_past && age_min > 2 * settings->forecast_every_s / 60)
        printf("  (%lld min OLD)", (long long)age_min);
    printf("\n\n");
    for (const cJSON *gauge = gauges != NULL ? gauges->child : NULL; gauge != NULL; gauge = gauge->next)
        print_gauge(&settings->zone, gauge, as_of);
    printf("\n%-7s %-19s %-22s %-29s %-9s %s\n", "ACT BY", "CROSSING", "WATER ADVICE", "DECK WET (early/likely/late)",
           "MEASURED", "ROAD (people)");
    for (int index = 0; index < count; index++)
        rows[index] = cJSON_GetArrayItem(points, index);
    qsort(rows, (size_t)count, sizeof *rows, compare_act_by);
    for (int index = 0; index < count; index++)
        print_point(&settings->zone, rows[index]);
    print_decks(&settings->zone, rows, count);
    free(rows);
    printf("After the time under MEASURED the inflow is assumed: %s.\n", text_of(picture, "assumed"));
    command_print_caution();
    printf("settings %.8s  record %.8s\n", text_of(picture, "settings"), link);
    return FW_OK;
}

static enum fw_status show(const struct settings *settings, const struct option_values *known_at, bool as_json,
                           struct fw_error *error)
{
    struct store *store = NULL;
    struct text json = {0};
    int64_t entry = STORE_NOW, utc_s = 0;
    char link[FACT_DIGEST_SIZE] = "";
    enum fw_status status = store_open(settings->store_file, STORE_READ, &store, error);
    if (status == FW_OK)
        status = known_at_read(known_at, &settings->zone, store, &entry, error);
    if (status == FW_OK)
        status = store_payload_at(store, entry, &json, &utc_s, link, error);
    if (status == FW_NOTHING_NEW)
        status = fw_error_set(error, FW_UNAVAILABLE, "%s holds no picture %s", settings->store_file,
                              known_at->count > 0 ? "of that time" : "yet");
    if (status == FW_OK && as_json) {
        printf("%s\n", text_string(&json));
    } else if (status == FW_OK) {
        cJSON *picture = cJSON_Parse(text_string(&json));
        status = picture != NULL
                     ? print_picture(settings, picture, known_at->count > 0, link, error)
                     : fw_error_set(error, FW_DAMAGED, "%s: the newest picture cannot be read", settings->store_file);
        cJSON_Delete(picture);
    }
    text_clear(&json);
    store_close(store);
    return status;
}

enum fw_status command_status(int argument_count, char *arguments[], struct fw_error *error)
{
    struct option_values config = {0}, json = {0}, known_at = {0}, store = {0};
    const struct option_spec options[] = {
        {"config", "FILE", "the configuration (default " COMMAND_DEFAULT_CONFIG ")", &config},
        {"json", NULL, "the picture as one JSON object", &json},
        {"known-at", KNOWN_AT_ARGUMENT, "the picture of a moment, or of an entry of the record", &known_at},
        {"store", "FILE", "where the last good settings are, should the configuration be unreadable", &store},
        {NULL, NULL, NULL, NULL}};
    const struct command_line line = {
        "status", "",
        "Shows the newest recorded picture, or one of the past: gauges, crossings by act-by, what "
        "people said of the roads.",
        options};
    struct settings *settings = NULL;
    int rest = 0;
    enum fw_status status = options_read(&line, argument_count, arguments, &rest, error);
    if (status == FW_OK && rest < argument_count)
        status = fw_error_set(error, FW_USAGE, "status: '%s' is not expected here", arguments[rest]);
    if (status == FW_OK)
        status = command_read_settings_in_force(option_text(&config, COMMAND_DEFAULT_CONFIG),
                                                option_text(&store, NULL), &settings, error);
    if (status != FW_OK)
        return status;
    status = show(settings, &known_at, json.count > 0, error);
    settings_destroy(settings);
    return status;
}
