/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "cases.h"

#include "check_tradeoff.h"
#include "gravity.h"
#include "shaw.h"

#include "core/memory.h"
#include "solve/engine.h"

#include <math.h>
#include <string.h>

swept sweep_by(lw_problem *problem, bool own, const char *engine, const lw_sweep_options *options)
{
    swept s = {.problem = problem};
    lw_system_options system = {.penalty.prefer = own ? LW_PREFER_OWN : LW_PREFER_SMALLEST};
    lw_sweep_options sweep = *options;
    sweep.sigma_stated = problem->sigma != NULL;
    lw_solve_options solve = {.engine = engine, .sweep = 1, .tolerance = options->tolerance};
    solve.trace_probes = lw_sweep_wants_trace(&sweep);
    s.status = lw_system_new(problem, &system, NULL, &s.system, &s.error);
    if (s.status >= 0) {
        double lambda = options->damping != NULL ? options->damping[0] : 1;
        s.status =
            lw_engine_find(engine)->decompose(s.system, lambda, &solve, NULL, &s.decomposition, &s.error);
    }
    if (s.status >= 0) s.status = lw_sweep(s.decomposition, &sweep, NULL, &s.curve, &s.error);
    return s;
}

void swept_clear(swept *s)
{
    lw_curve_free(s->curve);
    lw_decomposition_free(s->decomposition);
    lw_system_free(s->system);
    lw_problem_free(s->problem);
}

const lw_choice *choice_of(const swept *s, lw_criterion criterion)
{
    ck_assert_msg(s->status >= 0, "%s", s->error.text);
    const lw_choice *choice = lw_curve_choice(s->curve, criterion);
    ck_assert_ptr_nonnull(choice);
    return choice;
}

lw_problem *hilbert_problem(void)
{
    double A[80], b[10];
    for (int i = 0; i < 10; i++) {
        for (int j = 0; j < 8; j++) A[i * 8 + j] = 1.0 / (i + j + 1);
        b[i] = i % 2 == 0 ? 1 : -1;
    }
    return problem_from_dense(10, 8, A, b, NULL);
}

lw_problem *shaw_problem(const double *sigma)
{
    return problem_from_dense(20, 20, shaw_A, shaw_b, sigma);
}

lw_problem *gravity_problem(const double *sigma)
{
    return problem_from_dense(20, 20, gravity_A, gravity_b, sigma);
}

void set_differences(lw_problem *problem, int order)
{
    double L[20 * 20] = {0};
    int rows = 20 - order;
    for (int i = 0; i < rows; i++) {
        if (order == 1) {
            L[i * 20 + i] = -1;
            L[i * 20 + i + 1] = 1;
        } else if (order == 2) {
            L[i * 20 + i] = L[i * 20 + i + 2] = 1;
            L[i * 20 + i + 1] = -2;
        } else {
            L[i * 20 + i] = 1;
        }
    }
    problem_set_penalty(problem, rows, L);
}

lw_problem *blur_problem(int64_t m, int64_t n, double noise, uint64_t seed, bool with_sigma)
{
    double *A = lw_alloc((size_t)(m * n), sizeof(double)), *b = lw_alloc((size_t)m, sizeof(double));
    double *sigma = lw_alloc((size_t)m, sizeof(double));
    for (int64_t i = 0; i < m; i++) {
        double s = (double)i / (double)m, sum = 0;
        for (int64_t j = 0; j < n; j++) {
            double t = ((double)j + 0.5) / (double)n, a = exp(-60 * (s - t) * (s - t));
            A[i * n + j] = a > 1e-6 ? a : 0;
            sum += A[i * n + j] * (exp(-30 * (t - 0.4) * (t - 0.4)) + (t > 0.7));
        }
        double normal = 0; /* a sum of twelve uniform numbers */
        for (int k = 0; k < 12; k++) normal += next_random(&seed) / 2;
        b[i] = sum + noise * normal;
        sigma[i] = noise;
    }
    lw_problem *problem = problem_from_dense(m, n, A, b, with_sigma ? sigma : NULL);
    lw_free(A);
    lw_free(b);
    lw_free(sigma);
    return problem;
}
