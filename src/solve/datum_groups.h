/* SPDX-License-Identifier: GPL-3.0-or-later */
/** Columns and rows of each connected component of a matrix, listed one component after another, and vector
 * work on them. */
#ifndef LW_SOLVE_DATUM_GROUPS_H
#define LW_SOLVE_DATUM_GROUPS_H

#include "matrix/sparse.h"

typedef struct lw_groups {
    int64_t count;
    int64_t *column_start,
        *column; /**< columns of component c: column[column_start[c] .. column_start[c + 1] - 1] */
    int64_t *row_start, *row;
} lw_groups;

/** of_column as lw_datum_components. */
lw_status lw_groups_make(const lw_sparse *M, const int32_t *of_column, int64_t count, lw_groups *g,
                         lw_error *error);
void lw_groups_clear(lw_groups *g);
/** Sum of x_i y_i over the listed places. */
double lw_group_dot(int64_t count, const int64_t *list, const double *x, const double *y);
/** Gram-Schmidt over k vectors (n x k), each against the earlier ones twice, within the listed places;
 * vectors that vanish become zero. */
void lw_group_orthonormalize(int64_t n, int64_t count, const int64_t *list, int k, double *x);

#endif
