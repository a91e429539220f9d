/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Trial spaces for the null vectors of the penalty. */
#include "core/memory.h"
#include "matrix/suitesparse.h"
#include "solve/standard_null.h"

#include <math.h>
#include <string.h>

#define ITERATIONS 5
#define SHIFT 1e-12

/* Coordinate a of the columns of a component, moved and scaled to [-1, 1]; 0 where blank. */
static void centre(const lw_system *system, const double *place, int64_t size, const int64_t *column,
                   double *out)
{
    double low = (double)INFINITY, high = -(double)INFINITY;
    for (int64_t i = 0; i < size; i++) {
        out[i] = place[system->parameter_of[column[i]]];
        if (isnan(out[i])) continue;
        low = fmin(low, out[i]);
        high = fmax(high, out[i]);
    }
    double half = 0.5 * (high - low), middle = 0.5 * (high + low);
    for (int64_t i = 0; i < size; i++)
        out[i] = isnan(out[i]) || !(half > 0.0) ? 0.0 : (out[i] - middle) / half;
}

lw_status lw_penalty_trial_polynomials(const lw_system *system, const lw_penalty_graph *graph, int *q,
                                       double *X, lw_error *error)
{
    const double *place[3];
    int axes = 0;
    int64_t n = system->columns;
    for (int a = 0; a < 3; a++)
        if (system->problem->coordinate[a] != NULL && 2 << axes <= *q)
            place[axes++] = system->problem->coordinate[a];
    *q = 1 << axes;
    double *t = LW_NEW_ARRAY(double, n);
    if (t == NULL) return lw_fail_memory(error, "null vectors", (size_t)n * sizeof *t);
    for (int64_t c = 0; c < graph->count; c++) {
        const int64_t *column = graph->column + graph->column_start[c];
        int64_t size = graph->column_start[c + 1] - graph->column_start[c];
        for (int64_t i = 0; i < size; i++) X[column[i]] = 1.0;
        for (int a = 0; a < axes; a++) {
            centre(system, place[a], size, column, t);
            for (int v = 0; v < 1 << a; v++)
                for (int64_t i = 0; i < size; i++)
                    X[column[i] + (v + (1 << a)) * n] = X[column[i] + v * n] * t[i];
        }
    }
    lw_free(t);
    return LW_OK;
}

/* L'L + SHIFT norm_c^2 I. */
static lw_status shifted_gram(const lw_sparse *L, const lw_penalty_graph *graph, lw_sparse **out,
                              lw_error *error)
{
    lw_sparse *W = NULL, *shift = NULL;
    int64_t n = L->columns;
    lw_status status = lw_sparse_gram(L, NULL, &W, error);
    if (status == LW_OK) status = lw_sparse_new(n, n, n, 0, &shift, error);
    if (status == LW_OK) {
        for (int64_t c = 0; c < graph->count; c++)
            for (int64_t p = graph->column_start[c]; p < graph->column_start[c + 1]; p++) {
                double norm = graph->norm[c] > 0.0 ? graph->norm[c] : 1.0;
                shift->value[graph->column[p]] = SHIFT * norm * norm;
            }
        for (int64_t j = 0; j <= n; j++) shift->start[j] = j;
        for (int64_t j = 0; j < n; j++) shift->index[j] = (int32_t)j;
        status = lw_sparse_add(1.0, W, 1.0, shift, out, error);
    }
    lw_sparse_free(W);
    lw_sparse_free(shift);
    return status;
}

/* X <- (L'L + shift)^-1 X, orthonormal again in every component: what is null grows by 1 / SHIFT against the
 * rest. */
lw_status lw_penalty_trial_inverse(const lw_sparse *L, const lw_penalty_graph *graph, int q,
                                   const lw_watch *watch, double *X, lw_error *error)
{
    lw_sparse *W = NULL;
    lw_cholesky *factor = NULL;
    lw_cholesky_size size;
    int64_t n = L->columns, defect;
    uint64_t state = UINT64_C(88172645463325252);
    for (int64_t k = 0; k < n * q; k++) {
        state ^= state << 13; /* Marsaglia, J. Stat. Soft. 8(14), 2003 */
        state ^= state >> 7;
        state ^= state << 17;
        X[k] = (double)(state >> 11) * 0x1p-52 - 1.0;
    }
    lw_status status = shifted_gram(L, graph, &W, error);
    if (status == LW_OK) status = lw_cholesky_analyse(W, watch, &factor, &size, error);
    if (status == LW_OK && lw_watch_budget(watch, size.bytes, "the factor of L'L", "", NULL) != LW_OK)
        status = lw_fail(error, LW_QUALIFIED, "the factor of L'L does not fit --memory");
    if (status == LW_OK) status = lw_cholesky_factorize(factor, W, watch, &defect, error);
    if (status == LW_UNSOLVABLE)
        status = lw_fail(error, LW_QUALIFIED, "L'L is too ill-conditioned for a factor");
    for (int turn = 0; status == LW_OK && turn < ITERATIONS; turn++) {
        status = lw_cholesky_solve(factor, q, X, error);
        for (int64_t c = 0; status == LW_OK && c < graph->count; c++) {
            int rank;
            if (graph->column_start[c + 1] - graph->column_start[c] > 1)
                status = lw_penalty_orthonormal(graph, c, n, q, X, &rank, error);
        }
    }
    lw_sparse_free(W);
    lw_cholesky_free(factor);
    return status;
}
