/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "solve/robust.h"

#include "core/memory.h"
#include "matrix/vector.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

#define DEFAULT_ITERATIONS 2000
#define DEFAULT_TOLERANCE 1e-13

void lw_robust_free(lw_robust *robust)
{
    if (!robust) return;
    lw_estimate_free(robust->estimate);
    lw_free(robust->weight);
    lw_free(robust->row_factor);
    lw_free(robust);
}

static int by_size(const void *a, const void *b)
{
    double p = *(const double *)a, q = *(const double *)b;
    return p < q ? -1 : p > q;
}

lw_status lw_robust_scale(int64_t rows, const double *r, const double *factor, double *scale, lw_error *error)
{
    int64_t count = 0;
    double *size = LW_NEW_ARRAY(double, rows);
    if (!size) return lw_fail_memory(error, "the robust scale", (size_t)rows * sizeof *size);
    for (int64_t i = 0; i < rows; i++)
        if (!factor || factor[i] != 0) size[count++] = fabs(r[i]);
    qsort(size, (size_t)count, sizeof *size, by_size);
    *scale = count == 0 ? 0 : (size[(count - 1) / 2] + size[count / 2]) / 2 / 0.6745;
    lw_free(size);
    return LW_OK;
}

double lw_robust_loss(int64_t rows, const double *r, const double *factor, double c)
{
    double sum = 0;
    for (int64_t i = 0; i < rows; i++) {
        double size = factor && factor[i] == 0 ? 0 : fabs(r[i]);
        sum += c <= 0 ? 2 * size : (size <= c ? size * size : 2 * c * size - c * c);
    }
    return sum;
}

typedef struct work {
    const lw_problem *problem;
    lw_system_options system_options; /* row_factor: the robust one */
    double lambda;
    const lw_solve_options *solve_options;
    const lw_robust_options *options;
    const lw_watch *watch;
    lw_system *base;        /* without robust weights: whitens */
    double *factor;         /* rows: base factor times sqrt(weight) */
    double *r, *before;     /* rows, whitened */
    double constant, floor; /* floor: e of the l1 weights */
    lw_robust *out;
} work;

/* The least squares solution at the weights that stand; r from it. */
static lw_status solve_weighted(work *w, lw_error *error)
{
    lw_system *system = NULL;
    lw_decomposition *decomposition = NULL;
    lw_engine_choice choice = {0};
    lw_estimate *estimate = NULL;
    w->system_options.row_factor = w->factor;
    lw_status status = lw_system_new(w->problem, &w->system_options, w->watch, &system, error);
    if (status == LW_OK)
        status = lw_decompose(system, w->lambda, w->solve_options, w->watch, &choice, &decomposition, error);
    if (status >= LW_OK)
        status = decomposition->methods->estimate(decomposition, w->lambda, w->watch, &estimate, error);
    if (status >= LW_OK) {
        lw_copy(w->base->rows, estimate->residual, w->r);
        lw_system_whiten(w->base, 1, w->r);
        lw_estimate_free(w->out->estimate);
        w->out->estimate = estimate;
        estimate = NULL;
        if (status != LW_INTERRUPTED) status = LW_OK;
    }
    lw_estimate_free(estimate);
    lw_decomposition_free(decomposition);
    lw_system_free(system);
    return status;
}

static void reweight(work *w, double c)
{
    const double *base = w->base->row_factor;
    bool l1 = w->options->misfit == LW_MISFIT_L1;
    for (int64_t i = 0; i < w->base->rows; i++) {
        double size = fabs(w->r[i]), weight = l1 ? 1 / fmax(size, w->floor) : (size <= c ? 1 : c / size);
        w->factor[i] = (base ? base[i] : 1) * sqrt(weight);
    }
}

static double change_of(const work *w)
{
    int64_t rows = w->base->rows;
    double *difference = w->before;
    for (int64_t i = 0; i < rows; i++) difference[i] -= w->r[i];
    double size = lw_norm(rows, w->r, NULL);
    return size > 0 ? lw_norm(rows, difference, NULL) / size : 0;
}

/* Huber: weights, solution, scale in turn. Converged within the tolerance, or where rounding allows no
 * more. */
static lw_status iterate_huber(work *w, double tolerance, int64_t most, lw_error *error)
{
    lw_robust *out = w->out;
    double last = HUGE_VAL;
    lw_status status = solve_weighted(w, error);
    for (out->iterations = 0; out->iterations < most && !out->converged && status == LW_OK;
         out->iterations++) {
        if (!w->options->scale_stated)
            status = lw_robust_scale(w->base->rows, w->r, w->base->row_factor, &out->scale, error);
        if (status != LW_OK || out->scale <= 0) break;
        lw_copy(w->base->rows, w->r, w->before);
        reweight(w, w->constant * out->scale);
        lw_watch_tick(w->watch, "reweighting", (double)out->iterations, 0, "");
        status = solve_weighted(w, error);
        if (status != LW_OK) break;
        double change = change_of(w);
        out->converged = change <= tolerance || (change < 1e-10 && change >= last);
        last = change;
    }
    if (out->scale <= 0) out->converged = true; /* more than half of the readings are met exactly */
    return status;
}

/* Whether the exact vertex is looked for. */
static bool wants_vertex(const work *w)
{
    const lw_system *s = w->base;
    return w->options->misfit == LW_MISFIT_L1 && !(w->lambda > 0) && s->conditions == 0 &&
           !s->problem->covariance && s->columns > 0 && s->columns <= LW_VERTEX_MOST &&
           s->rows_used >= s->columns && s->columns * s->rows <= INT64_C(20000000);
}

/* l1: e falls by decades from the scale, some reweightings at each: few where a vertex is looked for
 * afterwards. */
static lw_status iterate_l1(work *w, double tolerance, int64_t most, lw_error *error)
{
    lw_robust *out = w->out;
    lw_status status = solve_weighted(w, error);
    if (status == LW_OK)
        status = lw_robust_scale(w->base->rows, w->r, w->base->row_factor, &out->scale, error);
    double least = out->scale * 1e-9, share = wants_vertex(w) ? 1e-2 : 1e-4;
    int rounds = wants_vertex(w) ? 20 : 200;
    for (w->floor = out->scale; status == LW_OK && w->floor > least && w->floor > 0; w->floor /= 10) {
        double change = 1;
        for (int round = 0; round < rounds && change > tolerance && out->iterations < most && status == LW_OK;
             round++) {
            lw_copy(w->base->rows, w->r, w->before);
            reweight(w, 0);
            status = solve_weighted(w, error);
            out->iterations++;
            if (status == LW_OK) change = change_of(w);
            if (change < share * w->floor / out->scale) break;
        }
        out->converged = out->iterations < most;
    }
    return status;
}

static lw_status finish_vertex(work *w, lw_error *error)
{
    int64_t rows = w->base->rows;
    bool *in = LW_NEW_ZEROS(bool, rows);
    lw_status status = in ? lw_system_matrix(w->base, w->watch, error)
                          : lw_fail_memory(error, "the l1 vertex", (size_t)rows);
    if (status == LW_OK) status = lw_robust_vertex(w->base, w->r, in, error);
    if (status == LW_OK) {
        for (int64_t i = 0; i < rows; i++)
            w->factor[i] = in[i] ? (w->base->row_factor ? w->base->row_factor[i] : 1) : 0;
        status = solve_weighted(w, error);
        w->out->vertex = w->out->converged = true;
        w->out->way = "vertex";
    }
    lw_free(in);
    return status == LW_QUALIFIED ? LW_OK : status;
}

/* Weights and objective of the residuals that stand. */
static lw_status conclude(work *w, lw_error *error)
{
    lw_robust *out = w->out;
    int64_t rows = w->base->rows;
    bool l1 = w->options->misfit == LW_MISFIT_L1;
    lw_status status = LW_OK;
    if (l1) status = lw_robust_scale(rows, w->r, w->base->row_factor, &out->scale, error);
    double c = l1 ? out->scale : w->constant * out->scale;
    for (int64_t i = 0; i < rows; i++) {
        double size = fabs(w->r[i]);
        out->weight[i] = w->base->row_factor && w->base->row_factor[i] == 0 ? 0 : (size <= c ? 1 : c / size);
    }
    double penalty = w->lambda > 0 ? w->lambda * out->estimate->point.size : 0;
    out->objective = lw_robust_loss(rows, w->r, w->base->row_factor, l1 ? 0 : c) + penalty * penalty;
    lw_copy(rows, w->factor, out->row_factor);
    return status;
}

static lw_status by_gradients(work *w, lw_error *error)
{
    lw_robust *out = w->out;
    lw_system *base = w->base;
    double *z = LW_NEW_ZEROS(double, base->columns);
    if (!z) return lw_fail_memory(error, "conjugate gradients", (size_t)base->columns * 8);
    out->way = "conjugate gradients";
    lw_status status = base->conditions > 0 ? lw_fail(error, LW_BAD_USAGE,
                                                      "conjugate gradients take no exact conditions; use "
                                                      "engine dense or cholesky with a robust misfit")
                                            : LW_OK;
    if (status == LW_OK)
        status =
            lw_robust_descend(base, w->lambda, w->options, w->watch, z, &out->scale, &out->iterations, error);
    out->converged = status == LW_OK;
    if (status >= LW_OK) {
        lw_status made = lw_estimate_from_model(base, w->lambda, z, NULL, 0, &out->estimate, error);
        if (made < LW_OK) status = made;
    }
    if (status >= LW_OK) {
        lw_copy(base->rows, out->estimate->residual, w->r);
        lw_system_whiten(base, 1, w->r);
        w->floor = out->scale * 1e-9;
        reweight(w, w->constant * out->scale);
    }
    lw_free(z);
    return status;
}

/* Conjugate gradients where the engine, named or chosen, is iterative. */
static lw_status prefers_gradients(work *w, bool *gradients, lw_error *error)
{
    lw_engine_choice choice = {0};
    const char *name = w->solve_options ? w->solve_options->engine : NULL;
    *gradients = w->options->way == LW_ROBUST_GRADIENTS;
    if (w->options->way != LW_ROBUST_AUTO || w->base->conditions > 0) return LW_OK;
    if (name && strcmp(name, "auto") != 0) {
        choice.engine = lw_engine_find(name);
    } else {
        lw_status status = lw_engine_choose(w->base, w->lambda, w->solve_options, w->watch, &choice, error);
        if (status < LW_OK) return status;
    }
    *gradients = choice.engine && !(choice.engine->abilities & LW_DIRECT);
    return LW_OK;
}

static lw_status minimise(work *w, lw_error *error)
{
    bool gradients = false;
    double tolerance = w->options->tolerance > 0 ? w->options->tolerance : DEFAULT_TOLERANCE;
    int64_t most = w->options->iterations > 0 ? w->options->iterations : DEFAULT_ITERATIONS;
    lw_status status = prefers_gradients(w, &gradients, error);
    if (status == LW_OK && gradients)
        status = by_gradients(w, error);
    else if (status == LW_OK)
        status = w->options->misfit == LW_MISFIT_L1 ? iterate_l1(w, tolerance, most, error)
                                                    : iterate_huber(w, tolerance, most, error);
    if (status >= LW_OK && status != LW_INTERRUPTED && wants_vertex(w)) {
        lw_status vertex = finish_vertex(w, error);
        status = vertex < LW_OK ? vertex : status;
    }
    if (status >= LW_OK) {
        lw_status end = conclude(w, error);
        if (end < LW_OK) return end;
    }
    return status;
}

lw_status lw_robust_solve(const lw_problem *problem, const lw_system_options *system_options, double lambda,
                          const lw_solve_options *solve_options, const lw_robust_options *options,
                          const lw_watch *watch, lw_robust **out, lw_error *error)
{
    work w = {.problem = problem,
              .lambda = lambda,
              .solve_options = solve_options,
              .options = options,
              .watch = watch};
    w.constant = options->constant > 0 ? options->constant : LW_HUBER_CONSTANT;
    if (system_options) w.system_options = *system_options;
    *out = NULL;
    lw_status status = lw_system_new(problem, system_options, watch, &w.base, error);
    if (status != LW_OK) return status;
    int64_t rows = w.base->rows;
    w.out = LW_NEW(lw_robust);
    w.factor = LW_NEW_ARRAY(double, rows);
    w.r = LW_NEW_ARRAY(double, rows);
    w.before = LW_NEW_ARRAY(double, rows);
    if (w.out) w.out->weight = LW_NEW_ARRAY(double, rows);
    if (w.out) w.out->row_factor = LW_NEW_ARRAY(double, rows);
    if (!w.out || !w.factor || !w.r || !w.before || !w.out->weight || !w.out->row_factor)
        status = lw_fail_memory(error, "the robust misfit", (size_t)rows * 40);
    if (status == LW_OK) {
        w.out->way = "reweighted least squares";
        w.out->scale = 1;
        for (int64_t i = 0; i < rows; i++) w.factor[i] = w.base->row_factor ? w.base->row_factor[i] : 1;
        status = minimise(&w, error);
    }
    lw_free(w.factor);
    lw_free(w.r);
    lw_free(w.before);
    lw_system_free(w.base);
    if (status < LW_OK || !w.out->estimate) {
        lw_robust_free(w.out);
        return status;
    }
    *out = w.out;
    return status == LW_OK && !w.out->converged ? LW_NOT_CONVERGED : status;
}
