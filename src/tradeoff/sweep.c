/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "tradeoff/sweep.h"

#include "core/memory.h"
#include "solve/engine.h"
#include "solve/krylov.h"
#include "tradeoff/choose.h"
#include "tradeoff/grid.h"

#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

/* rows + columns up to which an iterative engine looks at the whole range, whatever the criteria say. */
#define SMALL_PROBLEM 2000
/* A row whose error bound is this much below the tolerance is not read anew while the basis grows. */
#define SETTLED 1e-3

unsigned lw_sweep_criteria(const lw_sweep_options *options)
{
    unsigned all = 1u << LW_BY_CORNER | 1u << LW_BY_GCV;
    if (options->sigma_stated) all |= 1u << LW_BY_DISCREPANCY | 1u << LW_BY_RISK;
    return options->criteria != 0 ? options->criteria : all;
}

bool lw_sweep_wants_trace(const lw_sweep_options *options)
{
    return (lw_sweep_criteria(options) & (1u << LW_BY_GCV | 1u << LW_BY_RISK)) != 0;
}

typedef struct sweep {
    lw_look look;
    lw_curve *curve;
    unsigned criteria;
    bool own_grid;
    double *lambda; /* count, increasing */
    int64_t most, made;
    bool exhausted, decided, iterative;
} sweep;

static lw_status check(const lw_sweep_options *options, const lw_system *system, lw_error *error)
{
    for (int i = 0; options->damping != NULL && i < options->count; i++)
        if (!(options->damping[i] > 0.0) || !isfinite(options->damping[i]))
            return lw_fail(error, LW_BAD_USAGE, "--dampings: found %g, expected a positive number",
                           options->damping[i]);
    if (options->damping != NULL && options->count < 1)
        return lw_fail(error, LW_BAD_USAGE, "--dampings: no damping is given");
    unsigned need = 1u << LW_BY_DISCREPANCY | 1u << LW_BY_RISK;
    if (!options->sigma_stated && (options->criteria & need) != 0)
        return lw_fail(error, LW_BAD_USAGE,
                       "criterion %s needs standard deviations: observations.csv has no column sigma",
                       options->criteria & 1u << LW_BY_DISCREPANCY ? "discrepancy" : "risk");
    if (system->penalty_rows < 1)
        return lw_fail(error, LW_UNSOLVABLE, "a sweep needs a penalty, and no free parameter has one");
    return LW_OK;
}

static int by_size(const void *a, const void *b)
{
    double x = *(const double *)a, y = *(const double *)b;
    return (x > y) - (x < y);
}

/* The dampings given, in order, each once; or count places between sigma_1 and the floor. */
static lw_status make_grid(sweep *s, const lw_sweep_options *options)
{
    lw_look *look = &s->look;
    int count = options->count > 0 ? options->count : LW_SWEEP_DEFAULT_COUNT;
    if (options->damping == NULL && count < 2) count = 2;
    s->lambda = LW_NEW_ARRAY(double, count);
    if (s->lambda == NULL) return lw_fail_memory(look->error, "the sweep", (size_t)count * sizeof(double));
    s->curve->sigma_one = (double)NAN;
    lw_status status = LW_OK;
    if (options->damping != NULL) {
        for (int i = 0; i < count; i++) s->lambda[i] = options->damping[i];
        qsort(s->lambda, (size_t)count, sizeof(double), by_size);
        int kept = 1;
        for (int i = 1; i < count; i++)
            if (s->lambda[i] > s->lambda[kept - 1]) s->lambda[kept++] = s->lambda[i];
        count = kept;
    } else {
        double sigma, floor;
        status = lw_largest_singular(look->decomposition, look->watch, &sigma, look->error);
        if (status == LW_OK && !(sigma > 0.0))
            status = lw_fail(look->error, LW_UNSOLVABLE,
                             "the observations do not depend on the parameters: nothing to sweep");
        floor = sigma * LW_GRID_ITERATIVE;
        if (status == LW_OK && look->direct) status = lw_grid_floor(look, sigma, &floor);
        if (status == LW_OK) lw_sweep_grid(floor, sigma, count, s->lambda);
        s->curve->sigma_one = sigma;
        s->own_grid = true;
    }
    s->curve->count = look->count = count;
    s->curve->row = look->row = LW_NEW_ZEROS(lw_curve_row, count);
    if (status == LW_OK && look->row == NULL)
        status = lw_fail_memory(look->error, "the sweep", (size_t)count * sizeof *look->row);
    return status;
}

/* Does row i no longer change? (With random probes its trace may still.) */
static bool settled(const sweep *s, int i)
{
    const lw_curve_row *row = &s->look.row[i];
    return !s->look.traced && row->usable && row->point.lambda == s->lambda[i] &&
           row->point.error_bound <= SETTLED * s->look.tolerance;
}

/* Rows anew; those below the first of the topmost usable run are not looked at. */
static lw_status evaluate(sweep *s)
{
    lw_look *look = &s->look;
    if (lw_watch_cancelled(look->watch)) return LW_INTERRUPTED;
    if (!look->direct || look->cheap) {
        int open = look->count;
        while (open > 0 && settled(s, open - 1)) open--;
        lw_status status = lw_look_rows(look, open, s->lambda, look->row);
        if (status != LW_OK) return status;
    } else {
        for (int i = look->count - 1; i >= 0; i--) { /* each is a factorization: tick, and stop when asked */
            lw_status status = lw_look_rows(look, 1, &s->lambda[i], &look->row[i]);
            if (status != LW_OK) return status;
            lw_watch_tick(look->watch, "sweeping", look->count - i, look->count, "");
            if (lw_watch_cancelled(look->watch)) return LW_INTERRUPTED;
        }
    }
    look->low = look->count;
    while (look->low > 0 && look->row[look->low - 1].usable) look->low--;
    return LW_OK;
}

/* Does the curve reach half the smallest choice, and has every criterion one inside it? At the end of the
 * range, or with none, the whole range has to be seen. */
static bool decided(const sweep *s, const lw_choice *choice, int choices)
{
    const lw_look *look = &s->look;
    if (look->low == 0) return true;
    const lw_system *system = look->decomposition->system;
    if (look->low >= look->count || system->rows + system->columns <= SMALL_PROBLEM) return false;
    double least = look->row[look->low].point.lambda;
    for (int i = 0; i < choices; i++) {
        double damping = choice[i].damping;
        if (isnan(damping) || !(damping >= 2.0 * least)) return false;
        if (damping >= look->row[look->count - 1].point.lambda) return false;
    }
    return true;
}

static lw_status extend(sweep *s, int64_t steps)
{
    lw_look *look = &s->look;
    lw_decomposition *d = look->decomposition;
    int exhausted = 0;
    if (s->most > 0 && steps > s->most - s->made) steps = s->most - s->made;
    lw_status status = d->methods->extend(d, steps, &exhausted, look->watch, look->error);
    s->made += steps;
    s->exhausted = exhausted || (s->most > 0 && s->made >= s->most);
    char note[64] = "";
    if (look->low < look->count)
        snprintf(note, sizeof note, "converged down to damping %.3g", look->row[look->low].point.lambda);
    lw_watch_tick(look->watch, "sweeping", look->count - look->low, look->count, note);
    return status;
}

/* Goes on until the curve is decided. */
static lw_status grow(sweep *s)
{
    lw_choice choice[LW_CRITERIA];
    int choices = 0;
    s->look.refine = false;
    for (;;) {
        lw_status status = evaluate(s);
        s->decided = s->look.direct;
        if (status != LW_OK || s->look.direct) return status;
        status = lw_choose_all(&s->look, s->criteria, choice, &choices);
        s->decided = status == LW_OK && decided(s, choice, choices);
        if (status != LW_OK || s->exhausted || s->decided) return status;
        status = extend(s, s->made / 20 + 6);
        if (status != LW_OK) return status;
    }
}

/* An own grid of an iterative engine ends where the curve had converged. */
static lw_status settle_grid(sweep *s)
{
    lw_look *look = &s->look;
    if (!s->own_grid || look->direct || look->low == 0 || look->low >= look->count) return LW_OK;
    lw_sweep_grid(look->row[look->low].point.lambda, s->lambda[look->count - 1], look->count, s->lambda);
    return evaluate(s);
}

static bool choices_converged(const lw_curve *curve)
{
    for (int i = 0; i < curve->choices; i++)
        if (!isnan(curve->choice[i].damping) && !curve->choice[i].at.converged) return false;
    return true;
}

static double worst_bound(const lw_curve_row *row, int count)
{
    double worst = 0.0;
    for (int i = 0; i < count; i++) worst = fmax(worst, row[i].point.error_bound);
    return worst;
}

/* Goes on until the dampings of the choices are within the tolerance. The bound falls geometrically: the
 * steps that are still missing are foreseen from its fall so far. */
static lw_status converge(sweep *s)
{
    double lambda[LW_CRITERIA], before = (double)NAN, tolerance = s->look.tolerance;
    lw_curve_row row[LW_CRITERIA];
    int count = 0;
    for (int i = 0; i < s->curve->choices; i++)
        if (!isnan(s->curve->choice[i].damping)) lambda[count++] = s->curve->choice[i].damping;
    if (count == 0) return LW_OK;
    bool traced = s->look.traced;
    s->look.traced = false;
    int64_t steps = s->made / 20 + 6;
    lw_status status = lw_look_rows(&s->look, count, lambda, row);
    while (status == LW_OK && !s->exhausted && worst_bound(row, count) > tolerance) {
        double now = worst_bound(row, count);
        if (now < 0.9 * before) {
            double missing = (double)steps * log(now / tolerance) / log(before / now);
            steps =
                (int64_t)fmin(fmax(0.6 * missing, 0.01 * (double)s->made + 2.0), (double)s->made / 6.0 + 6.0);
        }
        before = now;
        status = extend(s, steps);
        if (status == LW_OK) status = lw_look_rows(&s->look, count, lambda, row);
    }
    s->look.traced = traced;
    return status;
}

static lw_status settle_choices(sweep *s)
{
    lw_status status = LW_OK;
    s->look.refine = true;
    for (int round = 0; round < 4 && status == LW_OK; round++) {
        status = lw_choose_all(&s->look, s->criteria, s->curve->choice, &s->curve->choices);
        if (status != LW_OK || s->look.direct || s->exhausted || choices_converged(s->curve)) break;
        status = converge(s);
        if (status == LW_OK) status = evaluate(s);
    }
    return status;
}

/* Adds to the warning what an iteration that ended early leaves open. */
static void qualify(const sweep *s, lw_choice *c)
{
    const lw_look *look = &s->look;
    size_t used = strlen(c->warning), room = sizeof c->warning - used;
    const char *space = used > 0 ? " " : "";
    if (isnan(c->damping) && !s->decided && look->low < look->count)
        snprintf(c->warning + used, room,
                 "%sAfter %lld steps only the dampings from %.3g upwards had converged.", space,
                 (long long)s->made, look->row[look->low].point.lambda);
    else if (!isnan(c->damping) && !c->at.converged)
        snprintf(c->warning + used, room,
                 "%sThe model there has not converged: its error bound is %.2g, asked for was %.2g.", space,
                 c->at.point.error_bound, look->tolerance);
}

static void finish(sweep *s, lw_status status)
{
    lw_curve *curve = s->curve;
    if (curve->row[0].point.lambda <= 0.0) curve->count = 0; /* interrupted before anything was known */
    curve->iterative = s->iterative;
    curve->steps = s->made;
    lw_choose_compare(curve);
    for (int i = 0; i < curve->choices; i++) qualify(s, &curve->choice[i]);
    curve->status = status != LW_OK                            ? status
                    : !s->decided || !choices_converged(curve) ? LW_NOT_CONVERGED
                                                               : LW_OK;
}

static void set_up(sweep *s, lw_decomposition *decomposition, const lw_sweep_options *options,
                   const lw_watch *watch, lw_error *error)
{
    const lw_engine *engine = lw_engine_find(decomposition->methods->engine);
    lw_look *look = &s->look;
    look->decomposition = decomposition;
    look->watch = watch;
    look->error = error;
    look->sigma_stated = options->sigma_stated;
    look->direct = decomposition->methods->extend == NULL;
    unsigned abilities =
        engine != NULL ? engine->abilities : 0; /* an iterative engine that has no basis is not cheap */
    look->cheap = !look->direct || (abilities & (LW_SWEEPS | LW_DIRECT)) == (LW_SWEEPS | LW_DIRECT);
    s->iterative = (abilities & LW_DIRECT) == 0;
    look->traced = lw_sweep_wants_trace(options);
    look->tolerance = options->tolerance > 0.0 ? options->tolerance : LW_DEFAULT_TOLERANCE;
    look->noise_factor = options->noise_factor > 0.0 ? options->noise_factor : 1.0;
    s->criteria = lw_sweep_criteria(options);
    s->most = options->steps;
}

lw_status lw_sweep(lw_decomposition *decomposition, const lw_sweep_options *options, const lw_watch *watch,
                   lw_curve **out, lw_error *error)
{
    *out = NULL;
    lw_status status = check(options, decomposition->system, error);
    if (status != LW_OK) return status;
    sweep s = {.curve = LW_NEW(lw_curve)};
    if (s.curve == NULL) return lw_fail_memory(error, "the sweep", sizeof *s.curve);
    set_up(&s, decomposition, options, watch, error);
    status = make_grid(&s, options);
    if (status == LW_OK) status = grow(&s);
    if (status == LW_OK) status = settle_grid(&s);
    if (status == LW_OK) status = settle_choices(&s);
    lw_free(s.lambda);
    if (status < 0 || s.curve->row == NULL) {
        lw_curve_free(s.curve);
        return status < 0 ? status : LW_INTERRUPTED;
    }
    finish(&s, status);
    *out = s.curve;
    return s.curve->status;
}
