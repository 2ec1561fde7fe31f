/* SPDX-License-Identifier: MIT */
/* What goes into the store comes out as it went in, and nothing that was known is ever lost. */
#include "store_scene.h"

static const struct quality_verdict passed = {.flag = QUALITY_PASS, .use = QUALITY_USE, .reasons = 0};
static const struct quality_verdict held = {
    .flag = QUALITY_SUSPECT, .use = QUALITY_HOLD, .reasons = QUALITY_RISE_TOO_FAST | QUALITY_UNCONFIRMED};
static const struct quality_verdict denied = {
    .flag = QUALITY_FAIL, .use = QUALITY_KEEP_OUT, .reasons = QUALITY_RISE_TOO_FAST | QUALITY_DENIED};

static void commit(struct scene *scene, struct store *store, struct step *step)
{
    enum fw_status status = step_commit(step, store, &scene->error);
    if (status != FW_OK)
        print_error("%s\n", scene->error.text);
    assert_int_equal(status, FW_OK);
}

/* Takes the step's picture in place of the one before. */
static void advance(struct step *step, struct picture **picture)
{
    picture_destroy(*picture);
    *picture = step_end(step);
}

static struct picture *load(struct scene *scene, struct store *store, int64_t since_utc_s)
{
    struct picture *picture = scene_picture(scene);
    enum fw_status status = store_load_picture(store, &scene->settings, since_utc_s, picture, &scene->error);
    if (status != FW_OK)
        print_error("%s\n", scene->error.text);
    assert_int_equal(status, FW_OK);
    return picture;
}

static void assert_same_reading(const struct reading *left, const struct reading *right)
{
    assert_int_equal(left->entry, right->entry);
    assert_int_equal(left->gauge, right->gauge);
    assert_int_equal(left->source, right->source);
    assert_int_equal(left->observed_utc_s, right->observed_utc_s);
    assert_memory_equal(&left->value, &right->value, sizeof left->value);
    assert_memory_equal(&left->value_si, &right->value_si, sizeof left->value_si);
    assert_string_equal(left->unit, right->unit);
    assert_int_equal(left->received_utc_s, right->received_utc_s);
    assert_string_equal(left->by, right->by);
}

/* --- opening --- */

static void a_new_store_has_its_marks_and_settings(void **state)
{
    struct scene *scene = *state;
    struct store *store = scene_open(scene, STORE_WRITE);
    assert_int_equal(plain_integer(store->db, "PRAGMA application_id"), STORE_APPLICATION_ID);
    assert_int_equal(plain_integer(store->db, "PRAGMA user_version"), STORE_VERSION);
    assert_int_equal(plain_integer(store->db, "PRAGMA synchronous"), 2);
    assert_int_equal(plain_integer(store->db, "PRAGMA wal_autocheckpoint"), 256);
    assert_int_equal(plain_integer(store->db, "PRAGMA journal_size_limit"), 1048576);
    assert_int_equal(plain_integer(store->db, "PRAGMA auto_vacuum"), 2);
    assert_int_equal(plain_integer(store->db, "PRAGMA foreign_keys"), 1);
    assert_int_equal(plain_integer(store->db, "PRAGMA trusted_schema"), 0);
    assert_int_equal(plain_integer(store->db, "PRAGMA cell_size_check"), 1);
    assert_int_equal(plain_integer(store->db, "SELECT count(*) FROM pragma_journal_mode WHERE journal_mode = 'wal'"),
                     1);
    assert_int_equal(plain_integer(store->db, "SELECT count(*) FROM sqlite_master WHERE type = 'table' "
                                              "AND sql NOT LIKE '%STRICT%'"),
                     0);
    store_close(store);
}

static void the_directory_is_made_when_its_parent_exists(void **state)
{
    struct scene *scene = *state;
    struct store *store = NULL;
    char whole[128];
    memcpy(whole, scene->file, sizeof whole);
    snprintf(scene->file, sizeof scene->file, "%s/new/history.db", scene->directory);
    store_close(scene_open(scene, STORE_WRITE));
    assert_int_equal(access(scene->file, F_OK), 0);
    snprintf(scene->file, sizeof scene->file, "%s/no/such/history.db", scene->directory);
    assert_int_equal(store_open(scene->file, STORE_WRITE, &store, &scene->error), FW_IO);
    assert_non_null(strstr(scene->error.text, "/no/such"));
    memcpy(scene->file, whole, sizeof whole);
}

static void an_empty_store_loads_as_a_first_picture(void **state)
{
    struct scene *scene = *state;
    struct store *store = scene_open(scene, STORE_WRITE);
    struct text text = {0};
    int64_t utc_s = 0;
    char link[FACT_DIGEST_SIZE];
    struct picture *picture = load(scene, store, 0);
    assert_int_equal(picture->next_entry, 1);
    assert_int_equal(picture->next_message_number, 1);
    assert_string_equal(picture->newest_link, "");
    assert_int_equal(picture->away_from_utc_s, 0);
    assert_int_equal(picture->outbox_count, 0);
    assert_int_equal(store_last_settings(store, &text, &scene->error), FW_NOTHING_NEW);
    assert_int_equal(store_payload_at(store, STORE_NOW, &text, &utc_s, link, &scene->error), FW_NOTHING_NEW);
    picture_destroy(picture);
    store_close(store);
}

/* --- round trips --- */

static void readings_come_back_bit_by_bit_with_their_newest_verdict(void **state)
{
    struct scene *scene = *state;
    static const struct reading said[] = {
        {.gauge = SCENE_SCAR,
         .source = 0,
         .observed_utc_s = SCENE_NOW_S,
         .value = 0.1 + 0.2,
         .unit = "m",
         .received_utc_s = SCENE_NOW_S + 61},
        {.gauge = SCENE_SCAR,
         .source = 1,
         .observed_utc_s = SCENE_NOW_S,
         .value = 30.700000000000003,
         .unit = "cm",
         .received_utc_s = SCENE_NOW_S + 62},
        {.gauge = SCENE_SCAR,
         .source = FACT_SOURCE_HAND,
         .observed_utc_s = SCENE_NOW_S,
         .value = -0.75,
         .unit = "m",
         .received_utc_s = SCENE_NOW_S + 63,
         .by = "duty officer"},
        {.gauge = SCENE_MILL,
         .source = 0,
         .observed_utc_s = SCENE_NOW_S + 7,
         .value = 4.9406564584124654e-324,
         .unit = "m3/s",
         .received_utc_s = SCENE_NOW_S + 5},
    };
    enum { COUNT = sizeof said / sizeof said[0] };
    int64_t entries[COUNT];
    struct store *store = scene_open(scene, STORE_WRITE);
    struct picture *picture = scene_picture(scene);
    struct step step;
    step_begin(&step, scene, picture);
    for (size_t index = 0; index < COUNT; index++)
        entries[index] = step_add_reading(&step, said[index]);
    step_add_judgement(&step, entries[0], held);
    step_add_judgement(&step, entries[1], passed);
    step_add_judgement(&step, entries[0], denied);
    step_seal(&step, SCENE_NOW_S + 300, "{}");
    commit(scene, store, &step);
    advance(&step, &picture);

    struct picture *loaded = load(scene, store, SCENE_NOW_S);
    for (size_t index = 0; index < COUNT; index++) {
        struct known_reading *now = scene_known(picture, entries[index]);
        struct known_reading *back = scene_known(loaded, entries[index]);
        assert_same_reading(&back->reading, &now->reading);
        assert_int_equal(back->is_judged, now->is_judged);
        assert_memory_equal(&back->verdict, &now->verdict, sizeof back->verdict);
    }
    assert_memory_equal(&scene_known(loaded, entries[0])->verdict, &denied, sizeof denied);
    assert_false(scene_known(loaded, entries[2])->is_judged);
    assert_int_equal(loaded->next_entry, picture->next_entry);
    assert_string_equal(loaded->newest_link, picture->newest_link);
    assert_int_equal(loaded->away_from_utc_s, SCENE_NOW_S + 300);
    picture_destroy(loaded);
    picture_destroy(picture);
    store_close(store);
}

static void a_revision_is_kept_beside_what_it_corrects(void **state)
{
    struct scene *scene = *state;
    struct store *store = scene_open(scene, STORE_WRITE);
    struct picture *picture = scene_picture(scene);
    assert_int_equal(scene_cycle(scene, store, &picture, SCENE_NOW_S, 1.34), FW_OK);
    assert_int_equal(scene_cycle(scene, store, &picture, SCENE_NOW_S, 1.43), FW_OK);
    assert_int_equal(plain_integer(store->db, "SELECT count(*) FROM reading"), 2);

    struct picture *loaded = load(scene, store, 0);
    assert_int_equal(loaded->gauges[SCENE_SCAR].reading_count, 1);
    assert_float_equal(loaded->gauges[SCENE_SCAR].readings[0].reading.value, 1.43, 0.0);

    struct reading *readings = NULL;
    size_t count = 0;
    assert_int_equal(store_list_readings(store, &scene->settings, SCENE_NOW_S + 120, SCENE_NOW_S + 121, &readings,
                                         &count, &scene->error),
                     FW_OK);
    assert_int_equal(count, 2);
    assert_float_equal(readings[0].value, 1.34, 0.0);
    assert_float_equal(readings[1].value, 1.43, 0.0);
    assert_true(readings[0].entry < readings[1].entry);
    free(readings);
    assert_int_equal(
        store_list_readings(store, &scene->settings, SCENE_NOW_S + 121, INT64_MAX, &readings, &count, &scene->error),
        FW_OK);
    assert_int_equal(count, 0);
    free(readings);
    picture_destroy(loaded);
    picture_destroy(picture);
    store_close(store);
}

static void the_newest_reading_comes_however_old_it_is(void **state)
{
    struct scene *scene = *state;
    struct store *store = scene_open(scene, STORE_WRITE);
    struct picture *picture = scene_picture(scene);
    assert_int_equal(scene_cycle(scene, store, &picture, SCENE_NOW_S - 900, 1.21), FW_OK);
    assert_int_equal(scene_cycle(scene, store, &picture, SCENE_NOW_S, 1.34), FW_OK);
    struct picture *loaded = load(scene, store, SCENE_NOW_S + 86400);
    assert_int_equal(loaded->gauges[SCENE_SCAR].reading_count, 1);
    assert_int_equal(loaded->gauges[SCENE_SCAR].readings[0].reading.observed_utc_s, SCENE_NOW_S);
    picture_destroy(loaded);
    picture_destroy(picture);
    store_close(store);
}

static const struct word said_words[] = {
    {.id = "w-1",
     .kind = WORD_NOTE,
     .value = NAN,
     .text = "Bridge closed for works; \"quoted\", \xc3\xbc",
     .by = "duty officer",
     .at_utc_s = SCENE_NOW_S,
     .received_utc_s = SCENE_NOW_S + 1},
    {.id = "w-2",
     .kind = WORD_READING,
     .subject = "orlin-scar",
     .value = 131.7,
     .unit = "cm",
     .by = "ranger",
     .at_utc_s = SCENE_NOW_S + 2,
     .received_utc_s = SCENE_NOW_S + 3},
    {.id = "w-3",
     .kind = WORD_SEEN,
     .subject = "tallowick-ford",
     .value = 12.5,
     .is_wet = true,
     .by = "crew",
     .at_utc_s = SCENE_NOW_S + 4,
     .received_utc_s = SCENE_NOW_S + 5},
    {.id = "w-4",
     .kind = WORD_SEEN,
     .subject = "marren-causeway",
     .value = NAN,
     .is_wet = false,
     .by = "crew",
     .at_utc_s = SCENE_NOW_S + 6,
     .received_utc_s = SCENE_NOW_S + 7},
    {.id = "w-5",
     .kind = WORD_ROAD,
     .subject = "tallowick-ford",
     .value = NAN,
     .road = ROAD_ONE_SIDE_SHUT,
     .by = "road control",
     .at_utc_s = SCENE_NOW_S + 8,
     .received_utc_s = SCENE_NOW_S + 9},
    {.id = "w-6",
     .kind = WORD_ACCEPT,
     .subject = "412",
     .value = NAN,
     .by = "duty officer",
     .at_utc_s = SCENE_NOW_S + 10,
     .received_utc_s = SCENE_NOW_S + 11},
};
enum { SAID_WORDS = sizeof said_words / sizeof said_words[0] };

static void words_of_every_kind_come_back_as_they_were_said(void **state)
{
    struct scene *scene = *state;
    struct store *store = scene_open(scene, STORE_WRITE);
    struct picture *picture = scene_picture(scene);
    struct step step;
    step_begin(&step, scene, picture);
    for (size_t index = 0; index < SAID_WORDS; index++)
        step_add_word(&step, said_words[index]);
    step_seal(&step, SCENE_NOW_S + 300, "{}");
    commit(scene, store, &step);
    advance(&step, &picture);

    struct word *words = NULL;
    size_t count = 0;
    bool has = false;
    assert_int_equal(store_list_words(store, SCENE_NOW_S, SCENE_NOW_S + 12, &words, &count, &scene->error), FW_OK);
    assert_int_equal(count, SAID_WORDS);
    for (size_t index = 0; index < SAID_WORDS; index++) {
        const struct word *said = &said_words[index];
        assert_int_equal(words[index].entry, (int64_t)index + 1);
        assert_string_equal(words[index].id, said->id);
        assert_int_equal(words[index].kind, said->kind);
        assert_string_equal(words[index].subject, said->subject);
        assert_true(isnan(said->value) ? isnan(words[index].value)
                                       : memcmp(&words[index].value, &said->value, sizeof said->value) == 0);
        assert_string_equal(words[index].unit, said->unit);
        assert_int_equal(words[index].is_wet, said->is_wet);
        assert_int_equal(words[index].road, said->road);
        assert_string_equal(words[index].text, said->text);
        assert_string_equal(words[index].by, said->by);
        assert_int_equal(words[index].at_utc_s, said->at_utc_s);
        assert_int_equal(words[index].received_utc_s, said->received_utc_s);
    }
    free(words);
    assert_int_equal(store_list_words(store, SCENE_NOW_S + 2, SCENE_NOW_S + 7, &words, &count, &scene->error), FW_OK);
    assert_int_equal(count, 2);
    free(words);
    assert_int_equal(store_has_word(store, "w-3", &has, &scene->error), FW_OK);
    assert_true(has);
    assert_int_equal(store_has_word(store, "w-33", &has, &scene->error), FW_OK);
    assert_false(has);
    picture_destroy(picture);
    store_close(store);
}

static struct advice sending(void)
{
    return (struct advice){.level = ADVICE_SEND,
                           .is_blind = true,
                           .near_sides_only = true,
                           .reasons = ADVICE_BY_ACT_BY | ADVICE_BY_TRIGGER,
                           .act_by_utc_s = SCENE_NOW_S + 1800,
                           .since_utc_s = SCENE_NOW_S - 60,
                           .onset_utc_s = SCENE_NOW_S - 3600,
                           .step_down_from_utc_s = SCENE_NOW_S - 30,
                           .told_act_by_utc_s = SCENE_NOW_S + 1700};
}

static struct message message_to(int32_t channel, int64_t number)
{
    struct message message = {.number = number,
                              .kind = MESSAGE_DECISION,
                              .point = SCENE_FORD,
                              .channel = channel,
                              .made_utc_s = SCENE_NOW_S,
                              .wakes = true,
                              .level = ADVICE_SEND,
                              .act_by_utc_s = SCENE_NOW_S + 1234,
                              .deck_earliest_utc_s = SCENE_NOW_S + 5678,
                              .deck_likely_utc_s = SCENE_NOW_S + 6789,
                              .deck_latest_utc_s = PASSAGE_NEVER,
                              .short_text = "VENNMARK ROADS: Tallowick Ford. ACT BY 22:18.",
                              .state = DELIVERY_WAITING,
                              .next_try_utc_s = SCENE_NOW_S};
    char name[64];
    int length = snprintf(name, sizeof name, "%lld/%d", (long long)number, (int)channel);
    assert_int_equal(digest_sha256(name, (size_t)length, message.id), FW_OK);
    return message;
}

static void advice_is_appended_when_a_member_changes_and_comes_back(void **state)
{
    struct scene *scene = *state;
    struct store *store = scene_open(scene, STORE_WRITE);
    struct picture *picture = scene_picture(scene);
    struct step step;
    static const enum advice_level levels[] = {ADVICE_MUSTER,    ADVICE_SEND,      ADVICE_LATE,
                                               ADVICE_KEEP_SHUT, ADVICE_WALK_OVER, ADVICE_QUIET};
    for (size_t index = 0; index < sizeof levels / sizeof levels[0]; index++) {
        step_begin(&step, scene, picture);
        step.delta.next->points[SCENE_FORD].advice = sending();
        step.delta.next->points[SCENE_FORD].advice.level = levels[index];
        step_seal(&step, SCENE_NOW_S + (int64_t)index, "{}");
        commit(scene, store, &step);
        advance(&step, &picture);
        struct picture *loaded = load(scene, store, 0);
        assert_true(store_same_advice(&loaded->points[SCENE_FORD].advice, &picture->points[SCENE_FORD].advice));
        assert_true(
            store_same_advice(&loaded->points[SCENE_CAUSEWAY].advice, &picture->points[SCENE_CAUSEWAY].advice));
        picture_destroy(loaded);
    }
    step_begin(&step, scene, picture);
    step_seal(&step, SCENE_NOW_S + 99, "{}");
    commit(scene, store, &step); /* nothing changed: no row */
    advance(&step, &picture);
    assert_int_equal(plain_integer(store->db, "SELECT count(*) FROM advice"), 6);
    assert_int_equal(plain_integer(store->db, "SELECT count(*) FROM advice WHERE point = 'tallowick-ford'"), 6);

    step_begin(&step, scene, picture); /* never, for both act-bys */
    step.delta.next->points[SCENE_FORD].advice = advice_start();
    step_seal(&step, SCENE_NOW_S + 100, "{}");
    commit(scene, store, &step);
    advance(&step, &picture);
    struct picture *loaded = load(scene, store, 0);
    assert_true(store_same_advice(&loaded->points[SCENE_FORD].advice, &picture->points[SCENE_FORD].advice));
    picture_destroy(loaded);
    picture_destroy(picture);
    store_close(store);
}

static void messages_come_back_until_they_are_settled(void **state)
{
    struct scene *scene = *state;
    struct store *store = scene_open(scene, STORE_WRITE);
    struct picture *picture = scene_picture(scene);
    struct step step;
    step_begin(&step, scene, picture);
    step_add_message(&step, message_to(SCENE_PAGE, 412), "1. Send the crew.\n2. ...\n");
    step_add_message(&step, message_to(SCENE_MAIL, 412), NULL);
    struct message notice = message_to(SCENE_MAIL, 413);
    notice.kind = MESSAGE_NOTICE;
    notice.point = -1;
    step_add_message(&step, notice, "");
    step_seal(&step, SCENE_NOW_S, "{}");
    commit(scene, store, &step);
    advance(&step, &picture);

    struct message *page = &picture->outbox[0];
    page->state = DELIVERY_UNDER_WAY;
    page->tries = 3;
    page->next_try_utc_s = SCENE_NOW_S + 60;
    snprintf(page->note, sizeof page->note, "exit code 75");
    assert_int_equal(store_save_delivery(store, page, &scene->error), FW_OK);
    struct message *mail = &picture->outbox[1];
    mail->state = DELIVERY_SENT;
    mail->tries = 1;
    mail->settled_utc_s = SCENE_NOW_S - 86400;
    assert_int_equal(store_save_delivery(store, mail, &scene->error), FW_OK);

    struct picture *loaded = load(scene, store, 0);
    assert_int_equal(loaded->outbox_count, 2); /* the mail was settled long ago */
    const struct message *back = &loaded->outbox[0];
    assert_int_equal(back->entry, page->entry);
    assert_string_equal(back->id, page->id);
    assert_int_equal(back->number, 412);
    assert_int_equal(back->kind, MESSAGE_DECISION);
    assert_int_equal(back->point, SCENE_FORD);
    assert_int_equal(back->channel, SCENE_PAGE);
    assert_int_equal(back->made_utc_s, SCENE_NOW_S);
    assert_true(back->wakes);
    assert_int_equal(back->level, ADVICE_SEND);
    assert_int_equal(back->act_by_utc_s, SCENE_NOW_S + 1234);
    assert_int_equal(back->deck_earliest_utc_s, SCENE_NOW_S + 5678);
    assert_int_equal(back->deck_likely_utc_s, SCENE_NOW_S + 6789);
    assert_int_equal(back->deck_latest_utc_s, PASSAGE_NEVER);
    assert_string_equal(back->short_text, page->short_text);
    assert_string_equal(back->bulletin, page->bulletin);
    assert_int_equal(back->state, DELIVERY_WAITING); /* whoever sent it is gone */
    assert_int_equal(back->tries, 3);
    assert_int_equal(back->next_try_utc_s, SCENE_NOW_S + 60);
    assert_int_equal(back->settled_utc_s, 0);
    assert_string_equal(back->note, "exit code 75");
    assert_int_equal(loaded->outbox[1].kind, MESSAGE_NOTICE);
    assert_int_equal(loaded->outbox[1].point, -1);
    assert_string_equal(loaded->outbox[1].bulletin, "");
    assert_int_equal(loaded->next_message_number, 414);

    struct message stranger = message_to(SCENE_PAGE, 999);
    stranger.entry = page->entry;
    assert_int_equal(store_save_delivery(store, &stranger, &scene->error), FW_UNAVAILABLE);
    assert_non_null(strstr(scene->error.text, "#0999"));
    picture_destroy(loaded);
    picture_destroy(picture);
    store_close(store);
}

static void facts_people_stated_are_in_force_after_a_restart(void **state)
{
    struct scene *scene = *state;
    struct store *store = scene_open(scene, STORE_WRITE);
    struct picture *picture = scene_picture(scene);
    struct step step;
    step_begin(&step, scene, picture);
    step.delta.next->points[SCENE_FORD].advice = sending();
    step_add_message(&step, message_to(SCENE_PAGE, 412), "b");
    for (size_t index = 0; index < SAID_WORDS; index++)
        step_add_word(&step, said_words[index]);
    struct message *told = &step.delta.next->outbox[0];
    told->state = DELIVERY_SENT;
    told->settled_utc_s = SCENE_NOW_S - 86400; /* settled long ago, but its thread is open */
    step_seal(&step, SCENE_NOW_S + 20, "{}");
    commit(scene, store, &step);
    advance(&step, &picture);
    assert_int_equal(picture->points[SCENE_FORD].accepted_utc_s, SCENE_NOW_S + 10);

    struct picture *loaded = load(scene, store, 0);
    for (size_t index = 0; index < SCENE_POINTS; index++) {
        const struct point_picture *now = &picture->points[index];
        const struct point_picture *back = &loaded->points[index];
        assert_int_equal(back->road.state, now->road.state);
        assert_int_equal(back->road.at_utc_s, now->road.at_utc_s);
        assert_string_equal(back->road.by, now->road.by);
        assert_int_equal(back->water.is_known, now->water.is_known);
        assert_int_equal(back->water.is_wet, now->water.is_wet);
        assert_true(isnan(now->water.depth_cm) ? isnan(back->water.depth_cm)
                                               : back->water.depth_cm == now->water.depth_cm);
        assert_int_equal(back->water.at_utc_s, now->water.at_utc_s);
        assert_int_equal(back->accepted_utc_s, now->accepted_utc_s);
        assert_string_equal(back->accepted_by, now->accepted_by);
        assert_int_equal(back->told_number, now->told_number);
    }
    assert_int_equal(loaded->points[SCENE_FORD].road.state, ROAD_ONE_SIDE_SHUT);
    assert_int_equal(loaded->points[SCENE_FORD].told_number, 412);
    picture_destroy(loaded);
    picture_destroy(picture);
    store_close(store);
}

static void an_acceptance_does_not_reach_a_later_thread(void **state)
{
    struct scene *scene = *state;
    struct store *store = scene_open(scene, STORE_WRITE);
    struct picture *picture = scene_picture(scene);
    struct step step;
    step_begin(&step, scene, picture);
    step_add_message(&step, message_to(SCENE_PAGE, 412), "b");
    step_add_word(&step, said_words[5]);
    struct message later = message_to(SCENE_PAGE, 413);
    later.made_utc_s = SCENE_NOW_S + 7200;
    step_add_message(&step, later, "b");
    step.delta.next->points[SCENE_FORD].advice = sending();
    step.delta.next->points[SCENE_FORD].advice.onset_utc_s = SCENE_NOW_S + 7200;
    step_seal(&step, SCENE_NOW_S + 7200, "{}");
    commit(scene, store, &step);
    advance(&step, &picture);
    struct picture *loaded = load(scene, store, 0);
    assert_int_equal(loaded->points[SCENE_FORD].accepted_utc_s, 0);
    assert_string_equal(loaded->points[SCENE_FORD].accepted_by, "");
    assert_int_equal(loaded->points[SCENE_FORD].told_number, 413);
    picture_destroy(loaded);
    picture_destroy(picture);
    store_close(store);
}

static void a_forecast_is_kept_whole_one_plain_row_a_step(void **state)
{
    struct scene *scene = *state;
    enum { STEPS = 5 };
    struct store *store = scene_open(scene, STORE_WRITE);
    struct picture *picture = scene_picture(scene);
    struct step step;
    step_begin(&step, scene, picture);
    struct forecast *forecast = &step.delta.next->forecast;
    *forecast = (struct forecast){
        .issued_utc_s = SCENE_NOW_S, .start_utc_s = SCENE_NOW_S - 60, .step_s = 300, .step_count = STEPS};
    forecast->low_mm = calloc(SCENE_POINTS * STEPS, sizeof(int32_t));
    forecast->likely_mm = calloc(SCENE_POINTS * STEPS, sizeof(int32_t));
    forecast->high_mm = calloc(SCENE_POINTS * STEPS, sizeof(int32_t));
    for (int32_t index = 0; index < SCENE_POINTS * STEPS; index++) {
        forecast->low_mm[index] = 1000 + index;
        forecast->likely_mm[index] = 2000 + index;
        forecast->high_mm[index] = index == 7 ? -1 : 3000 + index;
    }
    step.delta.keeps_forecast = true;
    step_seal(&step, SCENE_NOW_S, "{}");
    int64_t entry = step.delta.ledger.entry;
    commit(scene, store, &step);
    step.delta.keeps_forecast = false;
    assert_int_equal(plain_integer(store->db, "SELECT entry FROM forecast"), entry);
    assert_int_equal(
        plain_integer(store->db, "SELECT issued - start FROM forecast WHERE step_s = 300 AND step_count = 5"), 60);
    assert_int_equal(plain_integer(store->db, "SELECT count(*) FROM forecast_curve"), SCENE_POINTS * STEPS);
    assert_int_equal(plain_integer(store->db,
                                   "SELECT sum(low_mm = 1000 + step + 5 * (point = 'marren-causeway') AND "
                                   "likely_mm = 1000 + low_mm AND high_mm IS 1000 + likely_mm) FROM forecast_curve"),
                     SCENE_POINTS * STEPS - 1);
    assert_int_equal(plain_integer(store->db,
                                   "SELECT count(*) FROM forecast_curve WHERE high_mm IS NULL AND step = 2 "
                                   "AND point = 'marren-causeway'"),
                     1);
    advance(&step, &picture);
    struct picture *loaded = load(scene, store, 0);
    assert_int_equal(loaded->forecast_kept_utc_s, SCENE_NOW_S);
    picture_destroy(loaded);
    picture_destroy(picture);
    store_close(store);
}

static void add_raw(struct step *step, size_t count, size_t length)
{
    static char bytes[9 * 1024 * 1024];
    step->news.payloads = calloc(count, sizeof *step->news.payloads);
    assert_non_null(step->news.payloads);
    step->news.payload_count = count;
    for (size_t index = 0; index < count; index++)
        step->news.payloads[index] = (struct news_payload){
            .gauge = SCENE_SCAR, .source = 1, .origin = "drop/scar.csv", .bytes = bytes, .length = length};
}

static void raw_payloads_are_kept_and_bounded(void **state)
{
    struct scene *scene = *state;
    struct store *store = scene_open(scene, STORE_WRITE);
    struct picture *picture = scene_picture(scene);
    struct step step;
    static const struct {
        size_t count, length;
        int64_t rows, bytes;
        const char *shows;
    } cases[] = {
        {3, 10, 3, 30, "kept"},
        {198, 10, STORE_RAW_ROWS_MAX, 2000, "no more than 200 rows"},
        {1, 9 * 1024 * 1024, STORE_RAW_ROWS_MAX, 1990 + 9 * 1024 * 1024, "the oldest row made room"},
        {1, 9 * 1024 * 1024, 1, 9 * 1024 * 1024, "no more than 16 MiB"},
        {1, 0, 2, 9 * 1024 * 1024, "an empty payload is one too"},
    };
    for (size_t index = 0; index < sizeof cases / sizeof cases[0]; index++) {
        step_begin(&step, scene, picture);
        add_raw(&step, cases[index].count, cases[index].length);
        step_seal(&step, SCENE_NOW_S + (int64_t)index, "{}");
        commit(scene, store, &step);
        advance(&step, &picture);
        if (plain_integer(store->db, "SELECT count(*) FROM raw_payload") != cases[index].rows ||
            plain_integer(store->db, "SELECT sum(length(bytes)) FROM raw_payload") != cases[index].bytes)
            fail_msg("%s", cases[index].shows);
    }
    assert_int_equal(plain_integer(store->db,
                                   "SELECT count(*) FROM raw_payload WHERE gauge = 'orlin-scar' AND source = '1' "
                                   "AND origin = 'drop/scar.csv'"),
                     2);
    picture_destroy(picture);
    store_close(store);
}

static void settings_that_worked_are_kept_and_the_newest_comes_back(void **state)
{
    struct scene *scene = *state;
    struct store *store = scene_open(scene, STORE_WRITE);
    struct settings other = scene->settings;
    struct text text = {0};
    other.text = "{ \"other\": 1 }";
    other.text_length = strlen(other.text);
    assert_int_equal(digest_sha256(other.text, other.text_length, other.digest), FW_OK);
    const struct settings *turns[] = {&scene->settings, &other, &other, &scene->settings};
    for (size_t index = 0; index < 4; index++) {
        assert_int_equal(store_keep_settings(store, turns[index], SCENE_NOW_S + (int64_t)index, &scene->error),
                         FW_OK);
        assert_int_equal(store_last_settings(store, &text, &scene->error), FW_OK);
        assert_int_equal(text.length, turns[index]->text_length);
        assert_memory_equal(text.bytes, turns[index]->text, text.length);
        text_clear(&text);
    }
    assert_int_equal(plain_integer(store->db, "SELECT count(*) FROM settings"), 2);
    assert_int_equal(plain_integer(store->db, "SELECT first_used FROM settings ORDER BY turn DESC LIMIT 1"),
                     SCENE_NOW_S);
    store_close(store);
}

static void the_newest_picture_comes_back_byte_for_byte(void **state)
{
    struct scene *scene = *state;
    struct store *store = scene_open(scene, STORE_WRITE);
    struct picture *picture = scene_picture(scene);
    struct text json = {0};
    int64_t utc_s = 0;
    char link[FACT_DIGEST_SIZE];
    static const char *const payloads[] = {"{\"as_of\":1}", "{\"name\":\"Ildra \xc3\xb6\",\"x\":2.5}"};
    for (size_t index = 0; index < 2; index++) {
        struct step step;
        step_begin(&step, scene, picture);
        step_seal(&step, SCENE_NOW_S + (int64_t)index, payloads[index]);
        commit(scene, store, &step);
        advance(&step, &picture);
        assert_int_equal(store_payload_at(store, STORE_NOW, &json, &utc_s, link, &scene->error), FW_OK);
        assert_string_equal(json.bytes, payloads[index]);
        assert_int_equal(utc_s, SCENE_NOW_S + (int64_t)index);
        assert_string_equal(link, picture->newest_link);
        text_clear(&json);
    }
    picture_destroy(picture);
    store_close(store);
}

static void ids_the_settings_do_not_know_are_passed_over(void **state)
{
    struct scene *scene = *state;
    struct store *store = scene_open(scene, STORE_WRITE);
    struct picture *picture = scene_picture(scene);
    struct step step;
    step_begin(&step, scene, picture);
    static const struct reading said[] = {
        {.gauge = SCENE_SCAR, .source = 0, .observed_utc_s = SCENE_NOW_S, .value = 1.5, .unit = "m"},
        {.gauge = SCENE_SCAR, .source = 1, .observed_utc_s = SCENE_NOW_S, .value = 1.6, .unit = "m"},
        {.gauge = SCENE_MILL, .source = 0, .observed_utc_s = SCENE_NOW_S, .value = 3.5, .unit = "m3/s"},
    };
    for (size_t index = 0; index < 3; index++)
        step_add_reading(&step, said[index]);
    step.delta.next->points[SCENE_CAUSEWAY].advice = sending();
    struct message message = message_to(SCENE_MAIL, 1);
    step_add_message(&step, message, "b");
    message = message_to(SCENE_PAGE, 2);
    message.point = SCENE_CAUSEWAY;
    step_add_message(&step, message, "b");
    step_add_word(&step, said_words[3]);
    step_seal(&step, SCENE_NOW_S, "{}");
    commit(scene, store, &step);
    advance(&step, &picture);
    picture_destroy(picture);

    struct scene fewer = *scene;
    fewer.gauges[SCENE_SCAR].feed_count = 1;
    fewer.settings.gauges = fewer.gauges;
    fewer.settings.gauge_count = 1;
    fewer.settings.point_count = 1;
    fewer.settings.channel_count = 1;
    struct picture *loaded = load(&fewer, store, 0);
    assert_int_equal(loaded->gauges[SCENE_SCAR].reading_count, 1);
    assert_float_equal(loaded->gauges[SCENE_SCAR].readings[0].reading.value, 1.5, 0.0);
    assert_int_equal(loaded->outbox_count, 0);
    assert_int_equal(loaded->next_message_number, 3);
    picture_destroy(loaded);
    fewer.gauges[SCENE_SCAR].measures = SETTINGS_DISCHARGE; /* metres do not measure this */
    loaded = load(&fewer, store, 0);
    assert_int_equal(loaded->gauges[SCENE_SCAR].reading_count, 0);
    picture_destroy(loaded);
    store_close(store);
}

static void numbers_go_on_after_a_restart(void **state)
{
    struct scene *scene = *state;
    struct store *store = scene_open(scene, STORE_WRITE);
    struct picture *picture = scene_picture(scene);
    assert_int_equal(scene_cycle(scene, store, &picture, SCENE_NOW_S, 1.0), FW_OK);
    store_close(store);
    store = scene_open(scene, STORE_WRITE);
    struct picture *loaded = load(scene, store, 0);
    assert_int_equal(loaded->next_entry, picture->next_entry);
    assert_int_equal(scene_cycle(scene, store, &loaded, SCENE_NOW_S + 300, 1.1), FW_OK);
    size_t count = 0;
    assert_int_equal(store_check_ledger(store, &count, &scene->error), FW_OK);
    assert_int_equal(count, 2);
    picture_destroy(loaded);
    picture_destroy(picture);
    store_close(store);
}

#define WITH_SCENE(test) cmocka_unit_test_setup_teardown(test, scene_set_up, scene_tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        WITH_SCENE(a_new_store_has_its_marks_and_settings),
        WITH_SCENE(the_directory_is_made_when_its_parent_exists),
        WITH_SCENE(an_empty_store_loads_as_a_first_picture),
        WITH_SCENE(readings_come_back_bit_by_bit_with_their_newest_verdict),
        WITH_SCENE(a_revision_is_kept_beside_what_it_corrects),
        WITH_SCENE(the_newest_reading_comes_however_old_it_is),
        WITH_SCENE(words_of_every_kind_come_back_as_they_were_said),
        WITH_SCENE(advice_is_appended_when_a_member_changes_and_comes_back),
        WITH_SCENE(messages_come_back_until_they_are_settled),
        WITH_SCENE(facts_people_stated_are_in_force_after_a_restart),
        WITH_SCENE(an_acceptance_does_not_reach_a_later_thread),
        WITH_SCENE(a_forecast_is_kept_whole_one_plain_row_a_step),
        WITH_SCENE(raw_payloads_are_kept_and_bounded),
        WITH_SCENE(settings_that_worked_are_kept_and_the_newest_comes_back),
        WITH_SCENE(the_newest_picture_comes_back_byte_for_byte),
        WITH_SCENE(ids_the_settings_do_not_know_are_passed_over),
        WITH_SCENE(numbers_go_on_after_a_restart),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
