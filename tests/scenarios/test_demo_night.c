/* SPDX-License-Identifier: MIT */
/*
 * The demonstration's night, replayed by the executable, against the night's own story (docs/demo.md). Times of the story come from a
 * routing of the same river by hand and from the clock of the people in it; where the daemon's own minute differs, the row says why.
 */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/wait.h>
#include <unistd.h>
/* after the four above, which it needs */
#include <cmocka.h>

#include <cjson/cJSON.h>

#include "daemon/when.h"
#include "engine/passage.h"

enum { LINES_MOST = 400, LINE_SIZE = 1024 };

struct night {
    char folder[64];
    size_t count;
    cJSON *decisions[LINES_MOST];
};

static void run(const char *format, ...) __attribute__((format(printf, 1, 2)));
static void run(const char *format, ...)
{
    char command[4096];
    va_list arguments;
    va_start(arguments, format);
    vsnprintf(command, sizeof command, format, arguments);
    va_end(arguments);
    int status = system(command); /* NOLINT(cert-env33-c): fixed commands of this test */
    if (status != 0)
        fail_msg("exit status %d: %s", status, command);
}

static int replay_the_night(void **state)
{
    static struct night night;
    char path[256];
    char line[LINE_SIZE];
    snprintf(night.folder, sizeof night.folder, "/tmp/forewater-night-XXXXXX");
    assert_non_null(mkdtemp(night.folder));
    run("'%s' --into '%s' >/dev/null", FW_NIGHT_GENERATOR, night.folder);
    run("'%s' replay --json --config '%s/config/demo/vennmark.json' --readings 'orlin-scar=%s/readings.csv' --words "
        "'%s/words.csv' --store '%s/night.db' >'%s/decisions'",
        FW_EXECUTABLE, FW_SOURCE_DIR, night.folder, night.folder, night.folder, night.folder);
    snprintf(path, sizeof path, "%s/decisions", night.folder);
    FILE *stream = fopen(path, "re");
    assert_non_null(stream);
    while (night.count < LINES_MOST && fgets(line, sizeof line, stream) != NULL) {
        night.decisions[night.count] = cJSON_Parse(line);
        assert_non_null(night.decisions[night.count]);
        night.count++;
    }
    fclose(stream);
    *state = &night;
    return 0;
}

static int forget_the_night(void **state)
{
    struct night *night = *state;
    for (size_t index = 0; index < night->count; index++)
        cJSON_Delete(night->decisions[index]);
    run("rm -r '%s'", night->folder);
    return 0;
}

/* --- questions ---------------------------------------------------------------------------------------------------- */

static const char *text_of(const cJSON *decision, const char *name)
{
    const cJSON *item = cJSON_GetObjectItemCaseSensitive(decision, name);
    return cJSON_IsString(item) ? item->valuestring : "";
}

static bool is_true(const cJSON *decision, const char *name)
{
    return cJSON_IsTrue(cJSON_GetObjectItemCaseSensitive(decision, name));
}

static int64_t time_of(const cJSON *decision, const char *name)
{
    struct fw_error error;
    int64_t utc_s = PASSAGE_NEVER;
    const char *text = text_of(decision, name);
    if (text[0] != '\0')
        assert_int_equal(when_parse(text, NULL, &utc_s, &error), FW_OK);
    return utc_s;
}

/* "21:40" of that evening or "03:15" of the morning after, UTC+1. */
static int64_t at(const char *clock)
{
    char text[WHEN_TEXT_SIZE];
    struct fw_error error;
    int64_t utc_s = 0;
    bool is_evening = strcmp(clock, "18:00") >= 0;
    snprintf(text, sizeof text, "2031-02-%sT%s:00+01:00", is_evening ? "14" : "15", clock);
    assert_int_equal(when_parse(text, NULL, &utc_s, &error), FW_OK);
    return utc_s;
}

static const cJSON *first_with(const struct night *night, const char *point, const char *advice, bool is_blind)
{
    for (size_t index = 0; index < night->count; index++) {
        const cJSON *decision = night->decisions[index];
        if (strcmp(text_of(decision, "point"), point) == 0 && strcmp(text_of(decision, "advice"), advice) == 0 &&
            (!is_blind || is_true(decision, "blind")))
            return decision;
    }
    return NULL;
}

/* What stood at a moment: the newest decision at or before it; NULL: none yet, that is QUIET. */
static const cJSON *standing_at(const struct night *night, const char *point, const char *clock)
{
    const cJSON *standing = NULL;
    for (size_t index = 0; index < night->count; index++)
        if (strcmp(text_of(night->decisions[index], "point"), point) == 0 &&
            time_of(night->decisions[index], "at") <= at(clock))
            standing = night->decisions[index];
    return standing;
}

static void assert_near(int64_t utc_s, const char *clock, int tolerance_min, const char *shows)
{
    int64_t apart_s = utc_s - at(clock);
    if (utc_s == PASSAGE_NEVER || apart_s > tolerance_min * 60 || apart_s < -tolerance_min * 60)
        fail_msg("%s: expected %s within %d min, %lld min off", shows, clock, tolerance_min,
                 (long long)(apart_s / 60));
}

/* --- the night ---------------------------------------------------------------------------------------------------- */

static void the_ford_is_sent_to_on_an_assumed_rise_and_the_act_by_stands(void **state)
{
    struct night *night = *state;
    const cJSON *send = first_with(night, "tallowick-ford", "SEND", false);
    assert_non_null(send);
    /* 21:58 by hand; the carried rise passes 2.00 m at 21:57 and the next cycle is at 22:00 */
    assert_near(time_of(send, "at"), "21:58", 5, "first SEND");
    assert_true(is_true(send, "blind"));
    assert_true(is_true(send, "wakes"));
    /* 22:18 by hand from 23:28 at the deck; of the closing mark, from the batch that came at 22:18, it is 22:20 */
    assert_near(time_of(send, "act_by"), "22:18", 15, "act-by at the first SEND");
    assert_near(time_of(standing_at(night, "tallowick-ford", "22:30"), "act_by"), "22:18", 5,
                "act-by with the gauge back");
    assert_near(time_of(standing_at(night, "tallowick-ford", "22:30"), "deck_earliest"), "23:28", 12,
                "deck wet, earliest");
}

static void silence_on_the_rise_is_told_at_its_limit(void **state)
{
    struct night *night = *state;
    static const char *const crossings[] = {"tallowick-ford", "marren-causeway", "low-pintle-bridge"};
    for (size_t index = 0; index < 3; index++) {
        const cJSON *blind = first_with(night, crossings[index], "MUSTER", true);
        assert_non_null(blind);
        assert_near(time_of(blind, "at"), "21:40", 0, "BLIND: 25 min after 21:15");
    }
    assert_true(is_true(standing_at(night, "tallowick-ford", "03:15"), "blind")); /* 25 min after 02:50, moving */
    assert_false(is_true(standing_at(night, "tallowick-ford", "03:14"), "blind"));
    assert_false(is_true(standing_at(night, "tallowick-ford", "03:35"), "blind")); /* a hand reading ends it */
}

static void a_batch_of_old_values_and_a_spike_wake_nobody(void **state)
{
    struct night *night = *state;
    for (size_t index = 0; index < night->count; index++) {
        int64_t utc_s = time_of(night->decisions[index], "at");
        bool is_batch = utc_s == at("22:18");
        bool is_spike = utc_s > at("22:30") && utc_s <= at("22:41");
        bool is_backfill = utc_s == at("04:52");
        if (is_batch || is_spike || is_backfill)
            assert_false(is_true(night->decisions[index], "wakes"));
        assert_false(is_spike);
    }
}

static void nothing_is_handed_back_in_the_lull(void **state)
{
    struct night *night = *state;
    static const struct {
        const char *point;
        const char *dry_for_good; /* of the true deck, practice of the story */
    } rows[] = {{"tallowick-ford", "08:30"}, {"marren-causeway", "08:21"}, {"low-pintle-bridge", "07:23"}};
    for (size_t index = 0; index < sizeof rows / sizeof *rows; index++) {
        const cJSON *walk_over = first_with(night, rows[index].point, "WALK-OVER", false);
        assert_non_null(walk_over);
        assert_true(time_of(walk_over, "at") > at(rows[index].dry_for_good) + 60 * 60); /* the hold time */
    }
    assert_string_equal(text_of(standing_at(night, "tallowick-ford", "03:08"), "advice"), "KEEP SHUT");
}

static void the_bridge_is_not_sent_to_before_its_water_and_in_time_for_it(void **state)
{
    struct night *night = *state;
    const cJSON *send = first_with(night, "low-pintle-bridge", "SEND", false);
    assert_non_null(send);
    assert_true(time_of(send, "at") > at("03:00")); /* the first peak stays 0.12 m under the soffit */
    /* 05:02 by hand; here 10 min before the act-by of 05:19: slack = one cycle + 5 min */
    assert_near(time_of(send, "at"), "05:02", 10, "first SEND");
    assert_near(time_of(send, "deck_likely"), "06:53", 15, "deck wet, likely");
    /* in time: crew 40 + margin 15 min before the true 06:53 */
    assert_true(time_of(send, "at") + 55 * 60 <= at("06:53"));
}

static void people_shut_what_they_shut_and_the_causeway_keeps_its_own_act_by(void **state)
{
    struct night *night = *state;
    assert_string_equal(text_of(standing_at(night, "tallowick-ford", "22:57"), "advice"), "KEEP SHUT");
    assert_string_equal(text_of(standing_at(night, "marren-causeway", "23:27"), "advice"), "KEEP SHUT");
    assert_string_equal(text_of(standing_at(night, "low-pintle-bridge", "05:50"), "advice"), "KEEP SHUT");
    /* 00:04 in the story: earliest at the deck 00:49 less 45 min; of the closing mark it is about 10 min earlier */
    assert_near(time_of(standing_at(night, "marren-causeway", "22:30"), "act_by"), "00:04", 16,
                "act-by of the causeway");
    assert_near(time_of(standing_at(night, "marren-causeway", "22:30"), "deck_earliest"), "00:49", 5,
                "its deck, earliest");
}

static void a_noisy_night_wakes_seldom(void **state)
{
    struct night *night = *state;
    size_t wakes = 0;
    int64_t last_utc_s = 0;
    for (size_t index = 0; index < night->count; index++) {
        int64_t utc_s = time_of(night->decisions[index], "at");
        if (is_true(night->decisions[index], "wakes") && utc_s != last_utc_s) {
            wakes++;
            assert_true(last_utc_s == 0 || utc_s - last_utc_s >= 10 * 60); /* IEC 62682: about one in ten minutes */
            last_utc_s = utc_s;
        }
    }
    print_message("%zu wakes\n", wakes);
    assert_in_range(wakes, 4, 8); /* 4 in the story, which has no word for a MUSTER by chance */
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(the_ford_is_sent_to_on_an_assumed_rise_and_the_act_by_stands),
        cmocka_unit_test(silence_on_the_rise_is_told_at_its_limit),
        cmocka_unit_test(a_batch_of_old_values_and_a_spike_wake_nobody),
        cmocka_unit_test(nothing_is_handed_back_in_the_lull),
        cmocka_unit_test(the_bridge_is_not_sent_to_before_its_water_and_in_time_for_it),
        cmocka_unit_test(people_shut_what_they_shut_and_the_causeway_keeps_its_own_act_by),
        cmocka_unit_test(a_noisy_night_wakes_seldom),
    };
    return cmocka_run_group_tests(tests, replay_the_night, forget_the_night);
}
