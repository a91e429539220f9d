/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "solve/krylov.h"

#include "core/memory.h"
#include "matrix/vector.h"

#include <math.h>
#include <string.h>

static void free_krylov(lw_decomposition *base)
{
    lw_krylov *self = (lw_krylov *)base;
    if (self->started) lw_golub_kahan_clear(&self->gk);
    for (int c = 0; c < LW_LOCKSTEP; c++) lw_bidiagonal_clear(&self->B[c]);
    lw_basis_clear(&self->basis);
    lw_free(self->singular);
    lw_free(self->stacked.x);
    lw_free(self->split);
    lw_operator_free(self->plain);
    lw_standard_form_free(self->form);
    lw_free(self);
}

static double rcond(lw_decomposition *base)
{
    const lw_krylov *self = (const lw_krylov *)base;
    return self->cond_A > 0.0 ? 1.0 / self->cond_A : (double)NAN;
}

static int64_t rank(lw_decomposition *base)
{
    (void)base;
    return -1;
}

#define METHODS(name_, extend_)                                                                              \
    {                                                                                                        \
        .engine = name_, .evaluate = lw_krylov_evaluate, .estimate = lw_krylov_estimate, .extend = extend_,  \
        .solve_many = lw_krylov_solve_many, .rank = rank, .rcond = rcond, .free_self = free_krylov           \
    }
static const lw_decomposition_methods methods[] = {METHODS("lsqr", lw_krylov_extend),
                                                   METHODS("cgls", lw_krylov_extend),
                                                   METHODS("lsmr", lw_krylov_extend),
                                                   METHODS("lsqr", NULL),
                                                   METHODS("cgls", NULL),
                                                   METHODS("lsmr", NULL)};
#define ENGINES 3

bool lw_is_krylov(const lw_decomposition *decomposition)
{
    return decomposition->methods->free_self == free_krylov;
}

/* Without a standard form the damped equations are solved stacked. */
static lw_status make_form(lw_krylov *self, const lw_solve_options *options, const lw_watch *watch,
                           lw_error *error)
{
    self->product = (lw_product_options){.storage = options->storage, .team = lw_watch_team(watch)};
    lw_status status =
        lw_standard_form_new(self->base.system, self->damped, &self->product, watch, &self->form, error);
    if (status < 0) return status;
    if (self->form != NULL) {
        self->op = lw_standard_form_operator(self->form);
        self->b = lw_standard_form_side(self->form);
        return LW_OK;
    }
    status = lw_system_operator(self->base.system, &self->product, watch, &self->plain, error);
    self->op = self->plain;
    self->b = self->base.system->b;
    self->base.methods += ENGINES;
    if (status == LW_OK)
        status =
            lw_log_add(self->watch.log,
                       "The penalty is not brought to standard form (%s): the damped equations are solved "
                       "stacked, one damping at a time, which takes more steps.",
                       error != NULL && error->text[0] != '\0' ? error->text : "L'L has no factor");
    return status;
}

lw_status lw_krylov_decompose(lw_system *system, double lambda, const lw_solve_options *options,
                              const char *engine, lw_iterate *iterate, const lw_watch *watch,
                              lw_decomposition **out, lw_error *error)
{
    *out = NULL;
    if (system->conditions > 0)
        return lw_fail(error, LW_BAD_USAGE, "engine %s takes no exact conditions; cholesky, qr and dense do",
                       engine);
    lw_krylov *self = LW_NEW(lw_krylov);
    if (self == NULL) return lw_fail_memory(error, "the decomposition", sizeof *self);
    size_t which = 0;
    while (which + 1 < ENGINES && strcmp(methods[which].engine, engine) != 0) which++;
    self->base.methods = &methods[which];
    self->base.system = system;
    self->iterate = iterate;
    self->tolerance = options->tolerance > 0.0 ? options->tolerance : LW_DEFAULT_TOLERANCE;
    self->damped = lambda > 0.0 || options->sweep;
    self->probes = options->trace_probes < LW_LOCKSTEP - 1 ? options->trace_probes : LW_LOCKSTEP - 1;
    self->trace_from = options->sweep_from > 0.0 && options->sweep_to > 0.0
                           ? fmin(options->sweep_from, options->sweep_to)
                           : 0.0;
    self->watch = (lw_watch){
        .memory = lw_watch_memory(watch), .seed = lw_watch_seed(watch), .log = lw_watch_log(watch)};
    self->cond_A = (double)NAN;
    self->keeps = true;
    lw_status status = make_form(self, options, watch, error);
    if (status == LW_OK) {
        self->most = options->steps > 0 ? options->steps : lw_default_steps(self->op);
        if (options->steps <= 0 && self->form == NULL && self->most < 4 * self->op->columns + 200)
            self->most = 4 * self->op->columns + 200; /* [A; lambda L] is not wide */
        self->basis.length = self->op->columns;
        self->basis.most = self->watch.memory / 2 / (8 * (self->op->columns > 0 ? self->op->columns : 1));
        if (self->form != NULL) status = lw_krylov_small_trace(self, error);
    }
    if (status != LW_OK) {
        free_krylov(&self->base);
        return status;
    }
    *out = &self->base;
    return LW_OK;
}

static lw_status keep_direction(lw_krylov *self)
{
    if (!self->keeps) return LW_OK;
    double *v = lw_basis_next(&self->basis);
    if (v != NULL) {
        lw_golub_kahan_direction(&self->gk, 0, v);
        return LW_OK;
    }
    self->keeps = false;
    lw_basis_clear(&self->basis);
    return lw_log_add(self->watch.log,
                      "The Krylov basis outgrew half of --memory after %lld steps: models are made by the "
                      "short recurrence, "
                      "one damping at a time.",
                      (long long)self->B[0].k);
}

static lw_status record(lw_krylov *self, lw_error *error)
{
    lw_status status = LW_OK;
    for (int c = 0; c < self->gk.k && status == LW_OK; c++) {
        bool ended = self->B[c].alpha != NULL && self->B[c].alpha[self->B[c].k] == 0.0;
        if (!ended) status = lw_bidiagonal_add(&self->B[c], self->gk.alpha[c], self->gk.beta[c], error);
    }
    const lw_bidiagonal *B = &self->B[0];
    if (status == LW_OK && B->k > 0) self->largest = fmax(self->largest, B->alpha[B->k - 1] + B->beta[B->k]);
    if (status == LW_OK && !self->gk.ended[0]) {
        status = keep_direction(self);
        if (status < 0) status = lw_fail_memory(error, "a warning", 200);
    }
    return status;
}

/* Side 0 starts from b, the probes from random signs. */
static lw_status start(lw_krylov *self, lw_error *error)
{
    int64_t m = self->op->rows;
    int sides = 1 + (self->singular == NULL ? self->probes : 0);
    double *side = lw_alloc((size_t)m * (size_t)sides, sizeof(double));
    if (side == NULL)
        return lw_fail_memory(error, "the bidiagonalization", (size_t)m * (size_t)sides * sizeof(double));
    lw_copy(m, self->b, side);
    lw_status status = sides > 1 ? lw_krylov_probe(self, side + m, error) : LW_OK;
    if (status == LW_OK) status = lw_golub_kahan_start(&self->gk, self->op, sides, side, error);
    lw_free(side);
    if (status != LW_OK) return status;
    self->started = true;
    return record(self, error);
}

static bool all_ended(const lw_golub_kahan *gk)
{
    for (int c = 0; c < gk->k; c++)
        if (!gk->ended[c]) return false;
    return true;
}

/* The probes are stepped only while the trace is behind the curve; they need not be in step with side 0. */
static lw_status rouse_probes(lw_krylov *self, lw_error *error)
{
    int sides = 1 + (self->singular == NULL ? self->probes : 0);
    if (sides == 1) return LW_OK;
    bool ready = false;
    lw_status status = LW_OK;
    double target = fmax(self->trace_from, 0.5 * self->front);
    if (self->front > 0.0) status = lw_krylov_trace_ready(self, target, &ready, error);
    self->gk.k = ready ? 1 : sides;
    return status;
}

lw_status lw_krylov_extend(lw_decomposition *base, int64_t steps, int *exhausted, const lw_watch *watch,
                           lw_error *error)
{
    lw_krylov *self = (lw_krylov *)base;
    int ignored;
    if (exhausted == NULL) exhausted = &ignored;
    *exhausted = 0;
    lw_status status = self->started ? rouse_probes(self, error) : start(self, error);
    for (int64_t i = 0; i < steps && status == LW_OK; i++) {
        if (all_ended(&self->gk) || self->made >= self->most) break;
        lw_golub_kahan_step(&self->gk);
        self->made++;
        status = record(self, error);
        if (lw_watch_cancelled(watch)) return status < 0 ? status : LW_INTERRUPTED;
    }
    if (status == LW_OK && (all_ended(&self->gk) || self->made >= self->most)) *exhausted = 1;
    return status;
}

lw_status lw_largest_singular(lw_decomposition *decomposition, const lw_watch *watch, double *out,
                              lw_error *error)
{
    enum { STEPS = 24 };
    *out = 0.0;
    if (lw_is_krylov(decomposition)) {
        lw_krylov *self = (lw_krylov *)decomposition;
        if (self->form == NULL) return lw_krylov_stacked_top(self, watch, out, error);
        int exhausted = 0;
        int64_t missing = STEPS - self->made;
        lw_status status =
            missing > 0 ? lw_krylov_extend(decomposition, missing, &exhausted, watch, error) : LW_OK;
        if (status == LW_OK) *out = lw_bidiagonal_largest(&self->B[0]);
        return status;
    }
    lw_solve_options options = {.sweep = 1};
    lw_watch quiet = {
        .memory = lw_watch_memory(watch), .seed = lw_watch_seed(watch), .team = lw_watch_team(watch)};
    lw_decomposition *own = NULL;
    lw_system without = *decomposition->system;
    without.conditions = 0; /* the scale of the problem is asked for, not its solution */
    lw_status status = lw_krylov_decompose(&without, 1.0, &options, "lsqr", NULL, &quiet, &own, error);
    if (status == LW_NO_MEMORY)
        status = lw_fail(error, LW_BAD_USAGE,
                         "the range of dampings cannot be estimated within --memory: give --dampings");
    if (status == LW_OK) status = lw_largest_singular(own, watch, out, error);
    lw_decomposition_free(own);
    decomposition->system->matrix = without.matrix;
    return status;
}
