/* SPDX-License-Identifier: GPL-3.0-or-later */
/* With M E = Q R:  R'r1 = E'g,  z = E R^-1 (f1 - r1),  r = Q [r1; f2],  [f1; f2] = Q'f.
 * Source: Bjorck, BIT 7:257-278, 1967; Davis, ACM TOMS 38(1):8, 2011. */
#include "solve/qr.h"

#include "core/memory.h"
#include "matrix/dense.h"
#include "matrix/suitesparse.h"
#include "matrix/vector.h"
#include "solve/direct.h"

#include <float.h>
#include <string.h>

#define MOST_TOLD 64       /* null vectors that an explanation is made of */
#define MOST_INVERSE 20000 /* columns up to which the inverse can be asked for */
#define BATCH 64

typedef struct qr_state {
    lw_sparse_qr *qr;
    double *inverse;
} qr_state;

static lw_status factorize(lw_direct *self, double lambda, const lw_watch *watch, lw_error *error)
{
    qr_state *state = self->state;
    lw_sparse *M = NULL;
    lw_sparse_qr_free(state->qr);
    state->qr = NULL;
    lw_status status = lw_direct_stack(self, lambda, &M, error);
    if (status == LW_OK) status = lw_sparse_qr_make(M, -1, 1, watch, &state->qr, error);
    lw_sparse_free(M);
    if (status != LW_OK) return status;
    if (lw_sparse_qr_rank(state->qr) < self->base.system->columns)
        return lw_fail(error, LW_UNSOLVABLE, "the equations do not determine all parameters");
    return LW_OK;
}

/* Gram-Schmidt, twice, over k vectors of length n. */
static void orthonormalize(int64_t n, int64_t k, double *x)
{
    for (int64_t a = 0; a < k; a++) {
        for (int pass = 0; pass < 2; pass++)
            for (int64_t b = 0; b < a; b++)
                lw_add_scaled(n, -lw_dot(n, x + b * n, x + a * n, NULL), x + b * n, x + a * n, NULL);
        double size = lw_norm(n, x + a * n, NULL);
        lw_scale(n, size > 0 ? 1 / size : 0, x + a * n, NULL);
    }
}

/* For a dependent column j: G = e_j - E R11^-1 Q' M e_j. */
static lw_status null_vectors(lw_direct *self, double lambda, int expand, const lw_watch *watch,
                              double **basis, int64_t *vectors, int64_t *defect, lw_error *error)
{
    qr_state *state = self->state;
    int64_t n = self->base.system->columns, rows = lw_direct_stacked(self, lambda),
            rank = lw_sparse_qr_rank(state->qr);
    const int64_t *pivot = lw_sparse_qr_pivot(state->qr);
    *defect = n - rank;
    *vectors = expand || *defect < MOST_TOLD ? *defect : MOST_TOLD;
    *basis = NULL;
    lw_status status = lw_watch_budget(watch, lw_bytes(n * *vectors, 8), "the null space",
                                       "hold parameters instead (parameters.csv, column fixed)", error);
    if (status < 0) return status;
    double *c = LW_NEW_ARRAY(double, rows), *G = LW_NEW_ZEROS(double, n **vectors);
    status = c && G ? LW_OK : lw_fail_memory(error, "the null space", (size_t)(n * *vectors) * 8);
    for (int64_t k = 0; status == LW_OK && k < *vectors; k++) {
        double *g = G + k * n;
        g[pivot[rank + k]] = 1;
        lw_direct_apply(self, lambda, 1, g, c);
        status = lw_sparse_qr_apply_qt(state->qr, 1, c, error);
        if (status == LW_OK) status = lw_sparse_qr_solve_r(state->qr, 1, c, rows, g, error);
        for (int64_t j = 0; status == LW_OK && j < n; j++) g[j] = -g[j];
        g[pivot[rank + k]] += 1;
    }
    lw_free(c);
    if (status != LW_OK) {
        lw_free(G);
        return status;
    }
    orthonormalize(n, *vectors, G);
    *basis = G;
    return LW_OK;
}

static lw_status solve(lw_direct *self, int64_t k, const double *f, const double *g, double *r, double *z,
                       lw_error *error)
{
    qr_state *state = self->state;
    int64_t n = self->base.system->columns, rows = lw_direct_stacked(self, self->base_lambda);
    double *c = LW_NEW_ZEROS(double, rows *k), *r1 = g ? LW_NEW_ZEROS(double, rows *k) : NULL;
    lw_status status =
        c && (r1 || !g) ? LW_OK : lw_fail_memory(error, "right-hand sides", (size_t)(rows * k) * 8);
    if (status == LW_OK && f) {
        lw_copy(rows * k, f, c);
        status = lw_sparse_qr_apply_qt(state->qr, k, c, error);
    }
    if (status == LW_OK && g) status = lw_sparse_qr_solve_rt(state->qr, k, g, r1, rows, error);
    for (int64_t v = 0; status == LW_OK && v < k; v++) {
        for (int64_t i = 0; i < n; i++) {
            double adjoint = g ? r1[i + v * rows] : 0, top = c[i + v * rows] - adjoint;
            if (r) {
                r[i + v * rows] = adjoint;
            }
            c[i + v * rows] = top;
        }
        if (r) lw_copy(rows - n, c + v * rows + n, r + v * rows + n);
    }
    if (status == LW_OK) status = lw_sparse_qr_solve_r(state->qr, k, c, rows, z, error);
    if (status == LW_OK && r) status = lw_sparse_qr_apply_q(state->qr, k, r, error);
    lw_free(c);
    lw_free(r1);
    return status;
}

/* (M'M)^-1 = E R^-1 R^-T E', a batch of columns at a time. */
static lw_status inverse(lw_direct *self, int hand_over, lw_inverse_source *out, lw_error *error)
{
    qr_state *state = self->state;
    int64_t n = self->base.system->columns;
    (void)hand_over;
    lw_status status = lw_watch_budget(&self->watch, lw_bytes(n, lw_bytes(n, 8)),
                                       "the inverse from the QR engine", "take --engine cholesky", error);
    if (status < 0) return status;
    if (n > MOST_INVERSE)
        return lw_fail(error, LW_NO_MEMORY,
                       "the QR engine gives standard deviations of up to %d parameters; take "
                       "--engine cholesky",
                       MOST_INVERSE);
    lw_free(state->inverse);
    state->inverse = LW_NEW_ZEROS(double, n *n);
    double *g = LW_NEW_ARRAY(double, n *BATCH);
    if (!state->inverse || !g) status = lw_fail_memory(error, "the inverse", (size_t)(n * n) * 8);
    for (int64_t first = 0; status == LW_OK && first < n; first += BATCH) {
        int64_t k = n - first < BATCH ? n - first : BATCH;
        memset(g, 0, (size_t)(n * k) * 8);
        for (int64_t v = 0; v < k; v++) g[first + v + v * n] = -1;
        status = solve(self, k, NULL, g, NULL, state->inverse + first * n, error);
    }
    for (int64_t j = 0; status == LW_OK && j < n; j++)
        for (int64_t i = 0; i < j; i++)
            state->inverse[i + j * n] = state->inverse[j + i * n] =
                0.5 * (state->inverse[i + j * n] + state->inverse[j + i * n]);
    lw_free(g);
    out->dense = state->inverse;
    out->error = fmin(1, sqrt((double)n) * 4 * DBL_EPSILON / lw_direct_condition(self));
    return status;
}

static void free_state(lw_direct *self)
{
    qr_state *state = self->state;
    if (!state) return;
    lw_sparse_qr_free(state->qr);
    lw_free(state->inverse);
    lw_free(state);
}

static const lw_factor_methods qr_factor = {factorize, null_vectors,        solve,
                                            inverse,   lw_direct_condition, free_state};

static const lw_decomposition_methods qr_methods = {
    .engine = "qr",
    .evaluate = lw_direct_evaluate,
    .estimate = lw_direct_estimate,
    .solve_many = lw_direct_solve_many,
    .inverse_entries = lw_direct_inverse,
    .null_space = lw_direct_null_space,
    .rank = lw_direct_rank,
    .rcond = lw_direct_rcond,
    .free_self = lw_direct_free,
};

static lw_status decompose(lw_system *system, double lambda, const lw_solve_options *options,
                           const lw_watch *watch, lw_decomposition **out, lw_error *error)
{
    lw_direct *self = NULL;
    *out = NULL;
    qr_state *state = LW_NEW(qr_state);
    if (!state) return lw_fail_memory(error, "the decomposition", sizeof *state);
    lw_status status = lw_direct_new(system, &qr_methods, &qr_factor, state, options, watch, &self, error);
    if (status < 0) return status;
    status = lw_direct_prepare(self, lambda, watch, error);
    if (status != LW_OK) {
        lw_direct_free(&self->base);
        if (status > 0 && status != LW_INTERRUPTED)
            status = lw_fail(error, LW_UNSOLVABLE,
                             "the rank of the equations is not clear: some parameters are hardly determined");
        return status;
    }
    *out = &self->base;
    return LW_OK;
}

const lw_engine lw_engine_qr = {"qr", "sparse QR, refined; for equations too ill-conditioned for Cholesky",
                                LW_DIRECT | LW_RANK | LW_REFINED | LW_CONDITIONS | LW_INVERSE | LW_FREE_DATUM,
                                decompose};
