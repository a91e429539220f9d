/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The file is read in chunks that end with a line where they can. A chunk that starts a row leaves a mark,
 * from which the place of a field is found later by scanning again. */
#include "core/memory.h"
#include "table/csv_state.h"

#include <stdio.h>
#include <string.h>

static void count_lines(lw_csv *csv, const char *bytes, size_t length)
{
    if (length == 0) return;
    int64_t lines = 0;
    for (size_t i = 0; i < length; i++) lines += bytes[i] == '\n';
    if (csv->after_return && bytes[0] == '\n') lines--; /* counted at its first half */
    const char *found = memchr(bytes, '\r', length);
    if (found != NULL)
        for (size_t i = (size_t)(found - bytes); i < length; i++)
            lines += bytes[i] == '\r' && (i + 1 == length || bytes[i + 1] != '\n');
    csv->after_return = bytes[length - 1] == '\r';
    csv->after_line = bytes[length - 1] == '\n';
    csv->line += lines;
}

/* Every mark_step-th chunk that starts a row; a full table of marks is thinned to half. */
static void leave_mark(lw_csv *csv, int64_t offset)
{
    if (csv->mark_count > 0 && (!csv->after_line || csv->chunks++ % csv->mark_step != 0)) return;
    if (csv->mark_count == LW_CSV_MOST_MARKS) {
        csv->mark_count /= 2;
        for (size_t i = 0; i < csv->mark_count; i++) {
            csv->marks[i] = csv->marks[2 * i];
            csv->marks_all[i] = csv->marks_all[2 * i];
        }
        csv->mark_step *= 2;
    }
    csv->marks[csv->mark_count] = (lw_csv_mark){offset, csv->line, csv->header_done ? csv->rows_parsed : -1};
    csv->marks_all[csv->mark_count++] = csv->all_rows;
}

/* Bytes before the header: a byte-order mark, lines that begin with '#', blank lines. */
static size_t skip_preamble(lw_csv *csv, const char *bytes, size_t length, bool first)
{
    size_t at = first && length >= 3 && memcmp(bytes, "\xef\xbb\xbf", 3) == 0 ? 3 : 0;
    while (at < length) {
        if (!csv->in_comment && bytes[at] == '#') csv->in_comment = true;
        size_t end = at;
        while (end < length && bytes[end] != '\n' && bytes[end] != '\r' &&
               (csv->in_comment || bytes[end] == ' ' || bytes[end] == '\t'))
            end++;
        if (end < length && bytes[end] != '\n' && bytes[end] != '\r') break; /* the header's line */
        if (end < length) {
            csv->in_comment = false;
            end++;
        }
        at = end;
    }
    csv->at_start = at == length;
    count_lines(csv, bytes, at);
    return at;
}

static lw_status parse_chunk(lw_csv *csv, int64_t offset, size_t length)
{
    const char *bytes = csv->buffer;
    if (csv->at_start) {
        size_t skipped = skip_preamble(csv, bytes, length, offset == 0);
        bytes += skipped;
        length -= skipped;
        offset += (int64_t)skipped;
        if (length == 0) return LW_OK;
        csv->header_line = csv->line;
    }
    if (!lw_csv_parser_within(csv)) leave_mark(csv, offset);
    lw_status status = lw_csv_parser_feed(csv, bytes, length);
    count_lines(csv, bytes, length);
    return status;
}

/* Reads and parses up to the last line end that the buffer holds. */
static lw_status read_chunk(lw_csv *csv, lw_error *error)
{
    size_t got, length = csv->kept;
    lw_status status;
    do {
        status = lw_source_read(&csv->source, csv->buffer + length, LW_CSV_CHUNK - length, &got, error);
        length += got;
    } while (status == LW_OK && got > 0 && length < LW_CSV_CHUNK);
    if (status != LW_OK) return status;
    size_t use = length;
    if (got > 0)
        while (use > 0 && csv->buffer[use - 1] != '\n') use--;
    if (use == 0) use = length;
    csv->kept = length - use;
    if (use > 0) {
        status = parse_chunk(csv, csv->source.bytes - (int64_t)length, use);
        if (csv->kept > 0) memmove(csv->buffer, csv->buffer + use, csv->kept);
    } else {
        csv->at_end = true;
        if (!csv->at_start) status = lw_csv_parser_feed(csv, csv->buffer, 0);
    }
    csv->at_end |= csv->stop;
    return status == LW_NO_MEMORY ? lw_fail_memory(error, "reading a table", LW_CSV_CHUNK) : status;
}

static lw_status start(lw_csv *csv, const char *path, lw_error *error)
{
    lw_status status = lw_source_open(&csv->source, path, error);
    if (status != LW_OK) return status;
    csv->buffer = lw_alloc(LW_CSV_CHUNK, 1);
    csv->marks = LW_NEW_ARRAY(lw_csv_mark, LW_CSV_MOST_MARKS);
    csv->marks_all = LW_NEW_ARRAY(int64_t, LW_CSV_MOST_MARKS);
    csv->pending = LW_NEW_ARRAY(lw_csv_pending, LW_MOST_FAULTS);
    if (csv->buffer == NULL || csv->marks == NULL || csv->marks_all == NULL || csv->pending == NULL ||
        lw_csv_parser_open(csv) != LW_OK)
        return lw_fail_memory(error, "reading a table", LW_CSV_CHUNK);
    while (status == LW_OK && !csv->header_done && !csv->at_end) status = read_chunk(csv, error);
    if (status != LW_OK) return status;
    if (csv->source.bytes == 0)
        return lw_fail_also(error, LW_BAD_INPUT, "%s:1:1: found an empty file, expected a header", path);
    if (!csv->header_done && csv->faults == 0)
        return lw_fail_also(error, LW_BAD_INPUT, "%s:%lld:1: found no header, expected column names", path,
                            (long long)csv->line);
    if (csv->header_done && !csv->stop) return LW_OK;
    lw_csv_tell(csv, INT64_MAX, error);
    return LW_BAD_INPUT;
}

lw_status lw_csv_open(const char *path, lw_csv **out, lw_error *error)
{
    *out = NULL;
    lw_csv *csv = LW_NEW(lw_csv);
    if (csv == NULL) return lw_fail_memory(error, "reading a table", sizeof *csv);
    csv->source.fd = -1;
    csv->at_start = true;
    csv->line = 1;
    csv->header_line = 1;
    csv->mark_step = 1;
    csv->columns = LW_CSV_MOST_COLUMNS;
    lw_status status = start(csv, path, error);
    if (status == LW_OK)
        *out = csv;
    else
        lw_csv_close(csv);
    return status;
}

void lw_csv_close(lw_csv *csv)
{
    if (csv == NULL) return;
    for (int c = 0; csv->names != NULL && c < csv->columns; c++) lw_free(csv->names[c]);
    lw_free(csv->names);
    lw_csv_parser_close(csv);
    lw_source_clear(&csv->source);
    lw_free(csv->buffer);
    lw_free(csv->marks);
    lw_free(csv->marks_all);
    lw_free(csv->pending);
    lw_free(csv);
}

/* The rows that wait, up to a batch, and up to the next fault so that faults are told in their order. */
static int rows_at_hand(const lw_csv *csv)
{
    int64_t rows = csv->rows_parsed - csv->rows_taken;
    if (csv->pending_told < csv->pending_count) {
        int64_t before = csv->pending[csv->pending_told].before_row - csv->rows_taken;
        if (rows > before) rows = before;
    }
    return rows < LW_CSV_BATCH ? (int)rows : LW_CSV_BATCH;
}

lw_status lw_csv_next(lw_csv *csv, lw_csv_batch *batch, const lw_watch *watch, lw_error *error)
{
    *batch = (lw_csv_batch){.first_row = csv->rows_taken, .columns = csv->columns};
    lw_csv_tell(csv, csv->rows_taken, error);
    while (csv->rows_parsed == csv->rows_taken && !csv->at_end) {
        if (lw_watch_cancelled(watch)) return lw_fail(error, LW_INTERRUPTED, "interrupted while reading");
        lw_watch_tick(watch, "reading", (double)csv->source.bytes, (double)csv->source.size, "");
        lw_status status = read_chunk(csv, error);
        if (status != LW_OK) return status;
        lw_csv_tell(csv, csv->rows_taken, error);
    }
    batch->rows = rows_at_hand(csv);
    batch->fields = csv->fields + csv->first_field;
    csv->rows_taken += batch->rows;
    csv->first_field += (size_t)batch->rows * (size_t)csv->columns;
    if (batch->rows > 0 || csv->faults == 0) return LW_OK;
    if (error != NULL) error->faults += csv->faults - csv->pending_count;
    csv->faults = csv->pending_count;
    return LW_BAD_INPUT;
}

const char *lw_csv_path(const lw_csv *csv)
{
    return csv->source.path;
}

int64_t lw_csv_bytes(const lw_csv *csv)
{
    return csv->source.bytes;
}

lw_status lw_csv_digest(lw_csv *csv, char hex[65], lw_error *error)
{
    lw_digest_hex(csv->source.digest, hex);
    return hex[0] != '\0' ? LW_OK : lw_fail_memory(error, "a digest", 64);
}
