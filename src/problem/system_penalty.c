/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The penalty in the scaled coordinates of the free parameters. Held parameters take no damping of their own.
 */
#include "core/memory.h"
#include "problem/system_part.h"

static lw_status damp_diagonal(lw_system *system, lw_error *error)
{
    const double *weight = system->problem->damp_weight;
    system->penalty_rows = system->columns;
    system->penalty_diagonal = LW_NEW_ARRAY(double, system->columns);
    if (system->penalty_diagonal == NULL)
        return lw_fail_memory(error, "penalty", (size_t)system->columns * sizeof(double));
    for (int64_t c = 0; c < system->columns; c++)
        system->penalty_diagonal[c] =
            (weight == NULL ? 1.0 : weight[system->parameter_of[c]]) * system->scale[c];
    return LW_OK;
}

lw_status lw_system_damp(lw_system *system, const lw_penalty_options *options, const lw_watch *watch,
                         lw_error *error)
{
    system->prefer = options->prefer;
    if (options->prefer == LW_PREFER_SMALLEST) return damp_diagonal(system, error);
    lw_sparse *L = NULL;
    lw_status status = lw_penalty_make(system->problem, options, watch, &L, error);
    if (status == LW_OK) status = lw_system_select(system, L, system->scale, &system->penalty, error);
    if (status == LW_OK) {
        system->penalty_rows = L->rows;
        status = lw_system_shift_held(system, L, watch, error);
    }
    lw_sparse_free(L);
    return status;
}

void lw_system_penalize(const lw_system *system, const double *z, double *out)
{
    if (system->penalty != NULL) {
        lw_sparse_apply(system->penalty, 1, z, out);
        return;
    }
    for (int64_t c = 0; c < system->columns; c++) out[c] = system->penalty_diagonal[c] * z[c];
}

void lw_system_penalize_transposed(const lw_system *system, const double *v, double *out)
{
    if (system->penalty != NULL) {
        lw_sparse_apply_transposed(system->penalty, 1, v, out);
        return;
    }
    for (int64_t c = 0; c < system->columns; c++) out[c] = system->penalty_diagonal[c] * v[c];
}

lw_status lw_system_penalty_gram(const lw_system *system, lw_sparse **out, lw_error *error)
{
    if (system->penalty != NULL) return lw_sparse_gram(system->penalty, NULL, out, error);
    int64_t n = system->columns;
    lw_status status = lw_sparse_new(n, n, n, 0, out, error);
    if (status != LW_OK) return status;
    for (int64_t c = 0; c < n; c++) {
        (*out)->start[c] = c;
        (*out)->index[c] = (int32_t)c;
        (*out)->value[c] = system->penalty_diagonal[c] * system->penalty_diagonal[c];
    }
    (*out)->start[n] = n;
    return LW_OK;
}
