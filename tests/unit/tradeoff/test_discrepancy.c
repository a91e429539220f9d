/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "tradeoff/discrepancy.h"

#include "cases.h"
#include "check_tradeoff.h"

#include <math.h>
#include <string.h>

/* A = I, sigma 1: chi_square = (l^2 / (1 + l^2))^2 ||b||^2 = F^2 m has the root l^2 = q / (1 - q), q = F
 * sqrt(m) / ||b||. */
START_TEST(root_of_a_closed_form)
{
    static const char *const engine[] = {"dense", "lsqr", "cholesky"};
    double A[16] = {0}, b[4] = {3, -4, 5, 2}, one[4] = {1, 1, 1, 1};
    for (int i = 0; i < 4; i++) A[i * 5] = 1;
    for (int e = 0; e < 3; e++)
        for (double factor = 0.5; factor < 3; factor += 0.7) {
            lw_sweep_options options = {.noise_factor = factor, .criteria = 1u << LW_BY_DISCREPANCY};
            swept s = sweep_by(problem_from_dense(4, 4, A, b, one), false, engine[e], &options);
            const lw_choice *choice = choice_of(&s, LW_BY_DISCREPANCY);
            double q = factor * 2 / sqrt(54), root = sqrt(q / (1 - q));
            ASSERT_NEAR(choice->damping, root, e == 2 ? 1e-3 : 1e-9);
            ASSERT_NEAR(choice->value, 4 * factor * factor, e == 2 ? 1e-3 : 1e-9);
            ck_assert_double_lt(choice->from, choice->damping);
            ck_assert_double_gt(choice->to, choice->damping);
            ck_assert_str_eq(choice->warning, "");
            swept_clear(&s);
        }
}
END_TEST

START_TEST(target_that_cannot_be_met)
{
    double A[4] = {1, 1, 1, 1}, far[4] = {5, -5, 5, -5}, near[4] = {0.1, 0.2, 0.1, 0.1},
           one[4] = {1, 1, 1, 1};
    lw_sweep_options options = {.criteria = 1u << LW_BY_DISCREPANCY};
    static const char *const engine[] = {"dense", "lsqr"};
    for (int e = 0; e < 2; e++) {
        far[0] = 5.5; /* the mean is not zero */
        swept s = sweep_by(problem_from_dense(4, 1, A, far, one), false, engine[e], &options);
        const lw_choice *choice = choice_of(&s, LW_BY_DISCREPANCY);
        ck_assert(isnan(choice->damping));
        ck_assert_ptr_nonnull(strstr(choice->warning, "too small"));
        swept_clear(&s);
        s = sweep_by(problem_from_dense(4, 1, A, near, one), false, engine[e], &options);
        choice = choice_of(&s, LW_BY_DISCREPANCY);
        ck_assert(isnan(choice->damping));
        ck_assert_ptr_nonnull(strstr(choice->warning, "cannot be met"));
        swept_clear(&s);
    }
}
END_TEST

START_TEST(needs_sigma)
{
    double A[4] = {1, 1, 1, 1}, b[4] = {1, 2, 3, 4};
    lw_sweep_options options = {.criteria = 1u << LW_BY_DISCREPANCY};
    swept s = sweep_by(problem_from_dense(4, 1, A, b, NULL), false, "dense", &options);
    ck_assert_int_eq(s.status, LW_BAD_USAGE);
    ck_assert_ptr_nonnull(strstr(s.error.text, "discrepancy"));
    swept_clear(&s);
}
END_TEST

Suite *suite_discrepancy(void)
{
    Suite *suite = suite_create("discrepancy");
    TCase *tcase = tcase_create("discrepancy");
    tcase_add_test(tcase, root_of_a_closed_form);
    tcase_add_test(tcase, target_that_cannot_be_met);
    tcase_add_test(tcase, needs_sigma);
    suite_add_tcase(suite, tcase);
    return suite;
}
