/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "solve/iteration.h"

#include "matrix/vector.h"

#include <float.h>
#include <math.h>
#include <stdio.h>

int64_t lw_default_steps(const lw_operator *op)
{
    int64_t shorter = op->rows < op->columns ? op->rows : op->columns, steps = 4 * shorter + 200;
    return steps > 1000 ? steps : 1000;
}

double lw_progress_bound(const lw_progress *p)
{
    if (p->gradient <= 0.0) return 0.0;
    if (p->damp > 0.0) return p->norm > 0.0 ? p->gradient / (p->damp * p->damp * p->norm) : (double)INFINITY;
    double cond = p->cond_A >= 1.0 ? p->cond_A : 1.0;
    double normal = p->residual > 0.0 ? p->gradient * cond / (p->norm_A * p->residual) : (double)INFINITY;
    double direct = p->norm > 0.0 ? p->residual * cond / (p->norm_A * p->norm) : (double)INFINITY;
    return fmin(normal, direct);
}

/* The gradient is formed from vectors of size ||A|| ||r|| and damp^2 ||x||; what lies below their last place
 * is noise. */
bool lw_progress_done(const lw_progress *p, lw_stop *stop)
{
    if (lw_progress_bound(p) <= p->tolerance) {
        *stop = LW_STOP_TOLERANCE;
        return true;
    }
    double noise = 0.25 * DBL_EPSILON * (p->norm_A * p->residual + p->damp * p->damp * p->norm);
    double floor = 0.25 * DBL_EPSILON * (p->norm_b + p->norm_A * p->norm);
    if (p->gradient > noise && (p->damp > 0.0 || p->residual > floor)) return false;
    *stop = LW_STOP_STAGNATED;
    return true;
}

void lw_true_gradient(lw_operator *op, const double *b, double damp, const double *x, double *r, double *g,
                      lw_progress *p)
{
    lw_apply(op, 1, x, r);
    lw_scale_add(op->rows, 1.0, b, -1.0, r, op->team);
    lw_apply_transposed(op, 1, r, g);
    lw_add_scaled(op->columns, -damp * damp, x, g, op->team);
    p->residual = lw_norm(op->rows, r, op->team);
    p->norm = lw_norm(op->columns, x, op->team);
    p->gradient = lw_norm(op->columns, g, op->team);
}

void lw_iterate_finish(lw_operator *op, const double *b, const double *x, double *r, double *g,
                       lw_progress *p, lw_iterate_result *out)
{
    lw_true_gradient(op, b, p->damp, x, r, g, p);
    out->residual = p->residual;
    out->norm = p->norm;
    out->gradient = p->gradient;
    out->norm_A = p->norm_A;
    out->cond_A = p->cond_A;
    out->error_bound = lw_progress_bound(p);
    if (out->stop == LW_STOP_ZERO) out->error_bound = 0.0;
    if (out->error_bound <= p->tolerance) {
        if (out->stop == LW_STOP_STAGNATED || out->stop == LW_STOP_STEPS) out->stop = LW_STOP_TOLERANCE;
    } else if (out->stop == LW_STOP_TOLERANCE || out->stop == LW_STOP_BREAKDOWN) {
        out->stop = LW_STOP_STAGNATED;
    }
}

double lw_iterate_tolerance(const lw_iterate_options *options)
{
    return options->tolerance > 0.0 ? options->tolerance : LW_DEFAULT_TOLERANCE;
}

int64_t lw_iterate_most(const lw_iterate_options *options, const lw_operator *op)
{
    return options->steps > 0 ? options->steps : lw_default_steps(op);
}

lw_status lw_iterate_status(const lw_iterate_result *result, const lw_progress *progress)
{
    if (result->stop == LW_STOP_INTERRUPTED) return LW_INTERRUPTED;
    return result->error_bound <= progress->tolerance ? LW_OK : LW_NOT_CONVERGED;
}

void lw_iterate_tick(const lw_iterate_options *options, const char *what, int64_t step,
                     const lw_progress *progress)
{
    if (options->watch == NULL || options->watch->tick == NULL || step % 8 != 0) return;
    char note[64];
    snprintf(note, sizeof note, "error bound %.1e", lw_progress_bound(progress));
    /* the bound falls geometrically: what is done is counted on its logarithm */
    double bound = fmin(fmax(lw_progress_bound(progress), progress->tolerance), 1.0);
    lw_watch_tick(options->watch, what, -log(bound), -log(progress->tolerance), note);
}
