/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Solutions of the augmented system by the factor that stands, with conditions and datum; refinement; trace.
 */
#include "core/chance.h"
#include "core/memory.h"
#include "matrix/vector.h"
#include "solve/direct.h"

#include <string.h>

#define MOST_EXACT 2000 /* columns up to which the trace is exact */
#define BATCH 64
#define NORM_STEPS 5
#define LARGE 2000   /* columns from which a solve is dear */
#define SETTLED 0.25 /* relative change of the norm that no longer matters to a condition number */

/* The right-hand side over the rows of M: f, and h of the conditions that stand in the factor. */
static void stack_side(const lw_direct *self, int64_t k, const double *f, const double *h, double *out)
{
    int64_t stacked = lw_direct_stacked(self, self->base_lambda), c = self->base.system->conditions;
    int64_t plain = self->base.system->rows + lw_direct_penalty_rows(self, self->base_lambda);
    memset(out, 0, (size_t)(stacked * k) * 8);
    for (int64_t v = 0; v < k; v++) {
        if (f) lw_copy(plain, f + v * plain, out + v * stacked);
        for (int64_t i = 0; h && i < self->extra_conditions; i++)
            out[v * stacked + plain + i] = h[v * c + self->extra_condition[i]];
    }
}

lw_status lw_direct_solve_many(lw_decomposition *base, double lambda, int64_t k, const double *f,
                               const double *g, const double *h, double *r, double *z, double *u,
                               lw_error *error)
{
    lw_direct *self = (lw_direct *)base;
    lw_status status = lw_direct_prepare(self, lambda, NULL, error);
    if (status != LW_OK) return status;
    int64_t n = base->system->columns, stacked = lw_direct_stacked(self, lambda),
            defect = lw_direct_defect(self);
    int64_t plain = base->system->rows + lw_direct_penalty_rows(self, lambda);
    int has_side = f || (h && self->extra_conditions > 0);
    double *F = has_side ? LW_NEW_ARRAY(double, stacked *k) : NULL,
           *R = r ? LW_NEW_ARRAY(double, stacked *k) : NULL;
    double *G = g && defect > 0 ? LW_NEW_ARRAY(double, n *k) : NULL;
    if ((has_side && !F) || (r && !R) || (g && defect > 0 && !G))
        status = lw_fail_memory(error, "the right-hand sides", (size_t)((stacked + n) * k) * 8);
    if (status == LW_OK) {
        if (F) stack_side(self, k, f, h, F);
        if (G) {
            lw_copy(n * k, g, G);
            lw_datum_project_transposed(&self->datum, k, G);
        }
        status = self->factor->solve(self, k, F, G ? G : g, R, z, error);
    }
    if (status == LW_OK && self->conditions.count > 0)
        status = lw_conditions_apply(self, k, G ? G : g, h, R, z, u, error);
    if (status == LW_OK) {
        lw_datum_project(&self->datum, k, z);
        for (int64_t v = 0; r && v < k; v++) lw_copy(plain, R + v * stacked, r + v * plain);
    }
    lw_free(F);
    lw_free(G);
    lw_free(R);
    return status;
}

lw_status lw_direct_refine(lw_direct *self, double lambda, int most, const lw_watch *watch, lw_error *error)
{
    if (self->exact && self->refined_lambda == lambda) return self->refined_status;
    lw_status status = lw_direct_prepare(self, lambda, watch, error);
    if (status != LW_OK) return status;
    lw_exact_state_clear(&self->refined);
    lw_exact_free(self->exact);
    self->exact = NULL;
    self->refined_lambda = (double)NAN;
    status = lw_exact_new(self->base.system, lambda, &self->exact, error);
    if (status < 0) return status;
    status = lw_exact_state_new(self->exact, &self->refined, error);
    if (status == LW_OK)
        status = lw_exact_refine(self->exact, LW_SIDE_PROBLEM, 0, &self->base, lambda, most, watch,
                                 &self->refined, &self->refinement, error);
    if (status < 0 || status == LW_INTERRUPTED) {
        lw_exact_state_clear(&self->refined);
        lw_exact_free(self->exact);
        self->exact = NULL;
        return status;
    }
    self->refined_lambda = lambda;
    self->refined_status = status;
    return status;
}

/* trace H = n - defect - conditions - lambda^2 tr(Q L'L), column by column. */
static lw_status exact_trace(lw_direct *self, double lambda, double *trace, lw_error *error)
{
    int64_t n = self->base.system->columns, p = self->penalty->rows;
    double *g = LW_NEW_ARRAY(double, n *BATCH), *z = LW_NEW_ARRAY(double, n *BATCH),
           *row = LW_NEW_ARRAY(double, p);
    double sum = 0;
    lw_status status =
        g && z && row ? LW_OK : lw_fail_memory(error, "the trace", (size_t)(2 * n * BATCH + p) * 8);
    for (int64_t first = 0; status == LW_OK && first < n; first += BATCH) {
        int64_t k = n - first < BATCH ? n - first : BATCH;
        for (int64_t v = 0; v < k; v++) {
            const lw_sparse *L = self->penalty;
            memset(row, 0, (size_t)p * 8);
            for (int64_t e = L->start[first + v]; e < L->start[first + v + 1]; e++)
                row[L->index[e]] = -L->value[e];
            lw_sparse_apply_transposed(L, 1, row, g + v * n); /* -L'L e_j */
        }
        status = lw_direct_solve_many(&self->base, lambda, k, NULL, g, NULL, NULL, z, NULL, error);
        for (int64_t v = 0; status == LW_OK && v < k; v++) sum += z[first + v + v * n];
    }
    *trace = (double)(n - lw_direct_defect(self) - self->base.system->conditions) - lambda * lambda * sum;
    lw_free(g);
    lw_free(z);
    lw_free(row);
    return status;
}

/* v'(v - r) over rows first .. first+count-1 for random signs v there: v'P v with P the projector on the
 * columns of M. */
static lw_status probe(lw_direct *self, double lambda, int64_t first, int64_t count, uint64_t stream,
                       double *work, double *sample, lw_error *error)
{
    const lw_system *system = self->base.system;
    int64_t plain = system->rows + lw_direct_penalty_rows(self, lambda);
    double *f = work, *r = work + plain, *z = work + 2 * plain;
    lw_random *random = NULL;
    lw_status status = lw_random_new(self->watch.seed, stream, &random, error);
    if (status < 0) return status;
    lw_fill(plain, 0, f);
    for (int64_t i = 0; i < count; i++) f[first + i] = lw_random_sign(random);
    lw_random_free(random);
    status = lw_direct_solve_many(&self->base, lambda, 1, f, NULL, NULL, r, z, NULL, error);
    *sample = lw_dot(count, f + first, f + first, NULL) - lw_dot(count, f + first, r + first, NULL);
    return status;
}

/* tr H as the mean of v'H v over random signs (Hutchinson, Communications in Statistics 19:433-450, 1990),
 * or, where the observations determine most, `whole` less the same over the penalty rows: whichever part is
 * smaller varies less. */
static lw_status probed_trace(lw_direct *self, double lambda, double whole, double *trace, double *spread,
                              lw_error *error)
{
    const lw_system *system = self->base.system;
    int64_t m = system->rows, p = lw_direct_penalty_rows(self, lambda);
    int probes = self->options.trace_probes > 1 ? self->options.trace_probes : 8;
    double *work = LW_NEW_ARRAY(double, 2 * (m + p) + system->columns), sample = 0, mean = 0, square = 0;
    if (!work) return lw_fail_memory(error, "the trace", (size_t)(2 * (m + p)) * 8);
    lw_status status = probe(self, lambda, m, p, 0, work, &sample, error);
    int penalty_side = sample < 0.5 * whole;
    for (int k = 0; status == LW_OK && k < probes; k++) {
        if (k > 0 || !penalty_side)
            status = probe(self, lambda, penalty_side ? m : 0, penalty_side ? p : m, (uint64_t)k, work,
                           &sample, error);
        double off = sample - mean;
        mean += off / (k + 1);
        square += off * (sample - mean);
    }
    *trace = penalty_side ? whole - mean : mean;
    *spread = sqrt(square / (probes - 1) / probes);
    lw_free(work);
    return status;
}

lw_status lw_direct_trace(lw_direct *self, double lambda, double *trace, double *spread, lw_error *error)
{
    const lw_system *system = self->base.system;
    *spread = 0;
    *trace = (double)(system->columns - lw_direct_defect(self) - system->conditions);
    if (!(lambda > 0)) return LW_OK;
    if (system->columns <= MOST_EXACT) return exact_trace(self, lambda, trace, error);
    return probed_trace(self, lambda, *trace, trace, spread, error);
}

/* Largest eigenvalue of M'M (inverse 0) or of its inverse (1), by a few steps of the power method from a
 * vector without symmetry; they end when the norm has settled. A step with the inverse costs a solve and
 * separates far better, the smallest eigenvalues being few and far below the rest: a large system takes two.
 */
static lw_status iterate_norm(lw_direct *self, int inverse, double *norm, lw_error *error)
{
    int64_t n = self->base.system->columns, rows = lw_direct_stacked(self, self->base_lambda);
    double *z = LW_NEW_ARRAY(double, n), *c = LW_NEW_ARRAY(double, rows > n ? rows : n);
    lw_status status =
        z && c ? LW_OK : lw_fail_memory(error, "the condition estimate", (size_t)(rows + n) * 8);
    for (int64_t j = 0; status == LW_OK && j < n; j++)
        z[j] = (j % 3 == 1 ? -1.0 : 1.0) * (1 + (double)(j % 7) / 8);
    double before = 0;
    int most = inverse && n > LARGE ? 2 : NORM_STEPS;
    for (int step = 0; status == LW_OK && step < most; step++) {
        double size = lw_norm(n, z, NULL);
        lw_scale(n, size > 0 ? 1 / size : 0, z, NULL);
        if (inverse) {
            lw_copy(n, z, c);
            status = self->factor->solve(self, 1, NULL, c, NULL, z, error);
        } else {
            lw_direct_apply(self, self->base_lambda, 1, z, c);
            lw_direct_apply_transposed(self, self->base_lambda, 1, c, z);
        }
        *norm = lw_norm(n, z, NULL);
        if (fabs(*norm - before) <= SETTLED * *norm) break;
        before = *norm;
    }
    lw_free(z);
    lw_free(c);
    return status;
}

double lw_direct_condition(lw_direct *self)
{
    double largest = (double)NAN, inverse = (double)NAN;
    if (!isnan(self->condition)) return self->condition;
    if (iterate_norm(self, 0, &largest, NULL) != LW_OK || iterate_norm(self, 1, &inverse, NULL) != LW_OK)
        return (double)NAN;
    self->condition = fmin(1, 1 / sqrt(largest * inverse));
    return self->condition;
}
