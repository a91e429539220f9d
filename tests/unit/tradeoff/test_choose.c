/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "tradeoff/choose.h"

#include "cases.h"
#include "check_tradeoff.h"

#include <math.h>
#include <string.h>

START_TEST(names)
{
    for (int i = 0; i < LW_CRITERIA; i++) {
        lw_criterion found = LW_CRITERIA;
        ck_assert(lw_criterion_find(lw_criterion_name((lw_criterion)i), &found));
        ck_assert_int_eq((int)found, i);
    }
    lw_criterion none;
    ck_assert(!lw_criterion_find("best", &none));
}
END_TEST

START_TEST(comparison)
{
    lw_curve curve = {.choices = 3};
    for (int i = 0; i < 3; i++) curve.choice[i].criterion = (lw_criterion)i;
    curve.choice[0].damping = 1;
    curve.choice[1].damping = 0.01;
    curve.choice[2].damping = (double)NAN;
    lw_choose_compare(&curve);
    ck_assert_double_eq_tol(curve.decades, 2, 1e-12);
    ck_assert_ptr_nonnull(strstr(curve.comparison, "correlated"));
    curve.choice[1].damping = 1.2;
    lw_choose_compare(&curve);
    ck_assert_ptr_nonnull(strstr(curve.comparison, "agree"));
    curve.choice[1].damping = (double)NAN;
    lw_choose_compare(&curve);
    ck_assert(isnan(curve.decades));
    ck_assert_str_eq(curve.comparison, "");
}
END_TEST

/* One damping by name; none where there is no corner. */
START_TEST(one_damping)
{
    static const char *const engine[] = {"dense", "lsqr"};
    for (int e = 0; e < 2; e++) {
        lw_sweep_options options = {.sigma_stated = true, .criteria = 1u << LW_BY_DISCREPANCY};
        swept s = sweep_by(blur_problem(50, 40, 0.1, 3, true), false, engine[e], &options);
        double damping;
        lw_curve *curve = NULL;
        ck_assert_int_eq(
            lw_choose_damping(s.decomposition, LW_BY_DISCREPANCY, &options, NULL, &damping, &curve, NULL),
            LW_OK);
        ck_assert_double_eq(damping, choice_of(&s, LW_BY_DISCREPANCY)->damping);
        lw_curve_free(curve);
        swept_clear(&s);

        double I[4] = {1, 0, 0, 1}, b[2] = {1, 2};
        lw_sweep_options corner = {.criteria = 1u << LW_BY_CORNER};
        s = sweep_by(problem_from_dense(2, 2, I, b, NULL), false, engine[e], &corner);
        lw_error error = {0};
        ck_assert_int_eq(
            lw_choose_damping(s.decomposition, LW_BY_CORNER, &corner, NULL, &damping, NULL, &error),
            LW_UNSOLVABLE);
        ck_assert_ptr_nonnull(strstr(error.text, "corner"));
        ck_assert(isnan(damping));
        swept_clear(&s);
    }
}
END_TEST

Suite *suite_choose(void)
{
    Suite *suite = suite_create("choose");
    TCase *tcase = tcase_create("choose");
    tcase_add_test(tcase, names);
    tcase_add_test(tcase, comparison);
    tcase_add_test(tcase, one_damping);
    suite_add_tcase(suite, tcase);
    return suite;
}
