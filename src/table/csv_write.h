/** Writes CSV: RFC 4180 quoting where a field needs it, '\n' line ends, numbers with the shortest text that
 * reads back to the same double, NaN as an empty field. Buffered; the first failure is kept and told by
 * lw_csv_finish. */
#ifndef LW_TABLE_CSV_WRITE_H
#define LW_TABLE_CSV_WRITE_H

#include "core/status.h"

#include <stddef.h>
#include <stdint.h>

typedef struct lw_csv_writer lw_csv_writer;

lw_status lw_csv_create(const char *path, lw_csv_writer **out, lw_error *error);
void lw_csv_text(lw_csv_writer *writer, const char *text);
void lw_csv_bytes_of(lw_csv_writer *writer, const char *text, size_t length);
void lw_csv_number(lw_csv_writer *writer, double value);
void lw_csv_integer(lw_csv_writer *writer, int64_t value);
void lw_csv_empty(lw_csv_writer *writer);
void lw_csv_end_row(lw_csv_writer *writer);
/** Flushes, syncs to disk, closes and frees. LW_SYSTEM with path and reason (disk full, ...). NULL safe. */
lw_status lw_csv_finish(lw_csv_writer *writer, lw_error *error);

#endif
