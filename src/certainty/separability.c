/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "certainty/separability.h"

#include "core/chance.h"
#include "core/memory.h"

#include <math.h>
#include <stdlib.h>

#define TRIALS LW_SEPARABILITY_TRIALS
#define STREAM 71
/* sqrt(2e-9) is one standard deviation of a difference at the limit of 1 - |rho|; 4.5 of them are looked
 * at. */
#define WINDOW 2e-4
#define LIMIT 1e-9

lw_status lw_separability_try(lw_cofactor *cofactor, const lw_watch *watch, double **y, lw_error *error)
{
    const lw_system *system = cofactor->decomposition->system;
    int64_t rows = system->rows;
    lw_random *random = NULL;
    *y = NULL;
    double *g = LW_NEW_ARRAY(double, rows *TRIALS), *r = LW_NEW_ARRAY(double, rows *TRIALS);
    double *z = LW_NEW_ARRAY(double, system->columns *TRIALS);
    lw_status status =
        g && r && z ? LW_OK : lw_fail_memory(error, "separability", (size_t)(rows * TRIALS) * 16);
    if (status == LW_OK) status = lw_random_new(lw_watch_seed(watch), STREAM, &random, error);
    for (int64_t i = 0; i < rows * TRIALS && status == LW_OK; i++)
        g[i] = system->row_factor && system->row_factor[i % rows] == 0 ? 0 : lw_random_normal(random);
    if (status == LW_OK) status = lw_cofactor_project(cofactor, TRIALS, g, r, z, error);
    if (status >= LW_OK) {
        lw_system_whiten_transposed(system, TRIALS, r);
        *y = r;
        r = NULL;
        status = LW_OK;
    }
    lw_random_free(random);
    lw_free(g);
    lw_free(r);
    lw_free(z);
    return status;
}

typedef struct signature {
    int64_t row;
    double y[TRIALS]; /* standardized, y[0] >= 0 */
} signature;

static int by_first(const void *a, const void *b)
{
    const signature *p = a, *q = b;
    if (p->y[0] != q->y[0]) return p->y[0] < q->y[0] ? -1 : 1;
    return p->row < q->row ? -1 : p->row > q->row;
}

static int64_t take_signatures(const lw_redundancy *redundancy, const double *y, signature *list)
{
    int64_t count = 0;
    for (int64_t i = 0; i < redundancy->rows; i++) {
        if (isnan(redundancy->redundancy[i]) || !(redundancy->share[i] >= LW_LEAST_SHARE)) continue;
        double scale = 1 / sqrt(redundancy->visible[i]);
        if (y[i] < 0) scale = -scale;
        list[count].row = i;
        for (int t = 0; t < TRIALS; t++) list[count].y[t] = y[i + t * redundancy->rows] * scale;
        count++;
    }
    qsort(list, (size_t)count, sizeof *list, by_first);
    return count;
}

static bool same(const signature *p, const signature *q)
{
    double sum = 0;
    for (int t = 0; t < TRIALS; t++) {
        double difference = p->y[t] - q->y[t];
        sum += difference * difference;
    }
    return sum < 2 * LIMIT * TRIALS;
}

/* Representative of a row, with paths halved on the way (union-find). */
static int64_t head_of(int64_t *parent, int64_t i)
{
    while (parent[i] != i) i = parent[i] = parent[parent[i]];
    return i;
}

static void join(int64_t *parent, int64_t i, int64_t j)
{
    int64_t p = head_of(parent, i), q = head_of(parent, j);
    if (p < q)
        parent[q] = p;
    else
        parent[p] = q;
}

lw_status lw_separability_find(const lw_redundancy *redundancy, const double *y, int64_t **pairs,
                               int64_t *count, lw_error *error)
{
    int64_t rows = redundancy->rows, used = 0, found = 0;
    signature *list = LW_NEW_ARRAY(signature, rows);
    int64_t *parent = LW_NEW_ARRAY(int64_t, rows);
    lw_status status =
        list && parent ? LW_OK : lw_fail_memory(error, "separability", (size_t)rows * (sizeof *list + 8));
    *pairs = NULL;
    *count = 0;
    if (status == LW_OK) {
        used = take_signatures(redundancy, y, list);
        for (int64_t i = 0; i < rows; i++) parent[i] = i;
    }
    for (int64_t i = 0; i < used; i++) {
        for (int64_t j = i + 1; j < used && list[j].y[0] - list[i].y[0] < WINDOW; j++) {
            if (fabs(list[j].y[1] - list[i].y[1]) > WINDOW || !same(list + i, list + j)) continue;
            join(parent, list[i].row, list[j].row);
            break; /* a class is joined link by link */
        }
    }
    for (int64_t i = 0; i < rows && status == LW_OK; i++) found += head_of(parent, i) != i;
    int64_t *out = status == LW_OK ? LW_NEW_ARRAY(int64_t, 2 * found) : NULL;
    if (status == LW_OK && !out) status = lw_fail_memory(error, "separability", (size_t)found * 16);
    for (int64_t i = 0, at = 0; i < rows && status == LW_OK; i++) {
        if (head_of(parent, i) == i) continue;
        out[at++] = head_of(parent, i);
        out[at++] = i;
    }
    *pairs = out;
    *count = found;
    lw_free(list);
    lw_free(parent);
    return status;
}
