/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Networks: network MATRIX own|certain|inverse|cholmod|spqr|mirror
 *   own      solve, refined on the exact augmented system           certain  that with variances and
 * redundancies inverse  numeric factorization beside the selected inverse      mirror   cholmod with the
 * program's own orderings cholmod  A'A, analyse, factorize, solve: one thread, tuned allocation and ordering
 * spqr  its least squares */
#include "bench.h"

#include "certainty/cofactor.h"
#include "certainty/redundancy.h"
#include "core/memory.h"
#include "matrix/suitesparse.h"
#include "solve/engine.h"

#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <suitesparse/SuiteSparseQR_C.h>
#include <suitesparse/cholmod.h>

void omp_set_max_active_levels(int levels) __attribute__((weak));

static void run_own(const lw_problem *problem, int certain)
{
    lw_error error = {0};
    lw_system *system;
    lw_decomposition *decomposition;
    lw_estimate *estimate;
    lw_engine_choice choice;
    lw_watch watch = {.memory = INT64_C(12) << 30};
    lw_solve_options options = {.engine = "cholesky"};
    bench_clock from = bench_now();
    bench_check(lw_system_new(problem, &(lw_system_options){0}, &watch, &system, &error), &error);
    bench_check(lw_decompose(system, 0, &options, &watch, &choice, &decomposition, &error), &error);
    bench_check(decomposition->methods->estimate(decomposition, 0, &watch, &estimate, &error), &error);
    bench_tell("solve", from);
    bench_tell_number("refinement_steps", (double)estimate->steps);
    bench_tell_number("refined_to", estimate->refined_to);
    bench_tell_number("rms", estimate->point.misfit);
    if (certain) {
        lw_equations equations;
        lw_cofactor *cofactor;
        lw_redundancy *redundancy;
        bench_clock middle = bench_now();
        bench_check(lw_equations_new(system, &equations, &error), &error);
        bench_check(lw_cofactor_new(decomposition, 0, &watch, &cofactor, &error), &error);
        bench_check(lw_cofactor_invert(cofactor, true, &watch, &error), &error);
        bench_tell("invert", middle);
        middle = bench_now();
        bench_check(lw_redundancy_new(&equations, cofactor, NULL, NULL, &watch, &redundancy, &error), &error);
        bench_tell("redundancy", middle);
        bench_tell("all", from);
        double freedom = (double)(problem->m - estimate->rank);
        bench_tell_number("sum_error", (redundancy->sum - freedom) / freedom);
        lw_redundancy_free(redundancy);
        lw_cofactor_free(cofactor);
        lw_equations_clear(&equations);
    }
    bench_tell_peak();
    lw_estimate_free(estimate);
    lw_decomposition_free(decomposition);
    lw_system_free(system);
}

/* The factorization and the inverse alone, on the same matrix. */
static void run_inverse(const lw_problem *problem)
{
    lw_error error = {0};
    lw_sparse *gram;
    lw_cholesky *factor;
    lw_cholesky_size size;
    lw_factor_view view;
    lw_selected_inverse *inverse;
    lw_watch watch = {.memory = INT64_C(12) << 30};
    bench_check(lw_sparse_gram(problem->design, NULL, &gram, &error), &error);
    bench_check(lw_cholesky_analyse(gram, &watch, &factor, &size, &error), &error);
    bench_clock from = bench_now();
    bench_check(lw_cholesky_factorize(factor, gram, &watch, NULL, &error), &error);
    bench_tell("factorize", from);
    bench_check(lw_cholesky_view(factor, &view, &error), &error);
    from = bench_now();
    bench_check(lw_selected_inverse_new(&view, &inverse, &error), &error);
    bench_check(lw_selected_inverse_run(inverse, &view, true, &watch, &error), &error);
    bench_tell("inverse", from);
    bench_tell_number("factor_nonzeros", (double)size.factor_nonzeros);
    bench_tell_number("flops", size.flops);
    lw_selected_inverse_free(inverse);
    lw_cholesky_free(factor);
    lw_sparse_free(gram);
}

static cholmod_sparse *copy_matrix(const lw_sparse *A, cholmod_common *common)
{
    int64_t nonzeros = lw_sparse_nonzeros(A);
    cholmod_sparse *M = cholmod_l_allocate_sparse((size_t)A->rows, (size_t)A->columns, (size_t)nonzeros, 1, 1,
                                                  0, CHOLMOD_REAL, common);
    SuiteSparse_long *index = bench_sure(M->i);
    memcpy(M->p, A->start, (size_t)(A->columns + 1) * 8);
    memcpy(M->x, A->value, (size_t)nonzeros * 8);
    for (int64_t p = 0; p < nonzeros; p++) index[p] = A->index[p];
    return M;
}

static cholmod_dense *copy_vector(int64_t m, const double *b, cholmod_common *common)
{
    cholmod_dense *B = bench_sure(cholmod_l_allocate_dense((size_t)m, 1, (size_t)m, CHOLMOD_REAL, common));
    memcpy(B->x, b, (size_t)m * 8);
    return B;
}

static void start(cholmod_common *common)
{
    if (omp_set_max_active_levels) omp_set_max_active_levels(0);
    cholmod_l_start(common);
    common->print = 0;
    common->SPQR_nthreads = 1;
    common->supernodal = CHOLMOD_SUPERNODAL;
    common->final_ll = 1;
    common->nmethods = 1;
}

/* A is the matrix as it stands, its rows divided by sigma before the clock starts. mirror: both orderings are
 * looked at. */
static void run_cholmod(const lw_problem *problem, int mirror)
{
    cholmod_common common;
    double one[2] = {1, 0}, zero[2] = {0, 0};
    start(&common);
    cholmod_sparse *A = copy_matrix(problem->design, &common);
    cholmod_dense *b = copy_vector(problem->m, problem->value, &common);
    common.method[0].ordering = problem->n > 500000 && !mirror ? CHOLMOD_METIS : CHOLMOD_AMD;
    bench_clock from = bench_now();
    cholmod_sparse *At = cholmod_l_transpose(A, 1, &common);
    cholmod_sparse *N = cholmod_l_aat(At, NULL, 0, 1, &common);
    N->stype = 1; /* the upper triangle is taken */
    cholmod_dense *g = cholmod_l_allocate_dense(A->ncol, 1, A->ncol, CHOLMOD_REAL, &common);
    cholmod_l_sdmult(A, 1, one, zero, b, g, &common);
    bench_tell("form", from);
    cholmod_factor *L = cholmod_l_analyze(N, &common);
    if (mirror && common.fl > 500 * common.lnz) {
        cholmod_l_free_factor(&L, &common);
        common.method[0].ordering = CHOLMOD_METIS;
        L = cholmod_l_analyze(N, &common);
    }
    bench_tell("analysed", from);
    cholmod_l_factorize(N, L, &common);
    bench_tell("factorized", from);
    cholmod_dense *x = bench_sure(cholmod_l_solve(CHOLMOD_A, L, g, &common));
    bench_tell("solve", from);
    bench_tell_peak();
    cholmod_l_free_dense(&x, &common);
    cholmod_l_free_dense(&g, &common);
    cholmod_l_free_dense(&b, &common);
    cholmod_l_free_factor(&L, &common);
    cholmod_l_free_sparse(&N, &common);
    cholmod_l_free_sparse(&At, &common);
    cholmod_l_free_sparse(&A, &common);
    cholmod_l_finish(&common);
}

static void run_spqr(const lw_problem *problem)
{
    cholmod_common common;
    start(&common);
    cholmod_sparse *A = copy_matrix(problem->design, &common);
    cholmod_dense *b = copy_vector(problem->m, problem->value, &common);
    int ordering = problem->n > 500000 ? SPQR_ORDERING_METIS : SPQR_ORDERING_DEFAULT;
    bench_clock from = bench_now();
    cholmod_dense *x = SuiteSparseQR_C_backslash(ordering, SPQR_DEFAULT_TOL, A, b, &common);
    bench_sure(x);
    bench_tell("solve", from);
    bench_tell_peak();
    cholmod_l_free_dense(&x, &common);
    cholmod_l_free_dense(&b, &common);
    cholmod_l_free_sparse(&A, &common);
    cholmod_l_finish(&common);
}

int main(int argc, char **argv)
{
    if (argc != 3) return 2;
    bench_start();
    lw_problem *problem = bench_problem(argv[1]);
    if (!strcmp(argv[2], "own"))
        run_own(problem, 0);
    else if (!strcmp(argv[2], "certain"))
        run_own(problem, 1);
    else if (!strcmp(argv[2], "inverse"))
        run_inverse(problem);
    else if (!strcmp(argv[2], "cholmod"))
        run_cholmod(problem, 0);
    else if (!strcmp(argv[2], "mirror"))
        run_cholmod(problem, 1);
    else if (!strcmp(argv[2], "spqr"))
        run_spqr(problem);
    else
        return 2;
    lw_problem_free(problem);
    return 0;
}
