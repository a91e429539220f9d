/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Exact, sampled and bounded standard deviations of one damped problem of 2500 cells, against a dense
 * inverse; and the low-rank bound with penalties that leave directions undamped. */
#include "check_certainty.h"

#include "certainty/low_rank.h"
#include "certainty/sigma.h"
#include "core/memory.h"
#include "matrix/dense.h"
#include "unit/support.h"

#include <math.h>

enum { SIDE = 50, CELLS = SIDE * SIDE, RAYS = 500 };
#define LAMBDA 30.0

/* Straight rays across side x side cells, each with the length (in hundredths of the side) that steps along
 * it count. */
static lw_problem *rays_through(int side, int rays, uint64_t seed)
{
    int cells = side * side;
    lw_sparse *rows = NULL, *columns = NULL;
    double *value = LW_NEW_ARRAY(double, rays), *sigma = LW_NEW_ARRAY(double, rays),
           *length = LW_NEW_ARRAY(double, cells);
    double *x = LW_NEW_ARRAY(double, cells), *y = LW_NEW_ARRAY(double, cells);
    ck_assert_int_eq(lw_sparse_new(cells, rays, (int64_t)rays * 4 * side, 0, &rows, NULL), LW_OK);
    int64_t e = 0;
    for (int i = 0; i < rays; i++) {
        double from = 0.5 + 0.5 * next_random(&seed), to = 0.5 + 0.5 * next_random(&seed);
        for (int c = 0; c < cells; c++) length[c] = 0;
        for (int s = 0; s < 4 * side; s++) {
            double t = (s + 0.5) / (4 * side), across = from + t * (to - from);
            int a = (int)(t * side), b = (int)(across * side);
            length[i % 2 ? a * side + b : b * side + a] += 0.25 * sqrt(1 + (to - from) * (to - from));
        }
        rows->start[i] = e;
        for (int c = 0; c < cells; c++)
            if (length[c] > 0) {
                rows->index[e] = c;
                rows->value[e++] = length[c];
            }
        value[i] = next_random(&seed);
        sigma[i] = 0.4 + 0.1 * next_random(&seed);
    }
    rows->start[rays] = e;
    ck_assert_int_eq(lw_sparse_transpose(rows, &columns, NULL), LW_OK);
    lw_problem *problem = problem_from_sparse(columns, value, sigma);
    for (int c = 0; c < cells; c++) {
        x[c] = c / side;
        y[c] = c % side;
    }
    problem_set_coordinate(problem, 0, x);
    problem_set_coordinate(problem, 1, y);
    lw_sparse_free(rows);
    void *arrays[] = {value, sigma, length, x, y};
    for (int k = 0; k < 5; k++) lw_free(arrays[k]);
    return problem;
}

typedef struct damped {
    lw_problem *problem;
    lw_system *system;
    lw_decomposition *decomposition;
    lw_cofactor *cofactor;
    double *Q; /* columns x columns, dense, in z */
    double trace;
} damped;

/* Q = (A'A + lambda^2 L'L)^-1 by a dense Cholesky factor, trace of Q A'A. */
static damped damped_by(const char *engine, lw_problem *problem, lw_penalty_kind kind, double lambda)
{
    damped d = {.problem = problem};
    lw_error error = {0};
    lw_engine_choice choice;
    lw_sparse *gram = NULL, *penalty = NULL;
    lw_system_options options = {.penalty = {.prefer = kind}};
    lw_solve_options solve = {.engine = engine, .tolerance = 1e-8};
    int64_t defect;
    ck_assert_int_eq(lw_system_new(problem, &options, NULL, &d.system, &error), LW_OK);
    ck_assert_int_eq(lw_decompose(d.system, lambda, &solve, NULL, &choice, &d.decomposition, &error), LW_OK);
    ck_assert_int_eq(lw_cofactor_none(d.decomposition, lambda, &d.cofactor, &error), LW_OK);
    int64_t n = d.system->columns;
    d.Q = LW_NEW_ZEROS(double, n *n);
    ck_assert_int_eq(lw_system_matrix(d.system, NULL, &error), LW_OK);
    ck_assert_int_eq(lw_sparse_gram(d.system->matrix, NULL, &gram, &error), LW_OK);
    ck_assert_int_eq(lw_system_penalty_gram(d.system, &penalty, &error), LW_OK);
    for (int64_t j = 0; j < n; j++) {
        for (int64_t e = gram->start[j]; e < gram->start[j + 1]; e++)
            d.Q[gram->index[e] + j * n] += gram->value[e];
        for (int64_t e = penalty->start[j]; e < penalty->start[j + 1]; e++)
            d.Q[penalty->index[e] + j * n] += lambda * lambda * penalty->value[e];
    }
    ck_assert_int_eq(lw_dense_cholesky(n, d.Q, &defect, &error), LW_OK);
    ck_assert_int_eq(lw_dense_cholesky_invert(n, d.Q, &error), LW_OK);
    d.trace = (double)n;
    for (int64_t j = 0; j < n; j++)
        for (int64_t e = penalty->start[j]; e < penalty->start[j + 1]; e++)
            d.trace -= lambda * lambda * (penalty->index[e] == j ? 1 : 2) * penalty->value[e] *
                       d.Q[penalty->index[e] + j * n];
    lw_sparse_free(gram);
    lw_sparse_free(penalty);
    return d;
}

static void damped_clear(damped *d)
{
    lw_cofactor_free(d->cofactor);
    lw_decomposition_free(d->decomposition);
    lw_system_free(d->system);
    lw_problem_free(d->problem);
    lw_free(d->Q);
}

/* Standard deviations of the posterior: exact, by the factor of an iterative and of a direct engine; samples,
 * by several seeds; the low-rank bound. */
START_TEST(three_kinds_of_one_problem)
{
    damped d = damped_by("lsqr", rays_through(SIDE, RAYS, 5), LW_PREFER_FLATTEST, LAMBDA);
    lw_error error = {0};
    double *variance = LW_NEW_ARRAY(double, CELLS);
    for (int k = 0; k < 2; k++) {
        lw_certainty_options options = default_options();
        lw_engine_choice choice;
        lw_solve_options solve = {.engine = k ? "cholesky" : "lsqr"};
        lw_decomposition *own = NULL;
        lw_estimate *estimate = NULL;
        lw_certainty *c = NULL;
        options.meaning = LW_MEANS_POSTERIOR;
        options.reliability = false;
        ck_assert_int_eq(lw_decompose(d.system, LAMBDA, &solve, NULL, &choice, &own, &error), LW_OK);
        ck_assert_int_eq(own->methods->estimate(own, LAMBDA, NULL, &estimate, &error), LW_OK);
        ck_assert_int_eq(lw_certainty_make(own, estimate, &options, true, NULL, &c, &error), LW_OK);
        for (int j = 0; j < CELLS; j++) {
            ck_assert_int_eq(c->sigma_kind[j], LW_SIGMA_EXACT);
            ck_close(c->sigma[j], sqrt(d.Q[j + j * CELLS]) * d.system->scale[j], 1e-8);
        }
        ck_close(c->effective_parameters, d.trace, 1e-8);
        lw_certainty_free(c);
        lw_estimate_free(estimate);
        lw_decomposition_free(own);
    }
    const int samples = 60, runs = 5;
    for (int run = 0; run < runs; run++) {
        lw_watch watch = {.seed = (uint64_t)(101 + run)};
        double square = 0;
        ck_assert_int_eq(lw_variance_by_samples(d.cofactor, true, samples, &watch, variance, &error), LW_OK);
        for (int j = 0; j < CELLS; j++) square += pow(sqrt(variance[j] / d.Q[j + j * CELLS]) - 1, 2) / CELLS;
        ck_assert_double_le(sqrt(square), 1.1 / sqrt(2.0 * samples)); /* rms over the cells; 1.0 is stated */
    }
    lw_low_rank info;
    ck_assert_int_eq(lw_variance_low_rank(d.cofactor, 0, NULL, variance, &info, &error), LW_OK);
    ck_assert(info.complete && info.steps < RAYS);
    ck_assert_double_ge((double)info.steps, 1.25 * d.trace);
    ck_assert_double_le(info.effective, d.trace * (1 + 1e-9));
    for (int j = 0; j < CELLS; j++) {
        ck_assert_double_ge(variance[j], d.Q[j + j * CELLS] * (1 - 1e-10));
        ck_assert_double_le(sqrt(variance[j]), 1.04 * sqrt(d.Q[j + j * CELLS]));
    }
    lw_free(variance);
    damped_clear(&d);
}
END_TEST

/* Bounds stay above the exact values however few the steps, and fall with them; what the penalty leaves
 * undamped (constants, planes) is in them. */
START_TEST(bounds_hold_at_any_rank)
{
    enum { FEW = 14 * 14 };
    damped d = damped_by("lsqr", rays_through(14, 120, 9), (lw_penalty_kind)(LW_PREFER_SMALLEST + _i), 3);
    double variance[FEW], before = HUGE_VAL;
    for (int64_t most = 1; most <= 256; most *= 4) {
        lw_low_rank info;
        double sum = 0;
        ck_assert_int_eq(lw_variance_low_rank(d.cofactor, most, NULL, variance, &info, NULL), LW_OK);
        ck_assert(info.steps <= most);
        for (int j = 0; j < FEW; j++) {
            ck_assert_double_ge(variance[j], d.Q[j + j * FEW] * (1 - 1e-8));
            sum += variance[j];
        }
        ck_assert_double_le(sum, before);
        ck_assert_double_le(info.effective, d.trace * (1 + 1e-9));
        before = sum;
    }
    for (int j = 0; j < FEW; j++) ck_close(variance[j], d.Q[j + j * FEW], 1e-7); /* all the data: exact */
    damped_clear(&d);
}
END_TEST

/* trace of the resolution = trace of the influence matrix, whatever the engine and the penalty. */
START_TEST(traces_agree)
{
    static const char *const engines[] = {"dense", "cholesky", "lsqr"};
    for (int kind = LW_PREFER_SMALLEST; kind <= LW_PREFER_SMOOTHEST; kind++) {
        damped d = damped_by(engines[_i], rays_through(14, 120, 9), (lw_penalty_kind)kind, 3);
        lw_certainty_options options = default_options();
        lw_certainty *c = NULL;
        lw_estimate *estimate = NULL;
        lw_error error = {0};
        lw_point point;
        double lambda = 3, sum = 0;
        ck_assert_int_eq(d.decomposition->methods->estimate(d.decomposition, lambda, NULL, &estimate, &error),
                         LW_OK);
        ck_assert_int_eq(
            d.decomposition->methods->evaluate(d.decomposition, 1, &lambda, 1, &point, NULL, NULL, &error),
            LW_OK);
        if (_i < 2) ck_close(point.effective_parameters, d.trace, 1e-8);
        ck_assert_int_eq(lw_certainty_make(d.decomposition, estimate, &options, true, NULL, &c, &error),
                         LW_OK);
        for (int64_t j = 0; j < c->parameters; j++) sum += c->resolution[j];
        ck_close(sum, d.trace, 1e-8);
        ck_close(c->effective_parameters, sum, 1e-12);
        ck_close(c->test.degrees_of_freedom, 120 - sum, 1e-12);
        lw_certainty_free(c);
        lw_estimate_free(estimate);
        damped_clear(&d);
    }
}
END_TEST

Suite *suite_sigma_kinds(void)
{
    Suite *suite = suite_create("sigma_kinds");
    TCase *cases = tcase_create("sigma_kinds");
    tcase_set_timeout(cases, 120);
    tcase_add_test(cases, three_kinds_of_one_problem);
    tcase_add_loop_test(cases, bounds_hold_at_any_rank, 0, 3);
    tcase_add_loop_test(cases, traces_agree, 0, 3);
    suite_add_tcase(suite, cases);
    return suite;
}
