/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "solve/lsqr.h"

#include "core/memory.h"
#include "matrix/vector.h"
#include "solve/golub_kahan.h"
#include "solve/krylov.h"

#include <math.h>
#include <string.h>

/* Symbols of Paige & Saunders (1982); the index of the step is left out.
 *   rho_bar, phi_bar   last diagonal entry and right-hand side of the factorization so far
 *   c1, s1, psi        rotation that removes the damping row, and what it leaves in the residual
 *   c, s               rotation that removes beta
 *   w                  search direction; x = D f, D = V R^-1 has the columns w / rho
 *   c2, s2, gamma, z   rotations from the right, for the norm of x */
typedef struct lsqr {
    double rho_bar, phi_bar, rho, phi, theta;
    double psi_square; /* sum of psi^2 */
    double c2, s2, z, norm_square;
    double D_square; /* ||D||_F^2 */
    double *w, *r, *g;
} lsqr;

static void rotate(lsqr *s, double damp, double alpha, double beta, lw_progress *p)
{
    double rho_bar1 = hypot(s->rho_bar, damp), psi = damp / rho_bar1 * s->phi_bar;
    s->phi_bar *= s->rho_bar / rho_bar1;
    s->psi_square += psi * psi;

    double rho = hypot(rho_bar1, beta), c = rho_bar1 / rho, sine = beta / rho;
    s->rho = rho;
    s->theta = sine * alpha;
    s->rho_bar = -c * alpha;
    s->phi = c * s->phi_bar;
    s->phi_bar = sine * s->phi_bar;

    double delta = s->s2 * rho, gamma_bar = -s->c2 * rho, side = s->phi - delta * s->z;
    double z_bar = side / gamma_bar, gamma = hypot(gamma_bar, s->theta);
    p->norm = sqrt(s->norm_square + z_bar * z_bar); /* ||x|| */
    s->c2 = gamma_bar / gamma;
    s->s2 = s->theta / gamma;
    s->z = side / gamma;
    s->norm_square += s->z * s->z;

    double objective = s->phi_bar * s->phi_bar + s->psi_square, penalty = damp * damp * p->norm * p->norm;
    p->residual = objective > penalty ? sqrt(objective - penalty) : 0.0;
    p->gradient = alpha * fabs(sine * s->phi); /* ||A'r - damp^2 x|| = alpha |s phi| */
}

static void update(lsqr *s, const lw_golub_kahan *gk, bool undamped, double *x)
{
    int64_t n = gk->op->columns;
    lw_team *team = gk->op->team;
    if (undamped) {
        double norm = lw_norm(n, s->w, team) / s->rho;
        s->D_square += norm * norm;
    }
    lw_add_scaled(n, s->phi / s->rho, s->w, x, team); /* x <- x + (phi / rho) w */
    if (!gk->ended[0])                                /* w <- v - (theta / rho) w */
        lw_scale_add(n, 1.0 / gk->v_scale[0], gk->v, -s->theta / s->rho, s->w, team);
}

static void iterate(lsqr *s, lw_golub_kahan *gk, const lw_iterate_options *options, int64_t most,
                    lw_progress *p, double *x, lw_iterate_result *out)
{
    out->stop = LW_STOP_STEPS;
    while (out->steps < most) {
        lw_golub_kahan_step(gk);
        rotate(s, p->damp, gk->alpha[0], gk->beta[0], p);
        update(s, gk, p->damp == 0.0, x);
        p->norm_A = sqrt(gk->square[0]);
        p->cond_A = p->norm_A * sqrt(s->D_square);
        out->steps++;
        if (options->observe != NULL) {
            lw_iteration seen = {
                .step = out->steps, .alpha = gk->alpha[0], .beta = gk->beta[0], .polak_ribiere = (double)NAN};
            seen.gradient = p->gradient;
            seen.residual = sqrt(s->phi_bar * s->phi_bar + s->psi_square);
            seen.x = x;
            options->observe(options->observe_state, &seen);
        }
        if (gk->ended[0]) {
            out->stop = LW_STOP_BREAKDOWN;
            return;
        }
        if (lw_progress_done(p, &out->stop)) return;
        if (lw_watch_cancelled(options->watch)) {
            out->stop = LW_STOP_INTERRUPTED;
            return;
        }
        lw_iterate_tick(options, "lsqr", out->steps, p);
    }
}

lw_status lw_lsqr(lw_operator *op, const double *b, const lw_iterate_options *options, double *x,
                  lw_iterate_result *out, lw_error *error)
{
    size_t m = (size_t)op->rows, n = (size_t)op->columns;
    lw_golub_kahan gk;
    lsqr s = {.c2 = -1.0};
    lw_progress p = {.damp = options->damp, .tolerance = lw_iterate_tolerance(options)};
    memset(out, 0, sizeof *out);
    lw_status status = lw_golub_kahan_start(&gk, op, 1, b, error);
    if (status != LW_OK) return status;
    s.w = lw_alloc(n, sizeof(double));
    s.r = lw_alloc(m, sizeof(double));
    s.g = lw_alloc(n, sizeof(double));
    if (s.w == NULL || s.r == NULL || s.g == NULL) {
        status = lw_fail_memory(error, "lsqr", (m + 2 * n) * sizeof(double));
    } else {
        lw_fill((int64_t)n, 0.0, x);
        p.norm_b = gk.beta[0];
        if (gk.ended[0]) {
            out->stop = LW_STOP_ZERO;
        } else {
            s.rho_bar = gk.alpha[0];
            s.phi_bar = gk.beta[0];
            lw_golub_kahan_direction(&gk, 0, s.w);
            iterate(&s, &gk, options, lw_iterate_most(options, op), &p, x, out);
        }
        lw_iterate_finish(op, b, x, s.r, s.g, &p, out);
        status = lw_iterate_status(out, &p);
    }
    lw_free(s.w);
    lw_free(s.r);
    lw_free(s.g);
    lw_golub_kahan_clear(&gk);
    return status;
}

static lw_status decompose(lw_system *system, double lambda, const lw_solve_options *options,
                           const lw_watch *watch, lw_decomposition **out, lw_error *error)
{
    return lw_krylov_decompose(system, lambda, options, "lsqr", lw_lsqr, watch, out, error);
}

const lw_engine lw_engine_lsqr = {
    .name = "lsqr",
    .summary = "iterative: bidiagonalization of the matrix (Paige & Saunders 1982)",
    .abilities = LW_SWEEPS,
    .decompose = decompose,
};
