/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Orthogonal decompositions. Workspaces come from core/memory, so that a failing allocation is an error and
 * no crash. */
#include "matrix/dense_lapack.h"

#include "core/memory.h"
#include "matrix/dense.h"

#include <float.h>
#include <math.h>

/* `length` doubles of workspace as a first call asked for them. */
static double *take_work(double length, lw_error *error, lw_status *status)
{
    double *work = LW_NEW_ARRAY(double, length < 1 ? 1 : length);
    *status = work ? LW_OK : lw_fail_memory(error, "a dense decomposition", (size_t)length * sizeof(double));
    return work;
}

/* rank, and the condition of the leading triangle. */
static lw_status look_at_triangle(lw_dense_qr *qr, double tolerance, lw_error *error)
{
    int64_t m = qr->rows, n = qr->columns, most = m < n ? m : n;
    double limit = (tolerance < 0 ? (double)(m > n ? m : n) * DBL_EPSILON : tolerance);
    if (most > 0) limit *= fabs(qr->factor[0]);
    for (qr->rank = 0; qr->rank < most; qr->rank++)
        if (!(fabs(qr->factor[qr->rank * m + qr->rank]) > limit)) break;
    qr->rcond = 1;
    if (qr->rank == 0) return LW_OK;
    lw_status status;
    double *work = take_work(3.0 * (double)qr->rank, error, &status);
    lapack_int *whole = LW_NEW_ARRAY(lapack_int, qr->rank);
    if (!whole) status = lw_fail_memory(error, "a dense decomposition", (size_t)qr->rank * 4);
    if (!status)
        status = lw_dense_outcome(error, "dtrcon",
                                  LAPACKE_dtrcon_work(LAPACK_COL_MAJOR, '1', 'U', 'N', (lapack_int)qr->rank,
                                                      qr->factor, (lapack_int)m, &qr->rcond, work, whole));
    lw_free(work);
    lw_free(whole);
    return status;
}

static lw_status factorize(lw_dense_qr *qr, lw_error *error)
{
    lapack_int m = (lapack_int)qr->rows, n = (lapack_int)qr->columns;
    lw_status status = LW_OK;
    double length = 1, *work = NULL;
    lapack_int *place = LW_NEW_ZEROS(lapack_int, n);
    qr->tau = LW_NEW_ZEROS(double, m < n ? m : n);
    qr->pivot = LW_NEW_ARRAY(int64_t, n);
    if (!place || !qr->tau || !qr->pivot) {
        status = lw_fail_memory(error, "a dense decomposition", (size_t)n * 20);
    } else if (m > 0 && n > 0) {
        LAPACKE_dgeqp3_work(LAPACK_COL_MAJOR, m, n, qr->factor, m, place, qr->tau, &length, -1);
        work = take_work(length, error, &status);
        if (work)
            status = lw_dense_outcome(error, "dgeqp3",
                                      LAPACKE_dgeqp3_work(LAPACK_COL_MAJOR, m, n, qr->factor, m, place,
                                                          qr->tau, work, (lapack_int)length));
    }
    for (int64_t j = 0; !status && j < n; j++) qr->pivot[j] = m > 0 ? place[j] - 1 : j;
    lw_free(place);
    lw_free(work);
    return status;
}

lw_status lw_dense_qr_make(int64_t rows, int64_t columns, double *A, double tolerance, lw_dense_qr *out,
                           lw_error *error)
{
    *out = (lw_dense_qr){.rows = rows, .columns = columns, .factor = A};
    lw_status status = lw_dense_check(error, rows, columns, 0);
    if (!status) status = factorize(out, error);
    if (!status) status = look_at_triangle(out, tolerance, error);
    if (status) lw_dense_qr_clear(out);
    return status;
}

void lw_dense_qr_clear(lw_dense_qr *qr)
{
    lw_free(qr->factor);
    lw_free(qr->tau);
    lw_free(qr->pivot);
    *qr = (lw_dense_qr){0};
}

static lw_status apply_reflectors(const lw_dense_qr *qr, char transposed, int64_t k, double *c,
                                  lw_error *error)
{
    lw_status status = lw_dense_check(error, qr->rows, qr->columns, k);
    lapack_int m = (lapack_int)qr->rows, p = (lapack_int)(qr->rows < qr->columns ? qr->rows : qr->columns);
    if (status || p == 0 || k == 0) return status;
    double length = 1;
    LAPACKE_dormqr_work(LAPACK_COL_MAJOR, 'L', transposed, m, (lapack_int)k, p, qr->factor, m, qr->tau, c, m,
                        &length, -1);
    double *work = take_work(length, error, &status);
    if (work)
        status =
            lw_dense_outcome(error, "dormqr",
                             LAPACKE_dormqr_work(LAPACK_COL_MAJOR, 'L', transposed, m, (lapack_int)k, p,
                                                 qr->factor, m, qr->tau, c, m, work, (lapack_int)length));
    lw_free(work);
    return status;
}

lw_status lw_dense_qr_apply_qt(const lw_dense_qr *qr, int64_t k, double *c, lw_error *error)
{
    return apply_reflectors(qr, 'T', k, c, error);
}

lw_status lw_dense_qr_apply_q(const lw_dense_qr *qr, int64_t k, double *c, lw_error *error)
{
    return apply_reflectors(qr, 'N', k, c, error);
}

void lw_dense_qr_solve_r(const lw_dense_qr *qr, int transposed, int64_t k, double *c, int64_t ldc)
{
    if (qr->rank == 0 || k <= 0) return;
    cblas_dtrsm(CblasColMajor, CblasLeft, CblasUpper, transposed ? CblasTrans : CblasNoTrans, CblasNonUnit,
                (lapack_int)qr->rank, (lapack_int)k, 1.0, qr->factor, (lapack_int)qr->rows, c,
                (lapack_int)ldc);
}

/* Columns of B (n x k) orthonormal, in place (dgeqrf, dorgqr). */
static lw_status orthonormalize(int64_t n, int64_t k, double *B, lw_error *error)
{
    lapack_int rows = (lapack_int)n, columns = (lapack_int)k;
    double first = 1, second = 1;
    lw_status status;
    double *tau = LW_NEW_ARRAY(double, k);
    if (!tau) return lw_fail_memory(error, "the null space", (size_t)k * sizeof(double));
    LAPACKE_dgeqrf_work(LAPACK_COL_MAJOR, rows, columns, B, rows, tau, &first, -1);
    LAPACKE_dorgqr_work(LAPACK_COL_MAJOR, rows, columns, columns, B, rows, tau, &second, -1);
    double length = first > second ? first : second, *work = take_work(length, error, &status);
    if (work)
        status = lw_dense_outcome(
            error, "dgeqrf",
            LAPACKE_dgeqrf_work(LAPACK_COL_MAJOR, rows, columns, B, rows, tau, work, (lapack_int)length));
    if (!status)
        status = lw_dense_outcome(error, "dorgqr",
                                  LAPACKE_dorgqr_work(LAPACK_COL_MAJOR, rows, columns, columns, B, rows, tau,
                                                      work, (lapack_int)length));
    lw_free(work);
    lw_free(tau);
    return status;
}

/* A P = Q [R1 R2; 0 0]: the columns of P [-R1^-1 R2; I] span the null space. */
lw_status lw_dense_qr_null_space(const lw_dense_qr *qr, double **basis, lw_error *error)
{
    int64_t n = qr->columns, r = qr->rank, k = n - r;
    *basis = NULL;
    double *B = LW_NEW_ZEROS(double, lw_bytes(n, k)), *C = LW_NEW_ARRAY(double, lw_bytes(r, k));
    lw_status status = LW_OK;
    if (!B || !C) {
        lw_free(B);
        lw_free(C);
        return lw_fail_memory(error, "the null space", (size_t)lw_bytes(n, k) * sizeof(double));
    }
    for (int64_t c = 0; c < k; c++)
        for (int64_t i = 0; i < r; i++) C[c * r + i] = -qr->factor[(r + c) * qr->rows + i];
    lw_dense_qr_solve_r(qr, 0, k, C, r);
    for (int64_t c = 0; c < k; c++) {
        for (int64_t i = 0; i < r; i++) B[c * n + qr->pivot[i]] = C[c * r + i];
        B[c * n + qr->pivot[r + c]] = 1;
    }
    if (k > 0) status = orthonormalize(n, k, B, error);
    lw_free(C);
    if (status)
        lw_free(B);
    else
        *basis = B;
    return status;
}

lw_status lw_dense_svd(int64_t rows, int64_t columns, double *A, double *u, double *s, double *vt,
                       lw_error *error)
{
    lw_status status = lw_dense_check(error, rows, columns, 0);
    lapack_int m = (lapack_int)rows, n = (lapack_int)columns, p = m < n ? m : n;
    if (status || p == 0) return status;
    double length = 1, *work = NULL;
    lapack_int *whole = LW_NEW_ARRAY(lapack_int, 8 * (int64_t)p);
    if (!whole) return lw_fail_memory(error, "a dense decomposition", (size_t)p * 32);
    LAPACKE_dgesdd_work(LAPACK_COL_MAJOR, 'S', m, n, A, m, s, u, m, vt, p, &length, -1, whole);
    work = take_work(length, error, &status);
    if (work)
        status = lw_dense_outcome(error, "dgesdd",
                                  LAPACKE_dgesdd_work(LAPACK_COL_MAJOR, 'S', m, n, A, m, s, u, m, vt, p, work,
                                                      (lapack_int)length, whole));
    lw_free(work);
    lw_free(whole);
    return status;
}

lw_status lw_dense_eigen(int64_t n, double *A, double *values, lw_error *error)
{
    lw_status status = lw_dense_check(error, n, n, 0);
    if (status || n == 0) return status;
    double length = 1, *work = NULL;
    lapack_int size = (lapack_int)n, whole_length = 1, *whole = NULL;
    LAPACKE_dsyevd_work(LAPACK_COL_MAJOR, 'V', 'U', size, A, size, values, &length, -1, &whole_length, -1);
    work = take_work(length, error, &status);
    whole = LW_NEW_ARRAY(lapack_int, whole_length);
    if (!whole) status = lw_fail_memory(error, "a dense decomposition", (size_t)whole_length * 4);
    if (!status)
        status = lw_dense_outcome(error, "dsyevd",
                                  LAPACKE_dsyevd_work(LAPACK_COL_MAJOR, 'V', 'U', size, A, size, values, work,
                                                      (lapack_int)length, whole, whole_length));
    lw_free(work);
    lw_free(whole);
    return status;
}

lw_status lw_dense_gels(int64_t m, int64_t n, double *A, int64_t k, double *b, lw_error *error)
{
    lw_status status = lw_dense_check(error, m, n, k);
    if (status || m == 0 || n == 0 || k == 0) return status;
    lapack_int rows = (lapack_int)m, columns = (lapack_int)n, sides = (lapack_int)k,
               most = rows > columns ? rows : columns;
    double length = 1;
    LAPACKE_dgels_work(LAPACK_COL_MAJOR, 'N', rows, columns, sides, A, rows, b, most, &length, -1);
    double *work = take_work(length, error, &status);
    if (work)
        status = lw_dense_outcome(error, "dgels",
                                  LAPACKE_dgels_work(LAPACK_COL_MAJOR, 'N', rows, columns, sides, A, rows, b,
                                                     most, work, (lapack_int)length));
    lw_free(work);
    return status;
}
