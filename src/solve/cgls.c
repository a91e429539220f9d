/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "solve/cgls.h"

#include "core/memory.h"
#include "matrix/vector.h"
#include "solve/krylov.h"

#include <math.h>
#include <string.h>

#define GRADIENT_ANEW 32

/*   r = b - A x            residual                 q = A p
 *   s = A'r - damp^2 x     gradient                 gamma = ||s||^2
 *   p                      direction                delta = ||q||^2 + damp^2 ||p||^2
 *   a = gamma / delta      step length              beta = gamma_new / gamma (Fletcher-Reeves) */
typedef struct cgls {
    double *r, *s, *p, *q, *t; /* t: A'q with row fusion, A s with column fusion */
    double *old;               /* gradient before the step, kept for an observer only */
    double damp2, gamma, a, beta;
    double T_trace;  /* trace of the tridiagonal matrix of the step lengths, about ||[A; damp I]||_F^2 */
    double D_square; /* sum of ||p||^2 / delta: ||[A; damp I]^-1||_F^2 as the directions show it */
} cgls;

/* s <- A'r - damp^2 x without fusion, or anew. */
static void make_gradient(cgls *c, lw_operator *op, const double *x)
{
    lw_apply_transposed(op, 1, c->r, c->s);
    if (c->damp2 > 0.0) lw_add_scaled(op->columns, -c->damp2, x, c->s, op->team);
}

/* s <- A'r - damp^2 x and t <- A s in one pass: A'r - beta v with v = x, beta = damp^2. */
static void make_gradient_ahead(cgls *c, lw_operator *op, const double *x)
{
    double square;
    lw_copy(op->columns, x, c->s);
    lw_step_columns(op, 1, c->r, &c->damp2, c->s, c->t, &square);
}

static void start(cgls *c, lw_operator *op, const double *b, const double *x, bool zero)
{
    int64_t m = op->rows, n = op->columns;
    if (zero) {
        lw_copy(m, b, c->r);
    } else {
        lw_apply(op, 1, x, c->r);
        lw_scale_add(m, 1.0, b, -1.0, c->r, op->team);
    }
    if (op->fusion == LW_FUSED_COLUMNS) {
        make_gradient_ahead(c, op, x);
        lw_copy(m, c->t, c->q);
    } else {
        make_gradient(c, op, x);
    }
    lw_copy(n, c->s, c->p);
    c->gamma = lw_dot(n, c->s, c->s, op->team);
}

/* q = A p (and t = A'q in the same pass); returns ||q||^2. With column fusion q came by recurrence. */
static double forward(cgls *c, lw_operator *op)
{
    double square, none = 0.0;
    if (op->fusion == LW_FUSED_ROWS) {
        lw_fill(op->rows, 0.0, c->q);
        lw_step_rows(op, 1, c->p, &none, c->q, c->t, &square);
        return square;
    }
    if (op->fusion == LW_FUSED_NONE) lw_apply(op, 1, c->p, c->q);
    return lw_dot(op->rows, c->q, c->q, op->team);
}

static void gradient_after(cgls *c, lw_operator *op, const double *b, const double *x, int64_t step)
{
    if (op->fusion == LW_FUSED_COLUMNS) {
        make_gradient_ahead(c, op, x);
    } else if (op->fusion == LW_FUSED_ROWS && step % GRADIENT_ANEW != 0) {
        lw_add_scaled(op->columns, -c->a, c->t, c->s, op->team); /* s <- s - a (A'q + damp^2 p) */
        if (c->damp2 > 0.0) lw_add_scaled(op->columns, -c->a * c->damp2, c->p, c->s, op->team);
    } else {
        if (op->fusion == LW_FUSED_ROWS) {
            lw_apply(op, 1, x, c->r);
            lw_scale_add(op->rows, 1.0, b, -1.0, c->r, op->team);
        }
        make_gradient(c, op, x);
    }
}

/* One step; false when the directions are exhausted. */
static bool step(cgls *c, lw_operator *op, const double *b, double *x, int64_t number)
{
    int64_t m = op->rows, n = op->columns;
    double square = forward(c, op), p_square = lw_dot(n, c->p, c->p, op->team),
           delta = square + c->damp2 * p_square;
    if (!(delta > 0.0) || !isfinite(delta)) return false;
    double before = c->a > 0.0 ? c->beta / c->a : 0.0;
    c->a = c->gamma / delta;
    c->T_trace += 1.0 / c->a + before; /* T_kk = 1 / a_k + beta_(k-1) / a_(k-1) */
    c->D_square += p_square / delta;
    lw_add_scaled(n, c->a, c->p, x, op->team);     /* x <- x + a p */
    lw_add_scaled(m, -c->a, c->q, c->r, op->team); /* r <- r - a q */
    if (c->old != NULL) lw_copy(n, c->s, c->old);
    gradient_after(c, op, b, x, number);
    double gamma = lw_dot(n, c->s, c->s, op->team);
    c->beta = gamma / c->gamma;
    c->gamma = gamma;
    return true;
}

/* p <- s + beta p, and with column fusion q = A p <- A s + beta q. */
static void turn(cgls *c, lw_operator *op)
{
    lw_scale_add(op->columns, 1.0, c->s, c->beta, c->p, op->team);
    if (op->fusion == LW_FUSED_COLUMNS) lw_scale_add(op->rows, 1.0, c->t, c->beta, c->q, op->team);
}

static void observe(const cgls *c, const lw_operator *op, const lw_iterate_options *options, int64_t number,
                    double gamma_old, const double *x)
{
    double x_norm = lw_norm(op->columns, x, op->team), r_norm = lw_norm(op->rows, c->r, op->team);
    lw_iteration seen = {.step = number, .alpha = c->a, .beta = c->beta, .gradient = sqrt(c->gamma)};
    seen.polak_ribiere = (c->gamma - lw_dot(op->columns, c->s, c->old, op->team)) / gamma_old;
    seen.residual = hypot(r_norm, sqrt(c->damp2) * x_norm);
    seen.x = x;
    seen.g = c->s;
    seen.direction = c->p;
    options->observe(options->observe_state, &seen);
}

static void iterate(cgls *c, lw_operator *op, const double *b, const lw_iterate_options *options,
                    lw_progress *p, double *x, lw_iterate_result *out)
{
    int64_t most = lw_iterate_most(options, op);
    out->stop = LW_STOP_STEPS;
    while (out->steps < most) {
        double gamma_old = c->gamma;
        if (!(c->gamma > 0.0) || !step(c, op, b, x, out->steps + 1)) {
            out->stop = LW_STOP_BREAKDOWN;
            return;
        }
        out->steps++;
        if (options->observe != NULL) observe(c, op, options, out->steps, gamma_old, x);
        p->gradient = sqrt(c->gamma);
        p->residual = lw_norm(op->rows, c->r, op->team);
        p->norm = lw_norm(op->columns, x, op->team);
        p->norm_A = sqrt(c->T_trace);
        p->cond_A = p->norm_A * sqrt(c->D_square);
        if (lw_progress_done(p, &out->stop)) return;
        if (lw_watch_cancelled(options->watch)) {
            out->stop = LW_STOP_INTERRUPTED;
            return;
        }
        lw_iterate_tick(options, "cgls", out->steps, p);
        turn(c, op);
    }
}

static lw_status run(cgls *c, lw_operator *op, const double *b, const lw_iterate_options *options, double *x,
                     lw_iterate_result *out)
{
    lw_progress p = {.damp = options->damp, .tolerance = lw_iterate_tolerance(options)};
    if (!options->start) lw_fill(op->columns, 0.0, x);
    start(c, op, b, x, !options->start);
    p.norm_b = lw_norm(op->rows, b, op->team);
    p.gradient = sqrt(c->gamma);
    p.residual = lw_norm(op->rows, c->r, op->team);
    p.norm = lw_norm(op->columns, x, op->team);
    bool there = options->start && p.damp > 0.0 && lw_progress_bound(&p) <= p.tolerance;
    if (there)
        out->stop = LW_STOP_TOLERANCE;
    else if (c->gamma > 0.0)
        iterate(c, op, b, options, &p, x, out);
    else
        out->stop = LW_STOP_ZERO;
    lw_iterate_finish(op, b, x, c->r, c->s, &p, out);
    return lw_iterate_status(out, &p);
}

lw_status lw_cgls(lw_operator *op, const double *b, const lw_iterate_options *options, double *x,
                  lw_iterate_result *out, lw_error *error)
{
    size_t m = (size_t)op->rows, n = (size_t)op->columns;
    size_t side = op->fusion == LW_FUSED_ROWS ? n : op->fusion == LW_FUSED_COLUMNS ? m : 0;
    cgls c = {.damp2 = options->damp * options->damp};
    lw_status status = LW_OK;
    memset(out, 0, sizeof *out);
    c.r = lw_alloc(m, sizeof(double));
    c.q = lw_alloc(m, sizeof(double));
    c.s = lw_alloc(n, sizeof(double));
    c.p = lw_alloc(n, sizeof(double));
    c.t = lw_alloc(side, sizeof(double));
    if (options->observe != NULL) c.old = lw_alloc(n, sizeof(double));
    if (c.r == NULL || c.q == NULL || c.s == NULL || c.p == NULL || c.t == NULL ||
        (options->observe != NULL && c.old == NULL))
        status = lw_fail_memory(error, "cgls", (2 * m + 3 * n) * sizeof(double));
    else
        status = run(&c, op, b, options, x, out);
    lw_free(c.r);
    lw_free(c.q);
    lw_free(c.s);
    lw_free(c.p);
    lw_free(c.t);
    lw_free(c.old);
    return status;
}

static lw_status decompose(lw_system *system, double lambda, const lw_solve_options *options,
                           const lw_watch *watch, lw_decomposition **out, lw_error *error)
{
    return lw_krylov_decompose(system, lambda, options, "cgls", lw_cgls, watch, out, error);
}

const lw_engine lw_engine_cgls = {
    .name = "cgls",
    .summary = "iterative: conjugate gradients for least squares (Hestenes & Stiefel 1952)",
    .abilities = LW_SWEEPS,
    .decompose = decompose,
};
