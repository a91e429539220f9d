/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Sparse Cholesky, supernodal. Source: Chen, Davis, Hager & Rajamanickam, ACM TOMS 35(3):22, 2008. */
#include "matrix/suitesparse.h"

#include "core/memory.h"
#include "matrix/suitesparse_library.h"

#include <math.h>
#include <string.h>

/* Flops per nonzero of N (upper triangle) above which nested dissection is tried. Its own cost grows with N,
 * what it can save with the flops of minimum degree: measured even at 2e5 unknowns of a plane network, a gain
 * beyond. */
#define DISSECTION_FLOPS 25000.0
/* Right-hand sides solved at a time. */
#define SIDES 32

struct lw_cholesky {
    cholmod_common common;
    int started;
    int64_t n, nonzeros;
    SuiteSparse_long *index; /* of N */
    cholmod_factor *L;
    cholmod_dense *X, *Y, *E; /* workspaces that the solves keep */
    double *permuted;         /* n x permuted_sides */
    int64_t permuted_sides;
    int64_t bytes;
};

static lw_status analyse_by(lw_cholesky *f, cholmod_sparse *N, int ordering, cholmod_factor **out,
                            lw_error *error)
{
    f->common.nmethods = 1;
    f->common.method[0].ordering = ordering;
    f->common.postorder = 1;
    f->common.supernodal = CHOLMOD_SUPERNODAL;
    f->common.final_ll = 1;
    f->common.quick_return_if_not_posdef = 1;
    *out = cholmod_l_analyze(N, &f->common);
    lw_status status = lw_library_outcome(&f->common, "ordering the normal matrix", error);
    if (status) cholmod_l_free_factor(out, &f->common);
    return status;
}

/* Minimum degree, and nested dissection where much work is ahead; the one with fewer flops. */
static lw_status choose_ordering(lw_cholesky *f, cholmod_sparse *N, lw_cholesky_size *size, lw_error *error)
{
    lw_status status = analyse_by(f, N, CHOLMOD_AMD, &f->L, error);
    if (status) return status;
    *size = (lw_cholesky_size){(int64_t)f->common.lnz, f->common.fl, 0, "minimum degree"};
    if (f->common.fl <= DISSECTION_FLOPS * (double)f->nonzeros) return LW_OK;
    cholmod_factor *other;
    status = analyse_by(f, N, CHOLMOD_METIS, &other, error);
    if (status) return status;
    if (f->common.fl < size->flops) {
        *size = (lw_cholesky_size){(int64_t)f->common.lnz, f->common.fl, 0, "nested dissection"};
        cholmod_l_free_factor(&f->L, &f->common);
        f->L = other;
    } else {
        cholmod_l_free_factor(&other, &f->common);
    }
    return LW_OK;
}

/* Factor values and indices, the largest update block, two permuted copies of N, and integers by column. */
static int64_t peak_bytes(const lw_cholesky *f)
{
    const cholmod_factor *L = f->L;
    return 8 * (int64_t)(L->xsize + L->ssize + L->maxcsize) + 32 * f->nonzeros + 160 * f->n;
}

lw_status lw_cholesky_analyse(const lw_sparse *N, const lw_watch *watch, lw_cholesky **out,
                              lw_cholesky_size *size, lw_error *error)
{
    lw_cholesky_size found;
    *out = NULL;
    if (N->rows != N->columns)
        return lw_fail(error, LW_BAD_SHAPE, "a matrix that is not square has no Cholesky factor");
    lw_cholesky *f = LW_NEW(lw_cholesky);
    if (!f) return lw_fail_memory(error, "the factor", sizeof *f);
    f->n = N->columns;
    f->nonzeros = lw_sparse_nonzeros(N);
    lw_watch_tick(watch, "ordering", 0, 0, "");
    lw_status status = lw_library_start(&f->common, error);
    f->started = !status;
    if (!status) status = lw_library_index(N, &f->index, error);
    if (!status) {
        cholmod_sparse matrix = lw_library_matrix(N, f->index, 1);
        status = choose_ordering(f, &matrix, &found, error);
    }
    if (status) {
        lw_cholesky_free(f);
        return status;
    }
    f->bytes = found.bytes = peak_bytes(f);
    if (size) *size = found;
    *out = f;
    return LW_OK;
}

lw_status lw_cholesky_factorize(lw_cholesky *factor, const lw_sparse *N, const lw_watch *watch,
                                int64_t *defect, lw_error *error)
{
    if (defect) *defect = -1;
    if (N->columns != factor->n || lw_sparse_nonzeros(N) != factor->nonzeros)
        return lw_fail(error, LW_BAD_SHAPE, "the matrix has another pattern than the analysed one");
    if (lw_watch_cancelled(watch)) return lw_fail(error, LW_INTERRUPTED, "interrupted");
    lw_status status =
        lw_watch_budget(watch, factor->bytes, "the sparse factor", "an iterative engine takes less", error);
    if (status) return status;
    lw_watch_tick(watch, "factorizing", 0, 0, "");
    cholmod_sparse matrix = lw_library_matrix(N, factor->index, 1);
    cholmod_l_factorize(&matrix, factor->L, &factor->common);
    status = lw_library_outcome(&factor->common, "the sparse factorization", error);
    if (status) return status;
    if (factor->L->minor >= factor->L->n) return LW_OK;
    int64_t column = ((const SuiteSparse_long *)factor->L->Perm)[factor->L->minor];
    if (defect) *defect = column;
    return lw_fail(error, LW_UNSOLVABLE, "the matrix is not positive definite at column %lld",
                   (long long)column + 1);
}

void lw_cholesky_free(lw_cholesky *factor)
{
    if (!factor) return;
    if (factor->started) {
        cholmod_l_free_factor(&factor->L, &factor->common);
        cholmod_l_free_dense(&factor->X, &factor->common);
        cholmod_l_free_dense(&factor->Y, &factor->common);
        cholmod_l_free_dense(&factor->E, &factor->common);
        cholmod_l_finish(&factor->common);
    }
    lw_free(factor->permuted);
    lw_free(factor->index);
    lw_free(factor);
}

static int is_factorized(const lw_cholesky *f)
{
    return f->L->xtype == CHOLMOD_REAL && f->L->is_super && f->L->minor >= f->L->n;
}

/* The workspaces are taken here: the library does not survive that one of them fails within a solve. */
static lw_status take_workspaces(lw_cholesky *f, int64_t k, lw_error *error)
{
    size_t n = (size_t)f->n, below = f->L->maxesize > 0 ? f->L->maxesize : 1, sides = (size_t)k;
    if (cholmod_l_ensure_dense(&f->X, n, sides, n, CHOLMOD_REAL, &f->common) &&
        cholmod_l_ensure_dense(&f->Y, n, sides, n, CHOLMOD_REAL, &f->common) &&
        cholmod_l_ensure_dense(&f->E, below, sides, below, CHOLMOD_REAL, &f->common))
        return LW_OK;
    return lw_fail_memory(error, "solving with the sparse factor", (2 * n + below) * sides * sizeof(double));
}

/* factor->X <- solution of `system` for k columns b. */
static lw_status solve_system(lw_cholesky *f, int system, int64_t k, double *b, lw_error *error)
{
    if (!is_factorized(f)) return lw_fail(error, LW_BAD_SHAPE, "there is no factor to solve with");
    cholmod_dense sides = {.nrow = (size_t)f->n,
                           .ncol = (size_t)k,
                           .nzmax = (size_t)(f->n * k),
                           .d = (size_t)f->n,
                           .x = b,
                           .xtype = CHOLMOD_REAL,
                           .dtype = CHOLMOD_DOUBLE};
    lw_status status = take_workspaces(f, k, error);
    if (status) return status;
    cholmod_l_solve2(system, f->L, &sides, NULL, &f->X, NULL, &f->Y, &f->E, &f->common);
    return lw_library_outcome(&f->common, "solving with the sparse factor", error);
}

lw_status lw_cholesky_solve(lw_cholesky *factor, int64_t k, double *x, lw_error *error)
{
    for (int64_t c = 0; c < k; c += SIDES) {
        int64_t now = k - c < SIDES ? k - c : SIDES;
        double *side = x + c * factor->n;
        lw_status status = solve_system(factor, CHOLMOD_A, now, side, error);
        if (status) return status;
        memcpy(side, factor->X->x, (size_t)(factor->n * now) * sizeof(double));
    }
    return LW_OK;
}

static lw_status take_permuted(lw_cholesky *f, int64_t k, lw_error *error)
{
    if (k <= f->permuted_sides) return LW_OK;
    double *grown = LW_NEW_ARRAY(double, lw_bytes(f->n, k));
    if (!grown) return lw_fail_memory(error, "right-hand sides", (size_t)lw_bytes(f->n, k) * sizeof(double));
    lw_free(f->permuted);
    f->permuted = grown;
    f->permuted_sides = k;
    return LW_OK;
}

/* out_i <- in_perm(i), or out_perm(i) <- in_i when back. */
static void permute(const lw_cholesky *f, int64_t k, int back, const double *in, double *out)
{
    const SuiteSparse_long *order = f->L->Perm;
    for (int64_t c = 0; c < k; c++, in += f->n, out += f->n)
        for (int64_t i = 0; i < f->n; i++) {
            if (back)
                out[order[i]] = in[i];
            else
                out[i] = in[order[i]];
        }
}

lw_status lw_cholesky_half_solve(lw_cholesky *factor, int half, int64_t k, double *x, lw_error *error)
{
    for (int64_t c = 0; c < k; c += SIDES) {
        int64_t now = k - c < SIDES ? k - c : SIDES;
        double *side = x + c * factor->n, *from = side;
        lw_status status = half ? LW_OK : take_permuted(factor, now, error);
        if (status) return status;
        if (!half) {
            permute(factor, now, 0, side, factor->permuted);
            from = factor->permuted;
        }
        status = solve_system(factor, half ? CHOLMOD_Lt : CHOLMOD_L, now, from, error);
        if (status) return status;
        if (half)
            permute(factor, now, 1, factor->X->x, side);
        else
            memcpy(side, factor->X->x, (size_t)(factor->n * now) * sizeof(double));
    }
    return LW_OK;
}

/* y <- L x and, transposed, y <- L' x, column by column of the supernodes. */
static void multiply_factor(const lw_factor_view *v, int transposed, const double *x, double *y)
{
    for (int64_t i = 0; i < v->columns; i++) y[i] = 0;
    for (int64_t s = 0; s < v->supernodes; s++) {
        const int64_t *row = v->row + v->row_start[s];
        int64_t rows = v->row_start[s + 1] - v->row_start[s];
        for (int64_t j = v->first[s], c = 0; j < v->first[s + 1]; j++, c++) {
            const double *value = v->value + v->value_start[s] + c * rows;
            double sum = 0;
            for (int64_t i = c; i < rows; i++) {
                if (transposed)
                    sum += value[i] * x[row[i]];
                else
                    y[row[i]] += value[i] * x[j];
            }
            if (transposed) y[j] = sum;
        }
    }
}

lw_status lw_cholesky_half_multiply(lw_cholesky *factor, int half, int64_t k, double *x, lw_error *error)
{
    lw_factor_view view;
    lw_status status = lw_cholesky_view(factor, &view, error);
    if (!status) status = take_permuted(factor, 2, error);
    for (int64_t c = 0; !status && c < k; c++) {
        double *side = x + c * factor->n, *first = factor->permuted, *second = first + factor->n;
        if (half) {
            permute(factor, 1, 0, side, first);
            multiply_factor(&view, 1, first, side);
        } else {
            multiply_factor(&view, 0, side, second);
            permute(factor, 1, 1, second, side);
        }
    }
    return status;
}

double lw_cholesky_rcond(const lw_cholesky *factor)
{
    if (!is_factorized(factor)) return 0;
    const cholmod_factor *L = factor->L;
    const SuiteSparse_long *first = L->super, *row = L->pi, *at = L->px;
    double least = HUGE_VAL, most = 0;
    for (size_t s = 0; s < L->nsuper; s++)
        for (int64_t c = 0; c < first[s + 1] - first[s]; c++) {
            double d = ((const double *)L->x)[at[s] + c * (row[s + 1] - row[s]) + c];
            if (!(d > 0) || isinf(d)) return 0;
            least = fmin(least, d);
            most = fmax(most, d);
        }
    double ratio = L->n ? least / most : 1;
    return ratio * ratio;
}

lw_status lw_cholesky_view(lw_cholesky *factor, lw_factor_view *out, lw_error *error)
{
    *out = (lw_factor_view){0};
    if (!is_factorized(factor)) return lw_fail(error, LW_BAD_SHAPE, "there is no factor to look at");
    const cholmod_factor *L = factor->L;
    *out = (lw_factor_view){.columns = factor->n,
                            .supernodes = (int64_t)L->nsuper,
                            .first = L->super,
                            .row_start = L->pi,
                            .row = L->s,
                            .value_start = L->px,
                            .value = L->x,
                            .permutation = L->Perm};
    return LW_OK;
}
