/* SPDX-License-Identifier: MIT */
#include "tests/daemon/feed_bench.h"

static void news_copies_what_it_is_given(void **state)
{
    struct bench *bench = *state;
    struct news *news = &bench->news;
    char bytes[] = "time,stage_m\n", from[] = "/drop/x.csv", origin[] = "drop/x.csv";
    struct reading reading = {.gauge = 0, .source = 1, .observed_utc_s = 7, .value = 2.31};
    struct word word = {.kind = WORD_NOTE, .text = "fence down at the ford"};
    for (int i = 0; i < 21; i++) { /* past two growths of each array */
        reading.observed_utc_s = 7 + i;
        assert_int_equal(news_add_reading(news, &reading), FW_OK);
        assert_int_equal(news_add_word(news, &word), FW_OK);
        assert_int_equal(news_add_payload(news, 0, 1, origin, bytes, sizeof bytes - 1), FW_OK);
        assert_int_equal(news_add_receipt(news, from, i % 2 ? "/drop/done/x.csv" : NULL, NULL, bench, 35 + i), FW_OK);
        news_add_note(news, 0, 1, true, "note %d", i);
    }
    memset(bytes, '#', sizeof bytes - 1);
    memset(from, '#', sizeof from - 1);
    reading.value = 0.0;
    assert_int_equal(news->reading_count, 21);
    assert_int_equal(news->readings[20].observed_utc_s, 27);
    assert_true(news->readings[20].value == 2.31);
    assert_string_equal(news->words[20].text, "fence down at the ford");
    assert_string_equal(news->payloads[20].bytes, "time,stage_m\n");
    assert_int_equal(news->payloads[20].length, 13);
    assert_string_equal(news->payloads[20].origin, "drop/x.csv");
    assert_string_equal(news->receipts[20].from, "/drop/x.csv");
    assert_null(news->receipts[20].to);
    assert_string_equal(news->receipts[19].to, "/drop/done/x.csv");
    assert_int_equal(news->receipts[20].position, 55);
    assert_ptr_equal(news->receipts[20].owner, bench);
    assert_string_equal(news->notes[20].text, "note 20");
    assert_true(news->notes[20].is_fault);
}

static void only_readings_and_words_call_for_a_cycle(void **state)
{
    struct bench *bench = *state;
    struct news *news = &bench->news;
    struct reading reading = {.value = 2.31};
    struct word word = {.kind = WORD_ACCEPT};
    assert_true(news_is_empty(news));
    news_add_note(news, 0, 0, false, "answering again");
    assert_int_equal(news_add_receipt(news, "/a", "/b", NULL, bench, 0), FW_OK);
    assert_int_equal(news_add_payload(news, 0, 0, "a", "b", 1), FW_OK);
    assert_true(news_is_empty(news));
    assert_int_equal(news_add_word(news, &word), FW_OK);
    assert_false(news_is_empty(news));
    news_clear(news);
    assert_true(news_is_empty(news));
    assert_int_equal(news->note_count + news->receipt_count + news->payload_count, 0);
    assert_int_equal(news_add_reading(news, &reading), FW_OK);
    assert_false(news_is_empty(news));
}

/* Well-formed and ill-formed sequences of RFC 3629 sections 3 and 4. */
static void notes_are_fit_to_print_whatever_the_feed_wrote(void **state)
{
    struct bench *bench = *state;
    static const struct {
        const char *given, *printed, *shows;
    } cases[] = {
        {"plain 1.30", "plain 1.30", "plain text stays"},
        {"a\nb\tc\x1b[31md\x7f", "a?b?c?[31md?", "control bytes"},
        {"\xC3\xB6 \xE2\x89\xA2 \xF0\xA3\x8E\xB4", "\xC3\xB6 \xE2\x89\xA2 \xF0\xA3\x8E\xB4",
         "two, three and four bytes stay"},
        {"G\xFC\x6E", "G?n", "Latin-1"},
        {"\xC0\xAF", "??", "overlong slash"},
        {"\xE0\x80\xAF", "???", "overlong slash in three bytes"},
        {"\xF0\x82\x82\xAC", "????", "overlong in four bytes"},
        {"\xED\xA0\x80", "???", "half of a surrogate pair"},
        {"\xF4\x90\x80\x80", "????", "beyond the last plane"},
        {"\xF8\x88\x80\x80", "????", "no such lead byte"},
        {"end \xE2\x89", "end ??", "cut within a character"},
    };
    for (size_t i = 0; i < sizeof cases / sizeof cases[0]; i++) {
        news_add_note(&bench->news, 0, 0, true, "%s", cases[i].given);
        if (strcmp(bench->news.notes[i].text, cases[i].printed) != 0)
            fail_msg("%s: '%s'", cases[i].shows, bench->news.notes[i].text);
    }
}

static void a_note_longer_than_its_place_is_cut_and_still_text(void **state)
{
    struct bench *bench = *state;
    char text[700];
    memset(text, 'x', sizeof text);
    memcpy(text + 510, "\xE2\x89\xA2", 3); /* the cut falls within this character */
    text[699] = '\0';
    news_add_note(&bench->news, 0, 0, true, "%s", text);
    assert_int_equal(strlen(bench->news.notes[0].text), sizeof bench->news.notes[0].text - 1);
    assert_string_equal(bench->news.notes[0].text + 509, "x?");
}

static enum fw_status add_a_reading(struct news *news)
{
    return news_add_reading(news, &(struct reading){.value = 2.31});
}

static enum fw_status add_a_word(struct news *news)
{
    return news_add_word(news, &(struct word){.kind = WORD_NOTE});
}

static enum fw_status add_a_payload(struct news *news)
{
    return news_add_payload(news, 0, 0, "x", "x", 1);
}

static enum fw_status add_a_receipt(struct news *news)
{
    return news_add_receipt(news, "/a", "/b", "why", news, 0);
}

static enum fw_status add_a_note(struct news *news) /* has no status: seen by its absence */
{
    news_add_note(news, 0, 0, true, "fault");
    return news->note_count == 0 ? FW_NO_MEMORY : FW_OK;
}

static size_t everything_in(const struct news *news)
{
    return news->reading_count + news->word_count + news->payload_count + news->receipt_count + news->note_count;
}

static void without_memory_nothing_is_added_and_nothing_is_lost(void **state)
{
    static const struct {
        enum fw_status (*add)(struct news *news);
        long allocations;
    } cases[] = {{add_a_reading, 1}, {add_a_word, 1}, {add_a_payload, 2}, {add_a_receipt, 4}, {add_a_note, 1}};
    struct bench *bench = *state;
    struct news *news = &bench->news;
    assert_int_equal(news_add_payload(news, 0, 0, "x", "x", SIZE_MAX), FW_NO_MEMORY);
    for (size_t i = 0; i < sizeof cases / sizeof cases[0]; i++) {
        for (long fail_at = 1; fail_at <= cases[i].allocations; fail_at++) {
            bool can_fail = bench_fail_allocation_at(fail_at);
            enum fw_status status = can_fail ? cases[i].add(news) : FW_NO_MEMORY;
            bench_allocations_succeed();
            assert_int_equal(status, FW_NO_MEMORY);
            assert_int_equal(everything_in(news), 0);
        }
    }
    for (size_t i = 0; i < sizeof cases / sizeof cases[0]; i++)
        assert_int_equal(cases[i].add(news), FW_OK);
    assert_int_equal(everything_in(news), 5);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test_setup_teardown(news_copies_what_it_is_given, bench_set_up, bench_tear_down),
        cmocka_unit_test_setup_teardown(only_readings_and_words_call_for_a_cycle, bench_set_up, bench_tear_down),
        cmocka_unit_test_setup_teardown(notes_are_fit_to_print_whatever_the_feed_wrote, bench_set_up,
                                        bench_tear_down),
        cmocka_unit_test_setup_teardown(a_note_longer_than_its_place_is_cut_and_still_text, bench_set_up,
                                        bench_tear_down),
        cmocka_unit_test_setup_teardown(without_memory_nothing_is_added_and_nothing_is_lost, bench_set_up,
                                        bench_tear_down),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
