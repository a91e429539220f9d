/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "small_system.h"

#include "check_solve.h"
#include "support.h"

#include "core/memory.h"
#include "matrix/dense.h"
#include "matrix/product.h"
#include "matrix/vector.h"

#include <math.h>
#include <string.h>

const double small_A[8 * 5] = {3, 1, 0, 2, 1, 1, 4, 1, 0, 0, 0, 1, 5, 1, 2, 2, 0, 1, 6, 1,
                               1, 1, 1, 1, 7, 4, 0, 2, 1, 0, 0, 3, 0, 2, 1, 1, 2, 3, 4, 5};
const double small_b[8] = {7, -2, 5, 1, 9, 3, -4, 6};
const small_solution small_solutions[4] = {
    {0,
     {1.2257420806475727, -0.9424937510660566, 0.5229349563364295, -0.4599597056946898, 1.3397693316852011},
     5.062810710771320,
     2.161190385092055},
    {0.1,
     {1.2250062924059026, -0.94193611235254826, 0.52284245804237284, -0.45946311366313525,
      1.3393986412871526},
     5.062812883116775,
     2.160172068428479},
    {1,
     {1.1567073952715152, -0.88934728235209803, 0.51388855119219645, -0.41329673177935644, 1.30428307468945},
     5.082262243799892,
     2.065178093378427},
    {5,
     {0.53616063900776478, -0.32734068123549415, 0.38249817118296287, 0.0044875586119171628,
      0.87374198462624353},
     7.167972832922605,
     1.142090275438919},
};

owned_operator operator_of(int64_t m, int64_t n, const double *A, layout how, lw_team *team)
{
    owned_operator owned = {.matrix = sparse_from_dense(m, n, A)};
    lw_product_options options = {.two_pass = how == LAYOUT_TWO_PASS, .team = team};
    ck_assert_int_eq(lw_product_new(owned.matrix, &options, &owned.op, NULL), LW_OK);
    return owned;
}

void owned_operator_clear(owned_operator *owned)
{
    lw_operator_free(owned->op);
    lw_sparse_free(owned->matrix);
}

static double distance(int64_t n, const double *a, const double *b)
{
    double square = 0, size = 0;
    for (int64_t i = 0; i < n; i++) {
        square += (a[i] - b[i]) * (a[i] - b[i]);
        size += b[i] * b[i];
    }
    return sqrt(square / size);
}

void kernel_solves_small(lw_iterate *kernel)
{
    for (int how = LAYOUT_FUSED; how <= LAYOUT_TWO_PASS; how++)
        for (int i = 0; i < 4; i++) {
            const small_solution *s = &small_solutions[i];
            owned_operator A = operator_of(8, 5, small_A, (layout)how, NULL);
            lw_iterate_options options = {.damp = s->damp, .tolerance = 1e-12};
            lw_iterate_result result;
            double x[5];
            kernel(A.op, small_b, &options, x, &result, NULL);
            ck_assert_double_le(distance(5, x, s->x), 1e-12);
            ck_assert_double_eq_tol(result.residual, s->residual, 1e-12);
            ck_assert_double_eq_tol(result.norm, s->norm, 1e-12);
            ck_assert_int_le(result.steps, 6); /* five distinct singular values, and one for rounding */
            owned_operator_clear(&A);
        }
}

/* [A; damp I] x ~ [b; 0] by dgels. */
static void solve_by_qr(int64_t m, int64_t n, const double *A, const double *b, double damp, double *x)
{
    int64_t rows = m + n;
    double *full = lw_alloc_zero((size_t)(rows * n), sizeof(double)),
           *side = lw_alloc_zero((size_t)rows, sizeof(double));
    for (int64_t i = 0; i < m; i++) {
        side[i] = b[i];
        for (int64_t j = 0; j < n; j++) full[j * rows + i] = A[i * n + j];
    }
    for (int64_t j = 0; j < n; j++) full[j * rows + m + j] = damp;
    ck_assert_int_eq(lw_dense_gels(rows, n, full, 1, side, NULL), LW_OK);
    memcpy(x, side, (size_t)n * sizeof(double));
    lw_free(full);
    lw_free(side);
}

#define MOST 60

static void fill(int64_t count, double *v, uint64_t *state)
{
    for (int64_t i = 0; i < count; i++) v[i] = next_random(state);
}

void kernel_agrees_with_qr(lw_iterate *kernel)
{
    static const struct {
        int64_t m, n;
        double damp;
    } shape[] = {{60, 20, 0}, {60, 20, 0.3}, {20, 60, 0.3}, {40, 40, 0.5}, {60, 59, 0.1}, {50, 1, 0}};
    static double A[MOST * MOST], b[MOST], x[MOST], expected[MOST];
    uint64_t state = 7;
    for (size_t i = 0; i < sizeof shape / sizeof *shape; i++)
        for (int how = LAYOUT_FUSED; how <= LAYOUT_TWO_PASS; how++) {
            int64_t m = shape[i].m, n = shape[i].n;
            fill(m * n, A, &state);
            fill(m, b, &state);
            owned_operator op = operator_of(m, n, A, (layout)how, NULL);
            lw_iterate_options options = {.damp = shape[i].damp, .tolerance = 1e-12};
            lw_iterate_result result;
            ck_assert_int_ge(kernel(op.op, b, &options, x, &result, NULL), 0);
            solve_by_qr(m, n, A, b, shape[i].damp, expected);
            ck_assert_double_le(distance(n, x, expected), 1e-10);
            owned_operator_clear(&op);
        }
}

void kernel_ends_well(lw_iterate *kernel)
{
    owned_operator A = operator_of(8, 5, small_A, LAYOUT_FUSED, NULL);
    lw_iterate_options options = {.damp = 1};
    lw_iterate_result result;
    double x[5] = {1, 1, 1, 1, 1}, zero[8] = {0}, expected[5] = {0};
    ck_assert_int_eq(kernel(A.op, zero, &options, x, &result, NULL), LW_OK);
    ck_assert_int_eq(result.stop, LW_STOP_ZERO);
    ck_assert_mem_eq(x, expected, sizeof x);

    options.steps = 2;
    ck_assert_int_eq(kernel(A.op, small_b, &options, x, &result, NULL), LW_NOT_CONVERGED);
    ck_assert_int_eq(result.stop, LW_STOP_STEPS);
    ck_assert_int_eq(result.steps, 2);
    ck_assert_double_gt(result.error_bound, 1e-6);

    volatile sig_atomic_t cancel = 1;
    lw_watch watch = {.cancel = &cancel};
    options.steps = 0;
    options.watch = &watch;
    ck_assert_int_eq(kernel(A.op, small_b, &options, x, &result, NULL), LW_INTERRUPTED);
    ck_assert_int_eq(result.stop, LW_STOP_INTERRUPTED);
    ck_assert_int_eq(result.steps, 1);
    owned_operator_clear(&A);

    const double one[4] = {1, 0, 0, 1}, across[2] = {3, 4}; /* A = I: one step */
    owned_operator I = operator_of(2, 2, one, LAYOUT_FUSED, NULL);
    lw_iterate_options plain = {.tolerance = 1e-12};
    ck_assert_int_eq(kernel(I.op, across, &plain, x, &result, NULL), LW_OK);
    ck_assert_int_eq(result.steps, 1);
    ck_assert_double_le(distance(2, x, across), 1e-15);
    owned_operator_clear(&I);
}

void kernel_bounds_its_error(lw_iterate *kernel)
{
    enum { M = 50, N = 40 };
    static double A[M * N], b[M];
    double x[N], exact[N], damp = 0.2;
    uint64_t state = 99;
    fill(M * N, A, &state);
    for (int i = 0; i < M; i++)
        for (int j = 0; j < N; j++) A[i * N + j] *= exp(-0.2 * j);
    fill(M, b, &state);
    solve_by_qr(M, N, A, b, damp, exact);
    owned_operator op = operator_of(M, N, A, LAYOUT_FUSED, NULL);
    for (int64_t steps = 1; steps <= 30; steps++) {
        lw_iterate_options options = {.damp = damp, .tolerance = 1e-13, .steps = steps};
        lw_iterate_result result;
        kernel(op.op, b, &options, x, &result, NULL);
        double error = 0;
        for (int j = 0; j < N; j++) error += (x[j] - exact[j]) * (x[j] - exact[j]);
        ck_assert_double_le(sqrt(error), result.error_bound * result.norm * (1 + 1e-9) + 1e-13);
    }
    owned_operator_clear(&op);
}

/* A band of `width` around the diagonal of an m x n matrix. */
static lw_sparse *band(int64_t m, int64_t n, int width, uint64_t *state)
{
    size_t count = (size_t)(m * width);
    int32_t *row = lw_alloc(count, sizeof *row), *column = lw_alloc(count, sizeof *column);
    double *value = lw_alloc(count, sizeof *value);
    int64_t repeated, k = 0;
    for (int64_t i = 0; i < m; i++)
        for (int j = 0; j < width; j++, k++) {
            row[k] = (int32_t)i;
            column[k] = (int32_t)((i * n / m + (int64_t)j * j * 7) % n);
            value[k] = next_random(state);
        }
    lw_sparse *A = NULL;
    ck_assert_int_eq(lw_sparse_from_triplets(m, n, k, row, column, value, NULL, 1, &A, &repeated, NULL),
                     LW_OK);
    lw_free(row);
    lw_free(column);
    lw_free(value);
    return A;
}

void kernel_ignores_threads(lw_iterate *kernel)
{
    enum { LONG = 50000, SHORT = 40000 };
    static double b[LONG], first[LONG], x[LONG];
    for (int wide = 0; wide < 2; wide++) {
        int64_t m = wide ? SHORT : LONG, n = wide ? LONG : SHORT;
        uint64_t state = 3;
        lw_sparse *A = band(m, n, 8, &state);
        fill(m, b, &state);
        for (int threads = 1; threads <= 4; threads++) {
            lw_team *team = NULL;
            lw_operator *op = NULL;
            ck_assert_int_eq(lw_team_new(threads, &team, NULL), LW_OK);
            lw_product_options product = {.team = team};
            ck_assert_int_eq(lw_product_new(A, &product, &op, NULL), LW_OK);
            lw_iterate_options options = {.damp = 0.5, .steps = 12};
            lw_iterate_result result;
            ck_assert_int_ge(kernel(op, b, &options, threads == 1 ? first : x, &result, NULL), 0);
            if (threads > 1) ck_assert_mem_eq(first, x, (size_t)n * sizeof(double));
            lw_operator_free(op);
            lw_team_free(team);
        }
        lw_sparse_free(A);
    }
}
