/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "solve/decomposition.h"

#include "core/memory.h"
#include "matrix/vector.h"

#include <math.h>

static const char *const names[] = {"direct",    "refined", "tolerance",   "steps", "stagnated",
                                    "breakdown", "memory",  "interrupted", "zero"};
static const char *const words[] = {
    "A factorization was solved: exact up to rounding.",
    "The estimate was refined until it no longer changed.",
    "The tolerance asked for was reached.",
    "The largest number of steps was made before the tolerance was reached.",
    "Rounding allows no further progress.",
    "The Krylov space is exhausted: the solution is exact within it.",
    "The basis filled the memory budget.",
    "The work was interrupted.",
    "The observations already agree with the start values: nothing had to be solved."};

const char *lw_stop_name(lw_stop stop)
{
    return (unsigned)stop < sizeof names / sizeof *names ? names[stop] : "unknown";
}

const char *lw_stop_words(lw_stop stop)
{
    return (unsigned)stop < sizeof words / sizeof *words ? words[stop] : "The reason is not known.";
}

void lw_estimate_free(lw_estimate *estimate)
{
    if (!estimate) return;
    lw_free(estimate->x);
    lw_free(estimate->z);
    lw_free(estimate->z_low);
    lw_free(estimate->residual);
    lw_free(estimate->weighted);
    lw_free(estimate->condition_multiplier);
    lw_free(estimate);
}

void lw_decomposition_free(lw_decomposition *decomposition)
{
    if (decomposition) decomposition->methods->free_self(decomposition);
}

static double *copy_of(int64_t n, const double *v)
{
    double *copy = LW_NEW_ARRAY(double, n);
    if (copy) lw_copy(n, v, copy);
    return copy;
}

/* misfit over the observations, chi_square over all rows: sums of squares of the whitened residual W v. */
static void norms_of_residual(const lw_system *system, const double *whitened, lw_point *point)
{
    double misfit = lw_norm(system->observations, whitened, NULL);
    double prior = lw_norm(system->priors, whitened + system->observations, NULL);
    point->misfit = misfit;
    point->chi_square = misfit * misfit + prior * prior;
}

static lw_status fill_from_model(const lw_system *system, double lambda, const double *z, const double *z_low,
                                 int exact, lw_estimate *e, lw_error *error)
{
    lw_system_model(system, z, z_low, e->x);
    lw_status status = lw_system_residual(system, z, z_low, exact, e->residual, error);
    if (status < 0) return status;
    lw_copy(system->rows, e->residual, e->weighted);
    lw_system_whiten(system, 1, e->weighted);
    norms_of_residual(system, e->weighted, &e->point);
    lw_system_whiten_transposed(system, 1, e->weighted);
    double *penalty = LW_NEW_ARRAY(double, system->penalty_rows);
    if (!penalty)
        return lw_fail_memory(error, "the penalty of the estimate", (size_t)system->penalty_rows * 8);
    lw_system_penalize(system, z, penalty);
    e->point.size = hypot(lw_norm(system->penalty_rows, penalty, NULL), system->penalty_constant);
    e->point.lambda = lambda;
    lw_free(penalty);
    return LW_OK;
}

lw_status lw_estimate_from_model(const lw_system *system, double lambda, const double *z, const double *z_low,
                                 int exact, lw_estimate **out, lw_error *error)
{
    *out = NULL;
    lw_estimate *e = LW_NEW(lw_estimate);
    if (!e) return lw_fail_memory(error, "the estimate", sizeof *e);
    e->parameters = system->problem->n;
    e->rows = system->rows;
    e->x = LW_NEW_ARRAY(double, e->parameters);
    e->z = copy_of(system->columns, z);
    e->z_low = z_low ? copy_of(system->columns, z_low) : NULL;
    e->residual = LW_NEW_ARRAY(double, e->rows);
    e->weighted = LW_NEW_ARRAY(double, e->rows);
    e->rank = -1;
    e->rcond = e->contraction = e->refined_to = (double)NAN;
    e->point.size_slope = e->point.effective_parameters = (double)NAN;
    lw_status status = LW_OK;
    if (!e->x || !e->z || (z_low && !e->z_low) || !e->residual || !e->weighted)
        status = lw_fail_memory(error, "the estimate", (size_t)(e->rows + e->parameters) * 16);
    if (status == LW_OK) status = fill_from_model(system, lambda, z, z_low, exact, e, error);
    if (status < 0) {
        lw_estimate_free(e);
        return status;
    }
    *out = e;
    return status;
}
