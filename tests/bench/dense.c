/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Dense problems: dense ROWS COLUMNS own|lapack|gsl|own-sweep|gsl-sweep
 *   own, lapack, gsl   one least-squares solution: the dense engine refined; dgels; gsl_multifit_linear
 *   *-sweep            50 dampings: the dense engine's decomposition; gsl_multifit_linear_svd and _solve for
 * each */
#include "bench.h"

#include "core/memory.h"
#include "matrix/dense.h"
#include "solve/engine.h"
#include "tradeoff/sweep.h"

#include <gsl/gsl_multifit.h>
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

enum { DAMPINGS = 50 };

static void run_own(const lw_problem *problem, int sweep)
{
    lw_error error = {0};
    lw_system *system;
    lw_decomposition *decomposition;
    lw_engine_choice choice;
    lw_solve_options options = {.engine = "dense", .sweep = sweep, .sweep_from = 10, .sweep_to = 1e-3};
    double grid[DAMPINGS];
    lw_point point[DAMPINGS];
    lw_sweep_grid(1e-3, 10, DAMPINGS, grid);
    bench_clock from = bench_now();
    bench_check(lw_system_new(problem, &(lw_system_options){0}, NULL, &system, &error), &error);
    bench_check(lw_decompose(system, sweep ? 1 : 0, &options, NULL, &choice, &decomposition, &error), &error);
    if (sweep) {
        double *models = bench_sure(LW_NEW_ARRAY(double, DAMPINGS * problem->n));
        bench_check(
            decomposition->methods->evaluate(decomposition, DAMPINGS, grid, 1, point, models, NULL, &error),
            &error);
        lw_free(models);
    } else {
        lw_estimate *estimate;
        bench_check(decomposition->methods->estimate(decomposition, 0, NULL, &estimate, &error), &error);
        lw_estimate_free(estimate);
    }
    bench_tell("solve", from);
    lw_decomposition_free(decomposition);
    lw_system_free(system);
}

static void run_lapack(const lw_problem *problem)
{
    lw_error error = {0};
    double *A = bench_sure(LW_NEW_ARRAY(double, problem->m * problem->n)),
           *b = bench_sure(LW_NEW_ARRAY(double, problem->m));
    memcpy(b, problem->value, (size_t)problem->m * sizeof *b);
    bench_clock from = bench_now();
    lw_sparse_to_dense(problem->design, A);
    bench_check(lw_dense_gels(problem->m, problem->n, A, 1, b, &error), &error);
    bench_tell("solve", from);
    lw_free(A), lw_free(b);
}

static void run_gsl(const lw_problem *problem, int sweep)
{
    size_t m = (size_t)problem->m, n = (size_t)problem->n;
    gsl_matrix *A = gsl_matrix_alloc(m, n), *covariance = gsl_matrix_alloc(n, n);
    gsl_vector *b = gsl_vector_alloc(m), *x = gsl_vector_alloc(n);
    gsl_multifit_linear_workspace *work = gsl_multifit_linear_alloc(m, n);
    double chi, size, grid[DAMPINGS];
    for (size_t j = 0; j < n; j++)
        for (size_t i = 0; i < m; i++) gsl_matrix_set(A, i, j, problem->design->value[i + j * m]);
    for (size_t i = 0; i < m; i++) gsl_vector_set(b, i, problem->value[i]);
    lw_sweep_grid(1e-3, 10, DAMPINGS, grid);
    bench_clock from = bench_now();
    if (sweep) {
        gsl_multifit_linear_svd(A, work);
        for (int k = 0; k < DAMPINGS; k++) gsl_multifit_linear_solve(grid[k], A, b, x, &chi, &size, work);
    } else {
        gsl_multifit_linear(A, b, x, covariance, &chi, work);
    }
    bench_tell("solve", from);
    gsl_multifit_linear_free(work);
    gsl_vector_free(b), gsl_vector_free(x);
    gsl_matrix_free(A), gsl_matrix_free(covariance);
}

/* A full matrix of random numbers with columns that fade, as problem. */
static lw_problem *make_problem(int64_t m, int64_t n)
{
    lw_error error = {0};
    lw_problem *problem = bench_sure(LW_NEW(lw_problem));
    double *random = bench_random(m * n + m);
    bench_check(lw_sparse_new(m, n, m * n, 0, &problem->design, &error), &error);
    for (int64_t j = 0; j <= n; j++) problem->design->start[j] = j * m;
    for (int64_t p = 0; p < m * n; p++) {
        problem->design->index[p] = (int32_t)(p % m);
        problem->design->value[p] = random[p] * exp(-4.0 * (double)(p / m) / (double)n);
    }
    problem->m = m;
    problem->n = n;
    problem->value = bench_sure(LW_NEW_ARRAY(double, m));
    memcpy(problem->value, random + m * n, (size_t)m * sizeof(double));
    lw_free(random);
    return problem;
}

int main(int argc, char **argv)
{
    if (argc != 4) return 2;
    bench_start();
    lw_problem *problem = make_problem(atol(argv[1]), atol(argv[2]));
    int sweep = strstr(argv[3], "-sweep") != NULL;
    if (!strncmp(argv[3], "own", 3))
        run_own(problem, sweep);
    else if (!strncmp(argv[3], "gsl", 3))
        run_gsl(problem, sweep);
    else
        run_lapack(problem);
    lw_problem_free(problem);
    return 0;
}
