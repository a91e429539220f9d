/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "certainty/sigma.h"

#include "core/chance.h"
#include "core/memory.h"

#include <string.h>

#define COLUMNS_A_SOLVE 32
#define SAMPLES_A_SOLVE 16
#define STREAM 72

void lw_variance_of_entries(const lw_cofactor *c, double *variance)
{
    for (int64_t j = 0; j < c->columns; j++) {
        variance[j] = lw_cofactor_entry(c, j, j);
        if (variance[j] < 0) variance[j] = 0;
    }
}

bool lw_variance_noise_is_cheap(const lw_cofactor *c)
{
    double n = (double)c->columns, entries = 0;
    const lw_system *system = c->decomposition->system;
    if (c->kind == LW_COFACTOR_NONE) return false;
    entries = system->matrix ? (double)lw_sparse_nonzeros(system->matrix)
                             : (double)lw_sparse_nonzeros(system->problem->design);
    return n * (c->factor_nonzeros * 4 / 30 + entries) <= LW_SIGMA_WORK;
}

static double square(int64_t n, const double *x)
{
    double sum = 0;
    for (int64_t i = 0; i < n; i++) sum += x[i] * x[i];
    return sum;
}

/* (Q A'A Q)_jj = ||A Q e_j||^2. */
lw_status lw_variance_of_noise(lw_cofactor *c, const lw_watch *watch, double *variance, lw_error *error)
{
    lw_system *system = c->decomposition->system;
    int64_t n = c->columns, rows = system->rows, list[COLUMNS_A_SOLVE];
    lw_status status = lw_system_matrix(system, watch, error);
    double *q = LW_NEW_ARRAY(double, n *COLUMNS_A_SOLVE), *image = LW_NEW_ARRAY(double, rows);
    if (status == LW_OK && !(q && image))
        status = lw_fail_memory(error, "noise variances", (size_t)n * 8 * COLUMNS_A_SOLVE);
    for (int64_t from = 0; from < n && status == LW_OK; from += COLUMNS_A_SOLVE) {
        int64_t k = n - from < COLUMNS_A_SOLVE ? n - from : COLUMNS_A_SOLVE;
        for (int64_t l = 0; l < k; l++) list[l] = from + l;
        lw_watch_tick(watch, "standard deviations", (double)from, (double)n, "");
        status = lw_cofactor_columns(c, k, list, q, error);
        if (status > LW_OK) status = LW_OK;
        for (int64_t l = 0; l < k && status == LW_OK; l++) {
            lw_sparse_apply(system->matrix, 1, q + l * n, image);
            variance[from + l] = square(rows, image);
        }
        if (lw_watch_cancelled(watch))
            status = lw_fail(error, LW_INTERRUPTED, "interrupted during standard deviations");
    }
    lw_free(q);
    lw_free(image);
    return status;
}

static void draw(const lw_system *system, bool posterior, int64_t tall, int k, lw_random *random, double *f)
{
    for (int64_t l = 0; l < k; l++) {
        for (int64_t i = 0; i < tall; i++) {
            bool aside = i < system->rows ? system->row_factor && system->row_factor[i] == 0 : !posterior;
            f[i + l * tall] = aside ? 0 : lw_random_normal(random);
        }
    }
}

lw_status lw_variance_by_samples(lw_cofactor *c, bool posterior, int samples, const lw_watch *watch,
                                 double *variance, lw_error *error)
{
    const lw_system *system = c->decomposition->system;
    const lw_decomposition_methods *m = c->decomposition->methods;
    int64_t n = c->columns, tall = system->rows + (c->lambda > 0 ? system->penalty_rows : 0);
    lw_random *random = NULL;
    double *f = LW_NEW_ARRAY(double, tall *SAMPLES_A_SOLVE), *z = LW_NEW_ARRAY(double, n *SAMPLES_A_SOLVE);
    lw_status status =
        f && z ? LW_OK : lw_fail_memory(error, "samples", (size_t)(tall + n) * 8 * SAMPLES_A_SOLVE);
    if (status == LW_OK) status = lw_random_new(lw_watch_seed(watch), STREAM, &random, error);
    memset(variance, 0, (size_t)n * sizeof *variance);
    for (int done = 0; done < samples && status == LW_OK;) {
        int k = samples - done < SAMPLES_A_SOLVE ? samples - done : SAMPLES_A_SOLVE;
        lw_watch_tick(watch, "sampling", done, samples, "");
        draw(system, posterior, tall, k, random, f);
        status = m->solve_many(c->decomposition, c->lambda, k, f, NULL, NULL, NULL, z, NULL, error);
        if (status > LW_OK && status != LW_INTERRUPTED) status = LW_OK;
        for (int64_t j = 0; j < n * k && status == LW_OK; j++) variance[j % n] += z[j] * z[j] / samples;
        done += k;
        if (lw_watch_cancelled(watch)) status = lw_fail(error, LW_INTERRUPTED, "interrupted while sampling");
    }
    lw_random_free(random);
    lw_free(f);
    lw_free(z);
    return status;
}
