/* SPDX-License-Identifier: MIT */
#include "daemon/feed/news.h"

#include <stdarg.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "daemon/buffer.h"

enum fw_status news_add_reading(struct news *news, const struct reading *reading)
{
    enum fw_status status =
        buffer_grow((void *)&news->readings, &news->reading_capacity, news->reading_count, sizeof *news->readings);
    if (status == FW_OK)
        news->readings[news->reading_count++] = *reading;
    return status;
}

enum fw_status news_add_word(struct news *news, const struct word *word)
{
    enum fw_status status =
        buffer_grow((void *)&news->words, &news->word_capacity, news->word_count, sizeof *news->words);
    if (status == FW_OK)
        news->words[news->word_count++] = *word;
    return status;
}

enum fw_status news_add_payload(struct news *news, int32_t gauge, int32_t source, const char *origin,
                                const char *bytes, size_t length)
{
    if (length == SIZE_MAX)
        return FW_NO_MEMORY;
    char *copy = malloc(length + 1);
    if (copy == NULL)
        return FW_NO_MEMORY;
    enum fw_status status =
        buffer_grow((void *)&news->payloads, &news->payload_capacity, news->payload_count, sizeof *news->payloads);
    if (status != FW_OK) {
        free(copy);
        return status;
    }
    memcpy(copy, bytes, length);
    copy[length] = '\0';
    struct news_payload *payload = &news->payloads[news->payload_count++];
    *payload = (struct news_payload){.gauge = gauge, .source = source, .bytes = copy, .length = length};
    snprintf(payload->origin, sizeof payload->origin, "%s", origin);
    return FW_OK;
}

/* How many bytes a well-formed UTF-8 character at `text` has; 0: none starts here (RFC 3629). */
static size_t character_length(const unsigned char *text)
{
    size_t length = text[0] < 0x80                      ? 1
                    : text[0] >= 0xC2 && text[0] < 0xE0 ? 2
                    : text[0] >= 0xE0 && text[0] < 0xF0 ? 3
                    : text[0] >= 0xF0 && text[0] < 0xF5 ? 4
                                                        : 0;
    for (size_t i = 1; i < length; i++)
        if ((text[i] & 0xC0) != 0x80)
            return 0;
    bool is_overlong = (text[0] == 0xE0 && text[1] < 0xA0) || (text[0] == 0xF0 && text[1] < 0x90);
    bool is_outside = (text[0] == 0xED && text[1] >= 0xA0) || (text[0] == 0xF4 && text[1] >= 0x90);
    return length > 1 && (is_overlong || is_outside) ? 0 : length;
}

void news_make_printable(char *text)
{
    for (unsigned char *at = (unsigned char *)text; *at != '\0';) {
        size_t length = character_length(at);
        if (length == 0 || *at < 0x20 || *at == 0x7F) {
            *at = '?';
            length = 1;
        }
        at += length;
    }
}

void news_add_note(struct news *news, int32_t gauge, int32_t source, bool is_fault, const char *format, ...)
{
    if (buffer_grow((void *)&news->notes, &news->note_capacity, news->note_count, sizeof *news->notes) != FW_OK)
        return;
    struct news_note *note = &news->notes[news->note_count++];
    *note = (struct news_note){.gauge = gauge, .source = source, .is_fault = is_fault};
    va_list arguments;
    va_start(arguments, format);
    vsnprintf(note->text, sizeof note->text, format, arguments);
    va_end(arguments);
    news_make_printable(note->text);
}

static char *copy_or_null(const char *text, bool *is_short)
{
    char *copy = text != NULL ? strdup(text) : NULL;
    *is_short |= text != NULL && copy == NULL;
    return copy;
}

static void receipt_clear(struct news_receipt *receipt)
{
    free(receipt->from);
    free(receipt->to);
    free(receipt->reason);
}

enum fw_status news_add_receipt(struct news *news, const char *from, const char *to, const char *reason, void *owner,
                                int64_t position)
{
    bool is_short = false;
    struct news_receipt receipt = {.from = copy_or_null(from, &is_short),
                                   .to = copy_or_null(to, &is_short),
                                   .reason = copy_or_null(reason, &is_short),
                                   .owner = owner,
                                   .position = position};
    enum fw_status status = is_short ? FW_NO_MEMORY
                                     : buffer_grow((void *)&news->receipts, &news->receipt_capacity,
                                                   news->receipt_count, sizeof *news->receipts);
    if (status == FW_OK)
        news->receipts[news->receipt_count++] = receipt;
    else
        receipt_clear(&receipt);
    return status;
}

bool news_is_empty(const struct news *news)
{
    return news->reading_count == 0 && news->word_count == 0;
}

void news_clear(struct news *news)
{
    for (size_t i = 0; i < news->payload_count; i++)
        free(news->payloads[i].bytes);
    for (size_t i = 0; i < news->receipt_count; i++)
        receipt_clear(&news->receipts[i]);
    free(news->readings);
    free(news->words);
    free(news->payloads);
    free(news->notes);
    free(news->receipts);
    *news = (struct news){0};
}
