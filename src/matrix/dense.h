/* SPDX-License-Identifier: GPL-3.0-or-later */
/** Dense linear algebra (LAPACKE and CBLAS, only here). Column-major, leading dimension = rows unless said.
 * OpenBLAS always runs one thread (two change bytes). Errors: LW_NO_MEMORY, LW_SYSTEM (a routine that
 * failed). */
#ifndef LW_MATRIX_DENSE_H
#define LW_MATRIX_DENSE_H

#include "core/status.h"

#include <stdint.h>

/** One thread for OpenBLAS; once, at program start (and by tests). */
void lw_dense_single_thread(void);

/** A P = Q R, Householder with column pivoting (dgeqp3). */
typedef struct lw_dense_qr {
    int64_t rows, columns, rank; /**< rank: |R_kk| > tolerance |R_00| */
    double *factor;              /**< rows x columns, reflectors below R */
    double *tau;
    int64_t *pivot; /**< pivot[k] = column of A that stands at place k */
    double rcond;   /**< reciprocal condition of R(0:rank, 0:rank), 1-norm estimate (dtrcon) */
} lw_dense_qr;

/** A (rows x columns) is taken over by the factor (freed by lw_dense_qr_clear). tolerance < 0: max(m, n) eps.
 */
lw_status lw_dense_qr_make(int64_t rows, int64_t columns, double *A, double tolerance, lw_dense_qr *out,
                           lw_error *error);
void lw_dense_qr_clear(lw_dense_qr *qr);
/** c <- Q' c and c <- Q c; c rows x k. */
lw_status lw_dense_qr_apply_qt(const lw_dense_qr *qr, int64_t k, double *c, lw_error *error);
lw_status lw_dense_qr_apply_q(const lw_dense_qr *qr, int64_t k, double *c, lw_error *error);
/** Solves R(0:rank,0:rank) y = c in place, or R' y = c; c has leading dimension ldc, k columns. */
void lw_dense_qr_solve_r(const lw_dense_qr *qr, int transposed, int64_t k, double *c, int64_t ldc);
/** The null space from the factor: columns x (columns - rank) basis, orthonormal, in the order of A's
 * columns; caller frees. */
lw_status lw_dense_qr_null_space(const lw_dense_qr *qr, double **basis, lw_error *error);

/** A = U diag(s) V', thin (dgesdd; s decreasing): U rows x p, V' p x columns, p = min. A is overwritten. */
lw_status lw_dense_svd(int64_t rows, int64_t columns, double *A, double *u, double *s, double *vt,
                       lw_error *error);
/** Generalized for [A; L] is not needed: the standard-form transformation is made in solve/. */

/** Cholesky A = R'R of the upper triangle in place; LW_UNSOLVABLE and *defect = first bad pivot (from 0) if
 * not positive. */
lw_status lw_dense_cholesky(int64_t n, double *A, int64_t *defect, lw_error *error);
void lw_dense_cholesky_solve(int64_t n, const double *R, int64_t k, double *b); /**< b <- (R'R)^-1 b */
void lw_dense_triangle_solve(int64_t n, const double *R, int upper, int transposed, int64_t k, double *b,
                             int64_t ldb);
/** Inverse of the symmetric positive definite matrix whose factor is R, full symmetric, in place (dpotri). */
lw_status lw_dense_cholesky_invert(int64_t n, double *R, lw_error *error);
/** Symmetric eigenproblem (dsyevd), values increasing; A becomes the vectors. */
lw_status lw_dense_eigen(int64_t n, double *A, double *values, lw_error *error);

/** C (m x n) <- alpha op(A) op(B) + beta C; ta, tb: transposed. Leading dimensions as given. */
void lw_dense_multiply(int ta, int tb, int64_t m, int64_t n, int64_t k, double alpha, const double *A,
                       int64_t lda, const double *B, int64_t ldb, double beta, double *C, int64_t ldc);
/** y (m) <- alpha op(A) x + beta y; A is m x n as stored. */
void lw_dense_vector(int ta, int64_t m, int64_t n, double alpha, const double *A, int64_t lda,
                     const double *x, double beta, double *y);
/** The BLAS-3 pieces of the selected inverse: see certainty/selected_inverse.h for the recurrence. */
void lw_dense_symmetric_multiply(int64_t m, int64_t n, double alpha, const double *S, int64_t lds,
                                 const double *B, int64_t ldb, double beta, double *C,
                                 int64_t ldc); /**< C <- alpha S B + beta C, S lower triangle (dsymm) */
void lw_dense_right_triangle_solve(int64_t m, int64_t n, const double *L, int64_t ldl, int transposed,
                                   double *B,
                                   int64_t ldb); /**< B <- B L^-1 or B L^-T, L lower n x n (dtrsm) */
lw_status lw_dense_invert_lower(int64_t n, double *L, int64_t ldl,
                                lw_error *error); /**< lower triangle of (L L')^-1 in place (dpotri) */

/** least squares by dgels directly, for tests and the bench: b (max(m,n) x k) in, solution in its first n
 * rows. */
lw_status lw_dense_gels(int64_t m, int64_t n, double *A, int64_t k, double *b, lw_error *error);

#endif
