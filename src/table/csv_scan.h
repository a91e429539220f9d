/** Where a field of a CSV file stands: a scan by the same rules as the reader's (blanks around fields are not
 * theirs, blank lines are no rows, a lone carriage return ends a row, quotes are doubled inside quotes). */
#ifndef LW_TABLE_CSV_SCAN_H
#define LW_TABLE_CSV_SCAN_H

#include "table/source.h"

#include <stdbool.h>
#include <stdint.h>

/** A row starts here. */
typedef struct lw_csv_mark {
    int64_t offset, line;
    int64_t row; /**< rows before it, as counted by the reader */
} lw_csv_mark;

/** Column and line of field c of the row that is `row` rows behind `from`; a field that the row lacks stands
 * at the row's end. columns > 0: only rows of that many fields, without NUL bytes and stray quotes, are
 * counted; 0: all rows. LW_BAD_SHAPE when the file has no such row. */
lw_status lw_csv_scan(const lw_source *source, lw_csv_mark from, int columns, int64_t row, int c,
                      int64_t *line, int64_t *column);

#endif
