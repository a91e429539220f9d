/** Reads one CSV file (RFC 4180 quoting, CRLF, byte-order mark, '#' lines before the header) in batches of
 * rows. libcsv does the parsing; this layer finds columns by name, refuses ragged rows, NUL bytes and open
 * quotes, and knows where a field stands in the file. */
#ifndef LW_TABLE_CSV_READ_H
#define LW_TABLE_CSV_READ_H

#include "core/decimal.h"
#include "core/status.h"
#include "core/watch.h"

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

/** Rows are handed over in batches of at most this many, so that id look-ups can be batched too. */
#define LW_CSV_BATCH 256

/** One field as unquoted text (not NUL-terminated). quoted: it stood in quotes. */
typedef struct lw_field {
    const char *text;
    uint32_t length;
    bool quoted;
} lw_field;

typedef struct lw_csv lw_csv;

/** A batch of rows. Field c of row r: fields[r * columns + c]. Texts live until the next call. */
typedef struct lw_csv_batch {
    const lw_field *fields;
    int64_t first_row; /**< number of the first row of the batch, 0 = the first row under the header */
    int rows;          /**< 0 at the end of the file */
    int columns;
} lw_csv_batch;

/** Opens and reads the header. Faults (LW_BAD_INPUT): no file content, no header, a column name twice, a NUL
 * byte. LW_SYSTEM: cannot open or read. The file's size and SHA-256 are taken on the way (lw_csv_digest). */
lw_status lw_csv_open(const char *path, lw_csv **out, lw_error *error);
void lw_csv_close(lw_csv *csv);

const char *lw_csv_path(const lw_csv *csv);
int lw_csv_columns(const lw_csv *csv);
/** Name of column c, NUL-terminated. */
const char *lw_csv_name(const lw_csv *csv, int c);
/** Column number of `name`, or -1. */
int lw_csv_find(const lw_csv *csv, const char *name);
/** As lw_csv_find, but adds the fault "FILE:line:1: no column 'NAME', expected the header ..." when it is
 * missing. */
int lw_csv_require(const lw_csv *csv, const char *name, const char *expected_header, lw_error *error);

/** The next batch. Rows with too few or too many fields, NUL bytes or an open quote are added to error as
 * faults with file:line:column (all of them, up to LW_MOST_FAULTS) and left out of the batches; reading goes
 * on, and the last call (rows == 0) returns LW_BAD_INPUT when there were any. LW_INTERRUPTED when the watch
 * was cancelled. Blank lines are skipped. Progress is told to the watch by bytes. A batch ends before a
 * faulty row, so that faults are told in the order of the file; rows are numbered without the faulty ones.
 * Behind a field of more than 16 MiB nothing is read. */
lw_status lw_csv_next(lw_csv *csv, lw_csv_batch *batch, const lw_watch *watch, lw_error *error);

/** Line (from 1) and column (from 1, in bytes: the field's first character, the quote included) of field c of
 * row r as counted in batches; found by scanning a part of the file again. Also works behind the last batch.
 * A field that the row lacks stands at the row's end. */
typedef struct lw_place {
    int64_t line, column;
} lw_place;
lw_status lw_csv_locate(const lw_csv *csv, int64_t row, int c, lw_place *out);

/** Adds "PATH:line:column: found FOUND, expected EXPECTED" for field c of row r to error. Returns
 * LW_BAD_INPUT. */
lw_status lw_csv_fault(const lw_csv *csv, int64_t row, int c, const char *found, const char *expected,
                       lw_error *error);

/** Room for the text of lw_csv_quote. */
#define LW_CSV_FOUND 192
/** A field's text as FOUND: in quotes, control characters escaped, cut at 40 bytes; "an empty field". Returns
 * out. */
const char *lw_csv_quote(const char *text, size_t length, char out[LW_CSV_FOUND]);

/** The number in field c of row `row` (from 0) of the batch. LW_OK, or LW_BAD_INPUT with the fault
 *  "PATH:line:column: found 'one', expected a decimal number" added to error. */
lw_status lw_csv_decimal(const lw_csv *csv, const lw_csv_batch *batch, int row, int c, lw_decimal *out,
                         lw_error *error);

/** Bytes, and SHA-256 in hexadecimal, of what was read so far (the whole file after the last batch; reading
 * is a chunk of 64 KiB ahead of the batches). */
int64_t lw_csv_bytes(const lw_csv *csv);
lw_status lw_csv_digest(lw_csv *csv, char hex[65], lw_error *error);

#endif
