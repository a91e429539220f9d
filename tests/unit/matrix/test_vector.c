/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "cases.h"
#include "matrix/vector.h"

#include <float.h>
#include <string.h>

Suite *suite_vector(void);

START_TEST(sums_match_closed_forms)
{
    int64_t n = 100001;
    double *x = LW_NEW_ARRAY(double, n), *y = LW_NEW_ARRAY(double, n);
    for (int64_t i = 0; i < n; i++) x[i] = (double)i, y[i] = 1;
    ck_assert_double_eq(lw_dot(n, x, y, NULL), 0.5 * (double)n * (double)(n - 1));
    ck_assert_double_eq_tol(lw_norm(n, y, NULL), sqrt((double)n), 1e-12);
    ck_assert_double_eq(lw_norm_max(n, x), (double)(n - 1));
    ck_assert_double_eq(lw_dot(0, x, y, NULL), 0);
    ck_assert_double_eq(lw_norm(0, x, NULL), 0);
    lw_free(x);
    lw_free(y);
}
END_TEST

START_TEST(norm_neither_overflows_nor_underflows)
{
    double large[2] = {3e300, 4e300}, small[2] = {3e-300, 4e-300}, tiny[2] = {DBL_TRUE_MIN, 0},
           odd[2] = {nan(""), 1};
    ck_assert_double_eq_tol(lw_norm(2, large, NULL) / 5e300, 1, 1e-15);
    ck_assert_double_eq_tol(lw_norm(2, small, NULL) / 5e-300, 1, 1e-15);
    ck_assert_double_eq(lw_norm(2, tiny, NULL), DBL_TRUE_MIN);
    ck_assert(isnan(lw_norm(2, odd, NULL)));
    large[0] = HUGE_VAL;
    ck_assert(isinf(lw_norm(2, large, NULL)));
}
END_TEST

START_TEST(updates_do_what_they_say)
{
    double x[3] = {1, 2, 3}, y[3] = {10, 20, 30};
    lw_add_scaled(3, 2, x, y, NULL);
    ck_assert_double_eq(y[2], 36);
    lw_scale_add(3, -1, x, 0.5, y, NULL);
    ck_assert_double_eq(y[0], 5);
    lw_scale(3, 2, y, NULL);
    ck_assert_double_eq(y[0], 10);
    lw_copy(3, x, y);
    ck_assert_double_eq(y[1], 2);
    lw_fill(3, 7, y);
    ck_assert_double_eq(y[2], 7);
}
END_TEST

START_TEST(bytes_do_not_depend_on_the_team)
{
    int64_t n = 300007;
    double *x = random_vector(n, 5), *y = random_vector(n, 6), *z = LW_NEW_ARRAY(double, n), dot = 0,
           norm = 0;
    double *first = LW_NEW_ARRAY(double, n);
    for (int threads = 1; threads <= 4; threads++) {
        lw_team *team;
        ck_assert_int_eq(lw_team_new(threads, &team, NULL), LW_OK);
        double d = lw_dot(n, x, y, team), m = lw_norm(n, x, team);
        lw_copy(n, y, z);
        lw_scale_add(n, 0.3, x, 0.7, z, team);
        lw_add_scaled(n, 0.1, x, z, team);
        lw_scale(n, 1.7, z, team);
        if (threads == 1) {
            dot = d;
            norm = m;
            lw_copy(n, z, first);
        }
        ck_assert(memcmp(&d, &dot, sizeof d) == 0 && memcmp(&m, &norm, sizeof m) == 0);
        ck_assert(memcmp(z, first, (size_t)n * sizeof *z) == 0);
        lw_team_free(team);
    }
    lw_free(x);
    lw_free(y);
    lw_free(z);
    lw_free(first);
}
END_TEST

Suite *suite_vector(void)
{
    Suite *suite = suite_create("vector");
    TCase *tests = tcase_create("vector");
    tcase_add_test(tests, sums_match_closed_forms);
    tcase_add_test(tests, norm_neither_overflows_nor_underflows);
    tcase_add_test(tests, updates_do_what_they_say);
    tcase_add_test(tests, bytes_do_not_depend_on_the_team);
    tcase_set_timeout(tests, 60);
    suite_add_tcase(suite, tests);
    return suite;
}
