/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "certainty/resolution.h"

#include "core/chance.h"
#include "core/memory.h"

#include <math.h>
#include <string.h>

#define STREAM 73
#define PROBES_A_SOLVE 16

/* sum_k Q_jk S_kj of the symmetric S, upper triangle stored. */
static void product_diagonal(const lw_cofactor *c, const lw_sparse *S, double *diagonal)
{
    memset(diagonal, 0, (size_t)S->columns * sizeof *diagonal);
    for (int64_t j = 0; j < S->columns; j++) {
        for (int64_t e = S->start[j]; e < S->start[j + 1]; e++) {
            int64_t i = S->index[e];
            double term = lw_cofactor_entry(c, i, j) * S->value[e];
            diagonal[j] += term;
            if (i != j) diagonal[i] += term;
        }
    }
}

lw_status lw_resolution_of_entries(const lw_cofactor *c, const lw_watch *watch, double *diagonal,
                                   double *trace, lw_error *error)
{
    lw_system *system = c->decomposition->system;
    lw_sparse *S = NULL;
    lw_status status = LW_OK;
    int64_t n = c->columns;
    *trace = 0;
    if (c->lambda > 0) {
        status = lw_system_penalty_gram(system, &S, error);
        if (status == LW_OK) product_diagonal(c, S, diagonal);
        for (int64_t j = 0; j < n && status == LW_OK; j++)
            diagonal[j] = 1 - c->lambda * c->lambda * diagonal[j];
    } else if (c->defect > 0) {
        status = lw_system_matrix(system, watch, error);
        if (status == LW_OK) status = lw_sparse_gram(system->matrix, NULL, &S, error);
        if (status == LW_OK) product_diagonal(c, S, diagonal);
    } else {
        for (int64_t j = 0; j < n; j++) diagonal[j] = 1;
    }
    lw_sparse_free(S);
    for (int64_t j = 0; j < n && status == LW_OK; j++) *trace += diagonal[j];
    return status;
}

/* z = Q A'A v of k vectors: the solution for the data A v. */
static lw_status resolve(lw_cofactor *c, int k, const double *v, double *f, double *z, lw_error *error)
{
    lw_system *system = c->decomposition->system;
    lw_sparse_apply(system->matrix, k, v, f);
    lw_status status = lw_cofactor_project(c, k, f, NULL, z, error);
    return status > LW_OK && status != LW_INTERRUPTED ? LW_OK : status;
}

lw_status lw_resolution_by_probes(lw_cofactor *c, const lw_watch *watch, double *diagonal, double *trace,
                                  double *spread, lw_error *error)
{
    lw_system *system = c->decomposition->system;
    int64_t n = c->columns, room = n * PROBES_A_SOLVE;
    const double count = LW_RESOLUTION_PROBES;
    lw_random *random = NULL;
    lw_status status = lw_system_matrix(system, watch, error);
    double *v = LW_NEW_ARRAY(double, room), *z = LW_NEW_ARRAY(double, room),
           *squares = LW_NEW_ZEROS(double, n);
    double *f = LW_NEW_ARRAY(double, system->rows *PROBES_A_SOLVE);
    if (status == LW_OK && !(v && z && squares && f))
        status = lw_fail_memory(error, "the resolution", (size_t)room * 16);
    if (status == LW_OK) status = lw_random_new(lw_watch_seed(watch), STREAM, &random, error);
    memset(diagonal, 0, (size_t)n * sizeof *diagonal);
    *trace = *spread = 0;
    for (int done = 0; done < LW_RESOLUTION_PROBES && status == LW_OK; done += PROBES_A_SOLVE) {
        lw_watch_tick(watch, "resolution", done, count, "");
        for (int64_t i = 0; i < room; i++) v[i] = lw_random_sign(random);
        status = resolve(c, PROBES_A_SOLVE, v, f, z, error);
        for (int64_t i = 0; i < room && status == LW_OK; i++) {
            double term = v[i] * z[i];
            diagonal[i % n] += term / count;
            squares[i % n] += term * term / count;
        }
        if (lw_watch_cancelled(watch))
            status = lw_fail(error, LW_INTERRUPTED, "interrupted during the resolution");
    }
    for (int64_t j = 0; j < n && status == LW_OK; j++) {
        *trace += diagonal[j];
        *spread += fmax(0, squares[j] - diagonal[j] * diagonal[j]) / (count - 1) / (double)n;
    }
    *spread = sqrt(*spread);
    lw_random_free(random);
    lw_free(v);
    lw_free(z);
    lw_free(squares);
    lw_free(f);
    return status;
}

/* Row j of R is (A'A Q e_j)', and R_jk in model units is R_jk s_j / s_k. */
static lw_status resolution_row(lw_cofactor *c, int64_t column, double *q, double *image, double *row,
                                lw_error *error)
{
    const lw_system *system = c->decomposition->system;
    lw_status status = lw_cofactor_columns(c, 1, &column, q, error);
    if (status < LW_OK) return status;
    lw_sparse_apply(system->matrix, 1, q, image);
    lw_sparse_apply_transposed(system->matrix, 1, image, q);
    for (int64_t k = 0; k < c->columns; k++)
        row[system->parameter_of[k]] = q[k] * system->scale[column] / system->scale[k];
    return LW_OK;
}

lw_status lw_resolution_rows(lw_cofactor *c, int64_t count, const int64_t *parameter, const lw_watch *watch,
                             double *rows, lw_error *error)
{
    lw_system *system = c->decomposition->system;
    int64_t n = system->problem->n;
    lw_status status = lw_system_matrix(system, watch, error);
    double *q = LW_NEW_ARRAY(double, c->columns), *image = LW_NEW_ARRAY(double, system->rows);
    if (status == LW_OK && !(q && image))
        status = lw_fail_memory(error, "rows of the resolution", (size_t)c->columns * 8);
    memset(rows, 0, (size_t)(count * n) * sizeof *rows);
    for (int64_t k = 0; k < count && status == LW_OK; k++)
        if (system->column_of[parameter[k]] >= 0)
            status = resolution_row(c, system->column_of[parameter[k]], q, image, rows + k * n, error);
    lw_free(q);
    lw_free(image);
    return status;
}
