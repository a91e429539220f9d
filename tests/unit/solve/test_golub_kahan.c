/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "solve/golub_kahan.h"

#include "check_solve.h"
#include "small_system.h"
#include "support.h"

#include <math.h>
#include <string.h>

enum { M = 12, N = 9, STEPS = 6 };

static void fill(int count, double *v, uint64_t seed)
{
    for (int i = 0; i < count; i++) v[i] = next_random(&seed);
}

/* alpha_{i+1}, beta_{i+1}, v_{i+1} for i = 0 .. STEPS of side c. */
typedef struct chain {
    double alpha[STEPS + 1], beta[STEPS + 1], v[STEPS + 1][M];
} chain;

static void run(int m, int n, const double *A, const double *b, int sides, layout how, chain *out)
{
    owned_operator op = operator_of(m, n, A, how, NULL);
    lw_golub_kahan gk;
    ck_assert_int_eq(lw_golub_kahan_start(&gk, op.op, sides, b, NULL), LW_OK);
    for (int i = 0;; i++) {
        for (int c = 0; c < sides; c++) {
            out[c].alpha[i] = gk.alpha[c];
            out[c].beta[i] = gk.beta[c];
            lw_golub_kahan_direction(&gk, c, out[c].v[i]);
        }
        if (i == STEPS) break;
        lw_golub_kahan_step(&gk);
    }
    int64_t ahead = op.op->fusion == LW_FUSED_COLUMNS; /* A v of the last step is made ahead */
    ck_assert_int_eq(op.op->forward, (STEPS + ahead) * sides);
    ck_assert_int_eq(op.op->adjoint, (STEPS + 1) * sides);
    lw_golub_kahan_clear(&gk);
    owned_operator_clear(&op);
}

/* v orthonormal; A'A V = V B'B on the first columns, with (B'B) tridiagonal of alpha and beta. */
static void check_chain(int m, int n, const double *A, const chain *h)
{
    for (int i = 0; i <= STEPS; i++)
        for (int j = 0; j <= i; j++) {
            double sum = i == j ? -1 : 0;
            for (int k = 0; k < n; k++) sum += h->v[i][k] * h->v[j][k];
            ck_assert_double_eq_tol(sum, 0, 1e-9);
        }
    for (int i = 0; i < STEPS; i++) {
        double product[M] = {0}, u[M];
        for (int r = 0; r < m; r++) {
            u[r] = 0;
            for (int k = 0; k < n; k++) u[r] += A[r * n + k] * h->v[i][k];
            for (int k = 0; k < n; k++) product[k] += A[r * n + k] * u[r];
        }
        double diagonal = h->alpha[i] * h->alpha[i] + h->beta[i + 1] * h->beta[i + 1];
        double below = h->alpha[i + 1] * h->beta[i + 1], above = i > 0 ? h->alpha[i] * h->beta[i] : 0;
        for (int k = 0; k < n; k++) {
            double expected =
                diagonal * h->v[i][k] + below * h->v[i + 1][k] + (i > 0 ? above * h->v[i - 1][k] : 0);
            ck_assert_double_eq_tol(product[k], expected, 1e-10);
        }
    }
}

START_TEST(relations_hold_in_every_layout)
{
    double A[M * N], b[M];
    fill(M * N, A, 1);
    fill(M, b, 2);
    chain h[4];
    run(M, N, A, b, 1, LAYOUT_FUSED, &h[0]);
    run(M, N, A, b, 1, LAYOUT_TWO_PASS, &h[1]);
    run(N, M, A, b, 1, LAYOUT_FUSED, &h[2]);
    run(N, M, A, b, 1, LAYOUT_TWO_PASS, &h[3]);
    check_chain(M, N, A, &h[0]);
    check_chain(N, M, A, &h[2]);
    for (int i = 0; i <= STEPS; i++)
        for (int k = 0; k < 4; k += 2) {
            ck_assert_double_eq_tol(h[k].alpha[i], h[k + 1].alpha[i], 1e-11);
            ck_assert_double_eq_tol(h[k].beta[i], h[k + 1].beta[i], 1e-11);
        }
}
END_TEST

START_TEST(lockstep_is_the_same_as_apart)
{
    double A[M * N], b[3 * M];
    fill(M * N, A, 3);
    fill(3 * M, b, 4);
    for (int wide = 0; wide < 2; wide++)
        for (int how = LAYOUT_FUSED; how <= LAYOUT_TWO_PASS; how++) {
            int m = wide ? N : M, n = wide ? M : N;
            chain together[3], apart;
            run(m, n, A, b, 3, (layout)how, together);
            for (int c = 0; c < 3; c++) {
                run(m, n, A, b + c * m, 1, (layout)how, &apart);
                for (int i = 0; i <= STEPS; i++) {
                    ck_assert_double_eq_tol(together[c].alpha[i], apart.alpha[i], 1e-11);
                    ck_assert_double_eq_tol(together[c].beta[i], apart.beta[i], 1e-11);
                }
            }
        }
}
END_TEST

/* One side's space is exhausted after one step, the other goes on. */
START_TEST(exhausted_side_rests)
{
    static const double A[9] = {2, 0, 0, 0, 2, 1, 0, 1, 3}, b[6] = {1, 0, 0, 0, 1, 1};
    for (int how = LAYOUT_FUSED; how <= LAYOUT_TWO_PASS; how++) {
        owned_operator op = operator_of(3, 3, A, (layout)how, NULL);
        lw_golub_kahan gk;
        ck_assert_int_eq(lw_golub_kahan_start(&gk, op.op, 2, b, NULL), LW_OK);
        ck_assert_double_eq(gk.alpha[0], 2);
        lw_golub_kahan_step(&gk);
        ck_assert(gk.ended[0]);
        ck_assert(!gk.ended[1]);
        ck_assert_double_eq(gk.alpha[0], 0);
        ck_assert_double_eq(gk.beta[0], 0);
        ck_assert_double_gt(gk.beta[1], 0);
        double v[3];
        lw_golub_kahan_direction(&gk, 0, v);
        ck_assert_double_eq(v[0], 0);
        lw_golub_kahan_step(&gk);
        lw_golub_kahan_step(&gk);
        ck_assert(gk.ended[1]);
        lw_golub_kahan_clear(&gk);
        owned_operator_clear(&op);
    }
}
END_TEST

Suite *suite_golub_kahan(void)
{
    Suite *suite = suite_create("golub_kahan");
    TCase *tcase = tcase_create("golub_kahan");
    tcase_add_test(tcase, relations_hold_in_every_layout);
    tcase_add_test(tcase, lockstep_is_the_same_as_apart);
    tcase_add_test(tcase, exhausted_side_rests);
    suite_add_tcase(suite, tcase);
    return suite;
}
