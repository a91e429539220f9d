/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The estimate at one damping with everything that goes with it. */
#include "command/selection.h"
#include "command/work.h"

#include "certainty/variance_components.h"
#include "core/decimal.h"
#include "core/memory.h"
#include "matrix/vector.h"
#include "solve/bounds.h"
#include "solve/robust.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

/* An iterative engine gives sigmas unasked up to this many parameters. */
#define SIGMA_UNASKED 2000
/* Reciprocal condition below which a direct solution is told to hang on rounding and small coefficients. */
#define NEARLY_SINGULAR 1e-7

static lw_status keep(lw_work *work, lw_status status)
{
    if (status > 0 && (work->qualified == LW_OK || status == LW_INTERRUPTED)) work->qualified = status;
    return status > 0 ? LW_OK : status;
}

static lw_status search_outliers(lw_work *work, lw_error *error)
{
    lw_system_options system = {.penalty = work->arguments->penalty};
    lw_status status =
        lw_outlier_search(work->problem, &system, &work->arguments->solve, &work->arguments->certainty, 0,
                          &work->watch, &work->outliers, error);
    if (status < 0) return status;
    int64_t rows = work->system->rows;
    work->row_factor = LW_NEW_ARRAY(double, rows);
    if (!work->row_factor) return lw_fail_memory(error, "weights", (size_t)rows * sizeof(double));
    memcpy(work->row_factor, work->outliers->row_factor, (size_t)rows * sizeof(double));
    return keep(work, lw_work_system(work, error));
}

static const char *misfit_name(lw_misfit_kind misfit)
{
    return misfit == LW_MISFIT_HUBER ? "huber" : "l1";
}

/* Norms of the estimate with every reading at its stated weight: an l1 estimate is made of few of them. */
static lw_status measure_plainly(lw_work *work, lw_error *error)
{
    lw_free(work->row_factor);
    work->row_factor = NULL;
    if (work->outliers) {
        work->row_factor = LW_NEW_ARRAY(double, work->system->rows);
        if (!work->row_factor)
            return lw_fail_memory(error, "weights", (size_t)work->system->rows * sizeof(double));
        memcpy(work->row_factor, work->outliers->row_factor, (size_t)work->system->rows * sizeof(double));
    }
    lw_status status = lw_work_system(work, error);
    if (status != LW_OK) return status;
    int64_t rows = work->system->rows;
    double *whitened = LW_NEW_ARRAY(double, rows + 1);
    if (!whitened) return lw_fail_memory(error, "residuals", (size_t)rows * sizeof(double));
    memcpy(whitened, work->estimate->residual, (size_t)rows * sizeof(double));
    lw_system_whiten(work->system, 1, whitened);
    work->estimate->point.misfit = lw_norm(work->system->observations, whitened, work->team);
    work->estimate->point.chi_square = lw_dot(rows, whitened, whitened, work->team);
    work->estimate->chi_square_low = 0.0;
    lw_free(whitened);
    return LW_OK;
}

/* The robust estimate, its weights, and the system of which it is the least squares solution. */
static lw_status reweight(lw_work *work, double lambda, lw_error *error)
{
    lw_robust_options options = {.misfit = work->arguments->misfit,
                                 .scale_stated = work->problem->sigma != NULL};
    lw_system_options system = {.penalty = work->arguments->penalty, .row_factor = work->row_factor};
    lw_robust *robust = NULL;
    lw_status status = keep(work, lw_robust_solve(work->problem, &system, lambda, &work->arguments->solve,
                                                  &options, &work->watch, &robust, error));
    if (status != LW_OK) return status;
    work->estimate = robust->estimate;
    work->weight = robust->weight;
    lw_free(work->row_factor);
    work->row_factor = robust->row_factor;
    robust->estimate = NULL;
    robust->weight = robust->row_factor = NULL;
    bool huber = options.misfit == LW_MISFIT_HUBER;
    lw_log_add(&work->log, "The misfit is %s (%s, %lld iterations, scale %.6g): %s",
               misfit_name(options.misfit), robust->way, (long long)robust->iterations, robust->scale,
               huber ? "chi-square and the standard deviations count the readings with their final weights, "
                       "so the global test does not hold."
                     : "the estimate meets some readings exactly, and there are no standard deviations.");
    lw_robust_free(robust);
    status = lw_work_system(work, error);
    return status == LW_OK && !huber ? measure_plainly(work, error) : status;
}

static bool has_bounds(const lw_problem *problem)
{
    for (int64_t j = 0; j < problem->n; j++)
        if ((problem->lower && problem->lower[j] > -HUGE_VAL) ||
            (problem->upper && problem->upper[j] < HUGE_VAL))
            return true;
    return false;
}

/* The bounded estimate, in place of a plain one. */
static lw_status bound(lw_work *work, double lambda, lw_error *error)
{
    lw_bounds_options options = {.storage = work->arguments->solve.storage,
                                 .steps = work->arguments->solve.steps};
    lw_bounded *bounded = NULL;
    lw_status status =
        keep(work, lw_bounds_solve(work->system, lambda, &options, &work->watch, &bounded, error));
    if (status != LW_OK) return status;
    int64_t n = work->problem->n;
    work->at_bound = LW_NEW_ZEROS(int8_t, n + 1);
    work->bound_multiplier = LW_NEW_ZEROS(double, n + 1);
    if (!work->at_bound || !work->bound_multiplier) status = lw_fail_memory(error, "bounds", (size_t)n * 9);
    if (status == LW_OK)
        status = lw_estimate_from_model(work->system, lambda, bounded->z, bounded->z_low,
                                        bounded->z_low != NULL, &work->estimate, error);
    for (int64_t k = 0; k < work->system->columns && status == LW_OK; k++) {
        int64_t j = work->system->parameter_of[k];
        work->at_bound[j] = bounded->at_bound[k];
        work->bound_multiplier[j] = bounded->multiplier[k];
    }
    if (status == LW_OK) {
        work->estimate->steps = bounded->steps;
        work->estimate->stop = bounded->stop;
        snprintf(work->engine.why, sizeof work->engine.why, "bounds: gradient projection%s",
                 bounded->exchanges ? " and an active-set finish" : "");
        work->run.engine = work->engine;
        lw_log_add(&work->log,
                   "%lld of %lld parameters stand at a bound; the optimality conditions hold to %.1e "
                   "(relative). No standard "
                   "deviations are given for a bounded estimate.",
                   (long long)(work->system->columns - bounded->free), (long long)work->system->columns,
                   bounded->optimality);
    }
    lw_bounded_free(bounded);
    return status;
}

static lw_status plain(lw_work *work, double lambda, lw_error *error)
{
    lw_status status = LW_OK;
    if (!work->decomposition) status = lw_work_decompose(work, lambda, false, error);
    if (status >= 0) status = keep(work, status);
    if (status != LW_OK) return status;
    lw_status reached = work->decomposition->methods->estimate(work->decomposition, lambda, &work->watch,
                                                               &work->estimate, error);
    status = keep(work, reached);
    if (reached == LW_NOT_CONVERGED)
        lw_log_add(&work->log, "Not converged. %s The error bound of the model is %.1e.",
                   lw_stop_words(work->estimate->stop), work->estimate->point.error_bound);
    if (status == LW_OK && work->estimate->rcond < NEARLY_SINGULAR)
        lw_log_add(&work->log,
                   "The equations are nearly singular (condition of the scaled matrix about %.0e): some "
                   "parameters, or sums of "
                   "them, are hardly determined, and their sigmas say so.",
                   1.0 / work->estimate->rcond);
    return status;
}

/* Variance components of the groups, at the weights that the estimate had. */
static lw_status estimate_components(lw_work *work, lw_error *error)
{
    lw_system_options system = {.penalty = work->arguments->penalty, .row_factor = work->row_factor};
    lw_variance_components *components = NULL;
    lw_status status =
        keep(work, lw_variance_components_estimate(work->problem, &system, &work->arguments->solve, 0,
                                                   &work->watch, &components, error));
    if (status == LW_OK) {
        lw_variance_components_attach(components, work->certainty);
        if (!components->converged)
            lw_log_add(&work->log, "The variance components are not converged after %d iterations.",
                       components->iterations);
        for (int k = 0; k < components->count; k++) {
            const lw_variance_component *group = &components->groups[k];
            if (group->group >= 0 && !isnan(group->component))
                lw_log_add(&work->log,
                           "Group %s: variance component %.3g +- %.2g (%lld readings, redundancy %.1f); its "
                           "sigmas would be "
                           "multiplied by %.4g with --scale-sigma.",
                           lw_ids_name(work->problem->group_names, group->group), group->component,
                           group->sigma, (long long)group->observations, group->redundancy, group->scale);
        }
    }
    lw_variance_components_free(components);
    return status;
}

static lw_status certainty(lw_work *work, double lambda, lw_error *error)
{
    lw_certainty_options *options = &work->arguments->certainty;
    const lw_engine *engine = lw_engine_find(work->decomposition->methods->engine);
    work->run.effective_parameters = work->estimate->point.effective_parameters;
    if (lambda > 0.0 && isnan(work->run.effective_parameters) && engine && (engine->abilities & LW_DIRECT)) {
        lw_point point;
        lw_status status = work->decomposition->methods->evaluate(work->decomposition, 1, &lambda, 1, &point,
                                                                  NULL, &work->watch, error);
        if (status < 0) return status;
        work->estimate->point.effective_parameters = work->run.effective_parameters =
            point.effective_parameters;
        work->estimate->point.effective_spread = point.effective_spread;
    }
    if (lambda == 0.0 && work->estimate->rank >= 0)
        work->run.effective_parameters = (double)work->estimate->rank;
    options->sigma = !work->arguments->no_sigma;
    if (!(engine && (engine->abilities & LW_DIRECT)) && !work->arguments->sigma_named &&
        work->system->columns > SIGMA_UNASKED) {
        options->sigma = options->reliability = false;
        lw_log_add(&work->log,
                   "Standard deviations and resolution were not computed: they would cost far more than the "
                   "solution by %s of "
                   "%lld parameters; --sigma noise or --sigma posterior gives them.",
                   work->decomposition->methods->engine, (long long)work->system->columns);
    }
    lw_status status = lw_select_parameters(work, error);
    if (status != LW_OK) return status;
    status = keep(work, lw_certainty_make(work->decomposition, work->estimate, options, true, &work->watch,
                                          &work->certainty, error));
    if (status == LW_OK && lambda > 0.0 && !isnan(work->certainty->effective_parameters))
        work->estimate->point.effective_parameters = work->run.effective_parameters =
            work->certainty->effective_parameters;
    if (status == LW_OK && work->weight) { /* the down-weighted chi-square has no chi-square distribution */
        work->certainty->test.applies = work->certainty->test.rejected = false;
        work->certainty->test.probability = LW_UNKNOWN;
    }
    return status == LW_OK && work->arguments->variance_components ? estimate_components(work, error)
                                                                   : status;
}

lw_status lw_work_estimate(lw_work *work, double lambda, const char *chosen_by, lw_error *error)
{
    lw_status status = LW_OK;
    work->run.damping = lambda;
    work->run.damping_chosen_by = chosen_by;
    work->run.effective_parameters = LW_UNKNOWN;
    bool bounded = has_bounds(work->problem), robust = work->arguments->misfit != LW_MISFIT_SQUARES;
    if (bounded && robust)
        return lw_fail(error, LW_BAD_USAGE,
                       "--misfit %s does not go together with bounds: remove one of them",
                       misfit_name(work->arguments->misfit));
    if (work->arguments->variance_components && lambda > 0.0)
        return lw_fail(
            error, LW_BAD_USAGE,
            "--variance-components does not go together with --damping: the redundancy of the groups is "
            "that of an undamped problem");
    if (work->arguments->search_outliers) {
        if (lambda > 0.0)
            return lw_fail(
                error, LW_BAD_USAGE,
                "--search-outliers does not go together with --damping: the test statistics hold for "
                "undamped problems (state what is known as prior_sigma instead)");
        status = search_outliers(work, error);
    }
    if (status == LW_OK && robust)
        status = reweight(work, lambda, error);
    else if (status == LW_OK && bounded)
        status = bound(work, lambda, error);
    else if (status == LW_OK)
        status = plain(work, lambda, error);
    work->run.seconds.solve += lw_work_lap(work);
    work->run.interrupted = work->qualified == LW_INTERRUPTED;
    bool certain =
        !bounded && work->arguments->misfit !=
                        LW_MISFIT_L1; /* an l1 estimate meets some readings and uses no redundancy */
    if (status == LW_OK && certain && !work->run.interrupted) {
        if (!work->decomposition) status = keep(work, lw_work_decompose(work, lambda, false, error));
        if (status == LW_OK) status = certainty(work, lambda, error);
    }
    work->run.seconds.certainty = lw_work_lap(work);
    work->run.estimate = work->estimate;
    work->run.certainty = work->certainty;
    work->run.outliers = work->outliers;
    work->run.weight = work->weight;
    work->run.at_bound = work->at_bound;
    work->run.bound_multiplier = work->bound_multiplier;
    if (status == LW_OK && work->certainty && work->certainty->test.applies &&
        work->certainty->test.rejected && work->arguments->fail_on_reject && work->qualified == LW_OK)
        work->qualified = LW_QUALIFIED;
    return status;
}
