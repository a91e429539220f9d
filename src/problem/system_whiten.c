/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Whitening: W v, with W'W = P.
 *
 *     uncorrelated row   W_ii = w_i / sigma_i
 *     correlated block   W = R^-T S,  R'R = Sigma with its diagonal divided by w_i^2
 *
 * S leaves out members with w_i = 0: as w_i -> 0 the inverse of that matrix tends to the inverse of the block
 * without row and column i, bordered by zeros. */
#include "core/memory.h"
#include "matrix/dense.h"
#include "problem/system_part.h"

#include <math.h>
#include <string.h>

static double factor_of(const lw_system *system, int64_t i)
{
    return system->row_factor == NULL ? 1.0 : system->row_factor[i];
}

/* R of block k; what is set aside becomes a unit row and column. */
static lw_status factor_block(lw_system *system, int64_t k, lw_error *error)
{
    const lw_problem *problem = system->problem;
    const lw_covariance *covariance = problem->covariance;
    int64_t size = covariance->start[k + 1] - covariance->start[k], defect = 0;
    const int32_t *member = covariance->member + covariance->start[k];
    const double *from = covariance->value + covariance->value_start[k];
    double *R = system->block_factor + covariance->value_start[k];
    memcpy(R, from, (size_t)(size * size) * sizeof *R);
    for (int64_t i = 0; i < size; i++) {
        double w = factor_of(system, member[i]);
        for (int64_t j = 0; w == 0.0 && j < size; j++) R[i + j * size] = R[j + i * size] = i == j ? 1.0 : 0.0;
        if (w != 0.0) R[i + i * size] /= w * w;
    }
    lw_status status = lw_dense_cholesky(size, R, &defect, error);
    if (status != LW_UNSOLVABLE) return status;
    return lw_fail(error, LW_BAD_INPUT, "the covariance block of observation '%s' is not positive definite",
                   lw_ids_name(problem->observations, member[defect >= 0 && defect < size ? defect : 0]));
}

static lw_status factor_blocks(lw_system *system, lw_error *error)
{
    const lw_covariance *covariance = system->problem->covariance;
    int64_t values = covariance->value_start[covariance->blocks], largest = 0;
    system->block_factor = LW_NEW_ARRAY(double, values);
    system->block_place = LW_NEW_ZEROS(int32_t, system->observations);
    if (system->block_factor == NULL || system->block_place == NULL)
        return lw_fail_memory(error, "covariance blocks", (size_t)lw_bytes(values, 8));
    for (int64_t k = 0; k < covariance->blocks; k++) {
        int64_t size = covariance->start[k + 1] - covariance->start[k];
        if (size > largest) largest = size;
        for (int64_t i = 0; i < size; i++)
            system->block_place[covariance->member[covariance->start[k] + i]] = (int32_t)i;
        lw_status status = factor_block(system, k, error);
        if (status != LW_OK) return status;
    }
    system->block_scratch = LW_NEW_ARRAY(double, largest);
    return system->block_scratch == NULL ? lw_fail_memory(error, "covariance blocks", (size_t)largest * 8)
                                         : LW_OK;
}

lw_status lw_system_weigh(lw_system *system, lw_error *error)
{
    const lw_problem *problem = system->problem;
    system->row_weight = LW_NEW_ARRAY(double, system->rows);
    if (system->row_weight == NULL)
        return lw_fail_memory(error, "row weights", (size_t)system->rows * sizeof(double));
    for (int64_t i = 0; i < system->rows; i++) {
        double w = factor_of(system, i);
        if (i >= system->observations)
            system->row_weight[i] =
                w / problem->prior_sigma[system->prior_parameter[i - system->observations]];
        else if (lw_system_block(system, i) >= 0)
            system->row_weight[i] = w == 0.0 ? 0.0 : 1.0;
        else
            system->row_weight[i] = problem->sigma == NULL ? w : w / problem->sigma[i];
    }
    return problem->covariance == NULL ? LW_OK : factor_blocks(system, error);
}

/* What is done to the members of a block, gathered in `part`. */
typedef void block_work(int64_t size, const double *R, double *part);

static void solve_lower(int64_t size, const double *R, double *part)
{
    lw_dense_triangle_solve(size, R, 1, 1, 1, part, size);
}

static void solve_upper(int64_t size, const double *R, double *part)
{
    lw_dense_triangle_solve(size, R, 1, 0, 1, part, size);
}

static void multiply_lower(int64_t size, const double *R, double *part)
{
    for (int64_t i = size - 1; i >= 0; i--) {
        double sum = 0.0;
        for (int64_t j = 0; j <= i; j++) sum += R[j + i * size] * part[j];
        part[i] = sum;
    }
}

static void work_blocks(const lw_system *system, block_work *work, double *v)
{
    const lw_covariance *covariance = system->problem->covariance;
    double *part = system->block_scratch;
    for (int64_t k = 0; covariance != NULL && k < covariance->blocks; k++) {
        int64_t size = covariance->start[k + 1] - covariance->start[k];
        const int32_t *member = covariance->member + covariance->start[k];
        for (int64_t i = 0; i < size; i++) part[i] = system->row_weight[member[i]] * v[member[i]];
        work(size, system->block_factor + covariance->value_start[k], part);
        for (int64_t i = 0; i < size; i++) v[member[i]] = system->row_weight[member[i]] * part[i];
    }
}

static void work_rows(const lw_system *system, block_work *work, int inverse, int k, double *v)
{
    for (; k > 0; k--, v += system->rows) {
        work_blocks(system, work, v);
        for (int64_t i = 0; i < system->rows; i++) {
            if (i < system->observations && lw_system_block(system, i) >= 0) continue;
            double w = system->row_weight[i];
            if (inverse)
                v[i] = w == 0.0 ? 0.0 : v[i] / w;
            else
                v[i] *= w;
        }
    }
}

void lw_system_whiten(const lw_system *system, int k, double *v)
{
    work_rows(system, solve_lower, 0, k, v);
}

void lw_system_whiten_transposed(const lw_system *system, int k, double *v)
{
    work_rows(system, solve_upper, 0, k, v);
}

void lw_system_unwhiten(const lw_system *system, int k, double *v)
{
    work_rows(system, multiply_lower, 1, k, v);
}
