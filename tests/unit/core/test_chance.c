/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Tables: quantiles computed in R to 12 digits; the normal checked against a 30-digit inverse error function,
 * tau against the regularised incomplete beta function, chi-square, t and F against SciPy, F with two
 * numerator degrees of freedom against its closed form. The per-test tau formula is that of Pope, NOAA TR NOS
 * 65 NGS 1, 1976; the shift 4.1321 and the B-method are those of Baarda, Netherlands Geodetic Commission
 * 2(5), 1968. */
#include "core/chance.h"
#include "critical_values.h"

#include "check_core.h"

#include <math.h>
#include <stdlib.h>

#define CLOSE(value, expected) close_to(value, expected, __LINE__, i)

static void close_to(double value, double expected, int line, size_t row)
{
    if (!(fabs(value - expected) <= 2e-11 * fabs(expected)))
        ck_abort_msg("line %d, row %zu: %.15g, expected %.12g", line, row, value, expected);
}

START_TEST(chi_square_table)
{
    static const double p[] = {0.025, 0.05, 0.95, 0.975, 0.99, 0.999};
    for (size_t i = 0; i < ROWS(chi_square); i++) {
        const double *row = chi_square[i];
        for (int j = 0; j < 6; j++) {
            CLOSE(lw_chi2_quantile(p[j], row[0]), row[j + 1]);
            ck_assert_double_eq_tol(lw_chi2_cdf(row[j + 1], row[0]), p[j], 1e-10);
            ck_assert_double_eq_tol(lw_chi2_upper(row[j + 1], row[0]), 1.0 - p[j], 1e-10);
        }
        CLOSE(lw_chi2_quantile(0.025, row[0]) / row[0], row[7]);
        CLOSE(lw_chi2_quantile(0.975, row[0]) / row[0], row[8]);
    }
}
END_TEST

START_TEST(b_method_table)
{
    for (size_t i = 0; i < ROWS(b_method); i++) {
        double alpha = lw_b_method_alpha(0.001, 0.80, b_method[i][0]);
        CLOSE(alpha, b_method[i][1]);
        CLOSE(lw_chi2_quantile(1.0 - alpha, b_method[i][0]) / b_method[i][0], b_method[i][2]);
    }
}
END_TEST

START_TEST(region_multipliers)
{
    for (size_t i = 0; i < ROWS(known_variance); i++)
        for (int d = 1; d <= 3; d++)
            CLOSE(lw_region_multiplier(known_variance[i][0], d, 0.0), known_variance[i][d]);
    for (size_t i = 0; i < ROWS(content); i++)
        for (int k = 1; k <= 3; k++)
            ck_assert_double_eq_tol(lw_chi2_cdf(k * k, content[i][0]), content[i][k], 1e-11);
    for (size_t i = 0; i < ROWS(t_and_f); i++) {
        const double *row = t_and_f[i];
        CLOSE(lw_t_quantile(0.975, row[0]), row[1]);
        CLOSE(lw_t_quantile(0.005, row[0]), -row[2]);
        CLOSE(lw_region_multiplier(0.95, 1, row[0]), row[1]);
        CLOSE(lw_f_quantile(0.95, 2.0, row[0]), row[3]);
        CLOSE(lw_region_multiplier(0.95, 2, row[0]), row[4]);
        CLOSE(lw_f_quantile(0.95, 3.0, row[0]), row[5]);
        CLOSE(lw_region_multiplier(0.95, 3, row[0]), row[6]);
    }
}
END_TEST

START_TEST(single_test_criticals)
{
    for (size_t i = 0; i < ROWS(noncentrality); i++) {
        const double *row = noncentrality[i];
        double delta = lw_noncentrality(row[0], row[1]);
        CLOSE(lw_w_critical(row[0]), row[2]);
        CLOSE(delta, row[3]);
        CLOSE(delta * delta, row[4]);
    }
    static const double alpha[] = {0.05, 0.01, 0.005, 0.001};
    for (size_t i = 0; i < ROWS(tau_per_test); i++)
        for (int j = 0; j < 4; j++)
            CLOSE(lw_tau_critical(alpha[j], tau_per_test[i][0]), tau_per_test[i][j + 1]);
    for (size_t i = 0; i < ROWS(grubbs); i++) {
        double n = grubbs[i][0];
        CLOSE(sqrt((n - 1.0) / n) * lw_tau_critical(0.1 / n, n - 1.0), grubbs[i][1]);
    }
    ck_assert(isnan(lw_tau_critical(0.05, 1.0)));
}
END_TEST

START_TEST(family_wise_criticals)
{
    for (size_t i = 0; i < ROWS(tau_family); i++) {
        const double *row = tau_family[i];
        double single = lw_family_alpha(row[3], row[0]);
        CLOSE(lw_tau_critical(row[3] / row[0], row[2]), row[4]);
        CLOSE(lw_tau_critical(single, row[2]), row[5]);
        CLOSE(lw_w_critical(row[3] / row[0]), row[6]);
        CLOSE(lw_w_critical(single), row[7]);
    }
}
END_TEST

START_TEST(global_tests_agree)
{
    for (size_t i = 0; i < ROWS(global_tests); i++) {
        const double *row = global_tests[i];
        CLOSE(lw_chi2_upper(row[1], row[0]), row[2]);
        ck_assert_double_eq_tol(lw_chi2_two_sided(row[1], row[0]), 2.0 * fmin(row[2], 1.0 - row[2]), 1e-11);
    }
}
END_TEST

START_TEST(domains_and_limits)
{
    ck_assert(isnan(lw_normal_quantile(-0.1)) && isnan(lw_normal_quantile(1.1)));
    ck_assert(isinf(lw_normal_quantile(0.0)) && isinf(lw_normal_quantile(1.0)));
    ck_assert(isnan(lw_chi2_quantile(0.5, 0.0)) && isnan(lw_chi2_quantile(2.0, 3.0)));
    ck_assert(isnan(lw_t_quantile(0.5, -1.0)) && isnan(lw_f_quantile(0.5, 0.0, 1.0)));
    ck_assert(isnan(lw_region_multiplier(0.95, 4, 0.0)) && isnan(lw_w_critical(0.0)));
    ck_assert(isnan(lw_b_method_alpha(0.0, 0.8, 3.0)) && isnan(lw_family_alpha(2.0, 3.0)));
    ck_assert_double_eq(lw_normal_cdf(0.0), 0.5);
    ck_assert_double_eq(lw_t_quantile(0.5, 4.0), 0.0);
    ck_assert_double_eq(lw_chi2_quantile(0.0, 4.0), 0.0);
    ck_assert_double_eq(lw_chi2_upper(0.0, 4.0), 1.0);
    ck_assert_double_eq(lw_chi2_upper(1e6, 4.0), 0.0);
    /* P(Z < -10) = 7.61985302416052606597e-24: Abramowitz & Stegun, table 26.2, continued in 30 digits */
    ck_assert_double_eq_tol(lw_normal_cdf(-10.0) / 7.61985302416052607e-24, 1.0, 1e-13);
    ck_assert_double_eq_tol(lw_normal_quantile(7.61985302416052607e-24), -10.0, 1e-13);
    for (double dof = 0.5; dof < 3e6; dof *= 7.0)
        for (double p = 1e-6; p < 0.999; p = p < 0.09 ? 10.0 * p : p + 0.2) {
            ck_assert_double_eq_tol(lw_chi2_cdf(lw_chi2_quantile(p, dof), dof) / p, 1.0, 1e-8);
            double f = lw_f_quantile(p, 1.0, dof), t = lw_t_quantile(0.5 + 0.5 * p, dof);
            if (dof >= 1.0) ck_assert_double_eq_tol(f / (t * t), 1.0, 1e-8);
        }
}
END_TEST

/* Cornish-Fisher series of chi-square to 1/n^(3/2): Goldberg & Levine, Annals of Mathematical Statistics
 * 17:216-225, 1946. Large networks have such degrees of freedom. */
START_TEST(many_degrees_of_freedom)
{
    for (double n = 1e4; n < 2e7; n *= 10.0)
        for (double p = 0.0005; p < 1.0; p += 0.24975) {
            double z = lw_normal_quantile(p), z3 = z * z * z, root = sqrt(2.0 * n);
            double x = n + root * z + 2.0 / 3.0 * (z * z - 1.0) + (z3 - 7.0 * z) / (9.0 * root) -
                       (6.0 * z * z3 + 14.0 * z * z - 32.0) / (405.0 * n) +
                       (9.0 * z * z * z3 + 256.0 * z3 - 433.0 * z) / (4860.0 * n * root);
            ck_assert_double_eq_tol(lw_chi2_quantile(p, n) / x, 1.0, 1e-8);
            ck_assert_double_eq_tol(lw_t_quantile(p, n * n) - z, 0.0, 1e-6);
            ck_assert_double_eq_tol(lw_t_quantile(p, 999999.0), lw_t_quantile(p, 1000001.0), 1e-9);
            ck_assert_double_eq_tol(3.0 * lw_f_quantile(p, 3.0, n * n) / lw_chi2_quantile(p, 3.0), 1.0, 1e-6);
        }
    ck_assert_double_eq(lw_t_quantile(0.975, HUGE_VAL), lw_normal_quantile(0.975));
    ck_assert_double_eq(lw_f_quantile(0.95, 3.0, HUGE_VAL), lw_chi2_quantile(0.95, 3.0) / 3.0);
}
END_TEST

START_TEST(streams_depend_on_seed_and_stream_alone)
{
    lw_random *a, *b, *c, *d;
    ck_assert_int_eq(lw_random_new(1, 2, &a, NULL), LW_OK);
    ck_assert_int_eq(lw_random_new(1, 2, &b, NULL), LW_OK);
    ck_assert_int_eq(lw_random_new(1, 3, &c, NULL), LW_OK);
    ck_assert_int_eq(lw_random_new(2, 1, &d, NULL), LW_OK);
    for (int i = 0; i < 100; i++) {
        double x = lw_random_normal(a);
        ck_assert_double_eq(x, lw_random_normal(b));
        ck_assert(x != lw_random_normal(c) && x != lw_random_normal(d));
    }
    lw_random_free(a);
    lw_random_free(b);
    lw_random_free(c);
    lw_random_free(d);
    lw_random_free(NULL);
}
END_TEST

/* Moments within five standard errors. */
START_TEST(random_numbers_have_their_moments)
{
    enum { count = 200000 };
    lw_random *random;
    ck_assert_int_eq(lw_random_new(20260401, 0, &random, NULL), LW_OK);
    double normal = 0.0, square = 0.0, fourth = 0.0, uniform = 0.0, sign = 0.0, below[7] = {0.0};
    for (int i = 0; i < count; i++) {
        double x = lw_random_normal(random), u = lw_random_uniform(random), s = lw_random_sign(random);
        uint64_t k = lw_random_below(random, 7);
        ck_assert(u >= 0.0 && u < 1.0 && fabs(s) == 1.0 && k < 7);
        normal += x;
        square += x * x;
        fourth += x * x * x * x;
        uniform += u;
        sign += s;
        below[k] += 1.0;
    }
    double error = 5.0 / sqrt(count);
    ck_assert(fabs(normal / count) < error);
    ck_assert(fabs(square / count - 1.0) < error * sqrt(2.0));
    ck_assert(fabs(fourth / count - 3.0) < error * sqrt(96.0));
    ck_assert(fabs(uniform / count - 0.5) < error / sqrt(12.0));
    ck_assert(fabs(sign / count) < error);
    for (int k = 0; k < 7; k++) ck_assert(fabs(below[k] / count - 1.0 / 7.0) < error * sqrt(6.0) / 7.0);
    ck_assert_uint_eq(lw_random_below(random, 1), 0);
    ck_assert_uint_eq(lw_random_below(random, 0), 0);
    lw_random_free(random);
}
END_TEST

Suite *suite_chance(void)
{
    Suite *suite = suite_create("chance");
    TCase *cases = tcase_create("chance");
    tcase_set_timeout(cases, 60.0);
    tcase_add_test(cases, chi_square_table);
    tcase_add_test(cases, b_method_table);
    tcase_add_test(cases, region_multipliers);
    tcase_add_test(cases, single_test_criticals);
    tcase_add_test(cases, family_wise_criticals);
    tcase_add_test(cases, global_tests_agree);
    tcase_add_test(cases, domains_and_limits);
    tcase_add_test(cases, many_degrees_of_freedom);
    tcase_add_test(cases, streams_depend_on_seed_and_stream_alone);
    tcase_add_test(cases, random_numbers_have_their_moments);
    suite_add_tcase(suite, cases);
    return suite;
}
