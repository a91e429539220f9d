/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "cases.h"
#include "matrix/dense.h"
#include "matrix/suitesparse.h"
#include "matrix/vector.h"

#include <string.h>

Suite *suite_suitesparse(void);

/* Normal matrix of a random network: A'A + I, upper triangle. */
static lw_sparse *normal_matrix(int64_t n, lw_sparse **upper_of)
{
    lw_sparse *A = random_matrix(2 * n, n, 3.0 / (double)n, 1, 17), *N, *I, *S;
    ck_assert_int_eq(lw_sparse_new(n, n, n, 0, &I, NULL), LW_OK);
    for (int64_t j = 0; j < n; j++) I->index[j] = (int32_t)j, I->value[j] = 1, I->start[j + 1] = j + 1;
    ck_assert_int_eq(lw_sparse_stack(1, A, 1, I, &S, NULL), LW_OK);
    ck_assert_int_eq(lw_sparse_gram(S, NULL, &N, NULL), LW_OK);
    lw_sparse_free(A);
    lw_sparse_free(I);
    *upper_of = S;
    return N;
}

static lw_cholesky *factor_of(const lw_sparse *N)
{
    lw_cholesky *f;
    lw_cholesky_size size;
    int64_t defect;
    ck_assert_int_eq(lw_cholesky_analyse(N, NULL, &f, &size, NULL), LW_OK);
    ck_assert_int_ge(size.factor_nonzeros, lw_sparse_nonzeros(N));
    ck_assert_int_gt(size.bytes, 8 * size.factor_nonzeros);
    ck_assert_int_eq(lw_cholesky_factorize(f, N, NULL, &defect, NULL), LW_OK);
    return f;
}

/* y <- S'S x. */
static double *multiply_normal(const lw_sparse *S, int64_t k, const double *x)
{
    double *t = LW_NEW_ARRAY(double, S->rows *k), *y = LW_NEW_ARRAY(double, S->columns *k);
    lw_sparse_apply(S, (int)k, x, t);
    lw_sparse_apply_transposed(S, (int)k, t, y);
    lw_free(t);
    return y;
}

START_TEST(cholesky_solves)
{
    int64_t n = 150, k = 40;
    lw_sparse *S, *N = normal_matrix(n, &S);
    lw_cholesky *f = factor_of(N);
    double *x = random_vector(n * k, 3), *b = multiply_normal(S, k, x);
    ck_assert_int_eq(lw_cholesky_solve(f, k, b, NULL), LW_OK);
    ck_assert_double_lt(difference(n * k, b, x), 1e-12);
    /* The two halves in turn are the whole; their products are x'N^-1 x; the products undo them. */
    double *h = multiply_normal(S, k, x);
    ck_assert_int_eq(lw_cholesky_half_solve(f, 0, k, h, NULL), LW_OK);
    double *nx = multiply_normal(S, 1, x);
    ck_assert_double_eq_tol(lw_dot(n, h, h, NULL), lw_dot(n, x, nx, NULL), 1e-10);
    ck_assert_int_eq(lw_cholesky_half_solve(f, 1, k, h, NULL), LW_OK);
    ck_assert_double_lt(difference(n * k, h, x), 1e-12);
    for (int half = 0; half < 2; half++) {
        ck_assert_int_eq(lw_cholesky_half_multiply(f, half, k, h, NULL), LW_OK);
        ck_assert_int_eq(lw_cholesky_half_solve(f, half, k, h, NULL), LW_OK);
        ck_assert_double_lt(difference(n * k, h, x), 1e-12);
    }
    double rcond = lw_cholesky_rcond(f);
    ck_assert(rcond > 1e-6 && rcond <= 1);
    lw_free(x), lw_free(b), lw_free(h), lw_free(nx);
    lw_cholesky_free(f);
    lw_sparse_free(S), lw_sparse_free(N);
}
END_TEST

START_TEST(view_is_the_factor)
{
    int64_t n = 60;
    lw_sparse *S, *N = normal_matrix(n, &S);
    lw_cholesky *f = factor_of(N);
    lw_factor_view v;
    ck_assert_int_eq(lw_cholesky_view(f, &v, NULL), LW_OK);
    double *L = LW_NEW_ZEROS(double, n *n), *d = LW_NEW_ARRAY(double, n *n);
    for (int64_t s = 0; s < v.supernodes; s++) {
        int64_t rows = v.row_start[s + 1] - v.row_start[s];
        for (int64_t c = 0; c < v.first[s + 1] - v.first[s]; c++) {
            ck_assert_int_eq(v.row[v.row_start[s] + c], v.first[s] + c);
            for (int64_t i = c; i < rows; i++)
                L[(v.first[s] + c) * n + v.row[v.row_start[s] + i]] =
                    v.value[v.value_start[s] + c * rows + i];
        }
    }
    lw_sparse_to_dense(N, d);
    for (int64_t j = 0; j < n; j++)
        for (int64_t i = 0; i < n; i++) {
            double sum = 0;
            for (int64_t l = 0; l < n; l++) sum += L[l * n + i] * L[l * n + j];
            int64_t a = v.permutation[i], b = v.permutation[j];
            ck_assert_double_eq_tol(sum, a <= b ? d[b * n + a] : d[a * n + b], 1e-12);
        }
    lw_free(L), lw_free(d);
    lw_cholesky_free(f);
    lw_sparse_free(S), lw_sparse_free(N);
}
END_TEST

START_TEST(indefinite_matrix_is_told_and_survived)
{
    int64_t n = 50, defect;
    lw_sparse *S, *N = normal_matrix(n, &S);
    lw_cholesky *f = factor_of(N);
    double *x = random_vector(n, 3), *b = multiply_normal(S, 1, x);
    int64_t diagonal = N->start[8] - 1;
    double kept = N->value[diagonal];
    N->value[diagonal] = -1;
    ck_assert_int_eq(lw_cholesky_factorize(f, N, NULL, &defect, NULL), LW_UNSOLVABLE);
    ck_assert(defect >= 0 && defect < n);
    ck_assert_int_eq(lw_cholesky_solve(f, 1, b, NULL), LW_BAD_SHAPE);
    ck_assert_double_eq(lw_cholesky_rcond(f), 0);
    N->value[diagonal] = kept;
    ck_assert_int_eq(lw_cholesky_factorize(f, N, NULL, &defect, NULL), LW_OK);
    ck_assert_int_eq(lw_cholesky_solve(f, 1, b, NULL), LW_OK);
    ck_assert_double_lt(difference(n, b, x), 1e-12);
    lw_watch watch = {.memory = 1000};
    ck_assert_int_eq(lw_cholesky_factorize(f, N, &watch, &defect, NULL), LW_NO_MEMORY);
    ck_assert_int_eq(lw_cholesky_factorize(f, S, NULL, &defect, NULL), LW_BAD_SHAPE);
    lw_free(x), lw_free(b);
    lw_cholesky_free(f);
    lw_sparse_free(S), lw_sparse_free(N);
}
END_TEST

/* A 3-D grid fills enough for nested dissection to be tried and to win. */
START_TEST(much_fill_takes_nested_dissection)
{
    int g = 26;
    int64_t n = (int64_t)g * g * g, p = 0, defect;
    lw_sparse *N;
    ck_assert_int_eq(lw_sparse_new(n, n, 4 * n, 0, &N, NULL), LW_OK);
    for (int64_t j = 0; j < n; j++) {
        int64_t back[3] = {j >= g * g ? j - g * g : -1, j / g % g ? j - g : -1, j % g ? j - 1 : -1};
        for (int b = 0; b < 3; b++)
            if (back[b] >= 0) N->index[p] = (int32_t)back[b], N->value[p++] = -1;
        N->index[p] = (int32_t)j, N->value[p++] = 6.5;
        N->start[j + 1] = p;
    }
    lw_cholesky *f;
    lw_cholesky_size size;
    ck_assert_int_eq(lw_cholesky_analyse(N, NULL, &f, &size, NULL), LW_OK);
    ck_assert_str_eq(size.ordering, "nested dissection");
    ck_assert_int_eq(lw_cholesky_factorize(f, N, NULL, &defect, NULL), LW_OK);
    double *x = random_vector(n, 3), *b = LW_NEW_ARRAY(double, n), *t = LW_NEW_ARRAY(double, n);
    lw_sparse_apply(N, 1, x, b);
    lw_sparse_apply_transposed(N, 1, x, t);
    for (int64_t i = 0; i < n; i++) b[i] += t[i] - 6.5 * x[i];
    ck_assert_int_eq(lw_cholesky_solve(f, 1, b, NULL), LW_OK);
    ck_assert_double_lt(difference(n, b, x), 1e-12);
    lw_free(x), lw_free(b), lw_free(t);
    lw_cholesky_free(f);
    lw_sparse_free(N);
}
END_TEST

/* Least squares against dense QR; full rank, and three dependent columns. */
START_TEST(sparse_qr_agrees_with_dense)
{
    int64_t m = 70, n = 25, r = _i ? n - 3 : n;
    lw_sparse *A = random_matrix(m, n, 0.2, 1, 23);
    if (_i) { /* the last three columns repeat the first three */
        lw_sparse *B;
        int64_t extra = A->start[3], cut = A->start[n - 3];
        ck_assert_int_eq(lw_sparse_new(m, n, cut + extra, 0, &B, NULL), LW_OK);
        memcpy(B->index, A->index, (size_t)cut * 4), memcpy(B->value, A->value, (size_t)cut * 8);
        memcpy(B->index + cut, A->index, (size_t)extra * 4),
            memcpy(B->value + cut, A->value, (size_t)extra * 8);
        memcpy(B->start, A->start, (size_t)(n - 2) * 8);
        for (int64_t j = 1; j <= 3; j++) B->start[n - 3 + j] = cut + A->start[j];
        lw_sparse_free(A);
        A = B;
    }
    lw_sparse_qr *qr;
    ck_assert_int_eq(lw_sparse_qr_make(A, -1, 1, NULL, &qr, NULL), LW_OK);
    ck_assert_int_eq(lw_sparse_qr_rank(qr), r);
    double *b = random_vector(2 * m, 5), *c = LW_NEW_ARRAY(double, 2 * m), *x = LW_NEW_ARRAY(double, 2 * n);
    lw_copy(2 * m, b, c);
    ck_assert_int_eq(lw_sparse_qr_apply_qt(qr, 2, c, NULL), LW_OK);
    ck_assert_double_eq_tol(lw_norm(m, c, NULL), lw_norm(m, b, NULL), 1e-12);
    ck_assert_int_eq(lw_sparse_qr_solve_r(qr, 2, c, m, x, NULL), LW_OK);
    for (int64_t k = r; k < n; k++) ck_assert_double_eq(x[lw_sparse_qr_pivot(qr)[k]], 0);
    double *res = LW_NEW_ARRAY(double, 2 * m), *g = LW_NEW_ARRAY(double, 2 * n);
    lw_sparse_apply(A, 2, x, res);
    for (int64_t i = 0; i < 2 * m; i++) res[i] -= b[i];
    ck_assert_double_eq_tol(lw_norm(m, res, NULL), lw_norm(m - r, c + r, NULL), 1e-12);
    lw_sparse_apply_transposed(A, 2, res, g);
    ck_assert_double_lt(lw_norm_max(2 * n, g), 1e-12);
    ck_assert_int_eq(lw_sparse_qr_apply_q(qr, 2, c, NULL), LW_OK);
    ck_assert_double_lt(difference(2 * m, c, b), 1e-13);
    /* R^-T E'x: with x = A'y in the row space, ||R^-T E'x|| = ||Q'y in the range||, and solving on gives A'A
     * z = x. */
    lw_sparse_apply_transposed(A, 2, b, g);
    ck_assert_int_eq(lw_sparse_qr_solve_rt(qr, 2, g, c, m, NULL), LW_OK);
    ck_assert_int_eq(lw_sparse_qr_solve_r(qr, 2, c, m, x, NULL), LW_OK);
    lw_sparse_apply(A, 2, x, res);
    double *again = LW_NEW_ARRAY(double, 2 * n);
    lw_sparse_apply_transposed(A, 2, res, again);
    ck_assert_double_lt(difference(2 * n, again, g), 1e-11);
    lw_free(b), lw_free(c), lw_free(x), lw_free(res), lw_free(g), lw_free(again);
    lw_sparse_qr_free(qr);
    ck_assert_int_eq(lw_sparse_qr_make(A, -1, 0, NULL, &qr, NULL), LW_OK);
    ck_assert_int_eq(lw_sparse_qr_apply_q(qr, 1, NULL, NULL), LW_BAD_SHAPE);
    lw_sparse_qr_free(qr);
    lw_watch watch = {.memory = 1000};
    ck_assert_int_eq(lw_sparse_qr_make(A, -1, 1, &watch, &qr, NULL), LW_NO_MEMORY);
    A->value[2] = nan("");
    ck_assert_int_eq(lw_sparse_qr_make(A, -1, 1, NULL, &qr, NULL), LW_BAD_INPUT);
    lw_sparse_free(A);
}
END_TEST

START_TEST(failing_allocations_are_survived)
{
    int64_t n = 40, defect;
    lw_sparse *S, *N = normal_matrix(n, &S);
    double *x = random_vector(n * 3, 1);
    int failed = 0, done = 0;
    for (int fail = 0; done < 3; fail++) {
        countdown c = {fail, 0};
        lw_cholesky *f;
        lw_memory_set_gate(count_down, &c);
        lw_status status = lw_cholesky_analyse(N, NULL, &f, NULL, NULL);
        ck_assert((status == LW_OK) == (f != NULL));
        if (!status) status = lw_cholesky_factorize(f, N, NULL, &defect, NULL);
        if (!status) status = lw_cholesky_solve(f, 3, x, NULL);
        if (!status) status = lw_cholesky_half_solve(f, 0, 3, x, NULL);
        lw_memory_set_gate(NULL, NULL);
        ck_assert(status == LW_OK || status == LW_NO_MEMORY);
        failed += status != LW_OK;
        done += c.seen <= fail;
        lw_cholesky_free(f);
    }
    ck_assert_int_gt(failed, 20);
    lw_free(x);
    lw_sparse_free(S), lw_sparse_free(N);
}
END_TEST

Suite *suite_suitesparse(void)
{
    Suite *suite = suite_create("suitesparse");
    TCase *tests = tcase_create("suitesparse");
    tcase_add_test(tests, cholesky_solves);
    tcase_add_test(tests, view_is_the_factor);
    tcase_add_test(tests, indefinite_matrix_is_told_and_survived);
    tcase_add_test(tests, much_fill_takes_nested_dissection);
    tcase_add_loop_test(tests, sparse_qr_agrees_with_dense, 0, 2);
    tcase_add_test(tests, failing_allocations_are_survived);
    tcase_set_timeout(tests, 60);
    suite_add_tcase(suite, tests);
    return suite;
}
