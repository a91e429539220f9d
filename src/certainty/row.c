/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Reliability of the readings: the formulas stand in certainty.h. */
#include "certainty/part.h"
#include "certainty/separability.h"
#include "core/chance.h"
#include "core/memory.h"
#include "matrix/vector.h"

#include <math.h>
#include <string.h>

/* a' Q a of the readings that are set aside: their entries need not stand in the pattern of the factor. */
static lw_status know_aside(lw_certainty_work *w, lw_error *error)
{
    const lw_equations *e = &w->equations;
    int64_t n = w->system->columns;
    if (!w->system->row_factor) return LW_OK;
    w->known = LW_NEW_ARRAY(double, w->system->rows);
    int64_t *column = LW_NEW_ARRAY(int64_t, e->longest);
    double *a = LW_NEW_ARRAY(double, e->longest), *q = LW_NEW_ARRAY(double, n);
    lw_status status =
        w->known && column && a && q ? LW_OK : lw_fail_memory(error, "predictions", (size_t)n * 8);
    for (int64_t i = 0; i < w->system->rows && status == LW_OK; i++) {
        w->known[i] = (double)NAN;
        if (w->system->row_factor[i] != 0) continue;
        int64_t count = lw_equation_row(e, i, column, a);
        memset(q, 0, (size_t)n * sizeof *q);
        for (int64_t k = 0; k < count; k++) q[column[k]] += a[k];
        status = lw_cofactor_apply(w->cofactor, 1, q, error);
        if (status > LW_OK) status = LW_OK;
        w->known[i] = 0;
        for (int64_t k = 0; k < count; k++) w->known[i] += a[k] * q[column[k]];
    }
    lw_free(column);
    lw_free(a);
    lw_free(q);
    return status;
}

lw_status lw_row_columns(lw_certainty_work *w, lw_error *error)
{
    lw_status status = know_aside(w, error);
    if (status == LW_OK) status = lw_separability_try(w->cofactor, w->watch, &w->trials, error);
    if (status == LW_OK && lw_shift_is_cheap(&w->equations, w->cofactor))
        status = lw_shift_of_all(&w->equations, w->cofactor, w->watch, &w->shift, error);
    return status;
}

lw_status lw_row_entries(lw_certainty_work *w, lw_error *error)
{
    bool own = !w->shift.size;
    lw_status status = own ? lw_shift_new(w->system->rows, &w->shift, error) : LW_OK;
    w->out->shift_of_own = own;
    if (status == LW_OK)
        status = lw_redundancy_new(&w->equations, w->cofactor, w->known, own ? &w->shift : NULL, w->watch,
                                   &w->redundancy, error);
    if (status == LW_OK && own) status = lw_shift_of_blocks(&w->equations, w->cofactor, &w->shift, error);
    return status;
}

static lw_status rows_new(lw_certainty *out, lw_error *error)
{
    double **arrays[] = {&out->predicted_sigma, &out->redundancy,     &out->standardized, &out->detectable,
                         &out->bias_ratio,      &out->error_estimate, &out->largest_shift};
    for (size_t k = 0; k < sizeof arrays / sizeof *arrays; k++) {
        *arrays[k] = LW_NEW_ARRAY(double, out->rows);
        if (!*arrays[k]) return lw_fail_memory(error, "reliability", (size_t)out->rows * 8);
        lw_fill(out->rows, (double)NAN, *arrays[k]);
    }
    out->shifted_parameter = LW_NEW_ARRAY(int64_t, out->rows);
    if (!out->shifted_parameter) return lw_fail_memory(error, "reliability", (size_t)out->rows * 8);
    for (int64_t i = 0; i < out->rows; i++) out->shifted_parameter[i] = -1;
    return LW_OK;
}

/* Critical values: per test at alpha; for the whole family of tested readings at 1 - confidence. */
static void make_critical(lw_certainty_work *w, double tested)
{
    lw_certainty *out = w->out;
    double family = lw_family_alpha(1 - w->options->confidence, tested > 0 ? tested : 1);
    if (w->options->variance_estimated) {
        out->critical = lw_tau_critical(w->options->alpha, out->test.degrees_of_freedom);
        out->family_critical = lw_tau_critical(family, out->test.degrees_of_freedom);
    } else {
        out->critical = lw_w_critical(w->options->alpha);
        out->family_critical = lw_w_critical(family);
    }
}

/* The statistics of row i that a readable error has. divisor: 1, or s0 for tau. */
static void fill_statistics(lw_certainty_work *w, int64_t i, double divisor)
{
    lw_certainty *out = w->out;
    const lw_redundancy *r = w->redundancy;
    bool aside = isnan(r->redundancy[i]);
    double root = sqrt(r->visible[i]),
           side = aside ? w->estimate->residual[i] * r->visible[i] : w->estimate->weighted[i];
    out->standardized[i] = side / root / divisor;
    out->error_estimate[i] = -side / r->visible[i];
    if (aside) return;
    out->detectable[i] = out->delta0 * sqrt(w->factor) / root;
    out->bias_ratio[i] = out->delta0 * sqrt((1 - r->share[i]) / r->share[i]);
    out->largest_shift[i] = w->shift.size[i] * out->detectable[i];
    out->shifted_parameter[i] = w->shift.parameter[i];
}

static int flag_of(const lw_certainty_work *w, int64_t i)
{
    const lw_redundancy *r = w->redundancy;
    if (isnan(r->redundancy[i])) return LW_FLAG_SET_ASIDE;
    int flag = 0;
    if (!(r->share[i] >= LW_LEAST_SHARE)) flag |= LW_FLAG_NO_REDUNDANCY;
    if (r->share[i] < 0.1) flag |= LW_FLAG_WEAK;
    if (fabs(w->out->standardized[i]) > w->out->critical) flag |= LW_FLAG_SUSPECT;
    return flag;
}

lw_status lw_row_finish(lw_certainty_work *w, lw_error *error)
{
    lw_certainty *out = w->out;
    const lw_redundancy *r = w->redundancy;
    bool tau = w->options->variance_estimated;
    double divisor = tau ? (out->test.degrees_of_freedom >= 2 ? w->s0 : (double)NAN) : 1, tested = 0;
    lw_status status = rows_new(out, error);
    if (status == LW_OK)
        status = lw_separability_find(r, w->trials, &out->inseparable, &out->inseparable_count, error);
    if (status != LW_OK) return status;
    for (int64_t i = 0; i < out->rows; i++)
        tested += !isnan(r->redundancy[i]) && r->share[i] >= LW_LEAST_SHARE;
    make_critical(w, tested);
    for (int64_t i = 0; i < out->rows; i++) {
        out->predicted_sigma[i] = sqrt(w->factor * fmax(0, r->adjusted[i]));
        out->redundancy[i] = r->redundancy[i];
        if (r->share[i] >= LW_LEAST_SHARE) fill_statistics(w, i, divisor);
        out->flag[i] = (uint8_t)flag_of(w, i);
    }
    for (int64_t k = 0; k < 2 * out->inseparable_count; k++)
        out->flag[out->inseparable[k]] |= LW_FLAG_INSEPARABLE;
    return LW_OK;
}
