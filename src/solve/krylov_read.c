/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Points and models at many dampings, and the full estimate at one. */
#include "solve/krylov.h"

#include "core/memory.h"
#include "matrix/vector.h"
#include "solve/cgls.h"

#include <float.h>
#include <math.h>

/* Models that are multiplied together. */
/* Models made in one pass over the basis: as many as 64 MiB hold, 8 to 64. */
#define LEAST_MODELS 8
#define MOST_MODELS 64
#define MODEL_ROOM 67108864
/* Rounds of conjugate gradients started from the model, when rounding kept the recurrence from what it
 * promised. */
#define ROUNDS 3
/* Error bound of a curve that is good enough to be read. */
#define CURVE_TOLERANCE 1e-3

static const lw_watch *watch_of(const lw_krylov *self, const lw_watch *watch)
{
    return watch != NULL ? watch : &self->watch;
}

static lw_status iterate(lw_krylov *self, double lambda, bool started, int64_t made, const lw_watch *watch,
                         double *w, lw_iterate_result *result, lw_error *error)
{
    lw_iterate_options options = {
        .damp = self->damped ? lambda : 0.0, .tolerance = self->tolerance, .watch = watch};
    options.steps = self->most > made ? self->most - made : 1;
    options.start = started;
    if (started) return lw_cgls(self->op, self->b, &options, w, result, error);
    return self->iterate(self->op, self->b, &options, w, result, error);
}

/* Residuals of some models in standard form, split into observations and weighted priors. */
static void split_misfit(lw_krylov *self, int count, const double *w, double *r, lw_point *point)
{
    int64_t m = self->op->rows, observations = self->base.system->observations;
    lw_team *team = self->op->team;
    lw_apply(self->op, count, w, r);
    for (int c = 0; c < count; c++) {
        double *one = r + c * m;
        lw_scale_add(m, 1.0, self->b, -1.0, one, team);
        double misfit = lw_norm(observations, one, team),
               prior = lw_norm(m - observations, one + observations, team);
        point[c].misfit = misfit;
        point[c].chi_square = misfit * misfit + prior * prior;
    }
}

/* Models from the basis, or one by one by the short recurrence where it is not kept. */
static lw_status make_models(lw_krylov *self, int count, const double *lambda, const double *y,
                             const lw_watch *watch, double *w, lw_error *error)
{
    lw_status status = LW_OK;
    if (self->keeps) {
        lw_basis_multiply(&self->basis, self->B[0].k, count, y, w, self->op->team);
        return LW_OK;
    }
    for (int c = 0; c < count && status >= 0 && status != LW_INTERRUPTED; c++) {
        lw_iterate_result result = {0};
        status = iterate(self, lambda[c], false, 0, watch, w + c * self->op->columns, &result, error);
    }
    return status == LW_NOT_CONVERGED ? LW_OK : status;
}

/* models (columns x count) and, with weighted priors, the split of the misfit. */
static lw_status read_models(lw_krylov *self, int count, const double *lambda, const double *y,
                             lw_point *point, double *models, const lw_watch *watch, lw_error *error)
{
    int64_t k = self->B[0].k;
    size_t width = (size_t)self->op->columns, m = (size_t)self->op->rows;
    bool split = self->base.system->priors > 0;
    int64_t fit = MODEL_ROOM / (int64_t)(sizeof(double) * (width + 1));
    int most = fit < LEAST_MODELS ? LEAST_MODELS : fit > MOST_MODELS ? MOST_MODELS : (int)fit;
    size_t room = (size_t)(count < most ? count : most);
    double *w = lw_alloc(width * room, sizeof(double)), *r = lw_alloc(split ? m * room : 0, sizeof(double));
    lw_status status = LW_OK;
    if (w == NULL || r == NULL)
        status = lw_fail_memory(error, "the models", (width + m) * room * sizeof(double));
    for (int at = 0; at < count && status == LW_OK; at += most) {
        int some = count - at < most ? count - at : most;
        status = make_models(self, some, lambda + at, y != NULL ? y + at * k : NULL, watch, w, error);
        if (status == LW_OK && split) split_misfit(self, some, w, r, point + at);
        if (status == LW_OK && models != NULL)
            status =
                lw_standard_form_back(self->form, some, w, models + at * self->base.system->columns, error);
    }
    lw_free(w);
    lw_free(r);
    return status;
}

/* The misfit of the observations alone where V is not kept: by the recurrence, once for each damping that has
 * converged. */
static lw_status split_points(lw_krylov *self, int count, const double *lambda, lw_point *point,
                              const lw_watch *watch, lw_error *error)
{
    lw_status status = LW_OK;
    for (int i = 0; i < count && status == LW_OK; i++) {
        int at = 0;
        while (at < self->splits && self->split[at].lambda != lambda[i]) at++;
        if (at == self->splits && point[i].error_bound > CURVE_TOLERANCE) continue;
        if (at == self->splits) {
            lw_split *more = lw_resize(self->split, (size_t)at + 1, sizeof *more);
            lw_point own = point[i];
            if (more == NULL) return lw_fail_memory(error, "the curve", (size_t)at * sizeof *more);
            self->split = more;
            status = read_models(self, 1, &lambda[i], NULL, &own, NULL, watch, error);
            if (status != LW_OK) break;
            self->split[self->splits++] = (lw_split){.lambda = lambda[i], .misfit = own.misfit};
        }
        point[i].misfit = self->split[at].misfit;
    }
    return status;
}

static void fill_point(const lw_krylov *self, double lambda, const lw_projected *at, lw_point *point)
{
    *point = (lw_point){.lambda = lambda,
                        .misfit = at->misfit,
                        .size = hypot(at->size, self->base.system->penalty_constant),
                        .size_slope = at->slope};
    point->chi_square = at->misfit * at->misfit;
    point->effective_parameters = point->effective_spread = (double)NAN;
    /* the recurrence goes on falling below what rounding leaves of the gradient */
    double noise = 0.5 * DBL_EPSILON * (self->largest * at->misfit + lambda * lambda * at->size);
    double gradient = fmax(at->gradient, noise);
    point->error_bound = at->size > 0.0 ? gradient / (lambda * lambda * at->size) : (double)INFINITY;
}

/* b or A'b is zero: every damping has the model 0. */
static void fill_zero(lw_krylov *self, int count, const double *lambda, lw_point *point, double *models)
{
    double norm = lw_norm(self->op->rows, self->b, self->op->team);
    int64_t observations = self->base.system->observations;
    double misfit = lw_norm(observations, self->b, self->op->team);
    for (int i = 0; i < count; i++) {
        point[i] = (lw_point){.lambda = lambda[i], .misfit = misfit, .chi_square = norm * norm};
        point[i].effective_parameters = point[i].effective_spread = (double)NAN;
    }
    if (models != NULL) lw_fill(self->base.system->columns * count, 0.0, models);
}

lw_status lw_krylov_evaluate(lw_decomposition *base, int count, const double *lambda, int want_trace,
                             lw_point *point, double *models, const lw_watch *watch, lw_error *error)
{
    lw_krylov *self = (lw_krylov *)base;
    lw_status status = LW_OK;
    if (self->form == NULL)
        return lw_krylov_evaluate_stacked(self, count, lambda, want_trace, point, models,
                                          watch_of(self, watch), error);
    if (!self->started || self->B[0].k < 1) status = lw_krylov_extend(base, 1, NULL, watch, error);
    if (status != LW_OK) return status;
    if (self->B[0].k < 1) {
        fill_zero(self, count, lambda, point, models);
        return want_trace ? lw_krylov_trace(self, count, lambda, point, error) : LW_OK;
    }
    bool splits = base->system->priors > 0, wants_y = models != NULL || (splits && self->keeps);
    lw_projected *at = LW_NEW_ARRAY(lw_projected, count);
    double *y = wants_y ? lw_alloc((size_t)self->B[0].k * (size_t)count, sizeof(double)) : NULL;
    if (at == NULL || (wants_y && y == NULL))
        status = lw_fail_memory(error, "the curve", (size_t)self->B[0].k * (size_t)count * sizeof(double));
    if (status == LW_OK) status = lw_projected_solve(&self->B[0], count, lambda, at, y, error);
    for (int i = 0; i < count && status == LW_OK; i++) {
        fill_point(self, lambda[i], &at[i], &point[i]);
        bool good = point[i].error_bound <= CURVE_TOLERANCE;
        if (good && (self->front == 0.0 || lambda[i] < self->front)) self->front = lambda[i];
    }
    if (status == LW_OK && want_trace) status = lw_krylov_trace(self, count, lambda, point, error);
    if (status == LW_OK && wants_y)
        status = read_models(self, count, lambda, y, point, models, watch_of(self, watch), error);
    else if (status == LW_OK && splits)
        status = split_points(self, count, lambda, point, watch_of(self, watch), error);
    lw_free(at);
    lw_free(y);
    return status;
}

/* w from the basis when the sweep has one: extended until the bound is met. *steps 0: there is none. */
static lw_status from_basis(lw_krylov *self, double lambda, const lw_watch *watch, double *w, int64_t *steps,
                            lw_error *error)
{
    *steps = 0;
    if (!self->started || !self->keeps || !self->damped || self->B[0].k < 1) return LW_OK;
    lw_point point;
    int exhausted = 0;
    lw_status status = LW_OK;
    for (;;) {
        lw_projected at;
        status = lw_projected_solve(&self->B[0], 1, &lambda, &at, NULL, error);
        if (status != LW_OK) return status;
        fill_point(self, lambda, &at, &point);
        if (point.error_bound <= self->tolerance || exhausted || !self->keeps) break;
        status = lw_krylov_extend(&self->base, 1 + self->B[0].k / 16, &exhausted, watch, error);
        if (status != LW_OK) return status;
    }
    if (!self->keeps) return LW_OK;
    int64_t k = self->B[0].k;
    double *y = lw_alloc((size_t)k, sizeof(double));
    lw_projected at;
    if (y == NULL) return lw_fail_memory(error, "the model", (size_t)k * sizeof(double));
    status = lw_projected_solve(&self->B[0], 1, &lambda, &at, y, error);
    if (status == LW_OK) lw_basis_multiply(&self->basis, k, 1, y, w, self->op->team);
    lw_free(y);
    *steps = k;
    return status;
}

/* The recurrence or the basis, then rounds from the model reached while they still help. */
static lw_status solve(lw_krylov *self, double lambda, const lw_watch *watch, double *w,
                       lw_iterate_result *out, lw_error *error)
{
    int64_t steps = 0;
    lw_status status = from_basis(self, lambda, watch, w, &steps, error);
    bool started = steps > 0;
    double cond = (double)NAN, ratio = 0.0, before = (double)INFINITY;
    for (int round = 0; round <= ROUNDS && status >= 0 && status != LW_INTERRUPTED; round++) {
        status = iterate(self, lambda, started, steps, watch, w, out, error);
        if (status < 0) return status;
        steps += out->steps;
        if (isnan(cond)) {
            cond = out->cond_A;
            ratio = cond / out->norm_A;
        } else if (!self->damped && out->cond_A / out->norm_A < ratio) {
            /* a short round sees too small a condition number: the first one's is kept */
            out->error_bound *= ratio * out->norm_A / out->cond_A;
            if (out->error_bound > self->tolerance && status == LW_OK) {
                out->stop = LW_STOP_STAGNATED;
                status = LW_NOT_CONVERGED;
            }
        }
        bool helps = out->error_bound < 0.5 * before;
        before = out->error_bound;
        started = true;
        if (status == LW_OK || out->stop == LW_STOP_STEPS || out->stop == LW_STOP_ZERO || !helps) break;
    }
    out->steps = steps;
    if (out->stop == LW_STOP_ZERO && steps > 0) out->stop = LW_STOP_TOLERANCE;
    if (!self->damped) self->cond_A = cond;
    return status;
}

static lw_status complete(lw_krylov *self, double lambda, const double *z, const lw_iterate_result *result,
                          const lw_point *trace, lw_estimate **out, lw_error *error)
{
    lw_status status = lw_estimate_from_model(self->base.system, lambda, z, NULL, 0, out, error);
    if (status < 0) return status;
    lw_estimate *e = *out;
    e->steps = result->steps;
    e->stop = result->stop;
    e->gradient = result->gradient;
    e->rank = -1;
    e->rcond = self->cond_A > 0.0 ? 1.0 / self->cond_A : (double)NAN;
    e->point.error_bound = result->error_bound;
    if (self->form == NULL) {
        e->point.effective_parameters = trace->effective_parameters;
        e->point.effective_spread = trace->effective_spread;
    }
    if (self->damped && self->form != NULL && (self->singular != NULL || self->probes > 0)) {
        int exhausted = 0;
        bool ready = false;
        if (!self->started && self->singular == NULL)
            status = lw_krylov_extend(&self->base, 1, &exhausted, &self->watch, error);
        while (status == LW_OK) {
            status = lw_krylov_trace_ready(self, lambda, &ready, error);
            if (ready || exhausted || status != LW_OK) break;
            self->front = 0.0; /* the probes have to go on */
            status = lw_krylov_extend(&self->base, 1 + self->B[1].k / 8, &exhausted, &self->watch, error);
        }
        if (status == LW_OK) status = lw_krylov_trace(self, 1, &lambda, &e->point, error);
    }
    return status;
}

lw_status lw_krylov_estimate(lw_decomposition *base, double lambda, const lw_watch *watch, lw_estimate **out,
                             lw_error *error)
{
    lw_krylov *self = (lw_krylov *)base;
    *out = NULL;
    if (lambda > 0.0 && !self->damped)
        return lw_fail(error, LW_BAD_SHAPE, "an undamped decomposition was asked for damping %g", lambda);
    watch = watch_of(self, watch);
    size_t width = (size_t)self->op->columns, columns = (size_t)base->system->columns;
    double *w = lw_alloc_zero(width, sizeof(double)), *z = lw_alloc(columns, sizeof(double));
    lw_iterate_result result = {0};
    lw_point trace = {.effective_parameters = (double)NAN, .effective_spread = (double)NAN};
    lw_status status = LW_OK, after = LW_OK;
    if (w == NULL || z == NULL)
        status = lw_fail_memory(error, "the model", (width + columns) * sizeof(double));
    if (status == LW_OK && self->form == NULL) {
        status = lw_krylov_stacked(self, lambda, self->probes > 0 ? self->probes : 0, watch, z, &result,
                                   &trace, error);
    } else if (status == LW_OK) {
        status = solve(self, lambda, watch, w, &result, error);
        if (status >= 0) after = lw_standard_form_back(self->form, 1, w, z, error);
    }
    if (status >= 0 && after >= 0) after = complete(self, lambda, z, &result, &trace, out, error);
    lw_free(w);
    lw_free(z);
    if (after < 0) {
        lw_estimate_free(*out);
        *out = NULL;
        return after;
    }
    return status;
}
