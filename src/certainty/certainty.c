/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "certainty/certainty.h"

#include "certainty/global_test.h"
#include "certainty/part.h"
#include "certainty/resolution.h"
#include "core/chance.h"
#include "core/memory.h"
#include "matrix/vector.h"

#include <math.h>

const char *lw_sigma_kind_name(lw_sigma_kind kind)
{
    static const char *const names[] = {"none", "exact", "sampled", "upper_bound", "fixed"};
    return kind >= 0 && kind <= LW_SIGMA_FIXED ? names[kind] : "none";
}

void lw_certainty_free(lw_certainty *c)
{
    if (!c) return;
    void *arrays[] = {
        c->sigma,           c->sigma_kind,    c->interval_low,      c->interval_high,  c->resolution,
        c->predicted_sigma, c->redundancy,    c->standardized,      c->detectable,     c->bias_ratio,
        c->error_estimate,  c->largest_shift, c->shifted_parameter, c->flag,           c->inseparable,
        c->groups,          c->covariance,    c->ellipses,          c->resolution_rows};
    for (size_t k = 0; k < sizeof arrays / sizeof *arrays; k++) lw_free(arrays[k]);
    lw_free(c);
}

static double *unknown(int64_t count)
{
    double *x = LW_NEW_ARRAY(double, count);
    if (x) lw_fill(count, (double)NAN, x);
    return x;
}

static lw_status certainty_new(const lw_system *system, lw_certainty **out, lw_error *error)
{
    int64_t n = system->problem->n, rows = system->rows;
    lw_certainty *c = LW_NEW(lw_certainty);
    *out = c;
    if (!c) return lw_fail_memory(error, "the certainty", sizeof *c);
    c->parameters = n;
    c->rows = rows;
    c->sigma = unknown(n);
    c->sigma_kind = LW_NEW_ZEROS(int8_t, n);
    c->interval_low = unknown(n);
    c->interval_high = unknown(n);
    c->flag = LW_NEW_ZEROS(uint8_t, rows);
    c->critical = c->family_critical = c->sigma_error = c->effective_parameters = (double)NAN;
    if (c->sigma && c->sigma_kind && c->interval_low && c->interval_high && c->flag) return LW_OK;
    return lw_fail_memory(error, "the certainty", (size_t)n * 25 + (size_t)rows);
}

/* Resolution of the free parameters; a held one has none. */
static lw_status make_resolution(lw_certainty_work *w, lw_error *error)
{
    lw_certainty *out = w->out;
    int64_t n = w->cofactor->columns;
    bool entries = w->cofactor->kind != LW_COFACTOR_NONE || !w->damped;
    double trace = (double)NAN, *diagonal = LW_NEW_ARRAY(double, n);
    out->resolution = unknown(out->parameters);
    lw_status status =
        diagonal && out->resolution ? LW_OK : lw_fail_memory(error, "the resolution", (size_t)n * 16);
    if (status == LW_OK && entries)
        status = lw_resolution_of_entries(w->cofactor, w->watch, diagonal, &trace, error);
    if (status == LW_OK && !entries)
        status =
            lw_resolution_by_probes(w->cofactor, w->watch, diagonal, &trace, &out->resolution_error, error);
    for (int64_t j = 0; j < n && status == LW_OK; j++)
        out->resolution[w->system->parameter_of[j]] = diagonal[j];
    out->effective_parameters = trace;
    lw_free(diagonal);
    return status;
}

static lw_status make_resolution_rows(lw_certainty_work *w, lw_error *error)
{
    int64_t count = w->options->resolution_count, n = w->out->parameters;
    if (count <= 0 || !w->options->resolution_of) return LW_OK;
    lw_status status = lw_watch_budget(w->watch, lw_bytes(lw_bytes(count, n), 8), "rows of the resolution",
                                       "ask for fewer parameters", error);
    if (status != LW_OK) return status;
    w->out->resolution_rows = LW_NEW_ARRAY(double, count *n);
    if (!w->out->resolution_rows)
        return lw_fail_memory(error, "rows of the resolution", (size_t)(count * n) * 8);
    return lw_resolution_rows(w->cofactor, count, w->options->resolution_of, w->watch,
                              w->out->resolution_rows, error);
}

/* All that needs columns of Q, the inversion, all that needs entries. */
static lw_status read_inverse(lw_certainty_work *w, bool last, lw_error *error)
{
    bool entries = w->cofactor->kind != LW_COFACTOR_NONE && (w->options->sigma || w->rows_wanted);
    lw_status status = lw_parameter_columns(w, error);
    if (status == LW_OK) status = lw_parameter_covariance(w, error);
    if (status == LW_OK) status = make_resolution_rows(w, error);
    if (status == LW_OK && w->rows_wanted) status = lw_row_columns(w, error);
    if (status == LW_OK && entries && w->options->sigma) status = lw_ellipse_columns(w, error);
    if (status == LW_OK && entries) status = lw_cofactor_invert(w->cofactor, last, w->watch, error);
    if (status == LW_OK && entries) status = lw_parameter_entries(w, error);
    if (status == LW_OK && w->rows_wanted) status = lw_row_entries(w, error);
    if (status == LW_OK && w->options->sigma) status = make_resolution(w, error);
    return status;
}

/* Rank: of the estimate; of our own factor (which exists only where it is full). Effective parameters: the
 * trace of the exact resolution, else of the estimate (a random probe, maybe), else of the probed resolution.
 */
static void make_test(lw_certainty_work *w)
{
    const lw_point *point = &w->estimate->point;
    bool exact = w->damped && w->cofactor->kind != LW_COFACTOR_NONE && !isnan(w->out->effective_parameters);
    if (!exact && !isnan(point->effective_parameters))
        w->out->effective_parameters = point->effective_parameters;
    double effective = w->out->effective_parameters;
    int64_t rank = w->estimate->rank;
    if (rank < 0 && w->cofactor->own_factor && w->cofactor->kind != LW_COFACTOR_NONE)
        rank = w->cofactor->columns;
    lw_global_test_make(w->system, point, rank, effective, w->options->confidence, &w->out->test);
}

/* s0 counts as zero, and is not divided by, when the misfit is rounding of the data. */
static void take_factor(lw_certainty_work *w)
{
    lw_certainty *out = w->out;
    double level = lw_norm(w->system->rows, w->system->b, NULL) * 1e-14;
    double dof = out->test.degrees_of_freedom;
    w->s0 = sqrt(out->test.chi_square) > level ? sqrt(out->test.variance_factor) : (double)NAN;
    w->factor = w->options->variance_estimated ? out->test.variance_factor : 1;
    out->multiplied = w->options->variance_estimated;
    double p = (1 + w->options->confidence) / 2;
    out->interval_multiplier =
        out->multiplied ? (dof > 0 ? lw_t_quantile(p, dof) : (double)NAN) : lw_normal_quantile(p);
    out->delta0 = lw_noncentrality(w->options->alpha, w->options->power);
}

static lw_status finish(lw_certainty_work *w, lw_error *error)
{
    make_test(w);
    take_factor(w);
    lw_parameter_finish(w);
    lw_status status = w->rows_wanted ? lw_row_finish(w, error) : LW_OK;
    if (status == LW_OK) status = lw_group_factors_make(w, error);
    if (status == LW_OK && w->options->sigma) status = lw_ellipses_make(w, error);
    return status;
}

lw_status lw_certainty_make(lw_decomposition *decomposition, const lw_estimate *estimate,
                            const lw_certainty_options *options, bool last, const lw_watch *watch,
                            lw_certainty **out, lw_error *error)
{
    lw_certainty_work w = {
        .system = decomposition->system, .estimate = estimate, .options = options, .watch = watch};
    *out = NULL;
    w.damped = estimate->point.lambda > 0;
    w.noise = w.damped && options->meaning == LW_MEANS_NOISE;
    lw_status status = certainty_new(w.system, &w.out, error);
    bool entries = options->sigma || (options->reliability && !w.noise) || options->covariance_count != 0 ||
                   options->resolution_count > 0; /* else no factor is made for nothing */
    if (status == LW_OK && entries)
        status = lw_cofactor_new(decomposition, estimate->point.lambda, watch, &w.cofactor, error);
    else if (status == LW_OK)
        status = lw_cofactor_none(decomposition, estimate->point.lambda, &w.cofactor, error);
    if (status == LW_OK) {
        w.rows_wanted = options->reliability && !w.noise && w.cofactor->kind != LW_COFACTOR_NONE;
        if (w.rows_wanted) status = lw_equations_new(w.system, &w.equations, error);
    }
    if (status == LW_OK) status = read_inverse(&w, last, error);
    if (status == LW_OK) status = finish(&w, error);
    lw_cofactor_free(w.cofactor);
    lw_equations_clear(&w.equations);
    lw_redundancy_free(w.redundancy);
    lw_shift_clear(&w.shift);
    lw_point_list_free(w.points);
    lw_free(w.variance);
    lw_free(w.refined);
    lw_free(w.known);
    lw_free(w.trials);
    if (status == LW_OK)
        *out = w.out;
    else
        lw_certainty_free(w.out);
    return status;
}
