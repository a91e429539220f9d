/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "solve/krylov.h"

#include "check_solve.h"
#include "small_system.h"
#include "support.h"

#include "core/memory.h"
#include "matrix/dense.h"
#include "solve/cgls.h"
#include "solve/lsmr.h"
#include "solve/lsqr.h"

#include <math.h>
#include <string.h>

enum { M = 60, N = 45 };

/* A smoothing matrix with noise, its singular value decomposition as the outside check. */
typedef struct fixture {
    double A[M * N], b[M], u[M * N], s[N], vt[N * N];
    lw_problem *problem;
    lw_system *system;
} fixture;

static void set_up(fixture *f)
{
    uint64_t state = 11;
    for (int i = 0; i < M; i++) {
        for (int j = 0; j < N; j++)
            f->A[i * N + j] = exp(-0.02 * pow(i * (double)N / M - j, 2)) + 0.01 * next_random(&state);
        f->b[i] = sin(0.2 * i) * 5 + next_random(&state);
    }
    double *copy = lw_alloc(M * N, sizeof(double));
    for (int i = 0; i < M; i++)
        for (int j = 0; j < N; j++) copy[j * M + i] = f->A[i * N + j];
    ck_assert_int_eq(lw_dense_svd(M, N, copy, f->u, f->s, f->vt, NULL), LW_OK);
    lw_free(copy);
    lw_system_options options = {0};
    f->problem = problem_from_dense(M, N, f->A, f->b, NULL);
    ck_assert_int_eq(lw_system_new(f->problem, &options, NULL, &f->system, NULL), LW_OK);
}

static void tear_down(fixture *f)
{
    lw_system_free(f->system);
    lw_problem_free(f->problem);
}

typedef struct closed_form {
    double misfit, size, slope, trace, x[N];
} closed_form;

/* Filter factors f_i = s_i^2 / (s_i^2 + lambda^2). */
static closed_form solve_exactly(const fixture *f, double lambda)
{
    closed_form c = {0};
    double square = 0, size = 0;
    for (int i = 0; i < M; i++) square += f->b[i] * f->b[i];
    for (int k = 0; k < N; k++) {
        double ub = 0, s = f->s[k], d = s * s + lambda * lambda;
        for (int i = 0; i < M; i++) ub += f->u[k * M + i] * f->b[i];
        double y = s * ub / d;
        square += pow(ub * lambda * lambda / d, 2) - ub * ub;
        size += y * y;
        c.slope -= 4 * lambda * y * y / d;
        c.trace += s * s / d;
        for (int j = 0; j < N; j++) c.x[j] += f->vt[j * N + k] * y;
    }
    c.misfit = sqrt(square);
    c.size = sqrt(size);
    return c;
}

static const lw_engine *const engines[] = {&lw_engine_lsqr, &lw_engine_cgls, &lw_engine_lsmr};

START_TEST(curve_is_read_from_one_bidiagonalization)
{
    static fixture f;
    set_up(&f);
    double lambda[11];
    lw_point point[11];
    static double models[11 * N];
    for (int i = 0; i < 11; i++) lambda[i] = f.s[0] * pow(10, -0.3 * i);
    for (int e = 0; e < 3; e++) {
        lw_solve_options options = {.sweep = 1, .trace_probes = 1};
        lw_decomposition *d = NULL;
        int exhausted = 0;
        ck_assert_int_eq(engines[e]->decompose(f.system, 1, &options, NULL, &d, NULL), LW_OK);
        ck_assert_str_eq(d->methods->engine, engines[e]->name);
        ck_assert_int_eq(d->methods->extend(d, 120, &exhausted, NULL, NULL), LW_OK);
        ck_assert_int_eq(d->methods->evaluate(d, 11, lambda, 1, point, models, NULL, NULL), LW_OK);
        int good = 0;
        for (int i = 0; i < 11; i++) {
            closed_form c = solve_exactly(&f, lambda[i]);
            ck_assert_double_eq_tol(point[i].effective_parameters, c.trace, 1e-9 * c.trace);
            ck_assert_double_eq(point[i].effective_spread, 0);
            if (point[i].error_bound > 1e-9) continue;
            good++;
            ck_assert_double_eq_tol(point[i].misfit, c.misfit, 1e-8 * c.misfit);
            ck_assert_double_eq_tol(point[i].size, c.size, 1e-8 * c.size);
            ck_assert_double_eq_tol(point[i].size_slope, c.slope, 1e-7 * fabs(c.slope));
            for (int j = 0; j < N; j++)
                ck_assert_double_eq_tol(models[i * N + j] * f.system->scale[j], c.x[j], 1e-8 * c.size);
        }
        ck_assert_int_ge(good, 8);
        lw_decomposition_free(d);
    }
    tear_down(&f);
}
END_TEST

/* At few steps the bound is above the error of the model, at every damping. */
START_TEST(error_bound_holds_on_the_way)
{
    static fixture f;
    set_up(&f);
    lw_solve_options options = {.sweep = 1};
    lw_decomposition *d = NULL;
    ck_assert_int_eq(lw_engine_lsqr.decompose(f.system, 1, &options, NULL, &d, NULL), LW_OK);
    for (int steps = 0; steps < 12; steps++) {
        ck_assert_int_eq(d->methods->extend(d, 2, NULL, NULL, NULL), LW_OK);
        for (double lambda = 0.01 * f.s[0]; lambda < f.s[0]; lambda *= 1.7) {
            lw_point point;
            double z[N], error = 0;
            ck_assert_int_eq(d->methods->evaluate(d, 1, &lambda, 0, &point, z, NULL, NULL), LW_OK);
            closed_form c = solve_exactly(&f, lambda);
            for (int j = 0; j < N; j++) error += pow(z[j] * f.system->scale[j] - c.x[j], 2);
            ck_assert_double_le(sqrt(error), point.error_bound * point.size * (1 + 1e-9) + 1e-12);
        }
    }
    lw_decomposition_free(d);
    tear_down(&f);
}
END_TEST

START_TEST(estimates_agree_between_engines)
{
    static fixture f;
    set_up(&f);
    double lambda = 0.02 * f.s[0];
    closed_form c = solve_exactly(&f, lambda);
    for (int e = 0; e < 3; e++)
        for (int sweep = 0; sweep < 2; sweep++) {
            lw_solve_options options = {.tolerance = 1e-12, .sweep = sweep};
            lw_decomposition *d = NULL;
            lw_estimate *estimate = NULL;
            ck_assert_int_eq(engines[e]->decompose(f.system, lambda, &options, NULL, &d, NULL), LW_OK);
            if (sweep) ck_assert_int_eq(d->methods->extend(d, 10, NULL, NULL, NULL), LW_OK);
            ck_assert_int_ge(d->methods->estimate(d, lambda, NULL, &estimate, NULL), 0);
            for (int j = 0; j < N; j++) ck_assert_double_eq_tol(estimate->x[j], c.x[j], 1e-10 * c.size);
            ck_assert_double_eq_tol(estimate->point.misfit, c.misfit, 1e-10 * c.misfit);
            ck_assert_double_le(estimate->point.error_bound, 1e-10);
            ck_assert_int_gt(estimate->steps, 0);
            lw_estimate_free(estimate);
            lw_decomposition_free(d);
        }
    tear_down(&f);
}
END_TEST

/* Undamped, well conditioned: the 8 x 5 integer system. */
START_TEST(undamped_estimate)
{
    lw_system_options none = {0};
    lw_system *system = NULL;
    lw_problem *problem = problem_from_dense(8, 5, small_A, small_b, NULL);
    ck_assert_int_eq(lw_system_new(problem, &none, NULL, &system, NULL), LW_OK);
    for (int e = 0; e < 3; e++) {
        lw_solve_options options = {.tolerance = 1e-10};
        lw_decomposition *d = NULL;
        lw_estimate *estimate = NULL;
        ck_assert_int_eq(engines[e]->decompose(system, 0, &options, NULL, &d, NULL), LW_OK);
        ck_assert_int_eq(d->methods->estimate(d, 0, NULL, &estimate, NULL), LW_OK);
        for (int j = 0; j < 5; j++) ck_assert_double_eq_tol(estimate->x[j], small_solutions[0].x[j], 1e-12);
        ck_assert_double_gt(estimate->rcond, 0.01);
        ck_assert_double_le(estimate->rcond, 1);
        ck_assert_int_eq(estimate->rank, -1);
        lw_estimate_free(estimate);
        lw_decomposition_free(d);
    }
    lw_system_free(system);
    lw_problem_free(problem);
}
END_TEST

/* Where V does not fit, models come one by one from the recurrence, and the log says so. */
START_TEST(basis_that_outgrows_the_budget)
{
    static fixture f;
    set_up(&f);
    lw_log log = {0};
    lw_watch watch = {.log = &log, .memory = 2 * 8 * N * 6}; /* six vectors */
    lw_solve_options options = {.sweep = 1};
    lw_decomposition *d = NULL;
    ck_assert_int_eq(lw_engine_lsqr.decompose(f.system, 1, &options, NULL, &d, NULL), LW_OK);
    lw_krylov *self = (lw_krylov *)d;
    self->watch = watch;
    self->basis.most = 6;
    ck_assert_int_eq(d->methods->extend(d, 60, NULL, &watch, NULL), LW_OK);
    ck_assert(!self->keeps);
    ck_assert_int_eq((int)log.count, 1);
    double lambda[2] = {0.5 * f.s[0], 0.05 * f.s[0]}, z[2 * N];
    lw_point point[2];
    ck_assert_int_eq(d->methods->evaluate(d, 2, lambda, 0, point, z, NULL, NULL), LW_OK);
    for (int i = 0; i < 2; i++) {
        closed_form c = solve_exactly(&f, lambda[i]);
        ck_assert_double_eq_tol(point[i].misfit, c.misfit, 1e-8 * c.misfit);
        for (int j = 0; j < N; j++)
            ck_assert_double_eq_tol(z[i * N + j] * f.system->scale[j], c.x[j], 2e-6 * c.size);
    }
    lw_decomposition_free(d);
    lw_log_clear(&log);
    tear_down(&f);
}
END_TEST

/* Probes against the exact trace: within four stated standard errors, on a problem too large for the exact
 * way. */
START_TEST(probes_estimate_the_trace)
{
    enum { ROWS = 500, COLUMNS = 400 };
    double *A = lw_alloc_zero(ROWS * COLUMNS, sizeof(double)), *b = lw_alloc(ROWS, sizeof(double));
    uint64_t state = 5;
    for (int i = 0; i < ROWS; i++) {
        b[i] = next_random(&state);
        for (int j = 0; j < COLUMNS; j++)
            if ((i + 3 * j) % 17 == 0) A[i * COLUMNS + j] = next_random(&state);
    }
    lw_system_options none = {0};
    lw_system *system = NULL;
    lw_problem *problem = problem_from_dense(ROWS, COLUMNS, A, b, NULL);
    ck_assert_int_eq(lw_system_new(problem, &none, NULL, &system, NULL), LW_OK);
    double *copy = lw_alloc(ROWS * COLUMNS, sizeof(double)), *u = lw_alloc(ROWS * COLUMNS, sizeof(double));
    double *s = lw_alloc(COLUMNS, sizeof(double)), *vt = lw_alloc(COLUMNS * COLUMNS, sizeof(double));
    for (int i = 0; i < ROWS; i++)
        for (int j = 0; j < COLUMNS; j++) copy[j * ROWS + i] = A[i * COLUMNS + j];
    ck_assert_int_eq(lw_dense_svd(ROWS, COLUMNS, copy, u, s, vt, NULL), LW_OK);
    double spread_of_one = 0;
    for (int probes = 1; probes <= 4; probes += 3) {
        lw_solve_options options = {.sweep = 1, .trace_probes = probes};
        lw_decomposition *d = NULL;
        ck_assert_int_eq(lw_engine_lsqr.decompose(system, 1, &options, NULL, &d, NULL), LW_OK);
        ck_assert_int_eq(d->methods->extend(d, 150, NULL, NULL, NULL), LW_OK);
        double lambda = 0.3 * s[0], trace = 0;
        for (int k = 0; k < COLUMNS; k++) trace += s[k] * s[k] / (s[k] * s[k] + lambda * lambda);
        lw_point point;
        ck_assert_int_eq(d->methods->evaluate(d, 1, &lambda, 1, &point, NULL, NULL, NULL), LW_OK);
        ck_assert_double_gt(point.effective_spread, 0);
        ck_assert_double_lt(point.effective_spread, 0.2 * trace);
        ck_assert_double_le(fabs(point.effective_parameters - trace), 4 * point.effective_spread);
        if (probes == 1)
            spread_of_one = point.effective_spread;
        else
            ck_assert_double_lt(point.effective_spread, 0.7 * spread_of_one);
        lw_decomposition_free(d);
    }
    lw_system_free(system);
    lw_problem_free(problem);
    lw_free(A);
    lw_free(b);
    lw_free(copy);
    lw_free(u);
    lw_free(s);
    lw_free(vt);
}
END_TEST

/* Many right-hand sides of the augmented system, against the dense engine; smallest and smoothing penalties.
 */
START_TEST(many_right_hand_sides)
{
    static const double lambda[] = {0, 0.7, 0.7};
    for (int which = 0; which < 3; which++) {
        enum { ROWS = 30, COLUMNS = 12, SIDES = 11 };
        double A[ROWS * COLUMNS], b[ROWS], L[(COLUMNS - 1) * COLUMNS] = {0};
        static double f[(ROWS + COLUMNS) * SIDES], g[COLUMNS * SIDES], z[2][COLUMNS * SIDES],
            r[2][(ROWS + COLUMNS) * SIDES];
        uint64_t state = 21;
        for (int i = 0; i < ROWS * COLUMNS; i++) A[i] = next_random(&state);
        for (int i = 0; i < ROWS; i++) b[i] = next_random(&state);
        lw_problem *problem = problem_from_dense(ROWS, COLUMNS, A, b, NULL);
        for (int i = 0; i + 1 < COLUMNS; i++) {
            L[i * COLUMNS + i] = -1;
            L[i * COLUMNS + i + 1] = 1;
        }
        problem_set_penalty(problem, COLUMNS - 1, L);
        lw_system_options prefer = {.penalty.prefer = which == 2 ? LW_PREFER_OWN : LW_PREFER_SMALLEST};
        lw_system *system = NULL;
        ck_assert_int_eq(lw_system_new(problem, &prefer, NULL, &system, NULL), LW_OK);
        int64_t tall = ROWS + (which == 0 ? 0 : system->penalty_rows);
        for (int64_t i = 0; i < tall * SIDES; i++) f[i] = next_random(&state);
        for (int i = 0; i < COLUMNS * SIDES; i++) g[i] = next_random(&state);
        for (int e = 0; e < 2; e++) {
            lw_solve_options options = {.tolerance = 1e-11};
            lw_decomposition *d = NULL;
            const lw_engine *engine = e == 0 ? lw_engine_find("dense") : &lw_engine_lsqr;
            ck_assert_int_eq(engine->decompose(system, lambda[which], &options, NULL, &d, NULL), LW_OK);
            ck_assert_int_eq(
                d->methods->solve_many(d, lambda[which], SIDES, f, g, NULL, r[e], z[e], NULL, NULL), LW_OK);
            lw_decomposition_free(d);
        }
        for (int i = 0; i < COLUMNS * SIDES; i++) ck_assert_double_eq_tol(z[1][i], z[0][i], 1e-9);
        for (int64_t i = 0; i < tall * SIDES; i++) ck_assert_double_eq_tol(r[1][i], r[0][i], 1e-9);
        lw_system_free(system);
        lw_problem_free(problem);
    }
}
END_TEST

/* Every allocation of a sweep's decomposition fails once: an error, no leak, no crash. */
static bool fail_at(void *state)
{
    int *left = state;
    return (*left)-- == 0;
}

START_TEST(failing_allocations)
{
    static fixture f;
    set_up(&f);
    double lambda[3] = {1, 0.3, 0.1}, z[3 * N];
    lw_point point[3];
    bool reached = false;
    for (int k = 0; k < 200 && !reached; k++) {
        lw_solve_options options = {.sweep = 1, .trace_probes = 1};
        lw_decomposition *d = NULL;
        lw_estimate *estimate = NULL;
        int left = k;
        lw_memory_set_gate(fail_at, &left);
        lw_status status = lw_engine_lsqr.decompose(f.system, 1, &options, NULL, &d, NULL);
        if (status == LW_OK) status = d->methods->extend(d, 80, NULL, NULL, NULL);
        if (status == LW_OK) status = d->methods->evaluate(d, 3, lambda, 1, point, z, NULL, NULL);
        if (status >= 0) status = d->methods->estimate(d, 0.3, NULL, &estimate, NULL);
        reached = left >= 0;
        lw_memory_set_gate(NULL, NULL);
        if (reached) ck_assert_int_eq(status, LW_OK);
        lw_estimate_free(estimate);
        lw_decomposition_free(d);
    }
    ck_assert(reached);
    tear_down(&f);
}
END_TEST

START_TEST(zero_observations)
{
    double zero[8] = {0}, lambda[2] = {1, 2}, z[10];
    lw_system_options none = {0};
    lw_system *system = NULL;
    lw_problem *problem = problem_from_dense(8, 5, small_A, zero, NULL);
    lw_solve_options options = {.sweep = 1, .trace_probes = 1};
    lw_decomposition *d = NULL;
    lw_point point[2];
    lw_estimate *estimate = NULL;
    ck_assert_int_eq(lw_system_new(problem, &none, NULL, &system, NULL), LW_OK);
    ck_assert_int_eq(lw_engine_lsqr.decompose(system, 1, &options, NULL, &d, NULL), LW_OK);
    ck_assert_int_eq(d->methods->evaluate(d, 2, lambda, 1, point, z, NULL, NULL), LW_OK);
    ck_assert_double_eq(point[1].misfit, 0);
    ck_assert_double_gt(point[0].effective_parameters, point[1].effective_parameters);
    ck_assert_double_eq(z[7], 0);
    ck_assert_int_eq(d->methods->estimate(d, 1, NULL, &estimate, NULL), LW_OK);
    ck_assert_int_eq(estimate->stop, LW_STOP_ZERO);
    lw_estimate_free(estimate);
    lw_decomposition_free(d);
    lw_system_free(system);
    lw_problem_free(problem);
}
END_TEST

START_TEST(largest_singular_value)
{
    static fixture f;
    set_up(&f);
    lw_solve_options options = {.sweep = 1};
    lw_decomposition *d = NULL;
    double sigma;
    ck_assert_int_eq(lw_engine_lsqr.decompose(f.system, 1, &options, NULL, &d, NULL), LW_OK);
    ck_assert_int_eq(lw_largest_singular(d, NULL, &sigma, NULL), LW_OK);
    ck_assert_double_eq_tol(sigma, f.s[0], 1e-3 * f.s[0]);
    lw_decomposition_free(d);
    tear_down(&f);
}
END_TEST

Suite *suite_krylov(void)
{
    Suite *suite = suite_create("krylov");
    TCase *tcase = tcase_create("krylov");
    tcase_add_test(tcase, curve_is_read_from_one_bidiagonalization);
    tcase_add_test(tcase, error_bound_holds_on_the_way);
    tcase_add_test(tcase, estimates_agree_between_engines);
    tcase_add_test(tcase, undamped_estimate);
    tcase_add_test(tcase, basis_that_outgrows_the_budget);
    tcase_add_test(tcase, probes_estimate_the_trace);
    tcase_add_test(tcase, many_right_hand_sides);
    tcase_add_test(tcase, failing_allocations);
    tcase_add_test(tcase, zero_observations);
    tcase_add_test(tcase, largest_singular_value);
    suite_add_tcase(suite, tcase);
    return suite;
}
