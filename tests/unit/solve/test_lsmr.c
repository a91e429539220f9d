/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "solve/lsmr.h"

#include "check_solve.h"
#include "small_system.h"

#include <math.h>

START_TEST(solves_the_integer_system)
{
    kernel_solves_small(lw_lsmr);
}
END_TEST

START_TEST(agrees_with_qr)
{
    kernel_agrees_with_qr(lw_lsmr);
}
END_TEST

START_TEST(ends_well)
{
    kernel_ends_well(lw_lsmr);
}
END_TEST

START_TEST(bounds_its_error)
{
    kernel_bounds_its_error(lw_lsmr);
}
END_TEST

START_TEST(ignores_threads)
{
    kernel_ignores_threads(lw_lsmr);
}
END_TEST

typedef struct trail {
    double gradient, residual;
    int steps;
} trail;

static void follow(void *state, const lw_iteration *seen)
{
    trail *t = state;
    t->steps++;
    ck_assert_int_eq(seen->step, t->steps);
    ck_assert(isnan(seen->polak_ribiere));
    ck_assert_double_le(seen->residual, t->residual * (1 + 1e-14));
    ck_assert_double_lt(seen->gradient, t->gradient);
    t->residual = seen->residual;
    t->gradient = seen->gradient;
}

/* The residual of [A; damp I] falls at every step; LSMR's gradient too (Fong & Saunders 2011). One product of
 * each kind a step, and one of each for the true gradient at the end. */
START_TEST(falls_at_every_step)
{
    for (int how = LAYOUT_FUSED; how <= LAYOUT_TWO_PASS; how++) {
        owned_operator A = operator_of(8, 5, small_A, (layout)how, NULL);
        trail t = {.gradient = (double)INFINITY, .residual = (double)INFINITY};
        lw_iterate_options options = {
            .damp = 1, .tolerance = 1e-9, .steps = 5, .observe = follow, .observe_state = &t};
        lw_iterate_result result;
        double x[5];
        ck_assert_int_eq(lw_lsmr(A.op, small_b, &options, x, &result, NULL), LW_OK);
        ck_assert_int_eq(t.steps, 5);
        ck_assert_double_le(t.gradient, 1e-10);
        ck_assert_double_eq_tol(t.residual, 5.485831757548172, 1e-13);
        ck_assert_int_eq(A.op->forward, result.steps + 1);
        ck_assert_int_eq(A.op->adjoint, result.steps + 2);
        owned_operator_clear(&A);
    }
}
END_TEST

Suite *suite_lsmr(void)
{
    Suite *suite = suite_create("lsmr");
    TCase *tcase = tcase_create("lsmr");
    tcase_add_test(tcase, solves_the_integer_system);
    tcase_add_test(tcase, agrees_with_qr);
    tcase_add_test(tcase, ends_well);
    tcase_add_test(tcase, bounds_its_error);
    tcase_add_test(tcase, ignores_threads);
    tcase_add_test(tcase, falls_at_every_step);
    suite_add_tcase(suite, tcase);
    return suite;
}
