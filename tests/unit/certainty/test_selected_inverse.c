/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "check_certainty.h"

#include "certainty/selected_inverse.h"
#include "core/memory.h"
#include "matrix/dense.h"
#include "unit/support.h"

#include <math.h>

/* A'A of a random m x n matrix of k entries a row near each other, plus `shift` I; condition grows as shift
 * falls. */
static lw_sparse *random_normal(int64_t n, int64_t reach, double shift, uint64_t seed)
{
    int64_t m = 3 * n, k = 4, count = m * k + n;
    int32_t *row = LW_NEW_ARRAY(int32_t, count), *column = LW_NEW_ARRAY(int32_t, count);
    double *value = LW_NEW_ARRAY(double, count);
    lw_sparse *A = NULL, *N = NULL;
    lw_error error = {0};
    for (int64_t e = 0; e < m * k; e++) {
        int64_t i = e / k, centre = i % n;
        int64_t j = centre + (int64_t)(next_random(&seed) * (double)reach);
        row[e] = (int32_t)i;
        column[e] = (int32_t)((j % n + n) % n);
        value[e] = next_random(&seed);
    }
    for (int64_t j = 0; j < n; j++) {
        row[m * k + j] = (int32_t)(m + j);
        column[m * k + j] = (int32_t)j;
        value[m * k + j] = sqrt(shift);
    }
    ck_assert_int_eq(lw_sparse_from_triplets(m + n, n, count, row, column, value, NULL, 1, &A, NULL, &error),
                     LW_OK);
    ck_assert_int_eq(lw_sparse_gram(A, NULL, &N, &error), LW_OK);
    lw_sparse_free(A);
    lw_free(row);
    lw_free(column);
    lw_free(value);
    return N;
}

static double *dense_inverse(const lw_sparse *N)
{
    int64_t n = N->columns, defect = 0;
    lw_error error = {0};
    double *D = LW_NEW_ARRAY(double, n *n);
    lw_sparse_to_dense(N, D);
    ck_assert_int_eq(lw_dense_cholesky(n, D, &defect, &error), LW_OK);
    ck_assert_int_eq(lw_dense_cholesky_invert(n, D, &error), LW_OK);
    return D;
}

/* Every entry of the pattern against the dense inverse, relative to sqrt(Q_ii Q_jj). */
static double worst_difference(const lw_sparse *N, bool in_place)
{
    lw_cholesky *factor = NULL;
    lw_cholesky_size size;
    lw_factor_view view;
    lw_selected_inverse *inverse = NULL;
    lw_error error = {0};
    int64_t defect, n = N->columns;
    ck_assert_int_eq(lw_cholesky_analyse(N, NULL, &factor, &size, &error), LW_OK);
    ck_assert_int_eq(lw_cholesky_factorize(factor, N, NULL, &defect, &error), LW_OK);
    ck_assert_int_eq(lw_cholesky_view(factor, &view, &error), LW_OK);
    ck_assert_int_eq(lw_selected_inverse_new(&view, &inverse, &error), LW_OK);
    ck_assert_int_eq(lw_selected_inverse_run(inverse, &view, in_place, NULL, &error), LW_OK);
    double *D = dense_inverse(N), worst = 0;
    int64_t known = 0;
    for (int64_t j = 0; j < n; j++) {
        for (int64_t i = 0; i < n; i++) {
            double q = lw_selected_inverse_entry(inverse, i, j);
            if (isnan(q)) continue;
            known++;
            worst = fmax(worst, fabs(q - D[i + j * n]) / sqrt(D[i + i * n] * D[j + j * n]));
            ck_assert(q == lw_selected_inverse_entry(inverse, j, i));
        }
        for (int64_t e = N->start[j]; e < N->start[j + 1]; e++)
            ck_assert(!isnan(lw_selected_inverse_entry(inverse, N->index[e], j)));
    }
    ck_assert_int_ge(known, 2 * lw_sparse_nonzeros(N) - n);
    lw_free(D);
    lw_selected_inverse_free(inverse);
    lw_cholesky_free(factor);
    return worst;
}

START_TEST(test_dense_inverse)
{
    static const int64_t sizes[] = {1, 2, 7, 60, 300, 900, 2000};
    int64_t n = sizes[_i];
    lw_sparse *N = random_normal(n, n / 8 + 1, 0.1, 7 + (uint64_t)_i);
    ck_assert_double_le(worst_difference(N, _i % 2 == 0), 1e-11);
    lw_sparse_free(N);
}
END_TEST

START_TEST(test_narrow_band)
{
    lw_sparse *N = random_normal(1500, 3, 0.01, 99);
    ck_assert_double_le(worst_difference(N, true), 1e-11);
    lw_sparse_free(N);
}
END_TEST

START_TEST(test_failing_memory_is_told)
{
    lw_sparse *N = random_normal(50, 9, 1, 5);
    lw_cholesky *factor = NULL;
    lw_cholesky_size size;
    lw_factor_view view;
    lw_selected_inverse *inverse = NULL;
    lw_error error = {0};
    int64_t defect;
    ck_assert_int_eq(lw_cholesky_analyse(N, NULL, &factor, &size, &error), LW_OK);
    ck_assert_int_eq(lw_cholesky_factorize(factor, N, NULL, &defect, &error), LW_OK);
    ck_assert_int_eq(lw_cholesky_view(factor, &view, &error), LW_OK);
    lw_sparse_free(N);
    view.columns = INT64_MAX / 4;
    ck_assert_int_eq(lw_selected_inverse_new(&view, &inverse, &error), LW_NO_MEMORY);
    ck_assert_ptr_null(inverse);
    lw_cholesky_free(factor);
}
END_TEST

Suite *suite_selected_inverse(void)
{
    Suite *suite = suite_create("selected_inverse");
    TCase *cases = tcase_create("selected_inverse");
    tcase_set_timeout(cases, 60);
    tcase_add_loop_test(cases, test_dense_inverse, 0, 7);
    tcase_add_test(cases, test_narrow_band);
    tcase_add_test(cases, test_failing_memory_is_told);
    suite_add_tcase(suite, cases);
    return suite;
}
