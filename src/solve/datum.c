/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The free datum: held columns, accurate null vectors, S-transformation. The search is in datum_search.c, the
 * words are in datum_explain.c. */
#include "solve/datum.h"

#include "core/memory.h"
#include "matrix/dense.h"
#include "matrix/vector.h"
#include "solve/direct.h"

#include <math.h>
#include <string.h>

void lw_datum_clear(lw_datum *datum)
{
    lw_free(datum->space.basis);
    lw_free(datum->space.held);
    lw_free(datum->weight);
    *datum = (lw_datum){0};
}

/* z <- z - left (right' z), column by column. */
static void project(const lw_datum *datum, const double *left, const double *right, int64_t k, double *z)
{
    int64_t n = datum->space.columns;
    for (int64_t v = 0; v < k; v++, z += n) {
        for (int64_t i = 0; i < datum->space.defect; i++) {
            double t = lw_dot(n, right + i * n, z, NULL);
            lw_add_scaled(n, -t, left + i * n, z, NULL);
        }
    }
}

void lw_datum_project(const lw_datum *datum, int64_t k, double *z)
{
    if (datum->weight) project(datum, datum->space.basis, datum->weight, k, z);
}

void lw_datum_project_transposed(const lw_datum *datum, int64_t k, double *g)
{
    if (datum->weight) project(datum, datum->weight, datum->space.basis, k, g);
}

/* Columns to hold: elimination with the largest entry of each vector as pivot; basis is used up. */
static void choose_held(int64_t n, int64_t d, double *basis, int64_t *held)
{
    for (int64_t k = 0; k < d; k++) {
        const double *v = basis + k * n;
        int64_t best = 0;
        for (int64_t j = 1; j < n; j++)
            if (fabs(v[j]) > fabs(v[best])) best = j;
        held[k] = best;
        for (int64_t l = k + 1; l < d; l++) {
            double factor = v[best] != 0 ? basis[l * n + best] / v[best] : 0;
            if (factor == 0) continue;
            lw_add_scaled(n, -factor, v, basis + l * n, NULL);
            basis[l * n + best] = 0;
        }
    }
}

/* Null vectors with G_held = I: minimise ||M_0 G||^2 + ||E'G - I||^2, refined twice. *worst = largest ||M_0
 * g|| / ||g||. */
static lw_status polish(lw_direct *direct, double lambda, double *G, double *worst, lw_error *error)
{
    int64_t n = direct->base.system->columns, d = direct->datum.space.defect;
    int64_t stacked = lw_direct_stacked(direct, lambda), first = stacked - d;
    double *f = LW_NEW_ARRAY(double, stacked), *dz = LW_NEW_ARRAY(double, n);
    lw_status status = f && dz ? LW_OK : lw_fail_memory(error, "the null space", (size_t)(stacked + n) * 8);
    *worst = 0;
    for (int64_t k = 0; status == LW_OK && k < d; k++) {
        double *g = G + k * n, size = 0;
        memset(g, 0, (size_t)n * 8);
        for (int round = 0; status == LW_OK && round < 3; round++) {
            lw_direct_apply(direct, lambda, 1, g, f);
            for (int64_t i = 0; i < stacked; i++) f[i] = (i == first + k) - f[i];
            status = direct->factor->solve(direct, 1, f, NULL, NULL, dz, error);
            if (status == LW_OK) lw_add_scaled(n, 1, dz, g, NULL);
        }
        if (status != LW_OK) break;
        lw_direct_apply(direct, lambda, 1, g, f);
        size = lw_norm(n, g, NULL);
        *worst = fmax(*worst, size > 0 ? lw_norm(first, f, NULL) / size : (double)INFINITY);
    }
    lw_free(f);
    lw_free(dz);
    return status;
}

/* G <- G P R^-1 with sqrt(D) G P = Q R, so that G'DG = I; weight = D G. */
static lw_status orthonormalize(lw_direct *direct, lw_error *error)
{
    const lw_system *system = direct->base.system;
    const lw_problem *problem = system->problem;
    int64_t n = system->columns, d = direct->datum.space.defect;
    double *G = direct->datum.space.basis, *old = LW_NEW_ARRAY(double, n *d),
           *weighted = LW_NEW_ARRAY(double, n *d);
    lw_dense_qr qr = {0};
    lw_status status = LW_OK;
    if (!old || !weighted) {
        lw_free(weighted);
        lw_free(old);
        return lw_fail_memory(error, "the null space", (size_t)(n * d) * 16);
    }
    double *D =
        direct->datum.weight; /* its first column holds the scales of the datum columns until the end */
    for (int64_t j = 0; j < n; j++)
        D[j] = !problem->datum || problem->datum[system->parameter_of[j]] ? system->scale[j] : 0;
    for (int64_t i = 0; i < n * d; i++) weighted[i] = D[i % n] * G[i];
    lw_copy(n * d, G, old);
    status = lw_dense_qr_make(n, d, weighted, 1e-10, &qr, error);
    if (status == LW_OK && qr.rank < d)
        status = lw_fail(error, LW_UNSOLVABLE,
                         "the datum parameters do not define the datum: %lld of %lld defects are left; let "
                         "more parameters "
                         "take part (parameters.csv, column datum)",
                         (long long)(d - qr.rank), (long long)d);
    for (int64_t k = 0; status == LW_OK && k < d; k++) {
        lw_copy(n, old + qr.pivot[k] * n, G + k * n);
        for (int64_t i = 0; i < k; i++) lw_add_scaled(n, -qr.factor[i + k * n], G + i * n, G + k * n, NULL);
        lw_scale(n, 1 / qr.factor[k + k * n], G + k * n, NULL);
    }
    for (int64_t k = d - 1; k >= 0; k--) /* the first column last */
        for (int64_t j = 0; j < n; j++) D[j + k * n] = D[j] * D[j] * G[j + k * n];
    lw_dense_qr_clear(&qr);
    lw_free(old);
    return status;
}

/* Held columns from the basis, and the factor with them. */
static lw_status hold_columns(lw_direct *direct, double lambda, const double *basis, int64_t defect,
                              const lw_watch *watch, lw_error *error)
{
    int64_t n = direct->base.system->columns;
    double *work = LW_NEW_ARRAY(double, n *defect);
    int64_t *held = LW_NEW_ARRAY(int64_t, defect);
    if (!work || !held) {
        lw_free(work);
        lw_free(held);
        return lw_fail_memory(error, "the null space", (size_t)(n * defect) * 16);
    }
    lw_copy(n * defect, basis, work);
    choose_held(n, defect, work, held);
    lw_free(work);
    lw_datum_clear(&direct->datum);
    direct->datum.space = (lw_null_space){n, defect, NULL, held};
    lw_status status = lw_direct_make_extra(direct, error);
    return status == LW_OK ? direct->factor->factorize(direct, lambda, watch, error) : status;
}

/* No held columns after a failure. */
static lw_status give_up(lw_direct *direct, lw_status status, lw_error *error)
{
    lw_datum_clear(&direct->datum);
    lw_status again = lw_direct_make_extra(direct, error);
    return again < 0 ? again : status;
}

lw_status lw_datum_hold(lw_direct *direct, double lambda, const double *basis, int64_t defect,
                        const lw_watch *watch, lw_error *error)
{
    int64_t n = direct->base.system->columns;
    double worst = 0;
    lw_status status = lw_watch_budget(watch, lw_bytes(4 * n * defect, 8), "the null space of a free datum",
                                       "hold parameters instead (parameters.csv, column fixed)", error);
    if (status == LW_OK && direct->datum.space.defect != defect)
        status = hold_columns(direct, lambda, basis, defect, watch, error);
    if (status == LW_OK && !(direct->datum.space.basis = LW_NEW_ARRAY(double, n *defect)))
        status = lw_fail_memory(error, "the null space", (size_t)(n * defect) * 8);
    if (status == LW_OK) status = polish(direct, lambda, direct->datum.space.basis, &worst, error);
    if (status == LW_UNSOLVABLE || (status == LW_OK && worst > LW_DATUM_TOLERANCE))
        status = LW_NOT_CONVERGED; /* no clear gap between null and determined: beyond this engine */
    return status == LW_OK ? LW_OK : give_up(direct, status, error);
}

lw_status lw_datum_free(lw_direct *direct, lw_error *error)
{
    size_t places = (size_t)(direct->datum.space.columns * direct->datum.space.defect);
    direct->datum.weight = LW_NEW_ARRAY(double, places);
    lw_status status = direct->datum.weight ? LW_OK : lw_fail_memory(error, "the null space", places * 8);
    if (status == LW_OK) status = orthonormalize(direct, error);
    return status == LW_OK ? LW_OK : give_up(direct, status, error);
}
