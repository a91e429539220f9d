/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "certainty/deflation.h"

#include "core/memory.h"
#include "matrix/dense.h"

#include <math.h>
#include <string.h>

/* A statistic is lost when less than this share of T_ii is left. */
#define LEFT 1e-6
#define INSEPARABLE 1e-9

lw_status lw_deflation_new(lw_decomposition *decomposition, const lw_estimate *estimate,
                           const lw_certainty *certainty, lw_deflation **out, lw_error *error)
{
    int64_t rows = estimate->rows;
    lw_deflation *d = *out = LW_NEW(lw_deflation);
    if (!d) return lw_fail_memory(error, "the outlier search", sizeof *d);
    d->decomposition = decomposition;
    d->rows = rows;
    d->chi_square = d->start_chi_square = estimate->point.chi_square;
    d->start_y = LW_NEW_ARRAY(double, rows);
    d->start_t = LW_NEW_ARRAY(double, rows);
    d->y = LW_NEW_ARRAY(double, rows);
    d->t = LW_NEW_ARRAY(double, rows);
    if (!d->start_y || !d->start_t || !d->y || !d->t) {
        lw_deflation_free(d);
        *out = NULL;
        return lw_fail_memory(error, "the outlier search", (size_t)rows * 32);
    }
    double delta = certainty->delta0 * (certainty->multiplied ? sqrt(certainty->test.variance_factor) : 1);
    for (int64_t i = 0; i < rows; i++) {
        double size = certainty->error_estimate[i], y = estimate->weighted[i];
        bool tested = !isnan(certainty->redundancy[i]) && certainty->detectable[i] > 0;
        double root = delta / certainty->detectable[i];
        d->start_y[i] = tested ? y : 0;
        d->start_t[i] = tested ? (size != 0 && y != 0 ? -y / size : root * root) : 0;
    }
    memcpy(d->y, d->start_y, (size_t)rows * sizeof *d->y);
    memcpy(d->t, d->start_t, (size_t)rows * sizeof *d->t);
    return LW_OK;
}

void lw_deflation_free(lw_deflation *d)
{
    if (!d) return;
    for (int64_t k = 0; k < d->room; k++) {
        lw_free(d->column[k]);
        lw_free(d->full[k]);
    }
    lw_free(d->column);
    lw_free(d->full);
    lw_free(d->row);
    lw_free(d->start_y);
    lw_free(d->start_t);
    lw_free(d->y);
    lw_free(d->t);
    lw_free(d);
}

/* T e_i = W'(I - A Q A')W e_i. */
static lw_status full_column(lw_deflation *d, int64_t i, double *column, lw_error *error)
{
    const lw_system *system = d->decomposition->system;
    double *f = LW_NEW_ZEROS(double, d->rows), *z = LW_NEW_ARRAY(double, system->columns);
    lw_status status = f && z ? LW_OK : lw_fail_memory(error, "the outlier search", (size_t)d->rows * 8);
    if (status == LW_OK) {
        f[i] = 1;
        lw_system_whiten(system, 1, f);
        status = d->decomposition->methods->solve_many(d->decomposition, 0, 1, f, NULL, NULL, column, z, NULL,
                                                       error);
    }
    if (status >= LW_OK) {
        lw_system_whiten_transposed(system, 1, column);
        status = LW_OK;
    }
    lw_free(f);
    lw_free(z);
    return status;
}

/* c = (T e_i - sum_l c_l c_l(i)) / sqrt(T_ii as it stands). */
static void reduce(const lw_deflation *d, int64_t count, int64_t i, const double *full, double *c)
{
    memcpy(c, full, (size_t)d->rows * sizeof *c);
    for (int64_t l = 0; l < count; l++) {
        double factor = d->column[l][i];
        for (int64_t j = 0; j < d->rows; j++) c[j] -= factor * d->column[l][j];
    }
    double scale = c[i] > 0 ? 1 / sqrt(c[i]) : 0;
    for (int64_t j = 0; j < d->rows; j++) c[j] *= scale;
}

static void subtract(lw_deflation *d, int64_t i, const double *c)
{
    double w = c[i] > 0 ? d->y[i] / c[i] : 0;
    d->chi_square -= w * w;
    for (int64_t j = 0; j < d->rows; j++) {
        d->y[j] -= c[j] * w;
        d->t[j] -= c[j] * c[j];
        if (d->t[j] < LEFT * d->start_t[j]) d->t[j] = 0;
    }
    d->t[i] = 0;
}

static lw_status grow(lw_deflation *d, lw_error *error)
{
    if (d->count < d->room) return LW_OK;
    int64_t room = 2 * d->room + 8;
    double **column = lw_resize(d->column, (size_t)room, sizeof *column);
    if (column) d->column = column;
    double **full = lw_resize(d->full, (size_t)room, sizeof *full);
    if (full) d->full = full;
    int64_t *row = lw_resize(d->row, (size_t)room, sizeof *row);
    if (row) d->row = row;
    if (!column || !full || !row) return lw_fail_memory(error, "the outlier search", (size_t)room * 24);
    for (int64_t k = d->room; k < room; k++) d->column[k] = d->full[k] = NULL;
    d->room = room;
    return LW_OK;
}

/* Columns of row i at the next place, without counting it yet. */
static lw_status prepare(lw_deflation *d, int64_t i, lw_error *error)
{
    lw_status status = grow(d, error);
    if (status != LW_OK) return status;
    int64_t k = d->count;
    if (d->column[k] && d->row[k] == i) return LW_OK;
    if (!d->column[k]) d->column[k] = LW_NEW_ARRAY(double, d->rows);
    if (!d->full[k]) d->full[k] = LW_NEW_ARRAY(double, d->rows);
    d->row[k] = -1;
    if (!d->column[k] || !d->full[k])
        return lw_fail_memory(error, "the outlier search", (size_t)d->rows * 16);
    status = full_column(d, i, d->full[k], error);
    if (status != LW_OK) return status;
    reduce(d, k, i, d->full[k], d->column[k]);
    d->row[k] = i;
    return LW_OK;
}

lw_status lw_deflation_rival(lw_deflation *d, int64_t i, int64_t *rival, lw_error *error)
{
    *rival = -1;
    lw_status status = prepare(d, i, error);
    for (int64_t j = 0; status == LW_OK && j < d->rows; j++) {
        double c = d->column[d->count][j];
        if (j == i || !(d->t[j] > 0) || c * c < (1 - 2 * INSEPARABLE) * d->t[j]) continue;
        *rival = j;
        break;
    }
    return status;
}

lw_status lw_deflation_add(lw_deflation *d, int64_t i, lw_error *error)
{
    lw_status status = prepare(d, i, error);
    if (status == LW_OK) subtract(d, i, d->column[d->count++]);
    return status;
}

void lw_deflation_remove(lw_deflation *d, int64_t k)
{
    double *column = d->column[k], *full = d->full[k];
    for (int64_t l = k; l + 1 < d->count; l++) {
        d->column[l] = d->column[l + 1];
        d->full[l] = d->full[l + 1];
        d->row[l] = d->row[l + 1];
    }
    d->count--;
    d->column[d->count] = column;
    d->full[d->count] = full;
    for (int64_t l = d->count; l < d->room; l++) d->row[l] = -1;
    memcpy(d->y, d->start_y, (size_t)d->rows * sizeof *d->y);
    memcpy(d->t, d->start_t, (size_t)d->rows * sizeof *d->t);
    d->chi_square = d->start_chi_square;
    for (int64_t l = 0; l < d->count; l++) {
        reduce(d, l, d->row[l], d->full[l], d->column[l]);
        subtract(d, d->row[l], d->column[l]);
    }
}

lw_status lw_deflation_back(const lw_deflation *d, double *w, lw_error *error)
{
    int64_t k = d->count, defect = 0;
    double *G = LW_NEW_ARRAY(double, k *k);
    if (!G) return lw_fail_memory(error, "the outlier search", (size_t)(k * k) * sizeof *G);
    for (int64_t b = 0; b < k; b++)
        for (int64_t a = 0; a < k; a++) G[a + b * k] = d->full[b][d->row[a]];
    lw_status status = lw_dense_cholesky(k, G, &defect, error);
    if (status == LW_OK) status = lw_dense_cholesky_invert(k, G, error);
    for (int64_t a = 0; a < k && status == LW_OK; a++) {
        double error_size = 0;
        for (int64_t b = 0; b < k; b++) error_size += G[a + b * k] * d->start_y[d->row[b]];
        w[a] = error_size / sqrt(G[a + a * k]);
    }
    lw_free(G);
    return status;
}
