/* SPDX-License-Identifier: GPL-3.0-or-later */
/** Pairs of sparse vectors that are the same up to a factor. */
#ifndef LW_PROBLEM_PROPORTIONAL_H
#define LW_PROBLEM_PROPORTIONAL_H

#include "matrix/sparse.h"

#include <stdbool.h>

/** Pairs (first, later) of proportional columns, each later column with the first that it equals; 2 * *count
 * numbers in *pairs, in order of the later one, freed by the caller. skip[j]: leave column j out (may be
 * NULL). Empty columns are left out. Candidates by hashing the columns divided by their first nonzero
 * coefficient, then compared entry by entry to a few units of rounding. Cost: one pass over A, a sort of the
 * columns. */
lw_status lw_proportional_columns(const lw_sparse *A, const bool *skip, int64_t **pairs, int64_t *count,
                                  lw_error *error);
/** The same for rows. Only rows that may have a partner are transposed. */
lw_status lw_proportional_rows(const lw_sparse *A, int64_t **pairs, int64_t *count, lw_error *error);

#endif
