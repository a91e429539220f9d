/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "tradeoff/gcv.h"

#include "cases.h"
#include "check_tradeoff.h"
#include "tradeoff/risk.h"

#include "core/memory.h"
#include "matrix/dense.h"

#include <math.h>
#include <string.h>

START_TEST(values)
{
    lw_point p = {.misfit = 3, .effective_parameters = 4};
    ck_assert_double_eq(lw_gcv_value(10, &p), 0.25);
    ck_assert_double_eq(lw_risk_value(10, &p), 9 - 10 + 8);
    p.effective_parameters = 10;
    ck_assert(isnan(lw_gcv_value(10, &p)));
    p.effective_parameters = (double)NAN;
    ck_assert(isnan(lw_gcv_value(10, &p)));
    ck_assert(isnan(lw_risk_value(10, &p)));
}
END_TEST

/* A = I: misfit^2 / (m - trace)^2 = ||b||^2 / m^2 at every damping. */
START_TEST(identity_is_flat)
{
    double A[36] = {0}, b[6] = {3, -1, 2, 0.5, 1, -2}, lambda[61];
    for (int i = 0; i < 6; i++) A[i * 7] = 1;
    lw_sweep_grid(1e-3, 1e3, 61, lambda);
    lw_sweep_options options = {.damping = lambda, .count = 61};
    static const char *const engine[] = {"dense", "lsqr"};
    for (int e = 0; e < 2; e++) {
        swept s = sweep_by(problem_from_dense(6, 6, A, b, NULL), false, engine[e], &options);
        const lw_choice *gcv = choice_of(&s, LW_BY_GCV);
        ck_assert(isnan(gcv->damping));
        ck_assert_ptr_nonnull(strstr(gcv->warning, "flat"));
        for (int i = 0; i < 61; i++) ASSERT_NEAR(s.curve->row[i].gcv, 19.25 / 36, 1e-9);
        swept_clear(&s);
    }
}
END_TEST

/* The minimum against a fine scan of the closed form by singular values. */
START_TEST(minimum_of_a_random_problem)
{
    enum { M = 40, N = 30 };
    static const char *const engine[] = {"dense", "lsqr", "cgls"};
    for (uint64_t seed = 1; seed <= 3; seed++)
        for (int e = 0; e < 3; e++) {
            lw_problem *problem = blur_problem(M, N, 0.05, seed, false);
            double *A = lw_alloc(M * N, sizeof(double)), u[M * N], s[N], vt[N * N], ub[N], rest = 0;
            lw_sparse_to_dense(problem->design, A);
            ck_assert_int_eq(lw_dense_svd(M, N, A, u, s, vt, NULL), LW_OK);
            for (int i = 0; i < M; i++) rest += problem->value[i] * problem->value[i];
            for (int k = 0; k < N; k++) {
                ub[k] = 0;
                for (int i = 0; i < M; i++) ub[k] += u[k * M + i] * problem->value[i];
                rest -= ub[k] * ub[k];
            }
            lw_sweep_options options = {.criteria = 1u << LW_BY_GCV};
            swept w = sweep_by(problem, false, engine[e], &options);
            const lw_choice *gcv = choice_of(&w, LW_BY_GCV);
            double best = (double)INFINITY;
            for (double lambda = w.curve->row[0].point.lambda; lambda <= s[0]; lambda *= 1.002) {
                double rho = rest, trace = 0;
                for (int k = 0; k < N; k++) {
                    double d = s[k] * s[k] + lambda * lambda, f = lambda * lambda / d * ub[k];
                    rho += f * f;
                    trace += s[k] * s[k] / d;
                }
                best = fmin(best, rho / pow(M - trace, 2));
            }
            ck_assert_double_le(gcv->value, best * (1 + 1e-7));
            ASSERT_NEAR(gcv->value, best, 1e-5);
            ck_assert_double_le(gcv->from, gcv->damping);
            ck_assert_double_ge(gcv->to, gcv->damping);
            lw_free(A);
            swept_clear(&w);
        }
}
END_TEST

Suite *suite_gcv(void)
{
    Suite *suite = suite_create("gcv");
    TCase *tcase = tcase_create("gcv");
    tcase_add_test(tcase, values);
    tcase_add_test(tcase, identity_is_flat);
    tcase_add_test(tcase, minimum_of_a_random_problem);
    suite_add_tcase(suite, tcase);
    return suite;
}
