/* SPDX-License-Identifier: MIT */
#include "daemon/tell/outbox.h"

#include <dirent.h>
#include <errno.h>
#include <setjmp.h>
#include <signal.h>
#include <stdarg.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>
#include <sys/wait.h>
#include <unistd.h>

#include <cjson/cJSON.h>
#include <cmocka.h>

#include "daemon/tell/message_event.h"
#include "daemon/tell/sentence.h"

enum { PAGE, SECOND, THIRD, LOG, CHANNEL_COUNT, SAVED_MAX = 64 };

static const int64_t evening_utc_s = 1928783723; /* 2031-02-13T21:15:23Z */

struct bench {
    char folder[64];
    char scripts[CHANNEL_COUNT][128];
    const char *argv[CHANNEL_COUNT][3];
    struct settings_channel channels[CHANNEL_COUNT];
    struct settings_point points[2];
    struct settings settings;
    struct picture picture;
    sd_event *event;
    char *said;
    size_t said_length;
    struct journal journal;
    struct clock clock;
    struct outbox *outbox;
    struct message saved[SAVED_MAX]; /* as handed to the caller to save */
    size_t saved_count;
    size_t descriptors_before;
};

static size_t count_descriptors(void)
{
    size_t count = 0;
    DIR *folder = opendir("/proc/self/fd");
    assert_non_null(folder);
    while (readdir(folder) != NULL)
        count++;
    closedir(folder);
    return count;
}

static void save(void *context, const struct message *message)
{
    struct bench *bench = context;
    assert_true(bench->saved_count < SAVED_MAX);
    bench->saved[bench->saved_count++] = *message;
}

static void write_script(struct bench *bench, int channel, const char *body)
{
    FILE *file = fopen(bench->scripts[channel], "we");
    assert_non_null(file);
    fprintf(file, "#!/bin/sh\n%s\n", body);
    assert_int_equal(fclose(file), 0);
    assert_int_equal(chmod(bench->scripts[channel], 0755), 0);
}

static void open_outbox(struct bench *bench)
{
    struct fw_error error = {0};
    assert_int_equal(
        outbox_open(&bench->settings, bench->event, &bench->journal, save, bench, &bench->outbox, &error), FW_OK);
    outbox_use_clock(bench->outbox, &bench->clock);
    outbox_use_picture(bench->outbox, &bench->picture);
}

static void make_settings(struct bench *bench)
{
    static const char *const ids[CHANNEL_COUNT] = {"page-duty", "second", "third", "log"};
    char folder[sizeof bench->folder];
    memcpy(folder, bench->folder, sizeof folder);
    for (int i = 0; i < CHANNEL_COUNT; i++) {
        snprintf(bench->scripts[i], sizeof bench->scripts[i], "%s/%s", folder, ids[i]);
        bench->argv[i][0] = bench->scripts[i];
        bench->argv[i][1] = bench->folder;
        bench->channels[i] = (struct settings_channel){
            .id = ids[i], .is_journal = i == LOG, .argument_count = 2, .run = bench->argv[i]};
    }
    bench->points[0] = (struct settings_point){.id = "tallowick-ford", .name = "Tallowick Ford"};
    bench->points[1] = (struct settings_point){.id = "marren-causeway", .name = "Marren Causeway"};
    bench->settings = (struct settings){.district_name = "Vennmark",
                                        .zone = {.is_fixed = true, .offset_s = 3600},
                                        .point_count = 2,
                                        .points = bench->points,
                                        .channel_count = CHANNEL_COUNT,
                                        .channels = bench->channels};
}

static int set_up(void **state)
{
    struct bench *bench = calloc(1, sizeof *bench);
    assert_non_null(bench);
    snprintf(bench->folder, sizeof bench->folder, "/tmp/forewater-outbox-XXXXXX");
    assert_non_null(mkdtemp(bench->folder));
    make_settings(bench);
    sigset_t blocked; /* as the loop has it */
    sigemptyset(&blocked);
    sigaddset(&blocked, SIGCHLD);
    sigprocmask(SIG_BLOCK, &blocked, NULL);
    assert_true(sd_event_new(&bench->event) >= 0);
    FILE *stream = open_memstream(&bench->said, &bench->said_length);
    assert_non_null(stream);
    bench->journal = journal_open(stream, JOURNAL_DEBUG);
    bench->clock = clock_driven(evening_utc_s);
    sd_event_source *timer = NULL; /* the first timer of a loop opens a descriptor that stays */
    assert_true(sd_event_add_time_relative(bench->event, &timer, CLOCK_BOOTTIME, 1000000000, 0, NULL, NULL) >= 0);
    assert_true(sd_event_run(bench->event, 0) >= 0);
    sd_event_source_disable_unref(timer);
    bench->descriptors_before = count_descriptors();
    open_outbox(bench);
    *state = bench;
    return 0;
}

static void clear_messages(struct picture *picture)
{
    for (size_t i = 0; i < picture->outbox_count; i++)
        free(picture->outbox[i].bulletin);
    free(picture->outbox);
    *picture = (struct picture){0};
}

/* Nothing may be left behind: no child, no zombie, no descriptor. */
static int tear_down(void **state)
{
    struct bench *bench = *state;
    outbox_close(bench->outbox, 0);
    assert_int_equal(waitpid(-1, NULL, WNOHANG), -1);
    assert_int_equal(errno, ECHILD);
    assert_int_equal(count_descriptors(), bench->descriptors_before);
    sd_event_unref(bench->event);
    clear_messages(&bench->picture);
    fclose(bench->journal.stream);
    free(bench->said);
    char command[128];
    snprintf(command, sizeof command, "rm -r '%s'", bench->folder);
    assert_int_equal(system(command), 0);
    free(bench);
    return 0;
}

static struct message *add_message(struct bench *bench, int channel, int64_t number)
{
    struct picture *picture = &bench->picture;
    assert_int_equal(
        buffer_grow(&picture->outbox, &picture->outbox_capacity, picture->outbox_count, sizeof *picture->outbox),
        FW_OK);
    struct message *message = &picture->outbox[picture->outbox_count++];
    *message =
        (struct message){.entry = 7000 + number,
                         .number = number,
                         .kind = MESSAGE_DECISION,
                         .point = 0,
                         .channel = channel,
                         .made_utc_s = clock_world_utc_s(&bench->clock),
                         .bulletin = strdup("(1) What to do: [>>] SEND\n\n(7) V\xc3\xa4gen \"quoted\" \\ back\n")};
    assert_non_null(message->bulletin);
    snprintf(message->id, sizeof message->id, "id-%lld-%d", (long long)number, channel);
    snprintf(message->short_text, sizeof message->short_text, "VENNMARK ROADS: Tallowick Ford. ACT BY 22:18. #%04lld",
             (long long)number);
    return message;
}

static void send_due(struct bench *bench)
{
    outbox_send_due(bench->outbox, &bench->picture, clock_world_utc_s(&bench->clock));
}

static void run_until_idle(struct bench *bench)
{
    int64_t deadline_ms = clock_machine_ms() + 20000;
    while (outbox_under_way(bench->outbox) > 0) {
        assert_true(sd_event_run(bench->event, 100000) >= 0);
        assert_true(clock_machine_ms() < deadline_ms);
    }
}

static void wait_for_file(const struct bench *bench, const char *name)
{
    char path[160];
    snprintf(path, sizeof path, "%s/%s", bench->folder, name);
    for (int tries = 0; tries < 1000; tries++) {
        if (access(path, F_OK) == 0)
            return;
        usleep(10000);
    }
    fail_msg("%s never came", path);
}

static void read_back(const struct bench *bench, const char *name, char *text_out, size_t size)
{
    char path[160];
    snprintf(path, sizeof path, "%s/%s", bench->folder, name);
    FILE *file = fopen(path, "re");
    assert_non_null(file);
    text_out[fread(text_out, 1, size - 1, file)] = '\0';
    fclose(file);
}

static void member_is_text(const cJSON *object, const char *member, const char *value)
{
    const cJSON *item = cJSON_GetObjectItemCaseSensitive(object, member);
    assert_true(cJSON_IsString(item));
    assert_string_equal(item->valuestring, value);
}

static void member_is_number(const cJSON *object, const char *member, double value)
{
    const cJSON *item = cJSON_GetObjectItemCaseSensitive(object, member);
    assert_true(cJSON_IsNumber(item));
    assert_true(item->valuedouble >= value && item->valuedouble <= value);
}

/* --- what a hook is given --- */

static void a_hook_that_exits_0_has_sent_the_message(void **state)
{
    struct bench *bench = *state;
    write_script(bench, PAGE, "exit 0");
    struct message *message = add_message(bench, PAGE, 412);
    send_due(bench);
    assert_int_equal(message->state, DELIVERY_UNDER_WAY);
    assert_int_equal(message->tries, 1);
    assert_int_equal(outbox_under_way(bench->outbox), 1);
    assert_int_equal(bench->saved_count, 0);
    send_due(bench); /* once more while it is under way: no second hook */
    assert_int_equal(outbox_under_way(bench->outbox), 1);
    run_until_idle(bench);
    assert_int_equal(message->state, DELIVERY_SENT);
    assert_int_equal(message->tries, 1);
    assert_int_equal(message->settled_utc_s, evening_utc_s);
    assert_string_equal(message->note, "exit 0");
    assert_non_null(message->bulletin);
    assert_int_equal(bench->saved_count, 1);
    assert_int_equal(bench->saved[0].state, DELIVERY_SENT);
    assert_int_equal(bench->saved[0].entry, 7412);
    send_due(bench);
    assert_int_equal(outbox_under_way(bench->outbox), 0);
}

static void the_hook_reads_one_json_object_and_finds_the_same_in_its_environment(void **state)
{
    struct bench *bench = *state;
    write_script(bench, PAGE,
                 "cat >\"$1/event.json\"\n"
                 "echo \"$FOREWATER_MESSAGE_ID $FOREWATER_NUMBER $FOREWATER_KIND $FOREWATER_POINT $FOREWATER_TRY\" "
                 ">\"$1/env\"");
    struct message *message = add_message(bench, PAGE, 412);
    message->point = 1;
    clock_advance(&bench->clock, evening_utc_s + 90);
    send_due(bench);
    run_until_idle(bench);
    char text[4096];
    read_back(bench, "event.json", text, sizeof text);
    assert_int_equal(text[strlen(text) - 1], '\n');
    cJSON *event = cJSON_ParseWithOpts(text, NULL, true);
    assert_non_null(event);
    member_is_text(event, "schema", "forewater.message.1");
    member_is_text(event, "id", "id-412-0");
    member_is_number(event, "number", 412);
    member_is_text(event, "kind", "decision");
    member_is_text(event, "district", "Vennmark");
    const cJSON *point = cJSON_GetObjectItemCaseSensitive(event, "point");
    member_is_text(point, "id", "marren-causeway");
    member_is_text(point, "name", "Marren Causeway");
    member_is_text(event, "made", "2031-02-13T22:15:23+01:00");
    member_is_text(event, "text", message->short_text);
    member_is_text(event, "bulletin", message->bulletin);
    member_is_text(event, "caution", SENTENCE_CAUTION);
    assert_true(cJSON_IsFalse(cJSON_GetObjectItemCaseSensitive(event, "exercise")));
    member_is_number(event, "try", 1);
    member_is_number(event, "delayed_s", 90);
    cJSON_Delete(event);
    read_back(bench, "env", text, sizeof text);
    assert_string_equal(text, "id-412-0 412 decision marren-causeway 1\n");
}

static void a_message_about_no_point_has_a_null_point(void **state)
{
    struct bench *bench = *state;
    struct message message = {.number = 3, .kind = MESSAGE_NOTICE, .point = -1, .made_utc_s = evening_utc_s};
    struct text json = {0};
    /* the world's clock may step back between making and sending: late is never negative */
    assert_int_equal(message_event_write(&bench->settings, &message, evening_utc_s - 4000, &json), FW_OK);
    cJSON *event = cJSON_Parse(text_string(&json));
    assert_non_null(event);
    assert_true(cJSON_IsNull(cJSON_GetObjectItemCaseSensitive(event, "point")));
    member_is_text(event, "kind", "notice");
    member_is_text(event, "bulletin", "");
    member_is_number(event, "delayed_s", 0);
    cJSON_Delete(event);
    text_clear(&json);
}

/* --- trying again --- */

static void a_hook_that_fails_is_tried_again_with_the_same_id(void **state)
{
    struct bench *bench = *state;
    write_script(bench, PAGE,
                 "echo \"$FOREWATER_MESSAGE_ID\" >>\"$1/ids\"\n[ -e \"$1/was\" ] && exit 0\n: >\"$1/was\"\necho "
                 "modem busy\nexit 1");
    struct message *message = add_message(bench, PAGE, 412);
    send_due(bench);
    run_until_idle(bench);
    assert_int_equal(message->state, DELIVERY_WAITING);
    assert_string_equal(message->note, "exit 1: modem busy");
    int64_t wait_s = message->next_try_utc_s - evening_utc_s;
    assert_true(wait_s >= 7 && wait_s <= 15); /* 15 s with half jitter */
    assert_int_equal(outbox_next_try_utc_s(bench->outbox, &bench->picture), message->next_try_utc_s);

    clock_advance(&bench->clock, message->next_try_utc_s - 1);
    send_due(bench);
    assert_int_equal(outbox_under_way(bench->outbox), 0); /* not yet */
    clock_advance(&bench->clock, message->next_try_utc_s);
    send_due(bench);
    run_until_idle(bench);
    assert_int_equal(message->state, DELIVERY_SENT);
    assert_int_equal(message->tries, 2);
    assert_int_equal(bench->saved_count, 2);
    assert_int_equal(bench->saved[0].state, DELIVERY_WAITING);
    assert_int_equal(bench->saved[1].state, DELIVERY_SENT);
    assert_int_equal(outbox_next_try_utc_s(bench->outbox, &bench->picture), INT64_MAX);
    char text[64];
    read_back(bench, "ids", text, sizeof text);
    assert_string_equal(text, "id-412-0\nid-412-0\n");
}

static void waits_double_up_to_a_quarter_hour_and_are_the_same_on_every_run(void **state)
{
    struct bench *bench = *state;
    struct message *message = add_message(bench, PAGE, 412); /* no script there: every try fails at once */
    static const int64_t whole_s[] = {15, 30, 60, 120, 240, 480, 900, 900, 900};
    int64_t waits_s[9];
    bool are_all_whole = true;
    for (size_t try = 0; try < 9; try++) {
        int64_t now_utc_s = clock_world_utc_s(&bench->clock);
        send_due(bench);
        assert_int_equal(message->state, DELIVERY_WAITING);
        assert_int_equal(message->tries, (int)try + 1);
        waits_s[try] = message->next_try_utc_s - now_utc_s;
        assert_true(waits_s[try] >= whole_s[try] / 2 && waits_s[try] <= whole_s[try]);
        are_all_whole = are_all_whole && waits_s[try] == whole_s[try];
        clock_advance(&bench->clock, message->next_try_utc_s);
    }
    assert_false(are_all_whole);
    assert_non_null(strstr(message->note, "No such file or directory"));
    struct message *again = add_message(bench, PAGE, 412); /* the same id, another row */
    again->entry += 1000;
    message = &bench->picture.outbox[0];
    struct message *other = NULL;
    for (size_t try = 0; try < 3; try++) {
        int64_t now_utc_s = clock_world_utc_s(&bench->clock);
        message->next_try_utc_s = now_utc_s + 800; /* out of the way */
        send_due(bench);
        assert_int_equal(again->next_try_utc_s - now_utc_s, waits_s[try]);
        clock_advance(&bench->clock, again->next_try_utc_s);
    }
    other = add_message(bench, PAGE, 413);
    send_due(bench);
    assert_true(other->next_try_utc_s - clock_world_utc_s(&bench->clock) <= 15);
}

static void a_message_that_fails_for_five_days_is_given_up_loudly(void **state)
{
    struct bench *bench = *state;
    struct message *message = add_message(bench, PAGE, 412);
    message->made_utc_s = evening_utc_s - 5 * 86400 + 1;
    send_due(bench);
    assert_int_equal(message->state, DELIVERY_WAITING);
    clock_advance(&bench->clock, message->next_try_utc_s);
    send_due(bench);
    assert_int_equal(message->state, DELIVERY_GIVEN_UP);
    assert_int_equal(message->tries, 2);
    assert_int_equal(message->settled_utc_s, clock_world_utc_s(&bench->clock));
    assert_int_equal(bench->journal.last_priority, JOURNAL_ERROR);
    assert_non_null(strstr(bench->said, "message #0412 on channel 'page-duty' is given up after 2 tries"));
    assert_int_equal(outbox_next_try_utc_s(bench->outbox, &bench->picture), INT64_MAX);
    send_due(bench);
    assert_int_equal(message->tries, 2);
}

static void a_channel_that_the_settings_lost_is_given_up_at_once(void **state)
{
    struct bench *bench = *state;
    int32_t channels[] = {CHANNEL_COUNT, -1};
    for (size_t i = 0; i < 2; i++) {
        struct message *message = add_message(bench, channels[i], 500 + (int64_t)i);
        send_due(bench);
        assert_int_equal(message->state, DELIVERY_GIVEN_UP);
        assert_non_null(strstr(message->note, "no such channel"));
        assert_int_equal(bench->journal.last_priority, JOURNAL_ERROR);
    }
}

static void a_clock_set_back_does_not_put_off_a_try(void **state)
{
    struct bench *bench = *state;
    write_script(bench, PAGE, "exit 0");
    struct message *message = add_message(bench, PAGE, 412);
    message->next_try_utc_s = evening_utc_s + 86400;
    send_due(bench);
    run_until_idle(bench);
    assert_int_equal(message->state, DELIVERY_SENT);
}

/* --- hooks that misbehave --- */

static void a_hook_that_hangs_is_ended_and_its_message_waits(void **state)
{
    struct bench *bench = *state;
    struct hook_limits limits = {.run_ms = 200, .grace_ms = 200, .output_size = 65536};
    outbox_set_limits(bench->outbox, &limits);
    write_script(bench, PAGE, "trap '' TERM\nwhile :; do sleep 1000000; done");
    struct message *message = add_message(bench, PAGE, 412);
    send_due(bench);
    run_until_idle(bench);
    assert_int_equal(message->state, DELIVERY_WAITING);
    assert_string_equal(message->note, "no end within 200 ms, TERM and then KILL: ended by signal 9 (Killed)");
}

static void a_channel_that_fails_does_not_hold_up_another(void **state)
{
    struct bench *bench = *state;
    write_script(bench, PAGE, "while :; do sleep 1000000; done");
    write_script(bench, SECOND, "exit 1");
    write_script(bench, THIRD, "exit 0");
    struct hook_limits limits = {.run_ms = 2000, .grace_ms = 0, .output_size = 65536};
    outbox_set_limits(bench->outbox, &limits);
    for (int64_t number = 1; number <= 6; number++)
        add_message(bench, PAGE, number);
    add_message(bench, SECOND, 7);
    add_message(bench, THIRD, 8);
    add_message(bench, LOG, 9);
    send_due(bench);
    const struct message *messages = bench->picture.outbox;
    assert_int_equal(messages[8].state, DELIVERY_SENT);
    assert_int_equal(messages[3].state, DELIVERY_WAITING); /* three places of four for the hanging one */
    for (int turns = 0; turns < 200 && messages[7].state != DELIVERY_SENT; turns++)
        assert_true(sd_event_run(bench->event, 10000) >= 0);
    assert_int_equal(messages[7].state, DELIVERY_SENT);
    assert_int_equal(messages[6].state, DELIVERY_WAITING);
    assert_int_equal(messages[6].tries, 1);
    assert_int_equal(messages[0].state, DELIVERY_UNDER_WAY); /* still hanging meanwhile */
    /* once it has failed it gets one place at a time */
    while (messages[0].state == DELIVERY_UNDER_WAY)
        assert_true(sd_event_run(bench->event, 10000) >= 0);
    for (int turns = 0; turns < 100 && outbox_under_way(bench->outbox) > 1; turns++)
        assert_true(sd_event_run(bench->event, 10000) >= 0);
    assert_int_equal(outbox_under_way(bench->outbox), 1);
}

static void four_run_at_once_and_the_rest_follow(void **state)
{
    struct bench *bench = *state;
    bench->settings.channel_count = 1; /* the only command channel has all places */
    outbox_close(bench->outbox, 0);
    open_outbox(bench);
    write_script(bench, PAGE, ": >\"$1/began-$FOREWATER_NUMBER\"\nwhile [ ! -e \"$1/go\" ]; do sleep 0.02; done");
    for (int64_t number = 1; number <= 11; number++)
        add_message(bench, PAGE, number);
    send_due(bench);
    assert_int_equal(outbox_under_way(bench->outbox), 4);
    wait_for_file(bench, "began-4");
    char path[160];
    snprintf(path, sizeof path, "%s/began-5", bench->folder);
    assert_int_equal(access(path, F_OK), -1);
    /* the others wait for a place, not for a time */
    assert_int_equal(outbox_next_try_utc_s(bench->outbox, &bench->picture), INT64_MAX);
    snprintf(path, sizeof path, "%s/go", bench->folder);
    FILE *go = fopen(path, "we");
    assert_non_null(go);
    fclose(go);
    run_until_idle(bench);
    for (size_t i = 0; i < 11; i++)
        assert_int_equal(bench->picture.outbox[i].state, DELIVERY_SENT);
    assert_int_equal(bench->saved_count, 11);
}

/* --- the journal channel --- */

static void the_journal_channel_writes_text_and_bulletin_and_is_done(void **state)
{
    struct bench *bench = *state;
    struct message *message = add_message(bench, LOG, 412);
    send_due(bench);
    assert_int_equal(message->state, DELIVERY_SENT);
    assert_int_equal(message->tries, 1);
    assert_int_equal(bench->saved_count, 1);
    assert_string_equal(bench->said,
                        "VENNMARK ROADS: Tallowick Ford. ACT BY 22:18. #0412\n(1) What to do: [>>] SEND\n"
                        "(7) V\xc3\xa4gen \"quoted\" \\ back\n");
}

/* --- pictures come and go --- */

static void copy_messages(const struct picture *from, struct picture *to)
{
    *to = (struct picture){.outbox_count = from->outbox_count, .outbox_capacity = from->outbox_count};
    to->outbox = calloc(from->outbox_count, sizeof *to->outbox);
    assert_non_null(to->outbox);
    for (size_t i = 0; i < from->outbox_count; i++) {
        to->outbox[i] = from->outbox[i];
        to->outbox[i].bulletin = strdup(from->outbox[i].bulletin);
    }
}

static void the_picture_may_be_swapped_while_a_hook_is_under_way(void **state)
{
    struct bench *bench = *state;
    write_script(bench, PAGE, "while [ ! -e \"$1/go\" ]; do sleep 0.02; done; exit 1");
    add_message(bench, PAGE, 411);
    add_message(bench, PAGE, 412);
    bench->picture.outbox[0].state = DELIVERY_SENT;
    send_due(bench);
    struct picture next;
    copy_messages(&bench->picture, &next);
    outbox_use_picture(bench->outbox, NULL);
    clear_messages(&bench->picture); /* the old one is gone for good */
    bench->picture = next;
    outbox_use_picture(bench->outbox, &bench->picture);
    char path[160];
    snprintf(path, sizeof path, "%s/go", bench->folder);
    FILE *go = fopen(path, "we");
    assert_non_null(go);
    fclose(go);
    run_until_idle(bench);
    assert_int_equal(bench->picture.outbox[0].state, DELIVERY_SENT);
    assert_int_equal(bench->picture.outbox[1].state, DELIVERY_WAITING);
    assert_int_equal(bench->picture.outbox[1].tries, 1);
    assert_string_equal(bench->picture.outbox[1].note, "exit 1");
}

/* A copy made while the hook ran, taken after it ended: it must not be sent a second time. */
static void a_picture_copied_before_the_end_learns_of_it_when_it_is_taken(void **state)
{
    struct bench *bench = *state;
    write_script(bench, PAGE, "echo x >>\"$1/runs\"");
    add_message(bench, PAGE, 412);
    struct picture before_start;
    copy_messages(&bench->picture, &before_start);
    send_due(bench);
    struct picture while_running;
    copy_messages(&bench->picture, &while_running);
    assert_int_equal(while_running.outbox[0].state, DELIVERY_UNDER_WAY);
    outbox_send_due(bench->outbox, &before_start, evening_utc_s);
    assert_int_equal(before_start.outbox[0].state, DELIVERY_UNDER_WAY);
    assert_int_equal(outbox_under_way(bench->outbox), 1);
    before_start.outbox[0].state = DELIVERY_WAITING; /* as it was when copied */
    before_start.outbox[0].tries = 0;
    run_until_idle(bench);
    outbox_send_due(bench->outbox, &while_running, evening_utc_s);
    outbox_send_due(bench->outbox, &before_start, evening_utc_s);
    assert_int_equal(while_running.outbox[0].state, DELIVERY_SENT);
    assert_int_equal(before_start.outbox[0].state, DELIVERY_SENT);
    assert_int_equal(outbox_under_way(bench->outbox), 0);
    char text[64];
    read_back(bench, "runs", text, sizeof text);
    assert_string_equal(text, "x\n");
    clear_messages(&before_start);
    clear_messages(&while_running);
}

static void without_a_picture_the_end_is_still_saved(void **state)
{
    struct bench *bench = *state;
    write_script(bench, PAGE, "exit 0");
    add_message(bench, PAGE, 412);
    send_due(bench);
    outbox_use_picture(bench->outbox, NULL);
    run_until_idle(bench);
    assert_int_equal(bench->saved_count, 1);
    assert_int_equal(bench->saved[0].state, DELIVERY_SENT);
    assert_string_equal(bench->saved[0].id, "id-412-0");
    assert_null(bench->saved[0].bulletin);
    outbox_use_picture(bench->outbox, &bench->picture);
    assert_int_equal(bench->picture.outbox[0].state, DELIVERY_SENT);
}

static void a_message_left_under_way_by_an_earlier_life_is_sent_again(void **state)
{
    struct bench *bench = *state;
    write_script(bench, PAGE, "exit 0");
    struct message *message = add_message(bench, PAGE, 412);
    message->state = DELIVERY_UNDER_WAY;
    message->tries = 3;
    send_due(bench);
    run_until_idle(bench);
    assert_int_equal(message->state, DELIVERY_SENT);
    assert_int_equal(message->tries, 4);
}

/* --- going down --- */

static void closing_ends_running_hooks_and_their_messages_wait_for_the_next_life(void **state)
{
    struct bench *bench = *state;
    write_script(bench, PAGE, ": >\"$1/obeys\"\nexec sleep 1000000");
    write_script(bench, SECOND, "trap '' TERM\n: >\"$1/stubborn\"\nwhile :; do sleep 1000000; done");
    write_script(bench, THIRD, "trap 'exit 0' TERM\n: >\"$1/polite\"\nwhile :; do sleep 0.02; done");
    add_message(bench, PAGE, 1);
    add_message(bench, SECOND, 2);
    add_message(bench, THIRD, 3);
    add_message(bench, THIRD, 4);
    add_message(bench, PAGE, 5); /* never started: no place */
    send_due(bench);
    assert_int_equal(outbox_under_way(bench->outbox), 4);
    wait_for_file(bench, "obeys");
    wait_for_file(bench, "stubborn");
    wait_for_file(bench, "polite");
    usleep(50000);
    int64_t began_ms = clock_machine_ms();
    outbox_close(bench->outbox, 300);
    bench->outbox = NULL;
    assert_true(clock_machine_ms() - began_ms >= 300);
    const struct message *messages = bench->picture.outbox;
    assert_int_equal(messages[0].state, DELIVERY_WAITING);
    assert_int_equal(messages[0].next_try_utc_s, evening_utc_s);
    assert_string_equal(messages[0].note, "told to end: ended by signal 15 (Terminated)");
    assert_int_equal(messages[1].state, DELIVERY_WAITING);
    assert_string_equal(messages[1].note, "told to end, then killed: ended by signal 9 (Killed)");
    assert_int_equal(messages[2].state, DELIVERY_SENT);
    assert_int_equal(messages[4].state, DELIVERY_WAITING);
    assert_int_equal(messages[4].tries, 0);
    assert_int_equal(bench->saved_count, 4);
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, set_up, tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(a_hook_that_exits_0_has_sent_the_message),
        TEST(the_hook_reads_one_json_object_and_finds_the_same_in_its_environment),
        TEST(a_message_about_no_point_has_a_null_point),
        TEST(a_hook_that_fails_is_tried_again_with_the_same_id),
        TEST(waits_double_up_to_a_quarter_hour_and_are_the_same_on_every_run),
        TEST(a_message_that_fails_for_five_days_is_given_up_loudly),
        TEST(a_channel_that_the_settings_lost_is_given_up_at_once),
        TEST(a_clock_set_back_does_not_put_off_a_try),
        TEST(a_hook_that_hangs_is_ended_and_its_message_waits),
        TEST(a_channel_that_fails_does_not_hold_up_another),
        TEST(four_run_at_once_and_the_rest_follow),
        TEST(the_journal_channel_writes_text_and_bulletin_and_is_done),
        TEST(the_picture_may_be_swapped_while_a_hook_is_under_way),
        TEST(a_picture_copied_before_the_end_learns_of_it_when_it_is_taken),
        TEST(without_a_picture_the_end_is_still_saved),
        TEST(a_message_left_under_way_by_an_earlier_life_is_sent_again),
        TEST(closing_ends_running_hooks_and_their_messages_wait_for_the_next_life),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
