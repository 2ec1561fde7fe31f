/* SPDX-License-Identifier: MIT */
#include "daemon/tell/outbox.h"

#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "daemon/tell/message_event.h"

enum {
    PLACE_COUNT = 4,
    PLACES_PER_CHANNEL = 3, /* when there are several command channels */
    ENDING_COUNT = 256,     /* how many past endings are remembered for pictures that were copied before */
    FIRST_DELAY_S = 15,
    LONGEST_DELAY_S = 15 * 60,
    GIVE_UP_AFTER_S = 5 * 86400
};

struct place { /* one hook under way */
    struct outbox *outbox;
    struct hook *hook;      /* NULL: free */
    struct message message; /* without its bulletin */
};

struct outbox {
    const struct settings *settings;
    sd_event *event;
    struct journal *journal;
    outbox_settled *settled;
    void *context;
    const struct clock *clock;
    struct hook_limits limits;
    struct picture *picture;
    int64_t last_now_utc_s;
    bool is_closing;
    struct place places[PLACE_COUNT];
    bool *has_failed; /* per channel: its last try did */
    size_t command_channel_count;
    struct message endings[ENDING_COUNT]; /* a ring; without bulletins */
    size_t ending_count;
};

static int64_t world_now(const struct outbox *outbox)
{
    return outbox->clock != NULL ? clock_world_utc_s(outbox->clock) : outbox->last_now_utc_s;
}

static const char *channel_name(const struct outbox *outbox, const struct message *message)
{
    bool is_known = message->channel >= 0 && (size_t)message->channel < outbox->settings->channel_count;
    return is_known ? outbox->settings->channels[message->channel].id : "?";
}

static struct message *find_message(struct picture *picture, int64_t entry)
{
    for (size_t i = 0; picture != NULL && i < picture->outbox_count; i++)
        if (picture->outbox[i].entry == entry)
            return &picture->outbox[i];
    return NULL;
}

static const struct place *find_place(const struct outbox *outbox, int64_t entry)
{
    for (size_t i = 0; i < PLACE_COUNT; i++)
        if (outbox->places[i].hook != NULL && outbox->places[i].message.entry == entry)
            return &outbox->places[i];
    return NULL;
}

/* --- pictures come and go --- */

/* Everything but the bulletin, which stays its owner's. */
static void take_state(struct message *message, const struct message *from)
{
    message->state = from->state;
    message->tries = from->tries;
    message->next_try_utc_s = from->next_try_utc_s;
    message->settled_utc_s = from->settled_utc_s;
    memcpy(message->note, from->note, sizeof message->note);
}

static const struct message *find_ending(const struct outbox *outbox, int64_t entry)
{
    size_t kept = outbox->ending_count < ENDING_COUNT ? outbox->ending_count : ENDING_COUNT;
    for (size_t back = 1; back <= kept; back++) {
        const struct message *ending = &outbox->endings[(outbox->ending_count - back) % ENDING_COUNT];
        if (ending->entry == entry)
            return ending;
    }
    return NULL;
}

static bool is_settled(const struct message *message)
{
    return message->state == DELIVERY_SENT || message->state == DELIVERY_GIVEN_UP;
}

/* Tells a picture what happened to its messages since it was copied. */
static void bring_up_to_date(const struct outbox *outbox, struct picture *picture)
{
    for (size_t i = 0; picture != NULL && i < picture->outbox_count; i++) {
        struct message *message = &picture->outbox[i];
        if (is_settled(message))
            continue;
        const struct place *place = find_place(outbox, message->entry);
        const struct message *ending = place == NULL ? find_ending(outbox, message->entry) : NULL;
        bool is_behind = ending != NULL && (ending->tries > message->tries || (ending->tries == message->tries &&
                                                                               message->state == DELIVERY_UNDER_WAY));
        if (place != NULL)
            take_state(message, &place->message);
        else if (is_behind)
            take_state(message, ending);
        else if (message->state == DELIVERY_UNDER_WAY)
            message->state = DELIVERY_WAITING; /* of an earlier life: whether it arrived is not known */
    }
}

/* --- how a try ends --- */

/*
 * The same on every run: spread by what the message is, so that a restart does not make all channels ring together.
 */
static uint64_t spread(const struct message *message)
{
    uint64_t hash = 14695981039346656037u; /* FNV-1a, 64 bits */
    for (const char *byte = message->id; *byte != '\0'; byte++)
        hash = (hash ^ (unsigned char)*byte) * 1099511628211u;
    return (hash ^ (uint64_t)message->tries) * 1099511628211u;
}

static int64_t delay_s(const struct message *message)
{
    int64_t delay = FIRST_DELAY_S;
    for (int32_t try = 1; try < message->tries && delay < LONGEST_DELAY_S; try++)
        delay *= 2;
    if (delay > LONGEST_DELAY_S)
        delay = LONGEST_DELAY_S;
    uint64_t half = (uint64_t)delay / 2;
    return delay - (int64_t)(spread(message) / 65536 % (half + 1));
}

/* Writes the end of a try into the picture, remembers it, and has it saved. `message` may be the picture's own. */
static void settle(struct outbox *outbox, struct message *message)
{
    struct message *in_picture = find_message(outbox->picture, message->entry);
    if (in_picture != NULL && in_picture != message)
        take_state(in_picture, message);
    struct message *ending = &outbox->endings[outbox->ending_count++ % ENDING_COUNT];
    *ending = *message;
    ending->bulletin = NULL;
    if (outbox->settled != NULL)
        outbox->settled(outbox->context, message);
}

static void settle_sent(struct outbox *outbox, struct message *message, int64_t now_utc_s, const char *note)
{
    message->state = DELIVERY_SENT;
    message->settled_utc_s = now_utc_s;
    snprintf(message->note, sizeof message->note, "%.*s", (int)sizeof message->note - 1, note);
    settle(outbox, message);
}

static void settle_given_up(struct outbox *outbox, struct message *message, int64_t now_utc_s, const char *note)
{
    message->state = DELIVERY_GIVEN_UP;
    message->settled_utc_s = now_utc_s;
    snprintf(message->note, sizeof message->note, "%.*s", (int)sizeof message->note - 1, note);
    journal_say(outbox->journal, JOURNAL_ERROR,
                "message #%04lld on channel '%s' is given up after %d tries; nobody was told this way: %s",
                (long long)message->number, channel_name(outbox, message), (int)message->tries, message->note);
    settle(outbox, message);
}

static void settle_failed(struct outbox *outbox, struct message *message, int64_t now_utc_s, const char *note)
{
    if (now_utc_s - message->made_utc_s >= GIVE_UP_AFTER_S) {
        settle_given_up(outbox, message, now_utc_s, note);
        return;
    }
    int64_t wait_s = delay_s(message);
    message->state = DELIVERY_WAITING;
    message->next_try_utc_s = now_utc_s + wait_s;
    snprintf(message->note, sizeof message->note, "%.*s", (int)sizeof message->note - 1, note);
    journal_say(outbox->journal, JOURNAL_WARNING,
                "message #%04lld on channel '%s': try %d failed, next in %lld s: %s", (long long)message->number,
                channel_name(outbox, message), (int)message->tries, (long long)wait_s, message->note);
    settle(outbox, message);
}

static void start_due(struct outbox *outbox, struct picture *picture, int64_t now_utc_s);

static void on_hook_ended(void *context, const struct hook_end *end)
{
    struct place *place = context;
    struct outbox *outbox = place->outbox;
    struct message message = place->message;
    int64_t now_utc_s = world_now(outbox);
    place->hook = NULL;
    if (end->is_passed_on || !end->was_told_to_end)
        outbox->has_failed[message.channel] = !end->is_passed_on;
    if (end->is_passed_on) {
        journal_say(outbox->journal, JOURNAL_INFO, "message #%04lld on channel '%s': passed on at try %d",
                    (long long)message.number, channel_name(outbox, &message), (int)message.tries);
        settle_sent(outbox, &message, now_utc_s, end->note);
    } else if (end->was_told_to_end) { /* we go down: the next life tries at once */
        message.state = DELIVERY_WAITING;
        message.next_try_utc_s = now_utc_s;
        snprintf(message.note, sizeof message.note, "%s", end->note);
        settle(outbox, &message);
    } else {
        settle_failed(outbox, &message, now_utc_s, end->note);
    }
    if (!outbox->is_closing && outbox->picture != NULL)
        start_due(outbox, outbox->picture, now_utc_s);
}

/* --- how a try starts --- */

static void send_to_journal(struct outbox *outbox, struct message *message, int64_t now_utc_s)
{
    journal_say(outbox->journal, JOURNAL_NOTICE, "%s", message->short_text);
    const char *line = message->bulletin != NULL ? message->bulletin : "";
    while (*line != '\0') {
        size_t length = strcspn(line, "\n");
        if (length > 0)
            journal_say(outbox->journal, JOURNAL_INFO, "%.*s", (int)length, line);
        line += length + (line[length] == '\n' ? 1 : 0);
    }
    message->tries++;
    settle_sent(outbox, message, now_utc_s, "written to the journal");
}

enum { VARIABLE_COUNT = 8, VARIABLE_SIZE = 32 + FACT_DIGEST_SIZE + FACT_ID_SIZE };

struct environment {
    char text[VARIABLE_COUNT][VARIABLE_SIZE];
    const char *list[VARIABLE_COUNT + 1];
};

static void fill_environment(const struct settings *settings, const struct message *message,
                             struct environment *environment)
{
    bool has_point = message->point >= 0 && (size_t)message->point < settings->point_count;
    snprintf(environment->text[0], VARIABLE_SIZE, "PATH=/usr/sbin:/usr/bin:/sbin:/bin");
    snprintf(environment->text[1], VARIABLE_SIZE, "FOREWATER_MESSAGE_ID=%s", message->id);
    snprintf(environment->text[2], VARIABLE_SIZE, "FOREWATER_NUMBER=%lld", (long long)message->number);
    snprintf(environment->text[3], VARIABLE_SIZE, "FOREWATER_KIND=%s", message_kind_name(message->kind));
    snprintf(environment->text[4], VARIABLE_SIZE, "FOREWATER_POINT=%s",
             has_point ? settings->points[message->point].id : "");
    snprintf(environment->text[5], VARIABLE_SIZE, "FOREWATER_TRY=%d", (int)message->tries);
    snprintf(environment->text[6], VARIABLE_SIZE, "FOREWATER_LEVEL=%s", advice_level_name(message->level));
    snprintf(environment->text[7], VARIABLE_SIZE, "FOREWATER_WAKES=%d", message->wakes ? 1 : 0);
    for (size_t i = 0; i < VARIABLE_COUNT; i++)
        environment->list[i] = environment->text[i];
    environment->list[VARIABLE_COUNT] = NULL;
}

static enum fw_status start_hook(struct place *place, struct message *message, int64_t now_utc_s,
                                 struct fw_error *error)
{
    struct outbox *outbox = place->outbox;
    const struct settings_channel *channel = &outbox->settings->channels[message->channel];
    struct text json = {0};
    enum fw_status status = message_event_write(outbox->settings, message, now_utc_s, &json);
    if (status != FW_OK)
        return fw_error_set(error, status, "no memory to write the message for the hook");
    char name[128];
    snprintf(name, sizeof name, "hook '%s' #%04lld", channel->id, (long long)message->number);
    struct environment environment;
    /* cppcheck-suppress ctuuninitvar ; it is filled there */
    fill_environment(outbox->settings, message, &environment);
    struct hook_order order = {.name = name,
                               .argv = channel->run,
                               .environment = environment.list,
                               .input = json.bytes,
                               .input_length = json.length};
    status = hook_start(outbox->event, outbox->journal, &order, &outbox->limits, on_hook_ended, place, &place->hook,
                        error);
    text_clear(&json);
    return status;
}

static void send_to_hook(struct place *place, struct message *message, int64_t now_utc_s)
{
    struct fw_error error = {0};
    message->tries++;
    if (start_hook(place, message, now_utc_s, &error) == FW_OK) {
        message->state = DELIVERY_UNDER_WAY;
        place->message = *message;
        place->message.bulletin = NULL;
        return;
    }
    place->hook = NULL;
    place->outbox->has_failed[message->channel] = true;
    settle_failed(place->outbox, message, now_utc_s, error.text);
}

static size_t count_under_way(const struct outbox *outbox, int32_t channel)
{
    size_t count = 0;
    for (size_t i = 0; i < PLACE_COUNT; i++)
        count += outbox->places[i].hook != NULL && outbox->places[i].message.channel == channel;
    return count;
}

static bool has_room(const struct outbox *outbox, int32_t channel)
{
    size_t most = outbox->command_channel_count < 2 ? PLACE_COUNT
                  : outbox->has_failed[channel]     ? 1
                                                    : PLACES_PER_CHANNEL;
    return count_under_way(outbox, channel) < most;
}

static struct place *free_place(struct outbox *outbox)
{
    for (size_t i = 0; i < PLACE_COUNT; i++)
        if (outbox->places[i].hook == NULL)
            return &outbox->places[i];
    return NULL;
}

static void start_message(struct outbox *outbox, struct message *message, int64_t now_utc_s)
{
    const struct settings *settings = outbox->settings;
    if (message->channel < 0 || (size_t)message->channel >= settings->channel_count) {
        settle_given_up(outbox, message, now_utc_s, "the settings have no such channel any more");
        return;
    }
    if (settings->channels[message->channel].is_journal) {
        send_to_journal(outbox, message, now_utc_s);
        return;
    }
    struct place *place = free_place(outbox);
    if (place != NULL && has_room(outbox, message->channel))
        send_to_hook(place, message, now_utc_s);
}

/* A clock that was set back must not put off a try for longer than any wait we give. */
static bool is_due(const struct message *message, int64_t now_utc_s)
{
    return message->next_try_utc_s <= now_utc_s || message->next_try_utc_s - LONGEST_DELAY_S > now_utc_s;
}

/* Oldest first. Each is found anew by its index, since a caller's answer to one may add another. */
static void start_due(struct outbox *outbox, struct picture *picture, int64_t now_utc_s)
{
    bring_up_to_date(outbox, picture);
    for (size_t i = 0; i < picture->outbox_count; i++) {
        struct message *message = &picture->outbox[i];
        if (message->state == DELIVERY_WAITING && is_due(message, now_utc_s))
            start_message(outbox, message, now_utc_s);
    }
}

void outbox_send_due(struct outbox *outbox, struct picture *picture, int64_t now_utc_s)
{
    outbox->last_now_utc_s = now_utc_s;
    start_due(outbox, picture, now_utc_s);
}

/* --- the rest --- */

void outbox_use_picture(struct outbox *outbox, struct picture *picture)
{
    outbox->picture = picture;
    bring_up_to_date(outbox, picture);
}

void outbox_use_clock(struct outbox *outbox, const struct clock *clock)
{
    outbox->clock = clock;
}

void outbox_set_limits(struct outbox *outbox, const struct hook_limits *limits)
{
    outbox->limits = *limits;
}

size_t outbox_under_way(const struct outbox *outbox)
{
    size_t count = 0;
    for (size_t i = 0; i < PLACE_COUNT; i++)
        count += outbox->places[i].hook != NULL;
    return count;
}

int64_t outbox_next_try_utc_s(const struct outbox *outbox, const struct picture *picture)
{
    bool frees_a_place = outbox->picture != NULL && outbox_under_way(outbox) > 0;
    int64_t next = INT64_MAX;
    for (size_t i = 0; i < picture->outbox_count; i++) {
        const struct message *message = &picture->outbox[i];
        bool waits_for_a_place = frees_a_place && message->next_try_utc_s <= outbox->last_now_utc_s;
        if (message->state == DELIVERY_WAITING && !waits_for_a_place && message->next_try_utc_s < next)
            next = message->next_try_utc_s;
    }
    return next;
}

enum fw_status outbox_open(const struct settings *settings, sd_event *event, struct journal *journal,
                           outbox_settled *settled, void *context, struct outbox **outbox_out, struct fw_error *error)
{
    struct outbox *outbox = calloc(1, sizeof *outbox);
    bool *has_failed = calloc(settings->channel_count + 1, sizeof *has_failed);
    if (outbox == NULL || has_failed == NULL) {
        free(outbox);
        free(has_failed);
        return fw_error_set(error, FW_NO_MEMORY, "no memory for the outbox");
    }
    *outbox = (struct outbox){.settings = settings,
                              .event = sd_event_ref(event),
                              .journal = journal,
                              .settled = settled,
                              .context = context,
                              .limits = hook_limits_usual(),
                              .last_now_utc_s = INT64_MIN,
                              .has_failed = has_failed};
    for (size_t i = 0; i < PLACE_COUNT; i++)
        outbox->places[i].outbox = outbox;
    for (size_t i = 0; i < settings->channel_count; i++)
        outbox->command_channel_count += !settings->channels[i].is_journal;
    *outbox_out = outbox;
    return FW_OK;
}

void outbox_close(struct outbox *outbox, int64_t grace_ms)
{
    if (outbox == NULL)
        return;
    outbox->is_closing = true;
    int64_t deadline_ms = clock_machine_ms() + grace_ms;
    for (size_t i = 0; i < PLACE_COUNT; i++)
        if (outbox->places[i].hook != NULL)
            hook_tell_to_end(outbox->places[i].hook);
    for (size_t i = 0; i < PLACE_COUNT; i++)
        if (outbox->places[i].hook != NULL)
            hook_wait(outbox->places[i].hook, deadline_ms);
    sd_event_unref(outbox->event);
    free(outbox->has_failed);
    free(outbox);
}
