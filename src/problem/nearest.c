/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The tree is a permutation of the points: the middle of a stretch splits it along the axis of its depth.
 * Coordinates are kept in that order, point by point. */
#include "problem/nearest.h"

#include "core/memory.h"

struct lw_nearest {
    int dimension;
    int64_t count;
    double *const *place; /* while it is made */
    int64_t *order;       /* point at a place of the tree */
    int64_t *place_of;    /* and back */
    double *at;           /* count x dimension, in tree order */
};

typedef struct query {
    const lw_nearest *tree;
    int64_t self; /* place in the tree */
    const double *centre;
    int k, found;
    lw_neighbour *out; /* point: place in the tree, until the end */
} query;

/* Puts the element that belongs at `middle` there, smaller ones before it (Hoare, Comm. ACM 4(7):321, 1961).
 */
static void select_middle(const double *place, int64_t *order, int64_t from, int64_t to, int64_t middle)
{
    while (to - from > 1) {
        double pivot = place[order[from + (to - from) / 2]];
        int64_t i = from, j = to - 1;
        while (i <= j) {
            while (place[order[i]] < pivot) i++;
            while (place[order[j]] > pivot) j--;
            if (i > j) break;
            int64_t swap = order[i];
            order[i++] = order[j];
            order[j--] = swap;
        }
        if (middle <= j)
            to = j + 1;
        else if (middle >= i)
            from = i;
        else
            return;
    }
}

static void split(lw_nearest *tree, int64_t from, int64_t to, int axis)
{
    if (to - from < 2) return;
    int64_t middle = from + (to - from) / 2;
    select_middle(tree->place[axis], tree->order, from, to, middle);
    split(tree, from, middle, (axis + 1) % tree->dimension);
    split(tree, middle + 1, to, (axis + 1) % tree->dimension);
}

lw_status lw_nearest_new(int dimension, int64_t count, double *const *place, lw_nearest **out,
                         lw_error *error)
{
    *out = NULL;
    lw_nearest *tree = LW_NEW(lw_nearest);
    if (tree == NULL) return lw_fail_memory(error, "neighbours", sizeof *tree);
    *tree = (lw_nearest){.dimension = dimension, .count = count, .place = place};
    tree->order = LW_NEW_ARRAY(int64_t, count);
    tree->place_of = LW_NEW_ARRAY(int64_t, count);
    tree->at = LW_NEW_ARRAY(double, count *dimension);
    if (tree->order == NULL || tree->place_of == NULL || tree->at == NULL) {
        lw_nearest_free(tree);
        return lw_fail_memory(error, "neighbours", (size_t)count * (16 + 8 * (size_t)dimension));
    }
    for (int64_t i = 0; i < count; i++) tree->order[i] = i;
    split(tree, 0, count, 0);
    for (int64_t i = 0; i < count; i++) {
        tree->place_of[tree->order[i]] = i;
        for (int a = 0; a < dimension; a++) tree->at[i * dimension + a] = place[a][tree->order[i]];
    }
    *out = tree;
    return LW_OK;
}

void lw_nearest_free(lw_nearest *tree)
{
    if (tree == NULL) return;
    lw_free(tree->order);
    lw_free(tree->place_of);
    lw_free(tree->at);
    lw_free(tree);
}

/* Does p at that distance come before what stands in `other`? */
static int comes_before(const lw_nearest *tree, int64_t p, double square, const lw_neighbour *other)
{
    if (square != other->square) return square < other->square;
    for (int a = 0; a < tree->dimension; a++) {
        double u = tree->at[p * tree->dimension + a], v = tree->at[other->point * tree->dimension + a];
        if (u != v) return u < v;
    }
    return p < other->point;
}

static void offer(query *q, int64_t p)
{
    double square = 0.0;
    const double *at = q->tree->at + p * q->tree->dimension;
    for (int a = 0; a < q->tree->dimension; a++) square += (at[a] - q->centre[a]) * (at[a] - q->centre[a]);
    if (q->found == q->k && !comes_before(q->tree, p, square, &q->out[q->k - 1])) return;
    int to = q->found < q->k ? q->found++ : q->k - 1;
    while (to > 0 && comes_before(q->tree, p, square, &q->out[to - 1])) {
        q->out[to] = q->out[to - 1];
        to--;
    }
    q->out[to] = (lw_neighbour){p, square};
}

static void search(query *q, int64_t from, int64_t to, int axis)
{
    if (from >= to) return;
    int64_t middle = from + (to - from) / 2;
    double step = q->centre[axis] - q->tree->at[middle * q->tree->dimension + axis];
    int next = axis + 1 == q->tree->dimension ? 0 : axis + 1;
    if (middle != q->self) offer(q, middle);
    if (step < 0.0)
        search(q, from, middle, next);
    else
        search(q, middle + 1, to, next);
    if (q->found == q->k && step * step > q->out[q->k - 1].square) return;
    if (step < 0.0)
        search(q, middle + 1, to, next);
    else
        search(q, from, middle, next);
}

static int find_at(const lw_nearest *tree, int64_t place, int k, lw_neighbour *out)
{
    query q = {tree, place, tree->at + place * tree->dimension, k > LW_NEAREST_MOST ? LW_NEAREST_MOST : k,
               0,    out};
    if (q.k > 0) search(&q, 0, tree->count, 0);
    for (int v = 0; v < q.found; v++) out[v].point = tree->order[out[v].point];
    return q.found;
}

int lw_nearest_find(const lw_nearest *tree, int64_t i, int k, lw_neighbour *out)
{
    return find_at(tree, tree->place_of[i], k, out);
}

#define PARTS 64

typedef struct all_work {
    const lw_nearest *tree;
    int k;
    lw_neighbour *out;
} all_work;

/* In tree order, so that one query finds what the last one brought into the cache. */
static void find_part(void *state, int part)
{
    all_work *work = state;
    const lw_nearest *tree = work->tree;
    for (int64_t p = tree->count * part / PARTS; p < tree->count * (part + 1) / PARTS; p++)
        (void)find_at(tree, p, work->k, work->out + tree->order[p] * work->k);
}

void lw_nearest_find_all(const lw_nearest *tree, int k, lw_team *team, lw_neighbour *out)
{
    all_work work = {tree, k, out};
    lw_team_run(team, PARTS, find_part, &work);
}
