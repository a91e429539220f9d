/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The sweep and the estimate where L'L has no factor: [A; lambda L] is solved by conjugate gradients, one
 * damping at a time, from the largest down, each started from the model of the one above. Random +-1 probes
 * (krylov.h) are further right-hand sides in lockstep. */
#include "solve/krylov_many.h"

#include "core/memory.h"
#include "matrix/vector.h"

#include <math.h>

/* The slope of ln size over ln lambda tends to -2 above the largest singular value: there the range ends. */
#define FLAT -1.8
#define TOO_FLAT -1.96
#define TRIES 12

/* Right-hand sides b and, with probes, random signs; x from the models of a larger damping. */
static lw_status begin(lw_many *c, lw_krylov *self, double lambda, int sides, lw_error *error)
{
    const lw_stacked *s = &self->stacked;
    lw_status status = lw_many_new(c, self, lambda, sides, 0, error);
    if (status != LW_OK) return status;
    c->k = sides;
    c->least = s->sides == sides && lambda <= s->lambda ? s->inverse : 0.0;
    lw_copy(c->m, self->base.system->b, c->r1);
    if (sides > 1) status = lw_krylov_probe(self, c->r1 + c->m, error);
    lw_fill(c->p * sides, 0.0, c->r2);
    if (status != LW_OK || s->sides != sides) return status;
    lw_copy(c->n * sides, s->x, c->x);
    lw_apply(c->op, sides, c->x, c->q1);
    lw_add_scaled(c->m * sides, -1.0, c->q1, c->r1, c->op->team);
    for (int i = 0; i < sides; i++) lw_system_penalize(c->system, c->x + i * c->n, c->r2 + i * c->p);
    for (int64_t i = 0; i < c->p * sides; i++) c->r2[i] *= -lambda;
    return LW_OK;
}

/* Keeps the models as the start of the next damping. */
static lw_status keep(lw_krylov *self, const lw_many *c, lw_error *error)
{
    lw_stacked *s = &self->stacked;
    if (s->sides != c->k) {
        lw_free(s->x);
        s->sides = 0;
        s->x = lw_alloc((size_t)c->n * (size_t)c->k, sizeof(double));
        if (s->x == NULL)
            return lw_fail_memory(error, "the models", (size_t)c->n * (size_t)c->k * sizeof(double));
        s->sides = c->k;
    }
    lw_copy(c->n * c->k, c->x, s->x);
    s->lambda = c->lambda;
    s->inverse = c->least;
    for (int i = 0; i < c->k; i++) s->inverse = fmax(s->inverse, c->inverse[i]);
    return LW_OK;
}

/* trace H = E[z'H z], H z = z - r; see krylov_trace.c. */
static lw_status read_trace(lw_krylov *self, const lw_many *c, lw_point *point, lw_error *error)
{
    double trace = 0.0, square = 0.0, rows = (double)c->system->rows_used, probes = c->k - 1;
    double *z = lw_alloc((size_t)c->m * (size_t)(c->k - 1), sizeof(double));
    if (z == NULL) return lw_fail_memory(error, "the trace", (size_t)c->m * sizeof(double));
    lw_status status = lw_krylov_probe(self, z, error);
    for (int i = 1; i < c->k && status == LW_OK; i++) {
        const double *r = c->r1 + i * c->m, *one = z + (i - 1) * c->m;
        for (int64_t j = 0; j < c->m; j++) {
            trace += one[j] * (one[j] - r[j]) / probes;
            square += (one[j] - r[j]) * (one[j] - r[j]) / probes;
        }
    }
    if (status == LW_OK) {
        point->effective_parameters = trace;
        point->effective_spread = sqrt(fmax(2.0 * (square - trace * trace / rows), 0.0) / probes);
    }
    lw_free(z);
    return status;
}

/* d ||L z||^2 / d lambda = -4 lambda v' K^-1 v, v = L'L z, K = A'A + lambda^2 L'L. */
static lw_status read_slope(lw_krylov *self, lw_point *point, const double *z, lw_error *error)
{
    const lw_system *system = self->base.system;
    size_t n = (size_t)system->columns, p = (size_t)system->penalty_rows;
    double *v = lw_alloc(n, sizeof(double)), *l = lw_alloc(p, sizeof(double)),
           *y = lw_alloc(n, sizeof(double));
    lw_status status = LW_OK;
    if (v == NULL || l == NULL || y == NULL)
        status = lw_fail_memory(error, "the curve", (2 * n + p) * sizeof(double));
    if (status == LW_OK) {
        lw_system_penalize(system, z, l);
        lw_system_penalize_transposed(system, l, v);
        lw_scale(system->columns, -1.0, v, NULL);
        status = lw_krylov_solve_many(&self->base, point->lambda, 1, NULL, v, NULL, NULL, y, NULL, error);
    }
    if (status >= 0) point->size_slope = 4.0 * point->lambda * lw_dot(system->columns, v, y, NULL);
    lw_free(v);
    lw_free(l);
    lw_free(y);
    return status < 0 ? status : LW_OK;
}

lw_status lw_krylov_stacked(lw_krylov *self, double lambda, int probes, const lw_watch *watch, double *z,
                            lw_iterate_result *out, lw_point *point, lw_error *error)
{
    lw_many c;
    *out = (lw_iterate_result){.cond_A = (double)NAN};
    lw_status status = begin(&c, self, lambda, 1 + probes, error);
    if (status == LW_OK) {
        out->steps = lw_many_iterate(&c, self->most, self->stacked.sides == c.k,
                                     "iterating on the stacked equations", watch);
        lw_copy(c.n, c.x, z);
        out->gradient = sqrt(c.gamma[0]);
        out->error_bound = c.gamma[0] > 0.0 ? lw_many_bound(&c, 0) : 0.0;
        out->stop = out->error_bound <= self->tolerance ? LW_STOP_TOLERANCE : LW_STOP_STEPS;
        if (!(lw_norm(c.n, z, NULL) > 0.0)) out->stop = LW_STOP_ZERO;
        if (!c.done[0] && lw_watch_cancelled(watch)) out->stop = LW_STOP_INTERRUPTED;
        if (!c.done[0]) status = out->stop == LW_STOP_INTERRUPTED ? LW_INTERRUPTED : LW_NOT_CONVERGED;
        self->made += out->steps;
        lw_status after = keep(self, &c, error);
        if (after == LW_OK && probes > 0) after = read_trace(self, &c, point, error);
        if (after < 0) status = after;
    }
    lw_many_clear(&c);
    return status;
}

lw_status lw_krylov_evaluate_stacked(lw_krylov *self, int count, const double *lambda, int want_trace,
                                     lw_point *point, double *models, const lw_watch *watch, lw_error *error)
{
    lw_system *system = self->base.system;
    int probes = want_trace && self->probes > 0 ? self->probes : 0;
    lw_status status = LW_OK;
    double *z = lw_alloc((size_t)system->columns, sizeof(double));
    if (z == NULL) return lw_fail_memory(error, "the model", (size_t)system->columns * sizeof(double));
    for (int i = count - 1; i >= 0 && status >= 0 && status != LW_INTERRUPTED; i--) {
        lw_iterate_result result;
        lw_estimate *estimate = NULL;
        lw_point trace = {.effective_parameters = (double)NAN, .effective_spread = (double)NAN};
        status = lw_krylov_stacked(self, lambda[i], probes, watch, z, &result, &trace, error);
        if (status >= 0 && lw_estimate_from_model(system, lambda[i], z, NULL, 0, &estimate, error) < 0)
            status = error != NULL && error->status < 0 ? error->status : LW_NO_MEMORY;
        if (status < 0) break;
        point[i] = estimate->point;
        point[i].error_bound = result.error_bound;
        point[i].effective_parameters = trace.effective_parameters;
        point[i].effective_spread = trace.effective_spread;
        lw_estimate_free(estimate);
        if (models != NULL) lw_copy(system->columns, z, models + i * system->columns);
        if (status != LW_INTERRUPTED && isnan(point[i].size_slope)) {
            lw_status after = read_slope(self, &point[i], z, error);
            if (after < 0) status = after;
        }
    }
    lw_free(z);
    return status == LW_NOT_CONVERGED ? LW_OK : status;
}

lw_status lw_krylov_stacked_top(lw_krylov *self, const lw_watch *watch, double *out, lw_error *error)
{
    const lw_system *system = self->base.system;
    double square = 0.0, lambda, slope;
    const lw_sparse *L = system->penalty;
    for (int64_t p = 0; L != NULL && p < lw_sparse_nonzeros(L); p++) square += L->value[p] * L->value[p];
    for (int64_t j = 0; L == NULL && j < system->columns; j++)
        square += system->penalty_diagonal[j] * system->penalty_diagonal[j];
    *out = 0.0;
    if (!(square > 0.0) || !(lw_norm(system->rows, system->b, NULL) > 0.0)) return LW_OK;
    lambda = sqrt((double)system->columns / square); /* the columns of A have about unit length */
    lw_status status = LW_OK;
    for (int tries = 0, was = 0; tries < TRIES && status == LW_OK; tries++) {
        lw_point point = {0};
        status = lw_krylov_evaluate_stacked(self, 1, &lambda, 0, &point, NULL, watch, error);
        if (status != LW_OK) break;
        slope = point.size > 0.0 ? 0.5 * point.size_slope * lambda / (point.size * point.size) : 0.0;
        int way = slope > FLAT ? 1 : slope < TOO_FLAT ? -1 : 0;
        if (way == 0 || was * way < 0) break;
        was = way;
        lambda *= way > 0 ? 4.0 : 0.25;
    }
    *out = lambda;
    return status;
}
