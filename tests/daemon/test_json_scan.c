/* SPDX-License-Identifier: MIT */
#include "daemon/settings/json_scan.h"

#include <locale.h>
#include <math.h>
#include <sys/stat.h>
#include <unistd.h>

#include <cjson/cJSON.h>

#include "daemon/settings/json_tree.h"
#include "tests/daemon/settings_text.h"

struct outcome {
    enum fw_status status;
    struct settings_faults faults;
    struct json_scan scan;
};

/* From memory of just that size, so that a step beyond the end is found. */
static struct outcome scan(const char *bytes, size_t length)
{
    struct outcome outcome = {.status = FW_OK};
    struct settings_report report = {.file = "x.json", .faults = &outcome.faults};
    char *copy = malloc(length > 0 ? length : 1);
    assert_non_null(copy);
    memcpy(copy, bytes, length);
    outcome.status = json_scan(copy, length, &report, &outcome.scan);
    free(copy);
    return outcome;
}

static void clear(struct outcome *outcome)
{
    json_scan_clear(&outcome->scan);
    settings_faults_clear(&outcome->faults);
}

static void comments_are_blanked_outside_of_strings(void **state)
{
    (void)state;
    static const char text[] = "// head\n{ \"a\": 1, // one\n  \"b//\": \"x // y\" }//";
    struct outcome outcome = scan(text, strlen(text));
    assert_int_equal(outcome.status, FW_OK);
    assert_string_equal(outcome.scan.clean, "       \n{ \"a\": 1,       \n  \"b//\": \"x // y\" }  ");
    clear(&outcome);
}

static void every_value_keeps_its_line_and_its_place(void **state)
{
    (void)state;
    static const char text[] = "{\n \"a\": [ 1.5,\n  {\"b\"\n:\nnull} ],\n \"c\": \"\\u00e4\", \"d\": true}\n";
    static const struct {
        enum json_kind kind;
        size_t line, key_line;
        const char *raw;
    } expected[] = {
        {JSON_OBJECT, 1, 0, NULL},  {JSON_ARRAY, 2, 2, "[ 1.5,\n  {\"b\"\n:\nnull} ]"},
        {JSON_NUMBER, 2, 0, "1.5"}, {JSON_OBJECT, 3, 0, "{\"b\"\n:\nnull}"},
        {JSON_NULL, 5, 3, "null"},  {JSON_STRING, 6, 6, "\"\\u00e4\""},
        {JSON_TRUE, 6, 6, "true"},
    };
    struct outcome outcome = scan(text, strlen(text));
    assert_int_equal(outcome.status, FW_OK);
    assert_int_equal(outcome.scan.count, sizeof expected / sizeof expected[0]);
    for (size_t i = 0; i < outcome.scan.count; i++) {
        const struct json_position *position = &outcome.scan.positions[i];
        assert_int_equal(position->kind, expected[i].kind);
        assert_int_equal(position->line, expected[i].line);
        assert_int_equal(position->key_line, expected[i].key_line);
        assert_null(position->fault);
        if (expected[i].raw != NULL) {
            assert_int_equal(position->length, strlen(expected[i].raw));
            assert_memory_equal(text + position->offset, expected[i].raw, position->length);
        }
    }
    clear(&outcome);
}

static void numbers_have_the_form_of_rfc_8259(void **state)
{
    (void)state;
    static const struct {
        const char *text;
        double number;
    } good[] = {
        {"0", 0},
        {"-0", -0.0},
        {"0.5", 0.5},
        {"-12.75", -12.75},
        {"1e3", 1000},
        {"1.5E-2", 0.015},
        {"2e+2", 200.0},
        {"1e308", 1e308},
        {"1e-400", 0}, /* too small to tell from 0 */
        {"0.1000000000000000055511151231257827", 0.1},
    };
    for (size_t i = 0; i < sizeof good / sizeof good[0]; i++) {
        double number = 7;
        assert_null(json_scan_number(good[i].text, strlen(good[i].text), &number));
        assert_true(number == good[i].number);
    }
    static const struct {
        const char *text, *fault;
    } bad[] = {
        {"", "form"},
        {"-", "form"},
        {"01", "needless 0"},
        {"-00.5", "needless 0"},
        {"1.", "decimal point"},
        {".5", "form"},
        {"+1", "form"},
        {"1e", "form"},
        {"1e+", "form"},
        {"1.5.2", "form"},
        {"0x10", "form"},
        {"1,5", "form"},
        {"1e999", "too large"},
        {"-1e400", "too large"},
        {"1 ", "form"},
        {"1_000", "form"},
        {"Infinity", "form"},
        {"1.e5", "decimal point"},
        {"0.1234567890123456789012345678901234567890123456789012345678901", "too long"},
    };
    for (size_t i = 0; i < sizeof bad / sizeof bad[0]; i++) {
        double number = 7;
        const char *fault = json_scan_number(bad[i].text, strlen(bad[i].text), &number);
        if (fault == NULL || strstr(fault, bad[i].fault) == NULL)
            fail_msg("'%s': %s", bad[i].text, fault != NULL ? fault : "taken");
        assert_true(number == 7);
    }
}

/* What stops the scan: one fault, with its line and what was expected. */
static void a_fault_of_grammar_is_named_with_its_line_and_what_was_expected(void **state)
{
    (void)state;
    static const struct {
        const char *text, *fault;
    } cases[] = {
        {"", "x.json:1: the file ends here: expected a value"},
        {"\n\n", "x.json:3: the file ends here: expected a value"},
        {"// only words", "x.json:1: the file ends here: expected a value"},
        {"{", "x.json:1: the file ends here: expected a key in double quotes"},
        {"{\n\"a\": 1", "x.json:2: the file ends here: expected ',' or '}'"},
        {"{\n\"a\" 1}", "x.json:2: found '1': expected ':' after the key"},
        {"{\n\"a\"\n: 1\n\"b\": 2}", "x.json:4: found '\"': expected ',' or '}'"},
        {"[1 2]", "x.json:1: found '2': expected ',' or ']'"},
        {"[1, 2}", "x.json:1: found '}': expected ',' or ']'"},
        {"{a: 1}", "x.json:1: found 'a': expected a key in double quotes"},
        {"{1: 1}", "x.json:1: found '1': expected a key in double quotes"},
        {"{,}", "x.json:1: found ',': expected a key in double quotes"},
        {"[,]", "x.json:1: found ',': expected a value"},
        {"{\"a\": 'b'}", "x.json:1: found ''': expected a string in double quotes"},
        {"{\"a\":}", "x.json:1: found '}': expected a value"},
        {"{\"a\": 1}\n\n{}", "x.json:3: found '{': expected nothing after the closing bracket"},
        {"{\"a\": \"b\n\"}", "x.json:1: found a control character (0x0A): expected the closing \" of a string on the "
                             "same line"},
        {"{\"a\": \"b", "x.json:1: the file ends here: expected the closing \" of a string on the same line"},
        {"/* no */ {}", "x.json:1: found '/': expected a value"},
        {"{\"a\": \xC3\xA9}", "x.json:1: found '\xC3\xA9': expected a value"},
        {"{\"a\": \"\xE9\"}", "x.json:1: byte 0xE9 is not text: expected UTF-8"},
        {"\n{\"a\": \"\xC0\xAF\"}", "x.json:2: byte 0xC0 is not text: expected UTF-8"},       /* overlong */
        {"{\"a\": \"\xED\xA0\x80\"}", "x.json:1: byte 0xED is not text: expected UTF-8"},     /* a surrogate */
        {"{\"a\": \"\xF4\x90\x80\x80\"}", "x.json:1: byte 0xF4 is not text: expected UTF-8"}, /* beyond Unicode */
        {"// \xFF\n{}", "x.json:1: byte 0xFF is not text: expected UTF-8"},
        {"{}\x01", "x.json:1: found a control character (0x01): expected nothing after the closing bracket"},
    };
    for (size_t i = 0; i < sizeof cases / sizeof cases[0]; i++) {
        struct outcome outcome = scan(cases[i].text, strlen(cases[i].text));
        assert_int_equal(outcome.status, FW_BAD_INPUT);
        assert_int_equal(outcome.faults.count, 1);
        assert_string_equal(outcome.faults.faults[0].text, cases[i].fault);
        assert_null(outcome.scan.clean);
        clear(&outcome);
    }
}

static void a_zero_byte_is_not_text(void **state)
{
    (void)state;
    struct outcome outcome = scan("{\n\0}", 4);
    assert_int_equal(outcome.status, FW_BAD_INPUT);
    assert_string_equal(outcome.faults.faults[0].text, "x.json:2: byte 0x00 is not text: expected UTF-8");
    clear(&outcome);
}

/* What can be mended does not stop the scan, and what is left parses. */
static void a_bad_value_is_mended_so_that_the_rest_can_be_read(void **state)
{
    (void)state;
    static const struct {
        const char *value, *fault;
    } cases[] = {
        {"01", "needless 0"},
        {"+1", "form"},
        {"yes", "not a value"},
        {"None", "not a value"},
        {"TRUE", "not a value"},
        {"1e999", "too large"},
        {"\"\\q\"", "bad escape"},
        {"\"\\u12\"", "bad escape"},
        {"\"\\u0000\"", "bad escape"},
        {"\"\\ud800\"", "bad escape"},
        {"\"\\ud800\\u0041\"", "bad escape"},
        {"\"\\udc00\"", "bad escape"},
        {"\"a\tb\"", "control character"},
    };
    for (size_t i = 0; i < sizeof cases / sizeof cases[0]; i++) {
        char text[80];
        snprintf(text, sizeof text, "{\"a\": %s, \"b\": [%s]}", cases[i].value, cases[i].value);
        struct outcome outcome = scan(text, strlen(text));
        assert_int_equal(outcome.status, FW_OK);
        assert_int_equal(outcome.scan.count, 4);
        if (outcome.scan.positions[1].fault == NULL ||
            strstr(outcome.scan.positions[1].fault, cases[i].fault) == NULL)
            fail_msg("%s", cases[i].value);
        assert_non_null(outcome.scan.positions[3].fault);
        cJSON *parsed = cJSON_Parse(outcome.scan.clean);
        assert_non_null(parsed);
        cJSON_Delete(parsed);
        clear(&outcome);
    }
}

static void a_comma_too_many_is_reported_and_mended(void **state)
{
    (void)state;
    static const char text[] = "{ \"a\": [1, 2,\n ],\n \"b\": {\"c\": 1,} , // last\n}";
    struct outcome outcome = scan(text, strlen(text));
    assert_int_equal(outcome.status, FW_OK);
    assert_int_equal(outcome.faults.count, 3);
    assert_string_equal(outcome.faults.faults[0].text,
                        "x.json:1: a comma before ']': expected none after the last member");
    assert_int_equal(outcome.faults.faults[1].line, 3);
    assert_int_equal(outcome.faults.faults[2].line, 3);
    cJSON *parsed = cJSON_Parse(outcome.scan.clean);
    assert_non_null(parsed);
    cJSON_Delete(parsed);
    clear(&outcome);
}

static void escapes_and_pairs_are_taken(void **state)
{
    (void)state;
    static const char text[] = "[\"\\\" \\\\ \\/ \\b\\f\\n\\r\\t \\u00E4 \\uD83C\\uDF0A\"]";
    struct outcome outcome = scan(text, strlen(text));
    assert_int_equal(outcome.status, FW_OK);
    assert_null(outcome.scan.positions[1].fault);
    clear(&outcome);
}

static void thirty_two_levels_are_taken_and_thirty_three_are_not(void **state)
{
    (void)state;
    for (int depth = 32; depth <= 33; depth++) {
        char text[80];
        memset(text, '[', (size_t)depth);
        memset(text + depth, ']', (size_t)depth);
        struct outcome outcome = scan(text, 2 * (size_t)depth);
        assert_int_equal(outcome.status, depth == 32 ? FW_OK : FW_BAD_INPUT);
        if (depth == 33)
            assert_non_null(strstr(outcome.faults.faults[0].text, "expected no more than 32 levels of brackets"));
        clear(&outcome);
    }
}

static void a_byte_order_mark_is_passed_over(void **state)
{
    (void)state;
    static const char text[] = "\xEF\xBB\xBF{\"a\": 1}";
    struct outcome outcome = scan(text, strlen(text));
    assert_int_equal(outcome.status, FW_OK);
    clear(&outcome);
}

/* --- joined with the parsed tree --- */

static void the_tree_knows_paths_and_lines(void **state)
{
    (void)state;
    static const char text[] =
        "{ \"points\": [ { \"marks\": [ {},\n { \"depth_m\": 1.30, \"n\\u0061me\": \"a\\tb\" } ] } ] }";
    struct arena arena = {0};
    struct settings_faults faults = {0};
    struct settings_report report = {.file = "x.json", .faults = &faults};
    struct json_value *root = NULL;
    assert_int_equal(json_tree_read(text, strlen(text), &arena, &report, &root), FW_OK);
    const struct json_value *marks = json_tree_member(&json_tree_member(root, "points")->children[0], "marks");
    const struct json_value *depth = json_tree_member(&marks->children[1], "depth_m");
    const struct json_value *name = json_tree_member(&marks->children[1], "name");
    assert_string_equal(depth->path, "points[0].marks[1].depth_m");
    assert_int_equal(depth->line, 2);
    assert_true(depth->number == 1.30);
    assert_string_equal(name->string, "a\tb");
    assert_null(json_tree_member(&marks->children[0], "depth_m"));
    assert_null(json_tree_member(NULL, "depth_m"));
    settings_faults_clear(&faults);
    arena_clear(&arena);
}

static void a_key_that_is_there_twice_is_named_with_both_lines(void **state)
{
    (void)state;
    static const char text[] = "{ \"a\": 1,\n \"b\": { \"c\": 1, \"\\u0063\": 2 },\n\n \"a\": 3 }";
    struct arena arena = {0};
    struct settings_faults faults = {0};
    struct settings_report report = {.file = "x.json", .faults = &faults};
    struct json_value *root = NULL;
    assert_int_equal(json_tree_read(text, strlen(text), &arena, &report, &root), FW_OK);
    assert_int_equal(faults.count, 2);
    assert_string_equal(faults.faults[0].text,
                        "x.json:2: b.c: the key is there twice: expected it once (first on line 2)");
    assert_string_equal(faults.faults[1].text,
                        "x.json:4: a: the key is there twice: expected it once (first on line 1)");
    settings_faults_clear(&faults);
    arena_clear(&arena);
}

/*
 * The C library is given a locale in which a comma is the decimal sign. It is compiled into a folder of this test,
 * since a bare machine has none; where the sources of locales are not installed, the test says that it was not made.
 */
static void numbers_take_a_decimal_point_whatever_the_locale(void **state)
{
    (void)state;
    char folder[] = "/tmp/forewater-locale-XXXXXX";
    char command[200];
    assert_non_null(mkdtemp(folder));
    snprintf(command, sizeof command, "localedef -i de_DE -f UTF-8 %s/comma.UTF-8 >/dev/null 2>&1", folder);
    bool is_made = system(command) == 0;
    setenv("LOCPATH", folder, 1);
    bool is_set = is_made && setlocale(LC_ALL, "comma.UTF-8") != NULL;
    char half[8];
    snprintf(half, sizeof half, "%.1f", 0.5);
    struct settings *settings = NULL;
    struct settings_faults faults = {0};
    struct text text = settings_text_load(SETTINGS_EXAMPLE);
    enum fw_status status = is_set ? settings_text_read(&text, SETTINGS_FOR_RUN, &settings, &faults) : FW_OK;
    setlocale(LC_ALL, "C");
    unsetenv("LOCPATH");
    snprintf(command, sizeof command, "rm -rf %s", folder);
    assert_int_equal(system(command), 0);
    text_clear(&text);
    if (!is_set) {
        print_message("no locale with a decimal comma can be made here (Debian: package locales)\n");
        skip();
    }
    assert_string_equal(half, "0,5");
    assert_int_equal(status, FW_OK);
    assert_true(settings->points[0].marks[0].depth_m == 1.45);
    assert_true(settings->gauges[0].quality.moving_rate_per_s == 0.10 / 3600); /* a default or a value, both */
    assert_true(settings->points[1].policy.step_down_chance == 0.05);          /* a default */
    settings_destroy(settings);
    settings_faults_clear(&faults);
}

/* --- whatever comes --- */

static void a_file_cut_off_anywhere_is_refused_without_harm(void **state)
{
    (void)state;
    static const char *const paths[] = {SETTINGS_EXAMPLE, SETTINGS_EVERY_OTHER_KEY};
    for (size_t p = 0; p < 2; p++) {
        struct text text = settings_text_load(paths[p]);
        size_t last = text.length;
        while (text.bytes[last - 1] != '}') /* the last bracket; blanks and a line feed after it */
            last--;
        for (size_t length = 0; length < last; length++) {
            struct outcome outcome = scan(text.bytes, length);
            assert_int_equal(outcome.status, FW_BAD_INPUT);
            assert_true(outcome.faults.count > 0);
            clear(&outcome);
        }
        text_clear(&text);
    }
}

static unsigned next_random(unsigned *seed)
{
    *seed = *seed * 1664525u + 1013904223u; /* Numerical Recipes' quick generator; only the high bits are used */
    return *seed >> 8;
}

static void a_file_with_bytes_changed_at_random_is_read_or_refused_without_harm(void **state)
{
    (void)state;
    static const char bytes[] = "\"{}[]:,/\\ -+.0eEuntf1\n\x01\xC3\xE9_az";
    unsigned seed = 20310214;
    size_t refused = 0;
    enum { ROUNDS = 1500 };
    print_message("seed %u\n", seed);
    struct text text = settings_text_load(SETTINGS_EXAMPLE);
    for (int round = 0; round < ROUNDS; round++) {
        struct text changed = settings_text_with(&text, 0, 0, "");
        for (unsigned i = 0; i < 1 + next_random(&seed) % 3; i++)
            changed.bytes[next_random(&seed) % changed.length] = bytes[next_random(&seed) % (sizeof bytes - 1)];
        struct settings *settings;
        struct settings_faults faults = {0};
        refused += settings_text_read(&changed, SETTINGS_FOR_RUN, &settings, &faults) != FW_OK;
        settings_destroy(settings);
        settings_faults_clear(&faults);
        text_clear(&changed);
    }
    assert_true(refused > ROUNDS / 4 && refused < ROUNDS); /* comments and blanks may change without harm */
    text_clear(&text);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(comments_are_blanked_outside_of_strings),
        cmocka_unit_test(every_value_keeps_its_line_and_its_place),
        cmocka_unit_test(numbers_have_the_form_of_rfc_8259),
        cmocka_unit_test(a_fault_of_grammar_is_named_with_its_line_and_what_was_expected),
        cmocka_unit_test(a_zero_byte_is_not_text),
        cmocka_unit_test(a_bad_value_is_mended_so_that_the_rest_can_be_read),
        cmocka_unit_test(a_comma_too_many_is_reported_and_mended),
        cmocka_unit_test(escapes_and_pairs_are_taken),
        cmocka_unit_test(thirty_two_levels_are_taken_and_thirty_three_are_not),
        cmocka_unit_test(a_byte_order_mark_is_passed_over),
        cmocka_unit_test(the_tree_knows_paths_and_lines),
        cmocka_unit_test(a_key_that_is_there_twice_is_named_with_both_lines),
        cmocka_unit_test(numbers_take_a_decimal_point_whatever_the_locale),
        cmocka_unit_test(a_file_cut_off_anywhere_is_refused_without_harm),
        cmocka_unit_test(a_file_with_bytes_changed_at_random_is_read_or_refused_without_harm),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
