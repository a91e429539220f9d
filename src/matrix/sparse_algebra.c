/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Sums, stacks and the Gram matrix of sparse matrices. */
#include "matrix/sparse.h"

#include "core/memory.h"

#include <math.h>

/* alpha (value + low) as value and remainder: p = alpha v, e = fma(alpha, v, -p) + alpha low. */
static void scaled_entry(double alpha, const lw_sparse *A, int64_t p, double *value, double *low)
{
    *value = alpha * A->value[p];
    *low = fma(alpha, A->value[p], -*value) + (A->low ? alpha * A->low[p] : 0);
}

static void put(lw_sparse *C, int64_t place, int64_t row, double value, double low)
{
    C->index[place] = (int32_t)row;
    C->value[place] = value;
    if (C->low) C->low[place] = low;
}

lw_status lw_sparse_stack(double alpha, const lw_sparse *A, double beta, const lw_sparse *B, lw_sparse **out,
                          lw_error *error)
{
    *out = NULL;
    if (A->columns != B->columns)
        return lw_fail(error, LW_BAD_SHAPE, "stacking matrices of different widths");
    lw_sparse *C;
    lw_status status =
        lw_sparse_new(A->rows + B->rows, A->columns, lw_sparse_nonzeros(A) + lw_sparse_nonzeros(B),
                      A->low || B->low, &C, error);
    if (status) return status;
    int64_t place = 0;
    double value, low;
    for (int64_t j = 0; j < A->columns; j++) {
        for (int64_t p = A->start[j]; p < A->start[j + 1]; p++) {
            scaled_entry(alpha, A, p, &value, &low);
            put(C, place++, A->index[p], value, low);
        }
        for (int64_t p = B->start[j]; p < B->start[j + 1]; p++) {
            scaled_entry(beta, B, p, &value, &low);
            put(C, place++, A->rows + B->index[p], value, low);
        }
        C->start[j + 1] = place;
    }
    *out = C;
    return LW_OK;
}

static int64_t count_union(const lw_sparse *A, const lw_sparse *B)
{
    int64_t count = 0;
    for (int64_t j = 0; j < A->columns; j++) {
        int64_t p = A->start[j], q = B->start[j];
        for (; p < A->start[j + 1] && q < B->start[j + 1]; count++) {
            int32_t a = A->index[p], b = B->index[q];
            p += a <= b;
            q += b <= a;
        }
        count += A->start[j + 1] - p + B->start[j + 1] - q;
    }
    return count;
}

lw_status lw_sparse_add(double alpha, const lw_sparse *A, double beta, const lw_sparse *B, lw_sparse **out,
                        lw_error *error)
{
    *out = NULL;
    if (A->columns != B->columns || A->rows != B->rows)
        return lw_fail(error, LW_BAD_SHAPE, "adding matrices of different shapes");
    lw_sparse *C;
    lw_status status = lw_sparse_new(A->rows, A->columns, count_union(A, B), A->low || B->low, &C, error);
    if (status) return status;
    int64_t place = 0;
    for (int64_t j = 0; j < A->columns; j++) {
        int64_t p = A->start[j], q = B->start[j];
        while (p < A->start[j + 1] || q < B->start[j + 1]) {
            int64_t a = p < A->start[j + 1] ? A->index[p] : INT64_MAX,
                    b = q < B->start[j + 1] ? B->index[q] : INT64_MAX;
            double value = 0, low = 0, other = 0, other_low = 0;
            if (a <= b) scaled_entry(alpha, A, p++, &value, &low);
            if (b <= a) scaled_entry(beta, B, q++, &other, &other_low);
            double sum = value + other, back = sum - value;
            low += ((value - (sum - back)) + (other - back)) + other_low;
            put(C, place++, a < b ? a : b, sum, low);
        }
        C->start[j + 1] = place;
    }
    *out = C;
    return LW_OK;
}

typedef struct gram_state {
    const lw_sparse *A, *T; /* T = A' */
    const double *row_weight;
    int64_t *next;  /* rows: the first entry of column i of T that is not left of the current column */
    int32_t *stamp; /* columns: the column of C that last met this row */
    double *sum;    /* columns */
} gram_state;

/* Number of entries of the lower triangle of A'A. */
static int64_t count_gram(const gram_state *g)
{
    int64_t count = 0;
    for (int64_t i = 0; i < g->A->rows; i++) g->next[i] = g->T->start[i];
    for (int64_t j = 0; j < g->A->columns; j++) g->stamp[j] = -1;
    for (int64_t j = 0; j < g->A->columns; j++) {
        count += g->stamp[j] != (int32_t)j;
        g->stamp[j] = (int32_t)j;
        for (int64_t p = g->A->start[j]; p < g->A->start[j + 1]; p++) {
            int64_t i = g->A->index[p];
            for (int64_t q = g->next[i]++; q < g->T->start[i + 1]; q++) {
                count += g->stamp[g->T->index[q]] != (int32_t)j;
                g->stamp[g->T->index[q]] = (int32_t)j;
            }
        }
    }
    return count;
}

/* Column j of the lower triangle: C_lj = sum_i a_ij w_i a_il, l >= j, in the order the rows l are met. */
static void fill_gram(const gram_state *g, lw_sparse *C)
{
    int64_t place = 0;
    for (int64_t i = 0; i < g->A->rows; i++) g->next[i] = g->T->start[i];
    for (int64_t j = 0; j < g->A->columns; j++) g->stamp[j] = -1;
    for (int64_t j = 0; j < g->A->columns; j++) {
        C->index[place++] = (int32_t)j;
        g->stamp[j] = (int32_t)j;
        g->sum[j] = 0;
        for (int64_t p = g->A->start[j]; p < g->A->start[j + 1]; p++) {
            int64_t i = g->A->index[p];
            double a = g->row_weight ? g->A->value[p] * g->row_weight[i] : g->A->value[p];
            for (int64_t q = g->next[i]++; q < g->T->start[i + 1]; q++) {
                int32_t l = g->T->index[q];
                if (g->stamp[l] != (int32_t)j) {
                    g->stamp[l] = (int32_t)j;
                    g->sum[l] = 0;
                    C->index[place++] = l;
                }
                g->sum[l] += a * g->T->value[q];
            }
        }
        for (int64_t p = C->start[j]; p < place; p++) C->value[p] = g->sum[C->index[p]];
        C->start[j + 1] = place;
    }
}

/* The lower triangle is formed column by column, unsorted; its transpose is the upper triangle, sorted. */
lw_status lw_sparse_gram(const lw_sparse *A, const double *row_weight, lw_sparse **out, lw_error *error)
{
    *out = NULL;
    lw_sparse *T = NULL, *C = NULL;
    lw_status status = lw_sparse_transpose(A, &T, error);
    if (status) return status;
    gram_state g = {A,
                    T,
                    row_weight,
                    LW_NEW_ARRAY(int64_t, A->rows),
                    LW_NEW_ARRAY(int32_t, A->columns),
                    LW_NEW_ARRAY(double, A->columns)};
    if (!g.next || !g.stamp || !g.sum)
        status = lw_fail_memory(error, "the normal matrix", (size_t)A->rows * 8 + (size_t)A->columns * 12);
    else
        status = lw_sparse_new(A->columns, A->columns, count_gram(&g), 0, &C, error);
    if (!status) {
        fill_gram(&g, C);
        status = lw_sparse_transpose(C, out, error);
    }
    lw_free(g.next);
    lw_free(g.stamp);
    lw_free(g.sum);
    lw_sparse_free(T);
    lw_sparse_free(C);
    return status;
}

#define BYTES_A_PLACE 24 /* the lower triangle and its transpose at once */

/* Entries of the lower triangle of A'A at most: those of a full one, or sum_i l_i (l_i + 1) / 2 with row
 * lengths l_i. */
static double most_entries(const lw_sparse *A, const lw_sparse *T)
{
    double n = (double)A->columns, full = n * (n + 1) / 2, sum = n;
    for (int64_t i = 0; i < T->columns; i++) {
        double length = (double)(T->start[i + 1] - T->start[i]);
        sum += length * (length + 1) / 2;
    }
    return sum < full ? sum : full;
}

lw_status lw_sparse_gram_fits(const lw_sparse *A, const lw_watch *watch, const char *advice, lw_error *error)
{
    lw_sparse *T = NULL;
    lw_status status = lw_sparse_transpose(A, &T, error);
    if (status) return status;
    if (most_entries(A, T) * BYTES_A_PLACE > (double)lw_watch_memory(watch)) {
        gram_state g = {A, T, NULL, LW_NEW_ARRAY(int64_t, A->rows), LW_NEW_ARRAY(int32_t, A->columns), NULL};
        if (!g.next || !g.stamp)
            status = lw_fail_memory(error, "the normal matrix", (size_t)A->rows * 8 + (size_t)A->columns * 4);
        else
            status = lw_watch_budget(watch, lw_bytes(count_gram(&g), BYTES_A_PLACE), "the normal matrix",
                                     advice, error);
        lw_free(g.next);
        lw_free(g.stamp);
    }
    lw_sparse_free(T);
    return status;
}
