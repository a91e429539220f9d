/* SPDX-License-Identifier: GPL-3.0-or-later */
/** Sparse Cholesky (CHOLMOD) and sparse QR (SPQR), only here, with 64-bit indices; what leaves this file is
 * free of the library's types. One BLAS and one OpenMP thread. Memory through core/memory. */
#ifndef LW_MATRIX_SUITESPARSE_H
#define LW_MATRIX_SUITESPARSE_H

#include "core/status.h"
#include "core/watch.h"
#include "matrix/sparse.h"

#include <stdint.h>

typedef struct lw_cholesky lw_cholesky;

/** What the analysis says before the numeric work. */
typedef struct lw_cholesky_size {
    int64_t factor_nonzeros; /**< of L */
    double flops;            /**< of the numeric factorization */
    int64_t bytes;           /**< peak that factorizing will take, estimate */
    const char *ordering;    /**< "minimum degree" or "nested dissection" */
} lw_cholesky_size;

/** Orders and analyses the symmetric positive definite N (upper triangle stored, sorted). AMD first; nested
 * dissection too when the analysis says more than about 25 000 flops per nonzero of N, and the better of the
 * two is kept. */
lw_status lw_cholesky_analyse(const lw_sparse *N, const lw_watch *watch, lw_cholesky **out,
                              lw_cholesky_size *size, lw_error *error);
/** Numeric factorization of a matrix with the analysed pattern (again and again for a sweep). LW_UNSOLVABLE
 * when a pivot is not positive: *defect = its column in N. Frees nothing on failure: another matrix may be
 * tried. */
lw_status lw_cholesky_factorize(lw_cholesky *factor, const lw_sparse *N, const lw_watch *watch,
                                int64_t *defect, lw_error *error);
void lw_cholesky_free(lw_cholesky *factor);

/** X <- N^-1 X for k right-hand sides, n x k, in place. */
lw_status lw_cholesky_solve(lw_cholesky *factor, int64_t k, double *x, lw_error *error);
/** With N = P'L L'P: x <- L^-1 P x (half 0) and x <- P' L^-T x (half 1); for square roots of N^-1 (samples,
 * prior-conditioning). */
lw_status lw_cholesky_half_solve(lw_cholesky *factor, int half, int64_t k, double *x, lw_error *error);
/** The inverses of the half solves, multiplication by the square root: x <- P' L x (half 0) and x <- L' P x
 * (half 1). */
lw_status lw_cholesky_half_multiply(lw_cholesky *factor, int half, int64_t k, double *x, lw_error *error);
double lw_cholesky_rcond(const lw_cholesky *factor); /**< (min/max diag L)^2: an upper estimate only */

/** A supernodal factor without the library's types. Supernode s holds columns first[s] .. first[s+1]-1 of L
 * (permuted); its rows are row[row_start[s] .. row_start[s+1]-1] (permuted indices, increasing, the diagonal
 * block first); values are column-major from value_start[s] with leading dimension = number of its rows. The
 * strict upper part of the diagonal block is arbitrary. permutation[k] = column of N at place k. Arrays are
 * borrowed from the factor; value is writable when the factor is handed over to the selected inverse (then
 * only lw_cholesky_free may follow). */
typedef struct lw_factor_view {
    int64_t columns, supernodes;
    const int64_t *first;     /**< supernodes + 1 */
    const int64_t *row_start; /**< supernodes + 1 */
    const int64_t *row;
    const int64_t *value_start; /**< supernodes + 1 */
    double *value;
    const int64_t *permutation; /**< columns */
} lw_factor_view;
lw_status lw_cholesky_view(lw_cholesky *factor, lw_factor_view *out, lw_error *error);

/** Sparse QR of A (rows x columns, column-compressed): A E = Q R with Householder vectors kept when keep_q.
 */
typedef struct lw_sparse_qr lw_sparse_qr;
/** tolerance < 0: the library's default rank tolerance 20 (m + n) eps max column norm. The memory budget is
 * checked before the call (from the symbolic analysis); A must be finite. */
lw_status lw_sparse_qr_make(const lw_sparse *A, double tolerance, int keep_q, const lw_watch *watch,
                            lw_sparse_qr **out, lw_error *error);
void lw_sparse_qr_free(lw_sparse_qr *qr);
int64_t lw_sparse_qr_rank(const lw_sparse_qr *qr);
/** pivot[k] = column of A at place k of R; places >= rank are the dependent columns. */
const int64_t *lw_sparse_qr_pivot(const lw_sparse_qr *qr);
/** c (rows x k) <- Q'c or Q c. */
lw_status lw_sparse_qr_apply_qt(lw_sparse_qr *qr, int64_t k, double *c, lw_error *error);
lw_status lw_sparse_qr_apply_q(lw_sparse_qr *qr, int64_t k, double *c, lw_error *error);
/** x (columns x k, zero in dependent columns) <- E R^-1 c(0:rank); and c (rank of rows, rest zero) <- R^-T
 * E'x. */
lw_status lw_sparse_qr_solve_r(lw_sparse_qr *qr, int64_t k, const double *c, int64_t ldc, double *x,
                               lw_error *error);
lw_status lw_sparse_qr_solve_rt(lw_sparse_qr *qr, int64_t k, const double *x, double *c, int64_t ldc,
                                lw_error *error);

#endif
