/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "../support.h"
#include "check_problem.h"

#include "core/memory.h"
#include "problem/system.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

static lw_system *make(const lw_problem *problem, const double *row_factor, lw_penalty_kind prefer)
{
    lw_system *system = NULL;
    lw_error error = {0};
    lw_system_options options = {.penalty = {.prefer = prefer}, .row_factor = row_factor};
    ck_assert_msg(lw_system_new(problem, &options, NULL, &system, &error) == LW_OK, "%s", error.text);
    ck_assert_msg(lw_system_matrix(system, NULL, &error) == LW_OK, "%s", error.text);
    return system;
}

static void free_both(lw_system *system, lw_problem *problem)
{
    lw_system_free(system);
    lw_problem_free(problem);
}

static bool is_power(double a)
{
    int exponent;
    return frexp(a, &exponent) == 0.5;
}

START_TEST(whitens_and_scales)
{
    const double A[] = {1, 2, 0, 3, -1, 0, 2, 0, 0}, value[] = {1, 2, 3}, sigma[] = {0.5, 2, 4};
    lw_problem *problem = problem_from_dense(3, 3, A, value, sigma);
    lw_system *system = make(problem, NULL, LW_PREFER_SMALLEST);
    double dense[9], norm[3];
    lw_sparse_to_dense(system->matrix, dense);
    lw_sparse_column_norms(system->matrix, norm);
    for (int i = 0; i < 3; i++)
        for (int j = 0; j < 3; j++)
            ck_assert_double_eq(dense[i + 3 * j], A[3 * i + j] / sigma[i] * system->scale[j]);
    for (int i = 0; i < 3; i++) ck_assert_double_eq(system->b[i], value[i] / sigma[i]);
    for (int j = 0; j < 3; j++) ck_assert(is_power(system->scale[j]));
    for (int j = 0; j < 2; j++) ck_assert(norm[j] >= sqrt(0.5) && norm[j] <= sqrt(2.0));
    ck_assert_double_eq(system->scale[2], 1.0); /* an empty column */
    ck_assert_int_eq(system->observations_used, 3);
    free_both(system, problem);
}
END_TEST

START_TEST(reduces_by_start_and_held_values)
{
    const double A[] = {1, -1, 0, 0, 1, -1, 1, 0, 1}, prior[] = {5000000.25, 5000001.5, 0};
    const double value[] = {-1.0, 4999999.5, 5000003.25};
    lw_problem *problem = problem_from_dense(3, 3, A, value, NULL);
    problem_set_prior(problem, prior);
    problem_fix(problem, 2, 2.5);
    lw_system *system = make(problem, NULL, LW_PREFER_SMALLEST);
    ck_assert_int_eq(system->columns, 2);
    ck_assert_int_eq(system->column_of[2], -1);
    ck_assert_double_eq(system->b[0], 0.25);
    ck_assert_double_eq(system->b[1], 0.5);
    ck_assert_double_eq(system->b[2], 0.5);
    double z[2] = {0.125 / system->scale[0], 0}, x[3], residual[3];
    lw_system_model(system, z, NULL, x);
    ck_assert_double_eq(x[0], 5000000.375);
    ck_assert_double_eq(x[2], 2.5);
    for (int exact = 0; exact < 2; exact++) {
        ck_assert_int_eq(lw_system_residual(system, z, NULL, exact, residual, NULL), LW_OK);
        ck_assert_double_eq(residual[0], -0.125);
        ck_assert_double_eq(residual[1], -0.5);
        ck_assert_double_eq(residual[2], -0.375);
    }
    free_both(system, problem);
}
END_TEST

/* 0.3 - 0.1 * 3 is zero in the decimals that were written, and not in doubles. */
START_TEST(keeps_decimals)
{
    const char *const A[] = {"0.1"}, *const value[] = {"0.3"}, *const sigma[] = {"0.1"};
    const double prior[] = {3};
    lw_problem *problem = problem_from_text(1, 1, A, value, sigma);
    problem_set_prior(problem, prior);
    lw_system *system = make(problem, NULL, LW_PREFER_SMALLEST);
    ck_assert_double_le(fabs(system->b[0]), 1e-30);
    free_both(system, problem);
}
END_TEST

static lw_problem *correlated_problem(void)
{
    const double A[] = {1, 2, 0, 0, 1, 1, 1, 0, 3, 2, 1, 0, 0, 1, -1}, value[] = {1, 2, 3, 4, 5},
                 sigma[] = {1, 2, 1, 1, 0.5};
    const int32_t member[] = {3, 0};
    const double covariance[] = {4, 1.5, 1.5, 1};
    lw_problem *problem = problem_from_dense(5, 3, A, value, sigma);
    problem_add_block(problem, 2, member, covariance);
    return problem;
}

/* A'PA with the inverse of [[4, 1.5], [1.5, 1]] (determinant 1.75) for observations 4 and 1, by hand. */
START_TEST(whitens_correlated_blocks)
{
    lw_problem *problem = correlated_problem();
    lw_system *system = make(problem, NULL, LW_PREFER_SMALLEST);
    double A[15], P[25] = {0}, dense[15];
    lw_sparse_to_dense(problem->design, A);
    lw_sparse_to_dense(system->matrix, dense);
    P[3 + 5 * 3] = 1 / 1.75;
    P[0 + 5 * 0] = 4 / 1.75;
    P[0 + 5 * 3] = P[3 + 5 * 0] = -1.5 / 1.75;
    P[1 + 5 * 1] = 0.25;
    P[2 + 5 * 2] = 1;
    P[4 + 5 * 4] = 4;
    for (int i = 0; i < 3; i++)
        for (int j = 0; j < 3; j++) {
            double expected = 0, found = 0;
            for (int r = 0; r < 5; r++)
                for (int s = 0; s < 5; s++) expected += A[r + 5 * i] * P[r + 5 * s] * A[s + 5 * j];
            for (int r = 0; r < 5; r++) found += dense[r + 5 * i] * dense[r + 5 * j];
            ck_assert_double_eq_tol(found, expected * system->scale[i] * system->scale[j], 1e-13);
        }
    double b[5];
    memcpy(b, problem->value, sizeof b);
    lw_system_whiten(system, 1, b);
    for (int i = 0; i < 5; i++) ck_assert_double_eq_tol(b[i], system->b[i], 1e-14);
    free_both(system, problem);
}
END_TEST

START_TEST(whitening_has_adjoint_and_inverse)
{
    lw_problem *problem = correlated_problem();
    lw_system *system = make(problem, NULL, LW_PREFER_SMALLEST);
    double u[10], v[10], Wu[10], Wv[10], back[10], forth = 0, transposed = 0;
    uint64_t state = 7;
    for (int i = 0; i < 10; i++) {
        u[i] = Wu[i] = back[i] = next_random(&state);
        v[i] = Wv[i] = next_random(&state);
    }
    lw_system_whiten(system, 2, Wu);
    lw_system_whiten_transposed(system, 2, Wv);
    for (int i = 0; i < 10; i++) {
        forth += Wu[i] * v[i];
        transposed += u[i] * Wv[i];
    }
    ck_assert_double_eq_tol(forth, transposed, 1e-13);
    lw_system_unwhiten(system, 2, Wu);
    for (int i = 0; i < 10; i++) ck_assert_double_eq_tol(Wu[i], back[i], 1e-14);
    free_both(system, problem);
}
END_TEST

/* A set-aside member of a block leaves the others as if it had never been read. */
START_TEST(sets_aside_inside_a_block)
{
    const double factor[] = {0, 1, 1, 1, 0.5};
    lw_problem *problem = correlated_problem();
    lw_system *system = make(problem, factor, LW_PREFER_SMALLEST);
    double dense[15], A[15];
    lw_sparse_to_dense(system->matrix, dense);
    lw_sparse_to_dense(problem->design, A);
    ck_assert_int_eq(system->rows_used, 4);
    ck_assert_int_eq(system->observations_used, 4);
    for (int j = 0; j < 3; j++) {
        ck_assert_double_eq(dense[0 + 5 * j], 0.0);
        ck_assert_double_eq_tol(dense[3 + 5 * j], A[3 + 5 * j] / 2 * system->scale[j], 1e-15);
        ck_assert_double_eq_tol(dense[4 + 5 * j], A[4 + 5 * j] * system->scale[j], 1e-15);
    }
    ck_assert_double_eq(system->b[0], 0.0);
    ck_assert_double_eq_tol(system->b[3], 2.0, 1e-15);
    double z[3] = {0}, residual[5];
    ck_assert_int_eq(lw_system_residual(system, z, NULL, 0, residual, NULL), LW_OK);
    ck_assert_double_eq(residual[0], -1.0); /* still predicted */
    free_both(system, problem);
}
END_TEST

START_TEST(weights_priors)
{
    const double A[] = {1, 1, 1, -1}, value[] = {3, 1}, prior[] = {0.5, 0},
                 prior_sigma[] = {0.25, (double)NAN};
    lw_problem *problem = problem_from_dense(2, 2, A, value, NULL);
    problem_set_prior(problem, prior);
    problem_set_prior_sigma(problem, prior_sigma);
    lw_system *system = make(problem, NULL, LW_PREFER_SMALLEST);
    double dense[6];
    lw_sparse_to_dense(system->matrix, dense);
    ck_assert_int_eq(system->rows, 3);
    ck_assert_int_eq(system->priors, 1);
    ck_assert_double_eq(dense[2], 4.0 * system->scale[0]);
    ck_assert_double_eq(dense[5], 0.0);
    ck_assert_double_eq(system->b[2], 0.0);
    ck_assert_double_eq(system->penalty_diagonal[0], 0.0); /* a weighted prior is not damped too */
    ck_assert_double_eq(system->penalty_diagonal[1], system->scale[1]);
    free_both(system, problem);
}
END_TEST

static void compare_operator(lw_system *system)
{
    lw_operator *op = NULL;
    lw_error error = {0};
    ck_assert_msg(lw_system_operator(system, NULL, NULL, &op, &error) == LW_OK, "%s", error.text);
    int64_t m = op->rows, n = op->columns;
    double *x = LW_NEW_ARRAY(double, n), *y = LW_NEW_ARRAY(double, m), *expected = LW_NEW_ARRAY(double, m);
    double *back = LW_NEW_ARRAY(double, n), *wanted = LW_NEW_ARRAY(double, n);
    uint64_t state = 11;
    for (int64_t j = 0; j < n; j++) x[j] = next_random(&state);
    lw_apply(op, 1, x, y);
    lw_sparse_apply(system->matrix, 1, x, expected);
    for (int64_t i = 0; i < m; i++) ck_assert_double_eq_tol(y[i], expected[i], 1e-13);
    lw_apply_transposed(op, 1, y, back);
    lw_sparse_apply_transposed(system->matrix, 1, y, wanted);
    for (int64_t j = 0; j < n; j++) ck_assert_double_eq_tol(back[j], wanted[j], 1e-13);
    lw_free(x);
    lw_free(y);
    lw_free(expected);
    lw_free(back);
    lw_free(wanted);
    lw_operator_free(op);
}

START_TEST(operator_is_the_matrix)
{
    const double A[] = {1, 2, 0, 0, 1, 1, 1, 0, 3, 2, 1, 0, 0, 1, -1}, value[] = {1, 2, 3, 4, 5},
                 sigma[] = {1, 2, 1, 1, 0.5};
    const double factor[] = {1, 0.5, 0, 1, 1};
    lw_problem *problem = problem_from_dense(5, 3, A, value, sigma);
    lw_system *system = make(problem, factor, LW_PREFER_SMALLEST);
    compare_operator(system);
    free_both(system, problem);
    problem = correlated_problem();
    problem_fix(problem, 1, 1.0);
    system = make(problem, NULL, LW_PREFER_SMALLEST);
    compare_operator(system);
    free_both(system, problem);
}
END_TEST

START_TEST(reduces_conditions)
{
    const double A[] = {1, 0, 0, 0, 1, 0, 0, 0, 1}, value[] = {1, 2, 3}, prior[] = {1, 0, 0};
    const double C[] = {1000, 2000, 500}, d[] = {4000};
    lw_problem *problem = problem_from_dense(3, 3, A, value, NULL);
    problem_set_prior(problem, prior);
    problem_set_conditions(problem, 1, C, d);
    problem_fix(problem, 2, 2.0);
    lw_system *system = make(problem, NULL, LW_PREFER_SMALLEST);
    ck_assert_int_eq(system->conditions, 1);
    ck_assert(is_power(system->condition_scale[0]));
    double by = system->condition_scale[0];
    ck_assert_double_eq(system->condition_value[0], 2000 * by);
    ck_assert_double_eq(system->condition->value[0], 1000 * by * system->scale[0]);
    ck_assert_double_eq(system->condition->value[1], 2000 * by * system->scale[1]);
    free_both(system, problem);
}
END_TEST

/* Held at 5 at one end of a line of three under first differences: the penalty alone wants 5 everywhere. Held
 * at 5 and 1 at both ends: the middle wants 3, and (1 - 5)^2 / 2 remains. */
START_TEST(held_parameters_draw_the_penalty)
{
    const double A[] = {0, 1, 0, 0, 1, 0}, value[] = {0, 0}, x[] = {0, 1, 2};
    lw_problem *problem = problem_from_dense(2, 3, A, value, NULL);
    problem_set_coordinate(problem, 0, x);
    problem_fix(problem, 2, 5.0);
    lw_system *system = make(problem, NULL, LW_PREFER_FLATTEST);
    ck_assert_double_eq_tol(system->start[0].high, 5.0, 1e-13);
    ck_assert_double_eq_tol(system->start[1].high, 5.0, 1e-13);
    ck_assert_double_le(system->penalty_constant, 1e-13);
    ck_assert_double_eq_tol(system->b[0], -5.0, 1e-13);
    lw_system_free(system);
    problem_fix(problem, 0, 1.0);
    system = make(problem, NULL, LW_PREFER_FLATTEST);
    ck_assert_double_eq_tol(system->start[0].high, 3.0, 1e-13);
    ck_assert_double_eq_tol(system->penalty_constant, sqrt(8.0), 1e-13);
    free_both(system, problem);
}
END_TEST

START_TEST(refuses_a_block_that_is_not_definite)
{
    const double A[] = {1, 1}, value[] = {1, 2}, covariance[] = {1, 2, 2, 1};
    const int32_t member[] = {0, 1};
    lw_problem *problem = problem_from_dense(2, 1, A, value, NULL);
    lw_system *system = NULL;
    lw_error error = {0};
    problem_add_block(problem, 2, member, covariance);
    ck_assert_int_eq(lw_system_new(problem, NULL, NULL, &system, &error), LW_BAD_INPUT);
    ck_assert_ptr_null(system);
    ck_assert_ptr_nonnull(strstr(error.text, "not positive definite"));
    lw_problem_free(problem);
}
END_TEST

START_TEST(extreme_coefficients_do_not_overflow)
{
    const double A[] = {1e200, 0, 1e200, 1e-200, 0, 1e-200}, value[] = {1, 2, 3};
    lw_problem *problem = problem_from_dense(3, 2, A, value, NULL);
    lw_system *system = make(problem, NULL, LW_PREFER_SMALLEST);
    double norm[2];
    lw_sparse_column_norms(system->matrix, norm);
    for (int j = 0; j < 2; j++) ck_assert(norm[j] >= 0.7 && norm[j] <= 1.5);
    free_both(system, problem);
}
END_TEST

static bool refuse(void *state)
{
    int64_t *left = state;
    return (*left)-- == 0;
}

/* Whichever allocation fails: told, nothing left behind. */
START_TEST(failing_allocations_are_told)
{
    const double x[] = {0, 1, 2};
    for (int64_t at = 0, done = 0; !done; at++) {
        lw_problem *problem = correlated_problem();
        problem_set_coordinate(problem, 0, x);
        problem_fix(problem, 2, 3);
        lw_system *system = NULL;
        lw_operator *op = NULL;
        lw_error error = {0};
        lw_system_options options = {.penalty = {.prefer = LW_PREFER_FLATTEST}};
        int64_t left = at;
        lw_memory_set_gate(refuse, &left);
        lw_status status = lw_system_new(problem, &options, NULL, &system, &error);
        if (status == LW_OK) status = lw_system_operator(system, NULL, NULL, &op, &error);
        lw_memory_set_gate(NULL, NULL);
        done = left >= 0;
        ck_assert_int_eq(status, done ? LW_OK : LW_NO_MEMORY);
        if (!done) ck_assert_ptr_null(op);
        lw_operator_free(op);
        free_both(system, problem);
        ck_assert_int_lt(at, 2000);
    }
}
END_TEST

Suite *suite_system(void)
{
    Suite *suite = suite_create("system");
    TCase *tcase = tcase_create("system");
    tcase_add_test(tcase, whitens_and_scales);
    tcase_add_test(tcase, reduces_by_start_and_held_values);
    tcase_add_test(tcase, keeps_decimals);
    tcase_add_test(tcase, whitens_correlated_blocks);
    tcase_add_test(tcase, whitening_has_adjoint_and_inverse);
    tcase_add_test(tcase, sets_aside_inside_a_block);
    tcase_add_test(tcase, weights_priors);
    tcase_add_test(tcase, operator_is_the_matrix);
    tcase_add_test(tcase, reduces_conditions);
    tcase_add_test(tcase, held_parameters_draw_the_penalty);
    tcase_add_test(tcase, refuses_a_block_that_is_not_definite);
    tcase_add_test(tcase, extreme_coefficients_do_not_overflow);
    tcase_add_test(tcase, failing_allocations_are_told);
    suite_add_tcase(suite, tcase);
    return suite;
}
