/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "solve/datum_groups.h"

#include "core/memory.h"
#include "solve/datum.h"

#include <math.h>
#include <string.h>

static int32_t root_of(int32_t *parent, int32_t j)
{
    while (parent[j] != j) j = parent[j] = parent[parent[j]];
    return j;
}

lw_status lw_datum_components(const lw_sparse *M, int32_t *of_column, int64_t *count, lw_error *error)
{
    int32_t *seen = LW_NEW_ARRAY(int32_t, M->rows), *parent = LW_NEW_ARRAY(int32_t, M->columns);
    lw_status status =
        seen && parent ? LW_OK : lw_fail_memory(error, "components", (size_t)(M->rows + M->columns) * 4);
    if (status == LW_OK) {
        for (int64_t i = 0; i < M->rows; i++) seen[i] = -1;
        for (int64_t j = 0; j < M->columns; j++) parent[j] = (int32_t)j;
        for (int64_t j = 0; j < M->columns; j++) {
            for (int64_t e = M->start[j]; e < M->start[j + 1]; e++) {
                if (M->value[e] == 0) continue;
                int32_t other = seen[M->index[e]];
                if (other < 0) {
                    seen[M->index[e]] = (int32_t)j;
                    continue;
                }
                int32_t a = root_of(parent, other), b = root_of(parent, (int32_t)j);
                if (a < b)
                    parent[b] = a;
                else
                    parent[a] = b;
            }
        }
        *count = 0;
        for (int64_t j = 0; j < M->columns; j++) /* the root is the first column of its component */
            of_column[j] = parent[j] == j ? (int32_t)(*count)++ : of_column[root_of(parent, (int32_t)j)];
    }
    lw_free(seen);
    lw_free(parent);
    return status;
}

void lw_groups_clear(lw_groups *g)
{
    lw_free(g->column_start);
    lw_free(g->column);
    lw_free(g->row_start);
    lw_free(g->row);
}

static void list_by(int64_t n, const int32_t *of, int64_t count, int64_t *start, int64_t *list)
{
    memset(start, 0, (size_t)(count + 2) * 8);
    for (int64_t j = 0; j < n; j++)
        if (of[j] >= 0) start[of[j] + 2]++;
    for (int64_t c = 1; c <= count + 1; c++) start[c] += start[c - 1];
    for (int64_t j = 0; j < n; j++)
        if (of[j] >= 0) list[start[of[j] + 1]++] = j;
}

lw_status lw_groups_make(const lw_sparse *M, const int32_t *of_column, int64_t count, lw_groups *g,
                         lw_error *error)
{
    int32_t *of_row = LW_NEW_ARRAY(int32_t, M->rows);
    *g = (lw_groups){count, LW_NEW_ARRAY(int64_t, count + 2), LW_NEW_ARRAY(int64_t, M->columns),
                     LW_NEW_ARRAY(int64_t, count + 2), LW_NEW_ARRAY(int64_t, M->rows)};
    if (!of_row || !g->column_start || !g->column || !g->row_start || !g->row) {
        lw_free(of_row);
        return lw_fail_memory(error, "components", (size_t)(M->rows + M->columns) * 8);
    }
    for (int64_t i = 0; i < M->rows; i++) of_row[i] = -1;
    for (int64_t j = 0; j < M->columns; j++)
        for (int64_t e = M->start[j]; e < M->start[j + 1]; e++)
            if (M->value[e] != 0) of_row[M->index[e]] = of_column[j];
    list_by(M->columns, of_column, count, g->column_start, g->column);
    list_by(M->rows, of_row, count, g->row_start, g->row);
    lw_free(of_row);
    return LW_OK;
}

double lw_group_dot(int64_t count, const int64_t *list, const double *x, const double *y)
{
    double sum = 0;
    for (int64_t i = 0; i < count; i++) sum += x[list[i]] * y[list[i]];
    return sum;
}

void lw_group_orthonormalize(int64_t n, int64_t count, const int64_t *list, int k, double *x)
{
    for (int a = 0; a < k; a++) {
        double *v = x + a * n, before = sqrt(lw_group_dot(count, list, v, v));
        for (int pass = 0; pass < 2; pass++) {
            for (int b = 0; b < a; b++) {
                double t = lw_group_dot(count, list, x + b * n, v);
                for (int64_t i = 0; i < count; i++) v[list[i]] -= t * x[b * n + list[i]];
            }
        }
        double size = sqrt(lw_group_dot(count, list, v, v)), factor = size > 1e-10 * before ? 1 / size : 0;
        for (int64_t i = 0; i < count; i++) v[list[i]] *= factor;
    }
}
