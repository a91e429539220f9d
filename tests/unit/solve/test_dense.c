/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "check_solve.h"

#include "core/memory.h"
#include "matrix/dense.h"
#include "solve/variance.h"
#include "solving.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

/* Levelling net of six lines, weights 1/sigma^2, A = 437.596 m held. Inputs: worked example of the textbook
 * "Adjustment Computations" (Wiley), chapter on level nets; heights, residuals, v'Pv and cofactors recomputed
 * with 50 digits. */
START_TEST(levelling_six_lines)
{
    lw_problem *problem = six_lines();
    problem_fix(problem, 0, 437.596);
    solved s = solve_by(problem, "dense", 0);
    ck_assert_msg(s.status == LW_OK, "%s", s.error.text);
    const double x[] = {437.596, 448.108711728787, 453.468467783476, 444.943605331336};
    const double v[] = {0.00371172878661663, -2.43945311007344e-4, -0.00186245213948903,
                        3.94668663879739e-4, 0.00189360254950363,  -0.00853221652439071};
    const double Q[] = {1.24247032839380e-5, 9.04285091976247e-6, 5.32864599653035e-6,
                        9.04285091976247e-6, 1.63898233842062e-5, 5.71492330854649e-6,
                        5.32864599653035e-6, 5.71492330854649e-6, 7.31065579408326e-6};
    ck_assert_double_le(apart(4, s.estimate->x, x), 1e-14);
    ck_assert_double_le(apart(6, s.estimate->residual, v), 1e-12);
    ck_assert(near(s.estimate->point.chi_square, 1.27212282860396, 1e-13));
    ck_assert_int_eq(s.estimate->rank, 3);
    ck_assert_int_eq(s.estimate->stop, LW_STOP_REFINED);
    ck_assert(near(s.estimate->weighted[0], v[0] / (0.006 * 0.006), 1e-11));
    double *got = full_inverse(&s, 0);
    ck_assert_double_le(apart(9, got, Q), 1e-13);
    free(got);
    lw_decimal variance[3];
    double worst;
    ck_assert_int_eq(lw_solve_variances(s.decomposition, 0, 0, NULL, variance, &worst, &s.error), LW_OK);
    for (int j = 0; j < 3; j++) ck_assert_double_le(fabs(variance[j].high / Q[4 * j] - 1), 2e-14);
    ck_assert_int_eq(lw_solve_variances(s.decomposition, 0, 1, NULL, variance, &worst, &s.error),
                     LW_QUALIFIED);
    solved_clear(&s);
}
END_TEST

/* Seven lines between two benchmarks X = 100 ft, Y = 107.5 ft, unit weights: same textbook, first example
 * (inputs from memory; its answers 105.14, 104.48, 106.19 reproduce); recomputed with 50 digits. */
START_TEST(levelling_two_benchmarks)
{
    const double A[] = {1, 0, 0, -1, 0, 0, 0, 0, 1, 0, 0, -1, -1, 1, 0, 0, 1, 0, 0, -1, 1};
    const double l[] = {105.10, 2.34 - 107.5, 106.25, -106.13, -0.68, 104.50, 1.70};
    solved s = solve_by(problem_from_dense(7, 3, A, l, NULL), "dense", 0);
    const double x[] = {105.140952380952, 104.482857142857, 106.187619047619};
    ck_assert_double_le(apart(3, s.estimate->x, x), 1e-13);
    ck_assert(near(s.estimate->point.chi_square, 0.0100476190476190, 1e-12));
    double *Q = full_inverse(&s, 0);
    ck_assert(near(Q[0], 0.380952380952381, 1e-14));
    ck_assert(near(Q[1], 0.142857142857143, 1e-14));
    ck_assert(near(Q[4], 0.428571428571429, 1e-14));
    free(Q);
    solved_clear(&s);
}
END_TEST

/* Longley's data (NIST statistical reference data, also shipped with R): coefficients and standard deviations
 * are the exact rational solution to 25 digits, which agrees with the 15 certified digits; residual sum of
 * squares with 50 digits. */
START_TEST(longley_is_correctly_rounded)
{
    static const char *const rows[16][7] = {{"60323", "83.0", "234289", "2356", "1590", "107608", "1947"},
                                            {"61122", "88.5", "259426", "2325", "1456", "108632", "1948"},
                                            {"60171", "88.2", "258054", "3682", "1616", "109773", "1949"},
                                            {"61187", "89.5", "284599", "3351", "1650", "110929", "1950"},
                                            {"63221", "96.2", "328975", "2099", "3099", "112075", "1951"},
                                            {"63639", "98.1", "346999", "1932", "3594", "113270", "1952"},
                                            {"64989", "99.0", "365385", "1870", "3547", "115094", "1953"},
                                            {"63761", "100.0", "363112", "3578", "3350", "116219", "1954"},
                                            {"66019", "101.2", "397469", "2904", "3048", "117388", "1955"},
                                            {"67857", "104.6", "419180", "2822", "2857", "118734", "1956"},
                                            {"68169", "108.4", "442769", "2936", "2798", "120445", "1957"},
                                            {"66513", "110.8", "444546", "4681", "2637", "121950", "1958"},
                                            {"68655", "112.6", "482704", "3813", "2552", "123366", "1959"},
                                            {"69564", "114.2", "502601", "3931", "2514", "125368", "1960"},
                                            {"69331", "115.7", "518173", "4806", "2572", "127852", "1961"},
                                            {"70551", "116.9", "554894", "4007", "2827", "130081", "1962"}};
    const char *A[16 * 7], *b[16];
    for (int i = 0; i < 16; i++) {
        b[i] = rows[i][0];
        A[7 * i] = "1";
        for (int j = 1; j < 7; j++) A[7 * i + j] = rows[i][j];
    }
    const double x[] = {-3.4822586345958183519542217e+06, 1.5061872271373294651652941e+01,
                        -3.5819179292591013519242438e-02, -2.0202298038168251537172182e+00,
                        -1.0332268671735920229082240e+00, -5.1104105653580714219152981e-02,
                        1.8291514646135517523362068e+03};
    const double sd[] = {8.9042038360737252514809370e+05, 8.4914925774766942367932643e+01,
                         3.3491007772243189255512164e-02, 4.8839968165169944658288159e-01,
                         2.1427416316167527399194626e-01, 2.2607320006937037248917477e-01,
                         4.5547849914221200151587254e+02};
    solved s = solve_by(problem_from_text(16, 7, A, b, NULL), "dense", 0);
    ck_assert_int_eq(s.status, LW_OK);
    lw_decimal variance[7], chi = {s.estimate->point.chi_square, s.estimate->chi_square_low};
    double worst;
    ck_assert_int_eq(lw_solve_variances(s.decomposition, 0, 0, NULL, variance, &worst, &s.error), LW_OK);
    for (int j = 0; j < 7; j++) {
        lw_decimal factor = lw_decimal_divide(chi, lw_decimal_of(9));
        ck_assert_double_eq(s.estimate->x[j], x[j]);
        ck_assert_double_eq(lw_decimal_sqrt(lw_decimal_multiply(factor, variance[j])).high, sd[j]);
    }
    ck_assert(near(chi.high, 836424.0555059146, 1e-15));
    solved_clear(&s);
}
END_TEST

START_TEST(agrees_with_dgels)
{
    const int64_t m = 120, n = 40;
    double *A = random_matrix(m, n, 7), *b = random_vector(m, 9), *copy = malloc((size_t)(m * n) * 8);
    double *x = malloc((size_t)m * 8);
    memcpy(x, b, (size_t)m * 8);
    for (int64_t i = 0; i < m; i++)
        for (int64_t j = 0; j < n; j++) copy[i + j * m] = A[i * n + j];
    ck_assert_int_eq(lw_dense_gels(m, n, copy, 1, x, NULL), LW_OK);
    solved s = solve_by(problem_from_dense(m, n, A, b, NULL), "dense", 0);
    ck_assert_double_le(apart(n, s.estimate->x, x), 1e-10);
    lw_solve_options plain = {.engine = "dense", .refine = -1};
    solved p = solve_problem(problem_from_dense(m, n, A, b, NULL), 0, &plain);
    ck_assert_double_le(apart(n, p.estimate->x, x), 1e-10);
    ck_assert_int_eq(p.estimate->stop, LW_STOP_DIRECT);
    solved_clear(&s);
    solved_clear(&p);
    free(A);
    free(b);
    free(copy);
    free(x);
}
END_TEST

/* Hilbert matrix 10 x 8, b = +1, -1, ...: problem seen in the GNU Scientific Library manual; table with 60
 * digits, good to 1e-10 for lambda above 1e-7. */
START_TEST(sweep_of_hilbert)
{
    double A[80], b[10];
    for (int i = 0; i < 10; i++) {
        b[i] = i % 2 ? -1 : 1;
        for (int j = 0; j < 8; j++) A[8 * i + j] = 1.0 / (i + j + 1);
    }
    const double lambda[] = {1e-5, 1e-6, 1e-7, 1e-4};
    const double misfit[] = {2.81073061466400, 2.60744550138298, 2.59375159575171, 2.84660345489695};
    const double size[] = {26540.5374025185, 393724.174327784, 1513857.86738876, 2186.10990383692};
    const double trace[] = {5.04249428323671, 5.85955649291219, 6.17650508159835, 4.40631420258911};
    lw_point point[4];
    double models[32];
    solved s = solve_by(problem_from_dense(10, 8, A, b, NULL), "dense", 1e-5);
    ck_assert_int_eq(
        s.decomposition->methods->evaluate(s.decomposition, 4, lambda, 1, point, models, NULL, &s.error),
        LW_OK);
    for (int k = 0; k < 4; k++) {
        ck_assert_double_le(fabs(point[k].misfit / misfit[k] - 1), 1e-8);
        ck_assert_double_le(fabs(point[k].size / size[k] - 1), 1e-8);
        ck_assert_double_le(fabs(point[k].effective_parameters / trace[k] - 1), 1e-8);
    }
    ck_assert_double_le(apart(8, models, s.estimate->z), 1e-9);
    ck_assert_double_le(fabs(s.estimate->point.size_slope / point[0].size_slope - 1), 1e-7);
    solved_clear(&s);
}
END_TEST

/* First-kind integral equation (attraction of a buried mass line), 20 x 20, sigma alternating 0.01 and 0.02,
 * L of order 0, 1, 2: constructed; weighted residual norm, seminorm and trace recomputed with 60 digits. */
static lw_problem *buried_mass(int order)
{
    static const double b[] = {3.12026695, 3.88345773, 4.67859489, 5.43356096, 6.01867086,
                               6.46425519, 6.74022925, 6.75459187, 6.53195882, 6.17088848,
                               5.62054067, 5.01259961, 4.32299539, 3.66561426, 2.99941720,
                               2.44670223, 1.93888837, 1.48362573, 1.14813719, 0.92609495};
    double A[400], sigma[20], L[400] = {0};
    for (int i = 0; i < 20; i++) {
        sigma[i] = i % 2 ? 0.02 : 0.01;
        for (int j = 0; j < 20; j++)
            A[20 * i + j] = 0.05 * 0.25 * pow(0.0625 + (i - j) * (i - j) / 400.0, -1.5);
    }
    lw_problem *problem = problem_from_dense(20, 20, A, b, sigma);
    for (int i = 0; order > 0 && i + order < 20; i++) {
        L[20 * i + i] = order == 1 ? -1 : 1;
        L[20 * i + i + 1] = order == 1 ? 1 : -2;
        if (order == 2) L[20 * i + i + 2] = 1;
    }
    if (order > 0) problem_set_penalty(problem, 20 - order, L);
    return problem;
}

START_TEST(sweep_with_null_space)
{
    static const double expected[][5] = {{0, 0.1, 2.04201499204934, 9.31669637359298, 13.6047703948984},
                                         {0, 1, 2.95434063599601, 3.81439141638408, 10.5124585504879},
                                         {0, 100, 81.1198090942273, 3.31811003139293, 3.59196505971434},
                                         {1, 0.1, 2.18387134031245, 9.80752349663439, 12.9225613678631},
                                         {1, 10, 4.39003254380076, 0.626852326947279, 7.25415217764426},
                                         {1, 1000, 221.476317115268, 0.220780074397224, 2.15027725114527},
                                         {2, 1, 3.29991047648477, 1.48652689109478, 9.85681672206572},
                                         {2, 30, 4.35702242068675, 0.166271285884877, 6.28430396906564},
                                         {2, 1000, 72.4575373869828, 0.0860319325862262, 3.29449369857481}};
    static const char *const engines[] = {"dense", "qr", "cholesky"};
    for (size_t e = 0; e < 3; e++) {
        for (size_t k = 0; k < sizeof expected / sizeof *expected; k++) {
            const double *row = expected[k];
            lw_solve_options options = {.engine = engines[e], .sweep = 1};
            solved s = solve_problem(buried_mass((int)row[0]), row[1], &options);
            ck_assert_msg(s.status == LW_OK, "%s", s.error.text);
            lw_point p;
            ck_assert_int_eq(
                s.decomposition->methods->evaluate(s.decomposition, 1, row + 1, 1, &p, NULL, NULL, &s.error),
                LW_OK);
            ck_assert_double_le(fabs(p.misfit / row[2] - 1), 1e-9);
            ck_assert_double_le(fabs(p.size / row[3] - 1), 1e-9);
            ck_assert_double_le(fabs(p.effective_parameters / row[4] - 1), 1e-9);
            ck_assert_double_le(fabs(s.estimate->point.misfit / row[2] - 1), 1e-9);
            ck_assert_double_le(fabs(s.estimate->point.effective_parameters / row[4] - 1), 1e-9);
            solved_clear(&s);
        }
    }
}
END_TEST

/* Nine blocks, eight straight rays (textbook example on generalised inverses; geometry from memory): rank 7
 * of 9. Damped resolution recomputed with 50 digits. */
static lw_problem *nine_blocks(void)
{
    const double r = sqrt(2.0);
    const double A[] = {1, 0, 0, 1, 0, 0, 1, 0, 0, 0, 1, 0, 0, 1, 0, 0, 1, 0, 0, 0, 1, 0, 0, 1,
                        0, 0, 1, 1, 1, 1, 0, 0, 0, 0, 0, 0, 0, 0, 0, 1, 1, 1, 0, 0, 0, 0, 0, 0,
                        0, 0, 0, 1, 1, 1, r, 0, 0, 0, r, 0, 0, 0, r, 0, 0, 0, 0, 0, 0, 0, 0, r};
    const double b[] = {1, 2, 3, 4, 5, 6, 7, 8};
    return problem_from_dense(8, 9, A, b, NULL);
}

START_TEST(rank_seven_of_nine)
{
    static const char *const engines[] = {"dense", "qr", "cholesky"};
    const double lambda[] = {0.1, 0.5, 1, 1},
                 trace[] = {6.951086978051, 6.148684751781, 4.915384615385, 4.915384615385};
    for (size_t e = 0; e < 3; e++) {
        solved s = solve_by(nine_blocks(), engines[e], 0);
        ck_assert_int_eq(s.status, LW_UNSOLVABLE);
        ck_assert_msg(strstr(s.error.text, "rank defect 2") != NULL, "%s", s.error.text);
        ck_assert_msg(strstr(s.error.text, "'p1'") != NULL && strstr(s.error.text, "'p9',") == NULL, "%s",
                      s.error.text);
        solved_clear(&s);
        s = solve_by(nine_blocks(), engines[e], 0.1);
        lw_point point[4];
        ck_assert_int_eq(
            s.decomposition->methods->evaluate(s.decomposition, 4, lambda, 1, point, NULL, NULL, &s.error),
            LW_OK);
        for (int k = 0; k < 4; k++)
            ck_assert_double_le(fabs(point[k].effective_parameters - trace[k]), 1e-11);
        solved_clear(&s);
    }
}
END_TEST

/* Closed forms evaluated in exact fractions. */
START_TEST(closed_forms)
{
    const double one[] = {1, 1}, pair[] = {10, 11}, covariance[] = {1, 1.6, 1.6, 4};
    const int32_t member[] = {0, 1};
    lw_problem *problem = problem_from_dense(2, 1, one, pair, NULL);
    problem_add_block(problem, 2, member,
                      covariance); /* sigma 1, 2, correlation 0.8: a negative weight is right */
    solved s = solve_by(problem, "dense", 0);
    ck_assert_msg(s.status == LW_OK, "%s", s.error.text);
    ck_assert(near(s.estimate->x[0], 29.0 / 3, 1e-15));
    double *Q = full_inverse(&s, 0);
    ck_assert(near(Q[0], 0.8, 1e-15));
    free(Q);
    solved_clear(&s);
    const double line[] = {1, 0, 1, 1, 1, 2, 1, 3, 1, 4}, y[] = {1, 3, 2, 5, 4};
    s = solve_by(problem_from_dense(5, 2, line, y, NULL), "dense", 0);
    ck_assert_double_eq(s.estimate->x[0], 1.4);
    ck_assert_double_eq(s.estimate->x[1], 0.8);
    ck_assert(near(s.estimate->point.chi_square, 3.6, 1e-15));
    solved_clear(&s);
    const double orthogonal[] = {1, 1, 1, -1, 1, 1, 1, -1},
                 b[] = {4, 1, 2, 3}; /* columns of norm 2: shrink by 4 / (4 + lambda^2) */
    s = solve_by(problem_from_dense(4, 2, orthogonal, b, NULL), "dense", 2);
    ck_assert(near(s.estimate->x[0], 2.5 * 0.5, 1e-15));
    ck_assert(near(s.estimate->x[1], 0.5 * 0.5, 1e-15));
    ck_assert(near(s.estimate->point.effective_parameters, 1, 1e-14));
    ck_assert(near(s.estimate->point.size, hypot(1.25, 0.25), 1e-14));
    solved_clear(&s);
}
END_TEST

START_TEST(priors_are_told_from_observations)
{
    const double A[] = {1, 0, 1, 1, 0, 1}, b[] = {1, 2, 4}, prior[] = {0.5, 0},
                 prior_sigma[] = {0.5, (double)NAN}, weight[] = {1, 1};
    const double lambda[] = {0.3, 0.3, 0.3, 0.3};
    lw_point point[4];
    lw_problem *problem = problem_from_dense(3, 2, A, b, NULL);
    problem_set_prior(problem, prior);
    problem_set_prior_sigma(problem, prior_sigma);
    problem_set_damp_weight(problem, weight);
    solved s = solve_by(problem, "dense", 0.3);
    ck_assert_msg(s.status == LW_OK, "%s", s.error.text);
    ck_assert_int_eq(
        s.decomposition->methods->evaluate(s.decomposition, 4, lambda, 1, point, NULL, NULL, &s.error),
        LW_OK);
    double r = 0;
    for (int i = 0; i < 3; i++) r += s.estimate->residual[i] * s.estimate->residual[i];
    double off = (s.estimate->x[0] - 0.5) / 0.5;
    ck_assert(near(point[3].misfit * point[3].misfit, r, 1e-13));
    ck_assert(near(point[3].chi_square, r + off * off, 1e-13));
    ck_assert(near(s.estimate->point.chi_square, r + off * off, 1e-13));
    ck_assert(near(s.estimate->point.misfit * s.estimate->point.misfit, r, 1e-13));
    solved_clear(&s);
}
END_TEST

static bool fail_at(void *state)
{
    int64_t *left = state;
    return (*left)-- == 0;
}

/* The k-th allocation of a solve fails: out of memory or, where a library does without, the right answer. 1:
 * k was reached. */
static int fails_cleanly(const char *engine, int conditioned, int64_t k)
{
    const double C[] = {1, 1, 1, 1}, d[] = {1784};
    lw_problem *problem = six_lines();
    int64_t left = k;
    lw_solve_options options = {.engine = engine, .datum_free = !conditioned};
    if (conditioned) problem_set_conditions(problem, 1, C, d);
    lw_memory_set_gate(fail_at, &left);
    solved s = solve_problem(problem, 0, &options);
    lw_memory_set_gate(NULL, NULL);
    ck_assert_msg(s.status == LW_OK || s.status == LW_NO_MEMORY || s.status == LW_SYSTEM, "%s: %d at %d: %s",
                  engine, (int)s.status, (int)k, s.error.text);
    ck_assert(s.status != LW_OK || near(s.estimate->point.chi_square, 1.27212282860396, 1e-12));
    solved_clear(&s);
    return left < 0;
}

START_TEST(failing_allocations)
{
    int64_t k = 0;
    for (int conditioned = 0; conditioned < 2; conditioned++) {
        for (k = 0; fails_cleanly("dense", conditioned, k); k++) continue;
        ck_assert_int_gt(k, 20);
        for (k = 0; fails_cleanly("cholesky", conditioned, k); k++) continue;
        ck_assert_int_gt(k, 20);
    }
}
END_TEST

Suite *suite_dense(void)
{
    Suite *suite = suite_create("dense");
    TCase *tests = tcase_create("dense");
    tcase_add_test(tests, levelling_six_lines);
    tcase_add_test(tests, levelling_two_benchmarks);
    tcase_add_test(tests, longley_is_correctly_rounded);
    tcase_add_test(tests, agrees_with_dgels);
    tcase_add_test(tests, sweep_of_hilbert);
    tcase_add_test(tests, sweep_with_null_space);
    tcase_add_test(tests, rank_seven_of_nine);
    tcase_add_test(tests, closed_forms);
    tcase_add_test(tests, priors_are_told_from_observations);
    tcase_add_test(tests, failing_allocations);
    tcase_set_timeout(tests, 60);
    suite_add_tcase(suite, tests);
    return suite;
}
