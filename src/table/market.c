/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "table/market.h"

#include "core/memory.h"
#include "table/source.h"

#include <inttypes.h>
#include <string.h>
#include <strings.h>

#define ROOM ((size_t)1 << 18) /* also the longest line */

/* Lines of the file, one at a time, and the words of a line. */
typedef struct reader {
    lw_source source;
    char *buffer;
    size_t begin, end; /* bytes waiting */
    bool file_ended;
    const char *at, *line_end; /* what is left of the line */
    const char *line_start;
    int64_t line;
    bool pattern, symmetric;
    int64_t stated; /* entry lines by the size line */
    lw_market *out;
    int64_t room;
    lw_error *error;
    int faults;
} reader;

static lw_status refuse(reader *r, const char *at, const char *found, size_t length, const char *expected)
{
    char text[48];
    size_t kept = length < 40 ? length : 40;
    for (size_t i = 0; i < kept; i++)
        text[i] = (unsigned char)found[i] < 0x20 || found[i] == 0x7f ? '?' : found[i];
    text[kept] = '\0';
    r->faults++;
    return lw_fail_also(r->error, LW_BAD_INPUT, "%s:%" PRId64 ":%" PRId64 ": found %s%s%s%s, expected %s",
                        r->source.path, r->line, (int64_t)(at - r->line_start) + 1, length > 0 ? "'" : "",
                        length > 0 ? text : "nothing", length > kept ? "..." : "", length > 0 ? "'" : "",
                        expected);
}

/* The next line, without its end. *more false at the end of the file. */
static lw_status next_line(reader *r, bool *more)
{
    const char *found = NULL;
    while ((found = memchr(r->buffer + r->begin, '\n', r->end - r->begin)) == NULL && !r->file_ended) {
        memmove(r->buffer, r->buffer + r->begin, r->end - r->begin);
        r->end -= r->begin;
        r->begin = 0;
        r->line_start = r->at = r->buffer;
        if (r->end == ROOM) {
            r->line++;
            return refuse(r, r->buffer, r->buffer, 40, "lines of less than 256 KiB");
        }
        size_t got;
        lw_status status = lw_source_read(&r->source, r->buffer + r->end, ROOM - r->end, &got, r->error);
        if (status != LW_OK) return status;
        r->end += got;
        r->file_ended = got == 0;
    }
    *more = found != NULL || r->begin < r->end;
    r->line++;
    r->line_start = r->at = r->buffer + r->begin;
    r->line_end = found != NULL ? found : r->buffer + r->end;
    r->begin = (size_t)(r->line_end - r->buffer) + (found != NULL);
    return LW_OK;
}

static bool is_blank(char c)
{
    return c == ' ' || c == '\t' || c == '\r';
}

/* The next word of the line; empty at its end. */
static const char *next_word(reader *r, size_t *length)
{
    while (r->at < r->line_end && is_blank(*r->at)) r->at++;
    const char *word = r->at;
    while (r->at < r->line_end && !is_blank(*r->at)) r->at++;
    *length = (size_t)(r->at - word);
    return word;
}

static bool word_is(const char *word, size_t length, const char *name)
{
    return length == strlen(name) && strncasecmp(word, name, length) == 0;
}

/* The next line that is neither blank nor a comment. */
static lw_status next_content(reader *r, bool *more)
{
    for (;;) {
        lw_status status = next_line(r, more);
        if (status != LW_OK || !*more) return status;
        while (r->at < r->line_end && is_blank(*r->at)) r->at++;
        if (r->at < r->line_end && *r->line_start != '%') return LW_OK;
    }
}

static lw_status read_integer(reader *r, int64_t least, int64_t most, const char *expected, int64_t *out)
{
    size_t length;
    const char *word = next_word(r, &length);
    int64_t value = 0;
    bool fine = length > 0 && length < 19;
    for (size_t i = 0; i < length && fine; i++) {
        fine = word[i] >= '0' && word[i] <= '9';
        value = 10 * value + (word[i] - '0');
    }
    if (!fine || value < least || value > most) return refuse(r, word, word, length, expected);
    *out = value;
    return LW_OK;
}

static lw_status read_line_end(reader *r)
{
    size_t length;
    const char *word = next_word(r, &length);
    return length == 0 ? LW_OK : refuse(r, word, word, length, "the end of the line");
}

/* %%MatrixMarket matrix coordinate real|integer|pattern general|symmetric */
static lw_status read_banner(reader *r)
{
    static const char *const expected[] = {"%%MatrixMarket", "matrix", "coordinate",
                                           "real, integer or pattern", "general or symmetric"};
    bool more;
    lw_status status = next_line(r, &more);
    for (int i = 0; i < 5 && status == LW_OK; i++) {
        size_t length;
        const char *word = next_word(r, &length);
        bool fine = i < 3 && word_is(word, length, expected[i]);
        if (i == 3) {
            r->pattern = word_is(word, length, "pattern");
            fine = r->pattern || word_is(word, length, "real") || word_is(word, length, "integer");
        } else if (i == 4) {
            r->symmetric = word_is(word, length, "symmetric");
            fine = r->symmetric || word_is(word, length, "general");
        }
        if (!fine) status = refuse(r, word, word, length, expected[i]);
    }
    return status == LW_OK ? read_line_end(r) : status;
}

static lw_status read_sizes(reader *r)
{
    bool more;
    lw_market *out = r->out;
    const char *expected = "rows, columns and entries, three whole numbers";
    lw_status status = next_content(r, &more);
    if (status == LW_OK && !more) status = refuse(r, r->line_start, "", 0, expected);
    if (status == LW_OK) status = read_integer(r, 1, INT64_MAX, expected, &out->rows);
    if (status == LW_OK) status = read_integer(r, 1, INT64_MAX, expected, &out->columns);
    const char *at = r->at;
    if (status == LW_OK) status = read_integer(r, 0, INT64_MAX / 64, expected, &r->stated);
    if (status == LW_OK) status = read_line_end(r);
    if (status != LW_OK) return status;
    while (at < r->line_end && is_blank(*at)) at++;
    /* "1 1\n" is the shortest entry: more entries than the file has room for are not even allocated */
    if (r->stated > r->source.size / 4 + 1)
        return refuse(r, at, at, (size_t)(r->line_end - at), "no more entries than the file has lines");
    if (r->symmetric && out->rows != out->columns)
        return refuse(r, r->line_start, r->line_start, (size_t)(r->line_end - r->line_start),
                      "a square symmetric matrix");
    return LW_OK;
}

static lw_status make_room(reader *r, const lw_watch *watch)
{
    lw_market *out = r->out;
    r->room = r->symmetric ? 2 * r->stated : r->stated;
    lw_status status =
        lw_watch_budget(watch, lw_bytes(r->room, 40), r->source.path, "raise --memory", r->error);
    if (status != LW_OK) return status;
    out->row = LW_NEW_ARRAY(int64_t, r->room);
    out->column = LW_NEW_ARRAY(int64_t, r->room);
    out->value = LW_NEW_ARRAY(double, r->room);
    out->line = LW_NEW_ARRAY(int64_t, r->room);
    if (out->row == NULL || out->column == NULL || out->value == NULL || out->line == NULL)
        return lw_fail_memory(r->error, r->source.path, (size_t)r->room * 32);
    return LW_OK;
}

static lw_status keep(reader *r, int64_t row, int64_t column, lw_decimal value)
{
    lw_market *out = r->out;
    int64_t i = out->entries;
    if (value.low != 0.0 && out->low == NULL) {
        out->low = LW_NEW_ZEROS(double, r->room);
        if (out->low == NULL) return lw_fail_memory(r->error, r->source.path, (size_t)r->room * 8);
    }
    out->row[i] = row - 1;
    out->column[i] = column - 1;
    out->value[i] = value.high;
    out->line[i] = r->line;
    if (out->low != NULL) out->low[i] = value.low;
    out->entries++;
    return LW_OK;
}

static lw_status read_entry(reader *r)
{
    int64_t row = 0, column = 0;
    lw_decimal value = {1.0, 0.0};
    lw_status status = read_integer(r, 1, r->out->rows, "a row number of the matrix", &row);
    if (status != LW_OK) return status;
    while (r->at < r->line_end && is_blank(*r->at)) r->at++;
    const char *at = r->at;
    status = read_integer(r, 1, r->out->columns, "a column number of the matrix", &column);
    if (status != LW_OK) return status;
    if (r->symmetric && column > row)
        return refuse(r, at, at, (size_t)(r->at - at), "an entry on or below the diagonal");
    if (!r->pattern) {
        size_t length;
        const char *word = next_word(r, &length);
        lw_number_fault fault = lw_decimal_parse(word, length, &value);
        if (fault != LW_NUMBER_FINE)
            return refuse(r, word, word, length,
                          fault == LW_NUMBER_RANGE        ? "a number below 1.8e308"
                          : fault == LW_NUMBER_NOT_FINITE ? "a finite decimal number"
                                                          : "a decimal number");
    }
    status = read_line_end(r);
    if (status == LW_OK) status = keep(r, row, column, value);
    if (status == LW_OK && r->symmetric && row != column) status = keep(r, column, row, value);
    return status;
}

/* Faults of entries are gathered; everything else ends the reading. */
static lw_status read_entries(reader *r, const lw_watch *watch)
{
    for (int64_t i = 0;; i++) {
        bool more;
        if (i % 65536 == 0) {
            if (lw_watch_cancelled(watch))
                return lw_fail(r->error, LW_INTERRUPTED, "interrupted while reading");
            lw_watch_tick(watch, "reading", (double)r->source.bytes, (double)r->source.size, "");
        }
        lw_status status = next_content(r, &more);
        if (status != LW_OK) return status;
        if (!more && i < r->stated)
            return refuse(r, r->line_start, "", 0, "as many entries as the size line states");
        if (!more) return r->faults == 0 ? LW_OK : LW_BAD_INPUT;
        if (i == r->stated) {
            size_t length;
            const char *word = next_word(r, &length);
            return refuse(r, word, word, length, "no more entries than the size line states");
        }
        status = read_entry(r);
        if (status != LW_OK && status != LW_BAD_INPUT) return status;
    }
}

lw_status lw_market_read(const char *path, const lw_watch *watch, lw_market *out, lw_error *error)
{
    reader r = {.out = out, .error = error};
    *out = (lw_market){0};
    lw_status status = lw_source_open(&r.source, path, error);
    if (status != LW_OK) return status;
    r.buffer = lw_alloc(ROOM, 1);
    if (r.buffer == NULL) status = lw_fail_memory(error, "reading a matrix", ROOM);
    if (status == LW_OK) status = read_banner(&r);
    if (status == LW_OK) status = read_sizes(&r);
    if (status == LW_OK) status = make_room(&r, watch);
    if (status == LW_OK) status = read_entries(&r, watch);
    if (status == LW_OK) {
        out->bytes = r.source.bytes;
        lw_digest_hex(r.source.digest, out->sha256);
        if (out->sha256[0] == '\0') status = lw_fail_memory(error, "a digest", 64);
    }
    if (status != LW_OK) lw_market_clear(out);
    lw_free(r.buffer);
    lw_source_clear(&r.source);
    return status;
}

void lw_market_clear(lw_market *market)
{
    if (market == NULL) return;
    lw_free(market->row);
    lw_free(market->column);
    lw_free(market->value);
    lw_free(market->low);
    lw_free(market->line);
    *market = (lw_market){0};
}
