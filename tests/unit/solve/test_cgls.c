/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "solve/cgls.h"

#include "check_solve.h"
#include "small_system.h"

#include <math.h>
#include <string.h>

START_TEST(solves_the_integer_system)
{
    kernel_solves_small(lw_cgls);
}
END_TEST

START_TEST(agrees_with_qr)
{
    kernel_agrees_with_qr(lw_cgls);
}
END_TEST

START_TEST(ends_well)
{
    kernel_ends_well(lw_cgls);
}
END_TEST

START_TEST(bounds_its_error)
{
    kernel_bounds_its_error(lw_cgls);
}
END_TEST

START_TEST(ignores_threads)
{
    kernel_ignores_threads(lw_cgls);
}
END_TEST

#define MOST 8

typedef struct history {
    int n, count;
    double alpha[MOST], beta[MOST], polak_ribiere[MOST], gradient[MOST], residual[MOST];
    double x[MOST][MOST], g[MOST][MOST], p[MOST][MOST];
} history;

static void record(void *state, const lw_iteration *seen)
{
    history *h = state;
    ck_assert_int_lt(h->count, MOST);
    int i = h->count++;
    h->alpha[i] = seen->alpha;
    h->beta[i] = seen->beta;
    h->polak_ribiere[i] = seen->polak_ribiere;
    h->gradient[i] = seen->gradient;
    h->residual[i] = seen->residual;
    size_t bytes = (size_t)h->n * sizeof(double);
    memcpy(h->x[i], seen->x, bytes);
    memcpy(h->g[i], seen->g, bytes);
    memcpy(h->p[i], seen->direction, bytes);
}

static double dot(int n, const double *a, const double *b)
{
    double sum = 0;
    for (int i = 0; i < n; i++) sum += a[i] * b[i];
    return sum;
}

/* p'(A'A + damp^2 I) q. */
static double energy(int m, int n, const double *A, double damp, const double *p, const double *q)
{
    double sum = damp * damp * dot(n, p, q);
    for (int i = 0; i < m; i++) sum += dot(n, A + i * n, p) * dot(n, A + i * n, q);
    return sum;
}

static void run(int m, int n, const double *A, const double *b, double damp, layout how, history *h,
                lw_iterate_result *result)
{
    double x[MOST];
    owned_operator op = operator_of(m, n, A, how, NULL);
    lw_iterate_options options = {.damp = damp, .tolerance = 1e-10, .observe = record, .observe_state = h};
    memset(h, 0, sizeof *h);
    h->n = n;
    ck_assert_int_eq(lw_cgls(op.op, b, &options, x, result, NULL), LW_OK);
    /* one product with A and one with A' a step; A' once at the start, both once at the end for the true
     * gradient */
    if (how == LAYOUT_TWO_PASS) {
        ck_assert_int_eq(op.op->forward, result->steps + 1);
        ck_assert_int_eq(op.op->adjoint, result->steps + 2);
    } else {
        ck_assert_int_le(op.op->forward, result->steps + 2);
        ck_assert_int_le(op.op->adjoint, result->steps + 2);
    }
    owned_operator_clear(&op);
}

/* Fletcher-Reeves = Polak-Ribiere, gradients mutually orthogonal, directions conjugate. */
static void check_history(int m, int n, const double *A, double damp, const history *h)
{
    for (int i = 0; i + 1 < h->count; i++) ck_assert_double_eq_tol(h->beta[i], h->polak_ribiere[i], 1e-12);
    for (int i = 0; i + 1 < h->count; i++)
        for (int j = 0; j < i; j++) {
            double angle =
                dot(n, h->g[i], h->g[j]) / sqrt(dot(n, h->g[i], h->g[i]) * dot(n, h->g[j], h->g[j]));
            ck_assert_double_le(fabs(angle), 1e-10);
        }
    for (int i = 0; i < h->count; i++)
        for (int j = 0; j < i; j++) {
            double both =
                sqrt(energy(m, n, A, damp, h->p[i], h->p[i]) * energy(m, n, A, damp, h->p[j], h->p[j]));
            ck_assert_double_le(fabs(energy(m, n, A, damp, h->p[i], h->p[j])) / both, 1e-10);
        }
}

/* The quadratic 1/2 x'Hx - b'x, H = C'C, is least squares with A = C and right-hand side C'^-1 b.
 * Constructed; coefficients in exact rational arithmetic. */
START_TEST(quadratic_in_exact_arithmetic)
{
    static const double H[16] = {4, 1, 0, 1, 1, 3, 1, 0, 0, 1, 5, 2, 1, 0, 2, 6}, b[4] = {1, 2, -1, 3};
    static const double alpha[] = {5.0 / 23, 8418.0 / 31825, 29030765.0 / 99765378, 272583.0 / 1112884};
    static const double beta[] = {488.0 / 1587, 7238307.0 / 40513225, 80587286641.0 / 27194346031374, 0};
    static const double objective[] = {-1.6304347826086956, -2.2404556166535743, -2.3603566620075354,
                                       -2.360655737704918};
    static const double gradient[] = {2.1476676583006031, 0.90779370878786803, 0.049417540364374055, 0};
    static const double x[] = {-11.0 / 61, 117.0 / 122, -85.0 / 122, 93.0 / 122};
    double C[16] = {0}, c[4]; /* H = C'C, C upper triangular, row-major */
    for (int i = 0; i < 4; i++)
        for (int j = i; j < 4; j++) {
            double sum = H[i * 4 + j];
            for (int k = 0; k < i; k++) sum -= C[k * 4 + i] * C[k * 4 + j];
            C[i * 4 + j] = i == j ? sqrt(sum) : sum / C[i * 4 + i];
        }
    for (int i = 0; i < 4; i++) {
        c[i] = b[i];
        for (int k = 0; k < i; k++) c[i] -= C[k * 4 + i] * c[k];
        c[i] /= C[i * 4 + i];
    }
    for (int how = LAYOUT_FUSED; how <= LAYOUT_TWO_PASS; how++) {
        history h;
        lw_iterate_result result;
        run(4, 4, C, c, 0, (layout)how, &h, &result);
        ck_assert_int_eq(h.count, 4);
        for (int i = 0; i < 4; i++) {
            ck_assert_double_eq_tol(h.alpha[i], alpha[i], 1e-12);
            ck_assert_double_eq_tol(h.beta[i], beta[i], 1e-12);
            ck_assert_double_eq_tol(0.5 * (h.residual[i] * h.residual[i] - dot(4, c, c)), objective[i],
                                    1e-13);
            ck_assert_double_eq_tol(h.gradient[i], gradient[i], 1e-13);
            ck_assert_double_eq_tol(h.x[3][i], x[i], 1e-14);
        }
        check_history(4, 4, C, 0, &h);
    }
}
END_TEST

/* The 8 x 5 system, step by step; constructed, exact rational arithmetic. Residual of [A; damp I]. */
START_TEST(steps_in_exact_arithmetic)
{
    static const double expected[2][5][4] = {
        {{0.0070408960474072904, 0.058640093488576267, 8.962304222285826, 34.22906758738476},
         {0.04222568781196516, 0.12133107795881647, 5.554282466724135, 11.92287791501713},
         {0.034467817710663443, 0.045468645767562051, 5.094141780593269, 2.542360349627244},
         {0.048372604709638049, 0.017842203523725064, 5.063360494705777, 0.3395950499584830},
         {0.048274146974386013, 0, 5.062810710771320, 0}},
        {{0.006991668436746222, 0.057822975835792781, 9.017009739032696, 33.98974929591479},
         {0.040419560220078622, 0.11117362298648543, 5.882994402590311, 11.33310312827829},
         {0.033183482219160607, 0.04214328265711819, 5.508862164872720, 2.326553379429209},
         {0.046036249664497791, 0.016160299881517567, 5.486198593624696, 0.2957588364725041},
         {0.046013321270577931, 0, 5.485831757548172, 0}},
    };
    for (int damp = 0; damp < 2; damp++)
        for (int how = LAYOUT_FUSED; how <= LAYOUT_TWO_PASS; how++) {
            history h;
            lw_iterate_result result;
            run(8, 5, small_A, small_b, damp, (layout)how, &h, &result);
            ck_assert_int_eq(h.count, 5);
            for (int i = 0; i < 5; i++) {
                ck_assert_double_eq_tol(h.alpha[i], expected[damp][i][0], 1e-12);
                ck_assert_double_eq_tol(h.beta[i], expected[damp][i][1], 1e-12);
                ck_assert_double_eq_tol(h.residual[i], expected[damp][i][2], 1e-12);
                ck_assert_double_eq_tol(h.gradient[i], expected[damp][i][3], 1e-11);
                if (i > 0) ck_assert_double_gt(dot(5, h.x[i], h.x[i]), dot(5, h.x[i - 1], h.x[i - 1]));
            }
            check_history(8, 5, small_A, damp, &h);
        }
}
END_TEST

/* As many steps as distinct eigenvalues: H = diag(2, 2, 5, 5, 5) takes two, a multiple of the identity one.
 */
START_TEST(distinct_eigenvalues)
{
    double A[25] = {0}, b[5];
    for (int i = 0; i < 5; i++) {
        A[i * 6] = sqrt(i < 2 ? 2.0 : 5.0);
        b[i] = 1 / A[i * 6]; /* A'b = ones */
    }
    history h;
    lw_iterate_result result;
    run(5, 5, A, b, 0, LAYOUT_TWO_PASS, &h, &result);
    ck_assert_int_eq(result.steps, 2);
    for (int i = 0; i < 5; i++) {
        ck_assert_double_eq_tol(h.x[1][i], i < 2 ? 0.5 : 0.2, 1e-15);
        A[i * 6] = 3;
    }
    run(5, 5, A, b, 0, LAYOUT_TWO_PASS, &h, &result);
    ck_assert_int_eq(result.steps, 1);
}
END_TEST

/* Three columns, one with column fusion: the same history as with two passes. */
START_TEST(wide_system)
{
    static const double A[15] = {3, 1, 0, 2, 1, 1, 4, 1, 0, 0, 0, 1, 5, 1, 2}, b[3] = {1, 2, 3};
    history fused, plain;
    lw_iterate_result result;
    run(3, 5, A, b, 0.5, LAYOUT_FUSED, &fused, &result);
    run(3, 5, A, b, 0.5, LAYOUT_TWO_PASS, &plain, &result);
    ck_assert_int_le(result.steps, 4); /* three singular values and, from damping, the rest */
    for (int i = 0; i < 3; i++) {
        ck_assert_double_eq_tol(fused.alpha[i], plain.alpha[i], 1e-11);
        ck_assert_double_eq_tol(fused.residual[i], plain.residual[i], 1e-13);
    }
    check_history(3, 5, A, 0.5, &plain);
}
END_TEST

START_TEST(starts_from_a_given_model)
{
    const small_solution *s = &small_solutions[2];
    owned_operator A = operator_of(8, 5, small_A, LAYOUT_FUSED, NULL);
    lw_iterate_options options = {.damp = s->damp, .tolerance = 1e-11, .start = 1};
    lw_iterate_result result;
    double x[5];
    memcpy(x, s->x, sizeof x);
    ck_assert_int_eq(lw_cgls(A.op, small_b, &options, x, &result, NULL), LW_OK);
    ck_assert_int_eq(result.steps, 0);
    ck_assert_int_eq(result.stop, LW_STOP_TOLERANCE);
    x[2] += 1;
    ck_assert_int_eq(lw_cgls(A.op, small_b, &options, x, &result, NULL), LW_OK);
    for (int i = 0; i < 5; i++) ck_assert_double_eq_tol(x[i], s->x[i], 1e-11);
    owned_operator_clear(&A);
}
END_TEST

Suite *suite_cgls(void)
{
    Suite *suite = suite_create("cgls");
    TCase *tcase = tcase_create("cgls");
    tcase_add_test(tcase, solves_the_integer_system);
    tcase_add_test(tcase, agrees_with_qr);
    tcase_add_test(tcase, ends_well);
    tcase_add_test(tcase, bounds_its_error);
    tcase_add_test(tcase, ignores_threads);
    tcase_add_test(tcase, quadratic_in_exact_arithmetic);
    tcase_add_test(tcase, steps_in_exact_arithmetic);
    tcase_add_test(tcase, distinct_eigenvalues);
    tcase_add_test(tcase, wide_system);
    tcase_add_test(tcase, starts_from_a_given_model);
    suite_add_tcase(suite, tcase);
    return suite;
}
