/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "certainty/selected_inverse.h"

#include "core/memory.h"
#include "matrix/dense.h"

#include <math.h>
#include <string.h>

#define PANEL 48

/* Legend: a supernode s has `width` columns and `below` rows under its diagonal block; ld = width + below. */
typedef struct work {
    double *y;      /* below x width */
    double *z22;    /* below x below, lower triangle */
    int64_t *local; /* below: row number within the supernode that is read */
} work;

static int64_t width_of(const lw_factor_view *v, int64_t s)
{
    return v->first[s + 1] - v->first[s];
}

static int64_t height_of(const lw_factor_view *v, int64_t s)
{
    return v->row_start[s + 1] - v->row_start[s];
}

/* First position in rows[from .. count) whose row is not less than r: galloping, since positions increase. */
static int64_t gallop(const int64_t *rows, int64_t from, int64_t count, int64_t r)
{
    int64_t step = 1, high = from;
    while (high < count && rows[high] < r) {
        from = high + 1;
        high += step;
        step *= 2;
    }
    if (high > count) high = count;
    while (from < high) {
        int64_t middle = from + (high - from) / 2;
        if (rows[middle] < r)
            from = middle + 1;
        else
            high = middle;
    }
    return from;
}

/* Where the rows r[a .. below) stand in supernode t; those of its own columns are found without a search. */
static void locate(const lw_factor_view *v, int64_t t, const int64_t *r, int64_t a, int64_t below,
                   int64_t *local)
{
    const int64_t *rows = v->row + v->row_start[t];
    int64_t count = height_of(v, t), at = width_of(v, t), b = a;
    for (; b < below && r[b] < v->first[t + 1]; b++) local[b] = r[b] - v->first[t];
    for (; b < below; b++) {
        at = gallop(rows, at, count, r[b]);
        local[b] = at;
    }
}

/* Z22 (lower triangle, leading dimension below) from the supernodes that own the rows. */
static void gather(const lw_factor_view *v, const int64_t *supernode, const int64_t *r, int64_t below,
                   work *w)
{
    for (int64_t a = 0; a < below;) {
        int64_t t = supernode[r[a]], ld = height_of(v, t), end = a;
        while (end < below && r[end] < v->first[t + 1]) end++;
        locate(v, t, r, a, below, w->local);
        for (; a < end; a++) {
            const double *from = v->value + v->value_start[t] + (r[a] - v->first[t]) * ld;
            double *to = w->z22 + a * below;
            for (int64_t b = a; b < below; b++) to[b] = from[w->local[b]];
        }
    }
}

/* A supernode of one column: the same formulas with a vector. */
static void invert_column(double *l, int64_t below, work *w)
{
    double inverse = 1.0 / l[0], *z = l + 1, sum = inverse * inverse;
    for (int64_t b = 0; b < below; b++) {
        w->y[b] = z[b] * inverse;
        z[b] = 0;
    }
    for (int64_t a = 0; a < below; a++) {
        const double *column = w->z22 + a * below;
        double ya = w->y[a], dot = column[a] * ya;
        for (int64_t b = a + 1; b < below; b++) {
            z[b] -= column[b] * ya;
            dot += column[b] * w->y[b];
        }
        z[a] -= dot;
    }
    for (int64_t b = 0; b < below; b++) sum -= w->y[b] * z[b];
    l[0] = sum;
}

static lw_status invert_supernode(const lw_factor_view *v, const int64_t *supernode, int64_t s, work *w,
                                  lw_error *error)
{
    int64_t width = width_of(v, s), ld = height_of(v, s), below = ld - width;
    double *l = v->value + v->value_start[s];
    if (below > 0) gather(v, supernode, v->row + v->row_start[s] + width, below, w);
    if (width == 1) {
        invert_column(l, below, w);
        return LW_OK;
    }
    if (below > 0) {
        for (int64_t j = 0; j < width; j++)
            memcpy(w->y + j * below, l + j * ld + width, (size_t)below * sizeof(double));
        lw_dense_right_triangle_solve(below, width, l, ld, 0, w->y, below);
        lw_dense_symmetric_multiply(below, width, -1, w->z22, below, w->y, below, 0, l + width, ld);
    }
    lw_status status = lw_dense_invert_lower(width, l, ld, error);
    if (status != LW_OK) return status;
    for (int64_t j = 0; j < width && below > 0;
         j += PANEL) { /* the lower triangle by panels: half the work */
        int64_t panel = width - j < PANEL ? width - j : PANEL;
        lw_dense_multiply(1, 0, width - j, panel, below, -1, w->y + j * below, below, l + width + j * ld, ld,
                          1, l + j + j * ld, ld);
    }
    for (int64_t j = 1; j < width; j++)
        for (int64_t i = 0; i < j; i++) l[i + j * ld] = l[j + i * ld];
    return LW_OK;
}

/* A supernode's parent owns the first row below its diagonal block; the last one of a tree has none. */
static void plant(lw_selected_inverse *inverse)
{
    const lw_factor_view *v = &inverse->view;
    for (int64_t s = v->supernodes - 1; s >= 0; s--) {
        int64_t width = width_of(v, s);
        bool last = height_of(v, s) == width;
        inverse->tree[s] = last ? s : inverse->tree[inverse->supernode[v->row[v->row_start[s] + width]]];
    }
}

lw_status lw_selected_inverse_new(const lw_factor_view *view, lw_selected_inverse **out, lw_error *error)
{
    const lw_factor_view *v = view;
    lw_selected_inverse *inverse = *out = LW_NEW(lw_selected_inverse);
    if (!inverse) return lw_fail_memory(error, "the selected inverse", sizeof *inverse);
    inverse->view = *view;
    inverse->place = LW_NEW_ARRAY(int64_t, v->columns);
    inverse->supernode = LW_NEW_ARRAY(int64_t, v->columns);
    inverse->tree = LW_NEW_ARRAY(int64_t, v->supernodes);
    if (!inverse->place || !inverse->supernode || !inverse->tree) {
        lw_selected_inverse_free(inverse);
        *out = NULL;
        return lw_fail_memory(error, "the selected inverse", (size_t)v->columns * 16);
    }
    for (int64_t k = 0; k < v->columns; k++) inverse->place[v->permutation[k]] = k;
    for (int64_t s = 0; s < v->supernodes; s++)
        for (int64_t k = v->first[s]; k < v->first[s + 1]; k++) inverse->supernode[k] = s;
    plant(inverse);
    return LW_OK;
}

static lw_status copy_values(lw_selected_inverse *inverse, lw_error *error)
{
    lw_factor_view *v = &inverse->view;
    int64_t last = v->supernodes - 1;
    int64_t count = last < 0 ? 0 : v->value_start[last] + width_of(v, last) * height_of(v, last);
    inverse->own_value = LW_NEW_ARRAY(double, count);
    if (!inverse->own_value)
        return lw_fail_memory(error, "the selected inverse", (size_t)count * sizeof(double));
    memcpy(inverse->own_value, v->value, (size_t)count * sizeof(double));
    v->value = inverse->own_value;
    return LW_OK;
}

static lw_status work_new(const lw_factor_view *v, work *w, lw_error *error)
{
    int64_t tall = 0, panel = 0;
    for (int64_t s = 0; s < v->supernodes; s++) {
        int64_t below = height_of(v, s) - width_of(v, s);
        if (below > tall) tall = below;
        if (below * width_of(v, s) > panel) panel = below * width_of(v, s);
    }
    w->y = LW_NEW_ARRAY(double, panel);
    w->z22 = LW_NEW_ARRAY(double, tall *tall);
    w->local = LW_NEW_ARRAY(int64_t, tall);
    if (w->y && w->z22 && w->local) return LW_OK;
    return lw_fail_memory(error, "the selected inverse", (size_t)(tall * tall + panel) * sizeof(double));
}

lw_status lw_selected_inverse_run(lw_selected_inverse *inverse, const lw_factor_view *view, bool in_place,
                                  const lw_watch *watch, lw_error *error)
{
    work w = {0};
    inverse->view = *view;
    lw_status status = in_place ? LW_OK : copy_values(inverse, error);
    if (status == LW_OK) status = work_new(&inverse->view, &w, error);
    for (int64_t s = view->supernodes - 1; s >= 0 && status == LW_OK; s--) {
        if (s % 1024 == 0) {
            lw_watch_tick(watch, "inverting", (double)(view->supernodes - s), (double)view->supernodes, "");
            if (lw_watch_cancelled(watch))
                status = lw_fail(error, LW_INTERRUPTED, "interrupted while inverting");
        }
        if (status == LW_OK) status = invert_supernode(&inverse->view, inverse->supernode, s, &w, error);
    }
    lw_free(w.y);
    lw_free(w.z22);
    lw_free(w.local);
    return status;
}

void lw_selected_inverse_free(lw_selected_inverse *inverse)
{
    if (!inverse) return;
    lw_free(inverse->place);
    lw_free(inverse->supernode);
    lw_free(inverse->tree);
    lw_free(inverse->own_value);
    lw_free(inverse);
}

/* Offset of an entry in the values; -1 not held, -2 zero between trees. */
static int64_t find(const lw_selected_inverse *inverse, int64_t i, int64_t j)
{
    const lw_factor_view *v = &inverse->view;
    int64_t p = inverse->place[i], q = inverse->place[j];
    if (p < q) {
        int64_t swap = p;
        p = q;
        q = swap;
    }
    int64_t s = inverse->supernode[q], ld = height_of(v, s), at = p - v->first[s];
    if (p >= v->first[s + 1]) {
        const int64_t *rows = v->row + v->row_start[s];
        at = gallop(rows, width_of(v, s), ld, p);
        if (at >= ld || rows[at] != p)
            return inverse->tree[s] == inverse->tree[inverse->supernode[p]] ? -1 : -2;
    }
    return v->value_start[s] + (q - v->first[s]) * ld + at;
}

bool lw_selected_inverse_holds(const lw_selected_inverse *inverse, int64_t i, int64_t j)
{
    return find(inverse, i, j) != -1;
}

double lw_selected_inverse_entry(const lw_selected_inverse *inverse, int64_t i, int64_t j)
{
    int64_t at = find(inverse, i, j);
    return at >= 0 ? inverse->view.value[at] : (at == -2 ? 0 : (double)NAN);
}
