/* SPDX-License-Identifier: GPL-3.0-or-later */
/* With M P = Q R:  [I M; M' 0][r; z] = [f; g]  is  R'r1 = P'g,  z = P R^-1 (f1 - r1),  r = Q [r1; f2],  [f1;
 * f2] = Q'f. Source: Bjorck, BIT 7:257-278, 1967; rank by column pivoting: Businger & Golub, Numerische
 * Mathematik 7:269-276, 1965. */
#include "solve/dense.h"

#include "core/memory.h"
#include "matrix/dense.h"
#include "matrix/vector.h"
#include "solve/dense_sweep.h"
#include "solve/direct.h"

#include <float.h>
#include <string.h>

#define SWEEP_FROM 4 /* dampings from which a singular value decomposition pays */

typedef struct dense_state {
    lw_dense_qr qr;
    int made;
    double *inverse;
    lw_dense_sweep *sweep;
} dense_state;

static lw_status factorize(lw_direct *self, double lambda, const lw_watch *watch, lw_error *error)
{
    dense_state *state = self->state;
    lw_sparse *M = NULL;
    int64_t rows = lw_direct_stacked(self, lambda), n = self->base.system->columns;
    if (state->made) lw_dense_qr_clear(&state->qr);
    state->made = 0;
    lw_status status = lw_watch_budget(watch, lw_bytes(2 * rows, lw_bytes(n, 8)), "the dense matrix",
                                       "take --engine cholesky or lsqr", error);
    if (status == LW_OK) status = lw_direct_stack(self, lambda, &M, error);
    if (status < 0) return status;
    double *dense = LW_NEW_ARRAY(double, lw_bytes(rows, n));
    if (dense)
        lw_sparse_to_dense(M, dense);
    else
        status = lw_fail_memory(error, "the dense matrix", (size_t)lw_bytes(rows, lw_bytes(n, 8)));
    lw_sparse_free(M);
    lw_watch_tick(watch, "factorizing", 0, 0, "");
    if (status == LW_OK) status = lw_dense_qr_make(rows, n, dense, -1, &state->qr, error);
    if (status < 0) return status;
    state->made = 1;
    if (state->qr.rank < n)
        return lw_fail(error, LW_UNSOLVABLE, "the equations do not determine all parameters");
    return LW_OK;
}

static lw_status null_vectors(lw_direct *self, double lambda, int expand, const lw_watch *watch,
                              double **basis, int64_t *vectors, int64_t *defect, lw_error *error)
{
    dense_state *state = self->state;
    (void)lambda, (void)expand, (void)watch;
    *vectors = *defect = state->qr.columns - state->qr.rank;
    return lw_dense_qr_null_space(&state->qr, basis, error);
}

/* top (n x k, leading dimension rows) <- R^-T P' g. */
static void solve_adjoint(const lw_dense_qr *qr, int64_t k, const double *g, double *top, int64_t ld)
{
    for (int64_t v = 0; v < k; v++)
        for (int64_t i = 0; i < qr->columns; i++) top[i + v * ld] = g[qr->pivot[i] + v * qr->columns];
    lw_dense_qr_solve_r(qr, 1, k, top, ld);
}

static void scatter(const lw_dense_qr *qr, int64_t k, const double *top, int64_t ld, double *z)
{
    for (int64_t v = 0; v < k; v++)
        for (int64_t i = 0; i < qr->columns; i++) z[qr->pivot[i] + v * qr->columns] = top[i + v * ld];
}

static lw_status solve(lw_direct *self, int64_t k, const double *f, const double *g, double *r, double *z,
                       lw_error *error)
{
    const lw_dense_qr *qr = &((dense_state *)self->state)->qr;
    int64_t n = qr->columns, m = qr->rows, ld = f || r ? m : n;
    double *c = LW_NEW_ZEROS(double, ld *k), *r1 = g ? LW_NEW_ARRAY(double, n *k) : NULL;
    lw_status status =
        c && (r1 || !g) ? LW_OK : lw_fail_memory(error, "right-hand sides", (size_t)(ld * k) * 8);
    if (status == LW_OK && f) {
        memcpy(c, f, (size_t)(m * k) * 8);
        status = lw_dense_qr_apply_qt(qr, k, c, error);
    }
    if (status == LW_OK) {
        double *top = z; /* f1 - r1 in the order of R, then z */
        if (g) solve_adjoint(qr, k, g, r1, n);
        for (int64_t v = 0; v < k; v++) {
            for (int64_t i = 0; i < n; i++) {
                double adjoint = g ? r1[i + v * n] : 0;
                top[i + v * n] = c[i + v * ld] - adjoint;
                c[i + v * ld] = adjoint;
            }
        }
        lw_dense_qr_solve_r(qr, 0, k, top, n);
        if (r) {
            memcpy(r, c, (size_t)(m * k) * 8);
            status = lw_dense_qr_apply_q(qr, k, r, error);
        }
        for (int64_t v = 0; v < k; v++) { /* out of the order of R */
            memcpy(c, top + v * n, (size_t)n * 8);
            scatter(qr, 1, c, n, z + v * n);
        }
    }
    lw_free(c);
    lw_free(r1);
    return status;
}

/* (M'M)^-1 = P (R'R)^-1 P'. */
static lw_status inverse(lw_direct *self, int hand_over, lw_inverse_source *out, lw_error *error)
{
    dense_state *state = self->state;
    const lw_dense_qr *qr = &state->qr;
    int64_t n = qr->columns;
    (void)hand_over;
    lw_status status = lw_watch_budget(&self->watch, lw_bytes(2 * n, lw_bytes(n, 8)), "the inverse",
                                       "take --engine cholesky", error);
    if (status < 0) return status;
    double *R = LW_NEW_ZEROS(double, n *n);
    lw_free(state->inverse);
    state->inverse = LW_NEW_ARRAY(double, n *n);
    if (!R || !state->inverse) {
        lw_free(R);
        return lw_fail_memory(error, "the inverse", (size_t)(n * n) * 16);
    }
    for (int64_t j = 0; j < n; j++) memcpy(R + j * n, qr->factor + j * qr->rows, (size_t)(j + 1) * 8);
    status = lw_dense_cholesky_invert(n, R, error);
    for (int64_t j = 0; status == LW_OK && j < n; j++)
        for (int64_t i = 0; i < n; i++) state->inverse[qr->pivot[i] + qr->pivot[j] * n] = R[i + j * n];
    lw_free(R);
    out->dense = state->inverse;
    out->error = fmin(1, (double)n * DBL_EPSILON / qr->rcond);
    return status;
}

static double rcond(lw_direct *self)
{
    return ((dense_state *)self->state)->qr.rcond;
}

static void free_state(lw_direct *self)
{
    dense_state *state = self->state;
    if (!state) return;
    if (state->made) lw_dense_qr_clear(&state->qr);
    lw_free(state->inverse);
    lw_dense_sweep_free(state->sweep);
    lw_free(state);
}

static const lw_factor_methods dense_factor = {factorize, null_vectors, solve, inverse, rcond, free_state};

static int all_damped(int count, const double *lambda)
{
    for (int k = 0; k < count; k++)
        if (!(lambda[k] > 0)) return 0;
    return 1;
}

static lw_status evaluate(lw_decomposition *base, int count, const double *lambda, int want_trace,
                          lw_point *point, double *models, const lw_watch *watch, lw_error *error)
{
    lw_direct *self = (lw_direct *)base;
    dense_state *state = self->state;
    int pays = (self->options.sweep || count >= SWEEP_FROM) && base->system->conditions == 0;
    if (!pays || !all_damped(count, lambda))
        return lw_direct_evaluate(base, count, lambda, want_trace, point, models, watch, error);
    lw_status status = LW_OK;
    if (!state->sweep) status = lw_dense_sweep_make(base->system, self->penalty, watch, &state->sweep, error);
    if (status ==
        LW_UNSOLVABLE) /* a direction that neither penalty nor data determine: told, or held, there */
        return lw_direct_evaluate(base, count, lambda, want_trace, point, models, watch, error);
    if (status == LW_OK) status = lw_dense_sweep_evaluate(state->sweep, count, lambda, point, models, error);
    for (int k = 0; status == LW_OK && !want_trace && k < count; k++)
        point[k].effective_parameters = (double)NAN;
    return status;
}

static const lw_decomposition_methods dense_methods = {
    .engine = "dense",
    .evaluate = evaluate,
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
    dense_state *state = LW_NEW(dense_state);
    if (!state) return lw_fail_memory(error, "the decomposition", sizeof *state);
    lw_status status =
        lw_direct_new(system, &dense_methods, &dense_factor, state, options, watch, &self, error);
    if (status < 0) return status;
    self->longest = INT32_MAX;
    status = lw_direct_make_extra(self, error);
    if (status == LW_OK && options && options->sweep && lambda > 0 && system->conditions == 0)
        status = lw_dense_sweep_make(system, self->penalty, watch, &state->sweep, error);
    if (status == LW_UNSOLVABLE || (status == LW_OK && !state->sweep))
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

const lw_engine lw_engine_dense = {
    "dense", "Householder QR with column pivoting; singular values for a sweep; small problems",
    LW_DIRECT | LW_RANK | LW_REFINED | LW_SWEEPS | LW_CONDITIONS | LW_INVERSE | LW_FREE_DATUM, decompose};
