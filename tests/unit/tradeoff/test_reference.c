/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Published and recomputed trade-off tables; the sources stand in the headers with the numbers. */
#include "cases.h"
#include "check_tradeoff.h"
#include "gravity.h"
#include "hilbert.h"
#include "ridge.h"
#include "shaw.h"

#include <gsl/gsl_multifit.h>

#include <math.h>
#include <string.h>

/* Table columns: damping, misfit, size, trace, GCV, curvature. Dense within `exact`, iterative within 1e-6
 * where converged, which must be half of the table; dampings below `from` are too small for double precision
 * and left out. */
static void check_table(lw_problem *(*make)(void), const double (*table)[6], int count, double from,
                        double exact)
{
    static const char *const engine[] = {"dense", "lsqr", "cgls", "lsmr"};
    double lambda[64];
    int first = 0;
    while (table[first][0] < from) first++;
    for (int i = first; i < count; i++) lambda[i - first] = table[i][0];
    for (int e = 0; e < 4; e++) {
        lw_sweep_options options = {.damping = lambda, .count = count - first};
        swept s = sweep_by(make(), false, engine[e], &options);
        ck_assert_msg(s.status >= 0, "%s", s.error.text);
        int converged = 0;
        for (int i = 0; i < s.curve->count; i++) {
            const lw_curve_row *row = &s.curve->row[i];
            const double *t = table[first + i], tolerance = e == 0 ? exact : 1e-6;
            if (e > 0 && !row->converged) continue;
            converged++;
            ASSERT_NEAR(row->point.misfit, t[1], tolerance);
            ASSERT_NEAR(row->point.size, t[2], tolerance);
            ASSERT_NEAR(row->point.effective_parameters, t[3], tolerance);
            ASSERT_NEAR(row->gcv, t[4], tolerance);
            ck_assert_double_eq_tol(row->curvature, t[5], (e == 0 ? 1e-6 : 1e-4) * (1 + fabs(t[5])));
        }
        ck_assert_int_ge(2 * converged, count);
        swept_clear(&s);
    }
}

static lw_problem *shaw_plain(void)
{
    return shaw_problem(NULL);
}

static lw_problem *gravity_plain(void)
{
    return gravity_problem(NULL);
}

#define COUNT(table) ((int)(sizeof(table) / sizeof *(table)))

START_TEST(hilbert_curve)
{
    check_table(hilbert_problem, hilbert_table, COUNT(hilbert_table), 1e-7, 1e-8);
}
END_TEST

START_TEST(shaw_curve)
{
    check_table(shaw_plain, shaw_table, COUNT(shaw_table), 1e-6, 1e-8);
}
END_TEST

START_TEST(gravity_curve)
{
    check_table(gravity_plain, gravity_table, COUNT(gravity_table), 1e-6, 1e-8);
}
END_TEST

/* The largest signed curvature, 0.134, is no corner, though a search for the smallest circle through three
 * points of the curve stops there; GCV has no minimum inside the range. */
START_TEST(hilbert_has_no_choices)
{
    swept s = sweep_by(hilbert_problem(), false, "dense", &(lw_sweep_options){0});
    const lw_choice *corner = choice_of(&s, LW_BY_CORNER), *gcv = choice_of(&s, LW_BY_GCV);
    ck_assert(isnan(corner->damping));
    ck_assert_ptr_nonnull(strstr(corner->warning, "no corner"));
    ck_assert_ptr_nonnull(strstr(gcv->warning, "no minimum inside"));
    ASSERT_NEAR(gcv->damping, 1.72277707101331, 1e-4); /* the largest singular value */
    swept_clear(&s);
}
END_TEST

START_TEST(shaw_choices)
{
    static const char *const engine[] = {"dense", "lsqr"};
    double sigma[20];
    for (int i = 0; i < 20; i++) sigma[i] = 0.0364265554369336 / sqrt(20); /* norm of the noise */
    for (int e = 0; e < 2; e++) {
        double unit = sigma[0]; /* dampings of the whitened problem are those of the table divided by sigma */
        swept s = sweep_by(shaw_problem(sigma), false, engine[e], &(lw_sweep_options){0});
        ASSERT_NEAR(choice_of(&s, LW_BY_CORNER)->damping * unit, 0.00673792779976, 1e-5);
        ASSERT_NEAR(choice_of(&s, LW_BY_CORNER)->value, 41.0575221432, 1e-6);
        ASSERT_NEAR(choice_of(&s, LW_BY_GCV)->damping * unit, 0.013237058859, 1e-5);
        ASSERT_NEAR(choice_of(&s, LW_BY_GCV)->value * unit * unit, 5.44846671174901e-6, 1e-8);
        ASSERT_NEAR(choice_of(&s, LW_BY_DISCREPANCY)->damping * unit, 0.033266930446637, 1e-7);
        swept_clear(&s);
        lw_sweep_options more = {.noise_factor = 1.1, .criteria = 1u << LW_BY_DISCREPANCY};
        s = sweep_by(shaw_problem(sigma), false, engine[e], &more);
        ASSERT_NEAR(choice_of(&s, LW_BY_DISCREPANCY)->damping * unit, 0.045069564717117, 1e-7);
        swept_clear(&s);
    }
}
END_TEST

START_TEST(gravity_choices)
{
    static const char *const engine[] = {"dense", "lsqr", "cholesky"};
    double sigma[20];
    for (int i = 0; i < 20; i++) sigma[i] = 0.0728528457783222 / sqrt(20);
    for (int e = 0; e < 3; e++) {
        double unit = sigma[0], fine = e < 2 ? 1e-5 : 1e-2;
        swept s = sweep_by(gravity_problem(sigma), false, engine[e], &(lw_sweep_options){0});
        ASSERT_NEAR(choice_of(&s, LW_BY_CORNER)->damping * unit, 0.0136566877573, fine);
        ASSERT_NEAR(choice_of(&s, LW_BY_CORNER)->value, 3.79061527280, e < 2 ? 1e-6 : 1e-3);
        ASSERT_NEAR(choice_of(&s, LW_BY_GCV)->damping * unit, 0.014574167838, fine);
        ck_assert_ptr_nonnull(strstr(choice_of(&s, LW_BY_GCV)->warning, "two minima"));
        ASSERT_NEAR(choice_of(&s, LW_BY_DISCREPANCY)->damping * unit, 0.21337789728495, e < 2 ? 1e-7 : 1e-3);
        swept_clear(&s);
    }
}
END_TEST

/* Unequal standard deviations and differences of order 0, 1, 2 as penalty; the trace counts the undamped
 * directions. */
START_TEST(weighted_smoothing)
{
    static const char *const engine[] = {"dense", "lsqr"};
    double sigma[20];
    for (int i = 0; i < 20; i++) sigma[i] = i % 2 == 0 ? 0.01 : 0.02;
    for (int e = 0; e < 2; e++)
        for (int order = 0; order < 3; order++) {
            double lambda[8];
            const double(*t)[6] = gravity_smooth + 8 * order;
            for (int i = 0; i < 8; i++) lambda[i] = t[i][1];
            lw_problem *problem = gravity_problem(sigma);
            set_differences(problem, order);
            lw_sweep_options options = {.damping = lambda, .count = 8};
            swept s = sweep_by(problem, true, engine[e], &options);
            ck_assert_msg(s.status >= 0, "%s", s.error.text);
            int converged = 0;
            for (int i = 0; i < 8; i++) {
                const lw_curve_row *row = &s.curve->row[i];
                double tolerance = e == 0 ? 1e-8 : 1e-6;
                if (e > 0 && !row->converged) continue;
                converged++;
                ASSERT_NEAR(row->point.misfit, t[i][2], tolerance);
                ASSERT_NEAR(row->point.size, t[i][3], tolerance);
                ASSERT_NEAR(row->point.effective_parameters, t[i][4], tolerance);
                ASSERT_NEAR(row->gcv, t[i][5], tolerance);
            }
            ck_assert_int_ge(converged, 4);
            swept_clear(&s);
        }
}
END_TEST

/* With second differences GCV has two minima of nearly the same depth, of which the deeper is useless. */
START_TEST(weighted_smoothing_choices)
{
    static const double corner[] = {0.772250857, 9.02359591, 27.1368055},
                        gcv[] = {0.225277616, 0.125289379, 0.0758971447};
    static const double discrepancy[] = {10.8433832019, 13.3946289894, 66.4503163281};
    double sigma[20];
    for (int i = 0; i < 20; i++) sigma[i] = i % 2 == 0 ? 0.01 : 0.02;
    for (int order = 0; order < 3; order++) {
        lw_problem *problem = gravity_problem(sigma);
        set_differences(problem, order);
        swept s = sweep_by(problem, true, "dense", &(lw_sweep_options){0});
        ASSERT_NEAR(choice_of(&s, LW_BY_CORNER)->damping, corner[order], 1e-6);
        ASSERT_NEAR(choice_of(&s, LW_BY_GCV)->damping, gcv[order], 1e-6);
        ASSERT_NEAR(choice_of(&s, LW_BY_DISCREPANCY)->damping, discrepancy[order], 1e-8);
        if (order == 2) ck_assert_ptr_nonnull(strstr(choice_of(&s, LW_BY_GCV)->warning, "59.93"));
        ck_assert_double_gt(s.curve->decades, 1);
        ck_assert_str_ne(s.curve->comparison, "");
        swept_clear(&s);
    }
}
END_TEST

/* Ridge regression under its own definition: lambda = damping^2, intercept taken out beforehand and not
 * counted. */
START_TEST(ridge_on_longley)
{
    double A[96], b[16] = {0}, lambda[64];
    int count = COUNT(ridge_path) - 1;
    for (int j = 0; j < 7; j++) {
        double mean = 0, square = 0;
        for (int i = 0; i < 16; i++) mean += longley[i][j] / 16;
        for (int i = 0; i < 16; i++) square += pow(longley[i][j] - mean, 2) / 16;
        for (int i = 0; i < 16; i++)
            if (j < 6)
                A[i * 6 + j] = (longley[i][j] - mean) / sqrt(square);
            else
                b[i] = longley[i][j] - mean;
    }
    for (int i = 0; i < count; i++) lambda[i] = sqrt(ridge_path[i + 1][0]);
    lw_sweep_options options = {.damping = lambda, .count = count};
    swept s = sweep_by(problem_from_dense(16, 6, A, b, NULL), false, "dense", &options);
    ck_assert_msg(s.status >= 0, "%s", s.error.text);
    for (int i = 0; i < count; i++) {
        const lw_curve_row *row = &s.curve->row[i];
        const double *t = ridge_path[i + 1];
        ASSERT_NEAR(row->point.misfit, t[2], 1e-8);
        ASSERT_NEAR(row->point.size, t[3], 1e-8);
        ASSERT_NEAR(row->point.effective_parameters, t[4], 1e-8);
        ASSERT_NEAR(row->gcv, t[5], 1e-8);
    }
    ASSERT_NEAR(choice_of(&s, LW_BY_GCV)->damping, 0.05252850604841579, 1e-6);
    ASSERT_NEAR(choice_of(&s, LW_BY_GCV)->value, 0.008052929558924145, 1e-10);
    swept_clear(&s);
}
END_TEST

/* The curve and GCV of the GNU Scientific Library on its own 200 dampings. */
START_TEST(gsl_agrees)
{
    enum { N = 20, POINTS = 200 };
    static const double *const matrix[] = {gravity_A, shaw_A}, *const side[] = {gravity_b, shaw_b};
    for (int which = 0; which < 2; which++) {
        gsl_multifit_linear_workspace *work = gsl_multifit_linear_alloc(N, N);
        gsl_matrix *X = gsl_matrix_alloc(N, N);
        gsl_vector *y = gsl_vector_alloc(N), *lambda = gsl_vector_alloc(POINTS),
                   *rho = gsl_vector_alloc(POINTS);
        gsl_vector *eta = gsl_vector_alloc(POINTS), *G = gsl_vector_alloc(POINTS);
        for (size_t i = 0; i < N; i++) {
            gsl_vector_set(y, i, side[which][i]);
            for (size_t j = 0; j < N; j++) gsl_matrix_set(X, i, j, matrix[which][i * N + j]);
        }
        double gcv_lambda, least;
        gsl_multifit_linear_svd(X, work);
        gsl_multifit_linear_lcurve(y, lambda, rho, eta, work);
        gsl_multifit_linear_gcv(y, lambda, G, &gcv_lambda, &least, work);
        double list[POINTS];
        for (size_t i = 0; i < POINTS; i++) list[i] = gsl_vector_get(lambda, POINTS - 1 - i);
        lw_sweep_options options = {.damping = list, .count = POINTS};
        swept s = sweep_by(which == 0 ? gravity_plain() : shaw_plain(), false, "dense", &options);
        double floor = 1e-6 * list[POINTS - 1]; /* below, either loses digits */
        for (int i = 0; i < POINTS; i++) {
            const lw_curve_row *row = &s.curve->row[i];
            size_t at = (size_t)(POINTS - 1 - i);
            if (row->point.lambda < floor) continue;
            ASSERT_NEAR(row->point.misfit, gsl_vector_get(rho, at), 1e-8);
            ASSERT_NEAR(row->point.size, gsl_vector_get(eta, at), 1e-8);
            ASSERT_NEAR(row->gcv, gsl_vector_get(G, at), 1e-8);
        }
        ASSERT_NEAR(choice_of(&s, LW_BY_GCV)->damping, gcv_lambda, 1e-4);
        ASSERT_NEAR(choice_of(&s, LW_BY_GCV)->value, least, 1e-8);
        swept_clear(&s);
        gsl_multifit_linear_free(work);
        gsl_matrix_free(X);
        gsl_vector_free(y);
        gsl_vector_free(lambda);
        gsl_vector_free(rho);
        gsl_vector_free(eta);
        gsl_vector_free(G);
    }
}
END_TEST

Suite *suite_reference(void)
{
    Suite *suite = suite_create("reference");
    TCase *tcase = tcase_create("reference");
    tcase_add_test(tcase, hilbert_curve);
    tcase_add_test(tcase, shaw_curve);
    tcase_add_test(tcase, gravity_curve);
    tcase_add_test(tcase, hilbert_has_no_choices);
    tcase_add_test(tcase, shaw_choices);
    tcase_add_test(tcase, gravity_choices);
    tcase_add_test(tcase, weighted_smoothing);
    tcase_add_test(tcase, weighted_smoothing_choices);
    tcase_add_test(tcase, ridge_on_longley);
    tcase_add_test(tcase, gsl_agrees);
    suite_add_tcase(suite, tcase);
    return suite;
}
