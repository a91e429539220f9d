/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "problem/system.h"

#include "core/memory.h"
#include "problem/system_part.h"

#include <math.h>
#include <string.h>

void lw_system_free(lw_system *system)
{
    if (system == NULL) return;
    lw_free(system->prior_parameter);
    lw_free(system->parameter_of);
    lw_free(system->column_of);
    lw_free(system->scale);
    lw_free(system->b);
    lw_free(system->start);
    lw_free(system->reduced);
    lw_free(system->row_weight);
    lw_free(system->row_factor);
    lw_free(system->block_factor);
    lw_free(system->block_place);
    lw_free(system->block_scratch);
    lw_sparse_free(system->penalty);
    lw_free(system->penalty_diagonal);
    lw_sparse_free(system->condition);
    lw_free(system->condition_value);
    lw_free(system->condition_reduced);
    lw_free(system->condition_scale);
    lw_sparse_free(system->matrix);
    lw_free(system);
}

double lw_system_power(double norm)
{
    if (!(norm > 0.0)) return 1.0;
    double power = -rint(log2(norm));
    return exp2(fmin(fmax(power, -1000.0), 1000.0));
}

static bool held(const lw_problem *problem, int64_t j)
{
    return problem->fixed != NULL && problem->fixed[j];
}

static bool weighted(const lw_problem *problem, int64_t j)
{
    return problem->prior_sigma != NULL && !isnan(problem->prior_sigma[j]) && !held(problem, j);
}

/* Numbers the free parameters and the weighted priors, and takes x0. */
static lw_status number_columns(lw_system *system, lw_error *error)
{
    const lw_problem *problem = system->problem;
    int64_t n = problem->n, columns = 0, priors = 0;
    system->observations = problem->m;
    for (int64_t j = 0; j < n; j++) {
        columns += !held(problem, j);
        priors += weighted(problem, j);
    }
    system->columns = columns;
    system->priors = priors;
    system->rows = problem->m + priors;
    system->column_of = LW_NEW_ARRAY(int64_t, n);
    system->parameter_of = LW_NEW_ARRAY(int64_t, columns);
    system->prior_parameter = LW_NEW_ARRAY(int64_t, priors);
    system->start = LW_NEW_ARRAY(lw_decimal, columns);
    if (system->column_of == NULL || system->parameter_of == NULL || system->prior_parameter == NULL ||
        system->start == NULL)
        return lw_fail_memory(error, "numbering of the parameters", (size_t)n * 40);
    columns = priors = 0;
    for (int64_t j = 0; j < n; j++) {
        if (weighted(problem, j)) system->prior_parameter[priors++] = j;
        if (held(problem, j)) {
            system->column_of[j] = -1;
            continue;
        }
        system->start[columns] = lw_given(problem->prior, problem->prior_low, j, 0.0);
        system->parameter_of[columns] = j;
        system->column_of[j] = columns++;
    }
    return LW_OK;
}

static lw_status take_factors(lw_system *system, const double *factor, lw_error *error)
{
    system->rows_used = system->rows;
    system->observations_used = system->observations;
    if (factor == NULL) return LW_OK;
    system->row_factor = LW_NEW_ARRAY(double, system->rows);
    if (system->row_factor == NULL)
        return lw_fail_memory(error, "row factors", (size_t)system->rows * sizeof(double));
    for (int64_t i = 0; i < system->rows; i++) {
        if (!(factor[i] >= 0.0) || isinf(factor[i]))
            return lw_fail(error, LW_BAD_SHAPE, "a row factor is not a number >= 0");
        system->row_factor[i] = factor[i];
        if (factor[i] > 0.0) continue;
        system->rows_used--;
        system->observations_used -= i < system->observations;
    }
    return LW_OK;
}

lw_status lw_system_new(const lw_problem *problem, const lw_system_options *options, const lw_watch *watch,
                        lw_system **out, lw_error *error)
{
    *out = NULL;
    lw_penalty_options smallest = {.prefer = LW_PREFER_SMALLEST};
    lw_system *system = LW_NEW(lw_system);
    if (system == NULL) return lw_fail_memory(error, "system", sizeof *system);
    system->problem = problem;
    lw_status status = number_columns(system, error);
    if (status == LW_OK) status = take_factors(system, options == NULL ? NULL : options->row_factor, error);
    if (status == LW_OK) status = lw_system_weigh(system, error);
    if (status == LW_OK) status = lw_system_scale(system, error);
    if (status == LW_OK)
        status = lw_system_damp(system, options == NULL ? &smallest : &options->penalty, watch, error);
    if (status == LW_OK) status = lw_system_reduce(system, error);
    if (status == LW_OK) status = lw_system_restrict(system, error);
    if (status != LW_OK) {
        lw_system_free(system);
        return status;
    }
    *out = system;
    return LW_OK;
}

lw_status lw_system_select(const lw_system *system, const lw_sparse *A, const double *factor, lw_sparse **out,
                           lw_error *error)
{
    int64_t count = 0;
    for (int64_t c = 0; c < system->columns; c++)
        count += A->start[system->parameter_of[c] + 1] - A->start[system->parameter_of[c]];
    lw_status status = lw_sparse_new(A->rows, system->columns, count, 0, out, error);
    if (status != LW_OK) return status;
    lw_sparse *S = *out;
    count = 0;
    for (int64_t c = 0; c < system->columns; c++) {
        int64_t j = system->parameter_of[c];
        double by = factor == NULL ? 1.0 : factor[c];
        S->start[c] = count;
        for (int64_t p = A->start[j]; p < A->start[j + 1]; p++, count++) {
            S->index[count] = A->index[p];
            S->value[count] = A->value[p] * by;
        }
    }
    S->start[system->columns] = count;
    return LW_OK;
}

void lw_system_model(const lw_system *system, const double *z, const double *z_low, double *x)
{
    const lw_problem *problem = system->problem;
    for (int64_t j = 0; j < problem->n; j++) {
        int64_t c = system->column_of[j];
        if (c < 0) {
            x[j] = problem->fixed_value == NULL ? 0.0 : problem->fixed_value[j];
            continue;
        }
        lw_decimal dx =
            lw_two_sum(system->scale[c] * z[c], z_low == NULL ? 0.0 : system->scale[c] * z_low[c]);
        x[j] = lw_decimal_add(system->start[c], dx).high;
    }
}
