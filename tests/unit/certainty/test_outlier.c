/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "check_certainty.h"

#include "certainty/outlier.h"
#include "core/chance.h"
#include "unit/support.h"

#include <math.h>
#include <string.h>

#define M 60
#define N 15

/* M height differences between N points and a benchmark, with normal noise. */
static lw_problem *levelling_net(uint64_t seed)
{
    double A[M * N] = {0}, y[M], sigma[M];
    lw_random *random = NULL;
    lw_error error = {0};
    ck_assert_int_eq(lw_random_new(seed, 3, &random, &error), LW_OK);
    for (int i = 0; i < M; i++) {
        int from = i % (N + 1), to = (from + 1 + i / (N + 1) * 2) % (N + 1);
        sigma[i] = 0.001 * (1 + lw_random_uniform(random));
        if (from < N) A[N * i + from] = -1;
        if (to < N) A[N * i + to] = 1;
        y[i] = (to < N ? to : 0) - (from < N ? from : 0) + sigma[i] * lw_random_normal(random);
    }
    lw_random_free(random);
    return problem_from_dense(M, N, A, y, sigma);
}

static lw_outlier_log *search(const lw_problem *p, const char *engine, bool estimated, int64_t most)
{
    lw_certainty_options options = default_options();
    lw_system_options system_options = {0};
    lw_solve_options solve_options = {.engine = engine};
    lw_outlier_log *log = NULL;
    lw_error error = {0};
    options.variance_estimated = estimated;
    lw_status status =
        lw_outlier_search(p, &system_options, &solve_options, &options, most, NULL, &log, &error);
    ck_assert_msg(status == LW_OK, "%s", error.text);
    return log;
}

/* A clean network loses a reading in only 5 % of all cases. */
START_TEST(test_clean_networks)
{
    int lost = 0;
    for (uint64_t seed = 1; seed <= 100; seed++) {
        lw_problem *p = levelling_net(seed);
        lw_outlier_log *log = search(p, "dense", _i == 1, 0);
        lost += log->set_aside > 0;
        ck_assert(log->set_aside > 0 || log->count == 0);
        lw_outlier_log_free(log);
        lw_problem_free(p);
    }
    ck_assert_int_le(lost, 12); /* 5 + three standard errors */
}
END_TEST

/* Three gross errors are found, the most significant first, and every statistic is that of a full solution.
 * */
START_TEST(test_three_errors)
{
    lw_problem *p = levelling_net(9);
    p->value[7] += 0.060;
    p->value[22] -= 0.040;
    p->value[41] += 0.025;
    lw_outlier_log *log = search(p, _i % 2 ? "cholesky" : "dense", _i >= 2, 0);
    ck_assert_int_eq(log->set_aside, 3);
    ck_assert(log->row_factor[7] == 0 && log->row_factor[22] == 0 && log->row_factor[41] == 0);
    ck_assert_int_eq(log->steps[0].row, 7);
    ck_assert_str_eq(log->steps[0].action, "set_aside");
    double factor[M];
    for (int i = 0; i < M; i++) factor[i] = 1;
    lw_certainty_options options = default_options();
    options.variance_estimated = _i >= 2;
    for (int k = 0; k < 3; k++) {
        adjusted a = adjust(p, "dense", factor, 0, 0, &options);
        double largest = 0;
        int64_t where = -1;
        for (int64_t i = 0; i < M; i++)
            if (factor[i] != 0 && fabs(a.certainty->standardized[i]) > fabs(largest))
                largest = a.certainty->standardized[where = i];
        ck_assert_int_eq(log->steps[k].row, where);
        ck_close(log->steps[k].statistic, largest, 1e-8);
        ck_close(log->steps[k].critical, a.certainty->family_critical, 1e-9);
        factor[where] = 0;
        adjusted_clear(&a);
    }
    ck_assert_int_eq(log->count, 6);
    for (int k = 3; k < 6; k++) ck_assert_str_eq(log->steps[k].action, "kept_aside");
    adjusted a = adjust(p, "dense", log->row_factor, 0, 0, &options);
    for (int64_t i = 0; i < M; i++)
        if (log->row_factor[i] != 0)
            ck_assert_double_le(fabs(a.certainty->standardized[i]), a.certainty->family_critical);
    adjusted_clear(&a);
    lw_outlier_log_free(log);
    lw_problem_free(p);
}
END_TEST

/* A line fit in which two gross errors at one end make the good reading far out, which holds the slope,
 * look worst: it is set aside first and comes back once the two are out. */
START_TEST(test_reinstated)
{
    double A[22], y[11], sigma[11];
    uint64_t seed = 3;
    for (int i = 0; i < 11; i++) {
        A[2 * i] = 1;
        A[2 * i + 1] = i < 10 ? i : 22;
        sigma[i] = 1;
        y[i] = 0.8 * next_random(&seed) + (i == 8 || i == 9 ? 12 : 0);
    }
    lw_problem *p = problem_from_dense(11, 2, A, y, sigma);
    lw_outlier_log *log = search(p, "dense", false, 6);
    static const char *const action[] = {"set_aside",  "set_aside",  "set_aside",
                                         "reinstated", "kept_aside", "kept_aside"};
    static const int64_t row[] = {10, 8, 9, 10, 8, 9};
    ck_assert_int_eq(log->count, 6);
    ck_assert_int_eq(log->set_aside, 2);
    for (int k = 0; k < 6; k++) {
        ck_assert_str_eq(log->steps[k].action, action[k]);
        ck_assert_int_eq(log->steps[k].row, row[k]);
    }
    ck_assert(log->row_factor[10] == 1 && log->row_factor[8] == 0 && log->row_factor[9] == 0);
    lw_certainty_options options = default_options();
    adjusted a = adjust(p, "dense", log->row_factor, 0, 0, &options);
    ck_assert_double_eq_tol(log->steps[3].statistic, a.certainty->standardized[10], 1e-9);
    ck_close(log->steps[4].statistic, a.certainty->standardized[8], 1e-9);
    adjusted_clear(&a);
    lw_outlier_log_free(log);
    lw_problem_free(p);
}
END_TEST

/* Two lines tie a point to the net: an error in one cannot be told from one in the other, so neither is set
 * aside. */
START_TEST(test_inseparable_is_kept)
{
    double A[6 * 2] = {1, 0, 1, 0, 1, 0, 1, 0, 0, 1, -1, 1};
    static const double y[] = {1, 1.001, 0.999, 1.0005, 5, 4.9},
                        sigma[] = {0.001, 0.001, 0.001, 0.001, 0.001, 0.001};
    lw_problem *p = problem_from_dense(6, 2, A, y, sigma);
    lw_outlier_log *log = search(p, "dense", false, 0);
    ck_assert_int_eq(log->set_aside, 0);
    ck_assert_int_eq(log->count, 1);
    ck_assert_str_eq(log->steps[0].action, "kept");
    ck_assert_ptr_nonnull(strstr(log->steps[0].reason, log->steps[0].row == 4 ? "'o6'" : "'o5'"));
    for (int i = 0; i < 6; i++) ck_assert(log->row_factor[i] == 1);
    lw_outlier_log_free(log);
    lw_problem_free(p);
}
END_TEST

Suite *suite_outlier(void)
{
    Suite *suite = suite_create("outlier");
    TCase *cases = tcase_create("outlier");
    tcase_set_timeout(cases, 60);
    tcase_add_loop_test(cases, test_clean_networks, 0, 2);
    tcase_add_loop_test(cases, test_three_errors, 0, 4);
    tcase_add_test(cases, test_reinstated);
    tcase_add_test(cases, test_inseparable_is_kept);
    suite_add_tcase(suite, cases);
    return suite;
}
