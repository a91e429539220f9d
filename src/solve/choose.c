/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "solve/choose.h"

#include "core/memory.h"
#include "solve/cholesky.h"
#include "solve/dense.h"
#include "solve/lsqr.h"

#include <math.h>
#include <stdio.h>

#define DENSE_COLUMNS 600
#define DENSE_PLACES 4000000
#define MOST_GRAM 400e6    /* multiplications of A'A beyond which no analysis is tried without need */
#define STEPS 1000.0       /* an iterative engine's steps on an ill-conditioned problem, for comparison */
#define FASTER 10.0        /* a flop of a supernodal factor against one of a sparse product */
#define SWEEP_FACTORS 30.0 /* factors that a sweep takes */

unsigned lw_choose_needs(const lw_system *system, double lambda, const lw_solve_options *options)
{
    unsigned needs = 0;
    if (system->conditions > 0) needs |= LW_CONDITIONS;
    if (options && options->datum_free && !(lambda > 0)) needs |= LW_FREE_DATUM;
    return needs;
}

int lw_choose_dense_fits(const lw_system *system, const lw_watch *watch, int64_t most_places)
{
    int64_t rows = system->rows + system->penalty_rows + system->conditions;
    int64_t places = lw_bytes(rows, system->columns);
    return places <= most_places && lw_bytes(places, 32) <= lw_watch_memory(watch);
}

/* Multiplications that A'A takes: sum of squares of the row lengths, from the design itself. */
static double gram_cost(const lw_system *system, double *nonzeros, lw_error *error, lw_status *status)
{
    const lw_sparse *design = system->problem->design;
    int32_t *length = LW_NEW_ZEROS(int32_t, design->rows);
    double cost = 0;
    *nonzeros = (double)lw_sparse_nonzeros(design);
    if (!length) {
        *status = lw_fail_memory(error, "the choice of an engine", (size_t)design->rows * 4);
        return 0;
    }
    for (int64_t e = 0; e < lw_sparse_nonzeros(design); e++) length[design->index[e]]++;
    for (int64_t i = 0; i < design->rows; i++) cost += (double)length[i] * length[i];
    lw_free(length);
    return cost;
}

static lw_status take_lsqr(lw_engine_choice *out, const char *reason)
{
    out->engine = &lw_engine_lsqr;
    snprintf(out->why, sizeof out->why,
             "%s; iterating takes a product with the matrix and one with its transpose a step", reason);
    return LW_OK;
}

static lw_status weigh_factor(lw_system *system, double lambda, const lw_solve_options *options,
                              const lw_watch *watch, double nonzeros, int needed, lw_engine_choice *out,
                              lw_decomposition **plan, lw_error *error)
{
    lw_cholesky_size size;
    char reason[128];
    lw_status status = lw_cholesky_plan(system, lambda, options, watch, plan, &size, error);
    if (!needed && status == LW_NO_MEMORY)
        return take_lsqr(out, "even the analysis of a factor does not fit");
    if (status != LW_OK) return status;
    out->factor_nonzeros = size.factor_nonzeros;
    out->factor_flops = size.flops;
    double factors = options && options->sweep ? SWEEP_FACTORS : 1, iterating = 4 * nonzeros * STEPS;
    int fits = size.bytes <= lw_watch_memory(watch), pays = size.flops * factors / FASTER <= iterating;
    if (needed || (fits && pays)) {
        out->engine = &lw_engine_cholesky;
        snprintf(out->why, sizeof out->why,
                 "%lld parameters are sparsely connected: the factor has %.3g nonzeros and takes %.2g "
                 "operations (%s)",
                 (long long)system->columns, (double)size.factor_nonzeros, size.flops, size.ordering);
        return LW_OK;
    }
    lw_decomposition_free(*plan);
    *plan = NULL;
    if (fits)
        snprintf(reason, sizeof reason, "a factor would take %.2g operations against some %.2g",
                 size.flops * factors, iterating);
    else
        snprintf(reason, sizeof reason, "a factor would take %.3g MB, --memory allows %.3g",
                 (double)size.bytes / 1048576, (double)lw_watch_memory(watch) / 1048576);
    return take_lsqr(out, reason);
}

lw_status lw_choose_planned(lw_system *system, double lambda, const lw_solve_options *options,
                            const lw_watch *watch, lw_engine_choice *out, lw_decomposition **plan,
                            lw_error *error)
{
    lw_status status = LW_OK;
    *plan = NULL;
    *out = (lw_engine_choice){.factor_nonzeros = -1, .factor_flops = (double)NAN};
    if (system->columns <= DENSE_COLUMNS && lw_choose_dense_fits(system, watch, DENSE_PLACES)) {
        out->engine = &lw_engine_dense;
        snprintf(out->why, sizeof out->why, "small: %lld equations, %lld parameters", (long long)system->rows,
                 (long long)system->columns);
        return LW_OK;
    }
    double nonzeros, cost = gram_cost(system, &nonzeros, error, &status);
    if (status < 0) return status;
    int needed = lw_choose_needs(system, lambda, options) != 0;
    double n = (double)system->columns, factors = options && options->sweep ? SWEEP_FACTORS : 1;
    double full = n * n * n / 3; /* the factor is nearly full when the products of A'A come near its places */
    if (!needed && 3 * cost > n * n && full * factors / FASTER > 4 * nonzeros * STEPS) {
        char reason[128];
        snprintf(reason, sizeof reason, "a nearly full factor would take %.2g operations against some %.2g",
                 full * factors, 4 * nonzeros * STEPS);
        return take_lsqr(out, reason);
    }
    if (!needed && cost > MOST_GRAM) {
        char reason[128];
        snprintf(reason, sizeof reason,
                 "%.3g nonzeros in long rows: a normal matrix would take %.2g products", nonzeros, cost);
        return take_lsqr(out, reason);
    }
    return weigh_factor(system, lambda, options, watch, nonzeros, needed, out, plan, error);
}

lw_status lw_engine_choose(lw_system *system, double lambda, const lw_solve_options *options,
                           const lw_watch *watch, lw_engine_choice *out, lw_error *error)
{
    lw_decomposition *plan = NULL;
    lw_status status = lw_choose_planned(system, lambda, options, watch, out, &plan, error);
    lw_decomposition_free(plan);
    return status;
}
