/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "solve/lsmr.h"

#include "core/memory.h"
#include "matrix/vector.h"
#include "solve/golub_kahan.h"
#include "solve/krylov.h"

#include <math.h>
#include <string.h>

/* Symbols of Fong & Saunders (2011); the index of the step is left out, "last" is the step before.
 *   alpha_bar, rho, theta        QR of the bidiagonal B (with the damping rotated in first)
 *   rho_bar, theta_bar           QR of R'
 *   zeta, zeta_bar               x = W zeta; |zeta_bar| = ||A'r - damp^2 x||
 *   h, h_bar                     directions
 *   beta_dd, beta_d, tau_t, ...  rotations for the norm of the residual, section 5.1 there */
typedef struct lsmr {
    double alpha_bar, rho, rho_bar, c_bar, s_bar, zeta, zeta_bar;
    double theta, x_step, h_bar_step, h_step;
    double beta_dd, beta_d, rho_d, tau_t, theta_t, d;
    double largest, smallest; /* of the rho_bar: estimates of the singular values' range */
    double *h, *h_bar, *r, *g;
} lsmr;

static void rotate_residual(lsmr *s, double c_hat, double s_hat, double c, double sine, double theta_bar,
                            double zeta_last, lw_progress *p)
{
    double acute = c_hat * s->beta_dd, check = -s_hat * s->beta_dd, hat = c * acute;
    s->beta_dd = -sine * acute;
    double theta_last = s->theta_t, rho_t = hypot(s->rho_d, theta_bar), c_t = s->rho_d / rho_t,
           s_t = theta_bar / rho_t;
    s->theta_t = s_t * s->rho_bar;
    s->rho_d = c_t * s->rho_bar;
    s->beta_d = -s_t * s->beta_d + c_t * hat;
    s->tau_t = (zeta_last - theta_last * s->tau_t) / rho_t;
    double tau_d = (s->zeta - s->theta_t * s->tau_t) / s->rho_d;
    s->d += check * check;
    double miss = s->beta_d - tau_d;
    p->residual = sqrt(s->d + miss * miss + s->beta_dd * s->beta_dd); /* of [A; damp I] */
}

static void rotate(lsmr *s, double damp, double alpha, double beta, bool first, lw_progress *p)
{
    double alpha_hat = hypot(s->alpha_bar, damp), c_hat = s->alpha_bar / alpha_hat, s_hat = damp / alpha_hat;
    double rho_last = s->rho, rho_bar_last = s->rho_bar, zeta_last = s->zeta;

    s->rho = hypot(alpha_hat, beta);
    double c = alpha_hat / s->rho, sine = beta / s->rho;
    s->theta = sine * alpha;
    s->alpha_bar = c * alpha;

    double theta_bar = s->s_bar * s->rho, rho_temp = s->c_bar * s->rho;
    s->rho_bar = hypot(rho_temp, s->theta);
    s->c_bar = rho_temp / s->rho_bar;
    s->s_bar = s->theta / s->rho_bar;
    s->zeta = s->c_bar * s->zeta_bar;
    s->zeta_bar = -s->s_bar * s->zeta_bar;

    s->h_bar_step = theta_bar * s->rho / (rho_last * rho_bar_last);
    s->x_step = s->zeta / (s->rho * s->rho_bar);
    s->h_step = s->theta / s->rho;
    rotate_residual(s, c_hat, s_hat, c, sine, theta_bar, zeta_last, p);
    p->gradient = fabs(s->zeta_bar);

    if (!first) {
        s->largest = fmax(s->largest, rho_bar_last);
        s->smallest = fmin(s->smallest, rho_bar_last);
    }
    p->cond_A = fmax(s->largest, rho_temp) / fmin(s->smallest, rho_temp);
}

static void update(lsmr *s, const lw_golub_kahan *gk, double *x)
{
    int64_t n = gk->op->columns;
    lw_team *team = gk->op->team;
    lw_scale_add(n, 1.0, s->h, -s->h_bar_step, s->h_bar,
                 team); /* h_bar <- h - (theta_bar rho / (rho rho_bar)_last) h_bar */
    lw_add_scaled(n, s->x_step, s->h_bar, x, team); /* x <- x + (zeta / (rho rho_bar)) h_bar */
    if (!gk->ended[0])                              /* h <- v - (theta / rho) h */
        lw_scale_add(n, 1.0 / gk->v_scale[0], gk->v, -s->h_step, s->h, team);
}

static void iterate(lsmr *s, lw_golub_kahan *gk, const lw_iterate_options *options, int64_t most,
                    lw_progress *p, double *x, lw_iterate_result *out)
{
    out->stop = LW_STOP_STEPS;
    while (out->steps < most) {
        lw_golub_kahan_step(gk);
        rotate(s, p->damp, gk->alpha[0], gk->beta[0], out->steps == 0, p);
        update(s, gk, x);
        out->steps++;
        p->norm_A = sqrt(gk->square[0]);
        p->norm = lw_norm(gk->op->columns, x, gk->op->team);
        if (options->observe != NULL) {
            lw_iteration seen = {
                .step = out->steps, .alpha = gk->alpha[0], .beta = gk->beta[0], .polak_ribiere = (double)NAN};
            seen.gradient = p->gradient;
            seen.residual = p->residual;
            seen.x = x;
            options->observe(options->observe_state, &seen);
        }
        double square = p->residual * p->residual - p->damp * p->damp * p->norm * p->norm;
        p->residual = square > 0.0 ? sqrt(square) : 0.0;
        if (gk->ended[0]) {
            out->stop = LW_STOP_BREAKDOWN;
            return;
        }
        if (lw_progress_done(p, &out->stop)) return;
        if (lw_watch_cancelled(options->watch)) {
            out->stop = LW_STOP_INTERRUPTED;
            return;
        }
        lw_iterate_tick(options, "lsmr", out->steps, p);
    }
}

static lw_status run(lsmr *s, lw_golub_kahan *gk, const double *b, const lw_iterate_options *options,
                     double *x, lw_iterate_result *out)
{
    lw_operator *op = gk->op;
    lw_progress p = {
        .damp = options->damp, .tolerance = lw_iterate_tolerance(options), .norm_b = gk->beta[0]};
    lw_fill(op->columns, 0.0, x);
    if (gk->ended[0]) {
        out->stop = LW_STOP_ZERO;
    } else {
        s->alpha_bar = gk->alpha[0];
        s->zeta_bar = gk->alpha[0] * gk->beta[0];
        s->beta_dd = gk->beta[0];
        lw_golub_kahan_direction(gk, 0, s->h);
        iterate(s, gk, options, lw_iterate_most(options, op), &p, x, out);
    }
    lw_iterate_finish(op, b, x, s->r, s->g, &p, out);
    return lw_iterate_status(out, &p);
}

lw_status lw_lsmr(lw_operator *op, const double *b, const lw_iterate_options *options, double *x,
                  lw_iterate_result *out, lw_error *error)
{
    size_t m = (size_t)op->rows, n = (size_t)op->columns;
    lw_golub_kahan gk;
    lsmr s = {.rho = 1.0, .rho_bar = 1.0, .c_bar = 1.0, .rho_d = 1.0, .smallest = (double)INFINITY};
    memset(out, 0, sizeof *out);
    lw_status status = lw_golub_kahan_start(&gk, op, 1, b, error);
    if (status != LW_OK) return status;
    s.h = lw_alloc(n, sizeof(double));
    s.h_bar = lw_alloc_zero(n, sizeof(double));
    s.r = lw_alloc(m, sizeof(double));
    s.g = lw_alloc(n, sizeof(double));
    if (s.h == NULL || s.h_bar == NULL || s.r == NULL || s.g == NULL)
        status = lw_fail_memory(error, "lsmr", (m + 3 * n) * sizeof(double));
    else
        status = run(&s, &gk, b, options, x, out);
    lw_free(s.h);
    lw_free(s.h_bar);
    lw_free(s.r);
    lw_free(s.g);
    lw_golub_kahan_clear(&gk);
    return status;
}

static lw_status decompose(lw_system *system, double lambda, const lw_solve_options *options,
                           const lw_watch *watch, lw_decomposition **out, lw_error *error)
{
    return lw_krylov_decompose(system, lambda, options, "lsmr", lw_lsmr, watch, out, error);
}

const lw_engine lw_engine_lsmr = {
    .name = "lsmr",
    .summary = "iterative: as lsqr, with a gradient that falls at every step (Fong & Saunders 2011)",
    .abilities = LW_SWEEPS,
    .decompose = decompose,
};
