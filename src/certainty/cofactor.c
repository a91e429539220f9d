/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "certainty/cofactor.h"

#include "core/memory.h"
#include "matrix/dense.h"

#include <float.h>
#include <math.h>
#include <stdlib.h>
#include <string.h>

/* A factor of our own is trusted to this reciprocal condition (an upper estimate) of the normal matrix. */
#define LEAST_RCOND (64 * DBL_EPSILON)

/* N = A'A + lambda^2 L'L, upper triangle. */
static lw_status normal_matrix(lw_system *system, double lambda, const lw_watch *watch, lw_sparse **out,
                               lw_error *error)
{
    lw_sparse *gram = NULL, *penalty = NULL;
    *out = NULL;
    lw_status status = lw_system_matrix(system, watch, error);
    if (status == LW_OK) status = lw_sparse_gram(system->matrix, NULL, &gram, error);
    if (status == LW_OK && lambda > 0) {
        status = lw_system_penalty_gram(system, &penalty, error);
        if (status == LW_OK) status = lw_sparse_add(1, gram, lambda * lambda, penalty, out, error);
    } else if (status == LW_OK) {
        *out = gram;
        gram = NULL;
    }
    lw_sparse_free(gram);
    lw_sparse_free(penalty);
    return status;
}

/* A factor of our own; kind stays NONE, without an error, where size, budget or rank do not allow it. */
static lw_status factor_own(lw_cofactor *c, const lw_watch *watch, lw_error *error)
{
    lw_system *system = c->decomposition->system;
    lw_sparse *normal = NULL;
    lw_cholesky_size size = {0};
    int64_t defect = -1;
    lw_error quiet = {0};
    if (c->columns == 0 || c->columns > LW_COFACTOR_MOST || system->conditions > 0 || c->defect > 0)
        return LW_OK;
    lw_status status = lw_system_matrix(system, watch, error);
    if (status != LW_OK) return status;
    if (lw_sparse_gram_fits(system->matrix, watch, "", &quiet) != LW_OK) return LW_OK;
    status = normal_matrix(system, c->lambda, watch, &normal, error);
    if (status == LW_OK) status = lw_cholesky_analyse(normal, watch, &c->own_factor, &size, error);
    if (status == LW_OK &&
        lw_watch_budget(watch, lw_bytes(2, size.bytes), "standard deviations", "", &quiet) == LW_OK) {
        status = lw_cholesky_factorize(c->own_factor, normal, watch, &defect, &quiet);
        double rcond = status == LW_OK ? lw_cholesky_rcond(c->own_factor) : 0;
        if (rcond > LEAST_RCOND) {
            status = lw_cholesky_view(c->own_factor, &c->source.view, error);
            c->kind = LW_COFACTOR_SELECTED;
            c->source.columns = c->columns;
            c->error = 8 * DBL_EPSILON / rcond;
        }
        if (status == LW_UNSOLVABLE)
            status = LW_OK;
        else if (status < 0)
            lw_fail(error, status, "%s", quiet.text);
    }
    if (c->kind == LW_COFACTOR_NONE) {
        lw_cholesky_free(c->own_factor);
        c->own_factor = NULL;
    }
    lw_sparse_free(normal);
    return status;
}

static void count_factor(lw_cofactor *c)
{
    const lw_factor_view *v = &c->source.view;
    c->factor_nonzeros = (double)c->columns * (double)c->columns / 2;
    if (c->kind != LW_COFACTOR_SELECTED) return;
    c->factor_nonzeros = 0;
    for (int64_t s = 0; s < v->supernodes; s++)
        c->factor_nonzeros +=
            (double)(v->first[s + 1] - v->first[s]) * (double)(v->row_start[s + 1] - v->row_start[s]);
}

lw_status lw_cofactor_none(lw_decomposition *decomposition, double lambda, lw_cofactor **out, lw_error *error)
{
    const lw_decomposition_methods *methods = decomposition->methods;
    lw_cofactor *c = *out = LW_NEW(lw_cofactor);
    if (!c) return lw_fail_memory(error, "standard deviations", sizeof *c);
    c->decomposition = decomposition;
    c->lambda = lambda;
    c->columns = decomposition->system->columns;
    c->error = (double)NAN;
    const lw_null_space *null_space = methods->null_space ? methods->null_space(decomposition) : NULL;
    c->defect = null_space ? null_space->defect : 0;
    return LW_OK;
}

lw_status lw_cofactor_new(lw_decomposition *decomposition, double lambda, const lw_watch *watch,
                          lw_cofactor **out, lw_error *error)
{
    const lw_decomposition_methods *methods = decomposition->methods;
    lw_status status = lw_cofactor_none(decomposition, lambda, out, error);
    if (status != LW_OK) return status;
    lw_cofactor *c = *out;
    if (methods->inverse_entries) {
        status = methods->inverse_entries(decomposition, lambda, 0, &c->source, error);
        if (status == LW_OK) {
            c->kind = c->source.dense ? LW_COFACTOR_DENSE : LW_COFACTOR_SELECTED;
            c->error = c->source.error;
        }
    } else {
        status = factor_own(c, watch, error);
    }
    if (status != LW_OK) {
        lw_cofactor_free(c);
        *out = NULL;
        return status;
    }
    count_factor(c);
    if (c->kind != LW_COFACTOR_SELECTED) return LW_OK;
    status = lw_selected_inverse_new(&c->source.view, &c->selected, error);
    if (status == LW_OK) return LW_OK;
    lw_cofactor_free(c);
    *out = NULL;
    return status;
}

void lw_cofactor_free(lw_cofactor *c)
{
    if (!c) return;
    lw_selected_inverse_free(c->selected);
    lw_cholesky_free(c->own_factor);
    lw_free(c->learned);
    lw_free(c);
}

/* Q g = -z of the augmented system: r = -A z, A'r = g. */
static lw_status apply_by_solving(lw_cofactor *c, int64_t k, double *g, lw_error *error)
{
    const lw_decomposition_methods *m = c->decomposition->methods;
    int64_t count = c->columns * k;
    if (c->consumed) return lw_fail(error, LW_BAD_SHAPE, "columns of an overwritten factor were asked for");
    if (c->own_factor) return lw_cholesky_solve(c->own_factor, k, g, error);
    double *z = LW_NEW_ARRAY(double, count);
    if (!z) return lw_fail_memory(error, "columns of the covariance", (size_t)count * sizeof *z);
    lw_status status = m->solve_many(c->decomposition, c->lambda, k, NULL, g, NULL, NULL, z, NULL, error);
    for (int64_t i = 0; i < count && status >= LW_OK; i++) g[i] = -z[i];
    lw_free(z);
    return status;
}

lw_status lw_cofactor_apply(lw_cofactor *c, int64_t k, double *g, lw_error *error)
{
    const lw_inverse_source *s = &c->source;
    int64_t n = c->columns, d = s->correction;
    if (c->kind != LW_COFACTOR_DENSE) return apply_by_solving(c, k, g, error);
    double *copy = LW_NEW_ARRAY(double, n *k), *part = LW_NEW_ARRAY(double, d *k);
    lw_status status =
        copy && part ? LW_OK : lw_fail_memory(error, "columns of the covariance", (size_t)(n * k) * 8);
    if (status == LW_OK) {
        memcpy(copy, g, (size_t)(n * k) * sizeof *g);
        lw_dense_multiply(0, 0, n, k, n, 1, s->dense, n, copy, n, 0, g, n);
        if (d > 0) {
            lw_dense_multiply(1, 0, d, k, n, 1, s->right, n, copy, n, 0, part, d);
            lw_dense_multiply(0, 0, n, k, d, 1, s->left, n, part, d, 1, g, n);
        }
    }
    lw_free(copy);
    lw_free(part);
    return status;
}

lw_status lw_cofactor_columns(lw_cofactor *c, int64_t k, const int64_t *column, double *q, lw_error *error)
{
    memset(q, 0, (size_t)(c->columns * k) * sizeof *q);
    for (int64_t l = 0; l < k; l++) q[column[l] + l * c->columns] = 1;
    return lw_cofactor_apply(c, k, q, error);
}

lw_status lw_cofactor_project(lw_cofactor *c, int64_t k, const double *f, double *r, double *z,
                              lw_error *error)
{
    const lw_decomposition_methods *m = c->decomposition->methods;
    const lw_system *system = c->decomposition->system;
    if (c->consumed && !c->own_factor)
        return lw_fail(error, LW_BAD_SHAPE, "a solution from an overwritten factor was asked for");
    if (!(c->lambda > 0)) return m->solve_many(c->decomposition, 0, k, f, NULL, NULL, r, z, NULL, error);
    int64_t rows = system->rows, tall = rows + system->penalty_rows;
    double *wide = LW_NEW_ZEROS(double, tall *k), *side = LW_NEW_ARRAY(double, r ? tall *k : 0);
    lw_status status =
        wide && side ? LW_OK : lw_fail_memory(error, "the projections", (size_t)(tall * k) * sizeof *wide);
    for (int64_t l = 0; l < k && status == LW_OK; l++)
        memcpy(wide + l * tall, f + l * rows, (size_t)rows * sizeof *f);
    if (status == LW_OK)
        status =
            m->solve_many(c->decomposition, c->lambda, k, wide, NULL, NULL, r ? side : NULL, z, NULL, error);
    for (int64_t l = 0; l < k && r && status >= LW_OK; l++)
        memcpy(r + l * rows, side + l * tall, (size_t)rows * sizeof *r);
    lw_free(wide);
    lw_free(side);
    return status;
}

lw_status lw_cofactor_invert(lw_cofactor *c, bool last, const lw_watch *watch, lw_error *error)
{
    if (c->kind != LW_COFACTOR_SELECTED || c->inverted) return LW_OK;
    bool in_place = last || c->own_factor;
    lw_status status = LW_OK;
    if (last && !c->own_factor)
        status =
            c->decomposition->methods->inverse_entries(c->decomposition, c->lambda, 1, &c->source, error);
    if (status == LW_OK)
        status = lw_selected_inverse_run(c->selected, &c->source.view, in_place, watch, error);
    c->consumed = in_place;
    c->inverted = status == LW_OK;
    return status;
}

bool lw_cofactor_holds(const lw_cofactor *c, int64_t i, int64_t j)
{
    return c->kind == LW_COFACTOR_DENSE || (c->selected && lw_selected_inverse_holds(c->selected, i, j));
}

static int by_place(const void *a, const void *b)
{
    const lw_learned *p = a, *q = b;
    if (p->i != q->i) return p->i < q->i ? -1 : 1;
    return p->j < q->j ? -1 : p->j > q->j;
}

lw_status lw_cofactor_learn(lw_cofactor *c, int64_t count, lw_learned *list, lw_error *error)
{
    double *q = LW_NEW_ARRAY(double, c->columns);
    c->learned = LW_NEW_ARRAY(lw_learned, count);
    lw_status status =
        q && c->learned ? LW_OK : lw_fail_memory(error, "covariances", (size_t)count * sizeof *list);
    if (status == LW_OK) qsort(list, (size_t)count, sizeof *list, by_place);
    for (int64_t k = 0; k < count && status >= LW_OK; k++) {
        if (k == 0 || list[k].i != list[k - 1].i) status = lw_cofactor_columns(c, 1, &list[k].i, q, error);
        list[k].q = q[list[k].j];
    }
    if (status >= LW_OK) {
        memcpy(c->learned, list, (size_t)count * sizeof *list);
        c->learned_count = count;
        status = LW_OK;
    }
    lw_free(q);
    return status;
}

/* A learned entry, which has the corrections in it already; NaN none. */
static double recall(const lw_cofactor *c, int64_t i, int64_t j)
{
    lw_learned key = {.i = i, .j = j}, turned = {.i = j, .j = i};
    if (c->learned_count == 0) return (double)NAN;
    const lw_learned *found = bsearch(&key, c->learned, (size_t)c->learned_count, sizeof key, by_place);
    if (!found) found = bsearch(&turned, c->learned, (size_t)c->learned_count, sizeof key, by_place);
    return found ? found->q : (double)NAN;
}

double lw_cofactor_entry(const lw_cofactor *c, int64_t i, int64_t j)
{
    const lw_inverse_source *s = &c->source;
    double q = (double)NAN;
    if (c->kind == LW_COFACTOR_DENSE)
        q = s->dense[i + j * s->columns];
    else if (c->inverted)
        q = lw_selected_inverse_entry(c->selected, i, j);
    if (isnan(q)) return recall(c, i, j);
    for (int64_t k = 0; k < s->correction; k++)
        q += s->left[i + k * s->columns] * s->right[j + k * s->columns];
    return q;
}
