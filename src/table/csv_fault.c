/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "core/memory.h"
#include "table/csv_state.h"

#include <inttypes.h>
#include <stdio.h>
#include <string.h>

#define MOST_FOUND 200

/* The text with control characters escaped, at most `most` bytes of it and whole UTF-8 characters; "..." when
 * cut. */
static void escape(const char *text, size_t length, size_t most, char *out, size_t room)
{
    size_t at = 0, i = 0;
    bool cut = length > most;
    if (cut)
        for (length = most; length > 0 && ((unsigned char)text[length] & 0xc0) == 0x80;) length--;
    for (; i < length && at + 8 < room; i++) {
        unsigned char c = (unsigned char)text[i];
        if (c == '\n' || c == '\r' || c == '\t') {
            out[at++] = '\\';
            out[at++] = c == '\n' ? 'n' : c == '\r' ? 'r' : 't';
        } else if (c < 0x20 || c == 0x7f) {
            at += (size_t)snprintf(out + at, room - at, "\\x%02x", c);
        } else {
            out[at++] = (char)c;
        }
    }
    (void)snprintf(out + at, room - at, "%s", cut || i < length ? "..." : "");
}

const char *lw_csv_quote(const char *text, size_t length, char out[LW_CSV_FOUND])
{
    if (length == 0) {
        memcpy(out, "an empty field", sizeof "an empty field");
        return out;
    }
    out[0] = '\'';
    escape(text, length, 40, out + 1, LW_CSV_FOUND - 2);
    size_t end = strlen(out);
    out[end] = '\'';
    out[end + 1] = '\0';
    return out;
}

void lw_csv_note(lw_csv *csv, int64_t all_row, int64_t field, const char *found, const char *expected)
{
    if (csv->faults++ >= LW_MOST_FAULTS) return;
    lw_csv_pending *p = &csv->pending[csv->pending_count++];
    size_t m = csv->mark_count - 1;
    while (m > 0 && csv->marks_all[m] > all_row) m--;
    lw_csv_mark from = {csv->marks[m].offset, csv->marks[m].line, csv->marks_all[m]};
    p->before_row = csv->rows_parsed;
    if (lw_csv_scan(&csv->source, from, 0, all_row, (int)field, &p->place.line, &p->place.column) != LW_OK)
        p->place = (lw_place){csv->line, 1};
    (void)snprintf(p->text, sizeof p->text, "found %s, expected %s", found, expected);
}

void lw_csv_tell(lw_csv *csv, int64_t row, lw_error *error)
{
    for (; csv->pending_told < csv->pending_count; csv->pending_told++) {
        const lw_csv_pending *p = &csv->pending[csv->pending_told];
        if (p->before_row > row) return;
        (void)lw_fail_also(error, LW_BAD_INPUT, "%s:%" PRId64 ":%" PRId64 ": %s", csv->source.path,
                           p->place.line, p->place.column, p->text);
    }
}

lw_status lw_csv_take_names(lw_csv *csv)
{
    csv->names = LW_NEW_ZEROS(char *, csv->columns);
    if (csv->names == NULL) return LW_NO_MEMORY;
    for (int c = 0; c < csv->columns; c++) {
        const lw_field *field = &csv->fields[c];
        char *name = lw_alloc(field->length + (size_t)1, 1);
        if (name == NULL) return LW_NO_MEMORY;
        memcpy(name, field->text, field->length);
        name[field->length] = '\0';
        csv->names[c] = name;
        int before = 0;
        while (strcmp(csv->names[before], name) != 0) before++;
        if (before == c) continue;
        char quoted[LW_CSV_FOUND], found[LW_CSV_FOUND + 32];
        if (field->length == 0)
            (void)snprintf(quoted, sizeof quoted, "without a name");
        else
            (void)lw_csv_quote(name, field->length, quoted);
        (void)snprintf(found, sizeof found, "a second column %s", quoted);
        lw_csv_note(csv, 0, c, found, "each column once");
    }
    return LW_OK;
}

int lw_csv_columns(const lw_csv *csv)
{
    return csv->columns;
}

const char *lw_csv_name(const lw_csv *csv, int c)
{
    return csv->names[c];
}

int lw_csv_find(const lw_csv *csv, const char *name)
{
    for (int c = 0; c < csv->columns; c++)
        if (strcmp(csv->names[c], name) == 0) return c;
    return -1;
}

int lw_csv_require(const lw_csv *csv, const char *name, const char *expected_header, lw_error *error)
{
    int c = lw_csv_find(csv, name);
    if (c < 0)
        (void)lw_fail_also(error, LW_BAD_INPUT, "%s:%" PRId64 ":1: no column '%s', expected the header %s",
                           csv->source.path, csv->header_line, name, expected_header);
    return c;
}

lw_status lw_csv_locate(const lw_csv *csv, int64_t row, int c, lw_place *out)
{
    *out = (lw_place){csv->header_line, 1};
    if (row < 0 || c < 0 || csv->mark_count == 0) return LW_BAD_SHAPE;
    size_t low = 0, high = csv->mark_count; /* the last mark at or before the row */
    while (high - low > 1) {
        size_t middle = (low + high) / 2;
        if (csv->marks[middle].row <= row)
            low = middle;
        else
            high = middle;
    }
    lw_place place;
    lw_status status =
        lw_csv_scan(&csv->source, csv->marks[low], csv->columns, row, c, &place.line, &place.column);
    if (status == LW_OK) *out = place;
    return status;
}

lw_status lw_csv_fault(const lw_csv *csv, int64_t row, int c, const char *found, const char *expected,
                       lw_error *error)
{
    char text[4 * MOST_FOUND];
    lw_place place = {0, 0};
    if (error == NULL) return LW_BAD_INPUT;
    escape(found, strlen(found), MOST_FOUND, text, sizeof text);
    if (error->faults < LW_MOST_FAULTS) (void)lw_csv_locate(csv, row, c, &place);
    return lw_fail_also(error, LW_BAD_INPUT, "%s:%" PRId64 ":%" PRId64 ": found %s, expected %s",
                        csv->source.path, place.line, place.column, text, expected);
}

lw_status lw_csv_decimal(const lw_csv *csv, const lw_csv_batch *batch, int row, int c, lw_decimal *out,
                         lw_error *error)
{
    const lw_field *field = &batch->fields[(size_t)row * (size_t)batch->columns + (size_t)c];
    lw_number_fault fault = lw_decimal_parse(field->text, field->length, out);
    if (fault == LW_NUMBER_FINE) return LW_OK;
    char found[LW_CSV_FOUND];
    const char *expected = fault == LW_NUMBER_RANGE        ? "a number below 1.8e308"
                           : fault == LW_NUMBER_NOT_FINITE ? "a finite decimal number"
                                                           : "a decimal number";
    size_t length = fault == LW_NUMBER_EMPTY ? 0 : field->length;
    return lw_csv_fault(csv, batch->first_row + row, c, lw_csv_quote(field->text, length, found), expected,
                        error);
}
