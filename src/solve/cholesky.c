/* SPDX-License-Identifier: GPL-3.0-or-later */
/* With N = M'M:  [I M; M' 0][r; z] = [f; g]  is  z = N^-1 (M'f - g),  r = f - M z. */
#include "solve/cholesky.h"

#include "core/memory.h"
#include "matrix/suitesparse.h"
#include "matrix/vector.h"
#include "solve/direct.h"

#include <float.h>
#include <string.h>

#define SUSPICIOUS 1e-10 /* reciprocal condition estimate of N below which null vectors are looked for */

typedef struct cholesky_state {
    lw_sparse *data;    /* A'A + extra'extra, with every diagonal place */
    lw_sparse *penalty; /* L'L */
    lw_cholesky *factor;
    lw_cholesky_size size;
    int64_t analysed; /* nonzeros of the analysed pattern; 0 none */
    int64_t extra_in; /* number of the extra rows that `data` has */
} cholesky_state;

/* data <- A'A + extra'extra; a Gram matrix has every diagonal place. */
static lw_status make_data(lw_direct *self, lw_error *error)
{
    cholesky_state *state = self->state;
    lw_sparse *gram = NULL, *extra = NULL;
    lw_sparse_free(state->data);
    state->data = NULL;
    lw_status status = lw_sparse_gram(self->base.system->matrix, NULL, &gram, error);
    if (status == LW_OK && self->extra) {
        status = lw_sparse_gram(self->extra, NULL, &extra, error);
        if (status == LW_OK) status = lw_sparse_add(1, gram, 1, extra, &state->data, error);
    } else if (status == LW_OK) {
        state->data = gram;
        gram = NULL;
    }
    lw_sparse_free(extra);
    lw_sparse_free(gram);
    if (status == LW_OK) state->extra_in = self->extra_number;
    return status;
}

/* N at lambda: owned by the caller when *own, else the data part itself. */
static lw_status make_normal(lw_direct *self, double lambda, lw_sparse **out, int *own, lw_error *error)
{
    cholesky_state *state = self->state;
    lw_status status = LW_OK;
    *own = 0;
    *out = NULL;
    if (!state->data || state->extra_in != self->extra_number) status = make_data(self, error);
    if (status == LW_OK && lambda > 0 && !state->penalty)
        status = lw_system_penalty_gram(self->base.system, &state->penalty, error);
    if (status < 0) return status;
    if (!(lambda > 0)) {
        *out = state->data;
        return LW_OK;
    }
    *own = 1;
    return lw_sparse_add(1, state->data, lambda * lambda, state->penalty, out, error);
}

static lw_status analyse(lw_direct *self, const lw_sparse *N, const lw_watch *watch, lw_error *error)
{
    cholesky_state *state = self->state;
    if (state->analysed == lw_sparse_nonzeros(N)) return LW_OK; /* patterns only grow, or lose a whole part */
    lw_cholesky_free(state->factor);
    state->factor = NULL;
    state->analysed = 0;
    lw_status status = lw_cholesky_analyse(N, watch, &state->factor, &state->size, error);
    if (status == LW_OK) state->analysed = lw_sparse_nonzeros(N);
    return status;
}

static lw_status factorize(lw_direct *self, double lambda, const lw_watch *watch, lw_error *error)
{
    cholesky_state *state = self->state;
    lw_sparse *N = NULL;
    int own = 0;
    int64_t defect = -1;
    lw_status status = make_normal(self, lambda, &N, &own, error);
    if (status == LW_OK) status = analyse(self, N, watch, error);
    if (status == LW_OK)
        status = lw_watch_budget(watch, state->size.bytes, "the sparse factor",
                                 "take --engine lsqr, or allow more", error);
    if (status == LW_OK) status = lw_cholesky_factorize(state->factor, N, watch, &defect, error);
    if (own) lw_sparse_free(N);
    if (status == LW_UNSOLVABLE && self->searched) return LW_NOT_CONVERGED;
    if (status == LW_OK && !self->searched && self->datum.space.defect == 0 &&
        !(lw_cholesky_rcond(state->factor) > SUSPICIOUS))
        return lw_fail(error, LW_UNSOLVABLE, "the normal matrix is nearly singular");
    return status;
}

static lw_status null_vectors(lw_direct *self, double lambda, int expand, const lw_watch *watch,
                              double **basis, int64_t *vectors, int64_t *defect, lw_error *error)
{
    cholesky_state *state = self->state;
    int64_t n = self->base.system->columns;
    lw_sparse *N = NULL, *M = NULL;
    double *packed = NULL;
    int own = 0, full = 0;
    int64_t components = 0;
    int32_t *of_column = LW_NEW_ARRAY(int32_t, n);
    *basis = NULL;
    *vectors = *defect = 0;
    if (!of_column) return lw_fail_memory(error, "components", (size_t)n * 4);
    lw_status status = make_normal(self, lambda, &N, &own, error);
    if (status == LW_OK) status = lw_direct_stack(self, lambda, &M, error);
    if (status == LW_OK)
        status = lw_datum_search(M, N, state->factor, watch, of_column, &components, &packed, defect, &full,
                                 error);
    if (own) lw_sparse_free(N);
    if (status == LW_OK && *defect > 0)
        status = lw_datum_confirm(self, lambda, M, of_column, components, packed, defect, watch, error);
    lw_sparse_free(M);
    if (status == LW_OK && *defect > 0 && expand && full)
        status = lw_fail(error, LW_UNSOLVABLE,
                         "a part of the problem has %d or more rank defects: that is no datum; damp it "
                         "(--damping) or take --engine dense",
                         LW_DATUM_VECTORS);
    if (status == LW_OK && *defect > 0) {
        if (expand) {
            status = lw_datum_expand(n, of_column, packed, *defect, watch, basis, error);
            *vectors = *defect;
        } else {
            *basis = packed;
            *vectors = LW_DATUM_VECTORS;
            packed = NULL;
        }
    }
    lw_free(packed);
    lw_free(of_column);
    if (status != LW_OK || *defect > 0) return status;
    self->searched = 1; /* none: the factor once more, without a shift */
    return factorize(self, lambda, watch, error);
}

/* One correction of the normal equations, residual first: z <- z + N^-1 (M'(f - M z) - g).
 * Source: Bjorck, Linear Algebra and its Applications 88/89:31-48, 1987 (corrected seminormal equations). */
static lw_status correct(lw_direct *self, int64_t k, const double *f, const double *g, double *z,
                         lw_error *error)
{
    cholesky_state *state = self->state;
    int64_t n = self->base.system->columns, stacked = lw_direct_stacked(self, self->base_lambda);
    double *rest = LW_NEW_ARRAY(double, stacked *k), *dz = LW_NEW_ARRAY(double, n *k);
    lw_status status =
        rest && dz ? LW_OK : lw_fail_memory(error, "right-hand sides", (size_t)((stacked + n) * k) * 8);
    if (status == LW_OK) {
        lw_direct_apply(self, self->base_lambda, k, z, rest);
        for (int64_t i = 0; i < stacked * k; i++) rest[i] = (f ? f[i] : 0) - rest[i];
        lw_direct_apply_transposed(self, self->base_lambda, k, rest, dz);
        for (int64_t i = 0; g && i < n * k; i++) dz[i] -= g[i];
        status = lw_cholesky_solve(state->factor, k, dz, error);
        if (status == LW_OK) lw_add_scaled(n * k, 1, dz, z, NULL);
    }
    lw_free(rest);
    lw_free(dz);
    return status;
}

static lw_status solve(lw_direct *self, int64_t k, const double *f, const double *g, double *r, double *z,
                       lw_error *error)
{
    cholesky_state *state = self->state;
    int64_t n = self->base.system->columns, stacked;
    double lambda = self->base_lambda;
    stacked = lw_direct_stacked(self, lambda);
    if (f)
        lw_direct_apply_transposed(self, lambda, k, f, z);
    else
        memset(z, 0, (size_t)(n * k) * 8);
    for (int64_t i = 0; g && i < n * k; i++) z[i] -= g[i];
    lw_status status = lw_cholesky_solve(state->factor, k, z, error);
    if (status == LW_OK && self->corrected) status = correct(self, k, f, g, z, error);
    if (status < 0 || !r) return status;
    lw_direct_apply(self, lambda, k, z, r);
    for (int64_t i = 0; i < stacked * k; i++) r[i] = (f ? f[i] : 0) - r[i];
    return LW_OK;
}

/* Relative error of the entries: the first contraction of the refinement measures that of N^-1. */
static double entry_error(const lw_direct *self)
{
    const cholesky_state *state = self->state;
    double by_refinement =
        self->exact && self->refinement.contraction >= 0 ? self->refinement.contraction : 0;
    return fmin(
        1, fmax(by_refinement, 16 * DBL_EPSILON / sqrt(fmax(lw_cholesky_rcond(state->factor), DBL_MIN))));
}

static lw_status inverse(lw_direct *self, int hand_over, lw_inverse_source *out, lw_error *error)
{
    cholesky_state *state = self->state;
    (void)hand_over;
    out->error = entry_error(self);
    return lw_cholesky_view(state->factor, &out->view, error);
}

static void free_state(lw_direct *self)
{
    cholesky_state *state = self->state;
    if (!state) return;
    lw_sparse_free(state->data);
    lw_sparse_free(state->penalty);
    lw_cholesky_free(state->factor);
    lw_free(state);
}

static const lw_factor_methods cholesky_factor = {factorize, null_vectors,        solve,
                                                  inverse,   lw_direct_condition, free_state};

static const lw_decomposition_methods cholesky_methods = {
    .engine = "cholesky",
    .evaluate = lw_direct_evaluate,
    .estimate = lw_direct_estimate,
    .solve_many = lw_direct_solve_many,
    .inverse_entries = lw_direct_inverse,
    .null_space = lw_direct_null_space,
    .rank = lw_direct_rank,
    .rcond = lw_direct_rcond,
    .free_self = lw_direct_free,
};

lw_status lw_cholesky_plan(lw_system *system, double lambda, const lw_solve_options *options,
                           const lw_watch *watch, lw_decomposition **out, lw_cholesky_size *size,
                           lw_error *error)
{
    lw_direct *self = NULL;
    lw_sparse *N = NULL;
    int own = 0;
    *out = NULL;
    cholesky_state *state = LW_NEW(cholesky_state);
    if (!state) return lw_fail_memory(error, "the decomposition", sizeof *state);
    lw_status status =
        lw_direct_new(system, &cholesky_methods, &cholesky_factor, state, options, watch, &self, error);
    if (status < 0) return status;
    status = lw_sparse_gram_fits(system->matrix, watch, "take --engine lsqr, or allow more", error);
    if (status == LW_OK) status = make_normal(self, lambda, &N, &own, error);
    if (status == LW_OK) status = analyse(self, N, watch, error);
    if (own) lw_sparse_free(N);
    if (status != LW_OK) {
        lw_direct_free(&self->base);
        return status;
    }
    *size = state->size;
    *out = &self->base;
    return LW_OK;
}

lw_status lw_cholesky_begin(lw_decomposition **plan, double lambda, const lw_watch *watch, lw_error *error)
{
    lw_status status = lw_direct_prepare((lw_direct *)*plan, lambda, watch, error);
    if (status == LW_OK) return LW_OK;
    lw_decomposition_free(*plan);
    *plan = NULL;
    return status;
}

static lw_status decompose(lw_system *system, double lambda, const lw_solve_options *options,
                           const lw_watch *watch, lw_decomposition **out, lw_error *error)
{
    lw_cholesky_size size;
    lw_status status = lw_cholesky_plan(system, lambda, options, watch, out, &size, error);
    return status == LW_OK ? lw_cholesky_begin(out, lambda, watch, error) : status;
}

const lw_engine lw_engine_cholesky = {
    "cholesky", "sparse Cholesky of the equilibrated normal matrix, refined; networks of any size",
    LW_DIRECT | LW_RANK | LW_REFINED | LW_CONDITIONS | LW_INVERSE | LW_FREE_DATUM, decompose};
