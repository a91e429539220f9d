/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "../support.h"
#include "check_problem.h"

#include "core/memory.h"
#include "problem/nearest.h"
#include "problem/penalty.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

static lw_problem *empty_problem(int64_t n)
{
    lw_sparse *A = NULL;
    const double value[] = {0};
    ck_assert_int_eq(lw_sparse_new(1, n, 0, 0, &A, NULL), LW_OK);
    for (int64_t j = 0; j <= n; j++) A->start[j] = 0;
    return problem_from_sparse(A, value, NULL);
}

static lw_sparse *make(const lw_problem *problem, const lw_penalty_options *options)
{
    lw_sparse *L = NULL;
    lw_error error = {0};
    ck_assert_msg(lw_penalty_make(problem, options, NULL, &L, &error) == LW_OK, "%s", error.text);
    return L;
}

static lw_sparse *make_kind(const lw_problem *problem, lw_penalty_kind kind)
{
    lw_penalty_options options = {.prefer = kind};
    return make(problem, &options);
}

/* Largest |(L x)_i| over the largest |coefficient|. */
static double cost(const lw_sparse *L, const double *x)
{
    double *y = LW_NEW_ARRAY(double, L->rows), largest = 0, coefficient = 0;
    lw_sparse_apply(L, 1, x, y);
    for (int64_t i = 0; i < L->rows; i++) largest = fmax(largest, fabs(y[i]));
    for (int64_t p = 0; p < lw_sparse_nonzeros(L); p++) coefficient = fmax(coefficient, fabs(L->value[p]));
    lw_free(y);
    return largest / coefficient;
}

/* Rows (-1, 1) and (1, -2, 1), as the operators in Hansen, Rank-Deficient and Discrete Ill-Posed Problems,
 * SIAM 1998. */
START_TEST(unit_line_has_integer_rows)
{
    double x[6] = {3, 4, 5, 6, 7, 8}, dense[36];
    lw_problem *problem = empty_problem(6);
    problem_set_coordinate(problem, 0, x);
    lw_sparse *L = make_kind(problem, LW_PREFER_FLATTEST);
    ck_assert_int_eq(L->rows, 5);
    lw_sparse_to_dense(L, dense);
    for (int i = 0; i < 5; i++)
        for (int j = 0; j < 6; j++)
            ck_assert_double_eq(dense[i + 5 * j], j == i ? -1.0 : j == i + 1 ? 1.0 : 0.0);
    lw_sparse_free(L);
    L = make_kind(problem, LW_PREFER_SMOOTHEST);
    ck_assert_int_eq(L->rows, 4);
    lw_sparse_to_dense(L, dense);
    for (int i = 0; i < 4; i++)
        for (int j = 0; j < 6; j++)
            ck_assert_double_eq(dense[i + 4 * j], j == i || j == i + 2 ? 1.0 : j == i + 1 ? -2.0 : 0.0);
    lw_sparse_free(L);
    lw_problem_free(problem);
}
END_TEST

/* 7 x 5 x 4 cells at unequal spacing, every ninth missing, in shuffled order. */
static lw_problem *grid_problem(double *place[3], int64_t *count)
{
    const double x[] = {0, 1, 2.5, 3, 7, 7.3, 9}, y[] = {-4, -1, 0.1, 0.7, 5}, z[] = {100, 110, 150, 155};
    int64_t n = 0, all = 7 * 5 * 4;
    for (int a = 0; a < 3; a++) place[a] = LW_NEW_ARRAY(double, all);
    for (int64_t k = 0; k < all; k++) {
        int64_t cell = k * 37 % all;
        if (cell % 9 == 4) continue;
        place[0][n] = x[cell % 7];
        place[1][n] = y[cell / 7 % 5];
        place[2][n++] = z[cell / 35];
    }
    *count = n;
    lw_problem *problem = empty_problem(n);
    for (int a = 0; a < 3; a++) problem_set_coordinate(problem, a, place[a]);
    return problem;
}

static void check_null(const lw_problem *problem, double *const place[3], int64_t n, lw_penalty_kind kind)
{
    double *model = LW_NEW_ARRAY(double, n);
    lw_sparse *L = make_kind(problem, kind);
    for (int64_t j = 0; j < n; j++) model[j] = 1.0;
    ck_assert_double_eq(cost(L, model), 0.0);
    for (int64_t j = 0; j < n; j++) model[j] = kind == LW_PREFER_FLATTEST ? 0.1 : 1024.0;
    ck_assert_double_eq(cost(L, model), 0.0);
    double largest = 0;
    for (int64_t j = 0; j < n; j++) {
        model[j] = 3 + place[0][j] - 2 * place[1][j] + (place[2] == NULL ? 0 : 0.1 * place[2][j]);
        largest = fmax(largest, fabs(model[j]));
    }
    if (kind == LW_PREFER_SMOOTHEST) ck_assert_double_le(cost(L, model), 1e-14 * largest);
    if (kind == LW_PREFER_FLATTEST) ck_assert_double_ge(cost(L, model), 1e-3);
    lw_sparse_free(L);
    lw_free(model);
}

START_TEST(constants_and_planes_cost_nothing_on_grids)
{
    double *place[3];
    int64_t n;
    lw_problem *problem = grid_problem(place, &n);
    check_null(problem, place, n, LW_PREFER_FLATTEST);
    check_null(problem, place, n, LW_PREFER_SMOOTHEST);
    for (int a = 0; a < 3; a++) lw_free(place[a]);
    lw_problem_free(problem);
}
END_TEST

/* The squared seminorm of m = x approximates the integral of 1 over the area, over the reference volume: on
 * the grid of cells between first and last value that is (count - 1) intervals times the widths across. */
START_TEST(unequal_spacing_keeps_the_integral)
{
    const double at[] = {0, 0.5, 2, 3, 3.25, 6}, second[] = {0, 2, 3};
    double x[18], y[18], product[64], sum = 0;
    lw_problem *problem = empty_problem(18);
    for (int k = 0; k < 18; k++) {
        x[k] = at[k % 6];
        y[k] = second[k / 6];
    }
    problem_set_coordinate(problem, 0, x);
    problem_set_coordinate(problem, 1, y);
    lw_sparse *L = make_kind(problem, LW_PREFER_FLATTEST);
    lw_sparse_apply(L, 1, x, product);
    for (int64_t i = 0; i < L->rows; i++) sum += product[i] * product[i];
    /* integral: length 6 times widths 2 + 1.5 + 1; V = 6/5 * 3/2 */
    ck_assert_double_eq_tol(sum, 6 * 4.5 / (1.2 * 1.5), 1e-13);
    lw_sparse_free(L);
    lw_problem_free(problem);
}
END_TEST

START_TEST(regions_and_gaps_are_not_crossed)
{
    const double x[] = {0, 1, 2, 3, 4, 5, 0, 1};
    const int32_t region[] = {0, 0, 0, 1, 1, 1, 2, 2};
    double dense[64];
    lw_problem *problem = empty_problem(8);
    problem_set_coordinate(problem, 0, x);
    problem_set_region(problem, region);
    lw_sparse *L = make_kind(problem, LW_PREFER_FLATTEST);
    ck_assert_int_eq(L->rows, 5);
    lw_sparse_to_dense(L, dense);
    for (int i = 0; i < 5; i++)
        for (int j = 0; j < 8; j++)
            for (int k = 0; k < 8; k++)
                if (dense[i + 5 * j] != 0 && dense[i + 5 * k] != 0) ck_assert_int_eq(region[j], region[k]);
    lw_sparse_free(L);
    lw_problem_free(problem);
}
END_TEST

/* A delay without coordinates and an undamped cell take no part; --also-smallest adds the damped ones only.
 */
START_TEST(blank_and_undamped_take_no_part)
{
    const double x[] = {0, 1, 2, 3, (double)NAN}, weight[] = {1, 2, 1, 0, 1};
    lw_problem *problem = empty_problem(5);
    problem_set_coordinate(problem, 0, x);
    problem_set_damp_weight(problem, weight);
    lw_penalty_options options = {.prefer = LW_PREFER_FLATTEST, .also_smallest = 0.25};
    lw_sparse *L = make(problem, &options);
    ck_assert_int_eq(L->rows, 2 + 4);
    ck_assert_int_eq(L->start[4] - L->start[3], 0);
    ck_assert_int_eq(L->start[5] - L->start[4], 1);
    ck_assert_double_eq(L->value[L->start[4]], 0.25);
    ck_assert_double_eq(L->value[L->start[2] - 1], 0.5);
    lw_sparse_free(L);
    lw_problem_free(problem);
}
END_TEST

START_TEST(stretch_weighs_directions)
{
    const double x[] = {0, 1, 0, 1}, z[] = {0, 0, 1, 1};
    double dense[16];
    lw_problem *problem = empty_problem(4);
    problem_set_coordinate(problem, 0, x);
    problem_set_coordinate(problem, 2, z);
    lw_penalty_options options = {.prefer = LW_PREFER_FLATTEST, .stretch = {2, 0, 0}};
    lw_sparse *L = make(problem, &options);
    ck_assert_int_eq(L->rows, 4);
    lw_sparse_to_dense(L, dense);
    for (int i = 0; i < 4; i++) {
        int along_x = (dense[i] != 0 && dense[i + 4] != 0) || (dense[i + 8] != 0 && dense[i + 12] != 0);
        double largest = 0;
        for (int j = 0; j < 4; j++) largest = fmax(largest, dense[i + 4 * j]);
        ck_assert_double_eq(largest, along_x ? 2.0 : 1.0);
    }
    lw_sparse_free(L);
    lw_problem_free(problem);
}
END_TEST

static lw_problem *cloud_problem(int64_t n, int dimension, int reverse, double *place[3])
{
    uint64_t state = 5;
    lw_problem *problem = empty_problem(n);
    for (int a = 0; a < 3; a++) place[a] = a < dimension ? LW_NEW_ARRAY(double, n) : NULL;
    for (int64_t j = 0; j < n; j++)
        for (int a = 0; a < dimension; a++) place[a][reverse ? n - 1 - j : j] = next_random(&state);
    for (int a = 0; a < dimension; a++) problem_set_coordinate(problem, a, place[a]);
    return problem;
}

START_TEST(constants_and_planes_cost_nothing_between_points)
{
    for (int dimension = 2; dimension <= 3; dimension++) {
        double *place[3];
        lw_problem *problem = cloud_problem(400, dimension, 0, place);
        check_null(problem, place, 400, LW_PREFER_FLATTEST);
        check_null(problem, place, 400, LW_PREFER_SMOOTHEST);
        for (int a = 0; a < 3; a++) lw_free(place[a]);
        lw_problem_free(problem);
    }
}
END_TEST

/* The same points in another order give the same penalty. */
START_TEST(order_of_points_does_not_matter)
{
    for (lw_penalty_kind kind = LW_PREFER_FLATTEST; kind <= LW_PREFER_SMOOTHEST; kind++) {
        double sum[2] = {0, 0};
        for (int reverse = 0; reverse < 2; reverse++) {
            double *place[3], *model = LW_NEW_ARRAY(double, 300);
            lw_problem *problem = cloud_problem(300, 2, reverse, place);
            lw_sparse *L = make_kind(problem, kind);
            double *y = LW_NEW_ARRAY(double, L->rows);
            for (int j = 0; j < 300; j++) model[j] = sin(3 * place[0][j]) * place[1][j];
            lw_sparse_apply(L, 1, model, y);
            for (int64_t i = 0; i < L->rows; i++) sum[reverse] += y[i] * y[i];
            for (int a = 0; a < 3; a++) lw_free(place[a]);
            lw_free(y);
            lw_free(model);
            lw_sparse_free(L);
            lw_problem_free(problem);
        }
        ck_assert_double_gt(sum[0], 0.0);
        ck_assert_double_eq_tol(sum[1] / sum[0], 1.0, 1e-11);
    }
}
END_TEST

/* The rows at scattered points are the Laplacian: on x^2 + y^2 each gives 4, times the square root of the
 * volume share. */
START_TEST(scattered_rows_are_the_laplacian)
{
    double *place[3], model[200];
    lw_problem *problem = cloud_problem(200, 2, 0, place);
    lw_sparse *L = make_kind(problem, LW_PREFER_SMOOTHEST);
    double *y = LW_NEW_ARRAY(double, L->rows), share = 0;
    int near = 0;
    for (int j = 0; j < 200; j++) model[j] = place[0][j] * place[0][j] + place[1][j] * place[1][j];
    lw_sparse_apply(L, 1, model, y);
    for (int64_t i = 0; i < L->rows; i++) {
        share += y[i] * y[i] / 16;
        near += y[i] > 0;
    }
    ck_assert_int_ge(near, 170);
    ck_assert_double_eq_tol(share / (double)L->rows, 1.0, 0.3);
    for (int a = 0; a < 3; a++) lw_free(place[a]);
    lw_free(y);
    lw_sparse_free(L);
    lw_problem_free(problem);
}
END_TEST

START_TEST(says_what_is_missing)
{
    const double x[] = {0.1, 0.1, 3}, y[] = {0.7, 0.7, 2}, L[] = {1, -1, 0};
    lw_problem *problem = empty_problem(3);
    lw_penalty_options options = {.prefer = LW_PREFER_FLATTEST};
    lw_sparse *out = NULL;
    lw_error error = {0};
    ck_assert_int_eq(lw_penalty_make(problem, &options, NULL, &out, &error), LW_BAD_USAGE);
    ck_assert_ptr_nonnull(strstr(error.text, "coordinates"));
    options.prefer = LW_PREFER_OWN;
    ck_assert_int_eq(lw_penalty_make(problem, &options, NULL, &out, &error), LW_BAD_USAGE);
    ck_assert_ptr_nonnull(strstr(error.text, "penalty.csv"));
    problem_set_coordinate(problem, 0, x);
    problem_set_coordinate(problem, 1, y);
    options.prefer = LW_PREFER_SMOOTHEST;
    ck_assert_int_eq(lw_penalty_make(problem, &options, NULL, &out, &error), LW_BAD_USAGE);
    ck_assert_ptr_nonnull(strstr(error.text, "'p1' and 'p2'"));
    problem_set_penalty(problem, 1, L);
    out = make_kind(problem, LW_PREFER_OWN);
    ck_assert_int_eq(out->rows, 1);
    ck_assert_double_eq(out->value[1], -1.0);
    ck_assert_str_eq(lw_penalty_name(LW_PREFER_SMOOTHEST), "smoothest");
    lw_sparse_free(out);
    out = make_kind(problem, LW_PREFER_SMALLEST);
    ck_assert_int_eq(out->rows, 3);
    ck_assert_int_eq(lw_sparse_nonzeros(out), 3);
    lw_sparse_free(out);
    lw_problem_free(problem);
}
END_TEST

/* Points on a coarse lattice, so that many distances are equal. */
START_TEST(neighbours_are_the_nearest)
{
    double x[150], y[150], *place[] = {x, y};
    lw_neighbour found[LW_NEAREST_MOST], all[150 * 9];
    lw_nearest *tree = NULL;
    uint64_t state = 2;
    for (int i = 0; i < 150; i++) {
        x[i] = rint(8 * next_random(&state));
        y[i] = rint(8 * next_random(&state)) + i / 1e3;
    }
    ck_assert_int_eq(lw_nearest_new(2, 150, place, &tree, NULL), LW_OK);
    lw_nearest_find_all(tree, 9, NULL, all);
    for (int i = 0; i < 150; i++) {
        ck_assert_int_eq(lw_nearest_find(tree, i, 9, found), 9);
        for (int k = 0; k < 9; k++) {
            int closer = 0;
            for (int j = 0; j < 150; j++) {
                double square = (x[j] - x[i]) * (x[j] - x[i]) + (y[j] - y[i]) * (y[j] - y[i]);
                closer += j != i && square < found[k].square;
            }
            ck_assert_int_le(closer, k);
            ck_assert_int_eq(found[k].point, all[9 * i + k].point);
        }
    }
    ck_assert_int_eq(lw_nearest_find(tree, 0, 99, found), LW_NEAREST_MOST < 149 ? LW_NEAREST_MOST : 149);
    lw_nearest_free(tree);
}
END_TEST

Suite *suite_penalty(void)
{
    Suite *suite = suite_create("penalty");
    TCase *tcase = tcase_create("penalty");
    tcase_add_test(tcase, unit_line_has_integer_rows);
    tcase_add_test(tcase, constants_and_planes_cost_nothing_on_grids);
    tcase_add_test(tcase, unequal_spacing_keeps_the_integral);
    tcase_add_test(tcase, regions_and_gaps_are_not_crossed);
    tcase_add_test(tcase, blank_and_undamped_take_no_part);
    tcase_add_test(tcase, stretch_weighs_directions);
    tcase_add_test(tcase, constants_and_planes_cost_nothing_between_points);
    tcase_add_test(tcase, order_of_points_does_not_matter);
    tcase_add_test(tcase, scattered_rows_are_the_laplacian);
    tcase_add_test(tcase, says_what_is_missing);
    tcase_add_test(tcase, neighbours_are_the_nearest);
    suite_add_tcase(suite, tcase);
    return suite;
}
