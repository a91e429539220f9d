/* SPDX-License-Identifier: GPL-3.0-or-later */
/* A sparse matrix from triplets: two stable counting sorts, by row and then by column. */
#include "matrix/sparse.h"

#include "core/memory.h"

#include <stdlib.h>

typedef struct entry {
    double value, low;
} entry;

typedef struct triplets {
    int64_t rows, columns, count;
    const int32_t *row, *column;
    const double *value, *low;
} triplets;

/* order_out: the triplets in order_in (NULL: 0, 1, ...) sorted by key, equal keys as they came. count has
 * keys + 1. */
static void sort_by_key(int64_t keys, int64_t n, const int32_t *key, const int64_t *order_in, int64_t *count,
                        int64_t *order_out)
{
    for (int64_t i = 0; i <= keys; i++) count[i] = 0;
    for (int64_t t = 0; t < n; t++) count[key[t] + 1]++;
    for (int64_t i = 0; i < keys; i++) count[i + 1] += count[i];
    for (int64_t t = 0; t < n; t++) {
        int64_t at = order_in ? order_in[t] : t;
        order_out[count[key[at]]++] = at;
    }
}

static int same_place(const triplets *t, int64_t a, int64_t b)
{
    return t->row[a] == t->row[b] && t->column[a] == t->column[b];
}

/* Number of different places; *repeated = the smallest number of a triplet whose place came before, or -1. */
static int64_t count_places(const triplets *t, const int64_t *order, int64_t *repeated)
{
    int64_t places = 0;
    *repeated = -1;
    for (int64_t p = 0; p < t->count; p++) {
        if (p == 0 || !same_place(t, order[p], order[p - 1]))
            places++;
        else if (*repeated < 0 || order[p] < *repeated)
            *repeated = order[p];
    }
    return places;
}

static int compare_entries(const void *a, const void *b)
{
    const entry *x = a, *y = b;
    if (x->value != y->value) return x->value < y->value ? -1 : 1;
    return (x->low > y->low) - (x->low < y->low);
}

/* Sum of the entries of one place in order of value, as value and remainder (two-sum of Knuth). */
static entry add_entries(int64_t n, entry *list)
{
    qsort(list, (size_t)n, sizeof *list, compare_entries);
    double high = list[0].value, low = list[0].low;
    for (int64_t i = 1; i < n; i++) {
        double sum = high + list[i].value, back = sum - high;
        low += ((high - (sum - back)) + (list[i].value - back)) + list[i].low;
        high = sum;
    }
    double sum = high + low;
    return (entry){sum, low - (sum - high)};
}

/* Entries in order into A; list has room for the longest run of one place. */
static void gather_places(const triplets *t, const int64_t *order, entry *list, lw_sparse *A)
{
    int64_t place = 0;
    for (int64_t p = 0; p < t->count;) {
        int64_t first = order[p], n = 0;
        for (; p < t->count && same_place(t, order[p], first); p++)
            list[n++] = (entry){t->value[order[p]], t->low ? t->low[order[p]] : 0};
        entry e = n > 1 ? add_entries(n, list) : list[0];
        A->index[place] = t->row[first];
        A->value[place] = e.value;
        if (A->low) A->low[place] = e.low;
        A->start[t->column[first] + 1] = ++place;
    }
    for (int64_t j = 0; j < A->columns; j++)
        if (A->start[j + 1] < A->start[j]) A->start[j + 1] = A->start[j];
}

static int64_t longest_run(const triplets *t, const int64_t *order)
{
    int64_t longest = 0, run = 0;
    for (int64_t p = 0; p < t->count; p++) {
        run = p > 0 && same_place(t, order[p], order[p - 1]) ? run + 1 : 1;
        if (run > longest) longest = run;
    }
    return longest;
}

static lw_status check_range(const triplets *t, lw_error *error)
{
    for (int64_t p = 0; p < t->count; p++)
        if (t->row[p] < 0 || t->row[p] >= t->rows || t->column[p] < 0 || t->column[p] >= t->columns)
            return lw_fail(error, LW_BAD_SHAPE, "entry (%d, %d) lies outside a matrix of %lld x %lld",
                           t->row[p], t->column[p], (long long)t->rows, (long long)t->columns);
    return LW_OK;
}

lw_status lw_sparse_from_triplets(int64_t rows, int64_t columns, int64_t count, const int32_t *row,
                                  const int32_t *column, const double *value, const double *low,
                                  int add_repeated, lw_sparse **out, int64_t *repeated, lw_error *error)
{
    triplets t = {rows, columns, count, row, column, value, low};
    int64_t again = -1, keys = rows > columns ? rows : columns;
    *out = NULL;
    if (repeated) *repeated = -1;
    lw_status status = check_range(&t, error);
    if (status) return status;
    int64_t *counter = LW_NEW_ARRAY(int64_t, keys + 1), *by_row = LW_NEW_ARRAY(int64_t, count);
    int64_t *order = LW_NEW_ARRAY(int64_t, count);
    entry *list = NULL;
    if (!counter || !by_row || !order) goto no_memory;
    sort_by_key(rows, count, row, NULL, counter, by_row);
    sort_by_key(columns, count, column, by_row, counter, order);
    int64_t places = count_places(&t, order, &again);
    if (again >= 0 && !add_repeated) {
        if (repeated) *repeated = again;
        status = lw_fail(error, LW_BAD_SHAPE, "entry (%d, %d) is given twice", row[again], column[again]);
        goto done;
    }
    list = LW_NEW_ARRAY(entry, longest_run(&t, order));
    if (!list) goto no_memory;
    status = lw_sparse_new(rows, columns, places, low != NULL, out, error);
    if (!status) gather_places(&t, order, list, *out);
    goto done;
no_memory:
    status = lw_fail_memory(error, "sorting the entries of a matrix", (size_t)lw_bytes(16, count));
done:
    lw_free(counter);
    lw_free(by_row);
    lw_free(order);
    lw_free(list);
    return status;
}
