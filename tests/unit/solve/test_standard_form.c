/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "../support.h"
#include "check_solve.h"
#include "gravity.h"

#include "core/memory.h"
#include "matrix/dense.h"
#include "matrix/vector.h"
#include "solve/standard_form.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

static lw_system *system_with(const lw_problem *problem, lw_penalty_kind kind, double also_smallest)
{
    lw_system *system = NULL;
    lw_error error = {0};
    lw_system_options options = {.penalty = {.prefer = kind, .also_smallest = also_smallest}};
    ck_assert_msg(lw_system_new(problem, &options, NULL, &system, &error) == LW_OK, "%s", error.text);
    ck_assert_msg(lw_system_matrix(system, NULL, &error) == LW_OK, "%s", error.text);
    return system;
}

static lw_standard_form *form_of(lw_system *system, int damped)
{
    lw_standard_form *form = NULL;
    lw_error error = {0};
    lw_status status = lw_standard_form_new(system, damped, NULL, NULL, &form, &error);
    ck_assert_msg(status == LW_OK, "%d %s", status, error.text);
    return form;
}

/* z of min ||Abar w - bbar||^2 + lambda^2 ||w||^2 by dense least squares; *trace of the influence matrix. */
static double *solve_form(lw_standard_form *form, int64_t m, int64_t n, double lambda, double *trace)
{
    int64_t width = lw_standard_form_width(form), rows = m + width;
    double *stack = LW_NEW_ZEROS(double, rows *width), *side = LW_NEW_ZEROS(double, rows),
           *z = LW_NEW_ARRAY(double, n);
    double *unit = LW_NEW_ZEROS(double, width), *only = LW_NEW_ARRAY(double, m *width),
           *s = LW_NEW_ARRAY(double, width);
    double *u = LW_NEW_ARRAY(double, m *width), *vt = LW_NEW_ARRAY(double, width *width);
    for (int64_t j = 0; j < width; j++) {
        unit[j] = 1;
        lw_apply(lw_standard_form_operator(form), 1, unit, only + j * m);
        memcpy(stack + j * rows, only + j * m, (size_t)m * sizeof(double));
        stack[m + j + j * rows] = lambda;
        unit[j] = 0;
    }
    memcpy(side, lw_standard_form_side(form), (size_t)m * sizeof(double));
    ck_assert_int_eq(lw_dense_gels(rows, width, stack, 1, side, NULL), LW_OK);
    ck_assert_int_eq(lw_standard_form_back(form, 1, side, z, NULL), LW_OK);
    ck_assert_int_eq(lw_dense_svd(m, width, only, u, s, vt, NULL), LW_OK);
    *trace = (double)lw_standard_form_undamped(form);
    for (int64_t k = 0; k < (m < width ? m : width); k++)
        *trace += s[k] * s[k] / (s[k] * s[k] + lambda * lambda);
    lw_free(stack);
    lw_free(side);
    lw_free(unit);
    lw_free(only);
    lw_free(s);
    lw_free(u);
    lw_free(vt);
    return z;
}

/* z of the stacked problem [A; lambda L] by dense least squares. */
static double *solve_stacked(lw_system *system, double lambda)
{
    int64_t m = system->rows, n = system->columns, p = system->penalty_rows, rows = m + p;
    double *stack = LW_NEW_ZEROS(double, rows *n), *side = LW_NEW_ZEROS(double, rows > n ? rows : n);
    double *dense = LW_NEW_ARRAY(double, m *n), *unit = LW_NEW_ZEROS(double, n);
    lw_sparse_to_dense(system->matrix, dense);
    for (int64_t j = 0; j < n; j++) {
        memcpy(stack + j * rows, dense + j * m, (size_t)m * sizeof(double));
        unit[j] = lambda;
        lw_system_penalize(system, unit, stack + j * rows + m);
        unit[j] = 0;
    }
    memcpy(side, system->b, (size_t)m * sizeof(double));
    ck_assert_int_eq(lw_dense_gels(rows, n, stack, 1, side, NULL), LW_OK);
    lw_free(stack);
    lw_free(dense);
    lw_free(unit);
    return side;
}

START_TEST(gravity_profile)
{
    double A[GRAVITY * GRAVITY], sigma[GRAVITY], place[GRAVITY];
    for (int i = 0; i < GRAVITY; i++) {
        sigma[i] = i % 2 ? 0.02 : 0.01;
        place[i] = i;
        for (int j = 0; j < GRAVITY; j++) A[i * GRAVITY + j] = gravity_kernel[abs(i - j)];
    }
    lw_problem *problem = problem_from_dense(GRAVITY, GRAVITY, A, gravity_value, sigma);
    problem_set_coordinate(problem, 0, place);
    for (size_t k = 0; k < sizeof gravity_case / sizeof *gravity_case; k++) {
        const struct gravity_case *expected = &gravity_case[k];
        lw_system *system = system_with(problem, (lw_penalty_kind)expected->order, 0);
        lw_standard_form *form = form_of(system, 1);
        double x[GRAVITY], r[GRAVITY], l[GRAVITY], trace;
        ck_assert_int_eq(lw_standard_form_undamped(form), expected->order);
        double *z = solve_form(form, GRAVITY, GRAVITY, expected->lambda, &trace);
        lw_system_model(system, z, NULL, x);
        for (int j = 0; j < GRAVITY; j++) ck_assert_double_eq_tol(x[j], expected->x[j], 1e-8);
        lw_sparse_apply(system->matrix, 1, z, r);
        lw_add_scaled(GRAVITY, -1, system->b, r, NULL);
        ck_assert_double_eq_tol(lw_norm(GRAVITY, r, NULL), expected->misfit, 1e-9);
        lw_system_penalize(system, z, l);
        ck_assert_double_eq_tol(lw_norm(system->penalty_rows, l, NULL), expected->size, 1e-8);
        ck_assert_double_eq_tol(trace, expected->trace, 1e-9);
        lw_free(z);
        lw_standard_form_free(form);
        lw_system_free(system);
    }
    lw_problem_free(problem);
}
END_TEST

/* 9 x 7 cells less some, two regions, a delay without coordinates as last parameter, badly scaled columns. */
static lw_problem *patchy_problem(int64_t m, int64_t *n)
{
    double x[64], y[64], value[128], sigma[128];
    int32_t region[64];
    uint64_t state = 3;
    int count = 0;
    for (int k = 0; k < 63; k++) {
        if (k == 11 || k == 12 || k == 40) continue;
        x[count] = k % 9 * 1.5;
        y[count] = pow(1.3, k / 9);
        region[count++] = k % 9 < 5 ? 0 : 1;
    }
    x[count] = y[count] = (double)NAN;
    region[count++] = -1;
    double *A = LW_NEW_ZEROS(double, m *count);
    for (int64_t i = 0; i < m; i++) {
        for (int j = 0; j < count; j++)
            if (next_random(&state) > 0.4 || j == count - 1)
                A[i * count + j] = (1 + next_random(&state)) * (j % 5 == 0 ? 1e-3 : 1);
        value[i] = 3 * next_random(&state);
        sigma[i] = 0.5 + 0.25 * next_random(&state);
    }
    lw_problem *problem = problem_from_dense(m, count, A, value, sigma);
    problem_set_coordinate(problem, 0, x);
    problem_set_coordinate(problem, 1, y);
    problem_set_region(problem, region);
    lw_free(A);
    *n = count;
    return problem;
}

/* The one-pass step, where there is one, does what its formula says (u from the range of the operator and its
 * side). */
static void check_step(lw_operator *op, const double *side)
{
    if (op->fusion == LW_FUSED_NONE) return;
    int64_t m = op->rows, n = op->columns;
    double *u = LW_NEW_ARRAY(double, 2 * m), *v = LW_NEW_ARRAY(double, 2 * n),
           *au = LW_NEW_ARRAY(double, 2 * n);
    double *av = LW_NEW_ARRAY(double, 2 * m), *w = LW_NEW_ARRAY(double, 2 * (m + n)), square[2];
    const double factor[2] = {0.7, -1.3};
    uint64_t state = 77;
    for (int64_t j = 0; j < 2 * n; j++) v[j] = next_random(&state);
    lw_apply(op, 2, v, u);
    lw_add_scaled(m, 1.0, side, u, NULL);
    lw_apply_transposed(op, 2, u, au);
    lw_apply(op, 2, v, av);
    double *moved = op->fusion == LW_FUSED_ROWS ? u : v, *product = op->fusion == LW_FUSED_ROWS ? av : au;
    int64_t length = op->fusion == LW_FUSED_ROWS ? m : n, other = op->fusion == LW_FUSED_ROWS ? n : m;
    for (int64_t i = 0; i < 2 * length; i++) product[i] -= factor[i / length] * moved[i];
    if (op->fusion == LW_FUSED_ROWS) {
        lw_step_rows(op, 2, v, factor, u, w, square);
        lw_apply_transposed(op, 2, product, au);
    } else {
        lw_step_columns(op, 2, u, factor, v, w, square);
        lw_apply(op, 2, product, av);
    }
    double *expected = op->fusion == LW_FUSED_ROWS ? au : av;
    for (int64_t i = 0; i < 2 * length; i++) ck_assert_double_eq_tol(moved[i], product[i], 1e-10);
    for (int64_t i = 0; i < 2 * other; i++) ck_assert_double_eq_tol(w[i], expected[i], 1e-9);
    for (int c = 0; c < 2; c++)
        ck_assert_double_eq_tol(square[c], lw_dot(length, product + c * length, product + c * length, NULL),
                                1e-9 * square[c]);
    lw_free(u);
    lw_free(v);
    lw_free(au);
    lw_free(av);
    lw_free(w);
}

static void compare(lw_system *system, int64_t undamped)
{
    int64_t n = system->columns, m = system->rows;
    lw_standard_form *form = form_of(system, 1);
    ck_assert_int_eq(lw_standard_form_undamped(form), undamped);
    const double lambda[] = {0.01, 0.3, 10, 1e4};
    for (int k = 0; k < 4; k++) {
        double trace, *z = solve_form(form, m, n, lambda[k], &trace),
                      *expected = solve_stacked(system, lambda[k]);
        double scale = lw_norm(n, expected, NULL);
        for (int64_t j = 0; j < n; j++) ck_assert_double_eq_tol(z[j], expected[j], 1e-8 * scale);
        lw_free(z);
        lw_free(expected);
    }
    /* ||L L^# w|| = ||w|| */
    int64_t width = lw_standard_form_width(form);
    double *w = LW_NEW_ARRAY(double, width * 11), *z = LW_NEW_ARRAY(double, n * 11),
           *l = LW_NEW_ARRAY(double, system->penalty_rows);
    uint64_t state = 1;
    for (int64_t j = 0; j < width * 11; j++) w[j] = next_random(&state);
    ck_assert_int_eq(lw_standard_form_root(form, 11, w, z, NULL), LW_OK);
    for (int v = 0; v < 11 && system->penalty != NULL; v++) {
        lw_system_penalize(system, z + v * n, l);
        double expected = lw_norm(width, w + v * width, NULL);
        ck_assert_double_eq_tol(lw_norm(system->penalty_rows, l, NULL), expected, 1e-9 * expected);
    }
    /* adjoint, in blocks that do not divide the width of the work */
    lw_operator *op = lw_standard_form_operator(form);
    double *y = LW_NEW_ARRAY(double, m * 11), *back = LW_NEW_ARRAY(double, width * 11),
           *u = LW_NEW_ARRAY(double, m * 11);
    for (int64_t i = 0; i < m * 11; i++) u[i] = next_random(&state);
    lw_apply(op, 11, w, y);
    lw_apply_transposed(op, 11, u, back);
    double forth = lw_dot(m * 11, y, u, NULL);
    ck_assert_double_eq_tol(forth, lw_dot(width * 11, w, back, NULL), 1e-10 * (1 + fabs(forth)));
    check_step(op, lw_standard_form_side(form));
    lw_free(w);
    lw_free(z);
    lw_free(l);
    lw_free(y);
    lw_free(back);
    lw_free(u);
    lw_standard_form_free(form);
}

/* Null vectors: a constant in each region and the delay under first differences; 1, x, y, xy in each under
 * second ones. */
START_TEST(equals_the_stacked_problem)
{
    int64_t n;
    lw_problem *problem = patchy_problem(90, &n);
    lw_system *system = system_with(problem, LW_PREFER_FLATTEST, 0);
    compare(system, 3);
    lw_system_free(system);
    system = system_with(problem, LW_PREFER_SMOOTHEST, 0);
    compare(system, 9);
    lw_system_free(system);
    system = system_with(problem, LW_PREFER_SMOOTHEST, 0.1);
    compare(system, 0);
    lw_system_free(system);
    system = system_with(problem, LW_PREFER_SMALLEST, 0);
    compare(system, 0);
    lw_system_free(system);
    double weight[64];
    for (int64_t j = 0; j < n; j++) weight[j] = j % 20 == 7 ? 0 : 0.5 + (double)j / 64;
    problem_set_damp_weight(problem, weight);
    system = system_with(problem, LW_PREFER_SMALLEST, 0);
    compare(system, 3);
    lw_system_free(system);
    lw_problem_free(problem);
    problem = patchy_problem(25, &n); /* more parameters than observations: the other one-pass step */
    problem_set_damp_weight(problem, weight);
    system = system_with(problem, LW_PREFER_SMALLEST, 0);
    compare(system, 3);
    lw_system_free(system);
    lw_problem_free(problem);
}
END_TEST

/* L x = 0 for x = (8, 4, 2, 1, 0, 0, 0) and (0, 0, 0, 0, 1, 3, 9): nothing that a polynomial would guess. */
START_TEST(finds_null_vectors_of_an_own_penalty)
{
    const double L[] = {1, -2, 0, 0, 0, 0, 0, 0, 1,  -2, 0, 0, 0, 0, 0, 0, 1, -2,
                        0, 0,  0, 0, 0, 0, 0, 3, -1, 0,  0, 0, 0, 0, 0, 3, -1};
    double A[70], value[10];
    uint64_t state = 9;
    for (int k = 0; k < 70; k++) A[k] = next_random(&state);
    for (int k = 0; k < 10; k++) value[k] = next_random(&state);
    lw_problem *problem = problem_from_dense(10, 7, A, value, NULL);
    problem_set_penalty(problem, 5, L);
    lw_system *system = system_with(problem, LW_PREFER_OWN, 0);
    compare(system, 2);
    lw_system_free(system);
    lw_problem_free(problem);
}
END_TEST

START_TEST(scattered_points_keep_their_planes)
{
    double A[60 * 40], value[60], place[3][40];
    uint64_t state = 21;
    for (int k = 0; k < 60 * 40; k++) A[k] = next_random(&state);
    for (int k = 0; k < 60; k++) value[k] = next_random(&state);
    for (int k = 0; k < 120; k++) place[k / 40][k % 40] = next_random(&state);
    lw_problem *problem = problem_from_dense(60, 40, A, value, NULL);
    for (int a = 0; a < 3; a++) problem_set_coordinate(problem, a, place[a]);
    lw_system *system = system_with(problem, LW_PREFER_SMOOTHEST, 0);
    compare(system, 4);
    lw_system_free(system);
    lw_problem_free(problem);
}
END_TEST

START_TEST(names_what_the_data_leave_open)
{
    const double A[] = {1, -1, 0, 0, 1, -1, 0, 0}, value[] = {1, 2}, x[] = {0, 1, 2, (double)NAN};
    lw_problem *problem = problem_from_dense(2, 4, A, value, NULL);
    problem_set_coordinate(problem, 0, x);
    lw_system *system = system_with(problem, LW_PREFER_FLATTEST, 0);
    lw_standard_form *form = NULL;
    lw_error error = {0};
    ck_assert_int_eq(lw_standard_form_new(system, 1, NULL, NULL, &form, &error), LW_UNSOLVABLE);
    ck_assert_ptr_null(form);
    ck_assert_ptr_nonnull(strstr(error.text, "2 directions"));
    ck_assert_ptr_nonnull(strstr(error.text, "'p4'"));
    lw_system_free(system);
    lw_problem_free(problem);
}
END_TEST

START_TEST(undamped_is_left_as_it_is)
{
    const double A[] = {1, 2, 3, 4, 5, 7}, value[] = {1, 2, 3};
    double w[2] = {0.5, -2}, z[2];
    lw_problem *problem = problem_from_dense(3, 2, A, value, NULL);
    lw_system *system = system_with(problem, LW_PREFER_SMALLEST, 0);
    lw_standard_form *form = form_of(system, 0);
    ck_assert_int_eq(lw_standard_form_width(form), 2);
    ck_assert_int_eq(lw_standard_form_back(form, 1, w, z, NULL), LW_OK);
    ck_assert_mem_eq(w, z, sizeof w);
    ck_assert_mem_eq(lw_standard_form_side(form), system->b, 3 * sizeof(double));
    lw_standard_form_free(form);
    lw_system_free(system);
    lw_problem_free(problem);
}
END_TEST

static bool refuse(void *state)
{
    int64_t *left = state;
    return (*left)-- == 0;
}

START_TEST(failing_allocations_are_told)
{
    int64_t n;
    lw_problem *problem = patchy_problem(70, &n);
    for (lw_penalty_kind kind = LW_PREFER_SMALLEST; kind <= LW_PREFER_SMOOTHEST; kind++) {
        lw_system *system = system_with(problem, kind, 0);
        for (int64_t at = 0, done = 0; !done; at++) {
            lw_standard_form *form = NULL;
            lw_error error = {0};
            int64_t left = at;
            lw_memory_set_gate(refuse, &left);
            lw_status status = lw_standard_form_new(system, 1, NULL, NULL, &form, &error);
            lw_memory_set_gate(NULL, NULL);
            done = left >= 0;
            ck_assert(status == LW_OK || (!done && status == LW_NO_MEMORY)); /* an ordering may do without */
            ck_assert((form != NULL) == (status == LW_OK));
            lw_standard_form_free(form);
            ck_assert_int_lt(at, 3000);
        }
        lw_system_free(system);
    }
    lw_problem_free(problem);
}
END_TEST

Suite *suite_standard_form(void)
{
    Suite *suite = suite_create("standard form");
    TCase *tcase = tcase_create("standard form");
    tcase_add_test(tcase, gravity_profile);
    tcase_add_test(tcase, equals_the_stacked_problem);
    tcase_add_test(tcase, finds_null_vectors_of_an_own_penalty);
    tcase_add_test(tcase, scattered_points_keep_their_planes);
    tcase_add_test(tcase, names_what_the_data_leave_open);
    tcase_add_test(tcase, undamped_is_left_as_it_is);
    tcase_add_test(tcase, failing_allocations_are_told);
    suite_add_tcase(suite, tcase);
    return suite;
}
