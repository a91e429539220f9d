/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "tradeoff/sweep.h"

#include "cases.h"
#include "check_tradeoff.h"

#include "core/memory.h"
#include "solve/engine.h"

#include <math.h>
#include <signal.h>
#include <string.h>

START_TEST(grid)
{
    double g[5];
    lw_sweep_grid(1e-2, 1e2, 5, g);
    ck_assert_double_eq(g[0], 1e-2);
    ck_assert_double_eq_tol(g[1], 0.1, 1e-15);
    ck_assert_double_eq_tol(g[2], 1, 1e-14);
    ck_assert_double_eq(g[4], 1e2);
}
END_TEST

/* Misfit rises and size falls with the damping, effective parameters fall towards the number of undamped
 * directions. */
START_TEST(monotone)
{
    static const char *const engine[] = {"dense", "lsqr", "cgls", "lsmr", "qr", "cholesky"};
    static const int64_t shape[][2] = {{60, 40}, {30, 50}, {40, 40}};
    for (int e = 0; e < 6; e++)
        for (int k = 0; k < 3; k++) {
            lw_sweep_options options = {.count = e < 4 ? 0 : 12};
            swept s =
                sweep_by(blur_problem(shape[k][0], shape[k][1], 0.1, 17, true), false, engine[e], &options);
            ck_assert_msg(s.status >= 0, "%s: %s", engine[e], s.error.text);
            ck_assert_int_eq(s.curve->count, e < 4 ? LW_SWEEP_DEFAULT_COUNT : 12);
            ck_assert_int_eq(s.curve->choices, 4);
            for (int i = 1; i < s.curve->count; i++) {
                const lw_curve_row *a = &s.curve->row[i - 1], *b = &s.curve->row[i];
                ck_assert_double_gt(b->point.lambda, a->point.lambda);
                if (!a->usable) continue;
                double slack = a->converged ? 1e-9 : 1e-5;
                ck_assert_double_ge(b->point.misfit, a->point.misfit * (1 - slack));
                ck_assert_double_le(b->point.size, a->point.size * (1 + slack));
                ck_assert_double_le(b->point.effective_parameters,
                                    a->point.effective_parameters * (1 + 1e-9));
            }
            double top = s.curve->sigma_one;
            ck_assert_double_eq(s.curve->row[s.curve->count - 1].point.lambda, top);
            for (int i = 0; i < 4; i++) {
                const lw_choice *c = &s.curve->choice[i];
                if (isnan(c->damping)) continue;
                ck_assert(c->at.converged);
                ck_assert_double_le(c->from, c->damping * (1 + 1e-12));
                ck_assert_double_ge(c->to, c->damping * (1 - 1e-12));
            }
            swept_clear(&s);
        }
}
END_TEST

/* The engines find the same optima. */
START_TEST(engines_agree)
{
    static const char *const engine[] = {"dense", "lsqr", "cgls", "lsmr"};
    double damping[LW_CRITERIA] = {0};
    for (int e = 0; e < 4; e++) {
        lw_sweep_options options = {.tolerance = 1e-8};
        swept s = sweep_by(blur_problem(60, 40, 0.05, 5, true), false, engine[e], &options);
        for (int i = 0; i < LW_CRITERIA; i++) {
            const lw_choice *c = choice_of(&s, (lw_criterion)i);
            if (e == 0)
                damping[i] = c->damping;
            else if (!isnan(damping[i]))
                ASSERT_NEAR(c->damping, damping[i], 1e-4);
        }
        swept_clear(&s);
    }
}
END_TEST

/* What an unfinished iteration leaves is marked and never picked. */
START_TEST(unconverged_is_not_picked)
{
    double lambda[30];
    lw_sweep_grid(1e-4, 10, 30, lambda);
    for (int64_t steps = 1; steps <= 12; steps++) {
        lw_sweep_options options = {.damping = lambda, .count = 30, .steps = steps};
        swept s = sweep_by(blur_problem(60, 40, 0.05, 5, true), false, "lsqr", &options);
        ck_assert_msg(s.status >= 0, "%s", s.error.text);
        ck_assert_int_eq(s.curve->steps, steps);
        for (int i = 0; i < s.curve->choices; i++)
            if (!isnan(s.curve->choice[i].damping)) ck_assert(s.curve->choice[i].at.usable);
        ck_assert(!s.curve->row[0].converged);
        ck_assert_int_eq(s.status, LW_NOT_CONVERGED);
        swept_clear(&s);
    }
}
END_TEST

START_TEST(refuses)
{
    double bad[2] = {1, -1};
    lw_sweep_options options = {.damping = bad, .count = 2};
    swept s = sweep_by(blur_problem(20, 10, 0.1, 1, false), false, "dense", &options);
    ck_assert_int_eq(s.status, LW_BAD_USAGE);
    ck_assert_ptr_null(s.curve);
    swept_clear(&s);
}
END_TEST

/* Given dampings are sorted, and each stands once. */
START_TEST(list_of_dampings)
{
    double list[5] = {1, 0.01, 10, 0.1, 1};
    lw_sweep_options options = {.damping = list, .count = 5};
    swept s = sweep_by(blur_problem(20, 10, 0.1, 1, false), false, "dense", &options);
    ck_assert_int_eq(s.curve->count, 4);
    ck_assert_double_eq(s.curve->row[0].point.lambda, 0.01);
    ck_assert_double_eq(s.curve->row[3].point.lambda, 10);
    ck_assert_int_eq(s.curve->choices, 2);
    swept_clear(&s);
}
END_TEST

START_TEST(interrupted)
{
    volatile sig_atomic_t cancel = 1;
    lw_watch watch = {.cancel = &cancel};
    swept s = sweep_by(blur_problem(60, 40, 0.05, 5, true), false, "lsqr", &(lw_sweep_options){0});
    lw_curve *curve = NULL;
    lw_sweep_options options = {.sigma_stated = true};
    ck_assert_int_eq(lw_sweep(s.decomposition, &options, &watch, &curve, NULL), LW_INTERRUPTED);
    lw_curve_free(curve);
    swept_clear(&s);
}
END_TEST

/* Weighted priors: chi_square counts them, misfit does not; lsqr and dense agree. */
START_TEST(weighted_priors)
{
    double prior_sigma[20], lambda[4] = {0.1, 0.3, 1, 3}, weight[20];
    lw_sweep_options options = {.damping = lambda, .count = 4, .tolerance = 1e-9};
    lw_point expected[4];
    for (int e = 0; e < 2; e++) {
        lw_problem *problem = blur_problem(30, 20, 0.1, 9, true);
        for (int j = 0; j < 20; j++) {
            prior_sigma[j] = j % 3 == 0 ? 0.5 : (double)NAN;
            weight[j] = 1;
        }
        problem_set_prior_sigma(problem, prior_sigma);
        problem_set_damp_weight(problem, weight);
        swept s = sweep_by(problem, false, e == 0 ? "dense" : "lsqr", &options);
        ck_assert_msg(s.status >= 0, "%s", s.error.text);
        for (int i = 0; i < 4; i++) {
            const lw_point *p = &s.curve->row[i].point;
            ck_assert_double_gt(p->chi_square, p->misfit * p->misfit);
            if (e == 0) {
                expected[i] = *p;
                continue;
            }
            ASSERT_NEAR(p->misfit, expected[i].misfit, 1e-7);
            ASSERT_NEAR(p->chi_square, expected[i].chi_square, 1e-7);
            ASSERT_NEAR(p->size, expected[i].size, 1e-7);
            ASSERT_NEAR(p->effective_parameters, expected[i].effective_parameters, 1e-7);
        }
        swept_clear(&s);
    }
}
END_TEST

static bool fail_at(void *state)
{
    int *left = state;
    return (*left)-- == 0;
}

/* Every allocation of a sweep fails once: an error or, where the basis is given up instead, the curve. */
START_TEST(failing_allocations)
{
    static const char *const engine[] = {"dense", "lsqr"};
    for (int e = 0; e < 2; e++) {
        swept s = sweep_by(blur_problem(30, 20, 0.05, 5, true), false, engine[e], &(lw_sweep_options){0});
        lw_sweep_options options = {.sigma_stated = true};
        bool reached = false;
        for (int k = 0; k < 3000 && !reached; k += k < 40 ? 1 : 37) {
            lw_curve *curve = NULL;
            int left = k;
            lw_memory_set_gate(fail_at, &left);
            lw_status status = lw_sweep(s.decomposition, &options, NULL, &curve, NULL);
            reached = left >= 0;
            lw_memory_set_gate(NULL, NULL);
            if (reached) ck_assert_int_ge(status, 0);
            ck_assert_int_eq(curve != NULL, status >= 0);
            lw_curve_free(curve);
        }
        ck_assert(reached);
        swept_clear(&s);
    }
}
END_TEST

/* The same bytes for one to four threads. */
START_TEST(ignores_threads)
{
    lw_curve *first = NULL;
    lw_problem *problem = blur_problem(900, 700, 0.05, 5, true);
    lw_system *system = NULL;
    ck_assert_int_eq(lw_system_new(problem, &(lw_system_options){0}, NULL, &system, NULL), LW_OK);
    for (int threads = 1; threads <= 4; threads++) {
        lw_team *team = NULL;
        ck_assert_int_eq(lw_team_new(threads, &team, NULL), LW_OK);
        lw_watch watch = {.team = team};
        lw_solve_options solve = {.sweep = 1, .trace_probes = 1};
        lw_sweep_options options = {.sigma_stated = true, .count = 30};
        lw_decomposition *d = NULL;
        lw_curve *curve = NULL;
        ck_assert_int_eq(lw_engine_find("lsqr")->decompose(system, 1, &solve, &watch, &d, NULL), LW_OK);
        ck_assert_int_ge(lw_sweep(d, &options, &watch, &curve, NULL), 0);
        lw_decomposition_free(d);
        lw_team_free(team);
        if (first == NULL) {
            first = curve;
            continue;
        }
        ck_assert_int_eq(curve->count, first->count);
        ck_assert_mem_eq(curve->row, first->row, (size_t)curve->count * sizeof *curve->row);
        for (int i = 0; i < curve->choices; i++)
            ck_assert_mem_eq(&curve->choice[i].damping, &first->choice[i].damping, sizeof(double));
        lw_curve_free(curve);
    }
    lw_curve_free(first);
    lw_system_free(system);
    lw_problem_free(problem);
}
END_TEST

Suite *suite_sweep(void)
{
    Suite *suite = suite_create("sweep");
    TCase *tcase = tcase_create("sweep");
    tcase_add_test(tcase, grid);
    tcase_add_test(tcase, monotone);
    tcase_add_test(tcase, engines_agree);
    tcase_add_test(tcase, unconverged_is_not_picked);
    tcase_add_test(tcase, refuses);
    tcase_add_test(tcase, list_of_dampings);
    tcase_add_test(tcase, interrupted);
    tcase_add_test(tcase, weighted_priors);
    tcase_add_test(tcase, failing_allocations);
    tcase_add_test(tcase, ignores_threads);
    suite_add_tcase(suite, tcase);
    return suite;
}
