/** What reading one CSV file consists of, shared by csv_read (libcsv), csv_file (chunks and batches) and
 * csv_fault (places and messages) and by nobody else. */
#ifndef LW_TABLE_CSV_STATE_H
#define LW_TABLE_CSV_STATE_H

#include "table/csv_read.h"
#include "table/csv_scan.h"
#include "table/source.h"

#define LW_CSV_CHUNK ((size_t)1 << 16)
#define LW_CSV_MOST_COLUMNS 4096
#define LW_CSV_MOST_MARKS 4096

struct csv_parser;

/** A fault found ahead of the batches, told when they reach its row. */
typedef struct lw_csv_pending {
    int64_t before_row;
    lw_place place;
    char text[512]; /**< "found ..., expected ..." */
} lw_csv_pending;

struct lw_csv {
    lw_source source;
    /* csv_read: the parser, and rows waiting: rows_parsed - rows_taken of them from fields[first_field] on */
    struct csv_parser *parser;
    bool parser_open;
    bool quoted;                       /* does the field that ends next stand in quotes */
    bool skipping;                     /* behind a stray quote, up to the line's end */
    bool has_nul;                      /* the chunk holds a NUL byte */
    bool row_spoiled;                  /* spoiled_field of the row begun holds one */
    int64_t row_fields, spoiled_field; /* fields of the row begun, also those beyond the header's */
    char *arena;
    size_t arena_used, arena_room;
    lw_field *fields;
    size_t field_count, field_room, first_field;
    int64_t rows_parsed, rows_taken; /* rows under the header, faulty ones left out */
    int64_t all_rows;                /* rows, the header and faulty ones included */
    /* csv_file: the chunk, and marks where a chunk starts a row */
    char *buffer;
    size_t kept; /* bytes in front of the buffer that wait for their line's end */
    bool at_start, in_comment, after_return, after_line, at_end;
    bool stop; /* nothing behind can be read */
    int64_t line, chunks, mark_step;
    lw_csv_mark *marks; /* row: rows_parsed there, -1 before the header */
    int64_t *marks_all; /* all_rows there */
    size_t mark_count;
    /* the header */
    bool header_done;
    int columns;
    char **names;
    int64_t header_line;
    /* csv_fault */
    lw_csv_pending *pending;
    int pending_count, pending_told, faults;
    lw_status status; /* of the parser's callbacks */
};

/* csv_read */
lw_status lw_csv_parser_open(lw_csv *csv);
void lw_csv_parser_close(lw_csv *csv);
/** Is a row begun, or a line being skipped? */
bool lw_csv_parser_within(const lw_csv *csv);
/** Takes the bytes apart; call only when no rows wait. length 0: the file has ended. */
lw_status lw_csv_parser_feed(lw_csv *csv, const char *bytes, size_t length);

/* csv_fault */
/** Keeps a fault of the row that is number all_row of the file. */
void lw_csv_note(lw_csv *csv, int64_t all_row, int64_t field, const char *found, const char *expected);
/** Tells the faults that stand before row `row` of the batches. */
void lw_csv_tell(lw_csv *csv, int64_t row, lw_error *error);
/** Names the columns from the fields of the row begun, noting faults. */
lw_status lw_csv_take_names(lw_csv *csv);

#endif
