/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Candidates of the search proved or dropped: with as many columns held as there are candidates, null vectors
 * are accurate (minimise ||M g||^2 + ||E'g - e||^2), however ill-conditioned the rest is; what is no null
 * vector then shows ||M g|| clear of rounding. All components are done at once, LW_DATUM_VECTORS vectors in
 * all. */
#include "core/memory.h"
#include "matrix/vector.h"
#include "solve/datum_groups.h"
#include "solve/direct.h"

#include <math.h>
#include <string.h>

#define K LW_DATUM_VECTORS
#define ROUNDS 3

/* Columns to hold, component by component: elimination with the largest entry of each vector as pivot.
 * vector[k]: place of held column k's vector; work is used up. */
static int64_t choose_held(int64_t n, const lw_groups *g, double *work, int64_t *held, int *vector)
{
    int64_t count = 0;
    for (int64_t c = 0; c < g->count; c++) {
        const int64_t *column = g->column + g->column_start[c];
        int64_t columns = g->column_start[c + 1] - g->column_start[c];
        for (int a = 0; a < K; a++) {
            double *v = work + a * n;
            int64_t best = column[0];
            for (int64_t i = 1; i < columns; i++)
                if (fabs(v[column[i]]) > fabs(v[best])) best = column[i];
            if (v[best] == 0) continue;
            for (int b = a + 1; b < K; b++) {
                double factor = work[b * n + best] / v[best];
                for (int64_t i = 0; factor != 0 && i < columns; i++)
                    work[b * n + column[i]] -= factor * v[column[i]];
                work[b * n + best] = 0;
            }
            held[count] = best;
            vector[count++] = a;
        }
    }
    return count;
}

/* x <- null vectors with 1 at their held column and 0 at the others of their component. */
static lw_status polish(lw_direct *direct, double lambda, int64_t held, const int *vector, double *x,
                        lw_error *error)
{
    int64_t n = direct->base.system->columns, stacked = lw_direct_stacked(direct, lambda),
            first = stacked - held;
    double *f = LW_NEW_ARRAY(double, stacked *K), *dz = LW_NEW_ARRAY(double, n *K);
    lw_status status =
        f && dz ? LW_OK : lw_fail_memory(error, "the null space", (size_t)((stacked + n) * K) * 8);
    memset(x, 0, (size_t)(n * K) * 8);
    for (int round = 0; status == LW_OK && round < ROUNDS; round++) {
        lw_direct_apply(direct, lambda, K, x, f);
        for (int64_t i = 0; i < stacked * K; i++) f[i] = -f[i];
        for (int64_t k = 0; k < held; k++) f[vector[k] * stacked + first + k] += 1;
        status = direct->factor->solve(direct, K, f, NULL, NULL, dz, error);
        if (status == LW_OK) lw_add_scaled(n * K, 1, dz, x, NULL);
    }
    lw_free(f);
    lw_free(dz);
    return status;
}

/* Keeps what is null in each component; returns how many. y = M x. */
static int64_t keep_confirmed(const lw_sparse *M, const lw_groups *g, double *x, double *y)
{
    int64_t n = M->columns, m = M->rows, confirmed = 0;
    lw_sparse_apply(M, K, x, y);
    for (int64_t c = 0; c < g->count; c++) {
        const int64_t *column = g->column + g->column_start[c], *row = g->row + g->row_start[c];
        int64_t columns = g->column_start[c + 1] - g->column_start[c],
                rows = g->row_start[c + 1] - g->row_start[c];
        for (int a = 0; a < K; a++) {
            double *v = x + a * n, size = sqrt(lw_group_dot(columns, column, v, v));
            if (size == 0) continue;
            if (sqrt(lw_group_dot(rows, row, y + a * m, y + a * m)) <= LW_DATUM_TOLERANCE * size)
                confirmed++;
            else
                for (int64_t i = 0; i < columns; i++) v[column[i]] = 0;
        }
        lw_group_orthonormalize(n, columns, column, K, x);
    }
    return confirmed;
}

lw_status lw_datum_confirm(lw_direct *direct, double lambda, const lw_sparse *M, const int32_t *of_column,
                           int64_t components, double *packed, int64_t *defect, const lw_watch *watch,
                           lw_error *error)
{
    int64_t n = M->columns, candidates = *defect;
    lw_groups g = {0};
    double *work = LW_NEW_ARRAY(double, K *n), *y = LW_NEW_ARRAY(double, K * M->rows);
    int64_t *held = LW_NEW_ARRAY(int64_t, candidates);
    int *vector = LW_NEW_ARRAY(int, candidates);
    lw_status status = LW_OK;
    if (!work || !y || !held || !vector)
        status = lw_fail_memory(error, "the null space", (size_t)(K * (n + M->rows)) * 8);
    if (status == LW_OK) status = lw_groups_make(M, of_column, components, &g, error);
    if (status == LW_OK) {
        lw_copy(K * n, packed, work);
        lw_datum_clear(&direct->datum);
        candidates = choose_held(n, &g, work, held, vector);
        direct->datum.space = (lw_null_space){n, candidates, NULL, held};
        held = NULL;
        status = lw_direct_make_extra(direct, error);
    }
    if (status == LW_OK) status = direct->factor->factorize(direct, lambda, watch, error);
    if (status == LW_OK) status = polish(direct, lambda, candidates, vector, packed, error);
    if (status == LW_OK) *defect = keep_confirmed(M, &g, packed, y);
    if (status == LW_UNSOLVABLE) status = LW_NOT_CONVERGED;
    if (status != LW_OK || *defect != candidates) {
        lw_datum_clear(&direct->datum);
        lw_status again = lw_direct_make_extra(direct, error);
        if (again < 0) status = again;
    }
    lw_groups_clear(&g);
    lw_free(work);
    lw_free(y);
    lw_free(held);
    lw_free(vector);
    return status;
}
