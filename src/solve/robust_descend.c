/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Robust misfits by nonlinear conjugate gradients on the operator: one product with A and one with A' a
 * step, trials along a line from r and A d alone. F(z) = sum phi_c(r_i) / c' + lambda^2 ||L z||^2 with r =
 * A z - b; c' = 1 (huber) or c (l1, whose c falls until it no longer matters). */
#include "core/memory.h"
#include "matrix/vector.h"
#include "solve/robust.h"

#include <math.h>

typedef struct loss {
    const lw_system *system;
    lw_operator *A;
    double lambda, c, divisor;
    lw_team *team;
    double *r, *rd; /* rows: residual at x, and A d */
    double *p, *pd; /* penalty rows: L x, L d */
    double *g;      /* columns */
} loss;

/* phi_c(r) and its derivative. */
static double phi(double r, double c, double *slope)
{
    double size = fabs(r);
    if (size <= c) {
        *slope = 2 * r;
        return r * r;
    }
    *slope = copysign(2 * c, r);
    return 2 * c * size - c * c;
}

static double value(void *state, const double *x, double *gradient)
{
    loss *l = state;
    const lw_system *s = l->system;
    double sum = 0, slope;
    lw_apply(l->A, 1, x, l->r);
    for (int64_t i = 0; i < s->rows; i++) {
        l->r[i] -= s->b[i];
        sum += phi(l->r[i], l->c, &slope);
        l->rd[i] = slope / l->divisor;
    }
    sum /= l->divisor;
    lw_apply_transposed(l->A, 1, l->rd, gradient);
    if (l->lambda > 0) {
        double square = l->lambda * l->lambda;
        lw_system_penalize(s, x, l->p);
        sum += square * lw_dot(s->penalty_rows, l->p, l->p, l->team);
        lw_system_penalize_transposed(s, l->p, l->g);
        lw_add_scaled(s->columns, 2 * square, l->g, gradient, l->team);
    }
    return sum;
}

static void aim(void *state, const double *x, const double *d)
{
    loss *l = state;
    (void)x; /* r and p stand for x already: value() came last at this point */
    lw_apply(l->A, 1, d, l->rd);
    if (l->lambda > 0) lw_system_penalize(l->system, d, l->pd);
}

static double along(void *state, double alpha, double *slope)
{
    loss *l = state;
    double sum = 0, derivative = 0, part;
    for (int64_t i = 0; i < l->system->rows; i++) {
        sum += phi(l->r[i] + alpha * l->rd[i], l->c, &part);
        derivative += part * l->rd[i];
    }
    sum /= l->divisor;
    derivative /= l->divisor;
    for (int64_t i = 0; l->lambda > 0 && i < l->system->penalty_rows; i++) {
        double p = l->p[i] + alpha * l->pd[i];
        sum += l->lambda * l->lambda * p * p;
        derivative += 2 * l->lambda * l->lambda * p * l->pd[i];
    }
    *slope = derivative;
    return sum;
}

/* Minimises at one c. */
static lw_status descend_at(loss *l, double c, const lw_robust_options *options, double tolerance,
                            const lw_watch *watch, double *z, int64_t *steps, lw_error *error)
{
    lw_objective objective = {
        .n = l->system->columns, .state = l, .value = value, .aim = aim, .along = along};
    lw_cg_options cg = {.rule = options->rule, .tolerance = tolerance, .curvature = 0.1};
    lw_cg_result result;
    l->c = c;
    l->divisor = options->misfit == LW_MISFIT_L1 ? c : 1;
    lw_status status = lw_nonlinear_cg(&objective, &cg, z, &result, watch, error);
    *steps += result.steps;
    return status;
}

/* Huber with a scale that is estimated: c and z in turn until the scale stands still. */
static lw_status descend_huber(loss *l, const lw_robust_options *options, const lw_watch *watch, double *z,
                               double *scale, int64_t *steps, lw_error *error)
{
    double constant = options->constant > 0 ? options->constant : LW_HUBER_CONSTANT, before = 0;
    lw_status status = LW_OK;
    if (options->scale_stated) return descend_at(l, constant, options, 1e-10, watch, z, steps, error);
    for (int round = 0; round < 200 && status >= LW_OK && status != LW_INTERRUPTED; round++) {
        value(l, z, l->pd);
        status = lw_robust_scale(l->system->rows, l->r, l->system->row_factor, scale, error);
        if (status != LW_OK || fabs(*scale - before) <= 1e-9 * *scale) return status;
        before = *scale;
        status = descend_at(l, constant * *scale, options, 1e-10, watch, z, steps, error);
    }
    return status == LW_OK ? LW_NOT_CONVERGED : status;
}

static lw_status descend_l1(loss *l, const lw_robust_options *options, const lw_watch *watch, double *z,
                            double *scale, int64_t *steps, lw_error *error)
{
    value(l, z, l->pd);
    lw_status status = lw_robust_scale(l->system->rows, l->r, l->system->row_factor, scale, error),
              worst = LW_OK;
    for (double c = *scale; status >= LW_OK && status != LW_INTERRUPTED && c > 1e-7 * *scale && c > 0;
         c *= 0.2) {
        status = descend_at(l, c, options, 1e-8, watch, z, steps, error);
        worst = status > LW_OK ? status : LW_OK;
    }
    return status < LW_OK || status == LW_INTERRUPTED ? status : worst;
}

lw_status lw_robust_descend(lw_system *system, double lambda, const lw_robust_options *options,
                            const lw_watch *watch, double *z, double *scale, int64_t *steps, lw_error *error)
{
    loss l = {.system = system, .lambda = lambda, .c = 1, .divisor = 1, .team = lw_watch_team(watch)};
    lw_product_options product = {0};
    int64_t rows = system->rows, p = system->penalty_rows, n = system->columns;
    lw_status status = lw_system_operator(system, &product, watch, &l.A, error);
    l.r = LW_NEW_ARRAY(double, 2 * rows);
    l.p = LW_NEW_ARRAY(double, p);
    l.pd = LW_NEW_ARRAY(double, p > n ? p : n);
    l.g = LW_NEW_ARRAY(double, n);
    if (status == LW_OK && !(l.r && l.p && l.pd && l.g))
        status = lw_fail_memory(error, "the robust misfit", (size_t)(rows + p + n) * 16);
    if (status == LW_OK) {
        l.rd = l.r + rows;
        *steps = 0;
        *scale = 1;
        status = options->misfit == LW_MISFIT_L1 ? descend_l1(&l, options, watch, z, scale, steps, error)
                                                 : descend_huber(&l, options, watch, z, scale, steps, error);
    }
    lw_operator_free(l.A);
    lw_free(l.r);
    lw_free(l.p);
    lw_free(l.pd);
    lw_free(l.g);
    return status;
}
