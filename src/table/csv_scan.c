/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "table/csv_scan.h"

#include "core/memory.h"

#define SCAN_ROOM ((size_t)1 << 16)

typedef enum state {
    ROW_START,   /* nothing but blanks and line ends since the last row */
    FIELD_START, /* behind a comma */
    BARE,        /* in a field without quotes */
    QUOTED,      /* between quotes */
    QUOTE_SEEN,  /* behind a quote that may have ended them */
    BROKEN       /* behind a stray quote: the rest of the line is not read */
} state;

typedef struct scan {
    state state;
    int columns, wanted, field; /* field: number of the one that is read */
    int64_t left;               /* rows to count before the wanted one */
    int64_t line, column;       /* of the byte that is read */
    int64_t found_line, found_column;
    int64_t blank_column; /* of the first blank before the field, 0: none */
    bool found, spoiled, blanks_behind_quote, after_return;
} scan;

/* The field begins here; an empty one right behind the comma, before its blanks. */
static void note_start(scan *s, bool empty)
{
    if (s->field == s->wanted) {
        s->found_line = s->line;
        s->found_column = empty && s->blank_column > 0 ? s->blank_column : s->column;
        s->found = true;
    }
    s->blank_column = 0;
}

/* True when this was the wanted row: its place is in found_line and found_column. */
static bool end_row(scan *s)
{
    bool counts = s->columns == 0 || (s->field + 1 == s->columns && !s->spoiled);
    bool wanted = counts && s->left-- == 0;
    if (!s->found) { /* the row lacks the field: its end */
        s->found_line = s->line;
        s->found_column = s->column;
    }
    s->state = ROW_START;
    s->field = 0;
    if (!wanted) s->found = false;
    s->spoiled = false;
    return wanted;
}

static void begin_field(scan *s, char c)
{
    note_start(s, false);
    s->state = c == '"' ? QUOTED : BARE;
}

static void end_field(scan *s)
{
    s->field++;
    s->state = FIELD_START;
}

static bool is_blank(char c)
{
    return c == ' ' || c == '\t';
}

/* One byte at the place (line, column). True when the wanted row ended. */
static bool step(scan *s, char c)
{
    bool line_end = c == '\n' || c == '\r';
    if (c == '\0') s->spoiled = true;
    switch (s->state) {
    case ROW_START:
    case FIELD_START:
        if (is_blank(c)) {
            if (s->blank_column == 0) s->blank_column = s->column;
            return false;
        }
        if (line_end && s->state == ROW_START) {
            s->spoiled = false;
            s->blank_column = 0;
            return false;
        }
        if (!line_end && c != ',') {
            begin_field(s, c);
            return false;
        }
        note_start(s, true);
        break;
    case BARE:
        if (c != ',' && !line_end) {
            if (c == '"') s->state = BROKEN;
            s->spoiled |= c == '"';
            return false;
        }
        break;
    case QUOTED:
        if (c == '"') s->state = QUOTE_SEEN;
        s->blanks_behind_quote = false;
        return false;
    case QUOTE_SEEN:
        if (is_blank(c)) {
            s->blanks_behind_quote = true;
            return false;
        }
        if (c != ',' && !line_end) {
            bool doubled = c == '"' && !s->blanks_behind_quote;
            s->state = doubled ? QUOTED : BROKEN;
            s->spoiled |= !doubled;
            return false;
        }
        break;
    case BROKEN:
        if (!line_end) return false;
        break;
    }
    if (line_end) return end_row(s);
    end_field(s);
    return false;
}

static void advance(scan *s, char c)
{
    if (c == '\n' && s->after_return) { /* the second half of a line end that is counted */
        s->after_return = false;
        return;
    }
    s->after_return = c == '\r';
    s->column++;
    if (c == '\n' || c == '\r') {
        s->line++;
        s->column = 1;
    }
}

lw_status lw_csv_scan(const lw_source *source, lw_csv_mark from, int columns, int64_t row, int c,
                      int64_t *line, int64_t *column)
{
    scan s = {.columns = columns, .wanted = c, .left = row - from.row, .line = from.line, .column = 1};
    int64_t offset = from.offset;
    size_t got = 0;
    bool done = false;
    char *buffer = lw_alloc(SCAN_ROOM, 1);
    lw_status status = buffer != NULL ? LW_OK : LW_NO_MEMORY;
    while (status == LW_OK && !done) {
        status = lw_source_reread(source, offset, buffer, SCAN_ROOM, &got);
        if (status != LW_OK || got == 0) break;
        offset += (int64_t)got;
        for (size_t i = 0; i < got && !done; i++) {
            done = step(&s, buffer[i]);
            if (!done) advance(&s, buffer[i]);
        }
    }
    if (status == LW_OK && !done) { /* a last row without a line end */
        if (s.state == FIELD_START) note_start(&s, true);
        if (s.state == ROW_START || !end_row(&s)) status = LW_BAD_SHAPE;
    }
    lw_free(buffer);
    if (status != LW_OK) return status;
    *line = s.found_line;
    *column = s.found_column;
    return LW_OK;
}
