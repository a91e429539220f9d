/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Products, triangles and symmetric matrices. All sizes that reach here fit the library's integer
 * (lapack_int): what makes a matrix checks it. Source: LAPACK Users' Guide, 3rd ed., 1999. */
#include "matrix/dense_lapack.h"

#include "core/memory.h"
#include "matrix/dense.h"

/* OpenBLAS makes its worker threads when it is loaded, and they spin for a tenth of a second before they
 * sleep: they are sent home. Weak, because other builds of the library have no such threads and no such
 * function. */
extern int blas_thread_shutdown_(void) __attribute__((weak));

void lw_dense_single_thread(void)
{
    openblas_set_num_threads(1);
    if (blas_thread_shutdown_) (void)blas_thread_shutdown_();
}

lw_status lw_dense_check(lw_error *error, int64_t a, int64_t b, int64_t c)
{
    if (a < 0 || b < 0 || c < 0 || a > LW_LAPACK_MOST || b > LW_LAPACK_MOST || c > LW_LAPACK_MOST)
        return lw_fail(error, LW_BAD_SHAPE,
                       "a dense matrix of %lld x %lld (%lld right-hand sides) is out of range", (long long)a,
                       (long long)b, (long long)c);
    return LW_OK;
}

lw_status lw_dense_outcome(lw_error *error, const char *routine, lapack_int info)
{
    if (info == 0) return LW_OK;
    return lw_fail(error, LW_SYSTEM, "%s failed (%d)", routine, (int)info);
}

lapack_int lw_leading(int64_t rows)
{
    return (lapack_int)(rows > 0 ? rows : 1);
}

static CBLAS_TRANSPOSE turned(int transposed)
{
    return transposed ? CblasTrans : CblasNoTrans;
}

lw_status lw_dense_cholesky(int64_t n, double *A, int64_t *defect, lw_error *error)
{
    if (defect) *defect = -1;
    lw_status status = lw_dense_check(error, n, n, 0);
    if (status || n == 0) return status;
    lapack_int info = LAPACKE_dpotrf_work(LAPACK_COL_MAJOR, 'U', (lapack_int)n, A, (lapack_int)n);
    if (info <= 0) return lw_dense_outcome(error, "dpotrf", info);
    if (defect) *defect = info - 1;
    return lw_fail(error, LW_UNSOLVABLE, "the matrix is not positive definite at column %d", (int)info);
}

void lw_dense_cholesky_solve(int64_t n, const double *R, int64_t k, double *b)
{
    lw_dense_triangle_solve(n, R, 1, 1, k, b, n);
    lw_dense_triangle_solve(n, R, 1, 0, k, b, n);
}

void lw_dense_triangle_solve(int64_t n, const double *R, int upper, int transposed, int64_t k, double *b,
                             int64_t ldb)
{
    if (n <= 0 || k <= 0) return;
    cblas_dtrsm(CblasColMajor, CblasLeft, upper ? CblasUpper : CblasLower, turned(transposed), CblasNonUnit,
                (lapack_int)n, (lapack_int)k, 1.0, R, (lapack_int)n, b, (lapack_int)ldb);
}

lw_status lw_dense_cholesky_invert(int64_t n, double *R, lw_error *error)
{
    lw_status status = lw_dense_check(error, n, n, 0);
    if (status || n == 0) return status;
    lapack_int info = LAPACKE_dpotri_work(LAPACK_COL_MAJOR, 'U', (lapack_int)n, R, (lapack_int)n);
    for (int64_t j = 0; j < n; j++)
        for (int64_t i = 0; i < j; i++) R[i * n + j] = R[j * n + i];
    return lw_dense_outcome(error, "dpotri", info);
}

lw_status lw_dense_invert_lower(int64_t n, double *L, int64_t ldl, lw_error *error)
{
    lw_status status = lw_dense_check(error, n, ldl, 0);
    if (status || n == 0) return status;
    return lw_dense_outcome(error, "dpotri",
                            LAPACKE_dpotri_work(LAPACK_COL_MAJOR, 'L', (lapack_int)n, L, (lapack_int)ldl));
}

void lw_dense_multiply(int ta, int tb, int64_t m, int64_t n, int64_t k, double alpha, const double *A,
                       int64_t lda, const double *B, int64_t ldb, double beta, double *C, int64_t ldc)
{
    if (m <= 0 || n <= 0) return;
    cblas_dgemm(CblasColMajor, turned(ta), turned(tb), (lapack_int)m, (lapack_int)n, (lapack_int)k, alpha, A,
                lw_leading(lda), B, lw_leading(ldb), beta, C, lw_leading(ldc));
}

void lw_dense_vector(int ta, int64_t m, int64_t n, double alpha, const double *A, int64_t lda,
                     const double *x, double beta, double *y)
{
    if (ta ? n <= 0 : m <= 0) return;
    if (ta ? m == 0 : n == 0) { /* an empty sum: the library returns without scaling y */
        for (int64_t i = 0; i < (ta ? n : m); i++) y[i] = beta != 0 ? beta * y[i] : 0;
        return;
    }
    cblas_dgemv(CblasColMajor, turned(ta), (lapack_int)m, (lapack_int)n, alpha, A, lw_leading(lda), x, 1,
                beta, y, 1);
}

void lw_dense_symmetric_multiply(int64_t m, int64_t n, double alpha, const double *S, int64_t lds,
                                 const double *B, int64_t ldb, double beta, double *C, int64_t ldc)
{
    if (m <= 0 || n <= 0) return;
    cblas_dsymm(CblasColMajor, CblasLeft, CblasLower, (lapack_int)m, (lapack_int)n, alpha, S, (lapack_int)lds,
                B, (lapack_int)ldb, beta, C, (lapack_int)ldc);
}

void lw_dense_right_triangle_solve(int64_t m, int64_t n, const double *L, int64_t ldl, int transposed,
                                   double *B, int64_t ldb)
{
    if (m <= 0 || n <= 0) return;
    cblas_dtrsm(CblasColMajor, CblasRight, CblasLower, turned(transposed), CblasNonUnit, (lapack_int)m,
                (lapack_int)n, 1.0, L, (lapack_int)ldl, B, (lapack_int)ldb);
}
