/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The vertex of an l1 fit. B: as many rows as columns, met exactly; with s_i the signs of the other
 * residuals,
 *
 *     A_B' y = -sum_{i not in B} s_i a_i,   optimal when |y_j| <= 1 for all j in B
 *
 * otherwise row j with the largest |y_j| leaves: z moves along d, A_B d = sign(y_j) e_j, down to the
 * weighted median of the places where other residuals change sign; the row that stands there enters.
 * Source: Barrodale & Roberts, SIAM J. Numer. Anal. 10:839-848, 1973. */
#include "core/memory.h"
#include "matrix/dense.h"
#include "solve/robust.h"

#include <float.h>
#include <math.h>
#include <stdlib.h>
#include <string.h>

typedef struct crossing {
    double at, slope; /* step to the change of sign; half the jump of the derivative there */
    int64_t row;
} crossing;

typedef struct vertex {
    const lw_sparse *A; /* rows x n */
    const double *b, *factor;
    int64_t n, rows;
    int64_t *basis;      /* n rows */
    bool *in;            /* rows */
    double *r, *change;  /* rows: residuals, and their change along d */
    double *z, *g, *d;   /* n */
    lw_dense_qr qr;      /* of A_B' : n x n */
    crossing *crossings; /* rows */
} vertex;

/* A_B x = c for c by place in the basis: A_B' P = Q R, so A_B = P R'Q' . */
static lw_status solve_basis(const vertex *v, double *c, lw_error *error)
{
    double *t = LW_NEW_ARRAY(double, v->n);
    if (!t) return lw_fail_memory(error, "the l1 vertex", (size_t)v->n * 8);
    for (int64_t k = 0; k < v->n; k++) t[k] = c[v->qr.pivot[k]];
    lw_dense_qr_solve_r(&v->qr, 1, 1, t, v->n);
    memcpy(c, t, (size_t)v->n * sizeof *c);
    lw_free(t);
    return lw_dense_qr_apply_q(&v->qr, 1, c, error);
}

/* A_B' y = c, y by place in the basis. */
static lw_status solve_dual(const vertex *v, double *c, lw_error *error)
{
    lw_status status = lw_dense_qr_apply_qt(&v->qr, 1, c, error);
    if (status != LW_OK) return status;
    lw_dense_qr_solve_r(&v->qr, 0, 1, c, v->n);
    double *y = LW_NEW_ARRAY(double, v->n);
    if (!y) return lw_fail_memory(error, "the l1 vertex", (size_t)v->n * 8);
    for (int64_t k = 0; k < v->n; k++) y[v->qr.pivot[k]] = c[k];
    memcpy(c, y, (size_t)v->n * sizeof *c);
    lw_free(y);
    return LW_OK;
}

/* QR of the rows listed, weighted, as columns: n x count. place: rows, -1 elsewhere. */
static lw_status factor_rows(const vertex *v, int64_t count, const int64_t *list, const double *weight,
                             lw_dense_qr *out, lw_error *error)
{
    int64_t *place = LW_NEW_ARRAY(int64_t, v->rows);
    double *D = LW_NEW_ZEROS(double, v->n *count);
    if (!place || !D) {
        lw_free(place);
        lw_free(D);
        return lw_fail_memory(error, "the l1 vertex", (size_t)(v->n * count) * 8);
    }
    for (int64_t i = 0; i < v->rows; i++) place[i] = -1;
    for (int64_t k = 0; k < count; k++) place[list[k]] = k;
    for (int64_t j = 0; j < v->n; j++)
        for (int64_t e = v->A->start[j]; e < v->A->start[j + 1]; e++) {
            int64_t k = place[v->A->index[e]];
            if (k >= 0) D[j + k * v->n] = v->A->value[e] * (weight ? weight[k] : 1);
        }
    lw_free(place);
    return lw_dense_qr_make(v->n, count, D, -1, out, error);
}

/* First basis: independent rows by pivoting, those with small residuals preferred. */
static lw_status first_basis(vertex *v, const double *r, lw_error *error)
{
    int64_t count = 0, *list = LW_NEW_ARRAY(int64_t, v->rows);
    double *weight = LW_NEW_ARRAY(double, v->rows), largest = 0;
    lw_dense_qr qr = {0};
    lw_status status = list && weight ? LW_OK : lw_fail_memory(error, "the l1 vertex", (size_t)v->rows * 16);
    for (int64_t i = 0; i < v->rows; i++) largest = fmax(largest, fabs(r[i]));
    for (int64_t i = 0; i < v->rows && status == LW_OK; i++) {
        if (v->factor && v->factor[i] == 0) continue;
        list[count] = i;
        weight[count++] = 1 / (fabs(r[i]) + 1e-9 * largest + DBL_MIN);
    }
    if (status == LW_OK) status = factor_rows(v, count, list, weight, &qr, error);
    if (status == LW_OK && qr.rank < v->n) status = LW_QUALIFIED;
    for (int64_t k = 0; k < v->n && status == LW_OK; k++) {
        v->basis[k] = list[qr.pivot[k]];
        v->in[v->basis[k]] = true;
    }
    lw_dense_qr_clear(&qr);
    lw_free(list);
    lw_free(weight);
    return status;
}

/* z from A_B z = b_B, all residuals, g = sum of signs, y in g. */
static lw_status evaluate(vertex *v, lw_error *error)
{
    double size = 0;
    lw_dense_qr_clear(&v->qr);
    lw_status status = factor_rows(v, v->n, v->basis, NULL, &v->qr, error);
    if (status != LW_OK) return status;
    if (v->qr.rank < v->n) return LW_QUALIFIED;
    for (int64_t k = 0; k < v->n; k++) v->z[k] = v->b[v->basis[k]];
    status = solve_basis(v, v->z, error);
    if (status != LW_OK) return status;
    lw_sparse_apply(v->A, 1, v->z, v->r);
    for (int64_t i = 0; i < v->rows; i++) size = fmax(size, fabs(v->b[i]));
    for (int64_t i = 0; i < v->rows; i++) {
        v->r[i] -= v->b[i];
        if (v->in[i] || fabs(v->r[i]) <= 1e-13 * size || (v->factor && v->factor[i] == 0)) v->r[i] = 0;
        v->change[i] = v->r[i] > 0 ? -1 : (v->r[i] < 0 ? 1 : 0);
    }
    lw_sparse_apply_transposed(v->A, 1, v->change, v->g);
    return solve_dual(v, v->g, error);
}

static int by_step(const void *a, const void *b)
{
    const crossing *p = a, *q = b;
    if (p->at != q->at) return p->at < q->at ? -1 : 1;
    return p->row < q->row ? -1 : p->row > q->row;
}

/* Row that enters when place j leaves: the weighted median along the line; -1 none. */
static int64_t entering(vertex *v, double slope)
{
    int64_t count = 0;
    for (int64_t i = 0; i < v->rows; i++) {
        if (v->in[i] || v->change[i] == 0 || (v->factor && v->factor[i] == 0)) continue;
        double at = -v->r[i] / v->change[i];
        if (at < 0 || (at == 0 && v->r[i] != 0)) continue;
        v->crossings[count++] = (crossing){at, fabs(v->change[i]) * (v->r[i] == 0 ? 1 : 2), i};
    }
    qsort(v->crossings, (size_t)count, sizeof *v->crossings, by_step);
    for (int64_t k = 0; k < count; k++) {
        slope += v->crossings[k].slope;
        if (slope >= 0) return v->crossings[k].row;
    }
    return -1;
}

/* One exchange. *done: optimal. */
static lw_status exchange(vertex *v, bool *done, lw_error *error)
{
    int64_t leaving = 0;
    lw_status status = evaluate(v, error);
    if (status != LW_OK) return status;
    for (int64_t k = 1; k < v->n; k++)
        if (fabs(v->g[k]) > fabs(v->g[leaving])) leaving = k;
    *done = fabs(v->g[leaving]) <= 1 + 1e-10;
    if (*done) return LW_OK;
    memset(v->d, 0, (size_t)v->n * sizeof *v->d);
    v->d[leaving] = copysign(1, v->g[leaving]);
    status = solve_basis(v, v->d, error);
    if (status != LW_OK) return status;
    lw_sparse_apply(v->A, 1, v->d, v->change);
    int64_t row = entering(v, 1 - fabs(v->g[leaving]));
    if (row < 0) return LW_QUALIFIED;
    v->in[v->basis[leaving]] = false;
    v->in[row] = true;
    v->basis[leaving] = row;
    return LW_OK;
}

lw_status lw_robust_vertex(const lw_system *system, const double *r, bool *in, lw_error *error)
{
    int64_t n = system->columns, rows = system->rows;
    vertex v = {
        .A = system->matrix, .b = system->b, .factor = system->row_factor, .n = n, .rows = rows, .in = in};
    memset(in, 0, (size_t)rows * sizeof *in);
    v.basis = LW_NEW_ARRAY(int64_t, n);
    v.r = LW_NEW_ARRAY(double, 2 * rows);
    v.z = LW_NEW_ARRAY(double, 3 * n);
    v.crossings = LW_NEW_ARRAY(crossing, rows);
    lw_status status = LW_OK;
    if (!v.basis || !v.r || !v.z || !v.crossings) {
        status = lw_fail_memory(error, "the l1 vertex", (size_t)rows * 40);
    } else {
        v.change = v.r + rows;
        v.g = v.z + n;
        v.d = v.g + n;
        status = first_basis(&v, r, error);
    }
    bool done = false;
    for (int64_t step = 0; step < 20 * n + 100 && !done && status == LW_OK; step++)
        status = exchange(&v, &done, error);
    if (status == LW_OK && !done) status = LW_QUALIFIED;
    lw_dense_qr_clear(&v.qr);
    lw_free(v.basis);
    lw_free(v.r);
    lw_free(v.z);
    lw_free(v.crossings);
    return status;
}
