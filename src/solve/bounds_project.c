/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Gradient projection and conjugate gradients in turn (More & Toraldo 1991). */
#include "matrix/vector.h"
#include "solve/bounds_part.h"

#include <math.h>
#include <string.h>

#define ENOUGH 0.1 /* Armijo: share of the decrease that the slope promises */
#define LITTLE_CONJUGATE 0.1
#define LITTLE_GRADIENT 0.25
#define MOST_PROJECTIONS 10
#define MOST_HALVINGS 40

static bool out_of_steps(const lw_box *box)
{
    return box->steps >= box->most || lw_watch_cancelled(box->watch);
}

/* s = P(t + alpha d) - t; 1 when nothing was cut off. */
static int cut_step(lw_box *box, const double *d, double alpha)
{
    int whole = 1;
    for (int64_t j = 0; j < box->n; j++) {
        double to = box->t[j] + alpha * d[j];
        if (to < box->low[j] || to > box->high[j]) {
            to = to < box->low[j] ? box->low[j] : box->high[j];
            whole = 0;
        }
        box->s[j] = to - box->t[j];
    }
    return whole;
}

static void take_step(lw_box *box)
{
    for (int64_t j = 0; j < box->n; j++)
        box->t[j] = fmin(fmax(box->t[j] + box->s[j], box->low[j]), box->high[j]);
    lw_add_scaled(box->tall, 1.0, box->Ks, box->r, box->team);
    lw_box_adjoint(box, box->r, box->g);
}

/* Moves to P(t + alpha d), alpha halved until q falls by ENOUGH of -g's; the decrease, 0 when none was found.
 * known: Kd = K d stands already (for a step of alpha = 1 that is not cut). */
static double search(lw_box *box, const double *d, double alpha, int known)
{
    for (int k = 0; k < MOST_HALVINGS && !out_of_steps(box); k++, alpha *= 0.5) {
        int whole = cut_step(box, d, alpha);
        if (whole && known && alpha == 1.0)
            lw_copy(box->tall, box->Kd, box->Ks);
        else
            lw_box_forward(box, box->s, box->Ks);
        double slope = lw_dot(box->n, box->g, box->s, box->team),
               curve = lw_dot(box->tall, box->Ks, box->Ks, box->team);
        double change = slope + 0.5 * curve;
        if (slope >= 0.0) return 0.0;
        if (change > ENOUGH * slope) continue;
        take_step(box);
        return -change;
    }
    return 0.0;
}

static int same_set(lw_box *box)
{
    int same = 1;
    for (int64_t j = 0; j < box->n; j++) {
        int8_t set = box->t[j] <= box->low[j] ? -1 : box->t[j] >= box->high[j] ? 1 : 0;
        same &= set == box->set[j];
        box->set[j] = set;
    }
    return same;
}

/* Steps along -p from the Cauchy point's length on, until the set settles or they gain little. */
static double project_gradient(lw_box *box)
{
    double best = 0.0, total = 0.0;
    for (int k = 0; k < MOST_PROJECTIONS && !out_of_steps(box); k++) {
        double size = lw_box_projected(box, box->d);
        lw_box_forward(box, box->d, box->Kd);
        double curve = lw_dot(box->tall, box->Kd, box->Kd, box->team);
        if (!(size > 0.0) || !(curve > 0.0)) break;
        lw_scale(box->n, -1.0, box->d, box->team);
        double gain = search(box, box->d, size * size / curve, 0);
        total += gain;
        if (same_set(box) || gain <= LITTLE_GRADIENT * best) break;
        best = fmax(best, gain);
    }
    return total;
}

static double free_gradient(lw_box *box, const double *from, double *out)
{
    for (int64_t j = 0; j < box->n; j++) out[j] = box->set[j] == 0 ? from[j] : 0.0;
    return lw_dot(box->n, out, out, box->team);
}

/* d <- argmin q(t + d) over the free parameters by CGLS (Hestenes & Stiefel 1952):
 *     alpha = h'h / ||K q||^2,  d += alpha q,  residual += alpha K q,  h = free part of K' residual,  q = -h
 * + beta q until ||h|| <= goal, or, when `rough`, until a step gains less than a tenth of the best one. Kd =
 * K d is left behind. */
static void conjugate(lw_box *box, double goal, int rough)
{
    double gamma = free_gradient(box, box->g, box->h), best = 0.0;
    memset(box->d, 0, (size_t)box->n * sizeof(double));
    memset(box->Kd, 0, (size_t)box->tall * sizeof(double));
    lw_scale_add(box->n, -1.0, box->h, 0.0, box->q, box->team);
    while (sqrt(gamma) > goal && !out_of_steps(box)) {
        lw_box_forward(box, box->q, box->Ks);
        double curve = lw_dot(box->tall, box->Ks, box->Ks, box->team), alpha = gamma / curve;
        if (!(curve > 0.0) || !isfinite(alpha)) break;
        lw_add_scaled(box->n, alpha, box->q, box->d, box->team);
        lw_add_scaled(box->tall, alpha, box->Ks, box->Kd, box->team);
        lw_copy(box->tall, box->r, box->Ks);
        lw_add_scaled(box->tall, 1.0, box->Kd, box->Ks, box->team);
        lw_box_adjoint(box, box->Ks, box->s);
        double next = free_gradient(box, box->s, box->h), gain = 0.5 * alpha * gamma;
        lw_scale_add(box->n, -1.0, box->h, next / gamma, box->q, box->team);
        gamma = next;
        if (rough && gain <= LITTLE_CONJUGATE * best) break;
        best = fmax(best, gain);
    }
}

/* Every bound that holds has the right sign of g. */
static int binding(const lw_box *box)
{
    for (int64_t j = 0; j < box->n; j++)
        if (box->low[j] < box->high[j] && (double)box->set[j] * box->g[j] > 0.0) return 0;
    return 1;
}

lw_stop lw_box_iterate(lw_box *box, double goal)
{
    int idle = 0;
    lw_box_refresh(box);
    lw_box_classify(box);
    for (double size = lw_box_projected(box, NULL); size > goal; size = lw_box_projected(box, NULL)) {
        if (lw_watch_cancelled(box->watch)) return LW_STOP_INTERRUPTED;
        if (box->steps >= box->most) return LW_STOP_STEPS;
        lw_watch_tick(box->watch, "solving within bounds", (double)box->steps, 0.0, "");
        double gain = project_gradient(box);
        for (int rough = !binding(box), again = 1; again && !out_of_steps(box);) {
            conjugate(box, rough ? 0.1 * goal : 0.3 * goal, rough);
            double more = search(box, box->d, 1.0, 1);
            gain += more;
            again = same_set(box) && binding(box) && more > 0.0 && lw_box_projected(box, NULL) > goal;
            if (again) rough = 0;
        }
        lw_box_refresh(box);
        idle = gain > 0.0 ? 0 : idle + 1;
        if (idle == 2) return lw_box_projected(box, NULL) > goal ? LW_STOP_STAGNATED : LW_STOP_TOLERANCE;
    }
    return LW_STOP_TOLERANCE;
}
