/* SPDX-License-Identifier: MIT */
/*
 * The gauge's web page that the demonstration plays answers as a real one does. Without libmicrohttpd there is no
 * such page and nothing to test: FW_DEMO_PAGE is not defined then.
 */
#include <setjmp.h>
#include <stdarg.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include <cmocka.h>

#ifdef FW_DEMO_PAGE

#include <curl/curl.h>

#include "config/demo/gauge_page.h"
#include "config/demo/night_time.h"

struct reply {
    CURLcode code;
    long status;
    char tag[64];
    char body[8192];
    size_t length;
};

static size_t take_body(char *bytes, size_t size, size_t count, void *context)
{
    struct reply *reply = context;
    size_t length = size * count;
    assert_true(reply->length + length < sizeof reply->body);
    memcpy(reply->body + reply->length, bytes, length);
    reply->length += length;
    reply->body[reply->length] = '\0';
    return length;
}

static size_t take_header(char *bytes, size_t size, size_t count, void *context)
{
    struct reply *reply = context;
    char line[256];
    snprintf(line, sizeof line, "%.*s", (int)(size * count), bytes);
    sscanf(line, "ETag: %63s", reply->tag);
    return size * count;
}

static struct reply ask(const struct gauge_page *page, const char *path, const char *known_tag, bool posts)
{
    struct reply reply = {.code = CURLE_FAILED_INIT};
    char url[128], header[128];
    snprintf(url, sizeof url, "http://127.0.0.1:%u%s", gauge_page_port(page), path);
    snprintf(header, sizeof header, "If-None-Match: %s", known_tag != NULL ? known_tag : "");
    CURL *curl = curl_easy_init();
    assert_non_null(curl);
    struct curl_slist *headers = known_tag != NULL ? curl_slist_append(NULL, header) : NULL;
    curl_easy_setopt(curl, CURLOPT_URL, url);
    curl_easy_setopt(curl, CURLOPT_NOPROXY, "*");
    curl_easy_setopt(curl, CURLOPT_TIMEOUT, 20L);
    curl_easy_setopt(curl, CURLOPT_HTTPHEADER, headers);
    curl_easy_setopt(curl, CURLOPT_WRITEFUNCTION, take_body);
    curl_easy_setopt(curl, CURLOPT_WRITEDATA, &reply);
    curl_easy_setopt(curl, CURLOPT_HEADERFUNCTION, take_header);
    curl_easy_setopt(curl, CURLOPT_HEADERDATA, &reply);
    if (posts)
        curl_easy_setopt(curl, CURLOPT_POSTFIELDS, "x");
    reply.code = curl_easy_perform(curl);
    curl_easy_getinfo(curl, CURLINFO_RESPONSE_CODE, &reply.status);
    curl_slist_free_all(headers);
    curl_easy_cleanup(curl);
    return reply;
}

static int open_page(void **state)
{
    *state = gauge_page_open();
    return *state != NULL ? 0 : -1;
}

static int close_page(void **state)
{
    gauge_page_close(*state);
    return 0;
}

static void the_page_shows_its_readings_with_a_tag(void **state)
{
    struct gauge_page *page = *state;
    gauge_page_add(page, night_time_at("21:10"), "1.54");
    gauge_page_add(page, night_time_at("21:15"), "1.60");
    struct reply reply = ask(page, "/orlin-scar", NULL, false);
    assert_int_equal(reply.code, CURLE_OK);
    assert_int_equal(reply.status, 200);
    assert_string_equal(reply.body,
                        "{\"gauge\": \"Orlin Scar\", \"data\": [{\"t\": \"2031-02-14T20:10:00Z\", \"v\": 1.54}, "
                        "{\"t\": \"2031-02-14T20:15:00Z\", \"v\": 1.60}]}\n");
    assert_true(strlen(reply.tag) > 2);
}

static void the_page_says_unchanged_until_a_reading_comes(void **state)
{
    struct gauge_page *page = *state;
    gauge_page_add(page, night_time_at("21:10"), "1.54");
    struct reply first = ask(page, "/orlin-scar", NULL, false);
    struct reply second = ask(page, "/orlin-scar", first.tag, false);
    assert_int_equal(second.status, 304);
    assert_int_equal(second.length, 0);
    gauge_page_add(page, night_time_at("21:15"), "1.60");
    struct reply third = ask(page, "/orlin-scar", first.tag, false);
    assert_int_equal(third.status, 200);
    assert_string_not_equal(third.tag, first.tag);
    struct gauge_page_count count = gauge_page_counted(page);
    assert_int_equal(count.whole, 2);
    assert_int_equal(count.unchanged, 1);
}

static void the_page_keeps_only_the_newest_readings(void **state)
{
    struct gauge_page *page = *state;
    for (int i = 0; i <= GAUGE_PAGE_WINDOW; i++)
        gauge_page_add(page, night_time_at("18:00") + 300 * i, i == 0 ? "0.11" : "1.02");
    struct reply reply = ask(page, "/orlin-scar", NULL, false);
    assert_null(strstr(reply.body, "0.11"));
    size_t shown = 0;
    for (const char *at = reply.body; (at = strstr(at, "1.02")) != NULL; at++)
        shown++;
    assert_int_equal(shown, GAUGE_PAGE_WINDOW);
}

static void the_page_out_of_reach_gives_no_reply_at_all(void **state)
{
    struct gauge_page *page = *state;
    gauge_page_set_in_reach(page, false);
    struct reply reply = ask(page, "/orlin-scar", NULL, false);
    assert_int_equal(reply.code, CURLE_GOT_NOTHING);
    assert_true(gauge_page_counted(page).cut_off >= 1); /* a client may try again */
    gauge_page_set_in_reach(page, true);
    assert_int_equal(ask(page, "/orlin-scar", NULL, false).status, 200);
}

static void the_page_knows_no_other_path_and_no_other_method(void **state)
{
    assert_int_equal(ask(*state, "/", NULL, false).status, 404);
    assert_int_equal(ask(*state, "/orlin-scar", NULL, true).status, 405);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test_setup_teardown(the_page_shows_its_readings_with_a_tag, open_page, close_page),
        cmocka_unit_test_setup_teardown(the_page_says_unchanged_until_a_reading_comes, open_page, close_page),
        cmocka_unit_test_setup_teardown(the_page_keeps_only_the_newest_readings, open_page, close_page),
        cmocka_unit_test_setup_teardown(the_page_out_of_reach_gives_no_reply_at_all, open_page, close_page),
        cmocka_unit_test_setup_teardown(the_page_knows_no_other_path_and_no_other_method, open_page, close_page),
    };
    curl_global_init(CURL_GLOBAL_DEFAULT);
    int failed = cmocka_run_group_tests(tests, NULL, NULL);
    curl_global_cleanup();
    return failed;
}

#else

static void the_page_is_not_there_without_libmicrohttpd(void **state)
{
    (void)state;
    skip();
}

int main(void)
{
    const struct CMUnitTest tests[] = {cmocka_unit_test(the_page_is_not_there_without_libmicrohttpd)};
    return cmocka_run_group_tests(tests, NULL, NULL);
}

#endif
