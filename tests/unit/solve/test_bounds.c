/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "../support.h"
#include "bounded.h"
#include "check_solve.h"

#include "core/memory.h"
#include "matrix/vector.h"
#include "solve/bounds.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

static lw_system *system_of(const lw_problem *problem, lw_penalty_kind kind)
{
    lw_system *system = NULL;
    lw_error error = {0};
    lw_system_options options = {.penalty = {.prefer = kind}};
    ck_assert_msg(lw_system_new(problem, &options, NULL, &system, &error) == LW_OK, "%s", error.text);
    return system;
}

static lw_bounded *solve(lw_system *system, double lambda, int64_t dense, double *x)
{
    lw_bounded *bounded = NULL;
    lw_error error = {0};
    lw_bounds_options options = {.dense = dense};
    lw_status status = lw_bounds_solve(system, lambda, &options, NULL, &bounded, &error);
    ck_assert_msg(status == LW_OK, "%d %s", status, error.text);
    lw_system_model(system, bounded->z, bounded->z_low, x);
    return bounded;
}

/* 6 x 4 integers, every active set enumerated in rational arithmetic; multipliers -A'r, r = b - A x. */
START_TEST(integers_with_exact_answers)
{
    const double A[] = {1, 2, 0, 1, 0, 1, 3, 1, 2, 0, 1, 1, 1, 1, 1, 0, 3, 1, 0, 2, 0, 2, 1, 1},
                 b[] = {1, -4, 6, 2, 7, -3};
    const double open = (double)INFINITY;
    const struct {
        double lower, upper, x[4], square, multiplier[4];
    } expected[] = {
        {0, open, {12.0 / 5, 0, 0, 0}, 143.0 / 5, {0, 67.0 / 5, 71.0 / 5, 38.0 / 5}},
        {0, 1, {1, 0, 0, 5.0 / 8}, 439.0 / 8, {-123.0 / 8, 75.0 / 8, 105.0 / 8, 0}},
        {-1, 2, {2, -1, -1, 1}, 10, {-6, 1, 0, 0}},
        {-open, open, {1413.0 / 398, -297.0 / 398, -117.0 / 199, -487.0 / 398}, 379.0 / 398, {0}},
    };
    for (int k = 0; k < 4; k++)
        for (int64_t dense = -1; dense <= 0; dense++) {
            double lower[4], upper[4], x[4], residual[6], tolerance = dense < 0 ? 1e-9 : 1e-13;
            for (int j = 0; j < 4; j++) {
                lower[j] = expected[k].lower;
                upper[j] = expected[k].upper;
            }
            lw_problem *problem = problem_from_dense(6, 4, A, b, NULL);
            problem_set_bounds(problem, lower, upper);
            lw_system *system = system_of(problem, LW_PREFER_SMALLEST);
            lw_bounded *bounded = solve(system, 0, dense, x);
            for (int j = 0; j < 4; j++) {
                ck_assert_double_eq_tol(x[j], expected[k].x[j], tolerance);
                ck_assert_double_eq_tol(bounded->multiplier[j], expected[k].multiplier[j], 10 * tolerance);
                ck_assert(x[j] >= lower[j] && x[j] <= upper[j]);
                if (bounded->at_bound[j] != 0)
                    ck_assert_double_eq(x[j], bounded->at_bound[j] < 0 ? lower[j] : upper[j]);
            }
            ck_assert_int_eq(lw_system_residual(system, bounded->z, bounded->z_low, 0, residual, NULL),
                             LW_OK);
            ck_assert_double_eq_tol(lw_dot(6, residual, residual, NULL), expected[k].square, 10 * tolerance);
            ck_assert_int_eq(bounded->stop, dense < 0 ? LW_STOP_TOLERANCE : LW_STOP_DIRECT);
            lw_bounded_free(bounded);
            lw_system_free(system);
            lw_problem_free(problem);
        }
}
END_TEST

/* (x + 1)^2 + (y - 2)^2 + (x + y - 2)^2, x >= 0: x = 0, y = 2, to the last bit, and so with rows that are
 * weighted. */
START_TEST(exact_to_rounding)
{
    const double A[] = {1, 0, 0, 1, 1, 1}, b[] = {-1, 2, 2}, lower[] = {0, -(double)INFINITY},
                 upper[] = {(double)INFINITY, (double)INFINITY},
                 sigma[][3] = {{1, 1, 1}, {0.3, 0.7, 0.7}, {3, 0.1, 0.1}};
    for (int k = 0; k < 3; k++) {
        double x[2];
        lw_problem *problem = problem_from_dense(3, 2, A, b, sigma[k]);
        problem_set_bounds(problem, lower, upper);
        lw_system *system = system_of(problem, LW_PREFER_SMALLEST);
        lw_bounded *bounded = solve(system, 0, 0, x);
        ck_assert_double_eq(x[0], 0);
        ck_assert_double_eq(x[1], 2);
        lw_bounded_free(bounded);
        lw_system_free(system);
        lw_problem_free(problem);
    }
}
END_TEST

START_TEST(agrees_with_another_solver)
{
    for (size_t k = 0; k < sizeof bounded_case / sizeof *bounded_case; k++)
        for (int64_t dense = -1; dense <= 0; dense++) {
            const struct bounded_case *c = &bounded_case[k];
            double x[32];
            lw_problem *problem = problem_from_dense(c->m, c->n, c->A, c->b, NULL);
            problem_set_bounds(problem, c->lower, c->upper);
            lw_system *system = system_of(problem, LW_PREFER_SMALLEST);
            lw_bounded *bounded = solve(system, c->lambda, dense, x);
            for (int j = 0; j < c->n; j++) ck_assert_double_eq_tol(x[j], c->x[j], dense < 0 ? 1e-8 : 1e-12);
            lw_bounded_free(bounded);
            lw_system_free(system);
            lw_problem_free(problem);
        }
}
END_TEST

/* Rays over cells in miniature: m x n sparse, positive model with much of it at a bound, x0 and one cell
 * held. */
static lw_problem *sparse_problem(int64_t m, int64_t n)
{
    lw_sparse *A = NULL;
    uint64_t state = 17;
    int64_t count = 0, each = 12;
    double *value = LW_NEW_ZEROS(double, m), *sigma = LW_NEW_ARRAY(double, m),
           *place = LW_NEW_ARRAY(double, n);
    double *lower = LW_NEW_ARRAY(double, n), *upper = LW_NEW_ARRAY(double, n),
           *prior = LW_NEW_ARRAY(double, n);
    ck_assert_int_eq(lw_sparse_new(m, n, n * each, 0, &A, NULL), LW_OK);
    for (int64_t j = 0; j < n; j++) {
        A->start[j] = count;
        int64_t row = (int64_t)((next_random(&state) + 1) * (double)(m / each) / 2);
        for (int64_t e = 0; e < each && row < m; e++) {
            A->index[count] = (int32_t)row;
            A->value[count] = 1 + next_random(&state);
            value[row] += A->value[count++] * sin((double)j * 0.1);
            row += 1 + (int64_t)((next_random(&state) + 1) * (double)(m / each) / 2);
        }
        place[j] = (double)j;
        prior[j] = 0.1;
        lower[j] = -0.25;
        upper[j] = 0.5 + 0.1 * next_random(&state);
    }
    A->start[n] = count;
    for (int64_t i = 0; i < m; i++) {
        value[i] += 0.1 * next_random(&state);
        sigma[i] = 0.1;
    }
    lw_problem *problem = problem_from_sparse(A, value, sigma);
    problem_set_bounds(problem, lower, upper);
    problem_set_prior(problem, prior);
    problem_set_coordinate(problem, 0, place);
    problem_fix(problem, n / 2, 0.25);
    lw_free(value);
    lw_free(sigma);
    lw_free(place);
    lw_free(lower);
    lw_free(upper);
    lw_free(prior);
    return problem;
}

/* Iterated and exact answers agree, and the conditions of optimality hold in model units. */
START_TEST(both_ways_agree_with_a_penalty)
{
    const lw_penalty_kind kinds[] = {LW_PREFER_SMALLEST, LW_PREFER_FLATTEST, LW_PREFER_SMOOTHEST};
    for (int k = 0; k < 3; k++) {
        lw_problem *problem = sparse_problem(400, 300);
        lw_system *system = system_of(problem, kinds[k]);
        double x[300], y[300];
        lw_bounded *iterated = solve(system, 0.5, -1, x), *exact = solve(system, 0.5, 0, y);
        int held = 0;
        ck_assert_double_le(exact->optimality, 1e-12);
        ck_assert_double_le(iterated->optimality, 1e-10);
        for (int64_t j = 0; j < 300; j++) ck_assert_double_eq_tol(x[j], y[j], 1e-8);
        for (int64_t c = 0; c < exact->columns; c++) {
            ck_assert_double_ge(-(double)exact->at_bound[c] * exact->multiplier[c], 0);
            held += exact->at_bound[c] != 0;
        }
        ck_assert_int_ge(held, 60);
        ck_assert_int_eq(exact->free, exact->columns - held);
        ck_assert_double_eq(y[150], 0.25);
        lw_bounded_free(iterated);
        lw_bounded_free(exact);
        lw_system_free(system);
        lw_problem_free(problem);
    }
}
END_TEST

START_TEST(large_problem_is_optimal)
{
    lw_problem *problem = sparse_problem(5000, 8000);
    lw_system *system = system_of(problem, LW_PREFER_FLATTEST);
    double *x = LW_NEW_ARRAY(double, 8000);
    lw_bounded *bounded = solve(system, 1, 0, x);
    ck_assert_int_eq(bounded->stop, LW_STOP_TOLERANCE);
    ck_assert_double_le(bounded->optimality, 1e-10);
    for (int64_t j = 0; j < 8000; j++)
        if (j != 4000) ck_assert(x[j] >= problem->lower[j] && x[j] <= problem->upper[j]);
    lw_bounded_free(bounded);
    lw_free(x);
    lw_system_free(system);
    lw_problem_free(problem);
}
END_TEST

START_TEST(closed_box_and_zero_side)
{
    const double A[] = {1, 1, 1, -1, 2, 1}, b[] = {3, 1, 5}, zero[] = {0, 0, 0}, closed[] = {0.5, 2},
                 lower[] = {-1, -1}, upper[] = {1, 1};
    double x[2];
    lw_problem *problem = problem_from_dense(3, 2, A, b, NULL);
    problem_set_bounds(problem, closed, closed);
    lw_system *system = system_of(problem, LW_PREFER_SMALLEST);
    lw_bounded *bounded = solve(system, 0, 0, x);
    ck_assert_double_eq(x[0], 0.5);
    ck_assert_double_eq(x[1], 2.0);
    ck_assert_int_eq(bounded->free, 0);
    lw_bounded_free(bounded);
    lw_system_free(system);
    lw_problem_free(problem);
    problem = problem_from_dense(3, 2, A, zero, NULL);
    problem_set_bounds(problem, lower, upper);
    system = system_of(problem, LW_PREFER_SMALLEST);
    bounded = solve(system, 0, 0, x);
    ck_assert_int_eq(bounded->stop, LW_STOP_ZERO);
    ck_assert_double_eq(x[0], 0.0);
    lw_bounded_free(bounded);
    lw_system_free(system);
    lw_problem_free(problem);
}
END_TEST

Suite *suite_bounds(void)
{
    Suite *suite = suite_create("bounds");
    TCase *tcase = tcase_create("bounds");
    tcase_add_test(tcase, integers_with_exact_answers);
    tcase_add_test(tcase, agrees_with_another_solver);
    tcase_add_test(tcase, exact_to_rounding);
    tcase_add_test(tcase, both_ways_agree_with_a_penalty);
    tcase_add_test(tcase, large_problem_is_optimal);
    tcase_add_test(tcase, closed_box_and_zero_side);
    suite_add_tcase(suite, tcase);
    return suite;
}
