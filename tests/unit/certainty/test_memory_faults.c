/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Every allocation in turn fails: the call says so, gives nothing and loses nothing (see
 * --enable-sanitizers). */
#include "check_certainty.h"

#include "certainty/outlier.h"
#include "certainty/variance_components.h"
#include "core/memory.h"
#include "unit/support.h"

#include <math.h>

typedef struct fault {
    int64_t calls, failing;
} fault;

static bool fail_once(void *state)
{
    fault *f = state;
    return f->calls++ == f->failing;
}

#define M 24
#define N 6

static lw_problem *small_problem(void)
{
    double A[M * N] = {0}, y[M], sigma[M];
    static const int32_t member[] = {2, 3};
    int32_t group[M];
    uint64_t seed = 4;
    for (int i = 0; i < M; i++) {
        A[N * i + i % N] = 1;
        A[N * i + (i + 1 + i / N) % N] -= 1.5;
        sigma[i] = 0.1;
        y[i] = 0.1 * next_random(&seed) + (i == 9 ? 3 : 0);
        group[i] = i % 2;
    }
    static const double C[] = {0.01, 0.004, 0.004, 0.01};
    lw_problem *p = problem_from_dense(M, N, A, y, sigma);
    problem_add_block(p, 2, member, C);
    problem_set_group(p, group, 2);
    return p;
}

/* One of the calls under test. */
static lw_status call(int which, const lw_problem *p, adjusted *a, lw_error *error)
{
    lw_certainty_options options = default_options();
    lw_system_options system_options = {0};
    lw_solve_options solve_options = {.engine = "cholesky"};
    lw_outlier_log *log = NULL;
    lw_certainty *certainty = NULL;
    lw_variance_components *components = NULL;
    lw_status status = LW_OK;
    options.covariance_count = -1;
    if (which < 2)
        status = lw_certainty_make(a->decomposition, a->estimate, &options, false, NULL, &certainty, error);
    else if (which == 2)
        status = lw_outlier_search(p, &system_options, &solve_options, &options, 0, NULL, &log, error);
    else
        status =
            lw_variance_components_estimate(p, &system_options, &solve_options, 1, NULL, &components, error);
    bool given = certainty || log || components;
    ck_assert((status >= LW_OK) == given);
    lw_certainty_free(certainty);
    lw_outlier_log_free(log);
    lw_variance_components_free(components);
    return status;
}

START_TEST(test_failing_allocations)
{
    lw_problem *p = small_problem();
    lw_certainty_options options = default_options();
    adjusted a = {0};
    lw_error error = {0};
    lw_engine_choice choice = {0};
    lw_system_options system_options = {0};
    lw_solve_options solve_options = {.engine = _i == 1 ? "dense" : "cholesky"};
    ck_assert_int_eq(lw_system_new(p, &system_options, NULL, &a.system, &error), LW_OK);
    ck_assert_int_eq(lw_decompose(a.system, 0, &solve_options, NULL, &choice, &a.decomposition, &error),
                     LW_OK);
    ck_assert_int_ge(a.decomposition->methods->estimate(a.decomposition, 0, NULL, &a.estimate, &error),
                     LW_OK);
    ck_assert_int_eq(
        lw_certainty_make(a.decomposition, a.estimate, &options, false, NULL, &a.certainty, &error), LW_OK);
    ck_assert_int_ge(call(_i, p, &a, &error), LW_OK); /* libraries are warm */
    int64_t refused = 0;
    for (int64_t k = 0; k < 5000; k++) {
        fault f = {.failing = k};
        error = (lw_error){0};
        lw_memory_set_gate(fail_once, &f);
        lw_status status = call(_i, p, &a, &error);
        lw_memory_set_gate(NULL, NULL);
        if (f.calls <= k) break;
        if (status < LW_OK) {
            ck_assert_msg(status == LW_NO_MEMORY, "allocation %ld: %d %s", (long)k, status, error.text);
            refused++;
        }
    }
    ck_assert_int_gt(refused, 20);
    adjusted_clear(&a);
    lw_problem_free(p);
}
END_TEST

Suite *suite_memory_faults(void)
{
    Suite *suite = suite_create("memory_faults");
    TCase *cases = tcase_create("memory_faults");
    tcase_set_timeout(cases, 60);
    tcase_add_loop_test(cases, test_failing_allocations, 0, 4);
    suite_add_tcase(suite, cases);
    return suite;
}
