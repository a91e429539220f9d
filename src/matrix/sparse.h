/* SPDX-License-Identifier: GPL-3.0-or-later */
/** A sparse matrix in compressed columns; its transpose in compressed columns is the same matrix in
 * compressed rows. */
#ifndef LW_MATRIX_SPARSE_H
#define LW_MATRIX_SPARSE_H

#include "core/status.h"
#include "core/watch.h"

#include <stdint.h>

/** rows x columns; column j holds entries start[j] .. start[j+1]-1, row indices strictly increasing.
 *  low: what value lacks to the decimal that was written (NULL: nothing); never read by products. */
typedef struct lw_sparse {
    int64_t rows, columns;
    int64_t *start;     /**< columns + 1 */
    int32_t *index;     /**< nonzeros */
    double *value;      /**< nonzeros */
    double *low;        /**< nonzeros, or NULL */
    const void *mapped; /**< not NULL: the arrays belong to a mapped file and are not freed */
} lw_sparse;

static inline int64_t lw_sparse_nonzeros(const lw_sparse *A)
{
    return A->start[A->columns];
}

lw_status lw_sparse_new(int64_t rows, int64_t columns, int64_t nonzeros, int with_low, lw_sparse **out,
                        lw_error *error);
void lw_sparse_free(lw_sparse *A);
/** Tells the system that columns from .. to-1 of a mapped matrix are not needed soon: their pages leave the
 * memory of the process and are read again when they are. Nothing where A is not mapped. */
void lw_sparse_release(const lw_sparse *A, int64_t from, int64_t to);
/** The same behind a pass over the columns that has come to column j, now and then. */
static inline void lw_sparse_release_behind(const lw_sparse *A, int64_t j)
{
    enum { STRIDE = 4096 };
    if (A->mapped && (j + 1) % STRIDE == 0) lw_sparse_release(A, j + 1 - STRIDE, j + 1);
}
/** A' in compressed columns (rows sorted). Cost: two passes. */
lw_status lw_sparse_transpose(const lw_sparse *A, lw_sparse **out, lw_error *error);
/** From `count` triplets in any order; entries of the same place are added when add_repeated, else
 * LW_BAD_SHAPE and *repeated = number of the later triplet of the first such pair. The order of the triplets
 * does not change a byte: repeated entries are added in order of value. low may be NULL. Triplets are
 * borrowed. */
lw_status lw_sparse_from_triplets(int64_t rows, int64_t columns, int64_t count, const int32_t *row,
                                  const int32_t *column, const double *value, const double *low,
                                  int add_repeated, lw_sparse **out, int64_t *repeated, lw_error *error);
/** C = A' A (upper triangle with diagonal, sorted), in double. row_weight (rows, may be NULL): A' diag(w) A.
 */
lw_status lw_sparse_gram(const lw_sparse *A, const double *row_weight, lw_sparse **out, lw_error *error);
/** LW_OK when A'A fits the memory budget while it is made, else LW_NO_MEMORY with `advice`. Counted entry by
 * entry only where a bound from the row lengths does not do. */
lw_status lw_sparse_gram_fits(const lw_sparse *A, const lw_watch *watch, const char *advice, lw_error *error);
/** [A; B] with the same number of columns; C = alpha A over beta B. */
lw_status lw_sparse_stack(double alpha, const lw_sparse *A, double beta, const lw_sparse *B, lw_sparse **out,
                          lw_error *error);
/** alpha A + beta B, same shape, union of the patterns. */
lw_status lw_sparse_add(double alpha, const lw_sparse *A, double beta, const lw_sparse *B, lw_sparse **out,
                        lw_error *error);
/** Y = A X and X = A' Y for k vectors stored one after another; one thread, for small work and tests. */
void lw_sparse_apply(const lw_sparse *A, int k, const double *x, double *y);
void lw_sparse_apply_transposed(const lw_sparse *A, int k, const double *y, double *x);
/** Euclidean norm of each column. */
void lw_sparse_column_norms(const lw_sparse *A, double *norm);
/** Dense column-major copy, leading dimension rows. */
void lw_sparse_to_dense(const lw_sparse *A, double *dense);

#endif
