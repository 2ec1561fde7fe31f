/* SPDX-License-Identifier: MIT */
#include "daemon/journal.h"

#include <stdarg.h>
#include <stdint.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>

/* systemd sets JOURNAL_STREAM to "device:inode" of the stream it gave us; a redirected stderr no longer matches. */
static bool is_journal_stream(FILE *stream)
{
    const char *stated = getenv("JOURNAL_STREAM");
    int file = stream != NULL ? fileno(stream) : -1;
    struct stat facts;
    if (stated == NULL || file < 0 || fstat(file, &facts) != 0)
        return false;
    char *colon = NULL;
    char *end = NULL;
    unsigned long long device = strtoull(stated, &colon, 10);
    if (colon == stated || *colon != ':')
        return false;
    unsigned long long inode = strtoull(colon + 1, &end, 10);
    return end != colon + 1 && *end == '\0' && device == facts.st_dev && inode == facts.st_ino;
}

struct journal journal_open(FILE *stream, enum journal_priority most)
{
    return (struct journal){.stream = stream, .has_prefix = is_journal_stream(stream), .most = most};
}

/* Length of the well-formed UTF-8 character at bytes that is no control character; 0: none starts there. */
static size_t plain_character_length(const unsigned char *bytes)
{
    unsigned char first = bytes[0];
    if (first < 0x20 || first == 0x7f)
        return 0;
    if (first < 0x80)
        return 1;
    size_t length = first >= 0xf0 ? 4 : first >= 0xe0 ? 3 : 2;
    if (first < 0xc2 || first > 0xf4)
        return 0;
    for (size_t i = 1; i < length; i++)
        if ((bytes[i] & 0xc0) != 0x80)
            return 0; /* the closing zero ends here too */
    if (first == 0xc2 && bytes[1] < 0xa0)
        return 0; /* C1 controls: a terminal obeys some of them */
    if ((first == 0xe0 && bytes[1] < 0xa0) || (first == 0xed && bytes[1] > 0x9f) ||
        (first == 0xf0 && bytes[1] < 0x90) || (first == 0xf4 && bytes[1] > 0x8f))
        return 0;
    return length;
}

/* Writes `text` as one line without control bytes; "..." at the end says that it was cut. */
static void escape_line(const char *text, bool was_cut, char *line_out, size_t line_size)
{
    static const char more[] = "...";
    const unsigned char *from = (const unsigned char *)text;
    size_t room = line_size - sizeof more;
    size_t length = 0;
    while (*from != '\0') {
        size_t plain = plain_character_length(from);
        size_t needed = plain > 0 ? plain : 4;
        if (length + needed > room) {
            was_cut = true;
            break;
        }
        if (plain > 0)
            memcpy(line_out + length, from, plain);
        else
            snprintf(line_out + length, 5, "\\x%02x", *from);
        length += needed;
        from += plain > 0 ? plain : 1;
    }
    memcpy(line_out + length, was_cut ? more : "", was_cut ? sizeof more : 1);
}

static void write_line(struct journal *journal, enum journal_priority priority, const char *line)
{
    if (journal->has_prefix)
        fprintf(journal->stream, "<%d>%s\n", (int)priority, line);
    else
        fprintf(journal->stream, "%s\n", line);
    fflush(journal->stream);
}

void journal_say(struct journal *journal, enum journal_priority priority, const char *format, ...)
{
    if (journal->stream == NULL || priority > journal->most)
        return;
    char text[2 * sizeof journal->last];
    va_list arguments;
    va_start(arguments, format);
    int length = vsnprintf(text, sizeof text, format, arguments);
    va_end(arguments);
    if (length < 0)
        return;
    if (length > 0 && (size_t)length < sizeof text && text[length - 1] == '\n')
        text[length - 1] = '\0';
    char line[sizeof journal->last];
    escape_line(text, (size_t)length >= sizeof text, line, sizeof line);
    if (journal->last_priority == priority && strcmp(journal->last, line) == 0) {
        journal->repeated++;
        return;
    }
    journal_flush(journal);
    write_line(journal, priority, line);
    journal->last_priority = priority;
    memcpy(journal->last, line, sizeof line);
}

void journal_flush(struct journal *journal)
{
    if (journal->stream == NULL || journal->repeated == 0)
        return;
    char line[64];
    snprintf(line, sizeof line, "(the line before came again, %zu times)", journal->repeated);
    write_line(journal, journal->last_priority, line);
    journal->repeated = 0;
}
