/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "solving.h"

#include "core/memory.h"
#include "matrix/dense.h"

#include <check.h>
#include <math.h>
#include <stdlib.h>
#include <string.h>

solved solve_problem(lw_problem *problem, double lambda, const lw_solve_options *options)
{
    solved s = {.problem = problem};
    lw_watch watch = {.log = &s.log};
    lw_system_options chosen = {.penalty = {.prefer = problem->penalty ? LW_PREFER_OWN : LW_PREFER_SMALLEST}};
    lw_dense_single_thread();
    s.status = lw_system_new(problem, &chosen, &watch, &s.system, &s.error);
    if (s.status == LW_OK)
        s.status = lw_decompose(s.system, lambda, options, &watch, &s.choice, &s.decomposition, &s.error);
    if (s.status == LW_OK)
        s.status = s.decomposition->methods->estimate(s.decomposition, lambda, &watch, &s.estimate, &s.error);
    return s;
}

solved solve_by(lw_problem *problem, const char *engine, double lambda)
{
    lw_solve_options options = {.engine = engine};
    return solve_problem(problem, lambda, &options);
}

void solved_clear(solved *s)
{
    lw_estimate_free(s->estimate);
    lw_decomposition_free(s->decomposition);
    lw_system_free(s->system);
    lw_problem_free(s->problem);
    lw_log_clear(&s->log);
}

int near(double a, double b, double tolerance)
{
    return fabs(a - b) <= tolerance * fmax(1, fabs(b));
}

double apart(int64_t n, const double *a, const double *b)
{
    double largest = 0, size = 0;
    for (int64_t i = 0; i < n; i++) {
        largest = fmax(largest, isfinite(a[i]) ? fabs(a[i] - b[i]) : (double)INFINITY);
        size = fmax(size, fabs(b[i]));
    }
    return size > 0 ? largest / size : largest;
}

/* (P'L L'P)^-1 from the view, densely. */
static void invert_view(const lw_factor_view *view, double *Q)
{
    int64_t n = view->columns, defect;
    double *L = calloc((size_t)(n * n), 8), *N = calloc((size_t)(n * n), 8);
    for (int64_t s = 0; s < view->supernodes; s++) {
        int64_t top = view->row_start[s], rows = view->row_start[s + 1] - top;
        for (int64_t j = view->first[s]; j < view->first[s + 1]; j++)
            for (int64_t i = j - view->first[s]; i < rows; i++)
                L[view->row[top + i] + j * n] =
                    view->value[view->value_start[s] + i + (j - view->first[s]) * rows];
    }
    lw_dense_multiply(0, 1, n, n, n, 1, L, n, L, n, 0, N, n);
    ck_assert_int_eq(lw_dense_cholesky(n, N, &defect, NULL), LW_OK);
    ck_assert_int_eq(lw_dense_cholesky_invert(n, N, NULL), LW_OK);
    for (int64_t j = 0; j < n; j++)
        for (int64_t i = 0; i < n; i++) Q[view->permutation[i] + view->permutation[j] * n] = N[i + j * n];
    free(L);
    free(N);
}

double *full_inverse(solved *s, double lambda)
{
    lw_inverse_source source;
    ck_assert_int_eq(
        s->decomposition->methods->inverse_entries(s->decomposition, lambda, 0, &source, &s->error), LW_OK);
    int64_t n = source.columns;
    double *Q = malloc((size_t)(n * n) * 8);
    if (source.dense)
        memcpy(Q, source.dense, (size_t)(n * n) * 8);
    else
        invert_view(&source.view, Q);
    for (int64_t i = 0; i < n; i++) {
        for (int64_t j = 0; j < n; j++) {
            for (int64_t k = 0; k < source.correction; k++)
                Q[i + j * n] += source.left[i + k * n] * source.right[j + k * n];
            Q[i + j * n] *= s->system->scale[i] * s->system->scale[j];
        }
    }
    return Q;
}

double *random_matrix(int64_t m, int64_t n, uint64_t seed)
{
    double *A = malloc((size_t)(m * n) * 8);
    for (int64_t i = 0; i < m; i++) {
        for (int64_t j = 0; j < n; j++) {
            double value = next_random(&seed), keep = next_random(&seed);
            A[i * n + j] = keep < -0.8 ? value : 0;
        }
        A[i * n + i % n] = 1 + 0.5 * next_random(&seed);
    }
    return A;
}

double *random_vector(int64_t n, uint64_t seed)
{
    double *v = malloc((size_t)n * 8);
    for (int64_t i = 0; i < n; i++) v[i] = next_random(&seed);
    return v;
}

lw_problem *six_lines(void)
{
    static const char *const A[] = {"-1", "1", "0", "0",  "0", "-1", "1", "0", "0",  "0", "-1", "1",
                                    "1",  "0", "0", "-1", "0", "-1", "0", "1", "-1", "0", "1",  "0"};
    static const char *const dh[] = {"10.509", "5.360", "-8.523", "-7.348", "-3.167", "15.881"};
    static const char *const sigma[] = {"0.006", "0.004", "0.005", "0.003", "0.004", "0.012"};
    return problem_from_text(6, 4, A, dh, sigma);
}
