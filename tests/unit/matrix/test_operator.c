/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "cases.h"
#include "matrix/operator.h"
#include "matrix/product.h"
#include "matrix/vector.h"

Suite *suite_operator(void);

enum { K = 9 };

static lw_operator *product_of(const lw_sparse *A, int two_pass)
{
    lw_product_options options = {.two_pass = two_pass};
    lw_operator *op;
    ck_assert_int_eq(lw_product_new(A, &options, &op, NULL), LW_OK);
    return op;
}

/* Forward and adjoint against the dense matrix (rows x columns), and the adjoint identity y'(A x) = (A'y)'x.
 */
static void check_against(lw_operator *op, const double *dense, int k)
{
    int64_t m = op->rows, n = op->columns;
    double *x = random_vector(n * k, 1), *y = random_vector(m * k, 2), *ax = LW_NEW_ARRAY(double, m *k);
    double *aty = LW_NEW_ARRAY(double, n *k), *r = LW_NEW_ZEROS(double, m *k),
           *s = LW_NEW_ZEROS(double, n *k);
    int64_t forward = op->forward;
    lw_apply(op, k, x, ax);
    lw_apply_transposed(op, k, y, aty);
    ck_assert_int_eq(op->forward - forward, k);
    for (int c = 0; c < k; c++)
        for (int64_t j = 0; j < n; j++)
            for (int64_t i = 0; i < m; i++) {
                r[c * m + i] += dense[j * m + i] * x[c * n + j];
                s[c * n + j] += dense[j * m + i] * y[c * m + i];
            }
    ck_assert_double_lt(difference(m * k, ax, r), 1e-13);
    ck_assert_double_lt(difference(n * k, aty, s), 1e-13);
    ck_assert_double_eq_tol(lw_dot(m * k, ax, y, NULL), lw_dot(n * k, x, aty, NULL), 1e-10);
    lw_free(x), lw_free(y), lw_free(ax), lw_free(aty), lw_free(r), lw_free(s);
}

static double *dense_of(const lw_sparse *A)
{
    double *d = LW_NEW_ARRAY(double, A->rows * A->columns);
    lw_sparse_to_dense(A, d);
    return d;
}

/* The offered step against two products of the same operator. */
static void check_step(lw_operator *op, int k)
{
    int64_t m = op->rows, n = op->columns;
    double *u = random_vector(m * k, 3), *v = random_vector(n * k, 4), *r = LW_NEW_ARRAY(double, m *k);
    double *s = LW_NEW_ARRAY(double, n *k), *w = LW_NEW_ARRAY(double, (m > n ? m : n) * k), factor[K],
           square[K];
    for (int c = 0; c < k; c++) factor[c] = 0.5 - c;
    if (op->fusion == LW_FUSED_ROWS) {
        lw_apply(op, k, v, r);
        for (int c = 0; c < k; c++) lw_add_scaled(m, -factor[c], u + c * m, r + c * m, NULL);
        lw_apply_transposed(op, k, r, s);
        lw_step_rows(op, k, v, factor, u, w, square);
        ck_assert_double_lt(difference(m * k, u, r), 1e-13);
        ck_assert_double_lt(difference(n * k, w, s), 1e-13);
        ck_assert_double_eq_tol(square[k - 1], lw_dot(m, r + (k - 1) * m, r + (k - 1) * m, NULL), 1e-8);
    } else if (op->fusion == LW_FUSED_COLUMNS) {
        lw_apply_transposed(op, k, u, s);
        for (int c = 0; c < k; c++) lw_add_scaled(n, -factor[c], v + c * n, s + c * n, NULL);
        lw_apply(op, k, s, r);
        lw_step_columns(op, k, u, factor, v, w, square);
        ck_assert_double_lt(difference(n * k, v, s), 1e-13);
        ck_assert_double_lt(difference(m * k, w, r), 1e-13);
        ck_assert_double_eq_tol(square[k - 1], lw_dot(n, s + (k - 1) * n, s + (k - 1) * n, NULL), 1e-8);
    }
    lw_free(u), lw_free(v), lw_free(r), lw_free(s), lw_free(w);
}

START_TEST(scaled_operator)
{
    int64_t m = _i & 1 ? 40 : 23, n = _i & 1 ? 23 : 40;
    lw_sparse *A = random_matrix(m, n, 0.4, _i & 8 ? 4 : 1, 5);
    double *rows = random_vector(m, 6), *columns = random_vector(n, 7), *dense = dense_of(A);
    const double *r = _i & 2 ? rows : NULL, *c = _i & 4 ? columns : NULL;
    lw_operator *op;
    ck_assert_int_eq(lw_operator_scaled(product_of(A, 0), 1, r, c, &op, NULL), LW_OK);
    for (int64_t j = 0; j < n; j++)
        for (int64_t i = 0; i < m; i++) dense[j * m + i] *= (r ? r[i] : 1) * (c ? c[j] : 1);
    ck_assert_int_eq(op->fusion, m > n ? LW_FUSED_ROWS : LW_FUSED_COLUMNS);
    check_against(op, dense, 1);
    check_against(op, dense, K);
    check_step(op, 1);
    check_step(op, K);
    /* A scaled operator of a scaled one cannot take a scale within its pass. */
    lw_operator *twice;
    ck_assert_int_eq(lw_operator_scaled(op, 1, rows, columns, &twice, NULL), LW_OK);
    ck_assert_int_eq(twice->fusion, LW_FUSED_NONE);
    lw_operator_free(twice);
    lw_free(rows), lw_free(columns), lw_free(dense);
    lw_sparse_free(A);
}
END_TEST

START_TEST(stacked_operator)
{
    lw_sparse *A = random_matrix(12, 30, 0.4, 1, 5), *B = random_matrix(7, 30, 0.4, 1, 6), *S;
    ck_assert_int_eq(lw_sparse_stack(1, A, -2.5, B, &S, NULL), LW_OK);
    double *dense = dense_of(S);
    lw_operator *op, *none;
    ck_assert_int_eq(lw_operator_stacked(product_of(A, 0), 1, -2.5, product_of(B, 1), 1, &op, NULL), LW_OK);
    check_against(op, dense, 1);
    check_against(op, dense, K);
    ck_assert_int_eq(op->fusion, LW_FUSED_NONE);
    lw_sparse *T;
    lw_sparse_transpose(A, &T, NULL);
    lw_operator *t = product_of(T, 0);
    ck_assert_int_eq(lw_operator_stacked(op, 0, 1, t, 0, &none, NULL), LW_BAD_SHAPE);
    lw_operator_free(t);
    lw_operator_free(op);
    lw_free(dense);
    lw_sparse_free(A), lw_sparse_free(B), lw_sparse_free(S), lw_sparse_free(T);
}
END_TEST

START_TEST(product_of_operators)
{
    lw_sparse *A = random_matrix(12, 20, 0.4, 1, 5), *B = random_matrix(20, 9, 0.4, 1, 6);
    double *a = dense_of(A), *b = dense_of(B), *dense = LW_NEW_ZEROS(double, 12 * 9);
    for (int j = 0; j < 9; j++)
        for (int l = 0; l < 20; l++)
            for (int i = 0; i < 12; i++) dense[j * 12 + i] += a[l * 12 + i] * b[j * 20 + l];
    lw_operator *op;
    ck_assert_int_eq(lw_operator_product(product_of(A, 0), 1, product_of(B, 0), 1, &op, NULL), LW_OK);
    check_against(op, dense, 1);
    check_against(op, dense, K);
    lw_operator_free(op);
    lw_free(a), lw_free(b), lw_free(dense);
    lw_sparse_free(A), lw_sparse_free(B);
}
END_TEST

static void forward(void *state, int k, const double *in, double *out)
{
    lw_sparse_apply(state, k, in, out);
}

static void backward(void *state, int k, const double *in, double *out)
{
    lw_sparse_apply_transposed(state, k, in, out);
}

static void release(void *state)
{
    lw_sparse_free(state);
}

START_TEST(operator_of_functions)
{
    lw_sparse *A = random_matrix(12, 20, 0.4, 1, 5);
    double *dense = dense_of(A);
    lw_operator *op;
    ck_assert_int_eq(
        lw_operator_from_functions("own", 12, 20, forward, backward, A, release, NULL, &op, NULL), LW_OK);
    ck_assert_str_eq(op->methods->name, "own");
    check_against(op, dense, K);
    lw_operator_free(op);
    lw_operator_free(NULL);
    lw_free(dense);
}
END_TEST

START_TEST(failing_allocations_are_survived)
{
    lw_sparse *A = random_matrix(12, 12, 0.4, 1, 5);
    lw_operator *a = product_of(A, 0), *op[4] = {0};
    double *x = random_vector(12 * K, 1), *y = LW_NEW_ARRAY(double, 24 * K), *scale = random_vector(12, 2);
    for (int fail = 0; fail < 12; fail++)
        for (int which = 0; which < 4; which++) {
            countdown c = {fail, 0};
            lw_memory_set_gate(count_down, &c);
            lw_status status = which == 0   ? lw_operator_scaled(a, 0, scale, scale, &op[0], NULL)
                               : which == 1 ? lw_operator_stacked(a, 0, 2, a, 0, &op[1], NULL)
                               : which == 2 ? lw_operator_product(a, 0, a, 0, &op[2], NULL)
                                            : lw_operator_from_functions("f", 12, 12, forward, backward, A,
                                                                         NULL, NULL, &op[3], NULL);
            ck_assert((status == LW_OK) == (op[which] != NULL));
            if (!status) lw_apply(op[which], K, x, y);
            lw_memory_set_gate(NULL, NULL);
            if (status) ck_assert_int_eq(status, LW_NO_MEMORY);
            lw_operator_free(op[which]);
        }
    lw_operator_free(a);
    lw_free(x), lw_free(y), lw_free(scale);
    lw_sparse_free(A);
}
END_TEST

Suite *suite_operator(void)
{
    Suite *suite = suite_create("operator");
    TCase *tests = tcase_create("operator");
    tcase_add_loop_test(tests, scaled_operator, 0, 16);
    tcase_add_test(tests, stacked_operator);
    tcase_add_test(tests, product_of_operators);
    tcase_add_test(tests, operator_of_functions);
    tcase_add_test(tests, failing_allocations_are_survived);
    tcase_set_timeout(tests, 60);
    suite_add_tcase(suite, tests);
    return suite;
}
