/* SPDX-License-Identifier: GPL-3.0-or-later */
/* libcsv takes a chunk apart; its fields are copied into one arena and wait there as whole rows. */
#include "table/csv_read.h"

#include "core/memory.h"
#include "table/csv_state.h"

#include <csv.h>
#include <inttypes.h>
#include <stdio.h>
#include <string.h>

#define LONGEST_FIELD ((size_t)1 << 24) /* beyond it a quote must have been left open */
#define SHORT_COPY 16                   /* a field up to this length is copied in one move */

static void take_field(void *text, size_t length, void *state)
{
    lw_csv *csv = state;
    if (csv->row_fields++ >= csv->columns || csv->stop) return;
    char *copy = csv->arena + csv->arena_used;
    if (length > SHORT_COPY)
        memcpy(copy, text, length);
    else if (text != NULL)
        memcpy(copy, text, SHORT_COPY);
    csv->arena_used += length;
    csv->fields[csv->field_count++] = (lw_field){copy, (uint32_t)length, csv->quoted};
    if (csv->has_nul && !csv->row_spoiled && length > 0 && memchr(copy, 0, length) != NULL) {
        csv->row_spoiled = true;
        csv->spoiled_field = csv->row_fields - 1;
    }
}

/* The first field of the row begun. */
static size_t row_start(const lw_csv *csv)
{
    int64_t held = csv->row_fields < csv->columns ? csv->row_fields : csv->columns;
    return csv->field_count - (size_t)held;
}

static void drop_row(lw_csv *csv)
{
    csv->field_count = row_start(csv);
    csv->row_fields = 0;
    csv->row_spoiled = false;
    csv->all_rows++;
}

static void refuse_row(lw_csv *csv)
{
    if (csv->row_spoiled) {
        lw_csv_note(csv, csv->all_rows, csv->spoiled_field, "a field with a NUL byte", "text");
    } else {
        char found[64], expected[64];
        (void)snprintf(found, sizeof found, "%" PRId64 " field%s", csv->row_fields,
                       csv->row_fields == 1 ? "" : "s");
        (void)snprintf(expected, sizeof expected, "%d as in the header", csv->columns);
        lw_csv_note(csv, csv->all_rows, csv->row_fields > csv->columns ? csv->columns : csv->row_fields,
                    found, expected);
    }
    drop_row(csv);
}

static void take_header(lw_csv *csv)
{
    if (csv->row_spoiled) {
        lw_csv_note(csv, 0, csv->spoiled_field, "a field with a NUL byte", "text in UTF-8");
    } else if (csv->row_fields > csv->columns) {
        lw_csv_note(csv, 0, csv->columns, "more columns", "4096 at most");
    } else {
        csv->columns = (int)csv->row_fields;
        csv->status = lw_csv_take_names(csv);
    }
    csv->header_done = true;
    csv->stop = csv->faults > 0 || csv->status != LW_OK;
    drop_row(csv);
    csv->field_count = 0;
}

static void take_row(int end, void *state)
{
    (void)end;
    lw_csv *csv = state;
    if (csv->stop) return; /* the rest of the span still comes here */
    if (!csv->header_done) {
        take_header(csv);
    } else if (csv->row_fields != csv->columns || csv->row_spoiled) {
        refuse_row(csv);
    } else {
        csv->row_fields = 0;
        csv->rows_parsed++;
        csv->all_rows++;
    }
}

lw_status lw_csv_parser_open(lw_csv *csv)
{
    if (csv->parser == NULL) csv->parser = LW_NEW(struct csv_parser);
    if (csv->parser == NULL) return LW_NO_MEMORY;
    if (csv->parser_open) csv_free(csv->parser);
    csv->parser_open = csv_init(csv->parser, CSV_STRICT | CSV_STRICT_FINI | CSV_EMPTY_IS_NULL) == 0;
    if (!csv->parser_open) return LW_NO_MEMORY;
    csv_set_realloc_func(csv->parser, lw_hook_realloc);
    csv_set_free_func(csv->parser, lw_hook_free);
    csv_set_blk_size(csv->parser, LW_CSV_CHUNK);
    return LW_OK;
}

void lw_csv_parser_close(lw_csv *csv)
{
    if (csv->parser_open) csv_free(csv->parser);
    lw_free(csv->parser);
    lw_free(csv->arena);
    lw_free(csv->fields);
}

bool lw_csv_parser_within(const lw_csv *csv)
{
    return csv->skipping || csv->row_fields > 0 || csv->parser->pstate != 0 || csv->parser->quoted != 0;
}

/* A quote where none may stand: the row is refused, and reading goes on behind its line. */
static lw_status resume(lw_csv *csv)
{
    if (csv_error(csv->parser) != CSV_EPARSE) return LW_NO_MEMORY;
    lw_csv_note(csv, csv->all_rows, csv->row_fields, "a quote inside a field",
                "quotes around the whole field, and doubled inside");
    drop_row(csv);
    csv->skipping = true;
    csv->stop = !csv->header_done;
    return lw_csv_parser_open(csv);
}

/* Bytes in which every field that ends is quoted, or none is. */
static lw_status parse_span(lw_csv *csv, const char *bytes, size_t length)
{
    while (length > 0 && csv->status == LW_OK && !csv->stop) {
        size_t done = 0;
        if (csv->skipping) {
            while (done < length && bytes[done] != '\n' && bytes[done] != '\r') done++;
            csv->skipping = done == length;
        } else {
            done = csv_parse(csv->parser, bytes, length, take_field, take_row, csv);
            if (done < length && !csv->stop) csv->status = resume(csv);
        }
        bytes += done;
        length -= done;
    }
    return csv->status;
}

/* libcsv does not say whether a field was quoted, but its parser knows it before the byte that ends the
 * field. */
static lw_status parse_quotes(lw_csv *csv, const char *bytes, size_t length)
{
    lw_status status = LW_OK;
    while (length > 0 && status == LW_OK && !csv->stop) {
        size_t part = 0;
        while (part < length && bytes[part] != ',' && bytes[part] != '\n' && bytes[part] != '\r') part++;
        status = parse_span(csv, bytes, part);
        csv->quoted = csv->parser->quoted != 0;
        if (part == length || status != LW_OK) break;
        status = parse_span(csv, bytes + part, 1);
        bytes += part + 1;
        length -= part + 1;
    }
    return status;
}

/* Room for the row begun, moved to the front, and for all that a chunk can hold. */
static lw_status make_room(lw_csv *csv, size_t length)
{
    size_t begun = row_start(csv), count = csv->field_count - begun, bytes = 0;
    for (size_t i = 0; i < count; i++) bytes += csv->fields[begun + i].length;
    size_t need = bytes + csv->parser->entry_pos + length + SHORT_COPY, need_fields = count + length + 2;
    if (need_fields > csv->field_room) {
        lw_field *fields = lw_resize(csv->fields, need_fields + need_fields / 2, sizeof *fields);
        if (fields == NULL) return LW_NO_MEMORY;
        csv->fields = fields;
        csv->field_room = need_fields + need_fields / 2;
    }
    char *arena = csv->arena;
    if (need > csv->arena_room) {
        arena = lw_alloc(need + need / 2, 1);
        if (arena == NULL) return LW_NO_MEMORY;
        csv->arena_room = need + need / 2;
    }
    if (bytes > 0) memmove(arena, csv->fields[begun].text, bytes);
    if (arena != csv->arena) lw_free(csv->arena);
    csv->arena = arena;
    csv->arena_used = 0;
    for (size_t i = 0; i < count; i++) {
        csv->fields[i] = csv->fields[begun + i];
        csv->fields[i].text = arena + csv->arena_used;
        csv->arena_used += csv->fields[i].length;
    }
    csv->field_count = count;
    csv->first_field = 0;
    return LW_OK;
}

static lw_status finish(lw_csv *csv)
{
    csv->quoted = csv->parser->quoted != 0;
    if (csv_fini(csv->parser, take_field, take_row, csv) == 0) return csv->status;
    if (csv_error(csv->parser) != CSV_EPARSE) return LW_NO_MEMORY;
    lw_csv_note(csv, csv->all_rows, csv->row_fields, "an open quote", "a closing quote");
    drop_row(csv);
    return LW_OK;
}

lw_status lw_csv_parser_feed(lw_csv *csv, const char *bytes, size_t length)
{
    lw_status status = make_room(csv, length);
    if (status != LW_OK) return status;
    if (length == 0) return finish(csv);
    bool begun = lw_csv_parser_within(csv);
    csv->has_nul = (begun && csv->has_nul) || memchr(bytes, 0, length) != NULL;
    if (csv->parser->quoted != 0 || memchr(bytes, '"', length) != NULL) {
        status = parse_quotes(csv, bytes, length);
    } else {
        csv->quoted = false;
        status = parse_span(csv, bytes, length);
    }
    if (status == LW_OK && !csv->stop && csv->parser->entry_pos > LONGEST_FIELD) {
        lw_csv_note(csv, csv->all_rows, csv->row_fields, "a field of more than 16 MiB", "a closing quote");
        csv->stop = true;
    }
    return status;
}
