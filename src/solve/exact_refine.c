/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "solve/exact.h"

#include "core/memory.h"
#include "matrix/vector.h"
#include "solve/decomposition.h"

#include <math.h>

#define ENOUGH 1e-25   /* relative correction below which nothing printed can change */
#define FORESEEN 1e-27 /* the same for the next correction, foreseen from the last two */
#define GATE 0.1       /* contraction above which the factor is not trusted */
#define SURE 1e-15     /* last relative correction that still leaves a double right */
#define SHRINKS 0.5    /* a correction must be smaller than this times the one before */

typedef struct work {
    double *f, *g, *h; /* right-hand sides */
    double *r, *z, *u; /* corrections */
    double *total;     /* columns: z so far, rounded */
} work;

static void work_clear(work *w)
{
    lw_free(w->f);
    lw_free(w->g);
    lw_free(w->h);
    lw_free(w->r);
    lw_free(w->z);
    lw_free(w->u);
    lw_free(w->total);
}

static lw_status work_new(const lw_system *system, double lambda, work *w, lw_error *error)
{
    int64_t rows = system->rows + (lambda > 0.0 ? system->penalty_rows : 0);
    *w = (work){LW_NEW_ARRAY(double, rows),
                LW_NEW_ARRAY(double, system->columns),
                LW_NEW_ARRAY(double, system->conditions),
                LW_NEW_ARRAY(double, rows),
                LW_NEW_ARRAY(double, system->columns),
                LW_NEW_ARRAY(double, system->conditions),
                LW_NEW_ARRAY(double, system->columns)};
    if (w->f != NULL && w->g != NULL && w->h != NULL && w->r != NULL && w->z != NULL && w->u != NULL &&
        w->total != NULL)
        return LW_OK;
    work_clear(w);
    return lw_fail_memory(error, "refinement", (size_t)lw_bytes(rows + system->columns, 24));
}

/* ||z so far||, or what is left of the right-hand side's size by rounding where z is nothing but rounding. */
static double reference(const lw_system *system, const lw_exact_state *state, double side, work *w)
{
    for (int64_t c = 0; c < system->columns; c++) w->total[c] = state->dx[c].high / system->scale[c];
    return fmax(lw_norm(system->columns, w->total, NULL), side * 0x1p-46);
}

lw_status lw_exact_refine(lw_exact *exact, lw_exact_side side, int64_t column,
                          lw_decomposition *decomposition, double lambda, int most, const lw_watch *watch,
                          lw_exact_state *state, lw_refinement *out, lw_error *error)
{
    const lw_system *system = decomposition->system;
    int64_t rows = system->rows + (lambda > 0.0 ? system->penalty_rows : 0);
    double before = 0.0, size_of_side = 0.0;
    work w;
    lw_status status = work_new(system, lambda, &w, error);
    *out = (lw_refinement){0, (double)NAN, (double)NAN};
    if (status != LW_OK) return status;
    for (int step = 0; step <= most; step++) {
        if (lw_watch_cancelled(watch)) {
            status = LW_INTERRUPTED;
            break;
        }
        status = lw_exact_residual(exact, side, column, state, lw_watch_team(watch), w.f, w.g, w.h, error);
        if (status != LW_OK) break;
        if (step == 0)
            size_of_side = lw_norm(rows, w.f, NULL) + lw_norm(system->columns, w.g, NULL) +
                           lw_norm(system->conditions, w.h, NULL);
        status =
            decomposition->methods->solve_many(decomposition, lambda, 1, w.f, w.g, w.h, w.r, w.z, w.u, error);
        if (status != LW_OK) break;
        double now = lw_norm(system->columns, w.z, NULL);
        if (!isfinite(now)) break;
        if (step > 0 && now >= SHRINKS * before && now > 0.0) {
            if (step == 1) out->contraction = now / before;
            break; /* rounding or a useless factor: the correction is not better than what stands */
        }
        lw_exact_correct(exact, w.r, w.z, w.u, state);
        double whole = reference(system, state, size_of_side, &w);
        if (step > 0) {
            out->steps = step;
            out->last = whole > 0.0 ? now / whole : 0.0;
        }
        if (step == 1) out->contraction = before > 0.0 ? now / before : 0.0;
        double shrinks = before > 0.0 ? now / before : 1.0;
        before = step == 0 ? fmax(now, size_of_side * 0x1p-46) : now;
        if (step > 0 && out->last <= ENOUGH) break;
        if (step > 1 && out->last * shrinks <= FORESEEN) break;
    }
    if (status == LW_OK && most > 0 && !(out->contraction <= GATE && out->last <= SURE))
        status = LW_NOT_CONVERGED;
    work_clear(&w);
    return status;
}
