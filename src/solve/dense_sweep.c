/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "solve/dense_sweep.h"

#include "core/memory.h"
#include "matrix/dense.h"
#include "matrix/vector.h"
#include "solve/standard_null.h"

#include <math.h>
#include <string.h>

struct lw_dense_sweep {
    const lw_system *system;
    int64_t m, n, t, q, p; /* rows, columns, rank of L, null vectors of L, singular values */
    double *s, *beta;      /* p */
    double *u;             /* (m - q) x p */
    double *rest;          /* m - q: b - U beta */
    double *z1v;           /* n x p: Z1 V */
    double *null;          /* n x q: N */
    lw_dense_qr an;        /* of A N, when q > 0 */
    double *top_b, *top_v; /* q, q x p: upper part of Q'b and of Q'A Z1 V */
};

void lw_dense_sweep_free(lw_dense_sweep *sweep)
{
    if (!sweep) return;
    double *owned[] = {sweep->s,   sweep->beta, sweep->u,     sweep->rest,
                       sweep->z1v, sweep->null, sweep->top_b, sweep->top_v};
    for (size_t i = 0; i < sizeof owned / sizeof *owned; i++) lw_free(owned[i]);
    lw_dense_qr_clear(&sweep->an);
    lw_free(sweep);
}

static lw_status short_of_memory(lw_error *error, int64_t doubles)
{
    return lw_fail_memory(error, "the singular value decomposition", (size_t)lw_bytes(doubles, 8));
}

/* L diagonal: Z1 = columns e_j / L_jj, N = the others. */
static lw_status split_diagonal(lw_dense_sweep *w, const double *diagonal, double **z1, lw_error *error)
{
    int64_t n = w->n;
    for (int64_t j = 0; j < n; j++) w->t += diagonal[j] != 0;
    w->q = n - w->t;
    *z1 = LW_NEW_ZEROS(double, n * w->t);
    w->null = LW_NEW_ZEROS(double, n * w->q);
    if (!*z1 || !w->null) return short_of_memory(error, n * n);
    for (int64_t j = 0, a = 0, b = 0; j < n; j++) {
        if (diagonal[j] != 0)
            (*z1)[j + n * a++] = 1 / diagonal[j];
        else
            w->null[j + n * b++] = 1;
    }
    return LW_OK;
}

/* L = K D with unit columns of K: K P = Q [R11 R12; 0 0], Z1 = D^-1 (I - N N') P [R11^-1; 0], N of K, null =
 * D^-1 N. */
static lw_status split_general(lw_dense_sweep *w, const lw_sparse *L, double **z1, lw_error *error)
{
    int64_t n = w->n;
    lw_dense_qr qr = {0};
    double *dense = LW_NEW_ARRAY(double, lw_bytes(L->rows, n)), *norm = LW_NEW_ARRAY(double, n),
           *overlap = NULL;
    double *unit = NULL;
    if (!dense || !norm) {
        lw_free(dense);
        lw_free(norm);
        return short_of_memory(error, lw_bytes(L->rows, n));
    }
    lw_sparse_to_dense(L, dense);
    lw_sparse_column_norms(L, norm);
    for (int64_t j = 0; j < n; j++) {
        if (norm[j] == 0) norm[j] = 1;
        for (int64_t i = 0; i < L->rows; i++) dense[i + j * L->rows] /= norm[j];
    }
    lw_status status = lw_dense_qr_make(L->rows, n, dense, -1, &qr, error);
    if (status == LW_OK) {
        w->t = qr.rank;
        w->q = n - w->t;
        *z1 = LW_NEW_ZEROS(double, n * w->t);
        unit = LW_NEW_ZEROS(double, w->t * w->t);
        overlap = LW_NEW_ARRAY(double, w->q * w->t);
        if (!*z1 || !unit || !overlap) status = short_of_memory(error, 2 * n * n);
    }
    if (status == LW_OK) status = lw_dense_qr_null_space(&qr, &w->null, error);
    if (status == LW_OK) {
        for (int64_t k = 0; k < w->t; k++) unit[k + k * w->t] = 1;
        lw_dense_qr_solve_r(&qr, 0, w->t, unit, w->t);
        for (int64_t k = 0; k < w->t; k++)
            for (int64_t i = 0; i < w->t; i++) (*z1)[qr.pivot[i] + k * n] = unit[i + k * w->t];
        if (w->q > 0) {
            lw_dense_multiply(1, 0, w->q, w->t, n, 1, w->null, n, *z1, n, 0, overlap, w->q);
            lw_dense_multiply(0, 0, n, w->t, w->q, -1, w->null, n, overlap, w->q, 1, *z1, n);
        }
        for (int64_t i = 0; i < n * w->t; i++) (*z1)[i] /= norm[i % n];
        for (int64_t i = 0; i < n * w->q; i++) w->null[i] /= norm[i % n];
    }
    lw_dense_qr_clear(&qr);
    lw_free(norm);
    lw_free(unit);
    lw_free(overlap);
    return status;
}

/* A Z1 (m x t) with b behind it, both multiplied by Q' of A N. */
static lw_status reduce(lw_dense_sweep *w, const double *z1, double *side, lw_error *error)
{
    const lw_sparse *A = w->system->matrix;
    lw_sparse_apply(A, (int)w->t, z1, side);
    lw_copy(w->m, w->system->b, side + w->m * w->t);
    if (w->q == 0) return LW_OK;
    double *an = LW_NEW_ARRAY(double, w->m * w->q);
    if (!an) return short_of_memory(error, w->m * w->q);
    lw_sparse_apply(A, (int)w->q, w->null, an);
    for (int64_t k = 0; k < w->q;
         k++) { /* unit columns, so that the rank test sees directions and not units */
        double size = lw_norm(w->m, an + k * w->m, NULL);
        if (size == 0) continue;
        lw_scale(w->m, 1 / size, an + k * w->m, NULL);
        lw_scale(w->n, 1 / size, w->null + k * w->n, NULL);
    }
    lw_status status = lw_dense_qr_make(w->m, w->q, an, -1, &w->an, error);
    if (status == LW_OK && w->an.rank < w->q)
        status = lw_fail(error, LW_UNSOLVABLE,
                         "the penalty leaves a direction alone that the observations do not determine");
    if (status == LW_OK) status = lw_dense_qr_apply_qt(&w->an, w->t + 1, side, error);
    return status;
}

/* beta = U'b and the rest b - U beta, the rest made orthogonal twice. */
static void project_side(lw_dense_sweep *w, const double *b)
{
    int64_t rows = w->m - w->q;
    double *again = w->beta; /* filled in the first pass, corrected in the second */
    lw_copy(rows, b, w->rest);
    memset(w->beta, 0, (size_t)w->p * 8);
    for (int pass = 0; pass < 2; pass++) {
        for (int64_t i = 0; i < w->p; i++) {
            double part = lw_dot(rows, w->u + i * rows, w->rest, NULL);
            again[i] += part;
            lw_add_scaled(rows, -part, w->u + i * rows, w->rest, NULL);
        }
    }
}

static lw_status decompose(lw_dense_sweep *w, const double *z1, const double *side, lw_error *error)
{
    int64_t rows = w->m - w->q, p = rows < w->t ? rows : w->t;
    if (p < 0) p = 0;
    w->p = p;
    double *abar = LW_NEW_ARRAY(double, rows * w->t), *vt = LW_NEW_ARRAY(double, p * w->t);
    w->s = LW_NEW_ARRAY(double, p);
    w->beta = LW_NEW_ARRAY(double, p);
    w->u = LW_NEW_ARRAY(double, rows *p);
    w->rest = LW_NEW_ARRAY(double, rows);
    w->z1v = LW_NEW_ARRAY(double, w->n *p);
    w->top_b = LW_NEW_ARRAY(double, w->q);
    w->top_v = LW_NEW_ARRAY(double, w->q *p);
    lw_status status = LW_OK;
    if (!abar || !vt || !w->s || !w->beta || !w->u || !w->rest || !w->z1v || !w->top_b || !w->top_v)
        status = short_of_memory(error, rows * w->t * 3);
    if (status == LW_OK) {
        for (int64_t k = 0; k < w->t; k++) lw_copy(rows, side + k * w->m + w->q, abar + k * rows);
        if (p > 0) status = lw_dense_svd(rows, w->t, abar, w->u, w->s, vt, error);
    }
    if (status == LW_OK) {
        const double *b = side + w->t * w->m;
        lw_copy(w->q, b, w->top_b);
        project_side(w, b + w->q);
        if (p > 0) lw_dense_multiply(0, 1, w->n, p, w->t, 1, z1, w->n, vt, p, 0, w->z1v, w->n);
        if (p > 0 && w->q > 0)
            lw_dense_multiply(0, 1, w->q, p, w->t, 1, side, w->m, vt, p, 0, w->top_v, w->q);
    }
    lw_free(abar);
    lw_free(vt);
    return status;
}

lw_status lw_dense_sweep_make(const lw_system *system, const lw_sparse *penalty, const lw_watch *watch,
                              lw_dense_sweep **out, lw_error *error)
{
    *out = NULL;
    int64_t m = system->rows, n = system->columns, room = lw_bytes(4 * m + 4 * n + penalty->rows, n);
    lw_status status = lw_watch_budget(watch, lw_bytes(room, 8), "the singular value decomposition",
                                       "take --engine cholesky or lsqr", error);
    if (status < 0) return status;
    lw_watch_tick(watch, "decomposing", 0, 0, "");
    lw_dense_sweep *w = LW_NEW(lw_dense_sweep);
    double *z1 = NULL, *side = NULL;
    if (!w) return short_of_memory(error, 1);
    w->system = system;
    w->m = m;
    w->n = n;
    if (system->penalty_diagonal)
        status = split_diagonal(w, system->penalty_diagonal, &z1, error);
    else
        status = split_general(w, penalty, &z1, error);
    if (status == LW_OK && w->q > m)
        status = lw_fail(error, LW_UNSOLVABLE,
                         "the penalty leaves more directions alone than there are observations");
    if (status == LW_OK && !(side = LW_NEW_ARRAY(double, lw_bytes(m, w->t + 1))))
        status = short_of_memory(error, m * n);
    if (status == LW_OK) status = reduce(w, z1, side, error);
    if (status == LW_OK && w->q > 0) lw_standard_warn(lw_watch_log(watch), w->q, w->an.rcond);
    if (status == LW_OK) status = decompose(w, z1, side, error);
    lw_free(z1);
    lw_free(side);
    if (status != LW_OK) {
        lw_dense_sweep_free(w);
        return status;
    }
    *out = w;
    return LW_OK;
}

static void sums_at(const lw_dense_sweep *w, double lambda, lw_point *point)
{
    double misfit = 0, size = 0, slope = 0, trace = (double)w->q, rest = lw_norm(w->m - w->q, w->rest, NULL);
    for (int64_t i = w->p - 1; i >= 0; i--) {
        double s = w->s[i], d = s * s + lambda * lambda, left = lambda * lambda / d * w->beta[i];
        double part = s / d * w->beta[i];
        misfit += left * left;
        size += part * part;
        slope -= 4 * lambda * part * part / d;
        trace += s * s / d;
    }
    point->chi_square = misfit + rest * rest;
    point->misfit = sqrt(point->chi_square);
    point->size = hypot(sqrt(size), w->system->penalty_constant);
    point->size_slope = slope;
    point->effective_parameters = trace;
}

/* The residual over all rows, so that weighted priors can be told from observations: r = Q [0; rest + U
 * left]. */
static lw_status split_priors(const lw_dense_sweep *w, double lambda, double *r, lw_point *point,
                              lw_error *error)
{
    int64_t rows = w->m - w->q;
    memset(r, 0, (size_t)w->q * 8);
    lw_copy(rows, w->rest, r + w->q);
    for (int64_t i = 0; i < w->p; i++)
        lw_add_scaled(rows, lambda * lambda / (w->s[i] * w->s[i] + lambda * lambda) * w->beta[i],
                      w->u + i * rows, r + w->q, NULL);
    lw_status status = w->q > 0 ? lw_dense_qr_apply_q(&w->an, 1, r, error) : LW_OK;
    point->misfit = lw_norm(w->system->observations, r, NULL);
    return status;
}

/* z = Z1 V y + N T^-1 (Q'b - Q'A Z1 V y),  y = s beta / (s^2 + lambda^2). */
static void model_at(const lw_dense_sweep *w, double lambda, double *y, double *top, double *z)
{
    for (int64_t i = 0; i < w->p; i++) y[i] = w->s[i] / (w->s[i] * w->s[i] + lambda * lambda) * w->beta[i];
    memset(z, 0, (size_t)w->n * 8);
    for (int64_t i = 0; i < w->p; i++) lw_add_scaled(w->n, y[i], w->z1v + i * w->n, z, NULL);
    if (w->q == 0) return;
    lw_copy(w->q, w->top_b, top);
    for (int64_t i = 0; i < w->p; i++) lw_add_scaled(w->q, -y[i], w->top_v + i * w->q, top, NULL);
    lw_dense_qr_solve_r(&w->an, 0, 1, top, w->q);
    for (int64_t k = 0; k < w->q; k++) lw_add_scaled(w->n, top[k], w->null + w->an.pivot[k] * w->n, z, NULL);
}

lw_status lw_dense_sweep_evaluate(const lw_dense_sweep *w, int count, const double *lambda, lw_point *point,
                                  double *models, lw_error *error)
{
    double *r = LW_NEW_ARRAY(double, w->m), *y = LW_NEW_ARRAY(double, w->p),
           *top = LW_NEW_ARRAY(double, w->q);
    lw_status status = r && y && top ? LW_OK : short_of_memory(error, w->m + w->p);
    for (int k = 0; status == LW_OK && k < count; k++) {
        point[k] = (lw_point){.lambda = lambda[k]};
        sums_at(w, lambda[k], point + k);
        if (w->system->priors > 0) status = split_priors(w, lambda[k], r, point + k, error);
        if (models) model_at(w, lambda[k], y, top, models + k * w->n);
    }
    lw_free(r);
    lw_free(y);
    lw_free(top);
    return status;
}
