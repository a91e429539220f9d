/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Sparse matrices in compressed columns: making, transposing, plain products. */
#include "matrix/sparse.h"

#include "core/memory.h"

#include <math.h>
#include <stdint.h>
#include <string.h>
#include <sys/mman.h>
#include <unistd.h>

lw_status lw_sparse_new(int64_t rows, int64_t columns, int64_t nonzeros, int with_low, lw_sparse **out,
                        lw_error *error)
{
    *out = NULL;
    if (rows < 0 || columns < 0 || nonzeros < 0 || rows > INT32_MAX || columns > INT32_MAX)
        return lw_fail(error, LW_BAD_SHAPE,
                       "a sparse matrix of %lld x %lld with %lld nonzeros is out of range", (long long)rows,
                       (long long)columns, (long long)nonzeros);
    lw_sparse *A = LW_NEW(lw_sparse);
    if (A) {
        A->rows = rows;
        A->columns = columns;
        A->start = LW_NEW_ZEROS(int64_t, columns + 1);
        A->index = LW_NEW_ARRAY(int32_t, nonzeros);
        A->value = LW_NEW_ARRAY(double, nonzeros);
        A->low = with_low ? LW_NEW_ARRAY(double, nonzeros) : NULL;
    }
    if (!A || !A->start || !A->index || !A->value || (with_low && !A->low)) {
        lw_sparse_free(A);
        return lw_fail_memory(error, "a sparse matrix",
                              (size_t)lw_bytes(nonzeros, with_low ? 20 : 12) + (size_t)columns * 8);
    }
    *out = A;
    return LW_OK;
}

void lw_sparse_free(lw_sparse *A)
{
    if (!A) return;
    if (!A->mapped) {
        lw_free(A->start);
        lw_free(A->index);
        lw_free(A->value);
        lw_free(A->low);
    }
    lw_free(A);
}

/* The whole pages within [first, last). */
static void release_pages(const void *first, const void *last)
{
    uintptr_t page = (uintptr_t)sysconf(_SC_PAGESIZE), from = ((uintptr_t)first + page - 1) / page * page,
              to = (uintptr_t)last / page * page;
    if (to > from)
        (void)madvise((char *)(uintptr_t)first + (from - (uintptr_t)first), to - from, MADV_DONTNEED);
}

void lw_sparse_release(const lw_sparse *A, int64_t from, int64_t to)
{
    if (!A->mapped) return;
    release_pages(A->index + A->start[from], A->index + A->start[to]);
    release_pages(A->value + A->start[from], A->value + A->start[to]);
    if (A->low) release_pages(A->low + A->start[from], A->low + A->start[to]);
}

/* start[i + 1] holds the number of entries of line i: makes it their running sum, and next a copy to count
 * up. */
static void sum_starts(int64_t lines, int64_t *start, int64_t *next)
{
    for (int64_t i = 0; i < lines; i++) {
        next[i] = start[i];
        start[i + 1] += start[i];
    }
}

lw_status lw_sparse_transpose(const lw_sparse *A, lw_sparse **out, lw_error *error)
{
    int64_t nonzeros = lw_sparse_nonzeros(A);
    lw_sparse *T;
    lw_status status = lw_sparse_new(A->columns, A->rows, nonzeros, A->low != NULL, &T, error);
    *out = NULL;
    if (status) return status;
    int64_t *next = LW_NEW_ARRAY(int64_t, A->rows);
    if (!next) {
        lw_sparse_free(T);
        return lw_fail_memory(error, "transposing a matrix", (size_t)A->rows * 8);
    }
    for (int64_t p = 0; p < nonzeros; p++) T->start[A->index[p] + 1]++;
    sum_starts(A->rows, T->start, next);
    for (int64_t j = 0; j < A->columns; j++) {
        for (int64_t p = A->start[j]; p < A->start[j + 1]; p++) {
            int64_t q = next[A->index[p]]++;
            T->index[q] = (int32_t)j;
            T->value[q] = A->value[p];
            if (A->low) T->low[q] = A->low[p];
        }
    }
    lw_free(next);
    *out = T;
    return LW_OK;
}

void lw_sparse_apply(const lw_sparse *A, int k, const double *x, double *y)
{
    for (int c = 0; c < k; c++) {
        const double *xc = x + c * A->columns;
        double *yc = y + c * A->rows;
        for (int64_t i = 0; i < A->rows; i++) yc[i] = 0;
        for (int64_t j = 0; j < A->columns; j++)
            for (int64_t p = A->start[j]; p < A->start[j + 1]; p++) yc[A->index[p]] += A->value[p] * xc[j];
    }
}

void lw_sparse_apply_transposed(const lw_sparse *A, int k, const double *y, double *x)
{
    for (int c = 0; c < k; c++) {
        for (int64_t j = 0; j < A->columns; j++) {
            double sum = 0;
            for (int64_t p = A->start[j]; p < A->start[j + 1]; p++)
                sum += A->value[p] * y[c * A->rows + A->index[p]];
            x[c * A->columns + j] = sum;
        }
    }
}

/* ||x|| where the plain sum of squares would overflow or underflow. */
static double careful_norm(int64_t n, const double *x)
{
    double most = 0, sum = 0;
    for (int64_t i = 0; i < n; i++) most = fmax(most, fabs(x[i]));
    if (!(most > 0) || isinf(most)) return most;
    int exponent;
    frexp(most, &exponent);
    for (int64_t i = 0; i < n; i++) {
        double v = ldexp(x[i], -exponent);
        sum += v * v;
    }
    return ldexp(sqrt(sum), exponent);
}

void lw_sparse_column_norms(const lw_sparse *A, double *norm)
{
    for (int64_t j = 0; j < A->columns; j++) {
        double sum = 0;
        for (int64_t p = A->start[j]; p < A->start[j + 1]; p++) sum += A->value[p] * A->value[p];
        int safe = (sum > 1e-270 && sum < 1e300) || isnan(sum);
        norm[j] = safe ? sqrt(sum) : careful_norm(A->start[j + 1] - A->start[j], A->value + A->start[j]);
    }
}

void lw_sparse_to_dense(const lw_sparse *A, double *dense)
{
    for (int64_t i = 0; i < A->rows * A->columns; i++) dense[i] = 0;
    for (int64_t j = 0; j < A->columns; j++)
        for (int64_t p = A->start[j]; p < A->start[j + 1]; p++)
            dense[j * A->rows + A->index[p]] += A->value[p];
}
