/* SPDX-License-Identifier: GPL-3.0-or-later */
/** Ids of observations or parameters: text to number and back, in order of first appearance. 32-byte slots
 * with short ids inline, look-ups in batches so that cache misses overlap (design: numerics.md, Tables). */
#ifndef LW_PROBLEM_IDS_H
#define LW_PROBLEM_IDS_H

#include "core/status.h"
#include "table/csv_read.h"

#include <stdint.h>

typedef struct lw_ids lw_ids;

lw_status lw_ids_new(int64_t expected, lw_ids **out, lw_error *error);
void lw_ids_free(lw_ids *ids);
int64_t lw_ids_count(const lw_ids *ids);
/** NUL-terminated text of id i; an id has no NUL byte in it. */
const char *lw_ids_name(const lw_ids *ids, int64_t i);
/** All names in order, each with its NUL byte, one after another; *bytes in all. */
const char *lw_ids_text(const lw_ids *ids, int64_t *bytes);
/** Number of the id or -1. */
int64_t lw_ids_find(const lw_ids *ids, const char *text, size_t length);
/** Adds if new; *number is its number; *added says whether it was new. */
lw_status lw_ids_add(lw_ids *ids, const char *text, size_t length, int64_t *number, int *added,
                     lw_error *error);
/** Numbers (or -1) of `count` <= LW_CSV_BATCH fields that lie `stride` fields apart. */
void lw_ids_find_batch(const lw_ids *ids, const lw_field *fields, int count, int stride, int64_t *number);
/** As lw_ids_add for a batch. */
lw_status lw_ids_add_batch(lw_ids *ids, const lw_field *fields, int count, int stride, int64_t *number,
                           lw_error *error);

#endif
