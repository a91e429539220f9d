/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "solve/engine.h"

#include "solve/cgls.h"
#include "solve/cholesky.h"
#include "solve/choose.h"
#include "solve/dense.h"
#include "solve/direct.h"
#include "solve/lsmr.h"
#include "solve/lsqr.h"
#include "solve/qr.h"

#include <stdio.h>
#include <string.h>

#define GATE 0.1     /* contraction of the first refinement step above which Cholesky is not trusted */
#define GATE_STEPS 2 /* refinements that show it where the user wants none */
#define MOST_REFINEMENTS 10
#define DENSE_PLACES 16000000 /* Householder QR after the gate up to this size, sparse QR beyond */

const lw_engine *lw_engine_table(void)
{
    static lw_engine table[7]; /* filled once: constants of other files cannot initialize it */
    static const lw_engine *const engines[] = {&lw_engine_dense, &lw_engine_cholesky, &lw_engine_qr,
                                               &lw_engine_lsqr,  &lw_engine_cgls,     &lw_engine_lsmr};
    if (!table[0].name)
        for (size_t i = 0; i < sizeof engines / sizeof *engines; i++) table[i] = *engines[i];
    return table;
}

const lw_engine *lw_engine_find(const char *name)
{
    for (const lw_engine *e = lw_engine_table(); e->name; e++)
        if (strcmp(e->name, name) == 0) return e;
    return NULL;
}

static lw_status take_named(lw_system *system, double lambda, const lw_solve_options *options,
                            const char *name, lw_engine_choice *choice, lw_error *error)
{
    unsigned needs = lw_choose_needs(system, lambda, options);
    *choice = (lw_engine_choice){
        .engine = lw_engine_find(name), .factor_nonzeros = -1, .factor_flops = (double)NAN};
    if (!choice->engine)
        return lw_fail(error, LW_BAD_USAGE,
                       "there is no engine '%s'; there are auto, dense, cholesky, qr, lsqr, cgls and lsmr",
                       name);
    if ((choice->engine->abilities & needs) != needs)
        return lw_fail(error, LW_BAD_USAGE, "engine %s takes no %s; dense, cholesky and qr do", name,
                       needs & LW_CONDITIONS ? "exact conditions" : "free datum");
    snprintf(choice->why, sizeof choice->why, "asked for");
    return LW_OK;
}

/* Householder QR when small, sparse QR when large; why says what happened to Cholesky. */
static lw_status go_on_with_qr(lw_system *system, double lambda, const lw_solve_options *options,
                               const lw_watch *watch, const char *what, lw_engine_choice *choice,
                               lw_decomposition **out, lw_error *error)
{
    choice->engine = lw_choose_dense_fits(system, watch, DENSE_PLACES) ? &lw_engine_dense : &lw_engine_qr;
    snprintf(choice->why, sizeof choice->why, "%s: went on from cholesky with %s", what,
             choice->engine->name);
    lw_log_add(lw_watch_log(watch), "Ill-conditioned equations: %s.", choice->why);
    return choice->engine->decompose(system, lambda, options, watch, out, error);
}

/* The first refinement tells whether the factor is worth anything: CHOLMOD reports success and a fair
 * condition estimate also where no digit is correct. */
static lw_status gate(lw_system *system, double lambda, const lw_solve_options *options,
                      const lw_watch *watch, lw_engine_choice *choice, lw_decomposition **out,
                      lw_error *error)
{
    lw_direct *direct = (lw_direct *)*out;
    int most = !options || options->refine == 0 ? MOST_REFINEMENTS
               : options->refine > 0            ? options->refine
                                                : GATE_STEPS;
    double at = options && options->sweep && options->sweep_to > 0 && lambda > 0 ? options->sweep_to : lambda;
    lw_status status = lw_direct_refine(direct, at, most, watch, error);
    if (status == LW_OK && !(direct->refinement.contraction > GATE)) return LW_OK;
    if (status == LW_OK || status == LW_NOT_CONVERGED) {
        char what[96];
        snprintf(what, sizeof what, "the first refinement only shrank the correction to %.2g",
                 direct->refinement.contraction);
        if (options && options->refine < 0 && !(direct->refinement.contraction > GATE)) return LW_OK;
        lw_decomposition_free(*out);
        *out = NULL;
        return go_on_with_qr(system, lambda, options, watch, what, choice, out, error);
    }
    if (status == LW_INTERRUPTED) return status;
    lw_decomposition_free(*out);
    *out = NULL;
    return status;
}

lw_status lw_decompose(lw_system *system, double lambda, const lw_solve_options *options,
                       const lw_watch *watch, lw_engine_choice *choice, lw_decomposition **out,
                       lw_error *error)
{
    const char *name = options && options->engine ? options->engine : "auto";
    lw_status status;
    *out = NULL;
    if (strcmp(name, "auto") == 0)
        status = lw_choose_planned(system, lambda, options, watch, choice, out, error);
    else
        status = take_named(system, lambda, options, name, choice, error);
    if (status < 0) return status;
    if (*out)
        status = lw_cholesky_begin(out, lambda, watch, error);
    else
        status = choice->engine->decompose(system, lambda, options, watch, out, error);
    if (choice->engine->decompose != lw_engine_cholesky.decompose) return status;
    if (status == LW_NOT_CONVERGED)
        return go_on_with_qr(system, lambda, options, watch, "the normal matrix is beyond double precision",
                             choice, out, error);
    return status == LW_OK ? gate(system, lambda, options, watch, choice, out, error) : status;
}
