/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "problem/triplets.h"

#include "core/decimal.h"
#include "core/memory.h"
#include "table/csv_read.h"

#include <stdlib.h>
#include <string.h>

#define FIRST_CHUNK (16 * LW_CSV_BATCH)
#define LARGEST_CHUNK (1 << 20)

typedef struct chunk {
    struct chunk *next;
    int count, room;
    lw_triplet_room at;
} chunk;

struct lw_triplets {
    chunk *first, *last;
    int64_t count;
    bool with_low;
    const lw_watch *watch;
};

lw_status lw_triplets_new(bool with_low, const lw_watch *watch, lw_triplets **out, lw_error *error)
{
    *out = LW_NEW(lw_triplets);
    if (*out == NULL) return lw_fail_memory(error, "the list of coefficients", sizeof(lw_triplets));
    (*out)->with_low = with_low;
    (*out)->watch = watch;
    return LW_OK;
}

static void free_chunk(chunk *c)
{
    if (c == NULL) return;
    lw_free(c->at.row);
    lw_free(c->at.column);
    lw_free(c->at.value);
    lw_free(c->at.low);
    lw_free(c);
}

static void free_chunks(lw_triplets *triplets)
{
    for (chunk *c = triplets->first, *next; c != NULL; c = next) {
        next = c->next;
        free_chunk(c);
    }
    triplets->first = triplets->last = NULL;
    triplets->count = 0;
}

void lw_triplets_free(lw_triplets *triplets)
{
    if (triplets == NULL) return;
    free_chunks(triplets);
    lw_free(triplets);
}

int64_t lw_triplets_count(const lw_triplets *triplets)
{
    return triplets->count;
}

static lw_status add_chunk(lw_triplets *triplets, lw_error *error)
{
    int room = triplets->last == NULL ? FIRST_CHUNK : triplets->last->room;
    if (triplets->last != NULL && room < LARGEST_CHUNK) room *= 2;
    int64_t each = triplets->with_low ? 44 : 28; /* the triplet, and its place in the matrix */
    lw_status status =
        lw_watch_budget(triplets->watch, lw_bytes(triplets->count + room, each), "reading the coefficients",
                        "an iterative engine keeps no low parts and needs less", error);
    if (status != LW_OK) return status;
    chunk *c = LW_NEW(chunk);
    if (c != NULL) {
        c->room = room;
        c->at.row = LW_NEW_ARRAY(int32_t, room);
        c->at.column = LW_NEW_ARRAY(int32_t, room);
        c->at.value = LW_NEW_ARRAY(double, room);
        if (triplets->with_low) c->at.low = LW_NEW_ARRAY(double, room);
    }
    if (c == NULL || !c->at.row || !c->at.column || !c->at.value || (triplets->with_low && !c->at.low)) {
        free_chunk(c);
        return lw_fail_memory(error, "the list of coefficients", (size_t)room * 24);
    }
    if (triplets->last != NULL)
        triplets->last->next = c;
    else
        triplets->first = c;
    triplets->last = c;
    return LW_OK;
}

lw_status lw_triplets_reserve(lw_triplets *triplets, int count, lw_triplet_room *room, lw_error *error)
{
    chunk *c = triplets->last;
    if (c == NULL || c->count + count > c->room) {
        lw_status status = add_chunk(triplets, error);
        if (status != LW_OK) return status;
        c = triplets->last;
    }
    *room = (lw_triplet_room){c->at.row + c->count, c->at.column + c->count, c->at.value + c->count,
                              c->at.low != NULL ? c->at.low + c->count : NULL};
    c->count += count;
    triplets->count += count;
    return LW_OK;
}

/* Entries of each column into start[column + 1]; whether any low part is not 0. */
static bool count_columns(const lw_triplets *triplets, int64_t *start)
{
    bool low = false;
    for (const chunk *c = triplets->first; c != NULL; c = c->next)
        for (int k = 0; k < c->count; k++) {
            if (c->at.row[k] < 0) continue;
            start[c->at.column[k] + 1]++;
            if (c->at.low != NULL && c->at.low[k] != 0.0) low = true;
        }
    return low;
}

static void scatter(const lw_triplets *triplets, int64_t *next, lw_sparse *A)
{
    for (const chunk *c = triplets->first; c != NULL; c = c->next)
        for (int k = 0; k < c->count; k++) {
            if (c->at.row[k] < 0) continue;
            int64_t p = next[c->at.column[k]]++;
            A->index[p] = c->at.row[k];
            A->value[p] = c->at.value[k];
            if (A->low != NULL) A->low[p] = c->at.low[k];
        }
}

static lw_status compress(const lw_triplets *triplets, int64_t rows, int64_t columns, lw_sparse **out,
                          lw_error *error)
{
    lw_status status = LW_OK;
    int64_t *next = LW_NEW_ZEROS(int64_t, columns + 1);
    if (next == NULL) return lw_fail_memory(error, "the design", (size_t)(columns + 1) * sizeof(int64_t));
    bool low = count_columns(triplets, next);
    for (int64_t j = 0; j < columns; j++) next[j + 1] += next[j];
    status = lw_sparse_new(rows, columns, next[columns], low, out, error);
    if (status == LW_OK) {
        memcpy((*out)->start, next, (size_t)(columns + 1) * sizeof(int64_t));
        scatter(triplets, next, *out);
    }
    lw_free(next);
    return status;
}

static bool sorted(const lw_sparse *A)
{
    for (int64_t j = 0; j < A->columns; j++)
        for (int64_t p = A->start[j] + 1; p < A->start[j + 1]; p++)
            if (A->index[p] <= A->index[p - 1]) return false;
    return true;
}

typedef struct pair {
    int32_t row, column;
    bool met;
} pair;

/* Numbers of triplets that repeat one of the pairs, in the order of the file. */
static void find_later(const lw_triplets *triplets, pair *pairs, int count, lw_repeated *repeated)
{
    int64_t number = 0;
    for (const chunk *c = triplets->first; c != NULL; c = c->next)
        for (int k = 0; k < c->count; k++, number++)
            for (int q = 0; q < count; q++) {
                if (c->at.row[k] != pairs[q].row || c->at.column[k] != pairs[q].column) continue;
                if (pairs[q].met && repeated->shown < LW_MOST_FAULTS) {
                    repeated->row[repeated->shown] = pairs[q].row;
                    repeated->column[repeated->shown] = pairs[q].column;
                    repeated->later[repeated->shown++] = number;
                }
                pairs[q].met = true;
            }
}

static lw_status find_repeated(const lw_triplets *triplets, const lw_sparse *A, lw_repeated *repeated,
                               lw_error *error)
{
    pair pairs[LW_MOST_FAULTS];
    int count = 0;
    int32_t *mark = LW_NEW_ARRAY(int32_t, A->rows);
    if (mark == NULL) return lw_fail_memory(error, "the design", (size_t)A->rows * sizeof(int32_t));
    for (int64_t i = 0; i < A->rows; i++) mark[i] = -1;
    for (int64_t j = 0; j < A->columns; j++)
        for (int64_t p = A->start[j]; p < A->start[j + 1]; p++) {
            int32_t i = A->index[p];
            if (mark[i] == (int32_t)j) {
                repeated->count++;
                bool known = false;
                for (int q = 0; q < count; q++) known |= pairs[q].row == i && pairs[q].column == (int32_t)j;
                if (!known && count < LW_MOST_FAULTS) pairs[count++] = (pair){i, (int32_t)j, false};
            }
            mark[i] = (int32_t)j;
        }
    if (count > 0) find_later(triplets, pairs, count, repeated);
    lw_free(mark);
    return LW_OK;
}

/* The transpose of the transpose has sorted columns. */
static lw_status sort_columns(lw_sparse **A, lw_error *error)
{
    lw_sparse *across = NULL;
    lw_status status = lw_sparse_transpose(*A, &across, error);
    lw_sparse_free(*A);
    *A = NULL;
    if (status == LW_OK) status = lw_sparse_transpose(across, A, error);
    lw_sparse_free(across);
    return status;
}

static int compare_decimals(const void *a, const void *b)
{
    const lw_decimal *x = a, *y = b;
    if (x->high != y->high) return x->high < y->high ? -1 : 1;
    return x->low < y->low ? -1 : x->low > y->low;
}

/* Sum of the entries from .. to-1, smallest value first. */
static lw_decimal sum_run(const lw_sparse *A, int64_t from, int64_t to, lw_decimal *space)
{
    int64_t count = to - from;
    for (int64_t k = 0; k < count; k++)
        space[k] = (lw_decimal){A->value[from + k], A->low != NULL ? A->low[from + k] : 0.0};
    if (count > 1) qsort(space, (size_t)count, sizeof(lw_decimal), compare_decimals);
    lw_decimal sum = space[0];
    for (int64_t k = 1; k < count; k++) sum = lw_decimal_add(sum, space[k]);
    return sum;
}

static int64_t run_end(const lw_sparse *A, int64_t from, int64_t end)
{
    int64_t to = from + 1;
    while (to < end && A->index[to] == A->index[from]) to++;
    return to;
}

static lw_status sum_repeated(lw_sparse *A, lw_error *error)
{
    int64_t longest = 1, out = 0;
    for (int64_t j = 0; j < A->columns; j++)
        for (int64_t p = A->start[j], to; p < A->start[j + 1]; p = to) {
            to = run_end(A, p, A->start[j + 1]);
            if (to - p > longest) longest = to - p;
        }
    lw_decimal *space = LW_NEW_ARRAY(lw_decimal, longest);
    if (space == NULL)
        return lw_fail_memory(error, "repeated coefficients", (size_t)longest * sizeof(lw_decimal));
    int64_t from = 0;
    bool finite = true;
    for (int64_t j = 0; j < A->columns; j++) {
        int64_t end = A->start[j + 1];
        for (int64_t to; from < end; from = to) {
            to = run_end(A, from, end);
            lw_decimal sum = sum_run(A, from, to, space);
            finite &= isfinite(sum.high);
            A->index[out] = A->index[from];
            A->value[out] = sum.high;
            if (A->low != NULL) A->low[out] = sum.low;
            out++;
        }
        A->start[j + 1] = out;
    }
    lw_free(space);
    return finite
               ? LW_OK
               : lw_fail(error, LW_BAD_INPUT, "repeated coefficients add up to more than a double can hold");
}

lw_status lw_triplets_matrix(lw_triplets *triplets, int64_t rows, int64_t columns, lw_sparse **out,
                             lw_repeated *repeated, lw_error *error)
{
    *out = NULL;
    *repeated = (lw_repeated){0};
    lw_status status = compress(triplets, rows, columns, out, error);
    if (status == LW_OK && !sorted(*out)) {
        status = find_repeated(triplets, *out, repeated, error);
        free_chunks(triplets);
        if (status == LW_OK) status = sort_columns(out, error);
        if (status == LW_OK && repeated->count > 0) status = sum_repeated(*out, error);
    }
    free_chunks(triplets);
    if (status != LW_OK) {
        lw_sparse_free(*out);
        *out = NULL;
    }
    return status;
}
