/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "solve/golub_kahan.h"

#include "core/memory.h"
#include "matrix/vector.h"

#include <float.h>
#include <math.h>
#include <string.h>

static bool fused_columns(const lw_operator *op)
{
    return op->fusion == LW_FUSED_COLUMNS && op->methods->step_columns != NULL;
}

static bool fused_rows(const lw_operator *op)
{
    return op->fusion == LW_FUSED_ROWS && op->methods->step_rows != NULL;
}

int64_t lw_golub_kahan_bytes(const lw_operator *op, int k)
{
    int64_t side = fused_columns(op) ? op->rows : op->columns;
    if (!fused_columns(op) && !fused_rows(op)) side += op->rows;
    return (int64_t)sizeof(double) * k * (op->rows + op->columns + side);
}

void lw_golub_kahan_clear(lw_golub_kahan *gk)
{
    lw_free(gk->u);
    lw_free(gk->v);
    lw_free(gk->w);
    lw_free(gk->product);
    memset(gk, 0, sizeof *gk);
}

static void end_side(lw_golub_kahan *gk, int c)
{
    gk->ended[c] = true;
    lw_fill(gk->op->rows, 0.0, gk->u + (size_t)c * (size_t)gk->op->rows);
    lw_fill(gk->op->columns, 0.0, gk->v + (size_t)c * (size_t)gk->op->columns);
}

/* A coefficient below the rounding of the products says that the Krylov space is exhausted. */
static bool vanishes(const lw_golub_kahan *gk, int c, double norm)
{
    return !(norm > 32.0 * DBL_EPSILON * sqrt(gk->square[c])) || !isfinite(norm);
}

static void take_alpha(lw_golub_kahan *gk, int c, double alpha)
{
    if (vanishes(gk, c, alpha)) {
        gk->alpha[c] = 0.0;
        end_side(gk, c);
        return;
    }
    gk->alpha[c] = alpha;
    gk->square[c] += alpha * alpha;
}

static void take_beta(lw_golub_kahan *gk, int c, double beta)
{
    gk->beta[c] = beta;
    if (vanishes(gk, c, beta)) {
        gk->beta[c] = gk->alpha[c] = 0.0;
        end_side(gk, c);
        return;
    }
    gk->square[c] += beta * beta;
}

/* v <- A'u - beta v and w <- A v in one pass; v carries the factor alpha. */
static void pass_columns(lw_golub_kahan *gk)
{
    double factor[LW_LOCKSTEP], square[LW_LOCKSTEP];
    for (int c = 0; c < gk->k; c++) factor[c] = gk->ended[c] ? 0.0 : gk->beta[c] / gk->v_scale[c];
    lw_step_columns(gk->op, gk->k, gk->u, factor, gk->v, gk->w, square);
    for (int c = 0; c < gk->k; c++) {
        if (gk->ended[c]) continue;
        gk->v_scale[c] = sqrt(square[c]);
        take_alpha(gk, c, gk->v_scale[c]);
    }
}

/* v <- (A'u) / u_scale - beta v, normalized; A'u stands in w. */
static void finish_adjoint(lw_golub_kahan *gk, int c)
{
    int64_t n = gk->op->columns;
    double *v = gk->v + (size_t)c * (size_t)n;
    lw_scale_add(n, 1.0 / gk->u_scale[c], gk->w + (size_t)c * (size_t)n, -gk->beta[c], v, gk->op->team);
    take_alpha(gk, c, lw_norm(n, v, gk->op->team));
    if (!gk->ended[c]) lw_scale(n, 1.0 / gk->alpha[c], v, gk->op->team);
}

static void start_side(lw_golub_kahan *gk, int c)
{
    int64_t m = gk->op->rows;
    double *u = gk->u + (size_t)c * (size_t)m;
    gk->u_scale[c] = gk->v_scale[c] = 1.0;
    gk->beta[c] = lw_norm(m, u, gk->op->team);
    if (gk->beta[c] > 0.0 && isfinite(gk->beta[c]))
        lw_scale(m, 1.0 / gk->beta[c], u, gk->op->team);
    else
        end_side(gk, c);
}

lw_status lw_golub_kahan_start(lw_golub_kahan *gk, lw_operator *op, int k, const double *b, lw_error *error)
{
    memset(gk, 0, sizeof *gk);
    if (k < 1 || k > LW_LOCKSTEP)
        return lw_fail(error, LW_BAD_SHAPE, "a bidiagonalization steps 1 to %d right-hand sides, not %d",
                       LW_LOCKSTEP, k);
    size_t m = (size_t)op->rows, n = (size_t)op->columns, count = (size_t)k;
    gk->op = op;
    gk->k = k;
    gk->u = lw_alloc(m * count, sizeof(double));
    gk->v = lw_alloc_zero(n * count, sizeof(double));
    gk->w = lw_alloc((fused_columns(op) ? m : n) * count, sizeof(double));
    bool fused = fused_columns(op) || fused_rows(op);
    if (!fused) gk->product = lw_alloc(m * count, sizeof(double));
    if (gk->u == NULL || gk->v == NULL || gk->w == NULL || (!fused && gk->product == NULL)) {
        lw_golub_kahan_clear(gk);
        return lw_fail_memory(error, "the bidiagonalization", (m + 2 * n) * count * sizeof(double));
    }
    lw_copy((int64_t)(m * count), b, gk->u);
    double first[LW_LOCKSTEP];
    for (int c = 0; c < k; c++) {
        start_side(gk, c);
        first[c] = gk->beta[c];
        gk->beta[c] = 0.0; /* no v_0 */
    }
    if (fused_columns(op)) {
        pass_columns(gk);
    } else {
        lw_apply_transposed(op, k, gk->u, gk->w);
        for (int c = 0; c < k; c++)
            if (!gk->ended[c]) finish_adjoint(gk, c);
    }
    for (int c = 0; c < k; c++) gk->beta[c] = first[c];
    return LW_OK;
}

/* beta u <- A v - alpha u from the product made ahead, then the next pass. */
static void step_ahead(lw_golub_kahan *gk)
{
    int64_t m = gk->op->rows;
    for (int c = 0; c < gk->k; c++) {
        if (gk->ended[c]) continue;
        double *u = gk->u + (size_t)c * (size_t)m;
        lw_scale_add(m, 1.0 / gk->v_scale[c], gk->w + (size_t)c * (size_t)m, -gk->alpha[c], u, gk->op->team);
        take_beta(gk, c, lw_norm(m, u, gk->op->team));
        if (!gk->ended[c]) lw_scale(m, 1.0 / gk->beta[c], u, gk->op->team);
    }
    pass_columns(gk);
}

static void step_fused_rows(lw_golub_kahan *gk)
{
    double factor[LW_LOCKSTEP], square[LW_LOCKSTEP];
    for (int c = 0; c < gk->k; c++) factor[c] = gk->ended[c] ? 0.0 : gk->alpha[c] / gk->u_scale[c];
    lw_step_rows(gk->op, gk->k, gk->v, factor, gk->u, gk->w, square);
    for (int c = 0; c < gk->k; c++) {
        if (gk->ended[c]) continue;
        gk->u_scale[c] = sqrt(square[c]); /* u is left unnormalized */
        take_beta(gk, c, gk->u_scale[c]);
        if (!gk->ended[c]) finish_adjoint(gk, c);
    }
}

static void step_two_passes(lw_golub_kahan *gk)
{
    int64_t m = gk->op->rows;
    lw_operator *op = gk->op;
    for (int c = 0; c < gk->k; c++)
        if (!gk->ended[c]) lw_scale(m, -gk->alpha[c], gk->u + (size_t)c * (size_t)m, op->team);
    lw_apply(op, gk->k, gk->v, gk->product);
    for (int c = 0; c < gk->k; c++) {
        if (gk->ended[c]) continue;
        double *u = gk->u + (size_t)c * (size_t)m;
        lw_add_scaled(m, 1.0, gk->product + (size_t)c * (size_t)m, u, op->team);
        take_beta(gk, c, lw_norm(m, u, op->team));
        if (!gk->ended[c]) lw_scale(m, 1.0 / gk->beta[c], u, op->team);
    }
    lw_apply_transposed(op, gk->k, gk->u, gk->w);
    for (int c = 0; c < gk->k; c++)
        if (!gk->ended[c]) finish_adjoint(gk, c);
}

void lw_golub_kahan_step(lw_golub_kahan *gk)
{
    bool any = false;
    for (int c = 0; c < gk->k; c++) any = any || !gk->ended[c];
    if (!any) {
        for (int c = 0; c < gk->k; c++) gk->alpha[c] = gk->beta[c] = 0.0;
        return;
    }
    if (fused_columns(gk->op))
        step_ahead(gk);
    else if (fused_rows(gk->op))
        step_fused_rows(gk);
    else
        step_two_passes(gk);
}

void lw_golub_kahan_direction(const lw_golub_kahan *gk, int c, double *out)
{
    int64_t n = gk->op->columns;
    const double *v = gk->v + (size_t)c * (size_t)n;
    lw_copy(n, v, out);
    if (!gk->ended[c] && gk->v_scale[c] != 1.0) lw_scale(n, 1.0 / gk->v_scale[c], out, gk->op->team);
}
