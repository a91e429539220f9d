/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "solve/projected.h"

#include "core/memory.h"

#include <math.h>
#include <string.h>

#define LANES 8

typedef double lanes[LANES];

lw_status lw_bidiagonal_add(lw_bidiagonal *B, double alpha, double beta, lw_error *error)
{
    int64_t count = B->alpha == NULL ? 0 : B->k + 1;
    if (count >= B->room) {
        int64_t room = B->room + B->room / 2 + 256;
        double *a = lw_resize(B->alpha, (size_t)room, sizeof(double));
        if (a == NULL) return lw_fail_memory(error, "the bidiagonal matrix", (size_t)room * sizeof(double));
        B->alpha = a;
        double *b = lw_resize(B->beta, (size_t)room, sizeof(double));
        if (b == NULL) return lw_fail_memory(error, "the bidiagonal matrix", (size_t)room * sizeof(double));
        B->beta = b;
        B->room = room;
    }
    B->alpha[count] = alpha;
    B->beta[count] = beta;
    B->k = count;
    return LW_OK;
}

void lw_bidiagonal_clear(lw_bidiagonal *B)
{
    lw_free(B->alpha);
    lw_free(B->beta);
    memset(B, 0, sizeof *B);
}

/* v <- B'B v / ||.|| from v = e_1, which is never orthogonal to the leading right singular vector. */
double lw_bidiagonal_largest(const lw_bidiagonal *B)
{
    int64_t k = B->k;
    if (k < 1) return B->alpha != NULL ? B->alpha[0] : 0.0;
    double *v = lw_alloc_zero((size_t)k + 1, sizeof(double));
    double *u = lw_alloc((size_t)k + 1, sizeof(double));
    double largest = 0.0;
    if (v != NULL && u != NULL) {
        v[0] = 1.0;
        for (int sweep = 0; sweep < 500; sweep++) {
            for (int64_t i = 0; i <= k; i++)
                u[i] = (i < k ? B->alpha[i] * v[i] : 0.0) + (i > 0 ? B->beta[i] * v[i - 1] : 0.0);
            double square = 0.0, before = largest;
            for (int64_t i = 0; i < k; i++) {
                v[i] = B->alpha[i] * u[i] + B->beta[i + 1] * u[i + 1];
                square += v[i] * v[i];
            }
            double norm = sqrt(square);
            largest = sqrt(norm);
            if (!(norm > 0.0) || largest - before <= 1e-7 * largest) break;
            for (int64_t i = 0; i < k; i++) v[i] /= norm;
        }
    }
    lw_free(v);
    lw_free(u);
    return largest;
}

/* Rotations and vectors of one group of dampings. */
typedef struct group {
    lanes *rho, *theta, *phi, *y; /* k + 1 each: rho_i, theta_i (above rho_i), phi_i, y_i */
    lanes lambda, objective, tail;
} group;

/* QR of [B; lambda I]: damping row into rho_bar, then beta_{i+1}. The residual keeps psi_i and phi_bar_{k+1}.
 */
static void factor(const lw_bidiagonal *B, group *g)
{
    lanes rho_bar, phi_bar, psi_square = {0};
    for (int l = 0; l < LANES; l++) {
        rho_bar[l] = B->alpha[0];
        phi_bar[l] = B->beta[0];
        g->theta[0][l] = 0.0;
    }
    for (int64_t i = 0; i < B->k; i++) {
        double beta = B->beta[i + 1], alpha = B->alpha[i + 1];
        for (int l = 0; l < LANES; l++) {
            double lambda = g->lambda[l];
            double rho1 = sqrt(rho_bar[l] * rho_bar[l] + lambda * lambda), inverse1 = 1.0 / rho1;
            double psi = lambda * inverse1 * phi_bar[l];
            psi_square[l] += psi * psi;
            double phi1 = rho_bar[l] * inverse1 * phi_bar[l];
            double rho = sqrt(rho1 * rho1 + beta * beta), inverse = 1.0 / rho;
            double c = rho1 * inverse, s = beta * inverse;
            g->rho[i][l] = rho;
            g->theta[i + 1][l] = s * alpha;
            rho_bar[l] = -c * alpha;
            g->phi[i][l] = c * phi1;
            phi_bar[l] = s * phi1;
        }
    }
    for (int l = 0; l < LANES; l++) {
        g->tail[l] = phi_bar[l] * phi_bar[l];
        g->objective[l] = psi_square[l] + g->tail[l];
    }
}

/* R y = phi; size^2 = y'y; t = beta_1 e_1 - B y; w = R^-T y for the slope. */
static void read_out(const lw_bidiagonal *B, group *g, int count, lw_projected *out)
{
    int64_t k = B->k;
    lanes y = {0}, after = {0}, size = {0}, residual = {0}, w = {0}, bent = {0}, first = {0};
    for (int64_t i = k - 1; i >= 0; i--) {
        for (int l = 0; l < LANES; l++) {
            double above = i + 1 < k ? g->theta[i + 1][l] * y[l] : 0.0;
            double t = -B->beta[i + 1] * ((g->phi[i][l] - above) / g->rho[i][l]) -
                       (i + 1 < k ? B->alpha[i + 1] * y[l] : 0.0);
            after[l] = (g->phi[i][l] - above) / g->rho[i][l];
            residual[l] += t * t; /* t_{i+2} = -beta_{i+2} y_{i+1} - alpha_{i+2} y_{i+2} */
        }
        for (int l = 0; l < LANES; l++) {
            y[l] = after[l];
            g->y[i][l] = y[l];
            size[l] += y[l] * y[l];
        }
    }
    for (int64_t i = 0; i < k; i++)
        for (int l = 0; l < LANES; l++) {
            w[l] = (g->y[i][l] - g->theta[i][l] * w[l]) / g->rho[i][l];
            bent[l] += w[l] * w[l];
        }
    for (int l = 0; l < LANES; l++) {
        first[l] = B->beta[0] - B->alpha[0] * y[l];
        residual[l] += first[l] * first[l];
    }
    for (int l = 0; l < count; l++) {
        double lambda = g->lambda[l], rest = g->objective[l] - lambda * lambda * size[l],
               b2 = B->beta[0] * B->beta[0];
        /* the difference keeps more digits while it is not a small part of the objective */
        double square = rest > 1e-3 * g->objective[l] ? rest : residual[l];
        out[l].misfit = sqrt(square);
        out[l].size = sqrt(size[l]);
        out[l].slope = -4.0 * lambda * bent[l];
        out[l].gradient = fabs(B->alpha[k] * B->beta[k] * g->y[k - 1][l]);
        out[l].influence = b2 - (g->objective[l] - 0.5 * g->tail[l]);
        out[l].gap = 0.5 * g->tail[l];
        out[l].influence2 = fmax(b2 - 2.0 * B->beta[0] * first[l] + square, 0.0);
    }
}

lw_status lw_projected_solve(const lw_bidiagonal *B, int64_t count, const double *lambda, lw_projected *out,
                             double *y, lw_error *error)
{
    int64_t k = B->k;
    if (k < 1) return lw_fail(error, LW_BAD_SHAPE, "a projected problem needs one step or more");
    lanes *room = lw_alloc(4 * ((size_t)k + 1), sizeof(lanes));
    if (room == NULL)
        return lw_fail_memory(error, "the projected problem", 4 * ((size_t)k + 1) * sizeof(lanes));
    group g = {.rho = room, .theta = room + (k + 1), .phi = room + 2 * (k + 1), .y = room + 3 * (k + 1)};
    for (int64_t at = 0; at < count; at += LANES) {
        int some = count - at < LANES ? (int)(count - at) : LANES;
        for (int l = 0; l < LANES; l++) g.lambda[l] = lambda[at + (l < some ? l : 0)];
        factor(B, &g);
        read_out(B, &g, some, out + at);
        for (int l = 0; y != NULL && l < some; l++)
            for (int64_t i = 0; i < k; i++) y[(at + l) * k + i] = g.y[i][l];
    }
    lw_free(room);
    return LW_OK;
}
