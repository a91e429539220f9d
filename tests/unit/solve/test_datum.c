/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "check_solve.h"

#include "solving.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

static const char *const engines[] = {"dense", "cholesky", "qr"};

/* The levelling net of test_dense.c with all four heights unknown: constructed; bordered normal matrix with
 * 50 digits, checked against a pseudo-inverse. */
START_TEST(free_network)
{
    const double near_heights[] = {437.596, 448.105, 453.477, 444.944};
    const double x[] = {437.597303789100, 448.110015517887, 453.469771572576, 444.944909120437};
    const double correction[] = {0.00130378910041345, 0.00501551788703009, -0.00722842742397726,
                                 9.09120436533714e-4};
    const double Q[] = {
        4.76862643199413e-6,  -1.93042361806357e-6, -3.01827297113467e-6, 1.80070157204105e-7,
        -1.93042361806357e-6, 3.79522961581670e-6,  -6.74472101429892e-7, -1.19033389632324e-6,
        -3.01827297113467e-6, -6.74472101429892e-7, 5.58465100994276e-6,  -1.89190593737820e-6,
        1.80070157204105e-7,  -1.19033389632324e-6, -1.89190593737820e-6, 2.90216967649734e-6};
    for (size_t e = 0; e < 3; e++) {
        lw_problem *problem = six_lines();
        problem_set_prior(problem, near_heights);
        lw_solve_options options = {.engine = engines[e], .datum_free = 1};
        solved s = solve_problem(problem, 0, &options);
        ck_assert_msg(s.status == LW_OK, "%s: %s", engines[e], s.error.text);
        double got[4];
        for (int j = 0; j < 4; j++) got[j] = s.estimate->z[j] * s.system->scale[j];
        ck_assert_double_le(apart(4, s.estimate->x, x), 3e-15);
        ck_assert_double_le(apart(4, got, correction), 1e-11);
        ck_assert(near(s.estimate->point.chi_square, 1.27212282860396, 1e-13));
        ck_assert_int_eq(s.estimate->rank, 3);
        const lw_null_space *space = s.decomposition->methods->null_space(s.decomposition);
        ck_assert_int_eq(space->defect, 1);
        double *inverse = full_inverse(&s, 0);
        ck_assert_double_le(apart(16, inverse, Q), 1e-12);
        free(inverse);
        /* solve_many is in that datum too: the column of Q from the right-hand side (0, -e_1) */
        double g[4] = {0, -1, 0, 0}, z[4];
        ck_assert_int_eq(s.decomposition->methods->solve_many(s.decomposition, 0, 1, NULL, g, NULL, NULL, z,
                                                              NULL, &s.error),
                         LW_OK);
        for (int j = 0; j < 4; j++)
            ck_assert(fabs(z[j] * s.system->scale[j] * s.system->scale[1] - Q[4 + j]) < 1e-17);
        solved_clear(&s);
    }
}
END_TEST

/* Only two points carry the datum: the mean of their corrections is zero, differences stay. */
START_TEST(partial_datum)
{
    const double near_heights[] = {437.596, 448.105, 453.477, 444.944};
    const int8_t datum[] = {1, 0, 1, 0};
    for (size_t e = 0; e < 3; e++) {
        lw_problem *problem = six_lines();
        problem_set_prior(problem, near_heights);
        problem_set_datum(problem, datum);
        lw_solve_options options = {.engine = engines[e], .datum_free = 1};
        solved s = solve_problem(problem, 0, &options);
        ck_assert_msg(s.status == LW_OK, "%s", s.error.text);
        double a = s.estimate->z[0] * s.system->scale[0], c = s.estimate->z[2] * s.system->scale[2];
        ck_assert_double_le(fabs(a + c), 1e-16);
        ck_assert(near(s.estimate->x[2] - s.estimate->x[0], 453.469771572576 - 437.597303789100, 1e-12));
        solved_clear(&s);
    }
}
END_TEST

START_TEST(defect_in_words)
{
    for (size_t e = 0; e < 3; e++) {
        solved s = solve_by(six_lines(), engines[e], 0);
        ck_assert_int_eq(s.status, LW_UNSOLVABLE);
        ck_assert_ptr_null(s.estimate);
        ck_assert_ptr_nonnull(strstr(s.error.text, "rank defect 1 in 1 of 1 components"));
        ck_assert_ptr_nonnull(strstr(s.error.text, "'p1', 'p2', 'p3', 'p4'"));
        ck_assert_ptr_nonnull(strstr(s.error.text, "--datum free"));
        solved_clear(&s);
    }
}
END_TEST

/* Two separate chains, one of them tied, and a parameter that nothing reaches. */
static lw_problem *three_parts(void)
{
    const double A[] = {1, 0, 0, 0, 0, 0, -1, 1, 0, 0, 0, 0,  0, 0, -1,
                        1, 0, 0, 0, 0, 0, -1, 1, 0, 0, 0, -1, 0, 1, 0};
    const double b[] = {1, 2, 3, 4, 7.3};
    return problem_from_dense(5, 6, A, b, NULL);
}

START_TEST(components_apart)
{
    for (size_t e = 0; e < 3; e++) {
        solved s = solve_by(three_parts(), engines[e], 0);
        ck_assert_int_eq(s.status, LW_UNSOLVABLE);
        ck_assert_msg(strstr(s.error.text, "rank defect 2 in 2 of 3 components") != NULL, "%s", s.error.text);
        ck_assert_msg(
            strstr(s.error.text, "component 2 of 3 (3 parameters, the first is 'p3') has 1 defect") != NULL,
            "%s", s.error.text);
        ck_assert_msg(strstr(s.error.text, "reaches parameter 'p6'") != NULL, "%s", s.error.text);
        solved_clear(&s);
        lw_solve_options options = {.engine = engines[e], .datum_free = 1};
        s = solve_problem(three_parts(), 0, &options);
        ck_assert_msg(s.status == LW_OK, "%s", s.error.text);
        ck_assert_int_eq(s.estimate->rank, 4);
        ck_assert_double_eq(s.estimate->x[0], 1);
        ck_assert_double_eq(s.estimate->x[1], 3);
        ck_assert_double_le(fabs(s.estimate->x[2] + s.estimate->x[3] + s.estimate->x[4]), 1e-14);
        ck_assert_double_eq(s.estimate->x[5], 0);
        solved_clear(&s);
        s = solve_by(three_parts(), engines[e], 1e-3); /* damping cures it */
        ck_assert_msg(s.status == LW_OK, "%s", s.error.text);
        ck_assert(near(s.estimate->x[1], 3, 1e-4));
        solved_clear(&s);
    }
}
END_TEST

/* A plane net of distances has three defects (two shifts, one rotation); scales of the columns differ.
 * Minimum norm in model units: every null vector is orthogonal to the corrections. */
START_TEST(three_defects)
{
    const double at[5][2] = {{0, 0}, {120, 10}, {90, 140}, {-30, 100}, {50, 60}};
    double A[10 * 10] = {0}, b[10], sigma[10];
    int row = 0;
    for (int i = 0; i < 5; i++) {
        for (int j = i + 1; j < 5; j++, row++) {
            double dx = at[j][0] - at[i][0], dy = at[j][1] - at[i][1], d = hypot(dx, dy);
            A[10 * row + 2 * i] = -dx / d;
            A[10 * row + 2 * i + 1] = -dy / d;
            A[10 * row + 2 * j] = dx / d;
            A[10 * row + 2 * j + 1] = dy / d;
            b[row] = 0.01 * ((row * 7) % 5 - 2);
            sigma[row] = 0.002 * (1 + 40 * (i == 0));
        }
    }
    for (size_t e = 0; e < 3; e++) {
        lw_solve_options options = {.engine = engines[e], .datum_free = 1};
        solved s = solve_problem(problem_from_dense(10, 10, A, b, sigma), 0, &options);
        ck_assert_msg(s.status == LW_OK, "%s: %s", engines[e], s.error.text);
        ck_assert_int_eq(s.estimate->rank, 7);
        double east = 0, north = 0, turn = 0;
        for (int i = 0; i < 5; i++) {
            east += s.estimate->x[2 * i];
            north += s.estimate->x[2 * i + 1];
            turn += at[i][0] * s.estimate->x[2 * i + 1] - at[i][1] * s.estimate->x[2 * i];
        }
        ck_assert_double_le(fabs(east), 1e-14);
        ck_assert_double_le(fabs(north), 1e-14);
        ck_assert_double_le(fabs(turn), 1e-12);
        double *Q = full_inverse(&s, 0), shift = 0;
        for (int j = 0; j < 10; j += 2)
            for (int i = 0; i < 10; i += 2) shift += Q[i + 10 * j];
        ck_assert_double_le(fabs(shift), 1e-15 * 1e-2);
        free(Q);
        solved_clear(&s);
    }
}
END_TEST

Suite *suite_datum(void)
{
    Suite *suite = suite_create("datum");
    TCase *tests = tcase_create("datum");
    tcase_add_test(tests, free_network);
    tcase_add_test(tests, partial_datum);
    tcase_add_test(tests, defect_in_words);
    tcase_add_test(tests, components_apart);
    tcase_add_test(tests, three_defects);
    tcase_set_timeout(tests, 60);
    suite_add_tcase(suite, tests);
    return suite;
}
