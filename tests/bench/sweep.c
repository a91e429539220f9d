/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Sweeps, one thread: sweep MATRIX smallest|smoothest FROM TO COUNT TRACE MODE
 *   sweep     decompose once, curve and choices; prints choices, error bounds, steps
 *   solve     one solve at damping FROM
 *   separate  every damping of the grid solved alone to the error bound that the sweep gives it
 *   stacked   LSQR on [A; damping L] for every tenth damping (large problems: every twentieth), stopped at
 * the steps that first bring
 *             ||L (x - x_sweep)|| / ||L x_sweep|| below 1e-3 */
#include "bench.h"

#include "core/memory.h"
#include "matrix/operator.h"
#include "solve/engine.h"
#include "solve/lsqr.h"
#include "tradeoff/sweep.h"

#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

enum { STRIDE = 10, WIDE_STRIDE = 20, LARGE = 50000, MOST_STACKED = 3000 };

typedef struct setting {
    lw_problem *problem;
    lw_system *system;
    lw_watch watch;
    double *grid;
    int count, trace;
} setting;

static void decompose(setting *s, double lambda, int sweep, double tolerance, lw_decomposition **out)
{
    lw_error error = {0};
    lw_engine_choice choice;
    lw_solve_options options = {.engine = "lsqr",
                                .tolerance = tolerance,
                                .sweep = sweep,
                                .trace_probes = sweep ? s->trace : 0,
                                .sweep_from = s->grid[s->count - 1],
                                .sweep_to = s->grid[0]};
    bench_check(lw_decompose(s->system, lambda, &options, &s->watch, &choice, out, &error), &error);
}

static lw_curve *make_curve(setting *s, lw_decomposition *decomposition, bool stated)
{
    lw_error error = {0};
    lw_curve *curve;
    lw_sweep_options options = {.count = s->count,
                                .damping = s->grid,
                                .sigma_stated = stated,
                                .criteria = s->trace ? 0 : 1u << LW_BY_CORNER | 1u << LW_BY_DISCREPANCY};
    bench_check(lw_sweep(decomposition, &options, &s->watch, &curve, &error), &error);
    return curve;
}

static double smallest_choice(const lw_curve *curve)
{
    double least = LW_INFINITY;
    for (int i = 0; i < curve->choices; i++)
        if (curve->choice[i].damping < least) least = curve->choice[i].damping;
    return least;
}

static void run_sweep(setting *s)
{
    lw_error error = {0};
    lw_decomposition *decomposition;
    bench_clock from = bench_now();
    decompose(s, 1, 1, 0, &decomposition);
    bench_tell("decompose", from);
    lw_curve *curve = make_curve(s, decomposition, true);
    bench_tell("sweep", from);
    double chosen = smallest_choice(curve);
    lw_estimate *estimate;
    if (isfinite(chosen)) {
        bench_check(decomposition->methods->estimate(decomposition, chosen, &s->watch, &estimate, &error),
                    &error);
        lw_estimate_free(estimate);
    }
    bench_tell("with_model", from);
    bench_tell_number("choice", chosen);
    for (int i = 0; i < curve->choices; i++)
        printf("choice_%s %.6g\n", lw_criterion_name(curve->choice[i].criterion), curve->choice[i].damping);
    bench_tell_number("steps", (double)curve->steps);
    bench_tell_peak();
    for (int i = 0; i < curve->count; i++) printf("bound_%d %.6g\n", i, curve->row[i].point.error_bound);
    lw_curve_free(curve);
    lw_decomposition_free(decomposition);
}

static double solve_alone(setting *s, double lambda, double tolerance, int64_t *steps)
{
    lw_error error = {0};
    lw_decomposition *decomposition;
    lw_estimate *estimate;
    decompose(s, lambda, 0, tolerance, &decomposition);
    bench_check(decomposition->methods->estimate(decomposition, lambda, &s->watch, &estimate, &error),
                &error);
    double bound = estimate->point.error_bound;
    *steps += estimate->steps;
    lw_estimate_free(estimate);
    lw_decomposition_free(decomposition);
    return bound;
}

static void run_separate(setting *s)
{
    lw_decomposition *decomposition;
    int64_t steps = 0;
    decompose(s, 1, 1, 0, &decomposition);
    lw_curve *curve = make_curve(s, decomposition, true);
    double least = smallest_choice(curve) / 2;
    bench_clock from = bench_now();
    int solved = 0;
    for (int i = 0; i < curve->count; i++) {
        const lw_point *p = &curve->row[i].point;
        if (!(p->error_bound <= 1e-3) || p->lambda < least) continue;
        solve_alone(s, p->lambda, fmax(p->error_bound, 1e-6), &steps);
        solved++;
    }
    bench_tell("separate", from);
    bench_tell_number("solved", solved);
    bench_tell_number("steps", (double)steps);
    lw_curve_free(curve);
    lw_decomposition_free(decomposition);
}

typedef struct watcher {
    const setting *s;
    const double *wanted;
    double *part, *rest, size, tolerance;
    int64_t reached;
} watcher;

static void watch_error(void *state, const lw_iteration *iteration)
{
    watcher *w = state;
    if (w->reached || (iteration->step % 4 && iteration->step > 40)) return;
    for (int64_t j = 0; j < w->s->system->columns; j++) w->part[j] = iteration->x[j] - w->wanted[j];
    lw_system_penalize(w->s->system, w->part, w->rest);
    double square = 0;
    for (int64_t i = 0; i < w->s->system->penalty_rows; i++) square += w->rest[i] * w->rest[i];
    if (sqrt(square) <= w->tolerance * w->size) w->reached = iteration->step;
}

/* LSQR on [A; lambda L]: first to find the steps that are enough, then timed with just these. */
static double stack_one(setting *s, lw_operator *A, lw_operator *L, double lambda, double tolerance,
                        const double *wanted, int64_t *steps)
{
    lw_error error = {0};
    lw_system *system = s->system;
    int64_t n = system->columns, p = system->penalty_rows;
    lw_operator *op;
    lw_iterate_result result;
    double *x = bench_sure(LW_NEW_ZEROS(double, n)), *b = bench_sure(LW_NEW_ZEROS(double, system->rows + p));
    watcher w = {
        s, wanted, bench_sure(LW_NEW_ARRAY(double, n)), bench_sure(LW_NEW_ARRAY(double, p)), 0, tolerance, 0};
    lw_system_penalize(system, wanted, w.rest);
    for (int64_t i = 0; i < p; i++) w.size += w.rest[i] * w.rest[i];
    w.size = sqrt(w.size);
    memcpy(b, system->b, (size_t)system->rows * sizeof *b);
    bench_check(lw_operator_stacked(A, 0, lambda, L, 0, &op, &error), &error);
    lw_iterate_options options = {.tolerance = 1e-13,
                                  .steps = MOST_STACKED,
                                  .observe = watch_error,
                                  .observe_state = &w,
                                  .watch = &s->watch};
    bench_check(lw_lsqr(op, b, &options, x, &result, &error), &error);
    options.steps = w.reached ? w.reached : MOST_STACKED;
    options.observe = NULL;
    *steps += options.steps;
    bench_clock from = bench_now();
    bench_check(lw_lsqr(op, b, &options, x, &result, &error), &error);
    double spent = bench_now().processor - from.processor;
    lw_operator_free(op);
    lw_free(x), lw_free(b), lw_free(w.part), lw_free(w.rest);
    return spent;
}

static void run_stacked(setting *s)
{
    lw_error error = {0};
    lw_decomposition *decomposition;
    lw_operator *A, *L;
    lw_product_options product = {.team = NULL};
    int64_t steps = 0;
    double spent = 0;
    int solved = 0;
    decompose(s, 1, 1, 0, &decomposition);
    lw_curve *curve = make_curve(s, decomposition, true);
    double *model = bench_sure(LW_NEW_ARRAY(double, s->system->columns));
    bench_check(lw_system_operator(s->system, &product, &s->watch, &A, &error), &error);
    bench_check(lw_product_new(s->system->penalty, &product, &L, &error), &error);
    int stride = s->system->columns < LARGE ? STRIDE : WIDE_STRIDE;
    for (int i = stride / 2; i < curve->count; i += stride) {
        lw_point point;
        double lambda = curve->row[i].point.lambda;
        if (!(curve->row[i].point.error_bound <= 1e-3)) continue;
        bench_check(
            decomposition->methods->evaluate(decomposition, 1, &lambda, 0, &point, model, &s->watch, &error),
            &error);
        spent += stack_one(s, A, L, lambda, fmax(curve->row[i].point.error_bound, 1e-3), model, &steps);
        solved++;
    }
    bench_tell_number("stacked_cpu", spent);
    bench_tell_number("solved", solved);
    bench_tell_number("steps", (double)steps);
    lw_operator_free(A);
    lw_operator_free(L);
    lw_free(model);
    lw_curve_free(curve);
    lw_decomposition_free(decomposition);
}

int main(int argc, char **argv)
{
    if (argc != 8) return 2;
    bench_start();
    lw_error error = {0};
    setting s = {.problem = bench_problem(argv[1]),
                 .count = atoi(argv[5]),
                 .trace = atoi(argv[6]),
                 .watch = {.memory = INT64_C(8) << 30}};
    lw_system_options options = {
        .penalty = {.prefer = strcmp(argv[2], "smoothest") ? LW_PREFER_SMALLEST : LW_PREFER_SMOOTHEST}};
    s.grid = bench_sure(LW_NEW_ARRAY(double, s.count));
    if (s.count > 1)
        lw_sweep_grid(atof(argv[3]), atof(argv[4]), s.count, s.grid);
    else
        s.grid[0] = atof(argv[3]);
    bench_check(lw_system_new(s.problem, &options, &s.watch, &s.system, &error), &error);
    if (!strcmp(argv[7], "sweep")) {
        run_sweep(&s);
    } else if (!strcmp(argv[7], "solve")) {
        int64_t steps = 0;
        bench_clock from = bench_now();
        double bound = solve_alone(&s, atof(argv[3]), 0, &steps);
        bench_tell("solve", from);
        bench_tell_number("bound", bound);
        bench_tell_number("steps", (double)steps);
    } else if (!strcmp(argv[7], "separate")) {
        run_separate(&s);
    } else {
        run_stacked(&s);
    }
    lw_free(s.grid);
    lw_system_free(s.system);
    lw_problem_free(s.problem);
    return 0;
}
