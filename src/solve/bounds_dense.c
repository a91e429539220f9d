/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The exact finish of a bounded problem: K = Q R once, then an active-set method on H = R E' (E the pivoting)
 * and c = Q'b. */
#include "core/memory.h"
#include "matrix/dense.h"
#include "matrix/vector.h"
#include "solve/bounds_part.h"

#include <math.h>
#include <string.h>

#define CORRECTIONS 2
#define SIGN 1e-12 /* of ||c||: how wrong the sign of g may be by rounding */

typedef struct finish {
    lw_box *box;
    int64_t n, k; /* H is k x n */
    double *H, *c, *r, *g, *step;
    int64_t *place; /* free parameters in order */
    int8_t *barred; /* let go in vain: g there is rounding */
} finish;

static void finish_clear(finish *f)
{
    lw_free(f->H);
    lw_free(f->c);
    lw_free(f->r);
    lw_free(f->g);
    lw_free(f->step);
    lw_free(f->place);
    lw_free(f->barred);
}

static lw_status finish_new(finish *f, lw_box *box, lw_error *error)
{
    int64_t n = box->n, m = box->tall, k = m < n ? m : n;
    lw_dense_qr qr = {0};
    *f = (finish){.box = box, .n = n, .k = k};
    double *K = LW_NEW_ARRAY(double, lw_bytes(m, n)), *side = LW_NEW_ZEROS(double, m);
    f->H = LW_NEW_ZEROS(double, k *n);
    f->c = LW_NEW_ARRAY(double, k);
    f->r = LW_NEW_ARRAY(double, k);
    f->g = LW_NEW_ARRAY(double, n);
    f->step = LW_NEW_ARRAY(double, k > n ? k : n);
    f->place = LW_NEW_ARRAY(int64_t, n);
    f->barred = LW_NEW_ZEROS(int8_t, n);
    lw_status status = LW_OK;
    if (K == NULL || side == NULL || f->H == NULL || f->c == NULL || f->r == NULL || f->g == NULL ||
        f->step == NULL || f->place == NULL || f->barred == NULL)
        status = lw_fail_memory(error, "the bounded problem", (size_t)lw_bytes(m + 2 * n, 8 * n));
    if (status == LW_OK) {
        memset(box->s, 0, (size_t)n * sizeof(double));
        int64_t steps = box->steps;
        for (int64_t j = 0; j < n; j++) {
            box->s[j] = 1.0;
            lw_box_forward(box, box->s, K + j * m);
            box->s[j] = 0.0;
        }
        box->steps = steps;
        memcpy(side, box->system->b, (size_t)box->rows * sizeof(double));
        status = lw_dense_qr_make(m, n, K, 0.0, &qr, error);
        K = NULL;
    }
    if (status == LW_OK) status = lw_dense_qr_apply_qt(&qr, 1, side, error);
    for (int64_t j = 0; status == LW_OK && j < n; j++)
        for (int64_t i = 0; i <= j && i < k; i++) f->H[i + qr.pivot[j] * k] = qr.factor[i + j * m];
    if (status == LW_OK) memcpy(f->c, side, (size_t)k * sizeof(double));
    lw_free(K);
    lw_free(side);
    lw_dense_qr_clear(&qr);
    return status;
}

/* r = H t - c, g = H'r. */
static void residual(finish *f)
{
    memcpy(f->r, f->c, (size_t)f->k * sizeof(double));
    lw_dense_vector(0, f->k, f->n, 1.0, f->H, f->k, f->box->t, -1.0, f->r);
    lw_dense_vector(1, f->k, f->n, 1.0, f->H, f->k, f->r, 0.0, f->g);
}

/* step over the free parameters: min ||H_F s + r||, columns that depend on others stay. */
static lw_status free_step(finish *f, int64_t *count, lw_error *error)
{
    int64_t free = 0, k = f->k;
    lw_dense_qr qr = {0};
    for (int64_t j = 0; j < f->n; j++)
        if (f->box->set[j] == 0) f->place[free++] = j;
    *count = free;
    if (free == 0) return LW_OK;
    double *part = LW_NEW_ARRAY(double, k *free), *side = LW_NEW_ARRAY(double, k);
    lw_status status = LW_OK;
    if (part == NULL || side == NULL)
        status = lw_fail_memory(error, "the bounded problem", (size_t)lw_bytes(k * free, 8));
    if (status == LW_OK) {
        for (int64_t p = 0; p < free; p++)
            memcpy(part + p * k, f->H + f->place[p] * k, (size_t)k * sizeof(double));
        for (int64_t i = 0; i < k; i++) side[i] = -f->r[i];
        status = lw_dense_qr_make(k, free, part, -1.0, &qr, error);
        part = NULL;
    }
    if (status == LW_OK) status = lw_dense_qr_apply_qt(&qr, 1, side, error);
    if (status == LW_OK) {
        lw_dense_qr_solve_r(&qr, 0, 1, side, k);
        for (int64_t p = 0; p < free; p++) f->step[qr.pivot[p]] = p < qr.rank ? side[p] : 0.0;
        f->box->exchanges++;
    }
    lw_free(part);
    lw_free(side);
    lw_dense_qr_clear(&qr);
    return status;
}

/* Largest share of the step that stays in the box; *first the parameter that stops it, or -1. */
static double longest(const finish *f, int64_t count, int64_t *first)
{
    const lw_box *box = f->box;
    double share = 1.0;
    *first = -1;
    for (int64_t p = 0; p < count; p++) {
        int64_t j = f->place[p];
        double to = box->t[j] + f->step[p], room;
        if (to < box->low[j])
            room = (box->low[j] - box->t[j]) / f->step[p];
        else if (to > box->high[j])
            room = (box->high[j] - box->t[j]) / f->step[p];
        else
            continue;
        if (room < share || *first < 0) {
            share = fmin(share, fmax(room, 0.0));
            *first = j;
        }
    }
    return share;
}

/* Goes to the minimum over the free parameters, or as far as it can go and fixes what stops it; 1 when it got
 * there. */
static int advance(finish *f, int64_t count)
{
    lw_box *box = f->box;
    int64_t first;
    double share = longest(f, count, &first);
    for (int64_t p = 0; p < count; p++) {
        int64_t j = f->place[p];
        double to = box->t[j] + share * f->step[p];
        if (j == first) to = f->step[p] < 0.0 ? box->low[j] : box->high[j];
        box->t[j] = fmin(fmax(to, box->low[j]), box->high[j]);
        box->set[j] = box->t[j] <= box->low[j] ? -1 : box->t[j] >= box->high[j] ? 1 : 0;
    }
    if (share > 0.0) memset(f->barred, 0, (size_t)f->n);
    return first < 0;
}

/* The bound with the worst wrong sign, or -1. */
static int64_t worst_sign(const finish *f, double allowed)
{
    int64_t worst = -1;
    for (int64_t j = 0; j < f->n; j++) {
        double wrong = (double)f->box->set[j] * f->g[j];
        if (f->barred[j] || f->box->low[j] == f->box->high[j] || wrong <= allowed) continue;
        allowed = wrong;
        worst = j;
    }
    return worst;
}

/* R'R s = -K_F'(K t - b): what rounding left of the gradient, with K itself instead of its factor, corrects
 * the free parameters. Source: Bjorck, Numerical Methods for Least Squares Problems, SIAM 1996, 6.6.5
 * (corrected seminormal equations). */
static lw_status correct(finish *f, lw_error *error)
{
    int64_t free = 0, k = f->k;
    lw_box *box = f->box;
    lw_dense_qr qr = {0};
    for (int64_t j = 0; j < f->n; j++)
        if (box->set[j] == 0) f->place[free++] = j;
    if (free == 0) return LW_OK;
    double *part = LW_NEW_ARRAY(double, k *free);
    if (part == NULL) return lw_fail_memory(error, "the bounded problem", (size_t)lw_bytes(k * free, 8));
    for (int64_t p = 0; p < free; p++)
        memcpy(part + p * k, f->H + f->place[p] * k, (size_t)k * sizeof(double));
    lw_status status = lw_dense_qr_make(k, free, part, -1.0, &qr, error);
    for (int round = 0; status == LW_OK && qr.rank == free && round < CORRECTIONS; round++) {
        lw_box_refresh(box);
        for (int64_t p = 0; p < free; p++) f->step[p] = -box->g[f->place[qr.pivot[p]]];
        lw_dense_qr_solve_r(&qr, 1, 1, f->step, free);
        lw_dense_qr_solve_r(&qr, 0, 1, f->step, free);
        for (int64_t p = 0; p < free; p++) {
            int64_t j = f->place[qr.pivot[p]];
            double to = box->t[j] + f->step[p];
            if (to > box->low[j] && to < box->high[j]) box->t[j] = to;
        }
    }
    lw_dense_qr_clear(&qr);
    return status;
}

lw_status lw_box_finish(lw_box *box, lw_error *error)
{
    finish f;
    int64_t count, released = -1, most = 3 * box->n + 50;
    lw_box_classify(box);
    lw_status status = finish_new(&f, box, error);
    double allowed = SIGN * box->side;
    int done = 0;
    while (status == LW_OK && !done) {
        if (lw_watch_cancelled(box->watch) || box->exchanges >= most) status = LW_QUALIFIED;
        residual(&f);
        if (status == LW_OK) status = free_step(&f, &count, error);
        if (status != LW_OK) break;
        lw_watch_tick(box->watch, "solving within bounds exactly", (double)box->exchanges, 0.0, "");
        if (!advance(&f, count)) {
            if (released >= 0 && box->set[released] != 0) f.barred[released] = 1;
            released = -1;
            continue;
        }
        residual(&f);
        released = worst_sign(&f, allowed);
        done = released < 0;
        if (!done) box->set[released] = 0;
    }
    if (done) status = correct(&f, error);
    finish_clear(&f);
    return status;
}
