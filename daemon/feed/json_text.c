/* SPDX-License-Identifier: MIT */
#include "daemon/feed/json_text.h"

#include <stdbool.h>
#include <stdint.h>
#include <string.h>

/* --- the grammar --- */

struct scan {
    const char *at, *end;
    const char *why; /* what was expected at `at` */
};

static bool fails(struct scan *scan, const char *expected)
{
    if (scan->why == NULL)
        scan->why = expected;
    return false;
}

static char peek(const struct scan *scan)
{
    return scan->at < scan->end ? *scan->at : '\0';
}

static bool take(struct scan *scan, char wanted)
{
    bool is_there = scan->at < scan->end && *scan->at == wanted;
    scan->at += is_there;
    return is_there;
}

bool json_text_is_blank(char byte)
{
    return byte == ' ' || byte == '\t' || byte == '\r' || byte == '\n';
}

static void skip_blanks(struct scan *scan)
{
    while (scan->at < scan->end && json_text_is_blank(*scan->at))
        scan->at++;
}

static size_t skip_digits(struct scan *scan)
{
    const char *from = scan->at;
    while (peek(scan) >= '0' && peek(scan) <= '9')
        scan->at++;
    return (size_t)(scan->at - from);
}

static bool scan_number(struct scan *scan)
{
    take(scan, '-');
    if (!take(scan, '0') && skip_digits(scan) == 0)
        return fails(scan, "a digit");
    if (take(scan, '.') && skip_digits(scan) == 0)
        return fails(scan, "a digit after the decimal point");
    if (take(scan, 'e') || take(scan, 'E')) {
        if (!take(scan, '+'))
            take(scan, '-');
        if (skip_digits(scan) == 0)
            return fails(scan, "a digit of the exponent");
    }
    return true;
}

static bool scan_unicode(struct scan *scan, uint32_t *unit_out)
{
    uint32_t unit = 0;
    for (int i = 0; i < 4; i++) {
        static const char digits[] = "0123456789abcdef0123456789ABCDEF";
        const char *found = peek(scan) != '\0' ? strchr(digits, peek(scan)) : NULL;
        if (found == NULL)
            return fails(scan, "four hexadecimal digits");
        unit = unit * 16 + (uint32_t)((found - digits) % 16);
        scan->at++;
    }
    *unit_out = unit;
    return true;
}

/* After the backslash. Characters beyond the first plane come as two halves, which must be whole. */
static bool scan_escape(struct scan *scan)
{
    uint32_t unit = 0;
    if (peek(scan) != '\0' && strchr("\"\\/bfnrt", peek(scan)) != NULL) {
        scan->at++;
        return true;
    }
    if (!take(scan, 'u') || !scan_unicode(scan, &unit))
        return fails(scan, "an escape");
    if (unit == 0)
        return fails(scan, "no zero character");
    if (unit < 0xD800 || unit > 0xDFFF)
        return true;
    if (unit > 0xDBFF || !take(scan, '\\') || !take(scan, 'u') || !scan_unicode(scan, &unit) || unit < 0xDC00 ||
        unit > 0xDFFF)
        return fails(scan, "both halves of a character");
    return true;
}

static bool scan_string(struct scan *scan)
{
    if (!take(scan, '"'))
        return fails(scan, "a quote");
    while (!take(scan, '"')) {
        if (scan->at >= scan->end || (unsigned char)*scan->at < 0x20)
            return fails(scan, "the closing quote");
        if (take(scan, '\\')) {
            if (!scan_escape(scan))
                return false;
        } else {
            scan->at++;
        }
    }
    return true;
}

static bool scan_literal(struct scan *scan)
{
    static const char *const literals[] = {"true", "false", "null"};
    for (size_t i = 0; i < 3; i++) {
        size_t length = strlen(literals[i]);
        if ((size_t)(scan->end - scan->at) >= length && memcmp(scan->at, literals[i], length) == 0) {
            scan->at += length;
            return true;
        }
    }
    return fails(scan, "a value");
}

static bool scan_value(struct scan *scan, int depth);

/* The members of an array or object, after its opening. */
static bool scan_members(struct scan *scan, bool is_object, int depth)
{
    char closing = is_object ? '}' : ']';
    skip_blanks(scan);
    if (take(scan, closing))
        return true;
    do {
        skip_blanks(scan);
        if (is_object) {
            if (!scan_string(scan))
                return false;
            skip_blanks(scan);
            if (!take(scan, ':'))
                return fails(scan, "a colon");
        }
        if (!scan_value(scan, depth))
            return false;
        skip_blanks(scan);
    } while (take(scan, ','));
    return take(scan, closing) || fails(scan, is_object ? "a comma or }" : "a comma or ]");
}

static bool scan_value(struct scan *scan, int depth)
{
    skip_blanks(scan);
    char first = peek(scan);
    if (first == '{' || first == '[') {
        if (depth >= JSON_TEXT_DEPTH)
            return fails(scan, "fewer levels of brackets");
        scan->at++;
        return scan_members(scan, first == '{', depth + 1);
    }
    if (first == '"')
        return scan_string(scan);
    if (first == '-' || (first >= '0' && first <= '9'))
        return scan_number(scan);
    return scan_literal(scan);
}

enum fw_status json_text_parse(const char *bytes, size_t length, cJSON **root_out, struct fw_error *error)
{
    size_t mark = length >= 3 && memcmp(bytes, "\xEF\xBB\xBF", 3) == 0 ? 3 : 0;
    struct scan scan = {.at = bytes + mark, .end = bytes + length};
    bool is_whole = scan_value(&scan, 0);
    skip_blanks(&scan);
    if (is_whole && scan.at < scan.end)
        is_whole = fails(&scan, "nothing more");
    if (!is_whole)
        return fw_error_set(error, FW_BAD_INPUT, "not JSON at byte %zu of %zu: expected %s",
                            (size_t)(scan.at - bytes) + 1, length, scan.why);
    cJSON *root = cJSON_ParseWithLength(bytes + mark, length - mark);
    if (root == NULL) /* the grammar holds, so that only memory can be missing */
        return fw_error_set(error, FW_NO_MEMORY, "out of memory for %zu bytes of JSON", length);
    *root_out = root;
    return FW_OK;
}

/* --- pointers --- */

/* Does a member's name equal the token, in which ~1 stands for / and ~0 for ~? */
static bool is_token(const char *token, size_t length, const char *name)
{
    const char *end = token + length;
    for (; token < end; token++, name++) {
        char wanted = *token;
        if (wanted == '~') {
            if (++token == end || (*token != '0' && *token != '1'))
                return false; /* no such escape: no pointer */
            wanted = *token == '1' ? '/' : '~';
        }
        if (*name != wanted)
            return false;
    }
    return *name == '\0';
}

static const cJSON *array_item(const cJSON *array, const char *token, size_t length)
{
    size_t index = 0;
    if (length == 0 || length > 9 || (length > 1 && token[0] == '0'))
        return NULL;
    for (size_t i = 0; i < length; i++) {
        if (token[i] < '0' || token[i] > '9')
            return NULL;
        index = index * 10 + (size_t)(token[i] - '0');
    }
    const cJSON *item = array->child;
    for (; item != NULL && index > 0; index--)
        item = item->next;
    return item;
}

const cJSON *json_text_at(const cJSON *from, const char *pointer)
{
    const cJSON *at = from;
    while (at != NULL && *pointer != '\0') {
        if (*pointer != '/')
            return NULL;
        const char *token = pointer + 1;
        size_t length = strcspn(token, "/");
        if (cJSON_IsArray(at)) {
            at = array_item(at, token, length);
        } else if (cJSON_IsObject(at)) {
            for (at = at->child; at != NULL && !is_token(token, length, at->string);)
                at = at->next;
        } else {
            return NULL;
        }
        pointer = token + length;
    }
    return at;
}
