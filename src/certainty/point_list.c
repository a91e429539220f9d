/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "certainty/point_list.h"

#include "core/memory.h"

#include <stdlib.h>

static lw_status points_new(const lw_system *system, lw_point_list *p, lw_error *error)
{
    const lw_problem *problem = system->problem;
    p->points = lw_ids_count(problem->point_names);
    p->column = LW_NEW_ARRAY(int64_t, 3 * p->points);
    p->axes = LW_NEW_ZEROS(int8_t, 3 * p->points);
    if (!p->column || !p->axes) return lw_fail_memory(error, "ellipses", (size_t)p->points * 27);
    for (int64_t k = 0; k < 3 * p->points; k++) p->column[k] = -1;
    for (int64_t j = 0; j < problem->n; j++) {
        int axis = problem->axis[j];
        if (problem->point[j] < 0 || axis == LW_AXIS_NONE) continue;
        int64_t at = 3 * (int64_t)problem->point[j] + (axis - LW_AXIS_EAST) % 3;
        p->axes[at] = 1;
        p->column[at] = system->column_of[j];
    }
    return LW_OK;
}

int lw_point_dimension(const lw_point_list *p, int64_t point)
{
    const int8_t *a = p->axes + 3 * point;
    return a[0] && a[1] ? (a[2] ? 3 : 2) : 0;
}

bool lw_point_is_free(const lw_point_list *p, int64_t point)
{
    const int64_t *c = p->column + 3 * point;
    return lw_point_dimension(p, point) > 0 && (c[0] >= 0 || c[1] >= 0 || c[2] >= 0);
}

/* Pairs of points with free coordinates that observation i joins, as from * points + to; returns how many
 * were added. */
static int64_t joined(const lw_system *system, const lw_sparse *by_row, const lw_point_list *p, int64_t i,
                      int32_t *seen, int64_t *pairs)
{
    const lw_problem *problem = system->problem;
    int64_t points = 0, count = 0;
    for (int64_t e = by_row->start[i]; e < by_row->start[i + 1]; e++) {
        int32_t point = problem->point[by_row->index[e]];
        if (point < 0 || !lw_point_is_free(p, point)) continue;
        int64_t k = 0;
        while (k < points && seen[k] != point) k++;
        if (k == points) seen[points++] = point;
    }
    for (int64_t a = 0; a < points; a++) {
        for (int64_t b = a + 1; b < points; b++) {
            int64_t from = seen[a] < seen[b] ? seen[a] : seen[b], to = seen[a] + seen[b] - from;
            if (pairs) pairs[count] = from * p->points + to;
            count++;
        }
    }
    return count;
}

static int by_number(const void *a, const void *b)
{
    int64_t p = *(const int64_t *)a, q = *(const int64_t *)b;
    return p < q ? -1 : p > q;
}

static lw_status list_pairs(const lw_system *system, const lw_point_list *p, int64_t **pairs, int64_t *count,
                            lw_error *error)
{
    lw_sparse *by_row = NULL;
    lw_status status = lw_sparse_transpose(system->problem->design, &by_row, error);
    int64_t all = 0, kept = 0;
    int32_t *seen = status == LW_OK ? LW_NEW_ARRAY(int32_t, by_row->rows) : NULL;
    for (int64_t i = 0; seen && i < by_row->columns; i++) all += joined(system, by_row, p, i, seen, NULL);
    *pairs = LW_NEW_ARRAY(int64_t, all);
    if (status == LW_OK && !(seen && *pairs))
        status = lw_fail_memory(error, "relative ellipses", (size_t)all * 8);
    for (int64_t i = 0, at = 0; status == LW_OK && i < by_row->columns; i++)
        at += joined(system, by_row, p, i, seen, *pairs + at);
    if (status == LW_OK) qsort(*pairs, (size_t)all, sizeof **pairs, by_number);
    for (int64_t k = 0; k < all && status == LW_OK; k++)
        if (k == 0 || (*pairs)[k] != (*pairs)[kept - 1]) (*pairs)[kept++] = (*pairs)[k];
    *count = kept;
    lw_free(seen);
    lw_sparse_free(by_row);
    return status;
}

lw_status lw_point_list_new(const lw_system *system, lw_point_list **out, lw_error *error)
{
    const lw_problem *problem = system->problem;
    *out = NULL;
    if (!problem->point || !problem->axis || !problem->point_names) return LW_OK;
    lw_point_list *list = LW_NEW(lw_point_list);
    if (!list) return lw_fail_memory(error, "ellipses", sizeof *list);
    lw_status status = points_new(system, list, error);
    if (status == LW_OK) status = list_pairs(system, list, &list->pair, &list->pairs, error);
    if (status == LW_OK)
        *out = list;
    else
        lw_point_list_free(list);
    return status;
}

void lw_point_list_free(lw_point_list *list)
{
    if (!list) return;
    lw_free(list->column);
    lw_free(list->axes);
    lw_free(list->pair);
    lw_free(list);
}
