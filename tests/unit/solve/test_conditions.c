/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "check_solve.h"

#include "solve/variance.h"
#include "solving.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

static const char *const engines[] = {"dense", "cholesky", "qr"};

#define M 80
#define N 25

/* x_1 = 2 - x_2 / 2 and x_3 = x_4 by conditions, against the same put into the equations by hand: y = x_2,
 * x_3, x_5, ... */
static void eliminate(const double *A, const double *b, double *B, double *c)
{
    for (int i = 0; i < M; i++) {
        const double *a = A + i * N;
        double *row = B + i * (N - 2);
        c[i] = b[i] - 2 * a[0];
        row[0] = a[1] - 0.5 * a[0];
        row[1] = a[2] + a[3];
        for (int j = 4; j < N; j++) row[j - 2] = a[j];
    }
}

START_TEST(against_elimination)
{
    double *A = random_matrix(M, N, 11), *b = random_vector(M, 12), *B = malloc(M * N * 8),
           *c = malloc(M * 8);
    double C[2 * N] = {0}, d[2] = {4, 0};
    C[0] = 2, C[1] = 1, C[N + 2] = 1, C[N + 3] = -1;
    eliminate(A, b, B, c);
    solved hand = solve_by(problem_from_dense(M, N - 2, B, c, NULL), "dense", 0);
    double *Qh = full_inverse(&hand, 0);
    for (size_t e = 0; e < 3; e++) {
        lw_problem *problem = problem_from_dense(M, N, A, b, NULL);
        problem_set_conditions(problem, 2, C, d);
        solved s = solve_by(problem, engines[e], 0);
        ck_assert_msg(s.status == LW_OK, "%s: %s", engines[e], s.error.text);
        const double *x = s.estimate->x, *y = hand.estimate->x;
        ck_assert_double_eq(2 * x[0] + x[1], 4);
        ck_assert_double_eq(x[2], x[3]);
        ck_assert(near(x[1], y[0], 1e-15) && near(x[2], y[1], 1e-15));
        ck_assert_double_le(apart(N - 4, x + 4, y + 2), 1e-15);
        ck_assert(near(s.estimate->point.chi_square, hand.estimate->point.chi_square, 1e-14));
        ck_assert(near(s.estimate->point.effective_parameters, N - 2, 1e-12));
        /* stationary: A'P v = C'u up to sign, v = predicted - observed, r = b - A x = -v */
        for (int j = 0; j < N; j++) {
            double sum = 0;
            for (int i = 0; i < M; i++) sum -= A[i * N + j] * s.estimate->weighted[i];
            for (int k = 0; k < 2; k++) sum += C[k * N + j] * s.estimate->condition_multiplier[k];
            ck_assert_double_le(fabs(sum), 1e-13);
        }
        double *Q = full_inverse(&s, 0);
        ck_assert_double_le(fabs(Q[1 + N] - Qh[0]), 1e-13);
        ck_assert_double_le(fabs(Q[0] - 0.25 * Qh[0]), 1e-13);
        ck_assert_double_le(fabs(Q[2 + 3 * N] - Qh[1 + (N - 2)]), 1e-13);
        free(Q);
        solved_clear(&s);
    }
    free(Qh);
    solved_clear(&hand);
    free(A);
    free(b);
    free(B);
    free(c);
}
END_TEST

/* Damped and conditioned: every engine gives the same points, and an unrefined estimate the same multipliers.
 */
START_TEST(damped)
{
    double *A = random_matrix(M, N, 13), *b = random_vector(M, 14), C[N], d[1] = {3};
    const double lambda[] = {2, 1, 0.5, 0.25};
    lw_point point[3][4];
    double multiplier[3];
    for (int j = 0; j < N; j++) C[j] = 1;
    for (size_t e = 0; e < 3; e++) {
        lw_problem *problem = problem_from_dense(M, N, A, b, NULL);
        problem_set_conditions(problem, 1, C, d);
        lw_solve_options options = {.engine = engines[e], .refine = e == 1 ? 0 : -1};
        solved s = solve_problem(problem, 0.5, &options);
        ck_assert_msg(s.status == LW_OK, "%s", s.error.text);
        double sum = 0;
        for (int j = 0; j < N; j++) sum += s.estimate->x[j];
        ck_assert(near(sum, 3, 1e-14));
        multiplier[e] = s.estimate->condition_multiplier[0];
        ck_assert_int_eq(
            s.decomposition->methods->evaluate(s.decomposition, 4, lambda, 1, point[e], NULL, NULL, &s.error),
            LW_OK);
        solved_clear(&s);
    }
    for (size_t e = 1; e < 3; e++) {
        ck_assert(near(multiplier[e], multiplier[0], 1e-12));
        for (int k = 0; k < 4; k++) {
            ck_assert(near(point[e][k].misfit, point[0][k].misfit, 1e-12));
            ck_assert(near(point[e][k].size, point[0][k].size, 1e-12));
            ck_assert(near(point[e][k].effective_parameters, point[0][k].effective_parameters, 1e-11));
        }
    }
    free(A);
    free(b);
}
END_TEST

/* A free net held by a condition: mean height of all points. */
START_TEST(cures_a_defect)
{
    const double C[] = {0.25, 0.25, 0.25, 0.25}, d[] = {446};
    for (size_t e = 0; e < 3; e++) {
        lw_problem *problem = six_lines();
        problem_set_conditions(problem, 1, C, d);
        solved s = solve_by(problem, engines[e], 0);
        ck_assert_msg(s.status == LW_OK, "%s: %s", engines[e], s.error.text);
        const double *x = s.estimate->x;
        ck_assert(near((x[0] + x[1] + x[2] + x[3]) / 4, 446, 1e-15));
        ck_assert(near(x[1] - x[0], 10.5127117287866, 1e-13));
        ck_assert_int_eq(s.estimate->rank, 4); /* one condition and rank 3: freedom 6 + 1 - 4 */
        solved_clear(&s);
    }
}
END_TEST

/* A chain without a tie and one condition over all its points, too long to stand in a sparse factor: mean
 * height 1. The readings are met exactly, so the heights are those of a chain from 0, shifted. */
START_TEST(long_condition_cures_a_defect)
{
    enum { points = 300 };
    double *A = calloc((points - 1) * points, 8), b[points - 1], C[points], x[points], mean = 0, d = 1,
           *first = NULL;
    x[0] = 0;
    for (int i = 0; i + 1 < points; i++) {
        A[i * points + i] = -1;
        A[i * points + i + 1] = 1;
        b[i] = 0.5 * (i % 5) - 0.75;
        x[i + 1] = x[i] + b[i];
    }
    for (int i = 0; i < points; i++) {
        mean += x[i] / points;
        C[i] = 1.0 / points;
    }
    for (int i = 0; i < points; i++) x[i] += 1 - mean;
    for (size_t e = 0; e < 3; e++) {
        lw_problem *problem = problem_from_dense(points - 1, points, A, b, NULL);
        problem_set_conditions(problem, 1, C, &d);
        solved s = solve_by(problem, engines[e], 0);
        ck_assert_msg(s.status == LW_OK, "%s: %s", engines[e], s.error.text);
        ck_assert_double_le(apart(points, s.estimate->x, x), 1e-13);
        ck_assert_int_eq(s.estimate->rank, points);
        ck_assert_int_eq(s.decomposition->methods->null_space(s.decomposition)->defect, 0);
        ck_assert_double_le(fabs(s.estimate->condition_multiplier[0]), 1e-12); /* it bends nothing */
        double *Q = full_inverse(&s, 0), *g = calloc(points, 8), *z = malloc(points * 8);
        if (first == NULL) first = Q;
        ck_assert_double_le(apart(points * points, Q, first), 1e-9);
        g[7] = -1;
        ck_assert_int_eq(s.decomposition->methods->solve_many(s.decomposition, 0, 1, NULL, g, NULL, NULL, z,
                                                              NULL, &s.error),
                         LW_OK);
        for (int j = 0; j < points; j++) z[j] *= s.system->scale[j] * s.system->scale[7];
        ck_assert_double_le(apart(points, z, first + 7 * points), 1e-9);
        lw_decimal variance[points];
        double worst;
        ck_assert_int_eq(lw_solve_variances(s.decomposition, 0, 0, NULL, variance, &worst, &s.error), LW_OK);
        ck_assert(near(variance[7].high, first[7 + 7 * points], 1e-9));
        if (Q != first) free(Q);
        free(g);
        free(z);
        solved_clear(&s);
    }
    free(first);
    free(A);
}
END_TEST

static void refused(const double *C, const double *d, int rows, const char *words)
{
    for (size_t e = 0; e < 3; e++) {
        lw_problem *problem = six_lines();
        problem_fix(problem, 0, 437.596);
        problem_set_conditions(problem, rows, C, d);
        solved s = solve_by(problem, engines[e], 0);
        ck_assert_int_eq(s.status, LW_UNSOLVABLE);
        ck_assert_msg(strstr(s.error.text, words) != NULL, "%s", s.error.text);
        solved_clear(&s);
    }
}

START_TEST(refused_by_name)
{
    const double twice[] = {0, 1, -1, 0, 0, -2, 2, 0}, differ[] = {0, 1}, same[] = {1, -2},
                 held[] = {1, 0, 0, 0};
    const double wrong[] = {440}, right[] = {437.596};
    refused(twice, differ, 2, "contradicts");
    refused(twice, same, 2, "only repeats");
    refused(held, wrong, 1, "binds fixed parameters only and they contradict it");
    refused(held, right, 1, "binds fixed parameters only and they already fulfil it");
}
END_TEST

/* Two free nets and one condition that ties only one of them: a free datum does not mix with that; without,
 * the rest is told. */
START_TEST(half_a_datum)
{
    enum { points = 500 };
    double *A = calloc((points - 2) * points, 8), b[points - 2], C[points] = {0}, d = 1;
    for (int i = 0, row = 0; i + 1 < points; i++) {
        if (i == points / 2 - 1) continue;
        A[row * points + i] = -1;
        A[row * points + i + 1] = 1;
        b[row++] = 0.5;
    }
    for (int i = 0; i < points / 2; i++) C[i] = 1;
    for (int datum_free = 0; datum_free < 2; datum_free++) {
        lw_problem *problem = problem_from_dense(points - 2, points, A, b, NULL);
        problem_set_conditions(problem, 1, C, &d);
        lw_solve_options options = {.engine = "cholesky", .datum_free = datum_free};
        solved s = solve_problem(problem, 0, &options);
        ck_assert_int_eq(s.status, LW_UNSOLVABLE);
        ck_assert_msg(strstr(s.error.text, datum_free ? "determine 1 of 2 datum defects" : "rank defect") !=
                          NULL,
                      "%s", s.error.text);
        solved_clear(&s);
    }
    free(A);
}
END_TEST

START_TEST(iterative_engines_say_who_can)
{
    const double C[] = {1, 1, 1, 1}, d[] = {0};
    lw_problem *problem = six_lines();
    problem_set_conditions(problem, 1, C, d);
    solved s = solve_by(problem, "lsqr", 0);
    ck_assert_int_eq(s.status, LW_BAD_USAGE);
    ck_assert_ptr_nonnull(strstr(s.error.text, "dense, cholesky and qr"));
    solved_clear(&s);
}
END_TEST

Suite *suite_conditions(void)
{
    Suite *suite = suite_create("conditions");
    TCase *tests = tcase_create("conditions");
    tcase_add_test(tests, against_elimination);
    tcase_add_test(tests, damped);
    tcase_add_test(tests, cures_a_defect);
    tcase_add_test(tests, long_condition_cures_a_defect);
    tcase_add_test(tests, half_a_datum);
    tcase_add_test(tests, refused_by_name);
    tcase_add_test(tests, iterative_engines_say_who_can);
    tcase_set_timeout(tests, 60);
    suite_add_tcase(suite, tests);
    return suite;
}
