/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Plane and spatial networks with known answers, recomputed in 50-digit arithmetic and checked in R. */
#include "check_certainty.h"

#include "certainty/global_test.h"
#include "certainty/part.h"
#include "core/memory.h"
#include "unit/support.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

/* Points and axes of the parameters; names p1, p2, ... of points. */
static void set_points(lw_problem *p, const int32_t *point, const int8_t *axis, int points)
{
    lw_error error = {0};
    p->point = LW_NEW_ARRAY(int32_t, p->n);
    p->axis = LW_NEW_ARRAY(int8_t, p->n);
    memcpy(p->point, point, (size_t)p->n * sizeof *point);
    memcpy(p->axis, axis, (size_t)p->n);
    ck_assert_int_eq(lw_ids_new(points, &p->point_names, &error), LW_OK);
    for (int k = 0; k < points; k++) {
        char name[16];
        int64_t number;
        int added, length = snprintf(name, sizeof name, "p%d", k + 1);
        ck_assert_int_eq(lw_ids_add(p->point_names, name, (size_t)length, &number, &added, &error), LW_OK);
    }
}

/* Six baselines of a satellite network, one point held, variances stated (a university assignment with a
 * textbook's network). Rows: dX, dY, dZ of each; parameters X, Y, Z of B, C, D. */
static const int baseline_from[] = {0, -1, -1, 0, 2, 2}, baseline_to[] = {1, 0, 1, 2, -1, 1};
static const double baseline[6][3] = {
    {3960.5442, -6681.2467, -7279.0148},  {7683.6883, 10282.4550, 10678.3008},
    {11644.2232, 3601.2165, 3399.2550},   {-6567.2310, -5686.3033, -6322.3807},
    {-1116.4523, -4596.1610, -4355.8962}, {10527.7852, -994.9377, -956.6246}};
static const double variance[6][3] = {{2.31e-4, 2.55e-4, 2.25e-4}, {7.24e-4, 6.76e-4, 7.31e-4},
                                      {9.88e-4, 9.38e-4, 9.83e-4}, {5.51e-5, 7.47e-5, 6.63e-5},
                                      {7.48e-5, 6.59e-5, 7.62e-5}, {2.57e-4, 2.16e-4, 2.40e-4}};
static const double point_A[] = {-1158153.412, 6245521.400, 594495.631};

static lw_problem *baselines(void)
{
    double A[18 * 9] = {0}, y[18], sigma[18];
    for (int i = 0; i < 18; i++) {
        int b = i / 3, c = i % 3;
        y[i] = baseline[b][c];
        sigma[i] = sqrt(variance[b][c]);
        if (baseline_to[b] >= 0)
            A[9 * i + 3 * baseline_to[b] + c] = 1;
        else
            y[i] -= point_A[c];
        if (baseline_from[b] >= 0)
            A[9 * i + 3 * baseline_from[b] + c] = -1;
        else
            y[i] += point_A[c];
    }
    return problem_from_dense(18, 9, A, y, sigma);
}

START_TEST(test_baselines)
{
    static const double sigma[] = {0.00999226060173722, 0.0101780331452188,  0.0103234913241015,
                                   0.0128482013127790,  0.0124335544935865,  0.0127497559594879,
                                   0.00803384976141933, 0.00758346810878728, 0.00810521601473771};
    static const double redundancy[] = {
        0.473998546962146, 0.511761076532079, 0.469208413355251, 0.862092165838356, 0.846756865820751,
        0.854207287115185, 0.832918748002333, 0.835188403683385, 0.834632475049343, 0.160131091185151,
        0.211634174969008, 0.190159439590419, 0.137129117793349, 0.127329460440155, 0.137867104388968,
        0.533730330218665, 0.467330018554621, 0.513925280500833};
    static const double w[] = {0.305265646694169, 0.243922268110629,  0.188734509424674,  -0.165321964791511,
                               0.343227737030764, -0.813980273467695, 0.291565011339284,  0.0999740183491647,
                               0.439859277753276, -0.362328555516423, 0.0229242020899187, -0.680490124795144};
    lw_problem *p = baselines();
    lw_certainty_options options = default_options();
    adjusted a = adjust(p, _i ? "cholesky" : "dense", NULL, 0, 0, &options);
    const lw_certainty *c = a.certainty;
    for (int j = 0; j < 9; j++) ck_close(c->sigma[j], sigma[j], 1e-12);
    for (int i = 0; i < 18; i++) ck_close(c->redundancy[i], redundancy[i], 1e-11);
    for (int i = 0; i < 12; i++)
        ck_close(c->standardized[i], w[i], 1e-5); /* coordinates of 6e6 m held in doubles by the test */
    ck_close(c->test.chi_square, 1.44306526962502, 1e-6);
    ck_close(c->test.probability, 2 * (1 - 0.997547512171), 1e-5);
    ck_assert(c->test.rejected && !c->test.too_high);
    char advice[400];
    lw_global_test_advice(&c->test, advice);
    ck_assert_ptr_nonnull(strstr(advice, "too large"));
    adjusted_clear(&a);
    lw_problem_free(p);
}
END_TEST

/* Ellipsoids of the same network: axis by axis uncorrelated, so the axes are the sigmas. */
START_TEST(test_ellipsoids)
{
    static const int32_t point[] = {0, 0, 0, 1, 1, 1, 2, 2, 2};
    static const int8_t axis[] = {LW_AXIS_EAST, LW_AXIS_NORTH, LW_AXIS_UP,    LW_AXIS_EAST, LW_AXIS_NORTH,
                                  LW_AXIS_UP,   LW_AXIS_EAST,  LW_AXIS_NORTH, LW_AXIS_UP};
    lw_problem *p = baselines();
    set_points(p, point, axis, 3);
    lw_certainty_options options = default_options();
    adjusted a = adjust(p, _i ? "cholesky" : "dense", NULL, 0, 0, &options);
    const lw_certainty *c = a.certainty;
    ck_assert_int_eq(c->ellipse_count, 2 * (3 + 3)); /* B, C, D; B-C, B-D, C-D are joined */
    const lw_ellipse *e = c->ellipses;
    ck_assert_int_eq(e[0].dimension, 3);
    ck_close(e[0].semi_major, 0.0101780331452188, 1e-12);
    ck_close(e[0].semi_minor, 0.00999226060173722, 1e-12);
    ck_assert(fabs(e[0].azimuth) < 1e-6 || fabs(e[0].azimuth - 180) < 1e-6);
    ck_close(e[0].vertical, 0.0103234913241015, 1e-12);
    ck_close(e[0].principal[0], 0.0103234913241015, 1e-12);
    ck_close(e[0].principal[2], 0.00999226060173722, 1e-12);
    ck_close(e[1].multiplier, 2.79548348292, 1e-10);
    ck_close(e[1].principal[1], 2.79548348292 * 0.0101780331452188, 1e-10);
    const lw_ellipse *bc = e + 6; /* relative B-C: X variance Q_BB + Q_CC - 2 Q_BC */
    ck_assert(bc->point == 0 && bc->to_point == 1);
    double xx = 9.98452719330299e-5 + 1.65076276973695e-4 - 2 * 7.17076066274903e-5;
    double yy = 1.03592358705173e-4 + 1.54593277344985e-4 - 2 * 6.68423552829188e-5;
    ck_close(bc->semi_major, sqrt(fmax(xx, yy)), 1e-11);
    ck_close(bc->semi_minor, sqrt(fmin(xx, yy)), 1e-11);
    adjusted_clear(&a);
    lw_problem_free(p);
}
END_TEST

/* Three distances to one point (textbook trilateration): the equations linearized at the solution, so that
 * the correction is zero, the residuals are those of the last iteration. */
START_TEST(test_trilateration)
{
    static const double station[3][2] = {{865.40, 4527.15}, {2432.55, 2047.25}, {2865.22, 27.15}};
    static const double distance[] = {6049.00, 4736.83, 5446.49},
                        xy[] = {6861.316787718086, 3727.818565717482};
    static const double residual[] = {-0.0373726504379277, 0.0767928419795588, -0.0473655733514315};
    static const double redundancy[] = {0.146446816358146, 0.618320461216054, 0.235232722425801};
    static const int32_t point[] = {0, 0};
    static const int8_t axis[] = {LW_AXIS_X, LW_AXIS_Y};
    double A[6], y[3];
    for (int i = 0; i < 3; i++) {
        double dx = xy[0] - station[i][0], dy = xy[1] - station[i][1], s = hypot(dx, dy);
        A[2 * i] = dx / s;
        A[2 * i + 1] = dy / s;
        y[i] = distance[i] - s + A[2 * i] * xy[0] + A[2 * i + 1] * xy[1];
    }
    lw_problem *p = problem_from_dense(3, 2, A, y, NULL);
    problem_set_prior(p, xy);
    set_points(p, point, axis, 1);
    lw_certainty_options options = default_options();
    options.variance_estimated = true;
    options.covariance_count = -1;
    adjusted a = adjust(p, "dense", NULL, 0, 0, &options);
    const lw_certainty *c = a.certainty;
    for (int i = 0; i < 3; i++) {
        ck_assert_double_eq_tol(a.estimate->residual[i], residual[i], 1e-10);
        ck_close(c->redundancy[i], redundancy[i], 1e-11);
        ck_assert(isnan(c->standardized[i])); /* one degree of freedom: no tau test */
    }
    ck_close(c->sigma[0], 0.0775263484032267, 1e-8);
    ck_close(c->sigma[1], 0.154248907565599, 1e-8);
    ck_close(c->covariance[1].covariance, 0.00953735311896286 * -0.728353865934026, 1e-7);
    ck_assert_int_eq(c->ellipse_count, 2);
    ck_close(c->ellipses[0].semi_major, 0.161816630747813, 1e-8);
    ck_close(c->ellipses[0].semi_minor, 0.0601534553899018, 1e-8);
    ck_close(c->ellipses[0].azimuth, 160.999990294262, 1e-10);
    ck_close(c->ellipses[1].multiplier, 19.9749843554382, 1e-12);
    ck_close(c->ellipses[1].semi_major, 3.23228466763729, 1e-8);
    ck_assert_int_eq(c->inseparable_count, 2); /* one condition: no two readings can be told apart */
    ck_assert(!c->test.applies && isnan(c->test.probability));
    adjusted_clear(&a);
    lw_problem_free(p);
}
END_TEST

/* Ellipses from cofactors: a textbook case ("Adjustment Computations", chapter on error ellipses) and exact
 * ones. */
START_TEST(test_ellipse_axes)
{
    static const double in[6][4] = {{0.136, 1.198574, -1.160249, 2.634937},
                                    {1, 4, 0, 1},
                                    {1, 2, 1, 2},
                                    {1, 2, -1, 2},
                                    {1, 3, 0, 3},
                                    {1, 17, 12, 10}};
    static const double out[6][3] = {{0.246355016405838, 0.101063471876238, 150.878528302288},
                                     {2, 1, 90},
                                     {1.73205080756888, 1, 45},
                                     {1.73205080756888, 1, 135},
                                     {1.73205080756888, 1.73205080756888, 0},
                                     {5.09901951359278, 1, 53.1301023541560}};
    double a, b, t, f = in[_i][0] * in[_i][0];
    lw_ellipse_axes(f * in[_i][1], f * in[_i][2], f * in[_i][3], &a, &b, &t);
    ck_close(a, out[_i][0], 1e-13);
    ck_close(b, out[_i][1], 1e-13);
    if (_i == 4)
        ck_assert(isnan(t));
    else
        ck_close(t, out[_i][2], 1e-13);
}
END_TEST

Suite *suite_networks(void)
{
    Suite *suite = suite_create("networks");
    TCase *cases = tcase_create("networks");
    tcase_add_loop_test(cases, test_baselines, 0, 2);
    tcase_add_loop_test(cases, test_ellipsoids, 0, 2);
    tcase_add_test(cases, test_trilateration);
    tcase_add_loop_test(cases, test_ellipse_axes, 0, 6);
    suite_add_tcase(suite, cases);
    return suite;
}
