/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Null vectors of a large sparse M by block inverse iteration: X <- (M'M + shift I)^-1 X, with up to
 * LW_DATUM_VECTORS vectors for all components at once and a Rayleigh-Ritz step for each component. */
#include "core/chance.h"
#include "core/memory.h"
#include "matrix/dense.h"
#include "matrix/vector.h"
#include "solve/datum.h"
#include "solve/datum_groups.h"

#include <math.h>
#include <string.h>

#define K LW_DATUM_VECTORS
#define ROUNDS 5
#define CANDIDATE 1e-8 /* ||M v|| of a candidate; columns of M have norms near 1 */
#define SHIFT 1e-13
#define LARGEST_SHIFT 1e-8

/* X_c <- X_c W with W the eigenvectors of (M X_c)'(M X_c), values increasing. y = M x. */
static lw_status ritz(int64_t n, int64_t m, int64_t columns, const int64_t *column, int64_t rows,
                      const int64_t *row, int k, double *x, const double *y, lw_error *error)
{
    double H[K * K], theta[K], line[K];
    for (int a = 0; a < k; a++)
        for (int b = 0; b < k; b++) H[a + b * k] = lw_group_dot(rows, row, y + a * m, y + b * m);
    lw_status status = lw_dense_eigen(k, H, theta, error);
    for (int64_t i = 0; status == LW_OK && i < columns; i++) {
        for (int a = 0; a < k; a++) line[a] = x[a * n + column[i]];
        for (int b = 0; b < k; b++) {
            double sum = 0;
            for (int a = 0; a < k; a++) sum += line[a] * H[a + b * k];
            x[b * n + column[i]] = sum;
        }
    }
    return status;
}

static int vectors_of(int64_t columns)
{
    return columns < K ? (int)columns : K;
}

/* One Rayleigh-Ritz step in every component. */
static lw_status ritz_all(const lw_sparse *M, const lw_groups *g, double *x, double *y, lw_error *error)
{
    lw_status status = LW_OK;
    int64_t n = M->columns, m = M->rows;
    for (int64_t c = 0; c < g->count; c++) {
        int64_t first = g->column_start[c], count = g->column_start[c + 1] - first;
        lw_group_orthonormalize(n, count, g->column + first, vectors_of(count), x);
        for (int a = vectors_of(count); a < K; a++)
            for (int64_t i = 0; i < count; i++) x[a * n + g->column[first + i]] = 0;
    }
    lw_sparse_apply(M, K, x, y);
    for (int64_t c = 0; status == LW_OK && c < g->count; c++) {
        int64_t first = g->column_start[c], count = g->column_start[c + 1] - first, top = g->row_start[c];
        status = ritz(n, m, count, g->column + first, g->row_start[c + 1] - top, g->row + top,
                      vectors_of(count), x, y, error);
    }
    return status;
}

/* Keeps the candidates of each component in its first places, zeros elsewhere; counts them. */
static void keep_null(const lw_sparse *M, const lw_groups *g, double *x, double *y, int64_t *defect,
                      int *full)
{
    int64_t n = M->columns, m = M->rows;
    lw_sparse_apply(M, K, x, y);
    *defect = *full = 0;
    for (int64_t c = 0; c < g->count; c++) {
        const int64_t *column = g->column + g->column_start[c], *row = g->row + g->row_start[c];
        int64_t columns = g->column_start[c + 1] - g->column_start[c],
                rows = g->row_start[c + 1] - g->row_start[c];
        int kept = 0;
        for (int a = 0; a < K; a++) {
            double size = sqrt(lw_group_dot(columns, column, x + a * n, x + a * n));
            int is_null =
                size > 0.5 && sqrt(lw_group_dot(rows, row, y + a * m, y + a * m)) < CANDIDATE * size;
            for (int64_t i = 0; is_null && i < columns; i++) x[kept * n + column[i]] = x[a * n + column[i]];
            for (int64_t i = 0; (!is_null || kept < a) && i < columns; i++) x[a * n + column[i]] = 0;
            kept += is_null;
        }
        *defect += kept;
        *full |= kept == K;
    }
}

/* Factor of N + shift I with the smallest shift that works. */
static lw_status shifted_factor(const lw_sparse *N, lw_cholesky *factor, const lw_watch *watch,
                                lw_error *error)
{
    lw_sparse *unit = NULL, *shifted = NULL;
    lw_status status = lw_sparse_new(N->columns, N->columns, N->columns, 0, &unit, error);
    if (status < 0) return status;
    for (int64_t j = 0; j < N->columns; j++) unit->start[j] = unit->index[j] = (int32_t)j, unit->value[j] = 1;
    unit->start[N->columns] = N->columns;
    status = LW_UNSOLVABLE;
    for (double shift = SHIFT; status == LW_UNSOLVABLE && shift <= LARGEST_SHIFT; shift *= 100) {
        int64_t bad;
        status = lw_sparse_add(1, N, shift, unit, &shifted, error);
        if (status == LW_OK) status = lw_cholesky_factorize(factor, shifted, watch, &bad, error);
        lw_sparse_free(shifted);
        shifted = NULL;
    }
    lw_sparse_free(unit);
    return status;
}

lw_status lw_datum_search(const lw_sparse *M, const lw_sparse *N, lw_cholesky *factor, const lw_watch *watch,
                          int32_t *of_column, int64_t *components, double **basis, int64_t *defect, int *full,
                          lw_error *error)
{
    lw_groups g = {0};
    lw_random *random = NULL;
    int64_t n = M->columns;
    *basis = NULL;
    *defect = *full = 0;
    lw_status status = lw_watch_budget(watch, lw_bytes(K * (n + M->rows), 8), "the search for rank defects",
                                       "allow more memory", error);
    if (status < 0) return status;
    double *x = LW_NEW_ARRAY(double, K *n), *y = LW_NEW_ARRAY(double, K * M->rows);
    status = x && y ? LW_OK
                    : lw_fail_memory(error, "the search for rank defects", (size_t)(K * (n + M->rows)) * 8);
    if (status == LW_OK) status = lw_datum_components(M, of_column, components, error);
    if (status == LW_OK) status = lw_groups_make(M, of_column, *components, &g, error);
    if (status == LW_OK) status = shifted_factor(N, factor, watch, error);
    if (status == LW_OK) status = lw_random_new(1, 0, &random, error);
    for (int64_t i = 0; status == LW_OK && i < K * n; i++) x[i] = lw_random_normal(random);
    for (int round = 0; status == LW_OK && round < ROUNDS; round++) {
        lw_watch_tick(watch, "searching rank defects", round, ROUNDS, "");
        status = lw_cholesky_solve(factor, K, x, error);
        if (status == LW_OK) status = ritz_all(M, &g, x, y, error);
    }
    if (status == LW_OK) {
        keep_null(M, &g, x, y, defect, full);
        if (*defect > 0) *basis = x, x = NULL;
    }
    lw_random_free(random);
    lw_groups_clear(&g);
    lw_free(x);
    lw_free(y);
    return status;
}

lw_status lw_datum_expand(int64_t columns, const int32_t *of_column, const double *packed, int64_t defect,
                          const lw_watch *watch, double **basis, lw_error *error)
{
    *basis = NULL;
    lw_status status = lw_watch_budget(watch, lw_bytes(columns * defect, 8), "the null space of a free datum",
                                       "hold parameters instead (parameters.csv, column fixed)", error);
    if (status < 0) return status;
    int64_t *place = LW_NEW_ARRAY(int64_t, columns * K), next = 0;
    *basis = LW_NEW_ZEROS(double, columns *defect);
    if (!place || !*basis) {
        lw_free(place);
        lw_free(*basis);
        *basis = NULL;
        return lw_fail_memory(error, "the null space", (size_t)(columns * defect) * 8);
    }
    for (int64_t i = 0; i < columns * K; i++)
        place[i] = -1; /* place of vector a of component c, at c K + a */
    for (int64_t a = 0; a < K; a++) {
        for (int64_t j = 0; j < columns; j++) {
            double value = packed[a * columns + j];
            if (value == 0) continue;
            int64_t *p = place + of_column[j] * K + a;
            if (*p < 0 && next < defect) *p = next++;
            if (*p >= 0) (*basis)[*p * columns + j] = value;
        }
    }
    lw_free(place);
    return LW_OK;
}
