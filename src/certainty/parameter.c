/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Standard deviations, intervals and covariances of the parameters. */
#include "certainty/low_rank.h"
#include "certainty/part.h"
#include "certainty/sigma.h"
#include "core/memory.h"
#include "solve/variance.h"

#include <math.h>

static lw_status sample(lw_certainty_work *w, lw_error *error)
{
    int samples = w->options->samples > 0 ? w->options->samples : LW_SIGMA_SAMPLES;
    w->kind = LW_SIGMA_SAMPLED;
    w->out->samples = samples;
    w->out->sigma_error = 1 / sqrt(2.0 * samples);
    return lw_variance_by_samples(w->cofactor, !w->noise, samples, w->watch, w->variance, error);
}

/* Nanoseconds or so that the samples would take: steps of the estimate, two products a step. */
static double sampling_cost(const lw_certainty_work *w)
{
    double samples = w->options->samples > 0 ? w->options->samples : LW_SIGMA_SAMPLES;
    return 2 * samples * (double)w->estimate->steps * (double)lw_sparse_nonzeros(w->system->problem->design);
}

/* Nanoseconds or so that orthogonalizing twice takes for each earlier vector and place of a vector. */
#define ORTHOGONAL 3.2

/* Upper bounds from a bidiagonalization; samples where they cannot be had. */
static lw_status bound_from_above(lw_certainty_work *w, lw_error *error)
{
    lw_low_rank info;
    double sides = (double)(w->system->rows + w->system->columns);
    int64_t most = (int64_t)sqrt(2 * LW_SIGMA_WORK / (ORTHOGONAL * sides)) + 1;
    lw_status status = lw_variance_low_rank(w->cofactor, most, w->watch, w->variance, &info, error);
    if (status == LW_QUALIFIED) return sample(w, error);
    if (status != LW_OK) return status;
    w->kind = LW_SIGMA_UPPER_BOUND;
    return lw_log_add(lw_watch_log(w->watch),
                      "The standard deviations are upper bounds (prior covariance less an update of rank "
                      "%lld): samples would take "
                      "too long. They come near the truth with 1.25 to 3 steps for each effective parameter; "
                      "%lld steps saw %.0f "
                      "effective parameters%s.",
                      (long long)info.steps, (long long)info.steps, info.effective,
                      info.complete ? "" : ", as many as memory and time allow: they may be much too large");
}

/* Cost (columns x nonzeros) of refined variances that a sparse factor may take: about a tenth of a second.
 * The dense engine takes what lw_solve_variances allows. */
#define SPARSE_COST 5e6

/* Variances to twice the digits where the engine refines and the cost is small; else w->refined stays NULL.
 * */
static lw_status refine(lw_certainty_work *w, lw_error *error)
{
    double worst = 0;
    lw_error quiet = {0};
    w->refined = LW_NEW_ARRAY(lw_decimal, w->cofactor->columns);
    if (!w->refined) return lw_fail_memory(error, "standard deviations", (size_t)w->cofactor->columns * 16);
    double most = w->cofactor->kind == LW_COFACTOR_DENSE ? 0 : SPARSE_COST;
    lw_status status = lw_solve_variances(w->cofactor->decomposition, w->cofactor->lambda, most, w->watch,
                                          w->refined, &worst, &quiet);
    if (status == LW_OK) return LW_OK;
    lw_free(w->refined);
    w->refined = NULL;
    if (status == LW_NO_MEMORY || status == LW_INTERRUPTED) return lw_fail(error, status, "%s", quiet.text);
    return LW_OK;
}

lw_status lw_parameter_columns(lw_certainty_work *w, lw_error *error)
{
    int64_t n = w->cofactor->columns;
    if (!w->options->sigma) return LW_OK;
    w->variance = LW_NEW_ARRAY(double, n);
    if (!w->variance) return lw_fail_memory(error, "standard deviations", (size_t)n * sizeof(double));
    if (w->noise && lw_variance_noise_is_cheap(w->cofactor)) {
        w->kind = LW_SIGMA_EXACT;
        w->out->sigma_error = w->cofactor->error;
        return lw_variance_of_noise(w->cofactor, w->watch, w->variance, error);
    }
    if (w->noise || w->cofactor->kind == LW_COFACTOR_NONE) {
        if (!w->noise && lw_low_rank_applies(w->cofactor) && sampling_cost(w) > LW_SIGMA_WORK)
            return bound_from_above(w, error);
        if (w->cofactor->decomposition->methods->solve_many) return sample(w, error);
        lw_free(w->variance);
        w->variance = NULL;
        return LW_OK;
    }
    w->kind = LW_SIGMA_EXACT;
    return refine(w, error);
}

lw_status lw_parameter_entries(lw_certainty_work *w, lw_error *error)
{
    (void)error;
    if (!w->options->sigma || w->noise || w->kind != LW_SIGMA_EXACT) return LW_OK;
    lw_variance_of_entries(w->cofactor, w->variance);
    w->out->sigma_error = w->refined ? 0 : w->cofactor->error / 2;
    return LW_OK;
}

/* sqrt(chi_square / dof * Q_jj) in twice the digits, rounded once; without the factor: sqrt(Q_jj). */
static double refined_sigma(const lw_certainty_work *w, int64_t column)
{
    lw_decimal variance = w->refined[column];
    if (w->options->variance_estimated) {
        lw_decimal chi_square = {w->estimate->point.chi_square, w->estimate->chi_square_low};
        lw_decimal factor = lw_decimal_divide(chi_square, lw_decimal_of(w->out->test.degrees_of_freedom));
        variance = lw_decimal_multiply(variance, factor);
    }
    lw_decimal sigma = lw_decimal_sqrt(variance);
    return sigma.high + sigma.low;
}

void lw_parameter_finish(lw_certainty_work *w)
{
    lw_certainty *out = w->out;
    const lw_system *system = w->system;
    bool usable = w->variance && !isnan(w->factor);
    for (int64_t j = 0; j < out->parameters; j++) {
        int64_t c = system->column_of[j];
        if (c < 0) {
            out->sigma_kind[j] = LW_SIGMA_FIXED;
            continue;
        }
        if (!usable || isnan(w->variance[c])) continue;
        out->sigma[j] =
            w->refined ? refined_sigma(w, c) : sqrt(w->factor * w->variance[c]) * system->scale[c];
        out->sigma_kind[j] = (int8_t)w->kind;
        double half = out->interval_multiplier * out->sigma[j];
        out->interval_low[j] = w->estimate->x[j] - half;
        out->interval_high[j] = w->estimate->x[j] + half;
    }
    for (int64_t k = 0; k < out->covariance_count; k++) out->covariance[k].covariance *= w->factor;
}

/* Column a of the covariance in z: Q e_a, or Q A'A Q e_a for noise. */
static lw_status covariance_column(lw_certainty_work *w, int64_t column, double *q, double *image,
                                   lw_error *error)
{
    lw_status status = lw_cofactor_columns(w->cofactor, 1, &column, q, error);
    if (status < LW_OK || !w->noise) return status < LW_OK ? status : LW_OK;
    lw_sparse_apply(w->system->matrix, 1, q, image);
    lw_sparse_apply_transposed(w->system->matrix, 1, image, q);
    status = lw_cofactor_apply(w->cofactor, 1, q, error);
    return status < LW_OK ? status : LW_OK;
}

/* The free parameters asked for, in the order asked. */
static int64_t list_parameters(const lw_certainty_work *w, int64_t *list)
{
    int64_t count = 0, asked = w->options->covariance_count;
    if (asked < 0) asked = w->out->parameters;
    for (int64_t k = 0; k < asked; k++) {
        int64_t j = w->options->covariance_of ? w->options->covariance_of[k] : k;
        if (w->system->column_of[j] >= 0) list[count++] = j;
    }
    return count;
}

static lw_status fill_covariance(lw_certainty_work *w, int64_t count, const int64_t *list, lw_error *error)
{
    const lw_system *system = w->system;
    lw_covariance_entry *entry = w->out->covariance;
    double *q = LW_NEW_ARRAY(double, system->columns),
           *image = LW_NEW_ARRAY(double, w->noise ? system->rows : 0);
    lw_status status =
        q && image ? LW_OK : lw_fail_memory(error, "the covariance", (size_t)system->columns * 8);
    for (int64_t a = 0; a < count && status == LW_OK; a++) {
        int64_t column = system->column_of[list[a]];
        status = covariance_column(w, column, q, image, error);
        for (int64_t b = a; b < count && status == LW_OK; b++) {
            int64_t other = system->column_of[list[b]];
            double covariance = q[other] * system->scale[column] * system->scale[other];
            *entry++ = (lw_covariance_entry){list[a], list[b], covariance};
        }
        if (lw_watch_cancelled(w->watch))
            status = lw_fail(error, LW_INTERRUPTED, "interrupted during the covariance");
    }
    lw_free(q);
    lw_free(image);
    return status;
}

lw_status lw_parameter_covariance(lw_certainty_work *w, lw_error *error)
{
    int64_t asked = w->options->covariance_count;
    if (asked == 0 || (asked > 0 && !w->options->covariance_of)) return LW_OK;
    if (asked < 0) asked = w->out->parameters;
    int64_t *list = LW_NEW_ARRAY(int64_t, asked);
    if (!list) return lw_fail_memory(error, "the covariance", (size_t)asked * 8);
    int64_t count = list_parameters(w, list), entries = lw_bytes(count, count + 1) / 2;
    lw_status status = lw_watch_budget(w->watch, lw_bytes(entries, sizeof(lw_covariance_entry)),
                                       "the covariance", "ask for fewer parameters", error);
    if (status == LW_OK && w->noise)
        status = lw_system_matrix(w->cofactor->decomposition->system, w->watch, error);
    if (status == LW_OK) {
        w->out->covariance = LW_NEW_ARRAY(lw_covariance_entry, entries);
        w->out->covariance_count = entries;
        if (!w->out->covariance) status = lw_fail_memory(error, "the covariance", (size_t)entries * 24);
    }
    if (status == LW_OK) status = fill_covariance(w, count, list, error);
    lw_free(list);
    return status;
}
