/* SPDX-License-Identifier: MIT */
#include "daemon/command/command.h"

#include <stdio.h>
#include <string.h>
#include <time.h>

#include "daemon/clock.h"
#include "daemon/command/options.h"
#include "daemon/feed/inbox.h"
#include "daemon/store/store.h"

enum { LOOK_EVERY_MS = 20 };

static void rest_ms(long milliseconds)
{
    struct timespec pause = {milliseconds / 1000, milliseconds % 1000 * 1000000};
    nanosleep(&pause, NULL);
}

/* Is the word's id in the store by now? A store that cannot be read just now is looked at again. */
static bool is_taken(const char *store_file, const char *id)
{
    struct store *store = NULL;
    struct fw_error ignored = {.status = FW_OK};
    bool has_word = false;
    if (store_open(store_file, STORE_READ, &store, &ignored) != FW_OK ||
        store_has_word(store, id, &has_word, &ignored) != FW_OK)
        has_word = false;
    store_close(store);
    return has_word;
}

static enum fw_status wait_until_taken(const struct settings *settings, const struct word *word, long wait_s,
                                       struct fw_error *error)
{
    int64_t until_ms = clock_machine_ms() + wait_s * 1000;
    long pid = 0;
    if (!store_is_held(settings->store_file, &pid))
        return fw_error_set(error, FW_UNAVAILABLE,
                            "no daemon is running; the word waits in %s and is taken when one starts",
                            settings->inbox_path);
    while (!is_taken(settings->store_file, word->id)) {
        if (clock_machine_ms() >= until_ms)
            return fw_error_set(error, FW_UNAVAILABLE,
                                "the daemon (process %ld) has not taken the word within %ld s; it waits in %s", pid,
                                wait_s, settings->inbox_path);
        rest_ms(LOOK_EVERY_MS);
    }
    return FW_OK;
}

enum fw_status command_say(int argument_count, char *arguments[], struct fw_error *error)
{
    struct option_values config = {0}, by = {0}, at = {0}, unit = {0}, both_sides = {0}, wait = {0}, store = {0};
    const struct option_spec options[] = {
        {"config", "FILE", "the configuration (default " COMMAND_DEFAULT_CONFIG ")", &config},
        {"by", "ROLE", "who says it: a role, never a name", &by},
        {"at", "TIME", "what moment it speaks of (default: now)", &at},
        {"unit", "UNIT", "of a reading: m, cm, mm, ft, m3/s, l/s (default: as the gauge measures, SI)", &unit},
        {"both-sides", NULL, "SHUT: both sides are", &both_sides},
        {"wait", "SECONDS", "how long to wait until the daemon has taken it (default 10)", &wait},
        {"store", "FILE", "where the last good settings are, should the configuration be unreadable", &store},
        {NULL, NULL, NULL, NULL}};
    const struct command_line line = {
        "say", "accept [NUMBER] | reading GAUGE VALUE | seen POINT dry|wet [CM] | road POINT STATE | note TEXT",
        "Hands a person's word to the daemon and waits until it has been recorded. Road states: OPEN, CREW CALLED, "
        "CREW "
        "OUT,\nONE SIDE SHUT, SHUT, WALK-OVER, HANDED BACK.",
        options};
    struct settings *settings = NULL;
    struct word word = {0};
    int rest = 0;
    long wait_s = 10;
    char spoken[FACT_WORD_LINE_SIZE];
    enum fw_status status = options_read(&line, argument_count, arguments, &rest, error);
    if (status == FW_OK)
        status = option_whole("wait", &wait, 0, 3600, 10, &wait_s, error);
    if (status != FW_OK)
        return status;
    status = command_read_settings_in_force(option_text(&config, COMMAND_DEFAULT_CONFIG), option_text(&store, NULL),
                                            &settings, error);
    if (status != FW_OK)
        return status;
    /* word_parse reads the whole line, options too: what getopt moved is one argument vector from argv[1] on */
    const char *line_words[OPTION_VALUES_MAX + 8] = {0};
    int count = 0;
    for (int index = rest; index < argument_count && count < OPTION_VALUES_MAX; index++)
        line_words[count++] = arguments[index];
    const struct {
        const char *name;
        const struct option_values *given;
        bool has_value;
    } passed_on[] = {
        {"--by", &by, true}, {"--at", &at, true}, {"--unit", &unit, true}, {"--both-sides", &both_sides, false}};
    for (size_t index = 0; index < sizeof passed_on / sizeof *passed_on; index++) {
        if (passed_on[index].given->count == 0)
            continue;
        line_words[count++] = passed_on[index].name;
        if (passed_on[index].has_value)
            line_words[count++] = option_text(passed_on[index].given, "");
    }
    char *words[OPTION_VALUES_MAX + 8];
    memcpy(words, line_words, sizeof words);
    struct clock clock = clock_real();
    status = word_parse(settings, count, words, clock_world_utc_s(&clock), &word, error);
    if (status == FW_OK)
        status = inbox_hand_in(settings, &word, at.count > 0, error);
    if (status == FW_OK)
        status = wait_until_taken(settings, &word, wait_s, error);
    if (status == FW_OK) {
        word_line(settings, &word, spoken);
        printf("recorded: %s\n", spoken);
    }
    settings_destroy(settings);
    return status;
}
