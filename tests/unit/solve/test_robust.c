/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "check_solve.h"

#include "core/memory.h"
#include "solve/robust.h"
#include "unit/support.h"

#include <math.h>

/* Brownlee, Statistical Theory and Methodology in Science and Engineering, 1960, pp. 491-500 (stack loss
 * data of R). Huber with constant 1.345 and scale median |r| / 0.6745 converged to 1e-14 (MASS::rlm, and an
 * independent iteration to 7e-14); least absolute deviations as exact fractions (linear programming;
 * quantreg). */
static const double stack[21][4] = {{80, 27, 89, 42}, {80, 27, 88, 37}, {75, 25, 90, 37}, {62, 24, 87, 28},
                                    {62, 22, 87, 18}, {62, 23, 87, 18}, {62, 24, 93, 19}, {62, 24, 93, 20},
                                    {58, 23, 87, 15}, {58, 18, 80, 14}, {58, 18, 89, 14}, {58, 17, 88, 13},
                                    {58, 18, 82, 11}, {58, 19, 93, 12}, {50, 18, 89, 8},  {50, 18, 86, 7},
                                    {50, 19, 72, 8},  {50, 19, 79, 8},  {50, 20, 80, 9},  {56, 20, 82, 15},
                                    {70, 20, 91, 15}};

static lw_problem *stack_problem(const double *sigma)
{
    double A[84], y[21];
    for (int i = 0; i < 21; i++) {
        A[4 * i] = 1;
        for (int j = 0; j < 3; j++) A[4 * i + j + 1] = stack[i][j];
        y[i] = stack[i][3];
    }
    return problem_from_dense(21, 4, A, y, sigma);
}

static lw_robust *fit(const lw_problem *problem, const char *engine, double lambda, lw_robust_options options)
{
    lw_robust *robust = NULL;
    lw_error error = {0};
    lw_solve_options solve_options = {.engine = engine};
    lw_system_options system_options = {0};
    lw_status status =
        lw_robust_solve(problem, &system_options, lambda, &solve_options, &options, NULL, &robust, &error);
    ck_assert_msg(status == LW_OK, "%d %s", status, error.text);
    return robust;
}

START_TEST(test_stack_loss_huber)
{
    static const double expected[] = {-41.0264853732951, 0.829385770253855, 0.926059415548608,
                                      -0.127846317965416};
    lw_problem *p = stack_problem(NULL);
    lw_robust *r = fit(p, _i ? "cholesky" : "dense", 0, (lw_robust_options){.misfit = LW_MISFIT_HUBER});
    for (int j = 0; j < 4; j++)
        ck_assert_double_eq_tol(r->estimate->x[j], expected[j], 2e-13 * fabs(expected[0]));
    ck_assert_double_eq_tol(r->scale, 2.44048904599282, 1e-12);
    ck_assert_double_eq_tol(r->weight[3], 0.504855924897604, 1e-12);
    ck_assert_double_eq_tol(r->weight[2], 0.785796612529849, 1e-12);
    ck_assert_double_eq(r->weight[0], 1);
    ck_assert(r->converged && !r->vertex);
    lw_robust_free(r);
    lw_problem_free(p);
}
END_TEST

START_TEST(test_stack_loss_l1)
{
    static const double expected[] = {-13693.0 / 345, 287.0 / 345, 66.0 / 115, -7.0 / 115};
    lw_problem *p = stack_problem(NULL);
    lw_robust_options options = {.misfit = LW_MISFIT_L1,
                                 .way = _i == 2 ? LW_ROBUST_GRADIENTS : LW_ROBUST_REWEIGHTED};
    lw_robust *r = fit(p, _i ? "cholesky" : "dense", 0, options);
    for (int j = 0; j < 4; j++)
        ck_assert_double_eq_tol(r->estimate->x[j], expected[j], 1e-14 * fabs(expected[j]));
    ck_assert_double_eq_tol(r->objective / 2, 14518.0 / 345, 1e-12);
    ck_assert(r->vertex);
    for (int i = 0; i < 21; i++) { /* rows 2, 8, 16 and 18 are met exactly */
        bool met = i == 1 || i == 7 || i == 15 || i == 17;
        ck_assert((r->row_factor[i] != 0) == met);
    }
    lw_robust_free(r);
    lw_problem_free(p);
}
END_TEST

/* A line through 200 points with 10 % gross errors, sigma stated. */
static lw_problem *contaminated(void)
{
    double A[600], y[200], sigma[200];
    uint64_t seed = 11;
    for (int i = 0; i < 200; i++) {
        double t = next_random(&seed);
        A[3 * i] = 1;
        A[3 * i + 1] = t;
        A[3 * i + 2] = t * t;
        sigma[i] = 0.05 * (1.5 + next_random(&seed));
        double noise = next_random(&seed) + next_random(&seed) + next_random(&seed);
        y[i] = 2 - 3 * t + t * t + sigma[i] * noise + (i % 10 == 0 ? 5 : 0);
    }
    return problem_from_dense(200, 3, A, y, sigma);
}

/* Reweighting and conjugate gradients, Polak-Ribiere+ and Fletcher-Reeves: the same minimum. */
START_TEST(test_ways_agree)
{
    lw_problem *p = _i % 2 ? contaminated() : stack_problem(NULL);
    lw_robust_options options = {
        .misfit = LW_MISFIT_HUBER, .scale_stated = _i % 2 == 1, .way = LW_ROBUST_REWEIGHTED};
    double lambda = _i >= 2 ? 0.7 : 0;
    lw_robust *a = fit(p, "dense", lambda, options);
    options.way = LW_ROBUST_GRADIENTS;
    lw_robust *b = fit(p, "dense", lambda, options);
    options.rule = LW_FLETCHER_REEVES;
    lw_robust *c = fit(p, "dense", lambda, options);
    for (int j = 0; j < p->n; j++) {
        double size = fabs(a->estimate->x[j]);
        ck_assert_double_eq_tol(b->estimate->x[j], a->estimate->x[j], 1e-6 * size);
        ck_assert_double_eq_tol(c->estimate->x[j], a->estimate->x[j], 1e-6 * size);
    }
    ck_assert_double_eq_tol(b->objective, a->objective, 1e-8 * a->objective);
    ck_assert_str_eq(b->way, "conjugate gradients");
    if (_i == 1) ck_assert_double_eq_tol(a->estimate->x[1], -3, 0.1); /* the gross errors hardly move it */
    lw_robust_free(a);
    lw_robust_free(b);
    lw_robust_free(c);
    lw_problem_free(p);
}
END_TEST

START_TEST(test_damped_l1_ways_agree)
{
    lw_problem *p = contaminated();
    lw_robust_options options = {.misfit = LW_MISFIT_L1, .way = LW_ROBUST_REWEIGHTED};
    lw_robust *a = fit(p, "dense", 2, options);
    options.way = LW_ROBUST_GRADIENTS;
    lw_robust *b = fit(p, "dense", 2, options);
    for (int j = 0; j < p->n; j++)
        ck_assert_double_eq_tol(b->estimate->x[j], a->estimate->x[j], 1e-5 * fabs(a->estimate->x[j]));
    ck_assert_double_eq_tol(b->objective, a->objective, 1e-6 * a->objective);
    lw_robust_free(a);
    lw_robust_free(b);
    lw_problem_free(p);
}
END_TEST

/* The median is the l1 fit of a constant; ties and an exact fit do no harm. */
START_TEST(test_median_and_exact_fit)
{
    static const double ones[] = {1, 1, 1, 1, 1}, y[] = {3, 3, 3, 9, -50};
    lw_problem *p = problem_from_dense(5, 1, ones, y, NULL);
    lw_robust *r = fit(p, "dense", 0, (lw_robust_options){.misfit = LW_MISFIT_L1});
    ck_assert_double_eq(r->estimate->x[0], 3);
    lw_robust_free(r);
    r = fit(p, "dense", 0, (lw_robust_options){.misfit = LW_MISFIT_HUBER});
    ck_assert(isfinite(r->estimate->x[0]));
    lw_robust_free(r);
    lw_problem_free(p);
}
END_TEST

Suite *suite_robust(void)
{
    Suite *suite = suite_create("robust");
    TCase *cases = tcase_create("robust");
    tcase_set_timeout(cases, 30);
    tcase_add_loop_test(cases, test_stack_loss_huber, 0, 2);
    tcase_add_loop_test(cases, test_stack_loss_l1, 0, 3);
    tcase_add_loop_test(cases, test_ways_agree, 0, 4);
    tcase_add_test(cases, test_damped_l1_ways_agree);
    tcase_add_test(cases, test_median_and_exact_fit);
    suite_add_tcase(suite, cases);
    return suite;
}
