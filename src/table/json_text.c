/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "table/json_text.h"

#include "core/memory.h"

#include <stdio.h>
#include <string.h>

void lw_json_text_put(lw_json_text *text, const char *bytes, size_t length)
{
    if (text->failed) return;
    if (length > text->room - text->used) {
        size_t room = 2 * text->room + length + 4096;
        char *grown = lw_resize(text->bytes, room, 1);
        text->failed = grown == NULL;
        if (text->failed) return;
        text->bytes = grown;
        text->room = room;
    }
    memcpy(text->bytes + text->used, bytes, length);
    text->used += length;
}

void lw_json_text_line(lw_json_text *text, int depth)
{
    lw_json_text_put(text, "\n", 1);
    for (int i = 0; i < depth; i++) lw_json_text_put(text, "  ", 2);
}

void lw_json_text_string(lw_json_text *text, const char *bytes, size_t length)
{
    char escape[8];
    lw_json_text_put(text, "\"", 1);
    for (size_t i = 0; i < length; i++) {
        unsigned char c = (unsigned char)bytes[i];
        bool separator = text->safe && c == 0xe2 && i + 2 < length && (unsigned char)bytes[i + 1] == 0x80 &&
                         ((unsigned char)bytes[i + 2] & 0xfe) == 0xa8; /* U+2028 and U+2029 */
        if (separator) {
            lw_json_text_put(text, bytes[i + 2] & 1 ? "\\u2029" : "\\u2028", 6);
            i += 2;
        } else if (c == '"' || c == '\\') {
            lw_json_text_put(text, c == '"' ? "\\\"" : "\\\\", 2);
        } else if (c < 0x20 || c == 0x7f || (text->safe && (c == '<' || c == '>' || c == '&'))) {
            (void)snprintf(escape, sizeof escape, "\\u%04x", c);
            lw_json_text_put(text, escape, 6);
        } else {
            lw_json_text_put(text, bytes + i, 1);
        }
    }
    lw_json_text_put(text, "\"", 1);
}

/* Bytes of the well-formed character at `at` (The Unicode Standard, table 3-7), 0 when there is none. */
static size_t character_length(const unsigned char *at)
{
    unsigned char c = at[0], least = 0x80, most = 0xbf;
    size_t length = c < 0x80                 ? 1
                    : c >= 0xc2 && c <= 0xdf ? 2
                    : c >= 0xe0 && c <= 0xef ? 3
                    : c >= 0xf0 && c <= 0xf4 ? 4
                                             : 0;
    if (c == 0xe0) least = 0xa0;
    if (c == 0xed) most = 0x9f;
    if (c == 0xf0) least = 0x90;
    if (c == 0xf4) most = 0x8f;
    for (size_t i = 1; i < length; i++) {
        if (at[i] < least || at[i] > most) return 0;
        least = 0x80;
        most = 0xbf;
    }
    return length;
}

char *lw_utf8_copy(const char *text)
{
    size_t bytes = strlen(text);
    if (bytes > (SIZE_MAX - 1) / 3) return NULL;
    char *copy = lw_alloc(3 * bytes + 1, 1), *to = copy;
    if (copy == NULL) return NULL;
    for (const unsigned char *at = (const unsigned char *)text; *at != '\0';) {
        size_t length = character_length(at);
        memcpy(to, length > 0 ? (const char *)at : "\xef\xbf\xbd", length > 0 ? length : 3);
        to += length > 0 ? length : 3;
        at += length > 0 ? length : 1;
    }
    *to = '\0';
    return copy;
}
