/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "cases.h"

#include <string.h>

Suite *suite_sparse(void);

static double *dense_of(const lw_sparse *A)
{
    double *d = LW_NEW_ARRAY(double, A->rows * A->columns);
    lw_sparse_to_dense(A, d);
    return d;
}

static void assert_sorted(const lw_sparse *A)
{
    for (int64_t j = 0; j < A->columns; j++)
        for (int64_t p = A->start[j] + 1; p < A->start[j + 1]; p++)
            ck_assert_int_lt(A->index[p - 1], A->index[p]);
}

START_TEST(transpose_twice_is_the_matrix)
{
    lw_sparse *A = random_matrix(13, 21, 0.3, 1, 3), *T, *B;
    ck_assert_int_eq(lw_sparse_transpose(A, &T, NULL), LW_OK);
    ck_assert_int_eq(lw_sparse_transpose(T, &B, NULL), LW_OK);
    int64_t n = lw_sparse_nonzeros(A);
    ck_assert_int_eq(lw_sparse_nonzeros(B), n);
    ck_assert(memcmp(A->value, B->value, (size_t)n * 8) == 0 &&
              memcmp(A->index, B->index, (size_t)n * 4) == 0);
    double *x = dense_of(A), *y = dense_of(T);
    for (int i = 0; i < 13; i++)
        for (int j = 0; j < 21; j++) ck_assert_double_eq(x[j * 13 + i], y[i * 21 + j]);
    lw_free(x);
    lw_free(y);
    lw_sparse_free(A);
    lw_sparse_free(T);
    lw_sparse_free(B);
}
END_TEST

START_TEST(triplets_give_the_same_bytes_in_any_order)
{
    enum { COUNT = 60 };
    int32_t row[COUNT], column[COUNT], row2[COUNT], column2[COUNT];
    double value[COUNT], low[COUNT], value2[COUNT], low2[COUNT];
    uint64_t seed = 9;
    for (int t = 0; t < COUNT; t++) {
        row[t] = t % 4;
        column[t] = (t / 4) % 5;
        value[t] = next_number(&seed);
        low[t] = 1e-17 * next_number(&seed);
    }
    for (int t = 0; t < COUNT; t++) {
        int s = (t * 37 + 11) % COUNT;
        row2[t] = row[s], column2[t] = column[s], value2[t] = value[s], low2[t] = low[s];
    }
    lw_sparse *A, *B;
    int64_t repeated;
    ck_assert_int_eq(lw_sparse_from_triplets(4, 5, COUNT, row, column, value, low, 1, &A, &repeated, NULL),
                     LW_OK);
    ck_assert_int_eq(
        lw_sparse_from_triplets(4, 5, COUNT, row2, column2, value2, low2, 1, &B, &repeated, NULL), LW_OK);
    ck_assert_int_eq(lw_sparse_nonzeros(A), 20);
    ck_assert(memcmp(A->value, B->value, 160) == 0 && memcmp(A->low, B->low, 160) == 0);
    assert_sorted(A);
    ck_assert_double_eq_tol(A->value[0], value[0] + value[20] + value[40], 1e-15);
    lw_sparse_free(B);
    ck_assert_int_eq(lw_sparse_from_triplets(4, 5, COUNT, row, column, value, NULL, 0, &B, &repeated, NULL),
                     LW_BAD_SHAPE);
    ck_assert_int_eq(repeated, 20);
    ck_assert_ptr_null(B);
    row[3] = 4;
    ck_assert_int_eq(lw_sparse_from_triplets(4, 5, COUNT, row, column, value, NULL, 1, &B, &repeated, NULL),
                     LW_BAD_SHAPE);
    lw_sparse_free(A);
}
END_TEST

/* 0.1 + 0.2 with remainders is the double-double nearest 0.3. */
START_TEST(repeated_entries_keep_their_remainders)
{
    int32_t row[2] = {0, 0}, column[2] = {0, 0};
    double value[2] = {0.1, 0.2}, low[2] = {-5.551115123125783e-18, -1.1102230246251566e-17};
    lw_sparse *A;
    int64_t repeated;
    ck_assert_int_eq(lw_sparse_from_triplets(1, 1, 2, row, column, value, low, 1, &A, &repeated, NULL),
                     LW_OK);
    ck_assert_double_eq(A->value[0], 0.3);
    ck_assert_double_eq_tol(A->low[0] * 1e17, 1.1102230246251565, 1e-10);
    lw_sparse_free(A);
}
END_TEST

START_TEST(gram_is_the_upper_triangle_of_the_dense_one)
{
    lw_sparse *A = random_matrix(17, 9, 0.3, 1, 4), *C;
    double *weight = random_vector(17, 8), *a = dense_of(A);
    for (int weighted = 0; weighted < 2; weighted++) {
        ck_assert_int_eq(lw_sparse_gram(A, weighted ? weight : NULL, &C, NULL), LW_OK);
        assert_sorted(C);
        double *c = dense_of(C);
        for (int j = 0; j < 9; j++)
            for (int i = 0; i < 9; i++) {
                double sum = 0;
                for (int r = 0; r < 17; r++)
                    sum += a[i * 17 + r] * (weighted ? weight[r] : 1) * a[j * 17 + r];
                ck_assert_double_eq_tol(c[j * 9 + i], i <= j ? sum : 0, 1e-14);
            }
        lw_free(c);
        lw_sparse_free(C);
    }
    lw_free(a);
    lw_free(weight);
    lw_sparse_free(A);
}
END_TEST

START_TEST(stack_and_sum_match_dense)
{
    lw_sparse *A = random_matrix(6, 7, 0.4, 1, 5), *B = random_matrix(6, 7, 0.4, 1, 6), *S, *P;
    double *a = dense_of(A), *b = dense_of(B);
    ck_assert_int_eq(lw_sparse_stack(2, A, -3, B, &S, NULL), LW_OK);
    ck_assert_int_eq(lw_sparse_add(2, A, -3, B, &P, NULL), LW_OK);
    assert_sorted(P);
    assert_sorted(S);
    double *s = dense_of(S), *p = dense_of(P);
    for (int j = 0; j < 7; j++)
        for (int i = 0; i < 6; i++) {
            ck_assert_double_eq(s[j * 12 + i], 2 * a[j * 6 + i]);
            ck_assert_double_eq(s[j * 12 + 6 + i], -3 * b[j * 6 + i]);
            ck_assert_double_eq_tol(p[j * 6 + i], 2 * a[j * 6 + i] - 3 * b[j * 6 + i], 1e-15);
        }
    lw_sparse *T, *none;
    ck_assert_int_eq(lw_sparse_transpose(A, &T, NULL), LW_OK);
    ck_assert_int_eq(lw_sparse_stack(1, A, 1, T, &none, NULL), LW_BAD_SHAPE);
    ck_assert_int_eq(lw_sparse_add(1, A, 1, T, &none, NULL), LW_BAD_SHAPE);
    lw_free(a), lw_free(b), lw_free(s), lw_free(p);
    lw_sparse_free(A), lw_sparse_free(B), lw_sparse_free(S), lw_sparse_free(P), lw_sparse_free(T);
}
END_TEST

START_TEST(column_norms_are_safe)
{
    lw_sparse *A;
    ck_assert_int_eq(lw_sparse_new(2, 3, 4, 0, &A, NULL), LW_OK);
    A->index[0] = 0, A->index[1] = 1, A->index[2] = 0, A->index[3] = 1;
    A->value[0] = 3e200, A->value[1] = 4e200, A->value[2] = 3, A->value[3] = 4;
    A->start[1] = 2, A->start[2] = 2, A->start[3] = 4;
    double norm[3];
    lw_sparse_column_norms(A, norm);
    ck_assert_double_eq_tol(norm[0] / 5e200, 1, 1e-15);
    ck_assert_double_eq(norm[1], 0);
    ck_assert_double_eq(norm[2], 5);
    lw_sparse_free(A);
    ck_assert_int_eq(lw_sparse_new(INT64_C(1) << 40, 1, 1, 0, &A, NULL), LW_BAD_SHAPE);
    ck_assert_ptr_null(A);
}
END_TEST

START_TEST(failing_allocations_are_survived)
{
    lw_sparse *A = random_matrix(8, 9, 0.5, 1, 7), *out;
    int32_t row[3] = {0, 1, 1}, column[3] = {2, 0, 0};
    double value[3] = {1, 2, 3};
    int64_t repeated;
    for (int fail = 0; fail < 20; fail++) {
        countdown c = {fail, 0};
        lw_memory_set_gate(count_down, &c);
        lw_status gram = lw_sparse_gram(A, NULL, &out, NULL);
        lw_memory_set_gate(NULL, NULL);
        ck_assert(gram == (c.seen > fail ? LW_NO_MEMORY : LW_OK) && (gram == LW_OK) == (out != NULL));
        lw_sparse_free(out);
        c = (countdown){fail, 0};
        lw_memory_set_gate(count_down, &c);
        lw_status made =
            lw_sparse_from_triplets(2, 3, 3, row, column, value, value, 1, &out, &repeated, NULL);
        lw_memory_set_gate(NULL, NULL);
        ck_assert(made == (c.seen > fail ? LW_NO_MEMORY : LW_OK) && (made == LW_OK) == (out != NULL));
        lw_sparse_free(out);
    }
    lw_sparse_free(A);
}
END_TEST

Suite *suite_sparse(void)
{
    Suite *suite = suite_create("sparse");
    TCase *tests = tcase_create("sparse");
    tcase_add_test(tests, transpose_twice_is_the_matrix);
    tcase_add_test(tests, triplets_give_the_same_bytes_in_any_order);
    tcase_add_test(tests, repeated_entries_keep_their_remainders);
    tcase_add_test(tests, gram_is_the_upper_triangle_of_the_dense_one);
    tcase_add_test(tests, stack_and_sum_match_dense);
    tcase_add_test(tests, column_norms_are_safe);
    tcase_add_test(tests, failing_allocations_are_survived);
    tcase_set_timeout(tests, 60);
    suite_add_tcase(suite, tests);
    return suite;
}
