/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Held parameters inside the penalty: L (x - x0) = L_free (x_free - x0) + c with c = L_held (held - prior).
 * The start is moved by scale s, L_free s = -c in least squares:
 *
 *     ||L_free z + c||^2 = ||L_free (z - s)||^2 + ||c + L_free s||^2
 *
 * s by conjugate gradients on L'L s = -L'c, preconditioned with the Cholesky factor of L'L + tau I: all
 * eigenvalues that are not zero come near 1, and those that are zero have no share in the right-hand side, so
 * a few steps do. Source: Hestenes & Stiefel, J. Res. NBS 49:409-436, 1952. */
#include "core/memory.h"
#include "matrix/suitesparse.h"
#include "matrix/vector.h"
#include "problem/system_part.h"

#include <math.h>
#include <string.h>

#define MOST_STEPS 200
#define SHIFT 1e-9

/* c over the rows that a free parameter takes part in; *any tells whether it is not zero. */
static void held_rows(const lw_system *system, const lw_sparse *L, double *c, int *any)
{
    const lw_problem *problem = system->problem;
    const lw_sparse *free_part = system->penalty;
    *any = 0;
    memset(c, 0, (size_t)L->rows * sizeof *c);
    for (int64_t j = 0; j < problem->n; j++) {
        if (system->column_of[j] >= 0) continue;
        lw_decimal held = lw_given(problem->fixed_value, problem->fixed_low, j, 0.0);
        double off = lw_decimal_subtract(held, lw_given(problem->prior, problem->prior_low, j, 0.0)).high;
        for (int64_t p = L->start[j]; p < L->start[j + 1]; p++) c[L->index[p]] += L->value[p] * off;
    }
    char *touched = LW_NEW_ZEROS(char, L->rows);
    if (touched == NULL) {
        *any = -1;
        return;
    }
    for (int64_t p = 0; p < lw_sparse_nonzeros(free_part); p++) touched[free_part->index[p]] = 1;
    for (int64_t i = 0; i < L->rows; i++) {
        if (!touched[i]) c[i] = 0.0;
        *any |= c[i] != 0.0;
    }
    lw_free(touched);
}

static lw_status make_preconditioner(const lw_system *system, const lw_watch *watch, lw_cholesky **out,
                                     lw_error *error)
{
    lw_sparse *W = NULL, *shift = NULL, *sum = NULL;
    int64_t n = system->columns, defect = 0;
    double largest = 0.0;
    lw_status status = lw_system_penalty_gram(system, &W, error);
    if (status == LW_OK) status = lw_sparse_new(n, n, n, 0, &shift, error);
    if (status == LW_OK) {
        for (int64_t p = 0; p < lw_sparse_nonzeros(W); p++) largest = fmax(largest, fabs(W->value[p]));
        for (int64_t j = 0; j < n; j++) {
            shift->start[j] = j;
            shift->index[j] = (int32_t)j;
            shift->value[j] = SHIFT * largest;
        }
        shift->start[n] = n;
        status = lw_sparse_add(1.0, W, 1.0, shift, &sum, error);
    }
    if (status == LW_OK) status = lw_cholesky_analyse(sum, watch, out, NULL, error);
    if (status == LW_OK) status = lw_cholesky_factorize(*out, sum, watch, &defect, error);
    lw_sparse_free(W);
    lw_sparse_free(shift);
    lw_sparse_free(sum);
    return status;
}

/* r is c + L s throughout; g = -L'r, h = M^-1 g, d the direction, q = L d. work: 3 columns + rows doubles. */
static lw_status iterate(const lw_system *system, lw_cholesky *M, double *s, double *r, double *work,
                         lw_error *error)
{
    int64_t n = system->columns, p = system->penalty_rows;
    double *g = work, *h = g + n, *d = h + n, *q = d + n, rho = 0.0, target = 0.0;
    for (int step = 0; step < MOST_STEPS; step++) {
        lw_system_penalize_transposed(system, r, g);
        for (int64_t j = 0; j < n; j++) h[j] = g[j] = -g[j];
        double size = lw_norm(n, g, NULL);
        if (step == 0) target = size * 1e-15;
        if (size <= target) return LW_OK;
        lw_status status = lw_cholesky_solve(M, 1, h, error);
        if (status != LW_OK) return status;
        double gh = lw_dot(n, g, h, NULL), beta = step == 0 ? 0.0 : gh / rho;
        lw_scale_add(n, 1.0, h, beta, d, NULL);
        lw_system_penalize(system, d, q);
        double curve = lw_dot(p, q, q, NULL);
        if (!(curve > 0.0) || !(gh > 0.0)) return LW_OK;
        lw_add_scaled(n, gh / curve, d, s, NULL);
        lw_add_scaled(p, gh / curve, q, r, NULL);
        rho = gh;
    }
    return LW_OK;
}

lw_status lw_system_shift_held(lw_system *system, const lw_sparse *L, const lw_watch *watch, lw_error *error)
{
    int64_t n = system->columns, p = system->penalty_rows;
    if (n == system->problem->n || n == 0) return LW_OK;
    double *r = LW_NEW_ZEROS(double, p), *s = LW_NEW_ZEROS(double, n),
           *work = LW_NEW_ZEROS(double, 3 * n + p);
    lw_cholesky *M = NULL;
    lw_status status = LW_OK;
    int any = 0;
    if (r != NULL) held_rows(system, L, r, &any);
    if (r == NULL || s == NULL || work == NULL || any < 0)
        status =
            lw_fail_memory(error, "held parameters in the penalty", (size_t)(4 * n + 2 * p) * sizeof(double));
    if (status == LW_OK && any) {
        status = make_preconditioner(system, watch, &M, error);
        if (status == LW_OK) status = iterate(system, M, s, r, work, error);
        for (int64_t c = 0; status == LW_OK && c < n; c++)
            system->start[c] = lw_decimal_add(system->start[c], lw_decimal_of(system->scale[c] * s[c]));
        if (status == LW_OK) system->penalty_constant = lw_norm(p, r, NULL);
    }
    lw_cholesky_free(M);
    lw_free(r);
    lw_free(s);
    lw_free(work);
    return status;
}
