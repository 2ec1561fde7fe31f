/* SPDX-License-Identifier: MIT */
#include "daemon/journal.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stdint.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>
#include <unistd.h>

#include <cmocka.h>

struct page { /* a journal that writes into memory */
    char *bytes;
    size_t length;
    struct journal journal;
};

static void open_page(struct page *page, enum journal_priority most)
{
    FILE *stream = open_memstream(&page->bytes, &page->length);
    assert_non_null(stream);
    page->journal = journal_open(stream, most);
}

static void expect_page(struct page *page, const char *text)
{
    fclose(page->journal.stream);
    assert_string_equal(page->bytes, text);
    free(page->bytes);
}

static void a_line_is_written_with_one_line_feed(void **state)
{
    (void)state;
    struct page page = {0};
    open_page(&page, JOURNAL_INFO);
    journal_say(&page.journal, JOURNAL_NOTICE, "gauge '%s': no reading for %d min", "Orlin Scar", 45);
    journal_say(&page.journal, JOURNAL_INFO, "with its own\n");
    expect_page(&page, "gauge 'Orlin Scar': no reading for 45 min\nwith its own\n");
}

static void lines_above_the_limit_are_dropped(void **state)
{
    (void)state;
    struct page page = {0};
    open_page(&page, JOURNAL_WARNING);
    journal_say(&page.journal, JOURNAL_NOTICE, "dropped");
    journal_say(&page.journal, JOURNAL_WARNING, "kept");
    journal_say(&page.journal, JOURNAL_DEBUG, "dropped");
    journal_say(&page.journal, JOURNAL_ERROR, "kept too");
    expect_page(&page, "kept\nkept too\n");
}

static void the_priority_is_written_only_to_the_stream_that_systemd_named(void **state)
{
    (void)state;
    static const struct {
        const char *format; /* of device and inode */
        unsigned long inode_shift;
        const char *line;
        const char *shows;
    } rows[] = {{"%lu:%lu", 0, "<4>disk at 91 %\n", "our own stream"},
                {"%lu:%lu", 1, "disk at 91 %\n", "another inode: stderr was redirected"},
                {"%lu:%lux", 0, "disk at 91 %\n", "something after the inode"},
                {"%lu-%lu", 0, "disk at 91 %\n", "no colon"},
                {"", 0, "disk at 91 %\n", "empty"},
                {NULL, 0, "disk at 91 %\n", "not set"}};
    for (size_t row = 0; row < sizeof rows / sizeof rows[0]; row++) {
        FILE *stream = tmpfile();
        assert_non_null(stream);
        struct stat facts;
        assert_int_equal(fstat(fileno(stream), &facts), 0);
        char stated[80] = "";
        if (rows[row].format != NULL && rows[row].format[0] != '\0') {
            const char *divider = strchr(rows[row].format, '-') != NULL ? "-" : ":";
            const char *tail = strchr(rows[row].format, 'x') != NULL ? "x" : "";
            snprintf(stated, sizeof stated, "%lu%s%lu%s", (unsigned long)facts.st_dev, divider,
                     (unsigned long)facts.st_ino + rows[row].inode_shift, tail);
        }
        if (rows[row].format == NULL)
            unsetenv("JOURNAL_STREAM");
        else
            setenv("JOURNAL_STREAM", stated, 1);
        struct journal journal = journal_open(stream, JOURNAL_INFO);
        journal_say(&journal, JOURNAL_WARNING, "disk at %d %%", 91);
        rewind(stream);
        char line[80] = "";
        assert_non_null(fgets(line, sizeof line, stream));
        if (strcmp(line, rows[row].line) != 0)
            fail_msg("%s: '%s'", rows[row].shows, line);
        fclose(stream);
    }
    unsetenv("JOURNAL_STREAM");
}

static void control_bytes_and_broken_text_are_escaped(void **state)
{
    (void)state;
    static const struct {
        const char *text, *line, *shows;
    } rows[] = {{"two\nlines", "two\\x0alines\n", "a line feed inside cannot forge a second line"},
                {"\x1b[2Jgone", "\\x1b[2Jgone\n", "a terminal's escape"},
                {"tab\there\x7f", "tab\\x09here\\x7f\n", "tab and delete"},
                {"V\xc3\xa4ttern \xe2\x86\x92 \xf0\x9f\x8c\x8a", "V\xc3\xa4ttern \xe2\x86\x92 \xf0\x9f\x8c\x8a\n",
                 "good UTF-8 of 2, 3, 4 bytes"},
                {"V\xe4ttern", "V\\xe4ttern\n", "Latin-1"},
                {"\xc2\x9b"
                 "2J",
                 "\\xc2\\x9b2J\n", "a C1 control, which is good UTF-8"},
                {"\xc0\xaf", "\\xc0\\xaf\n", "an overlong form"},
                {"\xed\xa0\x80", "\\xed\\xa0\\x80\n", "a surrogate"},
                {"cut \xe2\x86", "cut \\xe2\\x86\n", "a character that ends too early"},
                {"", "\n", "nothing"}};
    for (size_t row = 0; row < sizeof rows / sizeof rows[0]; row++) {
        struct page page = {0};
        open_page(&page, JOURNAL_INFO);
        journal_say(&page.journal, JOURNAL_INFO, "%s", rows[row].text);
        fflush(page.journal.stream);
        if (strcmp(page.bytes, rows[row].line) != 0)
            fail_msg("%s: '%s'", rows[row].shows, page.bytes);
        expect_page(&page, rows[row].line);
    }
}

static void a_text_too_long_for_a_line_says_that_it_was_cut(void **state)
{
    (void)state;
    char text[5000];
    for (size_t length = 900; length < sizeof text; length += 407) {
        memset(text, 'w', length);
        text[length] = '\0';
        struct page page = {0};
        open_page(&page, JOURNAL_INFO);
        journal_say(&page.journal, JOURNAL_INFO, "%s", text);
        fflush(page.journal.stream);
        bool fits = length < sizeof page.journal.last - 3;
        assert_int_equal(page.length <= sizeof page.journal.last, 1);
        assert_int_equal(strcmp(page.bytes + page.length - 4, "...\n") == 0, !fits);
        fclose(page.journal.stream);
        free(page.bytes);
    }
}

static void a_line_that_comes_again_is_counted(void **state)
{
    (void)state;
    struct page page = {0};
    open_page(&page, JOURNAL_INFO);
    for (int i = 0; i < 7; i++)
        journal_say(&page.journal, JOURNAL_WARNING, "feed 'x': no answer");
    journal_say(&page.journal, JOURNAL_INFO, "feed 'x': answers again");
    journal_say(&page.journal, JOURNAL_INFO, "feed 'x': answers again");
    journal_flush(&page.journal);
    journal_flush(&page.journal);
    journal_say(&page.journal, JOURNAL_NOTICE, "feed 'x': answers again");
    expect_page(&page, "feed 'x': no answer\n(the line before came again, 6 times)\nfeed 'x': answers again\n"
                       "(the line before came again, 1 times)\nfeed 'x': answers again\n");
}

static void a_journal_without_a_stream_is_silent(void **state)
{
    (void)state;
    struct journal journal = journal_open(NULL, JOURNAL_DEBUG);
    journal_say(&journal, JOURNAL_ERROR, "nobody hears");
    journal_flush(&journal);
    assert_int_equal(journal.repeated, 0);
    assert_false(journal.has_prefix);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(a_line_is_written_with_one_line_feed),
        cmocka_unit_test(lines_above_the_limit_are_dropped),
        cmocka_unit_test(the_priority_is_written_only_to_the_stream_that_systemd_named),
        cmocka_unit_test(control_bytes_and_broken_text_are_escaped),
        cmocka_unit_test(a_text_too_long_for_a_line_says_that_it_was_cut),
        cmocka_unit_test(a_line_that_comes_again_is_counted),
        cmocka_unit_test(a_journal_without_a_stream_is_silent),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
