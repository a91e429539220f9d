/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "check_certainty.h"

#include "certainty/variance_components.h"
#include "core/chance.h"
#include "unit/support.h"

#include <math.h>

#define M 240
#define N 20

/* Two kinds of readings of the same unknowns whose sigmas are stated wrong by `factor[group]`. */
static lw_problem *two_groups(const double *factor, uint64_t seed)
{
    static double A[M * N];
    double y[M], sigma[M];
    int32_t group[M];
    lw_random *random = NULL;
    lw_error error = {0};
    ck_assert_int_eq(lw_random_new(seed, 5, &random, &error), LW_OK);
    for (int i = 0; i < M * N; i++) A[i] = 0;
    for (int i = 0; i < M; i++) {
        group[i] = i % 3 == 0;
        sigma[i] = 0.5 + lw_random_uniform(random);
        A[N * i + i % N] = 1;
        A[N * i + (7 * i + 3 + i / N) % N] += lw_random_normal(random);
        y[i] = factor[group[i]] * sigma[i] * lw_random_normal(random);
    }
    lw_random_free(random);
    lw_problem *p = problem_from_dense(M, N, A, y, sigma);
    problem_set_group(p, group, 2);
    return p;
}

static lw_variance_components *estimate(const lw_problem *p, const char *engine)
{
    lw_variance_components *c = NULL;
    lw_error error = {0};
    lw_system_options system_options = {0};
    lw_solve_options solve_options = {.engine = engine};
    lw_status status =
        lw_variance_components_estimate(p, &system_options, &solve_options, 0, NULL, &c, &error);
    ck_assert_msg(status == LW_OK, "%d %s", status, error.text);
    return c;
}

START_TEST(test_two_groups)
{
    static const double factor[] = {2.0, 0.5};
    lw_problem *p = two_groups(factor, 42);
    lw_variance_components *c = estimate(p, _i ? "cholesky" : "dense");
    ck_assert_int_eq(c->count, 2);
    ck_assert_int_le(c->iterations, 20);
    for (int g = 0; g < 2; g++) {
        double truth = factor[g] * factor[g];
        ck_assert_double_le(fabs(c->groups[g].component - truth), 3 * c->groups[g].sigma);
        double least =
            c->groups[g].component * sqrt(2 / c->groups[g].redundancy); /* if the other group were known */
        ck_assert(c->groups[g].sigma >= least && c->groups[g].sigma < 1.5 * least);
        ck_close(c->groups[g].scale * c->groups[g].scale, c->groups[g].component, 1e-14);
    }
    /* the fixed point: with sigmas scaled so, every group has the variance factor 1 */
    for (int64_t i = 0; i < M; i++) p->sigma[i] *= c->groups[p->group[i]].scale;
    for (int64_t i = 0; i < M && p->sigma_low; i++) p->sigma_low[i] = 0;
    lw_certainty_options options = default_options();
    adjusted a = adjust(p, "dense", NULL, 0, 0, &options);
    ck_assert_int_eq(a.certainty->group_count, 2);
    for (int g = 0; g < 2; g++) ck_close(a.certainty->groups[g].factor, 1.0, 1e-8);
    ck_close(a.certainty->groups[0].redundancy + a.certainty->groups[1].redundancy, (double)(M - N), 1e-12);
    lw_variance_components_attach(c, a.certainty);
    ck_close(a.certainty->groups[1].component, c->groups[1].component, 1e-15);
    adjusted_clear(&a);
    lw_variance_components_free(c);
    lw_problem_free(p);
}
END_TEST

/* One group: the component is the variance factor, its standard deviation sqrt(2 / f) times it. */
START_TEST(test_one_group)
{
    static const double factor[] = {1.7, 1.7};
    lw_problem *p = two_groups(factor, 8);
    for (int i = 0; i < M; i++) p->group[i] = 0;
    lw_certainty_options options = default_options();
    adjusted a = adjust(p, "dense", NULL, 0, 0, &options);
    lw_variance_components *c = estimate(p, "dense");
    ck_assert_int_eq(c->count, 1);
    ck_close(c->groups[0].component, a.certainty->test.variance_factor, 1e-10);
    ck_close(c->groups[0].sigma, c->groups[0].component * sqrt(2.0 / (M - N)), 1e-9);
    lw_variance_components_free(c);
    adjusted_clear(&a);
    lw_problem_free(p);
}
END_TEST

Suite *suite_variance_components(void)
{
    Suite *suite = suite_create("variance_components");
    TCase *cases = tcase_create("variance_components");
    tcase_add_loop_test(cases, test_two_groups, 0, 2);
    tcase_add_test(cases, test_one_group);
    suite_add_tcase(suite, cases);
    return suite;
}
