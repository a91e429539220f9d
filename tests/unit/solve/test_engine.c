/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "check_solve.h"

#include "solving.h"

#include <stdlib.h>
#include <string.h>

START_TEST(table_is_complete)
{
    static const char *const names[] = {"dense", "cholesky", "qr", "lsqr", "cgls", "lsmr"};
    const lw_engine *table = lw_engine_table();
    for (size_t i = 0; i < 6; i++) {
        ck_assert_str_eq(table[i].name, names[i]);
        ck_assert_ptr_nonnull(table[i].summary);
        ck_assert_ptr_nonnull((void *)(uintptr_t)table[i].decompose);
        ck_assert_int_eq((table[i].abilities & LW_DIRECT) != 0, i < 3);
    }
    ck_assert_ptr_null(table[6].name);
    ck_assert_ptr_null(lw_engine_find("gauss"));
    ck_assert_str_eq(lw_engine_find("qr")->name, "qr");
}
END_TEST

START_TEST(unknown_engine)
{
    solved s = solve_by(six_lines(), "gauss", 0);
    ck_assert_int_eq(s.status, LW_BAD_USAGE);
    ck_assert_ptr_nonnull(strstr(s.error.text, "'gauss'"));
    solved_clear(&s);
}
END_TEST

static lw_engine_choice choose(lw_problem *problem, double lambda)
{
    lw_system *system = NULL;
    lw_system_options options = {0};
    lw_engine_choice choice;
    lw_error error = {0};
    ck_assert_int_eq(lw_system_new(problem, &options, NULL, &system, &error), LW_OK);
    lw_status status = lw_engine_choose(system, lambda, NULL, NULL, &choice, &error);
    ck_assert_msg(status == LW_OK, "%s", error.text);
    lw_system_free(system);
    lw_problem_free(problem);
    return choice;
}

/* rows x n, `length` entries a row at random places (long: like rays) or adjacent (short: like lines of a
 * network). */
static lw_problem *rows_of(int64_t rows, int64_t n, int64_t length)
{
    uint64_t seed = 5;
    lw_sparse *At = NULL, *A = NULL;
    double *b = calloc((size_t)rows, 8);
    ck_assert_int_eq(lw_sparse_new(n, rows, rows * length, 0, &At, NULL), LW_OK);
    for (int64_t i = 0, e = 0; i < rows; i++) {
        int64_t stride = n / length, first = length > 4 ? 0 : i % (n - length);
        for (int64_t k = 0; k < length; k++, e++) {
            int64_t step = length > 4 ? (int64_t)((next_random(&seed) + 1) / 2 * (double)stride) : k;
            At->index[e] = (int32_t)(first + (length > 4 ? k * stride : 0) + step);
            At->value[e] = 1;
        }
        At->start[i + 1] = (i + 1) * length;
    }
    At->start[0] = 0;
    ck_assert_int_eq(lw_sparse_transpose(At, &A, NULL), LW_OK);
    lw_sparse_free(At);
    lw_problem *problem = problem_from_sparse(A, b, NULL);
    free(b);
    return problem;
}

START_TEST(auto_weighs_sizes)
{
    lw_engine_choice c = choose(six_lines(), 0);
    ck_assert_str_eq(c.engine->name, "dense");
    ck_assert_ptr_nonnull(strstr(c.why, "6 equations, 4 parameters"));
    c = choose(rows_of(30000, 10000, 2), 0);
    ck_assert_str_eq(c.engine->name, "cholesky");
    ck_assert_int_gt(c.factor_nonzeros, 9999);
    c = choose(rows_of(3000, 4000, 100), 1);
    ck_assert_msg(strcmp(c.engine->name, "lsqr") == 0, "%s", c.why);
}
END_TEST

START_TEST(stop_names)
{
    ck_assert_str_eq(lw_stop_name(LW_STOP_DIRECT), "direct");
    ck_assert_str_eq(lw_stop_name(LW_STOP_REFINED), "refined");
    ck_assert_str_eq(lw_stop_name(LW_STOP_ZERO), "zero");
    ck_assert_ptr_nonnull(strstr(lw_stop_words(LW_STOP_MEMORY), "memory"));
    for (int k = 0; k <= LW_STOP_ZERO; k++) ck_assert_str_ne(lw_stop_name((lw_stop)k), "unknown");
}
END_TEST

/* Set-aside readings and robust weights act as if the rows were gone or scaled. */
START_TEST(row_factors)
{
    static const char *const engines[] = {"dense", "cholesky", "qr"};
    const double A[] = {1, 0, 1, 1, 0, 1, 1, -1}, b[] = {1, 2.5, 1, 9}, B[] = {1, 0, 1, 1, 0, 2},
                 c[] = {1, 2.5, 2};
    const double factor[] = {1, 1, 2, 0};
    solved plain = solve_by(problem_from_dense(3, 2, B, c, NULL), "dense", 0);
    for (size_t e = 0; e < 3; e++) {
        lw_problem *problem = problem_from_dense(4, 2, A, b, NULL);
        lw_system_options options = {.row_factor = factor};
        lw_solve_options chosen = {.engine = engines[e]};
        lw_system *system = NULL;
        lw_engine_choice choice;
        lw_decomposition *d = NULL;
        lw_estimate *estimate = NULL;
        lw_error error = {0};
        ck_assert_int_eq(lw_system_new(problem, &options, NULL, &system, &error), LW_OK);
        ck_assert_int_eq(lw_decompose(system, 0, &chosen, NULL, &choice, &d, &error), LW_OK);
        ck_assert_int_eq(d->methods->estimate(d, 0, NULL, &estimate, &error), LW_OK);
        for (int j = 0; j < 2; j++) ck_assert_double_eq(estimate->x[j], plain.estimate->x[j]);
        ck_assert(near(estimate->point.chi_square, plain.estimate->point.chi_square, 1e-14));
        ck_assert(near(estimate->residual[3], estimate->x[0] - estimate->x[1] - 9, 1e-15));
        ck_assert_double_eq(estimate->weighted[3], 0);
        lw_estimate_free(estimate);
        lw_decomposition_free(d);
        lw_system_free(system);
        lw_problem_free(problem);
    }
    solved_clear(&plain);
}
END_TEST

Suite *suite_engine(void)
{
    Suite *suite = suite_create("engine");
    TCase *tests = tcase_create("engine");
    tcase_add_test(tests, table_is_complete);
    tcase_add_test(tests, unknown_engine);
    tcase_add_test(tests, auto_weighs_sizes);
    tcase_add_test(tests, stop_names);
    tcase_add_test(tests, row_factors);
    tcase_set_timeout(tests, 60);
    suite_add_tcase(suite, tests);
    return suite;
}
