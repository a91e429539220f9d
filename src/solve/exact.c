/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Coordinates: the decomposition solves with whitened rows (W f), scaled columns (S g) and scaled conditions
 * (D h). With W'W = P its unknowns belong to the exact ones by  y = W' r,  dx = S z,  u = D u_scaled,  yp = r
 * of the penalty rows. */
#include "solve/exact.h"

#include "core/memory.h"

#include <string.h>

struct lw_exact {
    const lw_system *system;
    double lambda;
    int64_t penalty_rows; /* 0 when lambda is 0 */
    lw_decimal
        *variance; /* rows: sigma^2 / w^2; 0 where set aside; correlated rows: the diagonal, corrected by w */
    lw_decimal *row, *column, *condition, *penalty; /* accumulators */
    double *white;                                  /* rows */
};

void lw_exact_free(lw_exact *exact)
{
    if (exact == NULL) return;
    lw_free(exact->variance);
    lw_free(exact->row);
    lw_free(exact->column);
    lw_free(exact->condition);
    lw_free(exact->penalty);
    lw_free(exact->white);
    lw_free(exact);
}

static lw_decimal given(const double *high, const double *low, int64_t i, double missing)
{
    if (high == NULL) return lw_decimal_of(missing);
    return (lw_decimal){high[i], low == NULL ? 0.0 : low[i]};
}

static void take_variances(lw_exact *exact)
{
    const lw_system *system = exact->system;
    const lw_problem *problem = system->problem;
    const lw_covariance *covariance = problem->covariance;
    for (int64_t i = 0; i < system->rows; i++) {
        lw_decimal v, w = lw_decimal_of(system->row_factor == NULL ? 1.0 : system->row_factor[i]);
        int32_t block = covariance == NULL || i >= system->observations ? -1 : covariance->block_of[i];
        if (w.high == 0.0) {
            exact->variance[i] = lw_decimal_of(0.0);
            continue;
        }
        if (block >= 0) {
            int64_t size = covariance->start[block + 1] - covariance->start[block],
                    k = system->block_place[i];
            v = given(covariance->value, covariance->low, covariance->value_start[block] + k * size + k, 1.0);
        } else if (i >= system->observations) {
            v = given(problem->prior_sigma, problem->prior_sigma_low,
                      system->prior_parameter[i - system->observations], 1.0);
            v = lw_decimal_multiply(v, v);
        } else {
            v = given(problem->sigma, problem->sigma_low, i, 1.0);
            v = lw_decimal_multiply(v, v);
        }
        exact->variance[i] = w.high == 1.0 ? v : lw_decimal_divide(v, lw_decimal_multiply(w, w));
    }
}

lw_status lw_exact_new(const lw_system *system, double lambda, lw_exact **out, lw_error *error)
{
    *out = NULL;
    lw_exact *exact = LW_NEW(lw_exact);
    if (exact == NULL) return lw_fail_memory(error, "refinement", sizeof *exact);
    exact->system = system;
    exact->lambda = lambda;
    exact->penalty_rows = lambda > 0.0 ? system->penalty_rows : 0;
    exact->variance = LW_NEW_ARRAY(lw_decimal, system->rows);
    exact->row = LW_NEW_ARRAY(lw_decimal, system->rows);
    exact->white = LW_NEW_ARRAY(double, system->rows);
    exact->column = LW_NEW_ARRAY(lw_decimal, system->columns);
    exact->condition = LW_NEW_ARRAY(lw_decimal, system->conditions);
    exact->penalty = LW_NEW_ARRAY(lw_decimal, exact->penalty_rows);
    if (exact->variance == NULL || exact->row == NULL || exact->white == NULL || exact->column == NULL ||
        exact->condition == NULL || exact->penalty == NULL) {
        lw_exact_free(exact);
        return lw_fail_memory(error, "refinement", (size_t)lw_bytes(system->rows, 40));
    }
    take_variances(exact);
    *out = exact;
    return LW_OK;
}

lw_status lw_exact_state_new(const lw_exact *exact, lw_exact_state *out, lw_error *error)
{
    const lw_system *system = exact->system;
    out->dx = LW_NEW_ZEROS(lw_decimal, system->columns);
    out->y = LW_NEW_ZEROS(lw_decimal, system->rows);
    out->yp = LW_NEW_ZEROS(lw_decimal, exact->penalty_rows);
    out->u = LW_NEW_ZEROS(lw_decimal, system->conditions);
    if (out->dx != NULL && out->y != NULL && out->yp != NULL && out->u != NULL) return LW_OK;
    lw_exact_state_clear(out);
    return lw_fail_memory(error, "refinement", (size_t)lw_bytes(system->rows + system->columns, 16));
}

void lw_exact_state_clear(lw_exact_state *state)
{
    lw_free(state->dx);
    lw_free(state->y);
    lw_free(state->yp);
    lw_free(state->u);
    *state = (lw_exact_state){0};
}

/* acc <- acc - Sigma y. */
static void subtract_variance(const lw_exact *exact, const lw_decimal *y, lw_decimal *acc)
{
    const lw_system *system = exact->system;
    const lw_covariance *covariance = system->problem->covariance;
    for (int64_t i = 0; i < system->rows; i++)
        acc[i] = lw_decimal_subtract(acc[i], lw_decimal_multiply(exact->variance[i], y[i]));
    for (int64_t k = 0; covariance != NULL && k < covariance->blocks; k++) {
        const int32_t *member = covariance->member + covariance->start[k];
        int64_t size = covariance->start[k + 1] - covariance->start[k], place = covariance->value_start[k];
        for (int64_t i = 0; i < size; i++) {
            lw_decimal *sum = &acc[member[i]];
            for (int64_t j = 0; j < size; j++, place++) {
                if (j == i) continue;
                lw_decimal v = given(covariance->value, covariance->low, place, 0.0);
                *sum = lw_decimal_subtract(*sum, lw_decimal_multiply(v, y[member[j]]));
            }
        }
    }
}

/* acc (rows of M) <- acc + factor M x / scale; powers of two divide exactly. NULL M: diagonal. */
static void add_product(const lw_sparse *M, const double *diagonal, double factor, int64_t columns,
                        const double *scale, const lw_decimal *x, lw_decimal *acc)
{
    for (int64_t c = 0; c < columns; c++) {
        lw_decimal z = {x[c].high / scale[c], x[c].low / scale[c]};
        z = lw_decimal_multiply(z, lw_decimal_of(factor));
        if (M == NULL) {
            acc[c] = lw_decimal_add(acc[c], lw_decimal_multiply(z, lw_decimal_of(diagonal[c])));
            continue;
        }
        for (int64_t p = M->start[c]; p < M->start[c + 1]; p++) {
            lw_decimal *sum = &acc[M->index[p]];
            *sum = lw_decimal_add(*sum, lw_decimal_multiply(z, lw_decimal_of(M->value[p])));
        }
    }
}

/* acc_c (model units) <- acc_c + factor (M' v)_c / scale_c. NULL M: diagonal. */
static void add_transposed(const lw_sparse *M, const double *diagonal, double factor, int64_t columns,
                           const double *scale, const lw_decimal *v, lw_decimal *acc)
{
    for (int64_t c = 0; c < columns; c++) {
        lw_decimal sum = {0.0, 0.0};
        if (M == NULL) sum = lw_decimal_multiply(v[c], lw_decimal_of(diagonal[c]));
        for (int64_t p = M == NULL ? 0 : M->start[c]; M != NULL && p < M->start[c + 1]; p++)
            sum = lw_decimal_add(sum, lw_decimal_multiply(v[M->index[p]], lw_decimal_of(M->value[p])));
        sum = lw_decimal_multiply(sum, lw_decimal_of(factor));
        acc[c] = lw_decimal_add(acc[c], (lw_decimal){sum.high / scale[c], sum.low / scale[c]});
    }
}

/* C in decimals: h <- h - C dx. */
static void subtract_conditions(const lw_system *system, const lw_decimal *dx, lw_decimal *h)
{
    const lw_sparse *C = system->problem->conditions;
    for (int64_t c = 0; c < system->columns; c++) {
        int64_t j = system->parameter_of[c];
        for (int64_t p = C->start[j]; p < C->start[j + 1]; p++) {
            lw_decimal *sum = &h[C->index[p]];
            *sum = lw_decimal_subtract(*sum, lw_decimal_multiply(given(C->value, C->low, p, 0.0), dx[c]));
        }
    }
}

/* g <- g + C'u. */
static void add_conditions(const lw_system *system, const lw_decimal *u, lw_decimal *g)
{
    const lw_sparse *C = system->problem->conditions;
    for (int64_t c = 0; c < system->columns; c++) {
        int64_t j = system->parameter_of[c];
        for (int64_t p = C->start[j]; p < C->start[j + 1]; p++)
            g[c] = lw_decimal_add(g[c], lw_decimal_multiply(given(C->value, C->low, p, 0.0), u[C->index[p]]));
    }
}

static void row_residual(lw_exact *exact, lw_exact_side side, const lw_exact_state *state, lw_team *team,
                         double *f)
{
    const lw_system *system = exact->system;
    if (side == LW_SIDE_PROBLEM)
        memcpy(exact->row, system->reduced, (size_t)system->rows * sizeof *exact->row);
    else
        memset(exact->row, 0, (size_t)system->rows * sizeof *exact->row);
    lw_system_subtract_exact(system, state->dx, team, exact->row);
    subtract_variance(exact, state->y, exact->row);
    for (int64_t i = 0; i < system->rows; i++) f[i] = exact->row[i].high;
    lw_system_whiten(system, 1, f);
    if (exact->penalty_rows == 0) return;
    memset(exact->penalty, 0, (size_t)exact->penalty_rows * sizeof *exact->penalty);
    add_product(system->penalty, system->penalty_diagonal, exact->lambda, system->columns, system->scale,
                state->dx, exact->penalty);
    for (int64_t i = 0; i < exact->penalty_rows; i++)
        f[system->rows + i] = -lw_decimal_add(exact->penalty[i], state->yp[i]).high;
}

static void column_residual(lw_exact *exact, lw_exact_side side, int64_t column, const lw_exact_state *state,
                            lw_team *team, double *g)
{
    const lw_system *system = exact->system;
    lw_decimal *acc = exact->column;
    lw_system_transposed_exact(system, state->y, team, acc);
    if (exact->penalty_rows > 0)
        add_transposed(system->penalty, system->penalty_diagonal, exact->lambda, system->columns,
                       system->scale, state->yp, acc);
    if (system->conditions > 0) add_conditions(system, state->u, acc);
    if (side == LW_SIDE_UNIT) acc[column] = lw_decimal_add(acc[column], lw_decimal_of(1.0));
    for (int64_t c = 0; c < system->columns; c++) g[c] = -acc[c].high * system->scale[c];
}

static void condition_residual(lw_exact *exact, lw_exact_side side, const lw_exact_state *state, double *h)
{
    const lw_system *system = exact->system;
    for (int64_t i = 0; i < system->conditions; i++)
        exact->condition[i] = side == LW_SIDE_PROBLEM ? system->condition_reduced[i] : lw_decimal_of(0.0);
    subtract_conditions(system, state->dx, exact->condition);
    for (int64_t i = 0; i < system->conditions; i++)
        h[i] = exact->condition[i].high * system->condition_scale[i];
}

lw_status lw_exact_residual(lw_exact *exact, lw_exact_side side, int64_t column, const lw_exact_state *state,
                            lw_team *team, double *f, double *g, double *h, lw_error *error)
{
    if (side == LW_SIDE_UNIT && (column < 0 || column >= exact->system->columns))
        return lw_fail(error, LW_BAD_SHAPE, "refinement for a column that does not exist");
    row_residual(exact, side, state, team, f);
    column_residual(exact, side, column, state, team, g);
    if (exact->system->conditions > 0) condition_residual(exact, side, state, h);
    return LW_OK;
}

void lw_exact_correct(lw_exact *exact, const double *r, const double *z, const double *u,
                      lw_exact_state *state)
{
    const lw_system *system = exact->system;
    memcpy(exact->white, r, (size_t)system->rows * sizeof *r);
    lw_system_whiten_transposed(system, 1, exact->white);
    for (int64_t i = 0; i < system->rows; i++)
        state->y[i] = lw_decimal_add(state->y[i], lw_decimal_of(exact->white[i]));
    for (int64_t i = 0; i < exact->penalty_rows; i++)
        state->yp[i] = lw_decimal_add(state->yp[i], lw_decimal_of(r[system->rows + i]));
    for (int64_t c = 0; c < system->columns; c++)
        state->dx[c] = lw_decimal_add(state->dx[c], lw_decimal_of(system->scale[c] * z[c]));
    for (int64_t i = 0; i < system->conditions; i++)
        state->u[i] = lw_decimal_add(state->u[i], lw_decimal_of(system->condition_scale[i] * u[i]));
}

lw_decimal lw_exact_chi_square(const lw_exact *exact, const lw_exact_state *state)
{
    lw_decimal sum = {0.0, 0.0};
    memset(exact->row, 0, (size_t)exact->system->rows * sizeof *exact->row);
    subtract_variance(exact, state->y, exact->row);
    for (int64_t i = 0; i < exact->system->rows; i++)
        sum = lw_decimal_subtract(sum, lw_decimal_multiply(state->y[i], exact->row[i]));
    return sum;
}
