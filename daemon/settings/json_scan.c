/* SPDX-License-Identifier: MIT */
#include "daemon/settings/json_scan.h"

#include <locale.h>
#include <math.h>
#include <stdint.h>
#include <stdlib.h>
#include <string.h>

struct scanner {
    const char *text;
    size_t length, at, line;
    struct settings_report *report;
    struct json_scan *scan;
    enum fw_status status;
};

/* --- characters --- */

static char peek(const struct scanner *scanner)
{
    return scanner->at < scanner->length ? scanner->text[scanner->at] : '\0';
}

static bool is_digit(char c)
{
    return c >= '0' && c <= '9';
}

/* Length of the UTF-8 sequence at bytes, 0 if it is none (RFC 3629: shortest form, no surrogates, up to U+10FFFF). */
static size_t utf8_length(const unsigned char *bytes, size_t left)
{
    unsigned char first = bytes[0];
    if (first < 0x80)
        return 1;
    size_t length = first >= 0xC2 && first <= 0xDF ? 2 : first >= 0xE0 && first <= 0xEF ? 3 : 4;
    if (first < 0xC2 || first > 0xF4 || length > left)
        return 0;
    for (size_t i = 1; i < length; i++)
        if ((bytes[i] & 0xC0) != 0x80)
            return 0;
    bool is_overlong = (first == 0xE0 && bytes[1] < 0xA0) || (first == 0xF0 && bytes[1] < 0x90);
    bool is_beyond = (first == 0xED && bytes[1] > 0x9F) || (first == 0xF4 && bytes[1] > 0x8F);
    return is_overlong || is_beyond ? 0 : length;
}

static bool check_utf8(struct scanner *scanner)
{
    size_t line = 1;
    for (size_t at = 0; at < scanner->length;) {
        const unsigned char *bytes = (const unsigned char *)scanner->text + at;
        size_t length = utf8_length(bytes, scanner->length - at);
        if (length == 0 || *bytes == '\0') {
            settings_report_add(scanner->report, line, "byte 0x%02X is not text: expected UTF-8", *bytes);
            return false;
        }
        line += *bytes == '\n';
        at += length;
    }
    return true;
}

/* --- faults that stop the scan --- */

/* Prints the character that is there, never a control character. */
static void stop(struct scanner *scanner, const char *expected)
{
    if (scanner->status != FW_OK)
        return;
    scanner->status = FW_BAD_INPUT;
    unsigned char found = (unsigned char)peek(scanner);
    if (scanner->at >= scanner->length)
        settings_report_add(scanner->report, scanner->line, "the file ends here: expected %s", expected);
    else if (found < 0x20 || found == 0x7F)
        settings_report_add(scanner->report, scanner->line, "found a control character (0x%02X): expected %s", found,
                            expected);
    else
        settings_report_add(
            scanner->report, scanner->line, "found '%.*s': expected %s",
            (int)utf8_length((const unsigned char *)scanner->text + scanner->at, scanner->length - scanner->at),
            scanner->text + scanner->at, expected);
}

/* --- blanks and comments --- */

static void skip_blanks(struct scanner *scanner)
{
    while (scanner->at < scanner->length) {
        char c = peek(scanner);
        if (c == '/' && scanner->at + 1 < scanner->length && scanner->text[scanner->at + 1] == '/') {
            while (scanner->at < scanner->length && peek(scanner) != '\n')
                scanner->scan->clean[scanner->at++] = ' ';
        } else if (c == ' ' || c == '\t' || c == '\r' || c == '\n') {
            scanner->line += c == '\n';
            scanner->at++;
        } else {
            return;
        }
    }
}

/* --- values --- */

static struct json_position *begin_value(struct scanner *scanner, size_t *index_out)
{
    struct json_scan *scan = scanner->scan;
    if (buffer_grow(&scan->positions, &scan->capacity, scan->count, sizeof *scan->positions) != FW_OK) {
        scanner->status = FW_NO_MEMORY;
        return NULL;
    }
    *index_out = scan->count;
    struct json_position *position = &scan->positions[scan->count++];
    *position = (struct json_position){.line = scanner->line, .offset = scanner->at};
    return position;
}

/* Four hexadecimal digits, or -1. */
static long hex4(const struct scanner *scanner, size_t at)
{
    long value = 0;
    for (size_t i = at; i < at + 4; i++) {
        char c = i < scanner->length ? scanner->text[i] : '\0';
        int digit = is_digit(c)            ? c - '0'
                    : c >= 'a' && c <= 'f' ? c - 'a' + 10
                    : c >= 'A' && c <= 'F' ? c - 'A' + 10
                                           : -1;
        if (digit < 0)
            return -1;
        value = value * 16 + digit;
    }
    return value;
}

/* Length of the escape at the backslash; 0: it is none. */
static size_t escape_length(const struct scanner *scanner)
{
    char c = scanner->at + 1 < scanner->length ? scanner->text[scanner->at + 1] : '\0';
    if (c != 'u')
        return c != '\0' && strchr("\"\\/bfnrt", c) != NULL ? 2 : 0;
    long first = hex4(scanner, scanner->at + 2);
    if (first <= 0 || (first >= 0xDC00 && first <= 0xDFFF))
        return 0;
    if (first < 0xD800 || first > 0xDBFF)
        return 6;
    bool has_second = scanner->at + 7 < scanner->length && scanner->text[scanner->at + 6] == '\\' &&
                      scanner->text[scanner->at + 7] == 'u';
    long second = has_second ? hex4(scanner, scanner->at + 8) : -1;
    return second >= 0xDC00 && second <= 0xDFFF ? 12 : 0;
}

/* From the opening quote past the closing one. *fault_out: what was mended. */
static void scan_string(struct scanner *scanner, const char **fault_out)
{
    char *clean = scanner->scan->clean;
    scanner->at++;
    while (scanner->at < scanner->length && peek(scanner) != '"' && peek(scanner) != '\n') {
        size_t length = 1;
        if (peek(scanner) == '\\') {
            length = escape_length(scanner);
            if (length == 0) {
                clean[scanner->at] = '?';
                *fault_out =
                    "has a bad escape: expected \\\" \\\\ \\/ \\b \\f \\n \\r \\t or \\u with four hexadecimal "
                    "digits of a character";
                length = 1;
            }
        } else if ((unsigned char)peek(scanner) < 0x20) {
            clean[scanner->at] = '?';
            *fault_out = "has a control character in it: expected an escape, as \\t";
        }
        scanner->at += length;
    }
    if (peek(scanner) == '"')
        scanner->at++;
    else
        stop(scanner, "the closing \" of a string on the same line");
}

const char *json_scan_number(const char *text, size_t length, double *number_out)
{
    static const char bad_form[] = "is not a number in JSON's form: expected digits as 12, -0.5 or 1.5e3";
    char copy[JSON_SCAN_NUMBER_MAX + 1];
    size_t at = 0;
    if (length > JSON_SCAN_NUMBER_MAX)
        return "is too long for a number: expected at most 60 characters";
    memcpy(copy, text, length);
    copy[length] = '\0';
    at += copy[at] == '-';
    if (copy[at] == '0' && is_digit(copy[at + 1]))
        return "starts with a needless 0: expected a number without it";
    size_t digits = strspn(copy + at, "0123456789");
    if (digits == 0)
        return bad_form;
    at += digits;
    if (copy[at] == '.') {
        digits = strspn(copy + at + 1, "0123456789");
        if (digits == 0)
            return "ends with its decimal point: expected digits after it";
        at += 1 + digits;
    }
    if (copy[at] == 'e' || copy[at] == 'E') {
        at++;
        at += copy[at] == '+' || copy[at] == '-';
        digits = strspn(copy + at, "0123456789");
        if (digits == 0)
            return bad_form;
        at += digits;
    }
    if (at != length)
        return bad_form;
    locale_t plain = newlocale(LC_NUMERIC_MASK, "C", (locale_t)0);
    if (plain == (locale_t)0)
        return "cannot be read: out of memory";
    double number = strtod_l(copy, NULL, plain);
    freelocale(plain);
    if (!isfinite(number))
        return "is too large: expected a number below 1.8e308";
    *number_out = number;
    return NULL;
}

static bool is_word_character(char c)
{
    return is_digit(c) || (c >= 'a' && c <= 'z') || (c >= 'A' && c <= 'Z') ||
           (c != '\0' && strchr("+-._", c) != NULL);
}

/* A number, true, false, null, or a bare word that is none of them and is mended to 0. */
static void scan_word(struct scanner *scanner, struct json_position *position)
{
    const char *word = scanner->text + scanner->at;
    size_t length = 0;
    while (scanner->at + length < scanner->length && is_word_character(word[length]))
        length++;
    if (length == 0) {
        stop(scanner, peek(scanner) == '\'' ? "a string in double quotes" : "a value");
        return;
    }
    position->kind = JSON_NUMBER;
    if (length == 4 && memcmp(word, "true", 4) == 0)
        position->kind = JSON_TRUE;
    else if (length == 5 && memcmp(word, "false", 5) == 0)
        position->kind = JSON_FALSE;
    else if (length == 4 && memcmp(word, "null", 4) == 0)
        position->kind = JSON_NULL;
    else if (is_digit(*word) || strchr("+-.", *word) != NULL)
        position->fault = json_scan_number(word, length, &position->number);
    else
        position->fault = "is not a value: expected a number, true, false, null or a string in double quotes";
    if (position->fault != NULL) {
        memset(scanner->scan->clean + scanner->at, ' ', length);
        scanner->scan->clean[scanner->at] = '0';
    }
    scanner->at += length;
}

static void scan_value(struct scanner *scanner, size_t depth, const struct json_position *key);

/* After a member: true when another one follows. A comma before the closing bracket is reported and blanked. */
static bool scan_comma(struct scanner *scanner, char closing)
{
    skip_blanks(scanner);
    if (peek(scanner) == closing) {
        scanner->at++;
        return false;
    }
    if (peek(scanner) != ',') {
        stop(scanner, closing == '}' ? "',' or '}'" : "',' or ']'");
        return false;
    }
    size_t comma = scanner->at++;
    size_t comma_line = scanner->line;
    skip_blanks(scanner);
    if (peek(scanner) != closing)
        return true;
    settings_report_add(scanner->report, comma_line, "a comma before '%c': expected none after the last member",
                        closing);
    scanner->scan->clean[comma] = ' ';
    scanner->at++;
    return false;
}

static void scan_member(struct scanner *scanner, size_t depth)
{
    struct json_position key = {.key_line = scanner->line, .key_offset = scanner->at};
    if (peek(scanner) != '"') {
        stop(scanner, "a key in double quotes");
        return;
    }
    scan_string(scanner, &key.fault);
    if (scanner->status != FW_OK)
        return;
    key.key_length = scanner->at - key.key_offset;
    skip_blanks(scanner);
    if (peek(scanner) != ':') {
        stop(scanner, "':' after the key");
        return;
    }
    scanner->at++;
    skip_blanks(scanner);
    scan_value(scanner, depth, &key);
}

static void scan_members(struct scanner *scanner, size_t depth, bool is_object)
{
    char closing = is_object ? '}' : ']';
    if (depth >= JSON_SCAN_DEPTH_MAX) {
        stop(scanner, "no more than 32 levels of brackets");
        return;
    }
    scanner->at++;
    skip_blanks(scanner);
    if (peek(scanner) == closing) {
        scanner->at++;
        return;
    }
    do {
        if (is_object)
            scan_member(scanner, depth + 1);
        else
            scan_value(scanner, depth + 1, NULL);
    } while (scanner->status == FW_OK && scan_comma(scanner, closing));
}

static void scan_value(struct scanner *scanner, size_t depth, const struct json_position *key)
{
    size_t index;
    struct json_position *position = begin_value(scanner, &index);
    if (position == NULL)
        return;
    if (key != NULL) {
        position->key_line = key->key_line;
        position->key_offset = key->key_offset;
        position->key_length = key->key_length;
        position->fault = key->fault;
    }
    char c = peek(scanner);
    if (c == '{' || c == '[') {
        position->kind = c == '{' ? JSON_OBJECT : JSON_ARRAY;
        scan_members(scanner, depth, c == '{'); /* may move the positions */
    } else if (c == '"') {
        position->kind = JSON_STRING;
        scan_string(scanner, &position->fault);
    } else {
        scan_word(scanner, position);
    }
    position = &scanner->scan->positions[index];
    position->length = scanner->at - position->offset;
}

enum fw_status json_scan(const char *text, size_t length, struct settings_report *report, struct json_scan *scan_out)
{
    struct json_scan scan = {.clean = malloc(length + 1)};
    struct scanner scanner = {.text = text, .length = length, .line = 1, .report = report, .scan = &scan};
    if (scan.clean == NULL)
        return FW_NO_MEMORY;
    memcpy(scan.clean, text, length);
    scan.clean[length] = '\0';
    if (!check_utf8(&scanner))
        scanner.status = FW_BAD_INPUT;
    if (scanner.status == FW_OK) {
        if (length >= 3 && memcmp(text, "\xEF\xBB\xBF", 3) == 0) { /* a byte order mark */
            memset(scan.clean, ' ', 3);
            scanner.at = 3;
        }
        skip_blanks(&scanner);
        scan_value(&scanner, 0, NULL);
    }
    if (scanner.status == FW_OK) {
        skip_blanks(&scanner);
        if (scanner.at < length)
            stop(&scanner, "nothing after the closing bracket");
    }
    if (scanner.status == FW_OK)
        *scan_out = scan;
    else
        json_scan_clear(&scan);
    return scanner.status;
}

void json_scan_clear(struct json_scan *scan)
{
    free(scan->clean);
    free(scan->positions);
    *scan = (struct json_scan){0};
}
