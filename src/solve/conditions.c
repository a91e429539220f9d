/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "solve/conditions.h"

#include "core/memory.h"
#include "matrix/dense.h"
#include "matrix/vector.h"
#include "solve/direct.h"

#include <math.h>
#include <string.h>

#define BATCH 64            /* right-hand sides solved together */
#define CURE_TOLERANCE 1e-8 /* of the rank of C G */

/* g (columns x k) <- -C'[:, first .. first+k-1] */
static void minus_conditions(const lw_sparse *C, int64_t first, int64_t k, double *g)
{
    memset(g, 0, (size_t)(C->columns * k) * 8);
    for (int64_t j = 0; j < C->columns; j++)
        for (int64_t e = C->start[j]; e < C->start[j + 1]; e++)
            if (C->index[e] >= first && C->index[e] < first + k)
                g[(C->index[e] - first) * C->columns + j] = -C->value[e];
}

/* C G and the factor of K = (C G)' S^-1 C G, where conditions determine null vectors of the factor. */
static lw_status make_border(lw_direct *direct, lw_error *error)
{
    lw_conditions *own = &direct->conditions;
    int64_t c = own->count, d = direct->datum.space.defect - lw_direct_defect(direct), defect;
    if (d == 0) return LW_OK;
    double *half = LW_NEW_ARRAY(double, c *d);
    own->cg = LW_NEW_ARRAY(double, c *d);
    own->k = LW_NEW_ARRAY(double, d *d);
    lw_status status = LW_OK;
    if (!half || !own->cg || !own->k)
        status = lw_fail_memory(error, "the conditions", (size_t)(2 * c * d) * 8);
    if (status == LW_OK) {
        lw_sparse_apply(direct->base.system->condition, (int)d, direct->datum.space.basis, own->cg);
        lw_copy(c * d, own->cg, half);
        lw_dense_triangle_solve(c, own->schur, 1, 1, d, half, c);
        lw_dense_multiply(1, 0, d, d, c, 1, half, c, half, c, 0, own->k, d);
        status = lw_dense_cholesky(d, own->k, &defect, error);
        own->border = d;
    }
    lw_free(half);
    return status;
}

lw_status lw_conditions_cure(lw_direct *direct, int *cured, lw_error *error)
{
    int64_t c = direct->base.system->conditions, n = direct->base.system->columns,
            d = direct->datum.space.defect;
    lw_dense_qr qr = {0};
    *cured = 0;
    double *cg = LW_NEW_ARRAY(double, c *d);
    if (!cg) return lw_fail_memory(error, "the conditions", (size_t)(c * d) * 8);
    lw_sparse_apply(direct->base.system->condition, (int)d, direct->datum.space.basis, cg);
    for (int64_t k = 0; k < d; k++) { /* |C| |G| is the size to compare with */
        double size = lw_norm_max(n, direct->datum.space.basis + k * n);
        lw_scale(c, 1 / size, cg + k * c, NULL);
    }
    double largest = lw_norm_max(c * d, cg);
    lw_status status = lw_dense_qr_make(c, d, cg, CURE_TOLERANCE, &qr, error);
    *cured = status == LW_OK && largest > CURE_TOLERANCE && qr.rank == d;
    if (status == LW_OK && !*cured && largest > CURE_TOLERANCE && direct->options.datum_free)
        status = lw_fail(
            error, LW_UNSOLVABLE,
            "the conditions determine %lld of %lld datum defects, --datum free would have to determine the "
            "others: add conditions or take out those that move the whole net",
            (long long)qr.rank, (long long)d);
    lw_dense_qr_clear(&qr);
    return status;
}

lw_status lw_conditions_make(lw_direct *direct, lw_error *error)
{
    const lw_sparse *C = direct->base.system->condition;
    int64_t c = C->rows, n = C->columns, batch = c < BATCH ? c : BATCH, defect = -1;
    lw_status status =
        lw_watch_budget(&direct->watch, lw_bytes(c * c + 2 * n * batch, 8), "the conditions' matrix",
                        "use fewer conditions or more memory", error);
    if (status < 0) return status;
    double *S = LW_NEW_ARRAY(double, c *c), *g = LW_NEW_ARRAY(double, n *batch),
           *z = LW_NEW_ARRAY(double, n *batch);
    if (!S || !g || !z) status = lw_fail_memory(error, "the conditions", (size_t)(c * c + 2 * n * batch) * 8);
    for (int64_t first = 0; status == LW_OK && first < c; first += batch) {
        int64_t k = c - first < batch ? c - first : batch;
        minus_conditions(C, first, k, g);
        status = direct->factor->solve(direct, k, NULL, g, NULL, z, error);
        if (status == LW_OK) lw_sparse_apply(C, (int)k, z, S + first * c);
    }
    for (int64_t j = 0; status == LW_OK && j < c; j++)
        for (int64_t i = 0; i < j; i++) S[i + j * c] = S[j + i * c] = 0.5 * (S[i + j * c] + S[j + i * c]);
    if (status == LW_OK) status = lw_dense_cholesky(c, S, &defect, error);
    lw_free(g);
    lw_free(z);
    if (status == LW_UNSOLVABLE && defect >= 0)
        lw_fail(error, LW_UNSOLVABLE,
                "condition '%s' and the equations leave no freedom to fulfil it: it contradicts the others",
                lw_ids_name(direct->base.system->problem->condition_names, defect));
    if (status != LW_OK) {
        lw_free(S);
        return status;
    }
    direct->conditions = (lw_conditions){.count = c, .schur = S};
    return make_border(direct, error);
}

/* w = S^-1 (h - C z0 - CG a) with a = K^-1 ((CG)' S^-1 (h - C z0) - G'g), for one right-hand side; w in: h -
 * C z0; t: scratch, count. */
static void solve_bordered(const lw_direct *direct, const double *g, double *w, double *a, double *t)
{
    const lw_conditions *own = &direct->conditions;
    int64_t c = own->count, d = own->border, n = direct->base.system->columns;
    lw_dense_triangle_solve(c, own->schur, 1, 1, 1, w, c); /* R^-T (h - C z0) */
    if (d > 0) {
        for (int64_t k = 0; k < d; k++) {
            lw_copy(c, own->cg + k * c, t);
            lw_dense_triangle_solve(c, own->schur, 1, 1, 1, t, c);
            a[k] = lw_dot(c, t, w, NULL) - (g ? lw_dot(n, direct->datum.space.basis + k * n, g, NULL) : 0);
        }
        lw_dense_cholesky_solve(d, own->k, 1, a);
        for (int64_t k = 0; k < d; k++) {
            lw_copy(c, own->cg + k * c, t);
            lw_dense_triangle_solve(c, own->schur, 1, 1, 1, t, c);
            lw_add_scaled(c, -a[k], t, w, NULL);
        }
    }
    lw_dense_triangle_solve(c, own->schur, 1, 0, 1, w, c);
}

lw_status lw_conditions_apply(lw_direct *direct, int64_t k, const double *g, const double *h, double *r,
                              double *z, double *u, lw_error *error)
{
    const lw_sparse *C = direct->base.system->condition;
    int64_t c = C->rows, n = C->columns, stacked = lw_direct_stacked(direct, direct->base_lambda);
    int64_t d = direct->conditions.border;
    double *w = LW_NEW_ARRAY(double, c *k), *side = LW_NEW_ARRAY(double, n *k),
           *dz = LW_NEW_ARRAY(double, n *k);
    double *dr = r ? LW_NEW_ARRAY(double, stacked *k) : NULL, *a = LW_NEW_ARRAY(double, d *k + c);
    lw_status status = LW_OK;
    if (!w || !side || !dz || !a || (r && !dr))
        status = lw_fail_memory(error, "the conditions", (size_t)((c + 2 * n) * k) * 8);
    if (status == LW_OK) {
        lw_sparse_apply(C, (int)k, z, w);
        for (int64_t i = 0; i < c * k; i++) w[i] = (h ? h[i] : 0.0) - w[i];
        for (int64_t v = 0; v < k; v++)
            solve_bordered(direct, g ? g + v * n : NULL, w + v * c, a + v * d, a + d * k);
        lw_sparse_apply_transposed(C, (int)k, w, side);
        for (int64_t i = 0; i < n * k; i++) side[i] = -side[i];
        status = direct->factor->solve(direct, k, NULL, side, dr, dz, error);
    }
    if (status == LW_OK) {
        lw_add_scaled(n * k, 1, dz, z, NULL);
        if (r) lw_add_scaled(stacked * k, 1, dr, r, NULL);
        if (u) lw_copy(c * k, w, u);
        for (int64_t v = 0; v < k; v++)
            for (int64_t i = 0; i < d; i++)
                lw_add_scaled(n, a[v * d + i], direct->datum.space.basis + i * n, z + v * n, NULL);
    }
    lw_free(w);
    lw_free(side);
    lw_free(dz);
    lw_free(dr);
    lw_free(a);
    return status;
}

/* X = (G - Z S^-1 CG) R_K^-1 = (G - Y R_S^-T CG) R_K^-1. */
static lw_status border_correction(const lw_direct *direct, const double *y, double *x, lw_error *error)
{
    const lw_conditions *own = &direct->conditions;
    int64_t c = own->count, d = own->border, n = direct->base.system->columns;
    double *half = LW_NEW_ARRAY(double, c *d), *line = LW_NEW_ARRAY(double, d);
    if (!half || !line) {
        lw_free(half);
        lw_free(line);
        return lw_fail_memory(error, "the conditions", (size_t)(c * d) * 8);
    }
    lw_copy(c * d, own->cg, half);
    lw_dense_triangle_solve(c, own->schur, 1, 1, d, half, c);
    lw_copy(n * d, direct->datum.space.basis, x);
    lw_dense_multiply(0, 0, n, d, c, -1, y, n, half, c, 1, x, n);
    for (int64_t i = 0; i < n; i++) {
        for (int64_t k = 0; k < d; k++) line[k] = x[i + k * n];
        lw_dense_triangle_solve(d, own->k, 1, 1, 1, line, d);
        for (int64_t k = 0; k < d; k++) x[i + k * n] = line[k];
    }
    lw_free(half);
    lw_free(line);
    return LW_OK;
}

lw_status lw_conditions_correction(lw_direct *direct, double *yx, lw_error *error)
{
    const lw_sparse *C = direct->base.system->condition;
    int64_t c = C->rows, n = C->columns;
    double *g = LW_NEW_ARRAY(double, n *BATCH), *t = LW_NEW_ARRAY(double, c), *y = yx;
    lw_status status = g && t ? LW_OK : lw_fail_memory(error, "the conditions", (size_t)(n * BATCH) * 8);
    for (int64_t first = 0; status == LW_OK && first < c; first += BATCH) {
        int64_t k = c - first < BATCH ? c - first : BATCH;
        minus_conditions(C, first, k, g);
        status = direct->factor->solve(direct, k, NULL, g, NULL, y + first * n, error);
    }
    for (int64_t i = 0; status == LW_OK && i < n; i++) { /* row i: R_S' t = Z_i' */
        for (int64_t k = 0; k < c; k++) t[k] = y[i + k * n];
        lw_dense_triangle_solve(c, direct->conditions.schur, 1, 1, 1, t, c);
        for (int64_t k = 0; k < c; k++) y[i + k * n] = t[k];
    }
    if (status == LW_OK && direct->conditions.border > 0)
        status = border_correction(direct, y, yx + n * c, error);
    lw_free(g);
    lw_free(t);
    return status;
}

void lw_conditions_clear(lw_conditions *conditions)
{
    lw_free(conditions->schur);
    lw_free(conditions->cg);
    lw_free(conditions->k);
    *conditions = (lw_conditions){0};
}
