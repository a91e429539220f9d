/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "tradeoff/search.h"

#include "check_tradeoff.h"

#include <math.h>

static int calls;

static double quartic(void *state, double x)
{
    (void)state;
    calls++;
    return pow(x - 0.3, 4) + 2 * pow(x - 0.3, 2) + 1;
}

static double peaked(void *state, double x)
{
    (void)state;
    return -1 / (1 + 1e4 * pow(x + 1.25, 2));
}

static double cubic(void *state, double x)
{
    (void)state;
    calls++;
    return x * x * x - 2;
}

static double sudden(void *state, double x)
{
    (void)state;
    return x < 0.123 ? -1 : 1e6 * (x - 0.123);
}

START_TEST(finds_minima)
{
    calls = 0;
    ck_assert_double_eq_tol(lw_search_minimum(quartic, NULL, -2, 0, 3, quartic(NULL, 0), 1e-8, 60), 0.3,
                            1e-7);
    ck_assert_int_le(calls, 40);
    ck_assert_double_eq_tol(lw_search_minimum(peaked, NULL, -2, -1.2, -1, peaked(NULL, -1.2), 1e-8, 80),
                            -1.25, 1e-7);
    /* at most so many evaluations, and never outside the bracket */
    double x = lw_search_minimum(quartic, NULL, 1, 1.5, 2, quartic(NULL, 1.5), 1e-3, 5);
    ck_assert_double_ge(x, 1);
    ck_assert_double_le(x, 1.5);
}
END_TEST

START_TEST(finds_roots)
{
    calls = 0;
    ck_assert_double_eq_tol(lw_search_root(cubic, NULL, 0, -2, 5, 123, 1e-13, 60), cbrt(2), 1e-12);
    ck_assert_int_le(calls, 40);
    ck_assert_double_eq_tol(lw_search_root(sudden, NULL, -3, -1, 4, sudden(NULL, 4), 1e-10, 100), 0.123,
                            1e-9);
}
END_TEST

Suite *suite_search(void)
{
    Suite *suite = suite_create("search");
    TCase *tcase = tcase_create("search");
    tcase_add_test(tcase, finds_minima);
    tcase_add_test(tcase, finds_roots);
    suite_add_tcase(suite, tcase);
    return suite;
}
