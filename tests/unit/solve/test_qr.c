/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "check_solve.h"
#include "filip.h"

#include "solving.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

/* x_i - 2 x_(i-1) + x_(i-2) = 1/4 from two known starts: x = 1/8 (i + 1)(i + 2), exactly. The condition
 * number grows with n^2 and more, that of the normal matrix beyond double precision. */
static lw_problem *second_differences(int64_t n)
{
    lw_sparse *A = NULL;
    ck_assert_int_eq(lw_sparse_new(n, n, 3 * n - 3, 0, &A, NULL), LW_OK);
    double *b = malloc((size_t)n * 8), *sigma = malloc((size_t)n * 8);
    int64_t e = 0;
    for (int64_t j = 0; j < n; j++) {
        const double value[] = {1, -2, 1};
        A->start[j] = e;
        for (int64_t k = 0; k < 3 && j + k < n; k++) {
            A->index[e] = (int32_t)(j + k);
            A->value[e++] = value[k];
        }
        b[j] = 0.25;
        sigma[j] = 1 + 0.1 * (double)(j % 7); /* no exact factor by luck */
    }
    A->start[n] = e;
    lw_problem *problem = problem_from_sparse(A, b, sigma);
    free(b);
    free(sigma);
    return problem;
}

START_TEST(ill_conditioned_chain)
{
    const int64_t n = 6000;
    solved s = solve_by(second_differences(n), "qr", 0);
    ck_assert_msg(s.status == LW_OK, "%s", s.error.text);
    for (int64_t i = 0; i < n; i++)
        ck_assert_double_eq(s.estimate->x[i], 0.125 * (double)(i + 1) * (double)(i + 2));
    solved_clear(&s);
}
END_TEST

START_TEST(cholesky_goes_on_to_qr)
{
    const int64_t n = 30000;
    solved s = solve_by(second_differences(n), "cholesky", 0);
    ck_assert_msg(s.status == LW_OK, "%s", s.error.text);
    ck_assert_str_eq(s.choice.engine->name, "qr");
    ck_assert_msg(strstr(s.choice.why, "went on from cholesky with qr") != NULL, "%s", s.choice.why);
    ck_assert_uint_eq(s.log.count, 1);
    for (int64_t i = 0; i < n; i++)
        ck_assert_double_eq(s.estimate->x[i], 0.125 * (double)(i + 1) * (double)(i + 2));
    solved_clear(&s);
}
END_TEST

/* Filip (NIST, see filip.h) with powers of rounded x in double: all engines agree, Cholesky goes on to dense.
 */
START_TEST(polynomial_of_degree_ten)
{
    static const char *const engines[] = {"dense", "qr", "cholesky"};
    double A[FILIP_ROWS * FILIP_COLUMNS], y[FILIP_ROWS], first[FILIP_COLUMNS];
    for (int i = 0; i < FILIP_ROWS; i++) {
        double x = strtod(filip_x[i], NULL), power = 1;
        y[i] = strtod(filip_y[i], NULL);
        for (int j = 0; j < FILIP_COLUMNS; j++, power *= x) A[i * FILIP_COLUMNS + j] = power;
    }
    for (size_t e = 0; e < 3; e++) {
        solved s = solve_by(problem_from_dense(FILIP_ROWS, FILIP_COLUMNS, A, y, NULL), engines[e], 0);
        ck_assert_msg(s.status == LW_OK, "%s", s.error.text);
        if (e == 0) memcpy(first, s.estimate->x, sizeof first);
        ck_assert_int_eq(memcmp(first, s.estimate->x, sizeof first), 0);
        if (e == 2) ck_assert_str_eq(s.choice.engine->name, "dense");
        solved_clear(&s);
    }
}
END_TEST

Suite *suite_qr(void)
{
    Suite *suite = suite_create("qr");
    TCase *tests = tcase_create("qr");
    tcase_add_test(tests, ill_conditioned_chain);
    tcase_add_test(tests, cholesky_goes_on_to_qr);
    tcase_add_test(tests, polynomial_of_degree_ten);
    tcase_set_timeout(tests, 60);
    suite_add_tcase(suite, tests);
    return suite;
}
