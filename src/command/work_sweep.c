/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "command/work.h"

#include "core/memory.h"
#include "tradeoff/choose.h"

#include <math.h>
#include <string.h>

/* Probes of the random trace: one gives the exact grid minimum of gcv on large problems (design: numerics).
 */
#define TRACE_PROBES 1

static lw_status sweep_options(lw_work *work, lw_sweep_options *out, double **grid, lw_error *error)
{
    const lw_arguments *arguments = work->arguments;
    *out = (lw_sweep_options){.criteria = arguments->criteria,
                              .sigma_stated = work->problem->sigma != NULL,
                              .noise_factor = arguments->noise_factor,
                              .tolerance = arguments->solve.tolerance,
                              .steps = arguments->solve.steps};
    *grid = NULL;
    if (arguments->grid_list) {
        out->damping = arguments->grid_list;
        out->count = arguments->grid_count;
    } else if (arguments->grid_count) {
        *grid = LW_NEW_ARRAY(double, arguments->grid_count);
        if (!*grid)
            return lw_fail_memory(error, "the dampings", (size_t)arguments->grid_count * sizeof(double));
        lw_sweep_grid(arguments->grid_from, arguments->grid_to, arguments->grid_count, *grid);
        out->damping = *grid;
        out->count = arguments->grid_count;
    }
    return LW_OK;
}

/* What a reader of the curve should know of it. */
static void note_sweep(lw_work *work)
{
    const lw_problem *problem = work->problem;
    const lw_curve *curve = work->curve;
    if (problem->lower || problem->upper)
        lw_log_add(&work->log, "The curve and the criteria leave the bounds out of account: they choose the "
                               "damping of the unbounded problem.");
    double columns = (double)work->system->columns;
    if (curve->count > 0 && columns - curve->row[0].point.effective_parameters < 0.01)
        lw_log_add(&work->log, "The data determine all parameters without damping: solve without it, unless "
                               "the penalty is a true prior.");
}

lw_status lw_work_sweep(lw_work *work, lw_error *error)
{
    lw_sweep_options options;
    double *grid;
    lw_status status = sweep_options(work, &options, &grid, error);
    if (status == LW_OK) {
        lw_solve_options *solve = &work->arguments->solve;
        solve->trace_probes = lw_sweep_wants_trace(&options) ? TRACE_PROBES : 0;
        double first = options.damping ? options.damping[0] : 0.0,
               last = options.damping ? options.damping[options.count - 1] : 0.0;
        solve->sweep_from = fmax(first, last);
        solve->sweep_to = fmin(first, last);
        status = lw_work_decompose(work, 1.0, true, error);
    }
    if (status >= 0) status = lw_sweep(work->decomposition, &options, &work->watch, &work->curve, error);
    int open = 0;
    for (int i = 0; status == LW_NOT_CONVERGED && i < work->curve->count; i++)
        open += !work->curve->row[i].usable;
    if (open > 0)
        lw_log_add(&work->log,
                   "The sweep is not converged at the %d smallest of %d dampings: no criterion looks there "
                   "(more --steps, or "
                   "larger --dampings).",
                   open, work->curve->count);
    if (status > 0 && work->qualified == LW_OK) work->qualified = status;
    work->run.curve = work->curve;
    work->run.interrupted = status == LW_INTERRUPTED;
    if (status >= 0) note_sweep(work);
    work->run.seconds.solve += lw_work_lap(work);
    lw_free(grid);
    return status > 0 ? LW_OK : status;
}

static lw_criterion criterion_of(lw_damping_choice choice)
{
    switch (choice) {
    case LW_DAMPING_GCV:
        return LW_BY_GCV;
    case LW_DAMPING_DISCREPANCY:
        return LW_BY_DISCREPANCY;
    case LW_DAMPING_RISK:
        return LW_BY_RISK;
    default:
        return LW_BY_CORNER;
    }
}

lw_status lw_work_choice(lw_work *work, const lw_choice **out, lw_error *error)
{
    lw_criterion criterion = criterion_of(work->arguments->damping);
    const lw_choice *choice = *out = lw_curve_choice(work->curve, criterion);
    if (!choice || isnan(choice->damping))
        return lw_fail(error, LW_UNSOLVABLE, "--damping %s: %s", lw_criterion_name(criterion),
                       choice ? choice->warning : "this criterion was not asked for by --criteria");
    return LW_OK;
}

lw_status lw_work_damping(lw_work *work, double *lambda, lw_error *error)
{
    const lw_arguments *arguments = work->arguments;
    *lambda = arguments->damping == LW_DAMPING_VALUE ? arguments->damping_value : 0.0;
    if (arguments->damping <= LW_DAMPING_VALUE) return LW_OK;
    work->arguments->criteria = 1u << criterion_of(arguments->damping);
    const lw_choice *choice;
    lw_status status = lw_work_sweep(work, error);
    if (status == LW_OK && work->qualified == LW_INTERRUPTED) return LW_OK;
    if (status == LW_OK) status = lw_work_choice(work, &choice, error);
    if (status == LW_OK) *lambda = choice->damping;
    return status;
}

/* Models of more numbers than this are not kept. */
#define MOST_MODEL_NUMBERS INT64_C(50000000)

lw_status lw_work_models(lw_work *work, lw_error *error)
{
    int64_t n = work->problem->n, columns = work->system->columns;
    int count = work->curve->count;
    if (work->arguments->models != LW_MODELS_ALL) return LW_OK;
    if (lw_bytes(n, count) > MOST_MODEL_NUMBERS) {
        work->arguments->models = LW_MODELS_CHOSEN;
        lw_log_add(&work->log,
                   "models.csv has the chosen model only: %lld parameters at %d dampings are too many.",
                   (long long)n, count);
        return LW_OK;
    }
    double *z = LW_NEW_ARRAY(double, columns *count + 1), *lambda = LW_NEW_ARRAY(double, count);
    lw_point *point = LW_NEW_ARRAY(lw_point, count);
    work->models = LW_NEW_ARRAY(double, n *count + 1);
    lw_status status = z && lambda && point && work->models
                           ? LW_OK
                           : lw_fail_memory(error, "the models of the sweep",
                                            (size_t)(n + columns) * (size_t)count * sizeof(double));
    for (int i = 0; i < count && status == LW_OK; i++) lambda[i] = work->curve->row[i].point.lambda;
    if (status == LW_OK)
        status = work->decomposition->methods->evaluate(work->decomposition, count, lambda, 0, point, z,
                                                        &work->watch, error);
    for (int i = 0; i < count && status >= 0; i++)
        lw_system_model(work->system, z + (int64_t)i * columns, NULL, work->models + (int64_t)i * n);
    lw_free(z);
    lw_free(lambda);
    lw_free(point);
    work->run.models = status >= 0 ? work->models : NULL;
    return status > 0 ? LW_OK : status;
}
