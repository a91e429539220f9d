/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Differences on a grid; formulas in penalty.h. */
#include "core/memory.h"
#include "problem/penalty_part.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

#define SAME 1e-9
#define LARGEST_BOX 64 /* places of the bounding box for each cell; more is no grid */

typedef struct grid {
    const lw_penalty_points *points;
    const lw_penalty_axis *axis;
    int32_t *at[3]; /* count each: place on the axis, from the first that the region uses */
    int64_t size[3], first[3], step[3];
    int64_t *cell; /* box: point or -1 */
} grid;

static int by_value(const void *a, const void *b)
{
    double u = *(const double *)a, v = *(const double *)b;
    return (u > v) - (u < v);
}

lw_status lw_penalty_axis_make(int64_t count, const double *place, lw_penalty_axis *out, lw_error *error)
{
    *out = (lw_penalty_axis){0, LW_NEW_ARRAY(double, count)};
    if (out->value == NULL) return lw_fail_memory(error, "penalty", (size_t)count * sizeof(double));
    memcpy(out->value, place, (size_t)count * sizeof(double));
    qsort(out->value, (size_t)count, sizeof(double), by_value);
    double same = count > 0 ? SAME * (out->value[count - 1] - out->value[0]) : 0.0;
    for (int64_t k = 0; k < count; k++)
        if (out->count == 0 || out->value[k] - out->value[out->count - 1] > same)
            out->value[out->count++] = out->value[k];
    return LW_OK;
}

/* The last value that is not greater, give or take what counts as the same. */
static int64_t find_place(const lw_penalty_axis *axis, double value)
{
    int64_t low = 0, high = axis->count;
    while (high - low > 1) {
        int64_t middle = low + (high - low) / 2;
        if (axis->value[middle] <= value)
            low = middle;
        else
            high = middle;
    }
    return low;
}

/* Numbers the cells; *fits = 0 when the box is too empty or two points share a cell. */
static lw_status number_cells(grid *g, int *fits, lw_error *error)
{
    int64_t count = g->points->count, box = 1;
    *fits = 1;
    for (int a = 0; a < 3; a++) {
        g->size[a] = 1;
        g->step[a] = box;
        if (g->points->place[a] == NULL) continue;
        g->at[a] = LW_NEW_ARRAY(int32_t, count);
        if (g->at[a] == NULL) return lw_fail_memory(error, "penalty", (size_t)count * 4);
        int32_t first = INT32_MAX, last = 0;
        for (int64_t k = 0; k < count; k++) {
            int32_t place = g->at[a][k] = (int32_t)find_place(&g->axis[a], g->points->place[a][k]);
            if (place < first) first = place;
            if (place > last) last = place;
        }
        for (int64_t k = 0; k < count; k++) g->at[a][k] -= first;
        g->first[a] = first;
        g->size[a] = last - first + 1;
        if (g->size[a] > LARGEST_BOX * count / box + LARGEST_BOX) {
            *fits = 0;
            return LW_OK;
        }
        box *= g->size[a];
    }
    g->cell = LW_NEW_ARRAY(int64_t, box);
    if (g->cell == NULL) return lw_fail_memory(error, "penalty", (size_t)box * 8);
    for (int64_t k = 0; k < box; k++) g->cell[k] = -1;
    for (int64_t k = 0; k < count && *fits; k++) {
        int64_t key = 0;
        for (int a = 0; a < 3; a++) key += g->at[a] == NULL ? 0 : g->at[a][k] * g->step[a];
        *fits = g->cell[key] < 0;
        g->cell[key] = k;
    }
    return LW_OK;
}

/* Point next to k along a, in direction +1 or -1, or -1. */
static int64_t next_to(const grid *g, int64_t k, int a, int direction)
{
    if (g->at[a] == NULL) return -1;
    int64_t place = g->at[a][k] + direction, key = 0;
    if (place < 0 || place >= g->size[a]) return -1;
    for (int b = 0; b < 3; b++) key += g->at[b] == NULL ? 0 : (b == a ? place : g->at[b][k]) * g->step[b];
    return g->cell[key];
}

static bool all_have_neighbours(const grid *g)
{
    for (int64_t k = 0; k < g->points->count; k++) {
        bool has = false;
        for (int a = 0; a < 3 && !has; a++) has = next_to(g, k, a, 1) >= 0 || next_to(g, k, a, -1) >= 0;
        if (!has) return false;
    }
    return true;
}

/* h from place i to i + 1 of the region's count. */
static double spacing(const grid *g, int a, int64_t i)
{
    const double *value = g->axis[a].value + g->first[a];
    return value[i + 1] - value[i];
}

static double mean_spacing(const grid *g, int a)
{
    const lw_penalty_axis *axis = &g->axis[a];
    return (axis->value[axis->count - 1] - axis->value[0]) / (double)(axis->count - 1);
}

/* Width of the cell over the mean spacing; 1 on an axis of one value. */
static double width_share(const grid *g, int a, int64_t k)
{
    const lw_penalty_axis *axis = &g->axis[a];
    if (g->at[a] == NULL || axis->count < 2) return 1.0;
    int64_t i = g->at[a][k] + g->first[a], left = i > 0 ? i - 1 : i, right = i + 1 < axis->count ? i + 1 : i;
    return (axis->value[right] - axis->value[left]) / (double)(right - left) / mean_spacing(g, a);
}

static double other_shares(const grid *g, int a, int64_t k)
{
    double share = 1.0;
    for (int b = 0; b < 3; b++)
        if (b != a) share *= width_share(g, b, k);
    return share;
}

static lw_status add_first(const grid *g, int64_t k, int a, lw_penalty_rows *rows, lw_error *error)
{
    int64_t right = next_to(g, k, a, 1);
    if (right < 0) return LW_OK;
    double h = spacing(g, a, g->at[a][k]);
    double c = g->points->stretch[a] * sqrt(h / mean_spacing(g, a) * other_shares(g, a, k)) / h;
    return lw_penalty_add(rows, 2, (int64_t[]){g->points->parameter[k], g->points->parameter[right]},
                          (double[]){-c, c}, error);
}

static lw_status add_second(const grid *g, int64_t k, int a, lw_penalty_rows *rows, lw_error *error)
{
    int64_t left = next_to(g, k, a, -1), right = next_to(g, k, a, 1);
    if (left < 0 || right < 0) return LW_OK;
    double hl = spacing(g, a, g->at[a][k] - 1), hr = spacing(g, a, g->at[a][k]), both = hl + hr;
    double c = g->points->stretch[a] * sqrt(0.5 * both / mean_spacing(g, a) * other_shares(g, a, k));
    double value[3] = {0.0, c * 2.0 / (hl * both), c * 2.0 / (hr * both)};
    const int64_t *parameter = g->points->parameter;
    lw_penalty_balance(3, value);
    return lw_penalty_add(rows, 3, (int64_t[]){parameter[k], parameter[left], parameter[right]}, value,
                          error);
}

lw_status lw_penalty_grid(const lw_penalty_points *points, const lw_penalty_axis axis[3],
                          lw_penalty_rows *rows, int *found, lw_error *error)
{
    grid g = {.points = points, .axis = axis};
    int fits = 0;
    *found = 0;
    lw_status status = number_cells(&g, &fits, error);
    if (status == LW_OK && fits && all_have_neighbours(&g)) {
        *found = 1;
        for (int64_t k = 0; status == LW_OK && k < points->count; k++)
            for (int a = 0; status == LW_OK && a < 3; a++)
                status = points->prefer == LW_PREFER_FLATTEST ? add_first(&g, k, a, rows, error)
                                                              : add_second(&g, k, a, rows, error);
    }
    for (int a = 0; a < 3; a++) lw_free(g.at[a]);
    lw_free(g.cell);
    return status;
}
