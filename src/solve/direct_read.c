/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Answers read from a direct factor: points of the trade-off, the estimate, entries of the inverse. */
#include "core/memory.h"
#include "matrix/dense.h"
#include "matrix/vector.h"
#include "solve/direct.h"

#include <math.h>
#include <string.h>

#define MOST_REFINEMENTS 10

/* d||L z||^2 / d lambda = 2 z'L'L z',  z' = -2 lambda Q L'L z; and ||L z||. */
static lw_status size_and_slope(lw_direct *self, double lambda, const double *z, lw_point *point,
                                lw_error *error)
{
    int64_t n = self->base.system->columns, p = self->penalty->rows;
    double *row = LW_NEW_ARRAY(double, p), *g = LW_NEW_ARRAY(double, n), *dz = LW_NEW_ARRAY(double, n);
    lw_status status = row && g && dz ? LW_OK : lw_fail_memory(error, "the slope", (size_t)(p + 2 * n) * 8);
    point->size_slope = 0;
    if (status == LW_OK) {
        lw_sparse_apply(self->penalty, 1, z, row);
        point->size = hypot(lw_norm(p, row, NULL), self->base.system->penalty_constant);
        lw_sparse_apply_transposed(self->penalty, 1, row, g);
    }
    if (status == LW_OK && lambda > 0) {
        status =
            lw_direct_solve_many(&self->base, lambda, 1, NULL, g, NULL, NULL, dz, NULL, error); /* -Q L'L z */
        if (status == LW_OK) point->size_slope = fmin(0, 4 * lambda * lw_dot(n, g, dz, NULL));
    }
    lw_free(row);
    lw_free(g);
    lw_free(dz);
    return status;
}

/* The plain solution at lambda: z, whitened residual r (rows + penalty rows), multipliers u. */
static lw_status solve_plain(lw_direct *self, double lambda, double *r, double *z, double *u, lw_error *error)
{
    const lw_system *system = self->base.system;
    int64_t plain = system->rows + lw_direct_penalty_rows(self, lambda);
    double *f = LW_NEW_ZEROS(double, plain);
    if (!f) return lw_fail_memory(error, "the right-hand side", (size_t)plain * 8);
    lw_copy(system->rows, system->b, f);
    lw_status status =
        lw_direct_solve_many(&self->base, lambda, 1, f, NULL, system->condition_value, r, z, u, error);
    lw_free(f);
    return status;
}

static lw_status evaluate_one(lw_direct *self, double lambda, int want_trace, double *r, double *z,
                              lw_point *point, lw_error *error)
{
    const lw_system *system = self->base.system;
    *point = (lw_point){.lambda = lambda, .effective_parameters = (double)NAN};
    lw_status status = solve_plain(self, lambda, r, z, NULL, error);
    if (status != LW_OK) return status;
    double prior = lw_norm(system->priors, r + system->observations, NULL);
    point->misfit = lw_norm(system->observations, r, NULL);
    point->chi_square = point->misfit * point->misfit + prior * prior;
    status = size_and_slope(self, lambda, z, point, error);
    if (status == LW_OK && want_trace)
        status = lw_direct_trace(self, lambda, &point->effective_parameters, &point->effective_spread, error);
    return status;
}

/* lw_direct_prepare, with words for numbers that are beyond the engine. */
static lw_status stand(lw_direct *self, double lambda, const lw_watch *watch, lw_error *error)
{
    lw_status status = lw_direct_prepare(self, lambda, watch, error);
    if (status != LW_NOT_CONVERGED) return status;
    return lw_fail(
        error, LW_UNSOLVABLE,
        "at damping %g the equations are too ill-conditioned for engine %s: take --engine dense or qr",
        lambda, self->base.methods->engine);
}

lw_status lw_direct_evaluate(lw_decomposition *base, int count, const double *lambda, int want_trace,
                             lw_point *point, double *models, const lw_watch *watch, lw_error *error)
{
    lw_direct *self = (lw_direct *)base;
    const lw_system *system = base->system;
    double *r = LW_NEW_ARRAY(double, system->rows + system->penalty_rows),
           *z = LW_NEW_ARRAY(double, system->columns);
    lw_status status =
        r && z ? LW_OK : lw_fail_memory(error, "the sweep", (size_t)(system->rows + system->columns) * 8);
    self->corrected = 1;
    for (int k = 0; status == LW_OK && k < count; k++) {
        lw_watch_tick(watch, "sweeping dampings", k, count, "");
        if (lw_watch_cancelled(watch)) {
            status = LW_INTERRUPTED;
            for (int rest = k; rest < count; rest++) {
                point[rest] = (lw_point){lambda[rest], (double)NAN, (double)NAN, (double)NAN,
                                         (double)NAN,  (double)NAN, 0,           (double)INFINITY};
                if (models)
                    for (int64_t j = 0; j < system->columns; j++)
                        models[rest * system->columns + j] = (double)NAN;
            }
            break;
        }
        status = stand(self, lambda[k], watch, error);
        if (status == LW_OK) status = evaluate_one(self, lambda[k], want_trace, r, z, point + k, error);
        if (status == LW_OK && models) lw_copy(system->columns, z, models + k * system->columns);
    }
    self->corrected = 0;
    lw_free(r);
    lw_free(z);
    return status;
}

/* The estimate from the refined state: dx / scale in z, chi_square and multipliers from the exact system. */
static lw_status from_refined(lw_direct *self, double lambda, lw_estimate **out, lw_error *error)
{
    lw_system *system = self->base.system;
    int64_t n = system->columns;
    double *z = LW_NEW_ARRAY(double, n), *low = LW_NEW_ARRAY(double, n);
    double *u = system->conditions > 0 ? LW_NEW_ARRAY(double, system->conditions) : NULL;
    lw_status status = LW_OK;
    if (!z || !low || (system->conditions > 0 && !u))
        status = lw_fail_memory(error, "the estimate", (size_t)n * 16);
    for (int64_t j = 0; status == LW_OK && j < n; j++) {
        z[j] = self->refined.dx[j].high / system->scale[j];
        low[j] = self->refined.dx[j].low / system->scale[j];
    }
    if (status == LW_OK) status = lw_estimate_from_model(system, lambda, z, low, 1, out, error);
    if (status >= 0) {
        lw_decimal chi = lw_exact_chi_square(self->exact, &self->refined);
        (*out)->point.chi_square = chi.high;
        (*out)->chi_square_low = chi.low;
        (*out)->stop = self->refined_status == LW_OK ? LW_STOP_REFINED : LW_STOP_STAGNATED;
        (*out)->steps = self->refinement.steps;
        (*out)->contraction = self->refinement.contraction;
        (*out)->refined_to = self->refinement.last;
        for (int64_t i = 0; u && i < system->conditions; i++) u[i] = self->refined.u[i].high;
        (*out)->condition_multiplier = u;
        u = NULL;
    }
    lw_free(z);
    lw_free(low);
    lw_free(u);
    return status;
}

static lw_status from_plain(lw_direct *self, double lambda, lw_estimate **out, lw_error *error)
{
    lw_system *system = self->base.system;
    int64_t plain = system->rows + lw_direct_penalty_rows(self, lambda);
    double *z = LW_NEW_ARRAY(double, system->columns), *r = LW_NEW_ARRAY(double, plain);
    double *u = system->conditions > 0 ? LW_NEW_ARRAY(double, system->conditions) : NULL;
    lw_status status = LW_OK;
    if (!z || !r || (system->conditions > 0 && !u))
        status = lw_fail_memory(error, "the estimate", (size_t)plain * 8);
    if (status == LW_OK) status = solve_plain(self, lambda, r, z, u, error);
    if (status == LW_OK) status = lw_estimate_from_model(system, lambda, z, NULL, 0, out, error);
    if (status >= 0) {
        (*out)->stop = LW_STOP_DIRECT;
        for (int64_t i = 0; u && i < system->conditions; i++) u[i] *= system->condition_scale[i];
        (*out)->condition_multiplier = u;
        u = NULL;
    }
    lw_free(z);
    lw_free(r);
    lw_free(u);
    return status;
}

lw_status lw_direct_estimate(lw_decomposition *base, double lambda, const lw_watch *watch, lw_estimate **out,
                             lw_error *error)
{
    lw_direct *self = (lw_direct *)base;
    int most = self->options.refine > 0 ? self->options.refine : MOST_REFINEMENTS, qualified = 0;
    *out = NULL;
    lw_status status = stand(self, lambda, watch, error);
    if (status == LW_OK && self->options.refine >= 0) {
        status = lw_direct_refine(self, lambda, most, watch, error);
        qualified = status == LW_NOT_CONVERGED;
        if (status == LW_OK || qualified) status = from_refined(self, lambda, out, error);
    } else if (status == LW_OK) {
        self->corrected = 1;
        status = from_plain(self, lambda, out, error);
        self->corrected = 0;
    }
    if (status != LW_OK) return status;
    lw_estimate *e = *out;
    double size = e->point.size;
    status = size_and_slope(self, lambda, e->z, &e->point, error);
    e->point.size = size;
    if (status == LW_OK)
        status =
            lw_direct_trace(self, lambda, &e->point.effective_parameters, &e->point.effective_spread, error);
    e->rank = lw_direct_rank(base);
    e->rcond = self->factor->rcond(self);
    if (status < 0) {
        lw_estimate_free(e);
        *out = NULL;
        return status;
    }
    return qualified ? LW_NOT_CONVERGED : status;
}

const lw_null_space *lw_direct_null_space(lw_decomposition *base)
{
    lw_direct *self = (lw_direct *)base;
    static const lw_null_space none = {0};
    return lw_direct_defect(self) > 0 ? &self->datum.space : &none;
}

/* Rank of the observations, priors and conditions together: what the degrees of freedom are counted against.
 */
int64_t lw_direct_rank(lw_decomposition *base)
{
    return base->system->columns - lw_direct_defect((lw_direct *)base);
}

double lw_direct_rcond(lw_decomposition *base)
{
    lw_direct *self = (lw_direct *)base;
    return isnan(self->lambda) ? (double)NAN : self->factor->rcond(self);
}
