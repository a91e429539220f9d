/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "cases.h"
#include "matrix/dense.h"

#include <string.h>

Suite *suite_dense(void);

static double *copy_of(int64_t n, const double *x)
{
    double *y = LW_NEW_ARRAY(double, n);
    memcpy(y, x, (size_t)n * sizeof *y);
    return y;
}

/* rows x columns of rank r. */
static double *low_rank(int64_t rows, int64_t columns, int64_t r)
{
    double *a = random_vector(rows * r, 1), *b = random_vector(r * columns, 2),
           *c = LW_NEW_ARRAY(double, rows *columns);
    lw_dense_multiply(0, 0, rows, columns, r, 1, a, rows, b, r, 0, c, rows);
    lw_free(a);
    lw_free(b);
    return c;
}

/* A P = Q R by multiplying out, for full and for lower rank. */
START_TEST(qr_reproduces_the_matrix)
{
    int64_t m = _i & 1 ? 9 : 14, n = _i & 1 ? 14 : 9, r = _i & 2 ? 5 : 9;
    double *A = low_rank(m, n, r);
    lw_dense_qr qr;
    ck_assert_int_eq(lw_dense_qr_make(m, n, copy_of(m * n, A), 1e-12, &qr, NULL), LW_OK);
    ck_assert_int_eq(qr.rank, r);
    ck_assert(qr.rcond > 1e-6 && qr.rcond <= 1);
    double *c = LW_NEW_ZEROS(double, m *n), *ap = LW_NEW_ARRAY(double, m *n);
    for (int64_t j = 0; j < n; j++) {
        for (int64_t i = 0; i <= j && i < m; i++) c[j * m + i] = qr.factor[j * m + i];
        memcpy(ap + j * m, A + qr.pivot[j] * m, (size_t)m * sizeof *ap);
    }
    ck_assert_int_eq(lw_dense_qr_apply_q(&qr, n, c, NULL), LW_OK);
    ck_assert_double_lt(difference(m * n, c, ap), 1e-13);
    ck_assert_int_eq(lw_dense_qr_apply_qt(&qr, n, c, NULL), LW_OK);
    for (int64_t j = 0; j < n; j++)
        for (int64_t i = j + 1; i < m; i++) ck_assert_double_lt(fabs(c[j * m + i]), 1e-13);
    /* R' (R y) with R y = c, both ways. */
    double *y = random_vector(r, 3), *z = copy_of(r, y);
    lw_dense_qr_solve_r(&qr, 0, 1, z, r);
    for (int64_t i = 0; i < r; i++) {
        double sum = 0;
        for (int64_t j = i; j < r; j++) sum += qr.factor[j * m + i] * z[j];
        ck_assert_double_eq_tol(sum, y[i], 1e-12);
    }
    double *basis;
    ck_assert_int_eq(lw_dense_qr_null_space(&qr, &basis, NULL), LW_OK);
    double *zero = LW_NEW_ARRAY(double, m *n);
    lw_dense_multiply(0, 0, m, n - r, n, 1, A, m, basis, n, 0, zero, m);
    for (int64_t i = 0; i < m * (n - r); i++) ck_assert_double_lt(fabs(zero[i]), 1e-12);
    for (int64_t j = 0; j < n - r; j++)
        for (int64_t k = 0; k < n - r; k++) {
            double sum = 0;
            for (int64_t i = 0; i < n; i++) sum += basis[j * n + i] * basis[k * n + i];
            ck_assert_double_eq_tol(sum, j == k, 1e-13);
        }
    lw_free(A), lw_free(c), lw_free(ap), lw_free(y), lw_free(z), lw_free(basis), lw_free(zero);
    lw_dense_qr_clear(&qr);
}
END_TEST

/* The Hilbert matrix of order 3: det 1/2160, so prod s = 1/2160 (Choi, Amer. Math. Monthly 90:301, 1983);
 * inverse in whole numbers. */
static const double hilbert[9] = {1, 1. / 2, 1. / 3, 1. / 2, 1. / 3, 1. / 4, 1. / 3, 1. / 4, 1. / 5};
static const double hilbert_inverse[9] = {9, -36, 30, -36, 192, -180, 30, -180, 180};

START_TEST(hilbert_matrix)
{
    double A[9], u[9], s[3], vt[9], R[9], values[3], L[9];
    int64_t defect;
    memcpy(A, hilbert, sizeof A);
    ck_assert_int_eq(lw_dense_svd(3, 3, A, u, s, vt, NULL), LW_OK);
    ck_assert_double_eq_tol(s[0] * s[1] * s[2] * 2160, 1, 1e-12);
    memcpy(A, hilbert, sizeof A);
    ck_assert_int_eq(lw_dense_eigen(3, A, values, NULL), LW_OK);
    for (int i = 0; i < 3; i++) ck_assert_double_eq_tol(values[i], s[2 - i], 1e-14);
    memcpy(R, hilbert, sizeof R);
    ck_assert_int_eq(lw_dense_cholesky(3, R, &defect, NULL), LW_OK);
    double b[3] = {1 + 1 / 2. + 1 / 3., 1 / 2. + 1 / 3. + 1 / 4., 1 / 3. + 1 / 4. + 1 / 5.};
    lw_dense_cholesky_solve(3, R, 1, b);
    for (int i = 0; i < 3; i++) ck_assert_double_eq_tol(b[i], 1, 1e-12);
    for (int i = 0; i < 3; i++)
        for (int j = 0; j < 3; j++) L[j * 3 + i] = i >= j ? R[i * 3 + j] : 0;
    ck_assert_int_eq(lw_dense_cholesky_invert(3, R, NULL), LW_OK);
    for (int i = 0; i < 9; i++) ck_assert_double_eq_tol(R[i], hilbert_inverse[i], 1e-10);
    ck_assert_int_eq(lw_dense_invert_lower(3, L, 3, NULL), LW_OK);
    ck_assert_double_eq_tol(L[5], -180, 1e-10);
    memcpy(R, hilbert, sizeof R);
    R[4] = 0;
    ck_assert_int_eq(lw_dense_cholesky(3, R, &defect, NULL), LW_UNSOLVABLE);
    ck_assert_int_eq(defect, 1);
}
END_TEST

START_TEST(products_and_triangles)
{
    int64_t m = 5, n = 4;
    double *S = random_vector(m * m, 1), *B = random_vector(m * n, 2), *C = LW_NEW_ZEROS(double, m *n);
    lw_dense_symmetric_multiply(m, n, 2, S, m, B, m, 0, C, m);
    for (int64_t j = 0; j < n; j++)
        for (int64_t i = 0; i < m; i++) {
            double sum = 0;
            for (int64_t l = 0; l < m; l++) sum += (i >= l ? S[l * m + i] : S[i * m + l]) * B[j * m + l];
            ck_assert_double_eq_tol(C[j * m + i], 2 * sum, 1e-14);
        }
    for (int64_t i = 0; i < m; i++) S[i * m + i] = 2 + fabs(S[i * m + i]);
    for (int upper = 0; upper < 2; upper++)
        for (int transposed = 0; transposed < 2; transposed++) {
            double *x = copy_of(m, B);
            lw_dense_triangle_solve(m, S, upper, transposed, 1, x, m);
            for (int64_t i = 0; i < m; i++) {
                double sum = 0;
                for (int64_t j = 0; j < m; j++) {
                    int64_t a = transposed ? j : i, b = transposed ? i : j;
                    if (upper ? a <= b : a >= b) sum += S[b * m + a] * x[j];
                }
                ck_assert_double_eq_tol(sum, B[i], 1e-13);
            }
            lw_free(x);
        }
    double *X = copy_of(m * n, B), y[5] = {1, 1, 1, 1, 1};
    lw_dense_right_triangle_solve(n, m, S, m, 0, X, n); /* X (4 x 5) L = B */
    for (int64_t j = 0; j < m; j++)
        for (int64_t i = 0; i < n; i++) {
            double sum = 0;
            for (int64_t l = j; l < m; l++) sum += X[l * n + i] * S[j * m + l];
            ck_assert_double_eq_tol(sum, B[j * n + i], 1e-13);
        }
    lw_dense_vector(0, m, n, 1, B, m, B, 0, y);
    ck_assert_double_eq_tol(y[2], B[2] * B[0] + B[7] * B[1] + B[12] * B[2] + B[17] * B[3], 1e-14);
    double third = y[2];
    lw_dense_vector(0, m, 0, 1, B, m, B, 0.5, y);
    ck_assert_double_eq(y[2], 0.5 * third);
    lw_free(S), lw_free(B), lw_free(C), lw_free(X);
}
END_TEST

/* A straight line through (0,1), (1,3), (2,5), (3,7.4): intercept 0.92, slope 2.12 by hand. */
START_TEST(least_squares)
{
    double A[8] = {1, 1, 1, 1, 0, 1, 2, 3}, b[4] = {1, 3, 5, 7.4};
    ck_assert_int_eq(lw_dense_gels(4, 2, A, 1, b, NULL), LW_OK);
    ck_assert_double_eq_tol(b[0], 0.92, 1e-13);
    ck_assert_double_eq_tol(b[1], 2.12, 1e-13);
}
END_TEST

START_TEST(sizes_out_of_range_are_refused)
{
    double a = 1;
    lw_dense_qr qr;
    ck_assert_int_eq(lw_dense_qr_make(INT64_C(1) << 40, 1, NULL, -1, &qr, NULL), LW_BAD_SHAPE);
    ck_assert_int_eq(lw_dense_svd(1, INT64_C(1) << 33, &a, &a, &a, &a, NULL), LW_BAD_SHAPE);
    ck_assert_int_eq(lw_dense_eigen(-1, &a, &a, NULL), LW_BAD_SHAPE);
}
END_TEST

START_TEST(failing_allocations_are_survived)
{
    for (int fail = 0; fail < 8; fail++) {
        double A[9], u[9], s[3], vt[9], b[3] = {1, 2, 3};
        double *own = copy_of(9, hilbert);
        lw_dense_qr qr;
        countdown c = {fail, 0};
        lw_memory_set_gate(count_down, &c);
        lw_status made = lw_dense_qr_make(3, 3, own, 0.5, &qr, NULL);
        double *basis = NULL;
        lw_status null = made ? LW_NO_MEMORY : lw_dense_qr_null_space(&qr, &basis, NULL);
        lw_memory_set_gate(NULL, NULL);
        ck_assert(made == LW_OK || made == LW_NO_MEMORY);
        ck_assert((null == LW_OK) == (basis != NULL));
        lw_free(basis);
        lw_dense_qr_clear(&qr);
        memcpy(A, hilbert, sizeof A);
        c = (countdown){fail, 0};
        lw_memory_set_gate(count_down, &c);
        lw_status svd = lw_dense_svd(3, 3, A, u, s, vt, NULL), gels = lw_dense_gels(3, 3, A, 1, b, NULL);
        lw_status eigen = lw_dense_eigen(3, A, s, NULL);
        lw_memory_set_gate(NULL, NULL);
        ck_assert_int_eq((svd != 0) + (gels != 0) + (eigen != 0), c.seen > fail);
    }
}
END_TEST

Suite *suite_dense(void)
{
    Suite *suite = suite_create("dense");
    TCase *tests = tcase_create("dense");
    tcase_add_loop_test(tests, qr_reproduces_the_matrix, 0, 4);
    tcase_add_test(tests, hilbert_matrix);
    tcase_add_test(tests, products_and_triangles);
    tcase_add_test(tests, least_squares);
    tcase_add_test(tests, sizes_out_of_range_are_refused);
    tcase_add_test(tests, failing_allocations_are_survived);
    tcase_set_timeout(tests, 60);
    suite_add_tcase(suite, tests);
    return suite;
}
