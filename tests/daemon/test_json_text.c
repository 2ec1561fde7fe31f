/* SPDX-License-Identifier: MIT */
#include "daemon/feed/json_text.h"

#include "tests/daemon/feed_bench.h"

/* Texts by the grammar of RFC 8259; which of them are JSON is read off its productions. */
static void json_is_told_from_what_only_looks_like_it(void **state)
{
    (void)state;
    static const struct {
        const char *text;
        const char *expected; /* what the fault expects; NULL: it is JSON */
    } cases[] = {
        {"{}", NULL},
        {" [ 1 , -0 , 0.5 , 1e3 , 1E-3 , -12.50e+07 ] \r\n", NULL},
        {"\"\\\"\\\\\\/\\b\\f\\n\\r\\t\\u00e9\\ud834\\udd1e\"", NULL},
        {"true", NULL},
        {"null", NULL},
        {"\xEF\xBB\xBF{\"a\":false}", NULL},
        {"", "a value"},
        {"[01]", "a comma or ]"},
        {"[1.]", "a digit after the decimal point"},
        {"[.5]", "a value"},
        {"[+1]", "a value"},
        {"[-]", "a digit"},
        {"[1e]", "a digit of the exponent"},
        {"[1e+]", "a digit of the exponent"},
        {"[0x10]", "a comma or ]"},
        {"[NaN]", "a value"},
        {"[Infinity]", "a value"},
        {"[1,]", "a value"},
        {"[,1]", "a value"},
        {"[1 2]", "a comma or ]"},
        {"[1", "a comma or ]"},
        {"{\"a\":1,}", "a quote"},
        {"{\"a\" 1}", "a colon"},
        {"{\"a\":}", "a value"},
        {"{a:1}", "a quote"},
        {"{'a':1}", "a quote"},
        {"{\"a\":1]", "a comma or }"},
        {"{\"a\":1", "a comma or }"},
        {"\"open", "the closing quote"},
        {"\"line\nbreak\"", "the closing quote"},
        {"\"\\x\"", "an escape"},
        {"\"\\u12g4\"", "four hexadecimal digits"},
        {"\"\\u12", "four hexadecimal digits"},
        {"\"\\u0000\"", "no zero character"},
        {"\"\\ud834\"", "both halves of a character"},
        {"\"\\ud834\\u0041\"", "both halves of a character"},
        {"\"\\udd1e\"", "both halves of a character"},
        {"{} {}", "nothing more"},
        {"tru", "a value"},
        {"truely", "nothing more"},
        {"// note\n{}", "a value"},
    };
    for (size_t i = 0; i < sizeof cases / sizeof cases[0]; i++) {
        struct fw_error error = {0};
        cJSON *root = NULL;
        enum fw_status status = json_text_parse(cases[i].text, strlen(cases[i].text), &root, &error);
        if (status != (cases[i].expected == NULL ? FW_OK : FW_BAD_INPUT) || (status == FW_OK) != (root != NULL))
            fail_msg("%s: status %d, %s", cases[i].text, (int)status, error.text);
        if (cases[i].expected != NULL && strstr(error.text, cases[i].expected) == NULL)
            fail_msg("%s: '%s' does not say '%s'", cases[i].text, error.text, cases[i].expected);
        cJSON_Delete(root);
    }
}

static void the_place_of_a_fault_is_told(void **state)
{
    (void)state;
    struct fw_error error = {0};
    cJSON *root = NULL;
    static const char text[] = "{\"data\":[1,2,oops]}";
    assert_int_equal(json_text_parse(text, strlen(text), &root, &error), FW_BAD_INPUT);
    assert_string_equal(error.text, "not JSON at byte 14 of 19: expected a value");
}

static void brackets_nest_to_a_limit(void **state)
{
    (void)state;
    for (int depth = JSON_TEXT_DEPTH; depth <= JSON_TEXT_DEPTH + 1; depth++) {
        char text[2 * JSON_TEXT_DEPTH + 3];
        struct fw_error error = {0};
        cJSON *root = NULL;
        memset(text, '[', (size_t)depth);
        memset(text + depth, ']', (size_t)depth);
        enum fw_status status = json_text_parse(text, 2 * (size_t)depth, &root, &error);
        assert_int_equal(status, depth <= JSON_TEXT_DEPTH ? FW_OK : FW_BAD_INPUT);
        cJSON_Delete(root);
    }
}

static void a_text_cut_at_any_byte_is_no_json(void **state)
{
    (void)state;
    static const char text[] =
        "{\"data\":[{\"t\":\"2031-02-14T21:15:00Z\",\"v\":1.60e0},[null,true,\"\\ud834\\udd1e\"]]}";
    for (size_t cut = 0; cut < strlen(text); cut++) {
        char *part = malloc(cut + 1); /* exactly as long, so that a read beyond it is seen by a sanitizer */
        cJSON *root = NULL;
        memcpy(part, text, cut);
        assert_int_equal(json_text_parse(part, cut, &root, NULL), FW_BAD_INPUT);
        free(part);
    }
}

/* The examples of RFC 6901 section 5. */
static void pointers_lead_where_rfc_6901_says(void **state)
{
    (void)state;
    static const char document[] =
        "{\"foo\":[\"bar\",\"baz\"],\"\":0,\"a/b\":1,\"c%d\":2,\"e^f\":3,\"g|h\":4,\"i\\\\j\":5,"
        "\"k\\\"l\":6,\" \":7,\"m~n\":8}";
    static const struct {
        const char *pointer;
        double number;
    } numbers[] = {{"/", 0},     {"/a~1b", 1}, {"/c%d", 2}, {"/e^f", 3}, {"/g|h", 4},
                   {"/i\\j", 5}, {"/k\"l", 6}, {"/ ", 7},   {"/m~0n", 8}};
    cJSON *root = NULL;
    assert_int_equal(json_text_parse(document, strlen(document), &root, NULL), FW_OK);
    assert_ptr_equal(json_text_at(root, ""), root);
    assert_int_equal(cJSON_GetArraySize(json_text_at(root, "/foo")), 2);
    assert_string_equal(cJSON_GetStringValue(json_text_at(root, "/foo/0")), "bar");
    assert_string_equal(cJSON_GetStringValue(json_text_at(root, "/foo/1")), "baz");
    for (size_t i = 0; i < sizeof numbers / sizeof numbers[0]; i++) {
        const cJSON *item = json_text_at(root, numbers[i].pointer);
        if (item == NULL || item->valuedouble != numbers[i].number)
            fail_msg("'%s' does not lead to %g", numbers[i].pointer, numbers[i].number);
    }
    static const char *const nowhere[] = {
        "foo",  "/foo/2", "/foo/-", "/foo/00", "/foo/01", "/foo/", "/foo/0/0", "/foo/x",
        "/FOO", "/fo",    "/fooo",  "/a/b",    "/m~n",    "/m~",   "/m~2n",    "/foo/9999999999"};
    for (size_t i = 0; i < sizeof nowhere / sizeof nowhere[0]; i++)
        if (json_text_at(root, nowhere[i]) != NULL)
            fail_msg("'%s' leads somewhere", nowhere[i]);
    cJSON_Delete(root);
}

static void without_memory_it_is_not_called_bad_json(void **state)
{
    (void)state;
    static const char text[] = "{\"data\":[{\"t\":\"2031-02-14T21:15:00Z\",\"v\":1.60}]}";
    long fail_at = 1;
    if (!bench_fail_allocation_at(-1))
        skip();
    for (enum fw_status status = FW_NO_MEMORY; status != FW_OK; fail_at++) {
        cJSON *root = NULL;
        bench_fail_allocation_at(fail_at);
        status = json_text_parse(text, strlen(text), &root, NULL);
        bench_allocations_succeed();
        assert_true(status == FW_OK || (status == FW_NO_MEMORY && root == NULL));
        cJSON_Delete(root);
    }
    assert_true(fail_at > 8);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(json_is_told_from_what_only_looks_like_it),
        cmocka_unit_test(the_place_of_a_fault_is_told),
        cmocka_unit_test(brackets_nest_to_a_limit),
        cmocka_unit_test(a_text_cut_at_any_byte_is_no_json),
        cmocka_unit_test(pointers_lead_where_rfc_6901_says),
        cmocka_unit_test(without_memory_it_is_not_called_bad_json),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
