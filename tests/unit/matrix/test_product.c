/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "cases.h"
#include "matrix/product.h"
#include "matrix/vector.h"

#include <string.h>

Suite *suite_product(void);

enum { K = 11 };

typedef struct shape {
    int64_t rows, columns;
    double density;
    int64_t run;
} shape;

/* Both orientations, blocks of four and single lines, sizes that are no multiples of four, empty lines. */
static const shape shapes[] = {{40, 203, 0.4, 1}, {40, 203, 0.3, 4}, {203, 41, 0.4, 1}, {203, 41, 0.3, 1},
                               {31, 31, 0.2, 31}, {5, 3, 0.5, 1},    {200, 501, .6, 1}, {1, 7, 1, 1},
                               {7, 1, 1, 1},      {9, 30, 0, 1}};
enum { SHAPES = sizeof shapes / sizeof shapes[0] };

static lw_operator *operator_of(const lw_sparse *A, lw_storage storage, int two_pass, const double *scale,
                                lw_team *team)
{
    lw_product_options options = {.storage = storage, .two_pass = two_pass, .row_scale = scale, .team = team};
    lw_operator *op;
    ck_assert_int_eq(lw_product_new(A, &options, &op, NULL), LW_OK);
    return op;
}

/* The matrix whose values are what the layout stores. */
static lw_sparse *stored(const lw_sparse *A, lw_storage storage, const double *scale)
{
    lw_sparse *T, *B;
    lw_sparse_transpose(A, &T, NULL);
    lw_sparse_transpose(T, &B, NULL);
    lw_sparse_free(T);
    for (int64_t p = 0; p < lw_sparse_nonzeros(B); p++) {
        if (scale) B->value[p] *= scale[B->index[p]];
        if (storage == LW_STORE_SINGLE) B->value[p] = (double)(float)B->value[p];
    }
    return B;
}

static void assert_square(double square, int64_t n, const double *x)
{
    double expected = lw_dot(n, x, x, NULL);
    ck_assert_double_le(fabs(square - expected), 1e-13 * expected);
}

static void check_steps(lw_operator *op, const lw_sparse *B, int k)
{
    int64_t m = B->rows, n = B->columns;
    double *u = random_vector(m * k, 11), *v = random_vector(n * k, 12), *u2 = LW_NEW_ARRAY(double, m *k);
    double *v2 = LW_NEW_ARRAY(double, n *k), *w = LW_NEW_ARRAY(double, (m > n ? m : n) * k),
           *r = LW_NEW_ARRAY(double, m *k);
    double *s = LW_NEW_ARRAY(double, n *k), factor[K], square[K];
    for (int c = 0; c < k; c++) factor[c] = c == 2 ? 0 : 0.25 * c - 1;
    lw_copy(m * k, u, u2);
    lw_step_rows(op, k, v, factor, u2, w, square);
    lw_sparse_apply(B, k, v, r);
    for (int c = 0; c < k; c++)
        for (int64_t i = 0; i < m; i++) r[c * m + i] -= factor[c] * u[c * m + i];
    ck_assert_double_lt(difference(m * k, u2, r), 1e-13);
    lw_sparse_apply_transposed(B, k, r, s);
    ck_assert_double_lt(difference(n * k, w, s), 1e-13);
    for (int c = 0; c < k; c++) assert_square(square[c], m, r + c * m);
    lw_copy(n * k, v, v2);
    lw_step_columns(op, k, u, factor, v2, w, square);
    lw_sparse_apply_transposed(B, k, u, s);
    for (int c = 0; c < k; c++)
        for (int64_t i = 0; i < n; i++) s[c * n + i] -= factor[c] * v[c * n + i];
    ck_assert_double_lt(difference(n * k, v2, s), 1e-13);
    lw_sparse_apply(B, k, s, r);
    ck_assert_double_lt(difference(m * k, w, r), 1e-13);
    for (int c = 0; c < k; c++) assert_square(square[c], n, s + c * n);
    lw_free(u), lw_free(v), lw_free(u2), lw_free(v2), lw_free(w), lw_free(r), lw_free(s);
}

static void check_products(lw_operator *op, const lw_sparse *B, int k)
{
    int64_t m = B->rows, n = B->columns;
    double *x = random_vector(n * k, 21), *y = random_vector(m * k, 22), *ax = LW_NEW_ARRAY(double, m *k);
    double *aty = LW_NEW_ARRAY(double, n *k), *r = LW_NEW_ARRAY(double, m *k),
           *s = LW_NEW_ARRAY(double, n *k);
    lw_apply(op, k, x, ax);
    lw_apply_transposed(op, k, y, aty);
    lw_sparse_apply(B, k, x, r);
    lw_sparse_apply_transposed(B, k, y, s);
    ck_assert_double_lt(difference(m * k, ax, r), 1e-13);
    ck_assert_double_lt(difference(n * k, aty, s), 1e-13);
    ck_assert_double_eq_tol(lw_dot(m * k, ax, y, NULL), lw_dot(n * k, x, aty, NULL), 1e-9);
    lw_free(x), lw_free(y), lw_free(ax), lw_free(aty), lw_free(r), lw_free(s);
}

START_TEST(every_layout_agrees_with_the_plain_product)
{
    const shape *h = &shapes[_i];
    lw_sparse *A = random_matrix(h->rows, h->columns, h->density, h->run, 33);
    double *scale = random_vector(h->rows, 44);
    for (int variant = 0; variant < 12; variant++) {
        lw_storage storage = variant & 1 ? LW_STORE_SINGLE : LW_STORE_DOUBLE;
        const double *used = variant & 2 ? scale : NULL;
        lw_operator *op = operator_of(A, storage, variant / 4, used, NULL);
        lw_sparse *B = stored(A, storage, used);
        check_products(op, B, 1);
        check_steps(op, B, 1);
        check_products(op, B, K);
        check_steps(op, B, K);
        lw_product_layout layout;
        lw_product_describe(op, &layout);
        ck_assert_int_eq(layout.fusion, variant >= 4           ? LW_FUSED_NONE
                                        : h->rows > h->columns ? LW_FUSED_ROWS
                                                               : LW_FUSED_COLUMNS);
        lw_sparse_free(B);
        lw_operator_free(op);
    }
    lw_free(scale);
    lw_sparse_free(A);
}
END_TEST

START_TEST(layouts_are_chosen_by_the_fill)
{
    lw_product_layout layout;
    lw_product_options options = {.storage = LW_STORE_DOUBLE};
    for (int shared = 0; shared < 2; shared++) {
        lw_sparse *A = random_matrix(200, 400, shared ? 0.4 : 0.02, shared ? 4 : 1, 3);
        lw_operator *op = operator_of(A, LW_STORE_DOUBLE, 0, NULL, NULL);
        lw_product_describe(op, &layout);
        ck_assert_int_eq(layout.block, shared ? 4 : 1);
        ck_assert(shared ? layout.fill < 1.3 : layout.fill > 3);
        ck_assert_int_le(layout.bytes, lw_product_bytes(A, &options) + 1000);
        lw_operator_free(op);
        lw_sparse_free(A);
    }
}
END_TEST

/* Steps and products of one team size, all results one after another. */
static void run_all(const lw_sparse *A, lw_storage storage, int k, lw_team *team, double *out)
{
    int64_t m = A->rows, n = A->columns;
    double *u = random_vector(m * k, 1), *v = random_vector(n * k, 2), factor[K], *square = out;
    for (int c = 0; c < k; c++) factor[c] = 0.5 + c;
    lw_operator *op = operator_of(A, storage, 0, NULL, team);
    out += 2 * k;
    lw_apply(op, k, v, out);
    lw_apply_transposed(op, k, u, out + m * k);
    lw_copy(m * k, u, out += (m + n) * k);
    lw_step_rows(op, k, v, factor, out, out + m * k, square);
    lw_copy(n * k, v, out += (m + n) * k);
    lw_step_columns(op, k, u, factor, out, out + n * k, square + k);
    lw_operator_free(op);
    lw_free(u);
    lw_free(v);
}

START_TEST(bytes_do_not_depend_on_the_team)
{
    lw_storage storage = _i & 1 ? LW_STORE_SINGLE : LW_STORE_DOUBLE;
    int64_t m = _i & 2 ? 700 : 300, n = _i & 2 ? 300 : 700;
    lw_sparse *A = random_matrix(m, n, 0.5, _i & 4 ? 1 : 4, 9);
    int64_t length = 3 * (m + n) + 2;
    double *first = LW_NEW_ZEROS(double, length *K), *other = LW_NEW_ZEROS(double, length *K);
    run_all(A, storage, K, NULL, first);
    for (int threads = 1; threads <= 4; threads++) {
        lw_team *team;
        ck_assert_int_eq(lw_team_new(threads, &team, NULL), LW_OK);
        run_all(A, storage, K, team, other);
        ck_assert(memcmp(first, other, (size_t)(length * K) * sizeof *first) == 0);
        lw_team_free(team);
    }
    /* One vector alone has the bytes that it has within a block. */
    run_all(A, storage, 1, NULL, other);
    ck_assert(memcmp(first + 2 * K, other + 2, (size_t)m * sizeof *first) == 0);
    lw_free(first);
    lw_free(other);
    lw_sparse_free(A);
}
END_TEST

START_TEST(failing_allocations_are_survived)
{
    int64_t m = _i & 1 ? 90 : 40, n = _i & 1 ? 40 : 90;
    lw_sparse *A = random_matrix(m, n, 0.4, _i & 2 ? 1 : 4, 3);
    double *x = random_vector(n * 3, 1), *y = LW_NEW_ARRAY(double, m * 3), *r = LW_NEW_ARRAY(double, m * 3);
    lw_product_options options = {.storage = _i & 4 ? LW_STORE_SINGLE : LW_STORE_DOUBLE};
    lw_sparse *B = stored(A, options.storage, NULL);
    lw_sparse_apply(B, 3, x, r);
    int succeeded = 0;
    for (int fail = 0; fail < 24; fail++) {
        countdown c = {fail, 0};
        lw_operator *op;
        lw_memory_set_gate(count_down, &c);
        lw_status status = lw_product_new(A, &options, &op, NULL);
        if (status == LW_OK) lw_apply(op, 3, x, y);
        lw_memory_set_gate(NULL, NULL);
        ck_assert((status == LW_OK) == (op != NULL));
        if (status) ck_assert_int_eq(status, LW_NO_MEMORY);
        if (!status) ck_assert_double_lt(difference(3 * m, y, r), 1e-13);
        succeeded += !status;
        lw_operator_free(op);
    }
    ck_assert_int_gt(succeeded, 1);
    lw_free(x), lw_free(y), lw_free(r);
    lw_sparse_free(A);
    lw_sparse_free(B);
}
END_TEST

Suite *suite_product(void)
{
    Suite *suite = suite_create("product");
    TCase *tests = tcase_create("product");
    tcase_add_loop_test(tests, every_layout_agrees_with_the_plain_product, 0, SHAPES);
    tcase_add_test(tests, layouts_are_chosen_by_the_fill);
    tcase_add_loop_test(tests, bytes_do_not_depend_on_the_team, 0, 8);
    tcase_add_loop_test(tests, failing_allocations_are_survived, 0, 8);
    tcase_set_timeout(tests, 60);
    suite_add_tcase(suite, tests);
    return suite;
}
