/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "problem/proportional.h"

#include "core/memory.h"

#include <float.h>
#include <math.h>
#include <stdlib.h>
#include <string.h>

#define KEPT_BITS 24  /* of a ratio, for the hash: rounding of the ratio hardly ever reaches the 24th bit */
#define MOST_KINDS 16 /* different vectors with one hash that are compared with; more are forged */

typedef struct key {
    uint64_t hash;
    int64_t vector;
} key;

/* Finalizer of splitmix64 (Steele, Lea & Flood, OOPSLA 2014). */
static uint64_t mix(uint64_t z)
{
    z = (z ^ (z >> 30)) * UINT64_C(0xbf58476d1ce4e5b9);
    z = (z ^ (z >> 27)) * UINT64_C(0x94d049bb133111eb);
    return z ^ (z >> 31);
}

/* What entry `index` adds to the hash of its vector; sums do not depend on order. The ratio is rounded to
 * KEPT_BITS on its bits as they stand: a carry out of the fraction moves the exponent up, as it should. */
static uint64_t entry_hash(int64_t index, double ratio)
{
    uint64_t bits;
    memcpy(&bits, &ratio, sizeof bits);
    uint64_t dropped = DBL_MANT_DIG - KEPT_BITS, sign = bits >> 63, size = bits & (UINT64_MAX >> 1);
    uint64_t kept = (size + (UINT64_C(1) << (dropped - 1))) >> dropped;
    return mix(mix((uint64_t)index + 1) + (2 * kept + sign) * UINT64_C(0x9e3779b97f4a7c15));
}

static int compare_keys(const void *a, const void *b)
{
    const key *x = a, *y = b;
    if (x->hash != y->hash) return x->hash < y->hash ? -1 : 1;
    return x->vector < y->vector ? -1 : x->vector > y->vector;
}

/* Next entry that is not 0, from p on. */
static int64_t step(const lw_sparse *A, int64_t p, int64_t end)
{
    while (p < end && A->value[p] == 0.0) p++;
    return p;
}

/* a_i / a_1 = b_i / b_1 for all i, to a few units of rounding. */
static bool proportional(const lw_sparse *A, int64_t a, int64_t b)
{
    int64_t pe = A->start[a + 1], qe = A->start[b + 1], p = step(A, A->start[a], pe),
            q = step(A, A->start[b], qe);
    if (p == pe || q == qe) return false;
    double first_a = A->value[p], first_b = A->value[q];
    while (p < pe && q < qe) {
        double x = A->value[p] / first_a, y = A->value[q] / first_b;
        if (A->index[p] != A->index[q] || !(fabs(x - y) <= 4.0 * DBL_EPSILON * fabs(x))) return false;
        p = step(A, p + 1, pe);
        q = step(A, q + 1, qe);
    }
    return p == pe && q == qe;
}

/* Vectors of one hash, in order: pairs each with the first kind that it equals. */
static void match_run(const lw_sparse *A, const key *keys, int64_t count, int64_t *partner)
{
    int64_t kind[MOST_KINDS];
    int kinds = 0;
    for (int64_t k = 0; k < count; k++) {
        int at = 0;
        while (at < kinds && !proportional(A, kind[at], keys[k].vector)) at++;
        if (at < kinds)
            partner[keys[k].vector] = kind[at];
        else if (kinds < MOST_KINDS)
            kind[kinds++] = keys[k].vector;
    }
}

static int64_t run_of(const key *keys, int64_t from, int64_t count)
{
    int64_t to = from + 1;
    while (to < count && keys[to].hash == keys[from].hash) to++;
    return to;
}

/* keys sorted by hash; partner (vectors) -1 or the first vector of that kind. name: number of a vector, NULL:
 * itself. */
static lw_status collect(const lw_sparse *A, const key *keys, int64_t count, const int64_t *name,
                         int64_t **pairs, int64_t *found, lw_error *error)
{
    int64_t *partner = LW_NEW_ARRAY(int64_t, A->columns), n = 0;
    if (partner == NULL) return lw_fail_memory(error, "duplicates", (size_t)A->columns * 8);
    for (int64_t j = 0; j < A->columns; j++) partner[j] = -1;
    for (int64_t k = 0, to; k < count; k = to) {
        to = run_of(keys, k, count);
        if (to - k > 1) match_run(A, keys + k, to - k, partner);
    }
    for (int64_t j = 0; j < A->columns; j++) n += partner[j] >= 0;
    *pairs = LW_NEW_ARRAY(int64_t, 2 * n);
    if (*pairs == NULL) {
        lw_free(partner);
        return lw_fail_memory(error, "duplicates", (size_t)n * 16);
    }
    for (int64_t j = 0; j < A->columns; j++) {
        if (partner[j] < 0) continue;
        (*pairs)[2 * *found] = name != NULL ? name[partner[j]] : partner[j];
        (*pairs)[2 * (*found)++ + 1] = name != NULL ? name[j] : j;
    }
    lw_free(partner);
    return LW_OK;
}

lw_status lw_proportional_columns(const lw_sparse *A, const bool *skip, int64_t **pairs, int64_t *count,
                                  lw_error *error)
{
    *pairs = NULL;
    *count = 0;
    key *keys = LW_NEW_ARRAY(key, A->columns);
    if (keys == NULL) return lw_fail_memory(error, "duplicates", (size_t)A->columns * sizeof(key));
    int64_t n = 0;
    for (int64_t j = 0; j < A->columns; j++) {
        int64_t end = A->start[j + 1], p = step(A, A->start[j], end);
        if (p == end || (skip != NULL && skip[j])) continue;
        double first = A->value[p];
        keys[n] = (key){0, j};
        for (; p < end; p = step(A, p + 1, end)) keys[n].hash += entry_hash(A->index[p], A->value[p] / first);
        n++;
    }
    if (n > 1) qsort(keys, (size_t)n, sizeof(key), compare_keys);
    lw_status status = collect(A, keys, n, NULL, pairs, count, error);
    lw_free(keys);
    return status;
}

/* Hashes of all rows; first: a row's first nonzero coefficient, 0 for an empty row. */
static void hash_rows(const lw_sparse *A, double *first, key *keys)
{
    for (int64_t i = 0; i < A->rows; i++) {
        first[i] = 0.0;
        keys[i] = (key){0, i};
    }
    for (int64_t j = 0; j < A->columns; j++)
        for (int64_t p = A->start[j]; p < A->start[j + 1]; p++) {
            int32_t i = A->index[p];
            if (A->value[p] == 0.0) continue;
            if (first[i] == 0.0) first[i] = A->value[p];
            keys[i].hash += entry_hash(j, A->value[p] / first[i]);
        }
}

/* Keeps the keys of nonempty rows that share their hash with another; returns how many. */
static int64_t keep_candidates(const double *first, key *keys, int64_t rows)
{
    int64_t n = 0, kept = 0;
    for (int64_t i = 0; i < rows; i++)
        if (first[keys[i].vector] != 0.0) keys[n++] = keys[i];
    if (n > 1) qsort(keys, (size_t)n, sizeof(key), compare_keys);
    for (int64_t k = 0, to; k < n; k = to) {
        to = run_of(keys, k, n);
        for (int64_t q = k; to - k > 1 && q < to; q++) keys[kept++] = keys[q];
    }
    return kept;
}

/* Candidate rows as columns of T; place[i]: column of row i, or -1. */
static lw_status gather(const lw_sparse *A, const int64_t *place, int64_t count, lw_sparse **T,
                        lw_error *error)
{
    int64_t *next = LW_NEW_ZEROS(int64_t, count + 1), nonzeros = lw_sparse_nonzeros(A);
    if (next == NULL) return lw_fail_memory(error, "duplicates", (size_t)count * 8);
    for (int64_t p = 0; p < nonzeros; p++)
        if (place[A->index[p]] >= 0) next[place[A->index[p]] + 1]++;
    for (int64_t k = 0; k < count; k++) next[k + 1] += next[k];
    lw_status status = lw_sparse_new(A->columns, count, next[count], 0, T, error);
    for (int64_t k = 0; k <= count && status == LW_OK; k++) (*T)->start[k] = next[k];
    for (int64_t j = 0; j < A->columns && status == LW_OK; j++)
        for (int64_t p = A->start[j]; p < A->start[j + 1]; p++) {
            int64_t k = place[A->index[p]];
            if (k < 0) continue;
            (*T)->index[next[k]] = (int32_t)j;
            (*T)->value[next[k]++] = A->value[p];
        }
    lw_free(next);
    return status;
}

static int compare_vectors(const void *a, const void *b)
{
    const key *x = a, *y = b;
    return x->vector < y->vector ? -1 : x->vector > y->vector;
}

/* Compares the `count` candidate rows entry by entry. place and name are work space of the rows. */
static lw_status match_rows(const lw_sparse *A, key *keys, int64_t count, int64_t *place, int64_t *name,
                            int64_t **pairs, int64_t *found, lw_error *error)
{
    lw_sparse *T = NULL;
    for (int64_t i = 0; i < A->rows; i++) place[i] = -1;
    qsort(keys, (size_t)count, sizeof(key), compare_vectors);
    for (int64_t k = 0; k < count; k++) {
        place[keys[k].vector] = k;
        name[k] = keys[k].vector;
        keys[k].vector = k;
    }
    lw_status status = gather(A, place, count, &T, error);
    qsort(keys, (size_t)count, sizeof(key), compare_keys);
    if (status == LW_OK) status = collect(T, keys, count, name, pairs, found, error);
    lw_sparse_free(T);
    return status;
}

lw_status lw_proportional_rows(const lw_sparse *A, int64_t **pairs, int64_t *count, lw_error *error)
{
    int64_t *place = LW_NEW_ARRAY(int64_t, A->rows), *name = LW_NEW_ARRAY(int64_t, A->rows);
    double *first = LW_NEW_ARRAY(double, A->rows);
    key *keys = LW_NEW_ARRAY(key, A->rows);
    lw_status status = LW_OK;
    *pairs = NULL;
    *count = 0;
    if (!place || !name || !first || !keys) {
        status = lw_fail_memory(error, "duplicates", (size_t)A->rows * 40);
    } else {
        hash_rows(A, first, keys);
        int64_t candidates = keep_candidates(first, keys, A->rows);
        if (candidates > 1) status = match_rows(A, keys, candidates, place, name, pairs, count, error);
    }
    lw_free(place);
    lw_free(name);
    lw_free(first);
    lw_free(keys);
    return status;
}
