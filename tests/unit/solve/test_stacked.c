/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Penalties with a null space: prior-conditioned against stacked and factored solutions, what a penalty must
 * not damp away, and the sweep without a standard form. */
#include "check_solve.h"
#include "solving.h"

#include "core/memory.h"
#include "matrix/vector.h"
#include "solve/krylov.h"

#include <math.h>
#include <string.h>

enum { SIDE = 9, CELLS = SIDE * SIDE, ROWS = 110 };

/* Cells of a 9 x 9 grid, seen by random rows. truth: cells, or NULL for noise. */
static lw_problem *grid_problem(const double *truth, double *place_x, double *place_y)
{
    double *A = random_matrix(ROWS, CELLS, 7), *b = random_vector(ROWS, 8), sigma[ROWS];
    for (int i = 0; i < ROWS; i++) {
        sigma[i] = 0.5;
        for (int j = 0; truth != NULL && j < CELLS; j++)
            b[i] = (j > 0 ? b[i] : 0) + A[i * CELLS + j] * truth[j];
    }
    for (int j = 0; j < CELLS; j++) {
        place_x[j] = 2.0 * (j % SIDE);
        place_y[j] = j / SIDE;
    }
    lw_problem *problem = problem_from_dense(ROWS, CELLS, A, b, sigma);
    problem_set_coordinate(problem, 0, place_x);
    problem_set_coordinate(problem, 1, place_y);
    lw_free(A);
    lw_free(b);
    return problem;
}

static lw_system *system_of(const lw_problem *problem, lw_penalty_kind kind)
{
    lw_system *system = NULL;
    lw_error error = {0};
    lw_system_options options = {.penalty = {.prefer = kind}};
    ck_assert_msg(lw_system_new(problem, &options, NULL, &system, &error) == LW_OK, "%s", error.text);
    return system;
}

static lw_decomposition *decompose_by(const char *engine, lw_system *system, double lambda, int sweep,
                                      lw_log *log)
{
    lw_decomposition *d = NULL;
    lw_error error = {0};
    lw_engine_choice choice;
    lw_watch watch = {.log = log};
    lw_solve_options options = {.engine = engine, .sweep = sweep, .tolerance = 1e-9, .trace_probes = sweep};
    lw_status status = lw_decompose(system, lambda, &options, &watch, &choice, &d, &error);
    ck_assert_msg(status == LW_OK, "%s: %d %s", engine, status, error.text);
    return d;
}

static const char *const iterative[] = {"lsqr", "cgls", "lsmr"};

/* Every damping of the curve: the model of the bidiagonalization against that of the factored normal
 * equations. */
START_TEST(prior_conditioned_against_factored)
{
    double x[CELLS], y[CELLS], lambda[12], *z = LW_NEW_ARRAY(double, 12 * CELLS),
                                           *expected = LW_NEW_ARRAY(double, 12 * CELLS);
    lw_problem *problem = grid_problem(NULL, x, y);
    for (int i = 0; i < 12; i++) lambda[i] = pow(10, -2 + 0.3 * i);
    for (int kind = LW_PREFER_SMALLEST; kind <= LW_PREFER_SMOOTHEST; kind++) {
        lw_system *system = system_of(problem, (lw_penalty_kind)kind);
        lw_point point[12], other[12];
        int exhausted = 0;
        lw_decomposition *direct = decompose_by("cholesky", system, 1, 1, NULL);
        lw_decomposition *krylov = decompose_by(iterative[_i], system, 1, 1, NULL);
        ck_assert_int_eq(direct->methods->evaluate(direct, 12, lambda, 1, other, expected, NULL, NULL),
                         LW_OK);
        ck_assert_int_eq(krylov->methods->extend(krylov, 400, &exhausted, NULL, NULL), LW_OK);
        ck_assert_int_eq(krylov->methods->evaluate(krylov, 12, lambda, 1, point, z, NULL, NULL), LW_OK);
        for (int i = 0; i < 12; i++) {
            ck_assert_double_le(point[i].error_bound, 1e-6);
            ck_assert_double_le(apart(CELLS, z + i * CELLS, expected + i * CELLS), 1e-6);
            ck_assert_double_eq_tol(point[i].misfit, other[i].misfit, 1e-7 * other[i].misfit);
            ck_assert_double_eq_tol(point[i].size, other[i].size, 1e-6 * other[i].size);
            ck_assert_double_eq_tol(point[i].effective_parameters, other[i].effective_parameters,
                                    1e-7 * CELLS);
        }
        lw_decomposition_free(krylov);
        lw_decomposition_free(direct);
        lw_system_free(system);
    }
    lw_free(z);
    lw_free(expected);
    lw_problem_free(problem);
}
END_TEST

/* A constant under first and second differences, a plane under second ones: exact data bring it back at any
 * damping, by every engine. */
START_TEST(null_models_come_back)
{
    static const char *const engines[] = {"dense", "cholesky", "qr", "lsqr", "cgls", "lsmr"};
    double x[CELLS], y[CELLS], truth[CELLS];
    for (int plane = 0; plane < 2; plane++) {
        for (int j = 0; j < CELLS; j++)
            truth[j] = plane ? 3 + 0.5 * (2.0 * (j % SIDE)) - 0.25 * (j / SIDE) : 0.7;
        lw_problem *problem = grid_problem(truth, x, y);
        for (int kind = plane ? LW_PREFER_SMOOTHEST : LW_PREFER_FLATTEST; kind <= LW_PREFER_SMOOTHEST;
             kind++) {
            lw_system *system = system_of(problem, (lw_penalty_kind)kind);
            for (double lambda = 1e-2; lambda < 1e5; lambda *= 100) {
                lw_estimate *estimate = NULL;
                lw_decomposition *d = decompose_by(engines[_i], system, lambda, 0, NULL);
                lw_status status = d->methods->estimate(d, lambda, NULL, &estimate, NULL);
                ck_assert_msg(status >= 0, "%s", engines[_i]);
                ck_assert_msg(apart(CELLS, estimate->x, truth) <= 1e-9,
                              "%s, kind %d, damping %g: off by %.2g", engines[_i], kind, lambda,
                              apart(CELLS, estimate->x, truth));
                lw_estimate_free(estimate);
                lw_decomposition_free(d);
            }
            lw_system_free(system);
        }
        lw_problem_free(problem);
    }
}
END_TEST

enum { MANY = 2060, DAMPED = 50, TALL = 2400 };

/* A chain in which more parameters are left undamped than a standard form takes. */
static lw_problem *chain_problem(void)
{
    lw_sparse *A = NULL;
    double *b = random_vector(TALL, 3), *sigma = LW_NEW_ARRAY(double, TALL),
           *weight = LW_NEW_ARRAY(double, MANY);
    ck_assert_int_eq(lw_sparse_new(TALL, MANY, 4 * MANY, 0, &A, NULL), LW_OK);
    int64_t e = 0;
    for (int j = 0; j < MANY; j++) {
        A->start[j] = e;
        A->index[e] = j, A->value[e++] = 2;
        if (j > 0) A->index[e] = j + 1, A->value[e++] = -1;
        if (j % 7 == 0) A->index[e] = MANY + 2 + j / 7, A->value[e++] = 0.5;
        weight[j] = j < DAMPED ? 1 : 0;
    }
    A->start[MANY] = e;
    for (int i = 0; i < TALL; i++) sigma[i] = 0.5;
    lw_problem *problem = problem_from_sparse(A, b, sigma);
    problem_set_damp_weight(problem, weight);
    lw_free(b);
    lw_free(sigma);
    lw_free(weight);
    return problem;
}

START_TEST(sweep_without_a_standard_form)
{
    lw_problem *problem = chain_problem();
    lw_system *system = system_of(problem, LW_PREFER_SMALLEST);
    lw_log log = {0};
    lw_decomposition *d = decompose_by(iterative[_i], system, 1, 1, &log);
    lw_decomposition *direct = decompose_by("cholesky", system, 1, 1, NULL);
    double lambda[4] = {0.3, 1, 4, 20}, top, *z = LW_NEW_ARRAY(double, 4 * MANY),
           *expected = LW_NEW_ARRAY(double, 4 * MANY);
    lw_point point[4], other[4];
    ck_assert_ptr_null(d->methods->extend);
    ck_assert_str_eq(d->methods->engine, iterative[_i]);
    ck_assert_int_eq((int)log.count, 1);
    ck_assert_ptr_nonnull(strstr(log.text[0], "more than 2000 directions"));
    ck_assert_int_eq(direct->methods->evaluate(direct, 4, lambda, 1, other, expected, NULL, NULL), LW_OK);
    ck_assert_int_eq(d->methods->evaluate(d, 4, lambda, 1, point, z, NULL, NULL), LW_OK);
    for (int i = 0; i < 4; i++) {
        ck_assert_double_le(point[i].error_bound, 1e-9);
        ck_assert_double_le(apart(MANY, z + i * MANY, expected + i * MANY), 1e-8);
        ck_assert_double_eq_tol(point[i].misfit, other[i].misfit, 1e-9 * other[i].misfit);
        ck_assert_double_eq_tol(point[i].size, other[i].size, 1e-7 * other[i].size);
        ck_assert_double_eq_tol(point[i].size_slope, other[i].size_slope, 1e-6 * fabs(other[i].size_slope));
        ck_assert_double_le(fabs(point[i].effective_parameters - other[i].effective_parameters),
                            4 * point[i].effective_spread);
    }
    ck_assert_int_eq(lw_largest_singular(d, NULL, &top, NULL), LW_OK);
    ck_assert_double_ge(top, 1);
    ck_assert_double_le(top, 100); /* entries are 4 and 2: singular values up to about 6 */
    lw_free(z);
    lw_free(expected);
    lw_decomposition_free(direct);
    lw_decomposition_free(d);
    lw_log_clear(&log);
    lw_system_free(system);
    lw_problem_free(problem);
}
END_TEST

/* Right-hand sides of data and of penalty, solved in the standard form, meet the normal equations of the
 * stack. */
START_TEST(many_sides_in_standard_form)
{
    double x[CELLS], y[CELLS];
    lw_problem *problem = grid_problem(NULL, x, y);
    for (int kind = LW_PREFER_FLATTEST; kind <= LW_PREFER_SMOOTHEST; kind++) {
        lw_system *system = system_of(problem, (lw_penalty_kind)kind);
        lw_decomposition *d = decompose_by(iterative[_i], system, 2, 1, NULL),
                         *direct = decompose_by("cholesky", system, 2, 1, NULL);
        int64_t tall = system->rows + system->penalty_rows, k = 11;
        double *f = random_vector(tall * k, 5), *z = LW_NEW_ARRAY(double, k *CELLS),
               *r = LW_NEW_ARRAY(double, k *tall);
        double *z0 = LW_NEW_ARRAY(double, k *CELLS), *r0 = LW_NEW_ARRAY(double, k *tall);
        for (int64_t i = system->rows; i < tall; i++) f[i] = 0; /* a side without a penalty part */
        ck_assert_int_eq(d->methods->solve_many(d, 2, k, f, NULL, NULL, r, z, NULL, NULL), LW_OK);
        ck_assert_int_eq(direct->methods->solve_many(direct, 2, k, f, NULL, NULL, r0, z0, NULL, NULL), LW_OK);
        ck_assert_double_le(apart(k * CELLS, z, z0), 1e-8);
        ck_assert_double_le(apart(k * tall, r, r0), 1e-8);
        ck_assert_int_eq(d->methods->solve_many(d, 2, 1, f, NULL, NULL, r, NULL, NULL, NULL), LW_OK);
        ck_assert_double_le(apart(tall, r, r0), 1e-8);
        lw_free(f);
        lw_free(z);
        lw_free(r);
        lw_free(z0);
        lw_free(r0);
        lw_decomposition_free(direct);
        lw_decomposition_free(d);
        lw_system_free(system);
    }
    lw_problem_free(problem);
}
END_TEST

Suite *suite_stacked(void)
{
    Suite *suite = suite_create("stacked");
    TCase *cases = tcase_create("stacked");
    tcase_set_timeout(cases, 60);
    tcase_add_loop_test(cases, prior_conditioned_against_factored, 0, 3);
    tcase_add_loop_test(cases, null_models_come_back, 0, 6);
    tcase_add_loop_test(cases, sweep_without_a_standard_form, 0, 3);
    tcase_add_loop_test(cases, many_sides_in_standard_form, 0, 3);
    suite_add_tcase(suite, cases);
    return suite;
}
