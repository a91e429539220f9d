/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "check_problem.h"
#include "folder.h"

#include "core/decimal.h"

#include <math.h>
#include <string.h>

static folder at;

static void setup(void)
{
    at = folder_small();
}

static void teardown(void)
{
    folder_remove(&at);
}

#define HEADER "observation_a,observation_b,covariance\n"

START_TEST(blocks_are_connected_pairs)
{
    folder_put(&at, "observations.csv", "observation,value,sigma\na,1,0.1\nb,3,\nc,2.1,0.1\nd,2.2,0.2\n");
    folder_put(&at, "covariance.csv", HEADER "d,a,0.005\nb,b,0.16\nd,d,0.04\nc,b,-0.01\n");
    lw_problem *p = folder_read(&at, NULL);
    const lw_covariance *V = p->covariance;
    static const int64_t start[] = {0, 2, 4}, value_start[] = {0, 4, 8};
    static const int32_t member[] = {0, 3, 1, 2}, block_of[] = {0, 1, 1, 0};
    ck_assert_int_eq(V->blocks, 2);
    ck_assert_mem_eq(V->start, start, sizeof start);
    ck_assert_mem_eq(V->value_start, value_start, sizeof value_start);
    ck_assert_mem_eq(V->member, member, sizeof member);
    ck_assert_mem_eq(V->block_of, block_of, sizeof block_of);
    static const double value[] = {0.01, 0.005, 0.005, 0.04, 0.16, -0.01, -0.01, 0.01};
    for (int k = 0; k < 8; k++) {
        ck_assert_double_eq_tol(V->value[k], value[k], 1e-17);
        /* the decimal itself: 0.01 from sigma 0.1 is right to 30 digits */
        lw_decimal want;
        const char *text[] = {"0.01", "0.005", "0.005", "0.04", "0.16", "-0.01", "-0.01", "0.01"};
        ck_assert_int_eq(lw_decimal_parse(text[k], strlen(text[k]), &want), LW_NUMBER_FINE);
        ck_assert_double_eq_tol((V->value[k] - want.high) + (V->low[k] - want.low), 0, 1e-31);
    }
    ck_assert_double_eq(p->sigma[1], 0.4); /* from its diagonal */
    ck_assert_double_eq_tol(p->sigma_low[1], -0x1p-53 / 5.0, 1e-32);
    lw_problem_free(p);
}
END_TEST

START_TEST(variances_alone_correlate_nothing)
{
    folder_put(&at, "observations.csv", "observation,value\na,1\nb,3\nc,2.1\nd,2.2\n");
    folder_put(&at, "covariance.csv", HEADER "a,a,0.01\nb,b,4\nc,c,9\nd,d,0.25\n");
    lw_problem *p = folder_read(&at, NULL);
    static const double sigma[] = {0.1, 2, 3, 0.5};
    ck_assert_ptr_null(p->covariance);
    ck_assert_mem_eq(p->sigma, sigma, sizeof sigma);
    lw_problem_free(p);
}
END_TEST

/* The order of the file and of the two ids says nothing. */
START_TEST(order_does_not_matter)
{
    folder_put(&at, "covariance.csv", HEADER "a,b,0.001\nb,c,0.002\nd,d,0.04\n");
    lw_problem *p = folder_read(&at, NULL);
    folder_put(&at, "covariance.csv", HEADER "d,d,0.04\nc,b,0.002\nb,a,0.001\n");
    lw_problem *q = folder_read(&at, NULL);
    ck_assert_int_eq(p->covariance->blocks, 1);
    ck_assert_mem_eq(p->covariance->value, q->covariance->value, 9 * sizeof(double));
    ck_assert_mem_eq(p->covariance->member, q->covariance->member, 3 * sizeof(int32_t));
    lw_problem_free(p);
    lw_problem_free(q);
}
END_TEST

static const struct {
    const char *text, *message;
} fault[] = {
    {HEADER "a,a,0.02\n",
     "covariance.csv:2:5: found the variance '0.02', expected the square of the sigma 0.1 at "
     "observations.csv:2:5"},
    {HEADER "a,a,0.01000001\n",
     "covariance.csv:2:5: found the variance '0.01000001', expected the square of the sigma 0.1 "
     "at observations.csv:2:5"},
    {HEADER "a,zz,0.001\n",
     "covariance.csv:2:3: found the id 'zz', which is not there, expected an observation of the "
     "observations file"},
    {HEADER "a,b,0.001\nb,c,0.001\nb,a,0.001\n",
     "covariance.csv:4:1: found a pair that an earlier row has, expected each pair once"},
    {HEADER "a,a,-0.01\n", "covariance.csv:2:5: found '-0.01', expected a positive number"},
    {HEADER "a,b,x\n", "covariance.csv:2:5: found 'x' (no number), expected a number"},
    {HEADER "c,d,0.001\na,b,0.01\n", "covariance.csv:3:5: found a covariance block that is not positive "
                                     "definite (observations 'a', 'b'), expected a positive definite one"},
    {HEADER, "covariance.csv:1:1: found no row under the header, expected one covariance at least"},
};

START_TEST(each_fault)
{
    folder_put(&at, "covariance.csv", fault[_i].text);
    ck_assert_str_eq(folder_refused(&at, NULL), fault[_i].message);
}
END_TEST

START_TEST(a_sigma_is_needed_from_somewhere)
{
    folder_put(&at, "covariance.csv", HEADER "a,b,0.001\n");
    folder_put(&at, "observations.csv", "observation,value,sigma\na,1,0.1\nb,3,0.1\nc,2.1,\nd,2.2,0.2\n");
    ck_assert_str_eq(folder_refused(&at, NULL),
                     "observations.csv:4:7: found an empty field, expected a positive sigma, or a "
                     "variance in the covariance file");
    folder_put(&at, "observations.csv", "observation,value\na,1\nb,3\nc,2.1\nd,2.2\n");
    ck_assert_ptr_nonnull(
        strstr(folder_refused(&at, NULL), "observations.csv:2:1: found an observation without sigma"));
}
END_TEST

Suite *suite_covariance(void)
{
    Suite *suite = suite_create("covariance");
    TCase *tests = tcase_create("covariance");
    tcase_add_checked_fixture(tests, setup, teardown);
    tcase_add_test(tests, blocks_are_connected_pairs);
    tcase_add_test(tests, variances_alone_correlate_nothing);
    tcase_add_test(tests, order_does_not_matter);
    tcase_add_loop_test(tests, each_fault, 0, (int)(sizeof fault / sizeof *fault));
    tcase_add_test(tests, a_sigma_is_needed_from_somewhere);
    suite_add_tcase(suite, tests);
    return suite;
}
