/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Sparse QR, multifrontal and rank-revealing by a tolerance. Source: Davis, ACM TOMS 38(1):8, 2011. */
#include "matrix/suitesparse.h"

#include "core/memory.h"
#include "matrix/suitesparse_library.h"

#include <math.h>

struct lw_sparse_qr {
    cholmod_common common;
    int started;
    int64_t rows, columns, rank;
    int64_t *pivot;    /* columns */
    int64_t *diagonal; /* rank: where R_kk stands */
    double *permuted;  /* rows */
    cholmod_sparse *R; /* rank x columns */
    cholmod_sparse *H; /* rows x reflectors, or NULL */
    cholmod_dense *tau;
    SuiteSparse_long *place; /* E of the library */
    SuiteSparse_long *row;   /* row[i] = row of H that row i of A is */
};

/* An estimate from the columns of the Cholesky factor of A'A, which bound those of R: the fronts hold R and
 * about as much of H, and both are copied out with 64-bit indices. */
static lw_status check_budget(lw_sparse_qr *qr, cholmod_sparse *A, const lw_watch *watch, lw_error *error)
{
    cholmod_common *common = &qr->common;
    cholmod_sparse *T = cholmod_l_transpose(A, 0, common);
    common->nmethods = 1;
    common->method[0].ordering = CHOLMOD_AMD;
    common->postorder = 1;
    common->supernodal = CHOLMOD_SIMPLICIAL;
    cholmod_factor *L = T ? cholmod_l_analyze(T, common) : NULL;
    lw_status status = lw_library_outcome(common, "ordering the design matrix", error);
    double bytes = 48.0 * common->lnz + 48.0 * (double)A->nzmax + 200.0 * (double)(A->nrow + A->ncol);
    cholmod_l_free_factor(&L, common);
    cholmod_l_free_sparse(&T, common);
    if (status) return status;
    return lw_watch_budget(watch, bytes < 9e18 ? (int64_t)bytes : INT64_MAX, "the sparse orthogonal factor",
                           "an iterative engine takes less", error);
}

static int is_finite(const lw_sparse *A)
{
    for (int64_t p = 0; p < lw_sparse_nonzeros(A); p++)
        if (!isfinite(A->value[p])) return 0;
    return 1;
}

/* Pivots as numbers of A's columns, and the places of the diagonal of R. */
static lw_status read_factor(lw_sparse_qr *qr, lw_error *error)
{
    qr->pivot = LW_NEW_ARRAY(int64_t, qr->columns);
    qr->diagonal = LW_NEW_ARRAY(int64_t, qr->rank);
    qr->permuted = LW_NEW_ARRAY(double, qr->rows);
    if (!qr->pivot || !qr->diagonal || !qr->permuted)
        return lw_fail_memory(error, "the sparse orthogonal factor",
                              (size_t)(qr->columns * 16 + qr->rows * 8));
    const SuiteSparse_long *start = qr->R->p, *row = qr->R->i;
    for (int64_t k = 0; k < qr->columns; k++) qr->pivot[k] = qr->place ? qr->place[k] : k;
    for (int64_t k = 0; k < qr->rank; k++) {
        qr->diagonal[k] = -1;
        for (int64_t p = start[k]; p < start[k + 1]; p++) {
            if (row[p] == k) qr->diagonal[k] = p;
            if (row[p] > k)
                return lw_fail(error, LW_SYSTEM, "the sparse orthogonal factor is not triangular");
        }
        if (qr->diagonal[k] < 0)
            return lw_fail(error, LW_SYSTEM, "the sparse orthogonal factor lacks a pivot");
    }
    return LW_OK;
}

static lw_status factorize(lw_sparse_qr *qr, cholmod_sparse *A, double tolerance, int keep_q, lw_error *error)
{
    qr->rank = SuiteSparseQR_C(SPQR_ORDERING_AMD, tolerance < 0 ? SPQR_DEFAULT_TOL : tolerance, 0, 0, A, NULL,
                               NULL, NULL, NULL, &qr->R, &qr->place, keep_q ? &qr->H : NULL,
                               keep_q ? &qr->row : NULL, keep_q ? &qr->tau : NULL, &qr->common);
    lw_status status = lw_library_outcome(&qr->common, "the sparse orthogonal factorization", error);
    if (status) return status;
    /* The matrix is finite and its sizes are in order: what is missing is memory, also where the library does
     * not say so. */
    if (qr->rank < 0 || !qr->R || (keep_q && (!qr->H || !qr->tau)))
        return lw_fail(error, LW_NO_MEMORY, "out of memory: the sparse orthogonal factorization");
    return read_factor(qr, error);
}

lw_status lw_sparse_qr_make(const lw_sparse *A, double tolerance, int keep_q, const lw_watch *watch,
                            lw_sparse_qr **out, lw_error *error)
{
    *out = NULL;
    if (!is_finite(A)) return lw_fail(error, LW_BAD_INPUT, "the matrix has an entry that is not finite");
    lw_sparse_qr *qr = LW_NEW(lw_sparse_qr);
    SuiteSparse_long *index = NULL;
    if (!qr) return lw_fail_memory(error, "the sparse orthogonal factor", sizeof *qr);
    qr->rows = A->rows;
    qr->columns = A->columns;
    lw_status status = lw_library_start(&qr->common, error);
    qr->started = !status;
    if (!status) status = lw_library_index(A, &index, error);
    if (!status) {
        cholmod_sparse matrix = lw_library_matrix(A, index, 0);
        lw_watch_tick(watch, "ordering", 0, 0, "");
        status = check_budget(qr, &matrix, watch, error);
        if (!status) {
            lw_watch_tick(watch, "factorizing", 0, 0, "");
            status = factorize(qr, &matrix, tolerance, keep_q, error);
        }
    }
    lw_free(index);
    if (status)
        lw_sparse_qr_free(qr);
    else
        *out = qr;
    return status;
}

void lw_sparse_qr_free(lw_sparse_qr *qr)
{
    if (!qr) return;
    if (qr->started) {
        cholmod_l_free_sparse(&qr->R, &qr->common);
        cholmod_l_free_sparse(&qr->H, &qr->common);
        cholmod_l_free_dense(&qr->tau, &qr->common);
        if (qr->place) cholmod_l_free((size_t)qr->columns, sizeof *qr->place, qr->place, &qr->common);
        if (qr->row) cholmod_l_free((size_t)qr->rows, sizeof *qr->row, qr->row, &qr->common);
        cholmod_l_finish(&qr->common);
    }
    lw_free(qr->pivot);
    lw_free(qr->diagonal);
    lw_free(qr->permuted);
    lw_free(qr);
}

int64_t lw_sparse_qr_rank(const lw_sparse_qr *qr)
{
    return qr->rank;
}

const int64_t *lw_sparse_qr_pivot(const lw_sparse_qr *qr)
{
    return qr->pivot;
}

/* y <- (I - tau_h v v') y with v column h of H. */
static void reflect(const lw_sparse_qr *qr, int64_t h, double *y)
{
    const SuiteSparse_long *start = qr->H->p, *row = qr->H->i;
    const double *value = qr->H->x;
    double sum = 0;
    for (int64_t p = start[h]; p < start[h + 1]; p++) sum += value[p] * y[row[p]];
    sum *= ((const double *)qr->tau->x)[h];
    for (int64_t p = start[h]; p < start[h + 1]; p++) y[row[p]] -= sum * value[p];
}

/* Q = P' H_1 H_2 ... H_r with P the row permutation. */
lw_status lw_sparse_qr_apply_qt(lw_sparse_qr *qr, int64_t k, double *c, lw_error *error)
{
    if (!qr->H) return lw_fail(error, LW_BAD_SHAPE, "the orthogonal factor was not kept");
    for (int64_t side = 0; side < k; side++, c += qr->rows) {
        for (int64_t i = 0; i < qr->rows; i++) qr->permuted[qr->row ? qr->row[i] : i] = c[i];
        for (int64_t h = 0; h < (int64_t)qr->H->ncol; h++) reflect(qr, h, qr->permuted);
        for (int64_t i = 0; i < qr->rows; i++) c[i] = qr->permuted[i];
    }
    return LW_OK;
}

lw_status lw_sparse_qr_apply_q(lw_sparse_qr *qr, int64_t k, double *c, lw_error *error)
{
    if (!qr->H) return lw_fail(error, LW_BAD_SHAPE, "the orthogonal factor was not kept");
    for (int64_t side = 0; side < k; side++, c += qr->rows) {
        for (int64_t i = 0; i < qr->rows; i++) qr->permuted[i] = c[i];
        for (int64_t h = (int64_t)qr->H->ncol; h-- > 0;) reflect(qr, h, qr->permuted);
        for (int64_t i = 0; i < qr->rows; i++) c[i] = qr->permuted[qr->row ? qr->row[i] : i];
    }
    return LW_OK;
}

lw_status lw_sparse_qr_solve_r(lw_sparse_qr *qr, int64_t k, const double *c, int64_t ldc, double *x,
                               lw_error *error)
{
    const SuiteSparse_long *start = qr->R->p, *row = qr->R->i;
    const double *value = qr->R->x;
    double *y = LW_NEW_ARRAY(double, qr->rank);
    if (!y) return lw_fail_memory(error, "a triangular solve", (size_t)qr->rank * sizeof(double));
    for (int64_t side = 0; side < k; side++, c += ldc, x += qr->columns) {
        for (int64_t i = 0; i < qr->rank; i++) y[i] = c[i];
        for (int64_t j = qr->rank; j-- > 0;) {
            y[j] /= value[qr->diagonal[j]];
            for (int64_t p = start[j]; p < start[j + 1]; p++)
                if (row[p] < j) y[row[p]] -= value[p] * y[j];
        }
        for (int64_t j = 0; j < qr->columns; j++) x[qr->pivot[j]] = j < qr->rank ? y[j] : 0;
    }
    lw_free(y);
    return LW_OK;
}

lw_status lw_sparse_qr_solve_rt(lw_sparse_qr *qr, int64_t k, const double *x, double *c, int64_t ldc,
                                lw_error *error)
{
    const SuiteSparse_long *start = qr->R->p, *row = qr->R->i;
    const double *value = qr->R->x;
    (void)error;
    for (int64_t side = 0; side < k; side++, c += ldc, x += qr->columns) {
        for (int64_t j = 0; j < qr->rank; j++) {
            double sum = x[qr->pivot[j]];
            for (int64_t p = start[j]; p < start[j + 1]; p++)
                if (row[p] < j) sum -= value[p] * c[row[p]];
            c[j] = sum / value[qr->diagonal[j]];
        }
        for (int64_t i = qr->rank; i < qr->rows; i++) c[i] = 0;
    }
    return LW_OK;
}
