/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The prior covariance that a penalty means: what undamped directions add to L^# L^#'. */
#include "core/memory.h"
#include "solve/standard_part.h"

#include <string.h>

void lw_standard_form_factor(lw_standard_form *form, const double **inverse, lw_cholesky **factor,
                             const int64_t **column_of)
{
    *inverse = form->root.kind == LW_ROOT_DIAGONAL ? form->root.inverse : NULL;
    *factor = form->root.factor;
    *column_of = form->root.column_of;
}

/* X = N T^-1, columns x d. */
static void make_null(lw_standard_form *form, double *X)
{
    int64_t n = form->system->columns, d = form->null.defect;
    const lw_sparse *N = form->null.basis;
    for (int64_t k = 0; k < d; k++) {
        memset(form->small, 0, (size_t)d * sizeof(double));
        form->small[k] = 1.0;
        lw_dense_qr_solve_r(&form->qr, 0, 1, form->small, d);
        for (int64_t c = 0; c < d; c++) {
            int64_t column = form->qr.pivot[c];
            for (int64_t p = N->start[column]; p < N->start[column + 1]; p++)
                X[N->index[p] + k * n] += N->value[p] * form->small[c];
        }
    }
}

/* W = L^#' A'Q, width x d, and Y = L^# W, columns x d. */
static lw_status make_coupling(lw_standard_form *form, double *W, double *Y, lw_error *error)
{
    int64_t m = form->system->rows, n = form->system->columns, d = form->null.defect;
    for (int64_t k = 0; k < d; k++) {
        lw_apply_transposed(form->A, 1, form->Q + k * m, form->model);
        lw_standard_form_narrow(form, 1, form->model, form->model);
        lw_standard_root_transposed(&form->root, 1, form->model, W + k * form->root.width);
        lw_standard_root_apply(&form->root, 1, W + k * form->root.width, Y + k * n);
    }
    return form->root.failed == LW_OK ? LW_OK
                                      : lw_fail(error, LW_SYSTEM, "a solve with the factor of L'L failed");
}

lw_status lw_standard_form_prior(lw_standard_form *form, const lw_watch *watch, double *change, double *null,
                                 lw_error *error)
{
    int64_t n = form->system->columns, width = form->root.width, d = form->null.defect;
    memset(change, 0, (size_t)n * sizeof *change);
    memset(null, 0, (size_t)n * sizeof *null);
    if (d == 0) return LW_OK;
    int64_t bytes = lw_bytes(3 * n + width, lw_bytes(d, 8));
    if (lw_watch_budget(watch, bytes, "the prior covariance", "", NULL) != LW_OK)
        return lw_fail(error, LW_QUALIFIED,
                       "the prior covariance of %lld undamped directions does not fit --memory",
                       (long long)d);
    double *X = LW_NEW_ZEROS(double, n *d), *Y = LW_NEW_ARRAY(double, n *d), *Z = LW_NEW_ARRAY(double, n *d);
    double *W = LW_NEW_ARRAY(double, width *d), *M = LW_NEW_ARRAY(double, d *d);
    lw_status status = LW_OK;
    if (X == NULL || Y == NULL || Z == NULL || W == NULL || M == NULL)
        status = lw_fail_memory(error, "the prior covariance", (size_t)bytes);
    if (status == LW_OK) {
        make_null(form, X);
        status = make_coupling(form, W, Y, error);
    }
    if (status == LW_OK) {
        lw_dense_multiply(1, 0, d, d, width, 1.0, W, width, W, width, 0.0, M, d);
        lw_dense_multiply(0, 0, n, d, d, 1.0, X, n, M, d, 0.0, Z, n);
        for (int64_t e = 0; e < n * d; e++) {
            change[e % n] += X[e] * (Z[e] - 2.0 * Y[e]);
            null[e % n] += X[e] * X[e];
        }
    }
    lw_free(X);
    lw_free(Y);
    lw_free(Z);
    lw_free(W);
    lw_free(M);
    return status;
}
