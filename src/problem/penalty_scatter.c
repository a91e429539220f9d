/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Differences between scattered points; formulas in penalty.h. */
#include "core/memory.h"
#include "matrix/dense.h"
#include "problem/nearest.h"
#include "problem/penalty_part.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

#define SPANS 1e-3 /* least pivot over diagonal at which neighbours are taken to span a plane */

typedef struct cloud {
    const lw_penalty_points *points;
    const lw_ids *names;
    int dimension;
    double *place[3]; /* stretched, axes with one value left out */
    double *volume;   /* v_i over its mean */
    lw_nearest *tree;
    int each;           /* neighbours kept for each point */
    lw_neighbour *near; /* count x each */
} cloud;

static void cloud_clear(cloud *c)
{
    for (int a = 0; a < 3; a++) lw_free(c->place[a]);
    lw_free(c->volume);
    lw_free(c->near);
    lw_nearest_free(c->tree);
}

static lw_status stretch_axes(cloud *c, lw_error *error)
{
    const lw_penalty_points *points = c->points;
    for (int a = 0; a < 3; a++) {
        bool spread = false;
        if (points->place[a] == NULL) continue;
        for (int64_t k = 1; k < points->count && !spread; k++)
            spread = points->place[a][k] != points->place[a][0];
        if (!spread) continue;
        double by = points->prefer == LW_PREFER_FLATTEST ? points->stretch[a] : sqrt(points->stretch[a]);
        double *place = c->place[c->dimension++] = LW_NEW_ARRAY(double, points->count);
        if (place == NULL) return lw_fail_memory(error, "penalty", (size_t)points->count * 8);
        for (int64_t k = 0; k < points->count; k++) place[k] = points->place[a][k] / by;
    }
    return LW_OK;
}

static lw_status same_place(const cloud *c, int64_t i, int64_t j, lw_error *error)
{
    return lw_fail(error, LW_BAD_USAGE,
                   "--prefer %s cannot compare parameters '%s' and '%s': they lie in the same place (give "
                   "them different regions)",
                   lw_penalty_name(c->points->prefer), lw_ids_name(c->names, c->points->parameter[i]),
                   lw_ids_name(c->names, c->points->parameter[j]));
}

static lw_status find_neighbours(cloud *c, lw_team *team, lw_error *error)
{
    int64_t count = c->points->count;
    c->each = (c->points->prefer == LW_PREFER_FLATTEST ? 2 : 3) * c->dimension;
    if (c->each > count - 1) c->each = (int)(count - 1);
    c->near = LW_NEW_ARRAY(lw_neighbour, lw_bytes(count, c->each));
    if (c->near == NULL) return lw_fail_memory(error, "penalty", (size_t)(count * c->each) * sizeof *c->near);
    lw_status status = lw_nearest_new(c->dimension, count, c->place, &c->tree, error);
    if (status == LW_OK) lw_nearest_find_all(c->tree, c->each, team, c->near);
    return status;
}

static lw_status share_volumes(cloud *c, lw_error *error)
{
    int64_t count = c->points->count;
    int nearest = c->each < 2 * c->dimension ? c->each : 2 * c->dimension;
    double sum = 0.0;
    c->volume = LW_NEW_ARRAY(double, count);
    if (c->volume == NULL) return lw_fail_memory(error, "penalty", (size_t)count * 8);
    for (int64_t i = 0; i < count; i++) {
        const lw_neighbour *near = c->near + i * c->each;
        double mean = 0.0;
        if (near[0].square == 0.0) return same_place(c, i, near[0].point, error);
        for (int k = 0; k < nearest; k++) mean += sqrt(near[k].square);
        sum += c->volume[i] = pow(mean / nearest, c->dimension);
    }
    for (int64_t i = 0; i < count; i++) c->volume[i] *= (double)count / sum;
    return LW_OK;
}

typedef struct pair {
    int64_t i, j;
    double square;
} pair;

static int by_ends(const void *a, const void *b)
{
    const pair *p = a, *q = b;
    if (p->i != q->i) return p->i < q->i ? -1 : 1;
    return (p->j > q->j) - (p->j < q->j);
}

static lw_status add_pairs(const cloud *c, lw_penalty_rows *rows, lw_error *error)
{
    int64_t count = c->points->count, pairs = 0;
    const int64_t *parameter = c->points->parameter;
    pair *all = LW_NEW_ARRAY(pair, count * c->each);
    if (all == NULL) return lw_fail_memory(error, "penalty", (size_t)count * sizeof *all);
    for (int64_t i = 0; i < count; i++) {
        const lw_neighbour *near = c->near + i * c->each;
        for (int k = 0; k < c->each; k++) {
            int64_t j = near[k].point;
            all[pairs++] = (pair){i < j ? i : j, i < j ? j : i, near[k].square};
        }
    }
    qsort(all, (size_t)pairs, sizeof *all, by_ends);
    lw_status status = LW_OK;
    for (int64_t k = 0; status == LW_OK && k < pairs; k++) {
        if (k > 0 && by_ends(&all[k], &all[k - 1]) == 0) continue;
        int64_t i = all[k].i, j = all[k].j;
        double by = sqrt(0.5 * (c->volume[i] + c->volume[j]) / all[k].square);
        status = lw_penalty_add(rows, 2, (int64_t[]){parameter[i], parameter[j]}, (double[]){-by, by}, error);
    }
    lw_free(all);
    return status;
}

/* Coefficients of the fitted plane's value at i: c = W X G^-1 e_1 with X = [1, (p_j - p_i)/h], G = X'W X,
 * corrected once so that X'c = e_1 holds to rounding. Returns 0 when the neighbours do not span a plane. */
static int fit_plane(const cloud *c, int64_t i, int found, const lw_neighbour *near, double *coefficient)
{
    int size = c->dimension + 1;
    double X[LW_NEAREST_MOST][4], weight[LW_NEAREST_MOST], G[16] = {0}, diagonal[4],
                                                           h = sqrt(near[found - 1].square);
    int64_t defect;
    for (int k = 0; k < found; k++) {
        weight[k] = near[found - 1].square / near[k].square;
        X[k][0] = 1.0;
        for (int a = 0; a < c->dimension; a++)
            X[k][a + 1] = (c->place[a][near[k].point] - c->place[a][i]) / h;
        for (int p = 0; p < size; p++)
            for (int q = 0; q < size; q++) G[p + q * size] += weight[k] * X[k][p] * X[k][q];
        coefficient[k] = 0.0;
    }
    for (int p = 0; p < size; p++) diagonal[p] = G[p + p * size];
    if (lw_dense_cholesky(size, G, &defect, NULL) != LW_OK) return 0;
    for (int p = 0; p < size; p++)
        if (G[p + p * size] * G[p + p * size] < SPANS * diagonal[p]) return 0;
    for (int turn = 0; turn < 3; turn++) {
        double e[4] = {1.0, 0.0, 0.0, 0.0};
        for (int k = 0; k < found; k++)
            for (int p = 0; p < size; p++) e[p] -= X[k][p] * coefficient[k];
        lw_dense_cholesky_solve(size, G, 1, e);
        for (int k = 0; k < found; k++)
            for (int p = 0; p < size; p++) coefficient[k] += weight[k] * X[k][p] * e[p];
    }
    return 1;
}

static lw_status add_laplacian(const cloud *c, int64_t i, lw_penalty_rows *rows, lw_error *error)
{
    lw_neighbour near[LW_NEAREST_MOST];
    int d = c->dimension, found = c->each;
    double value[LW_NEAREST_MOST + 1], curve = 0.0, mean = 0.0;
    int64_t parameter[LW_NEAREST_MOST + 1];
    memcpy(near, c->near + i * c->each, (size_t)found * sizeof *near);
    int spans = found > d && fit_plane(c, i, found, near, value + 1);
    for (int k = 4 * d; k <= 8 * d && !spans; k += d) {
        int more = lw_nearest_find(c->tree, i, k, near);
        if (more == found) break;
        found = more;
        spans = found > d && fit_plane(c, i, found, near, value + 1);
    }
    if (!spans) return LW_OK;
    for (int k = 0; k < found; k++) {
        curve += value[k + 1] * near[k].square;
        mean += near[k].square / found;
        parameter[k + 1] = c->points->parameter[near[k].point];
    }
    double by = sqrt(c->volume[i]) * 2.0 * d / (curve > 0.25 * mean ? curve : mean);
    for (int k = 1; k <= found; k++) value[k] *= by;
    parameter[0] = c->points->parameter[i];
    lw_penalty_balance(found + 1, value);
    return lw_penalty_add(rows, found + 1, parameter, value, error);
}

lw_status lw_penalty_scatter(const lw_penalty_points *points, const lw_ids *names, lw_team *team,
                             lw_penalty_rows *rows, lw_error *error)
{
    cloud c = {.points = points, .names = names};
    lw_status status = stretch_axes(&c, error);
    if (status == LW_OK && c.dimension == 0) status = same_place(&c, 0, 1, error);
    if (status == LW_OK) status = find_neighbours(&c, team, error);
    if (status == LW_OK) status = share_volumes(&c, error);
    if (status == LW_OK && points->prefer == LW_PREFER_FLATTEST) status = add_pairs(&c, rows, error);
    for (int64_t i = 0; status == LW_OK && points->prefer == LW_PREFER_SMOOTHEST && i < points->count; i++)
        status = add_laplacian(&c, i, rows, error);
    cloud_clear(&c);
    return status;
}
