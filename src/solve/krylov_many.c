/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Many right-hand sides at one damping, for samples and probes. See krylov_many.h. */
#include "solve/krylov_many.h"

#include "core/memory.h"
#include "matrix/vector.h"

#include <math.h>
#include <string.h>

/* out (p) <- L v. */
static void penalize(const lw_many *c, const double *v, double *out)
{
    if (c->diagonal != NULL || c->form != NULL)
        lw_copy(c->n, v, out);
    else
        lw_system_penalize(c->system, v, out);
}

/* s <- A'r1 + lambda L'r2 - g, and its squared norms. */
static void make_gradient(lw_many *c, double *gamma)
{
    lw_team *team = c->op->team;
    lw_apply_transposed(c->op, c->k, c->r1, c->s);
    for (int i = 0; i < c->k; i++) {
        double *s = c->s + i * c->n;
        if (c->p > 0 && c->diagonal == NULL && c->form == NULL) {
            lw_system_penalize_transposed(c->system, c->r2 + i * c->p, c->t);
            lw_add_scaled(c->n, c->lambda, c->t, s, team);
        } else if (c->p > 0) {
            lw_add_scaled(c->n, c->lambda, c->r2 + i * c->p, s, team);
        }
        for (int64_t j = 0; c->g != NULL && j < c->n; j++)
            s[j] -= c->diagonal != NULL ? c->g[i * c->n + j] / c->diagonal[j] : c->g[i * c->n + j];
        gamma[i] = lw_dot(c->n, s, s, team);
    }
}

double lw_many_bound(const lw_many *c, int i)
{
    double inverse = fmax(c->inverse[i], c->least), norm = lw_norm(c->n, c->x + i * c->n, c->op->team);
    if ((c->diagonal != NULL || c->form != NULL) && c->lambda > 0.0)
        inverse = fmin(inverse, 1.0 / (c->lambda * c->lambda));
    return norm > 0.0 ? sqrt(c->gamma[i]) * inverse / norm : (double)INFINITY;
}

static void step(lw_many *c)
{
    lw_team *team = c->op->team;
    double gamma[LW_MANY_SIDES];
    lw_apply(c->op, c->k, c->d, c->q1);
    for (int i = 0; i < c->k; i++) {
        double *d = c->d + i * c->n, *q1 = c->q1 + i * c->m, *q2 = c->q2 + i * c->p;
        if (c->p > 0) penalize(c, d, q2);
        double delta = lw_dot(c->m, q1, q1, team) + c->lambda * c->lambda * lw_dot(c->p, q2, q2, team);
        if (c->done[i] || !(delta > 0.0)) {
            c->done[i] = true;
            continue;
        }
        double a = c->gamma[i] / delta;
        c->inverse[i] += lw_dot(c->n, d, d, team) / delta;
        lw_add_scaled(c->n, a, d, c->x + i * c->n, team);
        lw_add_scaled(c->m, -a, q1, c->r1 + i * c->m, team);
        lw_add_scaled(c->p, -a * c->lambda, q2, c->r2 + i * c->p, team);
    }
    make_gradient(c, gamma);
    for (int i = 0; i < c->k; i++) {
        if (c->done[i]) continue;
        lw_scale_add(c->n, 1.0, c->s + i * c->n, gamma[i] / c->gamma[i], c->d + i * c->n, team);
        c->gamma[i] = gamma[i];
        c->done[i] = !(gamma[i] > 0.0) || lw_many_bound(c, i) <= c->tolerance;
        if (c->done[i]) lw_fill(c->n, 0.0, c->d + i * c->n);
    }
}

static bool all_done(const lw_many *c)
{
    for (int i = 0; i < c->k; i++)
        if (!c->done[i]) return false;
    return true;
}

int64_t lw_many_iterate(lw_many *c, int64_t most, int started, const char *what, const lw_watch *watch)
{
    int64_t steps = 0;
    if (!started) lw_fill(c->n * c->k, 0.0, c->x);
    make_gradient(c, c->gamma);
    lw_copy(c->n * c->k, c->s, c->d);
    for (int i = 0; i < c->k; i++) {
        c->inverse[i] = 0.0;
        c->done[i] = !(c->gamma[i] > 0.0);
        if (c->done[i]) lw_fill(c->n, 0.0, c->d + i * c->n);
    }
    for (; steps < most && !all_done(c) && !lw_watch_cancelled(watch); steps++) {
        step(c);
        if (what != NULL && steps % 64 == 63) lw_watch_tick(watch, what, (double)steps, 0.0, "");
    }
    return steps;
}

static bool only_scales(const lw_krylov *self)
{
    const lw_system *system = self->base.system;
    if (!self->damped || self->form == NULL || system->penalty_diagonal == NULL) return false;
    if (lw_standard_form_undamped(self->form) > 0 || lw_standard_form_width(self->form) != system->columns)
        return false;
    for (int64_t j = 0; j < system->columns; j++)
        if (!(system->penalty_diagonal[j] > 0.0)) return false;
    return true;
}

void lw_many_clear(lw_many *c)
{
    lw_free(c->r1);
    lw_free(c->r2);
    lw_free(c->q1);
    lw_free(c->q2);
    lw_free(c->x);
    lw_free(c->s);
    lw_free(c->d);
    lw_free(c->t);
}

lw_status lw_many_new(lw_many *c, lw_krylov *self, double lambda, int sides, int gradient, lw_error *error)
{
    lw_system *system = self->base.system;
    memset(c, 0, sizeof *c);
    if (only_scales(self) && lambda > 0.0) {
        c->op = self->op;
        c->diagonal = system->penalty_diagonal;
    } else if (!self->damped && lambda == 0.0) {
        c->op = self->op;
    } else if (self->form != NULL && lambda > 0.0 && !gradient) {
        c->op = self->op;
        c->form = self->form;
    } else {
        lw_status status = self->plain == NULL
                               ? lw_system_operator(system, &self->product, &self->watch, &self->plain, error)
                               : LW_OK;
        if (status != LW_OK) return status;
        c->op = self->plain;
    }
    c->system = system;
    c->lambda = lambda;
    c->tolerance = self->tolerance;
    c->m = system->rows;
    c->n = c->op->columns;
    c->p = lambda <= 0.0 ? 0 : c->form != NULL ? c->n : system->penalty_rows;
    size_t m = (size_t)c->m, n = (size_t)c->n, p = (size_t)c->p, k = (size_t)sides;
    c->r1 = lw_alloc(m * k, sizeof(double));
    c->q1 = lw_alloc(m * k, sizeof(double));
    c->r2 = lw_alloc(p * k, sizeof(double));
    c->q2 = lw_alloc(p * k, sizeof(double));
    c->x = lw_alloc(n * k, sizeof(double));
    c->s = lw_alloc(n * k, sizeof(double));
    c->d = lw_alloc(n * k, sizeof(double));
    c->t = lw_alloc(n, sizeof(double));
    if (c->r1 == NULL || c->q1 == NULL || c->r2 == NULL || c->q2 == NULL || c->x == NULL || c->s == NULL ||
        c->d == NULL || c->t == NULL)
        return lw_fail_memory(error, "right-hand sides", (m + p + 2 * n) * 2 * k * sizeof(double));
    return LW_OK;
}

/* f = [f1; f2], rows + penalty rows, as right-hand side i: in the standard form (I - Q Q') f1 and L^#' L' f2.
 */
static lw_status take_side(lw_many *c, int i, const double *f, lw_error *error)
{
    double *r1 = c->r1 + i * c->m, *r2 = c->r2 + i * c->p;
    lw_copy(c->m, f, r1);
    if (c->form == NULL) {
        lw_copy(c->p, f + c->m, r2);
        return LW_OK;
    }
    lw_standard_form_project(c->form, 1, r1);
    bool zero = true;
    for (int64_t k = 0; zero && k < c->system->penalty_rows; k++) zero = f[c->m + k] == 0.0;
    if (zero) {
        lw_fill(c->p, 0.0, r2);
        return LW_OK;
    }
    double *z = LW_NEW_ARRAY(double, c->system->columns);
    if (z == NULL)
        return lw_fail_memory(error, "right-hand sides", (size_t)c->system->columns * sizeof(double));
    lw_system_penalize_transposed(c->system, f + c->m, z);
    lw_status status = lw_standard_form_root_transposed(c->form, 1, z, r2, error);
    lw_free(z);
    return status;
}

/* z of all sides, columns x k. */
static lw_status give_models(lw_many *c, const double *f, int64_t tall, double *z, lw_error *error)
{
    if (c->form != NULL) return lw_standard_form_back_from(c->form, c->k, f, tall, c->x, z, error);
    lw_copy(c->n * c->k, c->x, z);
    for (int64_t j = 0; c->diagonal != NULL && j < c->n * c->k; j++) z[j] /= c->diagonal[j % c->n];
    return LW_OK;
}

/* r = f - [A; lambda L] z of all sides. */
static lw_status give_residuals(lw_many *c, lw_krylov *self, const double *f, int64_t tall, const double *z,
                                double *r, lw_error *error)
{
    lw_status status = LW_OK;
    if (c->form != NULL && self->plain == NULL)
        status = lw_system_operator(self->base.system, &self->product, &self->watch, &self->plain, error);
    for (int i = 0; i < c->k && status == LW_OK; i++, f += tall, r += tall, z += c->system->columns) {
        if (c->form == NULL) {
            lw_copy(c->m, c->r1 + i * c->m, r);
            lw_copy(c->p, c->r2 + i * c->p, r + c->m);
            continue;
        }
        lw_apply(self->plain, 1, z, r);
        lw_system_penalize(c->system, z, r + c->m);
        for (int64_t k = 0; k < tall; k++) r[k] = f[k] - (k < c->m ? 1.0 : c->lambda) * r[k];
    }
    return status;
}

/* The c->k sides of f (NULL: zero). */
static lw_status solve_some(lw_many *c, lw_krylov *self, const double *f, double *r, double *z,
                            bool *converged, lw_error *error)
{
    int64_t columns = c->system->columns, tall = c->m + (c->lambda > 0.0 ? c->system->penalty_rows : 0);
    lw_status status = LW_OK;
    double *zero = f == NULL ? LW_NEW_ZEROS(double, tall * c->k) : NULL;
    double *spare = z == NULL ? LW_NEW_ARRAY(double, columns * c->k) : NULL;
    if (f == NULL) f = zero;
    if (z == NULL) z = spare;
    if (f == NULL || z == NULL)
        status =
            lw_fail_memory(error, "right-hand sides", (size_t)((tall + columns) * c->k) * sizeof(double));
    for (int i = 0; i < c->k && status == LW_OK; i++) status = take_side(c, i, f + i * tall, error);
    if (status == LW_OK) {
        lw_many_iterate(c, self->most, 0, NULL, &self->watch);
        if (!all_done(c)) *converged = false;
        status = give_models(c, f, tall, z, error);
    }
    if (status == LW_OK && r != NULL) status = give_residuals(c, self, f, tall, z, r, error);
    lw_free(zero);
    lw_free(spare);
    return status;
}

lw_status lw_krylov_solve_many(lw_decomposition *base, double lambda, int64_t k, const double *f,
                               const double *g, const double *h, double *r, double *z, double *u,
                               lw_error *error)
{
    lw_krylov *self = (lw_krylov *)base;
    lw_many c;
    bool converged = true;
    (void)h; /* an iterative engine takes no conditions */
    (void)u;
    int sides = k < LW_MANY_SIDES ? (int)k : LW_MANY_SIDES;
    int64_t tall = base->system->rows + (lambda > 0.0 ? base->system->penalty_rows : 0);
    lw_status status = lw_many_new(&c, self, lambda, sides, g != NULL, error);
    for (int64_t at = 0; at < k && status == LW_OK; at += LW_MANY_SIDES) {
        c.k = k - at < LW_MANY_SIDES ? (int)(k - at) : LW_MANY_SIDES;
        c.g = g != NULL ? g + at * base->system->columns : NULL;
        status = solve_some(&c, self, f != NULL ? f + at * tall : NULL, r != NULL ? r + at * tall : NULL,
                            z != NULL ? z + at * base->system->columns : NULL, &converged, error);
    }
    lw_many_clear(&c);
    return status < 0 || converged ? status : LW_NOT_CONVERGED;
}
