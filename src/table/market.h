/** Reads a Matrix Market coordinate file (real, integer or pattern; general or symmetric). Row and column
 * numbers are the ids. Boisvert, Pozo & Remington, The Matrix Market Exchange Formats, NISTIR 5935, 1996. */
#ifndef LW_TABLE_MARKET_H
#define LW_TABLE_MARKET_H

#include "core/decimal.h"
#include "core/status.h"
#include "core/watch.h"

#include <stdint.h>

typedef struct lw_market {
    int64_t rows, columns, entries; /**< as stated by the size line (symmetric: entries after mirroring) */
    int64_t *row, *column;          /**< entries, from 0 */
    double *value, *low;            /**< entries; low NULL when no number needs it */
    int64_t *line;                  /**< entries, line in the file, for messages */
    int64_t bytes;
    char sha256[65];
} lw_market;

/** Faults with file:line:column: bad banner, unsupported kind (complex, array), index out of range, wrong
 * count. */
lw_status lw_market_read(const char *path, const lw_watch *watch, lw_market *out, lw_error *error);
void lw_market_clear(lw_market *market);

#endif
