/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The stops of the slider: every damping of the sweep, and the answer's own where it lies between two of
 * them. */
#include "report/data.h"

#include "core/decimal.h"
#include "core/memory.h"

#include <math.h>
#include <string.h>

typedef struct stop {
    lw_curve_row row;
    const double *model;    /* n values, or NULL */
    const double *residual; /* m values of the answer, or NULL */
    double rms;
    int64_t counts[LW_BINS + 2];
} stop;

typedef struct stops {
    int count, chosen; /* chosen: the answer, -1 none */
    bool histograms;   /* of every stop */
    stop *at;
} stops;

/* Is damping a the same as b, give or take the last digits? */
static bool same(double a, double b)
{
    return fabs(a - b) <= 1e-9 * fabs(b);
}

static void place_stops(const lw_run *run, stops *out)
{
    const lw_curve *curve = run->curve;
    bool placed = !run->estimate || !(run->damping > 0.0);
    for (int i = 0; i <= curve->count; i++) {
        bool here = i < curve->count && !placed && same(curve->row[i].point.lambda, run->damping);
        if (!placed && !here && (i == curve->count || curve->row[i].point.lambda > run->damping)) {
            stop *own = &out->at[out->count];
            lw_curve_row_fill(run->system, run->problem->sigma != NULL, &run->estimate->point, &own->row);
            for (int k = 0; k < curve->choices; k++)
                if (same(curve->choice[k].damping, run->damping)) own->row = curve->choice[k].at;
            own->model = run->models ? run->estimate->x : NULL;
            own->residual = run->estimate->residual;
            out->chosen = out->count++;
            placed = true;
        }
        if (i == curve->count) break;
        out->at[out->count].row = curve->row[i];
        if (run->models) out->at[out->count].model = run->models + (int64_t)i * run->problem->n;
        if (here) {
            out->at[out->count].residual = run->estimate->residual;
            out->chosen = out->count;
            placed = true;
        }
        out->count++;
    }
}

/* v = A x - observed of a stop's model, in `room`; the answer's own residuals where it is the answer. */
static const double *residual_of(const lw_run *run, const stop *at, double *room)
{
    if (at->residual) return at->residual;
    lw_sparse_apply(run->problem->design, 1, at->model, room);
    for (int64_t i = 0; i < run->problem->m; i++) room[i] -= run->problem->value[i];
    return room;
}

static lw_status measure(const lw_run *run, stops *all, lw_error *error)
{
    int64_t m = run->problem->m;
    double work = (double)lw_sparse_nonzeros(run->problem->design) * all->count;
    all->histograms = run->models != NULL && work <= LW_REPORT_MOST_WORK;
    for (int k = 0; k < all->count; k++) all->at[k].rms = LW_UNKNOWN;
    if (!all->histograms) {
        if (all->chosen >= 0) all->at[all->chosen].rms = run->rms;
        return LW_OK;
    }
    double *room = LW_NEW_ARRAY(double, m);
    if (room == NULL) return lw_fail_memory(error, "report", (size_t)m * sizeof(double));
    for (int k = 0; k < all->count; k++) {
        const lw_point *point = &all->at[k].row.point;
        const double *v = residual_of(run, &all->at[k], room);
        double sum = 0.0;
        int64_t used = 0;
        for (int64_t i = 0; i < m; i++) {
            if (!lw_report_row_used(run, i)) continue;
            sum += v[i] * v[i];
            used++;
        }
        all->at[k].rms = used > 0 ? sqrt(sum / (double)used) : LW_UNKNOWN;
        lw_report_histogram(run, v, lw_report_scale(run, point->chi_square, point->effective_parameters),
                            all->at[k].counts);
    }
    lw_free(room);
    return LW_OK;
}

/* misfit^2 at x0: the whitened right-hand side over the observations used. */
static double start_square(const lw_run *run)
{
    double sum = 0.0;
    for (int64_t i = 0; run->system && i < run->system->observations; i++)
        if (lw_report_row_used(run, i)) sum += run->system->b[i] * run->system->b[i];
    return sum;
}

static void put_points(lw_json *json, const lw_run *run, const stops *all)
{
    static const char *const name[] = {"damping",
                                       "misfit",
                                       "size",
                                       "chi_square",
                                       "effective_parameters",
                                       "effective_spread",
                                       "gcv",
                                       "risk",
                                       "curvature",
                                       "error_bound",
                                       "rms",
                                       "variance_reduction"};
    double start = start_square(run);
    lw_json_object(json, "points");
    for (size_t c = 0; c < sizeof name / sizeof *name; c++) {
        lw_json_array(json, name[c]);
        for (int k = 0; k < all->count; k++) {
            const lw_curve_row *row = &all->at[k].row;
            const lw_point *p = &row->point;
            double value[] = {p->lambda,
                              p->misfit,
                              p->size,
                              p->chi_square,
                              p->effective_parameters,
                              p->effective_spread,
                              row->gcv,
                              row->risk,
                              row->curvature,
                              p->error_bound,
                              all->at[k].rms,
                              start > 0.0 ? 1.0 - p->misfit * p->misfit / start : LW_UNKNOWN};
            lw_json_number(json, NULL, value[c]);
        }
        lw_json_close(json);
    }
    lw_json_array(json, "converged");
    for (int k = 0; k < all->count; k++) lw_json_bool(json, NULL, all->at[k].row.converged);
    lw_json_close(json);
    lw_json_close(json);
}

static int nearest_stop(const stops *all, double damping)
{
    int best = -1;
    for (int k = 0; k < all->count && damping > 0.0; k++)
        if (best < 0 || fabs(log(all->at[k].row.point.lambda / damping)) <
                            fabs(log(all->at[best].row.point.lambda / damping)))
            best = k;
    return best;
}

static void put_choices(lw_json *json, const lw_curve *curve, const stops *all)
{
    lw_json_array(json, "choices");
    for (int i = 0; i < curve->choices; i++) {
        const lw_choice *choice = &curve->choice[i];
        lw_json_object(json, NULL);
        lw_json_text_value(json, "criterion", lw_criterion_name(choice->criterion));
        lw_json_number(json, "damping", choice->damping);
        lw_json_number(json, "from", choice->from);
        lw_json_number(json, "to", choice->to);
        lw_json_number(json, "value", choice->value);
        bool picked = !isnan(choice->damping);
        lw_json_number(json, "misfit", picked ? choice->at.point.misfit : LW_UNKNOWN);
        lw_json_number(json, "size", picked ? choice->at.point.size : LW_UNKNOWN);
        lw_json_integer(json, "index", nearest_stop(all, choice->damping));
        lw_json_text_value(json, "warning", choice->warning[0] ? choice->warning : NULL);
        lw_json_close(json);
    }
    lw_json_close(json);
}

static void put_histogram(lw_json *json, const char *key, const lw_run *run, const stop *at, int count)
{
    lw_json_object(json, key);
    lw_json_number(json, "low", LW_BIN_LOW);
    lw_json_number(json, "width", LW_BIN_WIDTH);
    bool stated = run->problem->sigma || run->problem->covariance;
    lw_json_text_value(json, "of",
                       run->variance_estimated ? (stated ? "s₀ σ" : "s₀")
                       : stated                ? "σ"
                                               : "unit");
    lw_json_array(json, "counts");
    for (int k = 0; k < count; k++) {
        lw_json_array(json, NULL);
        for (int b = 0; b < LW_BINS + 2; b++) lw_json_integer(json, NULL, at[k].counts[b]);
        lw_json_close(json);
    }
    lw_json_close(json);
    lw_json_close(json);
}

static lw_status put_models(lw_json *json, const lw_run *run, const stops *all, lw_error *error)
{
    if (run->models == NULL) {
        lw_json_null(json, "models");
        return LW_OK;
    }
    lw_status status = LW_OK;
    lw_json_array(json, "models");
    for (int k = 0; k < all->count && status == LW_OK; k++)
        status = lw_pack_model(json, NULL, run->problem->n, all->at[k].model, error);
    lw_json_close(json);
    return status;
}

static lw_status put_curve(lw_json *json, const lw_run *run, stops *all, lw_error *error)
{
    place_stops(run, all);
    lw_status status = measure(run, all, error);
    if (status != LW_OK) return status;
    lw_json_object(json, "curve");
    lw_json_integer(json, "chosen", all->chosen);
    lw_json_integer(json, "used", run->system->observations_used);
    lw_json_text_value(json, "comparison", run->curve->comparison[0] ? run->curve->comparison : NULL);
    put_points(json, run, all);
    put_choices(json, run->curve, all);
    if (all->histograms)
        put_histogram(json, "histogram", run, all->at, all->count);
    else
        lw_json_null(json, "histogram");
    lw_json_text_value(json, "histogram_missing",
                       run->models ? "Residuals at every damping would have taken too long to compute; those "
                                     "of the answer are shown below."
                                   : "The models at the other dampings were not kept, so residuals are known "
                                     "at the answer only, further below.");
    status = put_models(json, run, all, error);
    lw_json_close(json);
    return status;
}

lw_status lw_report_curve(lw_json *json, const lw_run *run, lw_error *error)
{
    if (run->estimate) { /* the answer's own, also where the sweep has none of every damping */
        stop answer = {0};
        lw_report_histogram(run, run->estimate->residual,
                            lw_report_scale(run, run->estimate->point.chi_square, run->effective_parameters),
                            answer.counts);
        put_histogram(json, "histogram", run, &answer, 1);
    }
    if (run->curve == NULL || run->curve->count == 0) {
        lw_json_null(json, "curve");
        return LW_OK;
    }
    stops all = {0, -1, false, LW_NEW_ZEROS(stop, run->curve->count + 1)};
    if (all.at == NULL)
        return lw_fail_memory(error, "report", (size_t)(run->curve->count + 1) * sizeof(stop));
    lw_status status = put_curve(json, run, &all, error);
    lw_free(all.at);
    return status;
}
