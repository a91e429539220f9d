/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Components of the penalty: union-find over its columns (Tarjan, J. ACM 22(2):215-225, 1975). */
#include "core/memory.h"
#include "solve/standard_null.h"

#include <math.h>
#include <string.h>

static int64_t root_of(int64_t *parent, int64_t j)
{
    while (parent[j] != j) {
        parent[j] = parent[parent[j]];
        j = parent[j];
    }
    return j;
}

void lw_penalty_graph_clear(lw_penalty_graph *graph)
{
    lw_free(graph->column_start);
    lw_free(graph->column);
    lw_free(graph->row_start);
    lw_free(graph->row);
    lw_free(graph->norm);
    *graph = (lw_penalty_graph){0};
}

/* Lists `count` items by their component (of[i], -1: none), in order. start has room for components + 1. */
static void list_by_component(int64_t count, const int64_t *of, int64_t components, int64_t *start,
                              int64_t *list)
{
    memset(start, 0, (size_t)(components + 1) * sizeof *start);
    for (int64_t i = 0; i < count; i++)
        if (of[i] >= 0) start[of[i] + 1]++;
    for (int64_t c = 0; c < components; c++) start[c + 1] += start[c];
    for (int64_t i = 0; i < count; i++)
        if (of[i] >= 0) list[start[of[i]]++] = i;
    memmove(start + 1, start, (size_t)components * sizeof *start);
    start[0] = 0;
}

/* Ties columns that share a row; first[i] becomes a column of row i or -1. */
static void tie_columns(const lw_sparse *L, int64_t *parent, int64_t *first)
{
    for (int64_t j = 0; j < L->columns; j++) parent[j] = j;
    for (int64_t i = 0; i < L->rows; i++) first[i] = -1;
    for (int64_t j = 0; j < L->columns; j++)
        for (int64_t p = L->start[j]; p < L->start[j + 1]; p++) {
            int64_t i = L->index[p];
            if (L->value[p] == 0.0) continue;
            if (first[i] < 0) first[i] = j;
            int64_t a = root_of(parent, first[i]), b = root_of(parent, j);
            if (a < b) parent[b] = a;
            if (b < a) parent[a] = b;
        }
}

lw_status lw_penalty_graph_make(const lw_sparse *L, lw_penalty_graph *out, lw_error *error)
{
    int64_t n = L->columns, rows = L->rows;
    *out = (lw_penalty_graph){0};
    int64_t *parent = LW_NEW_ARRAY(int64_t, n), *first = LW_NEW_ARRAY(int64_t, rows),
            *of = LW_NEW_ARRAY(int64_t, n);
    lw_status status = LW_OK;
    if (parent != NULL && first != NULL && of != NULL) {
        tie_columns(L, parent, first);
        for (int64_t j = 0; j < n; j++) of[j] = parent[j] == j ? out->count++ : of[root_of(parent, j)];
        for (int64_t i = 0; i < rows; i++) first[i] = first[i] < 0 ? -1 : of[first[i]];
        out->column_start = LW_NEW_ARRAY(int64_t, out->count + 1);
        out->row_start = LW_NEW_ARRAY(int64_t, out->count + 1);
        out->column = LW_NEW_ARRAY(int64_t, n);
        out->row = LW_NEW_ARRAY(int64_t, rows);
        out->norm = LW_NEW_ZEROS(double, out->count);
    }
    if (out->column_start == NULL || out->row_start == NULL || out->column == NULL || out->row == NULL ||
        out->norm == NULL) {
        status = lw_fail_memory(error, "components of the penalty", (size_t)lw_bytes(n + rows, 24));
        lw_penalty_graph_clear(out);
    } else {
        list_by_component(n, of, out->count, out->column_start, out->column);
        list_by_component(rows, first, out->count, out->row_start, out->row);
        for (int64_t j = 0; j < n; j++) {
            double square = 0.0;
            for (int64_t p = L->start[j]; p < L->start[j + 1]; p++) square += L->value[p] * L->value[p];
            out->norm[of[j]] = fmax(out->norm[of[j]], sqrt(square));
        }
    }
    lw_free(parent);
    lw_free(first);
    lw_free(of);
    return status;
}
