/* SPDX-License-Identifier: MIT */
#include "daemon/feed/inbox.h"

#include <math.h>
#include <poll.h>

#include "tests/daemon/feed_bench.h"

#define NOW_UTC_S (BENCH_FIRST_UTC_S + 50 * 60) /* 22:05 UTC, 23:05 in the district */

/* --- the command line --- */

enum { ARGUMENTS_LIMIT = 16 };

/* Splits at '|', so that arguments with blanks can be written in a table. */
static enum fw_status parse(struct bench *bench, const char *line, struct word *word_out)
{
    static char copy[2048];
    char *arguments[ARGUMENTS_LIMIT];
    int count = 0;
    snprintf(copy, sizeof copy, "%s", line);
    for (char *at = copy; at != NULL && *line != '\0' && count < ARGUMENTS_LIMIT;) {
        char *end = strchr(at, '|');
        if (end != NULL)
            *end++ = '\0';
        arguments[count++] = at;
        at = end;
    }
    bench->error = (struct fw_error){0};
    return word_parse(&bench->settings, count, arguments, NOW_UTC_S, word_out, &bench->error);
}

static void words_are_read_from_a_command_line_and_told_in_a_line(void **state)
{
    struct bench *bench = *state;
    static const struct {
        const char *said, *line;
        enum word_kind kind;
        const char *subject;
    } cases[] = {
        {"road|tallowick-ford|crew called|--by|roads foreman|--at|23:05",
         "road tallowick-ford CREW CALLED (roads foreman, 23:05)", WORD_ROAD, "tallowick-ford"},
        {"road|tallowick-ford|CREW|CALLED|--by|roads foreman",
         "road tallowick-ford CREW CALLED (roads foreman, 23:05)", WORD_ROAD, "tallowick-ford"},
        {"road|tallowick-ford|one_side-shut|--by=crew lead", "road tallowick-ford ONE SIDE SHUT (crew lead, 23:05)",
         WORD_ROAD, "tallowick-ford"},
        {"--by|crew lead|road|marren-causeway|shut|--both-sides|--at|2031-02-14T22:57:30+01:00",
         "road marren-causeway SHUT (crew lead, 22:57)", WORD_ROAD, "marren-causeway"},
        {"road|marren-causeway|handed back|--by|roads foreman",
         "road marren-causeway HANDED BACK (roads foreman, 23:05)", WORD_ROAD, "marren-causeway"},
        {"accept|#0412|--by|duty officer", "accept #0412 (duty officer, 23:05)", WORD_ACCEPT, "412"},
        {"accept|412|--by|duty officer", "accept #0412 (duty officer, 23:05)", WORD_ACCEPT, "412"},
        {"accept|--by|duty officer", "accept (duty officer, 23:05)", WORD_ACCEPT, ""},
        {"reading|orlin-scar|2.9|--by|catchment technician|--at|2031-02-14 03:35",
         "reading orlin-scar 2.90 m (catchment technician, 03:35)", WORD_READING, "orlin-scar"},
        {"reading|orlin-scar|-0.035|--by|catchment technician",
         "reading orlin-scar -0.035 m (catchment technician, 23:05)", WORD_READING, "orlin-scar"},
        {"reading|orlin-scar|290.5|--unit|cm|--by|catchment technician",
         "reading orlin-scar 290.5 cm (catchment technician, 23:05)", WORD_READING, "orlin-scar"},
        {"reading|sethick-beck|3.47|--by|catchment technician",
         "reading sethick-beck 3.47 m3/s (catchment technician, 23:05)", WORD_READING, "sethick-beck"},
        {"seen|tallowick-ford|dry|--by|crew lead", "seen tallowick-ford dry (crew lead, 23:05)", WORD_SEEN,
         "tallowick-ford"},
        {"seen|tallowick-ford|wet|--by|crew lead", "seen tallowick-ford wet (crew lead, 23:05)", WORD_SEEN,
         "tallowick-ford"},
        {"seen|tallowick-ford|wet|4|--by|crew lead", "seen tallowick-ford wet 4 cm (crew lead, 23:05)", WORD_SEEN,
         "tallowick-ford"},
        {"note|fence|down|at|the ford|--by|crew lead", "note 'fence down at the ford' (crew lead, 23:05)", WORD_NOTE,
         ""},
        {"note|--by|crew lead|--|--both|barriers", "note '--both barriers' (crew lead, 23:05)", WORD_NOTE, ""},
    };
    for (size_t i = 0; i < sizeof cases / sizeof cases[0]; i++) {
        struct word word = {0};
        char line[FACT_WORD_LINE_SIZE];
        if (parse(bench, cases[i].said, &word) != FW_OK)
            fail_msg("%s: %s", cases[i].said, bench->error.text);
        word_line(&bench->settings, &word, line);
        assert_string_equal(line, cases[i].line);
        assert_string_equal(word.subject, cases[i].subject);
        assert_int_equal(word.kind, cases[i].kind);
        assert_string_equal(word.id, "");
    }
}

static void a_word_carries_its_facts(void **state)
{
    struct bench *bench = *state;
    struct word word = {0};
    assert_int_equal(
        parse(bench, "reading|orlin-scar|2.9|--by|catchment technician|--at|2031-02-14T21:15:00Z", &word), FW_OK);
    assert_true(word.value == 2.9);
    assert_string_equal(word.unit, "m");
    assert_string_equal(word.by, "catchment technician");
    assert_int_equal(word.at_utc_s, BENCH_FIRST_UTC_S);
    assert_int_equal(parse(bench, "seen|tallowick-ford|wet|--by|crew lead", &word), FW_OK);
    assert_true(word.is_wet && isnan(word.value));
    assert_int_equal(word.at_utc_s, NOW_UTC_S);
    assert_int_equal(parse(bench, "seen|tallowick-ford|wet|4.5|--by|crew lead", &word), FW_OK);
    assert_true(word.is_wet && word.value == 4.5);
    assert_string_equal(word.unit, "cm");
    assert_int_equal(parse(bench, "seen|tallowick-ford|dry|--by|crew lead", &word), FW_OK);
    assert_false(word.is_wet);
    assert_int_equal(parse(bench, "road|tallowick-ford|shut|--both-sides|--by|crew lead", &word), FW_OK);
    assert_int_equal(word.road, ROAD_SHUT);
    assert_int_equal(parse(bench, "note|two|words|--by|crew lead", &word), FW_OK);
    assert_string_equal(word.text, "two words");
}

/* 23:06 has not been today: it was yesterday's. The repeated hour is resolved by the zone (tests of `when`). */
static void a_clock_time_is_the_last_one_that_has_been(void **state)
{
    struct bench *bench = *state;
    struct word word = {0};
    assert_int_equal(parse(bench, "accept|--by|duty officer|--at|23:05", &word), FW_OK);
    assert_int_equal(word.at_utc_s, NOW_UTC_S);
    assert_int_equal(parse(bench, "accept|--by|duty officer|--at|23:06", &word), FW_OK);
    assert_int_equal(word.at_utc_s, NOW_UTC_S + 60 - 86400);
    assert_int_equal(parse(bench, "accept|--by|duty officer|--at|00:10", &word), FW_OK);
    assert_int_equal(word.at_utc_s, BENCH_FIRST_UTC_S + 50 * 60 - (22 * 60 + 55) * 60);
}

static void what_cannot_be_read_is_refused_with_what_was_expected(void **state)
{
    struct bench *bench = *state;
    static const struct {
        const char *said, *expected;
    } cases[] = {
        {"", "cannot be said; expected accept, reading, seen, road or note"},
        {"shut|tallowick-ford|--by|x", "'shut' cannot be said"},
        {"accept", "--by is missing; expected a role"},
        {"accept|--by", "--by needs a value"},
        {"accept|--by=", "--by= needs a value"},
        {"accept|--by|x|--loud", "unknown option --loud; expected --by, --at, --unit or --both-sides"},
        {"accept|1|2|--by|x", "expected: say accept [NUMBER] --by ROLE [--at TIME]"},
        {"accept|four|--by|x", "'four' is not the number of a message; expected one as #0412"},
        {"accept|--unit|m|--by|x", "--unit goes with a reading"},
        {"accept|--both-sides|--by|x", "--both-sides goes with a road that is SHUT"},
        {"accept|--by|x|--at|tomorrow", "--at: 'tomorrow' is not a time"},
        {"accept|--by|x|--at|25:10", "or a clock time as 22:05"},
        {"accept|--by|x|--at|2031-02-14T22:10:01Z", "has not been yet"},
        {"accept|--by|a\nb", "expected a role"},
        {"reading|orlin-scar|--by|x", "expected: say reading GAUGE VALUE [--unit U]"},
        {"reading|orlin-scar|2,9|--by|x", "'2,9' is not a number with a decimal point, as 2.31"},
        {"reading|orlin-scar|inf|--by|x", "'inf' is not a number"},
        {"reading|orlin|2.9|--by|x", "'orlin' is not a gauge; expected one of: orlin-scar, sethick-beck"},
        {"reading|orlin-scar|2.9|--unit|l/s|--by|x",
         "'l/s' is not a unit of gauge 'orlin-scar'; expected m, cm, mm or ft"},
        {"reading|orlin-scar|2.9|--unit|furlongs-long|--by|x", "the unit has 13 bytes"},
        {"seen|tallowick-ford|--by|x", "expected: say seen POINT dry, or: say seen POINT wet [CM]"},
        {"seen|tallowick-ford|damp|--by|x", "expected: say seen POINT dry"},
        {"seen|tallowick-ford|dry|4|--by|x", "expected: say seen POINT dry"},
        {"seen|tallowick-ford|wet|deep|--by|x", "'deep' is not a depth in cm"},
        {"seen|tallowick-ford|wet|-4|--by|x", "-4 cm of water; expected 0 to 2000"},
        {"seen|tallowick-ford|wet|2001|--by|x", "2001 cm of water"},
        {"seen|ford|dry|--by|x", "'ford' is not a point; expected one of: tallowick-ford, marren-causeway"},
        {"road|tallowick-ford|--by|x", "expected: say road POINT STATE"},
        {"road|tallowick-ford|closed|--by|x",
         "'closed' is not a state of a road; expected one of: OPEN, CREW CALLED"},
        {"road|tallowick-ford|shut|--by|x",
         "SHUT means that both sides are shut: add --both-sides, or say ONE SIDE SHUT"},
        {"road|tallowick-ford|open|--both-sides|--by|x", "--both-sides goes with SHUT, not with OPEN"},
        {"road|ford|open|--by|x", "'ford' is not a point"},
        {"note|--by|x", "a note needs a text"},
        {"note|a\x07|--by|x", "without control characters"},
    };
    for (size_t i = 0; i < sizeof cases / sizeof cases[0]; i++) {
        struct word word = {.entry = 77};
        enum fw_status status = parse(bench, cases[i].said, &word);
        if (status != FW_USAGE || bench->error.status != FW_USAGE ||
            strstr(bench->error.text, cases[i].expected) == NULL)
            fail_msg("%s: status %d, '%s' does not say '%s'", cases[i].said, (int)status, bench->error.text,
                     cases[i].expected);
        assert_int_equal(word.entry, 77);
    }
}

static void texts_that_are_too_long_are_refused_not_cut(void **state)
{
    struct bench *bench = *state;
    struct word word;
    char said[1200];
    static const struct {
        const char *before, *after, *expected;
        int size;
    } cases[] = {
        {"note|", "|--by|x", "the note has 400 bytes; expected at most 399", 400},
        {"accept|--by|", "", "the role has 64 bytes; expected at most 63", 64},
        {"accept|", "|--by|x", "the number has 64 bytes", 64},
        {"road|", "|open|--by|x", "the point has 64 bytes", 64},
        {"seen|", "|dry|--by|x", "the point has 64 bytes", 64},
        {"reading|", "|1|--by|x", "the gauge has 64 bytes", 64},
    };
    for (size_t i = 0; i < sizeof cases / sizeof cases[0]; i++) {
        char filling[401];
        memset(filling, 'x', sizeof filling);
        filling[cases[i].size] = '\0';
        snprintf(said, sizeof said, "%s%s%s", cases[i].before, filling, cases[i].after);
        assert_int_equal(parse(bench, said, &word), FW_USAGE);
        if (strstr(bench->error.text, cases[i].expected) == NULL)
            fail_msg("'%s' does not say '%s'", bench->error.text, cases[i].expected);
    }
}

/* --- the inbox --- */

static struct inbox *open_inbox(struct bench *bench)
{
    struct inbox *inbox = NULL;
    if (inbox_open(&bench->settings, &inbox, &bench->error) != FW_OK)
        fail_msg("%s", bench->error.text);
    return inbox;
}

static void scan(struct bench *bench, struct inbox *inbox)
{
    if (inbox_scan(inbox, BENCH_RECEIVED_UTC_S, &bench->news, &bench->error) != FW_OK)
        fail_msg("%s", bench->error.text);
}

static void settle(struct bench *bench, struct inbox *inbox, bool was_stored)
{
    if (inbox_settle(inbox, &bench->news, was_stored, &bench->error) != FW_OK)
        fail_msg("%s", bench->error.text);
    news_clear(&bench->news);
}

static void hand_in(struct bench *bench, struct word *word, bool has_time)
{
    if (inbox_hand_in(&bench->settings, word, has_time, &bench->error) != FW_OK)
        fail_msg("%s", bench->error.text);
}

static void a_word_handed_in_arrives_whole(void **state)
{
    struct bench *bench = *state;
    static const char *const said[] = {
        "accept|#0412|--by|duty officer",
        "reading|orlin-scar|2.905|--by|catchment technician|--at|2031-02-14T21:15:00Z",
        "reading|sethick-beck|0.1|--unit|l/s|--by|catchment technician",
        "seen|tallowick-ford|dry|--by|crew lead",
        "seen|tallowick-ford|wet|--by|crew lead",
        "seen|tallowick-ford|wet|4|--by|crew lead",
        "road|marren-causeway|shut|--both-sides|--by|crew lead",
        "road|marren-causeway|walk-over|--by|crew lead",
        "note|\"fence\" down \\ at the f\xC3\xB6rd|--by|crew lead",
    };
    struct inbox *inbox = open_inbox(bench);
    for (size_t i = 0; i < sizeof said / sizeof said[0]; i++) {
        struct word word = {0};
        char sent[FACT_WORD_LINE_SIZE], arrived[FACT_WORD_LINE_SIZE];
        assert_int_equal(parse(bench, said[i], &word), FW_OK);
        hand_in(bench, &word, true);
        assert_int_equal(strlen(word.id), 32); /* 128 bits in hex */
        scan(bench, inbox);
        if (bench->news.word_count != 1)
            fail_msg("%s: %s", said[i], bench->news.note_count > 0 ? bench->news.notes[0].text : "nothing");
        const struct word *got = &bench->news.words[0];
        word_line(&bench->settings, &word, sent);
        word_line(&bench->settings, got, arrived);
        assert_string_equal(arrived, sent);
        assert_string_equal(got->id, word.id);
        assert_true(got->value == word.value || (isnan(got->value) && isnan(word.value)));
        assert_int_equal(got->at_utc_s, word.at_utc_s);
        assert_int_equal(got->received_utc_s, BENCH_RECEIVED_UTC_S);
        assert_int_equal(got->road, word.road);
        settle(bench, inbox, true);
        assert_int_equal(bench_count_files(bench, "inbox"), 0);
    }
    inbox_close(inbox);
}

static void a_word_without_a_time_is_stamped_when_it_is_received(void **state)
{
    struct bench *bench = *state;
    struct inbox *inbox = open_inbox(bench);
    struct word word;
    assert_int_equal(parse(bench, "seen|tallowick-ford|dry|--by|crew lead", &word), FW_OK);
    hand_in(bench, &word, false);
    scan(bench, inbox);
    assert_int_equal(bench->news.words[0].at_utc_s, BENCH_RECEIVED_UTC_S);
    inbox_close(inbox);
}

static void ids_differ_and_an_id_given_is_kept(void **state)
{
    struct bench *bench = *state;
    struct word one, other;
    assert_int_equal(parse(bench, "accept|--by|duty officer", &one), FW_OK);
    other = one;
    hand_in(bench, &one, true);
    hand_in(bench, &other, true);
    assert_string_not_equal(one.id, other.id);
    snprintf(other.id, sizeof other.id, "phone-0007");
    hand_in(bench, &other, true);
    assert_true(bench_exists(bench, "inbox/phone-0007.word"));
    assert_int_equal(bench_count_files(bench, "inbox"), 3);
}

static void a_word_is_taken_once_and_not_stored_again_only_after_a_restart(void **state)
{
    struct bench *bench = *state;
    struct inbox *inbox = open_inbox(bench);
    struct word word;
    assert_int_equal(parse(bench, "accept|--by|duty officer", &word), FW_OK);
    hand_in(bench, &word, true);
    scan(bench, inbox);
    scan(bench, inbox);
    assert_int_equal(bench->news.word_count, 1);
    settle(bench, inbox, false);
    scan(bench, inbox);
    assert_int_equal(bench->news.word_count, 0);
    inbox_close(inbox);
    inbox = open_inbox(bench);
    scan(bench, inbox);
    assert_int_equal(bench->news.word_count, 1);
    settle(bench, inbox, true);
    assert_int_equal(bench_count_files(bench, "inbox"), 0);
    inbox_close(inbox);
}

static void the_inbox_wakes_its_reader(void **state)
{
    struct bench *bench = *state;
    struct inbox *inbox = open_inbox(bench);
    struct word word;
    struct pollfd watch = {.fd = inbox_watch_fd(inbox), .events = POLLIN};
    if (watch.fd < 0)
        skip();
    assert_int_equal(poll(&watch, 1, 0), 0);
    assert_int_equal(parse(bench, "accept|--by|duty officer", &word), FW_OK);
    hand_in(bench, &word, true);
    assert_int_equal(poll(&watch, 1, 1000), 1);
    scan(bench, inbox);
    assert_int_equal(poll(&watch, 1, 0), 0);
    inbox_close(inbox);
    inbox_close(NULL);
}

static void a_file_that_cannot_be_read_moves_to_bad_with_its_reason(void **state)
{
    struct bench *bench = *state;
    static const struct {
        const char *text, *reason;
    } cases[] = {
        {"", "not JSON at byte 1 of 0"},
        {"{\"id\":\"w\"", "not JSON at byte 10"},
        {"[]", "expected one JSON object"},
        {"{}", "id is missing"},
        {"{\"id\":\"\",\"kind\":\"accept\",\"by\":\"x\"}", "id: is empty"},
        {"{\"id\":\"w\",\"by\":\"x\"}", "kind is missing"},
        {"{\"id\":\"w\",\"kind\":\"accept\"}", "by is missing"},
        {"{\"id\":\"w\",\"kind\":\"accept\",\"by\":\"\"}", "expected a role"},
        {"{\"id\":\"w\",\"kind\":\"accept\",\"by\":\"a\\nb\"}", "expected a role"},
        {"{\"id\":\"other\",\"kind\":\"accept\",\"by\":\"x\"}",
         "id 'other' is not the name of its file; expected other.word"},
        {"{\"id\":\"../w\",\"kind\":\"accept\",\"by\":\"x\"}", "id '../w'; expected letters, digits, '-' and '_'"},
        {"{\"id\":\"w\",\"kind\":\"shout\",\"by\":\"x\"}", "kind: expected accept, reading, seen, road or note"},
        {"{\"id\":\"w\",\"kind\":7,\"by\":\"x\"}", "kind: expected accept"},
        {"{\"id\":\"w\",\"kind\":\"road\",\"by\":\"x\",\"subject\":\"tallowick-ford\"}",
         "road is missing, which 'road' needs"},
        {"{\"id\":\"w\",\"kind\":\"road\",\"by\":\"x\",\"subject\":\"tallowick-ford\",\"road\":\"closed\"}",
         "road: expected a state, as CREW CALLED"},
        {"{\"id\":\"w\",\"kind\":\"seen\",\"by\":\"x\",\"subject\":\"tallowick-ford\"}",
         "wet is missing, which 'seen' needs"},
        {"{\"id\":\"w\",\"kind\":\"seen\",\"by\":\"x\",\"subject\":\"tallowick-ford\",\"wet\":1}",
         "wet: expected true or false"},
        {"{\"id\":\"w\",\"kind\":\"seen\",\"by\":\"x\",\"subject\":\"nowhere\",\"wet\":true}",
         "'nowhere' is not a point"},
        {"{\"id\":\"w\",\"kind\":\"reading\",\"by\":\"x\",\"subject\":\"orlin-scar\",\"unit\":\"m\"}",
         "value is missing"},
        {"{\"id\":\"w\",\"kind\":\"reading\",\"by\":\"x\",\"subject\":\"orlin-scar\",\"unit\":\"m\",\"value\":\"2\"}",
         "value: expected a number"},
        {"{\"id\":\"w\",\"kind\":\"reading\",\"by\":\"x\",\"subject\":\"orlin-scar\",\"unit\":\"m\",\"value\":1e999}",
         "a reading of 'orlin-scar' needs a number"},
        {"{\"id\":\"w\",\"kind\":\"reading\",\"by\":\"x\",\"subject\":\"orlin-scar\",\"value\":2}",
         "'' is not a unit"},
        {"{\"id\":\"w\",\"kind\":\"note\",\"by\":\"x\"}", "text is missing"},
        {"{\"id\":\"w\",\"kind\":\"note\",\"by\":\"x\",\"text\":\"\"}", "a note needs a text"},
        {"{\"id\":\"w\",\"kind\":\"accept\",\"by\":\"x\",\"at\":5}", "at: expected a time as text"},
        {"{\"id\":\"w\",\"kind\":\"accept\",\"by\":\"x\",\"at\":\"noon\"}", "at: 'noon' is not a time"},
        {"{\"id\":\"w\",\"kind\":\"accept\",\"by\":\"x\",\"at\":\"1969-12-31T23:59:59Z\"}",
         "outside the years 1970 to 9999"},
        {"{\"id\":\"w\",\"kind\":\"accept\",\"by\":\"x\",\"colour\":\"red\"}", "unknown key 'colour'"},
        {"{\"id\":\"w\",\"kind\":\"accept\",\"by\":\"x\",\"subject\":{}}",
         "subject: expected a text of at most 63 bytes"},
    };
    struct inbox *inbox = open_inbox(bench);
    for (size_t i = 0; i < sizeof cases / sizeof cases[0]; i++) {
        bench_write(bench, "inbox/w.word", cases[i].text);
        scan(bench, inbox);
        if (bench->news.word_count != 0)
            fail_msg("taken: %s", cases[i].text);
        bench_expect_note(&bench->news, cases[i].reason);
        bench_expect_note(&bench->news, "inbox: w.word: ");
        settle(bench, inbox, true);
        assert_int_equal(bench_count_files(bench, "inbox"), 0);
        assert_true(bench_exists(bench, "inbox/bad/w.word"));
        assert_non_null(strstr(bench_text(bench, "inbox/bad/w.word.reason", NULL), cases[i].reason));
        assert_int_equal(unlink(bench_path(bench, "inbox/bad/w.word")), 0);
        assert_int_equal(unlink(bench_path(bench, "inbox/bad/w.word.reason")), 0);
    }
    inbox_close(inbox);
}

static void a_file_named_for_more_than_its_id_is_refused(void **state)
{
    struct bench *bench = *state;
    struct inbox *inbox = open_inbox(bench);
    bench_write(bench, "inbox/word-2.word", "{\"id\":\"word\",\"kind\":\"accept\",\"by\":\"x\"}");
    scan(bench, inbox);
    assert_int_equal(bench->news.word_count, 0);
    bench_expect_note(&bench->news, "inbox: word-2.word: id 'word' is not the name of its file; expected word.word");
    inbox_close(inbox);
}

static void what_is_no_word_file_is_not_opened(void **state)
{
    struct bench *bench = *state;
    struct inbox *inbox = open_inbox(bench);
    struct text text = {0};
    bench_write(bench, "inbox/readme.txt", "not for the inbox");
    bench_write(bench, "inbox/.half.word.tmp", "{");
    assert_int_equal(symlink("/etc/passwd", bench_path(bench, "inbox/link.word")), 0);
    assert_int_equal(mkfifo(bench_path(bench, "inbox/pipe.word"), 0666), 0);
    assert_int_equal(mkdir(bench_path(bench, "inbox/folder.word"), 0777), 0);
    text_add(&text, "{\"id\":\"long\",\"kind\":\"accept\",\"by\":\"x\"%20000s}", "");
    bench_write(bench, "inbox/long.word", text.bytes);
    text_clear(&text);
    scan(bench, inbox);
    assert_int_equal(bench->news.word_count, 0);
    bench_expect_note(&bench->news, "inbox: link.word: is a symbolic link");
    bench_expect_note(&bench->news, "inbox: pipe.word: is a pipe");
    bench_expect_note(&bench->news, "inbox: folder.word: is a folder; expected a regular file; left where it is");
    bench_expect_note(&bench->news, "inbox: long.word: has 20");
    settle(bench, inbox, true);
    assert_true(bench_exists(bench, "inbox/readme.txt") && bench_exists(bench, "inbox/bad/pipe.word"));
    scan(bench, inbox);
    assert_int_equal(bench->news.note_count, 0);
    inbox_close(inbox);
}

static void handing_in_refuses_what_the_daemon_would_refuse(void **state)
{
    struct bench *bench = *state;
    struct word word = {
        .kind = WORD_SEEN, .subject = "nowhere", .by = "crew lead", .value = NAN, .at_utc_s = NOW_UTC_S};
    assert_int_equal(inbox_hand_in(&bench->settings, &word, true, &bench->error), FW_BAD_INPUT);
    assert_non_null(strstr(bench->error.text, "'nowhere' is not a point"));
    assert_string_equal(word.id, "");
    assert_false(bench_exists(bench, "inbox"));
}

static void an_inbox_that_cannot_be_made_or_written_is_named(void **state)
{
    struct bench *bench = *state;
    struct inbox *inbox = NULL;
    struct word word;
    bench_write(bench, "inbox", "a file where the folder should be");
    assert_int_equal(inbox_open(&bench->settings, &inbox, &bench->error), FW_IO);
    assert_null(inbox);
    assert_non_null(strstr(bench->error.text, "/inbox: "));
    assert_int_equal(parse(bench, "accept|--by|duty officer", &word), FW_OK);
    assert_int_equal(inbox_hand_in(&bench->settings, &word, true, &bench->error), FW_IO);
    assert_non_null(strstr(bench->error.text, "/inbox: "));
    assert_string_equal(word.id, "");
    assert_int_equal(unlink(bench_path(bench, "inbox")), 0);
    inbox = open_inbox(bench);
    assert_int_equal(rename(bench_path(bench, "inbox"), bench_path(bench, "away")), 0);
    bench_write(bench, "inbox", "");
    assert_int_equal(inbox_scan(inbox, 0, &bench->news, &bench->error), FW_IO);
    inbox_close(inbox);
}

static void a_word_that_cannot_be_removed_is_reported_and_not_taken_again(void **state)
{
    struct bench *bench = *state;
    struct inbox *inbox = open_inbox(bench);
    struct word word;
    assert_int_equal(parse(bench, "accept|--by|duty officer", &word), FW_OK);
    hand_in(bench, &word, true);
    scan(bench, inbox);
    char name[128];
    snprintf(name, sizeof name, "inbox/%s.word", word.id);
    /* a folder in the file's place cannot be unlinked */
    assert_int_equal(unlink(bench_path(bench, name)), 0);
    assert_int_equal(mkdir(bench_path(bench, name), 0777), 0);
    assert_int_equal(inbox_settle(inbox, &bench->news, true, &bench->error), FW_IO);
    assert_non_null(strstr(bench->error.text, "cannot be removed"));
    news_clear(&bench->news);
    scan(bench, inbox);
    assert_int_equal(bench->news.word_count, 0);
    inbox_close(inbox);
}

static void without_memory_no_word_is_lost(void **state)
{
    struct bench *bench = *state;
    bool has_failed = true;
    long fail_at = 1;
    if (!bench_fail_allocation_at(-1))
        skip();
    for (; has_failed; fail_at++) {
        struct inbox *inbox = open_inbox(bench);
        struct word word;
        assert_int_equal(parse(bench, "reading|orlin-scar|2.9|--by|catchment technician", &word), FW_OK);
        hand_in(bench, &word, true);
        bench_fail_allocation_at(fail_at);
        enum fw_status status = inbox_scan(inbox, BENCH_RECEIVED_UTC_S, &bench->news, &bench->error);
        has_failed = bench_allocations_succeed();
        assert_true(status == FW_OK || (has_failed && status == FW_NO_MEMORY));
        if (status == FW_NO_MEMORY)
            scan(bench, inbox);
        assert_in_range(bench->news.word_count, 1, 2); /* the second has the same id, which the store drops */
        assert_int_equal(bench->news.receipt_count, 1);
        settle(bench, inbox, true);
        assert_int_equal(bench_count_files(bench, "inbox"), 0);
        assert_int_equal(bench_count_files(bench, "inbox/bad"), 0);
        inbox_close(inbox);
    }
    assert_true(fail_at > 10);
}

static void without_memory_nothing_is_opened_parsed_or_handed_in(void **state)
{
    struct bench *bench = *state;
    struct inbox *inbox = NULL;
    struct word word, parsed = {0};
    enum fw_status status = FW_NO_MEMORY;
    long fail_at = 1;
    if (!bench_fail_allocation_at(-1))
        skip();
    for (; status != FW_OK; fail_at++) {
        bench_fail_allocation_at(fail_at);
        status = inbox_open(&bench->settings, &inbox, &bench->error);
        bench_allocations_succeed();
        assert_true(status == FW_OK || (status == FW_NO_MEMORY && inbox == NULL));
    }
    assert_true(fail_at > 5);
    inbox_close(inbox);
    assert_int_equal(parse(bench, "note|down|--by|crew lead", &word), FW_OK);
    bench_fail_allocation_at(1);
    status = parse(bench, "note|down|--by|crew lead", &parsed);
    bench_allocations_succeed();
    assert_int_equal(status, FW_NO_MEMORY);
    for (fail_at = 1, status = FW_NO_MEMORY; status != FW_OK; fail_at++) {
        bench_fail_allocation_at(fail_at);
        status = inbox_hand_in(&bench->settings, &word, true, &bench->error);
        bench_allocations_succeed();
        assert_true(status == FW_OK || (status == FW_NO_MEMORY && bench_count_files(bench, "inbox") == 0));
    }
    assert_int_equal(bench_count_files(bench, "inbox"), 1);
}

#define WITH_BENCH(test) cmocka_unit_test_setup_teardown(test, bench_set_up, bench_tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        WITH_BENCH(words_are_read_from_a_command_line_and_told_in_a_line),
        WITH_BENCH(a_word_carries_its_facts),
        WITH_BENCH(a_clock_time_is_the_last_one_that_has_been),
        WITH_BENCH(what_cannot_be_read_is_refused_with_what_was_expected),
        WITH_BENCH(texts_that_are_too_long_are_refused_not_cut),
        WITH_BENCH(a_word_handed_in_arrives_whole),
        WITH_BENCH(a_word_without_a_time_is_stamped_when_it_is_received),
        WITH_BENCH(ids_differ_and_an_id_given_is_kept),
        WITH_BENCH(a_word_is_taken_once_and_not_stored_again_only_after_a_restart),
        WITH_BENCH(the_inbox_wakes_its_reader),
        WITH_BENCH(a_file_that_cannot_be_read_moves_to_bad_with_its_reason),
        WITH_BENCH(a_file_named_for_more_than_its_id_is_refused),
        WITH_BENCH(what_is_no_word_file_is_not_opened),
        WITH_BENCH(handing_in_refuses_what_the_daemon_would_refuse),
        WITH_BENCH(an_inbox_that_cannot_be_made_or_written_is_named),
        WITH_BENCH(a_word_that_cannot_be_removed_is_reported_and_not_taken_again),
        WITH_BENCH(without_memory_no_word_is_lost),
        WITH_BENCH(without_memory_nothing_is_opened_parsed_or_handed_in),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
