/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Levelling nets with known answers. The values were recomputed in 50-digit arithmetic from textbook inputs
 * ("Adjustment Computations", Wiley, chapter on level nets: third, first and second worked examples) and
 * checked in R. */
#include "check_certainty.h"

#include "core/memory.h"
#include "unit/support.h"

#include <math.h>

#define H_A 437.596

/* Heights of B, C, D from six lines and the height of A. */
static const double six_lines[] = {1, 0, 0, -1, 1, 0, 0, -1, 1, 0, 0, -1, -1, 0, 1, 0, 1, 0};
static const double six_values[] = {10.509 + H_A, 5.360, -8.523, -7.348 - H_A, -3.167, 15.881 + H_A};
static const double six_sigmas[] = {0.006, 0.004, 0.005, 0.003, 0.004, 0.012};

static void assert_all(int64_t n, const double *x, const double *expected, double relative)
{
    for (int64_t i = 0; i < n; i++) ck_close(x[i], expected[i], relative);
}

START_TEST(test_six_lines_stated)
{
    static const double sigma[] = {0.00352486925770843, 0.00404843468320859, 0.00270382244130107};
    static const double redundancy[] = {0.654869353223945, 0.329448448211297, 0.509174697552140,
                                        0.187704911768527, 0.432620807189967, 0.886181782054123};
    static const double w[] = {0.764447476582361, -0.106252400423698, -0.522013470252961,
                               0.303650200418305, 0.719739166607060,  -0.755299527923125};
    static const double detectable[] = {0.0306372500763913, 0.0287966602600246, 0.0289542594559502,
                                        0.0286127302551468, 0.0251294020148201, 0.0526739275040204};
    static const double shift[] = {0.0105738539343047, 0.0132230168748964, 0.0123633530582798,
                                   0.0232419802471478, 0.0111449797684662, 0.00599525256071790};
    static const double bias[] = {2.99978613708325, 5.89519557165120, 4.05700860493417,
                                  8.59597135230667, 4.73215395419607, 1.48088163200063};
    lw_problem *p = problem_from_dense(6, 3, six_lines, six_values, six_sigmas);
    lw_certainty_options options = default_options();
    adjusted a = adjust(p, _i ? "cholesky" : "dense", NULL, 0, 0, &options);
    const lw_certainty *c = a.certainty;
    ck_close(a.estimate->x[0], 448.108711728787, 1e-14);
    assert_all(3, c->sigma, sigma, 1e-13);
    assert_all(6, c->redundancy, redundancy, 1e-12);
    assert_all(6, c->standardized, w, 1e-9);
    assert_all(6, c->detectable, detectable, 1e-11);
    assert_all(6, c->bias_ratio, bias, 1e-11);
    for (int i = 0; i < 6; i++) ck_close(fabs(c->largest_shift[i]), shift[i], 1e-11);
    ck_close(c->delta0, 4.13214796506, 1e-11);
    ck_close(c->test.chi_square, 1.27212282860396, 1e-9);
    ck_close(c->test.variance_factor, 0.424040942867988, 1e-9);
    ck_assert_double_eq(c->test.degrees_of_freedom, 3);
    ck_close(c->test.probability, 2 * (1 - 0.735763188196), 1e-9);
    ck_close(c->test.lower, 0.2157952826, 1e-9);
    ck_close(c->test.upper, 9.348403604, 1e-9);
    ck_assert(c->test.applies && !c->test.rejected);
    ck_assert_int_eq(c->inseparable_count, 0);
    ck_close(c->interval_high[0] - a.estimate->x[0], 1.95996398454 * sigma[0], 1e-9);
    ck_close(c->predicted_sigma[5], sigma[1], 1e-12);
    for (int j = 0; j < 3; j++) ck_close(c->resolution[j], 1.0, 1e-15);
    adjusted_clear(&a);
    lw_problem_free(p);
}
END_TEST

START_TEST(test_six_lines_estimated)
{
    static const double sigma[] = {0.00229533938566305, 0.00263627695079227, 0.00176068662058482};
    static const double tau[] = {1.17393420169957,  -0.163167948997237, -0.801637110789535,
                                 0.466304574929909, 1.10527727524226,   -1.15988602947657};
    lw_problem *p = problem_from_dense(6, 3, six_lines, six_values, six_sigmas);
    lw_certainty_options options = default_options();
    options.variance_estimated = true;
    options.covariance_count = -1;
    adjusted a = adjust(p, _i ? "cholesky" : "dense", NULL, 0, 0, &options);
    const lw_certainty *c = a.certainty;
    assert_all(3, c->sigma, sigma, 1e-10);
    assert_all(6, c->standardized, tau, 1e-9);
    ck_close(c->critical, 1.73031875676,
             1e-10); /* tau, 3 degrees of freedom, 0.001: R, see the table of Pope 1976 */
    ck_close(c->family_critical, 1.71730682101, 1e-9); /* 0.05 for the six together */
    ck_close(c->interval_multiplier, 3.18244630528, 1e-10);
    ck_assert_int_eq(c->covariance_count, 6);
    ck_close(c->covariance[1].covariance, 0.424040942867988 * 9.04285091976247e-6, 1e-9);
    adjusted_clear(&a);
    lw_problem_free(p);
}
END_TEST

/* The same net with all heights unknown. */
START_TEST(test_free_network)
{
    static const double lines[] = {-1, 1, 0, 0,  0, -1, 1, 0, 0,  0, -1, 1,
                                   1,  0, 0, -1, 0, -1, 0, 1, -1, 0, 1,  0};
    static const double values[] = {10.509, 5.360, -8.523, -7.348, -3.167, 15.881};
    static const double prior[] = {437.596, 448.105, 453.477, 444.944};
    static const double Q[] = {4.76862643199413e-6, 3.79522961581670e-6, 5.58465100994276e-6,
                               2.90216967649734e-6};
    static const double sigma[] = {0.00142200311125117, 0.00126859479137013, 0.00153886993597405,
                                   0.00110934159120841};
    static const double redundancy[] = {0.654869353223945, 0.329448448211297, 0.509174697552140,
                                        0.187704911768527, 0.432620807189967, 0.886181782054123};
    lw_problem *p = problem_from_dense(6, 4, lines, values, six_sigmas);
    problem_set_prior(p, prior);
    lw_certainty_options options = default_options();
    options.covariance_count = -1;
    adjusted a = adjust(p, _i ? "cholesky" : "dense", NULL, 1, 0, &options);
    const lw_certainty *c = a.certainty;
    for (int j = 0; j < 4; j++) ck_close(c->sigma[j], sqrt(Q[j]), 1e-12);
    ck_close(c->covariance[1].covariance, -1.93042361806357e-6, 1e-11);
    ck_close(c->covariance[5].covariance, -6.74472101429892e-7, 1e-11);
    assert_all(6, c->redundancy, redundancy, 1e-12);
    ck_assert_double_eq(c->test.degrees_of_freedom, 3);
    double trace = 0;
    for (int j = 0; j < 4; j++) trace += c->resolution[j];
    ck_close(trace, 3.0, 1e-13);
    adjusted_clear(&a);
    options.variance_estimated = true;
    a = adjust(p, _i ? "cholesky" : "dense", NULL, 1, 0, &options);
    assert_all(4, a.certainty->sigma, sigma, 1e-10);
    adjusted_clear(&a);
    lw_problem_free(p);
}
END_TEST

/* Seven lines between two benchmarks, unweighted and weighted 12 / length. */
START_TEST(test_two_benchmarks)
{
    static const double lines[] = {1, 0, 0, -1, 0, 0, 0, 0, 1, 0, 0, -1, -1, 1, 0, 0, 1, 0, 0, -1, 1};
    static const double values[] = {105.10, 2.34 - 107.5, 107.5 - 1.25, -6.13 - 100.0,
                                    -0.68,  107.5 - 3.00, 1.70};
    static const double length[] = {4, 3, 2, 3, 2, 2, 2};
    static const double plain_sigma[] = {0.0309340605122128, 0.0328105259367310, 0.0309340605122128};
    static const double plain_tau[] = {1.03852162232847,  0.483033312710914, -1.58193409912824,
                                       -1.46117577095052, 0.633354119555793, -0.452481310655911,
                                       0.137685678164303};
    static const double sigma[] = {0.0327560681401172, 0.0297593309363261, 0.0290351511103352};
    static const double tau[] = {0.959514491008403, 0.226208830198688,  -1.61191507399921, -1.49114057574942,
                                 0.675352730033368, -0.336453133210739, 0.274146997430972};
    double sigmas[7];
    for (int i = 0; i < 7; i++) sigmas[i] = sqrt(length[i] / 12);
    lw_certainty_options options = default_options();
    options.variance_estimated = true;
    lw_problem *p = problem_from_dense(7, 3, lines, values, _i ? sigmas : NULL);
    adjusted a = adjust(p, "dense", NULL, 0, 0, &options);
    ck_close(a.certainty->test.variance_factor, _i ? 0.0114960000000000 : 0.00251190476190476, 1e-11);
    assert_all(3, a.certainty->sigma, _i ? sigma : plain_sigma, 1e-11);
    assert_all(7, a.certainty->standardized, _i ? tau : plain_tau, 1e-10);
    ck_assert(a.certainty->test.applies == (_i == 1));
    adjusted_clear(&a);
    lw_problem_free(p);
}
END_TEST

Suite *suite_levelling(void)
{
    Suite *suite = suite_create("levelling");
    TCase *cases = tcase_create("levelling");
    tcase_add_loop_test(cases, test_six_lines_stated, 0, 2);
    tcase_add_loop_test(cases, test_six_lines_estimated, 0, 2);
    tcase_add_loop_test(cases, test_free_network, 0, 2);
    tcase_add_loop_test(cases, test_two_benchmarks, 0, 2);
    suite_add_tcase(suite, cases);
    return suite;
}
