/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "../support.h"
#include "check_solve.h"
#include "filip.h"

#include "core/memory.h"
#include "matrix/dense.h"
#include "solve/decomposition.h"
#include "solve/exact.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

/* The least that a refinement needs of a decomposition: [A; lambda L] = Q R E' and solve_many from it,
 *     R'd = E'g,  R E'z = Q1'f - d,  r = f - [A; lambda L] z = Q [d; Q2'f]. */
typedef struct qr_decomposition {
    lw_decomposition base;
    int64_t rows, columns;
    lw_dense_qr qr;
    double spoil; /* relative fault that is put into every z */
} qr_decomposition;

static lw_status qr_solve(lw_decomposition *base, double lambda, int64_t k, const double *f, const double *g,
                          const double *h, double *r, double *z, double *u, lw_error *error)
{
    qr_decomposition *self = (qr_decomposition *)base;
    int64_t n = self->columns;
    double d[64], c[64];
    (void)lambda;
    (void)h;
    (void)u;
    ck_assert_int_eq(k, 1);
    memcpy(r, f, (size_t)self->rows * sizeof *r);
    lw_status status = lw_dense_qr_apply_qt(&self->qr, 1, r, error);
    for (int64_t j = 0; j < n; j++) d[j] = g[self->qr.pivot[j]];
    lw_dense_qr_solve_r(&self->qr, 1, 1, d, n);
    for (int64_t j = 0; j < n; j++) {
        c[j] = r[j] - d[j];
        r[j] = d[j];
    }
    lw_dense_qr_solve_r(&self->qr, 0, 1, c, n);
    for (int64_t j = 0; j < n; j++) z[self->qr.pivot[j]] = c[j] * (1 + self->spoil);
    return status == LW_OK ? lw_dense_qr_apply_q(&self->qr, 1, r, error) : status;
}

static const lw_decomposition_methods qr_methods = {.engine = "test", .solve_many = qr_solve};

static void qr_make(lw_system *system, double lambda, qr_decomposition *out)
{
    lw_error error = {0};
    ck_assert_msg(lw_system_matrix(system, NULL, &error) == LW_OK, "%s", error.text);
    int64_t m = system->rows, p = lambda > 0 ? system->penalty_rows : 0, n = system->columns;
    double *dense = LW_NEW_ZEROS(double, (m + p) * n), *part = LW_NEW_ARRAY(double, (m + p) * n),
           *unit = LW_NEW_ZEROS(double, n);
    lw_sparse_to_dense(system->matrix, part);
    for (int64_t j = 0; j < n; j++) {
        memcpy(dense + j * (m + p), part + j * m, (size_t)m * sizeof(double));
        unit[j] = lambda;
        if (p > 0) lw_system_penalize(system, unit, dense + j * (m + p) + m);
        unit[j] = 0;
    }
    *out = (qr_decomposition){.base = {&qr_methods, system}, .rows = m + p, .columns = n};
    ck_assert_msg(lw_dense_qr_make(m + p, n, dense, 0.0, &out->qr, &error) == LW_OK, "%s", error.text);
    lw_free(part);
    lw_free(unit);
}

static lw_decimal parse(const char *text)
{
    lw_decimal number;
    ck_assert_int_eq(lw_decimal_parse(text, strlen(text), &number), LW_NUMBER_FINE);
    return number;
}

/* -log10 of the relative error. */
static double digits(lw_decimal found, lw_decimal expected)
{
    double error = fabs(lw_decimal_subtract(found, expected).high / expected.high);
    return error > 0 ? -log10(error) : 32;
}

static lw_problem *filip_problem(void)
{
    lw_sparse *A = NULL;
    double value[FILIP_ROWS], low[FILIP_ROWS];
    ck_assert_int_eq(lw_sparse_new(FILIP_ROWS, FILIP_COLUMNS, FILIP_ROWS * FILIP_COLUMNS, 1, &A, NULL),
                     LW_OK);
    for (int i = 0; i < FILIP_ROWS; i++) {
        lw_decimal power = lw_decimal_of(1), x = parse(filip_x[i]), y = parse(filip_y[i]);
        value[i] = y.high;
        low[i] = y.low;
        for (int j = 0; j < FILIP_COLUMNS; j++) {
            A->index[j * FILIP_ROWS + i] = i;
            A->value[j * FILIP_ROWS + i] = power.high;
            A->low[j * FILIP_ROWS + i] = power.low;
            power = lw_decimal_multiply(power, x);
        }
    }
    for (int j = 0; j <= FILIP_COLUMNS; j++) A->start[j] = j * FILIP_ROWS;
    lw_problem *problem = problem_from_sparse(A, value, NULL);
    problem->value_low = LW_NEW_ARRAY(double, FILIP_ROWS);
    memcpy(problem->value_low, low, sizeof low);
    problem->low_kept = true;
    return problem;
}

static lw_system *system_of(const lw_problem *problem, const lw_system_options *options)
{
    lw_system *system = NULL;
    lw_error error = {0};
    ck_assert_msg(lw_system_new(problem, options, NULL, &system, &error) == LW_OK, "%s", error.text);
    return system;
}

START_TEST(filip_to_twenty_digits)
{
    lw_problem *problem = filip_problem();
    lw_system *system = system_of(problem, NULL);
    qr_decomposition qr;
    lw_exact *exact = NULL;
    lw_exact_state state;
    lw_refinement done;
    lw_error error = {0};
    qr_make(system, 0, &qr);
    ck_assert_int_eq(lw_exact_new(system, 0, &exact, &error), LW_OK);
    ck_assert_int_eq(lw_exact_state_new(exact, &state, &error), LW_OK);
    ck_assert_int_eq(lw_exact_refine(exact, LW_SIDE_PROBLEM, 0, &qr.base, 0, 10, NULL, &state, &done, &error),
                     LW_OK);
    ck_assert_double_le(done.contraction, 1e-4);
    ck_assert_double_le(done.last, 1e-20);
    for (int j = 0; j < FILIP_COLUMNS; j++)
        ck_assert_double_ge(digits(state.dx[j], parse(filip_estimate[j])), 20);
    ck_assert_double_ge(digits(lw_exact_chi_square(exact, &state), parse(filip_square_sum)), 20);
    lw_exact_state_clear(&state);
    for (int j = 0; j < FILIP_COLUMNS; j++) {
        ck_assert_int_eq(lw_exact_state_new(exact, &state, &error), LW_OK);
        ck_assert_int_eq(
            lw_exact_refine(exact, LW_SIDE_UNIT, j, &qr.base, 0, 10, NULL, &state, &done, &error), LW_OK);
        lw_decimal deviation =
            lw_decimal_multiply(lw_decimal_sqrt(state.dx[j]), parse(filip_residual_deviation));
        ck_assert_double_ge(digits(deviation, parse(filip_deviation[j])), 20);
        lw_exact_state_clear(&state);
    }
    lw_dense_qr_clear(&qr.qr);
    lw_exact_free(exact);
    lw_system_free(system);
    lw_problem_free(problem);
}
END_TEST

/* Everything at once against the normal equations written out: a correlated block, a weighted prior, a held
 * value, a row factor, a set-aside reading and a penalty. After refinement all residuals vanish and x solves
 * (A'PA + lambda^2 L'L) dx = A'P (b - A x0). */
START_TEST(solves_what_the_problem_states)
{
    const double A[] = {1, 2, 0, 1, 0, 1, 1, 0, 3, 0, 2, 1, 1, -1, 1, 0, 1, 0, 0, 1},
                 value[] = {1, 2, 3, 4, 5};
    const double sigma[] = {1, 2, 1, 1, 0.5}, covariance[] = {4, 1.5, 1.5, 1}, prior[] = {0.5, 1, 0, 2};
    const double prior_sigma[] = {(double)NAN, 0.25, (double)NAN, (double)NAN},
                 factor[] = {1, 0.5, 0, 1, 1, 1};
    const double x[] = {0, 1, 2, 3}, lambda = 0.7, weight[] = {1, 1, 1, 1};
    const int32_t member[] = {3, 0};
    lw_problem *problem = problem_from_dense(5, 4, A, value, sigma);
    problem_add_block(problem, 2, member, covariance);
    problem_set_prior(problem, prior);
    problem_set_prior_sigma(problem, prior_sigma);
    problem_set_damp_weight(problem, weight);
    problem_set_coordinate(problem, 0, x);
    problem_fix(problem, 3, 2);
    lw_system_options options = {.penalty = {.prefer = LW_PREFER_FLATTEST}, .row_factor = factor};
    lw_system *system = system_of(problem, &options);
    qr_decomposition qr;
    lw_exact *exact = NULL;
    lw_exact_state state;
    lw_refinement done;
    double f[16], g[4], h[1];
    qr_make(system, lambda, &qr);
    ck_assert_int_eq(lw_exact_new(system, lambda, &exact, NULL), LW_OK);
    ck_assert_int_eq(lw_exact_state_new(exact, &state, NULL), LW_OK);
    ck_assert_int_eq(
        lw_exact_refine(exact, LW_SIDE_PROBLEM, 0, &qr.base, lambda, 10, NULL, &state, &done, NULL), LW_OK);
    ck_assert_int_eq(lw_exact_residual(exact, LW_SIDE_PROBLEM, 0, &state, NULL, f, g, h, NULL), LW_OK);
    for (int64_t i = 0; i < system->rows + system->penalty_rows; i++) ck_assert_double_le(fabs(f[i]), 1e-24);
    for (int j = 0; j < 3; j++) ck_assert_double_le(fabs(g[j]), 1e-24);
    double P[5][5] = {{4 / 1.75, 0, 0, -1.5 / 1.75, 0},
                      {0, 0.0625},
                      {0},
                      {-1.5 / 1.75, 0, 0, 1 / 1.75, 0},
                      {0, 0, 0, 0, 4}};
    for (int j = 0; j < 3; j++) {
        double gradient = 0, dx[4] = {state.dx[0].high, state.dx[1].high, state.dx[2].high, 0};
        for (int r = 0; r < 5; r++)
            for (int s = 0; s < 5; s++) {
                double off = -value[s];
                for (int c = 0; c < 4; c++) off += A[4 * s + c] * (prior[c] + dx[c]);
                gradient += A[4 * r + j] * P[r][s] * off;
            }
        if (j == 1) gradient += dx[1] * 16;
        if (j > 0) gradient += lambda * lambda * (dx[j] - dx[j - 1]);
        gradient += lambda * lambda * (dx[j] - dx[j + 1]);
        ck_assert_double_le(fabs(gradient), 1e-13);
    }
    double chi = 0, residual[6], z[3];
    for (int j = 0; j < 3; j++) z[j] = state.dx[j].high / system->scale[j];
    ck_assert_int_eq(lw_system_residual(system, z, NULL, 1, residual, NULL), LW_OK);
    for (int r = 0; r < 5; r++)
        for (int s = 0; s < 5; s++) chi += residual[r] * P[r][s] * residual[s];
    chi += residual[5] * residual[5] * 16;
    ck_assert_double_eq_tol(lw_exact_chi_square(exact, &state).high, chi, 1e-12 * chi);
    lw_exact_state_clear(&state);
    lw_dense_qr_clear(&qr.qr);
    lw_exact_free(exact);
    lw_system_free(system);
    lw_problem_free(problem);
}
END_TEST

START_TEST(conditions_are_told_in_their_own_scale)
{
    const double A[] = {1, 0, 0, 1, 1, 1}, value[] = {1, 2, 4}, C[] = {100, 300}, d[] = {500};
    lw_problem *problem = problem_from_dense(3, 2, A, value, NULL);
    problem_set_conditions(problem, 1, C, d);
    lw_system *system = system_of(problem, NULL);
    lw_exact *exact = NULL;
    lw_exact_state state;
    double f[3], g[2], h[1];
    ck_assert_int_eq(lw_exact_new(system, 0, &exact, NULL), LW_OK);
    ck_assert_int_eq(lw_exact_state_new(exact, &state, NULL), LW_OK);
    /* By hand: minimise (x-1)^2 + (y-2)^2 + (x+y-4)^2 with x + 3y = 5: gradient = -100 u / 2 times (1, 3).
     * x = 5 - 3y: (4-3y)^2 + (y-2)^2 + (1-2y)^2, 14 y = 16, y = 8/7, x = 11/7. */
    const double x = 11.0 / 7, y = 8.0 / 7, r[] = {1 - x, 2 - y, 4 - x - y};
    double z[2] = {x / system->scale[0], y / system->scale[1]};
    double u[1] = {-(r[0] + r[2]) / 100 / system->condition_scale[0]};
    lw_exact_correct(exact, r, z, u, &state);
    ck_assert_int_eq(lw_exact_residual(exact, LW_SIDE_PROBLEM, 0, &state, NULL, f, g, h, NULL), LW_OK);
    for (int i = 0; i < 3; i++) ck_assert_double_le(fabs(f[i]), 1e-15);
    for (int j = 0; j < 2; j++) ck_assert_double_le(fabs(g[j]), 1e-14);
    ck_assert_double_le(fabs(h[0]), 1e-14);
    lw_exact_state_clear(&state);
    lw_exact_free(exact);
    lw_system_free(system);
    lw_problem_free(problem);
}
END_TEST

/* A factor with a relative fault of 0.3 contracts by 0.3: refused. One of 1e-3 is worth refining. */
START_TEST(gates_a_useless_factor)
{
    for (int bad = 0; bad < 2; bad++) {
        lw_problem *problem = filip_problem();
        lw_system *system = system_of(problem, NULL);
        qr_decomposition qr;
        lw_exact *exact = NULL;
        lw_exact_state state;
        lw_refinement done;
        qr_make(system, 0, &qr);
        qr.spoil = bad ? 0.3 : 1e-3;
        ck_assert_int_eq(lw_exact_new(system, 0, &exact, NULL), LW_OK);
        ck_assert_int_eq(lw_exact_state_new(exact, &state, NULL), LW_OK);
        lw_status status =
            lw_exact_refine(exact, LW_SIDE_PROBLEM, 0, &qr.base, 0, 20, NULL, &state, &done, NULL);
        ck_assert_int_eq(status, bad ? LW_NOT_CONVERGED : LW_OK);
        ck_assert_double_eq_tol(done.contraction, qr.spoil, 0.01);
        lw_exact_state_clear(&state);
        lw_dense_qr_clear(&qr.qr);
        lw_exact_free(exact);
        lw_system_free(system);
        lw_problem_free(problem);
    }
}
END_TEST

/* The prior is the answer already: z is rounding, and that is no failure. */
START_TEST(a_zero_correction_is_no_failure)
{
    const double A[] = {1, 0, 1, 0, 0, 3, 0, 3}, value[] = {1.1, 0.9, 3.5, 2.5}, prior[] = {1, 1};
    lw_problem *problem = problem_from_dense(4, 2, A, value, NULL);
    problem_set_prior(problem, prior);
    lw_system *system = system_of(problem, NULL);
    qr_decomposition qr;
    lw_exact *exact = NULL;
    lw_exact_state state;
    lw_refinement done;
    qr_make(system, 0, &qr);
    ck_assert_int_eq(lw_exact_new(system, 0, &exact, NULL), LW_OK);
    ck_assert_int_eq(lw_exact_state_new(exact, &state, NULL), LW_OK);
    ck_assert_int_eq(lw_exact_refine(exact, LW_SIDE_PROBLEM, 0, &qr.base, 0, 10, NULL, &state, &done, NULL),
                     LW_OK);
    for (int j = 0; j < 2; j++) ck_assert_double_le(fabs(state.dx[j].high), 1e-15);
    lw_exact_state_clear(&state);
    lw_dense_qr_clear(&qr.qr);
    lw_exact_free(exact);
    lw_system_free(system);
    lw_problem_free(problem);
}
END_TEST

/* The exact products give the same bytes for any team. */
START_TEST(exact_products_do_not_depend_on_threads)
{
    const int64_t m = 9000, n = 5000, each = 4;
    lw_sparse *A = NULL;
    uint64_t state = 13;
    double *value = LW_NEW_ZEROS(double, m);
    lw_decimal *x = LW_NEW_ARRAY(lw_decimal, n), *y = LW_NEW_ZEROS(lw_decimal, m), *g[2], *f[2];
    ck_assert_int_eq(lw_sparse_new(m, n, n * each, 1, &A, NULL), LW_OK);
    for (int64_t j = 0; j < n; j++) {
        A->start[j] = j * each;
        x[j] = lw_two_sum(next_random(&state), 1e-17 * next_random(&state));
        for (int64_t e = 0; e < each; e++) {
            A->index[j * each + e] = (int32_t)(e * (m / each) + j * 37 % (m / each));
            A->value[j * each + e] = next_random(&state);
            A->low[j * each + e] = 1e-17 * next_random(&state);
        }
    }
    A->start[n] = n * each;
    for (int64_t i = 0; i < m; i++) y[i] = lw_decimal_of(next_random(&state));
    lw_problem *problem = problem_from_sparse(A, value, NULL);
    lw_system *system = system_of(problem, NULL);
    for (int k = 0; k < 2; k++) {
        lw_team *team = NULL;
        ck_assert_int_eq(lw_team_new(1 + 2 * k, &team, NULL), LW_OK);
        g[k] = LW_NEW_ARRAY(lw_decimal, n);
        f[k] = LW_NEW_ZEROS(lw_decimal, m);
        lw_system_subtract_exact(system, x, team, f[k]);
        lw_system_transposed_exact(system, y, team, g[k]);
        lw_team_free(team);
    }
    ck_assert_mem_eq(f[0], f[1], (size_t)m * sizeof(lw_decimal));
    ck_assert_mem_eq(g[0], g[1], (size_t)n * sizeof(lw_decimal));
    /* y'A x both ways, to the last digits of double-double */
    lw_decimal forth = {0, 0}, back = {0, 0};
    for (int64_t i = 0; i < m; i++) forth = lw_decimal_subtract(forth, lw_decimal_multiply(y[i], f[0][i]));
    for (int64_t j = 0; j < n; j++) back = lw_decimal_add(back, lw_decimal_multiply(x[j], g[0][j]));
    ck_assert_double_le(fabs(lw_decimal_subtract(forth, back).high), 1e-27);
    for (int k = 0; k < 2; k++) {
        lw_free(f[k]);
        lw_free(g[k]);
    }
    lw_free(value);
    lw_free(x);
    lw_free(y);
    lw_system_free(system);
    lw_problem_free(problem);
}
END_TEST

Suite *suite_exact(void)
{
    Suite *suite = suite_create("exact");
    TCase *tcase = tcase_create("exact");
    tcase_add_test(tcase, filip_to_twenty_digits);
    tcase_add_test(tcase, solves_what_the_problem_states);
    tcase_add_test(tcase, conditions_are_told_in_their_own_scale);
    tcase_add_test(tcase, gates_a_useless_factor);
    tcase_add_test(tcase, a_zero_correction_is_no_failure);
    tcase_add_test(tcase, exact_products_do_not_depend_on_threads);
    suite_add_tcase(suite, tcase);
    return suite;
}
