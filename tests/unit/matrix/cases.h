/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Matrices and comparisons that the suites of this layer share. */
#ifndef LW_TESTS_MATRIX_CASES_H
#define LW_TESTS_MATRIX_CASES_H

#include "core/memory.h"
#include "matrix/sparse.h"

#include <check.h>
#include <math.h>
#include <stdint.h>

/* A fixed sequence in (-1, 1). */
static inline double next_number(uint64_t *state)
{
    *state ^= *state << 13;
    *state ^= *state >> 7;
    *state ^= *state << 17;
    return (double)(*state >> 11) / 4503599627370496.0 - 1.0;
}

static inline double *random_vector(int64_t n, uint64_t seed)
{
    double *x = LW_NEW_ARRAY(double, n);
    ck_assert_ptr_nonnull(x);
    for (int64_t i = 0; i < n; i++) x[i] = next_number(&seed);
    return x;
}

/* Entries are kept with this probability; run: runs of that many adjacent columns share a pattern. */
static inline lw_sparse *random_matrix(int64_t rows, int64_t columns, double density, int64_t run,
                                       uint64_t seed)
{
    uint64_t pattern = 0;
    lw_sparse *A;
    ck_assert_int_eq(lw_sparse_new(rows, columns, rows * columns, 0, &A, NULL), LW_OK);
    int64_t p = 0;
    for (int64_t j = 0; j < columns; j++) {
        if (j % run == 0) pattern = seed * 1000003 + (uint64_t)j + 77;
        uint64_t walk = pattern;
        for (int i = 0; i < 8; i++) next_number(&walk);
        for (int64_t i = 0; i < rows; i++) {
            if (next_number(&walk) > 2 * density - 1) continue;
            A->index[p] = (int32_t)i;
            A->value[p++] = next_number(&seed);
        }
        A->start[j + 1] = p;
    }
    return A;
}

/* Largest |x - y| over largest |y|. */
static inline double difference(int64_t n, const double *x, const double *y)
{
    double most = 0, scale = 1e-300;
    for (int64_t i = 0; i < n; i++) {
        if (!(fabs(x[i] - y[i]) <= most)) most = fabs(x[i] - y[i]);
        scale = fmax(scale, fabs(y[i]));
    }
    return most / scale;
}

/* Gate: the allocation number `fail` from now on fails. */
typedef struct countdown {
    int fail, seen;
} countdown;

static inline bool count_down(void *state)
{
    countdown *c = state;
    return c->seen++ == c->fail;
}

#endif
