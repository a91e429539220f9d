/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Everything that is taken from the decimals in double-double: reduction by x0 and held values, exact
 * products, residuals. Rounding to double comes once, at the end. */
#include "core/memory.h"
#include "problem/system_part.h"

#include <math.h>
#include <string.h>

/* sum <- sum + a x, carried as high + low without renormalizing: high takes two_sum, low everything that was
 * left over, so that the error stays at n^2 u^2 sum |a x| (Ogita, Rump & Oishi, SIAM J. Sci. Comput.
 * 26(6):1955-1988, 2005, Dot2). */
static inline void add_product(lw_decimal *sum, double high, double low, lw_decimal x)
{
    double product = high * x.high, rest = fma(high, x.high, -product) + (high * x.low + low * x.high);
    double total = sum->high + product, back = total - sum->high;
    sum->low += ((sum->high - (total - back)) + (product - back)) + rest;
    sum->high = total;
}

static inline lw_decimal settled(lw_decimal sum)
{
    return lw_two_sum(sum.high, sum.low);
}

/* acc <- acc - column j of A (decimals) times x; acc is left to be settled. */
static void subtract_column(const lw_sparse *A, int64_t j, lw_decimal x, lw_decimal *acc)
{
    x = lw_decimal_negate(x);
    for (int64_t p = A->start[j]; p < A->start[j + 1]; p++)
        add_product(&acc[A->index[p]], A->value[p], A->low == NULL ? 0.0 : A->low[p], x);
}

static lw_decimal held_or_start(const lw_system *system, int64_t j)
{
    const lw_problem *problem = system->problem;
    int64_t c = system->column_of[j];
    return c >= 0 ? system->start[c] : lw_given(problem->fixed_value, problem->fixed_low, j, 0.0);
}

/* b = W reduced, the forward substitution of a block in double-double: y_i = (v_i - sum_k<i R_ki y_k) / R_ii.
 */
static void whiten_block(const lw_system *system, int64_t k, lw_decimal *part)
{
    const lw_covariance *covariance = system->problem->covariance;
    int64_t size = covariance->start[k + 1] - covariance->start[k];
    const int32_t *member = covariance->member + covariance->start[k];
    const double *R = system->block_factor + covariance->value_start[k];
    for (int64_t i = 0; i < size; i++) {
        lw_decimal sum = system->reduced[member[i]];
        if (system->row_weight[member[i]] == 0.0) sum = lw_decimal_of(0.0);
        for (int64_t j = 0; j < i; j++)
            sum = lw_decimal_subtract(sum, lw_decimal_multiply(lw_decimal_of(R[j + i * size]), part[j]));
        part[i] = lw_decimal_divide(sum, lw_decimal_of(R[i + i * size]));
    }
    for (int64_t i = 0; i < size; i++) system->b[member[i]] = part[i].high;
}

static lw_status whiten_side(lw_system *system, lw_error *error)
{
    const lw_problem *problem = system->problem;
    const lw_covariance *covariance = problem->covariance;
    for (int64_t i = 0; i < system->rows; i++) {
        if (i < system->observations && lw_system_block(system, i) >= 0) continue;
        double w = system->row_factor == NULL ? 1.0 : system->row_factor[i];
        lw_decimal sigma;
        if (i < system->observations)
            sigma = lw_given(problem->sigma, problem->sigma_low, i, 1.0);
        else
            sigma = lw_given(problem->prior_sigma, problem->prior_sigma_low,
                             system->prior_parameter[i - system->observations], 1.0);
        lw_decimal white = lw_decimal_divide(system->reduced[i], sigma);
        system->b[i] = lw_decimal_multiply(white, lw_decimal_of(w)).high;
    }
    if (covariance == NULL) return LW_OK;
    int64_t largest = 0;
    for (int64_t k = 0; k < covariance->blocks; k++)
        if (covariance->start[k + 1] - covariance->start[k] > largest)
            largest = covariance->start[k + 1] - covariance->start[k];
    lw_decimal *part = LW_NEW_ARRAY(lw_decimal, largest);
    if (part == NULL) return lw_fail_memory(error, "covariance blocks", (size_t)largest * sizeof *part);
    for (int64_t k = 0; k < covariance->blocks; k++) whiten_block(system, k, part);
    lw_free(part);
    return LW_OK;
}

lw_status lw_system_reduce(lw_system *system, lw_error *error)
{
    const lw_problem *problem = system->problem;
    system->reduced = LW_NEW_ARRAY(lw_decimal, system->rows);
    system->b = LW_NEW_ARRAY(double, system->rows);
    if (system->reduced == NULL || system->b == NULL)
        return lw_fail_memory(error, "reduced observations", (size_t)system->rows * 24);
    for (int64_t i = 0; i < system->observations; i++)
        system->reduced[i] = lw_given(problem->value, problem->value_low, i, 0.0);
    for (int64_t j = 0; j < problem->n; j++) {
        lw_decimal x = held_or_start(system, j);
        if (x.high != 0.0) subtract_column(problem->design, j, x, system->reduced);
    }
    for (int64_t i = 0; i < system->observations; i++) system->reduced[i] = settled(system->reduced[i]);
    for (int64_t k = 0; k < system->priors; k++) {
        int64_t j = system->prior_parameter[k];
        lw_decimal prior = lw_given(problem->prior, problem->prior_low, j, 0.0);
        system->reduced[system->observations + k] =
            lw_decimal_subtract(prior, system->start[system->column_of[j]]);
    }
    return whiten_side(system, error);
}

/* C x = d -> (D C S) z = D (d - C x0 - C_fixed x_fixed), D the power of two that brings the largest entry
 * near 1. */
lw_status lw_system_restrict(lw_system *system, lw_error *error)
{
    const lw_problem *problem = system->problem;
    if (problem->conditions == NULL || problem->conditions->rows == 0) return LW_OK;
    int64_t count = system->conditions = problem->conditions->rows;
    lw_decimal *d = system->condition_reduced = LW_NEW_ARRAY(lw_decimal, count);
    system->condition_value = LW_NEW_ARRAY(double, count);
    system->condition_scale = LW_NEW_ZEROS(double, count);
    lw_status status = LW_OK;
    if (d == NULL || system->condition_value == NULL || system->condition_scale == NULL)
        status = lw_fail_memory(error, "conditions", (size_t)count * 32);
    if (status == LW_OK)
        status = lw_system_select(system, problem->conditions, system->scale, &system->condition, error);
    if (status == LW_OK) {
        lw_sparse *C = system->condition;
        double *scale = system->condition_scale;
        for (int64_t i = 0; i < count; i++)
            d[i] = lw_given(problem->condition_value, problem->condition_low, i, 0.0);
        for (int64_t j = 0; j < problem->n; j++)
            subtract_column(problem->conditions, j, held_or_start(system, j), d);
        for (int64_t i = 0; i < count; i++) d[i] = settled(d[i]);
        for (int64_t p = 0; p < lw_sparse_nonzeros(C); p++)
            scale[C->index[p]] = fmax(scale[C->index[p]], fabs(C->value[p]));
        for (int64_t i = 0; i < count; i++) scale[i] = lw_system_power(scale[i]);
        for (int64_t p = 0; p < lw_sparse_nonzeros(C); p++) C->value[p] *= scale[C->index[p]];
        for (int64_t i = 0; i < count; i++) system->condition_value[i] = d[i].high * scale[i];
    }
    return status;
}

typedef struct exact_work {
    const lw_system *system;
    const lw_decimal *in;
    lw_decimal *out;
    int parts;
} exact_work;

/* The rows of one part. Every row sums its columns in order, whatever the parts. */
static void subtract_part(void *state, int part)
{
    exact_work *work = state;
    const lw_system *system = work->system;
    const lw_sparse *A = system->problem->design;
    int64_t from = A->rows * part / work->parts, to = A->rows * (part + 1) / work->parts;
    for (int64_t c = 0; c < system->columns; c++) {
        int64_t j = system->parameter_of[c], p = A->start[j], end = A->start[j + 1];
        lw_decimal x = lw_decimal_negate(work->in[c]);
        if (x.high == 0.0) continue;
        while (p < end && A->index[p] < from) p++;
        for (; p < end && A->index[p] < to; p++)
            add_product(&work->out[A->index[p]], A->value[p], A->low == NULL ? 0.0 : A->low[p], x);
    }
    for (int64_t i = from; i < to; i++) work->out[i] = settled(work->out[i]);
}

void lw_system_subtract_exact(const lw_system *system, const lw_decimal *dx, lw_team *team, lw_decimal *acc)
{
    int threads = team == NULL ? 1 : lw_team_threads(team);
    exact_work work = {system, dx, acc, system->columns < 4096 ? 1 : threads > 8 ? 8 : threads};
    lw_team_run(team, work.parts, subtract_part, &work);
    for (int64_t k = 0; k < system->priors; k++) {
        lw_decimal *sum = &acc[system->observations + k];
        *sum = lw_decimal_subtract(*sum, dx[system->column_of[system->prior_parameter[k]]]);
    }
}

static void transposed_part(void *state, int part)
{
    exact_work *work = state;
    const lw_sparse *A = work->system->problem->design;
    int64_t columns = work->system->columns;
    for (int64_t c = columns * part / work->parts; c < columns * (part + 1) / work->parts; c++) {
        int64_t j = work->system->parameter_of[c];
        lw_decimal sum = {0.0, 0.0};
        for (int64_t p = A->start[j]; p < A->start[j + 1]; p++)
            add_product(&sum, A->value[p], A->low == NULL ? 0.0 : A->low[p], work->in[A->index[p]]);
        work->out[c] = settled(sum);
    }
}

void lw_system_transposed_exact(const lw_system *system, const lw_decimal *y, lw_team *team, lw_decimal *g)
{
    exact_work work = {system, y, g, system->columns < 4096 ? 1 : 64};
    lw_team_run(team, work.parts, transposed_part, &work);
    for (int64_t k = 0; k < system->priors; k++) {
        lw_decimal *sum = &g[system->column_of[system->prior_parameter[k]]];
        *sum = lw_decimal_add(*sum, y[system->observations + k]);
    }
}

static lw_status residual_exact(const lw_system *system, const double *z, const double *z_low,
                                double *residual, lw_error *error)
{
    lw_decimal *dx = LW_NEW_ARRAY(lw_decimal, system->columns), *acc = LW_NEW_ARRAY(lw_decimal, system->rows);
    lw_status status = LW_OK;
    if (dx == NULL || acc == NULL) {
        status =
            lw_fail_memory(error, "exact residual", (size_t)(system->rows + system->columns) * sizeof *acc);
    } else {
        for (int64_t c = 0; c < system->columns; c++)
            dx[c] = lw_two_sum(system->scale[c] * z[c], z_low == NULL ? 0.0 : system->scale[c] * z_low[c]);
        memcpy(acc, system->reduced, (size_t)system->rows * sizeof *acc);
        lw_system_subtract_exact(system, dx, NULL, acc);
        for (int64_t i = 0; i < system->rows; i++) residual[i] = -acc[i].high;
    }
    lw_free(dx);
    lw_free(acc);
    return status;
}

lw_status lw_system_residual(const lw_system *system, const double *z, const double *z_low, int exact,
                             double *residual, lw_error *error)
{
    if (exact) return residual_exact(system, z, z_low, residual, error);
    const lw_sparse *A = system->problem->design;
    for (int64_t i = 0; i < system->rows; i++) residual[i] = -system->reduced[i].high;
    for (int64_t c = 0; c < system->columns; c++) {
        int64_t j = system->parameter_of[c];
        double dx = system->scale[c] * z[c];
        for (int64_t p = A->start[j]; p < A->start[j + 1]; p++) residual[A->index[p]] += A->value[p] * dx;
        lw_sparse_release_behind(A, j);
    }
    for (int64_t k = 0; k < system->priors; k++) {
        int64_t c = system->column_of[system->prior_parameter[k]];
        residual[system->observations + k] += system->scale[c] * z[c];
    }
    return LW_OK;
}
