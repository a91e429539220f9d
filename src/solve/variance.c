/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "solve/variance.h"

#include "solve/engine.h"
#include "solve/exact.h"

#include <string.h>

#define DEFAULT_COST 5e7
#define MOST_REFINEMENTS 10

static double cost_of(const lw_system *system, double lambda, const lw_engine *engine)
{
    int64_t entries = system->matrix ? lw_sparse_nonzeros(system->matrix) : 0;
    if (lambda > 0) entries += system->penalty ? lw_sparse_nonzeros(system->penalty) : system->penalty_rows;
    double solve = (double)(entries + system->rows + system->columns);
    if (!strcmp(engine->name, "dense"))
        solve += (double)(system->rows + (lambda > 0 ? system->penalty_rows : 0)) *
                 (double)system->columns; /* both triangles of the QR */
    return (double)system->columns * solve;
}

static lw_status one_variance(lw_exact *exact, lw_decomposition *decomposition, double lambda, int64_t j,
                              const lw_watch *watch, lw_decimal *variance, double *worst, lw_error *error)
{
    lw_exact_state state = {0};
    lw_refinement refinement = {0};
    lw_status status = lw_exact_state_new(exact, &state, error);
    if (status == LW_OK)
        status = lw_exact_refine(exact, LW_SIDE_UNIT, j, decomposition, lambda, MOST_REFINEMENTS, watch,
                                 &state, &refinement, error);
    if (status >= 0 && status != LW_INTERRUPTED) {
        *variance = state.dx[j];
        if (refinement.last > *worst) *worst = refinement.last;
    }
    lw_exact_state_clear(&state);
    return status;
}

lw_status lw_solve_variances(lw_decomposition *decomposition, double lambda, double most_cost,
                             const lw_watch *watch, lw_decimal *variance, double *worst, lw_error *error)
{
    const lw_engine *engine = lw_engine_find(decomposition->methods->engine);
    const lw_system *system = decomposition->system;
    *worst = 0;
    if (!engine || !(engine->abilities & LW_REFINED)) return LW_QUALIFIED;
    if (cost_of(system, lambda, engine) > (most_cost > 0 ? most_cost : DEFAULT_COST)) return LW_QUALIFIED;
    lw_exact *exact = NULL;
    int qualified = 0;
    lw_status status = lw_exact_new(system, lambda, &exact, error);
    for (int64_t j = 0; status == LW_OK && j < system->columns; j++) {
        lw_watch_tick(watch, "refining standard deviations", (double)j, (double)system->columns, "");
        if (lw_watch_cancelled(watch)) status = LW_INTERRUPTED;
        if (status == LW_OK)
            status = one_variance(exact, decomposition, lambda, j, watch, variance + j, worst, error);
        if (status == LW_NOT_CONVERGED) {
            qualified = 1;
            status = LW_OK;
        }
    }
    lw_exact_free(exact);
    return status == LW_OK && qualified ? LW_NOT_CONVERGED : status;
}
