/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Many right-hand sides at one damping, for samples and probes, and the estimate where L'L cannot be
 * factored: conjugate gradients on the stacked system in lockstep, one product with A and one with A' a step
 * for all of them.
 *
 *      r = [f1; f2] - [A; lambda L] x       s = A'r1 + lambda L'r2 - g       (s = 0 at the solution)
 *      a = ||s||^2 / (||A p||^2 + lambda^2 ||L p||^2),  x <- x + a p,  p <- s + beta p
 *
 * The coordinates are those of the standard form where it only scales columns (L = I there), else z itself.
 * Source: Bjorck, Numerical Methods for Least Squares Problems, SIAM 1996, 7.4. */
#include "solve/krylov.h"

#include "core/memory.h"
#include "matrix/vector.h"

#include <math.h>
#include <string.h>

#define SIDES 8

typedef struct many {
    const lw_system *system;
    lw_operator *op;
    double lambda, tolerance;
    const double *diagonal; /* L of the standard form that only scales; NULL: L of the system */
    int64_t m, n, p;        /* rows, columns, penalty rows (0 undamped) */
    int k;
    double *r1, *r2, *q1, *q2, *x, *s, *d, *t;
    const double *g; /* n x k or NULL */
    double gamma[SIDES],
        inverse[SIDES]; /* ||s||^2; sum of ||p||^2 / delta, an estimate above ||(A'A + lambda^2 L'L)^-1|| */
    bool done[SIDES];
} many;

/* out (p) <- L v. */
static void penalize(const many *c, const double *v, double *out)
{
    if (c->diagonal != NULL)
        lw_copy(c->n, v, out);
    else
        lw_system_penalize(c->system, v, out);
}

/* s <- A'r1 + lambda L'r2 - g, and its squared norms. */
static void make_gradient(many *c, double *gamma)
{
    lw_team *team = c->op->team;
    lw_apply_transposed(c->op, c->k, c->r1, c->s);
    for (int i = 0; i < c->k; i++) {
        double *s = c->s + i * c->n;
        if (c->p > 0 && c->diagonal == NULL) {
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

static double bound(const many *c, int i)
{
    double inverse = c->inverse[i], norm = lw_norm(c->n, c->x + i * c->n, c->op->team);
    if (c->diagonal != NULL && c->lambda > 0.0) inverse = fmin(inverse, 1.0 / (c->lambda * c->lambda));
    return norm > 0.0 ? sqrt(c->gamma[i]) * inverse / norm : (double)INFINITY;
}

static void step(many *c)
{
    lw_team *team = c->op->team;
    double gamma[SIDES];
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
        c->done[i] = !(gamma[i] > 0.0) || bound(c, i) <= c->tolerance;
        if (c->done[i]) lw_fill(c->n, 0.0, c->d + i * c->n);
    }
}

static bool all_done(const many *c)
{
    for (int i = 0; i < c->k; i++)
        if (!c->done[i]) return false;
    return true;
}

/* x = 0 at the start. Returns the steps; c->done says which have converged. */
static int64_t iterate(many *c, int64_t most, const lw_watch *watch)
{
    int64_t steps = 0;
    lw_fill(c->n * c->k, 0.0, c->x);
    make_gradient(c, c->gamma);
    lw_copy(c->n * c->k, c->s, c->d);
    for (int i = 0; i < c->k; i++) {
        c->inverse[i] = 0.0;
        c->done[i] = !(c->gamma[i] > 0.0);
    }
    for (; steps < most && !all_done(c) && !lw_watch_cancelled(watch); steps++) step(c);
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

static void clear(many *c)
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

static lw_status set_up(many *c, lw_krylov *self, double lambda, lw_error *error)
{
    lw_system *system = self->base.system;
    memset(c, 0, sizeof *c);
    if (only_scales(self) && lambda > 0.0) {
        c->op = self->op;
        c->diagonal = system->penalty_diagonal;
    } else if (!self->damped && lambda == 0.0) {
        c->op = self->op;
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
    c->n = system->columns;
    c->p = lambda > 0.0 ? system->penalty_rows : 0;
    size_t m = (size_t)c->m, n = (size_t)c->n, p = (size_t)c->p;
    c->r1 = lw_alloc(m * SIDES, sizeof(double));
    c->q1 = lw_alloc(m * SIDES, sizeof(double));
    c->r2 = lw_alloc(p * SIDES, sizeof(double));
    c->q2 = lw_alloc(p * SIDES, sizeof(double));
    c->x = lw_alloc(n * SIDES, sizeof(double));
    c->s = lw_alloc(n * SIDES, sizeof(double));
    c->d = lw_alloc(n * SIDES, sizeof(double));
    c->t = lw_alloc(n, sizeof(double));
    if (c->r1 == NULL || c->q1 == NULL || c->r2 == NULL || c->q2 == NULL || c->x == NULL || c->s == NULL ||
        c->d == NULL || c->t == NULL)
        return lw_fail_memory(error, "right-hand sides", (m + p + 2 * n) * 2 * SIDES * sizeof(double));
    return LW_OK;
}

/* z of side i, from the coordinates of the iteration. */
static void read_model(const many *c, int i, double *z)
{
    for (int64_t j = 0; j < c->n; j++)
        z[j] = c->diagonal != NULL ? c->x[i * c->n + j] / c->diagonal[j] : c->x[i * c->n + j];
}

lw_status lw_krylov_solve_many(lw_decomposition *base, double lambda, int64_t k, const double *f,
                               const double *g, const double *h, double *r, double *z, double *u,
                               lw_error *error)
{
    lw_krylov *self = (lw_krylov *)base;
    many c;
    (void)h; /* an iterative engine takes no conditions */
    (void)u;
    lw_status status = set_up(&c, self, lambda, error), worst = LW_OK;
    for (int64_t at = 0; at < k && status == LW_OK; at += SIDES) {
        int64_t stacked = c.m + c.p;
        c.k = k - at < SIDES ? (int)(k - at) : SIDES;
        c.g = g != NULL ? g + at * c.n : NULL;
        lw_fill(c.m * c.k, 0.0, c.r1);
        lw_fill(c.p * c.k, 0.0, c.r2);
        for (int i = 0; i < c.k && f != NULL; i++) {
            lw_copy(c.m, f + (at + i) * stacked, c.r1 + i * c.m);
            lw_copy(c.p, f + (at + i) * stacked + c.m, c.r2 + i * c.p);
        }
        iterate(&c, self->most, &self->watch);
        if (!all_done(&c)) worst = LW_NOT_CONVERGED;
        for (int i = 0; i < c.k; i++) {
            if (z != NULL) read_model(&c, i, z + (at + i) * c.n);
            if (r == NULL) continue;
            lw_copy(c.m, c.r1 + i * c.m, r + (at + i) * stacked);
            lw_copy(c.p, c.r2 + i * c.p, r + (at + i) * stacked + c.m);
        }
    }
    clear(&c);
    return status < 0 ? status : worst;
}

lw_status lw_krylov_stacked(lw_krylov *self, double lambda, const lw_watch *watch, double *z,
                            lw_iterate_result *out, lw_error *error)
{
    many c;
    memset(out, 0, sizeof *out);
    lw_status status = set_up(&c, self, lambda, error);
    if (status == LW_OK) {
        c.k = 1;
        lw_copy(c.m, self->base.system->b, c.r1);
        lw_fill(c.p, 0.0, c.r2);
        out->steps = iterate(&c, self->most, watch);
        read_model(&c, 0, z);
        out->gradient = sqrt(c.gamma[0]);
        out->error_bound = c.gamma[0] > 0.0 ? bound(&c, 0) : 0.0;
        out->cond_A = (double)NAN;
        out->stop = out->steps == 0           ? LW_STOP_ZERO
                    : out->steps < self->most ? LW_STOP_TOLERANCE
                                              : LW_STOP_STEPS;
        if (!c.done[0] && lw_watch_cancelled(watch)) out->stop = LW_STOP_INTERRUPTED;
        if (!c.done[0]) status = out->stop == LW_STOP_INTERRUPTED ? LW_INTERRUPTED : LW_NOT_CONVERGED;
    }
    clear(&c);
    return status;
}
