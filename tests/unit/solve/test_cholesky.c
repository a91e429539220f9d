/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "check_solve.h"

#include "solving.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

/* The net of test_dense.c: textbook "Adjustment Computations" (Wiley), recomputed with 50 digits. */
START_TEST(levelling_six_lines)
{
    lw_problem *problem = six_lines();
    problem_fix(problem, 0, 437.596);
    solved s = solve_by(problem, "cholesky", 0);
    ck_assert_msg(s.status == LW_OK, "%s", s.error.text);
    const double x[] = {437.596, 448.108711728787, 453.468467783476, 444.943605331336};
    ck_assert_double_le(apart(4, s.estimate->x, x), 1e-14);
    ck_assert_str_eq(s.choice.engine->name, "cholesky");
    double *Q = full_inverse(&s, 0);
    ck_assert_double_le(fabs(Q[0] / 1.24247032839380e-5 - 1), 1e-13);
    ck_assert_double_le(fabs(Q[5] / 5.71492330854649e-6 - 1), 1e-13);
    free(Q);
    solved_clear(&s);
}
END_TEST

/* A random sparse problem with penalty differences of neighbours; the same answers from dense as from
 * `engine`. */
static lw_problem *sparse_problem(int64_t m, int64_t n, int differences)
{
    double *A = random_matrix(m, n, 3), *b = random_vector(m, 5), *sigma = random_vector(m, 6);
    for (int64_t i = 0; i < m; i++) sigma[i] = 0.3 + 0.2 * sigma[i];
    lw_problem *problem = problem_from_dense(m, n, A, b, sigma);
    if (differences) {
        double *L = calloc((size_t)(n * n), 8);
        for (int64_t i = 0; i + 1 < n; i++) {
            L[i * n + i] = -1;
            L[i * n + i + 1] = 1;
        }
        problem_set_penalty(problem, n - 1, L);
        free(L);
    }
    free(A);
    free(b);
    free(sigma);
    return problem;
}

static void compare(const char *engine, double at, int differences)
{
    const int64_t m = 150, n = 60;
    const double lambda[] = {10, 3, 1, 0.3, 0.1};
    lw_point a[5], b[5];
    double *models = malloc(2 * 5 * 60 * 8);
    solved x = solve_by(sparse_problem(m, n, differences), "dense", at);
    solved y = solve_by(sparse_problem(m, n, differences), engine, at);
    ck_assert_msg(x.status == LW_OK && y.status == LW_OK, "%s %s", x.error.text, y.error.text);
    ck_assert_int_eq(memcmp(x.estimate->x, y.estimate->x, (size_t)n * 8),
                     0); /* correctly rounded, whatever the factor */
    ck_assert_int_eq(memcmp(x.estimate->residual, y.estimate->residual, (size_t)m * 8), 0);
    ck_assert_int_eq(
        x.decomposition->methods->evaluate(x.decomposition, 5, lambda, 1, a, models, NULL, &x.error), LW_OK);
    ck_assert_int_eq(
        y.decomposition->methods->evaluate(y.decomposition, 5, lambda, 1, b, models + 300, NULL, &y.error),
        LW_OK);
    for (int k = 0; k < 5; k++) {
        ck_assert(near(a[k].misfit, b[k].misfit, 1e-11));
        ck_assert(near(a[k].size, b[k].size, 1e-11));
        ck_assert(near(a[k].size_slope, b[k].size_slope, 1e-10));
        ck_assert(near(a[k].effective_parameters, b[k].effective_parameters, 1e-10));
    }
    ck_assert_double_le(apart(300, models, models + 300), 1e-11);
    double *Q = full_inverse(&x, at), *R = full_inverse(&y, at);
    ck_assert_double_le(apart(n * n, R, Q), 1e-11);
    free(Q);
    free(R);
    free(models);
    solved_clear(&x);
    solved_clear(&y);
}

START_TEST(agrees_with_dense)
{
    compare("cholesky", 0, 0);
    compare("cholesky", 1, 0);
    compare("cholesky", 0.5, 1);
}
END_TEST

START_TEST(qr_agrees_with_dense)
{
    compare("qr", 0, 0);
    compare("qr", 1, 0);
    compare("qr", 0.5, 1);
}
END_TEST

/* The augmented system itself: both residuals of the solution vanish. */
static void check_augmented(const char *engine)
{
    const int64_t m = 150, n = 60, k = 3;
    const double lambda = 0.7;
    solved s = solve_by(sparse_problem(m, n, 0), engine, lambda);
    double *f = random_vector((m + n) * k, 21), *g = random_vector(n * k, 22),
           *z = malloc((size_t)(n * k) * 8);
    double *r = malloc((size_t)((m + n) * k) * 8), *Az = malloc((size_t)m * 8), *Atr = malloc((size_t)n * 8),
           *Lr = malloc((size_t)n * 8);
    ck_assert_int_eq(
        s.decomposition->methods->solve_many(s.decomposition, lambda, k, f, g, NULL, r, z, NULL, &s.error),
        LW_OK);
    for (int64_t v = 0; v < k; v++) {
        const double *rv = r + v * (m + n), *fv = f + v * (m + n);
        lw_sparse_apply(s.system->matrix, 1, z + v * n, Az);
        lw_sparse_apply_transposed(s.system->matrix, 1, rv, Atr);
        for (int64_t i = 0; i < m; i++) ck_assert_double_le(fabs(rv[i] + Az[i] - fv[i]), 1e-12);
        lw_system_penalize(s.system, z + v * n, Lr);
        for (int64_t i = 0; i < n; i++)
            ck_assert_double_le(fabs(rv[m + i] + lambda * Lr[i] - fv[m + i]), 1e-12);
        lw_system_penalize_transposed(s.system, rv + m, Lr);
        for (int64_t j = 0; j < n; j++)
            ck_assert_double_le(fabs(Atr[j] + lambda * Lr[j] - g[v * n + j]), 1e-12);
    }
    free(f);
    free(g);
    free(z);
    free(r);
    free(Az);
    free(Atr);
    free(Lr);
    solved_clear(&s);
}

START_TEST(solves_the_augmented_system)
{
    check_augmented("dense");
    check_augmented("cholesky");
    check_augmented("qr");
}
END_TEST

/* Seventy thousand points in a chain with both ends tied: the smallest singular value is 1e-5 of the largest,
 * and heights are sums of the readings (both ends agree). */
START_TEST(long_chain_is_no_defect)
{
    const int64_t n = 70000;
    lw_sparse *A = NULL;
    ck_assert_int_eq(lw_sparse_new(n, n, 2 * n - 1, 0, &A, NULL), LW_OK);
    double *b = malloc((size_t)n * 8);
    int64_t e = 0;
    for (int64_t j = 0; j < n; j++) { /* row i: x_i - x_(i-1), row 0: x_0 */
        A->start[j] = e;
        A->index[e] = (int32_t)j;
        A->value[e++] = 1;
        if (j + 1 < n) {
            A->index[e] = (int32_t)j + 1;
            A->value[e++] = -1;
        }
        b[j] = 0.25;
    }
    A->start[n] = e;
    solved s = solve_by(problem_from_sparse(A, b, NULL), "auto", 0);
    ck_assert_msg(s.status == LW_OK, "%s", s.error.text);
    ck_assert_str_eq(s.choice.engine->name, "cholesky");
    ck_assert_int_eq(s.estimate->rank, n);
    for (int64_t j = 0; j < n; j++) ck_assert_double_eq(s.estimate->x[j], 0.25 * (double)(j + 1));
    ck_assert_double_le(s.estimate->rcond, 1e-4);
    free(b);
    solved_clear(&s);
}
END_TEST

/* A chain tied at one end, damped: trace = sum s^2 / (s^2 + lambda^2) with s^2 = 2 - 2 cos((2k - 1) pi / (2n
 * + 1)). */
START_TEST(trace_by_probes)
{
    const int64_t n = 3000;
    const double lambda[] = {0.3, 3};
    lw_sparse *A = NULL;
    ck_assert_int_eq(lw_sparse_new(n, n, 2 * n - 1, 0, &A, NULL), LW_OK);
    double *b = random_vector(n, 4);
    for (int64_t j = 0, e = 0; j < n; j++) {
        A->index[e] = (int32_t)j;
        A->value[e++] = 1;
        if (j + 1 < n) {
            A->index[e] = (int32_t)j + 1;
            A->value[e++] = -1;
        }
        A->start[j + 1] = e;
    }
    A->start[0] = 0;
    lw_solve_options options = {.engine = "cholesky", .trace_probes = 20};
    solved s = solve_problem(problem_from_sparse(A, b, NULL), 0.3, &options);
    lw_point point[2];
    ck_assert_msg(s.status == LW_OK, "%s", s.error.text);
    ck_assert_int_eq(
        s.decomposition->methods->evaluate(s.decomposition, 2, lambda, 1, point, NULL, NULL, &s.error),
        LW_OK);
    for (int i = 0; i < 2; i++) {
        double exact = 0;
        for (int64_t k = 1; k <= n; k++) {
            double square = 2 - 2 * cos((double)(2 * k - 1) * 3.14159265358979323846 / (double)(2 * n + 1));
            exact += square / (square + lambda[i] * lambda[i]);
        }
        ck_assert_double_gt(point[i].effective_spread, 0);
        ck_assert_double_le(fabs(point[i].effective_parameters - exact), 5 * point[i].effective_spread);
        ck_assert_double_le(point[i].effective_spread, 0.02 * exact);
    }
    free(b);
    solved_clear(&s);
}
END_TEST

Suite *suite_cholesky(void)
{
    Suite *suite = suite_create("cholesky");
    TCase *tests = tcase_create("cholesky");
    tcase_add_test(tests, levelling_six_lines);
    tcase_add_test(tests, agrees_with_dense);
    tcase_add_test(tests, qr_agrees_with_dense);
    tcase_add_test(tests, solves_the_augmented_system);
    tcase_add_test(tests, long_chain_is_no_defect);
    tcase_add_test(tests, trace_by_probes);
    tcase_set_timeout(tests, 60);
    suite_add_tcase(suite, tests);
    return suite;
}
