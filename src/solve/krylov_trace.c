/* SPDX-License-Identifier: GPL-3.0-or-later */
/* trace of H = Abar (Abar'Abar + lambda^2 I)^-1 Abar', exact or by random probes; the directions that the
 * penalty leaves alone add one each. */
#include "solve/krylov.h"

#include "core/chance.h"
#include "core/memory.h"
#include "matrix/dense.h"
#include "matrix/vector.h"

#include <math.h>

/* Below this number of multiplications the singular values cost less than the iteration that they spare. */
#define SMALL_WORK 2e7

static lw_status dense_of(lw_operator *op, double *A, lw_error *error)
{
    enum { SOME = 8 };
    int64_t n = op->columns;
    double *unit = lw_alloc_zero((size_t)n * SOME, sizeof(double));
    if (unit == NULL) return lw_fail_memory(error, "the trace", (size_t)n * SOME * sizeof(double));
    for (int64_t at = 0; at < n; at += SOME) {
        int some = n - at < SOME ? (int)(n - at) : SOME;
        for (int c = 0; c < some; c++) unit[c * n + at + c] = 1.0;
        lw_apply(op, some, unit, A + at * op->rows);
        for (int c = 0; c < some; c++) unit[c * n + at + c] = 0.0;
    }
    lw_free(unit);
    return LW_OK;
}

lw_status lw_krylov_small_trace(lw_krylov *self, lw_error *error)
{
    int64_t m = self->op->rows, n = self->op->columns, p = m < n ? m : n;
    if (self->probes < 1 || p < 1 || (double)m * (double)n * (double)p > SMALL_WORK) return LW_OK;
    double *A = lw_alloc((size_t)(m * n), sizeof(double)), *u = lw_alloc((size_t)(m * p), sizeof(double));
    double *vt = lw_alloc((size_t)(p * n), sizeof(double)), *s = lw_alloc((size_t)p, sizeof(double));
    lw_status status = LW_OK;
    if (A == NULL || u == NULL || vt == NULL || s == NULL)
        status = lw_fail_memory(error, "the trace", (size_t)(m * n + m * p + p * n) * sizeof(double));
    if (status == LW_OK) status = dense_of(self->op, A, error);
    if (status == LW_OK) status = lw_dense_svd(m, n, A, u, s, vt, error);
    lw_free(A);
    lw_free(u);
    lw_free(vt);
    if (status != LW_OK) {
        lw_free(s);
        return status;
    }
    self->singular = s;
    self->singular_count = p;
    return LW_OK;
}

lw_status lw_krylov_probe(lw_krylov *self, double *z, lw_error *error)
{
    const lw_system *system = self->base.system;
    int64_t m = self->op->rows;
    for (int c = 0; c < self->probes; c++) {
        lw_random *random = NULL;
        lw_status status =
            lw_random_new(self->watch.seed, UINT64_C(0x7472616365) + (uint64_t)c, &random, error);
        if (status != LW_OK) return status;
        for (int64_t i = 0; i < m; i++) {
            double sign = lw_random_sign(random);
            z[c * m + i] = system->row_factor != NULL && system->row_factor[i] == 0.0 ? 0.0 : sign;
        }
        lw_random_free(random);
    }
    return LW_OK;
}

/* trace = mean over the probes of z'H z. Its variance for random signs is 2 (||H||_F^2 - sum h_ii^2) /
 * probes, with
 * ||H||_F^2 = E ||H z||^2 and sum h_ii^2 >= trace^2 / rows. The quadrature must be far better than that. */
static void combine(const lw_krylov *self, int count, const lw_projected *at, lw_point *point)
{
    double rows = (double)self->base.system->rows_used, probes = self->probes;
    for (int i = 0; i < count; i++) {
        double trace = 0.0, square = 0.0, gap = 0.0;
        for (int c = 0; c < self->probes; c++) {
            trace += at[c * count + i].influence / probes;
            square += at[c * count + i].influence2 / probes;
            gap += at[c * count + i].gap / probes;
        }
        double spread = sqrt(fmax(2.0 * (square - trace * trace / rows), 0.0) / probes);
        bool good = gap <= fmax(1e-6 * fabs(trace), 0.02 * spread);
        point[i].effective_parameters =
            good ? trace + (double)lw_standard_form_undamped(self->form) : (double)NAN;
        point[i].effective_spread = good ? spread : (double)NAN;
    }
}

lw_status lw_krylov_trace(lw_krylov *self, int count, const double *lambda, lw_point *point, lw_error *error)
{
    for (int i = 0; i < count; i++) {
        point[i].effective_parameters = point[i].effective_spread = (double)NAN;
        if (self->singular == NULL) continue;
        double trace = (double)lw_standard_form_undamped(self->form);
        for (int64_t j = 0; j < self->singular_count; j++) {
            double ratio = lambda[i] / self->singular[j]; /* s^2 / (s^2 + lambda^2), also for s = 0 */
            if (self->singular[j] > 0.0) trace += 1.0 / (1.0 + ratio * ratio);
        }
        point[i].effective_parameters = trace;
        point[i].effective_spread = 0.0;
    }
    if (self->singular != NULL || self->probes < 1 || self->B[1].k < 1 || count < 1) return LW_OK;
    lw_projected *at = LW_NEW_ARRAY(lw_projected, (size_t)count * (size_t)self->probes);
    if (at == NULL) return lw_fail_memory(error, "the trace", (size_t)count * sizeof *at);
    lw_status status = LW_OK;
    for (int c = 0; c < self->probes && status == LW_OK; c++)
        status = lw_projected_solve(&self->B[1 + c], count, lambda, at + c * count, NULL, error);
    if (status == LW_OK) combine(self, count, at, point);
    lw_free(at);
    return status;
}

lw_status lw_krylov_trace_ready(lw_krylov *self, double lambda, bool *ready, lw_error *error)
{
    lw_point point = {0};
    lw_status status = lw_krylov_trace(self, 1, &lambda, &point, error);
    *ready = status == LW_OK && !isnan(point.effective_parameters);
    return status;
}
