/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Damped problems: noise and posterior sigmas, resolution, samples, against dense matrices by definition. */
#include "check_certainty.h"

#include "certainty/sigma.h"
#include "core/memory.h"
#include "matrix/dense.h"
#include "unit/support.h"

#include <math.h>

#define M 30
#define N 40
#define LAMBDA 0.8

/* Rays through cells: fewer readings than unknowns. */
static lw_problem *rays(void)
{
    double A[M * N] = {0}, y[M], sigma[M];
    uint64_t seed = 31;
    for (int i = 0; i < M; i++) {
        for (int k = 0; k < 6; k++) A[N * i + (i + 7 * k) % N] = 1.2 + next_random(&seed);
        y[i] = 3 * next_random(&seed);
        sigma[i] = 0.3 + 0.1 * next_random(&seed);
    }
    return problem_from_dense(M, N, A, y, sigma);
}

/* Q = (A'PA + lambda^2 I)^-1, R = Q A'PA, QNQ = R Q. */
static void by_definition(const lw_problem *p, double *Q, double *R, double *QNQ)
{
    static double A[M * N], T[N * N];
    int64_t defect;
    lw_error error = {0};
    lw_sparse_to_dense(p->design, A);
    for (int j = 0; j < N; j++)
        for (int i = 0; i < M; i++) A[i + j * M] /= p->sigma[i];
    lw_dense_multiply(1, 0, N, N, M, 1, A, M, A, M, 0, T, N);
    for (int k = 0; k < N * N; k++) Q[k] = T[k] + (k % (N + 1) == 0 ? LAMBDA * LAMBDA : 0);
    ck_assert_int_eq(lw_dense_cholesky(N, Q, &defect, &error), LW_OK);
    ck_assert_int_eq(lw_dense_cholesky_invert(N, Q, &error), LW_OK);
    lw_dense_multiply(0, 0, N, N, N, 1, Q, N, T, N, 0, R, N);
    lw_dense_multiply(0, 0, N, N, N, 1, R, N, Q, N, 0, QNQ, N);
}

static const char *const engines[] = {"dense", "cholesky", "lsqr"};

START_TEST(test_sigma_and_resolution)
{
    static double Q[N * N], R[N * N], QNQ[N * N];
    static const int64_t wanted[] = {5, 17};
    lw_problem *p = rays();
    lw_certainty_options options = default_options();
    bool posterior = _i >= 3;
    options.meaning = posterior ? LW_MEANS_POSTERIOR : LW_MEANS_NOISE;
    options.covariance_of = options.resolution_of = wanted;
    options.covariance_count = options.resolution_count = 2;
    double trace = 0;
    adjusted a = adjust(p, engines[_i % 3], NULL, 0, LAMBDA, &options);
    const lw_certainty *c = a.certainty;
    by_definition(p, Q, R, QNQ);
    const double *V = posterior ? Q : QNQ;
    double precise =
        _i % 3 == 2 ? 1e-3 : 1e-10; /* columns of an iterative engine are solved to its tolerance */
    for (int j = 0; j < N; j++) {
        ck_close(c->sigma[j], sqrt(V[j + j * N]), 1e-10);
        ck_assert_int_eq(c->sigma_kind[j], LW_SIGMA_EXACT);
        ck_assert_double_eq_tol(c->resolution[j], R[j + j * N], 1e-11);
        ck_assert_double_eq_tol(c->resolution_rows[N + j], R[17 + j * N], precise);
        trace += R[j + j * N];
    }
    ck_close(c->effective_parameters, trace, 1e-11);
    ck_assert_int_eq(c->covariance_count, 3);
    ck_assert_double_eq_tol(c->covariance[1].covariance, V[5 + 17 * N], precise);
    ck_assert(!c->test.applies && isnan(c->test.probability));
    ck_close(c->test.degrees_of_freedom, M - trace, 1e-6);
    ck_assert((c->redundancy != NULL) == posterior);
    adjusted_clear(&a);
    lw_problem_free(p);
}
END_TEST

/* Samples agree with exact variances within their stated error. */
START_TEST(test_samples)
{
    static double Q[N * N], R[N * N], QNQ[N * N];
    double variance[N], squares = 0;
    const int samples = 800;
    lw_problem *p = rays();
    lw_certainty_options options = default_options();
    adjusted a = adjust(p, "lsqr", NULL, 0, LAMBDA, &options);
    lw_cofactor *cofactor = NULL;
    lw_error error = {0};
    ck_assert_int_eq(lw_cofactor_none(a.decomposition, LAMBDA, &cofactor, &error), LW_OK);
    ck_assert_int_eq(lw_variance_by_samples(cofactor, _i == 1, samples, NULL, variance, &error), LW_OK);
    by_definition(p, Q, R, QNQ);
    for (int j = 0; j < N; j++) {
        double exact = sqrt((_i == 1 ? Q : QNQ)[j + j * N]), s = sqrt(variance[j]) * a.system->scale[j];
        ck_assert_double_le(fabs(s / exact - 1), 4.5 / sqrt(2.0 * samples));
        squares += (s / exact - 1) * (s / exact - 1);
    }
    ck_assert_double_le(sqrt(squares / N), 1.3 / sqrt(2.0 * samples));
    lw_cofactor_free(cofactor);
    adjusted_clear(&a);
    lw_problem_free(p);
}
END_TEST

/* Without damping an iterative engine has the variances of a direct one. */
START_TEST(test_iterative_undamped)
{
    double A[M * 5], y[M];
    uint64_t seed = 6;
    for (int k = 0; k < M * 5; k++) A[k] = next_random(&seed);
    for (int i = 0; i < M; i++) y[i] = next_random(&seed);
    lw_problem *p = problem_from_dense(M, 5, A, y, NULL);
    lw_certainty_options options = default_options();
    options.variance_estimated = true;
    adjusted a = adjust(p, "lsqr", NULL, 0, 0, &options), b = adjust(p, "dense", NULL, 0, 0, &options);
    for (int j = 0; j < 5; j++) ck_close(a.certainty->sigma[j], b.certainty->sigma[j], 1e-8);
    for (int i = 0; i < M; i++) ck_close(a.certainty->redundancy[i], b.certainty->redundancy[i], 1e-10);
    ck_assert_double_eq(a.certainty->test.degrees_of_freedom, M - 5);
    adjusted_clear(&a);
    adjusted_clear(&b);
    lw_problem_free(p);
}
END_TEST

/* An iterative engine on a problem with a rank defect has no factor: sigmas are sampled, and said to be. */
START_TEST(test_iterative_deficient)
{
    double A[M * 3], y[M];
    uint64_t seed = 12;
    for (int i = 0; i < M; i++) {
        A[3 * i] = next_random(&seed);
        A[3 * i + 1] = next_random(&seed);
        A[3 * i + 2] = A[3 * i] + A[3 * i + 1];
        y[i] = next_random(&seed);
    }
    lw_problem *p = problem_from_dense(M, 3, A, y, NULL);
    lw_certainty_options options = default_options();
    adjusted a = adjust(p, "lsqr", NULL, 0, 0, &options);
    for (int j = 0; j < 3; j++) {
        ck_assert_int_eq(a.certainty->sigma_kind[j], LW_SIGMA_SAMPLED);
        ck_assert(a.certainty->sigma[j] > 0 && a.certainty->sigma[j] < 1);
    }
    ck_close(a.certainty->sigma_error, 1 / sqrt(2.0 * a.certainty->samples), 1e-15);
    ck_assert_ptr_null(a.certainty->redundancy);
    adjusted_clear(&a);
    lw_problem_free(p);
}
END_TEST

Suite *suite_damped(void)
{
    Suite *suite = suite_create("damped");
    TCase *cases = tcase_create("damped");
    tcase_set_timeout(cases, 30);
    tcase_add_loop_test(cases, test_sigma_and_resolution, 0, 6);
    tcase_add_loop_test(cases, test_samples, 0, 2);
    tcase_add_test(cases, test_iterative_undamped);
    tcase_add_test(cases, test_iterative_deficient);
    suite_add_tcase(suite, cases);
    return suite;
}
