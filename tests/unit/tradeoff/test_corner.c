/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "tradeoff/corner.h"

#include "cases.h"
#include "check_tradeoff.h"

#include <math.h>
#include <string.h>

/* One parameter, A = 1, b = 1 and a part c that no model reaches: x = 1 / (1 + l^2), rho = c^2 + (l^2 x)^2,
 * eta = x^2. The curvature of (ln misfit, ln size) by differences of the closed form. */
static lw_point closed(double c, double lambda)
{
    double x = 1 / (1 + lambda * lambda), miss = 1 - x;
    lw_point p = {.lambda = lambda, .size = x, .chi_square = c * c + miss * miss};
    p.misfit = sqrt(p.chi_square);
    p.size_slope = -4 * lambda * x * x * x; /* d/dl (1 + l^2)^-2 */
    return p;
}

START_TEST(curvature_of_a_closed_form)
{
    const double c = 0.3, h = 1e-3;
    for (double l = 0.1; l < 5; l *= 1.3) {
        double X[3], Y[3];
        for (int i = 0; i < 3; i++) {
            lw_point p = closed(c, l * exp((i - 1) * h));
            X[i] = log(p.misfit);
            Y[i] = log(p.size);
        }
        double x1 = (X[2] - X[0]) / 2, y1 = (Y[2] - Y[0]) / 2, x2 = X[2] - 2 * X[1] + X[0],
               y2 = Y[2] - 2 * Y[1] + Y[0];
        double expected = (x1 * y2 - x2 * y1) / pow(x1 * x1 + y1 * y1, 1.5);
        lw_point p = closed(c, l);
        ck_assert_double_eq_tol(lw_corner_curvature(&p), expected, 1e-4 * (1 + fabs(expected)));
    }
}
END_TEST

START_TEST(curvature_that_is_not_defined)
{
    lw_point p = closed(0.3, 1);
    p.size_slope = (double)NAN;
    ck_assert(isnan(lw_corner_curvature(&p)));
    p = closed(0.3, 1);
    p.chi_square = 0;
    ck_assert(isnan(lw_corner_curvature(&p)));
}
END_TEST

/* A = I: misfit l^2/(1 + l^2), size 1/(1 + l^2) times ||b||; the curve is concave everywhere, by any engine.
 */
START_TEST(identity_has_no_corner)
{
    static const char *const engine[] = {"dense", "lsqr", "cholesky"};
    for (int e = 0; e < 3; e++) {
        double A[36] = {0}, b[6] = {3, -1, 2, 0.5, 1, -2}, lambda[61];
        for (int i = 0; i < 6; i++) A[i * 7] = 1;
        lw_sweep_grid(1e-3, 1e3, 61, lambda);
        lw_sweep_options options = {.damping = lambda, .count = 61};
        swept s = sweep_by(problem_from_dense(6, 6, A, b, NULL), false, engine[e], &options);
        const lw_choice *corner = choice_of(&s, LW_BY_CORNER);
        ck_assert(isnan(corner->damping));
        ck_assert_ptr_nonnull(strstr(corner->warning, "concave"));
        for (int i = 0; i < s.curve->count; i++) ck_assert_double_lt(s.curve->row[i].curvature, 0);
        swept_clear(&s);
    }
}
END_TEST

/* The corner of the gravity profile lies at 0.0136566877573 (see gravity.h): a range that ends above it says
 * so. */
START_TEST(corner_below_the_range)
{
    static const char *const engine[] = {"dense", "lsqr"};
    for (int e = 0; e < 2; e++) {
        double lambda[20];
        lw_sweep_grid(0.02, 6, 20, lambda);
        lw_sweep_options options = {.damping = lambda, .count = 20};
        swept s = sweep_by(gravity_problem(NULL), false, engine[e], &options);
        const lw_choice *corner = choice_of(&s, LW_BY_CORNER);
        ck_assert_double_eq(corner->damping, 0.02);
        ck_assert(corner->at.converged);
        ck_assert_ptr_nonnull(strstr(corner->warning, "lower end"));
        swept_clear(&s);
    }
}
END_TEST

Suite *suite_corner(void)
{
    Suite *suite = suite_create("corner");
    TCase *tcase = tcase_create("corner");
    tcase_add_test(tcase, curvature_of_a_closed_form);
    tcase_add_test(tcase, curvature_that_is_not_defined);
    tcase_add_test(tcase, identity_has_no_corner);
    tcase_add_test(tcase, corner_below_the_range);
    suite_add_tcase(suite, tcase);
    return suite;
}
