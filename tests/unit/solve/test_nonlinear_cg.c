/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "check_solve.h"

#include "solve/nonlinear_cg.h"

#include <math.h>

/* f = 100 (y - x^2)^2 + (1 - x)^2, from (-1.2, 1): Rosenbrock, Computer J. 3:175-184, 1960. */
static double valley(void *state, const double *x, double *g)
{
    double u = x[1] - x[0] * x[0], v = 1 - x[0];
    double *trace = state;
    if (trace) trace[0] += 1;
    g[0] = -400 * x[0] * u - 2 * v;
    g[1] = 200 * u;
    return 100 * u * u + v * v;
}

/* Derivative along the line: a cubic in alpha. */
static double derivative(const double *x, const double *d, double alpha)
{
    double u = x[1] - x[0] * x[0] + alpha * (d[1] - 2 * x[0] * d[0]) - alpha * alpha * d[0] * d[0];
    double du = d[1] - 2 * x[0] * d[0] - 2 * alpha * d[0] * d[0];
    return 200 * u * du - 2 * (1 - x[0] - alpha * d[0]) * d[0];
}

/* Smallest positive stationary point: the first change of sign on a fine grid of growing steps, then
 * bisection. */
static double exact_search(void *state, const double *x, const double *d, double slope)
{
    (void)state;
    (void)slope;
    double low = 0, high = 1e-7;
    while (derivative(x, d, high) < 0 && high < 1e3) {
        low = high;
        high *= 1.001;
    }
    for (int k = 0; k < 200; k++) {
        double middle = (low + high) / 2;
        if (derivative(x, d, middle) < 0)
            low = middle;
        else
            high = middle;
    }
    return (low + high) / 2;
}

/* First five iterations with an exact line search, recomputed with 60 digits. The last column is f. */
static const double plus[5][3] = {{-1.0301066715896, 1.0693442156777, 4.1280972736177},
                                  {-0.92951277141879, 0.82816474450418, 3.8513930343326},
                                  {-0.78510507578063, 0.55758064373866, 3.5324539349219},
                                  {-0.32813775954681, 0.074536370977111, 1.8737627337758},
                                  {-0.30177946075413, 0.099471727297391, 1.7016872502516}};
static const double reeves[5][3] = {{-1.0301066715896, 1.0693442156777, 4.1280972736177},
                                    {-0.92951277141879, 0.82816474450418, 3.8513930343326},
                                    {-0.78496007197674, 0.55735380871935, 3.5319264949161},
                                    {-0.67947511841473, 0.38947245131225, 3.3421226396895},
                                    {-0.59405519732258, 0.27129809424097, 3.2069248195564}};

START_TEST(test_five_exact_steps)
{
    const double(*expected)[3] = _i ? reeves : plus;
    lw_objective objective = {.n = 2, .value = valley};
    for (int step = 1; step <= 5; step++) {
        double x[2] = {-1.2, 1};
        lw_cg_result result;
        lw_error error = {0};
        lw_cg_options options = {
            .rule = _i ? LW_FLETCHER_REEVES : LW_POLAK_RIBIERE_PLUS, .steps = step, .search = exact_search};
        ck_assert_int_eq(lw_nonlinear_cg(&objective, &options, x, &result, NULL, &error), LW_NOT_CONVERGED);
        ck_assert_double_eq_tol(x[0], expected[step - 1][0], 1e-11);
        ck_assert_double_eq_tol(x[1], expected[step - 1][1], 1e-11);
        ck_assert_double_eq_tol(result.value, expected[step - 1][2], 1e-10);
    }
}
END_TEST

START_TEST(test_wolfe_reaches_the_minimum)
{
    double x[2] = {-1.2, 1}, count = 0;
    lw_objective objective = {.n = 2, .state = &count, .value = valley};
    lw_cg_options options = {.tolerance = 1e-12, .steps = 500};
    lw_cg_result result;
    lw_error error = {0};
    ck_assert_int_eq(lw_nonlinear_cg(&objective, &options, x, &result, NULL, &error), LW_OK);
    ck_assert_double_eq_tol(x[0], 1, 1e-8);
    ck_assert_double_eq_tol(x[1], 1, 1e-8);
    ck_assert_double_le(count, 400);
}
END_TEST

/* A quadratic of three distinct curvatures. */
static double bowl(void *state, const double *x, double *g)
{
    static const double curvature[] = {1, 1, 10, 10, 100, 100};
    double f = 0;
    (void)state;
    for (int i = 0; i < 6; i++) {
        g[i] = curvature[i] * (x[i] - i);
        f += g[i] * (x[i] - i) / 2;
    }
    return f;
}

static double bowl_search(void *state, const double *x, const double *d, double slope)
{
    double g[6], zero[6] = {0, 1, 2, 3, 4, 5}, bend = 0;
    (void)x;
    for (int i = 0; i < 6; i++) zero[i] += d[i];
    bowl(state, zero, g); /* A d */
    for (int i = 0; i < 6; i++) bend += d[i] * g[i];
    return -slope / bend;
}

/* Both rules coincide there, and end in as many steps as there are distinct curvatures. */
START_TEST(test_quadratic_in_three_steps)
{
    double x[6] = {7, -3, 2, 9, -1, 4};
    lw_objective objective = {.n = 6, .value = bowl};
    lw_cg_options options = {.rule = _i ? LW_FLETCHER_REEVES : LW_POLAK_RIBIERE_PLUS,
                             .tolerance = 1e-11,
                             .steps = 3,
                             .search = bowl_search};
    lw_cg_result result;
    lw_error error = {0};
    ck_assert_int_ge(lw_nonlinear_cg(&objective, &options, x, &result, NULL, &error), LW_OK);
    for (int i = 0; i < 6; i++) ck_assert_double_eq_tol(x[i], i, 1e-10);
}
END_TEST

Suite *suite_nonlinear_cg(void)
{
    Suite *suite = suite_create("nonlinear_cg");
    TCase *cases = tcase_create("nonlinear_cg");
    tcase_add_loop_test(cases, test_five_exact_steps, 0, 2);
    tcase_add_test(cases, test_wolfe_reaches_the_minimum);
    tcase_add_loop_test(cases, test_quadratic_in_three_steps, 0, 2);
    suite_add_tcase(suite, cases);
    return suite;
}
