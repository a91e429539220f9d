/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Reliability by its properties: sums, deletion of readings, correlated and singular cases, false alarms
 * and power. */
#include "check_certainty.h"

#include "core/chance.h"
#include "core/memory.h"
#include "matrix/dense.h"
#include "unit/support.h"

#include <math.h>
#include <string.h>

#define M 40
#define N 12

/* A random network of M readings of N unknowns, 3 coefficients each, readings exact plus their noise. */
static lw_problem *random_network(uint64_t seed, bool correlated)
{
    double A[M * N] = {0}, y[M], sigma[M];
    for (int i = 0; i < M; i++) {
        for (int k = 0; k < 3; k++)
            A[N * i + (i + 5 * k + i / N) % N] = next_random(&seed) + (k == 0 ? 2 : 0);
        sigma[i] = 0.5 + 0.4 * next_random(&seed);
        y[i] = sigma[i] * 2 * next_random(&seed);
    }
    lw_problem *p = problem_from_dense(M, N, A, y, sigma);
    if (!correlated) return p;
    static const int32_t one[] = {3, 4, 5, 9}, two[] = {20, 31, 33};
    double C[16], D[9];
    for (int i = 0; i < 4; i++)
        for (int j = 0; j < 4; j++) C[i + 4 * j] = sigma[one[i]] * sigma[one[j]] * (i == j ? 1 : 0.5);
    for (int i = 0; i < 3; i++)
        for (int j = 0; j < 3; j++) D[i + 3 * j] = sigma[two[i]] * sigma[two[j]] * (i == j ? 1 : -0.3);
    problem_add_block(p, 4, one, C);
    problem_add_block(p, 3, two, D);
    return p;
}

/* Dense P, A and Q_vv of the whole problem; all M x M or M x N, by definition. */
static void by_definition(const lw_problem *p, double *PQP, double *QP, double *predicted)
{
    static double S[M * M], P[M * M], A[M * N], PA[M * N], Q[N * N], AQ[M * N], V[M * M];
    lw_error error = {0};
    int64_t defect;
    memset(S, 0, sizeof S);
    for (int i = 0; i < M; i++) S[i + i * M] = p->sigma[i] * p->sigma[i];
    const lw_covariance *c = p->covariance;
    for (int64_t b = 0; c && b < c->blocks; b++)
        for (int64_t j = c->start[b], size = c->start[b + 1] - j, k = 0; k < size * size; k++)
            S[c->member[j + k % size] + c->member[j + k / size] * M] = c->value[c->value_start[b] + k];
    memcpy(P, S, sizeof S);
    ck_assert_int_eq(lw_dense_cholesky(M, P, &defect, &error), LW_OK);
    ck_assert_int_eq(lw_dense_cholesky_invert(M, P, &error), LW_OK);
    lw_sparse_to_dense(p->design, A);
    lw_dense_multiply(0, 0, M, N, M, 1, P, M, A, M, 0, PA, M);
    lw_dense_multiply(1, 0, N, N, M, 1, A, M, PA, M, 0, Q, N);
    ck_assert_int_eq(lw_dense_cholesky(N, Q, &defect, &error), LW_OK);
    ck_assert_int_eq(lw_dense_cholesky_invert(N, Q, &error), LW_OK);
    lw_dense_multiply(0, 0, M, N, N, 1, A, M, Q, N, 0, AQ, M);
    memcpy(V, S, sizeof S);
    lw_dense_multiply(0, 1, M, M, N, -1, AQ, M, A, M, 1, V, M);
    lw_dense_multiply(0, 0, M, M, M, 1, V, M, P, M, 0, QP, M);
    lw_dense_multiply(0, 0, M, M, M, 1, P, M, QP, M, 0, PQP, M);
    for (int i = 0; i < M; i++) predicted[i] = sqrt(S[i + i * M] - V[i + i * M]);
}

START_TEST(test_definitions)
{
    static double PQP[M * M], QP[M * M];
    double predicted[M], sum = 0;
    lw_problem *p = random_network(3, _i >= 2);
    lw_certainty_options options = default_options();
    adjusted a = adjust(p, _i % 2 ? "cholesky" : "dense", NULL, 0, 0, &options);
    const lw_certainty *c = a.certainty;
    by_definition(p, PQP, QP, predicted);
    for (int i = 0; i < M; i++) {
        double t = PQP[i + i * M];
        ck_close(c->redundancy[i], QP[i + i * M], 1e-11);
        ck_close(c->predicted_sigma[i], predicted[i], 1e-12);
        ck_close(c->standardized[i], a.estimate->weighted[i] / sqrt(t), 1e-11);
        ck_close(c->detectable[i], c->delta0 / sqrt(t), 1e-11);
        ck_close(c->error_estimate[i], -a.estimate->weighted[i] / t, 1e-11);
        sum += c->redundancy[i];
    }
    ck_assert_double_eq_tol(sum, M - N, 1e-10);
    adjusted_clear(&a);
    lw_problem_free(p);
}
END_TEST

/* Two exact conditions: Q_c = Q - Q C'(C Q C')^-1 C Q, and two more degrees of freedom. */
START_TEST(test_conditions)
{
    static const double d[] = {0.5, -1};
    double C[2 * N] = {0}, CQ[2 * N], S[4], Q[N * N], A[M * N], W[M * N], sum = 0;
    lw_error error = {0};
    int64_t defect;
    C[0] = 1, C[3] = -2, C[7] = 1, C[N + 5] = 1, C[N + 11] = 1;
    lw_problem *p = random_network(13, false);
    problem_set_conditions(p, 2, C, d);
    lw_sparse_to_dense(p->design, A);
    for (int k = 0; k < M * N; k++) W[k] = A[k] / p->sigma[k % M];
    lw_dense_multiply(1, 0, N, N, M, 1, W, M, W, M, 0, Q, N);
    ck_assert_int_eq(lw_dense_cholesky(N, Q, &defect, &error), LW_OK);
    ck_assert_int_eq(lw_dense_cholesky_invert(N, Q, &error), LW_OK);
    lw_dense_multiply(1, 0, 2, N, N, 1, C, N, Q, N, 0, CQ, 2); /* C row-major is C' column-major */
    lw_dense_multiply(0, 0, 2, 2, N, 1, CQ, 2, C, N, 0, S, 2);
    double det = S[0] * S[3] - S[1] * S[2], T[4] = {S[3] / det, -S[1] / det, -S[2] / det, S[0] / det},
           TCQ[2 * N];
    lw_dense_multiply(0, 0, 2, N, 2, 1, T, 2, CQ, 2, 0, TCQ, 2);
    lw_dense_multiply(1, 0, N, N, 2, -1, CQ, 2, TCQ, 2, 1, Q, N);
    lw_certainty_options options = default_options();
    adjusted a = adjust(p, _i ? "cholesky" : "dense", NULL, 0, 0, &options);
    for (int j = 0; j < N; j++) ck_close(a.certainty->sigma[j], sqrt(Q[j + j * N]), 1e-11);
    for (int i = 0; i < M; i++) {
        double form = 0;
        for (int j = 0; j < N; j++)
            for (int k = 0; k < N; k++) form += A[i + j * M] * Q[j + k * N] * A[i + k * M];
        ck_close(a.certainty->predicted_sigma[i], sqrt(form), 1e-10);
        sum += a.certainty->redundancy[i];
    }
    ck_assert_double_eq_tol(sum, M - N + 2, 1e-10);
    ck_assert_double_eq(a.certainty->test.degrees_of_freedom, M - N + 2);
    adjusted_clear(&a);
    lw_problem_free(p);
}
END_TEST

/* Setting one reading aside: chi_square falls by w^2, its prediction error is minus the error that was
 * estimated. */
START_TEST(test_deletion)
{
    lw_problem *p = random_network(8, _i >= 2);
    lw_certainty_options options = default_options();
    const char *engine = _i % 2 ? "cholesky" : "dense";
    adjusted a = adjust(p, engine, NULL, 0, 0, &options);
    for (int i = 0; i < M; i += 3) {
        double factor[M];
        for (int k = 0; k < M; k++) factor[k] = k != i;
        adjusted b = adjust(p, engine, factor, 0, 0, &options);
        double w = a.certainty->standardized[i];
        ck_assert_double_eq_tol(a.estimate->point.chi_square - b.estimate->point.chi_square, w * w, 1e-10);
        ck_assert(b.certainty->flag[i] & LW_FLAG_SET_ASIDE);
        ck_assert(isnan(b.certainty->redundancy[i]));
        if (!p->covariance || p->covariance->block_of[i] < 0) {
            ck_close(b.estimate->residual[i], -a.certainty->error_estimate[i], 1e-9);
            ck_close(b.certainty->standardized[i], w, 1e-9);
            ck_close(b.certainty->error_estimate[i], a.certainty->error_estimate[i], 1e-9);
        }
        ck_assert_double_eq(b.certainty->test.degrees_of_freedom, M - N - 1);
        adjusted_clear(&b);
    }
    adjusted_clear(&a);
    lw_problem_free(p);
}
END_TEST

/* A just undetected error moves the parameters as largest_shift says. */
START_TEST(test_largest_shift)
{
    lw_problem *p = random_network(21, _i == 1);
    lw_certainty_options options = default_options();
    adjusted a = adjust(p, "cholesky", NULL, 0, 0, &options);
    for (int i = 0; i < M; i += 5) {
        double before = p->value[i], largest = 0;
        p->value[i] += a.certainty->detectable[i];
        adjusted b = adjust(p, "cholesky", NULL, 0, 0, &options);
        p->value[i] = before;
        int where = -1;
        for (int j = 0; j < N; j++)
            if (fabs(b.estimate->x[j] - a.estimate->x[j]) > fabs(largest))
                largest = b.estimate->x[j] - a.estimate->x[where = j];
        ck_assert_int_eq(a.certainty->shifted_parameter[i], where);
        ck_close(a.certainty->largest_shift[i], largest, 1e-9);
        adjusted_clear(&b);
    }
    adjusted_clear(&a);
    lw_problem_free(p);
}
END_TEST

/* Readings 0 and 1 alone tie unknown 0 to the rest: inseparable; reading 2 alone holds unknown 1: no
 * redundancy. */
START_TEST(test_inseparable_and_uncontrolled)
{
    double B[7 * 4] = {0};
    B[0 * 4 + 0] = 1, B[0 * 4 + 2] = 1;  /* o1: x1 + x3 */
    B[1 * 4 + 0] = 1, B[1 * 4 + 3] = -1; /* o2: x1 - x4 */
    B[2 * 4 + 1] = 1;                    /* o3: x2 alone */
    B[3 * 4 + 2] = 1, B[4 * 4 + 2] = 1;  /* o4, o5: x3 */
    B[5 * 4 + 3] = 1, B[6 * 4 + 3] = 1;  /* o6, o7: x4 */
    static const double y[] = {1, 2, 3, 4, 4.5, 5, 5.2}, sigma[] = {0.1, 0.3, 0.2, 0.1, 0.2, 0.3, 0.1};
    lw_problem *p = problem_from_dense(7, 4, B, y, sigma);
    lw_certainty_options options = default_options();
    adjusted a = adjust(p, _i ? "cholesky" : "dense", NULL, 0, 0, &options);
    const lw_certainty *c = a.certainty;
    ck_assert_int_eq(c->inseparable_count, 1);
    ck_assert(c->inseparable[0] == 0 && c->inseparable[1] == 1);
    ck_assert(c->flag[0] & LW_FLAG_INSEPARABLE);
    ck_assert(c->flag[2] == (LW_FLAG_NO_REDUNDANCY | LW_FLAG_WEAK));
    ck_assert(isnan(c->standardized[2]) && isnan(c->detectable[2]) && isnan(c->largest_shift[2]));
    ck_assert_int_eq(c->shifted_parameter[2], -1);
    ck_assert_double_eq_tol(c->redundancy[2], 0, 1e-14);
    adjusted_clear(&a);
    lw_problem_free(p);
}
END_TEST

/* Observed equals predicted: standard deviations 0, and tau, which would divide by them, unknown. */
START_TEST(test_zero_residuals)
{
    double A[M * N] = {0}, y[M];
    for (int i = 0; i < M; i++) A[N * i + i % N] = 1 + i % 3, y[i] = (1 + i % 3) * (double)(i % N);
    lw_problem *p = problem_from_dense(M, N, A, y, NULL);
    lw_certainty_options options = default_options();
    options.variance_estimated = true;
    adjusted a = adjust(p, "dense", NULL, 0, 0, &options);
    for (int j = 0; j < N; j++) ck_assert_double_le(a.certainty->sigma[j], 1e-12);
    for (int i = 0; i < M; i++) ck_assert(isnan(a.certainty->standardized[i]));
    adjusted_clear(&a);
    lw_problem_free(p);
}
END_TEST

/* 1000 networks: false alarms at rate alpha, and an error of the detectable size found with the power.
 * Noise is put on the readings of one network; the limits are three standard errors of a binomial count. */
START_TEST(test_false_alarms_and_power)
{
    const int trials = 1000;
    lw_problem *p = random_network(5, false);
    lw_certainty_options options = default_options();
    options.sigma = false;
    options.alpha = 0.01;
    lw_random *random = NULL;
    lw_error error = {0};
    int alarms = 0, found = 0, rejected = 0;
    ck_assert_int_eq(lw_random_new(77, 1, &random, &error), LW_OK);
    for (int t = 0; t < trials; t++) {
        for (int i = 0; i < M; i++) p->value[i] = p->sigma[i] * lw_random_normal(random);
        adjusted a = adjust(p, "dense", NULL, 0, 0, &options);
        int suspect = t % M;
        alarms += (a.certainty->flag[suspect] & LW_FLAG_SUSPECT) != 0;
        rejected += a.certainty->test.rejected;
        p->value[suspect] += lw_random_sign(random) * a.certainty->detectable[suspect];
        adjusted_clear(&a);
        a = adjust(p, "dense", NULL, 0, 0, &options);
        found += (a.certainty->flag[suspect] & LW_FLAG_SUSPECT) != 0;
        adjusted_clear(&a);
    }
    lw_random_free(random);
    ck_assert_double_le(fabs(alarms - trials * 0.01), 3 * sqrt(trials * 0.01 * 0.99));
    ck_assert_double_le(fabs(rejected - trials * 0.05), 3 * sqrt(trials * 0.05 * 0.95));
    ck_assert_double_le(fabs(found - trials * 0.80), 3 * sqrt(trials * 0.80 * 0.20));
    lw_problem_free(p);
}
END_TEST

Suite *suite_reliability(void)
{
    Suite *suite = suite_create("reliability");
    TCase *cases = tcase_create("reliability");
    tcase_set_timeout(cases, 60);
    tcase_add_loop_test(cases, test_definitions, 0, 4);
    tcase_add_loop_test(cases, test_conditions, 0, 2);
    tcase_add_loop_test(cases, test_deletion, 0, 4);
    tcase_add_loop_test(cases, test_largest_shift, 0, 2);
    tcase_add_loop_test(cases, test_inseparable_and_uncontrolled, 0, 2);
    tcase_add_test(cases, test_zero_residuals);
    tcase_add_test(cases, test_false_alarms_and_power);
    suite_add_tcase(suite, cases);
    return suite;
}
