/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "problem/input.h"

#include "core/memory.h"

#include <stdarg.h>
#include <stdio.h>
#include <string.h>

#define FOUND_TEXT 800

lw_status lw_input_open(lw_reading *reading, const char *path, lw_input *out)
{
    *out = (lw_input){.reading = reading, .before = reading->error->faults};
    lw_error own = {0};
    lw_status status = lw_csv_open(path, &out->csv, &own);
    if (status == LW_BAD_INPUT) {
        reading->faulty = true;
        lw_fail_also(reading->error, LW_BAD_INPUT, "%s", own.text);
        return LW_OK;
    }
    return status == LW_OK ? LW_OK : lw_fail(reading->error, status, "%s", own.text);
}

int lw_input_require(lw_input *input, const char *name, const char *header)
{
    if (input->csv == NULL) return -1;
    int c = lw_csv_require(input->csv, name, header, input->reading->error);
    if (c < 0) input->reading->faulty = true;
    return c;
}

bool lw_input_faulty(const lw_input *input)
{
    return input->csv == NULL || input->reading->error->faults > input->before;
}

lw_status lw_input_next(lw_input *input, lw_csv_batch *batch)
{
    lw_reading *reading = input->reading;
    *batch = (lw_csv_batch){0};
    if (input->csv == NULL || reading->error->faults - input->before >= LW_MOST_FAULTS) return LW_OK;
    lw_status status = lw_csv_next(input->csv, batch, reading->watch, reading->error);
    if (reading->error->faults > input->before) reading->faulty = true;
    if (batch->rows == 0) input->ended = true;
    if (status != LW_BAD_INPUT) return status;
    reading->faulty = true;
    return LW_OK;
}

void lw_input_refuse(lw_input *input, int64_t row, int c, const char *expected, const char *found, ...)
{
    char text[FOUND_TEXT];
    va_list list;
    va_start(list, found);
    (void)vsnprintf(text, sizeof text, found, list);
    va_end(list);
    input->reading->faulty = true;
    (void)lw_csv_fault(input->csv, row, c, text, expected, input->reading->error);
}

void lw_reading_fault(lw_reading *reading, const char *format, ...)
{
    char text[2 * FOUND_TEXT];
    va_list list;
    va_start(list, format);
    (void)vsnprintf(text, sizeof text, format, list);
    va_end(list);
    reading->faulty = true;
    (void)lw_fail_also(reading->error, LW_BAD_INPUT, "%s", text);
}

void lw_input_refuse_empty(lw_input *input, const char *expected)
{
    const char *path = lw_csv_path(input->csv);
    lw_place place = lw_header_place(path, 0);
    lw_reading_fault(input->reading, "%s:%lld:1: found no row under the header, expected %s", path,
                     (long long)(place.line > 0 ? place.line : 1), expected);
}

lw_status lw_input_note(lw_reading *reading, const char *path, int64_t bytes, const char *sha256)
{
    lw_problem *problem = reading->problem;
    lw_input_file *inputs =
        lw_resize(problem->inputs, (size_t)problem->input_count + 1, sizeof(lw_input_file));
    if (inputs == NULL) return lw_fail_memory(reading->error, "the list of inputs", sizeof(lw_input_file));
    problem->inputs = inputs;
    lw_input_file *file = inputs + problem->input_count;
    *file = (lw_input_file){.path = lw_copy_text(path), .bytes = bytes};
    if (file->path == NULL) return lw_fail_memory(reading->error, "the list of inputs", strlen(path));
    (void)snprintf(file->sha256, sizeof file->sha256, "%s", sha256);
    problem->input_count++;
    return LW_OK;
}

lw_status lw_input_close(lw_input *input)
{
    lw_status status = LW_OK;
    char hex[65];
    if (input->csv != NULL && input->ended) {
        lw_error own = {0};
        status = lw_csv_digest(input->csv, hex, &own);
        if (status != LW_OK) lw_fail(input->reading->error, status, "%s", own.text);
        if (status == LW_OK)
            status = lw_input_note(input->reading, lw_csv_path(input->csv), lw_csv_bytes(input->csv), hex);
    }
    if (input->csv != input->reading->observations) lw_csv_close(input->csv);
    input->csv = NULL;
    return status;
}

const char *lw_show(const lw_field *field, char text[LW_SHOWN])
{
    return lw_csv_quote(field->text, field->length, text);
}

const char *lw_show_id(const lw_ids *ids, int64_t i, char text[LW_SHOWN])
{
    const char *name = lw_ids_name(ids, i);
    return lw_csv_quote(name, strlen(name), text);
}

bool lw_input_number(lw_input *input, int64_t row, int c, const lw_field *field, lw_demand demand,
                     lw_decimal *out)
{
    static const char *const expected[] = {"a number", "a positive number", "a number that is not negative"};
    char shown[LW_SHOWN];
    lw_number_fault fault = lw_decimal_parse(field->text, field->length, out);
    if (fault == LW_NUMBER_EMPTY)
        lw_input_refuse(input, row, c, expected[demand], "an empty field");
    else if (fault != LW_NUMBER_FINE)
        lw_input_refuse(input, row, c, expected[demand], "%s (%s)", lw_show(field, shown),
                        lw_number_fault_name(fault));
    else if ((demand == LW_POSITIVE && !(out->high > 0.0)) || (demand == LW_NOT_NEGATIVE && out->high < 0.0))
        lw_input_refuse(input, row, c, expected[demand], "%s", lw_show(field, shown));
    else if (fabs(out->high) > LW_LARGEST_NUMBER || (demand == LW_POSITIVE && out->high < LW_LEAST_SIGMA))
        lw_input_refuse(
            input, row, c,
            "a size within 1e-75 and 1e75, so that squares and quotients stay numbers (change the unit)",
            "%s", lw_show(field, shown));
    else
        return true;
    *out = lw_decimal_of((double)NAN);
    return false;
}

bool lw_input_id(lw_input *input, int64_t row, int c, const lw_field *field)
{
    if (field->length > 0) return true;
    lw_input_refuse(input, row, c, "an id", "an empty field");
    return false;
}

/* Whether the byte just read ends a line: a newline, or a return that no newline follows. */
static bool ends_line(FILE *file, int byte)
{
    if (byte != '\r') return byte == '\n';
    int next = getc(file);
    (void)ungetc(next, file);
    return next != '\n';
}

/* Column of the byte where header field c begins, in a line whose first byte has been read. */
static int64_t header_column(FILE *file, int first_byte, int c)
{
    bool quoted = false;
    int64_t column = 1;
    for (int byte = first_byte, field = 0; byte != EOF && field < c; byte = getc(file), column++) {
        if (byte == '"') quoted = !quoted;
        if (byte == ',' && !quoted) field++;
        if (ends_line(file, byte) && !quoted) break;
    }
    return column;
}

lw_place lw_header_place(const char *path, int c)
{
    lw_place place = {0, 0};
    FILE *file = fopen(path, "rb");
    if (file == NULL) return place;
    int byte = getc(file);
    if (byte == 0xef) { /* byte-order mark */
        (void)getc(file);
        (void)getc(file);
        byte = getc(file);
    }
    for (place.line = 1; byte == '#' || byte == '\n' || byte == '\r'; place.line++) {
        while (byte != EOF && !ends_line(file, byte)) byte = getc(file);
        byte = getc(file);
    }
    place.column = header_column(file, byte, c);
    (void)fclose(file);
    return place;
}
